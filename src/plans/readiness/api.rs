//! `/api/v1/brew-day`.

use axum::extract::State;
use serde::Serialize;
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::{Batch, BrewDay, Freshness, Missing, brew_day};
use crate::brewery::Units;
use crate::db::Db;
use crate::error::Error;
use crate::id::{BeerId, PlanId, SourceId, UtcTime};
use crate::people::Member;
use crate::web::App;
use crate::web::problem::Problem;

/// The endpoint.
pub(in crate::plans) fn routes() -> OpenApiRouter<App> {
    OpenApiRouter::new().routes(routes!(show))
}

/// The open batches around today.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct BrewDayBody {
    /// Today's date in the brewery's time zone.
    on: String,
    /// The last day whose batches are listed.
    until: String,
    /// Today's batches, late ones, and those of the days after, in this order.
    batches: Vec<OpenBatchBody>,
    /// Late batches that are not listed.
    more_late: usize,
    /// Open batches after the days that are listed.
    later: usize,
    /// When each source these batches draw on was tested and should be again.
    waters: Vec<FreshnessBody>,
}

/// A batch whose plan is neither closed nor withdrawn.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct OpenBatchBody {
    /// Its plan: see `/plans/{id}`.
    plan_id: PlanId,
    /// Its number.
    batch: String,
    /// Which revision of its plan.
    revision: i64,
    /// What is brewed.
    beer_id: BeerId,
    /// Its name.
    beer_name: String,
    /// The day it is brewed.
    brewed_on: String,
    /// `today`, `late` (an earlier day, and not closed since) or `this_week`.
    when: &'static str,
    /// `draft`, `approved` or `dosed`.
    state: &'static str,
    /// Lines of the weigh-out.
    lines: usize,
    /// Lines that are in.
    lines_in: usize,
    /// The newest reading of the mash, cooled basis.
    mash_ph: Option<f64>,
    /// Its standard deviation.
    mash_ph_sd: Option<f64>,
    /// What is missing before it can start, or is better seen to.
    missing: Vec<MissingBody>,
    /// What to do next.
    next: NextBody,
}

/// Something that is missing.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct MissingBody {
    /// `approval`, `revision` (another is being drafted), `test` (a source has none),
    /// `fresh_test` (it should have been tested again), `newer_test` (it was tested after the plan
    /// read its water), `assumed` (figures of a source are), `material` (there is too little of
    /// it), `meter` (none can be acted on) or `fresh_lot` (the lot in use is past
    /// its day).
    kind: &'static str,
    /// In a sentence.
    words: String,
    /// Whether nothing can be weighed out before.
    stops: bool,
}

/// What to do next with a batch.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct NextBody {
    /// `approve`, `decide_on_revision`, `weigh_out`, `give_step`, `read_mash`, `read_again` or
    /// `close`.
    kind: &'static str,
    /// When, where that is a moment.
    due_at: Option<UtcTime>,
}

/// When a source was tested and should be again.
#[derive(Debug, Serialize, utoipa::ToSchema)]
pub struct FreshnessBody {
    /// Which source.
    source_id: SourceId,
    /// Its name.
    name: String,
    /// The day of its newest sample; absent if it was never tested.
    last_sampled_on: Option<String>,
    /// The day the next one should be drawn.
    next_due_on: Option<String>,
    /// `done`, `due` (within a week) or `overdue`.
    state: &'static str,
}

impl From<&Missing> for MissingBody {
    fn from(missing: &Missing) -> Self {
        Self {
            kind: missing.key(),
            words: missing.words(Units::Metric),
            stops: missing.stops(),
        }
    }
}

impl From<Batch> for OpenBatchBody {
    fn from(batch: Batch) -> Self {
        Self {
            plan_id: batch.id,
            batch: batch.batch,
            revision: batch.revision,
            beer_id: batch.beer_id,
            beer_name: batch.beer_name,
            brewed_on: batch.brewed_on.to_string(),
            when: batch.when.key(),
            state: batch.state.key(),
            lines: batch.lines,
            lines_in: batch.lines_in,
            mash_ph: batch.reading.as_ref().map(|reading| reading.ph),
            mash_ph_sd: batch.reading.as_ref().map(|reading| reading.sd),
            missing: batch.missing.iter().map(Into::into).collect(),
            next: NextBody {
                kind: batch.next.key(),
                due_at: batch.next.due_at(),
            },
        }
    }
}

impl From<Freshness> for FreshnessBody {
    fn from(water: Freshness) -> Self {
        Self {
            source_id: water.source,
            name: water.name,
            last_sampled_on: water.duty.last.map(|day| day.to_string()),
            next_due_on: water.duty.next.map(|day| day.to_string()),
            state: water.duty.state.badge(),
        }
    }
}

impl From<BrewDay> for BrewDayBody {
    fn from(day: BrewDay) -> Self {
        Self {
            on: day.on.to_string(),
            until: day.until.to_string(),
            batches: day.batches.into_iter().map(Into::into).collect(),
            more_late: day.more_late,
            later: day.later,
            waters: day.waters.into_iter().map(Into::into).collect(),
        }
    }
}

/// What is on today and in the days around it.
#[utoipa::path(get, path = "/brew-day", tag = "plans", responses(
    (status = 200, description = "Open batches, what each lacks, and what to do next", body = BrewDayBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token may not read", body = Problem),
))]
async fn show(State(db): State<Db>, by: Member) -> Result<axum::Json<BrewDayBody>, Error> {
    Ok(axum::Json(brew_day(&db, &by).await?.into()))
}
