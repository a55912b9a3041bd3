//! What is typed about a delivery or a count, and the checks it passes.

use chemistry::quantity::DoseAmount;
use jiff::civil::DateTime;
use jiff::tz::TimeZone;
use serde::{Deserialize, Serialize};

use super::{Movement, MovementKind};
use crate::error::Error;
use crate::id::{MaterialLotId, MovementId, UtcTime};
use crate::input::{Number, Problems, within};

/// A delivery, a count, or the removal of one, as it is entered.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::ToSchema)]
#[serde(default)]
pub struct NewMovementBody {
    /// `delivery`, `count`, or `removal` to take back the movement it corrects.
    #[schema(required = true, min_length = 1)]
    pub kind: String,
    /// How much came, or was there: g for a solid, mL for a liquid. Not for a removal.
    pub amount_g_or_ml: Number,
    /// When: `2026-03-31T06:15:00Z`, or without a zone in the brewery's own, or a day
    /// alone, which is its first moment. Blank: now.
    pub moved_at: String,
    /// Who delivered it.
    pub supplier: String,
    /// The number of the delivery note.
    pub delivery_note: String,
    /// Why it corrects another, or why a count is not what was expected.
    pub reason: String,
    /// The identifier of the movement it takes the place of.
    pub corrects: String,
}

impl From<&Movement> for NewMovementBody {
    fn from(movement: &Movement) -> Self {
        let text = |text: &Option<String>| text.clone().unwrap_or_default();
        Self {
            kind: movement.kind.key().into(),
            amount_g_or_ml: match movement.kind {
                MovementKind::Removal => Number::Missing,
                _ => movement.amount.get().into(),
            },
            moved_at: movement.at.to_string(),
            supplier: text(&movement.supplier),
            delivery_note: text(&movement.delivery_note),
            reason: text(&movement.reason),
            corrects: movement
                .corrects
                .map(|id| id.to_string())
                .unwrap_or_default(),
        }
    }
}

/// Reads a moment: with its zone, in the brewery's, or a day.
fn moment(text: &str, now: UtcTime, zone: &TimeZone) -> Option<UtcTime> {
    let text = text.trim();
    if text.is_empty() {
        return Some(now);
    }
    if let Ok(at) = text.parse::<jiff::Timestamp>() {
        return Some(at.into());
    }
    let local = text.parse::<DateTime>().ok()?;
    let today = now.timestamp().to_zoned_datetime(zone.clone()).date();
    if text.len() <= "2026-03-31".len() && local.date() == today {
        // What came today came just now, after any count of this morning.
        return Some(now);
    }
    let at = local.to_zoned_datetime(zone.clone()).ok()?;
    Some(at.timestamp().into())
}

impl NewMovementBody {
    /// The movement of a lot it describes, entered now by somebody in the brewery's time
    /// zone.
    pub fn movement_of(
        &self,
        lot_id: MaterialLotId,
        by: &str,
        zone: &TimeZone,
    ) -> Result<Movement, Error> {
        let mut problems = Problems::new();
        let now = UtcTime::now();
        let kind = problems.choice("kind", &self.kind, MovementKind::from_key);
        let amount = match kind {
            Some(MovementKind::Removal) => {
                if !self.amount_g_or_ml.is_missing() {
                    problems.add("amount_g_or_ml", "What is taken back has no amount.");
                }
                Some(DoseAmount::constant(0.0))
            }
            _ => {
                let least = match kind {
                    Some(MovementKind::Delivery) => 0.001,
                    _ => 0.0,
                };
                problems.quantity("amount_g_or_ml", &self.amount_g_or_ml, |value| {
                    within(value, "g or mL", least, 1e8).and_then(DoseAmount::new)
                })
            }
        };
        let at = self.at(now, zone, &mut problems);
        let supplier = problems.optional_text("supplier", &self.supplier, 120);
        let delivery_note = problems.optional_text("delivery_note", &self.delivery_note, 120);
        let reason = problems.optional_text("reason", &self.reason, 500);
        let corrects = match self.corrects.trim() {
            "" => None,
            id => match id.parse::<MovementId>() {
                Ok(id) => Some(id),
                Err(_) => {
                    problems.add("corrects", "Send the identifier of a movement of this lot.");
                    None
                }
            },
        };
        if corrects.is_some() && reason.is_none() && self.reason.trim().is_empty() {
            problems.add("reason", "Say what was wrong: the record keeps both.");
        }
        if kind == Some(MovementKind::Removal) && self.corrects.trim().is_empty() {
            problems.add("corrects", "Say which movement is to be taken back.");
        }
        problems.finish()?;
        match (kind, amount, at) {
            (Some(kind), Some(amount), Some(at)) => Ok(Movement {
                id: MovementId::new(),
                lot_id,
                kind,
                amount,
                at,
                supplier,
                delivery_note,
                reason,
                corrects,
                entered_at: now,
                entered_by: by.to_owned(),
            }),
            _ => Err(Error::field("", "Fill in every field.")),
        }
    }

    fn at(&self, now: UtcTime, zone: &TimeZone, problems: &mut Problems) -> Option<UtcTime> {
        let Some(at) = moment(&self.moved_at, now, zone) else {
            problems.add(
                "moved_at",
                "Enter a day, or day and time, for example 2026-03-31 or 2026-03-31T06:15.",
            );
            return None;
        };
        let ahead = at.seconds_since(now);
        let year = at.timestamp().to_zoned_datetime(zone.clone()).year();
        // A minute for clocks that differ.
        let refused = if ahead > 60 {
            Some("That has not come yet. Enter a moment that is past.")
        } else if year < 1980 {
            Some("The year must be 1980 or later.")
        } else {
            None
        };
        if let Some(refused) = refused {
            problems.add("moved_at", refused);
            return None;
        }
        // A form tells minutes: what is entered in this minute is after what was weighed in it.
        Some(if ahead > -60 { now } else { at })
    }
}
