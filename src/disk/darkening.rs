//! Limb darkening of the solar continuum, as a polynomial in the cosine of the heliocentric angle.
//!
//! # Model
//!
//! ```text
//! I(mu) / I(1) = P5(mu) = sum_{i=0..5} A_i mu^i
//!
//! A0 = a00 + a01 / l,   A1 = a10 + a11 / l + a15 / l^5,   A_i = a_i0 + a_i5 / l^5   (i = 2..5)
//! a10 = 1 - (a00 + a20 + a30 + a40 + a50),   a11 = -a01,   a15 = -(a25 + a35 + a45 + a55)
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `mu` | cosine of the heliocentric angle, 1 at disk centre, 0 at the edge | - |
//! | `l` | wavelength | um |
//!
//! The second line is the analytic form of 2005, the three sums make `P5(1) = 1` exactly. The table
//! of 1994 has rows at 29 usable wavelengths; between two of them the coefficients, and with them the
//! profile, are interpolated linearly.
//!
//! # Valid for
//!
//! Windows of the continuum, 300..1100 nm; a filter on a strong line sees another Sun. The analytic
//! form is undefined at 372.98..385 nm (Balmer limit): an error. The row of 1994 at 365.875 nm does
//! not add up to one and is left out, and 349.947..374.086 nm and 374.086..390.915 nm are gaps
//! between the rows. The fits were made for `mu >= 0.12`, that is, to 7 arcsec from the edge;
//! everything nearer is extrapolation.
//!
//! # Accuracy
//!
//! The two laws agree to 0.0007..0.006 rms for `mu >= 0.12`; at the extreme limb they differ by up to
//! 8 mas in the inflection of a blurred limb. The difference belongs in the budget of a radius.
//!
//! # Source
//!
//! Neckel & Labs 1994, Solar Phys. 153, 91; Neckel 2005, Solar Phys. 229, 13, both from public
//! transcriptions. One transcription of the latter has a55 = +0.003347: only the minus sign agrees
//! with the table of 1994.

use super::DiskError;
use super::neckel_labs_1994::{COEFFICIENTS, GAPS_NM};

/// Which published limb darkening.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum DarkeningLaw {
    /// Analytic in the wavelength.
    Neckel2005,
    /// Table of continuum windows, interpolated.
    NeckelLabs1994,
}

/// Coefficients of the analytic form in one range of wavelengths.
struct Range {
    lowest_nm: f64,
    highest_nm: f64,
    a00: f64,
    a01: f64,
    /// `a20, a30, a40, a50`.
    constant: [f64; 4],
    /// `a25, a35, a45, a55`.
    fifth: [f64; 4],
}

/// Neckel 2005, digits as printed; the coefficients fixed by the normalisation are computed.
const NECKEL_2005: [Range; 3] = [
    Range {
        lowest_nm: 300.0,
        highest_nm: 372.98,
        a00: 0.35601,
        a01: -0.085217,
        constant: [-0.67237, 0.18696, 0.00038, 0.01373],
        fifth: [0.003589, -0.002415, 0.000897, -0.000200],
    },
    Range {
        lowest_nm: 385.0,
        highest_nm: 422.57,
        a00: 0.09900,
        a01: 0.010643,
        constant: [-2.80511, 3.32780, -2.17878, 0.58825],
        fifth: [0.024873, -0.029317, 0.018273, -0.004663],
    },
    Range {
        lowest_nm: 422.57,
        highest_nm: 1100.0,
        a00: 0.75267,
        a01: -0.265577,
        constant: [-1.89287, 2.42234, -1.71150, 0.49062],
        fifth: [0.012582, -0.017117, 0.011977, -0.003347],
    },
];

/// Sum of the coefficients may differ from one by this much (printed digits: 3e-5).
const SUM_TOLERANCE: f64 = 1e-3;

/// Limb darkening at one wavelength: brightness in units of disk centre.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Darkening {
    coefficients: [f64; 6],
}

impl Darkening {
    /// The limb darkening of a published law at a wavelength in air.
    ///
    /// # Errors
    ///
    /// When the wavelength is outside the law or in one of its gaps.
    pub fn new(law: DarkeningLaw, wavelength_nm: f64) -> Result<Self, DiskError> {
        match law {
            DarkeningLaw::Neckel2005 => neckel_2005(wavelength_nm),
            DarkeningLaw::NeckelLabs1994 => neckel_labs_1994(wavelength_nm),
        }
    }

    /// The limb darkening of coefficients `A0..A5` from elsewhere.
    ///
    /// # Errors
    ///
    /// [`DiskError::Coefficients`] unless they add up to one and brighten away from the limb.
    pub fn from_coefficients(coefficients: [f64; 6]) -> Result<Self, DiskError> {
        let sum: f64 = coefficients.iter().sum();
        let slope = coefficients[1];
        if (sum - 1.0).abs() <= SUM_TOLERANCE && slope >= 0.0 {
            Ok(Self { coefficients })
        } else {
            Err(DiskError::Coefficients {
                sum,
                slope,
                tolerance: SUM_TOLERANCE,
            })
        }
    }

    /// Brightness at `mu`, in units of disk centre.
    pub fn at(&self, mu: f64) -> f64 {
        self.coefficients
            .iter()
            .rev()
            .fold(0.0, |sum, a| sum * mu + a)
    }

    /// The coefficients `A0..A5`.
    pub fn coefficients(&self) -> [f64; 6] {
        self.coefficients
    }

    /// Mean brightness of the disk in units of its centre, `sum 2 A_i / (i + 2)`.
    pub fn disk_mean(&self) -> f64 {
        self.coefficients
            .iter()
            .zip(2_u8..)
            .map(|(a, n)| 2.0 * a / f64::from(n))
            .sum()
    }
}

fn neckel_2005(wavelength_nm: f64) -> Result<Darkening, DiskError> {
    let [first, middle, last] = &NECKEL_2005;
    if !(first.lowest_nm..=last.highest_nm).contains(&wavelength_nm) {
        return Err(DiskError::WavelengthOutside {
            found_nm: wavelength_nm,
            lowest_nm: first.lowest_nm,
            highest_nm: last.highest_nm,
        });
    }
    let range = NECKEL_2005
        .iter()
        .rev()
        .find(|it| (it.lowest_nm..=it.highest_nm).contains(&wavelength_nm))
        .ok_or(DiskError::WavelengthInGap {
            found_nm: wavelength_nm,
            gap_from_nm: first.highest_nm,
            gap_to_nm: middle.lowest_nm,
        })?;
    let l = wavelength_nm / 1000.0;
    let l5 = l.powi(5);
    let a10 = 1.0 - range.a00 - range.constant.iter().sum::<f64>();
    let a15 = -range.fifth.iter().sum::<f64>();
    let mut coefficients = [0.0; 6];
    coefficients[0] = range.a00 + range.a01 / l;
    coefficients[1] = a10 - range.a01 / l + a15 / l5;
    for (a, (a0, a5)) in coefficients[2..]
        .iter_mut()
        .zip(range.constant.iter().zip(range.fifth))
    {
        *a = a0 + a5 / l5;
    }
    Ok(Darkening { coefficients })
}

fn neckel_labs_1994(wavelength_nm: f64) -> Result<Darkening, DiskError> {
    let (lowest_nm, highest_nm) = (COEFFICIENTS[0].0, COEFFICIENTS[COEFFICIENTS.len() - 1].0);
    if !(lowest_nm..=highest_nm).contains(&wavelength_nm) {
        return Err(DiskError::WavelengthOutside {
            found_nm: wavelength_nm,
            lowest_nm,
            highest_nm,
        });
    }
    if let Some(&(gap_from_nm, gap_to_nm)) = GAPS_NM
        .iter()
        .find(|gap| wavelength_nm > gap.0 && wavelength_nm < gap.1)
    {
        return Err(DiskError::WavelengthInGap {
            found_nm: wavelength_nm,
            gap_from_nm,
            gap_to_nm,
        });
    }
    let next = COEFFICIENTS
        .partition_point(|row| row.0 < wavelength_nm)
        .clamp(1, COEFFICIENTS.len() - 1);
    let (below, above) = (&COEFFICIENTS[next - 1], &COEFFICIENTS[next]);
    let share = (wavelength_nm - below.0) / (above.0 - below.0);
    let mut coefficients = [0.0; 6];
    for (a, (low, high)) in coefficients.iter_mut().zip(below.1.iter().zip(above.1)) {
        *a = (1.0 - share) * low + share * high;
    }
    Ok(Darkening { coefficients })
}
