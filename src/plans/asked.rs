//! What is sent about plans: drafts, treatments, weighed amounts, readings, reasons.
//! Forms and the API become the same bodies, and every rule about a field is here.

use chemistry::material::Vessel;
use chemistry::plan::{self, Way};
use chemistry::quantity::{Celsius, DoseAmount, Fraction, Litres, Minutes, Ph, PhShift};
use serde::{Deserialize, Serialize};

use super::Stage;
use super::bodies::InputsBody;
use super::closing::Closing;
use super::mash_checks::{MeterNamed, NewMashCheck};
use super::operations::{NewPlan, SourceChoice, Treatment};
use super::weigh_out::{Actual, LotNamed, NewCorrection, NewWeighed};
use crate::error::Error;
use crate::id::{BeerId, MashCheckId, UtcTime};
use crate::input::{Flag, Number, Problems};

/// A plan to be drafted.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct NewPlanBody {
    /// The brewery's number of the batch.
    #[schema(required = true, min_length = 1)]
    pub batch: String,
    /// What is brewed: an identifier of `/beers`.
    #[schema(required = true, min_length = 1)]
    pub beer_id: String,
    /// The day it is brewed, `2026-03-31`.
    #[schema(required = true, min_length = 1)]
    pub brewed_on: String,
    /// How to choose the treatment: `closest_to_preferred`, `fewest_additions`,
    /// `least_blending_water` or `cheapest`; the first when not given.
    pub way: String,
    /// Which sources may be used; every source in use when empty.
    pub sources: Vec<SourceChoiceBody>,
}

/// A source and how much of it may be used.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct SourceChoiceBody {
    /// An identifier of `/sources`.
    pub source_id: String,
    /// Whether it may be used; yes when not given.
    pub used: Option<Flag>,
    /// Least share of the liquor, per cent; 0 when not given.
    pub lowest_percent: Number,
    /// Greatest share of the liquor, per cent; 100 when not given.
    pub highest_percent: Number,
}

impl TryFrom<NewPlanBody> for NewPlan {
    type Error = Error;

    fn try_from(body: NewPlanBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let batch = problems.text("batch", &body.batch, 40);
        let beer_id = problems.choice("beer_id", &body.beer_id, |key| key.parse::<BeerId>().ok());
        let brewed_on = problems.date("brewed_on", &body.brewed_on);
        let way = if body.way.trim().is_empty() {
            Some(Way::ClosestToPreferred)
        } else {
            problems.choice("way", &body.way, Way::from_key)
        };
        let mut sources = Vec::new();
        let mut all_off = !body.sources.is_empty();
        for (index, source) in body.sources.iter().enumerate() {
            if source.used.is_some_and(|used| !used.0) {
                continue;
            }
            all_off = false;
            problems.within(format!("sources.{index}"), |problems| {
                let source_id =
                    problems.choice("source_id", &source.source_id, |key| key.parse().ok());
                let percent = |value: f64| {
                    if (0.0..=100.0).contains(&value) {
                        Ok(Fraction::clamped(value / 100.0))
                    } else {
                        Err("Enter 0 to 100 %")
                    }
                };
                let lowest =
                    problems.optional_quantity("lowest_percent", &source.lowest_percent, percent);
                let highest =
                    problems.optional_quantity("highest_percent", &source.highest_percent, percent);
                let (lowest, highest) = (
                    lowest.unwrap_or(Fraction::constant(0.0)),
                    highest.unwrap_or(Fraction::constant(1.0)),
                );
                if lowest > highest {
                    problems.add("lowest_percent", "The least share is above the greatest.");
                }
                sources.extend(source_id.map(|source_id| SourceChoice {
                    source_id,
                    lowest,
                    highest,
                }));
            });
        }
        if all_off {
            problems.add("sources", "Choose at least one source.");
        }
        problems.finish()?;
        match (batch, beer_id, brewed_on, way) {
            (Some(batch), Some(beer_id), Some(brewed_on), Some(way)) => Ok(Self {
                batch,
                beer_id,
                brewed_on,
                way,
                sources,
            }),
            _ => Err(Error::field("", "Fill in every field.")),
        }
    }
}

/// A draft's treatment.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct TreatmentBody {
    /// Share of each source, per cent, in the order of the inputs. They must add up to
    /// 100.
    #[schema(required = true)]
    pub shares_percent: Vec<Number>,
    /// What goes where. An amount of nothing, or none, is left out.
    pub doses: Vec<DoseInputBody>,
}

/// One amount of a draft.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct DoseInputBody {
    /// Place of the material on the plan's shelf, counting from 0.
    #[schema(required = true)]
    pub material: Number,
    /// `liquor_tank`, `mash`, `sparge_liquor` or `kettle`.
    #[schema(required = true, min_length = 1)]
    pub vessel: String,
    /// How much, g or mL.
    pub amount: Number,
}

/// How far shares may be from a whole before they are refused, per cent: two decimals of
/// rounding for each of a few sources.
const SHARES_TOLERANCE: f64 = 0.11;

impl TryFrom<TreatmentBody> for Treatment {
    type Error = Error;

    fn try_from(body: TreatmentBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let mut shares = Vec::new();
        for (index, share) in body.shares_percent.iter().enumerate() {
            let field = format!("shares_percent.{index}");
            let check = |value: f64| {
                if (0.0..=100.0).contains(&value) {
                    Ok(value)
                } else {
                    Err("Enter 0 to 100 %")
                }
            };
            if share.is_missing() {
                shares.push(0.0);
            } else {
                shares.extend(problems.quantity(&field, share, check));
            }
        }
        let sum: f64 = shares.iter().sum();
        if problems.is_empty() && (sum - 100.0).abs() > SHARES_TOLERANCE {
            let last = body.shares_percent.len().saturating_sub(1);
            problems.add(
                format!("shares_percent.{last}"),
                format!(
                    "The shares add up to {} %; they must add up to 100 %.",
                    crate::web::format::decimals(sum, 1)
                ),
            );
        }
        let mut doses = Vec::new();
        for (index, dose) in body.doses.iter().enumerate() {
            problems.within(format!("doses.{index}"), |problems| {
                let whole = |value: f64| {
                    if (0.0..1000.0).contains(&value) && value.fract() == 0.0 {
                        Ok(value as usize)
                    } else {
                        Err("Enter a place on the shelf")
                    }
                };
                let material = problems.quantity("material", &dose.material, whole);
                let vessel = problems.choice("vessel", &dose.vessel, Vessel::from_key);
                let amount = if dose.amount.is_missing() {
                    Some(DoseAmount::constant(0.0))
                } else {
                    problems.quantity("amount", &dose.amount, DoseAmount::new)
                };
                if let (Some(material), Some(vessel), Some(amount)) = (material, vessel, amount) {
                    doses.push(plan::Dose {
                        material,
                        vessel,
                        amount,
                    });
                }
            });
        }
        problems.finish()?;
        Ok(Self {
            shares: shares
                .into_iter()
                .map(|share| Fraction::clamped(share / sum))
                .collect(),
            doses,
        })
    }
}

/// An approval.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct ApprovalBody {
    /// Why, in words. Water outside the limits for drinking water needs a reason.
    #[schema(max_length = 500)]
    pub reason: String,
}

impl ApprovalBody {
    /// The reason, if one was given.
    pub fn reason(&self) -> Result<Option<String>, Error> {
        let mut problems = Problems::new();
        let reason = problems.optional_text("reason", &self.reason, 500);
        problems.finish()?;
        Ok(reason)
    }
}

/// What was weighed in.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct WeighedBody {
    /// How much went in, g or mL. 0 where the line was left out, which needs a reason.
    #[schema(required = true)]
    pub actual: Number,
    /// Whether it was what was planned, to the last digit: then `actual` is not read.
    pub as_planned: Flag,
    /// Of which lot: an identifier of `/materials/{id}/lots`.
    pub material_lot_id: String,
    /// The code on its pack, or what its label reads: `LEAT:LOT:` and the identifier.
    /// Counts before `material_lot_id`. A code that the shelf does not know is kept.
    #[schema(max_length = 80)]
    pub lot: String,
    /// Why it is further from what was planned than the tolerance of the material or one
    /// step of its scale.
    #[schema(max_length = 500)]
    pub reason: String,
}

impl WeighedBody {
    fn check(&self, problems: &mut Problems) -> NewWeighed {
        let actual = if self.as_planned.0 {
            Some(Actual::AsPlanned)
        } else {
            let amount = problems.quantity("actual", &self.actual, DoseAmount::new);
            amount.map(Actual::Amount)
        };
        let lot = match problems.optional_text("lot", &self.lot, 80) {
            Some(text) => LotNamed::read(&text).unwrap_or_else(|message| {
                problems.add("lot", message);
                LotNamed::Untold
            }),
            None if self.material_lot_id.trim().is_empty() => LotNamed::Untold,
            None => problems
                .choice("material_lot_id", &self.material_lot_id, |key| {
                    key.parse().ok()
                })
                .map_or(LotNamed::Untold, LotNamed::Picked),
        };
        NewWeighed {
            actual: actual.unwrap_or(Actual::AsPlanned),
            lot,
            reason: problems.optional_text("reason", &self.reason, 500),
            witness: None,
            at: UtcTime::now(),
        }
    }
}

impl TryFrom<WeighedBody> for NewWeighed {
    type Error = Error;

    fn try_from(body: WeighedBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let new = body.check(&mut problems);
        problems.finish()?;
        Ok(new)
    }
}

/// What should have been written down about a dose.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct CorrectionBody {
    /// How much really went in, g or mL.
    #[schema(required = true)]
    pub actual: Number,
    /// Of which lot: an identifier of `/materials/{id}/lots`.
    pub material_lot_id: String,
    /// The code on its pack, or what its label reads. Counts before `material_lot_id`.
    #[schema(max_length = 80)]
    pub lot: String,
    /// What was wrong.
    #[schema(required = true, min_length = 1, max_length = 500)]
    pub reason: String,
    /// How many `corrections` the dose had when it was read; more of them by now are
    /// answered with a conflict.
    pub corrections: Number,
}

impl TryFrom<CorrectionBody> for NewCorrection {
    type Error = Error;

    fn try_from(body: CorrectionBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        problems.text("reason", &body.reason, 500);
        let seen = problems.optional_quantity("corrections", &body.corrections, |value| {
            if (0.0..1e6).contains(&value) && value.fract() == 0.0 {
                Ok(value as usize)
            } else {
                Err("Enter how many there were")
            }
        });
        let weighed = WeighedBody {
            actual: body.actual,
            as_planned: Flag(false),
            material_lot_id: body.material_lot_id,
            lot: body.lot,
            reason: body.reason,
        };
        let weighed = weighed.check(&mut problems);
        problems.finish()?;
        Ok(Self { weighed, seen })
    }
}

/// A pH reading.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct NewMashCheckBody {
    /// `liquor`, `mash`, `first_runnings`, `last_runnings`, `kettle_full`, `end_of_boil`,
    /// `end_of_fermentation` or `package`; the mash when not given.
    pub stage: String,
    /// Minutes since strike; needed for the mash, and of the runnings where it is known.
    pub minute: Number,
    /// As the meter showed it.
    #[schema(required = true)]
    pub ph: Number,
    /// Temperature of the sample in the meter's cup, °C.
    #[schema(required = true)]
    pub sample_c: Number,
    /// Which meter: an identifier of `/meters`. Its calibration says how far the reading is
    /// to be believed.
    pub meter_id: String,
    /// The name of a meter that is not among them. Nothing is advised on its readings.
    pub meter: String,
    /// One standard deviation of a reading of that meter; 0.03 is assumed when not given.
    pub meter_sd: Number,
    /// Whether the meter was checked in buffer after a surprising reading.
    pub meter_checked: Flag,
    /// Whether the meter really showed what looks mistyped. A reading that looks so is
    /// refused once, pointing at `ph` or `sample_c`.
    pub confirmed: Flag,
    /// Wort in the kettle, L; at `kettle_full` and `end_of_boil` only. The beer of the batch
    /// is assumed when not given.
    pub wort_l: Number,
    /// The pH wished for at cast-out, there too; 5.20 is assumed when not given.
    pub cast_out_ph: Number,
}

/// Error of a calibrated meter, cooled sample. Source: assumed, as for
/// `statistics::learning::CAREFUL_READING`.
pub const METER_SD: f64 = 0.03;

/// A pH as a meter shows one. A decimal point forgotten is the usual slip.
fn shown_ph(value: f64) -> Result<Ph, String> {
    if (0.0..=14.0).contains(&value) {
        return Ok(Ph::clamped(value));
    }
    let rather = [10.0, 100.0, 1000.0]
        .into_iter()
        .map(|by| value / by)
        .find(|ph| (3.0..8.0).contains(ph));
    Err(match rather {
        Some(ph) => format!("A pH lies between 0 and 14. Perhaps it was {ph}"),
        None => "A pH lies between 0 and 14. Read it again".into(),
    })
}

impl TryFrom<NewMashCheckBody> for NewMashCheck {
    type Error = Error;

    fn try_from(body: NewMashCheckBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let stage = if body.stage.trim().is_empty() {
            Some(Stage::Mash)
        } else {
            problems.choice("stage", &body.stage, Stage::from_key)
        };
        let minute = if stage == Some(Stage::Mash) || !body.minute.is_missing() {
            problems.quantity("minute", &body.minute, |value| {
                Minutes::new(value)
                    .map_err(|_| "Enter the minutes since strike, 0 or more".to_owned())
            })
        } else {
            Some(Minutes::constant(0.0))
        };
        let ph = problems.quantity("ph", &body.ph, shown_ph);
        let sample = problems.quantity("sample_c", &body.sample_c, |value| {
            if (0.0..=100.0).contains(&value) {
                Ok(Celsius::clamped(value))
            } else {
                Err(
                    "A sample lies between freezing and boiling, 0 to 100 °C or 32 to 212 °F. Look which unit the \
                     thermometer shows",
                )
            }
        });
        let meter_id = if body.meter_id.trim().is_empty() {
            None
        } else {
            problems.choice("meter_id", &body.meter_id, |key| key.parse().ok())
        };
        let name = problems.optional_text("meter", &body.meter, 80);
        let sd = problems.optional_quantity("meter_sd", &body.meter_sd, |value| {
            if (0.001..=1.0).contains(&value) {
                Ok(PhShift::clamped(value))
            } else {
                Err("Enter 0.001 to 1")
            }
        });
        let (mut wort, mut cast_out) = (None, None);
        if matches!(stage, Some(Stage::KettleFull | Stage::EndOfBoil)) {
            wort = problems.optional_quantity("wort_l", &body.wort_l, |value| {
                if (1.0..=1e6).contains(&value) {
                    Ok(Litres::clamped(value))
                } else {
                    Err("Enter how much wort is in the kettle, more than nothing")
                }
            });
            cast_out = problems.optional_quantity("cast_out_ph", &body.cast_out_ph, |value| {
                if (4.0..=6.0).contains(&value) {
                    Ok(Ph::clamped(value))
                } else {
                    Err("Enter a pH from 4 to 6")
                }
            });
        }
        problems.finish()?;
        match (stage, minute, ph, sample) {
            (Some(stage), Some(minute), Some(ph), Some(sample)) => Ok(Self {
                stage,
                minute: if stage.timed_from_strike() {
                    minute
                } else {
                    Minutes::constant(0.0)
                },
                ph,
                sample,
                meter: meter_id.map_or_else(
                    || MeterNamed::Another {
                        name: name.unwrap_or_default(),
                        sd: sd.unwrap_or(PhShift::constant(METER_SD)),
                    },
                    MeterNamed::Registered,
                ),
                meter_checked: body.meter_checked.0,
                confirmed: body.confirmed.0,
                wort,
                cast_out,
            }),
            _ => Err(Error::field("", "Fill in every field.")),
        }
    }
}

/// How a batch is closed.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct ClosingBody {
    /// The mash check that counts; the first good one when not given.
    pub mash_check_id: String,
    /// Whether it counts for learning; yes when not given.
    pub counts: Option<Flag>,
    /// Why things were not as planned. What has no reason yet needs one here or in the note.
    pub reasons: Vec<DeviationReasonBody>,
    /// What else should be known.
    pub note: String,
}

/// Why something was not as planned.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct DeviationReasonBody {
    /// Which deviation: a key of `/plans/{id}/deviations`.
    #[schema(required = true, min_length = 1)]
    pub deviation: String,
    /// Why; left blank, the note stands for it.
    #[schema(max_length = 500)]
    pub reason: String,
}

impl TryFrom<ClosingBody> for Closing {
    type Error = Error;

    fn try_from(body: ClosingBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let mash_check_id = if body.mash_check_id.is_empty() {
            None
        } else {
            problems.choice("mash_check_id", &body.mash_check_id, |key| {
                key.parse::<MashCheckId>().ok()
            })
        };
        let note = problems.optional_text("note", &body.note, 2000);
        let mut reasons = Vec::new();
        for (index, given) in body.reasons.into_iter().enumerate() {
            let field = format!("reasons.{index}.reason");
            let reason = problems.optional_text(&field, &given.reason, 500);
            reasons.extend(reason.map(|reason| (given.deviation, reason)));
        }
        problems.finish()?;
        Ok(Self {
            reasons,
            mash_check_id,
            counts: body.counts.is_none_or(|counts| counts.0),
            note,
        })
    }
}

/// Water, grist, volumes, shelf and spec; and a treatment to try, if you like.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct PreviewInputBody {
    /// What to compute from.
    #[serde(flatten)]
    pub inputs: InputsBody,
    /// Shares and doses to try.
    pub treatment: Option<TreatmentBody>,
}
