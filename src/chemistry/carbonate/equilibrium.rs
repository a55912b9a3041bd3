//! The solver: which species totals split into, at a given or an unknown pH.
//!
//! Inside, at one pH: every pair joins one cation and one anion, so with the cations
//! held each anion follows by one division, and the other way round. Taking turns
//! never overshoots. The ionic strength is then brought up to date, and again, until
//! nothing moves. Outside, the pH whose alkalinity is the given one, by Newton and
//! secant steps kept within a bracket. Amounts are mol/kg.

use std::f64::consts::LN_10;

use super::CarbonateError;
use super::activity::Coefficients;
use super::constants::Constants;
use super::species::{ANIONS, Anion, CATIONS, Cation, FORMATIONS, Species};
use crate::ion::Ion;
use crate::quantity::MeqPerL;
use crate::water::Water;

/// The pH between which solutions are sought.
pub(super) const LOWEST_PH: f64 = 1.0;
pub(super) const HIGHEST_PH: f64 = 13.0;
/// Ionic strength up to which the activity coefficients are trusted here, mol/kg.
const STRONGEST: f64 = 0.5;
/// Beyond this the coefficients run away; no solution is sought there.
const RUNAWAY: f64 = 1.0;
/// How far ionic strength is settled, relative: of an answer, and on the way to it.
const FINE: f64 = 1e-11;
const ROUGH: f64 = 1e-3;

const SPECIES: usize = Species::ALL.len();
const CARBONATE: usize = Anion::Carbonate as usize;
const CARBON_DIOXIDE: usize = Species::CarbonDioxide as usize;

/// Totals, mol/kg and eq/kg.
#[derive(Clone, Copy, Debug)]
pub(super) struct Totals {
    pub(super) cations: [f64; CATIONS],
    pub(super) anions: [f64; ANIONS],
    /// Ions that only add to the ionic strength: Σ m and Σ z² m.
    bystanders: f64,
    bystander_charge: f64,
    pub(super) alkalinity: f64,
}

/// Ions nothing happens to.
const BYSTANDERS: [Ion; 7] = [
    Ion::Ammonium,
    Ion::Iron,
    Ion::Manganese,
    Ion::Chloride,
    Ion::Nitrate,
    Ion::Nitrite,
    Ion::Fluoride,
];

impl Totals {
    pub(super) fn of(water: &Water) -> Self {
        let mol = |ion: Ion| water.ions[ion].get() / (1000.0 * ion.grams_per_mol());
        let (mut bystanders, mut bystander_charge) = (0.0, 0.0);
        for ion in BYSTANDERS {
            bystanders += mol(ion);
            bystander_charge += f64::from(ion.charge()).powi(2) * mol(ion);
        }
        Self {
            cations: [
                mol(Ion::Calcium),
                mol(Ion::Magnesium),
                mol(Ion::Sodium),
                mol(Ion::Potassium),
                1.0,
            ],
            anions: [
                mol(Ion::Sulfate),
                water.carbon.get() / 1000.0,
                mol(Ion::Phosphate),
                mol(Ion::Lactate),
                mol(Ion::Citrate),
                1.0,
            ],
            bystanders,
            bystander_charge,
            alkalinity: water.alkalinity.get() / 1000.0,
        }
    }

    /// These totals and `times` the others.
    pub(super) fn plus(&self, other: &Self, times: f64) -> Self {
        let mut sum = *self;
        // The last of each counts nothing and stays one.
        for (value, more) in sum.cations[..CATIONS - 1].iter_mut().zip(other.cations) {
            *value += times * more;
        }
        for (value, more) in sum.anions[..ANIONS - 1].iter_mut().zip(other.anions) {
            *value += times * more;
        }
        sum.bystanders += times * other.bystanders;
        sum.bystander_charge += times * other.bystander_charge;
        sum.alkalinity += times * other.alkalinity;
        sum
    }
}

/// What is known of the carbon.
#[derive(Clone, Copy, Debug)]
pub(super) enum Carbon {
    /// Its total, in which CO₂ counts this many times: once in a closed vessel, more
    /// when CO₂ has escaped in proportion to what is left.
    Kept { carbon_dioxide_weight: f64 },
    /// The activity of CO₂, held by a gas.
    Held { activity: f64 },
    /// Whatever makes up the alkalinity at a given pH.
    FromAlkalinity,
}

/// A closed vessel.
pub(super) const CLOSED: Carbon = Carbon::Kept {
    carbon_dioxide_weight: 1.0,
};

/// The distribution over species, and what it was found with.
#[derive(Clone, Debug)]
pub(super) struct Equilibrium<'a> {
    constants: &'a Constants,
    totals: Totals,
    carbon: Carbon,
    /// Species that can exist with these totals, and how many they are.
    active: [u8; SPECIES],
    active_count: usize,
    /// Free cations and anions.
    cations: [f64; CATIONS],
    anions: [f64; ANIONS],
    pub(super) ph: f64,
    pub(super) ionic_strength: f64,
    pub(super) coefficients: Coefficients,
    pub(super) water_activity: f64,
    pub(super) molality: [f64; SPECIES],
    /// Alkalinity of the distribution, eq/kg.
    pub(super) alkalinity: f64,
    /// d alkalinity / d pH with metals and coefficients held, eq/kg.
    buffering: f64,
}

/// Sums over species by the cation and the anion they hold.
type ByPair = [[f64; ANIONS]; CATIONS];

const ALKALINITY: [f64; SPECIES] = per_species(0);
const CHARGE_SQUARED: [f64; SPECIES] = per_species(1);

const fn per_species(what: u8) -> [f64; SPECIES] {
    let mut values = [0.0; SPECIES];
    let mut i = 0;
    while i < SPECIES {
        let charge = FORMATIONS[i].charge() as f64;
        values[i] = match what {
            0 => FORMATIONS[i].alkalinity() as f64,
            _ => charge * charge,
        };
        i += 1;
    }
    values
}

impl<'a> Equilibrium<'a> {
    pub(super) fn new(totals: Totals, carbon: Carbon, constants: &'a Constants) -> Self {
        let [calcium, magnesium, sodium, potassium, _] = totals.cations;
        let charge_squared = totals.bystander_charge
            + 4.0 * (calcium + magnesium + totals.anions[Anion::Sulfate as usize])
            + sodium
            + potassium
            + totals.alkalinity.abs();
        let ionic_strength = (0.5 * charge_squared).clamp(1e-9, RUNAWAY);
        let mut new = Self {
            constants,
            totals,
            carbon,
            active: [0; SPECIES],
            active_count: 0,
            cations: totals.cations,
            anions: [0.0; ANIONS],
            ph: 7.0,
            ionic_strength,
            coefficients: Coefficients::at(ionic_strength, &constants.debye_hueckel),
            water_activity: 1.0,
            molality: [0.0; SPECIES],
            alkalinity: 0.0,
            buffering: 0.0,
        };
        new.anions[Anion::None as usize] = 1.0;
        new.choose_species();
        new
    }

    /// The same search with other totals, starting from where it stands.
    pub(super) fn set_totals(&mut self, totals: Totals) {
        self.totals = totals;
        self.choose_species();
    }

    fn choose_species(&mut self) {
        let mut present = self.totals.anions.map(|total| total > 0.0);
        present[CARBONATE] |= !matches!(self.carbon, Carbon::Kept { .. });
        self.active_count = 0;
        for (index, formation) in FORMATIONS.iter().enumerate() {
            if self.totals.cations[formation.cation as usize] > 0.0
                && present[formation.anion as usize]
            {
                self.active[self.active_count] = index as u8;
                self.active_count += 1;
            } else {
                self.molality[index] = 0.0;
            }
        }
    }

    /// Finds the pH whose alkalinity is the total.
    ///
    /// Far from it a rough distribution points the way as well as a fine one.
    pub(super) fn find_ph(&mut self) -> Result<(), CarbonateError> {
        let (mut low, mut high) = (LOWEST_PH, HIGHEST_PH);
        let mut ph = self.first_guess().clamp(low, high);
        let mut tolerance = ROUGH;
        let mut before: Option<(f64, f64)> = None;
        for _ in 0..100 {
            self.settle(ph, tolerance);
            let excess = self.alkalinity - self.totals.alkalinity;
            // A rough distribution may mistake the side by so much.
            let slack = 100.0 * tolerance;
            if excess > 0.0 {
                high = high.min(ph + slack);
            } else {
                low = low.max(ph - slack);
            }
            // The buffering leaves out how metals and activities follow, which matters
            // where an anion holds nearly all of a metal; two points of the true curve
            // know that, when they lie apart enough to tell.
            let mut slope = self.buffering;
            if let Some((ph_before, excess_before)) = before {
                let secant = (excess - excess_before) / (ph - ph_before);
                if (0.03..30.0).contains(&(secant / slope)) {
                    slope = secant;
                }
            }
            before = Some((ph, excess));
            let step = -excess / slope;
            if step.abs() <= 1e-9 && tolerance <= FINE {
                return self.trusted();
            }
            let mut next = (ph + step.clamp(-1.0, 1.0)).clamp(LOWEST_PH, HIGHEST_PH);
            if next == ph && step.abs() > 1e-9 {
                break;
            }
            if !(low..=high).contains(&next) {
                next = 0.5 * (low + high);
            }
            ph = next;
            // Each step leaves about the square of itself to go.
            tolerance = (0.1 * step * step).clamp(FINE, ROUGH);
        }
        Err(CarbonateError::BeyondPh(MeqPerL::clamped(
            1000.0 * self.totals.alkalinity,
        )))
    }

    /// Finds the distribution at one pH.
    pub(super) fn settle_at(&mut self, ph: f64) -> Result<(), CarbonateError> {
        self.settle(ph, FINE);
        self.trusted()
    }

    /// Carbon of the distribution, mol/kg.
    pub(super) fn carbon(&self) -> f64 {
        let carbonates = FORMATIONS.iter().zip(&self.molality);
        carbonates
            .filter(|(formation, _)| formation.anion as usize == CARBONATE)
            .map(|(_, molality)| molality)
            .sum()
    }

    fn trusted(&self) -> Result<(), CarbonateError> {
        if self.ionic_strength <= STRONGEST {
            Ok(())
        } else {
            Err(CarbonateError::TooConcentrated)
        }
    }

    /// The pH of carbonic acid and water alone, ideal but for one coefficient.
    fn first_guess(&self) -> f64 {
        let k = |species: Species| self.constants.formation[species as usize];
        let gamma = self.coefficients.gamma[Species::Bicarbonate.formation().class as usize];
        let activities = gamma * gamma;
        let k2 = 1.0 / (k(Species::Bicarbonate) * activities * activities);
        let k1 = k(Species::Bicarbonate) / (k(Species::CarbonDioxide) * activities);
        let kw = k(Species::Hydroxide) / activities;
        let (alkalinity, carbon) = match self.carbon {
            Carbon::Kept { .. } => (self.totals.alkalinity, self.totals.anions[CARBONATE]),
            // Carbon dioxide is known: [HCO₃⁻] + [OH⁻] − [H⁺] = alkalinity.
            Carbon::Held { activity } => {
                let product = k1 * activity + kw;
                let a = self.totals.alkalinity;
                return -(gamma * hydrogen(a, product)).log10();
            }
            Carbon::FromAlkalinity => return 7.0,
        };
        let per_carbon = alkalinity / carbon.max(1e-12);
        let protons = if per_carbon <= 0.01 {
            hydrogen(alkalinity, k1 * carbon + kw)
        } else if per_carbon < 1.95 {
            // n h² + (n − 1) K₁ h + (n − 2) K₁ K₂ = 0
            let linear = (per_carbon - 1.0) * k1;
            let root = (linear * linear - 4.0 * per_carbon * (per_carbon - 2.0) * k1 * k2).sqrt();
            // Whichever form loses no digits.
            if linear > 0.0 {
                2.0 * (2.0 - per_carbon) * k1 * k2 / (linear + root)
            } else {
                (root - linear) / (2.0 * per_carbon)
            }
        } else {
            hydrogen(alkalinity - 2.0 * carbon, kw)
        };
        -(gamma * protons).log10()
    }

    /// The distribution at one pH, and with it the alkalinity.
    fn settle(&mut self, ph: f64, tolerance: f64) {
        self.ph = ph;
        // The ionic strength settles by a factor of about thirty a round; more than a
        // few rounds happen only where the coefficients run away.
        for _ in 0..40 {
            self.distribute(tolerance);
            let change = self.ionic_strength - self.coefficients.ionic_strength;
            if change.abs() <= tolerance * self.ionic_strength {
                break;
            }
            self.coefficients =
                Coefficients::at(self.ionic_strength, &self.constants.debye_hueckel);
        }
    }

    /// The distribution with the coefficients held, and the ionic strength of it.
    fn distribute(&mut self, tolerance: f64) {
        let protons = 10f64.powf(-self.ph);
        let proton_powers = [
            1.0 / protons,
            1.0,
            protons,
            protons * protons,
            protons * protons * protons,
        ];
        let water_powers = [1.0 / self.water_activity, 1.0, self.water_activity];
        let gamma = |species: Species| self.coefficients.gamma[species.formation().class as usize];
        let cation_gamma = [
            gamma(Species::Calcium),
            gamma(Species::Magnesium),
            gamma(Species::Sodium),
            gamma(Species::Potassium),
            1.0,
        ];
        let anion_gamma = [
            gamma(Species::Sulfate),
            gamma(Species::Carbonate),
            gamma(Species::Phosphate),
            gamma(Species::Lactate),
            gamma(Species::Citrate),
            1.0,
        ];
        let carbon_dioxide_weight = match self.carbon {
            Carbon::Kept {
                carbon_dioxide_weight,
            } => carbon_dioxide_weight,
            _ => 1.0,
        };

        // Each species per molality of its cation and of its anion.
        let mut each = [0.0; SPECIES];
        let mut amount: ByPair = [[0.0; ANIONS]; CATIONS];
        let mut alkalinity = amount;
        let active = &self.active[..self.active_count];
        for &index in active {
            let index = usize::from(index);
            let formation = &FORMATIONS[index];
            let (cation, anion) = (formation.cation as usize, formation.anion as usize);
            let per = self.constants.formation[index]
                * proton_powers[(formation.protons + 1) as usize]
                * water_powers[(formation.water + 1) as usize]
                * cation_gamma[cation]
                * anion_gamma[anion]
                * self.coefficients.inverse[formation.class as usize];
            each[index] = per;
            amount[cation][anion] += per;
            alkalinity[cation][anion] += per * ALKALINITY[index];
        }
        amount[Cation::None as usize][CARBONATE] +=
            each[CARBON_DIOXIDE] * (carbon_dioxide_weight - 1.0);
        let held_carbonate = match self.carbon {
            Carbon::Held { activity } => {
                let class = Species::CarbonDioxide.formation().class as usize;
                Some(activity * self.coefficients.inverse[class] / each[CARBON_DIOXIDE])
            }
            _ => None,
        };
        self.take_turns(&amount, &alkalinity, held_carbonate, 0.01 * tolerance);

        let active = &self.active[..self.active_count];
        let mut charge_squared = self.totals.bystander_charge;
        let mut solutes = self.totals.bystanders;
        self.alkalinity = 0.0;
        // Of each anion: its amount, Σ protons and Σ protons².
        let mut moments = [[0.0; 3]; ANIONS];
        for &index in active {
            let index = usize::from(index);
            let formation = &FORMATIONS[index];
            let (cation, anion) = (formation.cation as usize, formation.anion as usize);
            let molality = each[index] * self.cations[cation] * self.anions[anion];
            self.molality[index] = molality;
            charge_squared += CHARGE_SQUARED[index] * molality;
            solutes += molality;
            self.alkalinity += ALKALINITY[index] * molality;
            let protons = f64::from(formation.protons);
            moments[anion][0] += molality;
            moments[anion][1] += protons * molality;
            moments[anion][2] += protons * protons * molality;
        }
        let lost = self.molality[CARBON_DIOXIDE] * (carbon_dioxide_weight - 1.0);
        moments[CARBONATE][0] += lost;
        moments[CARBONATE][1] += 2.0 * lost;
        moments[CARBONATE][2] += 4.0 * lost;
        let mut buffering = 0.0;
        for (anion, [amount, protons, squares]) in moments.into_iter().enumerate() {
            // An anion of known total shifts between its species; H⁺, OH⁻ and what a
            // gas holds grow and shrink freely.
            buffering += if anion == Anion::None as usize {
                squares
            } else if anion == CARBONATE && held_carbonate.is_some() {
                4.0 * amount - 4.0 * protons + squares
            } else if amount > 0.0 {
                squares - protons * protons / amount
            } else {
                0.0
            };
        }
        self.buffering = LN_10 * buffering;
        self.ionic_strength = (0.5 * charge_squared).clamp(1e-9, RUNAWAY);
        self.water_activity = 1.0 - 0.017 * solutes.min(RUNAWAY);
    }

    /// Free cations and anions, each in turn from what the others leave of its total.
    fn take_turns(
        &mut self,
        amount: &ByPair,
        alkalinity: &ByPair,
        held_carbonate: Option<f64>,
        tolerance: f64,
    ) {
        for _ in 0..1000 {
            let mut moved = 0.0_f64;
            for anion in 0..Anion::None as usize {
                let by_cation = amount.iter().zip(&self.cations);
                let bound: f64 = by_cation.map(|(row, free)| row[anion] * free).sum();
                let free = match self.carbon {
                    Carbon::FromAlkalinity if anion == CARBONATE => {
                        self.carbonate_from_alkalinity(alkalinity)
                    }
                    Carbon::Held { .. } if anion == CARBONATE => held_carbonate.unwrap_or(0.0),
                    _ if bound > 0.0 => self.totals.anions[anion] / bound,
                    _ => 0.0,
                };
                moved = moved.max((free - self.anions[anion]).abs() / free);
                self.anions[anion] = free;
            }
            for (cation, row) in amount.iter().enumerate().take(Cation::None as usize) {
                let by_anion = row.iter().zip(&self.anions);
                let bound: f64 = by_anion.map(|(each, free)| each * free).sum();
                if bound > 0.0 {
                    let free = self.totals.cations[cation] / bound;
                    moved = moved.max((free - self.cations[cation]).abs() / free);
                    self.cations[cation] = free;
                }
            }
            if moved <= tolerance {
                break;
            }
        }
    }

    /// Free carbonate that makes up the alkalinity; none if there is too much already.
    fn carbonate_from_alkalinity(&self, alkalinity: &ByPair) -> f64 {
        let (mut others, mut per_carbonate) = (0.0, 0.0);
        for (row, cation) in alkalinity.iter().zip(&self.cations) {
            for (anion, (each, free)) in row.iter().zip(&self.anions).enumerate() {
                if anion == CARBONATE {
                    per_carbonate += each * cation;
                } else {
                    others += each * cation * free;
                }
            }
        }
        ((self.totals.alkalinity - others) / per_carbonate).max(0.0)
    }
}

/// [H⁺] where `product`/[H⁺] − [H⁺] is the alkalinity.
fn hydrogen(alkalinity: f64, product: f64) -> f64 {
    let half = 0.5 * alkalinity;
    let root = (half * half + product).sqrt();
    if half > 0.0 {
        product / (half + root)
    } else {
        root - half
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::quantity::{Celsius, MgPerL, MmolPerL};

    /// Alkalinity, carbon, calcium, sulfate, phosphate, citrate, mmol/L.
    const AWKWARD: [[f64; 6]; 11] = [
        [0.0, 0.0, 0.0, 0.0, 0.0, 0.0],
        [0.0, 0.0, 15.0, 15.0, 0.0, 0.0],
        [4.0, 4.0, 2.0, 1.0, 0.0, 0.0],
        [8.0, 4.0, 2.0, 1.0, 0.0, 0.0],
        [-2.0, 3.0, 2.0, 1.0, 1.0, 1.0],
        [0.0, 0.0, 3.0, 0.0, 0.0, 3.0],
        [-9.0, 1.0, 3.0, 0.0, 0.0, 3.0],
        [10.0, 0.0, 5.0, 0.0, 0.0, 0.0],
        [1e-4, 30.0, 0.0, 0.0, 0.0, 0.0],
        // Nearly all calcium held by phosphate, and by citrate.
        [10.957, 0.0, 2.485, 0.0, 8.371, 0.0],
        [0.5, 0.0, 5.0, 0.0, 5.0, 5.0],
    ];

    /// The textbook method: sixty halvings of the pH scale, each settled in full.
    fn bisected(equilibrium: &mut Equilibrium) -> f64 {
        let (mut low, mut high) = (LOWEST_PH, HIGHEST_PH);
        for _ in 0..60 {
            let middle = 0.5 * (low + high);
            equilibrium.settle(middle, FINE);
            if equilibrium.alkalinity < equilibrium.totals.alkalinity {
                low = middle;
            } else {
                high = middle;
            }
        }
        0.5 * (low + high)
    }

    #[test]
    fn newton_finds_what_sixty_halvings_find_in_awkward_waters() {
        for celsius in [0.0, 25.0, 90.0] {
            let constants = Constants::at(Celsius::new(celsius).unwrap()).unwrap();
            for water in AWKWARD {
                let [alkalinity, carbon, calcium, sulfate, phosphate, citrate] = water;
                let mut awkward = Water::pure();
                for (ion, mmol) in [
                    (Ion::Calcium, calcium),
                    (Ion::Sulfate, sulfate),
                    (Ion::Phosphate, phosphate),
                    (Ion::Citrate, citrate),
                ] {
                    awkward.ions[ion] = MgPerL::new(mmol * ion.grams_per_mol()).unwrap();
                }
                awkward.alkalinity = MeqPerL::new(alkalinity).unwrap();
                awkward.carbon = MmolPerL::new(carbon).unwrap();
                for carbon in [
                    CLOSED,
                    Carbon::Kept {
                        carbon_dioxide_weight: 1e12,
                    },
                    Carbon::Held { activity: 1e-5 },
                ] {
                    let totals = Totals::of(&awkward);
                    let slow = bisected(&mut Equilibrium::new(totals, carbon, &constants));
                    let mut fast = Equilibrium::new(totals, carbon, &constants);
                    fast.find_ph().unwrap();
                    // Unbuffered water leaves 1e-7 of the pH to the last digit of its
                    // amounts.
                    assert!(
                        (fast.ph - slow).abs() < 1e-7,
                        "{water:?} {carbon:?} at {celsius}: {} against {slow}",
                        fast.ph
                    );
                }
            }
        }
    }
}
