//! Choosing the times of a set.

/// `count` times evenly spread over 0..=1, both ends included; one time is 0.5, none is none.
///
/// Symmetric: entry k and entry count - 1 - k sum to exactly 1 as far as f64 can say, and the middle one of
/// an odd number is exactly 0.5.
#[must_use]
pub fn even(count: usize) -> Vec<f64> {
    if count == 1 {
        return vec![0.5];
    }
    let last = count.saturating_sub(1);
    (0..count)
        .map(|k| if 2 * k <= last { k as f64 / last as f64 } else { 1.0 - (last - k) as f64 / last as f64 })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn even_times_include_both_ends_and_the_middle() {
        assert_eq!(even(5), [0.0, 0.25, 0.5, 0.75, 1.0]);
        assert_eq!(even(2), [0.0, 1.0]);
        assert_eq!(even(1), [0.5]);
        assert!(even(0).is_empty());
        let many = even(1001);
        assert!(many.windows(2).all(|w| w[0] < w[1]));
        assert!((0..1001).all(|k| (many[k] + many[1000 - k] - 1.0).abs() < f64::EPSILON));
    }
}
