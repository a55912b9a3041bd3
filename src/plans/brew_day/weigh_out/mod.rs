//! The weigh-out on the tablet: one vessel, one line at a time.
//!
//! The page carries every line that is not in yet, each with a form of its own; one is
//! shown, and a script may show another without asking the server. What a line looks like
//! is in [`lines`].

use askama::Template;
use askama_web::WebTemplate;
use axum::Router;
use axum::extract::State;
use axum::http::StatusCode;
use axum::response::{IntoResponse, Redirect, Response};
use axum::routing::{get, post};

use super::read_again;
use crate::brewery;
use crate::error::Error;
use crate::id::{DoseId, PlanId};
use crate::input::ReasonBody;
use crate::people::{self, Permission, Place};
use crate::plans::asked::{CorrectionBody, WeighedBody};
use crate::plans::pages::check_address;
use crate::plans::weigh_out::{Effect, NewCorrection, NewWeighed};
use crate::plans::{Dose, Plan, State as PlanState, Witness};
use crate::plans::{operations, readiness, weigh_out, words};
use crate::web::App;
use crate::web::extract::At;
use crate::web::form::{Choice, Form};
use crate::web::format;
use crate::web::layout::{Framer, Page};
use crate::web::queued::{self, Made};
use crate::web::units::typed_in_si;

mod lines;

use lines::{Bench, InLine, Line, Part, Step};

/// The pages.
pub(super) fn routes() -> Router<App> {
    Router::new()
        .route(
            "/plans/{id}/weigh-out",
            get(weigh_out_page).layer(queued::may_be_kept()),
        )
        .route("/plans/{id}/doses/{dose_id}", post(weigh))
        .route("/plans/{id}/doses/{dose_id}/correction", post(correct))
        .route("/plans/{id}/doses/{dose_id}/taking-back", post(take_back))
}

/// One stone of the way through the weigh-out.
struct StepMark {
    words: String,
    state: &'static str,
}

#[derive(Template, WebTemplate)]
#[template(path = "plans/weigh_out.html")]
struct WeighOutPage {
    page: Page,
    plan: Plan,
    typed: Form,
    lines: Vec<Line>,
    done: Vec<InLine>,
    parts: Vec<Part>,
    steps: Vec<StepMark>,
    steps_words: String,
    waters: Vec<String>,
    cautions: Vec<(String, &'static str)>,
    /// When the mash is to be read again: the moment, and the brewery's clock.
    again: Option<(String, String)>,
    approved: String,
    /// Who can stand by, where a line needs that.
    second_people: Vec<Choice>,
    /// What they prove it by.
    secret: &'static str,
    open: bool,
    may_brew: bool,
}

impl WeighOutPage {
    /// Whether what was refused belongs to no form that is still shown.
    fn refused(&self) -> bool {
        let asked_for = self.typed.value("dose");
        let shown = self
            .lines
            .iter()
            .any(|line| line.id.to_string() == asked_for);
        !(self.typed.problems.is_empty() || shown || self.mending_any())
    }

    fn mending_any(&self) -> bool {
        let mending = |line: &InLine| {
            ["correcting", "slip"]
                .iter()
                .any(|it| self.mending(it, line))
        };
        self.done.iter().any(mending)
    }

    /// Whether what is in is unfolded.
    fn opened(&self) -> bool {
        self.mending_any() || self.refused() || self.lines.is_empty()
    }

    /// Whether this form below a line that is in was refused: `correcting` or `slip`.
    fn mending(&self, what: &str, line: &InLine) -> bool {
        self.typed.value(what) == line.id.to_string()
    }
}

/// Who asks, and from where.
struct Asking<'a> {
    app: &'a App,
    framer: &'a Framer,
    place: &'a Place,
}

impl Asking<'_> {
    async fn page(
        &self,
        id: PlanId,
        typed: Form,
        effect: Option<Effect>,
    ) -> Result<WeighOutPage, Error> {
        let (db, by) = (&self.app.db, &self.framer.member);
        let plan = operations::find(db, by, id).await?;
        let title = format!("Weigh out {} {}", plan.batch, plan.beer_name);
        let page = self.framer.page(title, "brew-day").await;
        let bench = Bench::of(db, by, &plan, &page.settings, &typed).await?;
        let lines = bench.open_lines(effect.as_ref());
        let done = bench.in_lines();
        let now = lines.iter().find(|line| line.shown);
        let parts = bench.parts(now.map(|line| line.id));
        let steps = stones(&parts);
        let steps_words = now.map_or_else(
            || format!("All {} lines are in", plan.doses.len()),
            |line| line.step_words.clone(),
        );
        let watched = lines.iter().any(|line| line.second_person)
            || done.iter().any(|line| line.second_person);
        let people = if watched {
            people::operations::second_people(db, by, self.place).await?
        } else {
            Vec::new()
        };
        let people = people
            .into_iter()
            .map(|person| (person.id.to_string(), person.name));
        let again = readiness::of_plan(db, by, id)
            .await?
            .and_then(|open| read_again(&open, &page.settings.time_zone));
        let approved = plan.approved.as_ref().map_or_else(String::new, |deed| {
            let at = format::moment(deed.at, &page.settings.time_zone);
            format!("{}, {at}", deed.by)
        });
        Ok(WeighOutPage {
            waters: bench.waters(),
            cautions: bench.cautions(),
            again,
            second_people: Choice::list(people, typed.value("second_person_id")),
            secret: if self.place.tablet.is_some() {
                "PIN"
            } else {
                "password"
            },
            open: matches!(plan.state, PlanState::Approved | PlanState::Dosed),
            may_brew: page.can(Permission::BrewBatches),
            steps,
            lines,
            done,
            parts,
            steps_words,
            approved,
            page,
            plan,
            typed,
        })
    }

    /// The second person a form names, who proves it here and now.
    async fn witness(&self, typed: &Form) -> Result<Option<Witness>, Error> {
        let who = typed.value("second_person_id").trim();
        if who.is_empty() {
            return Ok(None);
        }
        let who = who
            .parse()
            .map_err(|_| Error::field("second_person_id", "Choose who stands by."))?;
        let secret = typed.value("second_person_secret");
        let (gate, by) = (self.app.gate(self.place), &self.framer.member);
        let member = people::operations::vouch(&self.app.db, by, gate, who, secret).await;
        let member = member.map_err(|error| {
            error.renamed(|field| {
                let part = if field == "who" { "id" } else { field };
                format!("second_person_{part}")
            })
        })?;
        Ok(Some(Witness {
            id: member.id,
            name: member.name,
        }))
    }

    /// A line of a plan, and what was typed about it with its amount in SI.
    async fn in_si(
        &self,
        id: PlanId,
        dose: DoseId,
        typed: &Form,
    ) -> Result<(Plan, Dose, Form), Error> {
        let (db, by) = (&self.app.db, &self.framer.member);
        by.may(Permission::BrewBatches)?;
        let plan = operations::find(db, by, id).await?;
        let line = plan.doses.iter().find(|line| line.id == dose);
        let line = line.ok_or(Error::NotFound("dose of this plan"))?.clone();
        let units = brewery::operations::settings(db).await?.units;
        let measure = words::dose_measure(&plan.inputs, line.material);
        let si = typed_in_si(typed, units, &[("actual".to_owned(), measure)]);
        Ok((plan, line, si))
    }

    /// The page again, with a form below a line that is in as it was typed.
    async fn below(
        &self,
        id: PlanId,
        form: &str,
        dose: DoseId,
        (status, typed): (StatusCode, Form),
    ) -> Result<Response, Error> {
        let typed = typed.with(form, dose.to_string());
        Ok((status, self.page(id, typed, None).await?).into_response())
    }
}

/// One stone for each line.
fn stones(parts: &[Part]) -> Vec<StepMark> {
    let stones = |part: &Part| -> Vec<StepMark> {
        let stone = |step: &Step| StepMark {
            words: format!("{} into the {}", step.words, part.vessel),
            state: step.state,
        };
        part.steps.iter().map(stone).collect()
    };
    parts.iter().flat_map(stones).collect()
}

async fn weigh_out_page(
    State(app): State<App>,
    framer: Framer,
    place: Place,
    At(id): At<PlanId>,
    asked: Form,
) -> Result<WeighOutPage, Error> {
    let asking = Asking {
        app: &app,
        framer: &framer,
        place: &place,
    };
    let asked = Form::empty().with("dose", asked.value("dose"));
    asking.page(id, asked, None).await
}

async fn weigh(
    State(app): State<App>,
    framer: Framer,
    place: Place,
    Made(at): Made,
    At((id, dose)): At<(PlanId, DoseId)>,
    typed: Form,
) -> Result<Response, Error> {
    let asking = Asking {
        app: &app,
        framer: &framer,
        place: &place,
    };
    let (db, by) = (&app.db, &framer.member);
    let (plan, line, si) = asking.in_si(id, dose, &typed).await?;
    let mut said = None;
    let weighed = async {
        let mut new: NewWeighed = si.body::<WeighedBody>()?.try_into()?;
        said = Some(new.clone());
        new.witness = asking.witness(&typed).await?;
        new.at = at;
        weigh_out::weigh(db, by, id, dose, new).await
    };
    let error = match weighed.await {
        Ok(plan) => return Ok(Redirect::to(&after(&plan, dose)).into_response()),
        Err(error) => error,
    };
    let asks_why = matches!(&error, Error::Invalid(problems)
        if problems.iter().any(|problem| problem.field == "reason"));
    let (status, mut typed) = typed.refused(error)?;
    let effect = match said.filter(|_| asks_why) {
        Some(new) => Some(weigh_out::effect(db, by, &plan, &line, &new).await?),
        None => None,
    };
    typed = typed.with("dose", dose.to_string());
    if typed.ticked("as_planned") {
        let units = brewery::operations::settings(db).await?.units;
        let planned = words::dose(units, &plan.inputs, line.material, line.planned.get());
        typed = typed.with("actual", planned.0);
    }
    Ok((status, asking.page(id, typed, effect).await?).into_response())
}

/// Where a line that is in leads, and what is said there of its lot.
fn after(plan: &Plan, dose: DoseId) -> String {
    let line = plan.doses.iter().find(|line| line.id == dose);
    let lot = line.and_then(|line| Some(&line.weighed.as_ref()?.lot));
    let unknown = lot.is_some_and(|lot| lot.id.is_none() && !lot.code.is_empty());
    let done = if unknown { "dosed_of_unknown" } else { "dosed" };
    // After a first step the wait begins, and the page of the reading counts it.
    let to = line.and_then(|line| line.mash_check).map_or_else(
        || format!("/plans/{}/weigh-out", plan.id),
        |check| check_address(plan.id, check),
    );
    format!("{to}?done={done}")
}

async fn correct(
    State(app): State<App>,
    framer: Framer,
    place: Place,
    At((id, dose)): At<(PlanId, DoseId)>,
    typed: Form,
) -> Result<Response, Error> {
    let asking = Asking {
        app: &app,
        framer: &framer,
        place: &place,
    };
    let (_, _, si) = asking.in_si(id, dose, &typed).await?;
    let corrected = async {
        let mut new: NewCorrection = si.body::<CorrectionBody>()?.try_into()?;
        new.weighed.witness = asking.witness(&typed).await?;
        weigh_out::correct(&app.db, &framer.member, id, dose, new).await
    };
    match corrected.await {
        Ok(_) => {
            let to = format!("/plans/{id}/weigh-out?done=dose_corrected");
            Ok(Redirect::to(&to).into_response())
        }
        Err(error) => {
            let refused = typed.refused(error)?;
            asking.below(id, "correcting", dose, refused).await
        }
    }
}

async fn take_back(
    State(app): State<App>,
    framer: Framer,
    place: Place,
    At((id, dose)): At<(PlanId, DoseId)>,
    typed: Form,
) -> Result<Response, Error> {
    let asking = Asking {
        app: &app,
        framer: &framer,
        place: &place,
    };
    let taken = async {
        let reason = ReasonBody {
            reason: typed.value("reason").to_owned(),
        };
        weigh_out::take_back(&app.db, &framer.member, id, dose, reason.given()?).await
    };
    match taken.await {
        Ok(_) => {
            let to = format!("/plans/{id}/weigh-out?done=taken_back");
            Ok(Redirect::to(&to).into_response())
        }
        Err(error) => {
            let refused = typed.refused(error)?;
            asking.below(id, "slip", dose, refused).await
        }
    }
}
