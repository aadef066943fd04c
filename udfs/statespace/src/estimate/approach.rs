//! The first climb, on the approximate likelihood: it finds where the exact one is worth climbing, and where else after that.

use super::Question;
use super::climb::{Climb, ROUGH};
use super::layout::Layout;
use super::point::{EXACT, reached};
use super::spectrum::Spectrum;
use crate::evaluation::EvaluationError;
use crate::structure::Link;

/// How many points of the grid are climbed from.
const CLIMBS: usize = 3;
/// The same for each damping in the grid: it has optima of its own.
const CLIMBS_OF_DAMPING: usize = 2;
/// Difference of likelihoods below which two optima are one.
const SAME: f64 = 1e-3;
/// A damping of which the grid has none.
const NEARLY_STRAIGHT: f64 = 0.99;
/// How far below the best an optimum may lie by the approximate likelihood and still be looked at with the exact one.
const RIVAL: f64 = 2.5;
/// The same where the approximate likelihood is exact.
const RIVAL_WHERE_EXACT: f64 = 1e-3;

/// Gain that ends a climb on a likelihood that is approximate itself.
const ROUGHER: f64 = 1e-3;
/// A climb that has come so near to an optimum, in likelihood, and is like it, ends there.
const AT_AN_OPTIMUM: f64 = 0.1;

/// A likelihood and where it is reached.
pub(super) type Optimum = (f64, Vec<f64>);

/// A place to climb from.
#[derive(Debug, Clone)]
pub(super) struct Place {
    pub(super) values: Vec<f64>,
    /// A parameter that stays where it is.
    pub(super) held: Option<usize>,
}

/// Optima of the approximate likelihood, the highest first, and the likelihood there. `grid`: where to start, natural units; `scale`: size of the
/// series' own movement.
pub(super) fn optima<'a>(
    spectrum: &mut Spectrum,
    layout: &Layout,
    grid: impl Iterator<Item = &'a [f64]>,
    scale: f64,
) -> Vec<Optimum> {
    let mut starts: Vec<Vec<f64>> = grid.map(<[f64]>::to_vec).collect();
    let damping = (0..layout.links.len()).find(|&i| layout.free[i] && layout.spread_of[i].is_some());
    if let Some(damping) = damping {
        for i in 0..starts.len() {
            let mut start = starts[i].clone();
            damp(layout, &mut start, damping, NEARLY_STRAIGHT);
            starts.push(start);
        }
    }
    let mut ranked: Vec<Optimum> = starts
        .into_iter()
        .map(|start| {
            let question = Question { values: &start, derivatives: false };
            (reached(layout, &spectrum.answer(question)), start)
        })
        .filter(|(reached, _)| reached.is_finite())
        .collect();
    ranked.sort_by(|a, b| b.0.total_cmp(&a.0));
    // Of each damping the best few.
    let shape = |values: &[f64]| damping.map_or(0.0, |i| values[i]);
    let mut taken: Vec<f64> = Vec::new();
    let mut found: Vec<Optimum> = Vec::new();
    let mut scratch = Climb::new(Vec::new(), None, ROUGH);
    for (_, values) in ranked {
        let own = shape(&values);
        if taken.iter().filter(|other| **other == own).count()
            == if damping.is_some() { CLIMBS_OF_DAMPING } else { CLIMBS }
        {
            continue;
        }
        taken.push(own);
        // A damping makes ridges, along which a climb that looks lost or like another may still come out elsewhere.
        let given_up = if damping.is_none() {
            let best = found.iter().fold(f64::NEG_INFINITY, |a, other| a.max(other.0));
            (best - rival(spectrum), found.as_slice())
        } else {
            (f64::NEG_INFINITY, &[] as &[Optimum])
        };
        let Some(new) = climb(spectrum, layout, (&values, None), given_up, &mut scratch) else {
            continue;
        };
        let largest =
            (0..new.1.len()).filter(|&i| layout.is_variance(i)).fold(0.0_f64, |a, i| a.max(new.1[i]));
        // A series that is fitted exactly is for the exact likelihood to judge.
        if largest > scale * EXACT.sqrt() {
            found.push(new);
        }
    }
    found.sort_by(|a, b| b.0.total_cmp(&a.0));
    // Equal likelihoods are one optimum, reached along different ways.
    found.dedup_by(|worse, better| better.0 - worse.0 < SAME);
    found
}

/// How far below the best an optimum may lie and still be looked at with the exact likelihood.
fn rival(spectrum: &Spectrum) -> f64 {
    if spectrum.exact { RIVAL_WHERE_EXACT } else { RIVAL * spectrum.thinned }
}

/// Sets a damping and leaves the spread of its component as it is.
fn damp(layout: &Layout, values: &mut [f64], damping: usize, to: f64) {
    if let Some(variance) = layout.spread_of[damping].filter(|&v| layout.free[v]) {
        values[variance] *= (1.0 - to * to) / (1.0 - values[damping] * values[damping]);
    }
    values[damping] = to;
}

/// Places where another optimum than the one at `values` may lie: with a variance less, a damping at its end, or away from it; and the other
/// `optima` of the approximate likelihood.
pub(super) fn rivals(
    spectrum: &mut Spectrum,
    layout: &Layout,
    values: &[f64],
    optima: &[Optimum],
) -> Vec<Place> {
    let best = optima.first().map_or(f64::NEG_INFINITY, |best| best.0);
    let mut places: Vec<Place> = Vec::new();
    for i in 0..values.len() {
        if !layout.free[i] {
            continue;
        }
        let mut other = |to: f64, held: Option<usize>, spread: bool| {
            let mut values = values.to_vec();
            if spread {
                damp(layout, &mut values, i, to);
            } else {
                values[i] = to;
            }
            places.push(Place { values, held });
        };
        match layout.links[i] {
            Link::Variance if values[i] > 0.0 => other(0.0, Some(i), false),
            Link::Between { high, .. } if values[i] < high => other(high, Some(i), true),
            Link::Between { low, high } => {
                other(low + 0.99 * (high - low), None, true);
                other(low + 0.8 * (high - low), None, true);
            }
            _ => {}
        }
    }
    for damping in 0..values.len() {
        let Some(variance) = layout.spread_of[damping] else { continue };
        if layout.free[damping] && layout.free[variance] && values[variance] == 0.0 {
            // What is not there may be there and hardly move.
            let most = values.iter().enumerate().filter(|(i, _)| layout.is_variance(*i));
            let spread = 0.01 * most.fold(0.0_f64, |a, (_, v)| a.max(*v));
            for to in [NEARLY_STRAIGHT, 0.5] {
                let mut values = values.to_vec();
                values[damping] = to;
                values[variance] = spread * (1.0 - to * to);
                places.push(Place { values, held: None });
            }
        }
    }
    let rival = rival(spectrum);
    let ridges = (0..values.len()).any(|i| layout.free[i] && layout.spread_of[i].is_some());
    let floor = if ridges { f64::NEG_INFINITY } else { best - rival };
    let mut scratch = Climb::new(Vec::new(), None, ROUGH);
    let mut ranked: Vec<(f64, Place)> = places
        .into_iter()
        .filter_map(|place| {
            let above = (floor, &[] as &[Optimum]);
            let (reached, found) = climb(spectrum, layout, (&place.values, place.held), above, &mut scratch)?;
            let held = place.held;
            (reached > best - rival && !alike(layout, &found, values))
                .then_some((reached, Place { values: found, held }))
        })
        .collect();
    let others =
        optima.iter().skip(1).filter(|other| other.0 > best - rival && !alike(layout, &other.1, values));
    ranked.extend(others.map(|(reached, values)| (*reached, Place { values: values.clone(), held: None })));
    // The best last: it is taken first, and stands for those like it.
    ranked.sort_by(|a, b| a.0.total_cmp(&b.0));
    let mut places: Vec<Place> = Vec::new();
    for (_, place) in ranked.into_iter().rev() {
        if !places.iter().any(|other| alike(layout, &other.values, &place.values)) {
            places.push(place);
        }
    }
    places.reverse();
    places
}

/// Whether two points are the same optimum for all one can tell.
fn alike(layout: &Layout, a: &[f64], b: &[f64]) -> bool {
    let variances = (0..a.len()).filter(|&i| layout.is_variance(i));
    let least = 1e-5 * variances.fold(0.0_f64, |most, i| most.max(a[i]));
    (0..a.len()).all(|i| {
        if layout.is_variance(i) {
            (a[i] == 0.0) == (b[i] == 0.0)
                && (a[i] + least) / (b[i] + least) < 1.5
                && (b[i] + least) / (a[i] + least) < 1.5
        } else {
            let nothing = layout.spread_of[i].is_some_and(|v| a[v] == 0.0 && b[v] == 0.0);
            nothing
                || (a[i] - b[i]).abs() < 0.1
                    && (1.0 - a[i]) < 3.0 * (1.0 - b[i])
                    && (1.0 - b[i]) < 3.0 * (1.0 - a[i])
        }
    })
}

/// Climbs the approximate likelihood; `scratch` is a climb whose buffers are free. `None` where it does not come above `floor` or
/// comes to one of the optima that are known.
fn climb(
    spectrum: &mut Spectrum,
    layout: &Layout,
    (values, held): (&[f64], Option<usize>),
    (floor, known): (f64, &[Optimum]),
    scratch: &mut Climb,
) -> Option<Optimum> {
    scratch.begin_again(values, held, if spectrum.exact { ROUGH } else { ROUGHER }, floor);
    while let Some(question) = scratch.ask() {
        let answer = spectrum.answer(question);
        let sound = answer.log_likelihood.is_finite();
        scratch.tell(layout, if sound { Ok(answer) } else { Err(EvaluationError::NotPositive) });
        let point = &scratch.point;
        let again = |other: &Optimum| {
            point.log_likelihood > other.0 - AT_AN_OPTIMUM && alike(layout, &point.values, &other.1)
        };
        if known.iter().any(again) {
            return None;
        }
    }
    let point = &scratch.point;
    (point.log_likelihood.is_finite() && point.log_likelihood >= floor)
        .then(|| (point.log_likelihood, point.values.clone()))
}
