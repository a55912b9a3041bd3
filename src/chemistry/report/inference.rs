//! What a report lets us work out although it does not say it.
//!
//! An inference is an offer: it enters a composition only when somebody accepts it.

use super::analyte::Analyte;
use super::balance::{
    CALCIUM_SHARE_OF_HARDNESS, conductivity_of_ions, missing_for_balance, partial_balance,
};
use super::figure::{Figure, Figures};
use super::finding::rounded;
use super::reading::{CanonicalValue, capitalised};
use crate::quantity::MG_CACO3_PER_MEQ;

/// How a figure was worked out.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum InferenceKind {
    /// The ion from its own hardness: the same figure in another unit.
    PartOfHardness,
    /// Total hardness less the other part.
    RestOfHardness,
    /// The usual share of total hardness.
    ShareOfHardness,
    /// What the ion balance lacks.
    Balance,
}

impl InferenceKind {
    /// The stable name in JSON and the database.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::PartOfHardness => "part_of_hardness",
            Self::RestOfHardness => "rest_of_hardness",
            Self::ShareOfHardness => "share_of_hardness",
            Self::Balance => "balance",
        }
    }
}

/// A figure that was not reported but follows, more or less, from those that were.
#[derive(Clone, Debug, PartialEq)]
pub struct Inference {
    /// How it was worked out.
    pub kind: InferenceKind,
    /// The figure, with its wider standard deviation.
    pub figure: Figure,
    /// The same in a sentence.
    pub sentence: String,
}

impl Inference {
    fn new(kind: InferenceKind, analyte: Analyte, value: f64, sd: f64, how: &str) -> Self {
        let sentence = format!(
            "{} about {} ± {} {}, {how}.",
            capitalised(analyte.name()),
            rounded(value),
            rounded(sd),
            analyte.canonical_unit().label()
        );
        Self {
            kind,
            figure: Figure::new(CanonicalValue::measured(analyte, value), sd),
            sentence,
        }
    }

    /// What was worked out.
    #[must_use]
    pub const fn analyte(&self) -> Analyte {
        self.figure.analyte()
    }
}

/// Every inference the figures allow, each for an analyte that was not reported.
pub(super) fn inferences(figures: &Figures) -> Vec<Inference> {
    let mut found = from_hardness(figures);
    found.extend(by_balance(figures));
    found
}

fn from_hardness(figures: &Figures) -> Vec<Inference> {
    use Analyte as A;
    use InferenceKind as Kind;
    let mut found = Vec::new();
    let calcium = figures.as_caco3(A::Calcium);
    let magnesium = figures.as_caco3(A::Magnesium);
    let calcium_part = figures.as_caco3(A::CalciumHardness);
    let magnesium_part = figures.as_caco3(A::MagnesiumHardness);
    let total = figures.as_caco3(A::TotalHardness);
    let mut offer = |kind, ion: Analyte, caco3: f64, sd: f64, how: &str| {
        let per = mg_per_mg_caco3(ion);
        found.push(Inference::new(
            kind,
            ion,
            caco3.max(0.0) * per,
            sd * per,
            how,
        ));
    };
    let sides = [
        (
            A::Calcium,
            calcium,
            calcium_part,
            magnesium.or(magnesium_part),
        ),
        (
            A::Magnesium,
            magnesium,
            magnesium_part,
            calcium.or(calcium_part),
        ),
    ];
    for (ion, reported, part, other) in sides {
        if reported.is_some() {
            continue;
        }
        match (part, total, other) {
            (Some(part), _, _) => {
                let how = format!("which is its hardness of {} mg/L as CaCO₃", rounded(part.0));
                offer(Kind::PartOfHardness, ion, part.0, part.1, &how);
            }
            // A rest below nothing by more than the methods leave open is no rest;
            // the hardness check says so.
            (None, Some(total), Some(other)) => {
                let sd = total.1.hypot(other.1);
                let rest = total.0 - other.0;
                if rest > -2.0 * sd {
                    let how = "the rest of the total hardness";
                    offer(Kind::RestOfHardness, ion, rest, sd, how);
                }
            }
            (None, Some(total), None) => {
                /// How far that share goes either way, one standard deviation.
                /// Common practice, no source.
                const SHARE_SD: f64 = 0.15;
                let share = if ion == A::Calcium {
                    CALCIUM_SHARE_OF_HARDNESS
                } else {
                    1.0 - CALCIUM_SHARE_OF_HARDNESS
                };
                let how = format!("taking {:.0} % of the total hardness", share * 100.0);
                let sd = (SHARE_SD * total.0).hypot(share * total.1);
                offer(Kind::ShareOfHardness, ion, share * total.0, sd, &how);
            }
            _ => {}
        }
    }
    found
}

/// mg of calcium or magnesium per mg of the hardness it makes, as CaCO₃.
fn mg_per_mg_caco3(ion: Analyte) -> f64 {
    ion.ion()
        .map_or(1.0, |ion| ion.grams_per_mol() / 2.0 / MG_CACO3_PER_MEQ)
}

/// The one figure the balance lacks, when what it comes to agrees with the measured
/// conductivity. Without a conductivity nothing checks it: still offered for sodium,
/// chloride and sulfate, with twice the standard deviation.
fn by_balance(figures: &Figures) -> Option<Inference> {
    let missing = missing_for_balance(figures);
    let &[analyte] = missing.as_slice() else {
        return None;
    };
    let balance = partial_balance(figures);
    let lacking = balance.anions.get() - balance.cations.get();
    let (meq, mg_per_meq) = match analyte {
        Analyte::Sodium => (lacking, 22.990),
        Analyte::Chloride => (-lacking, 35.45),
        Analyte::Sulfate => (-lacking, 96.056 / 2.0),
        Analyte::Alkalinity => (-lacking, MG_CACO3_PER_MEQ),
        _ => return None,
    };
    let sd = balance.difference_sd.get() * mg_per_meq;
    if meq <= 0.0 {
        return None;
    }
    let infer =
        |sd, how: &str| Inference::new(InferenceKind::Balance, analyte, meq * mg_per_meq, sd, how);
    let side = if analyte == Analyte::Sodium {
        "anions"
    } else {
        "cations"
    };
    let how = format!("what the {side} leave open");
    match figures.best(Analyte::Conductivity) {
        Some(measured) => {
            let inferred = infer(sd, &format!("{how}, and the conductivity agrees"));
            let calculated = conductivity_of_ions(&figures.with(inferred.figure))?.get();
            let agrees = (measured - calculated).abs() <= 10.0_f64.max(0.10 * calculated);
            agrees.then_some(inferred)
        }
        None if analyte == Analyte::Alkalinity => None,
        None => Some(infer(
            2.0 * sd,
            &format!("{how}; no conductivity was measured to check it"),
        )),
    }
}
