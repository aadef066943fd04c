//! What a general form contradicts before any series is seen: sizes that do not fit together, numbers that are not finite, drivers
//! without a place in `Z`, matrices that are no covariance.

use nalgebra::DMatrix;

use super::{GeneralForm, MOST_STATES};
use crate::error::BadRequest;

impl GeneralForm {
    /// Contradictions that no series could satisfy.
    ///
    /// # Errors
    /// Names the argument, what is wrong and what would be right.
    pub fn check(&self) -> Result<(), BadRequest> {
        let (m, g) = (self.states(), self.disturbances());
        if m == 0 {
            return Err(BadRequest::new("z", "it is empty, but has one number per state"));
        }
        if m > MOST_STATES {
            return Err(BadRequest::new(
                "z",
                format!("it has {m} elements; at most {MOST_STATES} states are allowed"),
            ));
        }
        let size = |name: &'static str, got: usize, rows: usize, columns: usize| {
            let ok = got == rows * columns;
            let what = format!("{rows} x {columns} numbers are needed, because z has {m}; got {got}");
            if ok { Ok(()) } else { Err(BadRequest::new(name, what)) }
        };
        size("t", self.t.len(), m, m)?;
        size("r", self.r.len(), m, g)?;
        size("q", self.q.len(), g, g)?;
        if !self.a1.is_empty() {
            size("a1", self.a1.len(), m, 1)?;
            if self.p1.is_empty() {
                return Err(BadRequest::new(
                    "a1",
                    "it needs p1 beside it; without both, the start is diffuse",
                ));
            }
        }
        if !self.p1.is_empty() {
            size("p1", self.p1.len(), m, m)?;
        }
        if !self.c.is_empty() {
            size("c", self.c.len(), m, 1)?;
        }
        let given = |values: &[Option<f64>]| values.iter().copied().flatten().collect::<Vec<f64>>();
        for (name, values) in [
            ("z", given(&self.z)),
            ("t", self.t.clone()),
            ("r", self.r.clone()),
            ("q", given(&self.q)),
            ("h", self.h.into_iter().collect()),
            ("a1", self.a1.clone()),
            ("p1", given(&self.p1)),
            ("c", self.c.clone()),
            ("d", vec![self.d]),
        ] {
            if let Some(value) = values.iter().find(|v| !v.is_finite()) {
                return Err(BadRequest::new(name, format!("finite numbers are needed, got {value}")));
            }
        }
        if let Some(h) = self.h.filter(|h| *h < 0.0) {
            return Err(BadRequest::new(
                "h",
                format!("a variance is not negative, or NULL to estimate it; got {h}"),
            ));
        }
        let open = self.z.iter().filter(|z| z.is_none()).count();
        if open != self.drivers.len() {
            return Err(BadRequest::new(
                "z",
                format!(
                    "it has {open} NULL(s), each of which takes one of the drivers in order, but {} driver(s) are given",
                    self.drivers.len()
                ),
            ));
        }
        covariance("q", &self.q, g)?;
        covariance("p1", &self.p1, if self.p1.is_empty() { 0 } else { m })
    }
}

/// `values` is a covariance of `size` variables: symmetric, no direction of negative variance; `None` on the diagonal stands alone.
fn covariance(name: &'static str, values: &[Option<f64>], size: usize) -> Result<(), BadRequest> {
    for i in 0..size {
        for j in 0..size {
            let (here, there) = (values[i * size + j], values[j * size + i]);
            if i != j && here.is_none() {
                return Err(BadRequest::new(
                    name,
                    format!(
                        "it has a NULL beside the diagonal, in row {}, column {}; only variances can be left open",
                        i + 1,
                        j + 1
                    ),
                ));
            }
            if here != there {
                return Err(BadRequest::new(
                    name,
                    format!("it is not symmetric in row {}, column {}", i + 1, j + 1),
                ));
            }
            if i != j && values[i * size + i].is_none() && here != Some(0.0) {
                return Err(BadRequest::new(
                    name,
                    format!("it leaves variance {} open, so the rest of its row and column must be 0", i + 1),
                ));
            }
        }
        if let Some(variance) = values[i * size + i].filter(|v| *v < 0.0) {
            return Err(BadRequest::new(
                name,
                format!("it has a negative variance on its diagonal: {variance}"),
            ));
        }
    }
    let matrix = DMatrix::from_fn(size, size, |i, j| values[i * size + j].unwrap_or(0.0));
    if size > 0 {
        let largest = matrix.amax();
        let smallest = matrix.symmetric_eigenvalues().min();
        if smallest < -1e-10 * largest {
            return Err(BadRequest::new(
                name,
                format!("it is no covariance: it has the negative eigenvalue {smallest}"),
            ));
        }
    }
    Ok(())
}
