//! What stands in the way, and what giving way would buy.
//!
//! For each requirement that is missed the solver is asked once more how little it can
//! be missed. Whatever presses against that answer stands in the way; each is then
//! lifted in turn to see what that buys.

use crate::quantity::PhShift;

use super::forward::{Broken, Finding, Outcome, Standing, evaluate};
use super::model::{Allowed, HAIR, Hold, MashHold, Model};
use super::order::{Frozen, settled, sum_of};
use super::problem::{PlanError, Problem};
use super::program::{Answer, Objective, Program, Row};
use super::{Conflict, Limit, Measure, Obstacle, Relief, Requirement, Shortfall, Treatment};

/// A pressure below this is the solver's own noise: lifting the row by all its scale
/// would buy a ten-thousandth of the scale of what is missed.
const PRESSURE: f64 = 1e-4;

/// How many obstacles are lifted to see what that buys.
const LIFTED: usize = 2;

/// Relief that is worth saying, relative to what is missed.
const WORTH_SAYING: f64 = 0.01;

/// Misses below this are the scale's, not the plan's, relative to their own scale.
const MISSED: f64 = 1e-5;

/// What is missed by the doses as weighed.
pub(super) fn shortfalls(
    problem: &Problem,
    model: &Model,
    frozen: &Frozen,
    exact: &[f64],
    treatment: &Treatment,
) -> Result<Vec<Shortfall>, PlanError> {
    let mut missed: Vec<(u8, Requirement, Standing)> = treatment
        .outcome
        .findings
        .iter()
        .filter(|finding| finding.standing != Standing::Inside)
        .map(|finding| {
            let order = priority_of(model, finding.requirement);
            (order, finding.requirement, finding.standing)
        })
        .collect();
    if let Some(standing) = off_the_scale(problem, treatment) {
        missed.push((0, Requirement::MashPh, standing));
    }
    missed.sort_by_key(|(order, ..)| *order);
    missed
        .into_iter()
        .map(|(_, requirement, standing)| {
            let (in_the_way, relief) = explain(problem, model, frozen, exact, requirement)?;
            Ok(Shortfall {
                requirement,
                standing,
                in_the_way,
                relief,
            })
        })
        .collect()
}

fn priority_of(model: &Model, requirement: Requirement) -> u8 {
    model
        .windows
        .iter()
        .find(|window| window.requirement == requirement)
        .map_or(0, |window| 1 + window.priority as u8)
}

/// A mash whose pH cannot be predicted at all is outside its window by all the scale.
fn off_the_scale(problem: &Problem, treatment: &Treatment) -> Option<Standing> {
    treatment.outcome.mash.as_ref().err()?;
    let aim = problem.spec.mash_ph;
    Some(if treatment.outcome.acid_missing.get() > 0.0 {
        Standing::Above(Measure::PhShift(PhShift::clamped(9.0 - aim.high.get())))
    } else {
        Standing::Below(Measure::PhShift(PhShift::clamped(aim.low.get() - 3.0)))
    })
}

/// The question "how little can this be missed?", ready to be asked under other rules.
struct Question<'a> {
    model: &'a Model,
    program: Program,
    objective: Objective,
    windows: Vec<Hold>,
    /// The columns that say how far it is missed.
    misses: Vec<usize>,
}

fn explain(
    problem: &Problem,
    model: &Model,
    frozen: &Frozen,
    exact: &[f64],
    requirement: Requirement,
) -> Result<(Vec<Obstacle>, Option<Relief>), PlanError> {
    let Some(question) = Question::about(model, frozen, exact, requirement) else {
        return Ok((Vec::new(), None));
    };
    let answer = settled(question.program.solve_roughly(&question.objective))?;
    let mut pressing = question.pressing(&answer);
    pressing.sort_by(|(a, _), (b, _)| b.total_cmp(a));
    // What lifting each of the heaviest buys, the best first; the others follow as they are.
    let mut bought: Vec<(f64, f64, Obstacle, Program)> = Vec::new();
    for &(_, obstacle) in pressing.iter().take(LIFTED) {
        let lifted = question.without(obstacle);
        // Nothing can be said of an obstacle the solver does not settle without.
        if let Ok(better) = lifted.solve_roughly(&question.objective) {
            bought.push((answer.value - better.value, better.value, obstacle, lifted));
        }
    }
    bought.sort_by(|(a, ..), (b, ..)| b.total_cmp(a));
    // Where one by itself buys something, those that by themselves buy nothing are only
    // near by.
    let enough = MISSED.max(WORTH_SAYING * answer.value);
    let idle: Vec<Obstacle> = match bought.first() {
        Some((most, ..)) if *most > enough => bought
            .extract_if(.., |(worth, ..)| *worth <= enough)
            .map(|(.., obstacle, _)| obstacle)
            .collect(),
        _ => Vec::new(),
    };
    let mut in_the_way: Vec<Obstacle> = bought.iter().map(|(.., obstacle, _)| *obstacle).collect();
    for (_, obstacle) in pressing {
        if !in_the_way.contains(&obstacle) && !idle.contains(&obstacle) {
            in_the_way.push(obstacle);
        }
    }
    let relief = match bought.into_iter().next() {
        Some((worth, left, obstacle, lifted)) if worth > enough => {
            question.relief(problem, requirement, obstacle, lifted, left)?
        }
        _ => None,
    };
    Ok((in_the_way, relief))
}

impl<'a> Question<'a> {
    /// `None` if the plan before rounding does not miss it.
    fn about(
        model: &'a Model,
        frozen: &Frozen,
        exact: &[f64],
        requirement: Requirement,
    ) -> Option<Self> {
        let mut windows = vec![Hold::Off; model.windows.len()];
        let (mash, misses) = if requirement == Requirement::MashPh {
            if frozen.acid_missing == 0.0 {
                return None;
            }
            let (missing, surplus) = model.acid_columns();
            (MashHold::Counted, vec![missing, surplus])
        } else {
            let asked = model
                .windows
                .iter()
                .position(|window| window.requirement == requirement)?;
            if exact[model.miss(asked)] < MISSED {
                return None;
            }
            for (index, window) in model.windows.iter().enumerate() {
                if window.priority <= model.windows[asked].priority {
                    windows[index] = Hold::AtMost(exact[model.miss(index)] + HAIR);
                }
            }
            windows[asked] = Hold::Counted;
            (frozen.mash(), vec![model.miss(asked)])
        };
        let all: Allowed = vec![true; model.additions.len()];
        Some(Self {
            model,
            program: model.program(mash, &windows, &all),
            objective: sum_of(model, &misses),
            windows,
            misses,
        })
    }

    fn asks_about_mash(&self) -> bool {
        self.misses.len() == 2
    }

    /// Whatever presses against the answer, and how hard.
    fn pressing(&self, answer: &Answer) -> Vec<(f64, Obstacle)> {
        let model = self.model;
        let mut pressing = Vec::new();
        for source in 0..model.sources {
            // A share at both bounds of no width can lean on either.
            let leans = answer.reduced[source];
            let share = answer.columns[source];
            let (low, high) = (self.program.lower[source], self.program.upper[source]);
            if leans > PRESSURE && share - low < 1e-4 && low > 0.0 {
                pressing.push((leans, Obstacle::Limit(Limit::LowestShare(source))));
            }
            if leans < -PRESSURE && high - share < 1e-4 && high < 1.0 {
                pressing.push((-leans, Obstacle::Limit(Limit::HighestShare(source))));
            }
        }
        for (index, hard) in model.hard.iter().enumerate() {
            let pressure = answer.pressures[Model::FIRST_LIMIT + index];
            if pressure > PRESSURE {
                pressing.push((pressure, Obstacle::Limit(hard.limit)));
            }
        }
        let pressure = answer.pressures[Model::MASH_ROW].abs();
        if !self.asks_about_mash() && pressure > PRESSURE {
            pressing.push((pressure, Obstacle::Requirement(Requirement::MashPh)));
        }
        for (index, window) in model.windows.iter().enumerate() {
            let pressure = model
                .window_rows(&self.windows, index)
                .map(|row| answer.pressures[row].abs())
                .fold(0.0, f64::max);
            if pressure > PRESSURE && self.windows[index] != Hold::Counted {
                pressing.push((pressure, Obstacle::Requirement(window.requirement)));
            }
        }
        pressing
    }

    fn without(&self, obstacle: Obstacle) -> Program {
        let model = self.model;
        let mut program = self.program.clone();
        let lift = |row: &mut Row| {
            row.low = f64::NEG_INFINITY;
            row.high = f64::INFINITY;
        };
        match obstacle {
            Obstacle::Limit(Limit::LowestShare(source)) => program.lower[source] = 0.0,
            Obstacle::Limit(Limit::HighestShare(source)) => {
                program.upper[source] = f64::INFINITY;
            }
            Obstacle::Limit(limit) => {
                for (hard, row) in model
                    .hard
                    .iter()
                    .zip(&mut program.rows[Model::FIRST_LIMIT..])
                {
                    if hard.limit == limit {
                        lift(row);
                    }
                }
            }
            Obstacle::Requirement(Requirement::MashPh) => {
                let (missing, surplus) = model.acid_columns();
                program.upper[missing] = f64::INFINITY;
                program.upper[surplus] = f64::INFINITY;
            }
            Obstacle::Requirement(requirement) => {
                for index in self.windows_of(requirement) {
                    program.upper[model.miss(index)] = f64::INFINITY;
                }
            }
        }
        program
    }

    fn windows_of(&self, requirement: Requirement) -> impl Iterator<Item = usize> {
        self.model
            .windows
            .iter()
            .enumerate()
            .filter(move |(_, window)| window.requirement == requirement)
            .map(|(index, _)| index)
    }

    /// How far the obstacle must give way for that, and no further.
    fn relief(
        &self,
        problem: &Problem,
        requirement: Requirement,
        obstacle: Obstacle,
        mut lifted: Program,
        best: f64,
    ) -> Result<Option<Relief>, PlanError> {
        let model = self.model;
        let mut held = self.objective.linear.clone();
        held.resize(model.width(), 0.0);
        lifted.rows.push(Row {
            coefficients: held,
            low: f64::NEG_INFINITY,
            high: best * (1.0 + HAIR) + HAIR,
        });
        let mut least = vec![0.0; model.width()];
        match obstacle {
            Obstacle::Limit(Limit::LowestShare(source)) => least[source] = -1.0,
            Obstacle::Limit(Limit::HighestShare(source)) => least[source] = 1.0,
            Obstacle::Limit(limit) => {
                for hard in model.hard.iter().filter(|hard| hard.limit == limit) {
                    least[..hard.coefficients.len()].copy_from_slice(&hard.coefficients);
                }
            }
            Obstacle::Requirement(Requirement::MashPh) => {
                let (missing, surplus) = model.acid_columns();
                least[missing] = 1.0;
                least[surplus] = 1.0;
            }
            Obstacle::Requirement(other) => {
                for index in self.windows_of(other) {
                    least[model.miss(index)] = 1.0;
                }
            }
        }
        let Ok(answer) = lifted.solve_roughly(&Objective::linear(least)) else {
            return Ok(None);
        };
        let shares = model.shares(&answer.columns);
        let doses = model.doses(&answer.columns);
        let outcome = evaluate(problem, &shares, &doses)?;
        let to = match obstacle {
            Obstacle::Limit(Limit::LowestShare(source) | Limit::HighestShare(source)) => {
                Some(Measure::Share(shares[source]))
            }
            Obstacle::Limit(limit) => outcome
                .broken
                .iter()
                .find(|broken| broken.limit == limit)
                .map(|broken| broken.reaches),
            Obstacle::Requirement(other) => outcome.finding(other).map(|finding| finding.value),
        };
        Ok(to
            .zip(stands(&outcome, requirement))
            .map(|(to, leaves)| Relief {
                obstacle,
                to,
                leaves,
            }))
    }
}

fn stands(outcome: &Outcome, requirement: Requirement) -> Option<Standing> {
    outcome
        .finding(requirement)
        .map(|finding: &Finding| finding.standing)
}

/// The limits that cannot be kept all at once.
pub(super) fn conflict(problem: &Problem, model: &Model) -> Result<Conflict, PlanError> {
    let mut elastic = Elastic::of(model);
    let answer = settled(elastic.program.solve(&elastic.objective()))?;
    let shares = model.shares(&answer.columns);
    let doses = model.doses(&answer.columns);
    let mut broken: Vec<(f64, Broken)> = evaluate(problem, &shares, &doses)?
        .broken
        .into_iter()
        .map(|broken| (elastic.passed(&answer, broken.limit), broken))
        .collect();
    broken.sort_by(|(a, _), (b, _)| b.total_cmp(a));
    let mut left_when_lifted = Vec::new();
    if let Some((_, worst)) = broken.first() {
        elastic.lifted = Some(worst.limit);
        let answer = settled(elastic.program.solve(&elastic.objective()))?;
        left_when_lifted = elastic
            .limits
            .iter()
            .copied()
            .filter(|limit| *limit != worst.limit && elastic.passed(&answer, *limit) > MISSED)
            .collect();
    }
    Ok(Conflict {
        broken: broken.into_iter().map(|(_, broken)| broken).collect(),
        left_when_lifted,
    })
}

/// Every limit may be passed, each by a column of its own.
struct Elastic {
    program: Program,
    limits: Vec<Limit>,
    first: usize,
    /// The one that may be passed freely.
    lifted: Option<Limit>,
}

impl Elastic {
    fn of(model: &Model) -> Self {
        let windows = vec![Hold::Off; model.windows.len()];
        let all: Allowed = vec![true; model.additions.len()];
        let mut program = model.program(MashHold::Counted, &windows, &all);
        let first = model.width();
        let width = first + model.hard.len() + 2 * model.sources;
        let mut limits = Vec::new();
        for row in &mut program.rows {
            row.coefficients.resize(width, 0.0);
        }
        for (index, hard) in model.hard.iter().enumerate() {
            program.rows[Model::FIRST_LIMIT + index].coefficients[first + index] = -1.0;
            limits.push(hard.limit);
        }
        for source in 0..model.sources {
            let bounds = (program.lower[source], program.upper[source]);
            let sides = [
                (Limit::LowestShare(source), 1.0, bounds.0, f64::INFINITY),
                (
                    Limit::HighestShare(source),
                    -1.0,
                    f64::NEG_INFINITY,
                    bounds.1,
                ),
            ];
            for (limit, sign, low, high) in sides {
                let mut coefficients = vec![0.0; width];
                coefficients[source] = 1.0;
                coefficients[first + limits.len()] = sign;
                program.rows.push(Row {
                    coefficients,
                    low,
                    high,
                });
                limits.push(limit);
            }
            program.lower[source] = 0.0;
            program.upper[source] = f64::INFINITY;
        }
        program.lower.resize(width, 0.0);
        program.upper.resize(width, f64::INFINITY);
        Self {
            program,
            limits,
            first,
            lifted: None,
        }
    }

    fn objective(&self) -> Objective {
        let mut linear = vec![0.0; self.first];
        linear.extend(self.limits.iter().map(|limit| {
            // Lifted ones cost next to nothing, so that they go no further than they must.
            if self.lifted == Some(*limit) {
                1e-6
            } else {
                1.0
            }
        }));
        Objective::linear(linear)
    }

    fn passed(&self, answer: &Answer, wanted: Limit) -> f64 {
        self.limits
            .iter()
            .position(|limit| *limit == wanted)
            .map_or(0.0, |place| answer.columns[self.first + place])
    }
}
