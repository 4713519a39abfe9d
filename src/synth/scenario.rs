//! What a made session is like: everything that is true of it, and how well the observer knows it.
//!
//! A scenario is a TOML file. What it leaves out is taken from the demonstration,
//! `demo-data/demo.toml`; a list of its own (`[[layer]]`, `[[sequence]]`, `[[distortion]]`) replaces
//! the demonstration's list as a whole.

use std::sync::LazyLock;

use serde::{Deserialize, Serialize};
use toml::{Table, Value};

use super::SynthError;

/// The demonstration's scenario: the file itself.
const DEMO: &str = include_str!("../../demo-data/demo.toml");

/// A session to be made.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Scenario {
    /// Start of the session, UTC.
    pub start_utc: String,
    /// What carries the camera.
    pub mount: MountKind,
    /// Diameter of the entrance pupil.
    pub aperture_m: f64,
    /// Diameter of the central obstruction, as a fraction of the aperture's.
    pub central_obstruction: f64,
    /// Wavelength in vacuum; the light is of this one wavelength.
    pub wavelength_nm: f64,
    /// Full width of the filter: told to the observer, not simulated.
    pub width_nm: f64,
    /// Exposure of a frame.
    pub exposure_s: f64,
    /// Side of the square detector.
    pub size_px: usize,
    /// True scale at the centre of the flat detector, of the direction as it arrives.
    pub scale_arcsec_px: f64,
    /// Relative standard deviation of the nominal scale's error.
    pub scale_sigma_rel: f64,
    /// True angle of the camera, as `camera.angle_deg` of a session file.
    pub camera_angle_deg: f64,
    /// Standard deviation of the nominal angle's error.
    pub angle_sigma_deg: f64,
    /// Electrons for a count.
    pub gain_e_adu: f64,
    /// Read noise, rms.
    pub read_noise_e: f64,
    /// Electrons at the disk's centre in a pixel of mean response.
    pub peak_e: f64,
    /// Largest count of the converter.
    pub saturation_adu: u16,
    /// Mean dark level, bias included.
    pub dark_adu: f64,
    /// Number of pixels with a dark level of their own.
    pub hot_pixels: usize,
    /// Number of shadows of dust.
    pub dust_spots: usize,
    /// Fraction of the light lost in the corners.
    pub vignetting: f64,
    /// Relative scatter of the pixels' response.
    pub pixel_response_sigma_rel: f64,
    /// Scattered light at the disk's centre, in units of the disk's centre.
    pub aureole_rel: f64,
    /// Scatter of the pointing from frame to frame, each axis.
    pub pointing_sigma_arcsec: f64,
    /// Whether the light comes in photons.
    pub photon_noise: bool,
    /// Whether the files are tile-compressed, without loss.
    pub compressed: bool,
    /// Scale height of the Sun's edge.
    pub edge_scale_km: f64,
    /// Standard deviation of the logarithm of r0.
    pub r0_flicker_rel: f64,
    /// Time scale of that wander.
    pub r0_flicker_tau_s: f64,
    /// Wander of the air's own zenith, each axis.
    pub layer_tilt_sigma_arcmin: f64,
    /// Time scale of that wander.
    pub layer_tilt_tau_min: f64,
    /// The station.
    pub site: Site,
    /// The Sun's figure.
    pub shape: Shape,
    /// The air at the station.
    pub weather: Weather,
    /// Distortion fixed to the detector.
    #[serde(default)]
    pub distortion: Vec<Distortion>,
    /// Layers of turbulence; none for quiet air.
    #[serde(rename = "layer", default)]
    pub layers: Vec<Layer>,
    /// The sequences, in order of time.
    #[serde(rename = "sequence")]
    pub sequences: Vec<SequencePlan>,
}

/// What carries the camera.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum MountKind {
    /// The field stands still.
    Equatorial,
    /// Two mirrors; the field stands still.
    Coelostat,
    /// The field turns with the vertical.
    Altazimuth,
    /// Fixed to the ground; the field turns with the vertical.
    Fixed,
}

/// Where the telescope stands.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Site {
    /// Name of the station.
    pub name: String,
    /// Geodetic latitude, north positive.
    pub latitude_deg: f64,
    /// Longitude, east positive.
    pub longitude_deg: f64,
    /// Height above the ellipsoid.
    pub height_m: f64,
}

/// `R [1 + c2 P2 + c4 P4]` at 1 AU.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Shape {
    /// `R`, of the unblurred limb's inflection.
    pub radius_arcsec: f64,
    /// Equatorial minus polar radius, `R (-3/2 c2 - 5/8 c4)`.
    pub oblateness_mas: f64,
    /// `R c4`.
    pub p4_mas: f64,
}

/// The true air at the station, and how well the log knows it.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Weather {
    /// Pressure at the station at the start.
    pub pressure_hpa: f64,
    /// Temperature at the start.
    pub temperature_c: f64,
    /// Relative humidity, 0 to 1.
    pub relative_humidity: f64,
    /// Change of the pressure.
    pub pressure_rate_hpa_h: f64,
    /// Change of the temperature.
    pub temperature_rate_c_h: f64,
    /// Standard deviation of the log's constant error.
    pub pressure_sigma_hpa: f64,
    /// The same of the temperature.
    pub temperature_sigma_c: f64,
    /// The same of the humidity.
    pub humidity_sigma: f64,
}

/// `A cos m (theta - phi)`, apparent minus true radius, `theta` from the detector's +x towards +y.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Distortion {
    /// Order, 2 to 8.
    pub m: u8,
    /// `A`.
    pub amplitude_mas: f64,
    /// `phi`.
    pub angle_deg: f64,
}

/// A layer of frozen turbulence.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Layer {
    /// Height above the telescope.
    pub height_m: f64,
    /// Fried's parameter of this layer alone, 500 nm, towards the zenith.
    pub r0_m: f64,
    /// Outer scale.
    pub outer_scale_m: f64,
    /// Wind; its direction is drawn.
    pub wind_m_s: f64,
}

/// How a sequence came about.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum SequenceKind {
    /// Short exposures, tracking.
    Burst,
    /// The same with the instrument turned.
    Roll,
    /// Short exposures, tracking off: the telescope stands still where the Sun is in mid drift.
    Drift,
    /// Transits over a line detector that stands still: the middle column of the camera along +y.
    Scan,
}

impl SequenceKind {
    /// The word of scenario and session files.
    pub(super) fn word(self) -> &'static str {
        match self {
            Self::Burst => "burst",
            Self::Roll => "roll",
            Self::Drift => "drift",
            Self::Scan => "scan",
        }
    }
}

/// A sequence of frames.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct SequencePlan {
    /// How it came about.
    pub kind: SequenceKind,
    /// Number of frames, of a scan: of transits.
    pub frames: usize,
    /// From start to start of an exposure, of a scan: from the first line of a transit to the next one's.
    pub step_s: f64,
    /// First exposure, after the session's start.
    pub at_min: f64,
    /// Added to the camera's angle.
    pub roll_deg: f64,
    /// Lines of a transit.
    #[serde(default)]
    pub lines: usize,
    /// From line to line, each exposed for the whole of it.
    #[serde(default)]
    pub line_s: f64,
}

impl SequencePlan {
    /// Start of a frame's exposure, after the session's start.
    pub(super) fn start_s(&self, frame: usize) -> f64 {
        60.0 * self.at_min + self.step_s * frame as f64
    }

    /// Seconds that one frame takes beyond its exposure: the lines of a transit.
    pub(super) fn span_s(&self) -> f64 {
        self.line_s * self.lines as f64
    }
}

static DEMO_SCENARIO: LazyLock<Scenario> =
    LazyLock::new(|| match toml::from_str::<Scenario>(DEMO) {
        Ok(it) => it,
        // The text is part of the program, and a test of this module reads it.
        Err(error) => unreachable!("demo-data/demo.toml: {error}"),
    });

impl Default for Scenario {
    /// The demonstration.
    fn default() -> Self {
        DEMO_SCENARIO.clone()
    }
}

/// Reads a scenario; what it leaves out is the demonstration's.
///
/// # Errors
///
/// [`SynthError::Scenario`] for text that is not TOML, a key that does not exist or a value of
/// another type; otherwise what [`make`](super::make) would refuse before it starts.
pub fn read_scenario(text: &str) -> Result<Scenario, SynthError> {
    let refuse = |error: toml::de::Error| SynthError::Scenario {
        reason: error.to_string(),
    };
    let own: Table = toml::from_str(text).map_err(refuse)?;
    let mut whole: Table = toml::from_str(DEMO).map_err(refuse)?;
    lay_over(&mut whole, own);
    let scenario: Scenario = whole.try_into().map_err(refuse)?;
    super::check::check(&scenario)?;
    Ok(scenario)
}

/// Tables are merged key by key; anything else is replaced.
fn lay_over(under: &mut Table, over: Table) {
    for (key, value) in over {
        match (under.get_mut(&key), value) {
            (Some(Value::Table(below)), Value::Table(above)) => lay_over(below, above),
            (_, value) => {
                under.insert(key, value);
            }
        }
    }
}
