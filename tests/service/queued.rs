//! What a tablet's queue is told: forms sent again by script.

use reqwest::{StatusCode, header};
use serde_json::Value;

use crate::brewhouse::{Brewhouse, weigh_form};
use crate::desk::{Answer, Browser, Seen, offered};

/// The form of the line to be weighed, as the page offers it; as planned if nothing is typed.
fn line(page: &Seen, typed: &[(&str, &str)]) -> (String, Vec<(String, String)>) {
    let action = weigh_form(page);
    let mut fields = offered(page, &action, typed);
    if typed.is_empty() {
        fields.push(("as_planned".into(), "yes".into()));
    }
    (action, fields)
}

/// Who a page says is signed in.
fn member(page: &Seen) -> String {
    let html = page.html();
    let body = scraper::Selector::parse("body[data-member]").unwrap();
    let found = html.select(&body).next();
    found
        .and_then(|body| body.value().attr("data-member"))
        .unwrap()
        .to_owned()
}

/// Sends a form as the queue does.
async fn send(
    browser: &Browser,
    address: &str,
    (action, fields): &(String, Vec<(String, String)>),
    member: &str,
) -> Answer {
    let request = browser.request("POST", action).form(fields);
    let request = request
        .header(header::ORIGIN, address)
        .header(header::ACCEPT, "application/json")
        .header("x-leat-member", member);
    Answer::of(request.send().await.unwrap()).await
}

async fn weighed(house: &Brewhouse, id: &str) -> usize {
    let doses = house.doses(id).await;
    doses
        .iter()
        .filter(|dose| !dose["actual"].is_null())
        .count()
}

#[tokio::test]
async fn a_tick_sent_three_times_by_the_queue_and_once_by_the_browser_is_in_once() {
    let house = Brewhouse::build().await;
    let id = house.approved("26-601").await;
    let brewer = house.desk.browser("brewer").await;
    let page = brewer.open(&format!("/plans/{id}/weigh-out")).await;
    let tick = line(&page, &[]);
    for _ in 0..3 {
        let answer = send(&brewer, &house.desk.address, &tick, &member(&page)).await;
        assert_eq!(
            (answer.status, answer.body["state"].as_str()),
            (200, Some("saved")),
            "{:?}",
            answer.body
        );
    }
    let seen = brewer.post(&tick.0, &tick.1).await;
    assert_eq!(seen.status, StatusCode::OK);
    assert_eq!(seen.path, format!("/plans/{id}/weigh-out"), "a page again");
    assert_eq!(weighed(&house, &id).await, 1);
}

#[tokio::test]
async fn a_tick_made_by_one_person_is_never_taken_in_the_session_of_another() {
    let house = Brewhouse::build().await;
    let id = house.approved("26-602").await;
    let brewer = house.desk.browser("brewer").await;
    let page = brewer.open(&format!("/plans/{id}/weigh-out")).await;
    let tick = line(&page, &[]);
    let manager = house.desk.browser("manager").await;
    for other in [&manager, &house.desk.stranger()] {
        let answer = send(other, &house.desk.address, &tick, &member(&page)).await;
        assert_eq!(answer.status, 401, "{:?}", answer.body);
        assert_eq!(answer.kind.as_deref(), Some("application/problem+json"));
    }
    assert_eq!(weighed(&house, &id).await, 0);
    let answer = send(&brewer, &house.desk.address, &tick, &member(&page)).await;
    assert_eq!(answer.status, 200, "{:?}", answer.body);
}

#[tokio::test]
async fn a_tick_that_waited_for_the_network_counts_from_when_it_was_made() {
    let house = Brewhouse::build().await;
    let id = house.approved("26-606").await;
    let brewer = house.desk.browser("brewer").await;
    let page = brewer.open(&format!("/plans/{id}/weigh-out")).await;
    let (action, fields) = line(&page, &[]);
    let request = brewer.request("POST", &action).form(&fields);
    let request = request
        .header(header::ORIGIN, &house.desk.address)
        .header(header::ACCEPT, "application/json")
        .header("x-leat-made-ago", "1500");
    let answer = Answer::of(request.send().await.unwrap()).await;
    assert_eq!(answer.status, 200, "{:?}", answer.body);
    let doses = house.doses(&id).await;
    let at = doses.iter().find_map(|dose| dose["weighed_at"].as_str());
    let at: jiff::Timestamp = at.unwrap().parse().unwrap();
    let ago = jiff::Timestamp::now().as_second() - at.as_second();
    assert!((1500..1530).contains(&ago), "{ago} s ago");
    // The record book says when the server was told.
    let book = house.manager.get("/record?limit=1").await;
    let told = book.body["items"][0]["at"].as_str().unwrap().parse();
    let told: jiff::Timestamp = told.unwrap();
    let ago = jiff::Timestamp::now().as_second() - told.as_second();
    assert!(ago < 60, "{ago} s ago");
}

#[tokio::test]
async fn a_refused_tick_is_told_why_and_may_be_mended_under_its_own_key() {
    let house = Brewhouse::build().await;
    let id = house.approved("26-603").await;
    let brewer = house.desk.browser("brewer").await;
    let page = brewer.open(&format!("/plans/{id}/weigh-out")).await;
    let wrong = line(&page, &[("actual", "about a cup")]);
    let answer = send(&brewer, &house.desk.address, &wrong, &member(&page)).await;
    assert_eq!(answer.status, 422, "{:?}", answer.body);
    assert_eq!(answer.pointers(), ["/actual"]);
    let mended = line(&page, &[]);
    let answer = send(&brewer, &house.desk.address, &mended, &member(&page)).await;
    assert_eq!(answer.body["state"], "saved", "{:?}", answer.body);
    // A second tablet that still shows the line.
    let other = house.desk.browser("qa").await;
    let late = send(
        &other,
        &house.desk.address,
        &mended,
        &member(&other.open("/").await),
    )
    .await;
    assert_eq!(late.status, 409);
    let told = late.body["detail"].as_str().unwrap_or_default();
    assert!(told.contains("Bo Brewer"), "{told}");
    assert_eq!(weighed(&house, &id).await, 1);
}

#[tokio::test]
async fn only_the_weigh_out_may_be_kept_by_a_tablet_and_its_worker_comes_from_the_root() {
    let house = Brewhouse::build().await;
    let id = house.approved("26-604").await;
    let brewer = house.desk.browser("brewer").await;
    for (path, kept) in [
        (format!("/plans/{id}/weigh-out"), true),
        (format!("/plans/{id}"), false),
        ("/".into(), false),
        ("/sign-in".into(), false),
    ] {
        let answer = brewer.request("GET", &path).send().await.unwrap();
        let headers = answer.headers();
        assert_eq!(headers.contains_key("x-leat-keep"), kept, "{path}");
        assert_eq!(headers[header::CACHE_CONTROL], "no-store", "{path}");
    }
    let stranger = house.desk.stranger();
    let worker = stranger.request("GET", "/service-worker.js").send().await;
    let worker = worker.unwrap();
    assert_eq!(worker.status(), StatusCode::OK);
    assert_eq!(worker.headers()[header::CACHE_CONTROL], "no-cache");
    let kind = worker.headers()[header::CONTENT_TYPE].to_str().unwrap();
    assert!(kind.starts_with("text/javascript"), "{kind}");
    // What it keeps for pages without network is there to be kept.
    let script = worker.text().await.unwrap();
    let named: Vec<&str> = script
        .split('"')
        .filter(|text| text.starts_with("/assets/") && text.contains('.'))
        .collect();
    assert!(named.len() > 3, "{named:?}");
    let of_pages = assets_of(&brewer.open("/").await);
    for asset in named.iter().map(|name| (*name).to_owned()).chain(of_pages) {
        let answer = stranger.request("GET", &asset).send().await.unwrap();
        assert_eq!(answer.status(), StatusCode::OK, "{asset}");
        let kept = named.contains(&asset.as_str());
        assert!(kept, "the worker does not keep {asset}");
    }
}

/// Scripts and style sheets of a page.
fn assets_of(page: &Seen) -> Vec<String> {
    let html = page.html();
    let links = scraper::Selector::parse("script[src], link[rel=stylesheet]").unwrap();
    let address = |element: scraper::ElementRef<'_>| {
        let value = element.value();
        value.attr("src").or(value.attr("href")).map(str::to_owned)
    };
    html.select(&links).filter_map(address).collect()
}

#[tokio::test]
async fn a_script_that_asks_for_json_is_refused_in_json_and_a_browser_by_a_page() {
    let house = Brewhouse::build().await;
    let id = house.approved("26-605").await;
    let stranger = house.desk.stranger();
    let path = format!("/plans/{id}/doses/{id}");
    for (accept, json) in [("application/json", true), ("text/html", false)] {
        let request = stranger.request("POST", &path).form(&[("actual", "1")]);
        let request = request
            .header(header::ORIGIN, &house.desk.address)
            .header(header::ACCEPT, accept);
        let answer = Answer::of(request.send().await.unwrap()).await;
        assert_eq!(matches!(answer.body, Value::Object(_)), json, "{accept}");
        assert_eq!(answer.status == 401, json, "{accept}");
    }
}
