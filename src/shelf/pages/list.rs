//! The list of what the shelf holds, and what an empty one offers.

use askama::Template;
use askama_web::WebTemplate;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use chemistry::material::{Role, Substance};
use jiff::civil::Date;

use super::{PAGE, WarningRow};
use crate::db::Db;
use crate::error::Error;
use crate::id::MaterialId;
use crate::people::Permission;
use crate::shelf::stock::{self, Levels};
use crate::shelf::words::{self, Measures};
use crate::shelf::{Material, MaterialLot, Price, operations, warnings};
use crate::web::form::Form;
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::list::{Column, Pager, Sorted};

#[derive(Template, WebTemplate)]
#[template(path = "shelf/list.html")]
pub(super) struct ListPage {
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
    stock: String,
    not_counted: usize,
    warnings: Vec<WarningRow>,
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
    let price = |material: &Material| material.price.map_or(f64::INFINITY, Price::get);
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
    let levels = stock::operations::all(db, &framer.member).await?;
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
    let today = format::today(&page.settings.time_zone);
    Ok(ListPage {
        columns: sorted.columns(address, &COLUMNS),
        materials: shelf
            .iter()
            .map(|(material, lot)| material_row(material, lot.as_ref(), &levels, (&page, today)))
            .collect(),
        pager,
        retired,
        may_change: page.can(Permission::KeepShelf),
        usual: if empty { usual(&typed) } else { Vec::new() },
        page,
        typed,
    })
}

fn material_row(
    material: &Material,
    lot: Option<&MaterialLot>,
    levels: &Levels,
    (page, today): (&Page, Date),
) -> MaterialRow {
    let level = levels.material(material.id);
    let in_hand = lot.map(|lot| (lot, levels.lot(lot.id).and_then(|level| level.stock)));
    let warnings = warnings::of_material(material, level, in_hand, today);
    let measures = Measures::of(material.substance);
    MaterialRow {
        id: material.id,
        name: material.name.clone(),
        what: words::beside_name(material),
        role: words::role(material.substance),
        lot: lot.map(|lot| lot.code.clone()),
        strength: words::strength(&material.chemistry(lot, today)),
        how_known: material.how_known(lot),
        price: words::price(material, &page.settings),
        vessels: words::vessels(&material.vessels),
        avoid: material.avoid,
        stock: stock::words::stock(page.settings.units, measures, level.stock),
        not_counted: level.not_counted,
        warnings: warnings.into_iter().map(WarningRow::of).collect(),
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
                    words::strength(&material.label()),
                ),
                name,
            }
        })
        .collect()
}

pub(super) async fn list(
    State(db): State<Db>,
    framer: Framer,
    typed: Form,
) -> Result<ListPage, Error> {
    list_page(&db, &framer, typed).await
}

pub(super) async fn create_usual(
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
