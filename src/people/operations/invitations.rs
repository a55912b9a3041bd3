//! Invitations: an account that its owner makes, by a link that is good once.

use super::{NewAccount, Secret, describe, hash_secret};
use crate::db::Db;
use crate::error::{Error, taken};
use crate::id::{InvitationId, MemberId, UtcTime};
use crate::people::passwords::Passwords;
use crate::people::{Account, Invitation, Member, Permission, Role, store};
use crate::record;

/// How long an invitation is good, days.
pub const INVITATION_DAYS: i64 = 7;

/// Invites somebody. The secret is returned once; it goes into the link.
pub async fn invite(
    db: &Db,
    by: &Member,
    name: String,
    role: Role,
) -> Result<(Invitation, Secret), Error> {
    by.may(Permission::KeepPeople)?;
    let now = UtcTime::now();
    let invitation = Invitation {
        id: InvitationId::new(),
        name,
        role,
        created_at: now,
        expires_at: now.plus_seconds(INVITATION_DAYS * 24 * 3600),
    };
    let secret = Secret::new()?;
    let mut tx = db.begin().await?;
    store::invitations::insert(&mut tx, &invitation, &secret.hash(), by.id).await?;
    let after = serde_json::json!({
        "name": invitation.name,
        "role": invitation.role.key(),
        "expires_at": invitation.expires_at,
    });
    record::append(
        &mut tx,
        by,
        record::Change::created("invitation", invitation.id, &invitation.name, &after),
    )
    .await?;
    tx.commit().await?;
    Ok((invitation, secret))
}

/// The invitations that can still be taken up.
pub async fn invitations(db: &Db, by: &Member) -> Result<Vec<Invitation>, Error> {
    by.may(Permission::KeepPeople)?;
    store::invitations::open(&mut *db.reader().await?, UtcTime::now()).await
}

/// Takes an invitation back.
pub async fn revoke_invitation(db: &Db, by: &Member, id: InvitationId) -> Result<(), Error> {
    by.may(Permission::KeepPeople)?;
    let now = UtcTime::now();
    let mut tx = db.begin().await?;
    let invitation = store::invitations::find(&mut tx, id, now)
        .await?
        .ok_or(Error::NotFound("invitation"))?;
    store::invitations::revoke(&mut tx, id, now).await?;
    record::append(
        &mut tx,
        by,
        record::Change::event("revoked", "invitation", id, &invitation.name),
    )
    .await?;
    tx.commit().await?;
    Ok(())
}

fn over() -> Error {
    Error::Forbidden(
        "This invitation was used, taken back, or is too old. Ask a manager for another one."
            .into(),
    )
}

/// The invitation that this secret belongs to, while it can be taken up.
pub async fn invitation(db: &Db, secret: &str) -> Result<Invitation, Error> {
    let hash = hash_secret(secret);
    store::invitations::by_secret(&mut *db.reader().await?, &hash, UtcTime::now())
        .await?
        .ok_or_else(over)
}

/// Makes the account of whoever was invited, once. `new` holds the name and role of the
/// invitation.
pub async fn accept(
    db: &Db,
    passwords: &Passwords,
    secret: &str,
    new: NewAccount,
) -> Result<Account, Error> {
    invitation(db, secret).await?;
    let hash = passwords.hash(&new.password).await?;
    let mut tx = db.begin().await?;
    let invitation = store::invitations::by_secret(&mut tx, &hash_secret(secret), UtcTime::now())
        .await?
        .ok_or_else(over)?;
    let account = Account {
        id: MemberId::new(),
        login: new.login,
        name: invitation.name,
        role: invitation.role,
        created_at: UtcTime::now(),
        disabled_at: None,
    };
    store::insert(&mut tx, &account, &hash)
        .await
        .map_err(|error| {
            let message = format!("Somebody signs in as “{}” already.", account.login);
            taken(error, "login", message)
        })?;
    store::invitations::take_up(&mut tx, invitation.id, account.id).await?;
    let by = Member {
        id: account.id,
        name: account.name.clone(),
        role: account.role,
        scopes: None,
        by_pin: false,
    };
    record::append(
        &mut tx,
        &by,
        record::Change::created("account", account.id, &account.name, &describe(&account)),
    )
    .await?;
    tx.commit().await?;
    Ok(account)
}
