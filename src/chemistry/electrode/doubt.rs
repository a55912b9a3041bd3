//! How far a reading may be out after a calibration.

use super::{Electrode, NEUTRAL, nernst_slope};
use crate::quantity::{Celsius, Days, Ph, PhShift, SlopePercent};

/// What the label of a fresh buffer allows either side. Source: common practice of
/// makers, ±0.01 to ±0.02; taken as evenly spread.
const TOLERANCE: f64 = 0.02;

/// One standard deviation of a stale buffer. Source: common practice, no source: stale
/// buffers are 0.1 to 0.3 out.
const STALE_SD: f64 = 0.1;

/// Least scatter of one reading in a buffer. Source: assumed; the last digit of most
/// meters.
const LEAST_SCATTER: f64 = 0.01;

/// What no calibration takes away: the junction in wort instead of buffer, and how the
/// sample is taken and cooled. Source: common practice, no source: ±0.03 to ±0.05 is
/// realistic with fresh buffers and a cooled sample.
const SAMPLE_SD: f64 = 0.03;

/// Drift since the calibration, per day. Source: assumed; a brewery's electrode is seldom
/// trusted to ±0.1 for longer than some days.
const DRIFT_PER_DAY: f64 = 0.02;

/// How far from the buffers' temperature a cooled sample may be, either side, where the
/// meter does not correct its slope for it. Source: assumed; taken as evenly spread.
const SAMPLE_APART_C: f64 = 5.0;

/// One standard deviation of a meter that nothing is known of, and the most that age
/// makes of it. Source: common practice, no source: stale buffers, cracked junctions and
/// dried bulbs are 0.1 to 0.3 out.
pub const UNKNOWN: PhShift = PhShift::constant(0.3);

/// One buffer of a calibration.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct UsedBuffer {
    /// Its pH at its temperature.
    pub ph: Ph,
    /// Whether it was past its date.
    pub stale: bool,
}

/// What the doubt of a reading depends on.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Circumstances<'a> {
    /// What the meter was adjusted in.
    pub buffers: &'a [UsedBuffer],
    /// Standard deviation of the points about the line or of readings in the buffers
    /// afterwards, where known.
    pub scatter: Option<PhShift>,
    /// Last digit of the meter.
    pub resolution: PhShift,
    /// Whether the meter corrects its slope for the temperature of the sample.
    pub compensated: bool,
    /// Since the calibration.
    pub age: Days,
}

/// Where a doubt comes from.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Part {
    /// What the labels of the buffers allow.
    Buffers,
    /// Scatter of the readings in the buffers.
    Scatter,
    /// A slope that is not corrected for temperature.
    Slope,
    /// The last digit of the meter.
    Resolution,
    /// Drift since the calibration.
    Age,
    /// Junction and sample.
    Sample,
}

impl Part {
    /// As shown.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Buffers => "Tolerance of the buffers",
            Self::Scatter => "Scatter in the buffers",
            Self::Slope => "Slope not corrected for temperature",
            Self::Resolution => "Last digit of the meter",
            Self::Age => "Drift since the calibration, assumed",
            Self::Sample => "Junction and sample, assumed",
        }
    }
}

/// How far a reading may be out, and what that is made of.
#[derive(Clone, Debug, PartialEq)]
pub struct Doubt {
    /// One standard deviation of a reading.
    pub sd: PhShift,
    /// Its parts, one standard deviation each, added as independent errors.
    pub parts: Vec<(Part, PhShift)>,
}

impl Circumstances<'_> {
    /// The doubt of one reading of a cooled sample near this pH.
    #[must_use]
    pub fn doubt(&self, at: Ph) -> Doubt {
        let weights = weights(self.buffers, at);
        let sum = |sd: &dyn Fn(&UsedBuffer) -> f64| -> f64 {
            let squares = self.buffers.iter().zip(&weights);
            squares
                .map(|(buffer, weight)| (weight * sd(buffer)).powi(2))
                .sum::<f64>()
                .sqrt()
        };
        let tolerance = |buffer: &UsedBuffer| {
            if buffer.stale {
                STALE_SD
            } else {
                TOLERANCE / 3.0_f64.sqrt()
            }
        };
        let scatter = self.scatter.map_or(0.0, PhShift::get).max(LEAST_SCATTER);
        let parts = [
            (Part::Sample, SAMPLE_SD),
            (Part::Buffers, sum(&tolerance)),
            (Part::Scatter, sum(&|_| scatter)),
            (Part::Slope, self.uncompensated(at)),
            (Part::Resolution, self.resolution.get() / 12.0_f64.sqrt()),
            (
                Part::Age,
                (DRIFT_PER_DAY * self.age.get()).min(UNKNOWN.get()),
            ),
        ];
        let sd = parts.iter().map(|(_, sd)| sd * sd).sum::<f64>().sqrt();
        let mut parts: Vec<(Part, PhShift)> = parts
            .into_iter()
            .filter(|(_, sd)| *sd > 0.0)
            .map(|(part, sd)| (part, PhShift::clamped(sd)))
            .collect();
        parts.sort_by(|a, b| b.1.get().total_cmp(&a.1.get()));
        Doubt {
            sd: PhShift::clamped(sd),
            parts,
        }
    }

    /// What a sample warmer or colder than the buffers does to a meter that does not know.
    fn uncompensated(&self, at: Ph) -> f64 {
        if self.compensated {
            return 0.0;
        }
        let room = nernst_slope(Celsius::constant(20.0)).get();
        let warmer = nernst_slope(Celsius::clamped(20.0 + SAMPLE_APART_C)).get();
        let percent = SlopePercent::clamped(100.0 * (warmer / room - 1.0) / 3.0_f64.sqrt());
        slope_error(percent, at).get()
    }
}

/// How much an error of each buffer's reading weighs in a reading at this pH, along the
/// straight line through them.
fn weights(buffers: &[UsedBuffer], at: Ph) -> Vec<f64> {
    #[allow(clippy::cast_precision_loss, reason = "at most five")]
    let count = buffers.len() as f64;
    let mean = buffers.iter().map(|b| b.ph.get()).sum::<f64>() / count;
    let squares: f64 = buffers.iter().map(|b| (b.ph.get() - mean).powi(2)).sum();
    buffers
        .iter()
        .map(|b| {
            let lever = if squares > 0.0 {
                (at.get() - mean) * (b.ph.get() - mean) / squares
            } else {
                0.0
            };
            1.0 / count + lever
        })
        .collect()
}

/// How far a reading at this pH is out when the slope that the meter works with is wrong
/// by `percent` and right at pH 7: the potential of a sample is slope·(7 − pH), so that the
/// pH is out by that share of its distance from 7. One per cent at pH 5.4 is 0.016.
#[must_use]
pub fn slope_error(percent: SlopePercent, at: Ph) -> PhShift {
    let away = (NEUTRAL.get() - at.get()).abs();
    PhShift::clamped(percent.get() / Electrode::IDEAL.slope.get() * away)
}
