//! Working out a treatment: what a plan's shares and doses do, the four ways to treat
//! it, and the mash as it stands with what is really in.

use chemistry::mash::MashInputs;
use chemistry::material::Vessel;
use chemistry::plan::{self, Ending, PlanError, Way};
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
    evaluate(&plan.inputs, &plan.shares, &weighed_doses(plan))
}

fn weighed_doses(plan: &Plan) -> Vec<plan::Dose> {
    plan.doses
        .iter()
        .filter(|dose| dose.mash_check.is_none() || dose.weighed.is_some())
        .map(|dose| in_numbers(dose, dose.amount()))
        .collect()
}

fn in_numbers(dose: &Dose, amount: DoseAmount) -> plan::Dose {
    plan::Dose {
        material: dose.material,
        vessel: dose.vessel,
        amount,
    }
}

/// The mash of a plan with what was weighed so far.
pub fn mash_as_weighed(plan: &Plan) -> MashInputs {
    plan::mash_inputs(&plan.inputs.computed(), &plan.shares, &weighed_doses(plan))
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
