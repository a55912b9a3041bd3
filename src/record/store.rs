//! SQL for the record book: it is only ever added to.

use sqlx::{QueryBuilder, Row, Sqlite, SqliteConnection, sqlite::SqliteRow};

use super::operations::Found;
use super::{Change, Entry};
use crate::error::Error;
use crate::id::{MemberId, SourceId, UtcTime};
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

/// Which entries are wanted: all that is given must hold.
#[derive(Clone, Debug, Default, PartialEq)]
pub(super) struct Wanted {
    pub(super) batch: Option<String>,
    pub(super) source: Option<SourceId>,
    pub(super) person: Option<MemberId>,
    pub(super) lot: Option<String>,
    pub(super) from: Option<UtcTime>,
    pub(super) until: Option<UtcTime>,
    pub(super) kind: Option<String>,
    pub(super) text: Option<String>,
    pub(super) subject: Option<(String, String)>,
}

impl Wanted {
    /// Adds the query for the numbers of the entries that fit. Each condition is a list of numbers
    /// out of one index, so that no entry is read that does not fit; only a search for words reads
    /// those that are left.
    fn add_to(&self, query: &mut QueryBuilder<Sqlite>) {
        const LINKED: &str = "SELECT seq FROM record_links WHERE kind = ";
        let mut lists = 0;
        let mut next = |query: &mut QueryBuilder<Sqlite>, begin: &str| {
            query.push(if lists == 0 {
                " WHERE seq IN ("
            } else {
                " INTERSECT "
            });
            query.push(begin);
            lists += 1;
        };
        query.push("SELECT seq FROM record_entries");
        if let Some(batch) = &self.batch {
            next(query, LINKED);
            query.push("'batch' AND id = ").push_bind(batch.clone());
        }
        if let Some(source) = self.source {
            next(query, LINKED);
            query.push("'source' AND id = ").push_bind(source);
        }
        if let Some(person) = self.person {
            next(
                query,
                "SELECT seq FROM (SELECT seq FROM record_entries WHERE member_id = ",
            );
            query.push_bind(person);
            query.push(" UNION ALL SELECT seq FROM record_links WHERE kind = 'account' AND id = ");
            query.push_bind(person).push(")");
        }
        if let Some(lot) = &self.lot {
            next(
                query,
                "SELECT seq FROM record_links WHERE kind IN ('material lot', 'malt lot') AND id IN (",
            );
            for (table, joint) in [("material_lots", " UNION ALL "), ("malt_lots", ")")] {
                query
                    .push("SELECT id FROM ")
                    .push(table)
                    .push(" WHERE id = ");
                query.push_bind(lot.clone()).push(" OR code = ");
                query.push_bind(lot.clone()).push(joint);
            }
        }
        if self.from.is_some() || self.until.is_some() {
            next(query, "SELECT seq FROM record_entries WHERE at >= ");
            query.push_bind(self.from.map_or_else(String::new, |from| from.to_string()));
            if let Some(until) = self.until {
                query.push(" AND at < ").push_bind(until);
            }
        }
        if let Some(kind) = &self.kind {
            next(
                query,
                "SELECT seq FROM record_entries WHERE subject_kind = ",
            );
            query.push_bind(kind.clone());
        }
        if let Some((kind, id)) = &self.subject {
            next(
                query,
                "SELECT seq FROM record_entries WHERE subject_kind = ",
            );
            query
                .push_bind(kind.clone())
                .push(" AND subject_id = ")
                .push_bind(id.clone());
        }
        if lists > 0 {
            query.push(")");
        }
        if let Some(text) = &self.text {
            // As SQLite: the letters of ASCII alone.
            let text = text.to_ascii_lowercase();
            let mut joint = if lists > 0 { " AND (" } else { " WHERE (" };
            for column in [
                "action",
                "subject_kind || ' ' || subject_name",
                "member_name",
                "reason",
                "after",
                "before",
            ] {
                query
                    .push(joint)
                    .push("instr(lower(")
                    .push(column)
                    .push("), ");
                query.push_bind(text.clone()).push(") > 0");
                joint = " OR ";
            }
            query.push(")");
        }
    }

    /// Whether every entry fits.
    fn is_anything(&self) -> bool {
        *self == Self::default()
    }
}

/// The entries that fit before `before`, newest first, and how many fit; what else they are
/// about is not read. Past the oldest entry there is nothing and no count.
pub(super) async fn find(
    db: &mut SqliteConnection,
    wanted: &Wanted,
    before: Option<i64>,
    limit: i64,
) -> Result<Found, Error> {
    let before = before.unwrap_or(i64::MAX);
    // A list that is everything is counted in an index, and not written out first.
    let mut query = QueryBuilder::new(if wanted.is_anything() {
        "WITH fits (seq) AS NOT MATERIALIZED ("
    } else {
        "WITH fits (seq) AS MATERIALIZED ("
    });
    wanted.add_to(&mut query);
    query.push(
        ") SELECT seq, at, member_id, member_name, action, subject_kind, subject_id, subject_name, before, after, reason,
                  (SELECT count(*) FROM fits) AS count, (SELECT count(*) FROM fits WHERE +seq >= ",
    );
    query.push_bind(before).push(
        ") AS newer
           FROM record_entries WHERE seq IN (SELECT seq FROM fits WHERE seq < ",
    );
    query.push_bind(before).push(" ORDER BY seq DESC LIMIT ");
    query.push_bind(limit).push(") ORDER BY seq DESC");
    let rows = query.build().fetch_all(db).await?;
    let mut found = Found {
        entries: Vec::with_capacity(rows.len()),
        count: 0,
        newer: 0,
    };
    for row in &rows {
        found.count = row.try_get("count")?;
        found.newer = row.try_get("newer")?;
        found.entries.push(entry(row)?);
    }
    Ok(found)
}

/// Reads what else entries are about.
pub(super) async fn fill_about(
    db: &mut SqliteConnection,
    entries: &mut [Entry],
) -> Result<(), Error> {
    let numbers: Vec<i64> = entries.iter().map(|entry| entry.seq).collect();
    let numbers = serde_json::to_string(&numbers).unwrap_or_default();
    let rows = sqlx::query(
        "SELECT link.seq, link.kind, link.id FROM json_each(?) AS number JOIN record_links AS link ON link.seq = number.value
         ORDER BY link.seq DESC, link.kind, link.id",
    )
    .bind(numbers)
    .fetch_all(db)
    .await?;
    for row in rows {
        let seq: i64 = row.try_get("seq")?;
        if let Some(entry) = entries.iter_mut().find(|entry| entry.seq == seq) {
            entry.about.push((row.try_get("kind")?, row.try_get("id")?));
        }
    }
    Ok(())
}

/// Everybody who has an account.
pub(super) async fn people(db: &mut SqliteConnection) -> Result<Vec<(MemberId, String)>, Error> {
    Ok(
        sqlx::query_as("SELECT id, name FROM members ORDER BY name COLLATE NOCASE")
            .fetch_all(db)
            .await?,
    )
}

/// Every source.
pub(super) async fn sources(db: &mut SqliteConnection) -> Result<Vec<(SourceId, String)>, Error> {
    Ok(sqlx::query_as("SELECT id, name FROM sources ORDER BY name")
        .fetch_all(db)
        .await?)
}

/// Every kind of subject, in the order of the alphabet: from each the index leads to the
/// next, past all entries of one kind.
pub(super) async fn kinds(db: &mut SqliteConnection) -> Result<Vec<String>, Error> {
    Ok(sqlx::query_scalar(
        "WITH RECURSIVE kinds (kind) AS (
             SELECT min(subject_kind) FROM record_entries
             UNION ALL
             SELECT (SELECT min(subject_kind) FROM record_entries WHERE subject_kind > kind) FROM kinds
             WHERE kind IS NOT NULL
         )
         SELECT kind FROM kinds WHERE kind IS NOT NULL",
    )
    .fetch_all(db)
    .await?)
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
        about: Vec::new(),
    })
}
