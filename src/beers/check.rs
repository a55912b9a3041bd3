//! What was sent, turned into a [`NewBeer`]: every contradiction is told beside the
//! field it stands in.

use chemistry::ion::{Ion, IonMap};
use chemistry::put_right::Aim;
use chemistry::quantity::{Kilograms, Litres, MassRatio, MgPerL, MgPerLAsCaCO3, Ph};

use super::api::{GristLineBody, MashPhBody, NewBeerBody, SpecBody, WindowBody};
use super::spec::{Priority, Spec, USUAL_PRIORITY, Window};
use super::{GristLine, NewBeer, Volumes, grist_mass};
use crate::error::Error;
use crate::id::MaltId;
use crate::input::{Number, Problems};
use crate::web::format::figure;

/// Most malts in one grist.
pub(super) const MOST_LINES: usize = 40;
/// Largest volume of a batch, L. Source: assumed, far above any small brewery.
const LARGEST_L: f64 = 1_000_000.0;
/// Largest mass of one malt in a batch, kg. Source: assumed, likewise.
const LARGEST_KG: f64 = 100_000.0;
/// Highest concentration a spec may name, mg/L. Source: assumed; no liquor is brewed
/// with more of anything.
const HIGHEST_MG_PER_L: f64 = 5_000.0;
/// Highest sulfate to chloride a spec may name. Source: assumed, likewise.
const HIGHEST_RATIO: f64 = 1_000.0;
/// Mash pH a spec may name. Source: assumed; no mash is wanted outside.
const MASH_PH: (f64, f64) = (4.5, 6.5);
/// Mash liquor per mass of grist that can be a mash at all, L/kg. Source: assumed;
/// usual are 2 to 5, and a slip of a unit lies outside.
const LITRES_PER_KILOGRAM: (f64, f64) = (0.5, 50.0);

impl TryFrom<NewBeerBody> for NewBeer {
    type Error = Error;

    fn try_from(body: NewBeerBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let name = problems.text("name", &body.name, 80);
        let notes = problems.optional_text("notes", &body.notes, 2_000);
        let volumes = volumes(&body, &mut problems);
        let (grist, rows) = grist(&body.grist, &mut problems);
        if let Some(volumes) = &volumes {
            thickness(volumes, &grist, &mut problems);
        }
        let spec = problems.within("spec", |problems| {
            spec(&body.spec, volumes.as_ref(), problems)
        });
        problems.finish()?;
        match (name, volumes, spec) {
            (Some(name), Some(volumes), Some(spec)) => Ok(Self {
                name,
                grist,
                volumes,
                spec,
                notes,
                in_use: body.in_use.0,
                rows,
            }),
            _ => Err(Error::field("", "Fill in every field.")),
        }
    }
}

fn volumes(body: &NewBeerBody, problems: &mut Problems) -> Option<Volumes> {
    let above_zero = |value: f64| {
        if value > 0.0 && value <= LARGEST_L {
            Ok(Litres::clamped(value))
        } else {
            Err("Enter a volume above 0 and below a million litres")
        }
    };
    let batch_l = problems.quantity("batch_l", &body.batch_l, above_zero);
    let mash_l = problems.quantity("mash_l", &body.mash_l, above_zero);
    let sparge_l = if body.sparge_l.is_missing() {
        Some(Litres::constant(0.0))
    } else {
        problems.quantity("sparge_l", &body.sparge_l, |value| {
            if (0.0..=LARGEST_L).contains(&value) {
                Ok(Litres::clamped(value))
            } else {
                Err("Enter a volume from 0, below a million litres")
            }
        })
    };
    Some(Volumes {
        batch_l: batch_l?,
        mash_l: mash_l?,
        sparge_l: sparge_l?,
    })
}

/// The lines of the grist, and where each stood.
fn grist(lines: &[GristLineBody], problems: &mut Problems) -> (Vec<GristLine>, Vec<usize>) {
    let mut grist: Vec<GristLine> = Vec::new();
    let mut rows: Vec<usize> = Vec::new();
    let sent =
        |line: &GristLineBody| !(line.malt_id.trim().is_empty() && line.kilograms.is_missing());
    let mut any = false;
    for (row, line) in lines.iter().enumerate().filter(|(_, line)| sent(line)) {
        any = true;
        if row >= MOST_LINES {
            problems.add("grist", format!("At most {MOST_LINES} malts in one grist."));
            break;
        }
        problems.within(format!("grist.{row}"), |problems| {
            let malt_id = problems.choice("malt_id", &line.malt_id, |key| key.parse().ok());
            let kilograms = problems.quantity("kilograms", &line.kilograms, |value| {
                if value > 0.0 && value <= LARGEST_KG {
                    Ok(Kilograms::clamped(value))
                } else {
                    Err("Enter a mass above 0, or leave the whole line empty to drop it")
                }
            });
            let twin = |id: MaltId| grist.iter().position(|other| other.malt_id == id);
            if let Some(twin) = malt_id.and_then(twin) {
                problems.add(
                    "malt_id",
                    format!(
                        "This malt stands in line {} already: enter its whole mass there.",
                        rows[twin] + 1
                    ),
                );
            } else if let (Some(malt_id), Some(kilograms)) = (malt_id, kilograms) {
                grist.push(GristLine { malt_id, kilograms });
                rows.push(row);
            }
        });
    }
    if !any {
        problems.add(
            "grist.0.kilograms",
            "The grist weighs nothing: enter at least one malt with its mass.",
        );
    }
    (grist, rows)
}

fn thickness(volumes: &Volumes, grist: &[GristLine], problems: &mut Problems) {
    let grist = grist_mass(grist).get();
    if grist <= 0.0 {
        return;
    }
    let thickness = volumes.mash_l.get() / grist;
    let (thickest, thinnest) = LITRES_PER_KILOGRAM;
    if !(thickest..=thinnest).contains(&thickness) {
        problems.add(
            "mash_l",
            format!(
                "This makes {} L of mash liquor for each kilogram of grist; a mash has {thickest} to {thinnest}. Check the volume, the masses and their units.",
                figure(thickness)
            ),
        );
    }
}

/// Checks a spec. `volumes` as far as they are known: a spec can contradict them.
pub(crate) fn spec(
    body: &SpecBody,
    volumes: Option<&Volumes>,
    problems: &mut Problems,
) -> Option<Spec> {
    let mut ions = IonMap::from_fn(|_| None);
    for (ion, sent) in body.ion_windows() {
        let field = format!("{}_mg_per_l", ion.name());
        ions[ion] = problems.within(&field, |problems| window(sent, "mg/L", mg_per_l, problems));
    }
    let mut part = |field: &str, sent: &WindowBody| {
        problems.within(field, |problems| {
            window(sent, "mg/L as CaCO₃", as_caco3, problems)
        })
    };
    let sparge_alkalinity = part(
        "sparge_alkalinity_mg_per_l_as_caco3",
        &body.sparge_alkalinity_mg_per_l_as_caco3.as_window(),
    );
    let mash_calcium = problems.within("mash_calcium_mg_per_l", |problems| {
        window(
            &body.mash_calcium_mg_per_l.as_window(),
            "mg/L",
            mg_per_l,
            problems,
        )
    });
    let sulfate_to_chloride = problems.within("sulfate_to_chloride", |problems| {
        window(&body.sulfate_to_chloride.as_window(), "", ratio, problems)
    });
    let mash_ph = problems.within("mash_ph", |problems| aim(&body.mash_ph, problems));
    let mut most =
        |field: &str, number: &Number| problems.optional_quantity(field, number, mg_per_l);
    let highest_lactate = most("highest_lactate_mg_per_l", &body.highest_lactate_mg_per_l);
    let highest_sodium = most("highest_sodium_mg_per_l", &body.highest_sodium_mg_per_l);
    let spec = Spec {
        ions,
        mash_calcium,
        sulfate_to_chloride,
        sparge_alkalinity,
        mash_ph: mash_ph?,
        highest_lactate,
        highest_sodium,
    };
    contradictions(&spec, volumes, problems);
    Some(spec)
}

fn mg_per_l(value: f64) -> Result<MgPerL, String> {
    concentration(value).map(MgPerL::clamped)
}

fn as_caco3(value: f64) -> Result<MgPerLAsCaCO3, String> {
    concentration(value).map(MgPerLAsCaCO3::clamped)
}

fn ratio(value: f64) -> Result<MassRatio, String> {
    if (0.0..=HIGHEST_RATIO).contains(&value) {
        Ok(MassRatio::clamped(value))
    } else {
        Err(format!("Enter a ratio from 0 to {HIGHEST_RATIO}"))
    }
}

fn concentration(value: f64) -> Result<f64, String> {
    if (0.0..=HIGHEST_MG_PER_L).contains(&value) {
        Ok(value)
    } else {
        Err(format!("Enter 0 to {HIGHEST_MG_PER_L} mg/L"))
    }
}

/// Reads one window; `None` when there is none, or when something in it is wrong.
fn window<T, E>(
    sent: &WindowBody,
    unit: &str,
    check: impl Fn(f64) -> Result<T, E>,
    problems: &mut Problems,
) -> Option<Window<T>>
where
    T: Copy + PartialOrd,
    E: std::fmt::Display,
{
    let low = problems.optional_quantity("low", &sent.low, &check);
    let high = problems.optional_quantity("high", &sent.high, &check);
    let preferred = problems.optional_quantity("preferred", &sent.preferred, &check);
    let priority = if sent.priority.trim().is_empty() {
        Some(USUAL_PRIORITY)
    } else {
        problems.choice("priority", &sent.priority, Priority::from_key)
    };
    // As it was sent, so that the sentence names the figure as it was typed.
    let figure = |number: &Number| {
        let number = number.parse().unwrap_or_default();
        format!("{number} {unit}").trim_end().to_owned()
    };
    if let (Some(lowest), Some(highest)) = (low, high)
        && lowest > highest
    {
        problems.add(
            "low",
            format!(
                "The lowest, {}, is above the highest, {}.",
                figure(&sent.low),
                figure(&sent.high)
            ),
        );
    } else if let Some(best) = preferred
        && (low.is_some_and(|low| best < low) || high.is_some_and(|high| best > high))
    {
        problems.add("preferred", "This lies outside its own window.");
    }
    if low.is_none() && high.is_none() && preferred.is_none() {
        return None;
    }
    Some(Window {
        low,
        high,
        preferred,
        priority: priority?,
    })
}

fn aim(sent: &MashPhBody, problems: &mut Problems) -> Option<Aim> {
    let (lowest, highest) = MASH_PH;
    let ph = |value: f64| {
        if (lowest..=highest).contains(&value) {
            Ok(Ph::clamped(value))
        } else {
            Err(format!("Enter a pH from {lowest} to {highest}"))
        }
    };
    let low = problems.quantity("low", &sent.low, ph);
    let target = problems.quantity("target", &sent.target, ph);
    let high = problems.quantity("high", &sent.high, ph);
    let aim = Aim {
        low: low?,
        target: target?,
        high: high?,
    };
    if aim.low >= aim.high {
        problems.add("low", "The lowest pH must be below the highest.");
    } else if !(aim.low..=aim.high).contains(&aim.target) {
        problems.add(
            "target",
            "The pH aimed at lies outside its window. Enter one between the lowest and the highest.",
        );
    }
    Some(aim)
}

/// What each part allows, but the parts together cannot give.
fn contradictions(spec: &Spec, volumes: Option<&Volumes>, problems: &mut Problems) {
    let low = |ion: Ion| spec.ions[ion].and_then(|w| w.low).map(MgPerL::get);
    let high = |ion: Ion| spec.ions[ion].and_then(|w| w.high).map(MgPerL::get);

    if let Some(ratio) = spec.sulfate_to_chloride {
        let most_sulfate = high(Ion::Sulfate).unwrap_or(f64::INFINITY);
        let least_chloride = low(Ion::Chloride).unwrap_or(0.0);
        // No chloride at all makes any ratio; the windows then forbid none.
        let highest = if least_chloride > 0.0 {
            most_sulfate / least_chloride
        } else {
            f64::INFINITY
        };
        let least = low(Ion::Sulfate).unwrap_or(0.0) / high(Ion::Chloride).unwrap_or(f64::INFINITY);
        if ratio.low.is_some_and(|low| low.get() > highest) {
            problems.add(
                "sulfate_to_chloride.low",
                format!(
                    "The windows for sulfate and chloride allow at most {}.",
                    figure(highest)
                ),
            );
        }
        if ratio.high.is_some_and(|high| high.get() < least) {
            problems.add(
                "sulfate_to_chloride.high",
                format!(
                    "The windows for sulfate and chloride allow no less than {}.",
                    figure(least)
                ),
            );
        }
    }

    if let (Some(lowest), Some(highest)) = (low(Ion::Sodium), spec.highest_sodium)
        && lowest > highest.get()
    {
        problems.add(
            "highest_sodium_mg_per_l",
            "This taste limit is below the lowest sodium of the window.",
        );
    }

    // All of the calcium may be in the mash, so it can be stronger there than in the
    // whole liquor by as much as the whole is larger than the mash.
    if let (Some(window), Some(highest), Some(volumes)) =
        (spec.mash_calcium, high(Ion::Calcium), volumes)
    {
        let reachable = highest * volumes.liquor().get() / volumes.mash_l.get();
        if window.low.is_some_and(|low| low.get() > reachable) {
            problems.add(
                "mash_calcium_mg_per_l.low",
                format!(
                    "With all the calcium of the whole liquor in the mash there would be {} mg/L at most.",
                    figure(reachable)
                ),
            );
        }
    }
}
