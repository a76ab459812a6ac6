//! The colours of the sides in files that can carry colours.

use crate::mesh::Side;

/// sRGB colours of the two sides of the skin and of fixtures (feet, labels, pegs).
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct SideColours {
    /// Side A, red, green, blue, 0..=255.
    pub a: [u8; 3],
    /// Side B.
    pub b: [u8; 3],
    /// Neither side.
    pub fixture: [u8; 3],
}

impl Default for SideColours {
    /// Teal #1f7a7a, sand #e3c08f, and a plain grey for fixtures.
    fn default() -> Self {
        Self::of_sides([0x1f, 0x7a, 0x7a], [0xe3, 0xc0, 0x8f])
    }
}

impl SideColours {
    /// The two side colours of a job, with a plain grey (#8a8f91) for fixtures.
    #[must_use]
    pub const fn of_sides(a: [u8; 3], b: [u8; 3]) -> Self {
        Self { a, b, fixture: [0x8a, 0x8f, 0x91] }
    }

    /// The colour of `side`.
    #[must_use]
    pub const fn of(&self, side: Side) -> [u8; 3] {
        match side {
            Side::A => self.a,
            Side::B => self.b,
            Side::Fixture => self.fixture,
        }
    }
}
