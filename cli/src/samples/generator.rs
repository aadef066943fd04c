//! Draws one series from the equations of its structural model, on the log scale.
//!
//! ```text
//! log units = level + season + price effect + promo effect + holiday effect + event effect + irregular
//! level[t+1]  = level[t] + slope[t] + N(0, level_sd^2)
//! slope[t+1]  = slope[t] + N(0, slope_sd^2)
//! season      = three harmonics of 52.18 weeks; each turns by 2 pi j / 52.18 a week and is
//!               disturbed by N(0, season_sd^2) in both of its states
//! price effect = coefficient x (price - the average price of the series' own rows)
//! ```
//!
//! This is the local linear trend and the trigonometric season of Durbin & Koopman (2012), *Time Series
//! Analysis by State Space Methods*, 2nd ed., section 3.2. Units are rounded to whole numbers, components to
//! a millionth, so that they add up and do not hang on the last bit of a machine's logarithm.
//!
//! Random numbers: `ChaCha8Rng` seeded with `seed`, on a stream of its own per series. A series therefore
//! does not depend on how many others are drawn, or in what order.

use std::f64::consts::TAU;

use rand::{Rng, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::StandardNormal;

use super::holidays::{civil, day_number, holds_holiday};
use super::story::{Character, Fate};

/// Period of the season in weeks: a year of 365.25 days.
const PERIOD: f64 = 52.18;
/// Amplitude of each harmonic as a share of the first.
const HARMONICS: [f64; 3] = [1.0, 0.35, 0.2];
/// Price cuts of promotions; at 0 only a leaflet goes out.
const PRICE_CUTS: [f64; 4] = [0.0, 0.10, 0.15, 0.20];
/// Chance that a promotion starts in a week that is free for one.
const PROMO_CHANCE: f64 = 0.14;
/// Weeks after a promotion without another.
const PROMO_REST: usize = 3;
/// Standard deviation of the slope at the start, log units per week.
const START_SLOPE_SD: f64 = 0.0006;

/// What to draw.
#[derive(Debug, Clone)]
pub(super) struct Order {
    /// True parameters.
    pub character: Character,
    /// What happens to the series.
    pub fate: Fate,
    /// Monday of step 0, days since 1970-01-01.
    pub first_monday: i32,
    /// Weeks of history.
    pub weeks: usize,
    /// Weeks of plan after it.
    pub plan: usize,
    /// Seed of the warehouse.
    pub seed: u64,
    /// Number of the series: its stream of random numbers.
    pub stream: u64,
}

/// One week of one series. Effects and states in log units.
#[derive(Debug, Clone)]
pub(super) struct Week {
    /// Monday, days since 1970-01-01.
    pub monday: i32,
    /// Whether the warehouse has a row for it.
    pub in_sales: bool,
    /// Units as the warehouse knows them; `None` = NULL.
    pub reported: Option<f64>,
    /// Price paid in crowns.
    pub price: f64,
    /// 1 in a week of promotion, else 0.
    pub promo: f64,
    /// 1 in a week that holds a public holiday, else 0.
    pub holiday: f64,
    /// Units really sold, whether reported, lost or still to come.
    pub units: f64,
    /// The sales of an ordinary week at the average price, as a logarithm.
    pub level: f64,
    /// Growth of the level per week.
    pub slope: f64,
    /// Yearly season.
    pub season: f64,
    /// Effect of the price.
    pub price_effect: f64,
    /// Effect of a promotion beyond its price cut.
    pub promo_effect: f64,
    /// Effect of a holiday.
    pub holiday_effect: f64,
    /// Effect of an outage.
    pub event_effect: f64,
    /// What is left.
    pub irregular: f64,
}

/// One series: its weeks, and the parameters that were really used for it.
#[derive(Debug, Clone)]
pub(super) struct Drawn {
    /// The weeks in which the product was listed, in order.
    pub weeks: Vec<Week>,
    /// False for a series that was never sold: it has no truth.
    pub sold: bool,
    /// Standard deviations as drawn with.
    pub character: Character,
    /// Log units per crown.
    pub price_coefficient: f64,
    /// Log units of a promotion.
    pub promo_coefficient: f64,
    /// Log units of a holiday week.
    pub holiday_coefficient: f64,
    /// Average price of the series' own rows in the warehouse, crowns.
    pub average_price: f64,
}

/// Rounds to a millionth.
fn rounded(value: f64) -> f64 {
    (value * 1e6).round() / 1e6
}

/// A standard normal number.
fn normal(rng: &mut ChaCha8Rng) -> f64 {
    rng.sample(StandardNormal)
}

/// Price and promotion flag of each step.
///
/// The list price is revised by 2 to 4 % in the first week of each calendar year and keeps whole cents.
/// A promotion lasts one or two weeks.
fn price_and_promo(order: &Order, rng: &mut ChaCha8Rng) -> Vec<(f64, f64)> {
    let cents = |price: f64| (price * 100.0).round() / 100.0;
    let mut list = cents(order.character.list_price);
    let mut left = 0;
    let mut rest = 0;
    let mut cut = 0.0;
    let mut year = civil(order.first_monday).0;
    let mut monday = order.first_monday;
    let mut path = Vec::with_capacity(order.weeks + order.plan);
    for step in 0..order.weeks + order.plan {
        let this_year = civil(monday).0;
        if this_year != year {
            list = cents(list * rng.random_range(1.02..1.04));
            year = this_year;
        }
        if let Some((at, share)) = order.fate.price_rise
            && at == step
        {
            list = cents(list * (1.0 + share));
        }
        if left == 0 && rest == 0 && rng.random_bool(PROMO_CHANCE) {
            left = rng.random_range(1..=2);
            cut = PRICE_CUTS[rng.random_range(0..PRICE_CUTS.len())];
        }
        if left > 0 {
            path.push((cents(list * (1.0 - cut)), 1.0));
            left -= 1;
            rest = if left == 0 { PROMO_REST } else { 0 };
        } else {
            path.push((list, 0.0));
            rest = rest.saturating_sub(1);
        }
        monday += 7;
    }
    path
}

/// The states of trend and season, carried from week to week.
struct States {
    level: f64,
    slope: f64,
    /// Per harmonic: the pattern's value and its partner.
    season: [(f64, f64); HARMONICS.len()],
}

impl States {
    /// States at step 0; the season is placed by the calendar, its peak differs a little between series.
    fn start(order: &Order, rng: &mut ChaCha8Rng) -> Self {
        let character = &order.character;
        let weeks_into_2022 = f64::from(order.first_monday - day_number(2022, 1, 3)) / 7.0;
        let level = character.units.ln() + 0.1 * normal(rng);
        let slope = START_SLOPE_SD * normal(rng);
        let season = std::array::from_fn(|index| {
            let amplitude = character.season * HARMONICS[index] * (1.0 + 0.1 * normal(rng));
            let phase = frequency(index) * (weeks_into_2022 - character.peak + normal(rng));
            (amplitude * phase.cos(), -amplitude * phase.sin())
        });
        Self { level, slope, season }
    }

    /// The transition to the next week.
    fn advance(&mut self, character: &Character, rng: &mut ChaCha8Rng) {
        self.level += self.slope + character.level_sd * normal(rng);
        self.slope += character.slope_sd * normal(rng);
        for (index, (value, partner)) in self.season.iter_mut().enumerate() {
            let (sin, cos) = frequency(index).sin_cos();
            let turned = (cos * *value + sin * *partner, cos * *partner - sin * *value);
            *value = turned.0 + character.season_sd * normal(rng);
            *partner = turned.1 + character.season_sd * normal(rng);
        }
    }
}

/// Angle per week of the harmonic with this index (0 = the first).
fn frequency(index: usize) -> f64 {
    TAU * (index + 1) as f64 / PERIOD
}

/// Draws the series. Weeks outside [`Fate::listed`] are left out of the answer.
pub(super) fn draw(order: &Order) -> Drawn {
    let mut rng = ChaCha8Rng::seed_from_u64(order.seed);
    rng.set_stream(order.stream);
    let rng = &mut rng;
    let character = order.character;
    let fate = &order.fate;
    let about = |rng: &mut ChaCha8Rng, value: f64| rounded(value * (1.0 + 0.1 * normal(rng)));
    let price_coefficient = about(rng, -character.elasticity / character.list_price);
    let promo_coefficient = about(rng, character.promo);
    let holiday_coefficient = about(rng, character.holiday);
    let path = price_and_promo(order, rng);

    let in_sales = |step: usize| fate.listed.contains(&step) && !fate.rows_lost.contains(&step);
    let (sum, count) = (0..path.len())
        .filter(|step| in_sales(*step))
        .fold((0.0, 0_usize), |(sum, count), step| (sum + path[step].0, count + 1));
    let average_price = sum / count.max(1) as f64;

    let mut states = States::start(order, rng);
    let mut weeks = Vec::with_capacity(path.len());
    let mut monday = order.first_monday;
    for (step, (price, promo)) in path.into_iter().enumerate() {
        let holiday = f64::from(u8::from(holds_holiday(monday)));
        let irregular = rounded(character.irregular_sd * normal(rng));
        if fate.listed.contains(&step) {
            let level = rounded(states.level);
            let season = rounded(states.season.iter().map(|(value, _)| value).sum());
            let price_effect = rounded(price_coefficient * (price - average_price));
            let promo_effect = promo_coefficient * promo;
            let holiday_effect = holiday_coefficient * holiday;
            let event_effect = if fate.outage.0.contains(&step) { fate.outage.1 } else { 0.0 };
            let log_units =
                level + season + price_effect + promo_effect + holiday_effect + event_effect + irregular;
            let units = log_units.exp().round().max(1.0);
            let known = step < order.weeks && !fate.units_lost.contains(&step) && !fate.never_sold;
            weeks.push(Week {
                monday,
                in_sales: in_sales(step),
                reported: known.then_some(units),
                price,
                promo,
                holiday,
                units,
                level,
                slope: (states.slope * 1e9).round() / 1e9,
                season,
                price_effect,
                promo_effect,
                holiday_effect,
                event_effect,
                irregular,
            });
        }
        states.advance(&character, rng);
        monday += 7;
    }
    Drawn {
        weeks,
        sold: !fate.never_sold,
        character,
        price_coefficient,
        promo_coefficient,
        holiday_coefficient,
        average_price,
    }
}

#[cfg(test)]
mod tests {
    use super::super::story::PRODUCTS;
    use super::*;

    fn order(weeks: usize) -> Order {
        Order {
            character: PRODUCTS[0].character,
            fate: Fate::uneventful(weeks),
            first_monday: day_number(2022, 1, 3),
            weeks,
            plan: 0,
            seed: 5,
            stream: 3,
        }
    }

    /// Sample standard deviation about zero.
    fn spread(values: impl Iterator<Item = f64>) -> f64 {
        let (sum, count) = values.fold((0.0, 0.0), |(sum, count), value| (sum + value * value, count + 1.0));
        f64::sqrt(sum / count)
    }

    #[test]
    fn disturbances_have_the_stated_spread() {
        let order = order(1_040);
        let drawn = draw(&order);
        let pairs = || drawn.weeks.windows(2);
        let level = spread(pairs().map(|pair| pair[1].level - pair[0].level - pair[0].slope));
        let slope = spread(pairs().map(|pair| pair[1].slope - pair[0].slope));
        let irregular = spread(drawn.weeks.iter().map(|week| week.irregular));
        // A standard deviation from n = 1,040 normal numbers has relative error 1 / sqrt(2 n) = 2.2 %; 10 % is 4.5 of these.
        for (name, got, wanted) in [
            ("level", level, order.character.level_sd),
            ("slope", slope, order.character.slope_sd),
            ("irregular", irregular, order.character.irregular_sd),
        ] {
            assert!((got / wanted - 1.0).abs() < 0.1, "{name}: drawn with {wanted}, found {got}");
        }
    }

    #[test]
    fn a_season_without_disturbances_repeats_after_its_period() {
        let mut order = order(320);
        order.character.season_sd = 0.0;
        let drawn = draw(&order);
        // Six periods of 52.18 weeks are 313.08 steps, 0.08 past a whole one: harmonic j of share a_j moves by at
        // most a_j j 2 pi / 52.18 x 0.08 in that time, together 2.2 % of the amplitude; amplitudes vary by 10 %.
        for step in 0..6 {
            let (here, there) = (drawn.weeks[step].season, drawn.weeks[step + 313].season);
            assert!((here - there).abs() < 0.03 * order.character.season, "step {step}: {here} and {there}");
        }
        let largest = drawn.weeks.iter().map(|week| week.season).fold(0.0, f64::max);
        assert!(largest > 0.8 * order.character.season, "the pattern is there: {largest}");
    }

    #[test]
    fn a_series_depends_on_seed_and_stream_and_on_nothing_else() {
        let units = |order: &Order| draw(order).weeks.iter().map(|week| week.units).collect::<Vec<_>>();
        let base = order(60);
        assert_eq!(units(&base), units(&base.clone()));
        assert_ne!(units(&base), units(&Order { seed: 6, ..base.clone() }));
        assert_ne!(units(&base), units(&Order { stream: 4, ..base.clone() }));
    }

    #[test]
    fn promotions_rest_and_list_prices_only_rise() {
        let drawn = draw(&order(208));
        let flags: Vec<bool> = drawn.weeks.iter().map(|week| week.promo > 0.0).collect();
        let promoted = flags.iter().filter(|flag| **flag).count();
        assert!((15..80).contains(&promoted), "{promoted} of 208 weeks");
        for window in flags.windows(4) {
            assert!(window.iter().filter(|flag| **flag).count() <= 2, "at most two of four weeks");
        }
        let list: Vec<f64> =
            drawn.weeks.iter().filter(|week| week.promo == 0.0).map(|week| week.price).collect();
        assert!(list.is_sorted(), "{list:?}");
        assert!(list.last() > list.first());
    }
}
