//! The one thing to do next with a batch.

use chemistry::material::Vessel;

use super::store::OpenPlan;
use super::{Missing, before_the_mash};
use crate::id::{DoseId, PlanId, UtcTime};
use crate::plans::State;
use crate::web::format;

/// The one thing to do next with a batch.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Next {
    /// Approve its plan.
    Approve,
    /// Decide on the revision that is to take its place.
    Decide(PlanId),
    /// Weigh out; whether something is in already.
    WeighOut {
        /// Whether something is in already.
        begun: bool,
    },
    /// Give the first step a reading advised.
    GiveStep(DoseId),
    /// Read the mash for the first time.
    ReadMash,
    /// Read the mash again, at this moment where it was named.
    ReadAgain(Option<UtcTime>),
    /// Close the batch.
    Close,
}

impl Next {
    /// As sent.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Approve => "approve",
            Self::Decide(_) => "decide_on_revision",
            Self::WeighOut { .. } => "weigh_out",
            Self::GiveStep(_) => "give_step",
            Self::ReadMash => "read_mash",
            Self::ReadAgain(_) => "read_again",
            Self::Close => "close",
        }
    }

    /// What a button that does it says.
    pub fn words(self, time_zone: &str) -> String {
        match self {
            Self::Approve => "Approve".into(),
            Self::Decide(_) => "Decide on the revision".into(),
            Self::WeighOut { begun: false } => "Weigh out".into(),
            Self::WeighOut { begun: true } => "Go on weighing out".into(),
            Self::GiveStep(_) => "Give the first step".into(),
            Self::ReadMash => "Read the mash".into(),
            Self::ReadAgain(Some(at)) if at > UtcTime::now() => {
                let moment = format::moment(at, time_zone);
                let time = moment.split(' ').next_back().unwrap_or_default();
                format!("Read again at {time}")
            }
            Self::ReadAgain(_) => "Read the mash again".into(),
            Self::Close => "Close the batch".into(),
        }
    }

    /// When it is to be done, where that is a moment.
    pub const fn due_at(self) -> Option<UtcTime> {
        match self {
            Self::ReadAgain(at) => at,
            _ => None,
        }
    }
}

/// What to do next. The mash comes before what is weighed into later vessels: there is
/// little time to put it right.
pub(super) fn of(plan: &OpenPlan, missing: &[Missing], order: &[Vessel; 4]) -> Next {
    if plan.state == State::Draft {
        return Next::Approve;
    }
    let revision = missing.iter().find_map(|it| match it {
        Missing::Revision { id, .. } => Some(*id),
        _ => None,
    });
    if let Some(revision) = revision {
        return Next::Decide(revision);
    }
    let first = before_the_mash(order);
    let mut planned = plan.lines.iter().filter(|line| line.step_of.is_none());
    let everything_in = planned.clone().all(|line| line.weighed_at.is_some());
    let mash_ready = planned.all(|line| line.weighed_at.is_some() || !first.contains(&line.vessel));
    let weigh_out = Next::WeighOut {
        begun: plan.lines.iter().any(|line| line.weighed_at.is_some()),
    };
    let Some(reading) = &plan.reading else {
        return if mash_ready {
            Next::ReadMash
        } else {
            weigh_out
        };
    };
    match (reading.step, reading.advice.as_str()) {
        (Some((dose, None)), _) => return Next::GiveStep(dose),
        (Some((_, Some(given))), _) => {
            let minutes = reading.reread_after_minutes.unwrap_or(0.0);
            #[expect(clippy::cast_possible_truncation, reason = "minutes of a brew day")]
            return Next::ReadAgain(Some(given.plus_seconds((minutes * 60.0) as i64)));
        }
        (None, "read_again") => return Next::ReadAgain(None),
        _ => {}
    }
    if everything_in {
        Next::Close
    } else {
        weigh_out
    }
}
