//! Today's water: what a source is now, from every test that counts.
//!
//! Each figure has a history of its own: alkalinity may be tested every week and
//! sodium once a year. [`compose`] estimates each from its history, see
//! [`statistics::local_level`], and puts them together. What was never tested is
//! assumed as for a single report, and said to be.

use chemistry::carbonate::Speciation;
use chemistry::ion::IonMap;
use chemistry::quantity::{MeqPerL, MgPerL, Ph};
use chemistry::report::{
    Analyte, Composition, Figure, Finding, InferenceKind, LimitSet, Method, PotableFinding,
    Qualifier, Reading, ReportingUnit, SampleKind, Severity, TypedValue, Verdict, WaterKind,
    potable_findings,
};
use chemistry::water::{MeasuredWater, Water};
use jiff::civil::{Date, date};
use statistics::local_level::{self, Damping, Observation, Prior, Range, Settings, SourceKind};
use statistics::measurement::{self, Precision};
use statistics::quantity::{Day, Sd, Share, Step, Value};

use super::trend::capital;
use super::water_tests::WaterTest;
use super::{Source, days_between};
use crate::error::Error;
use crate::id::WaterTestId;

/// The best estimate of what a source is now.
#[derive(Clone, Debug, PartialEq)]
pub struct TodaysWater {
    /// Whose water it is.
    pub source: Source,
    /// The day it is estimated for.
    pub on: Date,
    /// What is dissolved in it.
    pub water: Water,
    /// The same with the pH it has instead of its carbon.
    pub measured: MeasuredWater,
    /// One standard deviation of each ion.
    pub ion_sd: IonMap<MgPerL>,
    /// One standard deviation of the alkalinity.
    pub alkalinity_sd: MeqPerL,
    /// Its pH, at the temperature in `measured`.
    pub ph: Ph,
    /// One standard deviation of the pH, in pH units.
    pub ph_sd: f64,
    /// Each figure with its doubt, age and origin, in the order reports print them.
    pub figures: Vec<TodaysFigure>,
    /// What was taken for granted, each in a sentence.
    pub assumed: Vec<String>,
    /// The day of the newest sample that counts.
    pub latest: Date,
    /// The tests it rests on, newest first.
    pub tests: Vec<WaterTestId>,
    /// The figures outside the limits for drinking water.
    pub potable: Vec<PotableFinding>,
    /// What speaks against the newest test with enough lines to be judged.
    pub findings: Vec<Finding>,
    /// What the checks of that test come to; [`Verdict::CannotBeJudged`] without one.
    pub verdict: Verdict,
}

impl TodaysWater {
    /// The figure of one analyte, if it is known or assumed.
    pub fn figure(&self, analyte: Analyte) -> Option<&TodaysFigure> {
        self.figures.iter().find(|figure| figure.analyte == analyte)
    }
}

/// One figure of today's water.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct TodaysFigure {
    /// What it is a figure of.
    pub analyte: Analyte,
    /// The best number, in the canonical unit of the analyte.
    pub value: f64,
    /// One standard deviation, in the same unit.
    pub sd: f64,
    /// The limit below which it is only known to be, when no test ever found more.
    pub below: Option<f64>,
    /// Days since the newest sample that shows it; `None` when no sample does.
    pub age_days: Option<i64>,
    /// Where it comes from.
    pub how: HowKnown,
}

/// Where a figure of today's water comes from.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum HowKnown {
    /// Tests; the newest was made so.
    Tested(Method),
    /// Worked out from other figures of a test, and accepted.
    WorkedOut(InferenceKind),
    /// Averages of a year or a season; no sample shows it.
    Average,
    /// Never tested.
    Assumed,
}

impl HowKnown {
    /// The stable name in JSON.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Tested(method) => method.key(),
            Self::WorkedOut(kind) => kind.key(),
            Self::Average => "average",
            Self::Assumed => "assumed",
        }
    }

    /// In words.
    pub const fn name(self) -> &'static str {
        match self {
            Self::Tested(Method::Laboratory) => "laboratory",
            Self::Tested(Method::DropKit { .. }) => "drop-count kit",
            Self::Tested(Method::Photometer) => "photometer",
            Self::Tested(Method::Meter) => "meter",
            Self::WorkedOut(InferenceKind::PartOfHardness) => "from its own hardness",
            Self::WorkedOut(InferenceKind::RestOfHardness) => "the rest of the hardness",
            Self::WorkedOut(InferenceKind::ShareOfHardness) => "a usual share of the hardness",
            Self::WorkedOut(InferenceKind::Balance) => "by the ion balance",
            Self::Average => "averages, no sample",
            Self::Assumed => "assumed, never tested",
        }
    }
}

/// What one test says of one analyte.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Seen {
    /// The test.
    pub test: WaterTestId,
    /// The day of the sample.
    pub sampled_on: Date,
    /// The figure.
    pub figure: Figure,
    /// Where the test has it from.
    pub how: HowKnown,
    /// Whether it is an average, and so no sample of any day.
    pub is_average: bool,
}

/// Everything a test says, in the figures today's water is made of: alkalinity also
/// from bicarbonate, and what was worked out and accepted.
pub fn seen(test: &WaterTest) -> Result<Vec<Seen>, Error> {
    let assessment = test.assess()?;
    let method = |analyte| {
        let mut lines = test.sheet.lines.iter();
        lines
            .find(|line| line.reading.analyte() == analyte)
            .map(|line| line.method)
    };
    let see = |figure: Figure, how| Seen {
        test: test.id,
        sampled_on: test.sheet.sampled_on,
        figure,
        how,
        is_average: test.sheet.sample_kind == SampleKind::Average,
    };
    let mut all = Vec::new();
    for analyte in Analyte::ALL.into_iter().filter(|a| is_followed(*a)) {
        let (figure, method) = if analyte == Analyte::Alkalinity {
            let method = method(analyte).or_else(|| method(Analyte::Bicarbonate));
            (assessment.alkalinity(), method)
        } else {
            (assessment.figure(analyte), method(analyte))
        };
        let how = match test.sheet.sample_kind {
            SampleKind::Average => HowKnown::Average,
            SampleKind::SingleSample => HowKnown::Tested(method.unwrap_or(Method::Laboratory)),
        };
        if let Some(figure) = figure {
            all.push(see(figure, how));
        } else if let Some(inference) = test
            .sheet
            .inferences(&assessment)
            .into_iter()
            .find(|inference| inference.analyte() == analyte)
        {
            all.push(see(inference.figure, HowKnown::WorkedOut(inference.kind)));
        }
    }
    Ok(all)
}

/// Bicarbonate and carbonate are followed as alkalinity, parts of the hardness as
/// calcium and magnesium.
pub fn is_followed(analyte: Analyte) -> bool {
    !matches!(
        analyte,
        Analyte::Bicarbonate
            | Analyte::Carbonate
            | Analyte::CalciumHardness
            | Analyte::MagnesiumHardness
    )
}

/// Puts today's water together. `tests`: those that count, newest sample first.
pub fn compose(
    source: Source,
    tests: &[WaterTest],
    limits: LimitSet,
    on: Date,
) -> Result<TodaysWater, Error> {
    let tests: Vec<&WaterTest> = tests
        .iter()
        .filter(|test| test.counts() && test.sheet.sampled_on <= on)
        .collect();
    let Some(newest) = tests.first() else {
        return Err(Error::Conflict(format!(
            "No water test of “{}” counts for today’s water. Enter one first",
            source.name
        )));
    };
    let mut history: Vec<Seen> = Vec::new();
    for test in &tests {
        history.extend(seen(test)?);
    }
    let mut figures = Vec::new();
    let mut known = Vec::new();
    for analyte in Analyte::ALL {
        let of_analyte: Vec<Seen> = history
            .iter()
            .copied()
            .filter(|seen| seen.figure.analyte() == analyte)
            .collect();
        if let Some((figure, todays)) = estimate(analyte, &of_analyte, source.kind, on)? {
            known.push(figure);
            figures.push(todays);
        }
    }
    let ph_temperature = tests.iter().find_map(|test| test.sheet.ph_temperature);
    let composition = Composition::of(known.clone(), ph_temperature)
        .map_err(|error| unusable(&source, &error))?;
    let speciation =
        Speciation::of_measured(&composition.water).map_err(|error| unusable(&source, &error))?;
    add_assumed(&mut figures, &composition);
    let (verdict, findings) = judged(&tests)?;
    Ok(TodaysWater {
        water: *speciation.water(),
        measured: composition.water,
        ion_sd: composition.ion_sd,
        alkalinity_sd: composition.alkalinity_sd.into(),
        ph: composition.water.ph,
        ph_sd: composition.ph_sd,
        assumed: assumed(&composition, &history),
        figures,
        latest: newest.sheet.sampled_on,
        tests: tests.iter().map(|test| test.id).collect(),
        potable: potable_findings(&known, limits),
        verdict,
        findings,
        source,
        on,
    })
}

/// The verdict on the newest test that had one, and what speaks against it. A kit's
/// single figure says nothing of the report before it.
fn judged(tests: &[&WaterTest]) -> Result<(Verdict, Vec<Finding>), Error> {
    for test in tests {
        let assessment = test.assess()?;
        if assessment.verdict != Verdict::CannotBeJudged {
            let mut findings = assessment.findings;
            findings.retain(|finding| finding.severity > Severity::Info);
            return Ok((assessment.verdict, findings));
        }
    }
    Ok((Verdict::CannotBeJudged, Vec::new()))
}

fn unusable(source: &Source, why: &dyn std::error::Error) -> Error {
    Error::Conflict(format!(
        "The water of “{}” cannot be told. {}",
        source.name,
        why.to_string().trim_end_matches('.')
    ))
}

/// Most liquors lie within pH 7.0 and 8.2. With a range of 0.8 an old pH is never
/// less well known than an assumed one, ± 0.4.
const USUAL_PH: Range = Range {
    least: Value::constant(7.2),
    greatest: Value::constant(8.0),
};

/// One figure from its history, newest first; `None` without one.
fn estimate(
    analyte: Analyte,
    history: &[Seen],
    kind: WaterKind,
    on: Date,
) -> Result<Option<(Figure, TodaysFigure)>, Error> {
    let samples: Vec<&Seen> = history.iter().filter(|seen| !seen.is_average).collect();
    // A supplier's average is no sample of any day: it is what to expect before one.
    let average = history.iter().find(|seen| seen.is_average);
    let Some(newest) = samples.first().copied().or(average) else {
        return Ok(None);
    };
    let observations: Vec<Observation> = samples.iter().map(|seen| observation(seen)).collect();
    let settings = Settings {
        change_in_90_days: change_in_90_days(analyte, kind),
        laboratory: precision(Method::Laboratory, analyte),
        prior: average.map(|seen| Prior {
            mean: Value::clamped(seen.figure.best()),
            sd: Sd::clamped(seen.figure.sd()),
        }),
        supplier_range: (analyte == Analyte::Ph).then_some(USUAL_PH),
        damping: Damping::Odd,
    };
    let Some(level) = local_level::today(&observations, &settings, day(on)) else {
        return Ok(None);
    };
    // Where nothing but limits was ever found, the newest limit says it best.
    let below = history
        .iter()
        .all(|seen| seen.figure.canonical().qualifier() == Qualifier::Below)
        .then(|| newest.figure.canonical().get());
    let (number, qualifier, sd) = match below {
        Some(limit) => (limit, Qualifier::Below, level.sd.get().max(limit / 2.0)),
        None => (
            level.value.get().max(0.0),
            Qualifier::Measured,
            level.sd.get(),
        ),
    };
    let canonical = TypedValue::new(qualifier, number)
        .map_err(|error| error.to_string())
        .and_then(|typed| {
            Reading::new(analyte, analyte.canonical_unit(), typed).map_err(|e| e.to_string())
        })
        .map_err(|error| Error::internal("A figure of today's water is no figure", error))?
        .canonical();
    let figure = Figure::new(canonical, sd);
    let todays = TodaysFigure {
        analyte,
        value: figure.best(),
        sd,
        below,
        age_days: samples
            .first()
            .map(|seen| days_between(seen.sampled_on, on)),
        how: newest.how,
    };
    Ok(Some((figure, todays)))
}

fn day(date_of: Date) -> Day {
    const ORIGIN: Date = date(2000, 1, 1);
    #[allow(clippy::cast_precision_loss, reason = "days of a few centuries")]
    Day::clamped(days_between(ORIGIN, date_of) as f64)
}

fn observation(seen: &Seen) -> Observation {
    let canonical = seen.figure.canonical();
    let precision = match seen.how {
        HowKnown::Tested(method) => precision(method, canonical.analyte()),
        _ => Precision {
            constant: Sd::clamped(seen.figure.sd()),
            proportional: Share::constant(0.0),
            step: Step::constant(0.0),
        },
    };
    let value = Value::clamped(canonical.get());
    Observation {
        day: day(seen.sampled_on),
        finding: match canonical.qualifier() {
            Qualifier::Measured => local_level::Finding::Measured(value),
            Qualifier::Below => local_level::Finding::Below(value),
        },
        precision,
    }
}

/// How precise a method is for an analyte. A drop stands for what the kit says.
fn precision(method: Method, analyte: Analyte) -> Precision {
    let kind = match method {
        Method::Laboratory => measurement::Method::Laboratory,
        Method::DropKit { .. } => measurement::Method::DropKit,
        Method::Photometer => measurement::Method::Photometer,
        Method::Meter => measurement::Method::Meter,
    };
    let known = match analyte {
        Analyte::Alkalinity => measurement::Analyte::Alkalinity,
        Analyte::TotalHardness => measurement::Analyte::Hardness,
        Analyte::Calcium => measurement::Analyte::Calcium,
        Analyte::Magnesium => measurement::Analyte::Magnesium,
        Analyte::Sodium => measurement::Analyte::Sodium,
        Analyte::Potassium => measurement::Analyte::Potassium,
        Analyte::Chloride => measurement::Analyte::Chloride,
        Analyte::Sulfate => measurement::Analyte::Sulfate,
        Analyte::Nitrate => measurement::Analyte::Nitrate,
        Analyte::Iron => measurement::Analyte::Iron,
        Analyte::Conductivity => measurement::Analyte::Conductivity,
        Analyte::Ph => measurement::Analyte::Ph,
        // Traces and silica: as for a single report, 5 % in a laboratory; assumed.
        _ => {
            let share = match method {
                Method::Laboratory => Share::constant(0.05),
                _ => Share::constant(0.08),
            };
            return Precision {
                constant: Sd::constant(0.005),
                proportional: share,
                step: Step::constant(0.0),
            };
        }
    };
    let mut precision = Precision::of(kind, known);
    if let Some(step) = per_drop(method, analyte) {
        precision.step = step;
    }
    precision
}

/// What a drop of a kit is worth, in the canonical unit of the analyte.
fn per_drop(method: Method, analyte: Analyte) -> Option<Step> {
    let Method::DropKit { drop } = method else {
        return None;
    };
    // Other analytes by equivalents, through whichever unit they share.
    let alkalinity = TypedValue::new(Qualifier::Measured, drop.get()).ok()?;
    let meq = Reading::new(
        Analyte::Alkalinity,
        ReportingUnit::MgPerLAsCaCO3,
        alkalinity,
    )
    .ok()?
    .canonical()
    .reported_in(ReportingUnit::MeqPerL)?;
    let reading = Reading::new(analyte, ReportingUnit::MeqPerL, meq).ok()?;
    Step::new(reading.canonical().get()).ok()
}

/// How far a figure usually drifts in 90 days, as a share of it.
fn change_in_90_days(analyte: Analyte, kind: WaterKind) -> Share {
    /// pH is a logarithm: a share of it means nothing. About 0.2 units; assumed.
    const PH: Share = Share::constant(0.025);
    if analyte == Analyte::Ph {
        return PH;
    }
    let kind = match kind {
        WaterKind::Mains => SourceKind::SteadyMains,
        WaterKind::Borehole => SourceKind::Borehole,
        WaterKind::Surface | WaterKind::Other => SourceKind::BlendedMainsOrSurface,
        WaterKind::Permeate => SourceKind::ReverseOsmosis,
    };
    kind.change_in_90_days()
}

/// Adds the figures that no test shows and a plan needs all the same.
fn add_assumed(figures: &mut Vec<TodaysFigure>, composition: &Composition) {
    for assumption in &composition.assumed {
        let analyte = assumption.analyte;
        if figures.iter().any(|figure| figure.analyte == analyte) {
            continue;
        }
        let (value, sd) = match analyte.ion() {
            Some(ion) => (
                composition.water.ions[ion].get(),
                composition.ion_sd[ion].get(),
            ),
            None if analyte == Analyte::Ph => (composition.water.ph.get(), composition.ph_sd),
            None => continue,
        };
        figures.push(TodaysFigure {
            analyte,
            value,
            sd,
            below: None,
            age_days: None,
            how: HowKnown::Assumed,
        });
    }
    figures.sort_by_key(|figure| figure.analyte);
}

/// What was taken for granted, in sentences: by the composition, and by whoever
/// accepted a figure that was worked out.
fn assumed(composition: &Composition, history: &[Seen]) -> Vec<String> {
    let mut sentences: Vec<String> = composition
        .assumed
        .iter()
        .map(|assumption| assumption.sentence.clone())
        .collect();
    for analyte in Analyte::ALL {
        let newest = history.iter().find(|seen| seen.figure.analyte() == analyte);
        if let Some(HowKnown::WorkedOut(kind)) = newest.map(|seen| seen.how) {
            sentences.push(format!(
                "{} was not reported; it was worked out: {}.",
                capital(analyte.name()),
                HowKnown::WorkedOut(kind).name()
            ));
        }
    }
    sentences
}
