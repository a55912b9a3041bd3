//! Plans: drafting, moving amounts, approving, revising, previewing.

use leat::people::Scope;
use reqwest::StatusCode;
use serde_json::{Value, json};

use crate::brewhouse::{Brewhouse, expected_ph, hard_water, made};
use crate::desk::{Browser, Seen};

#[tokio::test]
async fn a_draft_proposes_a_treatment_that_reaches_the_mash_ph_and_shows_all_four_ways() {
    let house = Brewhouse::build().await;
    let plan = house.plan(&house.draft("26-201").await).await;
    assert_eq!(plan["state"], "draft");
    // The step of the acid is 5 mL: about 0.005 pH in this mash.
    assert!((expected_ph(&plan) - 5.4).abs() < 0.01, "{plan}");
    let ways: Vec<&str> = plan["ways"]
        .as_array()
        .unwrap()
        .iter()
        .map(|way| way["way"].as_str().unwrap())
        .collect();
    assert_eq!(
        ways,
        [
            "closest_to_preferred",
            "fewest_additions",
            "least_blending_water",
            "cheapest"
        ]
    );
    for way in plan["ways"].as_array().unwrap() {
        assert_ne!(way["ending"], "impossible", "{way}");
        // Every printed amount is on the step of its scale.
        for dose in way["doses"].as_array().unwrap() {
            let step = if dose["unit"] == "mL" { 5.0 } else { 1.0 };
            let steps = dose["amount"].as_f64().unwrap() / step;
            assert!((steps - steps.round()).abs() < 1e-9, "{dose}");
        }
    }
}

#[tokio::test]
async fn an_approved_plan_is_computed_again_from_its_frozen_inputs_alone() {
    let house = Brewhouse::build().await;
    let id = house.approved("26-202").await;
    let before = house.plan(&id).await;
    // Everything it came from changes.
    let mut other = hard_water();
    other["readings"][4]["value"] = json!("60");
    other["readings"][0]["value"] = json!("34");
    other["keep_although_it_does_not_add_up"] = json!(true);
    made(
        &house
            .manager
            .post(&format!("/sources/{}/water-tests", house.source), &other)
            .await,
    );
    let after = house.plan(&id).await;
    assert_eq!(before["does"], after["does"]);
    // The inputs posted as a preview, with its own amounts, say the same.
    let mut inputs = house.manager.get(&format!("/plans/{id}/inputs")).await.body;
    let shares: Vec<f64> = after["shares"]
        .as_array()
        .unwrap()
        .iter()
        .map(|share| share.as_f64().unwrap() * 100.0)
        .collect();
    let doses: Vec<Value> = after["doses"]
        .as_array()
        .unwrap()
        .iter()
        .map(|dose| json!({"material": dose["material"], "vessel": dose["vessel"], "amount": dose["planned"]}))
        .collect();
    inputs["treatment"] = json!({"shares_percent": shares, "doses": doses});
    let preview = house.manager.post("/plan-previews", &inputs).await;
    assert_eq!(preview.status, 200, "{:?}", preview.body);
    let ph = preview.body["does"]["mash_ph"]["ph"].as_f64().unwrap();
    assert!((ph - expected_ph(&after)).abs() < 1e-9);
    assert!((ph - after["prediction"]["ph"].as_f64().unwrap()).abs() < 1e-9);
}

#[tokio::test]
async fn moving_one_amount_answers_with_every_consequence_and_saves_nothing_until_asked() {
    let house = Brewhouse::build().await;
    let id = house.draft("26-203").await;
    let browser = house.desk.browser("brewer").await;
    let page = browser.open(&format!("/plans/{id}")).await;
    let before = house.plan(&id).await;
    let acid = acid_field(&page);
    let more = (page.field(&acid).parse::<f64>().unwrap() + 200.0).to_string();
    let action = format!("/plans/{id}/treatment");
    let mut fields = crate::desk::offered(&page, &action, &[(&acid, &more)]);
    let part = browser
        .post(&format!("/plans/{id}/consequences"), &fields)
        .await;
    assert_eq!(part.status, StatusCode::OK);
    assert!(part.text.contains("below"), "{}", part.text);
    let trial = browser.post(&format!("/plans/{id}/trial"), &fields).await;
    assert!(trial.words().contains("not saved yet"));
    assert_eq!(trial.field(&acid), more);
    assert_eq!(house.plan(&id).await["version"], before["version"]);
    let saved = browser.post(&action, &fields).await;
    assert_eq!(saved.status, StatusCode::OK, "{}", saved.words());
    let after = house.plan(&id).await;
    assert_eq!(after["way"], "by_hand");
    assert!(expected_ph(&after) < expected_ph(&before) - 0.03);
    // A decimal comma is a decimal point.
    fields = crate::desk::offered(&saved, &action, &[(&acid, "120,5")]);
    browser.post(&action, &fields).await;
    let acid_dose = house
        .doses(&id)
        .await
        .into_iter()
        .find(|dose| dose["unit"] == "mL" && dose["vessel"] == "mash")
        .unwrap();
    assert_eq!(acid_dose["planned"], 120.5);
}

/// The field of the acid that goes into the mash.
fn acid_field(page: &Seen) -> String {
    let html = page.html();
    let fields = scraper::Selector::parse("input[name$=\".amount\"]").unwrap();
    html.select(&fields)
        .map(|input| input.value().attr("name").unwrap().to_owned())
        .find(|name| {
            let prefix = name.trim_end_matches(".amount");
            page.field(&format!("{prefix}.vessel")) == "mash"
                && page.field(name).parse::<f64>().is_ok()
                && {
                    let label = page.texts(&format!("label[for=\"field-{name}\"]"));
                    label.first().is_some_and(|label| label.contains("Lactic"))
                }
        })
        .expect("the plan doses acid to the mash")
}

#[tokio::test]
async fn the_second_of_two_people_who_change_one_plan_is_told_and_keeps_what_was_typed() {
    let house = Brewhouse::build().await;
    let id = house.draft("26-204").await;
    let action = format!("/plans/{id}/treatment");
    let (first, second) = (
        house.desk.browser("brewer").await,
        house.desk.browser("qa").await,
    );
    let (page_one, page_two) = (
        first.open(&format!("/plans/{id}")).await,
        second.open(&format!("/plans/{id}")).await,
    );
    let acid = acid_field(&page_one);
    first.fill(&page_one, &action, &[(&acid, "150")]).await;
    let refused = second.fill(&page_two, &action, &[(&acid, "155")]).await;
    assert_eq!(refused.status, StatusCode::CONFLICT);
    assert_eq!(refused.field(&acid), "155");
    assert!(refused.words().contains("Somebody else changed this plan"));
    let stale = house
        .manager
        .send(
            "PUT",
            &format!("/plans/{id}/treatment"),
            Some(&json!({"shares_percent": [100]})),
            &[("if-match", "\"1\"")],
        )
        .await;
    assert_eq!(stale.status, 409);
}

#[tokio::test]
async fn water_outside_the_limits_needs_a_named_reason() {
    let mut water = hard_water();
    // 70 mg/L of nitrate; EU Directive 2020/2184 allows 50. The ions still balance within
    // a few per cent: 0.77 meq/L more on 7.
    water["readings"][7]["value"] = json!("70");
    water["readings"][5]["value"] = json!("25");
    let house = Brewhouse::on(water).await;
    let id = house.draft("26-210").await;
    let refused = house
        .manager
        .post(&format!("/plans/{id}/approval"), &json!({}))
        .await;
    assert_eq!(
        (refused.status, refused.pointers()),
        (422, vec!["/reason"]),
        "{:?}",
        refused.body
    );
    let qa = house.desk.browser("qa").await;
    let page = qa.open(&format!("/plans/{id}")).await;
    assert!(
        page.words()
            .contains("outside the limits for drinking water")
    );
    let named = qa
        .fill(
            &page,
            &format!("/plans/{id}/approval"),
            &[("reason", "Boiled; nitrate agreed with the authority.")],
        )
        .await;
    assert!(named.words().contains("Boiled"), "{}", named.words());
}

#[tokio::test]
async fn every_role_is_refused_what_is_not_its_own() {
    let house = Brewhouse::build().await;
    let id = house.draft("26-211").await;
    let brewer = house.desk.full_program("brewer").await;
    assert_eq!(
        brewer
            .post(&format!("/plans/{id}/approval"), &json!({}))
            .await
            .status,
        403
    );
    let page = house
        .desk
        .browser("brewer")
        .await
        .open(&format!("/plans/{id}"))
        .await;
    assert!(!page.text.contains("Approve this plan"));
    let reader = house.desk.program("manager", &[Scope::Read]).await;
    assert_eq!(
        reader.post("/plans", &house.order("26-212")).await.status,
        403
    );
    assert_eq!(
        reader
            .post(&format!("/plans/{id}/mash-checks"), &json!({}))
            .await
            .status,
        403
    );
    assert_eq!(reader.get(&format!("/plans/{id}")).await.status, 200);
    let approved = house.approved("26-213").await;
    assert_eq!(
        brewer
            .post(
                &format!("/plans/{approved}/withdrawal"),
                &json!({"reason": "x"})
            )
            .await
            .status,
        403
    );
    let dose = house.doses(&approved).await.remove(0);
    let path = format!("/plans/{approved}/doses/{}", dose["id"].as_str().unwrap());
    assert_eq!(
        brewer
            .put(&path, &json!({"actual": dose["planned"]}))
            .await
            .status,
        200
    );
}

#[tokio::test]
async fn a_change_of_an_approved_plan_is_a_new_revision_that_takes_what_is_in_with_it() {
    let house = Brewhouse::build().await;
    let id = house.approved("26-214").await;
    let frozen = house
        .manager
        .put(
            &format!("/plans/{id}/treatment"),
            &json!({"shares_percent": [100], "doses": []}),
        )
        .await;
    assert_eq!(frozen.status, 409);
    let dose = house.doses(&id).await.remove(0);
    house
        .manager
        .put(
            &format!("/plans/{id}/doses/{}", dose["id"].as_str().unwrap()),
            &json!({"actual": 7, "reason": "The tin was empty"}),
        )
        .await;
    let next = house
        .manager
        .post(&format!("/plans/{id}/revisions"), &json!({}))
        .await;
    let next_id = made(&next);
    assert_eq!(next.body["revision"], 2);
    assert_eq!(next.body["doses"][0]["actual"], 7.0);
    // Two next revisions of one plan would be two truths.
    assert_eq!(
        house
            .manager
            .post(&format!("/plans/{id}/revisions"), &json!({}))
            .await
            .status,
        409
    );
    // While it is being drafted, nothing goes in by the old one.
    let rest = house.doses(&id).await;
    if let Some(open) = rest.iter().find(|dose| dose["actual"].is_null()) {
        let path = format!("/plans/{id}/doses/{}", open["id"].as_str().unwrap());
        assert_eq!(
            house.manager.put(&path, &json!({"actual": 1})).await.status,
            409
        );
    }
    let approved = house
        .manager
        .post(&format!("/plans/{next_id}/approval"), &json!({}))
        .await;
    assert_eq!(approved.status, 201, "{:?}", approved.body);
    assert_eq!(house.plan(&id).await["state"], "withdrawn");
}

#[tokio::test]
async fn bad_input_to_a_plan_is_told_at_its_field_and_nothing_is_saved() {
    let house = Brewhouse::build().await;
    let nobody = "01940000-0000-7000-8000-000000000000";
    for (changed, value, pointer) in [
        ("batch", json!(""), "/batch"),
        ("batch", json!("x".repeat(41)), "/batch"),
        ("beer_id", json!("pale"), "/beer_id"),
        ("brewed_on", json!("tomorrow"), "/brewed_on"),
        ("brewed_on", json!("2026-02-30"), "/brewed_on"),
        ("way", json!("by_magic"), "/way"),
        (
            "sources",
            json!([{"source_id": "x"}]),
            "/sources/0/source_id",
        ),
        (
            "sources",
            json!([{"source_id": nobody}]),
            "/sources/0/source_id",
        ),
        (
            "sources",
            json!([{"source_id": house.source, "lowest_percent": -1}]),
            "/sources/0/lowest_percent",
        ),
        (
            "sources",
            json!([{"source_id": house.source, "lowest_percent": 80, "highest_percent": 20}]),
            "/sources/0/lowest_percent",
        ),
        (
            "sources",
            json!([{"source_id": house.source, "highest_percent": "NaN"}]),
            "/sources/0/highest_percent",
        ),
    ] {
        let mut body = house.order("26-240");
        body[changed] = value.clone();
        let refused = house.manager.post("/plans", &body).await;
        assert_eq!(
            (refused.status, refused.pointers()),
            (422, vec![pointer]),
            "{changed} {value}: {:?}",
            refused.body
        );
    }
    let mut gone = house.order("26-240");
    gone["beer_id"] = json!(nobody);
    assert_eq!(house.manager.post("/plans", &gone).await.status, 404);

    let id = house.draft("26-241").await;
    for (body, pointer) in [
        (json!({"shares_percent": [90]}), "/shares_percent/0"),
        (json!({"shares_percent": [1e308]}), "/shares_percent/0"),
        (
            json!({"shares_percent": [100], "doses": [{"material": 0, "vessel": "mash", "amount": "a pinch"}]}),
            "/doses/0/amount",
        ),
        (
            json!({"shares_percent": [100], "doses": [{"material": 0, "vessel": "mash", "amount": -1}]}),
            "/doses/0/amount",
        ),
        (
            json!({"shares_percent": [100], "doses": [{"material": 99, "vessel": "mash", "amount": 1}]}),
            "/doses/0/material",
        ),
        (
            json!({"shares_percent": [100], "doses": [{"material": 0, "vessel": "sink", "amount": 1}]}),
            "/doses/0/vessel",
        ),
        (json!({"shares_percent": [50, 50]}), "/sources"),
    ] {
        let refused = house
            .manager
            .put(&format!("/plans/{id}/treatment"), &body)
            .await;
        assert_eq!(
            (refused.status, refused.pointers()),
            (422, vec![pointer]),
            "{body}: {:?}",
            refused.body
        );
    }
    assert_eq!(house.plan(&id).await["version"], 1);

    let id = house.dosed("26-242").await;
    for (body, pointer) in [
        (json!({"minute": 15, "sample_c": 20}), "/ph"),
        (json!({"ph": 15, "minute": 15, "sample_c": 20}), "/ph"),
        (json!({"ph": "5.4.1", "minute": 15, "sample_c": 20}), "/ph"),
        (json!({"ph": 5.4, "minute": -2, "sample_c": 20}), "/minute"),
        (
            json!({"ph": 5.4, "minute": 15, "sample_c": 300}),
            "/sample_c",
        ),
        (
            json!({"ph": 5.4, "minute": 15, "sample_c": 20, "meter_sd": 0}),
            "/meter_sd",
        ),
        (
            json!({"ph": 5.4, "minute": 15, "sample_c": 20, "stage": "lunch"}),
            "/stage",
        ),
    ] {
        let refused = house
            .manager
            .post(&format!("/plans/{id}/mash-checks"), &body)
            .await;
        assert_eq!(
            (refused.status, refused.pointers()),
            (422, vec![pointer]),
            "{body}: {:?}",
            refused.body
        );
    }
    assert_eq!(
        house
            .manager
            .get(&format!("/plans/{id}/mash-checks"))
            .await
            .body,
        json!([])
    );
}

#[tokio::test]
async fn a_preview_refuses_what_a_plan_would_and_points_at_it() {
    let house = Brewhouse::build().await;
    let id = house.draft("26-250").await;
    let good = house.manager.get(&format!("/plans/{id}/inputs")).await.body;
    assert_eq!(
        house.manager.post("/plan-previews", &good).await.status,
        200
    );
    for (pointer, value, wrong) in [
        ("/sources", json!([]), "/sources"),
        ("/grist", json!([]), "/grist"),
        ("/grist/0/kilograms", json!(0), "/grist"),
        ("/grist/0/kilograms", json!("ten"), "/grist/0/kilograms"),
        ("/volumes/mash_l", json!(0), "/volumes/mash_l"),
        (
            "/sources/0/ions_mg_per_l",
            json!({"unobtainium": 1}),
            "/sources/0/ions_mg_per_l/unobtainium",
        ),
        (
            "/sources/0/ions_mg_per_l",
            json!({"calcium": -1}),
            "/sources/0/ions_mg_per_l/calcium",
        ),
        (
            "/sources/0/alkalinity_mg_per_l_as_caco3",
            json!(""),
            "/sources/0/alkalinity_mg_per_l_as_caco3",
        ),
        (
            "/shelf/0/substance",
            json!("salt of the earth"),
            "/shelf/0/substance",
        ),
        (
            "/spec/calcium_mg_per_l/low",
            json!(500),
            "/spec/calcium_mg_per_l/low",
        ),
        ("/spec/mash_ph/target", json!(15), "/spec/mash_ph/target"),
    ] {
        let mut body = good.clone();
        *body.pointer_mut(pointer).unwrap() = value.clone();
        let refused = house.manager.post("/plan-previews", &body).await;
        assert_eq!(refused.status, 422, "{pointer} {value}: {:?}", refused.body);
        assert!(
            refused.pointers().contains(&wrong),
            "{pointer} {value}: {:?}",
            refused.body
        );
    }
}

#[tokio::test]
async fn a_source_without_a_test_makes_no_plan() {
    let house = Brewhouse::build().await;
    let bare = json!({"name": "New well", "kind": "borehole", "days_between_tests": 180});
    let bare = made(&house.manager.post("/sources", &bare).await);
    let mut body = house.order("26-260");
    body["sources"] = json!([{"source_id": bare}]);
    let refused = house.manager.post("/plans", &body).await;
    assert_eq!(
        (refused.status, refused.pointers()),
        (422, vec!["/sources/0/source_id"]),
        "{:?}",
        refused.body
    );
}

#[tokio::test]
async fn two_megabytes_are_refused_with_a_sentence() {
    let house = Brewhouse::build().await;
    let body = json!({"batch": "x".repeat(2_000_000)});
    let refused = house.manager.post("/plans", &body).await;
    assert_eq!(refused.status, 413);
    assert!(
        refused.body["detail"].as_str().unwrap().contains("1 MB"),
        "{:?}",
        refused.body
    );
}

async fn plans_listed(browser: &Browser, query: &str) -> String {
    browser
        .open(&format!("/plans?{query}"))
        .await
        .texts("table")
        .join(" ")
}

#[tokio::test]
async fn the_list_of_plans_is_narrowed_and_sorted_by_its_own_links() {
    let house = Brewhouse::build().await;
    house.draft("26-270").await;
    house.approved("26-271").await;
    let browser = house.desk.browser("brewer").await;
    assert!(
        plans_listed(&browser, "state=approved")
            .await
            .contains("26-271")
    );
    assert!(
        !plans_listed(&browser, "state=approved")
            .await
            .contains("26-270")
    );
    assert!(plans_listed(&browser, "batch=270").await.contains("26-270"));
    let by_batch = plans_listed(&browser, "order=batch").await;
    assert!(by_batch.find("26-270").unwrap() < by_batch.find("26-271").unwrap());
    let listed = house.manager.get("/plans?limit=1").await;
    let cursor = listed.body["next_cursor"].as_str().unwrap();
    let next = house
        .manager
        .get(&format!("/plans?limit=1&cursor={cursor}"))
        .await;
    assert_ne!(listed.body["items"][0]["id"], next.body["items"][0]["id"]);
}
