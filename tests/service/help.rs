//! The help page and the description of the API.

use std::collections::BTreeMap;

use crate::desk::Desk;

#[tokio::test]
async fn help_is_open_to_whoever_cannot_sign_in_and_names_every_source() {
    let desk = Desk::start().await;
    let page = desk.stranger().open("/help").await;
    assert_eq!(page.path, "/help");
    let words = page.words();
    for reference in chemistry::references::ALL {
        assert!(words.contains(reference.title), "{reference}");
    }
    for caution in chemistry::material::Substance::LacticAcid.cautions() {
        assert!(words.contains(caution), "{caution}");
    }
}

#[tokio::test]
async fn help_says_what_this_brewery_assumes() {
    let desk = Desk::start().await;
    let manager = desk.browser("manager").await;
    let settings = manager.open("/settings").await;
    let typed = [("calcium_share", "0.29"), ("calcium_share_sd", "0,1")];
    manager.fill(&settings, "/settings", &typed).await;
    let words = manager.open("/help").await.words();
    assert!(words.contains("0.29 ± 0.10"), "{words}");
}

#[tokio::test]
async fn the_page_to_read_the_api_asks_nothing_of_any_other_server() {
    let desk = Desk::start().await;
    let answer = reqwest::get(format!("{}/help/api", desk.address))
        .await
        .unwrap();
    let policy = answer.headers()["content-security-policy"]
        .to_str()
        .unwrap()
        .to_owned();
    assert!(policy.contains("script-src 'self';") && !policy.contains("http"));
    let page = answer.text().await.unwrap();
    let own = links(&page);
    assert!(!own.is_empty());
    for link in own {
        assert!(link.starts_with('/') || link.starts_with('#'), "{link}");
        if link.starts_with("/assets/") || link.starts_with("/api/") {
            let there = reqwest::get(format!("{}{link}", desk.address))
                .await
                .unwrap();
            assert!(there.status().is_success(), "{link}");
        }
    }
    // Other pages keep the strict policy.
    let help = reqwest::get(format!("{}/help", desk.address))
        .await
        .unwrap();
    let policy = help.headers()["content-security-policy"].to_str().unwrap();
    assert!(!policy.contains("unsafe"), "{policy}");
}

/// Everything the page links to.
fn links(page: &str) -> Vec<String> {
    let page = scraper::Html::parse_document(page);
    let all = scraper::Selector::parse("[href], [src]").unwrap();
    page.select(&all)
        .filter_map(|e| e.value().attr("href").or(e.value().attr("src")))
        .map(str::to_owned)
        .collect()
}

#[tokio::test]
async fn every_operation_of_the_api_has_a_name_of_its_own_and_describes_its_refusals() {
    let desk = Desk::start().await;
    let address = format!("{}/api/openapi.json", desk.address);
    let answer = reqwest::get(address).await.unwrap();
    let description: serde_json::Value = answer.json().await.unwrap();
    assert_eq!(description["servers"][0]["url"], "/api/v1");
    let mut named: BTreeMap<String, String> = BTreeMap::new();
    for (path, item) in description["paths"].as_object().unwrap() {
        for method in ["get", "put", "post", "delete", "patch"] {
            let Some(operation) = item.get(method) else {
                continue;
            };
            let here = format!("{method} {path}");
            let name = operation["operationId"].as_str().unwrap().to_owned();
            if let Some(twin) = named.insert(name.clone(), here.clone()) {
                panic!("{here} and {twin} are both named {name}");
            }
            let responses = operation["responses"].as_object().unwrap();
            assert!(
                responses.contains_key("401"),
                "{here} does not describe 401"
            );
            for (status, response) in responses {
                assert!(!response["description"].as_str().unwrap().is_empty());
                if status.starts_with('4') {
                    let kinds = response["content"].as_object().unwrap();
                    assert!(kinds.contains_key("application/problem+json"), "{here}");
                }
            }
        }
    }
}
