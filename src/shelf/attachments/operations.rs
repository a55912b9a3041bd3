//! Attaching files and reading them.

use serde_json::{Value, json};
use sha2::{Digest, Sha256};
use sqlx::SqliteConnection;

use super::{Attachment, MediaType, Sent, Subject, file_name, store};
use crate::db::Db;
use crate::error::Error;
use crate::id::{AttachmentId, UtcTime};
use crate::people::{Member, Permission};
use crate::record::{self, Change};
use crate::shelf::operations as shelf;

/// What a subject is called, where it exists.
async fn named(conn: &mut SqliteConnection, subject: Subject) -> Result<String, Error> {
    match subject {
        Subject::Material(id) => Ok(shelf::material(conn, id).await?.name),
        Subject::Lot(material, lot) => {
            let (material, lot) = shelf::lot_of_material(conn, material, lot).await?;
            Ok(material.name_with(Some(&lot)))
        }
    }
}

/// Every file of a subject, the newest first, with what the subject is called.
pub async fn list(
    db: &Db,
    by: &Member,
    subject: Subject,
) -> Result<(String, Vec<Attachment>), Error> {
    by.may(Permission::Read)?;
    let mut snapshot = db.snapshot().await?;
    let name = named(&mut snapshot, subject).await?;
    Ok((name, store::of(&mut snapshot, subject).await?))
}

/// The file of a subject that counts: the newest.
pub async fn newest(db: &Db, by: &Member, subject: Subject) -> Result<Option<Attachment>, Error> {
    Ok(list(db, by, subject).await?.1.into_iter().next())
}

/// One file with its bytes.
pub async fn find(db: &Db, by: &Member, id: AttachmentId) -> Result<(Attachment, Vec<u8>), Error> {
    by.may(Permission::Read)?;
    let found = store::find(&mut *db.reader().await?, id).await?;
    found.ok_or(Error::NotFound("attachment"))
}

/// Attaches a file, which from then on is the one that counts. The one that counts
/// already, sent again, is answered as it is: `false`.
pub async fn attach(
    db: &Db,
    by: &Member,
    subject: Subject,
    sent: Sent,
) -> Result<(Attachment, bool), Error> {
    by.may(Permission::KeepLots)?;
    let Some(media_type) = MediaType::of(&sent.bytes) else {
        return Err(Error::field(
            "file",
            "This is neither a PDF nor a PNG, JPEG or WebP picture, whatever its name says. Export or photograph it as one of these.",
        ));
    };
    let sha256: String = Sha256::digest(&sent.bytes)
        .iter()
        .map(|byte| format!("{byte:02x}"))
        .collect();
    let mut tx = db.begin().await?;
    let name = named(&mut tx, subject).await?;
    let before = store::of(&mut tx, subject).await?.into_iter().next();
    if let Some(same) = before.as_ref().filter(|it| it.sha256 == sha256) {
        return Ok((same.clone(), false));
    }
    let attachment = Attachment {
        id: AttachmentId::new(),
        subject,
        file_name: file_name(&sent.name, media_type, subject.what()),
        media_type,
        size: sent.bytes.len(),
        sha256,
        attached_at: UtcTime::now(),
        attached_by: by.name.clone(),
    };
    store::insert(&mut tx, &attachment, sent.bytes).await?;
    let deed = format!("attached a {} to", subject.what());
    let (was, is) = (before.as_ref().map(describe), describe(&attachment));
    let entry = match subject {
        Subject::Material(id) => Change::of(&deed, "material", id, &name, was, Some(is)),
        Subject::Lot(material, lot) => {
            Change::of(&deed, "material lot", lot, &name, was, Some(is)).about("material", material)
        }
    };
    record::append(&mut tx, by, entry).await?;
    tx.commit().await?;
    Ok((attachment, true))
}

fn describe(attachment: &Attachment) -> Value {
    json!({
        "attachment_id": attachment.id, "file_name": attachment.file_name,
        "media_type": attachment.media_type.key(), "bytes": attachment.size, "sha256": attachment.sha256,
    })
}
