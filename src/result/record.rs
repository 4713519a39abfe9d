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

/// How the distortion goes with a reading: mas for one unit of it, on the detector.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct DriverRecord {
    /// Name of the reading.
    pub reading: String,
    /// Harmonic number.
    pub m: usize,
    /// Slope of the coefficient of `cos m theta`.
    pub cos: Quantity,
    /// Slope of the coefficient of `sin m theta`.
    pub sin: Quantity,
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
    /// What resampling and the residual motion's blur had added to the stacks' radius and oblateness,
    /// predicted by noise-free twins and taken off, mas.
    #[serde(default)]
    pub removed_mas: Option<[f64; 2]>,
    /// How much sharper the stacks are than the mean of the frames.
    #[serde(default)]
    pub sharpness: Option<StackSharpness>,
    /// Why there is no value.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub reason: Option<String>,
}

/// How much sharper the stacks are than the plain mean of the frames.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct StackSharpness {
    /// Energy of the edge in the stacks, 1/arcsec.
    pub stack_per_arcsec: f64,
    /// The same in the mean of the frames as they came.
    pub mean_per_arcsec: f64,
    /// The first over the second.
    pub gain: f64,
    /// That ratio as the limbs of the single frames predict it.
    pub gain_predicted: f64,
    /// What was measured.
    pub how: String,
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

/// Inflation of the variance of a mean by correlation in time, one harmonic.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct FactorRecord {
    /// Harmonic number.
    pub m: usize,
    /// Variance of a mean over that of independent frames.
    pub factor: f64,
}

/// The same by batches of one length, m = 2.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct BatchRecord {
    /// Length of a batch, seconds.
    pub length_s: f64,
    /// Variance of batch means over that of independent frames.
    pub factor: f64,
    /// Degrees of freedom behind it.
    pub degrees_of_freedom: f64,
}

/// The random error once more, by resampling runs of frames.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct BootstrapRecord {
    /// Standard error of the radius, mas.
    pub sigma_radius_mas: f64,
    /// Standard error of the oblateness, mas; null where it is not separated.
    pub sigma_oblateness_mas: Option<f64>,
    /// Standard error of P4, mas; null where it is not separated.
    pub sigma_p4_mas: Option<f64>,
    /// Frames in a run.
    pub run_frames: usize,
    /// Runs in the session.
    pub runs: usize,
    /// Resampled sessions.
    pub resamples: usize,
    /// Seed of the drawing.
    pub seed: u64,
}

/// How the random error was judged.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct RandomErrorRecord {
    /// Inflation by correlation in time: the larger of initial positive sequence and batch means.
    pub correlation_factor: Vec<FactorRecord>,
    /// Factor on the variances where sequences scatter more than their frames say; 1 where not.
    pub excess: f64,
    /// Degrees of freedom of the intervals.
    pub degrees_of_freedom: f64,
    /// The inflation by batches of growing length, m = 2.
    pub batches: Vec<BatchRecord>,
    /// Whether it stays as it is in longer batches; null where there are too few to say.
    pub converged: Option<bool>,
    /// The check by resampling; null where there is nothing to resample.
    pub bootstrap: Option<BootstrapRecord>,
}

/// How a quantity runs with the kept fraction, tested against zero.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct SlopeTest {
    /// Change from none to all of the frames kept, mas.
    pub slope_mas: f64,
    /// Its standard uncertainty; frames that several fractions share and correlation in time are in it.
    pub sigma_mas: f64,
    /// Slope over its standard uncertainty.
    pub pull: f64,
    /// Probability of a slope as far from zero by chance.
    pub chance: f64,
    /// Degrees of freedom of the uncertainty.
    pub degrees: f64,
}

/// The slopes of the curve of the shape against the kept fraction.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct KeptSlope {
    /// Of the oblateness; null where it is not separated or there are too few frames.
    pub oblateness: Option<SlopeTest>,
    /// Of the radius.
    pub radius: Option<SlopeTest>,
    /// The kept fractions that the line was laid through.
    pub fractions: Vec<f64>,
    /// Why there is no slope.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub reason: Option<String>,
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
    /// The law it was taken from.
    #[serde(default)]
    pub rotation_law: String,
    /// Oblateness beyond that figure.
    #[serde(default)]
    pub excess: Quantity,
    /// J2 with J4 free, from the coefficients of P2 and P4 with their covariance.
    #[serde(default)]
    pub j2_beside_j4: Quantity,
    /// J4: the rotation's coefficient of P4 minus the measured one.
    #[serde(default)]
    pub j4: Quantity,
    /// Perihelion advance of the innermost planet by general relativity, arcsec a century, for
    /// comparison.
    #[serde(default)]
    pub perihelion_by_relativity: Quantity,
    /// The same by each law, without the spread between them.
    #[serde(default)]
    pub by_law: Vec<ByLaw>,
    /// What a reader must know of these numbers.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub note: Option<String>,
}

/// The figure against one rotation law.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct ByLaw {
    /// Name of the law.
    pub law: String,
    /// Oblateness that it alone gives, mas at 1 AU.
    pub rotation_figure_mas: f64,
    /// Oblateness beyond it.
    pub excess: Quantity,
    /// J2, with J4 taken as zero.
    pub j2: Quantity,
    /// J4.
    pub j4: Quantity,
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
    /// How it goes with the readings of `[environment]`, or drifts.
    #[serde(default)]
    pub drivers: Vec<DriverRecord>,
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
    /// How the random error was judged.
    pub random_error: RandomErrorRecord,
    /// The slopes of that curve against zero.
    #[serde(default)]
    pub kept_slope: KeptSlope,
    /// J2 and the perihelion.
    pub quadrupole: Quadrupole,
    /// What was left out for structure at the limb, and what that does.
    #[serde(default)]
    pub masking: Option<MaskingRecord>,
    /// Blur along one axis by sequence, and what was taken off for it.
    #[serde(default)]
    pub axis_blur: Vec<AxisBlurRecord>,
}

/// An arc of the limb left out for what was seen in it, margin included.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct MaskArc {
    /// `spot`, `facula`, `dust` or `image`.
    pub kind: String,
    /// `sun` or `detector`.
    pub stays_on: String,
    /// First angle, degrees: on the Sun from its north through east, on the detector from +x towards +y.
    pub from_deg: f64,
    /// Last angle, degrees.
    pub to_deg: f64,
    /// Greatest contrast, percent of disk centre; a lower limit above 15.
    pub contrast_percent: Option<f64>,
    /// Robust standard deviations there.
    pub robust_sigmas: Option<f64>,
    /// How it was found.
    pub how: String,
}

/// A straight line of radius against brightness over sectors.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct RegressionLine {
    /// Slope, mas of radius a percent of brightness.
    pub slope_mas_percent: f64,
    /// Its standard uncertainty, by the scatter of the sectors.
    pub sigma_mas_percent: f64,
    /// Sectors of all sequences.
    pub sectors: usize,
}

/// Radius residual against limb brightness: the brightness of each place on the Sun is that in the other
/// sequences, so that the noise of one does not enter both sides.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct BrightnessRegression {
    /// Over all sectors.
    pub whole_limb: Option<RegressionLine>,
    /// Over the sectors that went to the shape.
    pub masked_out: Option<RegressionLine>,
}

/// The shape with and without the mask.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct MaskingRecord {
    /// Mean share of the limb left out for structure, 0 to 1.
    pub share_of_limb: f64,
    /// Mean share of the limb left out, frame by frame, because something passed before it, 0 to 1.
    pub passing_share: f64,
    /// Pixels of the annulus, the edge itself apart, that are hit by particles, a frame.
    pub hits_per_frame: f64,
    /// The arcs.
    pub arcs: Vec<MaskArc>,
    /// Structures that were found and not left out.
    pub structures_left_in: usize,
    /// Radius at 1 AU with the mask, arcsec.
    pub radius_with_arcsec: Option<f64>,
    /// Radius at 1 AU with nothing left out for structure, arcsec.
    pub radius_without_arcsec: Option<f64>,
    /// Oblateness with the mask, mas; none where it is not separated.
    pub oblateness_with_mas: Option<f64>,
    /// Oblateness with nothing left out for structure, mas.
    pub oblateness_without_mas: Option<f64>,
    /// How radius goes with brightness along the limb.
    pub brightness_regression: BrightnessRegression,
}

/// Blur along one axis in one sequence.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct AxisBlurRecord {
    /// Index of the sequence.
    pub sequence: usize,
    /// Mean blur, arcsec^(5/3).
    pub blur_arcsec53: f64,
    /// Amplitude of its second harmonic, arcsec^(5/3).
    pub amplitude_arcsec53: f64,
    /// Detector angle of the most blurred limb from +x towards +y, degrees, 0 to 180.
    pub axis_deg: f64,
    /// What was taken off the radius along that axis, and added across it, mas at 1 AU.
    pub removed_mas: f64,
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
    /// The instrument's own blur, standard deviation on one axis, from the blur of sequences of
    /// different seeing against their motion.
    #[serde(default)]
    pub own_blur: Quantity,
    /// Variance of the limb's noise, by halves of the pixels, over what photons and read noise let
    /// expect.
    #[serde(default)]
    pub noise_over_expected: Quantity,
}

/// The floor that turbulence sets to one harmonic: standard deviations of one coefficient, mas at 1
/// AU.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct FloorRecord {
    /// Harmonic number.
    pub m: usize,
    /// Of one frame, predicted from the seeing.
    pub frame_predicted_mas: f64,
    /// Of one frame, observed, noise taken off.
    pub frame_observed_mas: f64,
    /// Observed over predicted, one frame.
    pub observed_over_predicted: Quantity,
    /// Mean length of a sequence, s.
    pub time_s: f64,
    /// Correlation time, predicted, s.
    pub correlation_time_s: f64,
    /// Of the mean over a sequence, predicted from the seeing by frozen flow.
    pub mean_predicted_mas: f64,
    /// Of the mean over a sequence, observed from blocks within it; null where it is too short.
    pub mean_observed_mas: Option<f64>,
    /// Observed over predicted, mean over a sequence: above 1 the air was slower than frozen flow.
    pub mean_observed_over_predicted: Quantity,
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
    /// The floor of every harmonic, of a frame and of a sequence's mean.
    #[serde(default)]
    pub harmonics: Vec<FloorRecord>,
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
    /// Random error of the oblateness with all usable frames and with the kept ones, mas; null where
    /// it is not separated.
    #[serde(default)]
    pub sigma_all_and_kept_mas: Option<[f64; 2]>,
    /// Random error with the same frames at equal weights over the error at the weights used.
    #[serde(default)]
    pub weighting_gain: Option<f64>,
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
    /// The camera by the Sun's own motion, where the session has a drift.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub camera: Option<CameraRecord>,
    /// The drifts.
    #[serde(skip_serializing_if = "Vec::is_empty", default)]
    pub drifts: Vec<DriftRecord>,
    /// The scans.
    #[serde(skip_serializing_if = "Vec::is_empty", default)]
    pub scans: Vec<ScanRecord>,
    /// The shape from the scans, where the session has one.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub by_scan: Option<ByScan>,
    /// Parts of the limb left out.
    pub masked: Vec<MaskedArc>,
    /// What a reader must know.
    pub warnings: Vec<WarningRecord>,
}

/// A number of the camera, as the session file and as the drifts have it.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct CameraNumber {
    /// As the session file has it.
    pub nominal: Quantity,
    /// As the drifts measured it.
    pub drift: Quantity,
    /// Drift minus nominal in units of its standard uncertainty.
    pub pull: f64,
    /// `drift` or `nominal`: which was used, the one with the smaller standard uncertainty.
    pub used: String,
}

/// The camera as the Sun's own motion measured it.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct CameraRecord {
    /// Plate scale.
    pub scale: CameraNumber,
    /// Camera angle, as `camera.angle_deg`.
    pub angle: CameraNumber,
}

/// Where a drifting disk stood against an even scale, over a part of its way.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct DistortionPoint {
    /// Distance along the way from the detector's middle, px.
    pub along_px: f64,
    /// Centres in it.
    pub frames: usize,
    /// Mean residual along the way, mas.
    pub along_mas: f64,
    /// Its standard uncertainty, mas.
    pub along_sigma_mas: f64,
    /// Mean residual across the way, mas.
    pub across_mas: f64,
    /// Its standard uncertainty, mas.
    pub across_sigma_mas: f64,
}

/// One whole disk of a drift.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct DriftPoint {
    /// Distance along the way from the detector's middle, px.
    pub along_px: f64,
    /// Residual along the way, mas.
    pub along_mas: f64,
    /// Residual across the way, mas.
    pub across_mas: f64,
}

/// One drift: scale and angle from the centres in time.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct DriftRecord {
    /// Index of the sequence.
    pub sequence: usize,
    /// Frames with a whole disk clear of the edge.
    pub frames_used: usize,
    /// Frames in which the disk touched the edge of the field.
    pub frames_at_edge: usize,
    /// Plate scale.
    pub scale: Quantity,
    /// Camera angle, as `camera.angle_deg`.
    pub angle: Quantity,
    /// The way, arcsec.
    pub travel_arcsec: f64,
    /// Velocity on the detector, px/s.
    pub velocity_px_s: [f64; 2],
    /// Scatter of one centre along and across the way, arcsec.
    pub noise_arcsec: [f64; 2],
    /// Share of its variance that is correlated in time, 0 to 1.
    pub correlated_share: f64,
    /// Its correlation time, s.
    pub correlation_time_s: f64,
    /// Independent centres that would give the same error of the scale.
    pub independent_frames: f64,
    /// Readout that the row times were worked out with, s; null where the session gives none.
    pub readout_s: Option<f64>,
    /// Relative change of the scale by one millisecond of readout.
    pub scale_by_readout_per_ms: f64,
    /// Means of the residuals by part of the way, where there are enough centres.
    pub distortion: Vec<DistortionPoint>,
    /// Every centre.
    pub centres: Vec<DriftPoint>,
}

/// One transit of a scan.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct TransitRecord {
    /// Plane of the scan.
    pub transit: usize,
    /// When the Sun's centre crossed the slit, UTC.
    pub time_utc: String,
    /// Seconds between the contacts that the radius across the slit stands for.
    pub duration_s: f64,
    /// Radius across the slit at 1 AU, from time alone, arcsec.
    pub across_slit_arcsec: f64,
    /// Radius along the slit at 1 AU, arcsec.
    pub along_slit_arcsec: f64,
}

/// One scan.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct ScanRecord {
    /// Index of the sequence.
    pub sequence: usize,
    /// Lines of a transit.
    pub lines: usize,
    /// Pixels of the slit.
    pub slit_px: usize,
    /// Motion of the Sun across the slit, arcsec/s.
    pub across_arcsec_s: f64,
    /// Angle of the motion from the slit's normal, degrees.
    pub oblique_deg: f64,
    /// Slit's angle, as `camera.angle_deg`, from the transits.
    pub slit_angle: Quantity,
    /// The transits with a limb.
    pub transits: Vec<TransitRecord>,
    /// Transits without, and why.
    pub lost: Vec<String>,
    /// Mean limb about the reference radius: detector angle, degrees.
    pub limb_angle_deg: Vec<f64>,
    /// Its radius at 1 AU minus the mean, mas.
    pub limb_mas: Vec<f64>,
    /// Standard uncertainty by the transits' scatter, mas.
    pub limb_sigma_mas: Vec<f64>,
}

/// The shape from the transits of all scans.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
pub struct ByScan {
    /// Radius at 1 AU.
    pub radius: ShapeQuantity,
    /// Equatorial minus polar radius.
    pub oblateness: ShapeQuantity,
    /// Relative error of the slit's scale as the transits leave it.
    pub slit_scale_error: Quantity,
    /// Transits.
    pub transits: usize,
    /// Scatter of one transit's mean radius, mas.
    pub scatter_mas: f64,
    /// Radius minus that of the frames, in units of its standard uncertainty (what both share left out).
    pub radius_difference_sigma: Option<f64>,
    /// The same of the oblateness.
    pub oblateness_difference_sigma: Option<f64>,
    /// Where the error comes from.
    pub budget: Vec<BudgetLine>,
    /// Why there is no value.
    #[serde(skip_serializing_if = "Option::is_none", default)]
    pub reason: Option<String>,
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
    /// Detector angle of celestial north, degrees.
    pub north_deg: f64,
    /// Mean radius minus the reference, then cosine and sine of m = 2, 3, 4 on the detector, air
    /// taken out, mas at 1 AU.
    pub harmonics_mas: [f64; 7],
    /// How much one mas of each of these moves radius, oblateness and P4; zero where not kept.
    pub influence: [[f64; 7]; 3],
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
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, JsonSchema)]
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
