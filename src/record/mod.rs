//! The record book: an append-only history of every change.
//!
//! An operation calls [`append`] inside its own transaction, so that no change
//! exists without its entry and no entry without its change. The schema refuses
//! to alter or remove entries.

use std::fmt::Display;

use serde_json::Value;
use sqlx::SqliteConnection;

use crate::error::Error;
use crate::id::{MemberId, UtcTime};
use crate::people::Member;

pub mod api;
mod differences;
pub mod export;
pub mod filter;
pub mod operations;
pub mod pages;
pub mod store;
pub mod trace;

/// What an operation did, ready to be written down.
#[derive(Clone, Debug)]
pub struct Change {
    action: String,
    subject_kind: &'static str,
    subject_id: String,
    subject_name: String,
    before: Option<Value>,
    after: Option<Value>,
    reason: Option<String>,
    about: Vec<(&'static str, String)>,
}

impl Change {
    /// Something new.
    pub fn created(kind: &'static str, id: impl Display, name: &str, after: &Value) -> Self {
        Self::of("created", kind, id, name, None, Some(after.clone()))
    }

    /// Something is different now.
    pub fn changed(
        kind: &'static str,
        id: impl Display,
        name: &str,
        before: &Value,
        after: &Value,
    ) -> Self {
        Self::of(
            "changed",
            kind,
            id,
            name,
            Some(before.clone()),
            Some(after.clone()),
        )
    }

    /// Something happened that its name says: “approved”, “withdrawn”.
    pub fn event(action: &str, kind: &'static str, id: impl Display, name: &str) -> Self {
        Self::of(action, kind, id, name, None, None)
    }

    /// The same, with what was and what is.
    pub fn of(
        action: &str,
        kind: &'static str,
        id: impl Display,
        name: &str,
        before: Option<Value>,
        after: Option<Value>,
    ) -> Self {
        Self {
            action: action.to_owned(),
            subject_kind: kind,
            subject_id: id.to_string(),
            subject_name: name.to_owned(),
            before,
            after,
            reason: None,
            about: vec![(kind, id.to_string())],
        }
    }

    /// Why it was done.
    #[must_use]
    pub fn because(mut self, reason: Option<String>) -> Self {
        self.reason = reason;
        self
    }

    /// What else it is about: the book is searched by that. `kind` as subjects are named,
    /// or `batch` with the number of the batch.
    #[must_use]
    pub fn about(mut self, kind: &'static str, id: impl Display) -> Self {
        let link = (kind, id.to_string());
        if !self.about.contains(&link) {
            self.about.push(link);
        }
        self
    }

    /// The same for several things.
    #[must_use]
    pub fn about_each<I: Display>(
        self,
        things: impl IntoIterator<Item = (&'static str, I)>,
    ) -> Self {
        things
            .into_iter()
            .fold(self, |change, (kind, id)| change.about(kind, id))
    }
}

/// One line of the record book.
#[derive(Clone, Debug)]
pub struct Entry {
    /// Its place in the book, counting from one.
    pub seq: i64,
    /// When.
    pub at: UtcTime,
    /// Whose account, if an account did it.
    pub member_id: Option<MemberId>,
    /// Who, by the name of that day.
    pub member_name: String,
    /// What was done.
    pub action: String,
    /// To what kind of thing.
    pub subject_kind: String,
    /// To which.
    pub subject_id: String,
    /// Its name that day.
    pub subject_name: String,
    /// As it was.
    pub before: Option<Value>,
    /// As it is after.
    pub after: Option<Value>,
    /// Why, if that was said.
    pub reason: Option<String>,
    /// What it is about, its subject among it: kind and identifier of each. Lists read it
    /// where they show it.
    pub about: Vec<(String, String)>,
}

/// Writes a change down, in the transaction that makes it.
pub async fn append(tx: &mut SqliteConnection, by: &Member, change: Change) -> Result<(), Error> {
    store::insert(tx, by, UtcTime::now(), &change).await?;
    Ok(())
}
