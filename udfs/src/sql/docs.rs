//! The reference of the functions as data: for a page, a command's help, a completion.
//!
//! Everything here is read off the tables that the functions themselves work with, except the words about a
//! function as a whole and its example, which stand below. [`values`] has the functions for expressions.

mod values;

use super::arguments::{Argument, arguments_of};
use super::function::Function;
use crate::columns::result::{ColumnScope, ColumnSpec, Scale};

pub use values::{ValueFunctionDoc, ValueFunctionKind, value_functions};

/// What there is to say about one relation function.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct FunctionDoc {
    /// The function.
    pub function: Function,
    /// What one row of its result is.
    pub one_row_is: &'static str,
    /// What it gives, in a few sentences.
    pub description: &'static str,
    /// Its arguments.
    pub arguments: Vec<&'static Argument>,
    /// The columns of its result after the key columns.
    pub columns: Vec<ColumnDoc>,
    /// A query that runs on a table `sales(region, product, week, litres, price, promo)`.
    pub example: &'static str,
}

/// What there is to say about one column.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct ColumnDoc {
    /// Name, type, description.
    pub spec: &'static ColumnSpec,
    /// Unit on an untransformed model and on the log scale, where there is one.
    pub units: Option<(&'static str, &'static str)>,
    /// When it is there, if not always.
    pub condition: Option<&'static str>,
}

/// The documentation of all relation functions.
pub fn functions() -> Vec<FunctionDoc> {
    Function::ALL.into_iter().map(describe).collect()
}

/// Every value of the `status` column, 'ok' first.
pub fn statuses() -> &'static [&'static str] {
    &stillwell_statespace::Trouble::STATUSES
}

fn describe(function: Function) -> FunctionDoc {
    let (one_row_is, description, example) = words(function);
    FunctionDoc {
        function,
        one_row_is,
        description,
        arguments: arguments_of(function).collect(),
        columns: function.columns().iter().map(|spec| column(function, spec)).collect(),
        example,
    }
}

fn column(function: Function, spec: &'static ColumnSpec) -> ColumnDoc {
    let condition = match (spec.part, spec.scope) {
        (true, ColumnScope::Always) => Some("with parts => true"),
        (true, _) => Some("one per driver, with parts => true"),
        (false, ColumnScope::Always) => None,
        (false, ColumnScope::EachDriver) => Some("one per driver"),
        (false, ColumnScope::EachDriftingDriver) => Some("one per drifting driver"),
        (false, ColumnScope::EachState) => Some("one per state"),
        (false, ColumnScope::EachDisturbance) => Some("one per disturbance"),
    };
    // A system given as matrices has no transform.
    let multiplied = if function == Function::StateSpace { Scale::Data } else { Scale::Log };
    ColumnDoc { spec, units: spec.unit.text(Scale::Data).zip(spec.unit.text(multiplied)), condition }
}

fn words(function: Function) -> (&'static str, &'static str, &'static str) {
    match function {
        Function::Components => (
            "one point of one series, gaps in the grid included, from its first to its last observation",
            "Where each series really stands: it is taken apart into level, slope, season, cycle, effects of \
             drivers and irregular, each estimated from the whole series and with its standard error, and every \
             point says how far it is out as an outlier or as a shift of the level.",
            "SELECT region, product, at, observed, level, slope, seasonal\n\
             FROM components(\n    \
                 data     => (SELECT region, product, week, litres FROM sales),\n    \
                 per      => (region, product),\n    \
                 at       => week,\n    \
                 observed => litres)\n\
             ORDER BY region, product, at",
        ),
        Function::Forecast => (
            "one step of one series after its last observation",
            "What comes next: the expected value of each step, its interval, and the running total from the \
             first step on with an interval of its own, which takes into account that neighbouring steps err \
             together. Drivers need a plan: rows after the last observation, with NULL observed, that carry \
             their values.",
            "SELECT region, product, at, expected, lower, upper, total_expected\n\
             FROM forecast(\n    \
                 data     => (SELECT region, product, week, litres, price FROM sales),\n    \
                 per      => (region, product),\n    \
                 at       => week,\n    \
                 observed => litres,\n    \
                 drivers  => price,\n    \
                 horizon  => 13)\n\
             ORDER BY region, product, step",
        ),
        Function::Diagnostics => (
            "one series",
            "What was fitted and whether to believe it: the structure chosen, the variances and their ratios, \
             likelihood and criteria, checks of the one-step errors with their p-values, and what is wrong with \
             a series that could not be fitted.",
            "SELECT region, product, trend, season, q_p, normality_p, status, message\n\
             FROM diagnostics(\n    \
                 data     => (SELECT region, product, week, litres FROM sales),\n    \
                 per      => (region, product),\n    \
                 at       => week,\n    \
                 observed => litres)\n\
             ORDER BY status, region, product",
        ),
        Function::StateSpace => (
            "one point of one series, from its first observation to its last row",
            "Any linear Gaussian system with one observation per step, given as matrices: y = d + z a + e with variance h, and from \
             one step to the next a = c + t a + r n with covariance q. Variances left NULL are estimated, the states are smoothed, \
             and points after the last observation, which are rows with NULL observed, hold their forecasts.",
            "SELECT region, product, at, state_1 AS level, state_1_se, state_2 AS slope, h, q_1, q_2\n\
             FROM state_space(\n    \
                 data     => (SELECT region, product, week, litres FROM sales),\n    \
                 per      => (region, product),\n    \
                 at       => week,\n    \
                 observed => litres,\n    \
                 z        => [1.0, 0.0],\n    \
                 t        => [[1.0, 1.0], [0.0, 1.0]],\n    \
                 q        => [NULL, NULL])\n\
             ORDER BY region, product, at",
        ),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_function_is_described_from_its_own_tables() {
        for doc in functions() {
            assert!(doc.example.contains(doc.function.name()));
            assert_eq!(doc.columns.len(), doc.function.columns().len());
            let required = doc.arguments.iter().filter(|argument| argument.default == "required");
            for argument in required {
                assert!(
                    doc.example.contains(argument.name),
                    "{} lacks {}",
                    doc.function.name(),
                    argument.name
                );
            }
        }
    }

    #[test]
    fn ok_is_the_first_status() {
        assert_eq!(statuses().first(), Some(&"ok"));
    }
}
