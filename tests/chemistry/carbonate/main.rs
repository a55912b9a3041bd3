//! The carbonate engine against tables of PHREEQC, against printed values, and
//! against balances that must hold. Start with [`tables`].

mod properties;
mod tables;
mod values;

use std::collections::HashMap;

use chemistry::carbonate::{Constants, Mineral, Speciation};
use chemistry::ion::{Ion, IonMap};
use chemistry::quantity::{Celsius, MeqPerL, MgPerL, MgPerLAsCaCO3, MmolPerL, Ph};
use chemistry::water::{MeasuredWater, Water};

pub(crate) fn celsius(value: f64) -> Celsius {
    Celsius::new(value).expect("a temperature")
}

pub(crate) fn constants(temperature: f64) -> Constants {
    Constants::at(celsius(temperature)).expect("constants")
}

pub(crate) fn speciate(water: &Water, temperature: f64) -> Speciation {
    Speciation::of(water, &constants(temperature)).expect("a speciation")
}

pub(crate) fn index(speciation: &Speciation, mineral: Mineral) -> f64 {
    speciation.saturation(mineral).expect("all its parts").get()
}

pub(crate) fn log_pco2(speciation: &Speciation) -> f64 {
    speciation.pco2().get().log10()
}

/// A water from amounts in mmol/L, alkalinity in meq/L.
pub(crate) fn water_of(ions: &[(Ion, f64)], alkalinity: f64, carbon: f64) -> Water {
    let mut water = Water::pure();
    for &(ion, mmol) in ions {
        water.ions[ion] = MgPerL::new(mmol * ion.grams_per_mol()).expect("an ion");
    }
    water.alkalinity = MeqPerL::new(alkalinity).expect("alkalinity");
    water.carbon = MmolPerL::new(carbon).expect("carbon");
    water
}

/// One row of a reference table, by column.
pub(crate) struct Row(HashMap<String, String>);

impl Row {
    pub(crate) fn read(table: &str) -> Vec<Self> {
        csv::Reader::from_reader(table.as_bytes())
            .deserialize()
            .map(|row| Self(row.expect("a row")))
            .collect()
    }

    pub(crate) fn text(&self, column: &str) -> &str {
        &self.0[column]
    }

    pub(crate) fn maybe(&self, column: &str) -> Option<f64> {
        self.0[column].parse().ok()
    }

    pub(crate) fn at(&self, column: &str) -> f64 {
        self.maybe(column).unwrap_or_else(|| panic!("{column}"))
    }

    /// The water in the columns that begin with `prefix`, its pH in `ph` at the
    /// temperature in `temperature`.
    pub(crate) fn water(&self, prefix: &str, ph: &str, temperature: &str) -> MeasuredWater {
        let ions = IonMap::from_fn(|ion| {
            let symbol = match ion {
                Ion::Calcium => "Ca",
                Ion::Magnesium => "Mg",
                Ion::Sodium => "Na",
                Ion::Potassium => "K",
                Ion::Sulfate => "SO4",
                Ion::Chloride => "Cl",
                Ion::Nitrate => "NO3",
                _ => return MgPerL::constant(0.0),
            };
            MgPerL::new(self.at(&format!("{prefix}{symbol}_mg_L"))).expect("an ion")
        });
        MeasuredWater {
            ions,
            alkalinity: MgPerLAsCaCO3::new(self.at(&format!("{prefix}alk_mg_L_CaCO3")))
                .expect("alkalinity"),
            ph: Ph::new(self.at(ph)).expect("a pH"),
            temperature: celsius(self.at(temperature)),
        }
    }
}

/// The greatest difference seen, against what is allowed.
pub(crate) struct Worst {
    what: &'static str,
    allowed: f64,
    seen: f64,
    compared: usize,
}

impl Worst {
    pub(crate) const fn of(what: &'static str, allowed: f64) -> Self {
        Self {
            what,
            allowed,
            seen: 0.0,
            compared: 0,
        }
    }

    pub(crate) fn differ(&mut self, ours: f64, theirs: f64) {
        assert!(ours.is_finite(), "{}: {ours}", self.what);
        self.seen = self.seen.max((ours - theirs).abs());
        self.compared += 1;
    }

    /// Relative to theirs.
    pub(crate) fn differ_relatively(&mut self, ours: f64, theirs: f64) {
        self.differ(ours / theirs, 1.0);
    }

    /// Fails when more was seen than is allowed, or when nothing was compared.
    pub(crate) fn judge(self) {
        let Self {
            what,
            allowed,
            seen,
            compared,
        } = self;
        eprintln!("{what}: worst {seen:.2e} of {allowed:.0e} allowed, {compared} compared");
        assert!(compared > 0, "{what}: nothing compared");
        assert!(seen <= allowed, "{what}: {seen} is more than {allowed}");
    }
}
