//! Every revision of a batch's plan with what was decided about it, and the calibrations
//! its readings rest on: for the batch sheet.

use super::store;
use crate::db::Db;
use crate::error::Error;
use crate::id::{CalibrationId, PlanId, UtcTime};
use crate::people::{Member, Permission};
use crate::plans::{Deed, State};

/// One revision of a batch's plan.
#[derive(Clone, Debug, PartialEq)]
pub struct Revision {
    /// Counts them, from one.
    pub revision: i64,
    /// Where it stands.
    pub state: State,
    /// When and by whom it was drafted.
    pub drafted: Deed,
    /// When, by whom and why it was approved.
    pub approved: Option<Deed>,
    /// When, by whom and why it was withdrawn.
    pub withdrawn: Option<Deed>,
    /// When, by whom and with which note it was closed.
    pub closed: Option<Deed>,
}

/// Every revision of a batch's plan, the first one first.
pub async fn of_batch(db: &Db, by: &Member, batch: &str) -> Result<Vec<Revision>, Error> {
    by.may(Permission::Read)?;
    store::revisions(&mut *db.reader().await?, batch).await
}

/// A calibration that a reading rests on.
#[derive(Clone, Debug, PartialEq)]
pub struct Calibrated {
    /// Which.
    pub id: CalibrationId,
    /// When.
    pub at: UtcTime,
    /// Its slope, per cent of what Nernst says.
    pub slope_percent: f64,
}

/// The calibrations that the readings of a plan rest on.
pub async fn calibrations(db: &Db, by: &Member, plan: PlanId) -> Result<Vec<Calibrated>, Error> {
    by.may(Permission::Read)?;
    store::calibrations(&mut *db.reader().await?, plan).await
}
