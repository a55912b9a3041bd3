//! `/api/v1/record`.

use axum::extract::State;
use axum::http::{HeaderMap, HeaderValue, header};
use axum::response::{IntoResponse, Response};
use serde::Serialize;
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::filter::FilterBody;
use super::{Entry, operations};
use crate::db::Db;
use crate::error::Error;
use crate::id::{MemberId, UtcTime};
use crate::people::Member;
use crate::web::App;
use crate::web::extract::{ListQuery, Listed, Query};
use crate::web::problem::Problem;

/// One line of the record book.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct EntryBody {
    /// Its place in the book.
    seq: i64,
    /// When.
    at: UtcTime,
    /// Whose account.
    member_id: Option<MemberId>,
    /// Who, by the name of that day.
    member_name: String,
    /// What was done.
    action: String,
    /// To what kind of thing.
    subject_kind: String,
    /// To which.
    subject_id: String,
    /// Its name that day.
    subject_name: String,
    /// As it was.
    before: Option<serde_json::Value>,
    /// As it is after.
    after: Option<serde_json::Value>,
    /// Why, if that was said.
    reason: Option<String>,
    /// What it is about, its subject among it.
    about: Vec<AboutBody>,
}

/// One thing an entry is about.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct AboutBody {
    /// Its kind, as of subjects; `batch` for a batch.
    kind: String,
    /// Its identifier; the number of a batch.
    id: String,
}

impl From<Entry> for EntryBody {
    fn from(entry: Entry) -> Self {
        Self {
            seq: entry.seq,
            at: entry.at,
            member_id: entry.member_id,
            member_name: entry.member_name,
            action: entry.action,
            subject_kind: entry.subject_kind,
            subject_id: entry.subject_id,
            subject_name: entry.subject_name,
            before: entry.before,
            after: entry.after,
            reason: entry.reason,
            about: entry
                .about
                .into_iter()
                .map(|(kind, id)| AboutBody { kind, id })
                .collect(),
        }
    }
}

/// The endpoints.
pub fn routes() -> OpenApiRouter<App> {
    OpenApiRouter::new()
        .routes(routes!(list))
        .merge(super::trace::api::routes())
}

/// The record book, newest first. With `Accept: text/csv` as a table, one line for each
/// value that changed, of at most 10,000 entries; what is older is told by a `Link` to the
/// next. A cell that a spreadsheet would take for a formula begins with an apostrophe.
#[utoipa::path(get, path = "/record", tag = "record", params(ListQuery, FilterBody), responses(
    (status = 200, description = "Entries, newest first",
        content((Listed<EntryBody> = "application/json"), (String = "text/csv"))),
    (status = 401, description = "No valid token", body = Problem),
    (status = 422, description = "The cursor, the limit or a filter cannot be read", body = Problem),
))]
async fn list(
    State(db): State<Db>,
    by: Member,
    headers: HeaderMap,
    Query(query): Query<ListQuery>,
    Query(filter): Query<FilterBody>,
) -> Result<Response, Error> {
    let limit = query.limit()?;
    let before = query.after()?;
    let asked = filter.query();
    let filter = filter.try_into()?;
    let wanted = headers.get(header::ACCEPT).and_then(|it| it.to_str().ok());
    if wanted.is_some_and(|accept| accept.contains("text/csv")) {
        let table = operations::table(&db, &by, &filter, before).await?;
        let kind = [(header::CONTENT_TYPE, "text/csv; charset=utf-8")];
        let mut answer = (kind, table.csv.clone()).into_response();
        if let Some(last) = table.last.filter(|_| table.is_cut()) {
            let next = format!("</api/v1/record?{asked}&cursor={last}>; rel=\"next\"");
            let next = HeaderValue::from_str(&next).map_err(|error| {
                Error::internal("The address of the next part cannot be sent", error)
            })?;
            answer.headers_mut().insert(header::LINK, next);
        }
        return Ok(answer);
    }
    let found = operations::find(&db, &by, &filter, before, limit + 1).await?;
    let entries = found.entries.into_iter().map(EntryBody::from).collect();
    let page = Listed::cut(entries, limit, |entry: &EntryBody| entry.seq.to_string());
    Ok(axum::Json(page).into_response())
}
