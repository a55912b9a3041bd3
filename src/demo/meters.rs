//! The pH meters of the invented brewery: one on the bench, read in buffers before every
//! brew, and a handheld that only shows its slope and is growing old.

use chemistry::electrode::{Buffer, Electrode};
use chemistry::quantity::{Celsius, Millivolts, Ph, SlopePercent};
use serde_json::json;

use super::{Chance, body, days_before};
use crate::db::Db;
use crate::error::Error;
use crate::id::{MeterId, UtcTime};
use crate::meters::{Meter, entered::NewMeterBody, operations};
use crate::people::Member;

/// Once a week at first, every working day in the last months: days ago.
fn days() -> Vec<i64> {
    let weekly = (9..=104).rev().map(|week| 7 * week);
    let daily = (0..60).rev().filter(|day| day % 7 < 5);
    weekly.chain(daily).collect()
}

/// Enters both meters and their calibrations; the last were made this morning and
/// yesterday. The first is the one to read with.
pub(super) async fn fill_meters(
    db: &Db,
    by: &Member,
    chance: &mut Chance,
) -> Result<MeterId, Error> {
    let bench = added(
        db,
        by,
        json!({
            "name": "Bench meter", "kind": "bench", "serial": "LB-2204", "resolution_ph": 0.01,
            "compensated": true, "in_use": true, "notes": "Electrode kept in storage solution, never in water.",
        }),
    )
    .await?;
    for day in days() {
        on_the_bench(db, by, bench, day, chance).await?;
    }
    let handheld = added(
        db,
        by,
        json!({
            "name": "Handheld by the tun", "kind": "handheld", "serial": "H-7", "resolution_ph": 0.1,
            "compensated": true, "in_use": true,
        }),
    )
    .await?;
    for month in (0..12_u16).rev() {
        let slope = 93.4 + 0.3 * f64::from(month) + chance.about(0.15);
        let offset = 14.0 - 0.8 * f64::from(month) + chance.about(1.5);
        let calibration = json!({
            "calibrated_at": hours_ago(24 * 30 * i64::from(month) + 20).to_string(),
            "method": "display", "temperature_c": 21, "slope": slope.round(), "offset_mv": offset.round(),
            "buffers": [{"buffer": "technical_7"}, {"buffer": "technical_4"}],
        });
        operations::calibrate(db, by, handheld, body(calibration)?).await?;
    }
    Ok(bench)
}

async fn added(db: &Db, by: &Member, meter: serde_json::Value) -> Result<MeterId, Error> {
    let meter: Meter = body::<NewMeterBody>(meter)?.try_into()?;
    Ok(operations::create(db, by, meter).await?.id)
}

fn hours_ago(hours: i64) -> UtcTime {
    UtcTime::now().plus_seconds(-3600 * hours)
}

/// Two buffers, by the millivolts; a new bottle of each every quarter.
async fn on_the_bench(
    db: &Db,
    by: &Member,
    meter: MeterId,
    days_ago: i64,
    chance: &mut Chance,
) -> Result<(), Error> {
    let at = hours_ago(24 * days_ago + 1);
    #[allow(clippy::cast_precision_loss, reason = "two years of days")]
    let age = 1.0 - days_ago as f64 / 728.0;
    let electrode = Electrode {
        slope: SlopePercent::clamped(99.6 - 3.2 * age),
        offset: Millivolts::clamped(3.0 - 12.0 * age),
    };
    let temperature = to_tenths(20.5 + chance.about(0.8));
    let quarter = (728 - days_ago) / 91 + 1;
    let today = crate::web::format::today("UTC");
    // Good for half a year from when it was opened.
    let use_by = days_before(today, 728 - 91 * (quarter - 1) - 182);
    let mut buffers = Vec::new();
    for (buffer, lot) in [(Buffer::Technical7, "B7"), (Buffer::Technical4, "B4")] {
        let at = Celsius::clamped(temperature);
        let ph = buffer.ph(at).unwrap_or(Ph::constant(7.0));
        let reading = electrode.millivolts(ph, at).get() + chance.about(0.4);
        buffers.push(json!({
            "buffer": buffer.key(), "lot": format!("{lot}-{quarter:02}"), "use_by": use_by.to_string(),
            "reading_mv": to_tenths(reading),
        }));
    }
    let calibration = json!({
        "calibrated_at": at.to_string(), "method": "millivolts", "temperature_c": temperature, "buffers": buffers,
    });
    let (_, made) = operations::calibrate(db, by, meter, body(calibration)?).await?;
    if days_ago == 210 {
        let reason = "The 4 was poured from a bottle that had stood open.";
        operations::withdraw(db, by, meter, made.id, reason).await?;
    }
    Ok(())
}

/// A figure as a meter shows it.
fn to_tenths(value: f64) -> f64 {
    (value * 10.0).round() / 10.0
}
