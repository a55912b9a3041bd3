//! SQL for water tests, their readings and what was accepted.

use std::collections::HashMap;

use chemistry::quantity::{Celsius, MgPerLAsCaCO3};
use chemistry::report::{
    Analyte, Method, Qualifier, Reading, ReportingUnit, SampleKind, TypedValue,
};
use jiff::civil::Date;
use sqlx::{Row, SqliteConnection, sqlite::SqliteRow};

use super::{
    Accepted, Line, Sheet, Trust, WaterTest, Withdrawal, inference_from_key, method_from_key,
};
use crate::error::Error;
use crate::id::{SourceId, UtcTime, WaterTestId};
use crate::sources::store::kind;

/// Which tests are wanted, newest sample first.
#[derive(Clone, Copy, Debug)]
pub(in crate::sources) struct Which {
    /// Only this one.
    pub(in crate::sources) id: Option<WaterTestId>,
    /// Only of this source.
    pub(in crate::sources) source: Option<SourceId>,
    /// Only those that count for today's water.
    pub(in crate::sources) counting: bool,
    /// Only those after this one in the list.
    pub(in crate::sources) after: Option<(Date, WaterTestId)>,
    /// So many of the list are passed over.
    pub(in crate::sources) skip: i64,
    /// At most so many; -1: all.
    pub(in crate::sources) limit: i64,
}

impl Which {
    /// Every test.
    pub(in crate::sources) const ALL: Self = Self {
        id: None,
        source: None,
        counting: false,
        after: None,
        skip: 0,
        limit: -1,
    };
}

/// The tests wanted, newest sample first.
pub(in crate::sources) async fn tests(
    db: &mut SqliteConnection,
    which: Which,
) -> Result<Vec<WaterTest>, Error> {
    let rows = sqlx::query(
        "SELECT t.id, t.source_id, s.kind, t.sampled_on, t.laboratory, t.reference, t.sample_kind,
                t.ph_temperature_celsius, t.notes, t.trust, t.trust_reason, t.withdrawn_at,
                t.withdrawn_reason, t.entered_at, t.version
         FROM water_tests t JOIN sources s ON s.id = t.source_id
         WHERE (?1 IS NULL OR t.id = ?1)
           AND (?2 IS NULL OR t.source_id = ?2)
           AND (?3 = 0 OR (t.withdrawn_at IS NULL AND t.trust IN ('trusted', 'trusted_despite')))
           AND (?4 IS NULL OR (t.sampled_on, t.id) < (?4, ?5))
         ORDER BY t.sampled_on DESC, t.id DESC LIMIT ?6 OFFSET ?7",
    )
    .bind(which.id)
    .bind(which.source)
    .bind(which.counting)
    .bind(which.after.map(|(date, _)| date.to_string()))
    .bind(which.after.map(|(_, id)| id))
    .bind(which.limit)
    .bind(which.skip)
    .fetch_all(&mut *db)
    .await?;
    let mut tests = rows.iter().map(test).collect::<Result<Vec<_>, _>>()?;
    let ids: Vec<String> = tests.iter().map(|test| test.id.to_string()).collect();
    let ids = serde_json::to_string(&ids)
        .map_err(|error| Error::internal("Water tests cannot be asked for", error))?;

    let mut lines: HashMap<WaterTestId, Vec<Line>> = HashMap::new();
    let rows = sqlx::query(
        "SELECT water_test_id, analyte, typed, number, qualifier, unit, method, drop_mg_per_l_as_caco3
         FROM water_test_readings
         WHERE water_test_id IN (SELECT value FROM json_each(?)) ORDER BY water_test_id, line",
    )
    .bind(&ids)
    .fetch_all(&mut *db)
    .await?;
    for row in &rows {
        let id = row.try_get("water_test_id")?;
        lines.entry(id).or_default().push(line(row)?);
    }

    let mut accepted: HashMap<WaterTestId, Vec<Accepted>> = HashMap::new();
    let rows = sqlx::query(
        "SELECT water_test_id, analyte, kind FROM water_test_inferences
         WHERE water_test_id IN (SELECT value FROM json_each(?)) ORDER BY water_test_id, analyte",
    )
    .bind(&ids)
    .fetch_all(&mut *db)
    .await?;
    for row in &rows {
        let pair = Analyte::from_key(row.try_get("analyte")?)
            .zip(inference_from_key(row.try_get("kind")?));
        let (analyte, kind) = pair.ok_or_else(|| unreadable("accepted figure"))?;
        let id = row.try_get("water_test_id")?;
        accepted
            .entry(id)
            .or_default()
            .push(Accepted { analyte, kind });
    }
    for test in &mut tests {
        test.sheet.lines = lines.remove(&test.id).unwrap_or_default();
        test.sheet.accepted = accepted.remove(&test.id).unwrap_or_default();
    }
    Ok(tests)
}

fn unreadable(what: &'static str) -> Error {
    Error::internal("A stored water test cannot be read", what)
}

/// A test without its lines.
fn test(row: &SqliteRow) -> Result<WaterTest, Error> {
    let reason: Option<String> = row.try_get("trust_reason")?;
    let trust = match (row.try_get::<&str, _>("trust")?, reason) {
        ("trusted", None) => Trust::Trusted,
        ("does_not_add_up", None) => Trust::DoesNotAddUp,
        ("trusted_despite", Some(reason)) => Trust::TrustedDespite(reason),
        ("excluded", Some(reason)) => Trust::Excluded(reason),
        _ => return Err(unreadable("trust")),
    };
    let withdrawn_at: Option<UtcTime> = row.try_get("withdrawn_at")?;
    let withdrawn_reason: Option<String> = row.try_get("withdrawn_reason")?;
    Ok(WaterTest {
        id: row.try_get("id")?,
        source_id: row.try_get("source_id")?,
        water_kind: kind(row.try_get("kind")?)?,
        sheet: Sheet {
            sampled_on: date(row.try_get("sampled_on")?)?,
            laboratory: row.try_get("laboratory")?,
            reference: row.try_get("reference")?,
            sample_kind: SampleKind::from_key(row.try_get("sample_kind")?)
                .ok_or_else(|| unreadable("sample_kind"))?,
            ph_temperature: row
                .try_get::<Option<f64>, _>("ph_temperature_celsius")?
                .map(Celsius::clamped),
            notes: row.try_get("notes")?,
            lines: Vec::new(),
            accepted: Vec::new(),
        },
        trust,
        withdrawn: withdrawn_at
            .zip(withdrawn_reason)
            .map(|(at, reason)| Withdrawal { at, reason }),
        entered_at: row.try_get("entered_at")?,
        version: row.try_get("version")?,
    })
}

fn date(text: &str) -> Result<Date, Error> {
    text.parse()
        .map_err(|error: jiff::Error| Error::internal("A stored date cannot be read", error))
}

fn line(row: &SqliteRow) -> Result<Line, Error> {
    let analyte =
        Analyte::from_key(row.try_get("analyte")?).ok_or_else(|| unreadable("analyte"))?;
    let unit = ReportingUnit::from_key(row.try_get("unit")?).ok_or_else(|| unreadable("unit"))?;
    let qualifier =
        Qualifier::from_key(row.try_get("qualifier")?).ok_or_else(|| unreadable("qualifier"))?;
    let drop = row
        .try_get::<Option<f64>, _>("drop_mg_per_l_as_caco3")?
        .map(MgPerLAsCaCO3::clamped);
    let method: Method =
        method_from_key(row.try_get("method")?, drop).ok_or_else(|| unreadable("method"))?;
    let typed = TypedValue::new(qualifier, row.try_get("number")?)
        .map_err(|error| Error::internal("A stored reading cannot be read", error))?;
    let reading = Reading::new(analyte, unit, typed)
        .map_err(|error| Error::internal("A stored reading cannot be read", error))?;
    Ok(Line {
        typed: row.try_get("typed")?,
        reading,
        method,
    })
}

/// How many tests a source has.
pub(in crate::sources) async fn count(
    db: &mut SqliteConnection,
    source: SourceId,
) -> Result<i64, Error> {
    Ok(
        sqlx::query_scalar("SELECT count(*) FROM water_tests WHERE source_id = ?")
            .bind(source)
            .fetch_one(db)
            .await?,
    )
}

/// The day of each source's newest sample that was not withdrawn.
pub(in crate::sources) async fn newest(
    db: &mut SqliteConnection,
) -> Result<HashMap<SourceId, Date>, Error> {
    let rows = sqlx::query(
        "SELECT source_id, max(sampled_on) AS newest FROM water_tests
         WHERE withdrawn_at IS NULL GROUP BY source_id",
    )
    .fetch_all(db)
    .await?;
    rows.iter()
        .map(|row| Ok((row.try_get("source_id")?, date(row.try_get("newest")?)?)))
        .collect()
}

pub(super) async fn insert(db: &mut SqliteConnection, test: &WaterTest) -> Result<(), Error> {
    sqlx::query(
        "INSERT INTO water_tests (id, source_id, sampled_on, laboratory, reference, sample_kind,
                                  ph_temperature_celsius, notes, trust, trust_reason, entered_at, version)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
    )
    .bind(test.id)
    .bind(test.source_id)
    .bind(test.sheet.sampled_on.to_string())
    .bind(&test.sheet.laboratory)
    .bind(&test.sheet.reference)
    .bind(test.sheet.sample_kind.key())
    .bind(test.sheet.ph_temperature.map(Celsius::get))
    .bind(&test.sheet.notes)
    .bind(test.trust.key())
    .bind(test.trust.reason())
    .bind(test.entered_at)
    .bind(test.version)
    .execute(&mut *db)
    .await?;
    insert_lines(db, test).await
}

/// Writes a test over its earlier version. What stood before is in the record book.
pub(super) async fn update(db: &mut SqliteConnection, test: &WaterTest) -> Result<(), Error> {
    sqlx::query(
        "UPDATE water_tests SET sampled_on = ?, laboratory = ?, reference = ?, sample_kind = ?,
                ph_temperature_celsius = ?, notes = ?, trust = ?, trust_reason = ?,
                withdrawn_at = ?, withdrawn_reason = ?, version = ?
         WHERE id = ?",
    )
    .bind(test.sheet.sampled_on.to_string())
    .bind(&test.sheet.laboratory)
    .bind(&test.sheet.reference)
    .bind(test.sheet.sample_kind.key())
    .bind(test.sheet.ph_temperature.map(Celsius::get))
    .bind(&test.sheet.notes)
    .bind(test.trust.key())
    .bind(test.trust.reason())
    .bind(test.withdrawn.as_ref().map(|w| w.at))
    .bind(test.withdrawn.as_ref().map(|w| w.reason.as_str()))
    .bind(test.version)
    .bind(test.id)
    .execute(&mut *db)
    .await?;
    for statement in [
        "DELETE FROM water_test_readings WHERE water_test_id = ?",
        "DELETE FROM water_test_inferences WHERE water_test_id = ?",
    ] {
        sqlx::query(statement)
            .bind(test.id)
            .execute(&mut *db)
            .await?;
    }
    insert_lines(db, test).await
}

async fn insert_lines(db: &mut SqliteConnection, test: &WaterTest) -> Result<(), Error> {
    for (place, line) in (0_i64..).zip(&test.sheet.lines) {
        let drop = match line.method {
            Method::DropKit { drop } => Some(drop.get()),
            _ => None,
        };
        sqlx::query(
            "INSERT INTO water_test_readings (water_test_id, line, analyte, typed, number, qualifier,
                                              unit, method, drop_mg_per_l_as_caco3)
             VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)",
        )
        .bind(test.id)
        .bind(place)
        .bind(line.reading.analyte().key())
        .bind(&line.typed)
        .bind(line.reading.typed().number())
        .bind(line.reading.typed().qualifier().key())
        .bind(line.reading.unit().key())
        .bind(line.method.key())
        .bind(drop)
        .execute(&mut *db)
        .await?;
    }
    for accepted in &test.sheet.accepted {
        sqlx::query(
            "INSERT INTO water_test_inferences (water_test_id, analyte, kind) VALUES (?, ?, ?)",
        )
        .bind(test.id)
        .bind(accepted.analyte.key())
        .bind(accepted.kind.key())
        .execute(&mut *db)
        .await?;
    }
    Ok(())
}
