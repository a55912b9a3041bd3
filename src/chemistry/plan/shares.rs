//! Shares in whole per cents.
//!
//! The shares nearest to the exact ones for which doses can still be found are taken:
//! whole per cents first, then tenths.

use super::simplest::{Bands, Simplest, compare};
use super::simplex::{Found, Simplex};

/// A share below this is none, wherever the plan can do without it. Source: assumed; no
/// water meter in a brewery tells less.
pub(super) const LEAST_SHARE: f64 = 0.01;

/// Room for rounded shares, relative to the scale of a window: 0.05 mg/L in 100, and as
/// many meq/L where the mash misses its target. Half of what rounding doses may take.
const ROUND_ROOM: f64 = 5e-4;

/// So many roundings are looked at on each grid.
const MOST_ROUNDINGS: usize = 24;

impl Bands {
    /// A blending share may be rounded up to the next per cent.
    pub(super) fn whole_blending(&mut self, least: f64) {
        let whole = (least * 100.0 - 1e-4).ceil() / 100.0;
        if let Some(row) = self.rows.last_mut() {
            row.high = row.high.max(whole);
        }
    }
}

impl Simplest<'_> {
    /// `None` if neither grid has shares that keep what the steps before have reached.
    pub(super) fn with_round_shares(&self, allowed: &[bool], exact: &[f64]) -> Option<Vec<f64>> {
        let sources = self.model.sources;
        let bounds = |source: usize| (self.model.lower[source], self.model.upper[source].min(1.0));
        let mut looks: Vec<(f64, Simplex, Vec<f64>)> = [0.0, ROUND_ROOM]
            .into_iter()
            .map(|room| {
                let program = self.bands.program(self.model, self.frozen, room);
                let (mut simplex, objective) = self.simplex(&program);
                for (place, &column) in self.lines.iter().enumerate() {
                    if column >= sources && !allowed[column] {
                        simplex.bound(place, 0.0, 0.0);
                    }
                }
                (room, simplex, objective)
            })
            .collect();
        for parts in [100, 1000] {
            let candidates = near(&exact[..sources], allowed, bounds, parts);
            for (room, simplex, objective) in &mut looks {
                for shares in candidates.iter().take(MOST_ROUNDINGS) {
                    for (place, &column) in self.lines.iter().enumerate() {
                        if column < sources {
                            simplex.bound(place, shares[column], shares[column]);
                        }
                    }
                    if matches!(simplex.least(objective), Found::Least(_))
                        && let Ok(answer) = self.nearest(allowed, Some(shares), 0.0, *room)
                    {
                        return Some(answer.columns);
                    }
                }
            }
        }
        None
    }
}

/// Shares in whole parts of a hundred or a thousand near `exact`, the nearest first.
fn near(
    exact: &[f64],
    allowed: &[bool],
    bounds: impl Fn(usize) -> (f64, f64),
    parts: i64,
) -> Vec<Vec<f64>> {
    let used: Vec<usize> = (0..exact.len()).filter(|source| allowed[*source]).collect();
    let Some((&last, others)) = used.split_last() else {
        return Vec::new();
    };
    let reach = if used.len() <= 4 { -1..=2 } else { 0..=1 };
    let mut found = vec![vec![0; exact.len()]];
    for &source in others {
        let floor = (exact[source] * parts as f64 + 1e-6).floor() as i64;
        found = found
            .into_iter()
            .flat_map(|counts| {
                reach.clone().map(move |step| {
                    let mut counts = counts.clone();
                    counts[source] = floor + step;
                    counts
                })
            })
            .take(1 << 12)
            .collect();
    }
    let mut near: Vec<(i64, Vec<f64>)> = found
        .into_iter()
        .filter_map(|mut counts| {
            counts[last] = parts - counts.iter().sum::<i64>();
            let shares: Vec<f64> = counts.iter().map(|c| *c as f64 / parts as f64).collect();
            let fits = used.iter().all(|&source| {
                let (low, high) = bounds(source);
                let share = shares[source];
                share >= low - 1e-12
                    && share <= high + 1e-12
                    && (counts[source] == 0 || share >= LEAST_SHARE)
            });
            let far: f64 = shares.iter().zip(exact).map(|(a, b)| (a - b).powi(2)).sum();
            // Equally far within the solver's accuracy is equally far.
            fits.then_some(((far * 1e9).round() as i64, shares))
        })
        .collect();
    near.sort_by(|(a, one), (b, other)| a.cmp(b).then_with(|| compare(one, other)));
    near.into_iter().map(|(_, shares)| shares).collect()
}
