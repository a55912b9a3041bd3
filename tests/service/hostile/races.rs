//! Many writers at once: one wins, the others are told, and nobody meets a locked database.

use std::collections::BTreeSet;
use std::future::Future;
use std::time::Duration;

use serde_json::{Value, json};
use tokio::io::AsyncWriteExt;

use super::LivedIn;
use crate::brewhouse::Brewhouse;
use crate::desk::Answer;

/// Every answer of `count` requests sent at the same moment.
async fn at_once<F>(count: usize, request: impl Fn(usize) -> F) -> Vec<Answer>
where
    F: Future<Output = Result<reqwest::Response, reqwest::Error>> + Send + 'static,
{
    let running: Vec<_> = (0..count)
        .map(|index| tokio::spawn(request(index)))
        .collect();
    let mut answers = Vec::new();
    for task in running {
        answers.push(Answer::of(task.await.unwrap().unwrap()).await);
    }
    answers
}

fn statuses(answers: &[Answer]) -> Vec<u16> {
    let mut statuses: Vec<u16> = answers.iter().map(|answer| answer.status).collect();
    statuses.sort_unstable();
    statuses
}

/// One success, and for everybody else a conflict.
fn one_wins(answers: &[Answer], what: &str) {
    let statuses = statuses(answers);
    assert!(statuses[0] < 300, "{what}: {statuses:?}");
    assert!(
        statuses[1..].iter().all(|it| *it == 409),
        "{what}: {statuses:?}"
    );
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn of_many_who_do_the_same_thing_at_once_exactly_one_has_done_it() {
    let lived = LivedIn::build().await;
    let program = &lived.house.manager;
    let open = lived.house.draft("26-311").await;
    let titration = format!(
        "/malts/{}/lots/{}/titrations/{}/withdrawal",
        lived.malt, lived.malt_lot, lived.titration
    );
    let beer = format!("/beers/{}", lived.house.beer);
    let malt = format!("/malts/{}", lived.malt);
    let why = json!({"reason": "Everybody says so"});
    let read = async |path: &str| program.get(path).await.body;
    let cases: Vec<(&str, String, Value)> = vec![
        (
            "PUT",
            format!("/plans/{}/doses/{}", lived.approved, lived.dose),
            json!({"actual": 5, "reason": "Everybody says so"}),
        ),
        (
            "PUT",
            format!("/plans/{}/treatment", lived.plan),
            json!({"shares_percent": [100]}),
        ),
        ("PUT", beer.clone(), read(&beer).await),
        ("PUT", malt.clone(), read(&malt).await),
        ("POST", format!("/plans/{}/approval", lived.plan), json!({})),
        ("POST", format!("/plans/{open}/withdrawal"), why.clone()),
        (
            "POST",
            format!(
                "/plans/{}/mash-checks/{}/withdrawal",
                lived.dosed, lived.check
            ),
            why.clone(),
        ),
        ("POST", format!("/plans/{}/closing", lived.dosed), json!({})),
        (
            "POST",
            format!("/water-tests/{}/withdrawal", lived.water_test),
            why.clone(),
        ),
        ("POST", titration, why.clone()),
    ];
    let entries = async || {
        let rows = lived.rows().await;
        rows.iter()
            .find(|(table, _)| table == "record_entries")
            .unwrap()
            .1
    };
    for (method, path, body) in cases {
        let before = entries().await;
        let etag = program.get(path.trim_end_matches("/treatment")).await.etag;
        let answers = at_once(8, |_| {
            let mut request = program.request(method, &path).json(&body);
            if let Some(etag) = etag.as_deref().filter(|_| method == "PUT") {
                request = request.header("if-match", etag);
            }
            request.send()
        })
        .await;
        one_wins(&answers, &format!("{method} {path}"));
        assert_eq!(
            entries().await,
            before + 1,
            "{method} {path} is written down once"
        );
    }
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn one_key_sent_many_times_at_once_drafts_one_plan_and_is_answered_the_same() {
    let house = Brewhouse::build().await;
    let order = house.order("26-312");
    let answers = at_once(8, |_| {
        let request = house.manager.request("POST", "/plans").json(&order);
        request.header("idempotency-key", "all-at-once").send()
    })
    .await;
    assert_eq!(statuses(&answers), [201; 8]);
    let ids: BTreeSet<_> = answers
        .iter()
        .map(|answer| answer.body["id"].as_str())
        .collect();
    assert_eq!(ids.len(), 1);
    let listed = house.manager.get("/plans").await;
    assert_eq!(listed.body["items"].as_array().unwrap().len(), 1);
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn a_crowd_that_writes_and_reads_is_served_to_the_last() {
    let house = Brewhouse::build().await;
    let qa = house.desk.full_program("qa").await;
    let draft = house.draft("26-313").await;
    let answers = at_once(60, |index| {
        let source =
            json!({"name": format!("Well {index}"), "kind": "borehole", "days_between_tests": 30});
        match index % 3 {
            0 => house
                .manager
                .request("POST", "/sources")
                .json(&source)
                .send(),
            1 => qa.request("POST", "/sources").json(&source).send(),
            _ => qa.request("GET", &format!("/plans/{draft}")).send(),
        }
    })
    .await;
    let counted = statuses(&answers);
    assert_eq!(
        counted.iter().filter(|it| **it == 201).count(),
        40,
        "{counted:?}"
    );
    assert_eq!(
        counted.iter().filter(|it| **it == 200).count(),
        20,
        "{counted:?}"
    );
    // One name asked for by many belongs to one.
    let wanted = json!({"name": "The only well", "kind": "borehole", "days_between_tests": 30});
    let answers = at_once(8, |_| qa.request("POST", "/sources").json(&wanted).send()).await;
    assert_eq!(statuses(&answers), [201, 422, 422, 422, 422, 422, 422, 422]);
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn whoever_loses_the_network_and_asks_again_is_told_what_came_of_it() {
    let house = Brewhouse::build().await;
    let host = house.desk.address.trim_start_matches("http://").to_owned();
    for round in 0..24_u64 {
        let source =
            json!({"name": format!("Well {round}"), "kind": "borehole", "days_between_tests": 30});
        let key = format!("lost-{round}");
        let send = || {
            let request = house.manager.request("POST", "/sources").json(&source);
            request.header("idempotency-key", &key)
        };
        let request = send().build().unwrap();
        let token = request.headers()["authorization"].to_str().unwrap();
        let head = format!(
            "POST /api/v1/sources HTTP/1.1\r\nhost: {host}\r\nauthorization: {token}\r\nidempotency-key: {key}\r\n\
             content-type: application/json\r\ncontent-length: {}\r\n\r\n{source}",
            source.to_string().len()
        );
        let mut stream = tokio::net::TcpStream::connect(&host).await.unwrap();
        stream.write_all(head.as_bytes()).await.unwrap();
        tokio::time::sleep(Duration::from_micros(400 * round)).await;
        drop(stream);
        let answer = Answer::of(send().send().await.unwrap()).await;
        assert_eq!(
            answer.status,
            201,
            "after {} µs: {:?}",
            400 * round,
            answer.body
        );
    }
    let listed = house.manager.get("/sources?limit=200").await;
    assert_eq!(listed.body["items"].as_array().unwrap().len(), 25);
}
