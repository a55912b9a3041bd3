//! Materials and their lots: through the pages and through the API.

use serde_json::{Value, json};

use leat::brewery::{Settings, Units};
use reqwest::StatusCode;

use crate::desk::{Answer, Browser, Desk, Program, Seen, offered};

mod attachments;
mod labels;
mod stock;

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

/// Today in the time zone of a fresh brewery.
fn today() -> String {
    leat::web::format::today(&Settings::default().time_zone).to_string()
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
async fn an_opened_pack_of_calcium_chloride_drifts_to_damp_whatever_its_certificate_says() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let place = path(&added(&program, &dihydrate()).await);
    let lots = format!("{place}/lots");
    let sealed = json!({"code": "A1", "assay_percent": 99.1, "current": true, "in_use": true});
    let lot = program.post(&lots, &sealed).await;
    assert_eq!(lot.status, 201, "{:?}", lot.body);
    assert_eq!(lot.body["in_force"]["assay_percent"], 99.1);
    assert_eq!(lot.body["in_force"]["how_known"], "certificate of the lot");

    let place = path(&lot);
    let mut opened = lot.body.clone();
    // A year is twelve times the assumed time: all but damp. Source: 90 ± 7 %, see
    // `Substance::opened_assay`.
    opened["opened_on"] = "2025-12-01".into();
    let lot = program.put(&place, &opened).await;
    assert_eq!(lot.status, 200, "{:?}", lot.body);
    let in_force = &lot.body["in_force"];
    assert!((in_force["assay_percent"].as_f64().unwrap() - 90.0).abs() < 0.01);
    assert!((in_force["assay_sd_percent"].as_f64().unwrap() - 7.0).abs() < 0.01);
    assert_eq!(in_force["how_known"], "opened pack, assumed");

    // An assay of our own begins anew.
    let mut assayed = lot.body.clone();
    assayed["assay_percent"] = 93.into();
    assayed["assay_sd_percent"] = 1.5.into();
    assayed["assayed_on"] = today().into();
    let lot = program.put(&place, &assayed).await;
    assert_eq!(lot.status, 200, "{:?}", lot.body);
    assert_eq!(lot.body["in_force"]["assay_percent"], 93.0);
    assert_eq!(lot.body["in_force"]["assay_sd_percent"], 1.5);
    assert_eq!(
        lot.body["in_force"]["how_known"],
        "own assay, then open, assumed"
    );
    assayed["assay_percent"] = Value::Null;
    let nothing = program.put(&place, &assayed).await;
    assert!(
        nothing.pointers().contains(&"/assay_percent"),
        "{nothing:?}"
    );
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
        (json!({"tolerance_percent": 0}), "/tolerance_percent"),
        (json!({"tolerance_percent": "50"}), "/tolerance_percent"),
        (
            json!({"reorder_below_g_or_ml": -5}),
            "/reorder_below_g_or_ml",
        ),
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
        (json!({"assay_sd_percent": 1}), "/assay_sd_percent"),
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

/// Fills in the form for a new material of this substance.
async fn filled(browser: &Browser, substance: &str, typed: &[(&str, &str)]) -> Seen {
    let form = browser
        .open(&format!("/shelf/new?substance={substance}"))
        .await;
    browser.fill(&form, "/shelf/new", typed).await
}

#[tokio::test]
async fn an_empty_shelf_offers_the_usual_materials_in_one_go() {
    let desk = Desk::start().await;
    let browser = desk.browser("manager").await;
    let empty = browser.open("/shelf").await;
    let names = offered(&empty, "/shelf/usual", &[]);
    assert!(names.iter().any(|(name, _)| name == "usual.gypsum"));
    let fields = [
        ("usual.citric_acid_anhydrous", "yes"),
        ("usual.lactic_acid", "no"),
    ];
    let shelf = browser.fill(&empty, "/shelf/usual", &fields).await;
    assert_eq!(shelf.path, "/shelf");
    let rows = shelf.texts("tbody th a");
    for name in ["Gypsum", "Epsom salt", "Citric acid, anhydrous"] {
        assert!(rows.iter().any(|row| row == name), "{rows:?}");
    }
    assert!(!rows.iter().any(|row| row == "Lactic acid"), "{rows:?}");
    assert!(shelf.words().contains("usual for it, assumed"));

    let none: Vec<(String, String)> = Vec::new();
    let refused = browser.post("/shelf/usual", &none).await;
    assert_eq!(refused.status, StatusCode::UNPROCESSABLE_ENTITY);
    for login in ["qa", "brewer"] {
        let browser = desk.browser(login).await;
        let page = browser.post("/shelf/usual", &names).await;
        assert_eq!(page.status, StatusCode::FORBIDDEN);
    }
}

#[tokio::test]
async fn a_form_with_slips_comes_back_as_typed_with_each_slip_at_its_field() {
    let desk = Desk::start().await;
    let browser = desk.browser("manager").await;
    let page = filled(
        &browser,
        "lactic_acid",
        &[
            ("name", "Lactic <88>"),
            ("strength.percent", "88 %"),
            ("scale_step_g_or_ml", "five"),
            ("price_per_kg_or_l", "1e308"),
            ("notes", "blue drum"),
        ],
    )
    .await;
    assert_eq!(page.status, StatusCode::UNPROCESSABLE_ENTITY);
    for (name, value) in [
        ("name", "Lactic <88>"),
        ("strength.percent", "88 %"),
        ("scale_step_g_or_ml", "five"),
        ("price_per_kg_or_l", "1e308"),
        ("notes", "blue drum"),
    ] {
        assert_eq!(page.field(name), value, "{name}");
    }
    for name in [
        "strength.percent",
        "strength.density_g_per_ml",
        "scale_step_g_or_ml",
        "price_per_kg_or_l",
    ] {
        assert!(page.error(name).is_some(), "{name}");
    }
    assert_eq!(page.error("name"), None);
}

#[tokio::test]
async fn a_material_is_entered_changed_and_taken_out_of_use_through_its_forms() {
    let desk = Desk::start().await;
    let browser = desk.browser("manager").await;
    let fields = [
        ("name", "Lactic"),
        ("strength.percent", "88,0"),
        ("strength.density_g_per_ml", "1,206"),
        ("price_per_kg_or_l", "6,40"),
    ];
    let page = filled(&browser, "lactic_acid", &fields).await;
    assert!(
        page.words().contains("88.0 ± 2.6 % w/w, 1.206 g/mL"),
        "{}",
        page.words()
    );
    assert!(
        page.words()
            .contains("Add acid to water, never water to acid.")
    );
    assert!(page.words().contains("Follow the safety data sheet"));
    assert!(page.words().contains("€ 6.40 per L"));

    assert!(page.words().contains("2 %, assumed"), "{}", page.words());

    let place = format!("{}/edit", page.path);
    let form = browser.open(&place).await;
    let fields = [("tolerance_percent", "1,5"), ("reorder_below_g_or_ml", "5")];
    let page = browser.fill(&form, &place, &fields).await;
    assert!(page.words().contains("1.5 %"), "{}", page.words());
    assert!(
        page.words().contains("Buy more below5 L"),
        "{}",
        page.words()
    );

    let form = browser.open(&place).await;
    assert_eq!(form.field("reorder_below_g_or_ml"), "5");
    assert_eq!(form.field("strength.percent"), "88");
    let changed = browser
        .fill(&form, &place, &[("name", "Lactic acid, drum")])
        .await;
    assert!(changed.words().contains("Lactic acid, drum"));
    let stale = browser.fill(&form, &place, &[("name", "Other")]).await;
    assert_eq!(stale.status, StatusCode::CONFLICT);
    assert_eq!(stale.field("name"), "Other");

    let form = browser.open(&place).await;
    browser.fill(&form, &place, &[("in_use", "no")]).await;
    assert!(browser.open("/shelf").await.texts("tbody th").is_empty());
    let retired = browser.open("/shelf?retired=yes").await;
    assert_eq!(retired.texts("tbody th a"), ["Lactic acid, drum"]);

    let record = browser.open("/record").await;
    assert!(
        record
            .words()
            .contains("changed material “Lactic acid, drum”")
    );
}

#[tokio::test]
async fn a_form_sent_twice_with_one_key_adds_one_material() {
    let desk = Desk::start().await;
    let browser = desk.browser("manager").await;
    let form = browser.open("/shelf/new?substance=gypsum").await;
    let fields = offered(&form, "/shelf/new", &[("name", "Gypsum, once")]);
    let first = browser.post("/shelf/new", &fields).await;
    let second = browser.post("/shelf/new", &fields).await;
    assert_eq!(first.path, second.path);
    let shelf = browser.open("/shelf").await;
    assert_eq!(shelf.texts("tbody th a"), ["Gypsum, once"]);
}

#[tokio::test]
async fn an_opened_pack_says_on_its_page_that_it_is_taken_as_damp() {
    let desk = Desk::start().await;
    let manager = desk.browser("manager").await;
    let page = filled(&manager, "calcium_chloride_dihydrate", &[]).await;
    let qa = desk.browser("qa").await;
    let place = format!("{}/lots/new", page.path);
    let form = qa.open(&place).await;
    let wrong = [("code", "A1"), ("opened_on", "2199-05-05")];
    let wrong = qa.fill(&form, &place, &wrong).await;
    assert_eq!(wrong.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert!(
        wrong
            .error("opened_on")
            .unwrap()
            .contains("has not come yet")
    );
    let fields = [
        ("code", "A1"),
        ("received_on", "2026-01-01"),
        ("opened_on", "2026-01-02"),
        ("use_by", "2026-02-01"),
        ("assay_percent", "99,1"),
    ];
    let page = qa.fill(&form, &place, &fields).await;
    let words = page.words();
    assert!(words.contains("It has stood open for long"), "{words}");
    assert!(words.contains("90 ± 7 %"), "{words}");
    assert!(words.contains("past its use-by day"), "{words}");
    let material = qa.open(&place.replace("/lots/new", "")).await.words();
    assert!(material.contains("The current pack is open"), "{material}");
}

/// 1 oz is 28.3495 g and 1 bbl 1.17348 hL: 1 oz/bbl is 24.159 g/hL.
#[tokio::test]
async fn a_us_brewery_types_and_reads_ounces_per_barrel_and_the_api_stays_metric() {
    let desk = Desk::start().await;
    let by = desk.member("manager").await;
    let settings = Settings {
        units: Units::Us,
        currency: "USD".into(),
        ..Settings::default()
    };
    leat::brewery::operations::revise(&desk.app.db, &by, settings, None)
        .await
        .unwrap();
    let browser = desk.browser("manager").await;
    let fields = [
        ("scale_step_g_or_ml", "0.1"),
        ("highest_g_or_ml_per_hl", "2"),
        ("price_per_kg_or_l", "3"),
    ];
    let page = filled(&browser, "gypsum", &fields).await;
    let words = page.words();
    for figure in [
        "0.1 oz",
        "2 oz/bbl",
        "USD 3.00 per lb",
        "What 1 oz/bbl brings",
    ] {
        assert!(words.contains(figure), "{figure}: {words}");
    }
    let form = browser.open(&format!("{}/edit", page.path)).await;
    assert_eq!(form.field("highest_g_or_ml_per_hl"), "2");
    let program = desk.full_program("manager").await;
    let listed = program.get("/materials").await;
    let stored = &listed.body["items"][0];
    let near = |name: &str, wanted: f64| {
        let value = stored[name].as_f64().unwrap();
        assert!((value / wanted - 1.0).abs() < 1e-4, "{name}: {value}");
    };
    near("scale_step_g_or_ml", 2.83495);
    near("highest_g_or_ml_per_hl", 2.0 * 24.159);
    near("price_per_kg_or_l", 3.0 / 0.453_592);
}

#[tokio::test]
async fn a_long_shelf_is_paged_and_sorts_by_price() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    for number in 0..45 {
        let mut body = gypsum();
        body["name"] = format!("Gypsum {number:02}").into();
        body["price_per_kg_or_l"] = (100 - number).into();
        added(&program, &body).await;
    }
    let first = program.get("/materials?limit=40").await;
    let cursor = first.body["next_cursor"].as_str().unwrap();
    let second = program
        .get(&format!("/materials?limit=40&cursor={cursor}"))
        .await;
    assert_eq!(second.body["items"].as_array().unwrap().len(), 5);
    assert_eq!(second.body["next_cursor"], Value::Null);

    let browser = desk.browser("brewer").await;
    let page = browser.open("/shelf?sort=price").await;
    let rows = page.texts("tbody th a");
    assert_eq!((rows.len(), rows[0].as_str()), (40, "Gypsum 44"));
    assert!(page.words().contains("1 to 40 of 45"));
    let rest = browser.open("/shelf?sort=price&after=40").await;
    assert_eq!(rest.texts("tbody th a")[4], "Gypsum 00");
}
