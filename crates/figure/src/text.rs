//! Lettering: widths of words, and the few marks inside them.
//!
//! A string may hold four marks from Unicode's private area (slanted on and off, raised on and off); the canvas
//! turns them into `<tspan>` elements. Text of the user is cleaned of them first.
//! Widths are those of Helvetica (Adobe Font Metrics, from memory), which Arial and Liberation Sans share.

pub(crate) const SLANTED: char = '\u{E000}';
pub(crate) const UPRIGHT: char = '\u{E001}';
pub(crate) const RAISED: char = '\u{E002}';
pub(crate) const LEVEL: char = '\u{E003}';

/// Raised characters are this much smaller: 6 pt beside 8 pt, the least that publishers allow.
pub(crate) const RAISED_SIZE: f64 = 0.75;

/// Fonts that stand in for Arial may be this much wider; whatever must not be cut or touched reckons with it.
pub(crate) const STAND_IN: f64 = 1.17;

/// Widths of the characters from space to `~` in thousandths of the font size.
const WIDTHS: [u16; 95] = [
    278, 278, 355, 556, 556, 889, 667, 191, 333, 333, 389, 584, 278, 333, 278, 278, // space to /
    556, 556, 556, 556, 556, 556, 556, 556, 556, 556, 278, 278, 584, 584, 584, 556, // 0 to ?
    1015, 667, 667, 722, 722, 667, 611, 778, 722, 278, 500, 667, 556, 833, 722, 778, // @ to O
    667, 778, 722, 667, 611, 722, 667, 944, 667, 667, 611, 278, 278, 278, 469, 556, // P to _
    333, 556, 556, 500, 556, 556, 278, 556, 556, 222, 222, 500, 222, 833, 556, 556, // ` to o
    556, 556, 333, 500, 278, 556, 500, 722, 500, 500, 500, 334, 260, 334, 584, // p to ~
];

/// Width of a line of text in the unit of `size`.
pub(crate) fn width(text: &str, size: f64) -> f64 {
    let mut scale = 1.0;
    let mut sum = 0.0;
    for letter in text.chars() {
        match letter {
            RAISED => scale = RAISED_SIZE,
            LEVEL => scale = 1.0,
            SLANTED | UPRIGHT => {}
            letter => sum += scale * f64::from(letter_width(letter)),
        }
    }
    sum * size / 1000.0
}

fn letter_width(letter: char) -> u16 {
    match letter {
        ' '..='~' => WIDTHS[letter as usize - ' ' as usize],
        '\u{2009}' => 200,
        '\u{2026}' => 1000,
        // Greek and accented letters, the minus sign: none is wider than this in the fonts asked for.
        '\u{80}'..='\u{2AFF}' => 780,
        // Scripts of square characters.
        _ => 1000,
    }
}

/// A text of the user without characters that XML forbids and without our own marks.
pub(crate) fn clean(text: &str) -> String {
    let forbidden = |letter: char| {
        letter.is_control() || matches!(letter, SLANTED..=LEVEL | '\u{FFFE}' | '\u{FFFF}' | '\u{2028}' | '\u{2029}')
    };
    let spaced: String = text.chars().map(|letter| if letter.is_whitespace() { ' ' } else { letter }).collect();
    spaced.trim().chars().filter(|letter| !forbidden(*letter)).collect()
}

/// The name of a quantity: a single letter stands slanted (ISO 80000-2: variables), words upright.
pub(crate) fn quantity(label: &str) -> String {
    let label = clean(label);
    let mut letters = label.chars();
    match (letters.next(), letters.next()) {
        (Some(letter), None) if letter.is_alphabetic() => format!("{SLANTED}{letter}{UPRIGHT}"),
        _ => label,
    }
}

/// A unit with its powers raised and a centred dot for a product: `m^3*s^-1`.
pub(crate) fn unit(unit: &str) -> String {
    let mut out = String::new();
    let mut letters = clean(unit).chars().collect::<Vec<_>>().into_iter().peekable();
    while let Some(letter) = letters.next() {
        match letter {
            '^' => {
                let mut power = String::new();
                while let Some(digit) =
                    letters.next_if(|next| next.is_ascii_digit() || (*next == '-' && power.is_empty()))
                {
                    power.push(if digit == '-' { '\u{2212}' } else { digit });
                }
                if power.is_empty() { out.push('^') } else { out.push_str(&raised(&power)) }
            }
            '*' => out.push('\u{B7}'),
            letter => out.push(letter),
        }
    }
    out
}

pub(crate) fn raised(text: &str) -> String {
    format!("{RAISED}{text}{LEVEL}")
}

/// The text, or as much of it as fits with an ellipsis in the middle, where names by descent differ least.
pub(crate) fn shortened(text: &str, size: f64, room: f64) -> String {
    if width(text, size) <= room {
        return text.to_string();
    }
    let letters: Vec<char> = text.chars().filter(|letter| !matches!(*letter, SLANTED..=LEVEL)).collect();
    for kept in (1..letters.len()).rev() {
        let (head, tail) = (kept / 2, kept - kept / 2);
        let short: String =
            letters[..head].iter().chain(&['\u{2026}']).chain(&letters[letters.len() - tail..]).collect();
        if width(&short, size) <= room {
            return short;
        }
    }
    "\u{2026}".to_string()
}

/// Name and unit on at most two lines; the name is shortened where even two are not enough.
pub(crate) fn two_lines(name: &str, unit: &str, size: f64, room: f64) -> Vec<String> {
    let whole = if unit.is_empty() { name.to_string() } else { format!("{name} {unit}") };
    if width(&whole, size) <= room {
        return vec![whole];
    }
    let break_at = whole
        .match_indices(' ')
        .map(|(at, _)| (&whole[..at], &whole[at + 1..]))
        .filter(|(first, second)| width(first, size) <= room && width(second, size) <= room)
        .min_by(|a, b| unevenness(*a, size).total_cmp(&unevenness(*b, size)));
    match break_at {
        Some((first, second)) => vec![first.to_string(), second.to_string()],
        None if unit.is_empty() => vec![shortened(name, size, room)],
        None => vec![shortened(name, size, room), shortened(unit, size, room)],
    }
}

fn unevenness((first, second): (&str, &str), size: f64) -> f64 {
    (width(first, size) - width(second, size)).abs()
}

/// The content of a `<text>` element, already escaped, with the marks made into `<tspan>` elements.
pub(crate) fn marked_up(escaped: &str) -> String {
    let mut out = String::new();
    let (mut slanted, mut high, mut was_high) = (false, false, false);
    let mut run = String::new();
    for letter in escaped.chars() {
        if !matches!(letter, SLANTED..=LEVEL) {
            run.push(letter);
            continue;
        }
        flush(&mut out, &mut run, (slanted, high), &mut was_high);
        match letter {
            SLANTED => slanted = true,
            UPRIGHT => slanted = false,
            RAISED => high = true,
            _ => high = false,
        }
    }
    flush(&mut out, &mut run, (slanted, high), &mut was_high);
    out
}

/// How far powers are raised, in units of their own size.
const RISE: f64 = 0.45;

fn flush(out: &mut String, run: &mut String, (slanted, high): (bool, bool), was_high: &mut bool) {
    if run.is_empty() {
        return;
    }
    let mut attributes = String::new();
    if slanted {
        attributes.push_str(" font-style=\"italic\"");
    }
    match (*was_high, high) {
        (false, true) => attributes.push_str(&format!(" dy=\"-{RISE}em\"")),
        (true, false) => attributes.push_str(&format!(" dy=\"{}em\"", RISE * RAISED_SIZE)),
        _ => {}
    }
    if high {
        attributes.push_str(&format!(" font-size=\"{}%\"", 100.0 * RAISED_SIZE));
    }
    *was_high = high;
    let words = std::mem::take(run);
    if attributes.is_empty() {
        out.push_str(&words)
    } else {
        out.push_str(&format!("<tspan{attributes}>{words}</tspan>"))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Source: Helvetica's metrics, from memory: H 722, i 222, digits 556.
    #[test]
    fn widths_are_those_of_the_font() {
        assert!((width("Hi", 10.0) - 9.44).abs() < 1e-12);
        assert!((width("2026", 10.0) - 22.24).abs() < 1e-12);
        assert!((width(&raised("0"), 10.0) - 4.17).abs() < 1e-12);
    }

    #[test]
    fn units_and_names_are_set_as_print_asks() {
        assert_eq!(
            marked_up(&unit("m^3*s^-1")),
            concat!(
                "m<tspan dy=\"-0.45em\" font-size=\"75%\">3</tspan><tspan dy=\"0.3375em\">·s</tspan>",
                "<tspan dy=\"-0.45em\" font-size=\"75%\">−1</tspan>"
            )
        );
        assert_eq!(marked_up(&quantity("τ")), "<tspan font-style=\"italic\">τ</tspan>");
        assert_eq!(quantity("flow"), "flow");
        assert_eq!(clean("a\u{0}b\u{E000}\nc"), "ab c");
    }

    #[test]
    fn long_lines_are_broken_then_shortened() {
        assert_eq!(two_lines("maximum of level", "(m)", 8.0, 200.0), ["maximum of level (m)"]);
        assert_eq!(two_lines("maximum of level", "(m)", 8.0, 50.0), ["maximum", "of level (m)"]);
        let room = 40.0;
        for line in two_lines("aVeryLongNameWithoutAnySpaceAtAll", "(kg/m)", 8.0, room) {
            assert!(width(&line, 8.0) <= room, "{line}");
        }
    }
}
