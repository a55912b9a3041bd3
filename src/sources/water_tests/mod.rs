//! Water tests: one sample of one source, with the lines as they were printed.
//!
//! A test is never removed. It is corrected (the record book keeps what stood
//! before), withdrawn with a reason, or kept without being trusted for today's
//! water. What it says in mg/L and whether it adds up is worked out whenever it is
//! asked: see [`Sheet::assess`].

use chemistry::quantity::{Celsius, MgPerLAsCaCO3};
use chemistry::report::{
    Analyte, Assessment, Inference, InferenceKind, Method, Reading, Report, ReportLine, SampleKind,
    WaterKind, assess,
};
use jiff::civil::Date;

use crate::error::Error;
use crate::id::{SourceId, UtcTime, WaterTestId};

pub mod api;
pub mod operations;
pub mod pages;
pub mod store;

/// One sample of one source.
#[derive(Clone, Debug, PartialEq)]
pub struct WaterTest {
    /// Its identifier.
    pub id: WaterTestId,
    /// Where the sample was drawn.
    pub source_id: SourceId,
    /// What sort of water that is.
    pub water_kind: WaterKind,
    /// What was typed.
    pub sheet: Sheet,
    /// Whether it counts for today's water.
    pub trust: Trust,
    /// When and why it was withdrawn, if it was.
    pub withdrawn: Option<Withdrawal>,
    /// When it was entered.
    pub entered_at: UtcTime,
    /// Counts changes, so that two people do not overwrite each other.
    pub version: i64,
}

impl WaterTest {
    /// Whether it counts for today's water.
    pub fn counts(&self) -> bool {
        self.withdrawn.is_none() && self.trust.is_trusted()
    }

    /// What its lines come to.
    pub fn assess(&self) -> Result<Assessment, Error> {
        self.sheet.assess(self.water_kind)
    }
}

/// What a report says.
#[derive(Clone, Debug, PartialEq)]
pub struct Sheet {
    /// The day the sample was drawn.
    pub sampled_on: Date,
    /// Who made the analysis: a laboratory, a kit, a supplier.
    pub laboratory: String,
    /// The report's number.
    pub reference: String,
    /// One sample, or averages.
    pub sample_kind: SampleKind,
    /// Temperature of the pH reading.
    pub ph_temperature: Option<Celsius>,
    /// Anything else worth knowing.
    pub notes: String,
    /// The lines, at most one for each analyte.
    pub lines: Vec<Line>,
    /// What was worked out from the lines and accepted.
    pub accepted: Vec<Accepted>,
}

/// One line of a report.
#[derive(Clone, Debug, PartialEq)]
pub struct Line {
    /// What was typed, letter by letter.
    pub typed: String,
    /// What it means.
    pub reading: Reading,
    /// How it was measured.
    pub method: Method,
}

/// A figure that was not reported, and how it may be worked out.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Accepted {
    /// The figure.
    pub analyte: Analyte,
    /// The way to it that was accepted.
    pub kind: InferenceKind,
}

impl Sheet {
    /// The lines as the checks take them.
    pub fn report(&self, water: WaterKind) -> Result<Report, Error> {
        report(&self.lines, self.sample_kind, water, self.ph_temperature)
    }

    /// What the lines come to.
    pub fn assess(&self, water: WaterKind) -> Result<Assessment, Error> {
        Ok(assess(&self.report(water)?))
    }

    /// The accepted ways that the lines still allow, as figures.
    pub fn inferences(&self, assessment: &Assessment) -> Vec<Inference> {
        let wanted = |offer: &&Inference| {
            self.accepted
                .iter()
                .any(|a| a.analyte == offer.analyte() && a.kind == offer.kind)
        };
        assessment
            .inferences
            .iter()
            .filter(wanted)
            .cloned()
            .collect()
    }
}

/// Lines as the checks take them.
pub(super) fn report(
    lines: &[Line],
    kind: SampleKind,
    water: WaterKind,
    ph_temperature: Option<Celsius>,
) -> Result<Report, Error> {
    let lines = lines
        .iter()
        .map(|line| ReportLine {
            reading: line.reading,
            method: line.method,
        })
        .collect();
    Report::new(lines, kind, water, ph_temperature)
        .map_err(|error| Error::field("readings", error.to_string()))
}

/// Whether a test counts for today's water.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Trust {
    /// It does.
    Trusted,
    /// It does, although its figures cannot all be right; somebody said why.
    TrustedDespite(String),
    /// It was kept although its figures cannot all be right, and does not.
    DoesNotAddUp,
    /// It does not; somebody said why.
    Excluded(String),
}

impl Trust {
    /// Whether it counts.
    pub const fn is_trusted(&self) -> bool {
        matches!(self, Self::Trusted | Self::TrustedDespite(_))
    }

    /// The stable name in JSON and the database.
    pub const fn key(&self) -> &'static str {
        match self {
            Self::Trusted => "trusted",
            Self::TrustedDespite(_) => "trusted_despite",
            Self::DoesNotAddUp => "does_not_add_up",
            Self::Excluded(_) => "excluded",
        }
    }

    /// What somebody gave as the reason.
    pub fn reason(&self) -> Option<&str> {
        match self {
            Self::TrustedDespite(reason) | Self::Excluded(reason) => Some(reason),
            Self::Trusted | Self::DoesNotAddUp => None,
        }
    }
}

/// When and why a test was withdrawn.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Withdrawal {
    /// When.
    pub at: UtcTime,
    /// Why.
    pub reason: String,
}

/// A test as it was sent, before it is kept.
#[derive(Clone, Debug, PartialEq)]
pub struct NewWaterTest {
    /// What the report says.
    pub sheet: Sheet,
    /// The tick “keep it although it does not add up”.
    pub keep_although_it_does_not_add_up: bool,
    /// Why it should not count for today's water, if it should not.
    pub excluded: Option<String>,
    /// Why an earlier entry is corrected.
    pub correction_reason: Option<String>,
}

/// The names of the methods, with a drop that only shows the kind.
pub const METHODS: [(Method, &str); 4] = [
    (Method::Laboratory, "Laboratory"),
    (
        Method::DropKit {
            drop: MgPerLAsCaCO3::constant(0.0),
        },
        "Drop-count kit",
    ),
    (Method::Photometer, "Photometer"),
    (Method::Meter, "Meter"),
];

/// What a method is called.
pub fn method_name(method: Method) -> &'static str {
    METHODS
        .into_iter()
        .find(|(known, _)| known.key() == method.key())
        .map_or("", |(_, name)| name)
}

/// The method with this key; a drop-count kit needs what a drop is worth.
pub fn method_from_key(key: &str, drop: Option<MgPerLAsCaCO3>) -> Option<Method> {
    Some(match key {
        "laboratory" => Method::Laboratory,
        "drop_kit" => Method::DropKit { drop: drop? },
        "photometer" => Method::Photometer,
        "meter" => Method::Meter,
        _ => return None,
    })
}

/// The way of working a figure out with this key.
pub fn inference_from_key(key: &str) -> Option<InferenceKind> {
    [
        InferenceKind::PartOfHardness,
        InferenceKind::RestOfHardness,
        InferenceKind::ShareOfHardness,
        InferenceKind::Balance,
    ]
    .into_iter()
    .find(|kind| kind.key() == key)
}

/// What a kind of sample is called.
pub const fn sample_kind_name(kind: SampleKind) -> &'static str {
    match kind {
        SampleKind::SingleSample => "One sample, one day",
        SampleKind::Average => "Averages of a year or a season",
    }
}
