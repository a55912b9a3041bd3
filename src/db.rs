//! The SQLite file: one connection that writes, a few that only read.
//!
//! Every write is one transaction begun with `BEGIN IMMEDIATE`. The journal is a
//! write-ahead log with `synchronous=FULL`: an answered write survives a power cut.

use std::path::Path;
use std::str::FromStr;
use std::time::Duration;

use sqlx::pool::PoolConnection;
use sqlx::sqlite::{SqliteConnectOptions, SqliteJournalMode, SqlitePoolOptions, SqliteSynchronous};
use sqlx::{Sqlite, SqlitePool, Transaction};

use crate::error::Error;
use crate::web::repeat;

/// The tables, embedded in the binary.
static MIGRATIONS: sqlx::migrate::Migrator = sqlx::migrate!("./migrations");

/// Handle to the database; cheap to clone.
#[derive(Clone, Debug)]
pub struct Db {
    writer: SqlitePool,
    readers: SqlitePool,
}

impl Db {
    /// Opens the file, creating it and its tables where missing.
    pub async fn open(file: &Path) -> Result<Self, Error> {
        let options = SqliteConnectOptions::from_str("sqlite:")?
            .filename(file)
            .create_if_missing(true)
            .foreign_keys(true)
            .journal_mode(SqliteJournalMode::Wal)
            .synchronous(SqliteSynchronous::Full)
            .busy_timeout(Duration::from_secs(5));
        let writer = SqlitePoolOptions::new()
            .max_connections(1)
            .connect_with(options.clone())
            .await?;
        MIGRATIONS.run(&writer).await.map_err(|error| {
            Error::internal("The database could not be brought up to date", error)
        })?;
        let readers = SqlitePoolOptions::new()
            .max_connections(4)
            .connect_with(options.read_only(true))
            .await?;
        Ok(Self { writer, readers })
    }

    /// Begins a transaction that will write. When the request carries a key that
    /// was used before, nothing begins: the answer is [`Error::Repeated`].
    pub async fn begin(&self) -> Result<Transaction<'static, Sqlite>, Error> {
        let mut tx = self.writer.begin_with("BEGIN IMMEDIATE").await?;
        repeat::claim(&mut tx).await?;
        Ok(tx)
    }

    /// Begins a transaction that is no part of what the request asks for, such as
    /// noting that a session is alive: it claims no key.
    pub async fn begin_unkeyed(&self) -> Result<Transaction<'static, Sqlite>, Error> {
        Ok(self.writer.begin_with("BEGIN IMMEDIATE").await?)
    }

    /// A connection for reading.
    pub async fn reader(&self) -> Result<PoolConnection<Sqlite>, Error> {
        Ok(self.readers.acquire().await?)
    }

    /// A transaction that only reads: several queries see one state.
    pub async fn snapshot(&self) -> Result<Transaction<'static, Sqlite>, Error> {
        Ok(self.readers.begin().await?)
    }

    /// Writes a consistent copy of the whole database to a new file.
    pub async fn back_up(&self, to: &Path) -> Result<(), Error> {
        let mut reader = self.reader().await?;
        sqlx::query("VACUUM INTO ?")
            .bind(to.to_string_lossy())
            .execute(&mut *reader)
            .await?;
        Ok(())
    }

    /// Closes every connection, so that the write-ahead log is folded in.
    pub async fn close(&self) {
        self.readers.close().await;
        self.writer.close().await;
    }
}
