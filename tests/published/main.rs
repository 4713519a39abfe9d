//! Checks against the world outside: published tables, worked examples, standards, simulations.
//!
//! A file a source; each opens with the source's name and uses the source's own half digit. They
//! are one binary, so that they share readers and compile once.

mod band;
mod ciddor_1996;
mod disk_transform;
mod drift_transits;
mod finite_fourier_edge_1975;
mod fits_readers;
mod limb_darkening;
mod limb_displacement;
mod limb_extraction;
mod limb_map;
mod limb_motion_kernels;
mod meeus_1998;
mod motion_sessions;
mod reda_andreas_2004;
mod refraction_integral;
mod refraction_properties;
mod refraction_tables;
mod refractivity_formulas;
mod seeing_scales;
mod sky_orientation;
mod sky_track;
mod sun_place;
mod time_scales;
mod transfer_functions;
