//! The words of keys that hold one of several.

/// Names of the ways a frame came about.
pub(in crate::session) const KINDS: &[&str] = &["burst", "roll", "drift", "scan", "limbs"];
/// Names of the mounts.
pub(in crate::session) const MOUNTS: &[&str] = &["equatorial", "coelostat", "altazimuth", "fixed"];
/// Names of the moments that a frame's time may mean.
pub(in crate::session) const MOMENTS: &[&str] = &["start", "middle", "end"];
/// Names of the projections.
pub(in crate::session) const PROJECTIONS: &[&str] = &["tan", "arc"];
/// Names of the parities.
pub(in crate::session) const PARITIES: &[&str] = &["sky", "mirrored"];
/// Names of what the scale is of.
pub(in crate::session) const SCALES_OF: &[&str] = &["apparent", "sky"];
/// Names of the formulas of refractivity.
pub(in crate::session) const FORMULAS: &[&str] = &[
    "ciddor-1996",
    "birch-downs-1994",
    "owens-1967",
    "iag-1999",
    "mathar-2007",
];
/// Names of the laws of the surface's rotation.
pub(in crate::session) const ROTATIONS: &[&str] = &[
    "middle",
    "snodgrass-ulrich-1990",
    "snodgrass-1983",
    "howard-harvey-1970",
    "uniform",
];
/// Names of what relative humidity is relative to.
pub(in crate::session) const VAPOURS: &[&str] =
    &["water-giacomo", "water-iapws", "ice-below-zero-iapws"];
