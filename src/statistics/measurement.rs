//! How precise a test is.
//!
//! The standard deviation s of one result at a level x is
//!
//! s² = a² + (b·x)² + step²/12
//!
//! with a constant part a, a proportional part b, and the error of reading a
//! scale that moves in steps (an even spread over one step). Take x from the
//! prediction or from the [`median`] of the series, never from the result
//! itself: a low result would claim high precision.
//!
//! [`Precision::of`] gives the figures to use until a brewery knows its own
//! methods better. All of them are assumed.

use crate::quantity::{Sd, Share, Step, Value};

/// How a result was found.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Method {
    /// A kit that counts drops.
    DropKit,
    /// A photometer with reagent tablets or cuvettes.
    Photometer,
    /// A laboratory.
    Laboratory,
    /// A conductivity, pH or ion meter.
    Meter,
}

/// What was looked for. The unit of its level is mg/L unless it says otherwise.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Analyte {
    /// Total alkalinity, mg/L as CaCO₃; bicarbonate after conversion.
    Alkalinity,
    /// Total hardness, mg/L as CaCO₃.
    Hardness,
    /// Calcium.
    Calcium,
    /// Magnesium.
    Magnesium,
    /// Sodium.
    Sodium,
    /// Potassium.
    Potassium,
    /// Chloride.
    Chloride,
    /// Sulfate.
    Sulfate,
    /// Nitrate.
    Nitrate,
    /// Iron.
    Iron,
    /// Conductivity, µS/cm at 25 °C.
    Conductivity,
    /// pH.
    Ph,
}

/// Precision of a method: one standard deviation of a single result.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Precision {
    /// The part that does not depend on the level, caller's unit.
    pub constant: Sd,
    /// The part that grows with the level, as a share of it.
    pub proportional: Share,
    /// Least difference the method can show (a drop, a digit), caller's unit.
    pub step: Step,
}

impl Precision {
    /// What to assume of a method.
    ///
    /// For scale: EPA method 310.1 for alkalinity gives about 5 at 120 mg/L as
    /// CaCO₃ between laboratories and 3 within one (from memory), this 2.6. A
    /// proficiency round for drinking water accepted deviations of 0.2 pH and
    /// from 5 % up, by determinand; taken as two standard deviations, 0.1 pH and
    /// 2.5 % up. A drop stands for 5 to 20 mg/L as CaCO₃: where the kit's is not
    /// 5, set [`step`](Self::step).
    ///
    /// Where a method is unusual for an analyte, its coarsest figures stand in.
    #[must_use]
    pub const fn of(method: Method, analyte: Analyte) -> Self {
        use Analyte::{
            Alkalinity, Calcium, Chloride, Conductivity, Hardness, Iron, Magnesium, Nitrate, Ph,
            Potassium, Sodium, Sulfate,
        };
        use Method::{DropKit, Laboratory, Meter, Photometer};
        let (constant, proportional, step) = match (method, analyte) {
            (_, Conductivity) => (1.0, 0.01, 1.0),
            (Meter, Ph) => (0.05, 0.0, 0.01),
            (Laboratory, Ph) => (0.1, 0.0, 0.01),
            (DropKit | Photometer, Ph) => (0.2, 0.0, 0.2),
            (DropKit, Alkalinity | Hardness) => (2.0, 0.04, 5.0),
            (DropKit, Calcium) => (1.5, 0.04, 4.0),
            (DropKit, _) => (2.0, 0.06, 5.0),
            (Photometer, Sulfate) => (2.0, 0.07, 1.0),
            (Photometer, Magnesium) => (0.5, 0.07, 0.5),
            (Photometer, Nitrate) => (0.5, 0.08, 0.5),
            (Photometer | Meter, Iron) => (0.01, 0.08, 0.01),
            (Photometer | Meter, _) => (2.0, 0.08, 1.0),
            (Laboratory, Alkalinity) => (1.0, 0.02, 0.1),
            (Laboratory, Hardness) => (0.5, 0.02, 0.1),
            (Laboratory, Calcium) => (0.1, 0.025, 0.1),
            (Laboratory, Magnesium) => (0.05, 0.025, 0.01),
            (Laboratory, Sodium) => (0.1, 0.03, 0.1),
            (Laboratory, Potassium) => (0.05, 0.03, 0.01),
            (Laboratory, Chloride) => (0.2, 0.025, 0.1),
            (Laboratory, Sulfate) => (0.3, 0.025, 0.1),
            (Laboratory, Nitrate) => (0.1, 0.03, 0.05),
            (Laboratory, Iron) => (0.002, 0.04, 0.001),
        };
        Self {
            constant: Sd::constant(constant),
            proportional: Share::constant(proportional),
            step: Step::constant(step),
        }
    }

    /// Standard deviation of one result when the level is `level`.
    #[must_use]
    pub fn sd_at(self, level: Value) -> Sd {
        let proportional = self.proportional.get() * level.get();
        // An even spread over one step has variance step²/12.
        let reading = self.step.get() / 12_f64.sqrt();
        Sd::clamped(self.constant.get().hypot(proportional).hypot(reading))
    }
}

/// Median of the measured values of a series, the level at which a method's
/// precision is taken; between two middle values, their mean. Leave "less than"
/// results out. `None` for an empty series.
#[must_use]
pub fn median(values: &[Value]) -> Option<Value> {
    let mut sorted: Vec<f64> = values.iter().map(|value| value.get()).collect();
    sorted.sort_by(f64::total_cmp);
    let upper = *sorted.get(sorted.len() / 2)?;
    let lower = sorted[(sorted.len() - 1) / 2];
    Some(Value::clamped(lower.midpoint(upper)))
}
