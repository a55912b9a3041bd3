//! The plans of the invented brewery, one in every state and a dozen closed.

use chemistry::plan::Way;
use chemistry::quantity::{Celsius, Minutes, Ph, PhShift};
use jiff::ToSpan;
use jiff::civil::Date;

use super::{Chance, days_before};
use crate::db::Db;
use crate::error::Error;
use crate::id::{BeerId, MeterId, UtcTime};
use crate::people::Member;
use crate::plans::closing::{self, Closing};
use crate::plans::decisions;
use crate::plans::mash_checks::{self, MeterNamed, NewMashCheck};
use crate::plans::operations::{self as plans, NewPlan};
use crate::plans::weigh_out::{self, Actual, LotNamed, NewWeighed};
use crate::plans::{Plan, Stage, compute};

pub(super) async fn fill_plans(
    db: &Db,
    by: &Member,
    today: Date,
    beers: &[BeerId],
    meter: MeterId,
    chance: &mut Chance,
) -> Result<(), Error> {
    let way = |number: usize| Way::ALL[number % Way::ALL.len()];
    for number in 0..14_usize {
        let days = i64::try_from(14 - number).unwrap_or(0) * 7 + 4;
        let beer = beers[number % beers.len()];
        let batch = format!("26-{:03}", 110 + number);
        let plan = drafted(
            db,
            by,
            batch,
            beer,
            days_before(today, days),
            Way::ClosestToPreferred,
        )
        .await?;
        let plan = decisions::approve(db, by, plan.id, None, None).await?;
        let plan = weighed(db, by, plan, usize::MAX).await?;
        let off = -0.045 + chance.about(0.035);
        let mash = read(db, by, &plan, meter, off).await?;
        run_off(db, by, &plan, meter, mash, chance).await?;
        closing::close(
            db,
            by,
            plan.id,
            None,
            Closing {
                mash_check_id: None,
                counts: true,
                reasons: Vec::new(),
                // Some of them settle outside their window, and closing asks why.
                note: Some("Brewed through, nothing remarkable.".into()),
            },
        )
        .await?;
        for (stage, ph) in [(Stage::EndOfFermentation, 4.08), (Stage::Package, 4.24)] {
            let shown = ph + chance.about(0.05);
            read_stage(db, by, &plan, meter, stage, 0.0, shown).await?;
        }
    }
    let given_up = drafted(
        db,
        by,
        "26-124".into(),
        beers[2],
        days_before(today, 3),
        way(1),
    )
    .await?;
    decisions::withdraw(db, by, given_up.id, None, "The cold store was full.".into()).await?;

    let dosed = drafted(db, by, "26-125".into(), beers[4], today, way(0)).await?;
    let dosed = decisions::approve(db, by, dosed.id, None, None).await?;
    weighed(db, by, dosed, usize::MAX).await?;

    let begun = drafted(db, by, "26-126".into(), beers[0], today, way(0)).await?;
    let begun = decisions::approve(db, by, begun.id, None, None).await?;
    let revised = decisions::revise(db, by, begun.id).await?;
    let revised = decisions::approve(
        db,
        by,
        revised.id,
        None,
        Some("Moved to the afternoon.".into()),
    )
    .await?;
    weighed(db, by, revised, 1).await?;

    let ready = drafted(
        db,
        by,
        "26-127".into(),
        beers[1],
        today.checked_add(1.days()).unwrap_or(today),
        way(1),
    )
    .await?;
    decisions::approve(db, by, ready.id, None, None).await?;
    drafted(
        db,
        by,
        "26-128".into(),
        beers[3],
        today.checked_add(2.days()).unwrap_or(today),
        way(2),
    )
    .await?;
    drafted(
        db,
        by,
        "26-129".into(),
        beers[5],
        today.checked_add(3.days()).unwrap_or(today),
        way(3),
    )
    .await?;
    Ok(())
}

async fn drafted(
    db: &Db,
    by: &Member,
    batch: String,
    beer_id: BeerId,
    brewed_on: Date,
    way: Way,
) -> Result<Plan, Error> {
    plans::draft(
        db,
        by,
        NewPlan {
            batch,
            beer_id,
            brewed_on,
            way,
            sources: Vec::new(),
        },
    )
    .await
}

/// Weighs the first lines in, as planned.
async fn weighed(db: &Db, by: &Member, plan: Plan, lines: usize) -> Result<Plan, Error> {
    let mut after = plan.clone();
    for dose in plan.doses.iter().take(lines) {
        let label = plan.inputs.shelf.get(dose.material);
        let new = NewWeighed {
            actual: Actual::AsPlanned,
            lot: label
                .and_then(|label| label.lot_id)
                .map_or(LotNamed::Untold, LotNamed::Picked),
            reason: None,
            witness: None,
            at: UtcTime::now(),
        };
        after = weigh_out::weigh(db, by, plan.id, dose.id, new).await?;
    }
    Ok(after)
}

/// Reads the mash this far from what the balance expects of it. What the meter showed.
async fn read(db: &Db, by: &Member, plan: &Plan, meter: MeterId, off: f64) -> Result<f64, Error> {
    let mut untrained = compute::mash_as_weighed(plan);
    untrained.offset.value = PhShift::constant(0.0);
    let expected = untrained
        .predict()
        .map_err(|error| Error::internal("A demo mash has no pH", error))?;
    let shown = expected.ph.value.get() + off;
    read_stage(db, by, plan, meter, Stage::Mash, 14.0, shown).await?;
    Ok(shown)
}

/// Reads the runnings and the kettle of a mash that read so.
async fn run_off(
    db: &Db,
    by: &Member,
    plan: &Plan,
    meter: MeterId,
    mash: f64,
    chance: &mut Chance,
) -> Result<(), Error> {
    for (stage, minute, above) in [
        (Stage::FirstRunnings, 72.0, 0.01),
        (Stage::LastRunnings, 118.0, 0.27),
        (Stage::KettleFull, 0.0, -0.02),
        (Stage::EndOfBoil, 0.0, -0.17),
    ] {
        let shown = mash + above + chance.about(0.02);
        read_stage(db, by, plan, meter, stage, minute, shown).await?;
    }
    Ok(())
}

async fn read_stage(
    db: &Db,
    by: &Member,
    plan: &Plan,
    meter: MeterId,
    stage: Stage,
    minute: f64,
    shown: f64,
) -> Result<(), Error> {
    let new = NewMashCheck {
        stage,
        minute: Minutes::clamped(minute),
        ph: Ph::clamped((shown * 100.0).round() / 100.0),
        sample: Celsius::constant(20.0),
        meter: MeterNamed::Registered(meter),
        meter_checked: true,
        confirmed: true,
        wort: None,
        cast_out: None,
    };
    mash_checks::read(db, by, plan.id, new).await?;
    Ok(())
}
