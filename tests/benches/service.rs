//! What the program costs to run: time to start, time to answer each page, memory, size.
//!
//! `cargo bench --bench service`. Starts the release program itself on the demo brewery,
//! signs in, follows every link there is and asks for each kind of page many times. Every
//! time is shown beside that of an embedded picture, fetched in the same run: the ratio
//! depends less on the machine than the time does. Then the same file is filled with five
//! years of batches, and the pages that list them are asked for again. Fails when a promise
//! below is broken.

#![expect(clippy::print_stdout, reason = "a benchmark reports to whoever ran it")]

use std::collections::{BTreeMap, BTreeSet, VecDeque};
use std::fs;
use std::io::{BufRead, BufReader};
use std::path::Path;
use std::process::{Child, Command, ExitCode, Stdio};
use std::time::{Duration, Instant};

use reqwest::{Client, StatusCode};
use scraper::{Html, Selector};

mod five_years;

const PROGRAM: &str = env!("CARGO_BIN_EXE_leat");
/// The password of everybody in the demo.
const PASSWORD: &str = "open the sluice";
/// 95 of 100 answers with any page come within this.
const PAGE_MS: f64 = 10.0;
/// The page of a plan works its treatment out again, in four ways.
const PLAN_MS: f64 = 30.0;
/// From the PIN typed on a shared tablet to the page behind it, with the hash.
const SWITCH_MS: f64 = 400.0;
const START_MS: f64 = 300.0;
const RESIDENT_MB: f64 = 64.0;
const PROGRAM_MB: f64 = 40.0;
/// Requests for each kind of page in one round.
const SAMPLES: usize = 40;
/// Rounds, of which the quickest counts: whatever else the machine does only adds.
const ROUNDS: usize = 5;
/// Addresses followed of one kind: enough to see them differ.
const OF_ONE_KIND: usize = 5;
const BASELINE: &str = "/assets/icon.svg";
/// Asked for once the book is full: what a page lists, and its ends.
const FULL: [&str; 14] = [
    "/",
    "/plans",
    "/plans?page=100",
    "/plans?order=batch",
    "/plans?order=beer&page=50",
    "/plans?state=closed&batch=C12",
    "/plans/new",
    "/record",
    "/record?before=1020000",
    "/record?batch=C1200",
    "/record?kind=dose",
    "/shelf",
    "/beers",
    "/sources",
];

#[tokio::main(flavor = "current_thread")]
async fn main() -> ExitCode {
    let folder = tempfile::tempdir().expect("a folder");
    let file = folder.path().join("bench.sqlite");
    let mut promises = Promises::default();

    let program_mb = fs::metadata(PROGRAM).expect("the program").len() as f64 / 1e6;
    promises.hold("size of the program", program_mb, PROGRAM_MB, "MB");

    let client = Client::builder()
        .cookie_store(true)
        .build()
        .expect("a client");
    let (server, demo_ms) = Server::start(&client, &file, true).await;
    println!("{:44} {demo_ms:8.1} ms", "first start, filling in the demo");
    drop(server);
    let (server, start_ms) = Server::start(&client, &file, false).await;
    promises.hold("start to first answer", start_ms, START_MS, "ms");

    let switch_ms = server.switch_ms().await;
    promises.hold("switch by PIN on a tablet", switch_ms, SWITCH_MS, "ms");

    server.sign_in(&client).await;
    let kinds = server.walk(&client).await;
    let resident_mb = server.resident_mb();
    promises.hold(
        "resident memory after a walk",
        resident_mb,
        RESIDENT_MB,
        "MB",
    );

    let baseline = server.time(&client, &[BASELINE.to_owned()]).await;
    println!(
        "\n{:44} {:>8} {:>8} {:>8}  times {BASELINE}",
        "page", "median", "95 %", "kB"
    );
    for (kind, addresses) in kinds {
        let times = server.time(&client, &addresses).await;
        report(&kind, &times, &baseline);
        let allowed = if kind == "/plans/{id}" {
            PLAN_MS
        } else {
            PAGE_MS
        };
        promises.keep(&kind, times.p95_ms, allowed, "ms");
    }
    let resident_mb = server.resident_mb();
    println!();
    promises.hold("resident memory at the end", resident_mb, RESIDENT_MB, "MB");
    drop(server);

    five_years::fill(&file).await;
    let (server, start_ms) = Server::start(&client, &file, false).await;
    println!("\nwith {} closed batches", five_years::BATCHES);
    promises.hold("start to first answer", start_ms, START_MS, "ms");
    server.sign_in(&client).await;
    let baseline = server.time(&client, &[BASELINE.to_owned()]).await;
    for path in FULL {
        let times = server.time(&client, &[path.to_owned()]).await;
        report(path, &times, &baseline);
        promises.keep(path, times.p95_ms, PAGE_MS, "ms");
    }
    let resident_mb = server.resident_mb();
    promises.hold("resident memory", resident_mb, RESIDENT_MB, "MB");
    promises.verdict()
}

fn report(what: &str, times: &Times, baseline: &Times) {
    println!(
        "{what:44} {:5.2} ms {:5.2} ms {:8.0} {:6.1}",
        times.median_ms,
        times.p95_ms,
        times.kilobytes,
        times.median_ms / baseline.median_ms
    );
}

/// Promises, and which were broken.
#[derive(Default)]
struct Promises {
    broken: Vec<String>,
}

impl Promises {
    fn hold(&mut self, what: &str, value: f64, allowed: f64, unit: &str) {
        println!("{what:44} {value:8.1} {unit}, at most {allowed} {unit} promised");
        self.keep(what, value, allowed, unit);
    }

    fn keep(&mut self, what: &str, value: f64, allowed: f64, unit: &str) {
        if value > allowed {
            self.broken.push(format!(
                "{what}: {value:.1} {unit}, promised {allowed} {unit}"
            ));
        }
    }

    fn verdict(self) -> ExitCode {
        if self.broken.is_empty() {
            return ExitCode::SUCCESS;
        }
        for broken in self.broken {
            println!("Broken promise: {broken}");
        }
        ExitCode::FAILURE
    }
}

/// How long a kind of page takes.
struct Times {
    median_ms: f64,
    p95_ms: f64,
    kilobytes: f64,
}

/// The running program; dropping it ends it.
struct Server {
    process: Child,
    address: String,
}

impl Server {
    /// Starts the program and waits for its first answer. Returns how long that took.
    async fn start(client: &Client, file: &Path, demo: bool) -> (Self, f64) {
        let begun = Instant::now();
        let mut command = Command::new(PROGRAM);
        command
            .arg("--database")
            .arg(file)
            .args(["--listen", "127.0.0.1:0", "--log", "leat=info"])
            .env("NO_COLOR", "1")
            .env("MALLOC_MMAP_THRESHOLD_", "1048576")
            .stderr(Stdio::piped());
        if demo {
            command.arg("--demo");
        }
        let mut process = command.spawn().expect("the program starts");
        let mut lines = BufReader::new(process.stderr.take().expect("its log")).lines();
        let mut log = String::new();
        let address = loop {
            let line = lines
                .next()
                .unwrap_or_else(|| panic!("the program ended:\n{log}"))
                .expect("text");
            if let Some((_, address)) = line.split_once("answers at ") {
                break address.trim().to_owned();
            }
            log += &line;
        };
        // Whoever logs into a closed pipe is ended by it.
        std::thread::spawn(move || lines.for_each(drop));
        let server = Self { process, address };
        let (status, _) = server.get(client, "/sign-in").await;
        assert_eq!(status, StatusCode::OK);
        (server, milliseconds(begun.elapsed()))
    }

    async fn get(&self, client: &Client, path: &str) -> (StatusCode, String) {
        let answer = client.get(format!("{}{path}", self.address)).send().await;
        let answer = answer.expect("an answer");
        (answer.status(), answer.text().await.expect("text"))
    }

    /// Sends a form; returns the path it led to.
    async fn post(&self, client: &Client, path: &str, fields: &[(&str, &str)]) -> String {
        let answer = client
            .post(format!("{}{path}", self.address))
            .header("origin", &self.address)
            .form(fields)
            .send()
            .await
            .expect("an answer");
        answer.url().path().to_owned()
    }

    async fn sign_in(&self, client: &Client) {
        let fields = [("login", "manager"), ("password", PASSWORD)];
        let path = self.post(client, "/sign-in", &fields).await;
        assert_eq!(path, "/", "the demo's manager signs in");
    }

    /// How long a switch takes on a tablet of its own: the slowest of a few.
    async fn switch_ms(&self) -> f64 {
        const PIN: &str = "482913";
        let tablet = Client::builder().cookie_store(true).build();
        let tablet = tablet.expect("a client");
        self.sign_in(&tablet).await;
        let own = tablet.get(format!("{}/my-account", self.address)).send();
        let own = own.await.expect("an answer").url().path().to_owned();
        let fields = [("pin", PIN), ("present_for_pin", PASSWORD)];
        assert_eq!(
            self.post(&tablet, &format!("{own}/pin"), &fields).await,
            own
        );
        let fields = [("tablet_name", "Bench")];
        assert_eq!(self.post(&tablet, "/tablets", &fields).await, "/sign-in");
        let who = own.rsplit('/').next().unwrap_or_default();
        let fields = [("who", who), ("pin", PIN), ("next", "/")];
        let mut slowest: f64 = 0.0;
        // As often as the limits on guessing let it.
        for _ in 0..4 {
            let begun = Instant::now();
            assert_eq!(self.post(&tablet, "/sign-in/pin", &fields).await, "/");
            slowest = slowest.max(milliseconds(begun.elapsed()));
        }
        slowest
    }

    /// Follows links from the first page on. Returns addresses by their kind, which is
    /// the path with identifiers left out.
    async fn walk(&self, client: &Client) -> BTreeMap<String, Vec<String>> {
        let link = Selector::parse("a[href]").expect("a selector");
        let mut kinds: BTreeMap<String, Vec<String>> = BTreeMap::new();
        let mut seen = BTreeSet::from(["/".to_owned()]);
        let mut open = VecDeque::from(["/".to_owned()]);
        while let Some(path) = open.pop_front() {
            let of_kind = kinds.entry(kind(&path)).or_default();
            if of_kind.len() == OF_ONE_KIND {
                continue;
            }
            let (status, text) = self.get(client, &path).await;
            assert_eq!(status, StatusCode::OK, "{path}");
            of_kind.push(path);
            for link in Html::parse_document(&text).select(&link) {
                let address = link.value().attr("href").unwrap_or_default();
                let address = address.split('#').next().unwrap_or_default();
                if address.starts_with('/') && seen.insert(address.to_owned()) {
                    open.push_back(address.to_owned());
                }
            }
        }
        kinds
    }

    /// Asks for these addresses in turn.
    async fn time(&self, client: &Client, addresses: &[String]) -> Times {
        let mut best: Option<Times> = None;
        for _ in 0..ROUNDS {
            let round = self.round(client, addresses).await;
            if best.as_ref().is_none_or(|best| round.p95_ms < best.p95_ms) {
                best = Some(round);
            }
        }
        best.expect("a round")
    }

    async fn round(&self, client: &Client, addresses: &[String]) -> Times {
        let mut times = Vec::with_capacity(SAMPLES);
        let mut bytes = 0;
        for path in addresses.iter().cycle().take(SAMPLES) {
            let begun = Instant::now();
            let (_, text) = self.get(client, path).await;
            times.push(milliseconds(begun.elapsed()));
            bytes += text.len();
        }
        times.sort_by(f64::total_cmp);
        Times {
            median_ms: times[SAMPLES / 2],
            p95_ms: times[SAMPLES * 95 / 100],
            kilobytes: bytes as f64 / 1e3 / SAMPLES as f64,
        }
    }

    /// Memory the system holds for the program, MB.
    fn resident_mb(&self) -> f64 {
        let status = fs::read_to_string(format!("/proc/{}/status", self.process.id()));
        let status = status.expect("the program still runs, on Linux");
        let kilobytes = status
            .lines()
            .find_map(|line| line.strip_prefix("VmRSS:"))
            .and_then(|rest| rest.split_whitespace().next())
            .and_then(|number| number.parse::<f64>().ok());
        kilobytes.expect("a number of kB") * 1024.0 / 1e6
    }
}

impl Drop for Server {
    fn drop(&mut self) {
        // It may have ended by itself; then there is nothing to do.
        let _ = self.process.kill();
        let _ = self.process.wait();
    }
}

fn kind(path: &str) -> String {
    let path = path.split('?').next().unwrap_or_default();
    path.split('/')
        .map(|part| {
            let is_id = part.len() == 36 && part.matches('-').count() == 4;
            if is_id { "{id}" } else { part }
        })
        .collect::<Vec<_>>()
        .join("/")
}

fn milliseconds(time: Duration) -> f64 {
    time.as_secs_f64() * 1e3
}
