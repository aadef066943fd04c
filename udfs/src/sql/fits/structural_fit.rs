//! `structural_fit(at, observed [, options [, drivers]])`: the fit of a group of rows, as a value.

use std::sync::LazyLock;

use datafusion::arrow::datatypes::{DataType, FieldRef};
use datafusion::common::ScalarValue;
use datafusion::error::Result;
use datafusion::logical_expr::function::{AccumulatorArgs, StateFieldsArgs};
use datafusion::logical_expr::utils::AggregateOrderSensitivity;
use datafusion::logical_expr::{
    Accumulator, AggregateUDFImpl, DocSection, Documentation, GroupsAccumulator, Signature, Volatility,
};

use super::accumulator::{FitAccumulator, FitGroups, state_fields};
use crate::columns::fit_value::fit_type;
use crate::sql::arguments::options::{OptionSet, constant};
use crate::sql::arguments::settings::Settings;
use crate::sql::error::{Caller, bad_call, counted};
use crate::sql::series_inputs::{NAMES, SeriesInputs};
use crate::sql::watch::Watch;

pub(super) const NAME: &str = "structural_fit";
const WRITTEN: &str = "structural_fit(at, observed [, options [, drivers]])";
const OPTIONS: OptionSet = OptionSet { function: NAME, without: &["coverage"] };

/// The aggregate.
#[derive(Debug, PartialEq, Eq, Hash)]
pub(crate) struct StructuralFit {
    signature: Signature,
    watch: Watch,
}

impl StructuralFit {
    pub(crate) fn new(watch: Watch) -> Self {
        let mut signature = Signature::user_defined(Volatility::Immutable);
        signature.parameter_names = Some(NAMES.map(str::to_string).to_vec());
        Self { signature, watch }
    }
}

/// Inputs and settings of one call.
fn read(args: &AccumulatorArgs<'_>) -> Result<(SeriesInputs, Settings)> {
    if args.ignore_nulls {
        let what = "does not take IGNORE NULLS; a row whose observed is NULL is a missing observation anyway";
        return Err(bad_call(Caller::Expression(NAME), what));
    }
    let types = args.expr_fields.iter().map(|field| field.data_type().clone()).collect::<Vec<_>>();
    let inputs = SeriesInputs::of(OPTIONS, &types)?;
    let options = match args.exprs.get(2) {
        Some(expr) => constant(NAME, "options", expr)?,
        None => ScalarValue::Null,
    };
    let settings = OPTIONS.read(&options, inputs.time.axis(), &inputs.drivers)?;
    Ok((inputs, settings))
}

impl AggregateUDFImpl for StructuralFit {
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
        Ok(fit_type(SeriesInputs::of(OPTIONS, types)?.time.data_type()))
    }

    fn state_fields(&self, args: StateFieldsArgs<'_>) -> Result<Vec<FieldRef>> {
        let types = args.input_fields.iter().map(|field| field.data_type().clone()).collect::<Vec<_>>();
        let inputs = SeriesInputs::of(OPTIONS, &types)?;
        Ok(state_fields(args.name, inputs.drivers.len()))
    }

    fn accumulator(&self, args: AccumulatorArgs<'_>) -> Result<Box<dyn Accumulator>> {
        let (inputs, settings) = read(&args)?;
        Ok(Box::new(FitAccumulator::new(FitGroups::new(
            inputs,
            settings,
            args.is_distinct,
            self.watch.clone(),
        ))))
    }

    fn groups_accumulator_supported(&self, _args: AccumulatorArgs<'_>) -> bool {
        true
    }

    fn create_groups_accumulator(&self, args: AccumulatorArgs<'_>) -> Result<Box<dyn GroupsAccumulator>> {
        let (inputs, settings) = read(&args)?;
        Ok(Box::new(FitGroups::new(inputs, settings, args.is_distinct, self.watch.clone())))
    }

    // The rows are sorted by `at` when a group is complete; ORDER BY in the call changes nothing.
    fn order_sensitivity(&self) -> AggregateOrderSensitivity {
        AggregateOrderSensitivity::Insensitive
    }

    fn supports_null_handling_clause(&self) -> bool {
        true
    }

    fn documentation(&self) -> Option<&Documentation> {
        Some(&DOCUMENTATION)
    }
}

static DOCUMENTATION: LazyLock<Documentation> = LazyLock::new(|| {
    let section = DocSection { include: true, label: "Aggregate functions", description: None };
    let options = OPTIONS.arguments().map(|argument| format!("`{}`", argument.name)).collect::<Vec<_>>();
    Documentation::builder(
        section,
        "The fit of a series as a value: estimated once, kept in a table, forecast from and advanced without the history. The \
         rows of a group are the series; they are sorted by `at`, so that their order and an ORDER BY in the call have no \
         influence. Rows after the last observation carry the drivers' plan. The value is a struct of plain types with a \
         `layout_version`: status and message, the structure, its parameters, the state after the last observation with its \
         covariance, and the plan. It goes to Parquet and comes back bit for bit. A series in trouble is a value with its \
         `status` and `message`; a group without rows is NULL. All rows of all groups are held until they are complete: for a \
         single pass over a large table `forecast` in FROM takes less memory.",
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
        "SELECT region, product, fit['status'] AS status, fit['trend'] AS trend, fit['last_at'] AS last_at\n\
         FROM (SELECT region, product,\n             \
                      structural_fit(week, litres, {'trend': 'local linear', 'season': 52, 'harmonics': 3}) AS fit\n      \
               FROM sales GROUP BY region, product)\n\
         ORDER BY region, product",
    )
    .build()
});
