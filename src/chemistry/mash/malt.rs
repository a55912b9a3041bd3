//! Malts as weak acids.
//!
//! In distilled water a malt settles at its own pH. To move it from there takes
//! acid or base, and how much is its buffering. Both differ from lot to lot, so
//! both are estimates. [`MaltClass`](super::MaltClass) holds what to assume before a lot was
//! measured; [`titration`](super::titration) fits a bench titration.

use crate::acid::Acid;
use crate::quantity::{
    Ebc, Estimate, Fraction, Lovibond, MeqPerKg, MeqPerKgPh, Ph, RelativeBuffering, RelativeSd,
};

use super::BASIS;

/// Weak-acid groups of malt: pKa and amount in mmol/kg as-is at a relative
/// buffering of one.
///
/// Source: fitted to one acidified mash (J.-P. Hosom, open measurements) and to
/// the calcium series of [`TAYLOR_1990`](crate::references::TAYLOR_1990); that
/// carboxylates carry the buffering below pH 5.5 is from
/// [`LI_2016`](crate::references::LI_2016). Carboxylates, histidine-like, second
/// step of phosphate.
const GROUPS: [(f64, f64); 3] = [(4.6, 135.0), (6.2, 5.0), (6.8, 40.0)];

/// Least buffering a Taylor form may show, meq/(kg·pH).
///
/// Source: assumed; below it a cubic turns over and a mash would have two pH values.
const LEAST_BUFFERING: f64 = 18.0;

/// A malt or other grist ingredient and what is known of its acidity.
#[derive(Clone, Debug, PartialEq)]
pub struct Malt {
    /// What the brewery calls it, with the lot where there is one. Malts of one name
    /// are taken to err together.
    pub name: String,
    /// How it meets acid and base.
    pub behaviour: Behaviour,
}

/// How a malt meets acid and base.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Behaviour {
    /// The common groups, scaled.
    Groups(Groups),
    /// Measured coefficients of the published three-term form.
    Taylor(Taylor),
    /// A malt that carries lactic acid.
    Acidulated {
        /// The malt without the acid.
        base: Groups,
        /// Lactic acid, share of the weight.
        lactic: Estimate<Fraction>,
    },
}

/// The common weak-acid groups, scaled to one malt.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Groups {
    /// pH of its mash in distilled water, cooled sample.
    pub distilled_ph: Estimate<Ph>,
    /// Buffering relative to an average pale malt, as-is weight.
    pub buffering: Estimate<RelativeBuffering>,
}

impl Groups {
    /// Groups with this distilled-water pH and relative buffering.
    #[must_use]
    pub const fn new(distilled_ph: Estimate<Ph>, buffering: Estimate<RelativeBuffering>) -> Self {
        Self {
            distilled_ph,
            buffering,
        }
    }

    fn demand(self, ph: f64) -> f64 {
        self.buffering.value.get() * (charge(self.distilled_ph.value.get()) - charge(ph))
    }

    fn slope(self, ph: f64) -> f64 {
        self.buffering.value.get() * charge_slope(ph)
    }
}

/// Charge of the groups at a relative buffering of one, meq/kg.
pub(super) fn charge(ph: f64) -> f64 {
    GROUPS
        .iter()
        .map(|(pk, amount)| amount / (1.0 + 10f64.powf(pk - ph)))
        .sum()
}

/// Its derivative, meq/(kg·pH).
pub(super) fn charge_slope(ph: f64) -> f64 {
    GROUPS
        .iter()
        .map(|(pk, amount)| {
            let dissociated = 1.0 / (1.0 + 10f64.powf(pk - ph));
            std::f64::consts::LN_10 * amount * dissociated * (1.0 - dissociated)
        })
        .sum()
}

/// The published form: acid demand a₁u + a₂u² + a₃u³ with u the distance from the
/// distilled-water pH, its buffering kept above 18 meq/(kg·pH) so that it never
/// turns over.
///
/// Source: [`DELANGE_2015`](crate::references::DELANGE_2015); the floor is ours.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Taylor {
    distilled_ph: Estimate<Ph>,
    a1: f64,
    a2: f64,
    a3: f64,
    relative_sd: f64,
}

/// Coefficients that describe no malt.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
#[error(
    "The first coefficient must be negative, between -500 and -1 meq per kg and pH; the second and third between -500 and 500."
)]
pub struct ImpossibleCoefficients;

impl Taylor {
    /// Measured coefficients, `a1` in meq/(kg·pH), `a2` in meq/(kg·pH²), `a3` in
    /// meq/(kg·pH³). `relative_sd` is one standard deviation of the buffering,
    /// relative to it.
    pub fn new(
        distilled_ph: Estimate<Ph>,
        [a1, a2, a3]: [f64; 3],
        relative_sd: RelativeSd,
    ) -> Result<Self, ImpossibleCoefficients> {
        let bounded = |value: f64| (-500.0..=500.0).contains(&value);
        if !((-500.0..=-1.0).contains(&a1) && bounded(a2) && bounded(a3)) {
            return Err(ImpossibleCoefficients);
        }
        Ok(Self {
            distilled_ph,
            a1,
            a2,
            a3,
            relative_sd: relative_sd.get(),
        })
    }

    /// pH of its mash in distilled water.
    #[must_use]
    pub const fn distilled_ph(self) -> Estimate<Ph> {
        self.distilled_ph
    }

    /// a₁ in meq/(kg·pH), a₂ in meq/(kg·pH²), a₃ in meq/(kg·pH³).
    #[must_use]
    pub const fn coefficients(self) -> [f64; 3] {
        [self.a1, self.a2, self.a3]
    }

    /// One standard deviation of the buffering, relative to it.
    #[must_use]
    pub fn relative_sd(self) -> RelativeSd {
        RelativeSd::clamped(self.relative_sd)
    }

    fn slope(self, u: f64) -> f64 {
        self.unclamped_slope(u).max(LEAST_BUFFERING)
    }

    fn unclamped_slope(self, u: f64) -> f64 {
        -(self.a1 + 2.0 * self.a2 * u + 3.0 * self.a3 * u * u)
    }

    fn polynomial(self, u: f64) -> f64 {
        u * (self.a1 + u * (self.a2 + u * self.a3))
    }

    /// Minus the integral of the clamped buffering from 0 to `u`, piece by piece
    /// between the points where the floor begins and ends.
    fn demand(self, u: f64) -> f64 {
        let mut points = vec![0.0];
        points.extend(
            self.floor_crossings()
                .into_iter()
                .filter(|point| point * u > 0.0 && point.abs() < u.abs()),
        );
        points.push(u);
        points.sort_by(|a, b| a.abs().total_cmp(&b.abs()));
        points
            .windows(2)
            .map(|piece| {
                let (from, to) = (piece[0], piece[1]);
                if self.unclamped_slope(f64::midpoint(from, to)) < LEAST_BUFFERING {
                    -LEAST_BUFFERING * (to - from)
                } else {
                    self.polynomial(to) - self.polynomial(from)
                }
            })
            .sum()
    }

    /// Where 3a₃u² + 2a₂u + a₁ equals minus the floor.
    fn floor_crossings(self) -> Vec<f64> {
        let (a, half_b, c) = (3.0 * self.a3, self.a2, self.a1 + LEAST_BUFFERING);
        let discriminant = half_b * half_b - a * c;
        if discriminant < 0.0 {
            return Vec::new();
        }
        // The form without cancellation; a vanishing `a` leaves one finite root.
        let q = -(half_b + half_b.signum() * discriminant.sqrt());
        [q / a, c / q]
            .into_iter()
            .filter(|root| root.is_finite())
            .collect()
    }
}

/// One thing about a malt that is not known exactly.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Doubt {
    /// Its pH in distilled water.
    DistilledPh,
    /// Its buffering.
    Buffering,
    /// The lactic acid it carries.
    LacticAcid,
}

impl Behaviour {
    /// Acid needed to bring the malt from its own pH to `ph`; negative where base
    /// is needed. Falls with rising pH everywhere.
    #[must_use]
    pub fn acid_demand(&self, ph: Ph) -> MeqPerKg {
        MeqPerKg::clamped(self.demand(ph.get()))
    }

    /// Acid taken up per pH unit at `ph`.
    #[must_use]
    pub fn buffering(&self, ph: Ph) -> MeqPerKgPh {
        let ph = ph.get();
        MeqPerKgPh::clamped(match *self {
            Self::Groups(groups) => groups.slope(ph),
            Self::Taylor(taylor) => taylor.slope(ph - taylor.distilled_ph.value.get()),
            Self::Acidulated { .. } => {
                let step = 1e-4; // pH; the lactic curve is smooth on that scale
                (self.demand(ph - step) - self.demand(ph + step)) / (2.0 * step)
            }
        })
    }

    pub(super) fn demand(&self, ph: f64) -> f64 {
        match *self {
            Self::Groups(groups) => groups.demand(ph),
            Self::Taylor(taylor) => taylor.demand(ph - taylor.distilled_ph.value.get()),
            Self::Acidulated { base, lactic } => {
                let mmol_per_kg = 1e6 * lactic.value.get() / Acid::Lactic.grams_per_mol();
                let given = Acid::Lactic.protons_released(Ph::clamped(ph), BASIS).get();
                base.demand(ph) - mmol_per_kg * given
            }
        }
    }

    /// The behaviour one standard deviation below and above, one doubt at a time.
    #[must_use]
    pub fn doubts(&self) -> Vec<(Doubt, Self, Self)> {
        let of_groups = |groups: Groups, wrap: &dyn Fn(Groups) -> Self| {
            let ph = |sign: f64| {
                let mut moved = groups;
                moved.distilled_ph.value =
                    Ph::clamped(groups.distilled_ph.value.get() + sign * groups.distilled_ph.sd);
                wrap(moved)
            };
            let buffering = |sign: f64| {
                let mut moved = groups;
                moved.buffering.value = RelativeBuffering::clamped(
                    groups.buffering.value.get() + sign * groups.buffering.sd,
                );
                wrap(moved)
            };
            vec![
                (Doubt::DistilledPh, ph(-1.0), ph(1.0)),
                (Doubt::Buffering, buffering(-1.0), buffering(1.0)),
            ]
        };
        match *self {
            Self::Groups(groups) => of_groups(groups, &Self::Groups),
            Self::Taylor(taylor) => {
                let ph = |sign: f64| {
                    let mut moved = taylor;
                    moved.distilled_ph.value = Ph::clamped(
                        taylor.distilled_ph.value.get() + sign * taylor.distilled_ph.sd,
                    );
                    Self::Taylor(moved)
                };
                let buffering = |sign: f64| {
                    let scale = 1.0 + sign * taylor.relative_sd;
                    Self::Taylor(Taylor {
                        a1: taylor.a1 * scale,
                        a2: taylor.a2 * scale,
                        a3: taylor.a3 * scale,
                        ..taylor
                    })
                };
                vec![
                    (Doubt::DistilledPh, ph(-1.0), ph(1.0)),
                    (Doubt::Buffering, buffering(-1.0), buffering(1.0)),
                ]
            }
            Self::Acidulated { base, lactic } => {
                let mut doubts = of_groups(base, &|base| Self::Acidulated { base, lactic });
                let acid = |sign: f64| Self::Acidulated {
                    base,
                    lactic: Estimate::new(
                        Fraction::clamped(lactic.value.get() + sign * lactic.sd),
                        lactic.sd,
                    ),
                };
                doubts.push((Doubt::LacticAcid, acid(-1.0), acid(1.0)));
                doubts
            }
        }
    }
}

/// The distilled-water mash pH to expect from the wort pH on a malt's data sheet.
///
/// Source: 0.10 lower, from one mash read both ways (T. Kraus-Weyermann, "pH in
/// the Brewery", slides); ± 0.07 assumed. A single pair, so weak.
#[must_use]
pub fn distilled_ph_from_sheet(wort_ph: Ph) -> Estimate<Ph> {
    Estimate::new(Ph::clamped(wort_ph.get() - 0.10), 0.07)
}

impl From<Lovibond> for Ebc {
    /// EBC = 1.97·SRM, SRM = 1.3546·°L − 0.76. Source: from memory.
    fn from(colour: Lovibond) -> Self {
        Self::clamped(1.97 * (1.3546 * colour.get() - 0.76))
    }
}

impl From<Ebc> for Lovibond {
    /// EBC = 1.97·SRM, SRM = 1.3546·°L − 0.76. Source: from memory.
    fn from(colour: Ebc) -> Self {
        Self::clamped((colour.get() / 1.97 + 0.76) / 1.3546)
    }
}
