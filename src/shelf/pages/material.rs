//! One material with its lots, and its forms.

use askama::Template;
use askama_web::WebTemplate;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use chemistry::material::{Form as Solidity, Role, Substance, Vessel};
use jiff::civil::Date;

use super::{PAGE, SubstanceWords, WarningRow, day};
use crate::brewery::{self, Units};
use crate::db::Db;
use crate::error::Error;
use crate::id::{MaterialId, MaterialLotId};
use crate::people::Permission;
use crate::shelf::attachments::{self, Attachment, Subject};
use crate::shelf::entered::NewMaterialBody;
use crate::shelf::stock::{self, Stock};
use crate::shelf::warnings;
use crate::shelf::words::{self, BringsRow, Measures};
use crate::shelf::{Material, MaterialLot, operations};
use crate::web::extract::At;
use crate::web::form::Form;
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::list::Pager;
use crate::web::units::{shown_in, typed_in_si};

#[derive(Template, WebTemplate)]
#[template(path = "shelf/show.html")]
pub(super) struct ShowPage {
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
    reassay: String,
    cautions: Vec<&'static str>,
    attached: Option<Attachment>,
    additive_number: Option<&'static str>,
    solubility: Option<&'static str>,
    per_batch: String,
    brings: Vec<BringsRow>,
    stock: String,
    counted: bool,
    not_counted: usize,
    warnings: Vec<WarningRow>,
    lots: Vec<LotRow>,
    pager: Option<Pager>,
}

struct LotRow {
    id: MaterialLotId,
    code: String,
    received_on: String,
    opened_on: String,
    use_by: String,
    stock: String,
    warnings: Vec<WarningRow>,
    strength: String,
    how_known: &'static str,
    current: bool,
    used_up: bool,
}

fn lot_row(
    material: &Material,
    lot: &MaterialLot,
    stock: Option<Stock>,
    (units, today): (Units, Date),
) -> LotRow {
    let warnings = warnings::of_lot(material, lot, stock, today);
    LotRow {
        id: lot.id,
        code: lot.code.clone(),
        received_on: day(lot.received_on),
        opened_on: day(lot.opened_on),
        use_by: day(lot.use_by),
        stock: stock::words::stock(units, Measures::of(material.substance), stock),
        warnings: warnings.into_iter().map(WarningRow::of).collect(),
        strength: words::strength(&material.chemistry(Some(lot), today)),
        how_known: material.how_known(Some(lot)),
        current: lot.current,
        used_up: !lot.in_use,
    }
}

pub(super) async fn show(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<MaterialId>,
    typed: Form,
) -> Result<ShowPage, Error> {
    let material = operations::find(&db, &framer.member, id).await?;
    let lots = operations::lots(&db, &framer.member, id).await?;
    let current = lots.iter().find(|lot| lot.current).cloned();
    let current = current.as_ref();
    let attached =
        attachments::operations::newest(&db, &framer.member, Subject::Material(id)).await?;
    let levels = stock::operations::all(&db, &framer.member).await?;
    let stock_of = |id| levels.lot(id).and_then(|level| level.stock);
    let level = levels.material(id);
    let (lots, pager) = Pager::cut(lots, PAGE, &typed, &format!("/shelf/{id}"));
    let page = framer.page(&material.name, "shelf").await;
    let units = page.settings.units;
    let today = format::today(&page.settings.time_zone);
    let measures = Measures::of(material.substance);
    let substance = material.substance;
    let in_hand = current.map(|lot| (lot, stock_of(lot.id)));
    let warnings = warnings::of_material(&material, level, in_hand, today);
    let brought = words::quoted_dose(measures, units);
    Ok(ShowPage {
        what: words::beside_name(&material),
        role: words::role(substance),
        may_change: page.can(Permission::KeepShelf),
        may_keep_lots: page.can(Permission::KeepLots),
        lot_in_force: current.map(|lot| lot.code.clone()),
        strength: words::strength(&material.chemistry(current, today)),
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
        reassay: words::how_to_assay(substance).unwrap_or_default(),
        cautions: substance.cautions(),
        attached,
        additive_number: substance.additive_number(),
        solubility: substance.solubility_note(),
        per_batch: words::amount(units, measures.per_batch, brought),
        brings: words::brings(&material.brings(current, today, brought)),
        stock: stock::words::stock(units, measures, level.stock),
        counted: level.stock.is_some(),
        not_counted: level.not_counted,
        warnings: warnings.into_iter().map(WarningRow::of).collect(),
        lots: lots
            .iter()
            .map(|lot| lot_row(&material, lot, stock_of(lot.id), (units, today)))
            .collect(),
        pager,
        page,
        material,
    })
}

#[derive(Template, WebTemplate)]
#[template(path = "shelf/edit.html")]
pub(super) struct EditPage {
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

pub(super) async fn new(framer: Framer, typed: Form) -> Result<Response, Error> {
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

pub(super) async fn create(
    State(db): State<Db>,
    framer: Framer,
    typed: Form,
) -> Result<Response, Error> {
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

pub(super) async fn edit(
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

pub(super) async fn revise(
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
