//! What wrong, careless and hostile requests get: a sentence, and nothing saved by halves.
//!
//! [`forms`] types poison into every form that pages offer, [`bodies`] sends it to every
//! endpoint of the description, [`rights`] asks as everybody for everything, [`door`]
//! tries the locks, [`races`] lets many write at once.

use serde_json::{Value, json};

use crate::brewhouse::{Brewhouse, made};
use crate::desk::Answer;

mod bodies;
mod description;
mod door;
mod forms;
mod races;
mod rights;

/// A brewery with a plan in every state and something of everything.
pub struct LivedIn {
    pub house: Brewhouse,
    pub material: String,
    pub material_lot: String,
    pub movement: String,
    pub attachment: String,
    pub malt: String,
    pub malt_lot: String,
    pub titration: String,
    pub water_test: String,
    pub plan: String,
    pub approved: String,
    pub dose: String,
    pub dosed: String,
    pub check: String,
    pub meter: String,
    pub calibration: String,
    pub liquor_check: String,
}

fn first(list: &Value) -> String {
    list["items"][0]["id"].as_str().unwrap().to_owned()
}

/// Something that came.
pub fn delivery() -> Value {
    json!({"kind": "delivery", "amount_g_or_ml": 25_000, "moved_at": "2026-11-02", "supplier": "Osier & Daughters"})
}

impl LivedIn {
    pub async fn build() -> Self {
        let house = Brewhouse::build().await;
        let program = &house.manager;
        let material = first(&program.get("/materials").await.body);
        let lot = json!({"code": "G-1", "current": true, "in_use": true});
        let lots = format!("/materials/{material}/lots");
        let material_lot = made(&program.post(&lots, &lot).await);
        let movements = format!("{lots}/{material_lot}/movements");
        let movement = made(&program.post(&movements, &delivery()).await);
        let certificates = format!("{lots}/{material_lot}/certificates");
        let file = program.request("POST", &certificates).body("%PDF-1.7");
        let file = file.header("content-type", "application/pdf");
        let attachment = made(&Answer::of(file.send().await.unwrap()).await);
        let malt = first(&program.get("/malts").await.body);
        let lot = json!({"code": "M-1", "wort_ph": 5.9, "in_use": true});
        let malt_lot = made(&program.post(&format!("/malts/{malt}/lots"), &lot).await);
        let titration = program
            .post(
                &format!("/malts/{malt}/lots/{malt_lot}/titrations"),
                &titration(),
            )
            .await;
        assert_eq!(titration.status, 201, "{:?}", titration.body);
        let titration = titration.body["titrations"][0]["id"]
            .as_str()
            .unwrap()
            .to_owned();
        let tests = program
            .get(&format!("/sources/{}/water-tests", house.source))
            .await;
        let water_test = first(&tests.body);
        let plan = house.draft("26-301").await;
        let approved = house.approved("26-302").await;
        let dose = house.doses(&approved).await[0]["id"]
            .as_str()
            .unwrap()
            .to_owned();
        let dosed = house.dosed("26-303").await;
        let check = made(&house.read(&dosed, 5.62, 12.0).await);
        let closed = house.dosed("26-304").await;
        house.read(&closed, 5.42, 12.0).await;
        let closing = program
            .post(&format!("/plans/{closed}/closing"), &json!({}))
            .await;
        assert_eq!(closing.status, 201, "{:?}", closing.body);
        let meter =
            json!({"name": "Cellar meter", "kind": "bench", "compensated": true, "in_use": true});
        let meter = made(&program.post("/meters", &meter).await);
        let calibrations = format!("/meters/{meter}/calibrations");
        let calibration = made(&program.post(&calibrations, &calibration()).await);
        let tested = json!({"alkalinity_mg_per_l_as_caco3": 60});
        let tests = format!("/plans/{dosed}/liquor-checks");
        let liquor_check = made(&program.post(&tests, &tested).await);
        Self {
            liquor_check,
            house,
            material,
            material_lot,
            movement,
            attachment,
            malt,
            malt_lot,
            titration,
            water_test,
            plan,
            approved,
            dose,
            dosed,
            check,
            meter,
            calibration,
        }
    }

    /// How many rows each table holds, but for sessions and the keys of requests, which
    /// are no part of what a request asks for.
    pub async fn rows(&self) -> Vec<(String, i64)> {
        let mut reader = self.house.desk.app.db.reader().await.unwrap();
        let tables: Vec<(String,)> = sqlx::query_as(
            "SELECT name FROM sqlite_schema WHERE type = 'table' AND name NOT LIKE 'sqlite_%'
             AND name NOT IN ('sessions', 'request_keys', '_sqlx_migrations')",
        )
        .fetch_all(&mut *reader)
        .await
        .unwrap();
        let counts: Vec<String> = tables
            .iter()
            .map(|(name,)| format!("SELECT '{name}', count(*) FROM {name}"))
            .collect();
        sqlx::query_as(sqlx::AssertSqlSafe(counts.join(" UNION ALL ")))
            .fetch_all(&mut *reader)
            .await
            .unwrap()
    }
}

/// Five jars of 50 g around pH 5.4 with 0.1 meq/mL; made up, and smooth enough to be
/// believed.
pub fn titration() -> Value {
    json!({
        "tested_on": "2026-11-03", "malt_g": 50, "acid_meq_per_ml": 0.1, "base_meq_per_ml": 0.1,
        "jars": [
            {"acid_ml": 0, "ph": 5.80}, {"acid_ml": 3.7, "ph": 5.60}, {"acid_ml": 7.5, "ph": 5.40},
            {"acid_ml": 11.6, "ph": 5.20}, {"base_ml": 3.7, "ph": 6.00},
        ],
    })
}

/// Two fresh buffers in a good electrode; made up.
pub fn calibration() -> Value {
    json!({
        "method": "millivolts", "temperature_c": 20,
        "buffers": [
            {"buffer": "technical_7", "lot": "B-7", "reading_mv": -5},
            {"buffer": "technical_4", "lot": "B-4", "use_by": "2030-01-01", "reading_mv": 165},
        ],
    })
}

/// What is typed where something else belongs. Each is refused somewhere and taken
/// somewhere else; those that are refused most come first.
pub const POISONS: [&str; 17] = [
    "",
    "bell \u{7} and \u{202e}turned",
    "null \0 here",
    "-1",
    "NaN",
    "inf",
    "1e308",
    "-1e308",
    "1e-320",
    "15",
    "3,7",
    "1.234,5",
    "twelve",
    "2999-12-31",
    "' OR 1=1; --",
    "<script>alert(1)</script>",
    "01a231ad-09d6-71d1-a3b4-0727f742da8c",
];

/// Longer than any field takes.
pub fn long() -> String {
    "é".repeat(6_000)
}
