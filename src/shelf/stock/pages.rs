//! The forms of a delivery and of a count, and of correcting either.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::{get, post};

use super::entered::NewMovementBody;
use super::{MovementKind, operations, words};
use crate::brewery::{self, Settings};
use crate::db::Db;
use crate::error::Error;
use crate::id::{MaterialId, MaterialLotId, MovementId, UtcTime};
use crate::people::Permission;
use crate::shelf::words::Measures;
use crate::web::App;
use crate::web::extract::At;
use crate::web::form::Form;
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::units::{shown_in, typed_in_si};

/// The pages.
pub fn routes() -> Router<App> {
    Router::new()
        .route("/shelf/{id}/lots/{lot_id}/deliveries/new", get(delivery))
        .route("/shelf/{id}/lots/{lot_id}/counts/new", get(count))
        .route("/shelf/{id}/lots/{lot_id}/movements", post(enter))
        .route(
            "/shelf/{id}/lots/{lot_id}/movements/{movement_id}",
            get(correct),
        )
}

type Lot = (MaterialId, MaterialLotId);

#[derive(Template, WebTemplate)]
#[template(path = "shelf/movement.html")]
struct MovementPage {
    page: Page,
    typed: Form,
    name: String,
    action: String,
    back: String,
    kind: &'static str,
    delivery: bool,
    corrects: bool,
    unit: &'static str,
    expected: String,
    time_zone: String,
}

async fn movement_page(
    db: &Db,
    framer: &Framer,
    (material, lot): Lot,
    kind: MovementKind,
    typed: Form,
) -> Result<MovementPage, Error> {
    let ledger = operations::ledger(db, &framer.member, material, lot).await?;
    let corrects = !typed.value("corrects").is_empty();
    let delivery = kind == MovementKind::Delivery;
    let name = ledger.material.name_with(Some(&ledger.lot));
    let what = match (corrects, delivery) {
        (false, true) => "Delivery of",
        (false, false) => "Count",
        (true, true) => "Correct a delivery of",
        (true, false) => "Correct a count of",
    };
    let page = framer.page(format!("{what} {name}"), "shelf").await;
    let units = page.settings.units;
    let measures = Measures::of(ledger.material.substance);
    Ok(MovementPage {
        action: format!("/shelf/{material}/lots/{lot}/movements"),
        back: format!("/shelf/{material}/lots/{lot}"),
        name,
        kind: kind.key(),
        delivery,
        corrects,
        unit: units.label(measures.stock),
        expected: words::stock(units, measures, ledger.level.stock),
        time_zone: page.settings.time_zone.clone(),
        page,
        typed,
    })
}

/// A moment as a field of a form takes it.
fn typed_moment(at: UtcTime, settings: &Settings) -> String {
    format::moment(at, &settings.time_zone).replace(' ', "T")
}

async fn offered(
    db: &Db,
    framer: &Framer,
    lot: Lot,
    kind: MovementKind,
) -> Result<MovementPage, Error> {
    framer.member.may(Permission::KeepLots)?;
    let settings = brewery::operations::settings(db).await?;
    let now = typed_moment(UtcTime::now(), &settings);
    let typed = Form::empty().with("moved_at", now);
    movement_page(db, framer, lot, kind, typed).await
}

async fn delivery(
    State(db): State<Db>,
    framer: Framer,
    At(lot): At<Lot>,
) -> Result<MovementPage, Error> {
    offered(&db, &framer, lot, MovementKind::Delivery).await
}

async fn count(
    State(db): State<Db>,
    framer: Framer,
    At(lot): At<Lot>,
) -> Result<MovementPage, Error> {
    offered(&db, &framer, lot, MovementKind::Count).await
}

/// The fields of the form that carry an amount.
fn fields(material: &crate::shelf::Material) -> Vec<(String, crate::web::units::Measure)> {
    vec![(
        "amount_g_or_ml".into(),
        Measures::of(material.substance).stock,
    )]
}

async fn correct(
    State(db): State<Db>,
    framer: Framer,
    At((id, lot_id, movement_id)): At<(MaterialId, MaterialLotId, MovementId)>,
) -> Result<MovementPage, Error> {
    framer.member.may(Permission::KeepLots)?;
    let place = (id, lot_id, movement_id);
    let (material, _, movement) = operations::find(&db, &framer.member, place).await?;
    let settings = brewery::operations::settings(&db).await?;
    let body = NewMovementBody {
        moved_at: typed_moment(movement.at, &settings),
        reason: String::new(),
        corrects: movement.id.to_string(),
        ..NewMovementBody::from(&movement)
    };
    let typed = shown_in(&Form::of(&body), settings.units, &fields(&material));
    // What was taken back by mistake is entered anew.
    let kind = match movement.kind {
        MovementKind::Removal => MovementKind::Delivery,
        kind => kind,
    };
    movement_page(&db, &framer, (id, lot_id), kind, typed).await
}

async fn enter(
    State(db): State<Db>,
    framer: Framer,
    At((id, lot_id)): At<Lot>,
    typed: Form,
) -> Result<Response, Error> {
    let (material, _) =
        crate::shelf::operations::find_lot_of(&db, &framer.member, id, lot_id).await?;
    let units = brewery::operations::settings(&db).await?.units;
    let entered = async {
        framer.member.may(Permission::KeepLots)?;
        let body: NewMovementBody = typed_in_si(&typed, units, &fields(&material)).body()?;
        operations::enter(&db, &framer.member, id, lot_id, &body).await
    };
    match entered.await {
        Ok(_) => Ok(Redirect::to(&format!("/shelf/{id}/lots/{lot_id}?done=saved")).into_response()),
        Err(error) => {
            // Nobody types which movement is corrected: there is no field to lead to.
            let error = error.renamed(|field| match field {
                "corrects" => String::new(),
                other => other.into(),
            });
            let (status, typed) = typed.refused(error)?;
            let kind = match MovementKind::from_key(typed.value("kind")) {
                Some(MovementKind::Count) => MovementKind::Count,
                _ => MovementKind::Delivery,
            };
            let page = movement_page(&db, &framer, (id, lot_id), kind, typed).await?;
            Ok((status, page).into_response())
        }
    }
}
