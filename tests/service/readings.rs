//! Readings of the mash: meters, repeats, slips, steps and what they do.

use reqwest::StatusCode;
use serde_json::{Value, json};

use crate::brewhouse::{Brewhouse, made};
use crate::desk::{Answer, Seen};

pub fn advised(answer: &Answer) -> &Value {
    assert_eq!(answer.status, 201, "{:?}", answer.body);
    &answer.body["advised"]
}

pub fn number(value: &Value) -> f64 {
    value
        .as_f64()
        .unwrap_or_else(|| panic!("no number: {value}"))
}

impl Brewhouse {
    pub async fn material(&self, name: &str, substance: &str, vessels: Value) -> String {
        let material = json!({"name": name, "substance": substance, "scale_step_g_or_ml": 5, "vessels": vessels, "in_use": true});
        made(&self.manager.post("/materials", &material).await)
    }

    async fn meter_named(&self, name: &str) -> String {
        let meter = json!({"name": name, "kind": "handheld", "compensated": true, "in_use": true});
        made(&self.manager.post("/meters", &meter).await)
    }

    /// Gives the first step that is open, as planned.
    pub async fn give(&self, plan: &str) {
        let doses = self.doses(plan).await;
        let open = |dose: &&Value| dose["actual"].is_null();
        let step = doses.iter().find(open).expect("an open step");
        let path = format!("/plans/{plan}/doses/{}", step["id"].as_str().unwrap());
        let given = self
            .manager
            .put(&path, &json!({"actual": step["planned"]}))
            .await;
        assert_eq!(given.status, 200, "{:?}", given.body);
    }

    pub async fn page_of(&self, plan: &str, check: &Answer) -> Seen {
        let id = check.body["id"].as_str().unwrap();
        let browser = self.desk.browser("brewer").await;
        browser
            .open(&format!("/plans/{plan}/mash-checks/{id}"))
            .await
    }
}

#[tokio::test]
async fn a_reading_carries_its_meter_and_a_step_needs_a_calibration_of_the_day() {
    let house = Brewhouse::build().await;
    let id = house.dosed("26-400").await;
    let fit = house.read(&id, 5.6, 12.0).await;
    assert_eq!(advised(&fit)["advice"], "step");
    assert_eq!(fit.body["meter"], "Bench meter");
    assert_eq!(fit.body["meter_id"], house.meter.as_str());
    assert!(fit.body["calibration_id"].is_string(), "{:?}", fit.body);
    let sd = number(&fit.body["meter_sd"]);
    assert!((0.03..0.05).contains(&sd), "{sd}");

    let stale = house.meter_named("Old probe").await;
    house.calibrate(&stale, "2026-01-05T08:00:00Z", 97.0).await;
    let worn = house.meter_named("Worn probe").await;
    house.calibrate(&worn, "", 80.0).await;
    let new = house.meter_named("New probe").await;
    for (over, says) in [
        (json!({"meter_id": stale}), "24 hours"),
        (json!({"meter_id": worn}), "not fit for use"),
        (json!({"meter_id": new}), "never calibrated"),
        (
            json!({"meter_id": "", "meter": "The neighbour’s", "meter_sd": 0.02}),
            "not among the meters",
        ),
    ] {
        let mut over = over;
        (over["ph"], over["minute"]) = (json!(5.6), json!(30));
        let seen = house.read_with(&id, over).await;
        let told = advised(&seen);
        assert_eq!(
            (&told["advice"], &told["why"]),
            (&json!("read_again"), &json!("calibrate"))
        );
        assert!(told["step"].is_null(), "{told}");
        assert!(told["words"].to_string().contains(says), "{told}");
    }
    let kept = house
        .manager
        .get(&format!("/plans/{id}/mash-checks"))
        .await
        .body;
    assert_eq!(kept.as_array().unwrap().len(), 5);
    let unknown =
        json!({"meter_id": "0196a5a0-0000-7000-8000-000000000000", "ph": 5.4, "minute": 12});
    let unknown = house.read_with(&id, unknown).await;
    assert_eq!(
        (unknown.status, unknown.pointers()),
        (422, vec!["/meter_id"])
    );
}

#[tokio::test]
async fn the_form_offers_the_meter_read_last_first_with_what_it_is_worth() {
    let house = Brewhouse::build().await;
    house.meter_named("A probe").await;
    let id = house.dosed("26-401").await;
    house.read(&id, 5.42, 12.0).await;
    let brewer = house.desk.browser("brewer").await;
    let form = brewer.open(&format!("/plans/{id}/mash-checks/new")).await;
    let options = form.texts("#field-meter_id option");
    assert!(
        options[0].starts_with("Bench meter: calibrated just now, slope 97 %, ± 0.0"),
        "{options:?}"
    );
    assert_eq!(options[1..], ["A probe: not calibrated", "Another meter"]);
    // Another meter by name: kept, and offered again as it was named.
    let typed = [
        ("ph", "5,41"),
        ("minute", "16"),
        ("meter_id", "another"),
        ("meter", "Pocket meter"),
    ];
    let seen = brewer.fill(&form, &form.path, &typed).await;
    assert!(
        seen.words().contains("Calibrate the meter and read again"),
        "{}",
        seen.words()
    );
    assert!(
        seen.words().contains("Pocket meter showed 5.41"),
        "{}",
        seen.words()
    );
    let form = brewer.open(&format!("/plans/{id}/mash-checks/new")).await;
    assert_eq!(form.field("meter"), "Pocket meter");
}

#[tokio::test]
async fn repeats_within_minutes_count_together_and_share_the_error_of_their_calibration() {
    let house = Brewhouse::build().await;
    let id = house.dosed("26-402").await;
    let first = house.read(&id, 5.58, 12.0).await;
    let second = house.read(&id, 5.62, 14.0).await;
    let (one, two) = (advised(&first), advised(&second));
    assert_eq!((&one["readings"], &two["readings"]), (&json!(1), &json!(2)));
    let own = number(&one["reading_ph"]);
    assert!(
        (number(&two["reading_ph"]) - own - 0.02).abs() < 1e-3,
        "{two}"
    );
    assert!(
        (number(&two["single_ph"]) - own - 0.04).abs() < 2e-3,
        "{two}"
    );
    // Of the meter's doubt 0.02 is each reading's own and halves its variance; the rest stays.
    let sd = number(&second.body["meter_sd"]);
    let conversion = number(&one["reading_sd"]).powi(2) - sd.powi(2);
    let expected = (sd.powi(2) - 0.02f64.powi(2) / 2.0 + conversion).sqrt();
    assert!(
        (number(&two["reading_sd"]) - expected).abs() < 2e-4,
        "{two} {expected}"
    );
    let page = house.page_of(&id, &second).await;
    assert!(
        page.words().contains("The mean of 2 readings"),
        "{}",
        page.words()
    );
    // One open step: that of the mean.
    let open = house
        .doses(&id)
        .await
        .into_iter()
        .filter(|dose| dose["actual"].is_null());
    assert_eq!(open.count(), 1);
    // Later, or after something went in, a reading stands for itself.
    let later = house.read(&id, 5.59, 25.0).await;
    assert_eq!(advised(&later)["readings"], 1);
    house.give(&id).await;
    let after = house.read(&id, 5.52, 26.0).await;
    assert_eq!(advised(&after)["readings"], 1);
}

#[tokio::test]
async fn readings_that_contradict_each_other_lead_to_a_third_and_the_two_that_agree_count() {
    let house = Brewhouse::build().await;
    let id = house.dosed("26-403").await;
    house.read(&id, 5.42, 12.0).await;
    let other = house.read(&id, 5.60, 13.0).await;
    assert_eq!(
        (&advised(&other)["advice"], &advised(&other)["why"]),
        (&json!("read_again"), &json!("disagree"))
    );
    assert!(advised(&other)["step"].is_null());
    let third = house.read(&id, 5.58, 14.0).await;
    assert_eq!(advised(&third)["readings"], 2);
    assert_eq!(advised(&third)["advice"], "step");
}

#[tokio::test]
async fn a_hot_sample_is_converted_aloud_and_nothing_is_advised_on_it() {
    let house = Brewhouse::build().await;
    let id = house.dosed("26-404").await;
    let hot = house
        .read_with(&id, json!({"ph": 5.3, "minute": 15, "sample_c": 65}))
        .await;
    assert_eq!(advised(&hot)["why"], "hot");
    assert_eq!(hot.body["ph"], 5.3);
    // Worts read 0.21 to 0.26 lower at 65 °C than cooled, and ± 0.1 is allowed for the rest.
    let more = number(&advised(&hot)["reading_ph"]) - 5.3;
    assert!((0.18..0.27).contains(&more), "{more}");
    assert!(number(&advised(&hot)["reading_sd"]) > 0.1);
    let words = house.page_of(&id, &hot).await.words();
    for said in [
        "The sample was hot",
        "5.30 stays as it is",
        "Sources disagree",
        "± 0.1",
    ] {
        assert!(words.contains(said), "{said}: {words}");
    }
}

#[tokio::test]
async fn what_looks_mistyped_is_asked_about_once() {
    let house = Brewhouse::build().await;
    let id = house.dosed("26-405").await;
    for (over, pointers, says) in [
        (json!({"ph": 54, "minute": 12}), vec!["/ph"], "5.4"),
        (
            json!({"ph": 4.52, "minute": 12}),
            vec!["/ph", "/confirmed"],
            "Was it 5.42",
        ),
        (
            json!({"ph": 6.4, "minute": 12}),
            vec!["/ph", "/confirmed"],
            "is expected",
        ),
        (
            json!({"ph": 5.4, "minute": 12, "sample_c": 88}),
            vec!["/sample_c", "/confirmed"],
            "°F",
        ),
        (
            json!({"ph": 5.4, "minute": 12, "sample_c": 150}),
            vec!["/sample_c"],
            "°F",
        ),
    ] {
        let seen = house.read_with(&id, over.clone()).await;
        assert_eq!((seen.status, seen.pointers()), (422, pointers), "{over}");
        assert!(
            seen.body["detail"].as_str().unwrap().contains(says),
            "{:?}",
            seen.body
        );
    }
    let brewer = house.desk.browser("brewer").await;
    let form = brewer.open(&format!("/plans/{id}/mash-checks/new")).await;
    assert!(form.texts("[name=confirmed]").is_empty());
    let asked = brewer
        .fill(&form, &form.path, &[("ph", "6,4"), ("minute", "17")])
        .await;
    assert_eq!(asked.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert_eq!(
        (asked.field("ph"), asked.field("minute")),
        ("6,4".into(), "17".into())
    );
    let sure = brewer
        .fill(&asked, &asked.path, &[("confirmed", "true")])
        .await;
    assert!(
        sure.words().contains("Check the meter first"),
        "{}",
        sure.words()
    );
    let kept = house
        .manager
        .get(&format!("/plans/{id}/mash-checks"))
        .await
        .body;
    assert_eq!(
        (&kept[0]["ph"], &kept[0]["confirmed"]),
        (&json!(6.4), &json!(true))
    );
}

#[tokio::test]
async fn a_step_is_taken_from_what_stands_on_the_shelf_and_may_be_exchanged() {
    let house = Brewhouse::build().await;
    house
        .material("Phosphoric acid", "phosphoric_acid", json!({"mash": true}))
        .await;
    let id = house.dosed("26-406").await;
    let seen = house.read(&id, 5.6, 12.0).await;
    let step = &advised(&seen)["step"];
    let planned = step["name"].as_str().unwrap().to_owned();
    let other = &advised(&seen)["others"][0];
    assert_ne!(step["name"], other["name"]);
    // Both lead to the same place, each on the step of its own measure.
    let apart = number(&step["expected_ph"]) - number(&other["expected_ph"]);
    assert!(apart.abs() < 0.01, "{step} {other}");
    let lactate = [step, other]
        .into_iter()
        .flat_map(|it| it["adds"].as_array().unwrap());
    let lactate = lactate
        .filter(|it| it["figure"] == "Lactate")
        .collect::<Vec<_>>();
    assert_eq!(lactate.len(), 1, "only lactic acid brings lactate");
    assert_eq!(lactate[0]["high"], 500.0);
    assert!(number(&lactate[0]["after"]) > number(&lactate[0]["before"]));

    let brewer = house.desk.browser("brewer").await;
    let page = house.page_of(&id, &seen).await;
    assert!(
        page.words().contains("What it adds to the whole liquor"),
        "{}",
        page.words()
    );
    let action = format!("{}/material", page.path);
    let chosen = brewer.fill(&page, &action, &[]).await;
    assert_eq!(chosen.status, StatusCode::OK, "{}", chosen.words());
    let open = house.doses(&id).await.pop().unwrap();
    assert_eq!(open["name"], other["name"]);
    assert_eq!(open["planned"], other["amount"]);
    let book = house.manager.get("/record?limit=1").await.body;
    assert!(
        book["items"][0]["before"].to_string().contains(&planned),
        "{book}"
    );

    // What left the shelf is not offered.
    let materials = house.manager.get("/materials").await.body;
    let gone = materials["items"].as_array().unwrap().iter();
    let gone = gone
        .clone()
        .find(|it| it["name"] == planned.as_str())
        .unwrap();
    let address = format!("/materials/{}", gone["id"].as_str().unwrap());
    let mut retired = house.manager.get(&address).await.body;
    retired["in_use"] = json!(false);
    assert_eq!(house.manager.put(&address, &retired).await.status, 200);
    let again = house.read(&id, 5.6, 22.0).await;
    assert_eq!(advised(&again)["step"]["name"], other["name"]);
    assert!(advised(&again)["others"].as_array().unwrap().is_empty());
}

#[tokio::test]
async fn what_was_counted_down_to_nothing_is_not_advised() {
    let house = Brewhouse::build().await;
    let acid = house
        .material("Phosphoric acid", "phosphoric_acid", json!({"mash": true}))
        .await;
    let lots = format!("/materials/{acid}/lots");
    let lot = json!({"code": "P-1", "current": true, "in_use": true});
    let lot = made(&house.manager.post(&lots, &lot).await);
    let id = house.dosed("26-416").await;
    let offered = async |minute: f64| {
        let seen = house.read(&id, 5.6, minute).await;
        let told = advised(&seen);
        let others = told["others"].as_array().unwrap().iter();
        let names = others.chain([&told["step"]]);
        names
            .map(|it| it["name"].to_string())
            .collect::<Vec<_>>()
            .join(" ")
    };
    assert!(offered(12.0).await.contains("Phosphoric"));
    let count = json!({"kind": "count", "amount_g_or_ml": 0});
    let movements = format!("{lots}/{lot}/movements");
    made(&house.manager.post(&movements, &count).await);
    assert!(!offered(25.0).await.contains("Phosphoric"));
}

#[tokio::test]
async fn after_a_step_the_plan_the_table_and_the_chart_say_what_is_expected_now() {
    let house = Brewhouse::build().await;
    let id = house.dosed("26-407").await;
    let brewer = house.desk.browser("brewer").await;
    let plan = brewer.open(&format!("/plans/{id}")).await;
    assert!(
        plan.words().contains("% chance to lie inside the window"),
        "{}",
        plan.words()
    );
    let first = house.read(&id, 5.66, 12.0).await;
    let expected = number(&advised(&first)["step"]["expected_ph"]);
    house.give(&id).await;
    let plan = brewer.open(&format!("/plans/{id}")).await;
    assert!(
        plan.words()
            .contains(&format!("the mash is expected at {expected:.2} ±")),
        "{}",
        plan.words()
    );
    let second = house.read(&id, 5.52, 24.0).await;
    assert!((number(&advised(&second)["expected_now_ph"]) - expected).abs() < 0.01);
    let page = house.page_of(&id, &second).await;
    assert!(
        page.words()
            .contains(&format!("expected after the step {expected:.2}")),
        "{}",
        page.words()
    );
    let curve = page.text.split("class=\"curve\"").nth(1).expect("a curve");
    let label = curve
        .split("aria-label=\"")
        .nth(1)
        .unwrap()
        .split('"')
        .next()
        .unwrap();
    for said in [
        "Window 5.30 to 5.50, target 5.40",
        "Read 5.6",
        "at minute 12, 0 mL given",
        "at minute 24",
    ] {
        assert!(label.contains(said), "{said}: {label}");
    }
    let plan = brewer.open(&format!("/plans/{id}")).await;
    assert!(
        plan.words()
            .contains(&format!("{expected:.2} after the step")),
        "{}",
        plan.words()
    );
}

#[tokio::test]
async fn the_wait_ends_at_a_moment_the_server_set_and_without_scripts_it_is_a_time_of_day() {
    let house = Brewhouse::build().await;
    let id = house.dosed("26-408").await;
    let seen = house.read(&id, 5.6, 12.0).await;
    house.give(&id).await;
    let given = house.doses(&id).await.pop().unwrap()["weighed_at"]
        .as_str()
        .unwrap()
        .to_owned();
    let given: jiff::Timestamp = given.parse().unwrap();
    let page = house.page_of(&id, &seen).await;
    let ends = page
        .text
        .split("data-timer-ends=\"")
        .nth(1)
        .expect("a timer");
    let ends: jiff::Timestamp = ends.split('"').next().unwrap().parse().unwrap();
    assert_eq!(ends.as_millisecond() - given.as_millisecond(), 600_000);
    assert!(page.words().contains("Read again at "), "{}", page.words());
}

#[tokio::test]
async fn where_something_is_still_to_go_in_the_big_button_leads_to_the_weigh_out() {
    let house = Brewhouse::build().await;
    let id = house.approved("26-409").await;
    let seen = house.read(&id, 5.8, 12.0).await;
    assert_eq!(advised(&seen)["why"], "weigh_in_first");
    let page = house.page_of(&id, &seen).await;
    assert!(page.text.contains(&format!(
        "class=\"button primary large\" href=\"/plans/{id}/weigh-out\""
    )));
}
