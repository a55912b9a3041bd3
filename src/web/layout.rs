//! What every page shows around its content.

use axum::extract::FromRequestParts;
use axum::http::request::Parts;
use axum::http::{HeaderMap, Method, Uri, header};

use super::App;
use crate::brewery;
use crate::db::Db;
use crate::error::Error;
use crate::id::UtcTime;
use crate::people::{Member, Permission, Place, Tablet};

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
    /// Where somebody else goes on after a switch: this page, or the one whose form was
    /// sent to make it.
    pub here: String,
    /// The enrolled tablet it is shown on, if it is one.
    pub tablet: Option<Tablet>,
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
            here: "/".into(),
            tablet: None,
        }
    }

    /// The same frame at a place; `here` is the path to come back to.
    #[must_use]
    pub fn at(self, place: &Place, here: String) -> Self {
        Self {
            here,
            tablet: place.tablet.clone(),
            ..self
        }
    }

    /// A tablet that lies unused this long goes back to the names, s.
    pub fn tablet_idle_s(&self) -> u64 {
        self.settings.tablet_idle.as_secs()
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
    place: Place,
    here: String,
}

impl Framer {
    /// The frame of one page.
    pub async fn page(&self, title: impl Into<String>, section: &'static str) -> Page {
        let page = Page::load(&self.db, Some(&self.member), title, section).await;
        Page {
            flash: self.flash.clone(),
            ..page.at(&self.place, self.here.clone())
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
        let place = match Place::from_request_parts(parts, app).await {
            Ok(place) => place,
            Err(never) => match never {},
        };
        Ok(Self {
            db: app.db.clone(),
            member,
            flash,
            place,
            here: here(&parts.method, &parts.uri, &parts.headers),
        })
    }
}

/// The path to come back to: of what is read its own, without the message of the form before;
/// of what changes something the page that its form stood on.
pub fn here(method: &Method, uri: &Uri, headers: &HeaderMap) -> String {
    let page = if method.is_safe() {
        Some(uri.clone())
    } else {
        let referer = headers.get(header::REFERER);
        referer.and_then(|referer| referer.to_str().ok()?.parse().ok())
    };
    let Some(page) = page else { return "/".into() };
    let kept = form_urlencoded::parse(page.query().unwrap_or_default().as_bytes())
        .filter(|(name, _)| name != "done");
    let query = form_urlencoded::Serializer::new(String::new())
        .extend_pairs(kept)
        .finish();
    match query.as_str() {
        "" => page.path().to_owned(),
        query => format!("{}?{query}", page.path()),
    }
}
