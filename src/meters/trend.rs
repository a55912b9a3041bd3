//! Slope and offset of a meter through time, laid out for the chart.

use jiff::tz::TimeZone;

use super::Calibration;
use super::entered::day;
use crate::id::UtcTime;
use crate::web::chart::{Level, Mark, Trend, TrendPoint};
use crate::web::format;

/// Most points that can still be told apart on a drawing.
const MOST: usize = 90;

/// A year, s.
const YEAR: i64 = 31_557_600;

/// What is followed.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Followed {
    /// In per cent of the Nernst slope.
    Slope,
    /// In mV at pH 7.
    Offset,
}

impl Followed {
    fn of(self, calibration: &Calibration) -> f64 {
        match self {
            Self::Slope => calibration.electrode.slope.get(),
            Self::Offset => calibration.electrode.offset.get(),
        }
    }

    const fn name(self) -> &'static str {
        match self {
            Self::Slope => "Slope",
            Self::Offset => "Offset",
        }
    }

    /// Where good ends.
    const fn good(self) -> [f64; 2] {
        match self {
            Self::Slope => [95.0, 102.0],
            Self::Offset => [-30.0, 30.0],
        }
    }

    fn words(self, value: f64) -> String {
        match self {
            Self::Slope => format!("{} %", format::decimals(value, 1)),
            Self::Offset => format!("{} mV", format::decimals(value, 1)),
        }
    }
}

/// The chart of a history, newest first, with at least two calibrations that count.
pub(super) fn trend(
    history: &[Calibration],
    followed: Followed,
    now: UtcTime,
    zone: &TimeZone,
) -> Option<Trend> {
    let counting = history.iter().filter(|it| it.withdrawn.is_none());
    if counting.clone().count() < 2 {
        return None;
    }
    let (first, last) = (counting.clone().next_back()?, counting.clone().next()?);
    let begin = history.last()?.calibrated_at;
    #[allow(clippy::cast_precision_loss, reason = "seconds of a few centuries")]
    let x = |at: UtcTime| {
        let whole = now.seconds_since(begin).max(1) as f64;
        (10_000.0 * at.seconds_since(begin) as f64 / whole).round() / 100.0
    };
    let [bottom, top] = followed.good();
    let (low, high) = history
        .iter()
        .map(|calibration| followed.of(calibration))
        .fold((bottom, top), |(low, high), value| {
            (low.min(value), high.max(value))
        });
    let margin = 0.08 * (high - low);
    let (low, high) = (low - margin, high + margin);
    let y = |value: f64| (10_000.0 * (high - value) / (high - low)).round() / 100.0;
    let drawn = thinned(history, &x);
    let points: Vec<TrendPoint> = drawn
        .iter()
        .rev()
        .map(|calibration| {
            let value = followed.of(calibration);
            let at = y(value);
            TrendPoint {
                x: x(calibration.calibrated_at),
                y: at,
                top: at,
                height: 0.0,
                state: if calibration.withdrawn.is_some() {
                    "left-out"
                } else if (bottom..=top).contains(&value) {
                    "plain"
                } else {
                    "signal"
                },
                text: format!(
                    "{}: {}",
                    day(calibration.calibrated_at, zone),
                    followed.words(value)
                ),
            }
        })
        .collect();
    let path: Vec<String> = points
        .iter()
        .filter(|point| point.state != "left-out")
        .map(|point| format!("{},{}", point.x, point.y))
        .collect();
    let level = |value: f64| Level {
        y: y(value),
        text: followed.words(value),
    };
    let dates = [(0.0, begin), (100.0, now)];
    Some(Trend {
        text: format!(
            "{} at {} calibrations from {} to {}: from {} to {}. Good is {} to {}.",
            followed.name(),
            counting.count(),
            day(first.calibrated_at, zone),
            day(last.calibrated_at, zone),
            followed.words(followed.of(first)),
            followed.words(followed.of(last)),
            followed.words(bottom),
            followed.words(top),
        ),
        path: path.join(" "),
        centre: None,
        limits: vec![level(top), level(bottom)],
        points,
        dates: dates
            .into_iter()
            .map(|(x, at)| Mark {
                x,
                text: day(at, zone).to_string(),
            })
            .collect(),
    })
}

/// All of them, or the last of each of [`MOST`] equal stretches of time, newest first.
fn thinned<'a>(
    history: &'a [Calibration],
    place: &impl Fn(UtcTime) -> f64,
) -> Vec<&'a Calibration> {
    if history.len() <= MOST {
        return history.iter().collect();
    }
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_precision_loss,
        reason = "0 to MOST"
    )]
    let stretch = |it: &Calibration| (place(it.calibrated_at) / 100.0 * MOST as f64) as i64;
    let mut drawn: Vec<&Calibration> = Vec::with_capacity(MOST + 1);
    for calibration in history.iter().filter(|it| it.withdrawn.is_none()) {
        if drawn
            .last()
            .is_none_or(|last| stretch(last) != stretch(calibration))
        {
            drawn.push(calibration);
        }
    }
    drawn
}

/// Whether a chart of this history leaves calibrations out.
pub(super) fn leaves_out(history: &[Calibration]) -> bool {
    history.len() > MOST
}

/// How the slope changes in a year, and when it leaves the good range, from a straight line
/// through the last year's calibrations that count. Told only of ten or more over half a
/// year whose fall is four times its own error.
pub(super) fn outlook(history: &[Calibration], now: UtcTime, zone: &TimeZone) -> Option<String> {
    let points: Vec<(f64, f64)> = history
        .iter()
        .filter(|it| it.withdrawn.is_none() && now.seconds_since(it.calibrated_at) < YEAR)
        .map(|it| {
            #[allow(clippy::cast_precision_loss, reason = "seconds of a few centuries")]
            let years = -(now.seconds_since(it.calibrated_at) as f64) / YEAR as f64;
            (years, it.electrode.slope.get())
        })
        .collect();
    let long = points.last().is_some_and(|(years, _)| *years < -0.5);
    if points.len() < 10 || !long {
        return None;
    }
    let line = Line::through(&points);
    if line.rise >= -4.0 * line.rise_sd {
        return None;
    }
    let floor = Followed::Slope.good()[0];
    let begun = format!(
        "The slope falls by {} percentage points a year.",
        format::decimals(-line.rise, 1)
    );
    let years = (floor - line.now) / line.rise;
    if !(0.0..=5.0).contains(&years) {
        return Some(begun);
    }
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_precision_loss,
        reason = "at most five years"
    )]
    let on = day(now.plus_seconds((years * YEAR as f64) as i64), zone);
    Some(format!(
        "{begun} At that pace it leaves the good range, below {floor} %, about {}.",
        on.strftime("%B %Y")
    ))
}

/// A straight line by least squares.
struct Line {
    /// Its value at nothing: now.
    now: f64,
    /// Its rise in a year.
    rise: f64,
    /// One standard error of that.
    rise_sd: f64,
}

impl Line {
    fn through(points: &[(f64, f64)]) -> Self {
        #[allow(clippy::cast_precision_loss, reason = "a few thousand")]
        let count = points.len() as f64;
        let x = points.iter().map(|(x, _)| x).sum::<f64>() / count;
        let y = points.iter().map(|(_, y)| y).sum::<f64>() / count;
        let xx: f64 = points.iter().map(|(px, _)| (px - x).powi(2)).sum();
        let xy: f64 = points.iter().map(|(px, py)| (px - x) * (py - y)).sum();
        let rise = xy / xx;
        let now = y - rise * x;
        let left: f64 = points
            .iter()
            .map(|(px, py)| (py - now - rise * px).powi(2))
            .sum();
        Self {
            now,
            rise,
            rise_sd: (left / (count - 2.0) / xx).sqrt(),
        }
    }
}
