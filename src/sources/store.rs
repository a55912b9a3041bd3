//! SQL for sources.

use chemistry::report::WaterKind;
use sqlx::{Row, SqliteConnection, sqlite::SqliteRow};

use super::Source;
use crate::error::Error;
use crate::id::SourceId;

/// A kind of water as it is stored.
pub(super) fn kind(key: &str) -> Result<WaterKind, Error> {
    WaterKind::from_key(key)
        .ok_or_else(|| Error::internal("A source has an unknown kind", key.to_owned()))
}

fn source(row: &SqliteRow) -> Result<Source, Error> {
    Ok(Source {
        id: row.try_get("id")?,
        name: row.try_get("name")?,
        kind: kind(row.try_get("kind")?)?,
        blending: row.try_get("blending")?,
        price_per_m3: row.try_get("price_per_m3")?,
        days_between_tests: row.try_get("days_between_tests")?,
        notes: row.try_get("notes")?,
        in_use: row.try_get("in_use")?,
        version: row.try_get("version")?,
    })
}

pub(super) async fn insert(db: &mut SqliteConnection, source: &Source) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO sources (id, name, kind, blending, price_per_m3, days_between_tests, notes, in_use, version)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)",
    )
    .bind(source.id)
    .bind(&source.name)
    .bind(source.kind.key())
    .bind(source.blending)
    .bind(source.price_per_m3)
    .bind(source.days_between_tests)
    .bind(&source.notes)
    .bind(source.in_use)
    .bind(source.version)
    .execute(db)
    .await?;
    Ok(())
}

pub(super) async fn update(db: &mut SqliteConnection, source: &Source) -> Result<(), sqlx::Error> {
    sqlx::query(
        "UPDATE sources SET name = ?, kind = ?, blending = ?, price_per_m3 = ?, days_between_tests = ?,
                            notes = ?, in_use = ?, version = ?
         WHERE id = ?",
    )
    .bind(&source.name)
    .bind(source.kind.key())
    .bind(source.blending)
    .bind(source.price_per_m3)
    .bind(source.days_between_tests)
    .bind(&source.notes)
    .bind(source.in_use)
    .bind(source.version)
    .bind(source.id)
    .execute(db)
    .await?;
    Ok(())
}

pub(super) async fn find(db: &mut SqliteConnection, id: SourceId) -> Result<Option<Source>, Error> {
    let row = sqlx::query(
        "SELECT id, name, kind, blending, price_per_m3, days_between_tests, notes, in_use, version
         FROM sources WHERE id = ?",
    )
    .bind(id)
    .fetch_optional(db)
    .await?;
    row.as_ref().map(source).transpose()
}

/// Every source by name, those in use first.
pub(super) async fn list(db: &mut SqliteConnection) -> Result<Vec<Source>, Error> {
    let rows = sqlx::query(
        "SELECT id, name, kind, blending, price_per_m3, days_between_tests, notes, in_use, version
         FROM sources ORDER BY in_use DESC, name",
    )
    .fetch_all(db)
    .await?;
    rows.iter().map(source).collect()
}

/// Up to `limit` sources in the order they were made, after the one given.
pub(super) async fn page(
    db: &mut SqliteConnection,
    after: Option<SourceId>,
    limit: i64,
) -> Result<Vec<Source>, Error> {
    let rows = sqlx::query(
        "SELECT id, name, kind, blending, price_per_m3, days_between_tests, notes, in_use, version
         FROM sources WHERE ?1 IS NULL OR id > ?1 ORDER BY id LIMIT ?2",
    )
    .bind(after)
    .bind(limit)
    .fetch_all(db)
    .await?;
    rows.iter().map(source).collect()
}
