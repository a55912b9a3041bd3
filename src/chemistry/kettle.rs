//! Acid late in the kettle, to a pH at cast-out.
//!
//! What a wort takes up is learned from the batch itself where it can be: from an earlier
//! step into the kettle, else from the steps into its mash, else it is the model of the
//! mash scaled to the wort. [`Buffering`] says which it was, and how far it may be out.

use crate::mash::{BASIS, MashError, MashInputs};
use crate::put_right::{
    Advice, Aim, Direction, FirstStep, LeaveIt, MashCheck, REREAD_AFTER, Remedy, Stop, Verdict,
    unfit_to_act_on, verdict,
};
use crate::quantity::{
    DoseAmount, Estimate, Fraction, Litres, Meq, MeqPerLPh, Ph, PhShift, RelativeSd,
};
use crate::reading::REPEATABILITY;

/// The pH wished for at cast-out where nobody says: inside 5.0 to 5.3 for cask beers of
/// [`SUPPLIER_NOTE`](crate::references::SUPPLIER_NOTE), near the 5.1 to 5.2 of soured wort.
pub const USUAL_TARGET: Ph = Ph::constant(5.2);

/// How far the pH falls from full kettle to cast-out. Sources disagree: 0.05 to 0.15
/// ([`SUPPLIER_NOTE`](crate::references::SUPPLIER_NOTE)), about 0.3
/// ([`MACWILLIAM_1975`](crate::references::MACWILLIAM_1975)), 0.1 to 0.13 an hour
/// ([`HOSOM_2020`](crate::references::HOSOM_2020)).
pub const BOIL_DROP: Estimate<PhShift> = Estimate::new(PhShift::constant(0.15), 0.08);

/// Buffering of a wort over that of its whole mash, each per kg of grist. Source: assumed;
/// the spent grains keep a part of it, and how much was not found anywhere.
pub const IN_WORT: Estimate<Fraction> = Estimate::new(Fraction::constant(0.8), 0.3);

/// Spread of what malts buffer, relative to the model. Source: as for
/// [`STEP_RELATIVE_SD`](crate::put_right::STEP_RELATIVE_SD).
const MODEL_RELATIVE_SD: f64 = crate::put_right::STEP_RELATIVE_SD;

/// A step whose effect is known worse than this teaches nothing.
const WORST_RELATIVE_SD: f64 = 0.5;

/// Acid that went in, and the pH before and after, both on one meter.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Observed {
    /// Acid, positive; base, negative.
    pub acid: Meq,
    /// Before.
    pub from: Ph,
    /// After.
    pub to: Ph,
}

impl Observed {
    /// Acid taken up per pH unit, meq/pH, and how far that may be out, relative to it.
    /// `None` where the pH hardly moved, or the wrong way. An error of the calibration is
    /// in both readings and cancels.
    fn slope(self) -> Option<(f64, f64)> {
        let moved = self.from.get() - self.to.get();
        let relative = std::f64::consts::SQRT_2 * REPEATABILITY.get() / moved.abs();
        let slope = self.acid.get() / moved;
        (slope.is_finite() && slope > 0.0 && relative <= WORST_RELATIVE_SD)
            .then_some((slope, relative))
    }
}

/// How the buffering of a wort is known.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum KnownBy {
    /// An earlier step into this kettle.
    KettleStep,
    /// Steps into this batch's mash, scaled to the wort.
    MashStep,
    /// The model of the mash, scaled to the wort.
    MashModel,
}

/// What a wort takes up.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Buffering {
    /// Acid per litre and pH unit.
    pub value: MeqPerLPh,
    /// One standard deviation, relative to it.
    pub relative_sd: RelativeSd,
    /// How it is known.
    pub known_by: KnownBy,
}

/// What a wort of this volume takes up near `at`.
///
/// `mash`: the mash it ran from. `in_kettle` and `in_mash`: what steps into either showed.
pub fn buffering(
    mash: &MashInputs,
    at: Ph,
    wort: Litres,
    in_kettle: Option<Observed>,
    in_mash: Option<Observed>,
) -> Result<Buffering, MashError> {
    let litres = wort.get().max(1e-6);
    if let Some((slope, relative)) = in_kettle.and_then(Observed::slope) {
        return Ok(Buffering {
            value: MeqPerLPh::clamped(slope / litres),
            relative_sd: RelativeSd::clamped(relative),
            known_by: KnownBy::KettleStep,
        });
    }
    let grist = mash.grist_mass().get();
    let model = mash.buffering(at)?.get() * grist;
    let (ratio, ratio_sd, known_by) = match in_mash.and_then(|seen| Some((seen, seen.slope()?))) {
        None => (1.0, MODEL_RELATIVE_SD, KnownBy::MashModel),
        Some((seen, (slope, relative))) => {
            let middle = Ph::clamped(f64::midpoint(seen.from.get(), seen.to.get()));
            let seen_ratio = slope / (mash.buffering(middle)?.get() * grist);
            // One over the variance of each: the model's spread, the readings' scatter.
            let (of_model, of_seen) =
                (MODEL_RELATIVE_SD.powi(-2), (relative * seen_ratio).powi(-2));
            let ratio = (of_model + of_seen * seen_ratio) / (of_model + of_seen);
            let sd = (of_model + of_seen).powf(-0.5);
            (ratio, sd / ratio, KnownBy::MashStep)
        }
    };
    let share = IN_WORT.value.get();
    Ok(Buffering {
        value: MeqPerLPh::clamped(model * ratio * share / litres),
        relative_sd: RelativeSd::clamped(ratio_sd.hypot(IN_WORT.sd / share)),
        known_by,
    })
}

/// A wort and what is wished of it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Wort<'a> {
    /// How much of it there is.
    pub volume: Litres,
    /// Where it should be at cast-out.
    pub aim: Aim,
    /// Whether the boil, and its fall of pH, is still to come.
    pub boil_to_come: bool,
    /// What it takes up.
    pub buffering: Buffering,
    /// The acid at hand.
    pub acid: Option<Remedy<'a>>,
}

/// What a reading of the wort leads to.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Late {
    /// The pH to expect at cast-out if nothing is added.
    pub at_cast_out: Estimate<Ph>,
    /// What that proves.
    pub verdict: Verdict,
    /// What to do. Wort is never raised.
    pub advice: Advice,
}

/// Assesses a reading of the wort. Its time since strike plays no part.
#[must_use]
pub fn assess(check: &MashCheck, wort: &Wort<'_>) -> Late {
    let reading = check.reading;
    let (drop, drop_sd) = if wort.boil_to_come {
        (BOIL_DROP.value.get(), BOIL_DROP.sd)
    } else {
        (0.0, 0.0)
    };
    let at_cast_out = Estimate::new(
        Ph::clamped(reading.value.get() - drop),
        reading.sd.hypot(drop_sd),
    );
    let verdict = verdict(at_cast_out, wort.aim);
    let advice = match (unfit_to_act_on(check), verdict) {
        (Some(why), _) => Advice::ReadAgain { why },
        (None, Verdict::Inside) => Advice::LeaveIt {
            why: LeaveIt::InsideWindow,
        },
        (None, Verdict::CannotBeTold) => Advice::LeaveIt {
            why: LeaveIt::CannotBeTold,
        },
        (None, Verdict::Outside(Direction::Raise)) => Advice::LeaveIt {
            why: LeaveIt::NeverRaised,
        },
        (None, Verdict::Outside(Direction::Lower)) => match step(at_cast_out, wort) {
            Ok(step) => Advice::FirstStep(step),
            Err(why) => Advice::Stop { why },
        },
    };
    Late {
        at_cast_out,
        verdict,
        advice,
    }
}

fn step(from: Estimate<Ph>, wort: &Wort<'_>) -> Result<FirstStep, Stop> {
    let remedy = wort.acid.ok_or(Stop::NoRemedy)?;
    let target = wort.aim.target;
    let away = from.value.get() - target.get();
    let full = wort.buffering.value.get() * wort.volume.get() * away;
    let per_unit = remedy.material.per_unit().acid_meq(target, BASIS).get();
    if per_unit <= 0.0 || full <= 0.0 {
        return Err(Stop::NoRemedy);
    }
    let full_dose = full / per_unit;
    let (dose, capped) = remedy.first_of(DoseAmount::clamped(full_dose))?;
    let moved = away * dose.get() / full_dose;
    let expected_ph = Estimate::new(
        Ph::clamped(from.value.get() - moved),
        from.sd.hypot(wort.buffering.relative_sd.get() * moved),
    );
    Ok(FirstStep {
        direction: Direction::Lower,
        dose,
        unit: remedy.material.unit(),
        full_dose: DoseAmount::clamped(full_dose),
        full: Meq::clamped(full),
        capped,
        expected_ph,
        chance: wort.aim.chance(expected_ph),
        reread_after: REREAD_AFTER,
    })
}
