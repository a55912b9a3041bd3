//! Entering what came and what was counted, and asking how much there is.

use chemistry::quantity::DoseAmount;
use jiff::tz::TimeZone;
use sqlx::SqliteConnection;

use super::entered::NewMovementBody;
use super::{Levels, LotLevel, Movement, MovementKind, Shortage, Stock, Taken, Use, store};
use crate::brewery;
use crate::db::Db;
use crate::error::Error;
use crate::id::{MaterialId, MaterialLotId, MovementId, UtcTime};
use crate::people::{Member, Permission};
use crate::record::{self, Change};
use crate::shelf::{Material, MaterialLot, operations as shelf};

/// How much there is of everything now. No permission is asked: whoever may see a plan
/// may know.
pub async fn levels(conn: &mut SqliteConnection) -> Result<Levels, Error> {
    let lots = store::levels(conn, None, UtcTime::now(), None).await?;
    Ok(lots.into_iter().collect())
}

/// How much there is of one lot now; `None`: never counted.
pub async fn stock(
    conn: &mut SqliteConnection,
    lot: MaterialLotId,
) -> Result<Option<Stock>, Error> {
    let levels = store::levels(conn, Some(lot), UtcTime::now(), None).await?;
    Ok(levels.first().and_then(|level| level.stock))
}

/// How much there is of a material now, all its lots on the shelf together; `None`: none
/// of them was ever counted.
pub async fn stock_of_material(
    conn: &mut SqliteConnection,
    material: MaterialId,
) -> Result<Option<Stock>, Error> {
    Ok(levels(conn).await?.material(material).stock)
}

/// Of which materials less is there than these planned amounts come to. For many plans,
/// ask for [`levels`] once.
pub async fn shortages(
    conn: &mut SqliteConnection,
    planned: impl IntoIterator<Item = (MaterialId, DoseAmount)>,
) -> Result<Vec<Shortage>, Error> {
    Ok(levels(conn).await?.shortages(planned))
}

/// How much there is of everything now.
pub async fn all(db: &Db, by: &Member) -> Result<Levels, Error> {
    by.may(Permission::Read)?;
    levels(&mut *db.reader().await?).await
}

/// Everything that is known about the stock of one lot.
#[derive(Clone, Debug)]
pub struct Ledger {
    /// Of which material.
    pub material: Material,
    /// The lot.
    pub lot: MaterialLot,
    /// How much there is.
    pub level: LotLevel,
    /// Every movement, those that were corrected too, in the order they happened.
    pub movements: Vec<Movement>,
    /// What was weighed out.
    pub taken: Vec<Taken>,
    /// What batches take of this material.
    pub recent_use: Option<Use>,
}

/// How many batches tell how long a lot lasts.
const BATCHES: i64 = 10;

/// The stock of one lot of this material and how it came about.
pub async fn ledger(
    db: &Db,
    by: &Member,
    material: MaterialId,
    lot: MaterialLotId,
) -> Result<Ledger, Error> {
    by.may(Permission::Read)?;
    let mut snapshot = db.snapshot().await?;
    let (material, lot) = shelf::lot_of_material(&mut snapshot, material, lot).await?;
    let level = level_at(&mut snapshot, &lot, UtcTime::now(), None).await?;
    Ok(Ledger {
        level,
        movements: store::of_lot(&mut snapshot, lot.id).await?,
        taken: store::taken(&mut snapshot, lot.id).await?,
        recent_use: store::use_of(&mut snapshot, material.id, BATCHES).await?,
        material,
        lot,
    })
}

async fn level_at(
    conn: &mut SqliteConnection,
    lot: &MaterialLot,
    at: UtcTime,
    without: Option<MovementId>,
) -> Result<LotLevel, Error> {
    let levels = store::levels(conn, Some(lot.id), at, without).await?;
    levels.first().copied().ok_or(Error::NotFound("lot"))
}

/// Up to `limit` movements of a lot of this material entered after `after`, in the order
/// they were entered.
pub async fn page(
    db: &Db,
    by: &Member,
    material: MaterialId,
    lot: MaterialLotId,
    after: Option<MovementId>,
    limit: i64,
) -> Result<Vec<Movement>, Error> {
    by.may(Permission::Read)?;
    let mut snapshot = db.snapshot().await?;
    let (_, lot) = shelf::lot_of_material(&mut snapshot, material, lot).await?;
    store::page(&mut snapshot, lot.id, after, limit).await
}

/// One movement of a lot of this material, with both.
pub async fn find(
    db: &Db,
    by: &Member,
    (material, lot, id): (MaterialId, MaterialLotId, MovementId),
) -> Result<(Material, MaterialLot, Movement), Error> {
    by.may(Permission::Read)?;
    let mut snapshot = db.snapshot().await?;
    let (material, lot) = shelf::lot_of_material(&mut snapshot, material, lot).await?;
    let movement = store::find(&mut snapshot, id).await?;
    let movement = movement.filter(|movement| movement.lot_id == lot.id);
    let movement = movement.ok_or(Error::NotFound("movement"))?;
    Ok((material, lot, movement))
}

/// A count that differs from what was expected by more than this share of it, and by more
/// than a step of the scale, needs a reason. Source: assumed.
const EXPECTED: f64 = 0.02;

/// Enters a delivery or a count of a lot, or corrects one.
pub async fn enter(
    db: &Db,
    by: &Member,
    material: MaterialId,
    lot: MaterialLotId,
    body: &NewMovementBody,
) -> Result<Movement, Error> {
    by.may(Permission::KeepLots)?;
    let settings = brewery::operations::settings(db).await?;
    let zone = TimeZone::get(&settings.time_zone).unwrap_or(TimeZone::UTC);
    let mut tx = db.begin().await?;
    let (material, lot) = shelf::lot_of_material(&mut tx, material, lot).await?;
    let mut movement = body.movement_of(lot.id, &by.name, &zone)?;
    let before = corrected(&mut tx, &mut movement).await?;
    if movement.kind == MovementKind::Count {
        refuse_unexplained(&mut tx, &material, &lot, &movement).await?;
    }
    store::insert(&mut tx, &movement).await?;
    let describe = |movement: &Movement| {
        serde_json::to_value(NewMovementBody::from(movement)).unwrap_or_default()
    };
    let deed = match (&before, movement.kind) {
        (Some(_), MovementKind::Delivery) => "corrected a delivery of",
        (Some(_), MovementKind::Count) => "corrected a count of",
        (_, kind) => kind.deed(),
    };
    let name = material.name_with(Some(&lot));
    let (was, is) = (before.as_ref().map(describe), describe(&movement));
    let entry = Change::of(deed, "material lot", lot.id, &name, was, Some(is))
        .because(movement.reason.clone())
        .about("material", material.id);
    record::append(&mut tx, by, entry).await?;
    tx.commit().await?;
    Ok(movement)
}

/// The movement that this one takes the place of, if it does; a removal stands at its
/// moment.
async fn corrected(
    tx: &mut SqliteConnection,
    movement: &mut Movement,
) -> Result<Option<Movement>, Error> {
    let Some(id) = movement.corrects else {
        return Ok(None);
    };
    let found = store::find(tx, id).await?;
    let Some(before) = found.filter(|it| it.lot_id == movement.lot_id) else {
        return Err(Error::field("corrects", "This lot has no such movement."));
    };
    if store::is_corrected(tx, id).await? {
        return Err(Error::field(
            "corrects",
            "That movement was corrected already. Correct its correction.",
        ));
    }
    let fits = match movement.kind {
        MovementKind::Removal => before.kind != MovementKind::Removal,
        kind => kind == before.kind || before.kind == MovementKind::Removal,
    };
    if !fits {
        return Err(Error::field(
            "kind",
            "A delivery is corrected by a delivery and a count by a count; take this one back and enter another.",
        ));
    }
    if movement.kind == MovementKind::Removal {
        movement.at = before.at;
    }
    Ok(Some(before))
}

/// Refuses a count that is not what was expected and does not say why.
async fn refuse_unexplained(
    tx: &mut SqliteConnection,
    material: &Material,
    lot: &MaterialLot,
    count: &Movement,
) -> Result<(), Error> {
    let expected = level_at(tx, lot, count.at, count.corrects).await?.stock;
    let Some(expected) = expected.filter(|_| count.reason.is_none()) else {
        return Ok(());
    };
    let off = (count.amount.get() - expected.get()).abs();
    let let_pass = (EXPECTED * expected.get().abs()).max(material.scale_step.get());
    if off <= let_pass {
        return Ok(());
    }
    Err(Error::field(
        "reason",
        "This is not what deliveries and doses come to. Say what explains it: spilt, used elsewhere, a dose without its lot, not known.",
    ))
}
