//! What the page of a plan shows, worked out: windows as bars, the mash pH with its
//! interval, where the doubt comes from, amounts per vessel, the four ways.

use chemistry::ion::Ion;
use chemistry::material::{SAFETY_DATA_SHEET, Vessel};
use chemistry::plan::{Ending, Finding, Measure, Outcome, Requirement, Way, Window};
use chemistry::put_right::Aim;
use chemistry::quantity::{Fraction, MgPerL};
use chemistry::water::Water;

use super::inputs::{Inputs, Learned, SHOWN_IONS};
use super::learning::Lesson;
use super::{Plan, Prediction, compute, words};
use crate::brewery::{Settings, Units};
use crate::error::Error;
use crate::web::chart::{DoubtShare, IntervalBar, Scale, WindowBar};
use crate::web::form::Form;
use crate::web::format;
use crate::web::units::Measure as Shown;

/// Everything a treatment does, ready to show.
pub(super) struct Facts {
    /// The mash pH: expected, low, high.
    pub(super) mash: Option<(String, String, String)>,
    /// Why there is none.
    pub(super) no_mash: String,
    /// The same drawn.
    pub(super) interval: Option<IntervalBar>,
    /// Kind and words of its badge.
    pub(super) mash_badge: (&'static str, String),
    /// Where its doubt comes from.
    pub(super) doubts: Vec<DoubtShare>,
    /// Buffering of the mash.
    pub(super) buffering: String,
    /// Each window.
    pub(super) windows: Vec<WindowBar>,
    /// Limits that are passed.
    pub(super) broken: Vec<String>,
    /// Water by vessel: label, before, tank, mash, sparge, whole.
    pub(super) waters: Vec<[String; 6]>,
    /// What it costs.
    pub(super) cost: String,
    /// How many windows are met, of how many.
    pub(super) met: (usize, usize),
}

/// What a plan's treatment does.
pub(super) fn consequences(plan: &Plan, outcome: &Outcome, settings: &Settings) -> Facts {
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
        interval: prediction.map(|it| interval(it, inputs.problem.spec.mash_ph, None)),
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
        cost: format!(
            "{} {}",
            format::decimals(outcome.cost.get(), 2),
            settings.currency
        ),
        met: (met, outcome.findings.len()),
    }
}

/// The mash pH as a bar: window, target, interval, and a reading where there is one.
pub(super) fn interval(
    prediction: Prediction,
    aim: Aim,
    reading: Option<(f64, f64)>,
) -> IntervalBar {
    let (low, high, ph) = (
        prediction.low.get(),
        prediction.high.get(),
        prediction.ph.get(),
    );
    let read = reading
        .iter()
        .flat_map(|(ph, sd)| [ph - 1.645 * sd, ph + 1.645 * sd]);
    let values = [low, high, aim.low.get(), aim.high.get()]
        .into_iter()
        .chain(read);
    let scale = Scale::around(values, 0.4);
    let step = if high - low > 1.0 { 0.5 } else { 0.1 };
    let text = format!(
        "Mash pH expected {}, nine times in ten between {} and {}. Window {} to {}, target {}.",
        format::ph(ph),
        format::ph(low),
        format::ph(high),
        format::ph(aim.low.get()),
        format::ph(aim.high.get()),
        format::ph(aim.target.get())
    );
    IntervalBar {
        ticks: scale.ticks(step, 1),
        window: Some(scale.span(
            Some(aim.low.get()),
            Some(aim.high.get()),
            format!(
                "{} to {}",
                format::ph(aim.low.get()),
                format::ph(aim.high.get())
            ),
        )),
        target: Some(scale.mark(aim.target.get(), format::ph(aim.target.get()))),
        interval: Some(scale.span(
            Some(low),
            Some(high),
            format!("{} and {}", format::ph(low), format::ph(high)),
        )),
        expected: Some(scale.mark(ph, format::ph(ph))),
        reading: reading
            .map(|(ph, sd)| scale.mark(ph, format!("{} ± {}", format::ph(ph), format::ph(sd)))),
        reading_doubt: reading.map(|(ph, sd)| {
            scale.span(Some(ph - 1.645 * sd), Some(ph + 1.645 * sd), String::new())
        }),
        text,
    }
}

fn doubts(outcome: &Outcome) -> Vec<DoubtShare> {
    let Ok(mash) = &outcome.mash else {
        return Vec::new();
    };
    // Less than a hundredth of the variance is nothing to look at.
    let told: Vec<_> = mash
        .influences
        .iter()
        .filter(|it| it.share.get() >= 0.01)
        .collect();
    told.iter()
        .map(|influence| DoubtShare {
            label: influence.name.clone(),
            width: (influence.share.get() * 1000.0).round() / 10.0,
            text: format!(
                "{}, ± {} pH",
                format::percent(influence.share.get()),
                format::decimals(influence.effect.get().abs(), 3)
            ),
        })
        .collect()
}

fn windows(plan: &Plan, outcome: &Outcome) -> Vec<WindowBar> {
    let inputs = &plan.inputs;
    let spec = &inputs.problem.spec;
    let ions = SHOWN_IONS.iter().filter_map(|ion| {
        let window = spec.ions[*ion]?;
        let finding = outcome.finding(Requirement::Ion(*ion))?;
        let doubt = blended_sd(inputs, &plan.shares, *ion);
        Some(bar(
            finding,
            in_numbers(window, MgPerL::get),
            Some(outcome.blend.ions[*ion].get()),
            Some(doubt),
            "mg/L",
        ))
    });
    let calcium = spec.mash_calcium.and_then(|window| {
        let finding = outcome.finding(Requirement::MashCalcium)?;
        let before = outcome.blend.ions[Ion::Calcium].get();
        Some(bar(
            finding,
            in_numbers(window, MgPerL::get),
            Some(before),
            None,
            "mg/L",
        ))
    });
    let ratio = spec.sulfate_to_chloride.and_then(|window| {
        let finding = outcome.finding(Requirement::SulfateToChloride)?;
        let before = outcome.sulfate_to_chloride_before.map(|ratio| ratio.get());
        Some(bar(
            finding,
            in_numbers(window, |ratio| ratio.get()),
            before,
            None,
            "",
        ))
    });
    let sparge = spec.sparge_alkalinity.and_then(|window| {
        let finding = outcome.finding(Requirement::SpargeAlkalinity)?;
        let before = outcome.blend.alkalinity_as_caco3().get();
        Some(bar(
            finding,
            in_numbers(window, |alkalinity| alkalinity.get()),
            Some(before),
            None,
            "mg/L as CaCO₃",
        ))
    });
    ions.chain(calcium).chain(ratio).chain(sparge).collect()
}

fn in_numbers<T: Copy>(window: Window<T>, get: impl Fn(T) -> f64) -> Window<f64> {
    Window {
        low: window.low.map(&get),
        high: window.high.map(&get),
        preferred: window.preferred.map(&get),
        priority: window.priority,
    }
}

/// Sources are tested independently, so their errors add by squares.
fn blended_sd(inputs: &Inputs, shares: &[Fraction], ion: Ion) -> f64 {
    let sum: f64 = inputs
        .sources
        .iter()
        .zip(shares)
        .map(|(source, share)| (share.get() * source.ion_sd[ion].get()).powi(2))
        .sum();
    sum.sqrt()
}

fn bar(
    finding: &Finding,
    window: Window<f64>,
    before: Option<f64>,
    sd: Option<f64>,
    unit: &str,
) -> WindowBar {
    let ratio = matches!(finding.value, Measure::Ratio(_));
    let figure = |value: f64| {
        if ratio {
            format::decimals(value, 2)
        } else {
            format::figure(value)
        }
    };
    let with_unit = |value: f64| format!("{} {unit}", figure(value)).trim_end().to_owned();
    let after = finding.value.get();
    let values = [
        Some(0.0),
        Some(after),
        before,
        window.low,
        window.high,
        window.preferred,
    ];
    let scale =
        Scale::around(values.into_iter().flatten(), if ratio { 1.0 } else { 20.0 }).from_zero();
    let label = words::requirement(finding.requirement);
    let window_words = match (window.low, window.high) {
        (Some(low), Some(high)) => format!("{} to {}", figure(low), with_unit(high)),
        (Some(low), None) => format!("from {}", with_unit(low)),
        (None, Some(high)) => format!("up to {}", with_unit(high)),
        (None, None) => "open".into(),
    };
    let standing = words::standing(finding.standing);
    let after_words = match sd.filter(|sd| *sd > 0.0) {
        Some(sd) => format!("{} ± {} {unit}", figure(after), format::doubt(sd)),
        None => with_unit(after),
    };
    WindowBar {
        text: format!(
            "{label}: {}{after_words}, window {window_words}, {standing}.",
            before
                .map(|before| format!("{} before, then ", with_unit(before)))
                .unwrap_or_default()
        ),
        label,
        state: words::standing_kind(finding.standing),
        state_words: standing,
        low: window.low.map(|low| scale.place(low)),
        high: window.high.map(|high| scale.place(high)),
        window: scale.span(window.low, window.high, window_words),
        preferred: window
            .preferred
            .map(|preferred| scale.mark(preferred, with_unit(preferred))),
        before: before.map(|before| scale.mark(before, figure(before))),
        after: Some(scale.mark(after, after_words)),
        after_doubt: sd
            .filter(|sd| *sd > 0.0)
            .map(|sd| scale.span(Some(after - 1.645 * sd), Some(after + 1.645 * sd), "")),
    }
}

fn waters(outcome: &Outcome) -> Vec<[String; 6]> {
    let five = |figure: &dyn Fn(&Water) -> f64| {
        [
            &outcome.blend,
            &outcome.tank,
            &outcome.mash_liquor,
            &outcome.sparge_liquor,
            &outcome.whole,
        ]
        .map(|water| format::figure(figure(water)))
    };
    let row = |label: String, [blend, tank, mash, sparge, whole]: [String; 5]| {
        [label, blend, tank, mash, sparge, whole]
    };
    let added = |ion: Ion| outcome.whole.ions[ion].get() > 0.05;
    let ions = SHOWN_IONS.into_iter().chain(
        [Ion::Lactate, Ion::Citrate, Ion::Phosphate]
            .into_iter()
            .filter(|ion| added(*ion)),
    );
    ions.map(|ion| {
        let label = format!("{} {}, mg/L", words::capital(ion.name()), ion.symbol());
        row(label, five(&|water: &Water| water.ions[ion].get()))
    })
    .chain([row(
        "Alkalinity, mg/L as CaCO₃".into(),
        five(&|water: &Water| water.alkalinity_as_caco3().get()),
    )])
    .collect()
}

/// The amounts of a draft that may go into one vessel.
pub(super) struct Group {
    /// The vessel.
    pub(super) vessel: &'static str,
    /// Amounts that are planned.
    pub(super) planned: Vec<AmountRow>,
    /// The others.
    pub(super) others: Vec<AmountRow>,
}

/// One amount of a draft.
pub(super) struct AmountRow {
    /// Name of the amount's field.
    pub(super) field: String,
    /// The row's prefix, for its hidden fields.
    pub(super) prefix: String,
    /// Place on the shelf.
    pub(super) material: String,
    /// The vessel's key.
    pub(super) vessel: String,
    /// What it is called.
    pub(super) name: String,
    /// Form and strength.
    pub(super) detail: String,
    /// As typed.
    pub(super) amount: String,
    /// Its unit.
    pub(super) unit: &'static str,
    /// What is wrong with it.
    pub(super) problem: Option<String>,
}

/// The rows of a treatment form, vessel by vessel.
pub(super) fn groups(inputs: &Inputs, typed: &Form, units: Units) -> Vec<Group> {
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
pub(super) struct DoseRow {
    /// The vessel.
    pub(super) vessel: &'static str,
    /// The material.
    pub(super) name: String,
    /// Form and strength.
    pub(super) detail: String,
    /// The lot as planned.
    pub(super) lot: String,
    /// Planned, with its unit.
    pub(super) planned: String,
    /// What went in, with its unit.
    pub(super) actual: String,
    /// Who and when.
    pub(super) weighed: String,
    /// Whether it is a first step.
    pub(super) step: bool,
}

/// Every line of the weigh-out.
pub(super) fn dose_rows(plan: &Plan, units: Units, time_zone: &str) -> Vec<DoseRow> {
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
                    Some(weighed) => weighed.lot.clone(),
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
pub(super) struct WayCard {
    /// Its key.
    pub(super) key: &'static str,
    /// Its name.
    pub(super) name: &'static str,
    /// Whether the draft is treated so.
    pub(super) chosen: bool,
    /// How it ends, in one line.
    pub(super) ending: String,
    /// Whether everything is met.
    pub(super) met: bool,
    /// What is missed and what stands in the way.
    pub(super) shortfalls: Vec<String>,
    /// Shares of the sources, in words.
    pub(super) shares: String,
    /// Additions, in words.
    pub(super) doses: Vec<String>,
    /// The mash pH.
    pub(super) mash: String,
    /// What it costs.
    pub(super) cost: String,
    /// Whether there is anything to take.
    pub(super) possible: bool,
}

/// The four ways, side by side.
pub(super) fn way_cards(plan: &Plan, ways: &[(Way, Ending)], settings: &Settings) -> Vec<WayCard> {
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
                cost: treatment.map_or_else(String::new, |it| {
                    format!(
                        "{} {}",
                        format::decimals(it.outcome.cost.get(), 2),
                        settings.currency
                    )
                }),
                possible: treatment.is_some(),
            }
        })
        .collect()
}

/// Everything the plan takes for granted, in words.
pub(super) fn assumed(inputs: &Inputs) -> Vec<String> {
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
pub(super) fn grist(inputs: &Inputs, units: Units) -> Vec<(String, String, String)> {
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
pub(super) fn volumes(inputs: &Inputs, units: Units) -> Vec<(&'static str, String)> {
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
pub(super) struct LearnedWords {
    /// In sentences.
    pub(super) words: Vec<String>,
}

/// What learning does to this plan's prediction. `None` where no batch was closed yet.
pub(super) fn learned(
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
                "The 90 % interval is ± {} with what was learned and would be ± {} without: {compared}, because readings stand in the place of what is assumed of the malts.",
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
            "{} closed batches with a reading so far; {why}.",
            lesson.outcomes
        ));
    }
    Ok((!said.is_empty()).then_some(LearnedWords { words: said }))
}

/// What can hurt about the materials of a plan: those with the same cautions together,
/// without the line that all of them end with.
pub(super) fn cautions(plan: &Plan) -> Vec<(String, Vec<&'static str>)> {
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
