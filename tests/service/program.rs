//! The program itself: its settings, its back-ups, and what is left when it is killed.

use std::collections::BTreeSet;
use std::io::{BufRead, BufReader};
use std::path::Path;
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
        let mut command = leat(file);
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
