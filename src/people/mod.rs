//! Accounts, roles, sessions and API tokens: who is asking, and may they.
//!
//! [`Member`] is somebody who has proved who they are; every operation that
//! changes something takes one and asks [`Member::may`]. Pages prove it with a
//! session cookie, the API with a bearer token; neither accepts the other's.

use serde::{Deserialize, Serialize};

use crate::error::Error;
use crate::id::{ApiTokenId, MemberId, UtcTime};

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
    /// Draft and approve plans; keep beers, malts and the shelf.
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
                "Draft and approve plans; keep beers, malts and the shelf. Tick “Read everything” too"
            }
            Self::Readings => "Record doses and mash checks; keep and calibrate meters",
        }
    }

    /// The scope with this key.
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|scope| scope.key() == key)
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
            (None, _) => Ok(()),
            (Some(scopes), Some(needed)) if scopes.contains(&needed) => Ok(()),
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
