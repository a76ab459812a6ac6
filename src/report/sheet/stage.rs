//! One stage on the sheet: pictures, figures, findings, files.

use super::badge;
use super::embed::{PngFacts, data_uri, png_facts};
use super::sources::Sources;
use crate::check::{Finding, Verdict};
use crate::report::picture::VIEWS;
use crate::report::record::{SetRecord, StageRecord};
use crate::report::words::{
    advice_of, check_name, figure, findings_of, grouped, grouped_findings, moment, one_line, place, printed,
    stage_name,
};
use crate::units::Unit;
use maud::{Markup, html};

/// A picture ready to be shown.
pub(super) struct NamedPicture {
    pub(super) name: String,
    pub(super) caption: &'static str,
    uri: String,
    facts: PngFacts,
}

impl NamedPicture {
    /// `None` when the bytes are no PNG.
    pub(super) fn of((name, png): &(String, Vec<u8>)) -> Option<Self> {
        let facts = png_facts(png)?;
        let caption = VIEWS.iter().find(|(view, _)| view == name).map_or("", |(_, caption)| *caption);
        Some(Self { name: one_line(name), caption, uri: data_uri(png), facts })
    }

    pub(super) fn image(&self, alt: &str) -> Markup {
        html! { img src=(self.uri) alt=(alt) width=(self.facts.width) height=(self.facts.height); }
    }

    fn figure(&self, record: &StageRecord) -> Markup {
        let alt = format!("{}: {}, {}", stage_name(record.index, record.tau), self.name, self.caption);
        html! {
            figure {
                (self.image(&alt))
                figcaption {
                    b { (check_name(&self.name)) } @if !self.caption.is_empty() { ": " (self.caption) }
                }
            }
        }
    }
}

pub(super) fn stage(
    set: &SetRecord,
    record: &StageRecord,
    pictures: &[NamedPicture],
    sources: &Sources,
) -> Markup {
    let id = format!("stage-{}", record.index);
    let large = |p: &&NamedPicture| matches!(p.name.as_str(), "portrait" | "opened");
    let width = pictures.iter().find_map(|p| p.facts.width_mm);
    html! {
        section .card .stage aria-labelledby=(id) {
            h2 #(id) { "Stage " (record.index) ": tau = " (format!("{:.3}", record.tau)) (badge(record.verdict())) }
            p { (moment(record.tau)) }
            div .large { @for p in pictures.iter().filter(large) { (p.figure(record)) } }
            div .plain { @for p in pictures.iter().filter(|p| !large(p)) { (p.figure(record)) } }
            @if let Some(width) = width {
                p .soft { "Parallel views; each picture is " (format!("{width:.0}")) " mm wide." }
            }
            (figures(set, record))
            (findings(record, sources))
            (files(record))
        }
    }
}

fn figures(set: &SetRecord, record: &StageRecord) -> Markup {
    let (skin, solid) = (&record.skin, &record.solid);
    let [min, max] = solid.bbox_mm;
    let size = (0..3).map(|k| format!("{:.1}", max[k] - min[k])).collect::<Vec<_>>().join(" × ");
    let fold = skin.regularity.fold_margin.map_or("none for this family".into(), |m| figure(m, Unit::Ratio));
    let rows: Vec<(&str, String)> = vec![
        ("Size x × y × z", format!("{size} mm")),
        ("Wall asked for", printed(set.job.wall_mm, Unit::Mm)),
        ("Mass", printed(solid.mass_g, Unit::Gram)),
        ("Volume of material", printed(solid.volume_mm3, Unit::Mm3)),
        ("Surface, chambers included", printed(solid.area_mm2, Unit::Mm2)),
        ("Chambers", solid.chambers.to_string()),
        ("Shells", solid.shells.to_string()),
        ("Euler number", solid.euler.to_string()),
        ("Triangles", grouped(solid.triangles)),
        ("Vertices", grouped(solid.vertices)),
        ("Deviation from exact surface", printed(solid.deviation_mm, Unit::Mm)),
        ("Sampling grid", printed(solid.grid_mm, Unit::Mm)),
        ("Skin: area", printed(skin.area_mm2, Unit::Mm2)),
        ("Skin: signed volume", printed(skin.signed_volume_mm3, Unit::Mm3)),
        ("Skin: least radius", printed(skin.min_radius_mm, Unit::Mm)),
        ("Skin: fold margin", fold),
        ("Skin: least stretch", figure(skin.regularity.sigma_min, Unit::Ratio)),
    ];
    html! {
        h3 { "Figures" }
        dl .figures { @for (name, value) in &rows { div { dt { (name) } dd { (value) } } } }
        p .soft {
            "Chambers are closed rooms of air inside the material. A fold margin above 0 says that the skin has \
             no crease; least stretch is the smallest factor by which the unit sphere is stretched to become it."
        }
    }
}

fn findings(record: &StageRecord, sources: &Sources) -> Markup {
    let passes: Vec<&Finding> = findings_of(record, Verdict::Pass).collect();
    html! {
        h3 { "Findings" }
        @if record.findings.is_empty() { p { "No check was run." } }
        @for verdict in [Verdict::Fail, Verdict::Caution] {
            @for group in grouped_findings(record, verdict) { (told(&group)) }
        }
        @if !passes.is_empty() {
            details .screen {
                summary { (passes.len()) " figures within their limits or for information" }
                (table(&passes, sources))
            }
            div .paper {
                p { b { "Within their limits or for information" } }
                (table(&passes, sources))
            }
        }
    }
}

/// Findings of one check that ask for something.
fn told(group: &[&Finding]) -> Markup {
    let first = group[0];
    html! {
        div .finding .(first.verdict.word()) {
            p { (badge(first.verdict)) " " b { (check_name(first.check)) } }
            @if let [only] = group {
                p { (one_line(&only.message)) }
                p .numbers { (numbers(only)) }
            } @else {
                ul .lines {
                    @for finding in group {
                        li { (one_line(&finding.message)) " " span .numbers { (numbers(finding)) } }
                    }
                }
            }
            @for advice in advice_of(group) { p { b { "What to change: " } (one_line(advice)) } }
            p .source { "Limit from: " (one_line(&first.source)) }
        }
    }
}

fn numbers(finding: &Finding) -> Markup {
    html! {
        "Measured " b { (printed(finding.value, finding.unit)) }
        @if let Some(limit) = finding.limit { " · limit " b { (printed(limit, finding.unit)) } }
        @if let Some(p) = &finding.place_mm { " · place " (place(p)) }
    }
}

fn table(findings: &[&Finding], sources: &Sources) -> Markup {
    html! {
        div .scroll {
            table .stack {
                thead { tr { th { "Check" } th { "Measured" } th { "Limit" } th { "What was found" } th { "Source" } } }
                tbody {
                    @for f in findings {
                        tr {
                            td { b { (check_name(f.check)) } }
                            td .nowrap data-label="Measured" { (printed(f.value, f.unit)) }
                            td .nowrap data-label="Limit" {
                                @if let Some(limit) = f.limit { (printed(limit, f.unit)) } @else { "none" }
                            }
                            td {
                                (one_line(&f.message))
                                @if let Some(p) = &f.place_mm { " Place: " (place(p)) "." }
                            }
                            td data-label="Source" { (sources.reference(&f.source)) }
                        }
                    }
                }
            }
        }
    }
}

fn files(record: &StageRecord) -> Markup {
    html! {
        h3 { "Files" }
        @if record.files.is_empty() { p { "None was written." } }
        @else {
            table .stack {
                thead { tr { th { "File" } th { "SHA-256" } } }
                tbody {
                    @for (format, path) in &record.files {
                        tr {
                            td .nowrap { a href=(link(path)) { (one_line(path)) } }
                            td .hash data-label="SHA-256" {
                                @if let Some(sum) = record.sha256.get(format) { code { (one_line(sum)) } } @else { "not known" }
                            }
                        }
                    }
                }
            }
        }
        p .soft {
            @if record.files.contains_key("obj") { "The OBJ file takes its colours from the material file beside it. " }
            "STL and OBJ files carry no unit: their numbers are mm. Placement, from the family's own \
             coordinates to the mm of the files: "
            @for (k, row) in record.placement.iter().enumerate() {
                @if k > 0 { " · " }
                code .nowrap { (row.map(|x| format!("{:.5}", x + 0.0)).join(" ")) }
            }
        }
    }
}

/// A relative link to a file: `./` in front, so that no name is taken for a protocol, and every byte that
/// isn't plain written as `%xx`.
fn link(path: &str) -> String {
    let mut out = String::from("./");
    for byte in path.bytes() {
        if byte.is_ascii_alphanumeric() || b"-_./".contains(&byte) {
            out.push(char::from(byte));
        } else {
            out.push_str(&format!("%{byte:02X}"));
        }
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn links_stay_beside_the_sheet() {
        assert_eq!(link("01-tau-0.000.stl"), "./01-tau-0.000.stl");
        assert_eq!(link("javascript:x"), "./javascript%3Ax");
        assert_eq!(link("a \"b\""), "./a%20%22b%22");
    }
}
