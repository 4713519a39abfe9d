//! The refraction of light by the atmosphere: refractive index, bending, the map of the disk.
//!
//! Conditions at the station give a refractivity; refractivity and site give a profile of the air
//! above; the profile gives the bending of a ray; the bending, tabulated over a disk, gives the map
//! between where the limb is seen and where it truly is. Zenith distances are apparent or true and
//! say which; bearings about a centre count from the direction of the zenith, positive north through
//! east.

mod band;
mod bending;
mod ciddor;
mod conditions;
mod disk_map;
mod distortion;
mod earth;
mod error;
mod even_table;
mod extinction;
mod integral;
mod layer;
mod layered;
mod mathar;
mod other_formulas;
mod profile;
mod refractivity;
mod sensitivity;
mod sounding;
mod station;
mod table;
mod vapour;

pub use band::{Band, BandInAir, BandLight, Smear, solar_photons};
pub use bending::{Bending, TABLE_HALF_WIDTH_RAD};
pub use ciddor::{ciddor_refractivity, compressibility};
pub use conditions::{Conditions, STATION_HEIGHT_M, Site, standard_pressure_hpa};
pub use disk_map::{DiskMap, Jacobian};
pub use distortion::{AnalyticDistortion, Distortion, distortion, distortion_analytic};
pub use earth::{gravity_m_s2, local_radius_m};
pub use error::{AirError, AirWarning};
pub use extinction::{air_mass, molecular_depth, molecular_transmission};
pub use layered::{LapseLayer, LayeredGas};
pub use other_formulas::birch_downs_refractivity;
pub use profile::{Profile, ProfileSettings};
pub use refractivity::{
    RefractivityFormula, refractivity, refractivity_warnings, vapour_pressure_hpa, zenith_warning,
};
pub use sensitivity::{
    Sensitivities, Sensitivity, TiltEffect, sensitivity, tilt_effect_on_flattening,
};
pub use sounding::SoundingLevel;
pub use station::StationAir;
pub use table::{
    BandRow, RefractionRow, TABLE_RADIUS_ARCSEC, ZenithArgument, band_table, refraction_table,
};
pub use vapour::{VapourConvention, enhancement, vapour_mole_fraction};
