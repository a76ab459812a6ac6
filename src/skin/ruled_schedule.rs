//! The schedule of the family `ruled`: how its parameters run with time.

/// Lowest order of the family.
pub(super) const MIN_ORDER: u32 = 2;
/// Highest order of the family.
pub(super) const MAX_ORDER: u32 = 5;

/// Coefficients of one order in powers of v = s^2; see [`Schedule::at`].
struct Schedule {
    tempo: f64,
    t: [f64; 3],
    q: [f64; 3],
    mu: [f64; 3],
    zc: [f64; 4],
    psi: [f64; 4],
    l: [f64; 4],
    xi: [f64; 4],
    b: [f64; 4],
    eps: [f64; 4],
    nu: [f64; 4],
    om: [f64; 4],
}

/// The parameters of one stage, by the names of the formula.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Parameters {
    /// Radius of the curve the ruled cylinder's axis runs on; odd about tau = 1/2.
    pub t: f64,
    /// Slope of the cylinder's height along the rulings' feet; odd.
    pub q: f64,
    /// Strength of the term that separates the two poles; odd.
    pub mu: f64,
    /// Height scale of the cylinder, > 0.
    pub l: f64,
    /// Closing of the cylinder's ends, > 0.
    pub xi: f64,
    /// Scale of the stereographic image, > 0.
    pub b: f64,
    /// Height of the centre that the ball map leaves in place.
    pub zc: f64,
    /// Softness of the ball map; 0 at both round ends.
    pub e: f64,
    /// Width of the separation term, > 0.
    pub nu: f64,
    /// Spread of the rulings over latitude, > 0; does not change the shape.
    pub om: f64,
    /// Turn about z, radians.
    pub psi: f64,
}

/// The parameters of order `order` (clamped into 2..=5) at `tau` (clamped into 0..=1; NaN gives NaN).
///
/// # Source
/// Found for this project by optimisation; the numbers are exactly as rounded here, and every figure
/// published with the program belongs to them.
pub(super) fn parameters(order: u32, tau: f64) -> Parameters {
    let index = (order.clamp(MIN_ORDER, MAX_ORDER) - MIN_ORDER) as usize;
    SCHEDULES[index].at(tau.clamp(0.0, 1.0))
}

impl Schedule {
    fn at(&self, tau: f64) -> Parameters {
        let linear = 1.0 - 2.0 * tau;
        let u = linear * linear;
        let s = linear * (self.tempo + (1.0 - self.tempo) * (2.0 * u - u * u));
        let v = s * s;
        let odd = |c: &[f64; 3]| s * (c[0] + v * (c[1] + v * c[2]));
        let even = |c: &[f64; 4]| c[0] + v * (c[1] + v * (c[2] + v * c[3]));
        let positive = |c: &[f64; 4]| even(c).exp();
        Parameters {
            t: odd(&self.t),
            q: odd(&self.q),
            mu: odd(&self.mu),
            l: positive(&self.l),
            xi: positive(&self.xi),
            b: positive(&self.b),
            zc: even(&self.zc),
            e: positive(&self.eps) * (1.0 - v).max(0.0),
            nu: positive(&self.nu),
            om: positive(&self.om),
            psi: even(&self.psi),
        }
    }
}

const SCHEDULES: [Schedule; 4] = [
    Schedule {
        tempo: 1.00,
        t: [1.04162, 4.03134, -1.52341],
        q: [1.71266, 3.04046, -1.28950],
        mu: [1.89375, -0.25465, 0.32712],
        zc: [0.37161, 4.55133, -14.29200, 8.55261],
        psi: [0.00000, -1.11752, -0.62214, 0.79981],
        l: [0.66223, 0.24230, -1.85619, 0.86956],
        xi: [0.30757, 3.73912, -5.94663, 3.26993],
        b: [-0.70868, -0.78112, 1.09493, -0.33844],
        eps: [0.26497, 1.34443, 1.76519, -1.44129],
        nu: [1.13166, 1.46020, -2.63041, 1.76511],
        om: [0.07608, 1.34881, -1.48584, 0.78674],
    },
    Schedule {
        tempo: 1.00,
        t: [1.02480, 7.10906, -2.74269],
        q: [2.30422, 9.11772, -3.70297],
        mu: [1.84650, 0.64131, -0.71556],
        zc: [0.60245, 4.04878, -14.61740, 9.44310],
        psi: [0.00000, -2.13910, 1.24812, -0.19826],
        l: [0.16815, 2.67056, -5.62285, 2.85554],
        xi: [0.36490, 4.53005, -7.11857, 3.87881],
        b: [-0.78542, 1.20901, -2.89391, 2.11843],
        eps: [0.55340, 0.74655, 1.98219, -1.68058],
        nu: [1.98522, -2.01130, 4.41428, -2.02859],
        om: [0.87516, 0.57949, -0.39580, 0.22083],
    },
    Schedule {
        tempo: 0.85,
        t: [1.47971, 11.22851, -4.79796],
        q: [4.66381, 17.36037, -7.63142],
        mu: [2.19932, -0.23188, -0.72102],
        zc: [0.18847, 6.26789, -17.91108, 10.90465],
        psi: [0.00000, -2.96735, 5.33858, -4.34021],
        l: [0.31140, 0.71464, -1.89173, 0.76731],
        xi: [0.33843, 7.37131, -13.30141, 7.47987],
        b: [-0.44453, -2.50717, 4.26899, -1.40873],
        eps: [0.48294, 0.08732, 4.55064, -3.59192],
        nu: [1.72404, -0.30702, 3.56433, -2.09958],
        om: [1.26896, 0.36774, 0.25670, -0.15855],
    },
    Schedule {
        tempo: 0.50,
        t: [6.74076, 0.67206, -0.33132],
        q: [18.80646, 0.73527, -0.36234],
        mu: [2.43048, -1.06651, 0.30518],
        zc: [0.69183, 0.88024, -6.17405, 4.17315],
        psi: [0.00000, -1.95685, -0.58463, 0.22146],
        l: [-0.29304, 3.17141, -6.03638, 3.39339],
        xi: [1.11890, 2.49559, -4.41389, 2.47382],
        b: [-1.55689, 3.08027, -0.94567, -0.20661],
        eps: [-0.08698, 5.13618, -7.97803, 4.38210],
        nu: [1.54048, 2.20466, -1.92945, 0.82466],
        om: [1.57028, 0.12230, -0.09604, 0.05088],
    },
];

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn time_reversal_flips_the_odd_parameters_only() {
        for order in 2..=5 {
            let (p, r) = (parameters(order, 0.3125), parameters(order, 0.6875));
            assert_eq!((p.t, p.q, p.mu), (-r.t, -r.q, -r.mu));
            assert_eq!(Parameters { t: r.t, q: r.q, mu: r.mu, ..p }, r);
        }
    }

    #[test]
    fn both_ends_are_exactly_round() {
        for order in 2..=5 {
            assert_eq!((parameters(order, 0.0).e, parameters(order, 1.0).e), (0.0, 0.0));
            assert!(parameters(order, 0.5).e > 0.0);
        }
    }
}
