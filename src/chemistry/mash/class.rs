//! What to assume of a malt nobody has measured.

use crate::quantity::{Ebc, Estimate, Fraction, Lovibond, Ph, RelativeBuffering};

use super::malt::{Behaviour, Groups, charge};

/// A kind of malt or adjunct, with the figures to assume for a lot not measured.
///
/// Source of every figure: from memory and fitted; none is a published standard.
/// The standard deviations are the spread between lots, doubt included. Colours
/// are usual ranges, from memory.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum MaltClass {
    /// Pilsner or lager malt
    Pilsner,
    /// Two-row brewers' malt
    Brewers,
    /// Pale ale malt
    PaleAle,
    /// Vienna malt
    Vienna,
    /// Light Munich malt
    MunichLight,
    /// Dark Munich malt
    MunichDark,
    /// Wheat malt
    Wheat,
    /// Rye malt
    Rye,
    /// Oat malt
    Oat,
    /// Raw or flaked barley, wheat or oats
    RawGrain,
    /// Flaked maize or rice
    MaizeOrRice,
    /// Pale smoked malt
    Smoked,
    /// Melanoidin, aromatic, brown or amber malt
    HighKilned,
    /// Crystal or caramel malt
    Crystal,
    /// Chocolate or black malt, roast barley
    Roasted,
    /// Acidulated (sauer) malt
    Acidulated,
}

/// Colour assumed for crystal malt of unstated colour. Source: assumed.
const MIDDLING_CRYSTAL: Lovibond = Lovibond::constant(60.0);

impl MaltClass {
    /// Every class, pale to dark.
    pub const ALL: [Self; 16] = [
        Self::Pilsner,
        Self::Brewers,
        Self::PaleAle,
        Self::Vienna,
        Self::MunichLight,
        Self::MunichDark,
        Self::Wheat,
        Self::Rye,
        Self::Oat,
        Self::RawGrain,
        Self::MaizeOrRice,
        Self::Smoked,
        Self::HighKilned,
        Self::Crystal,
        Self::Roasted,
        Self::Acidulated,
    ];

    /// Stable name for storage and the API.
    #[must_use]
    pub const fn key(self) -> &'static str {
        self.words().0
    }

    /// Name in words.
    #[must_use]
    pub const fn name(self) -> &'static str {
        self.words().1
    }

    /// The class with this [`key`](Self::key).
    #[must_use]
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|class| class.key() == key)
    }

    const fn words(self) -> (&'static str, &'static str) {
        match self {
            Self::Pilsner => ("pilsner", "Pilsner or lager malt"),
            Self::Brewers => ("brewers", "Two-row brewers' malt"),
            Self::PaleAle => ("pale_ale", "Pale ale malt"),
            Self::Vienna => ("vienna", "Vienna malt"),
            Self::MunichLight => ("munich_light", "Munich malt, light"),
            Self::MunichDark => ("munich_dark", "Munich malt, dark"),
            Self::Wheat => ("wheat", "Wheat malt"),
            Self::Rye => ("rye", "Rye malt"),
            Self::Oat => ("oat", "Oat malt"),
            Self::RawGrain => ("raw_grain", "Raw or flaked barley, wheat or oats"),
            Self::MaizeOrRice => ("maize_or_rice", "Flaked maize or rice"),
            Self::Smoked => ("smoked", "Smoked malt, pale"),
            Self::HighKilned => ("high_kilned", "Melanoidin, aromatic, brown or amber malt"),
            Self::Crystal => ("crystal", "Crystal or caramel malt"),
            Self::Roasted => ("roasted", "Chocolate or black malt, roast barley"),
            Self::Acidulated => ("acidulated", "Acidulated malt"),
        }
    }

    /// Colours usual for the class, palest and darkest.
    #[must_use]
    pub const fn colours(self) -> (Ebc, Ebc) {
        let (palest, darkest) = match self {
            Self::Pilsner => (3.0, 4.0),
            Self::Brewers => (3.5, 4.5),
            Self::PaleAle => (5.0, 7.0),
            Self::Vienna => (7.0, 9.0),
            Self::MunichLight => (12.0, 17.0),
            Self::MunichDark => (20.0, 25.0),
            Self::Wheat => (3.0, 5.0),
            Self::Rye => (4.0, 10.0),
            Self::Oat => (4.0, 6.0),
            Self::RawGrain => (2.0, 5.0),
            Self::MaizeOrRice => (1.0, 2.0),
            Self::Smoked => (3.0, 8.0),
            Self::HighKilned => (50.0, 150.0),
            Self::Crystal => (20.0, 320.0),
            Self::Roasted => (500.0, 1500.0),
            Self::Acidulated => (3.0, 7.0),
        };
        (Ebc::constant(palest), Ebc::constant(darkest))
    }

    /// What to assume. The colour matters to crystal malt only; without one it is
    /// taken as 60 °L.
    #[must_use]
    pub fn behaviour(self, colour: Option<Lovibond>) -> Behaviour {
        // Distilled-water pH and its sd; relative buffering and its relative sd.
        let (ph, ph_sd, buffering, relative_sd) = match self {
            Self::Pilsner => (5.78, 0.10, 1.00, 0.25),
            Self::Brewers => (5.68, 0.10, 1.00, 0.25),
            Self::PaleAle => (5.73, 0.10, 1.00, 0.25),
            Self::Vienna => (5.60, 0.10, 1.05, 0.25),
            Self::MunichLight => (5.50, 0.10, 0.97, 0.25),
            Self::MunichDark => (5.40, 0.12, 0.92, 0.25),
            Self::Wheat => (6.00, 0.10, 1.00, 0.25),
            Self::Rye => (6.00, 0.12, 1.00, 0.30),
            Self::Oat => (6.0, 0.15, 0.90, 0.30),
            Self::RawGrain => (6.1, 0.2, 0.65, 0.40),
            Self::MaizeOrRice => (6.2, 0.3, 0.30, 0.50),
            Self::Smoked => (5.70, 0.12, 1.00, 0.25),
            Self::HighKilned => (5.0, 0.2, 0.86, 0.30),
            Self::Roasted => (4.65, 0.15, 0.72, 0.25),
            Self::Crystal => return crystal(colour.unwrap_or(MIDDLING_CRYSTAL)),
            Self::Acidulated => return acidulated(),
        };
        Behaviour::Groups(groups(ph, ph_sd, buffering, relative_sd))
    }
}

fn groups(ph: f64, ph_sd: f64, buffering: f64, relative_sd: f64) -> Groups {
    Groups::new(
        Estimate::new(Ph::clamped(ph), ph_sd),
        Estimate::new(
            RelativeBuffering::clamped(buffering),
            buffering * relative_sd,
        ),
    )
}

/// Crystal malt: the darker, the more acid.
///
/// pH = 5.25 − 0.0055·L, and 0.45·L + 6 meq/kg from there to pH 5.7, L in °L and at
/// most 120. Source: the acidity from memory of Troester (2009); the pH from memory.
fn crystal(colour: Lovibond) -> Behaviour {
    let lovibond = colour.get().min(120.0);
    let ph = 5.25 - 0.0055 * lovibond;
    let buffering = (0.45 * lovibond + 6.0) / (charge(5.7) - charge(ph));
    Behaviour::Groups(groups(ph, 0.15, buffering, 0.25))
}

/// A pale base malt with 3.0 ± 0.6 % of its weight lactic acid.
///
/// Source: 2 to 4 % from a malting encyclopaedia's table; the base is assumed.
fn acidulated() -> Behaviour {
    Behaviour::Acidulated {
        base: groups(5.78, 0.10, 1.00, 0.25),
        lactic: Estimate::new(Fraction::constant(0.03), 0.006),
    }
}
