//! Cancellation, and what is counted.

use datafusion::arrow::datatypes::DataType;
use datafusion::execution::memory_pool::{MemoryConsumer, UnboundedMemoryPool};
use datafusion::physical_plan::empty::EmptyExec;
use datafusion::physical_plan::metrics::ExecutionPlanMetricsSet;

use super::super::arguments::settings::Values;
use super::*;
use crate::columns::groups::{Groups, Rows};
use crate::columns::result::{Layout, Scale};

fn workshop(function: Function) -> Workshop {
    let time = TimeKind::try_new(&DataType::Int64).unwrap();
    let settings = Values { caller: function.into(), given: &[] }.settings(time.axis(), &[], &[]).unwrap();
    let layout = Layout {
        time: DataType::Int64,
        drivers: vec![],
        drifting_drivers: vec![],
        scale: Scale::BySeries,
        parts: false,
        states: 0,
        disturbances: 0,
    };
    let result = Arc::new(ResultSchema::new(vec![], layout.columns(function.columns())));
    let input = Arc::new(EmptyExec::new(Arc::clone(result.schema())));
    let job = Job { function, settings, time, key_names: vec![], result };
    Workshop {
        job: Arc::new(job),
        metrics: StructuralMetrics::new(&ExecutionPlanMetricsSet::new(), 0),
        progress: None,
        cancelled: Arc::default(),
        announcement: Announcement { input, done: Arc::default() },
        room: Room { rows: usize::MAX, fits: usize::MAX },
        spare: Mutex::default(),
    }
}

fn group() -> Group {
    let mut groups = Groups::try_new(&[]).unwrap();
    let times = (0..40).map(Some).collect::<Vec<_>>();
    let observed = (0..40).map(|at| f64::from(at * 7 % 11)).collect();
    groups.push(Rows { keys: vec![], times, observed, drivers: vec![] }).unwrap();
    groups.close();
    groups.pop().unwrap()
}

fn memory() -> MemoryReservation {
    let pool: Arc<dyn MemoryPool> = Arc::new(UnboundedMemoryPool::default());
    MemoryConsumer::new("test").register(&pool)
}

#[test]
fn a_cancelled_workshop_does_nothing() {
    let workshop = workshop(Function::Components);
    workshop.cancelled.store(true, Ordering::Relaxed);
    assert!(workshop.answer(&[group()], &memory()).unwrap_err().to_string().contains("cancelled"));
    assert_eq!(workshop.metrics.series_fitted.value(), 0);
}

#[test]
fn work_is_counted() {
    let workshop = workshop(Function::Components);
    workshop.answer(&[group()], &memory()).unwrap();
    assert_eq!(workshop.metrics.series_fitted.value(), 1);
    assert!(workshop.metrics.likelihood_evaluations.value() >= 1);
    assert!(workshop.metrics.time_in_fits.value() > 0);
    assert_eq!(workshop.spare.lock().unwrap().len(), 1, "the buffers are kept for the next chunk");
}

/// Bits of a batch: equal floats are not enough, and NULLs count.
fn same(a: &RecordBatch, b: &RecordBatch) -> bool {
    a.columns().iter().zip(b.columns()).all(|(a, b)| a.to_data() == b.to_data())
}

fn groups(count: usize) -> Vec<Group> {
    let shape = |series: usize| {
        let mut groups = Groups::try_new(&[]).unwrap();
        let length = 30 + series % 3;
        let times = (0..length as i64).map(Some).collect();
        // One in seven is trouble: it never moves, or it is never observed.
        let observed = (0..length).map(|at| match series % 14 {
            6 => 5.0,
            13 => f64::NAN,
            _ => ((at * 7 + series * 3) % 11) as f64,
        });
        groups.push(Rows { keys: vec![], times, observed: observed.collect(), drivers: vec![] }).unwrap();
        groups.close();
        groups.pop().unwrap()
    };
    (0..count).map(shape).collect()
}

#[test]
fn what_shares_a_chunk_or_a_batch_changes_nothing() {
    let groups = groups(30);
    for function in [Function::Components, Function::Diagnostics] {
        let together = workshop(function).answer(&groups, &memory()).unwrap();
        // So little room that each series is fitted alone.
        let narrow = Workshop { room: Room { rows: 1, fits: 1 }, ..workshop(function) };
        assert!(same(&together, &narrow.answer(&groups, &memory()).unwrap()));
        assert_eq!(narrow.metrics.series_in_trouble.value(), 4);
        let mut row = 0;
        for group in &groups {
            let alone = workshop(function).answer(std::slice::from_ref(group), &memory()).unwrap();
            assert!(same(&together.slice(row, alone.num_rows()), &alone));
            row += alone.num_rows();
        }
        assert_eq!(row, together.num_rows());
    }
}

#[test]
fn memory_of_fits_is_given_back() {
    let memory = memory();
    workshop(Function::Components).answer(&groups(30), &memory).unwrap();
    assert_eq!(memory.size(), 0);
}
