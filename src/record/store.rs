//! SQL for the record book: it is only ever added to.

use sqlx::{Row, SqliteConnection, sqlite::SqliteRow};

use super::{Change, Entry};
use crate::error::Error;
use crate::id::UtcTime;
use crate::people::Member;

pub(super) async fn insert(
    db: &mut SqliteConnection,
    by: &Member,
    at: UtcTime,
    change: &Change,
) -> Result<(), sqlx::Error> {
    let seq = sqlx::query(
        "INSERT INTO record_entries
             (at, member_id, member_name, action, subject_kind, subject_id, subject_name, before, after, reason)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
    )
    .bind(at)
    .bind(by.id)
    .bind(&by.name)
    .bind(&change.action)
    .bind(change.subject_kind)
    .bind(&change.subject_id)
    .bind(&change.subject_name)
    .bind(change.before.as_ref().map(ToString::to_string))
    .bind(change.after.as_ref().map(ToString::to_string))
    .bind(&change.reason)
    .execute(&mut *db)
    .await?
    .last_insert_rowid();
    for (kind, id) in &change.about {
        sqlx::query("INSERT INTO record_links (kind, id, seq) VALUES (?, ?, ?)")
            .bind(kind)
            .bind(id)
            .bind(seq)
            .execute(&mut *db)
            .await?;
    }
    Ok(())
}

/// Entries before `before`, newest first; of one subject when that is given.
pub(super) async fn page(
    db: &mut SqliteConnection,
    subject: Option<(&str, &str)>,
    before: Option<i64>,
    limit: i64,
) -> Result<Vec<Entry>, Error> {
    let rows = sqlx::query(
        "SELECT seq, at, member_id, member_name, action, subject_kind, subject_id, subject_name, before, after, reason
         FROM record_entries
         WHERE seq < ?1 AND (?2 IS NULL OR subject_kind = ?2) AND (?3 IS NULL OR subject_id = ?3)
         ORDER BY seq DESC LIMIT ?4",
    )
    .bind(before.unwrap_or(i64::MAX))
    .bind(subject.map(|(kind, _)| kind))
    .bind(subject.map(|(_, id)| id))
    .bind(limit)
    .fetch_all(db)
    .await?;
    rows.iter().map(entry).collect()
}

fn entry(row: &SqliteRow) -> Result<Entry, Error> {
    let json = |column: &str| -> Result<Option<serde_json::Value>, Error> {
        row.try_get::<Option<&str>, _>(column)?
            .map(serde_json::from_str)
            .transpose()
            .map_err(|error| Error::internal("A line of the record book cannot be read", error))
    };
    Ok(Entry {
        seq: row.try_get("seq")?,
        at: row.try_get("at")?,
        member_id: row.try_get("member_id")?,
        member_name: row.try_get("member_name")?,
        action: row.try_get("action")?,
        subject_kind: row.try_get("subject_kind")?,
        subject_id: row.try_get("subject_id")?,
        subject_name: row.try_get("subject_name")?,
        before: json("before")?,
        after: json("after")?,
        reason: row.try_get("reason")?,
    })
}
