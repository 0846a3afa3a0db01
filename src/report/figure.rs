//! A figure as text: prefix, unit and as many digits as its uncertainty carries.
//!
//! Rounding: two significant digits of the uncertainty at most (JCGM 100, 7.2.6), and the value to the same place.

use crate::estimate::Estimate;

/// Prefixes of the SI with their powers of ten, largest first.
const PREFIXES: [(&str, i32); 7] = [("M", 6), ("k", 3), ("", 0), ("m", -3), ("µ", -6), ("n", -9), ("p", -12)];

/// Most decimals shown: a figure known better than that in its unit needs none of them to be read.
const MOST_DECIMALS: i32 = 9;

/// An estimate made ready to be shown.
#[derive(Debug, Clone, PartialEq)]
pub struct Figure {
    estimate: Estimate,
    unit: String,
    decimals: usize,
}

impl Figure {
    /// An estimate in a unit that takes SI prefixes, such as `s` or `V`.
    #[must_use]
    pub fn prefixed(estimate: Estimate, unit: &str) -> Self {
        let size = estimate.value.abs().max(estimate.u);
        // Rounding first, or 999.96 would show as 1000.0 instead of 1.0000 k.
        let rounded: f64 = format!("{size:.2e}").parse().unwrap_or(size);
        let (prefix, power) =
            PREFIXES.iter().find(|(_, power)| rounded >= 10f64.powi(*power)).copied().unwrap_or(("", 0));
        Self::plain(estimate.scaled(10f64.powi(-power)), &format!("{prefix}{unit}"))
    }

    /// An estimate in a unit that is shown as it is, such as `/s` or `%`.
    #[must_use]
    pub fn plain(estimate: Estimate, unit: &str) -> Self {
        Self { estimate, unit: unit.to_owned(), decimals: decimals(estimate) }
    }

    /// `437.21 ± 0.19 /s`
    #[must_use]
    pub fn value_and_u(&self) -> String {
        let (decimals, unit) = (self.decimals, &self.unit);
        format!("{:.decimals$} ± {:.decimals$} {unit}", self.estimate.value, self.estimate.u)
    }

    /// `436.84 .. 437.58 /s`, the 95 % coverage interval.
    #[must_use]
    pub fn interval(&self) -> String {
        let (decimals, unit) = (self.decimals, &self.unit);
        format!("{:.decimals$} .. {:.decimals$} {unit}", self.estimate.low, self.estimate.high)
    }
}

/// Decimals that show two significant digits of the uncertainty; of an exact value, six digits.
fn decimals(estimate: Estimate) -> usize {
    let exact = estimate.u <= 0.0 || !estimate.u.is_finite();
    let (size, digits) = if exact { (estimate.value.abs(), 6) } else { (estimate.u, 2) };
    if size <= 0.0 || !size.is_finite() {
        return 0;
    }
    // The exponent after rounding: 0.0996 is 0.10 to two digits.
    let rounded = format!("{size:.*e}", digits - 1);
    let exponent: i32 = rounded.split_once('e').and_then(|(_, power)| power.parse().ok()).unwrap_or(0);
    (digits as i32 - 1 - exponent).clamp(0, MOST_DECIMALS) as usize
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_uncertainty_has_two_digits_and_the_value_ends_where_it_does() {
        let shown = |value, u| Figure::plain(Estimate::normal(value, u), "/s").value_and_u();
        assert_eq!(shown(437.2134, 0.187), "437.21 ± 0.19 /s");
        assert_eq!(shown(437.2134, 0.0996), "437.21 ± 0.10 /s");
        assert_eq!(shown(437.2134, 23.7), "437 ± 24 /s");
        assert_eq!(shown(437.2134, 237.0), "437 ± 237 /s");
        assert_eq!(shown(-0.00012, 0.00034), "-0.00012 ± 0.00034 /s");
    }

    #[test]
    fn the_prefix_suits_the_size() {
        let shown = |value, u, unit| Figure::prefixed(Estimate::normal(value, u), unit).value_and_u();
        assert_eq!(shown(0.002_287_2, 1.0e-6, "s"), "2.2872 ± 0.0010 ms");
        assert_eq!(shown(4.6e-6, 2.0e-7, "s"), "4.60 ± 0.20 µs");
        assert_eq!(shown(7103.0, 52.0, "V"), "7.103 ± 0.052 kV");
        assert_eq!(shown(999.96e-6, 0.5e-6, "s"), "0.99996 ± 0.00050 ms");
        assert_eq!(shown(0.25, 0.01, "s"), "250 ± 10 ms");
        assert_eq!(shown(0.0, 3e-6, "s"), "0.0 ± 3.0 µs");
    }

    #[test]
    fn an_interval_is_shown_to_the_same_place() {
        let estimate = Estimate { value: 4.6e-6, u: 2.0e-7, low: 4.3e-6, high: 5.12e-6 };
        assert_eq!(Figure::prefixed(estimate, "s").interval(), "4.30 .. 5.12 µs");
    }

    #[test]
    fn a_figure_without_uncertainty_is_shown_to_six_digits() {
        assert_eq!(Figure::plain(Estimate::normal(100.0, 0.0), "/s").value_and_u(), "100.000 ± 0.000 /s");
        assert_eq!(Figure::plain(Estimate::normal(0.0, 0.0), "/s").value_and_u(), "0 ± 0 /s");
    }
}
