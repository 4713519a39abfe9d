//! Every key of the session file: name, unit, range, default and meaning.

mod mask;
mod model;
mod run;
mod station;
mod words;

pub(super) use words::{
    FORMULAS, KINDS, MOMENTS, MOUNTS, PARITIES, PROJECTIONS, ROTATIONS, SCALES_OF, VAPOURS,
};

use super::keys::Absent::Open;
use super::keys::{Form, Key, Table};
use mask::MASK;
use model::{GRAVITY, LIMB, REFRACTIVITY, TIME, WEATHER};
use run::{ENVIRONMENT, HEADERS, SEQUENCE};
use station::{CALIBRATION, CAMERA, FILTER, INSTRUMENT, SITE, TELESCOPE};

/// The whole file.
pub(super) static SESSION: Table = Table::plain(
    "A session: the station, the instrument, the air, and the sequences of frames.",
    &[
        Key::new(
            "base",
            Form::File,
            Open,
            "A file of the same form that this one overrides, key by key.",
        ),
        Key::new("site", Form::Table(&SITE), Open, "The place."),
        Key::new(
            "telescope",
            Form::Table(&TELESCOPE),
            Open,
            "The telescope and its mount.",
        ),
        Key::new("filter", Form::Table(&FILTER), Open, "The band."),
        Key::new(
            "camera",
            Form::Table(&CAMERA),
            Open,
            "The detector, its scale and place on the sky.",
        ),
        Key::new(
            "instrument",
            Form::Table(&INSTRUMENT),
            Open,
            "What is known of the optics by other means.",
        ),
        Key::new(
            "calibration",
            Form::Table(&CALIBRATION),
            Open,
            "Dark and flat of the session.",
        ),
        Key::new(
            "weather",
            Form::Table(&WEATHER),
            Open,
            "The air at the station.",
        ),
        Key::new(
            "refractivity",
            Form::Table(&REFRACTIVITY),
            Open,
            "How the air bends light.",
        ),
        Key::new(
            "time",
            Form::Table(&TIME),
            Open,
            "What the times in the headers mean.",
        ),
        Key::new(
            "limb",
            Form::Table(&LIMB),
            Open,
            "How the limb is measured.",
        ),
        Key::new(
            "gravity",
            Form::Table(&GRAVITY),
            Open,
            "What the figure is compared with.",
        ),
        Key::new(
            "mask",
            Form::Table(&MASK),
            Open,
            "A picture of the Sun that says which arcs of the limb to leave out.",
        ),
        Key::new(
            "headers",
            Form::Table(&HEADERS),
            Open,
            "FITS keywords of a station that names them otherwise.",
        ),
        Key::new(
            "environment",
            Form::Table(&ENVIRONMENT),
            Open,
            "Readings against which the instrument may drift.",
        ),
        Key::new(
            "sequence",
            Form::Tables(&SEQUENCE),
            Open,
            "A sequence of frames.",
        ),
    ],
);
