//! The sky over one sequence: the place, the Sun's track, the air over the station.

use crate::air::{BandInAir, Conditions, ProfileSettings, StationAir, local_radius_m};
use crate::pipeline::{Error, band};
use crate::refraction::{self, Air, Moment};
use crate::session::{Sequence, Session, WeatherNote};
use crate::shape::AirResponse;
use crate::sky::{self, Place, SunPlace, SunTrack, Utc};
use crate::units::{ARCMIN_RAD, ARCSEC_RAD, DEG_RAD};

/// The place of the session's telescope.
pub fn place(session: &Session) -> Place {
    let site = &session.site;
    Place {
        latitude_rad: site.latitude_deg * DEG_RAD,
        longitude_rad: site.longitude_deg * DEG_RAD,
        height_m: site.height_m,
        deflection_north_rad: site.deflection_north_arcsec * ARCSEC_RAD,
        deflection_east_rad: site.deflection_east_arcsec * ARCSEC_RAD,
    }
}

/// The air over the station at a time, towards an azimuth; none above the air.
fn station_air(
    session: &Session,
    at: Utc,
    azimuth_rad: f64,
) -> Result<Option<(StationAir, Option<WeatherNote>)>, Error> {
    let Some((reading, note)) = session.weather.at(at)? else {
        return Ok(None);
    };
    let settings = &session.refractivity;
    let latitude_rad = session.site.latitude_deg * DEG_RAD;
    let station = StationAir {
        site: crate::air::Site {
            latitude_rad,
            height_m: session.site.height_m,
        },
        conditions: Conditions {
            pressure_hpa: reading.pressure_hpa,
            temperature_c: reading.temperature_c,
            relative_humidity: reading.relative_humidity,
            co2_ppm: settings.co2_ppm,
        },
        formula: settings.formula,
        convention: settings.vapour,
        settings: ProfileSettings {
            lapse_k_per_m: settings.lapse_k_per_km / 1000.0,
            tropopause_m: settings.tropopause_m,
            ..ProfileSettings::default()
        },
        local_radius_m: local_radius_m(latitude_rad, azimuth_rad),
        sounding: session.weather.profile.as_ref().map(|it| it.levels.clone()),
    };
    Ok(Some((station, note)))
}

/// Longest time between two nodes at which the response to the air is worked out, s.
const NODE_S: f64 = 120.0;

/// The sky over one sequence: the Sun's track, the camera, the air.
pub(in crate::pipeline) struct Sky<'a> {
    session: &'a Session,
    sequence: &'a Sequence,
    track: SunTrack,
    /// The filter's band at mid sequence; none above the air.
    pub(in crate::pipeline) band: Option<BandInAir>,
}

/// Room about the track, so that rates can be had at its ends, s.
const TRACK_MARGIN_S: f64 = 2.0;

impl<'a> Sky<'a> {
    pub(in crate::pipeline) fn new(
        session: &'a Session,
        sequence: &'a Sequence,
        first: Utc,
        last: Utc,
    ) -> Result<Self, Error> {
        let (from, to) = (first.plus_s(-TRACK_MARGIN_S), last.plus_s(TRACK_MARGIN_S));
        let track = SunTrack::new(from, to, &place(session), session.time.ut1_minus_utc_s)?;
        let middle = first.plus_s(0.5 * last.minus(first));
        let sun = track.at(middle)?;
        sky::require_above_horizon(middle, &sun)?;
        let band = match station_air(session, middle, sun.azimuth_rad)? {
            Some((it, _)) => Some(band::in_air(&sequence.filter, &it, sun.zenith_true_rad)?),
            None => None,
        };
        Ok(Self {
            session,
            sequence,
            track,
            band,
        })
    }

    /// Wavelength at which the air bends the band's light as it does on average.
    pub(in crate::pipeline) fn wavelength_nm(&self) -> f64 {
        self.band
            .map_or(self.sequence.filter.centre_nm, |it| it.effective_nm)
    }

    /// The Sun at a time.
    pub(super) fn sun(&self, at: Utc) -> Result<SunPlace, Error> {
        Ok(self.track.at(at)?)
    }

    /// Sun, camera and air at a time.
    pub(in crate::pipeline) fn moment(&self, at: Utc) -> Result<AtMoment, Error> {
        let sun = self.track.at(at)?;
        let station = station_air(self.session, at, sun.azimuth_rad)?;
        let air = match &station {
            Some((it, _)) => Air::over(it, self.wavelength_nm())?,
            None => Air::none(),
        };
        let orientation = sky::orientation(
            self.session.telescope.mount,
            self.sequence.camera.angle_deg * DEG_RAD,
            self.sequence.roll_deg * DEG_RAD,
            self.sequence.camera.parity,
            &sun,
        );
        let map = air.map(sun.zenith_true_rad)?;
        Ok((
            Moment {
                sun,
                orientation,
                map,
                refractivity: air.refractivity,
            },
            air,
            station,
        ))
    }

    /// Change of the true zenith distance, arcmin a second.
    pub(in crate::pipeline) fn zenith_rate_arcmin_s(&self, at: Utc) -> Result<f64, Error> {
        let (a, b) = (
            self.track.at(at.plus_s(-1.0))?,
            self.track.at(at.plus_s(1.0))?,
        );
        Ok((b.zenith_true_rad - a.zenith_true_rad) / 2.0 / ARCMIN_RAD)
    }

    /// The response to the air at nodes through the sequence: seconds after its start, response.
    pub(super) fn nodes(
        &self,
        first: Utc,
        duration_s: f64,
    ) -> Result<Vec<(f64, AirResponse)>, Error> {
        let steps = (duration_s / NODE_S).ceil().max(1.0) as usize;
        (0..=steps)
            .map(|k| {
                let after_s = duration_s * k as f64 / steps as f64;
                let at = first.plus_s(after_s);
                let (moment, air, _) = self.moment(at)?;
                Ok((
                    after_s,
                    refraction::response(&air, &moment.sun, self.zenith_rate_arcmin_s(at)?)?,
                ))
            })
            .collect()
    }
}

/// Sun, camera and map of a moment; its air; the station and what had to be stretched for it.
pub(in crate::pipeline) type AtMoment = (Moment, Air, Option<(StationAir, Option<WeatherNote>)>);

/// Straight line between the nodes about a time.
pub(super) fn interpolated(nodes: &[(f64, AirResponse)], after_s: f64) -> AirResponse {
    let k = nodes
        .partition_point(|it| it.0 <= after_s)
        .clamp(1, nodes.len() - 1);
    let (a, b) = (&nodes[k - 1], &nodes[k]);
    let span = b.0 - a.0;
    let f = if span > 0.0 {
        (after_s - a.0) / span
    } else {
        0.0
    };
    let mix = |p: f64, q: f64| p + f * (q - p);
    AirResponse {
        mean_mas: mix(a.1.mean_mas, b.1.mean_mas),
        cos2_mas: mix(a.1.cos2_mas, b.1.cos2_mas),
        cos3_mas: mix(a.1.cos3_mas, b.1.cos3_mas),
        cos4_mas: mix(a.1.cos4_mas, b.1.cos4_mas),
        mean_mas_arcmin: mix(a.1.mean_mas_arcmin, b.1.mean_mas_arcmin),
        cos2_mas_arcmin: mix(a.1.cos2_mas_arcmin, b.1.cos2_mas_arcmin),
        sin_zenith: mix(a.1.sin_zenith, b.1.sin_zenith),
        zenith_rate_arcmin_s: mix(a.1.zenith_rate_arcmin_s, b.1.zenith_rate_arcmin_s),
    }
}
