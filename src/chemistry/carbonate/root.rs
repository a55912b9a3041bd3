//! Where a rising function passes zero.

use super::CarbonateError;

/// A root of `rising` between `low`, where it is negative, and `high`, where it is
/// not, to within `tolerance` in the argument. Regula falsi after Illinois: an end
/// that stays put counts half.
pub(super) fn root(
    mut rising: impl FnMut(f64) -> Result<f64, CarbonateError>,
    low: (f64, f64),
    high: (f64, f64),
    tolerance: f64,
) -> Result<f64, CarbonateError> {
    let ((mut low, mut below), (mut high, mut above)) = (low, high);
    let mut middle = 0.5 * (low + high);
    let mut side = 0;
    for _ in 0..200 {
        if above == 0.0 {
            return Ok(high);
        }
        let before = middle;
        middle = (low * above - high * below) / (above - below);
        let value = rising(middle)?;
        if value == 0.0 || (middle - before).abs() <= tolerance || high - low <= tolerance {
            break;
        }
        if value < 0.0 {
            (low, below) = (middle, value);
            if side == -1 {
                above *= 0.5;
            }
            side = -1;
        } else {
            (high, above) = (middle, value);
            if side == 1 {
                below *= 0.5;
            }
            side = 1;
        }
    }
    Ok(middle)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_cube_root_of_two_is_found_and_so_is_a_root_at_a_steep_corner() {
        let found = root(|x| Ok(x.powi(3) - 2.0), (0.0, -2.0), (2.0, 6.0), 1e-12).unwrap();
        assert!((found - 2f64.cbrt()).abs() < 1e-11);
        let steep = |x: f64| 1.0 - 1e-6 / x;
        let found = root(
            |x| Ok(steep(x)),
            (1e-9, steep(1e-9)),
            (1.0, steep(1.0)),
            1e-13,
        )
        .unwrap();
        assert!((found - 1e-6).abs() < 1e-11, "{found}");
    }
}
