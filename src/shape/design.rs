//! Columns of the design: what each unknown does to a limb's harmonics.

use super::Observation;

/// Components of an observation: mean, then cosine and sine of m = 2, 3, 4.
pub const COMPONENTS: usize = 7;

/// Answer of every component to one unit of an unknown.
pub type Component = [f64; COMPONENTS];

/// A cosine term `amplitude cos m (theta - angle)` as components.
pub(super) fn about(m: usize, angle_rad: f64, amplitude: f64) -> Component {
    let mut out = [0.0; COMPONENTS];
    let phase = m as f64 * angle_rad;
    out[2 * m - 3] = amplitude * phase.cos();
    out[2 * m - 2] = amplitude * phase.sin();
    out
}

/// Sum of two columns.
pub(super) fn plus(a: Component, b: Component) -> Component {
    std::array::from_fn(|i| a[i] + b[i])
}

/// The mean radius.
pub(super) fn radius() -> Component {
    let mut out = [0.0; COMPONENTS];
    out[0] = 1.0;
    out
}

/// Columns of the Sun: radius, oblateness (equatorial minus polar radius) and `R c4`, per mas, for a
/// disk seen from heliographic latitude `b0_rad` with its north at detector angle `axis_rad`.
pub fn sun_columns(b0_rad: f64, axis_rad: f64) -> [Component; 3] {
    let c2 = b0_rad.cos().powi(2);
    let c4 = c2 * c2;
    // Fourier coefficients of P2 and P4 along the limb.
    let p2 = (0.75 * c2 - 0.5, 0.75 * c2);
    let p4 = (
        105.0 / 64.0 * c4 - 15.0 / 8.0 * c2 + 3.0 / 8.0,
        35.0 / 16.0 * c4 - 15.0 / 8.0 * c2,
        35.0 / 64.0 * c4,
    );
    // R c2 = -(2/3) oblateness - (5/12) R c4
    let by_oblateness = -2.0 / 3.0;
    let by_p4 = -5.0 / 12.0;
    let mut oblateness = about(2, axis_rad, by_oblateness * p2.1);
    oblateness[0] = by_oblateness * p2.0;
    let mut fourth = plus(
        about(2, axis_rad, p4.1 + by_p4 * p2.1),
        about(4, axis_rad, p4.2),
    );
    fourth[0] = p4.0 + by_p4 * p2.0;
    [radius(), oblateness, fourth]
}

/// A relative error of the refractivity.
pub(super) fn refractivity(o: &Observation) -> Component {
    let mut out = plus(
        about(2, o.zenith_rad, o.air.cos2_mas),
        plus(
            about(3, o.zenith_rad, o.air.cos3_mas),
            about(4, o.zenith_rad, o.air.cos4_mas),
        ),
    );
    out[0] = o.air.mean_mas;
    out
}

/// A residual fixed to the vertical, per mas of `cos 2`.
pub(super) fn vertical(o: &Observation) -> Component {
    about(2, o.zenith_rad, 1.0)
}

/// The air's own zenith displaced along the vertical, per arcminute.
pub(super) fn tilt_along(o: &Observation) -> Component {
    let mut out = about(2, o.zenith_rad, o.air.cos2_mas_arcmin);
    out[0] = o.air.mean_mas_arcmin;
    out
}

/// The limb's flattening by the air turned on the detector, per radian: `cos 2(theta - zeta - psi)`.
fn turned(o: &Observation) -> Component {
    about(
        2,
        o.zenith_rad + std::f64::consts::FRAC_PI_4,
        2.0 * o.air.cos2_mas,
    )
}

/// The air's own zenith displaced across the vertical, per arcminute.
pub(super) fn tilt_across(o: &Observation) -> Component {
    let factor = crate::units::ARCMIN_RAD / o.air.sin_zenith.max(1e-3);
    turned(o).map(|it| it * factor)
}

/// The camera's angle, per radian: it turns the correction for the air, not the Sun's own figure,
/// which is a thousandth of it.
pub(super) fn camera_angle(o: &Observation) -> Component {
    turned(o)
}

/// A relative error of the plate scale.
pub(super) fn scale(o: &Observation) -> Component {
    let mut out = about(2, o.zenith_rad, o.air.cos2_mas);
    out[0] = super::REFERENCE_RADIUS_MAS;
    out
}

/// A second of clock error.
pub(super) fn clock(o: &Observation) -> Component {
    tilt_along(o).map(|it| it * o.air.zenith_rate_arcmin_s)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Source: Legendre polynomials at the equator and the pole; `P2(0) = -1/2`, `P4(0) = 3/8`.
    #[test]
    fn a_unit_of_oblateness_is_equator_minus_pole() {
        for b0 in [0.0_f64, 0.1265] {
            let [_, o, q] = sun_columns(b0, 0.0);
            let at = |c: &Component, psi: f64| {
                c[0] + c[1] * (2.0 * psi).cos() + c[5] * (4.0 * psi).cos()
            };
            let half = std::f64::consts::FRAC_PI_2;
            if b0 == 0.0 {
                assert!((at(&o, half) - at(&o, 0.0) - 1.0).abs() < 1e-12);
                assert!((at(&q, half) - at(&q, 0.0)).abs() < 1e-12);
            } else {
                // cos^2 B0 of it is seen.
                assert!((at(&o, half) - at(&o, 0.0) - b0.cos().powi(2)).abs() < 1e-12);
            }
        }
    }

    #[test]
    fn the_limb_of_the_series_is_the_polynomials() {
        let (b0, psi) = (0.12_f64, 0.7_f64);
        let x = b0.cos() * psi.cos();
        let p2 = 1.5 * x * x - 0.5;
        let p4 = (35.0 * x.powi(4) - 30.0 * x * x + 3.0) / 8.0;
        let [_, o, q] = sun_columns(b0, 0.0);
        let at = |c: &Component| c[0] + c[1] * (2.0 * psi).cos() + c[5] * (4.0 * psi).cos();
        assert!((at(&o) + 2.0 / 3.0 * p2).abs() < 1e-12);
        assert!((at(&q) - (p4 - 5.0 / 12.0 * p2)).abs() < 1e-12);
    }
}
