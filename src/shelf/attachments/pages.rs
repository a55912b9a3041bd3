//! The pages of certificates and safety data sheets, and the files themselves.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::{DefaultBodyLimit, Request, State};
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::get;

use super::{Attachment, Subject, operations, upload};
use crate::db::Db;
use crate::error::Error;
use crate::id::{AttachmentId, MaterialId, MaterialLotId};
use crate::people::Permission;
use crate::shelf::words::capital;
use crate::web::App;
use crate::web::extract::At;
use crate::web::form::Form;
use crate::web::format;
use crate::web::layout::{Framer, Page};

/// The pages. They stand outside the layer that keeps answers to keyed forms, because it
/// holds whole requests: a file sent twice is the same file.
pub fn routes() -> Router<App> {
    Router::new()
        .route(
            "/shelf/{id}/safety-data-sheets",
            get(sheets).post(attach_sheet),
        )
        .route(
            "/shelf/{id}/lots/{lot_id}/certificates",
            get(certificates).post(attach_certificate),
        )
        .route("/shelf/attachments/{attachment_id}", get(show))
        .layer(DefaultBodyLimit::disable())
}

#[derive(Template, WebTemplate)]
#[template(path = "shelf/attachments.html")]
struct AttachmentsPage {
    page: Page,
    typed: Form,
    name: String,
    what: String,
    address: String,
    back: String,
    may_attach: bool,
    rows: Vec<AttachmentRow>,
}

struct AttachmentRow {
    id: AttachmentId,
    file_name: String,
    kind: &'static str,
    size: String,
    at: String,
    who: String,
}

impl AttachmentRow {
    fn of(attachment: Attachment, time_zone: &str) -> Self {
        Self {
            id: attachment.id,
            kind: match attachment.media_type {
                super::MediaType::Pdf => "PDF",
                _ => "picture",
            },
            size: size(attachment.size),
            at: format::moment(attachment.attached_at, time_zone),
            who: attachment.attached_by,
            file_name: attachment.file_name,
        }
    }
}

/// A size as people read it.
fn size(bytes: usize) -> String {
    let kilobytes = bytes.div_ceil(1024);
    if kilobytes < 1024 {
        format!("{kilobytes} kB")
    } else {
        let tenths = kilobytes * 10 / 1024;
        format!("{}.{} MB", tenths / 10, tenths % 10)
    }
}

async fn attachments_page(
    db: &Db,
    framer: &Framer,
    subject: Subject,
    typed: Form,
) -> Result<AttachmentsPage, Error> {
    let (name, found) = operations::list(db, &framer.member, subject).await?;
    let what = capital(subject.what());
    let page = framer.page(format!("{what} of {name}"), "shelf").await;
    let back = match subject {
        Subject::Material(id) => format!("/shelf/{id}"),
        Subject::Lot(id, lot) => format!("/shelf/{id}/lots/{lot}"),
    };
    let rows = found
        .into_iter()
        .map(|attachment| AttachmentRow::of(attachment, &page.settings.time_zone))
        .collect();
    Ok(AttachmentsPage {
        address: address(subject),
        back,
        name,
        what,
        may_attach: page.can(Permission::KeepLots),
        rows,
        page,
        typed,
    })
}

fn address(subject: Subject) -> String {
    match subject {
        Subject::Material(id) => format!("/shelf/{id}/safety-data-sheets"),
        Subject::Lot(id, lot) => format!("/shelf/{id}/lots/{lot}/certificates"),
    }
}

async fn sheets(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<MaterialId>,
    typed: Form,
) -> Result<AttachmentsPage, Error> {
    attachments_page(&db, &framer, Subject::Material(id), typed).await
}

async fn certificates(
    State(db): State<Db>,
    framer: Framer,
    At((id, lot_id)): At<(MaterialId, MaterialLotId)>,
    typed: Form,
) -> Result<AttachmentsPage, Error> {
    attachments_page(&db, &framer, Subject::Lot(id, lot_id), typed).await
}

async fn attach_sheet(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<MaterialId>,
    request: Request,
) -> Result<Response, Error> {
    attach(&db, &framer, Subject::Material(id), request).await
}

async fn attach_certificate(
    State(db): State<Db>,
    framer: Framer,
    At((id, lot_id)): At<(MaterialId, MaterialLotId)>,
    request: Request,
) -> Result<Response, Error> {
    attach(&db, &framer, Subject::Lot(id, lot_id), request).await
}

async fn attach(
    db: &Db,
    framer: &Framer,
    subject: Subject,
    request: Request,
) -> Result<Response, Error> {
    let attached = async {
        framer.member.may(Permission::KeepLots)?;
        let sent = upload::form(request).await?;
        operations::attach(db, &framer.member, subject, sent).await
    };
    match attached.await {
        Ok(_) => Ok(Redirect::to(&format!("{}?done=saved", address(subject))).into_response()),
        Err(error) => {
            let (status, typed) = Form::empty().refused(error)?;
            let page = attachments_page(db, framer, subject, typed).await?;
            Ok((status, page).into_response())
        }
    }
}

async fn show(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<AttachmentId>,
) -> Result<Response, Error> {
    let (attachment, bytes) = operations::find(&db, &framer.member, id).await?;
    Ok(upload::answer(&attachment, bytes))
}
