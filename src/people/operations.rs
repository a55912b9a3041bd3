//! Signing in and out, accounts, API tokens.

use base64ct::{Base64UrlUnpadded, Encoding};
use sha2::{Digest, Sha256};

use super::passwords::Passwords;
use super::{Account, ApiToken, Member, Permission, Role, Scope, store};
use crate::db::Db;
use crate::error::{Error, taken};
use crate::id::{ApiTokenId, MemberId, UtcTime};
use crate::input::Problems;
use crate::record;
use crate::web::repeat;

/// A session ends after this long without a request, s: twelve hours, a long brew day.
const IDLE_SECONDS: i64 = 12 * 3600;
/// A session ends after this long in any case, s: fourteen days.
const SESSION_SECONDS: i64 = 14 * 24 * 3600;
/// Longest life of an API token, days.
pub const TOKEN_DAYS: i64 = 365;
/// Shortest password, characters.
pub const PASSWORD_LEAST: usize = 10;

/// The secret of a session or token: shown once, stored only as its hash.
pub struct Secret(pub String);

impl Secret {
    fn new() -> Result<Self, Error> {
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
        store::delete_sessions_of(&mut tx, id).await?;
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
    passwords: &Passwords,
    id: MemberId,
    present: &str,
    wanted: &str,
) -> Result<(), Error> {
    let mut problems = Problems::new();
    let wanted = check_password(wanted, &mut problems);
    problems.finish()?;
    let wanted = wanted.unwrap_or_default();
    if by.id == id && by.scopes.is_none() {
        let account = find(db, by, id).await?;
        let known = store::by_login(&mut *db.reader().await?, &account.login).await?;
        let hash = known.map(|(_, hash)| hash).unwrap_or_default();
        if !passwords.verify(present, &hash).await? {
            return Err(Error::field(
                "present",
                "This is not your present password.",
            ));
        }
    } else {
        by.may(Permission::KeepPeople)?;
    }
    let hash = passwords.hash(&wanted).await?;
    let mut tx = db.begin().await?;
    let account = store::find(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("account"))?;
    store::set_hash(&mut tx, id, &hash).await?;
    store::delete_sessions_of(&mut tx, id).await?;
    record::append(
        &mut tx,
        by,
        record::Change::event("password changed", "account", id, &account.name),
    )
    .await?;
    tx.commit().await?;
    Ok(())
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

/// Checks a password and begins a session. The same answer, after the same work,
/// for an unknown login and a wrong password.
pub async fn sign_in(
    db: &Db,
    passwords: &Passwords,
    login: &str,
    password: &str,
) -> Result<(Account, Secret), Error> {
    const NOBODY: &str = "$argon2id$v=19$m=19456,t=2,p=1$bGVhdC1sZWF0LWxlYXQ$q3JwvHfVYJ1YbA4Yb3gqk3o8kq2l5k9yq3Zb0V5fQ8E";
    let known = store::by_login(&mut *db.reader().await?, &login.trim().to_lowercase()).await?;
    let hash = known.as_ref().map_or(NOBODY, |(_, hash)| hash.as_str());
    let fits = passwords.verify(password, hash).await?;
    let account = known
        .map(|(account, _)| account)
        .filter(|account| fits && account.disabled_at.is_none());
    let Some(account) = account else {
        return Err(Error::field(
            "password",
            "This name and password do not belong together.",
        ));
    };
    let secret = Secret::new()?;
    let now = UtcTime::now();
    let mut tx = db.begin().await?;
    store::delete_expired_sessions(&mut tx, now).await?;
    repeat::forget_old(&mut tx).await?;
    store::insert_session(
        &mut tx,
        &secret.hash(),
        account.id,
        now,
        now.plus_seconds(SESSION_SECONDS),
    )
    .await?;
    tx.commit().await?;
    Ok((account, secret))
}

/// Ends a session.
pub async fn sign_out(db: &Db, secret: &str) -> Result<(), Error> {
    let mut tx = db.begin().await?;
    store::delete_session(&mut tx, &hash_secret(secret)).await?;
    tx.commit().await?;
    Ok(())
}

/// Who holds this session, if it is still good.
pub async fn by_session(db: &Db, secret: &str) -> Result<Option<Member>, Error> {
    let now = UtcTime::now();
    let hash = hash_secret(secret);
    let found = store::session(
        &mut *db.reader().await?,
        &hash,
        now,
        now.plus_seconds(-IDLE_SECONDS),
    )
    .await?;
    let Some((member, last_seen)) = found else {
        return Ok(None);
    };
    // Written at most once in five minutes, so that reading pages does not write.
    if now.seconds_since(last_seen) > 300 {
        let mut tx = db.begin_unkeyed().await?;
        store::touch_session(&mut tx, &hash, now).await?;
        tx.commit().await?;
    }
    Ok(Some(member))
}

/// Who holds this API token, if it is still good.
pub async fn by_token(db: &Db, secret: &str) -> Result<Option<Member>, Error> {
    let now = UtcTime::now();
    let found = store::token_holder(&mut *db.reader().await?, &hash_secret(secret), now).await?;
    let Some((id, member, last_used)) = found else {
        return Ok(None);
    };
    if last_used.is_none_or(|last| now.seconds_since(last) > 60) {
        let mut tx = db.begin_unkeyed().await?;
        store::touch_token(&mut tx, id, now).await?;
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
    store::insert_token(&mut tx, &token, &secret.hash()).await?;
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
    store::tokens(&mut *db.reader().await?).await
}

/// Ends an API token at once.
pub async fn revoke_token(db: &Db, by: &Member, id: ApiTokenId) -> Result<(), Error> {
    by.may(Permission::KeepPeople)?;
    let mut tx = db.begin().await?;
    let token = store::find_token(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("API token"))?;
    store::revoke_token(&mut tx, id, UtcTime::now()).await?;
    record::append(
        &mut tx,
        by,
        record::Change::event("revoked", "API token", id, &token.name),
    )
    .await?;
    tx.commit().await?;
    Ok(())
}

fn describe(account: &Account) -> serde_json::Value {
    serde_json::json!({
        "login": account.login,
        "name": account.name,
        "role": account.role.key(),
        "disabled_at": account.disabled_at,
    })
}

fn describe_token(token: &ApiToken) -> serde_json::Value {
    serde_json::json!({
        "name": token.name,
        "scopes": token.scopes.iter().map(|s| s.key()).collect::<Vec<_>>(),
        "expires_at": token.expires_at,
    })
}
