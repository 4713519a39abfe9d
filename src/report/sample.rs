//! Invented sessions at the station Corrie Head, for the tests of the report.

mod motion;
mod parts;

use parts::{
    budget, covariance, definitions, instrument, kept_curve, kept_slope, masking, null_tests,
    random_error, refraction, seeing, sequence, traces,
};

use crate::result::record::*;

/// Which session.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Session {
    /// The error exceeds the oblateness: 9.1 +- 12.4 mas.
    Short,
    /// The oblateness stands clear: 8.0 +- 0.6 mas.
    Season,
    /// One roll on an alt-azimuth mount at noon: nothing separated, many nulls.
    Refused,
}

/// Repeatable numbers: a linear congruence (Knuth's MMIX multiplier) with a Box-Muller step.
struct Noise(u64);

impl Noise {
    fn uniform(&mut self) -> f64 {
        self.0 = self
            .0
            .wrapping_mul(6364136223846793005)
            .wrapping_add(1442695040888963407);
        ((self.0 >> 11) as f64 + 0.5) / (1u64 << 53) as f64
    }

    fn normal(&mut self) -> f64 {
        let (a, b) = (self.uniform(), self.uniform());
        (-2.0 * a.ln()).sqrt() * (std::f64::consts::TAU * b).cos()
    }
}

fn shape(value: f64, random: f64, systematic: f64, unit: &str) -> ShapeQuantity {
    let sigma = random.hypot(systematic);
    ShapeQuantity {
        value: Some(value),
        sigma: Some(sigma),
        unit: unit.to_owned(),
        sigma_random: Some(random),
        sigma_systematic: Some(systematic),
        interval_68: Some([value - sigma, value + sigma]),
        interval_95: Some([value - 2.02 * sigma, value + 2.02 * sigma]),
        status: Status::Measured,
        reason: None,
    }
}

const REASON: &str = "a distortion of the instrument at m = 2 has the same signature as the Sun in \
                      this one roll; observe at rolls 45 degrees apart, or over several hours";

/// Start of each sequence, seconds of the day; roll, degrees; true zenith distance, degrees.
const PLAN: [(f64, f64, f64); 8] = [
    (18_060.0, 0.0, 51.3),
    (19_320.0, 45.0, 47.4),
    (20_640.0, 90.0, 43.2),
    (21_900.0, 135.0, 39.1),
    (23_220.0, 0.0, 34.9),
    (24_480.0, 45.0, 31.0),
    (25_740.0, 90.0, 27.4),
    (27_000.0, 135.0, 24.3),
];

fn utc(second_of_day: f64) -> String {
    let whole = second_of_day as u64;
    let fraction = second_of_day - whole as f64;
    format!(
        "2026-06-21T{:02}:{:02}:{:06.3}",
        whole / 3600,
        whole / 60 % 60,
        (whole % 60) as f64 + fraction
    )
}

/// The record and traces of an invented session.
pub(super) fn session(which: Session) -> (Record, Traces) {
    let mut noise = Noise(20_260_621 + which as u64);
    let scale = if which == Session::Season { 0.05 } else { 1.0 };
    let separated = which != Session::Refused;
    let sequences: &[(f64, f64, f64)] = if separated { &PLAN } else { &PLAN[6..7] };
    let oblateness = match which {
        Session::Short => shape(9.1, 11.2, 5.32, "mas"),
        Session::Season => shape(8.0, 0.52, 0.30, "mas"),
        Session::Refused => ShapeQuantity::not_separated("mas", REASON),
    };
    let radius = match which {
        Session::Season => shape(959.9417, 0.0021, 0.0124, "arcsec"),
        _ => shape(959.872, 0.041, 0.192, "arcsec"),
    };
    let budget = budget(scale, separated, which);
    let terms = [
        "radius",
        "oblateness",
        "P4",
        "S2 sine",
        "instrument m=2 cos",
        "instrument m=2 sin",
        "instrument m=4 cos",
        "instrument m=4 sin",
        "refractivity scale",
        "vertical residual",
    ];
    let units = [
        "arcsec", "mas", "mas", "mas", "mas", "mas", "mas", "mas", "1", "mas",
    ];
    // The long session has a drift and a scan, too.
    let moves = which == Session::Season;
    let record = Record {
        schema_version: SCHEMA_VERSION,
        program_version: "0.1.0".to_owned(),
        site_name: "Corrie Head".to_owned(),
        time_utc: [utc(sequences[0].0), utc(sequences[sequences.len() - 1].0 + 78.0)],
        summary: String::new(),
        created_from: created_from(&mut noise),
        settings: serde_json::json!({
            "site": {"name": "Corrie Head", "latitude_deg": 30.94, "longitude_deg": 57.38,
                     "height_m": 2240.0},
            "select": {"criterion": "edge width"},
        }),
        seed: 20_260_621,
        shape: ShapeRecord {
            p4: if separated { shape(-1.3 * scale, 9.4 * scale, 1.8 * scale, "mas") }
                else { ShapeQuantity::not_separated("mas", REASON) },
            null_tests: null_tests(scale, separated),
            instrument: instrument(scale, separated),
            drivers: Vec::new(),
            air: AirRecord {
                scale: Quantity::measured(1.0021, 0.0105, "1"),
                vertical_residual: if separated { Quantity::measured(3.4, 6.1, "mas") }
                    else { Quantity::missing("mas", "the same at all zenith distances seen") },
            },
            separation: Separation {
                rank: if separated { 10 } else { 7 },
                unknowns: 10,
                condition_number: separated.then_some(38.4),
                correlation_sun_instrument: separated.then_some(-0.22),
                correlation_sun_air: separated.then_some(0.41),
                singular_values: if separated {
                    vec![2.31, 1.94, 1.71, 1.40, 1.22, 1.03, 0.81, 0.52, 0.21, 0.0602]
                } else {
                    vec![1.9, 1.5, 1.4, 1.1, 0.9, 0.4, 0.09, 3e-15, 1e-16, 0.0]
                },
            },
            by_stack: ByStack {
                oblateness: if separated { shape(11.8 - 3.6 * (1.0 - scale), 13.0 * scale, 5.6 * scale, "mas") }
                    else { ShapeQuantity::not_separated("mas", REASON) },
                radius: shape(959.866, 0.047, 0.192, "arcsec"),
                p4: if separated { shape(0.6, 10.2 * scale, 1.8 * scale, "mas") }
                    else { ShapeQuantity::not_separated("mas", REASON) },
                difference_sigma: separated.then_some(0.43),
                stacks: 8,
                removed_mas: separated.then_some([-3.1, 0.4]),
                sharpness: Some(StackSharpness {
                    stack_per_arcsec: 0.242,
                    mean_per_arcsec: 0.171,
                    gain: 1.415,
                    gain_predicted: 1.402,
                    how: "energy of the edge".to_owned(),
                }),
                reason: (!separated).then(|| "the oblateness was not separated".to_owned()),
            },
            covariance: covariance(&terms, &units, scale),
            definitions: definitions(&radius, &oblateness),
            kept_curve: kept_curve(&mut noise, scale, &oblateness, &radius),
            random_error: random_error(),
            kept_slope: kept_slope(scale, &oblateness),
            quadrupole: Quadrupole {
                j2: match which {
                    Session::Season => Quantity::measured(2.18e-7, 4.3e-7, "1"),
                    Session::Short => Quantity::measured(1.0e-6, 8.6e-6, "1"),
                    Session::Refused => Quantity::missing("1", "the oblateness was not separated"),
                },
                perihelion: if separated { Quantity::measured(0.028, 0.055 , "arcsec/century") }
                    else { Quantity::missing("arcsec/century", "the oblateness was not separated") },
                rotation_figure: Quantity::measured(7.84, 0.12, "mas"),
                rotation_law: "middle".to_owned(),
                excess: if separated { Quantity::measured(0.31, 0.62, "mas") }
                    else { Quantity::missing("mas", "the oblateness was not separated") },
                j2_beside_j4: Quantity::missing("1", "the next harmonic was not separated"),
                j4: Quantity::missing("1", "the next harmonic was not separated"),
                perihelion_by_relativity: Quantity::computed(42.98, "arcsec/century"),
                by_law: Vec::new(),
                note: None,
            },
            masking: Some(masking(separated)),
            axis_blur: Vec::new(),
            oblateness,
            radius,
        },
        seeing: seeing(separated),
        turbulence: TurbulenceRecord {
            floor: Quantity::measured(10.7 * scale, 0.6 * scale, "mas"),
            share: if separated { Quantity::measured(0.745, 0.06, "1") }
                else { Quantity::missing("1", "the oblateness was not separated") },
            hours_to: HoursTo {
                one_mas: if which == Session::Season { Quantity::computed(3.1, "h") }
                    else { Quantity::missing("h", "systematics alone exceed 1 mas") },
                half_mas: if which == Session::Season { Quantity::computed(14.6, "h") }
                    else { Quantity::missing("h", "systematics alone exceed 0.5 mas") },
            },
            observed_over_predicted: Quantity::measured(1.04, 0.05, "1"),
            harmonics: Vec::new(),
        },
        refraction: sequences.iter().enumerate().map(|(k, it)| refraction(k, it.2)).collect(),
        selection: SelectionRecord {
            read: 80 * sequences.len() + 12,
            usable: 80 * sequences.len(),
            used: 64 * sequences.len(),
            rejected: vec![
                Rejection { reason: "limb cut by a cloud edge".to_owned(), frames: 9 },
                Rejection { reason: "frame without a readable time".to_owned(), frames: 3 },
                Rejection { reason: "edge wider than the kept four fifths".to_owned(), frames: 128 },
            ],
            kept_fraction: 0.8,
            criterion: "width of the edge with the harmonics m = 0 to 4 projected out".to_owned(),
            blind_to_shape: "the criterion is the same for any change of radius, ellipse or P4"
                .to_owned(),
            gain: 1.13,
            sigma_all_and_kept_mas: separated.then_some([12.7 * scale, 11.2 * scale]),
            weighting_gain: separated.then_some(1.06),
        },
        budget,
        sequences: sequences
            .iter()
            .enumerate()
            .map(|(k, it)| sequence(k, *it, &mut noise, scale))
            .collect(),
        camera: moves.then(motion::camera),
        drifts: moves.then(|| motion::drift(&mut noise)).into_iter().collect(),
        scans: moves.then(|| motion::scan(&mut noise)).into_iter().collect(),
        by_scan: moves.then(motion::by_scan),
        masked: vec![
            MaskedArc { sequence: 0, from_deg: 41.0, to_deg: 49.5, frames: 1.0, reason: "bright structure at the limb".to_owned() },
            MaskedArc { sequence: 0, from_deg: 212.0, to_deg: 214.0, frames: 0.0375, reason: "dust on the window".to_owned() },
        ],
        warnings: vec![
            WarningRecord { code: "air_pressure_range".to_owned(), text: "The station's pressure, 778 hPa, is below the 800 hPa that the formula of the refractive index was checked at.".to_owned() },
            WarningRecord { code: "time_ut1".to_owned(), text: "UT1-UTC was not given and is taken as 0; its effect is in the budget.".to_owned() },
        ],
    };
    let traces = traces(&mut noise, sequences, scale, separated);
    (record, traces)
}

fn created_from(noise: &mut Noise) -> Vec<SourceFile> {
    (0..4)
        .map(|k| SourceFile {
            path: format!("burst_{k:03}.fits"),
            bytes: 167_774_400 + 2880 * k,
            sha256: (0..64)
                .map(|_| char::from(b"0123456789abcdef"[(noise.uniform() * 16.0) as usize]))
                .collect(),
        })
        .collect()
}
