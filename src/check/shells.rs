//! Shells below the smallest feature that were filled or dropped while the solid was made.

use super::mesh_audit::as_number;
use super::{Finding, RemovedShells};
use crate::profile::Profile;
use crate::units::{Quantity, Unit};

/// The finding `shells-removed`, for information.
pub(super) fn finding(removed: &RemovedShells, profile: &Profile) -> Finding {
    let edge = profile.feature_mm.value;
    let message = if removed.filled + removed.dropped == 0 {
        "No shell was below the smallest feature; none was filled or dropped.".to_owned()
    } else {
        format!(
            "{} void(s) filled and {} crumb(s) dropped, {} in all: each was smaller than the cube of the \
             smallest feature, {} on edge.",
            removed.filled,
            removed.dropped,
            Quantity::new(removed.volume_mm3, Unit::Mm3),
            Quantity::new(edge, Unit::Mm)
        )
    };
    Finding::information(
        "shells-removed",
        as_number(removed.filled + removed.dropped),
        Unit::Count,
        message,
        profile.feature_mm.source.clone(),
    )
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn counts_and_volume_are_told() {
        let profile = Profile::built_in("mex-pla").unwrap();
        let f = finding(&RemovedShells { filled: 3, dropped: 1, volume_mm3: 0.25 }, &profile);
        assert!((f.value - 4.0).abs() < f64::EPSILON);
        assert!(
            f.message.starts_with("3 void(s) filled and 1 crumb(s) dropped, 0.2 mm3 in all"),
            "{}",
            f.message
        );
        assert!(f.message.contains("2.00 mm on edge"));
        assert!(finding(&RemovedShells::default(), &profile).message.starts_with("No shell"));
    }
}
