//! Plans: the treatment of one batch, from draft to closed.
//!
//! A plan holds its [`Inputs`]: water, grist, volumes, shelf and spec as they were
//! when it was drafted. Everything it shows is computed from those and from its
//! shares and doses by the chemistry, again on every look. An approval freezes them.
//! The brewer weighs out the [`Dose`]s, reads the mash ([`MashCheck`]) and closes the
//! batch with an [`Outcome`]; closed batches teach the next prediction ([`learning`]).
//!
//! Read [`operations`] for the rules and the files it names, [`inputs`] for what is frozen, [`compute`] for
//! how a treatment is worked out.

use chemistry::material::{Material, Vessel};
use chemistry::quantity::{Celsius, DoseAmount, Fraction, Litres, Minutes, Ph, PhShift};
use jiff::civil::Date;

use crate::id::{
    BeerId, CalibrationId, DoseId, MashCheckId, MaterialLotId, MemberId, MeterId, PlanId, UtcTime,
};

pub mod answers;
pub mod api;
pub mod asked;
pub mod bodies;
pub mod brew_day;
pub mod closing;
pub mod compute;
pub mod decisions;
pub mod gather;
pub mod inputs;
pub mod learning;
pub mod liquor_checks;
pub mod mash_checks;
pub mod operations;
pub mod pages;
pub mod readiness;
mod sheet;
pub mod store;
pub mod weigh_out;
pub mod words;

pub use chemistry::stages::Stage;
pub use inputs::Inputs;

/// Where a plan stands.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum State {
    /// May be changed.
    Draft,
    /// Frozen, ready to weigh out.
    Approved,
    /// Everything planned is in.
    Dosed,
    /// The batch is done and its outcome written down.
    Closed,
    /// Will not be brewed.
    Withdrawn,
}

impl State {
    /// Every state, in the order of a batch's life.
    pub const ALL: [Self; 5] = [
        Self::Draft,
        Self::Approved,
        Self::Dosed,
        Self::Closed,
        Self::Withdrawn,
    ];

    /// As stored and sent.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Draft => "draft",
            Self::Approved => "approved",
            Self::Dosed => "dosed",
            Self::Closed => "closed",
            Self::Withdrawn => "withdrawn",
        }
    }

    /// As shown.
    pub const fn name(self) -> &'static str {
        match self {
            Self::Draft => "Draft",
            Self::Approved => "Approved",
            Self::Dosed => "Dosed",
            Self::Closed => "Closed",
            Self::Withdrawn => "Withdrawn",
        }
    }

    /// The state with this key.
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|state| state.key() == key)
    }
}

/// How the treatment of a plan was chosen.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Choice {
    /// The best of this way.
    Way(chemistry::plan::Way),
    /// Amounts were moved by hand.
    ByHand,
}

impl Choice {
    /// As stored and sent.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Way(way) => way.key(),
            Self::ByHand => "by_hand",
        }
    }

    /// In words.
    pub const fn words(self) -> &'static str {
        match self {
            Self::Way(way) => words::way(way),
            Self::ByHand => "moved by hand",
        }
    }

    /// The choice with this key.
    pub fn from_key(key: &str) -> Option<Self> {
        if key == "by_hand" {
            Some(Self::ByHand)
        } else {
            chemistry::plan::Way::from_key(key).map(Self::Way)
        }
    }
}

/// One revision of the treatment of one batch.
#[derive(Clone, Debug, PartialEq)]
pub struct Plan {
    /// Its identifier.
    pub id: PlanId,
    /// The brewery's number of the batch.
    pub batch: String,
    /// Counts the revisions of this batch's plan, from one.
    pub revision: i64,
    /// The plan this one takes the place of.
    pub replaces: Option<PlanId>,
    /// What is brewed.
    pub beer_id: BeerId,
    /// Its name when the plan was drafted.
    pub beer_name: String,
    /// The day it is brewed.
    pub brewed_on: Date,
    /// Where it stands.
    pub state: State,
    /// What it is computed from.
    pub inputs: Inputs,
    /// When those were read.
    pub inputs_read_at: UtcTime,
    /// How its treatment was chosen.
    pub choice: Choice,
    /// Share of each source in the liquor.
    pub shares: Vec<Fraction>,
    /// What goes where, in the order of weighing out.
    pub doses: Vec<Dose>,
    /// When and by whom it was drafted.
    pub drafted: Deed,
    /// When, by whom and, where it needed one, for which reason it was approved.
    pub approved: Option<Deed>,
    /// The prediction of that moment.
    pub prediction: Option<Prediction>,
    /// When, by whom and why it was withdrawn.
    pub withdrawn: Option<Deed>,
    /// When, by whom and with which note it was closed.
    pub closed: Option<Deed>,
    /// Predicted against measured.
    pub outcome: Option<Outcome>,
    /// Counts changes, so that two people do not overwrite each other.
    pub version: i64,
}

impl Plan {
    /// Where its page is.
    pub fn address(&self) -> String {
        format!("/plans/{}", self.id)
    }
}

/// Who did it, when, and why if that was said.
#[derive(Clone, Debug, PartialEq)]
pub struct Deed {
    /// When.
    pub at: UtcTime,
    /// Who, by the name of that day.
    pub by: String,
    /// Why; empty if that was not asked.
    pub reason: String,
}

/// A mash pH as it was predicted.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Prediction {
    /// Expected, cooled sample.
    pub ph: Ph,
    /// One standard deviation.
    pub sd: PhShift,
    /// Lower end of the 90 % interval.
    pub low: Ph,
    /// Upper end.
    pub high: Ph,
}

/// One material, one amount, one vessel: planned and actual.
#[derive(Clone, Debug, PartialEq)]
pub struct Dose {
    /// Its identifier.
    pub id: DoseId,
    /// Its place in the weigh-out.
    pub position: i64,
    /// Where it goes.
    pub vessel: Vessel,
    /// Its place on the shelf of the plan's inputs.
    pub material: usize,
    /// How much was planned, g or mL.
    pub planned: DoseAmount,
    /// The mash check whose first step it is.
    pub mash_check: Option<MashCheckId>,
    /// What went in.
    pub weighed: Option<Weighed>,
}

impl Dose {
    /// What is in, or will be: the actual amount where it is known.
    pub fn amount(&self) -> DoseAmount {
        self.weighed
            .as_ref()
            .map_or(self.planned, |weighed| weighed.actual)
    }
}

/// A dose that is in.
#[derive(Clone, Debug, PartialEq)]
pub struct Weighed {
    /// How much, g or mL.
    pub actual: DoseAmount,
    /// Of which lot.
    pub lot: Lot,
    /// When it went in.
    pub at: UtcTime,
    /// By whom.
    pub by: String,
    /// Why it is not what was planned; empty where it is.
    pub reason: String,
    /// The second person who stood by, where the brewery wants one.
    pub witness: Option<Witness>,
    /// What was written down before it was corrected, the earliest first.
    pub corrections: Vec<Correction>,
}

/// What a dose was taken from.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Lot {
    /// The code on the pack; empty if it was not told.
    pub code: String,
    /// Which lot of the shelf; absent where the shelf knows none of that code.
    pub id: Option<MaterialLotId>,
    /// What that lot was, by its label and certificate on that day. Absent with the lot:
    /// then the figures of the plan count.
    pub material: Option<Material>,
}

/// Somebody who stood by.
#[derive(Clone, Debug, PartialEq)]
pub struct Witness {
    /// Whose account.
    pub id: MemberId,
    /// The name of that day.
    pub name: String,
}

/// What was written down about a dose, and why it no longer holds.
#[derive(Clone, Debug, PartialEq, serde::Serialize, serde::Deserialize, utoipa::ToSchema)]
pub struct Correction {
    /// How much was written down, g or mL.
    pub actual: f64,
    /// Of which lot.
    pub lot: String,
    /// Why that was not what was planned; empty where it was.
    pub reason: String,
    /// When it was corrected.
    pub corrected_at: UtcTime,
    /// By whom.
    pub corrected_by: String,
    /// Why.
    pub because: String,
}

/// A pH reading of a batch.
#[derive(Clone, Debug, PartialEq)]
pub struct MashCheck {
    /// Its identifier.
    pub id: MashCheckId,
    /// Which plan's batch.
    pub plan_id: PlanId,
    /// When in the making of the beer.
    pub stage: Stage,
    /// When.
    pub read_at: UtcTime,
    /// Minutes since strike.
    pub minute: Minutes,
    /// As the meter showed it.
    pub ph: Ph,
    /// Temperature of the sample in the meter's cup.
    pub sample: Celsius,
    /// Which meter, by the name of that day.
    pub meter: String,
    /// Which of the registered meters.
    pub meter_id: Option<MeterId>,
    /// The calibration it rested on.
    pub calibration_id: Option<CalibrationId>,
    /// One standard deviation of a reading, as its calibration had it at that moment.
    pub meter_sd: PhShift,
    /// Whether the meter was checked in buffer after a surprising reading.
    pub meter_checked: bool,
    /// Whether somebody said that the meter really showed what looked mistyped.
    pub confirmed: bool,
    /// How much wort there was; at the kettle only, and only where it was told.
    pub wort: Option<Litres>,
    /// Where it should be at cast-out, likewise.
    pub cast_out: Option<Ph>,
    /// What was advised, as it was shown.
    pub advised: Advised,
    /// By whom.
    pub read_by: String,
    /// When, by whom and why the reading was withdrawn.
    pub withdrawn: Option<Deed>,
}

impl MashCheck {
    /// Minutes since strike, at the stages that are timed so.
    pub fn since_strike(&self) -> Option<Minutes> {
        self.stage.timed_from_strike().then_some(self.minute)
    }

    /// Whether something may rest on it: not withdrawn, and not to be read again.
    pub fn stands(&self) -> bool {
        self.withdrawn.is_none() && self.advised.advice != "read_again"
    }
}

/// What was said to a mash check.
#[derive(Clone, Debug, PartialEq, serde::Serialize, serde::Deserialize, utoipa::ToSchema)]
pub struct Advised {
    /// What counts, on the basis of a cooled sample: the mean of the readings that repeat
    /// each other.
    pub reading_ph: f64,
    /// Its standard deviation.
    pub reading_sd: f64,
    /// This reading by itself, cooled basis; absent where it is the one that counts.
    #[serde(default)]
    pub single_ph: Option<f64>,
    /// How many readings were put together; 1 for one alone.
    #[serde(default = "one")]
    pub readings: u32,
    /// What the plan with all that is in expects of the mash; absent at other stages.
    pub expected_ph: Option<f64>,
    /// Its standard deviation.
    pub expected_sd: Option<f64>,
    /// What was expected after the reading before and what went in since; absent where
    /// nothing went in since.
    #[serde(default)]
    pub expected_now_ph: Option<f64>,
    /// Its standard deviation.
    #[serde(default)]
    pub expected_now_sd: Option<f64>,
    /// Lower end of the window; absent where it is open.
    #[serde(default)]
    pub window_low: Option<f64>,
    /// Upper end.
    #[serde(default)]
    pub window_high: Option<f64>,
    /// Where the window comes from.
    #[serde(default)]
    pub window_source: String,
    /// `inside`, `cannot_be_told`, `below` or `above`; `noted` where there is no window.
    pub verdict: String,
    /// `leave`, `step`, `read_again` or `stop`.
    pub advice: String,
    /// Why, in one word for programs: `inside`, `cannot_be_told`, `never_raised`,
    /// `below_a_step`, `too_early`, `hot`, `calibrate`, `disagree`, `check_the_meter`,
    /// `weigh_in_first`, `not_the_planned_mash`, `cap`, `other_way`, `no_remedy`,
    /// `no_prediction`, `outside`, `unsafe` or `noted`. Empty with a step.
    #[serde(default)]
    pub why: String,
    /// What to do, in a heading.
    pub title: String,
    /// Why, in sentences.
    pub words: Vec<String>,
    /// The first step, if one is advised.
    pub step: Option<Step>,
    /// The same step with other materials of the shelf.
    #[serde(default)]
    pub others: Vec<Step>,
}

const fn one() -> u32 {
    1
}

/// Half of the computed dose, to be added now.
#[derive(Clone, Debug, PartialEq, serde::Serialize, serde::Deserialize, utoipa::ToSchema)]
pub struct Step {
    /// Place of the material on the plan's shelf.
    pub material: usize,
    /// Its name.
    pub name: String,
    /// Where it goes: `mash` or `kettle`.
    #[serde(default = "in_the_mash")]
    pub vessel: String,
    /// How much to add now, g or mL, on the step of the scale.
    pub amount: f64,
    /// `g` or `mL`.
    pub unit: String,
    /// What the target would take in full, g or mL.
    pub full_dose: f64,
    /// `lower` or `raise`.
    pub direction: String,
    /// The pH to expect after it.
    pub expected_ph: f64,
    /// Its standard deviation.
    pub expected_sd: f64,
    /// The chance that it then lies in the window, 0 to 1.
    #[serde(default)]
    pub chance: Option<f64>,
    /// When to read again, min.
    pub reread_after_minutes: f64,
    /// What it adds to the whole liquor of the batch.
    #[serde(default)]
    pub adds: Vec<Added>,
}

fn in_the_mash() -> String {
    Vessel::Mash.key().to_owned()
}

/// One figure of the whole liquor before and after a step.
#[derive(Clone, Debug, PartialEq, serde::Serialize, serde::Deserialize, utoipa::ToSchema)]
pub struct Added {
    /// Of what.
    pub figure: String,
    /// With what is in so far, mg/L.
    pub before: f64,
    /// With the step, mg/L.
    pub after: f64,
    /// Lowest by the spec, mg/L.
    pub low: Option<f64>,
    /// Highest by the spec or the limits of the plan, mg/L.
    pub high: Option<f64>,
}

/// Predicted against measured for one batch.
#[derive(Clone, Debug, PartialEq, serde::Serialize, serde::Deserialize, utoipa::ToSchema)]
pub struct Outcome {
    /// The pH predicted at approval.
    pub predicted_ph: f64,
    /// Its standard deviation.
    pub predicted_sd: f64,
    /// What the balance says with what was really weighed in before the reading, and
    /// nothing learned.
    pub untrained_ph: f64,
    /// The reading that counts, cooled basis; absent if the mash was not read.
    pub measured_ph: Option<f64>,
    /// Its standard deviation.
    pub measured_sd: Option<f64>,
    /// Which mash check it was.
    pub mash_check_id: Option<MashCheckId>,
    /// Whether it counts for learning; a reading that was spoilt does not.
    pub counts: bool,
    /// How far each malt moves this mash.
    pub malts: Vec<learning::Taught>,
    /// Doubt of the untrained prediction from everything but the malts' own pH.
    pub other_sd: f64,
}
