//! The stream of one partition: rows in, chunks of series to blocking threads, results out in order.
//!
//! The optimizer does not repartition small inputs, so one partition must be able to use all cores: up to
//! `workers` chunks are in work at once. Dropping the stream stops the work after the series in hand.

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
use futures::stream::{BoxStream, StreamExt, TryStreamExt, try_unfold};

use super::error::bad_argument;
use super::function::Function;
use super::work::{Job, Workshop};
use crate::columns::groups::{Group, Groups, Rows};
use crate::columns::numbers::to_f64;

/// A chunk is handed on when it has this many series…
const CHUNK_SERIES: usize = 16;
/// …or this many rows. Small enough to keep all cores busy, large enough that handing over costs nothing.
const CHUNK_ROWS: usize = 4_096;

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

/// Reads series from the input.
struct Reader {
    input: SendableRecordBatchStream,
    positions: Positions,
    workshop: Arc<Workshop>,
    groups: Groups,
    ready: VecDeque<Group>,
    /// Memory of the rows that are read and not yet handed on.
    memory: MemoryReservation,
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

    fn full(&self) -> bool {
        self.ready.len() >= CHUNK_SERIES || self.ready.iter().map(Group::len).sum::<usize>() >= CHUNK_ROWS
    }

    /// Cuts a chunk off the front of the series that are ready.
    fn cut(&mut self) -> Result<Option<Chunk>> {
        let (mut groups, mut rows) = (Vec::new(), 0);
        while groups.len() < CHUNK_SERIES && rows < CHUNK_ROWS {
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
}

/// The results of one partition.
pub(crate) fn run(input: SendableRecordBatchStream, setup: Setup) -> SendableRecordBatchStream {
    let Setup { positions, groups, workshop, memory, workers, batch_size } = setup;
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
        finished: false,
    };
    let chunks = try_unfold(reader, |mut reader| async move {
        Ok(reader.next_chunk().await?.map(|chunk| (chunk, reader)))
    });
    let results =
        chunks.map_ok(move |chunk| hand_over(Arc::clone(&workshop), chunk)).try_buffered(workers.max(1));
    let batches = coalesce(results.boxed(), &schema, batch_size).map_ok(move |batch| {
        // Owned by the closure, hence dropped with the stream.
        let _: &CancelOnDrop = &cancel;
        batch.record_output(&baseline)
    });
    Box::pin(RecordBatchStreamAdapter::new(schema, batches))
}

/// Starts the work on a chunk; the future waits for its result.
fn hand_over(workshop: Arc<Workshop>, chunk: Chunk) -> impl Future<Output = Result<RecordBatch>> {
    let task = SpawnedTask::spawn_blocking(move || {
        let Chunk { groups, memory } = chunk;
        workshop.answer(&groups, &memory)
    });
    async move { task.join().await.map_err(|error| DataFusionError::ExecutionJoin(Box::new(error)))? }
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
