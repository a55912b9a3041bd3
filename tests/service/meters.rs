//! pH meters and their calibrations: through the pages and through the API.

use jiff::{SignedDuration, Timestamp};
use leat::brewery::{Settings, Units};
use leat::id::UtcTime;
use leat::meters::{Verdict, operations};
use leat::people::Scope;
use reqwest::StatusCode;
use serde_json::{Value, json};

use crate::desk::{Answer, Browser, Desk, Program, Seen, offered};

fn bench() -> Value {
    json!({"name": "Bench", "kind": "bench", "resolution_ph": "0,01", "compensated": true, "in_use": true})
}

/// Two technical buffers at 20 °C, 7.02 and 4.00, with what the electrode gave in them.
fn two(seven_mv: f64, four_mv: f64) -> Value {
    json!({
        "method": "millivolts", "temperature_c": 20,
        "buffers": [
            {"buffer": "technical_7", "lot": "B-7", "reading_mv": seven_mv},
            {"buffer": "technical_4", "lot": "B-4", "reading_mv": four_mv},
        ],
    })
}

fn path(answer: &Answer) -> String {
    assert_eq!(answer.status, 201, "{:?}", answer.body);
    let location = answer.location.as_deref().unwrap();
    location.strip_prefix("/api/v1").unwrap().to_owned()
}

async fn meter(program: &Program) -> String {
    path(&program.post("/meters", &bench()).await)
}

fn ago(hours: i64) -> String {
    (Timestamp::now() - SignedDuration::from_hours(hours)).to_string()
}

fn number(value: &Value) -> f64 {
    value
        .as_f64()
        .unwrap_or_else(|| panic!("{value} is no number"))
}

/// The form to calibrate, with what it offers and these fields typed over it.
async fn calibrate(browser: &Browser, meter: &str, method: &str, typed: &[(&str, &str)]) -> Seen {
    let action = format!("{meter}/calibrations/new");
    let page = browser.open(&format!("{action}?method={method}")).await;
    browser.fill(&page, &action, typed).await
}

#[tokio::test]
async fn a_meter_is_entered_on_the_form_calibrated_on_the_tablet_and_stands_in_the_list() {
    let desk = Desk::start().await;
    let qa = desk.browser("qa").await;
    let empty = qa.open("/meters").await;
    assert!(empty.words().contains("No meters yet"), "{}", empty.words());
    let page = qa.open("/meters/new").await;
    let typed = [
        ("name", "Mash tun meter"),
        ("kind", "handheld"),
        ("resolution_ph", "0,01"),
    ];
    let made = qa.fill(&page, "/meters/new", &typed).await;
    assert_eq!(made.status, StatusCode::OK);
    assert!(made.words().contains("Not calibrated"), "{}", made.words());
    let place = made.path.clone();

    // By hand: at 20 °C 170 mV over 3.02 pH are 56.29 mV/pH of 58.17, that is 96.8 %; at
    // pH 7 the electrode gives −5 + 0.02·56.29 = −3.9 mV.
    let brewer = desk.browser("brewer").await;
    let typed = [
        ("temperature_c", "20"),
        ("buffers.0.reading_mv", "-5"),
        ("buffers.1.reading_mv", "165,0"),
        ("buffers.1.lot", "B-4"),
    ];
    let done = calibrate(&brewer, &place, "millivolts", &typed).await;
    assert_eq!(
        (done.status, &done.path),
        (StatusCode::OK, &place),
        "{}",
        done.words()
    );
    let words = done.words();
    assert!(
        words.contains("96.8 % of the ideal slope and −3.9 mV"),
        "{words}"
    );
    assert!(words.contains("today at"), "{words}");
    assert!(words.contains("Readings count"), "{words}");
    let list = brewer.open("/meters").await;
    let row = list.texts("tbody tr").join(" ");
    assert!(
        row.contains("Mash tun meter") && row.contains("Good") && row.contains("96.8 %"),
        "{row}"
    );

    // The bottle of last time is offered again, what has to be read is not.
    let next = brewer.open(&format!("{place}/calibrations/new")).await;
    assert_eq!(next.field("buffers.1.lot"), "B-4");
    assert_eq!(next.field("buffers.0.buffer"), "technical_7");
    assert_eq!(next.field("buffers.0.reading_mv"), "");
    assert_eq!(next.field("temperature_c"), "");
}

#[tokio::test]
async fn slips_at_the_bench_are_named_on_the_form_and_everything_typed_stays() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let place = meter(&program).await;
    let browser = desk.browser("brewer").await;
    for (typed, field, sentence) in [
        (
            [
                ("buffers.0.reading_mv", "165"),
                ("buffers.1.reading_mv", "-5"),
            ],
            "buffers",
            "exchanged",
        ),
        (
            [
                ("buffers.0.reading_mv", "5"),
                ("buffers.1.reading_mv", "-165"),
            ],
            "buffers",
            "sign",
        ),
        (
            [("buffers.0.reading_mv", "-5"), ("buffers.1.reading_mv", "")],
            "buffers.1.reading_mv",
            "millivolts",
        ),
        (
            [("buffers.0.reading_mv", "-5"), ("buffers.1.buffer", "")],
            "buffers",
            "Only one buffer",
        ),
        (
            [
                ("buffers.0.temperature_c", "14"),
                ("buffers.1.reading_mv", "165"),
            ],
            "buffers",
            "within 5 °C",
        ),
        (
            [("temperature_c", "61"), ("buffers.1.reading_mv", "165")],
            "temperature_c",
            "outside 0 to 50",
        ),
        (
            [("temperature_c", ""), ("buffers.1.reading_mv", "165")],
            "temperature_c",
            "temperature of the buffers",
        ),
        (
            [
                ("buffers.0.buffer", "other"),
                ("buffers.1.reading_mv", "165"),
            ],
            "buffers.0.buffer_ph",
            "on the bottle",
        ),
        (
            [
                ("buffers.0.buffer_ph", "4.01"),
                ("buffers.1.reading_mv", "165"),
            ],
            "buffers.0.buffer_ph",
            "far from",
        ),
        (
            [
                ("buffers.0.buffer", "technical_4"),
                ("buffers.1.reading_mv", "165"),
            ],
            "buffers",
            "apart",
        ),
        (
            [
                ("buffers.0.reading_mv", "-5"),
                ("buffers.1.reading_mv", "365"),
            ],
            "buffers",
            "no electrode has",
        ),
        (
            [
                ("calibrated_at", "2999-01-01T06:00"),
                ("buffers.1.reading_mv", "165"),
            ],
            "calibrated_at",
            "not come yet",
        ),
        (
            [
                ("buffers.0.use_by", "soon"),
                ("buffers.1.reading_mv", "165"),
            ],
            "buffers.0.use_by",
            "2026-03-31",
        ),
        (
            [
                ("buffers.2.reading_mv", "-180"),
                ("buffers.1.reading_mv", "165"),
            ],
            "buffers.2.buffer",
            "Choose the buffer",
        ),
    ] {
        let mut all = vec![
            ("temperature_c", "20"),
            ("buffers.0.reading_mv", "-5"),
            ("buffers.1.reading_mv", "165"),
            ("notes", "wet gloves"),
        ];
        all.retain(|(name, _)| typed.iter().all(|(other, _)| other != name));
        all.extend(typed);
        if typed[1] == ("buffers.1.buffer", "") {
            all.retain(|(name, _)| *name != "buffers.1.reading_mv");
        }
        let answer = calibrate(&browser, &place, "millivolts", &all).await;
        assert_eq!(answer.status, StatusCode::UNPROCESSABLE_ENTITY, "{typed:?}");
        let error = answer.error(field).unwrap_or_default();
        assert!(
            error.contains(sentence),
            "{typed:?}: {error}; {}",
            answer.words()
        );
        for (name, value) in all {
            assert_eq!(answer.field(name), value, "{name} after {typed:?}");
        }
    }
    let kept = program.get(&format!("{place}/calibrations")).await;
    assert_eq!(kept.body["items"], json!([]));
}

#[tokio::test]
async fn a_handheld_that_shows_only_slope_and_offset_is_entered_as_shown() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let place = meter(&program).await;
    let browser = desk.browser("brewer").await;
    let typed = [
        ("temperature_c", "25"),
        ("slope", "93,5"),
        ("offset_mv", "12"),
    ];
    let done = calibrate(&browser, &place, "display", &typed).await;
    assert_eq!(done.path, place, "{}", done.words());
    assert!(
        done.words().contains("Ageing: still in service"),
        "{}",
        done.words()
    );
    assert!(
        done.words().contains("A good slope is 95 to 102 %"),
        "{}",
        done.words()
    );
    // In mV per pH, at 25 °C: 57.98 of 59.16 is 98.0 %; the sign is the meter's own affair.
    let typed = [
        ("temperature_c", "25"),
        ("slope", "-57.98"),
        ("slope_unit", "mv_per_ph"),
        ("offset_mv", "-3"),
    ];
    let done = calibrate(&browser, &place, "display", &typed).await;
    assert!(
        done.words()
            .contains("98.0 % of the ideal slope and −3.0 mV"),
        "{}",
        done.words()
    );
    let missing = calibrate(
        &browser,
        &place,
        "display",
        &[("temperature_c", "25"), ("slope", "98")],
    )
    .await;
    assert_eq!(missing.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert!(missing.error("offset_mv").is_some());
}

#[tokio::test]
async fn what_a_meter_showed_before_it_was_adjusted_is_worked_back_from_its_last_calibration() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let place = meter(&program).await;
    let calibrations = format!("{place}/calibrations");
    let shown = |seven: f64, four: f64| {
        json!({
            "method": "ph", "temperature_c": 20,
            "buffers": [
                {"buffer": "technical_7", "before_ph": seven, "after_ph": 7.02},
                {"buffer": "technical_4", "before_ph": four, "after_ph": 4.0},
            ],
        })
    };
    // Nothing is known of what it was set to: by hand, 2.90 of 3.02 pH is 96.0 %.
    let first = program.post(&calibrations, &shown(7.02, 4.12)).await;
    assert_eq!(first.status, 201, "{:?}", first.body);
    assert!(
        (number(&first.body["slope_percent"]) - 96.03).abs() < 0.01,
        "{:?}",
        first.body
    );
    let page = desk.browser("brewer").await.open(&place).await;
    assert!(page.words().contains("are assumed"), "{}", page.words());
    // Set to those 96.0 %, it shows the buffers as they are: nothing changed.
    let same = program.post(&calibrations, &shown(7.02, 4.0)).await;
    assert!(
        (number(&same.body["slope_percent"]) - 96.03).abs() < 0.01,
        "{:?}",
        same.body
    );
    let offset = number(&first.body["offset_found_mv"]);
    assert!((number(&same.body["offset_found_mv"]) - offset).abs() < 0.01);
    // Losing a twentieth of what it had.
    let worn = program
        .post(&calibrations, &shown(7.02, 7.02 - 0.95 * 3.02))
        .await;
    assert!(
        (number(&worn.body["slope_percent"]) - 0.95 * 96.03).abs() < 0.01,
        "{:?}",
        worn.body
    );
    assert_eq!(worn.body["verdict"], "do_not_use");
    let swapped = program.post(&calibrations, &shown(4.12, 7.02)).await;
    assert_eq!(swapped.pointers(), ["/buffers"], "{:?}", swapped.body);
}

#[tokio::test]
async fn a_reading_is_worth_what_the_last_calibration_before_it_says_and_less_with_every_day() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let place = meter(&program).await;
    let id = place.rsplit('/').next().unwrap().parse().unwrap();
    let calibrations = format!("{place}/calibrations");
    for (hours, four_mv) in [(30, 165.0), (3, 158.0)] {
        let mut body = two(-5.0, four_mv);
        body["calibrated_at"] = ago(hours).into();
        path(&program.post(&calibrations, &body).await);
    }
    let standing = async |hours: i64| {
        let mut snapshot = desk.app.db.snapshot().await.unwrap();
        let at = UtcTime::from(Timestamp::now() - SignedDuration::from_hours(hours));
        operations::standing(&mut snapshot, id, at).await.unwrap()
    };
    let now = standing(0).await;
    // 163 mV over 3.02 pH is 92.8 %.
    assert_eq!((now.verdict, now.fresh), (Verdict::Ageing, true));
    assert!(now.may_be_acted_on());
    let before = standing(4).await;
    assert_eq!((before.verdict, before.fresh), (Verdict::Good, false));
    assert!(!before.may_be_acted_on());
    assert!(before.sd.get() > now.sd.get(), "{} {}", before.sd, now.sd);
    let never = standing(31).await;
    assert_eq!(
        (never.verdict, never.fresh),
        (Verdict::NotCalibrated, false)
    );
    assert!((never.sd.get() - 0.3).abs() < 1e-12);

    let seen = program.get(&place).await;
    assert_eq!(seen.body["standing"]["verdict"], "ageing");
    assert_eq!(seen.body["standing"]["may_be_acted_on"], true);
    let brewer = desk.member("brewer").await;
    let listed = operations::standings(&desk.app.db, &brewer, UtcTime::now());
    let listed = listed.await.unwrap();
    assert_eq!((listed.len(), listed[0].1.verdict), (1, Verdict::Ageing));
}

#[tokio::test]
async fn a_withdrawn_calibration_stays_to_be_read_and_the_one_before_it_counts() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let place = meter(&program).await;
    let calibrations = format!("{place}/calibrations");
    path(&program.post(&calibrations, &two(-5.0, 165.0)).await);
    let bad = path(&program.post(&calibrations, &two(-5.0, 140.0)).await);
    let browser = desk.browser("brewer").await;
    let page = browser.open(&place).await;
    assert!(
        page.words().contains("Do not use this meter"),
        "{}",
        page.words()
    );

    let page = browser.open(&bad).await;
    let action = format!("{bad}/withdrawal");
    let silent = browser.fill(&page, &action, &[("reason", " ")]).await;
    assert_eq!(silent.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert!(silent.error("reason").is_some());
    let back = browser
        .fill(&page, &action, &[("reason", "Buffer of last year")])
        .await;
    assert_eq!(back.path, place);
    assert!(back.words().contains("Readings count"), "{}", back.words());
    let read = browser.open(&bad).await;
    assert!(
        read.words().contains("Buffer of last year"),
        "{}",
        read.words()
    );
    let again = program.post(&action, &json!({"reason": "Twice"})).await;
    assert_eq!(again.status, 409);
    let book = desk.browser("manager").await.open("/record").await;
    assert!(
        book.words().contains("Buffer of last year"),
        "{}",
        book.words()
    );
}

#[tokio::test]
async fn a_calibration_once_entered_cannot_be_rewritten_even_at_a_console() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let place = meter(&program).await;
    path(
        &program
            .post(&format!("{place}/calibrations"), &two(-5.0, 165.0))
            .await,
    );
    for statement in [
        "UPDATE meter_calibrations SET slope_percent = 100",
        "UPDATE meter_calibrations SET entered_by = 'somebody'",
        "DELETE FROM meter_calibrations",
        "UPDATE meter_calibration_buffers SET reading_mv = 0",
        "DELETE FROM meter_calibration_buffers",
    ] {
        let mut tx = desk.app.db.begin_unkeyed().await.unwrap();
        assert!(
            sqlx::query(statement).execute(&mut *tx).await.is_err(),
            "{statement}"
        );
    }
}

#[tokio::test]
async fn the_bottle_counts_before_the_table_and_a_stale_one_makes_the_reading_doubtful() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let place = meter(&program).await;
    let calibrations = format!("{place}/calibrations");
    let fresh = path(&program.post(&calibrations, &two(-5.0, 165.0)).await);
    let by_table = program.get(&fresh).await;
    assert_eq!(by_table.body["buffer_phs"], json!([7.02, 4.0]));
    let sd = number(&program.get(&place).await.body["standing"]["sd"]);
    let mut body = two(-5.0, 165.0);
    body["buffers"][1]["buffer_ph"] = "4,02".into();
    body["buffers"][1]["use_by"] = "2020-05-01".into();
    let own = program.post(&calibrations, &body).await;
    assert_eq!(
        own.body["buffer_phs"],
        json!([7.02, 4.02]),
        "{:?}",
        own.body
    );
    // 170 mV over 3.00 instead of 3.02 pH.
    let ratio = number(&own.body["slope_percent"]) / number(&by_table.body["slope_percent"]);
    assert!((ratio - 3.02 / 3.0).abs() < 1e-9, "{ratio}");
    let doubtful = number(&program.get(&place).await.body["standing"]["sd"]);
    assert!(doubtful > sd + 0.02, "{doubtful} {sd}");
    let page = desk.browser("brewer").await.open(&place).await;
    assert!(
        page.words().contains("past its date, 2020-05-01"),
        "{}",
        page.words()
    );
}

#[tokio::test]
async fn a_third_buffer_makes_a_residual_and_a_sixth_is_too_many() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let place = meter(&program).await;
    let calibrations = format!("{place}/calibrations");
    let mut body = two(-1.16, 174.5);
    let buffers = body["buffers"].as_array_mut().unwrap();
    // 10.06 at 20 °C lies 3.06 above 7: −178.0 mV; six off.
    buffers.push(json!({"buffer": "technical_10", "reading_mv": -172.0}));
    buffers.push(json!({"buffer": ""}));
    let three = program.post(&calibrations, &body).await;
    assert_eq!(three.status, 201, "{:?}", three.body);
    assert_eq!(three.body["buffers"].as_array().unwrap().len(), 3);
    assert!(
        number(&three.body["residual_ph"]) > 0.02,
        "{:?}",
        three.body
    );
    let page = desk.browser("brewer").await.open(&path(&three)).await;
    assert!(
        page.words().contains("scatter of the buffers"),
        "{}",
        page.words()
    );
    body["buffers"] = json!(vec![json!({"buffer": "technical_7", "reading_mv": 1}); 6]);
    let six = program.post(&calibrations, &body).await;
    assert_eq!(six.pointers(), ["/buffers"], "{:?}", six.body);
}

#[tokio::test]
async fn a_brewer_calibrates_and_only_qa_and_managers_keep_meters() {
    let desk = Desk::start().await;
    let manager = desk.full_program("manager").await;
    let place = meter(&manager).await;
    let brewer = desk.full_program("brewer").await;
    assert_eq!(brewer.post("/meters", &bench()).await.status, 403);
    assert_eq!(brewer.put(&place, &bench()).await.status, 403);
    path(
        &brewer
            .post(&format!("{place}/calibrations"), &two(-5.0, 165.0))
            .await,
    );
    let reads = desk.program("brewer", &[Scope::Read]).await;
    assert_eq!(
        reads
            .post(&format!("{place}/calibrations"), &two(-5.0, 165.0))
            .await
            .status,
        403
    );
    let browser = desk.browser("brewer").await;
    assert_eq!(
        browser.open("/meters/new").await.status,
        StatusCode::FORBIDDEN
    );
    assert_eq!(
        browser.open(&format!("{place}/edit")).await.status,
        StatusCode::FORBIDDEN
    );
    let list = browser.open("/meters").await;
    assert!(!list.text.contains("/meters/new"));
    assert!(list.text.contains(&format!("{place}/calibrations/new")));
}

#[tokio::test]
async fn a_stale_edit_and_a_name_taken_are_refused_with_the_text_kept() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let place = meter(&program).await;
    let mut other = bench();
    other["name"] = "Hand".into();
    path(&program.post("/meters", &other).await);
    let browser = desk.browser("qa").await;
    let action = format!("{place}/edit");
    let page = browser.open(&action).await;
    let taken = browser
        .fill(&page, &action, &[("name", "hand"), ("notes", "kept wet")])
        .await;
    assert_eq!(taken.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert!(taken.error("name").unwrap().contains("exists already"));
    assert_eq!(taken.field("notes"), "kept wet");
    let saved = browser.fill(&page, &action, &[("notes", "kept wet")]).await;
    assert_eq!(saved.path, place, "{}", saved.words());
    let stale = browser.fill(&page, &action, &[("notes", "kept dry")]).await;
    assert_eq!(stale.status, StatusCode::CONFLICT);
    assert_eq!(stale.field("notes"), "kept dry");
    let kept = program.get(&place).await;
    assert_eq!(kept.body["notes"], "kept wet");
    let headers = [("if-match", "\"1\"")];
    let stale = program.send("PUT", &place, Some(&bench()), &headers).await;
    assert_eq!(stale.status, 409);

    // Out of use, it leaves the list and keeps its history.
    let page = browser.open(&action).await;
    let mut fields = offered(&page, &action, &[]);
    fields.retain(|(name, _)| name != "in_use");
    assert_eq!(browser.post(&action, &fields).await.status, StatusCode::OK);
    assert!(!browser.open("/meters").await.text.contains(&place));
    assert!(
        browser
            .open("/meters?retired=yes")
            .await
            .text
            .contains(&place)
    );
}

#[tokio::test]
async fn a_calibration_sent_twice_with_one_key_is_entered_once() {
    let desk = Desk::start().await;
    let program = desk.full_program("brewer").await;
    let place = meter(&desk.full_program("manager").await).await;
    let calibrations = format!("{place}/calibrations");
    let key = [("idempotency-key", "calibrated-at-six")];
    let body = two(-5.0, 165.0);
    let first = program.send("POST", &calibrations, Some(&body), &key).await;
    let again = program.send("POST", &calibrations, Some(&body), &key).await;
    assert_eq!((first.status, again.status), (201, 201));
    assert_eq!(first.body, again.body);
    let browser = desk.browser("brewer").await;
    let action = format!("{place}/calibrations/new");
    let page = browser.open(&format!("{action}?method=millivolts")).await;
    let typed = [
        ("temperature_c", "20"),
        ("buffers.0.reading_mv", "-5"),
        ("buffers.1.reading_mv", "165"),
    ];
    let fields = offered(&page, &action, &typed);
    for _ in 0..2 {
        assert_eq!(browser.post(&action, &fields).await.path, place);
    }
    let kept = program.get(&calibrations).await;
    assert_eq!(kept.body["items"].as_array().unwrap().len(), 2);
    let one = program.get(&format!("{calibrations}?limit=1")).await;
    let next = one.body["next_cursor"].as_str().unwrap();
    let two = program
        .get(&format!("{calibrations}?limit=1&cursor={next}"))
        .await;
    assert_ne!(one.body["items"], two.body["items"]);
}

#[tokio::test]
async fn a_brewery_with_us_units_types_and_reads_fahrenheit() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let place = meter(&program).await;
    let settings = Settings {
        units: Units::Us,
        time_zone: "America/New_York".into(),
        ..Settings::default()
    };
    let manager = desk.member("manager").await;
    leat::brewery::operations::revise(&desk.app.db, &manager, settings, None)
        .await
        .unwrap();
    let browser = desk.browser("brewer").await;
    let typed = [
        ("temperature_c", "68"),
        ("buffers.0.reading_mv", "-5"),
        ("buffers.1.reading_mv", "165"),
        ("calibrated_at", "2026-01-15T06:15"),
    ];
    let done = calibrate(&browser, &place, "millivolts", &typed).await;
    assert_eq!(done.path, place, "{}", done.words());
    let kept = program.get(&format!("{place}/calibrations")).await;
    let kept = &kept.body["items"][0];
    assert!(
        (number(&kept["buffers"][0]["temperature_c"]) - 20.0).abs() < 1e-9,
        "{kept}"
    );
    // Eastern Standard Time is five hours behind UTC.
    assert_eq!(kept["calibrated_at"], "2026-01-15T11:15:00.000Z");
    let page = browser
        .open(&format!(
            "{place}/calibrations/{}",
            kept["id"].as_str().unwrap()
        ))
        .await;
    assert!(page.words().contains("68.0 °F"), "{}", page.words());
    let wrong = calibrate(
        &browser,
        &place,
        "millivolts",
        &[("temperature_c", "20"), ("buffers.0.reading_mv", "-5")],
    )
    .await;
    assert_eq!(wrong.field("temperature_c"), "20");
}

#[tokio::test]
async fn slope_and_offset_are_drawn_once_there_are_two_calibrations() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let place = meter(&program).await;
    let calibrations = format!("{place}/calibrations");
    for week in 0..40_u16 {
        let mut body = two(-5.0, 165.0 - 0.1 * f64::from(week));
        body["calibrated_at"] = ago(24 * 7 * i64::from(40 - week)).into();
        path(&program.post(&calibrations, &body).await);
    }
    let page = desk.browser("brewer").await.open(&place).await;
    assert_eq!(
        page.texts("svg.trend circle.trend-plain").len()
            + page.texts("svg.trend path.trend-signal").len(),
        80
    );
    let charts = page.html();
    let chart = scraper::Selector::parse("svg.trend").unwrap();
    let told: Vec<_> = charts
        .select(&chart)
        .filter_map(|svg| svg.value().attr("aria-label"))
        .collect();
    assert!(
        told[0].starts_with("Slope at 40 calibrations from"),
        "{told:?}"
    );
    // By hand: 0.1 mV a week over 3.02 pH of 58.17 mV is 0.0569 points a week, 2.97 a year.
    assert!(
        page.words()
            .contains("falls by 3.0 percentage points a year"),
        "{}",
        page.words()
    );
    assert!(page.words().contains("1 to 10 of 40"), "{}", page.words());
}
