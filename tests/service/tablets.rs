//! Shared tablets: enrolling, names and PINs, switching, idling, revoking.

use std::time::Instant;

use leat::error::Error;
use leat::id::MemberId;
use leat::people::operations::{self, Gate};
use leat::people::{Member, Place};
use leat::web::throttle::Throttle;
use reqwest::StatusCode;

use crate::desk::{Browser, Desk, PASSWORD, Seen};

const PIN: &str = "482913";

/// A device that the manager has enrolled from itself.
async fn enrolled(desk: &Desk, name: &str) -> Browser {
    let device = desk.browser("manager").await;
    let page = device.open("/tablets").await;
    let names = device
        .fill(&page, "/tablets", &[("tablet_name", name)])
        .await;
    assert_eq!(names.path, "/sign-in", "{}", names.words());
    assert!(names.words().contains("is enrolled"), "{}", names.words());
    device
}

/// Gives somebody a PIN, as the manager may.
async fn give_pin(desk: &Desk, login: &str, pin: &str) -> MemberId {
    let manager = desk.member("manager").await;
    let id = desk.member(login).await.id;
    let (throttle, place) = (Throttle::new().unwrap(), here());
    let gate = gate(desk, &throttle, &place);
    operations::set_pin(&desk.app.db, &manager, gate, id, PASSWORD, pin)
        .await
        .unwrap();
    id
}

fn here() -> Place {
    Place::at([127, 0, 0, 1].into())
}

fn gate<'a>(desk: &'a Desk, throttle: &'a Throttle, place: &'a Place) -> Gate<'a> {
    Gate {
        passwords: &desk.app.passwords,
        throttle,
        place,
    }
}

/// Taps a name, types a PIN, sends it.
async fn enter(tablet: &Browser, who: MemberId, next: &str, pin: &str) -> Seen {
    let page = tablet
        .open(&format!("/sign-in?who={who}&next={next}"))
        .await;
    tablet.fill(&page, "/sign-in/pin", &[("pin", pin)]).await
}

#[tokio::test]
async fn on_an_enrolled_tablet_one_switches_by_name_and_pin_and_stays_on_the_page() {
    let desk = Desk::start().await;
    let tablet = enrolled(&desk, "Mash tun").await;
    let empty = tablet.open("/sign-in").await;
    assert!(empty.words().contains("Nobody has a PIN yet"));
    let brewer = give_pin(&desk, "brewer", PIN).await;
    let qa = give_pin(&desk, "qa", "719402").await;

    // Who asks for a page is shown the names, and only of those who have a PIN.
    let names = tablet.open("/record?kind=plan").await;
    assert_eq!(names.path, "/sign-in");
    assert_eq!(
        names.texts("button.name .name-words"),
        ["Bo Brewer", "Quin Assay"]
    );
    assert_eq!(names.field("next"), "/record?kind=plan");
    let page = enter(&tablet, brewer, "/record?kind=plan", PIN).await;
    assert_eq!(
        (page.path.as_str(), page.status),
        ("/record", StatusCode::OK)
    );
    assert!(page.texts(".person-name")[0].contains("Bo Brewer"));
    assert!(page.text.contains("data-here=\"/record?kind=plan\""));
    assert!(
        page.texts("header form button")
            .contains(&"Switch".to_owned())
    );

    // Switching: the names at once, the old session gone, the same page for the next.
    let names = tablet.fill(&page, "/switch", &[]).await;
    assert_eq!(names.field("next"), "/record?kind=plan");
    assert_eq!(tablet.open("/record").await.path, "/sign-in");
    let page = enter(&tablet, qa, "/record?kind=plan", "719402").await;
    assert_eq!(page.path, "/record");
    assert!(page.texts(".person-name")[0].contains("Quin Assay"));
}

#[tokio::test]
async fn switching_by_pin_takes_at_most_400_ms_with_its_hash() {
    let desk = Desk::start().await;
    let tablet = enrolled(&desk, "Mash tun").await;
    let who = give_pin(&desk, "brewer", PIN).await;
    let mut fastest = u128::MAX;
    for _ in 0..4 {
        let page = tablet
            .open(&format!("/sign-in?who={who}&next=/record"))
            .await;
        let begun = Instant::now();
        let page = tablet.fill(&page, "/sign-in/pin", &[("pin", PIN)]).await;
        fastest = fastest.min(begun.elapsed().as_millis());
        assert_eq!(page.path, "/record");
    }
    // The best of four: the machine that tests may be busy with other tests.
    assert!(fastest <= 400, "{fastest} ms");
}

#[tokio::test]
async fn a_pin_opens_nothing_away_from_an_enrolled_tablet() {
    let desk = Desk::start().await;
    let who = give_pin(&desk, "brewer", PIN).await.to_string();
    let fields = [("who", who.as_str()), ("pin", PIN), ("next", "/record")];
    let stranger = desk.stranger();
    for cookie in ["", "leat_tablet=chosen-by-somebody-else"] {
        let request = stranger
            .request("POST", "/sign-in/pin")
            .header("cookie", cookie);
        let answer = request.header("origin", &desk.address).form(&fields);
        let answer = Seen::of(answer.send().await.unwrap()).await;
        assert_eq!(answer.status, StatusCode::FORBIDDEN);
        assert!(answer.words().contains("enrolled tablet only"));
    }
    assert_eq!(stranger.open("/record").await.path, "/sign-in");
    // Nor do the names stand anywhere but on a tablet.
    assert!(!stranger.open("/sign-in").await.text.contains("Bo Brewer"));
}

/// The cookies of a response by name, as a thief would note them.
fn cookies(answer: &reqwest::Response) -> Vec<(String, String)> {
    let lines = answer.headers().get_all("set-cookie").iter();
    lines
        .map(|line| {
            let line = line.to_str().unwrap();
            let ended = line.contains("Max-Age=0");
            assert!(
                ended || (line.contains("HttpOnly") && line.contains("SameSite=Lax")),
                "{line}"
            );
            let (name, rest) = line.split_once('=').unwrap();
            (name.to_owned(), rest.split(';').next().unwrap().to_owned())
        })
        .collect()
}

#[tokio::test]
async fn a_session_of_a_tablet_is_good_on_that_tablet_only() {
    let desk = Desk::start().await;
    let who = give_pin(&desk, "brewer", PIN).await.to_string();
    let client = reqwest::Client::builder()
        .redirect(reqwest::redirect::Policy::none())
        .build()
        .unwrap();
    let post = async |path: &str, cookie: &str, fields: &[(&str, &str)]| {
        let request = client.post(format!("{}{path}", desk.address));
        let request = request
            .header("origin", &desk.address)
            .header("cookie", cookie);
        cookies(&request.form(fields).send().await.unwrap())
    };
    let mut tablets = Vec::new();
    for name in ["Mash tun", "Mill"] {
        let manager = post(
            "/sign-in",
            "",
            &[("login", "manager"), ("password", PASSWORD)],
        )
        .await;
        let manager = format!("{}={}", manager[0].0, manager[0].1);
        let made = post("/tablets", &manager, &[("tablet_name", name)]).await;
        let made = made.into_iter().find(|(name, _)| name == "leat_tablet");
        tablets.push(format!("leat_tablet={}", made.unwrap().1));
        // The manager's own session went with it.
        let request = client
            .get(format!("{}/people", desk.address))
            .header("cookie", manager);
        assert_eq!(request.send().await.unwrap().status(), 303);
    }
    let fields = [("who", who.as_str()), ("pin", PIN), ("next", "/record")];
    let session = post("/sign-in/pin", &tablets[0], &fields).await;
    let session = session.into_iter().find(|(name, _)| name == "leat_session");
    let session = format!("leat_session={}", session.unwrap().1);
    let opens = async |cookies: String| {
        let request = client.get(format!("{}/record", desk.address));
        request
            .header("cookie", cookies)
            .send()
            .await
            .unwrap()
            .status()
            == 200
    };
    assert!(opens(format!("{session}; {}", tablets[0])).await);
    assert!(!opens(format!("{session}; {}", tablets[1])).await);
    assert!(!opens(session).await);
}

#[tokio::test]
async fn guesses_at_one_name_stop_neither_the_other_names_nor_a_desk() {
    let desk = Desk::start().await;
    let tablet = enrolled(&desk, "Mash tun").await;
    let other = enrolled(&desk, "Mill").await;
    let brewer = give_pin(&desk, "brewer", PIN).await;
    let qa = give_pin(&desk, "qa", "719402").await;
    for guess in 0..5 {
        let pin = format!("90341{guess}");
        let refused = enter(&tablet, brewer, "/", &pin).await;
        assert_eq!(refused.status, StatusCode::UNPROCESSABLE_ENTITY);
        assert!(refused.error("pin").is_some() && !refused.text.contains(&pin));
    }
    // From here on even the right one has to wait, so that a guess tells nothing.
    for pin in ["903415", PIN] {
        let refused = enter(&tablet, brewer, "/", pin).await;
        assert_eq!(refused.status, StatusCode::TOO_MANY_REQUESTS);
        assert!(
            refused.words().contains("Try again in"),
            "{}",
            refused.words()
        );
    }
    for _ in 0..60 {
        enter(&tablet, brewer, "/", "903416").await;
    }
    assert_eq!(
        enter(&tablet, qa, "/record", "719402").await.path,
        "/record"
    );
    assert_eq!(enter(&other, brewer, "/record", PIN).await.path, "/record");
    let desk_browser = desk.browser("brewer").await;
    assert_eq!(desk_browser.open("/record").await.path, "/record");
}

#[tokio::test]
async fn a_revoked_tablet_is_signed_out_at_once_and_asks_for_a_password_again() {
    let desk = Desk::start().await;
    let tablet = enrolled(&desk, "Mash tun").await;
    let who = give_pin(&desk, "brewer", PIN).await;
    assert_eq!(enter(&tablet, who, "/record", PIN).await.path, "/record");
    let manager = desk.browser("manager").await;
    let list = manager.open("/tablets").await;
    let html = list.html();
    let form = scraper::Selector::parse("form[action$='/revocation']").unwrap();
    let action = html.select(&form).next().unwrap().value().attr("action");
    let revoked = manager.fill(&list, action.unwrap(), &[]).await;
    assert!(revoked.words().contains("revoked"), "{}", revoked.words());

    let door = tablet.open("/record").await;
    assert_eq!(door.path, "/sign-in");
    assert!(door.text.contains("name=\"password\"") && !door.text.contains("Bo Brewer"));
    let who = who.to_string();
    let fields = [("who".into(), who), ("pin".into(), PIN.into())];
    let refused = tablet.post("/sign-in/pin", &fields).await;
    assert_eq!(refused.status, StatusCode::FORBIDDEN);
    // Its name is free for the device that takes its place.
    enrolled(&desk, "Mash tun").await;
}

#[tokio::test]
async fn a_tablet_left_alone_ends_its_session_after_the_minutes_of_the_settings() {
    let desk = Desk::start().await;
    let tablet = enrolled(&desk, "Mash tun").await;
    let who = give_pin(&desk, "brewer", PIN).await;
    let at_desk = desk.browser("brewer").await;
    let open = async |minutes: i64| {
        assert_eq!(enter(&tablet, who, "/record", PIN).await.path, "/record");
        let mut tx = desk.app.db.begin_unkeyed().await.unwrap();
        sqlx::query("UPDATE sessions SET last_seen_at = ?")
            .bind(leat::id::UtcTime::now().plus_seconds(-60 * minutes))
            .execute(&mut *tx)
            .await
            .unwrap();
        tx.commit().await.unwrap();
        tablet.open("/record").await.path == "/record"
    };
    assert!(open(4).await);
    assert!(!open(6).await);
    assert_eq!(
        at_desk.open("/record").await.path,
        "/record",
        "a desk keeps its session"
    );
    let manager = desk.browser("manager").await;
    let settings = manager.open("/settings").await;
    let ten = [("tablet_idle_minutes", "10")];
    let saved = manager.fill(&settings, "/settings", &ten).await;
    assert_eq!(saved.status, StatusCode::OK, "{}", saved.words());
    assert!(open(9).await);
    assert!(!open(11).await);
}

#[tokio::test]
async fn a_form_sent_after_the_tablet_fell_back_leads_to_its_page_again() {
    let desk = Desk::start().await;
    let tablet = enrolled(&desk, "Mash tun").await;
    let sent = tablet
        .request("POST", "/plans/new")
        .header("origin", &desk.address)
        .header(
            "referer",
            format!("{}/plans/new?beer=1&done=saved", desk.address),
        )
        .form(&[("batch", "26-1")]);
    give_pin(&desk, "brewer", PIN).await;
    let names = Seen::of(sent.send().await.unwrap()).await;
    assert_eq!(names.path, "/sign-in");
    assert_eq!(names.field("next"), "/plans/new?beer=1");
}

#[tokio::test]
async fn a_closed_account_leaves_the_names_and_its_pin_opens_nothing() {
    let desk = Desk::start().await;
    let tablet = enrolled(&desk, "Mash tun").await;
    let who = give_pin(&desk, "brewer", PIN).await;
    give_pin(&desk, "qa", "719402").await;
    let ready = tablet
        .open(&format!("/sign-in?who={who}&next=/record"))
        .await;
    assert_eq!(enter(&tablet, who, "/record", PIN).await.path, "/record");
    let manager = desk.browser("manager").await;
    let page = manager.open(&format!("/people/{who}")).await;
    let mut fields = crate::desk::offered(&page, &format!("/people/{who}"), &[]);
    fields.retain(|(name, _)| name != "open");
    manager.post(&format!("/people/{who}"), &fields).await;

    let names = tablet.open("/record").await;
    assert_eq!(names.texts("button.name .name-words"), ["Quin Assay"]);
    let refused = tablet.fill(&ready, "/sign-in/pin", &[("pin", PIN)]).await;
    assert_eq!(refused.path, "/sign-in");
    assert_eq!(tablet.open("/record").await.path, "/sign-in");
}

#[tokio::test]
async fn a_pin_opens_no_accounts_and_no_tokens_even_to_a_manager() {
    let desk = Desk::start().await;
    let tablet = enrolled(&desk, "Mash tun").await;
    let who = give_pin(&desk, "manager", PIN).await;
    assert_eq!(
        enter(&tablet, who, "/settings", PIN).await.status,
        StatusCode::OK
    );
    for path in ["/people", "/people/invite", "/tablets"] {
        let page = tablet.open(path).await;
        assert_eq!(page.status, StatusCode::FORBIDDEN, "{path}");
        assert!(page.words().contains("Sign in with your password"));
    }
    // With the password it does, on the same tablet; that session idles like any there.
    let names = tablet
        .fill(&tablet.open("/settings").await, "/switch", &[])
        .await;
    assert!(names.text.contains("with=password"));
    let door = tablet.open("/sign-in?with=password&next=/people").await;
    let fields = [("login", "manager"), ("password", PASSWORD)];
    assert_eq!(
        tablet.fill(&door, "/sign-in", &fields).await.path,
        "/people"
    );
}

#[tokio::test]
async fn one_sets_ones_own_pin_with_the_password_and_a_manager_anybodys() {
    let desk = Desk::start().await;
    let id = desk.member("brewer").await.id;
    let (page, form) = (format!("/people/{id}"), format!("/people/{id}/pin"));
    let brewer = desk.browser("brewer").await;
    let set = async |pin: &str, password: &str| {
        let fields = [("pin", pin), ("present_for_pin", password)];
        brewer.fill(&brewer.open(&page).await, &form, &fields).await
    };
    let refused = set(PIN, "not the password").await;
    assert!(
        refused.error("present_for_pin").is_some(),
        "{}",
        refused.words()
    );
    for weak in ["111111", "123456", "98765", "48291x"] {
        let refused = set(weak, PASSWORD).await;
        assert!(refused.error("pin").is_some(), "{weak}");
        assert!(!refused.text.contains(weak), "{weak} is shown again");
    }
    assert!(set(PIN, PASSWORD).await.words().contains("The PIN is set"));
    let qa = desk.browser("qa").await;
    let fields = [("pin".to_owned(), PIN.to_owned())];
    assert_eq!(qa.post(&form, &fields).await.status, StatusCode::FORBIDDEN);
    let manager = desk.browser("manager").await;
    let done = manager
        .fill(&manager.open(&page).await, &form, &[("pin", "719402")])
        .await;
    assert!(done.words().contains("The PIN is set"), "{}", done.words());

    // The book tells who did it, and no PIN.
    let book = manager.open("/record").await;
    assert!(book.words().contains("PIN changed") && book.words().contains("PIN set"));
    let copy = desk.file.with_file_name("copy.sqlite");
    desk.app.db.back_up(&copy).await.unwrap();
    let bytes = std::fs::read(&copy).unwrap();
    for pin in [PIN, "719402"] {
        assert!(
            !bytes
                .windows(pin.len())
                .any(|window| window == pin.as_bytes())
        );
    }
}

#[tokio::test]
async fn a_new_pin_ends_what_the_old_one_opened() {
    let desk = Desk::start().await;
    let tablet = enrolled(&desk, "Mash tun").await;
    let who = give_pin(&desk, "brewer", PIN).await;
    enter(&tablet, who, "/record", PIN).await;
    give_pin(&desk, "brewer", "719402").await;
    assert_eq!(tablet.open("/record").await.path, "/sign-in");
    assert_eq!(
        enter(&tablet, who, "/record", PIN).await.path,
        "/sign-in/pin"
    );
    assert_eq!(
        enter(&tablet, who, "/record", "719402").await.path,
        "/record"
    );
}

#[tokio::test]
async fn a_tablet_is_enrolled_by_a_manager_once() {
    let desk = Desk::start().await;
    for login in ["brewer", "qa"] {
        let browser = desk.browser(login).await;
        let fields = [("tablet_name".to_owned(), "Mill".to_owned())];
        assert_eq!(browser.open("/tablets").await.status, StatusCode::FORBIDDEN);
        assert_eq!(
            browser.post("/tablets", &fields).await.status,
            StatusCode::FORBIDDEN
        );
    }
    let tablet = enrolled(&desk, "Mash tun").await;
    let manager = desk.browser("manager").await;
    let page = manager.open("/tablets").await;
    for name in ["", "Mash tun"] {
        let refused = manager
            .fill(&page, "/tablets", &[("tablet_name", name)])
            .await;
        assert_eq!(refused.status, StatusCode::UNPROCESSABLE_ENTITY);
        assert!(refused.error("tablet_name").is_some());
    }
    let door = tablet.open("/sign-in?with=password&next=/tablets").await;
    let fields = [("login", "manager"), ("password", PASSWORD)];
    let page = tablet.fill(&door, "/sign-in", &fields).await;
    assert!(
        page.words()
            .contains("This device is enrolled as “Mash tun”")
    );
    let again = tablet
        .post("/tablets", &[("tablet_name".into(), "Twice".into())])
        .await;
    assert_eq!(again.status, StatusCode::CONFLICT);
}

#[tokio::test]
async fn a_second_person_vouches_by_pin_on_a_tablet_and_by_password_elsewhere() {
    let desk = Desk::start().await;
    let tablet = enrolled(&desk, "Mash tun").await;
    let qa = give_pin(&desk, "qa", "719402").await;
    drop(tablet);
    let by = desk.member("brewer").await;
    let manager = desk.member("manager").await;
    let throttle = Throttle::new().unwrap();
    let at_desk = here();
    let tablets = operations::tablets(&desk.app.db, &manager).await.unwrap();
    let at_tablet = Place {
        tablet: tablets.into_iter().next(),
        ..here()
    };
    let vouch = async |place: &Place, who: MemberId, secret: &str| -> Result<Member, String> {
        let gate = gate(&desk, &throttle, place);
        operations::vouch(&desk.app.db, &by, gate, who, secret)
            .await
            .map_err(|error| match error {
                Error::Invalid(problems) => problems[0].field.clone(),
                other => other.to_string(),
            })
    };
    let witness = vouch(&at_tablet, qa, "719402").await.unwrap();
    assert_eq!((witness.id, witness.name.as_str()), (qa, "Quin Assay"));
    assert_eq!(vouch(&at_desk, qa, PASSWORD).await.unwrap().id, qa);
    assert_eq!(vouch(&at_tablet, qa, PASSWORD).await.unwrap_err(), "secret");
    assert_eq!(vouch(&at_desk, qa, "719402").await.unwrap_err(), "secret");
    assert_eq!(vouch(&at_desk, by.id, PASSWORD).await.unwrap_err(), "who");
    assert_eq!(
        vouch(&at_desk, MemberId::new(), PASSWORD)
            .await
            .unwrap_err(),
        "who"
    );
    // Whoever has no PIN is no second person on a tablet.
    assert_eq!(
        vouch(&at_tablet, manager.id, PASSWORD).await.unwrap_err(),
        "secret"
    );
    let named = async |place: &Place| {
        let people = operations::second_people(&desk.app.db, &by, place).await;
        people
            .unwrap()
            .into_iter()
            .map(|person| person.name)
            .collect::<Vec<_>>()
    };
    assert_eq!(named(&at_tablet).await, ["Quin Assay"]);
    assert_eq!(named(&at_desk).await, ["Mara Manager", "Quin Assay"]);
    // Guesses are counted here as at the door.
    let mut last = String::new();
    for _ in 0..6 {
        last = vouch(&at_tablet, qa, "000001").await.unwrap_err();
    }
    assert!(last.starts_with("Too many attempts"), "{last}");
    let off = sqlx::query(
        "UPDATE members SET disabled_at = '2026-01-01T00:00:00.000Z' WHERE login = 'qa'",
    );
    let mut tx = desk.app.db.begin_unkeyed().await.unwrap();
    off.execute(&mut *tx).await.unwrap();
    tx.commit().await.unwrap();
    assert_eq!(vouch(&at_desk, qa, PASSWORD).await.unwrap_err(), "who");
}
