//! From a laboratory's lines to figures in one set of units, and whether they can
//! be believed.
//!
//! [`Reading::parse`] understands one line as it was printed; a [`Report`] is all
//! the lines of one sample with how they were measured; [`assess`] compares them
//! with each other and gives an [`Assessment`]: figures, findings, a verdict, and
//! what could be worked out beyond what was reported. [`Assessment::composition`]
//! makes a water of it, [`potable_findings`] holds it against drinking-water limits.

mod analyte;
mod assessment;
mod balance;
mod bases;
mod checks;
mod composition;
mod conductivity;
mod figure;
mod finding;
mod inference;
mod limits;
mod reading;
mod typed;
mod unit;

pub use analyte::Analyte;
pub use assessment::{Assessment, assess};
pub use balance::{Closure, IonBalance};
pub use composition::{Assumption, Composition, NotEnough};
pub use conductivity::conductivity;
pub use figure::Figure;
pub use finding::{Finding, FindingFigure, FindingKind, Severity, Verdict};
pub use inference::{Inference, InferenceKind};
pub use limits::{Concern, Limit, LimitSet, PotableFinding, Standing, potable_findings};
pub use reading::{CanonicalValue, Reading, ReadingError};
pub use typed::{Qualifier, TypedValue, TypingError, parse_typed};
pub use unit::ReportingUnit;

use crate::quantity::{Celsius, MgPerLAsCaCO3};

/// How a line was measured; it decides how well the figure is known.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Method {
    /// A laboratory's instrument or titration.
    Laboratory,
    /// Drops counted to a colour change, with what one drop is worth.
    DropKit {
        /// One drop, as CaCO₃; other analytes by equivalents.
        drop: MgPerLAsCaCO3,
    },
    /// A photometer with test reagents.
    Photometer,
    /// A pH or conductivity meter at the brewery.
    Meter,
}

impl Method {
    /// The stable name in JSON and the database; the drop is kept beside it.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::Laboratory => "laboratory",
            Self::DropKit { .. } => "drop_kit",
            Self::Photometer => "photometer",
            Self::Meter => "meter",
        }
    }
}

/// What the figures of a report stand for.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum SampleKind {
    /// One bottle, one day.
    SingleSample,
    /// Averages over a year or a season: each figure may come from other days.
    Average,
}

impl SampleKind {
    /// The stable name in JSON and the database.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::SingleSample => "single_sample",
            Self::Average => "average",
        }
    }

    /// The kind with this [`key`](Self::key).
    #[must_use]
    pub fn from_key(key: &str) -> Option<Self> {
        [Self::SingleSample, Self::Average]
            .into_iter()
            .find(|kind| kind.key() == key)
    }
}

/// What sort of water was sampled; it decides what is remarkable.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum WaterKind {
    /// Public supply.
    Mains,
    /// Borehole or well.
    Borehole,
    /// River, lake or reservoir.
    Surface,
    /// Permeate of reverse osmosis, or demineralised water.
    Permeate,
    /// Anything else.
    Other,
}

impl WaterKind {
    /// Every kind.
    pub const ALL: [Self; 5] = [
        Self::Mains,
        Self::Borehole,
        Self::Surface,
        Self::Permeate,
        Self::Other,
    ];

    /// The stable name in JSON and the database.
    #[must_use]
    pub const fn key(self) -> &'static str {
        match self {
            Self::Mains => "mains",
            Self::Borehole => "borehole",
            Self::Surface => "surface",
            Self::Permeate => "permeate",
            Self::Other => "other",
        }
    }

    /// The kind with this [`key`](Self::key).
    #[must_use]
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|kind| kind.key() == key)
    }
}

/// One line of a report.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ReportLine {
    /// What the line says.
    pub reading: Reading,
    /// How it was measured.
    pub method: Method,
}

/// All lines of one sample.
#[derive(Clone, Debug, PartialEq)]
pub struct Report {
    lines: Vec<ReportLine>,
    kind: SampleKind,
    water: WaterKind,
    ph_temperature: Option<Celsius>,
}

/// Two lines for one analyte.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
#[error("The report has two lines for {}. Keep one; a second sample is a test of its own.", .0.name())]
pub struct TwoLines(
    /// The analyte reported twice.
    pub Analyte,
);

impl Report {
    /// A report with at most one line per analyte.
    ///
    /// `ph_temperature` is the temperature of the pH reading, when it is known.
    pub fn new(
        lines: Vec<ReportLine>,
        kind: SampleKind,
        water: WaterKind,
        ph_temperature: Option<Celsius>,
    ) -> Result<Self, TwoLines> {
        let mut seen = Vec::with_capacity(lines.len());
        for line in &lines {
            let analyte = line.reading.analyte();
            if seen.contains(&analyte) {
                return Err(TwoLines(analyte));
            }
            seen.push(analyte);
        }
        Ok(Self {
            lines,
            kind,
            water,
            ph_temperature,
        })
    }

    /// The lines, as given.
    #[must_use]
    pub fn lines(&self) -> &[ReportLine] {
        &self.lines
    }

    /// One sample or an average.
    #[must_use]
    pub const fn kind(&self) -> SampleKind {
        self.kind
    }

    /// What was sampled.
    #[must_use]
    pub const fn water_kind(&self) -> WaterKind {
        self.water
    }

    /// Temperature of the pH reading, when known.
    #[must_use]
    pub const fn ph_temperature(&self) -> Option<Celsius> {
        self.ph_temperature
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_second_line_for_the_same_analyte_is_refused() {
        let line = ReportLine {
            reading: Reading::parse(Analyte::Calcium, ReportingUnit::MgPerL, "60").unwrap(),
            method: Method::Laboratory,
        };
        let report = Report::new(
            vec![line, line],
            SampleKind::SingleSample,
            WaterKind::Mains,
            None,
        );
        assert_eq!(report, Err(TwoLines(Analyte::Calcium)));
    }
}
