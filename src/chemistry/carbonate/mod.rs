//! What a water does when it is mixed, heated, salted or acidified: equilibrium
//! between carbon dioxide, bicarbonate, carbonate and every ion that pairs with them.
//!
//! Start with [`Constants::at`] a temperature and [`Speciation::of`] a water. Totals
//! are conserved, so most questions are answered by changing a
//! [`Water`](crate::water::Water) and asking again:
//!
//! - heating and cooling in a closed vessel: the same water, other constants;
//! - mixing: [`Water::mixed`](crate::water::Water::mixed);
//! - salts and bases: [`Contribution::added_to`](crate::material::Contribution::added_to);
//! - acids: [`dose_to_ph`], [`amount_to_ph`] and [`dose_to_alkalinity`]; with carbon
//!   dioxide escaping: [`degassed`];
//! - carbon dioxide and minerals: [`open_to`] and [`saturated`].
//!
//! Nothing precipitates unless it is asked for, and one litre counts as one kilogram
//! of water. With the reference program on the same constants the engine agrees to
//! better than 0.001 in pH; two careful sets of constants differ by 0.02 in the
//! saturation index of cold water, 0.2 at 80 °C, and by up to 0.8 % in an acid dose.
//! In front of people, a saturation index is good to 0.1 and a pH to 0.05.

mod activity;
mod constants;
mod dose;
mod equilibrium;
mod root;
mod saturation;
mod speciation;
mod species;

pub use constants::Constants;
pub use dose::{
    Degassed, Dose, DoseOutcome, amount_to_ph, degassed, dose_to_alkalinity, dose_to_ph,
};
pub use saturation::{Gas, Saturated, open_to, saturated};
pub use speciation::{Mineral, Speciation};
pub use species::Species;

use crate::quantity::{Celsius, MeqPerL, Ph};

/// What the engine cannot answer.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
pub enum CarbonateError {
    /// The constants hold from 0 to 90 °C.
    #[error("The constants hold from 0 to 90 °C, not at {0}.")]
    Temperature(Celsius),
    /// More is dissolved than the activity coefficients are good for: ionic strength
    /// 0.5 mol/kg.
    #[error(
        "More is dissolved than can be calculated with: the ionic strength is above 0.5 mol/kg."
    )]
    TooConcentrated,
    /// No pH from 1 to 13 has this alkalinity.
    #[error("An alkalinity of {0} leads to a pH below 1 or above 13.")]
    BeyondPh(MeqPerL),
    /// The pH needs more alkalinity than there is, even without any carbonate.
    #[error(
        "At pH {ph} even a water without carbonate has an alkalinity of {least}. Check the pH and the alkalinity."
    )]
    TooLittleAlkalinity {
        /// The pH given.
        ph: Ph,
        /// The alkalinity it has without carbon.
        least: MeqPerL,
    },
    /// The pH is so low for the alkalinity that only carbon dioxide under pressure,
    /// above 10 atm, explains it.
    #[error(
        "pH {ph} with this alkalinity would need carbon dioxide at more than 10 atm. Check the pH and the alkalinity."
    )]
    TooMuchCarbonDioxide {
        /// The pH given.
        ph: Ph,
    },
    /// More of a mineral dissolves than the engine follows, 100 mmol/L.
    #[error("More than 100 mmol/L of {} would dissolve in this water.", .0.name())]
    Insatiable(Mineral),
}
