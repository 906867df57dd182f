//! Strides towards a doubling whose place is predicted.
//!
//! Near its birth at `p_0` a doubled branch is a parabola: the parameter moves with the square of the distance s travelled,
//! `p - p_0 ~ s^2` (a period doubling is a pitchfork of the return map taken twice; Kuznetsov 2004, Elements of Applied
//! Bifurcation Theory, sec. 4.5; from memory). So one station tells at which distance a parameter value ahead is met. The
//! multiplier that is 1 at the birth and -1 at the doubling goes about evenly with the parameter: the way left to a little
//! behind the doubling is cut into equal parts of the parameter, as few as the guards against jumps let pass, and never
//! longer than the control of strides allows. A wrong prediction costs little: one too far away bounds nothing, one too
//! near shortens a few strides, after which the control is alone.

/// A doubling expected ahead on a doubled branch.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Ahead {
    /// Parameter value of the branch's birth.
    pub birth: f64,
    /// Parameter value at which the doubling is expected.
    pub value: f64,
    /// Distance from the birth to the first station of the walk.
    pub offset: f64,
}

/// How far behind the expected place the strides reach, as a share of the parameter's way from the birth: enough for a
/// prediction off by a tenth of the interval, and for a bracket whose ends are both clear of the doubling.
const PASS: f64 = 1.1;
/// Largest part of that way in one stride: the guards against jumps ([`crate::guards`]) let a foretold change of the
/// multiplier pass, and Newton's method converges over half the way.
const PART: f64 = 0.56;

impl Ahead {
    /// Whether the place lies farther on where the branch has come to a parameter value.
    pub(crate) fn leads_from(&self, value: f64) -> bool {
        let share = (self.value - self.birth) / (value - self.birth);
        share > 1.0 && share.is_finite()
    }

    /// Share of the way from the birth to the place at a parameter value.
    fn share(&self, value: f64) -> f64 {
        (value - self.birth) / (self.value - self.birth)
    }

    /// The multiplier that is 1 at the birth and -1 at the place, in between evenly, at a parameter value.
    pub(crate) fn multiplier(&self, value: f64) -> f64 {
        1.0 - 2.0 * self.share(value).clamp(0.0, PASS)
    }

    /// The next stride from a station at a parameter value and distance along the walk, where the control proposes one;
    /// nothing where the branch goes another way or is past the place.
    pub(crate) fn stride(&self, value: f64, distance: f64, proposed: f64) -> Option<f64> {
        if !self.leads_from(value) {
            return None;
        }
        let travelled = self.offset + distance;
        let share = self.share(value);
        let left = PASS - share;
        let part = left / (left / PART).ceil();
        let reach = travelled * ((share + part) / share).sqrt();
        Some((reach - travelled).min(proposed))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Exact: on the parabola p = s^2 from s = 0.2, the place 1 lies at s = 1.
    #[test]
    fn equal_parts_end_behind_the_place() {
        let ahead = Ahead { birth: 0.0, value: 1.0, offset: 0.2 };
        let mut s: f64 = 0.2;
        let mut passed = Vec::new();
        while let Some(stride) = ahead.stride(s * s, s - 0.2, 1.0) {
            s += stride;
            passed.push(s * s);
        }
        // From 0.04 to 1.1 in parts of at most 0.56.
        assert_eq!(passed.len(), 2, "{passed:?}");
        let wanted = (1..=2).map(|k| 0.04 + 1.06 * f64::from(k) / 2.0);
        assert!(passed.iter().zip(wanted).all(|(p, wanted)| (p - wanted).abs() < 1e-12), "{passed:?}");
        assert_eq!(ahead.stride(0.04, 0.0, 0.1), Some(0.1), "never longer than proposed");
    }

    #[test]
    fn a_branch_that_goes_the_other_way_is_followed_freely() {
        let ahead = Ahead { birth: 0.0, value: 1.0, offset: 0.2 };
        assert_eq!(ahead.stride(-0.04, 0.0, 0.3), None);
        assert_eq!(ahead.stride(0.0, 0.0, 0.3), None);
        assert_eq!(ahead.stride(1.01, 0.9, 0.3), None);
    }
}
