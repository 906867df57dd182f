//! Damped Newton steps from a rough guess to where full steps converge.
//!
//! A step is shortened until the next correction is smaller than this one: `|d(x + lambda d)| <= (1 - lambda/4) |d(x)|`, the
//! natural monotonicity test with ordinary corrections (Deuflhard 2004, Newton Methods for Nonlinear Problems, sec. 3.3),
//! which asks nothing of how equations are scaled. Each trial costs a linearisation: this is for starts, not for branches.

use crate::newton::{Failure, Task, Workspace};
use crate::system::{Iterate, System};

/// Scaled size of a correction from which full steps are left to converge by themselves.
const NEAR: f64 = 1e-2;
/// Longest step, scaled: one size of the cycle.
const LONGEST: f64 = 1.0;
/// Shortest share of a correction tried before giving up.
const SHORTEST: f64 = 1.0 / 256.0;
/// Share of the promised decrease of a correction that it must keep.
const KEPT: f64 = 0.25;
/// Corrections applied at most.
const MOST: usize = 60;

/// Moves `at` by damped steps until the next correction is small; [`crate::correct_with`] does the rest.
///
/// # Errors
/// [`Failure`]; `at` is then the last iterate.
pub fn approach(
    workspace: &mut Workspace,
    system: &mut System,
    at: &mut Iterate,
    task: Task<'_>,
) -> Result<(), Failure> {
    let Task { reference, closing, .. } = task;
    workspace.fit(system);
    system.phase_row(reference, &mut workspace.phase);
    workspace.step(system, at, reference, closing)?;
    let mut size = workspace.size(system);
    for iteration in 1..=MOST {
        if size <= NEAR {
            return Ok(());
        }
        let (from, step) = (at.clone(), workspace.step.clone().expect("fitted above"));
        let mut share = (LONGEST / size).min(1.0);
        loop {
            at.clone_from(&from);
            at.add(share, &step);
            system.keep_time(at);
            if at.period > 0.0 && workspace.step(system, at, reference, closing).is_ok() {
                let next = workspace.size(system);
                if next <= (1.0 - KEPT * share) * size {
                    size = next;
                    break;
                }
            }
            share *= 0.5;
            // Written so that NaN gives up, too.
            if !(share >= SHORTEST * (LONGEST / size).min(1.0)) {
                return Err(Failure::Diverged { iterations: iteration, correction: size });
            }
        }
    }
    Err(Failure::Diverged { iterations: MOST, correction: size })
}
