//! Who may do what: every role and every scope of a token at every endpoint, and every
//! role at every form.

use leat::people::Scope;
use serde_json::json;

use super::bodies::{address, good};
use super::description::Description;
use super::{LivedIn, forms};

/// The least role and the scope that each operation of the API asks for, as README and
/// help tell them: a brewer plans, weighs and reads; QA also enters tests, keeps sources,
/// meters, lots and data sheets and approves; a manager also keeps beers, malts and the shelf. No token
/// changes settings.
fn needed(method: &str, path: &str) -> Option<(usize, Vec<Scope>)> {
    const BREWER: usize = 0;
    const QA: usize = 1;
    const MANAGER: usize = 2;
    if method == "GET" || path == "/plan-previews" || path == "/water-test-checks" {
        return Some((BREWER, vec![Scope::Read]));
    }
    let first = path.split('/').nth(1).unwrap_or_default();
    let (role, scope) = match first {
        "settings" => return None,
        "sources" | "water-tests" => (QA, Scope::Tests),
        "meters" if path.contains("/calibrations") => (BREWER, Scope::Readings),
        "meters" => (QA, Scope::Readings),
        "malts" | "materials" if path.contains("/lots") => (QA, Scope::Plans),
        "materials" if path.ends_with("/safety-data-sheets") => (QA, Scope::Plans),
        "malts" | "materials" | "beers" => (MANAGER, Scope::Plans),
        _ if path.contains("/doses/")
            || path.contains("/mash-checks")
            || path.contains("/liquor-checks") =>
        {
            (BREWER, Scope::Readings)
        }
        _ if path.ends_with("/closing") => (BREWER, Scope::Readings),
        _ if path.ends_with("/approval") || path.ends_with("/corrections") => (QA, Scope::Plans),
        _ => (BREWER, Scope::Plans),
    };
    Some((role, vec![scope]))
}

/// Whether these scopes hold that one: whoever drafts plans may read what they draw on.
fn opened(scopes: &[Scope], scope: Scope) -> bool {
    let reads = scope == Scope::Read && scopes.contains(&Scope::Plans);
    scopes.contains(&scope) || reads
}

#[tokio::test(flavor = "multi_thread", worker_threads = 2)]
async fn every_endpoint_is_open_to_its_roles_and_scopes_and_to_no_other() {
    let lived = LivedIn::build().await;
    let desk = &lived.house.desk;
    let description = Description::of(desk).await;
    let mut programs = Vec::new();
    for (role, login) in ["brewer", "qa", "manager"].into_iter().enumerate() {
        for scope in Scope::ALL {
            let program = desk.program(login, &[scope]).await;
            programs.push((role, login, vec![scope], program));
        }
        let others = |scope: Scope| Scope::ALL.into_iter().filter(move |other| *other != scope);
        for scope in Scope::ALL {
            let scopes: Vec<Scope> = others(scope).collect();
            let program = desk.program(login, &scopes).await;
            programs.push((role, login, scopes, program));
        }
    }
    let mut wrong = Vec::new();
    for operation in description.operations() {
        if operation.path == "/me" {
            continue;
        }
        let path = address(&lived, &operation);
        let body = good(&lived, &operation).await;
        // A version long gone: most who may are answered 409, and nothing moves on.
        let stale = [("if-match", "\"999999\"")];
        for (role, login, scopes, program) in &programs {
            let may = needed(&operation.method, &operation.path).is_some_and(|(least, all)| {
                *role >= least && all.iter().all(|scope| opened(scopes, *scope))
            });
            let before = lived.rows().await;
            let body = operation.takes_body.then_some(&body);
            let answer = program.send(&operation.method, &path, body, &stale).await;
            if (answer.status == 403) == may {
                let (method, path, status) = (&operation.method, &operation.path, answer.status);
                wrong.push(format!(
                    "{login} with {scopes:?}: {method} {path} answered {status}"
                ));
            }
            if answer.status == 403 {
                assert_eq!(lived.rows().await, before, "{} {path}", operation.method);
                let told = answer.body["detail"].as_str().unwrap_or_default();
                assert!(told.contains("may") && told.ends_with('.'), "{told}");
            }
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}

#[tokio::test]
async fn a_draft_may_be_withdrawn_by_a_brewer_and_an_approved_plan_only_by_those_who_approve() {
    let lived = LivedIn::build().await;
    let brewer = lived.house.desk.full_program("brewer").await;
    for (plan, status) in [(&lived.plan, 201), (&lived.approved, 403)] {
        let body = json!({"reason": "Not today"});
        let answer = brewer
            .post(&format!("/plans/{plan}/withdrawal"), &body)
            .await;
        assert_eq!(answer.status, status, "{:?}", answer.body);
    }
}

/// The least role that may send a form.
fn least(action: &str) -> usize {
    match forms::shape(action).as_str() {
        "/settings" | "/people/new" | "/people/invite" | "/people/{id}" => 2,
        path if path.starts_with("/invitations") || path.starts_with("/tablets") => 2,
        path if path.starts_with("/tokens") || path.starts_with("/beers") => 2,
        path if path.starts_with("/malts") || path.starts_with("/shelf") => {
            let paper = path.ends_with("/safety-data-sheets");
            if paper || path.contains("/lots") {
                1
            } else {
                2
            }
        }
        path if path.starts_with("/meters") => usize::from(!path.contains("/calibrations")),
        path if path.starts_with("/sources") || path.starts_with("/water-tests") => 1,
        path if path.contains("/approval") || path.ends_with("/corrections") => 1,
        _ => 0,
    }
}

#[tokio::test]
async fn a_form_taken_from_somebody_who_may_is_refused_to_whoever_may_not() {
    let lived = LivedIn::build().await;
    let manager = lived.house.desk.browser("manager").await;
    let pages = forms::every_page(&manager).await;
    let forms = forms::every_form(&pages);
    let before = lived.rows().await;
    let (mut wrong, mut refused) = (Vec::new(), 0);
    for (role, login) in ["brewer", "qa"].into_iter().enumerate() {
        let browser = lived.house.desk.browser(login).await;
        let stranger = lived.house.desk.stranger();
        for form in &forms {
            if least(&form.action) <= role {
                continue;
            }
            let page = pages.iter().find(|page| page.path == form.page).unwrap();
            let fields = crate::desk::offered(page, &form.action, &[]);
            let answer = browser.post(&form.action, &fields).await;
            refused += 1;
            if answer.status != 403 {
                wrong.push(format!(
                    "{login}: {} answered {}",
                    form.action, answer.status
                ));
            }
            let answer = stranger.post(&form.action, &fields).await;
            if answer.path != "/sign-in" {
                wrong.push(format!(
                    "a stranger: {} led to {}",
                    form.action, answer.path
                ));
            }
        }
        // What one may not send is not offered either.
        for page in forms::every_page(&browser).await {
            for form in forms::every_form(std::slice::from_ref(&page)) {
                if least(&form.action) > role {
                    wrong.push(format!(
                        "{login}: {} is offered on {}",
                        form.action, page.path
                    ));
                }
            }
        }
    }
    assert_eq!(lived.rows().await, before);
    assert!(refused > 30, "only {refused}");
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
}
