//! What a source's level is today, and how sure we are.
//!
//! The level wanders: between two tests it gains variance in proportion to the
//! time ([`Drift`]), and each test pulls it back by as much as its method
//! deserves. This is the local-level model, filtered at irregular times. Start
//! reading at [`today`].
//!
//! Source: A. C. Harvey (1989), "Forecasting, structural time series models and
//! the Kalman filter", Cambridge (from memory). The handling of "less than"
//! results is the mean and variance of a truncated normal, exact for one
//! result; that of odd results is Huber's (1964), "Robust estimation of a
//! location parameter", Ann. Math. Statist. 35:73 (from memory). Every numeric
//! setting is assumed, chosen by simulation or judgement.
//!
//! An estimate that adapts follows a drift, so it cannot be its alarm.

use std::f64::consts::PI;

use crate::lower_tail::LowerTail;
use crate::measurement::{Analyte, Method, Precision, median};
use crate::quantity::{Day, Days, Drift, Sd, Share, Value};

/// Standard deviations beyond which a result is damped. Assumed.
const DAMPING_LIMIT: f64 = 2.5;
/// Results before one that can be called odd: of two that disagree nobody knows
/// which is. Assumed.
const LEAST_BEFORE_ODD: usize = 2;
/// Share of results that are slips of typing or testing, and may lie anywhere.
/// Assumed.
const SLIPS: f64 = 0.05;
/// A first result is judged by so many that follow it. Assumed.
const JUDGES_OF_FIRST: usize = 4;
/// Turns a median absolute deviation into a standard deviation, 1/Φ⁻¹(0.75).
const SD_PER_MAD: f64 = 1.4826;
/// A repeat this soon can confirm an odd result. Assumed.
const REPEAT_WITHIN_DAYS: f64 = 14.0;
/// A repeat agrees when it differs by less than so many standard deviations of
/// the difference of two results. Assumed.
const REPEAT_AGREES_SDS: f64 = 2.0;
/// A repeat this many times less precise confirms nothing. Assumed.
const REPEAT_COARSER: f64 = 3.0;
/// Points of the grid over log₁₀ of the drift. Assumed.
const GRID_POINTS: u8 = 31;
/// The grid reaches so far either side of the expected drift, in log₁₀. Assumed.
const GRID_HALF_SPAN: f64 = 2.5;
/// Spread of the prior over log₁₀ of the drift. Assumed.
const DRIFT_PRIOR_SD: f64 = 0.7;
/// Results, and days between the first and the last, from which the range they
/// span counts as known: enough to propose a baseline, and a round of seasons.
/// Assumed.
const RANGE_KNOWN_RESULTS: usize = 8;
const RANGE_KNOWN_DAYS: f64 = 365.0;

/// What a test found.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Finding {
    /// A value, caller's unit.
    Measured(Value),
    /// "Less than" this reporting limit, caller's unit.
    Below(Value),
}

/// What one test found of one level.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Observation {
    /// The day the sample was drawn, not the day the report came.
    pub day: Day,
    /// What was found.
    pub finding: Finding,
    /// How precise the method is.
    pub precision: Precision,
}

/// What is believed before the first test, such as a supplier's yearly
/// average. It has no date: it does not age, and it is no test.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Prior {
    /// The level expected, caller's unit.
    pub mean: Value,
    /// How far a single day's level may lie from it (one standard deviation),
    /// not how well the average is known.
    pub sd: Sd,
}

/// Least and greatest level a supplier reports, in either order.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Range {
    /// Least level, caller's unit.
    pub least: Value,
    /// Greatest level, caller's unit.
    pub greatest: Value,
}

/// How a kind of source usually drifts.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum SourceKind {
    /// A borehole or spring.
    Borehole,
    /// Mains from one works.
    SteadyMains,
    /// Mains that mix several waters, or surface water.
    BlendedMainsOrSurface,
    /// Permeate of a reverse-osmosis plant.
    ReverseOsmosis,
}

impl SourceKind {
    /// Typical change in 90 days (one standard deviation), as a share of the
    /// level. Assumed. For scale: chloride in a published groundwater series
    /// drifts by 5.5 %, conductivity of a large river by 25 %.
    #[must_use]
    pub const fn change_in_90_days(self) -> Share {
        match self {
            Self::Borehole => Share::constant(0.03),
            Self::SteadyMains => Share::constant(0.06),
            Self::BlendedMainsOrSurface => Share::constant(0.15),
            Self::ReverseOsmosis => Share::constant(0.25),
        }
    }
}

/// What is done with an odd result.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Damping {
    /// Every result counts in full.
    Off,
    /// A measured value more than 2.5 standard deviations from the prediction
    /// counts for less, the further the less, unless a repeat within 14 days
    /// agrees. When the next value is as odd and agrees with it, the level has
    /// jumped, and is followed afresh from the two. A first value that stands so far from the next ones is left out;
    /// of two that are all there is, neither is believed.
    Odd,
}

/// What is known of a source besides its tests.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Settings {
    /// Typical change of the level in 90 days (one standard deviation), as a
    /// share of it; see [`SourceKind::change_in_90_days`].
    pub change_in_90_days: Share,
    /// The precision of a laboratory: the typical change in 90 days is at least
    /// half its standard deviation (assumed).
    pub laboratory: Precision,
    /// What was believed before any test.
    pub prior: Option<Prior>,
    /// What the supplier says the level ranges over.
    pub supplier_range: Option<Range>,
    /// What to do with odd results.
    pub damping: Damping,
}

impl Settings {
    /// The defaults for one analyte of one kind of source: nothing known from the
    /// supplier, odd results damped.
    #[must_use]
    pub const fn new(source: SourceKind, analyte: Analyte) -> Self {
        Self {
            change_in_90_days: source.change_in_90_days(),
            laboratory: Precision::of(Method::Laboratory, analyte),
            prior: None,
            supplier_range: None,
            damping: Damping::Odd,
        }
    }

    /// The drift to expect at `level`, before any result has spoken.
    #[must_use]
    pub fn expected_drift(&self, level: Value) -> Drift {
        let usual = self.change_in_90_days.get() * level.get().abs();
        let least = self.laboratory.sd_at(level).get() / 2.0;
        Drift::from_change(Sd::clamped(usual.max(least)), Days::constant(90.0))
    }
}

/// The level on a day, and what its uncertainty is made of. Two standard
/// deviations either side hold it about 19 times in 20.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Level {
    /// Best estimate, caller's unit. It can be a little below zero when results
    /// are near zero; show that as none.
    pub value: Value,
    /// Standard deviation, the root of the sum of the squares of the next two.
    pub sd: Sd,
    /// The part that stood when the last test was taken: the methods' errors,
    /// the prior, and the drift between earlier tests.
    pub sd_at_last_test: Sd,
    /// The part that time since the last test has added.
    pub sd_from_ageing: Sd,
    /// Time since the last test; `None` when only the prior speaks.
    pub age: Option<Days>,
    /// The drift this history suggests (mean of its logarithm).
    pub drift: Drift,
    /// Whether the uncertainty has stopped growing because it spans the range
    /// known for this source.
    pub saturated: bool,
}

/// The level on the day `on`, from the prior and the tests up to that day; later
/// ones are left out. Observations come in any order; leave excluded ones out.
///
/// The drift is not known either: 31 values of it are tried, each weighed by
/// how well it explains the history and by how usual it is, and the level is
/// their average.
///
/// The standard deviation grows with the age of the last test up to half the
/// range known for the source: the supplier's, widened by what has been found;
/// or, with 8 results over a year, what has been found. Without such a range it
/// grows without limit.
///
/// Without a prior the first result starts the history: a value with its own
/// precision, a "less than" as anywhere from nothing to the limit. `None` when
/// there is neither a test nor a prior.
#[must_use]
pub fn today(observations: &[Observation], settings: &Settings, on: Day) -> Option<Level> {
    let series = Series::new(observations, settings, Some(on))?;
    let age = series.readings.last().map(|last| on.since(last.day));
    let days = age.map_or(0.0, Days::get);
    let expected = settings.expected_drift(series.level);

    let grid = (0..GRID_POINTS)
        .map(|point| {
            let step = f64::from(point) / f64::from(GRID_POINTS - 1);
            let shift = GRID_HALF_SPAN * (2.0 * step - 1.0);
            let drift = Drift::clamped(expected.get() * 10_f64.powf(shift));
            let run = series.run(drift, |_| ())?;
            let log_weight = run.log_likelihood - (shift / DRIFT_PRIOR_SD).powi(2) / 2.0;
            Some((log_weight, drift.get(), run.state))
        })
        .collect::<Option<Vec<_>>>()?;

    let highest = grid
        .iter()
        .fold(f64::NEG_INFINITY, |high, point| high.max(point.0));
    let weigh = |of: &dyn Fn(f64, State) -> f64| {
        let (sum, total) = grid
            .iter()
            .fold((0.0, 0.0), |(sum, total), &(log, drift, state)| {
                let weight = (log - highest).exp();
                (sum + weight * of(drift, state), total + weight)
            });
        sum / total
    };
    let mean = weigh(&|_, state| state.mean);
    let at_last = weigh(&|_, state| state.variance + (state.mean - mean).powi(2));
    let drift_per_day = weigh(&|drift, _| drift);
    let log_drift = weigh(&|drift, _| drift.log10());

    let grown = at_last + drift_per_day * days;
    // Half the known range, but never less than the last test left.
    let ceiling = series
        .known_range(settings.supplier_range)
        .map_or(f64::INFINITY, |range| (range / 2.0).powi(2).max(at_last));
    let variance = grown.min(ceiling);
    Some(Level {
        value: Value::clamped(mean),
        sd: Sd::clamped(variance.sqrt()),
        sd_at_last_test: Sd::clamped(at_last.sqrt()),
        sd_from_ageing: Sd::clamped((variance - at_last).max(0.0).sqrt()),
        age,
        drift: Drift::clamped(10_f64.powf(log_drift)),
        saturated: grown > ceiling,
    })
}

/// The level believed at one moment.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Belief {
    /// Mean, caller's unit.
    pub mean: Value,
    /// Standard deviation.
    pub sd: Sd,
}

/// One test's turn in the filter.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Turn {
    /// The test.
    pub observation: Observation,
    /// The level expected just before it; `None` when it starts the filter.
    pub predicted: Option<Belief>,
    /// The level just after it.
    pub level: Belief,
    /// What it counted: 1 in full, less when damped.
    pub weight: Share,
}

/// The history of a level at one known drift.
#[derive(Clone, Debug, PartialEq)]
pub struct Filtered {
    /// Every test in order of its day, but for a first one left out as odd.
    pub turns: Vec<Turn>,
    /// Natural logarithm of the likelihood of the results, without the one that
    /// started the filter. Where odd results are damped, each may be a slip.
    pub log_likelihood: f64,
}

/// Follows the level from test to test at one known drift, such as the one
/// [`today`] found: for a chart, and for pointing at the odd results.
#[must_use]
pub fn filter(observations: &[Observation], settings: &Settings, drift: Drift) -> Filtered {
    let mut turns = Vec::with_capacity(observations.len());
    let run = Series::new(observations, settings, None)
        .and_then(|series| series.run(drift, |turn| turns.push(turn)));
    let log_likelihood = run.map_or(0.0, |run| run.log_likelihood);
    Filtered {
        turns,
        log_likelihood,
    }
}

/// The level after every turn as the whole history sees it, later tests included.
#[must_use]
pub fn smooth(filtered: &Filtered) -> Vec<Belief> {
    let mut smoothed: Vec<Belief> = filtered.turns.iter().map(|turn| turn.level).collect();
    for i in (0..smoothed.len().saturating_sub(1)).rev() {
        let Some(predicted) = filtered.turns[i + 1].predicted else {
            continue;
        };
        let (level, next, predicted) = (
            State::from(smoothed[i]),
            State::from(smoothed[i + 1]),
            State::from(predicted),
        );
        let gain = level.variance / predicted.variance;
        smoothed[i] = State {
            mean: level.mean + gain * (next.mean - predicted.mean),
            variance: level.variance + gain * gain * (next.variance - predicted.variance),
        }
        .into();
    }
    smoothed
}

/// What may be done with a result that lies far from what was expected.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Oddity {
    /// It counts in full.
    Impossible,
    /// Either it is wrong or the one before.
    Undecided,
    /// It counts for less.
    Damped,
}

/// Mean and variance of a level.
#[derive(Clone, Copy)]
struct State {
    mean: f64,
    variance: f64,
}

impl From<Belief> for State {
    fn from(belief: Belief) -> Self {
        Self {
            mean: belief.mean.get(),
            variance: belief.sd.get().powi(2),
        }
    }
}

impl From<State> for Belief {
    fn from(state: State) -> Self {
        Self {
            mean: Value::clamped(state.mean),
            sd: Sd::clamped(state.variance.max(0.0).sqrt()),
        }
    }
}

/// A test with what the series says of it.
struct Reading {
    observation: Observation,
    day: Day,
    /// Standard deviation at the level of the series.
    sd: f64,
    /// Whether a repeat agrees with it.
    confirmed: bool,
}

impl Reading {
    fn measured(&self) -> Option<f64> {
        match self.observation.finding {
            Finding::Measured(value) => Some(value.get()),
            Finding::Below(_) => None,
        }
    }

    /// Whether a later or earlier result makes this one believable.
    fn confirmed_by(&self, repeat: &Self) -> bool {
        self.measured()
            .zip(repeat.measured())
            .is_some_and(|(a, b)| {
                (a - b).abs() < REPEAT_AGREES_SDS * self.sd.hypot(repeat.sd)
                    && repeat.sd <= REPEAT_COARSER * self.sd
            })
    }
}

/// A history ready to be run: tests in order, none of them after the day asked.
struct Series {
    readings: Vec<Reading>,
    prior: Option<Prior>,
    damping: Damping,
    /// Where the series lies; methods' precision is taken here.
    level: Value,
    /// Probability density of a slip: even over twice the level, or ten standard
    /// deviations of a result where that is more.
    slip_density: f64,
}

/// Where a run of the filter ended.
struct Run {
    state: State,
    log_likelihood: f64,
}

impl Series {
    /// `None` when there is nothing to start from.
    fn new(observations: &[Observation], settings: &Settings, until: Option<Day>) -> Option<Self> {
        let mut kept: Vec<Observation> = observations
            .iter()
            .copied()
            .filter(|observation| until.is_none_or(|until| observation.day <= until))
            .collect();
        kept.sort_by(|a, b| a.day.get().total_cmp(&b.day.get()));
        let level = level_of(&kept, settings.prior)?;
        let mut readings: Vec<Reading> = kept
            .into_iter()
            .map(|observation| Reading {
                observation,
                day: observation.day,
                sd: observation.precision.sd_at(level).get(),
                confirmed: false,
            })
            .collect();
        for i in 0..readings.len() {
            for j in i + 1..readings.len() {
                if readings[j].day.since(readings[i].day).get() > REPEAT_WITHIN_DAYS {
                    break;
                }
                let (first, repeat) = (&readings[i], &readings[j]);
                let (forth, back) = (first.confirmed_by(repeat), repeat.confirmed_by(first));
                readings[i].confirmed |= forth;
                readings[j].confirmed |= back;
            }
        }
        if settings.damping == Damping::Odd && settings.prior.is_none() {
            // Each judged by those that follow, so this ends.
            while first_is_odd(&readings) {
                readings.remove(0);
            }
        }
        let coarsest = readings
            .iter()
            .fold(0.0_f64, |most, next| most.max(next.sd));
        let reach = (2.0 * level.get().abs()).max(10.0 * coarsest);
        Some(Self {
            readings,
            prior: settings.prior,
            damping: settings.damping,
            level,
            slip_density: 1.0 / reach.max(Sd::LOW),
        })
    }

    /// The filter at one drift; `None` when nothing starts it.
    fn run(&self, drift: Drift, mut each: impl FnMut(Turn)) -> Option<Run> {
        let mut state = self.prior.map(|prior| State {
            mean: prior.mean.get(),
            variance: prior.sd.get().powi(2),
        });
        let mut log_likelihood = 0.0;
        // The prior has no date: it is the expectation on the first day.
        let mut day = self.readings.first().map(|first| first.day);
        // The level as the result just damped alone would have it.
        let mut doubted: Option<State> = None;
        for (before, reading) in self.readings.iter().enumerate() {
            let noise = reading.sd.powi(2);
            let gap = day.map_or(0.0, |day| reading.day.since(day).get());
            let aged = |state: State| State {
                mean: state.mean,
                variance: state.variance + drift.get() * gap,
            };
            let predicted = state.map(aged);
            let oddity = if self.damping == Damping::Off || reading.confirmed {
                Oddity::Impossible
            } else if before < LEAST_BEFORE_ODD && self.prior.is_none() {
                Oddity::Undecided
            } else {
                Oddity::Damped
            };
            let mut update = match (predicted, reading.observation.finding) {
                (None, finding) => Update::started(finding, noise),
                (Some(predicted), Finding::Measured(value)) => {
                    predicted.measured(value.get(), noise, oddity, self.slip_density)
                }
                (Some(predicted), Finding::Below(limit)) => predicted.below(limit.get(), noise),
            };
            if let Some(value) = reading.measured() {
                if update.weight >= 1.0 {
                    doubted = None;
                } else if let Some(afresh) = doubted
                    .map(aged)
                    .and_then(|doubted| doubted.joined_by(value, noise))
                {
                    // Two odd results in a row that agree: the level jumped.
                    update.state = afresh;
                    update.weight = 1.0;
                    doubted = None;
                } else {
                    doubted = Some(State {
                        mean: value,
                        variance: noise,
                    });
                }
            }
            log_likelihood += update.log_likelihood;
            state = Some(update.state);
            day = Some(reading.day);
            each(Turn {
                observation: reading.observation,
                predicted: predicted.map(Belief::from),
                level: update.state.into(),
                weight: Share::clamped(update.weight),
            });
        }
        state.map(|state| Run {
            state,
            log_likelihood,
        })
    }

    /// Greatest less least level known; `None` while too little is known.
    fn known_range(&self, supplier: Option<Range>) -> Option<f64> {
        let measured = self.readings.iter().filter_map(Reading::measured);
        let (first, last) = (self.readings.first(), self.readings.last());
        let span = first
            .zip(last)
            .map_or(0.0, |(first, last)| last.day.since(first.day).get());
        let enough = measured.count() >= RANGE_KNOWN_RESULTS && span >= RANGE_KNOWN_DAYS;
        if supplier.is_none() && !enough {
            return None;
        }
        let ends = supplier.map(|range| [range.least.get(), range.greatest.get()]);
        let (mut least, mut greatest) = (f64::INFINITY, f64::NEG_INFINITY);
        for end in ends.iter().flatten() {
            least = least.min(*end);
            greatest = greatest.max(*end);
        }
        for reading in &self.readings {
            match reading.observation.finding {
                Finding::Measured(value) => {
                    least = least.min(value.get());
                    greatest = greatest.max(value.get());
                }
                // The level was somewhere under the limit.
                Finding::Below(limit) => least = least.min(limit.get()),
            }
        }
        Some(greatest - least)
    }
}

/// Median of the measured values; without any, the prior's mean; without that,
/// half the median limit.
fn level_of(observations: &[Observation], prior: Option<Prior>) -> Option<Value> {
    let (mut values, mut limits) = (Vec::new(), Vec::new());
    for observation in observations {
        match observation.finding {
            Finding::Measured(value) => values.push(value),
            Finding::Below(limit) => limits.push(limit),
        }
    }
    median(&values)
        .or(prior.map(|prior| prior.mean))
        .or_else(|| median(&limits).map(|limit| Value::clamped(limit.get() / 2.0)))
}

/// Whether the first result is a value that stands apart from the next ones. It
/// would start the filter, where nothing could damp it; being the oldest, it is
/// the one least missed.
fn first_is_odd(readings: &[Reading]) -> bool {
    let Some((first, rest)) = readings.split_first() else {
        return false;
    };
    let Some(value) = first.measured() else {
        return false;
    };
    let judges = rest
        .iter()
        .filter_map(|reading| Some((reading.measured()?, reading.sd)))
        .take(JUDGES_OF_FIRST);
    let (found, sds): (Vec<f64>, Vec<f64>) = judges.unzip();
    if first.confirmed || found.len() < LEAST_BEFORE_ODD {
        return false;
    }
    let middle = middle(&found);
    let distances: Vec<f64> = found.iter().map(|found| (found - middle).abs()).collect();
    let scatter = (SD_PER_MAD * self::middle(&distances)).max(self::middle(&sds));
    (value - middle).abs() > DAMPING_LIMIT * scatter.hypot(first.sd)
}

fn middle(numbers: &[f64]) -> f64 {
    let values: Vec<Value> = numbers.iter().copied().map(Value::clamped).collect();
    median(&values).map_or(f64::NAN, Value::get)
}

/// A level after a test.
struct Update {
    state: State,
    log_likelihood: f64,
    weight: f64,
}

impl Update {
    /// The first result, with nothing expected before it.
    fn started(finding: Finding, noise: f64) -> Self {
        let state = match finding {
            Finding::Measured(value) => State {
                mean: value.get(),
                variance: noise,
            },
            // An even spread from nothing to the limit has variance limit²/12.
            Finding::Below(limit) => State {
                mean: limit.get() / 2.0,
                variance: limit.get().powi(2) / 12.0 + noise,
            },
        };
        Self {
            state,
            log_likelihood: 0.0,
            weight: 1.0,
        }
    }
}

impl State {
    fn measured(self, value: f64, noise: f64, oddity: Oddity, slip_density: f64) -> Update {
        let miss = value - self.mean;
        let usual = self.variance + noise;
        let log_density = -((2.0 * PI * usual).ln() + miss * miss / usual) / 2.0;
        // A slip says nothing of the drift: without this a typing error in the
        // last result would pass for proof that the level can jump.
        let log_likelihood = match oddity {
            Oddity::Impossible => log_density,
            Oddity::Undecided | Oddity::Damped => {
                ((1.0 - SLIPS) * log_density.exp() + SLIPS * slip_density).ln()
            }
        };
        let oddness = miss.abs() / usual.sqrt();
        if oddness > DAMPING_LIMIT && oddity == Oddity::Undecided {
            // Either this one is right or what came before, evenly: the mean and
            // variance of the two together.
            let within = f64::midpoint(self.variance, noise);
            return Update {
                state: Self {
                    mean: self.mean + miss / 2.0,
                    variance: within + miss * miss / 4.0,
                },
                log_likelihood,
                weight: 0.5,
            };
        }
        let weight = if oddness > DAMPING_LIMIT && oddity == Oddity::Damped {
            DAMPING_LIMIT / oddness
        } else {
            1.0
        };
        let total = usual / weight;
        Update {
            state: Self {
                mean: self.mean + self.variance / total * miss,
                variance: self.variance * ((total - self.variance) / total),
            },
            log_likelihood,
            weight,
        }
    }

    /// The level from this and a result that agrees with it.
    fn joined_by(self, value: f64, noise: f64) -> Option<Self> {
        let total = self.variance + noise;
        let agrees = (value - self.mean).abs() < REPEAT_AGREES_SDS * total.sqrt();
        agrees.then(|| Self {
            mean: self.mean + self.variance / total * (value - self.mean),
            variance: self.variance * (noise / total),
        })
    }

    /// Moments of the level given that a reading of it fell below `limit`.
    fn below(self, limit: f64, noise: f64) -> Update {
        let total = self.variance + noise;
        let tail = LowerTail::at((limit - self.mean) / total.sqrt());
        Update {
            state: Self {
                mean: self.mean - self.variance / total.sqrt() * tail.ratio,
                variance: self.variance * (1.0 - self.variance / total * tail.shrinkage),
            },
            log_likelihood: tail.log_probability,
            weight: 1.0,
        }
    }
}
