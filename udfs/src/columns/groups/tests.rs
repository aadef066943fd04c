//! Boundaries, NULL keys, key types, disorder.

use arrow::array::{DictionaryArray, Int32Array, StringArray, StringViewArray, StructArray};
use arrow::datatypes::{Field, Int8Type};

use super::*;

fn rows(keys: Vec<ArrayRef>, times: &[i64]) -> Rows {
    Rows {
        keys,
        times: times.iter().map(|&t| Some(t)).collect(),
        observed: times.iter().map(|&t| t as f64).collect(),
        drivers: vec![times.iter().map(|&t| -(t as f64)).collect()],
    }
}

fn text(values: &[Option<&str>]) -> ArrayRef {
    Arc::new(StringArray::from(values.to_vec()))
}

fn collect(types: &[DataType], batches: Vec<Rows>) -> Result<Vec<Group>, ArrowError> {
    let mut groups = Groups::try_new(types)?;
    for batch in batches {
        groups.push(batch)?;
    }
    groups.close();
    Ok(std::iter::from_fn(|| groups.pop()).collect())
}

#[test]
fn a_group_spans_batches() {
    let batches = vec![
        rows(vec![text(&[Some("a"), Some("b")])], &[1, 1]),
        rows(vec![text(&[Some("b")])], &[2]),
        rows(vec![text(&[])], &[]),
        rows(vec![text(&[Some("b"), Some("c")])], &[3, 1]),
    ];
    let groups = collect(&[DataType::Utf8], batches).unwrap();
    let observed = groups.iter().map(|g| g.observed.clone()).collect::<Vec<_>>();
    assert_eq!(observed, [vec![1.0], vec![1.0, 2.0, 3.0], vec![1.0]]);
    assert_eq!(groups[1].drivers, [vec![-1.0, -2.0, -3.0]]);
    assert_eq!(groups[1].key.describe(&["depot".to_string()]), "depot=b");
}

#[test]
fn null_is_a_key_and_sorts_last() {
    let keys = vec![text(&[Some("a"), None, None]), text(&[None, Some("x"), None])];
    let groups = collect(&[DataType::Utf8, DataType::Utf8], vec![rows(keys, &[1, 1, 1])]).unwrap();
    let names = ["k".to_string(), "l".to_string()];
    let keys = groups.iter().map(|g| g.key.describe(&names)).collect::<Vec<_>>();
    assert_eq!(keys, ["k=a, l=NULL", "k=NULL, l=x", "k=NULL, l=NULL"]);
}

#[test]
fn without_a_key_all_rows_are_one_series() {
    let groups = collect(&[], vec![rows(vec![], &[1, 2]), rows(vec![], &[3])]).unwrap();
    assert_eq!(groups.len(), 1);
    assert_eq!(groups[0].len(), 3);
    assert_eq!(groups[0].key.describe(&[]), "");
    assert!(collect(&[], vec![rows(vec![], &[])]).unwrap().is_empty());
}

#[test]
fn dictionary_and_view_keys_with_changing_dictionaries_are_one_series() {
    let dictionary = |values: &[&str]| -> ArrayRef {
        Arc::new(values.iter().copied().collect::<DictionaryArray<Int8Type>>())
    };
    let view = |values: &[&str]| -> ArrayRef { Arc::new(StringViewArray::from(values.to_vec())) };
    let first = vec![dictionary(&["a", "b"]), view(&["x", "x"])];
    let second = vec![dictionary(&["b", "c"]), view(&["x", "a name of more than twelve bytes"])];
    let types = [first[0].data_type().clone(), DataType::Utf8View];
    let groups = collect(&types, vec![rows(first, &[1, 1]), rows(second, &[2, 1])]).unwrap();
    assert_eq!(groups.iter().map(Group::len).collect::<Vec<_>>(), [1, 2, 1]);

    let keys = groups.iter().map(|g| &g.key).collect::<Vec<_>>();
    let repeated = repeat_keys(&keys, &[2, 0, 1]).unwrap();
    assert_eq!(repeated[0].data_type(), &types[0], "the type of a key stays");
    let names = ["k".to_string(), "l".to_string()];
    let last = Key { columns: repeated.into(), row: 2 };
    assert_eq!(last.describe(&names), "k=c, l=a name of more than twelve bytes");
}

#[test]
fn a_struct_can_be_a_key() {
    let field = Arc::new(Field::new("id", DataType::Int32, true));
    let ids: ArrayRef = Arc::new(Int32Array::from(vec![1, 1, 2]));
    let key: ArrayRef = Arc::new(StructArray::from(vec![(field, ids)]));
    let types = [key.data_type().clone()];
    let groups = collect(&types, vec![rows(vec![key], &[1, 2, 1])]).unwrap();
    assert_eq!(groups.iter().map(Group::len).collect::<Vec<_>>(), [2, 1]);
}

#[test]
fn rows_out_of_order_are_refused() {
    let keys = collect(&[DataType::Utf8], vec![rows(vec![text(&[Some("b"), Some("a")])], &[1, 1])]);
    assert!(keys.unwrap_err().to_string().contains("keys go back"));
    let across = vec![rows(vec![text(&[Some("a")])], &[5]), rows(vec![text(&[Some("a")])], &[4])];
    assert!(collect(&[DataType::Utf8], across).unwrap_err().to_string().contains("times go back"));
    let mut nulls_first = rows(vec![text(&[Some("a"), Some("a")])], &[1, 2]);
    nulls_first.times[0] = None;
    assert!(collect(&[DataType::Utf8], vec![nulls_first]).is_err());
}
