//! What holds for every water.

use chemistry::acid::Acid;
use chemistry::carbonate::{
    Gas, Mineral, Speciation, Species, amount_to_ph, dose_to_ph, saturated,
};
use chemistry::ion::{Ion, IonMap};
use chemistry::material::{Contribution, Material, Substance};
use chemistry::quantity::{Atmospheres, Celsius, Fraction, Litres, MgPerL, Millimoles, Ph};
use chemistry::water::{MeasuredWater, Water};
use proptest::prelude::*;

use crate::{constants, index, speciate, water_of};

/// From rain to brackish, from free acid to lime water, treated or not.
fn any_water() -> impl Strategy<Value = Water> {
    let amounts = prop::collection::vec(prop_oneof![Just(0.0), 1e-6..1.0_f64, 0.0..10.0_f64], 12);
    (amounts, -3.0..12.0_f64).prop_map(|(mmol, alkalinity)| {
        let ions = [
            (Ion::Calcium, mmol[0]),
            (Ion::Magnesium, mmol[1]),
            (Ion::Sodium, mmol[2]),
            (Ion::Potassium, mmol[3]),
            (Ion::Sulfate, mmol[4]),
            (Ion::Chloride, mmol[5]),
            (Ion::Nitrate, mmol[6]),
            (Ion::Phosphate, mmol[7]),
            (Ion::Lactate, mmol[8]),
            (Ion::Citrate, mmol[9]),
            (Ion::Iron, 0.01 * mmol[10]),
        ];
        water_of(&ions, alkalinity, mmol[11])
    })
}

/// The ions a species is made of besides hydrogen and oxygen; carbonate is `None`.
fn parts(species: Species) -> Vec<Option<Ion>> {
    let symbol = species.symbol();
    [
        ("Ca", Some(Ion::Calcium)),
        ("Mg", Some(Ion::Magnesium)),
        ("Na", Some(Ion::Sodium)),
        ("K", Some(Ion::Potassium)),
        ("SO", Some(Ion::Sulfate)),
        ("CO", None),
        ("PO", Some(Ion::Phosphate)),
        ("lactate", Some(Ion::Lactate)),
        ("citrate", Some(Ion::Citrate)),
    ]
    .into_iter()
    .filter(|(part, _)| symbol.contains(part))
    .map(|(_, ion)| ion)
    .collect()
}

proptest! {
    #[test]
    fn no_mass_is_made_or_lost(water in any_water(), temperature in 0.0..90.0_f64) {
        let ours = speciate(&water, temperature);
        let total = |wanted: Option<Ion>| -> f64 {
            let holding = Species::ALL.into_iter().filter(|species| parts(*species).contains(&wanted));
            holding.map(|species| ours.amount(species).get()).sum()
        };
        for ion in [
            Ion::Calcium, Ion::Magnesium, Ion::Sodium, Ion::Potassium, Ion::Sulfate,
            Ion::Phosphate, Ion::Lactate, Ion::Citrate,
        ] {
            let given = water.mmol_per_l(ion).get();
            prop_assert!((total(Some(ion)) - given).abs() <= 1e-9 * given, "{ion:?}");
        }
        let given = water.carbon.get();
        prop_assert!((total(None) - given).abs() <= 1e-9 * given);
    }

    /// Charge of all species is what cations less anions and alkalinity leave, counted at
    /// the reference level (H₂PO₄⁻, lactate⁻, citrate³⁻).
    #[test]
    fn no_charge_is_made_or_lost(water in any_water(), temperature in 0.0..90.0_f64) {
        let ours = speciate(&water, temperature);
        let species: f64 = Species::ALL
            .into_iter()
            .map(|species| f64::from(species.charge()) * ours.amount(species).get())
            .sum();
        let mut given = -water.alkalinity.get();
        let mut bystanders = 0.0;
        for ion in Ion::ALL {
            let charge = if ion == Ion::Phosphate { -1.0 } else { f64::from(ion.charge()) };
            let equivalents = charge * water.mmol_per_l(ion).get();
            given += equivalents;
            if matches!(ion, Ion::Chloride | Ion::Nitrate | Ion::Iron) {
                bystanders += equivalents;
            }
        }
        // A pH found to 1e-9 leaves 2.3e-9 of what buffers it.
        let tolerance = 1e-8 * (1.0 + water.alkalinity.get().abs());
        prop_assert!((species + bystanders - given).abs() < tolerance, "{species} + {bystanders}, {given}");
    }

    #[test]
    fn the_order_of_mixing_does_not_matter(
        a in any_water(), b in any_water(), c in any_water(),
        litres in prop::array::uniform3(1.0..1000.0_f64),
    ) {
        let [la, lb, lc] = litres.map(|litres| Litres::new(litres).unwrap());
        let first = Water::mixed(&[(Water::mixed(&[(a, la), (b, lb)]), la + lb), (c, lc)]);
        let second = Water::mixed(&[(a, la), (Water::mixed(&[(c, lc), (b, lb)]), lb + lc)]);
        let (first, second) = (speciate(&first, 20.0), speciate(&second, 20.0));
        // A water without buffering turns by 1e-7 with the last digit of its totals.
        prop_assert!((first.ph().get() - second.ph().get()).abs() < 1e-6);
    }

    #[test]
    fn more_acid_never_raises_the_ph(
        water in any_water(),
        acid in prop::sample::select(Acid::ALL.to_vec()),
        temperature in 0.0..90.0_f64,
        doses in prop::array::uniform2(0.0..10.0_f64),
    ) {
        let ph = |dose: f64| {
            let acid = Contribution::of_acid(acid, Millimoles::new(dose).unwrap());
            speciate(&acid.added_to(&water, Litres::constant(1.0)), temperature).ph().get()
        };
        let (less, more) = (doses[0].min(doses[1]), doses[0].max(doses[1]));
        prop_assert!(ph(more) <= ph(less) + 1e-8);
    }

    #[test]
    fn a_water_is_found_again_from_its_ph(water in any_water(), temperature in 0.0..90.0_f64) {
        let ours = speciate(&water, temperature);
        let again = Speciation::of_measured(&ours.measured());
        // Where carbon is a trace beside other buffers it cannot be told from the pH.
        let again = again.expect("a speciation");
        prop_assert!((again.ph().get() - ours.ph().get()).abs() < 1e-12);
        prop_assert!((again.water().alkalinity.get() - water.alkalinity.get()).abs() < 1e-6);
        let tolerance = if ours.ph().get() > 5.0 { 1e-6 } else { 1e-2 };
        let carbon = again.water().carbon.get();
        prop_assert!((carbon - water.carbon.get()).abs() < tolerance, "{carbon}, {}", water.carbon);
        let back = speciate(again.water(), temperature);
        prop_assert!((back.ph().get() - ours.ph().get()).abs() < 1e-6);
    }

    #[test]
    fn whatever_was_measured_the_figures_are_finite_or_refused(
        water in any_water(), times in 0.0..100.0_f64, ph in 0.0..14.0_f64,
        temperature in -5.0..110.0_f64,
    ) {
        let measured = MeasuredWater {
            ions: IonMap::from_fn(|ion| MgPerL::clamped(times * water.ions[ion].get())),
            alkalinity: water.alkalinity.into(),
            ph: Ph::new(ph).unwrap(),
            temperature: Celsius::new(temperature).unwrap(),
        };
        if let Ok(ours) = Speciation::of_measured(&measured) {
            prop_assert!(ours.ionic_strength().get() <= 0.5);
            for species in Species::ALL {
                let (amount, activity) = (ours.amount(species).get(), ours.activity(species).get());
                prop_assert!(amount.is_finite() && activity.is_finite());
                // Clamping would hide a wrong number at the ends of a unit.
                prop_assert!(amount < 5_000.0 && activity < 50.0, "{species:?} {amount} {activity}");
            }
        }
    }

    #[test]
    fn a_dose_to_a_ph_leads_to_that_ph(
        water in any_water(),
        acid in prop::sample::select(Acid::ALL.to_vec()),
        target in 4.5..9.0_f64,
        lost in prop_oneof![Just(0.0), 0.0..1.0_f64, Just(1.0)],
        temperature in 0.0..90.0_f64,
    ) {
        let target = Ph::new(target).unwrap();
        let lost = Fraction::new(lost).unwrap();
        let outcome = dose_to_ph(&water, acid, target, lost, &constants(temperature)).unwrap();
        let Some(dose) = outcome.reached() else { return Ok(()) };
        let ours = speciate(dose.after.speciation.water(), temperature);
        prop_assert!((ours.ph().get() - target.get()).abs() < 1e-4, "{}", ours.ph());
        let kept = dose.after.speciation.water().carbon + dose.after.carbon_lost;
        prop_assert!((kept.get() - water.carbon.get()).abs() < 1e-9);
    }

    #[test]
    fn a_base_leads_to_its_ph_as_an_acid_does(
        water in any_water(), target in 6.0..11.0_f64, temperature in 0.0..90.0_f64,
    ) {
        let target = Ph::new(target).unwrap();
        let lime = Material::usual(Substance::SlakedLime).unwrap();
        let volume = Litres::constant(500.0);
        let outcome = amount_to_ph(
            &water, volume, &lime.per_unit(), target, Fraction::constant(0.0),
            &constants(temperature),
        ).unwrap();
        let before = speciate(&water, temperature).ph();
        let Some(dose) = outcome.reached() else {
            prop_assert!(before.get() >= target.get() - 1e-6, "{before} {target} {outcome:?}");
            return Ok(());
        };
        let limed = lime.contribution(dose.amount).added_to(&water, volume);
        let ours = speciate(&limed, temperature).ph().get();
        prop_assert!((ours - target.get()).abs() < 1e-5, "{ours} {target}");
    }

    #[test]
    fn a_saturated_water_is_saturated(
        water in any_water(), temperature in 0.0..90.0_f64,
        gas in prop_oneof![
            Just(Gas::Closed),
            (-4.0..0.0_f64).prop_map(|log| Gas::Open(Atmospheres::clamped(10f64.powf(log)))),
        ],
        mineral in prop::sample::select(vec![Mineral::Calcite, Mineral::Gypsum]),
    ) {
        let found = saturated(&water, mineral, gas, &constants(temperature));
        let found = found.unwrap();
        let left = index(&found.speciation, mineral);
        prop_assert!(left.abs() < 1e-4, "{left} {found:?}");
        let calcium = found.speciation.water().mmol_per_l(Ion::Calcium).get();
        let moved = found.dissolved.get() - found.precipitated.get();
        prop_assert!((calcium - water.mmol_per_l(Ion::Calcium).get() - moved).abs() < 1e-8);
    }

    #[test]
    fn salt_that_takes_no_part_raises_the_ionic_strength_by_its_own(
        water in any_water(), mmol in 0.0..10.0_f64,
    ) {
        // Sodium chloride in a water without sulfate, carbonate or phosphate to pair with.
        let ions = IonMap::from_fn(|ion| match ion {
            Ion::Sulfate | Ion::Phosphate | Ion::Citrate => MgPerL::constant(0.0),
            other => water.ions[other],
        });
        let mut plain = water_of(&[], water.alkalinity.get(), 0.0);
        plain.ions = ions;
        let mut salted = plain;
        for ion in [Ion::Sodium, Ion::Chloride] {
            salted.ions[ion] = MgPerL::new(plain.ions[ion].get() + mmol * ion.grams_per_mol()).unwrap();
        }
        let added = 1000.0 * (speciate(&salted, 25.0).ionic_strength().get()
            - speciate(&plain, 25.0).ionic_strength().get());
        // Activities shift lactic acid and metal hydroxides a little.
        prop_assert!((added - mmol).abs() <= 0.05 * mmol + 1e-9, "{added}");
    }
}
