//! The record book: searched, taken along, and closed batches that explain themselves.

use reqwest::StatusCode;
use serde_json::json;

use crate::brewhouse::{Brewhouse, made};
use crate::desk::{Desk, Program};

/// The entries that fit a query of the API, as “action kind”.
async fn entries(program: &Program, query: &str) -> Vec<String> {
    let answer = program.get(&format!("/record?limit=200&{query}")).await;
    assert_eq!(answer.status, 200, "{query}: {:?}", answer.body);
    let items = answer.body["items"].as_array().unwrap();
    let words = items.iter().map(|item| {
        let word = |name: &str| item[name].as_str().unwrap().to_owned();
        format!("{} {}", word("action"), word("subject_kind"))
    });
    words.collect()
}

#[tokio::test]
async fn the_book_is_searched_by_batch_source_person_lot_day_kind_and_words_and_all_at_once() {
    let house = Brewhouse::build().await;
    let id = house.dosed("26-301").await;
    house.draft("26-30").await;
    let manager = &house.manager;
    let of_batch = entries(manager, "batch=26-301").await;
    let weighed = house.doses(&id).await.len();
    // Whole numbers: batch 26-30 is another.
    assert_eq!(of_batch.len(), 2 + weighed, "{of_batch:?}");
    assert_eq!(of_batch.last().unwrap(), "created plan");
    let of_source = entries(manager, &format!("source_id={}", house.source)).await;
    for expected in [
        "created source",
        "created water test",
        "created plan",
        "approved plan",
    ] {
        assert!(
            of_source.iter().any(|entry| entry == expected),
            "{of_source:?}"
        );
    }
    assert!(
        !of_source.iter().any(|entry| entry.contains("beer")),
        "{of_source:?}"
    );
    let accounts = manager.get("/record?kind=account").await.body;
    let account = |name: &str| {
        let mut found = accounts["items"].as_array().unwrap().iter();
        let found = found.find(|entry| entry["subject_name"] == name).unwrap();
        found["subject_id"].as_str().unwrap().to_owned()
    };
    let of_qa = entries(manager, &format!("member_id={}", account("Quin Assay"))).await;
    assert_eq!(of_qa, ["created account"]);
    assert_eq!(entries(manager, "kind=beer").await, ["created beer"]);
    assert_eq!(
        entries(manager, "text=sluice%20PALE&kind=beer").await,
        ["created beer"]
    );
    assert!(entries(manager, "text=no%20such%20words").await.is_empty());
    let today = leat::web::format::today("Etc/UTC");
    let (tomorrow, yesterday) = (today.tomorrow().unwrap(), today.yesterday().unwrap());
    let every = entries(manager, "").await.len();
    assert_eq!(
        entries(manager, &format!("from={yesterday}&to={tomorrow}"))
            .await
            .len(),
        every
    );
    assert!(
        entries(manager, &format!("from={tomorrow}"))
            .await
            .is_empty()
    );
    assert!(entries(manager, &format!("to={yesterday}")).await.len() <= every);
    let all = format!(
        "batch=26-301&source_id={}&member_id={}&from={yesterday}&to={tomorrow}&kind=plan&text=sluice",
        house.source,
        account("Mara Manager")
    );
    assert_eq!(
        entries(manager, &all).await,
        ["approved plan", "created plan"]
    );
    for wrong in [
        "from=soon",
        "source_id=x",
        "member_id=x",
        "from=2026-12-02&to=2026-12-01",
    ] {
        let answer = manager.get(&format!("/record?{wrong}")).await;
        assert_eq!(answer.status, 422, "{wrong}");
    }
}

#[tokio::test]
async fn a_search_is_an_address_that_keeps_what_was_asked_on_every_page_of_the_answer() {
    let house = Brewhouse::build().await;
    for _ in 0..30 {
        let body = json!({"name": "Town mains", "kind": "mains", "days_between_tests": 90});
        let path = format!("/sources/{}", house.source);
        for price in [2.5, 2.6] {
            let mut body = body.clone();
            body["price_per_m3"] = json!(price);
            assert_eq!(house.manager.put(&path, &body).await.status, 200);
        }
    }
    let browser = house.desk.browser("brewer").await;
    let address = format!("/record?source_id={}&kind=source", house.source);
    let page = browser.open(&address).await;
    assert!(
        page.words().contains("1 to 40 of 61 entries"),
        "{}",
        page.words()
    );
    assert_eq!(page.field("kind"), "source");
    assert_eq!(page.field("source_id"), house.source);
    let link = |page: &crate::desk::Seen, selector: &str| {
        let selector = scraper::Selector::parse(selector).unwrap();
        let html = page.html();
        let found = html.select(&selector).next().unwrap();
        found.value().attr("href").unwrap().to_owned()
    };
    let older = browser.open(&link(&page, ".pager a[rel=next]")).await;
    assert!(
        older.words().contains("41 to 61 of 61 entries"),
        "{}",
        older.words()
    );
    assert_eq!(older.texts(".moment").len(), 21);
    assert_eq!(older.field("kind"), "source");
    assert_eq!(link(&older, ".pager a"), address);
    let nothing = browser.open("/record?batch=none").await;
    assert!(
        nothing.words().contains("No entry fits"),
        "{}",
        nothing.words()
    );
    let refused = browser.open("/record?from=soon&batch=26-1").await;
    assert_eq!(refused.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert_eq!(
        (refused.field("from"), refused.field("batch")),
        ("soon".into(), "26-1".into())
    );
    assert!(refused.error("from").unwrap().contains("2026-03-31"));
}

#[tokio::test]
async fn the_book_leaves_as_a_table_that_no_spreadsheet_runs() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let name = "=HYPERLINK(\"http://x\",\"a\")";
    let source = json!({"name": name, "kind": "borehole", "days_between_tests": 90, "notes": "Ä; à la carte\nsecond line"});
    assert_eq!(program.post("/sources", &source).await.status, 201);
    let browser = desk.browser("brewer").await;
    let response = browser
        .request("GET", "/record.csv?kind=source")
        .send()
        .await
        .unwrap();
    let header = |name: &str| response.headers()[name].to_str().unwrap().to_owned();
    assert_eq!(header("content-type"), "text/csv; charset=utf-8");
    assert!(header("content-disposition").starts_with("attachment; filename=\"record-book-20"));
    let bytes = response.bytes().await.unwrap();
    assert_eq!(&bytes[..3], b"\xef\xbb\xbf");
    let text = std::str::from_utf8(&bytes[3..]).unwrap();
    assert!(
        text.starts_with("\"entry\",\"at\",\"local_time\","),
        "{text}"
    );
    assert!(text.contains("\r\n"), "{text}");
    let mut table = csv::Reader::from_reader(&bytes[3..]);
    let heads = table.headers().unwrap().clone();
    let place = |name: &str| heads.iter().position(|head| head == name).unwrap();
    let rows: Vec<csv::StringRecord> = table.records().map(Result::unwrap).collect();
    assert!(
        rows.iter()
            .all(|row| row[place("subject_name")] == format!("'{name}"))
    );
    let value = |name: &str| {
        let found = rows.iter().find(|row| &row[place("value")] == name);
        found.map(|row| row[place("after")].to_owned()).unwrap()
    };
    assert_eq!(value("name"), format!("'{name}"));
    assert_eq!(value("notes"), "Ä; à la carte\nsecond line");
    // The API sends the same table without the mark of spreadsheets.
    let request = program
        .request("GET", "/record?kind=source")
        .header("accept", "text/csv");
    let sent = request.send().await.unwrap().bytes().await.unwrap();
    assert_eq!(sent, bytes[3..]);
    let stranger = desk.stranger().open("/record.csv").await;
    assert_eq!(stranger.path, "/sign-in");
}

#[tokio::test]
async fn a_table_of_more_entries_than_it_takes_says_so_and_where_the_next_begins() {
    let desk = Desk::start().await;
    fill(&desk, 12_000).await;
    let browser = desk.browser("qa").await;
    let page = browser.open("/record?kind=probe").await;
    assert!(
        page.words()
            .contains("the newest 10000 of these 12000 entries"),
        "{}",
        page.words()
    );
    let response = browser
        .request("GET", "/record.csv?kind=probe")
        .send()
        .await
        .unwrap();
    let name = response.headers()["content-disposition"]
        .to_str()
        .unwrap()
        .to_owned();
    assert!(name.contains("newest-10000-of-12000.csv"), "{name}");
    let program = desk.full_program("qa").await;
    let rows = async |path: &str| {
        let request = program.request("GET", path).header("accept", "text/csv");
        let response = request.send().await.unwrap();
        let link = response
            .headers()
            .get("link")
            .map(|it| it.to_str().unwrap().to_owned());
        (response.text().await.unwrap().lines().count() - 1, link)
    };
    let (first, link) = rows("/record?kind=probe").await;
    let link = link.unwrap();
    let next = link
        .trim_start_matches("</api/v1")
        .split('>')
        .next()
        .unwrap();
    let (second, end) = rows(next).await;
    assert_eq!((first, second, end), (10_000, 2_000, None));
}

/// Writes entries straight into the book, about a hundred batches.
async fn fill(desk: &Desk, count: i64) {
    let mut tx = desk.app.db.begin_unkeyed().await.unwrap();
    for number in 0..count {
        let seq = sqlx::query(
            "INSERT INTO record_entries (at, member_name, action, subject_kind, subject_id, subject_name, before, after)
             VALUES ('2026-01-01T00:00:00.000Z', 'Probe', 'changed', 'probe', ?, 'probe', '{\"a\": 1}', '{\"a\": -0.5}')",
        )
        .bind(number.to_string())
        .execute(&mut *tx)
        .await
        .unwrap()
        .last_insert_rowid();
        sqlx::query("INSERT INTO record_links (kind, id, seq) VALUES ('batch', ?, ?)")
            .bind(format!("probe {}", number % 100))
            .bind(seq)
            .execute(&mut *tx)
            .await
            .unwrap();
    }
    tx.commit().await.unwrap();
}

/// A lot of the named material, entered through the API: the material and the lot.
async fn lot_of(house: &Brewhouse, name: &str, code: &str) -> (String, String) {
    let materials = house.manager.get("/materials").await.body;
    let mut items = materials["items"].as_array().unwrap().iter();
    let material = items.find(|item| item["name"] == name).unwrap();
    let material = material["id"].as_str().unwrap().to_owned();
    let lot = json!({"code": code, "received_on": "2026-11-01", "in_use": true});
    let path = format!("/materials/{material}/lots");
    let lot = made(&house.manager.post(&path, &lot).await);
    (material, lot)
}

#[tokio::test]
async fn a_lot_leads_to_every_batch_and_a_batch_to_every_lot_test_and_person() {
    let house = Brewhouse::build().await;
    let manager = &house.manager;
    let (acid, lot) = lot_of(&house, "Lactic acid", "LA-2231").await;
    let malts = manager.get("/malts").await.body;
    let malt = malts["items"][0]["id"].as_str().unwrap();
    let malt_lot = json!({"code": "PM-77", "current": true, "in_use": true});
    let malt_lot = made(
        &manager
            .post(&format!("/malts/{malt}/lots"), &malt_lot)
            .await,
    );
    let (first, second) = (
        house.approved("26-310").await,
        house.approved("26-311").await,
    );
    let brewer = house.desk.full_program("brewer").await;
    let mut doses = 0;
    // Picked for the first batch, typed for the second in other letters.
    for (id, told) in [
        (&first, json!({"material_lot_id": lot})),
        (&second, json!({"lot": "la-2231"})),
    ] {
        for dose in house.doses(id).await {
            let mut weighed = if dose["name"] == "Lactic acid" {
                told.clone()
            } else {
                json!({})
            };
            weighed["actual"] = dose["planned"].clone();
            doses += i32::from(dose["name"] == "Lactic acid");
            let path = format!("/plans/{id}/doses/{}", dose["id"].as_str().unwrap());
            let answer = brewer.put(&path, &weighed).await;
            assert_eq!(answer.status, 200, "{:?}", answer.body);
        }
    }
    let batches = |answer: &crate::desk::Answer| -> Vec<String> {
        assert_eq!(answer.status, 200, "{:?}", answer.body);
        let items = answer.body.as_array().unwrap().iter();
        let mut batches: Vec<String> = items
            .map(|item| item["batch"].as_str().unwrap().to_owned())
            .collect();
        batches.sort();
        batches
    };
    let path = format!("/materials/{acid}/lots/{lot}/batches");
    let went = manager.get(&path).await;
    assert_eq!(batches(&went).len(), usize::try_from(doses).unwrap());
    assert!(
        batches(&went).contains(&"26-310".to_owned())
            && batches(&went).contains(&"26-311".to_owned())
    );
    assert_eq!(went.body[0]["weighed_by"], "Bo Brewer");
    let went = manager
        .get(&format!("/malts/{malt}/lots/{malt_lot}/batches"))
        .await;
    assert_eq!(batches(&went), ["26-310", "26-311"]);
    assert_eq!(went.body[0]["kilograms"], 400.0);
    let trace = manager.get(&format!("/plans/{first}/trace")).await.body;
    let of = |list: &str, field: &str| -> Vec<String> {
        let items = trace[list].as_array().unwrap().iter();
        items
            .map(|item| item[field].as_str().unwrap_or("").to_owned())
            .collect()
    };
    assert!(of("doses", "material_lot_id").contains(&lot), "{trace}");
    assert_eq!(of("malts", "malt_lot_id"), std::slice::from_ref(&malt_lot));
    assert_eq!(of("water_tests", "laboratory"), ["Fen Analytical"]);
    assert_eq!(of("people", "name"), ["Mara Manager", "Bo Brewer"]);
    let test = trace["water_tests"][0]["water_test_id"].as_str().unwrap();
    let rests = manager.get(&format!("/water-tests/{test}/batches")).await;
    assert_eq!(batches(&rests), ["26-310", "26-311"]);
    assert_eq!(rests.body[0]["share"], 1.0);
    // A draft rests on the test as well; a withdrawn one does not.
    let draft = house.draft("26-312").await;
    let rests = manager.get(&format!("/water-tests/{test}/batches")).await;
    assert_eq!(batches(&rests), ["26-310", "26-311", "26-312"]);
    let gone = json!({"reason": "Not brewed."});
    let withdrawn = manager
        .post(&format!("/plans/{draft}/withdrawal"), &gone)
        .await;
    assert_eq!(withdrawn.status, 201, "{:?}", withdrawn.body);
    // A revision takes its plan's place: the batch is told once.
    let revision = manager
        .post(&format!("/plans/{first}/revisions"), &json!({}))
        .await;
    let revision = made(&revision);
    let approved = manager
        .post(&format!("/plans/{revision}/approval"), &json!({}))
        .await;
    assert_eq!(approved.status, 201, "{:?}", approved.body);
    let rests = manager.get(&format!("/water-tests/{test}/batches")).await;
    assert_eq!(batches(&rests), ["26-310", "26-311"]);
    let went = manager.get(&path).await;
    assert_eq!(batches(&went).len(), usize::try_from(doses).unwrap());
    // The pages say the same, and the book is searched by the lot's code.
    let page = house.desk.browser("brewer").await;
    for (path, words) in [
        (format!("/shelf/{acid}/lots/{lot}/batches"), "26-311"),
        (format!("/malts/{malt}/lots/{malt_lot}/batches"), "400 kg"),
        (
            format!("/water-tests/{test}/batches"),
            "100 % of the liquor",
        ),
    ] {
        let seen = page.open(&path).await;
        assert_eq!(seen.status, StatusCode::OK, "{path}");
        assert!(seen.words().contains(words), "{}", seen.words());
    }
    let of_lot = entries(manager, "lot=LA-2231&kind=dose").await;
    assert_eq!(of_lot.len(), usize::try_from(doses).unwrap(), "{of_lot:?}");
    let of_lot = entries(manager, "lot=pm-77").await;
    assert!(
        of_lot.contains(&"created malt lot".to_owned()),
        "{of_lot:?}"
    );
    assert!(of_lot.contains(&"approved plan".to_owned()), "{of_lot:?}");
    let nobody = manager
        .get(&format!("/materials/{acid}/lots/{malt_lot}/batches"))
        .await;
    assert_eq!(nobody.status, 404);
}

/// Weighs every dose as planned but the first, of which so much goes in without a reason: so
/// it was weighed before the scale asked for one.
async fn weigh_all_but(house: &Brewhouse, id: &str, first: f64) -> serde_json::Value {
    let doses = house.doses(id).await;
    for (index, dose) in doses.iter().enumerate() {
        let actual = if index == 0 {
            json!(first)
        } else {
            dose["planned"].clone()
        };
        let path = format!("/plans/{id}/doses/{}", dose["id"].as_str().unwrap());
        let weighed = json!({"actual": actual, "lot": "A1", "reason": "The can ran dry."});
        let answer = house.manager.put(&path, &weighed).await;
        assert_eq!(answer.status, 200, "{:?}", answer.body);
    }
    doses[0].clone()
}

#[tokio::test]
async fn closing_asks_why_a_reading_was_left_outside_its_window_until_it_is_told() {
    let house = Brewhouse::build().await;
    let id = house.dosed("26-320").await;
    let check = house.read(&id, 5.7, 12.0).await;
    let path = format!("/plans/{id}/closing");
    let refused = house.manager.post(&path, &json!({})).await;
    assert_eq!(refused.status, 422, "{:?}", refused.body);
    assert_eq!(refused.pointers(), ["/reasons/0/reason"]);
    let told = refused.body["errors"][0].to_string();
    assert!(
        told.contains("Mash pH 5.69") && told.contains("above the window"),
        "{told}"
    );
    let deviations = house
        .manager
        .get(&format!("/plans/{id}/deviations"))
        .await
        .body;
    let key = deviations[0]["deviation"].as_str().unwrap();
    assert_eq!(
        key,
        format!("outside_window:{}", check.body["id"].as_str().unwrap())
    );
    assert!(deviations[0]["reason"].is_null(), "{deviations}");
    let strange = json!({"reasons": [{"deviation": "left_out:x", "reason": "y"}]});
    assert_eq!(house.manager.post(&path, &strange).await.status, 422);
    // On the page: the field is there, what was typed stays, and the reason is kept.
    let brewer = house.desk.browser("brewer").await;
    let page = brewer.open(&path).await;
    let asked = brewer.fill(&page, &path, &[]).await;
    assert_eq!(asked.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert!(asked.error("reasons.0.reason").unwrap().contains("Say why"));
    let why = ("reasons.0.reason", "Too late for acid.");
    let closed = brewer.fill(&asked, &path, &[why]).await;
    assert!(
        closed.words().contains("The batch is closed"),
        "{}",
        closed.words()
    );
    let deviations = house
        .manager
        .get(&format!("/plans/{id}/deviations"))
        .await
        .body;
    assert_eq!(deviations[0]["reason"], "Too late for acid.");
    let book = house.manager.get("/record?kind=plan&limit=1").await.body;
    assert!(book.to_string().contains("Too late for acid."), "{book}");
    let page = brewer.open(&path).await;
    assert!(
        page.words().contains("Too late for acid."),
        "{}",
        page.words()
    );
}

#[tokio::test]
async fn the_note_of_a_closing_stands_for_every_reason_that_is_not_given() {
    let house = Brewhouse::build().await;
    let id = house.approved("26-321").await;
    // 705 mL are planned: 2 % are 14.1 mL, three steps of the scale less.
    weigh_all_but(&house, &id, 720.0).await;
    house.read(&id, 5.7, 12.0).await;
    let path = format!("/plans/{id}/closing");
    assert_eq!(house.manager.post(&path, &json!({})).await.status, 422);
    let note = json!({"note": "The meter was late."});
    let closed = house.manager.post(&path, &note).await;
    assert_eq!(closed.status, 201, "{:?}", closed.body);
    let deviations = house
        .manager
        .get(&format!("/plans/{id}/deviations"))
        .await
        .body;
    assert_eq!(deviations[0]["kind"], "outside_tolerance");
    assert_eq!(deviations[0]["reason"], "The can ran dry.");
    assert_eq!(deviations[1]["reason"], "See the closing note");
    let left_out = house.approved("26-323").await;
    weigh_all_but(&house, &left_out, 0.0).await;
    let deviations = house
        .manager
        .get(&format!("/plans/{left_out}/deviations"))
        .await
        .body;
    assert_eq!(
        deviations[0]["words"],
        "Lactic acid into the mash: left out, 705 mL planned"
    );
    let inside = house.approved("26-322").await;
    weigh_all_but(&house, &inside, 715.0).await;
    let deviations = house
        .manager
        .get(&format!("/plans/{inside}/deviations"))
        .await
        .body;
    assert_eq!(deviations, json!([]));
    assert_eq!(
        house
            .manager
            .post(&format!("/plans/{inside}/closing"), &json!({}))
            .await
            .status,
        201
    );
}

#[tokio::test]
async fn a_mash_put_right_explains_its_own_reading_and_one_left_outside_is_asked_about() {
    let house = Brewhouse::build().await;
    let id = house.dosed("26-327").await;
    let read = house.read(&id, 5.7, 12.0).await;
    assert_eq!(read.body["advised"]["verdict"], "above");
    let path = format!("/plans/{id}/deviations");
    let deviations = house.manager.get(&path).await.body;
    assert_eq!(deviations[0]["kind"], "outside_window");
    assert!(deviations[0]["reason"].is_null(), "{deviations}");
    let step = house.doses(&id).await.pop().unwrap();
    let dose = format!("/plans/{id}/doses/{}", step["id"].as_str().unwrap());
    let given = json!({"actual": step["planned"], "lot": "A1"});
    assert_eq!(house.manager.put(&dose, &given).await.status, 200);
    house.read(&id, 5.42, 25.0).await;
    let deviations = house.manager.get(&path).await.body;
    let reason = deviations[0]["reason"].as_str().unwrap();
    assert!(
        reason.starts_with("Put right with ") && reason.ends_with("Lactic acid, then read 5.42"),
        "{reason}"
    );
}

#[tokio::test]
async fn a_closed_batch_is_corrected_beside_what_it_said_and_never_in_its_place() {
    let house = Brewhouse::build().await;
    let (acid, lot) = lot_of(&house, "Lactic acid", "LA-2232").await;
    let id = house.dosed("26-324").await;
    house.read(&id, 5.42, 15.0).await;
    let path = format!("/plans/{id}/corrections");
    let dose = house.doses(&id).await.remove(0);
    let dose = dose["id"].as_str().unwrap();
    let wrong_lot = json!({"what": "lot", "dose_id": dose, "lot": "LA-2232", "reason": "Seen at the stock-take."});
    let early = house.manager.post(&path, &wrong_lot).await;
    assert_eq!(early.status, 409, "{:?}", early.body);
    let note = json!({"note": "As usual."});
    assert_eq!(
        house
            .manager
            .post(&format!("/plans/{id}/closing"), &note)
            .await
            .status,
        201
    );
    let before = house.plan(&id).await;
    let brewer = house.desk.full_program("brewer").await;
    assert_eq!(brewer.post(&path, &wrong_lot).await.status, 403);
    let qa = house.desk.full_program("qa").await;
    let made = qa.post(&path, &wrong_lot).await;
    assert_eq!(made.status, 201, "{:?}", made.body);
    assert_eq!(
        (&made.body["said_before"], &made.body["says_now"]),
        (&json!("A1"), &json!("LA-2232"))
    );
    assert_eq!(
        (&made.body["material_lot_id"], &made.body["teaches"]),
        (&json!(lot), &json!(true))
    );
    for (wrong, pointer) in [
        (
            json!({"what": "lot", "dose_id": dose, "lot": "", "reason": "x"}),
            "/lot",
        ),
        (
            json!({"what": "amount", "dose_id": dose, "amount": "much", "reason": "x"}),
            "/amount",
        ),
        (
            json!({"what": "amount", "dose_id": "x", "amount": 5, "reason": "x"}),
            "/dose_id",
        ),
        (json!({"what": "reading", "ph": 14, "reason": "x"}), "/ph"),
        (json!({"what": "other", "words": "x"}), "/reason"),
        (json!({"what": "all", "reason": "x"}), "/what"),
    ] {
        let answer = qa.post(&path, &wrong).await;
        assert_eq!(
            (answer.status, answer.pointers()),
            (422, vec![pointer]),
            "{wrong}"
        );
    }
    // By the form: an amount, after which the batch teaches nothing.
    let browser = house.desk.browser("qa").await;
    let open = browser
        .open(&format!("/plans/{}", house.draft("26-326").await))
        .await;
    assert!(
        open.words().contains("What closed batches teach"),
        "{}",
        open.words()
    );
    let page = browser.open(&format!("/plans/{id}/closing")).await;
    let subject = format!("amount:{dose}");
    let typed = [
        ("subject", subject.as_str()),
        ("says", "7O0"),
        ("reason", "The can was marked."),
    ];
    let refused = browser.fill(&page, &path, &typed).await;
    assert_eq!(refused.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert_eq!(refused.field("says"), "7O0");
    assert!(refused.error("says").is_some());
    let seen = browser.fill(&refused, &path, &[("says", "700")]).await;
    let words = seen.words();
    assert!(
        words.contains("Corrected after closing: 700 mL in place of 705 mL"),
        "{words}"
    );
    assert!(
        words.contains("Corrected after closing: lot LA-2232 in place of A1"),
        "{words}"
    );
    assert!(words.contains("no longer teaches"), "{words}");
    let after = house.plan(&id).await;
    assert_eq!(before["doses"], after["doses"]);
    assert_eq!(before["outcome"], after["outcome"]);
    // The right lot leads here, and the book has it with what was said before.
    let went = qa
        .get(&format!("/materials/{acid}/lots/{lot}/batches"))
        .await
        .body;
    assert_eq!(
        (&went[0]["batch"], &went[0]["known"]),
        (&json!("26-324"), &json!("by_correction"))
    );
    let book = qa.get("/record?lot=LA-2232&text=corrected").await.body;
    assert_eq!(book["items"][0]["before"], json!({"lot": "A1"}));
    assert_eq!(book["items"][0]["reason"], "Seen at the stock-take.");
    // What it taught before, it teaches no more.
    let taught = house.draft("26-325").await;
    let inputs = house
        .manager
        .get(&format!("/plans/{taught}/inputs"))
        .await
        .body;
    assert_eq!(inputs["learned"]["batches"], 0.0, "{}", inputs["learned"]);
    let page = browser.open(&format!("/plans/{taught}")).await;
    assert!(
        !page.words().contains("What closed batches teach"),
        "{}",
        page.words()
    );
    let mut tx = house.desk.app.db.begin_unkeyed().await.unwrap();
    for statement in [
        "UPDATE plan_corrections SET says_now = 'x'",
        "DELETE FROM plan_corrections",
        "INSERT OR REPLACE INTO plan_corrections SELECT * FROM plan_corrections",
    ] {
        let error = sqlx::query(statement).execute(&mut *tx).await.unwrap_err();
        assert!(error.to_string().contains("append-only"), "{error}");
    }
}

#[tokio::test]
async fn a_batch_sheet_holds_what_an_auditor_asks_for() {
    let house = Brewhouse::build().await;
    let id = house.approved("26-330").await;
    weigh_all_but(&house, &id, 720.0).await;
    house.read(&id, 5.42, 15.0).await;
    let note = json!({"note": "Drained the can to its end."});
    let closed = house
        .manager
        .post(&format!("/plans/{id}/closing"), &note)
        .await;
    assert_eq!(closed.status, 201, "{:?}", closed.body);
    let correction =
        json!({"what": "other", "words": "The can held 721 mL.", "reason": "Weighed empty."});
    let path = format!("/plans/{id}/corrections");
    assert_eq!(house.manager.post(&path, &correction).await.status, 201);
    let page = house.desk.browser("brewer").await;
    let sheet = page.open(&format!("/plans/{id}/sheet")).await;
    assert_eq!(sheet.status, StatusCode::OK);
    let words = sheet.words();
    for expected in [
        "Batch sheet 26-330",
        "Sluice Pale, brewed on 2026-12-02",
        "Printed ",
        concat!("from Leat ", env!("CARGO_PKG_VERSION")),
        "Metric: hectolitres",
        "Approved Mara Manager",
        // The source with its test, the grist, the liquor.
        "Town mains100.0 %2700 L2026-11-02, Fen Analytical",
        "Pale malt",
        "400 kg",
        "Liquor2700 L",
        // Planned against actual, 15 of 705 mL more; who and of which lot.
        "705 mL 720 mL +2.1 %outside tolerance",
        "A1",
        "5.42 at 20 °C",
        "Bench meter, calibrated ",
        "Measured, cooled sample",
        "reading 5.42",
        "Lactic acid into the mash: 720 mL in place of 705 mL",
        "The can ran dry.",
        "Drained the can to its end.",
        "The can held 721 mL.",
        "Weighed empty.",
        "closed plan",
        "corrected after closing plan",
    ] {
        assert!(words.contains(expected), "{expected}: {words}");
    }
    let entries = house
        .manager
        .get("/record?batch=26-330&limit=200")
        .await
        .body;
    let written = entries["items"].as_array().unwrap().len();
    let tables = sheet.texts("table");
    let book = tables
        .iter()
        .filter(|table| table.starts_with("EntryWhenWhoWhat"));
    assert_eq!(book.count(), 1, "{tables:?}");
    assert!(
        written >= 6 && words.contains("weighed in dose"),
        "{written}: {words}"
    );
    assert_eq!(
        page.open("/plans/none/sheet").await.status,
        StatusCode::NOT_FOUND
    );
}
