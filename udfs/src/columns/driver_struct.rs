//! Drivers that come in one struct, `{'price': price, 'promo': promo}`: what a function in an expression takes
//! where a call in FROM has a list of columns.
//!
//! The names of the fields are the names of the drivers. A row whose whole struct is NULL says nothing about any
//! of them.

use arrow::array::{Array, ArrayRef, AsArray};
use arrow::datatypes::DataType;
use arrow::error::ArrowError;

use super::numbers::{DRIVER_TYPES, is_driver, to_f64};

/// The names of the drivers; none for an untyped NULL.
///
/// # Errors
/// Another type than a struct of numbers and flags, or a name that comes twice, as text that continues
/// "argument 'drivers' …".
pub(crate) fn names(data_type: &DataType) -> Result<Vec<String>, String> {
    let fields = match data_type {
        DataType::Null => return Ok(Vec::new()),
        DataType::Struct(fields) => fields,
        other => {
            return Err(format!(
                "takes a struct of columns, {{'price': price, …}} or named_struct('price', price, …), but has type {other}"
            ));
        }
    };
    let mut names: Vec<String> = Vec::with_capacity(fields.len());
    for field in fields {
        if !is_driver(field.data_type()) {
            let (name, found) = (field.name(), field.data_type());
            return Err(format!("takes {DRIVER_TYPES} in each field, but '{name}' has type {found}"));
        }
        if names.contains(field.name()) {
            return Err(format!("names '{}' twice; a driver has one coefficient", field.name()));
        }
        names.push(field.name().clone());
    }
    Ok(names)
}

/// The values of the drivers of these names, in this order; NaN where nothing is known.
///
/// # Errors
/// A column that [`names`] refuses, or one without such a field.
pub(crate) fn values<'a>(
    column: &ArrayRef,
    names: impl IntoIterator<Item = &'a String>,
) -> Result<Vec<Vec<f64>>, ArrowError> {
    let mut names = names.into_iter().peekable();
    if names.peek().is_none() {
        return Ok(Vec::new());
    }
    let drivers = column.as_struct_opt().ok_or_else(|| {
        ArrowError::InvalidArgumentError(format!("drivers: expected a struct, got {}", column.data_type()))
    })?;
    names
        .map(|name| {
            let values = drivers.column_by_name(name).ok_or_else(|| {
                ArrowError::InvalidArgumentError(format!("drivers: there is no field '{name}'"))
            })?;
            let mut values = to_f64(values)?;
            if let Some(known) = drivers.nulls() {
                values
                    .iter_mut()
                    .zip(known)
                    .filter(|(_, known)| !known)
                    .for_each(|(value, _)| *value = f64::NAN);
            }
            Ok(values)
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use std::sync::Arc;

    use arrow::array::{BooleanArray, Int32Array, StringArray, StructArray};
    use arrow::buffer::NullBuffer;
    use arrow::datatypes::{Field, Fields};

    use super::*;

    fn fields(columns: &[(&str, DataType)]) -> Fields {
        columns.iter().map(|(name, data_type)| Field::new(*name, data_type.clone(), true)).collect()
    }

    fn drivers() -> ArrayRef {
        let fields = fields(&[("price", DataType::Int32), ("promo", DataType::Boolean)]);
        let price = Arc::new(Int32Array::from(vec![Some(2), None, Some(4)]));
        let promo = Arc::new(BooleanArray::from(vec![true, false, true]));
        let known = NullBuffer::from(vec![true, true, false]);
        Arc::new(StructArray::new(fields, vec![price, promo], Some(known)))
    }

    #[test]
    fn names_are_those_of_the_fields() {
        assert_eq!(names(drivers().data_type()).unwrap(), ["price", "promo"]);
        assert!(names(&DataType::Null).unwrap().is_empty());
    }

    #[test]
    fn values_come_in_the_order_asked_for_and_a_null_struct_says_nothing() {
        let values = values(&drivers(), &["promo".to_string(), "price".to_string()]).unwrap();
        assert_eq!((&values[0][..2], values[1][0]), ([1.0, 0.0].as_slice(), 2.0));
        assert!(values[1][1].is_nan(), "a NULL field");
        assert!(values[0][2].is_nan() && values[1][2].is_nan(), "a NULL struct");
    }

    #[test]
    fn other_types_are_refused_by_name() {
        assert!(names(&DataType::Float64).unwrap_err().contains("but has type Float64"));
        let text = DataType::Struct(fields(&[("note", DataType::Utf8)]));
        assert!(names(&text).unwrap_err().contains("'note' has type Utf8"));
        let twice = DataType::Struct(fields(&[("x", DataType::Int32), ("x", DataType::Int32)]));
        assert!(names(&twice).unwrap_err().contains("'x' twice"));
        let column: ArrayRef = Arc::new(StringArray::from(vec!["a"]));
        assert!(values(&column, &["price".to_string()]).is_err());
    }
}
