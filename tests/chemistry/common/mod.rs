//! A water from alkalinity and pH by the ideal textbook equations at 20 °C, written
//! out here a second time so that the crate is not checked by itself.

use chemistry::ion::Ion;
use chemistry::quantity::{MeqPerL, MgPerL, MmolPerL};
use chemistry::water::Water;

/// pK of carbonic acid at 20 °C, Plummer & Busenberg 1982 at 293.15 K.
pub(crate) const PK1: f64 = 6.3819;
const PK2: f64 = 10.3756;

/// HCO₃⁻ + 2 CO₃²⁻ per mole of dissolved carbon.
pub(crate) fn charge_of_carbon(ph: f64) -> f64 {
    let (h, k1, k2) = (10f64.powf(-ph), 10f64.powf(-PK1), 10f64.powf(-PK2));
    let sum = h * h + k1 * h + k1 * k2;
    (k1 * h + 2.0 * k1 * k2) / sum
}

/// OH⁻ − H⁺, meq/L, pKw 14.17 at 20 °C.
pub(crate) fn water_charge(ph: f64) -> f64 {
    1000.0 * (10f64.powf(ph - 14.17) - 10f64.powf(-ph))
}

/// Natural water, its alkalinity titrated to pH 4.5.
pub(crate) fn natural(alkalinity_as_caco3: f64, ph: f64, calcium: f64, magnesium: f64) -> Water {
    let titrated = alkalinity_as_caco3 / 50.0434;
    let carbon = (titrated - water_charge(ph) + water_charge(4.5))
        / (charge_of_carbon(ph) - charge_of_carbon(4.5));
    let mut water = hard(calcium, magnesium);
    water.carbon = MmolPerL::new(carbon.max(0.0)).expect("carbon");
    water.alkalinity =
        MeqPerL::new(carbon * charge_of_carbon(ph) + water_charge(ph)).expect("alkalinity");
    water
}

/// Pure water with these and nothing to answer for them.
pub(crate) fn hard(calcium: f64, magnesium: f64) -> Water {
    let mut water = Water::pure();
    water.ions[Ion::Calcium] = MgPerL::new(calcium).expect("calcium");
    water.ions[Ion::Magnesium] = MgPerL::new(magnesium).expect("magnesium");
    water
}
