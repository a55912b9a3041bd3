//! SQL for accounts; of everything else in files of their own.

use sqlx::{Row, SqliteConnection, sqlite::SqliteRow};

use super::{Account, Role};
use crate::error::Error;
use crate::id::MemberId;

pub(super) mod invitations;
pub(super) mod sessions;
pub(super) mod tablets;
pub(super) mod tokens;

fn account(row: &SqliteRow) -> Result<Account, Error> {
    Ok(Account {
        id: row.try_get("id")?,
        login: row.try_get("login")?,
        name: row.try_get("name")?,
        role: role(row.try_get("role")?)?,
        created_at: row.try_get("created_at")?,
        disabled_at: row.try_get("disabled_at")?,
    })
}

pub(super) fn role(key: &str) -> Result<Role, Error> {
    Role::from_key(key)
        .ok_or_else(|| Error::internal("An account has an unknown role", key.to_owned()))
}

pub(super) async fn insert(
    db: &mut SqliteConnection,
    account: &Account,
    hash: &str,
) -> Result<(), sqlx::Error> {
    sqlx::query("INSERT INTO members (id, login, name, role, password_hash, created_at) VALUES (?, ?, ?, ?, ?, ?)")
        .bind(account.id)
        .bind(&account.login)
        .bind(&account.name)
        .bind(account.role.key())
        .bind(hash)
        .bind(account.created_at)
        .execute(db)
        .await?;
    Ok(())
}

pub(super) async fn update(
    db: &mut SqliteConnection,
    account: &Account,
) -> Result<(), sqlx::Error> {
    sqlx::query("UPDATE members SET name = ?, role = ?, disabled_at = ? WHERE id = ?")
        .bind(&account.name)
        .bind(account.role.key())
        .bind(account.disabled_at)
        .bind(account.id)
        .execute(db)
        .await?;
    Ok(())
}

pub(super) async fn set_hash(
    db: &mut SqliteConnection,
    id: MemberId,
    hash: &str,
) -> Result<(), sqlx::Error> {
    sqlx::query("UPDATE members SET password_hash = ? WHERE id = ?")
        .bind(hash)
        .bind(id)
        .execute(db)
        .await?;
    Ok(())
}

pub(super) async fn count(db: &mut SqliteConnection) -> Result<i64, Error> {
    Ok(sqlx::query_scalar("SELECT count(*) FROM members")
        .fetch_one(db)
        .await?)
}

pub(super) async fn count_active_managers(db: &mut SqliteConnection) -> Result<i64, Error> {
    Ok(sqlx::query_scalar(
        "SELECT count(*) FROM members WHERE role = 'manager' AND disabled_at IS NULL",
    )
    .fetch_one(db)
    .await?)
}

pub(super) async fn list(db: &mut SqliteConnection) -> Result<Vec<Account>, Error> {
    let rows = sqlx::query(
        "SELECT id, login, name, role, created_at, disabled_at FROM members ORDER BY disabled_at IS NOT NULL, name",
    )
    .fetch_all(db)
    .await?;
    rows.iter().map(account).collect()
}

pub(super) async fn find(
    db: &mut SqliteConnection,
    id: MemberId,
) -> Result<Option<Account>, Error> {
    let row = sqlx::query(
        "SELECT id, login, name, role, created_at, disabled_at FROM members WHERE id = ?",
    )
    .bind(id)
    .fetch_optional(db)
    .await?;
    row.as_ref().map(account).transpose()
}

/// The account with this login and its password hash.
pub(super) async fn by_login(
    db: &mut SqliteConnection,
    login: &str,
) -> Result<Option<(Account, String)>, Error> {
    let row = sqlx::query(
        "SELECT id, login, name, role, created_at, disabled_at, password_hash FROM members WHERE login = ?",
    )
    .bind(login)
    .fetch_optional(db)
    .await?;
    row.map(|row| Ok((account(&row)?, row.try_get("password_hash")?)))
        .transpose()
}
