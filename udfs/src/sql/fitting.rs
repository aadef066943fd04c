//! Fitting series, whoever asks for it: an operator many at once, a window or an aggregate one.

use std::panic::{AssertUnwindSafe, catch_unwind};

use stillwell_statespace::{Fit, Request, Trouble, Workspace, fit, fit_many};

use super::arguments::settings::Settings;
use crate::columns::series::Placed;

/// Fits a series and asks the fit; a panic in either becomes the trouble of this series.
///
/// # Errors
/// What is wrong with the series.
pub(crate) fn fitted<T>(
    placed: &Placed,
    settings: &Settings,
    workspace: &mut Workspace,
    ask: impl FnOnce(Fit) -> Result<T, Trouble>,
) -> Result<T, Trouble> {
    guarded(workspace, |workspace| {
        let request = settings.request_for(placed.grid().grid(), placed.len());
        ask(fit(&placed.series, &request, workspace)?)
    })
}

/// Fits many series; the results stand in their order. `smoothed`: the fits will be asked for their components.
///
/// Should one of them make the core panic, they are fitted one by one, so that it is the trouble of that series alone.
pub(crate) fn fitted_together(
    placed: &[&Placed],
    settings: &Settings,
    smoothed: bool,
    workspace: &mut Workspace,
) -> Vec<Result<Fit, Trouble>> {
    let mut fits = Vec::with_capacity(placed.len());
    for (request, members) in by_request(placed, settings) {
        let series = members.iter().map(|&at| &placed[at].series).collect::<Vec<_>>();
        let results = together_or_alone(
            workspace,
            series.len(),
            |workspace| fit_many(&series, &request, smoothed, workspace),
            |at, workspace| fit(series[at], &request, workspace),
        );
        fits.extend(members.into_iter().zip(results));
    }
    fits.sort_unstable_by_key(|(at, _)| *at);
    fits.into_iter().map(|(_, fit)| fit).collect()
}

/// The work on `count` series at once, or on one after the other should that panic.
fn together_or_alone<T>(
    workspace: &mut Workspace,
    count: usize,
    together: impl FnOnce(&mut Workspace) -> Vec<Result<T, Trouble>>,
    alone: impl Fn(usize, &mut Workspace) -> Result<T, Trouble>,
) -> Vec<Result<T, Trouble>> {
    catch_unwind(AssertUnwindSafe(|| together(workspace))).unwrap_or_else(|_| {
        *workspace = Workspace::new();
        (0..count).map(|at| guarded(workspace, |workspace| alone(at, workspace))).collect()
    })
}

/// The requests of the series, each with the places of those that have it. Mostly there is one; what is left to the grid
/// or to the number of points makes several.
fn by_request(placed: &[&Placed], settings: &Settings) -> Vec<(Request, Vec<usize>)> {
    if settings.one_request() {
        return vec![(settings.request.clone(), (0..placed.len()).collect())];
    }
    let mut found: Vec<(Request, Vec<usize>)> = Vec::new();
    for (at, placed) in placed.iter().enumerate() {
        let request = settings.request_for(placed.grid().grid(), placed.len());
        match found.iter_mut().find(|(known, _)| *known == request) {
            Some((_, members)) => members.push(at),
            None => found.push((request, vec![at])),
        }
    }
    found
}

/// Does the work on one series; a panic in it becomes the trouble of that series.
pub(crate) fn guarded<T>(
    workspace: &mut Workspace,
    work: impl FnOnce(&mut Workspace) -> Result<T, Trouble>,
) -> Result<T, Trouble> {
    catch_unwind(AssertUnwindSafe(|| work(workspace))).unwrap_or_else(|_| {
        // Whatever the panic left in the buffers is not to be trusted.
        *workspace = Workspace::new();
        Err(Trouble::Numerical { what: "the fit broke off with an internal error; please report the series" })
    })
}

/// The sentence about a trouble, with the time of the point it is about.
pub(crate) fn message(trouble: &Trouble, placed: Option<&Placed>) -> String {
    let index = match trouble {
        Trouble::NotFinite { index }
        | Trouble::TooLarge { index, .. }
        | Trouble::NotPositive { index, .. }
        | Trouble::DriverGap { index, .. } => Some(*index),
        // Steps count from 1, and step 1 follows the last point of the history.
        Trouble::NoDriverPlan { step, .. } => placed.map(|placed| placed.len() + step.saturating_sub(1)),
        _ => None,
    };
    match (index, index.zip(placed).and_then(|(index, placed)| placed.describe_time(index))) {
        (Some(_), Some(time)) => format!("{trouble} (time of that point: {time})"),
        _ => trouble.to_string(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_panic_is_the_trouble_of_its_series_alone() {
        let mut workspace = Workspace::new();
        let none: [f64; 0] = [];
        let trouble = guarded(&mut workspace, |_| Ok(none[none.len()])).unwrap_err();
        assert_eq!(trouble.status(), "numerical trouble");
        assert_eq!(guarded(&mut workspace, |_| Ok(7)), Ok(7), "the next series goes on with new buffers");
    }

    #[test]
    fn a_panic_among_many_is_the_trouble_of_its_series_alone() {
        let mut workspace = Workspace::new();
        let none: [f64; 0] = [];
        let answers = together_or_alone(
            &mut workspace,
            3,
            |_| vec![Ok(none[none.len()])],
            |at, _| if at == 1 { Ok(none[at]) } else { Ok(at as f64) },
        );
        assert_eq!((&answers[0], &answers[2]), (&Ok(0.0), &Ok(2.0)));
        assert_eq!(answers[1].as_ref().unwrap_err().status(), "numerical trouble");
    }
}
