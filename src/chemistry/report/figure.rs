//! A reported figure with how well it is known.

use super::analyte::Analyte;
use super::reading::CanonicalValue;
use super::typed::Qualifier;
use super::{Method, ReportLine, SampleKind};
use crate::quantity::MG_CACO3_PER_MEQ;

/// A figure in its canonical unit with one standard deviation.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Figure {
    canonical: CanonicalValue,
    sd: f64,
}

impl Figure {
    /// A figure known to within `sd`, one standard deviation in its canonical unit;
    /// for what was estimated from several reports.
    #[must_use]
    pub const fn new(canonical: CanonicalValue, sd: f64) -> Self {
        Self { canonical, sd }
    }

    /// The figure of a line. The standard deviation combines the method's and, for
    /// averages, how far a water swings within a year.
    pub(super) fn of(line: &ReportLine, kind: SampleKind) -> Self {
        /// Spread within a year behind an average, as a share. Common practice is
        /// 10 to 30 %, no source; the middle is taken.
        const YEARLY_SHARE: f64 = 0.20;
        let canonical = line.reading.canonical();
        let value = canonical.get();
        let sd = if canonical.qualifier() == Qualifier::Below {
            value / 2.0
        } else {
            let method = method_sd(line.method, canonical.analyte(), value);
            match kind {
                SampleKind::SingleSample => method,
                SampleKind::Average if canonical.analyte() == Analyte::Ph => method.hypot(0.2),
                SampleKind::Average => method.hypot(YEARLY_SHARE * value),
            }
        };
        Self::new(canonical, sd)
    }

    /// What it is a figure of.
    #[must_use]
    pub const fn analyte(self) -> Analyte {
        self.canonical.analyte()
    }

    /// The figure as reported: a value, or the limit it is below.
    #[must_use]
    pub const fn canonical(self) -> CanonicalValue {
        self.canonical
    }

    /// The single number to calculate with, in the canonical unit: the value, or
    /// half the limit when only a limit is known (assumed; the usual substitute).
    #[must_use]
    pub const fn best(self) -> f64 {
        match self.canonical.qualifier() {
            Qualifier::Measured => self.canonical.get(),
            Qualifier::Below => self.canonical.get() / 2.0,
        }
    }

    /// One standard deviation of [`best`](Self::best), in the canonical unit: half
    /// the limit when only a limit is known.
    #[must_use]
    pub const fn sd(self) -> f64 {
        self.sd
    }
}

/// One standard deviation of one measurement, in the canonical unit.
///
/// Alkalinity and hardness, the ions and the meters: the defaults this service
/// chose for drift, after proficiency rounds and makers' statements. Lines without
/// such a default: 5 %, assumed.
fn method_sd(method: Method, analyte: Analyte, value: f64) -> f64 {
    use Analyte as A;
    match (method, analyte) {
        (Method::Laboratory, A::Ph) => 0.1,
        (Method::Meter, A::Ph) => 0.05,
        // Indicator drops and strips resolve about half a unit: assumed.
        (Method::DropKit { .. } | Method::Photometer, A::Ph) => 0.25,
        (_, A::Conductivity) => 0.01 * value + 1.0,
        (_, A::DissolvedSolids) => 0.05 * value + 5.0,
        (
            Method::Laboratory | Method::Meter,
            A::Alkalinity | A::TotalHardness | A::CalciumHardness | A::MagnesiumHardness,
        ) => 0.02 * value + 1.0,
        (
            Method::Laboratory | Method::Meter,
            A::Calcium | A::Magnesium | A::Chloride | A::Sulfate,
        ) => 0.025 * value,
        (Method::Laboratory | Method::Meter, A::Sodium | A::Potassium | A::Nitrate) => 0.03 * value,
        (Method::Laboratory | Method::Meter, A::Bicarbonate) => 0.02 * value + 1.2,
        (Method::Laboratory | Method::Meter, _) => 0.05 * value,
        // Half a drop to one drop is what makers state; half is taken as one
        // standard deviation, beside 4 % and 2 mg/L of reading the end point.
        (Method::DropKit { drop }, _) => {
            let per_caco3 = equivalent_of_caco3(analyte);
            (0.04 * value + 2.0 * per_caco3).hypot(drop.get().abs() / 2.0 * per_caco3)
        }
        (Method::Photometer, _) => 0.075 * value,
    }
}

/// Mass of an analyte equivalent to one of CaCO₃; 1 where equivalents mean nothing.
fn equivalent_of_caco3(analyte: Analyte) -> f64 {
    match analyte.substance() {
        Some(substance) if substance.charges > 0 => {
            substance.grams_per_mol / f64::from(substance.charges) / MG_CACO3_PER_MEQ
        }
        _ => 1.0,
    }
}

/// The figures of one report, at most one per analyte.
#[derive(Clone, Debug, PartialEq)]
pub(super) struct Figures(Vec<Figure>);

impl Figures {
    pub(super) const fn new(figures: Vec<Figure>) -> Self {
        Self(figures)
    }

    pub(super) fn all(&self) -> &[Figure] {
        &self.0
    }

    pub(super) fn get(&self, analyte: Analyte) -> Option<Figure> {
        self.0.iter().copied().find(|f| f.analyte() == analyte)
    }

    /// The best number for an analyte, in its canonical unit.
    pub(super) fn best(&self, analyte: Analyte) -> Option<f64> {
        self.get(analyte).map(Figure::best)
    }

    pub(super) fn has(&self, analyte: Analyte) -> bool {
        self.get(analyte).is_some()
    }

    /// The same figures with one more, in place of any of the same analyte.
    pub(super) fn with(&self, figure: Figure) -> Self {
        let mut figures = self.0.clone();
        figures.retain(|f| f.analyte() != figure.analyte());
        figures.push(figure);
        Self(figures)
    }

    /// Alkalinity, mg/L as CaCO₃, with its standard deviation: as reported, or from
    /// bicarbonate and carbonate.
    pub(super) fn alkalinity(&self) -> Option<(f64, f64)> {
        if let Some(figure) = self.get(Analyte::Alkalinity) {
            return Some((figure.best(), figure.sd()));
        }
        self.alkalinity_from_bicarbonate()
    }

    pub(super) fn alkalinity_from_bicarbonate(&self) -> Option<(f64, f64)> {
        let bicarbonate = self.get(Analyte::Bicarbonate)?;
        let of = |figure: Figure| {
            let per = 1.0 / equivalent_of_caco3(figure.analyte());
            (figure.best() * per, figure.sd() * per)
        };
        let (mut value, mut sd) = of(bicarbonate);
        if let Some(carbonate) = self.get(Analyte::Carbonate) {
            let (more, more_sd) = of(carbonate);
            value += more;
            sd = sd.hypot(more_sd);
        }
        Some((value, sd))
    }

    /// An analyte as CaCO₃ by its charge, with its standard deviation.
    pub(super) fn as_caco3(&self, analyte: Analyte) -> Option<(f64, f64)> {
        let figure = self.get(analyte)?;
        let per = 1.0 / equivalent_of_caco3(analyte);
        Some((figure.best() * per, figure.sd() * per))
    }
}
