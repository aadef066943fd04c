//! What holds for every grid.

use super::*;
use proptest::prelude::*;

fn axes() -> impl Strategy<Value = Axis> {
    prop_oneof![
        Just(Axis::Days),
        prop::sample::select(vec![1, 1_000, 1_000_000, 1_000_000_000])
            .prop_map(|per_second| Axis::Ticks { per_second }),
        Just(Axis::Instants { per_second: 1_000 }),
        Just(Axis::Integer),
    ]
}

/// Grids that start between 1600 and 2400, at any time of day.
fn grids() -> impl Strategy<Value = Grid> {
    let step = prop_oneof![(1_i64..100_000).prop_map(Step::Every), (1_u32..40).prop_map(Step::Months)];
    (axes(), step, -135_140_i64..157_420, 0_i64..86_400).prop_map(|(axis, step, day, second)| {
        let first = match axis {
            // Nanoseconds reach from 1677 to 2262 only.
            Axis::Ticks { per_second } => (day / 2 * DAY + second) * per_second,
            Axis::Instants { per_second } => (day * DAY + second) * per_second,
            Axis::Days | Axis::Integer => day,
        };
        Grid::with_step(axis, step, first)
    })
}

/// A third to all of some grid points, two neighbours and the first point among them.
fn subsets() -> impl Strategy<Value = Vec<usize>> {
    (8_usize..200, 0.35_f64..1.0)
        .prop_flat_map(|(n, share)| prop::collection::vec(prop::bool::weighted(share), n))
        .prop_map(|keep| (0..keep.len()).filter(|&i| i < 2 || keep[i]).collect())
}

/// True if "next point" is the most frequent distance (the shortest wins a tie), which is what the finder goes by.
fn neighbours_prevail(indices: &[usize]) -> bool {
    let count = |distance: usize| indices.windows(2).filter(|w| w[1] - w[0] == distance).count();
    (2..200).all(|distance| count(distance) <= count(1))
}

proptest! {
    #[test]
    fn points_and_times_are_each_other_s_inverse(grid in grids(), index in 0_usize..3_000) {
        if let Some(time) = grid.time_at(index) {
            prop_assert_eq!(grid.index_of(time), Some(index));
            prop_assert_eq!(grid.index_of(time + 1).is_some(), grid.step() == Step::Every(1));
            if let Some(next) = grid.time_at(index + 1) {
                prop_assert!(next > time);
            }
        }
    }

    #[test]
    fn a_subset_with_gaps_gives_its_grid_back(grid in grids(), indices in subsets()) {
        prop_assume!(neighbours_prevail(&indices));
        prop_assume!(grid.time_at(200).is_some());
        let times = points(&grid, indices);
        let found = Grid::find(grid.axis(), &times).unwrap();
        // Two days may be a whole number of months apart, and then nobody can tell which was meant.
        let months = |grid: &Grid| matches!(grid.step(), Step::Months(_));
        prop_assume!(times.len() > 2 || months(&found) == months(&grid));
        prop_assert_eq!(found.step(), grid.step());
        for &time in &times {
            prop_assert_eq!(found.index_of(time), grid.index_of(time));
        }
    }

    #[test]
    fn one_stray_among_many_is_named(
        grid in grids(), n in 12_usize..80, at in any::<prop::sample::Index>(), share in 0.01_f64..0.99,
    ) {
        prop_assume!(grid.time_at(n).is_some());
        let mut times = points(&grid, 0..n);
        let stray = 1 + at.index(n - 2);
        let room = times[stray + 1] - times[stray];
        let shift = (room as f64 * share) as i64;
        // At twice the step or so the finer grid would be a fair reading.
        prop_assume!(shift > 0 && room / gcd(room, shift) >= 7);
        times[stray] += shift;
        // Nor is a row a stray that only makes a quarter a month.
        let monthly = Grid::with_step(grid.axis(), Step::Months(1), grid.first());
        prop_assume!(matches!(grid.step(), Step::Every(_)) || monthly.index_of(times[stray]).is_none());
        let (said, _) = off_grid(Grid::find(grid.axis(), &times));
        prop_assert_eq!(said, grid.axis().format(times[stray]));
    }

    #[test]
    fn the_given_step_is_never_put_in_doubt(grid in grids(), indices in subsets()) {
        prop_assume!(grid.time_at(200).is_some());
        let times = points(&grid, indices);
        let found = Grid::find_with_step(grid.axis(), grid.step(), &times).unwrap();
        prop_assert_eq!(found, grid);
    }

    #[test]
    fn any_times_at_all_give_a_grid_that_holds_them_or_trouble(
        axis in axes(), mut times in prop::collection::vec(any::<i64>(), 0..20), few in prop::collection::vec(-50_i64..50, 0..20),
    ) {
        for times in [&mut times, &mut few.clone()] {
            times.sort_unstable();
            times.dedup();
            if let Ok(grid) = Grid::find(axis, times) {
                prop_assert!(times.iter().all(|&time| grid.index_of(time).is_some()));
                prop_assert_eq!(grid.first(), times[0]);
            }
        }
    }
}

fn gcd(a: i64, b: i64) -> i64 {
    if b == 0 { a } else { gcd(b, a % b) }
}
