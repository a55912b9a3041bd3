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
