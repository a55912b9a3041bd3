//! What is answered about plans.

use std::collections::BTreeMap;

use chemistry::plan::{self, Ending, Way};
use chemistry::quantity::{Litres, Minutes, Ph};
use chemistry::water::Water;
use serde::Serialize;

use super::inputs::Inputs;
use super::operations::Shown;
use super::store::Listing;
use super::{Advised, Correction, Deed, Dose, MashCheck, Plan, Prediction, compute, words};
use crate::id::{
    BeerId, CalibrationId, DoseId, MashCheckId, MaterialLotId, MeterId, PlanId, UtcTime,
};

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
pub struct StandingBody {
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
    findings: Vec<StandingBody>,
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
    /// What an outcome says.
    pub fn of(inputs: &Inputs, outcome: &plan::Outcome) -> Self {
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
                .map(|finding| StandingBody {
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
    /// How a way ends.
    pub fn of(inputs: &Inputs, way: Way, ending: &Ending) -> Self {
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
    /// Of which lot: the code on its pack.
    actual_lot: Option<String>,
    /// Which lot of the shelf that is, if it knows one of that code.
    actual_material_lot_id: Option<MaterialLotId>,
    /// When.
    weighed_at: Option<UtcTime>,
    /// By whom.
    weighed_by: Option<String>,
    /// Why it is not what was planned.
    reason: Option<String>,
    /// The second person who stood by.
    second_person: Option<String>,
    /// What was written down before it was corrected, the earliest first.
    corrections: Vec<Correction>,
    /// What can hurt about it.
    cautions: Vec<&'static str>,
}

impl DoseBody {
    /// A dose with its names.
    pub fn of(inputs: &Inputs, dose: &Dose) -> Self {
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
            actual_lot: weighed.map(|weighed| weighed.lot.code.clone()),
            actual_material_lot_id: weighed.and_then(|weighed| weighed.lot.id),
            weighed_at: weighed.map(|weighed| weighed.at),
            weighed_by: weighed.map(|weighed| weighed.by.clone()),
            reason: weighed
                .map(|weighed| weighed.reason.clone())
                .filter(|reason| !reason.is_empty()),
            second_person: weighed.and_then(|weighed| Some(weighed.witness.as_ref()?.name.clone())),
            corrections: weighed.map_or_else(Vec::new, |weighed| weighed.corrections.clone()),
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
    pub id: PlanId,
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
    /// Minutes since strike; absent at stages that are not timed so.
    minute: Option<f64>,
    /// As the meter showed it.
    ph: f64,
    /// Temperature of the sample, °C.
    sample_c: f64,
    /// Which meter, by the name of that day.
    meter: String,
    /// Which of `/meters`.
    meter_id: Option<MeterId>,
    /// The calibration the reading rested on.
    calibration_id: Option<CalibrationId>,
    /// One standard deviation of a reading, by that calibration.
    meter_sd: f64,
    /// Whether the meter was checked in buffer after a surprising reading.
    meter_checked: bool,
    /// Whether somebody said that the meter really showed what looked mistyped.
    confirmed: bool,
    /// Wort in the kettle, L, where it was told.
    wort_l: Option<f64>,
    /// The pH wished for at cast-out, where it was told.
    cast_out_ph: Option<f64>,
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
            minute: check.since_strike().map(Minutes::get),
            ph: check.ph.get(),
            sample_c: check.sample.get(),
            meter: check.meter.clone(),
            meter_id: check.meter_id,
            calibration_id: check.calibration_id,
            meter_sd: check.meter_sd.get(),
            meter_checked: check.meter_checked,
            confirmed: check.confirmed,
            wort_l: check.wort.map(Litres::get),
            cast_out_ph: check.cast_out.map(Ph::get),
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
    pub ways: Vec<WayBody>,
    /// What the treatment sent along does.
    pub does: Option<OutcomeBody>,
}
