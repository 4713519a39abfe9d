//! Checks against the world outside: published tables, worked examples, standards, simulations.
//!
//! A file a source; each opens with the source's name and uses the source's own half digit. They
//! are one binary, so that they share readers and compile once.

mod band;
mod ciddor_1996;
mod consensus_guides;
mod consensus_means;
mod consensus_trend;
mod disk_transform;
mod drift_transits;
mod finite_fourier_edge_1975;
mod fits_readers;
mod footing_limb;
mod gravity;
mod limb_darkening;
mod limb_displacement;
mod limb_extraction;
mod limb_map;
mod limb_motion_kernels;
mod limb_structure;
mod meeus_1998;
mod motion_inversion;
mod motion_monte_carlo;
mod motion_sessions;
mod orientation_design;
mod reda_andreas_2004;
mod refraction_integral;
mod refraction_properties;
mod refraction_tables;
mod refractivity_formulas;
mod seeing_scales;
mod selection_bias;
mod short_exposure_simulated;
mod sky_orientation;
mod sky_track;
mod sun_place;
mod time_scales;
mod transfer_functions;
