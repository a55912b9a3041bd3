//! The pages of sources and water tests.

use reqwest::StatusCode;

use crate::desk::{Browser, Desk, Seen, offered};

/// Makes a source through its form and gives its page.
async fn source(browser: &Browser, name: &str, kind: &str) -> Seen {
    let form = browser.open("/sources/new").await;
    let fields = [("name", name), ("kind", kind), ("price_per_m3", "2,5")];
    let page = browser.fill(&form, "/sources/new", &fields).await;
    assert!(page.path.starts_with("/sources/"), "{}", page.words());
    page
}

/// Places of the lines in the form, in the order of all analytes.
const CALCIUM: &str = "readings.0.value";
const MAGNESIUM: &str = "readings.1.value";
const SODIUM: &str = "readings.2.value";
const ALKALINITY: &str = "readings.7.value";
const ALKALINITY_UNIT: &str = "readings.7.unit";
const SULFATE: &str = "readings.10.value";
const CHLORIDE: &str = "readings.11.value";
const NITRATE: &str = "readings.12.value";
const NITRATE_UNIT: &str = "readings.12.unit";

/// A balanced mains water, see the API tests; 8.4 °dH is 150 mg/L as CaCO₃.
const REPORT: [(&str, &str); 9] = [
    ("sampled_on", "2026-03-02"),
    (CALCIUM, "60"),
    (MAGNESIUM, "10"),
    (SODIUM, "17,1"),
    (ALKALINITY, "8,4"),
    (ALKALINITY_UNIT, "dh"),
    (CHLORIDE, "28"),
    (SULFATE, "30"),
    (NITRATE, "9"),
];

#[tokio::test]
async fn a_source_and_its_first_test_are_typed_and_todays_water_is_shown() {
    let desk = Desk::start().await;
    let qa = desk.browser("qa").await;
    let empty = qa.open("/sources").await;
    assert!(empty.words().contains("No sources yet"));
    let page = source(&qa, "Town mains", "mains").await;
    assert!(page.words().contains("No tests yet"), "{}", page.words());
    assert!(page.words().contains("never tested"));

    let new = format!("{}/water-tests/new", page.path);
    let form = qa.open(&new).await;
    let test = qa.fill(&form, &new, &REPORT).await;
    assert!(test.path.starts_with("/water-tests/"), "{}", test.words());
    assert!(test.words().contains("8,4 °dH"), "{}", test.words());
    assert!(test.words().contains("adds up"));

    let page = qa.open(&page.path).await;
    let figures = page.texts("dl.figures div");
    let calcium = figures.iter().find(|f| f.starts_with("Calcium")).unwrap();
    assert!(
        calcium.contains("60.0 ±") && calcium.contains("mg/L") && calcium.contains("laboratory"),
        "{calcium}"
    );
    let potassium = figures.iter().find(|f| f.starts_with("Potassium")).unwrap();
    assert!(potassium.contains("assumed"), "{potassium}");
    let list = qa.open("/sources").await;
    assert!(list.words().contains("60.0 ± "), "{}", list.words());
}

#[tokio::test]
async fn without_a_script_the_check_button_answers_and_keeps_nothing() {
    let desk = Desk::start().await;
    let qa = desk.browser("qa").await;
    let page = source(&qa, "Town mains", "mains").await;
    let new = format!("{}/water-tests/new", page.path);
    let form = qa.open(&new).await;
    let mut fields = offered(&form, &new, &REPORT);
    fields.push(("_check".into(), "yes".into()));
    let answer = qa.post(&new, &fields).await;
    assert_eq!(answer.status, StatusCode::OK);
    assert_eq!(answer.field(ALKALINITY), "8,4");
    assert_eq!(answer.field(ALKALINITY_UNIT), "dh");
    assert!(answer.texts("#verdict").join(" ").contains("adds up"));
    assert!(qa.open(&page.path).await.words().contains("No tests yet"));

    // The script asks the same and gets only the part that answers.
    let fragment = qa
        .post(&format!("{}/water-tests/check", page.path), &fields)
        .await;
    assert_eq!(fragment.status, StatusCode::OK);
    assert!(
        fragment.text.trim_start().starts_with("<section"),
        "{}",
        fragment.text
    );
    assert!(fragment.text.contains("adds up") && !fragment.text.contains("<html"));
}

#[tokio::test]
async fn a_report_that_does_not_add_up_is_kept_only_with_the_tick_the_page_then_offers() {
    let desk = Desk::start().await;
    let qa = desk.browser("qa").await;
    let page = source(&qa, "Town mains", "mains").await;
    let new = format!("{}/water-tests/new", page.path);
    let form = qa.open(&new).await;
    let mut typed = REPORT.to_vec();
    typed.retain(|(name, _)| *name != NITRATE);
    typed.extend([(NITRATE, "41"), (NITRATE_UNIT, "mg_per_l_as_n")]);
    let refused = qa.fill(&form, &new, &typed).await;
    assert_eq!(refused.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert_eq!(refused.field(NITRATE), "41");
    assert_eq!(refused.field(NITRATE_UNIT), "mg_per_l_as_n");
    let tick = "keep_although_it_does_not_add_up";
    assert!(refused.error(tick).unwrap().contains("does not add up"));

    let kept = qa.fill(&refused, &new, &[(tick, "yes")]).await;
    assert!(
        kept.words().contains("kept, not trusted"),
        "{}",
        kept.words()
    );
    let shown = qa.open(&page.path).await;
    assert!(
        shown.words().contains("Today’s water cannot be told"),
        "{}",
        shown.words()
    );

    let trust = format!("{}/trust", kept.path);
    let silent = qa.fill(&kept, &trust, &[]).await;
    assert_eq!(silent.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert!(silent.error("trust_reason").is_some());
    let trusted = qa
        .fill(&kept, &trust, &[("trust_reason", "Laboratory confirmed")])
        .await;
    assert!(
        trusted
            .words()
            .contains("counts although it does not add up"),
        "{}",
        trusted.words()
    );
    assert!(trusted.words().contains("Laboratory confirmed"));
}

#[tokio::test]
async fn a_wrong_line_is_told_beside_itself_and_everything_typed_comes_back() {
    let desk = Desk::start().await;
    let qa = desk.browser("qa").await;
    let page = source(&qa, "Town mains", "mains").await;
    let new = format!("{}/water-tests/new", page.path);
    let form = qa.open(&new).await;
    for bad in ["NaN", "1e308", "-4", "n.d.", "1,234,567", "> 5", "twelve"] {
        let mut typed = REPORT.to_vec();
        typed.retain(|(name, _)| *name != SODIUM);
        typed.push((SODIUM, bad));
        typed.push(("notes", "as <typed> & kept"));
        let refused = qa.fill(&form, &new, &typed).await;
        assert_eq!(refused.status, StatusCode::UNPROCESSABLE_ENTITY, "{bad}");
        assert!(refused.error(SODIUM).is_some(), "{bad}");
        assert_eq!(refused.field(SODIUM), bad);
        assert_eq!(refused.field(ALKALINITY), "8,4");
        assert_eq!(refused.field("notes"), "as <typed> & kept");
    }
    let mut typed = REPORT.to_vec();
    typed[0] = ("sampled_on", "2199-12-31");
    let refused = qa.fill(&form, &new, &typed).await;
    assert!(refused.error("sampled_on").unwrap().contains("future"));
}

#[tokio::test]
async fn a_test_is_corrected_and_withdrawn_on_its_page_and_a_stale_correction_is_refused() {
    let desk = Desk::start().await;
    let qa = desk.browser("qa").await;
    let page = source(&qa, "Town mains", "mains").await;
    let new = format!("{}/water-tests/new", page.path);
    let test = qa.fill(&qa.open(&new).await, &new, &REPORT).await;
    let edit = format!("{}/edit", test.path);
    let first = qa.open(&edit).await;
    let second = qa.open(&edit).await;
    assert_eq!(first.field(ALKALINITY), "8,4");
    assert_eq!(first.field(ALKALINITY_UNIT), "dh");
    let silent = qa.fill(&first, &edit, &[(CALCIUM, "61")]).await;
    assert!(
        silent.error("correction_reason").is_some(),
        "{}",
        silent.words()
    );
    let typed = [(CALCIUM, "61"), ("correction_reason", "Slip")];
    let saved = qa.fill(&first, &edit, &typed).await;
    assert_eq!(saved.status, StatusCode::OK);
    assert!(saved.words().contains("61 mg/L") && saved.words().contains("Because: Slip"));
    let stale = qa.fill(&second, &edit, &typed).await;
    assert_eq!(stale.status, StatusCode::CONFLICT);

    let withdrawal = format!("{}/withdrawal", test.path);
    let reason = [("withdrawal_reason", "Bottle mixed up")];
    let gone = qa.fill(&saved, &withdrawal, &reason).await;
    assert!(
        gone.words().contains("Because: Bottle mixed up"),
        "{}",
        gone.words()
    );
    let list = qa.open(&page.path).await;
    assert!(list.words().contains("withdrawn"), "{}", list.words());
    let back = qa.fill(&gone, &format!("{}/return", test.path), &[]).await;
    assert!(back.words().contains("counts for today’s water"));
}

#[tokio::test]
async fn an_offer_is_ticked_on_the_page_and_marked_as_worked_out() {
    let desk = Desk::start().await;
    let qa = desk.browser("qa").await;
    let page = source(&qa, "Town mains", "mains").await;
    let new = format!("{}/water-tests/new", page.path);
    let mut typed = REPORT.to_vec();
    typed.retain(|(name, _)| *name != MAGNESIUM);
    typed.push(("readings.17.value", "191"));
    let mut fields = offered(&qa.open(&new).await, &new, &typed);
    fields.push(("_check".into(), "yes".into()));
    let asked = qa.post(&new, &fields).await;
    let offer = ("accepted.magnesium", "rest_of_hardness");
    let saved = qa.fill(&asked, &new, &[offer]).await;
    assert!(
        saved.words().contains("Worked out and accepted"),
        "{}",
        saved.words()
    );
    let shown = qa.open(&page.path).await;
    assert!(
        shown.words().contains("the rest of the hardness"),
        "{}",
        shown.words()
    );
}

#[tokio::test]
async fn a_form_sent_twice_with_one_key_enters_one_test() {
    let desk = Desk::start().await;
    let qa = desk.browser("qa").await;
    let page = source(&qa, "Town mains", "mains").await;
    let new = format!("{}/water-tests/new", page.path);
    let fields = offered(&qa.open(&new).await, &new, &REPORT);
    let first = qa.post(&new, &fields).await;
    let again = qa.post(&new, &fields).await;
    assert_eq!(first.path, again.path);
    let list = qa.open(&page.path).await;
    assert_eq!(list.texts("#tests tbody tr").len(), 1);
}

#[tokio::test]
async fn brewers_read_sources_and_change_nothing() {
    let desk = Desk::start().await;
    let qa = desk.browser("qa").await;
    let page = source(&qa, "Town mains", "mains").await;
    let brewer = desk.browser("brewer").await;
    let seen = brewer.open(&page.path).await;
    assert_eq!(seen.status, StatusCode::OK);
    assert!(!seen.text.contains("/edit") && !seen.text.contains("water-tests/new"));
    for path in [
        "/sources/new",
        &format!("{}/edit", page.path),
        &format!("{}/water-tests/new", page.path),
    ] {
        assert_eq!(
            brewer.open(path).await.status,
            StatusCode::FORBIDDEN,
            "{path}"
        );
    }
    let retirement = format!("{}/retirement", page.path);
    assert_eq!(
        brewer.post(&retirement, &[]).await.status,
        StatusCode::FORBIDDEN
    );
}

#[tokio::test]
async fn a_source_is_retired_and_taken_back_and_its_price_is_typed_in_us_units() {
    let desk = Desk::start().await;
    let manager = desk.browser("manager").await;
    let page = source(&manager, "Well", "borehole").await;
    let retired = manager
        .fill(&page, &format!("{}/retirement", page.path), &[])
        .await;
    assert!(retired.words().contains("retired"), "{}", retired.words());
    assert!(!manager.open("/sources").await.words().contains("Well"));
    assert!(
        manager
            .open("/sources?retired=yes")
            .await
            .words()
            .contains("Well")
    );
    manager
        .fill(&retired, &format!("{}/return", page.path), &[])
        .await;

    let settings = manager.open("/settings").await;
    manager
        .fill(&settings, "/settings", &[("units", "us")])
        .await;
    // 2.5 a cubic metre is 2.5 × 3.785 412 = 9.463 53 a thousand US gallons (NIST Handbook 44).
    let edit = format!("{}/edit", page.path);
    let form = manager.open(&edit).await;
    assert_eq!(form.field("price_per_m3"), "9.46353");
    let bad = manager
        .fill(&form, &edit, &[("price_per_m3", "free")])
        .await;
    assert_eq!(bad.field("price_per_m3"), "free");
    let saved = manager
        .fill(&form, &edit, &[("price_per_m3", "18.927")])
        .await;
    assert!(
        saved.words().contains("18.9 per 1000 gal"),
        "{}",
        saved.words()
    );
    let stale = manager.fill(&form, &edit, &[("price_per_m3", "1")]).await;
    assert_eq!(stale.status, StatusCode::CONFLICT);
}

#[tokio::test]
async fn long_lists_of_tests_are_paged_and_drawn_through_time() {
    let desk = Desk::start().await;
    let qa = desk.browser("qa").await;
    let page = source(&qa, "Town mains", "mains").await;
    let new = format!("{}/water-tests/new", page.path);
    let form = qa.open(&new).await;
    for day in 1..=23 {
        let mut fields = offered(
            &form,
            &new,
            &[
                ("sampled_on", &format!("2026-01-{day:02}")),
                (ALKALINITY, "150"),
            ],
        );
        fields.retain(|(name, _)| name != "_key");
        qa.post(&new, &fields).await;
    }
    let first = qa.open(&page.path).await;
    assert_eq!(first.texts("#tests tbody tr").len(), 20);
    assert!(first.words().contains("1 to 20 of 23"), "{}", first.words());
    let rest = qa.open(&format!("{}?after=20", page.path)).await;
    assert_eq!(rest.texts("#tests tbody tr").len(), 3);
    assert!(
        first
            .text
            .contains("Total alkalinity in 23 tests from 2026-01-01 to 2026-01-23")
    );
    let other = qa.open(&format!("{}?figure=calcium", page.path)).await;
    assert!(other.words().contains("Calcium was tested less than twice"));
}

#[tokio::test]
async fn the_list_of_sources_is_sorted_by_name_or_by_the_next_test_and_paged() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    for number in 1..=21 {
        let source = serde_json::json!({
            "name": format!("Well {number:02}"), "kind": "borehole", "days_between_tests": 90, "in_use": true,
        });
        let made = program.post("/sources", &source).await;
        assert_eq!(made.status, 201, "{:?}", made.body);
        // The later its number, the older its only test; well 5 has none.
        if number != 5 {
            let day = format!("2026-10-{:02}", 28 - number);
            let test = serde_json::json!({
                "sampled_on": day,
                "readings": [{"analyte": "alkalinity", "value": "100", "unit": "mg_per_l_as_caco3"}],
            });
            let path = format!("/sources/{}/water-tests", made.body["id"].as_str().unwrap());
            let answer = program.post(&path, &test).await;
            assert_eq!(answer.status, 201, "{:?}", answer.body);
        }
    }
    let qa = desk.browser("qa").await;
    let names = |page: &crate::desk::Seen| page.texts("tbody th a");
    let first = qa.open("/sources").await;
    assert_eq!(names(&first).len(), 20);
    assert_eq!(names(&first)[0], "Well 01");
    assert!(first.words().contains("1 to 20 of 21"), "{}", first.words());
    assert_eq!(
        names(&qa.open("/sources?sort=name&after=20").await),
        ["Well 21"]
    );
    let last = qa.open("/sources?sort=name&order=descending").await;
    assert_eq!(names(&last)[0], "Well 21");
    let due = qa.open("/sources?sort=due").await;
    assert_eq!(names(&due)[..3], ["Well 05", "Well 21", "Well 20"]);
}
