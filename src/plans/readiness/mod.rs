//! What is on: the open batches of today and the days around it, what each lacks before it
//! can start, and the one thing to do next.
//!
//! [`brew_day`] answers for every open batch, [`of_plan`] for one. Nothing here stands in
//! anybody's way by itself: the operations refuse what must not be done, this says it
//! beforehand, with everything else one would rather know before the mash tun is full.

use std::collections::HashMap;

use chemistry::material::{DoseUnit, Vessel};
use chemistry::quantity::DoseAmount;
use chemistry::report::Analyte;
use jiff::civil::Date;

use super::{Prediction, State};
use crate::brewery::{self, Settings, Units};
use crate::db::Db;
use crate::error::Error;
use crate::id::{BeerId, DoseId, MaterialId, MeterId, PlanId, SourceId, UtcTime};
use crate::meters;
use crate::people::{Member, Permission};
use crate::shelf::stock::{self, Levels, Stock};
use crate::shelf::{self, Material, MaterialLot};
use crate::sources::{self, DutyState, Source, TestDuty};
use crate::web::format;
use crate::web::units::Measure;

pub mod api;
mod next;
mod store;

pub use next::Next;

/// Days shown beyond today: with today they make a week.
const AHEAD: i64 = 6;
/// Late batches shown: more than that are drafts nobody withdrew.
const MOST_LATE: usize = 8;

/// The open batches around a day.
#[derive(Clone, Debug, PartialEq)]
pub struct BrewDay {
    /// The day, in the brewery's time zone.
    pub on: Date,
    /// The last day that is shown.
    pub until: Date,
    /// Batches of the day itself, by number; then late ones, the latest first; then those of
    /// the days after, in order.
    pub batches: Vec<Batch>,
    /// Late batches there is no room for.
    pub more_late: usize,
    /// Open batches after the days that are shown.
    pub later: usize,
    /// When each source these batches draw on was tested and should be again.
    pub waters: Vec<Freshness>,
}

/// When a batch is brewed, seen from today.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum When {
    /// Today.
    Today,
    /// On an earlier day, and not closed since.
    Late,
    /// On one of the days that follow.
    ThisWeek,
    /// After that.
    Later,
}

impl When {
    /// As sent.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Today => "today",
            Self::Late => "late",
            Self::ThisWeek => "this_week",
            Self::Later => "later",
        }
    }

    fn of(brewed_on: Date, today: Date, until: Date) -> Self {
        if brewed_on < today {
            Self::Late
        } else if brewed_on == today {
            Self::Today
        } else if brewed_on <= until {
            Self::ThisWeek
        } else {
            Self::Later
        }
    }
}

/// An open batch.
#[derive(Clone, Debug, PartialEq)]
pub struct Batch {
    /// Its plan.
    pub id: PlanId,
    /// Its number.
    pub batch: String,
    /// Which revision of its plan.
    pub revision: i64,
    /// What is brewed.
    pub beer_id: BeerId,
    /// Its name.
    pub beer_name: String,
    /// The day it is brewed.
    pub brewed_on: Date,
    /// That day, seen from today.
    pub when: When,
    /// Where its plan stands.
    pub state: State,
    /// The prediction of its approval.
    pub prediction: Option<Prediction>,
    /// What goes in, first steps included.
    pub lines: usize,
    /// How much of that is in.
    pub lines_in: usize,
    /// The newest reading of its mash.
    pub reading: Option<Reading>,
    /// What is missing before it can start, or is better seen to.
    pub missing: Vec<Missing>,
    /// What to do next.
    pub next: Next,
}

/// The newest reading of a mash.
#[derive(Clone, Debug, PartialEq)]
pub struct Reading {
    /// Cooled basis.
    pub ph: f64,
    /// Its standard deviation.
    pub sd: f64,
    /// When.
    pub at: UtcTime,
    /// `inside`, `cannot_be_told`, `below` or `above`.
    pub verdict: String,
    /// What was advised.
    advice: String,
    /// Minutes to wait after the first step it advised.
    reread_after_minutes: Option<f64>,
    /// That first step as a dose: which, and when it went in.
    step: Option<(DoseId, Option<UtcTime>)>,
}

/// Something that is missing before a batch can start, or is better seen to.
#[derive(Clone, Debug, PartialEq)]
pub enum Missing {
    /// Nobody has approved the plan.
    Approval,
    /// Another revision is being drafted; until it is decided nothing is weighed out.
    Revision {
        /// That revision.
        id: PlanId,
        /// Its number.
        revision: i64,
    },
    /// A source it draws on has no test that stands.
    Test {
        /// Which source.
        source: SourceId,
        /// Its name.
        name: String,
    },
    /// A source it draws on should have been tested again by the day it is brewed.
    FreshTest {
        /// Which source.
        source: SourceId,
        /// Its name.
        name: String,
        /// The day of its newest sample.
        last: Date,
        /// The day the next was due.
        due: Date,
    },
    /// A source was tested after the plan had read its water.
    NewerTest {
        /// Which source.
        source: SourceId,
        /// Its name.
        name: String,
        /// The day of that sample.
        sampled_on: Date,
    },
    /// Figures of a source are assumed.
    Assumed {
        /// Which source.
        source: SourceId,
        /// Its name.
        name: String,
        /// What was assumed, in sentences.
        sentences: Vec<String>,
    },
    /// The lot in use of something still to be weighed out is past its day.
    FreshLot {
        /// Which material.
        material: MaterialId,
        /// Its name.
        name: String,
        /// The code of the lot.
        code: String,
        /// The last day its maker vouches for it.
        use_by: Date,
    },
    /// There is less of something still to be weighed out than it takes, after what the batches
    /// before it take.
    Material {
        /// Which material.
        material: MaterialId,
        /// Its name.
        name: String,
        /// What it is measured out in.
        unit: DoseUnit,
        /// What is to be weighed out, g or mL.
        needed: DoseAmount,
        /// What is left for it, g or mL.
        left: DoseAmount,
    },
    /// No pH meter can be acted on: none was calibrated in the day before now and is fit for use.
    Meter {
        /// Meters in use.
        listed: usize,
        /// Which, where there is only one.
        only: Option<MeterId>,
    },
}

impl Missing {
    /// As sent.
    pub const fn key(&self) -> &'static str {
        match self {
            Self::Approval => "approval",
            Self::Revision { .. } => "revision",
            Self::Test { .. } => "test",
            Self::FreshTest { .. } => "fresh_test",
            Self::NewerTest { .. } => "newer_test",
            Self::Assumed { .. } => "assumed",
            Self::FreshLot { .. } => "fresh_lot",
            Self::Material { .. } => "material",
            Self::Meter { .. } => "meter",
        }
    }

    /// Whether nothing can be weighed out before.
    pub const fn stops(&self) -> bool {
        matches!(self, Self::Approval | Self::Revision { .. })
    }

    /// What is missing, in a sentence.
    pub fn words(&self, units: Units) -> String {
        match self {
            Self::Approval => "Not approved yet.".into(),
            Self::Revision { revision, .. } => {
                format!(
                    "Revision {revision} is being drafted: nothing is weighed out until it is approved or withdrawn."
                )
            }
            Self::Test { name, .. } => format!("{name} has no water test that stands."),
            Self::FreshTest {
                name, last, due, ..
            } => {
                format!("The water of {name} is of {last}; a new test was due {due}.")
            }
            Self::NewerTest {
                name, sampled_on, ..
            } => {
                format!("{name} was tested on {sampled_on}, after this plan read its water.")
            }
            Self::Assumed {
                name, sentences, ..
            } => match sentences.as_slice() {
                [only] => format!("{name}: {only}"),
                several => format!("{name}: {} figures are assumed.", several.len()),
            },
            Self::FreshLot {
                name, code, use_by, ..
            } => {
                format!("{name}, lot {code}, was good until {use_by}.")
            }
            Self::Material { name, unit, needed, left, .. } => {
                let measure = match unit {
                    DoseUnit::Grams => Measure::DoseMass,
                    DoseUnit::Millilitres => Measure::DoseVolume,
                };
                format!(
                    "{name} is short: it takes {}, and {} are left for it.",
                    units.show(measure, needed.get()),
                    units.show(measure, left.get())
                )
            }
            Self::Meter { listed: 0, .. } => {
                "No pH meter is listed: a reading is kept, but no dose is advised on it.".into()
            }
            Self::Meter { .. } => {
                "No pH meter fit for use was calibrated within 24 hours: no dose is advised on a reading."
                    .into()
            }
        }
    }
}

/// When a source was tested and should be again.
#[derive(Clone, Debug, PartialEq)]
pub struct Freshness {
    /// Which source.
    pub source: SourceId,
    /// Its name.
    pub name: String,
    /// How its testing stands today.
    pub duty: TestDuty,
}

/// The open batches of today and the days around it.
pub async fn brew_day(db: &Db, by: &Member) -> Result<BrewDay, Error> {
    by.may(Permission::Read)?;
    let settings = brewery::operations::settings(db).await?;
    let today = format::today(&settings.time_zone);
    let until = today.saturating_add(jiff::Span::new().days(AHEAD));
    let mut snapshot = db.snapshot().await?;
    let days = store::open(&mut snapshot).await?;
    let shown = |wanted: When| {
        let of_then = days
            .iter()
            .filter(move |(_, day)| When::of(*day, today, until) == wanted);
        of_then.map(|(id, _)| *id)
    };
    let late: Vec<PlanId> = shown(When::Late).collect();
    let latest_late = late.iter().rev().take(MOST_LATE).copied();
    let ids: Vec<PlanId> = shown(When::Today)
        .chain(latest_late)
        .chain(shown(When::ThisWeek))
        .collect();
    let open = store::plans(&mut snapshot, &ids).await?;
    snapshot.commit().await?;
    let about = About::read(db, by, settings, today).await?;
    let mut waters: Vec<Freshness> = Vec::new();
    for used in open.iter().flat_map(|plan| &plan.sources) {
        if waters.iter().all(|water| water.source != used.id) {
            waters.extend(about.freshness(used.id));
        }
    }
    waters.sort_by(|a, b| a.name.cmp(&b.name));
    Ok(BrewDay {
        on: today,
        until,
        batches: about.batches(open, until),
        more_late: late.len().saturating_sub(MOST_LATE),
        later: shown(When::Later).count(),
        waters,
    })
}

/// One batch; `None` once its plan is closed or withdrawn. What it takes from the shelf is
/// held against all that is there: which batch comes before it is for the brew day to say.
pub async fn of_plan(db: &Db, by: &Member, id: PlanId) -> Result<Option<Batch>, Error> {
    by.may(Permission::Read)?;
    let settings = brewery::operations::settings(db).await?;
    let today = format::today(&settings.time_zone);
    let until = today.saturating_add(jiff::Span::new().days(AHEAD));
    let mut snapshot = db.snapshot().await?;
    let open = store::plans(&mut snapshot, &[id]).await?.pop();
    snapshot.commit().await?;
    let Some(open) = open else { return Ok(None) };
    let about = About::read(db, by, settings, today).await?;
    let mut missing = about.missing(&open);
    missing.extend(about.short(&open, &mut HashMap::new()));
    Ok(Some(about.batch(open, missing, until)))
}

/// What the brewery has, to hold plans against.
struct About {
    settings: Settings,
    today: Date,
    sources: Vec<Source>,
    newest_samples: HashMap<SourceId, Date>,
    shelf: Vec<(Material, Option<MaterialLot>)>,
    levels: Levels,
    /// What is missing where no meter can be acted on now.
    meter: Option<Missing>,
}

impl About {
    async fn read(db: &Db, by: &Member, settings: Settings, today: Date) -> Result<Self, Error> {
        let meters = meters::operations::standings(db, by, UtcTime::now()).await?;
        let fit = meters
            .iter()
            .any(|(_, standing)| standing.may_be_acted_on());
        let only = match meters.as_slice() {
            [(meter, _)] => Some(meter.id),
            _ => None,
        };
        Ok(Self {
            meter: (!fit).then_some(Missing::Meter {
                listed: meters.len(),
                only,
            }),
            settings,
            today,
            sources: sources::operations::list(db, by).await?,
            newest_samples: sources::operations::newest_samples(db, by).await?,
            shelf: shelf::operations::list_in_use(db, by).await?,
            levels: stock::operations::all(db, by).await?,
        })
    }

    fn duty(&self, id: SourceId, on: Date) -> Option<(&Source, TestDuty)> {
        let source = self.sources.iter().find(|source| source.id == id)?;
        let newest = self.newest_samples.get(&id).copied();
        Some((source, TestDuty::of(source, newest, on)))
    }

    fn freshness(&self, id: SourceId) -> Option<Freshness> {
        let (source, duty) = self.duty(id, self.today)?;
        Some(Freshness {
            source: id,
            name: source.name.clone(),
            duty,
        })
    }

    /// Every plan as a batch. What is on the shelf goes to the one that is brewed first.
    fn batches(&self, open: Vec<store::OpenPlan>, until: Date) -> Vec<Batch> {
        let mut missing: Vec<Vec<Missing>> = open.iter().map(|plan| self.missing(plan)).collect();
        let mut in_turn: Vec<usize> = (0..open.len()).collect();
        in_turn.sort_by_key(|place| open[*place].brewed_on);
        let mut taken = HashMap::new();
        for place in in_turn {
            missing[place].extend(self.short(&open[place], &mut taken));
        }
        open.into_iter()
            .zip(missing)
            .map(|(plan, missing)| self.batch(plan, missing, until))
            .collect()
    }

    /// What there is too little of for a plan after what is `taken`; adds what it takes.
    fn short(&self, plan: &store::OpenPlan, taken: &mut HashMap<MaterialId, f64>) -> Vec<Missing> {
        let mut short = Vec::new();
        for (material, _) in &self.shelf {
            let lines = plan.lines.iter();
            let needed: f64 = lines
                .filter(|line| line.weighed_at.is_none() && line.material == Some(material.id))
                .map(|line| line.planned.get())
                .sum();
            if needed <= 0.0 {
                continue;
            }
            let before = taken.entry(material.id).or_default();
            let level = self.levels.material(material.id);
            // Where a lot was never counted, nobody knows that it is short.
            if let (Some(stock), 0) = (level.stock, level.not_counted) {
                let left = Stock::of(stock.get() - *before).there();
                if needed > left.get() {
                    short.push(Missing::Material {
                        material: material.id,
                        name: material.name.clone(),
                        unit: material.unit(),
                        needed: DoseAmount::clamped(needed),
                        left,
                    });
                }
            }
            *before += needed;
        }
        short
    }

    fn batch(&self, plan: store::OpenPlan, missing: Vec<Missing>, until: Date) -> Batch {
        let next = next::of(&plan, &missing, &self.settings.vessel_order);
        Batch {
            when: When::of(plan.brewed_on, self.today, until),
            lines: plan.lines.len(),
            lines_in: plan
                .lines
                .iter()
                .filter(|line| line.weighed_at.is_some())
                .count(),
            id: plan.id,
            batch: plan.batch,
            revision: plan.revision,
            beer_id: plan.beer_id,
            beer_name: plan.beer_name,
            brewed_on: plan.brewed_on,
            state: plan.state,
            prediction: plan.prediction,
            reading: plan.reading,
            missing,
            next,
        }
    }

    fn missing(&self, plan: &store::OpenPlan) -> Vec<Missing> {
        let mut missing = Vec::new();
        if plan.state == State::Draft {
            missing.push(Missing::Approval);
        }
        if let Some((id, revision)) = plan.successor {
            missing.push(Missing::Revision { id, revision });
        }
        let to_weigh = || plan.lines.iter().filter(|line| line.weighed_at.is_none());
        // Once something is in, the water is what it was.
        let begun =
            plan.reading.is_some() || plan.lines.iter().any(|line| line.weighed_at.is_some());
        for used in plan.sources.iter().filter(|_| !begun) {
            self.missing_of_source(used, plan, &mut missing);
        }
        // A batch that was read has had its meter; one of another day is calibrated for then.
        if plan.brewed_on <= self.today && plan.reading.is_none() {
            missing.extend(self.meter.clone());
        }
        let day = plan.brewed_on.max(self.today);
        for (material, lot) in &self.shelf {
            let used = to_weigh().any(|line| line.material == Some(material.id));
            if let Some(lot) = lot.as_ref().filter(|_| used)
                && let Some(use_by) = lot.use_by.filter(|use_by| *use_by < day)
            {
                missing.push(Missing::FreshLot {
                    material: material.id,
                    name: material.name.clone(),
                    code: lot.code.clone(),
                    use_by,
                });
            }
        }
        missing
    }

    fn missing_of_source(
        &self,
        used: &store::UsedSource,
        plan: &store::OpenPlan,
        missing: &mut Vec<Missing>,
    ) {
        let Some((source, duty)) = self.duty(used.id, plan.brewed_on.max(self.today)) else {
            return;
        };
        let (id, name) = (source.id, source.name.clone());
        match (duty.last, duty.next) {
            (Some(last), Some(due)) => {
                if duty.state == DutyState::Overdue {
                    missing.push(Missing::FreshTest {
                        source: id,
                        name: name.clone(),
                        last,
                        due,
                    });
                }
                if used.tested_on.is_some_and(|read| last > read) {
                    missing.push(Missing::NewerTest {
                        source: id,
                        name: name.clone(),
                        sampled_on: last,
                    });
                }
            }
            _ => missing.push(Missing::Test {
                source: id,
                name: name.clone(),
            }),
        }
        let sentences: Vec<String> = used
            .assumed
            .iter()
            .filter(|sentence| is_of_a_needed_figure(sentence))
            .cloned()
            .collect();
        if !sentences.is_empty() {
            missing.push(Missing::Assumed {
                source: id,
                name,
                sentences,
            });
        }
    }
}

/// Whether what was assumed is one of the figures every report is asked for. Hardly a
/// water is tested for everything; saying so of every batch would teach to read past it.
fn is_of_a_needed_figure(sentence: &str) -> bool {
    let sentence = sentence.to_lowercase();
    Analyte::NEEDED
        .iter()
        .any(|analyte| sentence.starts_with(analyte.name()))
}

/// The vessels of the brewery's order up to the mash.
fn before_the_mash(order: &[Vessel; 4]) -> &[Vessel] {
    let mash = order.iter().position(|vessel| *vessel == Vessel::Mash);
    &order[..=mash.unwrap_or(order.len() - 1)]
}
