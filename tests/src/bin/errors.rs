//! Writes the page of true errors beside reported ones, `docs/errors.md`, to standard output.

fn main() {
    print!("{}", armilla_tests::page(&armilla_tests::rows()));
}
