//! Reading the record book.

use super::filter::Filter;
use super::store::{self, Wanted};
use super::{Entry, export};
use crate::brewery;
use crate::db::Db;
use crate::error::Error;
use crate::id::{MemberId, SourceId, UtcTime};
use crate::people::{Member, Permission};

/// Some entries, and how many there are of the kind.
#[derive(Clone, Debug)]
pub struct Found {
    /// The newest of them before the cursor.
    pub entries: Vec<Entry>,
    /// How many fit the filter, with those before and after.
    pub count: i64,
    /// How many of them are newer than the first of these.
    pub newer: i64,
}

/// Up to `limit` entries that fit, before the one numbered `before`, newest first.
pub async fn find(
    db: &Db,
    by: &Member,
    filter: &Filter,
    before: Option<i64>,
    limit: i64,
) -> Result<Found, Error> {
    by.may(Permission::Read)?;
    let wanted = wanted(db, filter).await?;
    let mut snapshot = db.snapshot().await?;
    let mut found = store::find(&mut snapshot, &wanted, before, limit).await?;
    store::fill_about(&mut snapshot, &mut found.entries).await?;
    Ok(found)
}

/// A table of entries, and how many of how many it holds.
#[derive(Clone, Debug)]
pub struct Table {
    /// The table, RFC 4180.
    pub csv: String,
    /// Entries in it.
    pub entries: i64,
    /// Entries that fit from the cursor on; more where the table was cut.
    pub count: i64,
    /// The oldest entry in it.
    pub last: Option<i64>,
}

impl Table {
    /// Whether older entries were left out.
    pub fn is_cut(&self) -> bool {
        self.entries < self.count
    }
}

/// The entries that fit as a table, the newest [`export::MOST`] before `before`.
pub async fn table(
    db: &Db,
    by: &Member,
    filter: &Filter,
    before: Option<i64>,
) -> Result<Table, Error> {
    by.may(Permission::Read)?;
    let time_zone = brewery::operations::settings(db).await?.time_zone;
    let wanted = wanted(db, filter).await?;
    let found = store::find(&mut *db.reader().await?, &wanted, before, export::MOST).await?;
    let entries = found.entries;
    let last = entries.last().map(|entry| entry.seq);
    let shown = i64::try_from(entries.len()).unwrap_or(i64::MAX);
    // Thousands of lines take a moment: other requests go on meanwhile.
    let csv = tokio::task::spawn_blocking(move || export::table(&entries, &time_zone))
        .await
        .map_err(|error| Error::internal("The table could not be written", error))??;
    Ok(Table {
        csv,
        entries: shown,
        count: found.count - found.newer,
        last,
    })
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
    let wanted = Wanted {
        subject: Some((kind.to_owned(), id.to_owned())),
        ..Wanted::default()
    };
    let found = store::find(&mut *db.reader().await?, &wanted, None, limit).await?;
    Ok(found.entries)
}

/// What a filter offers to choose from.
#[derive(Clone, Debug)]
pub struct Choices {
    /// Everybody who has an account.
    pub people: Vec<(MemberId, String)>,
    /// Every source.
    pub sources: Vec<(SourceId, String)>,
    /// Every kind of subject there is an entry of.
    pub kinds: Vec<String>,
}

/// What a filter offers to choose from.
pub async fn choices(db: &Db, by: &Member) -> Result<Choices, Error> {
    by.may(Permission::Read)?;
    let mut reader = db.reader().await?;
    Ok(Choices {
        people: store::people(&mut reader).await?,
        sources: store::sources(&mut reader).await?,
        kinds: store::kinds(&mut reader).await?,
    })
}

/// A filter with its days as moments.
async fn wanted(db: &Db, filter: &Filter) -> Result<Wanted, Error> {
    let settings = brewery::operations::settings(db).await?;
    let zone = jiff::tz::TimeZone::get(&settings.time_zone).unwrap_or(jiff::tz::TimeZone::UTC);
    let begin = |field: &str, day: jiff::civil::Date| {
        let begin = day.to_zoned_datetime(zone.clone()).map_err(|_| {
            Error::field(
                field,
                "Choose another day; this one cannot be told in the brewery’s time zone.",
            )
        })?;
        Ok::<_, Error>(UtcTime::from(begin.timestamp()))
    };
    let from = filter.from.map(|day| begin("from", day)).transpose()?;
    let until = filter
        .to
        .map(|day| begin("to", day.saturating_add(jiff::Span::new().days(1))))
        .transpose()?;
    Ok(Wanted {
        batch: filter.batch.clone(),
        source: filter.source,
        person: filter.person,
        lot: filter.lot.clone(),
        from,
        until,
        kind: filter.kind.clone(),
        text: filter.text.clone(),
        subject: None,
    })
}
