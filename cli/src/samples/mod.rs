//! The verb `samples`: writes the demo warehouse of the invented Ostrel Creameries.
//!
//! The demo is 4 regions, 12 products and 208 weeks with a [`story`], drawn by the [`generator`] from the
//! equations of a structural model, laid out by the [`writer`] as `sales/region=.../*.parquet`, with the truth
//! it was drawn from in `truth/` beside it and the jobs `weekly_outlook.sql`, `sunday_fits.sql` and `monday_outlook.sql` to run on it. With
//! [`SampleOptions::series`] it is instead a warehouse of that many series without a story or a truth, for
//! load tests. The same options give the same bytes.

mod error;
mod folder;
mod generator;
mod holidays;
mod story;
mod writer;

#[cfg(test)]
mod tests;

use std::fmt;
use std::fs;
use std::io::{self, Write};
use std::path::{Path, PathBuf};

pub(crate) use error::SampleError;
use folder::at;
use generator::{Drawn, Order, draw};
use story::{Character, Fate, PRODUCTS, REGIONS};
use writer::{PARAMETERS, SALES, STATES, Sheet};

/// Weeks of history unless told otherwise: four years.
pub(crate) const DEFAULT_WEEKS: usize = 208;
/// Seed unless told otherwise; the committed demo has it.
pub(crate) const DEFAULT_SEED: u64 = 1;
/// Weeks of plan after the history.
pub(crate) const PLAN_WEEKS: usize = 13;
/// Monday of the last week of history, days since 1970-01-01: 2025-12-22.
const LAST_MONDAY: i32 = 20_444;
/// Fewest weeks in which the story of the demo fits.
const LEAST_DEMO_WEEKS: usize = 52;
/// Most weeks: twenty years, beyond which a level that wanders freely leaves the range of believable sales.
const MOST_WEEKS: usize = 1_040;
/// Most series.
const MOST_SERIES: usize = 10_000_000;
/// In a warehouse without a story, one series of this many is listed but never sold.
const NEVER_SOLD_EVERY: usize = 1_000;

/// The main job, as it stands in the committed demo.
const JOBS: [(&str, &str); 3] = [
    ("weekly_outlook.sql", include_str!("../../../parquet-samples/weekly_outlook.sql")),
    ("sunday_fits.sql", include_str!("../../../parquet-samples/sunday_fits.sql")),
    ("monday_outlook.sql", include_str!("../../../parquet-samples/monday_outlook.sql")),
];
/// The description of the committed demo.
const README: &str = include_str!("../../../parquet-samples/README.md");
/// The folder that the jobs speak of.
const JOB_FOLDER: &str = "parquet-samples/";

/// What to write.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct SampleOptions {
    /// `None` = the demo with its story; a number = that many series (1 to 10,000,000) without one.
    pub(crate) series: Option<usize>,
    /// Weeks of history, 52 to 1,040 (1 to 1,040 with `series`), ending on 2025-12-22.
    pub(crate) weeks: usize,
    /// Seed of the random numbers.
    pub(crate) seed: u64,
}

impl Default for SampleOptions {
    fn default() -> Self {
        Self { series: None, weeks: DEFAULT_WEEKS, seed: DEFAULT_SEED }
    }
}

/// What was written. Its text is what the verb prints.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct SampleSummary {
    /// The folder.
    pub(crate) dir: PathBuf,
    /// Series in `sales/`.
    pub(crate) series: usize,
    /// Rows in `sales/`, planned weeks included.
    pub(crate) rows: u64,
    /// Parquet files, `truth/` included.
    pub(crate) files: usize,
    /// Their bytes.
    pub(crate) bytes: u64,
    /// First and last Monday of the history, ISO text.
    pub(crate) history: (String, String),
}

impl fmt::Display for SampleSummary {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        let dir = self.dir.display();
        writeln!(
            out,
            "{dir}: {} series, {} rows, weeks {} to {} and {PLAN_WEEKS} planned; {} files, {:.1} MB",
            self.series,
            self.rows,
            self.history.0,
            self.history.1,
            self.files,
            self.bytes as f64 / 1e6
        )?;
        write!(out, "next: stillwell run {}", self.dir.join("weekly_outlook.sql").display())
    }
}

/// Writes the warehouse into `dir`, which may be new, empty, or of an earlier run.
///
/// An earlier run's Parquet files are replaced; the jobs and `README.md` are written only where no
/// file of that name stands, so that edits stay. Every Parquet file appears whole or not at all.
///
/// # Errors
/// [`SampleError`]: options out of range, a folder that holds something else, or a failure to write.
pub(crate) fn write(dir: &Path, options: &SampleOptions) -> Result<SampleSummary, SampleError> {
    let least = if options.series.is_some() { 1 } else { LEAST_DEMO_WEEKS };
    if !(least..=MOST_WEEKS).contains(&options.weeks) {
        return Err(SampleError::Weeks { got: options.weeks, least, most: MOST_WEEKS });
    }
    match options.series {
        Some(got) if !(1..=MOST_SERIES).contains(&got) => {
            return Err(SampleError::Series { got, most: MOST_SERIES });
        }
        _ => {}
    }
    let catalogue = Catalogue::new(options);
    let sales: Vec<PathBuf> = REGIONS
        .iter()
        .take(catalogue.series())
        .map(|region| Path::new("sales").join(format!("region={}", region.name)).join("part-0.parquet"))
        .collect();
    let states = Path::new("truth").join("states.parquet");
    let parameters = Path::new("truth").join("parameters.parquet");
    let with_truth = options.series.is_none();
    let mut files = sales.clone();
    if with_truth {
        files.extend([states.clone(), parameters.clone()]);
    }
    folder::prepare(dir, &settings(options), &files)?;

    let mut truth = if with_truth {
        Some((Sheet::create(&dir.join(states), &STATES)?, Sheet::create(&dir.join(parameters), &PARAMETERS)?))
    } else {
        None
    };
    let (mut rows, mut bytes) = (0, 0);
    for (region, path) in sales.iter().enumerate() {
        let mut sheet = Sheet::create(&dir.join(path), &SALES)?;
        for index in (region..catalogue.series()).step_by(REGIONS.len()) {
            let (product, drawn) = catalogue.draw(index);
            sheet.sales(&product, &drawn)?;
            if let Some((states, parameters)) = &mut truth {
                states.states(REGIONS[region].name, &product, &drawn)?;
                parameters.parameters(REGIONS[region].name, &product, &drawn)?;
            }
        }
        let (sheet_rows, sheet_bytes) = sheet.finish()?;
        rows += sheet_rows;
        bytes += sheet_bytes;
    }
    if let Some((states, parameters)) = truth {
        bytes += states.finish()?.1 + parameters.finish()?.1;
    }
    for (name, job) in JOBS {
        write_if_absent(&dir.join(name), &job_for(job, dir))?;
    }
    if with_truth {
        write_if_absent(&dir.join("README.md"), README)?;
    }
    let first = LAST_MONDAY - 7 * (options.weeks as i32 - 1);
    Ok(SampleSummary {
        dir: dir.to_path_buf(),
        series: catalogue.series(),
        rows,
        files: files.len(),
        bytes,
        history: (holidays::iso(first), holidays::iso(LAST_MONDAY)),
    })
}

/// The options as a line of the folder's list.
fn settings(options: &SampleOptions) -> String {
    let what = match options.series {
        None => "the demo".to_owned(),
        Some(series) => format!("{series} series"),
    };
    format!("{what}, {} weeks, seed {}", options.weeks, options.seed)
}

/// The series of a warehouse by number; number `i` is in region `i mod 4`.
struct Catalogue<'a> {
    options: &'a SampleOptions,
}

impl<'a> Catalogue<'a> {
    fn new(options: &'a SampleOptions) -> Self {
        Self { options }
    }

    fn series(&self) -> usize {
        self.options.series.unwrap_or(REGIONS.len() * PRODUCTS.len())
    }

    /// Name of the product and the drawn series of this number.
    fn draw(&self, index: usize) -> (String, Drawn) {
        let region = &REGIONS[index % REGIONS.len()];
        let number = index / REGIONS.len();
        let product = &PRODUCTS[number % PRODUCTS.len()];
        let weeks = self.options.weeks;
        let (name, fate) = if self.options.series.is_some() {
            let never_sold = index % NEVER_SOLD_EVERY == NEVER_SOLD_EVERY - 1;
            (format!("OC-{number:07}"), Fate { never_sold, ..Fate::uneventful(weeks + PLAN_WEEKS) })
        } else {
            (product.name.to_owned(), Fate::of(region.name, product.name, weeks, PLAN_WEEKS))
        };
        let order = Order {
            character: Character {
                units: product.character.units * region.volume,
                list_price: product.character.list_price * region.price,
                ..product.character
            },
            fate,
            first_monday: LAST_MONDAY - 7 * (weeks as i32 - 1),
            weeks,
            plan: PLAN_WEEKS,
            seed: self.options.seed,
            stream: index as u64,
        };
        (name, draw(&order))
    }
}

/// A job, speaking of `dir`.
fn job_for(job: &str, dir: &Path) -> String {
    let place = dir.display().to_string().replace('\'', "''");
    job.replace(JOB_FOLDER, &format!("{}/", place.trim_end_matches('/')))
}

/// Writes a text unless a file of that name is there already.
fn write_if_absent(path: &Path, text: &str) -> Result<(), SampleError> {
    match fs::File::create_new(path) {
        Ok(mut file) => file.write_all(text.as_bytes()).map_err(at("write", path)),
        Err(error) if error.kind() == io::ErrorKind::AlreadyExists => Ok(()),
        Err(error) => Err(at("create", path)(error)),
    }
}
