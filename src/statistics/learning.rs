//! What mash readings teach about the brewery's malts and its own bias.
//!
//! A mash that settles elsewhere than predicted is taken to do so for the sum of
//! the brewery's own bias, what its malts do, and the error of the reading.
//! Prior and errors are normal, so each reading updates the belief exactly.
//! Start reading at [`learn`].
//!
//! Everything is in pH, mash readings on the basis of the cooled sample.
//!
//! What is learned besides the bias is the caller's choice, by [`Effect`]. A malt
//! and its lot are two things with the same effect, the malt's share of the mash's
//! buffering: the malt with the standard deviation of its class, the lot with
//! [`LOT_TO_LOT`]. Then a new lot of a known malt starts from what the malt has
//! taught.
//!
//! Sources: A. Gelman et al. (2013), "Bayesian data analysis", 3rd ed., ch. 14
//! (linear update; from memory); P. de Jong (1989), "Smoothing and interpolation
//! with the state-space model", J. Am. Stat. Assoc. 84:1085 (leaving one out;
//! from memory). Every numeric setting is assumed, chosen by simulation or
//! judgement.

use std::collections::BTreeMap;

use statrs::distribution::{ContinuousCDF, StudentsT};

use crate::quantity::{Sd, Share, Skill, Value};

/// Standard deviations beyond which a reading is damped. Assumed.
const DAMPING_LIMIT: f64 = 2.5;
/// Readings from which the learned model may be used. Assumed.
const LEAST_READINGS: usize = 5;
/// Readings' worth of belief in the errors as stated. Assumed.
const SCALE_PRIOR_READINGS: f64 = 8.0;
/// Where the bias stands among what is learned.
const BIAS: usize = 0;

/// Standard deviation of a mash reading, calibrated meter, cooled sample: 0.03
/// pH. Assumed.
pub const CAREFUL_READING: Sd = Sd::constant(0.03);
/// Standard deviation of any other mash reading: 0.05 pH. Assumed.
pub const OTHER_READING: Sd = Sd::constant(0.05);
/// Standard deviation between lots of one malt, in the malt's own pH: 0.02.
/// Assumed.
pub const LOT_TO_LOT: Sd = Sd::constant(0.02);

/// How something that can be learned acts in one mash. `K` is the caller's name
/// for it, such as a malt or a lot.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Effect<K> {
    /// What acts.
    pub of: K,
    /// How far the mash pH moves when it is 1 higher.
    pub size: Value,
    /// Standard deviation of it about zero before any reading. Of one thing the
    /// first one given counts.
    pub prior: Sd,
}

/// A mash that was read.
#[derive(Clone, Debug, PartialEq)]
pub struct Outcome<K> {
    /// What acts in it, besides the bias.
    pub effects: Vec<Effect<K>>,
    /// Measured mash pH less the untrained prediction.
    pub residual: Value,
    /// Standard deviation of the residual from every cause but the bias and the
    /// effects: the reading, and the water estimate of that day (left out, the
    /// malt would be taught the water's error).
    pub sd: Sd,
}

/// What is done with an odd reading.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Damping {
    /// Every reading counts in full.
    Off,
    /// A reading more than 2.5 standard deviations from its prediction counts
    /// for less, the further the less.
    Odd,
}

/// What is believed of the brewery before any reading.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Prior {
    /// Standard deviation of the bias about zero.
    pub bias: Sd,
    /// How far the bias wanders between one brew and the next (one standard
    /// deviation).
    pub bias_per_brew: Sd,
    /// What to do with odd readings.
    pub damping: Damping,
}

impl Prior {
    /// The defaults: a bias of 0.08 that wanders by 0.005 a brew, odd readings
    /// damped. Assumed.
    pub const DEFAULT: Self = Self {
        bias: Sd::constant(0.08),
        bias_per_brew: Sd::constant(0.005),
        damping: Damping::Odd,
    };
}

/// A figure that has been learned, pH.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Estimate {
    /// Best estimate.
    pub value: Value,
    /// Standard deviation.
    pub sd: Sd,
}

/// One reading's turn.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Turn {
    /// Residual expected from the readings before it, the reading's own standard
    /// deviation included.
    pub predicted: Estimate,
    /// What the reading counted: 1 in full, less when damped.
    pub weight: Share,
}

/// What has been learned.
#[derive(Clone, Debug, PartialEq)]
pub struct Learned<K> {
    prior: Prior,
    places: BTreeMap<K, usize>,
    belief: Belief,
    turns: Vec<Turn>,
    left_out: Vec<Estimate>,
    skill: Option<Skill>,
    scale: Scale,
}

/// Learns from a whole history of outcomes, in the order they were brewed.
///
/// Leave excluded ones out. An edited or excluded reading needs no undoing: learn
/// again.
#[must_use]
pub fn learn<K: Copy + Ord>(outcomes: &[Outcome<K>], prior: &Prior) -> Learned<K> {
    let mut places = BTreeMap::new();
    let mut variances = vec![prior.bias.get().powi(2)];
    for effect in outcomes.iter().flat_map(|outcome| &outcome.effects) {
        places.entry(effect.of).or_insert_with(|| {
            variances.push(effect.prior.get().powi(2));
            variances.len() - 1
        });
    }
    let start = Belief::before_any(&variances);
    let rows: Vec<Row> = outcomes
        .iter()
        .map(|outcome| {
            let mut effects = vec![0.0; variances.len()];
            effects[BIAS] = 1.0;
            for effect in &outcome.effects {
                effects[places[&effect.of]] += effect.size.get();
            }
            Row {
                effects,
                residual: outcome.residual.get(),
                noise: outcome.sd.get().powi(2),
            }
        })
        .collect();

    let (belief, updates) = start.clone().read_all(&rows, prior, prior.damping);
    let turns = updates.iter().map(|update| Turn {
        predicted: Estimate {
            value: Value::clamped(update.predicted),
            sd: Sd::clamped(update.usual.sqrt()),
        },
        weight: Share::clamped(update.weight),
    });
    let undamped = updates.iter().filter(|update| update.weight >= 1.0);
    let errors = undamped.map(|update| update.miss / update.usual.sqrt());

    let left_out = leave_each_out(start, &rows, prior);
    let untrained: f64 = rows.iter().map(|row| row.residual.powi(2)).sum();
    let trained: f64 = left_out.iter().map(|left| left.value.get().powi(2)).sum();
    Learned {
        prior: *prior,
        places,
        belief,
        turns: turns.collect(),
        left_out,
        skill: (untrained > 0.0).then(|| Skill::clamped(1.0 - trained / untrained)),
        scale: Scale::from_errors(errors),
    }
}

impl<K: Copy + Ord> Learned<K> {
    /// The brewery's own bias: its meter, its water figures, its habits.
    #[must_use]
    pub fn bias(&self) -> Estimate {
        estimate(self.belief.mean[BIAS], self.belief.covariance[BIAS][BIAS])
    }

    /// What these do together, without the bias: give a malt and its lot with
    /// size 1 for what is known of that lot's own pH. Of what no reading has
    /// shown, the prior stands.
    #[must_use]
    pub fn shift_of(&self, effects: &[Effect<K>]) -> Estimate {
        let (known, unknown) = self.weigh(effects);
        let variance = dot(&known, &times(&self.belief.covariance, &known));
        estimate(dot(&known, &self.belief.mean), variance + unknown)
    }

    /// The shift for the next mash: what was learned if it is [in
    /// use](Self::in_use), else none with the prior's uncertainty.
    #[must_use]
    pub fn predict(&self, effects: &[Effect<K>]) -> Prediction {
        if self.in_use() {
            self.predict_learned(effects)
        } else {
            self.predict_untrained(effects)
        }
    }

    /// The shift for the next mash by what was learned, in use or not. Bias and
    /// malts hang together; their parts alone would make it look less sure.
    #[must_use]
    pub fn predict_learned(&self, effects: &[Effect<K>]) -> Prediction {
        let (mut known, unknown) = self.weigh(effects);
        known[BIAS] += 1.0;
        let mut variance = dot(&known, &times(&self.belief.covariance, &known));
        if !self.turns.is_empty() {
            variance += self.prior.bias_per_brew.get().powi(2);
        }
        Prediction {
            shift: estimate(dot(&known, &self.belief.mean), variance + unknown),
            scale: self.scale,
        }
    }

    /// The shift for the next mash had nothing been read: none, with the prior's
    /// uncertainty.
    #[must_use]
    pub fn predict_untrained(&self, effects: &[Effect<K>]) -> Prediction {
        let nothing: [Outcome<K>; 0] = [];
        learn(&nothing, &self.prior).predict_learned(effects)
    }

    /// Whether to use what was learned: from five readings on, once it foretells
    /// readings better than the untrained model.
    #[must_use]
    pub fn in_use(&self) -> bool {
        self.turns.len() >= LEAST_READINGS && self.skill.is_some_and(|skill| skill.get() > 0.0)
    }

    /// The share of the untrained model's squared error that learning removes,
    /// each reading foretold by all the others. `None` when there was no error
    /// to remove.
    #[must_use]
    pub fn skill(&self) -> Option<Skill> {
        self.skill
    }

    /// One turn for each outcome, in order.
    #[must_use]
    pub fn turns(&self) -> &[Turn] {
        &self.turns
    }

    /// Of each outcome, the residual less the one foretold by all the others, none
    /// damped, with the standard deviation of that error.
    #[must_use]
    pub fn left_out(&self) -> &[Estimate] {
        &self.left_out
    }

    /// Effects of what has been read, in their places, and the variance that the
    /// others bring.
    fn weigh(&self, effects: &[Effect<K>]) -> (Vec<f64>, f64) {
        let mut known = vec![0.0; self.belief.mean.len()];
        let mut unknown: BTreeMap<K, (f64, f64)> = BTreeMap::new();
        for effect in effects {
            if let Some(&place) = self.places.get(&effect.of) {
                known[place] += effect.size.get();
            } else {
                let entry = unknown
                    .entry(effect.of)
                    .or_insert((0.0, effect.prior.get()));
                entry.0 += effect.size.get();
            }
        }
        let variance = unknown.values().map(|(size, sd)| (size * sd).powi(2)).sum();
        (known, variance)
    }
}

fn estimate(value: f64, variance: f64) -> Estimate {
    Estimate {
        value: Value::clamped(value),
        sd: Sd::clamped(variance.max(0.0).sqrt()),
    }
}

/// A shift of predicted mash pH.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Prediction {
    /// Add this to the untrained prediction. Its standard deviation is what is not
    /// yet learned, and takes the place of the prior's.
    pub shift: Estimate,
    scale: Scale,
}

impl Prediction {
    /// Half the width of the interval that holds a reading in `coverage` of all
    /// cases (a share below 1; from 0.9999 on it is taken as that), when the
    /// reading has `other` standard deviation from every other cause.
    ///
    /// Stated errors are widened or narrowed by what past readings showed, and
    /// the interval is Student's.
    #[must_use]
    pub fn half_width(&self, other: Sd, coverage: Share) -> Sd {
        let sd = self.shift.sd.get().hypot(other.get()) * self.scale.factor();
        Sd::clamped(sd * self.scale.multiple(coverage.get().min(0.9999)))
    }
}

/// How the errors of past readings compare with those stated.
#[derive(Clone, Copy, Debug, PartialEq)]
struct Scale {
    variance: f64,
    degrees_of_freedom: f64,
}

impl Scale {
    /// From the standardised one-step errors of undamped readings.
    fn from_errors(errors: impl Iterator<Item = f64>) -> Self {
        let (n, sum) = errors.fold((0.0, 0.0), |(n, sum), z| (n + 1.0, sum + z * z));
        let degrees_of_freedom = SCALE_PRIOR_READINGS + n;
        Self {
            variance: (SCALE_PRIOR_READINGS + sum) / degrees_of_freedom,
            degrees_of_freedom,
        }
    }

    fn factor(self) -> f64 {
        self.variance.sqrt()
    }

    fn multiple(self, coverage: f64) -> f64 {
        // The degrees of freedom are never fewer than eight, so this cannot fail.
        StudentsT::new(0.0, 1.0, self.degrees_of_freedom).map_or(f64::INFINITY, |t| {
            t.inverse_cdf(f64::midpoint(1.0, coverage))
        })
    }
}

/// An outcome as a line of the linear model.
struct Row {
    effects: Vec<f64>,
    residual: f64,
    noise: f64,
}

type Matrix = Vec<Vec<f64>>;

/// Mean and covariance of all that can be learned, the bias first.
#[derive(Clone, Debug, PartialEq)]
struct Belief {
    mean: Vec<f64>,
    covariance: Matrix,
}

/// What one reading did.
struct Update {
    predicted: f64,
    miss: f64,
    /// Variance of the miss, undamped.
    usual: f64,
    weight: f64,
    gain: Vec<f64>,
}

impl Belief {
    fn before_any(variances: &[f64]) -> Self {
        let n = variances.len();
        let mut covariance = vec![vec![0.0; n]; n];
        for (i, variance) in variances.iter().enumerate() {
            covariance[i][i] = *variance;
        }
        Self {
            mean: vec![0.0; n],
            covariance,
        }
    }

    /// One reading after another. Before the first brew nothing has had time to
    /// change.
    fn read_all(mut self, rows: &[Row], prior: &Prior, damping: Damping) -> (Self, Vec<Update>) {
        let mut updates = Vec::with_capacity(rows.len());
        for (brews, row) in rows.iter().enumerate() {
            if brews > 0 {
                self.covariance[BIAS][BIAS] += prior.bias_per_brew.get().powi(2);
            }
            updates.push(self.read(row, damping));
        }
        (self, updates)
    }

    fn read(&mut self, row: &Row, damping: Damping) -> Update {
        let towards = times(&self.covariance, &row.effects);
        let known = dot(&row.effects, &towards).max(0.0);
        let predicted = dot(&row.effects, &self.mean);
        let miss = row.residual - predicted;
        let usual = known + row.noise;
        let oddness = miss.abs() / usual.sqrt();
        let weight = if damping == Damping::Odd && oddness > DAMPING_LIMIT {
            DAMPING_LIMIT / oddness
        } else {
            1.0
        };
        let total = usual / weight;
        let gain: Vec<f64> = towards.iter().map(|towards| towards / total).collect();
        for (mean, gain) in self.mean.iter_mut().zip(&gain) {
            *mean += gain * miss;
        }
        self.covariance = joseph(&self.covariance, &row.effects, &gain, total - known);
        Update {
            predicted,
            miss,
            usual,
            weight,
            gain,
        }
    }
}

/// Each reading foretold by all the others, in closed form.
///
/// With S the covariance of all residuals, drift between brews included, the
/// error is (S⁻¹r)ᵢ/(S⁻¹)ᵢᵢ and its variance 1/(S⁻¹)ᵢᵢ. One pass forwards and
/// one back give both without S itself (de Jong).
fn leave_each_out(start: Belief, rows: &[Row], prior: &Prior) -> Vec<Estimate> {
    let n = start.mean.len();
    let (_, updates) = start.read_all(rows, prior, Damping::Off);
    let mut pull = vec![0.0; n];
    let mut precision = vec![vec![0.0; n]; n];
    let mut left_out = Vec::with_capacity(rows.len());
    for (row, update) in rows.iter().zip(&updates).rev() {
        let effects = &row.effects;
        let towards = times(&precision, &update.gain);
        let weighed = update.miss / update.usual - dot(&update.gain, &pull);
        let information = 1.0 / update.usual + dot(&update.gain, &towards);
        left_out.push(estimate(weighed / information, 1.0 / information));
        // pull ← h·v/F + Lᵀ·pull and precision ← h·hᵀ/F + Lᵀ·precision·L, with
        // L = I − K·hᵀ; multiplied out, both are updates along h.
        for i in 0..n {
            pull[i] += effects[i] * weighed;
            for j in 0..n {
                precision[i][j] += effects[i] * effects[j] * information
                    - effects[i] * towards[j]
                    - towards[i] * effects[j];
            }
        }
    }
    left_out.reverse();
    left_out
}

fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(a, b)| a * b).sum()
}

fn times(matrix: &Matrix, vector: &[f64]) -> Vec<f64> {
    matrix.iter().map(|row| dot(row, vector)).collect()
}

/// (I − K·hᵀ)·C·(I − K·hᵀ)ᵀ + noise·K·Kᵀ, which stays a covariance whatever
/// rounding does.
fn joseph(covariance: &Matrix, effects: &[f64], gain: &[f64], noise: f64) -> Matrix {
    // (I − K·hᵀ)·M is M less K times hᵀ·M.
    let keep = |matrix: &Matrix| -> Matrix {
        let seen: Vec<f64> = (0..gain.len())
            .map(|j| matrix.iter().zip(effects).map(|(row, h)| row[j] * h).sum())
            .collect();
        let rows = matrix.iter().zip(gain);
        rows.map(|(row, gain)| row.iter().zip(&seen).map(|(m, s)| m - gain * s).collect())
            .collect()
    };
    let transposed = |matrix: &Matrix| -> Matrix {
        (0..gain.len())
            .map(|j| matrix.iter().map(|row| row[j]).collect())
            .collect()
    };
    let mut result = keep(&transposed(&keep(covariance)));
    for i in 0..gain.len() {
        for j in 0..=i {
            let both = f64::midpoint(result[i][j], result[j][i]);
            result[i][j] = both + noise * gain[i] * gain[j];
            result[j][i] = result[i][j];
        }
    }
    result
}
