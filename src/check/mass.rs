//! Mass of the material from its volume and the profile's density.

use super::Finding;
use super::body::Body;
use crate::profile::Profile;
use crate::units::{Quantity, Unit};

/// The finding `mass`, for information.
pub(super) fn finding(body: &Body<'_>, profile: &Profile) -> Finding {
    let volume = body.volume_mm3();
    let density = &profile.density_g_cm3;
    let mass = mass_g(volume, density.value);
    Finding::information(
        "mass",
        mass,
        Unit::Gram,
        format!(
            "{} of material at {} g/cm3 weigh {}, when the walls are printed solid.",
            Quantity::new(volume, Unit::Mm3),
            density.value,
            Quantity::new(mass, Unit::Gram)
        ),
        density.source.clone(),
    )
}

/// Mass in g of a volume in mm3 at a density in g/cm3.
fn mass_g(volume_mm3: f64, density_g_cm3: f64) -> f64 {
    volume_mm3 / 1000.0 * density_g_cm3
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::mesh::shapes;

    /// Exact values: 4 pi/3 (41^3 - 39^3) mm3 = 40.2208 cm3 for the shell of radius 40 and wall 2; 49.87 g of PLA.
    #[test]
    fn a_pla_shell_of_radius_40_and_wall_2_weighs_49_87_g() {
        let exact = 4.0 * std::f64::consts::PI / 3.0 * (41.0_f64.powi(3) - 39.0_f64.powi(3));
        assert!((exact / 1000.0 - 40.2208).abs() < 5e-5);
        assert!((mass_g(exact, 1.24) - 49.87).abs() < 0.005);
        // The mesh is inscribed: its volume differs by the chord error only.
        let mesh = shapes::sphere_shell(41.0, 39.0, 6);
        let f = finding(&Body::new(&mesh).unwrap(), &Profile::built_in("mex-pla").unwrap());
        assert!((f.value - 49.87).abs() < 0.02, "{}", f.value);
        assert!(f.message.starts_with("40.2 cm3 of material at 1.24 g/cm3 weigh 49.9 g"), "{}", f.message);
        assert!(f.limit.is_none() && f.source.contains("PLA 1.24 to 1.26"));
    }
}
