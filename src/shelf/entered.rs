//! What is typed about a material or a lot, and the checks it passes.

use chemistry::material::{Strength, Substance, Vessel};
use chemistry::quantity::{DoseAmount, Estimate, Fraction, GramsPerLitre, GramsPerMl, MeqPerMl};
use jiff::civil::Date;
use serde::{Deserialize, Serialize};

use super::{CERTIFIED_SD, Material, MaterialLot, Price, labelled};
use crate::error::Error;
use crate::id::{MaterialId, MaterialLotId};
use crate::input::{Flag, Number, Problems, percent, share, some_share, within};

/// How strong a liquid is, in one of three ways. All blank: as usual, assumed.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct StrengthBody {
    /// Share of the weight, % w/w; needs the density.
    pub percent: Number,
    /// Density of that strength, g/mL.
    pub density_g_per_ml: Number,
    /// Or grams of substance per litre of liquid.
    pub g_per_l: Number,
    /// Or, for a blended acid, its titrated strength, meq/mL.
    pub meq_per_ml: Number,
    /// Share of those equivalents that is hydrochloric acid, %; the rest is sulfuric.
    pub chloride_percent: Number,
}

impl From<Option<Strength>> for StrengthBody {
    fn from(strength: Option<Strength>) -> Self {
        let mut body = Self::default();
        match strength {
            None => {}
            Some(Strength::WeightPercent { share, density }) => {
                body.percent = percent(share.get()).into();
                body.density_g_per_ml = density.get().into();
            }
            Some(Strength::WeightPerVolume(grams)) => body.g_per_l = grams.get().into(),
            Some(Strength::Titrated {
                acid,
                chloride_share,
            }) => {
                body.meq_per_ml = acid.get().into();
                body.chloride_percent = percent(chloride_share.get()).into();
            }
        }
        body
    }
}

impl StrengthBody {
    fn check(&self, problems: &mut Problems) -> Option<Strength> {
        let by_weight = !(self.percent.is_missing() && self.density_g_per_ml.is_missing());
        let by_volume = !self.g_per_l.is_missing();
        let titrated = !(self.meq_per_ml.is_missing() && self.chloride_percent.is_missing());
        match (by_weight, by_volume, titrated) {
            (false, false, false) => None,
            (true, false, false) => {
                let share = problems.quantity("percent", &self.percent, some_share);
                let density = if self.density_g_per_ml.is_missing() {
                    problems.add(
                        "density_g_per_ml",
                        "Enter the density of this strength in g/mL, from the label or the data sheet.",
                    );
                    None
                } else {
                    problems.quantity("density_g_per_ml", &self.density_g_per_ml, GramsPerMl::new)
                };
                Some(Strength::WeightPercent {
                    share: share?,
                    density: density?,
                })
            }
            (false, true, false) => problems
                .quantity("g_per_l", &self.g_per_l, |value| {
                    within(value, "g/L", 0.1, GramsPerLitre::HIGH).and_then(GramsPerLitre::new)
                })
                .map(Strength::WeightPerVolume),
            (false, false, true) => {
                let acid = problems.quantity("meq_per_ml", &self.meq_per_ml, |value| {
                    within(value, "meq/mL", 0.01, MeqPerMl::HIGH).and_then(MeqPerMl::new)
                });
                let chloride = problems.quantity("chloride_percent", &self.chloride_percent, share);
                Some(Strength::Titrated {
                    acid: acid?,
                    chloride_share: chloride?,
                })
            }
            _ => {
                let field = if by_weight { "percent" } else { "g_per_l" };
                problems.add(
                    field,
                    "Give the strength in one way only, as the label prints it, and leave the others blank.",
                );
                None
            }
        }
    }
}

/// Reads an assay and its standard deviation, which is `usual_sd` where none is given.
fn assay(
    problems: &mut Problems,
    assay_percent: &Number,
    assay_sd_percent: &Number,
    usual_sd: f64,
) -> Option<Estimate<Fraction>> {
    let value = problems.optional_quantity("assay_percent", assay_percent, some_share);
    let sd = problems.optional_quantity("assay_sd_percent", assay_sd_percent, |percent| {
        within(percent, "%", 0.0, 50.0)
    });
    problems.doubt_needs_figure("assay_sd_percent", assay_sd_percent, assay_percent);
    value.map(|value| Estimate::new(value, sd.map_or(usual_sd, |percent| percent / 100.0)))
}

/// Which vessels a material may go into.
#[derive(Clone, Copy, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct VesselsBody {
    /// All the liquor of a batch, before it is divided.
    pub liquor_tank: Flag,
    /// The mash.
    pub mash: Flag,
    /// The liquor that rinses the grains.
    pub sparge_liquor: Flag,
    /// The kettle.
    pub kettle: Flag,
}

impl VesselsBody {
    /// These ticked, the others not.
    pub fn of(vessels: &[Vessel]) -> Self {
        let ticked = |vessel| Flag(vessels.contains(&vessel));
        Self {
            liquor_tank: ticked(Vessel::LiquorTank),
            mash: ticked(Vessel::Mash),
            sparge_liquor: ticked(Vessel::SpargeLiquor),
            kettle: ticked(Vessel::Kettle),
        }
    }

    fn ticked(self) -> Vec<Vessel> {
        let flags = [self.liquor_tank, self.mash, self.sparge_liquor, self.kettle];
        let all = Vessel::ALL.into_iter().zip(flags);
        all.filter(|(_, flag)| flag.0)
            .map(|(vessel, _)| vessel)
            .collect()
    }
}

/// A material as it is entered.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct NewMaterialBody {
    /// What the brewery calls it.
    #[schema(required = true, min_length = 1)]
    pub name: String,
    /// What it is, for example `gypsum` or `lactic_acid`.
    #[schema(required = true, min_length = 1)]
    pub substance: String,
    /// How strong a liquid is. Blank: as usual for the substance, assumed.
    pub strength: StrengthBody,
    /// Share of a solid's weight that is the substance with its stated water; for a
    /// liquid what it holds over what its label says, %. Blank: as usual, assumed.
    pub assay_percent: Number,
    /// Its standard deviation, percentage points. Blank: as usual, assumed.
    pub assay_sd_percent: Number,
    /// Step of the scale, g for a solid, mL for a liquid.
    #[schema(required = true)]
    pub scale_step_g_or_ml: Number,
    /// How far a weighed dose may be from its plan before it needs a reason, %. Blank: 2,
    /// assumed. One step of the scale is always allowed.
    pub tolerance_percent: Number,
    /// Warn when less than this is on the shelf, g for a solid, mL for a liquid. Blank:
    /// never.
    pub reorder_below_g_or_ml: Number,
    /// The most of it in one hectolitre of liquor, g for a solid, mL for a liquid.
    pub highest_g_or_ml_per_hl: Number,
    /// Price per kilogram of a solid, per litre of a liquid.
    pub price_per_kg_or_l: Number,
    /// Where it may go.
    pub vessels: VesselsBody,
    /// Use it only where nothing else reaches.
    pub avoid: Flag,
    /// Anything else.
    pub notes: String,
    /// Whether plans may use it.
    pub in_use: Flag,
}

impl From<&Material> for NewMaterialBody {
    fn from(material: &Material) -> Self {
        Self {
            name: material.name.clone(),
            substance: material.substance.key().into(),
            strength: material.strength.into(),
            assay_percent: material
                .assay
                .map(|assay| percent(assay.value.get()))
                .into(),
            assay_sd_percent: material.assay.map(|assay| percent(assay.sd)).into(),
            scale_step_g_or_ml: material.scale_step.get().into(),
            tolerance_percent: material
                .own_tolerance
                .map(|share| percent(share.get()))
                .into(),
            reorder_below_g_or_ml: material.reorder_below.map(DoseAmount::get).into(),
            highest_g_or_ml_per_hl: material.highest.map(DoseAmount::get).into(),
            price_per_kg_or_l: material.price.map(Price::get).into(),
            vessels: VesselsBody::of(&material.vessels),
            avoid: Flag(material.avoid),
            notes: material.notes.clone().unwrap_or_default(),
            in_use: Flag(material.in_use),
        }
    }
}

impl NewMaterialBody {
    /// What a form for this substance begins with.
    pub fn offered(substance: Substance) -> Self {
        Self {
            name: substance.name().into(),
            substance: substance.key().into(),
            scale_step_g_or_ml: 1.0.into(),
            vessels: VesselsBody::of(substance.default_vessels()),
            avoid: Flag(substance.is_discouraged()),
            in_use: Flag(true),
            ..Self::default()
        }
    }
}

impl TryFrom<NewMaterialBody> for Material {
    type Error = Error;

    /// A new material; whoever revises one keeps its identifier and counts its version.
    fn try_from(body: NewMaterialBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let checked = material(&body, &mut problems);
        problems.finish()?;
        checked.ok_or_else(|| Error::field("", "Fill in every field."))
    }
}

fn material(body: &NewMaterialBody, problems: &mut Problems) -> Option<Material> {
    let name = problems.text("name", &body.name, 80);
    let substance = problems.choice("substance", &body.substance, Substance::from_key);
    let strength = problems.within("strength", |problems| body.strength.check(problems));
    let usual_sd = substance.map_or(0.01, |substance| substance.default_assay().sd);
    let assay = assay(
        problems,
        &body.assay_percent,
        &body.assay_sd_percent,
        usual_sd,
    );
    let more_than_nothing =
        |value| within(value, "g or mL", 0.001, 100_000.0).and_then(DoseAmount::new);
    let scale_step = problems.quantity(
        "scale_step_g_or_ml",
        &body.scale_step_g_or_ml,
        more_than_nothing,
    );
    let own_tolerance =
        problems.optional_quantity("tolerance_percent", &body.tolerance_percent, |percent| {
            within(percent, "%", 0.1, 20.0).map(|percent| Fraction::clamped(percent / 100.0))
        });
    let reorder_below = problems.optional_quantity(
        "reorder_below_g_or_ml",
        &body.reorder_below_g_or_ml,
        |value| within(value, "g or mL", 1.0, 1e8).and_then(DoseAmount::new),
    );
    let highest = problems.optional_quantity(
        "highest_g_or_ml_per_hl",
        &body.highest_g_or_ml_per_hl,
        more_than_nothing,
    );
    let price =
        problems.optional_quantity("price_per_kg_or_l", &body.price_per_kg_or_l, Price::new);
    let vessels = body.vessels.ticked();
    if vessels.is_empty() {
        problems.add(
            "vessels",
            "Tick at least one vessel. What must not be used at all is taken out of use instead.",
        );
    }
    let notes = problems.optional_text("notes", &body.notes, 2000);
    if !problems.is_empty() {
        return None;
    }
    let substance = substance?;
    let as_labelled = match labelled(substance, strength, assay) {
        Ok(label) => label,
        Err(error) => {
            problems.add(place(substance), error.to_string());
            return None;
        }
    };
    Some(Material {
        id: MaterialId::new(),
        name: name?,
        substance,
        strength,
        assay,
        scale_step: scale_step?,
        own_tolerance,
        reorder_below,
        price,
        vessels,
        highest,
        avoid: body.avoid.0,
        notes,
        in_use: body.in_use.0,
        version: 1,
        as_labelled,
    })
}

/// The field beside which a strength's fault stands.
fn place(substance: Substance) -> &'static str {
    match substance {
        Substance::BlendedAcid => "strength.meq_per_ml",
        _ => "strength.percent",
    }
}

/// A lot as it is entered.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct NewMaterialLotBody {
    /// The code on the pack.
    #[schema(required = true, min_length = 1)]
    pub code: String,
    /// When it came, `2026-03-31`. May be blank.
    pub received_on: String,
    /// When it was opened. May be blank.
    pub opened_on: String,
    /// The last day its maker vouches for it. May be blank.
    pub use_by: String,
    /// The strength its certificate gives, for a liquid.
    pub strength: StrengthBody,
    /// The assay its certificate gives, or the brewery found, %.
    pub assay_percent: Number,
    /// Its standard deviation, percentage points. Blank: 1.
    pub assay_sd_percent: Number,
    /// When the brewery found it, `2026-03-31`. Blank: the certificate gives it.
    pub assayed_on: String,
    /// Whether it is the one being weighed from. The one before it no longer is.
    pub current: Flag,
    /// Anything else.
    pub notes: String,
    /// Whether it is still there.
    pub in_use: Flag,
}

impl From<&MaterialLot> for NewMaterialLotBody {
    fn from(lot: &MaterialLot) -> Self {
        let date = |date: Option<Date>| date.map(|date| date.to_string()).unwrap_or_default();
        Self {
            code: lot.code.clone(),
            received_on: date(lot.received_on),
            opened_on: date(lot.opened_on),
            use_by: date(lot.use_by),
            strength: lot.strength.into(),
            assay_percent: lot.assay.map(|assay| percent(assay.value.get())).into(),
            assay_sd_percent: lot.assay.map(|assay| percent(assay.sd)).into(),
            assayed_on: date(lot.assayed_on),
            current: Flag(lot.current),
            notes: lot.notes.clone().unwrap_or_default(),
            in_use: Flag(lot.in_use),
        }
    }
}

impl NewMaterialLotBody {
    /// What the form of a new lot begins with.
    pub fn offered() -> Self {
        Self {
            current: Flag(true),
            in_use: Flag(true),
            ..Self::default()
        }
    }

    /// A new lot of this material; whoever revises one keeps its identifier and counts
    /// its version. `today` is the brewery's date.
    pub fn lot_of(self, material: &Material, today: Date) -> Result<MaterialLot, Error> {
        let mut problems = Problems::new();
        let checked = lot(&self, material, today, &mut problems);
        problems.finish()?;
        checked.ok_or_else(|| Error::field("", "Fill in every field."))
    }
}

fn lot(
    body: &NewMaterialLotBody,
    material: &Material,
    today: Date,
    problems: &mut Problems,
) -> Option<MaterialLot> {
    let code = problems.text("code", &body.code, 60);
    let received_on = problems.past_date("received_on", &body.received_on, today);
    let opened_on = problems.past_date("opened_on", &body.opened_on, today);
    let use_by = problems.optional_date("use_by", &body.use_by);
    if received_on
        .zip(opened_on)
        .is_some_and(|(came, opened)| opened < came)
    {
        problems.add("opened_on", "It cannot have been opened before it came.");
    }
    let strength = problems.within("strength", |problems| body.strength.check(problems));
    let assay = assay(
        problems,
        &body.assay_percent,
        &body.assay_sd_percent,
        CERTIFIED_SD,
    );
    let assayed_on = problems.past_date("assayed_on", &body.assayed_on, today);
    if assayed_on.is_some() && body.assay_percent.is_missing() {
        problems.add("assay_percent", "Enter the assay that was found that day.");
    }
    if body.current.0 && !body.in_use.0 {
        problems.add(
            "current",
            "A lot that is used up cannot be the current one.",
        );
    }
    let notes = problems.optional_text("notes", &body.notes, 2000);
    if problems.is_empty()
        && strength.is_some()
        && let Err(error) = labelled(material.substance, strength, assay)
    {
        problems.add(place(material.substance), error.to_string());
    }
    Some(MaterialLot {
        id: MaterialLotId::new(),
        material_id: material.id,
        code: code?,
        received_on,
        opened_on,
        use_by,
        strength,
        assay,
        assayed_on,
        current: body.current.0,
        notes,
        in_use: body.in_use.0,
        version: 1,
    })
}
