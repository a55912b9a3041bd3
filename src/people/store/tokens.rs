//! SQL for API tokens.

use sqlx::{Row, SqliteConnection, sqlite::SqliteRow};

use super::role;
use crate::error::Error;
use crate::id::{ApiTokenId, UtcTime};
use crate::people::{ApiToken, Member, Scope};

fn scopes(text: &str) -> Vec<Scope> {
    text.split(' ').filter_map(Scope::from_key).collect()
}

pub(in crate::people) async fn insert(
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

pub(in crate::people) async fn list(db: &mut SqliteConnection) -> Result<Vec<ApiToken>, Error> {
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

pub(in crate::people) async fn find(
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

pub(in crate::people) async fn revoke(
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
pub(in crate::people) async fn holder(
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
            by_pin: false,
        };
        Ok((
            row.try_get("token_id")?,
            member,
            row.try_get("last_used_at")?,
        ))
    })
    .transpose()
}

pub(in crate::people) async fn touch(
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
