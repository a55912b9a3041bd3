//! SQL for movements of stock, and for what they and the doses come to.

use chemistry::quantity::DoseAmount;
use sqlx::{Row, SqliteConnection, sqlite::SqliteRow};

use super::{LotLevel, Movement, MovementKind, Stock, Taken, Use};
use crate::error::Error;
use crate::id::{MaterialId, MaterialLotId, MovementId, UtcTime};

pub(super) async fn insert(
    db: &mut SqliteConnection,
    movement: &Movement,
) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO material_movements
             (id, material_lot_id, kind, amount_g_or_ml, moved_at, supplier, delivery_note,
              reason, corrects, entered_at, entered_by)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
    )
    .bind(movement.id)
    .bind(movement.lot_id)
    .bind(movement.kind.key())
    .bind(movement.amount.get())
    .bind(movement.at)
    .bind(&movement.supplier)
    .bind(&movement.delivery_note)
    .bind(&movement.reason)
    .bind(movement.corrects)
    .bind(movement.entered_at)
    .bind(&movement.entered_by)
    .execute(db)
    .await?;
    Ok(())
}

fn movement(row: &SqliteRow) -> Result<Movement, Error> {
    let kind: &str = row.try_get("kind")?;
    Ok(Movement {
        id: row.try_get("id")?,
        lot_id: row.try_get("material_lot_id")?,
        kind: MovementKind::from_key(kind).ok_or_else(|| {
            Error::internal("A movement of stock cannot be read", kind.to_owned())
        })?,
        amount: DoseAmount::clamped(row.try_get("amount_g_or_ml")?),
        at: row.try_get("moved_at")?,
        supplier: row.try_get("supplier")?,
        delivery_note: row.try_get("delivery_note")?,
        reason: row.try_get("reason")?,
        corrects: row.try_get("corrects")?,
        entered_at: row.try_get("entered_at")?,
        entered_by: row.try_get("entered_by")?,
    })
}

/// Every column of a movement, then what follows FROM.
macro_rules! select_movements {
    ($rest:literal) => {
        concat!(
            "SELECT id, material_lot_id, kind, amount_g_or_ml, moved_at, supplier, delivery_note,
                    reason, corrects, entered_at, entered_by
             FROM material_movements ",
            $rest
        )
    };
}

pub(super) async fn find(
    db: &mut SqliteConnection,
    id: MovementId,
) -> Result<Option<Movement>, Error> {
    let row = sqlx::query(select_movements!("WHERE id = ?"))
        .bind(id)
        .fetch_optional(db)
        .await?;
    row.as_ref().map(movement).transpose()
}

/// Every movement of a lot, those that were corrected too, in the order they happened.
pub(super) async fn of_lot(
    db: &mut SqliteConnection,
    lot: MaterialLotId,
) -> Result<Vec<Movement>, Error> {
    let rows = sqlx::query(select_movements!(
        "WHERE material_lot_id = ? ORDER BY moved_at, id"
    ))
    .bind(lot)
    .fetch_all(db)
    .await?;
    rows.iter().map(movement).collect()
}

/// The movements of a lot entered after `after`, in the order they were entered.
pub(super) async fn page(
    db: &mut SqliteConnection,
    lot: MaterialLotId,
    after: Option<MovementId>,
    limit: i64,
) -> Result<Vec<Movement>, Error> {
    let rows = sqlx::query(select_movements!(
        "WHERE material_lot_id = ?1 AND (?2 IS NULL OR id > ?2) ORDER BY id LIMIT ?3"
    ))
    .bind(lot)
    .bind(after)
    .bind(limit)
    .fetch_all(db)
    .await?;
    rows.iter().map(movement).collect()
}

/// Whether a movement was corrected already.
pub(super) async fn is_corrected(
    db: &mut SqliteConnection,
    id: MovementId,
) -> Result<bool, sqlx::Error> {
    sqlx::query_scalar("SELECT EXISTS (SELECT 1 FROM material_movements WHERE corrects = ?)")
        .bind(id)
        .fetch_one(db)
        .await
}

/// What was weighed out of a lot, in the order it was weighed.
pub(super) async fn taken(
    db: &mut SqliteConnection,
    lot: MaterialLotId,
) -> Result<Vec<Taken>, Error> {
    let rows = sqlx::query(
        "SELECT actual, weighed_at, weighed_by, plan_id, batch FROM doses_in
         WHERE material_lot_id = ? AND actual > 0 ORDER BY weighed_at, id",
    )
    .bind(lot)
    .fetch_all(db)
    .await?;
    rows.iter()
        .map(|row| {
            Ok(Taken {
                amount: DoseAmount::clamped(row.try_get("actual")?),
                at: row.try_get("weighed_at")?,
                by: row.try_get("weighed_by")?,
                plan: row.try_get("plan_id")?,
                batch: row.try_get("batch")?,
            })
        })
        .collect()
}

/// How much of one lot, or of every lot, there was at a moment, as if `without` had never
/// been entered.
pub(super) async fn levels(
    db: &mut SqliteConnection,
    lot: Option<MaterialLotId>,
    at: UtcTime,
    without: Option<MovementId>,
) -> Result<Vec<LotLevel>, Error> {
    // The last count of each lot: of two at one moment the one entered last.
    let rows = sqlx::query(
        "WITH moved AS MATERIALIZED (
             SELECT id, material_lot_id, kind, amount_g_or_ml, moved_at FROM material_movements_in_force
             WHERE (?1 IS NULL OR material_lot_id = ?1) AND moved_at <= ?2 AND id IS NOT ?3
         ), last_count AS MATERIALIZED (
             SELECT material_lot_id, amount_g_or_ml, moved_at, max(moved_at || id) AS place
             FROM moved WHERE kind = 'count' GROUP BY material_lot_id
         ), delivered AS MATERIALIZED (
             SELECT moved.material_lot_id, sum(moved.amount_g_or_ml) AS amount
             FROM moved LEFT JOIN last_count USING (material_lot_id)
             WHERE kind = 'delivery' AND moved.moved_at > coalesce(last_count.moved_at, '')
             GROUP BY moved.material_lot_id
         )
         SELECT lot.id, lot.material_id, lot.in_use, last_count.moved_at AS counted_at,
                CASE WHEN last_count.amount_g_or_ml IS NULL AND delivered.amount IS NULL THEN NULL
                ELSE coalesce(last_count.amount_g_or_ml, 0) + coalesce(delivered.amount, 0)
                   - coalesce((SELECT sum(actual) FROM doses_in
                               WHERE doses_in.material_lot_id = lot.id AND weighed_at <= ?2
                                 AND weighed_at > coalesce(last_count.moved_at, '')), 0)
                END AS stock
         FROM material_lots AS lot
         LEFT JOIN last_count ON last_count.material_lot_id = lot.id
         LEFT JOIN delivered ON delivered.material_lot_id = lot.id
         WHERE ?1 IS NULL OR lot.id = ?1",
    )
    .bind(lot)
    .bind(at)
    .bind(without)
    .fetch_all(db)
    .await?;
    rows.iter()
        .map(|row| {
            let stock: Option<f64> = row.try_get("stock")?;
            Ok(LotLevel {
                lot_id: row.try_get("id")?,
                material_id: row.try_get("material_id")?,
                in_use: row.try_get("in_use")?,
                stock: stock.map(Stock::of),
                counted_at: row.try_get("counted_at")?,
            })
        })
        .collect()
}

/// What the last batches took of a material, at most `most` of them.
pub(super) async fn use_of(
    db: &mut SqliteConnection,
    material: MaterialId,
    most: i64,
) -> Result<Option<Use>, Error> {
    let row = sqlx::query(
        "SELECT count(*) AS batches, avg(amount) AS per_batch FROM (
             SELECT sum(actual) AS amount FROM doses_in
             WHERE material_lot_id IN (SELECT id FROM material_lots WHERE material_id = ?1)
               AND actual > 0
             GROUP BY plan_id ORDER BY max(weighed_at) DESC LIMIT ?2)",
    )
    .bind(material)
    .bind(most)
    .fetch_one(db)
    .await?;
    let per_batch: Option<f64> = row.try_get("per_batch")?;
    let batches: i64 = row.try_get("batches")?;
    Ok(per_batch.map(|per_batch| Use {
        batches: usize::try_from(batches).unwrap_or(0),
        per_batch: DoseAmount::clamped(per_batch),
    }))
}
