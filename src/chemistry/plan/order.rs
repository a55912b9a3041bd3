//! The strict order: each step is solved with the earlier ones held at their optimum.

use std::cmp::Ordering;

use crate::material::{Substance, Vessel};
use crate::quantity::{Meq, Score};

use super::fewest;
use super::model::{Allowed, HAIR, Hold, MashHold, Model};
use super::problem::Priority;
use super::program::{Answer, NoAnswer, Objective, Program, Row};
use super::{PlanError, Reached, Way};

/// What the steps before the way have reached, to be held.
pub(super) struct Frozen {
    /// Acid missing, meq per litre of mash liquor.
    pub(super) acid_missing: f64,
    /// How far the windows of each priority are missed together.
    pub(super) missed: [f64; 3],
    /// Discouraged materials, g or mL per litre.
    pub(super) discouraged: f64,
    allowed: Allowed,
}

/// An optimum as it is held in the steps after it: with a hair of room, for an
/// interior-point method to stand in.
fn held(optimum: f64) -> f64 {
    optimum * (1.0 + HAIR) + HAIR
}

/// Limits, mash pH, windows, discouraged materials. `None` if the limits cannot be kept.
pub(super) fn settle(model: &Model) -> Result<Option<Frozen>, PlanError> {
    let all: Allowed = vec![true; model.additions.len()];
    let gladly: Allowed = model.discouraged[model.sources..]
        .iter()
        .map(|discouraged| *discouraged == 0.0)
        .collect();
    // Usually everything can be met with what is gladly used: then nothing is missed.
    let everything = Frozen {
        acid_missing: 0.0,
        missed: [0.0; 3],
        discouraged: 0.0,
        allowed: gladly.clone(),
    };
    let any = Objective {
        linear: vec![0.0; model.width()],
        squares: model.taste(),
    };
    if everything.program(model, &all).solve(&any).is_ok() {
        return Ok(Some(everything));
    }

    let mut windows = vec![Hold::Off; model.windows.len()];
    let (missing, surplus) = model.acid_columns();
    let objective = sum_of(model, &[missing, surplus]);
    let mash = match model
        .program(MashHold::Counted, &windows, &all)
        .solve(&objective)
    {
        Ok(answer) => answer,
        Err(NoAnswer::Infeasible { .. }) => return Ok(None),
        Err(NoAnswer::Unsettled) => return Err(PlanError::Unsettled),
    };
    let acid_missing = if mash.value > HAIR {
        mash.columns[missing] - mash.columns[surplus]
    } else {
        0.0
    };

    let mut frozen = Frozen {
        acid_missing,
        missed: [0.0; 3],
        discouraged: 0.0,
        allowed: all.clone(),
    };
    for (level, priority) in Priority::ALL.into_iter().enumerate() {
        let columns = level_columns(model, priority);
        if columns.is_empty() {
            continue;
        }
        for (hold, window) in windows.iter_mut().zip(&model.windows) {
            if window.priority == priority {
                *hold = Hold::Counted;
            }
        }
        let mut program = model.program(frozen.mash(), &windows, &all);
        frozen.add_sums(model, &windows, 0.0, &mut program);
        let answer = settled(program.solve(&sum_of(model, &columns)))?;
        if answer.value > HAIR {
            frozen.missed[level] = answer.value;
        } else {
            for (hold, window) in windows.iter_mut().zip(&model.windows) {
                if window.priority == priority {
                    *hold = Hold::AtMost(HAIR);
                }
            }
        }
    }

    if model.discouraged.iter().any(|c| *c > 0.0) {
        let mut objective = model.discouraged.clone();
        objective.resize(model.width(), 0.0);
        let answer = settled(
            frozen
                .program(model, &all)
                .solve(&Objective::linear(objective)),
        )?;
        if answer.value > HAIR {
            frozen.discouraged = answer.value;
        } else {
            frozen.allowed = gladly;
        }
    }
    Ok(Some(frozen))
}

impl Frozen {
    pub(super) fn mash(&self) -> MashHold {
        MashHold::Held(self.acid_missing)
    }

    /// Everything held, with only some additions allowed.
    pub(super) fn program(&self, model: &Model, allowed: &Allowed) -> Program {
        self.program_with(model, allowed, 0.0)
    }

    /// Everything held, but each window may be missed by `room` more, relative to its
    /// scale, and a mash that misses its target by as many meq/L.
    pub(super) fn program_with(&self, model: &Model, allowed: &Allowed, room: f64) -> Program {
        let windows: Vec<Hold> = model
            .windows
            .iter()
            .map(|window| {
                if self.missed[window.priority as usize] > 0.0 {
                    Hold::Counted
                } else {
                    Hold::AtMost(HAIR.max(room))
                }
            })
            .collect();
        let both: Allowed = self
            .allowed
            .iter()
            .zip(allowed)
            .map(|(a, b)| *a && *b)
            .collect();
        let mash = if self.acid_missing == 0.0 {
            self.mash()
        } else {
            MashHold::Held(self.acid_missing + room.copysign(self.acid_missing))
        };
        let mut program = model.program(mash, &windows, &both);
        self.add_sums(model, &windows, room, &mut program);
        if self.discouraged > 0.0 {
            program.rows.push(at_most(
                model,
                model.discouraged.clone(),
                held(self.discouraged),
            ));
        }
        program
    }

    /// For each priority that is missed, that it be missed no further, but for `room` in
    /// each window.
    fn add_sums(&self, model: &Model, windows: &[Hold], room: f64, program: &mut Program) {
        for (level, priority) in Priority::ALL.into_iter().enumerate() {
            let columns = level_columns(model, priority);
            let counted = columns
                .iter()
                .all(|column| windows[column - model.miss(0)] == Hold::Counted);
            if self.missed[level] > 0.0 && counted {
                let objective = sum_of(model, &columns);
                let most = held(self.missed[level]) + room * columns.len() as f64;
                program.rows.push(at_most(model, objective.linear, most));
            }
        }
    }
}

fn level_columns(model: &Model, priority: Priority) -> Vec<usize> {
    (0..model.windows.len())
        .filter(|&window| model.windows[window].priority == priority)
        .map(|window| model.miss(window))
        .collect()
}

pub(super) fn sum_of(model: &Model, columns: &[usize]) -> Objective {
    let mut linear = vec![0.0; model.width()];
    for &column in columns {
        linear[column] = 1.0;
    }
    Objective::linear(linear)
}

pub(super) fn at_most(model: &Model, mut coefficients: Vec<f64>, most: f64) -> Row {
    coefficients.resize(model.width(), 0.0);
    Row {
        coefficients,
        low: f64::NEG_INFINITY,
        high: most,
    }
}

/// An answer that must exist, because the step before found one.
pub(super) fn settled(ended: Result<Answer, NoAnswer>) -> Result<Answer, PlanError> {
    ended.map_err(|_| PlanError::Unsettled)
}

/// Two choices that differ by less than this, relative, are equals: a little above the
/// solver's noise.
const EQUALS: f64 = 1e-8;

/// The optimum in one way.
pub(super) struct Chosen {
    pub(super) columns: Vec<f64>,
    /// What the way looks at.
    pub(super) by: f64,
    /// Distance to what is preferred.
    pub(super) distance: f64,
    /// Where and what, where that had to be chosen from a list: between equals the earlier
    /// vessel is taken, then the earlier substance, whatever the order of the shelf.
    pub(super) places: Vec<(Vessel, Substance)>,
}

impl Chosen {
    /// Whether this one is to be taken rather than another.
    pub(super) fn beats(&self, other: &Self) -> bool {
        let order = |a: f64, b: f64| {
            if (a - b).abs() <= EQUALS * (1.0 + b.abs()) {
                Ordering::Equal
            } else {
                a.total_cmp(&b)
            }
        };
        order(self.by, other.by)
            .then(order(self.distance, other.distance))
            .then(self.places.cmp(&other.places))
            .is_lt()
    }

    pub(super) fn reached(&self, model: &Model, frozen: &Frozen) -> Reached {
        Reached {
            acid_missing: Meq::clamped(frozen.acid_missing * model.mash_litres),
            missed: frozen.missed.map(Score::clamped),
            discouraged: Score::clamped(frozen.discouraged),
            chosen_by: Score::clamped(self.by),
            distance: Score::clamped(self.distance),
        }
    }
}

/// Chooses among everything the frozen steps leave open.
///
/// Where acid and base would both go to the mash, one of them is left out if the
/// earlier steps can do without it: they only undo each other.
pub(super) fn choose(model: &Model, frozen: &Frozen, way: Way) -> Result<Chosen, PlanError> {
    let all: Allowed = vec![true; model.additions.len()];
    let chosen = in_way(model, frozen, way, &all)?.ok_or(PlanError::Unsettled)?;
    if !model.opposes_itself(&chosen.columns) {
        return Ok(chosen);
    }
    let mut best: Option<Chosen> = None;
    for opposed in [&model.bases, &model.acids] {
        let without: Allowed = opposed.iter().map(|is| !is).collect();
        if let Some(other) = in_way(model, frozen, way, &without)?
            && best.as_ref().is_none_or(|best| other.beats(best))
        {
            best = Some(other);
        }
    }
    Ok(best.unwrap_or(chosen))
}

/// `None` if the frozen steps cannot be kept with what is allowed.
fn in_way(
    model: &Model,
    frozen: &Frozen,
    way: Way,
    allowed: &Allowed,
) -> Result<Option<Chosen>, PlanError> {
    let mut program = frozen.program(model, allowed);
    let chosen_by = match way {
        Way::FewestAdditions => return fewest::fewest(model, frozen, allowed),
        Way::ClosestToPreferred => None,
        Way::LeastBlendingWater => Some(&model.blending),
        Way::Cheapest => Some(&model.cost),
    };
    let mut by = 0.0;
    let linear = chosen_by.filter(|linear| linear.iter().any(|c| *c != 0.0));
    if let Some(linear) = linear {
        // Counted in its own size, so that pennies and thousands are held as closely.
        let size = linear.iter().fold(0.0, |size: f64, c| size.max(c.abs()));
        let mut scaled: Vec<f64> = linear.iter().map(|c| c / size).collect();
        scaled.resize(model.width(), 0.0);
        match program.solve(&Objective::linear(scaled.clone())) {
            Ok(answer) => {
                by = answer.value * size;
                program
                    .rows
                    .push(at_most(model, scaled, held(answer.value)));
            }
            Err(NoAnswer::Infeasible { .. }) => return Ok(None),
            Err(NoAnswer::Unsettled) => return Err(PlanError::Unsettled),
        }
    }
    match closest(model, &program) {
        Ok(answer) => Ok(Some(Chosen {
            distance: answer.value,
            columns: answer.columns,
            by,
            places: Vec::new(),
        })),
        Err(NoAnswer::Infeasible { .. }) if linear.is_none() => Ok(None),
        Err(_) => Err(PlanError::Unsettled),
    }
}

/// The treatment nearest to what is preferred.
pub(super) fn closest(model: &Model, program: &Program) -> Result<Answer, NoAnswer> {
    program.solve(&Objective {
        linear: vec![0.0; model.width()],
        squares: model.taste(),
    })
}
