//! The lower tail of the normal distribution, for results below a limit.

use std::f64::consts::{PI, SQRT_2};

use statrs::function::erf::erfc;

/// The standard normal distribution below a point z.
pub(crate) struct LowerTail {
    /// ln Φ(z).
    pub(crate) log_probability: f64,
    /// r = φ(z)/Φ(z).
    pub(crate) ratio: f64,
    /// r·(z + r), 0 to 1.
    pub(crate) shrinkage: f64,
}

impl LowerTail {
    pub(crate) fn at(z: f64) -> Self {
        let log_density = -(z * z + (2.0 * PI).ln()) / 2.0;
        if z > -2.0 {
            let probability = erfc(-z / SQRT_2) / 2.0;
            let ratio = log_density.exp() / probability;
            let shrinkage = ratio * (z + ratio);
            return Self {
                log_probability: probability.ln(),
                ratio,
                shrinkage,
            };
        }
        // Down in the tail z + r cancels. With x = -z, Laplace's continued
        // fraction gives it directly: r = x + 1/(x + 2/(x + 3/(x + ...))).
        // A hundred terms are exact to the last digit from x = 2 on.
        let x = -z;
        let excess = 1.0 / (2..100).rev().fold(x, |below, k| x + f64::from(k) / below);
        let ratio = x + excess;
        Self {
            log_probability: log_density - ratio.ln(),
            ratio,
            shrinkage: ratio * excess,
        }
    }
}
