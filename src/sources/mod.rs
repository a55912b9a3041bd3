//! Where water comes from, what its tests found, and what it is today.
//!
//! A [`Source`] has [`water_tests`]; [`todays_water`] makes of all of them the best
//! estimate of its composition now. Start reading at [`operations::todays_water`].

use chemistry::report::WaterKind;
use jiff::civil::Date;

use crate::id::SourceId;

pub mod api;
pub mod operations;
pub mod pages;
pub mod store;
pub mod todays_water;
mod trend;
pub mod water_tests;

pub use todays_water::{HowKnown, TodaysFigure, TodaysWater};

/// What a kind of water is called.
pub const fn kind_name(kind: WaterKind) -> &'static str {
    match kind {
        WaterKind::Mains => "Mains",
        WaterKind::Borehole => "Borehole or well",
        WaterKind::Surface => "River, lake or reservoir",
        WaterKind::Permeate => "Permeate or demineralised",
        WaterKind::Other => "Bought-in or other",
    }
}

/// Where water comes from.
#[derive(Clone, Debug, PartialEq)]
pub struct Source {
    /// Its identifier.
    pub id: SourceId,
    /// Its name, unlike every other source's.
    pub name: String,
    /// What sort of water it is.
    pub kind: WaterKind,
    /// Whether it only serves to dilute others, so that one wants little of it.
    pub blending: bool,
    /// What a cubic metre costs, in the brewery's currency.
    pub price_per_m3: Option<f64>,
    /// How often it should be tested.
    pub days_between_tests: i64,
    /// Anything else worth knowing.
    pub notes: String,
    /// Whether plans may draw on it.
    pub in_use: bool,
    /// Counts changes, so that two people do not overwrite each other.
    pub version: i64,
}

/// What a source is to be, before it is kept.
#[derive(Clone, Debug, PartialEq)]
pub struct NewSource {
    /// Its name.
    pub name: String,
    /// What sort of water it is.
    pub kind: WaterKind,
    /// Whether it only serves to dilute others.
    pub blending: bool,
    /// What a cubic metre costs, in the brewery's currency.
    pub price_per_m3: Option<f64>,
    /// How often it should be tested.
    pub days_between_tests: i64,
    /// Anything else worth knowing.
    pub notes: String,
    /// Whether plans may draw on it.
    pub in_use: bool,
}

impl NewSource {
    /// The source this makes.
    pub(crate) fn into_source(self, id: SourceId, version: i64) -> Source {
        Source {
            id,
            name: self.name,
            kind: self.kind,
            blending: self.blending,
            price_per_m3: self.price_per_m3,
            days_between_tests: self.days_between_tests,
            notes: self.notes,
            in_use: self.in_use,
            version,
        }
    }
}

/// When a source was last tested and when it should be again.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct TestDuty {
    /// The day of the newest sample that was not withdrawn.
    pub last: Option<Date>,
    /// The day the next one should be drawn; `None` when it was never tested.
    pub next: Option<Date>,
    /// How that stands on the day asked about.
    pub state: DutyState,
}

/// How a duty stands.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum DutyState {
    /// Nothing to do yet.
    Done,
    /// To be done within a week.
    Due,
    /// Should have been done.
    Overdue,
}

impl DutyState {
    /// The kind of badge that shows it.
    pub const fn badge(self) -> &'static str {
        match self {
            Self::Done => "done",
            Self::Due => "due",
            Self::Overdue => "overdue",
        }
    }
}

impl TestDuty {
    /// The duty in words.
    pub fn words(&self) -> String {
        match (self.next, self.state) {
            (None, _) => "never tested".into(),
            (Some(next), DutyState::Done) => format!("next test {next}"),
            (Some(next), DutyState::Due) => format!("test due {next}"),
            (Some(next), DutyState::Overdue) => format!("overdue since {next}"),
        }
    }

    /// The duty of a source whose newest sample is of the day `last`.
    pub fn of(source: &Source, last: Option<Date>, today: Date) -> Self {
        /// Days before the day itself from which a test counts as due. Chosen.
        const AHEAD: i64 = 7;
        let next =
            last.map(|last| last.saturating_add(jiff::Span::new().days(source.days_between_tests)));
        let state = match next {
            Some(next) => match days_between(today, next) {
                ..0 => DutyState::Overdue,
                0..=AHEAD => DutyState::Due,
                _ => DutyState::Done,
            },
            None => DutyState::Overdue,
        };
        Self { last, next, state }
    }
}

/// Days from `from` to `to`; negative when `to` is earlier.
pub(crate) fn days_between(from: Date, to: Date) -> i64 {
    from.until(to).map_or(0, |span| i64::from(span.get_days()))
}

#[cfg(test)]
mod tests {
    use super::*;
    use jiff::civil::date;

    fn source() -> Source {
        let new = NewSource {
            name: "Well".into(),
            kind: WaterKind::Borehole,
            blending: false,
            price_per_m3: None,
            days_between_tests: 90,
            notes: String::new(),
            in_use: true,
        };
        new.into_source(SourceId::new(), 1)
    }

    #[test]
    fn a_test_is_due_in_the_week_before_its_day_and_overdue_after_it() {
        let last = Some(date(2026, 1, 1));
        for (today, state) in [
            (date(2026, 3, 24), DutyState::Done),
            (date(2026, 3, 25), DutyState::Due),
            (date(2026, 4, 1), DutyState::Due),
            (date(2026, 4, 2), DutyState::Overdue),
        ] {
            let duty = TestDuty::of(&source(), last, today);
            assert_eq!(duty.next, Some(date(2026, 4, 1)));
            assert_eq!(duty.state, state, "{today}");
        }
        assert_eq!(
            TestDuty::of(&source(), None, date(2026, 1, 1)).state,
            DutyState::Overdue
        );
    }
}
