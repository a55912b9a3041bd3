//! Reading the record book.

use super::{Entry, store};
use crate::db::Db;
use crate::error::Error;
use crate::people::{Member, Permission};

/// Up to `limit` entries before the one numbered `before`, newest first.
pub async fn page(
    db: &Db,
    by: &Member,
    before: Option<i64>,
    limit: i64,
) -> Result<Vec<Entry>, Error> {
    by.may(Permission::Read)?;
    store::page(&mut *db.reader().await?, None, before, limit).await
}

/// The latest entries about one thing, newest first.
pub async fn of_subject(
    db: &Db,
    by: &Member,
    kind: &str,
    id: &str,
    limit: i64,
) -> Result<Vec<Entry>, Error> {
    by.may(Permission::Read)?;
    store::page(&mut *db.reader().await?, Some((kind, id)), None, limit).await
}
