//! Random numbers that are the same in every run.

/// The generator of Vigna's splitmix64 (Steele, Lea & Flood 2014, OOPSLA, 453): any seed will do, also neighbouring ones.
#[derive(Clone, Debug)]
pub struct Random(u64);

impl Random {
    /// A stream of its own for each seed.
    pub fn new(seed: u64) -> Self {
        Self(seed)
    }

    fn bits(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        z ^ (z >> 31)
    }

    /// A number between two others.
    pub fn between(&mut self, low: f64, high: f64) -> f64 {
        let share = (self.bits() >> 11) as f64 / (1u64 << 53) as f64;
        low + share * (high - low)
    }

    /// A power of ten with an exponent between two numbers.
    pub fn decade(&mut self, low: f64, high: f64) -> f64 {
        10f64.powf(self.between(low, high))
    }

    /// A number with either sign and a modulus between two others.
    pub fn either_sign(&mut self, low: f64, high: f64) -> f64 {
        let modulus = self.between(low, high);
        if self.coin() { modulus } else { -modulus }
    }

    /// A whole number below `count`.
    pub fn below(&mut self, count: usize) -> usize {
        (self.bits() % count as u64) as usize
    }

    /// Heads or tails.
    pub fn coin(&mut self) -> bool {
        self.below(2) == 0
    }

    /// One of several.
    pub fn one_of<T: Copy>(&mut self, choices: &[T]) -> T {
        choices[self.below(choices.len())]
    }
}
