//! The skins against reference data, symmetries and published facts.
#![allow(clippy::unwrap_used, reason = "test code")]

use stagewright::geom::{Curvature, Surface, Vec3, tangent_frame};
use stagewright::skin::{self, StageSurface};

/// The rows of a table with a header line, as numbers.
fn table(text: &str) -> Vec<Vec<f64>> {
    text.lines().skip(1).map(|l| l.split(',').map(|x| x.parse().unwrap()).collect()).collect()
}

fn stage(order: u32, tau: f64) -> Box<dyn StageSurface> {
    skin::family("ruled", order).unwrap().stage(tau)
}

#[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss, reason = "the first column holds 2..=5")]
fn order_of(row: &[f64]) -> u32 {
    row[0] as u32
}

fn curvature(surface: &dyn Surface, p: Vec3) -> Curvature {
    let (e1, e2) = tangent_frame(&p);
    Curvature::of(&surface.second(p, e1, e2))
}

#[test]
fn test_vectors_hold_to_1e_10() {
    let rows = table(include_str!("data/ruled-testvectors.csv"));
    assert_eq!(rows.len(), 252);
    for r in &rows {
        let s = stage(order_of(r), r[1]);
        let p = Vec3::new(r[2], r[3], r[4]).normalize();
        let at = format!("order {} tau {} point {p:?}", r[0], r[1]);
        let c = curvature(s.as_ref(), p);
        assert!((s.position(p) - Vec3::new(r[5], r[6], r[7])).norm() < 1e-10, "position, {at}");
        assert!((c.normal - Vec3::new(r[8], r[9], r[10])).norm() < 1e-10, "normal, {at}");
        // the table has 12 significant digits
        let near = |got: f64, want: f64| (got - want).abs() < 1e-10 * want.abs().max(1.0);
        assert!(near(c.mean, r[11]), "H {} {}, {at}", c.mean, r[11]);
        assert!(near(c.gauss, r[12]), "K {} {}, {at}", c.gauss, r[12]);
        let [s1, s2] = c.singular;
        assert!(near(s1, r[13]) && near(s2, r[14]), "sigma {s1} {s2}, {at}");
    }
}

#[test]
fn schedule_and_fold_margin_hold_to_the_digits_of_the_table() {
    let rows = table(include_str!("data/ruled-figures.csv"));
    assert_eq!(rows.len(), 164);
    for r in &rows {
        let ruled = skin::Ruled::new(order_of(r)).unwrap().stage_at(r[1]);
        let p = ruled.parameters();
        let got = [p.t, p.q, p.mu, p.l, p.xi, p.b, p.zc, p.e, p.nu, p.om, p.psi];
        for (name, (got, want)) in ["t", "q", "mu", "L", "xi", "b", "zc", "e", "nu", "om", "psi"]
            .iter()
            .zip(got.iter().zip(&r[15..]))
        {
            assert!(near_six(*got, *want), "{name}: {got} {want} in {:?}", &r[..2]);
        }
        let fold = ruled.fold_margin().unwrap();
        assert!(near_six(fold, r[4]), "fold: {fold} {} in {:?}", r[4], &r[..2]);
        assert!(fold > 0.85);
    }
}

/// Equal to the six significant digits of the table.
fn near_six(got: f64, want: f64) -> bool {
    let unit = 10_f64.powf(want.abs().max(1e-9).log10().floor() - 5.0);
    (got - want).abs() <= 0.51 * unit
}
