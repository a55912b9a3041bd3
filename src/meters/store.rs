//! SQL for pH meters and their calibrations.

use chemistry::electrode::{Buffer, Electrode};
use chemistry::quantity::{Celsius, Millivolts, Ph, PhShift, SlopePercent};
use sqlx::{Row, SqliteConnection, sqlite::SqliteRow};

use super::{BufferRead, Calibration, Kind, Meter, Method};
use crate::error::Error;
use crate::id::{CalibrationId, MeterId, UtcTime};

/// How a buffer of no common set is stored.
const OTHER: &str = "other";

fn unknown(what: &'static str, key: &str) -> Error {
    Error::internal(what, key.to_owned())
}

fn meter(row: &SqliteRow) -> Result<Meter, Error> {
    let kind: &str = row.try_get("kind")?;
    Ok(Meter {
        id: row.try_get("id")?,
        name: row.try_get("name")?,
        kind: Kind::from_key(kind).ok_or_else(|| unknown("A meter has an unknown kind", kind))?,
        serial: row.try_get("serial")?,
        resolution: PhShift::clamped(row.try_get("resolution_ph")?),
        compensated: row.try_get("compensated")?,
        notes: row.try_get("notes")?,
        in_use: row.try_get("in_use")?,
        version: row.try_get("version")?,
    })
}

/// Adds a meter, or replaces the one with its identifier.
pub(super) async fn save(db: &mut SqliteConnection, meter: &Meter) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO meters (id, name, kind, serial, resolution_ph, compensated, notes, in_use, version)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)
         ON CONFLICT (id) DO UPDATE SET
             name = excluded.name, kind = excluded.kind, serial = excluded.serial,
             resolution_ph = excluded.resolution_ph, compensated = excluded.compensated,
             notes = excluded.notes, in_use = excluded.in_use, version = excluded.version",
    )
    .bind(meter.id)
    .bind(&meter.name)
    .bind(meter.kind.key())
    .bind(&meter.serial)
    .bind(meter.resolution.get())
    .bind(meter.compensated)
    .bind(&meter.notes)
    .bind(meter.in_use)
    .bind(meter.version)
    .execute(db)
    .await?;
    Ok(())
}

/// Every column of a meter, then what follows FROM.
macro_rules! select_meters {
    ($rest:literal) => {
        concat!(
            "SELECT id, name, kind, serial, resolution_ph, compensated, notes, in_use, version
             FROM meters ",
            $rest
        )
    };
}

pub(super) async fn find(db: &mut SqliteConnection, id: MeterId) -> Result<Option<Meter>, Error> {
    let row = sqlx::query(select_meters!("WHERE id = ?"))
        .bind(id)
        .fetch_optional(db)
        .await?;
    row.as_ref().map(meter).transpose()
}

/// Every meter by name.
pub(super) async fn list(db: &mut SqliteConnection) -> Result<Vec<Meter>, Error> {
    let rows = sqlx::query(select_meters!("ORDER BY name"))
        .fetch_all(db)
        .await?;
    rows.iter().map(meter).collect()
}

/// Meters made after `after`, in the order they were made.
pub(super) async fn page(
    db: &mut SqliteConnection,
    after: Option<MeterId>,
    limit: i64,
) -> Result<Vec<Meter>, Error> {
    let rows = sqlx::query(select_meters!(
        "WHERE ?1 IS NULL OR id > ?1 ORDER BY id LIMIT ?2"
    ))
    .bind(after)
    .bind(limit)
    .fetch_all(db)
    .await?;
    rows.iter().map(meter).collect()
}

/// A calibration without its buffers.
fn calibration(row: &SqliteRow) -> Result<Calibration, Error> {
    let method: &str = row.try_get("method")?;
    let number = |column: &str| -> Result<Option<f64>, sqlx::Error> { row.try_get(column) };
    let electrode = |slope: f64, offset: f64| Electrode {
        slope: SlopePercent::clamped(slope),
        offset: Millivolts::clamped(offset),
    };
    let before = number("before_slope_percent")?.zip(number("before_offset_mv")?);
    let withdrawn_at: Option<UtcTime> = row.try_get("withdrawn_at")?;
    Ok(Calibration {
        id: row.try_get("id")?,
        meter_id: row.try_get("meter_id")?,
        calibrated_at: row.try_get("calibrated_at")?,
        method: Method::from_key(method)
            .ok_or_else(|| unknown("A calibration has an unknown method", method))?,
        buffers: Vec::new(),
        electrode: electrode(row.try_get("slope_percent")?, row.try_get("offset_mv")?),
        residual: number("residual_ph")?.map(PhShift::clamped),
        before: before.map(|(slope, offset)| electrode(slope, offset)),
        notes: row.try_get("notes")?,
        entered_at: row.try_get("entered_at")?,
        entered_by: row.try_get("entered_by")?,
        withdrawn: withdrawn_at.zip(row.try_get("withdrawn_reason")?),
    })
}

/// Every column of a calibration, then what follows FROM.
macro_rules! select_calibrations {
    ($rest:literal) => {
        concat!(
            "SELECT id, meter_id, calibrated_at, method, slope_percent, offset_mv, residual_ph,
                    before_slope_percent, before_offset_mv, notes, entered_at, entered_by,
                    withdrawn_at, withdrawn_reason
             FROM meter_calibrations ",
            $rest
        )
    };
}

/// The last calibration up to `at` that was not withdrawn.
pub(super) async fn last(
    db: &mut SqliteConnection,
    meter: MeterId,
    at: UtcTime,
) -> Result<Option<Calibration>, Error> {
    let row = sqlx::query(select_calibrations!(
        "WHERE meter_id = ? AND calibrated_at <= ? AND withdrawn_at IS NULL
         ORDER BY calibrated_at DESC, id DESC LIMIT 1"
    ))
    .bind(meter)
    .bind(at)
    .fetch_optional(&mut *db)
    .await?;
    match row {
        Some(row) => with_buffers(db, calibration(&row)?).await.map(Some),
        None => Ok(None),
    }
}

/// One calibration.
pub(super) async fn find_calibration(
    db: &mut SqliteConnection,
    id: CalibrationId,
) -> Result<Option<Calibration>, Error> {
    let row = sqlx::query(select_calibrations!("WHERE id = ?"))
        .bind(id)
        .fetch_optional(&mut *db)
        .await?;
    match row {
        Some(row) => with_buffers(db, calibration(&row)?).await.map(Some),
        None => Ok(None),
    }
}

/// Every calibration of a meter without its buffers, newest first, the withdrawn ones too.
pub(super) async fn history(
    db: &mut SqliteConnection,
    meter: MeterId,
) -> Result<Vec<Calibration>, Error> {
    let rows = sqlx::query(select_calibrations!(
        "WHERE meter_id = ? ORDER BY calibrated_at DESC, id DESC"
    ))
    .bind(meter)
    .fetch_all(db)
    .await?;
    rows.iter().map(calibration).collect()
}

/// Calibrations of a meter entered after `after`, in the order they were entered.
pub(super) async fn page_of_calibrations(
    db: &mut SqliteConnection,
    meter: MeterId,
    after: Option<CalibrationId>,
    limit: i64,
) -> Result<Vec<Calibration>, Error> {
    let rows = sqlx::query(select_calibrations!(
        "WHERE meter_id = ?1 AND (?2 IS NULL OR id > ?2) ORDER BY id LIMIT ?3"
    ))
    .bind(meter)
    .bind(after)
    .bind(limit)
    .fetch_all(&mut *db)
    .await?;
    let mut calibrations = Vec::with_capacity(rows.len());
    for row in &rows {
        calibrations.push(with_buffers(db, calibration(row)?).await?);
    }
    Ok(calibrations)
}

/// A calibration with what it was made in.
pub(super) async fn with_buffers(
    db: &mut SqliteConnection,
    mut calibration: Calibration,
) -> Result<Calibration, Error> {
    let rows = sqlx::query(
        "SELECT buffer, ph, own_ph, lot, use_by, temperature_c, reading_mv, before_ph, after_ph
         FROM meter_calibration_buffers WHERE calibration_id = ? ORDER BY position",
    )
    .bind(calibration.id)
    .fetch_all(db)
    .await?;
    calibration.buffers = rows.iter().map(buffer).collect::<Result<_, Error>>()?;
    Ok(calibration)
}

fn buffer(row: &SqliteRow) -> Result<BufferRead, Error> {
    let key: &str = row.try_get("buffer")?;
    let buffer = match key {
        OTHER => None,
        key => Some(
            Buffer::from_key(key)
                .ok_or_else(|| unknown("A calibration has an unknown buffer", key))?,
        ),
    };
    let number = |column: &str| -> Result<Option<f64>, sqlx::Error> { row.try_get(column) };
    let use_by: Option<&str> = row.try_get("use_by")?;
    Ok(BufferRead {
        buffer,
        ph: Ph::clamped(row.try_get("ph")?),
        own_ph: row.try_get("own_ph")?,
        lot: row.try_get("lot")?,
        use_by: use_by
            .map(str::parse)
            .transpose()
            .map_err(|error| Error::internal("A buffer has no date where one should be", error))?,
        temperature: Celsius::clamped(row.try_get("temperature_c")?),
        reading: number("reading_mv")?.map(Millivolts::clamped),
        before: number("before_ph")?.map(Ph::clamped),
        after: number("after_ph")?.map(Ph::clamped),
    })
}

pub(super) async fn insert_calibration(
    db: &mut SqliteConnection,
    new: &Calibration,
) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO meter_calibrations
             (id, meter_id, calibrated_at, method, slope_percent, offset_mv, residual_ph,
              before_slope_percent, before_offset_mv, notes, entered_at, entered_by)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
    )
    .bind(new.id)
    .bind(new.meter_id)
    .bind(new.calibrated_at)
    .bind(new.method.key())
    .bind(new.electrode.slope.get())
    .bind(new.electrode.offset.get())
    .bind(new.residual.map(PhShift::get))
    .bind(new.before.map(|before| before.slope.get()))
    .bind(new.before.map(|before| before.offset.get()))
    .bind(&new.notes)
    .bind(new.entered_at)
    .bind(&new.entered_by)
    .execute(&mut *db)
    .await?;
    for (position, read) in (0_i64..).zip(&new.buffers) {
        sqlx::query(
            "INSERT INTO meter_calibration_buffers
                 (calibration_id, position, buffer, ph, own_ph, lot, use_by, temperature_c,
                  reading_mv, before_ph, after_ph)
             VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
        )
        .bind(new.id)
        .bind(position)
        .bind(read.buffer.map_or(OTHER, Buffer::key))
        .bind(read.ph.get())
        .bind(read.own_ph)
        .bind(&read.lot)
        .bind(read.use_by.map(|date| date.to_string()))
        .bind(read.temperature.get())
        .bind(read.reading.map(Millivolts::get))
        .bind(read.before.map(Ph::get))
        .bind(read.after.map(Ph::get))
        .execute(&mut *db)
        .await?;
    }
    Ok(())
}

pub(super) async fn withdraw(
    db: &mut SqliteConnection,
    id: CalibrationId,
    at: UtcTime,
    reason: &str,
) -> Result<(), sqlx::Error> {
    sqlx::query(
        "UPDATE meter_calibrations SET withdrawn_at = ?, withdrawn_reason = ? WHERE id = ?",
    )
    .bind(at)
    .bind(reason)
    .bind(id)
    .execute(db)
    .await?;
    Ok(())
}
