//! Which entries of the record book are wanted.

use jiff::civil::Date;
use serde::{Deserialize, Serialize};

use crate::error::Error;
use crate::id::{MemberId, SourceId};
use crate::input::Problems;

/// Which entries are wanted: all that is given must hold.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Filter {
    /// About this batch, by its number.
    pub batch: Option<String>,
    /// About this source, its tests, or a plan that uses it.
    pub source: Option<SourceId>,
    /// By this person, or about their account.
    pub person: Option<MemberId>,
    /// About a lot of a material or malt, by its code or identifier.
    pub lot: Option<String>,
    /// On this day of the brewery or later.
    pub from: Option<Date>,
    /// On this day of the brewery or earlier.
    pub to: Option<Date>,
    /// Whose subject is of this kind.
    pub kind: Option<String>,
    /// Which hold this somewhere: in what was done, to what, why, before or after.
    pub text: Option<String>,
}

/// Which entries of the record book are wanted: all that is given must hold.
#[derive(Clone, Debug, Default, Serialize, Deserialize, utoipa::IntoParams)]
#[serde(default)]
#[into_params(parameter_in = Query)]
pub struct FilterBody {
    /// The number of a batch, whole.
    pub batch: String,
    /// An identifier of `/sources`: its own entries, those of its tests and of the plans that use it.
    pub source_id: String,
    /// The `member_id` of an entry: what that person did, or was done to the account.
    pub member_id: String,
    /// The code or the identifier of a lot of a material or malt.
    pub lot: String,
    /// First day, in the brewery's time zone: `2026-03-01`.
    pub from: String,
    /// Last day: `2026-03-31`.
    pub to: String,
    /// Kind of subject: `plan`, `dose`, `water test`, …
    pub kind: String,
    /// Some text of the entry.
    pub text: String,
}

impl TryFrom<FilterBody> for Filter {
    type Error = Error;

    fn try_from(body: FilterBody) -> Result<Self, Error> {
        let mut problems = Problems::new();
        let batch = problems.optional_text("batch", &body.batch, 40);
        let source = id(&mut problems, "source_id", &body.source_id, "a source");
        let person = id(&mut problems, "member_id", &body.member_id, "a person");
        let lot = problems.optional_text("lot", &body.lot, 80);
        let from = problems.optional_date("from", &body.from);
        let to = problems.optional_date("to", &body.to);
        if let (Some(from), Some(to)) = (from, to)
            && from > to
        {
            problems.add("to", format!("{to} is before the first day, {from}."));
        }
        let kind = problems.optional_text("kind", &body.kind, 40);
        let text = problems.optional_text("text", &body.text, 200);
        problems.finish()?;
        Ok(Self {
            batch,
            source,
            person,
            lot,
            from,
            to,
            kind,
            text,
        })
    }
}

fn id<T: std::str::FromStr>(
    problems: &mut Problems,
    field: &str,
    text: &str,
    what: &str,
) -> Option<T> {
    let text = text.trim();
    if text.is_empty() {
        return None;
    }
    let parsed = text.parse().ok();
    if parsed.is_none() {
        problems.add(field, format!("This is not the identifier of {what}."));
    }
    parsed
}

impl FilterBody {
    /// What is asked for, as the query of an address: empty when nothing is.
    pub fn query(&self) -> String {
        let mut query = form_urlencoded::Serializer::new(String::new());
        for (name, value) in [
            ("batch", &self.batch),
            ("source_id", &self.source_id),
            ("member_id", &self.member_id),
            ("lot", &self.lot),
            ("from", &self.from),
            ("to", &self.to),
            ("kind", &self.kind),
            ("text", &self.text),
        ] {
            if !value.trim().is_empty() {
                query.append_pair(name, value.trim());
            }
        }
        query.finish()
    }
}
