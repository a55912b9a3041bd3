//! `/api/v1/plans` and `/api/v1/plan-previews`.

use axum::extract::{Query, State};
use axum::http::{HeaderMap, StatusCode, header};
use axum::response::IntoResponse;
use chemistry::material::Vessel;
use chemistry::plan::{self, Ending, Way};
use chemistry::quantity::{Celsius, DoseAmount, Fraction, Minutes, Ph, PhShift};
use chemistry::water::Water;
use serde::{Deserialize, Serialize};
use std::collections::BTreeMap;
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::bodies::InputsBody;
use super::inputs::Inputs;
use super::mash_checks::{self, NewMashCheck};
use super::operations::{self, Closing, NewPlan, Shown, SourceChoice, Treatment};
use super::store::{Filter, Listing};
use super::{
    Advised, Choice, Deed, Dose, MashCheck, Plan, Prediction, Stage, State as PlanState, compute,
    weigh_out, words,
};
use crate::db::Db;
use crate::error::Error;
use crate::id::{BeerId, DoseId, MashCheckId, PlanId, UtcTime};
use crate::input::{Flag, Number, Problems};
use crate::people::{Member, Permission};
use crate::web::App;
use crate::web::extract::{At, Json, ListQuery, Listed, if_match};
use crate::web::problem::Problem;

/// A plan to be drafted.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct NewPlanBody {
    /// The brewery's number of the batch.
    pub batch: String,
    /// What is brewed: an identifier of `/beers`.
    pub beer_id: String,
    /// The day it is brewed, `2026-03-31`.
    pub brewed_on: String,
    /// How to choose the treatment: `closest_to_preferred`, `fewest_additions`,
    /// `least_blending_water` or `cheapest`; the first when not given.
    pub way: String,
    /// Which sources may be used; every source in use when empty.
    pub sources: Vec<SourceChoiceBody>,
}

/// A source and how much of it may be used.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct SourceChoiceBody {
    /// An identifier of `/sources`.
    pub source_id: String,
    /// Whether it may be used; yes when not given.
    pub used: Option<Flag>,
    /// Least share of the liquor, per cent; 0 when not given.
    pub lowest_percent: Number,
    /// Greatest share of the liquor, per cent; 100 when not given.
    pub highest_percent: Number,
}

impl TryFrom<NewPlanBody> for NewPlan {
    type Error = Error;

    fn try_from(body: NewPlanBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let batch = problems.text("batch", &body.batch, 40);
        let beer_id = problems.choice("beer_id", &body.beer_id, |key| key.parse::<BeerId>().ok());
        let brewed_on = problems.date("brewed_on", &body.brewed_on);
        let way = if body.way.trim().is_empty() {
            Some(Way::ClosestToPreferred)
        } else {
            problems.choice("way", &body.way, Way::from_key)
        };
        let mut sources = Vec::new();
        let mut all_off = !body.sources.is_empty();
        for (index, source) in body.sources.iter().enumerate() {
            if source.used.is_some_and(|used| !used.0) {
                continue;
            }
            all_off = false;
            problems.within(format!("sources.{index}"), |problems| {
                let source_id =
                    problems.choice("source_id", &source.source_id, |key| key.parse().ok());
                let percent = |value: f64| {
                    if (0.0..=100.0).contains(&value) {
                        Ok(Fraction::clamped(value / 100.0))
                    } else {
                        Err("Enter 0 to 100 %")
                    }
                };
                let lowest =
                    problems.optional_quantity("lowest_percent", &source.lowest_percent, percent);
                let highest =
                    problems.optional_quantity("highest_percent", &source.highest_percent, percent);
                let (lowest, highest) = (
                    lowest.unwrap_or(Fraction::constant(0.0)),
                    highest.unwrap_or(Fraction::constant(1.0)),
                );
                if lowest > highest {
                    problems.add("lowest_percent", "The least share is above the greatest.");
                }
                sources.extend(source_id.map(|source_id| SourceChoice {
                    source_id,
                    lowest,
                    highest,
                }));
            });
        }
        if all_off {
            problems.add("sources", "Choose at least one source.");
        }
        problems.finish()?;
        match (batch, beer_id, brewed_on, way) {
            (Some(batch), Some(beer_id), Some(brewed_on), Some(way)) => Ok(Self {
                batch,
                beer_id,
                brewed_on,
                way,
                sources,
            }),
            _ => Err(Error::field("", "Fill in every field.")),
        }
    }
}

/// A draft's treatment.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct TreatmentBody {
    /// Share of each source, per cent, in the order of the inputs. They must add up to
    /// 100.
    pub shares_percent: Vec<Number>,
    /// What goes where. Amounts of nothing are left out.
    pub doses: Vec<DoseInputBody>,
}

/// One amount of a draft.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct DoseInputBody {
    /// Place of the material on the plan's shelf, counting from 0.
    pub material: Number,
    /// `liquor_tank`, `mash`, `sparge_liquor` or `kettle`.
    pub vessel: String,
    /// How much, g or mL.
    pub amount: Number,
}

/// How far shares may be from a whole before they are refused, per cent: two decimals of
/// rounding for each of a few sources.
const SHARES_TOLERANCE: f64 = 0.11;

impl TryFrom<TreatmentBody> for Treatment {
    type Error = Error;

    fn try_from(body: TreatmentBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let mut shares = Vec::new();
        for (index, share) in body.shares_percent.iter().enumerate() {
            let field = format!("shares_percent.{index}");
            let check = |value: f64| {
                if (0.0..=100.0).contains(&value) {
                    Ok(value)
                } else {
                    Err("Enter 0 to 100 %")
                }
            };
            if share.is_missing() {
                shares.push(0.0);
            } else {
                shares.extend(problems.quantity(&field, share, check));
            }
        }
        let sum: f64 = shares.iter().sum();
        if problems.is_empty() && (sum - 100.0).abs() > SHARES_TOLERANCE {
            let last = body.shares_percent.len().saturating_sub(1);
            problems.add(
                format!("shares_percent.{last}"),
                format!(
                    "The shares add up to {} %; they must add up to 100 %.",
                    crate::web::format::decimals(sum, 1)
                ),
            );
        }
        let mut doses = Vec::new();
        for (index, dose) in body
            .doses
            .iter()
            .enumerate()
            .filter(|(_, dose)| !dose.amount.is_missing())
        {
            problems.within(format!("doses.{index}"), |problems| {
                let whole = |value: f64| {
                    if value >= 0.0 && value < 1000.0 && value.fract() == 0.0 {
                        Ok(value as usize)
                    } else {
                        Err("Enter a place on the shelf")
                    }
                };
                let material = problems.quantity("material", &dose.material, whole);
                let vessel = problems.choice("vessel", &dose.vessel, Vessel::from_key);
                let amount = problems.quantity("amount", &dose.amount, DoseAmount::new);
                if let (Some(material), Some(vessel), Some(amount)) = (material, vessel, amount) {
                    doses.push(plan::Dose {
                        material,
                        vessel,
                        amount,
                    });
                }
            });
        }
        problems.finish()?;
        Ok(Self {
            shares: shares
                .into_iter()
                .map(|share| Fraction::clamped(share / sum))
                .collect(),
            doses,
        })
    }
}

/// Why something is done.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct ReasonBody {
    /// The reason, in words.
    pub reason: String,
}

impl ReasonBody {
    fn needed(&self) -> Result<String, Error> {
        let mut problems = Problems::new();
        let reason = problems.text("reason", &self.reason, 500);
        problems.finish()?;
        Ok(reason.unwrap_or_default())
    }

    fn optional(&self) -> Result<Option<String>, Error> {
        let mut problems = Problems::new();
        let reason = problems.optional_text("reason", &self.reason, 500);
        problems.finish()?;
        Ok(reason)
    }
}

/// What was weighed in.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct WeighedBody {
    /// How much went in, g or mL.
    pub actual: Number,
    /// Of which lot.
    pub lot: String,
}

impl WeighedBody {
    /// The amount and the lot, checked.
    pub fn check(&self) -> Result<(DoseAmount, String), Error> {
        let mut problems = Problems::new();
        let actual = problems.quantity("actual", &self.actual, DoseAmount::new);
        let lot = problems.optional_text("lot", &self.lot, 80);
        problems.finish()?;
        Ok((
            actual.unwrap_or(DoseAmount::constant(0.0)),
            lot.unwrap_or_default(),
        ))
    }
}

/// A pH reading.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct NewMashCheckBody {
    /// `liquor`, `mash`, `first_runnings`, `last_runnings`, `kettle_full`, `end_of_boil`,
    /// `end_of_fermentation` or `package`; the mash when not given.
    pub stage: String,
    /// Minutes since strike.
    pub minute: Number,
    /// As the meter showed it.
    pub ph: Number,
    /// Temperature of the sample in the meter's cup, °C.
    pub sample_c: Number,
    /// Which meter.
    pub meter: String,
    /// One standard deviation of the meter at its last calibration; 0.03 is assumed when
    /// not given.
    pub meter_sd: Number,
    /// Whether the meter was checked in buffer after a surprising reading.
    pub meter_checked: Flag,
}

/// Error of a calibrated meter, cooled sample. Source: assumed, as for
/// `statistics::learning::CAREFUL_READING`.
pub const METER_SD: f64 = 0.03;

impl TryFrom<NewMashCheckBody> for NewMashCheck {
    type Error = Error;

    fn try_from(body: NewMashCheckBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let stage = if body.stage.trim().is_empty() {
            Some(Stage::Mash)
        } else {
            problems.choice("stage", &body.stage, Stage::from_key)
        };
        let minute = if stage == Some(Stage::Mash) || !body.minute.is_missing() {
            problems.quantity("minute", &body.minute, |value| {
                Minutes::new(value)
                    .map_err(|_| "Enter the minutes since strike, 0 or more".to_owned())
            })
        } else {
            Some(Minutes::constant(0.0))
        };
        let ph = problems.quantity("ph", &body.ph, |value| {
            if (2.0..=10.0).contains(&value) {
                Ok(Ph::clamped(value))
            } else {
                Err("A mash reads between pH 2 and 10. Read it again")
            }
        });
        let sample = problems.quantity("sample_c", &body.sample_c, |value| {
            if (0.0..=100.0).contains(&value) {
                Ok(Celsius::clamped(value))
            } else {
                Err("Enter 0 to 100 °C")
            }
        });
        let meter = problems.optional_text("meter", &body.meter, 80);
        let meter_sd = problems.optional_quantity("meter_sd", &body.meter_sd, |value| {
            if (0.001..=1.0).contains(&value) {
                Ok(PhShift::clamped(value))
            } else {
                Err("Enter 0.001 to 1")
            }
        });
        problems.finish()?;
        match (stage, minute, ph, sample) {
            (Some(stage), Some(minute), Some(ph), Some(sample)) => Ok(Self {
                stage,
                minute,
                ph,
                sample,
                meter: meter.unwrap_or_default(),
                meter_sd: meter_sd.unwrap_or(PhShift::constant(METER_SD)),
                meter_checked: body.meter_checked.0,
            }),
            _ => Err(Error::field("", "Fill in every field.")),
        }
    }
}

/// How a batch is closed.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct ClosingBody {
    /// The mash check that counts; the first good one when not given.
    pub mash_check_id: String,
    /// Whether it counts for learning; yes when not given.
    pub counts: Option<Flag>,
    /// What else should be known.
    pub note: String,
}

impl TryFrom<ClosingBody> for Closing {
    type Error = Error;

    fn try_from(body: ClosingBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let mash_check_id = if body.mash_check_id.is_empty() {
            None
        } else {
            problems.choice("mash_check_id", &body.mash_check_id, |key| {
                key.parse::<MashCheckId>().ok()
            })
        };
        let note = problems.optional_text("note", &body.note, 2000);
        problems.finish()?;
        Ok(Self {
            mash_check_id,
            counts: body.counts.is_none_or(|counts| counts.0),
            note,
        })
    }
}

/// The composition of a liquor.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct WaterBody {
    /// Each ion, mg/L of the ion itself.
    ions_mg_per_l: BTreeMap<String, f64>,
    /// Total alkalinity, mg/L as CaCO₃.
    alkalinity_mg_per_l_as_caco3: f64,
    /// Dissolved inorganic carbon, mmol/L.
    carbon_mmol_per_l: f64,
}

impl From<&Water> for WaterBody {
    fn from(water: &Water) -> Self {
        Self {
            ions_mg_per_l: water
                .ions
                .iter()
                .map(|(ion, value)| (ion.name().to_owned(), value.get()))
                .collect(),
            alkalinity_mg_per_l_as_caco3: water.alkalinity_as_caco3().get(),
            carbon_mmol_per_l: water.carbon.get(),
        }
    }
}

/// A mash pH as it is predicted.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct PredictionBody {
    /// Expected, cooled sample.
    ph: f64,
    /// One standard deviation.
    sd: f64,
    /// Lower end of the 90 % interval.
    low: f64,
    /// Upper end.
    high: f64,
}

impl From<Prediction> for PredictionBody {
    fn from(prediction: Prediction) -> Self {
        Self {
            ph: prediction.ph.get(),
            sd: prediction.sd.get(),
            low: prediction.low.get(),
            high: prediction.high.get(),
        }
    }
}

/// One window and where the figure lies.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct FindingBody {
    /// Whose window.
    requirement: String,
    /// The figure: mg/L, mg/L as CaCO₃, a ratio or a pH, as the requirement has it.
    value: f64,
    /// `within`, `below` or `above`.
    standing: &'static str,
    /// By how much it is missed; 0 within.
    missed_by: f64,
}

/// What a treatment does.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct OutcomeBody {
    /// The mash pH; absent where the mash has none.
    mash_ph: Option<PredictionBody>,
    /// What the doubt in it comes from, the greatest share first.
    influences: Vec<InfluenceBody>,
    /// Buffering of the mash where it settles, meq per kg of grist and pH.
    buffering_meq_per_kg_ph: Option<f64>,
    /// The sources blended, before anything is added.
    blend: WaterBody,
    /// The liquor in the tank after its doses.
    liquor_tank: WaterBody,
    /// The mash liquor with what is added to the mash.
    mash_liquor: WaterBody,
    /// The sparge liquor after its doses.
    sparge_liquor: WaterBody,
    /// Everything added in any vessel, over all the liquor.
    whole_liquor: WaterBody,
    /// Sulfate to chloride in the whole liquor, mass by mass.
    sulfate_to_chloride: Option<f64>,
    /// Each window of the spec, the mash pH first.
    findings: Vec<FindingBody>,
    /// Limits that are passed, in words.
    broken_limits: Vec<String>,
    /// Water and materials, in the brewery's currency.
    cost: f64,
}

/// One input and its part in the doubt.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct InfluenceBody {
    /// What it is.
    name: String,
    /// How far the pH moves when it is one standard deviation higher.
    effect_ph: f64,
    /// Its share of the variance.
    share: f64,
}

impl OutcomeBody {
    fn of(inputs: &Inputs, outcome: &plan::Outcome) -> Self {
        let mash = outcome.mash.as_ref().ok();
        Self {
            mash_ph: compute::prediction(outcome).map(Into::into),
            influences: mash.map_or_else(Vec::new, |mash| {
                mash.influences
                    .iter()
                    .map(|influence| InfluenceBody {
                        name: influence.name.clone(),
                        effect_ph: influence.effect.get(),
                        share: influence.share.get(),
                    })
                    .collect()
            }),
            buffering_meq_per_kg_ph: mash.map(|mash| mash.buffering.get()),
            blend: (&outcome.blend).into(),
            liquor_tank: (&outcome.tank).into(),
            mash_liquor: (&outcome.mash_liquor).into(),
            sparge_liquor: (&outcome.sparge_liquor).into(),
            whole_liquor: (&outcome.whole).into(),
            sulfate_to_chloride: outcome.sulfate_to_chloride.map(|ratio| ratio.get()),
            findings: outcome
                .findings
                .iter()
                .map(|finding| FindingBody {
                    requirement: finding.requirement.to_string(),
                    value: finding.value.get(),
                    standing: words::standing_kind(finding.standing),
                    missed_by: match finding.standing {
                        plan::Standing::Inside => 0.0,
                        plan::Standing::Below(by) | plan::Standing::Above(by) => by.get(),
                    },
                })
                .collect(),
            broken_limits: outcome
                .broken
                .iter()
                .map(|broken| words::broken(inputs, broken))
                .collect(),
            cost: outcome.cost.get(),
        }
    }
}

/// A way to treat the batch.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct WayBody {
    /// Its key.
    way: &'static str,
    /// `met`, `closest` or `impossible`.
    ending: &'static str,
    /// What is not met, what stands in the way and what giving way would buy.
    shortfalls: Vec<String>,
    /// Share of each source, in the order of the inputs.
    shares: Vec<f64>,
    /// What goes where, on the steps of the scale.
    doses: Vec<PlannedBody>,
    /// What the doses as rounded do.
    outcome: Option<OutcomeBody>,
}

/// One amount of a proposal.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct PlannedBody {
    /// Place of the material on the shelf of the inputs, counting from 0.
    material: usize,
    /// Its name.
    name: String,
    /// Where it goes.
    vessel: &'static str,
    /// How much, g or mL.
    amount: f64,
    /// `g` or `mL`.
    unit: &'static str,
}

fn unit(inputs: &Inputs, material: usize) -> &'static str {
    inputs
        .problem
        .shelf
        .get(material)
        .map_or("", |item| item.material.unit().symbol())
}

fn name(inputs: &Inputs, material: usize) -> String {
    inputs
        .problem
        .shelf
        .get(material)
        .map_or_else(String::new, |item| item.name.clone())
}

impl WayBody {
    fn of(inputs: &Inputs, way: Way, ending: &Ending) -> Self {
        let (kind, shortfalls) = match ending {
            Ending::Met(_) => ("met", Vec::new()),
            Ending::Closest { shortfalls, .. } => (
                "closest",
                shortfalls
                    .iter()
                    .map(|shortfall| words::shortfall(inputs, shortfall))
                    .collect(),
            ),
            Ending::Impossible(conflict) => ("impossible", words::conflict(inputs, conflict)),
        };
        let treatment = ending.treatment();
        Self {
            way: way.key(),
            ending: kind,
            shortfalls,
            shares: treatment.map_or_else(Vec::new, |it| {
                it.shares.iter().map(|share| share.get()).collect()
            }),
            doses: treatment.map_or_else(Vec::new, |it| {
                compute::listed(inputs, &it.doses)
                    .iter()
                    .map(|dose| PlannedBody {
                        material: dose.material,
                        name: name(inputs, dose.material),
                        vessel: dose.vessel.key(),
                        amount: dose.planned.get(),
                        unit: unit(inputs, dose.material),
                    })
                    .collect()
            }),
            outcome: treatment.map(|it| OutcomeBody::of(inputs, &it.outcome)),
        }
    }
}

/// A dose of a plan.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct DoseBody {
    /// Its identifier.
    id: DoseId,
    /// Its place in the weigh-out.
    position: i64,
    /// Where it goes.
    vessel: &'static str,
    /// Place of the material on the plan's shelf.
    material: usize,
    /// Its name.
    name: String,
    /// Its lot, as planned.
    lot: String,
    /// `g` or `mL`.
    unit: &'static str,
    /// How much was planned.
    planned: f64,
    /// The mash check whose first step it is.
    mash_check_id: Option<MashCheckId>,
    /// How much went in.
    actual: Option<f64>,
    /// Of which lot.
    actual_lot: Option<String>,
    /// When.
    weighed_at: Option<UtcTime>,
    /// By whom.
    weighed_by: Option<String>,
    /// What can hurt about it.
    cautions: Vec<&'static str>,
}

impl DoseBody {
    fn of(inputs: &Inputs, dose: &Dose) -> Self {
        let weighed = dose.weighed.as_ref();
        let cautions = inputs
            .problem
            .shelf
            .get(dose.material)
            .map(|item| item.material.substance().cautions());
        Self {
            id: dose.id,
            position: dose.position,
            vessel: dose.vessel.key(),
            material: dose.material,
            name: name(inputs, dose.material),
            lot: inputs
                .shelf
                .get(dose.material)
                .map(|label| label.lot.clone())
                .unwrap_or_default(),
            unit: unit(inputs, dose.material),
            planned: dose.planned.get(),
            mash_check_id: dose.mash_check,
            actual: weighed.map(|weighed| weighed.actual.get()),
            actual_lot: weighed.map(|weighed| weighed.lot.clone()),
            weighed_at: weighed.map(|weighed| weighed.at),
            weighed_by: weighed.map(|weighed| weighed.by.clone()),
            cautions: cautions.unwrap_or_default(),
        }
    }
}

/// Who did it, when, and why.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct DeedBody {
    /// When.
    at: UtcTime,
    /// Who.
    by: String,
    /// Why; empty if that was not asked.
    reason: String,
}

impl From<&Deed> for DeedBody {
    fn from(deed: &Deed) -> Self {
        Self {
            at: deed.at,
            by: deed.by.clone(),
            reason: deed.reason.clone(),
        }
    }
}

/// A plan.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct PlanBody {
    /// Its identifier.
    id: PlanId,
    /// The batch.
    batch: String,
    /// Which revision.
    revision: i64,
    /// The plan it takes the place of.
    replaces: Option<PlanId>,
    /// The beer.
    beer_id: BeerId,
    /// Its name when the plan was drafted.
    beer_name: String,
    /// The day it is brewed.
    brewed_on: String,
    /// `draft`, `approved`, `dosed`, `closed` or `withdrawn`.
    state: &'static str,
    /// How its treatment was chosen: a way, or `by_hand`.
    way: &'static str,
    /// Share of each source, in the order of the inputs.
    shares: Vec<f64>,
    /// What goes where.
    doses: Vec<DoseBody>,
    /// When and by whom it was drafted.
    drafted: DeedBody,
    /// When, by whom and why it was approved.
    approved: Option<DeedBody>,
    /// The prediction of that moment.
    prediction: Option<PredictionBody>,
    /// When, by whom and why it was withdrawn.
    withdrawn: Option<DeedBody>,
    /// When, by whom and with which note it was closed.
    closed: Option<DeedBody>,
    /// Predicted against measured.
    outcome: Option<super::Outcome>,
    /// Counts changes; also the ETag.
    version: i64,
}

impl From<&Plan> for PlanBody {
    fn from(plan: &Plan) -> Self {
        Self {
            id: plan.id,
            batch: plan.batch.clone(),
            revision: plan.revision,
            replaces: plan.replaces,
            beer_id: plan.beer_id,
            beer_name: plan.beer_name.clone(),
            brewed_on: plan.brewed_on.to_string(),
            state: plan.state.key(),
            way: plan.choice.key(),
            shares: plan.shares.iter().map(|share| share.get()).collect(),
            doses: plan
                .doses
                .iter()
                .map(|dose| DoseBody::of(&plan.inputs, dose))
                .collect(),
            drafted: (&plan.drafted).into(),
            approved: plan.approved.as_ref().map(Into::into),
            prediction: plan.prediction.map(Into::into),
            withdrawn: plan.withdrawn.as_ref().map(Into::into),
            closed: plan.closed.as_ref().map(Into::into),
            outcome: plan.outcome.clone(),
            version: plan.version,
        }
    }
}

/// A plan with everything worked out about it.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct ShownBody {
    /// The plan.
    #[serde(flatten)]
    plan: PlanBody,
    /// What its doses do: as planned for a draft, as weighed from then on.
    does: OutcomeBody,
    /// Each way to treat it, while it is a draft.
    ways: Vec<WayBody>,
}

impl From<&Shown> for ShownBody {
    fn from(shown: &Shown) -> Self {
        let inputs = &shown.plan.inputs;
        Self {
            plan: (&shown.plan).into(),
            does: OutcomeBody::of(inputs, &shown.outcome),
            ways: shown
                .ways
                .iter()
                .map(|(way, ending)| WayBody::of(inputs, *way, ending))
                .collect(),
        }
    }
}

/// A plan as lists show it.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct ListingBody {
    /// Its identifier.
    id: PlanId,
    /// The batch.
    batch: String,
    /// Which revision.
    revision: i64,
    /// The beer.
    beer_id: BeerId,
    /// Its name.
    beer_name: String,
    /// The day it is brewed.
    brewed_on: String,
    /// Where it stands.
    state: &'static str,
    /// The prediction of its approval.
    prediction: Option<PredictionBody>,
    /// Lines of the weigh-out.
    doses: i64,
    /// Lines that are in.
    weighed: i64,
}

impl From<Listing> for ListingBody {
    fn from(listing: Listing) -> Self {
        Self {
            id: listing.id,
            batch: listing.batch,
            revision: listing.revision,
            beer_id: listing.beer_id,
            beer_name: listing.beer_name,
            brewed_on: listing.brewed_on.to_string(),
            state: listing.state.key(),
            prediction: listing.prediction.map(Into::into),
            doses: listing.doses,
            weighed: listing.weighed,
        }
    }
}

/// A pH reading and what to do about it.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct MashCheckBody {
    /// Its identifier.
    id: MashCheckId,
    /// When in the making of the beer.
    stage: &'static str,
    /// When it was entered.
    read_at: UtcTime,
    /// Minutes since strike.
    minute: f64,
    /// As the meter showed it.
    ph: f64,
    /// Temperature of the sample, °C.
    sample_c: f64,
    /// Which meter.
    meter: String,
    /// One standard deviation of the meter.
    meter_sd: f64,
    /// What to do.
    advised: Advised,
    /// By whom.
    read_by: String,
    /// When, by whom and why it was withdrawn.
    withdrawn: Option<DeedBody>,
}

impl From<&MashCheck> for MashCheckBody {
    fn from(check: &MashCheck) -> Self {
        Self {
            id: check.id,
            stage: check.stage.key(),
            read_at: check.read_at,
            minute: check.minute.get(),
            ph: check.ph.get(),
            sample_c: check.sample.get(),
            meter: check.meter.clone(),
            meter_sd: check.meter_sd.get(),
            advised: check.advised.clone(),
            read_by: check.read_by.clone(),
            withdrawn: check.withdrawn.as_ref().map(Into::into),
        }
    }
}

/// What a plan would be.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct PreviewBody {
    /// The four ways to treat the batch.
    ways: Vec<WayBody>,
    /// What the treatment sent along does.
    does: Option<OutcomeBody>,
}

/// Water, grist, volumes, shelf and spec; and a treatment to try, if you like.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct PreviewInputBody {
    /// What to compute from.
    #[serde(flatten)]
    pub inputs: InputsBody,
    /// Shares and doses to try.
    pub treatment: Option<TreatmentBody>,
}

/// Which plans to list.
#[derive(Clone, Debug, Default, Deserialize, utoipa::IntoParams)]
#[into_params(parameter_in = Query)]
pub struct PlanQuery {
    /// Only plans in this state.
    pub state: Option<String>,
    /// Only plans of this beer.
    pub beer_id: Option<String>,
    /// Only batches whose number holds this.
    pub batch: Option<String>,
}

impl PlanQuery {
    fn filter(&self) -> Result<Filter, Error> {
        let mut problems = Problems::new();
        let given = |text: &Option<String>| text.clone().filter(|text| !text.trim().is_empty());
        let state =
            given(&self.state).and_then(|key| problems.choice("state", &key, PlanState::from_key));
        let beer = given(&self.beer_id)
            .and_then(|key| problems.choice("beer_id", &key, |key| key.parse().ok()));
        problems.finish()?;
        Ok(Filter {
            state,
            beer,
            batch: given(&self.batch),
        })
    }
}

/// The endpoints.
pub fn routes() -> OpenApiRouter<App> {
    OpenApiRouter::new()
        .routes(routes!(list, create))
        .routes(routes!(show))
        .routes(routes!(inputs))
        .routes(routes!(move_amounts))
        .routes(routes!(refresh))
        .routes(routes!(approve, take_back_approval))
        .routes(routes!(withdraw))
        .routes(routes!(revise))
        .routes(routes!(close))
        .routes(routes!(doses))
        .routes(routes!(weigh, take_back_weighing))
        .routes(routes!(checks, check))
        .routes(routes!(withdraw_check))
        .routes(routes!(preview))
}

fn tagged<T: Serialize>(version: i64, body: T) -> impl IntoResponse {
    ([(header::ETAG, format!("\"{version}\""))], axum::Json(body))
}

/// Plans, the latest made first.
#[utoipa::path(get, path = "/plans", tag = "plans", params(ListQuery, PlanQuery), responses(
    (status = 200, description = "Plans, the latest made first", body = Listed<ListingBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 422, description = "The query cannot be read", body = Problem),
))]
async fn list(
    State(db): State<Db>,
    by: Member,
    Query(page): Query<ListQuery>,
    Query(query): Query<PlanQuery>,
) -> Result<axum::Json<Listed<ListingBody>>, Error> {
    let limit = page.limit()?;
    let before = page
        .cursor
        .as_deref()
        .map(|cursor| {
            cursor
                .parse()
                .map_err(|_| Error::field("cursor", "Send the next_cursor of the page before."))
        })
        .transpose()?;
    let found = operations::made_before(&db, &by, &query.filter()?, before, limit + 1).await?;
    let found = found.into_iter().map(ListingBody::from).collect();
    Ok(axum::Json(Listed::cut(
        found,
        limit,
        |listing: &ListingBody| listing.id.to_string(),
    )))
}

/// Draft a plan.
#[utoipa::path(post, path = "/plans", tag = "plans", request_body = NewPlanBody, responses(
    (status = 201, description = "Drafted, with its proposal", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such beer", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn create(
    State(db): State<Db>,
    by: Member,
    Json(body): Json<NewPlanBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::DraftPlans)?;
    let plan = operations::draft(&db, &by, body.try_into()?).await?;
    let at = [(header::LOCATION, format!("/api/v1/plans/{}", plan.id))];
    Ok((
        StatusCode::CREATED,
        at,
        tagged(plan.version, PlanBody::from(&plan)),
    ))
}

/// A plan with everything worked out about it.
#[utoipa::path(get, path = "/plans/{id}", tag = "plans", params(("id" = PlanId, Path)), responses(
    (status = 200, description = "The plan, with its version as ETag", body = ShownBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
))]
async fn show(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
) -> Result<impl IntoResponse, Error> {
    let shown = operations::show(&db, &by, id).await?;
    Ok(tagged(shown.plan.version, ShownBody::from(&shown)))
}

/// What a plan is computed from. Post it to `/plan-previews` to compute it again.
#[utoipa::path(get, path = "/plans/{id}/inputs", tag = "plans", params(("id" = PlanId, Path)), responses(
    (status = 200, description = "The inputs; frozen once the plan is approved", body = InputsBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
))]
async fn inputs(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
) -> Result<axum::Json<InputsBody>, Error> {
    let plan = operations::find(&db, &by, id).await?;
    Ok(axum::Json(InputsBody::from(&plan.inputs)))
}

/// Read water, beer, shelf and what was learned anew into a draft.
#[utoipa::path(post, path = "/plans/{id}/inputs", tag = "plans", params(("id" = PlanId, Path)), responses(
    (status = 200, description = "Read anew", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "It is no draft, or has changed", body = Problem),
))]
async fn refresh(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
    headers: HeaderMap,
) -> Result<impl IntoResponse, Error> {
    let plan = operations::refresh(&db, &by, id, if_match(&headers)?).await?;
    Ok(tagged(plan.version, PlanBody::from(&plan)))
}

/// Move the amounts of a draft.
#[utoipa::path(put, path = "/plans/{id}/treatment", tag = "plans", params(("id" = PlanId, Path)),
    request_body = TreatmentBody, responses(
    (status = 200, description = "Saved", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "It is no draft, or has changed", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn move_amounts(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
    headers: HeaderMap,
    Json(body): Json<TreatmentBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::DraftPlans)?;
    let plan =
        operations::move_amounts(&db, &by, id, if_match(&headers)?, &body.try_into()?).await?;
    Ok(tagged(plan.version, PlanBody::from(&plan)))
}

/// Approve a draft: its inputs freeze.
#[utoipa::path(post, path = "/plans/{id}/approval", tag = "plans", params(("id" = PlanId, Path)),
    request_body = ReasonBody, responses(
    (status = 201, description = "Approved", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "It is no draft, has changed, or passes a limit", body = Problem),
    (status = 422, description = "A reason is needed", body = Problem),
))]
async fn approve(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
    headers: HeaderMap,
    Json(body): Json<ReasonBody>,
) -> Result<impl IntoResponse, Error> {
    let plan = operations::approve(&db, &by, id, if_match(&headers)?, body.optional()?).await?;
    Ok((
        StatusCode::CREATED,
        tagged(plan.version, PlanBody::from(&plan)),
    ))
}

/// Take an approval back, as long as nothing is weighed in.
#[utoipa::path(delete, path = "/plans/{id}/approval", tag = "plans", params(("id" = PlanId, Path)), responses(
    (status = 200, description = "A draft again", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "It is not approved, or something is weighed in", body = Problem),
))]
async fn take_back_approval(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
    headers: HeaderMap,
) -> Result<impl IntoResponse, Error> {
    let plan = operations::take_back_approval(&db, &by, id, if_match(&headers)?).await?;
    Ok(tagged(plan.version, PlanBody::from(&plan)))
}

/// Withdraw a plan: it will not be brewed.
#[utoipa::path(post, path = "/plans/{id}/withdrawal", tag = "plans", params(("id" = PlanId, Path)),
    request_body = ReasonBody, responses(
    (status = 201, description = "Withdrawn", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "It is closed or withdrawn", body = Problem),
    (status = 422, description = "A reason is needed", body = Problem),
))]
async fn withdraw(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
    headers: HeaderMap,
    Json(body): Json<ReasonBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::DraftPlans)?;
    let plan = operations::withdraw(&db, &by, id, if_match(&headers)?, body.needed()?).await?;
    Ok((
        StatusCode::CREATED,
        tagged(plan.version, PlanBody::from(&plan)),
    ))
}

/// Begin the next revision of an approved plan.
#[utoipa::path(post, path = "/plans/{id}/revisions", tag = "plans", params(("id" = PlanId, Path)), responses(
    (status = 201, description = "Begun", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "It cannot be revised now", body = Problem),
))]
async fn revise(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
) -> Result<impl IntoResponse, Error> {
    let plan = operations::revise(&db, &by, id).await?;
    let at = [(header::LOCATION, format!("/api/v1/plans/{}", plan.id))];
    Ok((
        StatusCode::CREATED,
        at,
        tagged(plan.version, PlanBody::from(&plan)),
    ))
}

/// Close a batch: predicted and measured are written down side by side.
#[utoipa::path(post, path = "/plans/{id}/closing", tag = "plans", params(("id" = PlanId, Path)),
    request_body = ClosingBody, responses(
    (status = 201, description = "Closed", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "Something is not weighed in yet", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn close(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
    headers: HeaderMap,
    Json(body): Json<ClosingBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::BrewBatches)?;
    let plan = operations::close(&db, &by, id, if_match(&headers)?, body.try_into()?).await?;
    Ok((
        StatusCode::CREATED,
        tagged(plan.version, PlanBody::from(&plan)),
    ))
}

/// The weigh-out.
#[utoipa::path(get, path = "/plans/{id}/doses", tag = "plans", params(("id" = PlanId, Path)), responses(
    (status = 200, description = "Doses in the order of weighing out", body = Vec<DoseBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
))]
async fn doses(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
) -> Result<axum::Json<Vec<DoseBody>>, Error> {
    let plan = operations::find(&db, &by, id).await?;
    Ok(axum::Json(
        plan.doses
            .iter()
            .map(|dose| DoseBody::of(&plan.inputs, dose))
            .collect(),
    ))
}

/// Write down that a dose is in. It is refused when it is in already.
#[utoipa::path(put, path = "/plans/{id}/doses/{dose_id}", tag = "plans",
    params(("id" = PlanId, Path), ("dose_id" = DoseId, Path)), request_body = WeighedBody, responses(
    (status = 200, description = "It is in", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such dose", body = Problem),
    (status = 409, description = "It is in already, or the plan is not approved", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn weigh(
    State(db): State<Db>,
    by: Member,
    At((id, dose)): At<(PlanId, DoseId)>,
    Json(body): Json<WeighedBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::BrewBatches)?;
    let (actual, lot) = body.check()?;
    let plan = weigh_out::weigh(&db, &by, id, dose, actual, lot).await?;
    Ok(tagged(plan.version, PlanBody::from(&plan)))
}

/// Take back that a dose is in: it was a slip.
#[utoipa::path(delete, path = "/plans/{id}/doses/{dose_id}", tag = "plans",
    params(("id" = PlanId, Path), ("dose_id" = DoseId, Path)), request_body = ReasonBody, responses(
    (status = 200, description = "Not in", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such dose", body = Problem),
    (status = 409, description = "It is not in", body = Problem),
    (status = 422, description = "A reason is needed", body = Problem),
))]
async fn take_back_weighing(
    State(db): State<Db>,
    by: Member,
    At((id, dose)): At<(PlanId, DoseId)>,
    Json(body): Json<ReasonBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::BrewBatches)?;
    let plan = weigh_out::take_back(&db, &by, id, dose, body.needed()?).await?;
    Ok(tagged(plan.version, PlanBody::from(&plan)))
}

/// Every pH reading of a batch, the earliest first.
#[utoipa::path(get, path = "/plans/{id}/mash-checks", tag = "plans", params(("id" = PlanId, Path)), responses(
    (status = 200, description = "Readings", body = Vec<MashCheckBody>),
    (status = 401, description = "No valid token", body = Problem),
))]
async fn checks(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
) -> Result<axum::Json<Vec<MashCheckBody>>, Error> {
    let checks = mash_checks::list(&db, &by, id).await?;
    Ok(axum::Json(checks.iter().map(Into::into).collect()))
}

/// Enter a pH reading and be told what to do.
#[utoipa::path(post, path = "/plans/{id}/mash-checks", tag = "plans", params(("id" = PlanId, Path)),
    request_body = NewMashCheckBody, responses(
    (status = 201, description = "Written down, with what to do", body = MashCheckBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "The plan is not approved", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn check(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
    Json(body): Json<NewMashCheckBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::BrewBatches)?;
    let check = mash_checks::read(&db, &by, id, body.try_into()?).await?;
    Ok((StatusCode::CREATED, axum::Json(MashCheckBody::from(&check))))
}

/// Withdraw a reading that was not what it said.
#[utoipa::path(post, path = "/plans/{id}/mash-checks/{check_id}/withdrawal", tag = "plans",
    params(("id" = PlanId, Path), ("check_id" = MashCheckId, Path)), request_body = ReasonBody, responses(
    (status = 204, description = "Withdrawn"),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such reading", body = Problem),
    (status = 409, description = "It is withdrawn already, or the batch is closed", body = Problem),
    (status = 422, description = "A reason is needed", body = Problem),
))]
async fn withdraw_check(
    State(db): State<Db>,
    by: Member,
    At((id, check)): At<(PlanId, MashCheckId)>,
    Json(body): Json<ReasonBody>,
) -> Result<StatusCode, Error> {
    by.may(Permission::BrewBatches)?;
    mash_checks::withdraw(&db, &by, id, check, body.needed()?).await?;
    Ok(StatusCode::NO_CONTENT)
}

/// What a plan would be. Nothing is stored.
#[utoipa::path(post, path = "/plan-previews", tag = "plans", request_body = PreviewInputBody, responses(
    (status = 200, description = "The four ways, and what the treatment sent along does", body = PreviewBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn preview(
    by: Member,
    Json(body): Json<PreviewInputBody>,
) -> Result<axum::Json<PreviewBody>, Error> {
    by.may(Permission::Read)?;
    let inputs = Inputs::try_from(body.inputs)?;
    let does = match body.treatment {
        None => None,
        Some(treatment) => {
            let treatment = Treatment::try_from(treatment)?;
            let outcome = compute::evaluate(&inputs, &treatment.shares, &treatment.doses)?;
            Some(OutcomeBody::of(&inputs, &outcome))
        }
    };
    let ways = compute::solve_all(&inputs)?;
    Ok(axum::Json(PreviewBody {
        ways: ways
            .iter()
            .map(|(way, ending)| WayBody::of(&inputs, *way, ending))
            .collect(),
        does,
    }))
}

impl Choice {
    /// The way, unless it was by hand.
    pub const fn way(self) -> Option<Way> {
        match self {
            Self::Way(way) => Some(way),
            Self::ByHand => None,
        }
    }
}
