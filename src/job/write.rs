//! The job as understood, written back as a job file: the recipe in files and the identity of a set.

use super::keys::{self, Key, quoted_list};
use super::{Format, Job, KEYS};
use std::fmt::Write as _;

impl Job {
    /// The job as a job file with every key given; [`super::parse`] reads it back to an equal job.
    ///
    /// Equal jobs give equal text, so the text also says whether two jobs are the same.
    #[must_use]
    pub fn to_toml(&self) -> String {
        let mut out = String::new();
        let mut table = "";
        for k in &KEYS {
            let Some(value) = self.value_toml(k) else { continue };
            if k.table != table {
                let _ = writeln!(out, "{}[{}]", if table.is_empty() { "" } else { "\n" }, k.table);
                table = k.table;
            }
            let _ = writeln!(out, "{} = {value}", k.name);
        }
        out
    }

    /// The value of one key as TOML; `None` when the key is not given.
    fn value_toml(&self, k: &Key) -> Option<String> {
        let of = |other: &Key| k == other;
        Some(if of(&keys::TITLE) {
            text(&self.title)
        } else if of(&keys::PROFILE) {
            text(&self.profile)
        } else if of(&keys::FORMATS) {
            let names: Vec<&str> = self.formats.iter().map(|f: &Format| f.name()).collect();
            format!("[{}]", quoted_list(&names))
        } else if of(&keys::FAMILY) {
            text(&self.family)
        } else if of(&keys::ORDER) {
            self.order.to_string()
        } else if of(&keys::TIMES) {
            numbers(&self.times)
        } else if of(&keys::SIZE) {
            number(self.size_mm)
        } else if of(&keys::SCALE) {
            text(self.scale.name())
        } else if of(&keys::WALL) {
            number(self.wall_mm)
        } else if of(&keys::TOLERANCE) {
            number(self.tolerance_mm)
        } else if of(&keys::GRID) {
            number(self.grid_mm?)
        } else if of(&keys::DIRECTION) {
            numbers(self.direction.as_slice())
        } else if of(&keys::SIDE_A) {
            colour(self.colour_a)
        } else if of(&keys::SIDE_B) {
            colour(self.colour_b)
        } else {
            return None;
        })
    }
}

/// A TOML basic string.
fn text(value: &str) -> String {
    toml::Value::String(value.to_owned()).to_string()
}

/// A TOML float: the shortest text that reads back to the same number.
fn number(value: f64) -> String {
    format!("{value:?}")
}

fn numbers(values: &[f64]) -> String {
    format!("[{}]", values.iter().map(|v| number(*v)).collect::<Vec<_>>().join(", "))
}

fn colour([r, g, b]: [u8; 3]) -> String {
    format!("\"#{r:02x}{g:02x}{b:02x}\"")
}
