//! The weigh-out: what goes in, line by line.
//!
//! [`weigh`] writes down that a line is in, [`correct`] that it was written down wrongly,
//! [`take_back`] that it is not in after all. An amount outside the [`Band`] of its line
//! is taken only with a reason, and the refusal says what it does ([`Effect`]). Which lot
//! was weighed from is found by [`lots`].

use chemistry::material::{Role, Substance};
use chemistry::quantity::{DoseAmount, Fraction};
use sqlx::SqliteConnection;

use super::operations::{about_dose, title, weighed_json};
use super::{Correction, Dose, Lot, Plan, State, Weighed, Witness, store};
use crate::brewery::{self, SecondPerson, Settings};
use crate::db::Db;
use crate::error::Error;
use crate::id::{DoseId, PlanId, UtcTime};
use crate::input::Problems;
use crate::people::{Member, Permission};
use crate::record::{self, Change};
use crate::shelf::{self, USUAL_TOLERANCE};
use crate::web::format;

pub mod effect;
pub mod lots;

pub use effect::{Band, Effect};
pub use lots::LotNamed;

/// How much went in.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Actual {
    /// What was planned, to the last digit.
    AsPlanned,
    /// So much, g or mL.
    Amount(DoseAmount),
}

/// What somebody says went in.
#[derive(Clone, Debug, PartialEq)]
pub struct NewWeighed {
    /// How much.
    pub actual: Actual,
    /// Of which lot.
    pub lot: LotNamed,
    /// Why it is not what was planned.
    pub reason: Option<String>,
    /// Who stood by and has proved it.
    pub witness: Option<Witness>,
    /// When it went in: earlier than now where the tablet had no network.
    pub at: UtcTime,
}

/// What somebody says should have been written down.
#[derive(Clone, Debug, PartialEq)]
pub struct NewCorrection {
    /// What went in; its reason is why it is corrected.
    pub weighed: NewWeighed,
    /// How many corrections there were when this one was thought of.
    pub seen: Option<usize>,
}

/// The lines of a plan in the brewery's order of vessels, and within each as planned.
pub fn in_order<'a>(plan: &'a Plan, settings: &Settings) -> Vec<&'a Dose> {
    let mut lines: Vec<&Dose> = plan.doses.iter().collect();
    let place = |dose: &&Dose| {
        let order = &settings.vessel_order;
        order.iter().position(|vessel| *vessel == dose.vessel)
    };
    lines.sort_by_key(|dose| (place(dose), dose.position));
    lines
}

/// Whether somebody else has to stand by when this is weighed in.
pub fn needs_second_person(settings: &Settings, substance: Substance) -> bool {
    settings.second_person == SecondPerson::AcidAndLime && substance.role() != Role::Salt
}

/// Writes down that a dose is in. A dose that is in already is refused with who weighed
/// it, so that none goes in twice.
pub async fn weigh(
    db: &Db,
    by: &Member,
    plan_id: PlanId,
    dose_id: DoseId,
    new: NewWeighed,
) -> Result<Plan, Error> {
    by.may(Permission::BrewBatches)?;
    let settings = brewery::operations::settings(db).await?;
    let mut tx = db.begin().await?;
    let plan = open(&mut tx, plan_id).await?;
    let mut dose = find(&plan, dose_id)?.clone();
    if let Some(weighed) = &dose.weighed {
        return Err(Error::Conflict(format!(
            "{} weighed this in already, at {}. Do not add it again",
            weighed.by,
            format::moment(weighed.at, &settings.time_zone)
        )));
    }
    let (actual, lot) = checked(&mut tx, by, &settings, &plan, &dose, &new).await?;
    let weighed = Weighed {
        actual,
        lot,
        at: new.at,
        by: by.name.clone(),
        reason: new.reason.clone().unwrap_or_default(),
        witness: new.witness,
        corrections: Vec::new(),
    };
    let planned = serde_json::json!({"planned": dose.planned.get()});
    let told = (Some(planned), Some(weighed_json(&weighed)));
    dose.weighed = Some(weighed);
    store::update_weighed(&mut tx, &dose).await?;
    write_down(&mut tx, by, &plan, &dose, "weighed in", told, new.reason).await?;
    let after = settle(&mut tx, &plan).await?;
    tx.commit().await?;
    Ok(after)
}

/// Corrects what was written down about a dose. What stood there before stays to be read.
pub async fn correct(
    db: &Db,
    by: &Member,
    plan_id: PlanId,
    dose_id: DoseId,
    new: NewCorrection,
) -> Result<Plan, Error> {
    by.may(Permission::BrewBatches)?;
    let settings = brewery::operations::settings(db).await?;
    let NewCorrection { weighed: new, seen } = new;
    let mut tx = db.begin().await?;
    let plan = open(&mut tx, plan_id).await?;
    let mut dose = find(&plan, dose_id)?.clone();
    let Some(was) = dose.weighed.clone() else {
        return Err(Error::Conflict("This is not weighed in".into()));
    };
    if let Some(last) = was.corrections.last()
        && seen.is_some_and(|seen| seen != was.corrections.len())
    {
        return Err(Error::Conflict(format!(
            "{} corrected this meanwhile, at {}. Look at it again first",
            last.corrected_by,
            format::moment(last.corrected_at, &settings.time_zone)
        )));
    }
    let Some(because) = new.reason.clone() else {
        return Err(Error::field("reason", "Say what was wrong."));
    };
    // A line that somebody stood by at is not made another one alone.
    let (actual, lot) = checked(&mut tx, by, &settings, &plan, &dose, &new).await?;
    if actual == was.actual && (lot.id, &lot.code) == (was.lot.id, &was.lot.code) {
        return Err(Error::field(
            "actual",
            "This is what is written down already.",
        ));
    }
    let inside = band(&mut tx, &plan, &dose, &lot).await?.0.holds(actual);
    let mut is = Weighed {
        actual,
        lot,
        reason: if inside {
            String::new()
        } else {
            because.clone()
        },
        witness: new.witness.or(was.witness.clone()),
        ..was.clone()
    };
    is.corrections.push(Correction {
        actual: was.actual.get(),
        lot: was.lot.code.clone(),
        reason: was.reason.clone(),
        corrected_at: UtcTime::now(),
        corrected_by: by.name.clone(),
        because: because.clone(),
    });
    let told = (Some(weighed_json(&was)), Some(weighed_json(&is)));
    dose.weighed = Some(is);
    store::update_weighed(&mut tx, &dose).await?;
    write_down(&mut tx, by, &plan, &dose, "corrected", told, Some(because)).await?;
    let after = settle(&mut tx, &plan).await?;
    tx.commit().await?;
    Ok(after)
}

/// Takes back that a dose is in: it was a slip of the finger.
pub async fn take_back(
    db: &Db,
    by: &Member,
    plan_id: PlanId,
    dose_id: DoseId,
    reason: String,
) -> Result<Plan, Error> {
    by.may(Permission::BrewBatches)?;
    let mut tx = db.begin().await?;
    let plan = open(&mut tx, plan_id).await?;
    let dose = find(&plan, dose_id)?;
    let Some(weighed) = &dose.weighed else {
        return Err(Error::Conflict("This is not weighed in".into()));
    };
    let open = Dose {
        weighed: None,
        ..dose.clone()
    };
    store::update_weighed(&mut tx, &open).await?;
    let told = (Some(weighed_json(weighed)), None);
    let action = "weighing taken back";
    write_down(&mut tx, by, &plan, dose, action, told, Some(reason)).await?;
    let after = settle(&mut tx, &plan).await?;
    tx.commit().await?;
    Ok(after)
}

/// What a line would do with this amount and lot, for a page that asks why.
pub async fn effect(
    db: &Db,
    by: &Member,
    plan: &Plan,
    dose: &Dose,
    new: &NewWeighed,
) -> Result<Effect, Error> {
    by.may(Permission::Read)?;
    let mut reader = db.reader().await?;
    let lot = lot(&mut reader, plan, dose, new.lot.clone()).await?;
    let (_, tolerance) = band(&mut reader, plan, dose, &lot).await?;
    Effect::of(plan, dose, new.actual.of(dose), lot, tolerance)
}

impl Actual {
    /// How much, g or mL.
    pub fn of(self, dose: &Dose) -> DoseAmount {
        match self {
            Self::AsPlanned => dose.planned,
            Self::Amount(amount) => amount,
        }
    }
}

/// Amount and lot, held against the line: what is far from it needs a reason, and acid and
/// lime a second person where the brewery wants one.
async fn checked(
    tx: &mut SqliteConnection,
    by: &Member,
    settings: &Settings,
    plan: &Plan,
    dose: &Dose,
    new: &NewWeighed,
) -> Result<(DoseAmount, Lot), Error> {
    let actual = new.actual.of(dose);
    let lot = lot(tx, plan, dose, new.lot.clone()).await?;
    let item = plan.inputs.problem.shelf.get(dose.material);
    let watched = item.is_some_and(|item| needs_second_person(settings, item.material.substance()));
    let mut problems = Problems::new();
    if watched && actual.get() > 0.0 {
        match &new.witness {
            None if by.scopes.is_some() => {
                return Err(Error::Forbidden(
                    "This line needs a second person, and a token cannot stand by. Weigh it in on the page of the weigh-out.".into(),
                ));
            }
            None => problems.add(
                "second_person_id",
                "This line needs a second person: choose who stands by, and let them prove it.",
            ),
            Some(witness) if witness.id == by.id => problems.add(
                "second_person_id",
                "The second person must be somebody else.",
            ),
            Some(_) => {}
        }
    }
    let (band, tolerance) = band(tx, plan, dose, &lot).await?;
    if !band.holds(actual) && new.reason.is_none() {
        let effect = Effect::of(plan, dose, actual, lot.clone(), tolerance)?;
        problems.add("reason", effect.question(plan));
    }
    problems.finish()?;
    Ok((actual, lot))
}

async fn lot(
    conn: &mut SqliteConnection,
    plan: &Plan,
    dose: &Dose,
    named: LotNamed,
) -> Result<Lot, Error> {
    let material = on_the_shelf(conn, plan, dose).await?;
    let name = name(plan, dose);
    lots::find(conn, material.as_ref(), &name, plan.brewed_on, named).await
}

async fn on_the_shelf(
    conn: &mut SqliteConnection,
    plan: &Plan,
    dose: &Dose,
) -> Result<Option<shelf::Material>, Error> {
    match plan.inputs.shelf.get(dose.material).and_then(|it| it.id) {
        Some(id) => shelf::operations::material_of_dose(conn, id).await,
        None => Ok(None),
    }
}

async fn band(
    conn: &mut SqliteConnection,
    plan: &Plan,
    dose: &Dose,
    lot: &Lot,
) -> Result<(Band, Fraction), Error> {
    let material = on_the_shelf(conn, plan, dose).await?;
    let tolerance = material.map_or(USUAL_TOLERANCE, |material| material.tolerance());
    let band = Band::of(plan, dose, lot.material.as_ref(), tolerance);
    Ok((band, tolerance))
}

async fn open(tx: &mut SqliteConnection, id: PlanId) -> Result<Plan, Error> {
    let plan = store::find(tx, id).await?.ok_or(Error::NotFound("plan"))?;
    if !matches!(plan.state, State::Approved | State::Dosed) {
        return Err(Error::Conflict(format!(
            "This plan is {}: only an approved plan is weighed out",
            plan.state.name().to_lowercase()
        )));
    }
    if let Some((_, revision)) = store::successor(tx, id).await? {
        return Err(Error::Conflict(format!(
            "Revision {revision} of this plan is being drafted. Wait until it is approved or withdrawn"
        )));
    }
    Ok(plan)
}

fn find(plan: &Plan, id: DoseId) -> Result<&Dose, Error> {
    plan.doses
        .iter()
        .find(|dose| dose.id == id)
        .ok_or(Error::NotFound("dose of this plan"))
}

fn name(plan: &Plan, dose: &Dose) -> String {
    plan.inputs
        .problem
        .shelf
        .get(dose.material)
        .map_or_else(String::new, |item| item.name.clone())
}

/// Into the record book. A correction is about the lot before as well.
async fn write_down(
    tx: &mut SqliteConnection,
    by: &Member,
    plan: &Plan,
    dose: &Dose,
    action: &str,
    (was, is): (Option<serde_json::Value>, Option<serde_json::Value>),
    reason: Option<String>,
) -> Result<(), Error> {
    let told = format!(
        "{} into the {}, {}",
        name(plan, dose),
        dose.vessel.name(),
        title(plan)
    );
    let lots: Vec<String> = [&was, &is]
        .into_iter()
        .flatten()
        .filter_map(|told| told["material_lot_id"].as_str().map(str::to_owned))
        .collect();
    let change = Change::of(action, "dose", dose.id, &told, was, is)
        .because(reason)
        .about_each(about_dose(plan, dose))
        .about_each(lots.into_iter().map(|id| ("material lot", id)));
    record::append(tx, by, change).await
}

/// The plan is dosed once every planned line is in, and approved again when one is taken
/// back.
async fn settle(tx: &mut SqliteConnection, plan: &Plan) -> Result<Plan, Error> {
    let mut after = store::find(tx, plan.id)
        .await?
        .ok_or(Error::NotFound("plan"))?;
    let everything_in = after
        .doses
        .iter()
        .all(|dose| dose.mash_check.is_some() || dose.weighed.is_some());
    let state = if everything_in {
        State::Dosed
    } else {
        State::Approved
    };
    if state != after.state {
        after.state = state;
        after.version += 1;
        store::update_state(tx, &after).await?;
    }
    Ok(after)
}
