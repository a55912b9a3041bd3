//! The figures of a treatment as bars and tables: the mash pH with its interval, each
//! window before and after, where the doubt comes from, the liquor vessel by vessel.

use chemistry::ion::Ion;
use chemistry::material::Vessel;
use chemistry::plan::{Finding, Measure, Outcome, Requirement, Window};
use chemistry::put_right::Aim;
use chemistry::quantity::{Fraction, Litres, MgPerL, NINETY_PERCENT};
use chemistry::water::Water;

use crate::plans::inputs::{Inputs, SHOWN_IONS};
use crate::plans::{Plan, Prediction, words};
use crate::web::chart::{DoubtShare, IntervalBar, Scale, WindowBar};
use crate::web::format;

/// The mash pH as a bar: window, target, interval, and a reading where there is one.
pub(in crate::plans) fn interval(
    prediction: Prediction,
    aim: Aim,
    reading: Option<(f64, f64)>,
    now: Option<(f64, f64)>,
) -> IntervalBar {
    let (low, high, ph) = (
        prediction.low.get(),
        prediction.high.get(),
        prediction.ph.get(),
    );
    let read = reading
        .iter()
        .chain(&now)
        .flat_map(|(ph, sd)| [ph - NINETY_PERCENT * sd, ph + NINETY_PERCENT * sd]);
    let values = [low, high, aim.low.get(), aim.high.get()]
        .into_iter()
        .chain(read);
    let scale = Scale::around(values, 0.4);
    let step = if high - low > 1.0 { 0.5 } else { 0.1 };
    let mut text = format!(
        "Mash pH expected {}, nine times in ten between {} and {}. Window {} to {}, target {}.",
        format::ph(ph),
        format::ph(low),
        format::ph(high),
        format::ph(aim.low.get()),
        format::ph(aim.high.get()),
        format::ph(aim.target.get())
    );
    if let Some((ph, sd)) = now {
        text.push_str(&format!(
            " After the reading before and what went in since {} ± {} was expected.",
            format::ph(ph),
            format::ph(sd)
        ));
    }
    if let Some((ph, sd)) = reading {
        text.push_str(&format!(" Read {} ± {}.", format::ph(ph), format::ph(sd)));
    }
    let with_doubt =
        |(ph, sd): (f64, f64)| scale.mark(ph, format!("{} ± {}", format::ph(ph), format::ph(sd)));
    let reach = |(ph, sd): (f64, f64)| {
        scale.span(
            Some(ph - NINETY_PERCENT * sd),
            Some(ph + NINETY_PERCENT * sd),
            String::new(),
        )
    };
    IntervalBar {
        now: now.map(with_doubt),
        now_doubt: now.map(reach),
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
        reading: reading.map(with_doubt),
        reading_doubt: reading.map(reach),
        text,
    }
}

pub(super) fn doubts(outcome: &Outcome) -> Vec<DoubtShare> {
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
            label: if influence.name.starts_with("pH") {
                influence.name.clone()
            } else {
                words::capital(&influence.name)
            },
            width: (influence.share.get() * 1000.0).round() / 10.0,
            text: format!(
                "{}, ± {} pH",
                format::percent(influence.share.get()),
                format::decimals(influence.effect.get().abs(), 3)
            ),
        })
        .collect()
}

pub(super) fn windows(plan: &Plan, outcome: &Outcome) -> Vec<WindowBar> {
    let inputs = &plan.inputs;
    let spec = &inputs.problem.spec;
    let in_the_mash = |vessel| match vessel {
        Vessel::LiquorTank => Some(inputs.problem.volumes.liquor),
        Vessel::Mash => Some(inputs.problem.volumes.mash.value),
        Vessel::SpargeLiquor | Vessel::Kettle => None,
    };
    let ions = SHOWN_IONS.iter().filter_map(|ion| {
        let window = spec.ions[*ion]?;
        let finding = outcome.finding(Requirement::Ion(*ion))?;
        let doubt = treated_sd(plan, *ion, &|_| Some(inputs.problem.volumes.liquor));
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
            Some(treated_sd(plan, Ion::Calcium, &in_the_mash)),
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

/// One standard deviation of an ion after treatment: the water's as tested, and what each
/// material holds. Doses of one material are as wrong together; materials are not.
/// `diluted` says into how much the doses of a vessel go, or that they do not count.
fn treated_sd(plan: &Plan, ion: Ion, diluted: &dyn Fn(Vessel) -> Option<Litres>) -> f64 {
    let materials = plan.inputs.problem.shelf.iter().enumerate();
    let squares = materials.map(|(index, item)| {
        let added: f64 = plan
            .doses
            .iter()
            .filter(|dose| dose.material == index)
            .filter_map(|dose| Some((dose, diluted(dose.vessel)?)))
            .map(|(dose, volume)| {
                let lot = dose.weighed.as_ref().and_then(|it| it.lot.material);
                let material = lot.unwrap_or(item.material);
                let brought = material.contribution(dose.amount());
                brought.added_to(&Water::pure(), volume).ions[ion].get()
            })
            .sum();
        (added * item.material.relative_sd().get()).powi(2)
    });
    let water = blended_sd(&plan.inputs, &plan.shares, ion);
    (water.powi(2) + squares.sum::<f64>()).sqrt()
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
        after_doubt: sd.filter(|sd| *sd > 0.0).map(|sd| {
            scale.span(
                Some(after - NINETY_PERCENT * sd),
                Some(after + NINETY_PERCENT * sd),
                "",
            )
        }),
    }
}

pub(super) fn waters(outcome: &Outcome) -> Vec<[String; 6]> {
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
