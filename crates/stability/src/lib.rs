//! armilla: stability.
