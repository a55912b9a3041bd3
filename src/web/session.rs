//! Who is asking, and from where: a session cookie on pages, a bearer token on the API; a
//! cookie of its own for an enrolled tablet.

use std::net::{IpAddr, Ipv4Addr, SocketAddr};

use axum::extract::{ConnectInfo, FromRequestParts, Request, State};
use axum::http::request::Parts;
use axum::http::{Extensions, HeaderMap, header};
use axum::middleware::Next;
use axum::response::{IntoResponse, Response};
use axum_extra::extract::cookie::{Cookie, CookieJar, SameSite};

use super::App;
use crate::error::Error;
use crate::people::{Member, Place, operations};

/// Name of the session cookie.
pub const COOKIE: &str = "leat_session";
/// Name of the cookie that makes a device an enrolled tablet.
pub const TABLET_COOKIE: &str = "leat_tablet";

/// The cookie that carries a session. It ends with the browser.
pub fn cookie(secret: String, secure: bool) -> Cookie<'static> {
    guarded(COOKIE, secret, secure)
}

/// The cookie that makes a device an enrolled tablet, kept for as long as the browser does:
/// 400 days in most. Each sign-in on the tablet begins them anew.
pub fn tablet_cookie(secret: String, secure: bool) -> Cookie<'static> {
    let mut cookie = guarded(TABLET_COOKIE, secret, secure);
    cookie.make_permanent();
    cookie
}

fn guarded(name: &'static str, secret: String, secure: bool) -> Cookie<'static> {
    Cookie::build((name, secret))
        .path("/")
        .http_only(true)
        .same_site(SameSite::Lax)
        .secure(secure)
        .build()
}

/// Finds out who holds the session cookie, and on which tablet. Pages without a session go
/// on without.
pub async fn cookie_layer(State(app): State<App>, mut request: Request, next: Next) -> Response {
    let jar = CookieJar::from_headers(request.headers());
    let place = place(request.extensions(), request.headers());
    let (place, member) = match found(&app, &jar, place).await {
        Ok(found) => found,
        Err(error) => return error.into_response(),
    };
    request.extensions_mut().insert(place.clone());
    if let Some(member) = &member {
        request.extensions_mut().insert(member.clone());
    }
    let mut response = next.run(request).await;
    response.extensions_mut().insert(place);
    if let Some(member) = member {
        response.extensions_mut().insert(member);
    }
    response
}

async fn found(
    app: &App,
    jar: &CookieJar,
    mut place: Place,
) -> Result<(Place, Option<Member>), Error> {
    if let Some(cookie) = jar.get(TABLET_COOKIE) {
        place.tablet = operations::by_cookie(&app.db, cookie.value()).await?;
    }
    let tablet = place.tablet.as_ref().map(|tablet| tablet.id);
    let member = match jar.get(COOKIE) {
        Some(cookie) => operations::by_session(&app.db, cookie.value(), tablet).await?,
        None => None,
    };
    Ok((place, member))
}

/// Where a request comes from, as far as can be told without cookies.
fn place(extensions: &Extensions, headers: &HeaderMap) -> Place {
    let peer = extensions
        .get::<ConnectInfo<SocketAddr>>()
        .map_or(IpAddr::V4(Ipv4Addr::LOCALHOST), |ConnectInfo(peer)| {
            peer.ip()
        });
    let agent = headers.get(header::USER_AGENT);
    Place {
        address: forwarded(headers)
            .filter(|_| peer.to_canonical().is_loopback())
            .unwrap_or(peer),
        device: device(
            agent
                .and_then(|agent| agent.to_str().ok())
                .unwrap_or_default(),
        ),
        tablet: None,
    }
}

/// The address that a proxy on this machine names last: the one it saw itself. Whoever asks
/// from elsewhere could write anything there, and is not believed.
fn forwarded(headers: &HeaderMap) -> Option<IpAddr> {
    let list = headers.get_all("x-forwarded-for").iter().next_back()?;
    let last = list.to_str().ok()?.rsplit(',').next()?;
    last.trim().parse().ok()
}

/// A browser in a few words, from what it says of itself; empty when it says nothing known.
fn device(agent: &str) -> String {
    let first = |pairs: &[(&str, &'static str)]| {
        pairs
            .iter()
            .find(|(mark, _)| agent.contains(mark))
            .map(|(_, words)| *words)
    };
    // Most name their forebears as well, so the order matters.
    let browser = first(&[
        ("Edg", "Edge"),
        ("Firefox", "Firefox"),
        ("FxiOS", "Firefox"),
        ("Chrom", "Chrome"),
        ("CriOS", "Chrome"),
        ("Safari", "Safari"),
    ]);
    let system = first(&[
        ("Android", "Android"),
        ("iPad", "iPad"),
        ("iPhone", "iPhone"),
        ("Windows", "Windows"),
        ("Mac OS", "Mac"),
        ("CrOS", "ChromeOS"),
        ("Linux", "Linux"),
    ]);
    match (browser, system) {
        (Some(browser), Some(system)) => format!("{browser} on {system}"),
        (one, other) => one.or(other).unwrap_or_default().to_owned(),
    }
}

/// Finds out who holds the bearer token. A cookie is never accepted here.
pub async fn token_layer(State(app): State<App>, mut request: Request, next: Next) -> Response {
    let token = request
        .headers()
        .get(header::AUTHORIZATION)
        .and_then(|value| value.to_str().ok())
        .and_then(|value| value.strip_prefix("Bearer "))
        .map(|token| token.trim().to_owned());
    if let Some(token) = token {
        match operations::by_token(&app.db, &token).await {
            Ok(Some(member)) => {
                request.extensions_mut().insert(member);
            }
            Ok(None) => return Error::SignIn.into_response(),
            Err(error) => return error.into_response(),
        }
    }
    next.run(request).await
}

impl<S: Send + Sync> FromRequestParts<S> for Member {
    type Rejection = Error;

    async fn from_request_parts(parts: &mut Parts, _: &S) -> Result<Self, Error> {
        parts.extensions.get::<Self>().cloned().ok_or(Error::SignIn)
    }
}

impl<S: Send + Sync> FromRequestParts<S> for Place {
    type Rejection = std::convert::Infallible;

    async fn from_request_parts(parts: &mut Parts, _: &S) -> Result<Self, Self::Rejection> {
        let known = parts.extensions.get::<Self>().cloned();
        Ok(known.unwrap_or_else(|| place(&parts.extensions, &parts.headers)))
    }
}

#[cfg(test)]
mod tests {
    use super::device;

    #[test]
    fn a_browser_is_told_by_its_name_and_system() {
        // As the browsers send it, from memory.
        for (agent, words) in [
            (
                "Mozilla/5.0 (X11; Linux x86_64; rv:128.0) Gecko/20100101 Firefox/128.0",
                "Firefox on Linux",
            ),
            (
                "Mozilla/5.0 (Linux; Android 14; K) AppleWebKit/537.36 (KHTML, like Gecko) Chrome/126.0.0.0 Safari/537.36",
                "Chrome on Android",
            ),
            (
                "Mozilla/5.0 (iPad; CPU OS 17_5 like Mac OS X) AppleWebKit/605.1.15 (KHTML, like Gecko) Version/17.5 Safari/604.1",
                "Safari on iPad",
            ),
            (
                "Mozilla/5.0 (Windows NT 10.0; Win64; x64) AppleWebKit/537.36 (KHTML, like Gecko) Chrome/126.0.0.0 Safari/537.36 Edg/126.0",
                "Edge on Windows",
            ),
            ("curl/8.5.0", ""),
        ] {
            assert_eq!(device(agent), words);
        }
    }
}
