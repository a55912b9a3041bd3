//! Whether a linear program has any answer, quickly and many times over.
//!
//! A bounded simplex on a dense tableau that starts each time where the last one ended.
//! It only tells which additions and sources suffice and orders them; what is brewed
//! with comes from [`Program::solve`].

use super::program::{Program, Row};

/// Bounds passed by less than this, all together, are kept. Source: assumed; a tenth of
/// the room that held optima are given.
const KEPT: f64 = 1e-7;

/// Slopes and pivots below this are rounding.
const NOUGHT: f64 = 1e-9;

/// After this many pivots the tableau is built again from the rows.
const STALE: usize = 400;

/// Steps before the search for an entering column turns to the first instead of the
/// steepest, which cannot go round in circles, and before it gives up.
const PATIENCE: (usize, usize) = (200, 600);

/// How a look at a program ended.
#[derive(Clone, Debug, PartialEq)]
pub(super) enum Found {
    /// There are answers; the least of the objective.
    Least(f64),
    /// There is none; of each column, how much the proof would weaken, relative to
    /// itself, if the column could grow.
    Nothing(Vec<f64>),
    /// Given up.
    Lost,
}

pub(super) struct Simplex {
    rows: Vec<Row>,
    /// Of the columns, then of the rows.
    lower: Vec<f64>,
    upper: Vec<f64>,
    /// Which of them depends on the others, row by row, and which are free to be set.
    dependent: Vec<usize>,
    free: Vec<usize>,
    at: Vec<f64>,
    /// Each dependent one as a sum of the free ones.
    tableau: Vec<Vec<f64>>,
    pivots: usize,
}

impl Simplex {
    pub(super) fn of(program: Program) -> Self {
        let columns = program.lower.len();
        let (mut lower, mut upper) = (program.lower, program.upper);
        lower.extend(program.rows.iter().map(|row| row.low));
        upper.extend(program.rows.iter().map(|row| row.high));
        let mut simplex = Self {
            at: vec![0.0; lower.len()],
            dependent: Vec::new(),
            free: (0..columns).collect(),
            tableau: Vec::new(),
            rows: program.rows,
            lower,
            upper,
            pivots: 0,
        };
        simplex.rebuild();
        simplex
    }

    fn rebuild(&mut self) {
        let columns = self.lower.len() - self.rows.len();
        self.free = (0..columns).collect();
        self.dependent = (columns..self.lower.len()).collect();
        self.tableau = self.rows.iter().map(|r| r.coefficients.clone()).collect();
        self.pivots = 0;
    }

    /// Moves the bounds of a column.
    pub(super) fn bound(&mut self, column: usize, lower: f64, upper: f64) {
        self.lower[column] = lower;
        self.upper[column] = upper;
    }

    /// The least of `objective` within the bounds as they are now.
    pub(super) fn least(&mut self, objective: &[f64]) -> Found {
        if self.pivots > STALE {
            self.rebuild();
        }
        for &one in &self.free {
            self.at[one] = self.at[one].clamp(self.lower[one], self.upper[one]);
            if !self.at[one].is_finite() {
                self.at[one] = 0.0;
            }
        }
        for step in 0..PATIENCE.1 {
            self.place();
            let passed = self.passed();
            let outside: f64 = passed.iter().map(|(_, by)| by).sum();
            let slopes = if outside > KEPT {
                let weights: Vec<f64> = passed.iter().map(|(sign, _)| *sign).collect();
                self.slopes(&weights, &[])
            } else {
                let weights: Vec<f64> = self
                    .dependent
                    .iter()
                    .map(|&one| objective.get(one).copied().unwrap_or(0.0))
                    .collect();
                self.slopes(&weights, objective)
            };
            let Some((entering, direction)) = self.entering(&slopes, step > PATIENCE.0) else {
                if outside <= KEPT {
                    return Found::Least(objective.iter().zip(&self.at).map(|(c, x)| c * x).sum());
                }
                return Found::Nothing(self.helpers(&slopes, &passed, outside));
            };
            if !self.advance(entering, direction, outside > KEPT) {
                return Found::Lost;
            }
        }
        Found::Lost
    }

    fn place(&mut self) {
        for (row, &one) in self.tableau.iter().zip(&self.dependent) {
            self.at[one] = row
                .iter()
                .zip(&self.free)
                .map(|(a, &f)| a * self.at[f])
                .sum();
        }
    }

    /// Of each dependent one, on which side it is outside its bounds and how far.
    fn passed(&self) -> Vec<(f64, f64)> {
        self.dependent
            .iter()
            .map(|&one| {
                let (above, below) = (
                    self.at[one] - self.upper[one],
                    self.lower[one] - self.at[one],
                );
                if above > NOUGHT {
                    (1.0, above)
                } else if below > NOUGHT {
                    (-1.0, below)
                } else {
                    (0.0, 0.0)
                }
            })
            .collect()
    }

    fn slopes(&self, weights: &[f64], own: &[f64]) -> Vec<f64> {
        let mut slopes: Vec<f64> = self
            .free
            .iter()
            .map(|&one| own.get(one).copied().unwrap_or(0.0))
            .collect();
        for (row, weight) in self.tableau.iter().zip(weights) {
            if *weight != 0.0 {
                for (slope, a) in slopes.iter_mut().zip(row) {
                    *slope += weight * a;
                }
            }
        }
        slopes
    }

    /// A free one that is worth moving, and which way: the steepest, or the first.
    fn entering(&self, slopes: &[f64], first: bool) -> Option<(usize, f64)> {
        let worth_moving = self
            .free
            .iter()
            .zip(slopes)
            .enumerate()
            .filter(|(_, (one, slope))| {
                let (at, low, high) = (self.at[**one], self.lower[**one], self.upper[**one]);
                **slope < -NOUGHT && at < high || **slope > NOUGHT && at > low
            });
        let best = if first {
            worth_moving.min_by_key(|(_, (one, _))| **one)
        } else {
            worth_moving.max_by(|(_, (_, a)), (_, (_, b))| a.abs().total_cmp(&b.abs()))
        };
        best.map(|(place, (_, slope))| (place, -slope.signum()))
    }

    /// Moves a free one until something is in its way. `false` if nothing is.
    fn advance(&mut self, entering: usize, direction: f64, to_get_inside: bool) -> bool {
        let one = self.free[entering];
        let mut step = if direction > 0.0 {
            self.upper[one] - self.at[one]
        } else {
            self.at[one] - self.lower[one]
        };
        let mut leaving: Option<(usize, f64)> = None;
        for (place, (row, &other)) in self.tableau.iter().zip(&self.dependent).enumerate() {
            let rate = row[entering] * direction;
            if rate.abs() < NOUGHT {
                continue;
            }
            let (x, low, high) = (self.at[other], self.lower[other], self.upper[other]);
            let bound = if rate > 0.0 {
                if x < low - NOUGHT { low } else { high }
            } else if x > high + NOUGHT {
                high
            } else {
                low
            };
            // Outside already and going further out: it is weighed in the slope.
            let outward = rate > 0.0 && x > high + NOUGHT || rate < 0.0 && x < low - NOUGHT;
            if outward && to_get_inside || !bound.is_finite() {
                continue;
            }
            let room = ((bound - x) / rate).max(0.0);
            let sturdier =
                leaving.is_none_or(|(held, _)| rate.abs() > self.tableau[held][entering].abs());
            if room < step - NOUGHT || room <= step + NOUGHT && sturdier {
                step = step.min(room);
                leaving = Some((place, bound));
            }
        }
        if !step.is_finite() {
            return false;
        }
        match leaving {
            None => {
                self.at[one] = if direction > 0.0 {
                    self.upper[one]
                } else {
                    self.lower[one]
                };
            }
            Some((place, bound)) => {
                self.at[self.dependent[place]] = bound;
                self.pivot(place, entering);
            }
        }
        true
    }

    fn pivot(&mut self, place: usize, entering: usize) {
        let mut row = std::mem::take(&mut self.tableau[place]);
        let by = row[entering];
        for a in &mut row {
            *a = -*a / by;
        }
        row[entering] = 1.0 / by;
        for other in &mut self.tableau {
            if other.is_empty() || other[entering] == 0.0 {
                continue;
            }
            let factor = std::mem::replace(&mut other[entering], 0.0);
            for (a, b) in other.iter_mut().zip(&row) {
                *a += factor * b;
            }
        }
        self.tableau[place] = row;
        std::mem::swap(&mut self.dependent[place], &mut self.free[entering]);
        self.pivots += 1;
    }

    fn helpers(&self, slopes: &[f64], passed: &[(f64, f64)], outside: f64) -> Vec<f64> {
        let mut helpers = vec![0.0; self.lower.len() - self.rows.len()];
        for (&one, slope) in self.free.iter().zip(slopes) {
            if let Some(helper) = helpers.get_mut(one) {
                *helper = slope / outside;
            }
        }
        // One that depends on others and is too high helps by being allowed to be.
        for (&one, (sign, _)) in self.dependent.iter().zip(passed) {
            if let Some(helper) = helpers.get_mut(one) {
                *helper = -sign.max(0.0) / outside;
            }
        }
        helpers
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn row(coefficients: &[f64], low: f64, high: f64) -> Row {
        Row {
            coefficients: coefficients.to_vec(),
            low,
            high,
        }
    }

    #[test]
    fn a_textbook_linear_program_reaches_its_corner() {
        // Hillier and Lieberman, Introduction to Operations Research, the first example:
        // 3x + 5y is at most 36 with x ≤ 4, 2y ≤ 12, 3x + 2y ≤ 18; by hand, without y
        // it is at most 12, and with x + y ≥ 9 nothing is possible.
        let program = Program {
            lower: vec![0.0; 2],
            upper: vec![f64::INFINITY; 2],
            rows: vec![
                row(&[1.0, 0.0], f64::NEG_INFINITY, 4.0),
                row(&[0.0, 2.0], f64::NEG_INFINITY, 12.0),
                row(&[3.0, 2.0], f64::NEG_INFINITY, 18.0),
            ],
        };
        let mut simplex = Simplex::of(program.clone());
        assert_eq!(simplex.least(&[-3.0, -5.0]), Found::Least(-36.0));
        simplex.bound(1, 0.0, 0.0);
        assert_eq!(simplex.least(&[-3.0, -5.0]), Found::Least(-12.0));
        simplex.bound(1, 0.0, f64::INFINITY);
        assert_eq!(simplex.least(&[-3.0, -5.0]), Found::Least(-36.0));
        let mut impossible = program;
        impossible.rows.push(row(&[1.0, 1.0], 9.0, f64::INFINITY));
        assert!(matches!(
            Simplex::of(impossible).least(&[0.0, 0.0]),
            Found::Nothing(_)
        ));
    }

    #[test]
    fn a_proof_names_what_could_weaken_it() {
        // x + y ≥ 5 with x ≤ 3: impossible while y is held at nought, and only y can help.
        let mut simplex = Simplex::of(Program {
            lower: vec![0.0; 3],
            upper: vec![3.0, 9.0, 9.0],
            rows: vec![row(&[1.0, 1.0, 0.0], 5.0, f64::INFINITY)],
        });
        assert_eq!(simplex.least(&[0.0, 1.0, 1.0]), Found::Least(2.0));
        simplex.bound(1, 0.0, 0.0);
        simplex.bound(2, 0.0, 0.0);
        let Found::Nothing(helpers) = simplex.least(&[0.0, 1.0, 1.0]) else {
            panic!("found");
        };
        assert!(helpers[1] < -1e-3 && helpers[2] >= 0.0, "{helpers:?}");
    }
}
