//! Published numbers with their pedigree: value, unit, uncertainty, source.

/// A published number with its pedigree.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Constant {
    /// Numerical value, in `unit`.
    pub value: f64,
    /// Unit, as printed in the report.
    pub unit: &'static str,
    /// Standard uncertainty, in `unit`; zero for a value fixed by definition.
    pub standard_uncertainty: f64,
    /// Full reference.
    pub source: &'static str,
}

/// The astronomical unit.
pub const ASTRONOMICAL_UNIT: Constant = Constant {
    value: 149_597_870_700.0,
    unit: "m",
    standard_uncertainty: 0.0,
    source: "IAU 2012 Resolution B2",
};

/// Nominal solar radius: fixed by definition, not a measurement.
pub const SOLAR_RADIUS_NOMINAL: Constant = Constant {
    value: 6.957e8,
    unit: "m",
    standard_uncertainty: 0.0,
    source: "IAU 2015 Resolution B3",
};

/// Nominal solar mass parameter.
pub const SOLAR_MASS_PARAMETER: Constant = Constant {
    value: 1.3271244e20,
    unit: "m^3 s^-2",
    standard_uncertainty: 0.0,
    source: "IAU 2015 Resolution B3",
};

/// Every constant of this file, for the list of references.
pub const ALL: [Constant; 3] = [
    ASTRONOMICAL_UNIT,
    SOLAR_RADIUS_NOMINAL,
    SOLAR_MASS_PARAMETER,
];

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_constant_names_its_unit_and_source() {
        for it in ALL {
            assert!(!it.unit.is_empty() && !it.source.is_empty() && it.value.is_finite());
        }
    }
}
