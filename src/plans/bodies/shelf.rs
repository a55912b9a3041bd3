//! A material as plans write it down.

use chemistry::material::{Material, Strength, Substance, Vessel};
use chemistry::plan::{Preference, ShelfItem};
use chemistry::quantity::{
    CostPerUnit, DoseAmount, Estimate, Fraction, GramsPerLitre, GramsPerMl, MeqPerMl,
};
use serde::{Deserialize, Serialize};

use super::{id, or};
use crate::error::Error;
use crate::input::{Number, Problems};
use crate::plans::Lot;
use crate::plans::inputs::ShelfLabel;

/// Something that can be added.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct ShelfItemBody {
    /// What the brewery calls it.
    pub name: String,
    /// An identifier of `/materials`, if it is one of them.
    pub material_id: String,
    /// An identifier of one of its lots.
    pub material_lot_id: String,
    /// The lot's code.
    pub lot: String,
    /// What it is: `gypsum`, `lactic_acid`, …
    pub substance: String,
    /// Share that is the substance, or a liquid's content over its label; the usual
    /// figure when not given.
    pub assay: Number,
    /// Its standard deviation.
    pub assay_sd: Number,
    /// Strength of a liquid, share of the weight.
    pub strength_w_w: Number,
    /// Density at that strength, g/mL.
    pub density_g_per_ml: Number,
    /// Strength of a liquid, g/L.
    pub strength_g_per_l: Number,
    /// Titrated strength of a blended acid, meq/mL.
    pub strength_meq_per_ml: Number,
    /// Share of those equivalents that is hydrochloric acid.
    pub chloride_share: Number,
    /// Where it may go: `liquor_tank`, `mash`, `sparge_liquor`, `kettle`; the usual
    /// vessels when empty.
    pub vessels: Vec<String>,
    /// Smallest amount the scale can tell, g or mL; no rounding when 0.
    pub scale_step: Number,
    /// Price per kg or L; 0 when not given.
    pub price_per_kg_or_l: Number,
    /// Most the batch may take, g or mL.
    pub most: Number,
    /// `usual`, `discouraged` or `avoided`; as is usual for the substance when not given.
    pub preference: String,
}

impl ShelfItemBody {
    pub(super) fn check(&self, problems: &mut Problems) -> Option<(ShelfItem, ShelfLabel)> {
        let name = problems.text("name", &self.name, 80);
        let substance = problems.choice("substance", &self.substance, Substance::from_key);
        let assay = problems.optional_quantity("assay", &self.assay, Fraction::new);
        let assay_sd = or(problems, "assay_sd", &self.assay_sd, 0.0, 0.0, 1.0);
        let share = problems.optional_quantity("strength_w_w", &self.strength_w_w, Fraction::new);
        let density =
            problems.optional_quantity("density_g_per_ml", &self.density_g_per_ml, GramsPerMl::new);
        let grams = problems.optional_quantity(
            "strength_g_per_l",
            &self.strength_g_per_l,
            GramsPerLitre::new,
        );
        let titrated = problems.optional_quantity(
            "strength_meq_per_ml",
            &self.strength_meq_per_ml,
            MeqPerMl::new,
        );
        let chloride =
            problems.optional_quantity("chloride_share", &self.chloride_share, Fraction::new);
        let step = or(problems, "scale_step", &self.scale_step, 0.0, 0.0, 10_000.0);
        let price = or(
            problems,
            "price_per_kg_or_l",
            &self.price_per_kg_or_l,
            0.0,
            0.0,
            1e6,
        );
        let most = problems.optional_quantity("most", &self.most, DoseAmount::new);
        let mut vessels = Vec::new();
        for vessel in &self.vessels {
            vessels.extend(problems.choice("vessels", vessel, Vessel::from_key));
        }
        let preference = match self.preference.as_str() {
            "" => substance.map(|substance| {
                if substance.is_discouraged() {
                    Preference::Discouraged
                } else {
                    Preference::Usual
                }
            }),
            key => problems.choice("preference", key, preference_from_key),
        };
        let material_id = id(problems, "material_id", &self.material_id);
        let lot_id = id(problems, "material_lot_id", &self.material_lot_id);
        let substance = substance?;
        let assay = assay.map_or(substance.default_assay(), |assay| {
            Estimate::new(assay, assay_sd)
        });
        let strength = match (titrated, share, grams) {
            (Some(acid), _, _) => Some(Strength::Titrated {
                acid,
                chloride_share: chloride.unwrap_or(Fraction::constant(0.0)),
            }),
            (None, Some(share), _) => match density {
                Some(density) => Some(Strength::WeightPercent { share, density }),
                None => {
                    problems.add(
                        "density_g_per_ml",
                        "A strength by weight needs the density.",
                    );
                    return None;
                }
            },
            (None, None, Some(grams)) => Some(Strength::WeightPerVolume(grams)),
            (None, None, None) => substance
                .default_strength()
                .map(|(share, density)| Strength::WeightPercent { share, density }),
        };
        let made = match strength {
            None => Material::solid(substance, assay),
            Some(strength) => Material::liquid(substance, strength, assay),
        };
        let material = match made {
            Ok(material) => material,
            Err(error) => {
                problems.add("substance", error.to_string());
                return None;
            }
        };
        if vessels.is_empty() {
            vessels = substance.default_vessels().to_vec();
        }
        let item = ShelfItem {
            name: name?,
            material,
            vessels,
            step: DoseAmount::clamped(step),
            price: CostPerUnit::clamped(price / 1000.0),
            most,
            preference: preference?,
        };
        Some((
            item,
            ShelfLabel {
                id: material_id,
                lot_id,
                lot: self.lot.clone(),
            },
        ))
    }

    /// The substance, strength and assay alone.
    pub(in crate::plans) fn material(&self) -> Result<Material, Error> {
        let mut problems = Problems::new();
        let named = Self {
            name: self.substance.clone(),
            ..self.clone()
        };
        let item = named.check(&mut problems);
        problems.finish()?;
        item.map(|(item, _)| item.material)
            .ok_or_else(|| Error::field("substance", "Name a substance."))
    }

    /// The lot a dose was taken from, if the shelf knows it.
    pub(in crate::plans) fn of_lot(lot: &Lot) -> Option<Self> {
        let material = lot.material.as_ref()?;
        Some(Self {
            material_lot_id: lot.id.map(|id| id.to_string()).unwrap_or_default(),
            lot: lot.code.clone(),
            ..Self::of_material(material)
        })
    }

    pub(super) fn of(item: &ShelfItem, label: &ShelfLabel) -> Self {
        Self {
            name: item.name.clone(),
            material_id: label.id.map(|id| id.to_string()).unwrap_or_default(),
            material_lot_id: label.lot_id.map(|id| id.to_string()).unwrap_or_default(),
            lot: label.lot.clone(),
            vessels: item
                .vessels
                .iter()
                .map(|vessel| vessel.key().to_owned())
                .collect(),
            scale_step: item.step.get().into(),
            price_per_kg_or_l: (item.price.get() * 1000.0).into(),
            most: item.most.map(DoseAmount::get).into(),
            preference: preference_key(item.preference).into(),
            ..Self::of_material(&item.material)
        }
    }

    fn of_material(material: &Material) -> Self {
        let mut body = Self {
            substance: material.substance().key().into(),
            assay: material.assay().value.get().into(),
            assay_sd: material.assay().sd.into(),
            ..Self::default()
        };
        match material.strength() {
            None => {}
            Some(Strength::WeightPercent { share, density }) => {
                body.strength_w_w = share.get().into();
                body.density_g_per_ml = density.get().into();
            }
            Some(Strength::WeightPerVolume(grams)) => body.strength_g_per_l = grams.get().into(),
            Some(Strength::Titrated {
                acid,
                chloride_share,
            }) => {
                body.strength_meq_per_ml = acid.get().into();
                body.chloride_share = chloride_share.get().into();
            }
        }
        body
    }
}

fn preference_from_key(key: &str) -> Option<Preference> {
    [
        Preference::Usual,
        Preference::Discouraged,
        Preference::Avoided,
    ]
    .into_iter()
    .find(|it| preference_key(*it) == key)
}

const fn preference_key(preference: Preference) -> &'static str {
    match preference {
        Preference::Usual => "usual",
        Preference::Discouraged => "discouraged",
        Preference::Avoided => "avoided",
    }
}
