//! Estimation on the reference cases: the likelihood reached is not below the best of many starts of a general optimiser
//! (tests/reference/README.md). Cases that the reference starts diffuse where this crate starts stationary are left out here.

mod support;

use stillwell_statespace::{Request, SeasonRequest, TransformRequest, Workspace, fit};
use support::Case;

/// How far below the reference the likelihood may stay.
const SHORT: f64 = 1e-6;
/// The same where the likelihood has several optima (cycle, autoregression).
const SHORT_SEVERAL_OPTIMA: f64 = 1e-4;

fn request(case: &Case) -> Request {
    let s = &case.structure;
    let irregular_missing = case.json["spec"]["irregular"].as_bool() == Some(false);
    Request {
        trend: Some(s.trend),
        season: SeasonRequest::Given(s.seasons.iter().map(|x| x.period).collect()),
        harmonics: s.seasons.first().and_then(|x| x.harmonics).map(|h| vec![h]),
        fixed_season: s.seasons.iter().any(|x| x.fixed),
        cycle: s.cycle.map(|c| (c.shortest, c.longest)),
        autoregression: s.autoregression,
        transform: TransformRequest::None,
        known: if irregular_missing { vec![("irregular".to_owned(), 0.0)] } else { Vec::new() },
        drivers: case.drivers.clone(),
        drifting_drivers: s.drifting_drivers.clone(),
    }
}

#[test]
fn likelihood_reaches_the_reference() {
    let mut workspace = Workspace::new();
    let mut failed = Vec::new();
    let mut evaluations = Vec::new();
    println!("{:42} {:>16} {:>10} {:>5}  parameters", "case", "log-likelihood", "above", "evals");
    for case in support::all().iter().filter(|c| !c.diffuse_start) {
        let best = case.json["maximum_likelihood"]["loglik_nd"].as_f64().expect("a number");
        let fit = fit(&case.series, &request(case), &mut workspace).expect("a fit");
        let d = fit.diagnostics();
        let above = d.log_likelihood - best;
        let values: Vec<String> =
            fit.parameters().iter().map(|p| format!("{}={:.6e}", p.name, p.value)).collect();
        println!(
            "{:42} {:16.8} {:10.1e} {:5} {} {}",
            case.id,
            d.log_likelihood,
            above,
            d.evaluations,
            d.converged,
            values.join(" ")
        );
        evaluations.push(d.evaluations);
        let several = case.structure.cycle.is_some() || case.structure.autoregression > 0;
        if above < -if several { SHORT_SEVERAL_OPTIMA } else { SHORT } || !d.converged {
            failed.push(case.id.clone());
        }
    }
    evaluations.sort_unstable();
    println!(
        "evaluations: median {}, most {}",
        evaluations[evaluations.len() / 2],
        evaluations[evaluations.len() - 1]
    );
    assert!(failed.is_empty(), "short of the reference or not converged: {failed:?}");
}
