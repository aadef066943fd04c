//! Estimates are as high as the best of many random starts climbed for long, in few evaluations. A small edition of the bench `optimum`, which
//! takes more series and, if asked, those of the M3 competition.

#[path = "support/mixed_set.rs"]
mod mixed_set;
#[path = "support/slow_optimum.rs"]
mod slow_optimum;

use mixed_set::{judge, mixed};
use stillwell_statespace::Workspace;

/// Shortfall that counts.
const SHORT: f64 = 1e-4;
/// Simulated series of each kind.
const SIZE: usize = 8;
/// Random starts of the slow search.
const STARTS: usize = 4;

#[test]
fn no_estimate_is_short_of_the_slow_optimum() {
    let mut workspace = Workspace::new();
    let (mut fits, mut near, mut evaluations) = (0, 0, Vec::new());
    for group in mixed(&[], SIZE) {
        for (name, structure) in &group.structures {
            for (index, observed) in group.series.iter().enumerate() {
                let mut best =
                    |series: &_| slow_optimum::slow_optimum(structure, series, STARTS, index as u64);
                let judged = judge(structure, observed, &mut workspace, &mut best).expect("a fit");
                fits += 1;
                if judged.below <= SHORT && judged.converged {
                    near += 1;
                } else {
                    println!(
                        "{} {index}, {name}: {:e} below at {:?}",
                        group.name, judged.below, judged.values
                    );
                }
                evaluations.push(judged.evaluations);
            }
        }
    }
    evaluations.sort_unstable();
    let median = evaluations[evaluations.len() / 2];
    println!(
        "{near} of {fits} within {SHORT:e}; evaluations: median {median}, most {}",
        evaluations[fits - 1]
    );
    assert!(f64::from(near) >= 0.995 * fits as f64, "{near} of {fits}");
    assert!(median <= 8, "median {median}");
}
