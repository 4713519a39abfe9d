//! Keys of the air, the time and the measurement.

use super::words::{FORMULAS, MOMENTS, ROTATIONS, VAPOURS};
use crate::session::keys::Absent::{Number, Open, Whole, Word};
use crate::session::keys::{Form, Key, Table};

pub(super) static WEATHER: Table = Table {
    keys: &[
        Key::new(
            "log",
            Form::File,
            Open,
            "CSV of time_utc, pressure_hpa, temperature_c, relative_humidity.",
        ),
        Key::new(
            "columns",
            Form::Table(&WEATHER_COLUMNS),
            Open,
            "Names of the columns in the log, where they differ.",
        ),
        Key::new(
            "none",
            Form::Flag,
            Open,
            "true: above the air, no refraction and no seeing.",
        ),
        Key::above(
            "pressure_hpa",
            ("hPa", 0.0, 1100.0),
            Open,
            "Constant pressure at the station, not reduced to sea level.",
        ),
        Key::number(
            "temperature_c",
            ("C", -90.0, 60.0),
            Open,
            "Constant temperature of the free air.",
        ),
        Key::number(
            "relative_humidity",
            ("as a fraction", 0.0, 1.0),
            Open,
            "Constant relative humidity.",
        ),
        Key::new(
            "profile",
            Form::File,
            Open,
            "CSV of height_m, pressure_hpa, temperature_c, relative_humidity: a sounding.",
        ),
        Key::number(
            "pressure_sigma_hpa",
            ("hPa", 0.0, 100.0),
            Number(1.0),
            "Systematic uncertainty of the pressure, common to the session.",
        ),
        Key::number(
            "temperature_sigma_c",
            ("C", 0.0, 30.0),
            Number(1.0),
            "Systematic uncertainty of the temperature.",
        ),
        Key::number(
            "humidity_sigma",
            ("as a fraction", 0.0, 1.0),
            Number(0.1),
            "Systematic uncertainty of the relative humidity.",
        ),
    ],
    excludes: &[
        (
            &["none"],
            &[
                "log",
                "columns",
                "pressure_hpa",
                "temperature_c",
                "relative_humidity",
                "profile",
            ],
        ),
        (
            &["log", "columns"],
            &["pressure_hpa", "temperature_c", "relative_humidity"],
        ),
    ],
    one_of: &["log", "none", "pressure_hpa"],
    together: &[&["pressure_hpa", "temperature_c", "relative_humidity"]],
    doc: "The air at the station: a log, constants, or none.",
};

pub(super) static WEATHER_COLUMNS: Table = Table::plain(
    "Names of the columns in the weather log.",
    &[
        Key::new(
            "time_utc",
            Form::Text,
            Word("time_utc"),
            "Column of the time, UTC.",
        ),
        Key::new(
            "pressure_hpa",
            Form::Text,
            Word("pressure_hpa"),
            "Column of the pressure, hPa.",
        ),
        Key::new(
            "temperature_c",
            Form::Text,
            Word("temperature_c"),
            "Column of the temperature, C.",
        ),
        Key::new(
            "relative_humidity",
            Form::Text,
            Word("relative_humidity"),
            "Column of the relative humidity, as a fraction.",
        ),
    ],
);

pub(super) static REFRACTIVITY: Table = Table::plain(
    "How the air bends light.",
    &[
        Key::new(
            "formula",
            Form::Choice(FORMULAS),
            Word("ciddor-1996"),
            "Published formula of the refractivity.",
        ),
        Key::new(
            "vapour",
            Form::Choice(VAPOURS),
            Word("water-giacomo"),
            "What relative humidity is relative to.",
        ),
        Key::number(
            "co2_ppm",
            ("ppm", 0.0, 2000.0),
            Number(420.0),
            "Carbon dioxide by volume.",
        ),
        Key::number(
            "lapse_k_per_km",
            ("K/km", 2.0, 10.0),
            Number(6.5),
            "Fall of temperature with height in the troposphere.",
        ),
        Key::number(
            "tropopause_m",
            ("m", 5000.0, 20000.0),
            Number(11000.0),
            "Height of the tropopause above sea level.",
        ),
        Key::number(
            "wavelength_sigma_nm",
            ("nm", 0.0, 100.0),
            Number(0.5),
            "Uncertainty of the effective wavelength.",
        ),
        Key::number(
            "layer_tilt_sigma_arcmin",
            ("arcmin", 0.0, 60.0),
            Number(3.0),
            "Wander of the air's own zenith, each axis.",
        ),
        Key::above(
            "layer_tilt_tau_min",
            ("min", 0.0, 1440.0),
            Number(30.0),
            "Time scale of that wander.",
        ),
    ],
);

pub(super) static TIME: Table = Table::plain(
    "What the times in the headers mean.",
    &[
        Key::new(
            "date_obs",
            Form::Choice(MOMENTS),
            Word("start"),
            "Moment of the exposure that DATE-OBS gives.",
        ),
        Key::number(
            "clock_offset_s",
            ("s", -86400.0, 86400.0),
            Number(0.0),
            "Camera's clock minus UTC: taken from each time.",
        ),
        Key::number(
            "clock_sigma_s",
            ("s", 0.0, 3600.0),
            Number(0.1),
            "Standard uncertainty of that offset.",
        ),
        Key::number(
            "clock_rate_sigma_ppm",
            ("ppm", 0.0, 1000.0),
            Number(1.0),
            "Standard uncertainty of the clock's rate over a drift or a transit.",
        ),
        Key::number(
            "ut1_minus_utc_s",
            ("s", -0.9, 0.9),
            Number(0.0),
            "UT1 minus UTC.",
        ),
    ],
);

pub(super) static LIMB: Table = Table::plain(
    "How the limb is measured.",
    &[
        Key::number(
            "edge_scale_km",
            ("km", 10.0, 500.0),
            Number(80.0),
            "Scale height of the Sun's edge.",
        ),
        Key::number(
            "edge_scale_sigma_km",
            ("km", 0.0, 200.0),
            Number(15.0),
            "Standard uncertainty of it.",
        ),
        Key::new(
            "sectors",
            Form::Whole {
                low: 16,
                high: 1440,
            },
            Whole(120),
            "Sectors around the limb.",
        ),
        Key::above(
            "window_inside_arcsec",
            ("arcsec", 2.0, 200.0),
            Open,
            "Width of the annulus inside the limb; from blur and scale without it.",
        ),
        Key::above(
            "window_outside_arcsec",
            ("arcsec", 2.0, 200.0),
            Open,
            "Width of the annulus outside the limb; from blur and scale without it.",
        ),
    ],
);

pub(super) static GRAVITY: Table = Table::plain(
    "What the measured figure is compared with.",
    &[Key::new(
        "rotation",
        Form::Choice(ROTATIONS),
        Word("middle"),
        "Published law of the surface's rotation; middle: of the range of the three that depend on latitude.",
    )],
);
