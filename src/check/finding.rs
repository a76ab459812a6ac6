//! One result of one check, as data.

use crate::geom::Vec3;
use crate::units::Unit;

/// How a finding is judged. Ordered: the worst is the greatest.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Verdict {
    /// Within the limit.
    Pass,
    /// Worth a look before printing.
    Caution,
    /// Will not print as it is, by the limit quoted.
    Fail,
}

impl Verdict {
    /// The word used in files and on the terminal.
    #[must_use]
    pub const fn word(self) -> &'static str {
        match self {
            Self::Pass => "pass",
            Self::Caution => "caution",
            Self::Fail => "fail",
        }
    }
}

/// One result of one check.
#[derive(Clone, Debug, PartialEq)]
pub struct Finding {
    /// Short stable name of the check and figure: `wall-ball`, `overhang-area`, `chambers-sealed`.
    pub check: &'static str,
    /// How it is judged.
    pub verdict: Verdict,
    /// The measured value, in `unit`.
    pub value: f64,
    /// The limit it was held against, in `unit`; `None` when the figure is given for information.
    pub limit: Option<f64>,
    /// The unit of `value` and `limit`.
    pub unit: Unit,
    /// Where, in the coordinates of the written files, mm.
    pub place_mm: Option<Vec3>,
    /// What was found, in one plain sentence with its numbers and units.
    pub message: String,
    /// What to change, in one plain sentence; empty for a pass.
    pub advice: String,
    /// Where the limit comes from: a published source, or "common practice, no source".
    pub source: String,
}

impl Finding {
    /// The source of a limit that follows from what the tool is for and is published nowhere.
    pub const OWN_RULE: &'static str = "rule of this tool, no source";

    /// A figure given for information: passes, no limit, no advice.
    #[must_use]
    pub(crate) fn information(
        check: &'static str,
        value: f64,
        unit: Unit,
        message: String,
        source: String,
    ) -> Self {
        Self {
            check,
            verdict: Verdict::Pass,
            value,
            limit: None,
            unit,
            place_mm: None,
            message,
            advice: String::new(),
            source,
        }
    }
}
