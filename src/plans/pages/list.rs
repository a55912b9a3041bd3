//! The list of plans.

use askama::Template;
use askama_web::WebTemplate;
use axum::extract::State;

use crate::db::Db;
use crate::error::Error;
use crate::id::BeerId;
use crate::people::Member;
use crate::plans::State as PlanState;
use crate::plans::operations;
use crate::plans::store::{Filter, Listing, Order};
use crate::web::form::{Choice, Form};
use crate::web::format;
use crate::web::layout::{Framer, Page};

/// Plans on one page of the list.
const PAGE: i64 = 25;

#[derive(Template, WebTemplate)]
#[template(path = "plans/list.html")]
pub(super) struct ListPage {
    page: Page,
    rows: Vec<ListRow>,
    asked: Form,
    states: Vec<Choice>,
    filtered: bool,
    order: &'static str,
    sorts: Vec<SortHead>,
    earlier: Option<String>,
    later: Option<String>,
    words: String,
}

struct SortHead {
    label: &'static str,
    address: String,
    direction: &'static str,
}

/// A plan as lists show it, in words.
pub struct ListRow {
    /// The plan.
    pub plan: Listing,
    /// The prediction of its approval.
    pub predicted: String,
    /// The reading that counts.
    pub measured: String,
    /// How many lines are in, of how many.
    pub weighed: String,
}

impl From<Listing> for ListRow {
    fn from(plan: Listing) -> Self {
        Self {
            predicted: plan.prediction.map_or_else(String::new, |it| {
                format!(
                    "{} ({} to {})",
                    format::ph(it.ph.get()),
                    format::ph(it.low.get()),
                    format::ph(it.high.get())
                )
            }),
            measured: plan
                .outcome
                .as_ref()
                .and_then(|it| it.measured_ph)
                .map_or_else(String::new, format::ph),
            weighed: format!("{} of {}", plan.weighed, plan.doses),
            plan,
        }
    }
}

pub(super) async fn list(
    State(db): State<Db>,
    framer: Framer,
    asked: Form,
) -> Result<ListPage, Error> {
    let filter = Filter {
        state: PlanState::from_key(asked.value("state")),
        open: asked.value("state") == "open",
        beer: asked.value("beer_id").parse().ok(),
        batch: Some(asked.value("batch").trim().to_owned()).filter(|batch| !batch.is_empty()),
    };
    let order = Order::ALL
        .into_iter()
        .find(|order| order.key() == asked.value("order"))
        .unwrap_or_default();
    let number = asked
        .value("page")
        .parse::<i64>()
        .unwrap_or(1)
        .clamp(1, 100_000);
    let mut found = operations::list(
        &db,
        &framer.member,
        &filter,
        order,
        (number - 1) * PAGE,
        PAGE + 1,
    )
    .await?;
    let more = found.len() > usize::try_from(PAGE).unwrap_or(usize::MAX);
    found.truncate(usize::try_from(PAGE).unwrap_or(usize::MAX));
    let address_of = |order: Order, number: i64| {
        let query = |name: &str| crate::web::form::percent(asked.value(name));
        format!(
            "/plans?state={}&beer_id={}&batch={}&order={}&page={number}",
            query("state"),
            query("beer_id"),
            query("batch"),
            order.key()
        )
    };
    let address = |number: i64| address_of(order, number);
    let by_day = if order == Order::Latest {
        Order::Earliest
    } else {
        Order::Latest
    };
    let sorts = [
        ("Batch", Order::Batch),
        ("Beer", Order::Beer),
        ("Brewed", by_day),
    ]
    .map(|(label, other)| SortHead {
        label,
        address: address_of(other, 1),
        direction: match (label, order) {
            ("Batch", Order::Batch) | ("Beer", Order::Beer) | ("Brewed", Order::Earliest) => {
                "ascending"
            }
            ("Brewed", Order::Latest) => "descending",
            _ => "none",
        },
    })
    .into();
    let states = PlanState::ALL.map(|state| (state.key(), state.name()));
    let states = [
        ("", "Every state"),
        ("open", "Neither closed nor withdrawn"),
    ]
    .into_iter()
    .chain(states);
    Ok(ListPage {
        page: framer.page("Plans", "plans").await,
        states: Choice::list(states, asked.value("state")),
        filtered: filter.state.is_some()
            || filter.open
            || filter.beer.is_some()
            || filter.batch.is_some(),
        order: order.key(),
        sorts,
        earlier: (number > 1).then(|| address(number - 1)),
        later: more.then(|| address(number + 1)),
        words: format!("page {number}"),
        rows: found.into_iter().map(Into::into).collect(),
        asked,
    })
}

/// The latest plans of one beer, for its page.
pub async fn of_beer(db: &Db, by: &Member, beer: BeerId) -> Result<Vec<ListRow>, Error> {
    let filter = Filter {
        beer: Some(beer),
        ..Filter::default()
    };
    let found = operations::list(db, by, &filter, Order::Latest, 0, 10).await?;
    Ok(found.into_iter().map(Into::into).collect())
}
