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
use crate::shape::{AirResponse, REFERENCE_RADIUS_MAS};
use crate::sky::{Orientation, SunPlace};
use crate::units::{ARCMIN_RAD, ARCSEC_RAD, MAS_RAD};

/// The plate: how pixels become directions.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Plate {
    /// Flat detector behind a lens, or angle proportional to pixels.
    pub projection: Projection,
    /// Whether the scale is of the apparent direction or already has `1/n` in it.
    pub scale_of: ScaleOf,
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
    /// Radius at 1 AU minus [`REFERENCE_RADIUS_MAS`], mas; NaN where there is none.
    pub radius_mas: Vec<f64>,
    /// Photon noise, mas.
    pub sigma_mas: Vec<f64>,
}

impl Moment {
    /// Angle on the sky of a distance on the plate.
    fn angle_of_plate_rad(&self, plate: Plate, plate_arcsec: f64) -> f64 {
        let apparent = match plate.scale_of {
            ScaleOf::Apparent => plate_arcsec * ARCSEC_RAD,
            ScaleOf::Sky => plate_arcsec * ARCSEC_RAD / (1.0 + self.refractivity),
        };
        match plate.projection {
            Projection::Arc => apparent,
            Projection::Tan => apparent.atan(),
        }
    }

    /// Distance on the plate of an angle on the sky, arcsec.
    fn plate_of_angle_arcsec(&self, plate: Plate, angle_rad: f64) -> f64 {
        let flat = match plate.projection {
            Projection::Arc => angle_rad,
            Projection::Tan => angle_rad.tan(),
        };
        match plate.scale_of {
            ScaleOf::Apparent => flat / ARCSEC_RAD,
            ScaleOf::Sky => flat / ARCSEC_RAD * (1.0 + self.refractivity),
        }
    }

    /// Apparent radius on the plate of a round Sun of the reference radius at a detector angle, arcsec.
    pub fn predicted_arcsec(&self, plate: Plate, theta_rad: f64) -> f64 {
        let true_rad = ((REFERENCE_RADIUS_MAS * MAS_RAD).sin() / self.sun.distance_au).asin();
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
        (self.sun.distance_au * radius.sin()).asin() / MAS_RAD - REFERENCE_RADIUS_MAS
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
    let radius = ((REFERENCE_RADIUS_MAS * MAS_RAD).sin() / sun.distance_au).asin();
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
