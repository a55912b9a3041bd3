//! SQL for tracing. It reads the tables of others and writes none.

use chemistry::material::Vessel;
use chemistry::quantity::{DoseAmount, Fraction, Kilograms};
use sqlx::{QueryBuilder, Row, Sqlite, SqliteConnection, sqlite::SqliteRow};

use super::{Known, Part, PersonBehind, Reached, TestBehind};
use crate::error::Error;
use crate::id::{DoseId, MaltLotId, MaterialLotId, MemberId, PlanId, WaterTestId};
use crate::plans::State;
use crate::shelf::{Material, MaterialLot};

fn unreadable(error: impl Into<Box<dyn std::error::Error + Send + Sync>>) -> Error {
    Error::internal("A stored batch cannot be read", error)
}

fn reached(row: &SqliteRow, part: Part) -> Result<Reached, Error> {
    Ok(Reached {
        plan_id: row.try_get("plan_id")?,
        batch: row.try_get("batch")?,
        revision: row.try_get("revision")?,
        beer_id: row.try_get("beer_id")?,
        beer_name: row.try_get("beer_name")?,
        brewed_on: row
            .try_get::<&str, _>("brewed_on")?
            .parse()
            .map_err(unreadable)?,
        state: State::from_key(row.try_get("state")?).ok_or_else(|| unreadable("unknown state"))?,
        part,
    })
}

pub(super) async fn of_material_lot(
    db: &mut SqliteConnection,
    material: &Material,
    lot: &MaterialLot,
) -> Result<Vec<Reached>, Error> {
    let rows = sqlx::query(
        "WITH wanted (dose_id) AS (
             SELECT id FROM doses WHERE material_lot_id = ?1
             UNION SELECT dose_id FROM plan_corrections WHERE material_lot_id = ?1
             UNION SELECT doses.id FROM doses JOIN plans ON plans.id = plan_id
                   WHERE material_lot_id IS NULL AND lot = ?2 COLLATE NOCASE
                     AND json_extract(inputs, '$.shelf[' || material || '].material_id') = ?3
         )
         SELECT plans.id AS plan_id, plans.batch, plans.revision, plans.beer_id, plans.beer_name, plans.brewed_on,
                plans.state, dose.vessel, dose.actual, dose.weighed_at, dose.weighed_by, dose.material_lot_id,
                corrected.says_now, corrected.material_lot_id AS corrected_lot_id
         FROM wanted JOIN doses_in AS dose ON dose.id = wanted.dose_id JOIN plans ON plans.id = dose.plan_id
         LEFT JOIN plan_corrections AS corrected ON corrected.id = (
             SELECT id FROM plan_corrections WHERE dose_id = dose.id AND what = 'lot'
             ORDER BY corrected_at DESC, id DESC LIMIT 1)
         WHERE dose.actual > 0
         ORDER BY plans.brewed_on DESC, dose.weighed_at DESC",
    )
    .bind(lot.id)
    .bind(&lot.code)
    .bind(material.id)
    .fetch_all(db)
    .await?;
    let part = |row: &SqliteRow| -> Result<Part, Error> {
        let written: Option<MaterialLotId> = row.try_get("material_lot_id")?;
        let corrected: Option<MaterialLotId> = row.try_get("corrected_lot_id")?;
        let says_now: Option<String> = row.try_get("says_now")?;
        Ok(Part::Dose {
            vessel: Vessel::from_key(row.try_get("vessel")?)
                .ok_or_else(|| unreadable("unknown vessel"))?,
            amount: DoseAmount::clamped(row.try_get("actual")?),
            unit: material.unit(),
            at: row.try_get("weighed_at")?,
            by: row
                .try_get::<Option<String>, _>("weighed_by")?
                .unwrap_or_default(),
            known: match says_now {
                Some(_) if corrected == Some(lot.id) => Known::ByCorrection,
                Some(says_now) => Known::CorrectedTo(says_now),
                None if written == Some(lot.id) => Known::Picked,
                None => Known::ByCode,
            },
        })
    };
    rows.iter().map(|row| reached(row, part(row)?)).collect()
}

/// Plans of which an entry of the book names the thing: kind `?1`, identifier `?2`. What an
/// approved revision replaced is not counted, nor what was withdrawn as a draft.
const PLANS_ABOUT: &str = "
    WITH plan AS (
        SELECT id AS plan_id, batch, revision, beer_id, beer_name, brewed_on, state, inputs, shares
        FROM plans
        WHERE id IN (SELECT subject_id FROM record_links JOIN record_entries USING (seq)
                     WHERE kind = ?1 AND id = ?2 AND subject_kind = 'plan')
          AND (state <> 'withdrawn' OR approved_at IS NOT NULL)
          AND NOT EXISTS (SELECT 1 FROM plans AS later
                          WHERE later.replaces = plans.id AND later.approved_at IS NOT NULL)
    )";

pub(super) async fn of_malt_lot(
    db: &mut SqliteConnection,
    id: MaltLotId,
) -> Result<Vec<Reached>, Error> {
    let mut query = QueryBuilder::<Sqlite>::new(PLANS_ABOUT);
    query.push(
        " SELECT plan_id, batch, revision, beer_id, beer_name, brewed_on, state,
                CAST(sum(malt.value ->> 'kilograms') AS REAL) AS kilograms
         FROM plan, json_each(plan.inputs, '$.grist') AS malt
         WHERE malt.value ->> 'malt_lot_id' = ?2
         GROUP BY plan_id ORDER BY brewed_on DESC, plan_id DESC",
    );
    let rows = query
        .build()
        .bind("malt lot")
        .bind(id)
        .fetch_all(db)
        .await?;
    let part =
        |row: &SqliteRow| Ok::<_, Error>(Part::Malt(Kilograms::clamped(row.try_get("kilograms")?)));
    rows.iter().map(|row| reached(row, part(row)?)).collect()
}

pub(super) async fn of_water_test(
    db: &mut SqliteConnection,
    id: WaterTestId,
) -> Result<Vec<Reached>, Error> {
    let mut query = QueryBuilder::<Sqlite>::new(PLANS_ABOUT);
    query.push(
        " SELECT plan_id, batch, revision, beer_id, beer_name, brewed_on, state,
                CAST(sum(share.value) AS REAL) AS share
         FROM plan, json_each(plan.inputs, '$.sources') AS source
         JOIN json_each(plan.shares) AS share ON share.key = source.key
         WHERE share.value > 0
           AND EXISTS (SELECT 1 FROM json_each(source.value, '$.water_test_ids') AS test WHERE test.value = ?2)
         GROUP BY plan_id ORDER BY brewed_on DESC, plan_id DESC"
    );
    let rows = query
        .build()
        .bind("water test")
        .bind(id)
        .fetch_all(db)
        .await?;
    let part =
        |row: &SqliteRow| Ok::<_, Error>(Part::Water(Fraction::clamped(row.try_get("share")?)));
    rows.iter().map(|row| reached(row, part(row)?)).collect()
}

/// What corrections say of the lots of doses, the earliest first.
pub(super) async fn corrected_lots(
    db: &mut SqliteConnection,
    plan: PlanId,
) -> Result<Vec<(DoseId, Option<MaterialLotId>, String)>, Error> {
    Ok(sqlx::query_as(
        "SELECT dose_id, material_lot_id, says_now FROM plan_corrections
         WHERE plan_id = ? AND what = 'lot' ORDER BY corrected_at, id",
    )
    .bind(plan)
    .fetch_all(db)
    .await?)
}

pub(super) async fn test(
    db: &mut SqliteConnection,
    id: WaterTestId,
    source: &str,
    share: Fraction,
) -> Result<Option<TestBehind>, Error> {
    let row = sqlx::query(
        "SELECT source_id, sampled_on, laboratory, reference, withdrawn_at IS NOT NULL AS withdrawn
         FROM water_tests WHERE id = ?",
    )
    .bind(id)
    .fetch_optional(db)
    .await?;
    row.map(|row| {
        Ok(TestBehind {
            id,
            source_id: row.try_get("source_id")?,
            source: source.to_owned(),
            share,
            sampled_on: row
                .try_get::<&str, _>("sampled_on")?
                .parse()
                .map_err(unreadable)?,
            laboratory: row.try_get("laboratory")?,
            reference: row.try_get("reference")?,
            withdrawn: row.try_get("withdrawn")?,
        })
    })
    .transpose()
}

/// Everybody who wrote something about a batch into the book or stood by, in the order they came to it.
pub(super) async fn people(
    db: &mut SqliteConnection,
    batch: &str,
) -> Result<Vec<PersonBehind>, Error> {
    let rows: Vec<(Option<MemberId>, String, String, i64)> = sqlx::query_as(
        "SELECT member_id, member_name, deed, count(*) FROM (
             SELECT seq, member_id, member_name, action || ' ' || subject_kind AS deed
             FROM record_entries
             WHERE seq IN (SELECT seq FROM record_links WHERE kind = 'batch' AND id = ?1)
             UNION ALL
             SELECT 9223372036854775807, dose.witness_id, dose.witness_name, 'second person at the scale'
             FROM doses AS dose JOIN doses_in USING (id)
             WHERE doses_in.batch = ?1 AND dose.witness_name IS NOT NULL
         ) GROUP BY member_id, member_name, deed ORDER BY min(seq)",
    )
    .bind(batch)
    .fetch_all(db)
    .await?;
    let mut people: Vec<PersonBehind> = Vec::new();
    for (id, name, deed, times) in rows {
        match people.iter_mut().find(|it| it.id == id && it.name == name) {
            Some(person) => person.deeds.push((deed, times)),
            None => people.push(PersonBehind {
                id,
                name,
                deeds: vec![(deed, times)],
            }),
        }
    }
    Ok(people)
}
