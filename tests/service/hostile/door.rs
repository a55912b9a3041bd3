//! The locks: other sites, other doors, sessions, headers, addresses, secrets.

use leat::people::Scope;
use reqwest::header::HeaderMap;
use serde_json::json;

use super::LivedIn;
use crate::desk::{Answer, Desk, PASSWORD, Seen};

fn text<'a>(headers: &'a HeaderMap, name: &str) -> &'a str {
    headers
        .get(name)
        .map_or("", |value| value.to_str().unwrap())
}

/// The cookie that signing in sets: its value and the whole line.
async fn signed_in(desk: &Desk, login: &str) -> (String, String) {
    let client = reqwest::Client::builder()
        .redirect(reqwest::redirect::Policy::none())
        .build()
        .unwrap();
    let answer = client
        .post(format!("{}/sign-in", desk.address))
        .header("origin", &desk.address)
        .form(&[("login", login), ("password", PASSWORD)])
        .send()
        .await
        .unwrap();
    assert_eq!(answer.status(), 303);
    let line = text(answer.headers(), "set-cookie").to_owned();
    let value = line.split(';').next().unwrap().to_owned();
    (value, line)
}

#[tokio::test]
async fn a_post_from_another_site_is_refused_whatever_it_carries() {
    let desk = Desk::start().await;
    let manager = desk.browser("manager").await;
    let fields = [("name", "Other brewery"), ("version", "1")];
    let foreign: [(&str, &str); 4] = [
        ("origin", "https://elsewhere.example"),
        ("origin", "null"),
        ("sec-fetch-site", "cross-site"),
        ("sec-fetch-site", "same-site"),
    ];
    for path in [
        "/settings",
        "/sign-in",
        "/sign-out",
        "/people/new",
        "/people/invite",
        "/invitation",
        "/tablets",
        "/switch",
        "/sign-in/pin",
        "/tokens",
        "/plans/new",
    ] {
        for (name, value) in foreign {
            let request = manager
                .request("POST", path)
                .header(name, value)
                .form(&fields);
            let answer = Seen::of(request.send().await.unwrap()).await;
            assert_eq!(answer.status, 403, "{path} with {name}: {value}");
            assert!(
                answer.words().contains("another site"),
                "{}",
                answer.words()
            );
        }
    }
    assert_eq!(
        manager.open("/settings").await.path,
        "/settings",
        "still signed in"
    );
}

#[tokio::test]
async fn a_cookie_opens_no_endpoint_and_a_token_no_page() {
    let desk = Desk::start().await;
    let (cookie, _) = signed_in(&desk, "manager").await;
    let client = reqwest::Client::new();
    let api = client
        .get(format!("{}/api/v1/settings", desk.address))
        .header("cookie", &cookie);
    let answer = Answer::of(api.send().await.unwrap()).await;
    assert_eq!(
        (answer.status, answer.kind.as_deref()),
        (401, Some("application/problem+json"))
    );

    let secret = cookie.split_once('=').unwrap().1;
    let borrowed = client
        .get(format!("{}/api/v1/settings", desk.address))
        .bearer_auth(secret);
    assert_eq!(borrowed.send().await.unwrap().status(), 401);

    let program = desk.full_program("manager").await;
    let page = program.request("GET", "/../../settings").build().unwrap();
    assert_eq!(page.url().path(), "/settings");
    let answer = client.execute(page).await.unwrap();
    assert_eq!(answer.url().path(), "/sign-in");
}

#[tokio::test]
async fn a_session_is_new_at_every_sign_in_and_gone_after_signing_out_or_a_new_password() {
    let desk = Desk::start().await;
    let (first, line) = signed_in(&desk, "qa").await;
    for part in ["HttpOnly", "SameSite=Lax", "Path=/"] {
        assert!(line.contains(part), "{line}");
    }
    let (second, _) = signed_in(&desk, "qa").await;
    assert_ne!(first, second);
    let client = reqwest::Client::new();
    let opens = async |cookie: &str| {
        let page = client
            .get(format!("{}/record", desk.address))
            .header("cookie", cookie);
        page.send().await.unwrap().url().path() == "/record"
    };
    // A session that somebody else chose is none.
    assert!(!opens("leat_session=chosen-by-somebody-else").await);
    assert!(opens(&first).await && opens(&second).await);
    let out = client
        .post(format!("{}/sign-out", desk.address))
        .header("cookie", &first)
        .header("origin", &desk.address);
    out.send().await.unwrap();
    assert!(!opens(&first).await && opens(&second).await);

    let id = desk.member("qa").await.id;
    let fields = [("present", PASSWORD), ("password", "another long one")];
    let changed = client
        .post(format!("{}/people/{id}/password", desk.address))
        .header("cookie", &second)
        .header("origin", &desk.address)
        .form(&fields);
    assert_eq!(changed.send().await.unwrap().status(), 200);
    assert!(!opens(&second).await);
}

#[tokio::test]
async fn every_answer_carries_the_headers_that_guard_it() {
    let desk = Desk::start().await;
    let (cookie, _) = signed_in(&desk, "manager").await;
    let client = reqwest::Client::new();
    let paths = [
        "/",
        "/sign-in",
        "/settings",
        "/nowhere",
        "/people",
        "/help",
        "/help/api",
        "/assets/leat.css",
        "/assets/nowhere.css",
        "/api/openapi.json",
        "/api/v1/me",
        "/api/v1/nowhere",
    ];
    for path in paths {
        let page = client
            .get(format!("{}{path}", desk.address))
            .header("cookie", &cookie);
        let answer = page.send().await.unwrap();
        let headers = answer.headers();
        assert_eq!(text(headers, "x-content-type-options"), "nosniff", "{path}");
        assert_eq!(text(headers, "referrer-policy"), "same-origin", "{path}");
        let policy = text(headers, "content-security-policy");
        assert!(
            policy.contains("default-src 'none'") && policy.contains("frame-ancestors 'none'"),
            "{path}"
        );
        assert!(
            !policy.contains("script-src 'unsafe") && !policy.contains("'unsafe-eval'"),
            "{path}: {policy}"
        );
        assert!(!text(headers, "x-request-id").is_empty(), "{path}");
        let kept = path.starts_with("/assets") || path == "/api/openapi.json";
        assert!(
            kept || text(headers, "cache-control") == "no-store",
            "{path}"
        );
    }
}

#[tokio::test]
async fn nothing_outside_the_assets_is_served_from_them() {
    let desk = Desk::start().await;
    let host = desk.address.trim_start_matches("http://");
    for path in [
        "/assets/../../Cargo.toml",
        "/assets/..%2f..%2fCargo.toml",
        "/assets/%2e%2e/%2e%2e/Cargo.toml",
        "/assets/....//Cargo.toml",
        "/assets//etc/passwd",
        "/assets/%2fetc%2fpasswd",
        "/assets/..%5cCargo.toml",
        "/assets/leat.css%00.txt",
        "/assets/%c0%ae%c0%ae/Cargo.toml",
        "/assets/",
    ] {
        // As written: a client library would tidy the path up.
        use tokio::io::{AsyncReadExt, AsyncWriteExt};
        let mut stream = tokio::net::TcpStream::connect(host).await.unwrap();
        let request = format!("GET {path} HTTP/1.1\r\nhost: {host}\r\nconnection: close\r\n\r\n");
        stream.write_all(request.as_bytes()).await.unwrap();
        let mut answer = Vec::new();
        stream.read_to_end(&mut answer).await.unwrap();
        let answer = String::from_utf8_lossy(&answer);
        assert!(answer.starts_with("HTTP/1.1 4"), "{path}: {answer}");
        assert!(
            !answer.contains("[package]") && !answer.contains("root:"),
            "{path}"
        );
    }
}

#[tokio::test]
async fn signing_in_leads_to_no_other_site_however_it_is_spelled() {
    let desk = Desk::start().await;
    let client = reqwest::Client::builder()
        .redirect(reqwest::redirect::Policy::none())
        .build()
        .unwrap();
    let addresses = [
        "//elsewhere.example",
        "https://elsewhere.example",
        "/\\elsewhere.example",
        "\\\\elsewhere.example",
        "/\t/elsewhere.example",
        "/\n/elsewhere.example",
        " //elsewhere.example",
        "elsewhere.example",
        "javascript:alert(1)",
        "///elsewhere.example",
        "http:elsewhere.example",
        "/\u{7}/elsewhere.example",
        "",
    ];
    for (index, next) in addresses.into_iter().enumerate() {
        // By turns, so that nobody signs in too often.
        let login = ["brewer", "qa", "manager"][index % 3];
        let fields = [("login", login), ("password", PASSWORD), ("next", next)];
        let answer = client
            .post(format!("{}/sign-in", desk.address))
            .header("origin", &desk.address)
            .form(&fields)
            .send()
            .await
            .unwrap();
        assert_eq!(text(answer.headers(), "location"), "/", "{next:?}");
    }
}

#[tokio::test]
async fn secrets_stand_nowhere_in_the_database() {
    let desk = Desk::start().await;
    let manager = desk.browser("manager").await;
    let form = manager.open("/people/new").await;
    let secret = "a first password to look for";
    let fields = [("login", "nia"), ("name", "Nia New"), ("password", secret)];
    let mut sent = crate::desk::offered(&form, "/people/new", &fields);
    sent.push(("_key".into(), "key-of-an-account".into()));
    assert_eq!(manager.post("/people/new", &sent).await.path, "/people");
    let made = manager
        .post(
            "/tokens",
            &[
                ("token_name".into(), "Probe".into()),
                ("scope_read".into(), "yes".into()),
                ("days".into(), "3".into()),
                ("_key".into(), "key-of-a-token".into()),
            ],
        )
        .await;
    let token = made.texts("#token-secret").remove(0);
    let form = manager.open("/people/invite").await;
    let fields = [("name", "Ivo Invited")];
    let list = manager.fill(&form, "/people/invite", &fields).await;
    let link = list.texts("#invitation-link").remove(0);
    let invitation = link.split_once("token=").unwrap().1.to_owned();
    let (cookie, _) = signed_in(&desk, "qa").await;
    let session = cookie.split_once('=').unwrap().1.to_owned();

    let mut reader = desk.app.db.reader().await.unwrap();
    let keys: (i64,) = sqlx::query_as("SELECT count(*) FROM request_keys")
        .fetch_one(&mut *reader)
        .await
        .unwrap();
    assert_eq!(keys.0, 0, "no answer is kept of what carries a secret");
    drop(reader);
    let copy = desk.file.with_file_name("copy.sqlite");
    desk.app.db.back_up(&copy).await.unwrap();
    let bytes = std::fs::read(&copy).unwrap();
    for needle in [secret, &token, &session, &invitation, PASSWORD] {
        let found = bytes
            .windows(needle.len())
            .any(|window| window == needle.as_bytes());
        assert!(!found, "{needle} stands in the database");
    }
}

#[tokio::test]
async fn a_key_that_two_people_use_is_two_keys() {
    let lived = LivedIn::build().await;
    let key = [("idempotency-key", "the-same")];
    let qa = lived.house.desk.full_program("qa").await;
    let source = |name: &str| json!({"name": name, "kind": "mains", "days_between_tests": 30});
    let manager = &lived.house.manager;
    let one = manager
        .send("POST", "/sources", Some(&source("North well")), &key)
        .await;
    let other = qa
        .send("POST", "/sources", Some(&source("South well")), &key)
        .await;
    assert_eq!((one.status, other.status), (201, 201));
    assert_eq!(other.body["name"], "South well");
    // A token that has lost the right is not answered from what was kept.
    let narrow = lived.house.desk.program("manager", &[Scope::Read]).await;
    let replay = narrow
        .send("POST", "/sources", Some(&source("North well")), &key)
        .await;
    assert_eq!(replay.status, 403, "{:?}", replay.body);
}
