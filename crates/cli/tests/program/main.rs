//! The program from outside, through its real binary: what it says, how it exits, what it leaves on disk.

// A folder to work in, and the program run there.
mod desk;
// The models and studies of these tests.
mod scenes;

// `check`: equations, sizes, start, derivatives, kinks.
mod check;
// `draw` and `export` from the files of a run.
mod again;
// Ctrl-C at any time.
#[cfg(unix)]
mod interrupt;
// Every way to refuse: exit code, words, nothing left behind.
mod refusals;
// The results folder: every file, exact columns, the same numbers everywhere, replaced and repeated.
mod results;
// `settle`: rest, cycle, neither.
mod settle;
// What goes to which stream; help texts.
mod streams;
