//! The stream of one partition: rows in, chunks of series to blocking threads, results out in order.
//!
//! The optimizer does not repartition small inputs, so one partition must be able to use all cores: up to
//! `workers` chunks are in work at once. Dropping the stream stops the work after the batch in hand.
//! A host can have a lone worker work in place instead of on a blocking thread ([`InPlace`](super::in_place::InPlace)).

use std::collections::VecDeque;
use std::mem;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};

use datafusion::arrow::array::{Array, RecordBatch};
use datafusion::arrow::compute::BatchCoalescer;
use datafusion::arrow::datatypes::SchemaRef;
use datafusion::common::runtime::SpawnedTask;
use datafusion::error::{DataFusionError, Result};
use datafusion::execution::memory_pool::MemoryReservation;
use datafusion::physical_plan::SendableRecordBatchStream;
use datafusion::physical_plan::metrics::RecordOutput;
use datafusion::physical_plan::stream::RecordBatchStreamAdapter;
use futures::future::{Either, ready};
use futures::stream::{BoxStream, StreamExt, TryStreamExt, try_unfold};
use tokio::sync::Semaphore;

use super::error::bad_argument;
use super::function::Function;
use super::work::{Job, Workshop};
use crate::columns::groups::{Group, Groups, Rows};
use crate::columns::numbers::to_f64;

/// A chunk has at most this many series…
const CHUNK_SERIES: usize = 256;
/// …or this many rows, unless one series has more: enough that the core can advance several in lock step all the time.
const CHUNK_ROWS: usize = 65_536;
/// At the end of the input the rest is shared out among the workers, in chunks of at least so many series.
const LEAST_SERIES: usize = 8;

/// Positions of the columns in the input.
#[derive(Debug, Clone)]
pub(crate) struct Positions {
    pub(crate) keys: Vec<usize>,
    pub(crate) at: usize,
    pub(crate) observed: usize,
    /// Constant coefficients first.
    pub(crate) drivers: Vec<usize>,
}

impl Positions {
    /// The columns of a batch as vectors.
    fn read(&self, batch: &RecordBatch, job: &Job) -> Result<Rows> {
        let numbers = |at: &usize| Ok(to_f64(batch.column(*at))?);
        let times = job.time.read(batch.column(self.at));
        Ok(Rows {
            keys: self.keys.iter().map(|&at| Arc::clone(batch.column(at))).collect(),
            times: times.map_err(|error| bad_argument(job.function, "at", error.to_string()))?,
            observed: numbers(&self.observed)?,
            drivers: self.drivers.iter().map(numbers).collect::<Result<_>>()?,
        })
    }

    /// Bytes that the rows of a batch take once they are read.
    fn bytes(&self, batch: &RecordBatch) -> usize {
        let key = |&at: &usize| batch.column(at).to_data().get_slice_memory_size().unwrap_or(0);
        self.keys.iter().map(key).sum::<usize>() + batch.num_rows() * self.row_bytes()
    }

    fn row_bytes(&self) -> usize {
        mem::size_of::<Option<i64>>() + mem::size_of::<f64>() * (1 + self.drivers.len())
    }
}

/// Series that travel to a worker together, and the memory they hold until their result is there.
#[derive(Debug)]
struct Chunk {
    groups: Vec<Group>,
    memory: MemoryReservation,
}

impl Chunk {
    fn answer(self, workshop: &Workshop) -> Result<RecordBatch> {
        workshop.answer(&self.groups, &self.memory)
    }
}

/// Reads series from the input.
struct Reader {
    input: SendableRecordBatchStream,
    positions: Positions,
    workshop: Arc<Workshop>,
    groups: Groups,
    ready: VecDeque<Group>,
    /// Memory of the rows that are read and not yet handed on.
    memory: MemoryReservation,
    /// Chunks in work at once.
    workers: usize,
    finished: bool,
}

impl Reader {
    /// The next chunk of complete series; `None` at the end of the input.
    async fn next_chunk(&mut self) -> Result<Option<Chunk>> {
        while !self.finished && !self.full() {
            match self.input.try_next().await? {
                Some(batch) => {
                    self.workshop.announce();
                    let _time = self.workshop.metrics.baseline.elapsed_compute().timer();
                    self.memory.try_grow(self.positions.bytes(&batch))?;
                    self.groups.push(self.positions.read(&batch, &self.workshop.job)?)?;
                }
                None => {
                    self.groups.close();
                    self.finished = true;
                }
            }
            self.ready.extend(std::iter::from_fn(|| self.groups.pop()));
        }
        self.cut()
    }

    /// True when there is a full chunk for every worker, so that the last chunks can be shared out evenly.
    fn full(&self) -> bool {
        let rows = self.ready.iter().map(Group::len).sum::<usize>();
        self.ready.len() >= CHUNK_SERIES * self.workers
            || rows >= CHUNK_ROWS * self.workers
            || self.bytes(self.ready.len(), rows) >= self.workshop.room.rows * self.workers
    }

    /// Bytes of so many series with their result.
    fn bytes(&self, series: usize, rows: usize) -> usize {
        rows * self.positions.row_bytes() + self.result_bytes(series, rows)
    }

    /// Series of the next chunk, at most.
    fn chunk_series(&self) -> usize {
        match self.finished {
            true => self.ready.len().div_ceil(self.workers).clamp(LEAST_SERIES, CHUNK_SERIES),
            false => CHUNK_SERIES,
        }
    }

    /// Cuts a chunk off the front of the series that are ready.
    fn cut(&mut self) -> Result<Option<Chunk>> {
        let most = self.chunk_series();
        let (mut groups, mut rows) = (Vec::new(), 0);
        while groups.len() < most
            && rows < CHUNK_ROWS
            && self.bytes(groups.len(), rows) < self.workshop.room.rows
        {
            let Some(group) = self.ready.pop_front() else { break };
            rows += group.len();
            groups.push(group);
        }
        if groups.is_empty() {
            return Ok(None);
        }
        let all_rows = rows + self.ready.iter().map(Group::len).sum::<usize>() + self.groups.open_rows();
        // Keys are shared by the rows of a batch: the chunk takes its share of all bytes.
        let share = (self.memory.size() as u128 * rows as u128 / all_rows.max(1) as u128) as usize;
        let memory = self.memory.split(share.min(self.memory.size()));
        memory.try_grow(self.result_bytes(groups.len(), rows))?;
        Ok(Some(Chunk { groups, memory }))
    }

    /// Bytes of the result of a chunk, roughly: eight per value.
    fn result_bytes(&self, series: usize, rows: usize) -> usize {
        let job = &self.workshop.job;
        let result_rows = match job.function {
            Function::Components | Function::StateSpace => rows,
            Function::Forecast => series * job.settings.horizon,
            Function::Diagnostics => series,
        };
        result_rows * job.result.schema().fields().len() * mem::size_of::<f64>()
    }
}

/// Sets the flag that the workers look at when the stream goes away.
#[derive(Debug)]
struct CancelOnDrop(Arc<AtomicBool>);

impl Drop for CancelOnDrop {
    fn drop(&mut self) {
        self.0.store(true, Ordering::Relaxed);
    }
}

/// What the stream of one partition needs beside its input.
#[derive(Debug)]
pub(crate) struct Setup {
    pub(crate) positions: Positions,
    pub(crate) groups: Groups,
    pub(crate) workshop: Arc<Workshop>,
    pub(crate) memory: MemoryReservation,
    /// Chunks in work at once, at least 1.
    pub(crate) workers: usize,
    /// Rows of an output batch, at least 1.
    pub(crate) batch_size: usize,
    /// A worker that is alone works on the thread that asks for the rows.
    pub(crate) in_place: bool,
}

/// The results of one partition.
pub(crate) fn run(input: SendableRecordBatchStream, setup: Setup) -> SendableRecordBatchStream {
    let Setup { positions, groups, workshop, memory, workers, batch_size, in_place } = setup;
    let workers = workers.max(1);
    let schema = Arc::clone(workshop.job.result.schema());
    let cancel = CancelOnDrop(Arc::clone(&workshop.cancelled));
    let baseline = workshop.metrics.baseline.clone();
    let reader = Reader {
        input,
        positions,
        workshop: Arc::clone(&workshop),
        groups,
        ready: VecDeque::new(),
        memory,
        workers,
        finished: false,
    };
    let chunks = try_unfold(reader, |mut reader| async move {
        Ok(reader.next_chunk().await?.map(|chunk| (chunk, reader)))
    });
    // With several workers one chunk waits in line, so that none of them stands idle while rows are read.
    let in_line = if workers > 1 { workers + 1 } else { 1 };
    let places = Arc::new(Semaphore::new(workers));
    let results = chunks
        .map_ok(move |chunk| match in_place && workers == 1 {
            true => Either::Left(ready(chunk.answer(&workshop))),
            false => Either::Right(hand_over(Arc::clone(&workshop), chunk, Arc::clone(&places))),
        })
        .try_buffered(in_line);
    let batches = coalesce(results.boxed(), &schema, batch_size).map_ok(move |batch| {
        // Owned by the closure, hence dropped with the stream.
        let _: &CancelOnDrop = &cancel;
        batch.record_output(&baseline)
    });
    Box::pin(RecordBatchStreamAdapter::new(schema, batches))
}

/// Starts the work on a chunk as soon as one of the `places` is free; the future waits for its result.
fn hand_over(
    workshop: Arc<Workshop>,
    chunk: Chunk,
    places: Arc<Semaphore>,
) -> impl Future<Output = Result<RecordBatch>> {
    let joined = |error| DataFusionError::ExecutionJoin(Box::new(error));
    let task = SpawnedTask::spawn(async move {
        // It is never closed.
        let place = places.acquire_owned().await;
        let work = SpawnedTask::spawn_blocking(move || {
            let result = chunk.answer(&workshop);
            drop(place);
            result
        });
        work.join().await.map_err(joined)?
    });
    async move { task.join().await.map_err(joined)? }
}

/// Joins small batches to batches of about `batch_size` rows.
fn coalesce(
    batches: BoxStream<'static, Result<RecordBatch>>,
    schema: &SchemaRef,
    batch_size: usize,
) -> BoxStream<'static, Result<RecordBatch>> {
    let coalescer = BatchCoalescer::new(Arc::clone(schema), batch_size.max(1));
    try_unfold((batches, coalescer, false), |(mut batches, mut coalescer, mut finished)| async move {
        loop {
            if let Some(batch) = coalescer.next_completed_batch() {
                return Ok(Some((batch, (batches, coalescer, finished))));
            }
            if finished {
                return Ok(None);
            }
            match batches.try_next().await? {
                Some(batch) => coalescer.push_batch(batch)?,
                None => {
                    coalescer.finish_buffered_batch()?;
                    finished = true;
                }
            }
        }
    })
    .boxed()
}
