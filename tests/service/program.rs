//! The program itself: its settings, its back-ups, and what is left when it is killed.

use std::collections::BTreeSet;
use std::io::{BufRead, BufReader};
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Output, Stdio};
use std::sync::{Arc, Mutex};
use std::time::Duration;

use leat::db::Db;
use leat::input::Problems;
use leat::people::operations::{self, NewAccount};
use leat::people::passwords::Passwords;
use leat::people::{Member, Role, Scope};
use reqwest::Client;
use serde_json::json;

use crate::brewhouse::Brewhouse;
use crate::desk::{Desk, PASSWORD, sign_in};

fn leat(file: &Path) -> Command {
    let mut command = Command::new(env!("CARGO_BIN_EXE_leat"));
    command.arg("--database").arg(file);
    command
}

fn words(output: &Output) -> String {
    String::from_utf8_lossy(&output.stderr).into_owned()
}

#[tokio::test]
async fn a_back_up_taken_while_leat_answers_can_be_opened_in_its_place() {
    let desk = Desk::start().await;
    let manager = desk.browser("manager").await;
    let copy = desk.file.with_file_name("copy.sqlite");
    let output = leat(&desk.file).arg("--back-up").arg(&copy).output();
    let output = output.unwrap();
    assert!(output.status.success(), "{}", words(&output));

    let db = Db::open(&copy).await.unwrap();
    let passwords = Passwords::start().unwrap();
    let secret = sign_in(&db, &passwords, "qa").await;
    let member = operations::by_session(&db, &secret, None).await.unwrap();
    assert_eq!(member.unwrap().name, "Quin Assay");
    assert_eq!(manager.open("/people").await.status, 200);
}

#[tokio::test]
async fn a_back_up_of_nothing_or_over_something_is_refused() {
    let desk = Desk::start().await;
    let missing = desk.file.with_file_name("missing.sqlite");
    let copy = desk.file.with_file_name("copy.sqlite");
    let output = leat(&missing).arg("--back-up").arg(&copy).output().unwrap();
    assert!(!output.status.success());
    assert!(words(&output).contains("no database"), "{}", words(&output));
    assert!(!missing.exists() && !copy.exists());

    std::fs::write(&copy, "kept").unwrap();
    let output = leat(&desk.file).arg("--back-up").arg(&copy).output();
    let output = output.unwrap();
    assert!(!output.status.success());
    assert!(words(&output).contains("exists already"));
    assert_eq!(std::fs::read_to_string(&copy).unwrap(), "kept");
}

#[test]
fn a_wrong_setting_is_refused_with_its_name_and_an_example() {
    let folder = tempfile::tempdir().unwrap();
    let file = folder.path().join("leat.sqlite");
    let output = leat(&file).args(["--log", "leat=chatty"]).output().unwrap();
    assert!(!output.status.success());
    assert!(words(&output).contains("LEAT_LOG"), "{}", words(&output));
    assert!(words(&output).contains("leat=debug"), "{}", words(&output));
    let output = leat(&file).env("LEAT_LISTEN", "everywhere").output();
    let output = output.unwrap();
    assert!(!output.status.success());
    assert!(words(&output).contains("--listen"), "{}", words(&output));
    assert!(!file.exists());
}

#[tokio::test]
async fn what_was_answered_is_there_after_the_program_is_killed() {
    let folder = tempfile::tempdir().unwrap();
    let file = folder.path().join("leat.sqlite");
    let mut running = Running::start(&file);
    let first = running.line("first one at ");
    let fields = [
        ("login", "manager"),
        ("name", "Mara Manager"),
        ("password", PASSWORD),
        ("token", first.split_once("token=").unwrap().1),
    ];
    let client = Client::builder().cookie_store(true).build().unwrap();
    let address = running.address.clone();
    let answer = client
        .post(format!("{address}/first-account"))
        .header("origin", &address)
        .form(&fields)
        .send()
        .await
        .unwrap();
    assert!(
        answer.status().is_success(),
        "{}",
        answer.text().await.unwrap()
    );
    running.process.kill().unwrap();
    running.process.wait().unwrap();

    let running = Running::start(&file);
    let address = &running.address;
    let answer = client
        .post(format!("{address}/sign-in"))
        .header("origin", address)
        .form(&[("login", "manager"), ("password", PASSWORD)])
        .send()
        .await
        .unwrap();
    assert_eq!(answer.url().path(), "/");
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn killed_again_and_again_while_it_writes_it_loses_nothing_it_answered() {
    let folder = tempfile::tempdir().unwrap();
    let file = folder.path().join("leat.sqlite");
    let token = {
        let db = Db::open(&file).await.unwrap();
        let passwords = Passwords::start().unwrap();
        let mut problems = Problems::new();
        let account = NewAccount::check("manager", "Mara", "manager", PASSWORD, &mut problems);
        let account = operations::create_first(&db, &passwords, account.unwrap()).await;
        let by = Member {
            id: account.unwrap().id,
            name: "Mara".into(),
            role: Role::Manager,
            scopes: None,
            by_pin: false,
        };
        let scopes = Scope::ALL.to_vec();
        let made = operations::create_token(&db, &by, "probe".into(), scopes, 1).await;
        db.close().await;
        made.unwrap().1.0
    };
    let answered = Arc::new(Mutex::new(BTreeSet::new()));
    let mut in_doubt = Vec::new();
    for round in 0..10 {
        let mut running = Running::start(&file);
        let writers: Vec<_> = (0..3)
            .map(|writer| {
                let (address, token) = (running.address.clone(), token.clone());
                let answered = answered.clone();
                tokio::spawn(async move {
                    let client = Client::new();
                    for number in 0.. {
                        let name = format!("Well {round} {writer} {number}");
                        let sent = enter(&client, &address, &token, &name).await;
                        // The program was killed: whether this one is there is not known.
                        let Ok(answer) = sent else { return name };
                        assert_eq!(answer.status(), 201);
                        answered.lock().unwrap().insert(name);
                    }
                    unreachable!("it writes until it is killed")
                })
            })
            .collect();
        tokio::time::sleep(Duration::from_millis(60 + 37 * round)).await;
        running.process.kill().unwrap();
        running.process.wait().unwrap();
        for writer in writers {
            in_doubt.push(writer.await.unwrap());
        }
    }
    // Sent again with its key, what was in doubt is there, once.
    let running = Running::start(&file);
    let client = Client::new();
    let again = in_doubt.iter().map(|name| {
        let (client, address) = (client.clone(), running.address.clone());
        let (token, name) = (token.clone(), name.clone());
        tokio::spawn(async move { enter(&client, &address, &token, &name).await })
    });
    for answer in again.collect::<Vec<_>>() {
        let status = answer.await.unwrap().unwrap().status().as_u16();
        assert!([201, 409].contains(&status), "{status}");
    }
    answered.lock().unwrap().extend(in_doubt);
    let db = Db::open(&file).await.unwrap();
    let mut reader = db.reader().await.unwrap();
    let sound: (String,) = sqlx::query_as("PRAGMA integrity_check")
        .fetch_one(&mut *reader)
        .await
        .unwrap();
    assert_eq!(sound.0, "ok");
    let sources: Vec<(String,)> = sqlx::query_as("SELECT name FROM sources ORDER BY name")
        .fetch_all(&mut *reader)
        .await
        .unwrap();
    let sources: Vec<String> = sources.into_iter().map(|(name,)| name).collect();
    let expected: Vec<String> = answered.lock().unwrap().iter().cloned().collect();
    assert!(expected.len() > 40, "only {} were written", expected.len());
    assert_eq!(sources, expected);
    let told: (i64,) =
        sqlx::query_as("SELECT count(*) FROM record_entries WHERE subject_kind = 'source'")
            .fetch_one(&mut *reader)
            .await
            .unwrap();
    assert_eq!(told.0, i64::try_from(expected.len()).unwrap());
}

/// A certificate for `localhost` and its key, as files.
fn certificate(folder: &Path, name: &str) -> (PathBuf, PathBuf, Vec<u8>) {
    let made = rcgen::generate_simple_self_signed(vec!["localhost".into()]).unwrap();
    let (certificate, key) = (
        folder.join(format!("{name}.pem")),
        folder.join(format!("{name}.key")),
    );
    std::fs::write(&certificate, made.cert.pem()).unwrap();
    std::fs::write(&key, made.signing_key.serialize_pem()).unwrap();
    (certificate, key, made.cert.der().to_vec())
}

/// Sends one request over https, trusting this certificate alone, and reads the answer.
async fn over_tls(port: &str, certificate: &[u8], request: &str) -> String {
    use tokio::io::{AsyncReadExt, AsyncWriteExt};
    use tokio_rustls::rustls::pki_types::{CertificateDer, ServerName};
    use tokio_rustls::rustls::{ClientConfig, RootCertStore};
    let mut roots = RootCertStore::empty();
    roots
        .add(CertificateDer::from(certificate.to_vec()))
        .unwrap();
    let config = ClientConfig::builder()
        .with_root_certificates(roots)
        .with_no_client_auth();
    let connector = tokio_rustls::TlsConnector::from(Arc::new(config));
    let stream = tokio::net::TcpStream::connect(format!("127.0.0.1:{port}")).await;
    let name = ServerName::try_from("localhost").unwrap();
    let mut stream = connector.connect(name, stream.unwrap()).await.unwrap();
    stream.write_all(request.as_bytes()).await.unwrap();
    let mut answer = Vec::new();
    // The server may close without a last word of TLS.
    let _ = stream.read_to_end(&mut answer).await;
    String::from_utf8_lossy(&answer).into_owned()
}

#[tokio::test]
async fn with_a_certificate_it_answers_https_keeps_cookies_there_and_ends_in_good_order() {
    let folder = tempfile::tempdir().unwrap();
    let file = folder.path().join("leat.sqlite");
    let (certificate, key, der) = certificate(folder.path(), "one");
    let mut command = leat(&file);
    command.arg("--tls-certificate").arg(certificate);
    command.arg("--tls-key").arg(key);
    let mut running = Running::with(command);
    let port = running
        .address
        .strip_prefix("https://127.0.0.1:")
        .unwrap()
        .to_owned();
    let first = running.line("first one at ");
    assert!(first.starts_with("https://"), "{first}");
    let token = first.split_once("token=").unwrap().1;

    let host = format!("localhost:{port}");
    let open = format!("GET /sign-in HTTP/1.1\r\nhost: {host}\r\nconnection: close\r\n\r\n");
    let page = over_tls(&port, &der, &open).await;
    assert!(page.starts_with("HTTP/1.1 200"), "{page}");
    let fields = format!("login=manager&name=Mara&password=open+the+sluice&token={token}");
    let post = |origin: &str| {
        format!(
            "POST /first-account HTTP/1.1\r\nhost: {host}\r\norigin: {origin}\r\nconnection: close\r\n\
             content-type: application/x-www-form-urlencoded\r\ncontent-length: {}\r\n\r\n{fields}",
            fields.len()
        )
    };
    let foreign = over_tls(&port, &der, &post("https://elsewhere.example")).await;
    assert!(foreign.starts_with("HTTP/1.1 403"), "{foreign}");
    let made = over_tls(&port, &der, &post(&format!("https://{host}"))).await;
    assert!(made.starts_with("HTTP/1.1 303"), "{made}");
    let cookie = made
        .lines()
        .find(|line| line.starts_with("set-cookie: leat_session="));
    let cookie = cookie.unwrap();
    assert!(
        cookie.contains("; Secure") && cookie.contains("HttpOnly"),
        "{cookie}"
    );
    // Plain http is not understood there.
    assert!(
        Client::new()
            .get(format!("http://127.0.0.1:{port}/"))
            .send()
            .await
            .is_err()
    );

    let process = running.process.id().to_string();
    assert!(
        Command::new("kill")
            .args(["-TERM", &process])
            .status()
            .unwrap()
            .success()
    );
    assert!(running.process.wait().unwrap().success());
    assert!(
        !file.with_extension("sqlite-wal").exists(),
        "the log is folded in"
    );
}

#[test]
fn a_certificate_that_cannot_be_used_is_refused_with_the_names_of_its_settings() {
    let folder = tempfile::tempdir().unwrap();
    let file = folder.path().join("leat.sqlite");
    let (certificate, key, _) = certificate(folder.path(), "one");
    let (_, other_key, _) = self::certificate(folder.path(), "other");
    let nothing = folder.path().join("nothing.pem");
    for (certificate, key, name) in [
        (Some(&nothing), Some(&key), "LEAT_TLS_CERTIFICATE"),
        (Some(&certificate), Some(&nothing), "LEAT_TLS_KEY"),
        (Some(&certificate), Some(&other_key), "LEAT_TLS_KEY"),
        (Some(&key), Some(&key), "LEAT_TLS_CERTIFICATE"),
        (Some(&certificate), None, "--tls-key"),
        (None, Some(&key), "--tls-certificate"),
    ] {
        let mut command = leat(&file);
        if let Some(certificate) = certificate {
            command.env("LEAT_TLS_CERTIFICATE", certificate);
        }
        if let Some(key) = key {
            command.env("LEAT_TLS_KEY", key);
        }
        let output = command.output().unwrap();
        assert!(!output.status.success());
        assert!(words(&output).contains(name), "{}", words(&output));
    }
    assert!(!file.exists());
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn killed_between_a_tick_and_its_answer_every_tick_sent_again_is_in_exactly_once() {
    let house = Brewhouse::build().await;
    let mut ticks = Vec::new();
    for batch in 0..6 {
        let id = house.approved(&format!("26-8{batch:02}")).await;
        for dose in house.doses(&id).await {
            let path = format!("/plans/{id}/doses/{}", dose["id"].as_str().unwrap());
            ticks.push((path, json!({"actual": dose["planned"], "lot": "A1"})));
        }
    }
    let token = house.manager.token().to_owned();
    let file = house.desk.file.clone();
    house.desk.app.db.close().await;
    let send = async |address: &str, (path, body): &(String, serde_json::Value)| {
        Client::new()
            .put(format!("{address}/api/v1{path}"))
            .bearer_auth(&token)
            .header("idempotency-key", path)
            .json(body)
            .send()
            .await
    };
    // Each tick of a round is sent and the program killed a little later each time; what
    // was not answered is sent again after the restart, and once more for good measure.
    for (round, tick) in ticks.iter().enumerate() {
        let mut running = Running::start(&file);
        let address = running.address.clone();
        let wait = Duration::from_micros(700 * u64::try_from(round).unwrap());
        let killer = async {
            tokio::time::sleep(wait).await;
            running.process.kill().unwrap();
            running.process.wait().unwrap();
        };
        let (answer, ()) = tokio::join!(send(&address, tick), killer);
        let answered = answer.is_ok();
        let running = Running::start(&file);
        for _ in 0..2 {
            let again = send(&running.address, tick).await.unwrap();
            let status = again.status().as_u16();
            // Killed after the tick was saved and before its answer was: that it is in is
            // all there is to tell.
            assert!([200, 409].contains(&status), "{answered} {status}");
        }
    }
    let db = Db::open(&file).await.unwrap();
    let mut reader = db.reader().await.unwrap();
    let (weighed, told): (i64, i64) = sqlx::query_as(
        "SELECT (SELECT count(*) FROM doses WHERE weighed_at IS NOT NULL),
                (SELECT count(*) FROM record_entries WHERE action = 'weighed in')",
    )
    .fetch_one(&mut *reader)
    .await
    .unwrap();
    let sent = i64::try_from(ticks.len()).unwrap();
    assert!(sent >= 12, "{sent}");
    assert_eq!((weighed, told), (sent, sent));
}

async fn enter(
    client: &Client,
    address: &str,
    token: &str,
    name: &str,
) -> Result<reqwest::Response, reqwest::Error> {
    client
        .post(format!("{address}/api/v1/sources"))
        .bearer_auth(token)
        .header("idempotency-key", name)
        .json(&json!({"name": name, "kind": "borehole", "days_between_tests": 30}))
        .send()
        .await
}

/// The program as it runs; dropping it kills it.
struct Running {
    process: Child,
    log: BufReader<std::process::ChildStderr>,
    address: String,
}

impl Running {
    fn start(file: &Path) -> Self {
        Self::with(leat(file))
    }

    fn with(mut command: Command) -> Self {
        command.args(["--listen", "127.0.0.1:0"]);
        let mut process = command.stderr(Stdio::piped()).spawn().unwrap();
        let log = BufReader::new(process.stderr.take().unwrap());
        let mut running = Self {
            process,
            log,
            address: String::new(),
        };
        running.address = running.line("answers at ");
        running
    }

    /// What follows these words in the log.
    fn line(&mut self, words: &str) -> String {
        let mut line = String::new();
        while self.log.read_line(&mut line).unwrap() > 0 {
            if let Some((_, rest)) = line.split_once(words) {
                return rest.trim().to_owned();
            }
            line.clear();
        }
        panic!("the program ended before it said “{words}”");
    }
}

impl Drop for Running {
    fn drop(&mut self) {
        let _ = self.process.kill();
        let _ = self.process.wait();
    }
}
