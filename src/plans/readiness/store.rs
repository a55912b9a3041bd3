//! SQL for open plans, as far as the brew day needs them: their lines and newest readings,
//! and of their inputs only the names.

use chemistry::material::Vessel;
use chemistry::quantity::DoseAmount;
use jiff::civil::Date;
use serde::Deserialize;
use sqlx::sqlite::SqliteRow;
use sqlx::{Row, SqliteConnection};

use super::Reading;
use crate::error::Error;
use crate::id::{BeerId, DoseId, MashCheckId, MaterialId, PlanId, SourceId, UtcTime};
use crate::plans::store::{prediction, unreadable};
use crate::plans::{Advised, Prediction, State};

/// An open plan.
pub(super) struct OpenPlan {
    pub(super) id: PlanId,
    pub(super) batch: String,
    pub(super) revision: i64,
    pub(super) beer_id: BeerId,
    pub(super) beer_name: String,
    pub(super) brewed_on: Date,
    pub(super) state: State,
    pub(super) prediction: Option<Prediction>,
    pub(super) successor: Option<(PlanId, i64)>,
    pub(super) lines: Vec<Line>,
    pub(super) reading: Option<Reading>,
    /// Those with a share in the liquor.
    pub(super) sources: Vec<UsedSource>,
    shelf: Vec<Option<MaterialId>>,
}

/// A line of the weigh-out.
pub(super) struct Line {
    id: DoseId,
    pub(super) vessel: Vessel,
    pub(super) material: Option<MaterialId>,
    pub(super) planned: DoseAmount,
    /// The mash check whose first step it is.
    pub(super) step_of: Option<MashCheckId>,
    pub(super) weighed_at: Option<UtcTime>,
}

/// A source a plan draws on.
pub(super) struct UsedSource {
    pub(super) id: SourceId,
    /// The newest sample the plan knew of.
    pub(super) tested_on: Option<Date>,
    pub(super) assumed: Vec<String>,
}

/// The names in a plan's inputs; the figures are passed over.
#[derive(Deserialize)]
struct Names {
    sources: Vec<SourceName>,
    shelf: Vec<MaterialName>,
}

#[derive(Default, Deserialize)]
#[serde(default)]
struct SourceName {
    source_id: String,
    tested_on: String,
    assumed: Vec<String>,
}

#[derive(Default, Deserialize)]
#[serde(default)]
struct MaterialName {
    material_id: String,
}

/// Every open plan with its day, the earliest first.
pub(super) async fn open(db: &mut SqliteConnection) -> Result<Vec<(PlanId, Date)>, Error> {
    let rows = sqlx::query(
        "SELECT id, brewed_on FROM plans WHERE state IN ('draft', 'approved', 'dosed')
         ORDER BY brewed_on, batch, revision",
    )
    .fetch_all(db)
    .await?;
    rows.iter()
        .map(|row| Ok((row.try_get("id")?, date(row.try_get("brewed_on")?)?)))
        .collect()
}

/// These plans, as far as they are open, in the order of the list.
pub(super) async fn plans(
    db: &mut SqliteConnection,
    ids: &[PlanId],
) -> Result<Vec<OpenPlan>, Error> {
    let wanted = serde_json::to_string(ids).unwrap_or_default();
    let rows = sqlx::query(
        "SELECT plans.id, plans.batch, plans.revision, plans.beer_id, plans.beer_name, plans.brewed_on,
                plans.state, plans.prediction, plans.inputs, plans.shares,
                next.id AS next_id, next.revision AS next_revision
         FROM json_each(?) AS wanted
         CROSS JOIN plans ON plans.id = wanted.value
         LEFT JOIN plans AS next ON next.replaces = plans.id AND next.state <> 'withdrawn'
         WHERE plans.state IN ('draft', 'approved', 'dosed') ORDER BY wanted.key",
    )
    .bind(&wanted)
    .fetch_all(&mut *db)
    .await?;
    let mut plans = rows.iter().map(open_plan).collect::<Result<Vec<_>, _>>()?;
    let doses = sqlx::query(
        "SELECT doses.plan_id, doses.id, doses.vessel, doses.material, doses.planned, doses.mash_check_id, doses.weighed_at
         FROM json_each(?) AS wanted CROSS JOIN doses ON doses.plan_id = wanted.value
         ORDER BY doses.plan_id, doses.position",
    )
    .bind(&wanted)
    .fetch_all(&mut *db)
    .await?;
    let checks = sqlx::query(
        "SELECT mash_checks.id, mash_checks.plan_id, mash_checks.read_at, mash_checks.assessment
         FROM json_each(?) AS wanted CROSS JOIN mash_checks ON mash_checks.plan_id = wanted.value
         WHERE mash_checks.stage = 'mash' AND mash_checks.withdrawn_at IS NULL
         ORDER BY mash_checks.read_at, mash_checks.id",
    )
    .bind(&wanted)
    .fetch_all(&mut *db)
    .await?;
    for plan in &mut plans {
        for row in &doses {
            if row.try_get::<PlanId, _>("plan_id")? == plan.id {
                plan.lines.push(line(row, &plan.shelf)?);
            }
        }
        for row in &checks {
            if row.try_get::<PlanId, _>("plan_id")? == plan.id {
                plan.reading = Some(reading(row, &plan.lines)?);
            }
        }
    }
    Ok(plans)
}

fn date(text: &str) -> Result<Date, Error> {
    text.parse().map_err(unreadable)
}

fn open_plan(row: &SqliteRow) -> Result<OpenPlan, Error> {
    let names: Names = serde_json::from_str(row.try_get("inputs")?).map_err(unreadable)?;
    let shares: Vec<f64> = serde_json::from_str(row.try_get("shares")?).map_err(unreadable)?;
    let state: &str = row.try_get("state")?;
    let next: (Option<PlanId>, Option<i64>) =
        (row.try_get("next_id")?, row.try_get("next_revision")?);
    let sources = names.sources.into_iter().zip(shares);
    let sources = sources.filter(|(_, share)| *share > 0.0);
    Ok(OpenPlan {
        id: row.try_get("id")?,
        batch: row.try_get("batch")?,
        revision: row.try_get("revision")?,
        beer_id: row.try_get("beer_id")?,
        beer_name: row.try_get("beer_name")?,
        brewed_on: date(row.try_get("brewed_on")?)?,
        state: State::from_key(state).ok_or_else(|| unreadable(format!("state {state}")))?,
        prediction: prediction(row.try_get("prediction")?)?,
        successor: next.0.zip(next.1),
        lines: Vec::new(),
        reading: None,
        // A water that was typed into a preview is none of the brewery's sources.
        sources: sources
            .filter_map(|(source, _)| {
                Some(UsedSource {
                    id: source.source_id.parse().ok()?,
                    tested_on: source.tested_on.parse().ok(),
                    assumed: source.assumed,
                })
            })
            .collect(),
        shelf: names
            .shelf
            .iter()
            .map(|item| item.material_id.parse().ok())
            .collect(),
    })
}

fn line(row: &SqliteRow, shelf: &[Option<MaterialId>]) -> Result<Line, Error> {
    let place = usize::try_from(row.try_get::<i64, _>("material")?).map_err(unreadable)?;
    let vessel: &str = row.try_get("vessel")?;
    Ok(Line {
        id: row.try_get("id")?,
        vessel: Vessel::from_key(vessel).ok_or_else(|| unreadable(format!("vessel {vessel}")))?,
        material: shelf.get(place).copied().flatten(),
        planned: DoseAmount::clamped(row.try_get("planned")?),
        step_of: row.try_get("mash_check_id")?,
        weighed_at: row.try_get("weighed_at")?,
    })
}

fn reading(row: &SqliteRow, lines: &[Line]) -> Result<Reading, Error> {
    let id: MashCheckId = row.try_get("id")?;
    let advised: Advised = serde_json::from_str(row.try_get("assessment")?).map_err(unreadable)?;
    let step = lines.iter().find(|line| line.step_of == Some(id));
    Ok(Reading {
        ph: advised.reading_ph,
        sd: advised.reading_sd,
        at: row.try_get("read_at")?,
        verdict: advised.verdict,
        advice: advised.advice,
        reread_after_minutes: advised.step.map(|step| step.reread_after_minutes),
        step: step.map(|line| (line.id, line.weighed_at)),
    })
}
