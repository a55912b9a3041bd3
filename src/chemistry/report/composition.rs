//! From believed figures to a water to calculate with.

use super::analyte::Analyte;
use super::balance::{ASSUMED_PH, ASSUMED_PH_TEMPERATURE};
use super::figure::{Figure, Figures};
use super::finding::{amount, rounded};
use super::inference::Inference;
use super::reading::capitalised;
use super::typed::Qualifier;
use crate::ion::{Ion, IonMap};
use crate::quantity::{Celsius, MgPerL, MgPerLAsCaCO3, Ph};
use crate::water::MeasuredWater;

/// A water with how well each figure is known and what was taken for granted.
#[derive(Clone, Debug, PartialEq)]
pub struct Composition {
    /// The water.
    pub water: MeasuredWater,
    /// One standard deviation of each ion.
    pub ion_sd: IonMap<MgPerL>,
    /// One standard deviation of the alkalinity.
    pub alkalinity_sd: MgPerLAsCaCO3,
    /// One standard deviation of the pH, in pH units.
    pub ph_sd: f64,
    /// What was not reported and what stands in for it; each to be shown.
    pub assumed: Vec<Assumption>,
}

impl Composition {
    /// A water from figures that may come from several reports, at most one for each
    /// analyte. What is missing is treated as in
    /// [`Assessment::composition`](super::Assessment::composition).
    pub fn of(figures: Vec<Figure>, ph_temperature: Option<Celsius>) -> Result<Self, NotEnough> {
        composition(&Figures::new(figures), ph_temperature, &[])
    }
}

/// One thing taken for granted.
#[derive(Clone, Debug, PartialEq)]
pub struct Assumption {
    /// What it is about.
    pub analyte: Analyte,
    /// What was assumed, in a sentence.
    pub sentence: String,
}

/// A water cannot be made up without these.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
#[error("Nothing can be calculated without {}. Add the figure, or accept what can be worked out.", names(.0))]
pub struct NotEnough(
    /// What is neither reported nor accepted.
    pub Vec<Analyte>,
);

fn names(analytes: &[Analyte]) -> String {
    let names: Vec<_> = analytes.iter().map(|analyte| analyte.name()).collect();
    names.join(" and ")
}

/// Standard deviation given to an ion that was not reported and counts as none,
/// mg/L. Assumed, about the usual content of a brewing water; ions left out here are
/// rarely worth a milligram.
fn unreported_sd(ion: Ion) -> Option<f64> {
    match ion {
        Ion::Sodium | Ion::Chloride | Ion::Sulfate => Some(30.0),
        Ion::Nitrate => Some(10.0),
        Ion::Potassium => Some(3.0),
        _ => None,
    }
}
/// Standard deviation of an assumed pH: most liquors lie within 7.0 and 8.2.
const ASSUMED_PH_SD: f64 = 0.4;

pub(super) fn composition(
    figures: &Figures,
    ph_temperature: Option<Celsius>,
    accepted: &[Inference],
) -> Result<Composition, NotEnough> {
    let mut figures = figures.clone();
    let mut assumed = Vec::new();
    let mut assume = |analyte, sentence| assumed.push(Assumption { analyte, sentence });
    for inference in accepted {
        // What was measured is never replaced by what was worked out.
        if !figures.has(inference.analyte()) {
            figures = figures.with(inference.figure);
            assume(inference.analyte(), inference.sentence.clone());
        }
    }
    let mut lacking: Vec<_> = [Analyte::Calcium, Analyte::Magnesium]
        .into_iter()
        .filter(|analyte| !figures.has(*analyte))
        .collect();
    let alkalinity = figures.alkalinity();
    let Some((alkalinity, alkalinity_sd)) = alkalinity.filter(|_| lacking.is_empty()) else {
        if alkalinity.is_none() {
            lacking.push(Analyte::Alkalinity);
        }
        return Err(NotEnough(lacking));
    };

    let mut ions = IonMap::from_fn(|_| MgPerL::constant(0.0));
    let mut ion_sd = ions;
    for analyte in Analyte::ALL {
        let Some(ion) = analyte.ion() else { continue };
        if let Some(figure) = figures.get(analyte) {
            ions[ion] = MgPerL::clamped(figure.best());
            ion_sd[ion] = MgPerL::clamped(figure.sd());
            if figure.canonical().qualifier() == Qualifier::Below {
                assume(analyte, half_the_limit(figure));
            }
        } else if let Some(sd) = unreported_sd(ion) {
            ion_sd[ion] = MgPerL::clamped(sd);
            assume(
                analyte,
                format!(
                    "{} was not reported and counts as none, ± {} mg/L.",
                    capitalised(analyte.name()),
                    rounded(sd)
                ),
            );
        }
    }
    let ph = figures.get(Analyte::Ph);
    if ph.is_none() {
        assume(
            Analyte::Ph,
            format!("pH was not reported; {} is taken.", ASSUMED_PH.get()),
        );
    } else if ph_temperature.is_none() {
        assume(
            Analyte::Ph,
            format!("The pH is taken as read at {ASSUMED_PH_TEMPERATURE}."),
        );
    }
    for analyte in [Analyte::Alkalinity, Analyte::Bicarbonate] {
        if let Some(figure) = figures.get(analyte)
            && figure.canonical().qualifier() == Qualifier::Below
        {
            assume(analyte, half_the_limit(figure));
        }
    }
    Ok(Composition {
        water: MeasuredWater {
            ions,
            alkalinity: MgPerLAsCaCO3::clamped(alkalinity),
            ph: ph.map_or(ASSUMED_PH, |figure| Ph::clamped(figure.best())),
            temperature: ph_temperature.unwrap_or(ASSUMED_PH_TEMPERATURE),
        },
        ion_sd,
        alkalinity_sd: MgPerLAsCaCO3::clamped(alkalinity_sd),
        ph_sd: ph.map_or(ASSUMED_PH_SD, Figure::sd),
        assumed,
    })
}

fn half_the_limit(figure: Figure) -> String {
    format!(
        "{} is only known to be below {}; half of that is taken, ± as much.",
        capitalised(figure.analyte().name()),
        amount(figure.canonical().get(), figure.analyte())
    )
}
