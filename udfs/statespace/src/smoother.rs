//! State and disturbance smoothing: any linear function of the states, its mean and variance given all data.
//!
//! `E(g'a_t | y) = g'(A_t + P_t r_{t-1})`, `Var = g'(P_t - P_t N_{t-1} P_t) g + |white part|^2` (DK 4.4.4, 5.3; the diffuse
//! elements as in de Jong 1991). Auxiliary residuals are the disturbance cumulants over their own standard deviation
//! (Harvey & Koopman 1992, *JBES* 10, 377-389; de Jong & Penzer 1998, *JASA* 93, 796-806), defined also where the
//! variance is zero.

use crate::backward::{self, Basis, Cumulants, NearlySingular, Visitor};
use crate::filter::{Data, Pass};
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

/// Mean and variance along the grid.
#[derive(Debug, Clone, Default, PartialEq)]
pub(crate) struct Smoothed {
    pub(crate) mean: Vec<f64>,
    pub(crate) variance: Vec<f64>,
}

/// Everything one smoothing pass gives.
#[derive(Debug, Clone, Default)]
pub(crate) struct Smoothing {
    /// One entry per functional.
    pub(crate) functionals: Vec<Smoothed>,
    /// `u_t / sqrt(D_t)`; NaN where missing or undefined.
    pub(crate) outlier_t: Vec<f64>,
    /// `r_t / sqrt(N_t)` of the level, placed at the point after the disturbance; NaN where undefined.
    pub(crate) shift_t: Vec<f64>,
}

/// Smooths `functionals`. `pass` must have kept everything and had its rows whitened. `level`: the state whose
/// disturbance `shift_t` is about.
///
/// # Errors
/// As [`backward::run`].
pub(crate) fn run(
    system: &System,
    data: Data<'_>,
    pass: &Pass,
    functionals: &[Functional],
    level: Option<usize>,
) -> Result<Smoothing, NearlySingular> {
    let n = pass.n;
    let blank = || Smoothed { mean: vec![f64::NAN; n], variance: vec![f64::NAN; n] };
    let mut collect = Collect {
        system,
        data,
        pass,
        functionals,
        level,
        out: Smoothing {
            functionals: functionals.iter().map(|_| blank()).collect(),
            outlier_t: vec![f64::NAN; n],
            shift_t: vec![f64::NAN; n],
        },
        pg: vec![0.0; pass.m],
        white: vec![0.0; pass.elements + 1],
    };
    backward::run(system, data, pass, &mut Cumulants::default(), &mut collect)?;
    Ok(collect.out)
}

struct Collect<'a> {
    system: &'a System,
    data: Data<'a>,
    pass: &'a Pass,
    functionals: &'a [Functional],
    level: Option<usize>,
    out: Smoothing,
    pg: Vec<f64>,
    white: Vec<f64>,
}

/// Share of the uncorrected cumulant's variance below which the corrected one is rounding.
const UNDEFINED: f64 = 1e-10;

impl Visitor for Collect<'_> {
    fn disturbance(&mut self, t: usize, r: &[f64], n: &[f64]) {
        let Some(level) = self.level else { return };
        if t + 1 < self.pass.n {
            let m = self.pass.m;
            let width = r.len() / m.max(1);
            self.out.shift_t[t + 1] =
                standardised(&r[level * width..(level + 1) * width], n[level * m + level]);
        }
    }

    fn irregular(&mut self, t: usize, u: &[f64], weight: f64) {
        self.out.outlier_t[t] = standardised(u, weight);
    }

    fn state(&mut self, t: usize, r: &[f64], n: &[f64], basis: &Basis<'_>) {
        let (m, width) = (self.pass.m, self.pass.width(t));
        let p = &self.pass.covariances[t * m * m..(t + 1) * m * m];
        for (index, functional) in self.functionals.iter().enumerate() {
            self.pg.fill(0.0);
            self.white.fill(0.0);
            let (pg, white) = (&mut self.pg, &mut self.white[..width]);
            let mut add = |state: usize, weight: f64| {
                for (to, from) in pg.iter_mut().zip(&p[state * m..(state + 1) * m]) {
                    *to += weight * from;
                }
                for (to, from) in white.iter_mut().zip(self.pass.state_columns(t, state)) {
                    *to += weight * from;
                }
            };
            let mut prior = 0.0;
            match functional {
                Functional::States(weights) => {
                    weights.iter().for_each(|&(state, weight)| add(state, weight));
                    prior += weights.iter().map(|&(state, weight)| weight * self.pg[state]).sum::<f64>();
                    basis.whiten(&mut self.white[..width]);
                }
                Functional::DriverEffect { state, driver } => {
                    let x = self.data.drifting[*driver][t];
                    add(*state, x);
                    prior += x * self.pg[*state];
                    basis.whiten(&mut self.white[..width]);
                }
                Functional::Signal => {
                    self.system.for_loads(self.data.drifting, t, &mut add);
                    self.system
                        .for_loads(self.data.drifting, t, |state, load| prior += load * self.pg[state]);
                    // The kept row is (y - prediction) with its columns.
                    basis.row(&mut self.white[..width]);
                    self.white[..width].iter_mut().for_each(|x| *x = -*x);
                    let y = self.data.observed[t];
                    if !y.is_nan() {
                        self.white[0] += y;
                    }
                }
            }
            let mut reduction = 0.0;
            for (i, &g) in self.pg.iter().enumerate() {
                if g != 0.0 {
                    for (to, from) in self.white[..width].iter_mut().zip(&r[i * width..(i + 1) * width]) {
                        *to += g * from;
                    }
                    let along: f64 = self.pg.iter().zip(&n[i * m..(i + 1) * m]).map(|(a, b)| a * b).sum();
                    reduction += g * along;
                }
            }
            let diffuse: f64 = self.white[1..width].iter().map(|v| v * v).sum();
            let out = &mut self.out.functionals[index];
            out.mean[t] = self.white[0];
            out.variance[t] = (prior - reduction).max(0.0) + diffuse;
        }
    }
}

fn standardised(columns: &[f64], variance: f64) -> f64 {
    let white: f64 = columns[1..].iter().map(|v| v * v).sum();
    let rest = variance - white;
    if rest > UNDEFINED * variance { columns[0] / rest.sqrt() } else { f64::NAN }
}
