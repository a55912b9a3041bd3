//! Beers: what is brewed, from which grist, with how much liquor, and what that
//! liquor and its mash must be.
//!
//! A plan begins from a beer and keeps a copy of it, so that a beer may change while
//! old plans stand. [`spec`] holds the windows; `check` turns what was sent into a
//! [`NewBeer`].

use chemistry::quantity::{Kilograms, Litres};

pub mod api;
mod check;
pub mod operations;
pub mod pages;
pub mod spec;
pub mod store;
mod words;

pub(crate) use check::spec as check_spec;
pub use spec::Spec;

use crate::id::{BeerId, MaltId};

/// A beer.
#[derive(Clone, Debug, PartialEq)]
pub struct Beer {
    /// Its identifier.
    pub id: BeerId,
    /// What the brewery calls it.
    pub name: String,
    /// The malts, in the order they were entered.
    pub grist: Vec<GristLine>,
    /// How much liquor goes where, and how much beer it makes.
    pub volumes: Volumes,
    /// What its liquor and its mash must be.
    pub spec: Spec,
    /// Whatever else should be known.
    pub notes: Option<String>,
    /// Whether it is brewed still.
    pub in_use: bool,
    /// Counts changes, so that two people do not overwrite each other.
    pub version: i64,
}

/// A beer as somebody wants it to be.
#[derive(Clone, Debug, PartialEq)]
pub struct NewBeer {
    /// What the brewery calls it.
    pub name: String,
    /// The malts: at least one, each once.
    pub grist: Vec<GristLine>,
    /// How much liquor goes where.
    pub volumes: Volumes,
    /// What its liquor and its mash must be.
    pub spec: Spec,
    /// Whatever else should be known.
    pub notes: Option<String>,
    /// Whether it is brewed still.
    pub in_use: bool,
    /// Where each line of the grist stood in the body, to name it when its malt turns
    /// out to be unknown.
    rows: Vec<usize>,
}

/// One malt of a grist.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct GristLine {
    /// Which malt.
    pub malt_id: MaltId,
    /// How much of it goes into one batch.
    pub kilograms: Kilograms,
}

/// How much water goes where in one batch.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Volumes {
    /// Beer in the fermenter, L.
    pub batch_l: Litres,
    /// Strike liquor in the mash, L.
    pub mash_l: Litres,
    /// Liquor over the grains; nothing when the beer is not sparged, L.
    pub sparge_l: Litres,
}

impl Volumes {
    /// All liquor of the batch: mash and sparge.
    #[must_use]
    pub fn liquor(&self) -> Litres {
        self.mash_l + self.sparge_l
    }
}

/// The mass of a whole grist.
#[must_use]
pub fn grist_mass(grist: &[GristLine]) -> Kilograms {
    grist
        .iter()
        .fold(Kilograms::constant(0.0), |sum, line| sum + line.kilograms)
}

impl Beer {
    /// The mass of the grist.
    #[must_use]
    pub fn grist_mass(&self) -> Kilograms {
        grist_mass(&self.grist)
    }

    /// Mash liquor per mass of grist, L/kg.
    #[must_use]
    pub fn litres_per_kilogram(&self) -> f64 {
        self.volumes.mash_l.get() / self.grist_mass().get()
    }
}
