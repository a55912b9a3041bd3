//! Single waters against printed values.
//!
//! Unless said otherwise: PHREEQC (IPhreeqc 3.7.3, phreeqc.dat), the set-up of
//! `../phreeqc/README.md`, to the digits printed; amounts in mmol/kg.

use chemistry::acid::Acid;
use chemistry::carbonate::{
    CarbonateError, Constants, DoseOutcome, Gas, Mineral, Speciation, Species, amount_to_ph,
    degassed, dose_to_alkalinity, dose_to_ph, open_to, saturated,
};
use chemistry::ion::Ion;
use chemistry::material::{Contribution, Material, Substance};
use chemistry::quantity::{
    Atmospheres, Fraction, Litres, MeqPerL, MgPerL, MgPerLAsCaCO3, Millimoles, Ph,
};
use chemistry::water::{MeasuredWater, Water};

use crate::{celsius, constants, index, log_pco2, speciate, water_of};

const CLOSED: Fraction = Fraction::constant(0.0);

fn near(value: f64, expected: f64, tolerance: f64) {
    assert!(
        (value - expected).abs() <= tolerance,
        "{value} against {expected}"
    );
}

fn relatively_near(value: f64, expected: f64, tolerance: f64) {
    near(value / expected, 1.0, tolerance);
}

/// The pressure whose logarithm this is.
fn atmospheres(log: f64) -> Atmospheres {
    Atmospheres::new(10f64.powf(log)).expect("a pressure")
}

#[test]
fn pure_water_is_neutral_where_its_ions_are_equal() {
    near(speciate(&Water::pure(), 25.0).ph().get(), 6.9974, 0.0002);
}

#[test]
fn water_under_carbon_dioxide_is_as_sour_as_printed() {
    // At 1 atm the program takes a fugacity: 0.995 atm, from the second virial
    // coefficient of carbon dioxide, −123 cm³/mol at 25 °C (handbook value, from memory).
    for (fugacity, ph, carbon) in [(10f64.powf(-3.5), 5.6597, 0.01295), (0.995, 3.911, 34.00)] {
        let gas = Atmospheres::new(fugacity).expect("a pressure");
        let water = open_to(&Water::pure(), gas, &constants(25.0)).expect("a water");
        near(water.ph().get(), ph, 0.0006);
        relatively_near(water.water().carbon.get(), carbon, 0.001);
    }
}

#[test]
fn calcite_dissolves_as_printed_under_carbon_dioxide_and_without() {
    for (temperature, log, ph, calcium) in [
        (25.0, -3.5, 8.2792, 0.4934),
        (25.0, -2.0, 7.2969, 1.6457),
        (60.0, -2.0, 7.3054, 0.9261),
    ] {
        let gas = Gas::Open(atmospheres(log));
        let found = saturated(
            &Water::pure(),
            Mineral::Calcite,
            gas,
            &constants(temperature),
        );
        let water = found.expect("a water").speciation;
        near(water.ph().get(), ph, 0.001);
        let ours = water.water().mmol_per_l(Ion::Calcium).get();
        relatively_near(ours, calcium, 0.002);
        relatively_near(water.water().alkalinity.get(), 2.0 * calcium, 0.002);
        near(index(&water, Mineral::Calcite), 0.0, 1e-6);
    }
    let alone = saturated(
        &Water::pure(),
        Mineral::Calcite,
        Gas::Closed,
        &constants(25.0),
    );
    let alone = alone.expect("a water");
    near(alone.speciation.ph().get(), 9.9068, 0.001);
    relatively_near(alone.dissolved.get(), 0.1230, 0.002);
}

#[test]
fn gypsum_dissolves_as_printed() {
    let found = saturated(
        &Water::pure(),
        Mineral::Gypsum,
        Gas::Closed,
        &constants(25.0),
    );
    let found = found.expect("a water");
    // This water has no buffering: 1e-9 eq/kg, the charge that program leaves unbalanced
    // at this ionic strength, are 0.0015 in pH.
    near(found.speciation.ph().get(), 7.066, 0.002);
    relatively_near(found.dissolved.get(), 15.085, 0.002);
    relatively_near(found.speciation.ionic_strength().get(), 0.0418, 0.002);
}

#[test]
fn supersaturated_water_loses_calcite_until_it_is_saturated() {
    // Twice the calcium and alkalinity of the saturated water above under the same gas.
    let water = water_of(&[(Ion::Calcium, 3.2914)], 6.5826, 7.0);
    let gas = Gas::Open(atmospheres(-2.0));
    let found = saturated(&water, Mineral::Calcite, gas, &constants(25.0)).expect("a water");
    relatively_near(found.precipitated.get(), 1.6457, 0.002);
    near(found.speciation.ph().get(), 7.2969, 0.001);
}

#[test]
fn single_substances_have_the_printed_ph() {
    let bicarbonate = speciate(&water_of(&[(Ion::Sodium, 5.0)], 5.0, 5.0), 25.0);
    near(bicarbonate.ph().get(), 8.2537, 0.001);
    near(log_pco2(&bicarbonate), -2.778, 0.001);
    let lime = speciate(&water_of(&[(Ion::Calcium, 1.0)], 2.0, 0.0), 25.0);
    near(lime.ph().get(), 11.2643, 0.001);
    let phreeqc = Constants::phreeqc_dat(celsius(25.0)).expect("constants");
    for (acid, ph) in [
        (Acid::Hydrochloric, 3.0147),
        (Acid::Sulfuric, 2.7506),
        (Acid::Lactic, 3.5117),
        (Acid::Phosphoric, 3.0643),
    ] {
        let water = Contribution::of_acid(acid, Millimoles::constant(1.0))
            .added_to(&Water::pure(), Litres::constant(1.0));
        let ours = Speciation::of(&water, &phreeqc).expect("a speciation");
        near(ours.ph().get(), ph, 0.005);
    }
}

#[test]
fn a_millimole_of_citric_acid_alone_is_as_sour_as_its_pks_say() {
    // Ideal: h² + K₁h − K₁c = 0 with pK₁ 3.128 gives 3.27; activities and the second
    // step move it by less than 0.03. Arithmetic on NIST 46.
    let water = Contribution::of_acid(Acid::Citric, Millimoles::constant(1.0))
        .added_to(&Water::pure(), Litres::constant(1.0));
    let k1 = 10f64.powf(-3.128);
    let ideal = -(0.5 * ((k1 * k1 + 4.0 * k1 * 1e-3).sqrt() - k1)).log10();
    near(speciate(&water, 25.0).ph().get(), ideal, 0.03);
}

/// 20 °C, pH 7.40, mg/L, alkalinity 200 mg/L as CaCO₃.
fn worked_water() -> MeasuredWater {
    let mut ions = Water::pure().ions;
    for (ion, mg) in [
        (Ion::Calcium, 80.0),
        (Ion::Magnesium, 12.0),
        (Ion::Sodium, 20.0),
        (Ion::Potassium, 2.0),
        (Ion::Sulfate, 60.0),
        (Ion::Chloride, 17.4999),
        (Ion::Nitrate, 10.0),
    ] {
        ions[ion] = MgPerL::new(mg).expect("an ion");
    }
    MeasuredWater {
        ions,
        alkalinity: MgPerLAsCaCO3::constant(200.0),
        ph: Ph::constant(7.40),
        temperature: celsius(20.0),
    }
}

#[test]
fn the_worked_water_is_as_worked_out() {
    let phreeqc = |temperature| Constants::phreeqc_dat(celsius(temperature)).expect("constants");
    let ours = Speciation::of_measured_with(&worked_water(), &phreeqc(20.0));
    let ours = ours.expect("a speciation");
    relatively_near(ours.ionic_strength().get(), 0.008_437_9, 0.0005);
    relatively_near(ours.water().alkalinity.get(), 3.996_563, 0.0001);
    relatively_near(ours.water().carbon.get(), 4.322_58, 0.0005);
    for (species, amount) in [
        (Species::CarbonDioxide, 0.340_074),
        (Species::Bicarbonate, 3.894_42),
        (Species::Carbonate, 0.005_429_52),
        (Species::CalciumBicarbonate, 0.058_374_3),
        (Species::CalciumCarbonate, 0.007_366_97),
        (Species::CalciumSulfate, 0.078_551_2),
        (Species::MagnesiumBicarbonate, 0.014_192),
        (Species::MagnesiumCarbonate, 0.001_049_01),
        (Species::MagnesiumSulfate, 0.023_322),
        (Species::Calcium, 1.851_81),
        (Species::Magnesium, 0.455_143),
    ] {
        relatively_near(ours.amount(species).get(), amount, 0.002);
    }
    for (species, log_gamma) in [
        (Species::Calcium, -0.160_13),
        (Species::Magnesium, -0.157_75),
        (Species::Carbonate, -0.159_85),
        (Species::Sulfate, -0.161_86),
        (Species::Bicarbonate, -0.039_96),
        (Species::Sodium, -0.040_68),
        (Species::Hydrogen, -0.036_55),
    ] {
        let gamma = 1000.0 * ours.activity(species).get() / ours.amount(species).get();
        near(gamma.log10(), log_gamma, 0.0003);
    }
    near(index(&ours, Mineral::Calcite), 0.1357, 0.002);
    near(index(&ours, Mineral::Gypsum), -1.7565, 0.002);
    near(log_pco2(&ours), -2.0605, 0.001);
    let hot = Speciation::of(ours.water(), &phreeqc(65.0)).expect("a speciation");
    near(hot.ph().get(), 7.2691, 0.001);
    near(index(&hot, Mineral::Calcite), 0.5679, 0.002);
}

#[test]
fn the_worked_water_takes_the_printed_acid_to_ph_5_50() {
    let water = *Speciation::of_measured(&worked_water())
        .expect("a speciation")
        .water();
    let phreeqc = Constants::phreeqc_dat(celsius(20.0)).expect("constants");
    let target = Ph::constant(5.50);
    for (acid, millimoles) in [
        (Acid::Hydrochloric, 3.4459),
        (Acid::Sulfuric, 1.7228),
        (Acid::Lactic, 3.5175),
        (Acid::Phosphoric, 3.3263),
    ] {
        let outcome = dose_to_ph(&water, acid, target, CLOSED, &phreeqc).expect("an outcome");
        let dose = outcome.reached().expect("a dose");
        relatively_near(dose.amount.get(), millimoles, 0.001);
        near(dose.after.carbon_lost.get(), 0.0, 1e-9);
    }
    // The same hydrochloric acid weighed out as a material: 28 % w/w is 8.745 mmol/mL at
    // 1.139 g/mL (arithmetic).
    let acid = Material::usual(Substance::HydrochloricAcid).expect("a material");
    let volume = Litres::constant(1000.0);
    let outcome = amount_to_ph(&water, volume, &acid.per_unit(), target, CLOSED, &phreeqc);
    let amount = outcome
        .expect("an outcome")
        .reached()
        .expect("a dose")
        .amount;
    let per_ml = 0.28 * 1.139 / 36.458 * 1000.0;
    relatively_near(amount.get(), 3445.9 / per_ml, 0.001);
}

#[test]
fn with_all_carbon_dioxide_lost_acid_is_needed_for_every_equivalent() {
    // With no carbon left the pH is that of the acid beyond the alkalinity: at pH 5.5
    // 10^-5.5/γ = 0.0034 meq/L of it (arithmetic).
    let water = *Speciation::of_measured(&worked_water())
        .expect("a speciation")
        .water();
    let all = Fraction::constant(1.0);
    let target = Ph::constant(5.50);
    let outcome = dose_to_ph(&water, Acid::Hydrochloric, target, all, &constants(20.0));
    let outcome = outcome.expect("an outcome");
    let dose = outcome.reached().expect("a dose");
    near(dose.amount.get(), 3.996_563 + 0.0034, 0.001);
    relatively_near(dose.after.carbon_lost.get(), water.carbon.get(), 1e-6);
}

#[test]
fn a_lost_share_of_carbon_dioxide_is_that_share_of_what_there_would_be() {
    // By definition, on water acidified and left to lose 40 %: lost/(lost + left).
    let water = *Speciation::of_measured(&worked_water())
        .expect("a speciation")
        .water();
    let outcome = dose_to_alkalinity(
        &water,
        Acid::Lactic,
        MeqPerL::constant(0.5),
        Fraction::constant(0.4),
        &constants(20.0),
    );
    let outcome = outcome.expect("an outcome");
    let dose = outcome.reached().expect("a dose");
    near(dose.amount.get(), 3.996_563 - 0.5, 0.0005);
    let lost = dose.after.carbon_lost.get();
    let left = dose.after.speciation.carbon_dioxide().get();
    near(lost / (lost + left), 0.4, 1e-6);
    near(dose.after.speciation.water().alkalinity.get(), 0.5, 1e-9);
    let closed = degassed(dose.after.speciation.water(), CLOSED, &constants(20.0));
    let again = closed.expect("a water").speciation.ph();
    near(again.get(), dose.after.speciation.ph().get(), 1e-6);
}

#[test]
fn calcium_citrate_takes_calcium_away_and_lets_more_protons_go() {
    // From the stability constants (NIST 46): at pH 6 and 2 mmol/L of calcium most
    // citrate is bound, K·a(Ca) being about 10^4.87 × 0.0011 = 80.
    let soft = water_of(&[(Ion::Sodium, 4.0)], 4.0, 4.3);
    let hard = water_of(&[(Ion::Calcium, 2.0)], 4.0, 4.3);
    let dose = |water: &Water| {
        let target = Ph::constant(6.0);
        let outcome = dose_to_ph(water, Acid::Citric, target, CLOSED, &constants(20.0));
        outcome
            .expect("an outcome")
            .reached()
            .expect("a dose")
            .clone()
    };
    let (soft, hard) = (dose(&soft), dose(&hard));
    assert!(hard.amount < soft.amount);
    let bound = hard.after.speciation.amount(Species::CalciumCitrate).get();
    assert!(bound / hard.amount.get() > 0.8, "{bound}");
}

#[test]
fn water_that_is_sour_enough_needs_no_acid_and_ph_1_5_is_out_of_reach_of_lactic_acid() {
    let water = *Speciation::of_measured(&worked_water())
        .expect("a speciation")
        .water();
    let to = |ph: f64| {
        let target = Ph::new(ph).expect("a pH");
        dose_to_ph(&water, Acid::Lactic, target, CLOSED, &constants(20.0)).expect("an outcome")
    };
    assert!(matches!(to(7.5), DoseOutcome::NotNeeded(_)));
    assert!(matches!(to(1.5), DoseOutcome::OutOfReach));
}

#[test]
fn what_cannot_be_is_refused_with_its_reason() {
    let mut water = worked_water();
    water.temperature = celsius(95.0);
    assert!(matches!(
        Speciation::of_measured(&water),
        Err(CarbonateError::Temperature(_))
    ));
    // At pH 11 hydroxide alone is 0.7 meq/L (pKw 14.17).
    let mut water = worked_water();
    (water.ph, water.alkalinity) = (Ph::constant(11.0), MgPerLAsCaCO3::constant(10.0));
    let refused = Speciation::of_measured(&water);
    let Err(CarbonateError::TooLittleAlkalinity { least, .. }) = refused else {
        panic!("{refused:?}");
    };
    assert!(least.get() > 0.6, "{least}");
    // pH 4 in water of alkalinity 4 meq/L: 4 × 10^(6.38 − 4) is nearly 1 mol/L of CO₂.
    let mut water = worked_water();
    water.ph = Ph::constant(4.0);
    assert!(matches!(
        Speciation::of_measured(&water),
        Err(CarbonateError::TooMuchCarbonDioxide { .. })
    ));
    let brine = water_of(&[(Ion::Sodium, 1000.0), (Ion::Chloride, 1000.0)], 0.0, 0.0);
    assert!(matches!(
        Speciation::of(&brine, &constants(20.0)),
        Err(CarbonateError::TooConcentrated)
    ));
    let caustic = water_of(&[(Ion::Sodium, 400.0)], 400.0, 0.0);
    let refused = Speciation::of(&caustic, &constants(20.0));
    assert!(
        matches!(refused, Err(CarbonateError::BeyondPh(_))),
        "{refused:?}"
    );
}

#[test]
fn demineralised_water_of_ph_8_and_no_alkalinity_is_water_without_carbon() {
    // Its hydroxide is 0.001 meq/L, which no titration sees.
    let mut water = worked_water();
    water.ions = Water::pure().ions;
    (water.ph, water.alkalinity) = (Ph::constant(8.0), MgPerLAsCaCO3::constant(0.0));
    let ours = Speciation::of_measured(&water).expect("a speciation");
    near(ours.water().carbon.get(), 0.0, 1e-12);
    near(speciate(ours.water(), 20.0).ph().get(), 8.0, 1e-6);
}
