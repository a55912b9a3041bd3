//! SQL for invitations.

use sqlx::{Row, SqliteConnection, sqlite::SqliteRow};

use super::role;
use crate::error::Error;
use crate::id::{InvitationId, MemberId, UtcTime};
use crate::people::Invitation;

fn invitation(row: &SqliteRow) -> Result<Invitation, Error> {
    Ok(Invitation {
        id: row.try_get("id")?,
        name: row.try_get("name")?,
        role: role(row.try_get("role")?)?,
        created_at: row.try_get("created_at")?,
        expires_at: row.try_get("expires_at")?,
    })
}

pub(in crate::people) async fn insert(
    db: &mut SqliteConnection,
    invitation: &Invitation,
    secret_hash: &str,
    by: MemberId,
) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO invitations (id, name, role, secret_hash, invited_by, created_at, expires_at)
         VALUES (?, ?, ?, ?, ?, ?, ?)",
    )
    .bind(invitation.id)
    .bind(&invitation.name)
    .bind(invitation.role.key())
    .bind(secret_hash)
    .bind(by)
    .bind(invitation.created_at)
    .bind(invitation.expires_at)
    .execute(db)
    .await?;
    Ok(())
}

/// The invitations that nobody has taken up yet and that still can be.
pub(in crate::people) async fn open(
    db: &mut SqliteConnection,
    now: UtcTime,
) -> Result<Vec<Invitation>, Error> {
    let rows = sqlx::query(
        "SELECT id, name, role, created_at, expires_at FROM invitations
         WHERE member_id IS NULL AND revoked_at IS NULL AND expires_at > ? ORDER BY created_at DESC",
    )
    .bind(now)
    .fetch_all(db)
    .await?;
    rows.iter().map(invitation).collect()
}

/// The open invitation with this secret.
pub(in crate::people) async fn by_secret(
    db: &mut SqliteConnection,
    secret_hash: &str,
    now: UtcTime,
) -> Result<Option<Invitation>, Error> {
    let row = sqlx::query(
        "SELECT id, name, role, created_at, expires_at FROM invitations
         WHERE secret_hash = ? AND member_id IS NULL AND revoked_at IS NULL AND expires_at > ?",
    )
    .bind(secret_hash)
    .bind(now)
    .fetch_optional(db)
    .await?;
    row.as_ref().map(invitation).transpose()
}

/// The open invitation with this identifier.
pub(in crate::people) async fn find(
    db: &mut SqliteConnection,
    id: InvitationId,
    now: UtcTime,
) -> Result<Option<Invitation>, Error> {
    let row = sqlx::query(
        "SELECT id, name, role, created_at, expires_at FROM invitations
         WHERE id = ? AND member_id IS NULL AND revoked_at IS NULL AND expires_at > ?",
    )
    .bind(id)
    .bind(now)
    .fetch_optional(db)
    .await?;
    row.as_ref().map(invitation).transpose()
}

/// Notes the account that an invitation became.
pub(in crate::people) async fn take_up(
    db: &mut SqliteConnection,
    id: InvitationId,
    member: MemberId,
) -> Result<(), sqlx::Error> {
    sqlx::query("UPDATE invitations SET member_id = ? WHERE id = ?")
        .bind(member)
        .bind(id)
        .execute(db)
        .await?;
    Ok(())
}

pub(in crate::people) async fn revoke(
    db: &mut SqliteConnection,
    id: InvitationId,
    now: UtcTime,
) -> Result<(), sqlx::Error> {
    sqlx::query("UPDATE invitations SET revoked_at = ? WHERE id = ?")
        .bind(now)
        .bind(id)
        .execute(db)
        .await?;
    Ok(())
}
