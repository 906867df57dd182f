//! Tests of the crate through its public face, one module a subject.

mod coded;
mod common;
mod derivatives;
mod errors;
mod fuzz;
mod inspecting;
mod reading;
