//! A pH as it was read: on the basis of a cooled sample, with its doubt, and together
//! with the readings that repeat it.
//!
//! [`cooled`] brings one reading to the basis every pH here belongs to, [`together`]
//! makes one figure of several. What repeats do not share (the sample, the last digit)
//! averages out; what one calibration puts into all of them does not.

use crate::quantity::{Celsius, Estimate, Minutes, Ph, PhShift};

/// A sample warmer than this is only an estimate of the cooled reading. Source:
/// assumed; the usual rule is to cool to 20 to 25 °C.
pub const WARMEST_SAMPLE: Celsius = Celsius::constant(30.0);

/// How closely careful readings of one mash on one calibration repeat, one standard
/// deviation. Source: assumed; the usual advice is to read until two readings agree, and
/// most meters show two decimals.
pub const REPEATABILITY: PhShift = PhShift::constant(0.02);

/// Readings of the same thing that lie further apart than this do not repeat each other.
/// Source: 3.5·√2 of [`REPEATABILITY`], one in two thousand.
pub const FURTHEST_APART: PhShift = PhShift::constant(0.1);

/// Most that the readings of one mash may be apart in time to repeat each other.
/// Source: [`HOSOM_2020`](crate::references::HOSOM_2020): from minute 10 on a mash still
/// falls by 0.05 in ten minutes and less later.
pub const LONGEST_APART: Minutes = Minutes::constant(5.0);

/// The reading a cooled sample would have given, with the doubt of the meter and of
/// the conversion.
///
/// pH = (pH(t) + b·(t₀ − t)) / (1 + m·(t − t₀)), t₀ = 21.1 °C, b = 0.0166,
/// m = −0.00382. Source: [`HOSOM_2020`](crate::references::HOSOM_2020), 19 worts: 0.21 to
/// 0.26 lower at 65 °C. [`HOPKINS_KRAUSE_1947`](crate::references::HOPKINS_KRAUSE_1947) and
/// [`BRIGGS_2004`](crate::references::BRIGGS_2004) say 0.34 and 0.35,
/// [`TROESTER_2009`](crate::references::TROESTER_2009) about 0.2, hence ± 0.1 for a hot
/// reading and in proportion below it (the proportion is assumed).
#[must_use]
pub fn cooled(ph: Ph, sample: Celsius, meter_sd: PhShift) -> Estimate<Ph> {
    Estimate::new(
        converted(ph, sample),
        meter_sd.get().abs().hypot(conversion_sd(sample)),
    )
}

const REFERENCE: f64 = 21.1;

fn converted(ph: Ph, sample: Celsius) -> Ph {
    let above = sample.get() - REFERENCE;
    Ph::clamped((ph.get() - 0.0166 * above) / (1.0 - 0.003_82 * above))
}

fn conversion_sd(sample: Celsius) -> f64 {
    const HOT: f64 = 65.0;
    0.1 * (sample.get() - REFERENCE).abs() / (HOT - REFERENCE)
}

/// One reading among those that repeat it. `K` names the calibration it rests on.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Repeat<K> {
    /// As the meter showed it.
    pub ph: Ph,
    /// Temperature of the sample.
    pub sample: Celsius,
    /// One standard deviation of a single reading, the calibration's part included.
    pub meter_sd: PhShift,
    /// Which calibration it rests on; readings on one calibration err together.
    pub calibration: K,
}

/// Several readings of one thing as one figure, on the cooled basis.
///
/// The part each reading has for itself, [`REPEATABILITY`], shrinks with the root of
/// their number; the rest of the meter's doubt is shared by all readings on its
/// calibration and stays. Different meters are weighed by one over their variance. The
/// doubt of the conversion from the sample's temperature is shared by all.
///
/// `None` where there is nothing to put together.
#[must_use]
pub fn together<K: PartialEq>(readings: &[Repeat<K>]) -> Option<Estimate<Ph>> {
    let mut groups: Vec<(&K, Vec<&Repeat<K>>)> = Vec::new();
    for reading in readings {
        match groups
            .iter_mut()
            .find(|(of, _)| **of == reading.calibration)
        {
            Some((_, members)) => members.push(reading),
            None => groups.push((&reading.calibration, vec![reading])),
        }
    }
    let (mut weights, mut weighted) = (0.0, 0.0);
    for (_, members) in &groups {
        #[allow(clippy::cast_precision_loss, reason = "a handful of readings")]
        let count = members.len() as f64;
        let sum: f64 = members
            .iter()
            .map(|it| converted(it.ph, it.sample).get())
            .sum();
        let total = members
            .iter()
            .map(|it| it.meter_sd.get().abs())
            .fold(0.0, f64::max);
        let own = REPEATABILITY.get().min(total);
        let shared = total * total - own * own;
        // A meter said to be without error still shows digits only.
        let weight = 1.0 / (shared + own * own / count).max(1e-8);
        weights += weight;
        weighted += weight * sum / count;
    }
    if weights <= 0.0 {
        return None;
    }
    let conversion = readings
        .iter()
        .map(|it| conversion_sd(it.sample))
        .fold(0.0, f64::max);
    Some(Estimate::new(
        Ph::clamped(weighted / weights),
        (1.0 / weights).sqrt().hypot(conversion),
    ))
}

/// Whether two figures on the cooled basis repeat each other.
#[must_use]
pub fn agree(one: Ph, other: Ph) -> bool {
    // A hair for the last binary digit.
    (one.get() - other.get()).abs() <= FURTHEST_APART.get() + 1e-9
}
