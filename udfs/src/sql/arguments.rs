//! The arguments of the relation functions: one table, from which everything else is made.
//!
//! [`ARGUMENTS`] holds name, accepted values, default and description of each argument. Reading a call,
//! checking values, the lists in error messages and the reference documentation all start from it.
//!
//! - [`call`] sorts the arguments of a call as written in SQL,
//! - [`constant`] evaluates those that are values,
//! - [`options`] reads them from the struct that functions in expressions take,
//! - [`settings`] turns them into what the operator works with,
//! - [`suggest`] finds the name that was meant.

pub(crate) mod call;
pub(crate) mod constant;
pub(crate) mod options;
pub(crate) mod settings;
pub(crate) mod suggest;

use super::function::Function;

/// What kind of thing an argument takes.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Hash)]
pub enum Takes {
    /// A query, or the name of a table.
    Relation,
    /// One expression over the columns of `data`.
    Column,
    /// Any number of expressions over the columns of `data`.
    Columns,
    /// A constant, or a parameter of a prepared statement.
    Value,
    /// A constant that decides which columns the result has, or their units; no parameter.
    Constant,
}

/// One argument.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Hash)]
pub struct Argument {
    /// Name, as written before `=>`.
    pub name: &'static str,
    /// What it takes.
    pub takes: Takes,
    /// Accepted values, in words.
    pub values: &'static str,
    /// What happens without it; `required` if nothing can.
    pub default: &'static str,
    /// What it means, one sentence or two.
    pub description: &'static str,
    /// The functions that have it.
    pub functions: &'static [Function],
}

const ALL: &[Function] = &Function::ALL;
const AHEAD: &[Function] = &[Function::Forecast];

const fn argument(
    name: &'static str,
    takes: Takes,
    (values, default): (&'static str, &'static str),
    description: &'static str,
) -> Argument {
    Argument { name, takes, values, default, description, functions: ALL }
}

const fn only(mut argument: Argument, functions: &'static [Function]) -> Argument {
    argument.functions = functions;
    argument
}

/// Text of [`Argument::default`] where there is none.
pub(crate) const REQUIRED: &str = "required";

/// All arguments, in the order of the documentation.
pub const ARGUMENTS: &[Argument] = &[
    argument(
        "data",
        Takes::Relation,
        ("a query in parentheses; the name of a table or a CTE works too", REQUIRED),
        "The rows. Their order does not matter. May stand first without its name.",
    ),
    argument(
        "per",
        Takes::Columns,
        ("key columns: one, or a list in parentheses", "one series"),
        "The key of a series, NULL being a key like any other. Key columns keep name and type in the result.",
    ),
    argument(
        "at",
        Takes::Column,
        ("DATE, TIMESTAMP (any unit, with or without zone) or integer", REQUIRED),
        "The time of a row.",
    ),
    argument(
        "observed",
        Takes::Column,
        ("any numeric type", REQUIRED),
        "The value of a row; NULL and NaN = missing. Rows after the last observation carry the drivers' plan.",
    ),
    argument(
        "drivers",
        Takes::Columns,
        ("numeric or boolean columns: one, a list in parentheses, or {'name': expression, …}", "none"),
        "Regressors with constant coefficients, such as a price or a promotion flag.",
    ),
    argument(
        "drifting_drivers",
        Takes::Columns,
        ("like drivers", "none"),
        "Regressors whose coefficient is a random walk.",
    ),
    argument(
        "trend",
        Takes::Value,
        (
            "'local level', 'local linear', 'smooth', 'damped', 'fixed level', 'fixed line', 'none', 'auto'",
            "'auto'",
        ),
        "Form of the trend.",
    ),
    argument(
        "season",
        Takes::Value,
        ("a period in steps, a list of periods, 0 for none, or 'auto'", "'auto'"),
        "Periods of the seasons. A period given here is in the model; 'auto' keeps what the data speak for. \
         Fractional periods (52.18) go with harmonics.",
    ),
    argument(
        "period",
        Takes::Value,
        ("a period in steps, or a list of periods", "from the grid"),
        "What season => 'auto' considers, where the grid does not tell (integer time).",
    ),
    argument(
        "harmonics",
        Takes::Value,
        (
            "a count from 1 to half the period, or one count per season",
            "dummy form, or a rule for long periods",
        ),
        "Pairs of sine and cosine that make a seasonal pattern.",
    ),
    argument(
        "fixed_season",
        Takes::Value,
        ("true or false", "false"),
        "true = the seasonal pattern does not drift.",
    ),
    argument(
        "cycle",
        Takes::Value,
        ("true, or (shortest, longest) period in steps", "false"),
        "A stochastic damped cycle with a stationary start.",
    ),
    argument(
        "autoregression",
        Takes::Value,
        ("an order from 0 to 8", "0"),
        "Order of a stationary autoregression beside the white irregular.",
    ),
    argument(
        "transform",
        Takes::Constant,
        ("'none', 'log', 'auto'", "'auto'"),
        "The scale of the model. On 'log', season and effects are factors and the slope is growth per step.",
    ),
    argument(
        "known",
        Takes::Value,
        ("{'parameter': value, …} or named_struct('parameter', value, …)", "nothing known"),
        "Parameters that are given and not estimated: the variances irregular, level, slope, season (season_7 and \
         so on with several), cycle, autoregression, or the name of a drifting driver; and slope_damping, \
         cycle_damping, cycle_period, ar_1 and so on.",
    ),
    argument(
        "every",
        Takes::Value,
        ("an INTERVAL, or a whole number for integer time", "found from the data"),
        "Step of the grid.",
    ),
    argument("estimate", Takes::Value, ("'likelihood'", "'likelihood'"), "How parameters are estimated."),
    argument(
        "on_trouble",
        Takes::Value,
        ("'report' or 'fail'", "'report'"),
        "What a series in trouble does: say so in its own rows, or end the query with an error that names it.",
    ),
    argument(
        "coverage",
        Takes::Value,
        ("a number above 0 and at most 0.999999", "0.9"),
        "Probability that an interval is to cover. No influence on diagnostics, which takes it all the same so \
         that one list of arguments serves all three.",
    ),
    only(
        argument(
            "horizon",
            Takes::Value,
            ("a whole number from 1 to 10000", REQUIRED),
            "Steps to forecast after the last observation of each series.",
        ),
        AHEAD,
    ),
    only(
        argument(
            "parts",
            Takes::Constant,
            ("true or false", "false"),
            "true = the forecasts of level, slope, season, cycle and effects are columns too.",
        ),
        AHEAD,
    ),
];

/// The arguments of one function.
pub fn arguments_of(function: Function) -> impl Iterator<Item = &'static Argument> {
    ARGUMENTS.iter().filter(move |argument| argument.functions.contains(&function))
}
