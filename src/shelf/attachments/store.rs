//! SQL for attachments.

use sqlx::{Row, SqliteConnection, sqlite::SqliteRow};

use super::{Attachment, MediaType, Subject};
use crate::error::Error;
use crate::id::AttachmentId;

pub(super) async fn insert(
    db: &mut SqliteConnection,
    attachment: &Attachment,
    bytes: Vec<u8>,
) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO attachments
             (id, material_id, material_lot_id, file_name, media_type, sha256, attached_at,
              attached_by, bytes)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)",
    )
    .bind(attachment.id)
    .bind(attachment.subject.material())
    .bind(attachment.subject.lot())
    .bind(&attachment.file_name)
    .bind(attachment.media_type.key())
    .bind(&attachment.sha256)
    .bind(attachment.attached_at)
    .bind(&attachment.attached_by)
    .bind(bytes)
    .execute(db)
    .await?;
    Ok(())
}

fn attachment(row: &SqliteRow) -> Result<Attachment, Error> {
    let media_type: &str = row.try_get("media_type")?;
    let material = row.try_get("material_id")?;
    let size: i64 = row.try_get("size")?;
    Ok(Attachment {
        id: row.try_get("id")?,
        subject: match row.try_get("material_lot_id")? {
            None => Subject::Material(material),
            Some(lot) => Subject::Lot(material, lot),
        },
        file_name: row.try_get("file_name")?,
        media_type: MediaType::from_key(media_type).ok_or_else(|| {
            Error::internal("An attachment cannot be read", media_type.to_owned())
        })?,
        size: usize::try_from(size).unwrap_or(0),
        sha256: row.try_get("sha256")?,
        attached_at: row.try_get("attached_at")?,
        attached_by: row.try_get("attached_by")?,
    })
}

/// Every file of a subject, the newest first.
pub(super) async fn of(
    db: &mut SqliteConnection,
    subject: Subject,
) -> Result<Vec<Attachment>, Error> {
    let rows = sqlx::query(
        "SELECT id, material_id, material_lot_id, file_name, media_type, length(bytes) AS size,
                sha256, attached_at, attached_by
         FROM attachments WHERE material_id = ? AND material_lot_id IS ? ORDER BY id DESC",
    )
    .bind(subject.material())
    .bind(subject.lot())
    .fetch_all(db)
    .await?;
    rows.iter().map(attachment).collect()
}

/// One file with its bytes.
pub(super) async fn find(
    db: &mut SqliteConnection,
    id: AttachmentId,
) -> Result<Option<(Attachment, Vec<u8>)>, Error> {
    let row = sqlx::query(
        "SELECT id, material_id, material_lot_id, file_name, media_type, length(bytes) AS size,
                sha256, attached_at, attached_by, bytes
         FROM attachments WHERE id = ?",
    )
    .bind(id)
    .fetch_optional(db)
    .await?;
    let Some(row) = row else { return Ok(None) };
    Ok(Some((attachment(&row)?, row.try_get("bytes")?)))
}
