//! A small convex program, solved by an interior-point method.
//!
//! Minimise linear and squared terms over bounded columns and two-sided rows. Columns
//! whose bounds coincide are put in as constants, so a held or forbidden addition
//! costs nothing.

use clarabel::algebra::CscMatrix;
use clarabel::solver::{
    DefaultSettings, DefaultSettingsBuilder, DefaultSolver, IPSolver, NonnegativeConeT,
    SolverStatus, SupportedConeT, ZeroConeT,
};

/// `low` ≤ coefficients · columns ≤ `high`; an infinite side is no side.
#[derive(Clone, Debug)]
pub(super) struct Row {
    pub(super) coefficients: Vec<f64>,
    pub(super) low: f64,
    pub(super) high: f64,
}

/// `weight` · (coefficients · columns − `target`)².
#[derive(Clone, Debug)]
pub(super) struct Square {
    pub(super) coefficients: Vec<f64>,
    pub(super) target: f64,
    pub(super) weight: f64,
}

/// What is minimised.
#[derive(Clone, Debug, Default)]
pub(super) struct Objective {
    pub(super) linear: Vec<f64>,
    pub(super) squares: Vec<Square>,
}

impl Objective {
    pub(super) fn linear(coefficients: Vec<f64>) -> Self {
        Self {
            linear: coefficients,
            squares: Vec::new(),
        }
    }

    pub(super) fn value(&self, columns: &[f64]) -> f64 {
        let squares = self
            .squares
            .iter()
            .map(|square| {
                square.weight * (dot(&square.coefficients, columns) - square.target).powi(2)
            })
            .sum::<f64>();
        dot(&self.linear, columns) + squares
    }
}

/// Bounds and rows; the objective is given with each solve.
#[derive(Clone, Debug)]
pub(super) struct Program {
    pub(super) lower: Vec<f64>,
    pub(super) upper: Vec<f64>,
    pub(super) rows: Vec<Row>,
}

/// The best columns.
#[derive(Clone, Debug)]
pub(super) struct Answer {
    pub(super) columns: Vec<f64>,
    /// What the objective comes to.
    pub(super) value: f64,
    /// Pressure of each row: positive against its high side, negative against its low.
    pub(super) pressures: Vec<f64>,
    /// How the objective would change with each column, rows considered: positive
    /// where it leans on its lower bound, negative on its upper.
    pub(super) reduced: Vec<f64>,
}

/// Why there is no answer.
#[derive(Clone, Debug)]
pub(super) enum NoAnswer {
    /// Nothing satisfies all rows. `helpers` says of each column how much the proof of
    /// that would weaken if it could grow; only negative ones can help.
    Infeasible { helpers: Vec<f64> },
    /// The method gave up.
    Unsettled,
}

pub(super) fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(a, b)| a * b).sum()
}

/// Accuracy, and how far the rows are loosened, in turn. Held optima leave a thin room;
/// where the method gets stuck in it, a hair more room lets it through.
const ATTEMPTS: [(f64, f64); 4] = [(1e-10, 0.0), (1e-9, 1e-10), (1e-9, 1e-9), (1e-8, 1e-7)];

/// Both sides of a row nearer than this are an equation.
const EQUAL: f64 = 1e-12;

fn settings(tolerance: f64) -> DefaultSettings<f64> {
    DefaultSettingsBuilder::default()
        .verbose(false)
        .max_iter(100)
        .tol_gap_abs(tolerance)
        .tol_gap_rel(tolerance)
        .tol_feas(tolerance)
        .reduced_tol_gap_abs(10.0 * tolerance)
        .reduced_tol_gap_rel(10.0 * tolerance)
        .reduced_tol_feas(10.0 * tolerance)
        .max_threads(1)
        .presolve_enable(false)
        .build()
        .unwrap_or_default()
}

/// One line of A·x + s = b, of a row's low or high side or of a column's bound.
struct Line {
    /// (free column, coefficient)
    entries: Vec<(usize, f64)>,
    right: f64,
    /// The row it comes from and the sign it was given.
    row: Option<(usize, f64)>,
}

/// The same for an answer that is only talked about.
const ROUGH_ATTEMPTS: [(f64, f64); 2] = [(1e-7, 0.0), (1e-6, 1e-7)];

impl Program {
    pub(super) fn solve(&self, objective: &Objective) -> Result<Answer, NoAnswer> {
        self.attempts(objective, &ATTEMPTS)
    }

    /// To about a millionth, in fewer steps.
    pub(super) fn solve_roughly(&self, objective: &Objective) -> Result<Answer, NoAnswer> {
        self.attempts(objective, &ROUGH_ATTEMPTS)
    }

    fn attempts(&self, objective: &Objective, attempts: &[(f64, f64)]) -> Result<Answer, NoAnswer> {
        let mut ended = Err(NoAnswer::Unsettled);
        for &(tolerance, loosened) in attempts {
            ended = self.attempt(objective, tolerance, loosened);
            if !matches!(ended, Err(NoAnswer::Unsettled)) {
                break;
            }
        }
        ended
    }

    fn attempt(
        &self,
        objective: &Objective,
        tolerance: f64,
        loosened: f64,
    ) -> Result<Answer, NoAnswer> {
        let free: Vec<usize> = (0..self.lower.len())
            .filter(|&column| self.upper[column] - self.lower[column] > EQUAL)
            .collect();
        let held: Vec<f64> = (0..self.lower.len())
            .map(|column| {
                if self.upper[column] - self.lower[column] > EQUAL {
                    0.0
                } else {
                    self.lower[column]
                }
            })
            .collect();
        let (equations, lines) = self.lines(&free, &held, loosened);
        let mut all = equations;
        let equations = all.len();
        all.extend(lines);

        // Lines without a free column either hold or make the program infeasible.
        let impossible = all.iter().enumerate().find(|(index, line)| {
            line.entries.is_empty()
                && (line.right < -1e-7 || *index < equations && line.right.abs() > 1e-7)
        });
        if let Some((_, line)) = impossible {
            return Err(NoAnswer::Infeasible {
                helpers: self.helpers_of_line(line),
            });
        }
        let equations = all[..equations]
            .iter()
            .filter(|line| !line.entries.is_empty())
            .count();
        all.retain(|line| !line.entries.is_empty());

        if free.is_empty() {
            return Ok(Answer {
                value: objective.value(&held),
                columns: held,
                pressures: vec![0.0; self.rows.len()],
                reduced: vec![0.0; self.lower.len()],
            });
        }

        let (p, q) = quadratic(objective, &free, &held);
        let a = matrix(&all, free.len());
        let b: Vec<f64> = all.iter().map(|line| line.right).collect();
        let cones: Vec<SupportedConeT<f64>> = [
            (equations > 0).then_some(ZeroConeT(equations)),
            (all.len() > equations).then(|| NonnegativeConeT(all.len() - equations)),
        ]
        .into_iter()
        .flatten()
        .collect();
        let Ok(mut solver) = DefaultSolver::new(&p, &q, &a, &b, &cones, settings(tolerance)) else {
            return Err(NoAnswer::Unsettled);
        };
        solver.solve();
        let solution = &solver.solution;
        let mut pressures = vec![0.0; self.rows.len()];
        for (line, z) in all.iter().zip(&solution.z) {
            if let Some((row, sign)) = line.row {
                pressures[row] += sign * z;
            }
        }
        match solution.status {
            SolverStatus::Solved | SolverStatus::AlmostSolved => {
                let mut columns = held;
                for (&column, x) in free.iter().zip(&solution.x) {
                    columns[column] = x.clamp(self.lower[column], self.upper[column]);
                }
                let reduced = self.reduced(&pressures, &gradient(objective, &columns));
                Ok(Answer {
                    value: objective.value(&columns),
                    columns,
                    pressures,
                    reduced,
                })
            }
            SolverStatus::PrimalInfeasible | SolverStatus::AlmostPrimalInfeasible => {
                // A proof y with A'y = 0 and b'y < 0, scaled to b'y = −1.
                let size = -b.iter().zip(&solution.z).map(|(b, z)| b * z).sum::<f64>();
                for pressure in &mut pressures {
                    *pressure /= size.max(f64::MIN_POSITIVE);
                }
                Err(NoAnswer::Infeasible {
                    helpers: self.reduced(&pressures, &vec![0.0; self.lower.len()]),
                })
            }
            _ => Err(NoAnswer::Unsettled),
        }
    }

    fn helpers_of_line(&self, line: &Line) -> Vec<f64> {
        let mut pressures = vec![0.0; self.rows.len()];
        if let Some((row, sign)) = line.row {
            // An equation can be missed on either side.
            let side = if line.right < 0.0 { 1.0 } else { -1.0 };
            pressures[row] = sign * side / line.right.abs();
        }
        self.reduced(&pressures, &vec![0.0; self.lower.len()])
    }

    fn reduced(&self, pressures: &[f64], gradient: &[f64]) -> Vec<f64> {
        let mut reduced = gradient.to_vec();
        for (row, pressure) in self.rows.iter().zip(pressures) {
            if *pressure != 0.0 {
                for (sum, coefficient) in reduced.iter_mut().zip(&row.coefficients) {
                    *sum += pressure * coefficient;
                }
            }
        }
        reduced
    }

    fn lines(&self, free: &[usize], held: &[f64], loosened: f64) -> (Vec<Line>, Vec<Line>) {
        let (mut equations, mut lines) = (Vec::new(), Vec::new());
        for (index, row) in self.rows.iter().enumerate() {
            let constant = dot(&row.coefficients, held);
            let line = |sign: f64, bound: f64| Line {
                entries: free
                    .iter()
                    .enumerate()
                    .filter(|&(_, &column)| row.coefficients[column] != 0.0)
                    .map(|(place, &column)| (place, sign * row.coefficients[column]))
                    .collect(),
                right: sign * (bound - constant),
                row: Some((index, sign)),
            };
            if row.high - row.low <= EQUAL {
                equations.push(line(1.0, row.high));
                continue;
            }
            if row.high.is_finite() {
                lines.push(line(1.0, row.high + loosened));
            }
            if row.low.is_finite() {
                lines.push(line(-1.0, row.low - loosened));
            }
        }
        for (place, &column) in free.iter().enumerate() {
            for (sign, bound) in [(1.0, self.upper[column]), (-1.0, self.lower[column])] {
                if bound.is_finite() {
                    lines.push(Line {
                        entries: vec![(place, sign)],
                        right: sign * bound,
                        row: None,
                    });
                }
            }
        }
        (equations, lines)
    }
}

fn gradient(objective: &Objective, columns: &[f64]) -> Vec<f64> {
    let mut gradient = objective.linear.clone();
    gradient.resize(columns.len(), 0.0);
    for square in &objective.squares {
        let miss = dot(&square.coefficients, columns) - square.target;
        for (sum, coefficient) in gradient.iter_mut().zip(&square.coefficients) {
            *sum += 2.0 * square.weight * miss * coefficient;
        }
    }
    gradient
}

/// ½x'Px + q'x of the free columns; P by its upper triangle.
fn quadratic(objective: &Objective, free: &[usize], held: &[f64]) -> (CscMatrix<f64>, Vec<f64>) {
    let at_held = gradient(objective, held);
    let q = free.iter().map(|&column| at_held[column]).collect();
    let size = free.len();
    let mut dense = vec![0.0; size * size];
    for square in &objective.squares {
        for (j, &column) in free.iter().enumerate() {
            let scaled = 2.0 * square.weight * square.coefficients[column];
            if scaled != 0.0 {
                for (i, &row) in free[..=j].iter().enumerate() {
                    dense[j * size + i] += scaled * square.coefficients[row];
                }
            }
        }
    }
    let (mut starts, mut rows, mut values) = (vec![0], Vec::new(), Vec::new());
    for j in 0..size {
        for i in 0..=j {
            let value = dense[j * size + i];
            if value != 0.0 {
                rows.push(i);
                values.push(value);
            }
        }
        starts.push(rows.len());
    }
    (CscMatrix::new(size, size, starts, rows, values), q)
}

fn matrix(lines: &[Line], columns: usize) -> CscMatrix<f64> {
    let mut by_column: Vec<Vec<(usize, f64)>> = vec![Vec::new(); columns];
    for (row, line) in lines.iter().enumerate() {
        for &(place, value) in &line.entries {
            by_column[place].push((row, value));
        }
    }
    let (mut starts, mut rows, mut values) = (vec![0], Vec::new(), Vec::new());
    for column in by_column {
        for (row, value) in column {
            rows.push(row);
            values.push(value);
        }
        starts.push(rows.len());
    }
    CscMatrix::new(lines.len(), columns, starts, rows, values)
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
        // Maximise 3x + 5y with x ≤ 4, 2y ≤ 12, 3x + 2y ≤ 18: (2, 6), 36. Hillier and
        // Lieberman, Introduction to Operations Research, the first example; the shadow
        // prices 0, 3/2 and 1 are given there too.
        let program = Program {
            lower: vec![0.0; 2],
            upper: vec![f64::INFINITY; 2],
            rows: vec![
                row(&[1.0, 0.0], f64::NEG_INFINITY, 4.0),
                row(&[0.0, 2.0], f64::NEG_INFINITY, 12.0),
                row(&[3.0, 2.0], f64::NEG_INFINITY, 18.0),
            ],
        };
        let answer = program
            .solve(&Objective::linear(vec![-3.0, -5.0]))
            .expect("an answer");
        assert!((answer.value + 36.0).abs() < 1e-7);
        for (found, printed) in answer.columns.iter().zip([2.0, 6.0]) {
            assert!((found - printed).abs() < 1e-7);
        }
        for (found, printed) in answer.pressures.iter().zip([0.0, 1.5, 1.0]) {
            assert!((found - printed).abs() < 1e-6);
        }
    }

    #[test]
    fn a_held_column_counts_as_a_constant_and_names_itself_as_help() {
        // x + y ≥ 5 with x ≤ 3: impossible while y is held at nought, and only y can help.
        let program = |y_most: f64| Program {
            lower: vec![0.0, 0.0],
            upper: vec![3.0, y_most],
            rows: vec![row(&[1.0, 1.0], 5.0, f64::INFINITY)],
        };
        let objective = Objective::linear(vec![0.0, 1.0]);
        match program(0.0).solve(&objective) {
            Err(NoAnswer::Infeasible { helpers }) => assert!(helpers[1] < -1e-3, "{helpers:?}"),
            other => panic!("{other:?}"),
        }
        let answer = program(9.0).solve(&objective).expect("an answer");
        assert!((answer.columns[1] - 2.0).abs() < 1e-7);
    }
}
