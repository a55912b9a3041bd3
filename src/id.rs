//! Identifiers and moments as they are stored: text in SQLite.

use std::fmt;
use std::str::FromStr;

use serde::{Deserialize, Serialize};
use uuid::Uuid;

/// Declares an identifier type for one table: a UUID version 7, so that order of
/// creation is order of the text.
macro_rules! ids {
    ($($(#[$doc:meta])* $name:ident;)*) => {$(
        $(#[$doc])*
        #[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord, Serialize, Deserialize, utoipa::ToSchema)]
        #[serde(transparent)]
        #[schema(value_type = String, format = "uuid")]
        pub struct $name(Uuid);

        impl $name {
            /// A new identifier, later than every earlier one.
            #[must_use]
            #[allow(clippy::new_without_default, reason = "every call gives another value")]
            pub fn new() -> Self {
                Self(Uuid::now_v7())
            }
        }

        impl fmt::Display for $name {
            fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                self.0.hyphenated().fmt(f)
            }
        }

        impl FromStr for $name {
            type Err = uuid::Error;
            fn from_str(text: &str) -> Result<Self, Self::Err> {
                Uuid::from_str(text).map(Self)
            }
        }

        impl sqlx::Type<sqlx::Sqlite> for $name {
            fn type_info() -> sqlx::sqlite::SqliteTypeInfo {
                <String as sqlx::Type<sqlx::Sqlite>>::type_info()
            }
        }

        impl<'q> sqlx::Encode<'q, sqlx::Sqlite> for $name {
            fn encode_by_ref(
                &self,
                buffer: &mut <sqlx::Sqlite as sqlx::Database>::ArgumentBuffer,
            ) -> Result<sqlx::encode::IsNull, sqlx::error::BoxDynError> {
                <String as sqlx::Encode<'q, sqlx::Sqlite>>::encode(self.to_string(), buffer)
            }
        }

        impl<'r> sqlx::Decode<'r, sqlx::Sqlite> for $name {
            fn decode(value: sqlx::sqlite::SqliteValueRef<'r>) -> Result<Self, sqlx::error::BoxDynError> {
                Ok(<&str as sqlx::Decode<sqlx::Sqlite>>::decode(value)?.parse()?)
            }
        }
    )*};
}

ids! {
    /// A person with an account.
    MemberId;
    /// A token for the JSON API.
    ApiTokenId;
    /// A tablet that several people share.
    TabletId;
    /// An invitation to make an account.
    InvitationId;
    /// A source of water.
    SourceId;
    /// One water test.
    WaterTestId;
    /// A material on the shelf.
    MaterialId;
    /// One lot of a material.
    MaterialLotId;
    /// A delivery or a count of a lot of a material.
    MovementId;
    /// A certificate or a safety data sheet.
    AttachmentId;
    /// A malt.
    MaltId;
    /// One lot of a malt.
    MaltLotId;
    /// One bench titration of a lot of malt.
    MaltTitrationId;
    /// A beer.
    BeerId;
    /// A plan: one revision of the treatment of one batch.
    PlanId;
    /// One dose of a plan.
    DoseId;
    /// One mash check.
    MashCheckId;
    /// One test of sparge liquor.
    LiquorCheckId;
    /// A correction of a closed batch.
    PlanCorrectionId;
    /// A pH meter.
    MeterId;
    /// One calibration of a pH meter.
    CalibrationId;
}

/// A moment in UTC, stored with three decimals of a second.
#[derive(
    Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize, utoipa::ToSchema,
)]
#[serde(transparent)]
#[schema(value_type = String, format = "date-time")]
pub struct UtcTime(jiff::Timestamp);

impl UtcTime {
    /// Now, cut to the millisecond.
    #[must_use]
    pub fn now() -> Self {
        let now = jiff::Timestamp::now();
        Self(jiff::Timestamp::from_millisecond(now.as_millisecond()).unwrap_or(now))
    }

    /// The moment itself.
    #[must_use]
    pub fn timestamp(self) -> jiff::Timestamp {
        self.0
    }

    /// This moment moved by whole seconds.
    #[must_use]
    pub fn plus_seconds(self, seconds: i64) -> Self {
        Self(
            self.0
                .checked_add(jiff::SignedDuration::from_secs(seconds))
                .unwrap_or(self.0),
        )
    }

    /// Seconds from `earlier` to this moment.
    #[must_use]
    pub fn seconds_since(self, earlier: Self) -> i64 {
        self.0.as_second() - earlier.0.as_second()
    }
}

impl From<jiff::Timestamp> for UtcTime {
    fn from(timestamp: jiff::Timestamp) -> Self {
        Self(jiff::Timestamp::from_millisecond(timestamp.as_millisecond()).unwrap_or(timestamp))
    }
}

impl fmt::Display for UtcTime {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{:.3}", self.0)
    }
}

impl FromStr for UtcTime {
    type Err = jiff::Error;
    fn from_str(text: &str) -> Result<Self, Self::Err> {
        text.parse().map(Self)
    }
}

impl sqlx::Type<sqlx::Sqlite> for UtcTime {
    fn type_info() -> sqlx::sqlite::SqliteTypeInfo {
        <String as sqlx::Type<sqlx::Sqlite>>::type_info()
    }
}

impl<'q> sqlx::Encode<'q, sqlx::Sqlite> for UtcTime {
    fn encode_by_ref(
        &self,
        buffer: &mut <sqlx::Sqlite as sqlx::Database>::ArgumentBuffer,
    ) -> Result<sqlx::encode::IsNull, sqlx::error::BoxDynError> {
        <String as sqlx::Encode<'q, sqlx::Sqlite>>::encode(self.to_string(), buffer)
    }
}

impl<'r> sqlx::Decode<'r, sqlx::Sqlite> for UtcTime {
    fn decode(value: sqlx::sqlite::SqliteValueRef<'r>) -> Result<Self, sqlx::error::BoxDynError> {
        Ok(<&str as sqlx::Decode<sqlx::Sqlite>>::decode(value)?.parse()?)
    }
}
