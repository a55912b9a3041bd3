//! A request that carries a key is applied once and answered the same again.
//!
//! The API takes the key from the `Idempotency-Key` header, forms from their hidden
//! field `_key`. [`claim`] writes the key in the transaction of the change itself, so
//! that key and change stand or fall together even when the power goes; the answer is
//! stored after it, to be replayed.

use axum::body::{Body, Bytes, to_bytes};
use axum::extract::{Request, State};
use axum::http::{HeaderName, HeaderValue, Method, StatusCode, header};
use axum::middleware::Next;
use axum::response::{IntoResponse, Response};
use base64ct::{Base64UrlUnpadded, Encoding};
use sha2::{Digest, Sha256};
use sqlx::{Row, SqliteConnection};
use tracing::Instrument;

use super::{App, BODY_LIMIT};
use crate::db::Db;
use crate::error::{Error, breaks_unique};
use crate::id::UtcTime;
use crate::people::Member;

tokio::task_local! {
    static KEY: Key;
}

#[derive(Clone, Debug)]
struct Key {
    actor: String,
    key: String,
    fingerprint: String,
}

/// Headers worth replaying.
const REPLAYED: [HeaderName; 3] = [header::LOCATION, header::CONTENT_TYPE, header::ETAG];

/// A key is remembered this long, s: seven days. Nothing sends a request again after that.
const REMEMBERED_SECONDS: i64 = 7 * 24 * 3600;

/// Forgets the keys of requests long past, with the answers kept beside them.
pub async fn forget_old(tx: &mut SqliteConnection) -> Result<(), Error> {
    sqlx::query("DELETE FROM request_keys WHERE at < ?")
        .bind(UtcTime::now().plus_seconds(-REMEMBERED_SECONDS))
        .execute(tx)
        .await?;
    Ok(())
}

/// Claims the request's key, if it has one, in this transaction.
pub async fn claim(tx: &mut SqliteConnection) -> Result<(), Error> {
    let Ok(key) = KEY.try_with(Clone::clone) else {
        return Ok(());
    };
    sqlx::query("INSERT INTO request_keys (actor, key, fingerprint, at) VALUES (?, ?, ?, ?)")
        .bind(&key.actor)
        .bind(&key.key)
        .bind(&key.fingerprint)
        .bind(UtcTime::now())
        .execute(tx)
        .await
        .map_err(|error| {
            if breaks_unique(&error) {
                Error::Repeated
            } else {
                error.into()
            }
        })?;
    Ok(())
}

/// Replays the answer of a repeated request; otherwise runs it under its key.
pub async fn layer(State(app): State<App>, request: Request, next: Next) -> Response {
    match apply(&app.db, request, next).await {
        Ok(response) => response,
        Err(error) => error.into_response(),
    }
}

async fn apply(db: &Db, request: Request, next: Next) -> Result<Response, Error> {
    if matches!(
        *request.method(),
        Method::GET | Method::HEAD | Method::OPTIONS
    ) {
        return Ok(next.run(request).await);
    }
    let Some(member) = request.extensions().get::<Member>().cloned() else {
        return Ok(next.run(request).await);
    };
    let (parts, body) = request.into_parts();
    let Ok(body) = to_bytes(body, BODY_LIMIT).await else {
        return Ok(StatusCode::PAYLOAD_TOO_LARGE.into_response());
    };
    let sent = parts
        .headers
        .get("idempotency-key")
        .map(|value| value.to_str().unwrap_or("").to_owned());
    let key = sent.or_else(|| form_key(parts.headers.get(header::CONTENT_TYPE), &body));
    let Some(key) = key else {
        return Ok(next.run(Request::from_parts(parts, Body::from(body))).await);
    };
    if key.is_empty() || key.len() > 200 || !key.is_ascii() {
        return Err(Error::field(
            "",
            "Idempotency-Key: send 1 to 200 ASCII characters, for example a UUID.",
        ));
    }
    let mut digest = Sha256::new();
    digest.update(parts.method.as_str());
    digest.update(parts.uri.path());
    digest.update(without_secrets(
        parts.headers.get(header::CONTENT_TYPE),
        &body,
    ));
    let key = Key {
        actor: actor(&member),
        key,
        fingerprint: Base64UrlUnpadded::encode_string(&digest.finalize()),
    };
    if let Some(answer) = stored(db, &key).await? {
        return Ok(answer);
    }
    let request = Request::from_parts(parts, Body::from(body));
    let db = db.clone();
    let carried = async move {
        let response = KEY.scope(key.clone(), next.run(request)).await;
        settled(&db, &key, response).await
    };
    // Carried through even when whoever asked has lost the network: asked again, they are
    // told what came of it.
    tokio::spawn(carried.in_current_span())
        .await
        .map_err(|error| Error::internal("A request was not carried through", error))?
}

async fn settled(db: &Db, key: &Key, response: Response) -> Result<Response, Error> {
    let repeated = response
        .extensions()
        .get::<super::problem::Problem>()
        .is_some_and(|p| p.kind == "/problems/repeated");
    if !repeated {
        return store(db, key, response).await;
    }
    // Its twin is being answered right now: wait a little for that answer.
    for _ in 0..40 {
        if let Some(answer) = stored(db, key).await? {
            return Ok(answer);
        }
        tokio::time::sleep(std::time::Duration::from_millis(50)).await;
    }
    Ok(response)
}

/// Whose key it is: somebody with these very rights. A token is never answered what only
/// a wider one was told.
fn actor(member: &Member) -> String {
    let rights = match &member.scopes {
        None => "session".to_owned(),
        Some(scopes) => scopes
            .iter()
            .map(|it| it.key())
            .collect::<Vec<_>>()
            .join(" "),
    };
    format!("{} {} {rights}", member.id, member.role.key())
}

/// A field that proves who somebody is. It is no part of what is kept: a PIN has so few
/// digits that whoever holds the file could find the one that gives the fingerprint.
const SECRET: &str = "second_person_secret";

fn without_secrets(content_type: Option<&HeaderValue>, body: &Bytes) -> Vec<u8> {
    if !is_form(content_type) {
        return body.to_vec();
    }
    let fields = form_urlencoded::parse(body).filter(|(name, _)| name != SECRET);
    form_urlencoded::Serializer::new(String::new())
        .extend_pairs(fields)
        .finish()
        .into_bytes()
}

fn is_form(content_type: Option<&HeaderValue>) -> bool {
    content_type
        .and_then(|value| value.to_str().ok())
        .is_some_and(|value| value.starts_with("application/x-www-form-urlencoded"))
}

fn form_key(content_type: Option<&HeaderValue>, body: &Bytes) -> Option<String> {
    if !is_form(content_type) {
        return None;
    }
    form_urlencoded::parse(body)
        .find(|(name, _)| name == "_key")
        .map(|(_, value)| value.into_owned())
        .filter(|k| !k.is_empty())
}

async fn stored(db: &Db, key: &Key) -> Result<Option<Response>, Error> {
    let row = sqlx::query(
        "SELECT fingerprint, status, headers, body FROM request_keys WHERE actor = ? AND key = ?",
    )
    .bind(&key.actor)
    .bind(&key.key)
    .fetch_optional(&mut *db.reader().await?)
    .await?;
    let Some(row) = row else { return Ok(None) };
    if row.try_get::<&str, _>("fingerprint")? != key.fingerprint {
        return Err(Error::Conflict(
            "This key was used before for another request. Send each new request with a new key"
                .into(),
        ));
    }
    let Some(status) = row.try_get::<Option<i64>, _>("status")? else {
        return Ok(None);
    };
    let mut response = Response::new(Body::from(row.try_get::<Vec<u8>, _>("body")?));
    *response.status_mut() = u16::try_from(status)
        .ok()
        .and_then(|s| StatusCode::from_u16(s).ok())
        .unwrap_or(StatusCode::OK);
    let headers: Vec<(String, String)> = serde_json::from_str(row.try_get("headers")?)
        .map_err(|error| Error::internal("A stored answer cannot be read", error))?;
    for (name, value) in headers {
        if let (Ok(name), Ok(value)) = (name.parse::<HeaderName>(), value.parse::<HeaderValue>()) {
            response.headers_mut().insert(name, value);
        }
    }
    response
        .headers_mut()
        .insert("idempotent-replayed", HeaderValue::from_static("true"));
    Ok(Some(response))
}

/// Keeps the answer beside the key, if the request changed anything.
async fn store(db: &Db, key: &Key, response: Response) -> Result<Response, Error> {
    if response.status().is_client_error() || response.status().is_server_error() {
        return Ok(response);
    }
    let (parts, body) = response.into_parts();
    let body = to_bytes(body, 8 * BODY_LIMIT)
        .await
        .map_err(|error| Error::internal("An answer could not be kept", error))?;
    let headers: Vec<(&str, &str)> = REPLAYED
        .iter()
        .filter_map(|name| Some((name.as_str(), parts.headers.get(name)?.to_str().ok()?)))
        .collect();
    let headers = serde_json::to_string(&headers)
        .map_err(|error| Error::internal("An answer could not be kept", error))?;
    let mut tx = db.begin_unkeyed().await?;
    sqlx::query("UPDATE request_keys SET status = ?, headers = ?, body = ? WHERE actor = ? AND key = ? AND status IS NULL")
        .bind(i64::from(parts.status.as_u16()))
        .bind(headers)
        .bind(body.to_vec())
        .bind(&key.actor)
        .bind(&key.key)
        .execute(&mut *tx)
        .await?;
    tx.commit().await?;
    Ok(Response::from_parts(parts, Body::from(body)))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_secret_is_no_part_of_the_fingerprint_and_everything_else_of_a_form_is() {
        let kind = HeaderValue::from_static("application/x-www-form-urlencoded");
        let print = |text: &'static str| without_secrets(Some(&kind), &text.into());
        let one = print("actual=5&second_person_secret=271828&lot=A");
        assert_eq!(one, print("actual=5&second_person_secret=314159&lot=A"));
        assert_ne!(one, print("actual=6&second_person_secret=271828&lot=A"));
    }
}
