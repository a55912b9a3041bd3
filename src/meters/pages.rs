//! The pages of pH meters: the list, one meter, its calibrations.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::get;

use super::entered::NewMeterBody;
use super::{Kind, Meter, Standing, operations};
use crate::db::Db;
use crate::error::Error;
use crate::id::{MeterId, UtcTime};
use crate::people::Permission;
use crate::web::App;
use crate::web::extract::At;
use crate::web::form::{Choice, Form};
use crate::web::format;
use crate::web::layout::{Framer, Page};

/// The pages.
pub fn routes() -> Router<App> {
    Router::new()
        .route("/meters", get(list))
        .route("/meters/new", get(new).post(create))
        .route("/meters/{id}/edit", get(edit).post(revise))
}

#[derive(Template, WebTemplate)]
#[template(path = "meters/list.html")]
struct ListPage {
    page: Page,
    meters: Vec<MeterRow>,
    retired: bool,
    nothing: bool,
    may_keep: bool,
}

struct MeterRow {
    id: MeterId,
    name: String,
    kind: &'static str,
    verdict: &'static str,
    verdict_words: &'static str,
    calibrated: String,
    sd: String,
}

impl MeterRow {
    fn of(meter: Meter, standing: &Standing, now: UtcTime) -> Self {
        Self {
            id: meter.id,
            kind: meter.kind.name(),
            name: meter.name,
            verdict: standing.verdict.key(),
            verdict_words: standing.verdict.name(),
            calibrated: standing.calibrated_at.map_or_else(
                || "never".to_owned(),
                |at| format!("{} hours ago", now.seconds_since(at) / 3600),
            ),
            sd: format::ph(standing.sd.get()),
        }
    }
}

async fn list(State(db): State<Db>, framer: Framer, typed: Form) -> Result<ListPage, Error> {
    let retired = typed.ticked("retired");
    let now = UtcTime::now();
    let all = operations::list(&db, &framer.member, false).await?;
    let meters = if retired {
        let out = all.iter().filter(|meter| !meter.in_use).cloned();
        out.map(|meter| {
            let standing = Standing::of(&meter, None, now);
            MeterRow::of(meter, &standing, now)
        })
        .collect()
    } else {
        let standings = operations::standings(&db, &framer.member, now).await?;
        standings
            .into_iter()
            .map(|(meter, standing)| MeterRow::of(meter, &standing, now))
            .collect()
    };
    let page = framer.page("Meters", "meters").await;
    Ok(ListPage {
        meters,
        retired,
        nothing: all.is_empty(),
        may_keep: page.can(Permission::KeepMeters),
        page,
    })
}

#[derive(Template, WebTemplate)]
#[template(path = "meters/edit.html")]
struct EditPage {
    page: Page,
    typed: Form,
    action: String,
    back: String,
    new: bool,
    kinds: Vec<Choice>,
}

async fn edit_page(framer: &Framer, meter: Option<&Meter>, typed: Form) -> EditPage {
    let title = meter.map_or_else(
        || "New meter".to_owned(),
        |meter| format!("Change {}", meter.name),
    );
    EditPage {
        page: framer.page(title, "meters").await,
        action: meter.map_or_else(
            || "/meters/new".to_owned(),
            |meter| format!("/meters/{}/edit", meter.id),
        ),
        back: "/meters".to_owned(),
        new: meter.is_none(),
        kinds: Choice::list(
            Kind::ALL.map(|kind| (kind.key(), kind.name())),
            typed.value("kind"),
        ),
        typed,
    }
}

async fn new(framer: Framer) -> Result<EditPage, Error> {
    framer.member.may(Permission::KeepMeters)?;
    let typed = Form::empty()
        .with("in_use", "yes")
        .with("compensated", "yes")
        .with("resolution_ph", "0.01");
    Ok(edit_page(&framer, None, typed).await)
}

async fn create(State(db): State<Db>, framer: Framer, typed: Form) -> Result<Response, Error> {
    let created = async {
        framer.member.may(Permission::KeepMeters)?;
        let new: Meter = typed.body::<NewMeterBody>()?.try_into()?;
        operations::create(&db, &framer.member, new).await
    };
    match created.await {
        Ok(_) => Ok(Redirect::to("/meters?done=created").into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, edit_page(&framer, None, typed).await).into_response())
        }
    }
}

async fn edit(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<MeterId>,
) -> Result<EditPage, Error> {
    framer.member.may(Permission::KeepMeters)?;
    let meter = operations::find(&db, &framer.member, id).await?;
    let typed = Form::of(&NewMeterBody::from(&meter)).with("version", meter.version.to_string());
    Ok(edit_page(&framer, Some(&meter), typed).await)
}

async fn revise(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<MeterId>,
    typed: Form,
) -> Result<Response, Error> {
    let saved = async {
        framer.member.may(Permission::KeepMeters)?;
        let new: Meter = typed.body::<NewMeterBody>()?.try_into()?;
        operations::revise(&db, &framer.member, id, new, typed.version()).await
    };
    match saved.await {
        Ok(_) => Ok(Redirect::to("/meters?done=saved").into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let meter = operations::find(&db, &framer.member, id).await?;
            Ok((status, edit_page(&framer, Some(&meter), typed).await).into_response())
        }
    }
}
