//! One figure of a source through time, laid out for the chart.

use chemistry::report::{Analyte, Qualifier};
use jiff::civil::Date;

use super::todays_water::{self, Seen};
use super::water_tests::WaterTest;
use super::{TodaysFigure, days_between};
use crate::error::Error;
use crate::web::chart::{Level, Mark, Trend, TrendPoint};
use crate::web::format;

/// A figure with its unit, rounded for reading.
pub(super) fn amount(analyte: Analyte, value: f64) -> String {
    format!(
        "{} {}",
        bare(analyte, value),
        analyte.canonical_unit().label()
    )
    .trim_end()
    .to_owned()
}

/// A figure without its unit, rounded for reading.
pub(super) fn bare(analyte: Analyte, value: f64) -> String {
    match analyte {
        Analyte::Ph => format::ph(value),
        _ => format::figure(value),
    }
}

/// How far a figure may be out, without its unit.
pub(super) fn doubt(analyte: Analyte, sd: f64) -> String {
    match analyte {
        Analyte::Ph => format::ph(sd),
        _ => format::doubt(sd),
    }
}

/// A figure with its doubt and unit, rounded for reading.
fn estimate(analyte: Analyte, value: f64, sd: f64) -> String {
    let unit = analyte.canonical_unit().label();
    let text = format!("{} ± {} {unit}", bare(analyte, value), doubt(analyte, sd));
    text.trim_end().to_owned()
}

/// What every test says of one analyte, with whether it counts; oldest first.
pub(super) fn history(tests: &[WaterTest], analyte: Analyte) -> Result<Vec<(Seen, bool)>, Error> {
    let mut points = Vec::new();
    for test in tests.iter().rev() {
        let seen = todays_water::seen(test)?;
        let of_analyte = seen.into_iter().find(|s| s.figure.analyte() == analyte);
        points.extend(of_analyte.map(|seen| (seen, test.counts())));
    }
    Ok(points)
}

/// The chart of a history with at least two tests, up to `today`.
pub(super) fn trend(
    history: &[(Seen, bool)],
    todays: Option<&TodaysFigure>,
    today: Date,
) -> Option<Trend> {
    let ((first, _), (last, _)) = (history.first()?, history.last()?);
    if history.len() < 2 {
        return None;
    }
    let analyte = first.figure.analyte();
    let ends = |seen: &Seen| {
        (
            seen.figure.best() - seen.figure.sd(),
            seen.figure.best() + seen.figure.sd(),
        )
    };
    let estimates = todays.map(|t| (t.value - t.sd, t.value + t.sd));
    let (mut low, mut high) = history
        .iter()
        .map(|(seen, _)| ends(seen))
        .chain(estimates)
        .fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), (a, b)| {
            (low.min(a), high.max(b))
        });
    let margin = (0.1 * (high - low)).max(1e-6);
    high += margin;
    low -= margin;
    let y = |value: f64| 100.0 * (high - value) / (high - low);
    #[allow(clippy::cast_precision_loss, reason = "days of a few centuries")]
    let x = |date: Date| {
        let whole = days_between(first.sampled_on, today).max(1) as f64;
        100.0 * days_between(first.sampled_on, date) as f64 / whole
    };
    let point = |(seen, counts): &(Seen, bool)| {
        let (value, sd) = (seen.figure.best(), seen.figure.sd());
        let below = seen.figure.canonical().qualifier() == Qualifier::Below;
        let found = if below {
            format!("below {}", amount(analyte, seen.figure.canonical().get()))
        } else {
            estimate(analyte, value, sd)
        };
        TrendPoint {
            x: x(seen.sampled_on),
            y: y(value),
            top: y(value + sd),
            height: y(value - sd) - y(value + sd),
            state: if *counts { "plain" } else { "left-out" },
            text: format!("{}: {found}", seen.sampled_on),
        }
    };
    let points: Vec<TrendPoint> = history.iter().map(point).collect();
    let counting = points.iter().filter(|point| point.state == "plain");
    let path: Vec<String> = counting
        .map(|point| format!("{:.2},{:.2}", point.x, point.y))
        .collect();
    let extreme = |words: &str, pick: fn(f64, f64) -> f64| {
        let value = history
            .iter()
            .map(|(seen, _)| seen.figure.best())
            .reduce(pick)?;
        let text = format!("{words} {}", amount(analyte, value));
        Some(Level { y: y(value), text })
    };
    let centre = todays.map(|t| Level {
        y: y(t.value),
        text: format!("today {}", estimate(analyte, t.value, t.sd)),
    });
    Some(Trend {
        text: format!(
            "{} in {} tests from {} to {}: from {} to {}.{}",
            capital(analyte.name()),
            history.len(),
            first.sampled_on,
            last.sampled_on,
            amount(analyte, first.figure.best()),
            amount(analyte, last.figure.best()),
            centre
                .as_ref()
                .map_or(String::new(), |level| format!(" Taken as {}.", level.text)),
        ),
        path: path.join(" "),
        limits: [extreme("highest", f64::max), extreme("lowest", f64::min)]
            .into_iter()
            .flatten()
            .collect(),
        centre,
        points,
        dates: vec![
            Mark {
                x: 0.0,
                text: first.sampled_on.to_string(),
            },
            Mark {
                x: 100.0,
                text: today.to_string(),
            },
        ],
    })
}

/// The words at the beginning of a sentence or in a table; pH keeps its small p.
pub(super) fn capital(words: &str) -> String {
    let mut letters = words.chars();
    match letters.next() {
        Some(first) if !words.starts_with("pH") => {
            first.to_uppercase().collect::<String>() + letters.as_str()
        }
        _ => words.to_owned(),
    }
}
