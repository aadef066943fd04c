//! Fits from a struct array.

use std::fmt;

use arrow::array::{
    Array, ArrayRef, AsArray, BooleanArray, Float64Array, Int32Array, Int64Array, StructArray,
};
use arrow::compute::cast;
use arrow::datatypes::{DataType, Float64Type, Int32Type, Int64Type};
use arrow::error::ArrowError;
use stillwell_statespace::calendar::Step;
use stillwell_statespace::structure::{Cycle, Season, Structure, Trend};
use stillwell_statespace::{Parameter, Standing, Transform, Trouble};

use super::{FitValue, FittedValue, LAYOUT_VERSION, fit_fields};
use crate::columns::time::TimeKind;
use crate::columns::time_grid::GridRule;

/// Why something is not a fit.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) enum ReadError {
    /// Another type, or a struct without this field.
    NotAFit { found: String },
    /// A layout of a later version.
    Later { version: i32 },
    /// Contents that do not go together.
    Damaged { what: String },
}

impl fmt::Display for ReadError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::NotAFit { found } => write!(
                f,
                "takes a fit, the struct that structural_fit(at, observed, …) and fit_advance(…) give, but {found}"
            ),
            Self::Later { version } => write!(
                f,
                "holds a fit of layout {version}, but this program reads layouts up to {LAYOUT_VERSION}; use the program that wrote it, or fit again"
            ),
            Self::Damaged { what } => write!(f, "holds a fit that is damaged: {what}; fit the series again"),
        }
    }
}

impl std::error::Error for ReadError {}

impl From<ArrowError> for ReadError {
    fn from(error: ArrowError) -> Self {
        Self::Damaged { what: error.to_string() }
    }
}

/// A column of fits.
#[derive(Debug)]
pub(crate) struct FitColumn {
    /// The type of its times.
    pub(crate) time: TimeKind,
    fits: StructArray,
}

impl FitColumn {
    /// The type of the times in fits of this type.
    ///
    /// # Errors
    /// A type that is none of a fit.
    pub(crate) fn time_of(data_type: &DataType) -> Result<TimeKind, ReadError> {
        let not = |found: String| ReadError::NotAFit { found };
        let DataType::Struct(fields) = data_type else { return Err(not(format!("has type {data_type}"))) };
        let (_, last_at) =
            fields.find("last_at").ok_or_else(|| not("is a struct without 'last_at'".to_string()))?;
        let time = TimeKind::try_new(last_at.data_type())
            .map_err(|_| not(format!("is a struct whose 'last_at' has type {}", last_at.data_type())))?;
        match fit_fields(last_at.data_type()).iter().find(|field| fields.find(field.name()).is_none()) {
            Some(field) => Err(not(format!("is a struct without '{}'", field.name()))),
            None => Ok(time),
        }
    }

    /// Reads a column; fields are found by name and brought to the types of the layout.
    ///
    /// # Errors
    /// A column that holds no fits.
    pub(crate) fn try_new(column: &ArrayRef) -> Result<Self, ReadError> {
        let time = Self::time_of(column.data_type())?;
        let given = column.as_struct();
        let fields = fit_fields(time.data_type());
        let columns = fields
            .iter()
            .map(|field| {
                let found = given.column_by_name(field.name()).ok_or_else(|| ReadError::NotAFit {
                    found: format!("is a struct without '{}'", field.name()),
                })?;
                Ok(cast(found, field.data_type())?)
            })
            .collect::<Result<Vec<_>, ReadError>>()?;
        let fits = StructArray::try_new(fields, columns, given.nulls().cloned())?;
        Ok(Self { time, fits })
    }

    /// Number of rows.
    pub(crate) fn len(&self) -> usize {
        self.fits.len()
    }

    /// The fit of a row; `None` for NULL. A fit whose contents do not go together is one in trouble, of that series alone.
    ///
    /// # Errors
    /// A layout of a later version.
    pub(crate) fn get(&self, row: usize) -> Result<Option<FitValue>, ReadError> {
        if self.fits.is_null(row) {
            return Ok(None);
        }
        match self.read(row) {
            Err(ReadError::Damaged { what }) => {
                let trouble = Trouble::DamagedFit { what };
                let message = Some(trouble.to_string());
                Ok(Some(FitValue {
                    status: trouble.status().to_string(),
                    refused: None,
                    message,
                    fitted: None,
                }))
            }
            other => other,
        }
    }

    fn read(&self, row: usize) -> Result<Option<FitValue>, ReadError> {
        let at = Row { fits: &self.fits, row };
        let (version, status) = (at.short("layout_version")?, at.text("status")?);
        let (version, status) = match (version, status) {
            // Outer joins make structs of NULLs.
            (None, None) => return Ok(None),
            (Some(version), Some(status)) => (version, status),
            _ => return Err(damaged("it has no layout_version or no status")),
        };
        match version {
            later if later > LAYOUT_VERSION => return Err(ReadError::Later { version }),
            1.. => {}
            _ => return Err(damaged("there is no such layout_version")),
        }
        let (refused, message) = (at.text("refused")?, at.text("message")?);
        let time = |name: &str| -> Result<Option<i64>, ReadError> {
            let times = self
                .time
                .read(&at.column(name)?.slice(row, 1))
                .map_err(|error| damaged(&error.to_string()))?;
            Ok(times.first().copied().flatten())
        };
        let fitted = match (time("first_at")?, time("last_at")?) {
            (None, None) => None,
            (Some(first_at), Some(last_at)) if first_at <= last_at => {
                let (rule, standing) = (at.rule()?, at.standing()?);
                let every = at.text("every")?.unwrap_or_default();
                Some(FittedValue { standing, rule, every, first_at, last_at })
            }
            _ => return Err(damaged("its first_at and last_at do not go together")),
        };
        if fitted.is_none() && status == "ok" {
            return Err(damaged("it is 'ok' but has no times"));
        }
        Ok(Some(FitValue { status, refused, message, fitted }))
    }
}

fn damaged(what: &str) -> ReadError {
    ReadError::Damaged { what: what.to_string() }
}

/// One row of a column whose types are those of the layout.
struct Row<'a> {
    fits: &'a StructArray,
    row: usize,
}

impl Row<'_> {
    fn column(&self, name: &str) -> Result<&ArrayRef, ReadError> {
        self.fits.column_by_name(name).ok_or_else(|| damaged(&format!("it has no '{name}'")))
    }

    fn number(&self, name: &str) -> Result<Option<f64>, ReadError> {
        let column: &Float64Array = self.column(name)?.as_primitive::<Float64Type>();
        Ok(column.is_valid(self.row).then(|| column.value(self.row)))
    }

    fn long(&self, name: &str) -> Result<Option<i64>, ReadError> {
        let column: &Int64Array = self.column(name)?.as_primitive::<Int64Type>();
        Ok(column.is_valid(self.row).then(|| column.value(self.row)))
    }

    fn short(&self, name: &str) -> Result<Option<i32>, ReadError> {
        let column: &Int32Array = self.column(name)?.as_primitive::<Int32Type>();
        Ok(column.is_valid(self.row).then(|| column.value(self.row)))
    }

    fn count(&self, name: &str) -> Result<usize, ReadError> {
        let value = match self.column(name)?.data_type() {
            DataType::Int32 => self.short(name)?.map(i64::from),
            _ => self.long(name)?,
        };
        let count = value.and_then(|value| usize::try_from(value).ok());
        count.ok_or_else(|| damaged(&format!("its '{name}' is no count")))
    }

    fn flag(&self, name: &str) -> Result<bool, ReadError> {
        let column: &BooleanArray = self.column(name)?.as_boolean();
        Ok(column.is_valid(self.row) && column.value(self.row))
    }

    fn text(&self, name: &str) -> Result<Option<String>, ReadError> {
        let column = self.column(name)?.as_string::<i32>();
        Ok(column.is_valid(self.row).then(|| column.value(self.row).to_string()))
    }

    /// The items of a list; none for NULL.
    fn list(&self, name: &str) -> Result<Option<ArrayRef>, ReadError> {
        let column = self.column(name)?.as_list::<i32>();
        Ok(column.is_valid(self.row).then(|| column.value(self.row)))
    }

    fn numbers(&self, name: &str) -> Result<Vec<f64>, ReadError> {
        Ok(self.list(name)?.map_or_else(Vec::new, |items| plain_numbers(&items)))
    }

    fn names(&self, name: &str) -> Result<Vec<String>, ReadError> {
        let items = self.list(name)?;
        Ok(items.map_or_else(Vec::new, |items| {
            items.as_string::<i32>().iter().map(|name| name.unwrap_or_default().to_string()).collect()
        }))
    }

    fn rule(&self) -> Result<GridRule, ReadError> {
        let short = |name: &str| -> Result<Option<u32>, ReadError> {
            Ok(self.short(name)?.and_then(|value| u32::try_from(value).ok()))
        };
        let step = match (self.long("step_units")?, short("step_months")?) {
            (Some(units), None) if units > 0 => Step::Every(units),
            (None, Some(months)) if months > 0 => Step::Months(months),
            _ => return Err(damaged("its grid has no step")),
        };
        Ok(GridRule { step, anchor_day: short("anchor_day")?, of_day: self.long("time_of_day")? })
    }

    fn structure(&self) -> Result<Structure, ReadError> {
        let word = self.text("trend")?.unwrap_or_default();
        let trend = Trend::ALL.iter().find(|(name, _)| *name == word).map(|(_, trend)| *trend);
        let seasons = self.list("seasons")?.map_or_else(Vec::new, |items| {
            let items = items.as_struct();
            let periods = items.column(0).as_primitive::<Float64Type>();
            let harmonics = items.column(1).as_primitive::<Int32Type>();
            let fixed = items.column(2).as_boolean();
            (0..items.len())
                .map(|at| Season {
                    period: periods.value(at),
                    harmonics: harmonics
                        .is_valid(at)
                        .then(|| usize::try_from(harmonics.value(at)).unwrap_or(1).max(1)),
                    fixed: fixed.value(at),
                })
                .collect()
        });
        let cycle = self.number("cycle_shortest")?.zip(self.number("cycle_longest")?);
        Ok(Structure {
            trend: trend.ok_or_else(|| damaged(&format!("there is no trend '{word}'")))?,
            seasons,
            cycle: cycle.map(|(shortest, longest)| Cycle { shortest, longest }),
            autoregression: self.count("autoregression")?,
            drivers: self.names("drivers")?.len(),
            drifting_drivers: self.names("drifting_drivers")?,
        })
    }

    fn transform(&self) -> Result<Transform, ReadError> {
        let word = self.text("transform")?.unwrap_or_default();
        match (word.as_str(), self.number("transform_power")?) {
            ("none", _) => Ok(Transform::None),
            ("log", _) => Ok(Transform::Log),
            ("log1p", _) => Ok(Transform::Log1p),
            ("box-cox", Some(power)) => Ok(Transform::BoxCox(power)),
            _ => Err(damaged(&format!("there is no transform '{word}'"))),
        }
    }

    fn parameters(&self) -> Result<Vec<Parameter>, ReadError> {
        let Some(items) = self.list("parameters")? else { return Ok(Vec::new()) };
        let items = items.as_struct();
        let names = items.column(0).as_string::<i32>();
        let (values, errors) = (plain_numbers(items.column(1)), plain_numbers(items.column(2)));
        let known = items.column(3).as_boolean();
        Ok((0..items.len())
            .map(|at| Parameter {
                name: names.value(at).to_string(),
                value: values[at],
                std_error: errors[at],
                known: known.value(at),
            })
            .collect())
    }

    fn standing(&self) -> Result<Standing, ReadError> {
        let plan = self.list("plan")?.map_or_else(Vec::new, |items| {
            let items = items.as_list::<i32>();
            (0..items.len()).map(|at| plain_numbers(&items.value(at))).collect()
        });
        let standing = Standing {
            structure: self.structure()?,
            drivers: self.names("drivers")?,
            transform: self.transform()?,
            power_estimated: self.flag("power_estimated")?,
            parameters: self.parameters()?,
            shift: self.number("shift")?.unwrap_or(f64::NAN),
            state: self.numbers("state")?,
            covariance: self.numbers("covariance")?,
            points: self.count("points")?,
            n: self.count("n")?,
            diffuse: self.count("diffuse")?,
            log_likelihood: self.number("log_likelihood")?.unwrap_or(f64::NAN),
            converged: self.flag("converged")?,
            evaluations: self.count("evaluations")?,
            plan,
        };
        match standing.contradiction() {
            None => Ok(standing),
            Some(what) => Err(damaged(what)),
        }
    }
}

/// Numbers with NaN for NULL.
fn plain_numbers(items: &ArrayRef) -> Vec<f64> {
    items.as_primitive::<Float64Type>().iter().map(|value| value.unwrap_or(f64::NAN)).collect()
}
