//! The systems of all lanes side by side, and what the transition does to vectors and covariances.
//!
//! `T` is block diagonal and each block is a few operations on numbers ([`block`]): a shift, a rotation, an addition; nothing is multiplied out
//! but the matrices that a caller gives. Covariances are symmetric in packed storage ([`packed`]). The shift of a dummy season or an
//! autoregression costs nothing: the update of the covariance, which writes every element anyway, writes it to its shifted place.

mod block;
mod packed;
mod pair;
mod season;

pub(crate) use packed::{add_column, packed_at, packed_len, times_vector};

use std::ops::Range;

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
    pub(crate) fn loads<'a>(&'a self, drifting: &'a [Vec<V>], t: usize) -> Loads<'a, V> {
        Loads { fixed: self.fixed_loads.iter(), of_drivers: self.driver_loads.iter(), drifting, t }
    }

    /// `x <- T x` for an `m x width` row-major matrix.
    #[inline(always)]
    pub(crate) fn forward(&self, x: &mut [V], width: usize, spare: &mut [V]) {
        for (offset, block) in &self.blocks {
            block.forward(&mut x[offset * width..(offset + block.len()) * width], width, spare);
        }
    }

    /// The states of each block.
    pub(crate) fn extents(&self) -> impl Iterator<Item = Range<usize>> {
        self.blocks.iter().map(|(offset, block)| *offset..offset + block.len())
    }

    /// [`Self::forward`] where each block has numbers other than zero in these columns alone.
    #[inline(always)]
    pub(crate) fn forward_columns(
        &self,
        x: &mut [V],
        width: usize,
        columns: &[Range<usize>],
        spare: &mut [V],
    ) {
        for ((offset, block), columns) in self.blocks.iter().zip(columns) {
            let rows = &mut x[offset * width..(offset + block.len()) * width];
            block.forward_columns(rows, width, columns.clone(), spare);
        }
    }

    /// `x <- T' x` for an `m x width` row-major matrix.
    #[inline(always)]
    pub(crate) fn backward(&self, x: &mut [V], width: usize, spare: &mut [V]) {
        for (offset, block) in &self.blocks {
            block.backward(&mut x[offset * width..(offset + block.len()) * width], width, spare);
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
        for (first, block) in &self.blocks {
            block.congruence(next, *first, self.states, spare, true);
        }
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
        for (first, block) in &self.blocks {
            block.congruence(n, *first, self.states, spare, false);
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

/// What [`Dynamics::loads`] walks over: those that never change, then those of drivers.
#[derive(Debug)]
pub(crate) struct Loads<'a, V> {
    fixed: std::slice::Iter<'a, (usize, V)>,
    of_drivers: std::slice::Iter<'a, (usize, usize)>,
    drifting: &'a [Vec<V>],
    t: usize,
}

impl<V: Real> Iterator for Loads<'_, V> {
    type Item = (usize, V);

    #[inline(always)]
    fn next(&mut self) -> Option<(usize, V)> {
        if let Some(&load) = self.fixed.next() {
            return Some(load);
        }
        let &(state, driver) = self.of_drivers.next()?;
        Some((state, self.drifting[driver][self.t]))
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
