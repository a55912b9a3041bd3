//! What to do about a pH read in the mash.
//!
//! [`assess`] says what a reading proves given its own error, and proposes nothing,
//! another reading, a first step of half the computed dose, or to stop. It never proposes
//! more than the brewery's cap, and never one correction against another.
//! [`expected_after`] says where a step leads, [`curve`] draws where others would.

use statrs::function::erf::erfc;

use crate::mash::{Addition, MashError, MashInputs};
use crate::material::{Contribution, DoseUnit, Material};
use crate::quantity::NINETY_PERCENT;
use crate::quantity::{Celsius, DoseAmount, Estimate, Fraction, Meq, Minutes, Ph, PhShift};
use crate::reading::WARMEST_SAMPLE;

/// No advice before this; a mash falls by 0.3 in its first ten minutes.
/// Source: [`HOSOM_2020`](crate::references::HOSOM_2020): 6.00 at strike, 5.73 at
/// 10 minutes, 5.68 at 20.
pub const EARLIEST: Minutes = Minutes::constant(10.0);

/// When to read again after a step. Source: common practice, no source; acid acts
/// within minutes.
pub const REREAD_AFTER: Minutes = Minutes::constant(10.0);

/// Beyond this many standard deviations a reading says more about the meter, the
/// malt or the doses than about the mash. Source: assumed; one in two thousand.
const SURPRISING: f64 = 3.5;

/// Share of the computed dose given first. Source: common practice, no source.
const FIRST_SHARE: f64 = 0.5;

/// How far a computed step may be off, relative to it: the spread of malt buffering.
/// Source: from memory, as for [`MaltClass`](crate::mash::MaltClass).
pub const STEP_RELATIVE_SD: f64 = 0.25;

/// Where less than this share of a step is left below the cap, the cap counts as reached:
/// what is left would hardly show. Source: assumed.
const NEARLY_SPENT: f64 = 0.2;

/// A pH read in the mash.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct MashCheck {
    /// On the cooled basis, repeats put together: see [`reading`](crate::reading).
    pub reading: Estimate<Ph>,
    /// Temperature of the sample in the meter's cup.
    pub sample: Celsius,
    /// Time since strike.
    pub minute: Minutes,
    /// Whether the meter was calibrated lately and is fit for use.
    pub calibrated: bool,
    /// Whether no other reading taken within minutes contradicts it.
    pub agrees: bool,
    /// Whether the meter was checked in buffer after a surprising reading.
    pub meter_checked: bool,
}

/// Where the mash should be, cooled sample.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Aim {
    /// The middle of the wish.
    pub target: Ph,
    /// Lowest accepted.
    pub low: Ph,
    /// Highest accepted.
    pub high: Ph,
}

impl Aim {
    /// The chance that a mash expected so lands between lowest and highest, normal
    /// distribution.
    #[must_use]
    pub fn chance(&self, expected: Estimate<Ph>) -> Fraction {
        let below = |edge: Ph| {
            let away = edge.get() - expected.value.get();
            if expected.sd > 0.0 {
                erfc(-away / (expected.sd * std::f64::consts::SQRT_2)) / 2.0
            } else if away >= 0.0 {
                1.0
            } else {
                0.0
            }
        };
        Fraction::clamped(below(self.high) - below(self.low))
    }
}

/// Which way a mash must be moved.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Direction {
    /// Down, with acid.
    Lower,
    /// Up, with base.
    Raise,
}

/// A material at hand for putting a mash right, and how much more of it the batch may
/// take.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Remedy<'a> {
    /// What is added.
    pub material: &'a Material,
    /// How much more of it the batch may take before it passes a limit.
    pub cap: DoseAmount,
}

impl Remedy<'_> {
    /// Half of a full dose, or less where the cap says so, and whether it did.
    pub(crate) fn first_of(&self, full_dose: DoseAmount) -> Result<(DoseAmount, bool), Stop> {
        let (half, left) = (FIRST_SHARE * full_dose.get(), self.cap.get());
        if left <= NEARLY_SPENT * half {
            return Err(Stop::CapReached);
        }
        Ok((DoseAmount::clamped(half.min(left)), half > left))
    }
}

/// Corrections already made to this mash.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Corrected {
    /// Which way.
    pub direction: Direction,
    /// How much in all, acid or base at the target: see [`strength`].
    pub given: Meq,
    /// What the first check that led to a step asked for in full, in the same measure.
    pub first_full: Meq,
}

/// Everything the advice depends on.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Situation<'a> {
    /// The mash with all that was dosed so far, corrections included.
    pub mash: &'a MashInputs,
    /// Where it should be.
    pub aim: Aim,
    /// Against a pH too high.
    pub acid: Option<Remedy<'a>>,
    /// Against a pH too low.
    pub base: Option<Remedy<'a>>,
    /// What was corrected before.
    pub corrected: Option<Corrected>,
}

/// What a reading proves.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Verdict {
    /// Inside the window.
    Inside,
    /// So near the target that the reading's own error covers the difference.
    CannotBeTold,
    /// Outside the window and not on target.
    Outside(Direction),
}

/// A reading, what it proves and what to do.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Assessment {
    /// The reading on the cooled basis, with its standard deviation.
    pub reading: Estimate<Ph>,
    /// What the balance expected at this moment.
    pub expected: Estimate<Ph>,
    /// What the reading proves about window and target, taken by itself.
    pub verdict: Verdict,
    /// What to do.
    pub advice: Advice,
}

/// What to do about a mash check.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Advice {
    /// Nothing.
    LeaveIt {
        /// Why nothing.
        why: LeaveIt,
    },
    /// Add this, then read again.
    FirstStep(FirstStep),
    /// The reading is not fit to act on.
    ReadAgain {
        /// Why not.
        why: ReadAgain,
    },
    /// No more corrections.
    Stop {
        /// Why no more.
        why: Stop,
    },
}

/// Why to leave a mash alone.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum LeaveIt {
    /// It is inside its window.
    InsideWindow,
    /// The reading cannot be told from the target.
    CannotBeTold,
    /// It is below, and wort in the kettle is not raised.
    NeverRaised,
}

/// Why to read again.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ReadAgain {
    /// The mash is still settling: read from minute ten on.
    TooEarly,
    /// The sample was hot, so its cooled pH is only an estimate: cool it and read.
    CoolTheSample,
    /// The meter was not calibrated within a day, or is not fit for use.
    Calibrate,
    /// Two readings taken within minutes contradict each other: take a third.
    ReadingsDisagree,
    /// The reading is further from the prediction than chance explains: check the
    /// meter in fresh buffer first.
    CheckTheMeter,
}

/// Why to stop.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Stop {
    /// The meter is right and the mash is not what was planned: look for a wrong
    /// malt, a wrong dose or a changed water before adding anything.
    NotThePlannedMash,
    /// Corrections have reached, or all but reached, the cap of the batch or the dose
    /// first computed.
    CapReached,
    /// An earlier correction went the other way; another would only chase the meter.
    AlreadyCorrectedTheOtherWay,
    /// No material for this direction is at hand, or it cannot reach the target.
    NoRemedy,
    /// The mash as entered has no pH: its grist or liquor is missing.
    NoPrediction(MashError),
}

/// Half of the computed dose, and what it should do.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct FirstStep {
    /// Which way it moves the mash.
    pub direction: Direction,
    /// How much to add now.
    pub dose: DoseAmount,
    /// The unit of the dose.
    pub unit: DoseUnit,
    /// What the target would take in full.
    pub full_dose: DoseAmount,
    /// The same as acid or base. Keep it: later steps stop there, whatever the material.
    pub full: Meq,
    /// Whether the cap made the dose smaller than half.
    pub capped: bool,
    /// The pH to expect after it.
    pub expected_ph: Estimate<Ph>,
    /// The chance that this lies in the window.
    pub chance: Fraction,
    /// When to read again.
    pub reread_after: Minutes,
}

/// Assesses a mash check.
#[must_use]
pub fn assess(check: &MashCheck, situation: &Situation<'_>) -> Assessment {
    let reading = check.reading;
    let verdict = verdict(reading, situation.aim);
    let (expected, advice) = match situation.mash.predict() {
        Ok(prediction) => (
            prediction.ph,
            advise(check, situation, prediction.ph, verdict),
        ),
        Err(error) => (
            reading,
            Advice::Stop {
                why: Stop::NoPrediction(error),
            },
        ),
    };
    Assessment {
        reading,
        expected,
        verdict,
        advice,
    }
}

/// The acid or base that this much of a material gives a mash at `target`, without its
/// sign.
#[must_use]
pub fn strength(mash: &MashInputs, target: Ph, brings: &Contribution) -> Meq {
    Meq::clamped(mash.acid_given(target, brings).get().abs())
}

/// The mash as the meter sees it: the same balance, moved to where it was read.
pub fn as_read(mash: &MashInputs, reading: Ph) -> Result<MashInputs, MashError> {
    let expected = mash.predict()?.ph.value.get();
    let mut moved = mash.clone();
    moved.offset.value = PhShift::clamped(mash.offset.value.get() + reading.get() - expected);
    Ok(moved)
}

/// Where a mash is that was at `reading` as `at_reading` and has become `now` since.
pub fn expected_after(
    at_reading: &MashInputs,
    reading: Estimate<Ph>,
    now: &MashInputs,
) -> Result<Estimate<Ph>, MashError> {
    let mut after = now.clone();
    after.offset = as_read(at_reading, reading.value)?.offset;
    let ph = after.predict()?.ph.value;
    let moved = ph.get() - reading.value.get();
    Ok(Estimate::new(
        ph,
        reading.sd.hypot(STEP_RELATIVE_SD * moved),
    ))
}

/// The pH of a mash for doses of a material from nothing to `most`, in equal steps.
/// Where a dose would take it off the scale the curve ends.
#[must_use]
pub fn curve(mash: &MashInputs, material: &Material, most: DoseAmount) -> Vec<(DoseAmount, Ph)> {
    const STEPS: u8 = 24;
    let mut mash = mash.clone();
    let place = mash.additions.len();
    mash.additions
        .push(Addition::of("dose", material, DoseAmount::constant(0.0)));
    let mut points = Vec::new();
    for step in 0..=STEPS {
        let dose = DoseAmount::clamped(most.get() * f64::from(step) / f64::from(STEPS));
        mash.additions[place] = Addition::of("dose", material, dose);
        match mash.predict() {
            Ok(prediction) => points.push((dose, prediction.ph.value)),
            Err(_) => break,
        }
    }
    points
}

pub(crate) fn verdict(reading: Estimate<Ph>, aim: Aim) -> Verdict {
    let ph = reading.value;
    if (ph.get() - aim.target.get()).abs() <= NINETY_PERCENT * reading.sd {
        Verdict::CannotBeTold
    } else if (aim.low..=aim.high).contains(&ph) {
        Verdict::Inside
    } else if ph > aim.target {
        Verdict::Outside(Direction::Lower)
    } else {
        Verdict::Outside(Direction::Raise)
    }
}

/// Why a reading is no ground for adding anything, whatever it says.
pub(crate) fn unfit_to_act_on(check: &MashCheck) -> Option<ReadAgain> {
    if check.sample > WARMEST_SAMPLE {
        Some(ReadAgain::CoolTheSample)
    } else if !check.calibrated {
        Some(ReadAgain::Calibrate)
    } else if !check.agrees {
        Some(ReadAgain::ReadingsDisagree)
    } else {
        None
    }
}

fn advise(
    check: &MashCheck,
    situation: &Situation<'_>,
    expected: Estimate<Ph>,
    verdict: Verdict,
) -> Advice {
    let reading = check.reading;
    if check.minute < EARLIEST {
        return Advice::ReadAgain {
            why: ReadAgain::TooEarly,
        };
    }
    if let Some(why) = unfit_to_act_on(check) {
        return Advice::ReadAgain { why };
    }
    let surprise = (reading.value.get() - expected.value.get()).abs();
    if surprise > SURPRISING * reading.sd.hypot(expected.sd) {
        return if check.meter_checked {
            Advice::Stop {
                why: Stop::NotThePlannedMash,
            }
        } else {
            Advice::ReadAgain {
                why: ReadAgain::CheckTheMeter,
            }
        };
    }
    match verdict {
        Verdict::Inside => Advice::LeaveIt {
            why: LeaveIt::InsideWindow,
        },
        Verdict::CannotBeTold => Advice::LeaveIt {
            why: LeaveIt::CannotBeTold,
        },
        Verdict::Outside(direction) => match step(situation, reading, direction) {
            Ok(step) => Advice::FirstStep(step),
            Err(why) => Advice::Stop { why },
        },
    }
}

fn step(
    situation: &Situation<'_>,
    reading: Estimate<Ph>,
    direction: Direction,
) -> Result<FirstStep, Stop> {
    let remedy = match direction {
        Direction::Lower => situation.acid,
        Direction::Raise => situation.base,
    }
    .ok_or(Stop::NoRemedy)?;
    if let Some(corrected) = situation.corrected
        && corrected.direction != direction
    {
        return Err(Stop::AlreadyCorrectedTheOtherWay);
    }
    let (aim, material) = (situation.aim, remedy.material);
    let mash = as_read(situation.mash, reading.value).map_err(Stop::NoPrediction)?;
    let full_dose = mash
        .dose_for(aim.target, material)
        .map_err(|_| Stop::NoRemedy)?;
    let per_unit = strength(&mash, aim.target, &material.per_unit()).get();
    let full = per_unit * full_dose.get();

    // What corrections may still add up to, as acid or base, then in this material.
    let left = situation.corrected.map_or(full, |corrected| {
        corrected.first_full.get() - corrected.given.get()
    });
    let cap = DoseAmount::clamped((left / per_unit).min(remedy.cap.get()));
    let (dose, capped) = Remedy { cap, ..remedy }.first_of(full_dose)?;

    let mut after = situation.mash.clone();
    after
        .additions
        .push(Addition::of("correction", material, dose));
    let expected_ph =
        expected_after(situation.mash, reading, &after).map_err(Stop::NoPrediction)?;
    Ok(FirstStep {
        direction,
        dose,
        unit: material.unit(),
        full_dose,
        full: Meq::clamped(full),
        capped,
        expected_ph,
        chance: aim.chance(expected_ph),
        reread_after: REREAD_AFTER,
    })
}
