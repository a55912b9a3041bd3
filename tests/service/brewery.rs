//! The brewery's settings.

use leat::people::Scope;

use crate::desk::Desk;

#[tokio::test]
async fn a_manager_orders_the_vessels_asks_for_a_second_person_and_sets_the_idle_time() {
    let desk = Desk::start().await;
    let manager = desk.browser("manager").await;
    let page = manager.open("/settings").await;
    assert_eq!(page.field("vessel_order.0"), "liquor_tank");
    assert_eq!(page.field("second_person"), "never");
    assert_eq!(page.field("tablet_idle_minutes"), "5");
    let typed = [
        ("vessel_order.0", "kettle"),
        ("vessel_order.1", "mash"),
        ("vessel_order.2", "sparge_liquor"),
        ("vessel_order.3", "liquor_tank"),
        ("second_person", "acid_and_lime"),
        ("tablet_idle_minutes", "12"),
    ];
    let saved = manager.fill(&page, "/settings", &typed).await;
    assert_eq!(saved.status, 200, "{}", saved.words());
    for (name, value) in typed {
        assert_eq!(saved.field(name), value);
    }
    let reader = desk.program("brewer", &[Scope::Read]).await;
    let settings = reader.get("/settings").await;
    assert_eq!(
        settings.body["vessel_order"],
        serde_json::json!(["kettle", "mash", "sparge_liquor", "liquor_tank"])
    );
    assert_eq!(settings.body["second_person"], "acid_and_lime");
    assert_eq!(settings.body["tablet_idle_minutes"], 12.0);
}

#[tokio::test]
async fn a_vessel_named_twice_an_unknown_choice_and_an_idle_time_nobody_would_want_are_refused() {
    let desk = Desk::start().await;
    let manager = desk.browser("manager").await;
    let page = manager.open("/settings").await;
    for (name, value, sentence) in [
        (
            "vessel_order.3",
            "mash",
            "The mash stands above already: name each once.",
        ),
        (
            "vessel_order.1",
            "bucket",
            "“bucket” is not one of the choices.",
        ),
        (
            "second_person",
            "always",
            "“always” is not one of the choices.",
        ),
        ("tablet_idle_minutes", "0", "is outside 1 to 60 min."),
        ("tablet_idle_minutes", "61", "is outside 1 to 60 min."),
        ("tablet_idle_minutes", "2.5", "Enter whole minutes."),
        ("tablet_idle_minutes", "NaN", "is not a number"),
        ("tablet_idle_minutes", "", "Enter a number."),
    ] {
        let refused = manager.fill(&page, "/settings", &[(name, value)]).await;
        assert_eq!(refused.status, 422, "{name} {value}");
        let error = refused.error(name).unwrap_or_default();
        assert!(error.contains(sentence), "{name} {value}: {error}");
    }
    // An order of three is no order.
    let mut short = crate::desk::offered(&page, "/settings", &[]);
    short.retain(|(name, _)| name != "vessel_order.3");
    let refused = manager.post("/settings", &short).await;
    assert_eq!(refused.status, 422);
    assert!(refused.words().contains("each once"), "{}", refused.words());
}

#[tokio::test]
async fn who_may_not_change_the_settings_reads_them_and_finds_no_field() {
    let desk = Desk::start().await;
    for login in ["brewer", "qa"] {
        let browser = desk.browser(login).await;
        let page = browser.open("/settings").await;
        assert_eq!(page.texts("main form, main input, main select").len(), 0);
        let words = page.words();
        for said in [
            "Only a manager can change these.",
            "liquor tank, mash, sparge liquor, kettle",
            "For no line",
            "5 min",
            "UTC",
        ] {
            assert!(words.contains(said), "{login}: {said} in {words}");
        }
    }
}
