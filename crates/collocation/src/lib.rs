//! armilla: collocation.
