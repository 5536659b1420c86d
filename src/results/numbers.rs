//! How numbers are written in sentences. Tables and sentences share these, so that a number looks the same everywhere.

/// A number with `digits` significant digits, without exponent where it stays readable.
///
/// ```
/// use aforesaid::results::numbers::significant;
/// assert_eq!(significant(12.3456, 3), "12.3");
/// assert_eq!(significant(-0.000123456, 3), "-0.000123");
/// assert_eq!(significant(1234567.0, 3), "1234567");
/// assert_eq!(significant(1.5e-9, 3), "1.50e-9");
/// assert_eq!(significant(0.0, 3), "0");
/// assert_eq!(significant(9.9996, 4), "10.00");
/// ```
pub fn significant(value: f64, digits: usize) -> String {
    if value == 0.0 {
        return "0".to_owned();
    }
    let scientific = format!("{value:.*e}", digits.saturating_sub(1));
    let exponent: i32 = scientific.rsplit('e').next().and_then(|text| text.parse().ok()).unwrap_or(0);
    if !(-4..15).contains(&exponent) {
        return scientific;
    }
    let decimals = (digits as i32 - 1 - exponent).max(0) as usize;
    format!("{value:.decimals$}")
}

/// A p-value: three significant digits, exact; a bound is written as one.
///
/// ```
/// use aforesaid::results::numbers::p_value;
/// assert_eq!(p_value(0.00742, false), "0.00742");
/// assert_eq!(p_value(0.5, false), "0.500");
/// assert_eq!(p_value(1.0, false), "1");
/// assert_eq!(p_value(1e-300, true), "below 1e-300");
/// ```
pub fn p_value(p: f64, bound: bool) -> String {
    if bound {
        return "below 1e-300".to_owned();
    }
    if p == 1.0 {
        return "1".to_owned();
    }
    // A p that would round up to one is not one.
    if p > 0.9995 {
        return "above 0.999".to_owned();
    }
    significant(p, 3)
}

/// An estimate or a bound of an interval, to the precision that its standard error can carry: the second significant
/// digit of the error, or four significant digits where there is none.
///
/// ```
/// use aforesaid::results::numbers::estimate;
/// assert_eq!(estimate(-5.43210, Some(2.1)), "-5.4");
/// assert_eq!(estimate(123.456, Some(0.0123)), "123.456");
/// assert_eq!(estimate(123.456, None), "123.5");
/// ```
pub fn estimate(value: f64, standard_error: Option<f64>) -> String {
    match standard_error {
        Some(error) if error > 0.0 && error.is_finite() => {
            let exponent = libm::floor(libm::log10(error)) as i32;
            let decimals = 1 - exponent;
            if (0..=12).contains(&decimals) {
                let text = format!("{value:.*}", decimals as usize);
                // No "-0.0".
                if text.trim_start_matches('-').chars().all(|c| c == '0' || c == '.') {
                    text.trim_start_matches('-').to_owned()
                } else {
                    text
                }
            } else {
                significant(value, 4)
            }
        }
        _ => significant(value, 4),
    }
}

/// Degrees of freedom: whole ones as such, others to two decimals or five significant digits.
///
/// ```
/// use aforesaid::results::numbers::degrees_of_freedom;
/// assert_eq!(degrees_of_freedom(134.0), "134");
/// assert_eq!(degrees_of_freedom(121.9391), "121.94");
/// assert_eq!(degrees_of_freedom(0.8672), "0.87");
/// ```
pub fn degrees_of_freedom(df: f64) -> String {
    if libm::trunc(df) == df && df.abs() < 1e15 { format!("{df:.0}") } else { format!("{df:.2}") }
}
