//! `fit_summary(fit)`: what a fit holds, in the words of `diagnostics` and `components`.

use std::sync::{Arc, LazyLock};

use datafusion::arrow::array::{
    ArrayRef, BooleanArray, Float64Array, Int64Array, ListArray, StringArray, StructArray,
};
use datafusion::arrow::buffer::{NullBuffer, OffsetBuffer};
use datafusion::arrow::datatypes::{DataType, Field, Fields};
use datafusion::common::ScalarValue;
use datafusion::error::{DataFusionError, Result};
use datafusion::logical_expr::{
    ColumnarValue, Documentation, ScalarFunctionArgs, ScalarUDFImpl, Signature, Volatility,
};
use stillwell_statespace::structure::period_label;
use stillwell_statespace::{LastPoint, Parameter};

use super::SECTION;
use crate::columns::fit_value::{
    FitColumn, FitValue, FittedValue, ReadError, list_of, parameter_columns, parameter_fields,
};
use crate::columns::time::TimeKind;
use crate::sql::error::{Caller, bad_argument, counted};

const NAME: &str = "fit_summary";
const WRITTEN: &str = "fit_summary(fit)";

/// The function.
#[derive(Debug, PartialEq, Eq, Hash)]
pub(crate) struct FitSummary {
    signature: Signature,
}

impl FitSummary {
    pub(crate) fn new() -> Self {
        let mut signature = Signature::user_defined(Volatility::Immutable);
        signature.parameter_names = Some(["fit"].map(str::to_string).to_vec());
        Self { signature }
    }
}

fn bad_fit(error: &ReadError) -> DataFusionError {
    bad_argument(Caller::Expression(NAME), "fit", error.to_string())
}

/// Fields of a coefficient.
fn coefficient_fields() -> Fields {
    Fields::from(vec![
        Field::new("driver", DataType::Utf8, true),
        Field::new("value", DataType::Float64, true),
        Field::new("std_error", DataType::Float64, true),
    ])
}

/// One state of the last point and its standard error.
type StateOf = fn(&LastPoint) -> Option<(f64, f64)>;

/// States of the last point.
const STATES: [(&str, StateOf); 5] = [
    ("level", |last| last.level),
    ("slope", |last| last.slope),
    ("seasonal", |last| last.seasonal),
    ("cycle", |last| last.cycle),
    ("autoregression", |last| last.autoregression),
];

fn summary_fields(time: &TimeKind) -> Fields {
    let field = |name: &str, data_type: DataType| Field::new(name, data_type, true);
    let mut fields = vec![
        field("status", DataType::Utf8),
        field("refused", DataType::Utf8),
        field("message", DataType::Utf8),
        field("trend", DataType::Utf8),
        field("season", DataType::Utf8),
        field("harmonics", DataType::Utf8),
        field("transform", DataType::Utf8),
        field("transform_power", DataType::Float64),
        field("every", DataType::Utf8),
        field("first_at", time.data_type().clone()),
        field("last_at", time.data_type().clone()),
        field("n", DataType::Int64),
        field("missing", DataType::Int64),
    ];
    for (name, _) in STATES {
        fields.push(field(name, DataType::Float64));
        fields.push(field(&format!("{name}_se"), DataType::Float64));
    }
    fields.extend([
        field("parameters", list_of(DataType::Struct(parameter_fields()))),
        field("coefficients", list_of(DataType::Struct(coefficient_fields()))),
        field("log_likelihood", DataType::Float64),
        field("aic", DataType::Float64),
        field("bic", DataType::Float64),
        field("converged", DataType::Boolean),
        field("evaluations", DataType::Int64),
    ]);
    Fields::from(fields)
}

impl ScalarUDFImpl for FitSummary {
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
        counted(NAME, WRITTEN, 1..=1, types.len())?;
        let time =
            FitColumn::time_of(types.first().unwrap_or(&DataType::Null)).map_err(|error| bad_fit(&error))?;
        Ok(DataType::Struct(summary_fields(&time)))
    }

    fn invoke_with_args(&self, args: ScalarFunctionArgs) -> Result<ColumnarValue> {
        let columns = ColumnarValue::values_to_arrays(&args.args)?;
        let column = columns
            .first()
            .ok_or_else(|| DataFusionError::Internal(format!("{NAME}: its argument is missing")))?;
        let answer = summaries(column)?;
        Ok(match args.args.first() {
            Some(ColumnarValue::Scalar(_)) => ColumnarValue::Scalar(ScalarValue::try_from_array(&answer, 0)?),
            _ => ColumnarValue::Array(answer),
        })
    }

    fn documentation(&self) -> Option<&Documentation> {
        Some(&DOCUMENTATION)
    }
}

fn summaries(column: &ArrayRef) -> Result<ArrayRef> {
    let fits = FitColumn::try_new(column).map_err(|error| bad_fit(&error))?;
    let rows = (0..fits.len())
        .map(|row| fits.get(row))
        .collect::<Result<Vec<_>, _>>()
        .map_err(|error| bad_fit(&error))?;
    let table = Table { rows: &rows, last: rows.iter().map(last_point).collect(), time: &fits.time };
    let fields = summary_fields(&fits.time);
    let columns = fields.iter().map(|field| table.column(field.name())).collect::<Result<Vec<_>>>()?;
    let valid = NullBuffer::from(rows.iter().map(Option::is_some).collect::<Vec<_>>());
    Ok(Arc::new(StructArray::try_new(fields, columns, Some(valid))?))
}

fn last_point(fit: &Option<FitValue>) -> LastPoint {
    let fitted = fit.as_ref().and_then(|fit| fit.fitted.as_ref());
    fitted.map(|fitted| fitted.standing.last_point()).unwrap_or_default()
}

/// The fits of a column, read.
struct Table<'a> {
    rows: &'a [Option<FitValue>],
    last: Vec<LastPoint>,
    time: &'a TimeKind,
}

impl Table<'_> {
    fn fits(&self) -> impl Iterator<Item = Option<&FitValue>> {
        self.rows.iter().map(Option::as_ref)
    }

    fn fitted(&self) -> impl Iterator<Item = Option<&FittedValue>> {
        self.fits().map(|fit| fit.and_then(|fit| fit.fitted.as_ref()))
    }

    fn words(&self, of: impl Fn(&FittedValue) -> Option<String>) -> ArrayRef {
        Arc::new(self.fitted().map(|fit| fit.and_then(&of)).collect::<StringArray>())
    }

    fn numbers(&self, of: impl Fn(&FittedValue) -> Option<f64>) -> ArrayRef {
        let number = |fit: Option<&FittedValue>| fit.and_then(&of).filter(|v| !v.is_nan());
        Arc::new(self.fitted().map(number).collect::<Float64Array>())
    }

    fn counts(&self, of: impl Fn(&FittedValue) -> usize) -> ArrayRef {
        let count = |fit: &FittedValue| i64::try_from(of(fit)).ok();
        Arc::new(self.fitted().map(|fit| fit.and_then(count)).collect::<Int64Array>())
    }

    fn times(&self, of: impl Fn(&FittedValue) -> i64) -> Result<ArrayRef> {
        Ok(self.time.array(&self.fitted().map(|fit| fit.map(&of)).collect::<Vec<_>>())?)
    }

    fn state(&self, of: impl Fn(&LastPoint) -> Option<f64>) -> ArrayRef {
        Arc::new(self.last.iter().map(|last| of(last).filter(|v| !v.is_nan())).collect::<Float64Array>())
    }

    /// A list of structs; NULL where there is no fit.
    fn list(&self, fields: Fields, columns: Vec<ArrayRef>, lengths: Vec<usize>) -> Result<ArrayRef> {
        let values = Arc::new(StructArray::try_new(fields.clone(), columns, None)?);
        let item = Arc::new(Field::new_list_field(DataType::Struct(fields), true));
        let valid = NullBuffer::from(self.fitted().map(|fit| fit.is_some()).collect::<Vec<_>>());
        Ok(Arc::new(ListArray::try_new(item, OffsetBuffer::from_lengths(lengths), values, Some(valid))?))
    }

    fn parameters(&self) -> Result<ArrayRef> {
        let none: &[Parameter] = &[];
        let of = || self.fitted().map(|fit| fit.map_or(none, |fit| fit.standing.parameters.as_slice()));
        let all = of().flatten().collect::<Vec<_>>();
        self.list(parameter_fields(), parameter_columns(&all), of().map(<[_]>::len).collect())
    }

    fn coefficients(&self) -> Result<ArrayRef> {
        let of_fit = |fit: Option<&FittedValue>| {
            let named = |fit: &FittedValue| {
                let names = fit.standing.driver_names().cloned().collect::<Vec<_>>();
                names.into_iter().zip(fit.standing.coefficients()).collect::<Vec<_>>()
            };
            fit.map(named).unwrap_or_default()
        };
        let all = self.fitted().map(of_fit).collect::<Vec<_>>();
        let lengths = all.iter().map(Vec::len).collect();
        let flat = || all.iter().flatten();
        let columns: Vec<ArrayRef> = vec![
            Arc::new(flat().map(|(name, _)| Some(name.as_str())).collect::<StringArray>()),
            Arc::new(flat().map(|(_, (value, _))| Some(*value)).collect::<Float64Array>()),
            Arc::new(flat().map(|(_, (_, error))| Some(*error)).collect::<Float64Array>()),
        ];
        self.list(coefficient_fields(), columns, lengths)
    }

    fn column(&self, name: &str) -> Result<ArrayRef> {
        if let Some((state, of)) =
            STATES.iter().find(|(state, _)| name.strip_suffix("_se").unwrap_or(name) == *state)
        {
            let error = name != *state;
            return Ok(self.state(|last| of(last).map(|(value, se)| if error { se } else { value })));
        }
        let seasons = |fit: &FittedValue| fit.standing.structure.seasons.clone();
        Ok(match name {
            "status" => {
                Arc::new(self.fits().map(|fit| fit.map(|fit| fit.status.as_str())).collect::<StringArray>())
            }
            "refused" => Arc::new(
                self.fits().map(|fit| fit.and_then(|fit| fit.refused.as_deref())).collect::<StringArray>(),
            ),
            "message" => Arc::new(
                self.fits().map(|fit| fit.and_then(|fit| fit.message.as_deref())).collect::<StringArray>(),
            ),
            "trend" => self.words(|fit| Some(fit.standing.structure.trend.name().to_string())),
            "season" => self.words(|fit| {
                let periods =
                    seasons(fit).iter().map(|season| period_label(season.period)).collect::<Vec<_>>();
                Some(if periods.is_empty() { "none".to_string() } else { periods.join(", ") })
            }),
            "harmonics" => self.words(|fit| {
                let counts = seasons(fit)
                    .iter()
                    .map(|season| {
                        season.harmonics.map_or_else(|| "dummy".to_string(), |count| count.to_string())
                    })
                    .collect::<Vec<_>>();
                (!counts.is_empty()).then(|| counts.join(", "))
            }),
            "transform" => self.words(|fit| Some(fit.standing.transform.name().to_string())),
            "transform_power" => self.numbers(|fit| fit.standing.transform.power()),
            "every" => self.words(|fit| Some(fit.every.clone())),
            "first_at" => self.times(|fit| fit.first_at)?,
            "last_at" => self.times(|fit| fit.last_at)?,
            "n" => self.counts(|fit| fit.standing.n),
            "missing" => self.counts(|fit| fit.standing.points.saturating_sub(fit.standing.n)),
            "parameters" => self.parameters()?,
            "coefficients" => self.coefficients()?,
            "log_likelihood" => self.numbers(|fit| Some(fit.standing.log_likelihood)),
            "aic" => self.numbers(|fit| Some(fit.standing.criteria().0)),
            "bic" => self.numbers(|fit| Some(fit.standing.criteria().1)),
            "converged" => Arc::new(
                self.fitted().map(|fit| fit.map(|fit| fit.standing.converged)).collect::<BooleanArray>(),
            ),
            "evaluations" => self.counts(|fit| fit.standing.evaluations),
            other => {
                return Err(DataFusionError::Internal(format!("{NAME}: the summary has no field '{other}'")));
            }
        })
    }
}

static DOCUMENTATION: LazyLock<Documentation> = LazyLock::new(|| {
    Documentation::builder(
        SECTION,
        "What a fit holds, as a struct. Its fields: `status`, `refused` and `message`, the structure chosen (`trend`, `season`, `harmonics`, `transform`, \
         `transform_power`), the grid (`every`, `first_at`, `last_at`, `n`, `missing`), where the series stands at `last_at` \
         (`level`, `slope`, `seasonal`, `cycle`, `autoregression`, each with its standard error, in the units of \
         [`components`](#components)), `parameters` as a list of name, value, std_error and known, `coefficients` of the drivers, \
         `log_likelihood`, `aic` and `bic` of all observations so far, `converged` and `evaluations` of the estimation.",
        WRITTEN,
    )
    .with_argument("fit", "What structural_fit or fit_advance gave; NULL in, NULL out.")
    .with_sql_example(
        "SELECT region, product, s['last_at'] AS last_at, round(s['level'], 1) AS level, s['status'] AS status\n\
         FROM (SELECT region, product, fit_summary(structural_fit(week, litres)) AS s\n      \
               FROM sales GROUP BY region, product)\n\
         ORDER BY region, product",
    )
    .build()
});
