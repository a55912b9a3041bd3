//! Keeping pH meters, calibrating them, and asking what a reading is worth.

use jiff::tz::TimeZone;
use sqlx::SqliteConnection;

use super::entered::{NewCalibrationBody, NewMeterBody, Setting};
use super::{Calibration, Meter, Standing, store};
use crate::brewery;
use crate::db::Db;
use crate::error::{Error, refuse_stale, taken};
use crate::id::{CalibrationId, MeterId, UtcTime};
use crate::input::Problems;
use crate::people::{Member, Permission};
use crate::record::{self, Change};

/// Every meter by name, or only those in use.
pub async fn list(db: &Db, by: &Member, in_use_only: bool) -> Result<Vec<Meter>, Error> {
    by.may(Permission::Read)?;
    let mut meters = store::list(&mut *db.reader().await?).await?;
    meters.retain(|meter| meter.in_use || !in_use_only);
    Ok(meters)
}

/// Up to `limit` meters made after `after`, in the order they were made.
pub async fn page(
    db: &Db,
    by: &Member,
    after: Option<MeterId>,
    limit: i64,
) -> Result<Vec<Meter>, Error> {
    by.may(Permission::Read)?;
    store::page(&mut *db.reader().await?, after, limit).await
}

/// One meter.
pub async fn find(db: &Db, by: &Member, id: MeterId) -> Result<Meter, Error> {
    by.may(Permission::Read)?;
    known(&mut *db.reader().await?, id).await
}

async fn known(db: &mut SqliteConnection, id: MeterId) -> Result<Meter, Error> {
    store::find(db, id).await?.ok_or(Error::NotFound("meter"))
}

/// What a reading of a meter taken at `at` is worth. No permission is asked: whoever may
/// enter the reading may know.
pub async fn standing(
    conn: &mut SqliteConnection,
    id: MeterId,
    at: UtcTime,
) -> Result<Standing, Error> {
    let meter = known(conn, id).await?;
    let last = store::last(conn, id, at).await?;
    Ok(Standing::of(&meter, last.as_ref(), at))
}

/// One meter, and what a reading taken with it now is worth.
pub async fn now(db: &Db, by: &Member, id: MeterId) -> Result<(Meter, Standing), Error> {
    by.may(Permission::Read)?;
    let mut snapshot = db.snapshot().await?;
    let meter = known(&mut snapshot, id).await?;
    let standing = standing(&mut snapshot, id, UtcTime::now()).await?;
    Ok((meter, standing))
}

/// The meters in use by name, and what a reading of each taken at `at` is worth.
pub async fn standings(db: &Db, by: &Member, at: UtcTime) -> Result<Vec<(Meter, Standing)>, Error> {
    let mut standings = all_standings(db, by, at).await?;
    standings.retain(|(meter, _)| meter.in_use);
    Ok(standings)
}

/// The same with the meters that are out of use.
pub async fn all_standings(
    db: &Db,
    by: &Member,
    at: UtcTime,
) -> Result<Vec<(Meter, Standing)>, Error> {
    by.may(Permission::Read)?;
    let mut snapshot = db.snapshot().await?;
    let meters = store::list(&mut snapshot).await?;
    let mut standings = Vec::with_capacity(meters.len());
    for meter in meters {
        let last = store::last(&mut snapshot, meter.id, at).await?;
        let standing = Standing::of(&meter, last.as_ref(), at);
        standings.push((meter, standing));
    }
    Ok(standings)
}

/// Adds a meter.
pub async fn create(db: &Db, by: &Member, new: Meter) -> Result<Meter, Error> {
    by.may(Permission::KeepMeters)?;
    let mut tx = db.begin().await?;
    save(&mut tx, &new).await?;
    let entry = Change::created("meter", new.id, &new.name, &describe(&new));
    record::append(&mut tx, by, entry).await?;
    tx.commit().await?;
    Ok(new)
}

async fn save(tx: &mut SqliteConnection, meter: &Meter) -> Result<(), Error> {
    store::save(tx, meter).await.map_err(|error| {
        let message = format!("A meter named “{}” exists already.", meter.name);
        taken(error, "name", message)
    })
}

/// Changes a meter; its calibrations stay. `read_version`: the version the caller changed.
pub async fn revise(
    db: &Db,
    by: &Member,
    id: MeterId,
    new: Meter,
    read_version: Option<i64>,
) -> Result<Meter, Error> {
    by.may(Permission::KeepMeters)?;
    let mut tx = db.begin().await?;
    let before = known(&mut tx, id).await?;
    refuse_stale(read_version, before.version, "this meter")?;
    let after = Meter {
        id,
        version: before.version + 1,
        ..new
    };
    save(&mut tx, &after).await?;
    let (was, is) = (describe(&before), describe(&after));
    let entry = Change::changed("meter", id, &after.name, &was, &is);
    record::append(&mut tx, by, entry).await?;
    tx.commit().await?;
    Ok(after)
}

/// Every calibration of a meter without its buffers, newest first, the withdrawn ones too.
pub async fn history(db: &Db, by: &Member, id: MeterId) -> Result<Vec<Calibration>, Error> {
    by.may(Permission::Read)?;
    store::history(&mut *db.reader().await?, id).await
}

/// The last calibration of a meter before `at` that was not withdrawn.
pub async fn last_calibration(
    db: &Db,
    by: &Member,
    id: MeterId,
    at: UtcTime,
) -> Result<Option<Calibration>, Error> {
    by.may(Permission::Read)?;
    store::last(&mut *db.snapshot().await?, id, at).await
}

/// Up to `limit` calibrations of a meter entered after `after`, in the order they were
/// entered.
pub async fn page_of_calibrations(
    db: &Db,
    by: &Member,
    id: MeterId,
    after: Option<CalibrationId>,
    limit: i64,
) -> Result<Vec<Calibration>, Error> {
    by.may(Permission::Read)?;
    let mut snapshot = db.snapshot().await?;
    known(&mut snapshot, id).await?;
    store::page_of_calibrations(&mut snapshot, id, after, limit).await
}

/// One calibration of this meter, with the meter.
pub async fn find_calibration(
    db: &Db,
    by: &Member,
    meter: MeterId,
    id: CalibrationId,
) -> Result<(Meter, Calibration), Error> {
    by.may(Permission::Read)?;
    let mut snapshot = db.snapshot().await?;
    both(&mut snapshot, meter, id).await
}

async fn both(
    tx: &mut SqliteConnection,
    meter: MeterId,
    id: CalibrationId,
) -> Result<(Meter, Calibration), Error> {
    let meter = known(tx, meter).await?;
    let calibration = store::find_calibration(tx, id)
        .await?
        .filter(|calibration| calibration.meter_id == meter.id)
        .ok_or(Error::NotFound("calibration"))?;
    Ok((meter, calibration))
}

/// Enters a calibration of a meter. From its moment on it is what readings rest on.
pub async fn calibrate(
    db: &Db,
    by: &Member,
    id: MeterId,
    body: NewCalibrationBody,
) -> Result<(Meter, Calibration), Error> {
    by.may(Permission::BrewBatches)?;
    let settings = brewery::operations::settings(db).await?;
    let zone = TimeZone::get(&settings.time_zone).unwrap_or(TimeZone::UTC);
    let now = UtcTime::now();
    let mut tx = db.begin().await?;
    let meter = known(&mut tx, id).await?;
    // What the meter was set to when its pH was read: by the calibration before.
    let last = match body.moment(now, &zone) {
        Some(at) => store::last(&mut tx, id, at).await?,
        None => None,
    };
    let calibration = body.calibration(&Setting {
        meter: &meter,
        last: last.map(|last| last.electrode),
        now,
        zone: &zone,
        by: &by.name,
    })?;
    store::insert_calibration(&mut tx, &calibration).await?;
    let typed = describe_calibration(&body, &calibration);
    let entry = Change::created("meter calibration", calibration.id, &meter.name, &typed)
        .about("meter", meter.id);
    record::append(&mut tx, by, entry).await?;
    tx.commit().await?;
    Ok((meter, calibration))
}

/// Withdraws a calibration: it stays to be read, and no longer counts.
pub async fn withdraw(
    db: &Db,
    by: &Member,
    meter: MeterId,
    id: CalibrationId,
    reason: &str,
) -> Result<(Meter, Calibration), Error> {
    by.may(Permission::BrewBatches)?;
    let mut problems = Problems::new();
    let reason = problems.text("reason", reason, 500);
    problems.finish()?;
    let reason = reason.unwrap_or_default();
    let mut tx = db.begin().await?;
    let (meter, calibration) = both(&mut tx, meter, id).await?;
    if calibration.withdrawn.is_some() {
        return Err(Error::Conflict(
            "This calibration is withdrawn already".into(),
        ));
    }
    store::withdraw(&mut tx, id, UtcTime::now(), &reason).await?;
    let entry = Change::event("withdrew", "meter calibration", id, &meter.name)
        .because(Some(reason))
        .about("meter", meter.id);
    record::append(&mut tx, by, entry).await?;
    let found = both(&mut tx, meter.id, id).await?;
    tx.commit().await?;
    Ok(found)
}

fn describe(meter: &Meter) -> serde_json::Value {
    serde_json::to_value(NewMeterBody::from(meter)).unwrap_or_default()
}

/// As it was typed, with when it was done and what it found.
fn describe_calibration(body: &NewCalibrationBody, found: &Calibration) -> serde_json::Value {
    let mut typed = serde_json::to_value(body).unwrap_or_default();
    typed["calibrated_at"] = found.calibrated_at.to_string().into();
    typed["slope_percent"] = found.electrode.slope.get().into();
    typed["offset_mv"] = found.electrode.offset.get().into();
    typed
}
