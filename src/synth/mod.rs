//! Sessions with a known truth: what a telescope, its camera and the air would have made of a Sun of
//! a given figure.
//!
//! | file | what |
//! |------|------|
//! | `scenario`, `check` | what the session is like |
//! | `sky_above` | Sun, camera and air at every frame |
//! | `figure` | the limb as it is seen and distorted |
//! | `screens`, `seeing` | frozen turbulence, and what it does to the limb |
//! | `profile_table`, `render` | light on the pixels |
//! | `transit` | transits over a line detector |
//! | `detector`, `draw` | counts |
//! | `text`, `truth`, `folder`, `make` | the files |
//!
//! What the observer is told (`session.toml`, `weather.csv`) is wrong by random errors of the stated
//! sigmas, as in life; `truth.json` says what is true.
//!
//! Not simulated: the filter's width, blur that differs from one part of the limb to another,
//! scintillation, spots and granulation, a rolling shutter.

mod check;
mod detector;
mod draw;
mod error;
mod figure;
mod folder;
mod make;
mod profile_table;
mod render;
mod scenario;
mod screens;
mod seeing;
mod sky_above;
#[cfg(test)]
mod tests;
mod text;
mod transit;
mod truth;

pub use error::SynthError;
pub use make::make;
pub use scenario::{
    Distortion, Layer, MountKind, Scenario, SequenceKind, SequencePlan, Shape, Site, Weather,
    read_scenario,
};
pub use screens::longest_outer_scale_m;
pub use truth::{FrameTruth, KnowledgeErrors, SequenceTruth, Truth};
