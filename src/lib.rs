//! From raw frames of the solar disk to the true shape of its limb, the air taken out.
//!
//! Every stage is one function: typed input, its settings, typed output. The modules stand in the
//! order of the data, and a module uses only modules declared above it.
//!
//! | stage | function | from | to |
//! |-------|----------|------|----|
//! | session | [`session::read`] | `session.toml` | [`session::Session`] |
//! | frames | [`frames::list`], [`frames::Reader`] | FITS files | planes in a reused buffer |
//! | calibration | [`calibrate::load`] | dark, flat, bad pixels | [`calibrate::Calibration`] |
//! | limb | [`limb::extract`] | a raw frame | [`limb::ObservedLimb`] |
//! | refraction | [`refraction::remove`] | [`limb::ObservedLimb`] | [`refraction::TrueLimb`] |
//! | seeing | [`seeing::by_motion`] | harmonics in time | [`seeing::MotionSeeing`] |
//! | drift | [`drift::fit`] | centres of a Sun that drifts | scale, angle: [`drift::DriftFit`] |
//! | scan | [`scan::fit`] | transits over a slit | [`scan::ScanFit`] |
//! | selection | [`select::weights`], [`select::sharpest`] | sharpness, high harmonics | weights |
//! | stack | [`stack::Stack`] | kept frames | image, variance, weight |
//! | shape | [`shape::fit`] | blocks of frames | [`shape::Fit`] |
//! | budget | [`budget`] | the fit, the limb's model | [`shape::Contribution`] |
//! | comparison | [`compare::against`] | results, published values | [`result::comparison::Comparison`] |
//! | gravity | [`gravity::interior`] | the figure, a rotation law | [`gravity::Interior`] |
//! | season | [`season::combine`] | records of many sessions | [`result::combined::Combined`] |
//! | report | [`report::render`] | [`result::record::Record`] | HTML and SVG |
//! | recovery | [`recover::recover`] | a session, known shapes | [`result::recovery::Recovery`] |
//! | plan | [`plan::plan`] | a session, a date | [`result::plan::Plan`] |
//! | the whole | [`pipeline::reduce`] | [`session::Session`] | [`pipeline::Outcome`] |
//!
//! Each frame is read once for its limb, and the kept ones once more for the stack; memory does not
//! grow with their number. Refraction is removed from every frame's limb at its own time. The limbs
//! of all kept frames go to one fit of Sun, instrument and air, whose covariance holds what is known
//! of the inputs; the limb of the stack goes to the same fit as a check.
//!
//! ```no_run
//! use std::path::Path;
//! use truelimb::{pipeline, session};
//!
//! let session = session::read(Path::new("session.toml")).map_err(truelimb::Error::from)?;
//! let outcome = pipeline::reduce(&session, &pipeline::Options::default(), &pipeline::Silent)?;
//! println!("{}", outcome.record.summary);
//! pipeline::products::write(&outcome, &session, Path::new("result"))?;
//! # Ok::<(), truelimb::Error>(())
//! ```
//!
//! # Conventions
//!
//! * Pixels are 0-based at their centres, `(x, y)`, x the fastest axis, y up.
//! * Detector angles run from +x towards +y; position angles from celestial north through east;
//!   bearings from the zenith in the sense of position angles.
//! * Zenith distances say whether they are apparent or true; refraction is true minus apparent.
//! * Distortions are apparent minus true radius; flattening is horizontal minus vertical radius.
//! * Oblateness is the equatorial minus the polar *radius*, at 1 AU.
//! * Times are UTC; the measurement stands at mid-exposure.
//!
//! # What this is not
//!
//! No image beautification, no control of a telescope, no absolute photometry.

#![warn(
    clippy::print_stdout,
    clippy::print_stderr,
    clippy::unwrap_used,
    clippy::expect_used
)]
#![cfg_attr(test, allow(clippy::unwrap_used, clippy::expect_used))]

pub mod units;
pub mod constants;
pub mod consensus;

pub mod sky;
pub mod air;
pub mod disk;
pub mod optics;
pub mod turbulence;

pub mod session;
pub mod frames;
pub mod calibrate;

pub mod limb;
pub mod shape;
pub mod refraction;
pub mod seeing;
pub mod drift;
pub mod scan;
pub mod select;
pub mod stack;
pub mod budget;
pub mod footing;
pub mod gravity;
pub mod result;
pub mod compare;
pub mod season;
pub mod report;

pub mod pipeline;
pub mod plan;
pub mod synth;
pub mod recover;

pub use pipeline::Error;

/// `DEVELOPERS.md`, so that it is read beside the code it is about.
#[doc = include_str!("../DEVELOPERS.md")]
pub mod developers {}

/// Runs the code in `README.md` as doc tests.
#[cfg(doctest)]
#[doc = include_str!("../README.md")]
struct ReadmeExamples;
