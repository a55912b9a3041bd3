//! Limits for drinking water, to be shown beside a source.
//!
//! A finding here says that a figure lies outside a published value. What that
//! means in law is for the brewery and its authority to say.

use super::analyte::Analyte;
use super::figure::Figure;
use super::finding::amount;
use super::reading::capitalised;
use super::typed::Qualifier;
use super::unit::ReportingUnit;
use crate::references::{
    EU_DRINKING_WATER_2020, Reference, US_DRINKING_WATER, WHO_DRINKING_WATER_2022,
};

/// A published set of limits.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum LimitSet {
    /// Directive (EU) 2020/2184.
    EuropeanUnion,
    /// 40 CFR 141 and 143.
    UnitedStates,
    /// Guidelines for drinking-water quality.
    WorldHealthOrganization,
}

/// What a limit is for.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Concern {
    /// Health.
    Health,
    /// Taste, appearance, or how the supply is run.
    Acceptability,
}

/// One published value.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Limit {
    analyte: Analyte,
    unit: ReportingUnit,
    low: Option<f64>,
    high: f64,
    concern: Concern,
}

impl Limit {
    /// What it limits.
    #[must_use]
    pub const fn analyte(&self) -> Analyte {
        self.analyte
    }

    /// What it is for.
    #[must_use]
    pub const fn concern(&self) -> Concern {
        self.concern
    }

    /// Lowest value, in the canonical unit, where there is one.
    #[must_use]
    pub fn low(&self) -> Option<f64> {
        self.low.map(|low| low * self.factor())
    }

    /// Highest value, in the canonical unit.
    #[must_use]
    pub fn high(&self) -> f64 {
        self.high * self.factor()
    }

    /// The value as published, with its unit.
    #[must_use]
    pub fn as_published(&self) -> String {
        let range = match self.low {
            Some(low) => format!("{low} to {}", self.high),
            None => self.high.to_string(),
        };
        format!("{range} {}", self.unit.label())
            .trim_end()
            .to_owned()
    }

    fn factor(&self) -> f64 {
        self.unit.canonical_per_unit(self.analyte).unwrap_or(1.0)
    }
}

const fn health(analyte: Analyte, unit: ReportingUnit, high: f64) -> Limit {
    Limit {
        analyte,
        unit,
        low: None,
        high,
        concern: Concern::Health,
    }
}

const fn taste(analyte: Analyte, unit: ReportingUnit, high: f64) -> Limit {
    Limit {
        analyte,
        unit,
        low: None,
        high,
        concern: Concern::Acceptability,
    }
}

const fn ph(low: f64, high: f64) -> Limit {
    Limit {
        analyte: Analyte::Ph,
        unit: ReportingUnit::Ph,
        low: Some(low),
        high,
        concern: Concern::Acceptability,
    }
}

use Analyte as A;
use ReportingUnit as U;

/// Source: [`EU_DRINKING_WATER_2020`], annex I, parts B and C; values as in
/// 98/83/EC, carried over from memory; fluoride from memory.
const EUROPEAN_UNION: &[Limit] = &[
    health(A::Nitrate, U::MgPerL, 50.0),
    health(A::Nitrite, U::MgPerL, 0.5),
    health(A::Fluoride, U::MgPerL, 1.5),
    taste(A::Sodium, U::MgPerL, 200.0),
    taste(A::Chloride, U::MgPerL, 250.0),
    taste(A::Sulfate, U::MgPerL, 250.0),
    taste(A::Iron, U::MgPerL, 0.2),
    taste(A::Manganese, U::MgPerL, 0.05),
    taste(A::Ammonium, U::MgPerL, 0.5),
    taste(A::Conductivity, U::MicrosiemensPerCm20, 2500.0),
    ph(6.5, 9.5),
];

/// Source: [`US_DRINKING_WATER`]: secondary values and the residual limit of
/// chlorine read there; primary values (nitrate, nitrite, fluoride) from memory.
const UNITED_STATES: &[Limit] = &[
    health(A::Nitrate, U::MgPerLAsN, 10.0),
    health(A::Nitrite, U::MgPerLAsN, 1.0),
    health(A::Fluoride, U::MgPerL, 4.0),
    health(A::TotalChlorine, U::MgPerL, 4.0),
    taste(A::Chloride, U::MgPerL, 250.0),
    taste(A::Sulfate, U::MgPerL, 250.0),
    taste(A::Iron, U::MgPerL, 0.3),
    taste(A::Manganese, U::MgPerL, 0.05),
    taste(A::DissolvedSolids, U::MgPerL, 500.0),
    ph(6.5, 8.5),
];

/// Source: [`WHO_DRINKING_WATER_2022`], values from memory. Sulfate is tasted from
/// 250 to 500 mg/L; the lower end is taken.
const WORLD_HEALTH_ORGANIZATION: &[Limit] = &[
    health(A::Nitrate, U::MgPerL, 50.0),
    health(A::Nitrite, U::MgPerL, 3.0),
    health(A::Fluoride, U::MgPerL, 1.5),
    health(A::Manganese, U::MgPerL, 0.08),
    health(A::FreeChlorine, U::MgPerL, 5.0),
    taste(A::Sodium, U::MgPerL, 200.0),
    taste(A::Chloride, U::MgPerL, 250.0),
    taste(A::Sulfate, U::MgPerL, 250.0),
];

impl LimitSet {
    /// Every set.
    pub const ALL: [Self; 3] = [
        Self::EuropeanUnion,
        Self::UnitedStates,
        Self::WorldHealthOrganization,
    ];

    /// The stable name in settings and JSON.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::EuropeanUnion => "eu",
            Self::UnitedStates => "us",
            Self::WorldHealthOrganization => "who",
        }
    }

    /// The set with this [`key`](Self::key).
    #[must_use]
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|set| set.key() == key)
    }

    /// Whose values they are, as it stands inside a sentence.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::EuropeanUnion => "the European Union",
            Self::UnitedStates => "the United States",
            Self::WorldHealthOrganization => "the World Health Organization",
        }
    }

    /// Where they are published.
    #[must_use]
    pub const fn reference(self) -> Reference {
        match self {
            Self::EuropeanUnion => EU_DRINKING_WATER_2020,
            Self::UnitedStates => US_DRINKING_WATER,
            Self::WorldHealthOrganization => WHO_DRINKING_WATER_2022,
        }
    }

    /// The values, at most one per analyte.
    #[must_use]
    pub const fn limits(self) -> &'static [Limit] {
        match self {
            Self::EuropeanUnion => EUROPEAN_UNION,
            Self::UnitedStates => UNITED_STATES,
            Self::WorldHealthOrganization => WORLD_HEALTH_ORGANIZATION,
        }
    }

    /// The value for one analyte.
    #[must_use]
    pub fn limit(self, analyte: Analyte) -> Option<Limit> {
        self.limits()
            .iter()
            .copied()
            .find(|limit| limit.analyte == analyte)
    }
}

/// How a figure stands against a limit.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Standing {
    /// Above the highest value.
    Above,
    /// Below the lowest value.
    Below,
    /// Only known to be below a limit of detection that is itself too high.
    CannotTell,
}

/// One figure outside a limit, or not surely inside.
#[derive(Clone, Debug, PartialEq)]
pub struct PotableFinding {
    /// The limit.
    pub limit: Limit,
    /// The side it lies on.
    pub standing: Standing,
    /// The figure, in the canonical unit of the analyte.
    pub value: f64,
    /// The same in a sentence.
    pub sentence: String,
}

/// Every figure that lies outside the limits of a set.
#[must_use]
pub fn potable_findings(figures: &[Figure], set: LimitSet) -> Vec<PotableFinding> {
    let mut findings = Vec::new();
    for limit in set.limits() {
        let Some(figure) = figures
            .iter()
            .find(|figure| figure.analyte() == limit.analyte)
        else {
            continue;
        };
        let value = figure.canonical().get();
        // A hair of tolerance, so that 10 mg/L as N typed is not above 10 as N.
        let above = value > limit.high() * (1.0 + 1e-9);
        let below = limit.low().is_some_and(|low| value < low);
        let is_detection_limit = figure.canonical().qualifier() == Qualifier::Below;
        let (standing, words) = match (above, below, is_detection_limit) {
            (true, _, true) => (Standing::CannotTell, "is not surely below"),
            (true, _, false) => (Standing::Above, "is above"),
            (_, true, false) => (Standing::Below, "is below"),
            _ => continue,
        };
        let sign = figure.canonical().qualifier().sign();
        findings.push(PotableFinding {
            limit: *limit,
            standing,
            value,
            sentence: format!(
                "{} of {sign}{} {words} the guideline {} of {} for drinking water of {}.",
                capitalised(limit.analyte.name()),
                amount(value, limit.analyte),
                if limit.low.is_some() {
                    "range"
                } else {
                    "value"
                },
                limit.as_published(),
                set.name()
            ),
        });
    }
    findings
}
