//! Whether sparge liquor is fit to run over the grains, and how much acid makes it so.
//!
//! Sparge liquor is acidified by its alkalinity, not to a pH: carbon dioxide leaves it for
//! hours and takes the pH up with it. What a drop-count kit shows decides.

use crate::carbonate::{CarbonateError, Constants, degassed};
use crate::mash::BASIS;
use crate::material::{Contribution, Role};
use crate::put_right::{Remedy, Stop};
use crate::quantity::{
    DoseAmount, Drops, Estimate, Fraction, Litres, MG_CACO3_PER_MEQ, MgPerLAsCaCO3, MmolPerL,
    NINETY_PERCENT, Ph,
};
use crate::water::Water;

/// Highest alkalinity of sparge liquor where the beer's spec says nothing. Source: custom
/// of the trade, 20 to 30 mg/L.
pub const USUAL_LIMIT: MgPerLAsCaCO3 = MgPerLAsCaCO3::constant(30.0);

/// What acid is dosed to where the spec prefers nothing. Source: custom, the middle of 20
/// to 30 mg/L.
pub const USUAL_TARGET: MgPerLAsCaCO3 = MgPerLAsCaCO3::constant(25.0);

/// How far a drop count may be out, drops, one standard deviation. Source: kits are good
/// to half a drop to a drop.
const DROP_SD: f64 = 0.5;

/// How far any other figure of a test on the spot may be out, relative and at least.
/// Source: assumed; handheld instruments claim 5 % of the reading.
const SPOT_SD: (f64, f64) = (0.05, 2.0);

/// The alkalinity a drop count says.
#[must_use]
pub fn by_drops(drops: Drops, per_drop: MgPerLAsCaCO3) -> Estimate<MgPerLAsCaCO3> {
    Estimate::new(
        MgPerLAsCaCO3::clamped(drops.get() * per_drop.get()),
        DROP_SD * per_drop.get(),
    )
}

/// The alkalinity another test on the spot says.
#[must_use]
pub fn on_the_spot(alkalinity: MgPerLAsCaCO3) -> Estimate<MgPerLAsCaCO3> {
    Estimate::new(
        alkalinity,
        (SPOT_SD.0 * alkalinity.get().abs()).max(SPOT_SD.1),
    )
}

/// Sparge liquor as it was tested, and what is wished of it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SpargeCheck {
    /// Its alkalinity.
    pub alkalinity: Estimate<MgPerLAsCaCO3>,
    /// How much of it is still to run.
    pub volume: Litres,
    /// Highest alkalinity wished for.
    pub limit: MgPerLAsCaCO3,
    /// What acid should bring it to.
    pub target: MgPerLAsCaCO3,
}

/// What to do about sparge liquor.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum SpargeAdvice {
    /// It is fit as it is.
    LeaveIt,
    /// The test cannot tell it from the limit.
    CannotBeTold,
    /// Add this.
    Acidify(AcidDose),
    /// Nothing can be advised.
    Stop(Stop),
}

/// Acid for sparge liquor. All of it at once: alkalinity is arithmetic, not a mash.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct AcidDose {
    /// How much of the material.
    pub dose: DoseAmount,
    /// Whether the cap of the batch made it smaller.
    pub capped: bool,
    /// The alkalinity after it.
    pub after: Estimate<MgPerLAsCaCO3>,
}

impl SpargeCheck {
    /// Assesses the liquor.
    #[must_use]
    pub fn assess(&self, acid: Option<Remedy<'_>>) -> SpargeAdvice {
        let reach = NINETY_PERCENT * self.alkalinity.sd;
        let above = self.alkalinity.value.get() - self.limit.get();
        if above <= -reach {
            SpargeAdvice::LeaveIt
        } else if above <= reach {
            SpargeAdvice::CannotBeTold
        } else {
            match acid.ok_or(Stop::NoRemedy).and_then(|acid| self.dose(acid)) {
                Ok(dose) => SpargeAdvice::Acidify(dose),
                Err(why) => SpargeAdvice::Stop(why),
            }
        }
    }

    fn dose(&self, acid: Remedy<'_>) -> Result<AcidDose, Stop> {
        let material = acid.material;
        let per_unit = -material.per_unit().alkalinity.get();
        if material.substance().role() != Role::Acid || per_unit <= 0.0 || self.volume.get() <= 0.0
        {
            return Err(Stop::NoRemedy);
        }
        let alkalinity = self.alkalinity.value.get();
        let meq_per_l = (alkalinity - self.target.get()).max(0.0) / MG_CACO3_PER_MEQ;
        let wanted = meq_per_l * self.volume.get() / per_unit;
        let dose = wanted.min(acid.cap.get());
        // A cap that leaves next to nothing is no treatment.
        if dose < 0.1 * wanted {
            return Err(Stop::CapReached);
        }
        let taken = dose * per_unit * MG_CACO3_PER_MEQ / self.volume.get();
        let strength_sd = material.relative_sd().get() * taken;
        Ok(AcidDose {
            dose: DoseAmount::clamped(dose),
            capped: dose < wanted,
            after: Estimate::new(
                MgPerLAsCaCO3::clamped(alkalinity - taken),
                self.alkalinity.sd.hypot(strength_sd),
            ),
        })
    }
}

/// The pH of a liquor of this alkalinity, cooled: at once, and when nine tenths of its
/// carbon dioxide have left. `like`: what is dissolved in it otherwise; a difference in
/// alkalinity is taken as bicarbonate.
pub fn ph_range(
    like: &Water,
    tested: MgPerLAsCaCO3,
    acid: &Contribution,
    volume: Litres,
) -> Result<(Ph, Ph), CarbonateError> {
    let alkalinity = tested.get() / MG_CACO3_PER_MEQ;
    let more = alkalinity - like.alkalinity.get();
    let water = Water {
        alkalinity: tested.into(),
        carbon: MmolPerL::clamped((like.carbon.get() + more).max(alkalinity.max(0.0))),
        ..*like
    };
    let dosed = acid.added_to(&water, volume);
    let constants = Constants::at(BASIS)?;
    let at = |lost: f64| -> Result<Ph, CarbonateError> {
        Ok(degassed(&dosed, Fraction::clamped(lost), &constants)?
            .speciation
            .ph())
    };
    Ok((at(0.0)?, at(0.9)?))
}
