//! A profile from a sounding: levels of a balloon or of a reanalysis, joined to the station.
//!
//! # Model
//!
//! ```text
//! n - 1 = (a p - b e)/T
//! T linear in height between levels,  p = p_i x^k,  e = e_i x^d,  x = T/T_i
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `p`, `e` | pressure, vapour pressure | hPa |
//! | `T` | temperature | K |
//! | `k`, `d` | exponents that pass through both levels | - |
//! | `a`, `b` | coefficients; `a` makes the refractivity at the station exact | K/hPa |
//!
//! Levels at or below the station and up to 50 m above it give way to the station's own values. The
//! pressures are scaled, by 2 percent at most, to meet the station's barometer. Above the last level the
//! temperature falls as in the standard profile up to the tropopause, then stays.
//!
//! # Valid for
//!
//! Soundings that start at or below the station, with at least 3 levels more than 50 m above it.
//!
//! # Accuracy
//!
//! That of the sounding: by hydrostatics the profile enters the flattening in second order only.
//!
//! # Source
//!
//! Interpolation: common practice, no source.

use super::conditions::{Conditions, Site, within};
use super::error::AirError;
use super::layer::{Layer, Term};
use super::other_formulas::IAG_VAPOUR_K_PER_HPA;
use super::profile::{Gas, Profile, ProfileSettings};
use super::vapour::{VapourConvention, vapour_mole_fraction};

/// One level of a sounding.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SoundingLevel {
    /// Height above sea level, in metres.
    pub height_m: f64,
    /// Pressure, in hPa.
    pub pressure_hpa: f64,
    /// Temperature, in degrees Celsius.
    pub temperature_c: f64,
    /// Relative humidity, 0 to 1.
    pub relative_humidity: f64,
}

/// Levels closer to the station than this are the station's own air, in metres.
const JOIN_M: f64 = 50.0;
/// Below this change of ln T a layer is taken as isothermal; both forms agree to rounding.
const ISOTHERMAL: f64 = 1e-9;
/// Levels needed above the station.
const MIN_LEVELS: usize = 3;
/// Coldest air aloft, in degrees Celsius; the tropical tropopause falls below -90.
const COLDEST_C: f64 = -120.0;
/// Largest difference between sounding and barometer, in percent.
const MAX_PRESSURE_DIFFERENCE_PERCENT: f64 = 2.0;

/// A level ready for interpolation.
#[derive(Clone, Copy, Debug)]
struct Node {
    radius_m: f64,
    temperature_k: f64,
    dry: f64,
    wet: f64,
}

impl Profile {
    /// The profile of a sounding, joined to the air at the station.
    ///
    /// The arguments are those of [`Profile::standard`]; `v` is what the humidities of the sounding
    /// are relative to.
    ///
    /// # Errors
    ///
    /// An [`AirError`]: values out of range, levels out of order, a start above the station, too
    /// few levels, a pressure that contradicts the barometer, or a layer that traps light.
    #[expect(
        clippy::too_many_arguments,
        reason = "those of the standard profile and two more"
    )]
    pub fn from_sounding(
        levels: &[SoundingLevel],
        v: VapourConvention,
        site: &Site,
        c: &Conditions,
        refractivity0: f64,
        vapour_hpa: f64,
        s: &ProfileSettings,
        local_radius_m: f64,
    ) -> Result<Self, AirError> {
        // The standard profile checks every argument that the two have in common.
        Self::standard(site, c, refractivity0, vapour_hpa, s, local_radius_m)?;
        check_levels(levels, c, s)?;
        let Some(lowest) = levels.first().filter(|it| it.height_m <= site.height_m) else {
            let lowest_m = levels.first().map_or(f64::NAN, |it| it.height_m);
            return Err(AirError::SoundingStartsAbove {
                lowest_m,
                station_m: site.height_m,
            });
        };
        let above: Vec<_> = levels
            .iter()
            .filter(|it| it.height_m > site.height_m + JOIN_M)
            .copied()
            .collect();
        if above.len() < MIN_LEVELS {
            return Err(AirError::SoundingTooShort {
                found: above.len(),
                needed: MIN_LEVELS,
            });
        }
        let sounding_hpa = pressure_at_hpa(levels, lowest, site.height_m);
        let scale = c.pressure_hpa / sounding_hpa;
        if (scale - 1.0).abs() > 0.01 * MAX_PRESSURE_DIFFERENCE_PERCENT {
            return Err(AirError::SoundingPressure {
                sounding_hpa,
                station_hpa: c.pressure_hpa,
                allowed_percent: MAX_PRESSURE_DIFFERENCE_PERCENT,
            });
        }
        let b = IAG_VAPOUR_K_PER_HPA;
        let a = (refractivity0 * c.temperature_k() + b * vapour_hpa) / c.pressure_hpa;
        let node = |height_m: f64, pressure_hpa: f64, vapour_hpa: f64, temperature_k: f64| Node {
            radius_m: local_radius_m + height_m,
            temperature_k,
            dry: a * pressure_hpa / temperature_k,
            wet: -b * vapour_hpa / temperature_k,
        };
        let mut nodes = vec![node(
            site.height_m,
            c.pressure_hpa,
            vapour_hpa,
            c.temperature_k(),
        )];
        for it in &above {
            let air = conditions_of(it, c, scale);
            let vapour_hpa = air.pressure_hpa * vapour_mole_fraction(&air, v)?;
            nodes.push(node(
                it.height_m,
                air.pressure_hpa,
                vapour_hpa,
                air.temperature_k(),
            ));
        }
        let gas = Gas {
            latitude_rad: site.latitude_rad,
            height_m: site.height_m,
        };
        let mut layers: Vec<Layer> = nodes
            .windows(2)
            .map(|pair| between(&pair[0], &pair[1]))
            .collect();
        if let Some(last) = nodes.last() {
            continue_above(&mut layers, last, gas, s, local_radius_m);
        }
        Self::from_layers(layers, local_radius_m)
    }
}

fn conditions_of(it: &SoundingLevel, c: &Conditions, scale: f64) -> Conditions {
    Conditions {
        pressure_hpa: scale * it.pressure_hpa,
        temperature_c: it.temperature_c,
        relative_humidity: it.relative_humidity,
        co2_ppm: c.co2_ppm,
    }
}

fn check_levels(
    levels: &[SoundingLevel],
    c: &Conditions,
    s: &ProfileSettings,
) -> Result<(), AirError> {
    for (index, it) in levels.iter().enumerate() {
        within(
            "sounding height",
            it.height_m,
            (-500.0, s.top_m),
            "m",
            "the top of the air",
        )?;
        within(
            "sounding pressure",
            it.pressure_hpa,
            (1e-4, 1200.0),
            "hPa",
            "the air model",
        )?;
        conditions_of(it, c, 1.0).check_from(COLDEST_C)?;
        let rises = index == 0 || {
            let below = &levels[index - 1];
            it.height_m > below.height_m && it.pressure_hpa < below.pressure_hpa
        };
        if !rises {
            let (height_m, pressure_hpa) = (it.height_m, it.pressure_hpa);
            return Err(AirError::SoundingOrder {
                level: index + 1,
                height_m,
                pressure_hpa,
            });
        }
    }
    Ok(())
}

/// Pressure of the sounding at a height, temperature linear between levels, in hPa.
fn pressure_at_hpa(levels: &[SoundingLevel], lowest: &SoundingLevel, height_m: f64) -> f64 {
    let below = levels
        .iter()
        .rev()
        .find(|it| it.height_m <= height_m)
        .unwrap_or(lowest);
    let Some(above) = levels.iter().find(|it| it.height_m > height_m) else {
        return below.pressure_hpa;
    };
    let share = (height_m - below.height_m) / (above.height_m - below.height_m);
    let warming = (above.temperature_c - below.temperature_c)
        / (below.temperature_c + crate::units::CELSIUS_ZERO_K);
    let fall = (above.pressure_hpa / below.pressure_hpa).ln();
    let share_of_fall = if warming.abs() < ISOTHERMAL {
        share
    } else {
        (share * warming).ln_1p() / warming.ln_1p()
    };
    below.pressure_hpa * (fall * share_of_fall).exp()
}

/// The layer between two levels; it meets both exactly.
fn between(below: &Node, above: &Node) -> Layer {
    let thickness_m = above.radius_m - below.radius_m;
    let warming = above.temperature_k / below.temperature_k - 1.0;
    let term = |low: f64, high: f64| {
        if low == 0.0 && high == 0.0 {
            Term::NONE
        } else if low == 0.0 || high == 0.0 {
            Term::Linear {
                amplitude: low,
                slope_per_m: (high - low) / thickness_m,
            }
        } else if warming.abs() < ISOTHERMAL {
            Term::Exponential {
                amplitude: low,
                scale_m: -thickness_m / (high / low).ln(),
            }
        } else {
            let exponent = (high / low).ln() / warming.ln_1p();
            Term::Power {
                amplitude: low,
                per_m: warming / thickness_m,
                exponent,
            }
        }
    };
    Layer {
        base_radius_m: below.radius_m,
        thickness_m,
        dry: term(below.dry, above.dry),
        wet: term(below.wet, above.wet),
    }
}

/// Adds what lies above the last level.
fn continue_above(
    layers: &mut Vec<Layer>,
    last: &Node,
    gas: Gas,
    s: &ProfileSettings,
    local_radius_m: f64,
) {
    let mut base_m = last.radius_m - local_radius_m;
    let mut temperature_k = last.temperature_k;
    let mut refractivity = last.dry + last.wet;
    if base_m < s.tropopause_m {
        let exponent = gas.hydrostatic_k_per_m() / s.lapse_k_per_m - 1.0;
        let per_m = -s.lapse_k_per_m / temperature_k;
        let dry = Term::Power {
            amplitude: refractivity,
            per_m,
            exponent,
        };
        let thickness_m = s.tropopause_m - base_m;
        let base_radius_m = last.radius_m;
        let layer = Layer {
            base_radius_m,
            thickness_m,
            dry,
            wet: Term::NONE,
        };
        refractivity = layer.at(thickness_m).0;
        temperature_k -= s.lapse_k_per_m * thickness_m;
        base_m = s.tropopause_m;
        layers.push(layer);
    }
    if base_m < s.top_m {
        let radius_m = local_radius_m + base_m;
        layers.push(gas.isothermal(radius_m, s.top_m - base_m, refractivity, temperature_k));
    }
}
