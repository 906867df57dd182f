//! The second seam: what can be followed.

/// Which equation picks the point that a correction is to find.
#[derive(Clone, Copy, Debug)]
pub enum Closing<'a, P, T> {
    /// The component of the step along `tangent` from `from` is `stride`.
    Arclength {
        /// Last accepted point.
        from: &'a P,
        /// Unit tangent there.
        tangent: &'a T,
        /// Length of the step.
        stride: f64,
    },
    /// The parameter has this value.
    Parameter(f64),
    /// The component of the point along `direction`, counted from `from`, is `amount`.
    Component {
        /// Where the component is counted from.
        from: &'a P,
        /// A direction, of unit length.
        direction: &'a T,
        /// The held component.
        amount: f64,
    },
}

/// How a tangent is to point.
#[derive(Clone, Copy, Debug)]
pub enum Orientation<'a, T> {
    /// Along this earlier tangent.
    Along(&'a T),
    /// With the parameter rising (+1) or falling (-1).
    Parameter(f64),
}

/// A point found by a correction.
#[derive(Clone, Debug)]
pub struct Corrected<P> {
    /// The point.
    pub point: P,
    /// |second correction| / |first|: how nonlinear the step was.
    pub contraction: f64,
    /// Iterations used.
    pub iterations: usize,
}

/// Why a correction found nothing.
#[derive(Clone, Debug, PartialEq)]
pub enum Failure<E> {
    /// The iteration does not converge: a shorter stride may help.
    NotConverged,
    /// The found point is not the neighbour on this branch: a shorter stride may help.
    Jumped,
    /// The problem cannot be evaluated there: a shorter stride may get closer, no more.
    Outside(E),
}

/// A smooth number watched along a branch; an event lies where it changes sign.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Watched {
    /// Its value at the point.
    pub value: f64,
    /// Its derivative along the branch by distance, where the problem knows it.
    pub slope: Option<f64>,
}

/// Everything watched at a point. The i-th watched value means the same thing at every point.
#[derive(Clone, Debug, PartialEq)]
pub struct Watch {
    /// The watched values, in the order of the problem's own list.
    pub values: Vec<Watched>,
    /// Number of unstable multipliers or eigenvalues.
    pub unstable_count: usize,
}

/// Something that has branches of solutions in one parameter. `follow` treats points and tangents as opaque.
pub trait Problem {
    /// A solution.
    type Point: Clone;
    /// A direction at a solution.
    type Tangent: Clone;
    /// Why the problem cannot be evaluated somewhere.
    type Error;

    /// Prediction: `point + stride * tangent`.
    fn advance(&self, point: &Self::Point, tangent: &Self::Tangent, stride: f64) -> Self::Point;
    /// Solves for a point near `prediction` on the closing.
    ///
    /// # Errors
    /// [`Failure`] as it says.
    fn correct(
        &mut self,
        prediction: &Self::Point,
        closing: Closing<'_, Self::Point, Self::Tangent>,
    ) -> Result<Corrected<Self::Point>, Failure<Self::Error>>;
    /// Unit tangent at a solution.
    ///
    /// # Errors
    /// [`Failure`] where the tangent is not defined.
    fn tangent(
        &mut self,
        point: &Self::Point,
        orientation: Orientation<'_, Self::Tangent>,
    ) -> Result<Self::Tangent, Failure<Self::Error>>;
    /// Inner product of tangents.
    fn inner(&self, a: &Self::Tangent, b: &Self::Tangent) -> f64;
    /// Distance of two points of one branch in the same metric.
    fn distance(&self, a: &Self::Point, b: &Self::Point) -> f64;
    /// `point` told as `first` is told where a solution has several descriptions, if it is within a distance of it then.
    fn met_again(&self, point: &Self::Point, first: &Self::Point, within: f64) -> Option<Self::Point> {
        (self.distance(point, first) <= within).then(|| point.clone())
    }
    /// Value of the parameter.
    fn parameter(&self, point: &Self::Point) -> f64;
    /// Watched values and the unstable count, the tangent given.
    ///
    /// # Errors
    /// [`Failure`] where they cannot be computed.
    fn watch(&mut self, point: &Self::Point, tangent: &Self::Tangent) -> Result<Watch, Failure<Self::Error>>;
    /// The same point and tangents on a mesh that suits the point, or none where the present one does.
    #[allow(clippy::type_complexity)]
    fn renew(&mut self, point: &Self::Point, tangents: &[&Self::Tangent]) -> Option<(Self::Point, Vec<Self::Tangent>)>;
}
