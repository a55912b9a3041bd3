//! What a pH electrode gives, and how far a reading may be believed after a calibration.
//!
//! A glass electrode gives E = offset − slope·(pH − 7), in mV. The slope of an ideal one
//! is the Nernst slope at its temperature; that of a real one is a little less and falls
//! with the years. [`fit`] finds slope and offset from two to five buffers, [`Electrode::verdict`]
//! says whether it is fit for use, and [`Circumstances::doubt`] adds up what a reading may
//! be out by.

use std::fmt;

use crate::quantity::{
    Celsius, Millivolts, MillivoltsPerPh, OutOfRange, Ph, PhShift, SlopePercent,
};

mod buffer;
mod doubt;

pub use buffer::{Buffer, phthalate};
pub use doubt::{Circumstances, Doubt, Part, UNKNOWN, UsedBuffer, slope_error};

/// The pH at which an electrode of the usual make gives nothing.
pub const NEUTRAL: Ph = Ph::constant(7.0);

/// Fewest and most buffers of one calibration. Source: common practice, no source.
pub const POINTS: std::ops::RangeInclusive<usize> = 2..=5;

/// Nearest that the outermost buffers of a calibration may lie: nearer, the slope is
/// mostly reading error. Source: assumed.
pub const LEAST_SPAN: PhShift = PhShift::constant(1.0);

/// Most that the temperatures of the buffers may differ, °C. Source: assumed; the usual
/// rule is all at room temperature, and 5 °C move the slope by 1.7 %.
pub const MOST_APART_C: f64 = 5.0;

/// The slope of an ideal electrode: ln 10·R·T/F.
///
/// R = 8.314 462 618 J/(mol·K), F = 96 485.332 12 C/mol.
///
/// Source: [`CODATA_2018`](crate::references::CODATA_2018).
#[must_use]
pub fn nernst_slope(temperature: Celsius) -> MillivoltsPerPh {
    let kelvin = temperature.get() + 273.15;
    MillivoltsPerPh::clamped(
        1000.0 * std::f64::consts::LN_10 * 8.314_462_618 * kelvin / 96_485.332_12,
    )
}

/// What an electrode gives.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Electrode {
    /// Relative to the Nernst slope at its temperature.
    pub slope: SlopePercent,
    /// At pH 7.
    pub offset: Millivolts,
}

impl Electrode {
    /// One without fault: what a meter assumes that was never adjusted.
    pub const IDEAL: Self = Self {
        slope: SlopePercent::constant(100.0),
        offset: Millivolts::constant(0.0),
    };

    /// What it gives in a solution of this pH and temperature.
    #[must_use]
    pub fn millivolts(self, ph: Ph, temperature: Celsius) -> Millivolts {
        let slope = self.slope.get() / 100.0 * nernst_slope(temperature).get();
        Millivolts::clamped(self.offset.get() - slope * (ph.get() - NEUTRAL.get()))
    }

    /// Whether it is fit for use.
    ///
    /// Slope from 95 to 102 % and offset within ±30 mV: good. Slope from 92 to 105 %: in
    /// service, but ageing. Source: common practice of makers' manuals; some allow 85 to
    /// 105 %. An offset beyond ±30 mV counts as ageing and beyond ±60 mV as useless: the
    /// second is assumed, a whole pH unit.
    #[must_use]
    pub fn verdict(self) -> Verdict {
        let (slope, offset) = (self.slope.get(), self.offset.get().abs());
        if !(92.0..=105.0).contains(&slope) || offset > 60.0 {
            Verdict::DoNotUse
        } else if !(95.0..=102.0).contains(&slope) || offset > 30.0 {
            Verdict::Ageing
        } else {
            Verdict::Good
        }
    }
}

/// Whether an electrode is fit for use.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Verdict {
    /// As it should be.
    Good,
    /// In service, but to be cleaned or replaced soon.
    Ageing,
    /// Its readings are not to be acted on.
    DoNotUse,
}

/// An electrode in one buffer.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Point {
    /// pH of the buffer at its temperature.
    pub buffer: Ph,
    /// Temperature of the buffer.
    pub temperature: Celsius,
    /// What the electrode gave.
    pub reading: Millivolts,
}

/// What a calibration found.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Fit {
    /// Slope and offset.
    pub electrode: Electrode,
    /// Standard deviation of the points about the line, as pH. Two points always lie on
    /// one: unknown.
    pub residual: Option<PhShift>,
}

/// Why points say nothing of an electrode.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum CalibrationError {
    /// Not two to five of them.
    Count(usize),
    /// The buffers are too alike.
    TooNear(PhShift),
    /// The buffers were not at one temperature: coldest and warmest.
    Temperatures(Celsius, Celsius),
    /// The readings of two buffers were exchanged.
    Swapped,
    /// Every reading has the wrong sign.
    Sign,
    /// One of the two, and they cannot be told apart.
    SwappedOrSign,
    /// The slope is none that an electrode can have.
    Impossible(SlopePercent),
}

impl fmt::Display for CalibrationError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Count(0) => f.write_str("Enter two buffers: with none the slope cannot be known"),
            Self::Count(1) => f.write_str(
                "Only one buffer: the slope cannot be known. Read a second one, usually 4 beside 7",
            ),
            Self::Count(_) => f.write_str("At most five buffers"),
            Self::TooNear(apart) => write!(
                f,
                "The buffers are only {:.2} pH apart. Take two that differ by at least one, usually 7 and 4",
                apart.get()
            ),
            Self::Temperatures(cold, warm) => write!(
                f,
                "One buffer is at {:.1} °C and another at {:.1} °C. Let them come within 5 °C and read again",
                cold.get(),
                warm.get()
            ),
            Self::Swapped => {
                f.write_str("The readings of the buffers look exchanged: the bottle read first seems to be the other one")
            }
            Self::Sign => f.write_str(
                "The readings look as if their sign were wrong: below pH 7 the millivolts are positive, above it negative",
            ),
            Self::SwappedOrSign => f.write_str(
                "The millivolts rise with pH; they must fall. Either the readings are exchanged or their sign is wrong",
            ),
            Self::Impossible(slope) => write!(
                f,
                "These readings give a slope of {:.0} %, which no electrode has. Read both buffers again",
                slope.get()
            ),
        }
    }
}

impl std::error::Error for CalibrationError {}

/// Slope and offset by least squares of the reading on the ideal reading, each at the
/// buffer's own temperature; the residual is divided by the slope found.
pub fn fit(points: &[Point]) -> Result<Fit, CalibrationError> {
    suitable(points)?;
    let (slope, offset) = line(points.iter().map(|p| (p, p.reading.get())));
    // A dead electrode gives the same everywhere and may as well come out below nothing.
    if slope < -0.2 {
        return Err(reversed(points));
    }
    if slope > 1.2 {
        return Err(CalibrationError::Impossible(SlopePercent::clamped(
            100.0 * slope,
        )));
    }
    let squares: f64 = points
        .iter()
        .map(|p| (p.reading.get() - offset - slope * ideal(p)).powi(2))
        .sum();
    let free = points.len() - 2;
    let per_ph = slope.max(0.2) * nernst_slope(points[0].temperature).get();
    #[allow(clippy::cast_precision_loss, reason = "at most three")]
    let residual = (free > 0).then(|| PhShift::clamped((squares / free as f64).sqrt() / per_ph));
    Ok(Fit {
        electrode: Electrode {
            slope: SlopePercent::clamped(100.0 * slope),
            offset: Millivolts::clamped(offset),
        },
        residual,
    })
}

/// Whether buffers can carry a calibration at all.
fn suitable(points: &[Point]) -> Result<(), CalibrationError> {
    if !POINTS.contains(&points.len()) {
        return Err(CalibrationError::Count(points.len()));
    }
    let (low, high) = ends(points.iter().map(|p| p.buffer.get()));
    if high - low < LEAST_SPAN.get() {
        return Err(CalibrationError::TooNear(PhShift::clamped(high - low)));
    }
    let (cold, warm) = ends(points.iter().map(|p| p.temperature.get()));
    if warm - cold > MOST_APART_C {
        return Err(CalibrationError::Temperatures(
            Celsius::clamped(cold),
            Celsius::clamped(warm),
        ));
    }
    Ok(())
}

fn ends(values: impl Iterator<Item = f64>) -> (f64, f64) {
    values.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), value| {
        (low.min(value), high.max(value))
    })
}

/// What an ideal electrode gives in this buffer, mV.
fn ideal(point: &Point) -> f64 {
    Electrode::IDEAL
        .millivolts(point.buffer, point.temperature)
        .get()
}

/// Slope (relative to the ideal one) and offset (mV) of readings taken at these points.
fn line<'a>(readings: impl Iterator<Item = (&'a Point, f64)>) -> (f64, f64) {
    let pairs: Vec<(f64, f64)> = readings.map(|(p, mv)| (ideal(p), mv)).collect();
    #[allow(clippy::cast_precision_loss, reason = "at most five")]
    let count = pairs.len() as f64;
    let mean_x = pairs.iter().map(|(x, _)| x).sum::<f64>() / count;
    let mean_y = pairs.iter().map(|(_, y)| y).sum::<f64>() / count;
    let xx: f64 = pairs.iter().map(|(x, _)| (x - mean_x).powi(2)).sum();
    let xy: f64 = pairs.iter().map(|(x, y)| (x - mean_x) * (y - mean_y)).sum();
    (xy / xx, mean_y - xy / xx * mean_x)
}

/// Why the potential rises with pH: whichever slip, undone, gives a likely electrode.
fn reversed(points: &[Point]) -> CalibrationError {
    let likely = |(slope, offset): (f64, f64)| (0.8..1.1).contains(&slope) && offset.abs() <= 60.0;
    let sign = likely(line(points.iter().map(|p| (p, -p.reading.get()))));
    let mut ascending: Vec<&Point> = points.iter().collect();
    ascending.sort_by(|a, b| a.buffer.get().total_cmp(&b.buffer.get()));
    let exchanged = ascending
        .iter()
        .zip(ascending.iter().rev())
        .map(|(point, other)| (*point, other.reading.get()));
    let swapped = likely(line(exchanged));
    match (swapped, sign) {
        (true, false) => CalibrationError::Swapped,
        (false, true) => CalibrationError::Sign,
        _ => CalibrationError::SwappedOrSign,
    }
}

/// Whether a temperature is one that the tables of buffers know.
fn tabulated(temperature: Celsius) -> Result<f64, OutOfRange> {
    let value = temperature.get();
    if (0.0..=50.0).contains(&value) {
        Ok(value)
    } else {
        Err(OutOfRange {
            value,
            unit: Celsius::UNIT,
            low: 0.0,
            high: 50.0,
        })
    }
}

/// Checks buffers of a calibration whose slope and offset the meter itself worked out.
pub fn check_buffers(points: &[(Ph, Celsius)]) -> Result<(), CalibrationError> {
    let points: Vec<Point> = points
        .iter()
        .map(|&(buffer, temperature)| Point {
            buffer,
            temperature,
            reading: Millivolts::constant(0.0),
        })
        .collect();
    suitable(&points)
}
