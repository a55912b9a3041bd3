//! Advice in words.

use chemistry::put_right::{Advice, LeaveIt, ReadAgain, Stop};

use super::repeats::Counted;
use crate::meters::{Standing, Verdict};
use crate::plans::Step;
use crate::web::format;

/// Advice as it is shown and kept.
pub(super) struct Told {
    /// `leave`, `step`, `read_again` or `stop`.
    pub(super) advice: &'static str,
    /// Why, in one word for programs.
    pub(super) why: &'static str,
    /// In a heading.
    pub(super) title: String,
    /// In sentences.
    pub(super) words: Vec<String>,
    /// Whether it says that something is amiss.
    pub(super) alarms: bool,
}

fn told(advice: &'static str, why: &'static str, title: &str, words: impl Into<String>) -> Told {
    Told {
        advice,
        why,
        title: title.into(),
        words: vec![words.into()],
        alarms: advice == "stop",
    }
}

/// Advice without a step.
pub(super) fn advice(advice: Advice, unfit: &str) -> Told {
    match advice {
        Advice::LeaveIt { why } => leave(why),
        Advice::ReadAgain { why } => read_again(why, unfit),
        Advice::Stop { why } => stop(why),
        Advice::FirstStep(_) => below_a_step(),
    }
}

/// A step that the scale cannot tell.
pub(super) fn below_a_step() -> Told {
    told(
        "leave",
        "below_a_step",
        "Leave it",
        "What is missing is less than the scale can tell.",
    )
}

/// A first step.
pub(super) fn first_step(step: &Step, of: Advice) -> Told {
    let wait = format::decimals(step.reread_after_minutes, 0);
    let mut told = told(
        "step",
        "",
        "A first step",
        format!(
            "This is half of what the balance asks for. Stir it in, wait {wait} minutes and read again."
        ),
    );
    if matches!(of, Advice::FirstStep(first) if first.capped) {
        told.words
            .push("It is less than half because of the limit on this batch.".into());
    }
    told.alarms = true;
    told
}

/// Before anything else, what is planned goes in.
pub(super) fn weigh_in_first() -> Told {
    told(
        "stop",
        "weigh_in_first",
        "Weigh in first what is planned",
        "Then wait 10 minutes and read again. Add nothing else before.",
    )
}

fn leave(why: LeaveIt) -> Told {
    let (why, words) = match why {
        LeaveIt::InsideWindow => ("inside", "It is inside its window."),
        LeaveIt::CannotBeTold => (
            "cannot_be_told",
            "The reading is so near the target that the meter’s own error covers the difference.",
        ),
        LeaveIt::NeverRaised => (
            "never_raised",
            "It is below its window, and wort is not raised. Write it down and brew on.",
        ),
    };
    told("leave", why, "Leave it", words)
}

fn read_again(why: ReadAgain, unfit: &str) -> Told {
    let mut told = match why {
        ReadAgain::TooEarly => told(
            "read_again",
            "too_early",
            "Too early: read again",
            "The mash is still settling. Read it from minute ten on.",
        ),
        ReadAgain::CoolTheSample => told(
            "read_again",
            "hot",
            "Cool the sample and read again",
            "The sample was hot, so its pH when cooled is only an estimate. Cool it to room temperature and read it again.",
        ),
        ReadAgain::Calibrate => told(
            "read_again",
            "calibrate",
            "Calibrate the meter and read again",
            format!("{unfit} The reading is kept; nothing is advised on it."),
        ),
        ReadAgain::ReadingsDisagree => told(
            "read_again",
            "disagree",
            "Read once more",
            "It contradicts another reading of the same few minutes. Take a fresh sample: the two that agree count.",
        ),
        ReadAgain::CheckTheMeter => told(
            "read_again",
            "check_the_meter",
            "Check the meter first",
            "The reading is further from the prediction than chance explains. Check the meter in fresh buffer, take a \
             new sample, and say so when you enter it.",
        ),
    };
    told.alarms = why == ReadAgain::CheckTheMeter;
    told
}

fn stop(why: Stop) -> Told {
    let (why, words) = match why {
        Stop::NotThePlannedMash => (
            "not_the_planned_mash",
            "The meter is right, so this is not the mash that was planned. Look for a wrong malt, a wrong dose or \
             changed water before anything goes in."
                .into(),
        ),
        Stop::CapReached => (
            "cap",
            "The first steps have reached, or all but reached, what this batch may take. Brew on and write it down."
                .into(),
        ),
        Stop::AlreadyCorrectedTheOtherWay => (
            "other_way",
            "A step the other way was given before. Another would only chase the meter.".into(),
        ),
        Stop::NoRemedy => (
            "no_remedy",
            "Nothing on the shelf may go in for that, or it cannot reach the target.".into(),
        ),
        Stop::NoPrediction(error) => ("no_prediction", error.to_string()),
    };
    told("stop", why, "Stop: add nothing", words)
}

/// How several readings became one figure.
pub(super) fn repeats(counted: &Counted) -> Vec<String> {
    if counted.readings < 2 {
        return Vec::new();
    }
    vec![format!(
        "The mean of {} readings within minutes counts: {} ± {}. This one was {}.",
        counted.readings,
        format::ph(counted.reading.value.get()),
        format::ph(counted.reading.sd),
        format::ph(counted.single.value.get())
    )]
}

/// Why nothing may rest on the readings of a meter; nothing where something may.
pub(super) fn unfit(standing: &Standing) -> String {
    if standing.may_be_acted_on() {
        return String::new();
    }
    match standing.verdict {
        Verdict::NotCalibrated => format!("{} was never calibrated.", standing.name),
        Verdict::DoNotUse => format!(
            "{} is not fit for use by its last calibration.",
            standing.name
        ),
        Verdict::Good | Verdict::Ageing => format!(
            "{} was not calibrated within the last 24 hours.",
            standing.name
        ),
    }
}
