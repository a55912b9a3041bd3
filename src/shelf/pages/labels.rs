//! Labels of lots, to print: a sheet of many, or one small one.

use askama::Template;
use askama_web::WebTemplate;
use axum::extract::State;

use super::day;
use crate::db::Db;
use crate::error::Error;
use crate::id::MaterialLotId;
use crate::shelf::labels::{self, Code};
use crate::shelf::{Material, MaterialLot, operations, words};
use crate::web::form::Form;
use crate::web::layout::{Framer, Page};

/// Most labels of one lot on one sheet.
const MOST_COPIES: usize = 24;

#[derive(Template, WebTemplate)]
#[template(path = "shelf/labels.html")]
pub(super) struct LabelsPage {
    page: Page,
    small: bool,
    copies: usize,
    labels: Vec<Label>,
    offered: Vec<Offered>,
}

/// One label.
#[derive(Clone)]
struct Label {
    code: Code,
    name: String,
    what: String,
    lot: String,
    strength: String,
    opened_on: String,
    use_by: String,
    cautions: Vec<&'static str>,
    payload: String,
}

/// A lot that a label can be made for.
struct Offered {
    id: MaterialLotId,
    words: String,
    ticked: bool,
}

fn label(material: &Material, lot: &MaterialLot) -> Result<Label, Error> {
    let sealed = MaterialLot {
        opened_on: None,
        ..lot.clone()
    };
    Ok(Label {
        code: labels::code(lot.id)?,
        payload: labels::payload(lot.id),
        name: material.name.clone(),
        what: words::beside_name(material),
        lot: lot.code.clone(),
        // What the certificate says: a label does not change as a pack stands open.
        strength: words::strength(&material.chemistry(Some(&sealed), jiff::civil::Date::ZERO)),
        opened_on: day(lot.opened_on),
        use_by: day(lot.use_by),
        cautions: material.substance.cautions(),
    })
}

pub(super) async fn labels(
    State(db): State<Db>,
    framer: Framer,
    typed: Form,
) -> Result<LabelsPage, Error> {
    let wanted: Vec<MaterialLotId> = typed
        .values("lot")
        .filter_map(|id| id.parse().ok())
        .collect();
    let shelf = operations::every_lot(&db, &framer.member).await?;
    let chosen = |lot: &MaterialLot| wanted.contains(&lot.id);
    let small = typed.value("size") == "small";
    let copies = typed.value("copies").parse().unwrap_or(1);
    let copies = if small {
        1
    } else {
        usize::clamp(copies, 1, MOST_COPIES)
    };
    let mut labels = Vec::new();
    for (material, lot) in shelf.iter().filter(|(_, lot)| chosen(lot)) {
        let label = label(material, lot)?;
        labels.extend(std::iter::repeat_n(label, copies));
    }
    let offered = shelf
        .iter()
        .filter(|(material, lot)| (lot.in_use && material.in_use) || chosen(lot))
        .map(|(material, lot)| Offered {
            id: lot.id,
            words: material.name_with(Some(lot)),
            ticked: chosen(lot),
        })
        .collect();
    Ok(LabelsPage {
        page: framer.page("Labels of lots", "shelf").await,
        small,
        copies,
        labels,
        offered,
    })
}
