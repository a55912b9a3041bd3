//! What of a batch was not as planned, and why.

use chemistry::quantity::Fraction;
use sqlx::SqliteConnection;

use super::store;
use crate::brewery::Settings;
use crate::db::Db;
use crate::error::{Error, FieldProblem};
use crate::id::MaterialId;
use crate::id::PlanId;
use crate::people::{Member, Permission};
use crate::plans::weigh_out::effect::Band;
use crate::plans::weigh_out::needs_second_person;
use crate::plans::{Dose, MashCheck, Plan, State, Weighed, words};
use crate::shelf::USUAL_TOLERANCE;
use crate::web::format;

/// What kind of thing was not as planned.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// A dose is farther from its plan than its material may be.
    OutsideTolerance,
    /// A dose was left out.
    LeftOut,
    /// A dose is of another lot than the plan was computed with.
    OtherLot,
    /// The brewery wants a second person for this material, and none stood by.
    NoSecondPerson,
    /// A reading lies outside its window.
    OutsideWindow,
    /// The plan was approved on water outside the limits for drinking water.
    ApprovedDespite,
}

impl Kind {
    const ALL: [Self; 6] = [
        Self::OutsideTolerance,
        Self::LeftOut,
        Self::OtherLot,
        Self::NoSecondPerson,
        Self::OutsideWindow,
        Self::ApprovedDespite,
    ];

    /// As stored and sent.
    pub const fn key(self) -> &'static str {
        match self {
            Self::OutsideTolerance => "outside_tolerance",
            Self::LeftOut => "left_out",
            Self::OtherLot => "other_lot",
            Self::NoSecondPerson => "no_second_person",
            Self::OutsideWindow => "outside_window",
            Self::ApprovedDespite => "approved_despite",
        }
    }

    /// The kind with this key.
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|kind| kind.key() == key)
    }
}

/// One thing that was not as planned.
#[derive(Clone, Debug, PartialEq)]
pub struct Deviation {
    /// What kind of thing.
    pub kind: Kind,
    /// Which dose, mash check or plan: its identifier.
    pub about: String,
    /// What it was, in the units of the brewery.
    pub words: String,
    /// Why, as far as somebody said; empty where nobody did.
    pub reason: String,
}

impl Deviation {
    /// What tells it from the others of its plan.
    pub fn key(&self) -> String {
        format!("{}:{}", self.kind.key(), self.about)
    }
}

/// What is not as planned, with the reasons said so far; as it was written down, once the
/// batch is closed.
pub async fn list(db: &Db, by: &Member, id: PlanId) -> Result<Vec<Deviation>, Error> {
    by.may(Permission::Read)?;
    let settings = crate::brewery::operations::settings(db).await?;
    let mut snapshot = db.snapshot().await?;
    let tolerances = store::tolerances(&mut snapshot).await?;
    let plan = crate::plans::store::find(&mut snapshot, id)
        .await?
        .ok_or(Error::NotFound("plan"))?;
    of(&mut snapshot, &plan, &settings, &tolerances).await
}

/// The same within a transaction.
pub(super) async fn of(
    db: &mut SqliteConnection,
    plan: &Plan,
    settings: &Settings,
    tolerances: &Tolerances,
) -> Result<Vec<Deviation>, Error> {
    if plan.state == State::Closed {
        return store::deviations(db, plan.id).await;
    }
    let checks = crate::plans::mash_checks::store::of_plan(db, plan.id).await?;
    Ok(found(plan, &checks, settings, tolerances))
}

/// What is not as planned.
fn found(
    plan: &Plan,
    checks: &[MashCheck],
    settings: &Settings,
    tolerances: &Tolerances,
) -> Vec<Deviation> {
    let mut found = Vec::new();
    let outside = plan.inputs.outside_potable(&plan.shares);
    if let (Some(approved), false) = (&plan.approved, outside.is_empty()) {
        found.push(Deviation {
            kind: Kind::ApprovedDespite,
            about: plan.id.to_string(),
            words: format!("Approved although {}", outside.join("; ")),
            reason: approved.reason.clone(),
        });
    }
    for dose in &plan.doses {
        if let Some(weighed) = &dose.weighed {
            of_dose(plan, dose, weighed, settings, tolerances, &mut found);
        }
    }
    for check in checks.iter().filter(|check| check.withdrawn.is_none()) {
        if matches!(check.advised.verdict.as_str(), "below" | "above") {
            found.push(Deviation {
                kind: Kind::OutsideWindow,
                about: check.id.to_string(),
                words: format!(
                    "{} pH {} ± {}{}, {} the window",
                    check.stage.name(),
                    format::ph(check.advised.reading_ph),
                    format::ph(check.advised.reading_sd),
                    check.since_strike().map_or_else(String::new, |minute| {
                        format!(" at minute {}", format::decimals(minute.get(), 0))
                    }),
                    check.advised.verdict
                ),
                reason: put_right(plan, check, checks, settings),
            });
        }
    }
    found
}

fn of_dose(
    plan: &Plan,
    dose: &Dose,
    weighed: &Weighed,
    settings: &Settings,
    tolerances: &Tolerances,
    found: &mut Vec<Deviation>,
) {
    let Some(item) = plan.inputs.problem.shelf.get(dose.material) else {
        return;
    };
    let label = plan.inputs.shelf.get(dose.material);
    let line = format!("{} into the {}", item.name, dose.vessel.name());
    let amount = |amount: f64| {
        let (text, unit) = words::dose(settings.units, &plan.inputs, dose.material, amount);
        format!("{text} {unit}")
    };
    let mut add = |kind: Kind, words: String| {
        found.push(Deviation {
            kind,
            about: dose.id.to_string(),
            words,
            reason: weighed.reason.clone(),
        });
    };
    let (planned, actual) = (dose.planned.get(), weighed.actual.get());
    if actual == 0.0 && planned > 0.0 {
        add(
            Kind::LeftOut,
            format!("{line}: left out, {} planned", amount(planned)),
        );
        return;
    }
    let band = band(plan, dose, weighed, tolerances);
    if !band.holds(weighed.actual) && actual > 0.0 {
        let (target, plan) = (amount(band.target.get()), amount(planned));
        let of_lot = if target == plan {
            String::new()
        } else {
            format!(", which is {target} of this lot")
        };
        add(
            Kind::OutsideTolerance,
            format!("{line}: {} in place of {plan}{of_lot}", amount(actual)),
        );
    }
    if let Some(label) = label.filter(|label| label.lot_id.is_some())
        && label.lot_id != weighed.lot.id
        && !weighed.lot.code.is_empty()
    {
        add(
            Kind::OtherLot,
            format!("{line}: lot {} in place of {}", weighed.lot.code, label.lot),
        );
    }
    if needs_second_person(settings, item.material.substance())
        && actual > 0.0
        && weighed.witness.is_none()
    {
        add(
            Kind::NoSecondPerson,
            format!("{line}: no second person stood by"),
        );
    }
}

/// How far doses of each material may be from their plan, where that is not the usual share.
#[derive(Clone, Debug)]
pub struct Tolerances(pub(super) Vec<(MaterialId, Fraction)>);

/// How far doses may be from their plan today.
pub async fn tolerances(db: &Db, by: &Member) -> Result<Tolerances, Error> {
    by.may(Permission::Read)?;
    store::tolerances(&mut *db.reader().await?).await
}

/// What of a weighed dose is taken without a question, as at the scale: around its plan, or around
/// what does as much where the lot is stronger or weaker.
pub(in crate::plans) fn band(
    plan: &Plan,
    dose: &Dose,
    weighed: &Weighed,
    tolerances: &Tolerances,
) -> Band {
    let id = plan.inputs.shelf.get(dose.material).and_then(|it| it.id);
    let own = tolerances.0.iter().find(|(of, _)| Some(*of) == id);
    let tolerance = own.map_or(USUAL_TOLERANCE, |(_, share)| *share);
    Band::of(plan, dose, weighed.lot.material.as_ref(), tolerance)
}

/// What was done about a reading outside its window: the step that was given, and the next
/// reading of the stage.
fn put_right(plan: &Plan, check: &MashCheck, checks: &[MashCheck], settings: &Settings) -> String {
    let steps = plan
        .doses
        .iter()
        .filter(|dose| dose.mash_check == Some(check.id));
    let given: Vec<String> = steps
        .filter_map(|dose| {
            let weighed = dose.weighed.as_ref().filter(|it| it.actual.get() > 0.0)?;
            let item = plan.inputs.problem.shelf.get(dose.material)?;
            let (text, unit) = words::dose(
                settings.units,
                &plan.inputs,
                dose.material,
                weighed.actual.get(),
            );
            Some(format!("{text} {unit} {}", item.name))
        })
        .collect();
    if given.is_empty() {
        return String::new();
    }
    let next = checks.iter().find(|other| {
        other.stage == check.stage && other.withdrawn.is_none() && other.read_at > check.read_at
    });
    let next = next.map_or_else(String::new, |next| {
        format!(", then read {}", format::ph(next.advised.reading_ph))
    });
    format!("Put right with {}{next}", given.join(" and "))
}

/// Fills in the reasons somebody gives: each for its own, the note for the rest. What is
/// left without one is asked for.
pub(super) fn explained(
    mut deviations: Vec<Deviation>,
    given: &[(String, String)],
    note: Option<&str>,
) -> Result<Vec<Deviation>, Error> {
    let mut problems = Vec::new();
    for (key, _) in given {
        if !deviations.iter().any(|it| it.key() == *key) {
            problems.push(FieldProblem {
                field: String::new(),
                message: "Something changed meanwhile. Reload the page and look again.".into(),
            });
            return Err(Error::Invalid(problems));
        }
    }
    let mut asked = 0;
    for deviation in &mut deviations {
        if !deviation.reason.is_empty() {
            continue;
        }
        let key = deviation.key();
        if let Some((_, reason)) = given.iter().find(|(of, _)| *of == key) {
            deviation.reason.clone_from(reason);
        } else if note.is_some() {
            deviation.reason = "See the closing note".into();
        } else {
            problems.push(FieldProblem {
                field: format!("reasons.{asked}.reason"),
                message: format!("Say why, here or in the note: {}.", deviation.words),
            });
        }
        asked += 1;
    }
    if problems.is_empty() {
        Ok(deviations)
    } else {
        Err(Error::Invalid(problems))
    }
}
