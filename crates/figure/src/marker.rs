//! One marker shape for each kind of threshold, told apart without colour.

use armilla_record::EventKind;

use crate::canvas::Pen;
use crate::geometry::Place;
use crate::palette::{BLACK, WHITE};

/// Markers are about 1.9 mm across: publishers ask for 1.5 to 2 mm.
pub(crate) const RADIUS: f64 = 2.7;
/// White rim that keeps a marker apart from the curves under it.
const RIM: f64 = 0.6;
/// Lines of hollow markers.
const OUTLINE: f64 = 0.7;

/// The kind in whole words.
pub(crate) fn words(kind: EventKind) -> &'static str {
    match kind {
        EventKind::Start => "start",
        EventKind::Fold => "fold",
        EventKind::Doubling => "period doubling",
        EventKind::Torus => "torus bifurcation",
        EventKind::Pitchfork => "pitchfork",
        EventKind::Transcritical => "transcritical",
        EventKind::Branching => "branching",
        EventKind::Hopf => "Hopf bifurcation",
        EventKind::PeriodBlowUp => "period blow-up",
        EventKind::Target => "target",
        EventKind::Edge => "edge of the range",
        EventKind::Unresolved => "unresolved change of stability",
    }
}

/// Draws the marker of a kind; a target is a small dot, a start and an edge have none.
pub(crate) fn draw(pen: &Pen, kind: EventKind, centre: Place) {
    let corners = |scale: f64| placed(&shape(kind), centre, scale);
    match kind {
        EventKind::Start | EventKind::Edge => {}
        EventKind::Target => {
            pen.disc(centre, 0.6 * RADIUS, WHITE);
            pen.disc(centre, 0.6 * RADIUS - RIM, BLACK);
        }
        EventKind::Torus => {
            pen.disc(centre, RADIUS + RIM, WHITE);
            pen.ring(centre, RADIUS - 0.5 * OUTLINE, BLACK, OUTLINE);
            pen.disc(centre, 0.35 * RADIUS, BLACK);
        }
        EventKind::Unresolved => {
            pen.area(&corners(RADIUS + RIM), WHITE);
            let mut outline = corners(RADIUS - 0.5 * OUTLINE);
            outline.extend_from_within(..2);
            pen.line(&outline, BLACK, OUTLINE);
        }
        _ => {
            pen.area(&corners(RADIUS + 1.5 * RIM), WHITE);
            pen.area(&corners(RADIUS), BLACK);
        }
    }
}

fn placed(shape: &[Place], (x, y): Place, scale: f64) -> Vec<Place> {
    shape.iter().map(|(u, v)| (x + scale * u, y + scale * v)).collect()
}

/// Corners for a marker of radius about one, y downwards.
fn shape(kind: EventKind) -> Vec<Place> {
    match kind {
        EventKind::Fold => vec![(0.0, -1.2), (1.2, 0.0), (0.0, 1.2), (-1.2, 0.0)],
        EventKind::Doubling => vec![(0.0, -1.25), (1.1, 0.8), (-1.1, 0.8)],
        EventKind::Pitchfork => vec![(0.0, 1.25), (1.1, -0.8), (-1.1, -0.8)],
        EventKind::Transcritical => turned(&cross()),
        EventKind::Branching => cross(),
        EventKind::Hopf => star(),
        _ => vec![(-0.9, -0.9), (0.9, -0.9), (0.9, 0.9), (-0.9, 0.9)],
    }
}

/// An upright cross with arms a third as wide as long.
fn cross() -> Vec<Place> {
    let (arm, half) = (1.25, 0.4);
    let quarter = [(half, -half), (half, -arm), (-half, -arm)];
    (0..4).flat_map(|k| quarter.map(|place| quarter_turns(place, 4 - k))).collect()
}

fn quarter_turns((x, y): Place, turns: usize) -> Place {
    (0..turns).fold((x, y), |(x, y), _| (-y, x))
}

fn turned(shape: &[Place]) -> Vec<Place> {
    let half = std::f64::consts::FRAC_1_SQRT_2;
    shape.iter().map(|(x, y)| (half * (x - y), half * (x + y))).collect()
}

/// A star of five points.
fn star() -> Vec<Place> {
    (0..10)
        .map(|k| {
            let (sin, cos) = (f64::from(k) * std::f64::consts::PI / 5.0).sin_cos();
            let radius = if k % 2 == 0 { 1.35 } else { 0.55 };
            (radius * sin, -radius * cos)
        })
        .collect()
}
