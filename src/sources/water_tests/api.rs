//! `/api/v1/water-tests`, `/api/v1/sources/{id}/water-tests` and
//! `/api/v1/water-test-checks`.

use std::collections::BTreeMap;

use axum::extract::State;
use axum::http::{HeaderMap, StatusCode, header};
use axum::response::IntoResponse;
use chemistry::quantity::Celsius;
use chemistry::report::{
    Assessment, Concern, Figure, Finding, Inference, LimitSet, Method, PotableFinding, Standing,
};
use serde::{Deserialize, Serialize};
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::operations::{self, Check};
use super::{Line, Trust, WaterTest};
use crate::db::Db;
use crate::error::Error;
use crate::id::{SourceId, UtcTime, WaterTestId};
use crate::input::{Flag, Number, ReasonBody};
use crate::people::{Member, Permission};
use crate::web::App;
use crate::web::extract::{At, Json, ListQuery, Listed, Query, etag, if_match};
use crate::web::problem::Problem;

/// One line of a report, as it was printed.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct ReadingBody {
    /// What was measured, for example `calcium`, `alkalinity`, `ph`.
    pub analyte: String,
    /// The figure as printed, for example `12,5` or `<0.05`. A line left blank is no line.
    pub value: Number,
    /// The unit and basis, for example `mg_per_l_as_n` or `dh`.
    pub unit: String,
    /// `laboratory`, `drop_kit`, `photometer` or `meter`; that of the whole test when blank.
    pub method: String,
    /// What one drop of a drop-count kit is worth; that of the whole test when blank.
    pub drop_mg_per_l_as_caco3: Number,
}

/// A water test as it is sent.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct WaterTestBody {
    /// The day the sample was drawn, `2026-03-31`.
    #[schema(required = true, min_length = 1)]
    pub sampled_on: String,
    /// Who made the analysis: a laboratory, a kit, a supplier.
    pub laboratory: String,
    /// The report's number.
    pub reference: String,
    /// `single_sample` or `average`; the first when blank.
    pub sample_kind: String,
    /// Temperature of the pH reading.
    pub ph_temperature_celsius: Number,
    /// How the lines were measured unless they say otherwise; `laboratory` when blank.
    pub method: String,
    /// What one drop of a drop-count kit is worth.
    pub drop_mg_per_l_as_caco3: Number,
    /// The lines.
    #[schema(required = true)]
    pub readings: Vec<ReadingBody>,
    /// Figures that were not reported and how they may be worked out, as the check
    /// offers them: `{"magnesium": "rest_of_hardness"}`.
    pub accepted: BTreeMap<String, String>,
    /// Anything else worth knowing.
    pub notes: String,
    /// Keep a report whose figures cannot all be right. It does not count for today's water.
    pub keep_although_it_does_not_add_up: Flag,
    /// Keep it, but do not let it count for today's water.
    pub excluded: Flag,
    /// Why it should not count.
    pub excluded_reason: String,
    /// Why an earlier entry is corrected; only read there.
    pub correction_reason: String,
}

impl From<&Line> for ReadingBody {
    fn from(line: &Line) -> Self {
        Self {
            analyte: line.reading.analyte().key().into(),
            value: Number::Typed(line.typed.clone()),
            unit: line.reading.unit().key().into(),
            method: line.method.key().into(),
            drop_mg_per_l_as_caco3: match line.method {
                Method::DropKit { drop } => drop.get().into(),
                _ => Number::Missing,
            },
        }
    }
}

impl From<&WaterTest> for WaterTestBody {
    fn from(test: &WaterTest) -> Self {
        let sheet = &test.sheet;
        let excluded = match &test.trust {
            Trust::Excluded(reason) => Some(reason.clone()),
            _ => None,
        };
        Self {
            sampled_on: sheet.sampled_on.to_string(),
            laboratory: sheet.laboratory.clone(),
            reference: sheet.reference.clone(),
            sample_kind: sheet.sample_kind.key().into(),
            ph_temperature_celsius: sheet.ph_temperature.map(Celsius::get).into(),
            method: String::new(),
            drop_mg_per_l_as_caco3: Number::Missing,
            readings: sheet.lines.iter().map(ReadingBody::from).collect(),
            accepted: sheet
                .accepted
                .iter()
                .map(|a| (a.analyte.key().into(), a.kind.key().into()))
                .collect(),
            notes: sheet.notes.clone(),
            keep_although_it_does_not_add_up: Flag(matches!(
                test.trust,
                Trust::DoesNotAddUp | Trust::TrustedDespite(_)
            )),
            excluded: Flag(excluded.is_some()),
            excluded_reason: excluded.unwrap_or_default(),
            correction_reason: String::new(),
        }
    }
}

/// A report to be checked without keeping it.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct WaterTestCheckBody {
    /// `mains`, `borehole`, `surface`, `permeate` or `other`; the last when blank.
    pub water_kind: String,
    /// `single_sample` or `average`; the first when blank.
    pub sample_kind: String,
    /// Temperature of the pH reading.
    pub ph_temperature_celsius: Number,
    /// How the lines were measured unless they say otherwise; `laboratory` when blank.
    pub method: String,
    /// What one drop of a drop-count kit is worth.
    pub drop_mg_per_l_as_caco3: Number,
    /// The lines.
    pub readings: Vec<ReadingBody>,
}

/// A water test as it is kept.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct WaterTestAnswer {
    /// Its identifier.
    id: WaterTestId,
    /// Where the sample was drawn.
    source_id: SourceId,
    /// What was sent.
    #[serde(flatten)]
    test: WaterTestBody,
    /// `trusted`, `trusted_despite`, `does_not_add_up` or `excluded`.
    trust: &'static str,
    /// What somebody gave as the reason for that.
    trust_reason: Option<String>,
    /// Whether it counts for today's water.
    counts: bool,
    /// When it was withdrawn.
    withdrawn_at: Option<UtcTime>,
    /// Why.
    withdrawn_reason: Option<String>,
    /// When it was entered.
    entered_at: UtcTime,
    /// What its lines come to.
    assessment: AssessmentBody,
}

/// What the lines of a report come to.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct AssessmentBody {
    /// `adds_up`, `doubtful`, `does_not_add_up` or `cannot_be_judged`.
    verdict: &'static str,
    /// What the checks noticed, the gravest first.
    findings: Vec<FindingBody>,
    /// Every line in the canonical unit of its analyte.
    figures: Vec<FigureBody>,
    /// Cations against anions, when enough was reported.
    ion_balance: Option<IonBalanceBody>,
    /// What the ions should conduct at 25 °C, µS/cm.
    calculated_conductivity_us_per_cm: Option<f64>,
    /// What could be worked out; send it back in `accepted` to use it.
    inferences: Vec<InferenceBody>,
    /// Figures outside the limits for drinking water.
    potable: Vec<PotableBody>,
}

/// One thing a check noticed.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct FindingBody {
    /// Which check.
    kind: &'static str,
    /// `info`, `doubt` or `contradiction`.
    severity: &'static str,
    /// What it is.
    sentence: String,
    /// The lines it is about.
    analytes: Vec<&'static str>,
    /// The numbers behind the sentence.
    figures: Vec<FindingFigureBody>,
}

/// A number behind a finding.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct FindingFigureBody {
    /// What it is.
    label: &'static str,
    /// The number.
    value: f64,
    /// Its unit as printed.
    unit: &'static str,
}

impl From<&Finding> for FindingBody {
    fn from(finding: &Finding) -> Self {
        Self {
            kind: finding.kind.key(),
            severity: finding.severity.key(),
            sentence: finding.sentence.clone(),
            analytes: finding.analytes.iter().map(|a| a.key()).collect(),
            figures: finding
                .figures
                .iter()
                .map(|figure| FindingFigureBody {
                    label: figure.label,
                    value: figure.value,
                    unit: figure.unit,
                })
                .collect(),
        }
    }
}

/// A line in the canonical unit of its analyte.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct FigureBody {
    /// What was measured.
    analyte: &'static str,
    /// `measured` or `below`.
    qualifier: &'static str,
    /// The number, or the limit it is below.
    value: f64,
    /// One standard deviation.
    sd: f64,
    /// The unit's key.
    unit: &'static str,
}

impl From<&Figure> for FigureBody {
    fn from(figure: &Figure) -> Self {
        Self {
            analyte: figure.analyte().key(),
            qualifier: figure.canonical().qualifier().key(),
            value: figure.canonical().get(),
            sd: figure.sd(),
            unit: figure.analyte().canonical_unit().key(),
        }
    }
}

/// Cations against anions.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct IonBalanceBody {
    /// Sum of the cations.
    cations_meq_per_l: f64,
    /// Sum of the anions.
    anions_meq_per_l: f64,
    /// One standard deviation of the difference.
    difference_sd_meq_per_l: f64,
    /// The difference in percent of the sum.
    difference_percent: f64,
    /// Ions that usually matter a little and were not reported.
    not_reported: Vec<&'static str>,
}

/// A figure that could be worked out.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct InferenceBody {
    /// What it is a figure of.
    analyte: &'static str,
    /// How.
    kind: &'static str,
    /// The number.
    value: f64,
    /// One standard deviation.
    sd: f64,
    /// The unit's key.
    unit: &'static str,
    /// The same in a sentence.
    sentence: String,
}

impl From<&Inference> for InferenceBody {
    fn from(inference: &Inference) -> Self {
        Self {
            analyte: inference.analyte().key(),
            kind: inference.kind.key(),
            value: inference.figure.best(),
            sd: inference.figure.sd(),
            unit: inference.analyte().canonical_unit().key(),
            sentence: inference.sentence.clone(),
        }
    }
}

/// A figure outside a limit for drinking water, or not surely inside.
#[derive(Clone, Debug, Serialize, utoipa::ToSchema)]
pub struct PotableBody {
    /// What is limited.
    analyte: &'static str,
    /// `health` or `acceptability`.
    concern: &'static str,
    /// `above`, `below` or `cannot_tell`.
    standing: &'static str,
    /// The figure.
    value: f64,
    /// Its unit's key.
    unit: &'static str,
    /// The limit as published.
    limit: String,
    /// The same in a sentence.
    sentence: String,
}

impl From<&PotableFinding> for PotableBody {
    fn from(finding: &PotableFinding) -> Self {
        let analyte = finding.limit.analyte();
        Self {
            analyte: analyte.key(),
            concern: match finding.limit.concern() {
                Concern::Health => "health",
                Concern::Acceptability => "acceptability",
            },
            standing: match finding.standing {
                Standing::Above => "above",
                Standing::Below => "below",
                Standing::CannotTell => "cannot_tell",
            },
            value: finding.value,
            unit: analyte.canonical_unit().key(),
            limit: finding.limit.as_published(),
            sentence: finding.sentence.clone(),
        }
    }
}

impl From<&Check> for AssessmentBody {
    fn from(check: &Check) -> Self {
        let assessment: &Assessment = &check.assessment;
        Self {
            verdict: assessment.verdict.key(),
            findings: assessment.findings.iter().map(FindingBody::from).collect(),
            figures: assessment.figures().iter().map(FigureBody::from).collect(),
            ion_balance: assessment.balance.as_ref().map(|balance| IonBalanceBody {
                cations_meq_per_l: balance.cations.get(),
                anions_meq_per_l: balance.anions.get(),
                difference_sd_meq_per_l: balance.difference_sd.get(),
                difference_percent: balance.percent_difference(),
                not_reported: balance.not_reported.iter().map(|a| a.key()).collect(),
            }),
            calculated_conductivity_us_per_cm: assessment
                .calculated_conductivity
                .map(chemistry::quantity::MicrosiemensPerCm::get),
            inferences: assessment
                .inferences
                .iter()
                .map(InferenceBody::from)
                .collect(),
            potable: check.potable.iter().map(PotableBody::from).collect(),
        }
    }
}

/// The endpoints.
pub fn routes() -> OpenApiRouter<App> {
    OpenApiRouter::new()
        .routes(routes!(list, enter))
        .routes(routes!(show, correct))
        .routes(routes!(withdraw, restore))
        .routes(routes!(exclude))
        .routes(routes!(trust))
        .routes(routes!(check))
}

async fn answer(db: &Db, test: &WaterTest) -> Result<impl IntoResponse + use<>, Error> {
    let limits = operations::limits(db).await?;
    Ok((etag(test.version), axum::Json(body(limits, test)?)))
}

fn body(limits: LimitSet, test: &WaterTest) -> Result<WaterTestAnswer, Error> {
    let check = operations::check(limits, &test.sheet, test.water_kind)?;
    Ok(WaterTestAnswer {
        id: test.id,
        source_id: test.source_id,
        test: test.into(),
        trust: test.trust.key(),
        trust_reason: test.trust.reason().map(str::to_owned),
        counts: test.counts(),
        withdrawn_at: test.withdrawn.as_ref().map(|w| w.at),
        withdrawn_reason: test.withdrawn.as_ref().map(|w| w.reason.clone()),
        entered_at: test.entered_at,
        assessment: AssessmentBody::from(&check),
    })
}

/// The tests of a source, newest sample first.
#[utoipa::path(get, path = "/sources/{id}/water-tests", tag = "water tests", params(("id" = SourceId, Path), ListQuery), responses(
    (status = 200, description = "Water tests, newest sample first", body = Listed<WaterTestAnswer>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such source", body = Problem),
    (status = 422, description = "The cursor or limit cannot be read", body = Problem),
))]
async fn list(
    State(db): State<Db>,
    by: Member,
    At(id): At<SourceId>,
    Query(query): Query<ListQuery>,
) -> Result<axum::Json<Listed<WaterTestAnswer>>, Error> {
    let limit = query.limit()?;
    let after = query
        .cursor
        .as_deref()
        .map(|cursor| {
            let (date, id) = cursor.split_once('_')?;
            Some((date.parse().ok()?, id.parse().ok()?))
        })
        .map(|place| {
            place.ok_or_else(|| Error::field("cursor", "Send the next_cursor of the page before."))
        })
        .transpose()?;
    let tests = operations::list(&db, &by, id, after, limit + 1).await?;
    let limits = operations::limits(&db).await?;
    let bodies = tests.iter().map(|test| body(limits, test));
    let bodies = bodies.collect::<Result<Vec<_>, _>>()?;
    Ok(axum::Json(Listed::cut(
        bodies,
        limit,
        |test: &WaterTestAnswer| format!("{}_{}", test.test.sampled_on, test.id),
    )))
}

/// Enter a water test.
#[utoipa::path(post, path = "/sources/{id}/water-tests", tag = "water tests", params(("id" = SourceId, Path)), request_body = WaterTestBody, responses(
    (status = 201, description = "Kept; Location leads to it", body = WaterTestAnswer),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token may not enter water tests", body = Problem),
    (status = 404, description = "There is no such source", body = Problem),
    (status = 422, description = "Some lines need mending, or the figures cannot all be right", body = Problem),
))]
async fn enter(
    State(db): State<Db>,
    by: Member,
    At(id): At<SourceId>,
    Json(body): Json<WaterTestBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::EnterWaterTests)?;
    let test = operations::enter(&db, &by, id, body.try_into()?).await?;
    let location = format!("/api/v1/water-tests/{}", test.id);
    Ok((
        StatusCode::CREATED,
        [(header::LOCATION, location)],
        answer(&db, &test).await?,
    ))
}

/// One water test.
#[utoipa::path(get, path = "/water-tests/{id}", tag = "water tests", params(("id" = WaterTestId, Path)), responses(
    (status = 200, description = "The test as printed and what it comes to", body = WaterTestAnswer),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such water test", body = Problem),
))]
async fn show(
    State(db): State<Db>,
    by: Member,
    At(id): At<WaterTestId>,
) -> Result<impl IntoResponse, Error> {
    answer(&db, &operations::find(&db, &by, id).await?).await
}

/// Correct a water test. What stood before stays in the record book.
#[utoipa::path(put, path = "/water-tests/{id}", tag = "water tests", params(("id" = WaterTestId, Path)), request_body = WaterTestBody, responses(
    (status = 200, description = "Corrected", body = WaterTestAnswer),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token may not enter water tests", body = Problem),
    (status = 404, description = "There is no such water test", body = Problem),
    (status = 409, description = "Changed by somebody else meanwhile, or withdrawn", body = Problem),
    (status = 422, description = "Some lines need mending, or the figures cannot all be right", body = Problem),
))]
async fn correct(
    State(db): State<Db>,
    by: Member,
    At(id): At<WaterTestId>,
    headers: HeaderMap,
    Json(body): Json<WaterTestBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::EnterWaterTests)?;
    let new = body.try_into()?;
    let test = operations::correct(&db, &by, id, new, if_match(&headers)?).await?;
    answer(&db, &test).await
}

/// Withdraw a water test: it stays, and no longer counts.
#[utoipa::path(post, path = "/water-tests/{id}/withdrawal", tag = "water tests", params(("id" = WaterTestId, Path)), request_body = ReasonBody, responses(
    (status = 200, description = "Withdrawn", body = WaterTestAnswer),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token may not withdraw water tests", body = Problem),
    (status = 404, description = "There is no such water test", body = Problem),
    (status = 409, description = "It is withdrawn already", body = Problem),
    (status = 422, description = "The reason is missing", body = Problem),
))]
async fn withdraw(
    State(db): State<Db>,
    by: Member,
    At(id): At<WaterTestId>,
    Json(body): Json<ReasonBody>,
) -> Result<impl IntoResponse, Error> {
    let test = operations::withdraw(&db, &by, id, &body.reason).await?;
    answer(&db, &test).await
}

/// Take a withdrawal back.
#[utoipa::path(delete, path = "/water-tests/{id}/withdrawal", tag = "water tests", params(("id" = WaterTestId, Path)), responses(
    (status = 200, description = "It stands again", body = WaterTestAnswer),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token may not withdraw water tests", body = Problem),
    (status = 404, description = "There is no such water test", body = Problem),
    (status = 409, description = "It is not withdrawn", body = Problem),
))]
async fn restore(
    State(db): State<Db>,
    by: Member,
    At(id): At<WaterTestId>,
) -> Result<impl IntoResponse, Error> {
    let test = operations::restore(&db, &by, id).await?;
    answer(&db, &test).await
}

/// Keep a water test, but do not let it count for today's water.
#[utoipa::path(post, path = "/water-tests/{id}/exclusion", tag = "water tests", params(("id" = WaterTestId, Path)), request_body = ReasonBody, responses(
    (status = 200, description = "It no longer counts", body = WaterTestAnswer),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token may not enter water tests", body = Problem),
    (status = 404, description = "There is no such water test", body = Problem),
    (status = 422, description = "The reason is missing", body = Problem),
))]
async fn exclude(
    State(db): State<Db>,
    by: Member,
    At(id): At<WaterTestId>,
    Json(body): Json<ReasonBody>,
) -> Result<impl IntoResponse, Error> {
    let test = operations::exclude(&db, &by, id, &body.reason).await?;
    answer(&db, &test).await
}

/// Let a water test count for today's water.
#[utoipa::path(post, path = "/water-tests/{id}/trust", tag = "water tests", params(("id" = WaterTestId, Path)), request_body = ReasonBody, responses(
    (status = 200, description = "It counts", body = WaterTestAnswer),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token may not enter water tests", body = Problem),
    (status = 404, description = "There is no such water test", body = Problem),
    (status = 422, description = "The reason is missing", body = Problem),
))]
async fn trust(
    State(db): State<Db>,
    by: Member,
    At(id): At<WaterTestId>,
    Json(body): Json<ReasonBody>,
) -> Result<impl IntoResponse, Error> {
    let test = operations::trust(&db, &by, id, &body.reason).await?;
    answer(&db, &test).await
}

/// Check a report without keeping it.
#[utoipa::path(post, path = "/water-test-checks", tag = "water tests", request_body = WaterTestCheckBody, responses(
    (status = 200, description = "What the lines come to", body = AssessmentBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "The token may not read", body = Problem),
    (status = 422, description = "Some lines need mending", body = Problem),
))]
async fn check(
    State(db): State<Db>,
    by: Member,
    Json(body): Json<WaterTestCheckBody>,
) -> Result<axum::Json<AssessmentBody>, Error> {
    by.may(Permission::Read)?;
    let check = operations::check_body(&db, &body).await?;
    Ok(axum::Json(AssessmentBody::from(&check)))
}
