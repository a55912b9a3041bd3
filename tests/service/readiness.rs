//! What is on today: the open batches, what each lacks, and the one thing to do next.

use jiff::civil::Date;
use jiff::{Span, Timestamp, tz::TimeZone};
use leat::people::Scope;
use serde_json::{Value, json};

use crate::brewhouse::{Brewhouse, hard_water};
use crate::desk::{Desk, Seen};

/// Today where the test server's brewery is until somebody says otherwise.
fn today() -> Date {
    Timestamp::now().to_zoned_datetime(TimeZone::UTC).date()
}

fn days(from: Date, days: i64) -> Date {
    from.checked_add(Span::new().days(days)).unwrap()
}

/// A brewery whose only source was tested so many days ago.
async fn tested(days_ago: i64) -> Brewhouse {
    let mut water = hard_water();
    water["sampled_on"] = json!(days(today(), -days_ago).to_string());
    Brewhouse::on(water).await
}

async fn draft(house: &Brewhouse, batch: &str, on: Date) -> String {
    let mut order = house.order(batch);
    order["brewed_on"] = json!(on.to_string());
    order["way"] = json!("closest_to_preferred");
    crate::brewhouse::made(&house.manager.post("/plans", &order).await)
}

async fn approved(house: &Brewhouse, batch: &str, on: Date) -> String {
    let id = draft(house, batch, on).await;
    let path = format!("/plans/{id}/approval");
    assert_eq!(house.manager.post(&path, &json!({})).await.status, 201);
    id
}

async fn brew_day(house: &Brewhouse) -> Value {
    let answer = house.manager.get("/brew-day").await;
    assert_eq!(answer.status, 200, "{:?}", answer.body);
    answer.body
}

/// What the API says of one batch.
async fn batch(house: &Brewhouse, number: &str) -> Value {
    let day = brew_day(house).await;
    let batches = day["batches"].as_array().unwrap();
    let found = batches.iter().find(|batch| batch["batch"] == number);
    found.unwrap_or_else(|| panic!("{number} in {day}")).clone()
}

fn kinds(batch: &Value) -> Vec<&str> {
    let missing = batch["missing"].as_array().unwrap();
    missing
        .iter()
        .map(|it| it["kind"].as_str().unwrap())
        .collect()
}

/// The words and the address of a batch's button.
fn button(page: &Seen, number: &str) -> (String, String) {
    let html = page.html();
    let select = |css: &str| scraper::Selector::parse(css).unwrap();
    let found = html.select(&select("article.batch")).find(|article| {
        let heading = article.select(&select("h3")).next().unwrap();
        heading.text().collect::<String>().contains(number)
    });
    let article = found.unwrap_or_else(|| panic!("no {number} on {}", page.words()));
    let link = article
        .select(&select(".batch-next a.large"))
        .next()
        .unwrap();
    let words: String = link.text().collect();
    let words = words.split(": ").next().unwrap().trim().to_owned();
    (words, link.value().attr("href").unwrap().to_owned())
}

#[tokio::test]
async fn one_button_leads_from_the_draft_to_the_closed_batch() {
    let house = tested(10).await;
    let brewer = house.desk.browser("brewer").await;
    let qa = house.desk.browser("qa").await;
    let id = draft(&house, "26-301", today()).await;
    let plan = format!("/plans/{id}");

    let drafted = batch(&house, "26-301").await;
    assert_eq!(drafted["when"], "today");
    assert_eq!(drafted["next"]["kind"], "approve");
    assert_eq!(kinds(&drafted), ["approval"]);
    assert_eq!(drafted["missing"][0]["stops"], true);
    let (words, address) = button(&qa.open("/").await, "26-301");
    assert_eq!(
        (words.as_str(), &address),
        ("Approve", &format!("{plan}#approval"))
    );
    let (words, _) = button(&brewer.open("/").await, "26-301");
    assert_eq!(words, "Ask QA to approve");
    let page = qa.open(&plan).await;
    assert!(page.words().contains("Before it can start"));
    assert_eq!(page.texts(".missing .stops span"), ["Not approved yet."]);
    qa.fill(&page, &format!("{plan}/approval"), &[]).await;

    let doses = house.doses(&id).await;
    let weigh = async |dose: &Value| {
        let path = format!("{plan}/doses/{}", dose["id"].as_str().unwrap());
        let answer = house
            .manager
            .put(&path, &json!({"actual": dose["planned"]}))
            .await;
        assert_eq!(answer.status, 200, "{:?}", answer.body);
    };
    let (words, address) = button(&brewer.open("/").await, "26-301");
    assert_eq!(
        (words.as_str(), &address),
        ("Weigh out", &format!("{plan}/weigh-out"))
    );
    let later = ["sparge_liquor", "kettle"];
    let (after, before): (Vec<&Value>, Vec<&Value>) = doses
        .iter()
        .partition(|dose| later.contains(&dose["vessel"].as_str().unwrap()));
    assert!(
        before.len() > 1 && !after.is_empty(),
        "both to weigh: {doses:?}"
    );
    weigh(before[0]).await;
    let page = brewer.open("/").await;
    assert_eq!(button(&page, "26-301").0, "Go on weighing out");
    let progress = format!("1 of {} lines in", doses.len());
    assert!(page.words().contains(&progress), "{}", page.words());
    for dose in &before[1..] {
        weigh(dose).await;
    }

    // The mash cannot wait; the sparge liquor can.
    let page = brewer.open("/").await;
    let read = format!("{plan}/mash-checks/new");
    assert_eq!(
        button(&page, "26-301"),
        ("Read the mash".into(), read.clone())
    );
    assert!(
        page.words().contains("Weigh out the rest"),
        "{}",
        page.words()
    );
    assert!(page.words().contains("90 % between"), "{}", page.words());
    let form = brewer.open(&read).await;
    brewer
        .fill(&form, &read, &[("ph", "5.58"), ("minute", "15")])
        .await;

    let stepping = batch(&house, "26-301").await;
    assert_eq!(stepping["next"]["kind"], "give_step");
    // Read a little off 20 °C: the cooled basis differs by some hundredths at most.
    let cooled = stepping["mash_ph"].as_f64().unwrap();
    assert!((cooled - 5.58).abs() < 0.03, "{cooled}");
    let step = house.doses(&id).await.pop().unwrap();
    let (words, address) = button(&brewer.open("/").await, "26-301");
    let at_step = format!("{plan}/weigh-out?dose={}", step["id"].as_str().unwrap());
    assert_eq!((words.as_str(), address), ("Give the first step", at_step));
    weigh(&step).await;

    let waiting = batch(&house, "26-301").await;
    assert_eq!(waiting["next"]["kind"], "read_again");
    let due: Timestamp = waiting["next"]["due_at"].as_str().unwrap().parse().unwrap();
    let minutes = due.duration_since(Timestamp::now()).as_secs_f64() / 60.0;
    assert!(minutes > 1.0 && minutes < 60.0, "{minutes} minutes to wait");
    let clock = due
        .to_zoned_datetime(TimeZone::UTC)
        .strftime("%H:%M")
        .to_string();
    let (words, _) = button(&brewer.open("/").await, "26-301");
    assert_eq!(words, format!("Read again at {clock}"));
    let form = brewer.open(&read).await;
    let page = brewer
        .fill(&form, &read, &[("ph", "5.42"), ("minute", "26")])
        .await;
    assert!(page.words().contains("Leave it"), "{}", page.words());

    assert_eq!(
        button(&brewer.open("/").await, "26-301").0,
        "Go on weighing out"
    );
    for dose in after {
        weigh(dose).await;
    }
    let page = brewer.open("/").await;
    let closing = format!("{plan}/closing");
    assert_eq!(
        button(&page, "26-301"),
        ("Close the batch".into(), closing.clone())
    );
    assert!(page.words().contains("mash read: 5.4"), "{}", page.words());
    let form = brewer.open(&closing).await;
    brewer.fill(&form, &closing, &[]).await;
    assert_eq!(brew_day(&house).await["batches"], json!([]));
}

#[tokio::test]
async fn batches_stand_by_day_in_the_brewerys_own_time_zone() {
    let house = tested(10).await;
    let east = Timestamp::now()
        .to_zoned_datetime(TimeZone::get("Pacific/Kiritimati").unwrap())
        .date();
    for (number, on) in [
        ("late", days(east, -4)),
        ("today", east),
        ("soon", days(east, 3)),
        ("far", days(east, 30)),
    ] {
        draft(&house, number, on).await;
    }
    let manager = house.desk.browser("manager").await;
    let mut seen = Vec::new();
    // At any moment it is a later date on Kiritimati than in Pago Pago.
    for zone in ["Pacific/Kiritimati", "Pacific/Pago_Pago"] {
        let settings = manager.open("/settings").await;
        manager
            .fill(&settings, "/settings", &[("time_zone", zone)])
            .await;
        let day = brew_day(&house).await;
        let batches = day["batches"].as_array().unwrap().iter();
        let placed: Vec<(String, String)> = batches
            .map(|it| {
                (
                    it["batch"].as_str().unwrap().into(),
                    it["when"].as_str().unwrap().into(),
                )
            })
            .collect();
        assert_eq!(day["later"], 1);
        seen.push(placed);
    }
    let pairs = |list: &[(&str, &str)]| -> Vec<(String, String)> {
        list.iter()
            .map(|(a, b)| ((*a).to_owned(), (*b).to_owned()))
            .collect()
    };
    assert_eq!(
        seen[0],
        pairs(&[("today", "today"), ("late", "late"), ("soon", "this_week")])
    );
    assert_eq!(
        seen[1],
        pairs(&[
            ("late", "late"),
            ("today", "this_week"),
            ("soon", "this_week")
        ])
    );
    let page = manager.open("/").await;
    assert_eq!(page.texts("main h2")[..3], ["Today", "Late", "This week"]);
    let words = page.words();
    assert!(words.contains("Nothing is planned for today."), "{words}");
    assert!(words.contains("Later: 1 batch planned"), "{words}");
}

#[tokio::test]
async fn a_source_tested_too_long_ago_never_or_since_is_said_beside_the_batch() {
    // Tested every 90 days: the next was due 10 days ago.
    let house = tested(100).await;
    let id = approved(&house, "26-310", days(today(), 1)).await;
    let due = days(today(), -10);
    let old = batch(&house, "26-310").await;
    assert_eq!(kinds(&old), ["fresh_test"]);
    assert_eq!(old["missing"][0]["stops"], false);
    let words = old["missing"][0]["words"].as_str().unwrap();
    assert!(
        words.contains("Town mains") && words.contains(&format!("due {due}")),
        "{words}"
    );
    let qa = house.desk.browser("qa").await;
    let brewer = house.desk.browser("brewer").await;
    let source = format!("/sources/{}", house.source);
    let enter = format!(".missing a[href=\"{source}/water-tests/new\"]");
    assert_eq!(qa.open("/").await.texts(&enter), ["Enter a test"]);
    let see = format!(".missing a[href=\"{source}\"]");
    assert_eq!(brewer.open("/").await.texts(&see), ["The source"]);
    assert_eq!(
        qa.open(&format!("/plans/{id}")).await.texts(&enter),
        ["Enter a test"]
    );

    let mut water = hard_water();
    water["sampled_on"] = json!(days(today(), -1).to_string());
    let tests = format!("{source}/water-tests");
    let test = crate::brewhouse::made(&house.manager.post(&tests, &water).await);
    assert_eq!(kinds(&batch(&house, "26-310").await), ["newer_test"]);
    let day = brew_day(&house).await;
    assert_eq!(day["waters"][0]["name"], "Town mains");
    assert_eq!(day["waters"][0]["state"], "done");
    assert_eq!(
        day["waters"][0]["last_sampled_on"],
        days(today(), -1).to_string()
    );

    let list = house.manager.get(&tests).await;
    let all = list.body["items"].as_array().unwrap();
    assert!(all.iter().any(|it| it["id"] == test.as_str()));
    for it in all {
        let path = format!("/water-tests/{}/withdrawal", it["id"].as_str().unwrap());
        let answer = house
            .manager
            .post(&path, &json!({"reason": "Wrong bottle."}))
            .await;
        assert!(answer.status < 300, "{:?}", answer.body);
    }
    assert_eq!(kinds(&batch(&house, "26-310").await), ["test"]);
}

#[tokio::test]
async fn assumed_figures_of_the_water_are_said_beside_the_batch() {
    let mut water = hard_water();
    water["sampled_on"] = json!(days(today(), -5).to_string());
    water["readings"]
        .as_array_mut()
        .unwrap()
        .retain(|it| it["analyte"] != "sodium");
    let house = Brewhouse::on(water).await;
    approved(&house, "26-320", today()).await;
    let found = batch(&house, "26-320").await;
    assert_eq!(kinds(&found), ["assumed"]);
    let words = found["missing"][0]["words"].as_str().unwrap();
    assert!(
        words.to_lowercase().contains("sodium was not reported"),
        "{words}"
    );
}

#[tokio::test]
async fn a_lot_past_its_day_is_said_as_long_as_something_of_it_is_to_be_weighed() {
    let house = tested(10).await;
    let list = house.manager.get("/materials").await.body;
    let all = list["items"].as_array().unwrap().clone();
    for material in &all {
        let lot = json!({"code": "OLD-1", "use_by": days(today(), 1).to_string(), "current": true, "in_use": true});
        let path = format!("/materials/{}/lots", material["id"].as_str().unwrap());
        crate::brewhouse::made(&house.manager.post(&path, &lot).await);
    }
    let id = approved(&house, "26-330", days(today(), 1)).await;
    // Good on the day it is brewed.
    assert_eq!(kinds(&batch(&house, "26-330").await), [""; 0]);
    let late = approved(&house, "26-331", days(today(), 2)).await;
    let found = batch(&house, "26-331").await;
    let used: std::collections::BTreeSet<String> = house
        .doses(&late)
        .await
        .iter()
        .map(|dose| dose["material"].to_string())
        .collect();
    assert_eq!(kinds(&found), vec!["fresh_lot"; used.len()]);
    let words = found["missing"][0]["words"].as_str().unwrap();
    assert!(words.contains("lot OLD-1, was good until"), "{words}");
    for dose in house.doses(&late).await {
        let path = format!("/plans/{late}/doses/{}", dose["id"].as_str().unwrap());
        house
            .manager
            .put(&path, &json!({"actual": dose["planned"]}))
            .await;
    }
    assert_eq!(kinds(&batch(&house, "26-331").await), [""; 0]);
    assert_ne!(id, late);
}

#[tokio::test]
async fn a_batch_of_today_asks_for_a_meter_and_for_its_calibration_until_it_was_read() {
    let house = Brewhouse::build().await;
    let id = approved(&house, "26-350", today()).await;
    approved(&house, "26-351", days(today(), 1)).await;
    let meter_of = async |number: &str| {
        let found = batch(&house, number).await;
        let missing = found["missing"].as_array().unwrap().clone();
        missing.into_iter().find(|it| it["kind"] == "meter")
    };
    assert!(meter_of("26-350").await.is_none(), "calibrated just now");
    let retired =
        json!({"name": "Bench meter", "kind": "bench", "compensated": true, "in_use": false});
    let path = format!("/meters/{}", house.meter);
    assert_eq!(house.manager.put(&path, &retired).await.status, 200);
    let none = meter_of("26-350").await.unwrap();
    assert!(
        none["words"]
            .as_str()
            .unwrap()
            .contains("No pH meter is listed")
    );
    assert_eq!(none["stops"], false);
    assert!(meter_of("26-351").await.is_none(), "calibrated on the day");
    let meter = json!({"name": "Old", "kind": "bench", "resolution_ph": 0.01, "compensated": true, "in_use": true});
    let meter = crate::brewhouse::made(&house.manager.post("/meters", &meter).await);
    let stale = meter_of("26-350").await.unwrap();
    assert!(
        stale["words"]
            .as_str()
            .unwrap()
            .contains("calibrated within 24 hours")
    );
    let brewer = house.desk.browser("brewer").await;
    let link = format!(".missing a[href=\"/meters/{meter}/calibrations/new\"]");
    let page = brewer.open("/").await;
    assert_eq!(page.texts(&link), ["Calibrate it"]);
    let form = brewer
        .open(&format!("/meters/{meter}/calibrations/new"))
        .await;
    assert_eq!(form.status, 200);
    house.calibrate(&meter, "", 97.0).await;
    let found = batch(&house, "26-350").await;
    assert!(!kinds(&found).contains(&"meter"), "{found}");
    assert_ne!(id, meter);
}

#[tokio::test]
async fn what_is_on_the_shelf_goes_to_the_batch_that_is_brewed_first() {
    let house = tested(10).await;
    let first = approved(&house, "26-360", days(today(), 1)).await;
    let plan = house.plan(&first).await;
    let acid: f64 = house
        .doses(&first)
        .await
        .iter()
        .filter(|dose| dose["unit"] == "mL")
        .map(|dose| dose["planned"].as_f64().unwrap())
        .sum();
    assert!(acid > 0.0, "{plan}");
    approved(&house, "26-361", days(today(), 2)).await;
    let all = house.manager.get("/materials").await.body;
    let lactic = all["items"]
        .as_array()
        .unwrap()
        .iter()
        .find(|it| it["name"] == "Lactic acid");
    let lots = format!(
        "/materials/{}/lots",
        lactic.unwrap()["id"].as_str().unwrap()
    );
    let lot = json!({"code": "LA-1", "current": true, "in_use": true});
    let lot = crate::brewhouse::made(&house.manager.post(&lots, &lot).await);
    // Never counted: nobody knows that it is short.
    assert_eq!(kinds(&batch(&house, "26-361").await), [""; 0]);
    let delivery = json!({"kind": "delivery", "amount_g_or_ml": acid * 1.5});
    let movements = format!("{lots}/{lot}/movements");
    crate::brewhouse::made(&house.manager.post(&movements, &delivery).await);
    assert_eq!(kinds(&batch(&house, "26-360").await), [""; 0]);
    let short = batch(&house, "26-361").await;
    assert_eq!(kinds(&short), ["material"]);
    let words = short["missing"][0]["words"].as_str().unwrap();
    assert!(
        words.starts_with("Lactic acid is short: it takes "),
        "{words}"
    );
    let half = format!("and {:.0} mL are left for it.", acid / 2.0);
    assert!(words.ends_with(&half), "{words} {half}");
    crate::brewhouse::made(&house.manager.post(&movements, &delivery).await);
    assert_eq!(kinds(&batch(&house, "26-361").await), [""; 0]);
}

#[tokio::test]
async fn while_another_revision_is_drafted_that_is_what_comes_next() {
    let house = tested(10).await;
    let id = approved(&house, "26-340", today()).await;
    let answer = house
        .manager
        .post(&format!("/plans/{id}/revisions"), &json!({}))
        .await;
    let revision = crate::brewhouse::made(&answer);
    let day = brew_day(&house).await;
    let old = day["batches"]
        .as_array()
        .unwrap()
        .iter()
        .find(|it| it["plan_id"] == id.as_str());
    let old = old.unwrap();
    assert_eq!(old["next"]["kind"], "decide_on_revision");
    assert_eq!(kinds(old), ["revision"]);
    assert_eq!(old["missing"][0]["stops"], true);
    let qa = house.desk.browser("qa").await;
    let (_, address) = button(&qa.open("/").await, "26-340");
    assert_eq!(address, format!("/plans/{revision}#approval"));
}

#[tokio::test]
async fn of_many_late_drafts_the_latest_are_shown_and_the_others_counted() {
    let house = tested(10).await;
    for back in 1..=10 {
        draft(&house, &format!("L-{back:02}"), days(today(), -back)).await;
    }
    let day = brew_day(&house).await;
    let numbers: Vec<&str> = day["batches"]
        .as_array()
        .unwrap()
        .iter()
        .map(|it| it["batch"].as_str().unwrap())
        .collect();
    assert_eq!(
        numbers,
        [
            "L-01", "L-02", "L-03", "L-04", "L-05", "L-06", "L-07", "L-08"
        ]
    );
    assert_eq!(day["more_late"], 2);
    let brewer = house.desk.browser("brewer").await;
    let page = brewer.open("/").await;
    assert_eq!(page.texts(".more a"), ["2 more, from before that"]);
    let withdrawn = draft(&house, "L-99", days(today(), -1)).await;
    let path = format!("/plans/{withdrawn}/withdrawal");
    house
        .manager
        .post(&path, &json!({"reason": "No barley."}))
        .await;
    let list = brewer.open("/plans?order=earliest&state=open").await;
    let numbers = list.texts("tbody th");
    assert_eq!(numbers.len(), 10, "{numbers:?}");
    assert!(
        numbers[0].contains("L-10") && numbers[9].contains("L-01"),
        "{numbers:?}"
    );
    let open = house.manager.get("/plans?state=open&limit=100").await;
    assert_eq!(open.body["items"].as_array().unwrap().len(), 10);
    assert!(page.words().contains("Yesterday"), "{}", page.words());
}

#[tokio::test]
async fn a_new_brewery_is_told_where_to_begin_and_an_idle_one_what_waits_here() {
    let desk = Desk::start().await;
    let manager = desk.browser("manager").await;
    let first = manager.open("/").await;
    assert_eq!(
        first.texts(".empty .actions a"),
        ["1. Sources", "2. Shelf", "3. Malts", "4. Beers"]
    );
    let house = tested(10).await;
    let brewer = house.desk.browser("brewer").await;
    let idle = brewer.open("/").await;
    assert_eq!(
        idle.texts(".empty .actions a"),
        ["Draft a plan", "Earlier plans"]
    );
}

#[tokio::test]
async fn the_brew_day_is_read_by_programs_that_may_read_and_by_no_others() {
    let desk = Desk::start().await;
    let reader = desk.program("brewer", &[Scope::Read]).await;
    let answer = reader.get("/brew-day").await;
    assert_eq!(answer.status, 200);
    assert_eq!(answer.body["on"], today().to_string());
    assert_eq!(answer.body["batches"], json!([]));
    let other = desk.program("brewer", &[Scope::Tests]).await;
    assert_eq!(other.get("/brew-day").await.status, 403);
    let stranger = reqwest::get(format!("{}/api/v1/brew-day", desk.address))
        .await
        .unwrap();
    assert_eq!(stranger.status(), 401);
}
