//! A bracketed root finder: it cannot leave the bracket, so it cannot land on the wrong crossing.

/// Iterations after which a bracket is certainly at the limit of the arithmetic: the method halves at least every
/// second step, and 60 halvings exhaust the 53 bits of a number.
const ITERATIONS: usize = 160;

/// The root of a continuous `f` between `low` and `high`, where `f(low)` and `f(high)` differ in sign.
///
/// Illinois variant of the rule of false position with a bisection in between (Dowell and Jarratt 1971, from memory).
/// Exact to the last few bits of the arithmetic. If the signs do not differ, an end of the bracket comes back.
pub fn bracketed(mut low: f64, mut high: f64, f: impl Fn(f64) -> f64) -> f64 {
    let mut f_low = f(low);
    let mut f_high = f(high);
    if f_low == 0.0 {
        return low;
    }
    for round in 0..ITERATIONS {
        let middle = 0.5 * (low + high);
        if f_high == 0.0 || middle <= low.min(high) || middle >= low.max(high) {
            break;
        }
        let secant = (low * f_high - high * f_low) / (f_high - f_low);
        let inside = secant > low.min(high) && secant < low.max(high);
        let x = if round % 3 == 2 || !inside { middle } else { secant };
        let y = f(x);
        if y.is_nan() {
            break;
        }
        if (y > 0.0) == (f_high > 0.0) {
            f_low *= 0.5;
        } else {
            low = high;
            f_low = f_high;
        }
        high = x;
        f_high = y;
    }
    high
}

#[cfg(test)]
mod tests {
    use super::bracketed;

    /// A few units in the last place of a number of order one.
    const LAST_BITS: f64 = 4e-16;

    #[test]
    fn the_root_of_x_squared_minus_two_is_the_square_root_of_two() {
        assert!((bracketed(0.0, 2.0, |x| x * x - 2.0) - 2f64.sqrt()).abs() < LAST_BITS);
        assert!((bracketed(2.0, 0.0, |x| x * x - 2.0) - 2f64.sqrt()).abs() < LAST_BITS);
    }

    #[test]
    fn a_steep_function_is_solved_as_well_as_a_flat_one() {
        assert!((bracketed(-3.0, 50.0, |x| x.exp() - 1.0)).abs() < LAST_BITS);
        assert!((bracketed(0.0, 1.0, |x| (x - 0.25).powi(3)) - 0.25).abs() < 1e-5);
    }

    #[test]
    fn a_root_at_an_end_of_the_bracket_is_found() {
        assert_eq!(bracketed(1.0, 2.0, |x| x - 1.0), 1.0);
        assert_eq!(bracketed(1.0, 2.0, |x| x - 2.0), 2.0);
    }
}
