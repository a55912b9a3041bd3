//! Accounts; signing in and out, tablets and PINs, invitations and API tokens in files of
//! their own.

use base64ct::{Base64UrlUnpadded, Encoding};
use sha2::{Digest, Sha256};

use super::passwords::Passwords;
use super::{Account, Member, Permission, Place, Role, store};
use crate::db::Db;
use crate::error::{Error, taken};
use crate::id::{MemberId, UtcTime};
use crate::input::Problems;
use crate::record;
use crate::web::throttle::Throttle;

mod invitations;
mod sessions;
mod tablets;
mod tokens;

pub use invitations::{
    INVITATION_DAYS, accept, invitation, invitations, invite, revoke_invitation,
};
pub use sessions::{by_session, open_sessions, sign_in, sign_out, sign_out_everywhere};
pub use tablets::{
    by_cookie, enrol, has_pin, names, remove_pin, revoke_tablet, second_people, set_pin,
    sign_in_with_pin, tablet_idle, tablets, vouch,
};
pub use tokens::{TOKEN_DAYS, by_token, create_token, revoke_token, tokens};

/// What stands between a secret that is typed and what it opens.
#[derive(Clone, Copy, Debug)]
pub struct Gate<'a> {
    /// The hashing thread.
    pub passwords: &'a Passwords,
    /// The limits on guessing.
    pub throttle: &'a Throttle,
    /// Where the secret was typed.
    pub place: &'a Place,
}

/// Shortest password, characters.
pub const PASSWORD_LEAST: usize = 10;

/// The secret of a session or token: shown once, stored only as its hash.
pub struct Secret(pub String);

impl Secret {
    pub(super) fn new() -> Result<Self, Error> {
        let mut bytes = [0_u8; 32];
        getrandom::fill(&mut bytes)
            .map_err(|error| Error::internal("No random numbers could be had", error))?;
        Ok(Self(Base64UrlUnpadded::encode_string(&bytes)))
    }

    fn hash(&self) -> String {
        hash_secret(&self.0)
    }
}

fn hash_secret(secret: &str) -> String {
    Base64UrlUnpadded::encode_string(&Sha256::digest(secret.as_bytes()))
}

/// A new account, checked.
#[derive(Clone, Debug)]
pub struct NewAccount {
    login: String,
    name: String,
    role: Role,
    password: String,
}

impl NewAccount {
    /// Checks every field; `problems` receives what is wrong.
    pub fn check(
        login: &str,
        name: &str,
        role: &str,
        password: &str,
        problems: &mut Problems,
    ) -> Option<Self> {
        let login = problems
            .text("login", login, 60)
            .map(|login| login.to_lowercase());
        let login = login.filter(|login| {
            let good = login
                .chars()
                .all(|c| c.is_alphanumeric() || matches!(c, '.' | '-' | '_' | '@' | '+'));
            if !good {
                problems.add("login", "Use letters, digits and . - _ @ + only.");
            }
            good
        });
        let name = problems.text("name", name, 80);
        let role = problems.choice("role", role, Role::from_key);
        let password = check_password(password, problems);
        Some(Self {
            login: login?,
            name: name?,
            role: role?,
            password: password?,
        })
    }
}

fn check_password(password: &str, problems: &mut Problems) -> Option<String> {
    let length = password.chars().count();
    if length < PASSWORD_LEAST {
        problems.add(
            "password",
            format!("At least {PASSWORD_LEAST} characters; a few words in a row are easy to keep."),
        );
        None
    } else if length > 200 {
        problems.add("password", "At most 200 characters.");
        None
    } else {
        Some(password.to_owned())
    }
}

/// Whether nobody has an account yet.
pub async fn nobody_yet(db: &Db) -> Result<bool, Error> {
    Ok(store::count(&mut *db.reader().await?).await? == 0)
}

/// Makes the very first account, a manager. The caller has checked the one-time token.
pub async fn create_first(
    db: &Db,
    passwords: &Passwords,
    new: NewAccount,
) -> Result<Account, Error> {
    let hash = passwords.hash(&new.password).await?;
    let mut tx = db.begin().await?;
    if store::count(&mut tx).await? > 0 {
        return Err(Error::Conflict(
            "The first account exists already. Sign in.".into(),
        ));
    }
    let account = Account {
        id: MemberId::new(),
        login: new.login,
        name: new.name,
        role: Role::Manager,
        created_at: UtcTime::now(),
        disabled_at: None,
    };
    store::insert(&mut tx, &account, &hash).await?;
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

/// Makes an account.
pub async fn create(
    db: &Db,
    by: &Member,
    passwords: &Passwords,
    new: NewAccount,
) -> Result<Account, Error> {
    by.may(Permission::KeepPeople)?;
    let hash = passwords.hash(&new.password).await?;
    let account = Account {
        id: MemberId::new(),
        login: new.login,
        name: new.name,
        role: new.role,
        created_at: UtcTime::now(),
        disabled_at: None,
    };
    let mut tx = db.begin().await?;
    store::insert(&mut tx, &account, &hash)
        .await
        .map_err(|error| {
            taken(
                error,
                "login",
                format!("Somebody signs in as “{}” already.", account.login),
            )
        })?;
    record::append(
        &mut tx,
        by,
        record::Change::created("account", account.id, &account.name, &describe(&account)),
    )
    .await?;
    tx.commit().await?;
    Ok(account)
}

/// Changes somebody's name or role, or closes or reopens the account.
pub async fn revise(
    db: &Db,
    by: &Member,
    id: MemberId,
    name: String,
    role: Role,
    open: bool,
) -> Result<Account, Error> {
    by.may(Permission::KeepPeople)?;
    let mut tx = db.begin().await?;
    let before = store::find(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("account"))?;
    let disabled_at = if open {
        None
    } else {
        before.disabled_at.or(Some(UtcTime::now()))
    };
    let after = Account {
        name,
        role,
        disabled_at,
        ..before.clone()
    };
    store::update(&mut tx, &after).await?;
    if store::count_active_managers(&mut tx).await? == 0 {
        return Err(Error::Conflict(
            "This is the last manager. Make somebody else a manager first.".into(),
        ));
    }
    if !open {
        store::sessions::delete_of_member(&mut tx, id).await?;
    }
    record::append(
        &mut tx,
        by,
        record::Change::changed(
            "account",
            id,
            &after.name,
            &describe(&before),
            &describe(&after),
        ),
    )
    .await?;
    tx.commit().await?;
    Ok(after)
}

/// Sets a password: one's own with the present one, or as a manager anybody's.
/// Every session of that account ends.
pub async fn change_password(
    db: &Db,
    by: &Member,
    gate: Gate<'_>,
    id: MemberId,
    present: &str,
    wanted: &str,
) -> Result<(), Error> {
    let mut problems = Problems::new();
    let wanted = check_password(wanted, &mut problems);
    problems.finish()?;
    let wanted = wanted.unwrap_or_default();
    own_or_keeper(db, by, gate, id, present).await?;
    let hash = gate.passwords.hash(&wanted).await?;
    let mut tx = db.begin().await?;
    let account = store::find(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("account"))?;
    store::set_hash(&mut tx, id, &hash).await?;
    store::sessions::delete_of_member(&mut tx, id).await?;
    record::append(
        &mut tx,
        by,
        record::Change::event("password changed", "account", id, &account.name),
    )
    .await?;
    tx.commit().await?;
    Ok(())
}

/// Lets through the owner of an account who types the present password, and whoever keeps
/// the accounts.
async fn own_or_keeper(
    db: &Db,
    by: &Member,
    gate: Gate<'_>,
    id: MemberId,
    present: &str,
) -> Result<(), Error> {
    if by.id != id || by.scopes.is_some() {
        return by.may(Permission::KeepPeople);
    }
    let account = find(db, by, id).await?;
    gate.throttle.password(&account.login, gate.place.address)?;
    let known = store::by_login(&mut *db.reader().await?, &account.login).await?;
    let hash = known.map(|(_, hash)| hash).unwrap_or_default();
    if gate.passwords.verify(present, &hash).await? {
        Ok(())
    } else {
        Err(Error::field(
            "present",
            "This is not your present password.",
        ))
    }
}

/// Every account.
pub async fn list(db: &Db, by: &Member) -> Result<Vec<Account>, Error> {
    by.may(Permission::KeepPeople)?;
    store::list(&mut *db.reader().await?).await
}

/// One account: one's own, or as a manager anybody's.
pub async fn find(db: &Db, by: &Member, id: MemberId) -> Result<Account, Error> {
    if by.id != id {
        by.may(Permission::KeepPeople)?;
    }
    store::find(&mut *db.reader().await?, id)
        .await?
        .ok_or(Error::NotFound("account"))
}

fn describe(account: &Account) -> serde_json::Value {
    serde_json::json!({
        "login": account.login,
        "name": account.name,
        "role": account.role.key(),
        "disabled_at": account.disabled_at,
    })
}
