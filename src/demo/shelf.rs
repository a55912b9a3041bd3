//! What the invented brewery holds, how it came, and what of it needs looking after.

use jiff::civil::Date;
use serde_json::{Value, json};

use super::{body, days_before};
use crate::db::Db;
use crate::error::Error;
use crate::people::Member;
use crate::shelf;

/// One material and the lot it is weighed from.
struct Held {
    material: Value,
    vessels: &'static [&'static str],
    lot: Value,
    /// What came, and how many days ago, g or mL.
    deliveries: &'static [(f64, i64)],
}

/// Who delivers what. Invented, like everything here.
const SUPPLIER: &str = "Osier & Daughters, brewers' sundries";

fn held(today: Date) -> [Held; 7] {
    let ago = |days| days_before(today, days).to_string();
    [
        Held {
            material: json!({"name": "Gypsum", "substance": "gypsum", "price_per_kg_or_l": 1.9, "reorder_below_g_or_ml": 5_000}),
            vessels: &["liquor_tank", "mash", "kettle"],
            lot: json!({"code": "GY-31", "assay_percent": 99}),
            deliveries: &[(25_000.0, 140), (5_000.0, 20)],
        },
        // Opened, and not assayed since.
        Held {
            material: json!({"name": "Calcium chloride flakes", "substance": "calcium_chloride_dihydrate", "price_per_kg_or_l": 2.6, "reorder_below_g_or_ml": 5_000}),
            vessels: &["liquor_tank", "mash", "kettle"],
            lot: json!({"code": "CC-07", "opened_on": ago(41)}),
            deliveries: &[(10_000.0, 140), (10_000.0, 60)],
        },
        // Little is left.
        Held {
            material: json!({"name": "Epsom salt", "substance": "epsom_salt", "price_per_kg_or_l": 2.2, "reorder_below_g_or_ml": 5_000}),
            vessels: &["liquor_tank", "kettle"],
            lot: json!({"code": "EP-12", "assay_percent": 99.5}),
            deliveries: &[(4_000.0, 140)],
        },
        // Nobody counted it.
        Held {
            material: json!({"name": "Table salt", "substance": "sodium_chloride", "price_per_kg_or_l": 0.9}),
            vessels: &["kettle"],
            lot: json!({"code": "NS-03"}),
            deliveries: &[],
        },
        // Past the day its maker vouches for.
        Held {
            material: json!({"name": "Baking soda", "substance": "sodium_bicarbonate", "price_per_kg_or_l": 1.4}),
            vessels: &["mash"],
            lot: json!({"code": "SB-19", "assay_percent": 99, "use_by": ago(12)}),
            deliveries: &[(10_000.0, 140)],
        },
        Held {
            material: json!({
                "name": "Lactic acid 80 %", "substance": "lactic_acid", "scale_step_g_or_ml": 5, "price_per_kg_or_l": 4.2,
                "strength": {"percent": 80, "density_g_per_ml": 1.19}, "tolerance_percent": 1.5, "reorder_below_g_or_ml": 5_000,
            }),
            vessels: &["mash", "sparge_liquor", "kettle"],
            lot: json!({"code": "LA-44"}),
            deliveries: &[(20_000.0, 140), (5_000.0, 35)],
        },
        Held {
            material: json!({
                "name": "Phosphoric acid 75 %", "substance": "phosphoric_acid", "scale_step_g_or_ml": 5, "price_per_kg_or_l": 5.1,
                "strength": {"percent": 75, "density_g_per_ml": 1.579}, "reorder_below_g_or_ml": 5_000,
            }),
            vessels: &["mash", "sparge_liquor", "kettle"],
            lot: json!({"code": "PH-05", "use_by": days_before(today, -24).to_string()}),
            deliveries: &[(25_000.0, 140), (25_000.0, 35)],
        },
    ]
}

/// Stocks the shelf: materials, a lot of each, what was delivered, and one count.
pub(super) async fn fill_shelf(db: &Db, by: &Member, today: Date) -> Result<(), Error> {
    for held in held(today) {
        let Held {
            mut material,
            mut lot,
            vessels,
            deliveries,
        } = held;
        material["in_use"] = true.into();
        if material["scale_step_g_or_ml"].is_null() {
            material["scale_step_g_or_ml"] = 1.into();
        }
        for vessel in vessels {
            material["vessels"][*vessel] = true.into();
        }
        let material: shelf::Material =
            body::<shelf::entered::NewMaterialBody>(material)?.try_into()?;
        let material = shelf::operations::create(db, by, material).await?;
        lot["received_on"] = days_before(today, 140).to_string().into();
        lot["current"] = true.into();
        lot["in_use"] = true.into();
        let lot = shelf::operations::create_lot(db, by, material.id, body(lot)?).await?;
        let mut note = 1_000;
        for (amount, days) in deliveries {
            note += 37;
            let delivery = body(json!({
                "kind": "delivery", "amount_g_or_ml": amount, "moved_at": days_before(today, *days).to_string(),
                "supplier": SUPPLIER, "delivery_note": format!("D-{note}"),
            }))?;
            shelf::stock::operations::enter(db, by, material.id, lot.id, &delivery).await?;
        }
        if material.name == "Gypsum" {
            let count = body(json!({
                "kind": "count", "amount_g_or_ml": 22_400, "moved_at": format!("{}T15:30", days_before(today, 25)),
                "reason": "A bag split on the pallet; what was swept up was thrown away.",
            }))?;
            shelf::stock::operations::enter(db, by, material.id, lot.id, &count).await?;
        }
    }
    Ok(())
}
