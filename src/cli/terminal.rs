//! What is printed, and where. A closed pipe ends the printing, never the work.

use super::args::Command;
use comfy_table::{CellAlignment, ContentArrangement, Table, presets};
use std::io::{self, IsTerminal as _, Write as _};

/// Where the words of a command go.
pub(super) struct Terminal {
    quiet: bool,
    json: bool,
}

impl Terminal {
    pub(super) fn new(command: &Command) -> Self {
        let (quiet, json) = match command {
            Command::Make(a) => (a.quiet, a.json),
            Command::Plan(a) => (false, a.json),
            Command::Inspect(a) => (false, a.json),
            Command::Families | Command::Profiles(_) => (false, false),
        };
        Self { quiet, json }
    }

    /// Whether progress may be shown: to a person, on the stream for messages.
    pub(super) fn shows_progress(&self) -> bool {
        !self.quiet && !self.json && io::stderr().is_terminal()
    }

    /// Prints the outcome for people; nothing when quiet or when JSON is wanted.
    pub(super) fn say(&self, text: &str) {
        if !self.quiet && !self.json {
            out(text);
        }
    }

    /// Prints the outcome for programs.
    pub(super) fn json(&self, value: &serde_json::Value) {
        if self.json {
            out(&format!("{value:#}"));
        }
    }

    /// Prints a message that is no outcome: notes, warnings.
    pub(super) fn note(&self, text: &str) {
        if !self.quiet && !self.json {
            message(text);
        }
    }

    /// Prints why something asked for was not made; also when quiet, and as JSON too when that is wanted.
    pub(super) fn error(&self, error: &anyhow::Error) {
        let job_errors = error.downcast_ref::<crate::job::JobErrors>();
        match job_errors {
            Some(e) => message(e.render(colours()).trim_end()),
            None => message(&format!("error: {error:#}")),
        }
        if self.json {
            out(&format!("{:#}", serde_json::json!({ "status": 2, "error": format!("{error:#}") })));
        }
    }

    /// Prints a failure that did not end the command.
    pub(super) fn failure(&self, text: &str) {
        message(&format!("error: {text}"));
    }
}

/// Whether messages may have colours.
fn colours() -> bool {
    io::stderr().is_terminal() && std::env::var_os("NO_COLOR").is_none_or(|v| v.is_empty())
}

/// Whoever reads the outcome may stop reading: a closed pipe is no fault of the work.
fn out(text: &str) {
    let mut stdout = io::stdout().lock();
    let _ = writeln!(stdout, "{}", text.trim_end()).and_then(|()| stdout.flush());
}

fn message(text: &str) {
    let _ = writeln!(io::stderr().lock(), "{text}");
}

/// A table with a line under its head; columns in `right` are aligned to the right.
pub(super) fn table<const N: usize>(head: [&str; N], right: &[usize], rows: Vec<[String; N]>) -> String {
    let mut table = Table::new();
    table.load_preset(presets::NOTHING).set_content_arrangement(ContentArrangement::Disabled);
    table.set_header(head);
    table.add_row(head.map(|h| "-".repeat(h.len())));
    for row in rows {
        table.add_row(row);
    }
    if let Some(column) = table.column_mut(0) {
        column.set_padding((0, 1));
    }
    for &i in right {
        if let Some(column) = table.column_mut(i) {
            column.set_cell_alignment(CellAlignment::Right);
        }
    }
    table.lines().map(|l| format!("{}\n", l.trim_end())).collect()
}

/// `80.0 x 75.2 x 60.1 mm`.
pub(super) fn extents([x, y, z]: [f64; 3]) -> String {
    format!("{x:.1} x {y:.1} x {z:.1} mm")
}

/// `0.8 s`, `12 s`, `2 min 5 s`, `1 h 3 min`.
pub(super) fn duration(seconds: f64) -> String {
    if seconds < 9.95 {
        return format!("{seconds:.1} s");
    }
    #[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss, reason = "casts from float saturate")]
    let s = seconds.round() as u64;
    match s {
        0..60 => format!("{s} s"),
        60..3600 => format!("{} min {} s", s / 60, s % 60),
        _ => format!("{} h {} min", s / 3600, s % 3600 / 60),
    }
}

/// `1 stage`, `5 stages`.
pub(super) fn count(n: usize, noun: &str) -> String {
    format!("{n} {noun}{}", if n == 1 { "" } else { "s" })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn times_are_printed_as_people_say_them() {
        let printed = [0.04, 9.94, 9.96, 59.4, 125.0, 3780.0].map(duration);
        assert_eq!(printed, ["0.0 s", "9.9 s", "10 s", "59 s", "2 min 5 s", "1 h 3 min"]);
        assert!(duration(f64::NAN).ends_with(" s") && duration(f64::INFINITY).contains(" h "));
    }

    #[test]
    fn a_table_has_its_columns_under_each_other() {
        let text = table(
            ["stage", "mass"],
            &[1],
            vec![["1".into(), "7.5 g".into()], ["22".into(), "10.5 g".into()]],
        );
        let lines: Vec<&str> = text.lines().collect();
        assert_eq!(lines.len(), 4, "{text}");
        assert!(
            lines[2].starts_with('1') && lines[2].ends_with(" 7.5 g") && lines[3].ends_with("10.5 g"),
            "{text}"
        );
        assert_eq!(lines[2].len(), lines[3].len());
    }
}
