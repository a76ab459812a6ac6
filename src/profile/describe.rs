//! A profile in readable text, for the command `profiles NAME`.

use super::{Limit, Profile, Trapped};
use std::fmt::Write as _;

/// Widest line, characters.
const WIDTH: usize = 100;
/// Columns before the source: name 26, value and unit 16.
const SOURCE_COLUMN: usize = 42;

/// Words a profile: what it is, one line a limit with value, unit and source, then the cautions.
///
/// Lines are at most 100 characters wide unless a single word is longer; ends with a line break.
#[must_use]
pub fn describe(profile: &Profile) -> String {
    let p = profile;
    let mut out = String::new();
    head(&mut out, p);
    let [x, y, z] = p.envelope_mm;
    let envelope = format!("{x} x {y} x {z} mm");
    let always = [
        ("wall, attached 2+ sides", &p.wall_supported_mm, "mm"),
        ("wall, attached < 2 sides", &p.wall_unsupported_mm, "mm"),
        ("clearance", &p.clearance_mm, "mm"),
        ("smallest feature", &p.feature_mm, "mm"),
        ("text stroke", &p.text_stroke_mm, "mm"),
        ("layer height", &p.layer_mm, "mm"),
        ("density", &p.density_g_cm3, "g/cm3"),
    ];
    let sometimes = [
        ("overhang, from horizontal", &p.overhang_deg, "deg", "carries overhangs"),
        ("bridge", &p.bridge_mm, "mm", "no limit"),
        ("drain hole", &p.drain_mm, "mm", "no limit"),
        ("drain holes a chamber", &p.drain_count, "", "no limit"),
    ];
    line(&mut out, "limit", "value", "source");
    for (name, limit, unit) in always {
        limit_line(&mut out, name, limit, unit);
    }
    for (name, limit, unit, absent) in sometimes {
        match limit {
            Some(l) => limit_line(&mut out, name, l, unit),
            None => line(&mut out, name, absent, "-"),
        }
    }
    line(&mut out, "build envelope", &envelope, &p.envelope_source);
    out.push('\n');
    wrapped(
        &mut out,
        "angle is measured from the HORIZONTAL: a ceiling has 0 deg, a plumb wall 90 deg; surface facing \
         down at less than the limit counts as overhang.",
        "The overhang ",
        0,
    );
    out.push_str("\nCautions\n");
    for c in &p.cautions {
        wrapped(&mut out, c, "- ", 2);
    }
    out
}

fn head(out: &mut String, p: &Profile) {
    let trapped = match p.trapped {
        Trapped::Air => "air (and any support built inside)",
        Trapped::Powder => "loose powder",
        Trapped::Resin => "uncured liquid resin",
        Trapped::Support => "support material",
    };
    // Writing to a String can't fail.
    let _ = writeln!(out, "{}: {}", p.name, p.title);
    let _ = writeln!(out, "process   {} ({}), by its ISO/ASTM 52900 name", p.process, p.process_code);
    let _ = writeln!(out, "material  {}", p.material);
    let _ = writeln!(out, "a sealed chamber keeps {trapped}");
    out.push_str(
        "Screening values: defaults of this tool, not of a standard. Print a calibration part (ISO/ASTM\n\
         52902:2023) and change them in a profile file of your own.\n\n",
    );
}

fn limit_line(out: &mut String, name: &str, limit: &Limit, unit: &str) {
    line(out, name, format!("{} {unit}", limit.value).trim_end(), &limit.source);
}

fn line(out: &mut String, name: &str, value: &str, source: &str) {
    let start = format!("{name:<26}{value:<15} ");
    wrapped(out, source, &start, SOURCE_COLUMN);
}

/// Adds `text` after `start`, broken at blanks, further lines indented by `indent`.
fn wrapped(out: &mut String, text: &str, start: &str, indent: usize) {
    out.push_str(start);
    let mut column = start.chars().count();
    let mut fresh = true;
    for word in text.split_whitespace() {
        let length = word.chars().count();
        if !fresh && column + 1 + length > WIDTH {
            out.push('\n');
            out.push_str(&" ".repeat(indent));
            column = indent;
        } else if !fresh {
            out.push(' ');
            column += 1;
        }
        out.push_str(word);
        column += length;
        fresh = false;
    }
    out.push('\n');
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::profile::built_in_names;

    #[test]
    fn every_number_is_printed_with_unit_source_and_plane() {
        let text = describe(&Profile::built_in("mex-pla").unwrap());
        assert!(text.contains("wall, attached 2+ sides   1.2 mm"));
        assert!(text.contains("overhang, from horizontal 45 deg"));
        assert!(text.contains("density                   1.24 g/cm3"));
        assert!(text.contains("200 x 200 x 200 mm"));
        assert!(text.contains("common practice, no source"));
        assert!(text.contains("measured from the HORIZONTAL"));
        assert!(text.contains("- Heat: PLA softens near 60 C"));
        let powder = describe(&Profile::built_in("pbf-pa12").unwrap());
        assert!(powder.contains("overhang, from horizontal carries overhangs"));
    }

    #[test]
    fn lines_stay_within_the_width_and_columns_align() {
        for name in built_in_names() {
            let text = describe(&Profile::built_in(name).unwrap());
            for l in text.lines() {
                assert!(l.chars().count() <= WIDTH, "{name}: {l}");
            }
            let at = |s: &str| text.lines().find(|l| l.starts_with(s)).unwrap().to_owned();
            assert_eq!(at("limit").find("source"), Some(SOURCE_COLUMN));
            assert_ne!(at("clearance").as_bytes()[SOURCE_COLUMN], b' ');
            assert_eq!(at("clearance").as_bytes()[SOURCE_COLUMN - 1], b' ');
        }
    }
}
