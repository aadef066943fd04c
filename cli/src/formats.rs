//! Rows in the formats of `query`: CSV, JSON, one JSON object per line, Parquet. Each is written batch by batch.
//!
//! The table for reading is in `table`.

use std::io::Write;
use std::path::Path;
use std::sync::Arc;

use arrow::array::RecordBatch;
use arrow::compute::cast;
use arrow::csv;
use arrow::datatypes::{Schema, SchemaRef};
use arrow::error::ArrowError;
use arrow::json::writer::{JsonArray, JsonFormat, LineDelimited, WriterBuilder};
use clap::ValueEnum;
use parquet::arrow::ArrowWriter;
use parquet::basic::{Compression, ZstdLevel};
use parquet::file::properties::WriterProperties;

use crate::copy_staging::plain_type;
use crate::exit::{Failure, Outcome};

/// How rows are written.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
pub(crate) enum Format {
    /// A table to read, its first rows
    Table,
    /// Comma-separated values with a line of names; NULL is empty
    Csv,
    /// One JSON array of objects
    Json,
    /// One JSON object per line
    Ndjson,
    /// A Parquet file
    Parquet,
}

impl Format {
    /// The format a file's ending asks for.
    pub(crate) fn of_ending(file: &Path) -> Option<Self> {
        match file.extension()?.to_str()?.to_ascii_lowercase().as_str() {
            "txt" => Some(Self::Table),
            "csv" => Some(Self::Csv),
            "json" => Some(Self::Json),
            "ndjson" | "jsonl" => Some(Self::Ndjson),
            "parquet" => Some(Self::Parquet),
            _ => None,
        }
    }
}

/// Writes batches to `W` in one format.
pub(crate) enum RowWriter<W: Write + Send> {
    Csv(Box<csv::Writer<W>>),
    Json(Box<arrow::json::Writer<W, JsonArray>>),
    Ndjson(Box<arrow::json::Writer<W, LineDelimited>>),
    Parquet(Box<ArrowWriter<W>>, SchemaRef),
}

impl<W: Write + Send> RowWriter<W> {
    /// A writer of rows with `schema`; `None` for the table, which is not written batch by batch.
    ///
    /// # Errors
    /// When the format has no place for a column's type.
    pub(crate) fn new(format: Format, sink: W, schema: &SchemaRef) -> Outcome<Option<Self>> {
        Ok(Some(match format {
            Format::Table => return Ok(None),
            Format::Csv => {
                if let Some(nested) = schema.fields().iter().find(|field| field.data_type().is_nested()) {
                    return Err(Failure::failed(format!(
                        "column '{}' is nested ({}), and CSV has no place for that: unnest it in the statement, or \
                         write ndjson or parquet",
                        nested.name(),
                        nested.data_type()
                    )));
                }
                let mut writer = csv::Writer::new(sink);
                // The names stand there even if no row follows.
                writer.write(&RecordBatch::new_empty(Arc::clone(schema))).map_err(|e| cannot_write(&e))?;
                Self::Csv(Box::new(writer))
            }
            Format::Json => Self::Json(Box::new(json(sink))),
            Format::Ndjson => Self::Ndjson(Box::new(json(sink))),
            Format::Parquet => {
                let schema = plain_schema(schema);
                let compression = ZstdLevel::try_new(3).map_or(Compression::SNAPPY, Compression::ZSTD);
                let properties = WriterProperties::builder().set_compression(compression).build();
                let writer = ArrowWriter::try_new(sink, Arc::clone(&schema), Some(properties))
                    .map_err(|error| cannot_write(&error))?;
                Self::Parquet(Box::new(writer), schema)
            }
        }))
    }

    /// Writes the rows of `batch`.
    ///
    /// # Errors
    /// When the sink refuses, or a value has no form in the format.
    pub(crate) fn write(&mut self, batch: &RecordBatch) -> Outcome<()> {
        match self {
            Self::Csv(writer) => writer.write(batch).map_err(|e| cannot_write(&e)),
            Self::Json(writer) => writer.write(batch).map_err(|e| cannot_write(&e)),
            Self::Ndjson(writer) => writer.write(batch).map_err(|e| cannot_write(&e)),
            Self::Parquet(writer, schema) => {
                let plain = plain_batch(batch, schema).map_err(|e| cannot_write(&e))?;
                writer.write(&plain).map_err(|e| cannot_write(&e))
            }
        }
    }

    /// Writes what stands at the end and hands the sink back.
    ///
    /// # Errors
    /// When the sink refuses.
    pub(crate) fn finish(self) -> Outcome<W> {
        let mut sink = match self {
            Self::Csv(writer) => (*writer).into_inner(),
            Self::Json(mut writer) => {
                writer.finish().map_err(|e| cannot_write(&e))?;
                (*writer).into_inner()
            }
            Self::Ndjson(mut writer) => {
                writer.finish().map_err(|e| cannot_write(&e))?;
                (*writer).into_inner()
            }
            Self::Parquet(writer, _) => writer.into_inner().map_err(|e| cannot_write(&e))?,
        };
        sink.flush().map_err(|e| cannot_write(&e))?;
        Ok(sink)
    }
}

/// NULLs are written, so that every object has the same names.
fn json<W: Write, F: JsonFormat>(sink: W) -> arrow::json::Writer<W, F> {
    WriterBuilder::new().with_explicit_nulls(true).build(sink)
}

fn plain_schema(schema: &SchemaRef) -> SchemaRef {
    let fields: Vec<_> = schema
        .fields()
        .iter()
        .map(|field| field.as_ref().clone().with_data_type(plain_type(field.data_type())))
        .collect();
    Arc::new(Schema::new_with_metadata(fields, schema.metadata().clone()))
}

fn plain_batch(batch: &RecordBatch, schema: &SchemaRef) -> Result<RecordBatch, ArrowError> {
    let columns = batch
        .columns()
        .iter()
        .zip(schema.fields())
        .map(|(column, field)| cast(column, field.data_type()))
        .collect::<Result<_, _>>()?;
    RecordBatch::try_new(Arc::clone(schema), columns)
}

fn cannot_write(error: &dyn std::error::Error) -> Failure {
    Failure::failed(format!("cannot write the rows: {error}"))
}

#[cfg(test)]
mod tests {
    use arrow::array::{ArrayRef, DictionaryArray, Float64Array, ListArray};
    use arrow::datatypes::{DataType, Float64Type, Int32Type};

    use super::*;

    fn batch() -> RecordBatch {
        let product: DictionaryArray<Int32Type> = vec!["Butter", "Quark"].into_iter().collect();
        let litres = Float64Array::from(vec![Some(1.5), None]);
        RecordBatch::try_from_iter([
            ("product", Arc::new(product) as ArrayRef),
            ("litres", Arc::new(litres) as ArrayRef),
        ])
        .expect("a batch")
    }

    fn written(format: Format, batches: &[RecordBatch]) -> Vec<u8> {
        let mut writer =
            RowWriter::new(format, Vec::new(), &batch().schema()).expect("opened").expect("streams");
        for batch in batches {
            writer.write(batch).expect("written");
        }
        writer.finish().expect("finished")
    }

    fn text(format: Format, batches: &[RecordBatch]) -> String {
        String::from_utf8(written(format, batches)).expect("UTF-8")
    }

    #[test]
    fn csv_has_names_and_empty_nulls() {
        assert_eq!(text(Format::Csv, &[batch()]), "product,litres\nButter,1.5\nQuark,\n");
        assert_eq!(text(Format::Csv, &[]), "product,litres\n");
    }

    #[test]
    fn json_objects_have_the_same_names_everywhere() {
        let rows = r#"{"product":"Butter","litres":1.5},{"product":"Quark","litres":null}"#;
        assert_eq!(text(Format::Json, &[batch()]), format!("[{rows}]"));
        assert_eq!(text(Format::Json, &[]), "[]");
        assert_eq!(text(Format::Ndjson, &[batch()]), rows.replace("},{", "}\n{") + "\n");
    }

    #[test]
    fn parquet_holds_plain_strings() {
        let mut file = tempfile::tempfile().expect("a file");
        file.write_all(&written(Format::Parquet, &[batch()])).expect("written");
        let reader =
            parquet::arrow::arrow_reader::ParquetRecordBatchReaderBuilder::try_new(file).expect("parquet");
        assert_eq!(*reader.schema().field(0).data_type(), DataType::Utf8);
        let read: Vec<_> = reader.build().expect("built").map(|b| b.expect("read")).collect();
        assert_eq!(read[0].num_rows(), 2);
    }

    #[test]
    fn csv_refuses_nested_columns_with_a_remedy() {
        let list = ListArray::from_iter_primitive::<Float64Type, _, _>([Some([Some(1.0)])]);
        let batch = RecordBatch::try_from_iter([("path", Arc::new(list) as ArrayRef)]).expect("a batch");
        let told = RowWriter::new(Format::Csv, Vec::new(), &batch.schema()).err().expect("refused").message;
        assert!(told.contains("'path' is nested") && told.contains("ndjson"), "{told}");
    }

    #[test]
    fn endings_tell_the_format() {
        assert_eq!(Format::of_ending(Path::new("a/b.JSONL")), Some(Format::Ndjson));
        assert_eq!(Format::of_ending(Path::new("a.b/c")), None);
    }
}
