//! Keys of the station and its instrument.

use super::words::{MOUNTS, PARITIES, PROJECTIONS, SCALES_OF};
use crate::session::keys::Absent::{Number, Open, Required, Word};
use crate::session::keys::{Form, Key, Table};

pub(super) static SITE: Table = Table::plain(
    "The place of the telescope, geodetic, WGS84.",
    &[
        Key::new("name", Form::Text, Word("unnamed"), "Name of the station."),
        Key::number(
            "latitude_deg",
            ("deg", -90.0, 90.0),
            Required,
            "Geodetic latitude, north positive.",
        )
        .or_header(&["OBSGEO-B"]),
        Key::number(
            "longitude_deg",
            ("deg", -180.0, 360.0),
            Required,
            "Longitude, east positive.",
        )
        .or_header(&["OBSGEO-L"]),
        Key::number(
            "height_m",
            ("m", -500.0, 2e9),
            Required,
            "Height above the ellipsoid; with air, -400 to 45000 m.",
        )
        .or_header(&["OBSGEO-H"]),
        Key::number(
            "deflection_north_arcsec",
            ("arcsec", -120.0, 120.0),
            Number(0.0),
            "Deflection of the vertical: astronomical minus geodetic latitude.",
        ),
        Key::number(
            "deflection_east_arcsec",
            ("arcsec", -120.0, 120.0),
            Number(0.0),
            "Deflection of the vertical: astronomical minus geodetic longitude, times cos latitude.",
        ),
    ],
);

pub(super) static TELESCOPE: Table = Table::plain(
    "The telescope and its mount.",
    &[
        Key::above(
            "aperture_m",
            ("m", 0.0, 10.0),
            Required,
            "Diameter of the entrance pupil.",
        ),
        Key::number(
            "central_obstruction",
            ("of the aperture's diameter", 0.0, 0.9),
            Number(0.0),
            "Linear central obstruction.",
        ),
        Key::new(
            "mount",
            Form::Choice(MOUNTS),
            Required,
            "How the field lies: a coelostat (two mirrors) keeps it to the sky, altazimuth and fixed to the vertical.",
        ),
    ],
);

pub(super) static FILTER: Table = Table {
    keys: &[
        Key::number(
            "centre_nm",
            ("nm", 200.0, 20000.0),
            Open,
            "Centre of the band, in vacuum.",
        ),
        Key::above(
            "width_nm",
            ("nm", 0.0, 2000.0),
            Open,
            "Full width at half maximum.",
        ),
        Key::new(
            "curve",
            Form::File,
            Open,
            "CSV of wavelength_nm, transmission, in place of centre and width.",
        ),
    ],
    excludes: &[(&["curve"], &["centre_nm", "width_nm"])],
    one_of: &["centre_nm", "curve"],
    together: &[&["centre_nm", "width_nm"]],
    doc: "The band.",
};

pub(super) static CAMERA: Table = Table::plain(
    "The detector, its scale and its place on the sky.",
    &[
        Key::above(
            "scale_arcsec_px",
            ("arcsec/px", 0.0, 1000.0),
            Required,
            "Nominal scale on the detector.",
        ),
        Key::number(
            "scale_sigma_rel",
            ("relative", 0.0, 0.5),
            Number(1e-3),
            "Standard uncertainty of the scale.",
        ),
        Key::new(
            "scale_of",
            Form::Choice(SCALES_OF),
            Word("apparent"),
            "apparent: of the direction as it arrives; sky: found on stars through the air near the zenith.",
        ),
        Key::number(
            "angle_deg",
            ("deg", -360.0, 360.0),
            Required,
            "Position angle of +y, north through east; from the zenith for altazimuth and fixed.",
        ),
        Key::number(
            "angle_sigma_deg",
            ("deg", 0.0, 180.0),
            Number(0.1),
            "Standard uncertainty of the angle.",
        ),
        Key::new(
            "projection",
            Form::Choice(PROJECTIONS),
            Word("tan"),
            "tan: flat detector behind a lens; arc: angle proportional to pixels.",
        ),
        Key::new(
            "parity",
            Form::Choice(PARITIES),
            Word("sky"),
            "sky: +x is 90 deg clockwise of +y on the sky; mirrored: the other way.",
        ),
        Key::above(
            "gain_e_adu",
            ("e/ADU", 0.0, 1e5),
            Required,
            "Electrons for a count.",
        ),
        Key::number(
            "read_noise_e",
            ("e", 0.0, 1e5),
            Number(10.0),
            "Read noise, rms.",
        ),
        Key::above(
            "saturation_adu",
            ("ADU", 0.0, 1e10),
            Open,
            "Counts at and above which a pixel is saturated.",
        ),
        Key::number(
            "readout_s",
            ("s", 0.0, 60.0),
            Open,
            "Time from the first row's exposure to the last row's, for a rolling shutter.",
        ),
        Key::new(
            "bad_pixels",
            Form::File,
            Open,
            "FITS image, zero where a pixel is good.",
        ),
    ],
);

pub(super) static INSTRUMENT: Table = Table::plain(
    "What is known of the optics by other means.",
    &[
        Key::above(
            "distortion_sigma_mas",
            ("mas", 0.0, 1e5),
            Open,
            "Free of limb distortion of m = 2, 3, 4 to this, each.",
        ),
        Key::above(
            "drift_sigma_mas_per_hour",
            ("mas/h", 0.0, 1e5),
            Open,
            "The distortion may drift, linear in time, each coefficient by so much; without it it stands still.",
        ),
    ],
);

pub(super) static CALIBRATION: Table = Table::plain(
    "Dark and flat frames of the session.",
    &[
        Key::new(
            "dark",
            Form::Files,
            Open,
            "Dark frames: cubes or single frames.",
        ),
        Key::new(
            "flat",
            Form::Files,
            Open,
            "Flat frames: cubes or single frames.",
        ),
    ],
);
