//! Where the pH should be from the liquor to the package.
//!
//! [`Stage::window`] holds every default in one place, each with where it comes from.
//! They are custom more than science, so [`Evidence`] says how good each is, and a
//! brewery's own experience comes first. Every pH is that of a cooled sample.

use crate::put_right::Aim;
use crate::quantity::{Estimate, NINETY_PERCENT, Ph};

/// When in the making of beer a pH is read.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Stage {
    /// The treated liquor.
    Liquor,
    /// The mash.
    Mash,
    /// The first runnings.
    FirstRunnings,
    /// The last runnings.
    LastRunnings,
    /// The full kettle, before the boil.
    KettleFull,
    /// The end of the boil.
    EndOfBoil,
    /// The end of fermentation.
    EndOfFermentation,
    /// The package.
    Package,
}

/// How well a window is founded.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Evidence {
    /// The beer's own spec.
    Spec,
    /// Read in a source, and sources agree roughly.
    Published,
    /// Custom of the trade, evidence thin or disputed.
    Custom,
}

/// Where a pH should lie at a stage.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct StageWindow {
    /// Lowest usual; open where none is known.
    pub low: Option<Ph>,
    /// Highest usual.
    pub high: Option<Ph>,
    /// How well it is founded.
    pub evidence: Evidence,
    /// Where it comes from, in words for people.
    pub source: &'static str,
}

/// What a reading proves about a window.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Standing {
    /// Inside, nine times in ten.
    Inside,
    /// So near an edge that the reading's own error covers the difference.
    CannotBeTold,
    /// Below.
    Below,
    /// Above.
    Above,
}

/// Last runnings above this are not worth having: stop, or acidify what is left of the
/// sparge liquor. Source: custom, 5.8 to 6.0 by several; the mechanism is disputed.
pub const STOP_RUNNINGS: Ph = Ph::constant(6.0);

/// Beer above this in the package is a question of food safety. Source: the usual limit
/// for foods that are not heated under pressure, from memory.
pub const SAFE_PACKAGE: Ph = Ph::constant(4.6);

/// Where an ale ends its fermentation. Source: [`MACWILLIAM_1975`](crate::references::MACWILLIAM_1975).
pub const ALE_END: (Ph, Ph) = (Ph::constant(3.8), Ph::constant(4.2));

/// Where a lager ends its fermentation. Source: [`MACWILLIAM_1975`](crate::references::MACWILLIAM_1975).
pub const LAGER_END: (Ph, Ph) = (Ph::constant(4.2), Ph::constant(4.8));

impl Stage {
    /// Every stage, in order.
    pub const ALL: [Self; 8] = [
        Self::Liquor,
        Self::Mash,
        Self::FirstRunnings,
        Self::LastRunnings,
        Self::KettleFull,
        Self::EndOfBoil,
        Self::EndOfFermentation,
        Self::Package,
    ];

    /// As stored and sent.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::Liquor => "liquor",
            Self::Mash => "mash",
            Self::FirstRunnings => "first_runnings",
            Self::LastRunnings => "last_runnings",
            Self::KettleFull => "kettle_full",
            Self::EndOfBoil => "end_of_boil",
            Self::EndOfFermentation => "end_of_fermentation",
            Self::Package => "package",
        }
    }

    /// As shown.
    #[must_use]
    pub const fn name(self) -> &'static str {
        match self {
            Self::Liquor => "Liquor",
            Self::Mash => "Mash",
            Self::FirstRunnings => "First runnings",
            Self::LastRunnings => "Last runnings",
            Self::KettleFull => "Kettle full",
            Self::EndOfBoil => "End of boil",
            Self::EndOfFermentation => "End of fermentation",
            Self::Package => "Package",
        }
    }

    /// The stage with this key.
    #[must_use]
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|stage| stage.key() == key)
    }

    /// Whether the time of a reading is told in minutes since strike.
    #[must_use]
    pub const fn timed_from_strike(self) -> bool {
        matches!(self, Self::Mash | Self::FirstRunnings | Self::LastRunnings)
    }

    /// Between these a reading is not mistyped by the look of it alone. Source: assumed;
    /// wider than anything a brewery pours.
    #[must_use]
    pub const fn plausible(self) -> (Ph, Ph) {
        let (low, high) = match self {
            Self::Liquor => (3.0, 10.5),
            Self::Mash | Self::FirstRunnings | Self::LastRunnings => (4.4, 7.0),
            Self::KettleFull => (4.2, 6.6),
            Self::EndOfBoil => (4.0, 6.4),
            Self::EndOfFermentation | Self::Package => (2.8, 5.4),
        };
        (Ph::constant(low), Ph::constant(high))
    }

    /// Where the pH should be. The mash and its first runnings have the window of the
    /// beer's spec.
    ///
    /// Sources: each window names its own; those of a supplier's note are
    /// [`SUPPLIER_NOTE`](crate::references::SUPPLIER_NOTE), the end of fermentation is
    /// [`MACWILLIAM_1975`](crate::references::MACWILLIAM_1975), the rest is custom.
    #[must_use]
    pub const fn window(self, mash: Aim) -> StageWindow {
        const fn between(
            low: f64,
            high: f64,
            evidence: Evidence,
            source: &'static str,
        ) -> StageWindow {
            StageWindow {
                low: Some(Ph::constant(low)),
                high: Some(Ph::constant(high)),
                evidence,
                source,
            }
        }
        match self {
            Self::Liquor => between(
                5.6,
                5.8,
                Evidence::Custom,
                "a rough check of sparge liquor that was acidified to 20 to 30 mg/L of alkalinity; other liquor has no window",
            ),
            Self::Mash => StageWindow {
                low: Some(mash.low),
                high: Some(mash.high),
                evidence: Evidence::Spec,
                source: "the spec of this beer",
            },
            Self::FirstRunnings => StageWindow {
                low: Some(mash.low),
                high: Some(mash.high),
                evidence: Evidence::Custom,
                source: "about as the mash, by the spec of this beer",
            },
            Self::LastRunnings => StageWindow {
                low: None,
                high: Some(Ph::constant(5.8)),
                evidence: Evidence::Custom,
                source: "custom, 5.8 to 6.0 by several; why is disputed",
            },
            Self::KettleFull => between(
                5.2,
                5.5,
                Evidence::Custom,
                "custom of the trade, from memory",
            ),
            Self::EndOfBoil => between(
                5.0,
                5.3,
                Evidence::Published,
                "a supplier’s note for cask beers; strong beers lie near 4.9, weak ones at 5.4 to 5.6",
            ),
            Self::EndOfFermentation => between(
                ALE_END.0.get(),
                LAGER_END.1.get(),
                Evidence::Published,
                "MacWilliam 1975: ales 3.8 to 4.2, lagers 4.2 to 4.8",
            ),
            Self::Package => between(
                4.1,
                4.6,
                Evidence::Custom,
                "custom of the trade, from memory",
            ),
        }
    }
}

impl StageWindow {
    /// What a reading proves, given its own error.
    #[must_use]
    pub fn standing(&self, reading: Estimate<Ph>) -> Standing {
        let (ph, reach) = (reading.value.get(), NINETY_PERCENT * reading.sd);
        let (low, high) = (ph - reach, ph + reach);
        let (floor, ceiling) = (
            self.low.map_or(f64::NEG_INFINITY, Ph::get),
            self.high.map_or(f64::INFINITY, Ph::get),
        );
        if low > ceiling {
            Standing::Above
        } else if high < floor {
            Standing::Below
        } else if low >= floor && high <= ceiling {
            Standing::Inside
        } else {
            Standing::CannotBeTold
        }
    }
}
