//! Arguments that are lists: times, observed values, and structs of lists of drivers.

use datafusion::arrow::array::{Array, ArrayRef, AsArray};
use datafusion::arrow::compute::cast;
use datafusion::arrow::datatypes::{DataType, Field};
use datafusion::error::Result;
use std::sync::Arc;

use crate::columns::numbers;
use crate::sql::error::{Caller, bad_argument};

/// The type of the items of a list; `None` for anything else.
pub(super) fn item_type(data_type: &DataType) -> Option<&DataType> {
    match data_type {
        DataType::List(item)
        | DataType::LargeList(item)
        | DataType::ListView(item)
        | DataType::LargeListView(item)
        | DataType::FixedSizeList(item, _) => Some(item.data_type()),
        _ => None,
    }
}

/// A column of lists of any kind as one of lists with 32-bit offsets.
fn plain_lists(column: &ArrayRef, item: &DataType) -> Result<ArrayRef> {
    let list = DataType::List(Arc::new(Field::new_list_field(item.clone(), true)));
    Ok(cast(column, &list)?)
}

/// The items of each row; `None` for NULL.
pub(super) fn items(column: &ArrayRef) -> Result<Vec<Option<ArrayRef>>> {
    let Some(item) = item_type(column.data_type()) else { return Ok(vec![None; column.len()]) };
    let lists = plain_lists(column, &item.clone())?;
    let lists = lists.as_list::<i32>();
    Ok((0..lists.len()).map(|row| lists.is_valid(row).then(|| lists.value(row))).collect())
}

/// Names of the drivers in a struct of lists of numbers; none for an untyped NULL.
///
/// # Errors
/// Another type.
pub(super) fn driver_names(function: &'static str, data_type: &DataType) -> Result<Vec<String>> {
    let wrong = |what: String| bad_argument(Caller::Expression(function), "drivers", what);
    let fields = match data_type {
        DataType::Null => return Ok(Vec::new()),
        DataType::Struct(fields) => fields,
        other => {
            return Err(wrong(format!(
                "takes a struct of lists, one value per step, such as {{'price': [1.9, 1.9, 1.8]}}, but has type {other}"
            )));
        }
    };
    for field in fields {
        let nothing = *field.data_type() == DataType::Null;
        let driver = |item: &DataType| *item == DataType::Null || numbers::is_driver(item);
        if !nothing && !item_type(field.data_type()).is_some_and(driver) {
            return Err(wrong(format!(
                "takes a list of numbers or flags in each field, but '{}' has type {}",
                field.name(),
                field.data_type()
            )));
        }
    }
    Ok(fields.iter().map(|field| field.name().clone()).collect())
}

/// The lists of one driver, row by row, NaN where nothing is known; empty where its list is NULL.
pub(super) fn driver_values(column: &ArrayRef, name: &str) -> Result<Option<Vec<Vec<f64>>>> {
    let Some(lists) = column.as_struct_opt().and_then(|drivers| drivers.column_by_name(name)) else {
        return Ok(None);
    };
    let read = |items: Option<ArrayRef>| match items {
        Some(items) if *items.data_type() == DataType::Null => Ok(vec![f64::NAN; items.len()]),
        Some(items) => Ok(numbers::to_f64(&items)?),
        None => Ok(Vec::new()),
    };
    items(lists)?.into_iter().map(read).collect::<Result<Vec<_>>>().map(Some)
}
