//! Tests of reading job files.

use super::*;

fn known() -> Known {
    Known {
        families: vec!["ruled".into(), "fluted".into()],
        profiles: vec!["mex-pla".into(), "vpp-resin".into()],
    }
}

fn read(text: &str) -> Result<Job, JobErrors> {
    parse(text, "job.toml", &known())
}

fn refused(text: &str) -> JobErrors {
    read(text).unwrap_err()
}

/// The minimal job with one more line in its table.
fn with(table: &str, line: &str) -> String {
    let mut text = String::new();
    for (name, own) in [("set", "title = \"t\""), ("skin", "times = [0.5]"), ("solid", ""), ("build", "")] {
        let replaced = line.split(' ').next().is_some_and(|k| own.starts_with(k));
        text += &format!("[{name}]\n");
        if !(replaced && name == table) {
            text += &format!("{own}\n");
        }
        if name == table {
            text += &format!("{line}\n");
        }
    }
    text
}

#[test]
fn a_minimal_job_has_the_documented_defaults() {
    let job = read("[set]\ntitle = \"t\"\n[skin]\ntimes = [0.0, 0.2, 0.31, 0.42, 0.5]\n").unwrap();
    assert_eq!(job, Job { title: "t".into(), ..starter() });
}

#[test]
fn every_default_in_the_table_is_allowed_by_the_table() {
    for k in &KEYS {
        if let Default::Toml(value) = k.default {
            let mut text = "set.title = 't'\nskin.times = [0.5]\n".to_owned();
            text += &format!("{} = {value}\n", k.dotted());
            read(&text).unwrap_or_else(|e| panic!("{}: {e}", k.dotted()));
        }
    }
}

#[test]
fn a_job_written_back_reads_back_equal() {
    let odd = Job {
        title: "../\"quotes\" <script> \\ \u{2028} ü".into(),
        profile: "own/p.toml".into(),
        formats: vec![Format::ThreeMf, Format::Obj],
        family: "fluted".into(),
        order: 5,
        times: vec![1.0, 1.0 / 3.0, 0.1 + 0.2, 5e-324],
        size_mm: 2000.0,
        scale: Scale::Common,
        wall_mm: 2.4,
        tolerance_mm: 0.005,
        grid_mm: Some(0.123_456_789_012_345_68),
        direction: Vec3::new(1.0, -2.0, 0.3).normalize(),
        colour_a: [0, 255, 16],
        colour_b: [1, 2, 3],
    };
    for job in [odd, starter()] {
        assert_eq!(read(&job.to_toml()).unwrap(), job, "{}", job.to_toml());
    }
}

#[test]
fn even_times_include_both_ends() {
    assert_eq!(read(&with("skin", "times = { even = 5 }")).unwrap().times, [0.0, 0.25, 0.5, 0.75, 1.0]);
    for bad in ["{ even = 1 }", "{ even = 201 }", "{ even = -3 }", "{ even = 2.5 }", "{}", "{ evn = 3 }"] {
        refused(&with("skin", &format!("times = {bad}")));
    }
}

#[test]
fn all_problems_come_at_once_in_the_order_of_the_file_with_places_and_hints() {
    let text = "[set]\ntitel = \"x\"\nformats = [\"stl\", \"ply\", \"stl\"]\n\
        [skin]\nfamily = \"ruledd\"\norder = 7\ntimes = [0.0, 1.5, nan]\n\
        [solid]\nwall_mm = \"thick\"\nsize_mm = -3\n  tolerance_mm = 1e400\n[colors]\nside_a = 1\n";
    let errors = refused(text);
    let seen: Vec<(usize, usize, Option<&str>)> =
        errors.problems().iter().map(|p| (p.line, p.column, p.nearest.as_deref())).collect();
    assert_eq!(
        seen,
        [
            (1, 2, None), // set.title missing
            (2, 1, Some("title")),
            (3, 19, None), // ply: nothing alike
            (3, 26, None), // stl twice
            (5, 10, Some("ruled")),
            (6, 9, None),
            (7, 15, None),
            (7, 20, None),
            (9, 11, None),
            (10, 11, None),
            (11, 18, None),
            (12, 2, Some("colours")),
        ],
        "{errors}"
    );
    let shown = errors.to_string();
    for part in [
        "job.toml:2:1: there is no key `set.titel`",
        "did you mean `title`?",
        "job.toml:10:11: `solid.size_mm` is -3, but must be 10 to 2000 mm",
        "`solid.wall_mm` is text (\"thick\"), but must be 0.2 to 50 mm",
        "`solid.tolerance_mm` is 1e400, but must be 0.005 to 1 mm",
        "`skin.times[2]` is nan, but must be a number, 0 to 1",
        "`skin.order` is 7, but must be a whole number, 2 to 5",
        "known are \"stl\", \"obj\", \"3mf\"",
    ] {
        assert!(shown.contains(part), "{part:?} is not in\n{shown}");
    }
}

#[test]
fn every_number_key_refuses_what_is_not_in_its_range() {
    for k in &KEYS {
        let Kind::Number { min, max, .. } = k.kind else { continue };
        for bad in [
            "nan",
            "inf",
            "-inf",
            "-1.0",
            "0",
            "1e300",
            "1e400",
            "-0.0",
            "99999999999999999999999999999999",
            "0xffffffffffffffffffff",
            "true",
            "\"2\"",
            "[2.0]",
            "{ mm = 2 }",
            "1979-05-27",
        ]
        .map(str::to_owned)
        .into_iter()
        .chain([format!("{:?}", max * (1.0 + 1e-15)), format!("{:?}", min * (1.0 - 1e-15))])
        {
            let text = with(k.table, &format!("{} = {bad}", k.name));
            let errors = refused(&text);
            assert!(errors.to_string().contains(&k.dotted()), "{bad}: {errors}");
        }
    }
}

#[test]
fn walls_tolerances_and_grids_that_do_not_go_together_name_both_keys() {
    for (lines, key, other) in [
        ("size_mm = 20\nwall_mm = 5.01", "solid.wall_mm", "solid.size_mm"),
        ("wall_mm = 45", "solid.wall_mm", "solid.size_mm"),
        ("size_mm = 10\nwall_mm = 9", "solid.wall_mm", "solid.size_mm"),
        ("wall_mm = 0.2\ntolerance_mm = 0.06", "solid.tolerance_mm", "solid.wall_mm"),
        ("grid_mm = 2.1", "solid.grid_mm", "solid.wall_mm"),
    ] {
        let errors = refused(&with("solid", lines)).to_string();
        assert!(errors.contains(key) && errors.contains(other), "{errors}");
    }
    read(&with("solid", "size_mm = 20\nwall_mm = 5")).unwrap();
    // 0.05 is the default: the wall is what the file gives, so the message stands there.
    let errors = refused(&with("solid", "wall_mm = 0.2 # 0.2 / 4 = 0.05 is allowed\ngrid_mm = 0.3"));
    assert_eq!(errors.problems().len(), 1);
}

#[test]
fn times_outside_the_range_none_or_ten_thousand_are_refused() {
    let many =
        format!("times = [{}]", (0..10_000).map(|i| format!("{}e-5", i)).collect::<Vec<_>>().join(","));
    for bad in
        ["times = []", "times = 0.5", "times = [0.5, 0.5]", "times = [0.0, -0.0]", "times = [[0.5]]", &many]
    {
        let errors = refused(&with("skin", bad));
        assert_eq!(errors.problems().len(), 1, "{errors}");
        assert!(errors.to_string().contains("skin.times"), "{errors}");
    }
    assert!(refused(&with("skin", &many)).to_string().contains("a list of 10000 times"));
    assert!(refused("[set]\ntitle = 't'\n").to_string().contains("`skin.times` is missing"));
}

#[test]
fn titles_are_one_printable_line() {
    for bad in ["", "   ", "a\\nb", "a\\u0007b", &"x".repeat(121)] {
        refused(&with("set", &format!("title = \"{bad}\"")));
    }
    for good in ["../../etc", "<script>alert(1)</script>", "\\\"quoted\\\"", &"ü".repeat(120)] {
        read(&with("set", &format!("title = \"{good}\""))).unwrap();
    }
}

#[test]
fn directions_are_made_unit_vectors_and_never_zero() {
    let job = read(&with("build", "direction = [0, 3, 4]")).unwrap();
    assert!((job.direction - Vec3::new(0.0, 0.6, 0.8)).norm() < 1e-15);
    for bad in
        ["[0, 0, 0]", "[0, 1]", "[0, 0, 1, 0]", "[nan, 0, 1]", "[1e9, 0, 0]", "\"up\"", "[1e-200, 0, 0]"]
    {
        refused(&with("build", &format!("direction = {bad}")));
    }
}

#[test]
fn unknown_names_are_told_with_the_known_ones() {
    let e = refused(&with("set", "profile = \"mex-plaa\"")).to_string();
    assert!(e.contains("did you mean `mex-pla`?") && e.contains("vpp-resin"), "{e}");
    assert_eq!(read(&with("set", "profile = \"shop/nylon.toml\"")).unwrap().profile, "shop/nylon.toml");
    let e = refused(&with("skin", "family = \"moebius\"")).to_string();
    assert!(e.contains("\"ruled\", \"fluted\""), "{e}");
}

#[test]
fn text_that_is_not_toml_says_where() {
    let e = refused("[set]\ntitle = \"t\"\ntitle = \"u\"\n[skin]\ntimes = [0.5\n");
    let shown = e.to_string();
    assert!(shown.contains("job.toml:3:1: title is given twice"), "{shown}");
    assert!(e.problems().iter().all(|p| matches!(p.cause, Cause::Syntax { .. })), "{shown}");
    assert!(refused("").to_string().contains("is empty"));
    assert!(refused(" \n# only words\n").to_string().contains("is empty"));
}

#[test]
fn garbage_of_any_kind_is_refused_without_a_panic() {
    let nested = "[".repeat(5000);
    let long = format!("x = \"{}\"", "é".repeat(200_000));
    let huge = "=".repeat(FILE_BYTES_MAX + 1);
    let noise: String =
        (0..20_000_u32).filter_map(|i| char::from_u32(i.wrapping_mul(2_654_435_761) % 0x3000)).collect();
    for text in [
        "\u{0}",
        "=",
        "[[set]]\ntitle=1",
        "set = 3",
        "\u{feff}",
        &nested,
        &long,
        &huge,
        &noise,
        "a.b.c.d = 1",
    ] {
        let shown = refused(text).to_string();
        assert!(shown.starts_with("error"), "{shown}");
        assert!(shown.len() < 40_000, "{} bytes of message", shown.len());
    }
    assert!(refused(&huge).to_string().contains("1048576 bytes"));
}
