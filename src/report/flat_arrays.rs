//! A JSON layout: one key a line, arrays of numbers and words on one line.

use serde_json::ser::Formatter;
use std::io;

/// Indents objects by two spaces a level; an array stays on its line until an object or an array begins in it.
#[derive(Default)]
pub(super) struct FlatArrays {
    depth: usize,
    /// One entry for each open bracket.
    open: Vec<Bracket>,
}

#[derive(Clone, Copy, PartialEq, Eq)]
enum Bracket {
    Object {
        has_value: bool,
    },
    /// `broken`: something in it began on a line of its own.
    Array {
        broken: bool,
    },
}

impl FlatArrays {
    fn new_line<W: ?Sized + io::Write>(&self, w: &mut W) -> io::Result<()> {
        w.write_all(b"\n")?;
        (0..self.depth).try_for_each(|_| w.write_all(b"  "))
    }

    /// Breaks the line when the thing that begins now stands in an array.
    fn break_array<W: ?Sized + io::Write>(&mut self, w: &mut W) -> io::Result<()> {
        if let Some(Bracket::Array { broken }) = self.open.last_mut() {
            *broken = true;
            self.new_line(w)?;
        }
        Ok(())
    }
}

impl Formatter for FlatArrays {
    fn begin_array<W: ?Sized + io::Write>(&mut self, w: &mut W) -> io::Result<()> {
        self.break_array(w)?;
        self.open.push(Bracket::Array { broken: false });
        self.depth += 1;
        w.write_all(b"[")
    }

    fn end_array<W: ?Sized + io::Write>(&mut self, w: &mut W) -> io::Result<()> {
        self.depth -= 1;
        if self.open.pop() == Some(Bracket::Array { broken: true }) {
            self.new_line(w)?;
        }
        w.write_all(b"]")
    }

    fn begin_array_value<W: ?Sized + io::Write>(&mut self, w: &mut W, first: bool) -> io::Result<()> {
        match self.open.last() {
            _ if first => Ok(()),
            Some(Bracket::Array { broken: true }) => w.write_all(b","),
            _ => w.write_all(b", "),
        }
    }

    fn begin_object<W: ?Sized + io::Write>(&mut self, w: &mut W) -> io::Result<()> {
        self.break_array(w)?;
        self.open.push(Bracket::Object { has_value: false });
        self.depth += 1;
        w.write_all(b"{")
    }

    fn end_object<W: ?Sized + io::Write>(&mut self, w: &mut W) -> io::Result<()> {
        self.depth -= 1;
        if self.open.pop() == Some(Bracket::Object { has_value: true }) {
            self.new_line(w)?;
        }
        w.write_all(b"}")
    }

    fn begin_object_key<W: ?Sized + io::Write>(&mut self, w: &mut W, first: bool) -> io::Result<()> {
        if let Some(Bracket::Object { has_value }) = self.open.last_mut() {
            *has_value = true;
        }
        if !first {
            w.write_all(b",")?;
        }
        self.new_line(w)
    }

    fn begin_object_value<W: ?Sized + io::Write>(&mut self, w: &mut W) -> io::Result<()> {
        w.write_all(b": ")
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use serde::Serialize;

    #[test]
    fn number_arrays_stay_on_their_line_and_objects_get_lines_of_their_own() {
        let value = serde_json::json!({ "a": [1, 2], "b": [{ "c": [] }, {}], "d": [[1.5], [2.5]] });
        let mut bytes = Vec::new();
        let mut out = serde_json::Serializer::with_formatter(&mut bytes, FlatArrays::default());
        value.serialize(&mut out).unwrap();
        let text = String::from_utf8(bytes).unwrap();
        let wanted = "{\n  \"a\": [1, 2],\n  \"b\": [\n    {\n      \"c\": []\n    },\n    {}\n  ],\n  \"d\": [\n    [1.5],\n    [2.5]\n  ]\n}";
        assert_eq!(text, wanted);
        assert_eq!(serde_json::from_str::<serde_json::Value>(&text).unwrap(), value);
    }
}
