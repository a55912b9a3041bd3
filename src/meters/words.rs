//! Meters and calibrations as pages tell them.

use chemistry::electrode::{Buffer, Electrode};
use chemistry::quantity::{Millivolts, Ph, PhShift};
use jiff::tz::TimeZone;

use super::entered::day;
use super::{BufferRead, Calibration, Meter, Method, Standing, Verdict};
use crate::brewery::{Settings, Units};
use crate::id::{CalibrationId, UtcTime};
use crate::web::chart::DoubtShare;
use crate::web::format;
use crate::web::units::Measure;

impl Verdict {
    /// The badge it wears.
    pub const fn badge(self) -> &'static str {
        match self {
            Self::Good => "done",
            Self::Ageing => "doubtful",
            Self::DoNotUse => "overdue",
            Self::NotCalibrated => "draft",
        }
    }
}

/// The brewery's time zone.
pub fn zone(settings: &Settings) -> TimeZone {
    TimeZone::get(&settings.time_zone).unwrap_or(TimeZone::UTC)
}

/// When a calibration was done, seen from now: “today at 06:15”, “31 hours ago”.
pub fn since(at: UtcTime, now: UtcTime, settings: &Settings) -> String {
    let zone = zone(settings);
    let hours = now.seconds_since(at).max(0) / 3600;
    if day(at, &zone) == day(now, &zone) {
        let clock = at.timestamp().to_zoned_datetime(zone).strftime("%H:%M");
        format!("today at {clock}")
    } else if hours < 48 {
        format!("{hours} hours ago")
    } else {
        format!("{} days ago", hours / 24)
    }
}

/// A slope as people read it.
pub fn slope(electrode: Electrode) -> String {
    format::decimals(electrode.slope.get(), 1)
}

/// An offset as people read it.
pub fn offset(electrode: Electrode) -> String {
    format::decimals(electrode.offset.get(), 1)
}

/// What to do about a meter, in plain words.
#[derive(Clone, Debug)]
pub struct Advice {
    /// The notice it stands in: `info`, `doubt` or `danger`.
    pub kind: &'static str,
    /// In a few words.
    pub title: &'static str,
    /// What was found.
    pub found: String,
    /// What to do now.
    pub todo: &'static str,
}

impl Advice {
    /// What to do about a meter that stands so.
    pub fn of(standing: &Standing, last: Option<&Calibration>) -> Self {
        let Some(last) = last else {
            return Self {
                kind: "doubt",
                title: "Not calibrated",
                found: "Nothing is known of this meter: a reading may be 0.3 pH out, and no dose is advised on one."
                    .into(),
                todo: "Calibrate it in two fresh buffers, 7 and 4.",
            };
        };
        let found = format!(
            "The electrode gives {} % of the ideal slope and {} mV at pH 7.{}",
            slope(last.electrode),
            offset(last.electrode),
            if outside_slope(last.electrode) || outside_offset(last.electrode) {
                format!(" {}", outside(last.electrode))
            } else {
                String::new()
            }
        );
        match (standing.verdict, standing.fresh) {
            (Verdict::DoNotUse, _) => Self {
                kind: "danger",
                title: "Do not use this meter",
                found,
                todo: "Clean the electrode and its junction, take fresh buffers and calibrate again. If it stays so, \
                       replace the electrode. Readings are kept, and no dose is advised on them.",
            },
            (_, false) => Self {
                kind: "doubt",
                title: "Calibrate it before the next reading",
                found,
                todo: "Its last calibration is more than a day old. Readings are kept, and no dose is advised on them.",
            },
            (Verdict::Ageing, true) => Self {
                kind: "doubt",
                title: "Ageing: still in service",
                found,
                todo: "Readings count. Clean the electrode, and have a new one ready.",
            },
            (Verdict::Good | Verdict::NotCalibrated, true) => Self {
                kind: "info",
                title: "Good",
                found,
                todo: "Readings count.",
            },
        }
    }
}

fn outside_slope(electrode: Electrode) -> bool {
    !(95.0..=102.0).contains(&electrode.slope.get())
}

fn outside_offset(electrode: Electrode) -> bool {
    electrode.offset.get().abs() > 30.0
}

/// What about an electrode is not good.
fn outside(electrode: Electrode) -> &'static str {
    match (outside_slope(electrode), outside_offset(electrode)) {
        (true, true) => "Good are 95 to 102 % and ±30 mV.",
        (true, false) => "A good slope is 95 to 102 %.",
        _ => "A good offset is within ±30 mV.",
    }
}

/// What is doubtful about a calibration although it was kept.
pub fn doubts(calibration: &Calibration, settings: &Settings) -> Vec<String> {
    let mut doubts = Vec::new();
    let on = day(calibration.calibrated_at, &zone(settings));
    for read in calibration.buffers.iter().filter(|read| read.stale(on)) {
        let by = read.use_by.map(|date| date.to_string()).unwrap_or_default();
        doubts.push(format!(
            "The buffer {} was past its date, {by}. A stale buffer may be 0.1 to 0.3 out, and the meter with it.",
            name(read)
        ));
    }
    let (low, high) = calibration
        .buffers
        .iter()
        .fold((14.0_f64, 0.0_f64), |(low, high), read| {
            (low.min(read.ph.get()), high.max(read.ph.get()))
        });
    if !(low..=high).contains(&super::QUOTED_PH.get()) {
        doubts.push(
            "A mash does not lie between these buffers, so that their errors count for more. Take 7 and 4.".into(),
        );
    }
    if calibration.before == Some(Electrode::IDEAL) {
        doubts.push(
            "What the meter was set to before is not known; slope 100 % and offset 0 mV are assumed. The next calibration \
             is told from this one."
                .into(),
        );
    }
    if calibration
        .residual
        .is_some_and(|residual| residual.get() > 0.05)
    {
        doubts.push(
            "The buffers do not lie on one line. One of them may be stale, or was read too soon."
                .into(),
        );
    }
    doubts
}

/// The parts of a doubt, largest first; shares of the squares.
pub fn shares(standing: &Standing) -> Vec<DoubtShare> {
    let Some(doubt) = &standing.doubt else {
        return Vec::new();
    };
    let whole = doubt.sd.get().powi(2);
    doubt
        .parts
        .iter()
        .map(|(part, sd)| DoubtShare {
            label: part.name().into(),
            width: (10_000.0 * sd.get().powi(2) / whole).round() / 100.0,
            text: format!("±\u{a0}{}", format::doubt(sd.get())),
        })
        .collect()
}

/// What a buffer is called.
pub fn name(read: &BufferRead) -> String {
    read.buffer
        .map_or_else(|| format::ph(read.ph.get()), |buffer| buffer.name().into())
}

/// One line of the list of calibrations.
#[derive(Clone, Debug)]
pub struct CalibrationRow {
    /// Its identifier.
    pub id: CalibrationId,
    /// When, in the brewery's time zone.
    pub at: String,
    /// What the meter showed.
    pub method: &'static str,
    /// In per cent.
    pub slope: String,
    /// In mV.
    pub offset: String,
    /// The badge of its verdict.
    pub badge: &'static str,
    /// Its verdict.
    pub verdict: &'static str,
    /// Who entered it.
    pub by: String,
    /// Whether it was withdrawn.
    pub withdrawn: bool,
}

impl CalibrationRow {
    /// A calibration in the list.
    pub fn of(calibration: &Calibration, settings: &Settings) -> Self {
        let withdrawn = calibration.withdrawn.is_some();
        let verdict = calibration.verdict();
        Self {
            id: calibration.id,
            at: format::moment(calibration.calibrated_at, &settings.time_zone),
            method: calibration.method.name(),
            slope: slope(calibration.electrode),
            offset: offset(calibration.electrode),
            badge: if withdrawn {
                "withdrawn"
            } else {
                verdict.badge()
            },
            verdict: if withdrawn {
                "Withdrawn"
            } else {
                verdict.name()
            },
            by: calibration.entered_by.clone(),
            withdrawn,
        }
    }
}

/// One buffer of a calibration on its own page.
#[derive(Clone, Debug)]
pub struct BufferShown {
    /// What it is called.
    pub name: String,
    /// Its pH, and by which table.
    pub ph: String,
    /// Whose table that is.
    pub table: &'static str,
    /// Its temperature with the unit.
    pub temperature: String,
    /// Lot and date.
    pub bottle: String,
    /// What was read, with the unit.
    pub reading: String,
    /// What the meter showed afterwards.
    pub after: String,
}

impl BufferShown {
    /// A buffer as it was read.
    pub fn of(read: &BufferRead, method: Method, units: Units) -> Self {
        let bottle: Vec<String> = [
            read.lot.as_ref().map(|lot| format!("lot {lot}")),
            read.use_by.map(|date| format!("use by {date}")),
        ]
        .into_iter()
        .flatten()
        .collect();
        let figure = |ph: Option<Ph>| ph.map(|ph| format::ph(ph.get())).unwrap_or_default();
        Self {
            name: name(read),
            ph: format::ph(read.ph.get()),
            table: match (read.own_ph, read.buffer) {
                (true, _) | (_, None) => "from the bottle",
                (false, Some(Buffer::Nist4 | Buffer::Nist7 | Buffer::Nist9)) => "NIST table",
                (false, Some(_)) => "technical table",
            },
            temperature: units.show(Measure::Temperature, read.temperature.get()),
            bottle: bottle.join(", "),
            reading: match method {
                Method::Millivolts => read
                    .reading
                    .map(|mv| format!("{} mV", format::decimals(Millivolts::get(mv), 1)))
                    .unwrap_or_default(),
                Method::Ph => figure(read.before),
                Method::Display => String::new(),
            },
            after: figure(read.after),
        }
    }
}

/// What the last digit of a meter is.
pub fn resolution(meter: &Meter) -> String {
    format::entered(PhShift::get(meter.resolution))
}
