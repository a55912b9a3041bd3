//! SQL for plans, doses and mash checks.

use chemistry::material::Vessel;
use chemistry::quantity::{DoseAmount, Fraction, Ph, PhShift};
use serde::{Deserialize, Serialize};
use sqlx::{QueryBuilder, Row, Sqlite, SqliteConnection, sqlite::SqliteRow};

use super::bodies::{InputsBody, ShelfItemBody};
use super::{Choice, Deed, Dose, Inputs, Lot, Outcome, Plan, Prediction, State, Weighed, Witness};
use crate::error::Error;
use crate::id::{BeerId, DoseId, PlanId, UtcTime};

/// A plan as lists show it.
#[derive(Clone, Debug, PartialEq)]
pub struct Listing {
    /// Its identifier.
    pub id: PlanId,
    /// The batch.
    pub batch: String,
    /// Which revision.
    pub revision: i64,
    /// The beer.
    pub beer_id: BeerId,
    /// Its name.
    pub beer_name: String,
    /// The day it is brewed.
    pub brewed_on: jiff::civil::Date,
    /// Where it stands.
    pub state: State,
    /// The prediction of its approval.
    pub prediction: Option<Prediction>,
    /// Predicted against measured.
    pub outcome: Option<Outcome>,
    /// Doses planned.
    pub doses: i64,
    /// Doses that are in.
    pub weighed: i64,
}

#[derive(Serialize, Deserialize)]
struct PredictionRow {
    ph: f64,
    sd: f64,
    low: f64,
    high: f64,
}

fn prediction_json(prediction: Prediction) -> String {
    let row = PredictionRow {
        ph: prediction.ph.get(),
        sd: prediction.sd.get(),
        low: prediction.low.get(),
        high: prediction.high.get(),
    };
    serde_json::to_string(&row).unwrap_or_default()
}

pub(super) fn unreadable(error: impl Into<Box<dyn std::error::Error + Send + Sync>>) -> Error {
    Error::internal("A stored plan cannot be read", error)
}

pub(super) fn prediction(text: Option<&str>) -> Result<Option<Prediction>, Error> {
    let row: Option<PredictionRow> = text
        .map(serde_json::from_str)
        .transpose()
        .map_err(unreadable)?;
    Ok(row.map(|row| Prediction {
        ph: Ph::clamped(row.ph),
        sd: PhShift::clamped(row.sd),
        low: Ph::clamped(row.low),
        high: Ph::clamped(row.high),
    }))
}

fn deed(row: &SqliteRow, at: &str, by: &str, reason: Option<&str>) -> Result<Option<Deed>, Error> {
    let Some(at) = row.try_get::<Option<UtcTime>, _>(at)? else {
        return Ok(None);
    };
    let reason = match reason {
        Some(column) => row
            .try_get::<Option<String>, _>(column)?
            .unwrap_or_default(),
        None => String::new(),
    };
    Ok(Some(Deed {
        at,
        by: row.try_get::<Option<String>, _>(by)?.unwrap_or_default(),
        reason,
    }))
}

fn plan(row: &SqliteRow, doses: Vec<Dose>) -> Result<Plan, Error> {
    let body: InputsBody = serde_json::from_str(row.try_get("inputs")?).map_err(unreadable)?;
    let shares: Vec<f64> = serde_json::from_str(row.try_get("shares")?).map_err(unreadable)?;
    let outcome: Option<&str> = row.try_get("outcome")?;
    Ok(Plan {
        id: row.try_get("id")?,
        batch: row.try_get("batch")?,
        revision: row.try_get("revision")?,
        replaces: row.try_get("replaces")?,
        beer_id: row.try_get("beer_id")?,
        beer_name: row.try_get("beer_name")?,
        brewed_on: row
            .try_get::<&str, _>("brewed_on")?
            .parse()
            .map_err(unreadable)?,
        state: state(row.try_get("state")?)?,
        inputs: Inputs::try_from(body)?,
        inputs_read_at: row.try_get("inputs_read_at")?,
        choice: Choice::from_key(row.try_get("way")?).ok_or_else(|| unreadable("unknown way"))?,
        shares: shares.into_iter().map(Fraction::clamped).collect(),
        doses,
        drafted: Deed {
            at: row.try_get("created_at")?,
            by: row.try_get("created_by")?,
            reason: String::new(),
        },
        approved: deed(row, "approved_at", "approved_by", Some("approval_reason"))?,
        prediction: prediction(row.try_get("prediction")?)?,
        withdrawn: deed(
            row,
            "withdrawn_at",
            "withdrawn_by",
            Some("withdrawal_reason"),
        )?,
        closed: deed(row, "closed_at", "closed_by", Some("closing_note"))?,
        outcome: outcome
            .map(serde_json::from_str)
            .transpose()
            .map_err(unreadable)?,
        version: row.try_get("version")?,
    })
}

fn state(key: &str) -> Result<State, Error> {
    State::from_key(key).ok_or_else(|| unreadable(format!("unknown state {key}")))
}

fn dose(row: &SqliteRow) -> Result<Dose, Error> {
    let weighed = match row.try_get::<Option<UtcTime>, _>("weighed_at")? {
        None => None,
        Some(at) => Some(weighed(row, at)?),
    };
    Ok(Dose {
        id: row.try_get("id")?,
        position: row.try_get("position")?,
        vessel: Vessel::from_key(row.try_get("vessel")?)
            .ok_or_else(|| unreadable("unknown vessel"))?,
        material: usize::try_from(row.try_get::<i64, _>("material")?).map_err(unreadable)?,
        planned: DoseAmount::clamped(row.try_get("planned")?),
        mash_check: row.try_get("mash_check_id")?,
        weighed,
    })
}

fn weighed(row: &SqliteRow, at: UtcTime) -> Result<Weighed, Error> {
    let text = |column: &str| {
        let text: Option<String> = row.try_get(column)?;
        Ok::<_, Error>(text.unwrap_or_default())
    };
    let material = match row.try_get::<Option<&str>, _>("shelf_item")? {
        None => None,
        Some(json) => {
            let body: ShelfItemBody = serde_json::from_str(json).map_err(unreadable)?;
            Some(body.material()?)
        }
    };
    let witness_name: Option<String> = row.try_get("witness_name")?;
    let witness_id = row.try_get("witness_id")?;
    Ok(Weighed {
        actual: DoseAmount::clamped(row.try_get("actual")?),
        lot: Lot {
            code: text("lot")?,
            id: row.try_get("material_lot_id")?,
            material,
        },
        at,
        by: text("weighed_by")?,
        reason: text("reason")?,
        witness: Option::zip(witness_id, witness_name).map(|(id, name)| Witness { id, name }),
        corrections: serde_json::from_str(row.try_get("corrections")?).map_err(unreadable)?,
    })
}

/// What is stored of a dose that is in, beside its amount.
struct Kept<'a> {
    weighed: Option<&'a Weighed>,
    shelf_item: Option<String>,
    corrections: String,
}

impl<'a> Kept<'a> {
    fn of(dose: &'a Dose) -> Self {
        let weighed = dose.weighed.as_ref();
        let corrections = weighed.map_or(&[][..], |weighed| &weighed.corrections);
        Self {
            weighed,
            shelf_item: weighed
                .and_then(|weighed| ShelfItemBody::of_lot(&weighed.lot))
                .and_then(|body| serde_json::to_string(&body).ok()),
            corrections: serde_json::to_string(corrections).unwrap_or_default(),
        }
    }

    fn bound<'q>(self, query: Query<'q>) -> Query<'q>
    where
        'a: 'q,
    {
        let weighed = self.weighed;
        let witness = weighed.and_then(|weighed| weighed.witness.as_ref());
        let reason = weighed.map(|weighed| &weighed.reason);
        query
            .bind(weighed.map(|weighed| weighed.actual.get()))
            .bind(weighed.map(|weighed| &weighed.lot.code))
            .bind(weighed.and_then(|weighed| weighed.lot.id))
            .bind(self.shelf_item)
            .bind(reason.filter(|reason| !reason.is_empty()))
            .bind(witness.map(|witness| witness.id))
            .bind(witness.map(|witness| &witness.name))
            .bind(self.corrections)
            .bind(weighed.map(|weighed| weighed.at))
            .bind(weighed.map(|weighed| &weighed.by))
    }
}

type Query<'q> = sqlx::query::Query<'q, sqlx::Sqlite, sqlx::sqlite::SqliteArguments>;

pub(super) async fn insert(db: &mut SqliteConnection, plan: &Plan) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO plans (id, batch, revision, replaces, beer_id, beer_name, brewed_on, state, inputs,
                            inputs_read_at, way, shares, created_at, created_by, version)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
    )
    .bind(plan.id)
    .bind(&plan.batch)
    .bind(plan.revision)
    .bind(plan.replaces)
    .bind(plan.beer_id)
    .bind(&plan.beer_name)
    .bind(plan.brewed_on.to_string())
    .bind(plan.state.key())
    .bind(inputs_json(&plan.inputs))
    .bind(plan.inputs_read_at)
    .bind(plan.choice.key())
    .bind(shares_json(&plan.shares))
    .bind(plan.drafted.at)
    .bind(&plan.drafted.by)
    .bind(plan.version)
    .execute(&mut *db)
    .await?;
    insert_doses(db, plan.id, &plan.doses).await
}

fn inputs_json(inputs: &Inputs) -> String {
    serde_json::to_string(&InputsBody::from(inputs)).unwrap_or_default()
}

fn shares_json(shares: &[Fraction]) -> String {
    serde_json::to_string(&shares.iter().map(|share| share.get()).collect::<Vec<_>>())
        .unwrap_or_default()
}

pub(super) async fn insert_doses(
    db: &mut SqliteConnection,
    plan: PlanId,
    doses: &[Dose],
) -> Result<(), sqlx::Error> {
    for dose in doses {
        let query = sqlx::query(
            "INSERT INTO doses (id, plan_id, position, vessel, material, planned, mash_check_id, actual, lot,
                                material_lot_id, shelf_item, reason, witness_id, witness_name, corrections,
                                weighed_at, weighed_by)
             VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
        )
        .bind(dose.id)
        .bind(plan)
        .bind(dose.position)
        .bind(dose.vessel.key())
        .bind(i64::try_from(dose.material).unwrap_or(i64::MAX))
        .bind(dose.planned.get())
        .bind(dose.mash_check);
        Kept::of(dose).bound(query).execute(&mut *db).await?;
    }
    Ok(())
}

/// Writes a draft anew: batch, day, inputs, treatment and doses.
pub(super) async fn update_draft(
    db: &mut SqliteConnection,
    plan: &Plan,
) -> Result<(), sqlx::Error> {
    sqlx::query(
        "UPDATE plans SET batch = ?, brewed_on = ?, beer_name = ?, inputs = ?, inputs_read_at = ?, way = ?,
                          shares = ?, version = ?
         WHERE id = ? AND state = 'draft'",
    )
    .bind(&plan.batch)
    .bind(plan.brewed_on.to_string())
    .bind(&plan.beer_name)
    .bind(inputs_json(&plan.inputs))
    .bind(plan.inputs_read_at)
    .bind(plan.choice.key())
    .bind(shares_json(&plan.shares))
    .bind(plan.version)
    .bind(plan.id)
    .execute(&mut *db)
    .await?;
    sqlx::query("DELETE FROM doses WHERE plan_id = ?")
        .bind(plan.id)
        .execute(&mut *db)
        .await?;
    insert_doses(db, plan.id, &plan.doses).await
}

/// Writes where a plan stands: state, approval, withdrawal, closing.
pub(super) async fn update_state(
    db: &mut SqliteConnection,
    plan: &Plan,
) -> Result<(), sqlx::Error> {
    let (approved, withdrawn, closed) = (
        plan.approved.as_ref(),
        plan.withdrawn.as_ref(),
        plan.closed.as_ref(),
    );
    sqlx::query(
        "UPDATE plans SET state = ?, approved_at = ?, approved_by = ?, approval_reason = ?, prediction = ?,
                          withdrawn_at = ?, withdrawn_by = ?, withdrawal_reason = ?, closed_at = ?, closed_by = ?,
                          closing_note = ?, outcome = ?, version = ?
         WHERE id = ?",
    )
    .bind(plan.state.key())
    .bind(approved.map(|deed| deed.at))
    .bind(approved.map(|deed| &deed.by))
    .bind(approved.map(|deed| &deed.reason))
    .bind(plan.prediction.map(prediction_json))
    .bind(withdrawn.map(|deed| deed.at))
    .bind(withdrawn.map(|deed| &deed.by))
    .bind(withdrawn.map(|deed| &deed.reason))
    .bind(closed.map(|deed| deed.at))
    .bind(closed.map(|deed| &deed.by))
    .bind(closed.map(|deed| &deed.reason))
    .bind(plan.outcome.as_ref().and_then(|outcome| serde_json::to_string(outcome).ok()))
    .bind(plan.version)
    .bind(plan.id)
    .execute(db)
    .await?;
    Ok(())
}

pub(super) async fn find(db: &mut SqliteConnection, id: PlanId) -> Result<Option<Plan>, Error> {
    let row = sqlx::query(
        "SELECT id, batch, revision, replaces, beer_id, beer_name, brewed_on, state, inputs, inputs_read_at, way,
                shares, created_at, created_by, approved_at, approved_by, approval_reason, prediction, withdrawn_at,
                withdrawn_by, withdrawal_reason, closed_at, closed_by, closing_note, outcome, version
         FROM plans WHERE id = ?",
    )
    .bind(id)
    .fetch_optional(&mut *db)
    .await?;
    let Some(row) = row else { return Ok(None) };
    let doses = sqlx::query(
        "SELECT id, position, vessel, material, planned, mash_check_id, actual, lot, material_lot_id, shelf_item,
                reason, witness_id, witness_name, corrections, weighed_at, weighed_by
         FROM doses WHERE plan_id = ? ORDER BY position",
    )
    .bind(id)
    .fetch_all(&mut *db)
    .await?;
    plan(&row, doses.iter().map(dose).collect::<Result<_, _>>()?).map(Some)
}

/// The revision that takes a plan's place, if one was begun and not withdrawn.
pub(super) async fn successor(
    db: &mut SqliteConnection,
    id: PlanId,
) -> Result<Option<(PlanId, i64)>, Error> {
    let row =
        sqlx::query("SELECT id, revision FROM plans WHERE replaces = ? AND state <> 'withdrawn'")
            .bind(id)
            .fetch_optional(db)
            .await?;
    row.map(|row| Ok((row.try_get("id")?, row.try_get("revision")?)))
        .transpose()
}

/// The highest revision of a batch's plan; zero if there is none.
pub(super) async fn last_revision(db: &mut SqliteConnection, batch: &str) -> Result<i64, Error> {
    Ok(
        sqlx::query_scalar("SELECT coalesce(max(revision), 0) FROM plans WHERE batch = ?")
            .bind(batch)
            .fetch_one(db)
            .await?,
    )
}

/// What to list.
#[derive(Clone, Debug, Default)]
pub struct Filter {
    /// Only plans in this state.
    pub state: Option<State>,
    /// Only plans that are neither closed nor withdrawn.
    pub open: bool,
    /// Only plans of this beer.
    pub beer: Option<BeerId>,
    /// Only plans of batches whose number holds this.
    pub batch: Option<String>,
}

/// How a list is sorted.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Order {
    /// Latest brewing day first.
    #[default]
    Latest,
    /// Earliest brewing day first.
    Earliest,
    /// By batch number.
    Batch,
    /// By beer.
    Beer,
}

impl Order {
    /// Every order.
    pub const ALL: [Self; 4] = [Self::Latest, Self::Earliest, Self::Batch, Self::Beer];

    /// As addresses name it.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Latest => "latest",
            Self::Earliest => "earliest",
            Self::Batch => "batch",
            Self::Beer => "beer",
        }
    }
}

pub(super) async fn list(
    db: &mut SqliteConnection,
    filter: &Filter,
    order: Order,
    skip: i64,
    limit: i64,
) -> Result<Vec<Listing>, Error> {
    let order = match order {
        Order::Latest => "brewed_on DESC, id DESC",
        Order::Earliest => "brewed_on, id DESC",
        Order::Batch => "batch, id DESC",
        Order::Beer => "beer_name, id DESC",
    };
    listed(db, filter, None, order, skip, limit).await
}

/// Plans made before `before`, the latest made first.
pub(super) async fn made_before(
    db: &mut SqliteConnection,
    filter: &Filter,
    before: Option<PlanId>,
    limit: i64,
) -> Result<Vec<Listing>, Error> {
    listed(db, filter, before, "id DESC", 0, limit).await
}

/// Chooses plans in an index first: a row is read only when it is shown.
async fn listed(
    db: &mut SqliteConnection,
    filter: &Filter,
    before: Option<PlanId>,
    order: &'static str,
    skip: i64,
    limit: i64,
) -> Result<Vec<Listing>, Error> {
    let mut query = QueryBuilder::<Sqlite>::new(
        "SELECT id, batch, revision, beer_id, beer_name, brewed_on, state, prediction, outcome,
                (SELECT count(*) FROM doses WHERE plan_id = plans.id) AS doses,
                (SELECT count(*) FROM doses WHERE plan_id = plans.id AND weighed_at IS NOT NULL) AS weighed
         FROM plans WHERE id IN (SELECT id FROM plans WHERE true",
    );
    if let Some(state) = filter.state {
        query.push(" AND state = ").push_bind(state.key());
    }
    if filter.open {
        query.push(" AND state IN ('draft', 'approved', 'dosed')");
    }
    if let Some(beer) = filter.beer {
        query.push(" AND beer_id = ").push_bind(beer);
    }
    if let Some(batch) = &filter.batch {
        query.push(" AND instr(lower(batch), lower(");
        query.push_bind(batch).push(")) > 0");
    }
    if let Some(before) = before {
        query.push(" AND id < ").push_bind(before);
    }
    query.push(" ORDER BY ").push(order);
    query.push(" LIMIT ").push_bind(limit);
    query.push(" OFFSET ").push_bind(skip);
    query.push(") ORDER BY ").push(order);
    let rows = query.build().fetch_all(db).await?;
    rows.iter().map(listing).collect()
}

fn listing(row: &SqliteRow) -> Result<Listing, Error> {
    let outcome: Option<&str> = row.try_get("outcome")?;
    Ok(Listing {
        id: row.try_get("id")?,
        batch: row.try_get("batch")?,
        revision: row.try_get("revision")?,
        beer_id: row.try_get("beer_id")?,
        beer_name: row.try_get("beer_name")?,
        brewed_on: row
            .try_get::<&str, _>("brewed_on")?
            .parse()
            .map_err(unreadable)?,
        state: state(row.try_get("state")?)?,
        prediction: prediction(row.try_get("prediction")?)?,
        outcome: outcome
            .map(serde_json::from_str)
            .transpose()
            .map_err(unreadable)?,
        doses: row.try_get("doses")?,
        weighed: row.try_get("weighed")?,
    })
}

/// Writes what went in, or that nothing did.
pub(super) async fn update_weighed(
    db: &mut SqliteConnection,
    dose: &Dose,
) -> Result<(), sqlx::Error> {
    let query = sqlx::query(
        "UPDATE doses SET actual = ?, lot = ?, material_lot_id = ?, shelf_item = ?, reason = ?, witness_id = ?,
                          witness_name = ?, corrections = ?, weighed_at = ?, weighed_by = ? WHERE id = ?",
    );
    let query = Kept::of(dose).bound(query).bind(dose.id);
    query.execute(db).await?;
    Ok(())
}

/// Adds one dose, a first step, behind the others.
pub(super) async fn add_dose(
    db: &mut SqliteConnection,
    plan: PlanId,
    dose: &Dose,
) -> Result<(), sqlx::Error> {
    insert_doses(db, plan, std::slice::from_ref(dose)).await
}

/// Removes one line that is not in.
pub(super) async fn drop_dose(db: &mut SqliteConnection, id: DoseId) -> Result<(), sqlx::Error> {
    sqlx::query("DELETE FROM doses WHERE id = ? AND weighed_at IS NULL")
        .bind(id)
        .execute(db)
        .await?;
    Ok(())
}

/// Removes first steps that were advised and not given.
pub(super) async fn drop_open_steps(
    db: &mut SqliteConnection,
    plan: PlanId,
) -> Result<(), sqlx::Error> {
    sqlx::query(
        "DELETE FROM doses WHERE plan_id = ? AND mash_check_id IS NOT NULL AND weighed_at IS NULL",
    )
    .bind(plan)
    .execute(db)
    .await?;
    Ok(())
}

/// The outcomes of closed plans, the earliest brewed first. One that a correction takes out of
/// learning does not count.
pub(super) async fn outcomes(db: &mut SqliteConnection) -> Result<Vec<Outcome>, Error> {
    let rows: Vec<String> = sqlx::query_scalar(
        "SELECT CASE WHEN EXISTS (SELECT 1 FROM plan_corrections WHERE plan_id = closed.id AND NOT teaches)
                     THEN json_set(outcome, '$.counts', json('false')) ELSE outcome END
         FROM (SELECT id, outcome, brewed_on, closed_at FROM plans WHERE state = 'closed'
                              ORDER BY brewed_on DESC, closed_at DESC LIMIT 200) AS closed
         ORDER BY brewed_on, closed_at",
    )
    .fetch_all(db)
    .await?;
    rows.iter()
        .map(|row| serde_json::from_str(row).map_err(unreadable))
        .collect()
}
