//! Names of the files of a set. Nothing a user types becomes part of a name.

use crate::job::{Format, Job};

/// The material file all OBJ files of a set share.
pub const COLOURS_FILE: &str = "colours.mtl";
/// The files a set has besides its stages.
pub(super) const SET_FILES: [&str; 3] = ["set.json", "sheet.html", "cautions.txt"];

/// The name of the files of stage `index` (from 1) without extension: `03-tau-0.410`.
///
/// Tau has three decimals, or as many as keep all times of the job apart (at most 17); the index has two
/// digits, or three in a set of a hundred stages and more.
#[must_use]
pub fn stage_stem(job: &Job, index: usize) -> String {
    let tau = index.checked_sub(1).and_then(|i| job.times.get(i)).copied().unwrap_or(f64::NAN);
    let digits = if job.times.len() >= 100 { 3 } else { 2 };
    format!("{index:0digits$}-tau-{tau:.*}", decimals(&job.times))
}

/// The fewest decimals, 3 to 17, that print all times differently.
fn decimals(times: &[f64]) -> usize {
    (3..17)
        .find(|&d| {
            let mut printed: Vec<String> = times.iter().map(|t| format!("{t:.d$}")).collect();
            printed.sort_unstable();
            printed.windows(2).all(|w| w[0] != w[1])
        })
        .unwrap_or(17)
}

/// Every file of the set, in the order they are written.
pub(super) fn all(job: &Job) -> Vec<String> {
    let mut names = Vec::new();
    for index in 1..=job.times.len() {
        let stem = stage_stem(job, index);
        names.extend(job.formats.iter().map(|f| format!("{stem}.{}", f.name())));
    }
    if job.formats.contains(&Format::Obj) {
        names.push(COLOURS_FILE.to_owned());
    }
    names.extend(SET_FILES.map(str::to_owned));
    names
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_have_the_index_and_tau_and_nothing_of_the_title() {
        let mut job = crate::job::starter();
        job.title = "../../etc/<script>\"".into();
        job.times = vec![0.0, 0.41];
        assert_eq!(stage_stem(&job, 2), "02-tau-0.410");
        assert_eq!(
            all(&job),
            [
                "01-tau-0.000.stl",
                "01-tau-0.000.3mf",
                "02-tau-0.410.stl",
                "02-tau-0.410.3mf",
                "set.json",
                "sheet.html",
                "cautions.txt"
            ]
        );
    }

    #[test]
    fn close_times_get_the_decimals_that_keep_them_apart() {
        let mut job = crate::job::starter();
        job.times = vec![0.5, 0.500_04, 0.500_06];
        assert_eq!(stage_stem(&job, 2), "02-tau-0.50004");
        job.times = (0..120).map(|i| f64::from(i) / 119.0).collect();
        assert_eq!(stage_stem(&job, 7), "007-tau-0.050");
    }
}
