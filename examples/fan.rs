//! A ventilation fan that surges: a model coded in Rust, traced through the library.
//!
//! A fan blows through a duct into a plenum, which a throttle empties (Greitzer 1976, Journal of Engineering for Power
//! 98:190, for the equations; from memory). Its pressure curve was measured at eleven flows. The curve between them is
//! the mean of the readings weighted by distance (Nadaraya 1964, Theory of Probability and its Applications 9:141; Watson
//! 1964, Sankhya A 26:359; both from memory), which a sum over the readings computes and no formula of a model file would.
//! How far can the throttle be closed before the flow begins to pulse? All values are our own and fit no product.
//!
//!     cargo run --release -p armilla-tests --example fan
//!
//! The numbers describe the model, not the machine; local codes and licensed practice decide.

use std::sync::Arc;
use std::sync::atomic::AtomicBool;

use armilla_model::{CodedField, Declaration, DualRates, Model, Parameter, State};
use armilla_study::{Silent, Study, TraceOptions, trace};
use num_dual::DualNum;

/// Flow in m^3/s and pressure rise in hPa, as read off the gauges.
const READINGS: [(f64, f64); 11] = [
    (-1.0, 9.1),
    (0.0, 6.2),
    (1.0, 5.6),
    (2.0, 5.9),
    (3.0, 7.3),
    (4.0, 8.9),
    (5.0, 10.0),
    (6.0, 10.3),
    (7.0, 9.4),
    (8.0, 7.1),
    (9.0, 3.4),
];
/// Width of the weights, m^3/s.
const WIDTH: f64 = 1.0;

struct Fan;

impl Fan {
    /// Pressure rise at a flow.
    fn curve<D: DualNum<Primitive = f64> + Copy>(flow: D) -> D {
        let (mut sum, mut weights) = (D::from(0.0), D::from(0.0));
        for (at, pressure) in READINGS {
            let weight = (-((flow - at) / WIDTH).powi(2)).exp();
            sum += weight * pressure;
            weights += weight;
        }
        sum / weights
    }
}

impl DualRates for Fan {
    fn n_states(&self) -> usize {
        3
    }

    fn n_parameters(&self) -> usize {
        4
    }

    /// States: flow, pressure rise of the fan, pressure of the plenum. Parameters: throttle, inertia, plenum, lag.
    fn rates<D: DualNum<Primitive = f64> + Copy>(&self, _time: D, x: &[D], p: &[D], out: &mut [D]) {
        let ([flow, rise, pressure], [throttle, inertia, plenum, lag]) = ([x[0], x[1], x[2]], [p[0], p[1], p[2], p[3]]);
        // Smooth through zero pressure, where the flow through the throttle turns round.
        let let_out = throttle * pressure / (pressure * pressure + 0.01).sqrt().sqrt();
        out[0] = (rise - pressure) / inertia;
        out[1] = (Self::curve(flow) - rise) / lag;
        out[2] = (flow - let_out) / plenum;
    }
}

fn model() -> Model {
    let state =
        |name: &str, begin: f64, unit: &str| State { name: name.into(), begin, unit: unit.into(), label: name.into() };
    let parameter = |name: &str, value: f64, unit: &str| Parameter {
        name: name.into(),
        value,
        uncertainty: None,
        unit: unit.into(),
        label: name.into(),
    };
    let declaration = Declaration {
        title: "A fan that surges".into(),
        states: vec![state("flow", 2.0, "m^3/s"), state("rise", 6.0, "hPa"), state("pressure", 8.0, "hPa")],
        parameters: vec![
            parameter("throttle", 1.0, "m^3/s/hPa^0.5"),
            parameter("inertia", 0.12, "hPa s^2/m^3"),
            parameter("plenum", 0.5, "m^3/hPa"),
            parameter("lag", 0.02, "s"),
        ],
    };
    Model::coded(declaration, Arc::new(CodedField::new(Fan)))
}

const STUDY: &str = r#"(
    title: "How far can the throttle be closed before the fan surges",
    model: "fan.rs",
    start: Settle(at: { "throttle": 1.0 }),
    follow: (parameter: "throttle", from: 0.3, to: 2.5),
    figures: [ Diagram(measure: Max("flow")), Portrait(axes: ["flow", "pressure"]) ],
)"#;

fn main() -> Result<(), Box<dyn std::error::Error>> {
    let place = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("../examples/fan.study.ron");
    let study = Study::of_model(STUDY, place, model())?;
    let options = TraceOptions { folder: None, replace: true, cascade: false, abort: &AtomicBool::new(false) };
    let traced = trace(&study, &options, &mut Silent)?;
    for event in traced.branches.iter().flat_map(|branch| &branch.events) {
        let error = event.error.map_or(String::new(), |error| format!("± {error:.0e}"));
        println!(
            "{:<12} throttle {:.9} {error}, period {:.9} s  {}",
            event.name, event.value, event.period, event.note
        );
    }
    for branch in &traced.branches {
        println!(
            "branch {}: {} points; {}; {}",
            branch.name,
            branch.points.len(),
            branch.ends.0.words,
            branch.ends.1.words
        );
    }
    println!("results: {}", traced.folder.display());
    println!("These numbers describe the model, not the machine; local codes and licensed practice decide.");
    Ok(())
}
