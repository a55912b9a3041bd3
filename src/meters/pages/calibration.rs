//! Calibrating a meter on the tablet, and one calibration to read.

use askama::Template;
use askama_web::WebTemplate;
use axum::extract::State;
use axum::response::{IntoResponse, Redirect, Response};
use chemistry::electrode::{Buffer, POINTS};

use crate::brewery::{self, Units};
use crate::db::Db;
use crate::error::Error;
use crate::id::{CalibrationId, MeterId, UtcTime};
use crate::meters::entered::NewCalibrationBody;
use crate::meters::words::{self, BufferShown};
use crate::meters::{Calibration, Meter, Method, operations};
use crate::people::Permission;
use crate::web::extract::At;
use crate::web::form::{Choice, Form};
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::units::{Measure, typed_in_si};

/// Buffers that stand open on the form; the others are folded away.
const OFFERED: usize = 2;

#[derive(Template, WebTemplate)]
#[template(path = "meters/calibrate.html")]
pub(super) struct CalibratePage {
    page: Page,
    typed: Form,
    meter: Meter,
    ways: Vec<WayShown>,
    method: &'static str,
    lines: Vec<Line>,
    more: Vec<Line>,
    more_open: bool,
    slope_units: Vec<Choice>,
    temperature_unit: &'static str,
}

/// One way to calibrate, as a link.
struct WayShown {
    key: &'static str,
    name: &'static str,
    chosen: bool,
}

/// One buffer of the form.
struct Line {
    index: usize,
    number: usize,
    buffers: Vec<Choice>,
    /// What is known of the bottle, for the fold it is changed in.
    bottle: String,
    /// Whether something in the fold is wrong.
    open: bool,
}

impl Line {
    fn of(typed: &Form, index: usize) -> Self {
        let value = |name: &str| typed.row("buffers", &index, name).to_owned();
        let known = [("lot", "lot "), ("use_by", "use by "), ("buffer_ph", "pH ")];
        let bottle: Vec<String> = known
            .into_iter()
            .filter(|(name, _)| !value(name).is_empty())
            .map(|(name, words)| format!("{words}{}", value(name)))
            .collect();
        let folded = ["lot", "use_by", "buffer_ph", "temperature_c"];
        let wrong = |name: &&str| typed.row_problem("buffers", &index, name).is_some();
        let pairs = Buffer::ALL
            .map(|buffer| (buffer.key(), buffer.name()))
            .into_iter()
            .chain([("other", "Another one")]);
        Self {
            index,
            number: index + 1,
            buffers: Choice::list(pairs, &value("buffer")),
            bottle: if bottle.is_empty() {
                "lot and date".into()
            } else {
                bottle.join(", ")
            },
            open: folded.iter().any(wrong) || value("buffer") == "other",
        }
    }

    /// The buffers there are.
    fn choices(&self) -> &[Choice] {
        &self.buffers
    }

    /// The name of one of its fields.
    fn name(&self, field: &str) -> String {
        format!("buffers.{}.{field}", self.index)
    }
}

async fn form(framer: &Framer, meter: Meter, typed: Form) -> CalibratePage {
    let method = Method::from_key(typed.value("method")).unwrap_or(Method::Millivolts);
    let title = format!("Calibrate {}: {}", meter.name, method.name());
    let page = framer.page(title, "meters").await;
    let units = page.settings.units;
    let last = POINTS.end() - 1;
    let more: Vec<Line> = (OFFERED..=last)
        .map(|index| Line::of(&typed, index))
        .collect();
    CalibratePage {
        ways: Method::ALL
            .map(|way| WayShown {
                key: way.key(),
                name: way.name(),
                chosen: way == method,
            })
            .into(),
        method: method.key(),
        lines: (0..OFFERED).map(|index| Line::of(&typed, index)).collect(),
        more_open: (OFFERED..=last).any(|index| !typed.row("buffers", &index, "buffer").is_empty()),
        more,
        slope_units: Choice::list(
            [("percent", "%"), ("mv_per_ph", "mV per pH")],
            typed.value("slope_unit"),
        ),
        temperature_unit: units.label(Measure::Temperature),
        page,
        typed,
        meter,
    }
}

/// What the form begins with: the buffers of last time with their bottles, nothing that
/// has to be read anew.
fn offered(last: Option<&Calibration>, method: Method) -> Form {
    let mut form = Form::empty()
        .with("method", method.key())
        .with("slope_unit", "percent");
    let Some(last) = last else {
        return form
            .with("buffers.0.buffer", Buffer::Technical7.key())
            .with("buffers.1.buffer", Buffer::Technical4.key());
    };
    for (index, read) in last.buffers.iter().enumerate() {
        let name = |field: &str| format!("buffers.{index}.{field}");
        form = form
            .with(name("buffer"), read.buffer.map_or("other", Buffer::key))
            .with(name("lot"), read.lot.clone().unwrap_or_default())
            .with(
                name("use_by"),
                read.use_by.map(|date| date.to_string()).unwrap_or_default(),
            );
    }
    form
}

pub(super) async fn new(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<MeterId>,
    asked: Form,
) -> Result<CalibratePage, Error> {
    framer.member.may(Permission::BrewBatches)?;
    let meter = operations::find(&db, &framer.member, id).await?;
    let last = operations::last_calibration(&db, &framer.member, id, UtcTime::now()).await?;
    let method = Method::from_key(asked.value("method"))
        .or(last.as_ref().map(|last| last.method))
        .unwrap_or(Method::Millivolts);
    let typed = offered(last.as_ref(), method);
    Ok(form(&framer, meter, typed).await)
}

/// The form with its temperatures in °C.
fn in_si(typed: &Form, units: Units) -> Form {
    let mut fields = vec![("temperature_c".to_owned(), Measure::Temperature)];
    let lines = (0..typed.rows("buffers")).map(|index| {
        (
            format!("buffers.{index}.temperature_c"),
            Measure::Temperature,
        )
    });
    fields.extend(lines);
    typed_in_si(typed, units, &fields)
}

pub(super) async fn calibrate(
    State(db): State<Db>,
    framer: Framer,
    At(id): At<MeterId>,
    typed: Form,
) -> Result<Response, Error> {
    let entered = async {
        framer.member.may(Permission::BrewBatches)?;
        let units = brewery::operations::settings(&db).await?.units;
        let body: NewCalibrationBody = in_si(&typed, units).body()?;
        operations::calibrate(&db, &framer.member, id, body).await
    };
    match entered.await {
        Ok(_) => Ok(Redirect::to(&format!("/meters/{id}?done=calibrated")).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let meter = operations::find(&db, &framer.member, id).await?;
            Ok((status, form(&framer, meter, typed).await).into_response())
        }
    }
}

#[derive(Template, WebTemplate)]
#[template(path = "meters/calibration.html")]
pub(super) struct ShowPage {
    page: Page,
    typed: Form,
    meter: Meter,
    calibration: Calibration,
    badge: &'static str,
    verdict: &'static str,
    at: String,
    entered_at: String,
    withdrawn_at: String,
    method: &'static str,
    reading: &'static str,
    slope: String,
    offset: String,
    residual: String,
    sd: String,
    buffers: Vec<BufferShown>,
    afterwards: bool,
    doubts: Vec<String>,
    before: String,
    may_calibrate: bool,
}

async fn show_page(framer: &Framer, meter: Meter, found: Calibration, typed: Form) -> ShowPage {
    let title = format!("Calibration of {}", meter.name);
    let page = framer.page(title, "meters").await;
    let settings = &page.settings;
    let moment = |at: UtcTime| format::moment(at, &settings.time_zone);
    let verdict = found.verdict();
    ShowPage {
        badge: verdict.badge(),
        verdict: verdict.name(),
        at: moment(found.calibrated_at),
        entered_at: moment(found.entered_at),
        withdrawn_at: found
            .withdrawn
            .as_ref()
            .map_or(String::new(), |(at, _)| moment(*at)),
        method: found.method.name(),
        reading: match found.method {
            Method::Millivolts => "Read",
            Method::Ph => "Shown before",
            Method::Display => "",
        },
        slope: words::slope(found.electrode),
        offset: words::offset(found.electrode),
        residual: found
            .residual
            .map_or(String::new(), |residual| format::doubt(residual.get())),
        sd: format::ph(found.doubt(&meter, found.calibrated_at).sd.get()),
        buffers: found
            .buffers
            .iter()
            .map(|read| BufferShown::of(read, found.method, settings.units))
            .collect(),
        afterwards: found.buffers.iter().any(|read| read.after.is_some()),
        doubts: words::doubts(&found, settings),
        before: found.before.map_or(String::new(), |before| {
            format!(
                "{} % and {} mV",
                words::slope(before),
                words::offset(before)
            )
        }),
        may_calibrate: page.can(Permission::BrewBatches),
        calibration: found,
        meter,
        typed,
        page,
    }
}

pub(super) async fn show(
    State(db): State<Db>,
    framer: Framer,
    At((id, calibration_id)): At<(MeterId, CalibrationId)>,
) -> Result<ShowPage, Error> {
    let (meter, found) =
        operations::find_calibration(&db, &framer.member, id, calibration_id).await?;
    Ok(show_page(&framer, meter, found, Form::empty()).await)
}

pub(super) async fn withdraw(
    State(db): State<Db>,
    framer: Framer,
    At((id, calibration_id)): At<(MeterId, CalibrationId)>,
    typed: Form,
) -> Result<Response, Error> {
    let reason = typed.value("reason");
    match operations::withdraw(&db, &framer.member, id, calibration_id, reason).await {
        Ok(_) => Ok(Redirect::to(&format!("/meters/{id}?done=withdrawn")).into_response()),
        Err(error) => {
            let (status, typed) = typed.refused(error)?;
            let (meter, found) =
                operations::find_calibration(&db, &framer.member, id, calibration_id).await?;
            Ok((status, show_page(&framer, meter, found, typed).await).into_response())
        }
    }
}
