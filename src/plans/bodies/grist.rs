//! A malt as plans write it down.

use chemistry::mash::malt::{Behaviour, Groups, Malt, Taylor};
use chemistry::mash::{GristItem, MaltClass};
use chemistry::quantity::{Ebc, Estimate, Fraction, Kilograms, Ph, RelativeBuffering, RelativeSd};
use serde::{Deserialize, Serialize};

use super::{id, or};
use crate::input::{Number, Problems};
use crate::plans::inputs::MaltLabel;

/// A malt with its mass and its acid-base behaviour.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct PlanMaltBody {
    /// What the brewery calls it, with the lot. Malts of one name err together.
    pub name: String,
    /// An identifier of `/malts`, if it is one of them.
    pub malt_id: String,
    /// An identifier of one of its lots.
    pub malt_lot_id: String,
    /// Its mass, kg.
    pub kilograms: Number,
    /// The class whose figures are assumed when none are given: `pilsner`, `crystal`, …
    pub class: String,
    /// Its colour, EBC: what the class figures of crystal malt depend on.
    pub colour_ebc: Number,
    /// pH of its mash in distilled water; from the class when not given.
    pub distilled_ph: Number,
    /// Its standard deviation.
    pub distilled_ph_sd: Number,
    /// Buffering relative to an average pale malt.
    pub relative_buffering: Number,
    /// Its standard deviation.
    pub relative_buffering_sd: Number,
    /// Measured coefficients a₁, a₂, a₃ in place of the relative buffering.
    pub coefficients: Vec<Number>,
    /// Lactic acid, share of the weight, for acidulated malt.
    pub lactic_share: Number,
    /// Its standard deviation.
    pub lactic_share_sd: Number,
    /// How these figures are known, in words.
    pub known_by: String,
}

impl PlanMaltBody {
    pub(super) fn check(&self, problems: &mut Problems) -> Option<(GristItem, MaltLabel)> {
        let name = problems.text("name", &self.name, 120);
        let mass = problems.quantity("kilograms", &self.kilograms, Kilograms::new);
        let class = if self.class.is_empty() {
            None
        } else {
            problems.choice("class", &self.class, MaltClass::from_key)
        };
        let colour = problems.optional_quantity("colour_ebc", &self.colour_ebc, Ebc::new);
        let own_ph = problems.optional_quantity("distilled_ph", &self.distilled_ph, Ph::new);
        let own_ph_sd = or(
            problems,
            "distilled_ph_sd",
            &self.distilled_ph_sd,
            0.05,
            0.0,
            2.0,
        );
        let own_buffering = problems.optional_quantity(
            "relative_buffering",
            &self.relative_buffering,
            RelativeBuffering::new,
        );
        let own_buffering_sd = or(
            problems,
            "relative_buffering_sd",
            &self.relative_buffering_sd,
            0.15,
            0.0,
            5.0,
        );
        let own_lactic =
            problems.optional_quantity("lactic_share", &self.lactic_share, Fraction::new);
        let own_lactic_sd = or(
            problems,
            "lactic_share_sd",
            &self.lactic_share_sd,
            0.0,
            0.0,
            1.0,
        );
        let malt_id = id(problems, "malt_id", &self.malt_id);
        let lot_id = id(problems, "malt_lot_id", &self.malt_lot_id);
        let assumed = class.map(|class| class.behaviour(colour.map(Into::into)));
        let assumed_groups = match assumed {
            Some(Behaviour::Groups(groups)) => Some(groups),
            Some(Behaviour::Acidulated { base, .. }) => Some(base),
            _ => None,
        };
        let ph = own_ph
            .map(|ph| Estimate::new(ph, own_ph_sd))
            .or(assumed_groups.map(|groups| groups.distilled_ph));
        let Some(ph) = ph else {
            problems.add(
                "distilled_ph",
                "Give the pH in distilled water, or the class to assume it from.",
            );
            return None;
        };
        let buffering = own_buffering
            .map(|buffering| Estimate::new(buffering, own_buffering_sd))
            .or(assumed_groups.map(|groups| groups.buffering))
            .unwrap_or(Estimate::new(RelativeBuffering::constant(1.0), 0.15));
        let lactic = own_lactic
            .map(|lactic| Estimate::new(lactic, own_lactic_sd))
            .or(match assumed {
                Some(Behaviour::Acidulated { lactic, .. }) => Some(lactic),
                _ => None,
            });
        let behaviour = match (&self.coefficients[..], lactic) {
            ([], None) => Behaviour::Groups(Groups::new(ph, buffering)),
            ([], Some(lactic)) => Behaviour::Acidulated {
                base: Groups::new(ph, buffering),
                lactic,
            },
            ([a1, a2, a3], None) => {
                let mut read =
                    |number: &Number| problems.quantity("coefficients", number, Ok::<_, String>);
                let coefficients = [read(a1)?, read(a2)?, read(a3)?];
                let relative_sd = RelativeSd::clamped(own_buffering_sd);
                match Taylor::new(ph, coefficients, relative_sd) {
                    Ok(taylor) => Behaviour::Taylor(taylor),
                    Err(error) => {
                        problems.add("coefficients", error.to_string());
                        return None;
                    }
                }
            }
            _ => {
                problems.add(
                    "coefficients",
                    "Give three coefficients, and none for acidulated malt.",
                );
                return None;
            }
        };
        let label = MaltLabel {
            id: malt_id,
            lot_id,
            class: self.class.clone(),
            known_by: self.known_by.clone(),
        };
        Some((
            GristItem {
                malt: Malt {
                    name: name?,
                    behaviour,
                },
                mass: mass?,
            },
            label,
        ))
    }

    pub(super) fn of(item: &GristItem, label: &MaltLabel) -> Self {
        let body = Self {
            name: item.malt.name.clone(),
            malt_id: label.id.map(|id| id.to_string()).unwrap_or_default(),
            malt_lot_id: label.lot_id.map(|id| id.to_string()).unwrap_or_default(),
            kilograms: item.mass.get().into(),
            class: label.class.clone(),
            known_by: label.known_by.clone(),
            ..Self::default()
        };
        let groups = |groups: Groups| Self {
            distilled_ph: groups.distilled_ph.value.get().into(),
            distilled_ph_sd: groups.distilled_ph.sd.into(),
            relative_buffering: groups.buffering.value.get().into(),
            relative_buffering_sd: groups.buffering.sd.into(),
            ..body.clone()
        };
        match item.malt.behaviour {
            Behaviour::Groups(inner) => groups(inner),
            Behaviour::Acidulated { base, lactic } => Self {
                lactic_share: lactic.value.get().into(),
                lactic_share_sd: lactic.sd.into(),
                ..groups(base)
            },
            Behaviour::Taylor(taylor) => Self {
                distilled_ph: taylor.distilled_ph().value.get().into(),
                distilled_ph_sd: taylor.distilled_ph().sd.into(),
                relative_buffering_sd: taylor.relative_sd().get().into(),
                coefficients: taylor.coefficients().map(Number::from).to_vec(),
                ..body
            },
        }
    }
}
