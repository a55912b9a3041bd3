//! The form of a lot.

use askama::Template;
use askama_web::WebTemplate;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};

use super::SubstanceWords;
use crate::brewery;
use crate::db::Db;
use crate::error::Error;
use crate::id::{MaterialId, MaterialLotId};
use crate::people::Permission;
use crate::shelf::entered::NewMaterialLotBody;
use crate::shelf::{Material, operations, words};
use crate::web::extract::At;
use crate::web::form::Form;
use crate::web::layout::{Framer, Page};

#[derive(Template, WebTemplate)]
#[template(path = "shelf/lot.html")]
pub(super) struct LotPage {
    page: Page,
    typed: Form,
    material: Material,
    action: String,
    new: bool,
    substance: SubstanceWords,
    label: String,
    opened_assay: Option<String>,
}

async fn lot_page(
    framer: &Framer,
    material: Material,
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
            Some(lot) => format!("/shelf/{}/lots/{lot}", material.id),
            None => format!("/shelf/{}/lots/new", material.id),
        },
        new: lot.is_none(),
        substance: SubstanceWords::of(material.substance),
        label: words::strength(&material.label()),
        opened_assay: material.substance.opened_assay().map(words::share),
        material,
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
    Ok(lot_page(&framer, material, None, offered).await)
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
        Ok(_) => Ok(Redirect::to(&format!("/shelf/{id}?done=created")).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let material = operations::find(&db, &framer.member, id).await?;
            Ok((status, lot_page(&framer, material, None, typed).await).into_response())
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
    Ok(lot_page(&framer, material, Some(lot_id), typed).await)
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
        Ok(_) => Ok(Redirect::to(&format!("/shelf/{id}?done=saved")).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let page = lot_page(&framer, material, Some(lot_id), typed).await;
            Ok((status, page).into_response())
        }
    }
}
