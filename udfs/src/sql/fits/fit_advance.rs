//! `fit_advance(fit, at_list, observed_list [, drivers])`: the fit after further rows, its parameters as they were.

use std::collections::HashMap;
use std::sync::LazyLock;

use datafusion::arrow::array::{Array, ArrayRef};
use datafusion::arrow::compute::{CastOptions, cast_with_options};
use datafusion::arrow::datatypes::DataType;
use datafusion::common::ScalarValue;
use datafusion::error::{DataFusionError, Result};
use datafusion::logical_expr::{
    ColumnarValue, Documentation, ScalarFunctionArgs, ScalarUDFImpl, Signature, Volatility,
};
use stillwell_statespace::Trouble;

use super::SECTION;
use super::lists::{driver_names, driver_values, item_type, items};
use crate::columns::fit_value::{FitBuilder, FitColumn, FitValue, FittedValue, ReadError, fit_type};
use crate::columns::numbers;
use crate::columns::time::TimeKind;
use crate::columns::time_grid::TimeGrid;
use crate::sql::error::{Caller, bad_argument, counted};
use crate::sql::watch::Watch;

const NAME: &str = "fit_advance";
const WRITTEN: &str = "fit_advance(fit, at_list, observed_list [, drivers])";

/// The function.
#[derive(Debug, PartialEq, Eq, Hash)]
pub(crate) struct FitAdvance {
    signature: Signature,
    watch: Watch,
}

impl FitAdvance {
    pub(crate) fn new(watch: Watch) -> Self {
        let mut signature = Signature::user_defined(Volatility::Immutable);
        signature.parameter_names =
            Some(["fit", "at_list", "observed_list", "drivers"].map(str::to_string).to_vec());
        Self { signature, watch }
    }
}

fn bad_fit(error: &ReadError) -> DataFusionError {
    bad_argument(Caller::Expression(NAME), "fit", error.to_string())
}

impl ScalarUDFImpl for FitAdvance {
    fn name(&self) -> &str {
        NAME
    }

    fn signature(&self) -> &Signature {
        &self.signature
    }

    // Types and counts are checked with the type of the result, where a mistake is said in our words.
    fn coerce_types(&self, given: &[DataType]) -> Result<Vec<DataType>> {
        Ok(given.to_vec())
    }

    fn return_type(&self, types: &[DataType]) -> Result<DataType> {
        counted(NAME, WRITTEN, 3..=4, types.len())?;
        let caller = Caller::Expression(NAME);
        let data_type = |at: usize| types.get(at).unwrap_or(&DataType::Null);
        let time = FitColumn::time_of(data_type(0)).map_err(|error| bad_fit(&error))?;
        match data_type(1) {
            DataType::Null => {}
            list if item_type(list).is_some_and(|item| same_kind(item, time.data_type())) => {}
            other => {
                let what = format!(
                    "takes a list of {}, the times of the fit, such as array_agg(week), but has type {other}; cast it",
                    time.data_type()
                );
                return Err(bad_argument(caller, "at_list", what));
            }
        }
        match data_type(2) {
            DataType::Null => {}
            list if item_type(list)
                .is_some_and(|item| numbers::is_number(item) || *item == DataType::Null) => {}
            other => {
                let what =
                    format!("takes a list of numbers, such as array_agg(litres), but has type {other}");
                return Err(bad_argument(caller, "observed_list", what));
            }
        }
        driver_names(NAME, data_type(3))?;
        Ok(fit_type(time.data_type()))
    }

    fn invoke_with_args(&self, args: ScalarFunctionArgs) -> Result<ColumnarValue> {
        let columns = ColumnarValue::values_to_arrays(&args.args)?;
        let scalar = args.args.iter().all(|arg| matches!(arg, ColumnarValue::Scalar(_)));
        let answer = advance(&columns, &self.watch)?;
        Ok(if scalar {
            ColumnarValue::Scalar(ScalarValue::try_from_array(&answer, 0)?)
        } else {
            ColumnarValue::Array(answer)
        })
    }

    fn documentation(&self) -> Option<&Documentation> {
        Some(&DOCUMENTATION)
    }
}

/// True for types of time that can be brought to one another: another unit or width, another zone for the same instants.
fn same_kind(given: &DataType, of_fit: &DataType) -> bool {
    match (given, of_fit) {
        (DataType::Null, _) => true,
        (DataType::Timestamp(_, a), DataType::Timestamp(_, b)) => a.is_some() == b.is_some(),
        (DataType::Date32 | DataType::Date64, DataType::Date32 | DataType::Date64) => true,
        (a, b) => a == b || a.is_integer() && b.is_integer(),
    }
}

/// New rows of one fit in order of time.
struct NewRows {
    times: Vec<i64>,
    observed: Vec<f64>,
    /// By driver of the fit; `None` where it was not handed in.
    drivers: Vec<Option<Vec<f64>>>,
}

fn advance(columns: &[ArrayRef], watch: &Watch) -> Result<ArrayRef> {
    let argument = |at: usize| {
        columns.get(at).ok_or_else(|| DataFusionError::Internal(format!("{NAME}: argument {at} is missing")))
    };
    let fits = FitColumn::try_new(argument(0)?).map_err(|error| bad_fit(&error))?;
    let (times, observed) = (items(argument(1)?)?, items(argument(2)?)?);
    let mut drivers = HashMap::new();
    if let Some(column) = columns.get(3) {
        for name in driver_names(NAME, column.data_type())? {
            if let Some(values) = driver_values(column, &name)? {
                drivers.insert(name, values);
            }
        }
    }
    let mut answers = FitBuilder::new(fits.time.clone());
    for row in 0..fits.len() {
        let Some(fit) = fits.get(row).map_err(|error| bad_fit(&error))? else {
            answers.push(None);
            continue;
        };
        let answer = match (&fit.fitted, &times[row]) {
            (Some(fitted), Some(times)) if fit.status == "ok" => {
                let rows = new_rows(&fits.time, times, observed[row].as_ref(), fitted, (&drivers, row))?;
                match rows.and_then(|rows| advanced(&fits.time, fitted, &rows)) {
                    Ok(fitted) => FitValue { refused: None, message: None, fitted: Some(fitted), ..fit },
                    // The fit stays what it was: the same rows, mended, can be handed in again.
                    Err((trouble, place)) => FitValue {
                        refused: Some(trouble.status().to_string()),
                        message: Some(match place {
                            Some(time) => format!("{trouble} (time of that point: {time})"),
                            None => trouble.to_string(),
                        }),
                        ..fit
                    },
                }
            }
            _ => fit,
        };
        let wrong = answer.refused.as_deref().or(Some(&answer.status)).filter(|status| *status != "ok");
        let message = answer.message.as_deref().unwrap_or_default();
        let rows = times[row].as_ref().map_or(0, |times| times.len());
        watch.record(NAME, rows, wrong.map(|status| (status, message)), || answer.describe(&fits.time));
        answers.push(Some(answer));
    }
    Ok(answers.finish()?)
}

/// What is wrong with the new rows, and the time of the point it is about.
type Refusal = (Trouble, Option<String>);

/// The rows of one call in order of time.
fn new_rows(
    time: &TimeKind,
    times: &ArrayRef,
    observed: Option<&ArrayRef>,
    fitted: &FittedValue,
    (drivers, row): (&HashMap<String, Vec<Vec<f64>>>, usize),
) -> Result<std::result::Result<NewRows, Refusal>> {
    let caller = Caller::Expression(NAME);
    let strict = CastOptions { safe: false, ..CastOptions::default() };
    let wrong = |what: String| bad_argument(caller, "at_list", what);
    let times = cast_with_options(times, time.data_type(), &strict).map_err(|error| {
        wrong(format!("holds a time that the fit's {} cannot hold: {error}", time.data_type()))
    })?;
    let stored = time.read(&times).map_err(|error| wrong(error.to_string()))?;
    let observed = match observed {
        Some(items) if *items.data_type() != DataType::Null => numbers::to_f64(items)?,
        _ => vec![f64::NAN; stored.len()],
    };
    let names = fitted.standing.driver_names().collect::<Vec<_>>();
    let lists = names.iter().map(|name| drivers.get(*name).map(|lists| &lists[row])).collect::<Vec<_>>();
    // A fit without some of the drivers is no mistake: one call may advance fits of several structures. A name that nobody knows beside a
    // driver that nobody handed in is one.
    let unknown = drivers.keys().filter(|name| !names.contains(name)).min();
    if let (Some(unknown), Some(at)) = (unknown, lists.iter().position(Option::is_none)) {
        let name = format!("driver '{}' (handed in was '{unknown}', which the fit does not have)", names[at]);
        return Ok(Err((Trouble::UnequalLists { name, got: 0, times: stored.len() }, None)));
    }
    let mut lengths = vec![("observed_list", observed.len())];
    lengths.extend(
        names.iter().zip(&lists).filter_map(|(name, list)| list.map(|list| (name.as_str(), list.len()))),
    );
    if let Some((name, got)) = lengths.into_iter().find(|(_, length)| *length != stored.len()) {
        return Ok(Err((Trouble::UnequalLists { name: name.to_string(), got, times: stored.len() }, None)));
    }
    let missing = stored.iter().filter(|time| time.is_none()).count();
    if missing > 0 {
        return Ok(Err((Trouble::MissingTime { rows: missing }, None)));
    }
    // A row that the fit has seen and that says nothing new does no harm.
    let says_something =
        |&at: &usize| !observed[at].is_nan() || stored[at].is_some_and(|t| t > fitted.last_at);
    let mut order = (0..stored.len()).filter(says_something).collect::<Vec<_>>();
    order.sort_by_key(|&at| stored[at]);
    Ok(Ok(NewRows {
        times: order.iter().filter_map(|&at| stored[at]).collect(),
        observed: order.iter().map(|&at| observed[at]).collect(),
        drivers: lists
            .into_iter()
            .map(|values| values.map(|values| order.iter().map(|&at| values[at]).collect()))
            .collect(),
    }))
}

/// The fit after these rows.
fn advanced(
    time: &TimeKind,
    fitted: &FittedValue,
    rows: &NewRows,
) -> std::result::Result<FittedValue, Refusal> {
    let Some(grid) = fitted.grid(time) else {
        let why = "the last time of the stored fit is not on its own grid".to_string();
        return Err((Trouble::NoGrid { why }, None));
    };
    let points = points(&grid, fitted, rows)?;
    let Some(&last) = points.last() else { return Ok(fitted.clone()) };
    let spread = |values: &[f64]| {
        let mut spread = vec![f64::NAN; last];
        for (&point, &value) in points.iter().zip(values) {
            spread[point - 1] = value;
        }
        spread
    };
    let observed = spread(&rows.observed);
    // Drivers that are not handed in go on with the plan that the fit carries.
    let drivers = rows
        .drivers
        .iter()
        .zip(&fitted.standing.plan)
        .map(|(values, planned)| {
            let mut merged = planned.clone();
            if let Some(values) = values {
                merged.resize(merged.len().max(last), f64::NAN);
                for (to, from) in merged.iter_mut().zip(spread(values)) {
                    if !from.is_nan() {
                        *to = from;
                    }
                }
            }
            merged
        })
        .collect::<Vec<_>>();
    let standing = fitted.standing.advance(&observed, &drivers).map_err(|trouble| {
        let index = match &trouble {
            Trouble::NotFinite { index }
            | Trouble::TooLarge { index, .. }
            | Trouble::NotPositive { index, .. }
            | Trouble::DriverGap { index, .. } => Some(*index),
            _ => None,
        };
        let place = index.and_then(|index| grid.time_at(index + 1)).map(|time| grid.format(time));
        (trouble, place)
    })?;
    let steps = standing.points - fitted.standing.points;
    let last_at = grid.time_at(steps).unwrap_or(fitted.last_at);
    Ok(FittedValue { standing, last_at, ..fitted.clone() })
}

/// Grid points of the new rows, counted from the last observation.
fn points(grid: &TimeGrid, fitted: &FittedValue, rows: &NewRows) -> std::result::Result<Vec<usize>, Refusal> {
    let mut points: Vec<usize> = Vec::with_capacity(rows.times.len());
    for &time in &rows.times {
        let at = grid.format(time);
        let point = match grid.index_of(time) {
            Some(point) if point > 0 && time > fitted.last_at => point,
            _ if time <= fitted.last_at => {
                return Err((Trouble::NotAfter { at, last: grid.format(fitted.last_at) }, None));
            }
            _ => return Err((Trouble::OffGrid { at, grid: fitted.every.clone() }, None)),
        };
        if points.last() == Some(&point) {
            return Err((Trouble::DuplicateTime { at }, None));
        }
        points.push(point);
    }
    // A mistyped year would pass for a long gap, and everything that comes after it for old.
    let most = fitted.standing.points.max(LONGEST_GAP);
    let far = points.iter().zip(&rows.times).find(|(point, _)| **point > most);
    match far {
        Some((steps, &time)) => {
            let grid_words = format!(
                "{}; {steps} steps after the last observation, but the series has {}",
                fitted.every, fitted.standing.points
            );
            Err((Trouble::OffGrid { at: grid.format(time), grid: grid_words }, None))
        }
        None => Ok(points),
    }
}

/// Steps after the last observation up to which a row may lie where the series itself is shorter.
const LONGEST_GAP: usize = 1_000;

static DOCUMENTATION: LazyLock<Documentation> = LazyLock::new(|| {
    Documentation::builder(
        SECTION,
        "The fit after further rows: the state moves on, the parameters stay, and nothing of the history is needed. The \
         result equals filtering the whole series at the same parameters. Rows must come after the last observation of the fit, in any \
         order; gaps in the grid are missing points, and rows after the last new observation carry the drivers' plan. Rows that \
         cannot be taken (a time twice, off the grid, not after the last observation, further ahead than the series is long) leave the \
         fit as it was: it can still be forecast from and advanced, and `refused` and `message` say what was wrong. Fit again when the structure of the series changes, and in any case from time to time: parameters \
         do not learn here.",
        WRITTEN,
    )
    .with_argument("fit", "What structural_fit or fit_advance gave; NULL in, NULL out.")
    .with_argument("at_list", "The times of the new rows, a list of the type of `at`, such as array_agg(week).")
    .with_argument("observed_list", "Their values in the same order, such as array_agg(litres); NULL = missing.")
    .with_argument(
        "drivers",
        "A struct of lists in the same order, such as {'price': array_agg(price)}. Drivers that are not handed in keep the plan \
         that the fit carries; those that a fit does not have are passed over.",
    )
    .with_sql_example(
        "SELECT region, product, fit_advance(fit, weeks, litres)['last_at'] AS last_at\n\
         FROM (SELECT region, product, structural_fit(week, litres, {'trend': 'local level'}) AS fit\n      \
               FROM sales WHERE week < DATE '2024-01-01' GROUP BY region, product) AS old\n\
         JOIN (SELECT region, product, array_agg(week) AS weeks, array_agg(litres) AS litres\n      \
               FROM sales WHERE week >= DATE '2024-01-01' GROUP BY region, product) AS new USING (region, product)\n\
         ORDER BY region, product",
    )
    .build()
});
