//! Folds and doublings met on a walk through a random range.

#[test]
fn placeholder() {}
