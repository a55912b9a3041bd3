//! SQL for mash checks.

use chemistry::quantity::{Celsius, Litres, Minutes, Ph, PhShift};
use sqlx::{Row, SqliteConnection, sqlite::SqliteRow};

use crate::error::Error;
use crate::id::{MashCheckId, MaterialId, MeterId, PlanId, UtcTime};
use crate::plans::{Deed, MashCheck, Stage};

fn unreadable(error: impl Into<Box<dyn std::error::Error + Send + Sync>>) -> Error {
    Error::internal("A stored reading cannot be read", error)
}

pub(super) async fn insert(
    db: &mut SqliteConnection,
    check: &MashCheck,
) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO mash_checks (id, plan_id, stage, read_at, minute, ph, sample_c, meter, meter_id, calibration_id,
                                  meter_sd, meter_checked, confirmed, wort_l, cast_out_ph, assessment, full_dose,
                                  read_by)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
    )
    .bind(check.id)
    .bind(check.plan_id)
    .bind(check.stage.key())
    .bind(check.read_at)
    .bind(check.minute.get())
    .bind(check.ph.get())
    .bind(check.sample.get())
    .bind(&check.meter)
    .bind(check.meter_id)
    .bind(check.calibration_id)
    .bind(check.meter_sd.get())
    .bind(check.meter_checked)
    .bind(check.confirmed)
    .bind(check.wort.map(Litres::get))
    .bind(check.cast_out.map(Ph::get))
    .bind(serde_json::to_string(&check.advised).unwrap_or_default())
    .bind(check.advised.step.as_ref().map(|step| step.full_dose))
    .bind(&check.read_by)
    .execute(db)
    .await?;
    Ok(())
}

/// Every mash check of a plan, the earliest first.
pub(in crate::plans) async fn of_plan(
    db: &mut SqliteConnection,
    plan: PlanId,
) -> Result<Vec<MashCheck>, Error> {
    let rows = sqlx::query(
        "SELECT id, plan_id, stage, read_at, minute, ph, sample_c, meter, meter_id, calibration_id, meter_sd,
                meter_checked, confirmed, wort_l, cast_out_ph, assessment, read_by, withdrawn_at, withdrawn_by,
                withdrawal_reason
         FROM mash_checks WHERE plan_id = ? ORDER BY read_at, id",
    )
    .bind(plan)
    .fetch_all(db)
    .await?;
    rows.iter().map(check).collect()
}

fn check(row: &SqliteRow) -> Result<MashCheck, Error> {
    let withdrawn = match row.try_get::<Option<UtcTime>, _>("withdrawn_at")? {
        None => None,
        Some(at) => {
            let text = |column: &str| {
                let text: Option<String> = row.try_get(column)?;
                Ok::<_, Error>(text.unwrap_or_default())
            };
            Some(Deed {
                at,
                by: text("withdrawn_by")?,
                reason: text("withdrawal_reason")?,
            })
        }
    };
    Ok(MashCheck {
        id: row.try_get("id")?,
        plan_id: row.try_get("plan_id")?,
        stage: Stage::from_key(row.try_get("stage")?).ok_or_else(|| unreadable("unknown stage"))?,
        read_at: row.try_get("read_at")?,
        minute: Minutes::clamped(row.try_get("minute")?),
        ph: Ph::clamped(row.try_get("ph")?),
        sample: Celsius::clamped(row.try_get("sample_c")?),
        meter: row.try_get("meter")?,
        meter_id: row.try_get("meter_id")?,
        calibration_id: row.try_get("calibration_id")?,
        meter_sd: PhShift::clamped(row.try_get("meter_sd")?),
        meter_checked: row.try_get("meter_checked")?,
        confirmed: row.try_get("confirmed")?,
        wort: row
            .try_get::<Option<f64>, _>("wort_l")?
            .map(Litres::clamped),
        cast_out: row
            .try_get::<Option<f64>, _>("cast_out_ph")?
            .map(Ph::clamped),
        advised: serde_json::from_str(row.try_get("assessment")?).map_err(unreadable)?,
        read_by: row.try_get("read_by")?,
        withdrawn,
    })
}

pub(super) async fn withdraw(
    db: &mut SqliteConnection,
    id: MashCheckId,
    deed: &Deed,
) -> Result<(), sqlx::Error> {
    sqlx::query("UPDATE mash_checks SET withdrawn_at = ?, withdrawn_by = ?, withdrawal_reason = ? WHERE id = ?")
        .bind(deed.at)
        .bind(&deed.by)
        .bind(&deed.reason)
        .bind(id)
        .execute(db)
        .await?;
    Ok(())
}

/// The materials that are in use today.
pub(super) async fn on_the_shelf(
    db: &mut SqliteConnection,
) -> Result<Vec<MaterialId>, sqlx::Error> {
    sqlx::query_scalar("SELECT id FROM materials WHERE in_use")
        .fetch_all(db)
        .await
}

/// The meter somebody read with last, in any batch.
pub(super) async fn last_meter(db: &mut SqliteConnection) -> Result<Option<MeterId>, sqlx::Error> {
    sqlx::query_scalar(
        "SELECT meter_id FROM mash_checks WHERE meter_id IS NOT NULL ORDER BY read_at DESC LIMIT 1",
    )
    .fetch_optional(db)
    .await
}
