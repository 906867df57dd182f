//! Two period doublings that cancel inside one stride.
//!
//! The bordered scalar G of a doubling (see [`crate::TestFunction`]) is a smooth function along the branch as long as its
//! borders stay the same, and its slope is exact: `dG/ds = -psi^T (dM/dz t) v` with the unit tangent t. Borders made at
//! the end of a stride are carried to its beginning, so that values and slopes at both ends belong to one function; the
//! cubic through them tells whether it dips to zero in between. Where it comes near, a cycle is computed at the lowest
//! place and the search goes on in the half that still falls: it ends with a cycle beyond the doubling, with the bottom
//! of a dip that stays clear of it, or with one that touches zero to roundoff.

use std::sync::Arc;

use armilla_collocation::{Closing as _, Row};
use armilla_follow::{Hermite, Problem, Station, Watched};

use crate::point::{CyclePoint, CycleTangent};
use crate::problem::{CycleProblem, WATCH_DOUBLING};
use crate::test_function::{CriticalKind, TestFunction};

type CycleStation = Station<CyclePoint, CycleTangent>;

/// What lies between two stations on the same side of a doubling.
#[derive(Clone, Debug)]
pub enum Dip {
    /// No doubling.
    Clear,
    /// Two: this station stands between them.
    Split(Box<CycleStation>),
    /// A multiplier touches -1 here: two doublings closer to each other than can be told, or none.
    Touch(Box<CycleStation>),
}

/// `Prod (mu + 1)` above which, at both ends of a stride, no multiplier can reach -1 and come back inside it: the change
/// of multipliers from point to point is bounded to about as much. Larger costs two more linear systems for more strides.
const NEAR: f64 = 0.6;
/// Share of the larger end value under which the lowest value of the cubic is looked at.
const LOW: f64 = 0.1;
/// Share of the value at the bottom that the cubic may still promise below it once the bottom is found.
const SETTLED: f64 = 0.5;
/// Share of the larger end value under which the bottom cannot be told from zero.
const TOUCHES: f64 = 1e-11;
/// Share of the smaller end value that the bottom must fall below to count as one.
const BOTTOM: f64 = 0.01;
/// Cycles computed in search of the bottom; each divides its distance by two at least, mostly squares it.
const SEARCHES: usize = 40;

/// An end of the interval searched.
struct End {
    station: CycleStation,
    value: f64,
    /// By distance, in the metric of the moment.
    slope: f64,
}

impl CycleProblem {
    /// Looks for two doublings that cancel between two stations with the same sign of the doubling function. None where
    /// the bordered scalar cannot tell: its linear systems fail, or the borders of one end do not suit the other, as where
    /// two multipliers are near -1 at once.
    pub fn doubling_dip(&mut self, before: &CycleStation, after: &CycleStation) -> Option<Dip> {
        let ends = [before, after].map(|station| station.watch.values[WATCH_DOUBLING].value);
        if ends[0] * ends[1] > 0.0 && ends[0].abs().min(ends[1].abs()) < NEAR {
            self.search_dip(before, after)
        } else {
            Some(Dip::Clear)
        }
    }

    fn search_dip(&mut self, before: &CycleStation, after: &CycleStation) -> Option<Dip> {
        let mut borders = self.borders(after)?;
        let mut high = self.end(&mut borders, after.clone())?;
        let mut low = self.end(&mut borders, before.clone())?;
        let (size, floor) = {
            let ends = [low.value.abs(), high.value.abs()];
            (ends[0].max(ends[1]), ends[0].min(ends[1]))
        };
        // Borders that do not suit the other end tell nothing.
        if low.value * high.value < 0.0 {
            return None;
        }
        let mut bottom = floor;
        for search in 0..SEARCHES {
            let length = self.distance(&low.station.point, &high.station.point);
            let watched = |end: &End| Watched { value: end.value, slope: Some(end.slope) };
            let Some((share, lowest)) = Hermite::over(length, watched(&low), watched(&high))?.lowest() else { break };
            let promised = lowest * 1.0f64.copysign(low.value);
            if promised > LOW * size || (search > 0 && promised > SETTLED * bottom && bottom > TOUCHES * size) {
                break;
            }
            let station = self.between(&low.station, &high.station, share.clamp(0.01, 0.99))?;
            let beyond = station.watch.values[WATCH_DOUBLING].value * before.watch.values[WATCH_DOUBLING].value < 0.0;
            let middle = self.end(&mut borders, station)?;
            // Beside an event that another stride has told the ends themselves are as small.
            if middle.value.abs() < (TOUCHES * size).min(BOTTOM * floor) {
                return Some(Dip::Touch(Box::new(middle.station)));
            }
            if beyond {
                return Some(Dip::Split(Box::new(middle.station)));
            }
            bottom = middle.value.abs().min(bottom);
            if middle.slope * low.value < 0.0 { low = middle } else { high = middle }
        }
        Some(Dip::Clear)
    }

    /// The doubling function with borders made at a station.
    fn borders(&mut self, station: &CycleStation) -> Option<Borders> {
        let CyclePoint { degree, mesh, .. } = station.point.clone();
        self.system.set_mesh(degree, &mesh);
        self.system.linearise(&station.point.unknowns).ok()?;
        let function = TestFunction::new(CriticalKind::Doubling, &self.system, &station.point.unknowns).ok()?;
        let gradient = Row::zero(station.point.unknowns.nodes.len());
        Some(Borders { function, degree, mesh, gradient })
    }

    /// Value and slope at a station, which is carried to the mesh of the borders.
    fn end(&mut self, borders: &mut Borders, station: CycleStation) -> Option<End> {
        let Borders { function, degree, mesh, gradient } = borders;
        let point = station.point.on_mesh(*degree, mesh);
        let tangent = station.tangent.on_mesh(*degree, mesh).row;
        let length = self.metric.inner(point.tables(), mesh, &tangent, &tangent).sqrt();
        self.system.set_mesh(*degree, mesh);
        self.system.linearise(&point.unknowns).ok()?;
        let value = function.fill(&mut self.system, &point.unknowns, gradient).ok()?;
        let nodes: f64 = gradient.nodes.iter().zip(&tangent.nodes).map(|(a, b)| a * b).sum();
        let slope = nodes + gradient.period * tangent.period + gradient.parameter * tangent.parameter;
        Some(End { station, value, slope: slope / length })
    }
}

/// The doubling function with fixed borders.
struct Borders {
    function: TestFunction,
    degree: usize,
    mesh: Arc<[f64]>,
    gradient: Row,
}
