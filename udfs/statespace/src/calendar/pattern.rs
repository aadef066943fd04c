//! The step of a set of sorted integers, and whether it is to be believed.
//!
//! The finest step that reaches every value is the greatest common divisor of the differences. One value that
//! is wrong (a row one second off in daily data, a Tuesday among Mondays) makes it absurdly fine, so it is
//! held against the usual step: the frequent difference that the most values agree with. The rules, in order:
//!
//! 1. The finest step is itself the most frequent difference, and the grid has at most 20 points a value (or
//!    400, where the step was seen twice or more: long gaps): the finest step it is.
//! 2. At most one value in ten is off the usual step, and that is no accident: those are strays.
//! 3. The finest grid has at most 20 points a value: the finest step it is, the rest are gaps.
//! 4. Fewer than half are off the usual step, and that is no accident: those are strays.
//! 5. Otherwise there is no step.
//!
//! "No accident": on a grid r times as fine as the usual step, n values scattered at random would agree on one
//! of its r phases up to s strays with a probability of at most C(n, s) r^-(n-s-1); that must be below 1e-6.

/// Most grid points per value of a grid that is taken as it is.
const PLAUSIBLE: u64 = 20;
/// The same where the step itself occurs repeatedly; about one value a year on a daily grid.
const PLAUSIBLE_IF_SEEN: u64 = 400;
/// How many of the most frequent differences are tried as the usual step.
const CANDIDATES: usize = 4;
/// ln(1e6): how unlikely an accident must be.
const NO_ACCIDENT: f64 = 13.815_510_557_964_274;

/// What a set of values says about its step.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Pattern {
    /// Every value is on the grid of this step.
    Even { step: i64 },
    /// Most values are on the grid of this step through `member`, the first of them; the others are strays.
    Strays { step: i64, member: i64 },
    /// No step is to be believed; the finest would be this one.
    Uneven { finest: i64 },
    /// The values lie further apart than an `i64` can say.
    TooWide,
}

/// The pattern of at least two values in ascending order without repetition.
pub(super) fn of(values: &[i64]) -> Pattern {
    let (Some(&first), Some(&last)) = (values.first(), values.last()) else {
        return Pattern::TooWide;
    };
    let differences = frequencies(values);
    let finest = differences.iter().fold(0, |divisor, &(difference, _)| gcd(divisor, difference));
    let (Ok(step), Some(&(usual, seen))) = (i64::try_from(finest), differences.first()) else {
        return Pattern::TooWide;
    };
    let n = values.len() as u64;
    let points = (last.abs_diff(first) / finest.max(1)).saturating_add(1);
    let at_most = |per_value: u64| points <= n.saturating_mul(per_value);
    if usual == finest && at_most(if seen >= 2 { PLAUSIBLE_IF_SEEN } else { PLAUSIBLE }) {
        return Pattern::Even { step };
    }
    let strays = usual_step(values, &differences, finest);
    match strays {
        Some(strays) if strays.count * 10 <= values.len() => strays.pattern(),
        _ if at_most(PLAUSIBLE) => Pattern::Even { step },
        Some(strays) if strays.count * 2 < values.len() => strays.pattern(),
        _ => Pattern::Uneven { finest: step },
    }
}

/// The residue class modulo `step` that most values belong to, the earliest such class on a tie:
/// its first value and its size. `None` without values or with a step below 1.
pub(super) fn phase(values: &[i64], step: i64) -> Option<(i64, usize)> {
    if step < 1 {
        return None;
    }
    let mut classes: Vec<(i64, i64)> = values.iter().map(|&v| (v.rem_euclid(step), v)).collect();
    classes.sort_unstable();
    classes
        .chunk_by(|a, b| a.0 == b.0)
        .filter_map(|class| class.first().map(|&(_, first)| (first, class.len())))
        .max_by_key(|&(first, size)| (size, std::cmp::Reverse(first)))
}

/// A usual step and how many values it leaves out.
struct Strays {
    step: i64,
    member: i64,
    count: usize,
}

impl Strays {
    fn pattern(&self) -> Pattern {
        Pattern::Strays { step: self.step, member: self.member }
    }
}

/// Among the most frequent differences longer than the finest step, the one that the most values agree with,
/// provided that their agreement is no accident.
fn usual_step(values: &[i64], differences: &[(u64, usize)], finest: u64) -> Option<Strays> {
    let mut best: Option<Strays> = None;
    for &(difference, _) in differences.iter().filter(|d| d.0 > finest).take(CANDIDATES) {
        let Ok(step) = i64::try_from(difference) else { continue };
        let Some((member, size)) = phase(values, step) else { continue };
        let count = values.len() - size;
        if best.as_ref().is_none_or(|b| count < b.count)
            && no_accident(values.len(), count, difference / finest.max(1))
        {
            best = Some(Strays { step, member, count });
        }
    }
    best
}

/// True if all but `strays` of `n` scattered values would agree on one of `phases` phases less often than once
/// in a million times (the bound of the module's text, on the logarithmic scale).
fn no_accident(n: usize, strays: usize, phases: u64) -> bool {
    if strays * 2 >= n {
        return false;
    }
    let choices: f64 = (0..strays).map(|i| ((n - i) as f64 / (i + 1) as f64).ln()).sum();
    (n - strays - 1) as f64 * (phases as f64).ln() - choices > NO_ACCIDENT
}

/// The differences of neighbours with their frequencies, the most frequent first, the shortest first on a tie.
fn frequencies(values: &[i64]) -> Vec<(u64, usize)> {
    let mut differences: Vec<u64> =
        values.iter().zip(values.iter().skip(1)).map(|(a, b)| b.abs_diff(*a)).collect();
    differences.sort_unstable();
    let mut runs: Vec<(u64, usize)> = differences
        .chunk_by(|a, b| a == b)
        .filter_map(|run| run.first().map(|&difference| (difference, run.len())))
        .collect();
    runs.sort_by_key(|&(difference, count)| (std::cmp::Reverse(count), difference));
    runs
}

/// Greatest common divisor (Euclid).
fn gcd(a: u64, b: u64) -> u64 {
    if b == 0 { a } else { gcd(b, a % b) }
}
