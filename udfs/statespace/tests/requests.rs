//! Contradictions in a request: each is refused with the argument, the value and what would be right.

#[path = "support/plain.rs"]
mod plain;

use plain::plain;
use proptest::prelude::*;
use stillwell_statespace::structure::Trend;
use stillwell_statespace::{BadRequest, Request, SeasonRequest, TransformRequest, check};

fn given(periods: &[f64]) -> Request {
    Request { season: SeasonRequest::Given(periods.to_vec()), ..plain(Trend::LocalLevel) }
}

fn with_harmonics(periods: &[f64], harmonics: &[usize]) -> Request {
    Request { harmonics: Some(harmonics.to_vec()), ..given(periods) }
}

fn with_known(trend: Trend, known: &[(&str, f64)]) -> Request {
    Request { known: known.iter().map(|(n, v)| ((*n).to_owned(), *v)).collect(), ..plain(trend) }
}

fn names(list: &[&str]) -> Vec<String> {
    list.iter().map(|n| (*n).to_owned()).collect()
}

/// The request is refused because of `argument`, in a sentence with all of `words`.
#[track_caller]
fn refused(request: &Request, argument: &str, words: &[&str]) {
    let bad = check(request).expect_err("a contradiction");
    assert_eq!(bad.argument, argument, "{bad}");
    assert!(words.iter().all(|w| bad.why.contains(w)), "{bad}: {words:?}");
    assert_eq!(bad.to_string(), format!("argument '{argument}': {}", bad.why));
}

#[track_caller]
fn accepted(request: &Request) {
    assert_eq!(check(request), Ok(()));
}

#[test]
fn a_season_shorter_than_two_steps() {
    for period in [1.0, 0.0, -7.0, 1.999, f64::NAN, f64::NEG_INFINITY, f64::INFINITY] {
        refused(&given(&[period]), "season", &["at least 2 steps", "0 means no season"]);
    }
    refused(&given(&[12.0, 1.5]), "season", &["got 1.5"]);
    accepted(&given(&[2.0]));
    accepted(&given(&[]));
}

#[test]
fn a_candidate_period_shorter_than_two_steps() {
    let request = Request { season: SeasonRequest::Auto(vec![12.0, 1.0]), ..plain(Trend::LocalLevel) };
    refused(&request, "period", &["at least 2 steps", "got 1"]);
    accepted(&Request { season: SeasonRequest::Auto(vec![12.0, 7.0]), ..plain(Trend::LocalLevel) });
}

#[test]
fn a_season_of_endless_length() {
    refused(&given(&[100_001.0]), "season", &["at most 100000", "got 100001"]);
    refused(&given(&[1e300]), "season", &["at most 100000"]);
    accepted(&given(&[100_000.0]));
}

#[test]
fn a_period_listed_twice() {
    refused(&given(&[7.0, 12.0, 7.0]), "season", &["7 is listed twice"]);
    refused(&given(&[52.18, 52.18]), "season", &["52.18 is listed twice"]);
    accepted(&given(&[7.0, 12.0]));
}

#[test]
fn more_or_fewer_harmonic_counts_than_periods() {
    refused(
        &with_harmonics(&[7.0, 52.0, 365.0], &[2, 3]),
        "harmonics",
        &["2 counts for 3 periods", "one per period"],
    );
    refused(&with_harmonics(&[52.0], &[2, 3]), "harmonics", &["2 counts for 1 periods"]);
    accepted(&with_harmonics(&[7.0, 52.0], &[2, 3]));
    accepted(&with_harmonics(&[7.0, 52.0], &[3]));
}

#[test]
fn a_harmonic_count_of_none_or_too_many() {
    refused(&with_harmonics(&[52.0], &[0]), "harmonics", &["between 1 and 60", "got 0", "default"]);
    refused(&with_harmonics(&[365.0], &[61]), "harmonics", &["between 1 and 60", "got 61"]);
    accepted(&with_harmonics(&[365.0], &[60]));
}

#[test]
fn more_harmonics_than_a_period_has() {
    refused(&with_harmonics(&[7.0], &[4]), "harmonics", &["7 steps has at most 3", "got 4"]);
    refused(&with_harmonics(&[52.0, 7.0], &[4]), "harmonics", &["7 steps has at most 3", "got 4"]);
    refused(&with_harmonics(&[52.0, 7.0], &[6, 5]), "harmonics", &["7 steps has at most 3", "got 5"]);
    refused(&with_harmonics(&[2.5], &[2]), "harmonics", &["2.5 steps has at most 1", "got 2"]);
    accepted(&with_harmonics(&[12.0], &[6]));
    accepted(&with_harmonics(&[2.5], &[1]));
}

#[test]
fn a_cycle_whose_bounds_are_not_in_order() {
    for bounds in [(1.0, 9.0), (9.0, 3.0), (5.0, 5.0), (3.0, f64::INFINITY), (f64::NAN, 9.0), (3.0, f64::NAN)]
    {
        let request = Request { cycle: Some(bounds), ..plain(Trend::LocalLevel) };
        refused(
            &request,
            "cycle",
            &["at least 2", "below the longest", &format!("({}, {})", bounds.0, bounds.1)],
        );
    }
    accepted(&Request { cycle: Some((3.0, 9.0)), ..plain(Trend::LocalLevel) });
}

#[test]
fn an_autoregression_of_too_high_an_order() {
    let request = |autoregression| Request { autoregression, ..plain(Trend::LocalLevel) };
    let bad = check(&request(1000)).expect_err("too high");
    assert_eq!(bad.argument, "autoregression");
    assert!(bad.why.contains("got 1000"), "{bad}");
    // The highest order that is allowed stands in the message, and it is.
    let words: Vec<usize> =
        bad.why.split(|c: char| !c.is_ascii_digit()).filter_map(|w| w.parse().ok()).collect();
    accepted(&request(words[0]));
    refused(&request(words[0] + 1), "autoregression", &[&format!("at most {}", words[0])]);
}

#[test]
fn a_driver_listed_twice() {
    let request = |constant: &[&str], drifting: &[&str]| Request {
        drivers: names(constant),
        drifting_drivers: names(drifting),
        ..plain(Trend::LocalLevel)
    };
    refused(&request(&["price", "promo", "price"], &[]), "drivers", &["'price' is listed twice"]);
    refused(&request(&[], &["promo", "promo"]), "drivers", &["'promo' is listed twice"]);
    refused(&request(&["price"], &["price"]), "drivers", &["'price' is listed twice"]);
    accepted(&request(&["price"], &["promo"]));
}

#[test]
fn nothing_to_model() {
    refused(&plain(Trend::None), "trend", &["'none'", "nothing to model", "choose a trend"]);
    for something in [
        Request { season: SeasonRequest::Given(vec![7.0]), ..plain(Trend::None) },
        Request { cycle: Some((3.0, 9.0)), ..plain(Trend::None) },
        Request { autoregression: 1, ..plain(Trend::None) },
        Request { drivers: names(&["price"]), ..plain(Trend::None) },
        Request { drifting_drivers: names(&["price"]), ..plain(Trend::None) },
    ] {
        accepted(&something);
    }
}

#[test]
fn a_known_parameter_given_twice() {
    let request = with_known(Trend::LocalLevel, &[("level", 1.0), ("irregular", 0.0), ("level", 2.0)]);
    refused(&request, "known", &["'level' is given twice"]);
}

#[test]
fn a_known_parameter_that_the_structure_lacks() {
    refused(
        &with_known(Trend::LocalLevel, &[("slope", 1.0)]),
        "known",
        &["'slope' is no parameter", "it has irregular, level"],
    );
    refused(&with_known(Trend::FixedLine, &[("level", 1.0)]), "known", &["it has irregular"]);
    refused(
        &with_known(Trend::Damped, &[("damping", 0.5)]),
        "known",
        &["it has irregular, level, slope, slope_damping"],
    );
    // A fixed season has no variance; several seasons have one each, by period.
    let fixed = Request {
        season: SeasonRequest::Given(vec![12.0]),
        fixed_season: true,
        ..with_known(Trend::LocalLevel, &[("season", 1.0)])
    };
    refused(&fixed, "known", &["'season'", "it has irregular, level"]);
    let several = Request {
        season: SeasonRequest::Given(vec![7.0, 52.18]),
        ..with_known(Trend::LocalLevel, &[("season", 1.0)])
    };
    refused(&several, "known", &["it has irregular, level, season_7, season_52.18"]);
    let driven = Request {
        drivers: names(&["price"]),
        drifting_drivers: names(&["promo"]),
        ..with_known(Trend::LocalLevel, &[("price", 1.0)])
    };
    refused(&driven, "known", &["'price'", "it has irregular, level, promo"]);
    accepted(&Request { drivers: Vec::new(), drifting_drivers: names(&["price"]), ..driven });
}

#[test]
fn known_parameters_of_what_is_left_open() {
    // Whatever is chosen, these may be among its parameters.
    let open = |name: &str| Request { known: vec![(name.to_owned(), 0.5)], ..Request::default() };
    for name in ["irregular", "level", "slope", "slope_damping", "season"] {
        accepted(&open(name));
    }
    refused(&open("cycle"), "known", &["'cycle' is no parameter"]);
}

#[test]
fn a_known_variance_below_zero() {
    for value in [-1.0, -1e-300, f64::NAN, f64::INFINITY] {
        for name in ["irregular", "level"] {
            let request = with_known(Trend::LocalLevel, &[(name, value)]);
            refused(
                &request,
                "known",
                &[&format!("'{name}' is a variance"), "not negative", &format!("got {value}")],
            );
        }
    }
    accepted(&with_known(Trend::LocalLevel, &[("irregular", 0.0), ("level", 1e-9)]));
}

#[test]
fn a_known_damping_outside_zero_and_one() {
    for value in [0.0, 1.0, 1.5, -0.5, f64::NAN] {
        let request = with_known(Trend::Damped, &[("slope_damping", value)]);
        refused(&request, "known", &["'slope_damping' lies between 0 and 1", &format!("got {value}")]);
        let cycle =
            Request { cycle: Some((3.0, 9.0)), ..with_known(Trend::LocalLevel, &[("cycle_damping", value)]) };
        refused(&cycle, "known", &["'cycle_damping' lies between 0 and 1"]);
    }
    accepted(&with_known(Trend::Damped, &[("slope_damping", 0.9)]));
}

#[test]
fn a_known_cycle_period_below_two() {
    let request = |value| Request {
        cycle: Some((3.0, 9.0)),
        ..with_known(Trend::LocalLevel, &[("cycle_period", value)])
    };
    for value in [1.0, 0.0, f64::NAN] {
        refused(&request(value), "known", &["'cycle_period' is at least 2 steps", &format!("got {value}")]);
    }
    accepted(&request(5.0));
}

#[test]
fn a_known_coefficient_that_is_no_number() {
    let request = |value| Request { autoregression: 2, ..with_known(Trend::LocalLevel, &[("ar_2", value)]) };
    for value in [f64::NAN, f64::INFINITY] {
        refused(&request(value), "known", &["'ar_2' is a finite number"]);
    }
    accepted(&request(-0.3));
}

/// Numbers that a query can hold.
fn number() -> impl Strategy<Value = f64> {
    prop_oneof![
        any::<f64>(),
        0.0..60.0f64,
        proptest::sample::select(vec![0.0, 2.0, 7.0, 12.0, f64::NAN, f64::INFINITY, -1.0])
    ]
}

prop_compose! {
    fn requests()(
        trend in proptest::option::of(proptest::sample::select(Trend::ALL.map(|(_, t)| t).to_vec())),
        periods in proptest::collection::vec(number(), 0..3),
        open in any::<bool>(),
        harmonics in proptest::option::of(proptest::collection::vec(prop_oneof![0usize..8, Just(usize::MAX)], 1..3)),
        cycle in proptest::option::of((number(), number())),
        autoregression in prop_oneof![0usize..4, Just(usize::MAX)],
        known in proptest::collection::vec((proptest::sample::select(vec!["irregular", "slope_damping", "", "x"]), number()), 0..3),
        drivers in proptest::collection::vec(proptest::sample::select(vec!["a", "b", ""]), 0..3),
    ) -> Request {
        Request {
            trend,
            season: if open { SeasonRequest::Auto(periods) } else { SeasonRequest::Given(periods) },
            harmonics,
            fixed_season: false,
            cycle,
            autoregression,
            transform: TransformRequest::Auto,
            known: known.into_iter().map(|(n, v)| (n.to_owned(), v)).collect(),
            drivers: names(&drivers),
            drifting_drivers: Vec::new(),
        }
    }
}

proptest! {
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn any_request_is_accepted_or_refused_with_a_reason(request in requests()) {
        if let Err(BadRequest { argument, why }) = check(&request) {
            prop_assert!(!argument.is_empty() && !why.is_empty());
        }
    }
}

#[test]
fn a_drifting_driver_named_like_a_parameter() {
    for name in ["level", "irregular", "season_12", "slope_damping"] {
        let request = Request { drifting_drivers: names(&[name]), ..plain(Trend::LocalLevel) };
        refused(&request, "drifting_drivers", &[name, "rename"]);
    }
    accepted(&Request { drifting_drivers: names(&["price"]), ..plain(Trend::LocalLevel) });
}

#[test]
fn seasons_that_share_a_harmonic() {
    refused(&with_harmonics(&[7.0, 14.0], &[3, 7]), "season", &["7", "14", "share a harmonic"]);
    refused(&given(&[6.0, 12.0]), "season", &["6", "12"]);
    accepted(&with_harmonics(&[7.0, 365.25], &[3, 4]));
    accepted(&given(&[24.0, 168.0]));
}

#[test]
fn a_slip_in_a_known_name_is_understood() {
    refused(
        &with_known(Trend::LocalLevel, &[("irregulr", 1.0)]),
        "known",
        &["irregulr", "did you mean 'irregular'?"],
    );
}
