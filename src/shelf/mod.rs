//! The shelf: the salts, bases and acids the brewery holds, and their lots.
//!
//! A [`Material`] is a substance with what its label says; a [`MaterialLot`] adds what
//! the certificate says and when the pack was opened. [`Material::chemistry`] turns
//! both into what every calculation uses. Figures nobody has entered are the usual
//! ones of the substance, and are called assumed wherever they are shown. How much is
//! there follows from deliveries, counts and doses: see [`stock`].

use chemistry::ion::Ion;
use chemistry::material::{self, DoseUnit, Form, MaterialError, Strength, Substance, Vessel};
use chemistry::quantity::{Days, DoseAmount, Estimate, Fraction, Litres, OutOfRange};
use chemistry::water::Water;
use jiff::civil::Date;

use crate::id::{MaterialId, MaterialLotId};

pub mod api;
pub mod attachments;
pub mod entered;
pub mod labels;
pub mod operations;
pub mod pages;
pub mod stock;
pub mod store;
pub mod warnings;
pub mod words;

/// What one kilogram of a solid or one litre of a liquid costs, in the brewery's
/// currency.
#[derive(Clone, Copy, Debug, PartialEq, PartialOrd)]
pub struct Price(f64);

impl Price {
    /// A checked price, 0 to 1 000 000.
    pub fn new(per_kg_or_l: f64) -> Result<Self, OutOfRange> {
        if (0.0..=1e6).contains(&per_kg_or_l) {
            Ok(Self(per_kg_or_l))
        } else {
            Err(OutOfRange {
                value: per_kg_or_l,
                unit: "per kg or L",
                low: 0.0,
                high: 1e6,
            })
        }
    }

    /// The price of one kilogram or litre.
    pub const fn get(self) -> f64 {
        self.0
    }

    /// What this much costs.
    pub fn of(self, amount: DoseAmount) -> f64 {
        self.0 * amount.get() / 1000.0
    }
}

/// Something the shelf holds.
#[derive(Clone, Debug, PartialEq)]
pub struct Material {
    /// Its identifier.
    pub id: MaterialId,
    /// What the brewery calls it.
    pub name: String,
    /// What it is.
    pub substance: Substance,
    /// How strong a liquid is by its label; `None`: as usual, assumed.
    pub strength: Option<Strength>,
    /// The share that is the substance, or what a liquid holds over what its label
    /// says; `None`: as usual, assumed.
    pub assay: Option<Estimate<Fraction>>,
    /// The step of the scale or cylinder, g or mL.
    pub scale_step: DoseAmount,
    /// How far a weighed dose may be from its plan, as a share of it; `None`: as usual.
    pub own_tolerance: Option<Fraction>,
    /// Less than this on the shelf is little, g or mL; `None`: never warned of.
    pub reorder_below: Option<DoseAmount>,
    /// What it costs.
    pub price: Option<Price>,
    /// Where it may go; at least one.
    pub vessels: Vec<Vessel>,
    /// The most of it in one hectolitre of liquor, g or mL.
    pub highest: Option<DoseAmount>,
    /// Whether to use it only where nothing else reaches.
    pub avoid: bool,
    /// Anything else.
    pub notes: Option<String>,
    /// Whether plans may use it.
    pub in_use: bool,
    /// Counts changes.
    pub version: i64,
    /// The label in the terms of chemistry, checked when this was made.
    as_labelled: material::Material,
}

/// One delivery of a material.
#[derive(Clone, Debug, PartialEq)]
pub struct MaterialLot {
    /// Its identifier.
    pub id: MaterialLotId,
    /// Of which material.
    pub material_id: MaterialId,
    /// The code on the pack.
    pub code: String,
    /// When it came.
    pub received_on: Option<Date>,
    /// When it was opened.
    pub opened_on: Option<Date>,
    /// The last day its maker vouches for it.
    pub use_by: Option<Date>,
    /// The strength its certificate gives, for a liquid.
    pub strength: Option<Strength>,
    /// The assay its certificate gives, or the brewery found.
    pub assay: Option<Estimate<Fraction>>,
    /// When the brewery found it; `None`: the certificate gives it.
    pub assayed_on: Option<Date>,
    /// Whether it is the one being weighed from.
    pub current: bool,
    /// Anything else.
    pub notes: Option<String>,
    /// Whether it is still there.
    pub in_use: bool,
    /// Counts changes.
    pub version: i64,
}

impl MaterialLot {
    /// Since when it has stood open without an assay by the brewery: `None` where it is
    /// sealed.
    pub fn open_since(&self) -> Option<Date> {
        let opened = self.opened_on?;
        Some(self.assayed_on.map_or(opened, |day| day.max(opened)))
    }

    /// How long that is on a day.
    pub fn open_for(&self, on: Date) -> Option<Days> {
        let since = self.open_since()?;
        let days = (on - since).get_days();
        Some(Days::clamped(f64::from(days)))
    }
}

/// What an addition does to one figure of a liquor.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Brings {
    /// Which ion; `None`: alkalinity, as CaCO₃.
    pub ion: Option<Ion>,
    /// By how much, mg/L; negative where it falls.
    pub mg_per_l: f64,
    /// Its standard deviation, mg/L.
    pub sd_mg_per_l: f64,
}

/// What a label or certificate says, in the terms of chemistry: where it is silent,
/// the usual of the substance.
fn labelled(
    substance: Substance,
    strength: Option<Strength>,
    assay: Option<Estimate<Fraction>>,
) -> Result<material::Material, MaterialError> {
    let usual = || {
        let (share, density) = substance.default_strength()?;
        Some(Strength::WeightPercent { share, density })
    };
    let assay = assay.unwrap_or(substance.default_assay());
    match strength.or_else(usual) {
        Some(strength) => material::Material::liquid(substance, strength, assay),
        None => material::Material::solid(substance, assay),
    }
}

/// Relative error of a strength that a certificate prints, one standard deviation.
/// Source: assumed.
const CERTIFIED_SD: f64 = 0.01;

/// How far a weighed dose may be from its plan, as a share of it, where the brewery says
/// nothing else. Source: assumed.
pub const USUAL_TOLERANCE: Fraction = Fraction::constant(0.02);

impl Material {
    /// How far a weighed dose may be from its plan, as a share of it.
    pub fn tolerance(&self) -> Fraction {
        self.own_tolerance.unwrap_or(USUAL_TOLERANCE)
    }

    /// The substance as it is usually sold, measured out to one gram or millilitre.
    /// `None` where nothing is usual: a blended acid, and what has no usual vessel.
    pub fn usual(substance: Substance) -> Option<Self> {
        let vessels = substance.default_vessels();
        if vessels.is_empty() {
            return None;
        }
        Some(Self {
            id: MaterialId::new(),
            name: substance.name().to_owned(),
            substance,
            strength: None,
            assay: None,
            scale_step: DoseAmount::constant(1.0),
            own_tolerance: None,
            reorder_below: None,
            price: None,
            vessels: vessels.to_vec(),
            highest: None,
            avoid: substance.is_discouraged(),
            notes: None,
            in_use: true,
            version: 1,
            as_labelled: material::Material::usual(substance)?,
        })
    }

    /// Its substance, strength and assay on a day as far as they are known, from this lot
    /// when there is one. A pack that stands open and draws water holds less every day,
    /// and how much is ever less sure.
    ///
    /// A lot is checked against its material when it is entered, so that a strength
    /// that does not fit cannot get here; were it to, the label would count.
    pub fn chemistry(&self, lot: Option<&MaterialLot>, on: Date) -> material::Material {
        let Some(lot) = lot else {
            return self.as_labelled;
        };
        let strength = lot.strength.or(self.strength);
        let assay = Some(self.assay_of(lot, on));
        labelled(self.substance, strength, assay).unwrap_or(self.as_labelled)
    }

    fn assay_of(&self, lot: &MaterialLot, on: Date) -> Estimate<Fraction> {
        let certified = lot.strength.map(|_| {
            let exact = Fraction::constant(1.0);
            Estimate::new(exact, CERTIFIED_SD)
        });
        let sealed = lot.assay.or(certified).unwrap_or(self.as_labelled.assay());
        match lot.open_for(on) {
            Some(days) => self.substance.assay_after_opening(sealed, days),
            None => sealed,
        }
    }

    /// The label alone, whatever the lots say.
    pub const fn label(&self) -> material::Material {
        self.as_labelled
    }

    /// Where its assay or strength comes from.
    pub fn how_known(&self, lot: Option<&MaterialLot>) -> &'static str {
        let opened = lot.is_some_and(|lot| lot.opened_on.is_some());
        let drifts = opened && self.substance.opened_assay().is_some();
        let assayed = lot.is_some_and(|lot| lot.assayed_on.is_some());
        let certified = lot.is_some_and(|lot| lot.assay.is_some() || lot.strength.is_some());
        let silent = match self.substance.form() {
            Form::Solid => self.assay.is_none(),
            Form::Liquid => self.strength.is_none(),
        };
        match (drifts, assayed) {
            (true, true) => "own assay, then open, assumed",
            (true, false) => "opened pack, assumed",
            (false, true) => "own assay",
            (false, false) if certified => "certificate of the lot",
            (false, false) if silent => "usual for it, assumed",
            (false, false) => "label",
        }
    }

    /// What the brewery calls it, with the lot where there is one.
    pub fn name_with(&self, lot: Option<&MaterialLot>) -> String {
        match lot {
            Some(lot) => format!("{}, lot {}", self.name, lot.code),
            None => self.name.clone(),
        }
    }

    /// What it is measured out in.
    pub const fn unit(&self) -> DoseUnit {
        self.as_labelled.unit()
    }

    /// What this much in one hectolitre of liquor does to each figure it changes.
    pub fn brings(&self, lot: Option<&MaterialLot>, on: Date, per_hl: DoseAmount) -> Vec<Brings> {
        let substance = self.chemistry(lot, on);
        let added = substance
            .contribution(per_hl)
            .added_to(&Water::pure(), Litres::constant(100.0));
        let relative_sd = substance.relative_sd().get();
        let ions = added.ions.iter();
        let ions = ions.map(|(ion, mg_per_l)| (Some(ion), mg_per_l.get()));
        ions.chain([(None, added.alkalinity_as_caco3().get())])
            .filter(|(_, mg_per_l)| *mg_per_l != 0.0)
            .map(|(ion, mg_per_l)| Brings {
                ion,
                mg_per_l,
                sd_mg_per_l: mg_per_l.abs() * relative_sd,
            })
            .collect()
    }

    /// Vessels it goes into here, though that is not usual for the substance. None where
    /// nothing is usual.
    pub fn unusual_vessels(&self) -> Vec<Vessel> {
        let usual = self.substance.default_vessels();
        let chosen = self.vessels.iter().copied();
        chosen
            .filter(|vessel| !usual.is_empty() && !usual.contains(vessel))
            .collect()
    }
}
