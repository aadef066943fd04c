//! Lays drawn series out as Parquet.
//!
//! Rows are gathered in columns, handed to the Parquet writer every [`BATCH_ROWS`] rows and flushed as a row
//! group every [`GROUP_ROWS`], so that memory does not grow with the number of series. A file is written
//! under a name that readers pass over and takes its own name when it is whole.

use std::fs::{self, File};
use std::path::{Path, PathBuf};
use std::sync::Arc;

use arrow::array::{ArrayRef, Date32Builder, Float64Builder, RecordBatch, StringBuilder};
use arrow::datatypes::{DataType, Field, Schema, SchemaRef};
use arrow::error::ArrowError;
use parquet::arrow::ArrowWriter;
use parquet::basic::{Compression, Encoding, ZstdLevel};
use parquet::errors::ParquetError;
use parquet::file::metadata::SortingColumn;
use parquet::file::properties::WriterProperties;
use parquet::schema::types::ColumnPath;

use super::error::SampleError;
use super::folder::at;
use super::generator::Drawn;

/// Extension of a file that is not yet whole.
pub(super) const PART: &str = "part";
/// Rows gathered before they go to the Parquet writer.
const BATCH_ROWS: usize = 8_192;
/// Rows in a row group.
const GROUP_ROWS: usize = 131_072;

/// The columns of a file: texts, then `week` where rows are weeks, then numbers.
#[derive(Debug)]
pub(super) struct Layout {
    texts: &'static [&'static str],
    weekly: bool,
    numbers: &'static [&'static str],
    /// The number columns that may hold NULL.
    nullable: &'static [&'static str],
    /// Whether numbers are mostly different from row to row, so that a dictionary would not pay.
    continuous: bool,
    /// Whether the rows are written in the order of the texts and of `week`. The file then says so, and a job need not
    /// sort them again.
    sorted: bool,
}

/// The warehouse itself. The region is in the folder's name, not in the file.
pub(super) const SALES: Layout = Layout {
    texts: &["product"],
    weekly: true,
    numbers: &["units", "price", "promo", "holiday"],
    nullable: &["units"],
    continuous: false,
    sorted: true,
};

/// The true states, week by week.
pub(super) const STATES: Layout = Layout {
    texts: &["region", "product"],
    weekly: true,
    numbers: &[
        "units",
        "level",
        "slope",
        "season",
        "price_effect",
        "promo_effect",
        "holiday_effect",
        "event_effect",
        "irregular",
        "irregular_sd",
    ],
    nullable: &[],
    continuous: true,
    sorted: false,
};

/// The true parameters, one row a series.
pub(super) const PARAMETERS: Layout = Layout {
    texts: &["region", "product"],
    weekly: false,
    numbers: &[
        "level_sd",
        "slope_sd",
        "season_sd",
        "irregular_sd",
        "price_coefficient",
        "promo_coefficient",
        "holiday_coefficient",
        "average_price",
    ],
    nullable: &[],
    continuous: true,
    sorted: false,
};

impl Layout {
    fn schema(&self) -> SchemaRef {
        let texts = self.texts.iter().map(|name| Field::new(*name, DataType::Utf8, false));
        let week = self.weekly.then(|| Field::new("week", DataType::Date32, false));
        let numbers = self
            .numbers
            .iter()
            .map(|name| Field::new(*name, DataType::Float64, self.nullable.contains(name)));
        Arc::new(Schema::new(texts.chain(week).chain(numbers).collect::<Vec<_>>()))
    }

    fn properties(&self) -> WriterProperties {
        let mut properties = WriterProperties::builder()
            .set_compression(Compression::ZSTD(ZstdLevel::default()))
            .set_max_row_group_row_count(Some(GROUP_ROWS));
        if self.sorted {
            let columns = 0..self.texts.len() + usize::from(self.weekly);
            let ascending =
                |column| SortingColumn { column_idx: column as i32, descending: false, nulls_first: false };
            properties = properties.set_sorting_columns(Some(columns.map(ascending).collect()));
        }
        if self.continuous {
            for name in self.numbers {
                let path = ColumnPath::from(*name);
                properties = properties
                    .set_column_dictionary_enabled(path.clone(), false)
                    .set_column_encoding(path, Encoding::BYTE_STREAM_SPLIT);
            }
        }
        properties.build()
    }
}

/// One Parquet file being written.
pub(super) struct Sheet {
    path: PathBuf,
    part: PathBuf,
    schema: SchemaRef,
    writer: ArrowWriter<File>,
    texts: Vec<StringBuilder>,
    week: Option<Date32Builder>,
    numbers: Vec<Float64Builder>,
    gathered: usize,
    rows: u64,
}

impl Sheet {
    /// Opens the file `path`, and the folders it needs.
    pub(super) fn create(path: &Path, layout: &Layout) -> Result<Self, SampleError> {
        if let Some(folder) = path.parent() {
            fs::create_dir_all(folder).map_err(at("create", folder))?;
        }
        let part = path.with_extension(PART);
        let file = File::create(&part).map_err(at("create", &part))?;
        let schema = layout.schema();
        let writer = ArrowWriter::try_new(file, Arc::clone(&schema), Some(layout.properties()))
            .map_err(|source| SampleError::Parquet { path: path.to_path_buf(), source })?;
        Ok(Self {
            path: path.to_path_buf(),
            part,
            schema,
            writer,
            texts: layout.texts.iter().map(|_| StringBuilder::new()).collect(),
            week: layout.weekly.then(Date32Builder::new),
            numbers: layout.numbers.iter().map(|_| Float64Builder::new()).collect(),
            gathered: 0,
            rows: 0,
        })
    }

    /// Adds one row, values in the order of the layout; `week` is left out where rows are not weeks.
    fn row(&mut self, texts: &[&str], week: i32, numbers: &[Option<f64>]) -> Result<(), SampleError> {
        for (column, text) in self.texts.iter_mut().zip(texts) {
            column.append_value(text);
        }
        if let Some(column) = &mut self.week {
            column.append_value(week);
        }
        for (column, number) in self.numbers.iter_mut().zip(numbers) {
            column.append_option(*number);
        }
        self.gathered += 1;
        self.rows += 1;
        if self.gathered >= BATCH_ROWS { self.hand_over() } else { Ok(()) }
    }

    /// Passes the gathered rows on to the Parquet writer.
    fn hand_over(&mut self) -> Result<(), SampleError> {
        let mut columns: Vec<ArrayRef> = Vec::with_capacity(self.schema.fields().len());
        columns.extend(self.texts.iter_mut().map(|column| Arc::new(column.finish()) as ArrayRef));
        columns.extend(self.week.iter_mut().map(|column| Arc::new(column.finish()) as ArrayRef));
        columns.extend(self.numbers.iter_mut().map(|column| Arc::new(column.finish()) as ArrayRef));
        self.gathered = 0;
        RecordBatch::try_new(Arc::clone(&self.schema), columns)
            .map_err(|error: ArrowError| ParquetError::from(error))
            .and_then(|batch| self.writer.write(&batch))
            .map_err(|source| SampleError::Parquet { path: self.path.clone(), source })
    }

    /// The rows of a series that the warehouse has.
    pub(super) fn sales(&mut self, product: &str, drawn: &Drawn) -> Result<(), SampleError> {
        for week in drawn.weeks.iter().filter(|week| week.in_sales) {
            let numbers = [week.reported, Some(week.price), Some(week.promo), Some(week.holiday)];
            self.row(&[product], week.monday, &numbers)?;
        }
        Ok(())
    }

    /// The truth of a series, week by week; nothing for one that was never sold.
    pub(super) fn states(&mut self, region: &str, product: &str, drawn: &Drawn) -> Result<(), SampleError> {
        for week in drawn.weeks.iter().filter(|_| drawn.sold) {
            let numbers = [
                week.units,
                week.level,
                week.slope,
                week.season,
                week.price_effect,
                week.promo_effect,
                week.holiday_effect,
                week.event_effect,
                week.irregular,
                drawn.character.irregular_sd,
            ];
            self.row(&[region, product], week.monday, &numbers.map(Some))?;
        }
        Ok(())
    }

    /// The true parameters of a series; nothing for one that was never sold.
    pub(super) fn parameters(
        &mut self,
        region: &str,
        product: &str,
        drawn: &Drawn,
    ) -> Result<(), SampleError> {
        if !drawn.sold {
            return Ok(());
        }
        let numbers = [
            drawn.character.level_sd,
            drawn.character.slope_sd,
            drawn.character.season_sd,
            drawn.character.irregular_sd,
            drawn.price_coefficient,
            drawn.promo_coefficient,
            drawn.holiday_coefficient,
            drawn.average_price,
        ];
        self.row(&[region, product], 0, &numbers.map(Some))
    }

    /// Completes the file and gives it its name. Returns its rows and bytes.
    pub(super) fn finish(mut self) -> Result<(u64, u64), SampleError> {
        if self.gathered > 0 {
            self.hand_over()?;
        }
        self.writer.finish().map_err(|source| SampleError::Parquet { path: self.path.clone(), source })?;
        fs::rename(&self.part, &self.path).map_err(at("name", &self.path))?;
        let bytes = fs::metadata(&self.path).map_err(at("read", &self.path))?.len();
        Ok((self.rows, bytes))
    }
}

impl Drop for Sheet {
    /// Leaves no unfinished file behind; once the file has its own name there is none.
    fn drop(&mut self) {
        fs::remove_file(&self.part).ok();
    }
}
