//! The tablet by the mash tun: what is on today, the weigh-out line by line, the mash
//! check and what to do about it.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::routing::get;
use jiff::civil::Date;

use super::State as PlanState;
use super::readiness::{self, Batch, Freshness, Missing, Next, When};
use crate::db::Db;
use crate::error::Error;
use crate::people::Permission;
use crate::web::App;
use crate::web::format;
use crate::web::layout::{Framer, Page};

mod check_page;
mod checks;
mod liquor_checks;
mod weigh_out;

/// The pages.
pub(super) fn routes() -> Router<App> {
    Router::new()
        .route("/", get(brew_day))
        .merge(weigh_out::routes())
        .merge(checks::routes())
        .merge(liquor_checks::routes())
}

#[derive(Template, WebTemplate)]
#[template(path = "plans/brew_day.html")]
struct BrewDayPage {
    page: Page,
    /// Today in words.
    day: String,
    until: String,
    sections: Vec<Section>,
    more_late: usize,
    later: usize,
    waters: Vec<Freshness>,
    may_draft: bool,
    /// Whether no batch is open at all.
    nothing: bool,
    /// Whether there is no beer yet to plan.
    beginning: bool,
}

/// The batches of one time.
struct Section {
    when: When,
    cards: Vec<Card>,
}

/// An open batch on the page.
struct Card {
    batch: Batch,
    /// The day in words; empty for today.
    day: String,
    /// How far it is, part by part.
    progress: Vec<String>,
    missing: Vec<MissingRow>,
    next: Step,
    /// When the mash is to be read again: the moment, and the brewery's clock.
    again: Option<(String, String)>,
    /// What else waits, where the next thing interrupts it.
    other: Option<Step>,
}

/// Something to go on with.
struct Step {
    address: String,
    words: String,
    /// Whether whoever is signed in may do it.
    allowed: bool,
}

/// Something that is missing, and where it is mended.
pub(super) struct MissingRow {
    pub(super) words: String,
    pub(super) stops: bool,
    /// Address and words of a link; empty where the plan's own page is the place.
    pub(super) mend: Option<(String, &'static str)>,
}

async fn brew_day(State(db): State<Db>, framer: Framer) -> Result<BrewDayPage, Error> {
    let page = framer.page("Brew day", "brew-day").await;
    let found = readiness::brew_day(&db, &framer.member).await?;
    let nothing = found.batches.is_empty() && found.later == 0;
    let beginning = nothing
        && crate::beers::operations::list_after(&db, &framer.member, None, 1)
            .await?
            .is_empty();
    let mut sections = [When::Today, When::Late, When::ThisWeek].map(|when| Section {
        when,
        cards: Vec::new(),
    });
    for batch in found.batches {
        let card = card(batch, found.on, &page);
        if let Some(section) = sections.iter_mut().find(|it| it.when == card.batch.when) {
            section.cards.push(card);
        }
    }
    Ok(BrewDayPage {
        day: weekday(found.on),
        until: weekday(found.until),
        sections: sections.into(),
        more_late: found.more_late,
        later: found.later,
        waters: found.waters,
        may_draft: page.can(Permission::DraftPlans),
        nothing,
        beginning,
        page,
    })
}

fn weekday(day: Date) -> String {
    day.strftime("%A %-d %B").to_string()
}

fn card(batch: Batch, today: Date, page: &Page) -> Card {
    Card {
        day: match batch.brewed_on {
            day if day == today => String::new(),
            day if today.yesterday().is_ok_and(|it| it == day) => "Yesterday".into(),
            day if today.tomorrow().is_ok_and(|it| it == day) => "Tomorrow".into(),
            day if day.year() == today.year() => weekday(day),
            day => day.to_string(),
        },
        progress: progress(&batch),
        missing: missing_rows(&batch, page),
        next: next(&batch, page),
        again: read_again(&batch, &page.settings.time_zone),
        other: waiting(&batch),
        batch,
    }
}

fn progress(batch: &Batch) -> Vec<String> {
    let mut parts = Vec::new();
    if batch.state != PlanState::Draft && batch.lines > 0 {
        parts.push(if batch.lines_in == batch.lines {
            format!("all {} lines in", batch.lines)
        } else {
            format!("{} of {} lines in", batch.lines_in, batch.lines)
        });
    }
    match (&batch.reading, batch.prediction) {
        (Some(reading), _) => parts.push(format!(
            "mash read: {} ± {}",
            format::ph(reading.ph),
            format::ph(reading.sd)
        )),
        (None, Some(predicted)) => parts.push(format!(
            "mash pH expected {}, 90 % between {} and {}",
            format::ph(predicted.ph.get()),
            format::ph(predicted.low.get()),
            format::ph(predicted.high.get())
        )),
        (None, None) => {}
    }
    parts
}

/// What a batch lacks, each with where it is mended.
pub(super) fn missing_rows(batch: &Batch, page: &Page) -> Vec<MissingRow> {
    let row = |missing: &Missing| MissingRow {
        words: missing.words(page.settings.units),
        stops: missing.stops(),
        mend: match missing {
            Missing::Approval => None,
            Missing::Revision { id, .. } => Some((format!("/plans/{id}"), "That revision")),
            Missing::Test { source, .. } | Missing::FreshTest { source, .. } => {
                Some(if page.can(Permission::EnterWaterTests) {
                    let address = format!("/sources/{source}/water-tests/new");
                    (address, "Enter a test")
                } else {
                    (format!("/sources/{source}"), "The source")
                })
            }
            Missing::NewerTest { .. } if batch.state == PlanState::Draft => {
                Some((format!("/plans/{}", batch.id), "Read it anew"))
            }
            Missing::NewerTest { .. } => Some((format!("/plans/{}", batch.id), "Revise the plan")),
            Missing::Assumed { source, .. } => Some((format!("/sources/{source}"), "The water")),
            Missing::Meter { listed: 0, .. } if page.can(Permission::KeepMeters) => {
                Some(("/meters/new".into(), "Add a meter"))
            }
            Missing::Meter {
                only: Some(meter), ..
            } => Some((format!("/meters/{meter}/calibrations/new"), "Calibrate it")),
            Missing::Meter { listed: 0, .. } => Some(("/meters".into(), "The meters")),
            Missing::Meter { .. } => Some(("/meters".into(), "Calibrate one")),
            Missing::Material { material, .. } => Some((format!("/shelf/{material}"), "The stock")),
            Missing::FreshLot { material, .. } => Some((format!("/shelf/{material}"), "The lots")),
        },
    };
    batch.missing.iter().map(row).collect()
}

fn next(batch: &Batch, page: &Page) -> Step {
    let id = batch.id;
    let may_approve = page.can(Permission::ApprovePlans);
    let (address, allowed) = match batch.next {
        Next::Approve => (format!("/plans/{id}#approval"), may_approve),
        Next::Decide(revision) => (format!("/plans/{revision}#approval"), may_approve),
        Next::WeighOut { .. } => (format!("/plans/{id}/weigh-out"), true),
        Next::GiveStep(dose) => (format!("/plans/{id}/weigh-out?dose={dose}"), true),
        Next::ReadMash | Next::ReadAgain(_) => (format!("/plans/{id}/mash-checks/new"), true),
        Next::Close => (format!("/plans/{id}/closing"), true),
    };
    Step {
        address,
        words: if allowed {
            batch.next.words(&page.settings.time_zone)
        } else {
            "Ask QA to approve".into()
        },
        allowed,
    }
}

/// When the mash of a batch is to be read again: the moment, and the same by the
/// brewery's clock.
pub(super) fn read_again(batch: &Batch, time_zone: &str) -> Option<(String, String)> {
    let at = batch.next.due_at()?;
    Some((at.to_string(), format::clock(at, time_zone)))
}

/// The rest of the weigh-out, where the mash comes first.
fn waiting(batch: &Batch) -> Option<Step> {
    let reading = matches!(
        batch.next,
        Next::GiveStep(_) | Next::ReadMash | Next::ReadAgain(_)
    );
    (reading && batch.state == PlanState::Approved && batch.lines_in < batch.lines).then(|| Step {
        address: format!("/plans/{}/weigh-out", batch.id),
        words: "Weigh out the rest".into(),
        allowed: true,
    })
}
