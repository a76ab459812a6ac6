//! `sheet.html` and `cautions.txt`: what they must hold, what they must never hold.

use super::sample;
use stagewright::check::Verdict;
use stagewright::geom::Vec3;
use stagewright::mesh::{Side, shapes};
use stagewright::report::picture::{Frame, Look, View, render};
use stagewright::report::{SetRecord, cautions_text, sheet_html};

/// Name of the view and PNG.
type Named = Vec<(String, Vec<u8>)>;

/// A small picture under two view names.
fn pictures() -> Vec<(usize, Named)> {
    let ball = shapes::on_side(&shapes::icosphere(10.0, 2), Side::A);
    let view = View {
        direction: -Vec3::y(),
        up: Vec3::z(),
        frame: Frame::Fixed { centre: Vec3::zeros(), width_mm: 25.0 },
        size_px: [20, 20],
        section: None,
        supersample: 1,
        ground: false,
    };
    let png = render(&ball, &view, &Look::default()).unwrap();
    vec![(2, vec![("portrait".into(), png.clone()), ("section".into(), png)])]
}

fn sheet(set: &SetRecord) -> String {
    sheet_html(set, &pictures())
}

/// Every tag of the page that opens, and that each one that must close does, in the right order.
fn tags(page: &str) -> Vec<&str> {
    const VOID: [&str; 2] = ["meta", "img"];
    let mut open: Vec<&str> = Vec::new();
    let mut all = Vec::new();
    let mut rest = page;
    while let Some(at) = rest.find('<') {
        rest = &rest[at + 1..];
        let end = rest.find('>').unwrap();
        let tag = &rest[..end];
        rest = &rest[end + 1..];
        if let Some(name) = tag.strip_prefix('/') {
            assert_eq!(open.pop(), Some(name), "</{name}> closes another tag");
        } else if !tag.starts_with('!') {
            let name = tag.split(' ').next().unwrap();
            all.push(tag);
            if !VOID.contains(&name) {
                open.push(name);
            }
        }
    }
    assert!(open.is_empty(), "{open:?} stay open");
    all
}

/// Panics when the page could load anything or run anything.
fn assert_self_contained(page: &str) {
    for tag in tags(page) {
        for attribute in ["src=\"", "href=\"", "action=\"", "data=\"", "srcset=\"", "poster=\""] {
            for value in tag.split(attribute).skip(1).map(|v| v.split('"').next().unwrap()) {
                let inside = value.starts_with("data:image/png;base64,") && attribute == "src=\"";
                let near = value.starts_with('#') || value.starts_with("./");
                assert!(inside || (near && attribute == "href=\""), "{attribute}{value}");
            }
        }
        let name = tag.split(' ').next().unwrap();
        assert!(!["script", "iframe", "link", "object", "embed", "form", "base"].contains(&name), "{tag}");
        let unquoted: Vec<&str> = tag.split('"').step_by(2).collect();
        assert!(!unquoted.iter().any(|part| part.trim_start().starts_with("on")), "no handlers: {tag}");
    }
    for word in ["http:", "https:", "//", "url(", "@import", "expression("] {
        let found: Vec<usize> = page.match_indices(word).map(|(at, _)| at).collect();
        // The one place: the gradient of the time line, which is in the page. Base 64 may hold slashes.
        for at in found {
            let local = page[at..].starts_with("url(#sides)");
            let in_picture =
                page[..at].rfind('"').is_some_and(|q| page[q..].starts_with("\"data:image/png;base64,"));
            assert!(local || in_picture, "{}", &page[at.saturating_sub(30)..at + 30]);
        }
    }
}

#[test]
fn the_page_is_well_formed_and_asks_for_nothing() {
    let page = sheet(&sample::set());
    assert_self_contained(&page);
    assert!(page.starts_with("<!DOCTYPE html><html lang=\"en\">"));
    assert!(page.contains("default-src 'none'"));
}

#[test]
fn hostile_text_stays_text() {
    let evil = "\"><script>alert(1)</script>'&<img src=x onerror=y>\u{202e}\n";
    let mut set = sample::set();
    set.job.title = evil.into();
    set.job.family = evil.into();
    set.job.profile = evil.into();
    set.profile.name = evil.into();
    set.profile.title = evil.into();
    set.profile.process = evil.into();
    set.profile.process_code = evil.into();
    set.profile.material = evil.into();
    set.profile.cautions = vec![evil.into()];
    set.profile.density_g_cm3.source = evil.into();
    set.family_source = evil.into();
    set.failures.push((3, 0.7, evil.into()));
    for finding in &mut set.stages[0].findings {
        finding.message = evil.into();
        finding.advice = evil.into();
        finding.source = evil.into();
    }
    set.stages[0].files.insert("obj".into(), format!("javascript:{evil}"));
    set.stages[0].sha256.insert("obj".into(), evil.into());
    let page = sheet_html(
        &set,
        &[(1, vec![(evil.into(), pictures()[0].1[0].1.clone()), ("front".into(), evil.into())])],
    );
    assert_self_contained(&page);
    assert!(!page.contains("<script") && !page.contains("<img src=x"));
    assert!(page.contains("&lt;script&gt;alert(1)&lt;/script&gt;"));
    assert!(!page.contains('\u{202e}'));
    assert!(!cautions_text(&set).contains('\u{202e}'));
}

#[test]
fn every_picture_has_words_and_its_size() {
    let page = sheet(&sample::set());
    let images: Vec<&str> = tags(&page).into_iter().filter(|t| t.starts_with("img ")).collect();
    // Two views on the stage's own part, the portrait once more on the shelf.
    assert_eq!(images.len(), 3);
    for image in images {
        assert!(image.contains("alt=\"Stage 2, tau = 0.500") && image.contains("width=\"20\" height=\"20\""));
    }
    assert!(page.contains("each picture is 25 mm wide"));
}

#[test]
fn a_maker_finds_the_figures_with_units_and_what_to_change() {
    let mut set = sample::set();
    set.stages[0].findings[1].verdict = Verdict::Fail;
    set.stages[0].findings[1].advice = "Set wall_mm to 2.4 or more.".into();
    let page = sheet(&set);
    for wanted in [
        "82.0 × 82.0 × 82.0 mm",
        "40.2 cm³",
        "50.3 g",
        "100.6 g", // the set
        "80.4 cm³",
        "402.4 cm²",
        "12,800",
        "6,404",
        "limit <b>1.20 mm</b>",
        "place x 0.0, y 0.0, z 41.5 mm",
        "Set wall_mm to 2.4 or more.",
        "Limit from: common practice, no source",
        "Side A, outside at tau = 0",
        "Side B, outside at tau = 1",
        "./01-tau-0.000.stl",
        "0f0f0f0f",
        "times = [",
        "demo formulas",
        "Ventilate the room while it prints.",
        "fill:#1f7a7a",
        "fill:#e3c08f",
    ] {
        assert!(page.contains(wanted), "{wanted} is missing");
    }
    let (fail, caution) = (page.find("Wall ball").unwrap(), page.find("Chambers sealed").unwrap());
    assert!(fail < caution, "fails come first");
    // On paper nothing is folded away.
    assert!(page.contains("class=\"paper\"") && page.contains("details class=\"screen\""));
}

#[test]
fn findings_of_one_check_are_told_together() {
    let mut set = sample::set();
    let mut more = set.stages[0].findings[2].clone();
    more.message = "A second chamber.".into();
    set.stages[0].findings.insert(3, more);
    set.stages.truncate(1);
    let page = sheet_html(&set, &[]);
    assert_eq!(page.matches("class=\"finding caution\"").count(), 1);
    assert!(page.contains("<li>A second chamber. "));
    let text = cautions_text(&set);
    assert_eq!(text.matches("Chambers sealed (caution)").count(), 1);
    assert_eq!(text.matches("What to change:").count(), 1, "the same advice is given once");
    assert!(text.contains("A second chamber."));
}

#[test]
fn what_was_not_made_or_not_measured_is_said() {
    let mut set = sample::set();
    set.failures.push((3, 0.7, "The grid would need 90 GiB; raise grid_mm.".into()));
    set.stages[0].solid.mass_g = f64::NAN;
    set.stages[1].files.clear();
    let page = sheet(&set);
    assert!(page.contains("2 of 3") && page.contains("raise grid_mm") && page.contains("not measured"));
    assert!(page.contains("None was written."));
    assert!(!page.contains("NaN") && !page.contains(">inf"));
    set.stages.clear();
    assert_self_contained(&sheet(&set));
    assert!(cautions_text(&set).contains("Stage 3, tau = 0.700: not made"));
}

#[test]
fn no_report_pronounces_a_part_fit() {
    let set = sample::set();
    for text in [sheet_html(&set, &[]), cautions_text(&set)] {
        // The one place is a word of the content security policy.
        let lower = text.to_lowercase().replace("'unsafe-inline'", "");
        for word in ["safe", "compliant", "complies", "certified", "approved"] {
            assert!(!lower.contains(word), "{word}");
        }
        assert!(
            lower.contains("qualified laboratory")
                && lower.contains("local law")
                && lower.contains("local codes")
        );
    }
}

#[test]
fn cautions_fit_78_columns_and_tell_small_stages_from_large() {
    let mut set = sample::set();
    set.stages[1].solid.bbox_mm = [[0.0; 3], [40.0, 30.0, 30.0]];
    let text = cautions_text(&set);
    assert!(text.lines().all(|l| l.chars().count() <= 78 && l.trim_end() == l), "{text}");
    assert!(text.contains("- Stage 1: the greatest extent is above 65.38 mm"));
    assert!(text.contains("- Stage 2: the greatest extent is not above 65.38 mm"));
    assert!(text.is_ascii() && text.ends_with('\n'));
}

/// The golden files are reviewed as a diff; to renew one, write what the test prints as "now" into it.
#[test]
fn the_small_set_is_worded_as_reviewed() {
    let set = sample::set();
    let page = sheet_html(&set, &[]);
    let style = page.find("<style>").unwrap()..page.find("</style>").unwrap();
    let body = format!("{}{}", &page[..style.start], &page[style.end..]).replace("><", ">\n<") + "\n";
    let body = body.replace(env!("CARGO_PKG_VERSION"), "VERSION");
    for (now, golden, name) in [
        (body, include_str!("../golden/sheet.html"), "sheet.html"),
        (cautions_text(&set), include_str!("../golden/cautions.txt"), "cautions.txt"),
    ] {
        assert!(now == golden, "tests/golden/{name} differs; now:\n{now}");
    }
}
