//! Beers: grist, volumes and spec.

use leat::input::Flag;
use leat::malts;
use leat::malts::entered::NewMaltBody;
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

/// A malt on the shelf of this brewery: its identifier.
async fn malt(desk: &Desk, name: &str) -> String {
    let body = NewMaltBody {
        name: name.into(),
        class: "pilsner".into(),
        in_use: Flag(true),
        ..NewMaltBody::default()
    };
    let by = desk.member("manager").await;
    let malt = malts::operations::create(&desk.app.db, &by, body.try_into().unwrap()).await;
    malt.unwrap().id.to_string()
}

async fn retire_malt(desk: &Desk, id: &str) {
    let by = desk.member("manager").await;
    let id = id.parse().unwrap();
    let malt = malts::operations::find(&desk.app.db, &by, id)
        .await
        .unwrap();
    let retired = malts::Malt {
        in_use: false,
        ..malt
    };
    malts::operations::revise(&desk.app.db, &by, id, retired, None)
        .await
        .unwrap();
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

/// The fields of the form that make a whole beer, typed with a decimal comma.
fn typed(malt: &str) -> Vec<(&'static str, String)> {
    vec![
        ("name", "Sluice Pale".to_owned()),
        ("batch_l", "20".into()),
        ("mash_l", "1200".into()),
        ("sparge_l", "1500".into()),
        ("grist.0.malt_id", malt.to_owned()),
        ("grist.0.kilograms", "402,5".into()),
    ]
}

fn borrowed<'a>(fields: &'a [(&'static str, String)]) -> Vec<(&'a str, &'a str)> {
    fields.iter().map(|(n, v)| (*n, v.as_str())).collect()
}

#[tokio::test]
async fn a_beer_typed_into_the_form_is_the_beer_the_api_shows() {
    let desk = Desk::start().await;
    let malt = malt(&desk, "Pilsner").await;
    let manager = desk.browser("manager").await;
    let form = manager.open("/beers/new").await;
    assert!(form.words().contains("common practice, no source"));
    let page = manager
        .fill(&form, "/beers/new", &borrowed(&typed(&malt)))
        .await;
    assert!(page.path.starts_with("/beers/0"), "{}", page.words());
    assert!(page.words().contains("2.98 L/kg"), "{}", page.words());
    let program = desk.full_program("brewer").await;
    let list = program.get("/beers").await.body;
    let kept = &list["items"][0];
    assert_eq!(kept["batch_l"], 2000.0);
    assert_eq!(
        kept["grist"],
        json!([{"malt_id": malt, "kilograms": 402.5}])
    );
    assert_eq!(kept["spec"]["mash_ph"]["target"], 5.4);
    assert_eq!(kept["spec"]["calcium_mg_per_l"]["priority"], "high");
    assert_eq!(kept["in_use"], true);
}

#[tokio::test]
async fn what_the_api_took_it_gives_back_and_changes_only_for_whoever_read_the_latest() {
    let desk = Desk::start().await;
    let malt = malt(&desk, "Pilsner").await;
    let program = desk.full_program("manager").await;
    let made = program.post("/beers", &beer(&malt)).await;
    assert_eq!(made.status, 201, "{:?}", made.body);
    let path = made.location.unwrap();
    let path = path.strip_prefix("/api/v1").unwrap();
    let read = program.get(path).await;
    assert_eq!(read.etag.as_deref(), Some("\"1\""));
    assert_eq!(
        read.body["spec"]["sulfate_to_chloride"],
        json!({"low": 1.5, "high": 3.0, "priority": "middle"})
    );
    // What was read can be sent back as it is.
    let again = program.put(path, &read.body).await;
    assert_eq!(again.status, 200, "{:?}", again.body);
    assert_eq!(again.body["version"], 2);
    let stale = program
        .send("PUT", path, Some(&read.body), &[("if-match", "\"1\"")])
        .await;
    assert_eq!(stale.status, 409);
    let twin = program
        .post("/beers", &with(beer(&malt), "/name", json!("sluice pale")))
        .await;
    assert_eq!(twin.pointers(), ["/name"]);
}

#[tokio::test]
async fn a_malt_that_is_not_there_twice_there_or_retired_is_refused_at_its_line() {
    let desk = Desk::start().await;
    let malt = malt(&desk, "Pilsner").await;
    let program = desk.full_program("manager").await;
    let unknown = program.post("/beers", &beer(NO_MALT)).await;
    assert_eq!(unknown.pointers(), ["/grist/0/malt_id"]);
    let line = |id: &str| json!({"malt_id": id, "kilograms": 200});
    let twice = json!([line(&malt), {}, line(&malt)]);
    let twice = program
        .post("/beers", &with(beer(&malt), "/grist", twice))
        .await;
    assert_eq!(twice.pointers(), ["/grist/2/malt_id"]);
    retire_malt(&desk, &malt).await;
    let retired = json!([{}, line(&malt)]);
    let retired = program
        .post("/beers", &with(beer(&malt), "/grist", retired))
        .await;
    assert_eq!(retired.pointers(), ["/grist/1/malt_id"]);
    assert!(retired.body["detail"].as_str().unwrap().contains("Pilsner"));
}

#[tokio::test]
async fn the_form_keeps_what_was_typed_when_it_is_refused_or_a_line_is_added() {
    let desk = Desk::start().await;
    let malt = malt(&desk, "Pilsner").await;
    let manager = desk.browser("manager").await;
    let form = manager.open("/beers/new").await;
    let mut fields = typed(&malt);
    fields.push(("spec.mash_ph.target", "fifteen".into()));
    fields.push(("spec.calcium_mg_per_l.low", "200".into()));
    fields.push(("notes", "Stir <twice>".into()));
    let refused = manager.fill(&form, "/beers/new", &borrowed(&fields)).await;
    assert_eq!(refused.status, reqwest::StatusCode::UNPROCESSABLE_ENTITY);
    assert!(
        refused
            .error("spec.mash_ph.target")
            .unwrap()
            .contains("fifteen")
    );
    assert!(refused.error("spec.calcium_mg_per_l.low").is_some());
    let rows = |page: &crate::desk::Seen| page.texts("select[name^=\"grist.\"]").len();
    let mut add = crate::desk::offered(&refused, "/beers/new", &[]);
    add.push(("_add".into(), "line".into()));
    let longer = manager.post("/beers/new", &add).await;
    assert_eq!(longer.status, reqwest::StatusCode::OK);
    assert_eq!(rows(&longer), rows(&refused) + 1);
    for page in [&refused, &longer] {
        for (name, value) in &fields {
            assert_eq!(&page.field(name), value, "{name}");
        }
    }
    assert!(longer.words().contains("100.0 %"));
}

#[tokio::test]
async fn a_beer_is_changed_copied_retired_and_taken_back() {
    let desk = Desk::start().await;
    let malt = malt(&desk, "Pilsner").await;
    let manager = desk.browser("manager").await;
    let form = manager.open("/beers/new").await;
    let shown = manager
        .fill(&form, "/beers/new", &borrowed(&typed(&malt)))
        .await;
    let (edit, retire) = (
        format!("{}/edit", shown.path),
        format!("{}/retirement", shown.path),
    );
    let old = manager.open(&edit).await;
    assert_eq!(old.field("grist.0.kilograms"), "402.5");
    let changed = manager
        .fill(&old, &edit, &[("name", "Sluice Bitter")])
        .await;
    assert!(changed.words().contains("Sluice Bitter"));
    let stale = manager.fill(&old, &edit, &[("name", "Sluice Mild")]).await;
    assert_eq!(stale.status, reqwest::StatusCode::CONFLICT);
    assert_eq!(stale.field("name"), "Sluice Mild");

    let id = shown.path.rsplit('/').next().unwrap();
    let copy = manager.open(&format!("/beers/new?copy={id}")).await;
    assert_eq!(copy.field("grist.0.malt_id"), malt);
    let copied = manager.fill(&copy, "/beers/new", &[]).await;
    assert!(copied.words().contains("Sluice Bitter, copy"));

    let retired = manager.fill(&changed, &retire, &[]).await;
    assert!(retired.words().contains("Retired"));
    let names = |page: &crate::desk::Seen| page.texts("tbody th");
    assert_eq!(
        names(&manager.open("/beers").await),
        ["Sluice Bitter, copy"]
    );
    assert_eq!(
        names(&manager.open("/beers?retired=yes").await),
        ["Sluice Bitter"]
    );
    let back = manager
        .fill(&retired, &format!("{}/return", shown.path), &[])
        .await;
    assert!(back.words().contains("Retire"));
    assert_eq!(
        names(&manager.open("/beers?sort=name&order=descending").await)[0],
        "Sluice Bitter, copy"
    );
    let book = manager.open("/record").await.words();
    for deed in [
        "retired beer “Sluice Bitter”",
        "took back beer",
        "changed beer",
        "created beer",
        "Pilsner",
    ] {
        assert!(book.contains(deed), "{deed}: {book}");
    }
}

#[tokio::test]
async fn a_form_sent_twice_makes_one_beer() {
    let desk = Desk::start().await;
    let malt = malt(&desk, "Pilsner").await;
    let manager = desk.browser("manager").await;
    let form = manager.open("/beers/new").await;
    let fields = crate::desk::offered(&form, "/beers/new", &borrowed(&typed(&malt)));
    let first = manager.post("/beers/new", &fields).await;
    let second = manager.post("/beers/new", &fields).await;
    assert_eq!(first.path, second.path);
    let list = desk.full_program("brewer").await.get("/beers").await.body;
    assert_eq!(list["items"].as_array().unwrap().len(), 1);
}

#[tokio::test]
async fn a_brewery_in_us_units_types_barrels_gallons_and_pounds() {
    let desk = Desk::start().await;
    let malt = malt(&desk, "Pilsner").await;
    let manager = desk.browser("manager").await;
    let settings = manager.open("/settings").await;
    manager
        .fill(&settings, "/settings", &[("units", "us")])
        .await;
    let form = manager.open("/beers/new").await;
    assert!(form.words().contains("Mass, lb"), "{}", form.words());
    let mut fields = typed(&malt);
    for (name, value) in &mut fields {
        *value = match *name {
            "batch_l" => "10".into(),
            "mash_l" => "300".into(),
            "sparge_l" => "350,5".into(),
            "grist.0.kilograms" => "800".into(),
            _ => continue,
        };
    }
    let shown = manager.fill(&form, "/beers/new", &borrowed(&fields)).await;
    // 4 × 300 gal / 800 lb.
    assert!(shown.words().contains("1.50 qt/lb"), "{}", shown.words());
    let kept = &desk.full_program("brewer").await.get("/beers").await.body["items"][0];
    let near = |name: &str, expected: f64| {
        let found = kept.pointer(name).and_then(Value::as_f64).unwrap();
        assert!((found / expected - 1.0).abs() < 1e-6, "{name} {found}");
    };
    // NIST Handbook 44: 1 bbl of 31 gal = 117.3478 L, 1 gal = 3.785412 L, 1 lb = 0.45359237 kg.
    near("/batch_l", 1173.478);
    near("/mash_l", 1135.6236);
    near("/grist/0/kilograms", 362.873_896);
    let edit = manager.open(&format!("{}/edit", shown.path)).await;
    assert_eq!(edit.field("grist.0.kilograms"), "800");
    assert_eq!(edit.field("sparge_l"), "350.5");
}

#[tokio::test]
async fn only_a_manager_is_offered_to_change_beers() {
    let desk = Desk::start().await;
    for login in ["brewer", "qa"] {
        let browser = desk.browser(login).await;
        let list = browser.open("/beers").await;
        assert!(!list.text.contains("/beers/new"), "{login}");
        let refused = browser.open("/beers/new").await;
        assert_eq!(refused.status, reqwest::StatusCode::FORBIDDEN, "{login}");
        let refused = browser.post("/beers/new", &[]).await;
        assert_eq!(refused.status, reqwest::StatusCode::FORBIDDEN, "{login}");
    }
}

#[tokio::test]
async fn a_line_with_an_absurd_number_is_refused_and_costs_nothing() {
    let desk = Desk::start().await;
    let manager = desk.browser("manager").await;
    let form = manager.open("/beers/new").await;
    for line in ["4000000000", "18446744073709551615", "9999", "-1", "x"] {
        let mut fields = crate::desk::offered(&form, "/beers/new", &[("name", "Sluice")]);
        fields.push((format!("grist.{line}.kilograms"), "5".into()));
        let answer = manager.post("/beers/new", &fields).await;
        assert_eq!(
            answer.status,
            reqwest::StatusCode::UNPROCESSABLE_ENTITY,
            "{line}"
        );
        assert_eq!(answer.field("name"), "Sluice");
    }
}
