//! How far a predicted mash pH can be off, and what the doubt comes from.
//!
//! First order: an input that moves the balance by ΔD when it moves by one standard
//! deviation moves the pH by ΔD divided by how much acid the mash takes up per pH
//! unit. Squares of these add up.

use crate::ion::Ion;
use crate::quantity::{Estimate, Fraction, Ph, PhShift};

use super::balance::Demand;
use super::malt::Doubt;
use super::{MashInputs, Settings};

pub(super) use crate::quantity::NINETY_PERCENT;

/// One input and its part in the doubt.
#[derive(Clone, Debug, PartialEq)]
pub struct Influence {
    /// What it is.
    pub kind: InfluenceKind,
    /// In words, with the malt or material it belongs to.
    pub name: String,
    /// How far the pH moves when this input is one standard deviation higher.
    pub effect: PhShift,
    /// Its share of the variance.
    pub share: Fraction,
}

impl Influence {
    /// Whether this is the distilled-water pH of a malt of this name.
    #[must_use]
    pub fn is_ph_of(&self, malt: &str) -> bool {
        self.kind == InfluenceKind::MaltPh && self.name == about_malt("pH", malt)
    }
}

fn about_malt(what: &str, malt: &str) -> String {
    format!("{what} of {malt}")
}

/// What an influence is, for grouping.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum InfluenceKind {
    /// The distilled-water pH of a malt.
    MaltPh,
    /// The buffering of a malt.
    MaltBuffering,
    /// The lactic acid of an acidulated malt.
    MaltAcid,
    /// The acid set free by calcium and magnesium.
    CalciumReaction,
    /// The carbon dioxide that escapes.
    CarbonDioxideLoss,
    /// The alkalinity of the liquor.
    Alkalinity,
    /// The calcium of the liquor.
    Calcium,
    /// The magnesium of the liquor.
    Magnesium,
    /// The volume of liquor.
    Volume,
    /// The strength of a material.
    MaterialStrength,
    /// What the brewery has learned.
    LearnedOffset,
}

/// Every input that is in doubt, greatest share first.
pub(super) fn influences(inputs: &MashInputs, balanced: f64, slope: f64) -> Vec<Influence> {
    let ph = Ph::clamped(balanced);
    let demand = Demand::at(ph, &inputs.settings);
    let litres = inputs.volume.value.get();
    // (kind, name, change of the balance per standard deviation, meq)
    let mut moves: Vec<(InfluenceKind, String, f64)> = Vec::new();

    for item in &inputs.grist {
        for (doubt, lower, upper) in item.malt.behaviour.doubts() {
            let (kind, what) = match doubt {
                Doubt::DistilledPh => (InfluenceKind::MaltPh, "pH"),
                Doubt::Buffering => (InfluenceKind::MaltBuffering, "buffering"),
                Doubt::LacticAcid => (InfluenceKind::MaltAcid, "acid content"),
            };
            let change = item.mass.get() * (upper.demand(balanced) - lower.demand(balanced)) / 2.0;
            moves.push((kind, about_malt(what, &item.malt.name), change));
        }
    }

    let with = |settings: Settings| settled_total(inputs, ph, &settings);
    let settings = inputs.settings;
    let reaction = |sign: f64| Settings {
        calcium_release: moved(settings.calcium_release, sign),
        magnesium_release: moved(settings.magnesium_release, sign),
        ..settings
    };
    moves.push((
        InfluenceKind::CalciumReaction,
        "acid set free by calcium and magnesium".to_owned(),
        (with(reaction(1.0)) - with(reaction(-1.0))) / 2.0,
    ));
    let loss = |sign: f64| Settings {
        carbon_dioxide_lost: moved(settings.carbon_dioxide_lost, sign),
        ..settings
    };
    moves.push((
        InfluenceKind::CarbonDioxideLoss,
        "carbon dioxide lost from the mash".to_owned(),
        (with(loss(1.0)) - with(loss(-1.0))) / 2.0,
    ));

    // More alkalinity is more bicarbonate, so its carbon comes along.
    let doubt = inputs.liquor_doubt;
    moves.push((
        InfluenceKind::Alkalinity,
        "alkalinity of the liquor".to_owned(),
        litres * doubt.alkalinity.get() * demand.share_taken_of_bicarbonate(),
    ));
    for (kind, ion, sd) in [
        (InfluenceKind::Calcium, Ion::Calcium, doubt.calcium),
        (InfluenceKind::Magnesium, Ion::Magnesium, doubt.magnesium),
    ] {
        let change = -litres * demand.released_per_mmol(ion) * sd.get() / ion.grams_per_mol();
        moves.push((kind, format!("{} of the liquor", ion.name()), change));
    }
    moves.push((
        InfluenceKind::Volume,
        "volume of mash liquor".to_owned(),
        inputs.volume.sd * demand.liquor(&inputs.liquor).get(),
    ));
    for addition in &inputs.additions {
        let change = addition.relative_sd.get() * demand.contribution(&addition.brings).get();
        moves.push((
            InfluenceKind::MaterialStrength,
            format!("strength of {}", addition.name),
            change,
        ));
    }
    moves.push((
        InfluenceKind::LearnedOffset,
        "offset learned in this brewery".to_owned(),
        inputs.offset.sd * slope,
    ));

    shared_out(moves, slope)
}

/// The standard deviation of the pH.
pub(super) fn combined_sd(influences: &[Influence]) -> f64 {
    influences
        .iter()
        .map(|influence| influence.effect.get().powi(2))
        .sum::<f64>()
        .sqrt()
}

/// One lot on two lines of the grist, or one acid in two doses, errs as one: what
/// has the same name moves together.
fn shared_out(moves: Vec<(InfluenceKind, String, f64)>, slope: f64) -> Vec<Influence> {
    let mut together: Vec<(InfluenceKind, String, f64)> = Vec::new();
    for (kind, name, change) in moves {
        match together
            .iter_mut()
            .find(|(other_kind, other_name, _)| *other_kind == kind && *other_name == name)
        {
            Some((.., sum)) => *sum += change,
            None => together.push((kind, name, change)),
        }
    }
    let variance: f64 = together
        .iter()
        .map(|(.., change)| (change / slope).powi(2))
        .sum();
    let mut influences: Vec<Influence> = together
        .into_iter()
        .filter(|&(.., change)| change != 0.0)
        .map(|(kind, name, change)| {
            let effect = change / slope;
            Influence {
                kind,
                name,
                effect: PhShift::clamped(effect),
                share: Fraction::clamped(effect * effect / variance),
            }
        })
        .collect();
    influences.sort_by(|a, b| b.share.get().total_cmp(&a.share.get()));
    influences
}

fn moved(estimate: Estimate<Fraction>, sign: f64) -> Estimate<Fraction> {
    Estimate::new(
        Fraction::clamped(estimate.value.get() + sign * estimate.sd),
        estimate.sd,
    )
}

/// What liquor and additions ask under other settings, meq. The grist does not
/// depend on them.
fn settled_total(inputs: &MashInputs, ph: Ph, settings: &Settings) -> f64 {
    let demand = Demand::at(ph, settings);
    let added: f64 = inputs
        .additions
        .iter()
        .map(|addition| demand.contribution(&addition.brings).get())
        .sum();
    inputs.volume.value.get() * demand.liquor(&inputs.liquor).get() + added
}
