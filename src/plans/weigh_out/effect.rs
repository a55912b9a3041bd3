//! What an amount other than the planned one does, told before it is accepted.

use chemistry::ion::Ion;
use chemistry::material::Material;
use chemistry::plan::Outcome;
use chemistry::quantity::{DoseAmount, Fraction};

use crate::error::Error;
use crate::id::UtcTime;
use crate::plans::inputs::SHOWN_IONS;
use crate::plans::{Dose, Lot, Plan, Weighed, compute, words};
use crate::web::format;

/// The amounts of a line that are taken without a question.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Band {
    /// What does as much as the planned amount: another one where the lot is stronger or
    /// weaker than the plan was computed with.
    pub target: DoseAmount,
    /// Lowest.
    pub low: DoseAmount,
    /// Highest.
    pub high: DoseAmount,
}

impl Band {
    /// Around what is planned: as wide as the tolerance of the material or one step of
    /// its scale, whichever is more.
    pub fn of(plan: &Plan, dose: &Dose, lot: Option<&Material>, tolerance: Fraction) -> Self {
        let item = plan.inputs.problem.shelf.get(dose.material);
        let target = match (lot, item) {
            (Some(lot), Some(item)) => lot.in_place_of(&item.material, dose.planned),
            _ => None,
        };
        let target = target.unwrap_or(dose.planned);
        let step = item.map_or(0.0, |item| item.step.get());
        // A hair more: an amount typed in another unit comes back with its rounding.
        let either_way = (tolerance.get() * target.get()).max(step) * (1.0 + 1e-6);
        Self {
            target,
            low: DoseAmount::clamped(target.get() - either_way),
            high: DoseAmount::clamped(target.get() + either_way),
        }
    }

    /// Whether this much is taken without a question. Nothing at all never is: the line
    /// was left out.
    pub fn holds(&self, amount: DoseAmount) -> bool {
        amount.get() > 0.0 && self.low <= amount && amount <= self.high
    }
}

/// The batch with a line as planned and as it would be.
#[derive(Clone, Debug)]
pub struct Effect {
    /// As planned.
    pub before: Outcome,
    /// With the actual amount, and the lot it is of.
    pub after: Outcome,
    /// Why it is asked about, in a sentence.
    pub why: String,
}

/// One figure before and after.
#[derive(Clone, Debug, PartialEq)]
pub struct Moved {
    /// Of what.
    pub name: String,
    /// As planned.
    pub before: f64,
    /// As it would be.
    pub after: f64,
    /// Lowest and highest the beer wants.
    pub window: (Option<f64>, Option<f64>),
    /// Unit; nothing for a pH.
    pub unit: &'static str,
}

impl Effect {
    /// Works it out: everything else as it is in, or planned.
    pub fn of(
        plan: &Plan,
        dose: &Dose,
        actual: DoseAmount,
        lot: Lot,
        tolerance: Fraction,
    ) -> Result<Self, Error> {
        let band = Band::of(plan, dose, lot.material.as_ref(), tolerance);
        let mut planned = plan.clone();
        let mut really = plan.clone();
        for line in planned.doses.iter_mut().filter(|line| line.id == dose.id) {
            line.weighed = line.mash_check.map(|_| as_if(line.planned, Lot::default()));
        }
        for line in really.doses.iter_mut().filter(|line| line.id == dose.id) {
            line.weighed = Some(as_if(actual, lot.clone()));
        }
        Ok(Self {
            before: compute::as_weighed(&planned)?,
            after: compute::as_weighed(&really)?,
            why: why(dose, &band, tolerance, actual),
        })
    }

    /// The question, with what moves.
    pub fn question(&self, plan: &Plan) -> String {
        let figures = self.figures(plan);
        let moved: Vec<String> = figures
            .iter()
            .filter(|figure| figure.moves())
            .map(Moved::told)
            .collect();
        let does = match moved.as_slice() {
            [] => "It changes nothing that can be told.".to_owned(),
            moved => format!("It takes {}.", moved.join(", ")),
        };
        format!("{} {does} Mend the amount, or say why.", self.why)
    }

    /// The mash pH, then each ion of the whole liquor and its alkalinity.
    pub fn figures(&self, plan: &Plan) -> Vec<Moved> {
        let spec = &plan.inputs.problem.spec;
        let limits = &plan.inputs.problem.limits.ions;
        let mut figures = Vec::new();
        if let (Ok(before), Ok(after)) = (&self.before.mash, &self.after.mash) {
            figures.push(Moved {
                name: "Mash pH".into(),
                before: before.ph.value.get(),
                after: after.ph.value.get(),
                window: (Some(spec.mash_ph.low.get()), Some(spec.mash_ph.high.get())),
                unit: "",
            });
        }
        let (before, after) = (&self.before.whole, &self.after.whole);
        let brought = |ion: &Ion| after.ions[*ion] != before.ions[*ion];
        let ions = SHOWN_IONS.into_iter().chain(
            Ion::ALL
                .into_iter()
                .filter(|ion| !SHOWN_IONS.contains(ion))
                .filter(brought),
        );
        for ion in ions {
            let window = spec.ions[ion];
            let high = window.and_then(|window| window.high);
            // A limit counts like a window: whichever is the lower.
            let high = high.into_iter().chain(limits[ion]).map(|it| it.get());
            figures.push(Moved {
                name: words::capital(ion.name()),
                before: before.ions[ion].get(),
                after: after.ions[ion].get(),
                window: (
                    window.and_then(|window| window.low).map(|low| low.get()),
                    high.reduce(f64::min),
                ),
                unit: "mg/L",
            });
        }
        figures.push(Moved {
            name: "Alkalinity".into(),
            before: before.alkalinity_as_caco3().get(),
            after: after.alkalinity_as_caco3().get(),
            window: (None, None),
            unit: "mg/L as CaCO₃",
        });
        figures
    }
}

fn as_if(actual: DoseAmount, lot: Lot) -> Weighed {
    Weighed {
        actual,
        lot,
        at: UtcTime::now(),
        by: String::new(),
        reason: String::new(),
        witness: None,
        corrections: Vec::new(),
    }
}

impl Moved {
    /// Whether anybody could tell the difference.
    pub fn moves(&self) -> bool {
        self.shown(self.before) != self.shown(self.after)
    }

    /// A value as it is read, without its unit.
    pub fn shown(&self, value: f64) -> String {
        if self.unit.is_empty() {
            format::ph(value)
        } else {
            format::figure(value)
        }
    }

    /// `within`, `below` or `above` after it; `None` where nothing is asked of it.
    pub fn stands(&self) -> Option<&'static str> {
        match self.window {
            (None, None) => None,
            (Some(low), _) if self.after < low => Some("below"),
            (_, Some(high)) if self.after > high => Some("above"),
            _ => Some("within"),
        }
    }

    /// The window in words.
    pub fn window_words(&self) -> String {
        match self.window {
            (Some(low), Some(high)) => format!("{} to {}", self.shown(low), self.shown(high)),
            (Some(low), None) => format!("from {}", self.shown(low)),
            (None, Some(high)) => format!("up to {}", self.shown(high)),
            (None, None) => String::new(),
        }
    }

    /// As part of a sentence.
    fn told(&self) -> String {
        let unit = if self.unit.is_empty() {
            String::new()
        } else {
            format!(" {}", self.unit)
        };
        let window = match self.stands() {
            None => String::new(),
            Some("within") => format!(" (window {})", self.window_words()),
            Some(missed) => format!(" ({missed} its window, {})", self.window_words()),
        };
        let mut letters = self.name.chars();
        let name: String = letters
            .next()
            .into_iter()
            .flat_map(char::to_lowercase)
            .chain(letters)
            .collect();
        format!(
            "{name} from {} to {}{unit}{window}",
            self.shown(self.before),
            self.shown(self.after)
        )
    }
}

/// Why a reason is asked for, without a unit of dose: each door speaks its own.
fn why(dose: &Dose, band: &Band, tolerance: Fraction, actual: DoseAmount) -> String {
    if actual.get() == 0.0 {
        return "This line would be left out.".into();
    }
    let off = (actual.get() / band.target.get() - 1.0) * 100.0;
    let way = if off > 0.0 { "more" } else { "less" };
    let needed = band.target.get() / dose.planned.get() - 1.0;
    let than = if needed.abs() < 0.001 {
        "planned"
    } else {
        "this lot needs to do what is planned"
    };
    format!(
        "This is {} % {way} than {than}; the tolerance is {} or one step of the scale.",
        format::figure(off.abs()),
        format::entered(tolerance.get() * 100.0) + " %"
    )
}
