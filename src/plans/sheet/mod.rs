//! What the page of a plan shows, worked out: windows as bars, the mash pH with its
//! interval, where the doubt comes from, amounts per vessel, the four ways.

use chemistry::material::{SAFETY_DATA_SHEET, Vessel};
use chemistry::plan::{Ending, Outcome, Way};
use chemistry::put_right::Aim;
use chemistry::quantity::{Estimate, Ph};

use crate::brewery::{Settings, Units};
use crate::error::Error;
use crate::plans::inputs::{Inputs, Learned};
use crate::plans::learning::Lesson;
use crate::plans::{Plan, Prediction, compute, words};
use crate::web::chart::{DoubtShare, IntervalBar, WindowBar};
use crate::web::form::Form;
use crate::web::format;
use crate::web::units::Measure as Shown;

mod curve;
mod figures;

pub(in crate::plans) use curve::dose_curve;
pub(in crate::plans) use figures::interval;
use figures::{doubts, waters, windows};

/// Everything a treatment does, ready to show.
pub(in crate::plans) struct Facts {
    /// The mash pH: expected, low, high.
    pub(in crate::plans) mash: Option<(String, String, String)>,
    /// Why there is none.
    pub(in crate::plans) no_mash: String,
    /// The same drawn.
    pub(in crate::plans) interval: Option<IntervalBar>,
    /// Kind and words of its badge.
    pub(in crate::plans) mash_badge: (&'static str, String),
    /// The chance that it lands inside the window, in words.
    pub(in crate::plans) mash_chance: String,
    /// Where its doubt comes from.
    pub(in crate::plans) doubts: Vec<DoubtShare>,
    /// Buffering of the mash.
    pub(in crate::plans) buffering: String,
    /// Each window.
    pub(in crate::plans) windows: Vec<WindowBar>,
    /// Limits that are passed.
    pub(in crate::plans) broken: Vec<String>,
    /// Water by vessel: label, before, tank, mash, sparge, whole.
    pub(in crate::plans) waters: Vec<[String; 6]>,
    /// What it costs.
    pub(in crate::plans) cost: String,
    /// What is used and has no price, so that the cost leaves it out.
    pub(in crate::plans) unpriced: Vec<String>,
    /// How many windows are met, of how many.
    pub(in crate::plans) met: (usize, usize),
}

/// What a plan's treatment does.
pub(in crate::plans) fn consequences(plan: &Plan, outcome: &Outcome, settings: &Settings) -> Facts {
    let inputs = &plan.inputs;
    let prediction = compute::prediction(outcome);
    let mash_badge =
        words::mash_finding(outcome).map_or(("unknown", "no pH".to_owned()), |finding| {
            (
                words::standing_kind(finding.standing),
                words::standing(finding.standing),
            )
        });
    let met = outcome
        .findings
        .iter()
        .filter(|it| it.standing == chemistry::plan::Standing::Inside)
        .count();
    Facts {
        mash: prediction.map(|it| {
            (
                format::ph(it.ph.get()),
                format::ph(it.low.get()),
                format::ph(it.high.get()),
            )
        }),
        no_mash: outcome
            .mash
            .as_ref()
            .err()
            .map(ToString::to_string)
            .unwrap_or_default(),
        interval: prediction.map(|it| interval(it, inputs.problem.spec.mash_ph, None, None)),
        mash_chance: prediction.map_or_else(String::new, |it| {
            chance(&inputs.problem.spec.mash_ph, it.ph.get(), it.sd.get())
        }),
        mash_badge,
        doubts: doubts(outcome),
        buffering: outcome
            .mash
            .as_ref()
            .map_or_else(|_| String::new(), |it| format::figure(it.buffering.get())),
        windows: windows(plan, outcome),
        broken: outcome
            .broken
            .iter()
            .map(|it| words::broken(inputs, it))
            .collect(),
        waters: waters(outcome),
        cost: cost(outcome, settings),
        unpriced: unpriced(plan),
        met: (met, outcome.findings.len()),
    }
}

/// The chance that a mash expected so lies in its window, in words.
pub(in crate::plans) fn chance(aim: &Aim, ph: f64, sd: f64) -> String {
    chance_words(aim.chance(Estimate::new(Ph::clamped(ph), sd)).get())
}

/// A chance to lie inside a window, in words.
pub(in crate::plans) fn chance_words(chance: f64) -> String {
    let percent = (chance * 100.0).round();
    // Nothing about a mash is certain, and the normal distribution has thin tails.
    if percent >= 99.0 {
        "more than 98 % chance to lie inside".into()
    } else if percent <= 1.0 {
        "less than 2 % chance to lie inside".into()
    } else {
        format!("{} % chance to lie inside", format::decimals(percent, 0))
    }
}

fn cost(outcome: &Outcome, settings: &Settings) -> String {
    let amount = format::decimals(outcome.cost.get(), 2);
    format!("{} {amount}", settings.currency)
}

/// Waters and materials a plan uses without a price of theirs.
fn unpriced(plan: &Plan) -> Vec<String> {
    let problem = &plan.inputs.problem;
    let waters = plan
        .inputs
        .sources
        .iter()
        .zip(&problem.sources)
        .zip(&plan.shares)
        .filter(|((_, source), share)| share.get() > 0.0 && source.price.get() == 0.0)
        .map(|((label, _), _)| label.name.clone());
    let materials = plan
        .doses
        .iter()
        .filter_map(|dose| problem.shelf.get(dose.material))
        .filter(|item| item.price.get() == 0.0)
        .map(|item| item.name.clone());
    let mut names: Vec<String> = Vec::new();
    for name in waters.chain(materials) {
        if !names.contains(&name) {
            names.push(name);
        }
    }
    names
}

/// The amounts of a draft that may go into one vessel.
pub(in crate::plans) struct Group {
    /// The vessel.
    pub(in crate::plans) vessel: &'static str,
    /// Amounts that are planned.
    pub(in crate::plans) planned: Vec<AmountRow>,
    /// The others.
    pub(in crate::plans) others: Vec<AmountRow>,
}

/// One amount of a draft.
pub(in crate::plans) struct AmountRow {
    /// Name of the amount's field.
    pub(in crate::plans) field: String,
    /// The row's prefix, for its hidden fields.
    pub(in crate::plans) prefix: String,
    /// Place on the shelf.
    pub(in crate::plans) material: String,
    /// The vessel's key.
    pub(in crate::plans) vessel: String,
    /// What it is called.
    pub(in crate::plans) name: String,
    /// Form and strength.
    pub(in crate::plans) detail: String,
    /// As typed.
    pub(in crate::plans) amount: String,
    /// Its unit.
    pub(in crate::plans) unit: &'static str,
    /// What is wrong with it.
    pub(in crate::plans) problem: Option<String>,
}

/// The rows of a treatment form, vessel by vessel.
pub(in crate::plans) fn groups(inputs: &Inputs, typed: &Form, units: Units) -> Vec<Group> {
    let rows: Vec<AmountRow> = (0..typed.rows("doses"))
        .map(|index| {
            let material = typed.row("doses", &index, "material").to_owned();
            let place = material.parse().unwrap_or(usize::MAX);
            let field = format!("doses.{index}.amount");
            AmountRow {
                problem: typed
                    .problem(&field)
                    .or_else(|| typed.problem(&format!("doses.{index}.vessel")))
                    .map(str::to_owned),
                prefix: format!("doses.{index}"),
                vessel: typed.row("doses", &index, "vessel").to_owned(),
                name: inputs
                    .problem
                    .shelf
                    .get(place)
                    .map_or_else(String::new, |item| item.name.clone()),
                detail: words::material_detail(inputs, place),
                amount: typed.value(&field).to_owned(),
                unit: units.label(words::dose_measure(inputs, place)),
                material,
                field,
            }
        })
        .collect();
    let mut groups: Vec<Group> = Vec::new();
    for vessel in Vessel::ALL {
        let group = Group {
            vessel: vessel.name(),
            planned: Vec::new(),
            others: Vec::new(),
        };
        groups.push(group);
    }
    for row in rows {
        let Some(place) = Vessel::ALL
            .iter()
            .position(|vessel| vessel.key() == row.vessel)
        else {
            continue;
        };
        if row.amount.trim().is_empty() && row.problem.is_none() {
            groups[place].others.push(row);
        } else {
            groups[place].planned.push(row);
        }
    }
    groups.retain(|group| !(group.planned.is_empty() && group.others.is_empty()));
    groups
}

/// One line of the weigh-out at the desk.
pub(in crate::plans) struct DoseRow {
    /// The vessel.
    pub(in crate::plans) vessel: &'static str,
    /// The material.
    pub(in crate::plans) name: String,
    /// Form and strength.
    pub(in crate::plans) detail: String,
    /// The lot as planned.
    pub(in crate::plans) lot: String,
    /// Planned, with its unit.
    pub(in crate::plans) planned: String,
    /// What went in, with its unit.
    pub(in crate::plans) actual: String,
    /// Who and when.
    pub(in crate::plans) weighed: String,
    /// Whether it is a first step.
    pub(in crate::plans) step: bool,
}

/// Every line of the weigh-out.
pub(in crate::plans) fn dose_rows(plan: &Plan, units: Units, time_zone: &str) -> Vec<DoseRow> {
    let inputs = &plan.inputs;
    plan.doses
        .iter()
        .map(|dose| {
            let amount = |amount: f64| {
                let (text, unit) = words::dose(units, inputs, dose.material, amount);
                format!("{text} {unit}")
            };
            let item = inputs.problem.shelf.get(dose.material);
            DoseRow {
                vessel: dose.vessel.name(),
                name: item.map_or_else(String::new, |item| item.name.clone()),
                detail: words::material_detail(inputs, dose.material),
                lot: match &dose.weighed {
                    Some(weighed) => weighed.lot.code.clone(),
                    None => inputs
                        .shelf
                        .get(dose.material)
                        .map(|label| label.lot.clone())
                        .unwrap_or_default(),
                },
                planned: amount(dose.planned.get()),
                actual: dose
                    .weighed
                    .as_ref()
                    .map_or_else(String::new, |weighed| amount(weighed.actual.get())),
                weighed: dose.weighed.as_ref().map_or_else(String::new, |weighed| {
                    format!("{}, {}", weighed.by, format::moment(weighed.at, time_zone))
                }),
                step: dose.mash_check.is_some(),
            }
        })
        .collect()
}

/// One way to treat the batch.
pub(in crate::plans) struct WayCard {
    /// Its key.
    pub(in crate::plans) key: &'static str,
    /// Its name.
    pub(in crate::plans) name: &'static str,
    /// Whether the draft is treated so.
    pub(in crate::plans) chosen: bool,
    /// How it ends, in one line.
    pub(in crate::plans) ending: String,
    /// Whether everything is met.
    pub(in crate::plans) met: bool,
    /// What is missed and what stands in the way.
    pub(in crate::plans) shortfalls: Vec<String>,
    /// Shares of the sources, in words.
    pub(in crate::plans) shares: String,
    /// Additions, in words.
    pub(in crate::plans) doses: Vec<String>,
    /// The mash pH.
    pub(in crate::plans) mash: String,
    /// What it costs.
    pub(in crate::plans) cost: String,
    /// Whether there is anything to take.
    pub(in crate::plans) possible: bool,
}

/// The four ways, side by side.
pub(in crate::plans) fn way_cards(
    plan: &Plan,
    ways: &[(Way, Ending)],
    settings: &Settings,
) -> Vec<WayCard> {
    let inputs = &plan.inputs;
    ways.iter()
        .map(|(way, ending)| {
            let treatment = ending.treatment();
            let shortfalls = match ending {
                Ending::Met(_) => Vec::new(),
                Ending::Closest { shortfalls, .. } => shortfalls
                    .iter()
                    .map(|it| words::shortfall(inputs, it))
                    .collect(),
                Ending::Impossible(conflict) => words::conflict(inputs, conflict),
            };
            let shares = treatment.map_or_else(String::new, |it| {
                let used = inputs
                    .sources
                    .iter()
                    .zip(&it.shares)
                    .filter(|(_, share)| share.get() > 0.0005);
                let used: Vec<String> = used
                    .map(|(source, share)| {
                        format!("{} {}", format::percent(share.get()), source.name)
                    })
                    .collect();
                used.join(", ")
            });
            let doses = treatment.map_or_else(Vec::new, |it| {
                compute::listed(inputs, &it.doses)
                    .iter()
                    .map(|dose| {
                        let (amount, unit) =
                            words::dose(settings.units, inputs, dose.material, dose.planned.get());
                        let name = inputs
                            .problem
                            .shelf
                            .get(dose.material)
                            .map_or("", |item| item.name.as_str());
                        format!("{amount} {unit} {name}, {}", dose.vessel.name())
                    })
                    .collect()
            });
            WayCard {
                key: way.key(),
                name: words::way(*way),
                chosen: plan.choice == super::Choice::Way(*way),
                ending: words::ending(ending),
                met: matches!(ending, Ending::Met(_)),
                shortfalls,
                shares,
                doses,
                mash: treatment
                    .and_then(|it| compute::prediction(&it.outcome))
                    .map_or_else(String::new, |it| format::ph(it.ph.get())),
                cost: treatment.map_or_else(String::new, |it| cost(&it.outcome, settings)),
                possible: treatment.is_some(),
            }
        })
        .collect()
}

/// Everything the plan takes for granted, in words.
pub(in crate::plans) fn assumed(inputs: &Inputs) -> Vec<String> {
    let sources = inputs.sources.iter().flat_map(|source| {
        source
            .assumed
            .iter()
            .map(|it| format!("{}: {it}", source.name))
    });
    let malts = inputs
        .problem
        .grist
        .iter()
        .zip(&inputs.malts)
        .filter(|(_, label)| label.known_by.contains("assumed"))
        .map(|(item, label)| format!("{}: {}", item.malt.name, label.known_by));
    let settings = &inputs.problem.settings;
    let mash = [
        format!(
            "Acid set free by calcium in the mash: {} ± {} equivalents for each; magnesium half of it.",
            format::decimals(settings.calcium_release.value.get(), 2),
            format::decimals(settings.calcium_release.sd, 2)
        ),
        format!(
            "Share of the carbon dioxide that escapes: {} ± {}.",
            format::decimals(settings.carbon_dioxide_lost.value.get(), 2),
            format::decimals(settings.carbon_dioxide_lost.sd, 2)
        ),
    ];
    sources.chain(malts).chain(mash).collect()
}

/// The grist: name, mass, how its acidity is known.
pub(in crate::plans) fn grist(inputs: &Inputs, units: Units) -> Vec<(String, String, String)> {
    inputs
        .problem
        .grist
        .iter()
        .zip(&inputs.malts)
        .map(|(item, label)| {
            (
                item.malt.name.clone(),
                units.show(Shown::Malt, item.mass.get()),
                label.known_by.clone(),
            )
        })
        .collect()
}

/// The volumes, with their units.
pub(in crate::plans) fn volumes(inputs: &Inputs, units: Units) -> Vec<(&'static str, String)> {
    let volumes = &inputs.problem.volumes;
    vec![
        (
            "Beer in the fermenter",
            units.show(Shown::Batch, inputs.batch.get()),
        ),
        ("Liquor", units.show(Shown::Volume, volumes.liquor.get())),
        (
            "Mash liquor",
            units.show(Shown::Volume, volumes.mash.value.get()),
        ),
        (
            "Sparge liquor",
            units.show(Shown::Volume, volumes.sparge.get()),
        ),
    ]
}

/// What was learned and what it changes.
pub(in crate::plans) struct LearnedWords {
    /// In sentences.
    pub(in crate::plans) words: Vec<String>,
}

/// What learning does to this plan's prediction. `None` where no batch was closed yet.
pub(in crate::plans) fn learned(
    plan: &Plan,
    outcome: &Outcome,
    lesson: &Lesson,
) -> Result<Option<LearnedWords>, Error> {
    let mut said = Vec::new();
    if plan.inputs.learned.replaces_malt_doubt {
        let mut inputs = plan.inputs.clone();
        inputs.problem.offset =
            chemistry::quantity::Estimate::new(chemistry::quantity::PhShift::constant(0.0), 0.0);
        inputs.learned = Learned::default();
        let untrained = compute::as_weighed(&Plan {
            inputs,
            ..plan.clone()
        })?;
        let (with, without) = (
            compute::prediction(outcome),
            compute::prediction(&untrained),
        );
        if let (Some(with), Some(without)) = (with, without) {
            let half = |it: &Prediction| (it.high.get() - it.low.get()) / 2.0;
            said.push(format!(
                "{} closed batches say that this mash settles {} pH {} what the balance says.",
                plan.inputs.learned.batches,
                format::ph(plan.inputs.problem.offset.value.get().abs()),
                if plan.inputs.problem.offset.value.get() < 0.0 {
                    "below"
                } else {
                    "above"
                }
            ));
            // Of the figures as they are printed, so that the sentence adds up.
            let hundredths = |it: &Prediction| (half(it) * 100.0).round() / 100.0;
            let change = hundredths(&without) - hundredths(&with);
            let compared = if change.abs() < 0.005 {
                "as wide".to_owned()
            } else {
                let which = if change < 0.0 { "wider" } else { "narrower" };
                format!("{which} by {} pH", format::ph(change.abs()))
            };
            said.push(format!(
                "The 90 % interval is ± {} with what was learned and would be ± {} without: {compared}. Readings stand in the place of what is assumed of the malts.",
                format::ph(half(&with)),
                format::ph(half(&without)),
            ));
        }
    } else if lesson.outcomes > 0 {
        let why = match lesson.skill {
            _ if lesson.outcomes < 5 => "from five on they are used, if they foretell readings better than the balance alone".to_owned(),
            Some(skill) if skill <= 0.0 => "they do not foretell readings better than the balance alone, so they are not used".to_owned(),
            _ => "read the inputs anew to use what they teach".to_owned(),
        };
        said.push(format!(
            "Closed batches with a reading so far: {}; {why}.",
            lesson.outcomes
        ));
    }
    Ok((!said.is_empty()).then_some(LearnedWords { words: said }))
}

/// What can hurt about the materials of a plan: those with the same cautions together,
/// without the line that all of them end with.
pub(in crate::plans) fn cautions(plan: &Plan) -> Vec<(String, Vec<&'static str>)> {
    let mut told: Vec<(Vec<&str>, Vec<&'static str>)> = Vec::new();
    for dose in &plan.doses {
        let Some(item) = plan.inputs.problem.shelf.get(dose.material) else {
            continue;
        };
        let mut cautions = item.material.substance().cautions();
        cautions.retain(|caution| *caution != SAFETY_DATA_SHEET);
        match told.iter_mut().find(|(_, same)| *same == cautions) {
            Some((names, _)) if names.contains(&item.name.as_str()) => {}
            Some((names, _)) => names.push(&item.name),
            None => told.push((vec![&item.name], cautions)),
        }
    }
    told.into_iter()
        .map(|(names, cautions)| (names.join(", "), cautions))
        .collect()
}
