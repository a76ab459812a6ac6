//! `sheet.html`: the set on one page that needs nothing else, on a screen and on paper.
//!
//! Style, pictures and drawings are inside the file; a content security policy in its head forbids the page
//! to ask for anything from outside. All text from the job is escaped by the template.

mod embed;
mod sources;
mod stage;
mod timeline;

use super::cautions::{Section, general};
use super::record::{SetRecord, StageRecord};
use super::words::{grouped, marks_shown, one_line, printed, set_sentence, stage_name, verdict_sentence};
use crate::check::Verdict;
use crate::units::Unit;
use maud::{DOCTYPE, Markup, PreEscaped, html};
use sources::Sources;
use stage::NamedPicture;

/// Pictures of the stages: the stage's index, then name of the view (see `picture::VIEWS`) and PNG bytes.
pub type SheetPictures = [(usize, Vec<(String, Vec<u8>)>)];

const STYLE: &str = include_str!("style.css");

/// What the page may load: its own style and pictures written into it; nothing else.
const POLICY: &str = "default-src 'none'; img-src data:; style-src 'unsafe-inline'";

/// Writes the sheet of a set.
///
/// - `set`: the finished set.
/// - `pictures`: the pictures of its stages, in any order; a stage without pictures is shown without.
/// - returns: one HTML file; equal input gives equal bytes.
#[must_use]
pub fn sheet_html(set: &SetRecord, pictures: &SheetPictures) -> String {
    let title = one_line(&set.job.title);
    let title = if title.is_empty() { "Untitled set".to_owned() } else { title };
    let of_stage = |stage: &StageRecord| -> Vec<NamedPicture> {
        let found = pictures.iter().find(|(index, _)| *index == stage.index);
        found.map(|(_, list)| list.iter().filter_map(NamedPicture::of).collect()).unwrap_or_default()
    };
    let stages: Vec<(&StageRecord, Vec<NamedPicture>)> =
        set.stages.iter().map(|s| (s, of_stage(s))).collect();
    let sources = Sources::of(set);
    let page = html! {
        (DOCTYPE)
        html lang="en" {
            head {
                meta charset="utf-8";
                meta http-equiv="Content-Security-Policy" content=(POLICY);
                meta name="viewport" content="width=device-width, initial-scale=1";
                meta name="color-scheme" content="light";
                meta name="generator" content=(concat!("stagewright ", env!("CARGO_PKG_VERSION")));
                title { (title) ": stages of a sphere eversion" }
                style { (PreEscaped(STYLE)) (PreEscaped(side_colours(set))) }
            }
            body {
                (head(set, &title))
                main {
                    (overview(set, &stages))
                    (failures(set))
                    @for (record, pictures) in &stages { (stage::stage(set, record, pictures, &sources)) }
                    (cautions(set, &sources))
                    (recipe(set))
                }
                footer {
                    p {
                        "Made by stagewright " (env!("CARGO_PKG_VERSION")) ". The file set.json beside this one has the \
                         same figures for programs, cautions.txt the cautions as plain text."
                    }
                }
            }
        }
    };
    page.into_string()
}

fn side_colours(set: &SetRecord) -> String {
    let hex = |[r, g, b]: [u8; 3]| format!("#{r:02x}{g:02x}{b:02x}");
    let (a, b) = (hex(set.job.colour_a), hex(set.job.colour_b));
    format!(".side-a{{fill:{a}}}.side-b{{fill:{b}}}.stop-a{{stop-color:{a}}}.stop-b{{stop-color:{b}}}\n")
}

/// A verdict as a word in a coloured frame.
fn badge(verdict: Verdict) -> Markup {
    html! { span .badge .(verdict.word()) { (verdict.word()) } }
}

fn head(set: &SetRecord, title: &str) -> Markup {
    let totals = set.totals();
    let wanted = set.stages.len() + set.failures.len();
    html! {
        header {
            h1 { (title) }
            p .lead { (set_sentence(set)) }
            p { (badge(set.verdict())) " " (verdict_sentence(set.verdict())) }
            dl .totals {
                div { dt { "Stages made" } dd { (set.stages.len()) " of " (wanted) } }
                div { dt { "Mass, " (one_line(&set.profile.material)) } dd { (printed(totals.mass_g, Unit::Gram)) } }
                div { dt { "Volume of material" } dd { (printed(totals.volume_mm3, Unit::Mm3)) } }
                div { dt { "Triangles" } dd { (grouped(totals.triangles)) } }
            }
            ul .legend {
                li { (swatch("side-a")) "Side A, outside at tau = 0" }
                li { (swatch("side-b")) "Side B, outside at tau = 1" }
                li {
                    svg viewBox="0 0 20 20" aria-hidden="true" {
                        rect width="20" height="20" rx="3" fill="#3a3f44" {}
                        path d="M0 8L8 0M0 16L16 0M4 20L20 4M12 20L20 12" stroke="#7d848a" stroke-width="1.6" {}
                    }
                    "Cut material"
                }
            }
        }
    }
}

fn swatch(side: &str) -> Markup {
    html! {
        svg viewBox="0 0 20 20" aria-hidden="true" {
            rect .(side) x="0.5" y="0.5" width="19" height="19" rx="3" stroke="#1c2226" {}
        }
    }
}

fn overview(set: &SetRecord, stages: &[(&StageRecord, Vec<NamedPicture>)]) -> Markup {
    html! {
        nav .card aria-labelledby="shelf" {
            h2 #shelf { "The set" }
            (timeline::timeline(set))
            ol .shelf {
                @for (record, pictures) in stages {
                    li {
                        a href=(format!("#stage-{}", record.index)) {
                            @if let Some(picture) = pictures.iter().find(|p| p.name == "portrait") {
                                (picture.image(&format!("{}, seen {}", stage_name(record.index, record.tau), picture.caption)))
                            }
                            b { "Stage " (record.index) }
                            small { "tau = " (format!("{:.3}", record.tau)) " · " (printed(record.solid.mass_g, Unit::Gram)) }
                            (badge(record.verdict()))
                        }
                    }
                }
            }
            ul .contents {
                @if !set.failures.is_empty() { li { a href="#not-made" { "Stages that were not made" } } }
                li { a href="#cautions" { "Cautions: process, children, handling" } }
                li { a href="#recipe" { "Recipe: how to make this set again" } }
            }
        }
    }
}

fn failures(set: &SetRecord) -> Markup {
    html! {
        @if !set.failures.is_empty() {
            section .card aria-labelledby="not-made" {
                h2 #not-made { "Not made" }
                @for (index, tau, reason) in &set.failures {
                    div .finding .fail {
                        p { b { (stage_name(*index, *tau)) } }
                        p { (one_line(reason)) }
                    }
                }
            }
        }
    }
}

fn cautions(set: &SetRecord, sources: &Sources) -> Markup {
    html! {
        section .card .chapter aria-labelledby="cautions" {
            h2 #cautions { "Cautions" }
            @for Section { heading, lines } in general(set) {
                h3 { (heading) }
                ul .lines { @for line in &lines { li { (led(line)) } } }
            }
            (sources.section())
        }
    }
}

/// A line with the word before its first colon set off, when it begins with one: `Heat: ...`.
fn led(line: &str) -> Markup {
    match line.split_once(": ") {
        Some((word, rest)) if word.len() <= 24 => html! { b { (word) ":" } " " (rest) },
        _ => html! { (line) },
    }
}

fn recipe(set: &SetRecord) -> Markup {
    let profile = &set.profile;
    html! {
        section .card .whole aria-labelledby="recipe" {
            h2 #recipe { "Recipe" }
            p {
                "This job file, with stagewright " (env!("CARGO_PKG_VERSION")) " and the profile "
                code { (one_line(&profile.name)) } ", makes the same files again, byte for byte."
            }
            pre { (marks_shown(&set.job.to_toml())) }
            p {
                "Process: " (one_line(&profile.process)) " (" (one_line(&profile.process_code)) "). Material: "
                (one_line(&profile.material)) ", " (density(profile.density_g_cm3.value)) " ("
                (one_line(&profile.density_g_cm3.source)) ")."
            }
            p .soft { "Formulas: " (one_line(&set.family_source)) }
        }
    }
}

fn density(g_cm3: f64) -> String {
    if g_cm3.is_finite() { format!("{g_cm3} g/cm³") } else { "density not known".into() }
}
