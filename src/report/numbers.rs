//! Numbers as text: two significant digits of the standard uncertainty, and the value to match.
//!
//! The digits follow the GUM's advice (JCGM 100:2008, 7.2.6) to quote an uncertainty to at most two
//! significant digits and to round the estimate to the same place.

use crate::result::record::{Quantity, ShapeQuantity};

/// What stands where there is no value.
pub(crate) const MISSING: &str = "\u{2013}";

/// Power of ten of the leading digit after rounding to `digits` significant digits.
fn exponent(value: f64, digits: u8) -> i32 {
    let text = format!("{:.*e}", usize::from(digits.saturating_sub(1)), value.abs());
    text.split_once('e')
        .and_then(|(_, exponent)| exponent.parse().ok())
        .unwrap_or(0)
}

/// Decimals that show two significant digits of `sigma`; negative where tens are rounded away.
pub(crate) fn decimals_of(sigma: f64) -> i32 {
    1 - exponent(sigma, 2)
}

/// The value rounded to a number of decimals, with an ASCII sign and never a negative zero.
pub(crate) fn fixed(value: f64, decimals: i32) -> String {
    if !value.is_finite() {
        return MISSING.to_owned();
    }
    let text = if decimals >= 0 {
        format!("{value:.*}", decimals as usize)
    } else {
        let unit = 10f64.powi(-decimals);
        format!("{:.0}", (value / unit).round() * unit)
    };
    match text.strip_prefix('-') {
        Some(digits) if digits.chars().all(|c| c == '0' || c == '.') => digits.to_owned(),
        _ => text,
    }
}

/// A power of ten in raised digits, such as `10⁻⁷`.
pub(crate) fn power_of_ten(exponent: i32) -> String {
    const RAISED: [char; 10] = ['⁰', '¹', '²', '³', '⁴', '⁵', '⁶', '⁷', '⁸', '⁹'];
    let mut text = String::from("10");
    if exponent < 0 {
        text.push('⁻');
    }
    for digit in exponent.unsigned_abs().to_string().chars() {
        text.push(RAISED[digit.to_digit(10).unwrap_or(0) as usize]);
    }
    text
}

/// The value to a number of significant digits, trailing zeros of the fraction dropped.
pub(crate) fn significant(value: f64, digits: u8) -> String {
    if !value.is_finite() {
        return MISSING.to_owned();
    }
    if value == 0.0 {
        return "0".to_owned();
    }
    let leading = exponent(value, digits);
    if !(-4..=9).contains(&leading) {
        let mantissa = trimmed(&fixed(value / 10f64.powi(leading), i32::from(digits) - 1));
        return format!("{mantissa} × {}", power_of_ten(leading));
    }
    trimmed(&fixed(value, (i32::from(digits) - 1 - leading).max(0)))
}

/// Drops the trailing zeros of a fraction.
fn trimmed(text: &str) -> String {
    if text.contains('.') {
        text.trim_end_matches('0').trim_end_matches('.').to_owned()
    } else {
        text.to_owned()
    }
}

/// A value to the place of its uncertainty, or to four digits where there is none.
pub(crate) fn beside(value: f64, sigma: Option<f64>) -> String {
    match usable(sigma) {
        Some(sigma) => fixed(value, decimals_of(sigma)),
        None => significant(value, 4),
    }
}

/// `value ± sigma`, or the value alone where no uncertainty is known.
pub(crate) fn plus_minus(value: f64, sigma: Option<f64>) -> String {
    if !value.is_finite() {
        return MISSING.to_owned();
    }
    let Some(sigma) = usable(sigma) else {
        return significant(value, 4);
    };
    let decimals = decimals_of(sigma);
    if decimals > 6 {
        let leading = exponent(value.abs().max(sigma), 2);
        let unit = 10f64.powi(leading);
        let places = decimals + leading;
        return format!(
            "({} ± {}) × {}",
            fixed(value / unit, places),
            fixed(sigma / unit, places),
            power_of_ten(leading)
        );
    }
    format!("{} ± {}", fixed(value, decimals), fixed(sigma, decimals))
}

/// An uncertainty that can set the digits: finite and above zero.
fn usable(sigma: Option<f64>) -> Option<f64> {
    sigma.filter(|sigma| sigma.is_finite() && *sigma > 0.0)
}

/// Text and unit with a space between; a dimensionless number stands alone.
pub(crate) fn with_unit(text: &str, unit: &str) -> String {
    match unit {
        "" | "1" | "-" => text.to_owned(),
        unit => format!("{text} {unit}"),
    }
}

/// A quantity with its unit; lengths below one metre in centimetres, times below a tenth of a second
/// in milliseconds. `None` where it has no value.
pub(crate) fn quantity(quantity: &Quantity) -> Option<String> {
    let value = quantity.value.filter(|value| value.is_finite())?;
    let (factor, unit) = match quantity.unit.as_str() {
        "m" if value.abs() < 1.0 => (100.0, "cm"),
        "s" if value.abs() < 0.1 => (1000.0, "ms"),
        unit => (1.0, unit),
    };
    let sigma = quantity.sigma.map(|sigma| sigma * factor);
    Some(with_unit(&plus_minus(value * factor, sigma), unit))
}

/// A quantity of the shape with its unit. `None` where it has no value.
pub(crate) fn shape(quantity: &ShapeQuantity) -> Option<String> {
    let value = quantity.value.filter(|value| value.is_finite())?;
    Some(with_unit(
        &plus_minus(value, quantity.sigma),
        &quantity.unit,
    ))
}

/// A standard uncertainty to two significant digits, zeros kept.
pub(crate) fn sigma(value: f64) -> String {
    if value == 0.0 {
        return "0".to_owned();
    }
    fixed(value, decimals_of(value))
}

/// `low to high` with the digits of the uncertainty.
pub(crate) fn interval(interval: [f64; 2], sigma: Option<f64>) -> String {
    format!(
        "{} to {}",
        beside(interval[0], sigma),
        beside(interval[1], sigma)
    )
}

/// A share between 0 and 1 in percent.
pub(crate) fn percent(share: f64) -> String {
    let value = share * 100.0;
    if !value.is_finite() {
        MISSING.to_owned()
    } else if value != 0.0 && value.abs() < 1.0 {
        significant(value, 2)
    } else if (99.0..100.0).contains(&value) {
        significant(value, 3)
    } else {
        fixed(value, 0)
    }
}

/// A count with thin spaces between the thousands.
pub(crate) fn count(value: usize) -> String {
    let digits = value.to_string();
    let mut text = String::with_capacity(digits.len() + 4);
    for (place, digit) in digits.chars().enumerate() {
        let left = digits.len() - place;
        if place > 0 && left.is_multiple_of(3) && digits.len() > 4 {
            text.push('\u{202f}');
        }
        text.push(digit);
    }
    text
}

/// A count with its noun.
pub(crate) fn plural(number: usize, noun: &str) -> String {
    let ending = if number == 1 { "" } else { "s" };
    format!("{} {noun}{ending}", count(number))
}

#[cfg(test)]
mod tests {
    use super::*;

    // Source of the expected texts: the worked statement of a result in JCGM 100:2008, 7.2.2,
    // m_s = 100.021 47 g with u_c = 0.35 mg, and the rounding examples of 7.2.6 (10.47 mohm goes
    // to two digits; 28.05 kHz to 28 kHz; 10.05762 ohm with 27 mohm to 10.058 ohm).
    #[test]
    fn rounds_as_the_guide_does() {
        assert_eq!(plus_minus(100.02147, Some(0.00035)), "100.02147 ± 0.00035");
        assert_eq!(plus_minus(10.05762, Some(0.027)), "10.058 ± 0.027");
        assert_eq!(fixed(28.05, decimals_of(28.05)), "28");
    }

    #[test]
    fn two_digits_of_sigma_at_every_size() {
        assert_eq!(plus_minus(9.1, Some(12.4)), "9 ± 12");
        assert_eq!(plus_minus(8.0, Some(0.6)), "8.00 ± 0.60");
        assert_eq!(plus_minus(0.5, Some(0.0996)), "0.50 ± 0.10");
        assert_eq!(plus_minus(12345.0, Some(678.0)), "12350 ± 680");
        assert_eq!(plus_minus(2.18e-7, Some(1.3e-8)), "(2.18 ± 0.13) × 10⁻⁷");
        assert_eq!(plus_minus(-0.04, Some(1.0)), "0.0 ± 1.0");
        assert_eq!(plus_minus(1.5, None), "1.5");
        assert_eq!(plus_minus(1.5, Some(0.0)), "1.5");
        assert_eq!(plus_minus(f64::NAN, Some(1.0)), MISSING);
    }

    #[test]
    fn significant_digits_and_percent() {
        assert_eq!(significant(0.00028765, 4), "0.0002877");
        assert_eq!(significant(1.5e-6, 4), "1.5 × 10⁻⁶");
        assert_eq!(significant(-778.25, 4), "-778.2");
        assert_eq!(percent(0.826), "83");
        assert_eq!(percent(0.0031), "0.31");
        assert_eq!(percent(0.998), "99.8");
        assert_eq!(count(12345), "12\u{202f}345");
        assert_eq!(count(640), "640");
    }
}
