//! Figures and findings in words for people.

use super::record::{SetRecord, StageRecord};
use crate::check::{Finding, Verdict};
use crate::geom::Vec3;
use crate::job::Scale;
use crate::units::{Quantity, Unit};

/// A figure with its unit, in plain ASCII; `not measured` when it isn't finite.
pub(super) fn figure(value: f64, unit: Unit) -> String {
    if value.is_finite() { Quantity::new(value, unit).to_string() } else { "not measured".into() }
}

/// The same with the superscripts and signs of print.
pub(super) fn printed(value: f64, unit: Unit) -> String {
    let plain = figure(value, unit);
    let with = |end: &str, sign: &str| plain.strip_suffix(end).map(|number| format!("{number}{sign}"));
    with("m2", "m²").or_else(|| with("m3", "m³")).or_else(|| with(" deg", "°")).unwrap_or(plain)
}

/// A whole number in groups of three: `163,840`.
pub(super) fn grouped(n: usize) -> String {
    let digits = n.to_string();
    let mut out = String::new();
    for (k, digit) in digits.chars().enumerate() {
        if k > 0 && (digits.len() - k).is_multiple_of(3) {
            out.push(',');
        }
        out.push(digit);
    }
    out
}

/// `x 12.0, y -3.5, z 40.1 mm`.
pub(super) fn place(p: &Vec3) -> String {
    format!("x {:.1}, y {:.1}, z {:.1} mm", p.x + 0.0, p.y + 0.0, p.z + 0.0)
}

/// `stage 2, tau = 0.310`.
pub(super) fn stage_name(index: usize, tau: f64) -> String {
    format!("Stage {index}, tau = {tau:.3}")
}

/// Text on one line: whatever breaks or hides text (line ends, control and direction marks) becomes a space.
pub(super) fn one_line(text: &str) -> String {
    let spaced: String = text.chars().map(|c| if c.is_control() || turns(c) { ' ' } else { c }).collect();
    spaced.split_whitespace().collect::<Vec<_>>().join(" ")
}

/// Text with its lines kept and every direction mark written out as TOML writes it: `\u202E`.
pub(super) fn marks_shown(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for c in text.chars() {
        if turns(c) { out.push_str(&format!("\\u{:04X}", u32::from(c))) } else { out.push(c) }
    }
    out
}

/// Whether a character can make a line read in another order than it is written, or break it unseen.
fn turns(c: char) -> bool {
    matches!(c, '\u{200e}'..='\u{200f}' | '\u{2028}'..='\u{202e}' | '\u{2066}'..='\u{2069}' | '\u{feff}')
}

/// One sentence on what the set is.
pub(super) fn set_sentence(set: &SetRecord) -> String {
    let job = &set.job;
    let count = set.stages.len();
    let stages = if count == 1 { "1 printable stage".into() } else { format!("{count} printable stages") };
    let size = match job.scale {
        Scale::Each => format!("each {}", figure(job.size_mm, Unit::Mm)),
        Scale::Common => format!("at one scale, the largest {}", figure(job.size_mm, Unit::Mm)),
    };
    format!(
        "{stages} of a sphere eversion (family {}, symmetry order {}): watertight solids, {size} in its \
         greatest extent, with a wall of {}, checked for {} ({}).",
        one_line(&job.family),
        job.order,
        figure(job.wall_mm, Unit::Mm),
        one_line(&set.profile.title),
        one_line(&set.profile.process),
    )
}

/// One sentence on where in the eversion a stage is.
pub(super) fn moment(tau: f64) -> &'static str {
    if tau <= 0.0 {
        "The round sphere with side A outside: where the eversion begins."
    } else if tau >= 1.0 {
        "The round sphere with side B outside: where the eversion ends."
    } else if (tau - 0.5).abs() < 1e-9 {
        "The halfway model: neither side is more outside than the other."
    } else if tau < 0.5 {
        "Between the round sphere with side A outside and the halfway model."
    } else {
        "Between the halfway model and the round sphere with side B outside."
    }
}

/// What a verdict means for the maker.
pub(super) const fn verdict_sentence(verdict: Verdict) -> &'static str {
    match verdict {
        Verdict::Pass => "Every figure is within the limits it was held against.",
        Verdict::Caution => "Made; read the cautions before printing.",
        Verdict::Fail => "Something will not print as it is, by the limit quoted, or was not made.",
    }
}

/// The findings of a stage with the given verdict, in their order.
pub(super) fn findings_of(stage: &StageRecord, verdict: Verdict) -> impl Iterator<Item = &Finding> {
    stage.findings.iter().filter(move |f| f.verdict == verdict)
}

/// The findings of a stage with the given verdict, neighbours of one check and one source together.
pub(super) fn grouped_findings(stage: &StageRecord, verdict: Verdict) -> Vec<Vec<&Finding>> {
    let mut groups: Vec<Vec<&Finding>> = Vec::new();
    for finding in findings_of(stage, verdict) {
        match groups.last_mut() {
            Some(group) if group[0].check == finding.check && group[0].source == finding.source => {
                group.push(finding);
            }
            _ => groups.push(vec![finding]),
        }
    }
    groups
}

/// The advice of a group, each only once.
pub(super) fn advice_of<'f>(group: &[&'f Finding]) -> Vec<&'f str> {
    let mut all: Vec<&str> = Vec::new();
    for finding in group {
        if !finding.advice.is_empty() && !all.contains(&finding.advice.as_str()) {
            all.push(&finding.advice);
        }
    }
    all
}

/// The name of a check for people: `wall-ball` becomes `Wall ball`.
pub(super) fn check_name(check: &str) -> String {
    let mut name = check.replace('-', " ");
    if let Some(first) = name.get_mut(0..1) {
        first.make_ascii_uppercase();
    }
    name
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn figures_carry_units_and_say_when_there_is_none() {
        assert_eq!(printed(12_540.0, Unit::Mm3), "12.5 cm³");
        assert_eq!(printed(45.0, Unit::Deg), "45.0°");
        assert_eq!(printed(2.0, Unit::Mm), "2.00 mm");
        assert_eq!(figure(f64::NAN, Unit::Mm), "not measured");
        assert_eq!([grouped(7), grouped(1_000), grouped(1_234_567)], ["7", "1,000", "1,234,567"]);
    }

    #[test]
    fn text_that_would_break_a_line_is_put_on_one() {
        assert_eq!(one_line(" a\n\tb\u{202e}c\u{0} "), "a b c");
        assert_eq!(marks_shown("a\u{202e}\nb"), "a\\u202E\nb");
    }
}
