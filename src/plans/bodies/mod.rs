//! The inputs of a plan as they are written down: what an approval freezes and what a
//! preview takes. Posting the frozen inputs of a plan as a preview computes it again.

use std::collections::BTreeMap;

use chemistry::ion::{Ion, IonMap};
use chemistry::plan::{Limits, Problem, Volumes};
use chemistry::quantity::{Estimate, Fraction, Litres, MgPerL, MgPerLAsCaCO3, PhShift};
use serde::{Deserialize, Serialize};

mod grist;
mod shelf;
mod sources;

pub use grist::PlanMaltBody;
pub use shelf::ShelfItemBody;
pub use sources::PlanSourceBody;

use super::inputs::{Inputs, Learned};
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
    pub sources: Vec<PlanSourceBody>,
    /// The malts of the batch: at least one with a mass.
    pub grist: Vec<PlanMaltBody>,
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
                .map(|(source, label)| PlanSourceBody::of(source, label))
                .collect(),
            grist: problem
                .grist
                .iter()
                .zip(&inputs.malts)
                .map(|(item, label)| PlanMaltBody::of(item, label))
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
