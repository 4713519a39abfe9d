//! Guards of a weather log: units, ranges, and pressures that cannot be at the station's height.

use super::fault::{Fault, FaultKind, Finding};
use super::sheet::Sheet;
use crate::air::standard_pressure_hpa;

/// A humidity so far outside 0 to 1 is the sensor's error; it is taken as the limit, with a note.
pub(super) const HUMIDITY_SLACK: f64 = 0.05;

/// Units and ranges of the three columns.
pub(super) fn check(sheet: &Sheet, height_m: Option<f64>, faults: &mut Vec<Fault>) {
    let [pressure, temperature, humidity] = [0, 1, 2].map(|index| median(&sheet.columns[index]));
    let mut unit_fault = |column: usize, finding: Finding| {
        if sheet.len() > 0 {
            faults.push(sheet.fault(0, column, finding));
        }
    };
    let pressure_unit = pressure.and_then(|it| pressure_finding(it, height_m));
    let pressure_fits = pressure_unit.is_none();
    if let Some(finding) = pressure_unit {
        unit_fault(0, finding);
    }
    let kelvin = temperature.filter(|it| (150.0..=340.0).contains(it));
    if let Some(median) = kelvin {
        let finding = Finding::new(
            FaultKind::WrongUnit,
            format!("a median of {median}, which looks like kelvin"),
            "-90 to 60 C",
            "take 273.15 from each temperature",
        );
        unit_fault(1, finding);
    }
    let percent = humidity.filter(|it| *it > 1.5);
    if let Some(median) = percent {
        let finding = Finding::new(
            FaultKind::WrongUnit,
            format!("a median of {median}, which looks like percent"),
            "0 to 1, as a fraction",
            "divide each humidity by 100",
        );
        unit_fault(2, finding);
    }
    if pressure_fits {
        sheet.check_range(
            0,
            pressure_range_hpa(height_m),
            "hPa at this height",
            faults,
        );
    }
    if kelvin.is_none() {
        sheet.check_range(1, (-90.0, 60.0), "C", faults);
    }
    if percent.is_none() {
        sheet.check_range(
            2,
            (-HUMIDITY_SLACK, 1.0 + HUMIDITY_SLACK),
            "as a fraction",
            faults,
        );
    }
}

/// Pressures that can be at a height: 14 percent below the standard atmosphere, the deepest lows
/// met at sea level, to 8 percent above it; both wider with height, the upper end only above the
/// troposphere.
fn pressure_range_hpa(height_m: Option<f64>) -> (f64, f64) {
    let Some(height_m) = height_m else {
        return (0.1, 1100.0);
    };
    let standard_hpa = standard_pressure_hpa(height_m);
    let widening = 0.012 * (height_m / 1000.0).clamp(0.0, 45.0);
    let above = if height_m > 11_000.0 { widening } else { 0.0 };
    (
        standard_hpa * (0.86 - widening),
        standard_hpa * (1.08 + above),
    )
}

/// What is wrong with a pressure, if it cannot be the pressure at that height.
pub(super) fn pressure_finding(pressure: f64, height_m: Option<f64>) -> Option<Finding> {
    /// Units met in logs and their size in hPa.
    const UNITS_HPA: [(&str, f64); 4] = [
        ("Pa", 0.01),
        ("kPa", 10.0),
        ("mmHg", 1.333_223_87),
        ("inHg", 33.863_886),
    ];
    let (low_hpa, high_hpa) = pressure_range_hpa(height_m);
    let fits = |hpa: f64| (low_hpa..=high_hpa).contains(&hpa);
    if fits(pressure) {
        return None;
    }
    let allowed = match height_m {
        Some(height_m) => {
            format!("{low_hpa:.0} to {high_hpa:.0} hPa, at the station's height of {height_m} m")
        }
        None => format!("{low_hpa} to {high_hpa} hPa"),
    };
    let (found, cure) = if pressure > high_hpa && (860.0..=1095.0).contains(&pressure) {
        let ratio = height_m.map_or(1.0, standard_pressure_hpa) / standard_pressure_hpa(0.0);
        (
            format!("{pressure} hPa, which looks reduced to sea level"),
            format!(
                "give the pressure at the station, here likely near {:.0} hPa",
                pressure * ratio
            ),
        )
    } else if let Some((unit, hpa)) = UNITS_HPA.iter().find(|it| fits(pressure * it.1)) {
        (
            format!("{pressure}, which looks like {unit}"),
            format!("multiply each pressure by {hpa}: {:.1} hPa", pressure * hpa),
        )
    } else {
        (
            format!("{pressure} hPa"),
            "check the barometer, its unit, and site.height_m".to_owned(),
        )
    };
    Some(Finding::new(FaultKind::WrongUnit, found, allowed, cure))
}

/// The middle value.
fn median(values: &[f64]) -> Option<f64> {
    let mut sorted = values.to_vec();
    sorted.sort_by(f64::total_cmp);
    sorted.get(sorted.len() / 2).copied()
}
