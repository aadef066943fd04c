//! `fit_forecast(fit, horizon [, coverage [, drivers]])`: the forecast of a fit, as a list with one struct per step.

use std::sync::{Arc, LazyLock};

use datafusion::arrow::array::AsArray;
use datafusion::arrow::array::{ArrayRef, Float64Array, Int64Array, ListArray, StringArray, StructArray};
use datafusion::arrow::buffer::{NullBuffer, OffsetBuffer};
use datafusion::arrow::compute::{CastOptions, cast, cast_with_options};
use datafusion::arrow::datatypes::{DataType, Field, Fields, Float64Type, Int64Type};
use datafusion::error::{DataFusionError, Result};
use datafusion::logical_expr::{
    ColumnarValue, Documentation, ScalarFunctionArgs, ScalarUDFImpl, Signature, Volatility,
};
use stillwell_statespace::{Forecast, LONGEST_HORIZON, Trouble};

use super::SECTION;
use super::lists::{driver_names, driver_values};
use crate::columns::fit_value::{FitColumn, FitValue};
use crate::columns::time::TimeKind;
use crate::sql::error::{Caller, bad_argument, counted};
use crate::sql::watch::Watch;

const NAME: &str = "fit_forecast";
const WRITTEN: &str = "fit_forecast(fit, horizon [, coverage [, drivers]])";

/// Coverage of the intervals where none is given.
const DEFAULT_COVERAGE: f64 = 0.9;

/// The function.
#[derive(Debug, PartialEq, Eq, Hash)]
pub(crate) struct FitForecast {
    signature: Signature,
    watch: Watch,
}

impl FitForecast {
    pub(crate) fn new(watch: Watch) -> Self {
        let mut signature = Signature::user_defined(Volatility::Immutable);
        signature.parameter_names =
            Some(["fit", "horizon", "coverage", "drivers"].map(str::to_string).to_vec());
        Self { signature, watch }
    }
}

/// The numbers of a step, in order.
const NUMBERS: [&str; 7] =
    ["expected", "std_error", "lower", "upper", "total_expected", "total_lower", "total_upper"];

/// Fields of one step.
fn step_fields(time: &TimeKind) -> Fields {
    let mut fields =
        vec![Field::new("at", time.data_type().clone(), true), Field::new("step", DataType::Int64, true)];
    fields.extend(NUMBERS.map(|name| Field::new(name, DataType::Float64, true)));
    fields.push(Field::new("status", DataType::Utf8, true));
    Fields::from(fields)
}

fn result_type(time: &TimeKind) -> DataType {
    DataType::List(Arc::new(Field::new_list_field(DataType::Struct(step_fields(time)), true)))
}

/// The time type of the first argument.
fn time_of(types: &[DataType]) -> Result<TimeKind> {
    let fit = types.first().unwrap_or(&DataType::Null);
    FitColumn::time_of(fit).map_err(|error| bad_argument(Caller::Expression(NAME), "fit", error.to_string()))
}

impl ScalarUDFImpl for FitForecast {
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
        counted(NAME, WRITTEN, 2..=4, types.len())?;
        let caller = Caller::Expression(NAME);
        let time = time_of(types)?;
        let number = |at: usize, name: &str, ok: fn(&DataType) -> bool, takes: &str| match types.get(at) {
            Some(found) if !ok(found) && *found != DataType::Null => {
                Err(bad_argument(caller, name, format!("takes {takes}, but has type {found}")))
            }
            _ => Ok(()),
        };
        number(1, "horizon", DataType::is_integer, "a whole number from 1 to 10000")?;
        number(2, "coverage", DataType::is_numeric, "a number above 0 and at most 0.999999")?;
        driver_names(NAME, types.get(3).unwrap_or(&DataType::Null))?;
        Ok(result_type(&time))
    }

    fn invoke_with_args(&self, args: ScalarFunctionArgs) -> Result<ColumnarValue> {
        let columns = ColumnarValue::values_to_arrays(&args.args)?;
        let scalar = args.args.iter().all(|arg| matches!(arg, ColumnarValue::Scalar(_)));
        let answer = forecasts(&columns, &self.watch)?;
        Ok(if scalar {
            ColumnarValue::Scalar(datafusion::common::ScalarValue::try_from_array(&answer, 0)?)
        } else {
            ColumnarValue::Array(answer)
        })
    }

    fn documentation(&self) -> Option<&Documentation> {
        Some(&DOCUMENTATION)
    }
}

/// Steps of all rows so far.
struct Steps {
    time: TimeKind,
    at: Vec<Option<i64>>,
    step: Vec<i64>,
    numbers: [Vec<Option<f64>>; 7],
    status: Vec<String>,
}

impl Steps {
    fn new(time: TimeKind) -> Self {
        Self { time, at: Vec::new(), step: Vec::new(), numbers: Default::default(), status: Vec::new() }
    }

    /// `horizon` steps; without a forecast their numbers are NULL.
    fn push(&mut self, horizon: usize, fit: &FitValue, forecast: Option<&Forecast>, status: &str) {
        let grid = fit.fitted.as_ref().and_then(|fitted| fitted.grid(&self.time));
        self.at.extend((1..=horizon).map(|step| grid.as_ref().and_then(|grid| grid.time_at(step))));
        self.step.extend((1..=horizon).map(|step| step as i64));
        for (at, numbers) in self.numbers.iter_mut().enumerate() {
            let values = forecast.map(|f| {
                [
                    &f.expected,
                    &f.std_error,
                    &f.lower,
                    &f.upper,
                    &f.total_expected,
                    &f.total_lower,
                    &f.total_upper,
                ][at]
            });
            numbers.extend(
                (0..horizon).map(|step| values.and_then(|v| v.get(step)).copied().filter(|v| !v.is_nan())),
            );
        }
        self.status.extend(std::iter::repeat_n(status.to_string(), horizon));
    }

    fn finish(self, lengths: Vec<usize>, valid: Vec<bool>) -> Result<ArrayRef> {
        let fields = step_fields(&self.time);
        let mut columns: Vec<ArrayRef> =
            vec![self.time.array(&self.at)?, Arc::new(Int64Array::from(self.step))];
        for numbers in self.numbers {
            columns.push(Arc::new(Float64Array::from(numbers)));
        }
        columns.push(Arc::new(StringArray::from(self.status)));
        let values = Arc::new(StructArray::try_new(fields.clone(), columns, None)?);
        let item = Arc::new(Field::new_list_field(DataType::Struct(fields), true));
        let offsets = OffsetBuffer::from_lengths(lengths);
        Ok(Arc::new(ListArray::try_new(item, offsets, values, Some(NullBuffer::from(valid)))?))
    }
}

fn forecasts(columns: &[ArrayRef], watch: &Watch) -> Result<ArrayRef> {
    let caller = Caller::Expression(NAME);
    let argument = |at: usize| {
        columns.get(at).ok_or_else(|| DataFusionError::Internal(format!("{NAME}: argument {at} is missing")))
    };
    let bad_fit =
        |error: crate::columns::fit_value::ReadError| bad_argument(caller, "fit", error.to_string());
    let fits = FitColumn::try_new(argument(0)?).map_err(bad_fit)?;
    let strict = CastOptions { safe: false, ..CastOptions::default() };
    let horizons = cast_with_options(argument(1)?, &DataType::Int64, &strict).map_err(|_| {
        bad_argument(caller, "horizon", format!("takes a whole number from 1 to {LONGEST_HORIZON}"))
    })?;
    let coverages = columns.get(2).map(|column| cast(column, &DataType::Float64)).transpose()?;
    let coverages: Vec<Option<f64>> =
        coverages.map_or_else(Vec::new, |column| column.as_primitive::<Float64Type>().iter().collect());
    let names = match columns.get(3) {
        Some(drivers) => driver_names(NAME, drivers.data_type())?,
        None => Vec::new(),
    };
    let mut plans = Vec::with_capacity(names.len());
    for name in &names {
        if let Some(values) =
            columns.get(3).map(|drivers| driver_values(drivers, name)).transpose()?.flatten()
        {
            plans.push((name, values));
        }
    }
    let horizons: Vec<Option<i64>> = horizons.as_primitive::<Int64Type>().iter().collect();
    let mut steps = Steps::new(fits.time.clone());
    let (mut lengths, mut valid) = (Vec::with_capacity(fits.len()), Vec::with_capacity(fits.len()));
    for row in 0..fits.len() {
        let fit = fits.get(row).map_err(bad_fit)?;
        let (Some(fit), Some(horizon)) = (fit, horizons[row]) else {
            lengths.push(0);
            valid.push(false);
            continue;
        };
        let horizon = usize::try_from(horizon).ok().filter(|steps| (1..=LONGEST_HORIZON).contains(steps));
        let Some(horizon) = horizon else {
            let given = horizons[row].unwrap_or_default();
            return Err(bad_argument(
                caller,
                "horizon",
                format!("takes a whole number from 1 to {LONGEST_HORIZON}, not {given}"),
            ));
        };
        let coverage = coverages.get(row).copied().flatten().unwrap_or(DEFAULT_COVERAGE);
        if !(coverage > 0.0 && coverage <= 0.999_999) {
            return Err(bad_argument(
                caller,
                "coverage",
                format!("takes a number above 0 and at most 0.999999, not {coverage}"),
            ));
        }
        lengths.push(horizon);
        valid.push(true);
        match forecast(&fit, horizon, coverage, &plans, row)? {
            Ok(forecast) => {
                watch.record(NAME, horizon, None, String::new);
                steps.push(horizon, &fit, Some(&forecast), "ok");
            }
            Err((status, message)) => {
                watch.record(NAME, horizon, Some((&status, &message)), || fit.describe(&fits.time));
                steps.push(horizon, &fit, None, &status);
            }
        }
    }
    steps.finish(lengths, valid)
}

/// The forecast of one fit, or what is wrong with it: status and sentence.
fn forecast(
    fit: &FitValue,
    horizon: usize,
    coverage: f64,
    plans: &[(&String, Vec<Vec<f64>>)],
    row: usize,
) -> Result<std::result::Result<Forecast, (String, String)>> {
    let Some(fitted) = fit.fitted.as_ref().filter(|_| fit.status == "ok") else {
        return Ok(Err((fit.status.clone(), fit.message.clone().unwrap_or_default())));
    };
    let standing = &fitted.standing;
    // A fit without some of the drivers is no mistake; a name that it does not know beside a driver that is not handed in is one.
    let known = |name: &String| standing.driver_names().any(|driver| driver == name);
    let handed = |driver: &String| plans.iter().any(|(name, _)| *name == driver);
    if plans.iter().any(|(name, _)| !known(name)) && !standing.driver_names().all(handed) {
        let message = "the drivers handed in are not those of the fit".to_string();
        return Ok(Err(("no driver plan".to_string(), message)));
    }
    // A driver that is not handed in keeps the plan that the fit carries.
    let plan = standing
        .driver_names()
        .zip(&standing.plan)
        .map(|(driver, stored)| match plans.iter().find(|(name, _)| *name == driver) {
            Some((_, values)) => values[row].clone(),
            None => stored.clone(),
        })
        .collect::<Vec<_>>();
    let answer = standing.forecast(horizon, coverage, Some(&plan));
    Ok(answer.map_err(|trouble: Trouble| (trouble.status().to_string(), trouble.to_string())))
}

static DOCUMENTATION: LazyLock<Documentation> = LazyLock::new(|| {
    Documentation::builder(
        SECTION,
        "The forecast of a fit, without its history: a list with one struct per step, with the columns of \
         [`forecast`](#forecast). Drivers that are not handed in keep the plan that the fit carries, those that a fit does not have are passed over. The steps of a fit that is in trouble \
         hold its status and NULLs. `unnest(unnest(fit_forecast(…)))` makes rows and columns of it.",
        WRITTEN,
    )
    .with_argument("fit", "What structural_fit or fit_advance gave; NULL in, NULL out.")
    .with_argument("horizon", "Steps after the last observation, from 1 to 10000.")
    .with_argument("coverage", "Probability that an interval is to cover, 0.9 without it.")
    .with_argument(
        "drivers",
        "The drivers' plan: a struct of lists with one value per step, such as {'price': [1.9, 1.9, 1.8]}.",
    )
    .with_sql_example(
        "SELECT region, product, s['at'] AS at, round(s['expected'], 1) AS expected\n\
         FROM (SELECT region, product,\n             \
                      unnest(fit_forecast(structural_fit(week, litres, {'trend': 'local level', 'season': 0}), 2)) AS s\n      \
               FROM sales GROUP BY region, product)\n\
         ORDER BY region, product, at",
    )
    .build()
});
