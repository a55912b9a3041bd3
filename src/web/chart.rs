//! Charts as templates place them: every position is a percentage of the drawing, every
//! text is finished. The drawings themselves are in `templates/parts/chart.html`.

use super::format;

/// A mark at one place.
#[derive(Clone, Debug, PartialEq)]
pub struct Mark {
    /// Where, per cent from the left.
    pub x: f64,
    /// What stands beside it.
    pub text: String,
}

/// A stretch from one place to another.
#[derive(Clone, Debug, PartialEq)]
pub struct Span {
    /// Where it begins, per cent from the left.
    pub x: f64,
    /// How wide it is, per cent.
    pub width: f64,
    /// What stands beside it.
    pub text: String,
}

/// A scale from `from` at the left to `to` at the right.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Scale {
    from: f64,
    to: f64,
}

impl Scale {
    /// A scale that holds all of these with a little room either side; at least `least`
    /// wide.
    pub fn around(values: impl IntoIterator<Item = f64>, least: f64) -> Self {
        let (low, high) = values
            .into_iter()
            .filter(|value| value.is_finite())
            .fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), value| {
                (low.min(value), high.max(value))
            });
        if low > high {
            return Self {
                from: 0.0,
                to: least,
            };
        }
        let room = ((high - low) * 0.08)
            .max((least - (high - low)) / 2.0)
            .max(least * 0.04);
        Self {
            from: low - room,
            to: high + room,
        }
    }

    /// The same scale beginning at nothing, for amounts.
    #[must_use]
    pub fn from_zero(self) -> Self {
        Self {
            from: 0.0,
            to: self.to,
        }
    }

    /// Where a value lies, per cent, kept on the drawing.
    pub fn place(self, value: f64) -> f64 {
        let x = 100.0 * (value - self.from) / (self.to - self.from);
        (x.clamp(0.0, 100.0) * 100.0).round() / 100.0
    }

    /// A value's height on a drawing where more is higher, per cent from above.
    pub fn height(self, value: f64) -> f64 {
        ((100.0 - self.place(value)) * 100.0).round() / 100.0
    }

    /// Whether a value lies on it.
    pub fn holds(self, value: f64) -> bool {
        (self.from..=self.to).contains(&value)
    }

    /// A mark on it.
    pub fn mark(self, value: f64, text: impl Into<String>) -> Mark {
        Mark {
            x: self.place(value),
            text: text.into(),
        }
    }

    /// A stretch on it; open ends reach to the edge.
    pub fn span(self, low: Option<f64>, high: Option<f64>, text: impl Into<String>) -> Span {
        let left = low.map_or(0.0, |low| self.place(low));
        let right = high.map_or(100.0, |high| self.place(high));
        Span {
            x: left,
            width: ((right - left).max(0.0) * 100.0).round() / 100.0,
            text: text.into(),
        }
    }

    /// Marks in steps of `step`, each with its figure.
    pub fn ticks(self, step: f64, decimals: usize) -> Vec<Mark> {
        let first = (self.from / step).ceil();
        let last = (self.to / step).floor();
        let count = (last - first).clamp(0.0, 40.0);
        (0..=count as i32)
            .map(|index| {
                let value = (first + f64::from(index)) * step;
                self.mark(value, format::decimals(value, decimals))
            })
            .collect()
    }
}

/// One figure of a liquor against its window.
#[derive(Clone, Debug, PartialEq)]
pub struct WindowBar {
    /// What it is.
    pub label: String,
    /// `within`, `below`, `above` or `unknown`.
    pub state: &'static str,
    /// The same in words.
    pub state_words: String,
    /// The band that is allowed.
    pub window: Span,
    /// Its lower wall; none where it is open.
    pub low: Option<f64>,
    /// Its upper wall.
    pub high: Option<f64>,
    /// Where in between it would best be.
    pub preferred: Option<Mark>,
    /// Before anything is added.
    pub before: Option<Mark>,
    /// After.
    pub after: Option<Mark>,
    /// How sure the figure after is.
    pub after_doubt: Option<Span>,
    /// All of it in a sentence.
    pub text: String,
}

/// The mash pH against its window.
#[derive(Clone, Debug, PartialEq)]
pub struct IntervalBar {
    /// The scale below.
    pub ticks: Vec<Mark>,
    /// The window.
    pub window: Option<Span>,
    /// The target.
    pub target: Option<Mark>,
    /// The 90 % interval.
    pub interval: Option<Span>,
    /// The prediction.
    pub expected: Option<Mark>,
    /// A reading.
    pub reading: Option<Mark>,
    /// Its own error.
    pub reading_doubt: Option<Span>,
    /// What is expected after the reading before and what went in since.
    pub now: Option<Mark>,
    /// Its 90 % interval.
    pub now_doubt: Option<Span>,
    /// All of it in a sentence.
    pub text: String,
}

/// A place on a drawing with two axes, y downwards as in SVG.
#[derive(Clone, Debug, PartialEq)]
pub struct Point {
    /// Where, per cent from the left.
    pub x: f64,
    /// Where, per cent from above.
    pub y: f64,
    /// Upper end of its doubt, per cent from above.
    pub top: f64,
    /// How far the doubt reaches down from there, per cent.
    pub height: f64,
    /// What it says.
    pub text: String,
}

/// The pH of a mash against the dose of one material.
#[derive(Clone, Debug, PartialEq)]
pub struct DoseCurve {
    /// The scale below, doses.
    pub doses: Vec<Mark>,
    /// What the doses are of, with the unit.
    pub material: String,
    /// The scale at the side, pH.
    pub levels: Vec<Level>,
    /// Upper edge of the window, per cent from above.
    pub window_top: f64,
    /// Its height, per cent.
    pub window_height: f64,
    /// The window in figures.
    pub window: String,
    /// The target.
    pub target: Level,
    /// As the plan predicts it: "x,y x,y …".
    pub predicted: String,
    /// As it was read.
    pub as_read: String,
    /// The prediction with its 90 % interval.
    pub expected: Option<Point>,
    /// The readings, the earliest first, each with its own error.
    pub readings: Vec<Point>,
    /// Where the proposed step leads.
    pub step: Option<Point>,
    /// All of it in a sentence.
    pub text: String,
}

/// A line across a drawing.
#[derive(Clone, Debug, PartialEq)]
pub struct Level {
    /// Where, per cent from the top.
    pub y: f64,
    /// What stands beside it.
    pub text: String,
}

/// One moment of a trend.
#[derive(Clone, Debug, PartialEq)]
pub struct TrendPoint {
    /// Where, per cent from the left.
    pub x: f64,
    /// Where, per cent from the top.
    pub y: f64,
    /// The upper end of its doubt, per cent from the top.
    pub top: f64,
    /// How tall its doubt is, per cent.
    pub height: f64,
    /// `plain`, `signal` or `left-out`.
    pub state: &'static str,
    /// When and how much.
    pub text: String,
}

/// One figure through time.
#[derive(Clone, Debug, PartialEq)]
pub struct Trend {
    /// The line through the points that count, as SVG takes it.
    pub path: String,
    /// The level it is taken to be at.
    pub centre: Option<Level>,
    /// Other levels worth a line.
    pub limits: Vec<Level>,
    /// The points.
    pub points: Vec<TrendPoint>,
    /// The scale below.
    pub dates: Vec<Mark>,
    /// All of it in a sentence.
    pub text: String,
}

/// One part of a doubt.
#[derive(Clone, Debug, PartialEq)]
pub struct DoubtShare {
    /// What it comes from.
    pub label: String,
    /// Its share, per cent.
    pub width: f64,
    /// The same as text.
    pub text: String,
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn everything_a_scale_was_made_for_lies_on_it() {
        let scale = Scale::around([5.2, 5.4, 5.63], 0.4);
        assert!(scale.place(5.2) > 0.0 && scale.place(5.63) < 100.0);
        assert!(scale.place(5.4) > scale.place(5.2));
        assert_eq!(scale.span(None, None, "").width, 100.0);
    }

    #[test]
    fn a_scale_of_nothing_still_has_a_width() {
        let scale = Scale::around([], 1.0);
        assert!(scale.place(0.5).is_finite());
        assert!(Scale::around([3.0], 1.0).place(3.0) > 0.0);
    }
}
