//! SQL for sessions.

use sqlx::{Row, SqliteConnection};

use super::role;
use crate::error::Error;
use crate::id::{MemberId, TabletId, UtcTime};
use crate::people::{Member, Session};

/// A session that begins.
pub(in crate::people) struct NewSession<'a> {
    pub(in crate::people) secret_hash: &'a str,
    pub(in crate::people) member: MemberId,
    pub(in crate::people) tablet: Option<TabletId>,
    pub(in crate::people) by_pin: bool,
    pub(in crate::people) device: &'a str,
    pub(in crate::people) now: UtcTime,
    pub(in crate::people) expires: UtcTime,
}

pub(in crate::people) async fn insert(
    db: &mut SqliteConnection,
    new: &NewSession<'_>,
) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO sessions (token_hash, member_id, created_at, last_seen_at, expires_at, tablet_id, by_pin, device)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?)",
    )
    .bind(new.secret_hash)
    .bind(new.member)
    .bind(new.now)
    .bind(new.now)
    .bind(new.expires)
    .bind(new.tablet)
    .bind(new.by_pin)
    .bind(new.device)
    .execute(db)
    .await?;
    Ok(())
}

/// Who holds the session, and when it was last seen, if it is still good at this tablet
/// or, for `None`, at a browser of one's own.
pub(in crate::people) async fn holder(
    db: &mut SqliteConnection,
    secret_hash: &str,
    tablet: Option<TabletId>,
    now: UtcTime,
    idle_since: UtcTime,
) -> Result<Option<(Member, UtcTime)>, Error> {
    let row = sqlx::query(
        "SELECT members.id, members.name, members.role, sessions.last_seen_at, sessions.by_pin
         FROM sessions JOIN members ON members.id = sessions.member_id
         WHERE sessions.token_hash = ? AND sessions.expires_at > ? AND sessions.last_seen_at > ?
           AND sessions.tablet_id IS ? AND members.disabled_at IS NULL",
    )
    .bind(secret_hash)
    .bind(now)
    .bind(idle_since)
    .bind(tablet)
    .fetch_optional(db)
    .await?;
    row.map(|row| {
        let member = Member {
            id: row.try_get("id")?,
            name: row.try_get("name")?,
            role: role(row.try_get("role")?)?,
            scopes: None,
            by_pin: row.try_get("by_pin")?,
        };
        Ok((member, row.try_get("last_seen_at")?))
    })
    .transpose()
}

/// The sessions of one person that are still good, the latest first.
pub(in crate::people) async fn of_member(
    db: &mut SqliteConnection,
    member: MemberId,
    this_one: &str,
    now: UtcTime,
    idle_since: UtcTime,
    tablet_idle_since: UtcTime,
) -> Result<Vec<Session>, Error> {
    let rows = sqlx::query(
        "SELECT coalesce(tablets.name, sessions.device) AS device, sessions.tablet_id IS NOT NULL AS on_tablet,
                sessions.created_at, sessions.last_seen_at, sessions.token_hash = ? AS this_one
         FROM sessions LEFT JOIN tablets ON tablets.id = sessions.tablet_id
         WHERE sessions.member_id = ? AND sessions.expires_at > ?
           AND sessions.last_seen_at > CASE WHEN sessions.tablet_id IS NULL THEN ? ELSE ? END
         ORDER BY sessions.last_seen_at DESC",
    )
    .bind(this_one)
    .bind(member)
    .bind(now)
    .bind(idle_since)
    .bind(tablet_idle_since)
    .fetch_all(db)
    .await?;
    rows.iter()
        .map(|row| {
            Ok(Session {
                device: row.try_get("device")?,
                on_tablet: row.try_get("on_tablet")?,
                created_at: row.try_get("created_at")?,
                last_seen_at: row.try_get("last_seen_at")?,
                this_one: row.try_get("this_one")?,
            })
        })
        .collect()
}

pub(in crate::people) async fn touch(
    db: &mut SqliteConnection,
    secret_hash: &str,
    now: UtcTime,
) -> Result<(), sqlx::Error> {
    sqlx::query("UPDATE sessions SET last_seen_at = ? WHERE token_hash = ?")
        .bind(now)
        .bind(secret_hash)
        .execute(db)
        .await?;
    Ok(())
}

pub(in crate::people) async fn delete(
    db: &mut SqliteConnection,
    secret_hash: &str,
) -> Result<(), sqlx::Error> {
    sqlx::query("DELETE FROM sessions WHERE token_hash = ?")
        .bind(secret_hash)
        .execute(db)
        .await?;
    Ok(())
}

/// Ends every session of one person.
pub(in crate::people) async fn delete_of_member(
    db: &mut SqliteConnection,
    member: MemberId,
) -> Result<(), sqlx::Error> {
    sqlx::query("DELETE FROM sessions WHERE member_id = ?")
        .bind(member)
        .execute(db)
        .await?;
    Ok(())
}

/// Ends the sessions that a PIN of this person began.
pub(in crate::people) async fn delete_by_pin(
    db: &mut SqliteConnection,
    member: MemberId,
) -> Result<(), sqlx::Error> {
    sqlx::query("DELETE FROM sessions WHERE member_id = ? AND by_pin = 1")
        .bind(member)
        .execute(db)
        .await?;
    Ok(())
}

pub(in crate::people) async fn delete_of_tablet(
    db: &mut SqliteConnection,
    tablet: TabletId,
) -> Result<(), sqlx::Error> {
    sqlx::query("DELETE FROM sessions WHERE tablet_id = ?")
        .bind(tablet)
        .execute(db)
        .await?;
    Ok(())
}

pub(in crate::people) async fn delete_expired(
    db: &mut SqliteConnection,
    now: UtcTime,
    idle_since: UtcTime,
) -> Result<(), sqlx::Error> {
    sqlx::query("DELETE FROM sessions WHERE expires_at <= ? OR last_seen_at <= ?")
        .bind(now)
        .bind(idle_since)
        .execute(db)
        .await?;
    Ok(())
}
