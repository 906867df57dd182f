//! True errors beside the reported ones: studies whose results are known, run by the main job.
//!
//! A study makes many numbers; a [`Claim`] is one of them with what it is in truth, [`Run::rows`] compares. The cases are
//! in `exact.rs` and `independent.rs`, each truth with its source; `table.rs` writes them down.

mod exact;
mod independent;
mod table;

use armilla_record::{Branch, Event, EventKind, Point, Profile, StoredProfile};
use armilla_study::Traced;

pub use table::page;

use crate::decimal::difference;
use crate::matching::{Curve, profile_error};

/// How many times a reported error may exceed the true one, where that is above the roundoff unit of the number.
pub const WIDEST: f64 = 1000.0;

/// Where a truth comes from.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Source {
    /// By hand, evaluated to 25 digits or more.
    Exact,
    /// Another computation, in higher precision and by another method, or published.
    Independent,
    /// The same study at a hundredth of the accuracy or less.
    Finer,
}

impl Source {
    fn word(self) -> &'static str {
        match self {
            Self::Exact => "exact",
            Self::Independent => "independent",
            Self::Finer => "finer",
        }
    }
}

/// Which event.
#[derive(Clone, Copy)]
enum Place {
    /// By its name.
    Named(&'static str),
    /// On a branch at an exact value of the parameter.
    At(&'static str, f64),
}

/// Which of the cycles that a branch keeps.
#[derive(Clone, Copy)]
enum Kept {
    /// The one nearest to a value of the parameter.
    Near(f64),
    /// The one at a share of the list, from 0 to 1.
    Share(f64),
}

/// Accuracy of the studies that others are held against.
const FINEST: f64 = 1e-12;

/// One number and what it is in truth, as a decimal number or a curve.
enum Claim {
    /// The value of the parameter at an event.
    Value(&'static str, &'static str, Source),
    /// The period at an event.
    Period(Place, &'static str, Source),
    /// The angle of rotation at a torus point.
    Angle(&'static str, &'static str, Source),
    /// A cycle of a branch; the curve is that of a point.
    Cycle(&'static str, Kept, Box<dyn Fn(&Point) -> Curve>, Source),
    /// The cycle of a branch at an edge of the range, by the same study with [`FINEST`].
    FinerCycle(&'static str, f64),
}

/// A study with claims on its results.
struct Run {
    case: &'static str,
    model: &'static str,
    fields: String,
    accuracy: f64,
    claims: Vec<Claim>,
}

impl Run {
    fn new(case: &'static str, model: &'static str, fields: &str) -> Self {
        Self { case, model, fields: fields.into(), accuracy: 1e-9, claims: Vec::new() }
    }

    fn accuracy(self, accuracy: f64) -> Self {
        Self { accuracy, ..self }
    }

    fn claim(mut self, claim: Claim) -> Self {
        self.claims.push(claim);
        self
    }

    /// The value of a threshold.
    fn value(self, event: &'static str, digits: &'static str, source: Source) -> Self {
        self.claim(Claim::Value(event, digits, source))
    }

    /// The period at an event.
    fn period(self, event: &'static str, digits: &'static str, source: Source) -> Self {
        self.claim(Claim::Period(Place::Named(event), digits, source))
    }

    /// The angle at a torus point.
    fn angle(self, event: &'static str, digits: &'static str, source: Source) -> Self {
        self.claim(Claim::Angle(event, digits, source))
    }

    /// The period on a branch at a value.
    fn period_at(self, branch: &'static str, value: f64, digits: &'static str, source: Source) -> Self {
        self.claim(Claim::Period(Place::At(branch, value), digits, source))
    }

    /// A cycle of a branch, known by hand.
    fn cycle(self, branch: &'static str, kept: Kept, curve: impl Fn(&Point) -> Curve + 'static) -> Self {
        self.claim(Claim::Cycle(branch, kept, Box::new(curve), Source::Exact))
    }

    /// The cycle of a branch at an edge of the range, against a finer study.
    fn finer(self, branch: &'static str, edge: f64) -> Self {
        self.claim(Claim::FinerCycle(branch, edge))
    }

    fn trace(&self, accuracy: f64) -> Traced {
        crate::job(self.model, &format!("accuracy: {accuracy:e}, {}", self.fields))
    }

    /// One row a claim.
    fn rows(&self) -> Vec<Row> {
        let traced = self.trace(self.accuracy);
        let needs_finer = self.claims.iter().any(|claim| matches!(claim, Claim::FinerCycle(..)));
        let finer = needs_finer.then(|| self.trace(FINEST));
        self.claims.iter().map(|claim| self.row(claim, &traced, finer.as_ref())).collect()
    }

    fn row(&self, claim: &Claim, traced: &Traced, finer: Option<&Traced>) -> Row {
        match claim {
            Claim::Value(name, digits, source) => {
                let event = found(traced, Place::Named(name), self.case);
                let row = self.number(event.value, digits, *source);
                // A parameter is known relative to the width of the asked range, where that is larger than itself.
                let range = traced.branches[0].range;
                let roundoff = row.roundoff.max(f64::EPSILON * (range.1 - range.0));
                Row { number: format!("value of {}", named(event)), reported: event.error, roundoff, ..row }
            }
            Claim::Period(place, digits, source) => {
                let event = found(traced, *place, self.case);
                let row = self.number(event.period, digits, *source);
                Row { number: format!("period at {}", named(event)), reported: event.period_error, ..row }
            }
            Claim::Angle(name, digits, source) => {
                let event = found(traced, Place::Named(name), self.case);
                let row = self.number(event.angle.expect("an angle"), digits, *source);
                Row { number: format!("angle at {}", named(event)), reported: angle_error(event), ..row }
            }
            Claim::Cycle(name, which, curve, source) => {
                let (point, profile) = kept(crate::branch(traced, name), *which);
                let error = profile_error(profile, &curve(point));
                Row { error, source: source.word(), ..self.cycle_row(name, point) }
            }
            Claim::FinerCycle(name, edge) => {
                let (point, profile) = kept(crate::branch(traced, name), Kept::Near(*edge));
                let finer = crate::branch(finer.expect("a finer study"), name);
                let (finer_point, finer_profile) = kept(finer, Kept::Near(*edge));
                assert_eq!(point.value, finer_point.value, "{}: an edge is exact", self.case);
                let error = profile_error(profile, &curve_of(finer_profile.clone()));
                let row = self.cycle_row(name, point);
                Row { error, unit: finer_point.profile_error, source: Source::Finer.word(), ..row }
            }
        }
    }

    fn number(&self, found: f64, digits: &str, source: Source) -> Row {
        let (error, unit) = difference(found, digits);
        Row {
            case: self.case,
            accuracy: self.accuracy,
            found: Some(found),
            truth: Some(digits.to_string()),
            source: source.word(),
            error: error.abs(),
            unit: if source == Source::Exact { 0.0 } else { unit },
            roundoff: f64::EPSILON * found.abs(),
            ..Row::default()
        }
    }

    fn cycle_row(&self, branch: &str, point: &Point) -> Row {
        let size = |j: usize| point.maxima[j].abs().max(point.minima[j].abs());
        let range = |j: usize| point.maxima[j] - point.minima[j];
        // A state far from 0 for its range is rounded coarsely relative to that; one that stands still is not.
        let rounded = (0..point.maxima.len()).filter(|j| range(*j) > 1e-9 * size(*j)).map(|j| size(j) / range(j));
        Row {
            case: self.case,
            accuracy: self.accuracy,
            number: format!("cycle of {branch} at {}", point.value),
            roundoff: f64::EPSILON * rounded.fold(1.0, f64::max),
            reported: Some(point.profile_error),
            ..Row::default()
        }
    }
}

/// How a row calls an event.
fn named(event: &Event) -> String {
    match event.kind {
        EventKind::Start | EventKind::Target | EventKind::Edge => format!("{} ({})", event.name, event.value),
        _ => event.name.clone(),
    }
}

/// The error of an angle, which stands in the note.
fn angle_error(event: &Event) -> Option<f64> {
    let (error, _) = event.note.strip_prefix("angle known to ")?.split_once(';')?;
    error.parse().ok()
}

fn found<'a>(traced: &'a Traced, place: Place, case: &str) -> &'a Event {
    let (branch, value) = match place {
        Place::Named(name) => return crate::event(traced, name),
        Place::At(branch, value) => (branch, value),
    };
    let branch = crate::branch(traced, branch);
    let found = branch.events.iter().find(|event| event.value == value);
    let words = || (&branch.ends.0.words, &branch.ends.1.words, &traced.shortfalls);
    found.unwrap_or_else(|| panic!("{case}: nothing at {value}: {:?}", words()))
}

fn kept(branch: &Branch, which: Kept) -> (&Point, &Profile) {
    let place = |stored: &&StoredProfile| branch.points[stored.point].value;
    let stored = match which {
        Kept::Near(value) => {
            branch.profiles.iter().min_by(|a, b| (place(a) - value).abs().total_cmp(&(place(b) - value).abs()))
        }
        Kept::Share(share) => branch.profiles.get((share * (branch.profiles.len() - 1) as f64).round() as usize),
    };
    let stored = stored.unwrap_or_else(|| panic!("{} keeps no cycle", branch.name));
    (&branch.points[stored.point], &stored.profile)
}

fn curve_of(profile: Profile) -> Curve {
    Box::new(move |time, state| profile.evaluator().at(time, state))
}

/// A number with its true and its reported error.
#[derive(Clone, Debug, Default)]
pub struct Row {
    /// Which case.
    pub case: &'static str,
    /// Asked accuracy.
    pub accuracy: f64,
    /// Which number.
    pub number: String,
    /// What was found; none for a cycle.
    pub found: Option<f64>,
    /// What it is in truth; none for a cycle.
    pub truth: Option<String>,
    /// Where the truth is from.
    pub source: &'static str,
    /// The true error, of a cycle the largest relative to the range of each state.
    pub error: f64,
    /// What the truth itself is known to; 0 for an exact one.
    pub unit: f64,
    /// Roundoff unit of the number.
    pub roundoff: f64,
    /// The reported error.
    pub reported: Option<f64>,
}

impl Row {
    /// Whether the true error is inside the reported one, as far as the truth is known.
    pub fn is_inside(&self) -> bool {
        self.reported.is_some_and(|reported| self.error <= reported + self.unit)
    }

    /// The reported error over the true one, or over what the truth and a 64-bit number can tell where that is larger.
    pub fn ratio(&self) -> f64 {
        self.reported.map_or(f64::INFINITY, |reported| reported / self.error.max(self.unit).max(self.roundoff))
    }

    /// Whether it is inside, and not more than [`WIDEST`] times too wide.
    pub fn holds(&self) -> bool {
        self.is_inside() && self.ratio() <= WIDEST
    }
}

/// All numbers, case by case.
///
/// # Panics
/// Where a study fails or a number is missing.
pub fn rows() -> Vec<Row> {
    exact::runs().into_iter().chain(independent::runs()).flat_map(|run| run.rows()).collect()
}
