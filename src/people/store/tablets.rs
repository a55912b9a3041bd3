//! SQL for tablets and PINs.

use sqlx::{Row, SqliteConnection, sqlite::SqliteRow};

use super::role;
use crate::error::Error;
use crate::id::{MemberId, TabletId, UtcTime};
use crate::people::{Person, Tablet};

fn tablet(row: &SqliteRow) -> Result<Tablet, Error> {
    Ok(Tablet {
        id: row.try_get("id")?,
        name: row.try_get("name")?,
        enrolled_by: row.try_get("enrolled_by")?,
        enrolled_at: row.try_get("enrolled_at")?,
        last_seen_at: row.try_get("last_seen_at")?,
        revoked_at: row.try_get("revoked_at")?,
    })
}

fn person(row: &SqliteRow) -> Result<Person, Error> {
    Ok(Person {
        id: row.try_get("id")?,
        name: row.try_get("name")?,
        role: role(row.try_get("role")?)?,
    })
}

pub(in crate::people) async fn insert(
    db: &mut SqliteConnection,
    tablet: &Tablet,
    secret_hash: &str,
    by: MemberId,
) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO tablets (id, name, secret_hash, enrolled_by, enrolled_at, last_seen_at)
         VALUES (?, ?, ?, ?, ?, ?)",
    )
    .bind(tablet.id)
    .bind(&tablet.name)
    .bind(secret_hash)
    .bind(by)
    .bind(tablet.enrolled_at)
    .bind(tablet.last_seen_at)
    .execute(db)
    .await?;
    Ok(())
}

/// Every tablet: those in use first, each part by name.
pub(in crate::people) async fn list(db: &mut SqliteConnection) -> Result<Vec<Tablet>, Error> {
    let rows = sqlx::query(
        "SELECT tablets.id, tablets.name, members.name AS enrolled_by, enrolled_at, last_seen_at, revoked_at
         FROM tablets JOIN members ON members.id = tablets.enrolled_by
         ORDER BY revoked_at IS NOT NULL, tablets.name, enrolled_at DESC",
    )
    .fetch_all(db)
    .await?;
    rows.iter().map(tablet).collect()
}

pub(in crate::people) async fn find(
    db: &mut SqliteConnection,
    id: TabletId,
) -> Result<Option<Tablet>, Error> {
    let row = sqlx::query(
        "SELECT tablets.id, tablets.name, members.name AS enrolled_by, enrolled_at, last_seen_at, revoked_at
         FROM tablets JOIN members ON members.id = tablets.enrolled_by WHERE tablets.id = ?",
    )
    .bind(id)
    .fetch_optional(db)
    .await?;
    row.as_ref().map(tablet).transpose()
}

/// The tablet in use that holds this secret.
pub(in crate::people) async fn by_secret(
    db: &mut SqliteConnection,
    secret_hash: &str,
) -> Result<Option<Tablet>, Error> {
    let row = sqlx::query(
        "SELECT tablets.id, tablets.name, members.name AS enrolled_by, enrolled_at, last_seen_at, revoked_at
         FROM tablets JOIN members ON members.id = tablets.enrolled_by
         WHERE secret_hash = ? AND revoked_at IS NULL",
    )
    .bind(secret_hash)
    .fetch_optional(db)
    .await?;
    row.as_ref().map(tablet).transpose()
}

pub(in crate::people) async fn touch(
    db: &mut SqliteConnection,
    id: TabletId,
    now: UtcTime,
) -> Result<(), sqlx::Error> {
    sqlx::query("UPDATE tablets SET last_seen_at = ? WHERE id = ?")
        .bind(now)
        .bind(id)
        .execute(db)
        .await?;
    Ok(())
}

pub(in crate::people) async fn revoke(
    db: &mut SqliteConnection,
    id: TabletId,
    now: UtcTime,
) -> Result<(), sqlx::Error> {
    sqlx::query("UPDATE tablets SET revoked_at = ? WHERE id = ? AND revoked_at IS NULL")
        .bind(now)
        .bind(id)
        .execute(db)
        .await?;
    Ok(())
}

/// Sets somebody's PIN; says whether there was one before.
pub(in crate::people) async fn set_pin(
    db: &mut SqliteConnection,
    member: MemberId,
    pin_hash: &str,
    now: UtcTime,
) -> Result<bool, sqlx::Error> {
    let before = has_pin(&mut *db, member).await?;
    sqlx::query(
        "INSERT INTO pins (member_id, pin_hash, set_at) VALUES (?, ?, ?)
         ON CONFLICT (member_id) DO UPDATE SET pin_hash = excluded.pin_hash, set_at = excluded.set_at",
    )
    .bind(member)
    .bind(pin_hash)
    .bind(now)
    .execute(db)
    .await?;
    Ok(before)
}

pub(in crate::people) async fn has_pin(
    db: &mut SqliteConnection,
    member: MemberId,
) -> Result<bool, sqlx::Error> {
    sqlx::query_scalar("SELECT EXISTS (SELECT 1 FROM pins WHERE member_id = ?)")
        .bind(member)
        .fetch_one(db)
        .await
}

pub(in crate::people) async fn remove_pin(
    db: &mut SqliteConnection,
    member: MemberId,
) -> Result<(), sqlx::Error> {
    sqlx::query("DELETE FROM pins WHERE member_id = ?")
        .bind(member)
        .execute(db)
        .await?;
    Ok(())
}

/// The hash of somebody's PIN, while their account is open.
pub(in crate::people) async fn pin_hash(
    db: &mut SqliteConnection,
    member: MemberId,
) -> Result<Option<String>, sqlx::Error> {
    sqlx::query_scalar(
        "SELECT pin_hash FROM pins JOIN members ON members.id = pins.member_id
         WHERE member_id = ? AND members.disabled_at IS NULL",
    )
    .bind(member)
    .fetch_optional(db)
    .await
}

/// Everybody with an open account, by name; of `with_pin`, only those who have a PIN.
pub(in crate::people) async fn persons(
    db: &mut SqliteConnection,
    with_pin: bool,
) -> Result<Vec<Person>, Error> {
    let rows = sqlx::query(
        "SELECT members.id, members.name, members.role
         FROM members LEFT JOIN pins ON pins.member_id = members.id
         WHERE members.disabled_at IS NULL AND (NOT ? OR pins.member_id IS NOT NULL)
         ORDER BY members.name, members.id",
    )
    .bind(with_pin)
    .fetch_all(db)
    .await?;
    rows.iter().map(person).collect()
}
