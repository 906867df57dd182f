//! armilla: flow.
