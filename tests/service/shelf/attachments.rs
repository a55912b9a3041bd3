//! Certificates and safety data sheets: what is kept, and what is not let in.

use reqwest::StatusCode;
use serde_json::{Value, json};

use super::{added, gypsum, path};
use crate::desk::{Answer, Browser, Desk, Program, Seen};

/// The smallest of each kind that a reader would take for one: only how it begins counts.
const PDF: &[u8] = b"%PDF-1.7\n1 0 obj<</Type/Catalog>>endobj\ntrailer<</Root 1 0 R>>\n%%EOF\n";
const PNG: &[u8] = b"\x89PNG\r\n\x1a\n\0\0\0\rIHDR";
const JPEG: &[u8] = b"\xff\xd8\xff\xe0\0\x10JFIF\0";
const WEBP: &[u8] = b"RIFF\x1a\0\0\0WEBPVP8L";

const LARGEST: usize = 5 * 1024 * 1024;

/// A material and its lot as the API knows them.
async fn shelf(program: &Program) -> (String, String) {
    let material = path(&added(program, &gypsum()).await);
    let lot = json!({"code": "G-1", "current": true, "in_use": true});
    let lot = path(&program.post(&format!("{material}/lots"), &lot).await);
    (material, lot)
}

async fn sent(program: &Program, place: &str, kind: &str, bytes: &[u8]) -> Answer {
    let request = program.request("POST", place).header("content-type", kind);
    Answer::of(request.body(bytes.to_vec()).send().await.unwrap()).await
}

/// A form with one file, as browsers send it.
fn parts(name: &str, kind: &str, bytes: &[u8]) -> (String, Vec<u8>) {
    let name = name.replace('"', "%22");
    let mut body = format!(
        "--leat-cut\r\nContent-Disposition: form-data; name=\"file\"; filename=\"{name}\"\r\nContent-Type: {kind}\r\n\r\n"
    )
    .into_bytes();
    body.extend_from_slice(bytes);
    body.extend_from_slice(b"\r\n--leat-cut--\r\n");
    ("multipart/form-data; boundary=leat-cut".to_owned(), body)
}

async fn uploaded(browser: &Browser, desk: &Desk, place: &str, name: &str, bytes: &[u8]) -> Seen {
    let (kind, body) = parts(name, "application/pdf", bytes);
    let request = browser
        .request("POST", place)
        .header("content-type", kind)
        .header("origin", &desk.address);
    Seen::of(request.body(body).send().await.unwrap()).await
}

#[tokio::test]
async fn a_certificate_is_attached_shown_and_superseded_and_the_old_one_stays() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let (material, lot) = shelf(&program).await;
    let qa = desk.browser("qa").await;
    let page = lot.replace("/materials", "/shelf");
    let place = format!("{page}/certificates");
    let seen = uploaded(&qa, &desk, &place, "G-1 certificate.pdf", PDF).await;
    assert_eq!((seen.status, &*seen.path), (StatusCode::OK, &*place));
    assert_eq!(seen.texts("tbody th a"), ["G-1 certificate.pdf"]);
    // The same again is the same.
    let seen = uploaded(&qa, &desk, &place, "again.pdf", PDF).await;
    assert_eq!(seen.texts("tbody th a"), ["G-1 certificate.pdf"]);
    let seen = uploaded(&qa, &desk, &place, "photo.jpg", JPEG).await;
    assert_eq!(
        seen.texts("tbody th a"),
        ["photo.jpg", "G-1 certificate.pdf"]
    );
    assert_eq!(seen.texts("tbody .badge"), ["counts", "superseded"]);
    let brewer = desk.browser("brewer").await;
    assert!(brewer.open(&page).await.words().contains("photo.jpg"));

    let listed = program.get(&format!("{lot}/certificates")).await;
    let old = listed.body[1]["id"].as_str().unwrap();
    for (client, address) in [
        (
            brewer.request("GET", &format!("/shelf/attachments/{old}")),
            "page",
        ),
        (
            program.request("GET", &format!("/attachments/{old}")),
            "api",
        ),
    ] {
        let answer = client.send().await.unwrap();
        let header = |name: &str| answer.headers()[name].to_str().unwrap().to_owned();
        assert_eq!(header("content-type"), "application/pdf", "{address}");
        assert_eq!(header("x-content-type-options"), "nosniff");
        assert_eq!(
            header("content-disposition"),
            "inline; filename=\"G-1 certificate.pdf\"; filename*=UTF-8''G-1%20certificate.pdf"
        );
        let policy = header("content-security-policy");
        assert!(
            policy.starts_with("default-src 'none'; sandbox;"),
            "{policy}"
        );
        assert_eq!(header("cache-control"), "no-store");
        assert_eq!(answer.bytes().await.unwrap(), PDF, "{address}");
    }
    let record = qa.open("/record").await.words();
    assert!(record.contains("attached a certificate to"), "{record}");
    // Nobody is let in without signing in.
    let stranger = reqwest::get(format!("{}/shelf/attachments/{old}", desk.address)).await;
    let stranger = stranger.unwrap();
    assert_ne!(stranger.headers()["content-type"], "application/pdf");
    let none = program.get(&format!("{material}/safety-data-sheets")).await;
    assert_eq!(none.body, json!([]));
}

#[tokio::test]
async fn a_safety_data_sheet_is_sent_as_a_body_or_as_a_part_and_read_back() {
    let desk = Desk::start().await;
    let program = desk.full_program("qa").await;
    let manager = desk.full_program("manager").await;
    let (material, _) = shelf(&manager).await;
    let place = format!("{material}/safety-data-sheets");
    let named = format!("{place}?file_name=Gips%C3%A4%20neu.pdf");
    let first = sent(&program, &named, "application/pdf", PDF).await;
    assert_eq!(first.status, 201, "{:?}", first.body);
    assert_eq!(first.body["file_name"], "Gipsä neu.pdf");
    assert_eq!(first.body["size_bytes"], PDF.len());
    let again = sent(&program, &named, "application/pdf", PDF).await;
    assert_eq!((again.status, &again.body["id"]), (200, &first.body["id"]));
    let (kind, body) = parts("sheet.webp", "image/webp", WEBP);
    let second = sent(&program, &place, &kind, &body).await;
    assert_eq!(second.body["media_type"], "image/webp", "{:?}", second.body);
    assert_eq!(second.body["material_lot_id"], Value::Null);
    let listed = program.get(&place).await;
    assert_eq!(listed.body[0]["id"], second.body["id"]);
    let location = path(&first);
    let answer = program.request("GET", &location).send().await.unwrap();
    let name = answer.headers()["content-disposition"].to_str().unwrap();
    assert_eq!(
        name,
        "inline; filename=\"Gips_ neu.pdf\"; filename*=UTF-8''Gips%C3%A4%20neu.pdf"
    );
    assert_eq!(answer.bytes().await.unwrap(), PDF);
    let browser = desk.browser("brewer").await;
    let page = browser
        .open(&material.replace("/materials", "/shelf"))
        .await;
    assert!(
        page.words().contains("Safety data sheet"),
        "{}",
        page.words()
    );
}

#[tokio::test]
async fn what_a_file_is_its_bytes_say_and_never_its_name() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let (material, _) = shelf(&program).await;
    let browser = desk.browser("manager").await;
    let place = format!("{material}/safety-data-sheets").replace("/materials", "/shelf");
    let kept = async || {
        let listed = program.get(&format!("{material}/safety-data-sheets")).await;
        listed.body.as_array().unwrap().len()
    };
    for (name, bytes) in [
        ("program.pdf", &b"MZ\x90\0\x03\0\0\0"[..]),
        ("program.pdf", b"\x7fELF\x02\x01\x01"),
        (
            "drawing.svg",
            b"<svg xmlns=\"http://www.w3.org/2000/svg\"><script>alert(1)</script></svg>",
        ),
        (
            "drawing.png",
            b"<?xml version=\"1.0\"?><svg onload=\"alert(1)\"/>",
        ),
        ("page.pdf", b"<!doctype html><script>alert(1)</script>"),
        ("page.pdf", b"\n\n<html>%PDF-1.7"),
        ("archive.pdf", b"PK\x03\x04"),
        ("picture.png", b"GIF89a"),
        ("sound.webp", b"RIFF\x1a\0\0\0WAVEfmt "),
        ("short.pdf", b"%PD"),
        ("none.pdf", b""),
    ] {
        let page = uploaded(&browser, &desk, &place, name, bytes).await;
        assert_eq!(page.status, StatusCode::UNPROCESSABLE_ENTITY, "{name}");
        assert!(page.error("file").is_some(), "{name}: {}", page.words());
        assert!(!page.text.contains("alert(1)"), "{name}");
        assert_eq!(kept().await, 0, "{name}");
    }
    for kind in ["image/svg+xml", "text/html", "application/x-msdownload"] {
        let answer = sent(
            &program,
            &format!("{material}/safety-data-sheets"),
            kind,
            PDF,
        )
        .await;
        assert_eq!(answer.status, 422, "{kind}: {:?}", answer.body);
    }
    // What it really is counts, and its name is mended.
    for (bytes, name) in [
        (PNG, "notes.pdf.png"),
        (JPEG, "notes.pdf.jpg"),
        (PDF, "notes.pdf"),
    ] {
        let page = uploaded(&browser, &desk, &place, "notes.pdf", bytes).await;
        assert_eq!(page.texts("tbody th a")[0], name);
    }
}

#[tokio::test]
async fn a_file_of_five_megabytes_is_kept_and_one_byte_more_is_told_why_not() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let (material, lot) = shelf(&program).await;
    let browser = desk.browser("manager").await;
    let of_size = |bytes: usize| {
        let mut file = PDF.to_vec();
        file.resize(bytes, b' ');
        file
    };
    let place = format!("{material}/safety-data-sheets");
    let page = place.replace("/materials", "/shelf");
    let kept = uploaded(&browser, &desk, &page, "whole.pdf", &of_size(LARGEST)).await;
    assert_eq!(kept.status, StatusCode::OK, "{}", kept.words());
    assert!(kept.words().contains("5.0 MB"), "{}", kept.words());
    for size in [LARGEST + 1, 3 * LARGEST] {
        let refused = uploaded(&browser, &desk, &page, "more.pdf", &of_size(size)).await;
        assert_eq!(refused.status, StatusCode::UNPROCESSABLE_ENTITY);
        let error = refused.error("file").unwrap();
        assert!(error.contains("larger than 5 MB"), "{error}");
        let answer = sent(&program, &place, "application/pdf", &of_size(size)).await;
        assert_eq!(answer.pointers(), ["/file"], "{:?}", answer.body);
    }
    // Beyond what is read to its end.
    let answer = program
        .request("POST", &place)
        .header("content-type", "application/pdf");
    if let Ok(answer) = answer.body(of_size(9 * LARGEST)).send().await {
        assert_eq!(answer.status().as_u16(), 413);
    }
    // Other requests are held to what they were held to.
    let long = json!({"code": "x".repeat(1024 * 1024 + 1), "in_use": true});
    let answer = program.put(&lot, &long).await;
    assert_eq!(answer.status, 413);
    assert_eq!(program.get(&place).await.body.as_array().unwrap().len(), 1);
}

#[tokio::test]
async fn a_name_with_tricks_in_it_becomes_a_plain_one() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let (material, _) = shelf(&program).await;
    let place = format!("{material}/safety-data-sheets");
    let browser = desk.browser("manager").await;
    let page = place.replace("/materials", "/shelf");
    for (place_in_list, (typed, name)) in [
        ("../../../../etc/passwd", "passwd.pdf"),
        ("..\\..\\windows\\system32\\evil.exe", "evil.exe.pdf"),
        ("..", "safety data sheet.pdf"),
        ("", "safety data sheet.pdf"),
        (" .hidden.PDF ", "hidden.PDF"),
        ("a\"; filename=\"b.html", "a filename=b.html.pdf"),
        ("<script>alert(1)</script>.pdf", "script.pdf"),
        ("invoice\u{202e}fdp.exe", "invoicefdp.exe.pdf"),
        (
            "nul\u{0}l and \r\nSet-Cookie: a=b.pdf",
            "null and Set-Cookie a=b.pdf",
        ),
        ("$(rm -rf).pdf", "(rm -rf).pdf"),
    ]
    .into_iter()
    .enumerate()
    {
        // Each a little different, or it would be the same file.
        let mut bytes = PDF.to_vec();
        bytes.extend_from_slice(place_in_list.to_string().as_bytes());
        let named = leat::web::form::percent(typed);
        let request = program.request("POST", &format!("{place}?file_name={named}"));
        let request = request.header("content-type", "application/pdf");
        let answer = Answer::of(request.body(bytes).send().await.unwrap()).await;
        assert_eq!(answer.status, 201, "{typed:?}: {:?}", answer.body);
        assert_eq!(answer.body["file_name"], name, "{typed:?}");
        let file = program.request("GET", &path(&answer)).send().await.unwrap();
        let header = file.headers()["content-disposition"].to_str().unwrap();
        assert!(header.starts_with("inline; filename=\""), "{header}");
        assert_eq!(header.matches('"').count(), 2, "{header}");
        assert!(file.headers().get("set-cookie").is_none());
    }
    let long = format!("{}.pdf", "n".repeat(3_000));
    let answer = uploaded(&browser, &desk, &page, &long, PDF).await;
    assert_eq!(answer.status, StatusCode::OK);
    assert_eq!(answer.texts("tbody th a")[0].len(), 104);
    assert!(!answer.text.contains("<script>alert"), "{}", answer.text);
}

#[tokio::test]
async fn a_brewer_reads_files_and_attaches_none() {
    let desk = Desk::start().await;
    let manager = desk.full_program("manager").await;
    let (material, lot) = shelf(&manager).await;
    let brewer = desk.full_program("brewer").await;
    let browser = desk.browser("brewer").await;
    for place in [
        format!("{material}/safety-data-sheets"),
        format!("{lot}/certificates"),
    ] {
        assert_eq!(brewer.get(&place).await.status, 200);
        let answer = sent(&brewer, &place, "application/pdf", PDF).await;
        assert_eq!(answer.status, 403);
        let page = place.replace("/materials", "/shelf");
        assert!(!browser.open(&page).await.text.contains("type=\"file\""));
        let seen = uploaded(&browser, &desk, &page, "a.pdf", PDF).await;
        assert_eq!(seen.status, StatusCode::FORBIDDEN);
    }
    // Another site cannot post here, and a lot is not another material's.
    let (kind, body) = parts("a.pdf", "application/pdf", PDF);
    let qa = desk.browser("qa").await;
    let place = format!("{lot}/certificates").replace("/materials", "/shelf");
    let request = qa.request("POST", &place).header("content-type", kind);
    let request = request.header("origin", "https://elsewhere.example");
    let request = request.header("sec-fetch-site", "cross-site");
    let answer = request.body(body).send().await.unwrap();
    assert_eq!(answer.status(), StatusCode::FORBIDDEN);
    let mut other = gypsum();
    other["name"] = "Gypsum, coarse".into();
    let other = path(&added(&manager, &other).await);
    let strayed = format!(
        "{other}/lots/{}/certificates",
        lot.rsplit('/').next().unwrap()
    );
    assert_eq!(
        sent(&manager, &strayed, "application/pdf", PDF)
            .await
            .status,
        404
    );
    assert_eq!(manager.get(&strayed).await.status, 404);
}

#[tokio::test]
async fn no_hand_on_the_database_changes_a_file_and_a_backup_brings_it_along() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let (_, lot) = shelf(&program).await;
    let answer = sent(
        &program,
        &format!("{lot}/certificates"),
        "application/pdf",
        PDF,
    )
    .await;
    assert_eq!(answer.status, 201, "{:?}", answer.body);
    for statement in [
        "UPDATE attachments SET file_name = 'other.pdf'",
        "DELETE FROM attachments",
        "INSERT OR REPLACE INTO attachments SELECT * FROM attachments",
    ] {
        let mut tx = desk.app.db.begin().await.unwrap();
        let refused = sqlx::query(statement).execute(&mut *tx).await.unwrap_err();
        assert!(refused.to_string().contains("superseded"), "{refused}");
    }
    let folder = tempfile::tempdir().unwrap();
    let copy = folder.path().join("copy.sqlite");
    desk.app.db.back_up(&copy).await.unwrap();
    let copy = leat::db::Db::open(&copy).await.unwrap();
    let mut reader = copy.reader().await.unwrap();
    let (bytes,): (Vec<u8>,) = sqlx::query_as("SELECT bytes FROM attachments")
        .fetch_one(&mut *reader)
        .await
        .unwrap();
    assert_eq!(bytes, PDF);
}
