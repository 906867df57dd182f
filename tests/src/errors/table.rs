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
one, or {WIDEST} times the roundoff unit of the number where the true error is smaller than that by luck. The unit is
2.2e-16 times the size of the number, for a parameter times the width of the asked range if that is larger.

How each error is estimated:

- `period_error` at starts, targets and edges, `error` and `period_error` of a fold, a doubling, a torus point or a crossing,
  and the error of a torus point's angle: the number is computed again on a mesh with every interval halved, and that is what is printed. Its error is a share of the
  difference, twice the factor by which the error of the profile fell from the one mesh to the other (numbers converge
  faster than profiles), plus the roundoff of both solutions carried through the linear system.
- `hopf`: parameter and period of the last ten cycles, on halved meshes, are extrapolated in the square of the
  amplitude; the error is what the last point used changes, plus the errors of all enlarged by their weights.
- `period-blow-up`: how far the limit moves when a point is left out.
- `profile_error` of a cycle: the largest local error, one and a half times what the defect of the equation
  between the Gauss points integrates to in each interval, plus what Newton's method and rounding leave; relative to the
  range of each state. It is held against the largest error over all states and times at the best common phase.

Sources of truth: `exact`, by hand; `independent`, another method in higher precision, or published; `finer`, the same
study with accuracy 1e-12. A truth with fewer digits tells the true error only to a unit of its last digit, a finer
study to its own reported error: the row then shows `<`, and counts as inside if the two agree within the reported
error and that unit. The ratio takes the largest of true error, unit and roundoff unit below. A cycle is one of
those that the branch file keeps.

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
        row.found.map_or(String::new(), |found| format!("{found:?}")),
        row.truth.as_deref().unwrap_or(""),
        row.source,
        row.ratio(),
    );
}
