//! Signing in and out: sessions.

use super::{Gate, Secret, find, hash_secret, tablets};
use crate::db::Db;
use crate::error::Error;
use crate::id::{MemberId, TabletId, UtcTime};
use crate::people::store::{self, sessions::NewSession};
use crate::people::{Account, Member, Permission, Place, Session};
use crate::record;
use crate::web::repeat;

/// A session ends after this long without a request, s: twelve hours, a long brew day.
/// On a tablet it is [`tablets::tablet_idle`].
const IDLE_SECONDS: i64 = 12 * 3600;
/// A session ends after this long in any case, s: fourteen days.
const SESSION_SECONDS: i64 = 14 * 24 * 3600;
/// A hash that no password has: checked where there is none, so that the time taken
/// tells nothing.
pub(super) const NOBODY: &str = "$argon2id$v=19$m=19456,t=2,p=1$bGVhdC1sZWF0LWxlYXQ$q3JwvHfVYJ1YbA4Yb3gqk3o8kq2l5k9yq3Zb0V5fQ8E";

/// Checks a password and begins a session, in place of the one whose secret came with
/// the request. The same answer, after the same work, for an unknown login and a wrong
/// password.
pub async fn sign_in(
    db: &Db,
    gate: Gate<'_>,
    previous: Option<&str>,
    login: &str,
    password: &str,
) -> Result<(Account, Secret), Error> {
    gate.throttle.password(login, gate.place.address)?;
    let known = store::by_login(&mut *db.reader().await?, &login.trim().to_lowercase()).await?;
    let hash = known.as_ref().map_or(NOBODY, |(_, hash)| hash.as_str());
    let fits = gate.passwords.verify(password, hash).await?;
    let account = known
        .map(|(account, _)| account)
        .filter(|account| fits && account.disabled_at.is_none());
    let Some(account) = account else {
        return Err(Error::field(
            "password",
            "This name and password do not belong together.",
        ));
    };
    let secret = begin(db, gate.place, previous, account.id, false).await?;
    Ok((account, secret))
}

/// Begins a session and ends the one that the same browser held before: a secret from
/// before signing in is never good after it.
pub(super) async fn begin(
    db: &Db,
    place: &Place,
    previous: Option<&str>,
    member: MemberId,
    by_pin: bool,
) -> Result<Secret, Error> {
    let secret = Secret::new()?;
    let now = UtcTime::now();
    let mut tx = db.begin().await?;
    store::sessions::delete_expired(&mut tx, now, now.plus_seconds(-IDLE_SECONDS)).await?;
    repeat::forget_old(&mut tx).await?;
    if let Some(previous) = previous {
        store::sessions::delete(&mut tx, &hash_secret(previous)).await?;
    }
    let new = NewSession {
        secret_hash: &secret.hash(),
        member,
        tablet: place.tablet.as_ref().map(|tablet| tablet.id),
        by_pin,
        device: &place.device,
        now,
        expires: now.plus_seconds(SESSION_SECONDS),
    };
    store::sessions::insert(&mut tx, &new).await?;
    tx.commit().await?;
    Ok(secret)
}

/// Ends a session.
pub async fn sign_out(db: &Db, secret: &str) -> Result<(), Error> {
    let mut tx = db.begin().await?;
    store::sessions::delete(&mut tx, &hash_secret(secret)).await?;
    tx.commit().await?;
    Ok(())
}

/// Who holds this session, if it is still good where it is used: at the tablet it was begun
/// on, or away from any.
pub async fn by_session(
    db: &Db,
    secret: &str,
    tablet: Option<TabletId>,
) -> Result<Option<Member>, Error> {
    let now = UtcTime::now();
    let hash = hash_secret(secret);
    let idle = match tablet {
        Some(_) => tablets::tablet_idle(db).await?,
        None => IDLE_SECONDS,
    };
    let found = store::sessions::holder(
        &mut *db.reader().await?,
        &hash,
        tablet,
        now,
        now.plus_seconds(-idle),
    )
    .await?;
    let Some((member, last_seen)) = found else {
        return Ok(None);
    };
    // Written at most once in five minutes, or a tenth of what is idle on a tablet, so that
    // reading pages does not write.
    if now.seconds_since(last_seen) > (idle / 10).min(300) {
        let mut tx = db.begin_unkeyed().await?;
        store::sessions::touch(&mut tx, &hash, now).await?;
        tx.commit().await?;
    }
    Ok(Some(member))
}

/// The open sessions of one person; `this_one` is the secret of the one that asks.
pub async fn open_sessions(
    db: &Db,
    by: &Member,
    id: MemberId,
    this_one: &str,
) -> Result<Vec<Session>, Error> {
    let account = find(db, by, id).await?;
    let now = UtcTime::now();
    let tablet_idle = tablets::tablet_idle(db).await?;
    store::sessions::of_member(
        &mut *db.reader().await?,
        account.id,
        &hash_secret(this_one),
        now,
        now.plus_seconds(-IDLE_SECONDS),
        now.plus_seconds(-tablet_idle),
    )
    .await
}

/// Ends every session of one person: one's own, or as a manager anybody's.
pub async fn sign_out_everywhere(db: &Db, by: &Member, id: MemberId) -> Result<(), Error> {
    if by.id != id {
        by.may(Permission::KeepPeople)?;
    }
    let mut tx = db.begin().await?;
    let account = store::find(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("account"))?;
    store::sessions::delete_of_member(&mut tx, id).await?;
    record::append(
        &mut tx,
        by,
        record::Change::event("signed out everywhere", "account", id, &account.name),
    )
    .await?;
    tx.commit().await?;
    Ok(())
}
