//! Where the mash should be by now: from its last reading and what went in since.

use chemistry::put_right;
use chemistry::quantity::{Estimate, Ph};

use crate::id::UtcTime;
use crate::plans::{Dose, MashCheck, Plan, Stage, compute};

/// What is expected of the mash after a reading and what went in since.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Now {
    /// Expected, cooled sample.
    pub ph: Estimate<Ph>,
    /// When the last of what went in since did so.
    pub since: UtcTime,
}

/// The last reading of the mash that something may rest on.
pub fn last_reading(checks: &[MashCheck]) -> Option<&MashCheck> {
    checks
        .iter()
        .rev()
        .find(|check| check.stage == Stage::Mash && check.stands())
}

/// What is expected of the mash now. `None` where it was not read yet, or nothing went in
/// since.
pub fn now(plan: &Plan, checks: &[MashCheck]) -> Option<Now> {
    let last = last_reading(checks)?;
    let went_in = |dose: &Dose| dose.weighed.as_ref().map(|weighed| weighed.at);
    let with = |counts: &dyn Fn(UtcTime) -> bool| {
        let mut plan = plan.clone();
        plan.doses.retain(|dose| went_in(dose).is_some_and(counts));
        plan
    };
    let (then, now) = (with(&|at| at <= last.read_at), with(&|_| true));
    let (before, after) = (
        compute::mash_as_weighed(&then),
        compute::mash_as_weighed(&now),
    );
    if before.additions.len() == after.additions.len() {
        return None;
    }
    let reading = Estimate::new(
        Ph::clamped(last.advised.reading_ph),
        last.advised.reading_sd,
    );
    Some(Now {
        ph: put_right::expected_after(&before, reading, &after).ok()?,
        since: plan.doses.iter().filter_map(went_in).max()?,
    })
}
