//! The families a job can name.

use super::family::Family;
use super::ruled::{self, Ruled};

/// What is told about a family before any stage is made.
#[derive(Clone, Debug, PartialEq)]
pub struct FamilyInfo {
    /// The name in job files.
    pub name: &'static str,
    /// One line for people.
    pub description: &'static str,
    /// The symmetry orders it is made for.
    pub orders: std::ops::RangeInclusive<u32>,
    /// The times it is defined for.
    pub tau: std::ops::RangeInclusive<f64>,
    /// Where the formulas come from.
    pub source: &'static str,
    /// The order taken when a job names none.
    pub default_order: u32,
    /// The times taken when a job names none.
    pub default_times: &'static [f64],
}

static FAMILIES: [FamilyInfo; 1] = [FamilyInfo {
    name: ruled::NAME,
    description: "one closed formula from round sphere to round sphere, by ruled surfaces; chiral",
    orders: ruled::MIN_ORDER..=ruled::MAX_ORDER,
    tau: 0.0..=1.0,
    source: ruled::SOURCE,
    default_order: 2,
    default_times: &[0.0, 0.2, 0.31, 0.42, 0.5],
}];

/// Every family, in the order they are listed to people.
#[must_use]
pub fn families() -> &'static [FamilyInfo] {
    &FAMILIES
}

/// Finds a family by the name and symmetry order of a job file.
///
/// # Errors
/// [`FamilyError::Unknown`] for a name that is not in [`families`]; [`FamilyError::Order`] for an order the
/// family is not made for.
///
/// # Example
/// ```
/// let family = stagewright::skin::family("ruled", 2)?;
/// let stage = family.stage(0.0);
/// let p = stage.position(stagewright::geom::Vec3::x());
/// assert!((p.norm() - 1.0).abs() < 1e-12); // the round sphere
/// # Ok::<(), stagewright::skin::FamilyError>(())
/// ```
pub fn family(name: &str, order: u32) -> Result<Box<dyn Family>, FamilyError> {
    let info = families().iter().find(|f| f.name == name).ok_or_else(|| FamilyError::Unknown {
        name: name.to_owned(),
        known: families().iter().map(|f| f.name).collect(),
        nearest: nearest(name),
    })?;
    let refused = FamilyError::Order {
        family: info.name,
        order,
        least: *info.orders.start(),
        greatest: *info.orders.end(),
    };
    match Ruled::new(order) {
        Some(family) => Ok(Box::new(family)),
        None => Err(refused),
    }
}

/// The known name most like `name`, if any is much like it.
fn nearest(name: &str) -> Option<&'static str> {
    let wanted = name.to_lowercase();
    families()
        .iter()
        .map(|f| (strsim::jaro_winkler(&wanted, f.name), f.name))
        .filter(|(likeness, _)| *likeness > 0.75)
        .max_by(|a, b| a.0.total_cmp(&b.0))
        .map(|(_, name)| name)
}

/// Why [`family`] gave none.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
pub enum FamilyError {
    /// No family has this name.
    #[error(
        "there is no family {name:?}; known: {}{}",
        known.join(", "),
        nearest.map(|n| format!("; did you mean {n:?}?")).unwrap_or_default()
    )]
    Unknown {
        /// The name asked for.
        name: String,
        /// All names there are.
        known: Vec<&'static str>,
        /// The one most like it.
        nearest: Option<&'static str>,
    },
    /// The family has no such order.
    #[error("family {family:?} has no order {order}; set order to a whole number from {least} to {greatest}")]
    Order {
        /// The family.
        family: &'static str,
        /// The order asked for.
        order: u32,
        /// The lowest order it has.
        least: u32,
        /// The highest order it has.
        greatest: u32,
    },
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn refusals_name_value_range_and_nearest_name() {
        let message = |name, order| family(name, order).err().map(|e| e.to_string()).unwrap_or_default();
        assert_eq!(
            message("Rulde", 2),
            "there is no family \"Rulde\"; known: ruled; did you mean \"ruled\"?"
        );
        assert_eq!(message("xyz", 2), "there is no family \"xyz\"; known: ruled");
        let order = "family \"ruled\" has no order 7; set order to a whole number from 2 to 5";
        assert_eq!(message("ruled", 7), order);
        assert!(family("ruled", 0).is_err());
    }

    #[test]
    fn every_listed_order_can_be_made() {
        for info in families() {
            assert!(info.orders.contains(&info.default_order));
            assert!(info.default_times.iter().all(|t| info.tau.contains(t)));
            for order in info.orders.clone() {
                let made = family(info.name, order).unwrap();
                assert_eq!((made.name(), made.order(), made.source()), (info.name, order, info.source));
            }
        }
    }
}
