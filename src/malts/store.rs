//! SQL for malts, their lots and titrations.

use chemistry::mash::MaltClass;
use chemistry::quantity::{
    Ebc, Estimate, Fraction, Grams, MeqPerMl, Millilitres, Ph, RelativeBuffering, RelativeSd,
};
use jiff::civil::Date;
use sqlx::{Row, SqliteConnection, sqlite::SqliteRow};

use super::{Coefficients, Malt, MaltLot, Titration, TypedJar};
use crate::error::Error;
use crate::id::{MaltId, MaltLotId, MaltTitrationId, UtcTime};
use crate::input::percent;

fn number(row: &SqliteRow, column: &str) -> Result<Option<f64>, sqlx::Error> {
    row.try_get(column)
}

fn pair(row: &SqliteRow, value: &str, sd: &str) -> Result<Option<(f64, f64)>, sqlx::Error> {
    Ok(number(row, value)?.zip(number(row, sd)?))
}

fn lactic(row: &SqliteRow) -> Result<Option<Estimate<Fraction>>, sqlx::Error> {
    let lactic = pair(row, "lactic_percent", "lactic_sd_percent")?;
    Ok(lactic.map(|(value, sd)| Estimate::new(Fraction::clamped(value / 100.0), sd / 100.0)))
}

fn malt(row: &SqliteRow) -> Result<Malt, Error> {
    let class: &str = row.try_get("class")?;
    let distilled_ph = pair(row, "distilled_ph", "distilled_ph_sd")?;
    let buffering = pair(row, "relative_buffering", "relative_buffering_sd")?;
    let terms = (
        number(row, "a1_meq_per_kg_ph")?,
        number(row, "a2_meq_per_kg_ph2")?,
        number(row, "a3_meq_per_kg_ph3")?,
        number(row, "coefficient_sd_percent")?,
    );
    let coefficients = match terms {
        (Some(a1), Some(a2), Some(a3), Some(sd)) => Some(Coefficients {
            terms: [a1, a2, a3],
            relative_sd: RelativeSd::clamped(sd / 100.0),
        }),
        _ => None,
    };
    Ok(Malt {
        id: row.try_get("id")?,
        name: row.try_get("name")?,
        class: MaltClass::from_key(class)
            .ok_or_else(|| Error::internal("A malt has an unknown class", class.to_owned()))?,
        colour: number(row, "colour_ebc")?.map(Ebc::clamped),
        supplier: row.try_get("supplier")?,
        distilled_ph: distilled_ph.map(|(ph, sd)| Estimate::new(Ph::clamped(ph), sd)),
        buffering: buffering
            .map(|(value, sd)| Estimate::new(RelativeBuffering::clamped(value), sd)),
        lactic: lactic(row)?,
        coefficients,
        notes: row.try_get("notes")?,
        in_use: row.try_get("in_use")?,
        version: row.try_get("version")?,
    })
}

/// Adds a malt, or replaces the one with its identifier.
pub(super) async fn save(db: &mut SqliteConnection, malt: &Malt) -> Result<(), sqlx::Error> {
    let terms = malt.coefficients.map(|coefficients| coefficients.terms);
    sqlx::query(
        "INSERT INTO malts
             (id, name, class, colour_ebc, supplier, distilled_ph, distilled_ph_sd,
              relative_buffering, relative_buffering_sd, lactic_percent, lactic_sd_percent,
              a1_meq_per_kg_ph, a2_meq_per_kg_ph2, a3_meq_per_kg_ph3, coefficient_sd_percent,
              notes, in_use, version)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)
         ON CONFLICT (id) DO UPDATE SET
             name = excluded.name, class = excluded.class, colour_ebc = excluded.colour_ebc,
             supplier = excluded.supplier, distilled_ph = excluded.distilled_ph,
             distilled_ph_sd = excluded.distilled_ph_sd,
             relative_buffering = excluded.relative_buffering,
             relative_buffering_sd = excluded.relative_buffering_sd,
             lactic_percent = excluded.lactic_percent,
             lactic_sd_percent = excluded.lactic_sd_percent,
             a1_meq_per_kg_ph = excluded.a1_meq_per_kg_ph,
             a2_meq_per_kg_ph2 = excluded.a2_meq_per_kg_ph2,
             a3_meq_per_kg_ph3 = excluded.a3_meq_per_kg_ph3,
             coefficient_sd_percent = excluded.coefficient_sd_percent,
             notes = excluded.notes, in_use = excluded.in_use, version = excluded.version",
    )
    .bind(malt.id)
    .bind(&malt.name)
    .bind(malt.class.key())
    .bind(malt.colour.map(Ebc::get))
    .bind(&malt.supplier)
    .bind(malt.distilled_ph.map(|ph| ph.value.get()))
    .bind(malt.distilled_ph.map(|ph| ph.sd))
    .bind(malt.buffering.map(|buffering| buffering.value.get()))
    .bind(malt.buffering.map(|buffering| buffering.sd))
    .bind(malt.lactic.map(|share| percent(share.value.get())))
    .bind(malt.lactic.map(|share| percent(share.sd)))
    .bind(terms.map(|terms| terms[0]))
    .bind(terms.map(|terms| terms[1]))
    .bind(terms.map(|terms| terms[2]))
    .bind(malt.coefficients.map(|c| percent(c.relative_sd.get())))
    .bind(&malt.notes)
    .bind(malt.in_use)
    .bind(malt.version)
    .execute(db)
    .await?;
    Ok(())
}

/// Every column of a malt, then what follows FROM.
macro_rules! select_malts {
    ($rest:literal) => {
        concat!(
            "SELECT id, name, class, colour_ebc, supplier, distilled_ph, distilled_ph_sd,
                    relative_buffering, relative_buffering_sd, lactic_percent,
                    lactic_sd_percent, a1_meq_per_kg_ph, a2_meq_per_kg_ph2,
                    a3_meq_per_kg_ph3, coefficient_sd_percent, notes, in_use, version
             FROM malts ",
            $rest
        )
    };
}

pub(super) async fn find(db: &mut SqliteConnection, id: MaltId) -> Result<Option<Malt>, Error> {
    let row = sqlx::query(select_malts!("WHERE id = ?"))
        .bind(id)
        .fetch_optional(db)
        .await?;
    row.as_ref().map(malt).transpose()
}

/// Every malt by name.
pub(super) async fn list(db: &mut SqliteConnection) -> Result<Vec<Malt>, Error> {
    let rows = sqlx::query(select_malts!("ORDER BY name"))
        .fetch_all(db)
        .await?;
    rows.iter().map(malt).collect()
}

/// Malts made after `after`, in the order they were made.
pub(super) async fn page(
    db: &mut SqliteConnection,
    after: Option<MaltId>,
    limit: i64,
) -> Result<Vec<Malt>, Error> {
    let rows = sqlx::query(select_malts!(
        "WHERE ?1 IS NULL OR id > ?1 ORDER BY id LIMIT ?2"
    ))
    .bind(after)
    .bind(limit)
    .fetch_all(db)
    .await?;
    rows.iter().map(malt).collect()
}

/// A lot without its titrations.
fn lot(row: &SqliteRow) -> Result<MaltLot, Error> {
    let received_on: Option<&str> = row.try_get("received_on")?;
    Ok(MaltLot {
        id: row.try_get("id")?,
        malt_id: row.try_get("malt_id")?,
        code: row.try_get("code")?,
        received_on: received_on.map(date).transpose()?,
        wort_ph: number(row, "wort_ph")?.map(Ph::clamped),
        lactic: lactic(row)?,
        current: row.try_get("current")?,
        notes: row.try_get("notes")?,
        in_use: row.try_get("in_use")?,
        version: row.try_get("version")?,
        titrations: Vec::new(),
    })
}

fn date(text: &str) -> Result<Date, Error> {
    text.parse()
        .map_err(|error: jiff::Error| Error::internal("The date of a lot cannot be read", error))
}

/// Adds a lot, or replaces the one with its identifier. Its titrations stay.
pub(super) async fn save_lot(db: &mut SqliteConnection, lot: &MaltLot) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO malt_lots
             (id, malt_id, code, received_on, wort_ph, lactic_percent, lactic_sd_percent,
              current, notes, in_use, version)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)
         ON CONFLICT (id) DO UPDATE SET
             code = excluded.code, received_on = excluded.received_on,
             wort_ph = excluded.wort_ph, lactic_percent = excluded.lactic_percent,
             lactic_sd_percent = excluded.lactic_sd_percent, current = excluded.current,
             notes = excluded.notes, in_use = excluded.in_use, version = excluded.version",
    )
    .bind(lot.id)
    .bind(lot.malt_id)
    .bind(&lot.code)
    .bind(lot.received_on.map(|date| date.to_string()))
    .bind(lot.wort_ph.map(Ph::get))
    .bind(lot.lactic.map(|share| percent(share.value.get())))
    .bind(lot.lactic.map(|share| percent(share.sd)))
    .bind(lot.current)
    .bind(&lot.notes)
    .bind(lot.in_use)
    .bind(lot.version)
    .execute(db)
    .await?;
    Ok(())
}

/// Every column of a lot, then what follows FROM.
macro_rules! select_lots {
    ($rest:literal) => {
        concat!(
            "SELECT id, malt_id, code, received_on, wort_ph, lactic_percent, lactic_sd_percent,
                    current, notes, in_use, version
             FROM malt_lots ",
            $rest
        )
    };
}

pub(super) async fn find_lot(
    db: &mut SqliteConnection,
    id: MaltLotId,
) -> Result<Option<MaltLot>, Error> {
    let row = sqlx::query(select_lots!("WHERE id = ?"))
        .bind(id)
        .fetch_optional(&mut *db)
        .await?;
    let lots = with_titrations(db, row.as_slice()).await?;
    Ok(lots.into_iter().next())
}

/// The lots of a malt: the current one, then the newest first.
pub(super) async fn lots(db: &mut SqliteConnection, malt: MaltId) -> Result<Vec<MaltLot>, Error> {
    let rows = sqlx::query(select_lots!(
        "WHERE malt_id = ? ORDER BY current DESC, in_use DESC, id DESC"
    ))
    .bind(malt)
    .fetch_all(&mut *db)
    .await?;
    with_titrations(db, &rows).await
}

/// The lots of a malt entered after `after`, in the order they were entered.
pub(super) async fn page_of_lots(
    db: &mut SqliteConnection,
    malt: MaltId,
    after: Option<MaltLotId>,
    limit: i64,
) -> Result<Vec<MaltLot>, Error> {
    let rows = sqlx::query(select_lots!(
        "WHERE malt_id = ?1 AND (?2 IS NULL OR id > ?2) ORDER BY id LIMIT ?3"
    ))
    .bind(malt)
    .bind(after)
    .bind(limit)
    .fetch_all(&mut *db)
    .await?;
    with_titrations(db, &rows).await
}

/// The lot of every malt that is being mashed from.
pub(super) async fn current_lots(db: &mut SqliteConnection) -> Result<Vec<MaltLot>, Error> {
    let rows = sqlx::query(select_lots!("WHERE current = 1"))
        .fetch_all(&mut *db)
        .await?;
    with_titrations(db, &rows).await
}

async fn with_titrations(
    db: &mut SqliteConnection,
    rows: &[SqliteRow],
) -> Result<Vec<MaltLot>, Error> {
    let mut lots = Vec::with_capacity(rows.len());
    for row in rows {
        let mut lot = lot(row)?;
        lot.titrations = titrations(db, lot.id).await?;
        lots.push(lot);
    }
    Ok(lots)
}

/// The titrations of a lot, newest first.
async fn titrations(db: &mut SqliteConnection, lot: MaltLotId) -> Result<Vec<Titration>, Error> {
    let rows = sqlx::query(
        "SELECT id, malt_lot_id, tested_on, malt_g, acid_meq_per_ml, base_meq_per_ml, notes,
                entered_at, entered_by, withdrawn_at, withdrawn_reason
         FROM malt_titrations WHERE malt_lot_id = ? ORDER BY tested_on DESC, id DESC",
    )
    .bind(lot)
    .fetch_all(&mut *db)
    .await?;
    let mut titrations = Vec::with_capacity(rows.len());
    for row in rows {
        let id: MaltTitrationId = row.try_get("id")?;
        let withdrawn_at: Option<UtcTime> = row.try_get("withdrawn_at")?;
        titrations.push(Titration {
            id,
            malt_lot_id: row.try_get("malt_lot_id")?,
            tested_on: date(row.try_get("tested_on")?)?,
            malt: Grams::clamped(row.try_get("malt_g")?),
            acid: number(&row, "acid_meq_per_ml")?.map(MeqPerMl::clamped),
            base: number(&row, "base_meq_per_ml")?.map(MeqPerMl::clamped),
            jars: jars(db, id).await?,
            notes: row.try_get("notes")?,
            entered_at: row.try_get("entered_at")?,
            entered_by: row.try_get("entered_by")?,
            withdrawn: withdrawn_at.zip(row.try_get("withdrawn_reason")?),
        });
    }
    Ok(titrations)
}

async fn jars(
    db: &mut SqliteConnection,
    titration: MaltTitrationId,
) -> Result<Vec<TypedJar>, Error> {
    let rows = sqlx::query(
        "SELECT acid_ml, base_ml, ph, acid_ml_typed, base_ml_typed, ph_typed
         FROM malt_titration_jars WHERE titration_id = ? ORDER BY position",
    )
    .bind(titration)
    .fetch_all(db)
    .await?;
    let jar = |row: &SqliteRow| -> Result<TypedJar, Error> {
        Ok(TypedJar {
            acid: Millilitres::clamped(row.try_get("acid_ml")?),
            base: Millilitres::clamped(row.try_get("base_ml")?),
            ph: Ph::clamped(row.try_get("ph")?),
            typed: [
                row.try_get("acid_ml_typed")?,
                row.try_get("base_ml_typed")?,
                row.try_get("ph_typed")?,
            ],
        })
    };
    rows.iter().map(jar).collect()
}

pub(super) async fn insert_titration(
    db: &mut SqliteConnection,
    titration: &Titration,
) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO malt_titrations
             (id, malt_lot_id, tested_on, malt_g, acid_meq_per_ml, base_meq_per_ml, notes,
              entered_at, entered_by)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?)",
    )
    .bind(titration.id)
    .bind(titration.malt_lot_id)
    .bind(titration.tested_on.to_string())
    .bind(titration.malt.get())
    .bind(titration.acid.map(MeqPerMl::get))
    .bind(titration.base.map(MeqPerMl::get))
    .bind(&titration.notes)
    .bind(titration.entered_at)
    .bind(&titration.entered_by)
    .execute(&mut *db)
    .await?;
    for (position, jar) in (0_i64..).zip(&titration.jars) {
        let [acid_typed, base_typed, ph_typed] = &jar.typed;
        sqlx::query(
            "INSERT INTO malt_titration_jars
                 (titration_id, position, acid_ml, base_ml, ph, acid_ml_typed, base_ml_typed, ph_typed)
             VALUES (?, ?, ?, ?, ?, ?, ?, ?)",
        )
        .bind(titration.id)
        .bind(position)
        .bind(jar.acid.get())
        .bind(jar.base.get())
        .bind(jar.ph.get())
        .bind(acid_typed)
        .bind(base_typed)
        .bind(ph_typed)
        .execute(&mut *db)
        .await?;
    }
    Ok(())
}

pub(super) async fn withdraw_titration(
    db: &mut SqliteConnection,
    id: MaltTitrationId,
    at: UtcTime,
    reason: &str,
) -> Result<(), sqlx::Error> {
    sqlx::query("UPDATE malt_titrations SET withdrawn_at = ?, withdrawn_reason = ? WHERE id = ?")
        .bind(at)
        .bind(reason)
        .bind(id)
        .execute(db)
        .await?;
    Ok(())
}
