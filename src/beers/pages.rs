//! The pages of beers: the list, one beer, and the form for a new or changed one.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::http::StatusCode;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::{get, post};

use super::api::{NewBeerBody, SpecBody};
use super::operations;
use super::spec::{IONS, Priority, USUAL_PRIORITY};
use super::words::{SpecLine, priority_words, spec_lines, thickness};
use super::{Beer, NewBeer, Spec};
use crate::brewery::{self, Units};
use crate::db::Db;
use crate::error::Error;
use crate::id::BeerId;
use crate::input::Number;
use crate::malts::{self, Malt};
use crate::people::Permission;
use crate::plans::{self, pages::ListRow};
use crate::web::App;
use crate::web::extract::At;
use crate::web::form::{Choice, Form};
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::list::{Column, Pager, Sorted};
use crate::web::units::{Measure, shown_in, typed_in_si};

/// Beers on one page of the list.
const PAGE: usize = 50;
/// Empty lines the grist of a new beer begins with.
const FIRST_LINES: usize = 4;

/// The pages.
pub fn routes() -> Router<App> {
    Router::new()
        .route("/beers", get(list))
        .route("/beers/new", get(new).post(create))
        .route("/beers/{id}", get(show))
        .route("/beers/{id}/edit", get(edit).post(revise))
        .route("/beers/{id}/retirement", post(retire))
        .route("/beers/{id}/return", post(take_back))
}

#[derive(Template, WebTemplate)]
#[template(path = "beers/list.html")]
struct ListPage {
    page: Page,
    beers: Vec<BeerRow>,
    columns: Vec<Column>,
    retired: bool,
    may_change: bool,
    pager: Option<Pager>,
}

struct BeerRow {
    id: BeerId,
    name: String,
    batch: String,
    grist: String,
    thickness: String,
    mash_ph: String,
}

const COLUMNS: [(&str, &str, &str); 5] = [
    ("name", "Beer", ""),
    ("batch", "Batch", "number"),
    ("grist", "Grist", "number"),
    ("thickness", "Mash thickness", "number"),
    ("mash_ph", "Mash pH", "number"),
];

/// Sorts what comes by name.
fn sort(beers: &mut [Beer], by: &Sorted) {
    let figure = |beer: &Beer| match by.key {
        "batch" => beer.volumes.batch_l.get(),
        "grist" => beer.grist_mass().get(),
        "thickness" => beer.litres_per_kilogram(),
        "mash_ph" => beer.spec.mash_ph.target.get(),
        _ => 0.0,
    };
    beers.sort_by(|a, b| figure(a).total_cmp(&figure(b)));
    if by.descending {
        beers.reverse();
    }
}

async fn list(State(db): State<Db>, framer: Framer, asked: Form) -> Result<ListPage, Error> {
    let retired = asked.ticked("retired");
    let mut beers = operations::list(&db, &framer.member, !retired).await?;
    let sorted = Sorted::asked(&asked, &COLUMNS);
    sort(&mut beers, &sorted);
    let address = if retired {
        "/beers?retired=yes"
    } else {
        "/beers"
    };
    let (beers, pager) = Pager::cut(beers, PAGE, &asked, &sorted.address(address));
    let page = framer.page("Beers", "beers").await;
    let units = page.settings.units;
    Ok(ListPage {
        columns: sorted.columns(address, &COLUMNS),
        retired,
        may_change: page.can(Permission::KeepBeers),
        pager,
        beers: beers
            .into_iter()
            .map(|beer| BeerRow {
                batch: units.show(Measure::Batch, beer.volumes.batch_l.get()),
                grist: units.show(Measure::Malt, beer.grist_mass().get()),
                thickness: thickness(&beer, units),
                mash_ph: format::ph(beer.spec.mash_ph.target.get()),
                id: beer.id,
                name: beer.name,
            })
            .collect(),
        page,
    })
}

#[derive(Template, WebTemplate)]
#[template(path = "beers/show.html")]
struct ShowPage {
    page: Page,
    beer: Beer,
    may_change: bool,
    batch: String,
    mash: String,
    sparge: String,
    liquor: String,
    mass: String,
    thickness: String,
    grist: Vec<GristShown>,
    retired_malts: bool,
    mash_ph: String,
    mash_ph_window: String,
    spec: Vec<SpecLine>,
    limits: Vec<(&'static str, String)>,
    may_draft: bool,
    plans: Vec<ListRow>,
}

struct GristShown {
    malt: String,
    retired: bool,
    mass: String,
    share: String,
}

async fn show(State(db): State<Db>, framer: Framer, At(id): At<BeerId>) -> Result<ShowPage, Error> {
    let beer = operations::find(&db, &framer.member, id).await?;
    let malts = malts::operations::list(&db, &framer.member).await?;
    let page = framer.page(&beer.name, "beers").await;
    let units = page.settings.units;
    let whole = beer.grist_mass().get();
    let grist: Vec<GristShown> = beer
        .grist
        .iter()
        .map(|line| {
            let malt = malts.iter().find(|malt| malt.id == line.malt_id);
            GristShown {
                malt: malt.map(|malt| malt.name.clone()).unwrap_or_default(),
                retired: malt.is_none_or(|malt| !malt.in_use),
                mass: units.show(Measure::Malt, line.kilograms.get()),
                share: share(line.kilograms.get(), whole),
            }
        })
        .collect();
    let volume = |litres: f64| units.show(Measure::Volume, litres);
    let spec = &beer.spec;
    Ok(ShowPage {
        may_change: page.can(Permission::KeepBeers),
        may_draft: page.can(Permission::DraftPlans) && beer.in_use,
        plans: plans::pages::of_beer(&db, &framer.member, id).await?,
        batch: units.show(Measure::Batch, beer.volumes.batch_l.get()),
        mash: volume(beer.volumes.mash_l.get()),
        sparge: volume(beer.volumes.sparge_l.get()),
        liquor: volume(beer.volumes.liquor().get()),
        mass: units.show(Measure::Malt, whole),
        thickness: thickness(&beer, units),
        retired_malts: grist.iter().any(|line| line.retired),
        grist,
        mash_ph: format::ph(spec.mash_ph.target.get()),
        mash_ph_window: format!(
            "{} to {}",
            format::ph(spec.mash_ph.low.get()),
            format::ph(spec.mash_ph.high.get())
        ),
        spec: spec_lines(spec),
        limits: [
            ("Lactate", spec.highest_lactate),
            ("Sodium", spec.highest_sodium),
        ]
        .into_iter()
        .filter_map(|(name, most)| Some((name, format!("{} mg/L", most?.get()))))
        .collect(),
        beer,
        page,
    })
}

/// A share in percent: one decimal where small malts would else vanish.
fn share(part: f64, whole: f64) -> String {
    format!("{} %", format::decimals(part / whole * 100.0, 1))
}

#[derive(Template, WebTemplate)]
#[template(path = "beers/edit.html")]
struct EditPage {
    page: Page,
    typed: Form,
    action: String,
    back: String,
    new: bool,
    no_malts: bool,
    grist: Vec<GristRow>,
    windows: Vec<WindowRow>,
    mass_unit: &'static str,
    batch_unit: &'static str,
    volume_unit: &'static str,
}

/// One line of the grist form.
struct GristRow {
    index: usize,
    malts: Vec<Choice>,
    share: String,
}

/// One line of the spec form.
struct WindowRow {
    label: &'static str,
    unit: &'static str,
    name: String,
    prefers: bool,
    priorities: Vec<Choice>,
}

/// The figures of the spec form: label, unit, name of the field, whether one place in
/// the window may be preferred.
fn window_rows(typed: &Form) -> Vec<WindowRow> {
    let ions = IONS.map(|ion| {
        (
            super::words::ion_label(ion),
            "mg/L",
            format!("spec.{}_mg_per_l", ion.name()),
            true,
        )
    });
    let others = [
        (
            "Calcium in the mash liquor",
            "mg/L",
            "mash_calcium_mg_per_l",
            false,
        ),
        (
            "Sulfate to chloride",
            "by mass",
            "sulfate_to_chloride",
            false,
        ),
        (
            "Alkalinity of the sparge liquor",
            "mg/L as CaCO₃",
            "sparge_alkalinity_mg_per_l_as_caco3",
            false,
        ),
    ]
    .map(|(label, unit, name, prefers)| (label, unit, format!("spec.{name}"), prefers));
    ions.into_iter()
        .chain(others)
        .map(|(label, unit, name, prefers)| {
            let chosen = typed.value(&format!("{name}.priority"));
            let chosen = if chosen.is_empty() {
                USUAL_PRIORITY.key()
            } else {
                chosen
            };
            WindowRow {
                priorities: Choice::list(
                    Priority::ALL.map(|p| (p.key(), priority_words(p))),
                    chosen,
                ),
                label,
                unit,
                name,
                prefers,
            }
        })
        .collect()
}

fn grist_rows(typed: &Form, lines: usize, malts: &[Malt]) -> Vec<GristRow> {
    let mass = |index: usize| {
        Number::Typed(typed.row("grist", &index, "kilograms").to_owned())
            .parse()
            .ok()
            .filter(|mass| *mass > 0.0)
    };
    let whole: f64 = (0..lines).filter_map(mass).sum();
    (0..lines)
        .map(|index| {
            let chosen = typed.row("grist", &index, "malt_id");
            let names = malts
                .iter()
                .filter(|malt| malt.in_use || malt.id.to_string() == chosen);
            GristRow {
                index,
                malts: Choice::list(
                    names.map(|malt| {
                        let retired = if malt.in_use { "" } else { " (retired)" };
                        (malt.id.to_string(), format!("{}{retired}", malt.name))
                    }),
                    chosen,
                ),
                share: mass(index).map_or_else(String::new, |mass| share(mass, whole)),
            }
        })
        .collect()
}

/// Which beer the form is about.
#[derive(Clone, Copy)]
enum About<'a> {
    New,
    Kept(&'a Beer),
}

async fn edit_page(
    db: &Db,
    framer: &Framer,
    about: About<'_>,
    typed: Form,
    more_lines: usize,
) -> Result<EditPage, Error> {
    let malts = malts::operations::list(db, &framer.member).await?;
    let (title, action, back) = match about {
        About::New => ("New beer".into(), "/beers/new".into(), "/beers".into()),
        About::Kept(beer) => (
            format!("Change {}", beer.name),
            format!("/beers/{}/edit", beer.id),
            format!("/beers/{}", beer.id),
        ),
    };
    let page = framer.page(title, "beers").await;
    let lines = (typed.rows("grist") + more_lines).clamp(1, super::check::MOST_LINES);
    let units = page.settings.units;
    Ok(EditPage {
        action,
        back,
        new: matches!(about, About::New),
        no_malts: malts.iter().all(|malt| !malt.in_use),
        grist: grist_rows(&typed, lines, &malts),
        windows: window_rows(&typed),
        mass_unit: units.label(Measure::Malt),
        batch_unit: units.label(Measure::Batch),
        volume_unit: units.label(Measure::Volume),
        typed,
        page,
    })
}

/// The fields that are typed in the brewery's units.
fn measures(typed: &Form) -> Vec<(String, Measure)> {
    let mut measures = vec![
        ("batch_l".into(), Measure::Batch),
        ("mash_l".into(), Measure::Volume),
        ("sparge_l".into(), Measure::Volume),
    ];
    for index in 0..typed.rows("grist") {
        measures.push((format!("grist.{index}.kilograms"), Measure::Malt));
    }
    measures
}

/// The form that would send this beer, in the brewery's units.
fn form_of(body: &NewBeerBody, units: Units) -> Form {
    let stored = Form::of(body);
    shown_in(&stored, units, &measures(&stored))
}

/// The beer that was typed.
async fn typed_beer(db: &Db, typed: &Form) -> Result<NewBeer, Error> {
    let units = brewery::operations::settings(db).await?.units;
    typed_in_si(typed, units, &measures(typed))
        .body::<NewBeerBody>()?
        .try_into()
}

async fn new(State(db): State<Db>, framer: Framer, asked: Form) -> Result<EditPage, Error> {
    framer.member.may(Permission::KeepBeers)?;
    let units = brewery::operations::settings(&db).await?.units;
    let (body, more) = match asked.value("copy").parse::<BeerId>() {
        Ok(id) => {
            let beer = operations::find(&db, &framer.member, id).await?;
            let name = format!("{}, copy", beer.name);
            let body = NewBeerBody::from(&beer);
            let in_use = crate::input::Flag(true);
            (
                NewBeerBody {
                    name,
                    in_use,
                    ..body
                },
                1,
            )
        }
        Err(_) => {
            let spec = SpecBody::from(&Spec::offered());
            let body = NewBeerBody {
                spec,
                ..NewBeerBody::default()
            };
            (body, FIRST_LINES)
        }
    };
    edit_page(&db, &framer, About::New, form_of(&body, units), more).await
}

/// Whether “Add a line” was pressed.
fn wants_line(typed: &Form) -> bool {
    !typed.value("_add").is_empty()
}

async fn create(State(db): State<Db>, framer: Framer, typed: Form) -> Result<Response, Error> {
    framer.member.may(Permission::KeepBeers)?;
    if wants_line(&typed) {
        let page = edit_page(&db, &framer, About::New, typed, 1).await?;
        return Ok(page.into_response());
    }
    let created = async {
        let new = typed_beer(&db, &typed).await?;
        operations::create(&db, &framer.member, new).await
    };
    match created.await {
        Ok(beer) => Ok(Redirect::to(&format!("/beers/{}?done=created", beer.id)).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            refused(&db, &framer, About::New, status, typed).await
        }
    }
}

async fn refused(
    db: &Db,
    framer: &Framer,
    about: About<'_>,
    status: StatusCode,
    typed: Form,
) -> Result<Response, Error> {
    let page = edit_page(db, framer, about, typed, 0).await?;
    Ok((status, page).into_response())
}

async fn edit(State(db): State<Db>, framer: Framer, At(id): At<BeerId>) -> Result<EditPage, Error> {
    framer.member.may(Permission::KeepBeers)?;
    let beer = operations::find(&db, &framer.member, id).await?;
    let units = brewery::operations::settings(&db).await?.units;
    let typed = form_of(&NewBeerBody::from(&beer), units).with("version", beer.version.to_string());
    edit_page(&db, &framer, About::Kept(&beer), typed, 1).await
}

async fn revise(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<BeerId>,
    typed: Form,
) -> Result<Response, Error> {
    framer.member.may(Permission::KeepBeers)?;
    let beer = operations::find(&db, &framer.member, id).await?;
    if wants_line(&typed) {
        let page = edit_page(&db, &framer, About::Kept(&beer), typed, 1).await?;
        return Ok(page.into_response());
    }
    let saved = async {
        let new = typed_beer(&db, &typed).await?;
        operations::revise(&db, &framer.member, id, new, typed.version()).await
    };
    match saved.await {
        Ok(_) => Ok(Redirect::to(&format!("/beers/{id}?done=saved")).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            refused(&db, &framer, About::Kept(&beer), status, typed).await
        }
    }
}

async fn retire(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<BeerId>,
    typed: Form,
) -> Result<Redirect, Error> {
    operations::set_in_use(&db, &framer.member, id, false, typed.version()).await?;
    Ok(Redirect::to(&format!("/beers/{id}?done=retired")))
}

async fn take_back(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<BeerId>,
    typed: Form,
) -> Result<Redirect, Error> {
    operations::set_in_use(&db, &framer.member, id, true, typed.version()).await?;
    Ok(Redirect::to(&format!("/beers/{id}?done=restored")))
}
