//! As few additions as possible.
//!
//! Not by trying every subset: a set of additions that does not suffice comes with a
//! proof, and the proof names additions of which at least one is needed. Those clauses
//! are gathered, and the search branches over them, cutting off whatever needs more
//! additions than the best found. Only sets that satisfy every clause so far are
//! solved.

use crate::material::{Substance, Vessel};

use super::PlanError;
use super::model::{Allowed, Model};
use super::order::{Chosen, Frozen, closest};
use super::problem::MOST_ADDITIONS;
use super::program::NoAnswer;

/// An addition that would have to reach a million g or mL per litre to weaken a proof
/// does not help.
const NO_HELP: f64 = 1e-6;

/// A set of additions, one bit each; a problem with more than these is refused.
type Set = u128;

const _: () = assert!(MOST_ADDITIONS <= Set::BITS as usize);

struct Search<'a> {
    model: &'a Model,
    frozen: &'a Frozen,
    /// At least one of each is needed.
    clauses: Vec<Set>,
    usable: Set,
    best: Option<Chosen>,
    /// A proof named nothing that helps: no set suffices.
    hopeless: bool,
}

/// The nearest to what is preferred among those with the fewest additions. `None` if
/// even all that is allowed does not suffice.
pub(super) fn fewest(
    model: &Model,
    frozen: &Frozen,
    allowed: &Allowed,
) -> Result<Option<Chosen>, PlanError> {
    let usable = allowed
        .iter()
        .enumerate()
        .filter(|(_, allowed)| **allowed)
        .fold(0, |set: Set, (place, _)| set | 1 << place);
    let mut search = Search {
        model,
        frozen,
        clauses: Vec::new(),
        usable,
        best: None,
        hopeless: false,
    };
    for count in 0..=usable.count_ones() {
        search.branch(0, 0, count)?;
        if search.best.is_some() || search.hopeless {
            break;
        }
    }
    Ok(search.best)
}

impl Search<'_> {
    /// Everything with `taken`, without `barred`, and with at most `left` more.
    fn branch(&mut self, taken: Set, barred: Set, left: u32) -> Result<(), PlanError> {
        if self.hopeless {
            return Ok(());
        }
        // The clause with the least choice first.
        let open = self
            .clauses
            .iter()
            .filter(|clause| *clause & taken == 0)
            .map(|clause| clause & !barred)
            .min_by_key(|clause| clause.count_ones());
        let Some(clause) = open else {
            return self.try_set(taken, barred, left);
        };
        if left == 0 || self.needs_more_than(left, taken, barred) {
            return Ok(());
        }
        let mut barred = barred;
        for place in places(clause) {
            self.branch(taken | 1 << place, barred, left - 1)?;
            // The branches after this one do without it, so no set is met twice.
            barred |= 1 << place;
        }
        Ok(())
    }

    /// Clauses without a common addition need one each.
    fn needs_more_than(&self, left: u32, taken: Set, barred: Set) -> bool {
        let (mut seen, mut needed) = (0, 0);
        for clause in &self.clauses {
            let clause = clause & !barred;
            if clause & taken == 0 && clause & seen == 0 {
                seen |= clause;
                needed += 1;
            }
        }
        needed > left
    }

    fn try_set(&mut self, taken: Set, barred: Set, left: u32) -> Result<(), PlanError> {
        let allowed: Allowed = (0..self.model.additions.len())
            .map(|place| taken >> place & 1 == 1)
            .collect();
        match closest(self.model, &self.frozen.program(self.model, &allowed)) {
            Ok(answer) => {
                let chosen = Chosen {
                    by: f64::from(taken.count_ones()),
                    distance: answer.value,
                    columns: answer.columns,
                    places: self.places_of(taken),
                };
                if self.best.as_ref().is_none_or(|best| chosen.beats(best)) {
                    self.best = Some(chosen);
                }
                Ok(())
            }
            Err(NoAnswer::Infeasible { helpers }) => {
                let clause = (0..self.model.additions.len())
                    .filter(|place| helpers[self.model.sources + place] < -NO_HELP)
                    .fold(0, |set: Set, place| set | 1 << place)
                    & self.usable
                    & !taken;
                if clause == 0 {
                    self.hopeless = true;
                    return Ok(());
                }
                self.clauses.push(clause);
                self.branch(taken, barred, left)
            }
            Err(NoAnswer::Unsettled) => Err(PlanError::Unsettled),
        }
    }
}

impl Search<'_> {
    fn places_of(&self, taken: Set) -> Vec<(Vessel, Substance)> {
        let mut found: Vec<(Vessel, Substance)> = places(taken)
            .map(|place| self.model.additions[place as usize])
            .map(|addition| (addition.vessel, addition.substance))
            .collect();
        found.sort_unstable();
        found
    }
}

fn places(set: Set) -> impl Iterator<Item = u32> {
    (0..Set::BITS).filter(move |place| set >> place & 1 == 1)
}
