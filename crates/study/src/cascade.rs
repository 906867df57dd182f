//! The doubling sequence told from the branches.
//!
//! Thresholds p_k of successive doublings approach their limit geometrically, `(p_k - p_(k-1)) / (p_(k+1) - p_k)`
//! tending to the universal ratio delta (Feigenbaum 1978, J. Stat. Phys. 19:25; value: Briggs 1991, Math. Comp.
//! 57:435, from memory). With the ratio taken as universal, `p_k + (p_k - p_(k-1)) / (delta - 1)` estimates the limit;
//! how far two successive estimates differ bounds the error of the better one, since they improve geometrically too.

use armilla_record::{Branch, CascadeRow, Event, EventKind};

/// The universal ratio of quadratic maxima.
pub(crate) const UNIVERSAL_RATIO: f64 = 4.669_201_609_102_99;

/// The longest line of first doublings that starts at a branch without a parent: `a/doubling1`, `a.doubling1/doubling1`,
/// and so on, with the extrapolated limit as the last row. Empty where fewer than three doublings follow each other.
pub(crate) fn cascade(branches: &[Branch]) -> Vec<CascadeRow> {
    let Some(line) = longest_line(branches).filter(|line| line.len() >= 3) else { return Vec::new() };
    let value = |k: usize| line[k].value;
    let mut rows: Vec<CascadeRow> = line
        .iter()
        .enumerate()
        .map(|(k, event)| CascadeRow {
            event: event.name.clone(),
            turns: Some(event.turns),
            value: event.value,
            error: event.error,
            ratio: (k >= 2).then(|| (value(k - 1) - value(k - 2)) / (value(k) - value(k - 1))),
        })
        .collect();
    let limit = |k: usize| value(k) + (value(k) - value(k - 1)) / (UNIVERSAL_RATIO - 1.0);
    let last = line.len() - 1;
    let roundoff = [last, last - 1].iter().filter_map(|k| line[*k].error).sum::<f64>();
    let error = (limit(last) - limit(last - 1)).abs() + 2.0 * roundoff;
    rows.push(CascadeRow {
        event: "accumulation".into(),
        turns: None,
        value: limit(last),
        error: Some(error),
        ratio: None,
    });
    rows
}

/// The chain of events with the most members.
fn longest_line(branches: &[Branch]) -> Option<Vec<&Event>> {
    let roots = branches.iter().filter(|branch| branch.born_at.is_none());
    let doublings = roots.flat_map(doublings_of);
    doublings.map(|event| line_from(branches, event)).max_by_key(Vec::len)
}

fn doublings_of(branch: &Branch) -> impl Iterator<Item = &Event> {
    branch.events.iter().filter(|event| event.kind == EventKind::Doubling)
}

/// An event and, on each branch born in turn, the doubling nearest to that branch's birth.
fn line_from<'a>(branches: &'a [Branch], first: &'a Event) -> Vec<&'a Event> {
    let mut line = vec![first];
    while let Some(child) = branches.iter().find(|branch| branch.born_at.as_ref() == Some(&line[line.len() - 1].name)) {
        match doublings_of(child).min_by(|a, b| a.distance.total_cmp(&b.distance)) {
            Some(next) => line.push(next),
            None => break,
        }
    }
    line
}

#[cfg(test)]
mod tests {
    /// Source: superstable-to-bifurcation thresholds of the logistic map r x (1 - x), r_1..r_6 and the limit (May 1976,
    /// Nature 261:459, and standard tables, from memory).
    #[test]
    fn the_logistic_map_s_limit_is_covered() {
        let r = [3.0, 3.449_489_742_783, 3.544_090_359_55, 3.564_407_266_10, 3.568_759_419_54, 3.569_691_609_80];
        let exact = 3.569_945_671_870_9;
        let limit = |k: usize| r[k] + (r[k] - r[k - 1]) / (super::UNIVERSAL_RATIO - 1.0);
        for k in 2..r.len() {
            let error = (limit(k) - limit(k - 1)).abs();
            assert!((limit(k) - exact).abs() < error + 2e-11, "{k}: {} {error}", limit(k));
        }
    }
}
