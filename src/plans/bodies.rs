//! The inputs of a plan as they are written down: what an approval freezes and what a
//! preview takes. Posting the frozen inputs of a plan as a preview computes it again.

use std::collections::BTreeMap;

use chemistry::carbonate::Speciation;
use chemistry::ion::{Ion, IonMap};
use chemistry::mash::malt::{Behaviour, Groups, Malt, Taylor};
use chemistry::mash::{GristItem, LiquorDoubt, MaltClass};
use chemistry::material::{Material, Strength, Substance, Vessel};
use chemistry::plan::{Limits, Preference, Problem, ShelfItem, Source, Volumes};
use chemistry::quantity::{
    Celsius, CostPerLitre, CostPerUnit, DoseAmount, Ebc, Estimate, Fraction, GramsPerLitre,
    GramsPerMl, Kilograms, Litres, MeqPerL, MeqPerMl, MgPerL, MgPerLAsCaCO3, MmolPerL, Ph, PhShift,
    RelativeBuffering, RelativeSd,
};
use chemistry::water::{MeasuredWater, Water};
use serde::{Deserialize, Serialize};

use super::inputs::{Inputs, Learned, MaltLabel, ShelfLabel, SourceLabel};
use crate::beers;
use crate::beers::api::SpecBody;
use crate::brewery::mash_settings;
use crate::error::Error;
use crate::input::{Flag, Number, Problems};

/// Everything a plan is computed from.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct InputsBody {
    /// The waters that can be blended: at least one.
    pub sources: Vec<SourceBody>,
    /// The malts of the batch: at least one with a mass.
    pub grist: Vec<MaltBody>,
    /// How much water goes where.
    pub volumes: VolumesBody,
    /// What can be added.
    pub shelf: Vec<ShelfItemBody>,
    /// What the beer wants.
    pub spec: SpecBody,
    /// What must not be passed, whatever the beer wants.
    pub limits: LimitsBody,
    /// What happens in the mash that no analysis tells.
    pub mash: MashBody,
    /// What earlier batches taught.
    pub learned: LearnedBody,
}

/// A water.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct SourceBody {
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

/// A malt with its mass and its acid-base behaviour.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct MaltBody {
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

/// How much water goes where.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct VolumesBody {
    /// Beer in the fermenter, L.
    pub batch_l: Number,
    /// Strike liquor in the mash, L.
    pub mash_l: Number,
    /// Its standard deviation, L; 1 % when not given.
    pub mash_sd_l: Number,
    /// Sparge liquor, L; 0 when not given.
    pub sparge_l: Number,
}

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

/// What must not be passed.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct LimitsBody {
    /// Most of each ion in the whole liquor, mg/L. A limit of the spec holds as well.
    #[schema(value_type = std::collections::BTreeMap<String, f64>)]
    pub highest_ions_mg_per_l: BTreeMap<String, Number>,
    /// How far acid may take the alkalinity of the liquor in the tank and of the sparge
    /// liquor, mg/L as CaCO₃; 0 when not given.
    pub lowest_alkalinity_mg_per_l_as_caco3: Number,
}

/// What happens in the mash that no analysis tells.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct MashBody {
    /// Equivalents of acid set free per equivalent of calcium; assumed when not given.
    pub calcium_share: Number,
    /// Its standard deviation.
    pub calcium_share_sd: Number,
    /// Share of the carbon dioxide formed that escapes; assumed when not given.
    pub co2_lost_share: Number,
    /// Its standard deviation.
    pub co2_lost_share_sd: Number,
}

/// What earlier batches taught.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct LearnedBody {
    /// How far mashes like this one have settled above what the balance says; 0 when
    /// not given.
    pub offset_ph: Number,
    /// Its standard deviation.
    pub offset_sd: Number,
    /// Closed batches it was learned from.
    pub batches: Number,
    /// Whether that doubt stands in place of what is assumed of the malts' pH.
    pub replaces_malt_doubt: Flag,
}

fn or(
    problems: &mut Problems,
    field: &str,
    number: &Number,
    default: f64,
    low: f64,
    high: f64,
) -> f64 {
    problems
        .optional_quantity(field, number, |value| between(value, low, high))
        .unwrap_or(default)
}

fn between(value: f64, low: f64, high: f64) -> Result<f64, String> {
    if (low..=high).contains(&value) {
        Ok(value)
    } else {
        Err(format!("{value} is outside {low} to {high}"))
    }
}

fn id<T: std::str::FromStr>(problems: &mut Problems, field: &str, text: &str) -> Option<T> {
    if text.is_empty() {
        return None;
    }
    let parsed = text.parse().ok();
    if parsed.is_none() {
        problems.add(field, "This is not an identifier.");
    }
    parsed
}

fn ions(
    problems: &mut Problems,
    field: &str,
    sent: &BTreeMap<String, Number>,
) -> IonMap<Option<MgPerL>> {
    let mut result = IonMap::from_fn(|_| None);
    problems.within(field, |problems| {
        for (name, number) in sent {
            match Ion::ALL.into_iter().find(|ion| ion.name() == name) {
                Some(ion) => result[ion] = problems.optional_quantity(name, number, MgPerL::new),
                None => problems.add(
                    name,
                    format!("There is no ion “{}”.", crate::input::shorten(name)),
                ),
            }
        }
    });
    result
}

fn ions_body(map: &IonMap<MgPerL>) -> BTreeMap<String, Number> {
    map.iter()
        .filter(|(_, value)| value.get() > 0.0)
        .map(|(ion, value)| (ion.name().to_owned(), value.get().into()))
        .collect()
}

/// Most sources, malts or materials of one plan: more is a slip, and would be slow.
const MOST_ROWS: usize = 40;

impl TryFrom<InputsBody> for Inputs {
    type Error = Error;

    fn try_from(body: InputsBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        for (field, rows) in [
            ("sources", body.sources.len()),
            ("grist", body.grist.len()),
            ("shelf", body.shelf.len()),
        ] {
            if rows > MOST_ROWS {
                problems.add(field, format!("At most {MOST_ROWS} lines."));
                problems.finish()?;
                return Err(Error::field(field, "Too many lines."));
            }
        }
        let mut sources = Vec::new();
        for (index, source) in body.sources.iter().enumerate() {
            sources.extend(problems.within(format!("sources.{index}"), |problems| {
                source.check(problems)
            }));
        }
        let mut grist = Vec::new();
        for (index, malt) in body.grist.iter().enumerate() {
            grist
                .extend(problems.within(format!("grist.{index}"), |problems| malt.check(problems)));
        }
        let mut shelf = Vec::new();
        for (index, item) in body.shelf.iter().enumerate() {
            shelf
                .extend(problems.within(format!("shelf.{index}"), |problems| item.check(problems)));
        }
        let volumes = problems.within("volumes", |problems| body.volumes.check(problems));
        let spec = problems.within("spec", |problems| {
            beers::check_spec(&body.spec, None, problems)
        });
        let mut most = problems.within("limits", |problems| {
            ions(
                problems,
                "highest_ions_mg_per_l",
                &body.limits.highest_ions_mg_per_l,
            )
        });
        let lowest_alkalinity = problems.within("limits", |problems| {
            let number = &body.limits.lowest_alkalinity_mg_per_l_as_caco3;
            or(
                problems,
                "lowest_alkalinity_mg_per_l_as_caco3",
                number,
                0.0,
                -1000.0,
                1000.0,
            )
        });
        let settings = problems.within("mash", |problems| body.mash.check(problems));
        let (offset, learned) = problems.within("learned", |problems| body.learned.check(problems));
        if body.sources.is_empty() {
            problems.add("sources", "Name at least one source of water.");
        }
        if !grist.iter().any(|(item, _)| item.mass.get() > 0.0) && problems.is_empty() {
            problems.add(
                "grist",
                "The grist weighs nothing: enter at least one malt with its mass.",
            );
        }
        problems.finish()?;
        let (Some((volumes, batch)), Some(spec)) = (volumes, spec) else {
            return Err(Error::field("", "Volumes and spec are needed."));
        };
        let lower = |limit: &mut Option<MgPerL>, other: Option<MgPerL>| {
            if let Some(other) = other
                && limit.is_none_or(|limit| other < limit)
            {
                *limit = Some(other);
            }
        };
        for (ion, limit) in spec.taste_limits().iter() {
            lower(&mut most[ion], *limit);
        }
        let (sources, source_labels) = sources.into_iter().unzip();
        let (grist, malts) = grist.into_iter().unzip();
        let (shelf, shelf_labels) = shelf.into_iter().unzip();
        Ok(Self {
            problem: Problem {
                sources,
                shelf,
                volumes,
                grist,
                settings,
                offset,
                spec: spec.for_plan(),
                limits: Limits {
                    ions: most,
                    lowest_alkalinity: MgPerLAsCaCO3::clamped(lowest_alkalinity),
                },
            },
            sources: source_labels,
            malts,
            shelf: shelf_labels,
            batch,
            learned,
        })
    }
}

impl SourceBody {
    fn check(&self, problems: &mut Problems) -> Option<(Source, SourceLabel)> {
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

    fn of(source: &Source, label: &SourceLabel) -> Self {
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

impl MaltBody {
    fn check(&self, problems: &mut Problems) -> Option<(GristItem, MaltLabel)> {
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

    fn of(item: &GristItem, label: &MaltLabel) -> Self {
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

impl VolumesBody {
    fn check(&self, problems: &mut Problems) -> Option<(Volumes, Litres)> {
        let positive = |litres: f64| match Litres::new(litres) {
            Ok(litres) if litres.get() > 0.0 => Ok(litres),
            Ok(_) => Err("Enter more than 0 L".to_owned()),
            Err(error) => Err(error.to_string()),
        };
        let batch = problems.quantity("batch_l", &self.batch_l, positive);
        let mash = problems.quantity("mash_l", &self.mash_l, positive);
        let sparge = problems
            .optional_quantity("sparge_l", &self.sparge_l, Litres::new)
            .unwrap_or(Litres::constant(0.0));
        let sd = problems.optional_quantity("mash_sd_l", &self.mash_sd_l, Litres::new);
        let (batch, mash) = (batch?, mash?);
        let sd = sd.map_or(MASH_VOLUME_RELATIVE_SD * mash.get(), Litres::get);
        Some((
            Volumes {
                liquor: mash + sparge,
                mash: Estimate::new(mash, sd),
                sparge,
            },
            batch,
        ))
    }
}

/// How exactly strike liquor is measured, relative. Source: assumed; a good flow meter.
pub(super) const MASH_VOLUME_RELATIVE_SD: f64 = 0.01;

impl ShelfItemBody {
    fn check(&self, problems: &mut Problems) -> Option<(ShelfItem, ShelfLabel)> {
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

    fn of(item: &ShelfItem, label: &ShelfLabel) -> Self {
        let material = &item.material;
        let mut body = Self {
            name: item.name.clone(),
            material_id: label.id.map(|id| id.to_string()).unwrap_or_default(),
            material_lot_id: label.lot_id.map(|id| id.to_string()).unwrap_or_default(),
            lot: label.lot.clone(),
            substance: material.substance().key().into(),
            assay: material.assay().value.get().into(),
            assay_sd: material.assay().sd.into(),
            vessels: item
                .vessels
                .iter()
                .map(|vessel| vessel.key().to_owned())
                .collect(),
            scale_step: item.step.get().into(),
            price_per_kg_or_l: (item.price.get() * 1000.0).into(),
            most: item.most.map(DoseAmount::get).into(),
            preference: preference_key(item.preference).into(),
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

impl MashBody {
    fn check(&self, problems: &mut Problems) -> chemistry::mash::Settings {
        let usual = chemistry::mash::Settings::default();
        let mut share = |field: &str,
                         number: &Number,
                         sd_field: &str,
                         sd: &Number,
                         usual: Estimate<Fraction>| {
            let value = problems
                .optional_quantity(field, number, Fraction::new)
                .unwrap_or(usual.value);
            Estimate::new(value, or(problems, sd_field, sd, usual.sd, 0.0, 1.0))
        };
        mash_settings(
            share(
                "calcium_share",
                &self.calcium_share,
                "calcium_share_sd",
                &self.calcium_share_sd,
                usual.calcium_release,
            ),
            share(
                "co2_lost_share",
                &self.co2_lost_share,
                "co2_lost_share_sd",
                &self.co2_lost_share_sd,
                usual.carbon_dioxide_lost,
            ),
        )
    }
}

impl LearnedBody {
    fn check(&self, problems: &mut Problems) -> (Estimate<PhShift>, Learned) {
        let offset = or(problems, "offset_ph", &self.offset_ph, 0.0, -1.0, 1.0);
        let sd = or(problems, "offset_sd", &self.offset_sd, 0.0, 0.0, 1.0);
        let batches = or(problems, "batches", &self.batches, 0.0, 0.0, 1e6);
        (
            Estimate::new(PhShift::clamped(offset), sd),
            // In range by the line above.
            Learned {
                batches: batches as u32,
                replaces_malt_doubt: self.replaces_malt_doubt.0,
            },
        )
    }
}

impl From<&Inputs> for InputsBody {
    fn from(inputs: &Inputs) -> Self {
        let problem = &inputs.problem;
        let settings = &problem.settings;
        let limits = problem
            .limits
            .ions
            .iter()
            .filter_map(|(ion, most)| Some((ion.name().to_owned(), (*most)?.get().into())));
        Self {
            sources: problem
                .sources
                .iter()
                .zip(&inputs.sources)
                .map(|(source, label)| SourceBody::of(source, label))
                .collect(),
            grist: problem
                .grist
                .iter()
                .zip(&inputs.malts)
                .map(|(item, label)| MaltBody::of(item, label))
                .collect(),
            volumes: VolumesBody {
                batch_l: inputs.batch.get().into(),
                mash_l: problem.volumes.mash.value.get().into(),
                mash_sd_l: problem.volumes.mash.sd.into(),
                sparge_l: problem.volumes.sparge.get().into(),
            },
            shelf: problem
                .shelf
                .iter()
                .zip(&inputs.shelf)
                .map(|(item, label)| ShelfItemBody::of(item, label))
                .collect(),
            spec: SpecBody::from(&beers::Spec::of_plan(&problem.spec)),
            limits: LimitsBody {
                highest_ions_mg_per_l: limits.collect(),
                lowest_alkalinity_mg_per_l_as_caco3: problem.limits.lowest_alkalinity.get().into(),
            },
            mash: MashBody {
                calcium_share: settings.calcium_release.value.get().into(),
                calcium_share_sd: settings.calcium_release.sd.into(),
                co2_lost_share: settings.carbon_dioxide_lost.value.get().into(),
                co2_lost_share_sd: settings.carbon_dioxide_lost.sd.into(),
            },
            learned: LearnedBody {
                offset_ph: problem.offset.value.get().into(),
                offset_sd: problem.offset.sd.into(),
                batches: f64::from(inputs.learned.batches).into(),
                replaces_malt_doubt: Flag(inputs.learned.replaces_malt_doubt),
            },
        }
    }
}
