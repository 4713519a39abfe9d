//! The air's bending taken out of every frame's limb, at its own time and weather.
//!
//! # Model
//!
//! ```text
//! detector (r, theta) -> apparent direction (radius, position angle) -> bearing from the zenith
//!   -> true direction by zeta + R(zeta), azimuth unchanged -> true radius about the true centre
//!   -> the same disk at 1 AU:  sin rho_1 = d sin rho
//! ```
//!
//! The direction is apparent to true, which needs no iteration.
//!
//! # Valid for
//!
//! Zenith distances below 90 degrees; the disk wholly above the horizon.
//!
//! # Accuracy
//!
//! That of [`crate::air`]: 0.001 mas in the shape for a given refractivity.
//!
//! # Source
//!
//! Spherical trigonometry; refraction as in [`crate::air`].

use crate::air::{self, AirError, Bending, Conditions, DiskMap, Profile, StationAir};
use crate::limb::{Flag, ObservedLimb};
use crate::session::{Projection, ScaleOf};
use crate::shape::{self, AirResponse};
use crate::sky::{Orientation, SunPlace};
use crate::units::{ARCMIN_RAD, ARCSEC_RAD};

/// The plate: how pixels become directions.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Plate {
    /// Flat detector behind a lens, or angle proportional to pixels.
    pub projection: Projection,
    /// Whether the scale is of the apparent direction or already has `1/n` in it.
    pub scale_of: ScaleOf,
}

impl Plate {
    /// Angle on the sky, as it arrives in air of a refractivity, of a distance on the plate.
    pub fn angle_rad(self, plate_arcsec: f64, refractivity: f64) -> f64 {
        let apparent = match self.scale_of {
            ScaleOf::Apparent => plate_arcsec * ARCSEC_RAD,
            ScaleOf::Sky => plate_arcsec * ARCSEC_RAD / (1.0 + refractivity),
        };
        match self.projection {
            Projection::Arc => apparent,
            Projection::Tan => apparent.atan(),
        }
    }

    /// Distance on the plate, arcsec, of an angle on the sky.
    pub fn of_angle_arcsec(self, angle_rad: f64, refractivity: f64) -> f64 {
        let flat = match self.projection {
            Projection::Arc => angle_rad,
            Projection::Tan => angle_rad.tan(),
        };
        match self.scale_of {
            ScaleOf::Apparent => flat / ARCSEC_RAD,
            ScaleOf::Sky => flat / ARCSEC_RAD * (1.0 + refractivity),
        }
    }
}

/// The air over the station at one moment.
#[derive(Clone, Debug)]
pub struct Air {
    /// Refractivity at the telescope.
    pub refractivity: f64,
    profile: Option<Profile>,
}

impl Air {
    /// The air of a station in the light of a vacuum wavelength.
    ///
    /// # Errors
    ///
    /// Whatever the refractivity or the profile refuses.
    pub fn over(station: &StationAir, wavelength_nm: f64) -> Result<Self, AirError> {
        let profile = station.profile(wavelength_nm)?;
        Ok(Self {
            refractivity: profile.refractivity(),
            profile: Some(profile),
        })
    }

    /// No air at all: a camera above it.
    pub fn none() -> Self {
        Self {
            refractivity: 0.0,
            profile: None,
        }
    }

    /// The disk's map at a true zenith distance.
    ///
    /// # Errors
    ///
    /// Where the table of the refraction cannot be made (the Sun too low).
    pub fn map(&self, zenith_true_rad: f64) -> Result<Option<DiskMap>, AirError> {
        match &self.profile {
            None => Ok(None),
            Some(profile) => {
                let bending = Bending::new(profile, zenith_true_rad)?;
                Ok(Some(DiskMap::new(bending, zenith_true_rad)))
            }
        }
    }
}

/// Relative change of the refractivity by one unit of pressure (hPa), temperature (C), humidity
/// (fraction) and wavelength (nm), by differences of the formula.
///
/// # Errors
///
/// Where the formula refuses the conditions.
pub fn refractivity_sensitivities(
    station: &StationAir,
    wavelength_nm: f64,
) -> Result<[f64; 4], AirError> {
    let base = station.refractivity(wavelength_nm)?;
    let with = |change: &dyn Fn(&mut Conditions)| -> Result<f64, AirError> {
        let mut other = station.clone();
        change(&mut other.conditions);
        other.refractivity(wavelength_nm)
    };
    let humid = if station.conditions.relative_humidity < 0.5 {
        0.01
    } else {
        -0.01
    };
    let (up, down) = (
        with(&|it| it.pressure_hpa += 0.1)?,
        with(&|it| it.pressure_hpa -= 0.1)?,
    );
    let (warm, cold) = (
        with(&|it| it.temperature_c += 0.1)?,
        with(&|it| it.temperature_c -= 0.1)?,
    );
    let damp = with(&|it| it.relative_humidity += humid)?;
    let (red, blue) = (
        station.refractivity(wavelength_nm + 0.5)?,
        station.refractivity(wavelength_nm - 0.5)?,
    );
    Ok([
        (up - down) / (0.2 * base),
        (warm - cold) / (0.2 * base),
        (damp - base) / (humid * base),
        (red - blue) / base,
    ])
}

/// What is needed to take the air out of one frame.
#[derive(Clone, Debug)]
pub struct Moment {
    /// The Sun.
    pub sun: SunPlace,
    /// How the camera hangs.
    pub orientation: Orientation,
    /// The disk's map; none above the air.
    pub map: Option<DiskMap>,
    /// Refractivity at the telescope.
    pub refractivity: f64,
}

/// A limb with the air's bending taken out: radius at 1 AU minus the reference radius, mas, by sector.
#[derive(Clone, Debug, PartialEq)]
pub struct TrueLimb {
    /// Detector angle of every sector's middle, rad.
    pub angles_rad: Vec<f64>,
    /// Radius at 1 AU minus [`shape::REFERENCE_RADIUS_MAS`], mas; NaN where there is none.
    pub radius_mas: Vec<f64>,
    /// Photon noise, mas.
    pub sigma_mas: Vec<f64>,
}

impl Moment {
    /// Angle on the sky of a distance on the plate.
    fn angle_of_plate_rad(&self, plate: Plate, plate_arcsec: f64) -> f64 {
        plate.angle_rad(plate_arcsec, self.refractivity)
    }

    /// Distance on the plate of an angle on the sky, arcsec.
    fn plate_of_angle_arcsec(&self, plate: Plate, angle_rad: f64) -> f64 {
        plate.of_angle_arcsec(angle_rad, self.refractivity)
    }

    /// Apparent radius on the plate of a round Sun of the reference radius at a detector angle, arcsec.
    pub fn predicted_arcsec(&self, plate: Plate, theta_rad: f64) -> f64 {
        let true_rad = shape::reference_radius_rad(self.sun.distance_au);
        let bearing = self.orientation.position_angle_rad(theta_rad) - self.sun.parallactic_rad;
        let apparent_rad = match &self.map {
            Some(map) => map.apparent_from_true(true_rad, bearing).0,
            None => true_rad,
        };
        self.plate_of_angle_arcsec(plate, apparent_rad)
    }

    /// Where a true direction about the Sun's centre falls on the plate: distance from the centre,
    /// arcsec, and detector angle, rad.
    pub fn apparent_place(
        &self,
        plate: Plate,
        radius_rad: f64,
        position_angle_rad: f64,
    ) -> (f64, f64) {
        let bearing = position_angle_rad - self.sun.parallactic_rad;
        let (apparent, bearing) = match &self.map {
            Some(map) if radius_rad > 0.0 => map.apparent_from_true(radius_rad, bearing),
            _ => (radius_rad, bearing),
        };
        let theta = self
            .orientation
            .detector_angle_rad(bearing + self.sun.parallactic_rad);
        (self.plate_of_angle_arcsec(plate, apparent), theta)
    }

    /// Detector angles of solar north and of the zenith, rad.
    pub fn axis_and_zenith_rad(&self) -> (f64, f64) {
        (
            self.orientation.detector_angle_rad(self.sun.axis_rad),
            self.orientation
                .detector_angle_rad(self.sun.parallactic_rad),
        )
    }

    /// The radius at 1 AU minus the reference of one point of the limb, mas.
    pub fn true_radius_mas(&self, plate: Plate, plate_arcsec: f64, theta_rad: f64) -> f64 {
        let apparent = self.angle_of_plate_rad(plate, plate_arcsec);
        let bearing = self.orientation.position_angle_rad(theta_rad) - self.sun.parallactic_rad;
        let radius = match &self.map {
            Some(map) => map.true_from_apparent(apparent, bearing).0,
            None => apparent,
        };
        shape::beyond_reference_mas(radius, self.sun.distance_au)
    }
}

/// Takes the air's bending out of a frame's limb.
pub fn remove(limb: &ObservedLimb, plate: Plate, moment: &Moment) -> TrueLimb {
    let mut out = TrueLimb {
        angles_rad: Vec::new(),
        radius_mas: Vec::new(),
        sigma_mas: Vec::new(),
    };
    for (s, sector) in limb.sectors.iter().enumerate() {
        let theta = limb.angle_rad(s);
        let usable = sector.flag == Flag::Good;
        out.angles_rad.push(theta);
        out.radius_mas.push(if usable {
            moment.true_radius_mas(plate, sector.radius_arcsec, theta)
        } else {
            f64::NAN
        });
        out.sigma_mas
            .push(sector.sigma_arcsec * 1000.0 * moment.sun.distance_au);
    }
    out
}

/// How the limb answers the air at a moment, by differences of the exact map.
///
/// # Errors
///
/// Where the map cannot be made a minute of arc away.
pub fn response(
    air: &Air,
    sun: &SunPlace,
    zenith_rate_arcmin_s: f64,
) -> Result<AirResponse, AirError> {
    let zenith = sun.zenith_true_rad;
    let Some(map) = air.map(zenith)? else {
        return Ok(AirResponse {
            sin_zenith: zenith.sin(),
            ..AirResponse::default()
        });
    };
    let radius = shape::reference_radius_rad(sun.distance_au);
    let here = air::distortion(&map, radius);
    let step = ARCMIN_RAD;
    let shifted = |by: f64| -> Result<air::Distortion, AirError> {
        Ok(match air.map(zenith + by)? {
            Some(map) => air::distortion(&map, radius),
            None => here,
        })
    };
    let (up, down) = (shifted(step)?, shifted(-step)?);
    let d = sun.distance_au;
    Ok(AirResponse {
        mean_mas: here.mean_mas * d,
        cos2_mas: here.cos2_mas * d,
        cos3_mas: here.cos3_mas * d,
        cos4_mas: here.cos4_mas * d,
        mean_mas_arcmin: 0.5 * (up.mean_mas - down.mean_mas) * d,
        cos2_mas_arcmin: 0.5 * (up.cos2_mas - down.cos2_mas) * d,
        sin_zenith: zenith.sin(),
        zenith_rate_arcmin_s,
    })
}

#[cfg(test)]
pub(crate) mod tests {
    use super::*;
    use crate::air::{Conditions, Site};
    use crate::shape::REFERENCE_RADIUS_MAS;
    use crate::sky::Parity;
    use crate::units::MAS_RAD;

    /// A moment at a zenith distance, at a mountain station.
    pub(crate) fn moment(zenith_true_deg: f64) -> Moment {
        let conditions = Conditions {
            pressure_hpa: 778.0,
            temperature_c: 9.0,
            relative_humidity: 0.35,
            co2_ppm: 420.0,
        };
        let site = Site {
            latitude_rad: 0.54,
            height_m: 2240.0,
        };
        let air = Air::over(&StationAir::new(site, conditions, 3.0), 550.0).unwrap();
        let zenith_true_rad = zenith_true_deg.to_radians();
        Moment {
            sun: SunPlace {
                zenith_true_rad,
                azimuth_rad: 3.0,
                hour_angle_rad: -0.4,
                right_ascension_rad: 1.0,
                declination_rad: 0.3,
                parallactic_rad: -0.9,
                axis_rad: 0.2,
                b0_rad: 0.1,
                l0_rad: 1.0,
                distance_au: 1.013,
                radial_velocity_m_s: 0.0,
            },
            orientation: Orientation {
                y_position_angle_rad: 0.35,
                parity: Parity::Sky,
            },
            map: air.map(zenith_true_rad).unwrap(),
            refractivity: air.refractivity,
        }
    }

    fn plate(projection: Projection, scale_of: ScaleOf) -> Plate {
        Plate {
            projection,
            scale_of,
        }
    }

    #[test]
    fn what_is_predicted_comes_back_round_for_every_plate() {
        for zenith_deg in [0.5, 30.0, 60.0, 72.0] {
            let moment = moment(zenith_deg);
            for projection in [Projection::Arc, Projection::Tan] {
                for scale_of in [ScaleOf::Apparent, ScaleOf::Sky] {
                    let plate = plate(projection, scale_of);
                    for k in 0..12 {
                        let theta = f64::from(k) * std::f64::consts::TAU / 12.0;
                        // The bearing turns by a milliradian on the way: the Sun is round.
                        let seen = moment.predicted_arcsec(plate, theta);
                        let back = moment.true_radius_mas(plate, seen, theta);
                        let allowed = if zenith_deg < 65.0 { 0.6 } else { 6.0 };
                        assert!(
                            back.abs() < allowed,
                            "{zenith_deg} deg, {theta}: {back} mas"
                        );
                    }
                }
            }
        }
    }

    /// Source: common practice, no source: a scale found on stars near the zenith holds the contraction
    /// by `1/n` already; a scale of the apparent direction does not (some 200 mas at a mountain).
    #[test]
    fn the_contraction_at_the_zenith_is_in_one_scale_and_not_in_the_other() {
        let moment = moment(0.5);
        let unbent = ((REFERENCE_RADIUS_MAS * MAS_RAD).sin() / 1.013).asin() / ARCSEC_RAD;
        let sky = moment.predicted_arcsec(plate(Projection::Arc, ScaleOf::Sky), 0.3);
        let apparent = moment.predicted_arcsec(plate(Projection::Arc, ScaleOf::Apparent), 0.3);
        assert!((sky - unbent).abs() < 0.001, "{sky} {unbent}");
        assert!(
            (0.19..0.22).contains(&(unbent - apparent)),
            "{}",
            unbent - apparent
        );
    }

    /// Source: `tan d - d` of 959.2 arcsec is 6.91 mas: mathematics.
    #[test]
    fn a_flat_plate_shows_the_limb_seven_mas_farther_out() {
        let moment = moment(20.0);
        let flat = moment.predicted_arcsec(plate(Projection::Tan, ScaleOf::Apparent), 1.0);
        let round = moment.predicted_arcsec(plate(Projection::Arc, ScaleOf::Apparent), 1.0);
        let angle_rad = round * ARCSEC_RAD;
        assert!((flat - round - (angle_rad.tan() - angle_rad) / ARCSEC_RAD).abs() < 1e-9);
        assert!((1000.0 * (flat - round) - 6.6).abs() < 0.3);
    }
}
