//! What to do about a pH read in the mash.
//!
//! [`assess`] brings the reading to the cooled basis, says what it proves given the
//! meter's own error, and proposes nothing, another reading, a first step of half
//! the computed dose, or to stop. It never proposes more than the brewery's cap, and
//! never one correction against another.

use crate::mash::{Addition, MashError, MashInputs};
use crate::material::{DoseUnit, Material};
use crate::quantity::NINETY_PERCENT;
use crate::quantity::{Celsius, DoseAmount, Estimate, Minutes, Ph, PhShift};

/// No advice before this; a mash falls by 0.3 in its first ten minutes.
/// Source: [`HOSOM_2020`](crate::references::HOSOM_2020): 6.00 at strike, 5.73 at
/// 10 minutes, 5.68 at 20.
pub const EARLIEST: Minutes = Minutes::constant(10.0);

/// When to read again after a step. Source: common practice, no source; acid acts
/// within minutes.
pub const REREAD_AFTER: Minutes = Minutes::constant(10.0);

/// A sample warmer than this is only an estimate of the cooled reading. Source:
/// assumed; the usual rule is to cool to 20 to 25 °C.
pub const WARMEST_SAMPLE: Celsius = Celsius::constant(30.0);

/// Beyond this many standard deviations a reading says more about the meter, the
/// malt or the doses than about the mash. Source: assumed; one in two thousand.
const SURPRISING: f64 = 3.5;

/// Share of the computed dose given first. Source: common practice, no source.
const FIRST_SHARE: f64 = 0.5;

/// How far a computed step may be off, relative to it: the spread of malt buffering.
/// Source: from memory, as for [`MaltClass`](crate::mash::MaltClass).
const STEP_RELATIVE_SD: f64 = 0.25;

/// A pH read in the mash.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct MashCheck {
    /// As the meter showed it.
    pub ph: Ph,
    /// Temperature of the sample in the meter's cup.
    pub sample: Celsius,
    /// Time since strike.
    pub minute: Minutes,
    /// One standard deviation of the meter at its last calibration.
    pub meter_sd: PhShift,
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

/// Which way a mash must be moved.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Direction {
    /// Down, with acid.
    Lower,
    /// Up, with base.
    Raise,
}

/// A material at hand for putting a mash right, and how much of it one batch may
/// take in all.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Remedy<'a> {
    /// What is added.
    pub material: &'a Material,
    /// Most of it that corrections of one batch may add up to.
    pub cap: DoseAmount,
}

/// Corrections already made to this mash.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Corrected {
    /// Which way.
    pub direction: Direction,
    /// How much in all, in the unit of the remedy.
    pub given: DoseAmount,
    /// The full dose computed at the first check that led to a step.
    pub first_full_dose: DoseAmount,
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
}

/// Why to read again.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ReadAgain {
    /// The mash is still settling: read from minute ten on.
    TooEarly,
    /// The sample was hot, so its cooled pH is only an estimate: cool it and read.
    CoolTheSample,
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
    /// Corrections have reached the cap of the batch or the dose first computed.
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
    /// What the target would take in full. Keep it: later steps stop there.
    pub full_dose: DoseAmount,
    /// Whether the cap made the dose smaller than half.
    pub capped: bool,
    /// The pH to expect after it.
    pub expected_ph: Estimate<Ph>,
    /// When to read again.
    pub reread_after: Minutes,
}

/// Assesses a mash check.
#[must_use]
pub fn assess(check: &MashCheck, situation: &Situation<'_>) -> Assessment {
    let reading = cooled(check.ph, check.sample, check.meter_sd);
    let verdict = verdict(reading, situation.aim);
    let (expected, advice) = match situation.mash.predict() {
        Ok(prediction) => (
            prediction.ph,
            advise(check, situation, reading, prediction.ph, verdict),
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

/// The reading a cooled sample would have given, with the doubt of the meter and of
/// the conversion.
///
/// pH = (pH(t) + b·(t₀ − t)) / (1 + m·(t − t₀)), t₀ = 21.1 °C, b = 0.0166,
/// m = −0.00382. Source: [`HOSOM_2020`](crate::references::HOSOM_2020), 19 worts.
/// Other sources put the fall to 65 °C between 0.2 and 0.35, hence ± 0.1 for a hot
/// reading and in proportion below it (the proportion is assumed).
#[must_use]
pub fn cooled(ph: Ph, sample: Celsius, meter_sd: PhShift) -> Estimate<Ph> {
    const REFERENCE: f64 = 21.1;
    const HOT: f64 = 65.0;
    let above = sample.get() - REFERENCE;
    let converted = (ph.get() - 0.0166 * above) / (1.0 - 0.003_82 * above);
    let conversion_sd = 0.1 * above.abs() / (HOT - REFERENCE);
    Estimate::new(
        Ph::clamped(converted),
        meter_sd.get().abs().hypot(conversion_sd),
    )
}

fn verdict(reading: Estimate<Ph>, aim: Aim) -> Verdict {
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

fn advise(
    check: &MashCheck,
    situation: &Situation<'_>,
    reading: Estimate<Ph>,
    expected: Estimate<Ph>,
    verdict: Verdict,
) -> Advice {
    if check.minute < EARLIEST {
        return Advice::ReadAgain {
            why: ReadAgain::TooEarly,
        };
    }
    if check.sample > WARMEST_SAMPLE {
        return Advice::ReadAgain {
            why: ReadAgain::CoolTheSample,
        };
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
        Verdict::Outside(direction) => match step(situation, reading, expected, direction) {
            Ok(step) => Advice::FirstStep(step),
            Err(why) => Advice::Stop { why },
        },
    }
}

fn step(
    situation: &Situation<'_>,
    reading: Estimate<Ph>,
    expected: Estimate<Ph>,
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

    // The mash as the meter sees it: the same balance, moved to where it was read.
    let mut mash = situation.mash.clone();
    mash.offset.value =
        PhShift::clamped(mash.offset.value.get() + reading.value.get() - expected.value.get());
    let full_dose = mash
        .dose_for(situation.aim.target, remedy.material)
        .map_err(|_| Stop::NoRemedy)?;

    let (given, first_full_dose) = situation
        .corrected
        .map_or((0.0, full_dose.get()), |corrected| {
            (corrected.given.get(), corrected.first_full_dose.get())
        });
    let left = remedy.cap.get().min(first_full_dose) - given;
    if left <= 0.0 {
        return Err(Stop::CapReached);
    }
    let half = FIRST_SHARE * full_dose.get();
    let dose = DoseAmount::clamped(half.min(left));

    mash.additions
        .push(Addition::of("correction", remedy.material, dose));
    let expected_ph = mash.predict().map_err(Stop::NoPrediction)?.ph.value;
    let moved = expected_ph.get() - reading.value.get();
    Ok(FirstStep {
        direction,
        dose,
        unit: remedy.material.unit(),
        full_dose,
        capped: half > left,
        expected_ph: Estimate::new(expected_ph, reading.sd.hypot(STEP_RELATIVE_SD * moved)),
        reread_after: REREAD_AFTER,
    })
}
