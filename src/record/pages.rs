//! The record book to read, search, print and take along.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::http::header;
use axum::response::{IntoResponse, Response};
use axum::routing::get;

use super::Entry;
use super::differences::differences;
use super::export::{BOM, MOST};
use super::filter::{Filter, FilterBody};
use super::operations::{self, Found};
use crate::db::Db;
use crate::error::Error;
use crate::web::App;
use crate::web::form::{Choice, Form, percent};
use crate::web::format;
use crate::web::layout::{Framer, Page};

/// Entries on one page.
const PAGE: i64 = 40;

/// The pages.
pub fn routes() -> Router<App> {
    Router::new()
        .route("/record", get(show))
        .route("/record.csv", get(download))
        .merge(super::trace::pages::routes())
}

#[derive(Template, WebTemplate)]
#[template(path = "record/book.html")]
struct BookPage {
    page: Page,
    asked: Form,
    people: Vec<Choice>,
    sources: Vec<Choice>,
    kinds: Vec<Choice>,
    filtered: bool,
    entries: Vec<Row>,
    words: String,
    older: Option<String>,
    newest: Option<String>,
    table: Option<String>,
    cut: Option<String>,
}

/// One entry of the book with where it leads.
struct Row {
    line: Line,
    links: Vec<(String, String)>,
}

/// One entry as it is printed.
pub struct Line {
    /// When, in the brewery's time zone.
    pub at: String,
    /// The machine's form of it.
    pub instant: String,
    /// Who.
    pub who: String,
    /// What was done to what.
    pub what: String,
    /// Why.
    pub reason: String,
    /// Each value that differs: its name, as it was, as it is.
    pub differences: Vec<(String, String, String)>,
}

impl Line {
    /// An entry in words.
    pub fn of(entry: &Entry, time_zone: &str) -> Self {
        Self {
            at: format::moment(entry.at, time_zone),
            instant: entry.at.to_string(),
            who: entry.member_name.clone(),
            what: format!(
                "{} {} “{}”",
                entry.action, entry.subject_kind, entry.subject_name
            ),
            reason: entry.reason.clone().unwrap_or_default(),
            differences: differences(entry.before.as_ref(), entry.after.as_ref()),
        }
    }
}

/// Where an entry leads: to its subject, and to everything about its batch.
fn links(entry: &Entry) -> Vec<(String, String)> {
    let about = |kind: &str| {
        let found = entry.about.iter().find(|(other, _)| other == kind);
        found.map(|(_, id)| id.as_str())
    };
    let id = entry.subject_id.as_str();
    let subject = match entry.subject_kind.as_str() {
        "plan" | "dose" => about("plan").map(|plan| (format!("/plans/{plan}"), "The plan")),
        "mash check" => about("plan").map(|plan| {
            let address = format!("/plans/{plan}/mash-checks/{id}");
            (address, "The reading")
        }),
        "source" => Some((format!("/sources/{id}"), "The source")),
        "water test" => Some((format!("/water-tests/{id}"), "The water test")),
        "material" => Some((format!("/shelf/{id}"), "The material")),
        "material lot" => {
            about("material").map(|material| (format!("/shelf/{material}/lots/{id}"), "The lot"))
        }
        "beer" => Some((format!("/beers/{id}"), "The beer")),
        "malt" => Some((format!("/malts/{id}"), "The malt")),
        "malt lot" => about("malt").map(|malt| (format!("/malts/{malt}/lots/{id}"), "The lot")),
        "meter" => Some((format!("/meters/{id}"), "The meter")),
        "meter calibration" => about("meter").map(|meter| {
            let address = format!("/meters/{meter}/calibrations/{id}");
            (address, "The calibration")
        }),
        "malt titration" => about("malt")
            .zip(about("malt lot"))
            .map(|(malt, lot)| (format!("/malts/{malt}/lots/{lot}"), "The lot")),
        _ => None,
    };
    let batches = entry.about.iter().filter(|(kind, _)| kind == "batch");
    let batches = batches.map(|(_, batch)| {
        let address = format!("/record?batch={}", percent(batch));
        (address, format!("All of batch {batch}"))
    });
    subject
        .map(|(address, words)| (address, words.to_owned()))
        .into_iter()
        .chain(batches)
        .collect()
}

async fn show(State(db): State<Db>, framer: Framer, asked: Form) -> Result<Response, Error> {
    let page = framer.page("Record book", "record").await;
    let choices = operations::choices(&db, &framer.member).await?;
    let before = asked.value("before").parse::<i64>().ok();
    let found = async {
        let body: FilterBody = asked.body()?;
        let filter = Filter::try_from(body.clone())?;
        let found = operations::find(&db, &framer.member, &filter, before, PAGE + 1).await?;
        Ok((body.query(), found))
    };
    let (status, asked, (query, mut found)) = match found.await {
        Ok(found) => (axum::http::StatusCode::OK, asked, found),
        Err(error) => {
            let (status, asked) = asked.refused(error)?;
            let nothing = Found {
                entries: Vec::new(),
                count: 0,
                newer: 0,
            };
            (status, asked, ("refused".to_owned(), nothing))
        }
    };
    let most = usize::try_from(PAGE).unwrap_or(usize::MAX);
    let more = found.entries.len() > most;
    found.entries.truncate(most);
    let with = |address: &str, more: &str| {
        let joint = if query.is_empty() || more.is_empty() {
            ""
        } else {
            "&"
        };
        let mark = if query.is_empty() && more.is_empty() {
            ""
        } else {
            "?"
        };
        format!("{address}{mark}{query}{joint}{more}")
    };
    let last = found.entries.last().map(|entry| entry.seq);
    let shown = i64::try_from(found.entries.len()).unwrap_or(0);
    let words = if shown == found.count {
        let entries = if shown == 1 { "entry" } else { "entries" };
        format!("{shown} {entries}")
    } else {
        let (first, last) = (found.newer + 1, found.newer + shown);
        format!("{first} to {last} of {} entries", found.count)
    };
    let chosen = |pairs: Vec<(String, String)>, name: &str| Choice::list(pairs, asked.value(name));
    let named = |(id, name): (_, String)| (format!("{id}"), name);
    let page = BookPage {
        people: chosen(
            choices.people.into_iter().map(|(id, name)| (id.to_string(), name)).collect(),
            "member_id",
        ),
        sources: chosen(choices.sources.into_iter().map(named).collect(), "source_id"),
        kinds: chosen(
            choices.kinds.into_iter().map(|kind| (kind.clone(), kind)).collect(),
            "kind",
        ),
        filtered: !query.is_empty(),
        older: last
            .filter(|_| more)
            .map(|seq| with("/record", &format!("before={seq}"))),
        newest: before.map(|_| with("/record", "")),
        table: (found.count > 0).then(|| with("/record.csv", "")),
        cut: (found.count > MOST).then(|| {
            format!(
                "The table takes the newest {MOST} of these {} entries. Choose fewer days for the others.",
                found.count
            )
        }),
        words,
        entries: found
            .entries
            .iter()
            .map(|entry| Row {
                line: Line::of(entry, &page.settings.time_zone),
                links: links(entry),
            })
            .collect(),
        asked,
        page,
    };
    Ok((status, page).into_response())
}

/// The same entries as a table. Its name tells when it does not hold all of them.
async fn download(State(db): State<Db>, framer: Framer, asked: Form) -> Result<Response, Error> {
    let body: FilterBody = asked.body()?;
    let filter = Filter::try_from(body)?;
    let table = operations::table(&db, &framer.member, &filter, None).await?;
    let settings = crate::brewery::operations::settings(&db).await?;
    let day = format::today(&settings.time_zone);
    let name = if table.is_cut() {
        format!(
            "record-book-{day}-newest-{}-of-{}.csv",
            table.entries, table.count
        )
    } else {
        format!("record-book-{day}.csv")
    };
    let heads = [
        (header::CONTENT_TYPE, "text/csv; charset=utf-8".to_owned()),
        (
            header::CONTENT_DISPOSITION,
            format!("attachment; filename=\"{name}\""),
        ),
    ];
    Ok((heads, format!("{BOM}{}", table.csv)).into_response())
}
