//! One small invented brewery whose plans can be followed with a pencil.

use chemistry::ion::{Ion, IonMap};
use chemistry::mash::{GristItem, LiquorDoubt, Malt, MaltClass, Settings};
use chemistry::material::{Material, Substance, Vessel};
use chemistry::plan::{
    Limits, Preference, Priority, Problem, ShelfItem, Source, Spec, Volumes, Window,
};
use chemistry::put_right::Aim;
use chemistry::quantity::{
    CostPerLitre, CostPerUnit, DoseAmount, Estimate, Fraction, Kilograms, Litres, MeqPerL, MgPerL,
    MgPerLAsCaCO3, MmolPerL, Ph, PhShift,
};
use chemistry::water::Water;

/// Permeate and nothing on the shelf; 1000 L, 500 of them in the mash, 160 kg of pale malt
/// at pH 5.73 in distilled water; nothing asked for but a mash between pH 5.3 and 5.5.
pub(crate) fn bare() -> Problem {
    Problem {
        sources: vec![source(Water::pure(), true, 0.01)],
        shelf: Vec::new(),
        volumes: Volumes {
            liquor: Litres::constant(1000.0),
            mash: Estimate::new(Litres::constant(500.0), 5.0),
            sparge: Litres::constant(400.0),
        },
        grist: vec![GristItem {
            malt: Malt {
                name: "pale malt".to_owned(),
                behaviour: MaltClass::PaleAle.behaviour(None),
            },
            mass: Kilograms::constant(160.0),
        }],
        settings: Settings::default(),
        offset: Estimate::new(PhShift::constant(0.0), 0.05),
        spec: Spec {
            ions: IonMap::from_fn(|_| None),
            mash_calcium: None,
            sulfate_to_chloride: None,
            sparge_alkalinity: None,
            mash_ph: Aim {
                target: Ph::constant(5.4),
                low: Ph::constant(5.3),
                high: Ph::constant(5.5),
            },
        },
        limits: Limits {
            ions: IonMap::from_fn(|_| None),
            lowest_alkalinity: MgPerLAsCaCO3::constant(0.0),
        },
    }
}

pub(crate) fn source(water: Water, blending: bool, price: f64) -> Source {
    Source {
        water,
        doubt: LiquorDoubt {
            alkalinity: MeqPerL::constant(0.1),
            calcium: MgPerL::constant(2.0),
            magnesium: MgPerL::constant(1.0),
        },
        lowest: Fraction::constant(0.0),
        highest: Fraction::constant(1.0),
        blending,
        price: CostPerLitre::new(price).expect("a price"),
    }
}

/// Calcium 100, chloride 40, sulfate 60, nitrate 60 mg/L; alkalinity 4 meq/L.
pub(crate) fn hard_water() -> Water {
    let mut water = Water::pure();
    for (ion, amount) in [
        (Ion::Calcium, 100.0),
        (Ion::Chloride, 40.0),
        (Ion::Sulfate, 60.0),
        (Ion::Nitrate, 60.0),
    ] {
        water.ions[ion] = MgPerL::new(amount).expect("an ion");
    }
    water.alkalinity = MeqPerL::constant(4.0);
    water.carbon = MmolPerL::constant(4.2);
    water
}

/// Weighed to the gram, nothing lost to assay.
pub(crate) fn item(substance: Substance, vessels: &[Vessel]) -> ShelfItem {
    let usual = Material::usual(substance).expect("a material");
    let pure = Estimate::new(Fraction::constant(1.0), 0.01);
    let material = match usual.strength() {
        None => Material::solid(substance, pure),
        Some(strength) => Material::liquid(substance, strength, pure),
    };
    ShelfItem {
        name: substance.name().to_owned(),
        material: material.expect("a material"),
        vessels: vessels.to_vec(),
        step: DoseAmount::constant(1.0),
        price: CostPerUnit::constant(0.002),
        most: None,
        preference: Preference::Usual,
    }
}

pub(crate) fn window(low: f64, high: f64, priority: Priority) -> Option<Window<MgPerL>> {
    let bound = |value| MgPerL::new(value).expect("a bound");
    Some(Window::between(bound(low), bound(high), priority))
}
