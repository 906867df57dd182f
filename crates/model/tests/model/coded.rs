//! A Rust-coded field equals the compiled field of the same formulas in everything.

use std::sync::Arc;

use crate::common::{Everything, Random, model_of};
use armilla_model::{
    Batch, CodedField, Column, Declaration, DualRates, Model, SparsityPattern, VectorField, test_derivatives,
};
use num_dual::DualNum;

/// A driven pendulum with drag: t, a power, a sine and a quotient.
struct Pendulum {
    stated_pattern: bool,
}

impl DualRates for Pendulum {
    fn n_states(&self) -> usize {
        2
    }

    fn n_parameters(&self) -> usize {
        2
    }

    fn is_forced(&self) -> bool {
        true
    }

    fn pattern(&self) -> Option<SparsityPattern> {
        let sparse = SparsityPattern::try_from_offsets_and_indices(2, 2, vec![0, 1, 3], vec![1, 0, 1]);
        self.stated_pattern.then(|| sparse.expect("a valid pattern"))
    }

    fn rates<D: DualNum<Primitive = f64> + Copy>(&self, t: D, x: &[D], p: &[D], out: &mut [D]) {
        out[0] = x[1];
        out[1] = -x[0].sin() * p[0] - x[1].powi(3) / p[1] + (t * 2.0).cos() * p[1];
    }
}

fn formulas() -> Model {
    model_of(
        &[("angle", 0.3, "speed"), ("speed", 0.1, "-sin(angle)*g - speed^3/drag + cos(2*t)*drag")],
        &[("g", 1.5), ("drag", 0.7)],
        "\"pi\"",
    )
}

#[test]
fn equals_the_compiled_field() {
    let compiled = formulas().field();
    let coded = CodedField::new(Pendulum { stated_pattern: true });
    assert_eq!(coded.pattern(), compiled.pattern());
    assert!(coded.is_forced());
    let columns = [Column::Time, Column::Parameter(1)];
    let (mut a, mut b) = (compiled.evaluator(&columns), coded.evaluator(&columns));
    let mut random = Random(3);
    for len in [1, 5, 70] {
        let (time, states) = (random.vector(len), random.vector(2 * len));
        let per_point: Vec<f64> = random.vector(2 * len).iter().map(|p| p + 2.0).collect();
        for parameters in [&[1.5, 0.7][..], &per_point] {
            let at = Batch { len, time: &time, states: &states, parameters };
            let of_compiled = Everything::of(&mut *a, at, 2, 3);
            let of_coded = Everything::of(&mut *b, at, 2, 3);
            for ((name, found), (_, expected)) in of_compiled.0.iter().zip(&of_coded.0) {
                for (found, expected) in found.iter().zip(expected) {
                    assert!((found - expected).abs() <= 1e-13 * expected.abs().max(1.0), "{name}");
                }
            }
        }
    }
}

#[test]
fn full_pattern_and_model() {
    let of_formulas = formulas();
    let declaration = Declaration {
        title: "Pendulum".to_owned(),
        states: of_formulas.states().to_vec(),
        parameters: of_formulas.parameters().to_vec(),
    };
    let model = Model::coded(declaration, Arc::new(CodedField::new(Pendulum { stated_pattern: false })));
    assert_eq!(model.field().pattern().nnz(), 4);
    assert_eq!(model.at_start(&[1.5, 0.7]), of_formulas.at_start(&[1.5, 0.7]));
    assert!(model.equations().is_empty());
    let tests = test_derivatives(&model, 4);
    assert_eq!(tests.len(), 6);
    for test in tests {
        assert!(test.passed() && test.compared > 10, "{test:?}");
    }
}
