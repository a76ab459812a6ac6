//! The line of time with the chosen moments on it, as inline SVG.

use crate::report::record::SetRecord;
use maud::{Markup, html};

const WIDTH: f64 = 640.0;
const LEFT: f64 = 26.0;
const LINE_Y: f64 = 46.0;
/// Numbers nearer to each other than this are drawn on different heights.
const CROWDED: f64 = 24.0;

/// Draws tau from 0 to 1, side A outside at the left, and a numbered mark for each stage that was made.
pub(super) fn timeline(set: &SetRecord) -> Markup {
    let x = |tau: f64| LEFT + (WIDTH - 2.0 * LEFT) * tau.clamp(0.0, 1.0);
    let mut marks: Vec<(f64, usize)> = set.stages.iter().map(|s| (x(s.tau), s.index)).collect();
    marks.sort_by(|a, b| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1)));
    let mut high = false;
    let mut last = f64::NEG_INFINITY;
    let mut placed = Vec::with_capacity(marks.len());
    for (at, index) in marks {
        high = at - last < CROWDED && !high;
        last = at;
        placed.push((at, index, high));
    }
    let label = format!(
        "Time line from tau = 0, side A outside, to tau = 1, side B outside, with {} stages marked",
        set.stages.len()
    );
    html! {
        svg .timeline viewBox=(format!("0 0 {WIDTH} 84")) role="img" aria-label=(label) {
            defs {
                linearGradient id="sides" x1="0" x2="1" y1="0" y2="0" {
                    stop .stop-a offset="0" {}
                    stop .stop-b offset="1" {}
                }
            }
            rect x=(LEFT) y=(LINE_Y - 4.0) width=(WIDTH - 2.0 * LEFT) height="8" rx="4" fill="url(#sides)" stroke="#1c2226" stroke-width="0.75" {}
            @for (at, text, anchor) in [(0.0, "tau 0: side A outside", "start"), (0.5, "0.5: halfway", "middle"), (1.0, "1: side B outside", "end")] {
                text x=(x(at) + (at - 0.5) * 20.0) y=(LINE_Y + 32.0) text-anchor=(anchor) .axis { (text) }
                line x1=(x(at)) x2=(x(at)) y1=(LINE_Y + 5.0) y2=(LINE_Y + 12.0) stroke="#1c2226" {}
            }
            @for (at, index, high) in placed {
                @let y = LINE_Y - if high { 34.0 } else { 14.0 };
                circle cx=(format!("{at:.1}")) cy=(LINE_Y) r="5" fill="#fff" stroke="#1c2226" stroke-width="2" {}
                text x=(format!("{at:.1}")) y=(y) text-anchor="middle" .mark { (index) }
            }
        }
    }
}
