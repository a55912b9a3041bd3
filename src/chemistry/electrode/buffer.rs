//! Buffers that calibrations are made with, and their pH at their temperature.

use super::tabulated;
use crate::quantity::{Celsius, OutOfRange, Ph};

/// A buffer of one of the common sets. The table on the bottle counts before these.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Buffer {
    /// Technical 4.00, 4.01 from 30 °C.
    Technical4,
    /// Technical 7.00.
    Technical7,
    /// Technical 10.01.
    Technical10,
    /// NIST phthalate, 4.006 at 25 °C.
    Nist4,
    /// NIST phosphate, 6.865 at 25 °C.
    Nist7,
    /// NIST borax, 9.180 at 25 °C.
    Nist9,
}

/// Technical buffers 4.01, 7.00 and 10.01 at 0, 5, … 50 °C.
/// Source: table 7 of an instrument's manual.
const TECHNICAL: [[f64; 11]; 3] = [
    [
        4.00, 4.00, 4.00, 4.00, 4.00, 4.00, 4.01, 4.02, 4.03, 4.04, 4.06,
    ],
    [
        7.12, 7.09, 7.06, 7.04, 7.02, 7.00, 6.99, 6.99, 6.98, 6.98, 6.97,
    ],
    [
        10.32, 10.25, 10.18, 10.12, 10.06, 10.01, 9.97, 9.93, 9.89, 9.86, 9.83,
    ],
];

/// NIST equimolal phosphate and borax at 0, 5, … 50 °C. Source: from memory, the primary
/// standards of the National Bureau of Standards; they agree with the two decimals that
/// JIS Z 8802 (2011) prints to 0.006.
const NIST: [[f64; 11]; 2] = [
    [
        6.984, 6.951, 6.923, 6.900, 6.881, 6.865, 6.853, 6.844, 6.838, 6.834, 6.833,
    ],
    [
        9.464, 9.395, 9.332, 9.276, 9.225, 9.180, 9.139, 9.102, 9.068, 9.038, 9.011,
    ],
];

impl Buffer {
    /// Every one, by set.
    pub const ALL: [Self; 6] = [
        Self::Technical4,
        Self::Technical7,
        Self::Technical10,
        Self::Nist4,
        Self::Nist7,
        Self::Nist9,
    ];

    /// As stored and sent.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::Technical4 => "technical_4",
            Self::Technical7 => "technical_7",
            Self::Technical10 => "technical_10",
            Self::Nist4 => "nist_4",
            Self::Nist7 => "nist_7",
            Self::Nist9 => "nist_9",
        }
    }

    /// As shown.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Technical4 => "4.01 technical",
            Self::Technical7 => "7.00 technical",
            Self::Technical10 => "10.01 technical",
            Self::Nist4 => "4.006 NIST",
            Self::Nist7 => "6.865 NIST",
            Self::Nist9 => "9.180 NIST",
        }
    }

    /// The buffer with this key.
    #[must_use]
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|buffer| buffer.key() == key)
    }

    /// Its pH at this temperature, 0 to 50 °C; between the rows of a table along a
    /// straight line.
    pub fn ph(self, temperature: Celsius) -> Result<Ph, OutOfRange> {
        let [four, seven, ten] = &TECHNICAL;
        let [phosphate, borax] = &NIST;
        match self {
            Self::Technical4 => between(four, temperature),
            Self::Technical7 => between(seven, temperature),
            Self::Technical10 => between(ten, temperature),
            Self::Nist4 => phthalate(temperature),
            Self::Nist7 => between(phosphate, temperature),
            Self::Nist9 => between(borax, temperature),
        }
    }
}

/// A value between two rows of a table that has one for every five degrees.
fn between(rows: &[f64; 11], temperature: Celsius) -> Result<Ph, OutOfRange> {
    let place = tabulated(temperature)? / 5.0;
    #[allow(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "0 to 10"
    )]
    let below = (place.floor() as usize).min(9);
    #[allow(clippy::cast_precision_loss, reason = "0 to 9")]
    let share = place - below as f64;
    Ok(Ph::clamped(
        rows[below] + share * (rows[below + 1] - rows[below]),
    ))
}

/// pH of the NIST phthalate standard, 0.05 mol/kg.
///
/// pH(S) = 2073.44/T − 13.3270 + 0.045199·T − 3.4846·10⁻⁵·T², T in kelvin. Given for 0 to
/// 60 °C; asked for 0 to 50 °C here, as of every buffer.
///
/// Source: [`HETZER_1977`](crate::references::HETZER_1977).
pub fn phthalate(temperature: Celsius) -> Result<Ph, OutOfRange> {
    let kelvin = tabulated(temperature)? + 273.15;
    Ok(Ph::clamped(
        2073.44 / kelvin - 13.3270 + 0.045_199 * kelvin - 3.4846e-5 * kelvin * kelvin,
    ))
}
