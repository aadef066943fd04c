//! From the values of a call to what the operator works with, contradictions refused.

use datafusion::error::Result;
use stillwell_statespace::calendar::{Axis, Grid, Step};
use stillwell_statespace::structure::Trend;
use stillwell_statespace::{GeneralForm, Request, SeasonRequest, TransformRequest};

use super::constant::{Given, Value};
use super::suggest::valid_and_nearest;
use super::{ARGUMENTS, Argument, REQUIRED};
use crate::columns::every;
use crate::columns::result::Scale;
use crate::sql::error::{Caller, bad_argument, bad_request};
use crate::sql::function::Function;

/// Longest horizon of a forecast.
const MAX_HORIZON: usize = stillwell_statespace::LONGEST_HORIZON;

/// States of the longest season that has the dummy form by default, and about those of a longer one.
const USUAL_SEASON: f64 = 13.0;

/// What one call asks for. Plain data, so that it can travel.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Settings {
    /// The model asked for.
    pub(crate) request: Request,
    /// The seasons to consider are those that the grid of each series suggests.
    pub(crate) seasons_from_grid: bool,
    /// The longest period of the cycle is the length of each series.
    pub(crate) cycle_from_series: bool,
    /// Step of the grid, if stated.
    pub(crate) every: Option<Step>,
    /// Coverage of intervals.
    pub(crate) coverage: f64,
    /// Steps to forecast; 0 where nothing is forecast.
    pub(crate) horizon: usize,
    /// The forecasts of the components are wanted too.
    pub(crate) parts: bool,
    /// A series in trouble ends the query.
    pub(crate) fail: bool,
    /// The system of `state_space`.
    pub(crate) form: Option<GeneralForm>,
}

impl Settings {
    /// True if [`Self::request_for`] is the same for all series.
    pub(crate) fn one_request(&self) -> bool {
        !self.seasons_from_grid && !self.cycle_from_series
    }

    /// True if many series can be fitted at once: not with matrices, nor where a power is estimated too.
    pub(crate) fn fits_together(&self) -> bool {
        self.form.is_none() && self.request.transform != TransformRequest::BoxCox(None)
    }

    /// States of the model, roughly: what is settled series by series is put at what is usual.
    pub(crate) fn usual_states(&self) -> usize {
        let request = &self.request;
        let (SeasonRequest::Auto(periods) | SeasonRequest::Given(periods)) = &request.season;
        let periods = if self.seasons_from_grid { &[USUAL_SEASON] } else { periods.as_slice() };
        let season = |(at, period): (usize, &f64)| match &request.harmonics {
            Some(counts) => 2 * counts.get(at).or_else(|| counts.first()).copied().unwrap_or(1),
            None => period.min(USUAL_SEASON) as usize,
        };
        let seasons: usize = periods.iter().enumerate().map(season).sum();
        2 + seasons
            + 2 * usize::from(request.cycle.is_some())
            + request.autoregression
            + request.drivers.len()
            + request.drifting_drivers.len()
    }

    /// The request for one series: what the call left to its grid and to its number of points, filled in.
    pub(crate) fn request_for(&self, grid: &Grid, points: usize) -> Request {
        let mut request = self.request.clone();
        if self.seasons_from_grid {
            request.season = SeasonRequest::Auto(grid.periods());
        }
        if self.cycle_from_series {
            request.cycle =
                request.cycle.map(|(shortest, _)| (shortest, (points as f64).max(2.0 * shortest)));
        }
        request
    }
}

/// The arguments of a call that are values, as far as they are known.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Values<'a> {
    /// Whose arguments they are.
    pub(crate) caller: Caller,
    pub(crate) given: &'a [(&'static Argument, Given)],
}

impl Values<'_> {
    pub(super) fn given(&self, name: &str) -> Option<&Given> {
        self.given.iter().find(|(argument, _)| argument.name == name).map(|(_, given)| given)
    }

    /// The value of an argument if it is given and known; NULL is a mistake.
    fn value(&self, name: &str) -> Result<Option<Value>> {
        match self.given(name).and_then(Given::value) {
            Some(Value::Null) => {
                let argument = ARGUMENTS.iter().find(|argument| argument.name == name);
                let remedy = match argument.filter(|argument| argument.default == REQUIRED) {
                    Some(argument) => format!("is NULL, but it is required: {}", argument.values),
                    None => "is NULL; leave it out for its default".to_owned(),
                };
                Err(bad_argument(self.caller, name, remedy))
            }
            value => Ok(value),
        }
    }

    /// The complaint that a value is not what the argument takes.
    pub(super) fn wrong(&self, name: &str, value: &Value) -> datafusion::error::DataFusionError {
        let takes =
            ARGUMENTS.iter().find(|argument| argument.name == name).map_or("", |argument| argument.values);
        bad_argument(self.caller, name, format!("takes {takes}, not {value}"))
    }

    fn flag(&self, name: &str) -> Result<bool> {
        match self.value(name)? {
            None => Ok(false),
            Some(Value::Flag(flag)) => Ok(flag),
            Some(other) => Err(self.wrong(name, &other)),
        }
    }

    /// One of `words`, the index of which is returned.
    fn word(&self, name: &str, words: &[&str]) -> Result<Option<usize>> {
        match self.value(name)? {
            None => Ok(None),
            Some(Value::Text(text)) => match words.iter().position(|word| *word == text) {
                Some(at) => Ok(Some(at)),
                None => {
                    let valid = valid_and_nearest(&text, words);
                    Err(bad_argument(self.caller, name, format!("does not know '{text}'; {valid}")))
                }
            },
            Some(other) => Err(self.wrong(name, &other)),
        }
    }

    /// Positive finite numbers, one or a list.
    fn periods(&self, name: &str, value: &Value) -> Result<Vec<f64>> {
        let number = |item: &Value| match item.as_number() {
            Some(period) if period.is_finite() && period > 0.0 => Ok(period),
            _ => Err(self.wrong(name, value)),
        };
        value.as_items().iter().map(number).collect()
    }

    /// The scale on which components will stand, for the units of the result.
    ///
    /// # Errors
    /// Unknown transforms.
    pub(crate) fn scale(&self) -> Result<Scale> {
        if self.caller == Caller::Relation(Function::StateSpace) {
            return Ok(Scale::Data);
        }
        Ok(match self.transform()? {
            TransformRequest::None => Scale::Data,
            TransformRequest::Log | TransformRequest::Log1p => Scale::Log,
            TransformRequest::BoxCox(_) => Scale::BoxCox,
            TransformRequest::Auto => Scale::BySeries,
        })
    }

    fn transform(&self) -> Result<TransformRequest> {
        if let Some(power) = self.value("transform")?.as_ref().and_then(Value::as_number) {
            return Ok(TransformRequest::BoxCox(Some(power)));
        }
        Ok(match self.word("transform", &["none", "log", "log1p", "box-cox", "auto"])? {
            Some(0) => TransformRequest::None,
            Some(1) => TransformRequest::Log,
            Some(2) => TransformRequest::Log1p,
            Some(3) => TransformRequest::BoxCox(None),
            _ => TransformRequest::Auto,
        })
    }

    /// True if the forecasts of components are wanted.
    ///
    /// # Errors
    /// Anything but true and false.
    pub(crate) fn parts(&self) -> Result<bool> {
        self.flag("parts")
    }

    /// True while parameters have no value yet.
    pub(crate) fn waiting(&self) -> bool {
        self.given.iter().any(|(_, given)| given.value().is_none())
    }

    /// Checks everything that is known and returns the settings; parameters without a value count as absent.
    ///
    /// # Errors
    /// Values an argument does not take, contradictions, and whatever [`stillwell_statespace::check`] refuses.
    pub(crate) fn settings(
        &self,
        axis: Axis,
        drivers: &[String],
        drifting_drivers: &[String],
    ) -> Result<Settings> {
        if self.caller == Caller::Relation(Function::StateSpace) {
            return self.general(axis, drivers);
        }
        self.word("estimate", &["likelihood"])?;
        let (season, seasons_from_grid) = self.season()?;
        let (cycle, cycle_from_series) = self.cycle(&season)?;
        let request = Request {
            trend: self.trend()?,
            season,
            harmonics: self.harmonics()?,
            fixed_season: self.flag("fixed_season")?,
            cycle,
            autoregression: self.count("autoregression")?.unwrap_or(0),
            transform: self.transform()?,
            known: self.known()?,
            drivers: drivers.to_vec(),
            drifting_drivers: drifting_drivers.to_vec(),
        };
        self.contradictions(&request)?;
        if !self.waiting() {
            stillwell_statespace::check(&request).map_err(|bad| bad_request(self.caller, &bad))?;
        }
        Ok(Settings {
            request,
            seasons_from_grid,
            cycle_from_series,
            every: self.every(axis)?,
            coverage: self.coverage()?,
            horizon: self.horizon()?,
            parts: self.parts()?,
            fail: self.fail()?,
            form: None,
        })
    }

    /// The settings of `state_space`: its drivers stand in `z`, where they load on states.
    fn general(&self, axis: Axis, drivers: &[String]) -> Result<Settings> {
        let form = if self.waiting() { None } else { Some(self.form(drivers)?) };
        Ok(Settings {
            request: Request { drifting_drivers: drivers.to_vec(), ..Request::default() },
            seasons_from_grid: false,
            cycle_from_series: false,
            every: self.every(axis)?,
            coverage: self.coverage()?,
            horizon: 0,
            parts: false,
            fail: self.fail()?,
            form,
        })
    }

    fn fail(&self) -> Result<bool> {
        Ok(self.word("on_trouble", &["report", "fail"])? == Some(1))
    }

    fn trend(&self) -> Result<Option<Trend>> {
        let words = Trend::ALL.iter().map(|(word, _)| *word).chain(["auto"]).collect::<Vec<_>>();
        let at = self.word("trend", &words)?;
        Ok(at.and_then(|at| Trend::ALL.get(at)).map(|(_, trend)| *trend))
    }

    /// The seasons, and whether the grid is to suggest them.
    fn season(&self) -> Result<(SeasonRequest, bool)> {
        let period = self.value("period")?.map(|value| self.periods("period", &value)).transpose()?;
        let season = match self.value("season")? {
            None => return Ok((SeasonRequest::Auto(period.clone().unwrap_or_default()), period.is_none())),
            Some(season) => season,
        };
        match &season {
            Value::Text(text) if text == "auto" => {
                return Ok((SeasonRequest::Auto(period.clone().unwrap_or_default()), period.is_none()));
            }
            Value::Text(_) => return Err(self.wrong("season", &season)),
            _ => {}
        }
        if period.is_some() {
            let what = format!(
                "is what {} considers, but season is {season}; leave one of them out",
                self.caller.written("season", "'auto'")
            );
            return Err(bad_argument(self.caller, "period", what));
        }
        if season.as_number() == Some(0.0) {
            return Ok((SeasonRequest::Given(Vec::new()), false));
        }
        Ok((SeasonRequest::Given(self.periods("season", &season)?), false))
    }

    fn harmonics(&self) -> Result<Option<Vec<usize>>> {
        let Some(value) = self.value("harmonics")? else { return Ok(None) };
        let count = |item: &Value| item.as_count().filter(|&count| count > 0);
        let counts = value.as_items().iter().map(count).collect::<Option<Vec<_>>>();
        counts.filter(|counts| !counts.is_empty()).ok_or_else(|| self.wrong("harmonics", &value)).map(Some)
    }

    /// Bounds of the cycle's period, and whether the longest is to be the length of each series.
    ///
    /// `true` looks for what a season cannot be: periods from one and a half times the longest season given (4
    /// steps without one) up to the length of the series.
    fn cycle(&self, season: &SeasonRequest) -> Result<(Option<(f64, f64)>, bool)> {
        match self.value("cycle")? {
            None | Some(Value::Flag(false)) => Ok((None, false)),
            Some(Value::Flag(true)) => {
                let (SeasonRequest::Auto(periods) | SeasonRequest::Given(periods)) = season;
                let shortest = periods.iter().fold(4.0, |shortest: f64, period| shortest.max(1.5 * period));
                Ok((Some((shortest, 2.0 * shortest)), true))
            }
            Some(value) => match self.periods("cycle", &value)?.as_slice() {
                [shortest, longest] => Ok((Some((*shortest, *longest)), false)),
                _ => Err(self.wrong("cycle", &value)),
            },
        }
    }

    fn count(&self, name: &str) -> Result<Option<usize>> {
        match self.value(name)? {
            None => Ok(None),
            Some(value) => value.as_count().ok_or_else(|| self.wrong(name, &value)).map(Some),
        }
    }

    fn known(&self) -> Result<Vec<(String, f64)>> {
        let value = match self.value("known")? {
            None => return Ok(Vec::new()),
            Some(value) => value,
        };
        let Value::Fields(fields) = &value else { return Err(self.wrong("known", &value)) };
        let field = |(name, item): &(String, Value)| match item.as_number() {
            Some(number) if number.is_finite() => Ok((name.clone(), number)),
            _ => {
                let what = format!("gives '{name}' the value {item}, but needs a finite number");
                Err(bad_argument(self.caller, "known", what))
            }
        };
        fields.iter().map(field).collect()
    }

    fn every(&self, axis: Axis) -> Result<Option<Step>> {
        let wrong = |value: &Value| self.wrong("every", value);
        let parse = |step: Result<Step, crate::columns::ColumnError>| {
            step.map(Some)
                .map_err(|error| bad_argument(self.caller, "every", format!("does not fit: {error}")))
        };
        match self.value("every")? {
            None => Ok(None),
            Some(Value::Interval(interval)) => parse(every::from_interval(axis, interval)),
            Some(Value::Whole(whole)) => parse(every::from_integer(axis, whole)),
            Some(other) => Err(wrong(&other)),
        }
    }

    fn coverage(&self) -> Result<f64> {
        match self.value("coverage")? {
            None => Ok(0.9),
            Some(value) => value
                .as_number()
                .filter(|c| 0.0 < *c && *c <= 0.999_999)
                .ok_or_else(|| self.wrong("coverage", &value)),
        }
    }

    fn horizon(&self) -> Result<usize> {
        match self.value("horizon")? {
            None => Ok(0),
            Some(value) => value
                .as_count()
                .filter(|steps| (1..=MAX_HORIZON).contains(steps))
                .ok_or_else(|| self.wrong("horizon", &value)),
        }
    }

    /// Arguments that undo one another.
    fn contradictions(&self, request: &Request) -> Result<()> {
        let no_season = matches!(&request.season, SeasonRequest::Given(periods) if periods.is_empty())
            && self.given("season").is_some();
        for name in ["harmonics", "fixed_season"] {
            let asked = if name == "harmonics" { request.harmonics.is_some() } else { request.fixed_season };
            if no_season && asked {
                let none = self.caller.written("season", "0");
                let what = format!("describes a season, but {none} leaves it out; drop one of the two");
                return Err(bad_argument(self.caller, name, what));
            }
        }
        Ok(())
    }
}
