//! Which readings repeat a new one, and what they say together.

use chemistry::material::Vessel;
use chemistry::quantity::{Estimate, Ph};
use chemistry::reading::{LONGEST_APART, Repeat, WARMEST_SAMPLE, agree, cooled, together};

use super::Taken;
use crate::plans::{MashCheck, Stage};

/// What counts of a reading and those before it.
#[derive(Clone, Copy, Debug)]
pub(super) struct Counted {
    /// What counts, cooled basis.
    pub(super) reading: Estimate<Ph>,
    /// The new reading by itself.
    pub(super) single: Estimate<Ph>,
    /// How many readings were put together.
    pub(super) readings: u32,
    /// Whether no reading of the same few minutes contradicts it, or another agrees.
    pub(super) agrees: bool,
}

/// Puts the new reading together with those that repeat it.
pub(super) fn counted(taken: &Taken<'_>) -> Counted {
    let new = taken.new;
    let single = cooled(new.ph, new.sample, taken.meter.sd);
    let alone = Counted {
        reading: single,
        single,
        readings: 1,
        agrees: true,
    };
    if new.sample > WARMEST_SAMPLE {
        return alone;
    }
    let near: Vec<&MashCheck> = taken.earlier.iter().filter(|it| near(taken, it)).collect();
    let of = |check: &MashCheck| cooled(check.ph, check.sample, check.meter_sd).value;
    let (agreeing, contradicting): (Vec<_>, Vec<_>) = near
        .into_iter()
        .partition(|check| agree(of(check), single.value));
    let mut repeats = vec![Repeat {
        ph: new.ph,
        sample: new.sample,
        meter_sd: taken.meter.sd,
        calibration: key(
            taken.meter.calibration.map(|id| id.to_string()),
            &taken.meter.name,
        ),
    }];
    repeats.extend(agreeing.iter().map(|check| Repeat {
        ph: check.ph,
        sample: check.sample,
        meter_sd: check.meter_sd,
        calibration: key(check.calibration_id.map(|id| id.to_string()), &check.meter),
    }));
    Counted {
        reading: together(&repeats).unwrap_or(single),
        readings: u32::try_from(repeats.len()).unwrap_or(u32::MAX),
        agrees: contradicting.is_empty() || !agreeing.is_empty(),
        ..alone
    }
}

fn key(calibration: Option<String>, meter: &str) -> String {
    calibration.unwrap_or_else(|| meter.trim().to_lowercase())
}

/// Whether an earlier reading is of the same thing: the same stage within minutes, cool,
/// fit to count, and nothing went in between.
fn near(taken: &Taken<'_>, check: &MashCheck) -> bool {
    let new = taken.new;
    let fit = check.withdrawn.is_none()
        && check.stage == new.stage
        && check.sample <= WARMEST_SAMPLE
        && (check.advised.advice != "read_again" || check.advised.why == "disagree");
    // Beside a meter that is fit for use, one that is not says nothing.
    let as_good = taken.meter.unfit.is_empty() || check.advised.why != "calibrate";
    let apart = if new.stage.timed_from_strike() {
        (check.minute.get() - new.minute.get()).abs()
    } else {
        // Minutes of one brewing day: no digit is lost.
        #[allow(clippy::cast_precision_loss, reason = "seconds of a day")]
        let seconds = taken.at.seconds_since(check.read_at) as f64;
        seconds / 60.0
    };
    fit && as_good && apart <= LONGEST_APART.get() && !dosed_since(taken, check)
}

fn dosed_since(taken: &Taken<'_>, check: &MashCheck) -> bool {
    let reaches: &[Vessel] = match taken.new.stage {
        Stage::Liquor => &[Vessel::LiquorTank, Vessel::SpargeLiquor],
        Stage::Mash | Stage::FirstRunnings => &[Vessel::LiquorTank, Vessel::Mash],
        Stage::LastRunnings => &[Vessel::LiquorTank, Vessel::Mash, Vessel::SpargeLiquor],
        Stage::KettleFull | Stage::EndOfBoil | Stage::EndOfFermentation | Stage::Package => {
            &Vessel::ALL
        }
    };
    taken.plan.doses.iter().any(|dose| {
        reaches.contains(&dose.vessel)
            && dose
                .weighed
                .as_ref()
                .is_some_and(|weighed| weighed.at > check.read_at)
    })
}
