//! The weigh-out: which lot, how much, why not as planned, who stood by, and what is
//! corrected afterwards.

use reqwest::StatusCode;
use serde_json::{Value, json};

use crate::brewhouse::{Brewhouse, as_planned, expected_ph, made, weigh_form};
use crate::desk::{PASSWORD, Seen};

/// A brewery, an approved plan of its beer and the first line of the weigh-out, which is
/// lactic acid into the mash.
async fn first_line(batch: &str) -> (Brewhouse, String, Value) {
    let house = Brewhouse::build().await;
    let id = house.approved(batch).await;
    let dose = house.doses(&id).await.remove(0);
    assert_eq!(dose["name"], "Lactic acid", "{dose}");
    (house, id, dose)
}

fn dose_path(id: &str, dose: &Value) -> String {
    format!("/plans/{id}/doses/{}", dose["id"].as_str().unwrap())
}

async fn material(house: &Brewhouse, name: &str) -> String {
    let answer = house.manager.get("/materials?limit=200").await;
    let items = answer.body["items"].as_array().unwrap();
    let found = items.iter().find(|item| item["name"] == name).unwrap();
    found["id"].as_str().unwrap().to_owned()
}

async fn lot(house: &Brewhouse, name: &str, mut lot: Value) -> String {
    let material = material(house, name).await;
    lot["in_use"] = json!(true);
    let path = format!("/materials/{material}/lots");
    made(&house.manager.post(&path, &lot).await)
}

/// What the form that is shown offers, by name.
fn shown(page: &Seen, name: &str) -> String {
    let html = page.html();
    let selector = format!("section.line:not([hidden]) [name=\"{name}\"]");
    let input = scraper::Selector::parse(&selector).unwrap();
    let found = html.select(&input).next();
    let found = found.unwrap_or_else(|| panic!("no {name}: {}", page.words()));
    found.value().attr("value").unwrap_or("").to_owned()
}

#[tokio::test]
async fn an_amount_far_from_the_plan_is_asked_about_by_the_api_with_what_it_does() {
    let (house, id, dose) = first_line("26-701").await;
    let planned = dose["planned"].as_f64().unwrap();
    let path = dose_path(&id, &dose);
    // The usual tolerance is 2 %, here far more than one step of the measure, 5 mL.
    assert!(0.02 * planned > 5.0, "{planned}");
    let outside = json!({"actual": planned * 1.021});
    let asked = house.manager.put(&path, &outside).await;
    assert_eq!((asked.status, asked.pointers()), (422, vec!["/reason"]));
    let question = asked.body["detail"].as_str().unwrap();
    let before = expected_ph(&house.plan(&id).await);
    assert!(
        question.contains(&format!("mash pH from {before:.2} to")),
        "{question}"
    );
    assert!(question.contains("lactate from"), "{question}");
    assert!(house.doses(&id).await[0]["actual"].is_null());
    let said = json!({"actual": planned * 1.021, "reason": "The cylinder dripped."});
    assert_eq!(house.manager.put(&path, &said).await.status, 200);
    let kept = house.doses(&id).await.remove(0);
    assert_eq!(kept["reason"], "The cylinder dripped.");
    let after = expected_ph(&house.plan(&id).await);
    assert!(
        question.contains(&format!("mash pH from {before:.2} to {after:.2}")),
        "{question} and then {after}"
    );

    let id = house.approved("26-702").await;
    let dose = house.doses(&id).await.remove(0);
    let inside = json!({"actual": planned * 0.981});
    let taken = house.manager.put(&dose_path(&id, &dose), &inside).await;
    assert_eq!(taken.status, 200, "{:?}", taken.body);
}

#[tokio::test]
async fn a_digit_too_many_comes_back_as_typed_with_every_figure_against_its_window() {
    let (house, id, dose) = first_line("26-703").await;
    let planned = dose["planned"].as_f64().unwrap();
    let brewer = house.desk.browser("brewer").await;
    let page = brewer.open(&format!("/plans/{id}/weigh-out")).await;
    assert_eq!(
        shown(&page, "actual"),
        "",
        "what the scale showed is not known yet"
    );
    let action = weigh_form(&page);
    let tenfold = (planned * 10.0).to_string();
    let typed = [("actual", tenfold.as_str()), ("lot", "77-a")];
    let asked = brewer.fill(&page, &action, &typed).await;
    assert_eq!(asked.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert_eq!(shown(&asked, "actual"), tenfold);
    assert_eq!(shown(&asked, "lot"), "77-a");
    let words = asked.texts(".asked").join(" ");
    assert!(words.contains("900 % more than planned"), "{words}");
    let rows = asked.texts(".asked tbody tr");
    assert!(rows[0].starts_with("Mash pH"), "{rows:?}");
    assert!(rows[0].contains("below 5.30 to 5.50"), "{rows:?}");
    for ion in ["Calcium", "Sulfate", "Chloride", "Lactate"] {
        assert!(
            rows.iter().any(|row| row.starts_with(ion)),
            "{ion}: {rows:?}"
        );
    }
    assert!(house.doses(&id).await[0]["actual"].is_null());
    // It may be true all the same: then the record says what went in, and why.
    let said = [typed[0], ("reason", "The lid was loose.")];
    let kept = brewer.fill(&asked, &action, &said).await;
    assert_eq!(kept.status, StatusCode::OK, "{}", kept.words());
    let dose = house.doses(&id).await.remove(0);
    assert!((dose["actual"].as_f64().unwrap() - planned * 10.0).abs() < 1e-6);
    assert!(kept.words().contains("Why: The lid was loose."));
}

#[tokio::test]
async fn one_tap_takes_a_line_as_planned_and_a_line_left_out_needs_a_reason() {
    let (house, id, dose) = first_line("26-704").await;
    let brewer = house.desk.browser("brewer").await;
    let page = brewer.open(&format!("/plans/{id}/weigh-out")).await;
    let empty = brewer.fill(&page, &weigh_form(&page), &[]).await;
    assert_eq!(empty.status, StatusCode::UNPROCESSABLE_ENTITY);
    let none = brewer
        .fill(&page, &weigh_form(&page), &[("actual", "0")])
        .await;
    assert_eq!(none.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert!(none.words().contains("This line would be left out."));
    let page = as_planned(&brewer, &page, &[]).await;
    assert_eq!(page.status, StatusCode::OK, "{}", page.words());
    let kept = house.doses(&id).await.remove(0);
    assert_eq!(kept["actual"], dose["planned"], "to the last digit");
    assert!(kept["reason"].is_null());
}

#[tokio::test]
async fn a_scanned_label_picks_its_lot_and_that_of_another_material_is_refused_by_name() {
    let (house, id, dose) = first_line("26-705").await;
    let acid = lot(
        &house,
        "Lactic acid",
        json!({"code": "LA-31", "current": true}),
    )
    .await;
    let old = json!({"code": "LA-07", "use_by": "2025-01-31"});
    let old = lot(&house, "Lactic acid", old).await;
    let other = lot(&house, "Gypsum", json!({"code": "G-5"})).await;
    let brewer = house.desk.browser("brewer").await;
    let page = brewer.open(&format!("/plans/{id}/weigh-out")).await;
    let checked = page.texts("section:not([hidden]) .lots label:has([checked])");
    assert_eq!(checked, ["LA-31"]);
    let offered = page.texts("section:not([hidden]) .lots label");
    assert_eq!(offered.len(), 2, "{offered:?}");
    assert!(offered[0].starts_with("LA-31"), "the current one first");
    assert!(offered[1].contains("past its use-by day, 2025-01-31"));

    let action = weigh_form(&page);
    let label = format!("LEAT:LOT:{other}");
    let planned = dose["planned"].to_string();
    let wrong = brewer
        .fill(&page, &action, &[("lot", &label), ("actual", &planned)])
        .await;
    assert_eq!(wrong.status, StatusCode::UNPROCESSABLE_ENTITY);
    let told = wrong.texts(".problem-summary").join(" ");
    assert!(told.contains("lot G-5 of Gypsum"), "{told}");
    assert!(told.contains("This line takes Lactic acid"), "{told}");
    assert_eq!(shown(&wrong, "lot"), label);

    // A scanner is a keyboard, and one with its capitals locked is one too.
    let label = format!("leat:lot:{}", old.to_uppercase());
    as_planned(&brewer, &page, &[("lot", &label)]).await;
    let kept = house.doses(&id).await.remove(0);
    assert_eq!(kept["actual_lot"], "LA-07");
    assert_eq!(kept["actual_material_lot_id"], old.as_str());
    assert_ne!(acid, old);
}

#[tokio::test]
async fn a_typed_code_finds_its_lot_in_any_case_and_an_unknown_one_is_kept_with_a_notice() {
    let (house, id, _) = first_line("26-706").await;
    let known = lot(&house, "Lactic acid", json!({"code": "La-31b"})).await;
    let brewer = house.desk.browser("brewer").await;
    let page = brewer.open(&format!("/plans/{id}/weigh-out")).await;
    let next = as_planned(&brewer, &page, &[("lot", " LA-31B ")]).await;
    let kept = house.doses(&id).await.remove(0);
    assert_eq!(kept["actual_material_lot_id"], known.as_str());
    assert_eq!(kept["actual_lot"], "La-31b", "as the shelf spells it");
    let next = as_planned(&brewer, &next, &[("lot", "no such pack")]).await;
    assert!(
        next.words().contains("The shelf has no lot of that code"),
        "{}",
        next.words()
    );
    let kept = house.doses(&id).await.remove(1);
    assert_eq!(kept["actual_lot"], "no such pack");
    assert!(kept["actual_material_lot_id"].is_null());
    assert!(next.words().contains("not a lot of the shelf"));
}

#[tokio::test]
async fn half_the_strength_takes_twice_the_amount_and_the_record_alone_computes_it_again() {
    let house = Brewhouse::build().await;
    let acid = material(&house, "Lactic acid").await;
    let path = format!("/materials/{acid}");
    let mut label = house.manager.get(&path).await.body;
    label["strength"] = json!({"g_per_l": 952});
    assert_eq!(house.manager.put(&path, &label).await.status, 200);
    let id = house.approved("26-707").await;
    let weak = json!({"code": "weak", "strength": {"g_per_l": 476}, "current": true});
    let weak = lot(&house, "Lactic acid", weak).await;
    let before = house.plan(&id).await;
    let dose = house.doses(&id).await.remove(0);
    let planned = dose["planned"].as_f64().unwrap();
    let brewer = house.desk.browser("brewer").await;
    let page = brewer.open(&format!("/plans/{id}/weigh-out")).await;
    let notes = page.texts("section:not([hidden]) .lots label").join(" ");
    let twice = format!("{:.0} mL does what is planned", 2.0 * planned);
    assert!(notes.contains(&twice), "{notes}");
    // The planned amount of it would be half of what is meant.
    let half = as_planned(&brewer, &page, &[]).await;
    assert_eq!(half.status, StatusCode::UNPROCESSABLE_ENTITY);
    let words = half.texts(".asked").join(" ");
    assert!(words.contains("50.0 % less than this lot needs"), "{words}");
    let actual = (2.0 * planned).to_string();
    let next = brewer
        .fill(&page, &weigh_form(&page), &[("actual", &actual)])
        .await;
    assert_eq!(next.status, StatusCode::OK, "{}", next.words());
    let after = house.plan(&id).await;
    let close = |plan: &Value, what: &str| {
        let was = before["does"]["whole_liquor"]["ions_mg_per_l"][what].as_f64();
        let is = plan["does"]["whole_liquor"]["ions_mg_per_l"][what].as_f64();
        assert!((was.unwrap() - is.unwrap()).abs() < 1e-6, "{what}");
    };
    close(&after, "lactate");
    assert!((expected_ph(&after) - expected_ph(&before)).abs() < 1e-9);
    // What the shelf says of the lot later changes nothing of what went in.
    let path = format!("/materials/{acid}/lots/{weak}");
    let mut lot = house.manager.get(&path).await.body;
    lot["strength"] = json!({"g_per_l": 900});
    assert_eq!(house.manager.put(&path, &lot).await.status, 200);
    close(&house.plan(&id).await, "lactate");
    let frozen = house.manager.get(&format!("/plans/{id}/inputs")).await;
    assert!(
        !frozen.body.to_string().contains("476"),
        "inputs stay frozen"
    );
}

#[tokio::test]
async fn vessels_are_weighed_out_in_the_order_of_the_brewery() {
    let (house, id, _) = first_line("26-708").await;
    let doses = house.doses(&id).await;
    let vessels: Vec<&str> = doses
        .iter()
        .map(|dose| dose["vessel"].as_str().unwrap())
        .collect();
    assert!(vessels.contains(&"mash") && vessels.contains(&"sparge_liquor"));
    let manager = house.desk.browser("manager").await;
    let first = async || {
        let page = manager.open(&format!("/plans/{id}/weigh-out")).await;
        page.texts("section:not([hidden]) .weigh-vessel").remove(0)
    };
    assert!(first().await.contains("mash"));
    let settings = manager.open("/settings").await;
    let order = [
        ("vessel_order.0", "sparge_liquor"),
        ("vessel_order.1", "kettle"),
        ("vessel_order.2", "mash"),
        ("vessel_order.3", "liquor_tank"),
    ];
    let saved = manager.fill(&settings, "/settings", &order).await;
    assert_eq!(saved.status, StatusCode::OK, "{}", saved.words());
    assert!(first().await.contains("sparge liquor"));
}

#[tokio::test]
async fn acid_is_weighed_in_with_a_second_person_who_proves_it_where_the_brewery_wants_that() {
    let (house, id, dose) = first_line("26-709").await;
    let manager = house.desk.browser("manager").await;
    let settings = manager.open("/settings").await;
    let wanted = [("second_person", "acid_and_lime")];
    manager.fill(&settings, "/settings", &wanted).await;
    let path = dose_path(&id, &dose);
    let told = json!({"actual": dose["planned"]});
    let by_token = house.manager.put(&path, &told).await;
    assert_eq!(by_token.status, 403, "{:?}", by_token.body);
    let left_out = json!({"actual": 0, "reason": "Sour enough."});
    let other = house.approved("26-710").await;
    let acid = house.doses(&other).await.remove(0);
    let left_out = house
        .manager
        .put(&dose_path(&other, &acid), &left_out)
        .await;
    assert_eq!(left_out.status, 200, "nothing was handled");

    let brewer = house.desk.browser("brewer").await;
    let page = brewer.open(&format!("/plans/{id}/weigh-out")).await;
    let form = "section:not([hidden]) form[data-queued]";
    assert!(page.texts(form).is_empty(), "no secret waits on a tablet");
    let alone = as_planned(&brewer, &page, &[]).await;
    assert_eq!(alone.status, StatusCode::UNPROCESSABLE_ENTITY);
    let people = page.texts("section:not([hidden]) [name=second_person_id] option");
    assert!(people.contains(&"Quin Assay".to_owned()), "{people:?}");
    assert!(!people.contains(&"Bo Brewer".to_owned()), "{people:?}");
    let qa = house.desk.member("qa").await.id.to_string();
    let with = async |secret: &str| {
        let fields = [
            ("second_person_id", qa.as_str()),
            ("second_person_secret", secret),
        ];
        as_planned(&brewer, &page, &fields).await
    };
    let guessed = with("not the password").await;
    assert_eq!(guessed.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert!(guessed.words().contains("not the password of Quin Assay"));
    assert!(
        !guessed.text.contains("not the password\""),
        "never shown again"
    );
    assert!(house.doses(&id).await[0]["actual"].is_null());
    let seen = with(PASSWORD).await;
    assert_eq!(seen.status, StatusCode::OK, "{}", seen.words());
    assert!(
        seen.words().contains("Quin Assay stood by"),
        "{}",
        seen.words()
    );
    assert_eq!(house.doses(&id).await[0]["second_person"], "Quin Assay");
}

#[tokio::test]
async fn a_correction_leaves_what_stood_there_to_be_read() {
    let (house, id, dose) = first_line("26-711").await;
    let planned = dose["planned"].as_f64().unwrap();
    let brewer = house.desk.browser("brewer").await;
    let page = brewer.open(&format!("/plans/{id}/weigh-out")).await;
    let page = as_planned(&brewer, &page, &[("lot", "A-1")]).await;
    let action = format!("{}/correction", dose_path(&id, &dose));
    let silent = brewer.fill(&page, &action, &[("actual", "35")]).await;
    assert_eq!(silent.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert_eq!(
        silent
            .error(&format!("correct-reason-{}", dose["id"].as_str().unwrap()))
            .unwrap(),
        "! Fill this in."
    );
    let typed = [
        ("actual", "35"),
        ("lot", "A-2"),
        ("reason", "Read the wrong pack."),
    ];
    let mended = brewer.fill(&page, &action, &typed).await;
    assert_eq!(mended.status, StatusCode::OK, "{}", mended.words());
    let words = mended.words();
    let old = format!("{planned:.0} mL, lot A-1 stood here until");
    assert!(words.contains(&old), "{words}");
    assert!(words.contains("corrected by Bo Brewer: Read the wrong pack."));
    let kept = house.doses(&id).await.remove(0);
    assert_eq!(
        (kept["actual"].as_f64(), &kept["actual_lot"]),
        (Some(35.0), &json!("A-2"))
    );
    assert_eq!(kept["corrections"][0]["actual"], planned);
    assert_eq!(kept["weighed_by"], "Bo Brewer");
    // Sent once more from the page before: its key was used for another figure.
    let late = brewer.fill(&page, &action, &[("actual", "40"), ("reason", "No, this.")]);
    assert_eq!(late.await.status, StatusCode::CONFLICT);
    let book = house.manager.get("/record?limit=5").await;
    let entries = book.body["items"].as_array().unwrap();
    let entry = entries
        .iter()
        .find(|it| it["action"] == "corrected")
        .unwrap();
    assert_eq!(entry["before"]["actual"], planned);
    assert_eq!(entry["after"]["actual"], 35.0);
}

#[tokio::test]
async fn a_correction_over_that_of_another_or_of_a_closed_batch_is_refused() {
    let house = Brewhouse::build().await;
    let id = house.dosed("26-712").await;
    let dose = house.doses(&id).await.remove(0);
    let path = format!("{}/correction", dose_path(&id, &dose));
    let body = |actual: f64, seen: i32| json!({"actual": actual, "reason": "Misread.", "corrections": seen});
    let first = house.manager.post(&path, &body(35.0, 0)).await;
    assert_eq!(first.status, 201, "{:?}", first.body);
    let over = house.manager.post(&path, &body(40.0, 0)).await;
    assert_eq!(over.status, 409);
    let told = over.body["detail"].as_str().unwrap();
    assert!(told.contains("Mara Manager corrected this"), "{told}");
    let second = house.manager.post(&path, &body(40.0, 1)).await;
    assert_eq!(
        second.body["doses"][0]["corrections"]
            .as_array()
            .unwrap()
            .len(),
        2
    );
    let closed = house
        .manager
        .post(&format!("/plans/{id}/closing"), &json!({}))
        .await;
    assert_eq!(closed.status, 201, "{:?}", closed.body);
    let after = house.manager.post(&path, &body(45.0, 2)).await;
    assert_eq!(after.status, 409, "{:?}", after.body);
}

#[tokio::test]
async fn the_second_of_two_tablets_on_one_line_is_told_who_weighed_it_and_may_go_on() {
    let (house, id, _) = first_line("26-713").await;
    let address = format!("/plans/{id}/weigh-out");
    let (one, two) = (
        house.desk.browser("brewer").await,
        house.desk.browser("qa").await,
    );
    let (here, there) = (one.open(&address).await, two.open(&address).await);
    let (first, second) = tokio::join!(as_planned(&one, &here, &[]), as_planned(&two, &there, &[]));
    let (winner, loser) = if first.status == StatusCode::OK {
        ("Bo Brewer", second)
    } else {
        ("Quin Assay", first)
    };
    assert_eq!(loser.status, StatusCode::CONFLICT, "{}", loser.words());
    let told = loser.texts(".problem-summary").join(" ");
    assert!(
        told.contains(&format!("{winner} weighed this in already")),
        "{told}"
    );
    let kept = house.doses(&id).await;
    assert_eq!(kept[0]["weighed_by"], winner);
    assert!(kept[1..].iter().all(|dose| dose["actual"].is_null()));
    // The page shows the line that is next, with nothing typed into it.
    assert_eq!(shown(&loser, "actual"), "");
}

#[tokio::test]
async fn every_open_line_is_on_the_page_once_and_any_of_them_may_be_weighed_first() {
    let (house, id, _) = first_line("26-714").await;
    let doses = house.doses(&id).await;
    let brewer = house.desk.browser("brewer").await;
    let address = format!("/plans/{id}/weigh-out");
    let page = brewer.open(&address).await;
    assert_eq!(page.texts("section[data-line]").len(), doses.len());
    assert_eq!(page.texts("section[data-line]:not([hidden])").len(), 1);
    assert_eq!(page.texts("li[data-line-state]").len(), doses.len());
    let last = doses.last().unwrap()["id"].as_str().unwrap();
    let jumped = brewer.open(&format!("{address}?dose={last}")).await;
    let shown = jumped.texts(&format!("section[data-line=\"{last}\"]:not([hidden])"));
    assert_eq!(shown.len(), 1);
    // On paper every line is there with its planned amount, whatever is on the screen.
    assert_eq!(page.texts(".paper tbody tr").len(), doses.len());
    assert!(
        page.texts(".paper")
            .join(" ")
            .contains("approved by Mara Manager")
    );
}
