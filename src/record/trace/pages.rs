//! Where a lot or a water test went.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::routing::get;
use chemistry::material::DoseUnit;

use super::{Known, Part, Reached};
use crate::brewery::{Settings, Units};
use crate::db::Db;
use crate::error::Error;
use crate::id::{MaltId, MaltLotId, MaterialId, MaterialLotId, WaterTestId};
use crate::web::App;
use crate::web::extract::At;
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::units::Measure;
use crate::{malts, shelf, sources};

/// The pages.
pub fn routes() -> Router<App> {
    Router::new()
        .route("/shelf/{id}/lots/{lot_id}/batches", get(material_lot))
        .route("/malts/{id}/lots/{lot_id}/batches", get(malt_lot))
        .route("/water-tests/{id}/batches", get(water_test))
}

#[derive(Template, WebTemplate)]
#[template(path = "record/trace.html")]
struct TracePage {
    page: Page,
    back: (String, String),
    lead: &'static str,
    empty: &'static str,
    book: String,
    rows: Vec<Row>,
    total: String,
}

struct Row {
    reached: Reached,
    part: String,
    weighed: String,
    remark: String,
}

fn dose(units: Units, unit: DoseUnit, amount: f64) -> String {
    let measure = match unit {
        DoseUnit::Grams => Measure::DoseMass,
        DoseUnit::Millilitres => Measure::DoseVolume,
    };
    units.show(measure, amount)
}

fn row(reached: Reached, settings: &Settings) -> Row {
    let units = settings.units;
    let (part, weighed, remark) = match &reached.part {
        Part::Dose {
            vessel,
            amount,
            unit,
            at,
            by,
            known,
        } => (
            format!(
                "{} into the {}",
                dose(units, *unit, amount.get()),
                vessel.name()
            ),
            format!("{by}, {}", format::moment(*at, &settings.time_zone)),
            match known {
                Known::Picked => String::new(),
                Known::ByCode => "by the code typed at the scale".to_owned(),
                Known::ByCorrection => "by a correction after closing".to_owned(),
                Known::CorrectedTo(lot) => {
                    format!("written down so; a correction says it was {lot}")
                }
            },
        ),
        Part::Malt(mass) => (
            units.show(Measure::Malt, mass.get()),
            String::new(),
            String::new(),
        ),
        Part::Water(share) => (
            format!("{} of the liquor", format::percent(share.get())),
            String::new(),
            String::new(),
        ),
    };
    Row {
        part,
        weighed,
        remark,
        reached,
    }
}

/// How many batches, and how much of a material went there.
fn total(found: &[Reached], settings: &Settings) -> String {
    let mut batches: Vec<&str> = found.iter().map(|it| it.batch.as_str()).collect();
    batches.sort_unstable();
    batches.dedup();
    let plural = if batches.len() == 1 {
        "batch"
    } else {
        "batches"
    };
    let mut words = format!("{} {plural}", batches.len());
    let mut sum = None;
    for reached in found {
        if let Part::Dose {
            amount,
            unit,
            known,
            ..
        } = &reached.part
            && !matches!(known, Known::CorrectedTo(_))
        {
            sum = Some((*unit, sum.map_or(0.0, |(_, sum)| sum) + amount.get()));
        }
    }
    if let Some((unit, sum)) = sum {
        words = format!("{words}, {} in all", dose(settings.units, unit, sum));
    }
    words
}

async fn material_lot(
    State(db): State<Db>,
    framer: Framer,
    At((id, lot_id)): At<(MaterialId, MaterialLotId)>,
) -> Result<TracePage, Error> {
    let by = &framer.member;
    let (material, lot) = shelf::operations::find_lot_of(&db, by, id, lot_id).await?;
    let found = super::of_material_lot(&db, by, id, lot_id).await?;
    let name = format!("{}, lot {}", material.name, lot.code);
    let page = framer.page(format!("Where {name} went"), "shelf").await;
    Ok(TracePage {
        back: (format!("/shelf/{id}"), material.name),
        lead: "Every dose weighed from this lot, the latest brewed first.",
        empty: "Nothing was weighed from this lot yet.",
        book: format!("/record?lot={lot_id}"),
        total: total(&found, &page.settings),
        rows: found
            .into_iter()
            .map(|it| row(it, &page.settings))
            .collect(),
        page,
    })
}

async fn malt_lot(
    State(db): State<Db>,
    framer: Framer,
    At((id, lot_id)): At<(MaltId, MaltLotId)>,
) -> Result<TracePage, Error> {
    let by = &framer.member;
    let (malt, lot) = malts::operations::find_lot_of(&db, by, id, lot_id).await?;
    let found = super::of_malt_lot(&db, by, id, lot_id).await?;
    let name = malt.name_with(Some(&lot));
    let page = framer.page(format!("Where {name} went"), "malts").await;
    Ok(TracePage {
        back: (format!("/malts/{id}/lots/{lot_id}"), name),
        lead: "Every batch with this lot in its grist, the latest brewed first. Drafts are among them.",
        empty: "No plan has this lot in its grist yet.",
        book: format!("/record?lot={lot_id}"),
        total: total(&found, &page.settings),
        rows: found
            .into_iter()
            .map(|it| row(it, &page.settings))
            .collect(),
        page,
    })
}

async fn water_test(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<WaterTestId>,
) -> Result<TracePage, Error> {
    let by = &framer.member;
    let test = sources::water_tests::operations::find(&db, by, id).await?;
    let source = sources::operations::find(&db, by, test.source_id).await?;
    let found = super::of_water_test(&db, by, id).await?;
    let name = format!("{}, test of {}", source.name, test.sheet.sampled_on);
    let page = framer
        .page(format!("What rests on {name}"), "sources")
        .await;
    Ok(TracePage {
        back: (format!("/water-tests/{id}"), name),
        lead: "Every batch whose liquor was planned by this test, alone or with others, the latest brewed first. Drafts are among them.",
        empty: "No plan rests on this test.",
        book: format!("/record?source_id={}", test.source_id),
        total: total(&found, &page.settings),
        rows: found
            .into_iter()
            .map(|it| row(it, &page.settings))
            .collect(),
        page,
    })
}
