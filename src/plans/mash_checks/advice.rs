//! What to do about a reading of the mash.

use chemistry::mash::MashInputs;
use chemistry::material::{Role, Vessel};
use chemistry::put_right::{self, Advice, Corrected, Direction, Situation, Verdict};
use chemistry::quantity::{DoseAmount, Meq};

use super::repeats::Counted;
use super::{Taken, expected, in_numbers, remedies, said};
use crate::error::Error;
use crate::plans::{Advised, Dose, MashCheck, Plan, Stage, compute};

/// What to do about a reading of the mash.
pub(super) fn advise(taken: &Taken<'_>, counted: Counted) -> Result<Advised, Error> {
    let plan = taken.plan;
    let outcome = compute::as_weighed(plan)?;
    let mash = compute::mash_as_weighed(plan);
    let given = corrected(plan, &mash, taken.earlier);
    let used = given.as_ref().map(|(_, material)| *material);
    let check = in_numbers(taken, counted);
    let aim = plan.inputs.problem.spec.mash_ph;
    let acids = remedies::at_hand(taken, Role::Acid, Vessel::Mash, used);
    let bases = remedies::at_hand(taken, Role::Base, Vessel::Mash, used);
    let first = |at_hand: &[usize]| remedies::remedy(plan, &outcome, *at_hand.first()?);
    let situation = Situation {
        mash: &mash,
        aim,
        acid: first(&acids),
        base: first(&bases),
        corrected: given.map(|(corrected, _)| corrected),
    };
    let assessment = put_right::assess(&check, &situation);
    let (mut step, mut others) = (None, Vec::new());
    let outside = match assessment.verdict {
        Verdict::Outside(direction) => Some(direction),
        Verdict::Inside | Verdict::CannotBeTold => None,
    };
    // Another material may do where the first has reached its cap.
    if let (Some(direction), Advice::FirstStep(_) | Advice::Stop { .. }) =
        (outside, assessment.advice)
    {
        let at_hand = match direction {
            Direction::Lower => &acids,
            Direction::Raise => &bases,
        };
        let with = |remedy| {
            let situation = match direction {
                Direction::Lower => Situation {
                    acid: Some(remedy),
                    ..situation
                },
                Direction::Raise => Situation {
                    base: Some(remedy),
                    ..situation
                },
            };
            match put_right::assess(&check, &situation).advice {
                Advice::FirstStep(first) => Some(first),
                _ => None,
            }
        };
        (step, others) = remedies::steps(plan, &outcome, Vessel::Mash, at_hand, with)?;
    }
    let mut told = match (&step, assessment.advice) {
        (Some(step), advice) => said::first_step(step, advice),
        (None, Advice::FirstStep(_)) => said::below_a_step(),
        (None, advice) => said::advice(advice, &taken.meter.unfit),
    };
    let not_in = not_in(plan);
    if !not_in.is_empty() {
        // The reading is compared with a mash that is not there yet, and a step now would
        // come on top of what is still to go in.
        if told.alarms {
            told = said::weigh_in_first();
            (step, others) = (None, Vec::new());
        }
        told.words.push(format!(
            "Planned and not weighed in yet: {}. The prediction counts it as if it were in.",
            not_in.join(", ")
        ));
    }
    let now = expected::now(plan, taken.earlier);
    let mut words = said::repeats(&counted);
    words.append(&mut told.words);
    Ok(Advised {
        reading_ph: assessment.reading.value.get(),
        reading_sd: assessment.reading.sd,
        single_ph: (counted.readings > 1).then_some(counted.single.value.get()),
        readings: counted.readings,
        expected_ph: Some(assessment.expected.value.get()),
        expected_sd: Some(assessment.expected.sd),
        expected_now_ph: now.map(|now| now.ph.value.get()),
        expected_now_sd: now.map(|now| now.ph.sd),
        window_low: Some(aim.low.get()),
        window_high: Some(aim.high.get()),
        window_source: Stage::Mash.window(aim).source.into(),
        verdict: match assessment.verdict {
            Verdict::Inside => "inside",
            Verdict::CannotBeTold => "cannot_be_told",
            Verdict::Outside(Direction::Raise) => "below",
            Verdict::Outside(Direction::Lower) => "above",
        }
        .into(),
        advice: told.advice.into(),
        why: told.why.into(),
        title: told.title,
        words,
        step,
        others,
    })
}

/// What is planned for the mash and not in yet.
pub(super) fn not_in(plan: &Plan) -> Vec<&str> {
    let mut names: Vec<&str> = plan
        .doses
        .iter()
        .filter(|dose| {
            dose.mash_check.is_none()
                && dose.weighed.is_none()
                && matches!(dose.vessel, Vessel::LiquorTank | Vessel::Mash)
        })
        .filter_map(|dose| plan.inputs.problem.shelf.get(dose.material))
        .map(|item| item.name.as_str())
        .collect();
    names.dedup();
    names
}

/// What was given to the mash as first steps so far, and the material of the first.
fn corrected(plan: &Plan, mash: &MashInputs, earlier: &[MashCheck]) -> Option<(Corrected, usize)> {
    let target = plan.inputs.problem.spec.mash_ph.target;
    let given: Vec<&Dose> = plan
        .doses
        .iter()
        .filter(|dose| {
            dose.vessel == Vessel::Mash && dose.mash_check.is_some() && dose.weighed.is_some()
        })
        .collect();
    let first = given.first()?;
    let advised = &earlier
        .iter()
        .find(|check| Some(check.id) == first.mash_check)?
        .advised;
    let offered = advised.step.iter().chain(&advised.others);
    let step = offered
        .into_iter()
        .find(|step| step.material == first.material)?;
    let meq = |material: usize, amount: DoseAmount| {
        let item = plan.inputs.problem.shelf.get(material)?;
        Some(put_right::strength(mash, target, &item.material.contribution(amount)).get())
    };
    let sum: f64 = given
        .iter()
        .filter_map(|dose| meq(dose.material, dose.amount()))
        .sum();
    let full = meq(step.material, DoseAmount::clamped(step.full_dose))?;
    let corrected = Corrected {
        direction: if step.direction == "lower" {
            Direction::Lower
        } else {
            Direction::Raise
        },
        given: Meq::clamped(sum),
        first_full: Meq::clamped(full),
    };
    Some((corrected, first.material))
}

/// The material a curve of the mash is drawn for: that of the step, else the acid of the
/// plan or the first on its shelf.
pub fn curve_material(plan: &Plan, check: &MashCheck) -> Option<usize> {
    let chosen = plan
        .doses
        .iter()
        .find(|dose| dose.mash_check == Some(check.id) && dose.vessel == Vessel::Mash)
        .map(|dose| dose.material);
    let advised = check.advised.step.as_ref().map(|step| step.material);
    let role = if check.advised.verdict == "below" {
        Role::Base
    } else {
        Role::Acid
    };
    let shelf = &plan.inputs.problem.shelf;
    let fits = |index: &usize| {
        shelf.get(*index).is_some_and(|item| {
            item.material.substance().role() == role && item.vessels.contains(&Vessel::Mash)
        })
    };
    let planned = plan.doses.iter().map(|dose| dose.material);
    chosen
        .or(advised)
        .or_else(|| planned.chain(0..shelf.len()).find(fits))
}
