//! Asking once about a reading that looks like a slip of the finger.

use chemistry::quantity::{Celsius, Estimate, Ph};
use chemistry::reading::cooled;

use super::{Taken, advice, expected};
use crate::error::Error;
use crate::input::Problems;
use crate::plans::{Stage, compute};
use crate::web::format;

/// Hotter than this no sample is read: even mash-out is at 78 °C. Source: assumed.
const HOTTEST_SAMPLE: Celsius = Celsius::constant(80.0);

/// Further than this many standard deviations from what is expected it is asked about, as
/// it then leads to the meter instead of a step.
const SURPRISING: f64 = 3.5;

/// Digits that change place explain a reading when they bring it this near to what is
/// expected.
const NEAR: f64 = 0.25;

/// Refuses a reading that looks mistyped, with what it may have been. One that is confirmed
/// is not asked about.
pub(super) fn ask(taken: &Taken<'_>) -> Result<(), Error> {
    let mut problems = Problems::new();
    if let Some(words) = about_ph(taken) {
        problems.add("ph", words);
    }
    if taken.new.sample > HOTTEST_SAMPLE {
        problems.add(
            "sample_c",
            format!(
                "That is {} °C, hotter than mash-out. Look whether the thermometer shows °C or °F.",
                format::decimals(taken.new.sample.get(), 0)
            ),
        );
    }
    if !problems.is_empty() {
        problems.add(
            "confirmed",
            "Mend the figure, or tick that this is what the meter showed.",
        );
    }
    problems.finish()
}

fn about_ph(taken: &Taken<'_>) -> Option<String> {
    let new = taken.new;
    let (low, high) = new.stage.plausible();
    let reading = cooled(new.ph, new.sample, taken.meter.sd);
    let expected = expectation(taken);
    let likely = expected.map_or_else(
        || Ph::clamped(f64::midpoint(low.get(), high.get())),
        |it| it.value,
    );
    let implausible = !(low..=high).contains(&new.ph);
    let surprising = expected.is_some_and(|expected| {
        (reading.value.get() - expected.value.get()).abs()
            > SURPRISING * reading.sd.hypot(expected.sd)
    });
    if !implausible && !surprising {
        return None;
    }
    let shown = format::ph(new.ph.get());
    let rather = match turned(new.ph, likely) {
        Some(other) => format!(" Was it {}?", format::ph(other)),
        None => String::new(),
    };
    Some(match expected {
        Some(expected) => format!(
            "Did the meter show {shown}? {} is expected.{rather}",
            format::ph(expected.value.get())
        ),
        None => format!(
            "Did the meter show {shown}? {} lies between {} and {} as a rule.{rather}",
            new.stage.name(),
            format::ph(low.get()),
            format::ph(high.get())
        ),
    })
}

/// The figure with its first two digits the other way round, where that is what was to be
/// expected: 4.52 for 5.42.
fn turned(typed: Ph, likely: Ph) -> Option<f64> {
    let hundredths = (typed.get() * 100.0).round();
    let (ones, tenths, rest) = (
        (hundredths / 100.0).floor(),
        (hundredths / 10.0).floor() % 10.0,
        hundredths % 10.0,
    );
    let other = tenths + ones / 10.0 + rest / 100.0;
    (ones < 10.0 && (other - likely.get()).abs() <= NEAR).then_some(other)
}

/// What is expected of the mash: after the reading before it and what went in since, else
/// by the plan.
fn expectation(taken: &Taken<'_>) -> Option<Estimate<Ph>> {
    if taken.new.stage != Stage::Mash {
        return None;
    }
    let now = expected::now(taken.plan, taken.earlier).map(|now| now.ph);
    let by_plan = || {
        let outcome = compute::as_weighed(taken.plan).ok()?;
        let prediction = compute::prediction(&outcome)?;
        Some(Estimate::new(prediction.ph, prediction.sd.get()))
    };
    // A mash that is still settling, or still waits for its acid, may be far from where it
    // will be.
    let settling = taken.new.minute < chemistry::put_right::EARLIEST;
    if settling || !advice::not_in(taken.plan).is_empty() {
        return None;
    }
    now.or_else(by_plan)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn digits_that_changed_place_are_found_again() {
        let expected = Ph::constant(5.4);
        assert_eq!(turned(Ph::constant(4.52), expected), Some(5.42));
        assert_eq!(turned(Ph::constant(4.5), expected), Some(5.4));
        assert_eq!(turned(Ph::constant(6.6), expected), None);
        assert_eq!(turned(Ph::constant(10.0), expected), None);
    }
}
