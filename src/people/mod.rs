//! Accounts, roles, sessions and API tokens: who is asking, and may they.
//!
//! [`Member`] is somebody who has proved who they are; every operation that
//! changes something takes one and asks [`Member::may`]. Pages prove it with a
//! session cookie, the API with a bearer token; neither accepts the other's.

use std::net::IpAddr;

use serde::{Deserialize, Serialize};

use crate::error::Error;
use crate::id::{ApiTokenId, InvitationId, MemberId, TabletId, UtcTime};

pub mod api;
pub mod operations;
pub mod pages;
pub mod passwords;
pub mod store;

/// What somebody does in the brewery.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum Role {
    /// Plans, weighs out and reads the mash.
    Brewer,
    /// Also enters water tests, keeps sources and lots, and approves plans.
    Qa,
    /// Also owns the beers, the shelf, the settings and the accounts.
    Manager,
}

impl Role {
    /// Every role, from least to most.
    pub const ALL: [Self; 3] = [Self::Brewer, Self::Qa, Self::Manager];

    /// As stored and sent.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Brewer => "brewer",
            Self::Qa => "qa",
            Self::Manager => "manager",
        }
    }

    /// As shown.
    pub const fn name(self) -> &'static str {
        match self {
            Self::Brewer => "Brewer",
            Self::Qa => "QA",
            Self::Manager => "Manager",
        }
    }

    /// The role with this key.
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|role| role.key() == key)
    }
}

/// Something that not everybody may do.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Permission {
    /// See anything at all.
    Read,
    /// Draft, change and revise plans.
    DraftPlans,
    /// Calibrate meters, weigh out, enter mash checks, close a batch.
    BrewBatches,
    /// Enter and withdraw water tests.
    EnterWaterTests,
    /// Keep sources.
    KeepSources,
    /// Keep lots of materials and malts.
    KeepLots,
    /// Keep pH meters.
    KeepMeters,
    /// Approve and withdraw plans.
    ApprovePlans,
    /// Keep the materials on the shelf.
    KeepShelf,
    /// Keep malts.
    KeepMalts,
    /// Keep beers and their specs.
    KeepBeers,
    /// Keep the brewery's settings.
    KeepSettings,
    /// Keep accounts and tokens.
    KeepPeople,
}

impl Permission {
    /// The least role that has it.
    const fn least_role(self) -> Role {
        match self {
            Self::Read | Self::DraftPlans | Self::BrewBatches => Role::Brewer,
            Self::EnterWaterTests
            | Self::KeepSources
            | Self::KeepLots
            | Self::KeepMeters
            | Self::ApprovePlans => Role::Qa,
            Self::KeepShelf
            | Self::KeepMalts
            | Self::KeepBeers
            | Self::KeepSettings
            | Self::KeepPeople => Role::Manager,
        }
    }

    /// The token scope that covers it; `None`: no token does.
    const fn scope(self) -> Option<Scope> {
        match self {
            Self::Read => Some(Scope::Read),
            Self::EnterWaterTests | Self::KeepSources => Some(Scope::Tests),
            Self::DraftPlans
            | Self::ApprovePlans
            | Self::KeepBeers
            | Self::KeepMalts
            | Self::KeepShelf
            | Self::KeepLots => Some(Scope::Plans),
            Self::BrewBatches | Self::KeepMeters => Some(Scope::Readings),
            Self::KeepSettings | Self::KeepPeople => None,
        }
    }

    /// What it lets one do, to follow “You may not …”.
    const fn deed(self) -> &'static str {
        match self {
            Self::Read => "see this",
            Self::DraftPlans => "draft plans",
            Self::BrewBatches => "calibrate meters, weigh out, enter mash checks or close batches",
            Self::EnterWaterTests => "enter or withdraw water tests",
            Self::KeepSources => "change sources",
            Self::KeepLots => "change lots",
            Self::KeepMeters => "change pH meters",
            Self::ApprovePlans => "approve or withdraw plans",
            Self::KeepShelf => "change the materials on the shelf",
            Self::KeepMalts => "change malts",
            Self::KeepBeers => "change beers",
            Self::KeepSettings => "change the brewery's settings",
            Self::KeepPeople => "keep accounts and tokens",
        }
    }
}

/// What an API token may be used for, within its owner's role.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(rename_all = "snake_case")]
pub enum Scope {
    /// Read everything.
    Read,
    /// Enter water tests and keep sources.
    Tests,
    /// Draft and approve plans; keep beers, malts and the shelf. Reads everything too.
    Plans,
    /// Record doses and mash checks; keep and calibrate meters.
    Readings,
}

impl Scope {
    /// Every scope.
    pub const ALL: [Self; 4] = [Self::Read, Self::Tests, Self::Plans, Self::Readings];

    /// As stored and sent.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Read => "read",
            Self::Tests => "tests",
            Self::Plans => "plans",
            Self::Readings => "readings",
        }
    }

    /// What it opens, in words.
    pub const fn words(self) -> &'static str {
        match self {
            Self::Read => "Read everything",
            Self::Tests => "Enter water tests and keep sources",
            Self::Plans => {
                "Read everything; draft and approve plans; keep beers, malts and the shelf"
            }
            Self::Readings => "Record doses and mash checks; keep and calibrate meters",
        }
    }

    /// The scope with this key.
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|scope| scope.key() == key)
    }

    /// Whether it covers what asks for `needed`: a plan is computed from everything that can
    /// be read, and shows it.
    fn opens(self, needed: Self) -> bool {
        self == needed || (self == Self::Plans && needed == Self::Read)
    }
}

/// Somebody who has proved who they are.
#[derive(Clone, Debug)]
pub struct Member {
    /// Their account.
    pub id: MemberId,
    /// Their name as the record book prints it.
    pub name: String,
    /// What they do.
    pub role: Role,
    /// The limits of the token they came with; `None`: they came with a session.
    pub scopes: Option<Vec<Scope>>,
    /// Whether a PIN proved it: shorter than a password, it opens no accounts.
    pub by_pin: bool,
}

impl Member {
    /// Whether they may do this; [`Error::Forbidden`] says what is missing.
    pub fn may(&self, permission: Permission) -> Result<(), Error> {
        let least = permission.least_role();
        if (self.role as u8) < least as u8 {
            return Err(Error::Forbidden(format!(
                "You may not {} as {}. Ask a {}.",
                permission.deed(),
                self.role.name(),
                match least {
                    Role::Qa => "QA person or a manager",
                    Role::Manager | Role::Brewer => "manager",
                }
            )));
        }
        match (&self.scopes, permission.scope()) {
            (None, _) if self.by_pin && permission == Permission::KeepPeople => {
                Err(Error::Forbidden(format!(
                    "A PIN may not {}. Sign in with your password.",
                    permission.deed()
                )))
            }
            (None, _) => Ok(()),
            (Some(scopes), Some(needed)) if scopes.iter().any(|it| it.opens(needed)) => Ok(()),
            (Some(_), Some(needed)) => Err(Error::Forbidden(format!(
                "This token may not {}: it lacks the scope “{}”.",
                permission.deed(),
                needed.key()
            ))),
            (Some(_), None) => Err(Error::Forbidden(format!(
                "No token may {}. Sign in instead.",
                permission.deed()
            ))),
        }
    }

    /// Whether they may do this, for pages that hide what is not allowed.
    pub fn can(&self, permission: Permission) -> bool {
        self.may(permission).is_ok()
    }
}

/// An account.
#[derive(Clone, Debug, PartialEq)]
pub struct Account {
    /// Its identifier.
    pub id: MemberId,
    /// What its owner types to sign in: lower case.
    pub login: String,
    /// The owner's name.
    pub name: String,
    /// What they do.
    pub role: Role,
    /// When it was made.
    pub created_at: UtcTime,
    /// When it was closed, if it was.
    pub disabled_at: Option<UtcTime>,
}

/// Where a request comes from.
#[derive(Clone, Debug)]
pub struct Place {
    /// The address of whoever asks, for the limits on guessing.
    pub address: IpAddr,
    /// The enrolled tablet that asks, if it is one.
    pub tablet: Option<Tablet>,
    /// The browser in a few words, for example “Firefox on Linux”; empty when not known.
    pub device: String,
}

impl Place {
    /// A browser of one's own, of which no more than the address is known.
    pub const fn at(address: IpAddr) -> Self {
        Self {
            address,
            tablet: None,
            device: String::new(),
        }
    }
}

/// A tablet that several people share. On it, and nowhere else, a PIN proves who one is.
#[derive(Clone, Debug, PartialEq)]
pub struct Tablet {
    /// Its identifier.
    pub id: TabletId,
    /// What it is called, for example “Mash tun”.
    pub name: String,
    /// Who enrolled it.
    pub enrolled_by: String,
    /// When it was enrolled.
    pub enrolled_at: UtcTime,
    /// When it last asked for anything, to a few minutes.
    pub last_seen_at: UtcTime,
    /// When it was revoked, if it was.
    pub revoked_at: Option<UtcTime>,
}

/// Somebody who can be picked by name.
#[derive(Clone, Debug, PartialEq)]
pub struct Person {
    /// Their account.
    pub id: MemberId,
    /// Their name.
    pub name: String,
    /// What they do.
    pub role: Role,
}

/// A session that is open.
#[derive(Clone, Debug, PartialEq)]
pub struct Session {
    /// The tablet's name, else the browser in a few words; empty when not known.
    pub device: String,
    /// Whether it is on a tablet.
    pub on_tablet: bool,
    /// When it began.
    pub created_at: UtcTime,
    /// When it was last used, to a few minutes.
    pub last_seen_at: UtcTime,
    /// Whether it is the one that asks.
    pub this_one: bool,
}

/// An account that its owner has yet to make.
#[derive(Clone, Debug, PartialEq)]
pub struct Invitation {
    /// Its identifier.
    pub id: InvitationId,
    /// Who is invited, as the record book will print it.
    pub name: String,
    /// What they will do.
    pub role: Role,
    /// When it was made.
    pub created_at: UtcTime,
    /// When it ends.
    pub expires_at: UtcTime,
}

/// An API token, without its secret.
#[derive(Clone, Debug, PartialEq)]
pub struct ApiToken {
    /// Its identifier.
    pub id: ApiTokenId,
    /// Whose rights it carries.
    pub member_id: MemberId,
    /// That person's name.
    pub member_name: String,
    /// What it is called.
    pub name: String,
    /// What it may be used for.
    pub scopes: Vec<Scope>,
    /// When it was made.
    pub created_at: UtcTime,
    /// When it ends.
    pub expires_at: UtcTime,
    /// When it was last used, to the minute.
    pub last_used_at: Option<UtcTime>,
    /// When it was revoked, if it was.
    pub revoked_at: Option<UtcTime>,
}
