//! What is typed about a meter or a calibration, and the checks it passes.

use chemistry::electrode::{
    self, Buffer, CalibrationError, Electrode, POINTS, Point, check_buffers, nernst_slope,
};
use chemistry::quantity::{Celsius, Millivolts, OutOfRange, Ph, PhShift, SlopePercent};
use jiff::civil::{Date, DateTime};
use jiff::tz::TimeZone;
use serde::{Deserialize, Serialize};

use super::{BufferRead, Calibration, Kind, Meter, Method};
use crate::error::Error;
use crate::id::{CalibrationId, MeterId, UtcTime};
use crate::input::{Flag, Number, Problems, within};

/// A meter as it is entered.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct NewMeterBody {
    /// What the brewery calls it.
    #[schema(required = true, min_length = 1)]
    pub name: String,
    /// `bench`, `handheld` or `inline`.
    #[schema(required = true, min_length = 1)]
    pub kind: String,
    /// The number on it.
    pub serial: String,
    /// Its last digit, pH: 0.01 for most. Blank: 0.01.
    pub resolution_ph: Number,
    /// Whether it corrects its slope for the temperature of the sample.
    pub compensated: Flag,
    /// Anything else.
    pub notes: String,
    /// Whether readings may name it.
    pub in_use: Flag,
}

impl From<&Meter> for NewMeterBody {
    fn from(meter: &Meter) -> Self {
        Self {
            name: meter.name.clone(),
            kind: meter.kind.key().into(),
            serial: meter.serial.clone().unwrap_or_default(),
            resolution_ph: meter.resolution.get().into(),
            compensated: Flag(meter.compensated),
            notes: meter.notes.clone().unwrap_or_default(),
            in_use: Flag(meter.in_use),
        }
    }
}

impl TryFrom<NewMeterBody> for Meter {
    type Error = Error;

    /// A new meter; whoever revises one keeps its identifier and counts its version.
    fn try_from(body: NewMeterBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let name = problems.text("name", &body.name, 80);
        let kind = problems.choice("kind", &body.kind, Kind::from_key);
        let serial = problems.optional_text("serial", &body.serial, 80);
        let resolution =
            problems.optional_quantity("resolution_ph", &body.resolution_ph, |value| {
                within(value, "pH", 0.001, 0.5).map(PhShift::clamped)
            });
        let notes = problems.optional_text("notes", &body.notes, 2000);
        problems.finish()?;
        match (name, kind) {
            (Some(name), Some(kind)) => Ok(Self {
                id: MeterId::new(),
                name,
                kind,
                serial,
                resolution: resolution.unwrap_or(PhShift::constant(0.01)),
                compensated: body.compensated.0,
                notes,
                in_use: body.in_use.0,
                version: 1,
            }),
            _ => Err(Error::field("", "Fill in every field.")),
        }
    }
}

/// One buffer of a calibration as it is typed. One without `buffer` is left out.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct BufferBody {
    /// `technical_4`, `technical_7`, `technical_10`, `nist_4`, `nist_7`, `nist_9` or
    /// `other`.
    pub buffer: String,
    /// Its pH at its temperature by the table on the bottle. Blank: by the set's own
    /// table; `other` has none.
    pub buffer_ph: Number,
    /// The lot on the bottle.
    pub lot: String,
    /// The date on the bottle, `2026-03-31`. May be blank.
    pub use_by: String,
    /// Its temperature, 0 to 50 °C. Blank: that of the calibration.
    pub temperature_c: Number,
    /// What the electrode gave, mV. For `millivolts`.
    pub reading_mv: Number,
    /// What the meter showed before it was adjusted. For `ph`.
    pub before_ph: Number,
    /// What it showed after. May be blank.
    pub after_ph: Number,
}

/// A calibration as it is typed.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct NewCalibrationBody {
    /// When it was done: `2026-03-31T06:15:00Z`, or without a zone in the brewery's own.
    /// Blank: now.
    pub calibrated_at: String,
    /// What the meter showed: `millivolts` or `ph` in each buffer, or `display`: slope and
    /// offset.
    #[schema(required = true, min_length = 1)]
    pub method: String,
    /// Temperature of the buffers, 0 to 50 °C.
    pub temperature_c: Number,
    /// Two to five buffers.
    #[schema(required = true)]
    pub buffers: Vec<BufferBody>,
    /// The slope on the meter's display, in `slope_unit`. For `display`.
    pub slope: Number,
    /// `percent` of Nernst, or `mv_per_ph`. Blank: `percent`.
    pub slope_unit: String,
    /// The offset on the meter's display, mV at pH 7. For `display`.
    pub offset_mv: Number,
    /// Anything else.
    pub notes: String,
}

impl From<&Calibration> for NewCalibrationBody {
    fn from(calibration: &Calibration) -> Self {
        let text = |text: &Option<String>| text.clone().unwrap_or_default();
        let display = calibration.method == Method::Display;
        let buffer = |read: &BufferRead| BufferBody {
            buffer: read.buffer.map_or("other", Buffer::key).into(),
            buffer_ph: read.own_ph.then_some(read.ph.get()).into(),
            lot: text(&read.lot),
            use_by: read.use_by.map(|date| date.to_string()).unwrap_or_default(),
            temperature_c: read.temperature.get().into(),
            reading_mv: read.reading.map(Millivolts::get).into(),
            before_ph: read.before.map(Ph::get).into(),
            after_ph: read.after.map(Ph::get).into(),
        };
        Self {
            calibrated_at: calibration.calibrated_at.to_string(),
            method: calibration.method.key().into(),
            temperature_c: Number::Missing,
            buffers: calibration.buffers.iter().map(buffer).collect(),
            slope: display.then_some(calibration.electrode.slope.get()).into(),
            slope_unit: if display { "percent" } else { "" }.into(),
            offset_mv: display.then_some(calibration.electrode.offset.get()).into(),
            notes: text(&calibration.notes),
        }
    }
}

/// What a calibration is checked against besides itself.
#[derive(Clone, Debug)]
pub struct Setting<'a> {
    /// Of which meter.
    pub meter: &'a Meter,
    /// What the meter is set to, as far as is known.
    pub last: Option<Electrode>,
    /// Now.
    pub now: UtcTime,
    /// The brewery's time zone.
    pub zone: &'a TimeZone,
    /// Who enters it.
    pub by: &'a str,
}

impl NewCalibrationBody {
    /// When it was done, for whoever must know that before the rest is checked.
    pub fn moment(&self, now: UtcTime, zone: &TimeZone) -> Option<UtcTime> {
        let text = self.calibrated_at.trim();
        if text.is_empty() {
            return Some(now);
        }
        if let Ok(at) = text.parse::<jiff::Timestamp>() {
            return Some(at.into());
        }
        let local = text.parse::<DateTime>().ok()?;
        local
            .to_zoned_datetime(zone.clone())
            .ok()
            .map(|at| at.timestamp().into())
    }

    /// A calibration that says something of the electrode.
    pub fn calibration(&self, setting: &Setting<'_>) -> Result<Calibration, Error> {
        let mut problems = Problems::new();
        let checked = calibration(self, setting, &mut problems);
        problems.finish()?;
        checked.ok_or_else(|| Error::field("", "Fill in every field."))
    }
}

fn calibration(
    body: &NewCalibrationBody,
    setting: &Setting<'_>,
    problems: &mut Problems,
) -> Option<Calibration> {
    let calibrated_at = calibrated_at(body, setting, problems);
    let method = problems.choice("method", &body.method, Method::from_key);
    let temperature =
        problems.optional_quantity("temperature_c", &body.temperature_c, buffer_temperature);
    let buffers = buffers(body, method, temperature, problems);
    let notes = problems.optional_text("notes", &body.notes, 2000);
    let (method, buffers) = (method?, buffers?);
    let found = match method {
        Method::Millivolts => fitted(&buffers, problems).map(|fit| (fit, None)),
        Method::Ph => worked_back(&buffers, setting.last, problems),
        Method::Display => displayed(body, &buffers, problems).map(|fit| (fit, None)),
    };
    let (fit, before) = found?;
    Some(Calibration {
        id: CalibrationId::new(),
        meter_id: setting.meter.id,
        calibrated_at: calibrated_at?,
        method,
        buffers,
        electrode: fit.electrode,
        residual: fit.residual,
        before,
        notes,
        entered_at: setting.now,
        entered_by: setting.by.to_owned(),
        withdrawn: None,
    })
}

fn calibrated_at(
    body: &NewCalibrationBody,
    setting: &Setting<'_>,
    problems: &mut Problems,
) -> Option<UtcTime> {
    let Some(at) = body.moment(setting.now, setting.zone) else {
        problems.add(
            "calibrated_at",
            "Enter day and time, for example 2026-03-31T06:15, or leave this blank for now.",
        );
        return None;
    };
    // A minute for clocks that differ.
    if at.seconds_since(setting.now) > 60 {
        problems.add(
            "calibrated_at",
            "That has not come yet. Enter a moment that is past, or leave this blank for now.",
        );
        return None;
    }
    if at
        .timestamp()
        .to_zoned_datetime(setting.zone.clone())
        .year()
        < 1980
    {
        problems.add("calibrated_at", "The year must be 1980 or later.");
        return None;
    }
    Some(if at > setting.now { setting.now } else { at })
}

fn buffer_temperature(value: f64) -> Result<Celsius, OutOfRange> {
    within(value, "°C", 0.0, 50.0).map(Celsius::clamped)
}

/// The buffers that were used; none when one of them cannot be read.
fn buffers(
    body: &NewCalibrationBody,
    method: Option<Method>,
    temperature: Option<Celsius>,
    problems: &mut Problems,
) -> Option<Vec<BufferRead>> {
    let used: Vec<(usize, &BufferBody)> = body
        .buffers
        .iter()
        .enumerate()
        .filter(|(_, body)| !body.buffer.trim().is_empty())
        .collect();
    // Something was typed into a line that names no buffer.
    for (index, line) in body.buffers.iter().enumerate() {
        let typed = [&line.reading_mv, &line.before_ph, &line.after_ph];
        if line.buffer.trim().is_empty() && typed.iter().any(|number| !number.is_missing()) {
            problems.add(format!("buffers.{index}.buffer"), "Choose the buffer.");
        }
    }
    if used.len() > *POINTS.end() {
        problems.add(
            "buffers",
            format!("{}.", CalibrationError::Count(used.len())),
        );
        return None;
    }
    let needs_common = body.temperature_c.is_missing()
        && used.iter().any(|(_, line)| line.temperature_c.is_missing());
    if needs_common && !used.is_empty() {
        problems.add("temperature_c", "Enter the temperature of the buffers.");
    }
    let mut read = Vec::with_capacity(used.len());
    for (index, line) in &used {
        let line = problems.within(format!("buffers.{index}"), |problems| {
            buffer(line, method, temperature, problems)
        });
        read.extend(line);
    }
    if read.len() < used.len() || !problems.is_empty() {
        return None;
    }
    let points: Vec<(Ph, Celsius)> = read.iter().map(|r| (r.ph, r.temperature)).collect();
    if let Err(error) = check_buffers(&points) {
        problems.add("buffers", format!("{error}."));
        return None;
    }
    Some(read)
}

fn buffer(
    body: &BufferBody,
    method: Option<Method>,
    common: Option<Celsius>,
    problems: &mut Problems,
) -> Option<BufferRead> {
    let other = body.buffer.trim() == "other";
    let buffer = if other {
        None
    } else {
        problems.choice("buffer", &body.buffer, Buffer::from_key)
    };
    let temperature =
        problems.optional_quantity("temperature_c", &body.temperature_c, buffer_temperature);
    let own = problems.optional_quantity("buffer_ph", &body.buffer_ph, |value| {
        within(value, "pH", 1.0, 13.0).map(Ph::clamped)
    });
    if other && body.buffer_ph.is_missing() {
        problems.add("buffer_ph", "Enter its pH from the table on the bottle.");
    }
    let lot = problems.optional_text("lot", &body.lot, 60);
    let use_by = problems.optional_date("use_by", &body.use_by);
    let shown = |value| within(value, "pH", 0.0, 14.0).map(Ph::clamped);
    let reading = needed(
        method == Some(Method::Millivolts),
        ("reading_mv", "Enter the millivolts in this buffer."),
        &body.reading_mv,
        |value| within(value, "mV", -700.0, 700.0).map(Millivolts::clamped),
        problems,
    );
    let before = needed(
        method == Some(Method::Ph),
        (
            "before_ph",
            "Enter the pH that the meter showed in this buffer before it was adjusted.",
        ),
        &body.before_ph,
        shown,
        problems,
    );
    let after = problems.optional_quantity("after_ph", &body.after_ph, shown);
    let temperature = if body.temperature_c.is_missing() {
        common?
    } else {
        temperature?
    };
    let ph = match (buffer, own) {
        (_, Some(own)) => own,
        (Some(buffer), None) if body.buffer_ph.is_missing() => buffer.ph(temperature).ok()?,
        _ => return None,
    };
    if let Some(buffer) = buffer
        && let Ok(table) = buffer.ph(temperature)
        && (table.get() - ph.get()).abs() > 0.3
    {
        problems.add(
            "buffer_ph",
            format!(
                "{} is {:.2} at that temperature, far from {}. Check the bottle, or choose another buffer.",
                buffer.name(),
                table.get(),
                ph.get()
            ),
        );
        return None;
    }
    if let Some(after) = after
        && (after.get() - ph.get()).abs() > 0.5
    {
        problems.add(
            "after_ph",
            format!(
                "The meter shows {} in a buffer of {:.2} although it was just adjusted. Calibrate it again.",
                after.get(),
                ph.get()
            ),
        );
    }
    Some(BufferRead {
        buffer,
        ph,
        own_ph: own.is_some(),
        lot,
        use_by,
        temperature,
        reading,
        before,
        after,
    })
}

/// A quantity that must be there for this method and is left out for the others.
fn needed<Q>(
    asked: bool,
    (field, missing): (&str, &str),
    number: &Number,
    check: impl FnOnce(f64) -> Result<Q, OutOfRange>,
    problems: &mut Problems,
) -> Option<Q> {
    if !asked {
        if !number.is_missing() {
            problems.add(
                field,
                "This way of calibrating does not take it. Leave it blank.",
            );
        }
        return None;
    }
    if number.is_missing() {
        problems.add(field, missing);
        return None;
    }
    problems.quantity(field, number, check)
}

fn fitted(buffers: &[BufferRead], problems: &mut Problems) -> Option<electrode::Fit> {
    let points: Option<Vec<Point>> = buffers
        .iter()
        .map(|read| {
            Some(Point {
                buffer: read.ph,
                temperature: read.temperature,
                reading: read.reading?,
            })
        })
        .collect();
    told(electrode::fit(&points?), problems)
}

/// The electrode behind the pH that a meter showed with the adjustment it had: the last
/// one known, or none at all.
fn worked_back(
    buffers: &[BufferRead],
    last: Option<Electrode>,
    problems: &mut Problems,
) -> Option<(electrode::Fit, Option<Electrode>)> {
    let set = last.unwrap_or(Electrode::IDEAL);
    let points: Option<Vec<Point>> = buffers
        .iter()
        .map(|read| {
            Some(Point {
                buffer: read.ph,
                temperature: read.temperature,
                reading: set.millivolts(read.before?, read.temperature),
            })
        })
        .collect();
    match electrode::fit(&points?) {
        Err(
            CalibrationError::Swapped | CalibrationError::Sign | CalibrationError::SwappedOrSign,
        ) => {
            problems.add(
                "buffers",
                "The pH shown falls where that of the buffers rises: the readings look exchanged. Check which bottle was read first.",
            );
            None
        }
        fit => told(fit, problems).map(|fit| (fit, Some(set))),
    }
}

/// Slope and offset as the meter itself showed them.
fn displayed(
    body: &NewCalibrationBody,
    buffers: &[BufferRead],
    problems: &mut Problems,
) -> Option<electrode::Fit> {
    #[allow(clippy::cast_precision_loss, reason = "at most five")]
    let mean = buffers.iter().map(|r| r.temperature.get()).sum::<f64>() / buffers.len() as f64;
    let nernst = nernst_slope(Celsius::clamped(mean)).get();
    let slope = match body.slope_unit.trim() {
        "" | "percent" => problems.quantity("slope", &body.slope, |value| {
            within(value, "%", 20.0, 120.0).map(SlopePercent::clamped)
        }),
        // Some print it with the sign of the potential's fall.
        "mv_per_ph" => problems.quantity("slope", &body.slope, |value| {
            within(value.abs(), "mV/pH", 10.0, 80.0)
                .map(|value| SlopePercent::clamped(100.0 * value / nernst))
        }),
        _ => {
            problems.add("slope_unit", "Choose % or mV/pH.");
            None
        }
    };
    let offset = problems.quantity("offset_mv", &body.offset_mv, |value| {
        within(value, "mV", -300.0, 300.0).map(Millivolts::clamped)
    });
    Some(electrode::Fit {
        electrode: Electrode {
            slope: slope?,
            offset: offset?,
        },
        residual: None,
    })
}

fn told<T>(fit: Result<T, CalibrationError>, problems: &mut Problems) -> Option<T> {
    match fit {
        Ok(fit) => Some(fit),
        Err(error) => {
            problems.add("buffers", format!("{error}."));
            None
        }
    }
}

/// The day of a moment in the brewery's time zone.
pub fn day(at: UtcTime, zone: &TimeZone) -> Date {
    at.timestamp().to_zoned_datetime(zone.clone()).date()
}
