//! Beers: grist, volumes and spec.

use serde_json::{Value, json};

use crate::desk::Desk;

/// A beer that would be accepted, were its malt there.
fn beer(malt_id: &str) -> Value {
    json!({
        "name": "Sluice Pale",
        "batch_l": 2000,
        "mash_l": 1200,
        "sparge_l": 1500,
        "grist": [{"malt_id": malt_id, "kilograms": 400}],
        "spec": {
            "calcium_mg_per_l": {"low": 50, "preferred": 80, "high": 150, "priority": "high"},
            "sulfate_mg_per_l": {"low": 100, "high": 200},
            "chloride_mg_per_l": {"low": 50, "high": 100},
            "sulfate_to_chloride": {"low": 1.5, "high": 3},
            "mash_calcium_mg_per_l": {"low": 60},
            "mash_ph": {"low": 5.3, "target": 5.4, "high": 5.5},
            "sparge_alkalinity_mg_per_l_as_caco3": {"high": 30},
            "highest_lactate_mg_per_l": 300
        }
    })
}

/// The same with one value at a JSON pointer.
fn with(mut body: Value, pointer: &str, value: Value) -> Value {
    let (parent, key) = pointer.rsplit_once('/').unwrap();
    let parent = body.pointer_mut(parent).unwrap();
    parent.as_object_mut().unwrap().insert(key.into(), value);
    body
}

const NO_MALT: &str = "01940000-0000-7000-8000-000000000000";

#[tokio::test]
async fn every_contradiction_of_a_beer_is_told_at_its_own_field() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    for (changed, value, wrong) in [
        ("/name", json!("  "), "/name"),
        ("/name", json!("x".repeat(81)), "/name"),
        ("/batch_l", json!("12 hl"), "/batch_l"),
        ("/batch_l", json!(1e308), "/batch_l"),
        ("/batch_l", json!(0), "/batch_l"),
        ("/mash_l", json!(-3), "/mash_l"),
        ("/mash_l", json!(""), "/mash_l"),
        // 12 L for 400 kg: hectolitres typed for litres.
        ("/mash_l", json!(12), "/mash_l"),
        ("/sparge_l", json!("NaN"), "/sparge_l"),
        ("/grist", json!([]), "/grist/0/kilograms"),
        ("/grist/0/kilograms", json!(0), "/grist/0/kilograms"),
        ("/grist/0/kilograms", json!("1.2.3"), "/grist/0/kilograms"),
        ("/grist/0/malt_id", json!("pilsner"), "/grist/0/malt_id"),
        ("/grist/0/malt_id", json!(""), "/grist/0/malt_id"),
        (
            "/spec/calcium_mg_per_l/low",
            json!(200),
            "/spec/calcium_mg_per_l/low",
        ),
        (
            "/spec/calcium_mg_per_l/preferred",
            json!(20),
            "/spec/calcium_mg_per_l/preferred",
        ),
        (
            "/spec/calcium_mg_per_l/priority",
            json!("urgent"),
            "/spec/calcium_mg_per_l/priority",
        ),
        (
            "/spec/calcium_mg_per_l/high",
            json!(-1),
            "/spec/calcium_mg_per_l/high",
        ),
        ("/spec/mash_ph/target", json!(15), "/spec/mash_ph/target"),
        ("/spec/mash_ph/target", json!(5.6), "/spec/mash_ph/target"),
        ("/spec/mash_ph/low", json!(5.6), "/spec/mash_ph/low"),
        ("/spec/mash_ph/high", Value::Null, "/spec/mash_ph/high"),
        // Sulfate 100 to 200 and chloride 50 to 100 allow ratios from 1 to 4.
        (
            "/spec/sulfate_to_chloride/low",
            json!(4.5),
            "/spec/sulfate_to_chloride/low",
        ),
        (
            "/spec/sulfate_to_chloride",
            json!({"high": 0.9}),
            "/spec/sulfate_to_chloride/high",
        ),
        // At most 150 mg/L over 2700 L, all of it in 1200 L: 337.5 mg/L.
        (
            "/spec/mash_calcium_mg_per_l/low",
            json!(340),
            "/spec/mash_calcium_mg_per_l/low",
        ),
        (
            "/spec/highest_lactate_mg_per_l",
            json!("lots"),
            "/spec/highest_lactate_mg_per_l",
        ),
    ] {
        let answer = program
            .post("/beers", &with(beer(NO_MALT), changed, value.clone()))
            .await;
        assert_eq!(answer.status, 422, "{changed} = {value}: {:?}", answer.body);
        assert!(
            answer.pointers().contains(&wrong),
            "{changed} = {value}: {:?}",
            answer.body
        );
        let detail = answer.body["detail"].as_str().unwrap();
        assert!(detail.len() < 200 && detail.ends_with('.'), "{detail}");
    }
}

#[tokio::test]
async fn a_beer_that_is_not_there_is_told_apart_from_one_that_may_not_be_changed() {
    let desk = Desk::start().await;
    let manager = desk.full_program("manager").await;
    assert_eq!(manager.get("/beers").await.body, json!({"items": []}));
    assert_eq!(manager.get(&format!("/beers/{NO_MALT}")).await.status, 404);
    assert_eq!(manager.get("/beers/stout").await.status, 404);
    assert_eq!(manager.get("/beers?cursor=stout").await.status, 422);
    for login in ["brewer", "qa"] {
        let answer = desk
            .full_program(login)
            .await
            .post("/beers", &json!({}))
            .await;
        assert_eq!(answer.status, 403, "{login}");
    }
}
