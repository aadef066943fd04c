//! From matrices to a model: the same states, parameters and disturbances that a named structure assembles from its components.
//!
//! `T` becomes one matrix block. A disturbance of its own variance is a parameter; disturbances that share a covariance become
//! independent ones along the eigenvectors of their block of `Q`, also where that block is singular.

use nalgebra::{DMatrix, SymmetricEigen};

use super::GeneralForm;
use crate::structure::assembly::{Assembly, Load, SharedSpec, StateSpec};
use crate::structure::{Link, Model, Role};
use crate::system::{Op, ProperStart};

impl GeneralForm {
    /// The model on data divided by `unit`; its parameters are `h`, then the disturbances that stand alone.
    pub(super) fn model(&self, unit: f64) -> (Model, Vec<Option<f64>>) {
        let (m, g) = (self.states(), self.disturbances());
        let mut assembly = Assembly::default();
        let mut known = vec![self.h.map(|h| h / (unit * unit))];
        assembly.parameter("h", Role::Irregular, Link::Variance);
        let diffuse = self.diffuse();
        let mut driver = 0;
        let states: Vec<StateSpec> = (0..m)
            .map(|i| StateSpec {
                name: format!("state_{}", i + 1),
                role: Role::General,
                load: match self.z[i] {
                    Some(0.0) => Load::None,
                    Some(z) => Load::Fixed(z),
                    None => {
                        driver += 1;
                        Load::Driver(driver - 1)
                    }
                },
                variance: None,
                diffuse: diffuse.contains(&i),
            })
            .collect();
        assembly.block(Op::Matrix { size: m, values: self.t.clone() }, states);
        let column = |weights: &dyn Fn(usize) -> f64| -> Vec<(usize, f64)> {
            (0..m)
                .map(|i| (i, (0..g).map(|j| self.r[i * g + j] * weights(j)).sum::<f64>()))
                .filter(|(_, load)| *load != 0.0)
                .collect()
        };
        // Disturbances without a covariance are parameters, those with one share a factor of their block of Q.
        let alone = |j: usize| (0..g).all(|k| k == j || self.q[j * g + k] == Some(0.0));
        for j in (0..g).filter(|&j| alone(j)) {
            known.push(self.q[j * g + j].map(|q| q / (unit * unit)));
            let parameter = assembly.parameter(format!("q_{}", j + 1), Role::General, Link::Variance);
            let loads = column(&|k| f64::from(u8::from(k == j)));
            assembly.shared.push(SharedSpec { parameter: Some(parameter), loads });
        }
        let together: Vec<usize> = (0..g).filter(|&j| !alone(j)).collect();
        if !together.is_empty() {
            let block = DMatrix::from_fn(together.len(), together.len(), |a, b| {
                self.q[together[a] * g + together[b]].unwrap_or(0.0)
            });
            let eigen = SymmetricEigen::new(block);
            for (k, &value) in eigen.eigenvalues.iter().enumerate().filter(|(_, v)| **v > 0.0) {
                let weight = |j: usize| {
                    let at = together.iter().position(|&t| t == j);
                    at.map_or(0.0, |a| eigen.eigenvectors[(a, k)] * value.sqrt() / unit)
                };
                assembly.shared.push(SharedSpec { parameter: None, loads: column(&weight) });
            }
        }
        if !self.p1.is_empty() {
            let covariance = self.p1.iter().map(|p| p.unwrap_or(0.0) / (unit * unit)).collect();
            assembly.proper.push(ProperStart { offset: 0, size: m, covariance });
        }
        (Model::new(assembly, 0), known)
    }
}
