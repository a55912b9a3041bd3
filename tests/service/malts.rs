//! Malts, their lots and titrations: through the pages and through the API.

use chemistry::mash::{Behaviour, Groups};
use chemistry::quantity::{Estimate, Ph, RelativeBuffering};
use serde_json::{Value, json};

use leat::brewery::{Settings, Units};
use reqwest::StatusCode;

use crate::desk::{Answer, Desk, Program, offered};

fn pale() -> Value {
    json!({"name": "Pale", "class": "pale_ale", "colour": "5,5", "in_use": true})
}

async fn added(program: &Program, body: &Value) -> Answer {
    let answer = program.post("/malts", body).await;
    assert_eq!(answer.status, 201, "{:?}", answer.body);
    answer
}

fn path(answer: &Answer) -> String {
    let location = answer.location.as_deref().unwrap();
    location.strip_prefix("/api/v1").unwrap().to_owned()
}

/// Jars of 50 g with 0.1 meq/mL acid and base, as a malt of pH 5.80 and 1.10 times the
/// usual buffering would answer: the millilitres that bring it to each pH.
fn jars() -> Vec<Value> {
    let malt = Behaviour::Groups(Groups::new(
        Estimate::new(Ph::constant(5.80), 0.0),
        Estimate::new(RelativeBuffering::constant(1.10), 0.0),
    ));
    [5.80, 5.60, 5.40, 5.20, 6.00]
        .into_iter()
        .map(|ph| {
            let meq_per_kg = malt.acid_demand(Ph::new(ph).unwrap()).get();
            let ml = format!("{:.3}", (meq_per_kg * 0.050 / 0.1).abs());
            let field = if meq_per_kg < 0.0 {
                "base_ml"
            } else {
                "acid_ml"
            };
            json!({field: ml, "ph": format!("{ph:.2}").replace('.', ",")})
        })
        .collect()
}

fn titration() -> Value {
    json!({
        "tested_on": "2026-02-03", "malt_g": 50, "acid_meq_per_ml": "0,1",
        "base_meq_per_ml": 0.1, "jars": jars(),
    })
}

#[tokio::test]
async fn what_is_known_of_a_malt_grows_from_class_to_sheet_to_titration_and_back() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let malt = added(&program, &pale()).await;
    let known = |body: &Value| {
        let behaviour = &body["behaviour"];
        (
            behaviour["how_known"].as_str().unwrap().to_owned(),
            behaviour["distilled_ph"].as_f64().unwrap(),
            behaviour["distilled_ph_sd"].as_f64().unwrap(),
        )
    };
    assert_eq!(
        known(&malt.body),
        ("class default, assumed".into(), 5.73, 0.10)
    );

    let lots = format!("{}/lots", path(&malt));
    let sheet = json!({"code": "L1", "wort_ph": "5,95", "current": true, "in_use": true});
    let lot = program.post(&lots, &sheet).await;
    assert_eq!(lot.status, 201, "{:?}", lot.body);
    // The distilled-water pH is 0.10 below the wort pH of a sheet, give or take 0.07.
    let (how, ph, sd) = known(&lot.body);
    assert_eq!((how.as_str(), sd), ("sheet of the lot", 0.07));
    assert!((ph - 5.85).abs() < 1e-9);

    let place = path(&lot);
    let titrated = program
        .post(&format!("{place}/titrations"), &titration())
        .await;
    assert_eq!(titrated.status, 201, "{:?}", titrated.body);
    let (how, ph, sd) = known(&titrated.body);
    assert_eq!(how, "titrated lot");
    // Readings rounded to two decimals and millilitres to three.
    assert!((ph - 5.80).abs() < 0.005, "{ph}");
    assert!(sd > 0.01 && sd < 0.03, "{sd}");
    let buffering = titrated.body["behaviour"]["relative_buffering"]
        .as_f64()
        .unwrap();
    assert!((buffering - 1.10).abs() < 0.01, "{buffering}");
    let kept = &titrated.body["titrations"][0];
    assert_eq!(kept["jars"][1]["ph"], "5,60");

    let id = kept["id"].as_str().unwrap();
    let withdrawal = format!("{place}/titrations/{id}/withdrawal");
    let silent = program.post(&withdrawal, &json!({})).await;
    assert_eq!(silent.pointers(), ["/reason"]);
    let back = program
        .post(&withdrawal, &json!({"reason": "Old buffers"}))
        .await;
    assert_eq!(known(&back.body).0, "sheet of the lot");
    assert_eq!(back.body["titrations"][0]["jars"][1]["ph"], "5,60");
    let again = program
        .post(&withdrawal, &json!({"reason": "Old buffers"}))
        .await;
    assert_eq!(again.status, 409);
}

#[tokio::test]
async fn jars_once_entered_cannot_be_rewritten_even_at_a_console() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let malt = added(&program, &pale()).await;
    let lots = format!("{}/lots", path(&malt));
    let lot = program
        .post(&lots, &json!({"code": "L1", "in_use": true}))
        .await;
    program
        .post(&format!("{}/titrations", path(&lot)), &titration())
        .await;
    let mut tx = desk.app.db.begin_unkeyed().await.unwrap();
    for statement in [
        "UPDATE malt_titration_jars SET ph = 5.0",
        "DELETE FROM malt_titration_jars",
        "UPDATE malt_titrations SET malt_g = 100",
        "DELETE FROM malt_titrations",
    ] {
        assert!(
            sqlx::query(statement).execute(&mut *tx).await.is_err(),
            "{statement}"
        );
    }
}

#[tokio::test]
async fn jars_that_describe_no_malt_are_refused_and_each_slip_named_at_its_place() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let malt = added(&program, &pale()).await;
    let lots = format!("{}/lots", path(&malt));
    let lot = program
        .post(&lots, &json!({"code": "L1", "in_use": true}))
        .await;
    let place = format!("{}/titrations", path(&lot));
    let with = |pointer: &str, value: Value| {
        let mut body = titration();
        *body.pointer_mut(pointer).unwrap() = value;
        body
    };
    let two = json!([{"ph": 5.8}, {"acid_ml": 5, "ph": 5.5}]);
    let rising = json!([{"ph": 5.5}, {"acid_ml": 5, "ph": 5.6}, {"acid_ml": 9, "ph": 5.8}]);
    for (body, pointer) in [
        (with("/jars", two), "/jars"),
        (with("/jars", rising), "/jars"),
        (with("/jars/1/ph", json!("")), "/jars/1/ph"),
        (with("/jars/1/ph", json!("55")), "/jars/1/ph"),
        (with("/jars/1/acid_ml", json!("-1")), "/jars/1/acid_ml"),
        (with("/acid_meq_per_ml", json!(null)), "/acid_meq_per_ml"),
        (with("/malt_g", json!("NaN")), "/malt_g"),
        (with("/tested_on", json!("2199-01-01")), "/tested_on"),
        (with("/tested_on", json!("")), "/tested_on"),
    ] {
        let answer = program.post(&place, &body).await;
        assert_eq!(answer.pointers(), [pointer], "{:?}", answer.body);
    }
}

#[tokio::test]
async fn what_no_malt_can_be_is_refused_at_its_field() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let coefficients =
        json!({"a1_meq_per_kg_ph": -40, "a2_meq_per_kg_ph2": 0, "a3_meq_per_kg_ph3": 0});
    for (changes, pointer) in [
        (json!({"name": ""}), "/name"),
        (json!({"class": "sugar"}), "/class"),
        (json!({"colour": "1e308"}), "/colour"),
        (json!({"colour": 5, "colour_unit": "srm"}), "/colour_unit"),
        (json!({"distilled_ph": 2}), "/distilled_ph"),
        (
            json!({"distilled_ph": 5.7, "distilled_ph_sd": 0}),
            "/distilled_ph_sd",
        ),
        (json!({"relative_buffering": "-1"}), "/relative_buffering"),
        (json!({"distilled_ph_sd": 0.1}), "/distilled_ph_sd"),
        (
            json!({"relative_buffering_sd": 0.1}),
            "/relative_buffering_sd",
        ),
        (
            json!({"coefficients": {"sd_percent": 10}}),
            "/coefficients/sd_percent",
        ),
        (json!({"lactic_percent": 3}), "/lactic_percent"),
        (
            json!({"class": "acidulated", "distilled_ph": 3.6}),
            "/distilled_ph",
        ),
        (json!({"coefficients": coefficients}), "/distilled_ph"),
        (
            json!({"distilled_ph": 5.7, "coefficients": {"a1_meq_per_kg_ph": 40, "a2_meq_per_kg_ph2": 0, "a3_meq_per_kg_ph3": 0}}),
            "/coefficients/a1_meq_per_kg_ph",
        ),
    ] {
        let mut body = pale();
        for (name, value) in changes.as_object().unwrap() {
            body[name] = value.clone();
        }
        let answer = program.post("/malts", &body).await;
        assert_eq!(answer.pointers(), [pointer], "{changes}: {:?}", answer.body);
    }
}

/// 60 °L is 1.97 · (1.3546 · 60 − 0.76) = 158.6 EBC.
#[tokio::test]
async fn a_colour_typed_in_lovibond_is_kept_in_ebc() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let body = json!({"name": "Crystal", "class": "crystal", "colour": 60, "colour_unit": "lovibond", "in_use": true});
    let malt = added(&program, &body).await;
    let colour = malt.body["colour"].as_f64().unwrap();
    assert!((colour - 158.6).abs() < 0.05, "{colour}");
    assert_eq!(malt.body["colour_unit"], "ebc");
}

#[tokio::test]
async fn an_acidulated_malt_brings_acid_by_the_lactic_share_of_its_lot() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let body = json!({"name": "Sour", "class": "acidulated", "in_use": true});
    let malt = added(&program, &body).await;
    let demand = |body: &Value| {
        body["behaviour"]["acid_demand_meq_per_kg"]
            .as_f64()
            .unwrap()
    };
    assert!(demand(&malt.body) < -250.0, "{:?}", malt.body);
    let lots = format!("{}/lots", path(&malt));
    let lot = json!({"code": "S1", "lactic_percent": 2, "in_use": true});
    let lot = program.post(&lots, &lot).await;
    assert_eq!(lot.body["behaviour"]["how_known"], "certificate of the lot");
    // One per cent of 90.078 g/mol lactic acid is 111 mmol/kg, nearly all of it given up.
    let less = demand(&lot.body) - demand(&malt.body);
    assert!((105.0..111.1).contains(&less), "{less}");
    let refused = program
        .post(
            &lots,
            &json!({"code": "S2", "wort_ph": 3.5, "in_use": true}),
        )
        .await;
    assert_eq!(refused.pointers(), ["/wort_ph"]);
}

#[tokio::test]
async fn a_stale_change_of_a_malt_is_refused_and_so_is_a_name_twice() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let malt = added(&program, &pale()).await;
    let place = path(&malt);
    let stale = [("if-match", malt.etag.as_deref().unwrap())];
    let changed = program.send("PUT", &place, Some(&malt.body), &stale).await;
    assert_eq!(changed.status, 200, "{:?}", changed.body);
    let second = program.send("PUT", &place, Some(&malt.body), &stale).await;
    assert_eq!(second.status, 409);
    let mut twin = pale();
    twin["name"] = "PALE".into();
    assert_eq!(program.post("/malts", &twin).await.pointers(), ["/name"]);
}

#[tokio::test]
async fn only_a_manager_keeps_malts_and_a_brewer_keeps_no_lots() {
    let desk = Desk::start().await;
    let manager = desk.full_program("manager").await;
    let place = path(&added(&manager, &pale()).await);
    let lots = format!("{place}/lots");
    for (login, lot_status) in [("qa", 201), ("brewer", 403)] {
        let program = desk.full_program(login).await;
        assert_eq!(program.put(&place, &pale()).await.status, 403);
        let lot = json!({"code": login, "in_use": true});
        assert_eq!(program.post(&lots, &lot).await.status, lot_status);
        assert_eq!(program.get(&lots).await.status, 200);
    }
}

#[tokio::test]
async fn a_malt_its_lot_and_its_titration_are_entered_through_their_forms() {
    let desk = Desk::start().await;
    let manager = desk.browser("manager").await;
    let form = manager.open("/malts/new").await;
    let fields = [("name", "Pale"), ("class", "pale_ale"), ("colour", "5,5")];
    let page = manager.fill(&form, "/malts/new", &fields).await;
    assert!(page.words().contains("class default, assumed"));
    assert!(page.words().contains("Assumed, not measured"));
    let malt = page.path;

    let qa = desk.browser("qa").await;
    let place = format!("{malt}/lots/new");
    let form = qa.open(&place).await;
    let fields = [("code", "L1"), ("wort_ph", "5,95")];
    let lot = qa.fill(&form, &place, &fields).await;
    assert!(lot.words().contains("sheet of the lot"), "{}", lot.words());
    assert!(lot.words().contains("5.85 ± 0.07"), "{}", lot.words());

    let place = format!("{}/titrations/new", lot.path);
    let form = qa.open(&place).await;
    let jars: Vec<(String, String)> = jars()
        .iter()
        .enumerate()
        .flat_map(|(index, jar)| {
            let jar = jar.as_object().unwrap().clone();
            jar.into_iter().map(move |(name, value)| {
                let value = value.as_str().unwrap().to_owned();
                (format!("jars.{index}.{name}"), value)
            })
        })
        .collect();
    let mut fields = vec![
        ("malt_g", "50"),
        ("acid_meq_per_ml", "0,1"),
        ("base_meq_per_ml", "0,1"),
        ("tested_on", "2026-02-03"),
    ];
    fields.extend(
        jars.iter()
            .map(|(name, value)| (name.as_str(), value.as_str())),
    );
    let mut slipped = fields.clone();
    slipped.push(("jars.5.acid_ml", "3 mL"));
    let refused = qa.fill(&form, &place, &slipped).await;
    assert_eq!(refused.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert!(refused.error("jars.5.acid_ml").is_some());
    assert!(refused.error("jars.5.ph").is_some());
    assert_eq!(refused.field("jars.5.acid_ml"), "3 mL");
    assert_eq!(refused.field("jars.1.ph"), "5,60");

    let lot = qa.fill(&form, &place, &fields).await;
    let words = lot.words();
    assert!(words.contains("titrated lot"), "{words}");
    assert!(words.contains("5.80 ± 0.02"), "{words}");
    let again = qa.post(&place, &offered(&form, &place, &fields)).await;
    assert_eq!(again.texts("article").len(), 1, "one key, one titration");

    let withdrawal = lot.html();
    let selector = scraper::Selector::parse("article form").unwrap();
    let action = withdrawal.select(&selector).next().unwrap();
    let action = action.value().attr("action").unwrap().to_owned();
    let back = qa.fill(&lot, &action, &[("reason", "Old buffers")]).await;
    assert!(
        back.words().contains("sheet of the lot"),
        "{}",
        back.words()
    );
    assert!(back.words().contains("Old buffers"));

    let brewer = desk.browser("brewer").await;
    let read = brewer.open(&lot.path).await;
    assert_eq!(read.status, StatusCode::OK);
    assert!(read.texts("main form").is_empty());
    let refused = brewer.open(&place).await;
    assert_eq!(refused.status, StatusCode::FORBIDDEN);
}

#[tokio::test]
async fn a_malt_form_with_slips_comes_back_as_typed_and_a_stale_one_is_refused() {
    let desk = Desk::start().await;
    let browser = desk.browser("manager").await;
    let form = browser.open("/malts/new").await;
    let fields = [("name", "Pale"), ("class", ""), ("colour", "pale")];
    let page = browser.fill(&form, "/malts/new", &fields).await;
    assert_eq!(page.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert_eq!(page.field("colour"), "pale");
    assert!(page.error("class").is_some() && page.error("colour").is_some());

    let fields = [("name", "Pale"), ("class", "pale_ale")];
    let malt = browser
        .fill(&page, "/malts/new", &[fields[0], fields[1], ("colour", "")])
        .await;
    let place = format!("{}/edit", malt.path);
    let form = browser.open(&place).await;
    browser
        .fill(&form, &place, &[("supplier", "Lower Lock")])
        .await;
    let stale = browser
        .fill(&form, &place, &[("supplier", "Upper Lock")])
        .await;
    assert_eq!(stale.status, StatusCode::CONFLICT);
    assert_eq!(stale.field("supplier"), "Upper Lock");
    let other = desk.browser("qa").await.open(&place).await;
    assert_eq!(other.status, StatusCode::FORBIDDEN);
}

#[tokio::test]
async fn a_us_brewery_types_lovibond_and_reads_it_back() {
    let desk = Desk::start().await;
    let by = desk.member("manager").await;
    let settings = Settings {
        units: Units::Us,
        ..Settings::default()
    };
    leat::brewery::operations::revise(&desk.app.db, &by, settings, None)
        .await
        .unwrap();
    let browser = desk.browser("manager").await;
    let form = browser.open("/malts/new").await;
    assert_eq!(form.field("colour_unit"), "lovibond");
    let fields = [("name", "Crystal"), ("class", "crystal"), ("colour", "60")];
    let page = browser.fill(&form, "/malts/new", &fields).await;
    assert!(page.words().contains("60 °L"), "{}", page.words());
    let form = browser.open(&format!("{}/edit", page.path)).await;
    assert_eq!(form.field("colour"), "60");
}

#[tokio::test]
async fn crystal_malt_without_its_colour_is_refused_by_both_doors() {
    let desk = Desk::start().await;
    let manager = desk.browser("manager").await;
    let form = manager.open("/malts/new").await;
    let typed = [("name", "Crystal"), ("class", "crystal"), ("colour", "")];
    let refused = manager.fill(&form, "/malts/new", &typed).await;
    assert_eq!(refused.status, 422);
    let error = refused.error("colour").unwrap();
    assert!(error.contains("Enter the colour"), "{error}");
    assert_eq!(refused.field("name"), "Crystal");
    let program = desk.full_program("manager").await;
    let body = json!({"name": "Crystal", "class": "crystal", "in_use": true});
    assert_eq!(program.post("/malts", &body).await.status, 422);
    // Of other classes the colour says nothing.
    let body = json!({"name": "Pilsner", "class": "pilsner", "in_use": true});
    assert_eq!(program.post("/malts", &body).await.status, 201);
}
