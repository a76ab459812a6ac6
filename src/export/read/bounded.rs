//! A reader that stops at a number of bytes: in all, and between two marks.

use std::io::{self, BufRead, Read};

/// Most bytes one piece of XML (a tag, a text) may have; the parser holds each in memory.
const PIECE_MAX: u64 = 1 << 20;

/// Passes bytes on until `left` runs out or a piece grows too long; then gives an error of this room.
pub(super) struct Bounded<R> {
    inner: R,
    left: u64,
    piece: u64,
}

/// What stopped a [`Bounded`] reader; carried inside the `io::Error`.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub(super) enum Stop {
    /// The total ran out.
    #[error("too many bytes in all")]
    Total,
    /// One tag or text is too long.
    #[error("a single tag or text is longer than {PIECE_MAX} bytes")]
    Piece,
}

impl<R: BufRead> Bounded<R> {
    /// Allows `left` bytes in all.
    pub(super) fn new(inner: R, left: u64) -> Self {
        Self { inner, left, piece: 0 }
    }

    /// Bytes still allowed.
    pub(super) fn left(&self) -> u64 {
        self.left
    }

    /// Begins a new piece.
    pub(super) fn mark(&mut self) {
        self.piece = 0;
    }
}

impl<R: BufRead> Read for Bounded<R> {
    fn read(&mut self, out: &mut [u8]) -> io::Result<usize> {
        let available = self.fill_buf()?;
        let n = available.len().min(out.len());
        out[..n].copy_from_slice(&available[..n]);
        self.consume(n);
        Ok(n)
    }
}

impl<R: BufRead> BufRead for Bounded<R> {
    fn fill_buf(&mut self) -> io::Result<&[u8]> {
        let available = self.inner.fill_buf()?;
        if !available.is_empty() {
            if self.left == 0 {
                return Err(io::Error::other(Stop::Total));
            }
            if self.piece > PIECE_MAX {
                return Err(io::Error::other(Stop::Piece));
            }
        }
        let n = available.len().min(usize::try_from(self.left).unwrap_or(usize::MAX));
        Ok(&available[..n])
    }

    fn consume(&mut self, n: usize) {
        self.left = self.left.saturating_sub(n as u64);
        self.piece = self.piece.saturating_add(n as u64);
        self.inner.consume(n);
    }
}

/// The stop inside an I/O error, if one of ours is there.
pub(super) fn stop_of(error: &io::Error) -> Option<Stop> {
    error.get_ref()?.downcast_ref::<Stop>().copied()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn stop(total: u64, size: usize, mark_every: usize) -> Option<Stop> {
        let bytes = vec![b'x'; size];
        let mut reader = Bounded::new(io::BufReader::with_capacity(4096, bytes.as_slice()), total);
        let mut read = 0;
        loop {
            if read % mark_every == 0 {
                reader.mark();
            }
            match reader.fill_buf().map(|b| b.len().min(mark_every)) {
                Ok(0) => return None,
                Ok(n) => {
                    reader.consume(n);
                    read += n;
                }
                Err(e) => return stop_of(&e),
            }
        }
    }

    #[test]
    fn both_limits_stop_the_stream_and_nothing_else_does() {
        assert_eq!(stop(10_000, 10_000, 4096), None); // exactly as much as allowed
        assert_eq!(stop(9_999, 10_000, 4096), Some(Stop::Total));
        assert_eq!(stop(1 << 30, 5 << 20, 4096), None);
        assert_eq!(stop(1 << 30, 5 << 20, usize::MAX), Some(Stop::Piece));
    }
}
