//! The weigh-out: what goes in, line by line.

use chemistry::quantity::DoseAmount;

use super::operations::{about_dose, title, weighed_json};
use super::{Dose, Plan, State, Weighed, store};
use crate::brewery;
use crate::db::Db;
use crate::error::Error;
use crate::id::{DoseId, PlanId, UtcTime};
use crate::people::{Member, Permission};
use crate::record;
use crate::web::format;

pub mod lots;

pub use lots::LotNamed;

/// What somebody says went in.
#[derive(Clone, Debug, PartialEq)]
pub struct NewWeighed {
    /// How much, g or mL.
    pub actual: DoseAmount,
    /// Of which lot.
    pub lot: LotNamed,
    /// Why it is not what was planned.
    pub reason: Option<String>,
}

/// Writes down that a dose is in. A dose that is in already is refused with who weighed
/// it, so that none goes in twice.
pub async fn weigh(
    db: &Db,
    by: &Member,
    plan_id: PlanId,
    dose_id: DoseId,
    new: NewWeighed,
) -> Result<Plan, Error> {
    by.may(Permission::BrewBatches)?;
    let time_zone = brewery::operations::settings(db).await?.time_zone;
    let mut tx = db.begin().await?;
    let plan = open(&mut tx, plan_id).await?;
    let mut dose = find(&plan, dose_id)?.clone();
    if let Some(weighed) = &dose.weighed {
        return Err(Error::Conflict(format!(
            "{} weighed this in already, at {}. Do not add it again",
            weighed.by,
            format::moment(weighed.at, &time_zone)
        )));
    }
    let weighed = Weighed {
        actual: new.actual,
        lot: lots::find(&mut tx, &plan, &dose, new.lot).await?,
        at: UtcTime::now(),
        by: by.name.clone(),
        reason: new.reason.clone().unwrap_or_default(),
        witness: None,
        corrections: Vec::new(),
    };
    let after = weighed_json(&weighed);
    dose.weighed = Some(weighed);
    store::update_weighed(&mut tx, &dose).await?;
    let name = format!(
        "{} into the {}, {}",
        material(&plan, &dose),
        dose.vessel.name(),
        title(&plan)
    );
    let planned = serde_json::json!({"planned": dose.planned.get()});
    let change = record::Change::of(
        "weighed in",
        "dose",
        dose_id,
        &name,
        Some(planned),
        Some(after),
    );
    let change = change
        .because(new.reason)
        .about_each(about_dose(&plan, &dose));
    record::append(&mut tx, by, change).await?;
    let after = settle(&mut tx, &plan).await?;
    tx.commit().await?;
    Ok(after)
}

/// Takes back that a dose is in: it was a slip of the finger.
pub async fn take_back(
    db: &Db,
    by: &Member,
    plan_id: PlanId,
    dose_id: DoseId,
    reason: String,
) -> Result<Plan, Error> {
    by.may(Permission::BrewBatches)?;
    let mut tx = db.begin().await?;
    let plan = open(&mut tx, plan_id).await?;
    let mut dose = find(&plan, dose_id)?.clone();
    let Some(weighed) = dose.weighed.take() else {
        return Err(Error::Conflict("This is not weighed in".into()));
    };
    store::update_weighed(&mut tx, &dose).await?;
    let name = format!(
        "{} into the {}, {}",
        material(&plan, &dose),
        dose.vessel.name(),
        title(&plan)
    );
    let before = weighed_json(&weighed);
    let change = record::Change::of(
        "weighing taken back",
        "dose",
        dose_id,
        &name,
        Some(before),
        None,
    );
    // As it was: with the lot it was of.
    let was = find(&plan, dose_id)?;
    let change = change
        .because(Some(reason))
        .about_each(about_dose(&plan, was));
    record::append(&mut tx, by, change).await?;
    let after = settle(&mut tx, &plan).await?;
    tx.commit().await?;
    Ok(after)
}

async fn open(tx: &mut sqlx::SqliteConnection, id: PlanId) -> Result<Plan, Error> {
    let plan = store::find(tx, id).await?.ok_or(Error::NotFound("plan"))?;
    if !matches!(plan.state, State::Approved | State::Dosed) {
        return Err(Error::Conflict(format!(
            "This plan is {}: only an approved plan is weighed out",
            plan.state.name().to_lowercase()
        )));
    }
    if let Some((_, revision)) = store::successor(tx, id).await? {
        return Err(Error::Conflict(format!(
            "Revision {revision} of this plan is being drafted. Wait until it is approved or withdrawn"
        )));
    }
    Ok(plan)
}

fn find(plan: &Plan, id: DoseId) -> Result<&Dose, Error> {
    plan.doses
        .iter()
        .find(|dose| dose.id == id)
        .ok_or(Error::NotFound("dose of this plan"))
}

fn material(plan: &Plan, dose: &Dose) -> String {
    plan.inputs
        .problem
        .shelf
        .get(dose.material)
        .map_or_else(String::new, |item| item.name.clone())
}

/// The plan is dosed once every planned line is in, and approved again when one is taken
/// back.
async fn settle(tx: &mut sqlx::SqliteConnection, plan: &Plan) -> Result<Plan, Error> {
    let mut after = store::find(tx, plan.id)
        .await?
        .ok_or(Error::NotFound("plan"))?;
    let everything_in = after
        .doses
        .iter()
        .all(|dose| dose.mash_check.is_some() || dose.weighed.is_some());
    let state = if everything_in {
        State::Dosed
    } else {
        State::Approved
    };
    if state != after.state {
        after.state = state;
        after.version += 1;
        store::update_state(tx, &after).await?;
    }
    Ok(after)
}
