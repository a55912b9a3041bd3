//! Reading requests: JSON bodies with a pointer to what is wrong, path
//! identifiers, pages of a list.

use axum::extract::{FromRequest, FromRequestParts, Path, Request};
use axum::http::request::Parts;
use axum::http::{HeaderMap, HeaderName, header};
use serde::Deserialize;
use serde::de::DeserializeOwned;

use crate::error::Error;

/// A JSON body.
#[derive(Debug)]
pub struct Json<T>(pub T);

impl<T: DeserializeOwned, S: Send + Sync> FromRequest<S> for Json<T> {
    type Rejection = Error;

    async fn from_request(request: Request, state: &S) -> Result<Self, Error> {
        let is_json = request
            .headers()
            .get(header::CONTENT_TYPE)
            .and_then(|value| value.to_str().ok())
            .is_some_and(|value| value.starts_with("application/json"));
        if !is_json {
            return Err(Error::field(
                "",
                "Send the body as JSON with “Content-Type: application/json”.",
            ));
        }
        let bytes = axum::body::Bytes::from_request(request, state)
            .await
            .map_err(|_| {
                Error::field(
                    "",
                    "The body is too large or was cut off. Send at most 1 MB.",
                )
            })?;
        // A list would else be read as the fields of the body in their order.
        if bytes.trim_ascii_start().first() != Some(&b'{') {
            return Err(Error::field("", "Send the body as a JSON object, {…}."));
        }
        let reader = &mut serde_json::Deserializer::from_slice(&bytes);
        let body = serde_path_to_error::deserialize(reader).map_err(|error| {
            let path = error.path().to_string().replace('[', ".").replace(']', "");
            let path = path
                .trim_start_matches('.')
                .trim_end_matches('?')
                .trim_end_matches('.')
                .to_owned();
            Error::field(path, format!("This could not be read: {}.", error.inner()))
        })?;
        Ok(Self(body))
    }
}

/// An identifier in the path. One that is no identifier is answered like one that
/// belongs to nothing.
#[derive(Clone, Copy, Debug)]
pub struct At<T>(pub T);

impl<T: DeserializeOwned + Send, S: Send + Sync> FromRequestParts<S> for At<T> {
    type Rejection = Error;

    async fn from_request_parts(parts: &mut Parts, state: &S) -> Result<Self, Error> {
        Path::<T>::from_request_parts(parts, state)
            .await
            .map(|Path(id)| Self(id))
            .map_err(|_| Error::NotFound("thing at this address"))
    }
}

/// What a query asks for. Every value is text; one that is sent twice is no answer.
#[derive(Debug)]
pub struct Query<T>(pub T);

impl<T: DeserializeOwned, S: Send + Sync> FromRequestParts<S> for Query<T> {
    type Rejection = Error;

    async fn from_request_parts(parts: &mut Parts, _: &S) -> Result<Self, Error> {
        let mut asked = serde_json::Map::new();
        let query = parts.uri.query().unwrap_or_default();
        for (name, value) in form_urlencoded::parse(query.as_bytes()).into_owned() {
            if asked.insert(name.clone(), value.into()).is_some() {
                return Err(Error::field(name, "Send this once."));
            }
        }
        serde_json::from_value(asked.into())
            .map(Self)
            .map_err(|_| Error::field("", "The query cannot be read. Check the address."))
    }
}

/// Which part of a long list is wanted.
#[derive(Clone, Debug, Default, Deserialize, utoipa::IntoParams)]
#[into_params(parameter_in = Query)]
pub struct ListQuery {
    /// Where the page before this one ended: its `next_cursor`.
    pub cursor: Option<String>,
    /// How many items, 1 to 200; 50 when not given.
    #[param(value_type = Option<i64>, minimum = 1, maximum = 200)]
    pub limit: Option<String>,
}

impl ListQuery {
    /// The identifier the page before ended with.
    pub fn after<I: std::str::FromStr>(&self) -> Result<Option<I>, Error> {
        let cursor = self.cursor.as_deref().map(str::trim);
        cursor
            .filter(|cursor| !cursor.is_empty())
            .map(|cursor| {
                cursor
                    .parse()
                    .map_err(|_| Error::field("cursor", "Send the next_cursor of the page before."))
            })
            .transpose()
    }

    /// How many items to return.
    pub fn limit(&self) -> Result<i64, Error> {
        match self.limit.as_deref().map(str::trim) {
            None => Ok(50),
            Some(text) => match text.parse::<i64>() {
                Ok(limit @ 1..=200) => Ok(limit),
                _ => Err(Error::field("limit", "Ask for 1 to 200 items.")),
            },
        }
    }
}

/// One page of a list.
#[derive(Debug, serde::Serialize, utoipa::ToSchema)]
pub struct Listed<T> {
    /// The items, in the order the endpoint says.
    pub items: Vec<T>,
    /// Send this as `cursor` for the next page; absent on the last one.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub next_cursor: Option<String>,
}

impl<T> Listed<T> {
    /// A page of at most `limit` items out of `found`, which holds one more when
    /// there is a next page. `cursor` tells an item's place.
    pub fn cut(mut found: Vec<T>, limit: i64, cursor: impl Fn(&T) -> String) -> Self {
        let limit = usize::try_from(limit).unwrap_or(usize::MAX);
        let more = found.len() > limit;
        found.truncate(limit);
        let next_cursor = if more { found.last().map(cursor) } else { None };
        Self {
            items: found,
            next_cursor,
        }
    }
}

/// The header that tells a client which version it reads.
pub fn etag(version: i64) -> [(HeaderName, String); 1] {
    [(header::ETAG, format!("\"{version}\""))]
}

/// The version a client read, from `If-Match`: what [`etag`] told.
pub fn if_match(headers: &HeaderMap) -> Result<Option<i64>, Error> {
    let Some(value) = headers.get(header::IF_MATCH) else {
        return Ok(None);
    };
    let version = value
        .to_str()
        .ok()
        .map(|v| v.trim().trim_start_matches("W/").trim_matches('"'))
        .and_then(|v| v.parse().ok());
    version
        .map(Some)
        .ok_or_else(|| Error::field("", "If-Match: send the ETag as you received it."))
}
