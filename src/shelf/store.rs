//! SQL for materials and their lots.

use chemistry::material::{Strength, Substance, Vessel};
use chemistry::quantity::{DoseAmount, Estimate, Fraction, GramsPerLitre, GramsPerMl, MeqPerMl};
use jiff::civil::Date;
use sqlx::{Row, SqliteConnection, sqlite::SqliteRow};

use super::{Material, MaterialLot, Price, labelled};
use crate::error::Error;
use crate::id::{MaterialId, MaterialLotId};
use crate::input::percent;

const UNREADABLE: &str = "A material on the shelf cannot be read";

fn material(row: &SqliteRow) -> Result<Material, Error> {
    let substance: &str = row.try_get("substance")?;
    let substance = Substance::from_key(substance)
        .ok_or_else(|| Error::internal(UNREADABLE, substance.to_owned()))?;
    let (strength, assay) = (strength(row)?, assay(row)?);
    let mut vessels = Vec::new();
    for (vessel, column) in Vessel::ALL.into_iter().zip([
        "into_liquor_tank",
        "into_mash",
        "into_sparge_liquor",
        "into_kettle",
    ]) {
        if row.try_get(column)? {
            vessels.push(vessel);
        }
    }
    let price: Option<f64> = row.try_get("price_per_kg_or_l")?;
    let tolerance: Option<f64> = row.try_get("tolerance_percent")?;
    let reorder_below: Option<f64> = row.try_get("reorder_below_g_or_ml")?;
    let highest: Option<f64> = row.try_get("highest_g_or_ml_per_hl")?;
    Ok(Material {
        id: row.try_get("id")?,
        name: row.try_get("name")?,
        substance,
        strength,
        assay,
        scale_step: DoseAmount::clamped(row.try_get("scale_step_g_or_ml")?),
        own_tolerance: tolerance.map(|percent| Fraction::clamped(percent / 100.0)),
        reorder_below: reorder_below.map(DoseAmount::clamped),
        price: price.and_then(|price| Price::new(price).ok()),
        vessels,
        highest: highest.map(DoseAmount::clamped),
        avoid: row.try_get("avoid")?,
        notes: row.try_get("notes")?,
        in_use: row.try_get("in_use")?,
        version: row.try_get("version")?,
        as_labelled: labelled(substance, strength, assay)
            .map_err(|error| Error::internal(UNREADABLE, error))?,
    })
}

fn strength(row: &SqliteRow) -> Result<Option<Strength>, Error> {
    let number = |column: &str| row.try_get::<Option<f64>, _>(column);
    let percent = number("strength_percent")?.zip(number("density_g_per_ml")?);
    let titrated = number("strength_meq_per_ml")?.zip(number("chloride_percent")?);
    Ok(if let Some((percent, density)) = percent {
        Some(Strength::WeightPercent {
            share: Fraction::clamped(percent / 100.0),
            density: GramsPerMl::clamped(density),
        })
    } else if let Some((acid, chloride)) = titrated {
        Some(Strength::Titrated {
            acid: MeqPerMl::clamped(acid),
            chloride_share: Fraction::clamped(chloride / 100.0),
        })
    } else {
        number("strength_g_per_l")?
            .map(|grams| Strength::WeightPerVolume(GramsPerLitre::clamped(grams)))
    })
}

fn assay(row: &SqliteRow) -> Result<Option<Estimate<Fraction>>, Error> {
    let percent: Option<f64> = row.try_get("assay_percent")?;
    let sd: Option<f64> = row.try_get("assay_sd_percent")?;
    Ok(percent
        .zip(sd)
        .map(|(percent, sd)| Estimate::new(Fraction::clamped(percent / 100.0), sd / 100.0)))
}

/// The five columns of a strength.
fn strength_columns(strength: Option<Strength>) -> [Option<f64>; 5] {
    match strength {
        None => [None; 5],
        Some(Strength::WeightPercent { share, density }) => {
            let percent = percent(share.get());
            [Some(percent), Some(density.get()), None, None, None]
        }
        Some(Strength::WeightPerVolume(grams)) => [None, None, Some(grams.get()), None, None],
        Some(Strength::Titrated {
            acid,
            chloride_share,
        }) => {
            let chloride = percent(chloride_share.get());
            [None, None, None, Some(acid.get()), Some(chloride)]
        }
    }
}

fn assay_columns(assay: Option<Estimate<Fraction>>) -> [Option<f64>; 2] {
    [
        assay.map(|assay| percent(assay.value.get())),
        assay.map(|assay| percent(assay.sd)),
    ]
}

/// Adds a material, or replaces the one with its identifier.
pub(super) async fn save(
    db: &mut SqliteConnection,
    material: &Material,
) -> Result<(), sqlx::Error> {
    let tolerance = material.own_tolerance.map(|share| percent(share.get()));
    let [percent, density, grams, meq, chloride] = strength_columns(material.strength);
    let [assay, assay_sd] = assay_columns(material.assay);
    let into = |vessel| material.vessels.contains(&vessel);
    sqlx::query(
        "INSERT INTO materials
             (id, name, substance, strength_percent, density_g_per_ml, strength_g_per_l,
              strength_meq_per_ml, chloride_percent, assay_percent, assay_sd_percent,
              scale_step_g_or_ml, tolerance_percent, reorder_below_g_or_ml,
              highest_g_or_ml_per_hl, price_per_kg_or_l, into_liquor_tank, into_mash,
              into_sparge_liquor, into_kettle, avoid, notes, in_use, version)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)
         ON CONFLICT (id) DO UPDATE SET
             name = excluded.name, strength_percent = excluded.strength_percent,
             density_g_per_ml = excluded.density_g_per_ml,
             strength_g_per_l = excluded.strength_g_per_l,
             strength_meq_per_ml = excluded.strength_meq_per_ml,
             chloride_percent = excluded.chloride_percent,
             assay_percent = excluded.assay_percent, assay_sd_percent = excluded.assay_sd_percent,
             scale_step_g_or_ml = excluded.scale_step_g_or_ml,
             tolerance_percent = excluded.tolerance_percent,
             reorder_below_g_or_ml = excluded.reorder_below_g_or_ml,
             highest_g_or_ml_per_hl = excluded.highest_g_or_ml_per_hl,
             price_per_kg_or_l = excluded.price_per_kg_or_l,
             into_liquor_tank = excluded.into_liquor_tank, into_mash = excluded.into_mash,
             into_sparge_liquor = excluded.into_sparge_liquor,
             into_kettle = excluded.into_kettle, avoid = excluded.avoid,
             notes = excluded.notes, in_use = excluded.in_use, version = excluded.version",
    )
    .bind(material.id)
    .bind(&material.name)
    .bind(material.substance.key())
    .bind(percent)
    .bind(density)
    .bind(grams)
    .bind(meq)
    .bind(chloride)
    .bind(assay)
    .bind(assay_sd)
    .bind(material.scale_step.get())
    .bind(tolerance)
    .bind(material.reorder_below.map(DoseAmount::get))
    .bind(material.highest.map(DoseAmount::get))
    .bind(material.price.map(Price::get))
    .bind(into(Vessel::LiquorTank))
    .bind(into(Vessel::Mash))
    .bind(into(Vessel::SpargeLiquor))
    .bind(into(Vessel::Kettle))
    .bind(material.avoid)
    .bind(&material.notes)
    .bind(material.in_use)
    .bind(material.version)
    .execute(db)
    .await?;
    Ok(())
}

/// Every column of a material, then what follows FROM.
macro_rules! select_materials {
    ($rest:literal) => {
        concat!(
            "SELECT id, name, substance, strength_percent, density_g_per_ml, strength_g_per_l,
                    strength_meq_per_ml, chloride_percent, assay_percent, assay_sd_percent,
                    scale_step_g_or_ml, tolerance_percent, reorder_below_g_or_ml,
                    highest_g_or_ml_per_hl, price_per_kg_or_l, into_liquor_tank, into_mash, into_sparge_liquor, into_kettle, avoid, notes,
                    in_use, version
             FROM materials ",
            $rest
        )
    };
}

pub(super) async fn find(
    db: &mut SqliteConnection,
    id: MaterialId,
) -> Result<Option<Material>, Error> {
    let row = sqlx::query(select_materials!("WHERE id = ?"))
        .bind(id)
        .fetch_optional(db)
        .await?;
    row.as_ref().map(material).transpose()
}

/// Every material by name.
pub(super) async fn list(db: &mut SqliteConnection) -> Result<Vec<Material>, Error> {
    let rows = sqlx::query(select_materials!("ORDER BY name"))
        .fetch_all(db)
        .await?;
    rows.iter().map(material).collect()
}

/// Materials made after `after`, in the order they were made.
pub(super) async fn page(
    db: &mut SqliteConnection,
    after: Option<MaterialId>,
    limit: i64,
) -> Result<Vec<Material>, Error> {
    let rows = sqlx::query(select_materials!(
        "WHERE ?1 IS NULL OR id > ?1 ORDER BY id LIMIT ?2"
    ))
    .bind(after)
    .bind(limit)
    .fetch_all(db)
    .await?;
    rows.iter().map(material).collect()
}

fn lot(row: &SqliteRow) -> Result<MaterialLot, Error> {
    Ok(MaterialLot {
        id: row.try_get("id")?,
        material_id: row.try_get("material_id")?,
        code: row.try_get("code")?,
        received_on: date(row, "received_on")?,
        opened_on: date(row, "opened_on")?,
        use_by: date(row, "use_by")?,
        strength: strength(row)?,
        assay: assay(row)?,
        assayed_on: date(row, "assayed_on")?,
        current: row.try_get("current")?,
        notes: row.try_get("notes")?,
        in_use: row.try_get("in_use")?,
        version: row.try_get("version")?,
    })
}

fn date(row: &SqliteRow, column: &str) -> Result<Option<Date>, Error> {
    row.try_get::<Option<&str>, _>(column)?
        .map(|text| text.parse::<Date>())
        .transpose()
        .map_err(|error| Error::internal("The date of a lot cannot be read", error))
}

/// Adds a lot, or replaces the one with its identifier.
pub(super) async fn save_lot(
    db: &mut SqliteConnection,
    lot: &MaterialLot,
) -> Result<(), sqlx::Error> {
    let [percent, density, grams, meq, chloride] = strength_columns(lot.strength);
    let [assay, assay_sd] = assay_columns(lot.assay);
    sqlx::query(
        "INSERT INTO material_lots
             (id, material_id, code, received_on, opened_on, use_by, strength_percent,
              density_g_per_ml, strength_g_per_l, strength_meq_per_ml, chloride_percent,
              assay_percent, assay_sd_percent, assayed_on, current, notes, in_use, version)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)
         ON CONFLICT (id) DO UPDATE SET
             code = excluded.code, received_on = excluded.received_on,
             opened_on = excluded.opened_on, use_by = excluded.use_by,
             strength_percent = excluded.strength_percent,
             density_g_per_ml = excluded.density_g_per_ml,
             strength_g_per_l = excluded.strength_g_per_l,
             strength_meq_per_ml = excluded.strength_meq_per_ml,
             chloride_percent = excluded.chloride_percent,
             assay_percent = excluded.assay_percent, assay_sd_percent = excluded.assay_sd_percent,
             assayed_on = excluded.assayed_on, current = excluded.current, notes = excluded.notes, in_use = excluded.in_use,
             version = excluded.version",
    )
    .bind(lot.id)
    .bind(lot.material_id)
    .bind(&lot.code)
    .bind(lot.received_on.map(|date| date.to_string()))
    .bind(lot.opened_on.map(|date| date.to_string()))
    .bind(lot.use_by.map(|date| date.to_string()))
    .bind(percent)
    .bind(density)
    .bind(grams)
    .bind(meq)
    .bind(chloride)
    .bind(assay)
    .bind(assay_sd)
    .bind(lot.assayed_on.map(|date| date.to_string()))
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
            "SELECT id, material_id, code, received_on, opened_on, use_by, strength_percent,
                    density_g_per_ml, strength_g_per_l, strength_meq_per_ml, chloride_percent,
                    assay_percent, assay_sd_percent, assayed_on, current, notes, in_use, version
             FROM material_lots ",
            $rest
        )
    };
}

pub(super) async fn find_lot(
    db: &mut SqliteConnection,
    id: MaterialLotId,
) -> Result<Option<MaterialLot>, Error> {
    let row = sqlx::query(select_lots!("WHERE id = ?"))
        .bind(id)
        .fetch_optional(db)
        .await?;
    row.as_ref().map(lot).transpose()
}

/// The lots of a material: the current one, then the newest first.
pub(super) async fn lots(
    db: &mut SqliteConnection,
    material: MaterialId,
) -> Result<Vec<MaterialLot>, Error> {
    let rows = sqlx::query(select_lots!(
        "WHERE material_id = ? ORDER BY current DESC, in_use DESC, id DESC"
    ))
    .bind(material)
    .fetch_all(db)
    .await?;
    rows.iter().map(lot).collect()
}

/// The lots of a material entered after `after`, in the order they were entered.
pub(super) async fn page_of_lots(
    db: &mut SqliteConnection,
    material: MaterialId,
    after: Option<MaterialLotId>,
    limit: i64,
) -> Result<Vec<MaterialLot>, Error> {
    let rows = sqlx::query(select_lots!(
        "WHERE material_id = ?1 AND (?2 IS NULL OR id > ?2) ORDER BY id LIMIT ?3"
    ))
    .bind(material)
    .bind(after)
    .bind(limit)
    .fetch_all(db)
    .await?;
    rows.iter().map(lot).collect()
}

/// The lot of every material that is being weighed from.
pub(super) async fn current_lots(db: &mut SqliteConnection) -> Result<Vec<MaterialLot>, Error> {
    let rows = sqlx::query(select_lots!("WHERE current = 1"))
        .fetch_all(db)
        .await?;
    rows.iter().map(lot).collect()
}
