//! The pages of pH meters: the list, one meter, its calibrations.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::{get, post};

use super::entered::NewMeterBody;
use super::trend::{self, Followed};
use super::words::{self, Advice, CalibrationRow};
use super::{Kind, Meter, Standing, operations};
use crate::brewery::Settings;
use crate::db::Db;
use crate::error::Error;
use crate::id::{MeterId, UtcTime};
use crate::people::Permission;
use crate::web::App;
use crate::web::chart::{DoubtShare, Trend};
use crate::web::extract::At;
use crate::web::form::{Choice, Form};
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::list::Pager;

mod calibration;

/// Calibrations on one page.
const PAGE: usize = 10;

/// The pages.
pub fn routes() -> Router<App> {
    Router::new()
        .route("/meters", get(list))
        .route("/meters/new", get(new).post(create))
        .route("/meters/{id}", get(show))
        .route("/meters/{id}/edit", get(edit).post(revise))
        .route(
            "/meters/{id}/calibrations/new",
            get(calibration::new).post(calibration::calibrate),
        )
        .route(
            "/meters/{id}/calibrations/{calibration_id}",
            get(calibration::show),
        )
        .route(
            "/meters/{id}/calibrations/{calibration_id}/withdrawal",
            post(calibration::withdraw),
        )
}

#[derive(Template, WebTemplate)]
#[template(path = "meters/list.html")]
struct ListPage {
    page: Page,
    meters: Vec<MeterRow>,
    retired: bool,
    nothing: bool,
    may_keep: bool,
    may_calibrate: bool,
}

struct MeterRow {
    id: MeterId,
    name: String,
    kind: &'static str,
    badge: &'static str,
    verdict: &'static str,
    calibrated: String,
    fresh: bool,
    slope: String,
    sd: String,
}

impl MeterRow {
    fn of(meter: &Meter, standing: &Standing, now: UtcTime, settings: &Settings) -> Self {
        Self {
            id: meter.id,
            name: meter.name.clone(),
            kind: meter.kind.name(),
            badge: standing.verdict.badge(),
            verdict: standing.verdict.name(),
            calibrated: standing
                .calibrated_at
                .map_or_else(|| "never".to_owned(), |at| words::since(at, now, settings)),
            fresh: standing.fresh,
            slope: standing
                .slope_percent
                .map_or(String::new(), |slope| format::decimals(slope.get(), 1)),
            sd: format::ph(standing.sd.get()),
        }
    }
}

async fn list(State(db): State<Db>, framer: Framer, typed: Form) -> Result<ListPage, Error> {
    let retired = typed.ticked("retired");
    let now = UtcTime::now();
    let all = operations::all_standings(&db, &framer.member, now).await?;
    let page = framer.page("Meters", "meters").await;
    Ok(ListPage {
        meters: all
            .iter()
            .filter(|(meter, _)| meter.in_use != retired)
            .map(|(meter, standing)| MeterRow::of(meter, standing, now, &page.settings))
            .collect(),
        retired,
        nothing: all.is_empty(),
        may_keep: page.can(Permission::KeepMeters),
        may_calibrate: page.can(Permission::BrewBatches) && !retired,
        page,
    })
}

#[derive(Template, WebTemplate)]
#[template(path = "meters/show.html")]
struct ShowPage {
    page: Page,
    meter: Meter,
    resolution: String,
    badge: &'static str,
    verdict: &'static str,
    advice: Advice,
    last: Option<LastShown>,
    sd: String,
    shares: Vec<DoubtShare>,
    slope_trend: Option<Trend>,
    offset_trend: Option<Trend>,
    outlook: Option<String>,
    thinned: bool,
    calibrations: Vec<CalibrationRow>,
    pager: Option<Pager>,
    may_keep: bool,
    may_calibrate: bool,
}

/// The calibration that counts.
struct LastShown {
    since: String,
    slope: String,
    offset: String,
    residual: String,
    doubts: Vec<String>,
}

async fn show(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<MeterId>,
    typed: Form,
) -> Result<ShowPage, Error> {
    let by = &framer.member;
    let now = UtcTime::now();
    let (meter, standing) = operations::now(&db, by, id).await?;
    let last = operations::last_calibration(&db, by, id, now).await?;
    let history = operations::history(&db, by, id).await?;
    let page = framer.page(&meter.name, "meters").await;
    let settings = &page.settings;
    let zone = words::zone(settings);
    let (slope_trend, offset_trend) = (
        trend::trend(&history, Followed::Slope, now, &zone),
        trend::trend(&history, Followed::Offset, now, &zone),
    );
    let (outlook, thinned) = (
        trend::outlook(&history, now, &zone),
        trend::leaves_out(&history),
    );
    let (part, pager) = Pager::cut(history, PAGE, &typed, &format!("/meters/{id}"));
    Ok(ShowPage {
        resolution: words::resolution(&meter),
        badge: standing.verdict.badge(),
        verdict: standing.verdict.name(),
        advice: Advice::of(&standing, last.as_ref()),
        last: last.map(|last| LastShown {
            since: words::since(last.calibrated_at, now, settings),
            slope: words::slope(last.electrode),
            offset: words::offset(last.electrode),
            residual: last
                .residual
                .map_or(String::new(), |residual| format::doubt(residual.get())),
            doubts: words::doubts(&last, settings),
        }),
        sd: format::ph(standing.sd.get()),
        shares: words::shares(&standing),
        slope_trend,
        offset_trend,
        outlook,
        thinned,
        calibrations: part
            .iter()
            .map(|calibration| CalibrationRow::of(calibration, settings))
            .collect(),
        pager,
        may_keep: page.can(Permission::KeepMeters),
        may_calibrate: page.can(Permission::BrewBatches) && meter.in_use,
        meter,
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
        back: meter.map_or_else(
            || "/meters".to_owned(),
            |meter| format!("/meters/{}", meter.id),
        ),
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
        Ok(meter) => {
            let place = format!("/meters/{}?done=created", meter.id);
            Ok(Redirect::to(&place).into_response())
        }
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
        Ok(_) => Ok(Redirect::to(&format!("/meters/{id}?done=saved")).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let meter = operations::find(&db, &framer.member, id).await?;
            Ok((status, edit_page(&framer, Some(&meter), typed).await).into_response())
        }
    }
}
