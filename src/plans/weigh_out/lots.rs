//! Which lot a dose was taken from: picked, scanned or typed.

use sqlx::SqliteConnection;

use crate::db::Db;
use crate::error::Error;
use crate::id::{MaterialId, MaterialLotId};
use crate::people::Member;
use crate::plans::{Dose, Lot, Plan};
use crate::shelf::{self, MaterialLot};

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
    pub fn read(text: &str) -> Result<Self, Error> {
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
                    Error::field(
                        "lot",
                        "This label could not be read whole. Scan it again, or type the code on the pack.",
                    )
                }),
        }
    }
}

/// The lot of a dose, with what it is on the day of the brew. A code that the
/// shelf does not know is kept as it is told.
pub(super) async fn find(
    conn: &mut SqliteConnection,
    plan: &Plan,
    dose: &Dose,
    named: LotNamed,
) -> Result<Lot, Error> {
    let wanted = plan.inputs.shelf.get(dose.material).and_then(|it| it.id);
    let (id, field) = match named {
        LotNamed::Untold => return Ok(Lot::default()),
        LotNamed::Picked(id) => (id, "material_lot_id"),
        LotNamed::Scanned(id) => (id, "lot"),
        LotNamed::Code(code) => {
            let known = match wanted {
                Some(material) => shelf::operations::lot_by_code(conn, material, &code).await?,
                None => None,
            };
            match known {
                Some(id) => (id, "lot"),
                None => {
                    return Ok(Lot {
                        code,
                        ..Lot::default()
                    });
                }
            }
        }
    };
    let found = shelf::operations::lot_of_dose(conn, id).await?;
    let (material, lot) = found.ok_or_else(|| {
        Error::field(
            field,
            "The shelf has no such lot. Type the code on the pack instead.",
        )
    })?;
    if wanted != Some(material.id) {
        let wanted = plan.inputs.problem.shelf.get(dose.material);
        let wanted = wanted.map_or("another material", |item| item.name.as_str());
        return Err(Error::field(
            field,
            format!(
                "That is lot {} of {}. This line takes {wanted}: put it back and fetch the right pack.",
                lot.code, material.name
            ),
        ));
    }
    Ok(Lot {
        material: Some(material.chemistry(Some(&lot), plan.brewed_on)),
        id: Some(lot.id),
        code: lot.code,
    })
}

/// The lots of a material that a dose may be taken from, the current one first.
pub async fn to_choose_from(
    db: &Db,
    by: &Member,
    material: Option<MaterialId>,
) -> Result<Vec<MaterialLot>, Error> {
    let Some(material) = material else {
        return Ok(Vec::new());
    };
    let mut lots = shelf::operations::lots(db, by, material).await?;
    lots.retain(|lot| lot.in_use);
    Ok(lots)
}
