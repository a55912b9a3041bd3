//! What became of a plan, in words: each dose planned against actual, what was not as
//! planned, what was corrected after closing. For the closing and for the batch sheet.

use crate::brewery::{Settings, Units};
use crate::plans::closing::corrections::{PlanCorrection, What};
use crate::plans::closing::deviations::{Deviation, Tolerances, band};
use crate::plans::{Dose, MashCheck, Plan, sheet, words};
use crate::web::chart::IntervalBar;
use crate::web::format;

/// One dose, planned against actual.
pub(super) struct DoseLine {
    pub(super) vessel: &'static str,
    pub(super) name: String,
    pub(super) detail: String,
    pub(super) step: bool,
    pub(super) planned: String,
    pub(super) actual: String,
    pub(super) difference: String,
    pub(super) outside: bool,
    pub(super) lot: String,
    pub(super) by: String,
    pub(super) at: String,
    pub(super) witness: String,
    pub(super) reason: String,
    /// What was written down before, and what a correction after closing says.
    pub(super) corrections: Vec<String>,
}

/// Every dose of a plan.
pub(super) fn doses(
    plan: &Plan,
    tolerances: &Tolerances,
    later: &[PlanCorrection],
    settings: &Settings,
) -> Vec<DoseLine> {
    let lines = plan.doses.iter();
    lines
        .map(|dose| dose_line(plan, dose, tolerances, later, settings))
        .collect()
}

fn dose_line(
    plan: &Plan,
    dose: &Dose,
    tolerances: &Tolerances,
    later: &[PlanCorrection],
    settings: &Settings,
) -> DoseLine {
    let units = settings.units;
    let with_unit = |amount: f64| {
        let (text, unit) = words::dose(units, &plan.inputs, dose.material, amount);
        format!("{text} {unit}")
    };
    let item = plan.inputs.problem.shelf.get(dose.material);
    let planned = dose.planned.get();
    let weighed = dose.weighed.as_ref();
    let actual = weighed.map(|it| it.actual.get());
    let mut corrections: Vec<String> = weighed
        .iter()
        .flat_map(|it| &it.corrections)
        .map(|it| {
            let lot = if it.lot.is_empty() {
                String::new()
            } else {
                format!(", lot {}", it.lot)
            };
            format!(
                "Until {} it said {}{lot}; {}: {}",
                format::moment(it.corrected_at, &settings.time_zone),
                with_unit(it.actual),
                it.corrected_by,
                it.because
            )
        })
        .collect();
    let later = later.iter().filter(|it| it.dose_id == Some(dose.id));
    corrections.extend(later.map(|it| {
        let what = if it.what == What::Lot { "lot " } else { "" };
        format!(
            "Corrected after closing: {what}{} in place of {}",
            says(plan, it, units),
            it.said_before
        )
    }));
    DoseLine {
        vessel: dose.vessel.name(),
        name: item.map_or_else(String::new, |item| item.name.clone()),
        detail: words::material_detail(&plan.inputs, dose.material),
        step: dose.mash_check.is_some(),
        planned: with_unit(planned),
        actual: actual.map_or_else(String::new, with_unit),
        difference: actual.map_or_else(String::new, |actual| difference(planned, actual)),
        outside: weighed.is_some_and(|it| !band(plan, dose, it, tolerances).holds(it.actual)),
        lot: weighed.map_or_else(String::new, |it| it.lot.code.clone()),
        by: weighed.map_or_else(String::new, |it| it.by.clone()),
        at: weighed.map_or_else(String::new, |it| format::moment(it.at, &settings.time_zone)),
        witness: weighed
            .and_then(|it| it.witness.as_ref())
            .map_or_else(String::new, |it| it.name.clone()),
        reason: weighed.map_or_else(String::new, |it| it.reason.clone()),
        corrections,
    }
}

/// How far an amount is from its plan, per cent.
fn difference(planned: f64, actual: f64) -> String {
    if planned == 0.0 {
        return if actual == 0.0 { "none" } else { "not planned" }.to_owned();
    }
    let percent = (actual - planned) / planned * 100.0;
    if percent.abs() < 0.05 {
        "none".to_owned()
    } else if percent > 0.0 {
        format!("+{} %", format::decimals(percent, 1))
    } else {
        format!("{} %", format::decimals(percent, 1))
    }
}

/// What a correction says, an amount in the brewery's unit.
fn says(plan: &Plan, correction: &PlanCorrection, units: Units) -> String {
    let dose = plan
        .doses
        .iter()
        .find(|dose| Some(dose.id) == correction.dose_id);
    match (correction.amount, dose) {
        (Some(amount), Some(dose)) => {
            let (text, unit) = words::dose(units, &plan.inputs, dose.material, amount.get());
            format!("{text} {unit}")
        }
        _ => correction.says_now.clone(),
    }
}

/// One correction made after closing.
pub(super) struct CorrectionLine {
    pub(super) what: String,
    pub(super) before: String,
    pub(super) now: String,
    pub(super) reason: String,
    pub(super) made: String,
    pub(super) stops_learning: bool,
}

/// Every correction made after closing.
pub(super) fn corrections(
    plan: &Plan,
    corrections: &[PlanCorrection],
    settings: &Settings,
) -> Vec<CorrectionLine> {
    let lines = corrections.iter().map(|it| {
        let dose = plan.doses.iter().find(|dose| Some(dose.id) == it.dose_id);
        let dose = dose.map_or_else(String::new, |dose| line(plan, dose));
        CorrectionLine {
            what: match it.what {
                What::Lot => format!("Lot of {dose}"),
                What::Amount => format!("Amount of {dose}"),
                What::Reading => "The reading that counts".to_owned(),
                What::Other => "Something else".to_owned(),
            },
            before: it.said_before.clone(),
            now: says(plan, it, settings.units),
            reason: it.made.reason.clone(),
            made: format!(
                "{}, {}",
                it.made.by,
                format::moment(it.made.at, &settings.time_zone)
            ),
            stops_learning: !it.teaches,
        }
    });
    lines.collect()
}

/// A dose as sentences name it.
pub(super) fn line(plan: &Plan, dose: &Dose) -> String {
    let item = plan.inputs.problem.shelf.get(dose.material);
    let name = item.map_or("", |item| item.name.as_str());
    format!("{name} into the {}", dose.vessel.name())
}

/// Predicted against measured.
pub(super) fn interval(plan: &Plan, check: Option<&MashCheck>) -> Option<IntervalBar> {
    let closed = plan.outcome.as_ref();
    let closed = closed.and_then(|outcome| outcome.measured_ph.zip(outcome.measured_sd));
    let reading = check
        .map(|check| (check.advised.reading_ph, check.advised.reading_sd))
        .or(closed);
    let aim = plan.inputs.problem.spec.mash_ph;
    Some(sheet::interval(plan.prediction?, aim, reading, None))
}

/// A deviation with the place of the reason it is asked for, if it is.
pub(super) struct DeviationLine {
    pub(super) words: String,
    pub(super) reason: String,
    pub(super) key: String,
    /// Its place among those that have no reason yet.
    pub(super) asked: Option<usize>,
}

/// What was not as planned. Those without a reason are numbered as the closing asks for
/// them.
pub(super) fn deviations(deviations: Vec<Deviation>) -> Vec<DeviationLine> {
    let mut asked = 0..;
    deviations
        .into_iter()
        .map(|it| DeviationLine {
            key: it.key(),
            asked: if it.reason.is_empty() {
                asked.next()
            } else {
                None
            },
            words: it.words,
            reason: it.reason,
        })
        .collect()
}
