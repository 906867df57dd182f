//! The page of true and reported errors.

use std::fmt::Write as _;

use super::{Row, WIDEST};

/// The page as Markdown.
pub fn page(rows: &[Row]) -> String {
    let mut page = introduction();
    summary(&mut page, rows);
    page.push_str("| case | accuracy | number | found | truth | source | true error | reported | reported/true | |\n");
    page.push_str("|---|---|---|---|---|---|---|---|---|---|\n");
    for row in rows {
        line(&mut page, row);
    }
    page
}

fn introduction() -> String {
    format!(
        "# Errors: true beside reported

Every number that armilla prints carries an estimated error. This page holds them against the truth where that is
known; it is written by

    cargo run --release -p armilla-tests --bin errors > docs/errors.md

which runs the main job on each case and compares. The same comparison is a test.

What is claimed: the true error is at most the reported one, and the reported one is at most {WIDEST} times the true
one, or {WIDEST} times the roundoff unit of the number (its size times 2.2e-16) where the true error is smaller than
that by luck.

How each error is estimated:

- `error` of a fold or a doubling, `period_error` there and at starts, targets and edges: the number is computed again
  on a mesh with every interval halved, and that is what is printed; the error is the difference, plus the roundoff of
  both solutions carried through the linear system, which measures the conditioning.
- `error` of an event found by bisection (`torus`, `branching`): half the width of the bracket.
- `error` of a birth at a state of rest (`hopf`) and of a `period-blow-up`: how far the extrapolation moves when a
  point is left out.
- `profile_error` of a cycle: from the jumps of the highest derivative between intervals (de Boor 1973), relative to
  the range of each state. It is held against the largest error over all states and times at the best common phase.

Sources of truth: `exact`, by hand; `independent`, single shooting with a Taylor integrator in 113-bit arithmetic, or
published; `finer`, the same study with accuracy 1e-12. A truth with fewer digits tells the true error only to a unit
of its last digit; the row then shows `<` that unit where the error is smaller, and is called inside if the two
agree within the reported error and that unit.

"
    )
}

fn summary(page: &mut String, rows: &[Row]) {
    let inside = rows.iter().filter(|row| row.is_inside()).count();
    let mut ratios: Vec<f64> = rows.iter().map(Row::ratio).collect();
    ratios.sort_by(f64::total_cmp);
    let (largest, median) = (ratios[ratios.len() - 1], ratios[ratios.len() / 2]);
    let holding = rows.iter().filter(|row| row.holds()).count();
    let count = rows.len();
    let _ = writeln!(
        page,
        "**{count} numbers, {inside} inside their reported errors, {holding} also not too wide; reported over true: \
         median {median:.1}, largest {largest:.0}.**\n"
    );
}

fn line(page: &mut String, row: &Row) {
    let known = row.unit.max(row.roundoff);
    let error = if row.error <= row.unit { format!("< {:.1e}", known) } else { format!("{:.1e}", row.error) };
    let reported = row.reported.map_or("none".into(), |reported| format!("{reported:.1e}"));
    let verdict = match (row.is_inside(), row.holds()) {
        (true, true) => "",
        (true, false) => "too wide",
        _ => "**outside**",
    };
    let _ = writeln!(
        page,
        "| {} | {:.0e} | {} | {} | {} | {} | {error} | {reported} | {:.1} | {verdict} |",
        row.case,
        row.accuracy,
        row.number,
        row.found.map_or(String::new(), |found| found.to_string()),
        row.truth.as_deref().unwrap_or(""),
        row.source,
        row.ratio(),
    );
}
