//! `/api/v1/materials/{id}/safety-data-sheets`, `/api/v1/materials/{id}/lots/{lot_id}/certificates`
//! and `/api/v1/attachments/{attachment_id}`.

use axum::extract::{DefaultBodyLimit, Request, State};
use axum::http::{StatusCode, header};
use axum::response::{IntoResponse, Response};
use serde::{Deserialize, Serialize};
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::{Attachment, Subject, operations, upload};
use crate::db::Db;
use crate::error::Error;
use crate::id::{AttachmentId, MaterialId, MaterialLotId, UtcTime};
use crate::people::{Member, Permission};
use crate::web::App;
use crate::web::extract::{At, Query};
use crate::web::problem::Problem;

/// A certificate or a safety data sheet, without its bytes.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct AttachmentBody {
    /// Its identifier: the bytes are at `/attachments/{attachment_id}`.
    id: AttachmentId,
    /// Of which material.
    material_id: MaterialId,
    /// Of which lot, for a certificate.
    material_lot_id: Option<MaterialLotId>,
    /// Its name, cleaned.
    file_name: String,
    /// `application/pdf`, `image/png`, `image/jpeg` or `image/webp`, as its bytes say.
    media_type: &'static str,
    /// How large it is, bytes.
    size_bytes: usize,
    /// SHA-256 of its bytes, hexadecimal.
    sha256: String,
    /// When it was attached.
    attached_at: UtcTime,
    /// By whom.
    attached_by: String,
}

impl From<&Attachment> for AttachmentBody {
    fn from(attachment: &Attachment) -> Self {
        Self {
            id: attachment.id,
            material_id: attachment.subject.material(),
            material_lot_id: attachment.subject.lot(),
            file_name: attachment.file_name.clone(),
            media_type: attachment.media_type.key(),
            size_bytes: attachment.size,
            sha256: attachment.sha256.clone(),
            attached_at: attachment.attached_at,
            attached_by: attachment.attached_by.clone(),
        }
    }
}

/// What a file sent as the whole body is called.
#[derive(Clone, Debug, Default, Deserialize, utoipa::IntoParams)]
#[serde(default)]
#[into_params(parameter_in = Query)]
pub struct NameQuery {
    /// The name of the file. A form with parts tells its own.
    pub file_name: String,
}

/// The endpoints.
pub fn routes() -> OpenApiRouter<App> {
    OpenApiRouter::new()
        .routes(routes!(list_sheets, attach_sheet))
        .routes(routes!(list_certificates, attach_certificate))
        .routes(routes!(show))
        .layer(DefaultBodyLimit::disable())
}

async fn list(
    db: &Db,
    by: &Member,
    subject: Subject,
) -> Result<axum::Json<Vec<AttachmentBody>>, Error> {
    let (_, found) = operations::list(db, by, subject).await?;
    Ok(axum::Json(found.iter().map(AttachmentBody::from).collect()))
}

async fn attach(
    db: &Db,
    by: &Member,
    subject: Subject,
    name: NameQuery,
    request: Request,
) -> Result<impl IntoResponse + use<>, Error> {
    by.may(Permission::KeepLots)?;
    let sent = upload::file(request, name.file_name).await?;
    let (attachment, new) = operations::attach(db, by, subject, sent).await?;
    let status = if new {
        StatusCode::CREATED
    } else {
        StatusCode::OK
    };
    let location = format!("/api/v1/attachments/{}", attachment.id);
    Ok((
        status,
        [(header::LOCATION, location)],
        axum::Json(AttachmentBody::from(&attachment)),
    ))
}

/// The safety data sheets of a material.
#[utoipa::path(get, path = "/materials/{id}/safety-data-sheets", tag = "shelf", params(("id" = MaterialId, Path)), responses(
    (status = 200, description = "The newest first: that one counts", body = Vec<AttachmentBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 404, description = "No such material", body = Problem),
))]
async fn list_sheets(
    State(db): State<Db>,
    by: Member,
    At(id): At<MaterialId>,
) -> Result<impl IntoResponse, Error> {
    list(&db, &by, Subject::Material(id)).await
}

/// Attach a safety data sheet to a material: the file as the body, 5 MB at most. The one
/// that counts already, sent again, is not kept twice.
#[utoipa::path(post, path = "/materials/{id}/safety-data-sheets", tag = "shelf", params(("id" = MaterialId, Path), NameQuery), request_body(content_type = "application/pdf", content = Vec<u8>, description = "The file itself, as application/pdf, image/png, image/jpeg or image/webp; or multipart/form-data with a part `file`"), responses(
    (status = 200, description = "This very file counts already", body = AttachmentBody),
    (status = 201, description = "Attached; Location tells where its bytes are", body = AttachmentBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Only a QA person's or manager's token with the scope plans may", body = Problem),
    (status = 404, description = "No such material", body = Problem),
    (status = 413, description = "Far too large", body = Problem),
    (status = 422, description = "Larger than 5 MB, empty, or neither a PDF nor a picture", body = Problem),
))]
async fn attach_sheet(
    State(db): State<Db>,
    by: Member,
    At(id): At<MaterialId>,
    Query(name): Query<NameQuery>,
    request: Request,
) -> Result<impl IntoResponse, Error> {
    attach(&db, &by, Subject::Material(id), name, request).await
}

/// The certificates of a lot.
#[utoipa::path(get, path = "/materials/{id}/lots/{lot_id}/certificates", tag = "shelf", params(("id" = MaterialId, Path), ("lot_id" = MaterialLotId, Path)), responses(
    (status = 200, description = "The newest first: that one counts", body = Vec<AttachmentBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 404, description = "No such lot of this material", body = Problem),
))]
async fn list_certificates(
    State(db): State<Db>,
    by: Member,
    At((id, lot_id)): At<(MaterialId, MaterialLotId)>,
) -> Result<impl IntoResponse, Error> {
    list(&db, &by, Subject::Lot(id, lot_id)).await
}

/// Attach a certificate to a lot: the file as the body, 5 MB at most. The one that counts
/// already, sent again, is not kept twice.
#[utoipa::path(post, path = "/materials/{id}/lots/{lot_id}/certificates", tag = "shelf", params(("id" = MaterialId, Path), ("lot_id" = MaterialLotId, Path), NameQuery), request_body(content_type = "application/pdf", content = Vec<u8>, description = "The file itself, as application/pdf, image/png, image/jpeg or image/webp; or multipart/form-data with a part `file`"), responses(
    (status = 200, description = "This very file counts already", body = AttachmentBody),
    (status = 201, description = "Attached; Location tells where its bytes are", body = AttachmentBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Only a QA person's or manager's token with the scope plans may", body = Problem),
    (status = 404, description = "No such lot of this material", body = Problem),
    (status = 413, description = "Far too large", body = Problem),
    (status = 422, description = "Larger than 5 MB, empty, or neither a PDF nor a picture", body = Problem),
))]
async fn attach_certificate(
    State(db): State<Db>,
    by: Member,
    At((id, lot_id)): At<(MaterialId, MaterialLotId)>,
    Query(name): Query<NameQuery>,
    request: Request,
) -> Result<impl IntoResponse, Error> {
    attach(&db, &by, Subject::Lot(id, lot_id), name, request).await
}

/// The bytes of a certificate or a safety data sheet.
#[utoipa::path(get, path = "/attachments/{attachment_id}", tag = "shelf", params(("attachment_id" = AttachmentId, Path)), responses(
    (status = 200, description = "The file, with its SHA-256 as ETag, as application/pdf, image/png, image/jpeg or image/webp"),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token lacks the scope read", body = Problem),
    (status = 404, description = "No such attachment", body = Problem),
))]
async fn show(
    State(db): State<Db>,
    by: Member,
    At(id): At<AttachmentId>,
) -> Result<Response, Error> {
    let (attachment, bytes) = operations::find(&db, &by, id).await?;
    Ok(upload::answer(&attachment, bytes))
}
