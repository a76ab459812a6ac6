//! Units of the numbers the program prints and stores.
//!
//! Inside, lengths are `f64` millimetres and angles `f64` degrees or radians as the name says
//! (`wall_mm`, `limit_deg`, `angle_rad`). A number that leaves the program carries a [`Unit`].

use std::fmt;

/// The unit of a stored or printed number.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Unit {
    /// Millimetre.
    Mm,
    /// Square millimetre.
    Mm2,
    /// Cubic millimetre.
    Mm3,
    /// Degree of arc.
    Deg,
    /// Gram.
    Gram,
    /// A number of things (edges, chambers, triangles).
    Count,
    /// A pure ratio.
    Ratio,
}

impl Unit {
    /// The symbol as printed in messages and stored in `set.json`; empty for a ratio.
    #[must_use]
    pub const fn symbol(self) -> &'static str {
        match self {
            Self::Mm => "mm",
            Self::Mm2 => "mm2",
            Self::Mm3 => "mm3",
            Self::Deg => "deg",
            Self::Gram => "g",
            Self::Count => "count",
            Self::Ratio => "",
        }
    }
}

/// A number with its unit, printed with a number of digits that suits the size of the value.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Quantity {
    /// The number, in `unit`.
    pub value: f64,
    /// The unit of `value`.
    pub unit: Unit,
}

impl Quantity {
    /// Joins a number and its unit.
    #[must_use]
    pub const fn new(value: f64, unit: Unit) -> Self {
        Self { value, unit }
    }
}

impl fmt::Display for Quantity {
    /// Prints for people: `2.40 mm`, `12.5 cm3` (mm3 from 1000 up), `38 deg`, `4`.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let v = self.value;
        match self.unit {
            Unit::Mm => write!(f, "{v:.2} mm"),
            Unit::Mm2 if v.abs() >= 1000.0 => write!(f, "{:.1} cm2", v / 100.0),
            Unit::Mm2 => write!(f, "{v:.1} mm2"),
            Unit::Mm3 if v.abs() >= 1000.0 => write!(f, "{:.1} cm3", v / 1000.0),
            Unit::Mm3 => write!(f, "{v:.1} mm3"),
            Unit::Deg => write!(f, "{v:.1} deg"),
            Unit::Gram => write!(f, "{v:.1} g"),
            Unit::Count => write!(f, "{v:.0}"),
            Unit::Ratio => write!(f, "{v:.4}"),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn large_volumes_are_printed_in_cubic_centimetres() {
        assert_eq!(Quantity::new(12_540.0, Unit::Mm3).to_string(), "12.5 cm3");
        assert_eq!(Quantity::new(999.0, Unit::Mm3).to_string(), "999.0 mm3");
    }
}
