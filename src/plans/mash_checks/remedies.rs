//! What could put a mash or a wort right: the materials of the plan's shelf that really
//! stand there today, and what a step with each does.

use chemistry::ion::Ion;
use chemistry::material::{DoseUnit, Role, Vessel};
use chemistry::plan::{Outcome, Preference};
use chemistry::put_right::{Direction, FirstStep, Remedy};
use chemistry::quantity::{DoseAmount, MgPerL};

use sqlx::SqliteConnection;

use super::{Taken, store};
use crate::error::Error;
use crate::id::{DoseId, MaterialId};
use crate::plans::{Added, Dose, Plan, Step, compute, words};
use crate::shelf::{self, stock::Stock};

/// As many materials are offered beside the first.
const MOST_OTHERS: usize = 3;

/// A change of an ion smaller than this is not told, mg/L.
const LEAST_TOLD: f64 = 0.05;

/// What stands on the shelf today: in use, and not counted down to nothing. What was never
/// counted may be there.
pub(in crate::plans) async fn on_the_shelf(
    conn: &mut SqliteConnection,
) -> Result<Vec<MaterialId>, Error> {
    let levels = shelf::stock::operations::levels(conn).await?;
    let mut there = store::on_the_shelf(conn).await?;
    let is_empty = |stock: Stock| stock.get().abs() < LEAST_STOCK;
    there.retain(|id| !levels.material(*id).stock.is_some_and(is_empty));
    Ok(there)
}

/// Less than this is nothing, g or mL: the rounding of sums.
const LEAST_STOCK: f64 = 1e-6;

/// Places on the plan's shelf of what may go into `vessel` in this role: what was used for it
/// before, then what the plan doses, then the rest of the shelf.
pub(super) fn at_hand(
    taken: &Taken<'_>,
    role: Role,
    vessel: Vessel,
    used: Option<usize>,
) -> Vec<usize> {
    let inputs = &taken.plan.inputs;
    let shelf = &inputs.problem.shelf;
    let fits = |index: usize| {
        let stands_there = inputs
            .shelf
            .get(index)
            .and_then(|label| label.id)
            .is_none_or(|id| taken.shelf.contains(&id));
        stands_there
            && shelf.get(index).is_some_and(|item| {
                item.material.substance().role() == role
                    && item.vessels.contains(&vessel)
                    && item.preference != Preference::Avoided
            })
    };
    let planned = taken.plan.doses.iter().map(|dose| dose.material);
    let usual = (0..shelf.len()).filter(|index| shelf[*index].preference == Preference::Usual);
    let mut found: Vec<usize> = Vec::new();
    for index in used
        .into_iter()
        .chain(planned)
        .chain(usual)
        .chain(0..shelf.len())
    {
        if fits(index) && !found.contains(&index) {
            found.push(index);
        }
    }
    found
}

/// A material as the chemistry takes it, with how much more of it the batch may take.
pub(super) fn remedy<'a>(plan: &'a Plan, outcome: &Outcome, index: usize) -> Option<Remedy<'a>> {
    Some(Remedy {
        material: &plan.inputs.problem.shelf.get(index)?.material,
        cap: *outcome.room.get(index)?,
    })
}

/// Steps with the materials at hand, the first to be taken and the others to choose from.
/// `step` says what the chemistry makes of each.
pub(super) fn steps<'a>(
    plan: &'a Plan,
    outcome: &Outcome,
    vessel: Vessel,
    at_hand: &[usize],
    mut step: impl FnMut(Remedy<'a>) -> Option<FirstStep>,
) -> Result<(Option<Step>, Vec<Step>), Error> {
    let mut steps = Vec::new();
    for index in at_hand {
        let Some(first) = remedy(plan, outcome, *index).and_then(&mut step) else {
            continue;
        };
        steps.extend(told(plan, outcome, *index, vessel, &first)?);
        if steps.len() > MOST_OTHERS {
            break;
        }
    }
    let mut steps = steps.into_iter();
    Ok((steps.next(), steps.collect()))
}

/// A step on the scale of its material. `None` where the scale cannot tell it.
fn told(
    plan: &Plan,
    outcome: &Outcome,
    index: usize,
    vessel: Vessel,
    first: &FirstStep,
) -> Result<Option<Step>, Error> {
    let item = &plan.inputs.problem.shelf[index];
    let amount = on_step(first.dose.get(), item.step.get());
    if amount <= 0.0 {
        return Ok(None);
    }
    Ok(Some(Step {
        material: index,
        name: item.name.clone(),
        vessel: vessel.key().into(),
        amount,
        unit: match first.unit {
            DoseUnit::Grams => "g".into(),
            DoseUnit::Millilitres => "mL".into(),
        },
        full_dose: first.full_dose.get(),
        direction: match first.direction {
            Direction::Lower => "lower".into(),
            Direction::Raise => "raise".into(),
        },
        expected_ph: first.expected_ph.value.get(),
        expected_sd: first.expected_ph.sd,
        chance: Some(first.chance.get()),
        reread_after_minutes: first.reread_after.get(),
        adds: added(plan, outcome, index, vessel, amount)?,
    }))
}

/// To the step of the scale below: a first step errs on the small side.
fn on_step(amount: f64, step: f64) -> f64 {
    if step > 0.0 {
        (amount / step + 1e-9).floor() * step
    } else {
        amount
    }
}

/// What a step adds to the whole liquor, against the spec and the limits.
fn added(
    plan: &Plan,
    before: &Outcome,
    material: usize,
    vessel: Vessel,
    amount: f64,
) -> Result<Vec<Added>, Error> {
    let mut with = plan.clone();
    with.doses.push(Dose {
        id: DoseId::new(),
        position: 0,
        vessel,
        material,
        planned: DoseAmount::clamped(amount),
        mash_check: None,
        weighed: None,
    });
    let after = compute::as_weighed(&with)?;
    let problem = &plan.inputs.problem;
    let moved = |ion: &Ion| {
        (after.whole.ions[*ion].get() - before.whole.ions[*ion].get()).abs() > LEAST_TOLD
    };
    Ok(Ion::ALL
        .iter()
        .filter(|ion| moved(ion))
        .map(|ion| {
            let window = problem.spec.ions[*ion];
            let highest = [
                window.and_then(|window| window.high),
                problem.limits.ions[*ion],
            ];
            Added {
                figure: words::capital(ion.name()),
                before: before.whole.ions[*ion].get(),
                after: after.whole.ions[*ion].get(),
                low: window.and_then(|window| window.low).map(MgPerL::get),
                high: highest
                    .into_iter()
                    .flatten()
                    .map(MgPerL::get)
                    .reduce(f64::min),
            }
        })
        .collect())
}
