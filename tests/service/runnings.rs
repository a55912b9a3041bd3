//! From the runnings to the package: windows, late acid, and sparge liquor before it runs.

use reqwest::StatusCode;
use serde_json::{Value, json};

use crate::brewhouse::Brewhouse;
use crate::readings::{advised, number};

#[tokio::test]
async fn every_stage_is_held_against_its_window_with_the_error_of_the_meter() {
    let house = Brewhouse::build().await;
    let id = house.dosed("26-410").await;
    let brewer = house.desk.browser("brewer").await;
    for (stage, ph, verdict, advice, says) in [
        (
            "first_runnings",
            5.4,
            "inside",
            "leave",
            "about as the mash",
        ),
        ("last_runnings", 5.5, "inside", "leave", "Go on collecting"),
        (
            "last_runnings",
            5.79,
            "cannot_be_told",
            "leave",
            "near the limit",
        ),
        ("last_runnings", 6.2, "above", "stop", "Stop"),
        ("kettle_full", 5.35, "inside", "leave", "At cast-out"),
        (
            "end_of_boil",
            5.2,
            "inside",
            "leave",
            "Target at cast-out 5.20, assumed",
        ),
        (
            "end_of_fermentation",
            4.0,
            "inside",
            "leave",
            "where ales end",
        ),
        (
            "end_of_fermentation",
            4.5,
            "inside",
            "leave",
            "where lagers end",
        ),
        ("package", 4.3, "inside", "leave", "below 4.6"),
        ("package", 4.58, "cannot_be_told", "read_again", "4.6"),
        ("package", 4.75, "above", "stop", "food safety"),
    ] {
        let seen = house
            .read_with(&id, json!({"stage": stage, "ph": ph, "minute": 70}))
            .await;
        let told = advised(&seen);
        assert_eq!(told["verdict"], verdict, "{stage} {ph}: {told}");
        assert_eq!(told["advice"], advice, "{stage} {ph}: {told}");
        assert!(told.to_string().contains(says), "{stage} {ph}: {told}");
        assert!(told.to_string().contains("assumed"), "{stage}: {told}");
        let check = seen.body["id"].as_str().unwrap();
        let page = brewer
            .open(&format!("/plans/{id}/mash-checks/{check}"))
            .await;
        assert!(
            page.words().contains(told["title"].as_str().unwrap()),
            "{}",
            page.words()
        );
    }
    // Liquor that nobody acidified has no window of pH.
    let liquor = house
        .read_with(&id, json!({"stage": "liquor", "ph": 7.4}))
        .await;
    assert_eq!(
        advised(&liquor)["window_high"].is_null(),
        advised(&liquor)["verdict"] == "noted"
    );
}

#[tokio::test]
async fn the_package_is_read_after_the_batch_is_closed_and_the_mash_is_not() {
    let house = Brewhouse::build().await;
    let id = house.dosed("26-411").await;
    let closed = house
        .manager
        .post(&format!("/plans/{id}/closing"), &json!({}))
        .await;
    assert_eq!(closed.status, 201, "{:?}", closed.body);
    let package = house
        .read_with(&id, json!({"stage": "package", "ph": 4.3}))
        .await;
    assert_eq!(advised(&package)["verdict"], "inside");
    assert_eq!(house.read(&id, 5.4, 12.0).await.status, 409);
    let brewer = house.desk.browser("brewer").await;
    let form = brewer
        .open(&format!(
            "/plans/{id}/mash-checks/new?stage=end_of_fermentation"
        ))
        .await;
    let seen = brewer
        .fill(
            &form,
            &format!("/plans/{id}/mash-checks/new"),
            &[("ph", "4,1")],
        )
        .await;
    assert!(
        seen.words().contains("End of fermentation of 26-411"),
        "{}",
        seen.words()
    );
}

#[tokio::test]
async fn late_acid_goes_by_the_model_until_a_step_into_the_kettle_has_taught_better() {
    let house = Brewhouse::build().await;
    house
        .material(
            "Phosphoric acid",
            "phosphoric_acid",
            json!({"kettle": true}),
        )
        .await;
    let id = house.dosed("26-412").await;
    let boil =
        |ph: f64| json!({"stage": "end_of_boil", "ph": ph, "wort_l": 2000, "cast_out_ph": 5.1});
    let first = house.read_with(&id, boil(5.46)).await;
    let told = advised(&first);
    assert_eq!(
        (&told["advice"], &told["step"]["vessel"]),
        (&json!("step"), &json!("kettle"))
    );
    assert!(
        told["words"]
            .to_string()
            .contains("the model of the mash scaled"),
        "{told}"
    );
    let full = number(&told["step"]["full_dose"]);
    assert!(number(&told["step"]["amount"]) <= full / 2.0);
    // 45 to 50 meq/(kg·pH) near 5.1 to 5.3 in 400 kg over 2000 L, 0.8 of it in the wort:
    // 7 to 10 meq/(L·pH); over 0.36 pH 5000 to 7200 meq; 12.2 meq/mL in 75 % phosphoric acid.
    assert!((350.0..700.0).contains(&full), "{full}");
    house.give(&id).await;
    // The step was to move it by half of the way, 0.18; it moved by 0.10.
    let second = house.read_with(&id, boil(5.36)).await;
    let told = advised(&second);
    assert!(
        told["words"]
            .to_string()
            .contains("learned from the step into this kettle"),
        "{told}"
    );
    // What moved it by 0.10 moves the 0.26 that are left 2.6 times.
    let given = number(
        &house
            .doses(&id)
            .await
            .iter()
            .find(|dose| dose["vessel"] == "kettle")
            .unwrap()["actual"],
    );
    let left = number(&told["step"]["full_dose"]);
    assert!((left / given - 2.6).abs() < 0.1, "{left} {given}");
}

#[tokio::test]
async fn a_mash_step_teaches_the_kettle_and_a_step_nobody_gave_is_overtaken() {
    let house = Brewhouse::build().await;
    house
        .material(
            "Phosphoric acid",
            "phosphoric_acid",
            json!({"kettle": true}),
        )
        .await;
    let id = house.dosed("26-413").await;
    house.read(&id, 5.66, 12.0).await;
    house.give(&id).await;
    house.read(&id, 5.52, 23.0).await;
    let wort = house
        .read_with(&id, json!({"stage": "kettle_full", "ph": 5.58}))
        .await;
    let told = advised(&wort);
    assert!(
        told["words"]
            .to_string()
            .contains("learned from the steps into this batch"),
        "{told}"
    );
    assert!(
        told["words"].to_string().contains("2000 L is assumed"),
        "{told}"
    );
    let open = house
        .doses(&id)
        .await
        .into_iter()
        .filter(|dose| dose["actual"].is_null());
    let open: Vec<Value> = open.collect();
    assert_eq!(
        open.len(),
        1,
        "the open step into the mash is overtaken: {open:?}"
    );
    assert_eq!(open[0]["vessel"], "kettle");
    // A page says so where the step stood.
    let list = house
        .manager
        .get(&format!("/plans/{id}/mash-checks"))
        .await
        .body;
    let second = list
        .as_array()
        .unwrap()
        .iter()
        .rfind(|check| check["stage"] == "mash")
        .unwrap();
    let brewer = house.desk.browser("brewer").await;
    let page = brewer
        .open(&format!(
            "/plans/{id}/mash-checks/{}",
            second["id"].as_str().unwrap()
        ))
        .await;
    if !second["advised"]["step"].is_null() {
        assert!(
            page.words()
                .contains("A later reading has overtaken this step"),
            "{}",
            page.words()
        );
    }
}

#[tokio::test]
async fn sparge_liquor_above_its_limit_gets_the_acid_that_its_alkalinity_asks_for() {
    let house = Brewhouse::build().await;
    let id = house.dosed("26-414").await;
    let test = async |body: Value| {
        house
            .manager
            .post(&format!("/plans/{id}/liquor-checks"), &body)
            .await
    };
    // 4 drops of 10 mg/L are well below the 80 mg/L of this beer.
    let fit = test(json!({"drops": 4, "mg_per_l_as_caco3_per_drop": 10})).await;
    assert_eq!(advised(&fit)["advice"], "leave");
    assert_eq!(fit.body["alkalinity_sd"], 5.0);
    assert_eq!(fit.body["volume_l"], 1500.0);
    let near = test(json!({"drops": 8, "mg_per_l_as_caco3_per_drop": 10})).await;
    assert_eq!(advised(&near)["why"], "cannot_be_told");

    // (200 − 71.8) mg/L as CaCO₃ over 50.04 are 2.56 meq/L; 500 L are still to run.
    let high =
        test(json!({"drops": "20", "mg_per_l_as_caco3_per_drop": "10", "volume_l": 500})).await;
    let acid = &advised(&high)["acid"];
    assert_eq!(advised(&high)["advice"], "acidify");
    let target: f64 = 80.0 - 1.645 * 5.0;
    let meq = (200.0 - target) / 50.0434 * 500.0;
    // 80 % lactic acid, 1.19 g/mL: 10.57 mmol/mL by the table of strengths; to the 5 mL below.
    let wanted = (meq / 10.57 / 5.0).floor() * 5.0;
    assert!(
        (number(&acid["amount"]) - wanted).abs() < 1e-9,
        "{acid} {wanted}"
    );
    assert!(number(&acid["after_mg_per_l_as_caco3"]) < 80.0, "{acid}");
    assert!(
        number(&acid["ph_later"]) > number(&acid["ph_at_once"]) + 0.3,
        "{acid}"
    );
    assert_eq!(house.plan(&id).await["state"], "approved");
    let line = house.doses(&id).await.pop().unwrap();
    assert_eq!(
        (&line["vessel"], &line["id"]),
        (&json!("sparge_liquor"), &high.body["dose_id"])
    );

    // A later test overtakes the line nobody gave.
    let again = test(json!({"alkalinity_mg_per_l_as_caco3": 190, "volume_l": 500})).await;
    let open = house
        .doses(&id)
        .await
        .into_iter()
        .filter(|dose| dose["actual"].is_null());
    let open: Vec<Value> = open.collect();
    assert_eq!(open.len(), 1);
    assert_eq!(open[0]["id"], again.body["dose_id"]);
    let path = format!(
        "/plans/{id}/liquor-checks/{}/withdrawal",
        again.body["id"].as_str().unwrap()
    );
    let gone = house
        .manager
        .post(&path, &json!({"reason": "The wrong tank."}))
        .await;
    assert_eq!(gone.status, 204, "{:?}", gone.body);
    assert_eq!(house.plan(&id).await["state"], "dosed");

    for (body, pointer) in [
        (json!({}), "/drops"),
        (json!({"drops": 4}), "/mg_per_l_as_caco3_per_drop"),
        (
            json!({"drops": 4, "mg_per_l_as_caco3_per_drop": 10, "alkalinity_mg_per_l_as_caco3": 40}),
            "/alkalinity_mg_per_l_as_caco3",
        ),
        (
            json!({"drops": "four", "mg_per_l_as_caco3_per_drop": 10}),
            "/drops",
        ),
        (
            json!({"alkalinity_mg_per_l_as_caco3": 40, "volume_l": 0}),
            "/volume_l",
        ),
    ] {
        let refused = test(body.clone()).await;
        assert_eq!(
            (refused.status, refused.pointers()),
            (422, vec![pointer]),
            "{body}"
        );
    }
}

#[tokio::test]
async fn sparge_liquor_is_tested_on_the_tablet_and_its_acid_weighed_out() {
    let house = Brewhouse::build().await;
    let id = house.dosed("26-415").await;
    let brewer = house.desk.browser("brewer").await;
    let form = brewer.open(&format!("/plans/{id}/liquor-checks/new")).await;
    assert!(
        form.words().contains("At most 80 mg/L as CaCO₃"),
        "{}",
        form.words()
    );
    assert_eq!(form.field("volume_l"), "1500");
    let action = format!("/plans/{id}/liquor-checks/new");
    let refused = brewer.fill(&form, &action, &[("drops", "12")]).await;
    assert_eq!(refused.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert_eq!(refused.field("drops"), "12");
    let typed = [("mg_per_l_as_caco3_per_drop", "17,1")];
    let seen = brewer.fill(&refused, &action, &typed).await;
    for said in [
        "Acidify the sparge liquor",
        "into the sparge liquor",
        "Weigh it out",
        "12 drops of 17.1 mg/L each",
    ] {
        assert!(seen.words().contains(said), "{said}: {}", seen.words());
    }
    let again = brewer.open(&action).await;
    assert_eq!(again.field("mg_per_l_as_caco3_per_drop"), "17.1");
    let plan = brewer.open(&format!("/plans/{id}")).await;
    assert!(
        plan.words().contains("205 ± 8.6 mg/L as CaCO₃"),
        "{}",
        plan.words()
    );
    // The runnings lead here when they are above their limit.
    let late = house
        .read_with(&id, json!({"stage": "last_runnings", "ph": 6.3}))
        .await;
    let page = house.page_of(&id, &late).await;
    assert!(
        page.words().contains("Check the sparge liquor"),
        "{}",
        page.words()
    );
}
