//! State and disturbance smoothing: any linear function of the states, its mean and variance given all data.
//!
//! `E(g'a_t | y) = g'(A_t + P_t r_{t-1})`, `Var = g'(P_t - P_t N_{t-1} P_t) g + |white part|^2` (DK 4.4.4, 5.3; the diffuse
//! elements as in de Jong 1991). Auxiliary residuals are the disturbance cumulants over their own standard deviation
//! (Harvey & Koopman 1992, *JBES* 10, 377-389; de Jong & Penzer 1998, *JASA* 93, 796-806), defined also where the
//! variance is zero.

use crate::backward::{self, Basis, Cumulants, Visitor};
use crate::buffer::refill;
use crate::data::Data;
use crate::dynamics::{Dynamics, add_column, packed_at, times_vector};
use crate::filter::Pass;
use crate::lanes::{Mask, Real};
use crate::structure::{Model, Role};
use crate::system::System;

/// A linear function of the states at a point.
#[derive(Debug, Clone, PartialEq)]
pub(crate) enum Functional {
    /// Fixed weights on states.
    States(Vec<(usize, f64)>),
    /// A drifting driver's value times its coefficient.
    DriverEffect {
        /// The coefficient.
        state: usize,
        /// The driver.
        driver: usize,
    },
    /// `Z_t a_t + x_t b`: the observation without its irregular.
    Signal,
}

impl Functional {
    /// What a component adds to the signal, or for the slope and a coefficient its state; `None` where the model has no such component.
    pub(crate) fn of(role: Role, model: &Model, system: &System) -> Option<Self> {
        let states = model.state_specs();
        match role {
            Role::Irregular => None,
            Role::Slope | Role::Driver(_) => {
                let state = states.iter().position(|s| s.role == role)?;
                Some(Self::States(vec![(state, 1.0)]))
            }
            _ => {
                let loads = system.fixed_loads.iter().copied();
                let loads: Vec<(usize, f64)> =
                    loads.filter(|&(state, _)| states[state].role == role).collect();
                (!loads.is_empty()).then_some(Self::States(loads))
            }
        }
    }
}

/// Mean and variance along the grid.
#[derive(Debug, Clone, Default, PartialEq)]
pub(crate) struct Smoothed {
    pub(crate) mean: Vec<f64>,
    pub(crate) variance: Vec<f64>,
}

/// Everything one smoothing pass gives about one series.
#[derive(Debug, Clone, Default)]
pub(crate) struct Smoothing {
    /// One entry per functional.
    pub(crate) functionals: Vec<Smoothed>,
    /// `u_t / sqrt(D_t)`; NaN where missing or undefined.
    pub(crate) outlier_t: Vec<f64>,
    /// `r_t / sqrt(N_t)` of the level, placed at the point after the disturbance; NaN where undefined.
    pub(crate) shift_t: Vec<f64>,
}

/// What a smoothing pass over several series gives, and its buffers. Vectors hold one functional after another, `n` numbers each.
#[derive(Debug, Clone, Default)]
pub(crate) struct Smoother<V> {
    n: usize,
    mean: Vec<V>,
    variance: Vec<V>,
    outlier_t: Vec<V>,
    shift_t: Vec<V>,
    pg: Vec<V>,
    npg: Vec<V>,
    white: Vec<V>,
    cumulants: Cumulants<V>,
}

impl<V: Real> Smoother<V> {
    /// Smooths `functionals`. `pass` must have kept everything and had its rows whitened. `level`: the state whose
    /// disturbance `shift_t` is about. Returns the lanes in which it failed, as [`backward::run`].
    #[inline(always)]
    pub(crate) fn run(
        &mut self,
        dynamics: &Dynamics<V>,
        data: &Data<V>,
        pass: &Pass<V>,
        functionals: &[Functional],
        level: Option<usize>,
    ) -> Mask {
        let n = pass.n;
        self.n = n;
        self.mean.resize(functionals.len() * n, V::zero());
        self.variance.resize(functionals.len() * n, V::zero());
        for errors in [&mut self.outlier_t, &mut self.shift_t] {
            errors.clear();
            errors.resize(n, V::splat(f64::NAN));
        }
        refill(&mut self.pg, pass.m);
        refill(&mut self.npg, pass.m);
        refill(&mut self.white, pass.elements + 1);
        let Self { mean, variance, outlier_t, shift_t, pg, npg, white, cumulants, .. } = self;
        let mut collect = Collect {
            dynamics,
            data,
            pass,
            functionals,
            level,
            mean,
            variance,
            outlier_t,
            shift_t,
            pg,
            npg,
            white,
        };
        backward::run(dynamics, data, pass, cumulants, &mut collect)
    }

    /// What was found about the series of one lane, `len` points long.
    pub(crate) fn lane(&self, lane: usize, len: usize) -> Smoothing {
        let of = |numbers: &[V]| numbers[..len].iter().map(|x| x.lane(lane)).collect::<Vec<f64>>();
        let functionals =
            self.mean.chunks_exact(self.n.max(1)).zip(self.variance.chunks_exact(self.n.max(1)));
        Smoothing {
            functionals: functionals
                .map(|(mean, variance)| Smoothed { mean: of(mean), variance: of(variance) })
                .collect(),
            outlier_t: of(&self.outlier_t),
            shift_t: of(&self.shift_t),
        }
    }
}

struct Collect<'a, V> {
    dynamics: &'a Dynamics<V>,
    data: &'a Data<V>,
    pass: &'a Pass<V>,
    functionals: &'a [Functional],
    level: Option<usize>,
    mean: &'a mut [V],
    variance: &'a mut [V],
    outlier_t: &'a mut [V],
    shift_t: &'a mut [V],
    pg: &'a mut [V],
    npg: &'a mut [V],
    white: &'a mut [V],
}

/// Share of the uncorrected cumulant's variance below which the corrected one is rounding.
const UNDEFINED: f64 = 1e-10;

impl<V: Real> Visitor<V> for Collect<'_, V> {
    #[inline(always)]
    fn disturbance(&mut self, t: usize, r: &[V], n: &[V]) {
        let Some(level) = self.level else { return };
        if t + 1 < self.pass.n {
            let width = r.len() / self.pass.m.max(1);
            self.shift_t[t + 1] =
                standardised(&r[level * width..(level + 1) * width], n[packed_at(level, level)]);
        }
    }

    #[inline(always)]
    fn irregular(&mut self, t: usize, u: &[V], weight: V) {
        self.outlier_t[t] = standardised(u, weight);
    }

    #[inline(always)]
    fn state(&mut self, t: usize, r: &[V], n: &[V], basis: &Basis<'_, V>) {
        let width = self.pass.width(t);
        let points = self.pass.n;
        let p = self.pass.covariance(t);
        for (index, functional) in self.functionals.iter().enumerate() {
            let (pg, white) = (&mut *self.pg, &mut self.white[..width]);
            pg.fill(V::zero());
            white.fill(V::zero());
            let mut prior = V::zero();
            match functional {
                Functional::States(weights) => {
                    for &(state, weight) in weights {
                        let columns = self.pass.state_columns(t, state);
                        add(p, state, V::splat(weight), pg, columns, white);
                    }
                    for &(state, weight) in weights {
                        prior += pg[state].times(weight);
                    }
                    basis.whiten(white);
                }
                Functional::DriverEffect { state, driver } => {
                    let x = self.data.drifting[*driver][t];
                    add(p, *state, x, pg, self.pass.state_columns(t, *state), white);
                    prior += x * pg[*state];
                    basis.whiten(white);
                }
                Functional::Signal => {
                    for (state, load) in self.dynamics.loads(&self.data.drifting, t) {
                        add_column(p, state, load, pg);
                    }
                    for (state, load) in self.dynamics.loads(&self.data.drifting, t) {
                        prior += load * pg[state];
                    }
                    // The kept row is (y - prediction) with its columns, y = 0 where missing.
                    basis.row(white);
                    white.iter_mut().for_each(|x| *x = -*x);
                    white[0] += self.data.observed[t];
                }
            }
            times_vector(n, pg, self.npg);
            let mut reduction = V::zero();
            for (i, g) in pg.iter().enumerate() {
                for (to, from) in white.iter_mut().zip(&r[i * width..(i + 1) * width]) {
                    *to += *g * *from;
                }
                reduction += *g * self.npg[i];
            }
            let mut diffuse = V::zero();
            for x in &white[1..] {
                diffuse += *x * *x;
            }
            let conditional = prior - reduction;
            let positive = conditional.above(V::zero());
            self.mean[index * points + t] = white[0];
            self.variance[index * points + t] = V::select(positive, conditional, V::zero()) + diffuse;
        }
    }
}

/// Adds `weight` times a state: its covariance with all states, its columns.
#[inline(always)]
fn add<V: Real>(p: &[V], state: usize, weight: V, pg: &mut [V], columns: &[V], white: &mut [V]) {
    add_column(p, state, weight, pg);
    for (to, from) in white.iter_mut().zip(columns) {
        *to += weight * *from;
    }
}

#[inline(always)]
fn standardised<V: Real>(columns: &[V], variance: V) -> V {
    let mut rest = variance;
    for x in &columns[1..] {
        rest -= *x * *x;
    }
    let defined = rest.above(variance.times(UNDEFINED));
    let safe = V::select(defined, rest, V::splat(1.0));
    V::select(defined, columns[0] / safe.sqrt(), V::splat(f64::NAN))
}
