use armilla_tests::*;
use std::time::Instant;
#[test]
fn time() {
    for (name, par, at) in [("roessler", "c", 2.5), ("roessler", "c", 4.0), ("vanderpol","mu",1.0), ("x3", "mu", 0.2)] {
        let case = Case::new(name, par, 1.0);
        let p = case.settled(at);
        let (mut problem, point) = case.start(&p, settings(1e-9), at);
        let mut best = f64::INFINITY;
        for _ in 0..200 {
            let t = Instant::now();
            for _ in 0..10 { problem.spectrum(&point).unwrap(); }
            best = best.min(t.elapsed().as_secs_f64() / 10.0);
        }
        println!("{name} N={} {:.1} us L {:e}", problem.profile(&point).intervals(), best * 1e6, problem.spectrum(&point).unwrap().liouville_defect);
    }
}
