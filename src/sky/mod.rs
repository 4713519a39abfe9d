//! Where and when: time scales, the Sun's topocentric place, and how the camera hangs under the sky.
//!
//! Nothing here knows an image or the air: every direction is the true one, as if there were no
//! refraction. The astronomy is that of the IAU's SOFA collection, through the crate `sofars`.

pub(crate) mod calendar;
mod orientation;
mod place;
mod rates;
mod sun;
mod time;
mod track;

pub use orientation::{Mount, Orientation, Parity, orientation, parallactic_at_zenith_rad};
pub use place::{Place, observer_itrs_m};
pub use rates::{Rates, rates};
pub use sun::{GeocentricSun, SunPlace, geocentric_sun, require_above_horizon, sun};
pub use time::{FIRST_YEAR, LAST_YEAR, Utc};
pub use track::SunTrack;

/// Why a time or a place of the Sun could not be given.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum SkyError {
    /// The text is not a date and time of the one accepted form.
    #[error("time `{text}` is not of the form YYYY-MM-DDThh:mm:ss[.fff][Z]")]
    TimeForm {
        /// The text as given.
        text: String,
    },
    /// The text names another offset than UTC's own.
    #[error("time `{text}` ends in `{suffix}`: times are UTC, with `Z` or nothing behind them")]
    TimeOffset {
        /// The text as given.
        text: String,
        /// What stands behind the seconds.
        suffix: String,
    },
    /// A field of the date or time is outside the calendar.
    #[error("time `{text}`: {field} {found} is outside {lowest} to {highest}")]
    TimeField {
        /// The text as given.
        text: String,
        /// Name of the field.
        field: &'static str,
        /// Value of the field.
        found: u32,
        /// Smallest value allowed.
        lowest: u32,
        /// Largest value allowed in that month or day.
        highest: u32,
    },
    /// A second 60 in a minute that has none.
    #[error(
        "time `{text}`: there is no leap second at the end of that minute, seconds go below 60"
    )]
    NoLeapSecond {
        /// The text as given.
        text: String,
    },
    /// The leap seconds are not known then.
    #[error("date {date} is outside the years {first} to {last} for which leap seconds are known")]
    DateOutOfRange {
        /// The date.
        date: String,
        /// First year allowed.
        first: i32,
        /// Last year allowed.
        last: i32,
    },
    /// A number that describes the place or the Earth's turn is impossible.
    #[error("{quantity} = {found} {unit} is outside {lowest} to {highest} {unit}")]
    ValueOutOfRange {
        /// What was given.
        quantity: &'static str,
        /// Value found.
        found: f64,
        /// Smallest value allowed.
        lowest: f64,
        /// Largest value allowed.
        highest: f64,
        /// Unit of the three numbers.
        unit: &'static str,
    },
    /// The Sun is not up.
    #[error(
        "the Sun's centre stands {altitude_deg:.2} deg above the horizon at {time}: below 0 deg"
    )]
    BelowHorizon {
        /// True altitude of the Sun's centre, deg.
        altitude_deg: f64,
        /// The time, UTC.
        time: String,
    },
    /// The Sun is so near the zenith that azimuth and parallactic angle have no rate.
    #[error("the Sun stands {zenith_arcsec} arcsec from the zenith: rates need at least 1 arcsec")]
    InZenith {
        /// Zenith distance, arcsec.
        zenith_arcsec: f64,
    },
    /// A track that ends before it begins.
    #[error("a track cannot run from {first} back to {last}")]
    TrackReversed {
        /// First time asked for.
        first: String,
        /// Last time asked for.
        last: String,
    },
    /// A time outside the track.
    #[error("time {time} is outside the track from {first} to {last}")]
    OutsideTrack {
        /// Time asked for.
        time: String,
        /// First time of the track.
        first: String,
        /// Last time of the track.
        last: String,
    },
}
