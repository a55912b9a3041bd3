//! Drafting a plan, finding it, and changing it while it is a draft. What follows has
//! files of its own: [`decisions`](super::decisions), [`weigh_out`](super::weigh_out),
//! [`mash_checks`](super::mash_checks), [`closing`](super::closing).

use chemistry::plan::{self, Ending, Way};
use chemistry::quantity::Fraction;
use serde_json::json;
use sqlx::SqliteConnection;

use super::store::{Filter, Listing, Order};
use super::{Choice, Deed, Dose, Inputs, Plan, State, Weighed, compute, gather, store};
use crate::db::Db;
use crate::error::Error;
use crate::id::{BeerId, PlanId, SourceId, UtcTime};
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
    let gathered = gather::inputs(db, by, new.beer_id, new.brewed_on, &new.sources).await?;
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
        record::Change::created("plan", plan.id, &title(&plan), &describe(&plan))
            .about_each(about(&plan)),
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
pub(super) async fn open_draft(
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

/// Refuses a change of a version somebody has changed since.
pub(super) fn same_version(plan: &Plan, version: Option<i64>) -> Result<(), Error> {
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
    let gathered = gather::inputs(db, by, present.beer_id, present.brewed_on, &choices).await?;
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
    // Under its former number it is found as well.
    let change = change.about_each(about(before)).about_each(about(after));
    record::append(tx, by, change).await
}

/// How the record book names a plan.
pub(super) fn title(plan: &Plan) -> String {
    format!(
        "{} {}, revision {}",
        plan.batch, plan.beer_name, plan.revision
    )
}

/// What an entry about a plan is about: its batch and beer, and what the plan rests on.
pub(super) fn about(plan: &Plan) -> Vec<(&'static str, String)> {
    let used = plan.inputs.sources.iter().zip(&plan.shares);
    let used = used.filter(|(_, share)| share.get() > 0.0);
    let mut about = batch(plan);
    for (source, _) in used {
        about.extend(source.id.map(|id| ("source", id.to_string())));
        about.extend(source.tests.iter().map(|id| ("water test", id.to_string())));
    }
    let lots = plan.inputs.malts.iter().filter_map(|malt| malt.lot_id);
    about.extend(lots.map(|id| ("malt lot", id.to_string())));
    about
}

/// What an entry about something of a plan is about.
pub(super) fn batch(plan: &Plan) -> Vec<(&'static str, String)> {
    vec![
        ("plan", plan.id.to_string()),
        ("batch", plan.batch.clone()),
        ("beer", plan.beer_id.to_string()),
    ]
}

/// What an entry about a dose is about: the batch, the material, the lot and who stood by.
pub(super) fn about_dose(plan: &Plan, dose: &Dose) -> Vec<(&'static str, String)> {
    let mut about = batch(plan);
    let material = plan.inputs.shelf.get(dose.material).and_then(|it| it.id);
    about.extend(material.map(|id| ("material", id.to_string())));
    if let Some(weighed) = &dose.weighed {
        about.extend(weighed.lot.id.map(|id| ("material lot", id.to_string())));
        about.extend(
            weighed
                .witness
                .iter()
                .map(|it| ("account", it.id.to_string())),
        );
    }
    about
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

/// What went in, as the record book writes it.
pub(super) fn weighed_json(weighed: &Weighed) -> serde_json::Value {
    let lot = &weighed.lot;
    let mut told = json!({"actual": weighed.actual.get(), "lot": lot.code});
    if let Some(id) = lot.id {
        told["material_lot_id"] = json!(id);
    }
    if let Some(witness) = &weighed.witness {
        told["second_person"] = json!(witness.name);
    }
    told
}
