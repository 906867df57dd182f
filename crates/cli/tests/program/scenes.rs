//! Models and studies of these tests.

use std::collections::BTreeMap;
use std::sync::LazyLock;

use crate::desk::Desk;

/// X1 of the outside checks: radius sqrt(mu), period 2 pi/(1 + k mu); exact.
pub const X1_MODEL: &str = include_str!("../../../../tests/models/x1.model.ron");
/// X3 of the outside checks: a doubling at mu = 0, the doubled branch known exactly.
pub const X3_MODEL: &str = include_str!("../../../../tests/models/x3.model.ron");

pub const X1_STUDY: &str = r#"(
    title: "Growth of a circle",
    model: "x1.model.ron",
    start: Settle(),
    follow: (parameter: "mu", from: 0.1, to: 1.0),
    targets: [0.5],
    figures: [Diagram(measure: Max("x")), Portrait(axes: ["x", "y"])],
)
"#;

pub const X3_STUDY: &str = r#"(
    model: "x3.model.ron",
    start: Settle(at: { "mu": -0.1 }),
    follow: (parameter: "mu", from: -0.2, to: 0.2),
    pursue: (doublings: 1),
    figures: [Diagram(measure: Max("x"))],
)
"#;

/// A circle of radius sqrt(mu) beside two fast states, the second pair of names mixing both.
pub const FAST_MODEL: &str = r#"(
    states: { "x": (begin: 0.7), "y": (begin: 0), "p": (begin: 0.1), "q": (begin: 0.1) },
    parameters: { "mu": (value: 0.5) },
    expressions: { "gap": "mu - x^2 - y^2", "v": "p - q", "v_rate": "-1e5*v", "q_rate": "-1e6*(q - x)" },
    rates: { "x": "x*gap - y", "y": "y*gap + x", "p": "v_rate + q_rate", "q": "q_rate" },
)
"#;

pub const FAST_STUDY: &str = r#"(
    model: "fast.model.ron",
    start: Settle(),
    follow: (parameter: "mu", from: 0.4, to: 0.6),
    figures: [Diagram(measure: LargestMultiplier)],
)
"#;

/// X1 with its study.
pub fn x1() -> [(&'static str, &'static str); 2] {
    [("x1.model.ron", X1_MODEL), ("x1.study.ron", X1_STUDY)]
}

/// A desk with X3, traced; the run itself is done once for all tests.
pub fn x3_traced() -> Desk {
    static FILES: LazyLock<BTreeMap<String, Vec<u8>>> = LazyLock::new(|| {
        let desk = Desk::with(&[("x3.model.ron", X3_MODEL), ("x3.study.ron", X3_STUDY)]);
        let said = desk.run(&["trace", "x3.study.ron"]);
        assert_eq!((said.code, said.err.as_str()), (0, ""), "{said:?}");
        desk.files()
    });
    let desk = Desk::new();
    for (name, bytes) in FILES.iter().filter(|(name, _)| !name.ends_with('/')) {
        desk.write(name, bytes);
    }
    desk
}
