//! Tablets that several people share, and the PINs that open them.

use super::sessions::{self, NOBODY};
use super::{Gate, Secret, hash_secret, own_or_keeper};
use crate::brewery;
use crate::db::Db;
use crate::error::{Error, taken};
use crate::id::{MemberId, TabletId, UtcTime};
use crate::people::{Account, Member, Permission, Person, Place, Tablet, store};
use crate::record;

/// Fewest digits of a PIN.
const PIN_LEAST: usize = 6;
/// Most digits of a PIN.
const PIN_MOST: usize = 12;

/// How long a tablet may lie unused before it falls back to the names, s.
pub async fn tablet_idle(db: &Db) -> Result<i64, Error> {
    let idle = brewery::operations::settings(db).await?.tablet_idle;
    Ok(i64::try_from(idle.as_secs()).unwrap_or(i64::MAX))
}

/// Enrols the device at this place. The secret goes into its cookie and nowhere else.
pub async fn enrol(
    db: &Db,
    by: &Member,
    place: &Place,
    name: String,
) -> Result<(Tablet, Secret), Error> {
    by.may(Permission::KeepPeople)?;
    if let Some(tablet) = &place.tablet {
        return Err(Error::Conflict(format!(
            "This device is enrolled already, as “{}”. Revoke that first",
            tablet.name
        )));
    }
    let now = UtcTime::now();
    let tablet = Tablet {
        id: TabletId::new(),
        name,
        enrolled_by: by.name.clone(),
        enrolled_at: now,
        last_seen_at: now,
        revoked_at: None,
    };
    let secret = Secret::new()?;
    let mut tx = db.begin().await?;
    store::tablets::insert(&mut tx, &tablet, &secret.hash(), by.id)
        .await
        .map_err(|error| {
            let message = format!("A tablet called “{}” is enrolled already.", tablet.name);
            taken(error, "tablet_name", message)
        })?;
    let after = serde_json::json!({"name": tablet.name, "device": place.device});
    let change = record::Change::of(
        "enrolled",
        "tablet",
        tablet.id,
        &tablet.name,
        None,
        Some(after),
    );
    record::append(&mut tx, by, change).await?;
    tx.commit().await?;
    Ok((tablet, secret))
}

/// The tablet in use whose cookie holds this secret.
pub async fn by_cookie(db: &Db, secret: &str) -> Result<Option<Tablet>, Error> {
    let now = UtcTime::now();
    let found = store::tablets::by_secret(&mut *db.reader().await?, &hash_secret(secret)).await?;
    if let Some(tablet) = &found
        && now.seconds_since(tablet.last_seen_at) > 300
    {
        let mut tx = db.begin_unkeyed().await?;
        store::tablets::touch(&mut tx, tablet.id, now).await?;
        tx.commit().await?;
    }
    Ok(found)
}

/// Every tablet, those revoked last.
pub async fn tablets(db: &Db, by: &Member) -> Result<Vec<Tablet>, Error> {
    by.may(Permission::KeepPeople)?;
    store::tablets::list(&mut *db.reader().await?).await
}

/// Ends a tablet: its cookie opens nothing any more, and whoever is signed in on it is
/// signed out at once.
pub async fn revoke_tablet(db: &Db, by: &Member, id: TabletId) -> Result<(), Error> {
    by.may(Permission::KeepPeople)?;
    let mut tx = db.begin().await?;
    let tablet = store::tablets::find(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("tablet"))?;
    store::tablets::revoke(&mut tx, id, UtcTime::now()).await?;
    store::sessions::delete_of_tablet(&mut tx, id).await?;
    record::append(
        &mut tx,
        by,
        record::Change::event("revoked", "tablet", id, &tablet.name),
    )
    .await?;
    tx.commit().await?;
    Ok(())
}

/// Whom a tablet shows by name: everybody who has a PIN and an open account.
pub async fn names(db: &Db) -> Result<Vec<Person>, Error> {
    store::tablets::persons(&mut *db.reader().await?, true).await
}

/// Who can stand by as the second person at this place: everybody else, on a tablet only
/// those who have a PIN.
pub async fn second_people(db: &Db, by: &Member, place: &Place) -> Result<Vec<Person>, Error> {
    let mut people =
        store::tablets::persons(&mut *db.reader().await?, place.tablet.is_some()).await?;
    people.retain(|person| person.id != by.id);
    Ok(people)
}

/// Whether somebody has a PIN: oneself, or as a manager anybody.
pub async fn has_pin(db: &Db, by: &Member, id: MemberId) -> Result<bool, Error> {
    if by.id != id {
        by.may(Permission::KeepPeople)?;
    }
    Ok(store::tablets::has_pin(&mut *db.reader().await?, id).await?)
}

/// Sets a PIN: one's own with the present password, or as a manager anybody's. What the
/// PIN before it opened ends.
pub async fn set_pin(
    db: &Db,
    by: &Member,
    gate: Gate<'_>,
    id: MemberId,
    present: &str,
    pin: &str,
) -> Result<(), Error> {
    if by.id != id {
        by.may(Permission::KeepPeople)?;
    }
    let pin = pin.trim();
    if let Some(message) = weakness(pin) {
        return Err(Error::field("pin", message));
    }
    own_or_keeper(db, by, gate, id, present).await?;
    let hash = gate.passwords.hash(pin).await?;
    let mut tx = db.begin().await?;
    let account = open_account(&mut tx, id).await?;
    let before = store::tablets::set_pin(&mut tx, id, &hash, UtcTime::now()).await?;
    store::sessions::delete_by_pin(&mut tx, id).await?;
    let done = if before { "PIN changed" } else { "PIN set" };
    record::append(
        &mut tx,
        by,
        record::Change::event(done, "account", id, &account.name),
    )
    .await?;
    tx.commit().await?;
    Ok(())
}

async fn open_account(tx: &mut sqlx::SqliteConnection, id: MemberId) -> Result<Account, Error> {
    let account = store::find(tx, id)
        .await?
        .ok_or(Error::NotFound("account"))?;
    if account.disabled_at.is_some() {
        return Err(Error::Conflict(format!(
            "The account of {} is closed. Open it first",
            account.name
        )));
    }
    Ok(account)
}

/// Removes a PIN: one's own, or as a manager anybody's. Its owner leaves the names on the
/// tablets.
pub async fn remove_pin(db: &Db, by: &Member, id: MemberId) -> Result<(), Error> {
    if by.id != id {
        by.may(Permission::KeepPeople)?;
    }
    let mut tx = db.begin().await?;
    let account = store::find(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("account"))?;
    store::tablets::remove_pin(&mut tx, id).await?;
    store::sessions::delete_by_pin(&mut tx, id).await?;
    record::append(
        &mut tx,
        by,
        record::Change::event("PIN removed", "account", id, &account.name),
    )
    .await?;
    tx.commit().await?;
    Ok(())
}

/// Why a PIN is none, or one that is guessed first.
fn weakness(pin: &str) -> Option<String> {
    let digits = pin.as_bytes();
    if !digits.iter().all(u8::is_ascii_digit) || !(PIN_LEAST..=PIN_MOST).contains(&digits.len()) {
        return Some(format!("Use {PIN_LEAST} to {PIN_MOST} digits."));
    }
    // Each digit from the one before, around the clock: 0 for the same digit, 1 and 9 for runs.
    let mut steps = digits.windows(2).map(|pair| (pair[1] + 10 - pair[0]) % 10);
    let first = steps.next().unwrap_or_default();
    if matches!(first, 0 | 1 | 9) && steps.all(|step| step == first) {
        return Some(
            "One digit over and over, or digits in a row, are guessed first. Choose others.".into(),
        );
    }
    None
}

/// Checks a PIN on an enrolled tablet and begins a session there, in place of the one whose
/// secret came with the request.
pub async fn sign_in_with_pin(
    db: &Db,
    gate: Gate<'_>,
    previous: Option<&str>,
    who: MemberId,
    pin: &str,
) -> Result<Secret, Error> {
    if !pin_fits(db, gate, who, pin).await? {
        return Err(Error::field("pin", "This is not the PIN of that name."));
    }
    sessions::begin(db, gate.place, previous, who, true).await
}

async fn pin_fits(db: &Db, gate: Gate<'_>, who: MemberId, pin: &str) -> Result<bool, Error> {
    let Some(tablet) = &gate.place.tablet else {
        return Err(Error::Forbidden(
            "A PIN opens Leat on an enrolled tablet only. Sign in with your password.".into(),
        ));
    };
    gate.throttle.pin(who, tablet.id, gate.place.address)?;
    let hash = store::tablets::pin_hash(&mut *db.reader().await?, who).await?;
    let known = hash.is_some();
    let hash = hash.unwrap_or_else(|| NOBODY.into());
    Ok(gate.passwords.verify(pin.trim(), &hash).await? && known)
}

/// Proves that a second person stands by: with their PIN on an enrolled tablet, with their
/// password elsewhere. It is somebody else than who is signed in, with an open account. What
/// is wrong is told of the fields `who` and `secret`. Call it before the transaction that
/// needs it.
pub async fn vouch(
    db: &Db,
    by: &Member,
    gate: Gate<'_>,
    who: MemberId,
    secret: &str,
) -> Result<Member, Error> {
    if who == by.id {
        return Err(Error::field(
            "who",
            "The second person is somebody else than who is signed in.",
        ));
    }
    let account = store::find(&mut *db.reader().await?, who).await?;
    let Some(account) = account.filter(|account| account.disabled_at.is_none()) else {
        return Err(Error::field("who", "Choose somebody with an open account."));
    };
    let by_pin = gate.place.tablet.is_some();
    let fits = if by_pin {
        pin_fits(db, gate, who, secret).await?
    } else {
        gate.throttle.password(&account.login, gate.place.address)?;
        let known = store::by_login(&mut *db.reader().await?, &account.login).await?;
        let hash = known.map(|(_, hash)| hash).unwrap_or_default();
        gate.passwords.verify(secret, &hash).await?
    };
    if !fits {
        let kind = if by_pin { "PIN" } else { "password" };
        let message = format!("This is not the {kind} of {}.", account.name);
        return Err(Error::field("secret", message));
    }
    Ok(Member {
        id: account.id,
        name: account.name,
        role: account.role,
        scopes: None,
        by_pin,
    })
}

#[cfg(test)]
mod tests {
    use super::weakness;

    #[test]
    fn pins_that_are_guessed_first_are_refused() {
        for weak in [
            "",
            "12345",
            "000000",
            "777777",
            "123456",
            "890123",
            "654321",
            "210987",
            "12345a",
            "1234567890123",
            "١٢٣٤٥٦",
        ] {
            assert!(weakness(weak).is_some(), "{weak}");
        }
        for good in ["482913", "112233", "123457", "0044118822"] {
            assert_eq!(weakness(good), None, "{good}");
        }
    }
}
