//! Entering, correcting, withdrawing and trusting water tests.

use chemistry::quantity::{Celsius, MgPerLAsCaCO3};
use chemistry::report::{
    Analyte, Assessment, LimitSet, Method, PotableFinding, Reading, ReportingUnit, SampleKind,
    Severity, Verdict, WaterKind, assess, potable_findings,
};
use jiff::civil::Date;

use super::api::{ReadingBody, WaterTestBody, WaterTestCheckBody};
use super::store::{self, Which};
use super::{
    Accepted, Line, NewWaterTest, Sheet, Trust, WaterTest, Withdrawal, inference_from_key,
    method_from_key, report,
};
use crate::brewery;
use crate::db::Db;
use crate::error::{Error, FieldProblem};
use crate::id::{SourceId, UtcTime, WaterTestId};
use crate::input::{Number, Problems, shorten};
use crate::people::{Member, Permission};
use crate::record;
use crate::sources::{Source, store as sources};
use crate::web::format;

/// The longest figure anybody has to type.
const LONGEST_FIGURE: usize = 40;

impl TryFrom<WaterTestBody> for NewWaterTest {
    type Error = Error;

    fn try_from(body: WaterTestBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let sampled_on = problems.date("sampled_on", &body.sampled_on);
        let mut text = |name: &str, text: &str, longest| {
            problems
                .optional_text(name, text, longest)
                .unwrap_or_default()
        };
        let laboratory = text("laboratory", &body.laboratory, 120);
        let reference = text("reference", &body.reference, 120);
        let notes = text("notes", &body.notes, 2000);
        let reason = text("correction_reason", &body.correction_reason, 500);
        let sample_kind = sample_kind(&body.sample_kind, &mut problems);
        let ph_temperature = ph_temperature(&body.ph_temperature_celsius, &mut problems);
        let rows = Rows {
            method: &body.method,
            drop: &body.drop_mg_per_l_as_caco3,
            readings: &body.readings,
        };
        let lines = rows.lines(&mut problems);
        if lines.is_empty() && problems.is_empty() {
            problems.add("readings", "Type at least one line of the report.");
        }
        let mut accepted = Vec::new();
        for (analyte, kind) in &body.accepted {
            let pair = Analyte::from_key(analyte).zip(inference_from_key(kind));
            match pair {
                Some((analyte, kind)) => accepted.push(Accepted { analyte, kind }),
                None => problems.add(
                    format!("accepted.{analyte}"),
                    format!("“{}” is no way to work a figure out.", shorten(kind)),
                ),
            }
        }
        let excluded = if body.excluded.0 {
            problems.text("excluded_reason", &body.excluded_reason, 500)
        } else {
            None
        };
        problems.finish()?;
        match (sampled_on, sample_kind) {
            (Some(sampled_on), Some(sample_kind)) => Ok(Self {
                sheet: Sheet {
                    sampled_on,
                    laboratory,
                    reference,
                    sample_kind,
                    ph_temperature,
                    notes,
                    lines,
                    accepted,
                },
                keep_although_it_does_not_add_up: body.keep_although_it_does_not_add_up.0,
                excluded,
                correction_reason: Some(reason).filter(|reason| !reason.is_empty()),
            }),
            _ => Err(Error::field("", "Fill in every field.")),
        }
    }
}

fn sample_kind(key: &str, problems: &mut Problems) -> Option<SampleKind> {
    if key.trim().is_empty() {
        return Some(SampleKind::SingleSample);
    }
    problems.choice("sample_kind", key, SampleKind::from_key)
}

fn ph_temperature(number: &Number, problems: &mut Problems) -> Option<Celsius> {
    problems.optional_quantity("ph_temperature_celsius", number, |degrees| {
        if (0.0..=60.0).contains(&degrees) {
            Celsius::new(degrees).map_err(|_| "Enter a number")
        } else {
            Err("A water's pH is read from 0 to 60 °C")
        }
    })
}

/// The lines of a form or body, with what holds for those that do not say.
struct Rows<'a> {
    method: &'a str,
    drop: &'a Number,
    readings: &'a [ReadingBody],
}

impl Rows<'_> {
    /// The lines that could be read; the others are problems.
    fn lines(&self, problems: &mut Problems) -> Vec<Line> {
        let usual_drop = problems.optional_quantity("drop_mg_per_l_as_caco3", self.drop, drop_size);
        let usual = Some(self.method.trim()).filter(|key| !key.is_empty());
        let usual = usual.unwrap_or(Method::Laboratory.key());
        let mut lines: Vec<Line> = Vec::new();
        for (place, row) in self.readings.iter().enumerate() {
            let typed = typed(&row.value);
            if typed.is_empty() {
                continue;
            }
            let line = problems.within(format!("readings.{place}"), |problems| {
                let analyte = problems.choice("analyte", &row.analyte, Analyte::from_key)?;
                if lines.iter().any(|line| line.reading.analyte() == analyte) {
                    problems.add(
                        "value",
                        format!(
                            "There is a line for {} already. A second sample is a test of its own.",
                            analyte.name()
                        ),
                    );
                    return None;
                }
                let reading = reading(analyte, &row.unit, &typed, problems)?;
                let own = Some(row.method.trim()).filter(|key| !key.is_empty());
                let drop = problems.optional_quantity(
                    "drop_mg_per_l_as_caco3",
                    &row.drop_mg_per_l_as_caco3,
                    drop_size,
                );
                let method = method(
                    own.unwrap_or(usual),
                    own.is_some(),
                    drop.or(usual_drop),
                    problems,
                )?;
                Some(Line {
                    typed,
                    reading,
                    method,
                })
            });
            lines.extend(line);
        }
        lines
    }
}

fn typed(value: &Number) -> String {
    match value {
        Number::Missing => String::new(),
        Number::Given(number) => number.to_string(),
        Number::Typed(text) => text.trim().to_owned(),
    }
}

fn reading(analyte: Analyte, unit: &str, typed: &str, problems: &mut Problems) -> Option<Reading> {
    let unit = match (unit.trim(), analyte.units()) {
        ("", [only]) => *only,
        (key, _) => problems.choice("unit", key, ReportingUnit::from_key)?,
    };
    if typed.chars().count() > LONGEST_FIGURE {
        problems.add(
            "value",
            format!("Type the figure with at most {LONGEST_FIGURE} characters."),
        );
        return None;
    }
    match Reading::parse(analyte, unit, typed) {
        Ok(reading) => Some(reading),
        Err(error) => {
            problems.add("value", error.to_string());
            None
        }
    }
}

fn drop_size(drop: f64) -> Result<MgPerLAsCaCO3, &'static str> {
    if (0.1..=500.0).contains(&drop) {
        MgPerLAsCaCO3::new(drop).map_err(|_| "Enter a number")
    } else {
        Err("A drop is worth 0.1 to 500 mg/L as CaCO₃; the kit's leaflet says how much")
    }
}

/// `own`: whether the line itself names the method.
fn method(
    key: &str,
    own: bool,
    drop: Option<MgPerLAsCaCO3>,
    problems: &mut Problems,
) -> Option<Method> {
    if key == "drop_kit" && drop.is_none() {
        problems.add(
            if own { "method" } else { "value" },
            "Say at “One drop is worth” what a drop of the kit stands for.",
        );
        return None;
    }
    problems.choice("method", key, |key| method_from_key(key, drop))
}

/// What the lines of a report come to.
#[derive(Clone, Debug, PartialEq)]
pub struct Check {
    /// The checks.
    pub assessment: Assessment,
    /// The figures outside the brewery's limits for drinking water.
    pub potable: Vec<PotableFinding>,
}

/// Whose limits for drinking water reports are held against.
pub async fn limits(db: &Db) -> Result<LimitSet, Error> {
    Ok(brewery::operations::settings(db).await?.potable_limits)
}

fn check_of(limits: LimitSet, assessment: Assessment) -> Check {
    Check {
        potable: potable_findings(assessment.figures(), limits),
        assessment,
    }
}

/// Checks a sheet of a kind of water against these limits.
pub fn check(limits: LimitSet, sheet: &Sheet, water: WaterKind) -> Result<Check, Error> {
    Ok(check_of(limits, sheet.assess(water)?))
}

/// Checks the lines that can be read, and says which cannot.
pub async fn check_as_typed(
    db: &Db,
    body: &WaterTestBody,
    water: WaterKind,
) -> Result<(Check, Vec<FieldProblem>), Error> {
    let mut problems = Problems::new();
    let kind = sample_kind(&body.sample_kind, &mut problems).unwrap_or(SampleKind::SingleSample);
    let temperature = ph_temperature(&body.ph_temperature_celsius, &mut problems);
    let rows = Rows {
        method: &body.method,
        drop: &body.drop_mg_per_l_as_caco3,
        readings: &body.readings,
    };
    let lines = rows.lines(&mut problems);
    let check = check_of(
        limits(db).await?,
        assess(&report(&lines, kind, water, temperature)?),
    );
    match problems.finish() {
        Err(Error::Invalid(found)) => Ok((check, found)),
        Err(other) => Err(other),
        Ok(()) => Ok((check, Vec::new())),
    }
}

/// Checks a body that is not kept.
pub async fn check_body(db: &Db, body: &WaterTestCheckBody) -> Result<Check, Error> {
    let mut problems = Problems::new();
    let water = match body.water_kind.trim() {
        "" => Some(WaterKind::Other),
        key => problems.choice("water_kind", key, WaterKind::from_key),
    };
    let kind = sample_kind(&body.sample_kind, &mut problems);
    let temperature = ph_temperature(&body.ph_temperature_celsius, &mut problems);
    let rows = Rows {
        method: &body.method,
        drop: &body.drop_mg_per_l_as_caco3,
        readings: &body.readings,
    };
    let lines = rows.lines(&mut problems);
    problems.finish()?;
    match (water, kind) {
        (Some(water), Some(kind)) => Ok(check_of(
            limits(db).await?,
            assess(&report(&lines, kind, water, temperature)?),
        )),
        _ => Err(Error::field("", "Fill in every field.")),
    }
}

/// Whether a sheet may be kept, and whether it will count.
fn judge(
    new: &NewWaterTest,
    water: WaterKind,
    today: Date,
    before: Option<&WaterTest>,
) -> Result<Trust, Error> {
    let mut problems = Problems::new();
    let sheet = &new.sheet;
    if sheet.sampled_on > today {
        problems.add(
            "sampled_on",
            format!("The sample cannot be drawn in the future; today is {today}."),
        );
    }
    let assessment = sheet.assess(water)?;
    for accepted in &sheet.accepted {
        let is_offered = assessment
            .inferences
            .iter()
            .any(|offer| offer.analyte() == accepted.analyte && offer.kind == accepted.kind);
        if !is_offered {
            let name = accepted.analyte.name();
            problems.add(
                format!("accepted.{}", accepted.analyte.key()),
                format!("These lines do not let {name} be worked out so. Check the report again."),
            );
        }
    }
    let does_not_add_up = assessment.verdict == Verdict::DoesNotAddUp;
    if does_not_add_up && !new.keep_although_it_does_not_add_up {
        let worst = assessment
            .findings
            .iter()
            .find(|finding| finding.severity == Severity::Contradiction);
        problems.add(
            "keep_although_it_does_not_add_up",
            format!(
                "The report does not add up. {} Mend the lines, or tick “keep it although it does not add up”.",
                worst.map_or("", |finding| finding.sentence.as_str())
            ),
        );
    }
    problems.finish()?;
    Ok(match (&new.excluded, does_not_add_up) {
        (Some(reason), _) => Trust::Excluded(reason.clone()),
        (None, false) => Trust::Trusted,
        // A reason to trust these very lines holds while they stand.
        (None, true) => match before {
            Some(WaterTest {
                trust: trust @ Trust::TrustedDespite(_),
                sheet: earlier,
                ..
            }) if earlier.lines == sheet.lines && earlier.sample_kind == sheet.sample_kind => {
                trust.clone()
            }
            _ => Trust::DoesNotAddUp,
        },
    })
}

async fn today(db: &Db) -> Result<Date, Error> {
    let settings = brewery::operations::settings(db).await?;
    Ok(format::today(&settings.time_zone))
}

/// Keeps a test of a source.
pub async fn enter(
    db: &Db,
    by: &Member,
    source: SourceId,
    new: NewWaterTest,
) -> Result<WaterTest, Error> {
    by.may(Permission::EnterWaterTests)?;
    let today = today(db).await?;
    let mut tx = db.begin().await?;
    let source = sources::find(&mut tx, source)
        .await?
        .ok_or(Error::NotFound("source"))?;
    let test = WaterTest {
        id: WaterTestId::new(),
        source_id: source.id,
        water_kind: source.kind,
        trust: judge(&new, source.kind, today, None)?,
        sheet: new.sheet,
        withdrawn: None,
        entered_at: UtcTime::now(),
        version: 1,
    };
    store::insert(&mut tx, &test).await?;
    let name = name(&source, &test);
    let entry = record::Change::created("water test", test.id, &name, &describe(&test));
    record::append(&mut tx, by, entry.about("source", source.id)).await?;
    tx.commit().await?;
    Ok(test)
}

/// Corrects a test. `read_version`: the version the caller changed.
pub async fn correct(
    db: &Db,
    by: &Member,
    id: WaterTestId,
    new: NewWaterTest,
    read_version: Option<i64>,
) -> Result<WaterTest, Error> {
    let today = today(db).await?;
    change(db, by, id, "corrected", |before| {
        if read_version.is_some_and(|read| read != before.version) {
            return Err(Error::Conflict(
                "Somebody else changed this test meanwhile. Reload and correct it again".into(),
            ));
        }
        if before.withdrawn.is_some() {
            return Err(Error::Conflict(
                "This test is withdrawn. Take the withdrawal back first, or enter a new test"
                    .into(),
            ));
        }
        let trust = judge(&new, before.water_kind, today, Some(before))?;
        let reason = new
            .correction_reason
            .ok_or_else(|| Error::field("correction_reason", "Say why the test is corrected."))?;
        let after = WaterTest {
            sheet: new.sheet,
            trust,
            ..before.clone()
        };
        Ok((after, Some(reason)))
    })
    .await
}

/// Withdraws a test: it stays, and no longer counts.
pub async fn withdraw(
    db: &Db,
    by: &Member,
    id: WaterTestId,
    reason: &str,
) -> Result<WaterTest, Error> {
    let reason = permitted_reason(by, reason)?;
    change(db, by, id, "withdrawn", |before| {
        if before.withdrawn.is_some() {
            return Err(Error::Conflict("This test is withdrawn already".into()));
        }
        let after = WaterTest {
            withdrawn: Some(Withdrawal {
                at: UtcTime::now(),
                reason: reason.clone(),
            }),
            ..before.clone()
        };
        Ok((after, Some(reason)))
    })
    .await
}

/// Takes a withdrawal back.
pub async fn restore(db: &Db, by: &Member, id: WaterTestId) -> Result<WaterTest, Error> {
    change(db, by, id, "restored", |before| {
        if before.withdrawn.is_none() {
            return Err(Error::Conflict("This test is not withdrawn".into()));
        }
        let after = WaterTest {
            withdrawn: None,
            ..before.clone()
        };
        Ok((after, None))
    })
    .await
}

/// Keeps a test, but does not let it count for today's water.
pub async fn exclude(
    db: &Db,
    by: &Member,
    id: WaterTestId,
    reason: &str,
) -> Result<WaterTest, Error> {
    let reason = permitted_reason(by, reason)?;
    change(db, by, id, "excluded", |before| {
        let after = WaterTest {
            trust: Trust::Excluded(reason.clone()),
            ..before.clone()
        };
        Ok((after, Some(reason)))
    })
    .await
}

/// Lets a test count for today's water.
pub async fn trust(
    db: &Db,
    by: &Member,
    id: WaterTestId,
    reason: &str,
) -> Result<WaterTest, Error> {
    let reason = permitted_reason(by, reason)?;
    change(db, by, id, "trusted", |before| {
        let trust = match before.assess()?.verdict {
            Verdict::DoesNotAddUp => Trust::TrustedDespite(reason.clone()),
            _ => Trust::Trusted,
        };
        let after = WaterTest {
            trust,
            ..before.clone()
        };
        Ok((after, Some(reason)))
    })
    .await
}

/// Whoever may not change a test is told so before anything else.
fn permitted_reason(by: &Member, text: &str) -> Result<String, Error> {
    by.may(Permission::EnterWaterTests)?;
    let mut problems = Problems::new();
    let reason = problems.text("reason", text, 500);
    problems.finish()?;
    reason.ok_or_else(|| Error::field("reason", "Say why."))
}

/// One change of one test, written down with what was and what is.
async fn change(
    db: &Db,
    by: &Member,
    id: WaterTestId,
    action: &str,
    change: impl FnOnce(&WaterTest) -> Result<(WaterTest, Option<String>), Error>,
) -> Result<WaterTest, Error> {
    by.may(Permission::EnterWaterTests)?;
    let mut tx = db.begin().await?;
    let before = one(&mut tx, id).await?;
    let source = sources::find(&mut tx, before.source_id)
        .await?
        .ok_or(Error::NotFound("source"))?;
    let (mut after, reason) = change(&before)?;
    after.version = before.version + 1;
    store::update(&mut tx, &after).await?;
    let entry = record::Change::of(
        action,
        "water test",
        id,
        &name(&source, &after),
        Some(describe(&before)),
        Some(describe(&after)),
    );
    let entry = entry.because(reason).about("source", source.id);
    record::append(&mut tx, by, entry).await?;
    tx.commit().await?;
    Ok(after)
}

async fn one(db: &mut sqlx::SqliteConnection, id: WaterTestId) -> Result<WaterTest, Error> {
    let which = Which {
        id: Some(id),
        ..Which::ALL
    };
    let mut found = store::tests(db, which).await?;
    found.pop().ok_or(Error::NotFound("water test"))
}

/// What the record book calls a test.
fn name(source: &Source, test: &WaterTest) -> String {
    format!("{}, {}", source.name, test.sheet.sampled_on)
}

fn describe(test: &WaterTest) -> serde_json::Value {
    let mut value = serde_json::to_value(WaterTestBody::from(test)).unwrap_or_default();
    value["trust"] = test.trust.key().into();
    value["trust_reason"] = test.trust.reason().into();
    value["withdrawn"] = test.withdrawn.is_some().into();
    value
}

/// One test.
pub async fn find(db: &Db, by: &Member, id: WaterTestId) -> Result<WaterTest, Error> {
    by.may(Permission::Read)?;
    one(&mut *db.reader().await?, id).await
}

/// Up to `limit` tests of a source, newest sample first, after the one given.
pub async fn list(
    db: &Db,
    by: &Member,
    source: SourceId,
    after: Option<(Date, WaterTestId)>,
    limit: i64,
) -> Result<Vec<WaterTest>, Error> {
    by.may(Permission::Read)?;
    let mut snapshot = db.snapshot().await?;
    sources::find(&mut snapshot, source)
        .await?
        .ok_or(Error::NotFound("source"))?;
    let which = Which {
        source: Some(source),
        after,
        limit,
        ..Which::ALL
    };
    let tests = store::tests(&mut snapshot, which).await?;
    snapshot.commit().await?;
    Ok(tests)
}

/// `limit` tests of a source after passing `skip` over, newest sample first, and how
/// many there are.
pub async fn part(
    db: &Db,
    by: &Member,
    source: SourceId,
    skip: i64,
    limit: i64,
) -> Result<(Vec<WaterTest>, i64), Error> {
    by.may(Permission::Read)?;
    let mut snapshot = db.snapshot().await?;
    let which = Which {
        source: Some(source),
        skip,
        limit,
        ..Which::ALL
    };
    let tests = store::tests(&mut snapshot, which).await?;
    let count = store::count(&mut snapshot, source).await?;
    snapshot.commit().await?;
    Ok((tests, count))
}
