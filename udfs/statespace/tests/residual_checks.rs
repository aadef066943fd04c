//! Residual checks against values worked out elsewhere (origin: `data/README.md`), and their invariants.

use proptest::prelude::*;
use rand::SeedableRng;
use rand_distr::{Distribution, StandardNormal};
use serde_json::Value;
use std::collections::BTreeMap;
use stillwell_statespace::residual_checks::*;

/// Arithmetic on the same residuals in another order: a few last digits.
const SAME_RESIDUALS: f64 = 1e-10;

fn cases() -> BTreeMap<String, Value> {
    serde_json::from_str(include_str!("data/residual_checks.json")).expect("the file of cases is JSON")
}

fn number(value: &Value) -> f64 {
    value.as_f64().unwrap_or(f64::NAN)
}

fn count(value: &Value) -> usize {
    number(value) as usize
}

/// A list of numbers; null becomes NaN.
fn numbers(value: &Value) -> Vec<f64> {
    value.as_array().expect("a list").iter().map(number).collect()
}

fn relative(got: f64, wanted: f64) -> f64 {
    (got - wanted).abs() / wanted.abs().max(f64::MIN_POSITIVE)
}

/// Compares within a relative tolerance and keeps the worst difference of the test.
struct Judge {
    tolerance: f64,
    worst: f64,
    compared: usize,
}

impl Judge {
    fn new(tolerance: f64) -> Self {
        Self { tolerance, worst: 0.0, compared: 0 }
    }

    #[track_caller]
    fn compare(&mut self, what: &str, got: f64, wanted: f64) {
        let difference = relative(got, wanted);
        assert!(difference <= self.tolerance, "{what}: {got:e}, but {wanted:e} is wanted");
        self.worst = self.worst.max(difference);
        self.compared += 1;
    }
}

#[test]
fn statistics_agree_with_the_reference_cases() {
    let mut judge = Judge::new(SAME_RESIDUALS);
    for (id, case) in cases() {
        let (errors, wanted) = (numbers(&case["std_resid"]), &case["diagnostics"]);
        assert_eq!(errors.len(), count(&wanted["n_resid"]), "{id}");
        let sample = moments(&errors);
        judge.compare(&format!("{id} mean"), sample.mean, number(&wanted["mean"]));
        judge.compare(&format!("{id} variance"), sample.variance, number(&wanted["variance_biased"]));
        judge.compare(&format!("{id} skewness"), skewness(&errors).value, number(&wanted["skewness"]));
        judge.compare(&format!("{id} kurtosis"), kurtosis(&errors).value, number(&wanted["kurtosis"]));
        judge.compare(&format!("{id} normality"), bowman_shenton(&errors).value, number(&wanted["JB"]));
        let h = heteroskedasticity(&errors);
        judge.compare(&format!("{id} H"), h.value, number(&wanted["H_round"]["H"]));
        assert_eq!(h.df, count(&wanted["H_round"]["h"]), "{id}");
        for (lags, q) in wanted["Q"].as_object().expect("Q by lags") {
            let got = ljung_box(&errors, lags.parse().expect("a number of lags"), 0).value;
            judge.compare(&format!("{id} Q({lags})"), got, number(q));
        }
        // Written to 50 digits from unrounded residuals: a correlation near zero keeps absolute digits.
        let correlations = numbers(&wanted["acf"]);
        for (got, wanted) in autocorrelations(&errors, correlations.len()).iter().zip(&correlations) {
            assert!((got - wanted).abs() < 1e-13, "{id}: {got:e}, {wanted:e}");
        }
    }
    println!("{} statistics, worst relative difference {:e}", judge.compared, judge.worst);
    assert!(judge.compared > 150);
}

#[test]
fn p_values_agree_with_the_reference_cases() {
    let mut judge = Judge::new(1e-11);
    for (id, case) in cases() {
        let (errors, wanted) = (numbers(&case["std_resid"]), &case["computed"]);
        judge.compare(&format!("{id} H"), heteroskedasticity(&errors).p_value, number(&wanted["H_p"]));
        judge.compare(&format!("{id} S"), skewness(&errors).p_value, number(&wanted["skewness_p"]));
        judge.compare(&format!("{id} K"), kurtosis(&errors).p_value, number(&wanted["kurtosis_p"]));
        judge.compare(
            &format!("{id} N"),
            bowman_shenton(&errors).p_value,
            number(&case["diagnostics"]["JB_pvalue"]),
        );
        for (lags, p) in wanted["Q_p"].as_object().expect("p of Q by lags") {
            let q = ljung_box(&errors, lags.parse().expect("a number of lags"), count(&case["n_hyper"]));
            judge.compare(&format!("{id} Q({lags})"), q.p_value, number(p));
        }
    }
    println!("{} p-values, worst relative difference {:e}", judge.compared, judge.worst);
    assert!(judge.compared > 100);
}

// Durbin & Koopman (2012), 2.12.1, the Nile with variances 15099 and 1469.1: S = -0.03, K - 3 = 0.09,
// N = 0.05, H(33) = 0.61, Q(9) = 8.84. Quoted from memory.
#[test]
fn the_printed_checks_of_the_nile_come_out() {
    let errors = numbers(&cases()["nile__ll"]["std_resid"]);
    let h = heteroskedasticity(&errors);
    assert_eq!(h.df, 33);
    for (got, printed) in [
        (skewness(&errors).value, "-0.03"),
        (kurtosis(&errors).value - 3.0, "0.09"),
        (bowman_shenton(&errors).value, "0.05"),
        (h.value, "0.61"),
        (ljung_box(&errors, 9, 2).value, "8.84"),
    ] {
        assert_eq!(format!("{got:.2}"), printed);
    }
}

#[test]
fn goodness_of_fit_agrees_with_exact_arithmetic() {
    let mut judge = Judge::new(1e-11);
    for (id, case) in cases().iter().filter(|(_, case)| case.get("v").is_some()) {
        let (observed, wanted) = (numbers(&case["observed"]), &case["computed"]);
        let sse = sum_of_squared_errors(&numbers(&case["v"]), &numbers(&case["F"]));
        judge.compare(&format!("{id} SSE"), sse, number(&wanted["sse"]));
        judge.compare(
            &format!("{id} drift"),
            r_squared_drift(&observed, sse),
            number(&wanted["r_squared_drift"]),
        );
        if let Some(season) = wanted.get("r_squared_season") {
            let got = r_squared_season(&observed, sse, count(&case["period"]));
            judge.compare(&format!("{id} season"), got, number(season));
        }
    }
    assert_eq!(judge.compared, 10);
}

#[test]
fn information_criteria_agree_with_the_reference_cases() {
    let mut judge = Judge::new(1e-14);
    for (id, case) in cases() {
        let (w, d) = (count(&case["n_hyper"]), count(&case["n_diffuse"]));
        let l = number(&case["loglik_nd"]);
        judge.compare(&format!("{id} AIC"), aic(l, w, d), number(&case["aic_nd"]));
        judge.compare(&format!("{id} BIC"), bic(l, w, d, count(&case["n_obs"])), number(&case["bic_nd"]));
    }
}

// NIST Statistical Reference Datasets, univariate summary statistics. The digits of each row are what the
// data leave: in NumAcc3 and NumAcc4 a spread of 0.1 sits on a million and on ten million, and the tenths
// are not binary numbers, so the stored values themselves are off by up to 6e-10 and 9e-9 of the spread. The
// correlation, a ratio, hardly feels that.
#[test]
fn moments_and_autocorrelation_reach_the_certified_digits() {
    let sets: BTreeMap<String, Value> =
        serde_json::from_str(include_str!("data/nist_univariate.json")).expect("the file of sets is JSON");
    // Data set, digits wanted of the mean, of the standard deviation and of r_1.
    let digits_wanted = [
        ("Lew", 14.0, 14.0, 14.0),
        ("Lottery", 14.0, 14.0, 14.0),
        ("Mavro", 14.0, 12.5, 12.5),
        ("Michelso", 14.0, 13.0, 13.0),
        ("NumAcc1", 15.0, 15.0, 15.0),
        ("NumAcc2", 14.0, 14.0, 14.0),
        ("NumAcc3", 14.0, 9.0, 13.0),
        ("NumAcc4", 14.0, 8.0, 13.0),
        ("PiDigits", 14.0, 14.0, 13.0),
    ];
    assert_eq!(sets.len(), digits_wanted.len());
    for (name, mean, deviation, correlation) in digits_wanted {
        let set = &sets[name];
        let values = numbers(&set["values"]);
        let sample = moments(&values);
        let n = values.len() as f64;
        let got = [sample.mean, (sample.variance * n / (n - 1.0)).sqrt(), autocorrelations(&values, 1)[0]];
        for (what, got, wanted) in [
            ("mean", got[0], mean),
            ("sd_n_minus_1", got[1], deviation),
            ("autocorr_lag1", got[2], correlation),
        ] {
            let digits = -relative(got, number(&set[what])).max(1e-16).log10();
            println!("{name} {what}: {digits:.1} digits");
            assert!(digits >= wanted, "{name} {what}: {got:?} has {digits:.1} digits, wanted {wanted}");
        }
    }
}

// A random walk with drift, both unknown, is itself a structure. Its one-step errors are v_t = Delta y_t -
// the mean of the differences before, with F_t proportional to 1 + 1/(differences before). Against itself
// it comes out at zero but for the median of F_t, which is still a little above 1.
#[test]
fn a_random_walk_with_drift_is_no_better_than_itself() {
    let y = [3.0, 4.5, 4.0, 7.0, 9.5, 8.0, 11.0, 10.5, 13.0, 16.5, 15.0, 18.0];
    let differences: Vec<f64> = y.windows(2).map(|w| w[1] - w[0]).collect();
    let before = |t: usize| differences[..t].iter().sum::<f64>() / t as f64;
    let errors: Vec<f64> = (1..differences.len()).map(|t| differences[t] - before(t)).collect();
    let variances: Vec<f64> = (1..differences.len()).map(|t| 1.0 + 1.0 / t as f64).collect();
    // Ten errors: the last four stand after 7 to 10 differences; the lower median of F_t is that after 9.
    let got = r_squared_drift(&y, sum_of_squared_errors(&errors, &variances));
    assert!((got - (1.0 - (1.0 + 1.0 / 9.0))).abs() < 1e-13, "{got}");
}

#[test]
fn only_differences_of_observed_neighbours_count() {
    // Differences 1 2 | 3: mean 2, squares 2 on 2 degrees of freedom; five observations leave 3.
    let gap = [0.0, 1.0, 3.0, f64::NAN, 10.0, 13.0];
    assert!((r_squared_drift(&gap, 1.5) - (1.0 - 1.5 / 3.0)).abs() < 1e-15);
    // Two seasons: differences 1, 3 and 2, 5 around their means leave 2 + 4.5 on 4 - 2 degrees of freedom.
    let season = [0.0, 1.0, 3.0, 6.0, 11.0];
    assert!((r_squared_season(&season, 1.3, 2) - (1.0 - 1.3 / 6.5)).abs() < 1e-15);
    let scattered = [1.0, f64::NAN, 2.0, f64::NAN, 4.0];
    assert!(r_squared_drift(&scattered, 1.0).is_nan());
}

#[test]
fn degrees_of_freedom_follow_the_stated_rule() {
    let errors: Vec<f64> = (0..40).map(|t| f64::from(t * t % 17)).collect();
    let df = |lags, estimated| ljung_box(&errors, lags, estimated).df;
    assert_eq!([df(10, 0), df(10, 1), df(10, 2), df(10, 4), df(2, 4)], [10, 10, 9, 7, 1]);
    let lags =
        [(99, 1.0), (143, 12.0), (179, 12.0), (148, 52.0), (99, 0.0), (179, 4.0), (7, 12.0), (0, f64::NAN)];
    assert_eq!(lags.map(|(n, period)| default_lags(n, period)), [10, 24, 24, 29, 10, 10, 1, 1]);
    assert_eq!(default_lags(1000, f64::INFINITY), 10);
    assert_eq!(default_lags(1000, 1e300), 200);
}

#[test]
fn checks_without_a_meaning_are_nan_and_never_panic() {
    // 0.1 + 0.2 is not 0.3, but no spread either.
    let rounding = [0.3, 0.1 + 0.2, 0.3, 0.3, 0.1 + 0.2];
    let lists: [&[f64]; 9] = [
        &rounding,
        &[],
        &[1.0],
        &[1.0, 2.0],
        &[0.0; 5],
        &[0.1; 7],
        &[1.0, f64::NAN, 2.0, 3.0],
        &[1.0, f64::INFINITY, 2.0, 3.0],
        &[1e308, -1e308, 1e308, -1e308],
    ];
    for errors in lists {
        for check in [ljung_box(errors, 1, 1), skewness(errors), kurtosis(errors), bowman_shenton(errors)] {
            assert!(check.value.is_nan() && check.p_value.is_nan(), "{errors:?}: {check:?}");
        }
        assert!(autocorrelations(errors, 3).iter().all(|r| r.is_nan()));
        let h = heteroskedasticity(errors);
        assert_eq!(h.value.is_nan(), h.p_value.is_nan());
        assert!(r_squared_drift(errors, f64::NAN).is_nan());
    }
    assert!(heteroskedasticity(&[0.0, 0.0, 1.0]).value.is_nan());
    assert!(heteroskedasticity(&[1.0, 2.0]).value.is_nan());
    let errors = [1.0, -1.0, 2.0, 0.5];
    assert!([0, 4, 5, usize::MAX].iter().all(|&lags| ljung_box(&errors, lags, 0).value.is_nan()));
    assert!(autocorrelations(&errors, 5)[3..].iter().all(|r| r.is_nan()));
    for observed in [&[][..], &[1.0], &[1.0, 2.0], &[0.1, 0.2, 0.3, 0.4], &[5.0; 9], &[f64::NAN; 4]] {
        assert!(r_squared_drift(observed, 1.0).is_nan(), "{observed:?}");
        assert!(r_squared_season(observed, 1.0, 4).is_nan(), "{observed:?}");
    }
    assert!(r_squared_season(&[1.0, 3.0, 2.0, 8.0], 1.0, 0).is_nan());
    assert!(sum_of_squared_errors(&[], &[]).is_nan());
    assert!(sum_of_squared_errors(&[f64::NAN, 1.0], &[1.0, 0.0]).is_nan());
}

// If the model is right, a check at 5 % speaks up in 5 % of the series. 4,000 series: standard error 0.34 %.
// Q is known to speak up slightly too often (Davies, Triggs & Newbold 1977, Biometrika 64, from memory).
// Normality converges slowly and is known to speak up too rarely in short series (common practice), so it
// gets the wider band.
#[test]
fn checks_speak_up_as_often_as_they_say() {
    let mut generator = rand_chacha::ChaCha8Rng::seed_from_u64(20_120_503);
    let (series, n) = (4000, 300);
    let mut alarms = [0.0; 5];
    for _ in 0..series {
        let errors: Vec<f64> = StandardNormal.sample_iter(&mut generator).take(n).collect();
        let checks = [
            ljung_box(&errors, 10, 0),
            heteroskedasticity(&errors),
            skewness(&errors),
            kurtosis(&errors),
            bowman_shenton(&errors),
        ];
        for (alarm, check) in alarms.iter_mut().zip(checks) {
            *alarm += f64::from(u8::from(check.p_value < 0.05)) / f64::from(series);
        }
    }
    println!("share of alarms at 5 %: Q, H, S, K, N = {alarms:?}");
    for (alarm, (low, high)) in
        alarms.iter().zip([(0.04, 0.065), (0.04, 0.06), (0.04, 0.06), (0.03, 0.06), (0.03, 0.06)])
    {
        assert!((low..high).contains(alarm), "{alarms:?}");
    }
}

#[test]
fn checks_see_what_they_are_for() {
    let mut generator = rand_chacha::ChaCha8Rng::seed_from_u64(7);
    let noise: Vec<f64> = StandardNormal.sample_iter(&mut generator).take(300).collect();
    let mut state = 0.0;
    let dependent: Vec<f64> = noise
        .iter()
        .map(|e| {
            state = 0.4 * state + e;
            state
        })
        .collect();
    let growing: Vec<f64> = noise.iter().enumerate().map(|(t, e)| e * (1.0 + t as f64 / 100.0)).collect();
    let skewed: Vec<f64> = noise.iter().map(|e| e.exp()).collect();
    let alarms = |errors: &[f64]| {
        [ljung_box(errors, 20, 0), heteroskedasticity(errors), bowman_shenton(errors)]
            .map(|check| check.p_value < 0.01)
    };
    assert_eq!(alarms(&noise), [false, false, false]);
    assert!(alarms(&dependent)[0] && alarms(&growing)[1] && alarms(&skewed)[2]);
    assert!(heteroskedasticity(&growing).value > 1.0);
}

/// Errors with some spread, so that every check has a meaning.
fn errors() -> impl Strategy<Value = Vec<f64>> {
    prop::collection::vec(-5.0_f64..5.0, 12..120).prop_filter("no spread", |e| moments(e).variance > 0.1)
}

fn close(a: f64, b: f64, tolerance: f64) -> bool {
    (a - b).abs() <= tolerance * (1.0 + a.abs().max(b.abs()))
}

proptest! {
    #[test]
    fn scale_and_shift_change_nothing(errors in errors(), scale in 1e-3_f64..1e3, shift in -10.0_f64..10.0) {
        let moved: Vec<f64> = errors.iter().map(|e| scale * (e + shift)).collect();
        prop_assert!(close(ljung_box(&moved, 5, 1).value, ljung_box(&errors, 5, 1).value, 1e-9));
        prop_assert!(close(skewness(&moved).value, skewness(&errors).value, 1e-9));
        prop_assert!(close(kurtosis(&moved).value, kurtosis(&errors).value, 1e-9));
        prop_assert!(close(bowman_shenton(&moved).value, bowman_shenton(&errors).value, 1e-9));
        let scaled: Vec<f64> = errors.iter().map(|e| -scale * e).collect();
        prop_assert!(close(heteroskedasticity(&scaled).value, heteroskedasticity(&errors).value, 1e-9));
        prop_assert!(close(skewness(&scaled).value, -skewness(&errors).value, 1e-9));
    }

    #[test]
    fn order_matters_where_it_should(errors in errors(), turn in 0_usize..120) {
        let mut turned = errors.clone();
        turned.rotate_left(turn % errors.len());
        let backward: Vec<f64> = errors.iter().rev().copied().collect();
        for other in [&turned, &backward] {
            prop_assert!(close(skewness(other).value, skewness(&errors).value, 1e-9));
            prop_assert!(close(kurtosis(other).value, kurtosis(&errors).value, 1e-9));
        }
        prop_assert!(close(ljung_box(&backward, 7, 0).value, ljung_box(&errors, 7, 0).value, 1e-9));
        let (h, h_backward) = (heteroskedasticity(&errors), heteroskedasticity(&backward));
        prop_assert!(close(h.value * h_backward.value, 1.0, 1e-9));
        prop_assert!(close(h.p_value, h_backward.p_value, 1e-9));
    }

    #[test]
    fn values_stay_within_their_bounds(errors in errors(), lags in 1_usize..11, estimated in 0_usize..8) {
        let sample = moments(&errors);
        // Pearson's inequality between the moments.
        prop_assert!(sample.kurtosis >= 1.0 + sample.skewness.powi(2) - 1e-9);
        prop_assert!(autocorrelations(&errors, lags).iter().all(|r| r.abs() <= 1.0 + 1e-12));
        let more = ljung_box(&errors, lags + 1, estimated).value;
        prop_assert!(more >= ljung_box(&errors, lags, estimated).value - 1e-12);
        prop_assert!((1..errors.len()).contains(&default_lags(errors.len(), lags as f64)));
    }

    #[test]
    fn a_check_is_a_number_with_a_probability_or_nothing(
        errors in prop::collection::vec(prop_oneof![
            8 => any::<f64>(), 4 => -1.0_f64..1.0, 2 => Just(0.0), 1 => Just(f64::NAN)], 0..40),
        lags in 0_usize..45,
        estimated in 0_usize..50,
    ) {
        let checks = [
            ljung_box(&errors, lags, estimated),
            heteroskedasticity(&errors),
            skewness(&errors),
            kurtosis(&errors),
            bowman_shenton(&errors),
        ];
        for check in checks {
            let nothing = check.value.is_nan() && check.p_value.is_nan();
            let something = check.value.is_finite() && (0.0..=1.0).contains(&check.p_value);
            prop_assert!(nothing || something, "{check:?}");
        }
        let sse = sum_of_squared_errors(&errors, &errors);
        prop_assert!(sse.is_nan() || sse >= 0.0);
        prop_assert!(!r_squared_season(&errors, 1.0, lags).is_infinite());
    }

    #[test]
    fn r_squared_ignores_unit_line_and_season(
        observed in prop::collection::vec(prop_oneof![9 => -5.0_f64..5.0, 1 => Just(f64::NAN)], 40..90),
        scale in 1e-2_f64..1e2,
        line in -2.0_f64..2.0,
        pattern in prop::collection::vec(-3.0_f64..3.0, 4),
    ) {
        let (drift, season) = (r_squared_drift(&observed, 20.0), r_squared_season(&observed, 20.0, 4));
        let on_line = |(t, y): (usize, &f64)| scale * (y + line * t as f64);
        let sloped: Vec<f64> = observed.iter().enumerate().map(on_line).collect();
        prop_assert!(close(r_squared_drift(&sloped, 20.0 * scale * scale), drift, 1e-8));
        prop_assert!(close(r_squared_season(&sloped, 20.0 * scale * scale, 4), season, 1e-8));
        let patterned: Vec<f64> = observed.iter().zip(pattern.iter().cycle()).map(|(y, p)| y + p).collect();
        prop_assert!(close(r_squared_season(&patterned, 20.0, 4), season, 1e-8));
    }

    #[test]
    fn a_seasonal_walk_is_harder_to_beat(
        observed in prop::collection::vec(-5.0_f64..5.0, 20..60),
        sse in 0.1_f64..50.0,
    ) {
        prop_assert!(r_squared_season(&observed, sse, 4) <= r_squared_drift(&observed, sse) + 1e-12);
    }
}
