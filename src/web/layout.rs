//! What every page shows around its content.

use axum::extract::FromRequestParts;
use axum::http::request::Parts;

use super::App;
use crate::brewery;
use crate::db::Db;
use crate::error::Error;
use crate::id::UtcTime;
use crate::people::{Member, Permission};

/// The frame of a page.
#[derive(Clone, Debug)]
pub struct Page {
    /// What the tab says.
    pub title: String,
    /// Whose water desk this is.
    pub brewery: String,
    /// Whether the brewery is invented.
    pub demo: bool,
    /// Who is signed in.
    pub member: Option<PageMember>,
    /// The part of the navigation this page belongs to.
    pub section: &'static str,
    /// What the last form did, in one sentence.
    pub flash: Option<String>,
    /// The brewery's choice of units, currency and time zone.
    pub settings: brewery::Settings,
}

/// Who is signed in, as pages show it.
#[derive(Clone, Debug)]
pub struct PageMember {
    /// Their name.
    pub name: String,
    /// Their role's key.
    pub role: &'static str,
    /// The person, to ask what they may do.
    pub member: Member,
}

impl PageMember {
    /// Whether they may do this.
    pub fn can(&self, permission: Permission) -> bool {
        self.member.can(permission)
    }
}

impl Page {
    /// The frame for a member, or for somebody not signed in.
    pub async fn load(
        db: &Db,
        member: Option<&Member>,
        title: impl Into<String>,
        section: &'static str,
    ) -> Self {
        let settings = brewery::operations::settings(db).await.unwrap_or_default();
        Self {
            title: title.into(),
            brewery: settings.name.clone(),
            demo: settings.demo,
            member: member.map(|member| PageMember {
                name: member.name.clone(),
                role: member.role.key(),
                member: member.clone(),
            }),
            section,
            flash: None,
            settings,
        }
    }

    /// What the clock of the server says, which a tablet's need not.
    pub fn now(&self) -> UtcTime {
        UtcTime::now()
    }

    /// Whether whoever is signed in may do this.
    pub fn can(&self, permission: Permission) -> bool {
        self.member
            .as_ref()
            .is_some_and(|member| member.can(permission))
    }
}

/// Makes frames for the handler: holds who asks, and the message left by the form
/// before.
#[derive(Clone, Debug)]
pub struct Framer {
    db: Db,
    /// Who is signed in.
    pub member: Member,
    flash: Option<String>,
}

impl Framer {
    /// The frame of one page.
    pub async fn page(&self, title: impl Into<String>, section: &'static str) -> Page {
        Page {
            flash: self.flash.clone(),
            ..Page::load(&self.db, Some(&self.member), title, section).await
        }
    }
}

impl FromRequestParts<App> for Framer {
    type Rejection = Error;

    async fn from_request_parts(parts: &mut Parts, app: &App) -> Result<Self, Error> {
        let member = parts
            .extensions
            .get::<Member>()
            .cloned()
            .ok_or(Error::SignIn)?;
        let flash = parts.uri.query().and_then(|query| {
            form_urlencoded::parse(query.as_bytes())
                .find(|(name, _)| name == "done")
                .map(|(_, value)| value.into_owned())
        });
        // Only our own sentences: the address could be made by anybody.
        let flash = flash
            .and_then(|key| super::format::done_sentence(&key))
            .map(str::to_owned);
        Ok(Self {
            db: app.db.clone(),
            member,
            flash,
        })
    }
}
