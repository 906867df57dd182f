//! Acceptance tests of armilla against outside references.
