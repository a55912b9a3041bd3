//! How much is on the shelf: deliveries, counts, and what was weighed out.
//!
//! Nothing here is stored as a sum. The [`Stock`] of a lot is what the last count found,
//! or nothing before the first, plus what was delivered since, less what was weighed out
//! of it since. A lot without a count or a delivery is *not counted*, which is not zero;
//! and more weighed out than ever came is shown as it is, because then somebody should
//! count. A slip is corrected by another [`Movement`], and both stay to be read.

use std::collections::HashMap;

use chemistry::quantity::DoseAmount;

use crate::id::{MaterialId, MaterialLotId, MovementId, UtcTime};

pub mod api;
pub mod entered;
pub mod operations;
pub mod pages;
pub mod store;
pub mod words;

/// How much is there, in the unit a material is measured out in: less than nothing where
/// more was weighed out than was delivered.
#[derive(Clone, Copy, Debug, Default, PartialEq, PartialOrd)]
pub struct Stock(f64);

impl Stock {
    /// This much, g or mL; NaN becomes nothing.
    pub fn of(g_or_ml: f64) -> Self {
        Self(if g_or_ml.is_nan() { 0.0 } else { g_or_ml })
    }

    /// The number, g or mL.
    pub const fn get(self) -> f64 {
        self.0
    }

    /// What can be taken from it: never less than nothing.
    pub fn there(self) -> DoseAmount {
        DoseAmount::clamped(self.0)
    }

    /// Whether more was weighed out than was delivered.
    pub fn is_overdrawn(self) -> bool {
        self.0 < 0.0
    }

    /// What remains after this much is taken.
    #[must_use]
    pub fn less(self, taken: DoseAmount) -> Self {
        Self(self.0 - taken.get())
    }
}

/// What happened to a lot.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum MovementKind {
    /// So much came.
    Delivery,
    /// So much was there when somebody looked.
    Count,
    /// What it corrects never happened.
    Removal,
}

impl MovementKind {
    /// Every kind.
    pub const ALL: [Self; 3] = [Self::Delivery, Self::Count, Self::Removal];

    /// As stored and sent.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Delivery => "delivery",
            Self::Count => "count",
            Self::Removal => "removal",
        }
    }

    /// The kind with this key.
    pub fn from_key(key: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|kind| kind.key() == key)
    }

    /// As the record book tells what was done to a lot.
    pub const fn deed(self) -> &'static str {
        match self {
            Self::Delivery => "delivered",
            Self::Count => "counted",
            Self::Removal => "took back a movement of",
        }
    }
}

/// A delivery, a count, or the removal of one that was entered by mistake.
#[derive(Clone, Debug, PartialEq)]
pub struct Movement {
    /// Its identifier.
    pub id: MovementId,
    /// Of which lot.
    pub lot_id: MaterialLotId,
    /// What happened.
    pub kind: MovementKind,
    /// How much came, or was there.
    pub amount: DoseAmount,
    /// When.
    pub at: UtcTime,
    /// Who delivered it.
    pub supplier: Option<String>,
    /// The number of the delivery note.
    pub delivery_note: Option<String>,
    /// Why it corrects another, or why a count is not what was expected.
    pub reason: Option<String>,
    /// The movement it takes the place of.
    pub corrects: Option<MovementId>,
    /// When it was entered.
    pub entered_at: UtcTime,
    /// Who entered it.
    pub entered_by: String,
}

/// One dose that was weighed out of a lot.
#[derive(Clone, Debug, PartialEq)]
pub struct Taken {
    /// How much.
    pub amount: DoseAmount,
    /// When.
    pub at: UtcTime,
    /// Who weighed it out.
    pub by: String,
    /// The plan it belongs to.
    pub plan: crate::id::PlanId,
    /// The batch.
    pub batch: String,
}

/// How much of one lot there is.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct LotLevel {
    /// Which lot.
    pub lot_id: MaterialLotId,
    /// Of which material.
    pub material_id: MaterialId,
    /// Whether it is still on the shelf.
    pub in_use: bool,
    /// How much there is; `None`: never counted and no delivery entered.
    pub stock: Option<Stock>,
    /// When it was last counted.
    pub counted_at: Option<UtcTime>,
}

/// How much of a material there is, all lots on the shelf together.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct MaterialLevel {
    /// The lots whose stock is known; `None`: of none it is.
    pub stock: Option<Stock>,
    /// How many lots are on the shelf whose stock nobody knows.
    pub not_counted: usize,
}

/// How much there is of everything, at one moment.
#[derive(Clone, Debug, Default)]
pub struct Levels {
    lots: HashMap<MaterialLotId, LotLevel>,
    materials: HashMap<MaterialId, MaterialLevel>,
}

impl FromIterator<LotLevel> for Levels {
    fn from_iter<I: IntoIterator<Item = LotLevel>>(lots: I) -> Self {
        let mut levels = Self::default();
        for lot in lots {
            levels.lots.insert(lot.lot_id, lot);
            if !lot.in_use {
                continue;
            }
            let of_material = levels.materials.entry(lot.material_id).or_default();
            match lot.stock {
                None => of_material.not_counted += 1,
                Some(stock) => {
                    let before = of_material.stock.unwrap_or_default();
                    of_material.stock = Some(Stock::of(before.get() + stock.get()));
                }
            }
        }
        levels
    }
}

/// A material of which more is planned than there is.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Shortage {
    /// Which material.
    pub material_id: MaterialId,
    /// How much is planned, g or mL.
    pub planned: DoseAmount,
    /// How much there is.
    pub stock: Stock,
}

impl Levels {
    /// One lot.
    pub fn lot(&self, id: MaterialLotId) -> Option<LotLevel> {
        self.lots.get(&id).copied()
    }

    /// All lots of a material that are on the shelf.
    pub fn material(&self, id: MaterialId) -> MaterialLevel {
        self.materials.get(&id).copied().unwrap_or_default()
    }

    /// Of which materials less is there than these planned amounts come to together, in
    /// the order they are first named. A material some of whose lots nobody counted is
    /// not said to be short.
    pub fn shortages(
        &self,
        planned: impl IntoIterator<Item = (MaterialId, DoseAmount)>,
    ) -> Vec<Shortage> {
        let mut wanted: Vec<(MaterialId, f64)> = Vec::new();
        for (id, amount) in planned {
            match wanted.iter_mut().find(|(known, _)| *known == id) {
                Some((_, sum)) => *sum += amount.get(),
                None => wanted.push((id, amount.get())),
            }
        }
        wanted
            .into_iter()
            .filter_map(|(material_id, planned)| {
                let level = self.material(material_id);
                let stock = level.stock.filter(|_| level.not_counted == 0)?;
                (planned > stock.get()).then(|| Shortage {
                    material_id,
                    planned: DoseAmount::clamped(planned),
                    stock,
                })
            })
            .collect()
    }
}

/// How long a lot lasts, from what batches took.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Use {
    /// How many batches it is from.
    pub batches: usize,
    /// What one of them took on average, g or mL.
    pub per_batch: DoseAmount,
}
