//! Keys of the frames: their headers, their sequences, and readings beside them.

use super::station::{CAMERA, FILTER};
use super::words::KINDS;
use crate::session::keys::Absent::{Number, Open, Required};
use crate::session::keys::{Form, Key, Table};

const KEYWORD: Form = Form::Keyword;

pub(super) static HEADERS: Table = Table::plain(
    "FITS keywords of a station that names them otherwise; what the session file says itself wins.",
    &[
        Key::new(
            "date",
            KEYWORD,
            Open,
            "Time of the exposure, UTC, in place of DATE-BEG or DATE-OBS.",
        ),
        Key::new(
            "exposure_s",
            KEYWORD,
            Open,
            "Exposure in seconds, in place of XPOSURE or EXPTIME.",
        ),
        Key::new(
            "latitude_deg",
            KEYWORD,
            Open,
            "Latitude, degrees, north positive.",
        ),
        Key::new(
            "longitude_deg",
            KEYWORD,
            Open,
            "Longitude, degrees, east positive.",
        ),
        Key::new("height_m", KEYWORD, Open, "Height, metres."),
        Key::new("aperture_m", KEYWORD, Open, "Aperture, metres."),
        Key::new(
            "centre_nm",
            KEYWORD,
            Open,
            "Centre of the band, nanometres.",
        ),
        Key::new("width_nm", KEYWORD, Open, "Width of the band, nanometres."),
        Key::new(
            "scale_arcsec_px",
            KEYWORD,
            Open,
            "Scale, arcseconds a pixel.",
        ),
        Key::new("angle_deg", KEYWORD, Open, "Position angle of +y, degrees."),
        Key::new("gain_e_adu", KEYWORD, Open, "Electrons for a count."),
        Key::new("read_noise_e", KEYWORD, Open, "Read noise, electrons."),
        Key::new("saturation_adu", KEYWORD, Open, "Counts at saturation."),
    ],
);

pub(super) static ENVIRONMENT: Table = Table {
    keys: &[
        Key::new(
            "log",
            Form::File,
            Open,
            "CSV of time_utc and any columns of numbers.",
        ),
        Key::new(
            "columns",
            Form::Texts,
            Open,
            "Columns to use; without it all columns of the log.",
        ),
    ],
    excludes: &[],
    one_of: &["log"],
    together: &[],
    doc: "Readings, such as the tube's temperature, against which the instrument may drift.",
};

pub(super) static SEQUENCE: Table = Table {
    keys: &[
        Key::new(
            "name",
            Form::Text,
            Open,
            "Name of the sequence, for the reader.",
        ),
        Key::new(
            "kind",
            Form::Choice(KINDS),
            Required,
            "How the frames came about.",
        ),
        Key::new(
            "files",
            Form::Files,
            Required,
            "The frames, or the tables of limbs.",
        ),
        Key::number(
            "roll_deg",
            ("deg", -360.0, 360.0),
            Number(0.0),
            "Added to the angle of the camera.",
        ),
        Key::above(
            "line_s",
            ("s", 0.0, 60.0),
            Open,
            "Scan: seconds from line to line.",
        ),
        Key::new(
            "dark",
            Form::Files,
            Open,
            "Dark frames of this sequence, in place of the session's.",
        ),
        Key::new(
            "flat",
            Form::Files,
            Open,
            "Flat frames of this sequence, in place of the session's.",
        ),
        Key::new(
            "camera",
            Form::Table(&CAMERA),
            Open,
            "What differs from the session's camera.",
        ),
        Key::new(
            "filter",
            Form::Table(&FILTER),
            Open,
            "What differs from the session's filter.",
        ),
    ],
    excludes: &[],
    one_of: &[],
    together: &[],
    doc: "A sequence of frames of one kind.",
};
