//! The spec: the windows a beer's liquor must sit in, and the pH of its mash.

use chemistry::ion::{Ion, IonMap};
use chemistry::put_right::Aim;
use chemistry::quantity::{MgPerL, MgPerLAsCaCO3, Ph};

/// The ions a spec can have a window for, in the order pages show them.
pub const IONS: [Ion; 7] = [
    Ion::Calcium,
    Ion::Magnesium,
    Ion::Sodium,
    Ion::Potassium,
    Ion::Sulfate,
    Ion::Chloride,
    Ion::Nitrate,
];

/// Mass of sulfate per mass of chloride.
#[derive(Clone, Copy, Debug, PartialEq, PartialOrd)]
pub struct MassRatio(f64);

impl MassRatio {
    /// A ratio from 0 to 1000.
    pub fn new(value: f64) -> Result<Self, &'static str> {
        if (0.0..=1000.0).contains(&value) {
            Ok(Self(value))
        } else {
            Err("Enter a ratio from 0 to 1000")
        }
    }

    /// The number.
    #[must_use]
    pub const fn get(self) -> f64 {
        self.0
    }
}

/// How long a window is held when not everything can be had.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Priority {
    /// Given up last.
    High,
    /// Given up second.
    #[default]
    Middle,
    /// Given up first.
    Low,
}

impl Priority {
    /// All three.
    pub const ALL: [Self; 3] = [Self::High, Self::Middle, Self::Low];

    /// As stored and sent.
    pub const fn key(self) -> &'static str {
        match self {
            Self::High => "high",
            Self::Middle => "middle",
            Self::Low => "low",
        }
    }

    /// In words.
    pub const fn words(self) -> &'static str {
        match self {
            Self::High => "give up last",
            Self::Middle => "give up second",
            Self::Low => "give up first",
        }
    }

    /// The priority with this key.
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|priority| priority.key() == key)
    }
}

/// Where a figure should lie.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Window<T> {
    /// Lowest accepted.
    pub low: Option<T>,
    /// Highest accepted.
    pub high: Option<T>,
    /// Where in between it would best be.
    pub preferred: Option<T>,
    /// How long it is held when not everything can be had.
    pub priority: Priority,
}

/// What a beer wants of its liquor and its mash.
///
/// Windows are wishes: a plan says which it cannot meet. The two highest values are
/// limits of taste that no plan passes.
#[derive(Clone, Debug, PartialEq)]
pub struct Spec {
    /// Each of [`IONS`] in the whole liquor: everything added in any vessel, over all
    /// the liquor of the batch.
    pub ions: IonMap<Option<Window<MgPerL>>>,
    /// Alkalinity of the whole liquor.
    pub alkalinity: Option<Window<MgPerLAsCaCO3>>,
    /// Calcium in the mash liquor; nothing preferred.
    pub mash_calcium: Option<Window<MgPerL>>,
    /// Sulfate to chloride in the whole liquor, mass by mass; nothing preferred.
    pub sulfate_to_chloride: Option<Window<MassRatio>>,
    /// Alkalinity of the sparge liquor; nothing preferred.
    pub sparge_alkalinity: Option<Window<MgPerLAsCaCO3>>,
    /// pH of the mash, cooled sample.
    pub mash_ph: Aim,
    /// Most lactate from acid that the palate of this beer bears, in the whole liquor.
    pub highest_lactate: Option<MgPerL>,
    /// Most sodium that the palate of this beer bears, in the whole liquor.
    pub highest_sodium: Option<MgPerL>,
}

impl Spec {
    /// What the form of a new beer begins with.
    ///
    /// Source: common practice, no source.
    #[must_use]
    pub fn offered() -> Self {
        let mg = |value: f64| Some(MgPerL::clamped(value));
        let window = |low: Option<f64>, high: f64, priority| {
            Some(Window {
                low: low.map(MgPerL::clamped),
                high: mg(high),
                preferred: None,
                priority,
            })
        };
        let mut ions = IonMap::from_fn(|_| None);
        ions[Ion::Calcium] = window(Some(50.0), 150.0, Priority::High);
        ions[Ion::Magnesium] = window(None, 30.0, Priority::Middle);
        ions[Ion::Sodium] = window(None, 100.0, Priority::Middle);
        ions[Ion::Sulfate] = window(Some(30.0), 200.0, Priority::Middle);
        ions[Ion::Chloride] = window(Some(30.0), 150.0, Priority::Middle);
        ions[Ion::Nitrate] = window(None, 50.0, Priority::Low);
        Self {
            ions,
            alkalinity: None,
            mash_calcium: window(Some(50.0), 200.0, Priority::Middle),
            sulfate_to_chloride: None,
            sparge_alkalinity: Some(Window {
                low: None,
                high: Some(MgPerLAsCaCO3::constant(30.0)),
                preferred: None,
                priority: Priority::Middle,
            }),
            mash_ph: Aim {
                target: Ph::constant(5.4),
                low: Ph::constant(5.3),
                high: Ph::constant(5.5),
            },
            highest_lactate: mg(300.0),
            highest_sodium: mg(150.0),
        }
    }
}
