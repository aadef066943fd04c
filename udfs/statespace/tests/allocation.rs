//! A likelihood evaluation allocates nothing, with or without its score, once its buffers have grown.

use std::alloc::{GlobalAlloc, Layout, System};
use std::cell::Cell;

use stillwell_statespace::structure::{Cycle, Season, Structure, Trend};
use stillwell_statespace::{Instructions, Likelihood, Likelihoods, Series};

struct Counting;

thread_local! {
    static ALLOCATIONS: Cell<usize> = const { Cell::new(0) };
}

#[expect(unsafe_code, reason = "counting allocations needs an allocator")]
// SAFETY: every call is handed on to the system's allocator unchanged; the counter is a plain thread-local cell.
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        ALLOCATIONS.with(|count| count.set(count.get() + 1));
        // SAFETY: as the caller promised.
        unsafe { System.alloc(layout) }
    }

    unsafe fn dealloc(&self, pointer: *mut u8, layout: Layout) {
        // SAFETY: as the caller promised.
        unsafe { System.dealloc(pointer, layout) }
    }
}

#[global_allocator]
static ALLOCATOR: Counting = Counting;

#[test]
fn a_likelihood_evaluation_allocates_nothing() {
    let season = |period, harmonics| vec![Season { period, harmonics, fixed: false }];
    let structures = [
        Structure::default(),
        Structure {
            trend: Trend::LocalLinear,
            seasons: season(12.0, None),
            drivers: 1,
            ..Structure::default()
        },
        Structure {
            trend: Trend::Damped,
            seasons: season(52.18, Some(3)),
            cycle: Some(Cycle { shortest: 3.0, longest: 30.0 }),
            autoregression: 2,
            ..Structure::default()
        },
    ];
    for structure in structures {
        let observed: Vec<f64> =
            (0..150).map(|t| f64::from(t % 12) + f64::from((t * t) % 17) * 0.1).collect();
        let drivers = vec![(0..150).map(|t| f64::from((t * 5) % 7)).collect(); structure.drivers];
        let model = structure.model();
        let values: Vec<f64> =
            model.parameters().iter().map(|p| if p.name == "cycle_period" { 9.0 } else { 0.3 }).collect();
        let mut likelihood =
            Likelihood::new(model, Series { observed, drivers, drifting_drivers: Vec::new() });
        let first = likelihood.with_score(&values).expect("a likelihood").0;
        let before = ALLOCATIONS.with(Cell::get);
        let again = likelihood.with_score(&values).expect("a likelihood").0;
        let alone = likelihood.at(&values).expect("a likelihood");
        assert_eq!(ALLOCATIONS.with(Cell::get) - before, 0, "{structure:?}");
        assert_eq!((first, first), (again, alone));
    }
}

#[test]
fn side_by_side_only_the_answers_are_allocated() {
    let structure = Structure {
        trend: Trend::Damped,
        seasons: vec![Season { period: 12.0, harmonics: None, fixed: false }],
        ..Structure::default()
    };
    let observed =
        |k: i32| (0..150).map(|t| f64::from((t + k) % 12) + f64::from((t * t) % 17) * 0.1).collect();
    let series: Vec<Series> = (0..8).map(|k| Series { observed: observed(k), ..Series::default() }).collect();
    let model = structure.model();
    let values = vec![0.3; model.parameters().len()];
    let at: Vec<&[f64]> = vec![&values; series.len()];
    for instructions in Instructions::available() {
        let mut likelihoods = Likelihoods::new(model.clone(), &series, instructions);
        likelihoods.with_score(&at);
        let before = ALLOCATIONS.with(Cell::get);
        let alone = likelihoods.at(&at).len();
        let in_between = ALLOCATIONS.with(Cell::get);
        let with_score = likelihoods.with_score(&at).len();
        let after = ALLOCATIONS.with(Cell::get);
        // Two vectors an answer: what went well, what was found; beside a score each lane has its gradient and its matrix.
        assert!(in_between - before <= 2, "{instructions:?}: {}", in_between - before);
        assert!(after - in_between <= 2 + 2 * series.len(), "{instructions:?}: {}", after - in_between);
        assert_eq!((alone, with_score), (8, 8));
    }
}
