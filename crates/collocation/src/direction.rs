//! The direction of the trivial multiplier along the interval maps.
//!
//! The rate f(u) satisfies the linear equation up to the residual of the profile, of order m+1 inside mesh intervals
//! and 2m at mesh points (superconvergence). A direction that the maps do not carry along exactly, taken as if they did,
//! perturbs every multiplier. So inside an interval the rate is replaced by what the maps make of the rate at the start of
//! the interval, unless it arrives at the next mesh point worse than the rates themselves do from piece to piece: a
//! repelling direction may have amplified its error.

/// Maps of all pieces.
pub(crate) struct Directions<'a> {
    /// Maps, n x n row-major.
    pub maps: &'a [f64],
    /// Sizes of the n states.
    pub scales: &'a [f64],
}

impl Directions<'_> {
    /// Replaces the rates `flow`, n numbers a piece, inside mesh intervals of the given numbers of pieces.
    pub(crate) fn carry(&self, flow: &mut [f64], pieces: impl Iterator<Item = usize>) {
        let n = self.scales.len();
        let (mut carried, mut image) = (Vec::new(), vec![0.0; n]);
        let mut first = 0;
        for count in pieces {
            let at = |piece: usize| (first + piece) * n % flow.len();
            carried.clear();
            carried.extend_from_slice(&flow[at(0)..at(0) + n]);
            let mut worst = 0.0f64;
            for k in 0..count {
                self.apply(first + k, &flow[at(k)..at(k) + n], &mut image);
                worst = worst.max(self.distance(&image, &flow[at(k + 1)..at(k + 1) + n]));
                self.apply(first + k, &carried[k * n..], &mut image);
                carried.extend_from_slice(&image);
            }
            if self.distance(&image, &flow[at(count)..at(count) + n]) <= worst {
                flow[first * n..(first + count) * n].copy_from_slice(&carried[..count * n]);
            }
            first += count;
        }
    }

    fn apply(&self, piece: usize, direction: &[f64], image: &mut [f64]) {
        let n = self.scales.len();
        let map = &self.maps[piece * n * n..(piece + 1) * n * n];
        for (sum, row) in image.iter_mut().zip(map.chunks_exact(n)) {
            *sum = row.iter().zip(direction).map(|(a, b)| a * b).sum();
        }
    }

    /// Distance of `a` from `b`, relative to b, in scaled states.
    fn distance(&self, a: &[f64], b: &[f64]) -> f64 {
        let (mut difference, mut size) = (0.0, 0.0);
        for ((a, b), scale) in a.iter().zip(b).zip(self.scales) {
            difference += ((a - b) / scale).powi(2);
            size += (b / scale).powi(2);
        }
        (difference / size).sqrt()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// By hand: the rate (1, 0) with an error in the second state, which two maps damp or amplify.
    #[test]
    fn the_rate_at_the_mesh_point_is_carried_unless_it_arrives_worse() {
        let maps = [1.0, 0.0, 0.0, 0.1, 1.0, 0.0, 0.0, 0.1];
        let mut flow = [1.0, 1e-12, 1.0, 1e-6];
        Directions { maps: &maps, scales: &[1.0; 2] }.carry(&mut flow, [2].into_iter());
        assert_eq!(flow, [1.0, 1e-12, 1.0, 0.1 * 1e-12]);
        let maps = [1.0, 0.0, 0.0, 1e4, 1.0, 0.0, 0.0, 1e4];
        let mut flow = [1.0, 1e-12, 1.0, 1e-10];
        Directions { maps: &maps, scales: &[1.0; 2] }.carry(&mut flow, [2].into_iter());
        assert_eq!(flow, [1.0, 1e-12, 1.0, 1e-10]);
    }
}
