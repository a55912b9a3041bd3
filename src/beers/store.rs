//! SQL for beers, their grists and their windows.

use std::collections::HashMap;

use chemistry::ion::{Ion, IonMap};
use chemistry::put_right::Aim;
use chemistry::quantity::{Kilograms, Litres, MassRatio, MgPerL, MgPerLAsCaCO3, Ph};
use sqlx::sqlite::SqliteRow;
use sqlx::{Row, SqliteConnection};

use super::spec::{IONS, Priority, Spec, USUAL_PRIORITY, Window};
use super::{Beer, GristLine, Volumes};
use crate::error::Error;
use crate::id::{BeerId, MaltId};

const MASH_CALCIUM: &str = "mash_calcium_mg_per_l";
const SULFATE_TO_CHLORIDE: &str = "sulfate_to_chloride";
const SPARGE_ALKALINITY: &str = "sparge_alkalinity_mg_per_l_as_caco3";

/// One row of `beer_windows`, its unit told by `figure`.
struct WindowRow {
    figure: String,
    low: Option<f64>,
    high: Option<f64>,
    preferred: Option<f64>,
    priority: Priority,
}

impl WindowRow {
    fn of<T>(figure: impl Into<String>, window: Window<T>, get: impl Fn(T) -> f64) -> Self {
        Self {
            figure: figure.into(),
            low: window.low.map(&get),
            high: window.high.map(&get),
            preferred: window.preferred.map(&get),
            priority: window.priority,
        }
    }

    fn window<T>(&self, make: impl Fn(f64) -> T) -> Window<T> {
        Window {
            low: self.low.map(&make),
            high: self.high.map(&make),
            preferred: self.preferred.map(&make),
            priority: self.priority,
        }
    }
}

fn window_rows(spec: &Spec) -> Vec<WindowRow> {
    let ions = IONS.into_iter().filter_map(|ion| {
        let figure = format!("{}_mg_per_l", ion.name());
        Some(WindowRow::of(figure, spec.ions[ion]?, MgPerL::get))
    });
    let others = [
        spec.mash_calcium
            .map(|w| WindowRow::of(MASH_CALCIUM, w, MgPerL::get)),
        spec.sulfate_to_chloride
            .map(|w| WindowRow::of(SULFATE_TO_CHLORIDE, w, MassRatio::get)),
        spec.sparge_alkalinity
            .map(|w| WindowRow::of(SPARGE_ALKALINITY, w, MgPerLAsCaCO3::get)),
    ];
    ions.chain(others.into_iter().flatten()).collect()
}

fn put_window(spec: &mut Spec, row: &WindowRow) {
    match row.figure.as_str() {
        MASH_CALCIUM => spec.mash_calcium = Some(row.window(MgPerL::clamped)),
        SULFATE_TO_CHLORIDE => spec.sulfate_to_chloride = Some(row.window(MassRatio::clamped)),
        SPARGE_ALKALINITY => spec.sparge_alkalinity = Some(row.window(MgPerLAsCaCO3::clamped)),
        figure => {
            if let Some(ion) = figure.strip_suffix("_mg_per_l").and_then(Ion::from_name) {
                spec.ions[ion] = Some(row.window(MgPerL::clamped));
            }
        }
    }
}

/// A beer without its grist and windows, which have tables of their own.
fn beer(row: &SqliteRow) -> Result<Beer, Error> {
    let litres = |name: &str| -> Result<Litres, Error> { Ok(Litres::clamped(row.try_get(name)?)) };
    let ph = |name: &str| -> Result<Ph, Error> { Ok(Ph::clamped(row.try_get(name)?)) };
    let most = |name: &str| -> Result<Option<MgPerL>, Error> {
        Ok(row.try_get::<Option<f64>, _>(name)?.map(MgPerL::clamped))
    };
    Ok(Beer {
        id: row.try_get("id")?,
        name: row.try_get("name")?,
        grist: Vec::new(),
        volumes: Volumes {
            batch_l: litres("batch_l")?,
            mash_l: litres("mash_l")?,
            sparge_l: litres("sparge_l")?,
        },
        spec: Spec {
            ions: IonMap::from_fn(|_| None),
            mash_calcium: None,
            sulfate_to_chloride: None,
            sparge_alkalinity: None,
            mash_ph: Aim {
                target: ph("mash_ph_target")?,
                low: ph("mash_ph_low")?,
                high: ph("mash_ph_high")?,
            },
            highest_lactate: most("highest_lactate_mg_per_l")?,
            highest_sodium: most("highest_sodium_mg_per_l")?,
        },
        notes: row.try_get("notes")?,
        in_use: row.try_get("in_use")?,
        version: row.try_get("version")?,
    })
}

/// Reads the grists and windows of these beers.
async fn complete(db: &mut SqliteConnection, mut beers: Vec<Beer>) -> Result<Vec<Beer>, Error> {
    let ids: Vec<String> = beers.iter().map(|beer| beer.id.to_string()).collect();
    let ids = serde_json::Value::from(ids).to_string();
    let places: HashMap<BeerId, usize> = beers
        .iter()
        .enumerate()
        .map(|(place, beer)| (beer.id, place))
        .collect();
    let grist = sqlx::query(
        "SELECT beer_id, malt_id, kilograms FROM beer_grist
         WHERE beer_id IN (SELECT value FROM json_each(?)) ORDER BY beer_id, position",
    )
    .bind(&ids)
    .fetch_all(&mut *db)
    .await?;
    for row in &grist {
        if let Some(place) = places.get(&row.try_get("beer_id")?) {
            beers[*place].grist.push(GristLine {
                malt_id: row.try_get("malt_id")?,
                kilograms: Kilograms::clamped(row.try_get("kilograms")?),
            });
        }
    }
    let windows = sqlx::query(
        "SELECT beer_id, figure, low, high, preferred, priority FROM beer_windows
         WHERE beer_id IN (SELECT value FROM json_each(?))",
    )
    .bind(&ids)
    .fetch_all(&mut *db)
    .await?;
    for row in &windows {
        if let Some(place) = places.get(&row.try_get("beer_id")?) {
            let window = WindowRow {
                figure: row.try_get("figure")?,
                low: row.try_get("low")?,
                high: row.try_get("high")?,
                preferred: row.try_get("preferred")?,
                priority: Priority::from_key(row.try_get("priority")?).unwrap_or(USUAL_PRIORITY),
            };
            put_window(&mut beers[*place].spec, &window);
        }
    }
    Ok(beers)
}

pub(super) async fn find(db: &mut SqliteConnection, id: BeerId) -> Result<Option<Beer>, Error> {
    let row = sqlx::query(
        "SELECT id, name, batch_l, mash_l, sparge_l, mash_ph_target, mash_ph_low, mash_ph_high,
                highest_lactate_mg_per_l, highest_sodium_mg_per_l, notes, in_use, version
         FROM beers WHERE id = ?",
    )
    .bind(id)
    .fetch_optional(&mut *db)
    .await?;
    let Some(row) = row else { return Ok(None) };
    Ok(complete(db, vec![beer(&row)?]).await?.pop())
}

/// Up to `limit` beers made after this one, in the order they were made.
pub(super) async fn list_after(
    db: &mut SqliteConnection,
    after: Option<BeerId>,
    limit: i64,
) -> Result<Vec<Beer>, Error> {
    let rows = sqlx::query(
        "SELECT id, name, batch_l, mash_l, sparge_l, mash_ph_target, mash_ph_low, mash_ph_high,
                highest_lactate_mg_per_l, highest_sodium_mg_per_l, notes, in_use, version
         FROM beers WHERE id > coalesce(?, '') ORDER BY id LIMIT ?",
    )
    .bind(after)
    .bind(limit)
    .fetch_all(&mut *db)
    .await?;
    let beers = rows.iter().map(beer).collect::<Result<_, _>>()?;
    complete(db, beers).await
}

/// The beers in use, or the retired ones, by name.
pub(super) async fn list(db: &mut SqliteConnection, in_use: bool) -> Result<Vec<Beer>, Error> {
    let rows = sqlx::query(
        "SELECT id, name, batch_l, mash_l, sparge_l, mash_ph_target, mash_ph_low, mash_ph_high,
                highest_lactate_mg_per_l, highest_sodium_mg_per_l, notes, in_use, version
         FROM beers WHERE in_use = ? ORDER BY name",
    )
    .bind(in_use)
    .fetch_all(&mut *db)
    .await?;
    let beers = rows.iter().map(beer).collect::<Result<_, _>>()?;
    complete(db, beers).await
}

pub(super) async fn insert(db: &mut SqliteConnection, beer: &Beer) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO beers (id, name, batch_l, mash_l, sparge_l, mash_ph_target, mash_ph_low, mash_ph_high,
                            highest_lactate_mg_per_l, highest_sodium_mg_per_l, notes, in_use, version)
         VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
    )
    .bind(beer.id)
    .bind(&beer.name)
    .bind(beer.volumes.batch_l.get())
    .bind(beer.volumes.mash_l.get())
    .bind(beer.volumes.sparge_l.get())
    .bind(beer.spec.mash_ph.target.get())
    .bind(beer.spec.mash_ph.low.get())
    .bind(beer.spec.mash_ph.high.get())
    .bind(beer.spec.highest_lactate.map(MgPerL::get))
    .bind(beer.spec.highest_sodium.map(MgPerL::get))
    .bind(&beer.notes)
    .bind(beer.in_use)
    .bind(beer.version)
    .execute(&mut *db)
    .await?;
    insert_parts(db, beer).await
}

pub(super) async fn update(db: &mut SqliteConnection, beer: &Beer) -> Result<(), sqlx::Error> {
    sqlx::query(
        "UPDATE beers SET name = ?, batch_l = ?, mash_l = ?, sparge_l = ?, mash_ph_target = ?, mash_ph_low = ?,
                          mash_ph_high = ?, highest_lactate_mg_per_l = ?, highest_sodium_mg_per_l = ?,
                          notes = ?, in_use = ?, version = ?
         WHERE id = ?",
    )
    .bind(&beer.name)
    .bind(beer.volumes.batch_l.get())
    .bind(beer.volumes.mash_l.get())
    .bind(beer.volumes.sparge_l.get())
    .bind(beer.spec.mash_ph.target.get())
    .bind(beer.spec.mash_ph.low.get())
    .bind(beer.spec.mash_ph.high.get())
    .bind(beer.spec.highest_lactate.map(MgPerL::get))
    .bind(beer.spec.highest_sodium.map(MgPerL::get))
    .bind(&beer.notes)
    .bind(beer.in_use)
    .bind(beer.version)
    .bind(beer.id)
    .execute(&mut *db)
    .await?;
    sqlx::query("DELETE FROM beer_grist WHERE beer_id = ?")
        .bind(beer.id)
        .execute(&mut *db)
        .await?;
    sqlx::query("DELETE FROM beer_windows WHERE beer_id = ?")
        .bind(beer.id)
        .execute(&mut *db)
        .await?;
    insert_parts(db, beer).await
}

async fn insert_parts(db: &mut SqliteConnection, beer: &Beer) -> Result<(), sqlx::Error> {
    for (position, line) in (1_i64..).zip(&beer.grist) {
        sqlx::query(
            "INSERT INTO beer_grist (beer_id, position, malt_id, kilograms) VALUES (?, ?, ?, ?)",
        )
        .bind(beer.id)
        .bind(position)
        .bind(line.malt_id)
        .bind(line.kilograms.get())
        .execute(&mut *db)
        .await?;
    }
    for window in window_rows(&beer.spec) {
        sqlx::query(
            "INSERT INTO beer_windows (beer_id, figure, low, high, preferred, priority) VALUES (?, ?, ?, ?, ?, ?)",
        )
        .bind(beer.id)
        .bind(window.figure)
        .bind(window.low)
        .bind(window.high)
        .bind(window.preferred)
        .bind(window.priority.key())
        .execute(&mut *db)
        .await?;
    }
    Ok(())
}

/// What a grist must know of a malt.
pub(super) struct MaltState {
    pub(super) id: MaltId,
    pub(super) name: String,
    pub(super) in_use: bool,
}

/// Every malt, read in the transaction that will refer to some of them.
pub(super) async fn malts(db: &mut SqliteConnection) -> Result<Vec<MaltState>, Error> {
    let rows = sqlx::query("SELECT id, name, in_use FROM malts")
        .fetch_all(db)
        .await?;
    let malt = |row: &SqliteRow| {
        Ok(MaltState {
            id: row.try_get("id")?,
            name: row.try_get("name")?,
            in_use: row.try_get("in_use")?,
        })
    };
    rows.iter().map(malt).collect()
}
