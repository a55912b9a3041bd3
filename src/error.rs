//! What can go wrong, told by what the reader should do next.
//!
//! Operations return [`Error`]. It knows nothing of HTTP: `web::problem` turns it
//! into problem+json, and into a page for browsers.

/// One field that has to be mended.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct FieldProblem {
    /// Dotted path of the field as forms name it: `readings.3.value`. Empty for
    /// the whole body.
    pub field: String,
    /// A sentence: what is wrong and what would be accepted.
    pub message: String,
}

fn told(problems: &[FieldProblem]) -> String {
    problems
        .iter()
        .map(|problem| format!("{} {}", problem.field, problem.message))
        .collect::<Vec<_>>()
        .join(" ")
}

/// Why an operation did not happen. Nothing was saved.
#[derive(Debug, thiserror::Error)]
pub enum Error {
    /// Mend these fields and send again.
    #[error("Some fields need mending: {}", told(.0))]
    Invalid(Vec<FieldProblem>),
    /// Check the link.
    #[error("There is no such {0}")]
    NotFound(&'static str),
    /// Somebody else changed it, or its state does not allow this: reload.
    #[error("{0}")]
    Conflict(String),
    /// Sign in first.
    #[error("Sign in first")]
    SignIn,
    /// Ask somebody who may.
    #[error("{0}")]
    Forbidden(String),
    /// Wait and try again.
    #[error("Too many attempts. Try again in {seconds} seconds")]
    TooMany {
        /// How long to wait, s.
        seconds: u64,
    },
    /// A request with this key was applied already; its answer may be replayed.
    #[error("This request was applied already")]
    Repeated,
    /// Try again; if it stays, ask whoever runs the server.
    #[error("{context}")]
    Internal {
        /// What was being done.
        context: &'static str,
        /// The cause, logged once where it is handled.
        #[source]
        source: Box<dyn std::error::Error + Send + Sync>,
    },
}

impl Error {
    /// One field is wrong.
    pub fn field(field: impl Into<String>, message: impl Into<String>) -> Self {
        Self::Invalid(vec![FieldProblem {
            field: field.into(),
            message: message.into(),
        }])
    }

    /// The same problems of a part of a body, told from the whole: `under` maps the name
    /// of each field.
    #[must_use]
    pub fn renamed(self, under: impl Fn(&str) -> String) -> Self {
        match self {
            Self::Invalid(mut problems) => {
                for problem in &mut problems {
                    problem.field = under(&problem.field);
                }
                Self::Invalid(problems)
            }
            other => other,
        }
    }

    /// An unexpected failure while doing `context`.
    pub fn internal(
        context: &'static str,
        source: impl Into<Box<dyn std::error::Error + Send + Sync>>,
    ) -> Self {
        Self::Internal {
            context,
            source: source.into(),
        }
    }
}

impl From<sqlx::Error> for Error {
    fn from(source: sqlx::Error) -> Self {
        Self::internal("The database did not answer as expected", source)
    }
}

/// Refuses a change to something that somebody else changed since it was read. `read`:
/// the version the caller read, where it told; `what`: “this malt”.
pub fn refuse_stale(read: Option<i64>, stored: i64, what: &str) -> Result<(), Error> {
    if read.is_some_and(|read| read != stored) {
        return Err(Error::Conflict(format!(
            "Somebody else changed {what} meanwhile. Reload and change it again"
        )));
    }
    Ok(())
}

/// What a failed statement means where a UNIQUE rule keeps what `field` says apart:
/// `message` when there is one of the kind already.
pub fn taken(error: sqlx::Error, field: &str, message: String) -> Error {
    if breaks_unique(&error) {
        Error::field(field, message)
    } else {
        error.into()
    }
}

/// Whether a statement failed because a UNIQUE rule of the schema was broken.
pub fn breaks_unique(error: &sqlx::Error) -> bool {
    matches!(error, sqlx::Error::Database(e) if e.is_unique_violation())
}
