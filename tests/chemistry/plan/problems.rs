//! The random problems of `problems.json`, written with their optima by `reference.py`.

use chemistry::ion::{Ion, IonMap};
use chemistry::mash::{Behaviour, GristItem, Groups, LiquorDoubt, Malt, Settings};
use chemistry::material::{Material, Strength, Substance, Vessel};
use chemistry::plan::{
    Limits, Preference, Priority, Problem, ShelfItem, Source, Spec, Volumes, Window,
};
use chemistry::put_right::Aim;
use chemistry::quantity::{
    CostPerLitre, CostPerUnit, DoseAmount, Estimate, Fraction, Kilograms, Litres, MassRatio,
    MeqPerL, MgPerL, MgPerLAsCaCO3, MmolPerL, Ph, PhShift, RelativeBuffering,
};
use chemistry::water::Water;
use serde_json::Value;

/// A problem and what SciPy made of it.
pub(crate) struct Case {
    pub(crate) problem: Problem,
    pub(crate) expected: Value,
}

pub(crate) fn cases() -> Vec<Case> {
    let text = include_str!("problems.json");
    let problems: Vec<Value> = serde_json::from_str(text).expect("problems");
    problems
        .iter()
        .map(|value| Case {
            problem: problem(value),
            expected: value["expected"].clone(),
        })
        .collect()
}

fn number(value: &Value) -> f64 {
    value
        .as_f64()
        .unwrap_or_else(|| panic!("a number, not {value}"))
}

fn fraction(value: &Value) -> Fraction {
    Fraction::new(number(value)).expect("a fraction")
}

fn entries(value: &Value) -> impl Iterator<Item = (Ion, &Value)> {
    value
        .as_object()
        .expect("ions")
        .iter()
        .map(|(name, value)| (Ion::from_name(name).expect("an ion"), value))
}

fn list(value: &Value) -> &[Value] {
    value.as_array().expect("a list")
}

fn problem(value: &Value) -> Problem {
    let volumes = &value["volumes"];
    let litres = |name: &str| Litres::new(number(&volumes[name])).expect("litres");
    let settings = &value["settings"];
    let certain = |name: &str| Estimate::new(fraction(&settings[name]), 0.0);
    Problem {
        sources: list(&value["sources"]).iter().map(source).collect(),
        shelf: list(&value["shelf"]).iter().map(shelf_item).collect(),
        volumes: Volumes {
            liquor: litres("liquor_l"),
            mash: Estimate::new(litres("mash_l"), 0.0),
            sparge: litres("sparge_l"),
        },
        grist: list(&value["grist"])
            .iter()
            .enumerate()
            .map(|(index, value)| malt(index, value))
            .collect(),
        settings: Settings {
            calcium_release: certain("calcium_release"),
            magnesium_release: certain("magnesium_release"),
            carbon_dioxide_lost: certain("carbon_dioxide_lost"),
        },
        offset: Estimate::new(
            PhShift::new(number(&value["offset"])).expect("an offset"),
            0.0,
        ),
        spec: spec(&value["spec"]),
        limits: limits(&value["limits"]),
    }
}

fn source(value: &Value) -> Source {
    let mut water = Water::pure();
    for (ion, amount) in entries(&value["ions"]) {
        water.ions[ion] = MgPerL::new(number(amount)).expect("an ion");
    }
    water.alkalinity = MeqPerL::new(number(&value["alkalinity_meq_per_l"])).expect("alkalinity");
    water.carbon = MmolPerL::new(number(&value["carbon_mmol_per_l"])).expect("carbon");
    Source {
        water,
        doubt: LiquorDoubt::NONE,
        lowest: fraction(&value["lowest"]),
        highest: fraction(&value["highest"]),
        blending: value["blending"] == true,
        price: CostPerLitre::new(number(&value["price_per_l"])).expect("a price"),
    }
}

fn shelf_item(value: &Value) -> ShelfItem {
    let key = value["substance"].as_str().expect("a substance");
    let substance = Substance::from_key(key).expect("a substance");
    let assay = Estimate::new(fraction(&value["assay"]), 0.0);
    let material = match substance.default_strength() {
        None => Material::solid(substance, assay),
        Some((share, density)) => {
            Material::liquid(substance, Strength::WeightPercent { share, density }, assay)
        }
    };
    ShelfItem {
        name: substance.name().to_owned(),
        material: material.expect("a material"),
        vessels: list(&value["vessels"])
            .iter()
            .map(|key| Vessel::from_key(key.as_str().expect("a vessel")).expect("a vessel"))
            .collect(),
        step: DoseAmount::new(number(&value["step"])).expect("a step"),
        price: CostPerUnit::new(number(&value["price_per_unit"])).expect("a price"),
        most: value["most"]
            .as_f64()
            .map(|most| DoseAmount::new(most).expect("an amount")),
        preference: match value["preference"].as_str() {
            Some("usual") => Preference::Usual,
            Some("discouraged") => Preference::Discouraged,
            Some("avoided") => Preference::Avoided,
            other => panic!("{other:?}"),
        },
    }
}

fn malt(index: usize, value: &Value) -> GristItem {
    GristItem {
        malt: Malt {
            name: format!("malt {index}"),
            behaviour: Behaviour::Groups(Groups::new(
                Estimate::new(Ph::new(number(&value["ph"])).expect("a pH"), 0.1),
                Estimate::new(
                    RelativeBuffering::new(number(&value["buffering"])).expect("a buffering"),
                    0.25,
                ),
            )),
        },
        mass: Kilograms::new(number(&value["kg"])).expect("a mass"),
    }
}

fn window<T>(value: &Value, unit: impl Fn(f64) -> T) -> Option<Window<T>> {
    if value.is_null() {
        return None;
    }
    let [low, high, preferred] =
        ["low", "high", "preferred"].map(|side| value[side].as_f64().map(&unit));
    Some(Window {
        low,
        high,
        preferred,
        priority: Priority::from_key(value["priority"].as_str().expect("a priority"))
            .expect("a priority"),
    })
}

fn spec(value: &Value) -> Spec {
    let mut ions = IonMap::from_fn(|_| None);
    for (ion, value) in entries(&value["ions"]) {
        ions[ion] = window(value, MgPerL::clamped);
    }
    let ph = |side: &str| Ph::new(number(&value["mash_ph"][side])).expect("a pH");
    Spec {
        ions,
        mash_calcium: window(&value["mash_calcium"], MgPerL::clamped),
        sulfate_to_chloride: window(&value["sulfate_to_chloride"], MassRatio::clamped),
        sparge_alkalinity: window(&value["sparge_alkalinity"], MgPerLAsCaCO3::clamped),
        mash_ph: Aim {
            target: ph("target"),
            low: ph("low"),
            high: ph("high"),
        },
    }
}

fn limits(value: &Value) -> Limits {
    let mut ions = IonMap::from_fn(|_| None);
    for (ion, most) in entries(&value["ions"]) {
        ions[ion] = Some(MgPerL::new(number(most)).expect("a limit"));
    }
    Limits {
        ions,
        lowest_alkalinity: MgPerLAsCaCO3::new(number(&value["lowest_alkalinity"]))
            .expect("a floor"),
    }
}
