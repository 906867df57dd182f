//! What a run tells while it runs; whoever watches decides how to show it.

/// A piece of news.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Progress<'a> {
    /// The simulation to the first cycle began.
    Settling,
    /// A note on the start, such as an unstable state of rest that had to be left.
    Note(&'a str),
    /// A branch began.
    Branch {
        /// Its name.
        name: &'a str,
    },
    /// A branch has one more point.
    Point {
        /// Name of the branch.
        name: &'a str,
        /// Points so far.
        points: usize,
        /// Value of the followed parameter.
        value: f64,
        /// Whether the cycle is stable.
        stable: bool,
    },
    /// An event was located.
    Event {
        /// Its full name.
        name: &'a str,
        /// Value of the followed parameter.
        value: f64,
    },
    /// A branch is finished.
    Finished {
        /// Its name.
        name: &'a str,
        /// Points it has.
        points: usize,
    },
}

/// Takes the news of a run.
pub trait Observer {
    /// One piece of news.
    fn notice(&mut self, progress: Progress<'_>);
}

/// An observer that looks away.
#[derive(Clone, Copy, Debug, Default)]
pub struct Silent;

impl Observer for Silent {
    fn notice(&mut self, _progress: Progress<'_>) {}
}
