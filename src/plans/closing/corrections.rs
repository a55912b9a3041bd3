//! What is found out about a batch after it was closed: a wrong lot, a wrong amount, a
//! reading of another mash. The closed plan stays as it is; the correction stands beside
//! it with what was said before.

use chemistry::quantity::{DoseAmount, Ph};
use serde::{Deserialize, Serialize};
use serde_json::json;
use sqlx::SqliteConnection;

use super::store;
use crate::db::Db;
use crate::error::Error;
use crate::id::{DoseId, MaterialLotId, PlanCorrectionId, PlanId, UtcTime};
use crate::input::{Flag, Number, Problems};
use crate::people::{Member, Permission};
use crate::plans::operations::{about, title};
use crate::plans::{Deed, Dose, Plan, State};
use crate::web::format;
use crate::{record, shelf};

/// What a correction is about.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum What {
    /// The lot a dose was taken from.
    Lot,
    /// How much of a dose went in.
    Amount,
    /// The reading that counts.
    Reading,
    /// Anything else.
    Other,
}

impl What {
    /// Everything a correction may be about.
    pub const ALL: [Self; 4] = [Self::Lot, Self::Amount, Self::Reading, Self::Other];

    /// As stored and sent.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Lot => "lot",
            Self::Amount => "amount",
            Self::Reading => "reading",
            Self::Other => "other",
        }
    }

    /// What with this key.
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|what| what.key() == key)
    }
}

/// A correction of a closed batch.
#[derive(Clone, Debug, PartialEq)]
pub struct PlanCorrection {
    /// Its identifier.
    pub id: PlanCorrectionId,
    /// What it is about.
    pub what: What,
    /// Which dose, for a lot or an amount.
    pub dose_id: Option<DoseId>,
    /// What was said before, in SI units; empty for anything else.
    pub said_before: String,
    /// What is right, in SI units.
    pub says_now: String,
    /// An amount as it really was, g or mL.
    pub amount: Option<DoseAmount>,
    /// A lot, where the shelf knows it.
    pub lot_id: Option<MaterialLotId>,
    /// Whether the batch teaches the next prediction all the same.
    pub teaches: bool,
    /// When, by whom and why.
    pub made: Deed,
}

/// A correction to be made.
#[derive(Clone, Debug, PartialEq)]
pub struct NewCorrection {
    /// What is right now.
    pub says: Says,
    /// Whether the batch teaches the next prediction all the same. A wrong amount or
    /// reading never does: the closed figures were computed with it.
    pub teaches: bool,
    /// Why.
    pub reason: String,
}

/// What is right.
#[derive(Clone, Debug, PartialEq)]
pub enum Says {
    /// A dose was of the lot with this code.
    Lot(DoseId, String),
    /// So much of a dose went in.
    Amount(DoseId, DoseAmount),
    /// The reading that counts should have been this.
    Reading(Ph),
    /// In words.
    Other(String),
}

/// A correction of a closed batch.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct NewCorrectionBody {
    /// `lot`, `amount`, `reading` or `other`.
    #[schema(required = true, min_length = 1)]
    pub what: String,
    /// Which dose, for a lot or an amount.
    pub dose_id: String,
    /// The code of the right lot.
    #[schema(max_length = 80)]
    pub lot: String,
    /// The right amount, g or mL.
    pub amount: Number,
    /// What the reading that counts should have been, cooled sample.
    pub ph: Number,
    /// Anything else, in words.
    #[schema(max_length = 500)]
    pub words: String,
    /// Whether the batch no longer teaches the next prediction. A wrong amount or reading takes it
    /// out in any case.
    pub stop_learning: Flag,
    /// Why.
    #[schema(required = true, min_length = 1, max_length = 500)]
    pub reason: String,
}

impl TryFrom<NewCorrectionBody> for NewCorrection {
    type Error = Error;

    fn try_from(body: NewCorrectionBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let what = problems.choice("what", &body.what, What::from_key);
        let dose = match what {
            Some(What::Lot | What::Amount) => {
                problems.choice("dose_id", &body.dose_id, |key| key.parse().ok())
            }
            _ => None,
        };
        let says = match what {
            None => None,
            Some(What::Lot) => problems
                .text("lot", &body.lot, 80)
                .zip(dose)
                .map(|(lot, dose)| Says::Lot(dose, lot)),
            Some(What::Amount) => problems
                .quantity("amount", &body.amount, DoseAmount::new)
                .zip(dose)
                .map(|(amount, dose)| Says::Amount(dose, amount)),
            Some(What::Reading) => problems
                .quantity("ph", &body.ph, |value| {
                    if (2.0..=10.0).contains(&value) {
                        Ok(Ph::clamped(value))
                    } else {
                        Err("A mash reads between pH 2 and 10")
                    }
                })
                .map(Says::Reading),
            Some(What::Other) => problems.text("words", &body.words, 500).map(Says::Other),
        };
        let reason = problems.text("reason", &body.reason, 500);
        problems.finish()?;
        let (Some(says), Some(reason)) = (says, reason) else {
            return Err(Error::field("", "Fill in every field."));
        };
        Ok(Self {
            teaches: !body.stop_learning.0 && !matches!(says, Says::Amount(..) | Says::Reading(_)),
            says,
            reason,
        })
    }
}

/// Every correction of a batch, the earliest first.
pub async fn list(db: &Db, by: &Member, plan: PlanId) -> Result<Vec<PlanCorrection>, Error> {
    by.may(Permission::Read)?;
    store::corrections(&mut *db.reader().await?, plan).await
}

/// Writes down what is right about a closed batch. What was closed stays to be read.
pub async fn correct(
    db: &Db,
    by: &Member,
    id: PlanId,
    new: NewCorrection,
) -> Result<PlanCorrection, Error> {
    by.may(Permission::ApprovePlans)?;
    let mut tx = db.begin().await?;
    let plan = crate::plans::store::find(&mut tx, id)
        .await?
        .ok_or(Error::NotFound("plan"))?;
    if plan.state != State::Closed {
        return Err(Error::Conflict(format!(
            "This plan is {}: correct what was weighed in or read itself",
            plan.state.name().to_lowercase()
        )));
    }
    let earlier = store::corrections(&mut tx, id).await?;
    let mut correction = PlanCorrection {
        id: PlanCorrectionId::new(),
        what: What::Other,
        dose_id: None,
        said_before: String::new(),
        says_now: String::new(),
        amount: None,
        lot_id: None,
        teaches: new.teaches,
        made: Deed {
            at: UtcTime::now(),
            by: by.name.clone(),
            reason: new.reason.clone(),
        },
    };
    let mut subject = title(&plan);
    match new.says {
        Says::Lot(dose, code) => {
            let dose = weighed(&plan, dose)?;
            let before = dose.weighed.as_ref().map_or("", |it| it.lot.code.as_str());
            correction.what = What::Lot;
            correction.dose_id = Some(dose.id);
            correction.said_before = last(&earlier, What::Lot, Some(dose.id))
                .unwrap_or(if before.is_empty() {
                    "not told"
                } else {
                    before
                })
                .to_owned();
            correction.lot_id = lot(&mut tx, &plan, dose, &code).await?;
            correction.says_now = code;
            subject = format!("{}, {subject}", line(&plan, dose));
        }
        Says::Amount(dose, amount) => {
            let dose = weighed(&plan, dose)?;
            let with_unit = |amount: DoseAmount| {
                let item = plan.inputs.problem.shelf.get(dose.material);
                let unit = item.map_or("", |item| item.material.unit().symbol());
                format!("{} {unit}", format::entered(amount.get()))
            };
            let before = dose.weighed.as_ref().map(|it| with_unit(it.actual));
            correction.what = What::Amount;
            correction.dose_id = Some(dose.id);
            correction.said_before = last(&earlier, What::Amount, Some(dose.id))
                .map(str::to_owned)
                .or(before)
                .unwrap_or_default();
            correction.says_now = with_unit(amount);
            correction.amount = Some(amount);
            subject = format!("{}, {subject}", line(&plan, dose));
        }
        Says::Reading(ph) => {
            let measured = plan.outcome.as_ref().and_then(|it| it.measured_ph);
            let Some(measured) = measured else {
                return Err(Error::field(
                    "what",
                    "No reading counts for this batch. Tell it in words.",
                ));
            };
            correction.what = What::Reading;
            correction.said_before = last(&earlier, What::Reading, None)
                .map_or_else(|| format::ph(measured), str::to_owned);
            correction.says_now = format::ph(ph.get());
        }
        Says::Other(words) => correction.says_now = words,
    }
    store::insert_correction(&mut tx, id, &correction).await?;
    let key = correction.what.key();
    let change = record::Change::of(
        "corrected after closing",
        "plan",
        id,
        &subject,
        Some(json!({key: correction.said_before})),
        Some(json!({key: correction.says_now, "teaches": correction.teaches})),
    );
    let lots = correction.lot_id.map(|lot| ("material lot", lot));
    let change = change
        .because(Some(new.reason))
        .about_each(about(&plan))
        .about_each(lots);
    record::append(&mut tx, by, change).await?;
    tx.commit().await?;
    Ok(correction)
}

fn weighed(plan: &Plan, id: DoseId) -> Result<&Dose, Error> {
    plan.doses
        .iter()
        .find(|dose| dose.id == id && dose.weighed.is_some())
        .ok_or_else(|| Error::field("dose_id", "Choose one of the doses of this batch."))
}

fn line(plan: &Plan, dose: &Dose) -> String {
    let item = plan.inputs.problem.shelf.get(dose.material);
    let name = item.map_or("", |item| item.name.as_str());
    format!("{name} into the {}", dose.vessel.name())
}

/// What the last correction of the same says.
fn last(earlier: &[PlanCorrection], what: What, dose: Option<DoseId>) -> Option<&str> {
    let same = |it: &&PlanCorrection| it.what == what && it.dose_id == dose;
    earlier.iter().rfind(same).map(|it| it.says_now.as_str())
}

/// The lot with this code, where the shelf knows one of the material.
async fn lot(
    tx: &mut SqliteConnection,
    plan: &Plan,
    dose: &Dose,
    code: &str,
) -> Result<Option<MaterialLotId>, Error> {
    match plan.inputs.shelf.get(dose.material).and_then(|it| it.id) {
        Some(material) => {
            let lot = shelf::operations::lot_by_code(tx, material, code).await?;
            Ok(lot.map(|lot| lot.id))
        }
        None => Ok(None),
    }
}
