//! Random systems and settings.

use std::sync::Arc;

use armilla_model::VectorField;
use armilla_stability::{CyclePoint, CycleProblem, CycleSettings, CycleSpec};
use armilla_tests::{Beneath, Planted, Random, Sheet};

/// Share of the size by which guesses are off.
const OFF: f64 = 2e-3;

/// Width of the range a branch is followed over, in the parameter beneath.
pub const WIDTH: f64 = 0.4;

/// A system with everything that was drawn for it.
pub struct Draw {
    /// What tells the case in a message.
    pub name: String,
    pub planted: Planted,
    pub accuracy: f64,
    pub field: Arc<dyn VectorField>,
    pub random: Random,
}

impl Draw {
    /// The case of a seed on one of the systems.
    pub fn new(seed: u64, beneath: impl FnOnce(&mut Random) -> Beneath) -> Self {
        let mut random = Random::new(seed);
        let beneath = beneath(&mut random);
        let planted = Planted::random(&mut random, beneath);
        let accuracy = random.decade(-11.0, -6.0);
        let from_text = random.coin();
        let field = if from_text { planted.model().field() } else { planted.coded() };
        let maker = if from_text { "text" } else { "coded" };
        let name = format!("seed {seed} ({beneath:.3?}, {} states, {maker}, accuracy {accuracy:.1e})", planted.n());
        Self { name, planted, accuracy, field, random }
    }

    /// The cycle of a sheet at a value of the followed parameter, corrected from a disturbed exact one.
    pub fn start(&mut self, sheet: Sheet, value: f64) -> (CycleProblem, CyclePoint) {
        let settings = CycleSettings::new(self.accuracy);
        let guess = self.planted.guess(&mut self.random, (sheet, value), settings.degree, OFF);
        let spec = CycleSpec {
            field: self.field.clone(),
            parameters: self.planted.parameters(value),
            free: 0,
            typical: self.planted.orbit(sheet, value, 0.0).0.into_iter().map(f64::abs).collect(),
            parameter_scale: WIDTH * self.planted.unit.abs(),
        };
        CycleProblem::start(spec, settings, &guess, value).unwrap_or_else(|fault| panic!("{}: {fault}", self.name))
    }
}

pub fn circle(random: &mut Random) -> Beneath {
    Beneath::Circle(random.between(-0.5, 1.0))
}

pub fn two_circles(_: &mut Random) -> Beneath {
    Beneath::TwoCircles
}

pub fn band(random: &mut Random) -> Beneath {
    Beneath::Band(random.between(0.1, 1.0), random.between(0.5, 3.0))
}

pub fn turning(random: &mut Random) -> Beneath {
    Beneath::Turning(random.either_sign(0.5, 1.5), random.between(-0.8, 0.8))
}
