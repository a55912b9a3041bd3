//! What whoever keeps the shelf should look after.

use jiff::civil::Date;

use super::stock::{MaterialLevel, Stock};
use super::{Material, MaterialLot};

/// Days before its use-by date from which a lot is warned of. Source: assumed.
const NEAR: i32 = 30;

/// Days after which a pack that stands open should be assayed again: as long as it takes
/// to go two thirds of its way to damp, see
/// [`OPENED_TIME`](chemistry::material::Substance::OPENED_TIME).
const OPEN_LONG: i32 = 30;

/// Something to look after.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Warning {
    /// Less is there than the brewery wants.
    Low,
    /// More was weighed out than was delivered.
    Overdrawn,
    /// The maker vouches for it no longer.
    PastUseBy,
    /// The maker vouches for it for so many more days.
    NearUseBy(i32),
    /// It has stood open for so many days, and changes with the air.
    OpenLong(i32),
}

impl Warning {
    /// As the API sends it.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Low => "low",
            Self::Overdrawn => "overdrawn",
            Self::PastUseBy => "past_use_by",
            Self::NearUseBy(_) => "near_use_by",
            Self::OpenLong(_) => "open_long",
        }
    }

    /// The kind of its badge.
    pub const fn badge(self) -> &'static str {
        match self {
            Self::Low => "below",
            Self::Overdrawn | Self::PastUseBy => "overdue",
            Self::NearUseBy(_) | Self::OpenLong(_) => "due",
        }
    }

    /// In a few words.
    pub fn words(self) -> String {
        match self {
            Self::Low => "low: buy more".into(),
            Self::Overdrawn => "count it".into(),
            Self::PastUseBy => "past its use-by day".into(),
            Self::NearUseBy(0) => "use by today".into(),
            Self::NearUseBy(1) => "use by tomorrow".into(),
            Self::NearUseBy(days) => format!("use within {days} days"),
            Self::OpenLong(days) => format!("open {days} days: assay it"),
        }
    }
}

/// What is to be looked after about a lot that is still on the shelf.
pub fn of_lot(
    material: &Material,
    lot: &MaterialLot,
    stock: Option<Stock>,
    today: Date,
) -> Vec<Warning> {
    let mut warnings = Vec::new();
    if !lot.in_use {
        return warnings;
    }
    if stock.is_some_and(Stock::is_overdrawn) {
        warnings.push(Warning::Overdrawn);
    }
    if let Some(use_by) = lot.use_by {
        match (use_by - today).get_days() {
            ..0 => warnings.push(Warning::PastUseBy),
            days @ 0..=NEAR => warnings.push(Warning::NearUseBy(days)),
            _ => {}
        }
    }
    if material.substance.opened_assay().is_some()
        && let Some(since) = lot.open_since()
        && let days @ OPEN_LONG.. = (today - since).get_days()
    {
        warnings.push(Warning::OpenLong(days));
    }
    warnings
}

/// What is to be looked after about a material in use: less of it than wanted, and its
/// current lot.
pub fn of_material(
    material: &Material,
    level: MaterialLevel,
    current: Option<(&MaterialLot, Option<Stock>)>,
    today: Date,
) -> Vec<Warning> {
    if !material.in_use {
        return Vec::new();
    }
    let mut warnings = Vec::new();
    if let Some((stock, wanted)) = level.stock.zip(material.reorder_below)
        && stock.get() < wanted.get()
    {
        warnings.push(Warning::Low);
    }
    if let Some((lot, stock)) = current {
        warnings.extend(of_lot(material, lot, stock, today));
    }
    warnings
}
