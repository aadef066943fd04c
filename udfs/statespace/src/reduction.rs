//! Orthogonal reduction of the rows of the augmented filter.
//!
//! Each point gives a row: its response to the `d` diffuse elements and to the data, divided by the square root of its variance (zeros
//! where it is missing). The rows are reduced to a triangle `R`, a right side `z = Q' y` and a
//! residual sum of squares, by Householder reflections over blocks of rows (Golub & Van Loan, *Matrix
//! Computations*, 4th ed., 5.2). No normal equations: their condition would be squared, and that is
//! what spoils start-ups whose first points hardly tell the elements apart.

mod basis;

use crate::buffer::refill;
use crate::lanes::{MOST_LANES, Mask, Real};

/// `|R_ii|` below this share of its column's norm counts as zero: the element cannot be told.
const RANK_TOLERANCE: f64 = 1e-13;

/// Smallest sine of the angle between an element's column and those before it at which the elements count as well told apart.
const WELL_TOLD: f64 = 0.02;

/// Rows of one block: enough to make the triangle's own share small.
const BLOCK: usize = 16;

/// The reduced rows. Column order: the `d` elements, then the data.
#[derive(Debug, Clone, Default)]
pub(crate) struct Reduction<V> {
    /// Elements that have a row and a column in the triangle.
    elements: usize,
    live: Mask,
    /// `d x (d + 1)` row-major: `[R | z]`. In lanes where elements have been eliminated their rows and columns are zero until they are
    /// taken out of all lanes.
    triangle: Vec<V>,
    /// Rows waiting for the next reduction: `d + 1` columns of [`BLOCK`] elements, unused ones zero.
    block: Vec<V>,
    used: usize,
    rss: V,
    /// `1 / R_ii` once finished.
    inverse: Vec<V>,
    log_diagonal: V,
    eliminated: Eliminated<V>,
}

/// The rows of the triangle that belong to elements which have left it for the state.
#[derive(Debug, Clone, Default)]
struct Eliminated<V> {
    /// In which lanes.
    lanes: Mask,
    /// They have no place in the triangle any more: true when the last lane has eliminated them.
    taken_out: bool,
    count: usize,
    width: usize,
    /// `count x width`: `[R_11 | R_12 | z_1]`.
    triangle: Vec<V>,
    /// `1 / R_ii` of them.
    inverse: Vec<V>,
}

impl<V: Real> Reduction<V> {
    /// Starts over. The first `states` of the elements may be eliminated later; `live`: the lanes that matter.
    pub(crate) fn reset(&mut self, elements: usize, states: usize, live: Mask) {
        (self.elements, self.live) = (elements, live);
        let width = elements + 1;
        refill(&mut self.triangle, elements * width);
        refill(&mut self.block, BLOCK * width);
        (self.used, self.rss, self.log_diagonal) = (0, V::zero(), V::zero());
        let gone = &mut self.eliminated;
        (gone.lanes, gone.taken_out, gone.count, gone.width) = (Mask::NONE, false, states, width);
        refill(&mut gone.triangle, states * width);
        refill(&mut gone.inverse, states);
    }

    /// Lanes in which the first elements have been eliminated.
    #[inline(always)]
    pub(crate) fn eliminated(&self) -> Mask {
        self.eliminated.lanes
    }

    /// A block of rows has just been reduced: the time to ask [`Self::ready`].
    #[inline(always)]
    pub(crate) fn at_block_end(&self) -> bool {
        self.used == 0
    }

    /// Lanes of `among` in which the first elements are well told apart by the rows so far.
    #[inline(always)]
    pub(crate) fn ready(&self, among: Mask) -> Mask {
        let width = self.elements + 1;
        let mut ready = among;
        for j in 0..self.eliminated.count {
            let mut squares = V::zero();
            for i in 0..=j {
                let r = self.triangle[i * width + j];
                squares += r * r;
            }
            let pivot = self.triangle[j * width + j];
            let limit = squares.sqrt().times(WELL_TOLD);
            ready &= squares.above(V::zero()) & !limit.above(pivot);
            if ready.is_none() {
                break;
            }
        }
        ready
    }

    /// Takes the first elements out of the triangle in these lanes. Given the others, they are now
    /// `R_11^-1 (z_1 + e - R_12 d_2)` with `e ~ N(0, I)`. When the last lane is done, the triangle becomes narrower
    /// and the answer is true.
    #[inline(always)]
    pub(crate) fn eliminate(&mut self, lanes: Mask) -> bool {
        let (d, width) = (self.elements, self.elements + 1);
        let gone = &mut self.eliminated;
        let count = gone.count;
        for (kept, r) in gone.triangle.iter_mut().zip(&mut self.triangle[..count * width]) {
            *kept = V::select(lanes, *r, *kept);
            *r = V::select(lanes, V::zero(), *r);
        }
        for j in 0..count {
            let pivot = V::select(lanes, gone.triangle[j * width + j], V::splat(1.0));
            gone.inverse[j] = V::select(lanes, V::splat(1.0) / pivot, gone.inverse[j]);
        }
        gone.lanes |= lanes;
        if !(gone.lanes | !self.live).is_all::<V>() {
            return false;
        }
        let rest = d - count;
        for i in 0..rest {
            let from = (count + i) * width + count;
            self.triangle.copy_within(from..from + rest + 1, i * (rest + 1));
        }
        self.elements = rest;
        self.triangle.truncate(rest * (rest + 1));
        self.block.truncate(BLOCK * (rest + 1));
        gone.taken_out = true;
        true
    }

    /// Adds one row. `row[0]` is the data's path, `row[1..]` the innovation's response to the elements
    /// (so the regression row is its negative); `weight` = 1 / sqrt(F), zero where missing.
    #[inline(always)]
    pub(crate) fn push(&mut self, row: &[V], weight: V) {
        let mut at = self.used;
        for from in &row[1..] {
            self.block[at] = -*from * weight;
            at += BLOCK;
        }
        self.block[at] = row[0] * weight;
        self.used += 1;
        if self.used == BLOCK {
            self.reduce();
        }
    }

    #[inline(always)]
    fn reduce(&mut self) {
        let (d, width) = (self.elements, self.elements + 1);
        for j in 0..d {
            let (left, right) = self.block.split_at_mut((j + 1) * BLOCK);
            let pivot = &mut left[j * BLOCK..];
            let below = dot(pivot, pivot);
            let diagonal = self.triangle[j * width + j];
            let norm = (diagonal * diagonal + below).sqrt();
            // The diagonal is kept non-negative, so v_0 = diagonal + norm does not cancel. A column of zeros stays one.
            let v0 = diagonal + norm;
            let v0 = V::select(v0.above(V::zero()), v0, V::splat(1.0));
            let scaled = (v0 * v0 + v0 * v0) / (v0 * v0 + below);
            self.triangle[j * width + j] = norm;
            let inverse = V::splat(1.0) / v0;
            pivot.iter_mut().for_each(|x| *x *= inverse);
            for (k, column) in right.chunks_exact_mut(BLOCK).enumerate() {
                let above = &mut self.triangle[j * width + j + 1 + k];
                let along = scaled * (*above + dot(pivot, column));
                // The reflection maps the pivot to -norm; flipping the row's sign keeps it positive.
                *above = along - *above;
                for (x, v) in column.iter_mut().zip(pivot.iter()) {
                    *x -= along * *v;
                }
            }
        }
        let rest = &self.block[d * BLOCK..];
        self.rss += dot(rest, rest);
        self.block.fill(V::zero());
        self.used = 0;
    }

    /// Reduces what is left; returns for each live lane the first element that its data do not determine, if any (counted
    /// with the eliminated).
    #[inline(always)]
    pub(crate) fn finish(&mut self) -> [Option<usize>; MOST_LANES] {
        if self.used > 0 {
            self.reduce();
        }
        let (d, width) = (self.elements, self.elements + 1);
        let gone = &self.eliminated;
        let first = if gone.taken_out { gone.count } else { 0 };
        let mut undetermined = [None; MOST_LANES];
        self.inverse.clear();
        let mut diagonal = V::zero();
        for j in 0..d {
            // The column's part along the eliminated elements counts: what repeats them leaves nothing but rounding here.
            let mut squares = V::zero();
            for i in 0..gone.count {
                let r = gone.triangle[i * gone.width + first + j];
                squares += r * r;
            }
            for i in 0..=j {
                let r = self.triangle[i * width + j];
                squares += r * r;
            }
            let pivot = self.triangle[j * width + j];
            // A lane that has eliminated the element has zeros here.
            let here = if first + j < gone.count { self.live & !gone.lanes } else { self.live };
            let told = pivot.above(squares.sqrt().times(RANK_TOLERANCE));
            for lane in (here & !told).lanes().take_while(|&lane| lane < V::LANES) {
                undetermined[lane].get_or_insert(first + j);
            }
            let safe = V::select(here & told, pivot, V::splat(1.0));
            self.inverse.push(V::splat(1.0) / safe);
            diagonal += V::select(here, safe.in_lanes(here, f64::ln), V::zero());
        }
        self.log_diagonal = diagonal;
        undetermined
    }

    #[inline(always)]
    pub(crate) fn rss(&self) -> V {
        self.rss
    }

    /// Sum of log R_ii, eliminated elements included.
    #[inline(always)]
    pub(crate) fn log_diagonal(&self) -> V {
        let gone = &self.eliminated;
        let mut sum = self.log_diagonal;
        for inverse in &gone.inverse {
            let log = inverse.in_lanes(gone.lanes, f64::ln);
            sum -= V::select(gone.lanes, log, V::zero());
        }
        sum
    }
}

/// Dot product of two columns of a block, in an order of additions that fills vector registers also where a number is one lane.
#[inline(always)]
fn dot<V: Real>(a: &[V], b: &[V]) -> V {
    let mut sums = [V::zero(); 4];
    for (x, y) in a.chunks_exact(4).zip(b.chunks_exact(4)) {
        for l in 0..4 {
            sums[l] += x[l] * y[l];
        }
    }
    (sums[0] + sums[2]) + (sums[1] + sums[3])
}

#[cfg(test)]
mod tests;
