//! The table of every key a job file accepts: one source for reading, refusing, suggesting and explaining.

use super::{Format, Scale};
use crate::units::Unit;
use std::fmt::Write as _;

/// Longest title, characters.
pub const TITLE_CHARS: usize = 120;
/// Most times in one set.
pub const TIMES_MAX: usize = 200;
/// Largest job file, bytes. A job file is a page of text; anything larger is something else.
pub const FILE_BYTES_MAX: usize = 1 << 20;

/// What a key holds, with its range.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Kind {
    /// One line of text, 1..=[`TITLE_CHARS`] characters, no control characters.
    Title,
    /// The name of a known profile, or a path.
    Profile,
    /// A list of the names of [`Format`], at least one, no doubles.
    Formats,
    /// The name of a known family.
    Family,
    /// A whole number in a closed range.
    Whole {
        /// Smallest value.
        min: u32,
        /// Largest value.
        max: u32,
    },
    /// A number in a closed range.
    Number {
        /// Smallest value, in `unit`.
        min: f64,
        /// Largest value, in `unit`.
        max: f64,
        /// The unit.
        unit: Unit,
    },
    /// A list of times in 0..=1, or `{ even = n }`.
    Times,
    /// One of the names of [`Scale`].
    Scale,
    /// Three numbers, not all zero.
    Direction,
    /// `#rrggbb`.
    Colour,
}

impl Kind {
    /// What is allowed, in words: `0.2 to 50 mm`.
    #[must_use]
    pub fn allowed(&self) -> String {
        match self {
            Self::Title => format!("text of 1 to {TITLE_CHARS} characters without control characters"),
            Self::Profile => "the name of a profile, or a path ending in .toml".to_owned(),
            Self::Formats => format!("a list of {}", quoted_list(&Format::ALL.map(Format::name))),
            Self::Family => "the name of a family".to_owned(),
            Self::Whole { min, max } => format!("a whole number, {min} to {max}"),
            Self::Number { min, max, unit } => format!("{min} to {max} {}", unit.symbol()),
            Self::Times => {
                format!("a list of 1 to {TIMES_MAX} numbers, 0 to 1, or {{ even = 2 to {TIMES_MAX} }}")
            }
            Self::Scale => quoted_list(&Scale::ALL.map(Scale::name)),
            Self::Direction => "a list of 3 numbers, -1000 to 1000, not all zero".to_owned(),
            Self::Colour => "a colour written \"#rrggbb\"".to_owned(),
        }
    }
}

/// One key of a job file.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Key {
    /// The table it stands in: `solid`.
    pub table: &'static str,
    /// Its name there: `wall_mm`.
    pub name: &'static str,
    /// What it holds.
    pub kind: Kind,
    /// What is used when the key is absent, as TOML.
    pub default: Default,
    /// What it means, in one sentence.
    pub doc: &'static str,
}

/// What an absent key means.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Default {
    /// The key must be given.
    Required,
    /// This TOML value is used.
    Toml(&'static str),
    /// The program chooses from the other keys, as said.
    Chosen(&'static str),
}

impl Key {
    /// The dotted name: `solid.wall_mm`.
    #[must_use]
    pub fn dotted(&self) -> String {
        format!("{}.{}", self.table, self.name)
    }
}

/// A key by its table and name.
const fn key(
    table: &'static str,
    name: &'static str,
    kind: Kind,
    default: Default,
    doc: &'static str,
) -> Key {
    Key { table, name, kind, default, doc }
}

/// `set.title`
pub(super) const TITLE: Key =
    key("set", "title", Kind::Title, Default::Required, "The name of the set, for the sheet and the files.");
/// `set.profile`
pub(super) const PROFILE: Key = key(
    "set",
    "profile",
    Kind::Profile,
    Default::Toml("\"mex-pla\""),
    "The printing profile whose limits the checks use; a path is taken from the job file's folder.",
);
/// `set.formats`
pub(super) const FORMATS: Key = key(
    "set",
    "formats",
    Kind::Formats,
    Default::Toml("[\"stl\", \"3mf\"]"),
    "The files made for each stage.",
);
/// `skin.family`
pub(super) const FAMILY: Key =
    key("skin", "family", Kind::Family, Default::Toml("\"ruled\""), "The way the sphere is everted.");
/// `skin.order`
pub(super) const ORDER: Key = key(
    "skin",
    "order",
    Kind::Whole { min: 2, max: 5 },
    Default::Toml("2"),
    "The symmetry order: each stage looks the same after a turn by 360/order degrees about z.",
);
/// `skin.times`
pub(super) const TIMES: Key = key(
    "skin",
    "times",
    Kind::Times,
    Default::Required,
    "The times of the stages; { even = n } is n times from 0 to 1, both included.",
);
/// `solid.size_mm`
pub(super) const SIZE: Key = key(
    "solid",
    "size_mm",
    Kind::Number { min: 10.0, max: 2000.0, unit: Unit::Mm },
    Default::Toml("80.0"),
    "The greatest extent along x, y or z of a finished solid, wall included.",
);
/// `solid.scale`
pub(super) const SCALE: Key = key(
    "solid",
    "scale",
    Kind::Scale,
    Default::Toml("\"each\""),
    "\"each\": every stage has size_mm; \"common\": one scale for all, the largest stage has size_mm.",
);
/// `solid.wall_mm`
pub(super) const WALL: Key = key(
    "solid",
    "wall_mm",
    Kind::Number { min: 0.2, max: 50.0, unit: Unit::Mm },
    Default::Toml("2.0"),
    "The thickness of the wall; at most a quarter of size_mm.",
);
/// `solid.tolerance_mm`
pub(super) const TOLERANCE: Key = key(
    "solid",
    "tolerance_mm",
    Kind::Number { min: 0.005, max: 1.0, unit: Unit::Mm },
    Default::Toml("0.05"),
    "How far the printed surface may be from the exact one; at most a quarter of wall_mm.",
);
/// `solid.grid_mm`
pub(super) const GRID: Key = key(
    "solid",
    "grid_mm",
    Kind::Number { min: 0.01, max: 20.0, unit: Unit::Mm },
    Default::Chosen("from wall_mm and tolerance_mm"),
    "The edge length of the sampling grid; at most wall_mm. Half of it needs about 4 times the memory.",
);
/// `build.direction`
pub(super) const DIRECTION: Key = key(
    "build",
    "direction",
    Kind::Direction,
    Default::Toml("[0.0, 0.0, 1.0]"),
    "The direction, in the family's own coordinates, that points up from the build plate.",
);
/// `colours.side_a`
pub(super) const SIDE_A: Key =
    key("colours", "side_a", Kind::Colour, Default::Toml("\"#1f7a7a\""), "The colour of side A.");
/// `colours.side_b`
pub(super) const SIDE_B: Key =
    key("colours", "side_b", Kind::Colour, Default::Toml("\"#e3c08f\""), "The colour of side B.");

/// Every key, in the order of the reference.
pub const KEYS: [Key; 14] = [
    TITLE, PROFILE, FORMATS, FAMILY, ORDER, TIMES, SIZE, SCALE, WALL, TOLERANCE, GRID, DIRECTION, SIDE_A,
    SIDE_B,
];

/// The names of the tables, in the order of the reference.
#[must_use]
pub(super) fn tables() -> Vec<&'static str> {
    let mut names: Vec<&'static str> = KEYS.iter().map(|k| k.table).collect();
    names.dedup();
    names
}

/// The reference of all keys as text: what `--help` and the README print.
#[must_use]
pub fn reference() -> String {
    let mut out = String::new();
    for table in tables() {
        let _ = writeln!(out, "[{table}]");
        for k in KEYS.iter().filter(|k| k.table == table) {
            let default = match k.default {
                Default::Required => "required".to_owned(),
                Default::Toml(text) => format!("default {text}"),
                Default::Chosen(how) => format!("default: chosen {how}"),
            };
            let _ = writeln!(out, "  {}: {}; {default}", k.name, k.kind.allowed());
            let _ = writeln!(out, "      {}", k.doc);
        }
    }
    out
}

/// `"a", "b"`.
pub(super) fn quoted_list<S: AsRef<str>>(names: &[S]) -> String {
    names.iter().map(|n| format!("\"{}\"", n.as_ref())).collect::<Vec<_>>().join(", ")
}

/// The name most like `typed`, if any is alike (Jaro-Winkler similarity 0.8 or more; at 0.7, `tilt` is
/// offered for `title` but also `times` for `limits`).
pub(super) fn nearest<'n>(typed: &str, names: impl IntoIterator<Item = &'n str>) -> Option<&'n str> {
    let typed: String = typed.chars().take(60).collect::<String>().to_lowercase();
    let mut best: Option<(f64, &str)> = None;
    for name in names {
        let likeness = strsim::jaro_winkler(&typed, name);
        if likeness >= 0.8 && best.is_none_or(|(b, _)| likeness > b) {
            best = Some((likeness, name));
        }
    }
    best.map(|(_, name)| name)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_nearest_key_is_the_one_a_person_meant() {
        let names = || KEYS.iter().map(|k| k.name);
        assert_eq!(nearest("wal_mm", names()), Some("wall_mm"));
        assert_eq!(nearest("tolerence_mm", names()), Some("tolerance_mm"));
        assert_eq!(nearest("Size", names()), Some("size_mm"));
        assert_eq!(nearest("qqqq", names()), None);
    }

    #[test]
    fn the_reference_names_every_key_once() {
        let text = reference();
        for k in &KEYS {
            assert_eq!(text.matches(&format!("  {}: ", k.name)).count(), 1, "{}", k.dotted());
        }
        assert!(text.contains("wall_mm: 0.2 to 50 mm; default 2.0"));
    }
}
