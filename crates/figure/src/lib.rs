//! armilla: figure.
