//! One water at one temperature, split into its species.

use super::CarbonateError;
use super::constants::Constants;
use super::equilibrium::{CLOSED, Carbon, Equilibrium, Totals};
use super::species::Species;
use crate::quantity::{
    Activity, Atmospheres, Celsius, MeqPerL, MmolPerL, MolPerKg, Ph, SaturationIndex,
};
use crate::water::{MeasuredWater, Water};

/// A water at one temperature: its pH and what is dissolved in which form.
#[derive(Clone, Debug)]
pub struct Speciation {
    water: Water,
    temperature: Celsius,
    ph: f64,
    ionic_strength: f64,
    /// mol/kg.
    molality: [f64; Species::ALL.len()],
    activity: [f64; Species::ALL.len()],
    pco2: f64,
    /// Ion activity product over solubility product.
    calcite: f64,
    gypsum: f64,
}

/// A solid the water may hold too much of.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Mineral {
    /// CaCO₃
    Calcite,
    /// CaSO₄·2H₂O
    Gypsum,
}

impl Mineral {
    /// Name in words, lower case.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Calcite => "calcite",
            Self::Gypsum => "gypsum",
        }
    }
}

/// A titration does not see less than this, meq/L: 1 mg/L as CaCO₃.
const UNSEEN_ALKALINITY: f64 = 0.02;
/// No water that is measured in the open holds more carbon dioxide, atm.
const HIGHEST_PCO2: f64 = 10.0;

impl Speciation {
    /// The water in a closed vessel: pH from alkalinity and carbon.
    pub fn of(water: &Water, constants: &Constants) -> Result<Self, CarbonateError> {
        let mut equilibrium = Equilibrium::new(Totals::of(water), CLOSED, constants);
        equilibrium.find_ph()?;
        Ok(Self::new(*water, &equilibrium, constants))
    }

    /// The water as it was measured, at the temperature of its pH reading: carbon
    /// from pH and alkalinity. [`water`](Self::water) then holds that carbon.
    ///
    /// The alkalinity counts as total alkalinity, titrated to its own end point;
    /// a titration to a fixed pH of 4.3 reads up to 0.05 meq/L more unless the
    /// laboratory corrects for it. Meant for water before treatment: lactate and citrate
    /// take up acid above any end point. An alkalinity too small for its pH by what no
    /// titration sees (0.02 meq/L) is raised to what the pH asks, with no carbon.
    pub fn of_measured(measured: &MeasuredWater) -> Result<Self, CarbonateError> {
        Self::of_measured_with(measured, &Constants::at(measured.temperature)?)
    }

    /// The same with these constants, whose temperature counts as that of the reading.
    pub fn of_measured_with(
        measured: &MeasuredWater,
        constants: &Constants,
    ) -> Result<Self, CarbonateError> {
        let mut water = Water {
            ions: measured.ions,
            alkalinity: measured.alkalinity.into(),
            carbon: MmolPerL::constant(0.0),
        };
        let totals = Totals::of(&water);
        let mut equilibrium = Equilibrium::new(totals, Carbon::FromAlkalinity, constants);
        equilibrium.settle_at(measured.ph.get())?;
        let unexplained = 1000.0 * (equilibrium.alkalinity - totals.alkalinity);
        if unexplained > UNSEEN_ALKALINITY {
            return Err(CarbonateError::TooLittleAlkalinity {
                ph: measured.ph,
                least: MeqPerL::clamped(1000.0 * equilibrium.alkalinity),
            });
        }
        if unexplained > 1e-9 {
            water.alkalinity = MeqPerL::clamped(1000.0 * equilibrium.alkalinity);
        }
        water.carbon = MmolPerL::clamped(1000.0 * equilibrium.carbon());
        let speciation = Self::new(water, &equilibrium, constants);
        if speciation.pco2 > HIGHEST_PCO2 {
            return Err(CarbonateError::TooMuchCarbonDioxide { ph: measured.ph });
        }
        Ok(speciation)
    }

    pub(super) fn new(water: Water, equilibrium: &Equilibrium, constants: &Constants) -> Self {
        let activity: [f64; Species::ALL.len()] = std::array::from_fn(|i| {
            let class = Species::ALL[i].formation().class as usize;
            equilibrium.molality[i] * equilibrium.coefficients.gamma[class]
        });
        let calcium = activity[Species::Calcium as usize];
        let water_activity = equilibrium.water_activity;
        Self {
            water,
            temperature: constants.temperature,
            ph: equilibrium.ph,
            ionic_strength: equilibrium.ionic_strength,
            molality: equilibrium.molality,
            activity,
            pco2: activity[Species::CarbonDioxide as usize] / constants.henry,
            calcite: calcium * activity[Species::Carbonate as usize] / constants.calcite,
            gypsum: calcium * activity[Species::Sulfate as usize] * water_activity.powi(2)
                / constants.gypsum,
        }
    }

    /// The totals it was made of. Feed them to another temperature's constants to heat
    /// or cool in a closed vessel.
    #[must_use]
    pub const fn water(&self) -> &Water {
        &self.water
    }

    /// What a laboratory would read of it at this temperature.
    #[must_use]
    pub fn measured(&self) -> MeasuredWater {
        MeasuredWater {
            ions: self.water.ions,
            alkalinity: self.water.alkalinity.into(),
            ph: self.ph(),
            temperature: self.temperature,
        }
    }

    /// The temperature of it.
    #[must_use]
    pub const fn temperature(&self) -> Celsius {
        self.temperature
    }

    /// pH, −log₁₀ of the activity of H⁺ at this temperature.
    #[must_use]
    pub fn ph(&self) -> Ph {
        Ph::clamped(self.ph)
    }

    /// Ionic strength of the free ions and charged pairs.
    #[must_use]
    pub fn ionic_strength(&self) -> MolPerKg {
        MolPerKg::clamped(self.ionic_strength)
    }

    /// How much of a species there is.
    #[must_use]
    pub fn amount(&self, species: Species) -> MmolPerL {
        MmolPerL::clamped(1000.0 * self.molality[species as usize])
    }

    /// Activity of a species, molal scale.
    #[must_use]
    pub fn activity(&self, species: Species) -> Activity {
        Activity::clamped(self.activity[species as usize])
    }

    /// Dissolved carbon dioxide, hydrated or not.
    #[must_use]
    pub fn carbon_dioxide(&self) -> MmolPerL {
        self.amount(Species::CarbonDioxide)
    }

    /// Free HCO₃⁻, its pairs not counted.
    #[must_use]
    pub fn bicarbonate(&self) -> MmolPerL {
        self.amount(Species::Bicarbonate)
    }

    /// Free CO₃²⁻, its pairs not counted.
    #[must_use]
    pub fn carbonate(&self) -> MmolPerL {
        self.amount(Species::Carbonate)
    }

    /// Pressure (fugacity) of carbon dioxide the water would be in equilibrium with.
    #[must_use]
    pub fn pco2(&self) -> Atmospheres {
        Atmospheres::clamped(self.pco2)
    }

    /// How far from saturation a mineral is; `None` when one of its parts is absent.
    #[must_use]
    pub fn saturation(&self, mineral: Mineral) -> Option<SaturationIndex> {
        let ratio = self.ratio(mineral);
        (ratio > 0.0).then(|| SaturationIndex::clamped(ratio.log10()))
    }

    /// Ion activity product over solubility product.
    pub(super) const fn ratio(&self, mineral: Mineral) -> f64 {
        match mineral {
            Mineral::Calcite => self.calcite,
            Mineral::Gypsum => self.gypsum,
        }
    }
}
