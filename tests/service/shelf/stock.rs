//! How much is on the shelf: what came, what was counted, what was weighed out.

use serde_json::{Value, json};

use leat::brewery::{Settings, Units};
use leat::id::UtcTime;
use reqwest::StatusCode;

use super::{added, gypsum, path, today};
use crate::brewhouse::{Brewhouse, made};
use crate::desk::{Answer, Desk, Program};

/// A lot of a material and where the API keeps it: `/materials/{id}/lots/{lot}`.
async fn lot(program: &Program, material: &str, code: &str) -> String {
    let body = json!({"code": code, "current": true, "in_use": true});
    let answer = program.post(&format!("{material}/lots"), &body).await;
    assert_eq!(answer.status, 201, "{:?}", answer.body);
    path(&answer)
}

async fn moved(program: &Program, lot: &str, body: Value) -> Answer {
    program.post(&format!("{lot}/movements"), &body).await
}

async fn stock(program: &Program, lot: &str) -> Value {
    let answer = program.get(&format!("{lot}/stock")).await;
    assert_eq!(answer.status, 200, "{:?}", answer.body);
    answer.body["stock_g_or_ml"].clone()
}

fn ago(seconds: i64) -> String {
    UtcTime::now().plus_seconds(-seconds).to_string()
}

fn delivery(grams: f64, at: &str) -> Value {
    json!({"kind": "delivery", "amount_g_or_ml": grams, "moved_at": at, "supplier": "Osier & Daughters", "delivery_note": "L-77"})
}

fn count(grams: f64, at: &str) -> Value {
    json!({"kind": "count", "amount_g_or_ml": grams, "moved_at": at})
}

#[tokio::test]
async fn what_nobody_counted_is_not_counted_and_not_nothing() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let material = path(&added(&program, &gypsum()).await);
    let lot = lot(&program, &material, "G-1").await;
    assert_eq!(stock(&program, &lot).await, Value::Null);
    let seen = program.get(&material).await;
    assert_eq!(seen.body["stock_g_or_ml"], Value::Null);
    assert_eq!(seen.body["lots_not_counted"], 1);
    let browser = desk.browser("brewer").await;
    let page = browser.open(&lot.replace("/materials", "/shelf")).await;
    assert!(
        page.words().contains("Nobody has counted this lot"),
        "{}",
        page.words()
    );
    let list = browser.open("/shelf").await;
    assert!(list.words().contains("not counted"), "{}", list.words());
    // Counted, nothing is nothing.
    assert_eq!(moved(&program, &lot, count(0.0, "")).await.status, 201);
    assert_eq!(stock(&program, &lot).await, 0.0);
}

#[tokio::test]
async fn stock_is_the_last_count_and_what_came_since() {
    let desk = Desk::start().await;
    let program = desk.full_program("qa").await;
    let manager = desk.full_program("manager").await;
    let material = path(&added(&manager, &gypsum()).await);
    let lot = lot(&program, &material, "G-1").await;
    let days = |days: i64| ago(days * 86_400);
    // Entered in another order than they happened.
    for (body, there) in [
        (delivery(25_000.0, &days(40)), 25_000.0),
        (delivery(1_000.0, &days(5)), 26_000.0),
        (
            json!({"kind": "count", "amount_g_or_ml": 20_000, "moved_at": days(10), "reason": "used to whiten the wall"}),
            21_000.0,
        ),
        // It was there at the count of ten days ago.
        (delivery(7_000.0, &days(20)), 21_000.0),
        (delivery(500.0, ""), 21_500.0),
    ] {
        let answer = moved(&program, &lot, body).await;
        assert_eq!(answer.status, 201, "{:?}", answer.body);
        assert_eq!(stock(&program, &lot).await, there);
    }
    let seen = manager.get(&lot).await;
    assert_eq!(seen.body["stock_g_or_ml"], 21_500.0);
    let listed = program.get(&format!("{lot}/movements?limit=2")).await;
    assert_eq!(listed.body["items"].as_array().unwrap().len(), 2);
    assert_eq!(listed.body["items"][0]["supplier"], "Osier & Daughters");
    let next = listed.body["next_cursor"].as_str().unwrap();
    let next = program
        .get(&format!("{lot}/movements?limit=9&cursor={next}"))
        .await;
    assert_eq!(next.body["items"].as_array().unwrap().len(), 3);
}

#[tokio::test]
async fn a_dose_is_taken_from_the_lot_it_names_and_from_no_other() {
    let house = Brewhouse::build().await;
    let program = &house.manager;
    let materials = program.get("/materials").await;
    let plan = house.approved("26-401").await;
    let doses = house.doses(&plan).await;
    let mut taken = Vec::new();
    for dose in &doses {
        let name = dose["name"].as_str().unwrap();
        let items = materials.body["items"].as_array().unwrap();
        let material = items.iter().find(|it| it["name"] == name).unwrap();
        let material = format!("/materials/{}", material["id"].as_str().unwrap());
        let lots = program.get(&format!("{material}/lots")).await;
        let place = match lots.body["items"][0]["id"].as_str() {
            Some(id) => format!("{material}/lots/{id}"),
            None => {
                let place = lot(program, &material, "A-1").await;
                assert_eq!(
                    moved(program, &place, delivery(10_000.0, &ago(86_400)))
                        .await
                        .status,
                    201
                );
                place
            }
        };
        let actual = dose["planned"].as_f64().unwrap();
        let id = dose["id"].as_str().unwrap();
        let lot_id = place.rsplit('/').next().unwrap();
        let body = json!({"actual": actual, "material_lot_id": lot_id});
        let answer = program
            .put(&format!("/plans/{plan}/doses/{id}"), &body)
            .await;
        assert_eq!(answer.status, 200, "{:?}", answer.body);
        taken.push((place, actual));
    }
    assert!(!taken.is_empty());
    for (place, _) in &taken {
        let of_lot = taken.iter().filter(|(it, _)| it == place);
        let expected = 10_000.0 - of_lot.map(|(_, actual)| actual).sum::<f64>();
        let there = stock(program, place).await.as_f64().unwrap();
        assert!((there - expected).abs() < 1e-6, "{there} for {expected}");
        let seen = program.get(&format!("{place}/stock")).await;
        assert_eq!(seen.body["doses"][0]["batch"], "26-401");
    }
    // What is taken back is there again.
    let (place, _) = &taken[0];
    let id = doses[0]["id"].as_str().unwrap();
    let body = json!({"reason": "went into the wrong jug"});
    let answer = program
        .send(
            "DELETE",
            &format!("/plans/{plan}/doses/{id}"),
            Some(&body),
            &[],
        )
        .await;
    assert_eq!(answer.status, 200, "{:?}", answer.body);
    let before = doses[0]["planned"].as_f64().unwrap();
    let of_lot = taken.iter().filter(|(it, _)| it == place);
    let expected = 10_000.0 - of_lot.map(|(_, actual)| actual).sum::<f64>() + before;
    let there = stock(program, place).await.as_f64().unwrap();
    assert!((there - expected).abs() < 1e-6, "{there} for {expected}");
    // The ledger names the batch.
    let browser = house.desk.browser("brewer").await;
    let (place, _) = taken.last().unwrap();
    let page = browser.open(&place.replace("/materials", "/shelf")).await;
    assert!(
        page.texts("tbody a").contains(&"26-401".to_owned()),
        "{}",
        page.words()
    );
    assert!(page.words().contains("Lasts"), "{}", page.words());
}

#[tokio::test]
async fn a_plan_that_wants_more_than_there_is_is_short_of_it() {
    use chemistry::quantity::DoseAmount;
    use leat::shelf::stock::operations;
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let material = path(&added(&program, &gypsum()).await);
    let id = material.rsplit('/').next().unwrap().parse().unwrap();
    let first = lot(&program, &material, "G-1").await;
    moved(&program, &first, delivery(300.0, &ago(60 * 60))).await;
    let short = async |grams: [f64; 2]| {
        let mut reader = desk.app.db.reader().await.unwrap();
        let planned = grams.map(|grams| (id, DoseAmount::new(grams).unwrap()));
        operations::shortages(&mut reader, planned).await.unwrap()
    };
    assert!(short([100.0, 200.0]).await.is_empty());
    let found = short([100.0, 200.5]).await;
    assert_eq!(found.len(), 1);
    assert_eq!(found[0].planned.get(), 300.5);
    assert_eq!(found[0].stock.get(), 300.0);
    // A lot that nobody counted may hold what is missing.
    lot(&program, &material, "G-2").await;
    assert!(short([100.0, 200.5]).await.is_empty());
}

#[tokio::test]
async fn a_slip_is_corrected_by_another_movement_and_both_stay_to_be_read() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let material = path(&added(&program, &gypsum()).await);
    let lot = lot(&program, &material, "G-1").await;
    let typo = made(&moved(&program, &lot, delivery(250_000.0, &ago(7_200))).await);
    let corrected = |id: &str, reason: &str, grams: f64| {
        let mut body = delivery(grams, &ago(7_200));
        body["corrects"] = id.into();
        body["reason"] = reason.into();
        body
    };
    let silent = moved(&program, &lot, corrected(&typo, " ", 25_000.0)).await;
    assert_eq!(silent.pointers(), ["/reason"], "{:?}", silent.body);
    let right = corrected(&typo, "a nought too many", 25_000.0);
    let right = made(&moved(&program, &lot, right).await);
    assert_eq!(stock(&program, &lot).await, 25_000.0);
    let twice = moved(&program, &lot, corrected(&typo, "again", 1.0)).await;
    assert_eq!(twice.pointers(), ["/corrects"], "{:?}", twice.body);
    let mut other = count(5.0, "");
    other["corrects"] = right.as_str().into();
    other["reason"] = "was a count".into();
    assert_eq!(moved(&program, &lot, other).await.pointers(), ["/kind"]);

    let browser = desk.browser("manager").await;
    let shelf = lot.replace("/materials", "/shelf");
    let place = format!("{shelf}/movements");
    let form = browser.open(&format!("{place}/{right}")).await;
    assert_eq!(form.field("amount_g_or_ml"), "25");
    let back = [
        ("_key".to_owned(), uuid()),
        ("kind".to_owned(), "removal".to_owned()),
        ("corrects".to_owned(), right.clone()),
        ("reason".to_owned(), "came for the neighbour".to_owned()),
    ];
    let page = browser.post(&place, &back).await;
    assert_eq!(page.path, shelf);
    let words = page.words();
    for kept in ["+250.0 kg", "a nought too many", "came for the neighbour"] {
        assert!(words.contains(kept), "{kept}: {words}");
    }
    assert_eq!(stock(&program, &lot).await, Value::Null);
    let record = browser.open("/record").await.words();
    assert!(record.contains("took back a movement of"), "{record}");
    assert!(record.contains("a nought too many"), "{record}");
}

fn uuid() -> String {
    leat::id::MovementId::new().to_string()
}

#[tokio::test]
async fn no_hand_on_the_database_changes_or_removes_a_movement() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let material = path(&added(&program, &gypsum()).await);
    let lot = lot(&program, &material, "G-1").await;
    let id = made(&moved(&program, &lot, delivery(25_000.0, &ago(7_200))).await);
    for statement in [
        "UPDATE material_movements SET amount_g_or_ml = 1",
        "DELETE FROM material_movements",
        "INSERT OR REPLACE INTO material_movements SELECT id, material_lot_id, kind, 1, moved_at,
         supplier, delivery_note, reason, corrects, entered_at, entered_by FROM material_movements",
    ] {
        let mut tx = desk.app.db.begin().await.unwrap();
        let refused = sqlx::query(statement).execute(&mut *tx).await.unwrap_err();
        let refused = refused.to_string();
        assert!(refused.contains("corrected"), "{statement}: {refused}");
    }
    let seen = program.get(&format!("{lot}/movements/{id}")).await;
    assert_eq!(seen.body["amount_g_or_ml"], 25_000.0);
}

#[tokio::test]
async fn a_count_that_is_not_what_was_expected_says_why() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let material = path(&added(&program, &gypsum()).await);
    let lot = lot(&program, &material, "G-1").await;
    moved(&program, &lot, delivery(10_000.0, &ago(7_200))).await;
    // Two per cent off pass, as a scale and a scoop are.
    let near = moved(&program, &lot, count(9_810.0, &ago(3_600))).await;
    assert_eq!(near.status, 201, "{:?}", near.body);
    let off = moved(&program, &lot, count(9_000.0, "")).await;
    assert_eq!(off.pointers(), ["/reason"], "{:?}", off.body);
    let mut said = count(9_000.0, "");
    said["reason"] = "a bag split".into();
    assert_eq!(moved(&program, &lot, said).await.status, 201);
    assert_eq!(stock(&program, &lot).await, 9_000.0);
    let browser = desk.browser("brewer").await;
    let page = browser.open(&lot.replace("/materials", "/shelf")).await;
    assert!(
        page.words().contains("810 g less than expected"),
        "{}",
        page.words()
    );
}

#[tokio::test]
async fn more_weighed_out_than_came_is_shown_below_nothing() {
    let house = Brewhouse::build().await;
    let program = &house.manager;
    let plan = house.approved("26-402").await;
    let dose = house.doses(&plan).await.remove(0);
    let materials = program.get("/materials").await;
    let items = materials.body["items"].as_array().unwrap();
    let material = items.iter().find(|it| it["name"] == dose["name"]).unwrap();
    let material = format!("/materials/{}", material["id"].as_str().unwrap());
    let lot = lot(program, &material, "A-1").await;
    moved(program, &lot, delivery(10.0, &ago(7_200))).await;
    let body = json!({"actual": dose["planned"], "lot": format!("LEAT:LOT:{}", lot.rsplit('/').next().unwrap())});
    let id = dose["id"].as_str().unwrap();
    let answer = program
        .put(&format!("/plans/{plan}/doses/{id}"), &body)
        .await;
    assert_eq!(answer.status, 200, "{:?}", answer.body);
    let there = stock(program, &lot).await.as_f64().unwrap();
    assert!((there - (10.0 - dose["planned"].as_f64().unwrap())).abs() < 1e-6);
    assert!(there < 0.0, "{there}");
    let seen = program.get(&format!("{lot}/stock")).await;
    assert_eq!(seen.body["warnings"], json!(["overdrawn"]));
    let browser = house.desk.browser("qa").await;
    let page = browser.open(&lot.replace("/materials", "/shelf")).await;
    let words = page.words();
    assert!(
        words.contains("More was weighed out than was delivered"),
        "{words}"
    );
    assert!(words.contains('\u{2212}'), "{words}");
}

#[tokio::test]
async fn low_expired_and_long_open_packs_are_warned_of_in_the_lists() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let mut body = super::dihydrate();
    body["reorder_below_g_or_ml"] = 5_000.into();
    let material = path(&added(&program, &body).await);
    let lot = json!({"code": "C-1", "current": true, "in_use": true, "opened_on": "2025-12-01", "use_by": "2026-01-31"});
    let lot = path(&program.post(&format!("{material}/lots"), &lot).await);
    moved(&program, &lot, delivery(4_999.0, &ago(7_200))).await;
    let seen = program.get(&material).await;
    assert_eq!(
        seen.body["warnings"],
        json!(["low", "past_use_by", "open_long"])
    );
    let browser = desk.browser("brewer").await;
    for place in [
        "/shelf".to_owned(),
        material.replace("/materials", "/shelf"),
    ] {
        let words = browser.open(&place).await.words();
        for warning in ["low: buy more", "past its use-by day", "assay it"] {
            assert!(
                words.contains(warning),
                "{place} without {warning}: {words}"
            );
        }
    }
    let page = browser.open(&lot.replace("/materials", "/shelf")).await;
    assert!(page.words().contains("SG 1.086"), "{}", page.words());

    let mut fresh = program.get(&lot).await.body;
    fresh["opened_on"] = "".into();
    let near = leat::web::format::today("UTC") + jiff_days(20);
    fresh["use_by"] = near.to_string().into();
    assert_eq!(program.put(&lot, &fresh).await.status, 200);
    moved(&program, &lot, delivery(1.0, "")).await;
    let seen = program.get(&material).await;
    assert_eq!(seen.body["warnings"], json!(["near_use_by"]));
}

fn jiff_days(days: i64) -> jiff::Span {
    jiff::Span::new().days(days)
}

/// 1 lb is 453.592 37 g (NIST Handbook 44, app. C).
#[tokio::test]
async fn a_us_brewery_counts_pounds() {
    let desk = Desk::start().await;
    let by = desk.member("manager").await;
    let settings = Settings {
        units: Units::Us,
        ..Settings::default()
    };
    leat::brewery::operations::revise(&desk.app.db, &by, settings, None)
        .await
        .unwrap();
    let program = desk.full_program("manager").await;
    let material = path(&added(&program, &gypsum()).await);
    let lot = lot(&program, &material, "G-1").await;
    let browser = desk.browser("qa").await;
    let shelf = lot.replace("/materials", "/shelf");
    let form = browser.open(&format!("{shelf}/deliveries/new")).await;
    let fields = [("amount_g_or_ml", "55"), ("moved_at", &*today())];
    let place = format!("{shelf}/movements");
    let page = browser.fill(&form, &place, &fields).await;
    assert!(page.words().contains("+55.00 lb"), "{}", page.words());
    let there = stock(&program, &lot).await.as_f64().unwrap();
    assert!((there - 55.0 * 453.592_37).abs() < 1e-6);
    let form = browser.open(&format!("{shelf}/counts/new")).await;
    assert!(form.words().contains("55.00 lb"), "{}", form.words());
    let page = browser
        .fill(&form, &place, &[("amount_g_or_ml", "fifty")])
        .await;
    assert_eq!(page.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert_eq!(page.field("amount_g_or_ml"), "fifty");
    assert_eq!(page.field("kind"), "count");
}

#[tokio::test]
async fn what_no_movement_can_be_is_refused_at_its_field() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let material = path(&added(&program, &gypsum()).await);
    let place = lot(&program, &material, "G-1").await;
    let foreign = lot(&program, &material, "G-2").await;
    let foreign = made(&moved(&program, &foreign, delivery(5.0, "")).await);
    for (changes, pointer) in [
        (json!({"kind": "gift"}), "/kind"),
        (json!({"amount_g_or_ml": 0}), "/amount_g_or_ml"),
        (json!({"amount_g_or_ml": -1}), "/amount_g_or_ml"),
        (json!({"amount_g_or_ml": "NaN"}), "/amount_g_or_ml"),
        (json!({"amount_g_or_ml": "1e308"}), "/amount_g_or_ml"),
        (json!({"amount_g_or_ml": null}), "/amount_g_or_ml"),
        (json!({"moved_at": "2199-01-01"}), "/moved_at"),
        (json!({"moved_at": "31.3.2026"}), "/moved_at"),
        (json!({"moved_at": "0001-01-01"}), "/moved_at"),
        (json!({"supplier": "x".repeat(121)}), "/supplier"),
        (json!({"delivery_note": "bell \u{7}"}), "/delivery_note"),
        (json!({"corrects": "nothing", "reason": "r"}), "/corrects"),
        (json!({"corrects": foreign, "reason": "r"}), "/corrects"),
        (
            json!({"kind": "removal", "amount_g_or_ml": null}),
            "/corrects",
        ),
    ] {
        let mut body = delivery(5.0, "");
        for (name, value) in changes.as_object().unwrap() {
            body[name] = value.clone();
        }
        let answer = moved(&program, &place, body).await;
        assert_eq!(answer.pointers(), [pointer], "{changes}: {:?}", answer.body);
    }
    assert_eq!(stock(&program, &place).await, Value::Null);
}

#[tokio::test]
async fn a_brewer_reads_the_stock_and_moves_none() {
    let desk = Desk::start().await;
    let manager = desk.full_program("manager").await;
    let material = path(&added(&manager, &gypsum()).await);
    let lot = lot(&manager, &material, "G-1").await;
    let brewer = desk.full_program("brewer").await;
    assert_eq!(moved(&brewer, &lot, delivery(5.0, "")).await.status, 403);
    assert_eq!(brewer.get(&format!("{lot}/stock")).await.status, 200);
    let shelf = lot.replace("/materials", "/shelf");
    let browser = desk.browser("brewer").await;
    for form in ["deliveries/new", "counts/new", "edit"] {
        let page = browser.open(&format!("{shelf}/{form}")).await;
        assert_eq!(page.status, StatusCode::FORBIDDEN, "{form}");
    }
    let page = browser.post(&format!("{shelf}/movements"), &[]).await;
    assert_eq!(page.status, StatusCode::FORBIDDEN);
    assert!(!browser.open(&shelf).await.text.contains("counts/new"));
}

#[tokio::test]
async fn a_delivery_sent_twice_with_one_key_came_once() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let material = path(&added(&program, &gypsum()).await);
    let lot = lot(&program, &material, "G-1").await;
    let browser = desk.browser("qa").await;
    let shelf = lot.replace("/materials", "/shelf");
    let form = browser.open(&format!("{shelf}/deliveries/new")).await;
    let place = format!("{shelf}/movements");
    let fields = crate::desk::offered(&form, &place, &[("amount_g_or_ml", "25")]);
    browser.post(&place, &fields).await;
    browser.post(&place, &fields).await;
    assert_eq!(stock(&program, &lot).await, 25_000.0);
}
