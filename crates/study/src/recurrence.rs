//! The period of sampled motion: when it comes back.
//!
//! The mean square distance between the motion and itself a lag later is small at a period and its multiples alone, however
//! the motion turns in between (close returns; Lathrop & Kostelich 1989, Phys. Rev. A 40:4028, for cycles in measured
//! series). Its lowest places are refined by folding: the samples of all periods on one, and the curve through them that
//! cross-validation likes best (`smoothing.rs`); at a wrong period neighbours in phase come from different places. The
//! shortest period that explains the samples as well as any is taken. Samples of a single period overlap at no lag: there
//! the gap between the last and the first is closed along the motion.

use armilla_record::Samples;

use crate::smoothing::Folded;

/// Most points of the grid on which lags are compared; the cost is its square.
const GRID: usize = 2000;
/// Share of the largest distance that the motion must have gone away before a return counts.
const AWAY: f64 = 0.25;
/// Mean square distance, 1 for states that have nothing to do with each other, up to which a lag is looked at: noise of 5 %
/// of the range of a sine gives 0.02.
const RETURNS: f64 = 0.15;
/// Share of the samples that must have a partner a lag later.
const OVERLAP: f64 = 0.01;
/// Lags refined.
const LAGS: usize = 6;
/// A longer period must explain the samples better than chance does by so many standard deviations of the variance of noise,
/// `sqrt(2/M)` for M numbers.
const SURE: f64 = 3.0;
/// Misfit, as a share of the variance, that is none: 0.3 % of the standard deviations.
const ALIKE: f64 = 1e-5;
/// Ratio below which two periods are two guesses of one.
const MULTIPLE: f64 = 1.4;
/// Golden sections of the last stretch of periods: to 0.3 % of it.
const SECTIONS: usize = 12;
/// Share of a period by which all periods together may be off before the fold is refined around a given period.
const SMEAR: f64 = 0.25;
/// Largest gap of the last sample from the first, along the motion, as a share of the time sampled.
const LONGEST_GAP: f64 = 0.3;
/// Distance from closing, across the motion, in standard deviations.
const CLOSES: f64 = 0.3;

/// Estimates the period of samples; none where they do not come back.
pub(crate) fn estimate(samples: &Samples, n: usize) -> Option<f64> {
    let span = span(samples);
    let mut candidates: Vec<f64> =
        lags(samples, n).into_iter().map(|(lag, step)| best_near(samples, n, (lag - step, lag + step))).collect();
    candidates.extend(closing(samples, n).filter(|period| *period > 0.5 * span));
    best_of(samples, n, &candidates)
}

/// The shortest of some periods that explains the samples as well as any.
pub(crate) fn best_of(samples: &Samples, n: usize, candidates: &[f64]) -> Option<f64> {
    let scored: Vec<(f64, f64)> =
        candidates.iter().map(|period| (*period, fold(samples, n, *period).smooth(1.0).score)).collect();
    let least = scored.iter().map(|(_, score)| *score).fold(f64::INFINITY, f64::min);
    let chance = 1.0 + SURE * (2.0 / samples.states.len() as f64).sqrt();
    let good = || scored.iter().filter(|(_, score)| *score <= chance * least + ALIKE);
    let shortest = good().map(|(period, _)| *period).min_by(f64::total_cmp)?;
    // Guesses of one period, as from a single turn with noise, are no multiples of each other: the best of them.
    let alike = good().filter(|(period, _)| *period < MULTIPLE * shortest);
    alike.min_by(|a, b| a.1.total_cmp(&b.1)).map(|(period, _)| *period)
}

/// A given period, made better where the samples tell more than one of it.
pub(crate) fn refine(samples: &Samples, n: usize, period: f64) -> f64 {
    let turns = span(samples) / period;
    if turns < 1.2 {
        return period;
    }
    let width = SMEAR * period / turns;
    best_near(samples, n, (period - width, period + width))
}

fn span(samples: &Samples) -> f64 {
    samples.times[samples.times.len() - 1] - samples.times[0]
}

/// The samples on one period, phase 0 at time 0.
pub(crate) fn fold(samples: &Samples, n: usize, period: f64) -> Folded {
    /// Share of the mean distance of samples in phase within which two of different turns are taken together.
    const TOGETHER: f64 = 0.02;
    /// Distance in phase within which two of one turn are.
    const SAME: f64 = 1e-9;
    let phase = |time: f64| {
        let turns = time / period;
        // Rounding may give 1, which is 0.
        let phase = turns - turns.floor();
        if phase < 1.0 { phase } else { 0.0 }
    };
    let mut order: Vec<(f64, usize)> = samples.times.iter().enumerate().map(|(k, time)| (phase(*time), k)).collect();
    order.sort_by(|a, b| a.0.total_cmp(&b.0));
    let turns = span(samples) / period;
    let per_turn = samples.times.len() as f64 / turns.max(1.0);
    let apart = if turns > 1.2 { TOGETHER * turns / samples.times.len() as f64 } else { SAME };
    let mut folded =
        Folded { phases: Vec::new(), weights: Vec::new(), states: Vec::new(), scatter: vec![0.0; n], per_turn, n };
    let mut first = f64::NEG_INFINITY;
    for (phase, k) in order {
        let state = &samples.states[k * n..(k + 1) * n];
        if phase - first < apart {
            let last = folded.phases.len() - 1;
            let weight = folded.weights[last] + 1.0;
            folded.phases[last] += (phase - folded.phases[last]) / weight;
            let means = folded.states[last * n..].iter_mut();
            for ((mean, x), scatter) in means.zip(state).zip(&mut folded.scatter) {
                // Running mean and sum of squares (Welford 1962, Technometrics 4:419).
                let before = x - *mean;
                *mean += before / weight;
                *scatter += before * (x - *mean);
            }
            folded.weights[last] = weight;
        } else {
            first = phase;
            folded.phases.push(phase);
            folded.weights.push(1.0);
            folded.states.extend_from_slice(state);
        }
    }
    // The last may lie next to the first, a period on.
    let last = folded.phases.len() - 1;
    if last > 0 && folded.phases[0] + 1.0 - folded.phases[last] < apart {
        folded.phases.truncate(last);
        folded.weights.truncate(last);
        folded.states.truncate(last * n);
    }
    folded
}

/// The period in a stretch at which the folded samples lie best on one curve. With few turns the score of the curve is a wide
/// valley; with many it is a narrow one, but neighbours in phase are nearest to each other there (Lafler & Kinman 1965,
/// Astrophys. J. Suppl. 11:216), which is quick to compute.
fn best_near(samples: &Samples, n: usize, (low, high): (f64, f64)) -> f64 {
    /// Periods looked at by neighbours in phase, and by the curve.
    const LOOKS: (usize, usize) = (61, 13);
    let scales: Vec<f64> =
        deviations(samples, n).iter().map(|size| if *size > 0.0 { 1.0 / size } else { 0.0 }).collect();
    let evenly = |count: usize| (0..count).map(move |k| low + (high - low) * k as f64 / (count - 1) as f64);
    let score = |period: f64| fold(samples, n, period).smooth(1.0).score;
    let by_neighbours = lowest_of(evenly(LOOKS.0), |period| apart_in_phase(samples, &scales, period)).unwrap_or(low);
    let best = lowest_of(evenly(LOOKS.1).chain([by_neighbours]), score).unwrap_or(by_neighbours);
    // At a wrong period cross-validation smooths too much: once more from a better one.
    let step = (high - low) / (LOOKS.1 - 1) as f64;
    let first = best_in(samples, n, (best, step));
    best_in(samples, n, (first, step / f64::from(CLOSER)))
}

/// The number at which a function is lowest.
fn lowest_of(numbers: impl Iterator<Item = f64>, score: impl Fn(f64) -> f64) -> Option<f64> {
    let scored = numbers.map(|number| (number, score(number)));
    scored.min_by(|a, b| a.1.total_cmp(&b.1)).map(|(number, _)| number)
}

/// Periods looked at on either side of a period.
const CLOSER: i32 = 6;

/// The period within `step` of a middle at which the curve with the cutoffs liked there lies best.
fn best_in(samples: &Samples, n: usize, (middle, step): (f64, f64)) -> f64 {
    let cutoffs = fold(samples, n, middle).smooth(1.0).cutoffs;
    let score = |period: f64| fold(samples, n, period).smooth_at(&cutoffs).score;
    let near = (-CLOSER..=CLOSER).map(|k| middle + step * f64::from(k) / f64::from(CLOSER));
    let best = lowest_of(near, &score).unwrap_or(middle);
    let closer = step / f64::from(CLOSER);
    let better = lowest(score, (best - closer, best + closer));
    if score(better) < score(best) { better } else { best }
}

/// Sum of squared distances of neighbours in phase, in units of `scales`.
fn apart_in_phase(samples: &Samples, scales: &[f64], period: f64) -> f64 {
    let n = scales.len();
    let mut order: Vec<(f64, usize)> = samples.times.iter().map(|t| (t / period).fract()).zip(0..).collect();
    order.sort_by(|a, b| a.0.total_cmp(&b.0));
    let state = |k: usize| &samples.states[k * n..(k + 1) * n];
    let apart = |a: usize, b: usize| {
        let squares = state(a).iter().zip(state(b)).zip(scales).map(|((x, y), scale)| ((x - y) * scale).powi(2));
        squares.sum::<f64>()
    };
    let round = apart(order[order.len() - 1].1, order[0].1);
    order.windows(2).map(|pair| apart(pair[0].1, pair[1].1)).sum::<f64>() + round
}

/// Where a function is lowest in a stretch, by golden section (Kiefer 1953, Proc. Amer. Math. Soc. 4:502).
fn lowest(score: impl Fn(f64) -> f64, (mut low, mut high): (f64, f64)) -> f64 {
    const GOLDEN: f64 = 0.618_033_988_749_894_8;
    let inside = |share: f64, low: f64, high: f64| low + share * (high - low);
    let (mut a, mut b) = (inside(1.0 - GOLDEN, low, high), inside(GOLDEN, low, high));
    let (mut at_a, mut at_b) = (score(a), score(b));
    for _ in 0..SECTIONS {
        if at_a < at_b {
            (high, b, at_b) = (b, a, at_a);
            a = inside(1.0 - GOLDEN, low, high);
            at_a = score(a);
        } else {
            (low, a, at_a) = (a, b, at_b);
            b = inside(GOLDEN, low, high);
            at_b = score(b);
        }
    }
    0.5 * (low + high)
}

/// Standard deviation of each state.
fn deviations(samples: &Samples, n: usize) -> Vec<f64> {
    let count = samples.times.len() as f64;
    (0..n)
        .map(|a| {
            let values = || samples.states.iter().skip(a).step_by(n);
            let mean = values().sum::<f64>() / count;
            (values().map(|x| (x - mean).powi(2)).sum::<f64>() / count).sqrt()
        })
        .collect()
}

/// Lags at which the motion comes back, the best first in order of length, with half the stretch each is known to.
fn lags(samples: &Samples, n: usize) -> Vec<(f64, f64)> {
    let count = (2 * samples.times.len()).min(GRID);
    let step = span(samples) / (count - 1) as f64;
    let (grid, moving) = gridded(samples, n, count);
    let most = ((1.0 - OVERLAP) * count as f64) as usize;
    let distance = |lag: usize| {
        let pairs = grid[..(count - lag) * moving].iter().zip(&grid[lag * moving..]);
        pairs.map(|(a, b)| (a - b).powi(2)).sum::<f64>() / (2 * moving.max(1) * (count - lag)) as f64
    };
    let distances: Vec<f64> = (0..=most).map(distance).collect();
    let largest = distances.iter().copied().fold(0.0, f64::max);
    let Some(away) = distances.iter().position(|d| *d > AWAY * largest) else { return Vec::new() };
    let mut found: Vec<(f64, f64)> = (away.max(1)..most)
        .filter(|&k| distances[k] <= distances[k - 1] && distances[k] < distances[k + 1] && distances[k] < RETURNS)
        .map(|k| (k as f64 * step, distances[k]))
        .collect();
    found.sort_by(|a, b| a.1.total_cmp(&b.1));
    // The shortest of those near the best, and the best themselves where they are not among them.
    let least = found.first().map_or(0.0, |(_, d)| *d);
    let mut kept: Vec<(f64, f64)> = found.iter().copied().filter(|(_, d)| *d < 10.0 * least + ALIKE.sqrt()).collect();
    kept.sort_by(|a, b| a.0.total_cmp(&b.0));
    kept.truncate(LAGS);
    let (best, shortest): (Vec<_>, _) = (found.into_iter().take(LAGS).collect(), kept.clone());
    kept.extend(best.into_iter().filter(|lag| !shortest.contains(lag)));
    kept.into_iter().map(|(lag, _)| (lag, 1.5 * step)).collect()
}

/// The states that move, in standard deviations, on an even grid of times; and how many they are.
fn gridded(samples: &Samples, n: usize, count: usize) -> (Vec<f64>, usize) {
    let deviations = deviations(samples, n);
    let moving: Vec<usize> = (0..n).filter(|a| deviations[*a] > 0.0).collect();
    let (start, step) = (samples.times[0], span(samples) / (count - 1) as f64);
    let mut grid = Vec::with_capacity(count * moving.len());
    for k in 0..count {
        let time = start + k as f64 * step;
        let right = samples.times.partition_point(|t| *t <= time).clamp(1, samples.times.len() - 1);
        let share = (time - samples.times[right - 1]) / (samples.times[right] - samples.times[right - 1]);
        for &a in &moving {
            let (x, y) = (samples.states[(right - 1) * n + a], samples.states[right * n + a]);
            grid.push((x + share * (y - x)) / deviations[a]);
        }
    }
    (grid, moving.len())
}

/// The period of samples of a single one: the time sampled, and what the motion needs from the last sample to the first.
fn closing(samples: &Samples, n: usize) -> Option<f64> {
    /// Samples at each end that tell the speed there: fewer follow a fast motion, more do with noise.
    const FEWEST: usize = 4;
    /// Share of all samples that they are at most.
    const SHARE: usize = 24;
    let count = samples.times.len();
    let deviations = deviations(samples, n);
    let most = (count / SHARE).max(FEWEST);
    let ends = std::iter::successors(Some(FEWEST), |ends| Some(2 * ends)).take_while(|ends| *ends <= most);
    let gaps = ends.map(|ends| end_gap(samples, &deviations, ends));
    let (delay, gap) = gaps.min_by(|a, b| a.1.total_cmp(&b.1))?;
    (gap <= CLOSES && delay.abs() <= LONGEST_GAP * span(samples)).then(|| span(samples) + delay)
}

/// Time that the motion needs from the last sample to the first, and by how much it then misses, in standard deviations of
/// the states that move; speeds from so many samples at each end.
fn end_gap(samples: &Samples, deviations: &[f64], ends: usize) -> (f64, f64) {
    let (n, count) = (deviations.len(), samples.times.len());
    let slope = |from: usize, a: usize| {
        let range = from..from + ends;
        let middle = range.clone().map(|k| samples.times[k]).sum::<f64>() / ends as f64;
        let (top, bottom) = range.fold((0.0, 0.0), |(top, bottom), k| {
            let t = samples.times[k] - middle;
            (top + t * samples.states[k * n + a], bottom + t * t)
        });
        top / bottom
    };
    let rows: Vec<(f64, f64)> = (0..n)
        .filter(|a| deviations[*a] > 0.0)
        .map(|a| {
            let rate = 0.5 * (slope(0, a) + slope(count - ends, a)) / deviations[a];
            let miss = (samples.states[a] - samples.states[(count - 1) * n + a]) / deviations[a];
            (rate, miss)
        })
        .collect();
    let along: f64 = rows.iter().map(|(rate, miss)| rate * miss).sum();
    let speed: f64 = rows.iter().map(|(rate, _)| rate * rate).sum();
    let delay = if speed > 0.0 { along / speed } else { 0.0 };
    let gap: f64 = rows.iter().map(|(rate, miss)| (miss - delay * rate).powi(2)).sum();
    (delay, (gap / rows.len().max(1) as f64).sqrt())
}

#[cfg(test)]
mod tests {
    use std::f64::consts::TAU;

    use super::*;

    fn wave(period: f64, (from, to): (f64, f64), count: usize, noise: f64) -> Samples {
        let times: Vec<f64> = (0..count).map(|k| from + (to - from) * k as f64 / (count - 1) as f64).collect();
        let roll = |k: usize, j: usize| ((k * 2 + j) as f64 * 0.754_877_666_246_692_8).fract() - 0.5;
        let state = |(k, t): (usize, &f64)| {
            let s = TAU * t / period;
            // Three turns before it closes.
            [(3.0 * s).cos() + 0.3 * s.sin() + noise * roll(k, 0), (3.0 * s).sin() + 0.2 * s.cos() + noise * roll(k, 1)]
        };
        let states = times.iter().enumerate().flat_map(state).collect();
        Samples { times, states, ignored: Vec::new() }
    }

    /// Exact: the period planted, of a motion that nearly comes back after each third of it.
    #[test]
    fn planted_periods_return() {
        for (range, count, noise, within) in [
            ((0.0, 50.0), 900, 0.0, 1e-4),
            ((0.0, 50.0), 900, 0.2, 2e-3),
            ((3.0, 16.0), 200, 0.0, 1e-3),
            // A single period, closed, short of the last sample, and with a bit more.
            ((0.0, 7.0), 150, 0.0, 2e-3),
            ((0.0, 6.9), 150, 0.0, 5e-3),
            ((0.0, 7.3), 150, 0.0, 5e-3),
        ] {
            let samples = wave(7.0, range, count, noise);
            let period = estimate(&samples, 2).unwrap_or_else(|| panic!("{range:?} {noise}"));
            assert!((period / 7.0 - 1.0).abs() < within, "{range:?} {noise}: {period}");
        }
    }

    #[test]
    fn what_does_not_come_back_has_no_period() {
        let times: Vec<f64> = (0..100).map(f64::from).collect();
        let states = times.iter().flat_map(|t| [t.sqrt(), (0.01 * t).exp()]).collect();
        assert_eq!(estimate(&Samples { times, states, ignored: Vec::new() }, 2), None);
    }

    /// By hand: four samples a turn over three turns, told on one.
    #[test]
    fn folding_takes_turns_together() {
        let times: Vec<f64> = (0..12).map(|k| 0.25 * f64::from(k) + 0.1).collect();
        let states: Vec<f64> = (0..12).map(|k| f64::from(k % 4) + if k < 4 { 0.3 } else { 0.0 }).collect();
        let folded = fold(&Samples { times, states, ignored: Vec::new() }, 1, 1.0);
        assert_eq!(folded.weights, [3.0; 4]);
        assert!(folded.phases.iter().zip([0.1, 0.35, 0.6, 0.85]).all(|(a, b)| (a - b).abs() < 1e-12));
        assert!(folded.states.iter().zip([0.1, 1.1, 2.1, 3.1]).all(|(a, b)| (a - b).abs() < 1e-12));
    }
}
