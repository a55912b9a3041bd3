//! A small brewery to plan and brew in: one hard source, four materials, one malt, one
//! beer.

use serde_json::{Value, json};

use crate::desk::{Answer, Browser, Desk, Program, Seen, offered};

/// A water whose ions balance: 96/20.039 + 11/12.1525 + 28/22.99 + 3.5/39.098 = 7.00 meq/L
/// of cations, 215/50.043 + 62/48.028 + 38/35.45 + 22/62.004 = 7.01 of anions (by hand).
pub fn hard_water() -> Value {
    json!({
        "sampled_on": "2026-11-02", "laboratory": "Fen Analytical",
        "readings": [
            {"analyte": "calcium", "value": "96", "unit": "mg_per_l"},
            {"analyte": "magnesium", "value": "11", "unit": "mg_per_l"},
            {"analyte": "sodium", "value": "28", "unit": "mg_per_l"},
            {"analyte": "potassium", "value": "3.5", "unit": "mg_per_l"},
            {"analyte": "alkalinity", "value": "215", "unit": "mg_per_l_as_caco3"},
            {"analyte": "sulfate", "value": "62", "unit": "mg_per_l"},
            {"analyte": "chloride", "value": "38", "unit": "mg_per_l"},
            {"analyte": "nitrate", "value": "22", "unit": "mg_per_l"},
            {"analyte": "ph", "value": "7.4", "unit": "ph"},
        ],
    })
}

/// A brewery with one hard source, three materials, one malt and one beer.
pub struct Brewhouse {
    pub desk: Desk,
    pub manager: Program,
    pub beer: String,
    pub source: String,
    pub meter: String,
}

pub fn made(answer: &Answer) -> String {
    assert_eq!(answer.status, 201, "{:?}", answer.body);
    answer.body["id"].as_str().unwrap().to_owned()
}

impl Brewhouse {
    pub async fn build() -> Self {
        Self::on(hard_water()).await
    }

    pub async fn on(water: Value) -> Self {
        let desk = Desk::start().await;
        let manager = desk.full_program("manager").await;
        let source = json!({"name": "Town mains", "kind": "mains", "days_between_tests": 90, "price_per_m3": 2.4});
        let source = made(&manager.post("/sources", &source).await);
        made(
            &manager
                .post(&format!("/sources/{source}/water-tests"), &water)
                .await,
        );
        for (name, substance, step, vessels) in [
            (
                "Gypsum",
                "gypsum",
                1,
                json!({"liquor_tank": true, "mash": true}),
            ),
            (
                "Calcium chloride",
                "calcium_chloride_dihydrate",
                1,
                json!({"liquor_tank": true, "mash": true}),
            ),
            (
                "Baking soda",
                "sodium_bicarbonate",
                1,
                json!({"mash": true}),
            ),
            (
                "Lactic acid",
                "lactic_acid",
                5,
                json!({"mash": true, "sparge_liquor": true}),
            ),
        ] {
            let material = json!({"name": name, "substance": substance, "scale_step_g_or_ml": step, "vessels": vessels, "in_use": true});
            made(&manager.post("/materials", &material).await);
        }
        let malt = json!({"name": "Pale malt", "class": "pale_ale", "colour": 6, "colour_unit": "ebc", "in_use": true});
        let malt = made(&manager.post("/malts", &malt).await);
        let beer = json!({
            "name": "Sluice Pale", "batch_l": 2000, "mash_l": 1200, "sparge_l": 1500, "in_use": true,
            "grist": [{"malt_id": malt, "kilograms": 400}],
            "spec": {
                "calcium_mg_per_l": {"low": 60, "preferred": 100, "high": 180, "priority": "high"},
                "sulfate_mg_per_l": {"low": 60, "high": 250},
                "chloride_mg_per_l": {"low": 30, "high": 150},
                "mash_ph": {"low": 5.3, "target": 5.4, "high": 5.5},
                "sparge_alkalinity_mg_per_l_as_caco3": {"high": 80},
                "highest_lactate_mg_per_l": 500,
            },
        });
        let beer = made(&manager.post("/beers", &beer).await);
        let meter =
            json!({"name": "Bench meter", "kind": "bench", "compensated": true, "in_use": true});
        let meter = made(&manager.post("/meters", &meter).await);
        let house = Self {
            desk,
            manager,
            beer,
            source,
            meter,
        };
        house.calibrate(&house.meter, "", 97.0).await;
        house
    }

    /// Calibrates a meter as its own display tells it, in fresh buffers 7 and 4; blank: now.
    pub async fn calibrate(&self, meter: &str, at: &str, slope: f64) {
        let body = json!({
            "calibrated_at": at, "method": "display", "temperature_c": 20,
            "buffers": [{"buffer": "technical_7"}, {"buffer": "technical_4"}],
            "slope": slope, "offset_mv": 5,
        });
        made(
            &self
                .manager
                .post(&format!("/meters/{meter}/calibrations"), &body)
                .await,
        );
    }

    pub fn order(&self, batch: &str) -> Value {
        json!({"batch": batch, "beer_id": self.beer, "brewed_on": "2026-12-02", "way": "fewest_additions"})
    }

    pub async fn draft(&self, batch: &str) -> String {
        made(&self.manager.post("/plans", &self.order(batch)).await)
    }

    pub async fn approved(&self, batch: &str) -> String {
        let id = self.draft(batch).await;
        let answer = self
            .manager
            .post(&format!("/plans/{id}/approval"), &json!({}))
            .await;
        assert_eq!(answer.status, 201, "{:?}", answer.body);
        id
    }

    pub async fn dosed(&self, batch: &str) -> String {
        let id = self.approved(batch).await;
        for dose in self.doses(&id).await {
            let path = format!("/plans/{id}/doses/{}", dose["id"].as_str().unwrap());
            let answer = self
                .manager
                .put(&path, &json!({"actual": dose["planned"], "lot": "A1"}))
                .await;
            assert_eq!(answer.status, 200, "{:?}", answer.body);
        }
        id
    }

    pub async fn plan(&self, id: &str) -> Value {
        let answer = self.manager.get(&format!("/plans/{id}")).await;
        assert_eq!(answer.status, 200, "{:?}", answer.body);
        answer.body
    }

    pub async fn doses(&self, id: &str) -> Vec<Value> {
        self.manager
            .get(&format!("/plans/{id}/doses"))
            .await
            .body
            .as_array()
            .unwrap()
            .clone()
    }

    /// Reads the mash with the calibrated meter, cooled sample.
    pub async fn read(&self, id: &str, ph: f64, minute: f64) -> Answer {
        self.read_with(id, json!({"ph": ph, "minute": minute}))
            .await
    }

    /// Reads with these fields over those of a cooled sample in the calibrated meter.
    pub async fn read_with(&self, id: &str, over: Value) -> Answer {
        let mut body = json!({"sample_c": 20, "meter_id": self.meter});
        for (name, value) in over.as_object().unwrap() {
            body[name] = value.clone();
        }
        self.manager
            .post(&format!("/plans/{id}/mash-checks"), &body)
            .await
    }
}

/// Where the form of the first line still to be weighed posts to.
pub fn weigh_form(page: &Seen) -> String {
    let html = page.html();
    let forms = scraper::Selector::parse("form[action]").unwrap();
    html.select(&forms)
        .map(|form| form.value().attr("action").unwrap().to_owned())
        .find(|action| {
            let after = action.split("/doses/").nth(1);
            after.is_some_and(|after| !after.contains('/'))
        })
        .unwrap_or_else(|| panic!("nothing to weigh on {}: {}", page.path, page.words()))
}

/// Taps “As planned” on the first line still to be weighed, with these fields filled in.
pub async fn as_planned(browser: &Browser, page: &Seen, typed: &[(&str, &str)]) -> Seen {
    let action = weigh_form(page);
    let mut fields = offered(page, &action, typed);
    fields.push(("as_planned".into(), "yes".into()));
    browser.post(&action, &fields).await
}

pub fn expected_ph(plan: &Value) -> f64 {
    plan["does"]["mash_ph"]["ph"].as_f64().unwrap()
}
