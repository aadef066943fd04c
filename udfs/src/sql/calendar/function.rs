//! What the functions of the calendar have in common as functions of the engine.

use std::hash::{Hash, Hasher};

use datafusion::arrow::array::ArrayRef;
use datafusion::arrow::datatypes::DataType;
use datafusion::error::{DataFusionError, Result};
use datafusion::logical_expr::{
    ColumnarValue, DocSection, Documentation, ScalarFunctionArgs, ScalarUDFImpl, Signature, Volatility,
};
use datafusion::scalar::ScalarValue;

use super::super::error::wrong_call;
use super::call::Call;
use super::parameters::Parameter;

/// Where they stand in a reference.
const SECTION: DocSection = DocSection {
    include: true,
    label: "Calendar Functions",
    description: Some(
        "What a planner makes drivers of, from a date. A period is the half-open stretch of time that starts at `at` \
         and lasts `every`. It ends where `at + every` falls, so that a month from 31 January ends on the last day of \
         February; let months start on a day that every month has. Timestamps count by the date on the wall clock of \
         their zone. NULL in, NULL out.",
    ),
};

/// One function: its words and its work.
#[derive(Debug)]
pub(super) struct Definition {
    pub(super) name: &'static str,
    pub(super) description: &'static str,
    /// In their order; those that may be left out come last.
    pub(super) parameters: &'static [Parameter],
    /// Type of the result.
    pub(super) result: DataType,
    /// A query that runs by itself.
    pub(super) example: &'static str,
    /// Functions to look at as well.
    pub(super) related: &'static [&'static str],
    /// The result of each row of a call.
    pub(super) work: fn(&Call<'_>) -> Result<ArrayRef>,
}

impl Definition {
    /// How a call is written: `working_days(at, every [, holidays])`.
    fn syntax(&self) -> String {
        let mut written = String::new();
        for parameter in self.parameters {
            let comma = if written.is_empty() { "" } else { ", " };
            match parameter.optional {
                true => written.push_str(&format!(" [{comma}{}]", parameter.name)),
                false => written.push_str(&format!("{comma}{}", parameter.name)),
            }
        }
        format!("{}({written})", self.name)
    }

    fn required(&self) -> usize {
        self.parameters.iter().filter(|parameter| !parameter.optional).count()
    }
}

/// A function of the calendar, to be put into a session.
///
/// The signature is left to [`ScalarUDFImpl::coerce_types`], which takes whatever comes: types and counts are checked
/// with the result type, where a mistake is said in our words instead of the engine's list of signatures.
#[derive(Debug)]
pub(super) struct CalendarFunction {
    definition: Definition,
    signature: Signature,
    documentation: Documentation,
}

impl CalendarFunction {
    pub(super) fn new(definition: Definition) -> Self {
        // Same arguments, same result: the engine may work out constant calls once, when it plans.
        let mut signature = Signature::user_defined(Volatility::Immutable);
        let names = definition.parameters.iter().map(|parameter| parameter.name.to_string());
        signature.parameter_names = Some(names.collect());
        let mut documentation = Documentation::builder(SECTION, definition.description, definition.syntax())
            .with_sql_example(definition.example);
        for parameter in definition.parameters {
            documentation = documentation.with_argument(parameter.name, parameter.description);
        }
        for related in definition.related {
            documentation = documentation.with_related_udf(*related);
        }
        Self { definition, signature, documentation: documentation.build() }
    }
}

impl ScalarUDFImpl for CalendarFunction {
    fn name(&self) -> &str {
        self.definition.name
    }

    fn signature(&self) -> &Signature {
        &self.signature
    }

    fn coerce_types(&self, given: &[DataType]) -> Result<Vec<DataType>> {
        let known =
            self.definition.parameters.iter().zip(given).map(|(parameter, t)| parameter.takes.coerced(t));
        // Those too many are refused below.
        Ok(known.chain(given.iter().skip(self.definition.parameters.len()).cloned()).collect())
    }

    fn return_type(&self, given: &[DataType]) -> Result<DataType> {
        let definition = &self.definition;
        let (fewest, most) = (definition.required(), definition.parameters.len());
        if !(fewest..=most).contains(&given.len()) {
            let count = if fewest == most { most.to_string() } else { format!("{fewest} or {most}") };
            let what =
                format!("takes {count} argument{}, not {}", if most == 1 { "" } else { "s" }, given.len());
            return Err(wrong_call(
                definition.name,
                format!("{what}; it is written {}", definition.syntax()),
            ));
        }
        for (parameter, data_type) in definition.parameters.iter().zip(given) {
            let wrong = |what| wrong_call(definition.name, format!("argument '{}' {what}", parameter.name));
            parameter.takes.check(data_type).map_err(wrong)?;
        }
        Ok(definition.result.clone())
    }

    fn is_strict(&self) -> bool {
        true
    }

    fn invoke_with_args(&self, arguments: ScalarFunctionArgs) -> Result<ColumnarValue> {
        let constant = arguments.args.iter().all(|value| matches!(value, ColumnarValue::Scalar(_)));
        let rows = if constant { 1 } else { arguments.number_rows };
        let call = Call::new(self.definition.name, self.definition.parameters, &arguments.args, rows);
        let result = (self.definition.work)(&call)?;
        if result.len() != rows || result.data_type() != &self.definition.result {
            return Err(DataFusionError::Internal(format!(
                "{} gave {} rows of {} for {rows}",
                self.definition.name,
                result.len(),
                result.data_type()
            )));
        }
        if constant {
            return ScalarValue::try_from_array(&result, 0).map(ColumnarValue::Scalar);
        }
        Ok(ColumnarValue::Array(result))
    }

    fn documentation(&self) -> Option<&Documentation> {
        Some(&self.documentation)
    }
}

/// There is one function of a name.
impl PartialEq for CalendarFunction {
    fn eq(&self, other: &Self) -> bool {
        self.definition.name == other.definition.name
    }
}

impl Eq for CalendarFunction {}

impl Hash for CalendarFunction {
    fn hash<H: Hasher>(&self, state: &mut H) {
        self.definition.name.hash(state);
    }
}
