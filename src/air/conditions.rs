//! The air at the station, and the checks that catch a wrong unit before it becomes a wrong shape.
//!
//! # Model
//!
//! The pressure is compared with the standard atmosphere of 1976 at the height of the station:
//!
//! ```text
//! p = p_b (T_b / T)^(g0 M / (R L))    or    p_b exp(-g0 M (H - H_b) / (R T_b))   where L = 0
//! H = r0 h / (r0 + h)
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `h`, `H` | geometric, geopotential height | m |
//! | `L` | gradient of the temperature | K/m |
//!
//! # Valid for
//!
//! Stations from -400 m to 45 km. Accepted are pressures from 14 percent below to 8 percent above
//! the standard (the extremes met at sea level), widened by 1.2 percent per kilometre of height.
//!
//! # Accuracy
//!
//! The standard atmosphere is exact by definition; the band is common practice, no source.
//!
//! # Source
//!
//! U.S. Standard Atmosphere, 1976, NOAA-S/T 76-1562.

use super::error::AirError;
use crate::units::CELSIUS_ZERO_K;

/// Heights of stations accepted, in metres.
pub const STATION_HEIGHT_M: (f64, f64) = (-400.0, 45_000.0);

/// Air at the station: free air at the level of the pupil, shielded and ventilated.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Conditions {
    /// Pressure at the station (not reduced to sea level), in hPa.
    pub pressure_hpa: f64,
    /// Temperature, in degrees Celsius.
    pub temperature_c: f64,
    /// Relative humidity, 0 to 1.
    pub relative_humidity: f64,
    /// Mole fraction of carbon dioxide, in ppm.
    pub co2_ppm: f64,
}

/// Where the telescope stands.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Site {
    /// Geodetic latitude, north positive, in radians.
    pub latitude_rad: f64,
    /// Height above sea level, in metres.
    pub height_m: f64,
}

/// Fails with [`AirError::OutOfRange`] unless `min <= found <= max`.
pub(super) fn within(
    quantity: &'static str,
    found: f64,
    (min, max): (f64, f64),
    unit: &'static str,
    set_by: &'static str,
) -> Result<(), AirError> {
    if (min..=max).contains(&found) {
        Ok(())
    } else {
        Err(AirError::OutOfRange {
            quantity,
            found,
            min,
            max,
            unit,
            set_by,
        })
    }
}

impl Conditions {
    /// Temperature on the absolute scale, in kelvin.
    pub fn temperature_k(&self) -> f64 {
        self.temperature_c + CELSIUS_ZERO_K
    }

    /// Checks each value by itself.
    ///
    /// # Errors
    ///
    /// An [`AirError`] naming the first value that cannot be, with a guess at the unit meant.
    pub fn check(&self) -> Result<(), AirError> {
        self.check_from(-90.0)
    }

    /// As [`Conditions::check`], with the lowest temperature given, in degrees Celsius.
    pub(super) fn check_from(&self, coldest_c: f64) -> Result<(), AirError> {
        const SET_BY: &str = "the air model";
        let temperature_c = self.temperature_c;
        if temperature_c < -CELSIUS_ZERO_K {
            return Err(AirError::BelowAbsoluteZero { temperature_c });
        }
        if (183.15..=333.15).contains(&temperature_c) {
            return Err(AirError::TemperatureInKelvin { temperature_c });
        }
        within("temperature", temperature_c, (coldest_c, 60.0), "C", SET_BY)?;
        let relative_humidity = self.relative_humidity;
        if relative_humidity > 1.0 && relative_humidity <= 100.0 {
            return Err(AirError::HumidityInPercent { relative_humidity });
        }
        within(
            "relative humidity",
            relative_humidity,
            (0.0, 1.0),
            "(fraction)",
            SET_BY,
        )?;
        within("carbon dioxide", self.co2_ppm, (0.0, 2000.0), "ppm", SET_BY)?;
        if (20_000.0..=120_000.0).contains(&self.pressure_hpa) {
            return Err(AirError::PressureUnit {
                pressure_hpa: self.pressure_hpa,
                likely_hpa: standard_pressure_hpa(0.0),
                height_m: 0.0,
                unit: "Pa",
            });
        }
        within("pressure", self.pressure_hpa, (0.0, 1200.0), "hPa", SET_BY)
    }

    /// Checks each value, and the pressure against the height of the site.
    ///
    /// # Errors
    ///
    /// As [`Conditions::check`]; [`AirError::PressureUnit`], [`AirError::PressureReduced`] or
    /// [`AirError::PressureForHeight`] when the pressure does not fit the height.
    pub fn check_at(&self, site: &Site) -> Result<(), AirError> {
        /// Units met in station logs, in hPa.
        const UNITS_HPA: [(&str, f64); 4] = [
            ("Pa", 0.01),
            ("kPa", 10.0),
            ("mmHg", 1.333_223_87),
            ("inHg", 33.863_886),
        ];
        /// Pressures that weather reports give for sea level, in hPa.
        const REDUCED_HPA: std::ops::RangeInclusive<f64> = 950.0..=1060.0;
        site.check()?;
        let height_m = site.height_m;
        let likely_hpa = standard_pressure_hpa(height_m);
        let pressure_hpa = self.pressure_hpa;
        let (min_hpa, max_hpa) = pressure_range_hpa(height_m);
        let fits = |hpa: f64| (min_hpa..=max_hpa).contains(&hpa);
        if pressure_hpa.is_finite() && !fits(pressure_hpa) {
            if pressure_hpa > max_hpa && REDUCED_HPA.contains(&pressure_hpa) {
                return Err(AirError::PressureReduced {
                    pressure_hpa,
                    likely_hpa,
                    height_m,
                });
            }
            if let Some((unit, _)) = UNITS_HPA.iter().find(|it| fits(pressure_hpa * it.1)) {
                return Err(AirError::PressureUnit {
                    pressure_hpa,
                    likely_hpa,
                    height_m,
                    unit,
                });
            }
            self.check()?;
            return Err(AirError::PressureForHeight {
                pressure_hpa,
                height_m,
                min_hpa,
                max_hpa,
            });
        }
        self.check()
    }
}

impl Site {
    /// Checks latitude and height.
    ///
    /// # Errors
    ///
    /// [`AirError::OutOfRange`].
    pub fn check(&self) -> Result<(), AirError> {
        let latitude_deg = self.latitude_rad.to_degrees();
        within("latitude", latitude_deg, (-90.0, 90.0), "deg", "the sphere")?;
        within(
            "station height",
            self.height_m,
            STATION_HEIGHT_M,
            "m",
            "the air model",
        )
    }
}

/// Pressures accepted at a height, in hPa.
fn pressure_range_hpa(height_m: f64) -> (f64, f64) {
    let standard_hpa = standard_pressure_hpa(height_m);
    let widening = 0.012 * height_m.max(0.0) / 1000.0;
    (
        standard_hpa * (0.86 - widening),
        standard_hpa * (1.08 + widening),
    )
}

/// Pressure of the standard atmosphere of 1976 at a geometric height up to 51 km, in hPa.
pub fn standard_pressure_hpa(height_m: f64) -> f64 {
    /// Base in geopotential metres, gradient in K/m.
    const LAYERS: [(f64, f64); 5] = [
        (0.0, -0.0065),
        (11_000.0, 0.0),
        (20_000.0, 0.001),
        (32_000.0, 0.0028),
        (47_000.0, 0.0),
    ];
    /// `g0 M / R`, in K/m.
    const HYDROSTATIC_K_PER_M: f64 = 9.80665 * 0.0289644 / 8.31432;
    const EARTH_RADIUS_M: f64 = 6_356_766.0;
    let geopotential_m = EARTH_RADIUS_M * height_m / (EARTH_RADIUS_M + height_m);
    let (mut pressure_hpa, mut temperature_k) = (1013.25, 288.15);
    for (index, &(base_m, gradient)) in LAYERS.iter().enumerate() {
        let top_m = LAYERS
            .get(index + 1)
            .map_or(f64::INFINITY, |it| it.0)
            .min(geopotential_m);
        let rise_m = top_m - base_m;
        if rise_m <= 0.0 && index > 0 {
            break;
        }
        let warmer_k = temperature_k + gradient * rise_m;
        pressure_hpa *= if gradient == 0.0 {
            (-HYDROSTATIC_K_PER_M * rise_m / temperature_k).exp()
        } else {
            (temperature_k / warmer_k).powf(HYDROSTATIC_K_PER_M / gradient)
        };
        temperature_k = warmer_k;
    }
    pressure_hpa
}
