//! A small dairy, sessions over it, and readers of results.

use std::sync::Arc;

use arrow::array::{ArrayRef, AsArray, BooleanArray, Date32Array, Float64Array, RecordBatch, StringArray};
use arrow::compute::{concat_batches, take_record_batch};
use arrow::datatypes::{Float64Type, Int64Type};
use arrow::util::pretty::pretty_format_batches;
use datafusion::datasource::MemTable;
use datafusion::error::Result;
use datafusion::prelude::{SessionConfig, SessionContext};

/// Monday, 4 January 2021.
pub(crate) const FIRST_WEEK: i32 = 18_631;

/// A generator of equally distributed numbers in [-0.5, 0.5): Numerical Recipes' linear congruential one.
pub(crate) struct Noise(pub(crate) u32);

impl Noise {
    pub(crate) fn next(&mut self) -> f64 {
        self.0 = self.0.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
        f64::from(self.0) / f64::from(u32::MAX) - 0.5
    }
}

/// Sales of 2 regions and 3 products over `weeks` weeks: level, a season of 4 steps, a price effect, noise.
pub(crate) fn sales(weeks: usize) -> RecordBatch {
    let (mut region, mut product, mut week) = (Vec::new(), Vec::new(), Vec::new());
    let (mut units, mut price, mut promo) = (Vec::new(), Vec::new(), Vec::new());
    let mut noise = Noise(17);
    for r in ["North", "South"] {
        for p in ["Butter", "Curd", "Oat drink"] {
            let mut level = 100.0;
            for w in 0..weeks {
                level += noise.next();
                let cost = 2.0 + 0.5 * noise.next();
                let season = [6.0, -2.0, -8.0, 4.0][w % 4];
                region.push(r);
                product.push(p);
                week.push(FIRST_WEEK + 7 * w as i32);
                units.push(level + season - 10.0 * cost + 4.0 * noise.next());
                price.push(cost);
                promo.push(w % 11 == 3);
            }
        }
    }
    let note = vec!["a remark that nobody reads"; region.len()];
    let columns: [(&str, ArrayRef); 7] = [
        ("region", Arc::new(StringArray::from(region))),
        ("product", Arc::new(StringArray::from(product))),
        ("week", Arc::new(Date32Array::from(week))),
        ("units", Arc::new(Float64Array::from(units))),
        ("price", Arc::new(Float64Array::from(price))),
        ("promo", Arc::new(BooleanArray::from(promo))),
        ("note", Arc::new(StringArray::from(note))),
    ];
    RecordBatch::try_from_iter(columns).unwrap()
}

/// A session with the functions and this table `sales`, in one partition.
pub(crate) fn session_over(table: RecordBatch, config: SessionConfig) -> SessionContext {
    let context = SessionContext::new_with_config(config);
    stillwell::register(&context).unwrap();
    add_table(&context, "sales", vec![vec![table]]);
    context
}

pub(crate) fn add_table(context: &SessionContext, name: &str, partitions: Vec<Vec<RecordBatch>>) {
    let schema = partitions[0][0].schema();
    context.register_table(name, Arc::new(MemTable::try_new(schema, partitions).unwrap())).unwrap();
}

/// A session with 60 weeks of sales.
pub(crate) fn session() -> SessionContext {
    session_over(sales(60), SessionConfig::new().with_target_partitions(2))
}

pub(crate) async fn query(context: &SessionContext, sql: &str) -> Result<RecordBatch> {
    let frame = context.sql(sql).await?;
    let schema = Arc::new(frame.schema().as_arrow().clone());
    let batches = frame.collect().await?;
    let schema = batches.first().map_or(schema, |batch| batch.schema());
    Ok(concat_batches(&schema, &batches)?)
}

pub(crate) async fn rows(context: &SessionContext, sql: &str) -> RecordBatch {
    query(context, sql).await.unwrap_or_else(|error| panic!("{sql}\n{error}"))
}

/// The message of the error that a query must meet.
pub(crate) async fn error(context: &SessionContext, sql: &str) -> String {
    match query(context, sql).await {
        Ok(batch) => panic!("{sql}\nshould fail, but gives {} rows", batch.num_rows()),
        Err(error) => error.strip_backtrace().to_string(),
    }
}

pub(crate) async fn explain(context: &SessionContext, sql: &str) -> String {
    let batch = rows(context, &format!("EXPLAIN {sql}")).await;
    pretty_format_batches(&[batch]).unwrap().to_string()
}

pub(crate) fn numbers(batch: &RecordBatch, name: &str) -> Vec<Option<f64>> {
    column(batch, name).as_primitive::<Float64Type>().iter().collect()
}

pub(crate) fn counts(batch: &RecordBatch, name: &str) -> Vec<Option<i64>> {
    column(batch, name).as_primitive::<Int64Type>().iter().collect()
}

pub(crate) fn texts(batch: &RecordBatch, name: &str) -> Vec<Option<String>> {
    let column = arrow::compute::cast(column(batch, name), &arrow::datatypes::DataType::Utf8).unwrap();
    column.as_string::<i32>().iter().map(|text| text.map(str::to_string)).collect()
}

pub(crate) fn column<'a>(batch: &'a RecordBatch, name: &str) -> &'a ArrayRef {
    batch.column_by_name(name).unwrap_or_else(|| panic!("no column {name} in {}", batch.schema()))
}

/// Every bit of every value, so that two results can be compared without tolerance.
pub(crate) fn bits(batch: &RecordBatch) -> Vec<String> {
    let mut lines = Vec::new();
    for (field, array) in batch.schema().fields().iter().zip(batch.columns()) {
        let values = match array.as_primitive_opt::<Float64Type>() {
            Some(floats) => floats.iter().map(|v| v.map(|v| format!("{:x}", v.to_bits()))).collect(),
            None => texts(batch, field.name()),
        };
        lines.push(format!("{}: {values:?}", field.name()));
    }
    lines
}

/// The rows in an order that has nothing to do with the old one.
pub(crate) fn shuffled(batch: &RecordBatch, seed: u32) -> RecordBatch {
    let mut noise = Noise(seed);
    let mut order = (0..batch.num_rows() as u32).map(|at| (noise.next(), at)).collect::<Vec<_>>();
    order.sort_by(|a, b| a.0.total_cmp(&b.0));
    let order = arrow::array::UInt32Array::from(order.into_iter().map(|(_, at)| at).collect::<Vec<_>>());
    take_record_batch(batch, &order).unwrap()
}
