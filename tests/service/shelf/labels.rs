//! Labels of lots: that a reader of codes reads them.

use scraper::Selector;
use serde_json::json;

use super::{added, gypsum, path};
use crate::desk::{Desk, Seen};

/// The dots of a code by its path, row by row.
fn dots(path: &str, side: usize) -> Vec<bool> {
    let mut dark = vec![false; side * side];
    for run in path.split_terminator('z') {
        let run = run.strip_prefix('M').unwrap();
        let (corner, rest) = run.split_once('h').unwrap();
        let (x, y) = corner.split_once(' ').unwrap();
        let (x, y): (usize, usize) = (x.parse().unwrap(), y.parse().unwrap());
        let long: usize = rest.split('v').next().unwrap().parse().unwrap();
        dark[y * side + x..y * side + x + long].fill(true);
    }
    dark
}

/// What an independent reader finds in a picture of these dots, eight points to each.
fn read(dark: &[bool], side: usize) -> String {
    const POINTS: usize = 8;
    let shade = |x: usize, y: usize| {
        let dot = (y / POINTS) * side + x / POINTS;
        if dark[dot] { 0 } else { 255 }
    };
    let size = side * POINTS;
    let mut picture = rqrr::PreparedImage::prepare_from_greyscale(size, size, shade);
    let grids = picture.detect_grids();
    assert_eq!(grids.len(), 1);
    grids[0].decode().unwrap().1
}

/// What it finds in each code on a page.
fn read_all(page: &Seen) -> Vec<String> {
    let html = page.html();
    let codes = Selector::parse("svg.label-code").unwrap();
    let drawn = Selector::parse("path.label-dots").unwrap();
    html.select(&codes)
        .map(|svg| {
            let side = svg.value().attr("viewBox").unwrap();
            let side: usize = side.rsplit(' ').next().unwrap().parse().unwrap();
            let path = svg.select(&drawn).next().unwrap();
            read(&dots(path.value().attr("d").unwrap(), side), side)
        })
        .collect()
}

#[tokio::test]
async fn an_independent_reader_reads_the_lot_from_its_label() {
    let desk = Desk::start().await;
    let program = desk.full_program("manager").await;
    let material = path(&added(&program, &gypsum()).await);
    let mut ids = Vec::new();
    for code in ["G-1", "G-2"] {
        let lot = json!({"code": code, "use_by": "2027-05-31", "in_use": true});
        let lot = program.post(&format!("{material}/lots"), &lot).await;
        ids.push(lot.body["id"].as_str().unwrap().to_owned());
    }
    let browser = desk.browser("brewer").await;
    let one = browser.open(&format!("/shelf/labels?lot={}", ids[0])).await;
    assert_eq!(
        read_all(&one),
        [format!("LEAT:LOT:{}", ids[0]).to_uppercase()]
    );
    let words = one.words();
    for there in [
        "CaSO₄·2H₂O",
        "Lot G-1",
        "2027-05-31",
        "Follow the safety data sheet",
    ] {
        assert!(words.contains(there), "{there}: {words}");
    }
    // No style of its own, which the page may not have.
    assert!(!one.text.contains("style="), "{}", one.text);
    let many = format!("/shelf/labels?lot={}&lot={}&copies=3", ids[0], ids[1]);
    assert_eq!(read_all(&browser.open(&many).await).len(), 6);
    let small = format!("/shelf/labels?lot={}&size=small&copies=3", ids[0]);
    assert_eq!(read_all(&browser.open(&small).await).len(), 1);
    let choose = browser.open("/shelf/labels?lot=nothing&copies=1e308").await;
    assert!(read_all(&choose).is_empty());
    assert!(
        choose.words().contains("Gypsum, lot G-2"),
        "{}",
        choose.words()
    );
}

#[test]
fn a_label_with_a_blot_on_it_still_reads() {
    let lot = leat::id::MaterialLotId::new();
    let code = leat::shelf::labels::code(lot).unwrap();
    // Version 3: 29 dots, and four of white on each side (ISO/IEC 18004).
    assert_eq!(code.side, 29 + 8);
    let mut dark = dots(&code.path, code.side);
    for y in 14..19 {
        let from = y * code.side + 26;
        dark[from..from + 6].fill(true);
    }
    assert_eq!(read(&dark, code.side), leat::shelf::labels::payload(lot));
}
