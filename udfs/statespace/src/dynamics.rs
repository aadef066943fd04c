//! The systems of all lanes side by side, and what the transition does to vectors and covariances.
//!
//! `T` is block diagonal and each block is a few operations on numbers ([`block`]): a shift, a rotation, an addition; nothing is multiplied out
//! but the matrices that a caller gives. Covariances are symmetric in packed storage ([`packed`]). The shift of a dummy season or an
//! autoregression costs nothing: the update of the covariance, which writes every element anyway, writes it to its shifted place.

mod block;
mod packed;

pub(crate) use packed::{add_column, packed_at, packed_len, times_vector};

use crate::lanes::Real;
use crate::system::System;
use block::Block;

/// A disturbance of several states with a variance per lane.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct SharedOf<V> {
    pub(crate) loads: Vec<(usize, f64)>,
    pub(crate) variance: V,
}

/// A proper start with a covariance per lane, row-major.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct ProperOf<V> {
    pub(crate) offset: usize,
    pub(crate) size: usize,
    pub(crate) covariance: Vec<V>,
}

/// [`System`]s of one structure, a lane each.
#[derive(Debug, Clone)]
pub(crate) struct Dynamics<V> {
    /// Number of states m.
    pub(crate) states: usize,
    /// First state and block, in order.
    blocks: Vec<(usize, Block<V>)>,
    /// Where each element of a packed matrix goes in the shift forward, and back; empty without a shift.
    forward_moves: Vec<u32>,
    backward_moves: Vec<u32>,
    fixed_loads: Vec<(usize, V)>,
    pub(crate) driver_loads: Vec<(usize, usize)>,
    pub(crate) h: V,
    /// Variance of each state's disturbance.
    pub(crate) q: Vec<V>,
    pub(crate) shared: Vec<SharedOf<V>>,
    pub(crate) diffuse: Vec<usize>,
    pub(crate) proper: Vec<ProperOf<V>>,
    /// Start covariance of the diffuse states ([`System::start_scale`]).
    pub(crate) start_scale: V,
}

impl<V: Real> Dynamics<V> {
    /// The same system in all lanes.
    pub(crate) fn new(system: &System) -> Self {
        let mut offset = 0;
        let blocks: Vec<(usize, Block<V>)> = system
            .transition
            .iter()
            .map(|op| {
                let at = offset;
                offset += op.len();
                (at, Block::of(op))
            })
            .collect();
        let mut out = Self {
            states: system.states,
            forward_moves: moves(&blocks, system.states, true),
            backward_moves: moves(&blocks, system.states, false),
            blocks,
            fixed_loads: system.fixed_loads.iter().map(|&(state, load)| (state, V::splat(load))).collect(),
            driver_loads: system.driver_loads.clone(),
            h: V::zero(),
            q: vec![V::zero(); system.states],
            shared: system
                .shared
                .iter()
                .map(|noise| SharedOf { loads: noise.loads.clone(), variance: V::zero() })
                .collect(),
            diffuse: system.diffuse.clone(),
            proper: system
                .proper
                .iter()
                .map(|p| ProperOf {
                    offset: p.offset,
                    size: p.size,
                    covariance: vec![V::zero(); p.size * p.size],
                })
                .collect(),
            start_scale: V::zero(),
        };
        for lane in 0..V::LANES {
            out.set_lane(lane, system);
        }
        out
    }

    /// Puts the numbers of a system of the same structure into one lane.
    pub(crate) fn set_lane(&mut self, lane: usize, system: &System) {
        debug_assert_eq!(system.states, self.states);
        for ((_, block), op) in self.blocks.iter_mut().zip(&system.transition) {
            block.set_lane(lane, op);
        }
        self.h.set_lane(lane, system.h);
        self.q.iter_mut().zip(&system.q).for_each(|(to, q)| to.set_lane(lane, *q));
        for (to, noise) in self.shared.iter_mut().zip(&system.shared) {
            to.variance.set_lane(lane, noise.variance);
        }
        for (to, start) in self.proper.iter_mut().zip(&system.proper) {
            (to.offset, to.size) = (start.offset, start.size);
            to.covariance.iter_mut().zip(&start.covariance).for_each(|(to, c)| to.set_lane(lane, *c));
        }
        self.start_scale.set_lane(lane, system.start_scale());
    }

    /// State and load of each non-zero element of `Z_t`.
    #[inline(always)]
    pub(crate) fn loads(&self, drifting: &[Vec<V>], t: usize) -> impl Iterator<Item = (usize, V)> {
        let of_drivers = self.driver_loads.iter().map(move |&(state, driver)| (state, drifting[driver][t]));
        self.fixed_loads.iter().copied().chain(of_drivers)
    }

    /// `x <- T x` for an `m x width` row-major matrix.
    #[inline(always)]
    pub(crate) fn forward(&self, x: &mut [V], width: usize, spare: &mut [V]) {
        for (offset, block) in &self.blocks {
            if block.shifts() {
                x[offset * width..(offset + block.len()) * width].rotate_right(width);
            }
            for c in 0..width {
                block.forward(x, |i| (offset + i) * width + c, spare);
            }
        }
    }

    /// `x <- T' x` for an `m x width` row-major matrix.
    #[inline(always)]
    pub(crate) fn backward(&self, x: &mut [V], width: usize, spare: &mut [V]) {
        for (offset, block) in &self.blocks {
            if block.shifts() {
                x[offset * width..(offset + block.len()) * width].rotate_left(width);
            }
            for c in 0..width {
                block.backward(x, |i| (offset + i) * width + c, spare);
            }
        }
    }

    /// The next predicted covariance: `next <- T (p - gain pz') T' + Q`.
    #[inline(always)]
    pub(crate) fn predict(&self, p: &[V], gain: &[V], pz: &[V], next: &mut [V], spare: &mut [V]) {
        let mut at = 0;
        for (i, g) in gain.iter().enumerate() {
            let row = p[at..=at + i].iter().zip(pz);
            if self.forward_moves.is_empty() {
                for ((from, z), to) in row.zip(&mut next[at..=at + i]) {
                    *to = *from - *g * *z;
                }
            } else {
                for ((from, z), to) in row.zip(&self.forward_moves[at..=at + i]) {
                    next[*to as usize] = *from - *g * *z;
                }
            }
            at += i + 1;
        }
        self.congruence(next, spare, true);
        for (i, q) in self.q.iter().enumerate() {
            next[packed_at(i, i)] += *q;
        }
        for noise in &self.shared {
            for (a, &(i, x)) in noise.loads.iter().enumerate() {
                for &(j, y) in &noise.loads[..=a] {
                    next[packed_at(i, j)] += noise.variance * V::splat(x * y);
                }
            }
        }
    }

    /// `n <- T' n T` for a packed symmetric `n`; `other` is scratch of its size.
    #[inline(always)]
    pub(crate) fn pull_back(&self, n: &mut Vec<V>, other: &mut Vec<V>, spare: &mut [V]) {
        if !self.backward_moves.is_empty() {
            for (from, to) in n.iter().zip(&self.backward_moves) {
                other[*to as usize] = *from;
            }
            std::mem::swap(n, other);
        }
        self.congruence(n, spare, false);
    }

    /// `p <- E p E'` block by block, `E` the block's forward or backward operation, its shift done already.
    #[inline(always)]
    fn congruence(&self, p: &mut [V], spare: &mut [V], forward: bool) {
        for (offset, block) in &self.blocks {
            let (first, len) = (*offset, block.len());
            if matches!(block, Block::Keep) {
                continue;
            }
            for other in 0..first {
                let at = |i: usize| packed_at(first + i, 0) + other;
                if forward { block.forward(p, at, spare) } else { block.backward(p, at, spare) }
            }
            for other in first + len..self.states {
                let row = packed_at(other, first);
                let at = |i: usize| row + i;
                if forward { block.forward(p, at, spare) } else { block.backward(p, at, spare) }
            }
            if !matches!(block, Block::Negate) {
                diagonal(block, p, first, spare, forward);
            }
        }
    }

    /// Writes `P_1`: the start scale on diffuse states, the proper starts elsewhere.
    pub(crate) fn start_covariance(&self, scale: V, p: &mut [V]) {
        p.fill(V::zero());
        for start in &self.proper {
            for i in 0..start.size {
                for j in 0..=i {
                    p[packed_at(start.offset + i, start.offset + j)] = start.covariance[i * start.size + j];
                }
            }
        }
        for &i in &self.diffuse {
            p[packed_at(i, i)] = scale;
        }
    }

    /// `x <- x + Q r` for a vector.
    #[inline(always)]
    pub(crate) fn add_disturbance(&self, x: &mut [V], r: &[V]) {
        for ((x, q), r) in x.iter_mut().zip(&self.q).zip(r) {
            *x += *q * *r;
        }
        for noise in &self.shared {
            let mut along = V::zero();
            for &(i, load) in &noise.loads {
                along += r[i].times(load);
            }
            along *= noise.variance;
            for &(i, load) in &noise.loads {
                x[i] += along.times(load);
            }
        }
    }

    /// Scratch numbers that the transition needs.
    pub(crate) fn spare_len(&self) -> usize {
        let largest = self.blocks.iter().map(|(_, block)| block.len()).max().unwrap_or(0);
        largest * (largest + 1)
    }
}

/// `D <- E D E'` for the block's own part of a packed matrix: the whole square is written out, its columns changed, then its rows.
#[inline(always)]
fn diagonal<V: Real>(block: &Block<V>, p: &mut [V], first: usize, spare: &mut [V], forward: bool) {
    let len = block.len();
    if let Block::Season(len) = block {
        return season_diagonal(p, first, *len, spare, forward);
    }
    let (square, spare) = spare.split_at_mut(len * len);
    for i in 0..len {
        for j in 0..=i {
            let value = p[packed_at(first + i, first + j)];
            square[i * len + j] = value;
            square[j * len + i] = value;
        }
    }
    for j in 0..len {
        let column = |i: usize| i * len + j;
        if forward { block.forward(square, column, spare) } else { block.backward(square, column, spare) }
    }
    for i in 0..len {
        let row = |j: usize| i * len + j;
        if forward { block.forward(square, row, spare) } else { block.backward(square, row, spare) }
    }
    for i in 0..len {
        for j in 0..=i {
            p[packed_at(first + i, first + j)] = square[i * len + j];
        }
    }
}

/// [`diagonal`] of a dummy season, where it takes additions alone.
#[inline(always)]
fn season_diagonal<V: Real>(p: &mut [V], first: usize, len: usize, spare: &mut [V], forward: bool) {
    if forward {
        // The first row becomes minus the sum of all rows.
        let sums = &mut spare[..len];
        sums.fill(V::zero());
        for i in 0..len {
            let start = packed_at(first + i, first);
            let (above, own) = sums.split_at_mut(i);
            for (j, to) in above.iter_mut().enumerate() {
                let value = p[start + j];
                *to += value;
                own[0] += value;
            }
            own[0] += p[start + i];
        }
        let mut total = sums[0];
        for sum in &sums[1..] {
            total += *sum;
        }
        p[packed_at(first, first)] = total;
        for j in 1..len {
            p[packed_at(first + j, first)] = -sums[j];
        }
    } else {
        // Every row less the last, the last negated; then the columns.
        let last = packed_at(first + len - 1, first);
        let corner = p[last + len - 1];
        for i in 0..len - 1 {
            let start = packed_at(first + i, first);
            let shared = p[last + i] - corner;
            for j in 0..=i {
                let from_last = p[last + j];
                p[start + j] -= from_last + shared;
            }
        }
        for j in 0..len - 1 {
            let value = p[last + j];
            p[last + j] = corner - value;
        }
    }
}

/// Where each packed element goes when the shifting blocks move their states; empty when none does.
fn moves<V: Real>(blocks: &[(usize, Block<V>)], states: usize, forward: bool) -> Vec<u32> {
    if !blocks.iter().any(|(_, block)| block.shifts()) {
        return Vec::new();
    }
    let mut to: Vec<usize> = (0..states).collect();
    for (offset, block) in blocks.iter().filter(|(_, block)| block.shifts()) {
        let len = block.len();
        for i in 0..len {
            to[offset + i] = offset + if forward { (i + 1) % len } else { (i + len - 1) % len };
        }
    }
    (0..states)
        .flat_map(|i| (0..=i).map(move |j| (i, j)))
        .map(|(i, j)| packed_at(to[i], to[j]) as u32)
        .collect()
}
