//! Making, changing, retiring and reading beers.

use super::api::NewBeerBody;
use super::store::{self, MaltState};
use super::{Beer, NewBeer};
use crate::db::Db;
use crate::error::{Error, refuse_stale, taken};
use crate::id::BeerId;
use crate::input::Problems;
use crate::people::{Member, Permission};
use crate::record;

/// The beers in use, or the retired ones, by name.
pub async fn list(db: &Db, by: &Member, in_use: bool) -> Result<Vec<Beer>, Error> {
    by.may(Permission::Read)?;
    store::list(&mut *db.snapshot().await?, in_use).await
}

/// Up to `limit` beers made after this one, retired ones too, in the order they were
/// made.
pub async fn list_after(
    db: &Db,
    by: &Member,
    after: Option<BeerId>,
    limit: i64,
) -> Result<Vec<Beer>, Error> {
    by.may(Permission::Read)?;
    store::list_after(&mut *db.snapshot().await?, after, limit).await
}

/// One beer.
pub async fn find(db: &Db, by: &Member, id: BeerId) -> Result<Beer, Error> {
    by.may(Permission::Read)?;
    store::find(&mut *db.snapshot().await?, id)
        .await?
        .ok_or(Error::NotFound("beer"))
}

/// Makes a beer.
pub async fn create(db: &Db, by: &Member, new: NewBeer) -> Result<Beer, Error> {
    by.may(Permission::KeepBeers)?;
    let mut tx = db.begin().await?;
    let malts = store::malts(&mut tx).await?;
    check_malts(&malts, &new)?;
    let beer = new.kept_as(BeerId::new(), 1);
    store::insert(&mut tx, &beer)
        .await
        .map_err(|error| name_taken(error, &beer.name))?;
    record::append(
        &mut tx,
        by,
        record::Change::created("beer", beer.id, &beer.name, &describe(&beer, &malts)),
    )
    .await?;
    tx.commit().await?;
    Ok(beer)
}

/// Replaces a beer. `read_version`: the version the caller changed.
pub async fn revise(
    db: &Db,
    by: &Member,
    id: BeerId,
    new: NewBeer,
    read_version: Option<i64>,
) -> Result<Beer, Error> {
    by.may(Permission::KeepBeers)?;
    let mut tx = db.begin().await?;
    let before = store::find(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("beer"))?;
    refuse_stale(read_version, before.version, "this beer")?;
    let malts = store::malts(&mut tx).await?;
    check_malts(&malts, &new)?;
    let after = new.kept_as(id, before.version + 1);
    store::update(&mut tx, &after)
        .await
        .map_err(|error| name_taken(error, &after.name))?;
    record::append(
        &mut tx,
        by,
        record::Change::changed(
            "beer",
            id,
            &after.name,
            &describe(&before, &malts),
            &describe(&after, &malts),
        ),
    )
    .await?;
    tx.commit().await?;
    Ok(after)
}

/// Retires a beer or takes it back.
pub async fn set_in_use(
    db: &Db,
    by: &Member,
    id: BeerId,
    in_use: bool,
    read_version: Option<i64>,
) -> Result<Beer, Error> {
    by.may(Permission::KeepBeers)?;
    let mut tx = db.begin().await?;
    let before = store::find(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("beer"))?;
    refuse_stale(read_version, before.version, "this beer")?;
    if before.in_use == in_use {
        return Ok(before);
    }
    let after = Beer {
        in_use,
        version: before.version + 1,
        ..before
    };
    store::update(&mut tx, &after).await?;
    let action = if in_use { "took back" } else { "retired" };
    let change = record::Change::event(action, "beer", id, &after.name);
    record::append(&mut tx, by, change).await?;
    tx.commit().await?;
    Ok(after)
}

impl NewBeer {
    fn kept_as(self, id: BeerId, version: i64) -> Beer {
        Beer {
            id,
            name: self.name,
            grist: self.grist,
            volumes: self.volumes,
            spec: self.spec,
            notes: self.notes,
            in_use: self.in_use,
            version,
        }
    }
}

/// Refuses malts that are not there or no longer used, each at its line.
fn check_malts(malts: &[MaltState], new: &NewBeer) -> Result<(), Error> {
    let mut problems = Problems::new();
    for (line, row) in new.grist.iter().zip(&new.rows) {
        let field = format!("grist.{row}.malt_id");
        match malts.iter().find(|malt| malt.id == line.malt_id) {
            None => problems.add(field, "There is no such malt. Choose another."),
            Some(malt) if !malt.in_use => problems.add(
                field,
                format!("“{}” is retired. Choose another malt.", malt.name),
            ),
            Some(_) => {}
        }
    }
    problems.finish()
}

fn name_taken(error: sqlx::Error, name: &str) -> Error {
    taken(
        error,
        "name",
        format!("A beer named “{name}” exists already."),
    )
}

/// The beer as the record book keeps it: malts by the name of that day.
fn describe(beer: &Beer, malts: &[MaltState]) -> serde_json::Value {
    let grist: Vec<serde_json::Value> = beer
        .grist
        .iter()
        .map(|line| {
            let malt = malts.iter().find(|malt| malt.id == line.malt_id);
            serde_json::json!({
                "malt": malt.map(|malt| malt.name.as_str()),
                "kilograms": line.kilograms.get(),
            })
        })
        .collect();
    let mut described = serde_json::to_value(NewBeerBody::from(beer)).unwrap_or_default();
    described["grist"] = grist.into();
    described
}
