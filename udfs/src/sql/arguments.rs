//! The arguments of the relation functions: one table, from which everything else is made.
//!
//! [`ARGUMENTS`] holds name, accepted values, default and description of each argument. Reading a call,
//! checking values, the lists in error messages and the reference documentation all start from it.
//!
//! - [`call`] sorts the arguments of a call as written in SQL,
//! - [`constant`] evaluates those that are values,
//! - [`options`] reads them from the struct that functions in expressions take,
//! - [`settings`] turns them into what the operator works with, [`matrices`] those of `state_space`,
//! - [`suggest`] finds the name that was meant.

pub(crate) mod call;
pub(crate) mod constant;
mod matrices;
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
/// Functions that fit a named structure.
const NAMED: &[Function] = &[Function::Components, Function::Forecast, Function::Diagnostics];
const AHEAD: &[Function] = &[Function::Forecast];
const MATRICES: &[Function] = &[Function::StateSpace];

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
        "Regressors with constant coefficients, such as a price or a promotion flag. In state_space: what stands in the place of the \
         NULLs of z, in order.",
    ),
    only(
        argument(
            "drifting_drivers",
            Takes::Columns,
            ("like drivers", "none"),
            "Regressors whose coefficient is a random walk.",
        ),
        NAMED,
    ),
    only(
        argument(
            "trend",
            Takes::Value,
            (
                "'local level', 'local linear', 'smooth', 'damped', 'fixed level', 'fixed line', 'none', 'auto'",
                "'auto'",
            ),
            "Form of the trend.",
        ),
        NAMED,
    ),
    only(
        argument(
            "season",
            Takes::Value,
            ("a period in steps, a list of periods, 0 for none, or 'auto'", "'auto'"),
            "Periods of the seasons. A period given here is in the model; 'auto' keeps what the data speak for. \
         Fractional periods (52.18) go with harmonics.",
        ),
        NAMED,
    ),
    only(
        argument(
            "period",
            Takes::Value,
            ("a period in steps, or a list of periods", "from the grid"),
            "What season => 'auto' considers, where the grid does not tell (integer time).",
        ),
        NAMED,
    ),
    only(
        argument(
            "harmonics",
            Takes::Value,
            (
                "a count from 1 to half the period (60 at most), or one count per season",
                "dummy form, or a rule for long periods",
            ),
            "Pairs of sine and cosine that make a seasonal pattern.",
        ),
        NAMED,
    ),
    only(
        argument(
            "fixed_season",
            Takes::Value,
            ("true or false", "false"),
            "true = the seasonal pattern does not drift.",
        ),
        NAMED,
    ),
    only(
        argument(
            "cycle",
            Takes::Value,
            ("true, or (shortest, longest) period in steps", "false"),
            "A stochastic damped cycle with a stationary start.",
        ),
        NAMED,
    ),
    only(
        argument(
            "autoregression",
            Takes::Value,
            ("an order from 0 to 8", "0"),
            "Order of a stationary autoregression beside the white irregular.",
        ),
        NAMED,
    ),
    only(
        argument(
            "transform",
            Takes::Constant,
            ("'none', 'log', 'log1p', 'box-cox', a power from 0 to 2, 'auto'", "'auto'"),
            "The scale of the model. On 'log', and on 'log1p' which takes zeros, season and effects are factors and the slope is \
         growth per step. 'box-cox' estimates a power between 0 (the logarithm) and 1 (no transform), a number gives it; level, \
         fitted values and forecasts are then in the data's unit, all other parts on the transformed scale.",
        ),
        NAMED,
    ),
    only(
        argument(
            "known",
            Takes::Value,
            ("{'parameter': value, …} or named_struct('parameter', value, …)", "nothing known"),
            "Parameters that are given and not estimated: the variances irregular, level, slope, season (season_7 and \
         so on with several), cycle, autoregression, or the name of a drifting driver; and slope_damping, \
         cycle_damping, cycle_period, ar_1 and so on.",
        ),
        NAMED,
    ),
    argument(
        "every",
        Takes::Value,
        ("an INTERVAL, or a whole number for integer time", "found from the data"),
        "Step of the grid.",
    ),
    only(
        argument("estimate", Takes::Value, ("'likelihood'", "'likelihood'"), "How parameters are estimated."),
        NAMED,
    ),
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
         that one list of arguments serves all of them.",
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
    only(
        argument(
            "z",
            Takes::Constant,
            ("a list with one number per state; NULL = the value of the next driver", REQUIRED),
            "Loads of the states on the observation: y = d + z a + e.",
        ),
        MATRICES,
    ),
    only(
        argument(
            "t",
            Takes::Value,
            ("a list of rows, one per state", REQUIRED),
            "Transition: the states of the next step are c + t a + r n.",
        ),
        MATRICES,
    ),
    only(
        argument(
            "r",
            Takes::Constant,
            ("a list of rows with one number per disturbance; a flat list is one column", "the identity"),
            "Which disturbance moves which state.",
        ),
        MATRICES,
    ),
    only(
        argument(
            "h",
            Takes::Value,
            ("a number that is not negative, or NULL", "NULL"),
            "Variance of the irregular e; NULL = estimated.",
        ),
        MATRICES,
    ),
    only(
        argument(
            "q",
            Takes::Constant,
            ("a list of rows, or a flat list for a diagonal; NULLs on the diagonal", "NULLs on the diagonal"),
            "Covariance of the disturbances n; a NULL on its diagonal is a variance to estimate.",
        ),
        MATRICES,
    ),
    only(
        argument(
            "a1",
            Takes::Value,
            ("a list with one number per state", "zeros"),
            "Mean of the first states where they have a proper start.",
        ),
        MATRICES,
    ),
    only(
        argument(
            "p1",
            Takes::Value,
            ("a list of rows, or a flat list for a diagonal; NULLs on the diagonal", "NULLs on the diagonal"),
            "Covariance of the first states; NULL on the diagonal = a diffuse start.",
        ),
        MATRICES,
    ),
    only(
        argument(
            "c",
            Takes::Value,
            ("a list with one number per state", "zeros"),
            "Constant of the transition.",
        ),
        MATRICES,
    ),
    only(argument("d", Takes::Value, ("a number", "0"), "Constant of the observation."), MATRICES),
];

/// The arguments of one function.
pub fn arguments_of(function: Function) -> impl Iterator<Item = &'static Argument> {
    ARGUMENTS.iter().filter(move |argument| argument.functions.contains(&function))
}
