//! Forecasts without any recursion: the joint normal law of past and future, with the diffuse elements as regression
//! coefficients under a flat prior (generalised least squares; Durbin & Koopman 2012, 4.14 without the diffuse part).

use nalgebra::{DMatrix, DVector};
use stillwell_statespace::structure::Structure;
use stillwell_statespace::{Series, System};

/// Mean and covariance of the `h` observations after the last, given all observed ones. The drivers must reach that far.
pub(crate) fn future(
    structure: &Structure,
    values: &[f64],
    series: &Series,
    h: usize,
) -> (DVector<f64>, DMatrix<f64>) {
    let system = structure.model().system_at(values).expect("a stationary system");
    let n = series.observed.len();
    let (v, x) = joint(&system, series, n + h);
    let seen: Vec<usize> = (0..n).filter(|&t| !series.observed[t].is_nan()).collect();
    let rows = |m: &DMatrix<f64>, which: &[usize]| m.select_rows(which);
    let next: Vec<usize> = (n..n + h).collect();
    let y = DVector::from_iterator(seen.len(), seen.iter().map(|&t| series.observed[t]));
    let factor = rows(&v, &seen).select_columns(&seen).cholesky().expect("positive definite");
    let (x_seen, x_next) = (rows(&x, &seen), rows(&x, &next));
    let across = rows(&v, &next).select_columns(&seen);
    let (solved_x, solved_y) = (factor.solve(&x_seen), factor.solve(&y));
    let of_coefficients =
        (x_seen.transpose() * &solved_x).try_inverse().expect("coefficients that the data determine");
    let coefficients = &of_coefficients * x_seen.transpose() * solved_y;
    let mean = &x_next * &coefficients + &across * factor.solve(&(y - &x_seen * coefficients));
    let open = x_next - &across * solved_x;
    let given = rows(&v, &next).select_columns(&next) - &across * factor.solve(&across.transpose());
    (mean, given + &open * of_coefficients * open.transpose())
}

/// Covariance of all observations around their response to the diffuse elements, and that response.
fn joint(system: &System, series: &Series, points: usize) -> (DMatrix<f64>, DMatrix<f64>) {
    let m = system.states;
    let transition = {
        let mut identity = vec![0.0; m * m];
        (0..m).for_each(|i| identity[i * m + i] = 1.0);
        system.forward(&mut identity, m);
        DMatrix::from_row_slice(m, m, &identity)
    };
    let loads: Vec<DVector<f64>> = (0..points)
        .map(|t| {
            let mut z = DVector::zeros(m);
            system.fixed_loads.iter().for_each(|&(i, load)| z[i] += load);
            system.driver_loads.iter().for_each(|&(i, d)| z[i] += series.drifting_drivers[d][t]);
            z
        })
        .collect();
    let mut state = DMatrix::zeros(m, m);
    for block in &system.proper {
        let covariance = DMatrix::from_row_slice(block.size, block.size, &block.covariance);
        state.view_mut((block.offset, block.offset), (block.size, block.size)).copy_from(&covariance);
    }
    // A flat prior plus any proper one is flat; the 1 keeps the first variance positive without an irregular.
    system.diffuse.iter().for_each(|&i| state[(i, i)] = 1.0);
    let mut response = DMatrix::identity(m, m);
    let mut v = DMatrix::zeros(points, points);
    let mut x = DMatrix::zeros(points, system.diffuse.len() + series.drivers.len());
    for t in 0..points {
        let mut ahead = &state * &loads[t];
        v[(t, t)] = loads[t].dot(&ahead) + system.h;
        for later in t + 1..points {
            ahead = &transition * ahead;
            let covariance = loads[later].dot(&ahead);
            (v[(t, later)], v[(later, t)]) = (covariance, covariance);
        }
        for (j, &element) in system.diffuse.iter().enumerate() {
            x[(t, j)] = loads[t].dot(&response.column(element));
        }
        for (j, driver) in series.drivers.iter().enumerate() {
            x[(t, system.diffuse.len() + j)] = driver[t];
        }
        state = &transition * state * transition.transpose();
        for (i, q) in system.q.iter().enumerate() {
            state[(i, i)] += q;
        }
        response = &transition * response;
    }
    (v, x)
}
