//! A water as plans write it down.

use std::collections::BTreeMap;

use chemistry::carbonate::Speciation;
use chemistry::ion::{Ion, IonMap};
use chemistry::mash::LiquorDoubt;
use chemistry::plan::Source;
use chemistry::quantity::{
    Celsius, CostPerLitre, Fraction, MeqPerL, MgPerL, MgPerLAsCaCO3, MmolPerL, Ph,
};
use chemistry::water::{MeasuredWater, Water};
use serde::{Deserialize, Serialize};

use super::{id, ions, ions_body, or};
use crate::input::{Flag, Number, Problems};
use crate::plans::inputs::SourceLabel;

/// A water.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct PlanSourceBody {
    /// What the brewery calls it.
    pub name: String,
    /// An identifier of `/sources`, if it is one of them.
    pub source_id: String,
    /// The water tests its composition was read from.
    pub water_test_ids: Vec<String>,
    /// Date of the latest of them.
    pub tested_on: String,
    /// Least share of the liquor it must make up, 0 to 1; 0 when not given.
    pub lowest_share: Number,
    /// Greatest share it may make up, 0 to 1; 1 when not given.
    pub highest_share: Number,
    /// Whether it is there to thin the others.
    pub blending: Flag,
    /// Price per cubic metre; 0 when not given.
    pub price_per_m3: Number,
    /// Each ion by its name, mg/L of the ion itself: `{"calcium": 62}`. Ions not named
    /// are taken as absent.
    #[schema(value_type = std::collections::BTreeMap<String, f64>)]
    pub ions_mg_per_l: BTreeMap<String, Number>,
    /// Total alkalinity, mg/L as CaCO₃.
    pub alkalinity_mg_per_l_as_caco3: Number,
    /// Dissolved inorganic carbon, mmol/L; computed from the pH when not given.
    pub carbon_mmol_per_l: Number,
    /// pH, when the carbon is not given; 7.5 is assumed when neither is.
    pub ph: Number,
    /// Temperature of the pH reading; 20 °C when not given.
    pub temperature_c: Number,
    /// One standard deviation of each ion, mg/L; 0 when not given.
    #[schema(value_type = std::collections::BTreeMap<String, f64>)]
    pub ion_sd_mg_per_l: BTreeMap<String, Number>,
    /// One standard deviation of the alkalinity, mg/L as CaCO₃; 0 when not given.
    pub alkalinity_sd_mg_per_l_as_caco3: Number,
    /// What was assumed of it.
    pub assumed: Vec<String>,
    /// Where it is outside the limits for drinking water, in words.
    pub outside_potable: Vec<String>,
}

impl PlanSourceBody {
    pub(super) fn check(&self, problems: &mut Problems) -> Option<(Source, SourceLabel)> {
        let name = problems.text("name", &self.name, 80);
        let amounts = ions(problems, "ions_mg_per_l", &self.ions_mg_per_l);
        let sds = ions(problems, "ion_sd_mg_per_l", &self.ion_sd_mg_per_l);
        let alkalinity = problems.quantity(
            "alkalinity_mg_per_l_as_caco3",
            &self.alkalinity_mg_per_l_as_caco3,
            MgPerLAsCaCO3::new,
        );
        let alkalinity_sd = or(
            problems,
            "alkalinity_sd_mg_per_l_as_caco3",
            &self.alkalinity_sd_mg_per_l_as_caco3,
            0.0,
            0.0,
            10_000.0,
        );
        let carbon =
            problems.optional_quantity("carbon_mmol_per_l", &self.carbon_mmol_per_l, MmolPerL::new);
        let ph = problems
            .optional_quantity("ph", &self.ph, Ph::new)
            .unwrap_or(Ph::constant(7.5));
        let temperature = problems
            .optional_quantity("temperature_c", &self.temperature_c, Celsius::new)
            .unwrap_or(Celsius::constant(20.0));
        let lowest = or(problems, "lowest_share", &self.lowest_share, 0.0, 0.0, 1.0);
        let highest = or(
            problems,
            "highest_share",
            &self.highest_share,
            1.0,
            0.0,
            1.0,
        );
        if lowest > highest {
            problems.add("lowest_share", "The least share is above the greatest.");
        }
        let price = or(problems, "price_per_m3", &self.price_per_m3, 0.0, 0.0, 1e6);
        let source_id = id(problems, "source_id", &self.source_id);
        let tests = self
            .water_test_ids
            .iter()
            .filter_map(|test| id(problems, "water_test_ids", test))
            .collect();
        let tested_on = if self.tested_on.is_empty() {
            None
        } else {
            problems.date("tested_on", &self.tested_on)
        };
        let (name, alkalinity) = (name?, alkalinity?);
        let ions = IonMap::from_fn(|ion| amounts[ion].unwrap_or(MgPerL::constant(0.0)));
        let ion_sd = IonMap::from_fn(|ion| sds[ion].unwrap_or(MgPerL::constant(0.0)));
        let water = match carbon {
            Some(carbon) => Water {
                ions,
                alkalinity: alkalinity.into(),
                carbon,
            },
            None => {
                let measured = MeasuredWater {
                    ions,
                    alkalinity,
                    ph,
                    temperature,
                };
                match Speciation::of_measured(&measured) {
                    Ok(speciation) => *speciation.water(),
                    Err(error) => {
                        problems.add("ph", format!("{error}"));
                        return None;
                    }
                }
            }
        };
        let source = Source {
            water,
            doubt: LiquorDoubt {
                alkalinity: MeqPerL::clamped(alkalinity_sd / chemistry::quantity::MG_CACO3_PER_MEQ),
                calcium: ion_sd[Ion::Calcium],
                magnesium: ion_sd[Ion::Magnesium],
            },
            lowest: Fraction::clamped(lowest),
            highest: Fraction::clamped(highest),
            blending: self.blending.0,
            price: CostPerLitre::clamped(price / 1000.0),
        };
        let label = SourceLabel {
            name,
            id: source_id,
            tests,
            tested_on,
            assumed: self.assumed.clone(),
            outside_potable: self.outside_potable.clone(),
            ion_sd,
        };
        Some((source, label))
    }

    pub(super) fn of(source: &Source, label: &SourceLabel) -> Self {
        Self {
            name: label.name.clone(),
            source_id: label.id.map(|id| id.to_string()).unwrap_or_default(),
            water_test_ids: label.tests.iter().map(ToString::to_string).collect(),
            tested_on: label
                .tested_on
                .map(|date| date.to_string())
                .unwrap_or_default(),
            lowest_share: source.lowest.get().into(),
            highest_share: source.highest.get().into(),
            blending: Flag(source.blending),
            price_per_m3: (source.price.get() * 1000.0).into(),
            ions_mg_per_l: ions_body(&source.water.ions),
            alkalinity_mg_per_l_as_caco3: source.water.alkalinity_as_caco3().get().into(),
            carbon_mmol_per_l: source.water.carbon.get().into(),
            ph: Number::Missing,
            temperature_c: Number::Missing,
            ion_sd_mg_per_l: ions_body(&label.ion_sd),
            alkalinity_sd_mg_per_l_as_caco3: (source.doubt.alkalinity.get()
                * chemistry::quantity::MG_CACO3_PER_MEQ)
                .into(),
            assumed: label.assumed.clone(),
            outside_potable: label.outside_potable.clone(),
        }
    }
}
