//! Materials and their lots: through the pages and through the API.

use serde_json::{Value, json};

use crate::desk::{Answer, Desk, Program};

fn gypsum() -> Value {
    json!({
        "name": "Gypsum", "substance": "gypsum", "scale_step_g_or_ml": 1,
        "price_per_kg_or_l": "2,50", "vessels": {"mash": true, "kettle": true}, "in_use": true,
    })
}

fn dihydrate() -> Value {
    json!({
        "name": "Calcium chloride", "substance": "calcium_chloride_dihydrate",
        "scale_step_g_or_ml": 1, "vessels": {"mash": true}, "in_use": true,
    })
}

async fn added(program: &Program, body: &Value) -> Answer {
    let answer = program.post("/materials", body).await;
    assert_eq!(answer.status, 201, "{:?}", answer.body);
    answer
}

fn path(answer: &Answer) -> String {
    let location = answer.location.as_deref().unwrap();
    location.strip_prefix("/api/v1").unwrap().to_owned()
}

#[tokio::test]
async fn a_material_is_added_read_and_replaced_and_a_stale_change_is_refused() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let new = added(&program, &gypsum()).await;
    let place = path(&new);
    let seen = program.get(&place).await;
    assert_eq!(seen.etag, new.etag);
    assert_eq!(seen.body["price_per_kg_or_l"], 2.5);
    assert_eq!(seen.body["unit"], "g");
    assert_eq!(seen.body["in_force"]["how_known"], "usual for it, assumed");

    let mut body = seen.body.clone();
    body["name"] = "Gypsum, fine".into();
    let stale = [("if-match", new.etag.as_deref().unwrap())];
    let first = program.send("PUT", &place, Some(&body), &stale).await;
    assert_eq!(first.status, 200, "{:?}", first.body);
    assert_ne!(first.etag, new.etag);
    let second = program.send("PUT", &place, Some(&body), &stale).await;
    assert_eq!(second.status, 409);

    body["substance"] = "epsom_salt".into();
    let other = program.put(&place, &body).await;
    assert_eq!(other.pointers(), ["/substance"]);
}

/// By hand, molar masses of IUPAC 2021: 10 g of CaSO₄·2H₂O (172.164 g/mol) of 98 %
/// assay in 100 L bring 98 · 40.078 / 172.164 = 22.81 mg/L of calcium and
/// 98 · 96.056 / 172.164 = 54.68 mg/L of sulfate.
#[tokio::test]
async fn ten_grams_of_gypsum_per_hectolitre_bring_what_the_molar_masses_say() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let new = added(&program, &gypsum()).await;
    let brings = new.body["in_force"]["ten_per_hl"].as_array().unwrap();
    let of = |figure: &str| {
        let found = brings.iter().find(|b| b["figure"] == figure).unwrap();
        found["mg_per_l"].as_f64().unwrap()
    };
    assert!((of("calcium") - 22.81).abs() < 0.01);
    assert!((of("sulfate") - 54.68).abs() < 0.01);
    assert_eq!(brings.len(), 2);
}

#[tokio::test]
async fn an_opened_pack_of_calcium_chloride_is_taken_as_damp_whatever_its_certificate_says() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let place = path(&added(&program, &dihydrate()).await);
    let lots = format!("{place}/lots");
    let sealed = json!({"code": "A1", "assay_percent": 99.1, "current": true, "in_use": true});
    let lot = program.post(&lots, &sealed).await;
    assert_eq!(lot.status, 201, "{:?}", lot.body);
    assert_eq!(lot.body["in_force"]["assay_percent"], 99.1);
    assert_eq!(lot.body["in_force"]["how_known"], "certificate of the lot");

    let mut opened = lot.body.clone();
    opened["opened_on"] = "2026-01-05".into();
    let lot = program.put(&path(&lot), &opened).await;
    assert_eq!(lot.status, 200, "{:?}", lot.body);
    assert_eq!(lot.body["in_force"]["assay_percent"], 90.0);
    assert_eq!(lot.body["in_force"]["how_known"], "opened pack, assumed");
}

#[tokio::test]
async fn one_lot_is_current_and_the_one_before_it_steps_aside() {
    let desk = Desk::start().await;
    let program = desk.full_program("qa").await;
    let manager = desk.full_program("manager").await;
    let place = path(&added(&manager, &gypsum()).await);
    let lots = format!("{place}/lots");
    for code in ["A1", "A2"] {
        let body = json!({"code": code, "current": true, "in_use": true});
        assert_eq!(program.post(&lots, &body).await.status, 201);
    }
    let listed = program.get(&lots).await;
    let current: Vec<&Value> = listed.body["items"]
        .as_array()
        .unwrap()
        .iter()
        .filter(|lot| lot["current"] == true)
        .map(|lot| &lot["code"])
        .collect();
    assert_eq!(current, ["A2"]);
    let again = program
        .post(&lots, &json!({"code": "a1", "in_use": true}))
        .await;
    assert_eq!(again.pointers(), ["/code"]);
    let foreign = path(&added(&manager, &dihydrate()).await);
    let lot = listed.body["items"][0]["id"].as_str().unwrap();
    let strayed = program.get(&format!("{foreign}/lots/{lot}")).await;
    assert_eq!(strayed.status, 404);
}

#[tokio::test]
async fn what_no_material_can_be_is_refused_at_its_field() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let with = |changes: Value| {
        let mut body = gypsum();
        for (name, value) in changes.as_object().unwrap() {
            body[name] = value.clone();
        }
        body
    };
    for (changes, pointer) in [
        (json!({"name": " "}), "/name"),
        (json!({"substance": "sugar"}), "/substance"),
        (
            json!({"scale_step_g_or_ml": "1e308"}),
            "/scale_step_g_or_ml",
        ),
        (json!({"scale_step_g_or_ml": 0}), "/scale_step_g_or_ml"),
        (json!({"scale_step_g_or_ml": "NaN"}), "/scale_step_g_or_ml"),
        (json!({"assay_percent": 101}), "/assay_percent"),
        (
            json!({"assay_percent": 98, "assay_sd_percent": -1}),
            "/assay_sd_percent",
        ),
        (json!({"price_per_kg_or_l": "-2"}), "/price_per_kg_or_l"),
        (
            json!({"highest_g_or_ml_per_hl": "1.000,5"}),
            "/highest_g_or_ml_per_hl",
        ),
        (json!({"vessels": {}}), "/vessels"),
        (
            json!({"strength": {"percent": 80, "density_g_per_ml": 1.2}}),
            "/strength/percent",
        ),
        (
            json!({"substance": "lactic_acid", "strength": {"percent": 80}}),
            "/strength/density_g_per_ml",
        ),
        (
            json!({"substance": "lactic_acid", "strength": {"percent": 80, "density_g_per_ml": 1.19, "g_per_l": 950}}),
            "/strength/percent",
        ),
        (json!({"substance": "blended_acid"}), "/strength/meq_per_ml"),
        (
            json!({"substance": "lactic_acid", "strength": {"meq_per_ml": 4, "chloride_percent": 50}}),
            "/strength/percent",
        ),
    ] {
        let answer = program.post("/materials", &with(changes.clone())).await;
        assert_eq!(answer.status, 422, "{changes}: {:?}", answer.body);
        assert_eq!(answer.pointers(), [pointer], "{changes}: {:?}", answer.body);
    }
    let place = path(&added(&program, &gypsum()).await);
    let twice = program
        .post("/materials", &with(json!({"name": "GYPSUM"})))
        .await;
    assert_eq!(twice.pointers(), ["/name"]);
    for (body, pointer) in [
        (json!({"code": ""}), "/code"),
        (
            json!({"code": "A", "received_on": "2199-01-01"}),
            "/received_on",
        ),
        (json!({"code": "A", "opened_on": "31.3.2026"}), "/opened_on"),
        (
            json!({"code": "A", "received_on": "2026-02-02", "opened_on": "2026-02-01"}),
            "/opened_on",
        ),
        (
            json!({"code": "A", "current": true, "in_use": false}),
            "/current",
        ),
        (
            json!({"code": "A", "strength": {"g_per_l": 500}}),
            "/strength/percent",
        ),
    ] {
        let answer = program.post(&format!("{place}/lots"), &body).await;
        assert_eq!(answer.pointers(), [pointer], "{body}: {:?}", answer.body);
    }
}

#[tokio::test]
async fn a_blended_acid_is_known_by_its_titrated_strength_and_each_lot_by_its_own() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let new = added(
        &program,
        &json!({
            "name": "Blend", "substance": "blended_acid", "scale_step_g_or_ml": 1,
            "strength": {"meq_per_ml": 4, "chloride_percent": 50},
            "vessels": {"liquor_tank": true}, "in_use": true,
        }),
    )
    .await;
    let fall = |body: &Value| {
        let brings = body["in_force"]["ten_per_hl"].as_array().unwrap();
        let found = brings
            .iter()
            .find(|b| b["figure"] == "alkalinity_as_caco3")
            .unwrap();
        found["mg_per_l"].as_f64().unwrap()
    };
    // 10 mL · 4 meq/mL in 100 L: 0.4 meq/L, 50.04 mg CaCO₃ each.
    assert!((fall(&new.body) + 20.02).abs() < 0.01);
    let lot =
        json!({"code": "B", "strength": {"meq_per_ml": 5, "chloride_percent": 40}, "in_use": true});
    let lot = program.post(&format!("{}/lots", path(&new)), &lot).await;
    assert!((fall(&lot.body) + 25.02).abs() < 0.01, "{:?}", lot.body);
}

#[tokio::test]
async fn only_a_manager_keeps_the_shelf_and_a_brewer_keeps_no_lots() {
    let desk = Desk::start().await;
    let manager = desk.full_program("manager").await;
    let place = path(&added(&manager, &gypsum()).await);
    let lots = format!("{place}/lots");
    for (login, lot_status) in [("qa", 201), ("brewer", 403)] {
        let program = desk.full_program(login).await;
        assert_eq!(program.post("/materials", &dihydrate()).await.status, 403);
        assert_eq!(program.put(&place, &gypsum()).await.status, 403);
        let lot = json!({"code": login, "in_use": true});
        assert_eq!(program.post(&lots, &lot).await.status, lot_status);
        assert_eq!(program.get(&lots).await.status, 200);
    }
}
