//! `structural_components(at, observed [, options [, drivers]]) OVER (PARTITION BY …)`: `components` as a window
//! function, one row in and one row out.
//!
//! A partition is a series. Its rows may come in any order, since the time of each is an argument; the answer of a
//! row is that of its point of the grid. Rows before the first observation and rows that only carry a plan have no
//! states; in a series in trouble every row says so. The type of the result must be known before any value is, hence
//! two differences to `components`: effects stand in the order of the struct of drivers, whether they drift or not,
//! and the units in the metadata leave the scale open.

mod evaluator;

use std::sync::{Arc, LazyLock};

use datafusion::arrow::datatypes::{DataType, Field, FieldRef};
use datafusion::common::ScalarValue;
use datafusion::error::Result;
use datafusion::logical_expr::function::{
    PartitionEvaluatorArgs, WindowFunctionSimplification, WindowUDFFieldArgs,
};
use datafusion::logical_expr::{
    DocSection, Documentation, Expr, PartitionEvaluator, Signature, Volatility, WindowUDFImpl,
};

use super::arguments::options::{OptionSet, constant};
use super::error::{Caller, bad_call, counted};
use super::series_inputs::{NAMES, SeriesInputs};
use super::watch::Watch;
use crate::columns::components_rows::COLUMNS;
use crate::columns::result::{Layout, ResultSchema, Scale};
use evaluator::Evaluator;

const NAME: &str = "structural_components";
const WRITTEN: &str = "structural_components(at, observed [, options [, drivers]]) OVER (PARTITION BY …)";
const OPTIONS: OptionSet = OptionSet { function: NAME, without: &[] };

/// The window function.
#[derive(Debug, PartialEq, Eq, Hash)]
pub(crate) struct StructuralComponents {
    signature: Signature,
    watch: Watch,
}

impl StructuralComponents {
    pub(crate) fn new(watch: Watch) -> Self {
        let mut signature = Signature::user_defined(Volatility::Immutable);
        signature.parameter_names = Some(NAMES.map(str::to_string).to_vec());
        Self { signature, watch }
    }
}

/// What the types of the arguments say.
#[derive(Debug, Clone)]
struct Inputs {
    series: SeriesInputs,
    result: Arc<ResultSchema>,
}

impl Inputs {
    /// # Errors
    /// Types that an argument does not take, options that are none, names that would come twice in the result.
    fn of(fields: &[FieldRef]) -> Result<Self> {
        let caller = Caller::Expression(NAME);
        let types = fields.iter().map(|field| field.data_type().clone()).collect::<Vec<_>>();
        let series = SeriesInputs::of(OPTIONS, &types)?;
        let layout = Layout {
            time: series.time.data_type().clone(),
            drivers: series.drivers.clone(),
            drifting_drivers: Vec::new(),
            scale: Scale::BySeries,
            parts: false,
            states: 0,
            disturbances: 0,
        };
        let columns = layout.columns(COLUMNS);
        for (at, (field, _)) in columns.iter().enumerate() {
            if columns.iter().take(at).any(|(other, _)| other.name() == field.name()) {
                let what = format!(
                    "two columns of the result would have the name '{}'; rename the driver",
                    field.name()
                );
                return Err(bad_call(caller, what));
            }
        }
        Ok(Self { series, result: Arc::new(ResultSchema::new(Vec::new(), columns)) })
    }
}

impl WindowUDFImpl for StructuralComponents {
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

    fn field(&self, args: WindowUDFFieldArgs<'_>) -> Result<FieldRef> {
        counted(NAME, WRITTEN, 2..=4, args.input_fields().len())?;
        let fields = Inputs::of(args.input_fields())?.result.schema().fields().clone();
        Ok(Arc::new(Field::new_struct(args.name(), fields, true)))
    }

    // The engine also calls this while it plans, so that mistakes in the options come early.
    fn partition_evaluator(&self, args: PartitionEvaluatorArgs<'_>) -> Result<Box<dyn PartitionEvaluator>> {
        if args.ignore_nulls() {
            let what =
                "does not take IGNORE NULLS; a row whose observed is NULL is a missing observation anyway";
            return Err(bad_call(Caller::Expression(NAME), what));
        }
        let inputs = Inputs::of(args.input_fields())?;
        let options = match args.input_exprs().get(2) {
            Some(expr) => constant(NAME, "options", expr)?,
            None => ScalarValue::Null,
        };
        let settings = OPTIONS.read(&options, inputs.series.time.axis(), &inputs.series.drivers)?;
        Ok(Box::new(Evaluator::new(inputs, settings, self.watch.clone())))
    }

    // The engine ignores DISTINCT on such a function; an answer all the same would be a wrong one.
    fn simplify(&self) -> Option<WindowFunctionSimplification> {
        Some(Box::new(|window, _| match window.params.distinct {
            true => {
                let what = "does not take DISTINCT; a time that comes twice is a trouble of its series";
                Err(bad_call(Caller::Expression(NAME), what))
            }
            false => Ok(Expr::from(window)),
        }))
    }

    fn documentation(&self) -> Option<&Documentation> {
        Some(&DOCUMENTATION)
    }
}

static DOCUMENTATION: LazyLock<Documentation> = LazyLock::new(|| {
    let section = DocSection { include: true, label: "Window functions", description: None };
    let options = OPTIONS.arguments().map(|argument| format!("`{}`", argument.name)).collect::<Vec<_>>();
    Documentation::builder(
        section,
        "Where each series stands, beside the rows it came from: `components` as a window function. A partition is a \
         series; its rows may come in any order, and ORDER BY and a frame have no influence. The answer is a struct \
         with the columns of [`components`](#components) after its keys: all NULL but `at` and `status` in rows \
         before the first observation and in rows that carry a plan; `observed` and `status` in every row of a \
         series in trouble. Effects stand in the order of the struct of drivers. Points of the grid that have no row \
         get none here. The rows of a partition are fitted on one thread and held in memory: for the whole of a \
         large table `components` is the better choice.",
        WRITTEN,
    )
    .with_argument("at", "The time of a row: DATE, TIMESTAMP (any unit, with or without zone) or integer.")
    .with_argument("observed", "The value of a row, any numeric type; NULL and NaN = missing.")
    .with_argument(
        "options",
        format!(
            "A struct of constants whose fields are [arguments](#arguments) of the functions for FROM, or NULL for none: \
             {}. `drifting_drivers` names the drivers whose coefficient is a random walk.",
            options.join(", ")
        ),
    )
    .with_argument(
        "drivers",
        "A struct of numeric or boolean columns; the names of its fields are the names of the drivers.",
    )
    .with_sql_example(
        "SELECT region, product, week, litres, round(s['level'], 1) AS level, round(s['effect_of_price'], 1) AS effect_of_price\n\
         FROM (SELECT *, structural_components(week, litres, {'trend': 'local linear'}, {'price': price})\n              \
                         OVER (PARTITION BY region, product) AS s\n      \
               FROM sales)\n\
         ORDER BY region, product, week",
    )
    .build()
});
