//! Linear regression as a special case, against the certified values of NIST's Statistical Reference Datasets.
//!
//! With a fixed level (or no trend) and constant drivers every variance but the irregular is zero. Then the coefficients are
//! those of least squares, and the maximum of the diffuse likelihood, which is the restricted one, is the residual sum of
//! squares over n - d: the certified residual variance. Every fit goes through the public function.
//!
//! The yardstick is NIST's log relative error, -log10 |x - c| / |c|, about the number of correct digits. Certified values are
//! printed to 15 digits. tests/data/README.md says where the files come from.

#[path = "support/plain.rs"]
mod plain;

use plain::plain;
use stillwell_statespace::structure::{Structure, Trend};
use stillwell_statespace::{Evaluation, Fit, Request, Series, Trouble, Workspace, fit};

fn read(name: &str) -> Vec<Vec<String>> {
    let path = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/nist").join(name);
    let text = std::fs::read_to_string(path).expect("a data set");
    text.lines().map(|line| line.split(',').map(str::to_owned).collect()).collect()
}

/// Columns of a data set: the response, then the predictors.
fn columns(name: &str) -> Vec<Vec<f64>> {
    let rows = read(&format!("regression_{name}.csv"));
    (0..rows[0].len())
        .map(|j| rows[1..].iter().map(|row| row[j].parse().expect("a number")).collect())
        .collect()
}

fn certified(name: &str, quantity: &str) -> f64 {
    read("certified.csv")
        .iter()
        .find(|row| row[0] == name && row[2] == quantity)
        .map(|row| row[3].parse().expect("a number"))
        .expect("a certified value")
}

fn powers(x: &[f64], degree: i32) -> Vec<Vec<f64>> {
    (1..=degree).map(|k| x.iter().map(|v| v.powi(k)).collect()).collect()
}

/// Number of correct digits, at most 15.
fn digits(ours: f64, certified: f64) -> f64 {
    assert!(ours.is_finite(), "{ours} for {certified}");
    let size = if certified == 0.0 { 1.0 } else { certified.abs() };
    (-((ours - certified).abs() / size).log10()).min(15.0)
}

/// The fit of `response` on `predictors` at this trend, as a request and a series.
fn regression(trend: Trend, response: &[f64], predictors: &[Vec<f64>]) -> (Series, Request) {
    let drivers = (1..=predictors.len()).map(|k| format!("x{k}")).collect();
    let series =
        Series { observed: response.to_vec(), drivers: predictors.to_vec(), drifting_drivers: Vec::new() };
    (series, Request { drivers, ..plain(trend) })
}

/// All coefficients and their standard errors: the level first where there is one.
fn coefficients(fit: &Fit) -> Vec<(f64, f64)> {
    let level = fit.components(0.9).expect("components").level;
    let intercept = level.map(|l| (l.value[0], l.std_error[0]));
    intercept.into_iter().chain(fit.coefficients()).collect()
}

/// Fewest correct digits of coefficients, of their standard errors, and of the residual variance.
fn correct_digits(name: &str, trend: Trend, predictors: &[Vec<f64>]) -> [f64; 3] {
    let (series, request) = regression(trend, &columns(name)[0], predictors);
    let fit = fit(&series, &request, &mut Workspace::new()).expect("a fit");
    assert!(fit.converged(), "{name}");
    let first = usize::from(!trend.has_level());
    let (mut of_value, mut of_error) = (15.0_f64, 15.0_f64);
    for (k, (value, std_error)) in coefficients(&fit).into_iter().enumerate() {
        of_value = of_value.min(digits(value, certified(name, &format!("B{}", k + first))));
        of_error = of_error.min(digits(std_error, certified(name, &format!("se_B{}", k + first))));
    }
    let variance = match name {
        "Longley" => certified(name, "resid_sd").powi(2),
        _ => certified(name, "MSE"),
    };
    let reached = [of_value, of_error, digits(fit.parameters()[0].value, variance)];
    println!(
        "{name:10} coefficients {:5.1}  standard errors {:5.1}  variance {:5.1}",
        reached[0], reached[1], reached[2]
    );
    reached
}

#[track_caller]
fn at_least(reached: [f64; 3], stated: [f64; 3]) {
    for (r, s) in reached.iter().zip(stated) {
        assert!(*r >= s, "correct digits {reached:?}, stated {stated:?}");
    }
}

#[test]
fn lower_difficulty() {
    let x = |name: &str| columns(name)[1..].to_vec();
    at_least(correct_digits("Norris", Trend::FixedLevel, &x("Norris")), [12.0, 12.5, 12.5]);
    at_least(correct_digits("NoInt1", Trend::None, &x("NoInt1")), [13.5, 13.5, 13.5]);
    at_least(correct_digits("NoInt2", Trend::None, &x("NoInt2")), [13.5, 13.5, 13.5]);
}

#[test]
fn longley() {
    at_least(correct_digits("Longley", Trend::FixedLevel, &columns("Longley")[1..]), [10.5, 12.0, 12.0]);
}

#[test]
fn filip() {
    // A polynomial of degree 10. The powers rounded to doubles, then least squares in exact fractions, have 7.6 correct
    // digits: that is all that double precision allows to any method that is handed the powers.
    let x = powers(&columns("Filip")[1], 10);
    at_least(correct_digits("Filip", Trend::FixedLevel, &x), [6.5, 6.8, 6.8]);
}

#[test]
fn wampler_with_noise() {
    for name in ["Wampler3", "Wampler4"] {
        let x = powers(&columns(name)[1], 5);
        at_least(correct_digits(name, Trend::FixedLevel, &x), [7.0, 12.5, 12.5]);
    }
}

#[test]
fn wampler_without_noise() {
    for name in ["Wampler1", "Wampler2"] {
        let data = columns(name);
        let (series, request) = regression(Trend::FixedLevel, &data[0], &powers(&data[1], 5));
        let trouble = fit(&series, &request, &mut Workspace::new()).map(|f| f.parameters().to_vec());
        assert_eq!(trouble, Err(Trouble::ExactFit), "{name}");
        // Any irregular variance gives the same coefficients.
        let model = Structure { trend: Trend::FixedLevel, drivers: 5, ..Structure::default() }.model();
        let evaluation = Evaluation::new(model, &[1.0], series).expect("a regression");
        let mut reached = 15.0_f64;
        for k in 0..5 {
            let value = evaluation.coefficient(k).0;
            reached = reached.min(digits(value, certified(name, &format!("B{}", k + 1))));
        }
        println!("{name:10} coefficients {reached:5.1}");
        assert!(reached >= 9.0, "{name}: {reached} correct digits");
    }
}
