//! Which lot a dose was taken from: picked, scanned or typed.

use jiff::civil::Date;
use sqlx::SqliteConnection;

use crate::error::Error;
use crate::id::MaterialLotId;
use crate::plans::Lot;
use crate::shelf::{self, Material, MaterialLot};

/// A lot as somebody names it.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub enum LotNamed {
    /// Not told.
    #[default]
    Untold,
    /// Picked from the lots of the shelf.
    Picked(MaterialLotId),
    /// Read from its label.
    Scanned(MaterialLotId),
    /// The code on the pack.
    Code(String),
}

/// What the code on a lot's label begins with; the lot's identifier follows.
pub const LABEL: &str = "LEAT:LOT:";

impl LotNamed {
    /// What was typed or scanned: a label of the shelf, or the code on a pack.
    pub fn read(text: &str) -> Result<Self, &'static str> {
        let text = text.trim();
        let label = text
            .get(..LABEL.len())
            .filter(|start| start.eq_ignore_ascii_case(LABEL));
        match label {
            _ if text.is_empty() => Ok(Self::Untold),
            None => Ok(Self::Code(text.to_owned())),
            Some(_) => text[LABEL.len()..]
                .trim()
                .parse()
                .map(Self::Scanned)
                .map_err(|_| {
                    "This label could not be read whole. Scan it again, or type the code on the pack."
                }),
        }
    }
}

/// The lot of a dose, with what it is on the day of the brew. A code that the
/// shelf does not know is kept as it is told. `wanted`: the material of the dose.
pub(super) async fn find(
    conn: &mut SqliteConnection,
    wanted: Option<&Material>,
    name: &str,
    on: Date,
    named: LotNamed,
) -> Result<Lot, Error> {
    let (lot, field) = match named {
        LotNamed::Untold => return Ok(Lot::default()),
        LotNamed::Picked(id) => (by_id(conn, id, "material_lot_id").await?, "material_lot_id"),
        LotNamed::Scanned(id) => (by_id(conn, id, "lot").await?, "lot"),
        LotNamed::Code(code) => {
            let known = match wanted {
                Some(wanted) => shelf::operations::lot_by_code(conn, wanted.id, &code).await?,
                None => None,
            };
            match known {
                Some(lot) => (lot, "lot"),
                None => {
                    return Ok(Lot {
                        code,
                        ..Lot::default()
                    });
                }
            }
        }
    };
    match wanted.filter(|wanted| wanted.id == lot.material_id) {
        Some(wanted) => Ok(Lot {
            material: Some(wanted.chemistry(Some(&lot), on)),
            id: Some(lot.id),
            code: lot.code,
        }),
        None => {
            let other = shelf::operations::material_of_dose(conn, lot.material_id).await?;
            let other = other.map_or("another material".to_owned(), |other| other.name);
            Err(Error::field(
                field,
                format!(
                    "That is lot {} of {other}. This line takes {name}: put it back and fetch the right pack.",
                    lot.code
                ),
            ))
        }
    }
}

async fn by_id(
    conn: &mut SqliteConnection,
    id: MaterialLotId,
    field: &str,
) -> Result<MaterialLot, Error> {
    shelf::operations::lot_of_dose(conn, id)
        .await?
        .ok_or_else(|| {
            Error::field(
                field,
                "The shelf has no such lot. Type the code on the pack instead.",
            )
        })
}

/// The lots that a dose may be taken from, of all of its material.
pub fn to_choose_from(lots: &[MaterialLot]) -> impl Iterator<Item = &MaterialLot> {
    lots.iter().filter(|lot| lot.in_use)
}
