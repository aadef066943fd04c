//! Numeric columns of any type as `f64`, NULL as NaN.
//!
//! Warehouses keep quantities as integers, decimals, floats of three widths and, now and then, dictionaries
//! of these; promotion flags come as BOOLEAN. The models want one thing: `f64` with NaN where nothing is
//! known. Decimals are divided by their power of ten once, so up to 15 digits arrive exactly; infinite
//! values pass through, because saying that they are there is the model's business.

use arrow::array::{Array, ArrayRef, AsArray};
use arrow::compute::cast;
use arrow::datatypes::{DataType, Float64Type};
use arrow::error::ArrowError;

/// What an `observed` column may be; named in error messages.
pub(crate) const OBSERVED_TYPES: &str = "a numeric column (integer, decimal or floating point)";

/// What a driver column may be; named in error messages.
pub(crate) const DRIVER_TYPES: &str = "a numeric or boolean column";

/// True for types that [`to_f64`] reads as observations.
pub(crate) fn is_number(data_type: &DataType) -> bool {
    match data_type {
        DataType::Dictionary(_, value) => is_number(value),
        other => other.is_numeric(),
    }
}

/// True for types that [`to_f64`] reads as drivers: numbers, and flags as 0 and 1.
pub(crate) fn is_driver(data_type: &DataType) -> bool {
    match data_type {
        DataType::Dictionary(_, value) => is_driver(value),
        DataType::Boolean => true,
        other => is_number(other),
    }
}

/// The column as `f64`, NULL and NaN as NaN, TRUE as 1.
///
/// # Errors
/// Only for types that neither [`is_number`] nor [`is_driver`] accepts; these are refused when the query is
/// planned.
pub(crate) fn to_f64(column: &ArrayRef) -> Result<Vec<f64>, ArrowError> {
    let column = cast(column, &DataType::Float64)?;
    let values = column.as_primitive::<Float64Type>();
    Ok(match values.nulls() {
        None => values.values().to_vec(),
        Some(nulls) => values
            .values()
            .iter()
            .zip(nulls.iter())
            .map(|(&value, known)| if known { value } else { f64::NAN })
            .collect(),
    })
}

#[cfg(test)]
mod tests {
    use std::sync::Arc;

    use arrow::array::{
        BooleanArray, Decimal128Array, DictionaryArray, Float32Array, Float64Array, Int8Array, UInt64Array,
    };

    use super::*;

    fn numbers(column: impl Array + 'static) -> Vec<f64> {
        let column: ArrayRef = Arc::new(column);
        assert!(is_driver(column.data_type()));
        to_f64(&column).unwrap()
    }

    #[test]
    fn decimals_arrive_exactly() {
        let cents =
            Decimal128Array::from(vec![Some(1999), None, Some(-5)]).with_precision_and_scale(12, 2).unwrap();
        let values = numbers(cents);
        assert_eq!((values[0], values[2]), (19.99, -0.05));
        assert!(values[1].is_nan());
    }

    #[test]
    fn every_width_of_number_is_read() {
        assert_eq!(numbers(Int8Array::from(vec![-3, 4])), [-3.0, 4.0]);
        assert_eq!(numbers(UInt64Array::from(vec![1 << 53])), [9_007_199_254_740_992.0]);
        assert_eq!(numbers(Float32Array::from(vec![0.5])), [0.5]);
    }

    #[test]
    fn null_and_nan_are_missing_and_infinity_is_kept() {
        let values = numbers(Float64Array::from(vec![None, Some(f64::NAN), Some(f64::NEG_INFINITY)]));
        assert!(values[0].is_nan() && values[1].is_nan());
        assert_eq!(values[2], f64::NEG_INFINITY);
    }

    #[test]
    fn flags_are_zero_and_one_but_no_observations() {
        assert_eq!(numbers(BooleanArray::from(vec![true, false])), [1.0, 0.0]);
        assert!(!is_number(&DataType::Boolean));
    }

    #[test]
    fn dictionaries_of_numbers_are_unpacked() {
        let values: ArrayRef = Arc::new(Float64Array::from(vec![1.5, 2.5]));
        let keys = Int8Array::from(vec![Some(1), None, Some(0)]);
        let values = numbers(DictionaryArray::new(keys, values));
        assert_eq!((values[0], values[2]), (2.5, 1.5));
        assert!(values[1].is_nan());
    }

    #[test]
    fn text_is_not_a_number() {
        assert!(!is_driver(&DataType::Utf8));
    }
}
