//! Keeping malts, their lots and titrations.

use sqlx::SqliteConnection;

use super::entered::{NewMaltBody, NewMaltLotBody, NewTitrationBody};
use super::{Malt, MaltLot, store};
use crate::brewery;
use crate::db::Db;
use crate::error::{Error, refuse_stale, taken};
use crate::id::{MaltId, MaltLotId, MaltTitrationId, UtcTime};
use crate::input::Problems;
use crate::people::{Member, Permission};
use crate::record::{self, Change};

/// Every malt, in use or not, by name.
pub async fn list(db: &Db, by: &Member) -> Result<Vec<Malt>, Error> {
    by.may(Permission::Read)?;
    store::list(&mut *db.reader().await?).await
}

/// Every malt with the lot it is mashed from, in use or not, by name.
pub async fn list_with_lots(db: &Db, by: &Member) -> Result<Vec<(Malt, Option<MaltLot>)>, Error> {
    by.may(Permission::Read)?;
    let mut snapshot = db.snapshot().await?;
    let malts = store::list(&mut snapshot).await?;
    let mut lots = store::current_lots(&mut snapshot).await?;
    let mut current = |id: MaltId| {
        let place = lots.iter().position(|lot| lot.malt_id == id)?;
        Some(lots.swap_remove(place))
    };
    Ok(malts
        .into_iter()
        .map(|malt| {
            let lot = current(malt.id);
            (malt, lot)
        })
        .collect())
}

/// Up to `limit` malts made after `after`, in the order they were made.
pub async fn page(
    db: &Db,
    by: &Member,
    after: Option<MaltId>,
    limit: i64,
) -> Result<Vec<Malt>, Error> {
    by.may(Permission::Read)?;
    store::page(&mut *db.reader().await?, after, limit).await
}

/// One malt.
pub async fn find(db: &Db, by: &Member, id: MaltId) -> Result<Malt, Error> {
    by.may(Permission::Read)?;
    known(store::find(&mut *db.reader().await?, id).await?)
}

fn known(found: Option<Malt>) -> Result<Malt, Error> {
    found.ok_or(Error::NotFound("malt"))
}

/// Adds a malt.
pub async fn create(db: &Db, by: &Member, new: Malt) -> Result<Malt, Error> {
    by.may(Permission::KeepMalts)?;
    let mut tx = db.begin().await?;
    save(&mut tx, &new).await?;
    let entry = Change::created("malt", new.id, &new.name, &describe(&new));
    record::append(&mut tx, by, entry).await?;
    tx.commit().await?;
    Ok(new)
}

async fn save(tx: &mut SqliteConnection, malt: &Malt) -> Result<(), Error> {
    store::save(tx, malt).await.map_err(|error| {
        taken(
            error,
            "name",
            format!("A malt named “{}” exists already.", malt.name),
        )
    })
}

/// Changes a malt. `read_version`: the version the caller changed.
pub async fn revise(
    db: &Db,
    by: &Member,
    id: MaltId,
    new: Malt,
    read_version: Option<i64>,
) -> Result<Malt, Error> {
    by.may(Permission::KeepMalts)?;
    let mut tx = db.begin().await?;
    let before = known(store::find(&mut tx, id).await?)?;
    refuse_stale(read_version, before.version, "this malt")?;
    let after = Malt {
        id,
        version: before.version + 1,
        ..new
    };
    save(&mut tx, &after).await?;
    let (was, is) = (describe(&before), describe(&after));
    let entry = Change::changed("malt", id, &after.name, &was, &is);
    record::append(&mut tx, by, entry).await?;
    tx.commit().await?;
    Ok(after)
}

/// The lots of a malt: the current one, then the newest first.
pub async fn lots(db: &Db, by: &Member, malt: MaltId) -> Result<Vec<MaltLot>, Error> {
    by.may(Permission::Read)?;
    store::lots(&mut *db.snapshot().await?, malt).await
}

/// Up to `limit` lots of a malt entered after `after`, in the order they were entered.
pub async fn page_of_lots(
    db: &Db,
    by: &Member,
    malt: MaltId,
    after: Option<MaltLotId>,
    limit: i64,
) -> Result<Vec<MaltLot>, Error> {
    by.may(Permission::Read)?;
    let mut snapshot = db.snapshot().await?;
    known(store::find(&mut snapshot, malt).await?)?;
    store::page_of_lots(&mut snapshot, malt, after, limit).await
}

/// One lot of this malt, with the malt.
pub async fn find_lot_of(
    db: &Db,
    by: &Member,
    malt: MaltId,
    lot: MaltLotId,
) -> Result<(Malt, MaltLot), Error> {
    by.may(Permission::Read)?;
    let mut snapshot = db.snapshot().await?;
    both(&mut snapshot, malt, lot).await
}

async fn both(
    tx: &mut SqliteConnection,
    malt: MaltId,
    lot: MaltLotId,
) -> Result<(Malt, MaltLot), Error> {
    let malt = known(store::find(tx, malt).await?)?;
    let lot = lot_of(&malt, store::find_lot(tx, lot).await?)?;
    Ok((malt, lot))
}

fn lot_of(malt: &Malt, found: Option<MaltLot>) -> Result<MaltLot, Error> {
    found
        .filter(|lot| lot.malt_id == malt.id)
        .ok_or(Error::NotFound("lot"))
}

/// Enters a lot of a malt.
pub async fn create_lot(
    db: &Db,
    by: &Member,
    malt: MaltId,
    body: NewMaltLotBody,
) -> Result<MaltLot, Error> {
    by.may(Permission::KeepLots)?;
    let today = brewery::operations::today(db).await?;
    let mut tx = db.begin().await?;
    let malt = known(store::find(&mut tx, malt).await?)?;
    let lot = body.lot_of(&malt, today)?;
    step_aside(&mut tx, by, &malt, &lot).await?;
    save_lot(&mut tx, &lot).await?;
    let name = malt.name_with(Some(&lot));
    let entry = Change::created("malt lot", lot.id, &name, &describe_lot(&lot));
    record::append(&mut tx, by, entry.about("malt", malt.id)).await?;
    tx.commit().await?;
    Ok(lot)
}

/// Changes a lot of this malt; its titrations stay. `read_version`: the version the
/// caller changed.
pub async fn revise_lot(
    db: &Db,
    by: &Member,
    malt: MaltId,
    lot: MaltLotId,
    body: NewMaltLotBody,
    read_version: Option<i64>,
) -> Result<MaltLot, Error> {
    by.may(Permission::KeepLots)?;
    let today = brewery::operations::today(db).await?;
    let mut tx = db.begin().await?;
    let (malt, before) = both(&mut tx, malt, lot).await?;
    let new = body.lot_of(&malt, today)?;
    refuse_stale(read_version, before.version, "this lot")?;
    let after = MaltLot {
        id: lot,
        version: before.version + 1,
        titrations: before.titrations.clone(),
        ..new
    };
    step_aside(&mut tx, by, &malt, &after).await?;
    save_lot(&mut tx, &after).await?;
    record_lot(&mut tx, by, &malt, &before, &after).await?;
    tx.commit().await?;
    Ok(after)
}

/// When `new` becomes the current lot, the one before it no longer is.
async fn step_aside(
    tx: &mut SqliteConnection,
    by: &Member,
    malt: &Malt,
    new: &MaltLot,
) -> Result<(), Error> {
    if !new.current {
        return Ok(());
    }
    let lots = store::lots(tx, malt.id).await?;
    for before in lots
        .into_iter()
        .filter(|lot| lot.current && lot.id != new.id)
    {
        let after = MaltLot {
            current: false,
            version: before.version + 1,
            ..before.clone()
        };
        store::save_lot(tx, &after).await?;
        record_lot(tx, by, malt, &before, &after).await?;
    }
    Ok(())
}

async fn record_lot(
    tx: &mut SqliteConnection,
    by: &Member,
    malt: &Malt,
    before: &MaltLot,
    after: &MaltLot,
) -> Result<(), Error> {
    let name = malt.name_with(Some(after));
    let (was, is) = (describe_lot(before), describe_lot(after));
    let entry = Change::changed("malt lot", after.id, &name, &was, &is);
    record::append(tx, by, entry.about("malt", malt.id)).await
}

async fn save_lot(tx: &mut SqliteConnection, lot: &MaltLot) -> Result<(), Error> {
    store::save_lot(tx, lot).await.map_err(|error| {
        taken(
            error,
            "code",
            format!("A lot “{}” of this malt exists already.", lot.code),
        )
    })
}

/// Enters a bench titration of a lot. From now on it is what the lot is taken as.
pub async fn titrate(
    db: &Db,
    by: &Member,
    malt: MaltId,
    lot: MaltLotId,
    body: NewTitrationBody,
) -> Result<MaltLot, Error> {
    by.may(Permission::KeepLots)?;
    let today = brewery::operations::today(db).await?;
    let mut tx = db.begin().await?;
    let (malt, lot) = both(&mut tx, malt, lot).await?;
    if malt.class == chemistry::mash::MaltClass::Acidulated {
        return Err(Error::Conflict(
            "Acidulated malt is described by the lactic acid in it: enter that with the lot".into(),
        ));
    }
    let typed = serde_json::to_value(&body).unwrap_or_default();
    let titration = body.titration_of(&lot, today, &by.name)?;
    store::insert_titration(&mut tx, &titration).await?;
    let name = malt.name_with(Some(&lot));
    let entry = Change::created("malt titration", titration.id, &name, &typed)
        .about("malt lot", lot.id)
        .about("malt", malt.id);
    record::append(&mut tx, by, entry).await?;
    let (_, lot) = both(&mut tx, malt.id, lot.id).await?;
    tx.commit().await?;
    Ok(lot)
}

/// Withdraws a titration: its jars stay to be read, and no longer count.
pub async fn withdraw_titration(
    db: &Db,
    by: &Member,
    malt: MaltId,
    lot: MaltLotId,
    id: MaltTitrationId,
    reason: &str,
) -> Result<MaltLot, Error> {
    by.may(Permission::KeepLots)?;
    let mut problems = Problems::new();
    let reason = problems.text("reason", reason, 500);
    problems.finish()?;
    let reason = reason.unwrap_or_default();
    let mut tx = db.begin().await?;
    let (malt, lot) = both(&mut tx, malt, lot).await?;
    let titration = lot.titrations.iter().find(|titration| titration.id == id);
    let titration = titration.ok_or(Error::NotFound("titration"))?;
    if titration.withdrawn.is_some() {
        return Err(Error::Conflict(
            "This titration is withdrawn already".into(),
        ));
    }
    store::withdraw_titration(&mut tx, id, UtcTime::now(), &reason).await?;
    let name = malt.name_with(Some(&lot));
    let entry = Change::event("withdrew", "malt titration", id, &name)
        .because(Some(reason))
        .about("malt lot", lot.id)
        .about("malt", malt.id);
    record::append(&mut tx, by, entry).await?;
    let (_, lot) = both(&mut tx, malt.id, lot.id).await?;
    tx.commit().await?;
    Ok(lot)
}

fn describe(malt: &Malt) -> serde_json::Value {
    serde_json::to_value(NewMaltBody::from(malt)).unwrap_or_default()
}

fn describe_lot(lot: &MaltLot) -> serde_json::Value {
    serde_json::to_value(NewMaltLotBody::from(lot)).unwrap_or_default()
}
