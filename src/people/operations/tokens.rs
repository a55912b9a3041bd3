//! API tokens.

use super::{Secret, hash_secret};
use crate::db::Db;
use crate::error::Error;
use crate::id::{ApiTokenId, UtcTime};
use crate::people::{ApiToken, Member, Permission, Scope, store};
use crate::record;

/// Longest life of an API token, days.
pub const TOKEN_DAYS: i64 = 365;

/// Who holds this API token, if it is still good.
pub async fn by_token(db: &Db, secret: &str) -> Result<Option<Member>, Error> {
    let now = UtcTime::now();
    let found = store::tokens::holder(&mut *db.reader().await?, &hash_secret(secret), now).await?;
    let Some((id, member, last_used)) = found else {
        return Ok(None);
    };
    if last_used.is_none_or(|last| now.seconds_since(last) > 60) {
        let mut tx = db.begin_unkeyed().await?;
        store::tokens::touch(&mut tx, id, now).await?;
        tx.commit().await?;
    }
    Ok(Some(member))
}

/// Makes an API token for oneself. The secret is returned once.
pub async fn create_token(
    db: &Db,
    by: &Member,
    name: String,
    scopes: Vec<Scope>,
    days: i64,
) -> Result<(ApiToken, Secret), Error> {
    by.may(Permission::KeepPeople)?;
    let now = UtcTime::now();
    let token = ApiToken {
        id: ApiTokenId::new(),
        member_id: by.id,
        member_name: by.name.clone(),
        name,
        scopes,
        created_at: now,
        expires_at: now.plus_seconds(days.clamp(1, TOKEN_DAYS) * 24 * 3600),
        last_used_at: None,
        revoked_at: None,
    };
    let secret = Secret::new()?;
    let mut tx = db.begin().await?;
    store::tokens::insert(&mut tx, &token, &secret.hash()).await?;
    record::append(
        &mut tx,
        by,
        record::Change::created("API token", token.id, &token.name, &describe_token(&token))
            .about("account", by.id),
    )
    .await?;
    tx.commit().await?;
    Ok((token, secret))
}

/// Every API token.
pub async fn tokens(db: &Db, by: &Member) -> Result<Vec<ApiToken>, Error> {
    by.may(Permission::KeepPeople)?;
    store::tokens::list(&mut *db.reader().await?).await
}

/// Ends an API token at once.
pub async fn revoke_token(db: &Db, by: &Member, id: ApiTokenId) -> Result<(), Error> {
    by.may(Permission::KeepPeople)?;
    let mut tx = db.begin().await?;
    let token = store::tokens::find(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("API token"))?;
    store::tokens::revoke(&mut tx, id, UtcTime::now()).await?;
    record::append(
        &mut tx,
        by,
        record::Change::event("revoked", "API token", id, &token.name),
    )
    .await?;
    tx.commit().await?;
    Ok(())
}

fn describe_token(token: &ApiToken) -> serde_json::Value {
    serde_json::json!({
        "name": token.name,
        "scopes": token.scopes.iter().map(|s| s.key()).collect::<Vec<_>>(),
        "expires_at": token.expires_at,
    })
}
