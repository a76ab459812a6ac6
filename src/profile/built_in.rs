//! The profiles that come with the program: the files of `profiles/`, embedded.

use super::Profile;

/// Name and text of each, in the order they are listed.
const FILES: [(&str, &str); 6] = [
    ("mex-pla", include_str!("../../profiles/mex-pla.toml")),
    ("mex-petg", include_str!("../../profiles/mex-petg.toml")),
    ("vpp-resin", include_str!("../../profiles/vpp-resin.toml")),
    ("pbf-pa12", include_str!("../../profiles/pbf-pa12.toml")),
    ("mjt-resin", include_str!("../../profiles/mjt-resin.toml")),
    ("bjt-sand-or-gypsum", include_str!("../../profiles/bjt-sand-or-gypsum.toml")),
];

/// The names of the embedded profiles, in the order they are listed.
#[must_use]
pub fn built_in_names() -> [&'static str; 6] {
    FILES.map(|(name, _)| name)
}

impl Profile {
    /// The embedded profile called `name`; `None` when there is none of that name.
    ///
    /// # Example
    /// ```
    /// # use stagewright::profile::Profile;
    /// let pla = Profile::built_in("mex-pla").expect("embedded");
    /// assert_eq!(pla.density_g_cm3.value, 1.24);
    /// assert!(Profile::built_in("mex-cheese").is_none());
    /// ```
    #[must_use]
    pub fn built_in(name: &str) -> Option<Self> {
        let text = Self::built_in_text(name)?;
        // A test holds every embedded file to the parser, so nothing is lost by `ok`.
        Self::parse(text, name).ok()
    }

    /// The embedded file itself, a starting point for an own profile; `None` when there is none of that name.
    #[must_use]
    pub fn built_in_text(name: &str) -> Option<&'static str> {
        FILES.iter().find(|(n, _)| *n == name).map(|(_, text)| *text)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::profile::Trapped;

    #[test]
    fn every_embedded_file_is_accepted_under_its_own_name() {
        for (name, text) in FILES {
            let p = Profile::parse(text, &format!("{name}.toml")).unwrap_or_else(|e| panic!("{e}"));
            assert_eq!(p.name, name);
            assert_eq!(Profile::built_in(name).unwrap(), p);
            assert!(p.cautions.len() >= 4, "{name}");
            assert!(text.contains("Screening values: defaults of this tool"), "{name}");
        }
        assert!(Profile::built_in("").is_none());
    }

    #[test]
    fn processes_have_their_iso_astm_52900_names() {
        let pair = |n: &str| {
            let p = Profile::built_in(n).unwrap();
            (p.process, p.process_code, p.trapped)
        };
        assert_eq!(pair("mex-petg"), ("material extrusion".into(), "MEX".into(), Trapped::Air));
        assert_eq!(pair("vpp-resin"), ("vat photopolymerization".into(), "VPP".into(), Trapped::Resin));
        assert_eq!(pair("pbf-pa12"), ("powder bed fusion".into(), "PBF-LB/P".into(), Trapped::Powder));
        assert_eq!(pair("mjt-resin"), ("material jetting".into(), "MJT".into(), Trapped::Support));
        assert_eq!(pair("bjt-sand-or-gypsum"), ("binder jetting".into(), "BJT".into(), Trapped::Powder));
    }

    #[test]
    fn no_profile_gives_a_verdict_of_safety() {
        for (name, text) in FILES {
            let lower = text.to_lowercase();
            assert!(!lower.contains("safe") && !lower.contains("complian"), "{name}");
        }
    }
}
