//! The last step of the strict order: of treatments that cannot be told from the best
//! one, the one with the fewest lines.
//!
//! A line is a material in one vessel or a source in use. `lines` searches for them; after
//! [`MOST_TRIALS`] sets the best found so far is taken, which never has more lines than
//! the optimum it started from. `shares` then rounds.

use std::cmp::Ordering;

use crate::material::{Role, Vessel};

use super::lines::{MOST_TRIALS, Search, Set, places};
use super::model::{Allowed, HAIR, Model, TRACE};
use super::order::{Chosen, Frozen, at_most};
use super::problem::Problem;
use super::program::{Answer, NoAnswer, Objective, Program, Row, dot};
use super::shares::LEAST_SHARE;
use super::simplex::Simplex;
use super::{PlanError, Way};

/// A figure that has a preferred value stays this near to where the best treatment puts
/// it: mg/L, or a share of itself if that is more. Source: assumed; about what two
/// laboratories, or two weighings and a water meter, differ by.
const FIGURE_BAND: (f64, f64) = (1.0, 0.02);

/// A window missed by less than this is met, relative to its scale: 0.1 mg/L in 100.
const MISSED: f64 = 1e-3;

/// Blending water above the least, as a share of the liquor. Source: assumed; no finer
/// than a tank is filled.
const BLENDING_BAND: f64 = 0.005;

/// Cost above the least, relative. Source: assumed; less than prices are known to.
const COST_BAND: f64 = 0.01;

/// Weight of a gram or a millilitre per litre beside relative distances from what is
/// preferred. Source: assumed; it decides between what is equally near.
const AMOUNT: f64 = 1e-3;

/// What a simple treatment must still keep beside the frozen steps.
pub(super) struct Bands {
    pub(super) rows: Vec<Row>,
    /// How far each window may be missed.
    misses: Vec<f64>,
    /// Additions at most.
    most: Option<u32>,
}

impl Bands {
    fn of(model: &Model, chosen: &Chosen, way: Way) -> Self {
        let band = |index: usize| {
            let window = &model.windows[index];
            let figure = window
                .preferred
                .as_ref()
                .or(window.low.as_ref())
                .or(window.high.as_ref());
            let figure = figure.map_or(0.0, |(row, _)| dot(row, &chosen.columns));
            (FIGURE_BAND.0 / window.scale).max(FIGURE_BAND.1 * figure.abs())
        };
        let misses = (0..model.windows.len())
            .map(|index| match model.windows[index].missed(&chosen.columns) {
                missed if missed > MISSED => missed + band(index),
                missed => missed + 10.0 * HAIR,
            })
            .collect();
        let mut rows = Vec::new();
        match way {
            Way::FewestAdditions => {}
            Way::ClosestToPreferred => {
                for (index, window) in model.windows.iter().enumerate() {
                    if let Some((row, _)) = &window.preferred {
                        let at = dot(row, &chosen.columns);
                        let mut coefficients = row.clone();
                        coefficients.resize(model.width(), 0.0);
                        rows.push(Row {
                            coefficients,
                            low: at - band(index),
                            high: at + band(index),
                        });
                    }
                }
            }
            Way::LeastBlendingWater => {
                let most = chosen.by + BLENDING_BAND;
                rows.push(at_most(model, model.blending.clone(), most));
            }
            Way::Cheapest => {
                let size = model
                    .cost
                    .iter()
                    .fold(f64::MIN_POSITIVE, |a, c| a.max(c.abs()));
                let most = chosen.by / size * (1.0 + COST_BAND) + HAIR;
                let scaled = model.cost.iter().map(|c| c / size).collect();
                rows.push(at_most(model, scaled, most));
            }
        }
        Self {
            rows,
            misses,
            most: (way == Way::FewestAdditions).then_some(chosen.by.round() as u32),
        }
    }

    /// Everything held and the bands, with `room` more to miss windows in.
    pub(super) fn program(&self, model: &Model, frozen: &Frozen, room: f64) -> Program {
        let all: Allowed = vec![true; model.additions.len()];
        let mut program = frozen.program_with(model, &all, room);
        program.rows.extend(self.rows.iter().cloned());
        for (index, most) in self.misses.iter().enumerate() {
            let column = model.miss(index);
            if program.upper[column] > most + room {
                program.upper[column] = most + room;
            }
        }
        program
    }
}

/// Lines in an order that does not depend on how the problem lists them.
fn canonical(problem: &Problem, model: &Model) -> Vec<usize> {
    let figures = |source: usize| {
        let source = &problem.sources[source];
        let water = &source.water;
        let mut figures = vec![
            f64::from(u8::from(source.blending)),
            water.alkalinity.get(),
            water.carbon.get(),
            source.price.get(),
            source.lowest.get(),
            source.highest.get(),
        ];
        figures.extend(water.ions.iter().map(|(_, amount)| amount.get()));
        figures
    };
    let mut sources: Vec<usize> = (0..model.sources).collect();
    sources.sort_by(|&a, &b| compare(&figures(a), &figures(b)));
    let mut additions: Vec<usize> = (0..model.additions.len()).collect();
    additions.sort_by(|&a, &b| {
        let (a, b) = (model.additions[a], model.additions[b]);
        let (lot, other) = (&problem.shelf[a.material], &problem.shelf[b.material]);
        (a.vessel, a.substance, &lot.name)
            .cmp(&(b.vessel, b.substance, &other.name))
            .then(lot.price.get().total_cmp(&other.price.get()))
    });
    sources.extend(additions.iter().map(|place| model.sources + place));
    sources
}

pub(super) fn compare(a: &[f64], b: &[f64]) -> Ordering {
    let unequal = a
        .iter()
        .zip(b)
        .map(|(a, b)| a.total_cmp(b))
        .find(|order| order.is_ne());
    unequal.unwrap_or(Ordering::Equal)
}

/// The best treatment made as simple as it can be.
pub(super) struct Simplest<'a> {
    pub(super) model: &'a Model,
    pub(super) frozen: &'a Frozen,
    pub(super) bands: Bands,
    /// The column of each line.
    pub(super) lines: Vec<usize>,
}

impl<'a> Simplest<'a> {
    pub(super) fn of(
        problem: &Problem,
        model: &'a Model,
        frozen: &'a Frozen,
        chosen: &Chosen,
        way: Way,
    ) -> Self {
        Self {
            model,
            frozen,
            bands: Bands::of(model, chosen, way),
            lines: canonical(problem, model),
        }
    }

    /// Which columns may be used in the simplest treatment.
    pub(super) fn columns(&self, chosen: &Chosen) -> Vec<bool> {
        let used = self.used(&chosen.columns);
        let every = if self.lines.len() > Set::BITS as usize {
            None
        } else {
            self.undisputed(&chosen.columns)
        };
        let Some(set) = every else { return used };
        let mut allowed = vec![false; self.lines.len()];
        for place in places(set) {
            allowed[self.lines[place]] = true;
        }
        allowed
    }

    fn used(&self, columns: &[f64]) -> Vec<bool> {
        columns[..self.lines.len()]
            .iter()
            .map(|x| *x > TRACE)
            .collect()
    }

    /// The simplest set. Where it would bring acid and base together, one of them is left
    /// out if the bands can do without it.
    fn undisputed(&self, chosen: &[f64]) -> Option<Set> {
        let as_used = self.used(chosen).into_iter().filter(|used| *used).count();
        let search = |barred: Set| {
            self.search(chosen, barred)
                .filter(|(set, _)| set.count_ones() as usize <= as_used)
        };
        let mut barred: Set = 0;
        let mut best = search(barred)?;
        for vessels in [
            &[Vessel::LiquorTank, Vessel::Mash][..],
            &[Vessel::SpargeLiquor],
            &[Vessel::Kettle],
        ] {
            let [acids, bases] = [Role::Acid, Role::Base].map(|role| self.with_role(role, vessels));
            if best.0 & acids == 0 || best.0 & bases == 0 {
                continue;
            }
            let without = [acids, bases]
                .map(|opposed| search(barred | opposed).map(|found| (opposed, found)));
            let simpler = without.into_iter().flatten().min_by(|(_, a), (_, b)| {
                (a.0.count_ones().cmp(&b.0.count_ones())).then(a.1.total_cmp(&b.1))
            });
            if let Some((opposed, found)) = simpler {
                barred |= opposed;
                best = found;
            }
        }
        Some(best.0)
    }

    fn with_role(&self, role: Role, vessels: &[Vessel]) -> Set {
        self.set_of(|column| {
            column.checked_sub(self.model.sources).is_some_and(|place| {
                let addition = self.model.additions[place];
                vessels.contains(&addition.vessel) && addition.substance.role() == role
            })
        })
    }

    fn set_of(&self, belongs: impl Fn(usize) -> bool) -> Set {
        let places = self.lines.iter().enumerate();
        places
            .filter(|(_, column)| belongs(**column))
            .fold(0, |set, (place, _)| set | 1 << place)
    }

    /// The lines first, in their order, then what else there is, and the rows in an order
    /// of their own; two more columns for each preferred figure, how far it is above and
    /// below.
    pub(super) fn simplex(&self, program: &Program) -> (Simplex, Vec<f64>) {
        let model = self.model;
        let order: Vec<usize> = self
            .lines
            .iter()
            .copied()
            .chain(self.lines.len()..model.width())
            .collect();
        let moved = |figures: &[f64]| -> Vec<f64> {
            order
                .iter()
                .map(|&column| figures.get(column).copied().unwrap_or(0.0))
                .collect()
        };
        let mut lower = moved(&program.lower);
        let mut upper = moved(&program.upper);
        let mut rows: Vec<Row> = program
            .rows
            .iter()
            .map(|row| Row {
                coefficients: moved(&row.coefficients),
                ..*row
            })
            .collect();
        rows.sort_by(|a, b| compare(&a.coefficients, &b.coefficients));
        let mut objective = vec![0.0; model.width()];
        objective[model.sources..self.lines.len()].fill(AMOUNT);
        let preferred: Vec<&(Vec<f64>, f64)> = model
            .windows
            .iter()
            .filter_map(|window| window.preferred.as_ref())
            .collect();
        let width = model.width() + 2 * preferred.len();
        for (index, (coefficients, target)) in preferred.into_iter().enumerate() {
            let mut coefficients = moved(coefficients);
            coefficients.resize(width, 0.0);
            let above = model.width() + 2 * index;
            coefficients[above] = -1.0;
            coefficients[above + 1] = 1.0;
            rows.push(Row {
                coefficients,
                low: *target,
                high: *target,
            });
        }
        for row in &mut rows {
            row.coefficients.resize(width, 0.0);
        }
        lower.resize(width, 0.0);
        upper.resize(width, f64::INFINITY);
        objective.resize(width, 1.0);
        (Simplex::of(Program { lower, upper, rows }), objective)
    }

    fn search(&self, chosen: &[f64], barred: Set) -> Option<(Set, f64)> {
        let program = self.bands.program(self.model, self.frozen, 0.0);
        let (simplex, objective) = self.simplex(&program);
        let bounds: Vec<(f64, f64)> = self
            .lines
            .iter()
            .map(|&column| (program.lower[column], program.upper[column]))
            .collect();
        let used = self.used(chosen);
        let mut search = Search {
            simplex,
            objective,
            clauses: Vec::new(),
            usable: self.set_of(|column| program.upper[column] > 0.0) & !barred,
            forced: self.set_of(|column| program.lower[column] > 0.0),
            additions: self.set_of(|column| column >= self.model.sources),
            most: self.bands.most.unwrap_or(Set::BITS),
            bounds,
            left: MOST_TRIALS,
            best: None,
            hopeless: false,
        };
        let start = self.set_of(|column| used[column]) | search.forced;
        if start & barred == 0 {
            search.pare(
                start,
                &self
                    .lines
                    .iter()
                    .map(|&column| chosen[column])
                    .collect::<Vec<_>>(),
            );
        }
        search.deepen();
        search.best
    }

    /// The nearest to what is preferred with these columns. `shares` are put in as they
    /// are given.
    pub(super) fn nearest(
        &self,
        allowed: &[bool],
        shares: Option<&[f64]>,
        least_share: f64,
        room: f64,
    ) -> Result<Answer, NoAnswer> {
        let model = self.model;
        let mut program = self.bands.program(model, self.frozen, room);
        for (column, allowed) in allowed.iter().enumerate() {
            if !allowed {
                program.upper[column] = 0.0;
            } else if column < model.sources {
                let highest = program.upper[column];
                program.lower[column] = program.lower[column].max(least_share).min(highest);
            }
        }
        if let Some(shares) = shares {
            program.lower[..model.sources].copy_from_slice(shares);
            program.upper[..model.sources].copy_from_slice(shares);
        }
        program.solve(&Objective {
            linear: vec![0.0; model.width()],
            squares: model.taste(),
        })
    }
}

/// What the plan is settled on: columns, and shares that are whole per cents, tenths of
/// them where whole ones would break what the steps before have reached, or as exact as
/// they come where tenths would too.
pub(super) fn settled(
    problem: &Problem,
    model: &Model,
    frozen: &Frozen,
    chosen: &Chosen,
    way: Way,
) -> Result<Vec<f64>, PlanError> {
    let mut simplest = Simplest::of(problem, model, frozen, chosen, way);
    let allowed = simplest.columns(chosen);
    let exact = match simplest
        .nearest(&allowed, None, LEAST_SHARE, 0.0)
        .or_else(|_| simplest.nearest(&allowed, None, 0.0, 0.0))
    {
        Ok(answer) => answer.columns,
        Err(_) => chosen.columns.clone(),
    };
    if way == Way::LeastBlendingWater {
        simplest.bands.whole_blending(chosen.by);
    }
    Ok(simplest
        .with_round_shares(&allowed, &exact)
        .unwrap_or(exact))
}
