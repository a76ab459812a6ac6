//! Text made fit for XML 1.0.

use std::fmt::{self, Display, Formatter, Write};

/// Displays `.0` so that it can stand in XML text and between double quotes.
///
/// `& < > " '` become references; tab and line feed stay (a reader turns them into blanks in an attribute);
/// carriage return becomes line feed, as a reader would make it; characters that XML 1.0 does not allow (section 2.2), and the
/// control characters it discourages, become U+FFFD.
pub(super) struct Escaped<'a>(pub(super) &'a str);

impl Display for Escaped<'_> {
    fn fmt(&self, f: &mut Formatter<'_>) -> fmt::Result {
        for c in self.0.chars() {
            match c {
                '&' => f.write_str("&amp;")?,
                '<' => f.write_str("&lt;")?,
                '>' => f.write_str("&gt;")?,
                '"' => f.write_str("&quot;")?,
                '\'' => f.write_str("&apos;")?,
                // As they are: lib3mf 2.5.0 refuses numeric references. A reader makes \r a line end anyway.
                '\t' | '\n' => f.write_char(c)?,
                '\r' => f.write_char('\n')?,
                '\0'..='\x1f' | '\x7f'..='\u{9f}' | '\u{fffe}' | '\u{ffff}' => f.write_char('\u{fffd}')?,
                _ => f.write_char(c)?,
            }
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn nothing_that_ends_or_breaks_an_attribute_is_left() {
        let s = Escaped("a<b>&\"'\n\0\x1b\u{85}\u{ffff} é 球").to_string();
        assert_eq!(s, "a&lt;b&gt;&amp;&quot;&apos;\n\u{fffd}\u{fffd}\u{fffd}\u{fffd} é 球");
    }
}
