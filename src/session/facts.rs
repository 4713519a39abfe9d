//! A session as it stands after every check: plain values, each with its unit in its name.

use std::collections::BTreeMap;
use std::path::PathBuf;

use super::environment::Environment;
use super::filter_curve::FilterCurve;
use super::sounding::Sounding;
use super::weather::{SurfaceAir, WeatherAt, WeatherError, WeatherLog, WeatherNote};
use crate::air::{RefractivityFormula, VapourConvention};
use crate::sky::{Mount, Parity, Utc};

/// A checked session.
#[derive(Clone, Debug, PartialEq)]
pub struct Session {
    /// The session file.
    pub path: PathBuf,
    /// The place.
    pub site: Site,
    /// The telescope.
    pub telescope: Telescope,
    /// The band of the first sequence, or the session's where there is no sequence.
    pub filter: Filter,
    /// The camera of the first sequence with frames, or the session's where there is no sequence.
    pub camera: Camera,
    /// What is known of the optics by other means.
    pub instrument: Instrument,
    /// Dark and flat of the session.
    pub calibration: Calibration,
    /// The air at the station.
    pub weather: Weather,
    /// How the air bends light.
    pub refractivity: Refractivity,
    /// What the times in the headers mean.
    pub time: Time,
    /// How the limb is measured.
    pub limb: LimbSettings,
    /// Law of the surface's rotation with which the figure is compared.
    pub rotation: RotationLaw,
    /// FITS keywords of a station that names them otherwise, by the fact they give: `date`,
    /// `exposure_s`, and the names of keys such as `gain_e_adu`.
    pub headers: BTreeMap<String, String>,
    /// A picture of the Sun that says which arcs of the limb to leave out.
    pub mask: Option<MaskImage>,
    /// Readings against which the instrument's terms may drift.
    pub environment: Option<Environment>,
    /// The sequences, in the order of the file.
    pub sequences: Vec<Sequence>,
    /// Every file that was read for this, the session file first; frames are not among them.
    pub sources: Vec<PathBuf>,
    /// Keys that are not in the file and were filled with their defaults.
    pub assumed: Vec<String>,
    /// Keys that are not in the file and were found in the header of a frame.
    pub from_headers: Vec<String>,
}

/// A picture of the Sun that says which arcs of the limb to leave out.
#[derive(Clone, Debug, PartialEq)]
pub struct MaskImage {
    /// FITS image of the whole disk.
    pub image: PathBuf,
    /// Centre of its disk, 0-based pixel centres.
    pub centre_px: (f64, f64),
    /// Radius of its disk, px.
    pub radius_px: f64,
    /// Position angle of its +y from solar north through east, degrees.
    pub angle_deg: f64,
    /// Whether it is mirrored.
    pub parity: Parity,
    /// An arc brighter than this, in units of the limb's median, is left out.
    pub brighter_than: Option<f64>,
    /// An arc darker than this is left out.
    pub darker_than: Option<f64>,
}

impl Session {
    /// Whether any sequence holds frames; a session of limbs measured elsewhere has neither camera
    /// nor telescope of its own, and where the file is silent the two hold neutral values (scale,
    /// gain and aperture 1, angle 0).
    pub fn has_frames(&self) -> bool {
        self.sequences.is_empty() || self.sequences.iter().any(|it| it.kind != Kind::Limbs)
    }
}

/// The place of the telescope, geodetic, WGS84.
#[derive(Clone, Debug, PartialEq)]
pub struct Site {
    /// Name of the station.
    pub name: String,
    /// Latitude, north positive.
    pub latitude_deg: f64,
    /// Longitude, east positive.
    pub longitude_deg: f64,
    /// Height above the ellipsoid.
    pub height_m: f64,
    /// Deflection of the vertical towards north: astronomical minus geodetic latitude.
    pub deflection_north_arcsec: f64,
    /// Deflection of the vertical towards east: the difference of longitudes times cos latitude.
    pub deflection_east_arcsec: f64,
}

/// The telescope.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Telescope {
    /// Diameter of the entrance pupil.
    pub aperture_m: f64,
    /// Linear central obstruction, fraction of the aperture.
    pub central_obstruction: f64,
    /// How the field lies.
    pub mount: Mount,
}

/// A band.
#[derive(Clone, Debug, PartialEq)]
pub struct Filter {
    /// Centre; of a curve the mean weighted by transmission.
    pub centre_nm: f64,
    /// Full width at half maximum; of a curve between its outermost crossings of half maximum.
    pub width_nm: f64,
    /// The transmission where it was measured.
    pub curve: Option<FilterCurve>,
}

/// What the scale of the camera is of.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ScaleOf {
    /// Of the direction as it arrives in the air at the telescope.
    Apparent,
    /// Found on stars through the air near the zenith, the contraction by 1/n already in it.
    Sky,
}

/// How angles on the sky become pixels.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Projection {
    /// A flat detector behind a lens: the tangent of the angle.
    Tan,
    /// The angle itself.
    Arc,
}

/// A camera as it stood in one sequence.
#[derive(Clone, Debug, PartialEq)]
pub struct Camera {
    /// Nominal scale on the detector.
    pub scale_arcsec_px: f64,
    /// Relative standard uncertainty of it.
    pub scale_sigma_rel: f64,
    /// What the scale is of.
    pub scale_of: ScaleOf,
    /// Position angle of +y, north through east; from the zenith for mounts fixed to the vertical.
    pub angle_deg: f64,
    /// Standard uncertainty of it.
    pub angle_sigma_deg: f64,
    /// How angles become pixels.
    pub projection: Projection,
    /// Which way +x lies.
    pub parity: Parity,
    /// Electrons for a count.
    pub gain_e_adu: f64,
    /// Read noise, rms.
    pub read_noise_e: f64,
    /// Counts at and above which a pixel is saturated, where it is known.
    pub saturation_adu: Option<f64>,
    /// Time from the first row's exposure to the last row's, for a rolling shutter.
    pub readout_s: Option<f64>,
    /// FITS image, zero where a pixel is good.
    pub bad_pixels: Option<PathBuf>,
}

/// What is known of the optics by other means.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Instrument {
    /// Free of limb distortion of m = 2, 3, 4 to this, each.
    pub distortion_sigma_mas: Option<f64>,
    /// Drift of each coefficient of the distortion, linear in time, about zero, where it is allowed for.
    pub drift_sigma_mas_per_hour: Option<f64>,
}

/// Dark and flat frames.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Calibration {
    /// Dark frames; empty where none are used.
    pub dark: Vec<PathBuf>,
    /// Flat frames; empty where none are used.
    pub flat: Vec<PathBuf>,
}

/// The air at the station, and how well it is known.
#[derive(Clone, Debug, PartialEq)]
pub struct Weather {
    /// Where the readings come from.
    pub source: WeatherSource,
    /// A sounding of the air above.
    pub profile: Option<Sounding>,
    /// Systematic uncertainty of the pressure, common to the session.
    pub pressure_sigma_hpa: f64,
    /// Systematic uncertainty of the temperature.
    pub temperature_sigma_c: f64,
    /// Systematic uncertainty of the relative humidity, as a fraction.
    pub humidity_sigma: f64,
}

/// Where the readings of the weather come from.
#[derive(Clone, Debug, PartialEq)]
#[expect(clippy::large_enum_variant, reason = "a session has one of it")]
pub enum WeatherSource {
    /// There is no air.
    None,
    /// The same all through the session.
    Constant(SurfaceAir),
    /// A log.
    Log(WeatherLog),
}

impl Weather {
    /// The air at the station at a time: none above the air, and where the log had to be stretched
    /// a note that belongs among the warnings.
    ///
    /// # Errors
    ///
    /// [`WeatherError`] where the log does not cover the time.
    pub fn at(&self, time: Utc) -> Result<Option<(SurfaceAir, Option<WeatherNote>)>, WeatherError> {
        match &self.source {
            WeatherSource::None => Ok(None),
            WeatherSource::Constant(air) => Ok(Some((*air, None))),
            WeatherSource::Log(log) => {
                let WeatherAt { air, note } = log.at(time)?;
                Ok(Some((air, note)))
            }
        }
    }
}

/// How the air bends light.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Refractivity {
    /// Published formula.
    pub formula: RefractivityFormula,
    /// What relative humidity is relative to.
    pub vapour: VapourConvention,
    /// Carbon dioxide by volume.
    pub co2_ppm: f64,
    /// Fall of temperature with height in the troposphere.
    pub lapse_k_per_km: f64,
    /// Height of the tropopause above sea level.
    pub tropopause_m: f64,
    /// Uncertainty of the effective wavelength.
    pub wavelength_sigma_nm: f64,
    /// Wander of the air's own zenith, each axis.
    pub layer_tilt_sigma_arcmin: f64,
    /// Time scale of that wander.
    pub layer_tilt_tau_min: f64,
}

/// Which moment of an exposure a time means.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Moment {
    /// Its start.
    Start,
    /// Its middle.
    Middle,
    /// Its end.
    End,
}

/// What the times in the headers mean.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Time {
    /// Moment that DATE-OBS gives.
    pub date_obs: Moment,
    /// Camera's clock minus UTC: to be taken from each time.
    pub clock_offset_s: f64,
    /// Standard uncertainty of that offset.
    pub clock_sigma_s: f64,
    /// Standard uncertainty of the clock's rate, parts in a million.
    pub clock_rate_sigma_ppm: f64,
    /// UT1 minus UTC.
    pub ut1_minus_utc_s: f64,
}

/// How the limb is measured.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct LimbSettings {
    /// Scale height of the Sun's edge.
    pub edge_scale_km: f64,
    /// Standard uncertainty of it.
    pub edge_scale_sigma_km: f64,
    /// Sectors around the limb.
    pub sectors: usize,
    /// Width of the annulus inside the limb, where the file gives it.
    pub window_inside_arcsec: Option<f64>,
    /// Width of the annulus outside the limb, where the file gives it.
    pub window_outside_arcsec: Option<f64>,
}

/// A published law of the surface's rotation.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum RotationLaw {
    /// The middle of the range of the three laws that depend on latitude.
    #[default]
    Middle,
    /// Snodgrass & Ulrich (1990).
    SnodgrassUlrich1990,
    /// Snodgrass (1983).
    Snodgrass1983,
    /// Howard & Harvey (1970).
    HowardHarvey1970,
    /// The same angular velocity at every latitude, a turn in 25.38 days.
    Uniform,
}

impl RotationLaw {
    /// Every choice.
    pub const ALL: [Self; 5] = [
        Self::Middle,
        Self::SnodgrassUlrich1990,
        Self::Snodgrass1983,
        Self::HowardHarvey1970,
        Self::Uniform,
    ];

    /// The name used in files and on the command line.
    pub const fn name(self) -> &'static str {
        match self {
            Self::Middle => "middle",
            Self::SnodgrassUlrich1990 => "snodgrass-ulrich-1990",
            Self::Snodgrass1983 => "snodgrass-1983",
            Self::HowardHarvey1970 => "howard-harvey-1970",
            Self::Uniform => "uniform",
        }
    }
}

/// How the frames of a sequence came about.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// Short exposures, tracking.
    Burst,
    /// The same with the instrument turned.
    Roll,
    /// Tracking off, the whole disk in the frame.
    Drift,
    /// A fixed line detector: rows are lines in time.
    Scan,
    /// Tables of limbs measured elsewhere.
    Limbs,
}

/// A sequence of one kind.
#[derive(Clone, Debug, PartialEq)]
pub struct Sequence {
    /// Name for the reader, where the file gives one.
    pub name: Option<String>,
    /// How the frames came about.
    pub kind: Kind,
    /// The frames, or the tables of limbs; sorted, each once.
    pub files: Vec<PathBuf>,
    /// Added to the angle of the camera.
    pub roll_deg: f64,
    /// Seconds from line to line; given for a scan and for nothing else.
    pub line_s: Option<f64>,
    /// Dark and flat: its own or the session's.
    pub calibration: Calibration,
    /// The session's camera with what differs.
    pub camera: Camera,
    /// The session's band with what differs.
    pub filter: Filter,
}
