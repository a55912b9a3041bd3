//! SQL for accounts, sessions and API tokens.

use sqlx::{Row, SqliteConnection, sqlite::SqliteRow};

use super::{Account, ApiToken, Member, Role, Scope};
use crate::error::Error;
use crate::id::{ApiTokenId, MemberId, UtcTime};

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

fn role(key: &str) -> Result<Role, Error> {
    Role::from_key(key)
        .ok_or_else(|| Error::internal("An account has an unknown role", key.to_owned()))
}

fn scopes(text: &str) -> Vec<Scope> {
    text.split(' ').filter_map(Scope::from_key).collect()
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

pub(super) async fn insert_session(
    db: &mut SqliteConnection,
    token_hash: &str,
    member: MemberId,
    now: UtcTime,
    expires: UtcTime,
) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO sessions (token_hash, member_id, created_at, last_seen_at, expires_at) VALUES (?, ?, ?, ?, ?)",
    )
    .bind(token_hash)
    .bind(member)
    .bind(now)
    .bind(now)
    .bind(expires)
    .execute(db)
    .await?;
    Ok(())
}

/// Who holds the session, and when it was last seen, if it is still good.
pub(super) async fn session(
    db: &mut SqliteConnection,
    token_hash: &str,
    now: UtcTime,
    idle_since: UtcTime,
) -> Result<Option<(Member, UtcTime)>, Error> {
    let row = sqlx::query(
        "SELECT members.id, members.name, members.role, sessions.last_seen_at
         FROM sessions JOIN members ON members.id = sessions.member_id
         WHERE sessions.token_hash = ? AND sessions.expires_at > ? AND sessions.last_seen_at > ?
           AND members.disabled_at IS NULL",
    )
    .bind(token_hash)
    .bind(now)
    .bind(idle_since)
    .fetch_optional(db)
    .await?;
    row.map(|row| {
        let member = Member {
            id: row.try_get("id")?,
            name: row.try_get("name")?,
            role: role(row.try_get("role")?)?,
            scopes: None,
        };
        Ok((member, row.try_get("last_seen_at")?))
    })
    .transpose()
}

pub(super) async fn touch_session(
    db: &mut SqliteConnection,
    token_hash: &str,
    now: UtcTime,
) -> Result<(), sqlx::Error> {
    sqlx::query("UPDATE sessions SET last_seen_at = ? WHERE token_hash = ?")
        .bind(now)
        .bind(token_hash)
        .execute(db)
        .await?;
    Ok(())
}

pub(super) async fn delete_session(
    db: &mut SqliteConnection,
    token_hash: &str,
) -> Result<(), sqlx::Error> {
    sqlx::query("DELETE FROM sessions WHERE token_hash = ?")
        .bind(token_hash)
        .execute(db)
        .await?;
    Ok(())
}

pub(super) async fn delete_sessions_of(
    db: &mut SqliteConnection,
    member: MemberId,
) -> Result<(), sqlx::Error> {
    sqlx::query("DELETE FROM sessions WHERE member_id = ?")
        .bind(member)
        .execute(db)
        .await?;
    Ok(())
}

pub(super) async fn delete_expired_sessions(
    db: &mut SqliteConnection,
    now: UtcTime,
) -> Result<(), sqlx::Error> {
    sqlx::query("DELETE FROM sessions WHERE expires_at <= ?")
        .bind(now)
        .execute(db)
        .await?;
    Ok(())
}

pub(super) async fn insert_token(
    db: &mut SqliteConnection,
    token: &ApiToken,
    token_hash: &str,
) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO api_tokens (id, member_id, name, scopes, token_hash, created_at, expires_at)
         VALUES (?, ?, ?, ?, ?, ?, ?)",
    )
    .bind(token.id)
    .bind(token.member_id)
    .bind(&token.name)
    .bind(
        token
            .scopes
            .iter()
            .map(|s| s.key())
            .collect::<Vec<_>>()
            .join(" "),
    )
    .bind(token_hash)
    .bind(token.created_at)
    .bind(token.expires_at)
    .execute(db)
    .await?;
    Ok(())
}

pub(super) async fn tokens(db: &mut SqliteConnection) -> Result<Vec<ApiToken>, Error> {
    let rows = sqlx::query(
        "SELECT api_tokens.id, member_id, members.name AS member_name, api_tokens.name, scopes,
                api_tokens.created_at, expires_at, last_used_at, revoked_at
         FROM api_tokens JOIN members ON members.id = api_tokens.member_id
         ORDER BY api_tokens.created_at DESC",
    )
    .fetch_all(db)
    .await?;
    rows.iter().map(api_token).collect()
}

fn api_token(row: &SqliteRow) -> Result<ApiToken, Error> {
    Ok(ApiToken {
        id: row.try_get("id")?,
        member_id: row.try_get("member_id")?,
        member_name: row.try_get("member_name")?,
        name: row.try_get("name")?,
        scopes: scopes(row.try_get("scopes")?),
        created_at: row.try_get("created_at")?,
        expires_at: row.try_get("expires_at")?,
        last_used_at: row.try_get("last_used_at")?,
        revoked_at: row.try_get("revoked_at")?,
    })
}

pub(super) async fn find_token(
    db: &mut SqliteConnection,
    id: ApiTokenId,
) -> Result<Option<ApiToken>, Error> {
    let row = sqlx::query(
        "SELECT api_tokens.id, member_id, members.name AS member_name, api_tokens.name, scopes,
                api_tokens.created_at, expires_at, last_used_at, revoked_at
         FROM api_tokens JOIN members ON members.id = api_tokens.member_id
         WHERE api_tokens.id = ?",
    )
    .bind(id)
    .fetch_optional(db)
    .await?;
    row.as_ref().map(api_token).transpose()
}

pub(super) async fn revoke_token(
    db: &mut SqliteConnection,
    id: ApiTokenId,
    now: UtcTime,
) -> Result<(), sqlx::Error> {
    sqlx::query("UPDATE api_tokens SET revoked_at = ? WHERE id = ? AND revoked_at IS NULL")
        .bind(now)
        .bind(id)
        .execute(db)
        .await?;
    Ok(())
}

/// Who holds a living token.
pub(super) async fn token_holder(
    db: &mut SqliteConnection,
    token_hash: &str,
    now: UtcTime,
) -> Result<Option<(ApiTokenId, Member, Option<UtcTime>)>, Error> {
    let row = sqlx::query(
        "SELECT api_tokens.id AS token_id, members.id, members.name, members.role, scopes, last_used_at
         FROM api_tokens JOIN members ON members.id = api_tokens.member_id
         WHERE token_hash = ? AND expires_at > ? AND revoked_at IS NULL AND members.disabled_at IS NULL",
    )
    .bind(token_hash)
    .bind(now)
    .fetch_optional(db)
    .await?;
    row.map(|row| {
        let member = Member {
            id: row.try_get("id")?,
            name: row.try_get("name")?,
            role: role(row.try_get("role")?)?,
            scopes: Some(scopes(row.try_get("scopes")?)),
        };
        Ok((
            row.try_get("token_id")?,
            member,
            row.try_get("last_used_at")?,
        ))
    })
    .transpose()
}

pub(super) async fn touch_token(
    db: &mut SqliteConnection,
    id: ApiTokenId,
    now: UtcTime,
) -> Result<(), sqlx::Error> {
    sqlx::query("UPDATE api_tokens SET last_used_at = ? WHERE id = ?")
        .bind(now)
        .bind(id)
        .execute(db)
        .await?;
    Ok(())
}
