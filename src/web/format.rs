//! Figures and dates as people read them: the one place that rounds.

use crate::id::UtcTime;

/// A number with this many decimals; the minus sign is a real one, and a rounded
/// zero has none.
pub fn decimals(value: f64, decimals: usize) -> String {
    let text = format!("{value:.decimals$}");
    let zero = text
        .trim_start_matches('-')
        .chars()
        .all(|c| matches!(c, '0' | '.'));
    match text.strip_prefix('-') {
        Some(positive) if zero => positive.to_owned(),
        Some(positive) => format!("\u{2212}{positive}"),
        None => text,
    }
}

/// A concentration or another everyday figure: three significant digits, no
/// exponent.
pub fn figure(value: f64) -> String {
    let size = value.abs();
    let places = if size >= 100.0 || size == 0.0 {
        0
    } else if size >= 10.0 {
        1
    } else if size >= 1.0 {
        2
    } else {
        3
    };
    decimals(value, places)
}

/// How far a figure may be out: two significant digits from 0.01 up.
pub fn doubt(sd: f64) -> String {
    let size = sd.abs();
    let places = if size >= 9.95 {
        0
    } else if size >= 0.995 {
        1
    } else if size >= 0.0995 {
        2
    } else {
        3
    };
    decimals(sd, places)
}

/// A figure somebody entered: as many digits as it has, at most four that count.
pub fn entered(value: f64) -> String {
    let rounded: f64 = format!("{value:.3e}").parse().unwrap_or(value);
    let text = rounded.to_string();
    match text.strip_prefix('-') {
        Some(positive) => format!("\u{2212}{positive}"),
        None => text,
    }
}

/// A pH, two decimals.
pub fn ph(value: f64) -> String {
    decimals(value, 2)
}

/// A share as a percentage without decimals.
pub fn percent(share: f64) -> String {
    format!("{} %", decimals(share * 100.0, 0))
}

/// A dose to the step of its scale.
pub fn stepped(value: f64, step: f64) -> String {
    let places = if step >= 1.0 {
        0
    } else if step >= 0.1 {
        1
    } else if step >= 0.01 {
        2
    } else {
        3
    };
    decimals(value, places)
}

/// A moment in the brewery's time zone: `2026-03-31 14:05`.
pub fn moment(at: UtcTime, time_zone: &str) -> String {
    let zone = jiff::tz::TimeZone::get(time_zone).unwrap_or(jiff::tz::TimeZone::UTC);
    at.timestamp()
        .to_zoned_datetime(zone)
        .strftime("%Y-%m-%d %H:%M")
        .to_string()
}

/// A time of day in the brewery's time zone: `14:05`.
pub fn clock(at: UtcTime, time_zone: &str) -> String {
    let zone = jiff::tz::TimeZone::get(time_zone).unwrap_or(jiff::tz::TimeZone::UTC);
    at.timestamp()
        .to_zoned_datetime(zone)
        .strftime("%H:%M")
        .to_string()
}

/// Today's date in the brewery's time zone.
pub fn today(time_zone: &str) -> jiff::civil::Date {
    let zone = jiff::tz::TimeZone::get(time_zone).unwrap_or(jiff::tz::TimeZone::UTC);
    jiff::Timestamp::now().to_zoned_datetime(zone).date()
}

/// What the last form did, by the key a redirect carries as `?done=`.
pub fn done_sentence(key: &str) -> Option<&'static str> {
    Some(match key {
        "saved" => "Saved.",
        "created" => "Created.",
        "withdrawn" => "Withdrawn. It stays in the record book.",
        "approved" => "Approved. Its inputs are frozen.",
        "unapproved" => "The approval was taken back.",
        "revised" => "A new revision was begun.",
        "read" => "Read anew: water, beer, malts and shelf are as they are now.",
        "taken_back" => "Taken back: that line is not in.",
        "dosed" => "Saved: that dose is in.",
        "dosed_of_unknown" => {
            "Saved: that dose is in. The shelf has no lot of that code: it is kept as it was typed."
        }
        "dose_corrected" => "Corrected. What stood there before stays to be read.",
        "measured" => "The reading is saved.",
        "calibrated" => "The calibration is saved.",
        "closed" => "The batch is closed.",
        "corrected" => "The correction is written down.",
        "password" => "The password is changed. Sign in with it from now on.",
        "pin" => "The PIN is set. It opens Leat on every enrolled tablet.",
        "enrolled" => {
            "This tablet is enrolled. Whoever has a PIN picks a name here; you are signed out."
        }
        "signed_out" => "Signed out everywhere.",
        "revoked" => "Revoked. It no longer opens anything.",
        "removed" => "Removed.",
        "retired" => "Retired. It stays in the history and can be taken back.",
        "restored" => "Taken back into use.",
        _ => return None,
    })
}
