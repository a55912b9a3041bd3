//! The batch sheet: one batch on paper, for an auditor to read without Leat.

use askama::Template;
use askama_web::WebTemplate;
use axum::extract::State;

use super::account::{self, CorrectionLine, DeviationLine, DoseLine};
use super::{OutcomeRow, outcome_row};
use crate::brewery::Units;
use crate::db::Db;
use crate::error::Error;
use crate::id::{PlanId, UtcTime};
use crate::plans::closing::revisions::{self, Revision};
use crate::plans::closing::{corrections, deviations};
use crate::plans::{Deed, MashCheck, Plan, mash_checks, sheet};
use crate::record;
use crate::record::filter::Filter;
use crate::record::pages::Line;
use crate::record::trace::{self, PersonBehind, TestBehind};
use crate::web::chart::IntervalBar;
use crate::web::extract::At;
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::units::Measure;

/// Most entries of the record book on one sheet.
const MOST_ENTRIES: i64 = 400;
/// Values of an entry that are written out; of more, how many there are.
const MOST_VALUES: usize = 6;

#[derive(Template, WebTemplate)]
#[template(path = "plans/batch_sheet.html")]
pub(super) struct SheetPage {
    page: Page,
    plan: Plan,
    printed: String,
    units: &'static str,
    volumes: Vec<(&'static str, String)>,
    read_at: String,
    revisions: Vec<RevisionLine>,
    waters: Vec<WaterLine>,
    grist: Vec<(String, String, String)>,
    doses: Vec<DoseLine>,
    readings: Vec<ReadingLine>,
    interval: Option<IntervalBar>,
    outcome: Option<OutcomeRow>,
    deviations: Vec<DeviationLine>,
    note: String,
    corrections: Vec<CorrectionLine>,
    people: Vec<(String, String)>,
    entries: Vec<EntryLine>,
    left_out: i64,
}

struct RevisionLine {
    revision: i64,
    state: &'static str,
    deeds: Vec<(&'static str, String)>,
}

struct WaterLine {
    source: String,
    share: String,
    volume: String,
    tests: Vec<String>,
    assumed: Vec<String>,
}

struct ReadingLine {
    stage: &'static str,
    by: String,
    at: String,
    minute: String,
    shown: String,
    cooled: String,
    expected: String,
    advice: String,
    meter: String,
    withdrawn: String,
}

struct EntryLine {
    seq: i64,
    line: Line,
    values: Vec<String>,
}

fn deed(deed: &Deed, zone: &str) -> String {
    let reason = if deed.reason.is_empty() {
        String::new()
    } else {
        format!(": {}", deed.reason)
    };
    format!("{}, {}{reason}", deed.by, format::moment(deed.at, zone))
}

fn revision_line(revision: &Revision, zone: &str) -> RevisionLine {
    let deeds = [
        ("Drafted", Some(&revision.drafted)),
        ("Approved", revision.approved.as_ref()),
        ("Withdrawn", revision.withdrawn.as_ref()),
        ("Closed", revision.closed.as_ref()),
    ];
    RevisionLine {
        revision: revision.revision,
        state: revision.state.name(),
        deeds: deeds
            .into_iter()
            .filter_map(|(what, it)| Some((what, deed(it?, zone))))
            .collect(),
    }
}

fn waters(plan: &Plan, tests: &[TestBehind], units: Units) -> Vec<WaterLine> {
    let liquor = plan.inputs.problem.volumes.liquor.get();
    let used = plan.inputs.sources.iter().zip(&plan.shares);
    used.filter(|(_, share)| share.get() > 0.0)
        .map(|(source, share)| WaterLine {
            source: source.name.clone(),
            share: format!("{} %", format::decimals(share.get() * 100.0, 1)),
            volume: units.show(Measure::Volume, share.get() * liquor),
            tests: tests
                .iter()
                .filter(|test| Some(test.source_id) == source.id)
                .map(test_words)
                .collect(),
            assumed: source.assumed.clone(),
        })
        .collect()
}

fn test_words(test: &TestBehind) -> String {
    let mut words = test.sampled_on.to_string();
    for (before, text) in [(", ", &test.laboratory), (", report ", &test.reference)] {
        if !text.is_empty() {
            words.push_str(before);
            words.push_str(text);
        }
    }
    if test.withdrawn {
        words.push_str(" (withdrawn since)");
    }
    words
}

fn reading(
    check: &MashCheck,
    calibrations: &[revisions::Calibrated],
    zone: &str,
    units: Units,
) -> ReadingLine {
    let advised = &check.advised;
    let calibration = calibrations
        .iter()
        .find(|it| Some(it.id) == check.calibration_id)
        .map_or_else(
            || "calibration not known".to_owned(),
            |it| {
                format!(
                    "calibrated {}, slope {} %",
                    format::moment(it.at, zone),
                    format::decimals(it.slope_percent, 1)
                )
            },
        );
    let meter = if check.meter.is_empty() {
        "meter not told"
    } else {
        &check.meter
    };
    ReadingLine {
        stage: check.stage.name(),
        by: check.read_by.clone(),
        at: format::moment(check.read_at, zone),
        minute: check
            .since_strike()
            .map_or_else(String::new, |minute| format::decimals(minute.get(), 0)),
        shown: format!(
            "{} at {} {}",
            format::ph(check.ph.get()),
            format::decimals(units.shown(Measure::Temperature, check.sample.get()), 0),
            units.label(Measure::Temperature)
        ),
        cooled: format!(
            "{} ± {}",
            format::ph(advised.reading_ph),
            format::ph(advised.reading_sd)
        ),
        expected: advised.expected_ph.map_or_else(String::new, format::ph),
        advice: advised.title.clone(),
        meter: format!("{meter}, {calibration}"),
        withdrawn: check
            .withdrawn
            .as_ref()
            .map_or_else(String::new, |it| format!("Withdrawn by {}", deed(it, zone))),
    }
}

fn person(person: PersonBehind) -> (String, String) {
    let deeds: Vec<String> = person
        .deeds
        .into_iter()
        .map(|(what, times)| {
            if times == 1 {
                what
            } else {
                format!("{what}, {times} times")
            }
        })
        .collect();
    (person.name, deeds.join("; "))
}

fn entry(entry: &record::Entry, zone: &str) -> EntryLine {
    let line = Line::of(entry, zone);
    // Identifiers say nothing on paper; the book holds them.
    let told = line.differences.iter();
    let told: Vec<_> = told.filter(|(name, ..)| !name.ends_with(" id")).collect();
    let values = if told.len() > MOST_VALUES {
        vec![format!("{} values", told.len())]
    } else {
        told.into_iter()
            .map(|(name, was, is)| match (was.as_str(), is.as_str()) {
                ("", is) => format!("{name}: {is}"),
                (was, "") => format!("{name} was {was}"),
                (was, is) => format!("{name}: {was} → {is}"),
            })
            .collect()
    };
    EntryLine {
        seq: entry.seq,
        line,
        values,
    }
}

pub(super) async fn show(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<PlanId>,
) -> Result<SheetPage, Error> {
    let by = &framer.member;
    let (plan, behind) = trace::behind(&db, by, id).await?;
    let title = format!("Batch sheet {} {}", plan.batch, plan.beer_name);
    let page = framer.page(title, "plans").await;
    let (units, zone) = (page.settings.units, page.settings.time_zone.clone());
    let tolerances = deviations::tolerances(&db, by).await?;
    let later = corrections::list(&db, by, id).await?;
    let checks = mash_checks::list(&db, by, id).await?;
    let calibrations = revisions::calibrations(&db, by, id).await?;
    let revisions = revisions::of_batch(&db, by, &plan.batch).await?;
    let filter = Filter {
        batch: Some(plan.batch.clone()),
        ..Filter::default()
    };
    let mut found = record::operations::find(&db, by, &filter, None, MOST_ENTRIES).await?;
    found.entries.reverse();
    let shown = i64::try_from(found.entries.len()).unwrap_or(i64::MAX);
    Ok(SheetPage {
        printed: format::moment(UtcTime::now(), &zone),
        units: units.name(),
        volumes: sheet::volumes(&plan.inputs, units),
        read_at: format::moment(plan.inputs_read_at, &zone),
        revisions: revisions
            .iter()
            .map(|it| revision_line(it, &zone))
            .collect(),
        waters: waters(&plan, &behind.tests, units),
        grist: sheet::grist(&plan.inputs, units),
        doses: account::doses(&plan, &tolerances, &later, &page.settings),
        readings: checks
            .iter()
            .map(|check| reading(check, &calibrations, &zone, units))
            .collect(),
        interval: account::interval(&plan, None),
        outcome: plan.outcome.as_ref().map(outcome_row),
        deviations: account::deviations(deviations::list(&db, by, id).await?),
        note: plan
            .closed
            .as_ref()
            .map_or_else(String::new, |it| it.reason.clone()),
        corrections: account::corrections(&plan, &later, &page.settings),
        people: behind.people.into_iter().map(person).collect(),
        entries: found.entries.iter().map(|it| entry(it, &zone)).collect(),
        left_out: found.count - shown,
        page,
        plan,
    })
}
