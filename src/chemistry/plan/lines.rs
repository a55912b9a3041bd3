//! The search for the fewest lines.
//!
//! What does not suffice comes with a proof, and the proof names lines of which one more
//! is needed. Those clauses are gathered and branched over, as in `fewest`, with a simplex
//! to look at sets and an end to how many.

use super::simplex::{Found, Simplex};

/// Sets of lines looked at in one search. On the random problems of the tests a hundred
/// times as many find no fewer lines.
pub(super) const MOST_TRIALS: usize = 150;

/// A line that would have to grow a million times to weaken a proof does not help.
const NO_HELP: f64 = 1e-6;

/// A set of lines, one bit each.
pub(super) type Set = u128;

/// Where a search stands.
pub(super) struct Search {
    pub(super) simplex: Simplex,
    pub(super) objective: Vec<f64>,
    /// At least one of each is needed.
    pub(super) clauses: Vec<Set>,
    pub(super) usable: Set,
    /// Sources that have a lowest share.
    pub(super) forced: Set,
    pub(super) additions: Set,
    /// Additions at most.
    pub(super) most: u32,
    pub(super) bounds: Vec<(f64, f64)>,
    /// Sets that may still be looked at.
    pub(super) left: usize,
    pub(super) best: Option<(Set, f64)>,
    pub(super) hopeless: bool,
}

impl Search {
    fn look(&mut self, set: Set) -> Option<f64> {
        self.left = self.left.saturating_sub(1);
        for (place, &(lower, upper)) in self.bounds.iter().enumerate() {
            if set >> place & 1 == 1 {
                self.simplex.bound(place, lower, upper);
            } else {
                self.simplex.bound(place, 0.0, 0.0);
            }
        }
        match self.simplex.least(&self.objective) {
            Found::Least(value) => {
                self.keep(set, value);
                Some(value)
            }
            Found::Nothing(helpers) => {
                let clause = (0..self.bounds.len())
                    .filter(|place| helpers[*place] < -NO_HELP)
                    .fold(0, |clause: Set, place| clause | 1 << place)
                    & self.usable
                    & !set;
                self.hopeless |= clause == 0;
                self.clauses.push(clause);
                None
            }
            Found::Lost => {
                self.left = 0;
                None
            }
        }
    }

    fn keep(&mut self, set: Set, value: f64) {
        if (set & self.additions).count_ones() > self.most {
            return;
        }
        let better = self.best.is_none_or(|(best, least)| {
            let equal = (value - least).abs() <= 1e-6 * (1.0 + least.abs());
            set.count_ones()
                .cmp(&best.count_ones())
                .then(if equal {
                    set.cmp(&best)
                } else {
                    value.total_cmp(&least)
                })
                .is_lt()
        });
        if better {
            self.best = Some((set, value));
        }
    }

    /// Leaves out one line after the other, the smallest first, as long as the rest
    /// suffices.
    pub(super) fn pare(&mut self, start: Set, amounts: &[f64]) {
        let mut set = start;
        if self.look(set).is_none() {
            // The optimum itself, by a hair: there is nothing to pare.
            self.clauses.clear();
            self.hopeless = false;
            return;
        }
        let grains = |place: usize| (amounts[place] * 1e5).round() as i64;
        let mut order: Vec<usize> = places(start & !self.forced).collect();
        order.sort_by_key(|place| grains(*place));
        for place in order {
            let without = set & !(1 << place);
            if self.look(without).is_some() {
                set = without;
            }
        }
    }

    /// Looks at every set of one line, of two and so on, until one suffices.
    pub(super) fn deepen(&mut self) {
        let least = self.forced.count_ones();
        for count in least..=self.usable.count_ones() {
            if self.best.is_some_and(|(best, _)| best.count_ones() < count) {
                return;
            }
            self.branch(self.forced, 0, count - least);
            if self.left == 0 || self.hopeless {
                return;
            }
        }
    }

    /// Everything with `taken`, without `barred`, and with at most `more`.
    fn branch(&mut self, taken: Set, barred: Set, more: u32) {
        if self.hopeless || self.left == 0 || (taken & self.additions).count_ones() > self.most {
            return;
        }
        let open = self
            .clauses
            .iter()
            .filter(|clause| *clause & taken == 0)
            .map(|clause| clause & !barred)
            .min_by_key(|clause| (clause.count_ones(), *clause));
        let Some(clause) = open else {
            if self.look(taken).is_none() {
                self.branch(taken, barred, more);
            }
            return;
        };
        if more == 0 || self.needs_more_than(more, taken, barred) {
            return;
        }
        let mut barred = barred;
        for place in places(clause) {
            self.branch(taken | 1 << place, barred, more - 1);
            // The branches after this one do without it, so no set is met twice.
            barred |= 1 << place;
        }
    }

    /// Clauses without a common line need one each.
    fn needs_more_than(&self, more: u32, taken: Set, barred: Set) -> bool {
        let (mut seen, mut needed) = (0, 0);
        for clause in &self.clauses {
            let clause = clause & !barred;
            if clause & taken == 0 && clause & seen == 0 {
                seen |= clause;
                needed += 1;
            }
        }
        needed > more
    }
}

pub(super) fn places(set: Set) -> impl Iterator<Item = usize> {
    (0..Set::BITS as usize).filter(move |place| set >> place & 1 == 1)
}
