//! Condensation of one interval.
//!
//! The R = inner + n rows of an interval see `[w | u_left | u_right]` (inner, n and n columns). LU with row
//! pivoting on the w columns leaves n rows that see only the ends: the link `A u_left + E u_right = r`.
//! Storage: the block itself, row-major R x (inner + 2n): on and above the diagonal of the first `inner`
//! rows U and V, below it the multipliers L, in the last n rows and 2n columns A and E.
//! Source: de Boor & Weiss 1980 (ACM TOMS 6:80) for the structure; Golub & Van Loan 2013, sec. 3.4.

use faer::linalg::matmul::matmul;
use faer::{Accum, MatMut, MatRef, Par};

use crate::cyclic::Shape;
use crate::dense::{axpy, dot, row_pair};

/// Rows from which a block is factored in panels: below, the updates are too small to gain from it.
const PANELS_FROM: usize = 64;
/// Columns of a panel: enough for the product that follows to be limited by arithmetic, few enough to stay in the cache.
const PANEL: usize = 32;

/// Factors one block in place; false where the w columns are singular or not finite.
pub(crate) fn factor(shape: Shape, block: &mut [f64], swaps: &mut [u32]) -> bool {
    let (width, rows) = (shape.width(), shape.rows());
    let panel = if rows < PANELS_FROM { shape.inner } else { PANEL };
    let mut from = 0;
    while from < shape.inner {
        let to = (from + panel).min(shape.inner);
        // What lies right of the last panel is updated at once.
        let reach = if to - from < shape.inner { to } else { width };
        if !factor_columns(block, width, (from, to, reach), swaps) {
            return false;
        }
        if reach < width {
            update(block, width, (from, to));
        }
        from = to;
    }
    true
}

/// LU with row pivoting of columns `from..to` over the rows from `from` on, carried out up to column `reach`.
fn factor_columns(
    block: &mut [f64],
    width: usize,
    (from, to, reach): (usize, usize, usize),
    swaps: &mut [u32],
) -> bool {
    let rows = block.len() / width;
    for q in from..to {
        let mut pivot = q;
        let mut largest = block[q * width + q].abs();
        for r in q + 1..rows {
            let candidate = block[r * width + q].abs();
            if candidate > largest {
                (pivot, largest) = (r, candidate);
            }
        }
        swaps[q] = pivot as u32;
        if pivot != q {
            let (top, bottom) = block.split_at_mut(pivot * width);
            top[q * width..(q + 1) * width].swap_with_slice(&mut bottom[..width]);
        }
        if largest == 0.0 || !largest.is_finite() {
            return false;
        }
        let inverse = 1.0 / block[q * width + q];
        for r in q + 1..rows {
            let (source, target) = row_pair(block, width, q, r);
            let factor = target[q] * inverse;
            target[q] = factor;
            axpy(&mut target[q + 1..reach], -factor, &source[q + 1..reach]);
        }
    }
    true
}

/// The operations of a panel on the columns right of it: on its own rows one by one, on those below as one product
/// (Golub & Van Loan 2013, sec. 3.2.11).
fn update(block: &mut [f64], width: usize, (from, to): (usize, usize)) {
    for r in from + 1..to {
        for q in from..r {
            let (source, target) = row_pair(block, width, q, r);
            let factor = target[q];
            axpy(&mut target[to..], -factor, &source[to..]);
        }
    }
    let below = block.len() / width - to;
    let (top, bottom) = block.split_at_mut(to * width);
    let upper = MatRef::from_row_major_slice(top, to, width).submatrix(from, to, to - from, width - to);
    let (left, right) = MatMut::from_row_major_slice_mut(bottom, below, width).split_at_col_mut(to);
    let lower = left.as_ref().submatrix(0, from, below, to - from);
    matmul(right, Accum::Add, lower, upper, -1.0, Par::Seq);
}

/// Applies the row operations to a right side: the first `inner` numbers become those of the pivot rows,
/// the last n those of the link.
pub(crate) fn reduce_column(shape: Shape, block: &[f64], swaps: &[u32], r: &mut [f64]) {
    let width = shape.width();
    for q in 0..shape.inner {
        r.swap(q, swaps[q] as usize);
    }
    for row in 1..shape.rows() {
        let known = row.min(shape.inner);
        r[row] -= dot(&block[row * width..row * width + known], &r[..known]);
    }
}

/// Transposed row operations: from multipliers of pivot rows and link back to those of the interval's rows.
pub(crate) fn expand_row(shape: Shape, block: &[f64], swaps: &[u32], psi: &mut [f64]) {
    let width = shape.width();
    for row in (1..shape.rows()).rev() {
        let known = row.min(shape.inner);
        let value = psi[row];
        axpy(&mut psi[..known], -value, &block[row * width..row * width + known]);
    }
    for q in (0..shape.inner).rev() {
        psi.swap(q, swaps[q] as usize);
    }
}

/// Interior unknowns from the ends: `w = U^-1 (g - V [u_left, u_right])`.
pub(crate) fn back_substitute(shape: Shape, block: &[f64], g: &[f64], nodes: &mut [f64]) {
    let (n, inner, width) = (shape.n, shape.inner, shape.width());
    let (left, rest) = nodes.split_at_mut(n);
    let (w, right) = rest.split_at_mut(inner);
    for q in (0..inner).rev() {
        let row = &block[q * width..(q + 1) * width];
        let known =
            dot(&row[q + 1..inner], &w[q + 1..]) + dot(&row[inner..inner + n], left) + dot(&row[inner + n..], right);
        w[q] = (g[q] - known) / row[q];
    }
}

/// Eliminates the interior of a border row in place: `row` holds `[u_left, w, u_right]`; w becomes
/// y = row_w U^-1, the ends lose y V.
pub(crate) fn reduce_row(shape: Shape, block: &[f64], row: &mut [f64]) {
    let (n, inner, width) = (shape.n, shape.inner, shape.width());
    let (left, rest) = row.split_at_mut(n);
    let (y, right) = rest.split_at_mut(inner);
    for q in 0..inner {
        let source = &block[q * width..(q + 1) * width];
        let value = y[q] / source[q];
        y[q] = value;
        if value != 0.0 {
            axpy(&mut y[q + 1..], -value, &source[q + 1..inner]);
            axpy(left, -value, &source[inner..inner + n]);
            axpy(right, -value, &source[inner + n..]);
        }
    }
}
