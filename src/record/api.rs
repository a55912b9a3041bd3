//! `/api/v1/record`.

use axum::extract::State;
use serde::Serialize;
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

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
        }
    }
}

/// The endpoints.
pub fn routes() -> OpenApiRouter<App> {
    OpenApiRouter::new().routes(routes!(list))
}

/// The record book, newest first.
#[utoipa::path(get, path = "/record", tag = "record", params(ListQuery), responses(
    (status = 200, description = "Entries, newest first", body = Listed<EntryBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 422, description = "The cursor or limit cannot be read", body = Problem),
))]
async fn list(
    State(db): State<Db>,
    by: Member,
    Query(query): Query<ListQuery>,
) -> Result<axum::Json<Listed<EntryBody>>, Error> {
    let limit = query.limit()?;
    let before = query.after()?;
    let entries = operations::page(&db, &by, before, limit + 1).await?;
    let entries = entries.into_iter().map(EntryBody::from).collect();
    Ok(axum::Json(Listed::cut(
        entries,
        limit,
        |entry: &EntryBody| entry.seq.to_string(),
    )))
}
