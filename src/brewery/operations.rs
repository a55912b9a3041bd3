//! Reading and changing the settings.

use std::time::Duration;

use chemistry::material::Vessel;
use chemistry::quantity::{Estimate, Fraction};
use chemistry::report::LimitSet;

use super::api::SettingsBody;
use super::{SecondPerson, Settings, Units, mash_settings, store};
use crate::db::Db;
use crate::error::Error;
use crate::input::{Problems, within};
use crate::people::{Member, Permission};
use crate::record;

/// The settings in force; the defaults until somebody changes them.
pub async fn settings(db: &Db) -> Result<Settings, Error> {
    Ok(store::find(&mut *db.reader().await?)
        .await?
        .unwrap_or_default())
}

/// Today's date in the brewery's time zone.
pub async fn today(db: &Db) -> Result<jiff::civil::Date, Error> {
    Ok(crate::web::format::today(&settings(db).await?.time_zone))
}

impl TryFrom<SettingsBody> for Settings {
    type Error = Error;

    fn try_from(body: SettingsBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let name = problems.text("name", &body.name, 80);
        let units = problems.choice("units", &body.units, Units::from_key);
        let zone = problems
            .text("time_zone", &body.time_zone, 60)
            .filter(|zone| {
                let known = jiff::tz::TimeZone::get(zone).is_ok();
                if !known {
                    problems.add(
                        "time_zone",
                        "Enter a time zone of the IANA list, for example Europe/Vienna or UTC.",
                    );
                }
                known
            });
        let currency = problems.text("currency", &body.currency, 8);
        let limits = problems.choice("potable_limits", &body.potable_limits, LimitSet::from_key);
        let vessel_order = vessel_order(&body.vessel_order, &mut problems);
        let second_person =
            problems.choice("second_person", &body.second_person, SecondPerson::from_key);
        let idle = problems.quantity("tablet_idle_minutes", &body.tablet_idle_minutes, |it| {
            within(it, "min", 1.0, 60.0)
        });
        if idle.is_some_and(|minutes| minutes.fract() != 0.0) {
            problems.add("tablet_idle_minutes", "Enter whole minutes.");
        }
        let mut share = |name: &str, number, sd_name: &str, sd: &crate::input::Number| {
            let value = problems.quantity(name, number, Fraction::new);
            let sd = problems.quantity(sd_name, sd, Fraction::new);
            Some(Estimate::new(value?, sd?.get()))
        };
        let calcium = share(
            "calcium_share",
            &body.calcium_share,
            "calcium_share_sd",
            &body.calcium_share_sd,
        );
        let lost = share(
            "co2_lost_share",
            &body.co2_lost_share,
            "co2_lost_share_sd",
            &body.co2_lost_share_sd,
        );
        problems.finish()?;
        match (
            name,
            units,
            zone,
            currency,
            limits,
            vessel_order,
            second_person,
            idle,
            calcium,
            lost,
        ) {
            (
                Some(name),
                Some(units),
                Some(time_zone),
                Some(currency),
                Some(potable_limits),
                Some(vessel_order),
                Some(second_person),
                Some(idle),
                Some(calcium),
                Some(lost),
            ) => Ok(Self {
                name,
                units,
                time_zone,
                currency,
                potable_limits,
                vessel_order,
                second_person,
                tablet_idle: Duration::from_mins(idle as u64),
                mash: mash_settings(calcium, lost),
                demo: false,
                version: 0,
            }),
            _ => Err(Error::field("", "Fill in every field.")),
        }
    }
}

/// The four vessels, each once.
fn vessel_order(keys: &[String], problems: &mut Problems) -> Option<[Vessel; 4]> {
    let mut vessels = Vec::new();
    for (index, key) in keys.iter().enumerate() {
        let field = format!("vessel_order.{index}");
        let vessel = problems.choice(&field, key, Vessel::from_key)?;
        if vessels.contains(&vessel) {
            problems.add(
                field,
                format!(
                    "The {} stands above already: name each once.",
                    vessel.name()
                ),
            );
            return None;
        }
        vessels.push(vessel);
    }
    let order = vessels.try_into().ok();
    if order.is_none() {
        problems.add(
            "vessel_order",
            "Name the four vessels, liquor_tank, mash, sparge_liquor and kettle, each once.",
        );
    }
    order
}

/// Replaces the settings. `read_version`: the version the caller changed.
pub async fn revise(
    db: &Db,
    by: &Member,
    new: Settings,
    read_version: Option<i64>,
) -> Result<Settings, Error> {
    by.may(Permission::KeepSettings)?;
    let mut tx = db.begin().await?;
    let before = store::find(&mut tx).await?.unwrap_or_default();
    if read_version.is_some_and(|read| read != before.version) {
        return Err(Error::Conflict(
            "Somebody else changed the settings meanwhile. Reload and change them again".into(),
        ));
    }
    let after = Settings {
        demo: before.demo,
        version: before.version + 1,
        ..new
    };
    store::save(&mut tx, &after).await?;
    let entry = record::Change::changed(
        "settings",
        "brewery",
        &after.name,
        &describe(&before),
        &describe(&after),
    );
    record::append(&mut tx, by, entry).await?;
    tx.commit().await?;
    Ok(after)
}

/// Marks the database as an invented brewery's, with its settings.
pub async fn begin_demo(db: &Db, settings: Settings) -> Result<(), Error> {
    let mut tx = db.begin_unkeyed().await?;
    store::save(
        &mut tx,
        &Settings {
            demo: true,
            ..settings
        },
    )
    .await?;
    tx.commit().await?;
    Ok(())
}

fn describe(settings: &Settings) -> serde_json::Value {
    serde_json::to_value(SettingsBody::from(settings)).unwrap_or_default()
}
