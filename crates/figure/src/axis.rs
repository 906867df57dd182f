//! Scales: the range shown, ticks at round numbers, and what the axis is called.
//!
//! All places are in *drawn* numbers: the value itself on a linear scale, its decimal logarithm on a
//! logarithmic one.

use crate::number::{decimal, power_of_ten};
use crate::text;

/// A tick, named or (between decades) nameless.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Tick {
    pub(crate) at: f64,
    pub(crate) name: Option<String>,
}

/// One scale.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Axis {
    pub(crate) lo: f64,
    pub(crate) hi: f64,
    pub(crate) ticks: Vec<Tick>,
    /// The named numbers are to be multiplied by ten to this.
    exponent: i32,
    /// A number taken off before naming, where only late digits differ.
    offset: Option<String>,
}

/// Numbers this close, relative to their size, are one number: spans below it are roundoff.
const SAME: f64 = 1e-12;
/// Share of the span left free at each side of the data.
const MARGIN: f64 = 0.04;
/// Plain numbers are shown from here ...
const SMALLEST_PLAIN: f64 = 1e-3;
/// ... to here, a common power of ten beyond.
const LARGEST_PLAIN: f64 = 1e6;
/// More digits than this in a tick's name, and the leading ones move to the axis label.
const MOST_DIGITS: i32 = 7;
/// Anything larger than this would overflow when differences are taken.
pub(crate) const LARGEST: f64 = 1e300;

/// The range that shows data from `lo` to `hi`, with some room around.
pub(crate) fn around(lo: f64, hi: f64) -> (f64, f64) {
    let size = lo.abs().max(hi.abs());
    if hi - lo > SAME * size && hi - lo > 1.0 / LARGEST {
        let room = MARGIN * (hi - lo);
        return (lo - room, hi + room);
    }
    let room = if size > 1.0 / LARGEST { 0.05 * size } else { 1.0 };
    (0.5 * (lo + hi) - room, 0.5 * (lo + hi) + room)
}

impl Axis {
    /// A linear scale with at most `most` named ticks.
    pub(crate) fn linear(lo: f64, hi: f64, most: usize) -> Self {
        let (places, power) = round_places(lo, hi, most.max(1));
        Self::named(lo, hi, places, power)
    }

    /// A logarithmic scale from ten to the `lo` to ten to the `hi`.
    pub(crate) fn logarithmic(lo: f64, hi: f64, most: usize) -> Self {
        /// Below this many decades hardly two powers of ten show: round numbers are named instead.
        const FEW_DECADES: f64 = 0.8;
        if hi - lo < FEW_DECADES && lo.abs().max(hi.abs()) < LARGEST.log10() {
            return Self::bent(lo, hi, most);
        }
        let stride = ((hi - lo) / most.max(1) as f64).ceil().max(1.0);
        let (first, last) = ((lo / stride).ceil() as i64, (hi / stride).floor() as i64);
        let decades: Vec<f64> = (first..=last).map(|k| k as f64 * stride).collect();
        let few = 3 * decades.len() <= most;
        let mut ticks: Vec<Tick> =
            decades.iter().map(|&at| Tick { at, name: Some(power_name(1, at as i32)) }).collect();
        if stride == 1.0 {
            let between = (lo.floor() as i32..=hi.floor() as i32).flat_map(|decade| (2..10).map(move |m| (m, decade)));
            ticks.extend(
                between
                    .map(|(m, decade)| Tick {
                        at: f64::from(decade) + f64::from(m).log10(),
                        name: (few && (m == 2 || m == 5)).then(|| power_name(m, decade)),
                    })
                    .filter(|tick| (lo..=hi).contains(&tick.at)),
            );
        }
        Self { lo, hi, ticks, exponent: 0, offset: None }
    }

    /// A short logarithmic scale: the ticks of a linear one, moved to where they belong.
    fn bent(lo: f64, hi: f64, most: usize) -> Self {
        let mut axis = Self::linear(10f64.powf(lo), 10f64.powf(hi), most);
        axis.ticks.iter_mut().for_each(|tick| tick.at = tick.at.log10());
        axis.ticks.retain(|tick| (lo..=hi).contains(&tick.at));
        Self { lo, hi, ..axis }
    }

    fn named(lo: f64, hi: f64, places: Vec<f64>, power: i32) -> Self {
        let largest = places.iter().fold(0.0f64, |most, place| most.max(place.abs()));
        let (exponent, digits) = scale_of(largest, power);
        if digits <= MOST_DIGITS {
            let name = |at: f64| decimal(at / 10f64.powi(exponent), (exponent - power).max(0) as usize);
            let ticks = places.iter().map(|&at| Tick { at, name: Some(name(at)) }).collect();
            return Self { lo, hi, ticks, exponent, offset: None };
        }
        // Only late digits differ: count from a round number below the range.
        let coarse = (hi - lo).log10().ceil() as i32;
        let base = (lo / 10f64.powi(coarse)).floor();
        let fine_per_coarse = 10f64.powi(coarse - power);
        let rest = |at: f64| (at / 10f64.powi(power)).round() - base * fine_per_coarse;
        let largest = places.iter().fold(0.0f64, |most, &place| most.max(rest(place).abs() * 10f64.powi(power)));
        let (exponent, _) = scale_of(largest, power);
        let name = |at: f64| decimal(rest(at) * 10f64.powi(power - exponent), (exponent - power).max(0) as usize);
        let ticks = places.iter().map(|&at| Tick { at, name: Some(name(at)) }).collect();
        let offset = decimal(base * 10f64.powi(coarse), (-coarse).max(0) as usize);
        Self { lo, hi, ticks, exponent, offset: Some(offset) }
    }

    /// Where a drawn number lies between the ends, 0 to 1.
    pub(crate) fn fraction(&self, at: f64) -> f64 {
        (at - self.lo) / (self.hi - self.lo)
    }

    /// Width of the widest tick name.
    pub(crate) fn widest(&self, size: f64) -> f64 {
        self.names().map(|name| text::width(name, size)).fold(0.0, f64::max)
    }

    pub(crate) fn names(&self) -> impl Iterator<Item = &str> {
        self.ticks.iter().filter_map(|tick| tick.name.as_deref())
    }

    /// The name of the axis and, apart from it, what stands in parentheses.
    pub(crate) fn label(&self, quantity: &str, unit: &str) -> (String, String) {
        let unit = text::unit(unit);
        let name = match &self.offset {
            Some(offset) => match offset.strip_prefix('\u{2212}') {
                Some(size) => format!("{quantity} + {size}"),
                None => format!("{quantity} \u{2212} {offset}"),
            },
            None => quantity.to_string(),
        };
        let bracket = match (self.exponent, unit.is_empty()) {
            (0, true) => String::new(),
            (0, false) => format!("({unit})"),
            (exponent, true) => format!("({})", power_of_ten(exponent)),
            // A unit such as 1/s: the power of ten stands for the one.
            (exponent, false) if unit.starts_with("1/") => format!("({}{})", power_of_ten(exponent), &unit[1..]),
            // Not to be parted by a line break.
            (exponent, false) => format!("({}\u{A0}{unit})", power_of_ten(exponent)),
        };
        (name, bracket)
    }
}

/// A whole multiple of a power of ten: in decimals where they are short.
fn power_name(multiple: i32, decade: i32) -> String {
    match (multiple, decade) {
        (_, -3..=4) => decimal(f64::from(multiple) * 10f64.powi(decade), (-decade).max(0) as usize),
        (1, _) => power_of_ten(decade),
        _ => format!("{multiple}×{}", power_of_ten(decade)),
    }
}

/// The most multiples of 1, 2 or 5 times a power of ten in the range that are not more than `most`,
/// and that power.
fn round_places(lo: f64, hi: f64, most: usize) -> (Vec<f64>, i32) {
    let finest = ((hi - lo) / (most + 1) as f64).log10().floor() as i32;
    (finest..finest + 4)
        .flat_map(|power| [1.0, 2.0, 5.0].map(|multiple| (multiple, power)))
        .map(|(multiple, power)| (multiples(lo, hi, multiple, power), power))
        .find(|(places, _)| places.len() <= most)
        .unwrap_or((vec![lo], finest))
}

/// Multiples of `multiple` times ten to `power` from `lo` to `hi`, each rounded once only.
fn multiples(lo: f64, hi: f64, multiple: f64, power: i32) -> Vec<f64> {
    let scaled = |k: f64| {
        if power < 0 { k * multiple / 10f64.powi(-power) } else { k * multiple * 10f64.powi(power) }
    };
    let step = multiple * 10f64.powi(power);
    // A range end that is itself a tick must not be lost to roundoff.
    let slack = 1e-9;
    let (first, last) = ((lo / step - slack).ceil(), (hi / step + slack).floor());
    let count = (last - first).clamp(-1.0, 1000.0) as i64;
    (0..=count).map(|k| scaled(first + k as f64).clamp(lo, hi)).collect()
}

/// The common power of ten (a multiple of three) for numbers up to `largest` in steps of ten to
/// `power`, and how many digits the longest then has.
fn scale_of(largest: f64, power: i32) -> (i32, i32) {
    if largest == 0.0 {
        return (0, 1);
    }
    let order = largest.log10().floor() as i32;
    let plain = (SMALLEST_PLAIN..LARGEST_PLAIN).contains(&largest);
    let exponent = if plain { 0 } else { 3 * order.div_euclid(3) };
    (exponent, (order - exponent).max(0) + 1 + (exponent - power).max(0))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn names(axis: &Axis) -> Vec<&str> {
        axis.names().collect()
    }

    #[test]
    fn ticks_are_round_numbers_inside_the_range() {
        let axis = Axis::linear(0.43, 2.07, 6);
        assert_eq!(names(&axis), ["0.5", "1.0", "1.5", "2.0"]);
        let axis = Axis::linear(-1.0, 1.0, 5);
        assert_eq!(names(&axis), ["\u{2212}1.0", "\u{2212}0.5", "0.0", "0.5", "1.0"]);
    }

    #[test]
    fn small_and_large_numbers_share_a_power_of_ten() {
        let axis = Axis::linear(0.0, 3.2e-9, 5);
        assert_eq!(names(&axis), ["0", "1", "2", "3"]);
        assert_eq!(axis.label("level", "m"), ("level".into(), format!("({}\u{A0}m)", power_of_ten(-9))));
        let axis = Axis::linear(1e9, 4e9, 5);
        assert_eq!(names(&axis), ["1", "2", "3", "4"]);
        assert_eq!(axis.label("level", "").1, format!("({})", power_of_ten(9)));
    }

    #[test]
    fn numbers_that_differ_late_are_counted_from_a_round_one() {
        let axis = Axis::linear(5.187_812_31, 5.187_812_35, 5);
        assert_eq!(names(&axis), ["10", "20", "30", "40"]);
        assert_eq!(axis.label("gain", "").0, "gain \u{2212} 5.187\u{2009}812\u{2009}3");
    }

    #[test]
    fn decades_are_named_and_thinned() {
        assert_eq!(names(&Axis::logarithmic(-2.1, 2.2, 6)), ["0.01", "0.1", "1", "10", "100"]);
        let wide = Axis::logarithmic(-200.0, 40.0, 6);
        assert!(names(&wide).len() <= 7 && names(&wide)[0].starts_with("10"), "{wide:?}");
        assert_eq!(names(&Axis::logarithmic(0.0, 0.5, 4)), ["1", "2", "3"]);
        // One decade only: its halves and fifths are named too.
        let mut few = names(&Axis::logarithmic(-0.6, 0.5, 6)).join(" ");
        few.truncate(9);
        assert_eq!(few, "1 0.5 2");
        assert_eq!(power_name(2, -7), format!("2×{}", power_of_ten(-7)));
    }

    #[test]
    fn a_range_without_width_is_opened() {
        assert_eq!(around(2.0, 2.0), (1.9, 2.1));
        assert_eq!(around(0.0, 0.0), (-1.0, 1.0));
        assert!(around(1.0, 1.0 + 1e-15).1 > 1.04);
    }
}
