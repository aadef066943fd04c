//! The fit of one partition.

use std::sync::Arc;

use datafusion::arrow::array::{
    ArrayRef, RecordBatch, StringArray, StructArray, UInt64Array, new_empty_array,
};
use datafusion::arrow::compute::take;
use datafusion::arrow::datatypes::DataType;
use datafusion::error::Result;
use datafusion::logical_expr::PartitionEvaluator;
use stillwell_statespace::{Components, Trouble, Workspace};

use super::{Inputs, NAME};
use crate::columns::components_rows;
use crate::columns::groups::Group;
use crate::columns::result::ResultRows;
use crate::columns::series::{Placed, place};
use crate::sql::arguments::settings::Settings;
use crate::sql::error::{Caller, failed_series};
use crate::sql::fitting::{fitted, message};
use crate::sql::watch::Watch;

/// Fits the series of a partition.
#[derive(Debug)]
pub(super) struct Evaluator {
    inputs: Inputs,
    settings: Settings,
    watch: Watch,
}

/// The result before it is put into the order of the rows.
struct Answers {
    /// One row per point of the grid, or per row of a series in trouble.
    rows: RecordBatch,
    /// For each row of the partition its row in there.
    of_row: UInt64Array,
    status: &'static str,
}

impl Evaluator {
    pub(super) fn new(inputs: Inputs, settings: Settings, watch: Watch) -> Self {
        Self { inputs, settings, watch }
    }

    /// Names of the drivers as the fit knows them: constant coefficients first.
    fn drivers(&self) -> Vec<&String> {
        self.settings.request.drivers.iter().chain(&self.settings.request.drifting_drivers).collect()
    }

    /// Fits the series.
    fn answers(&self, group: &Group, order: &[usize]) -> Result<Answers> {
        let settings = &self.settings;
        let placed = place(group, &self.inputs.series.time, settings.every, settings.request.drivers.len());
        let solved = match &placed {
            Ok(placed) => {
                fitted(placed, settings, &mut Workspace::new(), |fit| fit.components(settings.coverage))
            }
            Err(unplaced) => Err(unplaced.trouble.clone()),
        };
        match (&placed, solved) {
            (Ok(placed), Ok(components)) => self.states(group, order, placed, &components),
            (Err(unplaced), Ok(_)) => self.trouble(group, order, None, &unplaced.trouble),
            (placed, Err(trouble)) => self.trouble(group, order, placed.as_ref().ok(), &trouble),
        }
    }

    fn states(
        &self,
        group: &Group,
        order: &[usize],
        placed: &Placed,
        components: &Components,
    ) -> Result<Answers> {
        self.watch.record(NAME, group.len(), None, String::new);
        let mut rows = self.rows();
        components_rows::write(&mut rows, &group.key, placed, components, &self.drivers());
        let points = group.times.iter().map(|time| time.and_then(|time| placed.index_of(time)));
        Ok(Answers { rows: rows.finish()?, of_row: in_row_order(order, points), status: "ok" })
    }

    fn trouble(
        &self,
        group: &Group,
        order: &[usize],
        placed: Option<&Placed>,
        trouble: &Trouble,
    ) -> Result<Answers> {
        if self.settings.fail {
            let caller = Caller::Expression(NAME);
            return Err(failed_series(
                caller,
                &self.inputs.series.describe(group),
                trouble,
                &message(trouble, placed),
            ));
        }
        let sentence = message(trouble, placed);
        let wrong = (trouble.status(), sentence.as_str());
        self.watch.record(NAME, group.len(), Some(wrong), || self.inputs.series.describe(group));
        let mut rows = self.rows();
        components_rows::write_trouble(&mut rows, group, trouble);
        let of_row = in_row_order(order, (0..group.len()).map(Some));
        Ok(Answers { rows: rows.finish()?, of_row, status: trouble.status() })
    }

    fn rows(&self) -> ResultRows {
        ResultRows::new(Arc::clone(&self.inputs.result), self.inputs.series.time.clone())
    }
}

/// For each row of the partition what `sorted` says at its place in the order of time.
fn in_row_order(order: &[usize], sorted: impl Iterator<Item = Option<usize>>) -> UInt64Array {
    let mut of_row = vec![None; order.len()];
    for (&row, point) in order.iter().zip(sorted) {
        if let Some(place) = of_row.get_mut(row) {
            *place = point.map(|point| point as u64);
        }
    }
    UInt64Array::from(of_row)
}

impl PartitionEvaluator for Evaluator {
    fn evaluate_all(&mut self, values: &[ArrayRef], num_rows: usize) -> Result<ArrayRef> {
        let fields = self.inputs.result.schema().fields();
        let (Some(group), order) = self.inputs.series.read(values, self.drivers())?.sorted(false)? else {
            return Ok(new_empty_array(&DataType::Struct(fields.clone())));
        };
        let Answers { rows, of_row, status } = self.answers(&group, &order)?;
        let columns = fields.iter().zip(rows.columns()).map(|(field, column)| {
            match (field.name().as_str(), values.first()) {
                // What is known of rows that the grid does not know.
                ("at", Some(at)) => Ok(Arc::clone(at)),
                ("status", _) => Ok(Arc::new(StringArray::from(vec![status; num_rows])) as ArrayRef),
                _ => Ok(take(column.as_ref(), &of_row, None)?),
            }
        });
        let columns = columns.collect::<Result<Vec<_>>>()?;
        Ok(Arc::new(StructArray::try_new(fields.clone(), columns, None)?))
    }

    fn supports_bounded_execution(&self) -> bool {
        false
    }

    fn uses_window_frame(&self) -> bool {
        false
    }
}
