//! Quantiles and tails against `data/quantiles.csv` (origin: `data/README.md`), and where no table reaches.

use proptest::prelude::*;
use statrs::distribution::{ChiSquared, ContinuousCDF, FisherSnedecor, Normal, StudentsT};
use stillwell_statespace::quantile::{
    chi_square_upper_tail, f_upper_tail, normal_quantile, normal_two_sided_tail,
};

/// One row of the table: P(X <= q) = p for X of distribution `law` with `df1`, `df2`.
struct Row<'a> {
    law: &'a str,
    df1: f64,
    df2: f64,
    p: f64,
    q: f64,
}

fn rows() -> Vec<Row<'static>> {
    let number = |field: Option<&str>| field.and_then(|f| f.parse().ok()).unwrap_or(f64::NAN);
    let table = include_str!("data/quantiles.csv").lines().skip(1);
    table
        .map(|line| {
            let mut fields = line.split(',');
            let law = fields.next().unwrap_or_default();
            let mut next = || number(fields.next());
            Row { law, df1: next(), df2: next(), p: next(), q: next() }
        })
        .collect()
}

fn relative(got: f64, wanted: f64) -> f64 {
    if wanted.abs() > 0.0 { ((got - wanted) / wanted).abs() } else { got.abs() }
}

/// Largest of `error` over the rows of one distribution; fails if one is not a number.
fn worst(law: &str, error: impl Fn(&Row) -> f64) -> f64 {
    let errors: Vec<f64> = rows().iter().filter(|row| row.law == law).map(error).collect();
    assert!(!errors.is_empty() && errors.iter().all(|e| e.is_finite()), "{law}: {errors:?}");
    errors.into_iter().fold(0.0, f64::max)
}

#[test]
fn the_table_is_whole() {
    let count = |law: &str| rows().iter().filter(|row| row.law == law).count();
    assert_eq!([count("normal"), count("t"), count("chisq"), count("F")], [9, 231, 481, 576]);
}

#[test]
fn normal_quantiles_agree_with_the_table_to_the_last_digits() {
    let error = worst("normal", |row| relative(normal_quantile(row.p), row.q));
    assert!(error < 5e-16, "{error:e}");
    let lower = worst("normal", |row| relative(-normal_quantile(1.0 - row.p), row.q));
    // 1 - 0.9995 has lost three digits before the function sees it.
    assert!(lower < 1e-13, "{lower:e}");
}

// The tails of our own functions at the tabled quantiles. The tolerance leaves room for the rounding of
// 1 - p (2e-13 relative at p = 0.9995) and of the tabled q.
#[test]
fn tails_agree_with_the_table() {
    let normal = worst("normal", |row| relative(normal_two_sided_tail(row.q), 2.0 * (1.0 - row.p)));
    let chi_square = worst("chisq", |row| relative(chi_square_upper_tail(row.q, row.df1), 1.0 - row.p));
    let f = worst("F", |row| relative(f_upper_tail(row.q, row.df1, row.df2), 1.0 - row.p));
    // t^2 with df degrees of freedom is F(1, df).
    let t = worst("t", |row| relative(f_upper_tail(row.q * row.q, 1.0, row.df1), 2.0 * (1.0 - row.p)));
    println!(
        "worst relative error of a tail: normal {normal:e}, chi-square {chi_square:e}, F {f:e}, t {t:e}"
    );
    assert!(normal < 1e-12 && chi_square < 1e-12 && f < 1e-12 && t < 1e-12);
}

// What the statistics library itself reaches, so that an upgrade that loses digits is noticed: its
// chi-square quantile stops at 2.5e-10, the others reach 1e-11 or better.
#[test]
fn library_quantiles_agree_with_the_table() {
    let normal = Normal::standard();
    let errors = [
        ("normal", worst("normal", |row| relative(normal.inverse_cdf(row.p), row.q)), 5e-16),
        ("t", worst("t", |row| relative(student(row).inverse_cdf(row.p), row.q)), 1e-12),
        ("chi-square", worst("chisq", |row| relative(chi(row).inverse_cdf(row.p), row.q)), 1e-9),
        ("F", worst("F", |row| relative(fisher(row).inverse_cdf(row.p), row.q)), 1e-11),
    ];
    for (law, error, tolerance) in errors {
        println!("worst relative error of the library's quantile: {law} {error:e}");
        assert!(error < tolerance, "{law}: {error:e}");
    }
}

fn student(row: &Row) -> StudentsT {
    StudentsT::new(0.0, 1.0, row.df1).expect("degrees of freedom of the table are positive")
}

fn chi(row: &Row) -> ChiSquared {
    ChiSquared::new(row.df1).expect("degrees of freedom of the table are positive")
}

fn fisher(row: &Row) -> FisherSnedecor {
    FisherSnedecor::new(row.df1, row.df2).expect("degrees of freedom of the table are positive")
}

// mpmath 1.3.0 at 40 digits, p and z as doubles: findroot of ncdf(x) - p; erfc(z/sqrt(2));
// gammainc(df/2, x/2, inf, regularized=True); betainc(d2/2, d1/2, 0, d2/(d2+d1*x), regularized=True).
#[test]
fn far_tails_keep_their_digits() {
    for (p, z) in [
        (1e-300, -37.0470962993612),
        (1e-20, -9.262340089798407),
        (1e-5, -4.264890793922825),
        (0.499999999, -2.5066283428845328e-09),
    ] {
        assert!(relative(normal_quantile(p), z) < 5e-16, "normal quantile of {p:e}");
    }
    for (z, tail) in [
        (0.8, 0.42371079716679333),
        (1.5, 0.13361440253771614),
        (3.0, 0.002699796063260189),
        (8.0, 1.2441921148543568e-15),
        (37.0, 1.1451142445049154e-299),
    ] {
        assert!(relative(normal_two_sided_tail(z), tail) < 3e-13, "normal tail at {z}");
        assert!(relative(normal_two_sided_tail(-z), tail) < 3e-13, "normal tail at -{z}");
    }
    for (x, df, tail) in [
        (400.0, 20.0, 2.044095593580732e-72),
        (1000.0, 50.0, 7.188706215514835e-177),
        (2000.0, 1000.0, 4.1436785914549916e-69),
    ] {
        assert!(relative(chi_square_upper_tail(x, df), tail) < 5e-13, "chi-square({df}) at {x}");
    }
    for (x, df, tail) in [
        (11.444659357341871, 33.0, 1.499276644824733e-10),
        (7.0, 100.0, 5.894051081596905e-20),
        (2.8973665961010275, 1000.0, 4.7043399715228174e-61),
    ] {
        assert!(relative(f_upper_tail(x, df, df), tail) < 1e-12, "F({df}, {df}) at {x}");
    }
}

#[test]
fn outside_their_range_the_functions_say_nan_or_the_limit() {
    assert_eq!([normal_quantile(0.0), normal_quantile(1.0)], [f64::NEG_INFINITY, f64::INFINITY]);
    assert!([-1e-9, 1.0 + 1e-9, f64::NAN].iter().all(|&p| normal_quantile(p).is_nan()));
    assert_eq!([chi_square_upper_tail(-1.0, 3.0), chi_square_upper_tail(f64::INFINITY, 3.0)], [1.0, 0.0]);
    assert_eq!([f_upper_tail(-1.0, 3.0, 3.0), f_upper_tail(f64::INFINITY, 3.0, 3.0)], [1.0, 0.0]);
    assert_eq!([normal_two_sided_tail(0.0), normal_two_sided_tail(f64::INFINITY)], [1.0, 0.0]);
    for df in [0.0, -1.0, f64::INFINITY, f64::NAN] {
        assert!(chi_square_upper_tail(1.0, df).is_nan());
        assert!(f_upper_tail(1.0, df, 2.0).is_nan() && f_upper_tail(1.0, 2.0, df).is_nan());
    }
    assert!(chi_square_upper_tail(f64::NAN, 1.0).is_nan() && f_upper_tail(f64::NAN, 1.0, 1.0).is_nan());
}

proptest! {
    #[test]
    fn a_quantile_and_its_tail_undo_each_other(digits in 0.302_f64..300.0) {
        let p = 10.0_f64.powf(-digits);
        let z = normal_quantile(p);
        // The tail magnifies the last digit of z by z^2.
        prop_assert!(relative(normal_two_sided_tail(z), 2.0 * p) < 1e-14 * (30.0 + z * z));
        prop_assert!(z < 0.0);
    }

    #[test]
    fn tails_are_probabilities_that_fall(
        x in 0.0_f64..500.0,
        step in 0.0_f64..10.0,
        df1 in 1_u32..400,
        df2 in 1_u32..400,
    ) {
        let (df1, df2) = (f64::from(df1), f64::from(df2));
        for tail in [|x, d, _| chi_square_upper_tail(x, d), f_upper_tail] {
            let (here, further) = (tail(x, df1, df2), tail(x + step, df1, df2));
            prop_assert!((0.0..=1.0).contains(&here) && (0.0..=1.0).contains(&further));
            prop_assert!(further <= here * (1.0 + 1e-11) + 1e-15);
        }
    }

    #[test]
    fn the_f_law_turns_round(x in 1e-3_f64..1e3, df1 in 1_u32..400, df2 in 1_u32..400) {
        let (df1, df2) = (f64::from(df1), f64::from(df2));
        let both = f_upper_tail(x, df1, df2) + f_upper_tail(1.0 / x, df2, df1);
        prop_assert!((both - 1.0).abs() < 1e-11);
    }
}
