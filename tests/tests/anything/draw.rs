//! Models drawn from a seed.

use std::fmt::Write as _;

use armilla_tests::Random;

/// Model and study files of a seed.
pub fn drawn(seed: u64) -> (String, String) {
    let mut random = Random::new(seed + 1);
    let n = 2 + (seed % 4) as usize;
    let name = |i: usize| format!("x{i}");
    let square = (0..n).map(|i| format!("x{i}^2")).collect::<Vec<_>>().join(" + ");
    let (mut states, mut rates) = (String::new(), String::new());
    for i in 0..n {
        let _ = write!(states, "\"x{i}\": (begin: {:?}), ", random.between(-1.0, 1.0));
        // A rotation of neighbours makes oscillations likely; everything else is as it comes.
        let turn = if i % 2 == 0 && i + 1 < n {
            format!("-{:?}*x{}", random.between(0.5, 2.0), i + 1)
        } else if i % 2 == 1 {
            format!("{:?}*x{}", random.between(0.5, 2.0), i - 1)
        } else {
            format!("{:?}*x{}", random.between(-1.0, 1.0), (i + 1) % n)
        };
        let mut rate =
            format!("{turn} + ({:?} + {:?}*p)*{}", random.between(-0.6, 0.6), random.between(-1.0, 1.0), name(i));
        for _ in 0..3 {
            let pick = |random: &mut Random| (random.between(0.0, 1.0) * n as f64) as usize % n;
            let (a, b) = (pick(&mut random), pick(&mut random));
            let _ = write!(rate, " + {:?}*{}*{}", random.between(-1.0, 1.0), name(a), name(b));
        }
        if random.between(0.0, 1.0) < 0.3 {
            let _ = write!(rate, " + {:?}", random.between(-0.5, 0.5));
        }
        let _ = write!(rates, "\"x{i}\": \"{rate} - x{i}*({square})\", ");
    }
    let at = random.between(0.2, 0.8);
    let model = format!("(states: {{{states}}}, parameters: {{\"p\": (value: {at:?})}}, rates: {{{rates}}})");
    let study = format!(
        "(model: \"drawn.model.ron\", start: Settle(at: {{\"p\": {at:?}}}, transient: 100.0), follow: (parameter: \"p\", from: -1.0, to: 2.0), accuracy: 1e-7, pursue: (doublings: 1, branches: 4, points: 200))"
    );
    (model, study)
}
