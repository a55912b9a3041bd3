//! Keeping materials and their lots.

use chemistry::material::Substance;
use sqlx::SqliteConnection;

use super::entered::{NewMaterialBody, NewMaterialLotBody};
use super::stock::{self, Levels};
use super::{Material, MaterialLot, store};
use crate::brewery;
use crate::db::Db;
use crate::error::{Error, refuse_stale, taken};
use crate::id::{MaterialId, MaterialLotId};
use crate::people::{Member, Permission};
use crate::record::{self, Change};

/// Every material, in use or not, by name.
pub async fn list(db: &Db, by: &Member) -> Result<Vec<Material>, Error> {
    by.may(Permission::Read)?;
    store::list(&mut *db.reader().await?).await
}

/// Every material with the lot it is weighed from, in use or not, by name.
pub async fn list_with_lots(
    db: &Db,
    by: &Member,
) -> Result<Vec<(Material, Option<MaterialLot>)>, Error> {
    by.may(Permission::Read)?;
    let mut snapshot = db.snapshot().await?;
    let materials = store::list(&mut snapshot).await?;
    let mut lots = store::current_lots(&mut snapshot).await?;
    let mut current = |id: MaterialId| {
        let place = lots.iter().position(|lot| lot.material_id == id)?;
        Some(lots.swap_remove(place))
    };
    Ok(materials
        .into_iter()
        .map(|material| {
            let lot = current(material.id);
            (material, lot)
        })
        .collect())
}

/// How much there is of everything, and the lot of every material that is weighed from.
/// No permission is asked: it goes with what was read or written under one.
pub async fn now(db: &Db) -> Result<(Levels, Vec<MaterialLot>), Error> {
    let mut snapshot = db.snapshot().await?;
    let levels = stock::operations::levels(&mut snapshot).await?;
    Ok((levels, store::current_lots(&mut snapshot).await?))
}

/// The materials a plan may use, each with the lot it is weighed from, by name.
pub async fn list_in_use(
    db: &Db,
    by: &Member,
) -> Result<Vec<(Material, Option<MaterialLot>)>, Error> {
    let mut shelf = list_with_lots(db, by).await?;
    shelf.retain(|(material, _)| material.in_use);
    Ok(shelf)
}

/// Up to `limit` materials made after `after`, in the order they were made.
pub async fn page(
    db: &Db,
    by: &Member,
    after: Option<MaterialId>,
    limit: i64,
) -> Result<Vec<Material>, Error> {
    by.may(Permission::Read)?;
    store::page(&mut *db.reader().await?, after, limit).await
}

/// One material.
pub async fn find(db: &Db, by: &Member, id: MaterialId) -> Result<Material, Error> {
    by.may(Permission::Read)?;
    known(store::find(&mut *db.reader().await?, id).await?)
}

/// One material. No permission is asked.
pub async fn material(conn: &mut SqliteConnection, id: MaterialId) -> Result<Material, Error> {
    known(store::find(conn, id).await?)
}

fn known(found: Option<Material>) -> Result<Material, Error> {
    found.ok_or(Error::NotFound("material"))
}

/// Puts a material on the shelf.
pub async fn create(db: &Db, by: &Member, new: Material) -> Result<Material, Error> {
    by.may(Permission::KeepShelf)?;
    let mut tx = db.begin().await?;
    insert(&mut tx, by, &new).await?;
    tx.commit().await?;
    Ok(new)
}

/// Puts several substances on the shelf at their usual strengths, all or none. What is
/// there already by that name is left alone. Returns what was added.
pub async fn create_usual(
    db: &Db,
    by: &Member,
    substances: &[Substance],
) -> Result<Vec<Material>, Error> {
    by.may(Permission::KeepShelf)?;
    let mut tx = db.begin().await?;
    let there = store::list(&mut tx).await?;
    let mut added = Vec::new();
    for &substance in substances {
        let Some(material) = Material::usual(substance) else {
            return Err(Error::field(
                "",
                format!(
                    "{} has no usual strength or use: add it by itself.",
                    substance.name()
                ),
            ));
        };
        let name = material.name.to_lowercase();
        if there.iter().any(|known| known.name.to_lowercase() == name) {
            continue;
        }
        insert(&mut tx, by, &material).await?;
        added.push(material);
    }
    tx.commit().await?;
    Ok(added)
}

async fn insert(tx: &mut SqliteConnection, by: &Member, new: &Material) -> Result<(), Error> {
    save(tx, new).await?;
    let entry = Change::created("material", new.id, &new.name, &describe(new));
    record::append(tx, by, entry).await
}

async fn save(tx: &mut SqliteConnection, material: &Material) -> Result<(), Error> {
    store::save(tx, material).await.map_err(|error| {
        taken(
            error,
            "name",
            format!("A material named “{}” exists already.", material.name),
        )
    })
}

/// Changes a material; its substance stays. `read_version`: the version the caller
/// changed.
pub async fn revise(
    db: &Db,
    by: &Member,
    id: MaterialId,
    new: Material,
    read_version: Option<i64>,
) -> Result<Material, Error> {
    by.may(Permission::KeepShelf)?;
    let mut tx = db.begin().await?;
    let before = known(store::find(&mut tx, id).await?)?;
    refuse_stale(read_version, before.version, "this material")?;
    if new.substance != before.substance {
        return Err(Error::field(
            "substance",
            format!(
                "“{}” is {} and stays so, because its lots and plans are. Add another material instead.",
                before.name,
                before.substance.name()
            ),
        ));
    }
    let after = Material {
        id,
        version: before.version + 1,
        ..new
    };
    save(&mut tx, &after).await?;
    let (was, is) = (describe(&before), describe(&after));
    let entry = Change::changed("material", id, &after.name, &was, &is);
    record::append(&mut tx, by, entry).await?;
    tx.commit().await?;
    Ok(after)
}

/// The lots of a material: the current one, then the newest first.
pub async fn lots(db: &Db, by: &Member, material: MaterialId) -> Result<Vec<MaterialLot>, Error> {
    by.may(Permission::Read)?;
    store::lots(&mut *db.reader().await?, material).await
}

/// Every lot of every material, by the name of the material.
pub async fn every_lot(db: &Db, by: &Member) -> Result<Vec<(Material, MaterialLot)>, Error> {
    by.may(Permission::Read)?;
    let mut snapshot = db.snapshot().await?;
    let mut all = Vec::new();
    for material in store::list(&mut snapshot).await? {
        let lots = store::lots(&mut snapshot, material.id).await?;
        all.extend(lots.into_iter().map(|lot| (material.clone(), lot)));
    }
    Ok(all)
}

/// Up to `limit` lots of a material entered after `after`, in the order they were
/// entered.
pub async fn page_of_lots(
    db: &Db,
    by: &Member,
    material: MaterialId,
    after: Option<MaterialLotId>,
    limit: i64,
) -> Result<Vec<MaterialLot>, Error> {
    by.may(Permission::Read)?;
    let mut snapshot = db.snapshot().await?;
    known(store::find(&mut snapshot, material).await?)?;
    store::page_of_lots(&mut snapshot, material, after, limit).await
}

/// One lot.
pub async fn find_lot(db: &Db, by: &Member, id: MaterialLotId) -> Result<MaterialLot, Error> {
    by.may(Permission::Read)?;
    known_lot(store::find_lot(&mut *db.reader().await?, id).await?)
}

/// One lot of this material, with the material.
pub async fn find_lot_of(
    db: &Db,
    by: &Member,
    material: MaterialId,
    lot: MaterialLotId,
) -> Result<(Material, MaterialLot), Error> {
    by.may(Permission::Read)?;
    lot_of_material(&mut *db.snapshot().await?, material, lot).await
}

/// One lot of this material, with the material. No permission is asked.
pub async fn lot_of_material(
    conn: &mut SqliteConnection,
    material: MaterialId,
    lot: MaterialLotId,
) -> Result<(Material, MaterialLot), Error> {
    let material = known(store::find(conn, material).await?)?;
    let lot = store::find_lot(conn, lot).await?;
    let lot = known_lot(lot.filter(|lot| lot.material_id == material.id))?;
    Ok((material, lot))
}

/// A material, for an operation of another group that has asked for its own permission.
pub async fn material_of_dose(
    conn: &mut SqliteConnection,
    id: MaterialId,
) -> Result<Option<Material>, Error> {
    store::find(conn, id).await
}

/// A lot, likewise.
pub async fn lot_of_dose(
    conn: &mut SqliteConnection,
    id: MaterialLotId,
) -> Result<Option<MaterialLot>, Error> {
    store::find_lot(conn, id).await
}

/// The lot of a material with this code in upper or lower case, likewise.
pub async fn lot_by_code(
    conn: &mut SqliteConnection,
    material: MaterialId,
    code: &str,
) -> Result<Option<MaterialLot>, Error> {
    let code = code.to_lowercase();
    let lots = store::lots(conn, material).await?;
    Ok(lots.into_iter().find(|lot| lot.code.to_lowercase() == code))
}

fn known_lot(found: Option<MaterialLot>) -> Result<MaterialLot, Error> {
    found.ok_or(Error::NotFound("lot"))
}

/// Enters a lot of a material.
pub async fn create_lot(
    db: &Db,
    by: &Member,
    material: MaterialId,
    body: NewMaterialLotBody,
) -> Result<MaterialLot, Error> {
    by.may(Permission::KeepLots)?;
    let today = brewery::operations::today(db).await?;
    let mut tx = db.begin().await?;
    let material = known(store::find(&mut tx, material).await?)?;
    let lot = body.lot_of(&material, today)?;
    step_aside(&mut tx, by, &material, &lot).await?;
    save_lot(&mut tx, &lot).await?;
    let name = material.name_with(Some(&lot));
    let entry = Change::created("material lot", lot.id, &name, &describe_lot(&lot));
    record::append(&mut tx, by, entry.about("material", material.id)).await?;
    tx.commit().await?;
    Ok(lot)
}

/// Changes a lot. `read_version`: the version the caller changed.
pub async fn revise_lot(
    db: &Db,
    by: &Member,
    id: MaterialLotId,
    body: NewMaterialLotBody,
    read_version: Option<i64>,
) -> Result<MaterialLot, Error> {
    by.may(Permission::KeepLots)?;
    let today = brewery::operations::today(db).await?;
    let mut tx = db.begin().await?;
    let before = known_lot(store::find_lot(&mut tx, id).await?)?;
    let material = known(store::find(&mut tx, before.material_id).await?)?;
    let new = body.lot_of(&material, today)?;
    refuse_stale(read_version, before.version, "this lot")?;
    let after = MaterialLot {
        id,
        version: before.version + 1,
        ..new
    };
    step_aside(&mut tx, by, &material, &after).await?;
    save_lot(&mut tx, &after).await?;
    let name = material.name_with(Some(&after));
    let (was, is) = (describe_lot(&before), describe_lot(&after));
    record::append(
        &mut tx,
        by,
        Change::changed("material lot", id, &name, &was, &is).about("material", after.material_id),
    )
    .await?;
    tx.commit().await?;
    Ok(after)
}

/// When `new` becomes the current lot, the one before it no longer is.
async fn step_aside(
    tx: &mut SqliteConnection,
    by: &Member,
    material: &Material,
    new: &MaterialLot,
) -> Result<(), Error> {
    if !new.current {
        return Ok(());
    }
    let lots = store::lots(tx, material.id).await?;
    for before in lots
        .into_iter()
        .filter(|lot| lot.current && lot.id != new.id)
    {
        let after = MaterialLot {
            current: false,
            version: before.version + 1,
            ..before.clone()
        };
        store::save_lot(tx, &after).await?;
        let name = material.name_with(Some(&after));
        let (was, is) = (describe_lot(&before), describe_lot(&after));
        record::append(
            tx,
            by,
            Change::changed("material lot", after.id, &name, &was, &is)
                .about("material", after.material_id),
        )
        .await?;
    }
    Ok(())
}

async fn save_lot(tx: &mut SqliteConnection, lot: &MaterialLot) -> Result<(), Error> {
    store::save_lot(tx, lot).await.map_err(|error| {
        taken(
            error,
            "code",
            format!("A lot “{}” of this material exists already.", lot.code),
        )
    })
}

fn describe(material: &Material) -> serde_json::Value {
    serde_json::to_value(NewMaterialBody::from(material)).unwrap_or_default()
}

fn describe_lot(lot: &MaterialLot) -> serde_json::Value {
    serde_json::to_value(NewMaterialLotBody::from(lot)).unwrap_or_default()
}
