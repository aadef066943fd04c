//! The story of the demo: who sells what where, and what happened to whom.
//!
//! Everything here is invented. Each product has a [`Character`], the true parameters that its series are
//! drawn with; each [`Event`] names the region and product it befalls (`None` = all of them) and where in the
//! history it starts, as a share of the weeks, so that a shorter demo tells the same story.
//! [`Fate`] is what the events come to for one series.

use std::ops::Range;

/// A sales region.
#[derive(Debug, Clone, Copy)]
pub(super) struct Region {
    /// Name, also of its partition; needs no escaping in a path.
    pub name: &'static str,
    /// Factor on the units of every product.
    pub volume: f64,
    /// Factor on the list price of every product.
    pub price: f64,
}

/// A product and the parameters of its series.
#[derive(Debug, Clone, Copy)]
pub(super) struct Product {
    /// Invented name.
    pub name: &'static str,
    /// What its series are drawn with.
    pub character: Character,
}

/// True parameters of a series on the log scale, before the small differences from region to region.
#[derive(Debug, Clone, Copy)]
pub(super) struct Character {
    /// Units of an ordinary week at the start.
    pub units: f64,
    /// List price at the start, in crowns.
    pub list_price: f64,
    /// Fall of the log units per unit of relative price, at the list price of the start.
    pub elasticity: f64,
    /// Log units a promotion adds beyond what its price cut does.
    pub promo: f64,
    /// Log units a holiday week adds.
    pub holiday: f64,
    /// Amplitude of the yearly season's first harmonic, log units.
    pub season: f64,
    /// Week of the year in which the first harmonic peaks.
    pub peak: f64,
    /// Standard deviation of the level's weekly disturbance, log units.
    pub level_sd: f64,
    /// Standard deviation of the slope's weekly disturbance, log units per week.
    pub slope_sd: f64,
    /// Standard deviation of each seasonal state's weekly disturbance, log units.
    pub season_sd: f64,
    /// Standard deviation of the irregular, log units.
    pub irregular_sd: f64,
}

/// The regions of Ostrel Creameries.
pub(super) const REGIONS: [Region; 4] = [
    Region { name: "Coldwater", volume: 1.0, price: 1.0 },
    Region { name: "Eastfell", volume: 0.8, price: 0.98 },
    Region { name: "Marrowdale", volume: 1.25, price: 1.03 },
    Region { name: "Saltmarsh", volume: 0.65, price: 1.0 },
];

/// One line of the catalogue; the arrays hold [`Character`]'s fields in their order.
const fn product(
    name: &'static str,
    sells: [f64; 2],
    responds: [f64; 3],
    season: [f64; 2],
    sd: [f64; 4],
) -> Product {
    Product {
        name,
        character: Character {
            units: sells[0],
            list_price: sells[1],
            elasticity: responds[0],
            promo: responds[1],
            holiday: responds[2],
            season: season[0],
            peak: season[1],
            level_sd: sd[0],
            slope_sd: sd[1],
            season_sd: sd[2],
            irregular_sd: sd[3],
        },
    }
}

/// The product lines. Columns: units and list price; elasticity, promotion, holiday; season and its peak;
/// standard deviations of level, slope, season, irregular.
#[rustfmt::skip]
pub(super) const PRODUCTS: [Product; 12] = [
    product("Alder Butter",   [3200.0, 2.90], [1.4, 0.28, 0.10], [0.10, 50.0], [0.010, 6e-5, 0.0012, 0.045]),
    product("Brook Milk",     [9000.0, 1.25], [0.7, 0.15, 0.05], [0.04,  2.0], [0.006, 4e-5, 0.0008, 0.025]),
    product("Cinder Cheese",  [1100.0, 5.40], [1.8, 0.35, 0.16], [0.12, 49.0], [0.014, 8e-5, 0.0015, 0.070]),
    product("Dapple Yoghurt", [4200.0, 1.80], [1.6, 0.32, 0.04], [0.14, 27.0], [0.012, 7e-5, 0.0012, 0.050]),
    product("Ember Quark",    [1500.0, 1.55], [1.3, 0.25, 0.03], [0.08, 22.0], [0.015, 8e-5, 0.0010, 0.060]),
    product("Fen Cream",      [1800.0, 2.10], [1.1, 0.22, 0.20], [0.18, 51.0], [0.011, 6e-5, 0.0015, 0.055]),
    product("Gorse Kefir",    [ 900.0, 2.40], [1.5, 0.30, 0.02], [0.12, 30.0], [0.018, 8e-5, 0.0010, 0.075]),
    product("Hollow Blue",    [ 600.0, 6.20], [1.9, 0.38, 0.18], [0.10, 48.0], [0.016, 8e-5, 0.0015, 0.085]),
    product("Kettle Custard", [1300.0, 2.30], [1.7, 0.33, 0.14], [0.20, 46.0], [0.012, 7e-5, 0.0018, 0.060]),
    product("Larch Whey",     [ 480.0, 1.95], [1.0, 0.18, 0.02], [0.07, 24.0], [0.015, 8e-5, 0.0010, 0.080]),
    product("Meadow Skyr",    [2600.0, 2.05], [1.6, 0.30, 0.03], [0.11, 26.0], [0.020, 8e-5, 0.0012, 0.050]),
    product("Pebble Ices",    [2000.0, 3.10], [1.5, 0.30, 0.08], [0.45, 28.0], [0.014, 7e-5, 0.0025, 0.080]),
];

/// What an event does.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum What {
    /// The rows of these weeks are not there at all.
    RowsLost,
    /// The rows are there, their units are NULL.
    UnitsLost,
    /// A plant stands still: log units change by this much, then return.
    Outage(f64),
    /// Sales begin here; no earlier rows.
    Launch,
    /// Sales end here; no later rows and no plan.
    Withdrawal,
    /// Listed with a price every week, never sold: units are NULL throughout.
    NeverSold,
    /// The list price rises by this share, for good.
    PriceRise(f64),
}

/// Something that happened.
#[derive(Debug, Clone, Copy)]
pub(super) struct Event {
    /// What it does.
    pub what: What,
    /// Which region; `None` = every one.
    pub region: Option<&'static str>,
    /// Which product; `None` = every one.
    pub product: Option<&'static str>,
    /// Where it starts, as a share of the history.
    pub from: f64,
    /// For how many weeks; without meaning for what lasts for good.
    pub weeks: usize,
}

/// The events of the demo.
#[rustfmt::skip]
pub(super) const EVENTS: [Event; 7] = [
    Event { what: What::RowsLost,       region: Some("Saltmarsh"),  product: Some("Brook Milk"),     from: 0.36,  weeks: 6 },
    Event { what: What::UnitsLost,      region: Some("Eastfell"),   product: Some("Dapple Yoghurt"), from: 0.66,  weeks: 5 },
    Event { what: What::Outage(-0.7),   region: Some("Marrowdale"), product: None,                   from: 0.47,  weeks: 6 },
    Event { what: What::Launch,         region: None,               product: Some("Gorse Kefir"),    from: 0.53,  weeks: 0 },
    Event { what: What::Withdrawal,     region: None,               product: Some("Larch Whey"),     from: 0.72,  weeks: 0 },
    Event { what: What::NeverSold,      region: Some("Saltmarsh"),  product: Some("Hollow Blue"),    from: 0.0,   weeks: 0 },
    Event { what: What::PriceRise(0.18), region: None,              product: Some("Alder Butter"),   from: 0.625, weeks: 0 },
];

impl Event {
    /// Whether this event befalls the series.
    pub(super) fn befalls(&self, region: &str, product: &str) -> bool {
        self.region.is_none_or(|name| name == region) && self.product.is_none_or(|name| name == product)
    }

    /// The weeks it takes, as steps of a history of `weeks` weeks.
    pub(super) fn steps(&self, weeks: usize) -> Range<usize> {
        let start = (self.from * weeks as f64).round() as usize;
        start..(start + self.weeks).min(weeks)
    }
}

/// What the events come to for one series; ranges are steps from the first week.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Fate {
    /// Steps in which the product is listed; reaches past the history where there is a plan.
    pub listed: Range<usize>,
    /// Steps whose rows are lost.
    pub rows_lost: Range<usize>,
    /// Steps whose units are lost.
    pub units_lost: Range<usize>,
    /// Steps of an outage, and what it does to the log units.
    pub outage: (Range<usize>, f64),
    /// Step of a price rise and its share.
    pub price_rise: Option<(usize, f64)>,
    /// Listed but never sold.
    pub never_sold: bool,
}

impl Fate {
    /// A series to which nothing happens: listed through all `steps`, history and plan.
    pub(super) fn uneventful(steps: usize) -> Self {
        Self {
            listed: 0..steps,
            rows_lost: 0..0,
            units_lost: 0..0,
            outage: (0..0, 0.0),
            price_rise: None,
            never_sold: false,
        }
    }

    /// What [`EVENTS`] do to a series of the demo with `weeks` weeks of history and `plan` of plan.
    pub(super) fn of(region: &str, product: &str, weeks: usize, plan: usize) -> Self {
        let mut fate = Self::uneventful(weeks + plan);
        for event in EVENTS.iter().filter(|event| event.befalls(region, product)) {
            let steps = event.steps(weeks);
            match event.what {
                What::RowsLost => fate.rows_lost = steps,
                What::UnitsLost => fate.units_lost = steps,
                What::Outage(effect) => fate.outage = (steps, effect),
                What::Launch => fate.listed.start = steps.start,
                What::Withdrawal => fate.listed.end = steps.start,
                What::NeverSold => fate.never_sold = true,
                What::PriceRise(share) => fate.price_rise = Some((steps.start, share)),
            }
        }
        fate
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_event_befalls_some_series_and_names_only_what_exists() {
        for event in &EVENTS {
            let befallen = REGIONS
                .iter()
                .flat_map(|region| PRODUCTS.iter().map(move |product| (region.name, product.name)))
                .filter(|(region, product)| event.befalls(region, product))
                .count();
            let expected =
                event.region.map_or(REGIONS.len(), |_| 1) * event.product.map_or(PRODUCTS.len(), |_| 1);
            assert_eq!(befallen, expected, "{event:?}");
        }
    }

    #[test]
    fn events_stay_inside_the_history_of_the_shortest_demo() {
        for event in &EVENTS {
            let steps = event.steps(super::super::LEAST_DEMO_WEEKS);
            assert!(steps.end < super::super::LEAST_DEMO_WEEKS, "{event:?}");
            assert_eq!(steps.len(), event.weeks, "{event:?}");
        }
    }
}
