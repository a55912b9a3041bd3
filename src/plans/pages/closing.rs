//! Closing a batch.

use askama::Template;
use askama_web::WebTemplate;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};

use crate::db::Db;
use crate::error::Error;
use crate::id::PlanId;
use crate::plans::asked::ClosingBody;
use crate::plans::closing::{self, Closing};
use crate::plans::{Plan, Stage, mash_checks, operations};
use crate::web::extract::At;
use crate::web::form::{Choice, Form};
use crate::web::format;
use crate::web::layout::{Framer, Page};

#[derive(Template, WebTemplate)]
#[template(path = "plans/closing.html")]
pub(super) struct ClosingPage {
    page: Page,
    plan: Plan,
    typed: Form,
    checks: Vec<Choice>,
}

async fn closing_page(
    db: &Db,
    framer: &Framer,
    id: PlanId,
    typed: Form,
) -> Result<ClosingPage, Error> {
    let plan = operations::find(db, &framer.member, id).await?;
    let page = framer
        .page(format!("Close {} {}", plan.batch, plan.beer_name), "plans")
        .await;
    let checks = mash_checks::list(db, &framer.member, id).await?;
    let checks = checks
        .iter()
        .filter(|check| check.stage == Stage::Mash && check.withdrawn.is_none());
    let checks = checks.map(|check| {
        let words = format!(
            "minute {}: {} ± {}",
            format::decimals(check.minute.get(), 0),
            format::ph(check.advised.reading_ph),
            format::ph(check.advised.reading_sd)
        );
        (check.id.to_string(), words)
    });
    Ok(ClosingPage {
        checks: Choice::list(checks, typed.value("mash_check_id")),
        page,
        plan,
        typed,
    })
}

pub(super) async fn show_closing(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
) -> Result<ClosingPage, Error> {
    let plan = operations::find(&db, &framer.member, id).await?;
    let checks = mash_checks::list(&db, &framer.member, id).await?;
    let good = checks.iter().find(|check| {
        check.stage == Stage::Mash
            && check.withdrawn.is_none()
            && check.advised.advice != "read_again"
    });
    let typed = Form::empty()
        .with("version", plan.version.to_string())
        .with(
            "mash_check_id",
            good.map(|check| check.id.to_string()).unwrap_or_default(),
        )
        .with("counts", "yes");
    closing_page(&db, &framer, id, typed).await
}

pub(super) async fn close(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
    typed: Form,
) -> Result<Response, Error> {
    let closed = async {
        let mut body: ClosingBody = typed.body()?;
        body.counts.get_or_insert_default();
        closing::close(
            &db,
            &framer.member,
            id,
            typed.version(),
            Closing::try_from(body)?,
        )
        .await
    };
    match closed.await {
        Ok(plan) => Ok(Redirect::to(&format!("/plans/{}?done=closed", plan.id)).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, closing_page(&db, &framer, id, typed).await?).into_response())
        }
    }
}
