//! What can be wrong with a description of the air, and what deserves a warning.

/// Why the air model has no answer.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum AirError {
    /// A quantity lies outside the range in which the model holds.
    #[error("{quantity} is {found} {unit}; {set_by} allows {min} to {max} {unit}")]
    OutOfRange {
        /// What was checked.
        quantity: &'static str,
        /// The value found, in `unit`.
        found: f64,
        /// Smallest value allowed, in `unit`.
        min: f64,
        /// Largest value allowed, in `unit`.
        max: f64,
        /// Unit of the three numbers.
        unit: &'static str,
        /// Who sets the range.
        set_by: &'static str,
    },
    /// The temperature cannot exist.
    #[error("temperature is {temperature_c} C, below absolute zero (-273.15 C)")]
    BelowAbsoluteZero {
        /// The value found, in degrees Celsius.
        temperature_c: f64,
    },
    /// The temperature looks like kelvin.
    #[error("temperature is {temperature_c} C; allowed is -90 to 60 C; is it in kelvin?")]
    TemperatureInKelvin {
        /// The value found, taken as degrees Celsius.
        temperature_c: f64,
    },
    /// The humidity looks like a percentage.
    #[error(
        "relative humidity is {relative_humidity}; it is a fraction from 0 to 1, is it percent?"
    )]
    HumidityInPercent {
        /// The value found.
        relative_humidity: f64,
    },
    /// The pressure makes sense in another unit only.
    #[error(
        "pressure is {pressure_hpa} hPa; about {likely_hpa:.0} hPa is expected at {height_m:.0} m, \
         which it would be if given in {unit}"
    )]
    PressureUnit {
        /// The value found, taken as hPa.
        pressure_hpa: f64,
        /// Pressure of the standard atmosphere at the station, in hPa.
        likely_hpa: f64,
        /// Height of the station, in metres.
        height_m: f64,
        /// The unit in which the value would fit.
        unit: &'static str,
    },
    /// The pressure looks reduced to sea level.
    #[error(
        "pressure is {pressure_hpa} hPa at a station {height_m:.0} m high: it looks reduced to sea \
         level; the station pressure is needed, likely about {likely_hpa:.0} hPa"
    )]
    PressureReduced {
        /// The value found, in hPa.
        pressure_hpa: f64,
        /// Pressure of the standard atmosphere at the station, in hPa.
        likely_hpa: f64,
        /// Height of the station, in metres.
        height_m: f64,
    },
    /// The pressure does not belong to this height.
    #[error(
        "pressure is {pressure_hpa} hPa; at {height_m:.0} m between {min_hpa:.1} and {max_hpa:.1} \
         hPa is possible"
    )]
    PressureForHeight {
        /// The value found, in hPa.
        pressure_hpa: f64,
        /// Height of the station, in metres.
        height_m: f64,
        /// Lowest pressure accepted, in hPa.
        min_hpa: f64,
        /// Highest pressure accepted, in hPa.
        max_hpa: f64,
    },
    /// A name is not one of the choices.
    #[error("{kind} \"{found}\" is unknown; known are {known}")]
    UnknownName {
        /// What the name stands for.
        kind: &'static str,
        /// The name found.
        found: String,
        /// The names allowed, separated by commas.
        known: &'static str,
    },
    /// A sounding has too few levels above the station.
    #[error("the sounding has {found} levels above the station; at least {needed} are needed")]
    SoundingTooShort {
        /// Levels found above the station.
        found: usize,
        /// Levels needed.
        needed: usize,
    },
    /// A sounding begins above the station.
    #[error("the sounding starts at {lowest_m} m, above the station at {station_m} m")]
    SoundingStartsAbove {
        /// Height of the lowest level, in metres.
        lowest_m: f64,
        /// Height of the station, in metres.
        station_m: f64,
    },
    /// The levels of a sounding are out of order.
    #[error(
        "sounding level {level} at {height_m} m, {pressure_hpa} hPa does not lie above level \
         {level} - 1: heights must rise and pressures fall"
    )]
    SoundingOrder {
        /// Number of the level, the first is 1.
        level: usize,
        /// Its height, in metres.
        height_m: f64,
        /// Its pressure, in hPa.
        pressure_hpa: f64,
    },
    /// A sounding and the barometer contradict each other.
    #[error(
        "the sounding gives {sounding_hpa:.2} hPa at the station, the barometer {station_hpa:.2} \
         hPa; they may differ by {allowed_percent} percent"
    )]
    SoundingPressure {
        /// Pressure of the sounding at the height of the station, in hPa.
        sounding_hpa: f64,
        /// Pressure at the station, in hPa.
        station_hpa: f64,
        /// Largest difference accepted, in percent.
        allowed_percent: f64,
    },
    /// Density falls so fast with height that a level ray would curve down to the ground.
    #[error(
        "the air between {base_m:.0} and {top_m:.0} m bends a level ray more than the Earth curves \
         (ratio {ratio:.2}, below 0.95 is needed): thin out the levels of the sounding there"
    )]
    Ducting {
        /// Base of the layer above sea level, in metres.
        base_m: f64,
        /// Top of the layer above sea level, in metres.
        top_m: f64,
        /// Curvature of a level ray over that of the Earth.
        ratio: f64,
    },
    /// A filter curve has too few points, or a value is missing.
    #[error(
        "the filter has {wavelengths} wavelengths and {values} transmissions; two at least are needed, and as many of one as of the other"
    )]
    BandPoints {
        /// Wavelengths found.
        wavelengths: usize,
        /// Transmissions found.
        values: usize,
    },
    /// The wavelengths of a filter curve do not rise.
    #[error("the filter has {after_nm} nm after {before_nm} nm; wavelengths must rise")]
    BandOrder {
        /// A wavelength, in nm.
        before_nm: f64,
        /// The next, in nm.
        after_nm: f64,
    },
    /// No light passes.
    #[error("no light passes the filter: transmission or source is zero throughout")]
    BandDark,
    /// The source has no brightness at a wavelength of the band.
    #[error(
        "the source is {found} at {wavelength_nm:.1} nm; a number of photons not below 0 is needed"
    )]
    SpectrumValue {
        /// The wavelength, in nm.
        wavelength_nm: f64,
        /// The value found.
        found: f64,
    },
    /// The refractivity rises and falls inside a band.
    #[error(
        "the refractivity does not change one way from {low_nm:.1} to {high_nm:.1} nm: the band has no effective wavelength"
    )]
    DispersionTurns {
        /// Begin of the band, in nm.
        low_nm: f64,
        /// End of the band, in nm.
        high_nm: f64,
    },
}

/// A doubt about a result that still has a value; it belongs beside the result.
#[derive(Clone, Copy, Debug, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum AirWarning {
    /// Pressure outside the range stated by the author of the formula.
    #[error(
        "pressure {pressure_hpa:.1} hPa is outside {min_hpa} to {max_hpa} hPa, where {formula} was fitted"
    )]
    Pressure {
        /// Name of the formula.
        formula: &'static str,
        /// The value found, in hPa.
        pressure_hpa: f64,
        /// Lower end of the stated range, in hPa.
        min_hpa: f64,
        /// Upper end of the stated range, in hPa.
        max_hpa: f64,
    },
    /// Temperature outside the range stated by the author of the formula.
    #[error(
        "temperature {temperature_c:.1} C is outside {min_c} to {max_c} C, where {formula} was fitted"
    )]
    Temperature {
        /// Name of the formula.
        formula: &'static str,
        /// The value found, in degrees Celsius.
        temperature_c: f64,
        /// Lower end of the stated range, in degrees Celsius.
        min_c: f64,
        /// Upper end of the stated range, in degrees Celsius.
        max_c: f64,
    },
    /// Wavelength outside the range stated by the author, inside the one where formulas agree.
    #[error(
        "wavelength {wavelength_nm} nm is outside {min_nm} to {max_nm} nm, where {formula} was fitted"
    )]
    Wavelength {
        /// Name of the formula.
        formula: &'static str,
        /// The value found, in nm.
        wavelength_nm: f64,
        /// Lower end of the stated range, in nm.
        min_nm: f64,
        /// Upper end of the stated range, in nm.
        max_nm: f64,
    },
    /// The formula leaves out the compressibility of air.
    #[error("{formula} treats air as an ideal gas: refraction too large by up to 3.4e-4 of itself")]
    IdealGas {
        /// Name of the formula.
        formula: &'static str,
    },
    /// The disk stands low enough for the air to matter more than the optics.
    #[error("zenith distance {zenith_deg:.2} deg is above 60: errors of the air grow steeply")]
    ZenithAbove60 {
        /// Zenith distance, in degrees.
        zenith_deg: f64,
    },
    /// The disk stands so low that a shape is hardly worth measuring.
    #[error(
        "zenith distance {zenith_deg:.2} deg is above 70: 0.1 K or 0.3 hPa already cost 0.5 mas"
    )]
    ZenithAbove70 {
        /// Zenith distance, in degrees.
        zenith_deg: f64,
    },
}
