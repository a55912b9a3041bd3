//! A malt in words, for pages.

use chemistry::mash::{Behaviour, MaltClass};
use chemistry::quantity::{Ebc, Estimate, Fraction, Lovibond};

use super::{Malt, MaltLot, QUOTED_PH, Titration, acid_demand};
use crate::brewery::Units;
use crate::web::format;

/// What is known of a malt's acidity.
pub struct Known {
    /// How it is known.
    pub how: &'static str,
    /// Whether all of it is assumed.
    pub assumed: bool,
    /// pH in distilled water.
    pub ph: String,
    /// Its standard deviation.
    pub ph_doubt: String,
    /// Buffering relative to an average pale malt, with its doubt; empty where it is
    /// known by coefficients.
    pub buffering: String,
    /// Its standard deviation.
    pub buffering_doubt: String,
    /// Lactic acid, for acidulated malt.
    pub lactic: Option<String>,
    /// Buffering at the quoted pH, meq/(kg·pH).
    pub slope: String,
    /// Acid to the quoted pH, meq/kg.
    pub demand: String,
    /// Its standard deviation.
    pub demand_doubt: String,
    /// The demand as a number, to sort by.
    pub sorts: f64,
}

impl Known {
    /// Of a malt and its lot.
    pub fn of(malt: &Malt, lot: Option<&MaltLot>) -> Self {
        let (behaviour, how) = malt.behaviour(lot);
        Self::from(&behaviour, how)
    }

    /// A behaviour that is known in this way.
    pub fn from(behaviour: &Behaviour, how: &'static str) -> Self {
        let (ph, buffering, lactic) = match *behaviour {
            Behaviour::Groups(groups) => (groups.distilled_ph, Some(groups.buffering), None),
            Behaviour::Taylor(taylor) => (taylor.distilled_ph(), None, None),
            Behaviour::Acidulated { base, lactic } => {
                (base.distilled_ph, Some(base.buffering), Some(lactic))
            }
        };
        let demand = acid_demand(behaviour, QUOTED_PH);
        // A doubt of ten or more makes decimals idle.
        let places = usize::from(demand.sd < 9.95);
        let text =
            |value: Option<f64>| value.map_or_else(String::new, |value| format::decimals(value, 2));
        Self {
            how,
            assumed: how == super::ASSUMED,
            ph: format::ph(ph.value.get()),
            ph_doubt: format::decimals(ph.sd, 2),
            buffering: text(buffering.map(|buffering| buffering.value.get())),
            buffering_doubt: text(buffering.map(|buffering| buffering.sd)),
            lactic: lactic.map(percent),
            slope: format::decimals(behaviour.buffering(QUOTED_PH).get(), 0),
            demand: format::decimals(demand.value.get(), places),
            demand_doubt: format::decimals(demand.sd, places),
            sorts: demand.value.get(),
        }
    }
}

/// A share and its doubt in percent.
fn percent(share: Estimate<Fraction>) -> String {
    format!(
        "{} ± {} %",
        format::decimals(share.value.get() * 100.0, 1),
        format::decimals(share.sd * 100.0, 1)
    )
}

/// A colour in the unit the brewery reads: EBC, or °L beside US units.
pub fn colour(colour: Option<Ebc>, units: Units) -> String {
    match (colour, units) {
        (None, _) => String::new(),
        (Some(ebc), Units::Metric) => format!("{} EBC", format::entered(ebc.get())),
        (Some(ebc), Units::Us) => format!("{} °L", format::entered(Lovibond::from(ebc).get())),
    }
}

/// The colours usual for a class.
pub fn usual_colours(class: MaltClass, units: Units) -> String {
    let (palest, darkest) = class.colours();
    match units {
        Units::Metric => format!(
            "{} to {} EBC",
            format::decimals(palest.get(), 0),
            format::decimals(darkest.get(), 0)
        ),
        Units::Us => format!(
            "{} to {} °L",
            format::decimals(Lovibond::from(palest).get(), 1),
            format::decimals(Lovibond::from(darkest).get(), 1)
        ),
    }
}

/// A titration as it is read again.
pub struct TitrationShown {
    /// Its identifier.
    pub id: crate::id::MaltTitrationId,
    /// When it was done.
    pub tested_on: String,
    /// Who entered it, and when.
    pub entered: String,
    /// Malt and strengths of each jar.
    pub bench: String,
    /// Anything else.
    pub notes: Option<String>,
    /// When and why it was withdrawn.
    pub withdrawn: Option<String>,
    /// What it says of the malt.
    pub known: Option<Known>,
    /// Root mean square of what the curve leaves over, pH.
    pub left_over: String,
    /// Whether that is more than readings alone explain.
    pub poor: bool,
    /// The jars.
    pub jars: Vec<JarShown>,
}

/// One jar.
pub struct JarShown {
    /// Acid as typed, mL.
    pub acid_ml: String,
    /// Base as typed, mL.
    pub base_ml: String,
    /// pH as typed.
    pub ph: String,
    /// Acid per kilogram; negative for base.
    pub acid_meq_per_kg: String,
    /// Where the curve lies.
    pub curve: String,
    /// How far the reading is from it.
    pub off: String,
}

/// Left over by the curve, from where a titration deserves another look, pH.
/// Source: assumed, twice a careful reading's own error.
const POOR: f64 = 0.06;

impl TitrationShown {
    /// A titration, with what it says.
    pub fn of(titration: &Titration, time_zone: &str) -> Self {
        let fit = titration.fit().ok();
        let behaviour = fit.map(|fit| Behaviour::Groups(fit.groups));
        let curve = behaviour.map(|behaviour| titration.settled(&behaviour));
        let added = titration.jars_per_kilogram();
        let jars = titration.jars.iter().zip(added).enumerate();
        let strength = |word: &str, strength: Option<chemistry::quantity::MeqPerMl>| {
            strength.map_or_else(String::new, |strength| {
                format!(", {word} of {} meq/mL", format::entered(strength.get()))
            })
        };
        Self {
            id: titration.id,
            tested_on: titration.tested_on.to_string(),
            entered: format!(
                "{}, {}",
                titration.entered_by,
                format::moment(titration.entered_at, time_zone)
            ),
            bench: format!(
                "{} g of malt in each jar{}{}",
                format::entered(titration.malt.get()),
                strength("acid", titration.acid),
                strength("base", titration.base),
            ),
            notes: titration.notes.clone(),
            withdrawn: titration.withdrawn.as_ref().map(|(at, reason)| {
                format!("Withdrawn {}: {reason}", format::moment(*at, time_zone))
            }),
            known: behaviour.map(|behaviour| Known::from(&behaviour, "titrated lot")),
            left_over: fit.map_or_else(String::new, |fit| format::decimals(fit.left_over.get(), 3)),
            poor: fit.is_some_and(|fit| fit.left_over.get() > POOR),
            jars: jars
                .map(|(index, (jar, added))| {
                    let [acid_ml, base_ml, ph] = jar.typed.clone();
                    let curve = curve.as_ref().and_then(|curve| curve.get(index));
                    let text = |value: Option<f64>| {
                        value.map_or_else(String::new, |value| format::decimals(value, 2))
                    };
                    JarShown {
                        acid_ml,
                        base_ml,
                        ph,
                        acid_meq_per_kg: format::decimals(added.acid.get(), 1),
                        curve: text(curve.map(|ph| ph.get())),
                        off: text(curve.map(|ph| jar.ph.get() - ph.get())),
                    }
                })
                .collect(),
        }
    }
}
