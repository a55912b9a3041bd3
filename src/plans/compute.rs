//! Working out a treatment: what a plan's shares and doses do, the four ways to treat
//! it, and the mash as it stands with what is really in.

use std::borrow::Cow;

use chemistry::mash::MashInputs;
use chemistry::material::Vessel;
use chemistry::plan::{self, Ending, Limit, PlanError, Problem, ShelfItem, Way};
use chemistry::quantity::{DoseAmount, Fraction, PhShift};

use super::{Dose, Inputs, Plan, Prediction};
use crate::error::Error;
use crate::id::DoseId;

impl From<PlanError> for Error {
    fn from(error: PlanError) -> Self {
        let field = match &error {
            PlanError::NoSource | PlanError::LimitUpsideDown(_) | PlanError::Shares => "sources",
            PlanError::Volumes => "volumes",
            PlanError::NoGrist => "grist",
            PlanError::UpsideDown(_) => "spec",
            PlanError::NotOnShelf(_) => "doses",
            PlanError::TooManyAdditions(_) => "shelf",
            PlanError::Unsettled => "",
        };
        Self::field(field, error.to_string())
    }
}

/// What these shares and doses do.
pub fn evaluate(
    inputs: &Inputs,
    shares: &[Fraction],
    doses: &[plan::Dose],
) -> Result<plan::Outcome, Error> {
    Ok(plan::evaluate(&inputs.computed(), shares, doses)?)
}

/// What a plan does with what was weighed so far, and the rest as planned. First steps count
/// when they are in.
pub fn as_weighed(plan: &Plan) -> Result<plan::Outcome, Error> {
    let really = Really::of(plan);
    let outcome = plan::evaluate(&really.problem, &plan.shares, &really.doses)?;
    Ok(really.told(outcome))
}

/// The mash of a plan with what was weighed so far.
pub fn mash_as_weighed(plan: &Plan) -> MashInputs {
    let really = Really::of(plan);
    plan::mash_inputs(&really.problem, &plan.shares, &really.doses)
}

/// A plan with what is really in. A lot that is stronger or weaker than the plan was
/// computed with stands on a place of its own, behind the plan's shelf.
struct Really<'a> {
    problem: Cow<'a, Problem>,
    doses: Vec<plan::Dose>,
    /// The place on the plan's shelf that each place behind it belongs to.
    stands_for: Vec<usize>,
    planned: usize,
}

impl<'a> Really<'a> {
    fn of(plan: &'a Plan) -> Self {
        let mut problem = plan.inputs.computed();
        let planned = problem.shelf.len();
        let mut stands_for = Vec::new();
        let mut doses = Vec::new();
        let counted = |dose: &&Dose| dose.mash_check.is_none() || dose.weighed.is_some();
        for dose in plan.doses.iter().filter(counted) {
            let amount = dose.amount();
            let lot = dose.weighed.as_ref().and_then(|it| it.lot.material);
            let mut material = dose.material;
            if let (Some(lot), Some(item)) = (lot, problem.shelf.get(dose.material))
                && lot != item.material
                && lot.unit() == item.material.unit()
            {
                let used = ShelfItem {
                    material: lot,
                    // It is in: nothing is to be chosen any more.
                    vessels: Vec::new(),
                    ..item.clone()
                };
                let shelf = &mut problem.to_mut().shelf;
                // What is used of it under another lot is no longer left of the most.
                if let Some(most) = &mut shelf[dose.material].most {
                    *most = DoseAmount::clamped(most.get() - amount.get());
                }
                material = shelf.len();
                shelf.push(used);
                stands_for.push(dose.material);
            }
            doses.push(plan::Dose {
                material,
                vessel: dose.vessel,
                amount,
            });
        }
        Self {
            problem,
            doses,
            stands_for,
            planned,
        }
    }

    /// The outcome in terms of the plan's own shelf.
    fn told(&self, mut outcome: plan::Outcome) -> plan::Outcome {
        outcome.room.truncate(self.planned);
        for broken in &mut outcome.broken {
            if let Limit::Amount(place) = &mut broken.limit
                && *place >= self.planned
            {
                *place = self.stands_for[*place - self.planned];
            }
        }
        outcome
    }
}

/// The best treatment in one way.
pub fn solve(inputs: &Inputs, way: Way) -> Result<Ending, Error> {
    Ok(plan::solve(&inputs.computed(), way)?)
}

/// The best treatment in each way.
pub fn solve_all(inputs: &Inputs) -> Result<[(Way, Ending); 4], Error> {
    Ok(plan::solve_all(&inputs.computed())?)
}

/// The prediction an outcome makes, if the mash has a pH.
pub fn prediction(outcome: &plan::Outcome) -> Option<Prediction> {
    let mash = outcome.mash.as_ref().ok()?;
    Some(Prediction {
        ph: mash.ph.value,
        sd: PhShift::clamped(mash.ph.sd),
        low: mash.interval.0,
        high: mash.interval.1,
    })
}

/// Doses as the weigh-out lists them: vessel by vessel, salts before bases before acids.
pub fn listed(inputs: &Inputs, doses: &[plan::Dose]) -> Vec<Dose> {
    let mut doses: Vec<plan::Dose> = doses
        .iter()
        .filter(|dose| dose.amount.get() > 0.0)
        .copied()
        .collect();
    let rank = |dose: &plan::Dose| {
        let vessel = Vessel::ALL
            .iter()
            .position(|vessel| *vessel == dose.vessel)
            .unwrap_or(usize::MAX);
        let role = inputs
            .problem
            .shelf
            .get(dose.material)
            .map(|item| item.material.substance().role());
        (vessel, role.map_or(9, |role| role as u8), dose.material)
    };
    doses.sort_by_key(rank);
    doses
        .into_iter()
        .zip(1..)
        .map(|(dose, position)| Dose {
            id: DoseId::new(),
            position,
            vessel: dose.vessel,
            material: dose.material,
            planned: dose.amount,
            mash_check: None,
            weighed: None,
        })
        .collect()
}
