//! Whether two sheets of the skin coincide, so that its two sides can't both be seen.

use super::{AskedWall, Finding, SheetFigures, Verdict};
use crate::units::{Quantity, Unit};

/// Share of the skin's area above which it is said that the sides can't both be seen.
const MOST_CLOSE_SHARE: f64 = 0.5;

/// The finding `sheets-coincide`.
pub(super) fn finding(sheets: &SheetFigures, asked: Option<&AskedWall>) -> Finding {
    let share = if sheets.double_cover { 1.0 } else { sheets.close_share };
    let close = share > MOST_CLOSE_SHARE;
    let wall =
        asked.map_or("the wall".to_owned(), |a| format!("the wall, {}", Quantity::new(a.wall_mm, Unit::Mm)));
    let message = if sheets.double_cover {
        "The skin covers its image twice at this time: two sheets coincide everywhere, so both faces of the wall \
         show the same two sides and neither can be told from the other."
            .to_owned()
    } else if close {
        format!(
            "{:.0} % of the skin has another sheet nearer than {wall} (mean distance {}): the two fuse into one \
             wall and the sides between them can't be seen.",
            100.0 * share,
            Quantity::new(sheets.mean_distance_mm, Unit::Mm)
        )
    } else {
        format!("{:.0} % of the skin has another sheet nearer than {wall}.", 100.0 * share)
    };
    Finding {
        check: "sheets-coincide",
        verdict: if close { Verdict::Caution } else { Verdict::Pass },
        value: share,
        limit: Some(MOST_CLOSE_SHARE),
        unit: Unit::Ratio,
        place_mm: None,
        message,
        advice: if close { advice(sheets) } else { String::new() },
        source: Finding::OWN_RULE.to_owned(),
    }
}

fn advice(sheets: &SheetFigures) -> String {
    let taus: Vec<String> = sheets.better_taus.iter().map(|t| format!("{t:.3}")).collect();
    if taus.is_empty() {
        "Choose a time farther from this one, or lower wall_mm.".to_owned()
    } else {
        format!("Choose a time at which the sheets stand apart: {}.", taus.join(" or "))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_double_cover_is_a_caution_that_names_other_times() {
        let s = SheetFigures { double_cover: true, better_taus: vec![0.46, 0.54], ..SheetFigures::default() };
        let f = finding(&s, None);
        assert_eq!(f.verdict, Verdict::Caution);
        assert!(f.advice.contains("0.460 or 0.540"));
    }

    #[test]
    fn shares_are_held_against_one_half() {
        let asked = AskedWall { wall_mm: 2.4, tolerance_mm: 0.05 };
        let at = |close_share: f64| {
            let s = SheetFigures { close_share, mean_distance_mm: 0.8, ..SheetFigures::default() };
            finding(&s, Some(&asked))
        };
        assert_eq!(at(0.5).verdict, Verdict::Pass);
        let f = at(0.62);
        assert_eq!(f.verdict, Verdict::Caution);
        assert!(f.message.contains("62 % of the skin has another sheet nearer than the wall, 2.40 mm"));
        assert!(f.message.contains("mean distance 0.80 mm"));
    }
}
