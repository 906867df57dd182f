use armilla_collocation::{Tables, estimate_error};
use armilla_model::{Batch, VectorField};
use armilla_record::Profile;
use armilla_tests::{Case, Curve, branch, curve, job, profile_error};

fn maxjump(p: &Profile, least: &[f64]) -> f64 {
    // reuse estimate_error's derivative (mean of two jumps): recompute jumps from nodes by hand
    let n = p.n_states; let m = p.degree; let N = p.intervals();
    let h = |i: usize| p.mesh[i + 1] - p.mesh[i];
    let ex = p.extremes();
    let scale: Vec<f64> = (0..n).map(|a| (ex[a].1 - ex[a].0).max(least[a])).collect();
    let t = Tables::new(m);
    let mut hi = vec![0.0; N * n];
    for i in 0..N { for (j, w) in t.highest.iter().enumerate() { for a in 0..n { hi[i*n+a] += w * p.values[(i*m+j)*n+a] / (h(i).powi(m as i32) * scale[a]); } } }
    let jumps: Vec<f64> = (0..N).map(|i| { let k=(i+1)%N; let d=0.5*(h(i)+h(k)); (0..n).map(|a| ((hi[k*n+a]-hi[i*n+a])/d).abs()).fold(0.0,f64::max)}).collect();
    (0..N).map(|i| t.error_constant * h(i).powi(m as i32+1) * jumps[i].max(jumps[(i+N-1)%N])).fold(0.0, f64::max)
}

fn residual(p: &Profile, f: &dyn VectorField, pars: &[f64], least: &[f64]) -> f64 {
    let n = p.n_states; let N = p.intervals();
    let ex = p.extremes();
    let scale: Vec<f64> = (0..n).map(|a| (ex[a].1 - ex[a].0).max(least[a])).collect();
    let mut ev = f.evaluator(&[]);
    let mut pe = p.evaluator();
    let K = 24;
    let xs = armilla_record::nodes(p.degree); let ws = armilla_record::barycentric_weights(p.degree);
    let mut basis = vec![0.0; p.degree+1];
    let (mut u, mut r) = (vec![0.0; n], vec![0.0; n]);
    let mut worst = 0.0f64;
    for i in 0..N {
        let h = p.mesh[i+1]-p.mesh[i];
        let mut e = vec![0.0; n];
        for k in 0..K {
            let s = (k as f64 + 0.5)/K as f64 + 1e-7;
            pe.in_interval(i, s, &mut u);
            ev.rates(Batch{len:1,time:&[],states:&u,parameters:pars}, &mut r);
            armilla_record::lagrange_at(&xs,&ws,s,&mut basis);
            for a in 0..n {
                let mut d = 0.0;
                for j in 0..=p.degree { let q: f64 = (0..=p.degree).filter(|k| *k!=j).map(|k| 1.0/(s-xs[k])).sum(); d += basis[j]*q*(p.values[(i*p.degree+j)*n+a]-u[a]); }
                e[a] += (h * p.period * r[a] - d) / K as f64;
                worst = worst.max((e[a]/scale[a]).abs());
            }
        }
    }
    worst
}

fn main() {
    let runs: Vec<(&str,&str,&str,Box<dyn Fn(&armilla_record::Point)->Curve>)> = vec![
        ("vanderpol", "mu", r#"start: Settle(at: {"mu": 1.0}), follow: (parameter: "mu", from: 0.1, to: 20)"#, Box::new(|p| curve::van_der_pol(p.value, p.period))),
        ("x14", "h", r#"start: Settle(at: {"h": -0.2}), follow: (parameter: "h", from: -0.24, to: -1e-5)"#, Box::new(|p| curve::near_loop(p.value))),
        ("x12", "mu", r#"start: Settle(at: {"mu": 0.2}), follow: (parameter: "mu", from: 0.1, to: 0.5)"#, Box::new(|p| curve::branched(1,(p.value,0.7,1.5)))),
        ("x2", "mu", r#"start: Settle(at: {"mu": 0.2}), follow: (parameter: "mu", from: 0.1, to: 0.5)"#, Box::new(|p| curve::circle((0.5*(1.0+(1.0+4.0*p.value).sqrt())).sqrt(),&[]))),
    ];
    for (model, par, fields, truth) in &runs {
        for acc in ["1e-6","1e-9","1e-12"] { for deg in [0,3,4,5,6,7,8] {
            let mesh = if deg==0 { String::new() } else { format!(", mesh: (degree: {deg})") };
            if deg<5 && deg>0 && acc=="1e-12" { continue; }
            let traced = job(model, &format!("accuracy: {acc}, {fields}{mesh}"));
            let b = branch(&traced, "a");
            let case = Case::new(model, par, 1.0);
            for st in &b.profiles {
                let pt = &b.points[st.point];
                let p = &st.profile;
                let e = profile_error(p, &truth(pt));
                let least: Vec<f64> = vec![1e-9; p.n_states];
                let est = estimate_error(&Tables::new(p.degree), &p.mesh, &p.values, &least).error;
                let pars = case.parameters(pt.value);
                println!("{model} {acc} deg {} N {} at {:.4}: true {e:.2e} reported {:.2} now {:.2} max {:.2} res {:.2}", p.degree, p.intervals(), pt.value, pt.profile_error/e, est/e, maxjump(p,&least)/e, residual(p, case.model.field().as_ref(), &pars, &least)/e);
            }
        }}
    }
}
