//! Where the limits come from, numbered once for the whole sheet.

use crate::check::Verdict;
use crate::report::record::SetRecord;
use crate::report::words::{findings_of, one_line};
use maud::{Markup, html};

/// Sources in the order in which the sheet first names them.
pub(super) struct Sources {
    list: Vec<String>,
}

impl Sources {
    /// Collects the sources of the passes; those of fails and cautions are written out where they stand.
    pub(super) fn of(set: &SetRecord) -> Self {
        let mut list: Vec<String> = Vec::new();
        for finding in set.stages.iter().flat_map(|s| findings_of(s, Verdict::Pass)) {
            let source = one_line(&finding.source);
            if !list.contains(&source) {
                list.push(source);
            }
        }
        Self { list }
    }

    /// The number of a source, leading to the list; the source itself when it isn't in the list.
    pub(super) fn reference(&self, source: &str) -> Markup {
        let source = one_line(source);
        let number = self.list.iter().position(|s| *s == source).map(|k| k + 1);
        html! {
            @if let Some(n) = number { a href=(format!("#source-{n}")) title=(source) { "[" (n) "]" } }
            @else { (source) }
        }
    }

    /// The list.
    pub(super) fn section(&self) -> Markup {
        html! {
            @if !self.list.is_empty() {
                h3 #sources { "Sources of the limits" }
                ol .sources {
                    @for (k, source) in self.list.iter().enumerate() {
                        li id=(format!("source-{}", k + 1)) { (source) }
                    }
                }
            }
        }
    }
}
