//! Deciding about a plan: approving it, taking that back, withdrawing it, beginning the
//! next revision.

use sqlx::SqliteConnection;

use super::operations::{about, describe, open_draft, same_version, title};
use super::{Deed, Dose, Plan, State, compute, store, words};
use crate::db::Db;
use crate::error::{Error, breaks_unique};
use crate::id::{DoseId, PlanId, UtcTime};
use crate::people::{Member, Permission};
use crate::record;

/// Freezes a draft. `reason` is needed when a source in use lies outside the limits for
/// drinking water.
pub async fn approve(
    db: &Db,
    by: &Member,
    id: PlanId,
    version: Option<i64>,
    reason: Option<String>,
) -> Result<Plan, Error> {
    by.may(Permission::ApprovePlans)?;
    let mut tx = db.begin().await?;
    let before = open_draft(&mut tx, id, version).await?;
    let outcome = compute::as_weighed(&before)?;
    let Some(prediction) = compute::prediction(&outcome) else {
        return Err(Error::Conflict(
            "The mash of this plan has no pH: check grist, liquor and amounts".into(),
        ));
    };
    if let Some(broken) = outcome.broken.first() {
        return Err(Error::Conflict(format!(
            "This plan passes a limit: {}. Move the amounts until it does not",
            words::limit(&before.inputs, broken.limit)
        )));
    }
    let outside = before.inputs.outside_potable(&before.shares);
    if !outside.is_empty() && reason.is_none() {
        return Err(Error::field(
            "reason",
            format!(
                "This plan uses water outside the limits for drinking water ({}). Name the reason for using it.",
                outside.join("; ")
            ),
        ));
    }
    let everything_in = before.doses.iter().all(|dose| dose.weighed.is_some());
    let after = Plan {
        state: if everything_in && !before.doses.is_empty() {
            State::Dosed
        } else {
            State::Approved
        },
        approved: Some(Deed {
            at: UtcTime::now(),
            by: by.name.clone(),
            reason: reason.clone().unwrap_or_default(),
        }),
        prediction: Some(prediction),
        version: before.version + 1,
        ..before.clone()
    };
    store::update_state(&mut tx, &after).await?;
    if let Some(replaced) = after.replaces {
        replace(&mut tx, by, replaced, after.revision).await?;
    }
    let change = record::Change::of(
        "approved",
        "plan",
        id,
        &title(&after),
        Some(describe(&before)),
        Some(describe(&after)),
    );
    let change = change.because(reason).about_each(about(&after));
    record::append(&mut tx, by, change).await?;
    tx.commit().await?;
    Ok(after)
}

/// The plan that a revision takes the place of is withdrawn.
async fn replace(
    tx: &mut SqliteConnection,
    by: &Member,
    id: PlanId,
    revision: i64,
) -> Result<(), Error> {
    let Some(before) = store::find(tx, id).await? else {
        return Ok(());
    };
    if matches!(before.state, State::Withdrawn | State::Closed) {
        return Ok(());
    }
    let reason = format!("Revision {revision} takes its place.");
    let after = withdrawn(&before, by, reason.clone());
    store::update_state(tx, &after).await?;
    record::append(
        tx,
        by,
        record::Change::event("withdrawn", "plan", id, &title(&after))
            .because(Some(reason))
            .about_each(about(&after)),
    )
    .await
}

fn withdrawn(plan: &Plan, by: &Member, reason: String) -> Plan {
    Plan {
        state: State::Withdrawn,
        withdrawn: Some(Deed {
            at: UtcTime::now(),
            by: by.name.clone(),
            reason,
        }),
        version: plan.version + 1,
        ..plan.clone()
    }
}

/// Takes an approval back, as long as nothing is weighed in.
pub async fn take_back_approval(
    db: &Db,
    by: &Member,
    id: PlanId,
    version: Option<i64>,
) -> Result<Plan, Error> {
    by.may(Permission::ApprovePlans)?;
    let mut tx = db.begin().await?;
    let before = store::find(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("plan"))?;
    same_version(&before, version)?;
    if before.state != State::Approved {
        return Err(Error::Conflict(
            "Only an approved plan can become a draft again".into(),
        ));
    }
    if before.doses.iter().any(|dose| dose.weighed.is_some()) {
        return Err(Error::Conflict(
            "Something is weighed in already. Revise the plan instead".into(),
        ));
    }
    if before.replaces.is_some() {
        return Err(Error::Conflict(
            "This revision took another's place. Revise it instead".into(),
        ));
    }
    let after = Plan {
        state: State::Draft,
        approved: None,
        prediction: None,
        version: before.version + 1,
        ..before.clone()
    };
    store::update_state(&mut tx, &after).await?;
    record::append(
        &mut tx,
        by,
        record::Change::event("approval taken back", "plan", id, &title(&after))
            .about_each(about(&after)),
    )
    .await?;
    tx.commit().await?;
    Ok(after)
}

/// Withdraws a plan: it will not be brewed. It stays to be read.
pub async fn withdraw(
    db: &Db,
    by: &Member,
    id: PlanId,
    version: Option<i64>,
    reason: String,
) -> Result<Plan, Error> {
    by.may(Permission::DraftPlans)?;
    let mut tx = db.begin().await?;
    let before = store::find(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("plan"))?;
    same_version(&before, version)?;
    match before.state {
        State::Draft => {}
        State::Approved | State::Dosed => by.may(Permission::ApprovePlans)?,
        State::Closed | State::Withdrawn => {
            return Err(Error::Conflict(format!(
                "This plan is {} already",
                before.state.name().to_lowercase()
            )));
        }
    }
    let after = withdrawn(&before, by, reason.clone());
    store::update_state(&mut tx, &after).await?;
    record::append(
        &mut tx,
        by,
        record::Change::event("withdrawn", "plan", id, &title(&after))
            .because(Some(reason))
            .about_each(about(&after)),
    )
    .await?;
    tx.commit().await?;
    Ok(after)
}

/// Begins the next revision: a draft with the same inputs and amounts. What is weighed
/// in already goes with it.
pub async fn revise(db: &Db, by: &Member, id: PlanId) -> Result<Plan, Error> {
    by.may(Permission::DraftPlans)?;
    let mut tx = db.begin().await?;
    let replaced = store::find(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("plan"))?;
    match replaced.state {
        State::Approved | State::Dosed => {}
        State::Draft => {
            return Err(Error::Conflict(
                "This is a draft: change it as it is".into(),
            ));
        }
        State::Closed => {
            return Err(Error::Conflict(
                "This batch is closed: nothing of it can change".into(),
            ));
        }
        State::Withdrawn => {
            return Err(Error::Conflict(
                "This plan is withdrawn. Revise the one that took its place, or draft a new one"
                    .into(),
            ));
        }
    }
    let doses = replaced
        .doses
        .iter()
        .filter(|dose| dose.mash_check.is_none() || dose.weighed.is_some())
        .map(|dose| Dose {
            id: DoseId::new(),
            mash_check: None,
            ..dose.clone()
        })
        .collect();
    let now = UtcTime::now();
    let plan = Plan {
        id: PlanId::new(),
        revision: store::last_revision(&mut tx, &replaced.batch).await? + 1,
        replaces: Some(id),
        state: State::Draft,
        doses,
        drafted: Deed {
            at: now,
            by: by.name.clone(),
            reason: String::new(),
        },
        approved: None,
        prediction: None,
        version: 1,
        ..replaced.clone()
    };
    store::insert(&mut tx, &plan).await.map_err(|error| {
        if breaks_unique(&error) {
            Error::Conflict(
                "Somebody has begun the next revision already. Reload to find it".into(),
            )
        } else {
            error.into()
        }
    })?;
    record::append(
        &mut tx,
        by,
        record::Change::created("plan", plan.id, &title(&plan), &describe(&plan))
            .about_each(about(&plan)),
    )
    .await?;
    tx.commit().await?;
    Ok(plan)
}
