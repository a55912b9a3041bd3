//! Closing a batch: predicted and measured side by side, for the next prediction to learn
//! from.

use chemistry::quantity::{Estimate, PhShift};
use serde_json::json;
use sqlx::SqliteConnection;

use super::inputs::Learned;
use super::learning::Lesson;
use super::operations::{about, same_version, title};
use super::{
    Deed, Inputs, MashCheck, Outcome, Plan, Stage, State, compute, learning, mash_checks,
    store as plans_store,
};
use crate::db::Db;
use crate::error::Error;
use crate::id::{MashCheckId, PlanId, UtcTime};
use crate::people::{Member, Permission};
use crate::{brewery, record};

pub mod api;
pub mod corrections;
pub mod deviations;
pub mod revisions;
mod store;

/// How a batch is closed.
#[derive(Clone, Debug, PartialEq)]
pub struct Closing {
    /// The mash check that counts; the first good one when not given.
    pub mash_check_id: Option<MashCheckId>,
    /// Whether it counts for learning.
    pub counts: bool,
    /// Why things were not as planned: the key of each deviation with its reason. The
    /// note stands for those that are not here.
    pub reasons: Vec<(String, String)>,
    /// What else should be known.
    pub note: Option<String>,
}

/// Closes a batch: predicted and measured are written down side by side.
pub async fn close(
    db: &Db,
    by: &Member,
    id: PlanId,
    version: Option<i64>,
    closing: Closing,
) -> Result<Plan, Error> {
    by.may(Permission::BrewBatches)?;
    let settings = brewery::operations::settings(db).await?;
    let mut tx = db.begin().await?;
    let before = plans_store::find(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("plan"))?;
    same_version(&before, version)?;
    if !matches!(before.state, State::Approved | State::Dosed) {
        return Err(Error::Conflict(format!(
            "This plan is {}: only an approved batch can be closed",
            before.state.name().to_lowercase()
        )));
    }
    if let Some((_, revision)) = plans_store::successor(&mut tx, id).await? {
        return Err(Error::Conflict(format!(
            "Revision {revision} is being drafted. Approve or withdraw it first"
        )));
    }
    if let Some(missing) = before
        .doses
        .iter()
        .find(|dose| dose.mash_check.is_none() && dose.weighed.is_none())
    {
        let name = before
            .inputs
            .problem
            .shelf
            .get(missing.material)
            .map_or("a dose", |item| item.name.as_str());
        return Err(Error::Conflict(format!(
            "{name} for the {} is not weighed in yet. Weigh it in, or enter 0 if it was left out",
            missing.vessel.name()
        )));
    }
    let tolerances = store::tolerances(&mut tx).await?;
    let deviations = deviations::of(&mut tx, &before, &settings, &tolerances).await?;
    let deviations = deviations::explained(deviations, &closing.reasons, closing.note.as_deref())?;
    let outcome = outcome(&mut tx, &before, &closing).await?;
    let after = Plan {
        state: State::Closed,
        closed: Some(Deed {
            at: UtcTime::now(),
            by: by.name.clone(),
            reason: closing.note.clone().unwrap_or_default(),
        }),
        outcome: Some(outcome),
        version: before.version + 1,
        ..before.clone()
    };
    plans_store::update_state(&mut tx, &after).await?;
    store::write_deviations(&mut tx, id, &deviations).await?;
    let mut after_json = serde_json::to_value(&after.outcome).unwrap_or_default();
    after_json["deviations"] = deviations
        .iter()
        .map(|it| json!({"what": it.words, "reason": it.reason}))
        .collect();
    let change = record::Change::of("closed", "plan", id, &title(&after), None, Some(after_json));
    let change = change.because(closing.note).about_each(about(&after));
    record::append(&mut tx, by, change).await?;
    tx.commit().await?;
    Ok(after)
}

async fn outcome(
    tx: &mut SqliteConnection,
    plan: &Plan,
    closing: &Closing,
) -> Result<Outcome, Error> {
    let checks = mash_checks::store::of_plan(tx, plan.id).await?;
    let usable = |check: &&MashCheck| check.stage == Stage::Mash && check.withdrawn.is_none();
    let check = match closing.mash_check_id {
        Some(id) => Some(
            checks
                .iter()
                .filter(usable)
                .find(|check| check.id == id)
                .ok_or_else(|| {
                    Error::field("mash_check_id", "Choose one of the readings of this mash.")
                })?,
        ),
        None => checks
            .iter()
            .filter(usable)
            .find(|check| check.advised.advice != "read_again"),
    };
    // First steps given after the reading did not act on it.
    let mut as_read = plan.clone();
    if let Some(check) = check {
        as_read.doses.retain(|dose| {
            dose.mash_check.is_none()
                || dose
                    .weighed
                    .as_ref()
                    .is_some_and(|weighed| weighed.at <= check.read_at)
        });
    }
    let mut untrained = compute::mash_as_weighed(&Plan {
        inputs: Inputs {
            learned: Learned::default(),
            ..as_read.inputs.clone()
        },
        ..as_read.clone()
    });
    untrained.offset = Estimate::new(PhShift::constant(0.0), 0.0);
    let untrained = untrained
        .predict()
        .map_err(|error| Error::Conflict(error.to_string()))?;
    let (malts, other_sd) = learning::taught(&untrained, &plan.inputs);
    let predicted = plan.prediction.ok_or_else(|| {
        Error::internal("An approved plan has no prediction", plan.id.to_string())
    })?;
    Ok(Outcome {
        predicted_ph: predicted.ph.get(),
        predicted_sd: predicted.sd.get(),
        untrained_ph: untrained.ph.value.get(),
        measured_ph: check.map(|check| check.advised.reading_ph),
        measured_sd: check.map(|check| check.advised.reading_sd),
        mash_check_id: check.map(|check| check.id),
        counts: closing.counts && check.is_some(),
        malts,
        other_sd: other_sd.get(),
    })
}

/// What was learned, for the mash of a plan as it stands.
pub async fn lesson(db: &Db, by: &Member, plan: &Plan) -> Result<Lesson, Error> {
    by.may(Permission::Read)?;
    let inputs = Inputs {
        learned: Learned::default(),
        ..plan.inputs.clone()
    };
    let mash = compute::mash_as_weighed(&Plan {
        inputs: inputs.clone(),
        ..plan.clone()
    });
    learning::lesson(db, &mash, &inputs).await
}
