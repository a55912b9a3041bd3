//! SQL for tests of sparge liquor.

use chemistry::quantity::{Drops, Estimate, Litres, MgPerLAsCaCO3};
use sqlx::{Row, SqliteConnection, sqlite::SqliteRow};

use super::LiquorCheck;
use crate::error::Error;
use crate::id::{LiquorCheckId, PlanId, UtcTime};
use crate::plans::Deed;

pub(super) async fn insert(
    db: &mut SqliteConnection,
    check: &LiquorCheck,
) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO liquor_checks (id, plan_id, checked_at, drops, mg_per_l_as_caco3_per_drop,
                                    alkalinity_mg_per_l_as_caco3, alkalinity_sd, volume_l, assessment, dose_id,
                                    checked_by)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
    )
    .bind(check.id)
    .bind(check.plan_id)
    .bind(check.checked_at)
    .bind(check.drops.map(|(drops, _)| drops.get()))
    .bind(check.drops.map(|(_, per_drop)| per_drop.get()))
    .bind(check.alkalinity.value.get())
    .bind(check.alkalinity.sd)
    .bind(check.volume.get())
    .bind(serde_json::to_string(&check.advised).unwrap_or_default())
    .bind(check.dose)
    .bind(&check.checked_by)
    .execute(db)
    .await?;
    Ok(())
}

/// Every test of a plan, the earliest first.
pub(super) async fn of_plan(
    db: &mut SqliteConnection,
    plan: PlanId,
) -> Result<Vec<LiquorCheck>, Error> {
    let rows = sqlx::query(
        "SELECT id, plan_id, checked_at, drops, mg_per_l_as_caco3_per_drop, alkalinity_mg_per_l_as_caco3,
                alkalinity_sd, volume_l, assessment, dose_id, checked_by, withdrawn_at, withdrawn_by,
                withdrawal_reason
         FROM liquor_checks WHERE plan_id = ? ORDER BY checked_at, id",
    )
    .bind(plan)
    .fetch_all(db)
    .await?;
    rows.iter().map(check).collect()
}

fn check(row: &SqliteRow) -> Result<LiquorCheck, Error> {
    let drops: Option<f64> = row.try_get("drops")?;
    let per_drop: Option<f64> = row.try_get("mg_per_l_as_caco3_per_drop")?;
    let withdrawn = match row.try_get::<Option<UtcTime>, _>("withdrawn_at")? {
        None => None,
        Some(at) => Some(Deed {
            at,
            by: row
                .try_get::<Option<String>, _>("withdrawn_by")?
                .unwrap_or_default(),
            reason: row
                .try_get::<Option<String>, _>("withdrawal_reason")?
                .unwrap_or_default(),
        }),
    };
    Ok(LiquorCheck {
        id: row.try_get("id")?,
        plan_id: row.try_get("plan_id")?,
        checked_at: row.try_get("checked_at")?,
        drops: Option::zip(drops, per_drop)
            .map(|(drops, per)| (Drops::clamped(drops), MgPerLAsCaCO3::clamped(per))),
        alkalinity: Estimate::new(
            MgPerLAsCaCO3::clamped(row.try_get("alkalinity_mg_per_l_as_caco3")?),
            row.try_get("alkalinity_sd")?,
        ),
        volume: Litres::clamped(row.try_get("volume_l")?),
        advised: serde_json::from_str(row.try_get("assessment")?)
            .map_err(|error| Error::internal("A stored test cannot be read", error))?,
        dose: row.try_get("dose_id")?,
        checked_by: row.try_get("checked_by")?,
        withdrawn,
    })
}

pub(super) async fn withdraw(
    db: &mut SqliteConnection,
    id: LiquorCheckId,
    deed: &Deed,
) -> Result<(), sqlx::Error> {
    sqlx::query(
        "UPDATE liquor_checks SET withdrawn_at = ?, withdrawn_by = ?, withdrawal_reason = ? WHERE id = ?",
    )
    .bind(deed.at)
    .bind(&deed.by)
    .bind(&deed.reason)
    .bind(id)
    .execute(db)
    .await?;
    Ok(())
}
