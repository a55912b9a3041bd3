//! The pH of a mash against the dose of one material: window, prediction, readings and
//! the proposed step.

use chemistry::mash::MashInputs;
use chemistry::material::{Material, Vessel};
use chemistry::put_right::{as_read, curve, strength};
use chemistry::quantity::{DoseAmount, NINETY_PERCENT, Ph};

use crate::brewery::Units;
use crate::id::UtcTime;
use crate::plans::{Dose, MashCheck, Plan, Stage, compute, mash_checks, words};
use crate::web::chart::{DoseCurve, Level, Point, Scale};
use crate::web::format;

/// The curve of a reading of the mash. Steps with other materials count as what does the
/// same. `None` where nothing on the shelf could move this mash.
pub(in crate::plans) fn dose_curve(
    plan: &Plan,
    checks: &[MashCheck],
    check: &MashCheck,
    units: Units,
) -> Option<DoseCurve> {
    if check.stage != Stage::Mash {
        return None;
    }
    let index = mash_checks::curve_material(plan, check)?;
    let item = plan.inputs.problem.shelf.get(index)?;
    let aim = plan.inputs.problem.spec.mash_ph;
    let ground = compute::mash_as_weighed(&without_steps(plan, |_| false));
    let shown = words::dose_measure(&plan.inputs, index);
    let unit = units.label(shown);

    // How much of this material does what the steps given by a moment did.
    let per_unit = strength(&ground, aim.target, &item.material.per_unit()).get();
    let given_by = |moment: UtcTime| -> f64 {
        let steps = plan.doses.iter().filter(|dose| is_step(dose));
        let given = steps.filter(|dose| in_by(dose, moment));
        let meq: f64 = given
            .filter_map(|dose| {
                let used = plan.inputs.problem.shelf.get(dose.material)?;
                let brings = used.material.contribution(dose.amount());
                Some(strength(&ground, aim.target, &brings).get())
            })
            .sum();
        meq / per_unit
    };
    let here = given_by(check.read_at);
    let at_reading =
        compute::mash_as_weighed(&without_steps(plan, |dose| in_by(dose, check.read_at)));
    let reading = Ph::clamped(check.advised.reading_ph);
    let mut read_mash = ground.clone();
    read_mash.offset = as_read(&at_reading, reading).ok()?.offset;

    let read: Vec<(&MashCheck, f64)> = checks
        .iter()
        .filter(|it| it.stage == Stage::Mash && (it.stands() || it.id == check.id))
        .map(|it| (it, given_by(it.read_at)))
        .collect();
    let step = check.advised.step.iter().chain(&check.advised.others);
    let step = step.into_iter().find(|step| step.material == index);
    let leads = step.map_or(here, |step| here + step.full_dose);
    let most = read
        .iter()
        .map(|(_, dose)| *dose)
        .fold(leads, f64::max)
        .max(reach(&read_mash, &ground, &item.material, aim))
        * 1.15;
    let most = DoseAmount::clamped(if most > 0.0 { most } else { 1.0 });

    let predicted = curve(&ground, &item.material, most);
    let as_read = curve(&read_mash, &item.material, most);
    let prediction = ground.predict().ok()?;
    let doubts = read.iter().flat_map(|(it, _)| {
        let reach = NINETY_PERCENT * it.advised.reading_sd;
        [it.advised.reading_ph - reach, it.advised.reading_ph + reach]
    });
    let heights = Scale::around(
        [
            aim.low.get(),
            aim.high.get(),
            prediction.interval.0.get(),
            prediction.interval.1.get(),
        ]
        .into_iter()
        .chain(doubts)
        .chain(step.map(|step| step.expected_ph)),
        0.4,
    );
    let across = Scale::around([0.0, units.shown(shown, most.get())], 1e-6);
    let dose = |amount: f64| across.place(units.shown(shown, amount));
    let point = |amount: f64, ph: f64, sd: f64, text: String| {
        let (top, bottom) = (
            heights.height(ph + NINETY_PERCENT * sd),
            heights.height(ph - NINETY_PERCENT * sd),
        );
        Point {
            x: dose(amount),
            y: heights.height(ph),
            top,
            height: ((bottom - top) * 100.0).round() / 100.0,
            text,
        }
    };
    let line = |points: &[(DoseAmount, Ph)]| {
        let placed = points
            .iter()
            .take_while(|(_, ph)| heights.holds(ph.get()))
            .map(|(amount, ph)| format!("{},{}", dose(amount.get()), heights.height(ph.get())));
        placed.collect::<Vec<_>>().join(" ")
    };
    let amount = |amount: f64| {
        let (text, unit) = words::dose(units, &plan.inputs, index, amount);
        format!("{text} {unit}")
    };
    let (low, high, target) = (
        format::ph(aim.low.get()),
        format::ph(aim.high.get()),
        format::ph(aim.target.get()),
    );
    let expected = format!(
        "expected {} by the plan, 90 % between {} and {}",
        format::ph(prediction.ph.value.get()),
        format::ph(prediction.interval.0.get()),
        format::ph(prediction.interval.1.get())
    );
    let readings: Vec<Point> = read
        .iter()
        .map(|(it, dose)| {
            let (ph, sd) = (it.advised.reading_ph, it.advised.reading_sd);
            let minute = format::decimals(it.minute.get(), 0);
            let text = format!(
                "read {} ± {} at minute {minute}, {} given",
                format::ph(ph),
                format::ph(sd),
                amount(*dose)
            );
            point(*dose, ph, sd, text)
        })
        .collect();
    let step = step.map(|step| {
        let text = format!(
            "a step of {} leads to {} ± {}",
            amount(step.amount),
            format::ph(step.expected_ph),
            format::ph(step.expected_sd)
        );
        point(here + step.amount, step.expected_ph, step.expected_sd, text)
    });
    let mut text = format!(
        "Mash pH against the dose of {}. Window {low} to {high}, target {target}. It was {expected}.",
        item.name
    );
    for said in readings.iter().chain(&step) {
        text.push_str(&format!(" {}.", words::capital(&said.text)));
    }
    Some(DoseCurve {
        doses: across.ticks(
            round_step(units.shown(shown, most.get())),
            decimals(units.shown(shown, most.get())),
        ),
        material: format!("{unit} of {} as first steps", item.name),
        levels: heights
            .ticks(0.1, 1)
            .into_iter()
            .map(|mark| Level {
                y: ((100.0 - mark.x) * 100.0).round() / 100.0,
                text: mark.text,
            })
            .collect(),
        window_top: heights.height(aim.high.get()),
        window_height: ((heights.height(aim.low.get()) - heights.height(aim.high.get())) * 100.0)
            .round()
            / 100.0,
        window: format!("{low} to {high}"),
        target: Level {
            y: heights.height(aim.target.get()),
            text: target,
        },
        predicted: line(&predicted),
        as_read: line(&as_read),
        expected: Some(point(
            0.0,
            prediction.ph.value.get(),
            prediction.ph.sd,
            expected,
        )),
        readings,
        step,
        text,
    })
}

fn is_step(dose: &Dose) -> bool {
    dose.mash_check.is_some() && dose.vessel == Vessel::Mash
}

fn in_by(dose: &Dose, moment: UtcTime) -> bool {
    dose.weighed
        .as_ref()
        .is_some_and(|weighed| weighed.at <= moment)
}

/// The plan with only those first steps that count.
fn without_steps(plan: &Plan, counts: impl Fn(&Dose) -> bool) -> Plan {
    let mut plan = plan.clone();
    plan.doses.retain(|dose| !is_step(dose) || counts(dose));
    plan
}

/// How much takes the mash through its window, from where it was read or predicted.
fn reach(
    read: &MashInputs,
    predicted: &MashInputs,
    material: &Material,
    aim: chemistry::put_right::Aim,
) -> f64 {
    [read, predicted]
        .into_iter()
        .flat_map(|mash| {
            [aim.low, aim.high]
                .into_iter()
                .filter_map(move |edge| mash.dose_for(edge, material).ok())
        })
        .map(DoseAmount::get)
        .fold(0.0, f64::max)
}

/// A step of the scale that gives four to ten figures: 1, 2 or 5 of a power of ten.
fn round_step(most: f64) -> f64 {
    let power = 10f64.powf((most / 10.0).log10().floor());
    [1.0, 2.0, 5.0, 10.0, 20.0]
        .into_iter()
        .map(|by| by * power)
        .find(|step| most / step <= 8.0)
        .unwrap_or(most)
}

fn decimals(most: f64) -> usize {
    let step = round_step(most);
    if step >= 1.0 {
        0
    } else if step >= 0.1 {
        1
    } else {
        2
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_scale_of_doses_has_four_to_nine_round_figures() {
        for most in [0.07, 0.9, 3.0, 8.5, 47.0, 120.0, 999.0, 12_000.0] {
            let count = most / round_step(most);
            assert!((3.9..=8.1).contains(&count), "{most}: {count}");
        }
    }
}
