//! The rules of a plan's life: drafting, moving amounts, approving, revising,
//! withdrawing, closing. Weighing out is in [`weigh_out`](super::weigh_out), reading the
//! mash in [`mash_checks`](super::mash_checks).

use chemistry::plan::{self, Ending, Way};
use chemistry::quantity::{DoseAmount, Fraction};
use serde_json::json;
use sqlx::SqliteConnection;

use super::inputs::Learned;
use super::learning::Lesson;
use super::store::{Filter, Listing, Order};
use super::{Choice, Deed, Dose, Inputs, Outcome, Plan, State, compute, gather, learning, store};
use crate::db::Db;
use crate::error::{Error, breaks_unique};
use crate::id::{BeerId, DoseId, MashCheckId, PlanId, SourceId, UtcTime};
use crate::people::{Member, Permission};
use crate::record;

/// A plan to be drafted.
#[derive(Clone, Debug, PartialEq)]
pub struct NewPlan {
    /// The brewery's number of the batch.
    pub batch: String,
    /// What is brewed.
    pub beer_id: BeerId,
    /// The day it is brewed.
    pub brewed_on: jiff::civil::Date,
    /// How to choose the treatment.
    pub way: Way,
    /// Which sources may be used and how much of each; empty: every source in use.
    pub sources: Vec<SourceChoice>,
}

/// A source and the share of the liquor it may make up.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SourceChoice {
    /// Which source.
    pub source_id: SourceId,
    /// Least share.
    pub lowest: Fraction,
    /// Greatest share.
    pub highest: Fraction,
}

/// A draft's treatment as somebody moved it.
#[derive(Clone, Debug, PartialEq)]
pub struct Treatment {
    /// Share of each source, in the order of the inputs.
    pub shares: Vec<Fraction>,
    /// Amounts not weighed in yet.
    pub doses: Vec<plan::Dose>,
}

/// A plan and everything worked out about it.
#[derive(Clone, Debug)]
pub struct Shown {
    /// The plan.
    pub plan: Plan,
    /// What its doses do: as planned for a draft, as weighed from then on.
    pub outcome: plan::Outcome,
    /// Each way to treat it; only while it is a draft with nothing weighed in.
    pub ways: Vec<(Way, Ending)>,
    /// The revision that takes its place.
    pub successor: Option<(PlanId, i64)>,
}

/// Drafts a plan: reads today's water, the beer, the shelf and what was learned, and
/// proposes a treatment.
pub async fn draft(db: &Db, by: &Member, new: NewPlan) -> Result<Plan, Error> {
    by.may(Permission::DraftPlans)?;
    let gathered = gather::inputs(db, by, new.beer_id, &new.sources).await?;
    let (shares, doses) = proposed(&gathered.inputs, new.way)?;
    let now = UtcTime::now();
    let plan = Plan {
        id: PlanId::new(),
        batch: new.batch,
        revision: 1,
        replaces: None,
        beer_id: new.beer_id,
        beer_name: gathered.beer_name,
        brewed_on: new.brewed_on,
        state: State::Draft,
        inputs: gathered.inputs,
        inputs_read_at: now,
        choice: Choice::Way(new.way),
        shares,
        doses,
        drafted: Deed {
            at: now,
            by: by.name.clone(),
            reason: String::new(),
        },
        approved: None,
        prediction: None,
        withdrawn: None,
        closed: None,
        outcome: None,
        version: 1,
    };
    let mut tx = db.begin().await?;
    if store::last_revision(&mut tx, &plan.batch).await? > 0 {
        return Err(Error::field(
            "batch",
            format!(
                "Batch “{}” has a plan already. Open that one and revise it, or give another number.",
                plan.batch
            ),
        ));
    }
    store::insert(&mut tx, &plan).await?;
    record::append(
        &mut tx,
        by,
        record::Change::created("plan", plan.id, &title(&plan), &describe(&plan)),
    )
    .await?;
    tx.commit().await?;
    Ok(plan)
}

/// Shares and doses of a way; the first source alone, untreated, where the limits allow
/// none.
fn proposed(inputs: &Inputs, way: Way) -> Result<(Vec<Fraction>, Vec<Dose>), Error> {
    let ending = compute::solve(inputs, way)?;
    Ok(match ending.treatment() {
        Some(treatment) => (
            treatment.shares.clone(),
            compute::listed(inputs, &treatment.doses),
        ),
        None => {
            let only = |index| Fraction::clamped(if index == 0 { 1.0 } else { 0.0 });
            ((0..inputs.sources.len()).map(only).collect(), Vec::new())
        }
    })
}

/// One plan with everything worked out.
pub async fn show(db: &Db, by: &Member, id: PlanId) -> Result<Shown, Error> {
    by.may(Permission::Read)?;
    let mut reader = db.reader().await?;
    let plan = store::find(&mut reader, id)
        .await?
        .ok_or(Error::NotFound("plan"))?;
    let successor = store::successor(&mut reader, id).await?;
    drop(reader);
    let outcome = compute::as_weighed(&plan)?;
    let solvable =
        plan.state == State::Draft && plan.doses.iter().all(|dose| dose.weighed.is_none());
    let ways = if solvable {
        compute::solve_all(&plan.inputs)?.into()
    } else {
        Vec::new()
    };
    Ok(Shown {
        plan,
        outcome,
        ways,
        successor,
    })
}

/// One plan.
pub async fn find(db: &Db, by: &Member, id: PlanId) -> Result<Plan, Error> {
    by.may(Permission::Read)?;
    store::find(&mut *db.reader().await?, id)
        .await?
        .ok_or(Error::NotFound("plan"))
}

/// Plans as lists show them.
pub async fn list(
    db: &Db,
    by: &Member,
    filter: &Filter,
    order: Order,
    skip: i64,
    limit: i64,
) -> Result<Vec<Listing>, Error> {
    by.may(Permission::Read)?;
    store::list(&mut *db.reader().await?, filter, order, skip, limit).await
}

/// Plans made before one, the latest made first.
pub async fn made_before(
    db: &Db,
    by: &Member,
    filter: &Filter,
    before: Option<PlanId>,
    limit: i64,
) -> Result<Vec<Listing>, Error> {
    by.may(Permission::Read)?;
    store::made_before(&mut *db.reader().await?, filter, before, limit).await
}

/// What a draft would do with another treatment. Nothing is saved.
pub async fn try_out(
    db: &Db,
    by: &Member,
    id: PlanId,
    treatment: &Treatment,
) -> Result<(Plan, plan::Outcome), Error> {
    let plan = find(db, by, id).await?;
    let plan = with_treatment(&plan, treatment)?;
    let outcome = compute::as_weighed(&plan)?;
    Ok((plan, outcome))
}

/// The draft with another treatment; what is weighed in stays.
fn with_treatment(plan: &Plan, treatment: &Treatment) -> Result<Plan, Error> {
    let mut plan = plan.clone();
    for (index, dose) in treatment.doses.iter().enumerate() {
        let item = plan.inputs.problem.shelf.get(dose.material);
        let item = item.ok_or_else(|| {
            Error::field(
                format!("doses.{index}.material"),
                "This is not on the shelf of the plan.",
            )
        })?;
        if !item.vessels.contains(&dose.vessel) && dose.amount.get() > 0.0 {
            return Err(Error::field(
                format!("doses.{index}.vessel"),
                format!("{} does not go into the {}.", item.name, dose.vessel.name()),
            ));
        }
    }
    let weighed: Vec<Dose> = plan
        .doses
        .iter()
        .filter(|dose| dose.weighed.is_some())
        .cloned()
        .collect();
    let mut doses = weighed;
    doses.extend(compute::listed(&plan.inputs, &treatment.doses));
    for (dose, position) in doses.iter_mut().zip(1..) {
        dose.position = position;
    }
    plan.doses = doses;
    plan.shares.clone_from(&treatment.shares);
    plan.choice = Choice::ByHand;
    Ok(plan)
}

/// A draft's own change, checked against the version somebody read.
async fn open_draft(
    tx: &mut SqliteConnection,
    id: PlanId,
    version: Option<i64>,
) -> Result<Plan, Error> {
    let plan = store::find(tx, id).await?.ok_or(Error::NotFound("plan"))?;
    if plan.state != State::Draft {
        return Err(Error::Conflict(format!(
            "This plan is {}: its inputs and amounts are frozen. Revise it instead",
            plan.state.name().to_lowercase()
        )));
    }
    same_version(&plan, version)?;
    Ok(plan)
}

fn same_version(plan: &Plan, version: Option<i64>) -> Result<(), Error> {
    if version.is_some_and(|version| version != plan.version) {
        return Err(Error::Conflict(
            "Somebody else changed this plan meanwhile. Reload it and look again".into(),
        ));
    }
    Ok(())
}

/// Saves a treatment moved by hand.
pub async fn move_amounts(
    db: &Db,
    by: &Member,
    id: PlanId,
    version: Option<i64>,
    treatment: &Treatment,
) -> Result<Plan, Error> {
    by.may(Permission::DraftPlans)?;
    let mut tx = db.begin().await?;
    let before = open_draft(&mut tx, id, version).await?;
    let after = Plan {
        version: before.version + 1,
        ..with_treatment(&before, treatment)?
    };
    compute::as_weighed(&after)?;
    save_draft(&mut tx, by, &before, &after, "changed").await?;
    tx.commit().await?;
    Ok(after)
}

/// Takes the treatment of one of the four ways.
pub async fn take_way(
    db: &Db,
    by: &Member,
    id: PlanId,
    version: Option<i64>,
    way: Way,
) -> Result<Plan, Error> {
    by.may(Permission::DraftPlans)?;
    let mut tx = db.begin().await?;
    let before = open_draft(&mut tx, id, version).await?;
    if before.doses.iter().any(|dose| dose.weighed.is_some()) {
        return Err(Error::Conflict(
            "Something is weighed in already: move what is left by hand".into(),
        ));
    }
    let (shares, doses) = proposed(&before.inputs, way)?;
    let after = Plan {
        shares,
        doses,
        choice: Choice::Way(way),
        version: before.version + 1,
        ..before.clone()
    };
    save_draft(&mut tx, by, &before, &after, "changed").await?;
    tx.commit().await?;
    Ok(after)
}

/// Reads water, beer, shelf and what was learned anew. A way is solved anew; amounts
/// moved by hand stay, as far as their material is still on the shelf.
pub async fn refresh(
    db: &Db,
    by: &Member,
    id: PlanId,
    version: Option<i64>,
) -> Result<Plan, Error> {
    by.may(Permission::DraftPlans)?;
    let present = find(db, by, id).await?;
    let choices: Vec<SourceChoice> = present
        .inputs
        .problem
        .sources
        .iter()
        .zip(&present.inputs.sources)
        .filter_map(|(source, label)| {
            Some(SourceChoice {
                source_id: label.id?,
                lowest: source.lowest,
                highest: source.highest,
            })
        })
        .collect();
    let gathered = gather::inputs(db, by, present.beer_id, &choices).await?;
    let mut tx = db.begin().await?;
    let before = open_draft(&mut tx, id, version.or(Some(present.version))).await?;
    let mut after = Plan {
        beer_name: gathered.beer_name,
        inputs_read_at: UtcTime::now(),
        version: before.version + 1,
        inputs: gathered.inputs,
        ..before.clone()
    };
    match before.choice {
        Choice::Way(way) if before.doses.iter().all(|dose| dose.weighed.is_none()) => {
            (after.shares, after.doses) = proposed(&after.inputs, way)?;
        }
        _ => {
            let place = |dose: &Dose| {
                let id = before.inputs.shelf.get(dose.material)?.id?;
                after
                    .inputs
                    .shelf
                    .iter()
                    .position(|label| label.id == Some(id))
            };
            let moved: Vec<Dose> = before
                .doses
                .iter()
                .filter_map(|dose| {
                    Some(Dose {
                        material: place(dose)?,
                        ..dose.clone()
                    })
                })
                .collect();
            if moved.len()
                < before
                    .doses
                    .iter()
                    .filter(|dose| dose.weighed.is_some())
                    .count()
            {
                return Err(Error::Conflict(
                    "Something that is weighed in is no longer on the shelf. Put it back there first".into(),
                ));
            }
            after.doses = moved;
        }
    }
    save_draft(&mut tx, by, &before, &after, "read anew").await?;
    tx.commit().await?;
    Ok(after)
}

/// Changes the number of the batch or the day of a draft.
pub async fn reschedule(
    db: &Db,
    by: &Member,
    id: PlanId,
    version: Option<i64>,
    batch: String,
    brewed_on: jiff::civil::Date,
) -> Result<Plan, Error> {
    by.may(Permission::DraftPlans)?;
    let mut tx = db.begin().await?;
    let before = open_draft(&mut tx, id, version).await?;
    if before.revision > 1 && batch != before.batch {
        return Err(Error::field(
            "batch",
            "A revision keeps the number of its batch.",
        ));
    }
    let after = Plan {
        batch,
        brewed_on,
        version: before.version + 1,
        ..before.clone()
    };
    save_draft(&mut tx, by, &before, &after, "changed")
        .await
        .map_err(|error| match error {
            Error::Internal { source, .. } if source.to_string().contains("UNIQUE") => {
                Error::field(
                    "batch",
                    format!("Batch “{}” has a plan already.", after.batch),
                )
            }
            other => other,
        })?;
    tx.commit().await?;
    Ok(after)
}

async fn save_draft(
    tx: &mut SqliteConnection,
    by: &Member,
    before: &Plan,
    after: &Plan,
    action: &str,
) -> Result<(), Error> {
    store::update_draft(tx, after).await?;
    let change = record::Change::of(
        action,
        "plan",
        after.id,
        &title(after),
        Some(describe(before)),
        Some(describe(after)),
    );
    record::append(tx, by, change).await
}

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
            super::words::limit(&before.inputs, broken.limit)
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
    record::append(&mut tx, by, change.because(reason)).await?;
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
        record::Change::event("withdrawn", "plan", id, &title(&after)).because(Some(reason)),
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
        record::Change::event("approval taken back", "plan", id, &title(&after)),
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
        record::Change::event("withdrawn", "plan", id, &title(&after)).because(Some(reason)),
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
        record::Change::created("plan", plan.id, &title(&plan), &describe(&plan)),
    )
    .await?;
    tx.commit().await?;
    Ok(plan)
}

/// How a batch is closed.
#[derive(Clone, Debug, PartialEq)]
pub struct Closing {
    /// The mash check that counts; the first good one when not given.
    pub mash_check_id: Option<MashCheckId>,
    /// Whether it counts for learning.
    pub counts: bool,
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
    let mut tx = db.begin().await?;
    let before = store::find(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("plan"))?;
    same_version(&before, version)?;
    if !matches!(before.state, State::Approved | State::Dosed) {
        return Err(Error::Conflict(format!(
            "This plan is {}: only an approved batch can be closed",
            before.state.name().to_lowercase()
        )));
    }
    if let Some((_, revision)) = store::successor(&mut tx, id).await? {
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
    store::update_state(&mut tx, &after).await?;
    let after_json = serde_json::to_value(&after.outcome).unwrap_or_default();
    let change = record::Change::of("closed", "plan", id, &title(&after), None, Some(after_json));
    record::append(&mut tx, by, change.because(closing.note)).await?;
    tx.commit().await?;
    Ok(after)
}

async fn outcome(
    tx: &mut SqliteConnection,
    plan: &Plan,
    closing: &Closing,
) -> Result<Outcome, Error> {
    let checks = store::checks(tx, plan.id).await?;
    let usable =
        |check: &&super::MashCheck| check.stage == super::Stage::Mash && check.withdrawn.is_none();
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
    untrained.offset =
        chemistry::quantity::Estimate::new(chemistry::quantity::PhShift::constant(0.0), 0.0);
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

/// How the record book names a plan.
pub(super) fn title(plan: &Plan) -> String {
    format!(
        "{} {}, revision {}",
        plan.batch, plan.beer_name, plan.revision
    )
}

/// A plan as the record book writes it.
pub(super) fn describe(plan: &Plan) -> serde_json::Value {
    let doses: Vec<serde_json::Value> = plan
        .doses
        .iter()
        .map(|dose| {
            let item = plan.inputs.problem.shelf.get(dose.material);
            json!({
                "material": item.map(|item| item.name.clone()),
                "vessel": dose.vessel.key(),
                "planned": dose.planned.get(),
                "unit": item.map(|item| item.material.unit().symbol()),
            })
        })
        .collect();
    let shares: serde_json::Map<String, serde_json::Value> = plan
        .inputs
        .sources
        .iter()
        .zip(&plan.shares)
        .map(|(source, share)| (source.name.clone(), json!(share.get())))
        .collect();
    json!({
        "batch": plan.batch,
        "beer": plan.beer_name,
        "brewed_on": plan.brewed_on.to_string(),
        "state": plan.state.key(),
        "way": plan.choice.key(),
        "shares": shares,
        "doses": doses,
        "inputs_read_at": plan.inputs_read_at,
    })
}

/// An amount that was weighed, as the record book writes it.
pub(super) fn weighed_json(amount: DoseAmount, lot: &str) -> serde_json::Value {
    json!({"actual": amount.get(), "lot": lot})
}
