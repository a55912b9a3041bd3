//! SQL for the one row of settings.

use std::time::Duration;

use chemistry::material::Vessel;
use chemistry::quantity::{Estimate, Fraction};
use chemistry::report::LimitSet;
use sqlx::{Row, SqliteConnection};

use super::{SecondPerson, Settings, Units, mash_settings};
use crate::error::Error;

pub(super) async fn find(db: &mut SqliteConnection) -> Result<Option<Settings>, Error> {
    let row = sqlx::query(
        "SELECT name, units, time_zone, currency, potable_limits, calcium_share, calcium_share_sd,
                co2_lost_share, co2_lost_share_sd, vessel_order, second_person, tablet_idle_minutes, demo, version
         FROM brewery WHERE one = 1",
    )
    .fetch_optional(db)
    .await?;
    let Some(row) = row else { return Ok(None) };
    let estimate = |value: &str, sd: &str| -> Result<Estimate<Fraction>, Error> {
        Ok(Estimate::new(
            Fraction::clamped(row.try_get(value)?),
            row.try_get(sd)?,
        ))
    };
    Ok(Some(Settings {
        name: row.try_get("name")?,
        units: Units::from_key(row.try_get("units")?).unwrap_or(Units::Metric),
        time_zone: row.try_get("time_zone")?,
        currency: row.try_get("currency")?,
        potable_limits: LimitSet::from_key(row.try_get("potable_limits")?)
            .unwrap_or(LimitSet::EuropeanUnion),
        vessel_order: vessel_order(row.try_get("vessel_order")?),
        second_person: SecondPerson::from_key(row.try_get("second_person")?)
            .unwrap_or(SecondPerson::Never),
        tablet_idle: Duration::from_mins(row.try_get::<u32, _>("tablet_idle_minutes")?.into()),
        mash: mash_settings(
            estimate("calcium_share", "calcium_share_sd")?,
            estimate("co2_lost_share", "co2_lost_share_sd")?,
        ),
        demo: row.try_get("demo")?,
        version: row.try_get("version")?,
    }))
}

pub(super) async fn save(
    db: &mut SqliteConnection,
    settings: &Settings,
) -> Result<(), sqlx::Error> {
    sqlx::query(
        "INSERT INTO brewery (one, name, units, time_zone, currency, potable_limits, calcium_share,
                              calcium_share_sd, co2_lost_share, co2_lost_share_sd, vessel_order, second_person,
                              tablet_idle_minutes, demo, version)
         VALUES (1, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)
         ON CONFLICT (one) DO UPDATE SET
             name = excluded.name, units = excluded.units, time_zone = excluded.time_zone,
             currency = excluded.currency, potable_limits = excluded.potable_limits,
             calcium_share = excluded.calcium_share, calcium_share_sd = excluded.calcium_share_sd,
             co2_lost_share = excluded.co2_lost_share, co2_lost_share_sd = excluded.co2_lost_share_sd,
             vessel_order = excluded.vessel_order, second_person = excluded.second_person,
             tablet_idle_minutes = excluded.tablet_idle_minutes, demo = excluded.demo, version = excluded.version",
    )
    .bind(&settings.name)
    .bind(settings.units.key())
    .bind(&settings.time_zone)
    .bind(&settings.currency)
    .bind(settings.potable_limits.key())
    .bind(settings.mash.calcium_release.value.get())
    .bind(settings.mash.calcium_release.sd)
    .bind(settings.mash.carbon_dioxide_lost.value.get())
    .bind(settings.mash.carbon_dioxide_lost.sd)
    .bind(settings.vessel_order.map(Vessel::key).join(","))
    .bind(settings.second_person.key())
    .bind(settings.idle_minutes())
    .bind(settings.demo)
    .bind(settings.version)
    .execute(db)
    .await?;
    Ok(())
}

/// The schema holds each vessel to stand there once.
fn vessel_order(text: &str) -> [Vessel; 4] {
    let vessels: Vec<Vessel> = text.split(',').filter_map(Vessel::from_key).collect();
    vessels.try_into().unwrap_or(Vessel::ALL)
}
