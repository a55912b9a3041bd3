//! Keeping sources, and asking what their water is.

use std::collections::HashMap;

use chemistry::report::WaterKind;
use jiff::civil::Date;

use super::api::SourceBody;
use super::water_tests::WaterTest;
use super::water_tests::store::{self as tests, Which};
use super::{NewSource, Source, TodaysWater, store, todays_water as water};
use crate::brewery;
use crate::db::Db;
use crate::error::{Error, refuse_stale, taken};
use crate::id::SourceId;
use crate::input::Problems;
use crate::people::{Member, Permission};
use crate::record;
use crate::web::format;

impl TryFrom<SourceBody> for NewSource {
    type Error = Error;

    fn try_from(body: SourceBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let name = problems.text("name", &body.name, 80);
        let kind = problems.choice("kind", &body.kind, WaterKind::from_key);
        let price_per_m3 =
            problems.optional_quantity("price_per_m3", &body.price_per_m3, |price| {
                if (0.0..=10_000.0).contains(&price) {
                    Ok(price)
                } else {
                    Err("Enter a price from 0 to 10000")
                }
            });
        let days_between_tests =
            problems.quantity("days_between_tests", &body.days_between_tests, |days| {
                #[allow(
                    clippy::cast_possible_truncation,
                    reason = "checked to be a small whole number"
                )]
                if (1.0..=3650.0).contains(&days) && days.fract() == 0.0 {
                    Ok(days as i64)
                } else {
                    Err("Enter whole days, from 1 to 3650")
                }
            });
        let notes = problems.optional_text("notes", &body.notes, 2000);
        problems.finish()?;
        match (name, kind, days_between_tests) {
            (Some(name), Some(kind), Some(days_between_tests)) => Ok(Self {
                name,
                kind,
                blending: body.blending.0,
                price_per_m3,
                days_between_tests,
                notes: notes.unwrap_or_default(),
                in_use: body.in_use.0,
            }),
            _ => Err(Error::field("", "Fill in every field.")),
        }
    }
}

/// Keeps a new source.
pub async fn create(db: &Db, by: &Member, new: NewSource) -> Result<Source, Error> {
    by.may(Permission::KeepSources)?;
    let source = new.into_source(SourceId::new(), 1);
    let mut tx = db.begin().await?;
    store::insert(&mut tx, &source)
        .await
        .map_err(|error| name_taken(error, &source.name))?;
    let entry = record::Change::created("source", source.id, &source.name, &describe(&source));
    record::append(&mut tx, by, entry).await?;
    tx.commit().await?;
    Ok(source)
}

/// Changes a source. `read_version`: the version the caller changed.
pub async fn revise(
    db: &Db,
    by: &Member,
    id: SourceId,
    new: NewSource,
    read_version: Option<i64>,
) -> Result<Source, Error> {
    by.may(Permission::KeepSources)?;
    let mut tx = db.begin().await?;
    let before = store::find(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("source"))?;
    refuse_stale(read_version, before.version, "this source")?;
    let after = new.into_source(id, before.version + 1);
    store::update(&mut tx, &after)
        .await
        .map_err(|error| name_taken(error, &after.name))?;
    let entry = record::Change::changed(
        "source",
        id,
        &after.name,
        &describe(&before),
        &describe(&after),
    );
    record::append(&mut tx, by, entry).await?;
    tx.commit().await?;
    Ok(after)
}

/// Retires a source, or takes it back into use.
pub async fn set_in_use(db: &Db, by: &Member, id: SourceId, in_use: bool) -> Result<Source, Error> {
    by.may(Permission::KeepSources)?;
    let mut tx = db.begin().await?;
    let before = store::find(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("source"))?;
    if before.in_use == in_use {
        return Ok(before);
    }
    let after = Source {
        in_use,
        version: before.version + 1,
        ..before.clone()
    };
    store::update(&mut tx, &after).await?;
    let action = if in_use { "taken back" } else { "retired" };
    let (was, is) = (Some(describe(&before)), Some(describe(&after)));
    let entry = record::Change::of(action, "source", id, &after.name, was, is);
    record::append(&mut tx, by, entry).await?;
    tx.commit().await?;
    Ok(after)
}

fn name_taken(error: sqlx::Error, name: &str) -> Error {
    taken(
        error,
        "name",
        format!("A source named “{name}” exists already."),
    )
}

fn describe(source: &Source) -> serde_json::Value {
    serde_json::to_value(SourceBody::from(source)).unwrap_or_default()
}

/// Every source, those in use first.
pub async fn list(db: &Db, by: &Member) -> Result<Vec<Source>, Error> {
    by.may(Permission::Read)?;
    store::list(&mut *db.reader().await?).await
}

/// Up to `limit` sources in the order they were made, after the one given.
pub async fn page(
    db: &Db,
    by: &Member,
    after: Option<SourceId>,
    limit: i64,
) -> Result<Vec<Source>, Error> {
    by.may(Permission::Read)?;
    store::page(&mut *db.reader().await?, after, limit).await
}

/// One source.
pub async fn find(db: &Db, by: &Member, id: SourceId) -> Result<Source, Error> {
    by.may(Permission::Read)?;
    store::find(&mut *db.reader().await?, id)
        .await?
        .ok_or(Error::NotFound("source"))
}

/// The day of each source's newest sample; sources never tested are not in it.
pub async fn newest_samples(db: &Db, by: &Member) -> Result<HashMap<SourceId, Date>, Error> {
    by.may(Permission::Read)?;
    tests::newest(&mut *db.reader().await?).await
}

/// Every test of a source that was not withdrawn, newest sample first.
pub async fn history(db: &Db, by: &Member, id: SourceId) -> Result<Vec<WaterTest>, Error> {
    by.may(Permission::Read)?;
    let which = Which {
        source: Some(id),
        ..Which::ALL
    };
    let mut tests = tests::tests(&mut *db.reader().await?, which).await?;
    tests.retain(|test| test.withdrawn.is_none());
    Ok(tests)
}

/// What a source's water is today, from every test that counts. [`Error::Conflict`]
/// says what is missing when that cannot be told.
pub async fn todays_water(db: &Db, by: &Member, id: SourceId) -> Result<TodaysWater, Error> {
    let settings = brewery::operations::settings(db).await?;
    water_on(db, by, id, format::today(&settings.time_zone)).await
}

/// What a source's water was taken to be on a day: later samples are left out.
pub async fn water_on(db: &Db, by: &Member, id: SourceId, on: Date) -> Result<TodaysWater, Error> {
    by.may(Permission::Read)?;
    let limits = brewery::operations::settings(db).await?.potable_limits;
    let mut snapshot = db.snapshot().await?;
    let source = store::find(&mut snapshot, id)
        .await?
        .ok_or(Error::NotFound("source"))?;
    let which = Which {
        source: Some(id),
        counting: true,
        ..Which::ALL
    };
    let tests = tests::tests(&mut snapshot, which).await?;
    snapshot.commit().await?;
    water::compose(source, &tests, limits, on)
}
