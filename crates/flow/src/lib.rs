//! Time integration, section crossings and settling.
mod cycle;
mod equilibrium;
mod error;
mod explicit;
mod implicit;
mod integrator;
mod lu;
mod observe;
mod rates;
mod returns;
mod section;
mod settle;
#[cfg(test)]
mod test_models;

pub use cycle::Cycle;
pub use equilibrium::Equilibrium;
pub use error::FlowError;
pub use integrator::{Integrator, Limits, Method, Stats, Tolerance};
pub use returns::NearReturn;
pub use section::{Return, Section};
pub use settle::{Evidence, Limit, Push, Settled, SettleOptions, Verdict, settle};
