//! The rows of each group until it is complete, then its fit.

use std::sync::Arc;

use datafusion::arrow::array::{
    Array, ArrayRef, AsArray, BooleanArray, Float64Array, Int64Array, Int64Builder, ListArray, ListBuilder,
};
use datafusion::arrow::buffer::OffsetBuffer;
use datafusion::arrow::datatypes::{DataType, Field, FieldRef, Float64Type, Int64Type};
use datafusion::common::ScalarValue;
use datafusion::error::Result;
use datafusion::logical_expr::{Accumulator, EmitTo, GroupsAccumulator};
use stillwell_statespace::{Standing, Trouble, Workspace};

use super::structural_fit::NAME;
use crate::columns::fit_value::{FitBuilder, FitValue, FittedValue};
use crate::columns::groups::Group;
use crate::columns::series::{Placed, place};
use crate::sql::arguments::settings::Settings;
use crate::sql::error::{Caller, failed_series};
use crate::sql::fitting::{fitted_together, guarded, message};
use crate::sql::series_inputs::{SeriesInputs, SeriesRows};
use crate::sql::watch::Watch;

/// Groups that are fitted side by side.
const TOGETHER: usize = 64;

/// Columns of the state: times, observed values and each driver, as lists of equal lengths.
pub(super) fn state_fields(name: &str, drivers: usize) -> Vec<FieldRef> {
    let list = |what: String, item: DataType| {
        let item = Arc::new(Field::new_list_field(item, true));
        Arc::new(Field::new(format!("{name}[{what}]"), DataType::List(item), true))
    };
    let mut fields =
        vec![list("at".to_string(), DataType::Int64), list("observed".to_string(), DataType::Float64)];
    fields.extend((0..drivers).map(|driver| list(format!("driver {driver}"), DataType::Float64)));
    fields
}

/// The groups of one call.
#[derive(Debug)]
pub(super) struct FitGroups {
    inputs: SeriesInputs,
    settings: Settings,
    /// Rows that are the same in every column count once.
    distinct: bool,
    groups: Vec<SeriesRows>,
    workspace: Workspace,
    watch: Watch,
}

impl FitGroups {
    pub(super) fn new(inputs: SeriesInputs, settings: Settings, distinct: bool, watch: Watch) -> Self {
        Self { inputs, settings, distinct, groups: Vec::new(), workspace: Workspace::new(), watch }
    }

    /// Names of the drivers as the fit knows them: constant coefficients first.
    fn drivers(&self) -> impl Iterator<Item = &String> {
        self.settings.request.drivers.iter().chain(&self.settings.request.drifting_drivers)
    }

    fn grow(&mut self, total: usize) {
        let drivers = self.inputs.drivers.len();
        let empty = || SeriesRows { drivers: vec![Vec::new(); drivers], ..SeriesRows::default() };
        self.groups.resize_with(total.max(self.groups.len()), empty);
    }

    fn add(&mut self, group: usize, time: Option<i64>, observed: f64, drivers: impl Iterator<Item = f64>) {
        if let Some(rows) = self.groups.get_mut(group) {
            rows.times.push(time);
            rows.observed.push(observed);
            rows.drivers.iter_mut().zip(drivers).for_each(|(all, new)| all.push(new));
        }
    }

    /// The fits of groups, in their order; `None` where a group has no rows.
    fn fit(&mut self, groups: Vec<SeriesRows>) -> Result<Vec<Option<FitValue>>> {
        let mut fits = Vec::with_capacity(groups.len());
        let mut groups = groups.into_iter();
        loop {
            let together = groups.by_ref().take(TOGETHER).collect::<Vec<_>>();
            if together.is_empty() {
                return Ok(fits);
            }
            self.fit_together(&together, &mut fits)?;
        }
    }

    fn fit_together(&mut self, rows: &[SeriesRows], fits: &mut Vec<Option<FitValue>>) -> Result<()> {
        let settings = self.settings.clone();
        let mut groups = Vec::with_capacity(rows.len());
        for rows in rows {
            let (Some(group), _) = rows.sorted(self.distinct)? else {
                groups.push(None);
                continue;
            };
            let placed = place(&group, &self.inputs.time, settings.every, settings.request.drivers.len());
            groups.push(Some((group, placed)));
        }
        let placed =
            groups.iter().flatten().filter_map(|(_, placed)| placed.as_ref().ok()).collect::<Vec<_>>();
        let mut solved = fitted_together(&placed, &settings, false, &mut self.workspace).into_iter();
        for group in &groups {
            fits.push(match group {
                None => None,
                Some((group, Err(unplaced))) => Some(self.trouble(group, None, &unplaced.trouble)?),
                Some((group, Ok(placed))) => {
                    let fit = solved.next().unwrap_or(Err(Trouble::AllMissing));
                    let standing = guarded(&mut self.workspace, |_| Ok(fit?.standing()));
                    Some(self.value(group, placed, standing)?)
                }
            });
        }
        Ok(())
    }

    /// The value of a group whose series has been fitted or not.
    fn value(&self, group: &Group, placed: &Placed, standing: Result<Standing, Trouble>) -> Result<FitValue> {
        let (standing, (first_at, last_at)) = match (standing, ends(placed)) {
            (Err(trouble), _) => return self.trouble(group, Some(placed), &trouble),
            (Ok(_), None) => return self.trouble(group, Some(placed), &Trouble::AllMissing),
            (Ok(standing), Some(ends)) => (standing, ends),
        };
        self.watch.record(NAME, group.len(), None, String::new);
        Ok(FitValue {
            status: "ok".to_string(),
            refused: None,
            message: None,
            fitted: Some(FittedValue {
                standing,
                rule: placed.grid().rule(),
                every: placed.grid().grid().describe(),
                first_at,
                last_at,
            }),
        })
    }

    fn trouble(&self, group: &Group, placed: Option<&Placed>, trouble: &Trouble) -> Result<FitValue> {
        let sentence = message(trouble, placed);
        if self.settings.fail {
            return Err(failed_series(
                Caller::Expression(NAME),
                &self.inputs.describe(group),
                trouble,
                &sentence,
            ));
        }
        let wrong = (trouble.status(), sentence.as_str());
        self.watch.record(NAME, group.len(), Some(wrong), || self.inputs.describe(group));
        Ok(FitValue {
            status: trouble.status().to_string(),
            refused: None,
            message: Some(sentence),
            fitted: None,
        })
    }

    fn take(&mut self, emit: EmitTo) -> Vec<SeriesRows> {
        emit.take_needed(&mut self.groups)
    }
}

/// Stored times of the first and the last observation.
fn ends(placed: &Placed) -> Option<(i64, i64)> {
    placed.time_at(0).zip(placed.len().checked_sub(1).and_then(|last| placed.time_at(last)))
}

impl GroupsAccumulator for FitGroups {
    fn update_batch(
        &mut self,
        values: &[ArrayRef],
        groups: &[usize],
        filter: Option<&BooleanArray>,
        total: usize,
    ) -> Result<()> {
        self.grow(total);
        let SeriesRows { times, observed, drivers } = self.inputs.read(values, self.drivers())?;
        for (row, &group) in groups.iter().enumerate() {
            if filter.is_none_or(|filter| filter.is_valid(row) && filter.value(row)) {
                self.add(group, times[row], observed[row], drivers.iter().map(|values| values[row]));
            }
        }
        Ok(())
    }

    fn evaluate(&mut self, emit: EmitTo) -> Result<ArrayRef> {
        let mut fits = FitBuilder::new(self.inputs.time.clone());
        let groups = self.take(emit);
        for fit in self.fit(groups)? {
            fits.push(fit);
        }
        Ok(fits.finish()?)
    }

    fn state(&mut self, emit: EmitTo) -> Result<Vec<ArrayRef>> {
        let groups = self.take(emit);
        let mut times = ListBuilder::new(Int64Builder::new());
        for group in &groups {
            times.append_value(group.times.iter().copied());
        }
        let lists = |of: &dyn Fn(&SeriesRows) -> Vec<f64>| -> Result<ArrayRef> {
            let columns = groups.iter().map(of).collect::<Vec<_>>();
            let offsets = OffsetBuffer::from_lengths(columns.iter().map(Vec::len));
            let values = Arc::new(Float64Array::from_iter_values(columns.into_iter().flatten()));
            let item = Arc::new(Field::new_list_field(DataType::Float64, true));
            Ok(Arc::new(ListArray::try_new(item, offsets, values, None)?))
        };
        let mut state: Vec<ArrayRef> =
            vec![Arc::new(times.finish()), lists(&|group| group.observed.clone())?];
        for driver in 0..self.inputs.drivers.len() {
            state.push(lists(&|group| group.drivers[driver].clone())?);
        }
        Ok(state)
    }

    fn merge_batch(&mut self, values: &[ArrayRef], groups: &[usize], total: usize) -> Result<()> {
        self.grow(total);
        let Some((times, numbers)) = values.split_first() else { return Ok(()) };
        let times = times.as_list::<i32>();
        for (row, &group) in groups.iter().enumerate() {
            if times.is_null(row) {
                continue;
            }
            let of_row = times.value(row);
            let of_row = of_row.as_primitive::<Int64Type>();
            let columns = numbers
                .iter()
                .map(|column| column.as_list::<i32>().value(row).as_primitive::<Float64Type>().clone())
                .collect::<Vec<_>>();
            let Some((observed, drivers)) = columns.split_first() else { continue };
            for at in 0..of_row.len() {
                let time = of_row.is_valid(at).then(|| of_row.value(at));
                self.add(group, time, observed.value(at), drivers.iter().map(|values| values.value(at)));
            }
        }
        Ok(())
    }

    fn convert_to_state(&self, values: &[ArrayRef], filter: Option<&BooleanArray>) -> Result<Vec<ArrayRef>> {
        let SeriesRows { times, observed, drivers } = self.inputs.read(values, self.drivers())?;
        let rows = times.len();
        let kept: Vec<bool> = (0..rows)
            .map(|row| filter.is_none_or(|filter| filter.is_valid(row) && filter.value(row)))
            .collect();
        let one_each = |values: ArrayRef| -> Result<ArrayRef> {
            let item = Arc::new(Field::new_list_field(values.data_type().clone(), true));
            let offsets = OffsetBuffer::from_lengths(kept.iter().map(|kept| usize::from(*kept)));
            Ok(Arc::new(ListArray::try_new(item, offsets, values, None)?))
        };
        let pick = |values: &[f64]| -> ArrayRef {
            let picked = values.iter().zip(&kept).filter(|(_, kept)| **kept).map(|(value, _)| *value);
            Arc::new(Float64Array::from_iter_values(picked))
        };
        let picked = times.iter().zip(&kept).filter(|(_, kept)| **kept).map(|(time, _)| *time);
        let mut state = vec![one_each(Arc::new(picked.collect::<Int64Array>()))?, one_each(pick(&observed))?];
        for values in &drivers {
            state.push(one_each(pick(values))?);
        }
        Ok(state)
    }

    fn size(&self) -> usize {
        size_of::<Self>() + self.groups.iter().map(SeriesRows::bytes).sum::<usize>()
    }
}

/// The same for a query without GROUP BY: one group.
#[derive(Debug)]
pub(super) struct FitAccumulator {
    groups: FitGroups,
}

impl FitAccumulator {
    pub(super) fn new(groups: FitGroups) -> Self {
        Self { groups }
    }
}

impl Accumulator for FitAccumulator {
    fn update_batch(&mut self, values: &[ArrayRef]) -> Result<()> {
        let rows = values.first().map_or(0, |column| column.len());
        self.groups.update_batch(values, &vec![0; rows], None, 1)
    }

    fn evaluate(&mut self) -> Result<ScalarValue> {
        self.groups.grow(1);
        // Asked again (by a window over a growing frame), the rows must still be there.
        let rows = self.groups.groups.first().cloned();
        let mut fits = FitBuilder::new(self.groups.inputs.time.clone());
        for fit in self.groups.fit(vec![rows.unwrap_or_default()])? {
            fits.push(fit);
        }
        ScalarValue::try_from_array(&fits.finish()?, 0)
    }

    fn state(&mut self) -> Result<Vec<ScalarValue>> {
        self.groups.grow(1);
        let state = GroupsAccumulator::state(&mut self.groups, EmitTo::All)?;
        state.iter().map(|column| ScalarValue::try_from_array(column, 0)).collect()
    }

    fn merge_batch(&mut self, states: &[ArrayRef]) -> Result<()> {
        let rows = states.first().map_or(0, |column| column.len());
        GroupsAccumulator::merge_batch(&mut self.groups, states, &vec![0; rows], 1)
    }

    fn size(&self) -> usize {
        GroupsAccumulator::size(&self.groups)
    }
}
