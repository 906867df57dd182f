//! Reduction of the chain of links.
//!
//! Two neighbouring links `A u_l + E u_m = r`, `A' u_m + E' u_e = r'` are stacked and the 2n x n column
//! `[E; A']` is factored orthogonally: the n rows that no longer see u_m are the new link. Orthogonal
//! because partial pivoting can grow exponentially on exactly these matrices (S. J. Wright 1992, SIAM J.
//! Sci. Stat. Comput. 13:742; 1993, SIAM J. Sci. Comput. 14:231). Storage per merge: 2n x 3n row-major,
//! columns `[u_m | u_l | u_e]`, reflectors below the diagonal, and n factors tau.
//!
//! The plan of merges depends on the number of links alone: [`SEGMENTS`] stretches are reduced link by
//! link (they may run side by side), then the stretches one after the other.

use crate::dense::{axpy, dot, householder};

/// Stretches a long chain is cut into. Eight fill the lanes of the widest vector units and feed both cores;
/// more only lengthen the serial tail.
const SEGMENTS: usize = 8;
/// Links below which cutting the chain gains nothing.
const CUT_FROM: usize = 4 * SEGMENTS;

/// Link `right` is merged into link `left`; node `right` vanishes, the new link ends at node `end`.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(crate) struct Merge {
    pub left: usize,
    pub right: usize,
    pub end: usize,
}

/// The merges that reduce `links` links to one, in order.
pub(crate) fn plan(links: usize) -> Vec<Merge> {
    let segments = if links >= CUT_FROM { SEGMENTS } else { 1 };
    let start = |segment: usize| segment * links / segments;
    let mut plan = Vec::with_capacity(links.saturating_sub(1));
    for segment in 0..segments {
        let left = start(segment);
        plan.extend((left + 1..start(segment + 1)).map(|right| Merge { left, right, end: right + 1 }));
    }
    plan.extend((1..segments).map(|segment| Merge { left: 0, right: start(segment), end: start(segment + 1) }));
    plan
}

/// Numbers one merge stores: the stacked matrix and the factors tau.
pub(crate) fn merge_len(n: usize) -> usize {
    6 * n * n + n
}

/// Merges two links (each A then E, n x n row-major): factors into `store`, writes the new link into `left`; `scratch`
/// has 5n numbers.
pub(crate) fn merge(n: usize, left: &mut [f64], right: &[f64], store: &mut [f64], scratch: &mut [f64]) {
    let width = 3 * n;
    let (matrix, taus) = store.split_at_mut(6 * n * n);
    let (a_left, e_left) = left.split_at(n * n);
    let (a_right, e_right) = right.split_at(n * n);
    for r in 0..n {
        let of = r * n..(r + 1) * n;
        let top = &mut matrix[r * width..(r + 1) * width];
        top[..n].copy_from_slice(&e_left[of.clone()]);
        top[n..2 * n].copy_from_slice(&a_left[of.clone()]);
        top[2 * n..].fill(0.0);
        let bottom = &mut matrix[(n + r) * width..(n + r + 1) * width];
        bottom[..n].copy_from_slice(&a_right[of.clone()]);
        bottom[n..2 * n].fill(0.0);
        bottom[2 * n..].copy_from_slice(&e_right[of]);
    }
    for q in 0..n {
        taus[q] = reflect_column(n, q, matrix, scratch);
    }
    let (a_left, e_left) = left.split_at_mut(n * n);
    for r in 0..n {
        let row = &matrix[(n + r) * width..(n + r + 1) * width];
        a_left[r * n..(r + 1) * n].copy_from_slice(&row[n..2 * n]);
        e_left[r * n..(r + 1) * n].copy_from_slice(&row[2 * n..]);
    }
}

/// One Householder step on column `q` of the stacked matrix, applied to all later columns.
fn reflect_column(n: usize, q: usize, matrix: &mut [f64], scratch: &mut [f64]) -> f64 {
    let width = 3 * n;
    let length = 2 * n - q;
    let (column, sums) = scratch.split_at_mut(2 * n);
    let column = &mut column[..length];
    for (r, value) in column.iter_mut().enumerate() {
        *value = matrix[(q + r) * width + q];
    }
    let tau = householder(column);
    matrix[q * width + q] = column[0];
    for r in 1..length {
        matrix[(q + r) * width + q] = column[r];
    }
    if tau == 0.0 {
        return 0.0;
    }
    let (sums, later) = (&mut sums[..width - q - 1], q * width + q + 1);
    let row = |r: usize| later + r * width..later + r * width + width - q - 1;
    sums.copy_from_slice(&matrix[row(0)]);
    for r in 1..length {
        axpy(sums, column[r], &matrix[row(r)]);
    }
    sums.iter_mut().for_each(|sum| *sum *= tau);
    axpy(&mut matrix[row(0)], -1.0, sums);
    for r in 1..length {
        axpy(&mut matrix[row(r)], -column[r], sums);
    }
    tau
}

/// Applies reflection `q` of a merge to the stacked vector `[top; bottom]` (n numbers each).
fn apply_reflection(n: usize, q: usize, store: &[f64], top: &mut [f64], bottom: &mut [f64]) {
    let (width, tau) = (3 * n, store[6 * n * n + q]);
    if tau == 0.0 {
        return;
    }
    let entry = |r: usize| store[r * width + q];
    let mut sum = top[q];
    for r in q + 1..n {
        sum += entry(r) * top[r];
    }
    for r in 0..n {
        sum += entry(n + r) * bottom[r];
    }
    sum *= tau;
    top[q] -= sum;
    for r in q + 1..n {
        top[r] -= sum * entry(r);
    }
    for r in 0..n {
        bottom[r] -= sum * entry(n + r);
    }
}

/// Row operations of a merge on right sides: `left` becomes that of the new link, `right` that of the pivot rows.
pub(crate) fn reduce_column(n: usize, store: &[f64], left: &mut [f64], right: &mut [f64]) {
    for q in 0..n {
        apply_reflection(n, q, store, left, right);
    }
    left.swap_with_slice(right);
}

/// Transposed row operations: inverse order of [`reduce_column`].
pub(crate) fn expand_row(n: usize, store: &[f64], left: &mut [f64], right: &mut [f64]) {
    left.swap_with_slice(right);
    for q in (0..n).rev() {
        apply_reflection(n, q, store, left, right);
    }
}

/// The vanished node from the ends of the merged link: `u_m = R^-1 (g - V_l u_l - V_e u_e)`.
pub(crate) fn back_substitute(n: usize, store: &[f64], g: &[f64], ends: (&[f64], &[f64]), out: &mut [f64]) {
    let width = 3 * n;
    for q in (0..n).rev() {
        let row = &store[q * width..(q + 1) * width];
        let known = dot(&row[q + 1..n], &out[q + 1..]) + dot(&row[n..2 * n], ends.0) + dot(&row[2 * n..], ends.1);
        out[q] = (g[q] - known) / row[q];
    }
}

/// Eliminates the vanished node from a border row: `middle` becomes y = row R^-1, the ends lose y V.
pub(crate) fn reduce_row(n: usize, store: &[f64], middle: &mut [f64], ends: (&mut [f64], &mut [f64])) {
    let width = 3 * n;
    for q in 0..n {
        let row = &store[q * width..(q + 1) * width];
        let value = middle[q] / row[q];
        middle[q] = value;
        axpy(&mut middle[q + 1..], -value, &row[q + 1..n]);
        axpy(ends.0, -value, &row[n..2 * n]);
        axpy(ends.1, -value, &row[2 * n..]);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_link_but_the_first_is_merged_once_and_spans_add_up() {
        for links in [1, 2, 7, 31, 32, 33, 100] {
            let mut end: Vec<usize> = (1..=links).collect();
            for Merge { left, right, end: reached } in plan(links) {
                assert_eq!(end[left], right, "{links} links: a merge must join neighbours");
                assert_eq!(end[right], reached);
                end[left] = reached;
                end[right] = usize::MAX;
            }
            assert_eq!(end[0], links);
            assert!(end[1..].iter().all(|&e| e == usize::MAX));
        }
    }
}
