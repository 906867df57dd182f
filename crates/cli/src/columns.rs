//! Rows of cells as lines of text with straight columns.

/// Widest column that is padded; a longer cell runs over.
const WIDEST: usize = 200;

/// Two spaces between columns, none at the end of a line; every line ends with a line feed.
pub fn aligned<const N: usize>(rows: &[[String; N]]) -> String {
    let mut widths = [0; N];
    for row in rows {
        row.iter().zip(&mut widths).for_each(|(cell, width)| *width = (*width).max(cell.chars().count().min(WIDEST)));
    }
    let mut text = String::new();
    for row in rows {
        let cells: Vec<String> = row.iter().zip(widths).map(|(cell, width)| format!("{cell:width$}")).collect();
        text.push_str(cells.join("  ").trim_end());
        text.push('\n');
    }
    text
}

/// A heading with aligned rows under it, moved in by two spaces.
pub fn section<const N: usize>(heading: &str, rows: &[[String; N]]) -> String {
    let body = aligned(rows);
    let lines: String =
        body.lines().map(|line| if line.is_empty() { "\n".into() } else { format!("  {line}\n") }).collect();
    format!("{heading}\n{lines}")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn columns_are_straight_in_any_script() {
        let rows = [["τ".to_string(), "1".into()], ["gain".into(), "2".into()], ["gain".into(), String::new()]];
        assert_eq!(aligned(&rows), "τ     1\ngain  2\ngain\n");
        assert_eq!(section("all", &rows[..1]), "all\n  τ  1\n");
    }
}
