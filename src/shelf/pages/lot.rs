//! One lot: its stock and how it came about, and its form.

use askama::Template;
use askama_web::WebTemplate;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};

use super::{PAGE, SubstanceWords, WarningRow, day};
use crate::brewery;
use crate::db::Db;
use crate::error::Error;
use crate::id::{MaterialId, MaterialLotId};
use crate::people::Permission;
use crate::shelf::attachments::{self, Attachment, Subject};
use crate::shelf::entered::NewMaterialLotBody;
use crate::shelf::stock::words::Line;
use crate::shelf::stock::{self, Stock};
use crate::shelf::warnings::{self, Warning};
use crate::shelf::words::{self, Measures};
use crate::shelf::{Material, MaterialLot, operations};
use crate::web::extract::At;
use crate::web::form::Form;
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::list::Pager;

#[derive(Template, WebTemplate)]
#[template(path = "shelf/lot.html")]
pub(super) struct ShowPage {
    page: Page,
    material: Material,
    lot: MaterialLot,
    what: String,
    may_keep: bool,
    warnings: Vec<WarningRow>,
    strength: String,
    how_known: &'static str,
    received_on: String,
    opened_on: String,
    assayed_on: String,
    use_by: String,
    counted: bool,
    overdrawn: bool,
    stock: String,
    counted_at: Option<String>,
    lasts: Option<(String, String)>,
    reassay: Option<String>,
    cautions: Vec<&'static str>,
    attached: Option<Attachment>,
    lines: Vec<Line>,
    pager: Option<Pager>,
}

pub(super) async fn show(
    State(db): State<Db>,
    framer: Framer,
    At((id, lot_id)): At<(MaterialId, MaterialLotId)>,
    typed: Form,
) -> Result<ShowPage, Error> {
    let ledger = stock::operations::ledger(&db, &framer.member, id, lot_id).await?;
    let subject = Subject::Lot(id, lot_id);
    let attached = attachments::operations::newest(&db, &framer.member, subject).await?;
    let name = ledger.material.name_with(Some(&ledger.lot));
    let page = framer.page(name, "shelf").await;
    let zone = page.settings.time_zone.as_str();
    let today = format::today(zone);
    let units = page.settings.units;
    let there = ledger.level.stock;
    let lines = stock::words::lines(&ledger, units, zone);
    let address = format!("/shelf/{id}/lots/{lot_id}");
    let (lines, pager) = Pager::cut(lines, PAGE, &typed, &address);
    let (material, lot) = (ledger.material, ledger.lot);
    let measures = Measures::of(material.substance);
    let warnings = warnings::of_lot(&material, &lot, there, today);
    let open_long = |warning: &Warning| matches!(warning, Warning::OpenLong(_));
    Ok(ShowPage {
        what: words::beside_name(&material),
        may_keep: page.can(Permission::KeepLots),
        reassay: (warnings.iter().any(open_long))
            .then(|| words::how_to_assay(material.substance))
            .flatten(),
        warnings: warnings.into_iter().map(WarningRow::of).collect(),
        strength: words::strength(&material.chemistry(Some(&lot), today)),
        how_known: material.how_known(Some(&lot)),
        received_on: day(lot.received_on),
        opened_on: day(lot.opened_on),
        assayed_on: day(lot.assayed_on),
        use_by: day(lot.use_by),
        counted: there.is_some(),
        overdrawn: there.is_some_and(Stock::is_overdrawn),
        stock: stock::words::stock(units, measures, there),
        counted_at: ledger.level.counted_at.map(|at| format::moment(at, zone)),
        lasts: stock::words::lasts(units, measures, there, ledger.recent_use),
        cautions: material.substance.cautions(),
        attached,
        lines,
        pager,
        page,
        material,
        lot,
    })
}

#[derive(Template, WebTemplate)]
#[template(path = "shelf/lot_edit.html")]
pub(super) struct LotPage {
    page: Page,
    typed: Form,
    action: String,
    back: String,
    new: bool,
    substance: SubstanceWords,
    label: String,
    opened_assay: Option<String>,
}

async fn lot_page(
    framer: &Framer,
    material: &Material,
    lot: Option<MaterialLotId>,
    typed: Form,
) -> LotPage {
    let title = match lot {
        Some(_) => format!("{}, lot {}", material.name, typed.value("code")),
        None => format!("New lot of {}", material.name),
    };
    LotPage {
        page: framer.page(title, "shelf").await,
        action: match lot {
            Some(lot) => format!("/shelf/{}/lots/{lot}/edit", material.id),
            None => format!("/shelf/{}/lots/new", material.id),
        },
        back: match lot {
            Some(lot) => format!("/shelf/{}/lots/{lot}", material.id),
            None => format!("/shelf/{}", material.id),
        },
        new: lot.is_none(),
        substance: SubstanceWords::of(material.substance),
        label: words::strength(&material.label()),
        opened_assay: material.substance.opened_assay().map(words::share),
        typed,
    }
}

pub(super) async fn new(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<MaterialId>,
) -> Result<LotPage, Error> {
    framer.member.may(Permission::KeepLots)?;
    let material = operations::find(&db, &framer.member, id).await?;
    let today = brewery::operations::today(&db).await?;
    let offered = Form::of(&NewMaterialLotBody::offered()).with("received_on", today.to_string());
    Ok(lot_page(&framer, &material, None, offered).await)
}

pub(super) async fn create(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<MaterialId>,
    typed: Form,
) -> Result<Response, Error> {
    let created = async {
        framer.member.may(Permission::KeepLots)?;
        operations::create_lot(&db, &framer.member, id, typed.body()?).await
    };
    match created.await {
        Ok(lot) => {
            Ok(Redirect::to(&format!("/shelf/{id}/lots/{}?done=created", lot.id)).into_response())
        }
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let material = operations::find(&db, &framer.member, id).await?;
            Ok((status, lot_page(&framer, &material, None, typed).await).into_response())
        }
    }
}

pub(super) async fn edit(
    State(db): State<Db>,
    framer: Framer,
    At((id, lot_id)): At<(MaterialId, MaterialLotId)>,
) -> Result<LotPage, Error> {
    framer.member.may(Permission::KeepLots)?;
    let (material, lot) = operations::find_lot_of(&db, &framer.member, id, lot_id).await?;
    let typed = Form::of(&NewMaterialLotBody::from(&lot)).with("version", lot.version.to_string());
    Ok(lot_page(&framer, &material, Some(lot_id), typed).await)
}

pub(super) async fn revise(
    State(db): State<Db>,
    framer: Framer,
    At((id, lot_id)): At<(MaterialId, MaterialLotId)>,
    typed: Form,
) -> Result<Response, Error> {
    let (material, _) = operations::find_lot_of(&db, &framer.member, id, lot_id).await?;
    let saved = async {
        framer.member.may(Permission::KeepLots)?;
        operations::revise_lot(&db, &framer.member, lot_id, typed.body()?, typed.version()).await
    };
    match saved.await {
        Ok(_) => Ok(Redirect::to(&format!("/shelf/{id}/lots/{lot_id}?done=saved")).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let page = lot_page(&framer, &material, Some(lot_id), typed).await;
            Ok((status, page).into_response())
        }
    }
}
