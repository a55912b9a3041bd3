//! The brewery's own choices: its name, units, time zone, how it weighs out, and what it
//! assumes of a mash.

use std::time::Duration;

use chemistry::mash;
use chemistry::material::Vessel;
use chemistry::quantity::{Estimate, Fraction};
use chemistry::report::LimitSet;

pub mod api;
pub mod operations;
pub mod pages;
pub mod store;

/// The units pages show and take. What is stored is always SI.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Units {
    /// Litres, kilograms, grams, millilitres, °C.
    Metric,
    /// US barrels, pounds, ounces, gallons, °F.
    Us,
}

impl Units {
    /// Both.
    pub const ALL: [Self; 2] = [Self::Metric, Self::Us];

    /// As stored and sent.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Metric => "metric",
            Self::Us => "us",
        }
    }

    /// In words.
    pub const fn name(self) -> &'static str {
        match self {
            Self::Metric => "Metric: hectolitres, litres, kilograms, grams, °C",
            Self::Us => "US: barrels, gallons, pounds, ounces, °F",
        }
    }

    /// The units with this key.
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|units| units.key() == key)
    }
}

/// Which lines of a weigh-out somebody else has to look at before they count.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum SecondPerson {
    /// None: whoever weighs ticks alone.
    Never,
    /// Acids and bases, the materials that burn and that move the mash most.
    AcidAndLime,
}

impl SecondPerson {
    /// Both.
    pub const ALL: [Self; 2] = [Self::Never, Self::AcidAndLime];

    /// As stored and sent.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Never => "never",
            Self::AcidAndLime => "acid_and_lime",
        }
    }

    /// In words.
    pub const fn name(self) -> &'static str {
        match self {
            Self::Never => "For no line",
            Self::AcidAndLime => "For every acid and for lime and other bases",
        }
    }

    /// The choice with this key.
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|choice| choice.key() == key)
    }
}

/// Everything one row of settings holds.
#[derive(Clone, Debug, PartialEq)]
pub struct Settings {
    /// Whose water desk this is.
    pub name: String,
    /// What pages show and take.
    pub units: Units,
    /// An IANA time zone, for example `Europe/Vienna`.
    pub time_zone: String,
    /// How prices are written, for example `€` or `USD`.
    pub currency: String,
    /// Whose limits for drinking water a report is held against.
    pub potable_limits: LimitSet,
    /// The vessels in the order in which this brewery weighs out.
    pub vessel_order: [Vessel; 4],
    /// Which lines somebody else has to look at.
    pub second_person: SecondPerson,
    /// How long a shared tablet may lie idle before it goes back to the names.
    pub tablet_idle: Duration,
    /// What happens in a mash that no analysis tells.
    pub mash: mash::Settings,
    /// Whether the brewery is invented.
    pub demo: bool,
    /// Counts changes, so that two people do not overwrite each other.
    pub version: i64,
}

impl Settings {
    /// How long a shared tablet may lie idle, in whole minutes.
    pub fn idle_minutes(&self) -> f64 {
        (self.tablet_idle.as_secs() / 60) as f64
    }
}

impl Default for Settings {
    fn default() -> Self {
        Self {
            name: "Your brewery".into(),
            units: Units::Metric,
            time_zone: "UTC".into(),
            currency: "€".into(),
            potable_limits: LimitSet::EuropeanUnion,
            vessel_order: Vessel::ALL,
            second_person: SecondPerson::Never,
            tablet_idle: Duration::from_mins(5),
            mash: mash::Settings::default(),
            demo: false,
            version: 0,
        }
    }
}

/// The mash settings with another share of acid set free per equivalent of calcium;
/// magnesium sets free half of it, and errs with it.
pub fn mash_settings(
    calcium: Estimate<Fraction>,
    carbon_dioxide_lost: Estimate<Fraction>,
) -> mash::Settings {
    mash::Settings {
        calcium_release: calcium,
        magnesium_release: Estimate::new(
            Fraction::clamped(calcium.value.get() / 2.0),
            calcium.sd / 2.0,
        ),
        carbon_dioxide_lost,
    }
}
