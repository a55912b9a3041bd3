//! pH meters: what each gave in its buffers, and how far its readings may be believed.
//!
//! A [`Calibration`] is entered as the meter showed it and is never changed, only
//! withdrawn. [`Standing`] says what a reading taken now is worth: the verdict of the last
//! calibration, whether it is fresh, and one standard deviation of a reading.

use chemistry::electrode::{self, Buffer, Circumstances, Doubt, Electrode, UsedBuffer};
use chemistry::quantity::{Celsius, Days, Millivolts, Ph, PhShift, SlopePercent};
use jiff::civil::Date;

use crate::id::{CalibrationId, MeterId, UtcTime};

pub mod api;
pub mod entered;
pub mod operations;
pub mod pages;
pub mod store;
mod trend;
pub mod words;

/// The pH at which the doubt of a reading is told: that of a mash.
pub const QUOTED_PH: Ph = Ph::constant(5.4);

/// A pH meter.
#[derive(Clone, Debug, PartialEq)]
pub struct Meter {
    /// Its identifier.
    pub id: MeterId,
    /// What the brewery calls it.
    pub name: String,
    /// What kind it is.
    pub kind: Kind,
    /// The number on it.
    pub serial: Option<String>,
    /// Its last digit.
    pub resolution: PhShift,
    /// Whether it corrects its slope for the temperature of the sample.
    pub compensated: bool,
    /// Anything else.
    pub notes: Option<String>,
    /// Whether readings may name it.
    pub in_use: bool,
    /// Counts changes.
    pub version: i64,
}

/// What kind of meter it is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// Stands on a bench.
    Bench,
    /// Is carried about.
    Handheld,
    /// Sits in a pipe or vessel.
    Inline,
}

impl Kind {
    /// Every kind.
    pub const ALL: [Self; 3] = [Self::Bench, Self::Handheld, Self::Inline];

    /// As stored and sent.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Bench => "bench",
            Self::Handheld => "handheld",
            Self::Inline => "inline",
        }
    }

    /// As shown.
    pub const fn name(self) -> &'static str {
        match self {
            Self::Bench => "Bench",
            Self::Handheld => "Handheld",
            Self::Inline => "Inline",
        }
    }

    /// The kind with this key.
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|kind| kind.key() == key)
    }
}

/// What the meter showed at a calibration.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Method {
    /// Millivolts in each buffer.
    Millivolts,
    /// pH in each buffer before it was adjusted.
    Ph,
    /// Slope and offset, worked out by the meter itself.
    Display,
}

impl Method {
    /// Every method.
    pub const ALL: [Self; 3] = [Self::Millivolts, Self::Ph, Self::Display];

    /// As stored and sent.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Millivolts => "millivolts",
            Self::Ph => "ph",
            Self::Display => "display",
        }
    }

    /// As shown: what the meter shows.
    pub const fn name(self) -> &'static str {
        match self {
            Self::Millivolts => "mV in each buffer",
            Self::Ph => "pH in each buffer",
            Self::Display => "Slope and offset",
        }
    }

    /// The method with this key.
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|method| method.key() == key)
    }
}

/// One calibration.
#[derive(Clone, Debug, PartialEq)]
pub struct Calibration {
    /// Its identifier.
    pub id: CalibrationId,
    /// Of which meter.
    pub meter_id: MeterId,
    /// When it was done.
    pub calibrated_at: UtcTime,
    /// What the meter showed.
    pub method: Method,
    /// The buffers, in the order they were read.
    pub buffers: Vec<BufferRead>,
    /// Slope and offset it found.
    pub electrode: Electrode,
    /// Scatter of three or more points about the line.
    pub residual: Option<PhShift>,
    /// What the meter was set to before, where its pH readings were worked back from it.
    pub before: Option<Electrode>,
    /// Anything else.
    pub notes: Option<String>,
    /// When it was entered.
    pub entered_at: UtcTime,
    /// By whom.
    pub entered_by: String,
    /// When and why it was withdrawn, if it was.
    pub withdrawn: Option<(UtcTime, String)>,
}

/// One buffer of a calibration.
#[derive(Clone, Debug, PartialEq)]
pub struct BufferRead {
    /// Which one; `None`: one of no common set.
    pub buffer: Option<Buffer>,
    /// Its pH at its temperature.
    pub ph: Ph,
    /// Whether that is the bottle's own instead of the table's.
    pub own_ph: bool,
    /// The lot on the bottle.
    pub lot: Option<String>,
    /// The date on the bottle.
    pub use_by: Option<Date>,
    /// Its temperature.
    pub temperature: Celsius,
    /// What the electrode gave.
    pub reading: Option<Millivolts>,
    /// What the meter showed before it was adjusted.
    pub before: Option<Ph>,
    /// What it showed after.
    pub after: Option<Ph>,
}

impl BufferRead {
    /// Whether it was past its date on this day.
    pub fn stale(&self, on: Date) -> bool {
        self.use_by.is_some_and(|use_by| use_by < on)
    }
}

impl Calibration {
    /// What it says of the electrode.
    pub fn verdict(&self) -> Verdict {
        self.electrode.verdict().into()
    }

    /// Scatter of the points, or of readings in the buffers after the adjustment,
    /// whichever is worse.
    fn scatter(&self) -> Option<PhShift> {
        let misses: Vec<f64> = self
            .buffers
            .iter()
            .filter_map(|read| Some(read.after?.get() - read.ph.get()))
            .collect();
        #[allow(clippy::cast_precision_loss, reason = "at most five")]
        let after = (!misses.is_empty()).then(|| {
            let squares: f64 = misses.iter().map(|miss| miss * miss).sum();
            (squares / misses.len() as f64).sqrt()
        });
        let residual = self.residual.map(PhShift::get);
        match (after, residual) {
            (None, None) => None,
            (after, residual) => Some(PhShift::clamped(
                after.unwrap_or(0.0).max(residual.unwrap_or(0.0)),
            )),
        }
    }

    /// How far a reading near mash pH taken with this meter at `at` may be out.
    pub fn doubt(&self, meter: &Meter, at: UtcTime) -> Doubt {
        let day = self
            .calibrated_at
            .timestamp()
            .to_zoned_datetime(jiff::tz::TimeZone::UTC)
            .date();
        let buffers: Vec<UsedBuffer> = self
            .buffers
            .iter()
            .map(|read| UsedBuffer {
                ph: read.ph,
                stale: read.stale(day),
            })
            .collect();
        #[allow(clippy::cast_precision_loss, reason = "seconds of a few centuries")]
        let age = at.seconds_since(self.calibrated_at).max(0) as f64 / 86_400.0;
        Circumstances {
            buffers: &buffers,
            scatter: self.scatter(),
            resolution: meter.resolution,
            compensated: meter.compensated,
            age: Days::clamped(age),
        }
        .doubt(QUOTED_PH)
    }
}

/// Whether a meter's readings may be acted on.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Verdict {
    /// As it should be.
    Good,
    /// In service, but to be cleaned or replaced soon.
    Ageing,
    /// Not to be acted on.
    DoNotUse,
    /// Never calibrated, or every calibration was withdrawn.
    NotCalibrated,
}

impl Verdict {
    /// As sent.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Good => "good",
            Self::Ageing => "ageing",
            Self::DoNotUse => "do_not_use",
            Self::NotCalibrated => "not_calibrated",
        }
    }

    /// As shown.
    pub const fn name(self) -> &'static str {
        match self {
            Self::Good => "Good",
            Self::Ageing => "Ageing",
            Self::DoNotUse => "Do not use",
            Self::NotCalibrated => "Not calibrated",
        }
    }
}

impl From<electrode::Verdict> for Verdict {
    fn from(verdict: electrode::Verdict) -> Self {
        match verdict {
            electrode::Verdict::Good => Self::Good,
            electrode::Verdict::Ageing => Self::Ageing,
            electrode::Verdict::DoNotUse => Self::DoNotUse,
        }
    }
}

/// What a reading of a meter is worth at one moment.
#[derive(Clone, Debug, PartialEq)]
pub struct Standing {
    /// Of which meter.
    pub meter_id: MeterId,
    /// What the brewery calls it.
    pub name: String,
    /// The last calibration before that moment that was not withdrawn.
    pub calibration_id: Option<CalibrationId>,
    /// When that was done.
    pub calibrated_at: Option<UtcTime>,
    /// What it said.
    pub verdict: Verdict,
    /// Whether it was done in the day before that moment.
    pub fresh: bool,
    /// One standard deviation of a reading near mash pH.
    pub sd: PhShift,
    /// The slope it found.
    pub slope_percent: Option<SlopePercent>,
    /// What the deviation is made of.
    pub doubt: Option<Doubt>,
}

impl Standing {
    /// What this calibration makes of the meter's readings at `at`.
    pub fn of(meter: &Meter, calibration: Option<&Calibration>, at: UtcTime) -> Self {
        let doubt = calibration.map(|calibration| calibration.doubt(meter, at));
        Self {
            meter_id: meter.id,
            name: meter.name.clone(),
            calibration_id: calibration.map(|calibration| calibration.id),
            calibrated_at: calibration.map(|calibration| calibration.calibrated_at),
            verdict: calibration.map_or(Verdict::NotCalibrated, Calibration::verdict),
            fresh: calibration.is_some_and(|calibration| {
                at.seconds_since(calibration.calibrated_at) <= FRESH_SECONDS
            }),
            sd: doubt.as_ref().map_or(electrode::UNKNOWN, |doubt| doubt.sd),
            slope_percent: calibration.map(|calibration| calibration.electrode.slope),
            doubt,
        }
    }

    /// Whether a dose may rest on a reading: calibrated within the day and fit for use.
    pub fn may_be_acted_on(&self) -> bool {
        self.fresh && matches!(self.verdict, Verdict::Good | Verdict::Ageing)
    }
}

/// Age up to which a calibration is fresh: a day. Source: common practice of the trade,
/// daily calibration.
pub const FRESH_SECONDS: i64 = 24 * 3600;
