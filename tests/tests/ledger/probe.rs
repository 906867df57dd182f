use armilla_tests::job;
#[test]
fn probe() {
    let Ok(text) = std::env::var("PROBE") else { return };
    for line in text.split(';') {
        let (model, fields) = line.split_once('|').expect("model|fields");
        let traced = job(model.trim(), fields);
        for b in &traced.branches {
            eprintln!("### {} {} points; ends {:?}", b.name, b.points.len(), b.ends);
            for e in &b.events {
                eprintln!("###   {} {:?} d={} err {:?} {}", e.name, e.value, e.distance, e.error, e.note);
            }
            if std::env::var("POINTS").is_ok() {
                for p in &b.points {
                    eprintln!("###     {:?} d={:.6} T={:.4} un={} {:?} max={:?}", p.value, p.distance, p.period, p.unstable_count, p.multipliers.iter().map(|m| (m.log_modulus, m.angle)).collect::<Vec<_>>(), p.maxima);
                }
            }
        }
        eprintln!("### shortfalls {:?}", traced.shortfalls);
    }
}
