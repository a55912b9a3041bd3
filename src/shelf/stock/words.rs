//! Stock in words, for pages.

use std::collections::HashSet;

use super::operations::Ledger;
use super::{Movement, MovementKind, Stock, Use};
use crate::brewery::Units;
use crate::id::{MovementId, PlanId, UtcTime};
use crate::shelf::words::Measures;
use crate::web::format;

/// How much is there: kilograms or litres (pounds, gallons) from one up, below that in
/// what doses are measured in.
pub fn amount(units: Units, measures: Measures, g_or_ml: f64) -> String {
    let large = units.shown(measures.stock, g_or_ml);
    if large.abs() >= 1.0 {
        let places = if large.abs() >= 100.0 { 1 } else { 2 };
        format!(
            "{} {}",
            format::decimals(large, places),
            units.label(measures.stock)
        )
    } else {
        let small = units.shown(measures.dose, g_or_ml);
        let places = usize::from(small.abs() < 9.95 && small != 0.0);
        format!(
            "{} {}",
            format::decimals(small, places),
            units.label(measures.dose)
        )
    }
}

/// The stock of a lot or a material; not counted is not nothing.
pub fn stock(units: Units, measures: Measures, stock: Option<Stock>) -> String {
    stock.map_or_else(
        || "not counted".into(),
        |stock| amount(units, measures, stock.get()),
    )
}

/// How many batches a stock is enough for, and what that rests on.
pub fn lasts(
    units: Units,
    measures: Measures,
    stock: Option<Stock>,
    recent: Option<Use>,
) -> Option<(String, String)> {
    let (stock, recent) = stock.zip(recent)?;
    let batches = (stock.there().get() / recent.per_batch.get()).floor();
    let many = if batches < 1.0 {
        "less than one batch".to_owned()
    } else if batches < 2.0 {
        "about 1 batch".to_owned()
    } else {
        format!("about {} batches", format::decimals(batches, 0))
    };
    let each = amount(units, measures, recent.per_batch.get());
    let like = match recent.batches {
        1 => "the last one".to_owned(),
        batches => format!("the last {batches} on average"),
    };
    Some((many, format!("if each takes {each} like {like}")))
}

/// One line of a ledger.
#[derive(Clone, Debug)]
pub struct Line {
    /// When, in the brewery's time zone.
    pub at: String,
    /// The machine's form of it.
    pub instant: String,
    /// `Delivery`, `Count`, `Weighed out`, `Taken back`.
    pub what: &'static str,
    /// The batch and its plan, of a dose.
    pub batch: Option<(PlanId, String)>,
    /// Supplier and delivery note, or how far a count was off.
    pub detail: String,
    /// Why.
    pub reason: String,
    /// By how much the stock changed, or what was counted.
    pub change: String,
    /// What was there afterwards; empty where it is not known.
    pub after: String,
    /// Who.
    pub who: String,
    /// Whether another movement took its place.
    pub corrected: bool,
    /// Whether it takes the place of another.
    pub corrects: bool,
    /// The movement, where it can still be corrected.
    pub open: Option<MovementId>,
}

enum Happened<'a> {
    Moved(&'a Movement),
    Taken(&'a super::Taken),
}

impl Happened<'_> {
    const fn at(&self) -> UtcTime {
        match self {
            Self::Moved(movement) => movement.at,
            Self::Taken(taken) => taken.at,
        }
    }
}

/// A ledger line by line, the newest first.
pub fn lines(ledger: &Ledger, units: Units, time_zone: &str) -> Vec<Line> {
    let measures = Measures::of(ledger.material.substance);
    let amount = |g_or_ml: f64| amount(units, measures, g_or_ml);
    let corrected: HashSet<MovementId> = ledger
        .movements
        .iter()
        .filter_map(|movement| movement.corrects)
        .collect();
    let moved = ledger.movements.iter().map(Happened::Moved);
    let mut all: Vec<Happened<'_>> = moved
        .chain(ledger.taken.iter().map(Happened::Taken))
        .collect();
    // Stable: what was weighed at the moment of a count was counted.
    all.sort_by_key(Happened::at);
    let (mut there, mut known) = (0.0, false);
    let mut lines = Vec::with_capacity(all.len());
    for happened in &all {
        let mut line = Line {
            at: format::moment(happened.at(), time_zone),
            instant: happened.at().to_string(),
            what: "Weighed out",
            batch: None,
            detail: String::new(),
            reason: String::new(),
            change: String::new(),
            after: String::new(),
            who: String::new(),
            corrected: false,
            corrects: false,
            open: None,
        };
        match happened {
            Happened::Taken(taken) => {
                there -= taken.amount.get();
                line.batch = Some((taken.plan, taken.batch.clone()));
                line.change = format!("\u{2212}{}", amount(taken.amount.get()));
                line.who.clone_from(&taken.by);
            }
            Happened::Moved(movement) => {
                line.corrected = corrected.contains(&movement.id);
                line.corrects = movement.corrects.is_some();
                line.who.clone_from(&movement.entered_by);
                line.reason = movement.reason.clone().unwrap_or_default();
                line.open = (!line.corrected).then_some(movement.id);
                let size = movement.amount.get();
                match movement.kind {
                    MovementKind::Delivery => {
                        line.what = "Delivery";
                        line.change = format!("+{}", amount(size));
                        line.detail = from(movement);
                    }
                    MovementKind::Count => {
                        line.what = "Count";
                        line.change = format!("= {}", amount(size));
                        if known && !line.corrected {
                            line.detail = off(size - there, &amount);
                        }
                    }
                    MovementKind::Removal => line.what = "Taken back",
                }
                if !line.corrected {
                    match movement.kind {
                        MovementKind::Delivery => there += size,
                        MovementKind::Count => there = size,
                        MovementKind::Removal => {}
                    }
                    known |= movement.kind != MovementKind::Removal;
                }
            }
        }
        if known && !line.corrected && line.what != "Taken back" {
            line.after = amount(there);
        }
        lines.push(line);
    }
    lines.reverse();
    lines
}

/// Who delivered it, with which note.
fn from(movement: &Movement) -> String {
    let supplier = movement.supplier.as_deref().map(|it| format!("from {it}"));
    let note = movement
        .delivery_note
        .as_deref()
        .map(|it| format!("delivery note {it}"));
    let parts: Vec<String> = supplier.into_iter().chain(note).collect();
    parts.join(", ")
}

/// How far a count was from what was expected.
fn off(difference: f64, amount: &impl Fn(f64) -> String) -> String {
    if difference.abs() < 0.5 {
        "as expected".into()
    } else if difference < 0.0 {
        format!("{} less than expected", amount(-difference))
    } else {
        format!("{} more than expected", amount(difference))
    }
}
