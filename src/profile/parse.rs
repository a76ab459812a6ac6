//! The profile file: TOML, every key known, every number in its range, all problems reported at once.

use super::{Limit, Profile, Trapped};
use std::fmt;
use std::ops::Range;
use toml::Spanned;
use toml::de::{DeTable, DeValue};

/// Longest text a key may hold, in characters.
const LONGEST_TEXT: usize = 600;
/// Most cautions a profile may hold.
const MOST_CAUTIONS: usize = 40;
/// A word farther than this from every known key (Jaro-Winkler similarity, 0..=1) gets no suggestion.
const NEAR_ENOUGH: f64 = 0.75;

/// The keys that hold a limit: name, largest value (smallest is above 0), unit, whether it may be left out.
const LIMITS: [(&str, f64, &str, bool); 11] = [
    ("wall_supported_mm", 100.0, "mm", false),
    ("wall_unsupported_mm", 100.0, "mm", false),
    ("clearance_mm", 50.0, "mm", false),
    ("feature_mm", 50.0, "mm", false),
    ("overhang_deg", 90.0, "deg", true),
    ("bridge_mm", 1000.0, "mm", true),
    ("drain_mm", 100.0, "mm", true),
    ("drain_count", 20.0, "holes", true),
    ("text_stroke_mm", 50.0, "mm", false),
    ("layer_mm", 5.0, "mm", false),
    ("density_g_cm3", 25.0, "g/cm3", false),
];
/// The keys that hold text.
const TEXTS: [&str; 6] = ["name", "title", "process", "process_code", "material", "envelope_source"];
/// The other keys.
const OTHERS: [&str; 3] = ["trapped", "envelope_mm", "cautions"];
/// The seven process categories of ISO/ASTM 52900.
const PROCESSES: [&str; 7] = [
    "binder jetting",
    "directed energy deposition",
    "material extrusion",
    "material jetting",
    "powder bed fusion",
    "sheet lamination",
    "vat photopolymerization",
];
/// Largest edge of a build envelope, mm.
const LARGEST_ENVELOPE_MM: f64 = 10_000.0;

/// One thing wrong with a profile file.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Problem {
    /// Line in the file, from 1.
    pub line: usize,
    /// Column in characters, from 1.
    pub column: usize,
    /// Bytes of the file the problem is about; empty at the end for something missing.
    pub span: Range<usize>,
    /// What is wrong, with key, value and allowed range.
    pub message: String,
}

/// Everything wrong with a profile file, in the order of the file.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct ProfileErrors {
    /// The file's name as the caller gave it.
    pub file: String,
    /// At least one problem.
    pub problems: Vec<Problem>,
}

impl fmt::Display for ProfileErrors {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (i, p) in self.problems.iter().enumerate() {
            if i > 0 {
                writeln!(f)?;
            }
            write!(f, "{}:{}:{}: {}", self.file, p.line, p.column, p.message)?;
        }
        Ok(())
    }
}

impl std::error::Error for ProfileErrors {}

impl Profile {
    /// Reads the text of a profile file.
    ///
    /// - `text`: TOML; every key of [`Profile`] but the optional limits must be there, and no other key. A
    ///   limit is a table `{ value, source }`; `overhang_deg` also names its reference plane with
    ///   `from = "horizontal"` or `"vertical"` (a value from the vertical is stored as 90 minus it).
    /// - `file_name`: how messages call the file; nothing is opened.
    ///
    /// # Errors
    /// [`ProfileErrors`] with every problem of the file: syntax, unknown key with the nearest known one,
    /// missing key, wrong type, number not finite or out of range, empty or overlong text.
    pub fn parse(text: &str, file_name: &str) -> Result<Self, ProfileErrors> {
        let (root, syntax) = DeTable::parse_recoverable(text);
        let mut reader = Reader { text, problems: Vec::new() };
        if !syntax.is_empty() {
            for e in syntax {
                reader.report(e.span().unwrap_or(0..0), format!("not TOML: {}", e.message()));
            }
            return Err(reader.into_errors(file_name));
        }
        let root = root.get_ref();
        reader.unknown_keys(
            root,
            "profile",
            &LIMITS.iter().map(|l| l.0).chain(TEXTS).chain(OTHERS).collect::<Vec<_>>(),
        );
        let profile = reader.profile(root);
        match profile {
            Some(p) if reader.problems.is_empty() => Ok(p),
            _ => Err(reader.into_errors(file_name)),
        }
    }
}

struct Reader<'t> {
    text: &'t str,
    problems: Vec<Problem>,
}

impl Reader<'_> {
    fn report(&mut self, span: Range<usize>, message: String) {
        let mut at = span.start.min(self.text.len());
        while !self.text.is_char_boundary(at) {
            at -= 1;
        }
        let before = &self.text[..at];
        let line = before.matches('\n').count() + 1;
        let column = before[before.rfind('\n').map_or(0, |i| i + 1)..].chars().count() + 1;
        self.problems.push(Problem { line, column, span, message });
    }

    fn into_errors(mut self, file_name: &str) -> ProfileErrors {
        self.problems.sort_by_key(|p| (p.line, p.column));
        ProfileErrors { file: file_name.to_owned(), problems: self.problems }
    }

    fn missing(&mut self, message: String) {
        self.report(self.text.len()..self.text.len(), message);
    }

    fn unknown_keys(&mut self, table: &DeTable<'_>, place: &str, known: &[&str]) {
        for (key, _) in table {
            let name = key.get_ref().as_ref();
            if !known.contains(&name) {
                let near = nearest(name, known).map_or(String::new(), |n| format!("; did you mean `{n}`?"));
                self.report(
                    key.span(),
                    format!("{place} has no key `{}`{near} Known keys: {}", shown(name), known.join(", ")),
                );
            }
        }
    }

    fn profile(&mut self, root: &DeTable<'_>) -> Option<Profile> {
        // Every read happens before the first `?`, so that all problems are found.
        let texts = TEXTS.map(|key| self.text_of(root, key));
        let trapped = self.trapped(root);
        let envelope = self.envelope(root);
        let cautions = self.cautions(root);
        let limits = LIMITS.map(|(key, most, unit, optional)| self.limit(root, key, most, unit, optional));
        let [name, title, process, process_code, material, envelope_source] = texts;
        if let Some(n) = &name {
            self.check_name(root, n);
        }
        if let Some(p) = &process
            && !PROCESSES.contains(&p.as_str())
        {
            let span = span_of(root, "process");
            let message = format!(
                "`process` is \"{}\", which is no process category of ISO/ASTM 52900: {}",
                shown(p),
                PROCESSES.join(", ")
            );
            self.report(span, message);
        }
        let [
            supported,
            unsupported,
            clearance,
            feature,
            overhang,
            bridge,
            drain,
            count,
            stroke,
            layer,
            density,
        ] = limits;
        if let (Some(s), Some(u)) = (&supported, &unsupported)
            && u.value < s.value
        {
            let message = format!(
                "`wall_unsupported_mm` is {} mm, below `wall_supported_mm` {} mm; a wall attached on fewer sides can't be thinner",
                u.value, s.value
            );
            self.report(span_of(root, "wall_unsupported_mm"), message);
        }
        if let Some(c) = &count
            && c.value.fract() > 0.0
        {
            let message =
                format!("`drain_count` is {} holes; a whole number from 1 to 20 is wanted", c.value);
            self.report(span_of(root, "drain_count"), message);
        }
        Some(Profile {
            name: name?,
            title: title?,
            process: process?,
            process_code: process_code?,
            material: material?,
            trapped: trapped?,
            wall_supported_mm: supported?,
            wall_unsupported_mm: unsupported?,
            clearance_mm: clearance?,
            feature_mm: feature?,
            overhang_deg: overhang,
            bridge_mm: bridge,
            drain_mm: drain,
            drain_count: count,
            text_stroke_mm: stroke?,
            layer_mm: layer?,
            envelope_mm: envelope?,
            envelope_source: envelope_source?,
            density_g_cm3: density?,
            cautions: cautions?,
        })
    }

    fn check_name(&mut self, root: &DeTable<'_>, name: &str) {
        let plain = |c: char| c.is_ascii_lowercase() || c.is_ascii_digit() || c == '-';
        if name.chars().count() > 40 || !name.chars().all(plain) {
            let message = format!(
                "`name` is \"{}\"; up to 40 lower-case letters a-z, digits and hyphens are allowed",
                shown(name)
            );
            self.report(span_of(root, "name"), message);
        }
    }

    fn text_of(&mut self, table: &DeTable<'_>, key: &str) -> Option<String> {
        let Some(value) = table.get(key) else {
            self.missing(format!("the key `{key}` (text) is missing"));
            return None;
        };
        self.text_value(value, key)
    }

    fn text_value(&mut self, value: &Spanned<DeValue<'_>>, key: &str) -> Option<String> {
        let Some(s) = value.get_ref().as_str() else {
            self.report(value.span(), format!("`{key}` is {}, text is wanted", kind(value.get_ref())));
            return None;
        };
        let length = s.chars().count();
        if s.trim().is_empty() || length > LONGEST_TEXT || s.chars().any(char::is_control) {
            self.report(
                value.span(),
                format!(
                    "`{key}` has {length} characters; 1 to {LONGEST_TEXT} are allowed, not all blank, on one line"
                ),
            );
            return None;
        }
        Some(s.trim().to_owned())
    }

    fn trapped(&mut self, root: &DeTable<'_>) -> Option<Trapped> {
        let word = self.text_of(root, "trapped")?;
        let found = Trapped::ALL.into_iter().find(|t| t.name() == word);
        if found.is_none() {
            let names = Trapped::ALL.map(Trapped::name);
            let near = nearest(&word, &names).map_or(String::new(), |n| format!("; did you mean \"{n}\"?"));
            let message = format!("`trapped` is \"{}\"; allowed: {}{near}", shown(&word), names.join(", "));
            self.report(span_of(root, "trapped"), message);
        }
        found
    }

    fn envelope(&mut self, root: &DeTable<'_>) -> Option<[f64; 3]> {
        let Some(value) = root.get("envelope_mm") else {
            self.missing("the key `envelope_mm` (three numbers x, y, z in mm) is missing".to_owned());
            return None;
        };
        let items: Vec<_> = value.get_ref().as_array().map(|a| a.iter().collect()).unwrap_or_default();
        let [x, y, z] = items.as_slice() else {
            let message = format!(
                "`envelope_mm` is {}, three numbers [x, y, z] in mm are wanted",
                kind(value.get_ref())
            );
            self.report(value.span(), message);
            return None;
        };
        let edges = [x, y, z].map(|v| self.number(v, "envelope_mm", LARGEST_ENVELOPE_MM, "mm"));
        Some([edges[0]?, edges[1]?, edges[2]?])
    }

    fn cautions(&mut self, root: &DeTable<'_>) -> Option<Vec<String>> {
        let Some(value) = root.get("cautions") else {
            self.missing("the key `cautions` (a list of sentences, may be empty) is missing".to_owned());
            return None;
        };
        let Some(list) = value.get_ref().as_array() else {
            self.report(value.span(), format!("`cautions` is {}, a list is wanted", kind(value.get_ref())));
            return None;
        };
        if list.len() > MOST_CAUTIONS {
            self.report(
                value.span(),
                format!("`cautions` has {} entries; at most {MOST_CAUTIONS} are allowed", list.len()),
            );
            return None;
        }
        let texts: Vec<_> = list.iter().map(|v| self.text_value(v, "cautions")).collect();
        texts.into_iter().collect()
    }

    fn limit(
        &mut self,
        root: &DeTable<'_>,
        key: &str,
        most: f64,
        unit: &str,
        optional: bool,
    ) -> Option<Limit> {
        let Some(entry) = root.get(key) else {
            if !optional {
                self.missing(format!("the table `[{key}]` with `value` ({unit}) and `source` is missing"));
            }
            return None;
        };
        let Some(table) = entry.get_ref().as_table() else {
            self.report(
                entry.span(),
                format!("`{key}` is {}, a table with `value` and `source` is wanted", kind(entry.get_ref())),
            );
            return None;
        };
        let angle = key == "overhang_deg";
        self.unknown_keys(
            table,
            &format!("`{key}`"),
            if angle { &["value", "source", "from"] } else { &["value", "source"] },
        );
        let value = match table.get("value") {
            Some(v) => self.number(v, &format!("{key}.value"), most, unit),
            None => {
                self.report(entry.span(), format!("`{key}` has no `value` ({unit})"));
                None
            }
        };
        let source = match table.get("source") {
            Some(v) => self.text_value(v, &format!("{key}.source")),
            None => {
                self.report(
                    entry.span(),
                    format!("`{key}` has no `source`: a published one, or \"common practice, no source\""),
                );
                None
            }
        };
        let from_vertical = if angle { self.is_from_vertical(table, entry.span())? } else { false };
        let (value, source) = (value?, source?);
        if from_vertical {
            if value >= 90.0 {
                self.report(
                    entry.span(),
                    format!("`{key}` is {value} deg from the vertical; below 90 is allowed"),
                );
                return None;
            }
            return Some(Limit {
                value: 90.0 - value,
                source: format!("{source} ({value} from the vertical)"),
            });
        }
        Some(Limit { value, source })
    }

    /// Whether the overhang angle of `table` is measured from the vertical.
    fn is_from_vertical(&mut self, table: &DeTable<'_>, whole: Range<usize>) -> Option<bool> {
        let Some(value) = table.get("from") else {
            self.report(
                whole,
                "`overhang_deg` does not name its reference plane: `from = \"horizontal\"` or \"vertical\""
                    .to_owned(),
            );
            return None;
        };
        let word = self.text_value(value, "overhang_deg.from")?;
        match word.as_str() {
            "horizontal" => Some(false),
            "vertical" => Some(true),
            _ => {
                let message =
                    format!("`overhang_deg.from` is \"{}\"; allowed: horizontal, vertical", shown(&word));
                self.report(value.span(), message);
                None
            }
        }
    }

    /// A number in 0 < x <= `most`.
    fn number(&mut self, value: &Spanned<DeValue<'_>>, key: &str, most: f64, unit: &str) -> Option<f64> {
        let literal = match value.get_ref() {
            DeValue::Float(f) => f.as_str().to_owned(),
            DeValue::Integer(i) if i.radix() == 10 => i.as_str().to_owned(),
            other => {
                self.report(value.span(), format!("`{key}` is {}, a number is wanted", kind(other)));
                return None;
            }
        };
        let number = literal.parse::<f64>().ok().filter(|x| x.is_finite() && *x > 0.0 && *x <= most);
        if number.is_none() {
            self.report(
                value.span(),
                format!("`{key}` is {} {unit}; above 0 and up to {most} {unit} is allowed", shown(&literal)),
            );
        }
        number
    }
}

/// Where the value of `key` stands; the start of the file when it is missing.
fn span_of(table: &DeTable<'_>, key: &str) -> Range<usize> {
    table.get(key).map_or(0..0, Spanned::span)
}

/// The known word most like `word`, when one is near enough.
fn nearest<'k>(word: &str, known: &[&'k str]) -> Option<&'k str> {
    let mut best: Option<(&'k str, f64)> = None;
    for &k in known {
        let near = strsim::jaro_winkler(word, k);
        if near >= NEAR_ENOUGH && best.is_none_or(|(_, b)| near > b) {
            best = Some((k, near));
        }
    }
    best.map(|(k, _)| k)
}

/// What a value of a TOML file is, in words.
pub(crate) fn kind(value: &DeValue<'_>) -> &'static str {
    match value {
        DeValue::String(_) => "text",
        DeValue::Integer(_) => "a whole number",
        DeValue::Float(_) => "a number",
        DeValue::Boolean(_) => "true or false",
        DeValue::Datetime(_) => "a date",
        DeValue::Array(_) => "a list",
        DeValue::Table(_) => "a table",
    }
}

/// Text from the file, short and without control characters, for a message.
fn shown(text: &str) -> String {
    let plain: String = text.chars().map(|c| if c.is_control() { ' ' } else { c }).take(60).collect();
    if text.chars().count() > 60 { plain + "..." } else { plain }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn good() -> &'static str {
        Profile::built_in_text("mex-pla").unwrap()
    }

    fn problems(text: &str) -> Vec<String> {
        let e = Profile::parse(text, "own.toml").unwrap_err();
        assert!(!e.problems.is_empty());
        e.to_string().lines().map(str::to_owned).collect()
    }

    #[test]
    fn an_unknown_key_names_the_nearest_and_its_place() {
        let text = good().replace("[bridge_mm]", "[brigde_mm]");
        let all = problems(&text);
        let line = text.lines().position(|l| l == "[brigde_mm]").unwrap() + 1;
        assert_eq!(all.len(), 1);
        assert!(all[0].starts_with(&format!("own.toml:{line}:2: ")), "{}", all[0]);
        assert!(all[0].contains("`brigde_mm`; did you mean `bridge_mm`?"));
    }

    #[test]
    fn all_problems_come_at_once_in_the_order_of_the_file() {
        let text = good()
            .replace("trapped = \"air\"", "trapped = \"powdr\"")
            .replace("value = 45.0", "value = 90.5")
            .replace("[density_g_cm3]\nvalue = 1.24", "[density_g_cm3]\nvalue = nan")
            .replace("name = \"mex-pla\"", "name = 7")
            .replace("value = 0.2\n", "value = -0.2\n");
        let all = problems(&text);
        assert_eq!(all.len(), 5, "{all:#?}");
        assert!(all[0].contains("`name` is a whole number, text is wanted"));
        assert!(all[1].contains("did you mean \"powder\"?"));
        assert!(all[2].contains("`overhang_deg.value` is 90.5 deg; above 0 and up to 90 deg is allowed"));
        assert!(all[3].contains("`layer_mm.value` is -0.2 mm; above 0 and up to 5 mm is allowed"));
        assert!(all[4].contains("`density_g_cm3.value` is nan g/cm3"));
    }

    #[test]
    fn numbers_that_are_not_finite_or_not_numbers_are_refused() {
        for bad in ["inf", "-inf", "nan", "0", "0.0", "-1", "1e400", "\"1.2\"", "true", "[1.2]", "0x10"] {
            let text = good().replacen("value = 1.2", &format!("value = {bad}"), 1);
            assert!(Profile::parse(&text, "own.toml").is_err(), "{bad}");
        }
        let text = good().replacen("value = 1.2", "value = 1", 1);
        assert!(Profile::parse(&text, "own.toml").is_ok());
    }

    #[test]
    fn the_reference_plane_of_the_overhang_angle_must_be_named_and_is_converted() {
        let all = problems(&good().replace("from = \"horizontal\"\n", ""));
        assert!(all[0].contains("does not name its reference plane"));
        let text = good().replace("value = 45.0\nfrom = \"horizontal\"", "value = 35.0\nfrom = \"vertical\"");
        let limit = Profile::parse(&text, "own.toml").unwrap().overhang_deg.unwrap();
        assert!((limit.value - 55.0).abs() < 1e-12);
        assert!(limit.source.ends_with("(35 from the vertical)"));
        assert!(problems(&good().replace("\"horizontal\"", "\"level\""))[0].contains("allowed: horizontal"));
    }

    #[test]
    fn missing_things_are_named() {
        let all = problems("");
        // 6 texts, trapped, envelope, cautions, 7 limits that may not be left out
        assert_eq!(all.len(), 16, "{all:#?}");
        assert!(all.iter().any(|l| l.contains("`[wall_supported_mm]`")));
        let all = problems(&good().replacen("\nsource = ", "\nsauce = ", 1));
        assert!(all.iter().any(|l| l.contains("did you mean `source`?")));
        assert!(all.iter().any(|l| l.contains("`wall_supported_mm` has no `source`")));
    }

    #[test]
    fn envelopes_cautions_counts_and_walls_are_checked() {
        assert!(
            problems(&good().replace("[200.0, 200.0, 200.0]", "[200.0, 200.0]"))[0].contains("three numbers")
        );
        assert!(
            problems(&good().replace("[200.0, 200.0, 200.0]", "[200.0, 1e5, 200.0]"))[0]
                .contains("up to 10000 mm")
        );
        let resin = Profile::built_in_text("vpp-resin").unwrap();
        assert!(problems(&resin.replace("value = 2.0", "value = 2.5"))[0].contains("whole number"));
        let swapped = good().replacen("value = 1.2", "value = 1.4", 1);
        assert!(problems(&swapped)[0].contains("can't be thinner"));
        assert!(problems(&good().replace("material extrusion", "extrusion"))[0].contains("ISO/ASTM 52900"));
        assert!(problems(&good().replace("\"mex-pla\"", "\"../pla\""))[0].contains("lower-case letters"));
    }

    #[test]
    fn what_is_no_toml_is_told_and_never_panics() {
        assert!(problems("name = ")[0].contains("own.toml:1:"));
        assert!(!problems("= = =\n[[[\n\u{7f}é\"").is_empty());
        assert!(!problems(&"[".repeat(5000)).is_empty());
        assert!(!problems("name = \"a\"\nname = \"b\"\n").is_empty());
    }
}
