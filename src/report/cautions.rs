//! What to know before printing, showing and handing out a set; the same words on the sheet and in
//! `cautions.txt`.
//!
//! The wording keeps to one rule: measurements are given against published figures, with their source, and
//! nothing is pronounced fit for a use. Who decides is named instead: local codes and qualified laboratories.

use super::record::{SetRecord, StageRecord};
use super::words::{
    advice_of, check_name, grouped_findings, one_line, place, set_sentence, stage_name, verdict_sentence,
};
use crate::check::Verdict;

/// A heading and the lines under it.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct Section {
    pub(super) heading: String,
    pub(super) lines: Vec<String>,
}

/// Longest segment that lies inside the small-parts cylinder, mm: diameter 31.75 mm, greatest depth 57.15 mm
/// (16 CFR 1501.4, figure 1; the segment is derived, the square root of the sum of their squares).
const CYLINDER_SEGMENT_MM: f64 = 65.38;

/// Mouths of cups and half-eggs in this range are looked at by EN 71-1, 5.12, mm.
const BOWL_MOUTH_MM: [f64; 2] = [64.0, 102.0];

/// Width of `cautions.txt`, columns.
const COLUMNS: usize = 78;

/// What must be known of the set as a whole, without the findings.
pub(super) fn general(set: &SetRecord) -> Vec<Section> {
    vec![
        Section {
            heading: "What the verdicts mean".into(),
            lines: vec![
                "Pass, caution and fail compare what was measured on the files with the limit quoted beside \
                 it. The limits are screening values from published guides, not a standard; tables differ \
                 by a factor of 2 to 4. Print a calibration part on your machine first (ISO/ASTM 52902:2023 \
                 describes such parts) and put your own limits into the profile."
                    .into(),
                "They are no certificate and no approval for any use. Have a qualified laboratory test the \
                 product; local codes and local law decide."
                    .into(),
            ],
        },
        Section {
            heading: format!(
                "Process: {}, {}",
                one_line(&set.profile.process),
                one_line(&set.profile.material)
            ),
            lines: set.profile.cautions.iter().map(|c| one_line(c)).collect(),
        },
        Section { heading: "Children and small parts".into(), lines: small_parts(set) },
        Section { heading: "Handling and showing".into(), lines: handling() },
    ]
}

fn small_parts(set: &SetRecord) -> Vec<String> {
    let mut lines = Vec::new();
    let extent = |s: &StageRecord| {
        let [min, max] = s.solid.bbox_mm;
        (0..3).map(|k| max[k] - min[k]).fold(f64::NAN, f64::max)
    };
    let (mut large, mut open, mut bowls) = (Vec::new(), Vec::new(), Vec::new());
    for stage in &set.stages {
        let size = extent(stage);
        if size > CYLINDER_SEGMENT_MM {
            large.push(stage.index)
        } else {
            open.push(stage.index)
        }
        if size >= BOWL_MOUTH_MM[0] {
            bowls.push(stage.index);
        }
    }
    if !large.is_empty() {
        lines.push(format!(
            "{}: the greatest extent is above {CYLINDER_SEGMENT_MM} mm, the longest segment (worked out from its \
             figure) inside the small-parts cylinder of 16 CFR 1501.4 (EN 71-1, 8.2 and ISO 8124-1 use the \
             same cylinder), so the whole part does not fit it. Pieces that break off may: the rule also covers every piece \
             that comes off in use-and-abuse tests (16 CFR 1500.50 to 1500.53).",
            numbered(&large)
        ));
    }
    if !open.is_empty() {
        lines.push(format!(
            "{}: the greatest extent is not above {CYLINDER_SEGMENT_MM} mm, so the part may fit the \
             small-parts cylinder of 16 CFR 1501.4 (EN 71-1, 8.2 and ISO 8124-1 use the same cylinder). \
             Whether it does was not decided here. Keep it from children under 3 years until a qualified \
             laboratory has tested it.",
            numbered(&open)
        ));
    }
    if !bowls.is_empty() {
        lines.push(format!(
            "{}: halved or opened, a stage of this size makes a bowl. Bowls with a mouth of {:.0} to {:.0} \
             mm are looked at by EN 71-1, 5.12, because they can seal over a child's nose and mouth; the \
             remedies named there are two spaced holes, a divider or a scalloped rim.",
            numbered(&bowls),
            BOWL_MOUTH_MM[0],
            BOWL_MOUTH_MM[1]
        ));
    }
    lines.push(
        "Join parts without magnets: a loose magnet that fits the cylinder has a limit of its own (16 CFR \
         1262.3)."
            .into(),
    );
    lines.push(
        "A set sold or given to children needs the tests, labels and papers of the place where it is handed \
         out. Have a qualified laboratory test the product; local law applies."
            .into(),
    );
    lines
}

fn handling() -> Vec<String> {
    [
        "Feel every edge and tip before the part is touched by others, and take off strings, burrs and \
         supports. No published least edge radius for touch objects was found; the advice of the ADA \
         standards is \"no sharp or abrasive edges\".",
        "Items that are shown must not become a hazard by where they stand (Smithsonian Guidelines for \
         Accessible Exhibition Design). Whether a part stands steady, hangs or carries a load was not \
         measured here: mass and wall are geometry, not strength. Ask a licensed practice; local codes apply.",
        "How printed polymers age is little studied (Coon et al. 2016, Heritage Science 4). Keep the recipe \
         of this set: equal jobs give equal files, so a broken part can be made again.",
    ]
    .map(String::from)
    .to_vec()
}

/// `Stage 3` or `Stages 1, 2 and 5`.
fn numbered(indices: &[usize]) -> String {
    let words: Vec<String> = indices.iter().map(usize::to_string).collect();
    match words.split_last() {
        None => String::new(),
        Some((only, [])) => format!("Stage {only}"),
        Some((last, rest)) => format!("Stages {} and {last}", rest.join(", ")),
    }
}

/// The cautions of a set as plain text, wrapped to 78 columns, for `cautions.txt`.
///
/// Fails and cautions of every stage come first, then what holds for the whole set. A word longer than a
/// line is not broken.
#[must_use]
pub fn cautions_text(set: &SetRecord) -> String {
    let mut out = Vec::new();
    let title = one_line(&set.job.title);
    wrap(&mut out, "", "", &format!("Cautions for \"{title}\""));
    out.push("=".repeat(COLUMNS));
    wrap(&mut out, "", "", &set_sentence(set));
    out.push(String::new());
    wrap(
        &mut out,
        "",
        "",
        &format!("Verdict: {}. {}", set.verdict().word(), verdict_sentence(set.verdict())),
    );
    for (index, tau, reason) in &set.failures {
        heading(&mut out, &format!("{}: not made", stage_name(*index, *tau)));
        wrap(&mut out, "- ", "  ", &one_line(reason));
    }
    for stage in &set.stages {
        heading(&mut out, &format!("{}: {}", stage_name(stage.index, stage.tau), stage.verdict().word()));
        for verdict in [Verdict::Fail, Verdict::Caution] {
            for group in grouped_findings(stage, verdict) {
                let mut text = format!("{} ({}):", check_name(group[0].check), verdict.word());
                for finding in &group {
                    text.push_str(&format!(" {}", finding.message));
                    if let Some(p) = &finding.place_mm {
                        text.push_str(&format!(" Place: {}.", place(p)));
                    }
                }
                for advice in advice_of(&group) {
                    text.push_str(&format!(" What to change: {advice}"));
                }
                text.push_str(&format!(" [Limit: {}]", group[0].source));
                wrap(&mut out, "- ", "  ", &one_line(&text));
            }
        }
        if stage.verdict() == Verdict::Pass {
            wrap(&mut out, "- ", "  ", verdict_sentence(Verdict::Pass));
        }
    }
    for section in general(set) {
        heading(&mut out, &section.heading);
        for line in &section.lines {
            wrap(&mut out, "- ", "  ", line);
        }
    }
    out.push(String::new());
    out.join("\n")
}

fn heading(out: &mut Vec<String>, text: &str) {
    out.push(String::new());
    let first = out.len();
    wrap(out, "", "", text);
    let width = out[first..].iter().map(|line| line.chars().count()).max().unwrap_or(0);
    out.push("-".repeat(width));
}

/// Adds `text` in lines of at most [`COLUMNS`] columns, the first after `first`, the others after `rest`.
fn wrap(out: &mut Vec<String>, first: &str, rest: &str, text: &str) {
    let mut line = first.to_owned();
    let mut empty = true;
    for word in text.split_whitespace() {
        let length = line.chars().count() + word.chars().count() + usize::from(!empty);
        if !empty && length > COLUMNS {
            out.push(std::mem::replace(&mut line, rest.to_owned()));
            empty = true;
        }
        if !empty {
            line.push(' ');
        }
        line.push_str(word);
        empty = false;
    }
    out.push(line);
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn long_text_is_wrapped_with_a_hanging_indent() {
        let mut out = Vec::new();
        wrap(&mut out, "- ", "  ", &"word ".repeat(40));
        assert!(out.len() == 3 && out.iter().all(|l| l.len() <= COLUMNS && l.len() > 40));
        assert!(out[0].starts_with("- word") && out[1].starts_with("  word"));
        out.clear();
        wrap(&mut out, "- ", "  ", &"x".repeat(200));
        assert_eq!(out.len(), 1);
    }

    #[test]
    fn stages_are_listed_in_words() {
        assert_eq!(numbered(&[3]), "Stage 3");
        assert_eq!(numbered(&[1, 2, 5]), "Stages 1, 2 and 5");
    }
}
