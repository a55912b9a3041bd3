//! The spec: the windows a beer's liquor must sit in, and the pH of its mash.

use chemistry::ion::{Ion, IonMap};
use chemistry::plan;
pub use chemistry::plan::{Priority, Window};
use chemistry::put_right::Aim;
use chemistry::quantity::{MassRatio, MgPerL, MgPerLAsCaCO3, Ph};

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

/// How long a window is held when nobody said.
pub const USUAL_PRIORITY: Priority = Priority::Middle;

/// What a beer wants of its liquor and its mash.
///
/// Windows are wishes: a plan says which it cannot meet. The two highest values are
/// limits of taste that no plan passes.
#[derive(Clone, Debug, PartialEq)]
pub struct Spec {
    /// Each of [`IONS`] in the whole liquor: everything added in any vessel, over all
    /// the liquor of the batch.
    pub ions: IonMap<Option<Window<MgPerL>>>,
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
    /// What the solver of a plan looks at. Of the alkalinity of the whole liquor the mash
    /// pH decides; only that of the sparge liquor has a window.
    #[must_use]
    pub fn for_plan(&self) -> plan::Spec {
        plan::Spec {
            ions: self.ions,
            mash_calcium: self.mash_calcium,
            sulfate_to_chloride: self.sulfate_to_chloride,
            sparge_alkalinity: self.sparge_alkalinity,
            mash_ph: self.mash_ph,
        }
    }

    /// What the palate of this beer bears of each ion, for the limits of a plan.
    #[must_use]
    pub fn taste_limits(&self) -> IonMap<Option<MgPerL>> {
        IonMap::from_fn(|ion| match ion {
            Ion::Lactate => self.highest_lactate,
            Ion::Sodium => self.highest_sodium,
            _ => None,
        })
    }

    /// The spec a plan was made for, without the limits of taste, which a plan holds
    /// elsewhere.
    #[must_use]
    pub fn of_plan(spec: &plan::Spec) -> Self {
        Self {
            ions: spec.ions,
            mash_calcium: spec.mash_calcium,
            sulfate_to_chloride: spec.sulfate_to_chloride,
            sparge_alkalinity: spec.sparge_alkalinity,
            mash_ph: spec.mash_ph,
            highest_lactate: None,
            highest_sodium: None,
        }
    }

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
