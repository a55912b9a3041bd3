//! The pages of sources: the list, one source with its water today, and the form for
//! a new or changed one.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::{get, post};
use chemistry::report::{Analyte, Verdict, WaterKind};

use super::api::SourceBody;
use super::trend::{self, bare, capital, doubt};
use super::water_tests::pages::{TestRow, verdict_badge};
use super::water_tests::{WaterTest, operations as tests};
use super::{
    HowKnown, NewSource, Source, TestDuty, TodaysFigure, TodaysWater, kind_name, operations,
    todays_water,
};
use crate::brewery::Units;
use crate::db::Db;
use crate::error::Error;
use crate::id::SourceId;
use crate::people::Permission;
use crate::record;
use crate::record::pages::Line;
use crate::web::App;
use crate::web::chart::Trend;
use crate::web::extract::At;
use crate::web::form::{Choice, Form};
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::list::{Column, Pager, Sorted};
use crate::web::units::{Measure, shown_in, typed_in_si};

/// Sources on one page of their list.
const SOURCES: usize = 20;
/// Tests on one page of a source's list.
const TESTS: i64 = 20;
/// Entries of the record book on a page.
const ENTRIES: i64 = 10;

/// The pages.
pub fn routes() -> Router<App> {
    Router::new()
        .route("/sources", get(list))
        .route("/sources/new", get(new).post(create))
        .route("/sources/{id}", get(show))
        .route("/sources/{id}/edit", get(edit).post(revise))
        .route("/sources/{id}/retirement", post(retire))
        .route("/sources/{id}/return", post(take_back))
        .merge(super::water_tests::pages::routes())
}

#[derive(Template, WebTemplate)]
#[template(path = "sources/list.html")]
struct ListPage {
    page: Page,
    sources: Vec<SourceRow>,
    by_name: Column,
    by_due: Column,
    heads: Vec<String>,
    pager: Option<Pager>,
    retired: bool,
    may_change: bool,
}

/// The figures the list shows of each source.
const SHORT: [Analyte; 6] = Analyte::NEEDED;

struct SourceRow {
    id: SourceId,
    name: String,
    kind: &'static str,
    blending: bool,
    /// The figures of today's water, or a sentence why there are none.
    figures: Result<Vec<ShortFigure>, String>,
    last: String,
    duty: TestDuty,
    verdict: Option<(&'static str, &'static str)>,
    is_potable: bool,
}

struct ShortFigure {
    label: String,
    value: String,
    doubt: String,
    assumed: bool,
}

fn short(todays: &TodaysWater) -> Vec<ShortFigure> {
    SHORT
        .into_iter()
        .map(|analyte| match todays.figure(analyte) {
            Some(figure) => ShortFigure {
                label: capital(analyte.name()),
                value: bare(analyte, figure.value),
                doubt: doubt(analyte, figure.sd),
                assumed: figure.how == HowKnown::Assumed,
            },
            // Counted as none, and so little doubted that it is not listed.
            None => ShortFigure {
                label: capital(analyte.name()),
                value: bare(analyte, 0.0),
                doubt: doubt(analyte, 0.0),
                assumed: true,
            },
        })
        .collect()
}

/// Columns the list sorts by: key, head, kind.
const COLUMNS: [(&str, &str, &str); 2] = [("name", "Source", ""), ("due", "Tests", "")];

async fn list(State(db): State<Db>, framer: Framer, asked: Form) -> Result<ListPage, Error> {
    let page = framer.page("Sources", "sources").await;
    let retired = asked.ticked("retired");
    let today = format::today(&page.settings.time_zone);
    let by = &framer.member;
    let newest = operations::newest_samples(&db, by).await?;
    let found = operations::list(&db, by).await?.into_iter();
    let mut found: Vec<(Source, TestDuty)> = found
        .filter(|source| source.in_use != retired)
        .map(|source| {
            let duty = TestDuty::of(&source, newest.get(&source.id).copied(), today);
            (source, duty)
        })
        .collect();
    let sorted = Sorted::asked(&asked, &COLUMNS);
    match sorted.key {
        // What was never tested is due before everything.
        "due" => found.sort_by_key(|(_, duty)| duty.next),
        _ => found.sort_by_key(|(source, _)| source.name.to_lowercase()),
    }
    if sorted.descending {
        found.reverse();
    }
    let address = if retired {
        "/sources?retired=yes"
    } else {
        "/sources"
    };
    let (found, pager) = Pager::cut(found, SOURCES, &asked, &sorted.address(address));
    let mut sources = Vec::new();
    for (source, duty) in found {
        let todays = match operations::todays_water(&db, by, source.id).await {
            Ok(todays) => Ok(todays),
            Err(Error::Conflict(sentence)) => Err(sentence),
            Err(other) => return Err(other),
        };
        sources.push(SourceRow {
            id: source.id,
            name: source.name.clone(),
            kind: kind_name(source.kind),
            blending: source.blending,
            verdict: todays.as_ref().ok().map(|todays| badge(todays.verdict)),
            is_potable: todays
                .as_ref()
                .map_or(true, |todays| todays.potable.is_empty()),
            figures: todays.map(|todays| short(&todays)),
            last: duty.last.map_or(String::new(), |last| last.to_string()),
            duty,
        });
    }
    Ok(ListPage {
        may_change: page.can(Permission::KeepSources),
        heads: SHORT.map(|analyte| capital(analyte.name())).into(),
        by_name: sorted.column(address, COLUMNS[0]),
        by_due: sorted.column(address, COLUMNS[1]),
        pager,
        page,
        sources,
        retired,
    })
}

fn badge(verdict: Verdict) -> (&'static str, &'static str) {
    (verdict_badge(verdict), verdict.name())
}

#[derive(Template, WebTemplate)]
#[template(path = "sources/show.html")]
struct ShowPage {
    page: Page,
    source: Source,
    kind: &'static str,
    price: String,
    duty: TestDuty,
    todays: Option<TodaysView>,
    /// Why there is no today's water.
    lacking: String,
    tests: Vec<TestRow>,
    pager: Option<Pager>,
    figures: Vec<Choice>,
    figure: String,
    trend: Option<Trend>,
    entries: Vec<Line>,
    may_change: bool,
    may_test: bool,
}

struct TodaysView {
    on: String,
    latest: String,
    figures: Vec<FigureView>,
    assumed: Vec<String>,
    potable: Vec<String>,
    findings: Vec<String>,
    verdict: (&'static str, &'static str),
}

struct FigureView {
    label: String,
    value: String,
    doubt: String,
    unit: &'static str,
    note: String,
}

fn view(figure: &TodaysFigure) -> FigureView {
    let analyte = figure.analyte;
    let (value, doubt) = match figure.below {
        Some(limit) => (format!("< {}", bare(analyte, limit)), String::new()),
        None => (bare(analyte, figure.value), doubt(analyte, figure.sd)),
    };
    let age = match figure.age_days {
        None => String::new(),
        Some(0) => ", today".into(),
        Some(1) => ", 1 day old".into(),
        Some(days) => format!(", {days} days old"),
    };
    FigureView {
        label: capital(analyte.name()),
        value,
        doubt,
        unit: analyte.canonical_unit().label(),
        note: format!("{}{age}", figure.how.name()),
    }
}

impl TodaysView {
    fn of(todays: &TodaysWater) -> Self {
        Self {
            on: todays.on.to_string(),
            latest: todays.latest.to_string(),
            figures: todays.figures.iter().map(view).collect(),
            assumed: todays.assumed.clone(),
            potable: todays.potable.iter().map(|f| f.sentence.clone()).collect(),
            findings: todays.findings.iter().map(|f| f.sentence.clone()).collect(),
            verdict: badge(todays.verdict),
        }
    }
}

fn pager(id: SourceId, figure: &str, skip: i64, shown: usize, total: i64) -> Option<Pager> {
    let last = skip + i64::try_from(shown).unwrap_or(0);
    let address = |skip: i64| format!("/sources/{id}?figure={figure}&after={skip}#tests");
    (total > TESTS).then(|| Pager {
        earlier: (skip > 0).then(|| address((skip - TESTS).max(0))),
        later: (last < total).then(|| address(last)),
        words: format!("{} to {last} of {total}", skip + 1),
    })
}

async fn show(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<SourceId>,
    asked: Form,
) -> Result<ShowPage, Error> {
    let by = &framer.member;
    let source = operations::find(&db, by, id).await?;
    let page = framer.page(source.name.clone(), "sources").await;
    let today = format::today(&page.settings.time_zone);
    let (todays, lacking) = match operations::todays_water(&db, by, id).await {
        Ok(todays) => (Some(todays), String::new()),
        Err(Error::Conflict(sentence)) => (None, sentence),
        Err(other) => return Err(other),
    };
    let history = operations::history(&db, by, id).await?;
    let figure = Analyte::from_key(asked.value("figure")).filter(|a| todays_water::is_followed(*a));
    let figure = figure.unwrap_or(Analyte::Alkalinity);
    let trend = trend::trend(
        &trend::history(&history, figure)?,
        todays.as_ref().and_then(|todays| todays.figure(figure)),
        today,
    );
    let skip = asked.value("after").parse::<i64>().unwrap_or(0).max(0);
    let (part, total) = tests::part(&db, by, id, skip, TESTS).await?;
    let entries =
        record::operations::of_subject(&db, by, "source", &id.to_string(), ENTRIES).await?;
    let newest = history
        .first()
        .map(|test: &WaterTest| test.sheet.sampled_on);
    Ok(ShowPage {
        kind: kind_name(source.kind),
        price: source.price_per_m3.map_or(String::new(), |price| {
            format!(
                "{} {}",
                page.settings.currency,
                page.settings.units.show(Measure::PriceOfWater, price)
            )
        }),
        duty: TestDuty::of(&source, newest, today),
        todays: todays.as_ref().map(TodaysView::of),
        lacking,
        pager: pager(id, figure.key(), skip, part.len(), total),
        tests: part.iter().map(TestRow::of).collect::<Result<_, _>>()?,
        figures: Choice::list(
            Analyte::ALL
                .into_iter()
                .filter(|analyte| todays_water::is_followed(*analyte))
                .map(|analyte| (analyte.key(), capital(analyte.name()))),
            figure.key(),
        ),
        figure: capital(figure.name()),
        trend,
        entries: entries
            .iter()
            .map(|entry| Line::of(entry, &page.settings.time_zone))
            .collect(),
        may_change: page.can(Permission::KeepSources),
        may_test: page.can(Permission::EnterWaterTests),
        page,
        source,
    })
}

#[derive(Template, WebTemplate)]
#[template(path = "sources/edit.html")]
struct EditPage {
    page: Page,
    typed: Form,
    action: String,
    back: String,
    is_new: bool,
    kinds: Vec<Choice>,
    price_unit: String,
}

/// The price is shown and typed per the brewery's unit.
fn converted() -> [(String, Measure); 1] {
    [("price_per_m3".into(), Measure::PriceOfWater)]
}

/// `source`: the one that is changed; none for a new one. `typed` is in shown units.
async fn form(framer: &Framer, source: Option<&Source>, typed: Form) -> EditPage {
    let title = source.map_or("New source".into(), |source| {
        format!("Change {}", source.name)
    });
    let page = framer.page(title, "sources").await;
    let units = page.settings.units;
    EditPage {
        action: source.map_or("/sources/new".into(), |source| {
            format!("/sources/{}/edit", source.id)
        }),
        back: source.map_or("/sources".into(), |source| {
            format!("/sources/{}", source.id)
        }),
        is_new: source.is_none(),
        kinds: Choice::list(
            WaterKind::ALL.map(|kind| (kind.key(), kind_name(kind))),
            typed.value("kind"),
        ),
        price_unit: format!(
            "{} {}",
            page.settings.currency,
            units.label(Measure::PriceOfWater)
        ),
        page,
        typed,
    }
}

async fn new(framer: Framer) -> Result<EditPage, Error> {
    framer.member.may(Permission::KeepSources)?;
    let typed = Form::empty()
        .with("kind", "mains")
        .with("days_between_tests", "90")
        .with("in_use", "yes");
    Ok(form(&framer, None, typed).await)
}

fn sent(typed: &Form, units: Units) -> Result<NewSource, Error> {
    let body = typed_in_si(typed, units, &converted()).body::<SourceBody>()?;
    body.try_into()
}

async fn create(State(db): State<Db>, framer: Framer, typed: Form) -> Result<Response, Error> {
    framer.member.may(Permission::KeepSources)?;
    let units = framer.page("", "").await.settings.units;
    let saved = async { operations::create(&db, &framer.member, sent(&typed, units)?).await };
    match saved.await {
        Ok(source) => {
            Ok(Redirect::to(&format!("/sources/{}?done=created", source.id)).into_response())
        }
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, form(&framer, None, typed).await).into_response())
        }
    }
}

async fn edit(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<SourceId>,
) -> Result<EditPage, Error> {
    framer.member.may(Permission::KeepSources)?;
    let source = operations::find(&db, &framer.member, id).await?;
    let units = framer.page("", "").await.settings.units;
    let typed = shown_in(&Form::of(&SourceBody::from(&source)), units, &converted())
        .with("version", source.version.to_string());
    Ok(form(&framer, Some(&source), typed).await)
}

async fn revise(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<SourceId>,
    typed: Form,
) -> Result<Response, Error> {
    framer.member.may(Permission::KeepSources)?;
    let units = framer.page("", "").await.settings.units;
    let saved = async {
        operations::revise(
            &db,
            &framer.member,
            id,
            sent(&typed, units)?,
            typed.version(),
        )
        .await
    };
    match saved.await {
        Ok(_) => Ok(Redirect::to(&format!("/sources/{id}?done=saved")).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let source = operations::find(&db, &framer.member, id).await?;
            Ok((status, form(&framer, Some(&source), typed).await).into_response())
        }
    }
}

async fn retire(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<SourceId>,
) -> Result<Redirect, Error> {
    operations::set_in_use(&db, &framer.member, id, false).await?;
    Ok(Redirect::to(&format!("/sources/{id}?done=retired")))
}

async fn take_back(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<SourceId>,
) -> Result<Redirect, Error> {
    operations::set_in_use(&db, &framer.member, id, true).await?;
    Ok(Redirect::to(&format!("/sources/{id}?done=restored")))
}
