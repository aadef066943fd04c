//! What a result table looks like: its columns, their types, their units.
//!
//! One list of [`ColumnSpec`] per relation function is the single source for the Arrow schema, for the
//! rows that are written ([`ResultRows`]) and for the reference documentation. Columns never depend on the
//! data: only on the function, on the names of the drivers and on `parts`.

mod rows;
mod units;

use std::collections::HashMap;
use std::sync::Arc;

use arrow::datatypes::{DataType, Field, FieldRef, Schema, SchemaRef};

pub(crate) use rows::ResultRows;
pub use units::{Scale, Unit};

/// What a column holds. All types are flat.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum ColumnKind {
    /// A time, in the type of the `at` column of the input.
    Time,
    /// A Float64; NULL where there is nothing to say.
    Number,
    /// An Int64.
    Count,
    /// A Utf8.
    Text,
    /// A Boolean.
    Flag,
}

/// When a column is there.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum ColumnScope {
    /// Always, once.
    Always,
    /// Once per driver, `<driver>` in the name standing for its name.
    EachDriver,
    /// Once per driver with a drifting coefficient.
    EachDriftingDriver,
    /// Once per state of a system given as matrices, `<n>` in the name standing for its number.
    EachState,
    /// Once per disturbance of such a system.
    EachDisturbance,
}

/// One column of a result.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct ColumnSpec {
    /// Name; may contain `<driver>`.
    pub name: &'static str,
    /// Type.
    pub kind: ColumnKind,
    /// Unit, also written into the metadata of the Arrow field under the key `unit`.
    pub unit: Unit,
    /// When it is there.
    pub scope: ColumnScope,
    /// True for the columns of `forecast` that come with `parts => true`.
    pub part: bool,
    /// What it says, one sentence.
    pub description: &'static str,
}

impl ColumnSpec {
    const fn new(name: &'static str, kind: ColumnKind, unit: Unit, description: &'static str) -> Self {
        Self { name, kind, unit, scope: ColumnScope::Always, part: false, description }
    }

    pub(crate) const fn time(name: &'static str, description: &'static str) -> Self {
        Self::new(name, ColumnKind::Time, Unit::Time, description)
    }

    pub(crate) const fn number(name: &'static str, unit: Unit, description: &'static str) -> Self {
        Self::new(name, ColumnKind::Number, unit, description)
    }

    pub(crate) const fn count(name: &'static str, unit: Unit, description: &'static str) -> Self {
        Self::new(name, ColumnKind::Count, unit, description)
    }

    pub(crate) const fn text(name: &'static str, description: &'static str) -> Self {
        Self::new(name, ColumnKind::Text, Unit::Words, description)
    }

    pub(crate) const fn flag(name: &'static str, description: &'static str) -> Self {
        Self::new(name, ColumnKind::Flag, Unit::Words, description)
    }

    pub(crate) const fn each_driver(mut self) -> Self {
        self.scope = ColumnScope::EachDriver;
        self
    }

    pub(crate) const fn each_drifting_driver(mut self) -> Self {
        self.scope = ColumnScope::EachDriftingDriver;
        self
    }

    pub(crate) const fn each_state(mut self) -> Self {
        self.scope = ColumnScope::EachState;
        self
    }

    pub(crate) const fn each_disturbance(mut self) -> Self {
        self.scope = ColumnScope::EachDisturbance;
        self
    }

    pub(crate) const fn part(mut self) -> Self {
        self.part = true;
        self
    }
}

/// What the columns of one call depend on.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct Layout {
    /// Type of the time column.
    pub(crate) time: DataType,
    /// Names of the drivers with constant coefficients.
    pub(crate) drivers: Vec<String>,
    /// Names of the drivers with drifting coefficients.
    pub(crate) drifting_drivers: Vec<String>,
    /// Scale of the model, as far as the request settles it.
    pub(crate) scale: Scale,
    /// The columns of the parts are wanted.
    pub(crate) parts: bool,
    /// States and disturbances of a system given as matrices.
    pub(crate) states: usize,
    /// See `states`.
    pub(crate) disturbances: usize,
}

impl Layout {
    /// The columns of a result after its key columns: field and kind.
    ///
    /// Neighbouring columns with the same scope stay together: all of the first driver, then the second.
    pub(crate) fn columns(&self, specs: &[ColumnSpec]) -> Vec<(FieldRef, ColumnKind)> {
        let wanted = specs.iter().filter(|spec| self.parts || !spec.part).copied().collect::<Vec<_>>();
        let mut columns = Vec::with_capacity(wanted.len());
        for run in wanted.chunk_by(|a, b| a.scope == b.scope) {
            match run.first().map_or(ColumnScope::Always, |spec| spec.scope) {
                ColumnScope::Always => columns.extend(run.iter().map(|spec| self.column(spec, spec.name))),
                ColumnScope::EachDriver => {
                    for driver in self.drivers.iter().chain(&self.drifting_drivers) {
                        columns.extend(
                            run.iter().map(|spec| self.column(spec, &with_driver(spec.name, driver))),
                        );
                    }
                }
                ColumnScope::EachState => self.numbered(run, self.states, &mut columns),
                ColumnScope::EachDisturbance => self.numbered(run, self.disturbances, &mut columns),
                ColumnScope::EachDriftingDriver => {
                    for driver in &self.drifting_drivers {
                        columns.extend(
                            run.iter().map(|spec| self.column(spec, &with_driver(spec.name, driver))),
                        );
                    }
                }
            }
        }
        columns
    }

    fn numbered(&self, run: &[ColumnSpec], count: usize, columns: &mut Vec<(FieldRef, ColumnKind)>) {
        for number in 1..=count {
            columns.extend(run.iter().map(|spec| self.column(spec, &with_number(spec.name, number))));
        }
    }

    fn column(&self, spec: &ColumnSpec, name: &str) -> (FieldRef, ColumnKind) {
        let data_type = match spec.kind {
            ColumnKind::Time => self.time.clone(),
            ColumnKind::Number => DataType::Float64,
            ColumnKind::Count => DataType::Int64,
            ColumnKind::Text => DataType::Utf8,
            ColumnKind::Flag => DataType::Boolean,
        };
        let field = Field::new(name, data_type, true);
        let field = match spec.unit.text(self.scale) {
            Some(unit) => field.with_metadata(HashMap::from([("unit".to_string(), unit.to_string())])),
            None => field,
        };
        (Arc::new(field), spec.kind)
    }
}

/// The schema of one result together with what each of its columns is.
#[derive(Debug)]
pub(crate) struct ResultSchema {
    schema: SchemaRef,
    kinds: Vec<ColumnKind>,
    position: HashMap<String, usize>,
}

impl ResultSchema {
    /// Key columns first, then `columns`.
    pub(crate) fn new(keys: Vec<FieldRef>, columns: Vec<(FieldRef, ColumnKind)>) -> Self {
        let kinds = columns.iter().map(|(_, kind)| *kind).collect();
        let position =
            columns.iter().enumerate().map(|(at, (field, _))| (field.name().clone(), at)).collect();
        let fields = keys.into_iter().chain(columns.into_iter().map(|(field, _)| field)).collect::<Vec<_>>();
        Self { schema: Arc::new(Schema::new(fields)), kinds, position }
    }

    /// The Arrow schema.
    pub(crate) fn schema(&self) -> &SchemaRef {
        &self.schema
    }
}

/// The name of a column of one state or disturbance.
pub(crate) fn with_number(name: &str, number: usize) -> String {
    name.replace("<n>", &number.to_string())
}

/// The name of a column of one driver.
pub(crate) fn with_driver(name: &str, driver: &str) -> String {
    name.replace("<driver>", driver)
}

#[cfg(test)]
mod tests;
