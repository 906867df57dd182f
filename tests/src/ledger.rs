//! True errors against reported ones, over many cases.

use std::collections::BTreeMap;

/// Ratios of true to reported error, by what is reported.
#[derive(Clone, Debug, Default)]
pub struct Ratios {
    kinds: BTreeMap<String, Vec<(f64, String)>>,
}

impl Ratios {
    /// Adds one number of a case.
    pub fn add(&mut self, kind: &str, case: &str, (error, reported): (f64, f64)) {
        // Nothing reported and nothing wrong is as it should be; not-a-number counts as wrong.
        let ratio = if error == 0.0 { 0.0 } else { error / reported };
        let ratio = if ratio.is_nan() { f64::INFINITY } else { ratio };
        self.kinds.entry(kind.to_owned()).or_default().push((ratio, format!("{case}: {error:.2e} of {reported:.2e}")));
    }

    /// Adds all of another collection.
    pub fn extend(&mut self, other: Self) {
        for (kind, ratios) in other.kinds {
            self.kinds.entry(kind).or_default().extend(ratios);
        }
    }

    /// How many numbers there are.
    pub fn count(&self) -> usize {
        self.kinds.values().map(Vec::len).sum()
    }

    /// Prints number, median and worst of each kind, and checks that no true error is larger than the reported one.
    ///
    /// # Panics
    /// Where one is.
    pub fn check(&mut self) {
        let mut outside = Vec::new();
        for (kind, ratios) in &mut self.kinds {
            ratios.sort_by(|a, b| a.0.total_cmp(&b.0));
            let (middle, worst) = (&ratios[ratios.len() / 2], &ratios[ratios.len() - 1]);
            eprintln!(
                "{kind}: {} numbers, true over reported: median {:.1e}, worst {:.2} ({})",
                ratios.len(),
                middle.0,
                worst.0,
                worst.1
            );
            let wrong = ratios.iter().filter(|(ratio, _)| !(*ratio <= 1.0));
            outside.extend(wrong.map(|(ratio, case)| format!("{kind} {ratio:.2} in {case}")));
        }
        assert!(outside.is_empty(), "{} of {} outside:\n{}", outside.len(), self.count(), outside.join("\n"));
    }
}
