//! A database as five years leave it: 2,500 closed batches with their doses, readings and
//! entries of the record book, copied from those of the demo so that every stored text is
//! one the program wrote itself.

use std::path::Path;

use sqlx::sqlite::SqliteConnectOptions;
use sqlx::{AssertSqlSafe, Connection, SqliteConnection};

/// Closed batches of five years.
pub(crate) const BATCHES: i64 = 2_500;
/// Approved batches added to today's.
const BUSY: i64 = 8;
const DAYS: i64 = 5 * 365;

/// The identifier of copy `i`: the first digits of a version-7 identifier are its time, and
/// these are earlier than any the demo made.
const COPIED: &str = "printf('%08x', 26214400 + i) || substr(old.{id}, 9)";

/// Fills the file of a demo that is not running.
pub(crate) async fn fill(file: &Path) {
    let options = SqliteConnectOptions::new()
        .filename(file)
        .foreign_keys(true);
    let mut db = SqliteConnection::connect_with(&options)
        .await
        .expect("the file");
    // Copies are written out of turn, which the record book rightly refuses.
    let triggers: Vec<(String, String)> =
        sqlx::query_as("SELECT name, sql FROM sqlite_master WHERE type = 'trigger'")
            .fetch_all(&mut db)
            .await
            .expect("triggers");
    run(&mut db, "BEGIN").await;
    for (name, _) in &triggers {
        run(&mut db, &format!("DROP TRIGGER {name}")).await;
    }
    run(
        &mut db,
        &format!(
            "CREATE TEMP TABLE copies AS
             WITH RECURSIVE numbers (i) AS (SELECT 1 UNION ALL SELECT i + 1 FROM numbers WHERE i < {BATCHES} + {BUSY}),
                  closed (place, id) AS (SELECT row_number() OVER (ORDER BY id) - 1, id FROM plans WHERE state = 'closed'),
                  open (id) AS (SELECT id FROM plans WHERE state = 'approved' ORDER BY brewed_on DESC LIMIT 1)
             SELECT i, iif(i <= {BATCHES}, {DAYS} - i * {DAYS} / {BATCHES}, 0) AS days,
                    iif(i <= {BATCHES}, (SELECT id FROM closed WHERE place = i % (SELECT count(*) FROM closed)),
                        (SELECT id FROM open)) AS plan_id
             FROM numbers"
        ),
    )
    .await;
    let id = |column: &str| COPIED.replace("{id}", column);
    let moment = |column: &str| {
        let moved = format!("strftime('%Y-%m-%dT%H:%M:%fZ', old.{column}, '-' || days || ' days')");
        (column.to_owned(), moved)
    };
    let mut plan = vec![
        ("id".to_owned(), id("id")),
        ("batch".to_owned(), "'C' || i".to_owned()),
        ("revision".to_owned(), "1".to_owned()),
        ("replaces".to_owned(), "NULL".to_owned()),
        (
            "brewed_on".to_owned(),
            "date('now', '-' || days || ' days')".to_owned(),
        ),
        (
            "outcome".to_owned(),
            "iif(old.outcome IS NULL, NULL, json_set(old.outcome, '$.mash_check_id',
                     printf('%08x', 26214400 + i) || substr(old.outcome ->> 'mash_check_id', 9)))"
                .to_owned(),
        ),
    ];
    plan.extend(["created_at", "inputs_read_at", "approved_at", "closed_at"].map(moment));
    copy(&mut db, "plans", "old.id = copies.plan_id", &plan).await;
    let mut check = vec![
        ("id".to_owned(), id("id")),
        ("plan_id".to_owned(), id("plan_id")),
    ];
    check.extend(["read_at"].map(moment));
    copy(
        &mut db,
        "mash_checks",
        "old.plan_id = copies.plan_id",
        &check,
    )
    .await;
    let mut dose = vec![
        ("id".to_owned(), id("id")),
        ("plan_id".to_owned(), id("plan_id")),
        (
            "mash_check_id".to_owned(),
            format!(
                "iif(old.mash_check_id IS NULL, NULL, {})",
                id("mash_check_id")
            ),
        ),
    ];
    dose.extend(["weighed_at"].map(moment));
    copy(&mut db, "doses", "old.plan_id = copies.plan_id", &dose).await;

    // The entries about each plan, numbered apart from all others.
    run(
        &mut db,
        "CREATE TEMP TABLE entries AS
         SELECT copies.i, copies.days, links.seq, copies.i * 1000 + links.seq + 1000000 AS new_seq
         FROM copies JOIN record_links AS links ON links.kind = 'plan' AND links.id = copies.plan_id",
    )
    .await;
    let own = "iif(old.{kind} IN ('plan', 'dose', 'mash check'), {id}, old.{column})";
    let renamed = |kind: &str, column: &str| {
        own.replace("{kind}", kind)
            .replace("{id}", &id(column))
            .replace("{column}", column)
    };
    let mut entry = vec![
        ("seq".to_owned(), "new_seq".to_owned()),
        (
            "subject_id".to_owned(),
            renamed("subject_kind", "subject_id"),
        ),
    ];
    entry.extend(["at"].map(moment));
    copy_by(
        &mut db,
        "record_entries",
        "entries",
        "old.seq = entries.seq",
        &entry,
    )
    .await;
    let link = [
        ("seq".to_owned(), "new_seq".to_owned()),
        (
            "id".to_owned(),
            format!(
                "iif(old.kind = 'batch', 'C' || i, {})",
                renamed("kind", "id")
            ),
        ),
    ];
    copy_by(
        &mut db,
        "record_links",
        "entries",
        "old.seq = entries.seq",
        &link,
    )
    .await;

    for (_, sql) in &triggers {
        run(&mut db, sql).await;
    }
    run(&mut db, "COMMIT").await;
    let closed: i64 = sqlx::query_scalar("SELECT count(*) FROM plans WHERE state = 'closed'")
        .fetch_one(&mut db)
        .await
        .expect("a count");
    assert!(closed >= BATCHES, "{closed} closed plans");
    db.close().await.expect("the file");
}

async fn copy(db: &mut SqliteConnection, table: &str, on: &str, changed: &[(String, String)]) {
    copy_by(db, table, "copies", on, changed).await;
}

/// Copies rows of a table with some columns changed, and every other column as it is.
async fn copy_by(
    db: &mut SqliteConnection,
    table: &str,
    list: &str,
    on: &str,
    changed: &[(String, String)],
) {
    let columns: Vec<String> = sqlx::query_scalar("SELECT name FROM pragma_table_info(?)")
        .bind(table)
        .fetch_all(&mut *db)
        .await
        .expect("columns");
    let values: Vec<String> = columns
        .iter()
        .map(|column| {
            let change = changed.iter().find(|(name, _)| name == column);
            change.map_or_else(|| format!("old.{column}"), |(_, value)| value.clone())
        })
        .collect();
    let sql = format!(
        "INSERT INTO {table} ({}) SELECT {} FROM {list} JOIN {table} AS old ON {on} ORDER BY i",
        columns.join(", "),
        values.join(", ")
    );
    run(db, &sql).await;
}

async fn run(db: &mut SqliteConnection, sql: &str) {
    let done = sqlx::query(AssertSqlSafe(sql.to_owned())).execute(db).await;
    done.unwrap_or_else(|error| panic!("{error}\n{sql}"));
}
