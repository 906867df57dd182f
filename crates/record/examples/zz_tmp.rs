//! tmp
#[path = "../tests/files/sample.rs"]
mod sample;
use armilla_record::*;
fn main() {
    let b = (0..).map(|s| (s, sample::branch(s, "a.doubling1", 4))).find(|(_, b)| b.states.len() == 3 && b.events.len() > 2 && b.events.iter().any(|e| e.profile.is_some())).unwrap();
    println!("seed {}", b.0);
    write_branch_file(std::path::Path::new("/tmp/branch-format-1.ron"), &b.1).unwrap();
    if let Some(tiny) = std::env::args().nth(1) {
        let mut r = Results::create(std::path::Path::new(&tiny), true).unwrap();
        println!("{:?}", r.write_study("x"));
        println!("{:?}", r.write_branch(&sample::branch(15, "a", 3)));
        let e = r.write_branch(&sample::branch(15, "a.doubling1", 300)); println!("{}", e.unwrap_err());
        return;
    }
    let mut bits = sample::Bits(1);
    for mb in [10usize, 100] {
        let mut big = sample::branch(15, "a", 400 * mb / 5);
        let n = big.states.len();
        for st in &mut big.profiles { 
            st.profile = sample::profile(&mut bits, n);
            let (nn, m) = (60, 4);
            st.profile.mesh = (0..=nn).map(|i| i as f64 / nn as f64).collect();
            st.profile.degree = m;
            st.profile.values = (0..(nn*m+1)*n).map(|_| bits.unit()*3.0 - 1.0).collect();
        }
        let path = std::path::Path::new("/tmp/big.ron");
        let t = std::time::Instant::now();
        write_branch_file(path, &big).unwrap();
        let w = t.elapsed();
        let t = std::time::Instant::now();
        let bytes = std::fs::read(path).unwrap();
        let r = parse_branch(path, &bytes).unwrap();
        println!("n {n}: {} MB write {:?} read {:?} same {}", bytes.len() as f64/1e6, w, t.elapsed(), r == big);
    }
}
