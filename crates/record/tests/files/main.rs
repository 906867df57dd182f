//! The files of armilla from outside: what is written reads back to the last bit, damage is found,
//! results are never lost, tables have the columns of the interface.

// Branches of seeded random bits, used by all.
mod sample;

// Every f64 survives branch file, table and journal.
mod round_trip;
// Cut files, flipped bits, unknown versions and fields, contradictions.
mod damage;
// Columns, quoting, order of rows.
mod tables;
// Creating, replacing, refusing, restoring.
mod folder;
// A run that is killed.
mod journal;
// Tables and arrays for other tools.
mod export;
