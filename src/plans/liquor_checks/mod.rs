//! Testing sparge liquor before it runs over the grains: its alkalinity against the limit
//! of the beer, and how much acid brings it below.

use chemistry::material::{Role, Vessel};
use chemistry::plan::{Outcome, Preference};
use chemistry::put_right::{Remedy, Stop};
use chemistry::quantity::{DoseAmount, Drops, Estimate, Litres, MgPerLAsCaCO3, NINETY_PERCENT};
use chemistry::sparge::{self, AcidDose, SpargeAdvice, SpargeCheck};
use serde_json::json;
use sqlx::SqliteConnection;

use super::operations::{batch, title};
use super::{Deed, Dose, Plan, State, compute, mash_checks, store as plans};
use crate::db::Db;
use crate::error::Error;
use crate::id::{DoseId, LiquorCheckId, MaterialId, PlanId, UtcTime};
use crate::people::{Member, Permission};
use crate::record::{self, Change};
use crate::web::format;

pub mod api;
mod store;

/// Sparge liquor as it was tested.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct NewLiquorCheck {
    /// What the test says.
    pub tested: Tested,
    /// How much is still to run; all of the plan's where it was not told.
    pub volume: Option<Litres>,
}

/// What a test on the spot says.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Tested {
    /// Drops until the colour turned, and what each is worth.
    Drops(Drops, MgPerLAsCaCO3),
    /// The alkalinity itself.
    Alkalinity(MgPerLAsCaCO3),
}

impl Tested {
    fn alkalinity(self) -> Estimate<MgPerLAsCaCO3> {
        match self {
            Self::Drops(drops, per_drop) => sparge::by_drops(drops, per_drop),
            Self::Alkalinity(alkalinity) => sparge::on_the_spot(alkalinity),
        }
    }
}

/// A test of the sparge liquor of a batch.
#[derive(Clone, Debug, PartialEq)]
pub struct LiquorCheck {
    /// Its identifier.
    pub id: LiquorCheckId,
    /// Which plan's batch.
    pub plan_id: PlanId,
    /// When.
    pub checked_at: UtcTime,
    /// Drops counted and what each is worth, where it was a drop count.
    pub drops: Option<(Drops, MgPerLAsCaCO3)>,
    /// What it says.
    pub alkalinity: Estimate<MgPerLAsCaCO3>,
    /// How much was still to run.
    pub volume: Litres,
    /// What was advised, as it was shown.
    pub advised: LiquorAdvised,
    /// The line of the weigh-out it led to.
    pub dose: Option<DoseId>,
    /// By whom.
    pub checked_by: String,
    /// When, by whom and why it was withdrawn.
    pub withdrawn: Option<Deed>,
}

/// What was said to a test of sparge liquor.
#[derive(Clone, Debug, PartialEq, serde::Serialize, serde::Deserialize, utoipa::ToSchema)]
pub struct LiquorAdvised {
    /// Highest alkalinity wished for, mg/L as CaCO₃.
    pub limit_mg_per_l_as_caco3: f64,
    /// Whether that is assumed, because the spec says nothing.
    pub limit_assumed: bool,
    /// `leave`, `acidify` or `stop`.
    pub advice: String,
    /// Why, in one word for programs: `below`, `cannot_be_told`, `above`, `weigh_in_first`,
    /// `cap` or `no_remedy`.
    pub why: String,
    /// What to do, in a heading.
    pub title: String,
    /// Why, in sentences.
    pub words: Vec<String>,
    /// The acid, if some is advised.
    pub acid: Option<SpargeAcid>,
}

/// Acid for sparge liquor.
#[derive(Clone, Debug, PartialEq, serde::Serialize, serde::Deserialize, utoipa::ToSchema)]
pub struct SpargeAcid {
    /// Place of the material on the plan's shelf.
    pub material: usize,
    /// Its name.
    pub name: String,
    /// How much, g or mL, on the step of the scale.
    pub amount: f64,
    /// `g` or `mL`.
    pub unit: String,
    /// Alkalinity after it, mg/L as CaCO₃.
    pub after_mg_per_l_as_caco3: f64,
    /// Its standard deviation.
    pub after_sd: f64,
    /// pH of a cooled sample at once.
    pub ph_at_once: Option<f64>,
    /// pH when nine tenths of the carbon dioxide have left.
    pub ph_later: Option<f64>,
}

/// Writes a test down and says what to do. Acid becomes a line of the weigh-out.
pub async fn check(
    db: &Db,
    by: &Member,
    plan_id: PlanId,
    new: NewLiquorCheck,
) -> Result<LiquorCheck, Error> {
    by.may(Permission::BrewBatches)?;
    let mut tx = db.begin().await?;
    let plan = open(&mut tx, plan_id).await?;
    let volume = new.volume.unwrap_or(plan.inputs.problem.volumes.sparge);
    if volume.get() <= 0.0 {
        return Err(Error::field(
            "volume_l",
            "This beer is not sparged by its plan. Enter how much liquor is to run.",
        ));
    }
    let shelf = mash_checks::remedies::on_the_shelf(&mut tx).await?;
    let alkalinity = new.tested.alkalinity();
    // A line of an earlier check that nobody gave is overtaken by this one.
    let earlier = store::of_plan(&mut tx, plan_id).await?;
    let overtaken: Vec<DoseId> = earlier.iter().filter_map(|check| check.dose).collect();
    let still_open = |dose: &Dose| overtaken.contains(&dose.id) && dose.weighed.is_none();
    let mut without = plan.clone();
    without.doses.retain(|dose| !still_open(dose));
    let advised = advise(&without, &shelf, alkalinity, volume)?;
    for dose in plan.doses.iter().filter(|dose| still_open(dose)) {
        plans::drop_dose(&mut tx, dose.id).await?;
    }
    let mut check = LiquorCheck {
        id: LiquorCheckId::new(),
        plan_id,
        checked_at: UtcTime::now(),
        drops: match new.tested {
            Tested::Drops(drops, per_drop) => Some((drops, per_drop)),
            Tested::Alkalinity(_) => None,
        },
        alkalinity,
        volume,
        advised,
        dose: None,
        checked_by: by.name.clone(),
        withdrawn: None,
    };
    if let Some(acid) = &check.advised.acid {
        let last = plan.doses.iter().map(|dose| dose.position).max();
        let dose = Dose {
            id: DoseId::new(),
            position: last.unwrap_or(0) + 1,
            vessel: Vessel::SpargeLiquor,
            material: acid.material,
            planned: DoseAmount::clamped(acid.amount),
            mash_check: None,
            weighed: None,
        };
        plans::add_dose(&mut tx, plan_id, &dose).await?;
        check.dose = Some(dose.id);
    }
    settle(&mut tx, plan_id).await?;
    store::insert(&mut tx, &check).await?;
    let name = format!("sparge liquor of {}", title(&plan));
    let entry = Change::created("liquor check", check.id, &name, &describe(&check));
    record::append(&mut tx, by, entry.about_each(batch(&plan))).await?;
    tx.commit().await?;
    Ok(check)
}

async fn open(tx: &mut SqliteConnection, plan_id: PlanId) -> Result<Plan, Error> {
    let plan = plans::find(tx, plan_id)
        .await?
        .ok_or(Error::NotFound("plan"))?;
    if matches!(plan.state, State::Approved | State::Dosed) {
        return Ok(plan);
    }
    Err(Error::Conflict(format!(
        "This plan is {}: only the liquor of an approved plan is tested",
        plan.state.name().to_lowercase()
    )))
}

/// The plan is dosed when every line is in, and approved again while one is not.
async fn settle(tx: &mut SqliteConnection, id: PlanId) -> Result<(), Error> {
    let mut plan = plans::find(tx, id).await?.ok_or(Error::NotFound("plan"))?;
    let in_already = |dose: &Dose| dose.mash_check.is_some() || dose.weighed.is_some();
    let state = if plan.doses.iter().all(in_already) {
        State::Dosed
    } else {
        State::Approved
    };
    if state != plan.state {
        plan.state = state;
        plan.version += 1;
        plans::update_state(tx, &plan).await?;
    }
    Ok(())
}

/// Every test of the sparge liquor of a batch, the earliest first.
pub async fn list(db: &Db, by: &Member, plan_id: PlanId) -> Result<Vec<LiquorCheck>, Error> {
    by.may(Permission::Read)?;
    store::of_plan(&mut *db.reader().await?, plan_id).await
}

/// Withdraws a test that was not what it said. Its line goes with it, unless it is in.
pub async fn withdraw(
    db: &Db,
    by: &Member,
    plan_id: PlanId,
    id: LiquorCheckId,
    reason: String,
) -> Result<(), Error> {
    by.may(Permission::BrewBatches)?;
    let mut tx = db.begin().await?;
    let plan = open(&mut tx, plan_id).await?;
    let checks = store::of_plan(&mut tx, plan_id).await?;
    let check = checks
        .iter()
        .find(|check| check.id == id)
        .ok_or(Error::NotFound("liquor check of this plan"))?;
    if check.withdrawn.is_some() {
        return Err(Error::Conflict("This test is withdrawn already".into()));
    }
    let deed = Deed {
        at: UtcTime::now(),
        by: by.name.clone(),
        reason: reason.clone(),
    };
    store::withdraw(&mut tx, id, &deed).await?;
    let line = plan.doses.iter().find(|dose| Some(dose.id) == check.dose);
    if let Some(dose) = line.filter(|dose| dose.weighed.is_none()) {
        plans::drop_dose(&mut tx, dose.id).await?;
    }
    settle(&mut tx, plan_id).await?;
    let name = format!("sparge liquor of {}", title(&plan));
    let entry = Change::event("withdrawn", "liquor check", id, &name).because(Some(reason));
    record::append(&mut tx, by, entry.about_each(batch(&plan))).await?;
    tx.commit().await?;
    Ok(())
}

fn describe(check: &LiquorCheck) -> serde_json::Value {
    json!({
        "drops": check.drops.map(|(drops, _)| drops.get()),
        "alkalinity_mg_per_l_as_caco3": check.alkalinity.value.get(),
        "alkalinity_sd": check.alkalinity.sd,
        "volume_l": check.volume.get(),
        "advice": check.advised.title,
    })
}

/// Where the alkalinity of this beer's sparge liquor must end, and whether that is assumed.
pub fn limit(plan: &Plan) -> (MgPerLAsCaCO3, bool) {
    plan.inputs
        .problem
        .spec
        .sparge_alkalinity
        .and_then(|window| window.high)
        .map_or((sparge::USUAL_LIMIT, true), |high| (high, false))
}

/// How well the plan knows the alkalinity of its sparge liquor, relative and of at least
/// this much, mg/L. Source: assumed; a source drifts and acid is poured to a step.
const PLANNED_RELATIVE_SD: f64 = 0.15;
const LEAST_PLANNED: f64 = 30.0;

/// Further from it than this many standard deviations is a surprise.
const SURPRISING: f64 = 3.0;

fn advise(
    plan: &Plan,
    shelf: &[MaterialId],
    alkalinity: Estimate<MgPerLAsCaCO3>,
    volume: Litres,
) -> Result<LiquorAdvised, Error> {
    let (limit, limit_assumed) = limit(plan);
    let spec = plan.inputs.problem.spec.sparge_alkalinity;
    // Far enough below the limit that the next test can tell.
    let clear = limit.get() - NINETY_PERCENT * alkalinity.sd;
    let low = spec
        .and_then(|window| window.low)
        .map_or(0.0, MgPerLAsCaCO3::get);
    let floor = sparge::USUAL_TARGET.get().min(limit.get()).max(low);
    let target = spec
        .and_then(|window| window.preferred)
        .unwrap_or(MgPerLAsCaCO3::clamped(clear.max(floor)));
    let check = SpargeCheck {
        alkalinity,
        volume,
        limit,
        target,
    };
    let outcome = compute::as_weighed(plan)?;
    let acids = acids(plan, shelf);
    let remedy = |index: usize| {
        Some(Remedy {
            material: &plan.inputs.problem.shelf.get(index)?.material,
            cap: *outcome.room.get(index)?,
        })
    };
    // The first acid that is not near its cap.
    let with = acids
        .iter()
        .map(|index| (Some(*index), check.assess(remedy(*index))));
    let (index, advice) = with
        .clone()
        .find(|(_, advice)| !matches!(advice, SpargeAdvice::Stop(_)))
        .or_else(|| with.clone().next())
        .unwrap_or_else(|| (None, check.assess(None)));
    let not_in: Vec<&str> = plan
        .doses
        .iter()
        .filter(|dose| dose.weighed.is_none())
        .filter(|dose| matches!(dose.vessel, Vessel::LiquorTank | Vessel::SpargeLiquor))
        .filter_map(|dose| plan.inputs.problem.shelf.get(dose.material))
        .map(|item| item.name.as_str())
        .collect();
    let read = format!(
        "{} ± {} mg/L as CaCO₃ against at most {}{}.",
        format::figure(alkalinity.value.get()),
        format::doubt(alkalinity.sd),
        format::entered(limit.get()),
        if limit_assumed {
            ", assumed: this beer’s spec says nothing"
        } else {
            ""
        }
    );
    let planned = outcome.sparge_liquor.alkalinity_as_caco3().get();
    let surprise = (alkalinity.value.get() - planned).abs();
    let doubt = alkalinity
        .sd
        .hypot(PLANNED_RELATIVE_SD * planned.abs().max(LEAST_PLANNED));
    let mut acid = None;
    let (kind, why, title, words) = match (advice, index) {
        (SpargeAdvice::LeaveIt, _) => (
            "leave",
            "below",
            "Fit to sparge with",
            "It is below the limit.".to_owned(),
        ),
        (SpargeAdvice::CannotBeTold, _) => (
            "leave",
            "cannot_be_told",
            "Near the limit",
            "The test cannot tell it from the limit. A larger sample makes each drop worth less.".into(),
        ),
        (SpargeAdvice::Acidify(_) | SpargeAdvice::Stop(_), _) if !not_in.is_empty() => (
            "stop",
            "weigh_in_first",
            "Weigh in first what is planned",
            format!("Not in yet: {}. Stir it in and test again.", not_in.join(", ")),
        ),
        (SpargeAdvice::Acidify(dose), Some(index)) => {
            acid = acid_words(plan, &outcome, index, &dose, alkalinity.value, volume);
            acidify(acid.as_ref(), dose.capped)
        }
        (SpargeAdvice::Stop(Stop::CapReached), _) => (
            "stop",
            "cap",
            "No more acid",
            "The acids on the shelf have reached what this batch may take. Blend with softer water, or sparge less.".into(),
        ),
        (SpargeAdvice::Acidify(_) | SpargeAdvice::Stop(_), _) => (
            "stop",
            "no_remedy",
            "No acid for it",
            "No acid on the shelf may go into the sparge liquor. Blend with softer water, or sparge less.".into(),
        ),
    };
    Ok(LiquorAdvised {
        limit_mg_per_l_as_caco3: limit.get(),
        limit_assumed,
        advice: kind.into(),
        why: why.into(),
        title: title.into(),
        words: [read, words]
            .into_iter()
            .chain((surprise > SURPRISING * doubt).then(|| {
                format!(
                    "The plan expects {} mg/L here. Count once more before anything goes in: a kit with other drops is the \
                     usual slip, a changed water the next.",
                    format::figure(planned)
                )
            }))
            .collect(),
        acid,
    })
}

fn acidify(
    acid: Option<&SpargeAcid>,
    capped: bool,
) -> (&'static str, &'static str, &'static str, String) {
    let Some(acid) = acid else {
        let words = "What is missing is less than the measure can tell.".to_owned();
        return ("leave", "cannot_be_told", "Leave it", words);
    };
    let mut words = format!(
        "It brings the alkalinity to {} mg/L as CaCO₃.",
        format::figure(acid.after_mg_per_l_as_caco3)
    );
    if capped {
        words.push_str(" That is less than was wanted, because of the limit on this batch.");
    }
    if let (Some(now), Some(later)) = (acid.ph_at_once, acid.ph_later) {
        words.push_str(&format!(
            " A cooled sample then reads about pH {} at once and drifts to {} as carbon dioxide leaves: test the \
             alkalinity again, not the pH.",
            format::decimals(now, 1),
            format::decimals(later, 1)
        ));
    }
    ("acidify", "above", "Acidify the sparge liquor", words)
}

fn acids(plan: &Plan, shelf: &[MaterialId]) -> Vec<usize> {
    let inputs = &plan.inputs;
    let stands_there = |index: usize| {
        inputs
            .shelf
            .get(index)
            .and_then(|label| label.id)
            .is_none_or(|id| shelf.contains(&id))
    };
    let fits = |index: &usize| {
        stands_there(*index)
            && inputs.problem.shelf.get(*index).is_some_and(|item| {
                item.material.substance().role() == Role::Acid
                    && item.vessels.contains(&Vessel::SpargeLiquor)
                    && item.preference != Preference::Avoided
            })
    };
    // What the plan uses comes first.
    let used = |index: usize| plan.doses.iter().any(|dose| dose.material == index);
    let mut found: Vec<usize> = (0..inputs.problem.shelf.len()).filter(fits).collect();
    found.sort_by_key(|index| !used(*index));
    found
}

fn acid_words(
    plan: &Plan,
    outcome: &Outcome,
    index: usize,
    dose: &AcidDose,
    tested: MgPerLAsCaCO3,
    volume: Litres,
) -> Option<SpargeAcid> {
    let item = plan.inputs.problem.shelf.get(index)?;
    let step = item.step.get();
    // To the step below: too little is tested again, too much cannot be taken out.
    let amount = if step > 0.0 {
        (dose.dose.get() / step + 1e-9).floor() * step
    } else {
        dose.dose.get()
    };
    if amount <= 0.0 {
        return None;
    }
    let brings = item.material.contribution(DoseAmount::clamped(amount));
    let taken = brings.alkalinity.get() * chemistry::quantity::MG_CACO3_PER_MEQ / volume.get();
    let range = sparge::ph_range(&outcome.sparge_liquor, tested, &brings, volume).ok();
    Some(SpargeAcid {
        material: index,
        name: item.name.clone(),
        amount,
        unit: item.material.unit().symbol().into(),
        after_mg_per_l_as_caco3: tested.get() + taken,
        after_sd: dose.after.sd,
        ph_at_once: range.map(|(now, _)| now.get()),
        ph_later: range.map(|(_, later)| later.get()),
    })
}
