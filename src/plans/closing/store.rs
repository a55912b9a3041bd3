//! SQL for what closing adds: deviations and later corrections.

use chemistry::quantity::{DoseAmount, Fraction};
use serde::{Deserialize, Serialize};
use sqlx::{Row, SqliteConnection, sqlite::SqliteRow};

use super::corrections::{PlanCorrection, What};
use super::deviations::{Deviation, Kind, Tolerances};
use super::revisions::{Calibrated, Revision};
use crate::error::Error;
use crate::id::{MaterialId, PlanId, UtcTime};
use crate::plans::store::unreadable;
use crate::plans::{Deed, State};

#[derive(Serialize, Deserialize)]
struct DeviationRow {
    kind: String,
    about: String,
    words: String,
    reason: String,
}

/// What was not as planned, as it was written down at closing.
pub(super) async fn deviations(
    db: &mut SqliteConnection,
    id: PlanId,
) -> Result<Vec<Deviation>, Error> {
    let text: Option<String> = sqlx::query_scalar("SELECT deviations FROM plans WHERE id = ?")
        .bind(id)
        .fetch_one(db)
        .await?;
    let rows: Vec<DeviationRow> = text
        .map(|text| serde_json::from_str(&text))
        .transpose()
        .map_err(unreadable)?
        .unwrap_or_default();
    rows.into_iter()
        .map(|row| {
            Ok(Deviation {
                kind: Kind::from_key(&row.kind).ok_or_else(|| unreadable("unknown deviation"))?,
                about: row.about,
                words: row.words,
                reason: row.reason,
            })
        })
        .collect()
}

pub(super) async fn write_deviations(
    db: &mut SqliteConnection,
    id: PlanId,
    deviations: &[Deviation],
) -> Result<(), Error> {
    let rows: Vec<DeviationRow> = deviations
        .iter()
        .map(|deviation| DeviationRow {
            kind: deviation.kind.key().into(),
            about: deviation.about.clone(),
            words: deviation.words.clone(),
            reason: deviation.reason.clone(),
        })
        .collect();
    sqlx::query("UPDATE plans SET deviations = ? WHERE id = ?")
        .bind(serde_json::to_string(&rows).unwrap_or_default())
        .bind(id)
        .execute(db)
        .await?;
    Ok(())
}

/// What materials say of their own about how far a dose may be from its plan.
pub(super) async fn tolerances(db: &mut SqliteConnection) -> Result<Tolerances, Error> {
    let rows: Vec<(MaterialId, f64)> = sqlx::query_as(
        "SELECT id, tolerance_percent FROM materials WHERE tolerance_percent IS NOT NULL",
    )
    .fetch_all(db)
    .await?;
    let share = |(id, percent)| (id, Fraction::clamped(percent / 100.0));
    Ok(Tolerances(rows.into_iter().map(share).collect()))
}

pub(super) async fn insert_correction(
    db: &mut SqliteConnection,
    plan: PlanId,
    correction: &PlanCorrection,
) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO plan_corrections (id, plan_id, what, dose_id, said_before, says_now, amount_g_or_ml,
                                       material_lot_id, teaches, reason, corrected_at, corrected_by)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
    )
    .bind(correction.id)
    .bind(plan)
    .bind(correction.what.key())
    .bind(correction.dose_id)
    .bind(&correction.said_before)
    .bind(&correction.says_now)
    .bind(correction.amount.map(DoseAmount::get))
    .bind(correction.lot_id)
    .bind(correction.teaches)
    .bind(&correction.made.reason)
    .bind(correction.made.at)
    .bind(&correction.made.by)
    .execute(db)
    .await?;
    Ok(())
}

/// Every correction of a closed batch, the earliest first.
pub(super) async fn corrections(
    db: &mut SqliteConnection,
    plan: PlanId,
) -> Result<Vec<PlanCorrection>, Error> {
    let rows = sqlx::query(
        "SELECT id, what, dose_id, said_before, says_now, amount_g_or_ml, material_lot_id, teaches, reason,
                corrected_at, corrected_by
         FROM plan_corrections WHERE plan_id = ? ORDER BY corrected_at, id",
    )
    .bind(plan)
    .fetch_all(db)
    .await?;
    rows.iter().map(correction).collect()
}

fn correction(row: &SqliteRow) -> Result<PlanCorrection, Error> {
    Ok(PlanCorrection {
        id: row.try_get("id")?,
        what: What::from_key(row.try_get("what")?)
            .ok_or_else(|| unreadable("unknown correction"))?,
        dose_id: row.try_get("dose_id")?,
        said_before: row.try_get("said_before")?,
        says_now: row.try_get("says_now")?,
        amount: row
            .try_get::<Option<f64>, _>("amount_g_or_ml")?
            .map(DoseAmount::clamped),
        lot_id: row.try_get("material_lot_id")?,
        teaches: row.try_get("teaches")?,
        made: Deed {
            at: row.try_get("corrected_at")?,
            by: row.try_get("corrected_by")?,
            reason: row.try_get("reason")?,
        },
    })
}

/// Every revision of a batch's plan, the first one first.
pub(super) async fn revisions(
    db: &mut SqliteConnection,
    batch: &str,
) -> Result<Vec<Revision>, Error> {
    let rows = sqlx::query(
        "SELECT revision, state, created_at, created_by, approved_at, approved_by, approval_reason, withdrawn_at,
                withdrawn_by, withdrawal_reason, closed_at, closed_by, closing_note
         FROM plans WHERE batch = ? ORDER BY revision",
    )
    .bind(batch)
    .fetch_all(db)
    .await?;
    let deed = |row: &SqliteRow, at: &str, by: &str, reason: &str| -> Result<Option<Deed>, Error> {
        let Some(at) = row.try_get::<Option<UtcTime>, _>(at)? else {
            return Ok(None);
        };
        let text = |column: &str| row.try_get::<Option<String>, _>(column);
        Ok(Some(Deed {
            at,
            by: text(by)?.unwrap_or_default(),
            reason: text(reason)?.unwrap_or_default(),
        }))
    };
    rows.iter()
        .map(|row| {
            Ok(Revision {
                revision: row.try_get("revision")?,
                state: State::from_key(row.try_get("state")?)
                    .ok_or_else(|| unreadable("unknown state"))?,
                drafted: Deed {
                    at: row.try_get("created_at")?,
                    by: row.try_get("created_by")?,
                    reason: String::new(),
                },
                approved: deed(row, "approved_at", "approved_by", "approval_reason")?,
                withdrawn: deed(row, "withdrawn_at", "withdrawn_by", "withdrawal_reason")?,
                closed: deed(row, "closed_at", "closed_by", "closing_note")?,
            })
        })
        .collect()
}

/// The calibrations that the readings of a plan rest on.
pub(super) async fn calibrations(
    db: &mut SqliteConnection,
    plan: PlanId,
) -> Result<Vec<Calibrated>, Error> {
    let rows = sqlx::query(
        "SELECT DISTINCT meter_calibrations.id, calibrated_at, slope_percent
         FROM mash_checks JOIN meter_calibrations ON meter_calibrations.id = calibration_id
         WHERE plan_id = ?",
    )
    .bind(plan)
    .fetch_all(db)
    .await?;
    rows.iter()
        .map(|row| {
            Ok(Calibrated {
                id: row.try_get("id")?,
                at: row.try_get("calibrated_at")?,
                slope_percent: row.try_get("slope_percent")?,
            })
        })
        .collect()
}
