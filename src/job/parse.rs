//! From the text of a job file to a [`Job`], or to every problem it has.
//!
//! The text is read into a tree with places (`toml`'s recovering reader) and walked by hand against the
//! table of keys: a derived reader would stop at the first problem.

use super::keys::{self, Default, Key, Kind, nearest, quoted_list, tables};
use super::problem::{Cause, JobErrors, Problem, floor_boundary, line_column};
use super::{FILE_BYTES_MAX, Format, Job, KEYS, Scale, TIMES_MAX, TITLE_CHARS};
use crate::geom::Vec3;
use std::ops::Range;
use toml::Spanned;
use toml::de::{DeTable, DeValue};

/// Longest piece of a value quoted in a message, characters.
const QUOTE_CHARS: usize = 60;
/// Largest component of a direction: enough for any ratio, small enough for its square.
const DIRECTION_MAX: f64 = 1000.0;

/// The names a job file may use.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Known {
    /// Names of families.
    pub families: Vec<String>,
    /// Names of built-in profiles.
    pub profiles: Vec<String>,
}

/// Reads the text of a job file.
///
/// - `file_name`: used in messages only.
/// - `known`: the names of families and profiles there are. A profile that holds a `/` or `\` or ends in
///   `.toml` is taken for a path and not looked up.
///
/// # Errors
/// [`JobErrors`] with every problem of the file: text that is not TOML, unknown and missing keys, wrong
/// types, values out of range or not finite, doubles, unknown names, keys that do not go together.
pub fn parse(text: &str, file_name: &str, known: &Known) -> Result<Job, JobErrors> {
    let mut reader = Reader { text, known, problems: Vec::new(), broken_lines: Vec::new() };
    let job = reader.job();
    match job {
        Some(job) if reader.problems.is_empty() => Ok(job),
        _ => Err(JobErrors::new(file_name, text, reader.problems)),
    }
}

struct Reader<'t> {
    text: &'t str,
    known: &'t Known,
    problems: Vec<Problem>,
    /// Lines that are not TOML: what was recovered from them is not judged.
    broken_lines: Vec<usize>,
}

type Value<'v> = Spanned<DeValue<'v>>;

impl Reader<'_> {
    fn job(&mut self) -> Option<Job> {
        if self.text.len() > FILE_BYTES_MAX {
            self.report(0..0, Cause::TooLarge { bytes: self.text.len(), max: FILE_BYTES_MAX }, None);
            return None;
        }
        let (root, errors) = DeTable::parse_recoverable(self.text);
        for e in errors {
            self.syntax(&e);
        }
        let root = root.into_inner();
        if root.is_empty() && self.problems.is_empty() {
            self.report(0..0, Cause::Empty, None);
            return None;
        }
        self.unknown_keys(&root);
        let title = self.read(&root, &keys::TITLE, Self::title);
        let profile = self.read(&root, &keys::PROFILE, Self::profile);
        let formats = self.read(&root, &keys::FORMATS, Self::formats);
        let family = self.read(&root, &keys::FAMILY, Self::family);
        let order = self.read(&root, &keys::ORDER, Self::whole);
        let times = self.read(&root, &keys::TIMES, Self::times);
        let size_mm = self.read(&root, &keys::SIZE, Self::number);
        let scale = self.read(&root, &keys::SCALE, Self::scale);
        let wall_mm = self.read(&root, &keys::WALL, Self::number);
        let tolerance_mm = self.read(&root, &keys::TOLERANCE, Self::number);
        let grid_mm = self.read(&root, &keys::GRID, Self::number);
        let direction = self.read(&root, &keys::DIRECTION, Self::direction);
        let colour_a = self.read(&root, &keys::SIDE_A, Self::colour);
        let colour_b = self.read(&root, &keys::SIDE_B, Self::colour);
        self.together(&root, (&keys::WALL, wall_mm), 0.25, "a quarter of", (&keys::SIZE, size_mm));
        self.together(&root, (&keys::TOLERANCE, tolerance_mm), 0.25, "a quarter of", (&keys::WALL, wall_mm));
        self.together(&root, (&keys::GRID, grid_mm), 1.0, "no more than", (&keys::WALL, wall_mm));
        Some(Job {
            title: title?,
            profile: profile?,
            formats: formats?,
            family: family?,
            order: order?,
            times: times?,
            size_mm: size_mm?,
            scale: scale?,
            wall_mm: wall_mm?,
            tolerance_mm: tolerance_mm?,
            grid_mm,
            direction: direction?,
            colour_a: colour_a?,
            colour_b: colour_b?,
        })
    }

    fn report(&mut self, span: Range<usize>, cause: Cause, nearest: Option<String>) {
        let (line, column) = line_column(self.text, span.start);
        if !matches!(cause, Cause::Syntax { .. }) && self.broken_lines.contains(&line) {
            return;
        }
        self.problems.push(Problem { span, line, column, cause, nearest });
    }

    fn syntax(&mut self, e: &toml::de::Error) {
        let span = e.span().unwrap_or(0..0);
        let (line, _) = line_column(self.text, span.start);
        // One message a line: what follows a fault on its line is mostly its echo.
        if self.broken_lines.contains(&line) {
            return;
        }
        let what = match e.message() {
            "duplicate key" => format!("{} is given twice; each key may be given once", self.quote(&span)),
            other => format!("not TOML: {other}"),
        };
        self.broken_lines.push(line);
        self.report(span, Cause::Syntax { what }, None);
    }

    /// The text of a span, shortened.
    fn quote(&self, span: &Range<usize>) -> String {
        let end = floor_boundary(self.text, span.end);
        let piece = &self.text[floor_boundary(self.text, span.start).min(end)..end];
        let one_line = piece.split_whitespace().collect::<Vec<_>>().join(" ");
        if one_line.chars().count() <= QUOTE_CHARS {
            return one_line;
        }
        format!("{}...", one_line.chars().take(QUOTE_CHARS).collect::<String>())
    }

    fn unknown_keys(&mut self, root: &DeTable<'_>) {
        for (name, value) in root {
            let typed = name.get_ref().as_ref();
            let Some(table) = tables().into_iter().find(|t| *t == typed) else {
                // A key left outside its table is the commonest case: say which table it belongs to.
                let home = KEYS.iter().find(|k| k.name == typed).map(Key::dotted);
                let hint = home.or_else(|| nearest(typed, tables()).map(str::to_owned));
                let cause = Cause::UnknownTable { key: shorten(typed), allowed: quoted_list(&tables()) };
                self.report(name.span(), cause, hint);
                continue;
            };
            let Some(inner) = value.get_ref().as_table() else {
                self.wrong_type(table, value, "a table");
                continue;
            };
            let keys_here: Vec<&Key> = KEYS.iter().filter(|k| k.table == table).collect();
            for key in inner.keys() {
                let typed = key.get_ref().as_ref();
                if keys_here.iter().any(|k| k.name == typed) {
                    continue;
                }
                let here = nearest(typed, keys_here.iter().map(|k| k.name)).map(str::to_owned);
                let elsewhere = || KEYS.iter().find(|k| k.name == typed).map(Key::dotted);
                let hint = here.or_else(elsewhere).or_else(|| {
                    nearest(typed, KEYS.iter().map(|k| k.name))
                        .and_then(|n| KEYS.iter().find(|k| k.name == n))
                        .map(Key::dotted)
                });
                let names: Vec<&str> = keys_here.iter().map(|k| k.name).collect();
                let cause = Cause::UnknownKey {
                    key: format!("{table}.{}", shorten(typed)),
                    allowed: quoted_list(&names),
                };
                self.report(key.span(), cause, hint);
            }
        }
    }

    /// Reads one key, or its default when it is absent.
    fn read<T>(
        &mut self,
        root: &DeTable<'_>,
        key: &Key,
        reader: impl Fn(&mut Self, &Key, &Value<'_>) -> Option<T>,
    ) -> Option<T> {
        if let Some(value) = find(root, key) {
            return reader(self, key, value);
        }
        match key.default {
            Default::Chosen(_) => None,
            Default::Toml(text) => match DeValue::parse(text) {
                Ok(value) => reader(self, key, &value),
                Err(_) => None,
            },
            Default::Required => {
                let table = root.get_key_value(key.table);
                let is_table = table.is_none_or(|(_, v)| v.get_ref().is_table());
                if is_table && self.broken_lines.is_empty() {
                    let span = table.map_or(0..0, |(k, _)| k.span());
                    let cause = Cause::Missing { key: key.dotted(), allowed: key.kind.allowed() };
                    self.report(span, cause, None);
                }
                None
            }
        }
    }

    fn wrong_type(&mut self, key: &str, value: &Value<'_>, allowed: &str) {
        let found = format!("{} ({})", crate::profile::kind(value.get_ref()), self.quote(&value.span()));
        let cause = Cause::WrongType { key: key.to_owned(), found, allowed: allowed.to_owned() };
        self.report(value.span(), cause, None);
    }

    fn out_of_range(&mut self, key: &str, value: &Value<'_>, allowed: &str) {
        let cause = Cause::OutOfRange {
            key: key.to_owned(),
            value: self.quote(&value.span()),
            allowed: allowed.to_owned(),
        };
        self.report(value.span(), cause, None);
    }

    fn unknown_name(&mut self, key: &str, value: &Value<'_>, typed: &str, known: Vec<String>) {
        let hint = nearest(typed, known.iter().map(String::as_str)).map(str::to_owned);
        let cause = Cause::UnknownName { key: key.to_owned(), value: self.quote(&value.span()), known };
        self.report(value.span(), cause, hint);
    }

    fn text<'v>(&mut self, key: &Key, value: &'v Value<'_>) -> Option<&'v str> {
        let text = value.get_ref().as_str();
        if text.is_none() {
            self.wrong_type(&key.dotted(), value, &key.kind.allowed());
        }
        text
    }

    fn title(&mut self, key: &Key, value: &Value<'_>) -> Option<String> {
        let title = self.text(key, value)?;
        let count = title.chars().count();
        if title.trim().is_empty() || count > TITLE_CHARS || title.chars().any(char::is_control) {
            self.out_of_range(&key.dotted(), value, &key.kind.allowed());
            return None;
        }
        Some(title.to_owned())
    }

    fn profile(&mut self, key: &Key, value: &Value<'_>) -> Option<String> {
        let name = self.text(key, value)?;
        let is_path = is_profile_path(name);
        if name.contains('\0') || (!is_path && !self.known.profiles.iter().any(|p| p == name)) {
            self.unknown_name(&key.dotted(), value, name, self.known.profiles.clone());
            return None;
        }
        Some(name.to_owned())
    }

    fn family(&mut self, key: &Key, value: &Value<'_>) -> Option<String> {
        let name = self.text(key, value)?;
        if !self.known.families.iter().any(|f| f == name) {
            self.unknown_name(&key.dotted(), value, name, self.known.families.clone());
            return None;
        }
        Some(name.to_owned())
    }

    fn scale(&mut self, key: &Key, value: &Value<'_>) -> Option<Scale> {
        let name = self.text(key, value)?;
        let scale = Scale::ALL.into_iter().find(|s| s.name() == name);
        if scale.is_none() {
            let known = Scale::ALL.iter().map(|s| s.name().to_owned()).collect();
            self.unknown_name(&key.dotted(), value, name, known);
        }
        scale
    }

    fn formats(&mut self, key: &Key, value: &Value<'_>) -> Option<Vec<Format>> {
        let Some(list) = value.get_ref().as_array() else {
            self.wrong_type(&key.dotted(), value, &key.kind.allowed());
            return None;
        };
        if list.is_empty() {
            self.out_of_range(&key.dotted(), value, &key.kind.allowed());
            return None;
        }
        let mut formats = Vec::new();
        let mut whole = true;
        for item in list.iter() {
            let Some(name) = item.get_ref().as_str() else {
                self.wrong_type(&key.dotted(), item, &key.kind.allowed());
                whole = false;
                continue;
            };
            let Some(format) = Format::ALL.into_iter().find(|f| f.name() == name) else {
                let known = Format::ALL.iter().map(|f| f.name().to_owned()).collect();
                self.unknown_name(&key.dotted(), item, name, known);
                whole = false;
                continue;
            };
            if formats.contains(&format) {
                let cause = Cause::Double { key: key.dotted(), value: self.quote(&item.span()) };
                self.report(item.span(), cause, None);
            }
            formats.push(format);
        }
        whole.then_some(formats)
    }

    fn whole(&mut self, key: &Key, value: &Value<'_>) -> Option<u32> {
        let (Kind::Whole { min, max }, Some(n)) = (key.kind, value.get_ref().as_integer()) else {
            self.wrong_type(&key.dotted(), value, &key.kind.allowed());
            return None;
        };
        let n = u32::from_str_radix(n.as_str(), n.radix()).ok().filter(|n| (min..=max).contains(n));
        if n.is_none() {
            self.out_of_range(&key.dotted(), value, &key.kind.allowed());
        }
        n
    }

    fn number(&mut self, key: &Key, value: &Value<'_>) -> Option<f64> {
        let Kind::Number { min, max, .. } = key.kind else { return None };
        self.number_in(&key.dotted(), value, min, max, &key.kind.allowed())
    }

    /// A finite number in `min..=max`; whole numbers are taken as well. Minus zero becomes zero.
    fn number_in(&mut self, key: &str, value: &Value<'_>, min: f64, max: f64, allowed: &str) -> Option<f64> {
        let number = match value.get_ref() {
            DeValue::Float(f) => f.as_str().parse::<f64>().ok(),
            DeValue::Integer(i) if i.radix() == 10 => i.as_str().parse::<f64>().ok(),
            DeValue::Integer(i) => {
                u32::from_str_radix(i.as_str(), i.radix()).ok().map(f64::from).or(Some(f64::INFINITY))
            }
            _ => {
                self.wrong_type(key, value, allowed);
                return None;
            }
        };
        let number = number.filter(|x| (min..=max).contains(x));
        if number.is_none() {
            self.out_of_range(key, value, allowed);
        }
        number.map(|x| x + 0.0)
    }

    fn times(&mut self, key: &Key, value: &Value<'_>) -> Option<Vec<f64>> {
        let dotted = key.dotted();
        if let Some(table) = value.get_ref().as_table() {
            return self.even_times(key, value, table);
        }
        let Some(list) = value.get_ref().as_array() else {
            self.wrong_type(&dotted, value, &key.kind.allowed());
            return None;
        };
        if list.is_empty() || list.len() > TIMES_MAX {
            let count = if list.is_empty() { "no times".to_owned() } else { format!("{} times", list.len()) };
            let cause = Cause::OutOfRange {
                key: dotted,
                value: format!("a list of {count}"),
                allowed: key.kind.allowed(),
            };
            self.report(value.span(), cause, None);
            return None;
        }
        let mut times: Vec<f64> = Vec::new();
        let mut whole = true;
        for (i, item) in list.iter().enumerate() {
            let name = format!("{dotted}[{i}]");
            let Some(tau) = self.number_in(&name, item, 0.0, 1.0, "a number, 0 to 1") else {
                whole = false;
                continue;
            };
            if times.iter().any(|t| t.total_cmp(&tau).is_eq()) {
                let cause = Cause::Double { key: dotted.clone(), value: self.quote(&item.span()) };
                self.report(item.span(), cause, None);
            }
            times.push(tau);
        }
        whole.then_some(times)
    }

    fn even_times(&mut self, key: &Key, value: &Value<'_>, table: &DeTable<'_>) -> Option<Vec<f64>> {
        let dotted = key.dotted();
        for (k, _) in table {
            let typed = k.get_ref().as_ref();
            if typed != "even" {
                let cause = Cause::UnknownKey {
                    key: format!("{dotted}.{}", shorten(typed)),
                    allowed: "\"even\"".to_owned(),
                };
                self.report(k.span(), cause, nearest(typed, ["even"]).map(str::to_owned));
            }
        }
        let allowed = format!("a whole number, 2 to {TIMES_MAX}");
        let name = format!("{dotted}.even");
        let Some(count) = table.get("even") else {
            self.report(value.span(), Cause::Missing { key: name, allowed }, None);
            return None;
        };
        let Some(n) = count.get_ref().as_integer() else {
            self.wrong_type(&name, count, &allowed);
            return None;
        };
        let max = u32::try_from(TIMES_MAX).unwrap_or(u32::MAX);
        let Some(n) = u32::from_str_radix(n.as_str(), n.radix()).ok().filter(|n| (2..=max).contains(n))
        else {
            self.out_of_range(&name, count, &allowed);
            return None;
        };
        Some((0..n).map(|k| f64::from(k) / f64::from(n - 1)).collect())
    }

    fn direction(&mut self, key: &Key, value: &Value<'_>) -> Option<Vec3> {
        let dotted = key.dotted();
        let Some(list) = value.get_ref().as_array() else {
            self.wrong_type(&dotted, value, &key.kind.allowed());
            return None;
        };
        if list.len() != 3 {
            self.out_of_range(&dotted, value, &key.kind.allowed());
            return None;
        }
        let allowed = format!("a number, -{DIRECTION_MAX} to {DIRECTION_MAX}");
        let parts: Vec<Option<f64>> = list
            .iter()
            .enumerate()
            .map(|(i, v)| {
                self.number_in(&format!("{dotted}[{i}]"), v, -DIRECTION_MAX, DIRECTION_MAX, &allowed)
            })
            .collect();
        let v = Vec3::new(parts[0]?, parts[1]?, parts[2]?);
        if v.norm() < 1e-9 {
            self.out_of_range(&dotted, value, &key.kind.allowed());
            return None;
        }
        // A unit vector stays as it is, so that a job written back reads back equal.
        let unit = if (v.norm() - 1.0).abs() <= 4.0 * f64::EPSILON { v } else { v.normalize() };
        Some(unit)
    }

    fn colour(&mut self, key: &Key, value: &Value<'_>) -> Option<[u8; 3]> {
        let typed = self.text(key, value)?;
        let digits =
            typed.strip_prefix('#').filter(|d| d.len() == 6 && d.bytes().all(|b| b.is_ascii_hexdigit()));
        let rgb = digits.and_then(|d| u32::from_str_radix(d, 16).ok()).map(u32::to_be_bytes);
        if rgb.is_none() {
            self.out_of_range(&key.dotted(), value, &key.kind.allowed());
        }
        rgb.map(|[_, r, g, b]| [r, g, b])
    }

    /// Refuses a value above `share` times another; the message stands where the file gives either.
    fn together(
        &mut self,
        root: &DeTable<'_>,
        (key, value): (&Key, Option<f64>),
        share: f64,
        rule: &'static str,
        (other, other_value): (&Key, Option<f64>),
    ) {
        let (Some(value), Some(other_value)) = (value, other_value) else { return };
        let limit = share * other_value;
        if value <= limit {
            return;
        }
        let place = find(root, key).or_else(|| find(root, other)).map_or(0..0, Spanned::span);
        let cause =
            Cause::Together { key: key.dotted(), value, limit, rule, other: other.dotted(), other_value };
        self.report(place, cause, None);
    }
}

/// Whether a profile given in a job is a path rather than a name.
#[must_use]
pub fn is_profile_path(profile: &str) -> bool {
    profile.contains(['/', '\\']) || profile.ends_with(".toml")
}

fn find<'d, 'i>(root: &'d DeTable<'i>, key: &Key) -> Option<&'d Value<'i>> {
    root.get(key.table)?.get_ref().as_table()?.get(key.name)
}

fn shorten(typed: &str) -> String {
    if typed.chars().count() <= QUOTE_CHARS {
        return typed.to_owned();
    }
    format!("{}...", typed.chars().take(QUOTE_CHARS).collect::<String>())
}
