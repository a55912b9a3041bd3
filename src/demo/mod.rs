//! An invented brewery to try Leat with: three sources with two years of tests, six
//! beers from very pale to very dark, a stocked shelf, two pH meters, plans in every state.
//!
//! Everything goes in through the same operations as real entries do, checked and
//! written down. Nothing in it is a measurement, and it proves nothing.

use jiff::ToSpan;
use jiff::civil::Date;
use serde::de::DeserializeOwned;
use serde_json::{Value, json};

use crate::beers::{self, NewBeer};
use crate::brewery::{self, Settings};
use crate::db::Db;
use crate::error::Error;
use crate::id::{BeerId, MaltId};
use crate::input::Problems;
use crate::malts;
use crate::people::operations::{self as people, NewAccount};
use crate::people::passwords::Passwords;
use crate::people::{Member, Role};
use crate::web::format;

mod batches;
mod meters;
mod shelf;
mod water;

use batches::fill_plans;
use meters::fill_meters;
use shelf::fill_shelf;
use water::fill_sources;

/// The password of everybody in the invented brewery. The page to sign in says so.
pub const PASSWORD: &str = "open the sluice";

/// Fills an empty database. One that holds accounts is left as it is.
pub async fn fill(db: &Db, passwords: &Passwords) -> Result<(), Error> {
    if !people::nobody_yet(db).await? {
        return Ok(());
    }
    let settings = Settings {
        name: "Sedge and Sluice Brewery".into(),
        time_zone: "UTC".into(),
        ..Settings::default()
    };
    brewery::operations::begin_demo(db, settings).await?;
    let manager = first(db, passwords).await?;
    for (login, name) in [("qa", "Quill Assay"), ("brewer", "Rush Mashman")] {
        people::create(db, &manager, passwords, account(login, name, login)?).await?;
    }
    let today = format::today("UTC");
    let mut chance = Chance(0x5eed_1ea7);
    fill_sources(db, &manager, today, &mut chance).await?;
    fill_shelf(db, &manager, today).await?;
    let malts = fill_malts(db, &manager, today).await?;
    let beers = fill_beers(db, &manager, &malts).await?;
    let meter = fill_meters(db, &manager, &mut chance).await?;
    fill_plans(db, &manager, today, &beers, meter, &mut chance).await
}

fn account(login: &str, name: &str, role: &str) -> Result<NewAccount, Error> {
    let mut problems = Problems::new();
    let account = NewAccount::check(login, name, role, PASSWORD, &mut problems);
    problems.finish()?;
    account.ok_or_else(|| Error::internal("A demo account is not complete", login.to_owned()))
}

async fn first(db: &Db, passwords: &Passwords) -> Result<Member, Error> {
    let account = people::create_first(
        db,
        passwords,
        account("manager", "Marsh Leatward", "manager")?,
    )
    .await?;
    Ok(Member {
        id: account.id,
        name: account.name,
        role: Role::Manager,
        scopes: None,
        by_pin: false,
    })
}

/// A body as the API would take it.
fn body<T: DeserializeOwned>(value: Value) -> Result<T, Error> {
    serde_json::from_value(value)
        .map_err(|error| Error::internal("A demo entry cannot be read", error))
}

/// Numbers that look like chance and are the same every time (a linear congruential
/// generator with the constants of Knuth's MMIX).
struct Chance(u64);

impl Chance {
    /// From −1 to 1.
    fn next(&mut self) -> f64 {
        self.0 = self
            .0
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1_442_695_040_888_963_407);
        // 31 bits: every one of them is exact in an f64.
        f64::from((self.0 >> 33) as u32) / f64::from(1_u32 << 30) - 1.0
    }

    /// About normal with this standard deviation: the sum of twelve.
    fn about(&mut self, sd: f64) -> f64 {
        (0..12).map(|_| self.next()).sum::<f64>() / 2.0 * sd
    }
}

fn days_before(today: Date, days: i64) -> Date {
    today.checked_sub(days.days()).unwrap_or(today)
}

async fn fill_malts(db: &Db, by: &Member, today: Date) -> Result<Vec<MaltId>, Error> {
    let mut made = Vec::new();
    for (name, class, ebc, wort_ph, lot) in [
        ("Fenland pilsner malt", "pilsner", 3.5, Some(5.92), "P-220"),
        ("Fenland pale malt", "pale_ale", 6.0, Some(5.86), "M-118"),
        ("Wheat malt", "wheat", 4.0, None, "W-41"),
        ("Munich malt, light", "munich_light", 16.0, None, "U-77"),
        ("Crystal malt, medium", "crystal", 150.0, None, "C-09"),
        ("Amber malt", "high_kilned", 65.0, None, "A-23"),
        ("Chocolate malt", "roasted", 950.0, None, "R-14"),
        ("Roast barley", "roasted", 1300.0, None, "R-52"),
        ("Flaked barley", "raw_grain", 3.0, None, "F-30"),
        ("Acidulated malt", "acidulated", 4.0, None, "S-02"),
    ] {
        let malt: malts::Malt = body::<malts::entered::NewMaltBody>(json!({
            "name": name, "class": class, "colour": ebc, "colour_unit": "ebc", "supplier": "Withy Bank Maltings", "in_use": true,
        }))?
        .try_into()?;
        let malt = malts::operations::create(db, by, malt).await?;
        let lot = body(json!({
            "code": lot, "received_on": days_before(today, 60).to_string(), "wort_ph": wort_ph, "current": true, "in_use": true,
        }))?;
        malts::operations::create_lot(db, by, malt.id, lot).await?;
        made.push(malt.id);
    }
    Ok(made)
}

/// Places in the list of malts.
const PILSNER: usize = 0;
const PALE: usize = 1;
const WHEAT: usize = 2;
const MUNICH: usize = 3;
const CRYSTAL: usize = 4;
const AMBER: usize = 5;
const CHOCOLATE: usize = 6;
const ROAST_BARLEY: usize = 7;
const FLAKED: usize = 8;

/// A pH as somebody would type it.
fn to_hundredths(ph: f64) -> f64 {
    (ph * 100.0).round() / 100.0
}

async fn fill_beers(db: &Db, by: &Member, malts: &[MaltId]) -> Result<Vec<BeerId>, Error> {
    let mut made = Vec::new();
    let window = |low: f64, preferred: f64, high: f64, priority: &str| json!({"low": low, "preferred": preferred, "high": high, "priority": priority});
    for (name, grist, mash, sparge, calcium, sulfate, chloride, target) in [
        (
            "Reedlight Lager",
            &[(PILSNER, 345.0)][..],
            1150.0,
            1450.0,
            window(30.0, 45.0, 80.0, "high"),
            window(20.0, 40.0, 80.0, "middle"),
            window(20.0, 45.0, 80.0, "middle"),
            5.35,
        ),
        (
            "Sluice Pale",
            &[(PALE, 380.0), (WHEAT, 22.0)],
            1220.0,
            1500.0,
            window(60.0, 90.0, 150.0, "high"),
            window(100.0, 150.0, 220.0, "middle"),
            window(40.0, 60.0, 100.0, "middle"),
            5.4,
        ),
        (
            "Mill Tail Bitter",
            &[(PALE, 330.0), (CRYSTAL, 26.0)],
            1080.0,
            1520.0,
            window(60.0, 90.0, 150.0, "high"),
            window(80.0, 120.0, 200.0, "middle"),
            window(50.0, 70.0, 110.0, "middle"),
            5.4,
        ),
        (
            "Weir Red",
            &[(PALE, 250.0), (MUNICH, 120.0), (CRYSTAL, 32.0)],
            1210.0,
            1480.0,
            window(50.0, 75.0, 140.0, "high"),
            window(40.0, 70.0, 140.0, "middle"),
            window(50.0, 80.0, 120.0, "middle"),
            5.42,
        ),
        (
            "Lock Porter",
            &[
                (PALE, 330.0),
                (AMBER, 34.0),
                (CRYSTAL, 26.0),
                (CHOCOLATE, 24.0),
            ],
            1250.0,
            1450.0,
            window(50.0, 75.0, 140.0, "high"),
            window(20.0, 50.0, 100.0, "low"),
            window(50.0, 80.0, 120.0, "middle"),
            5.45,
        ),
        (
            "Deep Sump Stout",
            &[
                (PALE, 320.0),
                (FLAKED, 52.0),
                (ROAST_BARLEY, 44.0),
                (CHOCOLATE, 12.0),
            ],
            1300.0,
            1420.0,
            window(50.0, 75.0, 140.0, "high"),
            window(15.0, 40.0, 90.0, "low"),
            window(50.0, 75.0, 120.0, "middle"),
            5.48,
        ),
    ] {
        let lines: Vec<Value> = grist
            .iter()
            .filter_map(|(malt, kilograms)| {
                Some(json!({"malt_id": malts.get(*malt)?.to_string(), "kilograms": kilograms}))
            })
            .collect();
        let new = NewBeer::try_from(body::<beers::api::NewBeerBody>(json!({
            "name": name, "batch_l": 2000.0, "mash_l": mash, "sparge_l": sparge, "grist": lines, "in_use": true,
            "spec": {
                "calcium_mg_per_l": calcium, "sulfate_mg_per_l": sulfate, "chloride_mg_per_l": chloride,
                "magnesium_mg_per_l": {"high": 30.0, "priority": "low"}, "sodium_mg_per_l": {"high": 80.0, "priority": "low"},
                "nitrate_mg_per_l": {"high": 40.0, "priority": "low"},
                "mash_calcium_mg_per_l": {"low": 40.0, "high": 200.0, "priority": "middle"},
                "sparge_alkalinity_mg_per_l_as_caco3": {"high": 60.0, "priority": "low"},
                "mash_ph": {"low": to_hundredths(target - 0.1), "target": target, "high": to_hundredths(target + 0.1)},
                "highest_lactate_mg_per_l": 400.0, "highest_sodium_mg_per_l": 120.0,
            },
        }))?)?;
        made.push(beers::operations::create(db, by, new).await?.id);
    }
    Ok(made)
}
