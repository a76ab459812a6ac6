//! Searches for minima in one variable.

/// The place and value of the least value of `f` in [low, high], for an `f` that falls, then rises there.
///
/// Stops when the bracket is narrower than 1e-15 of its first width: the value is then right to rounding, at
/// a smooth minimum and at a kink. For an `f` with several minima, one of them.
///
/// # Source
/// J. Kiefer, "Sequential minimax search for a maximum", Proc. AMS 4, 1953.
pub fn golden_section_minimum(f: impl Fn(f64) -> f64, low: f64, high: f64) -> (f64, f64) {
    let ratio = 0.5 * (5.0_f64.sqrt() - 1.0);
    let (mut a, mut b) = (low, high);
    let width = high - low;
    let (mut x1, mut x2) = (b - ratio * (b - a), a + ratio * (b - a));
    let (mut f1, mut f2) = (f(x1), f(x2));
    for _ in 0..100 {
        if b - a <= 1e-15 * width {
            break;
        }
        if f1 <= f2 {
            b = x2;
            (x2, f2) = (x1, f1);
            x1 = b - ratio * (b - a);
            f1 = f(x1);
        } else {
            a = x1;
            (x1, f1) = (x2, f2);
            x2 = a + ratio * (b - a);
            f2 = f(x2);
        }
    }
    if f1 <= f2 { (x1, f1) } else { (x2, f2) }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn inner_minimum_and_minimum_at_an_end_are_found() {
        let (x, f) = golden_section_minimum(|x| (x - 0.3) * (x - 0.3) + 2.0, -1.0, 4.0);
        assert!((x - 0.3).abs() < 1e-7 && (f - 2.0).abs() < 1e-14);
        let (x, _) = golden_section_minimum(|x| x, 1.0, 2.0);
        assert!((x - 1.0).abs() < 1e-14);
        let (x, f) = golden_section_minimum(|x| (x - 0.7).abs(), 0.0, 1.0);
        assert!((x - 0.7).abs() < 1e-14 && f < 1e-14);
    }
}
