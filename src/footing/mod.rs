//! One footing for values of the Sun's radius and oblateness from different instruments: 1 AU, radius
//! not diameter, B0 = 0, one definition of the limb, one blur, one wavelength.
//!
//! [`sheet::read`] takes published values from a table, [`carry()`] carries one of them step by step,
//! each step with its uncertainty. What several values share (the limb darkening, the thickness of
//! the Sun's edge, the height of the limb by wavelength) keeps its sign and its name, so that
//! [`Carried::covariance`] knows how they hang together.

mod carry;
pub mod epoch;
pub mod height;
pub mod limb;
pub mod sheet;

pub use carry::{Carried, Cause, Step, carry};

use crate::optics::OpticsError;
use epoch::Epoch;
use std::fmt;

/// Where the instrument stood.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Platform {
    /// On the ground, under the whole of the air.
    Ground,
    /// Under a balloon, above most of the air.
    Balloon,
    /// In space.
    Space,
}

impl Platform {
    /// All of them, in the order in which they are listed.
    pub const ALL: [Self; 3] = [Self::Ground, Self::Balloon, Self::Space];

    /// The word for it.
    pub fn word(self) -> &'static str {
        match self {
            Self::Ground => "ground",
            Self::Balloon => "balloon",
            Self::Space => "space",
        }
    }
}

/// What was measured.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Observable {
    /// The radius of the disk.
    Radius,
    /// Equatorial minus polar radius.
    Oblateness,
}

impl Observable {
    /// Both of them.
    pub const ALL: [Self; 2] = [Self::Oblateness, Self::Radius];

    /// The word for it.
    pub fn word(self) -> &'static str {
        match self {
            Self::Radius => "radius",
            Self::Oblateness => "oblateness",
        }
    }
}

/// Unit of a published value.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Unit {
    /// Milliarcseconds.
    Mas,
    /// Seconds of arc.
    Arcsec,
    /// Kilometres on the Sun.
    Km,
}

impl Unit {
    /// The unit as it is written.
    pub fn word(self) -> &'static str {
        match self {
            Self::Mas => "mas",
            Self::Arcsec => "arcsec",
            Self::Km => "km",
        }
    }
}

/// Which edge is called the limb.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Definition {
    /// The inflection point of the blurred limb.
    Inflection,
    /// Where the limb has half of the brightness 10 arcsec inside.
    HalfIntensity,
    /// The zero of the finite Fourier transform.
    Fourier {
        /// Half width of its window.
        window_arcsec: f64,
    },
    /// A fitted model of the blurred limb, which gives the edge before the blur.
    Model,
}

impl Definition {
    /// Windows of the finite Fourier transform that are allowed, arcsec.
    pub const WINDOWS_ARCSEC: (f64, f64) = (2.0, 25.0);

    /// Reads `inflection`, `half-intensity`, `fourier:WINDOW` or `model`.
    pub fn parse(text: &str) -> Option<Self> {
        match text {
            "inflection" => Some(Self::Inflection),
            "half-intensity" => Some(Self::HalfIntensity),
            "model" => Some(Self::Model),
            _ => {
                let window_arcsec: f64 = text.strip_prefix("fourier:")?.trim().parse().ok()?;
                let (lowest, highest) = Self::WINDOWS_ARCSEC;
                (lowest..=highest)
                    .contains(&window_arcsec)
                    .then_some(Self::Fourier { window_arcsec })
            }
        }
    }

    /// What [`parse`](Self::parse) takes.
    pub const ALLOWED: &str =
        "inflection, half-intensity, model, or fourier:WINDOW with a window of 2 to 25 arcsec";

    /// Whether a blur moves this edge.
    pub fn feels_blur(self) -> bool {
        self != Self::Model
    }
}

impl fmt::Display for Definition {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Inflection => f.write_str("inflection"),
            Self::HalfIntensity => f.write_str("half-intensity"),
            Self::Fourier { window_arcsec } => write!(f, "fourier:{window_arcsec}"),
            Self::Model => f.write_str("model"),
        }
    }
}

/// A blur as published: full width at half maximum of the whole point-spread function, pixel
/// included.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Width {
    /// Full width at half maximum, arcsec.
    pub fwhm_arcsec: f64,
    /// Standard uncertainty from the digits it was printed with, arcsec.
    pub sigma_arcsec: f64,
}

/// How the disk was seen.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Distance {
    /// The value was brought to 1 AU already.
    OneAu,
    /// The value is as seen at this distance, au.
    Seen(f64),
}

/// Which radius of an oblate disk a value is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum RadiusOf {
    /// A radius as published: the mean of the limb unless it is said otherwise.
    Limb,
    /// `R` of `R [1 + c2 P2 + c4 P4]`, as this program gives it.
    Harmonics,
}

/// A value as published, checked.
#[derive(Clone, Debug, PartialEq)]
pub struct Published {
    /// What it is called.
    pub label: String,
    /// Where the instrument stood.
    pub platform: Platform,
    /// When it was measured.
    pub epoch: Epoch,
    /// Wavelength, nm.
    pub wavelength_nm: f64,
    /// What was measured.
    pub observable: Observable,
    /// The value, in `unit`.
    pub value: f64,
    /// Unit of value and uncertainties.
    pub unit: Unit,
    /// Random standard uncertainty, in `unit`.
    pub sigma_random: f64,
    /// Systematic standard uncertainty, in `unit`.
    pub sigma_systematic: f64,
    /// Which edge was called the limb.
    pub definition: Definition,
    /// Blur of the image; none where the definition does not feel it or the value is an oblateness.
    pub blur: Option<Width>,
    /// Whether the value is that of a diameter.
    pub diameter: bool,
    /// Which radius it is.
    pub radius_of: RadiusOf,
    /// How the disk was seen.
    pub distance: Distance,
    /// Heliographic latitude of the disk's centre, 0 where it is taken out, none where unknown.
    pub b0_deg: Option<f64>,
    /// Values of one group share their systematic error.
    pub group: Option<String>,
    /// A remark.
    pub note: String,
}

/// Where values are carried to.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Footing {
    /// Definition of the limb.
    pub definition: Definition,
    /// Wavelength, nm.
    pub wavelength_nm: f64,
    /// Blur, full width at half maximum of the whole point-spread function, arcsec; without meaning
    /// for [`Definition::Model`].
    pub blur_fwhm_arcsec: f64,
    /// Scale of the tangential optical depth at the Sun's edge, km.
    pub edge_scale_km: f64,
    /// Its standard uncertainty, km.
    pub edge_scale_sigma_km: f64,
}

/// Why a value cannot be carried to a footing.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum FootingError {
    /// The limb's model has no answer.
    #[error("the limb's model: {0}")]
    Limb(#[from] OpticsError),
    /// A definition that feels the blur has none.
    #[error(
        "the definition {definition} moves with the blur, and no blur is given; give blur_fwhm_arcsec, {} to {} arcsec",
        limb::WIDTHS_ARCSEC.0,
        limb::WIDTHS_ARCSEC.1
    )]
    NoBlur {
        /// The definition.
        definition: Definition,
    },
    /// The blur is outside the range of the limb's model.
    #[error(
        "the blur is {found_arcsec} arcsec; allowed is {} to {} arcsec, the full width of the whole point-spread function, pixel included",
        limb::WIDTHS_ARCSEC.0,
        limb::WIDTHS_ARCSEC.1
    )]
    Blur {
        /// Width found.
        found_arcsec: f64,
    },
    /// A length on the Sun does not depend on where it was seen from.
    #[error(
        "a value in km is a length on the Sun and cannot be \"as seen\" at {found_au} AU; write 1 AU as its distance"
    )]
    KmAsSeen {
        /// Distance found.
        found_au: f64,
    },
}
