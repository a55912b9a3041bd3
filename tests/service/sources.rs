//! Sources, water tests and today's water.

use leat::people::Scope;
use serde_json::{Value, json};

use crate::desk::{Desk, Program};

/// A mains water whose ions balance.
///
/// Source: none; the figures were chosen so that cations and anions are 4.57 meq/L
/// by hand: Ca 60/20.039 + Mg 10/12.1525 + Na 16/22.99 + K 2/39.098 = 4.564; alkalinity
/// 150/50.043 + Cl 28/35.45 + SO₄ 30/48.028 + NO₃ 9/62.004 = 4.557.
fn balanced() -> Value {
    json!({
        "sampled_on": "2026-03-02",
        "laboratory": "Fen Analytical",
        "reference": "26-114",
        "readings": [
            {"analyte": "calcium", "value": "60", "unit": "mg_per_l"},
            {"analyte": "magnesium", "value": "10", "unit": "mg_per_l"},
            {"analyte": "sodium", "value": "16", "unit": "mg_per_l"},
            {"analyte": "potassium", "value": "2", "unit": "mg_per_l"},
            {"analyte": "alkalinity", "value": "150", "unit": "mg_per_l_as_caco3"},
            {"analyte": "chloride", "value": "28", "unit": "mg_per_l"},
            {"analyte": "sulfate", "value": "30", "unit": "mg_per_l"},
            {"analyte": "nitrate", "value": "9", "unit": "mg_per_l"},
            {"analyte": "ph", "value": "7.6", "unit": "ph"},
        ],
    })
}

/// The same body with one line changed.
fn with(mut body: Value, analyte: &str, value: &str, unit: &str) -> Value {
    let lines = body["readings"].as_array_mut().unwrap();
    lines.retain(|line| line["analyte"] != analyte);
    if !value.is_empty() {
        lines.push(json!({"analyte": analyte, "value": value, "unit": unit}));
    }
    body
}

async fn mains(program: &Program) -> String {
    let body = json!({"name": "Town mains", "kind": "mains", "days_between_tests": 90, "price_per_m3": "2,10"});
    let made = program.post("/sources", &body).await;
    assert_eq!(made.status, 201, "{:?}", made.body);
    assert_eq!(made.body["price_per_m3"], 2.1);
    let id = made.body["id"].as_str().unwrap().to_owned();
    assert_eq!(
        made.location.as_deref(),
        Some(format!("/api/v1/sources/{id}").as_str())
    );
    id
}

fn figure<'a>(todays: &'a Value, analyte: &str) -> &'a Value {
    let figures = todays["figures"].as_array().unwrap();
    let mut found = figures.iter().filter(|f| f["analyte"] == analyte);
    found
        .next()
        .unwrap_or_else(|| panic!("no {analyte} in {todays}"))
}

#[tokio::test]
async fn a_report_in_printed_units_comes_back_letter_by_letter_and_in_mg_per_litre() {
    let desk = Desk::start().await;
    let program = desk.full_program("qa").await;
    let id = mains(&program).await;
    // 3.1 °dH of alkalinity is 3.1 × 17.848 = 55.33 mg/L as CaCO₃; 2.0 mg/L as N is
    // 2 × 4.4268 = 8.854 mg/L NO₃ (printed conversion tables).
    let body = with(balanced(), "alkalinity", "3,1", "dh");
    let body = with(body, "nitrate", "2.0", "mg_per_l_as_n");
    let mut body = with(body, "iron", "<0.05", "mg_per_l");
    body["keep_although_it_does_not_add_up"] = json!(true);
    let made = program
        .post(&format!("/sources/{id}/water-tests"), &body)
        .await;
    assert_eq!(made.status, 201, "{:?}", made.body);
    let read = program
        .get(&format!(
            "/water-tests/{}",
            made.body["id"].as_str().unwrap()
        ))
        .await;
    let line = |analyte: &str| {
        let lines = read.body["readings"].as_array().unwrap();
        let mut found = lines.iter().filter(|line| line["analyte"] == analyte);
        found.next().unwrap().clone()
    };
    assert_eq!(line("alkalinity")["value"], "3,1");
    assert_eq!(line("alkalinity")["unit"], "dh");
    assert_eq!(line("iron")["value"], "<0.05");
    assert_eq!(line("iron")["method"], "laboratory");
    let figures = read.body["assessment"].clone();
    let near = |analyte: &str, expected: f64| {
        let value = figure(&figures, analyte)["value"].as_f64().unwrap();
        assert!((value / expected - 1.0).abs() < 1e-3, "{analyte} {value}");
    };
    near("alkalinity", 55.33);
    near("nitrate", 8.854);
    assert_eq!(figure(&figures, "iron")["qualifier"], "below");
}

#[tokio::test]
async fn todays_water_of_one_test_is_that_test_with_what_was_not_tested_said_to_be_assumed() {
    let desk = Desk::start().await;
    let program = desk.full_program("qa").await;
    let id = mains(&program).await;
    let none = program.get(&format!("/sources/{id}/todays-water")).await;
    assert_eq!(none.status, 409);
    assert!(none.body["detail"].as_str().unwrap().contains("Town mains"));

    let mut body = with(balanced(), "potassium", "", "");
    body["sampled_on"] = json!(leat::web::format::today("UTC"));
    let made = program
        .post(&format!("/sources/{id}/water-tests"), &body)
        .await;
    assert_eq!(made.status, 201, "{:?}", made.body);
    assert_eq!(made.body["assessment"]["verdict"], "adds_up");
    let todays = program.get(&format!("/sources/{id}/todays-water")).await;
    assert_eq!(todays.status, 200, "{:?}", todays.body);
    let calcium = figure(&todays.body, "calcium");
    assert!((calcium["value"].as_f64().unwrap() - 60.0).abs() < 1e-6);
    assert_eq!(
        (&calcium["how"], &calcium["age_days"]),
        (&json!("laboratory"), &json!(0))
    );
    // A laboratory's calcium: 2.5 % and 0.1 mg/L, the statistics' default.
    let sd = calcium["sd"].as_f64().unwrap();
    assert!((1.4..1.7).contains(&sd), "{sd}");
    let potassium = figure(&todays.body, "potassium");
    assert_eq!(potassium["how"], "assumed");
    let assumed = todays.body["assumed"].to_string();
    assert!(assumed.contains("Potassium was not reported"), "{assumed}");
    // 150 mg/L as CaCO₃ is 150/50.043 meq/L; at pH 7.6 about 6 % more carbon than that.
    let alkalinity = todays.body["alkalinity_meq_per_l"].as_f64().unwrap();
    assert!((alkalinity - 2.9974).abs() < 1e-3, "{alkalinity}");
    let carbon = todays.body["carbon_mmol_per_l"].as_f64().unwrap();
    assert!((1.03..1.09).contains(&(carbon / alkalinity)), "{carbon}");
}

#[tokio::test]
async fn nitrate_typed_on_the_wrong_basis_is_asked_about_and_kept_only_with_a_tick() {
    let desk = Desk::start().await;
    let program = desk.full_program("qa").await;
    let id = mains(&program).await;
    // 41 mg/L of nitrate typed as nitrogen would be 181 mg/L: 2.3 meq/L too many anions.
    let right = with(balanced(), "calcium", "70.3", "mg_per_l");
    let right = with(right, "nitrate", "41", "mg_per_l");
    let wrong = with(right.clone(), "nitrate", "41", "mg_per_l_as_n");
    let check = program.post("/water-test-checks", &right).await;
    assert_eq!(check.body["verdict"], "adds_up", "{:?}", check.body);
    let check = program.post("/water-test-checks", &wrong).await;
    assert_eq!(check.status, 200);
    assert_eq!(check.body["verdict"], "does_not_add_up");
    let bases: Vec<_> = check.body["findings"]
        .as_array()
        .unwrap()
        .iter()
        .filter(|finding| finding["kind"] == "basis")
        .collect();
    assert!(
        bases
            .iter()
            .any(|finding| finding["analytes"] == json!(["nitrate"])),
        "{bases:?}"
    );

    let tests = format!("/sources/{id}/water-tests");
    let refused = program.post(&tests, &wrong).await;
    assert_eq!(refused.status, 422);
    assert_eq!(refused.pointers(), ["/keep_although_it_does_not_add_up"]);
    let mut ticked = wrong;
    ticked["keep_although_it_does_not_add_up"] = json!(true);
    let kept = program.post(&tests, &ticked).await;
    assert_eq!(kept.status, 201, "{:?}", kept.body);
    assert_eq!(kept.body["trust"], "does_not_add_up");
    assert_eq!(kept.body["counts"], false);
    let todays = format!("/sources/{id}/todays-water");
    assert_eq!(program.get(&todays).await.status, 409);

    // Somebody may trust it all the same, and has to say why.
    let test = format!("/water-tests/{}", kept.body["id"].as_str().unwrap());
    let silent = program.post(&format!("{test}/trust"), &json!({})).await;
    assert_eq!(silent.pointers(), ["/reason"]);
    let trusted = program
        .post(
            &format!("{test}/trust"),
            &json!({"reason": "The laboratory confirmed it"}),
        )
        .await;
    assert_eq!(trusted.body["trust"], "trusted_despite");
    assert_eq!(program.get(&todays).await.status, 200);
}

#[tokio::test]
async fn a_test_is_corrected_with_a_reason_and_withdrawn_but_never_gone() {
    let desk = Desk::start().await;
    let program = desk.full_program("qa").await;
    let id = mains(&program).await;
    let tests = format!("/sources/{id}/water-tests");
    let made = program.post(&tests, &balanced()).await;
    let test = format!("/water-tests/{}", made.body["id"].as_str().unwrap());
    let mut corrected = with(balanced(), "calcium", "61", "mg_per_l");
    let silent = program.put(&test, &corrected).await;
    assert_eq!(silent.pointers(), ["/correction_reason"]);
    corrected["correction_reason"] = json!("A slip of typing");
    let stale = program
        .send("PUT", &test, Some(&corrected), &[("if-match", "\"7\"")])
        .await;
    assert_eq!(stale.status, 409);
    let saved = program
        .send("PUT", &test, Some(&corrected), &[("if-match", "\"1\"")])
        .await;
    assert_eq!((saved.status, saved.etag.as_deref()), (200, Some("\"2\"")));

    let withdrawal = format!("{test}/withdrawal");
    let silent = program.post(&withdrawal, &json!({"reason": " "})).await;
    assert_eq!(silent.pointers(), ["/reason"]);
    let gone = program
        .post(&withdrawal, &json!({"reason": "Bottle mixed up"}))
        .await;
    assert_eq!(gone.status, 200);
    assert_eq!(gone.body["counts"], false);
    assert_eq!(program.put(&test, &corrected).await.status, 409);
    assert_eq!(
        program.get(&tests).await.body["items"]
            .as_array()
            .unwrap()
            .len(),
        1
    );
    let back = program.send("DELETE", &withdrawal, None, &[]).await;
    assert_eq!((back.status, &back.body["counts"]), (200, &json!(true)));

    let record = program.get("/record").await;
    let actions: Vec<_> = record.body["items"]
        .as_array()
        .unwrap()
        .iter()
        .filter(|entry| entry["subject_kind"] == "water test")
        .map(|entry| entry["action"].as_str().unwrap().to_owned())
        .collect();
    assert_eq!(actions, ["restored", "withdrawn", "corrected", "created"]);
    let corrected = record.body["items"]
        .as_array()
        .unwrap()
        .iter()
        .find(|entry| entry["action"] == "corrected");
    let corrected = corrected.unwrap();
    assert_eq!(corrected["reason"], "A slip of typing");
    assert!(
        corrected["before"]["readings"]
            .to_string()
            .contains("\"60\"")
    );
}

#[tokio::test]
async fn magnesium_is_worked_out_only_where_somebody_accepts_it() {
    let desk = Desk::start().await;
    let program = desk.full_program("qa").await;
    let id = mains(&program).await;
    let tests = format!("/sources/{id}/water-tests");
    // 60 mg/L of calcium is 149.8 as CaCO₃; 191 in all leaves 41.2, or 10.0 mg/L of magnesium
    // (Standard Methods 2340 B: 2.497 and 4.118).
    let mut body = with(balanced(), "magnesium", "", "");
    body = with(body, "total_hardness", "191", "mg_per_l_as_caco3");
    let made = program.post(&tests, &body).await;
    assert_eq!(made.status, 201, "{:?}", made.body);
    let todays = format!("/sources/{id}/todays-water");
    let lacking = program.get(&todays).await;
    assert_eq!(lacking.status, 409);
    assert!(
        lacking.body["detail"]
            .as_str()
            .unwrap()
            .contains("magnesium")
    );
    let offers = made.body["assessment"]["inferences"].clone();
    let offer = offers.as_array().unwrap()[0].clone();
    assert_eq!(
        (&offer["analyte"], &offer["kind"]),
        (&json!("magnesium"), &json!("rest_of_hardness"))
    );

    body["accepted"] = json!({"magnesium": "rest_of_hardness"});
    body["correction_reason"] = json!("Accepted");
    let test = format!("/water-tests/{}", made.body["id"].as_str().unwrap());
    assert_eq!(program.put(&test, &body).await.status, 200);
    let known = program.get(&todays).await;
    let magnesium = figure(&known.body, "magnesium");
    assert!(
        (magnesium["value"].as_f64().unwrap() - 10.0).abs() < 0.05,
        "{magnesium}"
    );
    assert_eq!(magnesium["how"], "rest_of_hardness");

    // What the lines do not offer cannot be accepted.
    body["accepted"] = json!({"sodium": "balance"});
    assert_eq!(
        program.put(&test, &body).await.pointers(),
        ["/accepted/sodium"]
    );
}

#[tokio::test]
async fn a_kit_test_of_one_figure_moves_that_figure_and_no_other() {
    let desk = Desk::start().await;
    let program = desk.full_program("qa").await;
    let id = mains(&program).await;
    let tests = format!("/sources/{id}/water-tests");
    program.post(&tests, &balanced()).await;
    let kit = json!({"sampled_on": "2026-04-10", "laboratory": "Kit", "method": "drop_kit", "drop_mg_per_l_as_caco3": 10,
        "readings": [{"analyte": "alkalinity", "value": 170, "unit": "mg_per_l_as_caco3"}]});
    let no_drop = {
        let mut body = kit.clone();
        body["drop_mg_per_l_as_caco3"] = json!("");
        program.post(&tests, &body).await
    };
    assert_eq!(no_drop.pointers(), ["/readings/0/value"]);
    let made = program.post(&tests, &kit).await;
    assert_eq!(made.status, 201, "{:?}", made.body);
    let todays = program.get(&format!("/sources/{id}/todays-water")).await;
    let alkalinity = figure(&todays.body, "alkalinity");
    let value = alkalinity["value"].as_f64().unwrap();
    assert!((151.0..170.0).contains(&value), "{value}");
    assert_eq!(alkalinity["how"], "drop_kit");
    let calcium = figure(&todays.body, "calcium");
    assert!((calcium["value"].as_f64().unwrap() - 60.0).abs() < 1e-6);
    assert_eq!(todays.body["latest_sample_on"], "2026-04-10");
}

#[tokio::test]
async fn averages_are_what_to_expect_and_no_sample_of_any_day() {
    let desk = Desk::start().await;
    let program = desk.full_program("qa").await;
    let id = mains(&program).await;
    let tests = format!("/sources/{id}/water-tests");
    let averages = with(balanced(), "magnesium", "", "");
    let mut averages = with(averages, "total_hardness", "191", "mg_per_l_as_caco3");
    averages["accepted"] = json!({"magnesium": "rest_of_hardness"});
    averages["sample_kind"] = json!("average");
    averages["sampled_on"] = json!("2020-12-31");
    assert_eq!(program.post(&tests, &averages).await.status, 201);
    let todays = format!("/sources/{id}/todays-water");
    let before = program.get(&todays).await;
    let calcium = figure(&before.body, "calcium");
    assert_eq!(calcium["how"], "average");
    assert_eq!(calcium["age_days"], Value::Null);
    let magnesium = figure(&before.body, "magnesium");
    assert_eq!(magnesium["how"], "rest_of_hardness");
    assert_eq!(magnesium["age_days"], Value::Null);
    // 20 % of 60 mg/L within a year, and the laboratory's 2.5 %: 12.1; it does not age.
    let sd = calcium["sd"].as_f64().unwrap();
    assert!((11.9..12.3).contains(&sd), "{sd}");

    let mut sample = balanced();
    sample["sampled_on"] = json!(leat::web::format::today("UTC"));
    let sample = with(sample, "calcium", "66", "mg_per_l");
    assert_eq!(program.post(&tests, &sample).await.status, 201);
    let after = program.get(&todays).await;
    let calcium = figure(&after.body, "calcium");
    // Between the two, nearly all of the sample: 1.6² against 12.1².
    let value = calcium["value"].as_f64().unwrap();
    assert!((65.5..66.0).contains(&value), "{value}");
    assert_eq!(calcium["how"], "laboratory");
}

#[tokio::test]
async fn bad_lines_are_named_one_by_one() {
    let desk = Desk::start().await;
    let program = desk.full_program("qa").await;
    let id = mains(&program).await;
    let tests = format!("/sources/{id}/water-tests");
    for (value, unit) in [
        (json!("NaN"), "mg_per_l"),
        (json!(1e308), "mg_per_l"),
        (json!("1e308"), "mg_per_l"),
        (json!(-3), "mg_per_l"),
        (json!("n.d."), "mg_per_l"),
        (json!("1.2.3"), "mg_per_l"),
        (json!("12"), "ph"),
        (json!("12"), "furlongs"),
    ] {
        let mut body = balanced();
        body["readings"][2] = json!({"analyte": "sodium", "value": value, "unit": unit});
        let refused = program.post(&tests, &body).await;
        assert_eq!(refused.status, 422, "{value} {unit}");
        let pointers = refused.pointers();
        assert!(
            pointers.len() == 1 && pointers[0].starts_with("/readings/2/"),
            "{value} {unit}: {pointers:?}"
        );
    }
    let twice = {
        let mut body = balanced();
        body["readings"][1] = body["readings"][0].clone();
        program.post(&tests, &body).await
    };
    assert_eq!(twice.pointers(), ["/readings/1/value"]);
    for (date, _why) in [
        ("2199-01-01", "future"),
        ("31.3.2026", "shape"),
        ("", "blank"),
    ] {
        let mut body = balanced();
        body["sampled_on"] = json!(date);
        let refused = program.post(&tests, &body).await;
        assert!(refused.pointers().contains(&"/sampled_on"), "{date}");
    }
    let empty = json!({"sampled_on": "2026-03-02"});
    assert_eq!(program.post(&tests, &empty).await.pointers(), ["/readings"]);
}

#[tokio::test]
async fn who_may_not_enter_tests_is_refused_by_the_api() {
    let desk = Desk::start().await;
    let qa = desk.full_program("qa").await;
    let id = mains(&qa).await;
    let brewer = desk.full_program("brewer").await;
    let reader = desk.program("qa", &[Scope::Read]).await;
    for program in [&brewer, &reader] {
        let source = json!({"name": "Well", "kind": "borehole", "days_between_tests": 90});
        assert_eq!(program.post("/sources", &source).await.status, 403);
        let tests = format!("/sources/{id}/water-tests");
        assert_eq!(program.post(&tests, &balanced()).await.status, 403);
        assert_eq!(program.get(&tests).await.status, 200);
    }
    let nowhere = "/sources/01890000-0000-7000-8000-000000000000/water-tests";
    assert_eq!(qa.post(nowhere, &balanced()).await.status, 404);
}

#[tokio::test]
async fn a_source_keeps_its_name_to_itself_and_refuses_what_no_source_is() {
    let desk = Desk::start().await;
    let program = desk.full_program("qa").await;
    let id = mains(&program).await;
    let twice = json!({"name": "town MAINS", "kind": "mains", "days_between_tests": 30});
    let refused = program.post("/sources", &twice).await;
    assert_eq!((refused.status, refused.pointers()), (422, vec!["/name"]));
    let bad =
        json!({"name": " ", "kind": "sea", "days_between_tests": "1.5", "price_per_m3": "NaN"});
    let refused = program.post("/sources", &bad).await;
    assert_eq!(
        refused.pointers(),
        ["/name", "/kind", "/price_per_m3", "/days_between_tests"]
    );
    let path = format!("/sources/{id}");
    let mut body = program.get(&path).await.body;
    body["in_use"] = json!(false);
    let retired = program
        .send("PUT", &path, Some(&body), &[("if-match", "\"1\"")])
        .await;
    assert_eq!(
        (retired.status, &retired.body["in_use"]),
        (200, &json!(false))
    );
    let stale = program
        .send("PUT", &path, Some(&body), &[("if-match", "\"1\"")])
        .await;
    assert_eq!(stale.status, 409);
}
