#[allow(dead_code)]
#[path = "../src/test_models.rs"]
mod test_models;
use armilla_flow::*;
use test_models::*;
fn go(name: &str, f: &TestField, p: &[f64], x: &[f64]) {
    let b = std::time::Instant::now();
    let s = settle(f, p, x, &SettleOptions::default());
    print!("{name} {p:?} {:?} ", b.elapsed());
    match s {
        Ok(s) => { print!("time {:.4e} acc {} rej {} impl {} evals {} pushes {} ", s.time, s.stats.accepted, s.stats.rejected, s.stats.implicit, s.stats.evaluations, s.pushes.len());
          match s.verdict { Verdict::Cycle(c) => println!("CYCLE T {} turns {} d {:e} contr {:?} range {:?}", c.period(), c.turns, c.distance, c.contraction, c.orbit.extremes()[0]),
             Verdict::Equilibrium(e)=>println!("REST {:?} {:?}", e.state, e.eigenvalues.first()),
             Verdict::QuasiPeriodic(e)=>println!("QUASI near {:?} exp {:?}", e.nearest, e.exponent), Verdict::Irregular(e)=>println!("IRREGULAR near {:?} exp {:?}", e.nearest, e.exponent),
             Verdict::NotSettled(e)=>println!("NOT {e:?}"), _=>{} } }
        Err(e) => println!("ERR {e}"),
    }
}
#[test]
fn probe() {
    let t = torus_case();
    for lam in [1.7, 1.99, 1.999, 1.9999, 2.0, 2.0001, 2.001] { go("torus", &t, &[lam], &[0.6, 0.0, 1.2]); }
    let r = roessler();
    for c in [0.5, 2.8, 2.83, 2.8323, 2.832445, 2.8326, 2.84, 3.83, 3.8374, 3.85, 4.12, 4.13, 4.15, 4.2, 5.0, 5.18, 5.185, 5.1851, 5.19, 5.37, 5.38, 5.4, 5.5, 6.0, 9.0] { go("roessler", &r, &[0.2, 0.2, c], &[1.0, 1.0, 0.0]); }
    let h = hopf_with_shear();
    for mu in [0.0, 1e-8, 1e-6, -1e-8, -1e-6, -1e-5, -1e-4] { go("hopf", &h, &[mu, 0.5], &[0.3, 0.1]); go("hopf-near", &h, &[mu, 0.5], &[0.001, 0.0]); }
    let v = van_der_pol();
    for mu in [0.0, 0.001, 0.01, 20.0, 300.0, 1e4, 1e5] { go("vdp", &v, &[mu], &[0.5, 0.1]); }
    let l = lorenz();
    for rr in [0.5, 10.0, 20.0, 24.0, 99.97, 100.5, 160.0, 350.0] { go("lorenz", &l, &[10.0, rr, 8.0/3.0], &[1.0, 2.0, 3.0]); }
    let ty = tyson();
    for k in [0.3, 0.37, 1.0, 1.45, 1.5, 3.0] { go("tyson", &ty, &[0.015, 180.0, 1e-4, k], &[0.1, 0.2]); }
}
