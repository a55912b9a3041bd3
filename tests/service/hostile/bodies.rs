//! Every endpoint of the description, with poisoned bodies.

use std::collections::BTreeSet;

use serde_json::{Value, json};

use super::description::{Description, Operation};
use super::{LivedIn, calibration, delivery, long, titration};
use crate::brewhouse::hard_water;
use crate::desk::Answer;

/// The address of an operation in this brewery: a plan in a state in which it can be done.
pub fn address(lived: &LivedIn, operation: &Operation) -> String {
    let path = operation.path.as_str();
    let post = operation.method == "POST";
    let id = match path.split('/').nth(1).unwrap_or_default() {
        "beers" => &lived.house.beer,
        "malts" => &lived.malt,
        "materials" => &lived.material,
        "meters" => &lived.meter,
        "sources" => &lived.house.source,
        "water-tests" => &lived.water_test,
        _ if path.ends_with("/approval") && !post => &lived.approved,
        _ if path.contains("/doses") || path.ends_with("/revisions") => &lived.approved,
        _ if path.contains("/mash-checks")
            || path.contains("/liquor-checks")
            || path.ends_with("/closing") =>
        {
            &lived.dosed
        }
        _ => &lived.plan,
    };
    let lot = if path.starts_with("/malts") {
        &lived.malt_lot
    } else {
        &lived.material_lot
    };
    path.replace("{id}", id)
        .replace("{lot_id}", lot)
        .replace("{movement_id}", &lived.movement)
        .replace("{titration_id}", &lived.titration)
        .replace("{calibration_id}", &lived.calibration)
        .replace("{attachment_id}", &lived.attachment)
        .replace("{check_id}", &lived.check)
        .replace("{dose_id}", &lived.dose)
        .replace("{liquor_check_id}", &lived.liquor_check)
}

/// A body that the operation takes.
pub async fn good(lived: &LivedIn, operation: &Operation) -> Value {
    let program = &lived.house.manager;
    let (path, here) = (operation.path.as_str(), address(lived, operation));
    let kept = async |path: &str| program.get(path).await.body;
    match path {
        "/beers" => kept(&format!("/beers/{}", lived.house.beer)).await,
        "/malts" => kept(&format!("/malts/{}", lived.malt)).await,
        "/materials" => kept(&format!("/materials/{}", lived.material)).await,
        "/meters" => kept(&format!("/meters/{}", lived.meter)).await,
        "/meters/{id}/calibrations" => calibration(),
        "/sources" => kept(&format!("/sources/{}", lived.house.source)).await,
        "/malts/{id}/lots" => kept(&format!("{here}/{}", lived.malt_lot)).await,
        "/materials/{id}/lots" => kept(&format!("{here}/{}", lived.material_lot)).await,
        "/materials/{id}/lots/{lot_id}/movements" => delivery(),
        "/sources/{id}/water-tests" | "/water-test-checks" => hard_water(),
        "/water-tests/{id}" => {
            let mut test = hard_water();
            test["correction_reason"] = json!("Read again");
            test
        }
        "/malts/{id}/lots/{lot_id}/titrations" => titration(),
        "/plans" => lived.house.order("26-309"),
        "/plan-previews" => {
            let mut inputs = kept(&format!("/plans/{}/inputs", lived.plan)).await;
            inputs["treatment"] = json!({"shares_percent": [100], "doses": [{"material": 0, "vessel": "mash", "amount": 5}]});
            inputs
        }
        "/plans/{id}/treatment" => {
            json!({"shares_percent": ["100"], "doses": [{"material": 1, "vessel": "mash", "amount": "5,5"}]})
        }
        "/plans/{id}/doses/{dose_id}" if operation.method == "PUT" => {
            json!({"actual": 5, "lot": "A", "reason": "As the sweep wants it"})
        }
        "/plans/{id}/doses/{dose_id}/correction" => {
            json!({"actual": 4, "lot": "B", "reason": "As the sweep wants it"})
        }
        "/plans/{id}/mash-checks" => {
            json!({"stage": "mash", "ph": 5.42, "minute": 15, "sample_c": 20, "meter": "Bench", "meter_sd": 0.03, "meter_checked": true})
        }
        "/plans/{id}/liquor-checks" => {
            json!({"drops": 4, "mg_per_l_as_caco3_per_drop": "17,1", "volume_l": 1500})
        }
        "/plans/{id}/closing" => {
            json!({"note": "", "mash_check_id": "", "counts": true, "reasons": []})
        }
        "/plans/{id}/corrections" => {
            json!({"what": "other", "words": "It was raining", "stop_learning": false, "reason": "Seen"})
        }
        _ if operation.method == "PUT" => kept(&here).await,
        _ => json!({"reason": "As the sweep wants it"}),
    }
}

/// The places of a body where a leaf or a whole part can be poisoned; of long lists the
/// first two items.
fn places(value: &Value, at: &str, into: &mut Vec<String>) {
    into.push(at.to_owned());
    match value {
        Value::Object(object) => {
            for (name, value) in object {
                places(value, &format!("{at}/{name}"), into);
            }
        }
        Value::Array(list) => {
            for (index, value) in list.iter().take(2).enumerate() {
                places(value, &format!("{at}/{index}"), into);
            }
        }
        _ => {}
    }
}

fn faults(description: &Description, operation: &Operation, answer: &Answer) -> Vec<String> {
    if answer.status >= 500 {
        return vec![format!("answered {}", answer.status)];
    }
    let mut faults = description.departures(operation, answer);
    if answer.status == 422 {
        let errors = answer.body["errors"]
            .as_array()
            .cloned()
            .unwrap_or_default();
        if errors.is_empty() {
            faults.push("422 without any pointer".to_owned());
        }
        for error in errors {
            let pointer = error["pointer"].as_str().unwrap_or_default();
            if !description.tells_of(operation, pointer) {
                faults.push(format!(
                    "points to {pointer}, which is no place in the body"
                ));
            }
            let sentence = error["detail"].as_str().unwrap_or_default();
            if !sentence.ends_with(['.', '?', '!']) {
                faults.push(format!("says “{sentence}”, which is no sentence"));
            }
        }
    }
    faults
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn every_endpoint_answers_poisoned_bodies_as_its_description_says() {
    let lived = LivedIn::build().await;
    let description = Description::of(&lived.house.desk).await;
    let program = &lived.house.manager;
    let poisons = [
        json!(null),
        json!(-1),
        json!(1e308),
        json!("NaN"),
        json!("twelve"),
        json!("3,7"),
        json!(""),
        json!(true),
        json!([]),
        json!({}),
        json!({"x": {"y": [1]}}),
        json!(long()),
        json!("bell \u{7} and null \0"),
        json!("2999-12-31"),
        json!("01a231ad-09d6-71d1-a3b4-0727f742da8c"),
    ];
    let mut faulty = BTreeSet::new();
    let (mut sent, mut refused) = (0, 0);
    for operation in description.operations() {
        let path = address(&lived, &operation);
        let mut bodies = Vec::new();
        if operation.takes_body {
            let good = good(&lived, &operation).await;
            bodies.push(Some(good.clone()));
            let mut there = Vec::new();
            places(&good, "", &mut there);
            let turns = if there.len() > 40 { 2 } else { 5 };
            for (place, pointer) in there.iter().enumerate() {
                for turn in 0..turns {
                    let mut body = good.clone();
                    let poison = &poisons[(4 * place + 7 * turn) % poisons.len()];
                    *body.pointer_mut(pointer).unwrap() = poison.clone();
                    bodies.push(Some(body));
                }
            }
        } else {
            bodies.push(None);
        }
        for body in bodies {
            let before = lived.rows().await;
            let answer = program
                .send(&operation.method, &path, body.as_ref(), &[])
                .await;
            sent += 1;
            let mut found = faults(&description, &operation, &answer);
            if answer.status >= 400 {
                refused += 1;
                if lived.rows().await != before {
                    found.push(format!("answered {} and saved", answer.status));
                }
            }
            for fault in found {
                let fault: String = fault.chars().take(200).collect();
                faulty.insert(format!("{} {}: {fault}", operation.method, operation.path));
            }
        }
    }
    let told = faulty.iter().cloned().collect::<Vec<_>>().join("\n");
    assert!(faulty.is_empty(), "{} faults:\n{told}", faulty.len());
    assert!(refused > 300, "{refused} of {sent} refused");
}

#[tokio::test]
async fn what_is_no_body_at_all_is_refused_by_every_endpoint_that_takes_one() {
    let lived = LivedIn::build().await;
    let description = Description::of(&lived.house.desk).await;
    let before = lived.rows().await;
    let nested = format!("{}{}", "[".repeat(9_000), "]".repeat(9_000));
    let wide = format!("{{\"name\": \"{}\"}}", "x".repeat(2 * 1024 * 1024));
    let json = "application/json";
    let sendings = [
        (json, "", 422),
        (json, "null", 422),
        (json, "7", 422),
        (json, "[]", 422),
        (json, "[\"a reason\"]", 422),
        (json, "\"text\"", 422),
        (json, "{\"name\": ", 422),
        (json, nested.as_str(), 422),
        (json, wide.as_str(), 413),
        ("text/plain", "{}", 422),
        ("application/x-www-form-urlencoded", "reason=x", 422),
        ("", "{}", 422),
    ];
    for operation in description.operations() {
        if !operation.takes_body {
            continue;
        }
        for (kind, text, status) in sendings {
            let path = address(&lived, &operation);
            let request = lived.house.manager.request(&operation.method, &path);
            let request = request.header("content-type", kind).body(text.to_owned());
            let answer = Answer::of(request.send().await.unwrap()).await;
            let told = format!(
                "{} {path} {kind} {:.30}: {:?}",
                operation.method, text, answer.body
            );
            assert_eq!(answer.status, status, "{told}");
            assert_eq!(
                answer.kind.as_deref(),
                Some("application/problem+json"),
                "{told}"
            );
        }
    }
    assert_eq!(lived.rows().await, before);
}
