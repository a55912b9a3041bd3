//! A bench titration of one malt, fitted to its distilled-water pH and buffering.

use crate::quantity::{Estimate, MeqPerKg, Ph, PhShift, RelativeBuffering};

use super::malt::{Groups, charge, charge_slope};

/// One jar: what was added to a small distilled-water mash, and where it settled.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Jar {
    /// Acid added per kg of malt, as-is weight; negative for base.
    pub acid: MeqPerKg,
    /// pH of the cooled sample.
    pub ph: Ph,
}

/// What a titration says of a malt.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Fit {
    /// The malt, with the standard errors of the fit.
    pub groups: Groups,
    /// Root mean square of what the fit leaves over.
    pub left_over: PhShift,
}

/// Why jars do not give a malt.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub enum TitrationError {
    /// Two unknowns and their errors need three jars.
    #[error(
        "At least three jars are needed: one with malt and distilled water alone, two with different amounts of acid or base."
    )]
    TooFewJars,
    /// The additions do not differ, or the pH does not fall as acid is added.
    #[error("The pH must fall as acid is added: check the signs and the amounts of the jars.")]
    NoBuffering,
}

/// A careful bench reading's own standard deviation, pH. Source: from memory, ±0.03
/// with fresh buffers and a cooled sample. A fit cannot claim to be better.
const READING_SD: f64 = 0.03;

/// Least squares in pH: the readings err, the additions do not.
///
/// Standard errors come from the scatter about the curve or from the reading's own
/// error, whichever is greater.
pub fn fit(jars: &[Jar]) -> Result<Fit, TitrationError> {
    if jars.len() < 3 {
        return Err(TitrationError::TooFewJars);
    }
    let (mut ph, mut buffering) = start(jars)?;
    let mut normal = [0.0; 3];
    // Gauss-Newton; from the linear start it settles in three or four rounds.
    for _ in 0..50 {
        normal = [0.0; 3];
        let mut right = [0.0; 2];
        for jar in jars {
            let (settled, by_ph, by_buffering) = curve(ph, buffering, jar.acid.get());
            let residual = jar.ph.get() - settled;
            normal[0] += by_ph * by_ph;
            normal[1] += by_ph * by_buffering;
            normal[2] += by_buffering * by_buffering;
            right[0] += by_ph * residual;
            right[1] += by_buffering * residual;
        }
        let determinant = normal[0] * normal[2] - normal[1] * normal[1];
        if determinant <= 1e-12 {
            return Err(TitrationError::NoBuffering);
        }
        let ph_step = (right[0] * normal[2] - right[1] * normal[1]) / determinant;
        let buffering_step = (right[1] * normal[0] - right[0] * normal[1]) / determinant;
        ph = (ph + ph_step).clamp(3.0, 9.0);
        buffering = (buffering + buffering_step).clamp(0.02, RelativeBuffering::HIGH);
        if ph_step.abs() < 1e-10 && buffering_step.abs() < 1e-10 {
            break;
        }
    }
    let squares: f64 = jars
        .iter()
        .map(|jar| (jar.ph.get() - curve(ph, buffering, jar.acid.get()).0).powi(2))
        .sum();
    let variance = (squares / (jars.len() - 2) as f64).max(READING_SD * READING_SD);
    let determinant = normal[0] * normal[2] - normal[1] * normal[1];
    Ok(Fit {
        groups: Groups::new(
            Estimate::new(Ph::clamped(ph), (variance * normal[2] / determinant).sqrt()),
            Estimate::new(
                RelativeBuffering::clamped(buffering),
                (variance * normal[0] / determinant).sqrt(),
            ),
        ),
        left_over: PhShift::clamped((squares / jars.len() as f64).sqrt()),
    })
}

/// A straight line: acid = s·(q(pH of the malt) − q(pH)).
fn start(jars: &[Jar]) -> Result<(f64, f64), TitrationError> {
    let count = jars.len() as f64;
    let charges: Vec<f64> = jars.iter().map(|jar| charge(jar.ph.get())).collect();
    let mean_charge = charges.iter().sum::<f64>() / count;
    let mean_acid = jars.iter().map(|jar| jar.acid.get()).sum::<f64>() / count;
    let (mut squares, mut products) = (0.0, 0.0);
    for (jar, charge) in jars.iter().zip(&charges) {
        squares += (charge - mean_charge).powi(2);
        products += (charge - mean_charge) * (jar.acid.get() - mean_acid);
    }
    let buffering = -products / squares;
    if !(buffering.is_finite() && buffering > 0.0) {
        return Err(TitrationError::NoBuffering);
    }
    Ok((ph_of_charge(mean_charge + mean_acid / buffering), buffering))
}

/// Where malt with this much acid settles, and how that moves with its own pH and
/// with its buffering.
fn curve(ph: f64, buffering: f64, acid: f64) -> (f64, f64, f64) {
    let settled = ph_of_charge(charge(ph) - acid / buffering);
    let slope = charge_slope(settled);
    (
        settled,
        charge_slope(ph) / slope,
        acid / (buffering * buffering * slope),
    )
}

/// The pH at which the groups carry this charge, between 2 and 10.
fn ph_of_charge(wanted: f64) -> f64 {
    let (mut low, mut high) = (2.0, 10.0);
    while high - low > 1e-12 {
        let middle = f64::midpoint(low, high);
        if charge(middle) < wanted {
            low = middle;
        } else {
            high = middle;
        }
    }
    f64::midpoint(low, high)
}
