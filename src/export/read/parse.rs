//! Words and numbers of text formats, from bytes: names in such files are in any encoding.

use super::error::{Place, ReadError, clipped};
use std::str::FromStr;

/// The words of a line or a file, split at ASCII white space.
pub(super) fn words(bytes: &[u8]) -> impl Iterator<Item = &[u8]> {
    bytes.split(u8::is_ascii_whitespace).filter(|w| !w.is_empty())
}

/// The first word, empty when there is none.
pub(super) fn first_word(bytes: &[u8]) -> &[u8] {
    words(bytes).next().unwrap_or_default()
}

/// Parses one number.
pub(super) fn number<T: FromStr>(
    word: Option<&[u8]>,
    problem: &'static str,
    place: impl Fn() -> Place,
) -> Result<T, ReadError> {
    let word = word.unwrap_or_default();
    std::str::from_utf8(word).ok().and_then(|s| s.parse().ok()).ok_or_else(|| ReadError::Syntax {
        place: place(),
        problem,
        found: clipped(word),
    })
}
