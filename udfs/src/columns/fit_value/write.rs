//! Fits to a struct array.

use std::sync::Arc;

use arrow::array::{
    ArrayRef, BooleanArray, Float64Array, Float64Builder, Int32Array, Int64Array, ListArray, ListBuilder,
    StringArray, StringBuilder, StructArray,
};
use arrow::buffer::{NullBuffer, OffsetBuffer};
use arrow::datatypes::{DataType, Field, Fields};
use arrow::error::ArrowError;
use stillwell_statespace::Parameter;
use stillwell_statespace::calendar::Step;
use stillwell_statespace::structure::Season;

use super::{FitValue, FittedValue, LAYOUT_VERSION, fit_fields, list_of, parameter_fields, season_fields};
use crate::columns::time::TimeKind;

/// Collects fits, one per row.
#[derive(Debug)]
pub(crate) struct FitBuilder {
    time: TimeKind,
    rows: Vec<Option<FitValue>>,
}

impl FitBuilder {
    /// Fits over times of this type.
    pub(crate) fn new(time: TimeKind) -> Self {
        Self { time, rows: Vec::new() }
    }

    /// Adds a row; `None` is a NULL.
    pub(crate) fn push(&mut self, fit: Option<FitValue>) {
        self.rows.push(fit);
    }

    /// The array.
    ///
    /// # Errors
    /// None that a value could cause; arrow's own signature.
    pub(crate) fn finish(self) -> Result<ArrayRef, ArrowError> {
        let fields = fit_fields(self.time.data_type());
        let columns =
            fields.iter().map(|field| self.column(field.name())).collect::<Result<Vec<_>, ArrowError>>()?;
        let valid = NullBuffer::from(self.rows.iter().map(Option::is_some).collect::<Vec<_>>());
        Ok(Arc::new(StructArray::try_new(fields, columns, Some(valid))?))
    }

    fn fits(&self) -> impl Iterator<Item = Option<&FitValue>> {
        self.rows.iter().map(Option::as_ref)
    }

    fn fitted(&self) -> impl Iterator<Item = Option<&FittedValue>> {
        self.fits().map(|fit| fit.and_then(|fit| fit.fitted.as_ref()))
    }

    fn numbers(&self, of: impl Fn(&FittedValue) -> Option<f64>) -> ArrayRef {
        Arc::new(self.fitted().map(|fit| fit.and_then(&of)).collect::<Float64Array>())
    }

    fn long(&self, of: impl Fn(&FittedValue) -> Option<i64>) -> ArrayRef {
        Arc::new(self.fitted().map(|fit| fit.and_then(&of)).collect::<Int64Array>())
    }

    fn short(&self, of: impl Fn(&FittedValue) -> Option<u64>) -> ArrayRef {
        let short = |value: u64| i32::try_from(value).ok();
        Arc::new(self.fitted().map(|fit| fit.and_then(&of).and_then(short)).collect::<Int32Array>())
    }

    fn flags(&self, of: impl Fn(&FittedValue) -> bool) -> ArrayRef {
        Arc::new(self.fitted().map(|fit| fit.map(&of)).collect::<BooleanArray>())
    }

    fn words<'a>(&'a self, of: impl Fn(&'a FittedValue) -> &'a str) -> ArrayRef {
        Arc::new(self.fitted().map(|fit| fit.map(&of)).collect::<StringArray>())
    }

    fn times(&self, of: impl Fn(&FittedValue) -> i64) -> Result<ArrayRef, ArrowError> {
        self.time.array(&self.fitted().map(|fit| fit.map(&of)).collect::<Vec<_>>())
    }

    fn lists<'a>(&'a self, of: impl Fn(&'a FittedValue) -> &'a [f64]) -> ArrayRef {
        let mut lists = ListBuilder::new(Float64Builder::new());
        for fit in self.fitted() {
            lists.append_option(fit.map(|fit| of(fit).iter().map(|v| Some(*v))));
        }
        Arc::new(lists.finish())
    }

    fn names<'a>(&'a self, of: impl Fn(&'a FittedValue) -> &'a [String]) -> ArrayRef {
        let mut lists = ListBuilder::new(StringBuilder::new());
        for fit in self.fitted() {
            lists.append_option(fit.map(|fit| of(fit).iter().map(Some)));
        }
        Arc::new(lists.finish())
    }

    fn plans(&self) -> Result<ArrayRef, ArrowError> {
        let mut inner = ListBuilder::new(Float64Builder::new());
        let none: &[Vec<f64>] = &[];
        let plans = || self.fitted().map(|fit| fit.map_or(none, |fit| fit.standing.plan.as_slice()));
        for column in plans().flatten() {
            inner.append_value(column.iter().map(|v| (!v.is_nan()).then_some(*v)));
        }
        let values = Arc::new(inner.finish());
        self.list(list_of(DataType::Float64), values, plans().map(<[_]>::len))
    }

    /// A list over `values` with these lengths; NULL where there is no fit.
    fn list(
        &self,
        item: DataType,
        values: ArrayRef,
        lengths: impl Iterator<Item = usize>,
    ) -> Result<ArrayRef, ArrowError> {
        let valid = NullBuffer::from(self.fitted().map(|fit| fit.is_some()).collect::<Vec<_>>());
        let item = Arc::new(Field::new_list_field(item, true));
        let offsets = OffsetBuffer::from_lengths(lengths);
        Ok(Arc::new(ListArray::try_new(item, offsets, values, Some(valid))?))
    }

    fn structs(
        &self,
        fields: Fields,
        columns: Vec<ArrayRef>,
        lengths: impl Iterator<Item = usize>,
    ) -> Result<ArrayRef, ArrowError> {
        let values = Arc::new(StructArray::try_new(fields.clone(), columns, None)?);
        self.list(DataType::Struct(fields), values, lengths)
    }

    fn seasons(&self) -> Result<ArrayRef, ArrowError> {
        let none: &[Season] = &[];
        let of =
            || self.fitted().map(|fit| fit.map_or(none, |fit| fit.standing.structure.seasons.as_slice()));
        let all = || of().flatten();
        let harmonics = |season: &Season| season.harmonics.and_then(|count| i32::try_from(count).ok());
        let columns: Vec<ArrayRef> = vec![
            Arc::new(all().map(|season| Some(season.period)).collect::<Float64Array>()),
            Arc::new(all().map(harmonics).collect::<Int32Array>()),
            Arc::new(all().map(|season| Some(season.fixed)).collect::<BooleanArray>()),
        ];
        self.structs(season_fields(), columns, of().map(<[_]>::len))
    }

    fn parameters(&self) -> Result<ArrayRef, ArrowError> {
        let none: &[Parameter] = &[];
        let of = || self.fitted().map(|fit| fit.map_or(none, |fit| fit.standing.parameters.as_slice()));
        let all = of().flatten().collect::<Vec<_>>();
        self.structs(parameter_fields(), parameter_columns(&all), of().map(<[_]>::len))
    }

    fn column(&self, name: &str) -> Result<ArrayRef, ArrowError> {
        let structure = |fit: &FittedValue| fit.standing.structure.clone();
        Ok(match name {
            "layout_version" => {
                Arc::new(self.fits().map(|fit| fit.map(|_| LAYOUT_VERSION)).collect::<Int32Array>())
            }
            "status" => {
                Arc::new(self.fits().map(|fit| fit.map(|fit| fit.status.as_str())).collect::<StringArray>())
            }
            "refused" => Arc::new(
                self.fits().map(|fit| fit.and_then(|fit| fit.refused.as_deref())).collect::<StringArray>(),
            ),
            "message" => Arc::new(
                self.fits().map(|fit| fit.and_then(|fit| fit.message.as_deref())).collect::<StringArray>(),
            ),
            "first_at" => self.times(|fit| fit.first_at)?,
            "last_at" => self.times(|fit| fit.last_at)?,
            "every" => self.words(|fit| &fit.every),
            "step_units" => self.long(|fit| match fit.rule.step {
                Step::Every(units) => Some(units),
                Step::Months(_) => None,
            }),
            "step_months" => self.short(|fit| match fit.rule.step {
                Step::Every(_) => None,
                Step::Months(months) => Some(u64::from(months)),
            }),
            "anchor_day" => self.short(|fit| fit.rule.anchor_day.map(u64::from)),
            "time_of_day" => self.long(|fit| fit.rule.of_day),
            "points" => self.long(|fit| i64::try_from(fit.standing.points).ok()),
            "n" => self.long(|fit| i64::try_from(fit.standing.n).ok()),
            "diffuse" => self.short(|fit| Some(fit.standing.diffuse as u64)),
            "trend" => self.words(|fit| fit.standing.structure.trend.name()),
            "seasons" => self.seasons()?,
            "cycle_shortest" => self.numbers(|fit| structure(fit).cycle.map(|cycle| cycle.shortest)),
            "cycle_longest" => self.numbers(|fit| structure(fit).cycle.map(|cycle| cycle.longest)),
            "autoregression" => self.short(|fit| Some(fit.standing.structure.autoregression as u64)),
            "drivers" => self.names(|fit| &fit.standing.drivers),
            "drifting_drivers" => self.names(|fit| &fit.standing.structure.drifting_drivers),
            "transform" => self.words(|fit| fit.standing.transform.name()),
            "transform_power" => self.numbers(|fit| fit.standing.transform.power()),
            "power_estimated" => self.flags(|fit| fit.standing.power_estimated),
            "parameters" => self.parameters()?,
            "shift" => self.numbers(|fit| Some(fit.standing.shift)),
            "state" => self.lists(|fit| &fit.standing.state),
            "covariance" => self.lists(|fit| &fit.standing.covariance),
            "plan" => self.plans()?,
            "log_likelihood" => self.numbers(|fit| Some(fit.standing.log_likelihood)),
            "converged" => self.flags(|fit| fit.standing.converged),
            "evaluations" => self.long(|fit| i64::try_from(fit.standing.evaluations).ok()),
            other => {
                return Err(ArrowError::SchemaError(format!("the layout of a fit has no field '{other}'")));
            }
        })
    }
}

/// The columns of [`parameter_fields`].
pub(crate) fn parameter_columns(all: &[&Parameter]) -> Vec<ArrayRef> {
    let number = |of: fn(&Parameter) -> f64| -> ArrayRef {
        Arc::new(all.iter().map(|p| Some(of(p)).filter(|v| !v.is_nan())).collect::<Float64Array>())
    };
    vec![
        Arc::new(all.iter().map(|p| Some(p.name.as_str())).collect::<StringArray>()),
        number(|p| p.value),
        number(|p| p.std_error),
        Arc::new(all.iter().map(|p| Some(p.known)).collect::<BooleanArray>()),
    ]
}
