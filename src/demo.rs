//! An invented brewery to try Leat with: three sources with two years of tests, six
//! beers from very pale to very dark, a stocked shelf, plans in every state.
//!
//! Everything goes in through the same operations as real entries do, checked and
//! written down. Nothing in it is a measurement, and it proves nothing.

use std::f64::consts::TAU;

use chemistry::plan::Way;
use chemistry::quantity::{Celsius, DoseAmount, MgPerL, MgPerLAsCaCO3, Minutes, Ph, PhShift};
use chemistry::report::conductivity;
use chemistry::water::MeasuredWater;
use jiff::ToSpan;
use jiff::civil::Date;
use serde::de::DeserializeOwned;
use serde_json::{Value, json};

use crate::beers::{self, NewBeer};
use crate::brewery::{self, Settings};
use crate::db::Db;
use crate::error::Error;
use crate::id::{BeerId, MaltId, PlanId, SourceId};
use crate::input::Problems;
use crate::malts;
use crate::people::operations::{self as people, NewAccount};
use crate::people::passwords::Passwords;
use crate::people::{Member, Role};
use crate::plans::closing::{self, Closing};
use crate::plans::decisions;
use crate::plans::mash_checks::{self, NewMashCheck};
use crate::plans::operations::{self as plans, NewPlan};
use crate::plans::{Plan, Stage, compute, weigh_out};
use crate::shelf;
use crate::sources::water_tests::operations as water_tests;
use crate::sources::{self, NewSource};
use crate::web::format;

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
    let sources = fill_sources(db, &manager, today, &mut chance).await?;
    fill_shelf(db, &manager, today).await?;
    let malts = fill_malts(db, &manager, today).await?;
    let beers = fill_beers(db, &manager, &malts).await?;
    fill_plans(db, &manager, today, &beers, &sources, &mut chance).await
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

/// What a source holds on average, mg/L; alkalinity as CaCO₃. The ions balance.
struct Average {
    calcium: f64,
    magnesium: f64,
    sodium: f64,
    potassium: f64,
    alkalinity: f64,
    sulfate: f64,
    chloride: f64,
    nitrate: f64,
    ph: f64,
}

const MAINS: Average = Average {
    calcium: 96.0,
    magnesium: 11.0,
    sodium: 28.0,
    potassium: 3.5,
    alkalinity: 215.0,
    sulfate: 62.0,
    chloride: 38.0,
    nitrate: 22.0,
    ph: 7.4,
};
const BOREHOLE: Average = Average {
    calcium: 14.0,
    magnesium: 3.2,
    sodium: 12.0,
    potassium: 1.2,
    alkalinity: 42.0,
    sulfate: 11.0,
    chloride: 13.0,
    nitrate: 4.5,
    ph: 7.2,
};
const PERMEATE: Average = Average {
    calcium: 0.8,
    magnesium: 0.2,
    sodium: 3.0,
    potassium: 0.2,
    alkalinity: 6.0,
    sulfate: 0.4,
    chloride: 2.2,
    nitrate: 0.0,
    ph: 7.1,
};

async fn fill_sources(
    db: &Db,
    by: &Member,
    today: Date,
    chance: &mut Chance,
) -> Result<Vec<SourceId>, Error> {
    let mut made = Vec::new();
    for (name, kind, blending, price, every, average, notes) in [
        (
            "Town mains",
            "mains",
            false,
            2.4,
            90,
            &MAINS,
            "Hard; harder in late summer.",
        ),
        (
            "Mill borehole",
            "borehole",
            false,
            0.6,
            180,
            &BOREHOLE,
            "Soft, from the gravel under the mill.",
        ),
        (
            "RO permeate",
            "permeate",
            true,
            5.8,
            180,
            &PERMEATE,
            "From the mains; a third of it goes to the drain.",
        ),
    ] {
        let new = NewSource::try_from(body::<sources::api::SourceBody>(json!({
            "name": name, "kind": kind, "blending": blending, "price_per_m3": price,
            "days_between_tests": every, "notes": notes, "in_use": true,
        }))?)?;
        let source = sources::operations::create(db, by, new).await?;
        let swing = if kind == "mains" { 0.07 } else { 0.02 };
        for days in (0..=720)
            .rev()
            .step_by(if kind == "mains" { 90 } else { 180 })
            .filter(|days| days % 10 == 0)
        {
            let days = i64::from(days) + 12;
            let test = laboratory(average, days, swing, today, chance);
            water_tests::enter(
                db,
                by,
                source.id,
                body::<sources::water_tests::api::WaterTestBody>(test)?.try_into()?,
            )
            .await?;
        }
        if kind == "mains" {
            for days in (1..24).rev().map(|month| i64::from(month) * 30) {
                let level = average.alkalinity * season(days, swing) * (1.0 + chance.about(0.03));
                let drops = (level / 10.0).round() * 10.0;
                let test = json!({
                    "sampled_on": days_before(today, days).to_string(), "laboratory": "Drop kit at the desk",
                    "method": "drop_kit", "drop_mg_per_l_as_caco3": 10,
                    "readings": [{"analyte": "alkalinity", "value": drops.to_string(), "unit": "mg_per_l_as_caco3"}],
                });
                water_tests::enter(
                    db,
                    by,
                    source.id,
                    body::<sources::water_tests::api::WaterTestBody>(test)?.try_into()?,
                )
                .await?;
            }
        }
        made.push(source.id);
    }
    Ok(made)
}

/// Everything in the water rises and falls together over the year.
fn season(days_ago: i64, swing: f64) -> f64 {
    // Whole days of two years: exact.
    1.0 + swing * (TAU * days_ago as f64 / 365.25).sin()
}

fn laboratory(average: &Average, days: i64, swing: f64, today: Date, chance: &mut Chance) -> Value {
    let level = season(days, swing);
    let mut read = |value: f64| value * level * (1.0 + chance.about(0.012));
    let [
        calcium,
        magnesium,
        sodium,
        potassium,
        alkalinity,
        sulfate,
        chloride,
        nitrate,
    ] = [
        average.calcium,
        average.magnesium,
        average.sodium,
        average.potassium,
        average.alkalinity,
        average.sulfate,
        average.chloride,
        average.nitrate,
    ]
    .map(&mut read);
    let mut ions = chemistry::ion::IonMap::from_fn(|_| MgPerL::constant(0.0));
    use chemistry::ion::Ion;
    for (ion, value) in [
        (Ion::Calcium, calcium),
        (Ion::Magnesium, magnesium),
        (Ion::Sodium, sodium),
        (Ion::Potassium, potassium),
        (Ion::Sulfate, sulfate),
        (Ion::Chloride, chloride),
        (Ion::Nitrate, nitrate),
    ] {
        ions[ion] = MgPerL::clamped(value);
    }
    let ph = average.ph + chance.about(0.06);
    let conducts = conductivity(&MeasuredWater {
        ions,
        alkalinity: MgPerLAsCaCO3::clamped(alkalinity),
        ph: Ph::clamped(ph),
        temperature: Celsius::constant(20.0),
    });
    let figure = |value: f64| {
        if value >= 20.0 {
            format!("{value:.0}")
        } else if value >= 2.0 {
            format!("{value:.1}")
        } else {
            format!("{value:.2}")
        }
    };
    let nitrate = if nitrate < 0.5 {
        "<0.5".to_owned()
    } else {
        figure(nitrate)
    };
    json!({
        "sampled_on": days_before(today, days).to_string(),
        "laboratory": "Fen Analytical", "reference": format!("FA-{}", 4000 - days), "method": "laboratory",
        "ph_temperature_celsius": 20,
        "readings": [
            {"analyte": "calcium", "value": figure(calcium), "unit": "mg_per_l"},
            {"analyte": "magnesium", "value": figure(magnesium), "unit": "mg_per_l"},
            {"analyte": "sodium", "value": figure(sodium), "unit": "mg_per_l"},
            {"analyte": "potassium", "value": figure(potassium), "unit": "mg_per_l"},
            {"analyte": "alkalinity", "value": figure(alkalinity), "unit": "mg_per_l_as_caco3"},
            {"analyte": "sulfate", "value": figure(sulfate), "unit": "mg_per_l"},
            {"analyte": "chloride", "value": figure(chloride), "unit": "mg_per_l"},
            {"analyte": "nitrate", "value": nitrate, "unit": "mg_per_l"},
            {"analyte": "ph", "value": format!("{ph:.2}"), "unit": "ph"},
            {"analyte": "conductivity", "value": figure(conducts.get()), "unit": "us_per_cm_25"},
        ],
    })
}

async fn fill_shelf(db: &Db, by: &Member, today: Date) -> Result<(), Error> {
    for (name, substance, strength, step, price, vessels, lot, assay) in [
        (
            "Gypsum",
            "gypsum",
            json!({}),
            1.0,
            1.9,
            &["liquor_tank", "mash", "kettle"][..],
            "GY-31",
            Some(99.0),
        ),
        (
            "Calcium chloride flakes",
            "calcium_chloride_dihydrate",
            json!({}),
            1.0,
            2.6,
            &["liquor_tank", "mash", "kettle"],
            "CC-07",
            None,
        ),
        (
            "Epsom salt",
            "epsom_salt",
            json!({}),
            1.0,
            2.2,
            &["liquor_tank", "kettle"],
            "EP-12",
            Some(99.5),
        ),
        (
            "Table salt",
            "sodium_chloride",
            json!({}),
            1.0,
            0.9,
            &["kettle"],
            "NS-03",
            None,
        ),
        (
            "Baking soda",
            "sodium_bicarbonate",
            json!({}),
            1.0,
            1.4,
            &["mash"],
            "SB-19",
            Some(99.0),
        ),
        (
            "Lactic acid 80 %",
            "lactic_acid",
            json!({"percent": 80, "density_g_per_ml": 1.19}),
            5.0,
            4.2,
            &["mash", "sparge_liquor"],
            "LA-44",
            None,
        ),
        (
            "Phosphoric acid 75 %",
            "phosphoric_acid",
            json!({"percent": 75, "density_g_per_ml": 1.579}),
            5.0,
            5.1,
            &["mash", "sparge_liquor"],
            "PH-05",
            None,
        ),
    ] {
        let ticked = |vessel: &str| vessels.contains(&vessel);
        let material: shelf::Material = body::<shelf::entered::NewMaterialBody>(json!({
            "name": name, "substance": substance, "strength": strength, "scale_step_g_or_ml": step,
            "price_per_kg_or_l": price, "in_use": true,
            "vessels": {"liquor_tank": ticked("liquor_tank"), "mash": ticked("mash"),
                        "sparge_liquor": ticked("sparge_liquor"), "kettle": ticked("kettle")},
        }))?
        .try_into()?;
        let material = shelf::operations::create(db, by, material).await?;
        let lot = body(json!({
            "code": lot, "received_on": days_before(today, 140).to_string(), "assay_percent": assay, "current": true, "in_use": true,
        }))?;
        shelf::operations::create_lot(db, by, material.id, lot).await?;
    }
    Ok(())
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

async fn fill_plans(
    db: &Db,
    by: &Member,
    today: Date,
    beers: &[BeerId],
    sources: &[SourceId],
    chance: &mut Chance,
) -> Result<(), Error> {
    debug_assert!(!sources.is_empty());
    let way = |number: usize| Way::ALL[number % Way::ALL.len()];
    for number in 0..14_usize {
        let days = i64::try_from(14 - number).unwrap_or(0) * 7 + 4;
        let beer = beers[number % beers.len()];
        let batch = format!("26-{:03}", 110 + number);
        let plan = drafted(
            db,
            by,
            batch,
            beer,
            days_before(today, days),
            Way::ClosestToPreferred,
        )
        .await?;
        let plan = decisions::approve(db, by, plan.id, None, None).await?;
        let plan = weighed(db, by, plan, usize::MAX).await?;
        read(db, by, &plan, -0.045 + chance.about(0.035)).await?;
        closing::close(
            db,
            by,
            plan.id,
            None,
            Closing {
                mash_check_id: None,
                counts: true,
                note: None,
            },
        )
        .await?;
    }
    let given_up = drafted(
        db,
        by,
        "26-124".into(),
        beers[2],
        days_before(today, 3),
        way(1),
    )
    .await?;
    decisions::withdraw(db, by, given_up.id, None, "The cold store was full.".into()).await?;

    let dosed = drafted(db, by, "26-125".into(), beers[4], today, way(0)).await?;
    let dosed = decisions::approve(db, by, dosed.id, None, None).await?;
    weighed(db, by, dosed, usize::MAX).await?;

    let begun = drafted(db, by, "26-126".into(), beers[0], today, way(0)).await?;
    let begun = decisions::approve(db, by, begun.id, None, None).await?;
    let revised = decisions::revise(db, by, begun.id).await?;
    let revised = decisions::approve(
        db,
        by,
        revised.id,
        None,
        Some("Moved to the afternoon.".into()),
    )
    .await?;
    weighed(db, by, revised, 1).await?;

    let ready = drafted(
        db,
        by,
        "26-127".into(),
        beers[1],
        today.checked_add(1.days()).unwrap_or(today),
        way(1),
    )
    .await?;
    decisions::approve(db, by, ready.id, None, None).await?;
    drafted(
        db,
        by,
        "26-128".into(),
        beers[3],
        today.checked_add(2.days()).unwrap_or(today),
        way(2),
    )
    .await?;
    drafted(
        db,
        by,
        "26-129".into(),
        beers[5],
        today.checked_add(3.days()).unwrap_or(today),
        way(3),
    )
    .await?;
    Ok(())
}

async fn drafted(
    db: &Db,
    by: &Member,
    batch: String,
    beer_id: BeerId,
    brewed_on: Date,
    way: Way,
) -> Result<Plan, Error> {
    plans::draft(
        db,
        by,
        NewPlan {
            batch,
            beer_id,
            brewed_on,
            way,
            sources: Vec::new(),
        },
    )
    .await
}

/// Weighs the first lines in, as planned.
async fn weighed(db: &Db, by: &Member, plan: Plan, lines: usize) -> Result<Plan, Error> {
    let mut after = plan.clone();
    for dose in plan.doses.iter().take(lines) {
        let lot = plan
            .inputs
            .shelf
            .get(dose.material)
            .map(|label| label.lot.clone())
            .unwrap_or_default();
        let amount = DoseAmount::clamped(dose.planned.get());
        after = weigh_out::weigh(db, by, plan.id, dose.id, amount, lot).await?;
    }
    Ok(after)
}

/// Reads the mash this far from what the balance expects of it.
async fn read(db: &Db, by: &Member, plan: &Plan, off: f64) -> Result<PlanId, Error> {
    let mut untrained = compute::mash_as_weighed(plan);
    untrained.offset.value = PhShift::constant(0.0);
    let expected = untrained
        .predict()
        .map_err(|error| Error::internal("A demo mash has no pH", error))?;
    let shown = ((expected.ph.value.get() + off) * 100.0).round() / 100.0;
    let new = NewMashCheck {
        stage: Stage::Mash,
        minute: Minutes::constant(14.0),
        ph: Ph::clamped(shown),
        sample: Celsius::constant(20.0),
        meter: "Bench meter".into(),
        meter_sd: PhShift::constant(0.03),
        meter_checked: true,
    };
    mash_checks::read(db, by, plan.id, new).await?;
    Ok(plan.id)
}
