//! The pages of malts: the list, one malt, its lots and their titrations.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::{get, post};
use chemistry::mash::MaltClass;
use chemistry::quantity::{Ebc, Lovibond};

use super::entered::{NewMaltBody, NewMaltLotBody};
use super::words::{self, Known, TitrationShown};
use super::{Malt, MaltLot, operations};
use crate::brewery::{self, Units};
use crate::db::Db;
use crate::error::Error;
use crate::id::{MaltId, MaltLotId, MaltTitrationId};
use crate::people::Permission;
use crate::web::App;
use crate::web::extract::At;
use crate::web::form::{Choice, Form};
use crate::web::layout::{Framer, Page};
use crate::web::list::{Column, Pager, Sorted};

/// Malts, and lots of one malt, on one page.
const PAGE: usize = 40;
/// Lines of an empty titration form.
const LINES: usize = 8;

/// The pages.
pub fn routes() -> Router<App> {
    Router::new()
        .route("/malts", get(list))
        .route("/malts/new", get(new).post(create))
        .route("/malts/{id}", get(show))
        .route("/malts/{id}/edit", get(edit).post(revise))
        .route("/malts/{id}/lots/new", get(new_lot).post(create_lot))
        .route("/malts/{id}/lots/{lot_id}", get(show_lot))
        .route(
            "/malts/{id}/lots/{lot_id}/edit",
            get(edit_lot).post(revise_lot),
        )
        .route(
            "/malts/{id}/lots/{lot_id}/titrations/new",
            get(new_titration).post(titrate),
        )
        .route(
            "/malts/{id}/lots/{lot_id}/titrations/{titration_id}/withdrawal",
            post(withdraw),
        )
}

#[derive(Template, WebTemplate)]
#[template(path = "malts/list.html")]
struct ListPage {
    page: Page,
    malts: Vec<MaltRow>,
    columns: Vec<Column>,
    pager: Option<Pager>,
    retired: bool,
    nothing: bool,
    may_change: bool,
}

struct MaltRow {
    id: MaltId,
    name: String,
    supplier: Option<String>,
    class: &'static str,
    colour: String,
    lot: Option<String>,
    known: Known,
}

/// Columns the list sorts by: key, head, kind.
const COLUMNS: [(&str, &str, &str); 5] = [
    ("name", "Malt", ""),
    ("class", "Class", ""),
    ("colour", "Colour", "number"),
    ("ph", "pH in distilled water", "number"),
    ("demand", "Acid to pH 5.4", "number"),
];

fn sort(malts: &mut [(Malt, Option<MaltLot>)], by: &Sorted) {
    let known = |(malt, lot): &(Malt, Option<MaltLot>)| Known::of(malt, lot.as_ref());
    let place = |class: MaltClass| MaltClass::ALL.iter().position(|known| *known == class);
    match by.key {
        "class" => malts.sort_by_key(|(malt, _)| place(malt.class)),
        "colour" => malts.sort_by(|(a, _), (b, _)| {
            let colour = |malt: &Malt| malt.colour.map_or(f64::INFINITY, Ebc::get);
            colour(a).total_cmp(&colour(b))
        }),
        "ph" => malts.sort_by_cached_key(|row| known(row).ph),
        "demand" => malts.sort_by(|a, b| known(a).sorts.total_cmp(&known(b).sorts)),
        _ => malts.sort_by_key(|(malt, _)| malt.name.to_lowercase()),
    }
    if by.descending {
        malts.reverse();
    }
}

async fn list(State(db): State<Db>, framer: Framer, typed: Form) -> Result<ListPage, Error> {
    let retired = typed.ticked("retired");
    let mut malts = operations::list_with_lots(&db, &framer.member).await?;
    let nothing = malts.is_empty();
    malts.retain(|(malt, _)| malt.in_use != retired);
    let sorted = Sorted::asked(&typed, &COLUMNS);
    sort(&mut malts, &sorted);
    let address = if retired {
        "/malts?retired=yes"
    } else {
        "/malts"
    };
    let (malts, pager) = Pager::cut(malts, PAGE, &typed, &sorted.address(address));
    let page = framer.page("Malts", "malts").await;
    let units = page.settings.units;
    Ok(ListPage {
        columns: sorted.columns(address, &COLUMNS),
        malts: malts
            .into_iter()
            .map(|(malt, lot)| MaltRow {
                known: Known::of(&malt, lot.as_ref()),
                colour: words::colour(malt.colour, units),
                class: malt.class.name(),
                lot: lot.map(|lot| lot.code),
                id: malt.id,
                name: malt.name,
                supplier: malt.supplier,
            })
            .collect(),
        pager,
        retired,
        nothing,
        may_change: page.can(Permission::KeepMalts),
        page,
    })
}

#[derive(Template, WebTemplate)]
#[template(path = "malts/show.html")]
struct ShowPage {
    page: Page,
    malt: Malt,
    class: &'static str,
    colour: String,
    usual_colours: String,
    may_change: bool,
    may_keep_lots: bool,
    lot_in_force: Option<String>,
    known: Known,
    assumed: Known,
    lots: Vec<LotRow>,
    pager: Option<Pager>,
}

struct LotRow {
    id: MaltLotId,
    code: String,
    received_on: String,
    current: bool,
    used_up: bool,
    known: Known,
}

async fn show(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<MaltId>,
    typed: Form,
) -> Result<ShowPage, Error> {
    let malt = operations::find(&db, &framer.member, id).await?;
    let lots = operations::lots(&db, &framer.member, id).await?;
    let current = lots.iter().find(|lot| lot.current).cloned();
    let (lots, pager) = Pager::cut(lots, PAGE, &typed, &format!("/malts/{id}"));
    let page = framer.page(&malt.name, "malts").await;
    let units = page.settings.units;
    Ok(ShowPage {
        class: malt.class.name(),
        colour: words::colour(malt.colour, units),
        usual_colours: words::usual_colours(malt.class, units),
        may_change: page.can(Permission::KeepMalts),
        may_keep_lots: page.can(Permission::KeepLots),
        known: Known::of(&malt, current.as_ref()),
        assumed: Known::from(&malt.assumed(), super::ASSUMED),
        lot_in_force: current.map(|lot| lot.code),
        lots: lots
            .iter()
            .map(|lot| LotRow {
                id: lot.id,
                code: lot.code.clone(),
                received_on: lot
                    .received_on
                    .map(|date| date.to_string())
                    .unwrap_or_default(),
                current: lot.current,
                used_up: !lot.in_use,
                known: Known::of(&malt, Some(lot)),
            })
            .collect(),
        pager,
        malt,
        page,
    })
}

#[derive(Template, WebTemplate)]
#[template(path = "malts/edit.html")]
struct EditPage {
    page: Page,
    typed: Form,
    action: String,
    back: String,
    new: bool,
    classes: Vec<Choice>,
    colour_units: Vec<Choice>,
    has_coefficients: bool,
}

async fn edit_page(framer: &Framer, malt: Option<&Malt>, typed: Form) -> EditPage {
    let title = malt.map_or_else(
        || "New malt".to_owned(),
        |malt| format!("Change {}", malt.name),
    );
    let coefficients = ["a1_meq_per_kg_ph", "a2_meq_per_kg_ph2", "a3_meq_per_kg_ph3"];
    EditPage {
        page: framer.page(title, "malts").await,
        action: malt.map_or_else(
            || "/malts/new".to_owned(),
            |malt| format!("/malts/{}/edit", malt.id),
        ),
        back: malt.map_or_else(|| "/malts".to_owned(), |malt| format!("/malts/{}", malt.id)),
        new: malt.is_none(),
        classes: Choice::list(
            MaltClass::ALL.map(|class| (class.key(), class.name())),
            typed.value("class"),
        ),
        colour_units: Choice::list(
            [("ebc", "EBC"), ("lovibond", "°L")],
            typed.value("colour_unit"),
        ),
        has_coefficients: coefficients
            .iter()
            .any(|name| !typed.value(&format!("coefficients.{name}")).is_empty()),
        typed,
    }
}

async fn new(State(db): State<Db>, framer: Framer) -> Result<EditPage, Error> {
    framer.member.may(Permission::KeepMalts)?;
    let units = brewery::operations::settings(&db).await?.units;
    let typed = Form::empty()
        .with("in_use", "yes")
        .with("colour_unit", colour_unit(units));
    Ok(edit_page(&framer, None, typed).await)
}

const fn colour_unit(units: Units) -> &'static str {
    match units {
        Units::Metric => "ebc",
        Units::Us => "lovibond",
    }
}

async fn create(State(db): State<Db>, framer: Framer, typed: Form) -> Result<Response, Error> {
    let created = async {
        framer.member.may(Permission::KeepMalts)?;
        let new: Malt = typed.body::<NewMaltBody>()?.try_into()?;
        operations::create(&db, &framer.member, new).await
    };
    match created.await {
        Ok(malt) => Ok(Redirect::to(&format!("/malts/{}?done=created", malt.id)).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, edit_page(&framer, None, typed).await).into_response())
        }
    }
}

async fn edit(State(db): State<Db>, framer: Framer, At(id): At<MaltId>) -> Result<EditPage, Error> {
    framer.member.may(Permission::KeepMalts)?;
    let malt = operations::find(&db, &framer.member, id).await?;
    let units = brewery::operations::settings(&db).await?.units;
    let typed = Form::of(&NewMaltBody::from(&malt)).with("version", malt.version.to_string());
    let typed = match (units, malt.colour) {
        (Units::Us, Some(ebc)) => {
            // Six digits are enough to come back to the same EBC.
            let lovibond = format!("{:.5e}", Lovibond::from(ebc).get());
            let lovibond: f64 = lovibond.parse().unwrap_or_default();
            typed
                .with("colour", lovibond.to_string())
                .with("colour_unit", "lovibond")
        }
        _ => typed.with("colour_unit", colour_unit(units)),
    };
    Ok(edit_page(&framer, Some(&malt), typed).await)
}

async fn revise(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<MaltId>,
    typed: Form,
) -> Result<Response, Error> {
    let saved = async {
        framer.member.may(Permission::KeepMalts)?;
        let new: Malt = typed.body::<NewMaltBody>()?.try_into()?;
        operations::revise(&db, &framer.member, id, new, typed.version()).await
    };
    match saved.await {
        Ok(_) => Ok(Redirect::to(&format!("/malts/{id}?done=saved")).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let malt = operations::find(&db, &framer.member, id).await?;
            Ok((status, edit_page(&framer, Some(&malt), typed).await).into_response())
        }
    }
}

#[derive(Template, WebTemplate)]
#[template(path = "malts/lot.html")]
struct LotPage {
    page: Page,
    typed: Form,
    malt: Malt,
    lot: MaltLot,
    received_on: String,
    acidulated: bool,
    may_keep_lots: bool,
    known: Known,
    assumed: Known,
    titrations: Vec<TitrationShown>,
}

async fn lot_page(framer: &Framer, malt: Malt, lot: MaltLot, typed: Form) -> LotPage {
    let page = framer.page(malt.name_with(Some(&lot)), "malts").await;
    LotPage {
        received_on: lot
            .received_on
            .map(|date| date.to_string())
            .unwrap_or_default(),
        acidulated: malt.class == MaltClass::Acidulated,
        may_keep_lots: page.can(Permission::KeepLots),
        known: Known::of(&malt, Some(&lot)),
        assumed: Known::of(&malt, None),
        titrations: lot
            .titrations
            .iter()
            .map(|titration| TitrationShown::of(titration, &page.settings.time_zone))
            .collect(),
        page,
        typed,
        malt,
        lot,
    }
}

async fn show_lot(
    State(db): State<Db>,
    framer: Framer,
    At((id, lot_id)): At<(MaltId, MaltLotId)>,
) -> Result<LotPage, Error> {
    let (malt, lot) = operations::find_lot_of(&db, &framer.member, id, lot_id).await?;
    Ok(lot_page(&framer, malt, lot, Form::empty()).await)
}

#[derive(Template, WebTemplate)]
#[template(path = "malts/lot_edit.html")]
struct LotEditPage {
    page: Page,
    typed: Form,
    malt: Malt,
    action: String,
    back: String,
    new: bool,
    acidulated: bool,
}

async fn lot_edit_page(
    framer: &Framer,
    malt: Malt,
    lot: Option<MaltLotId>,
    typed: Form,
) -> LotEditPage {
    let title = match lot {
        Some(_) => format!("{}, lot {}", malt.name, typed.value("code")),
        None => format!("New lot of {}", malt.name),
    };
    LotEditPage {
        page: framer.page(title, "malts").await,
        action: match lot {
            Some(lot) => format!("/malts/{}/lots/{lot}/edit", malt.id),
            None => format!("/malts/{}/lots/new", malt.id),
        },
        back: match lot {
            Some(lot) => format!("/malts/{}/lots/{lot}", malt.id),
            None => format!("/malts/{}", malt.id),
        },
        new: lot.is_none(),
        acidulated: malt.class == MaltClass::Acidulated,
        malt,
        typed,
    }
}

async fn new_lot(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<MaltId>,
) -> Result<LotEditPage, Error> {
    framer.member.may(Permission::KeepLots)?;
    let malt = operations::find(&db, &framer.member, id).await?;
    let today = brewery::operations::today(&db).await?;
    let offered = Form::of(&NewMaltLotBody::offered()).with("received_on", today.to_string());
    Ok(lot_edit_page(&framer, malt, None, offered).await)
}

async fn create_lot(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<MaltId>,
    typed: Form,
) -> Result<Response, Error> {
    let created = async {
        framer.member.may(Permission::KeepLots)?;
        operations::create_lot(&db, &framer.member, id, typed.body()?).await
    };
    match created.await {
        Ok(lot) => {
            let place = format!("/malts/{id}/lots/{}?done=created", lot.id);
            Ok(Redirect::to(&place).into_response())
        }
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let malt = operations::find(&db, &framer.member, id).await?;
            Ok((status, lot_edit_page(&framer, malt, None, typed).await).into_response())
        }
    }
}

async fn edit_lot(
    State(db): State<Db>,
    framer: Framer,
    At((id, lot_id)): At<(MaltId, MaltLotId)>,
) -> Result<LotEditPage, Error> {
    framer.member.may(Permission::KeepLots)?;
    let (malt, lot) = operations::find_lot_of(&db, &framer.member, id, lot_id).await?;
    let typed = Form::of(&NewMaltLotBody::from(&lot)).with("version", lot.version.to_string());
    Ok(lot_edit_page(&framer, malt, Some(lot_id), typed).await)
}

async fn revise_lot(
    State(db): State<Db>,
    framer: Framer,
    At((id, lot_id)): At<(MaltId, MaltLotId)>,
    typed: Form,
) -> Result<Response, Error> {
    let saved = async {
        framer.member.may(Permission::KeepLots)?;
        operations::revise_lot(
            &db,
            &framer.member,
            id,
            lot_id,
            typed.body()?,
            typed.version(),
        )
        .await
    };
    match saved.await {
        Ok(_) => Ok(Redirect::to(&format!("/malts/{id}/lots/{lot_id}?done=saved")).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let (malt, _) = operations::find_lot_of(&db, &framer.member, id, lot_id).await?;
            let page = lot_edit_page(&framer, malt, Some(lot_id), typed).await;
            Ok((status, page).into_response())
        }
    }
}

#[derive(Template, WebTemplate)]
#[template(path = "malts/titration.html")]
struct TitrationPage {
    page: Page,
    typed: Form,
    action: String,
    back: String,
    lines: Vec<usize>,
}

async fn titration_page(framer: &Framer, malt: &Malt, lot: &MaltLot, typed: Form) -> TitrationPage {
    let back = format!("/malts/{}/lots/{}", malt.id, lot.id);
    TitrationPage {
        page: framer
            .page(
                format!("Bench titration of {}", malt.name_with(Some(lot))),
                "malts",
            )
            .await,
        action: format!("{back}/titrations/new"),
        back,
        lines: (0..typed.rows("jars").clamp(LINES, super::entered::MOST_JARS)).collect(),
        typed,
    }
}

async fn new_titration(
    State(db): State<Db>,
    framer: Framer,
    At((id, lot_id)): At<(MaltId, MaltLotId)>,
) -> Result<TitrationPage, Error> {
    framer.member.may(Permission::KeepLots)?;
    let (malt, lot) = operations::find_lot_of(&db, &framer.member, id, lot_id).await?;
    let today = brewery::operations::today(&db).await?;
    let offered = Form::empty().with("tested_on", today.to_string());
    Ok(titration_page(&framer, &malt, &lot, offered).await)
}

async fn titrate(
    State(db): State<Db>,
    framer: Framer,
    At((id, lot_id)): At<(MaltId, MaltLotId)>,
    typed: Form,
) -> Result<Response, Error> {
    let entered = async {
        framer.member.may(Permission::KeepLots)?;
        operations::titrate(&db, &framer.member, id, lot_id, typed.body()?).await
    };
    match entered.await {
        Ok(_) => Ok(Redirect::to(&format!("/malts/{id}/lots/{lot_id}?done=saved")).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let (malt, lot) = operations::find_lot_of(&db, &framer.member, id, lot_id).await?;
            let page = titration_page(&framer, &malt, &lot, typed).await;
            Ok((status, page).into_response())
        }
    }
}

async fn withdraw(
    State(db): State<Db>,
    framer: Framer,
    At((id, lot_id, titration_id)): At<(MaltId, MaltLotId, MaltTitrationId)>,
    typed: Form,
) -> Result<Response, Error> {
    let reason = typed.value("reason");
    let withdrawn =
        operations::withdraw_titration(&db, &framer.member, id, lot_id, titration_id, reason);
    match withdrawn.await {
        Ok(_) => {
            let place = format!("/malts/{id}/lots/{lot_id}?done=withdrawn");
            Ok(Redirect::to(&place).into_response())
        }
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let (malt, lot) = operations::find_lot_of(&db, &framer.member, id, lot_id).await?;
            Ok((status, lot_page(&framer, malt, lot, typed).await).into_response())
        }
    }
}
