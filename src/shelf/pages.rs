//! The pages of the shelf: the list, one material with its lots, and the forms.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::{get, post};
use chemistry::material::{Form as Solidity, Role, Substance, Vessel};
use jiff::civil::Date;

use super::entered::{NewMaterialBody, NewMaterialLotBody};
use super::words::{self, BringsRow, Measures};
use super::{Material, MaterialLot, operations};
use crate::brewery::{self, Units};
use crate::db::Db;
use crate::error::Error;
use crate::id::{MaterialId, MaterialLotId};
use crate::people::Permission;
use crate::web::App;
use crate::web::extract::At;
use crate::web::form::Form;
use crate::web::layout::{Framer, Page};
use crate::web::list::{Column, Pager, Sorted};
use crate::web::units::{shown_in, typed_in_si};

/// Materials, and lots of one material, on one page.
const PAGE: usize = 40;

/// The pages.
pub fn routes() -> Router<App> {
    Router::new()
        .route("/shelf", get(list))
        .route("/shelf/usual", post(create_usual))
        .route("/shelf/new", get(new).post(create))
        .route("/shelf/{id}", get(show))
        .route("/shelf/{id}/edit", get(edit).post(revise))
        .route("/shelf/{id}/lots/new", get(new_lot).post(create_lot))
        .route("/shelf/{id}/lots/{lot_id}", get(edit_lot).post(revise_lot))
}

#[derive(Template, WebTemplate)]
#[template(path = "shelf/list.html")]
struct ListPage {
    page: Page,
    typed: Form,
    materials: Vec<MaterialRow>,
    columns: Vec<Column>,
    pager: Option<Pager>,
    retired: bool,
    may_change: bool,
    usual: Vec<UsualRow>,
}

struct MaterialRow {
    id: MaterialId,
    name: String,
    what: String,
    role: &'static str,
    lot: Option<String>,
    strength: String,
    how_known: &'static str,
    price: String,
    vessels: String,
    avoid: bool,
}

/// A substance the empty shelf offers.
struct UsualRow {
    name: String,
    words: String,
    ticked: bool,
}

/// Columns the list sorts by: key, head, kind.
const COLUMNS: [(&str, &str, &str); 3] = [
    ("name", "Material", ""),
    ("role", "For", ""),
    ("price", "Price", "number"),
];

fn sort(shelf: &mut [(Material, Option<MaterialLot>)], by: &Sorted) {
    let price = |material: &Material| material.price.map_or(f64::INFINITY, super::Price::get);
    let role = |material: &Material| match material.substance.role() {
        Role::Salt => 0,
        Role::Base => 1,
        Role::Acid => 2,
    };
    match by.key {
        "role" => shelf.sort_by_key(|(material, _)| role(material)),
        "price" => shelf.sort_by(|(a, _), (b, _)| price(a).total_cmp(&price(b))),
        _ => shelf.sort_by_key(|(material, _)| material.name.to_lowercase()),
    }
    if by.descending {
        shelf.reverse();
    }
}

async fn list_page(db: &Db, framer: &Framer, typed: Form) -> Result<ListPage, Error> {
    let retired = typed.ticked("retired");
    let mut shelf = operations::list_with_lots(db, &framer.member).await?;
    let empty = shelf.is_empty();
    shelf.retain(|(material, _)| material.in_use != retired);
    let sorted = Sorted::asked(&typed, &COLUMNS);
    sort(&mut shelf, &sorted);
    let address = if retired {
        "/shelf?retired=yes"
    } else {
        "/shelf"
    };
    let (shelf, pager) = Pager::cut(shelf, PAGE, &typed, &sorted.address(address));
    let page = framer.page("Shelf", "shelf").await;
    Ok(ListPage {
        columns: sorted.columns(address, &COLUMNS),
        materials: shelf
            .iter()
            .map(|(material, lot)| material_row(material, lot.as_ref(), &page))
            .collect(),
        pager,
        retired,
        may_change: page.can(Permission::KeepShelf),
        usual: if empty { usual(&typed) } else { Vec::new() },
        page,
        typed,
    })
}

fn material_row(material: &Material, lot: Option<&MaterialLot>, page: &Page) -> MaterialRow {
    MaterialRow {
        id: material.id,
        name: material.name.clone(),
        what: words::beside_name(material),
        role: words::role(material.substance),
        lot: lot.map(|lot| lot.code.clone()),
        strength: words::strength(&material.chemistry(lot)),
        how_known: material.how_known(lot),
        price: words::price(material, &page.settings),
        vessels: words::vessels(&material.vessels),
        avoid: material.avoid,
    }
}

/// What most breweries that treat their liquor hold. Source: common practice.
const COMMON: [Substance; 7] = [
    Substance::Gypsum,
    Substance::CalciumChlorideDihydrate,
    Substance::EpsomSalt,
    Substance::SodiumChloride,
    Substance::SodiumBicarbonate,
    Substance::LacticAcid,
    Substance::PhosphoricAcid,
];

/// The substances an empty shelf offers; the common ones are ticked until somebody has
/// chosen.
fn usual(typed: &Form) -> Vec<UsualRow> {
    let chosen = !typed.problems.is_empty();
    let offered = Substance::ALL.into_iter().filter(|s| !s.is_discouraged());
    offered
        .filter_map(|substance| Some((substance, Material::usual(substance)?)))
        .map(|(substance, material)| {
            let name = format!("usual.{}", substance.key());
            UsualRow {
                ticked: if chosen {
                    typed.ticked(&name)
                } else {
                    COMMON.contains(&substance)
                },
                words: format!(
                    "{}, {} ({}), {} assumed",
                    substance.name(),
                    substance.formula(),
                    words::role(substance),
                    words::strength(&material.chemistry(None)),
                ),
                name,
            }
        })
        .collect()
}

async fn list(State(db): State<Db>, framer: Framer, typed: Form) -> Result<ListPage, Error> {
    list_page(&db, &framer, typed).await
}

async fn create_usual(
    State(db): State<Db>,
    framer: Framer,
    typed: Form,
) -> Result<Response, Error> {
    let created = async {
        framer.member.may(Permission::KeepShelf)?;
        let chosen: Vec<Substance> = Substance::ALL
            .into_iter()
            .filter(|substance| typed.ticked(&format!("usual.{}", substance.key())))
            .collect();
        if chosen.is_empty() {
            return Err(Error::field("usual", "Tick at least one material."));
        }
        operations::create_usual(&db, &framer.member, &chosen).await
    };
    match created.await {
        Ok(_) => Ok(Redirect::to("/shelf?done=created").into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, list_page(&db, &framer, typed).await?).into_response())
        }
    }
}

#[derive(Template, WebTemplate)]
#[template(path = "shelf/show.html")]
struct ShowPage {
    page: Page,
    material: Material,
    what: String,
    role: &'static str,
    may_change: bool,
    may_keep_lots: bool,
    lot_in_force: Option<String>,
    strength: String,
    how_known: &'static str,
    scale_step: String,
    tolerance: String,
    reorder_below: String,
    price: String,
    vessels: String,
    unusual: String,
    highest: String,
    efficiency: Option<String>,
    opened: bool,
    draws_water: bool,
    cautions: Vec<&'static str>,
    additive_number: Option<&'static str>,
    solubility: Option<&'static str>,
    per_batch: String,
    brings: Vec<BringsRow>,
    lots: Vec<LotRow>,
    pager: Option<Pager>,
}

struct LotRow {
    id: MaterialLotId,
    code: String,
    received_on: String,
    opened_on: String,
    use_by: String,
    overdue: bool,
    strength: String,
    how_known: &'static str,
    current: bool,
    used_up: bool,
}

fn day(date: Option<Date>) -> String {
    date.map(|date| date.to_string()).unwrap_or_default()
}

fn lot_row(material: &Material, lot: &MaterialLot, today: Date) -> LotRow {
    LotRow {
        id: lot.id,
        code: lot.code.clone(),
        received_on: day(lot.received_on),
        opened_on: day(lot.opened_on),
        use_by: day(lot.use_by),
        overdue: lot.in_use && lot.use_by.is_some_and(|date| date < today),
        strength: words::strength(&material.chemistry(Some(lot))),
        how_known: material.how_known(Some(lot)),
        current: lot.current,
        used_up: !lot.in_use,
    }
}

async fn show(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<MaterialId>,
    typed: Form,
) -> Result<ShowPage, Error> {
    let material = operations::find(&db, &framer.member, id).await?;
    let lots = operations::lots(&db, &framer.member, id).await?;
    let current = lots.iter().find(|lot| lot.current).cloned();
    let current = current.as_ref();
    let today = brewery::operations::today(&db).await?;
    let (lots, pager) = Pager::cut(lots, PAGE, &typed, &format!("/shelf/{id}"));
    let page = framer.page(&material.name, "shelf").await;
    let units = page.settings.units;
    let measures = Measures::of(material.substance);
    let substance = material.substance;
    let brought = words::quoted_dose(measures, units);
    Ok(ShowPage {
        what: words::beside_name(&material),
        role: words::role(substance),
        may_change: page.can(Permission::KeepShelf),
        may_keep_lots: page.can(Permission::KeepLots),
        lot_in_force: current.map(|lot| lot.code.clone()),
        strength: words::strength(&material.chemistry(current)),
        how_known: material.how_known(current),
        scale_step: words::amount(units, measures.dose, material.scale_step),
        tolerance: words::tolerance(&material),
        reorder_below: material.reorder_below.map_or_else(String::new, |level| {
            words::amount(units, measures.stock, level)
        }),
        price: words::price(&material, &page.settings),
        vessels: words::vessels(&material.vessels),
        unusual: words::vessels(&material.unusual_vessels()),
        highest: material.highest.map_or_else(String::new, |highest| {
            words::amount(units, measures.per_batch, highest)
        }),
        efficiency: words::efficiency(substance),
        opened: current.is_some_and(|lot| lot.opened_on.is_some()),
        draws_water: substance.opened_assay().is_some(),
        cautions: substance.cautions(),
        additive_number: substance.additive_number(),
        solubility: substance.solubility_note(),
        per_batch: words::amount(units, measures.per_batch, brought),
        brings: words::brings(&material.brings(current, brought)),
        lots: lots
            .iter()
            .map(|lot| lot_row(&material, lot, today))
            .collect(),
        pager,
        page,
        material,
    })
}

#[derive(Template, WebTemplate)]
#[template(path = "shelf/edit.html")]
struct EditPage {
    page: Page,
    typed: Form,
    action: String,
    back: String,
    new: bool,
    substance: SubstanceWords,
    dose_unit: &'static str,
    stock_unit: &'static str,
    per_batch_unit: &'static str,
    price_unit: String,
    vessels: Vec<VesselBox>,
}

/// What a form says of the substance it is about.
struct SubstanceWords {
    what: String,
    key: &'static str,
    liquid: bool,
    blended: bool,
    /// What is assumed where nothing is entered.
    usual: String,
    cautions: Vec<&'static str>,
}

impl SubstanceWords {
    fn of(substance: Substance) -> Self {
        let usual = Material::usual(substance).map(|usual| usual.chemistry(None));
        let usual = usual.or_else(|| chemistry::material::Material::usual(substance));
        Self {
            what: words::what(substance),
            key: substance.key(),
            liquid: substance.form() == Solidity::Liquid,
            blended: substance == Substance::BlendedAcid,
            usual: usual
                .map(|usual| words::strength(&usual))
                .unwrap_or_default(),
            cautions: substance.cautions(),
        }
    }
}

struct VesselBox {
    name: String,
    words: String,
    ticked: bool,
}

async fn edit_page(
    framer: &Framer,
    substance: Substance,
    material: Option<&Material>,
    typed: Form,
) -> EditPage {
    let title = material.map_or_else(
        || format!("New on the shelf: {}", substance.name()),
        |material| format!("Change {}", material.name),
    );
    let page = framer.page(title, "shelf").await;
    let units = page.settings.units;
    let measures = Measures::of(substance);
    let usual = substance.default_vessels();
    EditPage {
        action: material.map_or_else(
            || "/shelf/new".to_owned(),
            |material| format!("/shelf/{}/edit", material.id),
        ),
        back: material.map_or_else(
            || "/shelf/new".to_owned(),
            |material| format!("/shelf/{}", material.id),
        ),
        new: material.is_none(),
        substance: SubstanceWords::of(substance),
        dose_unit: units.label(measures.dose),
        stock_unit: units.label(measures.stock),
        per_batch_unit: units.label(measures.per_batch),
        price_unit: format!("{} {}", page.settings.currency, units.label(measures.price)),
        vessels: Vessel::ALL
            .map(|vessel| {
                let name = format!("vessels.{}", vessel.key());
                VesselBox {
                    ticked: typed.ticked(&name),
                    words: if usual.is_empty() || usual.contains(&vessel) {
                        words::capital(vessel.name())
                    } else {
                        format!("{} (unusual for it)", words::capital(vessel.name()))
                    },
                    name,
                }
            })
            .into(),
        page,
        typed,
    }
}

#[derive(Template, WebTemplate)]
#[template(path = "shelf/choose.html")]
struct ChoosePage {
    page: Page,
    groups: Vec<(&'static str, Vec<ChooseRow>)>,
}

struct ChooseRow {
    key: &'static str,
    name: &'static str,
    words: String,
    discouraged: bool,
}

async fn choose_page(framer: &Framer) -> ChoosePage {
    let rows = |role: Role| {
        let of_role = Substance::ALL.into_iter().filter(|s| s.role() == role);
        of_role
            .map(|substance| ChooseRow {
                key: substance.key(),
                name: substance.name(),
                words: format!(
                    "{}, {}",
                    substance.formula(),
                    match substance.form() {
                        Solidity::Solid => "solid, weighed",
                        Solidity::Liquid => "liquid, measured out",
                    }
                ),
                discouraged: substance.is_discouraged(),
            })
            .collect()
    };
    ChoosePage {
        page: framer.page("New on the shelf", "shelf").await,
        groups: vec![
            ("Salts", rows(Role::Salt)),
            ("Bases", rows(Role::Base)),
            ("Acids", rows(Role::Acid)),
        ],
    }
}

async fn new(framer: Framer, typed: Form) -> Result<Response, Error> {
    framer.member.may(Permission::KeepShelf)?;
    let Some(substance) = Substance::from_key(typed.value("substance")) else {
        return Ok(choose_page(&framer).await.into_response());
    };
    let units = framer.page("", "").await.settings.units;
    let offered = Form::of(&NewMaterialBody::offered(substance));
    // One gram is no step of a scale that shows ounces.
    let offered = match units {
        Units::Metric => offered,
        Units::Us => offered.with("scale_step_g_or_ml", "0.1"),
    };
    Ok(edit_page(&framer, substance, None, offered)
        .await
        .into_response())
}

/// The material a form describes, its figures typed in the brewery's units.
fn typed_material(typed: &Form, units: Units) -> Result<Material, Error> {
    let fields = Substance::from_key(typed.value("substance"))
        .map(|substance| Measures::of(substance).fields())
        .unwrap_or_default();
    let body: NewMaterialBody = typed_in_si(typed, units, &fields).body()?;
    body.try_into()
}

async fn create(State(db): State<Db>, framer: Framer, typed: Form) -> Result<Response, Error> {
    let units = brewery::operations::settings(&db).await?.units;
    let created = async {
        framer.member.may(Permission::KeepShelf)?;
        operations::create(&db, &framer.member, typed_material(&typed, units)?).await
    };
    match created.await {
        Ok(material) => {
            Ok(Redirect::to(&format!("/shelf/{}?done=created", material.id)).into_response())
        }
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let Some(substance) = Substance::from_key(typed.value("substance")) else {
                return Ok((status, choose_page(&framer).await).into_response());
            };
            Ok((status, edit_page(&framer, substance, None, typed).await).into_response())
        }
    }
}

async fn edit(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<MaterialId>,
) -> Result<EditPage, Error> {
    framer.member.may(Permission::KeepShelf)?;
    let material = operations::find(&db, &framer.member, id).await?;
    let units = brewery::operations::settings(&db).await?.units;
    let stored =
        Form::of(&NewMaterialBody::from(&material)).with("version", material.version.to_string());
    let typed = shown_in(&stored, units, &Measures::of(material.substance).fields());
    Ok(edit_page(&framer, material.substance, Some(&material), typed).await)
}

async fn revise(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<MaterialId>,
    typed: Form,
) -> Result<Response, Error> {
    let units = brewery::operations::settings(&db).await?.units;
    let saved = async {
        framer.member.may(Permission::KeepShelf)?;
        let new = typed_material(&typed, units)?;
        operations::revise(&db, &framer.member, id, new, typed.version()).await
    };
    match saved.await {
        Ok(_) => Ok(Redirect::to(&format!("/shelf/{id}?done=saved")).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let material = operations::find(&db, &framer.member, id).await?;
            let page = edit_page(&framer, material.substance, Some(&material), typed).await;
            Ok((status, page).into_response())
        }
    }
}

#[derive(Template, WebTemplate)]
#[template(path = "shelf/lot.html")]
struct LotPage {
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
        label: words::strength(&material.chemistry(None)),
        opened_assay: material.substance.opened_assay().map(words::share),
        material,
        typed,
    }
}

async fn new_lot(
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

async fn create_lot(
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

async fn edit_lot(
    State(db): State<Db>,
    framer: Framer,
    At((id, lot_id)): At<(MaterialId, MaterialLotId)>,
) -> Result<LotPage, Error> {
    framer.member.may(Permission::KeepLots)?;
    let (material, lot) = operations::find_lot_of(&db, &framer.member, id, lot_id).await?;
    let typed = Form::of(&NewMaterialLotBody::from(&lot)).with("version", lot.version.to_string());
    Ok(lot_page(&framer, material, Some(lot_id), typed).await)
}

async fn revise_lot(
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
