//! Sessions written to a folder of their own and read back.

#![expect(
    clippy::float_cmp,
    reason = "what is written in decimal is read back digit for digit"
)]

mod correct;
mod faults;
mod layers;
mod readings;

use std::path::PathBuf;

use super::{FaultKind, Session, SessionError, read};

/// A folder with a session of a mountain station and the files it names.
struct Bench {
    folder: tempfile::TempDir,
}

/// A complete session in the form in which other programs write it.
const COMPLETE: &str = r#"[site]
name = "Corrie Head"
latitude_deg = 30.94
longitude_deg = 57.38   # east positive
height_m = 2240.0

[telescope]
aperture_m = 0.2
central_obstruction = 0.0   # linear, fraction of the aperture
mount = "equatorial"

[filter]
centre_nm = 550.0
width_nm = 5.0

[camera]
scale_arcsec_px = 4.1001234
scale_sigma_rel = 0.0002
angle_deg = 3.21000   # position angle of +y, north through east
angle_sigma_deg = 0.03
parity = "sky"
gain_e_adu = 12.0
projection = "arc"   # angle proportional to pixels
read_noise_e = 8.0
saturation_adu = 4095

[calibration]
dark = ["dark.fits"]
flat = ["flat.fits"]

[weather]
log = "weather.csv"
pressure_sigma_hpa = 0.5
temperature_sigma_c = 0.6
humidity_sigma = 0.04

[refractivity]
layer_tilt_sigma_arcmin = 2.0
layer_tilt_tau_min = 20.0

[[sequence]]
kind = "burst"
files = ["burst_000.fits"]

[[sequence]]
kind = "roll"
files = ["roll_001.fits"]
roll_deg = 45

[instrument]
distortion_sigma_mas = 0.5   # known free of distortion to this, per harmonic
"#;

/// A log of half an hour.
const LOG: &str = "time_utc,pressure_hpa,temperature_c,relative_humidity
2026-06-21T09:00:00.000Z,778.10,9.20,0.350
2026-06-21T09:05:00.000Z,778.00,9.40,0.340
2026-06-21T09:10:00.000Z,777.90,9.60,0.330
2026-06-21T09:25:00.000Z,777.60,10.20,0.300
";

impl Bench {
    /// The folder with frames, dark, flat and log.
    fn new() -> Self {
        let bench = Self {
            folder: tempfile::tempdir().unwrap(),
        };
        for name in ["dark.fits", "flat.fits", "burst_000.fits", "roll_001.fits"] {
            bench.write(name, "");
        }
        bench.write("weather.csv", LOG);
        bench
    }

    /// Writes a file.
    fn write(&self, name: &str, text: &str) -> PathBuf {
        let path = self.folder.path().join(name);
        std::fs::create_dir_all(path.parent().unwrap()).unwrap();
        std::fs::write(&path, text).unwrap();
        path
    }

    /// Reads a session of that text.
    fn read(&self, text: &str) -> Result<Session, SessionError> {
        read(&self.write("session.toml", text))
    }

    /// Reads the complete session with one text in place of another.
    fn with(&self, from: &str, to: &str) -> Result<Session, SessionError> {
        assert!(COMPLETE.contains(from), "{from}");
        self.read(&COMPLETE.replace(from, to))
    }

    /// The only fault of the complete session with one text in place of another.
    fn only_fault(&self, from: &str, to: &str) -> super::Fault {
        only(self.with(from, to))
    }
}

/// The only fault.
fn only(result: Result<Session, SessionError>) -> super::Fault {
    let error = result.unwrap_err();
    assert_eq!(error.faults.len(), 1, "{error}");
    error.faults[0].clone()
}

/// Kind, key and line of each fault.
fn places(error: &SessionError) -> Vec<(FaultKind, &str, usize)> {
    error
        .faults
        .iter()
        .map(|it| (it.kind, it.key.as_str(), it.line))
        .collect()
}
