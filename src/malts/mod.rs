//! Malts: what a grist is made of, and how well each one's acidity is known.
//!
//! A [`Malt`] has a class, which says what to assume, and may have figures of its own.
//! A [`MaltLot`] may bring better ones: the wort pH of its data sheet, the lactic acid
//! of its certificate, or a bench [`Titration`]. [`Malt::behaviour`] takes the best of
//! them and says which it took.

use chemistry::mash::malt::distilled_ph_from_sheet;
use chemistry::mash::titration::{self, Fit, Jar, TitrationError};
use chemistry::mash::{self, Behaviour, Groups, MaltClass, Taylor};
use chemistry::quantity::{
    Ebc, Estimate, Fraction, Grams, Lovibond, MeqPerKg, MeqPerMl, Millilitres, Ph,
    RelativeBuffering, RelativeSd,
};
use jiff::civil::Date;

use crate::id::{MaltId, MaltLotId, MaltTitrationId, UtcTime};

pub mod api;
pub mod entered;
pub mod operations;
pub mod pages;
pub mod store;
pub mod words;

/// A grist ingredient.
#[derive(Clone, Debug, PartialEq)]
pub struct Malt {
    /// Its identifier.
    pub id: MaltId,
    /// What the brewery calls it.
    pub name: String,
    /// What kind it is: says what to assume.
    pub class: MaltClass,
    /// Its colour.
    pub colour: Option<Ebc>,
    /// Who makes it.
    pub supplier: Option<String>,
    /// The brewery's own figure for its pH in distilled water.
    pub distilled_ph: Option<Estimate<Ph>>,
    /// The brewery's own figure for its buffering.
    pub buffering: Option<Estimate<RelativeBuffering>>,
    /// The brewery's own figure for the lactic acid in it, for acidulated malt.
    pub lactic: Option<Estimate<Fraction>>,
    /// Measured coefficients, which need the distilled-water pH they were measured from.
    pub coefficients: Option<Coefficients>,
    /// Anything else.
    pub notes: Option<String>,
    /// Whether grists may use it.
    pub in_use: bool,
    /// Counts changes.
    pub version: i64,
}

/// Measured coefficients of the published three-term form.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Coefficients {
    /// a₁ in meq/(kg·pH), a₂ in meq/(kg·pH²), a₃ in meq/(kg·pH³).
    pub terms: [f64; 3],
    /// One standard deviation of the buffering, relative to it.
    pub relative_sd: RelativeSd,
}

/// One delivery of a malt.
#[derive(Clone, Debug, PartialEq)]
pub struct MaltLot {
    /// Its identifier.
    pub id: MaltLotId,
    /// Of which malt.
    pub malt_id: MaltId,
    /// The code on the bag.
    pub code: String,
    /// When it came.
    pub received_on: Option<Date>,
    /// The wort pH on its data sheet.
    pub wort_ph: Option<Ph>,
    /// The lactic acid its certificate gives, for acidulated malt.
    pub lactic: Option<Estimate<Fraction>>,
    /// Whether it is the one being mashed from.
    pub current: bool,
    /// Anything else.
    pub notes: Option<String>,
    /// Whether it is still there.
    pub in_use: bool,
    /// Counts changes.
    pub version: i64,
    /// Its bench titrations, newest first, the withdrawn ones too.
    pub titrations: Vec<Titration>,
}

/// A bench titration of one lot: several small distilled-water mashes with different
/// amounts of a strong acid or base.
#[derive(Clone, Debug, PartialEq)]
pub struct Titration {
    /// Its identifier.
    pub id: MaltTitrationId,
    /// Of which lot.
    pub malt_lot_id: MaltLotId,
    /// When it was done.
    pub tested_on: Date,
    /// Malt in each jar, as-is weight.
    pub malt: Grams,
    /// Strength of the acid.
    pub acid: Option<MeqPerMl>,
    /// Strength of the base.
    pub base: Option<MeqPerMl>,
    /// The jars, as typed.
    pub jars: Vec<TypedJar>,
    /// Anything else.
    pub notes: Option<String>,
    /// When it was entered.
    pub entered_at: UtcTime,
    /// By whom.
    pub entered_by: String,
    /// When and why it was withdrawn, if it was.
    pub withdrawn: Option<(UtcTime, String)>,
}

/// One jar of a titration.
#[derive(Clone, Debug, PartialEq)]
pub struct TypedJar {
    /// Acid added.
    pub acid: Millilitres,
    /// Base added.
    pub base: Millilitres,
    /// pH of the cooled sample.
    pub ph: Ph,
    /// Acid, base and pH as somebody typed them.
    pub typed: [String; 3],
}

impl Titration {
    /// The acid each jar was given and where it settled.
    pub fn jars_per_kilogram(&self) -> Vec<Jar> {
        let strength = |strength: Option<MeqPerMl>| strength.map_or(0.0, MeqPerMl::get);
        let (acid, base) = (strength(self.acid), strength(self.base));
        let kilograms = self.malt.get() / 1000.0;
        let jar = |jar: &TypedJar| Jar {
            acid: MeqPerKg::clamped((jar.acid.get() * acid - jar.base.get() * base) / kilograms),
            ph: jar.ph,
        };
        self.jars.iter().map(jar).collect()
    }

    /// Where a malt that behaves so would have settled in each jar.
    pub fn settled(&self, behaviour: &Behaviour) -> Vec<Ph> {
        let jars = self.jars_per_kilogram();
        jars.iter()
            .map(|jar| settled(behaviour, jar.acid))
            .collect()
    }

    /// What it says of the malt.
    pub fn fit(&self) -> Result<Fit, TitrationError> {
        titration::fit(&self.jars_per_kilogram())
    }
}

/// The pH at which a malt takes this much acid, between 3 and 9: the demand falls with
/// rising pH everywhere.
fn settled(behaviour: &Behaviour, acid: MeqPerKg) -> Ph {
    let (mut low, mut high) = (3.0, 9.0);
    for _ in 0..50 {
        let middle = f64::midpoint(low, high);
        if behaviour.acid_demand(Ph::clamped(middle)) > acid {
            low = middle;
        } else {
            high = middle;
        }
    }
    Ph::clamped(f64::midpoint(low, high))
}

impl MaltLot {
    /// The newest titration that was not withdrawn, with what it says.
    pub fn titration(&self) -> Option<(&Titration, Fit)> {
        let stands = |titration: &&Titration| titration.withdrawn.is_none();
        let titration = self.titrations.iter().find(stands)?;
        Some((titration, titration.fit().ok()?))
    }
}

/// How a malt is known of which nothing was entered but its class and colour.
pub const ASSUMED: &str = "class default, assumed";

impl Malt {
    /// How it meets acid and base, from the best that is known of it and of this lot, and
    /// in words how that is known.
    pub fn behaviour(&self, lot: Option<&MaltLot>) -> (Behaviour, &'static str) {
        let (own, how_known) = self.without_lot();
        let Some(lot) = lot else {
            return (own, how_known);
        };
        if let Some((_, fit)) = lot.titration() {
            return (Behaviour::Groups(fit.groups), "titrated lot");
        }
        match (own, lot.wort_ph, lot.lactic) {
            (Behaviour::Acidulated { base, .. }, _, Some(lactic)) => (
                Behaviour::Acidulated { base, lactic },
                "certificate of the lot",
            ),
            (Behaviour::Groups(groups), Some(wort_ph), _) => (
                Behaviour::Groups(Groups::new(
                    distilled_ph_from_sheet(wort_ph),
                    groups.buffering,
                )),
                "sheet of the lot",
            ),
            (Behaviour::Taylor(taylor), Some(wort_ph), _) => {
                let distilled_ph = distilled_ph_from_sheet(wort_ph);
                match Taylor::new(distilled_ph, taylor.coefficients(), taylor.relative_sd()) {
                    Ok(moved) => (Behaviour::Taylor(moved), "sheet of the lot"),
                    Err(_) => (own, how_known),
                }
            }
            _ => (own, how_known),
        }
    }

    fn without_lot(&self) -> (Behaviour, &'static str) {
        let assumed = self.assumed();
        if let (Some(coefficients), Some(distilled_ph)) = (self.coefficients, self.distilled_ph)
            && let Ok(taylor) =
                Taylor::new(distilled_ph, coefficients.terms, coefficients.relative_sd)
        {
            return (
                Behaviour::Taylor(taylor),
                "measured coefficients of the malt",
            );
        }
        match assumed {
            Behaviour::Acidulated { base, .. } if self.lactic.is_some() => {
                let lactic = self
                    .lactic
                    .unwrap_or(Estimate::new(Fraction::constant(0.0), 0.0));
                (
                    Behaviour::Acidulated { base, lactic },
                    "own figures of the malt",
                )
            }
            Behaviour::Groups(groups) => {
                let how_known = match (self.distilled_ph, self.buffering) {
                    (Some(_), Some(_)) => "own figures of the malt",
                    (None, None) => ASSUMED,
                    _ => "own figures of the malt, the rest assumed for its class",
                };
                let groups = Groups::new(
                    self.distilled_ph.unwrap_or(groups.distilled_ph),
                    self.buffering.unwrap_or(groups.buffering),
                );
                (Behaviour::Groups(groups), how_known)
            }
            _ => (assumed, ASSUMED),
        }
    }

    /// What its class and colour say to assume.
    pub fn assumed(&self) -> Behaviour {
        self.class.behaviour(self.colour.map(Lovibond::from))
    }

    /// What the brewery calls it, with the lot where there is one.
    pub fn name_with(&self, lot: Option<&MaltLot>) -> String {
        match lot {
            Some(lot) => format!("{}, lot {}", self.name, lot.code),
            None => self.name.clone(),
        }
    }

    /// As the mash takes it.
    pub fn chemistry(&self, lot: Option<&MaltLot>) -> mash::Malt {
        mash::Malt {
            name: self.name_with(lot),
            behaviour: self.behaviour(lot).0,
        }
    }
}

/// The pH at which acid demands are quoted.
pub const QUOTED_PH: Ph = Ph::constant(5.4);

/// The acid a malt takes to this pH, with its doubt: every doubt of the behaviour on
/// its own, added as independent errors.
pub fn acid_demand(behaviour: &Behaviour, ph: Ph) -> Estimate<MeqPerKg> {
    let variance: f64 = behaviour
        .doubts()
        .iter()
        .map(|(_, low, high)| {
            let half = (high.acid_demand(ph).get() - low.acid_demand(ph).get()) / 2.0;
            half * half
        })
        .sum();
    Estimate::new(behaviour.acid_demand(ph), variance.sqrt())
}
