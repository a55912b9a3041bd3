//! The pages of water tests: one test, and the form that answers while a report is
//! typed.

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::{get, post};
use chemistry::quantity::MicrosiemensPerCm;
use chemistry::report::{Analyte, Method, SampleKind, Severity, Verdict, WaterKind};

use super::api::WaterTestBody;
use super::operations::{self, Check};
use super::{Line as TestLine, METHODS, Trust, WaterTest, method_name, sample_kind_name};
use crate::db::Db;
use crate::error::Error;
use crate::id::{SourceId, WaterTestId};
use crate::people::Permission;
use crate::record;
use crate::record::pages::Line;
use crate::sources::trend::{bare, capital, doubt};
use crate::sources::{Source, operations as sources};
use crate::web::App;
use crate::web::extract::At;
use crate::web::form::{Choice, Form};
use crate::web::format;
use crate::web::layout::{Framer, Page};

/// The pages.
pub(in crate::sources) fn routes() -> Router<App> {
    Router::new()
        .route("/sources/{id}/water-tests/new", get(new).post(enter))
        .route("/sources/{id}/water-tests/check", post(check))
        .route("/water-tests/{id}", get(show))
        .route("/water-tests/{id}/edit", get(edit).post(correct))
        .route("/water-tests/{id}/withdrawal", post(withdraw))
        .route("/water-tests/{id}/return", post(restore))
        .route("/water-tests/{id}/exclusion", post(exclude))
        .route("/water-tests/{id}/trust", post(trust))
}

/// The kind of badge that shows a verdict.
pub(in crate::sources) const fn verdict_badge(verdict: Verdict) -> &'static str {
    match verdict {
        Verdict::AddsUp => "adds-up",
        Verdict::Doubtful => "doubtful",
        Verdict::DoesNotAddUp => "does-not-add-up",
        Verdict::CannotBeJudged => "unknown",
    }
}

/// One test in a list.
pub(in crate::sources) struct TestRow {
    pub(in crate::sources) id: WaterTestId,
    pub(in crate::sources) sampled_on: String,
    pub(in crate::sources) laboratory: String,
    pub(in crate::sources) sample_kind: &'static str,
    pub(in crate::sources) lines: usize,
    pub(in crate::sources) badge: &'static str,
    pub(in crate::sources) verdict: &'static str,
    pub(in crate::sources) state: &'static str,
}

impl TestRow {
    pub(in crate::sources) fn of(test: &WaterTest) -> Result<Self, Error> {
        let verdict = test.assess()?.verdict;
        let mut laboratory = test.sheet.laboratory.clone();
        if !test.sheet.reference.is_empty() {
            laboratory = format!("{laboratory} {}", test.sheet.reference);
        }
        Ok(Self {
            id: test.id,
            sampled_on: test.sheet.sampled_on.to_string(),
            laboratory,
            sample_kind: match test.sheet.sample_kind {
                SampleKind::SingleSample => "one sample",
                SampleKind::Average => "averages",
            },
            lines: test.sheet.lines.len(),
            badge: verdict_badge(verdict),
            verdict: verdict.name(),
            state: match (&test.withdrawn, test.counts()) {
                (Some(_), _) => "withdrawn",
                (None, true) => "counts",
                (None, false) => "kept, not trusted",
            },
        })
    }
}

/// What the checks say, beside the form and on the page of a test.
struct VerdictView {
    lines: usize,
    badge: &'static str,
    words: &'static str,
    /// Lines that cannot be read.
    unread: Vec<String>,
    findings: Vec<FindingView>,
    conductivity: String,
    potable: Vec<String>,
    offers: Vec<Offer>,
    /// The tick without which it cannot be kept: whether it is set.
    keep: Option<bool>,
    keep_error: Option<String>,
}

struct FindingView {
    kind: &'static str,
    sentence: String,
}

struct Offer {
    field: String,
    kind: &'static str,
    sentence: String,
    ticked: bool,
}

impl VerdictView {
    fn of(check: &Check, typed: &Form, unread: Vec<String>) -> Self {
        let assessment = &check.assessment;
        Self {
            lines: assessment.figures().len(),
            badge: verdict_badge(assessment.verdict),
            words: assessment.verdict.name(),
            unread,
            findings: assessment
                .findings
                .iter()
                .map(|finding| FindingView {
                    kind: match finding.severity {
                        Severity::Info => "info",
                        Severity::Doubt => "doubt",
                        Severity::Contradiction => "danger",
                    },
                    sentence: finding.sentence.clone(),
                })
                .collect(),
            conductivity: assessment
                .calculated_conductivity
                .map(MicrosiemensPerCm::get)
                .map_or(String::new(), format::figure),
            potable: check.potable.iter().map(|f| f.sentence.clone()).collect(),
            offers: assessment
                .inferences
                .iter()
                .map(|inference| {
                    let field = format!("accepted.{}", inference.analyte().key());
                    Offer {
                        ticked: typed.value(&field) == inference.kind.key(),
                        field,
                        kind: inference.kind.key(),
                        sentence: inference.sentence.clone(),
                    }
                })
                .collect(),
            keep: (assessment.verdict == Verdict::DoesNotAddUp)
                .then(|| typed.ticked("keep_although_it_does_not_add_up")),
            keep_error: typed
                .problem("keep_although_it_does_not_add_up")
                .map(str::to_owned),
        }
    }
}

/// The checks of a form, whatever of it can be read.
async fn verdict(db: &Db, typed: &Form, water: WaterKind) -> Result<VerdictView, Error> {
    let body: WaterTestBody = typed.body()?;
    let (check, problems) = operations::check_as_typed(db, &body, water).await?;
    let unread = problems
        .into_iter()
        .map(|problem| {
            let mut parts = problem.field.split('.');
            let row = (parts.next() == Some("readings"))
                .then(|| parts.next())
                .flatten();
            let analyte = row
                .and_then(|row| row.parse::<usize>().ok())
                .and_then(|row| Analyte::from_key(&body.readings.get(row)?.analyte));
            match analyte {
                Some(analyte) => format!("{}: {}", capital(analyte.name()), problem.message),
                None => problem.message,
            }
        })
        .collect();
    Ok(VerdictView::of(&check, typed, unread))
}

#[derive(Template, WebTemplate)]
#[template(path = "sources/verdict.html")]
struct VerdictFragment {
    verdict: VerdictView,
}

/// The answer while somebody types.
async fn check(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<SourceId>,
    typed: Form,
) -> Result<VerdictFragment, Error> {
    let source = sources::find(&db, &framer.member, id).await?;
    Ok(VerdictFragment {
        verdict: verdict(&db, &typed, source.kind).await?,
    })
}

#[derive(Template, WebTemplate)]
#[template(path = "sources/test_form.html")]
struct FormPage {
    page: Page,
    source: Source,
    typed: Form,
    action: String,
    back: String,
    is_new: bool,
    sample_kinds: Vec<Choice>,
    methods: Vec<Choice>,
    usual: Vec<Row>,
    seldom: Vec<Row>,
    seldom_open: bool,
    verdict: VerdictView,
}

/// One line to be typed. Its place is that of its analyte among all.
struct Row {
    index: usize,
    analyte: &'static str,
    label: String,
    units: Vec<Choice>,
    methods: Vec<Choice>,
}

/// The lines most reports have; the others are folded away.
const USUAL: [Analyte; 12] = [
    Analyte::Calcium,
    Analyte::Magnesium,
    Analyte::Sodium,
    Analyte::Potassium,
    Analyte::Alkalinity,
    Analyte::Bicarbonate,
    Analyte::Sulfate,
    Analyte::Chloride,
    Analyte::Nitrate,
    Analyte::TotalHardness,
    Analyte::Ph,
    Analyte::Conductivity,
];

fn rows(typed: &Form) -> (Vec<Row>, Vec<Row>) {
    let row = |(index, analyte): (usize, Analyte)| Row {
        index,
        analyte: analyte.key(),
        label: capital(analyte.name()),
        units: Choice::list(
            analyte.units().iter().map(|unit| {
                let label = if analyte == Analyte::Ph {
                    "pH"
                } else {
                    unit.label()
                };
                (unit.key(), label)
            }),
            typed.row("readings", &index, "unit"),
        ),
        methods: Choice::list(
            METHODS.map(|(method, name)| (method.key(), name)),
            typed.row("readings", &index, "method"),
        ),
    };
    let (usual, seldom): (Vec<_>, Vec<_>) = Analyte::ALL
        .into_iter()
        .enumerate()
        .partition(|(_, analyte)| USUAL.contains(analyte));
    (
        usual.into_iter().map(row).collect(),
        seldom.into_iter().map(row).collect(),
    )
}

/// `test`: the one that is corrected; none for a new one.
async fn form(
    db: &Db,
    framer: &Framer,
    source: Source,
    test: Option<&WaterTest>,
    typed: Form,
) -> Result<FormPage, Error> {
    let title = match test {
        Some(test) => format!("Correct the test of {}", test.sheet.sampled_on),
        None => format!("Water test of {}", source.name),
    };
    let (usual, seldom) = rows(&typed);
    let is_typed = |row: &Row| !typed.row("readings", &row.index, "value").is_empty();
    Ok(FormPage {
        page: framer.page(title, "sources").await,
        action: test.map_or_else(
            || format!("/sources/{}/water-tests/new", source.id),
            |test| format!("/water-tests/{}/edit", test.id),
        ),
        back: test.map_or_else(
            || format!("/sources/{}", source.id),
            |test| format!("/water-tests/{}", test.id),
        ),
        is_new: test.is_none(),
        sample_kinds: Choice::list(
            [SampleKind::SingleSample, SampleKind::Average]
                .map(|kind| (kind.key(), sample_kind_name(kind))),
            typed.value("sample_kind"),
        ),
        methods: Choice::list(
            METHODS.map(|(method, name)| (method.key(), name)),
            typed.value("method"),
        ),
        seldom_open: seldom.iter().any(is_typed),
        usual,
        seldom,
        verdict: verdict(db, &typed, source.kind).await?,
        source,
        typed,
    })
}

async fn new(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<SourceId>,
) -> Result<FormPage, Error> {
    framer.member.may(Permission::EnterWaterTests)?;
    let source = sources::find(&db, &framer.member, id).await?;
    let typed = Form::empty().with("method", Method::Laboratory.key());
    form(&db, &framer, source, None, typed).await
}

/// Whether the form only asks for an answer.
fn only_asks(typed: &Form) -> bool {
    !typed.value("_check").is_empty()
}

async fn enter(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<SourceId>,
    typed: Form,
) -> Result<Response, Error> {
    framer.member.may(Permission::EnterWaterTests)?;
    let source = sources::find(&db, &framer.member, id).await?;
    if only_asks(&typed) {
        return Ok(form(&db, &framer, source, None, typed)
            .await?
            .into_response());
    }
    let saved = async {
        let new = typed.body::<WaterTestBody>()?.try_into()?;
        operations::enter(&db, &framer.member, id, new).await
    };
    match saved.await {
        Ok(test) => {
            Ok(Redirect::to(&format!("/water-tests/{}?done=created", test.id)).into_response())
        }
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            Ok((status, form(&db, &framer, source, None, typed).await?).into_response())
        }
    }
}

/// The form that would send a test again.
fn as_typed(test: &WaterTest) -> Form {
    let body = WaterTestBody {
        readings: Vec::new(),
        ..WaterTestBody::from(test)
    };
    let mut typed = Form::of(&body)
        .with("method", Method::Laboratory.key())
        .with("version", test.version.to_string());
    let mut usual_drop = None;
    for line in &test.sheet.lines {
        let analyte = line.reading.analyte();
        let Some(index) = Analyte::ALL.into_iter().position(|a| a == analyte) else {
            continue;
        };
        let name = |field: &str| format!("readings.{index}.{field}");
        let method = match line.method {
            Method::Laboratory => "",
            other => other.key(),
        };
        typed = typed
            .with(name("value"), line.typed.clone())
            .with(name("unit"), line.reading.unit().key())
            .with(name("method"), method);
        if let Method::DropKit { drop } = line.method {
            // The form has one field for the drop; a line with another keeps its own.
            let field = if usual_drop.is_none_or(|usual| usual == drop) {
                usual_drop = Some(drop);
                "drop_mg_per_l_as_caco3".to_owned()
            } else {
                name("drop_mg_per_l_as_caco3")
            };
            typed = typed.with(field, drop.get().to_string());
        }
    }
    typed
}

async fn edit(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<WaterTestId>,
) -> Result<FormPage, Error> {
    framer.member.may(Permission::EnterWaterTests)?;
    let test = operations::find(&db, &framer.member, id).await?;
    let source = sources::find(&db, &framer.member, test.source_id).await?;
    form(&db, &framer, source, Some(&test), as_typed(&test)).await
}

async fn correct(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<WaterTestId>,
    typed: Form,
) -> Result<Response, Error> {
    framer.member.may(Permission::EnterWaterTests)?;
    let before = operations::find(&db, &framer.member, id).await?;
    let source = sources::find(&db, &framer.member, before.source_id).await?;
    if only_asks(&typed) {
        let page = form(&db, &framer, source, Some(&before), typed).await?;
        return Ok(page.into_response());
    }
    let saved = async {
        let new = typed.body::<WaterTestBody>()?.try_into()?;
        operations::correct(&db, &framer.member, id, new, typed.version()).await
    };
    match saved.await {
        Ok(_) => Ok(Redirect::to(&format!("/water-tests/{id}?done=saved")).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let page = form(&db, &framer, source, Some(&before), typed).await?;
            Ok((status, page).into_response())
        }
    }
}

#[derive(Template, WebTemplate)]
#[template(path = "sources/test.html")]
struct ShowPage {
    page: Page,
    typed: Form,
    test: WaterTest,
    source: Source,
    sample_kind: &'static str,
    lines: Vec<LineView>,
    accepted: Vec<String>,
    verdict: VerdictView,
    trusted: bool,
    not_trusted_because: String,
    trusted_because: String,
    withdrawn: Option<(String, String)>,
    entries: Vec<Line>,
    may_change: bool,
}

struct LineView {
    label: String,
    printed: String,
    method: String,
    value: String,
    doubt: String,
    unit: &'static str,
}

fn line_view(line: &TestLine, check: &Check) -> LineView {
    let analyte = line.reading.analyte();
    let figure = check.assessment.figure(analyte);
    let canonical = line.reading.canonical();
    LineView {
        label: capital(analyte.name()),
        printed: format!("{} {}", line.typed, line.reading.unit().label()),
        method: match line.method {
            Method::DropKit { drop } => {
                format!(
                    "{}, {} mg/L as CaCO₃ a drop",
                    method_name(line.method),
                    drop.get()
                )
            }
            method => method_name(method).to_owned(),
        },
        value: format!(
            "{}{}",
            canonical.qualifier().sign(),
            bare(analyte, canonical.get())
        ),
        doubt: match canonical.qualifier() {
            chemistry::report::Qualifier::Measured => {
                figure.map_or(String::new(), |figure| doubt(analyte, figure.sd()))
            }
            chemistry::report::Qualifier::Below => String::new(),
        },
        unit: analyte.canonical_unit().label(),
    }
}

async fn page_of(
    db: &Db,
    framer: &Framer,
    id: WaterTestId,
    typed: Form,
) -> Result<ShowPage, Error> {
    let by = &framer.member;
    let test = operations::find(db, by, id).await?;
    let source = sources::find(db, by, test.source_id).await?;
    let check = operations::check(operations::limits(db).await?, &test.sheet, test.water_kind)?;
    let title = format!("{}, {}", source.name, test.sheet.sampled_on);
    let page = framer.page(title, "sources").await;
    let entries = record::operations::of_subject(db, by, "water test", &id.to_string(), 20).await?;
    let zone = page.settings.time_zone.clone();
    Ok(ShowPage {
        sample_kind: sample_kind_name(test.sheet.sample_kind),
        lines: test
            .sheet
            .lines
            .iter()
            .map(|line| line_view(line, &check))
            .collect(),
        accepted: test
            .sheet
            .inferences(&check.assessment)
            .into_iter()
            .map(|inference| inference.sentence)
            .collect(),
        verdict: VerdictView::of(&check, &Form::empty(), Vec::new()),
        trusted: test.trust.is_trusted(),
        not_trusted_because: match &test.trust {
            Trust::Excluded(reason) => reason.clone(),
            Trust::DoesNotAddUp => "The figures cannot all be right.".into(),
            Trust::Trusted | Trust::TrustedDespite(_) => String::new(),
        },
        trusted_because: match &test.trust {
            Trust::TrustedDespite(reason) => reason.clone(),
            _ => String::new(),
        },
        withdrawn: test
            .withdrawn
            .as_ref()
            .map(|w| (format::moment(w.at, &zone), w.reason.clone())),
        entries: entries.iter().map(|entry| Line::of(entry, &zone)).collect(),
        may_change: page.can(Permission::EnterWaterTests),
        page,
        typed,
        source,
        test,
    })
}

async fn show(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<WaterTestId>,
) -> Result<ShowPage, Error> {
    page_of(&db, &framer, id, Form::empty()).await
}

/// Back to the test, or its page again with the problem beside the field of this name.
async fn decided(
    db: &Db,
    framer: &Framer,
    id: WaterTestId,
    done: Result<WaterTest, Error>,
    typed: Form,
    (field, key): (&str, &str),
) -> Result<Response, Error> {
    let error = match done {
        Ok(_) => {
            return Ok(Redirect::to(&format!("/water-tests/{id}?done={key}")).into_response());
        }
        Err(Error::Invalid(mut problems)) => {
            for problem in &mut problems {
                field.clone_into(&mut problem.field);
            }
            Error::Invalid(problems)
        }
        Err(other) => other,
    };
    let (status, typed) = typed.refused(error)?;
    Ok((status, page_of(db, framer, id, typed).await?).into_response())
}

async fn withdraw(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<WaterTestId>,
    typed: Form,
) -> Result<Response, Error> {
    let field = ("withdrawal_reason", "withdrawn");
    let done = operations::withdraw(&db, &framer.member, id, typed.value(field.0)).await;
    decided(&db, &framer, id, done, typed, field).await
}

async fn restore(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<WaterTestId>,
    typed: Form,
) -> Result<Response, Error> {
    let done = operations::restore(&db, &framer.member, id).await;
    decided(&db, &framer, id, done, typed, ("", "saved")).await
}

async fn exclude(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<WaterTestId>,
    typed: Form,
) -> Result<Response, Error> {
    let field = ("trust_reason", "saved");
    let done = operations::exclude(&db, &framer.member, id, typed.value(field.0)).await;
    decided(&db, &framer, id, done, typed, field).await
}

async fn trust(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<WaterTestId>,
    typed: Form,
) -> Result<Response, Error> {
    let field = ("trust_reason", "saved");
    let done = operations::trust(&db, &framer.member, id, typed.value(field.0)).await;
    decided(&db, &framer, id, done, typed, field).await
}
