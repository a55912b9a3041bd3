//! The checked numbers this crate takes and gives.
//!
//! Where a unit exists it is in the name; elsewhere the unit is the caller's.
//! The ranges are far wider than any water and keep squares and sums finite.

/// A number outside the range of its kind.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
#[error("{value} is not {kind} from {low} to {high}")]
pub struct OutOfRange {
    /// The number offered.
    pub value: f64,
    /// What it was offered as.
    pub kind: &'static str,
    /// Least number accepted.
    pub low: f64,
    /// Greatest number accepted.
    pub high: f64,
}

macro_rules! quantities {
    ($($(#[$doc:meta])* $name:ident, $kind:literal, $low:expr, $high:expr;)*) => {$(
        $(#[$doc])*
        #[derive(Clone, Copy, Debug, PartialEq, PartialOrd)]
        pub struct $name(f64);

        impl $name {
            /// Least number accepted.
            pub const LOW: f64 = $low;
            /// Greatest number accepted.
            pub const HIGH: f64 = $high;

            /// A checked number. Refuses NaN, infinities and numbers outside
            /// `LOW..=HIGH`.
            pub fn new(value: f64) -> Result<Self, OutOfRange> {
                if (Self::LOW..=Self::HIGH).contains(&value) {
                    Ok(Self(value))
                } else {
                    Err(OutOfRange { value, kind: $kind, low: $low, high: $high })
                }
            }

            /// A number known when we compile; a wrong one does not build when
            /// used in a `const`.
            #[must_use]
            pub const fn constant(value: f64) -> Self {
                assert!(value >= $low && value <= $high);
                Self(value)
            }

            /// The number of this kind nearest to `value`; NaN becomes the
            /// greatest, so that a spread is never understated. For results of
            /// a calculation, never for input.
            #[must_use]
            pub fn clamped(value: f64) -> Self {
                if value.is_nan() { Self($high) } else { Self(value.clamp($low, $high)) }
            }

            /// The number.
            #[must_use]
            pub const fn get(self) -> f64 {
                self.0
            }
        }
    )*};
}

quantities! {
    /// A moment: days from an origin the caller chooses, the same for a whole
    /// history. Of a water test, the day the sample was drawn.
    Day, "a day", -1e6, 1e6;
    /// A length of time in days.
    Days, "a number of days", 0.0, 2e6;
    /// A level, or a difference of levels, in the caller's unit.
    Value, "a value", -1e12, 1e12;
    /// A standard deviation in the caller's unit. Never zero, because nothing
    /// is measured without error; the least is as good as none.
    Sd, "a standard deviation", 1e-12, 1e12;
    /// Least difference a scale can show, in the caller's unit; 0 for a scale
    /// without steps.
    Step, "a step", 0.0, 1e12;
    /// A share of the whole, 0 to 1.
    Share, "a share", 0.0, 1.0;
    /// Share of the squared error that a model removes: 1 at best, 0 for no
    /// better, below 0 for worse.
    Skill, "a skill", -1e12, 1.0;
    /// Drift of a level: variance gained per day, in the square of the caller's
    /// unit. To show it, use [`Drift::over`].
    Drift, "a drift", 1e-30, 1e24;
}

impl Day {
    /// Time from an earlier day to this one; none when `earlier` is later.
    #[must_use]
    pub fn since(self, earlier: Self) -> Days {
        Days::clamped(self.0 - earlier.0)
    }
}

impl Drift {
    /// The drift of a level that typically changes by `change` (one standard
    /// deviation) over `time`. A time under a day counts as a day.
    #[must_use]
    pub fn from_change(change: Sd, time: Days) -> Self {
        Self::clamped(change.0 * change.0 / time.0.max(1.0))
    }

    /// Typical change (one standard deviation) over `time`, caller's unit.
    #[must_use]
    pub fn over(self, time: Days) -> Sd {
        Sd::clamped((self.0 * time.0).sqrt())
    }
}
