//! A running server, and people and programs who use it.

use std::path::PathBuf;

use leat::config::Config;
use leat::db::Db;
use leat::input::Problems;
use leat::people::operations::{self, Gate, NewAccount};
use leat::people::passwords::Passwords;
use leat::people::{Member, Place, Scope};
use leat::server::Server;
use leat::web::App;
use leat::web::throttle::Throttle;
use reqwest::{Client, Response, StatusCode};
use scraper::{Html, Selector};
use serde_json::Value;

/// The password of everybody in these tests.
pub const PASSWORD: &str = "open the sluice";

/// A server with three people: `manager`, `qa` and `brewer`.
pub struct Desk {
    pub app: App,
    pub address: String,
    pub file: PathBuf,
    _folder: tempfile::TempDir,
}

impl Desk {
    /// Starts a server with an empty database and three accounts.
    pub async fn start() -> Self {
        let folder = tempfile::tempdir().unwrap();
        let file = folder.path().join("leat.sqlite");
        let server = Server::open(&config(&file)).await.unwrap();
        let app = server.app().clone();
        let address = format!("http://{}", server.address());
        tokio::spawn(server.run(std::future::pending()));
        let desk = Self {
            app,
            address,
            file,
            _folder: folder,
        };
        let manager = new_account("manager", "Mara Manager", "manager");
        operations::create_first(&desk.app.db, &desk.app.passwords, manager)
            .await
            .unwrap();
        for (login, name) in [("qa", "Quin Assay"), ("brewer", "Bo Brewer")] {
            let by = desk.member("manager").await;
            operations::create(
                &desk.app.db,
                &by,
                &desk.app.passwords,
                new_account(login, name, login),
            )
            .await
            .unwrap();
        }
        desk
    }

    /// Somebody as operations see them.
    pub async fn member(&self, login: &str) -> Member {
        let secret = sign_in(&self.app.db, &self.app.passwords, login).await;
        operations::by_session(&self.app.db, &secret, None)
            .await
            .unwrap()
            .unwrap()
    }

    /// A browser in which somebody has signed in.
    pub async fn browser(&self, login: &str) -> Browser {
        let browser = self.stranger();
        let page = browser.open("/sign-in").await;
        let answer = browser
            .fill(
                &page,
                "/sign-in",
                &[("login", login), ("password", PASSWORD)],
            )
            .await;
        assert_ne!(answer.path, "/sign-in", "{}", answer.words());
        browser
    }

    /// A browser in which nobody has signed in.
    pub fn stranger(&self) -> Browser {
        let client = Client::builder().cookie_store(true).build().unwrap();
        Browser {
            client,
            address: self.address.clone(),
        }
    }

    /// A program with a token that carries somebody's rights within these scopes.
    pub async fn program(&self, login: &str, scopes: &[Scope]) -> Program {
        // Only a manager makes tokens: the token is made as a manager and carries on as its owner.
        let mut member = self.member(login).await;
        let own = member.role;
        member.role = leat::people::Role::Manager;
        let token =
            operations::create_token(&self.app.db, &member, "test".into(), scopes.to_vec(), 30)
                .await;
        member.role = own;
        Program {
            client: Client::new(),
            address: self.address.clone(),
            token: token.unwrap().1.0,
        }
    }

    /// A program that may do everything its owner may.
    pub async fn full_program(&self, login: &str) -> Program {
        self.program(login, &Scope::ALL).await
    }
}

/// Signs somebody in past the limits on guessing, which a test full of people would meet.
pub async fn sign_in(db: &Db, passwords: &Passwords, login: &str) -> String {
    let gate = Gate {
        passwords,
        throttle: &Throttle::new().unwrap(),
        place: &Place::at([127, 0, 0, 1].into()),
    };
    let signed_in = operations::sign_in(db, gate, None, login, PASSWORD).await;
    signed_in.unwrap().1.0
}

/// The settings a test server runs with.
pub fn config(file: &std::path::Path) -> Config {
    Config {
        database: file.to_owned(),
        listen: "127.0.0.1:0".parse().unwrap(),
        demo: false,
        tls_certificate: None,
        tls_key: None,
        secure_cookies: false,
        log: "warn".into(),
        log_json: false,
        back_up: None,
    }
}

fn new_account(login: &str, name: &str, role: &str) -> NewAccount {
    let mut problems = Problems::new();
    let account = NewAccount::check(login, name, role, PASSWORD, &mut problems);
    problems.finish().unwrap();
    account.unwrap()
}

/// A page as it arrived, after redirects.
pub struct Seen {
    pub status: StatusCode,
    pub path: String,
    pub text: String,
}

impl Seen {
    /// What a response brought.
    pub async fn of(response: Response) -> Self {
        let status = response.status();
        let path = response.url().path().to_owned();
        Self {
            status,
            path,
            text: response.text().await.unwrap(),
        }
    }

    /// The page as a tree.
    pub fn html(&self) -> Html {
        Html::parse_document(&self.text)
    }

    /// The texts of everything a CSS selector finds, blanks folded.
    pub fn texts(&self, selector: &str) -> Vec<String> {
        let selector = Selector::parse(selector).unwrap();
        let html = self.html();
        html.select(&selector)
            .map(|e| {
                e.text()
                    .collect::<String>()
                    .split_whitespace()
                    .collect::<Vec<_>>()
                    .join(" ")
            })
            .collect()
    }

    /// All words of the page's main part.
    pub fn words(&self) -> String {
        self.texts("main").join(" ")
    }

    /// What stands in a field.
    pub fn field(&self, name: &str) -> String {
        let html = self.html();
        let input = Selector::parse(&format!("[name=\"{name}\"]")).unwrap();
        let found = html
            .select(&input)
            .next()
            .unwrap_or_else(|| panic!("no field {name} on {}", self.path));
        if found.value().name() == "textarea" {
            return found.text().collect();
        }
        if found.value().name() == "select" {
            let chosen = Selector::parse("option[selected]").unwrap();
            return found
                .select(&chosen)
                .next()
                .and_then(|o| o.value().attr("value"))
                .unwrap_or("")
                .to_owned();
        }
        found.value().attr("value").unwrap_or("").to_owned()
    }

    /// The message beside a field, if any.
    pub fn error(&self, name: &str) -> Option<String> {
        let html = self.html();
        let error = Selector::parse(&format!(
            "[id=\"error-{name}\"], [id=\"note-{name}\"] .field-error"
        ))
        .unwrap();
        html.select(&error)
            .next()
            .map(|e| e.text().collect::<String>().trim().to_owned())
    }
}

/// A browser without scripts.
pub struct Browser {
    client: Client,
    address: String,
}

impl Browser {
    /// Opens a page.
    pub async fn open(&self, path: &str) -> Seen {
        Seen::of(
            self.client
                .get(format!("{}{path}", self.address))
                .send()
                .await
                .unwrap(),
        )
        .await
    }

    /// Fills in the form of `page` that posts to `action`, with everything the form
    /// really offers and these fields typed over it, and sends it.
    pub async fn fill(&self, page: &Seen, action: &str, typed: &[(&str, &str)]) -> Seen {
        let fields = offered(page, action, typed);
        self.post(action, &fields).await
    }

    /// A request of this browser, yet to be sent.
    pub fn request(&self, method: &str, path: &str) -> reqwest::RequestBuilder {
        self.client
            .request(method.parse().unwrap(), format!("{}{path}", self.address))
    }

    /// Posts fields as a form would.
    pub async fn post(&self, path: &str, fields: &[(String, String)]) -> Seen {
        let request = self
            .client
            .post(format!("{}{path}", self.address))
            .form(fields);
        Seen::of(
            request
                .header("origin", &self.address)
                .send()
                .await
                .unwrap(),
        )
        .await
    }
}

/// What a form would send: its own values, with some typed over.
pub fn offered(page: &Seen, action: &str, typed: &[(&str, &str)]) -> Vec<(String, String)> {
    let html = page.html();
    let form = Selector::parse(&format!("form[action=\"{action}\"]")).unwrap();
    let form = html
        .select(&form)
        .next()
        .unwrap_or_else(|| panic!("no form to {action} on {}: {}", page.path, page.words()));
    let inputs = Selector::parse("input[name], select[name], textarea[name]").unwrap();
    let mut fields: Vec<(String, String)> = Vec::new();
    let mut names = Vec::new();
    for input in form.select(&inputs) {
        let element = input.value();
        let name = element.attr("name").unwrap().to_owned();
        names.push(name.clone());
        let kind = element.attr("type").unwrap_or("text");
        let value = match element.name() {
            "select" => {
                let chosen = Selector::parse("option[selected]").unwrap();
                let first = Selector::parse("option").unwrap();
                let option = input
                    .select(&chosen)
                    .next()
                    .or_else(|| input.select(&first).next());
                option
                    .and_then(|o| o.value().attr("value"))
                    .unwrap_or("")
                    .to_owned()
            }
            "textarea" => input.text().collect(),
            _ if matches!(kind, "checkbox" | "radio") && element.attr("checked").is_none() => {
                continue;
            }
            _ => element.attr("value").unwrap_or("").to_owned(),
        };
        fields.push((name, value));
    }
    for (name, value) in typed {
        assert!(
            names.iter().any(|n| n == name),
            "the form to {action} has no field {name}; it has {names:?}"
        );
        fields.retain(|(field, _)| field != name);
        fields.push(((*name).to_owned(), (*value).to_owned()));
    }
    fields
}

/// A program that uses the API.
pub struct Program {
    client: Client,
    address: String,
    token: String,
}

/// An answer of the API.
#[derive(Debug)]
pub struct Answer {
    pub status: u16,
    pub etag: Option<String>,
    pub location: Option<String>,
    pub kind: Option<String>,
    pub body: Value,
}

impl Answer {
    /// What a response brought.
    pub async fn of(response: Response) -> Self {
        let header = |name: &str| {
            response
                .headers()
                .get(name)
                .and_then(|v| v.to_str().ok())
                .map(str::to_owned)
        };
        let (etag, location) = (header("etag"), header("location"));
        let kind = header("content-type");
        let status = response.status().as_u16();
        let text = response.text().await.unwrap();
        let body = if text.is_empty() {
            Value::Null
        } else {
            serde_json::from_str(&text).unwrap_or(Value::String(text))
        };
        Self {
            status,
            etag,
            location,
            kind,
            body,
        }
    }

    /// The pointers of a problem.
    pub fn pointers(&self) -> Vec<&str> {
        self.body["errors"]
            .as_array()
            .map(|list| list.iter().filter_map(|e| e["pointer"].as_str()).collect())
            .unwrap_or_default()
    }
}

impl Program {
    /// GET.
    pub async fn get(&self, path: &str) -> Answer {
        self.send("GET", path, None, &[]).await
    }

    /// POST.
    pub async fn post(&self, path: &str, body: &Value) -> Answer {
        self.send("POST", path, Some(body), &[]).await
    }

    /// PUT.
    pub async fn put(&self, path: &str, body: &Value) -> Answer {
        self.send("PUT", path, Some(body), &[]).await
    }

    /// Any method, with headers.
    pub async fn send(
        &self,
        method: &str,
        path: &str,
        body: Option<&Value>,
        headers: &[(&str, &str)],
    ) -> Answer {
        let mut request = self.request(method, path);
        for (name, value) in headers {
            request = request.header(*name, *value);
        }
        if let Some(body) = body {
            request = request.json(body);
        }
        Answer::of(request.send().await.unwrap()).await
    }

    /// The token itself.
    pub fn token(&self) -> &str {
        &self.token
    }

    /// A request with the token, yet to be sent.
    pub fn request(&self, method: &str, path: &str) -> reqwest::RequestBuilder {
        let url = format!("{}/api/v1{path}", self.address);
        self.client
            .request(method.parse().unwrap(), url)
            .bearer_auth(&self.token)
    }
}
