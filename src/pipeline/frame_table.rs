//! The table of frames: harmonics of each limb, and how much each of them moves the result.
//!
//! The fit is linear in the harmonics, so that `sum of influence * change` is what any change of the
//! frames' harmonics does to the result: a suspected frame, another refraction, a known turbulence.

use crate::frames::{Column, Values};
use crate::result::record::FrameTrace;

/// Names of the harmonics as columns.
const HARMONICS: [&str; 7] = ["RADIUS", "COS2", "SIN2", "COS3", "SIN3", "COS4", "SIN4"];

/// What the influence is on, as the front of a column's name and in words.
const ON: [(&str, &str); 3] = [("R", "the radius"), ("O", "the oblateness"), ("P", "P4")];

/// Columns of the frames' table.
pub(super) fn columns(frames: &[FrameTrace]) -> Vec<Column> {
    let of = |f: &dyn Fn(&FrameTrace) -> f64| Values::F64(frames.iter().map(f).collect());
    let whole = |f: &dyn Fn(&FrameTrace) -> usize| {
        Values::I32(frames.iter().map(|it| f(it) as i32).collect())
    };
    let mut out = vec![
        Column::new("SEQUENCE", whole(&|it| it.sequence))
            .describe("index in the session file, from 0")
            .ucd("meta.id"),
        Column::new("FRAME", whole(&|it| it.frame))
            .describe("index in the sequence, from 0")
            .ucd("meta.id"),
        Column::new("TIME", of(&|it| it.time_s))
            .unit("s")
            .describe("mid-exposure after DATEREF")
            .ucd("time.epoch"),
        Column::new(
            "KEPT",
            Values::U8(frames.iter().map(|it| u8::from(it.kept)).collect()),
        )
        .describe("1 where it went to the fit")
        .ucd("meta.code"),
        Column::new("WEIGHT", of(&|it| it.weight))
            .describe("weight from the seeing")
            .ucd("stat.weight"),
        Column::new("NORTH", of(&|it| it.north_deg))
            .unit("deg")
            .describe("detector angle of celestial north")
            .ucd("pos.posAng;instr.det"),
    ];
    for (c, name) in HARMONICS.iter().enumerate() {
        out.push(
            Column::new(name, of(&|it| it.harmonics_mas[c]))
                .unit("mas")
                .describe("of the limb at 1 AU, air taken out, on the detector")
                .ucd("phys.angSize"),
        );
    }
    for (q, (front, what)) in ON.iter().enumerate() {
        for (c, name) in HARMONICS.iter().enumerate() {
            out.push(
                Column::new(&format!("{front}_{name}"), of(&|it| it.influence[q][c]))
                    .describe(&format!("what 1 mas of {name} adds to {what}, mas"))
                    .ucd("stat.param"),
            );
        }
    }
    out
}
