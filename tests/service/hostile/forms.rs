//! Every form that pages really offer, with poison in each of its fields.

use std::collections::{BTreeMap, BTreeSet, VecDeque};

use reqwest::StatusCode;
use scraper::Selector;

use super::{LivedIn, POISONS, long};
use crate::desk::{Browser, Seen, offered};

/// An address with `{id}` for every identifier.
pub fn shape(path: &str) -> String {
    path.split('/')
        .map(|part| {
            let is_id = part.len() == 36 && part.matches('-').count() == 4;
            if is_id { "{id}" } else { part }
        })
        .collect::<Vec<_>>()
        .join("/")
}

/// Every page that links lead to from the first one.
pub async fn every_page(browser: &Browser) -> Vec<Seen> {
    let links = Selector::parse("a[href^='/']").unwrap();
    let mut seen = BTreeSet::from(["/".to_owned()]);
    let mut waiting = VecDeque::from(["/".to_owned()]);
    let mut pages = Vec::new();
    while let Some(path) = waiting.pop_front() {
        let page = browser.open(&path).await;
        assert_eq!(page.status, StatusCode::OK, "{path}: {}", page.words());
        for link in page.html().select(&links) {
            let href = link.value().attr("href").unwrap_or_default();
            let href = href.split(['?', '#']).next().unwrap_or_default();
            let elsewhere = href.starts_with("/api/") || href.starts_with("/assets/");
            if !elsewhere && !href.ends_with(".json") && seen.insert(href.to_owned()) {
                waiting.push_back(href.to_owned());
            }
        }
        pages.push(page);
    }
    pages
}

/// One form: the page it stands on, where it posts to, and its fields with their kinds.
pub struct Offer {
    pub page: String,
    pub action: String,
    fields: Vec<(String, &'static str)>,
}

/// One form of each shape that the pages offer with a button to send it, but for those that sign out, change a
/// password or make a tablet of the browser, which would end the attack.
pub fn every_form(pages: &[Seen]) -> Vec<Offer> {
    let forms = Selector::parse("form[method='post']").unwrap();
    let inputs = Selector::parse("input[name], select[name], textarea[name]").unwrap();
    let button = Selector::parse("button").unwrap();
    let mut offers = BTreeMap::new();
    for page in pages {
        for form in page.html().select(&forms) {
            let action = form.value().attr("action").unwrap_or_default().to_owned();
            let mut fields: Vec<(String, &'static str)> = Vec::new();
            for input in form.select(&inputs) {
                let element = input.value();
                let kind = match (element.name(), element.attr("type")) {
                    ("select", _) => "select",
                    ("textarea", _) => "textarea",
                    (_, Some("checkbox" | "radio")) => "box",
                    (_, Some("hidden")) => "hidden",
                    (_, Some("password")) => "password",
                    // No form without parts sends a file; `shelf::attachments` does.
                    (_, Some("file")) => "file",
                    _ => "text",
                };
                let name = element.attr("name").unwrap_or_default().to_owned();
                if !fields.iter().any(|(field, _)| *field == name) {
                    fields.push((name, kind));
                }
            }
            if form.select(&button).next().is_none() {
                continue;
            }
            let ends = ["/sign-out", "/password"]
                .iter()
                .any(|end| action.ends_with(end));
            if ends || action == "/tablets" {
                continue;
            }
            let names: Vec<_> = fields.iter().map(|(name, _)| name.clone()).collect();
            let offer = Offer {
                page: page.path.clone(),
                action: action.clone(),
                fields,
            };
            offers.entry((shape(&action), names)).or_insert(offer);
        }
    }
    offers.into_values().collect()
}

/// How soon a form is attacked: those that end something last, those that plans draw on
/// after the plans themselves.
fn rank(offer: &Offer) -> usize {
    const ENDINGS: [&str; 8] = [
        "/exclusion",
        "/taking-back",
        "/revisions",
        "/withdrawal",
        "/closing",
        "/approval",
        "/retirement",
        "/revocation",
    ];
    match ENDINGS.iter().position(|end| offer.action.ends_with(end)) {
        Some(place) => 2 + place,
        None if offer.action.starts_with("/plans") => 0,
        None => 1,
    }
}

/// What is typed into one form, an attack at a time: every poison into all its fields at
/// once, then a few into each field alone, each field drawing others. Of many rows alike,
/// the first two stand for the others.
fn attacks<'a>(form: &'a Offer, poisons: &[&'a str]) -> Vec<Vec<Typed<'a>>> {
    let typed = |(name, kind): &'a (String, &'static str), poison| Typed { name, kind, poison };
    let mut attacks = Vec::new();
    for poison in poisons {
        let open = form.fields.iter().filter(|(_, kind)| *kind != "hidden");
        attacks.push(open.map(|field| typed(field, *poison)).collect());
    }
    let alone = form.fields.iter().filter(|(name, _)| {
        let row = name.split('.').find_map(|part| part.parse::<usize>().ok());
        row.is_none_or(|row| row < 2)
    });
    for (place, field) in alone.enumerate() {
        for turn in 0..3 {
            let poison = poisons[(5 * place + 7 * turn) % poisons.len()];
            attacks.push(vec![typed(field, poison)]);
        }
    }
    attacks
}

/// One field and what was typed into it.
struct Typed<'a> {
    name: &'a str,
    kind: &'static str,
    poison: &'a str,
}

/// What is wrong with an answer to poison, if anything.
fn faults(answer: &Seen, typed: &[Typed<'_>]) -> Vec<String> {
    let mut faults = Vec::new();
    if answer.status.is_server_error() {
        faults.push(format!("answered {}", answer.status));
    }
    if answer.text.contains("<script>alert(1)") {
        faults.push("let a script through".to_owned());
    }
    // Nobody mistypes a hidden field.
    let tampered = typed.iter().any(|field| field.kind == "hidden");
    if answer.status != StatusCode::UNPROCESSABLE_ENTITY || tampered {
        return faults;
    }
    let html = answer.html();
    let any = Selector::parse("[id], [name]").unwrap();
    let (mut ids, mut values) = (BTreeSet::new(), BTreeSet::new());
    for element in html.select(&any) {
        let value = element.value();
        ids.extend(value.attr("id"));
        if let Some(name) = value.attr("name") {
            values.insert(match value.name() {
                "textarea" => (name, element.text().collect::<String>()),
                _ => (name, value.attr("value").unwrap_or_default().to_owned()),
            });
        }
    }
    let summary = Selector::parse(".problem-summary a").unwrap();
    let mut sentences = 0;
    for link in html.select(&summary) {
        sentences += 1;
        let target = link.value().attr("href").unwrap_or_default();
        let target = target.trim_start_matches('#');
        if target != "field-" && !ids.contains(target) {
            faults.push(format!("leads to {target}, which is not there"));
        }
        let sentence: String = link.text().collect();
        if !sentence.trim_end().ends_with(['.', '?', '!', '…']) {
            faults.push(format!("says “{sentence}”, which is no sentence"));
        }
    }
    if sentences == 0 {
        faults.push("refused without a sentence".to_owned());
    }
    for Typed { name, kind, poison } in typed {
        // A choice that is not on the list cannot be shown; HTML has no null character.
        let shown = matches!(*kind, "text" | "textarea") && !poison.contains('\0');
        if shown && !values.contains(&(*name, (*poison).to_owned())) {
            faults.push(format!("lost “{poison}” typed into {name}"));
        }
    }
    faults
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn poison_in_any_field_of_any_form_is_answered_with_a_sentence_and_saves_nothing() {
    let lived = LivedIn::build().await;
    let browser = lived.house.desk.browser("manager").await;
    let mut forms = every_form(&every_page(&browser).await);
    forms.sort_by_key(rank);
    let shapes: BTreeSet<_> = forms.iter().map(|form| shape(&form.action)).collect();
    assert!(shapes.len() > 25, "only {shapes:?}");
    let long = long();
    let poisons: Vec<&str> = std::iter::once(long.as_str()).chain(POISONS).collect();
    let mut faulty = BTreeSet::new();
    let (mut sent, mut refused) = (0, 0);
    for form in &forms {
        let mut page = browser.open(&form.page).await;
        let mut before = lived.rows().await;
        for attack in attacks(form, &poisons) {
            let offers = |name: &str| page.text.contains(&format!("name=\"{name}\""));
            let there = page.text.contains(&format!("action=\"{}\"", form.action));
            if !there || !attack.iter().all(|field| offers(field.name)) {
                break;
            }
            let typed: Vec<_> = attack
                .iter()
                .map(|field| (field.name, field.poison))
                .collect();
            let fields = offered(&page, &form.action, &typed);
            let answer = browser.post(&form.action, &fields).await;
            sent += 1;
            let mut found = faults(&answer, &attack);
            let after = lived.rows().await;
            if answer.status.is_client_error() {
                refused += 1;
                if after != before {
                    found.push(format!("answered {} and saved", answer.status));
                }
            } else {
                // What the page offers may have changed.
                page = browser.open(&form.page).await;
            }
            before = after;
            for fault in found {
                let short = |text: &str| text.chars().take(120).collect::<String>();
                let (name, poison) = typed.first().copied().unwrap_or_default();
                let (fault, poison) = (short(&fault), short(poison));
                faulty.insert(format!("{} {name} “{poison}”: {fault}", form.action));
            }
        }
    }
    let told = faulty.iter().cloned().collect::<Vec<_>>().join("\n");
    assert!(faulty.is_empty(), "{} faults:\n{told}", faulty.len());
    assert!(refused > 500, "{refused} of {sent} refused");
}
