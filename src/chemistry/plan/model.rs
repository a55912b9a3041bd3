//! A problem as rows and columns.
//!
//! Columns: the share of each source; each addition (a material in one vessel) in g or
//! mL per litre of liquor; how far each window is missed, relative to its scale; acid
//! missing and acid too much in the mash, meq per litre of mash liquor. At the target
//! pH everything is linear in them.

use crate::ion::Ion;
use crate::mash::Demand;
use crate::material::{Contribution, Role, Substance, Vessel};
use crate::quantity::{
    DoseAmount, Fraction, MG_CACO3_PER_MEQ, MassRatio, MgPerL, MgPerLAsCaCO3, Ph,
};

use super::forward::{Dose, lowest_alkalinity};
use super::problem::{Preference, Priority, Problem, Window};
use super::program::{Program, Row, Square, dot};
use super::{Limit, Requirement};

/// Misses are counted relative to what is wished, and to no less than this, mg/L.
/// Source: assumed; so that 2 mg/L of magnesium instead of 1 is not a miss by half.
const LEAST_SCALE: f64 = 10.0;

/// Sulfate missing for a ratio is counted relative to this, mg/L. Source: assumed.
const RATIO_SCALE: f64 = 50.0;

/// Weight of the strictly convex term that makes a flat optimum unique: squares of
/// shares and of g or mL per litre. Source: assumed; one gram per litre more counts as
/// one hundredth of an ion missed.
const TIE_BREAK: f64 = 1e-4;

/// All additions together stay below this, g and mL per litre of liquor: far above any
/// dose, it keeps the solver from looking at acid and base that cancel without end.
const MOST_PER_LITRE: f64 = 100.0;

/// Optima this small, relative to the scales above, are nought, and an optimum is held
/// with this much room, relative to itself and outright. It is a ten-thousandth of a
/// mg/L in 100: without it, windows of low priority could be spoiled for the sake of
/// what nobody can weigh.
pub(super) const HAIR: f64 = 1e-6;

/// A material in one vessel.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Addition {
    pub(super) material: usize,
    pub(super) substance: Substance,
    pub(super) vessel: Vessel,
}

/// A limit: coefficients · columns ≤ `most`, both divided by `scale`.
#[derive(Clone, Debug)]
pub(super) struct HardRow {
    pub(super) limit: Limit,
    pub(super) coefficients: Vec<f64>,
    pub(super) most: f64,
    pub(super) scale: f64,
}

/// A window, divided by its scale. The two sides of a ratio differ in coefficients.
#[derive(Clone, Debug)]
pub(super) struct SoftRow {
    pub(super) requirement: Requirement,
    pub(super) priority: Priority,
    pub(super) scale: f64,
    pub(super) low: Option<(Vec<f64>, f64)>,
    pub(super) high: Option<(Vec<f64>, f64)>,
    pub(super) preferred: Option<(Vec<f64>, f64)>,
}

impl SoftRow {
    /// How far it is missed, relative to its scale.
    pub(super) fn missed(&self, columns: &[f64]) -> f64 {
        let side = |side: &Option<(Vec<f64>, f64)>, sign: f64| {
            side.as_ref()
                .map_or(0.0, |(row, bound)| sign * (bound - dot(row, columns)))
        };
        side(&self.low, 1.0).max(side(&self.high, -1.0)).max(0.0)
    }
}

/// The state of a window in one step of the strict order.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum Hold {
    /// Not looked at.
    Off,
    /// Missed as far as may be; what is missed is counted.
    Counted,
    /// Missed by no more than this.
    AtMost(f64),
}

/// The state of the mash balance in one step.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) enum MashHold {
    /// What is missing is counted.
    Counted,
    /// This much acid missing (positive) or too much (negative), meq per litre.
    Held(f64),
}

pub(super) struct Model {
    pub(super) sources: usize,
    pub(super) additions: Vec<Addition>,
    pub(super) lower: Vec<f64>,
    pub(super) upper: Vec<f64>,
    pub(super) hard: Vec<HardRow>,
    pub(super) windows: Vec<SoftRow>,
    /// Acid asked for per litre of mash liquor, and what the grist asks by itself.
    mash: (Vec<f64>, f64),
    pub(super) cost: Vec<f64>,
    pub(super) blending: Vec<f64>,
    pub(super) discouraged: Vec<f64>,
    /// Additions that bring acid, or base, to the mash.
    pub(super) acids: Vec<bool>,
    pub(super) bases: Vec<bool>,
    pub(super) litres: f64,
    pub(super) mash_litres: f64,
}

/// Which additions may be used.
pub(super) type Allowed = Vec<bool>;

impl Model {
    pub(super) fn of(problem: &Problem) -> Self {
        Builder::new(problem).model()
    }

    fn first_miss(&self) -> usize {
        self.sources + self.additions.len()
    }

    pub(super) fn width(&self) -> usize {
        self.first_miss() + self.windows.len() + 2
    }

    /// The column that says how far a window is missed.
    pub(super) fn miss(&self, window: usize) -> usize {
        self.first_miss() + window
    }

    /// The columns for acid missing and acid too much.
    pub(super) fn acid_columns(&self) -> (usize, usize) {
        (self.width() - 2, self.width() - 1)
    }

    /// Row of the mash balance in every program.
    pub(super) const MASH_ROW: usize = 1;
    /// The first row of a limit in every program.
    pub(super) const FIRST_LIMIT: usize = 2;

    /// The program in which windows and mash stand as told. The rows are, in order:
    /// shares, mash, limits, the two sides of each window that is on, and all additions.
    pub(super) fn program(&self, mash: MashHold, windows: &[Hold], allowed: &Allowed) -> Program {
        let width = self.width();
        let (mut lower, mut upper) = (self.lower.clone(), self.upper.clone());
        lower.resize(width, 0.0);
        upper.resize(width, 0.0);
        for (place, allowed) in allowed.iter().enumerate() {
            if !allowed {
                upper[self.sources + place] = 0.0;
            }
        }
        let mut shares = vec![0.0; width];
        shares[..self.sources].fill(1.0);
        let mut balance = self.mash.0.clone();
        balance.resize(width, 0.0);
        let (missing, surplus) = self.acid_columns();
        balance[missing] = -1.0;
        balance[surplus] = 1.0;
        match mash {
            MashHold::Counted => {
                upper[missing] = f64::INFINITY;
                upper[surplus] = f64::INFINITY;
            }
            // The best that can be had lies on the edge of what can be had: leave the
            // solver a hair of room there.
            MashHold::Held(acid) if acid.abs() > HAIR => {
                let column = if acid > 0.0 { missing } else { surplus };
                upper[column] = acid.abs() * (1.0 + HAIR) + HAIR;
            }
            MashHold::Held(_) => {}
        }
        let mut rows = vec![
            Row {
                coefficients: shares,
                low: 1.0,
                high: 1.0,
            },
            Row {
                coefficients: balance,
                low: -self.mash.1,
                high: -self.mash.1,
            },
        ];
        for hard in &self.hard {
            let mut coefficients = hard.coefficients.clone();
            coefficients.resize(width, 0.0);
            rows.push(Row {
                coefficients,
                low: f64::NEG_INFINITY,
                high: hard.most,
            });
        }
        for (index, (window, hold)) in self.windows.iter().zip(windows).enumerate() {
            let miss = self.miss(index);
            match hold {
                Hold::Off => continue,
                Hold::Counted => upper[miss] = f64::INFINITY,
                Hold::AtMost(most) => {
                    lower[miss] = *most;
                    upper[miss] = *most;
                }
            }
            let side = |(coefficients, bound): &(Vec<f64>, f64), sign: f64| {
                let mut coefficients = coefficients.clone();
                coefficients.resize(width, 0.0);
                coefficients[miss] = sign;
                (coefficients, *bound)
            };
            if let Some(low) = &window.low {
                let (coefficients, low) = side(low, 1.0);
                rows.push(Row {
                    coefficients,
                    low,
                    high: f64::INFINITY,
                });
            }
            if let Some(high) = &window.high {
                let (coefficients, high) = side(high, -1.0);
                rows.push(Row {
                    coefficients,
                    low: f64::NEG_INFINITY,
                    high,
                });
            }
        }
        let mut additions = vec![0.0; width];
        additions[self.sources..self.first_miss()].fill(1.0);
        rows.push(Row {
            coefficients: additions,
            low: f64::NEG_INFINITY,
            high: MOST_PER_LITRE,
        });
        Program { lower, upper, rows }
    }

    /// Which rows of [`program`](Self::program) belong to a window.
    pub(super) fn window_rows(&self, windows: &[Hold], wanted: usize) -> std::ops::Range<usize> {
        let sides = |index: usize| {
            let window = &self.windows[index];
            if windows[index] == Hold::Off {
                0
            } else {
                usize::from(window.low.is_some()) + usize::from(window.high.is_some())
            }
        };
        let start = Self::FIRST_LIMIT + self.hard.len() + (0..wanted).map(sides).sum::<usize>();
        start..start + sides(wanted)
    }

    /// Distance to what is preferred and the term that makes it unique.
    pub(super) fn taste(&self) -> Vec<Square> {
        let width = self.width();
        let mut squares: Vec<Square> = self
            .windows
            .iter()
            .filter_map(|window| window.preferred.as_ref())
            .map(|(coefficients, target)| {
                let mut coefficients = coefficients.clone();
                coefficients.resize(width, 0.0);
                Square {
                    coefficients,
                    target: *target,
                    weight: 1.0,
                }
            })
            .collect();
        for column in 0..self.first_miss() {
            let mut coefficients = vec![0.0; width];
            coefficients[column] = 1.0;
            squares.push(Square {
                coefficients,
                target: 0.0,
                weight: TIE_BREAK,
            });
        }
        squares
    }

    /// Acid missing in the mash, meq per litre of mash liquor.
    pub(super) fn acid_missing(&self, columns: &[f64]) -> f64 {
        dot(&self.mash.0, columns) + self.mash.1
    }

    pub(super) fn shares(&self, columns: &[f64]) -> Vec<Fraction> {
        let whole: f64 = columns[..self.sources].iter().map(|x| x.max(0.0)).sum();
        columns[..self.sources]
            .iter()
            .map(|share| Fraction::clamped(share / whole))
            .collect()
    }

    /// The additions as doses, those of nothing left out.
    pub(super) fn doses(&self, columns: &[f64]) -> Vec<Dose> {
        self.additions
            .iter()
            .zip(&columns[self.sources..])
            .filter(|(_, per_litre)| **per_litre > TRACE)
            .map(|(addition, per_litre)| Dose {
                material: addition.material,
                vessel: addition.vessel,
                amount: DoseAmount::clamped(per_litre * self.litres),
            })
            .collect()
    }

    /// Whether acid and base would meet in the mash.
    pub(super) fn opposes_itself(&self, columns: &[f64]) -> bool {
        let used = |which: &[bool]| {
            which
                .iter()
                .zip(&columns[self.sources..])
                .any(|(is, per_litre)| *is && *per_litre > 10.0 * TRACE)
        };
        used(&self.acids) && used(&self.bases)
    }
}

/// Less than this of a material per litre, g or mL, is none: 0.1 g in a thousand litres.
pub(super) const TRACE: f64 = 1e-7;

struct Builder<'a> {
    problem: &'a Problem,
    additions: Vec<Addition>,
    per_unit: Vec<Contribution>,
}

impl<'a> Builder<'a> {
    fn new(problem: &'a Problem) -> Self {
        let sparged = problem.volumes.sparge.get() > 0.0;
        let mut additions = Vec::new();
        for (material, item) in problem.shelf.iter().enumerate() {
            if item.preference == Preference::Avoided || item.most.is_some_and(|m| m.get() <= 0.0) {
                continue;
            }
            for vessel in Vessel::ALL {
                if item.vessels.contains(&vessel) && (sparged || vessel != Vessel::SpargeLiquor) {
                    additions.push(Addition {
                        material,
                        substance: item.material.substance(),
                        vessel,
                    });
                }
            }
        }
        let per_unit = additions
            .iter()
            .map(|addition| problem.shelf[addition.material].material.per_unit())
            .collect();
        Self {
            problem,
            additions,
            per_unit,
        }
    }

    /// Litres of liquor for each litre of the water a vessel's dose is looked at in.
    fn dilution(&self, addition: Addition, seen_in: Vessel) -> f64 {
        let volumes = self.problem.volumes;
        let liquor = volumes.liquor.get();
        match (addition.vessel, seen_in) {
            (Vessel::LiquorTank, _) => 1.0,
            (Vessel::Mash, Vessel::Mash) => liquor / volumes.mash.value.get(),
            (Vessel::SpargeLiquor, Vessel::SpargeLiquor) => liquor / volumes.sparge.get(),
            _ => 0.0,
        }
    }

    /// Coefficients of an amount in the water of one vessel, or in the whole liquor.
    fn linear(
        &self,
        seen_in: Option<Vessel>,
        of_source: impl Fn(usize) -> f64,
        of_unit: impl Fn(&Contribution) -> f64,
    ) -> Vec<f64> {
        let sources = (0..self.problem.sources.len()).map(of_source);
        let additions = self
            .additions
            .iter()
            .zip(&self.per_unit)
            .map(|(addition, per_unit)| {
                seen_in.map_or(1.0, |vessel| self.dilution(*addition, vessel)) * of_unit(per_unit)
            });
        sources.chain(additions).collect()
    }

    fn ion(&self, seen_in: Option<Vessel>, ion: Ion) -> Vec<f64> {
        self.linear(
            seen_in,
            |source| self.problem.sources[source].water.ions[ion].get(),
            |per_unit| per_unit.ions[ion].get(),
        )
    }

    /// mg/L as CaCO₃.
    fn alkalinity(&self, seen_in: Vessel) -> Vec<f64> {
        self.linear(
            Some(seen_in),
            |source| {
                let water = &self.problem.sources[source].water;
                water.alkalinity_as_caco3().get()
            },
            |per_unit| per_unit.alkalinity.get() * MG_CACO3_PER_MEQ,
        )
    }

    fn mash(&self) -> (Vec<f64>, f64) {
        let problem = self.problem;
        let target = problem.spec.mash_ph.target.get() - problem.offset.value.get();
        let demand = Demand::at(Ph::clamped(target), &problem.settings);
        let coefficients = self.linear(
            Some(Vessel::Mash),
            |source| demand.liquor(&problem.sources[source].water).get(),
            |per_unit| demand.contribution(per_unit).get(),
        );
        let grist = demand.grist(&problem.grist).get() / problem.volumes.mash.value.get();
        (coefficients, grist)
    }

    fn model(self) -> Model {
        let problem = self.problem;
        let sources = problem.sources.len();
        let item = |addition: &Addition| &problem.shelf[addition.material];
        let with_role = |role: Role| {
            self.additions
                .iter()
                .map(|addition| {
                    matches!(addition.vessel, Vessel::Mash | Vessel::LiquorTank)
                        && item(addition).material.substance().role() == role
                })
                .collect()
        };
        let litres = problem.volumes.liquor.get();
        let of_sources = |of: &dyn Fn(&super::Source) -> f64| -> Vec<f64> {
            problem.sources.iter().map(of).collect()
        };
        // A whole needs no row of its own: the shares make one together.
        let highest = |source: &super::Source| match source.highest.get() {
            1.0 => f64::INFINITY,
            highest => highest,
        };
        let joined = |mut shares: Vec<f64>, of: &dyn Fn(&Addition) -> f64| {
            shares.extend(self.additions.iter().map(of));
            shares
        };
        Model {
            sources,
            lower: joined(of_sources(&|source| source.lowest.get()), &|_| 0.0),
            upper: joined(of_sources(&highest), &|_| f64::INFINITY),
            hard: self.hard(),
            windows: self.windows(),
            mash: self.mash(),
            cost: joined(of_sources(&|source| source.price.get()), &|addition| {
                item(addition).price.get()
            }),
            blending: joined(
                of_sources(&|source| if source.blending { 1.0 } else { 0.0 }),
                &|_| 0.0,
            ),
            discouraged: joined(vec![0.0; sources], &|addition| {
                if item(addition).preference == Preference::Discouraged {
                    1.0
                } else {
                    0.0
                }
            }),
            acids: with_role(Role::Acid),
            bases: with_role(Role::Base),
            litres,
            mash_litres: problem.volumes.mash.value.get(),
            additions: self.additions,
        }
    }

    fn hard(&self) -> Vec<HardRow> {
        let problem = self.problem;
        let mut hard = Vec::new();
        let mut add = |limit: Limit, coefficients: Vec<f64>, most: f64, scale: f64| {
            hard.push(HardRow {
                limit,
                coefficients: coefficients.iter().map(|c| c / scale).collect(),
                most: most / scale,
                scale,
            });
        };
        for (ion, most) in problem.limits.ions.iter() {
            if let Some(most) = most {
                let scale = most.get().max(LEAST_SCALE);
                add(Limit::Ion(ion), self.ion(None, ion), most.get(), scale);
            }
        }
        let floor = lowest_alkalinity(problem);
        for vessel in [Vessel::LiquorTank, Vessel::SpargeLiquor] {
            if vessel == Vessel::SpargeLiquor && problem.volumes.sparge.get() <= 0.0 {
                continue;
            }
            let coefficients = self.alkalinity(vessel).iter().map(|c| -c).collect();
            let limit = Limit::LowestAlkalinity(vessel);
            add(limit, coefficients, -floor, MG_CACO3_PER_MEQ);
        }
        for (index, item) in problem.shelf.iter().enumerate() {
            let Some(most) = item.most.filter(|most| most.get() > 0.0) else {
                continue;
            };
            let mut coefficients = vec![0.0; problem.sources.len()];
            coefficients.extend(
                self.additions
                    .iter()
                    .map(|addition| f64::from(u8::from(addition.material == index))),
            );
            let per_litre = most.get() / problem.volumes.liquor.get();
            add(Limit::Amount(index), coefficients, per_litre, per_litre);
        }
        hard
    }

    fn windows(&self) -> Vec<SoftRow> {
        let spec = &self.problem.spec;
        let mut windows = Vec::new();
        for (ion, window) in spec.ions.iter() {
            if let Some(window) = window {
                windows.push(plain(
                    Requirement::Ion(ion),
                    &self.ion(None, ion),
                    window,
                    MgPerL::get,
                ));
            }
        }
        if let Some(window) = &spec.mash_calcium {
            let calcium = self.ion(Some(Vessel::Mash), Ion::Calcium);
            windows.push(plain(
                Requirement::MashCalcium,
                &calcium,
                window,
                MgPerL::get,
            ));
        }
        if let Some(window) = &spec.sulfate_to_chloride {
            let sulfate = self.ion(None, Ion::Sulfate);
            let chloride = self.ion(None, Ion::Chloride);
            let side = |bound: MassRatio| {
                let coefficients = sulfate
                    .iter()
                    .zip(&chloride)
                    .map(|(sulfate, chloride)| (sulfate - bound.get() * chloride) / RATIO_SCALE)
                    .collect();
                (coefficients, 0.0)
            };
            windows.push(SoftRow {
                requirement: Requirement::SulfateToChloride,
                priority: window.priority,
                scale: RATIO_SCALE,
                low: window.low.map(side),
                high: window.high.map(side),
                preferred: None,
            });
        }
        if let Some(window) = &spec.sparge_alkalinity
            && self.problem.volumes.sparge.get() > 0.0
        {
            let alkalinity = self.alkalinity(Vessel::SpargeLiquor);
            windows.push(plain(
                Requirement::SpargeAlkalinity,
                &alkalinity,
                window,
                MgPerLAsCaCO3::get,
            ));
        }
        windows
    }
}

fn plain<T: Copy>(
    requirement: Requirement,
    coefficients: &[f64],
    window: &Window<T>,
    get: fn(T) -> f64,
) -> SoftRow {
    let [low, high, preferred] = [window.low, window.high, window.preferred].map(|b| b.map(get));
    let scale = [low, preferred, high.map(|high| high / 2.0)]
        .into_iter()
        .flatten()
        .fold(LEAST_SCALE, f64::max);
    let scaled: Vec<f64> = coefficients.iter().map(|c| c / scale).collect();
    let side = |bound: Option<f64>| bound.map(|bound| (scaled.clone(), bound / scale));
    SoftRow {
        requirement,
        priority: window.priority,
        scale,
        low: side(low),
        high: side(high),
        preferred: side(preferred),
    }
}
