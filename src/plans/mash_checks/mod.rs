//! Reading the pH of a batch from the liquor to the package, and what to do about it.
//!
//! [`read`] writes a reading down with what was advised on it: [`advice`] for the mash,
//! [`stages`] for everything after it. [`repeats`] says which readings count together,
//! [`mistyped`] asks once about what looks like a slip of the finger, [`expected`] says where
//! the mash should be by now.

use chemistry::material::Vessel;
use chemistry::put_right;
use chemistry::quantity::{Celsius, DoseAmount, Litres, Minutes, Ph, PhShift};
use serde_json::json;
use sqlx::SqliteConnection;

use super::operations::{batch, title};
use super::{Advised, Deed, Dose, MashCheck, Plan, Stage, State, Step, store as plans};
use crate::db::Db;
use crate::error::Error;
use crate::id::{CalibrationId, DoseId, MashCheckId, MaterialId, MeterId, PlanId, UtcTime};
use crate::meters::{self, Meter, Standing};
use crate::people::{Member, Permission};
use crate::record::{self, Change};

mod advice;
pub mod expected;
mod mistyped;
pub(super) mod remedies;
mod repeats;
mod said;
mod stages;
pub(super) mod store;

pub use advice::curve_material;

/// A reading as it was taken.
#[derive(Clone, Debug, PartialEq)]
pub struct NewMashCheck {
    /// When in the making of the beer.
    pub stage: Stage,
    /// Minutes since strike; nothing at stages that are not timed so.
    pub minute: Minutes,
    /// As the meter showed it.
    pub ph: Ph,
    /// Temperature of the sample in the meter's cup.
    pub sample: Celsius,
    /// Which meter.
    pub meter: MeterNamed,
    /// Whether the meter was checked in buffer after a surprising reading.
    pub meter_checked: bool,
    /// Whether the meter really showed what looks mistyped.
    pub confirmed: bool,
    /// How much wort there is, where it was told.
    pub wort: Option<Litres>,
    /// Where it should be at cast-out, where it was told.
    pub cast_out: Option<Ph>,
}

/// A meter as somebody names it.
#[derive(Clone, Debug, PartialEq)]
pub enum MeterNamed {
    /// One of the registered meters: its calibration says how far it is to be believed.
    Registered(MeterId),
    /// Another, by what is known of it. Nothing is advised on its readings.
    Another {
        /// What it is called.
        name: String,
        /// One standard deviation of a reading.
        sd: PhShift,
    },
}

/// The meter of a reading and what the reading is worth.
struct Metered {
    name: String,
    id: Option<MeterId>,
    calibration: Option<CalibrationId>,
    sd: PhShift,
    /// Why nothing may rest on it; empty where something may.
    unfit: String,
}

impl Metered {
    async fn find(
        conn: &mut SqliteConnection,
        named: &MeterNamed,
        at: UtcTime,
    ) -> Result<Self, Error> {
        match named {
            MeterNamed::Another { name, sd } => Ok(Self {
                name: name.clone(),
                id: None,
                calibration: None,
                sd: *sd,
                unfit: "This meter is not among the meters of the brewery, so its calibration is not known.".into(),
            }),
            MeterNamed::Registered(id) => {
                let standing = meters::operations::standing(conn, *id, at)
                    .await
                    .map_err(|error| match error {
                        Error::NotFound(_) => {
                            Error::field("meter_id", "There is no such meter. Choose one of the list.")
                        }
                        other => other,
                    })?;
                Ok(Self {
                    unfit: said::unfit(&standing),
                    name: standing.name,
                    id: Some(standing.meter_id),
                    calibration: standing.calibration_id,
                    sd: standing.sd,
                })
            }
        }
    }
}

/// Everything that advice on a reading rests on.
struct Taken<'a> {
    plan: &'a Plan,
    earlier: &'a [MashCheck],
    new: &'a NewMashCheck,
    meter: &'a Metered,
    /// What stands on the shelf today.
    shelf: &'a [MaterialId],
    at: UtcTime,
}

/// Writes a reading down and says what to do. A first step becomes a line of the
/// weigh-out.
pub async fn read(
    db: &Db,
    by: &Member,
    plan_id: PlanId,
    new: NewMashCheck,
) -> Result<MashCheck, Error> {
    by.may(Permission::BrewBatches)?;
    let mut tx = db.begin().await?;
    let plan = plans::find(&mut tx, plan_id)
        .await?
        .ok_or(Error::NotFound("plan"))?;
    may_be_read(&plan, new.stage)?;
    let at = UtcTime::now();
    let earlier = store::of_plan(&mut tx, plan_id).await?;
    let meter = Metered::find(&mut tx, &new.meter, at).await?;
    let shelf = remedies::on_the_shelf(&mut tx).await?;
    let taken = Taken {
        plan: &plan,
        earlier: &earlier,
        new: &new,
        meter: &meter,
        shelf: &shelf,
        at,
    };
    if !new.confirmed {
        mistyped::ask(&taken)?;
    }
    let advised = advised(&taken)?;
    let check = MashCheck {
        id: MashCheckId::new(),
        plan_id,
        stage: new.stage,
        read_at: at,
        minute: new.minute,
        ph: new.ph,
        sample: new.sample,
        meter: meter.name.clone(),
        meter_id: meter.id,
        calibration_id: meter.calibration,
        meter_sd: meter.sd,
        meter_checked: new.meter_checked,
        confirmed: new.confirmed,
        wort: new.wort,
        cast_out: new.cast_out,
        advised,
        read_by: by.name.clone(),
        withdrawn: None,
    };
    store::insert(&mut tx, &check).await?;
    if check.stands() && plan.state != State::Closed {
        // A step advised before and never given is overtaken by this reading.
        plans::drop_open_steps(&mut tx, plan_id).await?;
    }
    if let Some(step) = &check.advised.step {
        add_step(&mut tx, &plan, check.id, step).await?;
    }
    let name = format!("{} pH of {}", check.stage.name(), title(&plan));
    let entry = Change::created("mash check", check.id, &name, &describe(&check));
    let entry = entry
        .about_each(batch(&plan))
        .about_each(meter.id.map(|id| ("meter", id)));
    record::append(&mut tx, by, entry).await?;
    tx.commit().await?;
    Ok(check)
}

/// Fermentation and package are read after the brewing day is closed.
fn may_be_read(plan: &Plan, stage: Stage) -> Result<(), Error> {
    let open = matches!(plan.state, State::Approved | State::Dosed);
    if open || plan.state == State::Closed && late(stage) {
        return Ok(());
    }
    Err(Error::Conflict(format!(
        "This plan is {}: only an approved plan is read",
        plan.state.name().to_lowercase()
    )))
}

/// Whether a stage comes after the brewing day.
pub fn late(stage: Stage) -> bool {
    matches!(stage, Stage::EndOfFermentation | Stage::Package)
}

fn advised(taken: &Taken<'_>) -> Result<Advised, Error> {
    let counted = repeats::counted(taken);
    if taken.new.stage == Stage::Mash {
        advice::advise(taken, counted)
    } else {
        stages::advise(taken, counted)
    }
}

async fn add_step(
    tx: &mut SqliteConnection,
    plan: &Plan,
    check: MashCheckId,
    step: &Step,
) -> Result<(), Error> {
    let last = plan.doses.iter().map(|dose| dose.position).max();
    let dose = Dose {
        id: DoseId::new(),
        position: last.unwrap_or(0) + 1,
        vessel: Vessel::from_key(&step.vessel).unwrap_or(Vessel::Mash),
        material: step.material,
        planned: DoseAmount::clamped(step.amount),
        mash_check: Some(check),
        weighed: None,
    };
    plans::add_dose(tx, plan.id, &dose).await?;
    Ok(())
}

/// Takes another material for the step that a reading led to, one of those offered.
pub async fn choose(
    db: &Db,
    by: &Member,
    plan_id: PlanId,
    id: MashCheckId,
    material: usize,
) -> Result<(), Error> {
    by.may(Permission::BrewBatches)?;
    let mut tx = db.begin().await?;
    let (plan, check) = find(&mut tx, plan_id, id).await?;
    let offered = check.advised.step.iter().chain(&check.advised.others);
    let step = offered
        .into_iter()
        .find(|step| step.material == material)
        .ok_or_else(|| Error::field("material", "Choose one of the materials offered."))?;
    let open = plan
        .doses
        .iter()
        .find(|dose| dose.mash_check == Some(id) && dose.weighed.is_none())
        .ok_or_else(|| {
            Error::Conflict("This step is in already, or a later reading has overtaken it".into())
        })?;
    let before = plan.inputs.problem.shelf.get(open.material);
    let before = json!({"material": before.map(|item| &item.name), "planned": open.planned.get()});
    let after = json!({"material": step.name, "planned": step.amount});
    plans::drop_open_steps(&mut tx, plan_id).await?;
    add_step(&mut tx, &plan, id, step).await?;
    let name = format!("{} pH of {}", check.stage.name(), title(&plan));
    let entry = Change::changed("mash check", id, &name, &before, &after);
    record::append(&mut tx, by, entry.about_each(batch(&plan))).await?;
    tx.commit().await?;
    Ok(())
}

async fn find(
    tx: &mut SqliteConnection,
    plan_id: PlanId,
    id: MashCheckId,
) -> Result<(Plan, MashCheck), Error> {
    let plan = plans::find(tx, plan_id)
        .await?
        .ok_or(Error::NotFound("plan"))?;
    let check = store::of_plan(tx, plan_id)
        .await?
        .into_iter()
        .find(|check| check.id == id)
        .ok_or(Error::NotFound("mash check of this plan"))?;
    Ok((plan, check))
}

/// Every reading of a batch, the earliest first.
pub async fn list(db: &Db, by: &Member, plan_id: PlanId) -> Result<Vec<MashCheck>, Error> {
    by.may(Permission::Read)?;
    store::of_plan(&mut *db.reader().await?, plan_id).await
}

/// The meters a reading may name with what each is worth now, the one read last first.
pub async fn meters_to_choose_from(db: &Db, by: &Member) -> Result<Vec<(Meter, Standing)>, Error> {
    let last = store::last_meter(&mut *db.reader().await?).await?;
    let mut meters = meters::operations::standings(db, by, UtcTime::now()).await?;
    meters.sort_by_key(|(meter, standing)| (Some(meter.id) != last, !standing.may_be_acted_on()));
    Ok(meters)
}

/// Withdraws a reading that was not what it said: a wrong batch, a slip of the finger.
pub async fn withdraw(
    db: &Db,
    by: &Member,
    plan_id: PlanId,
    id: MashCheckId,
    reason: String,
) -> Result<(), Error> {
    by.may(Permission::BrewBatches)?;
    let mut tx = db.begin().await?;
    let (plan, check) = find(&mut tx, plan_id, id).await?;
    if plan.state == State::Closed && !late(check.stage) {
        return Err(Error::Conflict(
            "This batch is closed: nothing of it can change".into(),
        ));
    }
    if check.withdrawn.is_some() {
        return Err(Error::Conflict("This reading is withdrawn already".into()));
    }
    let deed = Deed {
        at: UtcTime::now(),
        by: by.name.clone(),
        reason: reason.clone(),
    };
    store::withdraw(&mut tx, id, &deed).await?;
    if check.advised.step.is_some() {
        plans::drop_open_steps(&mut tx, plan_id).await?;
    }
    let name = format!("{} pH of {}", check.stage.name(), title(&plan));
    let entry = Change::event("withdrawn", "mash check", id, &name).because(Some(reason));
    record::append(&mut tx, by, entry.about_each(batch(&plan))).await?;
    tx.commit().await?;
    Ok(())
}

fn describe(check: &MashCheck) -> serde_json::Value {
    json!({
        "stage": check.stage.key(),
        "minute": check.since_strike().map(Minutes::get),
        "ph": check.ph.get(),
        "sample_c": check.sample.get(),
        "meter": check.meter,
        "meter_sd": check.meter_sd.get(),
        "confirmed": check.confirmed,
        "counted_ph": check.advised.reading_ph,
        "advice": check.advised.title,
    })
}

/// The check as the chemistry takes it.
fn in_numbers(taken: &Taken<'_>, counted: repeats::Counted) -> put_right::MashCheck {
    put_right::MashCheck {
        reading: counted.reading,
        sample: taken.new.sample,
        minute: taken.new.minute,
        calibrated: taken.meter.unfit.is_empty(),
        agrees: counted.agrees,
        meter_checked: taken.new.meter_checked,
    }
}
