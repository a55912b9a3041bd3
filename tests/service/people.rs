//! Signing in, roles and tokens.

use leat::people::Scope;
use reqwest::StatusCode;

use crate::desk::Desk;

#[tokio::test]
async fn a_page_asked_for_before_signing_in_is_shown_after_it() {
    let desk = Desk::start().await;
    let browser = desk.stranger();
    let door = browser.open("/record").await;
    assert_eq!(door.path, "/sign-in");
    let page = browser
        .fill(
            &door,
            "/sign-in",
            &[("login", "qa"), ("password", crate::desk::PASSWORD)],
        )
        .await;
    assert_eq!(page.path, "/record");
}

#[tokio::test]
async fn a_wrong_password_keeps_the_typed_name_and_says_no_more_than_that_it_is_wrong() {
    let desk = Desk::start().await;
    let browser = desk.stranger();
    let door = browser.open("/sign-in").await;
    let known = browser
        .fill(
            &door,
            "/sign-in",
            &[("login", "qa"), ("password", "wrong password")],
        )
        .await;
    let unknown = browser
        .fill(
            &door,
            "/sign-in",
            &[("login", "nobody"), ("password", "wrong password")],
        )
        .await;
    assert_eq!(known.status, StatusCode::UNPROCESSABLE_ENTITY);
    assert_eq!(known.field("login"), "qa");
    assert_eq!(known.error("password"), unknown.error("password"));
}

#[tokio::test]
async fn signing_in_never_leads_to_another_site() {
    let desk = Desk::start().await;
    let browser = desk.stranger();
    let door = browser.open("/sign-in?next=//elsewhere.example/x").await;
    let page = browser
        .fill(
            &door,
            "/sign-in",
            &[("login", "qa"), ("password", crate::desk::PASSWORD)],
        )
        .await;
    assert_eq!(page.path, "/");
}

#[tokio::test]
async fn after_many_wrong_passwords_one_has_to_wait() {
    let desk = Desk::start().await;
    let browser = desk.stranger();
    let door = browser.open("/sign-in").await;
    let mut last = StatusCode::OK;
    for _ in 0..12 {
        last = browser
            .fill(
                &door,
                "/sign-in",
                &[("login", "qa"), ("password", "wrong password")],
            )
            .await
            .status;
    }
    assert_eq!(last, StatusCode::TOO_MANY_REQUESTS);
}

#[tokio::test]
async fn only_a_manager_keeps_accounts() {
    let desk = Desk::start().await;
    for login in ["brewer", "qa"] {
        assert_eq!(
            desk.browser(login).await.open("/people").await.status,
            StatusCode::FORBIDDEN
        );
    }
    let manager = desk.browser("manager").await;
    let form = manager.open("/people/new").await;
    let fields = [
        ("login", "Nia"),
        ("name", "Nia New"),
        ("password", "another long one"),
    ];
    let list = manager.fill(&form, "/people/new", &fields).await;
    assert!(list.words().contains("Nia New"), "{}", list.words());
    let twice = manager
        .fill(&manager.open("/people/new").await, "/people/new", &fields)
        .await;
    assert_eq!(
        twice.error("login").as_deref().map(|m| m.contains("nia")),
        Some(true)
    );
}

#[tokio::test]
async fn the_last_manager_cannot_be_closed() {
    let desk = Desk::start().await;
    let manager = desk.browser("manager").await;
    let id = desk.member("manager").await.id;
    let page = manager.open(&format!("/people/{id}")).await;
    let answer = manager
        .fill(&page, &format!("/people/{id}"), &[("role", "brewer")])
        .await;
    assert_eq!(answer.status, StatusCode::CONFLICT);
    assert!(answer.words().contains("last manager"));
}

#[tokio::test]
async fn a_token_opens_the_api_within_its_scopes_and_no_page() {
    let desk = Desk::start().await;
    let reader = desk.program("manager", &[Scope::Read]).await;
    assert_eq!(
        reader.get("/me").await.body["scopes"],
        serde_json::json!(["read"])
    );
    let refused = reader.put("/settings", &serde_json::json!({})).await;
    assert_eq!(refused.status, 403);
    assert_eq!(refused.body["type"], "/problems/forbidden");
}

#[tokio::test]
async fn the_record_book_cannot_be_rewritten_even_at_a_console() {
    let desk = Desk::start().await;
    let mut tx = desk.app.db.begin_unkeyed().await.unwrap();
    for statement in [
        "UPDATE record_entries SET action = 'x'",
        "DELETE FROM record_entries",
        "INSERT OR REPLACE INTO record_entries (seq, at, member_name, action, subject_kind, subject_id, subject_name)
         VALUES (1, '2026-12-01T00:00:00.000Z', 'x', 'x', 'x', 'x', 'x')",
        "UPDATE record_links SET id = 'x'",
        "DELETE FROM record_links",
        "INSERT OR REPLACE INTO record_links SELECT * FROM record_links",
        "INSERT INTO record_links (kind, id, seq) VALUES ('batch', '26-1', 1)",
    ] {
        let error = sqlx::query(statement).execute(&mut *tx).await.unwrap_err();
        assert!(error.to_string().contains("append-only"), "{error}");
    }
}

#[tokio::test]
async fn keys_of_requests_long_past_are_forgotten_when_somebody_signs_in() {
    let desk = Desk::start().await;
    let mut tx = desk.app.db.begin_unkeyed().await.unwrap();
    for (key, at) in [
        ("old", "2020-01-01T00:00:00.000Z"),
        ("young", "2100-01-01T00:00:00.000Z"),
    ] {
        sqlx::query(
            "INSERT INTO request_keys (actor, key, fingerprint, at) VALUES ('a', ?, 'f', ?)",
        )
        .bind(key)
        .bind(at)
        .execute(&mut *tx)
        .await
        .unwrap();
    }
    tx.commit().await.unwrap();
    desk.browser("qa").await;
    let mut reader = desk.app.db.reader().await.unwrap();
    let left: Vec<String> = sqlx::query_scalar("SELECT key FROM request_keys")
        .fetch_all(&mut *reader)
        .await
        .unwrap();
    assert_eq!(left, ["young"]);
}

/// The cookie of a new session, begun in a browser that holds `before`.
async fn signed_in(desk: &Desk, before: &str) -> String {
    let client = reqwest::Client::builder()
        .redirect(reqwest::redirect::Policy::none())
        .build()
        .unwrap();
    let answer = client
        .post(format!("{}/sign-in", desk.address))
        .header("origin", &desk.address)
        .header("cookie", before)
        .form(&[("login", "qa"), ("password", crate::desk::PASSWORD)])
        .send()
        .await
        .unwrap();
    let line = answer.headers()["set-cookie"].to_str().unwrap().to_owned();
    line.split(';').next().unwrap().to_owned()
}

async fn opens(desk: &Desk, cookie: &str) -> bool {
    let request = reqwest::Client::new().get(format!("{}/record", desk.address));
    let answer = request.header("cookie", cookie).send().await.unwrap();
    answer.url().path() == "/record"
}

#[tokio::test]
async fn a_cookie_from_before_signing_in_is_no_session_after_it() {
    let desk = Desk::start().await;
    // Planted by somebody who hopes that it becomes the session.
    let planted = "leat_session=planted-by-somebody-else";
    let session = signed_in(&desk, planted).await;
    assert_ne!(session, planted);
    assert!(opens(&desk, &session).await && !opens(&desk, planted).await);
    // Signing in once more in the same browser ends the session before.
    let later = signed_in(&desk, &session).await;
    assert!(opens(&desk, &later).await && !opens(&desk, &session).await);
}

#[tokio::test]
async fn a_session_ends_when_it_is_idle_and_in_any_case_after_two_weeks() {
    let desk = Desk::start().await;
    let now = leat::id::UtcTime::now();
    for (column, hours, good) in [
        ("last_seen_at", -11, true),
        ("last_seen_at", -13, false),
        ("expires_at", 1, true),
        ("expires_at", -1, false),
    ] {
        let session = signed_in(&desk, "").await;
        let mut tx = desk.app.db.begin_unkeyed().await.unwrap();
        let statement = format!("UPDATE sessions SET {column} = ?");
        sqlx::query(sqlx::AssertSqlSafe(statement))
            .bind(now.plus_seconds(3600 * hours))
            .execute(&mut *tx)
            .await
            .unwrap();
        tx.commit().await.unwrap();
        assert_eq!(opens(&desk, &session).await, good, "{column} {hours} h");
    }
}

#[tokio::test]
async fn signing_out_everywhere_ends_every_session_of_that_person_and_no_other() {
    let desk = Desk::start().await;
    let id = desk.member("qa").await.id;
    let (one, other) = (desk.browser("qa").await, desk.browser("qa").await);
    let brewer = desk.browser("brewer").await;
    let page = one.open(&format!("/people/{id}")).await;
    assert!(page.words().contains("(this one)"), "{}", page.words());
    let action = format!("/people/{id}/sign-out");
    assert_eq!(
        brewer.post(&action, &[]).await.status,
        StatusCode::FORBIDDEN
    );
    let out = one.fill(&page, &action, &[]).await;
    assert!(
        out.words().contains("Signed out everywhere"),
        "{}",
        out.words()
    );
    for browser in [&one, &other] {
        assert_eq!(browser.open("/record").await.path, "/sign-in");
    }
    assert_eq!(brewer.open("/record").await.path, "/record");

    // A manager does it for anybody.
    let again = desk.browser("qa").await;
    let manager = desk.browser("manager").await;
    let page = manager.open(&format!("/people/{id}")).await;
    manager.fill(&page, &action, &[]).await;
    assert_eq!(again.open("/record").await.path, "/sign-in");
    let book = manager.open("/record").await;
    assert!(book.words().contains("signed out everywhere"));
}

async fn invited(desk: &Desk, name: &str) -> String {
    let manager = desk.browser("manager").await;
    let form = manager.open("/people/invite").await;
    let list = manager
        .fill(&form, "/people/invite", &[("name", name), ("role", "qa")])
        .await;
    let link = list.texts("#invitation-link").remove(0);
    assert!(
        !manager.open("/people").await.text.contains(&link),
        "shown once"
    );
    link.strip_prefix(&desk.address).unwrap().to_owned()
}

#[tokio::test]
async fn an_invitation_makes_one_account_of_its_name_and_role() {
    let desk = Desk::start().await;
    let link = invited(&desk, "Nia New").await;
    let guest = desk.stranger();
    let page = guest.open(&link).await;
    assert!(page.words().contains("Nia New, you are invited as QA"));
    let refused = guest
        .fill(
            &page,
            "/invitation",
            &[("login", "qa"), ("password", "another long one")],
        )
        .await;
    assert!(refused.error("login").is_some(), "a name that is taken");
    let refused = guest
        .fill(
            &page,
            "/invitation",
            &[("login", "nia"), ("password", "short")],
        )
        .await;
    assert!(refused.error("password").is_some());
    let fields = [("login", "nia"), ("password", "another long one")];
    // What is typed over the name and role of the invitation counts for nothing.
    let mut sent = crate::desk::offered(&page, "/invitation", &fields);
    sent.push(("role".into(), "manager".into()));
    sent.push(("name".into(), "Somebody Else".into()));
    let start = guest.post("/invitation", &sent).await;
    assert_eq!((start.path.as_str(), start.status), ("/", StatusCode::OK));
    assert!(start.texts(".person-name")[0].starts_with("Nia New qa"));

    let second = desk.stranger();
    for seen in [
        second.open(&link).await,
        second.post("/invitation", &sent).await,
    ] {
        assert_eq!(seen.status, StatusCode::FORBIDDEN);
        assert!(seen.words().contains("Ask a manager"), "{}", seen.words());
    }
    let people = desk.browser("manager").await.open("/people").await;
    assert!(people.words().contains("nia") && !people.words().contains("good until"));
}

#[tokio::test]
async fn an_invitation_taken_back_or_a_week_old_makes_none() {
    let desk = Desk::start().await;
    let old = invited(&desk, "Olga Old").await;
    let mut tx = desk.app.db.begin_unkeyed().await.unwrap();
    let a_week = sqlx::query_scalar::<_, i64>(
        "SELECT count(*) FROM invitations WHERE julianday(expires_at) - julianday(created_at) = 7",
    );
    assert_eq!(a_week.fetch_one(&mut *tx).await.unwrap(), 1);
    sqlx::query("UPDATE invitations SET expires_at = created_at")
        .execute(&mut *tx)
        .await
        .unwrap();
    tx.commit().await.unwrap();
    let withdrawn = invited(&desk, "Tom Taken").await;
    let manager = desk.browser("manager").await;
    let list = manager.open("/people").await;
    let html = list.html();
    let form = scraper::Selector::parse("form[action^='/invitations/']").unwrap();
    let actions: Vec<_> = html
        .select(&form)
        .map(|form| form.value().attr("action").unwrap())
        .collect();
    assert_eq!(actions.len(), 1, "one that is over stands on no list");
    manager.fill(&list, actions[0], &[]).await;
    for link in [
        old,
        withdrawn,
        "/invitation?token=made-up".into(),
        "/invitation".into(),
    ] {
        let seen = desk.stranger().open(&link).await;
        assert_eq!(seen.status, StatusCode::FORBIDDEN, "{link}");
    }
}

#[tokio::test]
async fn a_token_shows_its_last_use_and_ends_when_it_is_over_or_revoked() {
    let desk = Desk::start().await;
    let manager = desk.browser("manager").await;
    let make = async |name: &str| {
        let fields = [("token_name", name), ("scope_read", "yes"), ("days", "3")];
        let made = manager
            .fill(&manager.open("/people").await, "/tokens", &fields)
            .await;
        made.texts("#token-secret").remove(0)
    };
    let get = async |token: &str| {
        let request = reqwest::Client::new().get(format!("{}/api/v1/me", desk.address));
        request.bearer_auth(token).send().await.unwrap().status()
    };
    let probe = make("Probe").await;
    let page = manager.open("/people").await;
    assert!(!page.text.contains(&probe), "shown once");
    assert!(page.words().contains("never used"));
    assert_eq!(get(&probe).await, 200);
    let page = manager.open("/people").await;
    assert!(page.words().contains("last used 20"), "{}", page.words());
    let html = page.html();
    let form = scraper::Selector::parse("form[action^='/tokens/']").unwrap();
    let action = html
        .select(&form)
        .next()
        .unwrap()
        .value()
        .attr("action")
        .unwrap();
    manager.fill(&page, action, &[]).await;
    assert_eq!(get(&probe).await, 401);
    let scale = make("Scale").await;
    assert_eq!(get(&scale).await, 200);
    let mut tx = desk.app.db.begin_unkeyed().await.unwrap();
    sqlx::query("UPDATE api_tokens SET expires_at = created_at")
        .execute(&mut *tx)
        .await
        .unwrap();
    tx.commit().await.unwrap();
    assert_eq!(get(&scale).await, 401);
}

#[tokio::test]
async fn guesses_from_one_address_leave_the_owner_at_another_alone() {
    let desk = Desk::start().await;
    let browser = desk.stranger();
    // As a proxy on the same machine says whom it speaks for; the last one it saw itself.
    let try_from = async |address: &str, password: &str| {
        let request = browser
            .request("POST", "/sign-in")
            .header("origin", &desk.address)
            .header("x-forwarded-for", address)
            .form(&[("login", "qa"), ("password", password)]);
        request.send().await.unwrap().status()
    };
    let mut last = StatusCode::OK;
    for spoofed in 0..14 {
        let address = format!("10.9.9.{spoofed}, 203.0.113.7");
        last = try_from(&address, "wrong password").await;
    }
    assert_eq!(last, StatusCode::TOO_MANY_REQUESTS);
    assert_eq!(
        try_from("203.0.113.7", crate::desk::PASSWORD).await,
        StatusCode::TOO_MANY_REQUESTS
    );
    assert_eq!(
        try_from("198.51.100.4", crate::desk::PASSWORD).await,
        StatusCode::OK
    );
}
