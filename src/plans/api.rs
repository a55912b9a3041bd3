//! `/api/v1/plans` and `/api/v1/plan-previews`.

use axum::extract::State;
use axum::http::{HeaderMap, StatusCode, header};
use axum::response::IntoResponse;
use serde::{Deserialize, Serialize};
use utoipa_axum::router::OpenApiRouter;
use utoipa_axum::routes;

use super::answers::{
    DoseBody, ListingBody, MashCheckBody, OutcomeBody, PlanBody, PreviewBody, ShownBody, WayBody,
};
use super::asked::{
    ApprovalBody, ClosingBody, CorrectionBody, NewMashCheckBody, NewPlanBody, PreviewInputBody,
    TreatmentBody, WeighedBody,
};
use super::bodies::InputsBody;
use super::inputs::Inputs;
use super::operations::{self, Treatment};
use super::store::Filter;
use super::{State as PlanState, closing, compute, decisions, mash_checks, weigh_out};
use crate::db::Db;
use crate::error::Error;
use crate::id::{DoseId, MashCheckId, PlanId};
use crate::input::{Problems, ReasonBody};
use crate::people::{Member, Permission};
use crate::web::App;
use crate::web::extract::{At, Json, ListQuery, Listed, Query, etag, if_match};
use crate::web::problem::Problem;

/// Which plans to list.
#[derive(Clone, Debug, Default, Deserialize, utoipa::IntoParams)]
#[into_params(parameter_in = Query)]
pub struct PlanQuery {
    /// Only plans in this state, or `open`: neither closed nor withdrawn.
    pub state: Option<String>,
    /// Only plans of this beer.
    pub beer_id: Option<String>,
    /// Only batches whose number holds this.
    pub batch: Option<String>,
}

impl PlanQuery {
    fn filter(&self) -> Result<Filter, Error> {
        let mut problems = Problems::new();
        let given = |text: &Option<String>| text.clone().filter(|text| !text.trim().is_empty());
        let state = given(&self.state);
        let open = state.as_deref() == Some("open");
        let state = state
            .filter(|_| !open)
            .and_then(|key| problems.choice("state", &key, PlanState::from_key));
        let beer = given(&self.beer_id)
            .and_then(|key| problems.choice("beer_id", &key, |key| key.parse().ok()));
        problems.finish()?;
        Ok(Filter {
            state,
            open,
            beer,
            batch: given(&self.batch),
        })
    }
}

/// The endpoints.
pub fn routes() -> OpenApiRouter<App> {
    OpenApiRouter::new()
        .routes(routes!(list, create))
        .routes(routes!(show))
        .routes(routes!(inputs))
        .routes(routes!(move_amounts))
        .routes(routes!(refresh))
        .routes(routes!(approve, take_back_approval))
        .routes(routes!(withdraw))
        .routes(routes!(revise))
        .routes(routes!(close))
        .routes(routes!(doses))
        .routes(routes!(weigh, take_back_weighing))
        .routes(routes!(correct_weighing))
        .routes(routes!(checks, check))
        .routes(routes!(withdraw_check))
        .routes(routes!(preview))
        .merge(super::liquor_checks::api::routes())
        .merge(closing::api::routes())
        .merge(super::readiness::api::routes())
}

fn tagged<T: Serialize>(version: i64, body: T) -> impl IntoResponse {
    (etag(version), axum::Json(body))
}

/// Plans, the latest made first.
#[utoipa::path(get, path = "/plans", tag = "plans", params(ListQuery, PlanQuery), responses(
    (status = 200, description = "Plans, the latest made first", body = Listed<ListingBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 422, description = "The query cannot be read", body = Problem),
))]
async fn list(
    State(db): State<Db>,
    by: Member,
    Query(page): Query<ListQuery>,
    Query(query): Query<PlanQuery>,
) -> Result<axum::Json<Listed<ListingBody>>, Error> {
    let limit = page.limit()?;
    let before = page.after()?;
    let found = operations::made_before(&db, &by, &query.filter()?, before, limit + 1).await?;
    let found = found.into_iter().map(ListingBody::from).collect();
    Ok(axum::Json(Listed::cut(
        found,
        limit,
        |listing: &ListingBody| listing.id.to_string(),
    )))
}

/// Draft a plan.
#[utoipa::path(post, path = "/plans", tag = "plans", request_body = NewPlanBody, responses(
    (status = 201, description = "Drafted, with its proposal", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such beer", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn create(
    State(db): State<Db>,
    by: Member,
    Json(body): Json<NewPlanBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::DraftPlans)?;
    let plan = operations::draft(&db, &by, body.try_into()?).await?;
    let at = [(header::LOCATION, format!("/api/v1/plans/{}", plan.id))];
    Ok((
        StatusCode::CREATED,
        at,
        tagged(plan.version, PlanBody::from(&plan)),
    ))
}

/// A plan with everything worked out about it.
#[utoipa::path(get, path = "/plans/{id}", tag = "plans", params(("id" = PlanId, Path)), responses(
    (status = 200, description = "The plan, with its version as ETag", body = ShownBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
))]
async fn show(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
) -> Result<impl IntoResponse, Error> {
    let shown = operations::show(&db, &by, id).await?;
    Ok(tagged(shown.plan.version, ShownBody::from(&shown)))
}

/// What a plan is computed from. Post it to `/plan-previews` to compute it again.
#[utoipa::path(get, path = "/plans/{id}/inputs", tag = "plans", params(("id" = PlanId, Path)), responses(
    (status = 200, description = "The inputs; frozen once the plan is approved", body = InputsBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
))]
async fn inputs(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
) -> Result<axum::Json<InputsBody>, Error> {
    let plan = operations::find(&db, &by, id).await?;
    Ok(axum::Json(InputsBody::from(&plan.inputs)))
}

/// Read water, beer, shelf and what was learned anew into a draft.
#[utoipa::path(post, path = "/plans/{id}/inputs", tag = "plans", params(("id" = PlanId, Path)), responses(
    (status = 200, description = "Read anew", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "It is no draft, or has changed", body = Problem),
))]
async fn refresh(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
    headers: HeaderMap,
) -> Result<impl IntoResponse, Error> {
    let plan = operations::refresh(&db, &by, id, if_match(&headers)?).await?;
    Ok(tagged(plan.version, PlanBody::from(&plan)))
}

/// Move the amounts of a draft.
#[utoipa::path(put, path = "/plans/{id}/treatment", tag = "plans", params(("id" = PlanId, Path)),
    request_body = TreatmentBody, responses(
    (status = 200, description = "Saved", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "It is no draft, or has changed", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn move_amounts(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
    headers: HeaderMap,
    Json(body): Json<TreatmentBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::DraftPlans)?;
    let plan =
        operations::move_amounts(&db, &by, id, if_match(&headers)?, &body.try_into()?).await?;
    Ok(tagged(plan.version, PlanBody::from(&plan)))
}

/// Approve a draft: its inputs freeze.
#[utoipa::path(post, path = "/plans/{id}/approval", tag = "plans", params(("id" = PlanId, Path)),
    request_body = ApprovalBody, responses(
    (status = 201, description = "Approved", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "It is no draft, has changed, or passes a limit", body = Problem),
    (status = 422, description = "A reason is needed", body = Problem),
))]
async fn approve(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
    headers: HeaderMap,
    Json(body): Json<ApprovalBody>,
) -> Result<impl IntoResponse, Error> {
    let plan = decisions::approve(&db, &by, id, if_match(&headers)?, body.reason()?).await?;
    Ok((
        StatusCode::CREATED,
        tagged(plan.version, PlanBody::from(&plan)),
    ))
}

/// Take an approval back, as long as nothing is weighed in.
#[utoipa::path(delete, path = "/plans/{id}/approval", tag = "plans", params(("id" = PlanId, Path)), responses(
    (status = 200, description = "A draft again", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "It is not approved, or something is weighed in", body = Problem),
))]
async fn take_back_approval(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
    headers: HeaderMap,
) -> Result<impl IntoResponse, Error> {
    let plan = decisions::take_back_approval(&db, &by, id, if_match(&headers)?).await?;
    Ok(tagged(plan.version, PlanBody::from(&plan)))
}

/// Withdraw a plan: it will not be brewed.
#[utoipa::path(post, path = "/plans/{id}/withdrawal", tag = "plans", params(("id" = PlanId, Path)),
    request_body = ReasonBody, responses(
    (status = 201, description = "Withdrawn", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "It is closed or withdrawn", body = Problem),
    (status = 422, description = "A reason is needed", body = Problem),
))]
async fn withdraw(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
    headers: HeaderMap,
    Json(body): Json<ReasonBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::DraftPlans)?;
    let plan = decisions::withdraw(&db, &by, id, if_match(&headers)?, body.given()?).await?;
    Ok((
        StatusCode::CREATED,
        tagged(plan.version, PlanBody::from(&plan)),
    ))
}

/// Begin the next revision of an approved plan.
#[utoipa::path(post, path = "/plans/{id}/revisions", tag = "plans", params(("id" = PlanId, Path)), responses(
    (status = 201, description = "Begun", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "It cannot be revised now", body = Problem),
))]
async fn revise(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
) -> Result<impl IntoResponse, Error> {
    let plan = decisions::revise(&db, &by, id).await?;
    let at = [(header::LOCATION, format!("/api/v1/plans/{}", plan.id))];
    Ok((
        StatusCode::CREATED,
        at,
        tagged(plan.version, PlanBody::from(&plan)),
    ))
}

/// Close a batch: predicted and measured are written down side by side.
#[utoipa::path(post, path = "/plans/{id}/closing", tag = "plans", params(("id" = PlanId, Path)),
    request_body = ClosingBody, responses(
    (status = 201, description = "Closed", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "Something is not weighed in yet", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn close(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
    headers: HeaderMap,
    Json(body): Json<ClosingBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::BrewBatches)?;
    let plan = closing::close(&db, &by, id, if_match(&headers)?, body.try_into()?).await?;
    Ok((
        StatusCode::CREATED,
        tagged(plan.version, PlanBody::from(&plan)),
    ))
}

/// The weigh-out.
#[utoipa::path(get, path = "/plans/{id}/doses", tag = "plans", params(("id" = PlanId, Path)), responses(
    (status = 200, description = "Doses in the order of weighing out", body = Vec<DoseBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
))]
async fn doses(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
) -> Result<axum::Json<Vec<DoseBody>>, Error> {
    let plan = operations::find(&db, &by, id).await?;
    Ok(axum::Json(
        plan.doses
            .iter()
            .map(|dose| DoseBody::of(&plan.inputs, dose))
            .collect(),
    ))
}

/// Write down that a dose is in. It is refused when it is in already, and asked about at
/// `/reason`, with what it does, where it is outside the tolerance of the material.
#[utoipa::path(put, path = "/plans/{id}/doses/{dose_id}", tag = "plans",
    params(("id" = PlanId, Path), ("dose_id" = DoseId, Path)), request_body = WeighedBody, responses(
    (status = 200, description = "It is in", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed, or a second person is needed", body = Problem),
    (status = 404, description = "There is no such dose", body = Problem),
    (status = 409, description = "It is in already, or the plan is not approved", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn weigh(
    State(db): State<Db>,
    by: Member,
    At((id, dose)): At<(PlanId, DoseId)>,
    Json(body): Json<WeighedBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::BrewBatches)?;
    let plan = weigh_out::weigh(&db, &by, id, dose, body.try_into()?).await?;
    Ok(tagged(plan.version, PlanBody::from(&plan)))
}

/// Correct what was written down about a dose. What stood there before stays in its
/// `corrections`.
#[utoipa::path(post, path = "/plans/{id}/doses/{dose_id}/correction", tag = "plans",
    params(("id" = PlanId, Path), ("dose_id" = DoseId, Path)), request_body = CorrectionBody, responses(
    (status = 201, description = "Corrected", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed, or a second person is needed", body = Problem),
    (status = 404, description = "There is no such dose", body = Problem),
    (status = 409, description = "It is not in, was corrected meanwhile, or the batch is closed", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn correct_weighing(
    State(db): State<Db>,
    by: Member,
    At((id, dose)): At<(PlanId, DoseId)>,
    Json(body): Json<CorrectionBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::BrewBatches)?;
    let plan = weigh_out::correct(&db, &by, id, dose, body.try_into()?).await?;
    Ok((
        StatusCode::CREATED,
        tagged(plan.version, PlanBody::from(&plan)),
    ))
}

/// Take back that a dose is in: it was a slip.
#[utoipa::path(delete, path = "/plans/{id}/doses/{dose_id}", tag = "plans",
    params(("id" = PlanId, Path), ("dose_id" = DoseId, Path)), request_body = ReasonBody, responses(
    (status = 200, description = "Not in", body = PlanBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such dose", body = Problem),
    (status = 409, description = "It is not in", body = Problem),
    (status = 422, description = "A reason is needed", body = Problem),
))]
async fn take_back_weighing(
    State(db): State<Db>,
    by: Member,
    At((id, dose)): At<(PlanId, DoseId)>,
    Json(body): Json<ReasonBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::BrewBatches)?;
    let plan = weigh_out::take_back(&db, &by, id, dose, body.given()?).await?;
    Ok(tagged(plan.version, PlanBody::from(&plan)))
}

/// Every pH reading of a batch, the earliest first.
#[utoipa::path(get, path = "/plans/{id}/mash-checks", tag = "plans", params(("id" = PlanId, Path)), responses(
    (status = 200, description = "Readings", body = Vec<MashCheckBody>),
    (status = 401, description = "No valid token", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
))]
async fn checks(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
) -> Result<axum::Json<Vec<MashCheckBody>>, Error> {
    let plan = operations::find(&db, &by, id).await?;
    let checks = mash_checks::list(&db, &by, plan.id).await?;
    Ok(axum::Json(checks.iter().map(Into::into).collect()))
}

/// Enter a pH reading and be told what to do.
#[utoipa::path(post, path = "/plans/{id}/mash-checks", tag = "plans", params(("id" = PlanId, Path)),
    request_body = NewMashCheckBody, responses(
    (status = 201, description = "Written down, with what to do", body = MashCheckBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such plan", body = Problem),
    (status = 409, description = "The plan is not approved", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn check(
    State(db): State<Db>,
    by: Member,
    At(id): At<PlanId>,
    Json(body): Json<NewMashCheckBody>,
) -> Result<impl IntoResponse, Error> {
    by.may(Permission::BrewBatches)?;
    let check = mash_checks::read(&db, &by, id, body.try_into()?).await?;
    Ok((StatusCode::CREATED, axum::Json(MashCheckBody::from(&check))))
}

/// Withdraw a reading that was not what it said.
#[utoipa::path(post, path = "/plans/{id}/mash-checks/{check_id}/withdrawal", tag = "plans",
    params(("id" = PlanId, Path), ("check_id" = MashCheckId, Path)), request_body = ReasonBody, responses(
    (status = 204, description = "Withdrawn"),
    (status = 401, description = "No valid token", body = Problem),
    (status = 403, description = "Not allowed", body = Problem),
    (status = 404, description = "There is no such reading", body = Problem),
    (status = 409, description = "It is withdrawn already, or the batch is closed", body = Problem),
    (status = 422, description = "A reason is needed", body = Problem),
))]
async fn withdraw_check(
    State(db): State<Db>,
    by: Member,
    At((id, check)): At<(PlanId, MashCheckId)>,
    Json(body): Json<ReasonBody>,
) -> Result<StatusCode, Error> {
    by.may(Permission::BrewBatches)?;
    mash_checks::withdraw(&db, &by, id, check, body.given()?).await?;
    Ok(StatusCode::NO_CONTENT)
}

/// What a plan would be. Nothing is stored.
#[utoipa::path(post, path = "/plan-previews", tag = "plans", request_body = PreviewInputBody, responses(
    (status = 200, description = "The four ways, and what the treatment sent along does", body = PreviewBody),
    (status = 401, description = "No valid token", body = Problem),
    (status = 422, description = "Some fields need mending", body = Problem),
))]
async fn preview(
    by: Member,
    Json(body): Json<PreviewInputBody>,
) -> Result<axum::Json<PreviewBody>, Error> {
    by.may(Permission::Read)?;
    let inputs = Inputs::try_from(body.inputs)?;
    let does = match body.treatment {
        None => None,
        Some(treatment) => {
            let outcome = Treatment::try_from(treatment)
                .and_then(|it| compute::evaluate(&inputs, &it.shares, &it.doses))
                .map_err(|error| error.renamed(|field| format!("treatment.{field}")))?;
            Some(OutcomeBody::of(&inputs, &outcome))
        }
    };
    let ways = compute::solve_all(&inputs)?;
    Ok(axum::Json(PreviewBody {
        ways: ways
            .iter()
            .map(|(way, ending)| WayBody::of(&inputs, *way, ending))
            .collect(),
        does,
    }))
}
