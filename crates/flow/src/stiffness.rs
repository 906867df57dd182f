//! Which of the two methods is cheaper just now.
//!
//! A power iteration with the exact Jacobian, one vector carried from step to step, follows the dominant
//! eigenvalue lambda. Where h |lambda| sits at the border of stability of the explicit method and lambda damps,
//! stability limits the steps and the implicit method takes over; where the implicit steps are so short
//! that the explicit method would take them too, that one does. Cost: two sparse products a look.

use crate::integrator::Method;
use crate::rates::Rates;

/// Accepted explicit steps between two looks at the Jacobian.
pub(crate) const CHECK_EVERY: usize = 5;

/// Decides between the methods from h times the size of the dominant eigenvalue.
#[derive(Clone)]
pub(crate) struct Stiffness {
    /// Power iteration vector.
    vector: Vec<f64>,
    product: Vec<f64>,
    /// h times the size of the dominant eigenvalue; negative where the vector shrinks.
    last: f64,
    /// Looks in a row that speak for the other method.
    streak: usize,
}

impl Stiffness {
    /// The explicit method is stable up to about 6 on the negative real axis and sits between 4 and 6 when
    /// stability is what limits it; at the tolerances used here accuracy limits it to less than 2.
    const STIFF_ABOVE: f64 = 3.5;
    /// Below this the explicit method would be limited by accuracy.
    const EASY_BELOW: f64 = 0.5;
    /// A choice needs this many looks in a row, so that a short stretch does not switch back and forth.
    const STIFF_LOOKS: usize = 4;
    const EASY_LOOKS: usize = 20;

    pub(crate) fn new(n: usize) -> Self {
        // Any vector with all directions in it will do.
        let vector = (0..n).map(|i| 1.0 / (1.0 + i as f64).sqrt()).collect();
        Self { vector, product: vec![0.0; n], last: 0.0, streak: 0 }
    }

    /// Two power iterations with the Jacobian last evaluated.
    pub(crate) fn measure(&mut self, rates: &Rates<'_>, step: f64) {
        for _ in 0..2 {
            rates.product(&self.vector, &mut self.product);
            let along: f64 = self.product.iter().zip(&self.vector).map(|(a, b)| a * b).sum();
            let size = |v: &[f64]| v.iter().map(|x| x * x).sum::<f64>().sqrt();
            let (before, after) = (size(&self.vector), size(&self.product));
            if after == 0.0 || !after.is_finite() {
                self.last = 0.0;
                return;
            }
            self.last = step.abs() * after / before * along.signum();
            self.vector.iter_mut().zip(&self.product).for_each(|(v, p)| *v = p / after);
        }
    }

    pub(crate) fn choice(&mut self, method: Method) -> Method {
        let (other, speaks, enough) = match method {
            Method::Explicit => (Method::Implicit, self.last < -Self::STIFF_ABOVE, Self::STIFF_LOOKS),
            Method::Implicit => (Method::Explicit, self.last.abs() < Self::EASY_BELOW, Self::EASY_LOOKS),
        };
        self.streak = if speaks { self.streak + 1 } else { 0 };
        if self.streak < enough {
            return method;
        }
        self.streak = 0;
        other
    }
}
