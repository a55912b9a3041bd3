//! Cations against anions, and what conductivity says about the difference.

use super::analyte::Analyte;
use super::conductivity::conductivity;
use super::figure::Figures;
use crate::ion::{Ion, IonMap};
use crate::quantity::{
    Celsius, MG_CACO3_PER_MEQ, MeqPerL, MgPerL, MgPerLAsCaCO3, MicrosiemensPerCm, Ph,
};
use crate::water::MeasuredWater;

/// The sums of charges of one report.
#[derive(Clone, Debug, PartialEq)]
pub struct IonBalance {
    /// Sum of the cations.
    pub cations: MeqPerL,
    /// Sum of the anions, alkalinity counted whole.
    pub anions: MeqPerL,
    /// One standard deviation of the difference, from the methods.
    pub difference_sd: MeqPerL,
    /// Ions that usually matter a little, were not reported, and count as none.
    pub not_reported: Vec<Analyte>,
}

/// How a balance stands against the acceptance bands of Standard Methods 1030 E.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Closure {
    /// Inside the band.
    Closed,
    /// Outside, by no more than careful laboratories are sometimes out.
    Near,
    /// Well outside.
    Open,
}

impl IonBalance {
    /// Cations less anions.
    #[must_use]
    pub fn difference(&self) -> MeqPerL {
        self.cations - self.anions
    }

    /// 100·(cations − anions)/(cations + anions), in percent; 0 when there are none.
    #[must_use]
    pub fn percent_difference(&self) -> f64 {
        let sum = self.cations.get() + self.anions.get();
        if sum > 0.0 {
            100.0 * self.difference().get() / sum
        } else {
            0.0
        }
    }

    /// Against the bands of [`STANDARD_METHODS`](crate::references::STANDARD_METHODS)
    /// 1030 E (from memory): for anion sums up to 3 meq/L a difference of 0.2 meq/L,
    /// up to 10 meq/L 2 %, beyond 5 %. `Near` reaches to twice the band, and to the
    /// 5 % agencies work to in the middle class (the choice of this service).
    #[must_use]
    pub fn closure(&self) -> Closure {
        let anions = self.anions.get();
        let (size, band, near) = if anions <= 3.0 {
            (self.difference().get().abs(), 0.2, 0.4)
        } else if anions <= 10.0 {
            (self.percent_difference().abs(), 2.0, 5.0)
        } else {
            (self.percent_difference().abs(), 5.0, 10.0)
        };
        // A hair of tolerance, so that 0.2 computed from decimals counts as 0.2.
        if size <= band * (1.0 + 1e-9) {
            Closure::Closed
        } else if size <= near * (1.0 + 1e-9) {
            Closure::Near
        } else {
            Closure::Open
        }
    }

    /// The band that applies, in words.
    pub(super) fn band(&self) -> &'static str {
        match self.anions.get() {
            ..=3.0 => "0.2 meq/L",
            3.0..=10.0 => "2 %",
            _ => "5 %",
        }
    }

    /// Whether the difference is no more than twice what the methods leave open.
    pub(super) fn within_methods(&self) -> bool {
        self.difference().get().abs() <= 2.0 * self.difference_sd.get()
    }

    /// So little is dissolved that a difference of 0.2 meq/L proves nothing.
    pub(super) fn is_dilute(&self) -> bool {
        self.anions.get() < 0.5
    }
}

/// Cations other than calcium and magnesium, and anions other than alkalinity.
const OTHER_CATIONS: [Analyte; 5] = [
    Analyte::Sodium,
    Analyte::Potassium,
    Analyte::Ammonium,
    Analyte::Iron,
    Analyte::Manganese,
];
const OTHER_ANIONS: [Analyte; 6] = [
    Analyte::Sulfate,
    Analyte::Chloride,
    Analyte::Nitrate,
    Analyte::Nitrite,
    Analyte::Fluoride,
    Analyte::Phosphate,
];

/// Charge of a reported ion, meq/L, with its standard deviation.
///
/// Phosphate counts once: with alkalinity titrated to pH 4.3 the rest of its charge
/// is already in the alkalinity.
fn charge(figures: &Figures, analyte: Analyte) -> Option<(f64, f64)> {
    let figure = figures.get(analyte)?;
    let ion = analyte.ion()?;
    let charges = match analyte {
        Analyte::Phosphate => 1.0,
        _ => f64::from(ion.charge()).abs(),
    };
    let per_mg = charges / ion.grams_per_mol();
    Some((figure.best() * per_mg, figure.sd() * per_mg))
}

/// Charge of calcium and magnesium, meq/L: from both, or else from total hardness,
/// which counts the same charge.
pub(super) fn hardness_charge(figures: &Figures) -> Option<(f64, f64)> {
    let calcium = figures
        .as_caco3(Analyte::Calcium)
        .or_else(|| figures.as_caco3(Analyte::CalciumHardness));
    let magnesium = figures
        .as_caco3(Analyte::Magnesium)
        .or_else(|| figures.as_caco3(Analyte::MagnesiumHardness));
    let (value, sd) = match (calcium, magnesium) {
        (Some(calcium), Some(magnesium)) => (calcium.0 + magnesium.0, calcium.1.hypot(magnesium.1)),
        _ => figures.as_caco3(Analyte::TotalHardness)?,
    };
    Some((value / MG_CACO3_PER_MEQ, sd / MG_CACO3_PER_MEQ))
}

/// The balance, or the analytes without which there is none.
pub(super) fn balance(figures: &Figures) -> Result<IonBalance, Vec<Analyte>> {
    let missing = missing_for_balance(figures);
    if missing.is_empty() {
        Ok(partial_balance(figures))
    } else {
        Err(missing)
    }
}

pub(super) fn missing_for_balance(figures: &Figures) -> Vec<Analyte> {
    let mut missing = Vec::new();
    if hardness_charge(figures).is_none() {
        for (ion, part) in [
            (Analyte::Calcium, Analyte::CalciumHardness),
            (Analyte::Magnesium, Analyte::MagnesiumHardness),
        ] {
            if !figures.has(ion) && !figures.has(part) {
                missing.push(ion);
            }
        }
    }
    if figures.alkalinity().is_none() {
        missing.push(Analyte::Alkalinity);
    }
    for analyte in [Analyte::Sodium, Analyte::Chloride, Analyte::Sulfate] {
        if !figures.has(analyte) {
            missing.push(analyte);
        }
    }
    missing
}

/// The sums of whatever was reported.
pub(super) fn partial_balance(figures: &Figures) -> IonBalance {
    let alkalinity = figures
        .alkalinity()
        .map(|(value, sd)| (value / MG_CACO3_PER_MEQ, sd / MG_CACO3_PER_MEQ));
    let charges = |analytes: &[Analyte], first: Option<(f64, f64)>| {
        analytes
            .iter()
            .filter_map(|analyte| charge(figures, *analyte))
            .chain(first)
            .fold((0.0, 0.0_f64), |(sum, sd), (value, more)| {
                (sum + value, sd.hypot(more))
            })
    };
    // Calcium alone still counts when there is no figure for magnesium.
    let hardness = hardness_charge(figures).or_else(|| {
        figures
            .as_caco3(Analyte::Calcium)
            .or_else(|| figures.as_caco3(Analyte::CalciumHardness))
            .map(|(value, sd)| (value / MG_CACO3_PER_MEQ, sd / MG_CACO3_PER_MEQ))
    });
    let cations = charges(&OTHER_CATIONS, hardness);
    let anions = charges(&OTHER_ANIONS, alkalinity);
    IonBalance {
        cations: MeqPerL::clamped(cations.0),
        anions: MeqPerL::clamped(anions.0),
        difference_sd: MeqPerL::clamped(cations.1.hypot(anions.1)),
        not_reported: [Analyte::Potassium, Analyte::Nitrate]
            .into_iter()
            .filter(|analyte| !figures.has(*analyte))
            .collect(),
    }
}

/// The pH taken when a report has none. Source: mash pH moves by 0.01 between
/// liquors of pH 7.0 and 8.2, so the middle is near enough; computed.
pub(super) const ASSUMED_PH: Ph = Ph::constant(7.6);
/// Temperature of the pH reading when the report has none: a cool laboratory,
/// assumed.
pub(super) const ASSUMED_PH_TEMPERATURE: Celsius = Celsius::constant(20.0);
/// The usual share of calcium in hardness. Common practice, no source.
pub(super) const CALCIUM_SHARE_OF_HARDNESS: f64 = 0.70;

/// What the ions should conduct, at 25 °C. Needs the same figures as the balance.
/// Hardness without its parts is split as usual, which hardly matters here.
pub(super) fn conductivity_of_ions(figures: &Figures) -> Option<MicrosiemensPerCm> {
    if !missing_for_balance(figures).is_empty() {
        return None;
    }
    let (alkalinity, _) = figures.alkalinity()?;
    let hardness = hardness_charge(figures)?.0;
    let known = |ion, part| {
        let as_caco3 = figures.as_caco3(ion).or_else(|| figures.as_caco3(part));
        as_caco3.map(|(value, _)| value / MG_CACO3_PER_MEQ)
    };
    let calcium = known(Analyte::Calcium, Analyte::CalciumHardness);
    let magnesium = known(Analyte::Magnesium, Analyte::MagnesiumHardness);
    let calcium_meq = calcium
        .or_else(|| magnesium.map(|magnesium| hardness - magnesium))
        .unwrap_or(hardness * CALCIUM_SHARE_OF_HARDNESS);
    let magnesium_meq = magnesium.unwrap_or(hardness - calcium_meq);
    let ions = IonMap::from_fn(|ion| {
        let best = Analyte::ALL
            .into_iter()
            .find(|analyte| analyte.ion() == Some(ion))
            .and_then(|analyte| figures.best(analyte));
        let mg = match ion {
            Ion::Calcium => calcium_meq * ion.grams_per_mol() / 2.0,
            Ion::Magnesium => magnesium_meq * ion.grams_per_mol() / 2.0,
            _ => best.unwrap_or(0.0),
        };
        MgPerL::clamped(mg)
    });
    Some(conductivity(&MeasuredWater {
        ions,
        alkalinity: MgPerLAsCaCO3::clamped(alkalinity),
        ph: figures.best(Analyte::Ph).map_or(ASSUMED_PH, Ph::clamped),
        temperature: ASSUMED_PH_TEMPERATURE,
    }))
}
