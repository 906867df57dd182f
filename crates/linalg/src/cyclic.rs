//! The almost block diagonal system of a cycle, factored once and used in four ways.
//!
//! Unknowns, in the order of a profile's nodes: `u_0, w_0, u_1, w_1, ..., u_N` with n numbers in each u and
//! `inner` in each w. Interval i gives R = inner + n rows that see `w_i, u_i, u_(i+1)`. Condensing the
//! intervals and reducing the chain leaves `A u_0 + E u_N = r`. With S the product of all row operations,
//! `S M = [U V; 0 (A E)]`, and the four uses are: S on columns, `U^-1` on columns, `U^-1` on rows, S^T on rows.
//!
//! The n unknowns of a node have sizes of their own, and so have the rows, which are increments of them: pivoting and
//! reflections compare them, so everything is eliminated in units of the sizes ([`Cyclic::set_sizes`]). Without that,
//! rows of large states drown those of small ones: with eight decades between them all digits go.
//!
//! Cost O(N (R^2 W + n^3)) to factor, O(N R W) per use; memory O(N R W).
//! Source: methods of de Boor & Weiss 1980 (ACM TOMS 6:80) and S. J. Wright 1992 (SIAM J. Sci. Stat. Comput. 13:742).

use crate::chain::{self, Merge};
use crate::dense::dot;
use crate::interval;

/// Sizes of a cyclic system.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Shape {
    /// Unknowns at each mesh point.
    pub n: usize,
    /// Unknowns inside each interval, (m-1) n for collocation of degree m.
    pub inner: usize,
    /// Number of intervals N.
    pub intervals: usize,
}

impl Shape {
    /// Rows of one interval, R = inner + n.
    pub fn rows(self) -> usize {
        self.inner + self.n
    }
    /// Columns of one block, `[w | u_left | u_right]`.
    pub fn width(self) -> usize {
        self.inner + 2 * self.n
    }
    /// Rows of all intervals, N R.
    pub fn core_len(self) -> usize {
        self.intervals * self.rows()
    }
    /// Unknowns, N R + n.
    pub fn nodes_len(self) -> usize {
        self.core_len() + self.n
    }
}

/// The interval whose inner block could not be eliminated.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Singular {
    /// Index of the interval, or N for the closing block.
    pub interval: usize,
}

impl std::fmt::Display for Singular {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "the linear system is singular or not finite at interval {}", self.interval)
    }
}

impl std::error::Error for Singular {}

/// A cyclic system: fill the blocks, [`Cyclic::factor`], then use the factors. Filling invalidates the factors.
#[derive(Clone, Debug)]
pub struct Cyclic {
    shape: Shape,
    sizes: Vec<f64>,
    blocks: Vec<f64>,
    swaps: Vec<u32>,
    links: Vec<f64>,
    merges: Vec<f64>,
    plan: Vec<Merge>,
    scratch: Vec<f64>,
}

impl Cyclic {
    /// Allocates everything for `shape`.
    pub fn new(shape: Shape) -> Self {
        let (n, intervals) = (shape.n, shape.intervals);
        Self {
            shape,
            sizes: vec![1.0; n],
            blocks: vec![0.0; intervals * shape.rows() * shape.width()],
            swaps: vec![0; intervals * shape.inner],
            links: vec![0.0; intervals * 2 * n * n],
            merges: vec![0.0; intervals * chain::merge_len(n)],
            plan: chain::plan(intervals),
            scratch: vec![0.0; 5 * n],
        }
    }

    /// Its sizes.
    pub fn shape(&self) -> Shape {
        self.shape
    }

    /// Sets the sizes of the n unknowns of a node, rounded to powers of two, which scale without rounding; 1 at first.
    /// Rows and unknowns come in groups of n, w and all. Blocks must be filled anew in the new units.
    pub fn set_sizes(&mut self, sizes: &[f64]) {
        for (own, size) in self.sizes.iter_mut().zip(sizes) {
            let rounded = size.log2().round().exp2();
            *own = if rounded.is_normal() { rounded } else { 1.0 };
        }
    }

    /// Units of the n unknowns of a node.
    pub fn sizes(&self) -> &[f64] {
        &self.sizes
    }

    /// Block of interval `i`, row-major R x (inner + 2n), columns `[w | u_i | u_(i+1)]`, in units of the sizes: the entry
    /// in a row of state a and a column of state b is that of the plain system times size b over size a.
    pub fn block_mut(&mut self, i: usize) -> &mut [f64] {
        let len = self.shape.rows() * self.shape.width();
        &mut self.blocks[i * len..(i + 1) * len]
    }

    fn block(&self, i: usize) -> &[f64] {
        let len = self.shape.rows() * self.shape.width();
        &self.blocks[i * len..(i + 1) * len]
    }

    fn swaps_of(&self, i: usize) -> &[u32] {
        &self.swaps[i * self.shape.inner..(i + 1) * self.shape.inner]
    }

    fn merge_store(&self, right: usize) -> &[f64] {
        let len = chain::merge_len(self.shape.n);
        &self.merges[right * len..(right + 1) * len]
    }

    /// Factors the blocks in place: [`Cyclic::condense`] for each, then [`Cyclic::join`].
    ///
    /// # Errors
    /// [`Singular`] with the first interval whose inner columns are dependent or not finite.
    pub fn factor(&mut self) -> Result<(), Singular> {
        (0..self.shape.intervals).try_for_each(|i| self.condense(i))?;
        self.join();
        Ok(())
    }

    /// Condenses interval `i`; right after its block is filled that finds it in the cache still.
    ///
    /// # Errors
    /// [`Singular`] where its inner columns are dependent or not finite.
    pub fn condense(&mut self, i: usize) -> Result<(), Singular> {
        let shape = self.shape;
        let (n, inner, width) = (shape.n, shape.inner, shape.width());
        let block_len = shape.rows() * width;
        let block = &mut self.blocks[i * block_len..(i + 1) * block_len];
        let swaps = &mut self.swaps[i * inner..(i + 1) * inner];
        if !interval::factor(shape, block, swaps) {
            return Err(Singular { interval: i });
        }
        let link = &mut self.links[i * 2 * n * n..(i + 1) * 2 * n * n];
        let (a, e) = link.split_at_mut(n * n);
        for r in 0..n {
            let row = &block[(inner + r) * width + inner..(inner + r + 1) * width];
            a[r * n..(r + 1) * n].copy_from_slice(&row[..n]);
            e[r * n..(r + 1) * n].copy_from_slice(&row[n..]);
        }
        Ok(())
    }

    /// Reduces the chain of links, all intervals condensed.
    pub fn join(&mut self) {
        let n = self.shape.n;
        let (link_len, store_len) = (2 * n * n, chain::merge_len(n));
        for &Merge { left, right, .. } in &self.plan {
            let (head, tail) = self.links.split_at_mut(right * link_len);
            let store = &mut self.merges[right * store_len..(right + 1) * store_len];
            let left = &mut head[left * link_len..(left + 1) * link_len];
            chain::merge(n, left, &tail[..link_len], store, &mut self.scratch);
        }
    }

    /// The reduced link `A`, `E` (n x n row-major each) of `A u_0 + E u_N = r`.
    pub fn link(&self) -> (&[f64], &[f64]) {
        let n = self.shape.n;
        (&self.links[..n * n], &self.links[n * n..2 * n * n])
    }

    /// Reduces any number of columns (N R numbers each, one after the other) and border rows (N R + n each) in one pass over
    /// the factors: on long meshes their way from memory is what a pass costs.
    ///
    /// A column is a right side: the row operations S are applied to it, and [`Cyclic::reduced_right`] of it then belongs
    /// to the reduced link. A row loses everything but u_0 and u_N: the places of these hold its reduced coefficients then,
    /// all others y = row U^-1.
    pub fn reduce(&self, columns: &mut [f64], rows: &mut [f64]) {
        let (shape, n, per) = (self.shape, self.shape.n, self.shape.rows());
        let (core_len, nodes_len) = (shape.core_len(), shape.nodes_len());
        for i in 0..shape.intervals {
            let (block, swaps) = (self.block(i), self.swaps_of(i));
            for column in columns.chunks_exact_mut(core_len) {
                interval::reduce_column(shape, block, swaps, &mut column[i * per..(i + 1) * per]);
            }
            for row in rows.chunks_exact_mut(nodes_len) {
                interval::reduce_row(shape, block, &mut row[i * per..(i + 1) * per + n]);
            }
        }
        for merge in &self.plan {
            let store = self.merge_store(merge.right);
            for column in columns.chunks_exact_mut(core_len) {
                let (left, right) = self.two_links(column, merge.left, merge.right);
                chain::reduce_column(n, store, left, right);
            }
            for row in rows.chunks_exact_mut(nodes_len) {
                let (head, tail) = row.split_at_mut(merge.right * per);
                let (middle, after) = tail.split_at_mut(n);
                let end_at = (merge.end - merge.right) * per - n;
                let ends = (&mut head[merge.left * per..merge.left * per + n], &mut after[end_at..end_at + n]);
                chain::reduce_row(n, store, middle, ends);
            }
        }
    }

    /// The n numbers of a reduced column that belong to the reduced link.
    pub fn reduced_right<'a>(&self, column: &'a [f64]) -> &'a [f64] {
        &column[self.shape.inner..self.shape.rows()]
    }

    fn two_links<'a>(&self, column: &'a mut [f64], left: usize, right: usize) -> (&'a mut [f64], &'a mut [f64]) {
        let (n, inner, rows) = (self.shape.n, self.shape.inner, self.shape.rows());
        let (head, tail) = column.split_at_mut(right * rows);
        (&mut head[left * rows + inner..left * rows + inner + n], &mut tail[inner..inner + n])
    }

    /// Given a reduced column and u_0, u_N already in `nodes`, fills every other unknown.
    pub fn back_substitute(&self, column: &[f64], nodes: &mut [f64]) {
        let (shape, n, inner, rows) = (self.shape, self.shape.n, self.shape.inner, self.shape.rows());
        for &Merge { left, right, end } in self.plan.iter().rev() {
            let g = &column[right * rows + inner..(right + 1) * rows];
            let (head, tail) = nodes.split_at_mut(right * rows);
            let (middle, after) = tail.split_at_mut(n);
            let end_at = end * rows - right * rows - n;
            let ends = (&head[left * rows..left * rows + n], &after[end_at..end_at + n]);
            chain::back_substitute(n, self.merge_store(right), g, ends, middle);
        }
        for i in 0..shape.intervals {
            let g = &column[i * rows..i * rows + inner];
            interval::back_substitute(shape, self.block(i), g, &mut nodes[i * rows..(i + 1) * rows + n]);
        }
    }

    /// Product of a reduced row's y with a reduced column's pivot part: what a border loses to the elimination.
    pub fn pivot_product(&self, row: &[f64], column: &[f64]) -> f64 {
        let (n, inner, rows) = (self.shape.n, self.shape.inner, self.shape.rows());
        let mut sum = 0.0;
        for i in 0..self.shape.intervals {
            sum += dot(&row[i * rows + n..i * rows + n + inner], &column[i * rows..i * rows + inner]);
            if i > 0 {
                sum += dot(&row[i * rows..i * rows + n], &column[i * rows + inner..(i + 1) * rows]);
            }
        }
        sum
    }

    /// From a reduced row's y (negated and summed by the caller) and the multipliers `psi_link` of the reduced
    /// link to multipliers of all rows: `psi = S^T [y; psi_link]`, written into `psi` (N R numbers).
    pub fn expand_row(&self, y: &[f64], psi_link: &[f64], psi: &mut [f64]) {
        let (shape, n, inner, rows) = (self.shape, self.shape.n, self.shape.inner, self.shape.rows());
        for i in 0..shape.intervals {
            psi[i * rows..i * rows + inner].copy_from_slice(&y[i * rows + n..(i + 1) * rows]);
            let link = if i == 0 { psi_link } else { &y[i * rows..i * rows + n] };
            psi[i * rows + inner..(i + 1) * rows].copy_from_slice(link);
        }
        for &Merge { left, right, .. } in self.plan.iter().rev() {
            let (left_part, right_part) = self.two_links(psi, left, right);
            chain::expand_row(n, self.merge_store(right), left_part, right_part);
        }
        for (i, psi) in psi.chunks_exact_mut(rows).enumerate() {
            interval::expand_row(shape, self.block(i), self.swaps_of(i), psi);
        }
    }
}
