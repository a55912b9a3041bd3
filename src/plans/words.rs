//! What a plan has to say, in sentences: which window is missed, what stands in the way,
//! what giving way would buy.

use chemistry::material::DoseUnit;
use chemistry::plan::{
    Broken, Conflict, Ending, Finding, Limit, Measure, Obstacle, Outcome, Relief, Requirement,
    Shortfall, Standing, Way,
};

use super::Inputs;
use crate::brewery::Units;
use crate::web::format;
use crate::web::units::Measure as Shown;

/// A way to treat a batch, in words.
pub const fn way(way: Way) -> &'static str {
    match way {
        Way::ClosestToPreferred => "Closest to preferred",
        Way::FewestAdditions => "Fewest additions",
        Way::LeastBlendingWater => "Least blending water",
        Way::Cheapest => "Cheapest",
    }
}

/// The first letter large, for the beginning of a line.
pub fn capital(text: &str) -> String {
    let mut letters = text.chars();
    letters.next().map_or_else(String::new, |first| {
        first.to_uppercase().chain(letters).collect()
    })
}

/// A figure with its unit.
pub fn measure(measure: Measure) -> String {
    match measure {
        Measure::Concentration(value) => format!("{} mg/L", format::figure(value.get())),
        Measure::Alkalinity(value) => format!("{} mg/L as CaCO₃", format::figure(value.get())),
        Measure::Ratio(value) => format::decimals(value.get(), 2),
        Measure::Ph(value) => format!("pH {}", format::ph(value.get())),
        Measure::PhShift(value) => format!("{} pH", format::ph(value.get())),
        Measure::Share(value) => format::percent(value.get()),
        Measure::Dose(value) => format::figure(value.get()),
    }
}

/// What a window is for.
pub fn requirement(requirement: Requirement) -> String {
    match requirement {
        Requirement::MashPh => "Mash pH".into(),
        Requirement::SulfateToChloride => "Sulfate to chloride".into(),
        other => capital(&other.to_string()),
    }
}

/// A limit, with the names the brewery uses.
pub fn limit(inputs: &Inputs, limit: Limit) -> String {
    let source = |index: usize| {
        inputs
            .sources
            .get(index)
            .map_or("a source", |source| source.name.as_str())
    };
    match limit {
        Limit::LowestShare(index) => format!("the least share of {}", source(index)),
        Limit::HighestShare(index) => format!("the greatest share of {}", source(index)),
        Limit::Amount(index) => {
            let name = inputs
                .problem
                .shelf
                .get(index)
                .map_or("a material", |item| item.name.as_str());
            format!("the most {name} this batch may take")
        }
        Limit::Ion(ion) => format!("the limit on {}", ion.name()),
        Limit::LowestAlkalinity(vessel) => format!("no free acid in the {}", vessel.name()),
    }
}

fn obstacle(inputs: &Inputs, obstacle: Obstacle) -> String {
    match obstacle {
        Obstacle::Limit(which) => limit(inputs, which),
        Obstacle::Requirement(which) => format!("the window for {which}"),
    }
}

/// How a figure stands, short: “within”, “12 mg/L below”.
pub fn standing(standing: Standing) -> String {
    match standing {
        Standing::Inside => "within".into(),
        Standing::Below(by) => format!("{} below", by_how_much(by)),
        Standing::Above(by) => format!("{} above", by_how_much(by)),
    }
}

fn by_how_much(by: Measure) -> String {
    match by {
        Measure::PhShift(value) => format::ph(value.get()),
        other => measure(other),
    }
}

/// The kind of badge a standing gets.
pub const fn standing_kind(standing: Standing) -> &'static str {
    match standing {
        Standing::Inside => "within",
        Standing::Below(_) => "below",
        Standing::Above(_) => "above",
    }
}

/// One shortfall in sentences: what is missed, what stands in the way, what giving way
/// would buy.
pub fn shortfall(inputs: &Inputs, shortfall: &Shortfall) -> String {
    let mut words = format!(
        "{} is {}.",
        requirement(shortfall.requirement),
        standing(shortfall.standing)
    );
    match shortfall.in_the_way.as_slice() {
        [] => words.push_str(" Nothing on the shelf and no source could bring it nearer."),
        [only] => words.push_str(&format!(" In the way: {}.", obstacle(inputs, *only))),
        [worst, others @ ..] => {
            let others: Vec<String> = others
                .iter()
                .map(|other| obstacle(inputs, *other))
                .collect();
            words.push_str(&format!(
                " In the way: {} above all, then {}.",
                obstacle(inputs, *worst),
                others.join(", ")
            ));
        }
    }
    if let Some(relief) = &shortfall.relief {
        words.push(' ');
        words.push_str(&relief_words(inputs, shortfall.requirement, relief));
    }
    words
}

fn relief_words(inputs: &Inputs, missed: Requirement, relief: &Relief) -> String {
    let to = match (relief.obstacle, relief.to) {
        (Obstacle::Limit(Limit::Amount(index)), Measure::Dose(amount)) => {
            let unit = inputs
                .problem
                .shelf
                .get(index)
                .map_or("", |item| item.material.unit().symbol());
            format!("{} {unit}", format::figure(amount.get()))
        }
        (_, to) => measure(to),
    };
    let what = capital(&obstacle(inputs, relief.obstacle));
    match relief.leaves {
        Standing::Inside => format!("{what} going to {to} would bring {missed} inside."),
        other => format!(
            "{what} going to {to} would leave {missed} {}.",
            standing(other)
        ),
    }
}

/// Limits that contradict each other, in sentences.
pub fn conflict(inputs: &Inputs, conflict: &Conflict) -> Vec<String> {
    let mut words: Vec<String> = conflict
        .broken
        .iter()
        .map(|which| broken(inputs, which))
        .collect();
    if let Some(first) = conflict.broken.first() {
        words.push(if conflict.left_when_lifted.is_empty() {
            format!("Lifting {} would be enough.", limit(inputs, first.limit))
        } else {
            let left: Vec<String> = conflict
                .left_when_lifted
                .iter()
                .map(|which| limit(inputs, *which))
                .collect();
            format!(
                "Lifting {} would still leave {}.",
                limit(inputs, first.limit),
                left.join(", ")
            )
        });
    }
    words
}

/// One limit that is passed.
pub fn broken(inputs: &Inputs, broken: &Broken) -> String {
    format!(
        "Passes {}: it reaches {}.",
        limit(inputs, broken.limit),
        measure(broken.reaches)
    )
}

/// The ending of a way, in one line.
pub fn ending(ending: &Ending) -> String {
    match ending {
        Ending::Met(_) => "Everything is met".into(),
        Ending::Closest { shortfalls, .. } if shortfalls.is_empty() => {
            "Met but for the steps of the scale".into()
        }
        Ending::Closest { shortfalls, .. } => {
            let names: Vec<String> = shortfalls
                .iter()
                .map(|it| it.requirement.to_string())
                .collect();
            format!("Not met: {}", names.join(", "))
        }
        Ending::Impossible(_) => "No treatment keeps every limit".into(),
    }
}

/// An amount as the weigh-out shows it, to the step of its scale, and its unit.
pub fn dose(units: Units, inputs: &Inputs, material: usize, amount: f64) -> (String, &'static str) {
    let item = inputs.problem.shelf.get(material);
    let step = item.map_or(0.0, |item| item.step.get());
    let shown = dose_measure(inputs, material);
    let text = if step > 0.0 {
        units.stepped(shown, amount, step)
    } else {
        format::figure(units.shown(shown, amount))
    };
    (text, units.label(shown))
}

/// Whether a material is weighed or poured.
pub fn dose_measure(inputs: &Inputs, material: usize) -> Shown {
    match inputs
        .problem
        .shelf
        .get(material)
        .map(|item| item.material.unit())
    {
        Some(DoseUnit::Millilitres) => Shown::DoseVolume,
        _ => Shown::DoseMass,
    }
}

/// How much a material is, before it reaches the water: its form and strength.
pub fn material_detail(inputs: &Inputs, material: usize) -> String {
    use chemistry::material::Strength;
    let Some(item) = inputs.problem.shelf.get(material) else {
        return String::new();
    };
    let substance = item.material.substance();
    match item.material.strength() {
        None => format!(
            "{}, solid, assay {}",
            substance.formula(),
            format::percent(item.material.assay().value.get())
        ),
        Some(Strength::WeightPercent { share, density }) => format!(
            "{} w/w, {} g/mL",
            format::percent(share.get()),
            format::decimals(density.get(), 2)
        ),
        Some(Strength::WeightPerVolume(grams)) => format!("{} g/L", format::figure(grams.get())),
        Some(Strength::Titrated { acid, .. }) => format!("{} meq/mL", format::figure(acid.get())),
    }
}

/// The finding about the mash pH, in words.
pub fn mash_finding(outcome: &Outcome) -> Option<&Finding> {
    outcome.finding(Requirement::MashPh)
}
