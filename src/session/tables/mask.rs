//! Keys of the picture of the Sun that says which arcs of the limb to leave out.

use super::words::PARITIES;
use crate::session::keys::Absent::{Number, Open, Required, Word};
use crate::session::keys::{Form, Key, Table};

pub(super) static MASK: Table = Table {
    keys: &[
        Key::new(
            "image",
            Form::File,
            Required,
            "FITS image of the whole disk, as of the chromosphere, taken on the same day.",
        ),
        Key::number(
            "centre_x_px",
            ("px", 0.0, 65535.0),
            Required,
            "Centre of its disk along +x, the first pixel's centre being 0.",
        ),
        Key::number(
            "centre_y_px",
            ("px", 0.0, 65535.0),
            Required,
            "Centre of its disk along +y, the first pixel's centre being 0.",
        ),
        Key::number(
            "radius_px",
            ("px", 50.0, 65535.0),
            Required,
            "Radius of its disk.",
        ),
        Key::number(
            "angle_deg",
            ("deg", -360.0, 360.0),
            Number(0.0),
            "Position angle of its +y from solar north through east.",
        ),
        Key::new(
            "parity",
            Form::Choice(PARITIES),
            Word("sky"),
            "Whether it shows the sky as it is seen or mirrored.",
        ),
        Key::above(
            "brighter_than",
            ("of the limb's median", 1.0, 1000.0),
            Open,
            "Arcs brighter than this just inside the limb are left out.",
        ),
        Key::number(
            "darker_than",
            ("of the limb's median", 0.0, 0.99),
            Open,
            "Arcs darker than this just inside the limb are left out.",
        ),
    ],
    excludes: &[],
    one_of: &["brighter_than", "darker_than"],
    together: &[],
    doc: "A picture of the Sun that says which arcs of the limb to leave out.",
};
