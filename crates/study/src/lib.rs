//! armilla: study.
