//! armilla: follow.
