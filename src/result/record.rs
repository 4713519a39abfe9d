//! The records of `result.json`: what the program says, in the names its files keep.
//!
//! These types are the only ones that are written to a file, so that a field renamed inside the
//! program never changes a format. Angles are degrees, on the sky from celestial north through east
//! unless the name says otherwise; `sigma` is half the width of the 68 percent interval.

use schemars::JsonSchema;
use serde::{Deserialize, Deserializer, Serialize};

/// Version of the layout of `result.json`.
pub const SCHEMA_VERSION: u32 = 1;

/// A value with its standard uncertainty, or the reason why there is none.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Quantity {
    /// Best estimate; null where it was not measured.
    pub value: Option<f64>,
    /// Half the width of the 68 percent interval.
    pub sigma: Option<f64>,
    /// Unit of both.
    pub unit: String,
    /// Why there is no value.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub reason: Option<String>,
}

impl Quantity {
    /// A measured value.
    pub fn measured(value: f64, sigma: f64, unit: &str) -> Self {
        if value.is_finite() && sigma.is_finite() {
            Self {
                value: Some(value),
                sigma: Some(sigma),
                unit: unit.to_owned(),
                reason: None,
            }
        } else {
            Self::missing(unit, "the estimate is not finite")
        }
    }

    /// A value known without a stated uncertainty.
    pub fn computed(value: f64, unit: &str) -> Self {
        Self {
            value: Some(value),
            sigma: None,
            unit: unit.to_owned(),
            reason: None,
        }
    }

    /// No value, and why.
    pub fn missing(unit: &str, reason: &str) -> Self {
        Self {
            value: None,
            sigma: None,
            unit: unit.to_owned(),
            reason: Some(reason.to_owned()),
        }
    }
}

/// Whether a quantity could be told apart from what it is mixed with.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
#[serde(rename_all = "snake_case")]
pub enum Status {
    /// It was measured.
    Measured,
    /// The observation cannot tell it from the instrument or the air.
    NotSeparated,
}

/// A quantity of the shape, with its error in parts and its intervals.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct ShapeQuantity {
    /// Best estimate; null where it was not separated.
    pub value: Option<f64>,
    /// Half the width of the 68 percent interval.
    pub sigma: Option<f64>,
    /// Unit of everything here.
    pub unit: String,
    /// Random part of the standard uncertainty.
    pub sigma_random: Option<f64>,
    /// Systematic part of the standard uncertainty.
    pub sigma_systematic: Option<f64>,
    /// The 68 percent interval.
    pub interval_68: Option<[f64; 2]>,
    /// The 95 percent interval.
    pub interval_95: Option<[f64; 2]>,
    /// Measured, or not separated.
    pub status: Status,
    /// Why it was not separated, and what to observe instead.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub reason: Option<String>,
}

impl ShapeQuantity {
    /// No value: the observation does not separate it, and why.
    pub fn not_separated(unit: &str, reason: &str) -> Self {
        Self {
            value: None,
            sigma: None,
            unit: unit.to_owned(),
            sigma_random: None,
            sigma_systematic: None,
            interval_68: None,
            interval_95: None,
            status: Status::NotSeparated,
            reason: Some(reason.to_owned()),
        }
    }
}

/// A distortion fixed to the detector: `amplitude cos m (theta - angle)`, apparent minus true.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct DistortionRecord {
    /// Harmonic number.
    pub m: usize,
    /// Amplitude, mas; null where it cannot be told from the Sun or the vertical.
    pub amplitude_mas: Option<f64>,
    /// Angle on the detector from +x towards +y, degrees.
    pub angle_deg: Option<f64>,
    /// Standard uncertainty of the amplitude, mas.
    pub sigma_mas: Option<f64>,
    /// Why there is no value.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub reason: Option<String>,
}

/// A null test: a number that the Sun does not have.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct NullTest {
    /// What was tested, in words.
    pub test: String,
    /// The value found.
    pub value: Option<f64>,
    /// Its standard uncertainty.
    pub sigma: Option<f64>,
    /// Unit of both.
    pub unit: String,
    /// Why there is no value.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub reason: Option<String>,
}

/// What the air's terms of the fit came out as.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct AirRecord {
    /// Fitted scale of refractivity: 1 as computed from the weather.
    pub scale: Quantity,
    /// Residual fixed to the vertical, the same at all zenith distances.
    pub vertical_residual: Quantity,
}

/// How well the parts were told apart.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Separation {
    /// Rank of the scaled design without prior knowledge.
    pub rank: usize,
    /// Number of unknowns.
    pub unknowns: usize,
    /// Condition number of the scaled design; null where it is singular.
    pub condition_number: Option<f64>,
    /// Largest correlation of the oblateness with an instrument term.
    pub correlation_sun_instrument: Option<f64>,
    /// Largest correlation of the oblateness with an air term.
    pub correlation_sun_air: Option<f64>,
    /// The singular values of the scaled design, largest first.
    pub singular_values: Vec<f64>,
}

/// The shape from the limb of the stacked frames.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct ByStack {
    /// Equatorial minus polar radius.
    pub oblateness: ShapeQuantity,
    /// Radius at 1 AU.
    pub radius: ShapeQuantity,
    /// Next harmonic.
    pub p4: ShapeQuantity,
    /// Difference of the routes in units of its standard uncertainty: oblateness.
    pub difference_sigma: Option<f64>,
    /// How many stacks went into the fit.
    pub stacks: usize,
    /// Why there is no value.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub reason: Option<String>,
}

/// Radius and oblateness by one definition of the limb.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct DefinitionRecord {
    /// Which definition.
    pub definition: String,
    /// Radius, arcsec at 1 AU, as the definition gives it at this blur.
    pub radius_arcsec: Option<f64>,
    /// Radius by this definition minus the unblurred inflection point, mas.
    pub displacement_mas: Option<f64>,
    /// Oblateness by this definition, mas.
    pub oblateness_mas: Option<f64>,
    /// How it was obtained.
    pub how: String,
}

/// One point of the curve of the shape against the kept fraction.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct KeptPoint {
    /// Share of the usable frames kept, 0 to 1.
    pub fraction: f64,
    /// Frames kept.
    pub frames: usize,
    /// Oblateness, mas.
    pub oblateness_mas: Option<f64>,
    /// Its random standard uncertainty, mas.
    pub oblateness_sigma_mas: Option<f64>,
    /// Radius at 1 AU, arcsec.
    pub radius_arcsec: f64,
    /// Its random standard uncertainty, mas.
    pub radius_sigma_mas: f64,
}

/// The covariance of the fitted terms.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Covariance {
    /// Names of the terms.
    pub terms: Vec<String>,
    /// Unit of each term.
    pub units: Vec<String>,
    /// The matrix, row by row, in products of the units.
    pub matrix: Vec<Vec<f64>>,
}

/// What the oblateness says of the gravitational quadrupole.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Quadrupole {
    /// J2, dimensionless.
    pub j2: Quantity,
    /// What it adds to the perihelion advance of the innermost planet.
    pub perihelion: Quantity,
    /// Oblateness that surface rotation alone gives, with the spread of the published laws.
    pub rotation_figure: Quantity,
}

/// The shape of the limb.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct ShapeRecord {
    /// Equatorial minus polar radius, mas at 1 AU, B0 taken out.
    pub oblateness: ShapeQuantity,
    /// Radius at 1 AU of the unblurred limb's inflection point, arcsec.
    pub radius: ShapeQuantity,
    /// `R c4`, mas.
    pub p4: ShapeQuantity,
    /// Numbers that the Sun does not have.
    pub null_tests: Vec<NullTest>,
    /// Distortion fixed to the detector.
    pub instrument: Vec<DistortionRecord>,
    /// The air's terms.
    pub air: AirRecord,
    /// How well Sun, instrument and air were told apart.
    pub separation: Separation,
    /// The same from the stack.
    pub by_stack: ByStack,
    /// Covariance of the fitted terms.
    pub covariance: Covariance,
    /// Other definitions of the limb, side by side.
    pub definitions: Vec<DefinitionRecord>,
    /// Shape against kept fraction.
    pub kept_curve: Vec<KeptPoint>,
    /// J2 and the perihelion.
    pub quadrupole: Quadrupole,
}

/// One turbulent layer of the fit.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct LayerRecord {
    /// Height above the telescope, m.
    pub height_m: f64,
    /// Share of the turbulence, 0 to 1.
    pub share: f64,
}

/// Power of one harmonic of the limb, observed and modelled.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct PowerRecord {
    /// Harmonic number.
    pub m: usize,
    /// Observed variance of one coefficient, noise included, mas^2.
    pub observed_mas2: f64,
    /// Modelled variance, noise included, mas^2.
    pub modelled_mas2: f64,
    /// Photon noise in it, mas^2.
    pub noise_mas2: f64,
    /// Effective number of independent frames.
    pub independent_frames: f64,
}

/// What the air did.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct SeeingRecord {
    /// Fried's parameter at 500 nm towards the zenith.
    pub r0: Quantity,
    /// Fried's parameter at 500 nm towards the Sun.
    pub line_of_sight: Quantity,
    /// At the zenith, by the motion of the limb.
    pub by_motion: Quantity,
    /// At the zenith, by the width of the limb.
    pub by_blur: Quantity,
    /// Long-exposure image size at the observing wavelength, towards the Sun.
    pub fwhm: Quantity,
    /// Coherence time.
    pub coherence_time: Quantity,
    /// Outer scale.
    pub outer_scale: Quantity,
    /// Height that stands for the turbulence seen by the limb.
    pub height_proxy: Quantity,
    /// Effective number of independent frames, per harmonic.
    pub independent_frames: Vec<PowerRecord>,
    /// The layers of the fit.
    pub layers: Vec<LayerRecord>,
}

/// The air's share of the error.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct TurbulenceRecord {
    /// Error of the oblateness from turbulence alone, predicted from the seeing.
    pub floor: Quantity,
    /// Share of the variance of the oblateness that is turbulence, 0 to 1.
    pub share: Quantity,
    /// Hours at this seeing to reach 1 mas and 0.5 mas.
    pub hours_to: HoursTo,
    /// Observed scatter over the predicted floor, per frame, m = 2.
    pub observed_over_predicted: Quantity,
}

/// Hours of observation to a goal.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct HoursTo {
    /// To 1 mas.
    #[serde(rename = "1_mas")]
    pub one_mas: Quantity,
    /// To 0.5 mas.
    #[serde(rename = "0.5_mas")]
    pub half_mas: Quantity,
}

/// What the air's bending did to one sequence.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct RefractionRecord {
    /// Index of the sequence in the session file, from 0.
    pub sequence: usize,
    /// True zenith distance at mid sequence, degrees.
    pub zenith_true_deg: f64,
    /// Apparent zenith distance at mid sequence, degrees.
    pub zenith_apparent_deg: f64,
    /// Refraction of the disk's centre, arcsec.
    pub refraction_arcsec: f64,
    /// Mean radius, apparent minus true, mas.
    pub radius_change_mas: f64,
    /// Horizontal minus vertical radius, mas.
    pub flattening_mas: f64,
    /// Standard uncertainty of the flattening, mas.
    pub flattening_sigma_mas: f64,
    /// Wavelength at which the refraction is that of the whole band, nm.
    pub effective_wavelength_nm: f64,
    /// How far the air draws the band's half-power wavelengths apart, mas.
    pub smear_mas: f64,
    /// Refractivity `n - 1` at the telescope.
    pub refractivity: f64,
    /// Pressure at mid sequence, hPa.
    pub pressure_hpa: f64,
    /// Temperature at mid sequence, Celsius.
    pub temperature_c: f64,
    /// Relative humidity at mid sequence, 0 to 1.
    pub relative_humidity: f64,
}

/// Why frames were set aside, and how many.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Rejection {
    /// The reason, in words.
    pub reason: String,
    /// How many frames.
    pub frames: usize,
}

/// What selection did.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct SelectionRecord {
    /// Frames read.
    pub read: usize,
    /// Frames with a usable limb.
    pub usable: usize,
    /// Frames that went to the fit and the stack.
    pub used: usize,
    /// Frames set aside, by reason.
    pub rejected: Vec<Rejection>,
    /// Kept share of the usable frames.
    pub kept_fraction: f64,
    /// The criterion.
    pub criterion: String,
    /// How it is kept blind to the shape.
    pub blind_to_shape: String,
    /// Error with all usable frames weighted over the error with this selection; above 1 it paid.
    pub gain: f64,
}

/// One line of the error budget.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct BudgetLine {
    /// What it is.
    pub term: String,
    /// Its standard uncertainty in the oblateness, mas; null where the oblateness is not separated.
    pub sigma_mas: Option<f64>,
    /// Its standard uncertainty in the radius, mas.
    pub sigma_radius_mas: f64,
    /// `random` or `systematic`.
    pub kind: String,
    /// `frame`, `burst`, `session`, `instrument` or `model`.
    pub scope: String,
    /// How it was obtained.
    pub how: String,
}

/// One harmonic of a sequence, air taken out, on the detector.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct HarmonicRecord {
    /// Harmonic number.
    pub m: usize,
    /// Coefficient of `cos m theta`, mas.
    pub cos_mas: f64,
    /// Coefficient of `sin m theta`, mas.
    pub sin_mas: f64,
    /// Standard uncertainty of either, mas.
    pub sigma_mas: f64,
}

/// One sequence of the session.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct SequenceRecord {
    /// Index in the session file, from 0.
    pub sequence: usize,
    /// Kind, as in the session file.
    pub kind: String,
    /// First and last mid-exposure, UTC.
    pub time_utc: [String; 2],
    /// Roll, degrees.
    pub roll_deg: f64,
    /// Frames read and used.
    pub frames_read: usize,
    /// Frames that went to the fit.
    pub frames_used: usize,
    /// True zenith distance at mid sequence, degrees.
    pub zenith_true_deg: f64,
    /// Parallactic angle at mid sequence, degrees.
    pub parallactic_deg: f64,
    /// Position angle of the solar axis at mid sequence, degrees.
    pub axis_deg: f64,
    /// Heliographic latitude of the disk's centre, degrees.
    pub b0_deg: f64,
    /// Topocentric distance, au.
    pub distance_au: f64,
    /// Fried's parameter at 500 nm at the zenith, from this sequence.
    pub r0: Quantity,
    /// Mean radius at 1 AU, arcsec.
    pub radius: Quantity,
    /// Harmonics on the detector, air taken out.
    pub harmonics: Vec<HarmonicRecord>,
    /// Why the sequence did not go to the fit.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub set_aside: Option<String>,
}

/// A part of the limb that was left out, and why.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct MaskedArc {
    /// Index of the sequence.
    pub sequence: usize,
    /// First detector angle, degrees from +x towards +y.
    pub from_deg: f64,
    /// Last detector angle, degrees.
    pub to_deg: f64,
    /// Share of the sequence's frames in which it was left out.
    pub frames: f64,
    /// Why.
    pub reason: String,
}

/// Something a reader must know.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
pub struct WarningRecord {
    /// A short code that programs can match.
    pub code: String,
    /// The sentence.
    pub text: String,
}

/// A file that went into the result.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize, JsonSchema)]
pub struct SourceFile {
    /// Path as written in the session file.
    pub path: String,
    /// Size.
    pub bytes: u64,
    /// SHA-256 of the whole file.
    pub sha256: String,
}

/// Everything in `result.json`.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct Record {
    /// Layout of this file.
    pub schema_version: u32,
    /// Program that made it.
    pub program_version: String,
    /// Name of the station.
    pub site_name: String,
    /// First and last mid-exposure, UTC.
    pub time_utc: [String; 2],
    /// The answer in one sentence.
    pub summary: String,
    /// The files it was made from.
    pub created_from: Vec<SourceFile>,
    /// Settings as resolved.
    pub settings: serde_json::Value,
    /// Seed of everything random.
    pub seed: u64,
    /// The shape.
    pub shape: ShapeRecord,
    /// The seeing.
    pub seeing: SeeingRecord,
    /// The air's share.
    pub turbulence: TurbulenceRecord,
    /// Refraction by sequence.
    pub refraction: Vec<RefractionRecord>,
    /// Selection.
    pub selection: SelectionRecord,
    /// The error budget.
    pub budget: Vec<BudgetLine>,
    /// The sequences.
    pub sequences: Vec<SequenceRecord>,
    /// Parts of the limb left out.
    pub masked: Vec<MaskedArc>,
    /// What a reader must know.
    pub warnings: Vec<WarningRecord>,
}

/// One frame of the session, for the tables and the figures.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct FrameTrace {
    /// Index of the sequence.
    pub sequence: usize,
    /// Index of the frame in the sequence.
    pub frame: usize,
    /// Mid-exposure, seconds after the first frame of the session.
    pub time_s: f64,
    /// Whether it went to the fit.
    pub kept: bool,
    /// Weight in the fit relative to the mean.
    pub weight: f64,
    /// Fried's parameter at 500 nm towards the Sun, from the width of this frame's limb, m; not a
    /// number, in a file null, where the width cannot tell.
    #[serde(deserialize_with = "number_or_gap")]
    pub r0_blur_m: f64,
    /// Radius minus the session's mean, mas at 1 AU.
    pub radius_mas: f64,
    /// `cos 2 theta` on the detector, air taken out, mas.
    pub cos2_mas: f64,
    /// `sin 2 theta` on the detector, air taken out, mas.
    pub sin2_mas: f64,
}

/// The mean limb about the fitted circle, for the figure.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct LimbTrace {
    /// Position angle from celestial north through east, degrees.
    pub position_angle_deg: Vec<f64>,
    /// Radius minus the fitted circle, instrument and air taken out, mas at 1 AU.
    pub residual_mas: Vec<f64>,
    /// Standard uncertainty, mas.
    pub sigma_mas: Vec<f64>,
    /// The fitted shape minus the circle, mas.
    pub model_mas: Vec<f64>,
    /// Position angle of the solar axis, degrees.
    pub axis_deg: f64,
    /// Position angle of the zenith at mid session, degrees.
    pub zenith_deg: f64,
}

/// A number; not a number where the file has null.
fn number_or_gap<'de, D: Deserializer<'de>>(from: D) -> Result<f64, D::Error> {
    Ok(Option::<f64>::deserialize(from)?.unwrap_or(f64::NAN))
}

/// What the figures show beyond the record; all but the preview stands in `traces.json`.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Traces {
    /// Every measured frame.
    pub frames: Vec<FrameTrace>,
    /// The mean limb.
    pub limb: LimbTrace,
    /// The stack reduced to at most 512 pixels a side, `[y, x]` with row 0 the southern edge and
    /// solar west to the right, in units of disk centre.
    #[serde(skip)]
    pub preview: Option<ndarray::Array2<f32>>,
    /// Radius of the disk in the preview, pixels.
    pub preview_radius_px: f64,
}
