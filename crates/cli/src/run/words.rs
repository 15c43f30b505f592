//! Numbers and durations for people.

use crate::units::{measure, parse_as};

/// A value with an SI prefix and four digits: `2.5 ms`.
pub fn with_unit(value: f64, unit: &str) -> String {
    const PREFIXES: [(f64, &str); 11] = [
        (1e9, "G"),
        (1e6, "M"),
        (1e3, "k"),
        (1.0, ""),
        (1e-3, "m"),
        (1e-6, "u"),
        (1e-9, "n"),
        (1e-12, "p"),
        (1e-15, "f"),
        (1e-18, "a"),
        (1e-21, "z"),
    ];
    if value == 0.0 || !value.is_finite() {
        return format!("{value} {unit}");
    }
    // A hair of slack, so that 1e-3 − rounding is one thousandth and not 1000 millionths.
    let size = value.abs() * (1.0 + 1e-9);
    let found = PREFIXES.iter().find(|(factor, _)| size >= *factor && size < 1e4 * factor);
    match found {
        Some((factor, prefix)) => format!("{} {prefix}{unit}", digits(value / factor)),
        None => format!("{value:.3e} {unit}"),
    }
}

/// Four significant digits, without trailing zeros.
fn digits(value: f64) -> String {
    let whole = (value.abs().log10().floor() as i32).clamp(0, 3);
    let text = format!("{value:.*}", (3 - whole) as usize);
    match text.contains('.') {
        true => text.trim_end_matches('0').trim_end_matches('.').to_owned(),
        false => text,
    }
}

/// A wall time: `1 h 04 min`, `3.2 s`.
pub fn duration(seconds: f64) -> String {
    if seconds < 60.0 {
        return format!("{seconds:.1} s");
    }
    let minutes = (seconds / 60.0) as u64;
    match minutes / 60 {
        0 => format!("{minutes} min {:02} s", (seconds as u64) % 60),
        hours => format!("{hours} h {:02} min", minutes % 60),
    }
}

/// A simulated time from the command line [s]: `20 s`, `5 ms`, or a plain number of seconds.
///
/// # Errors
/// What is wrong with the text.
pub fn simulated_time(text: &str) -> Result<f64, String> {
    let seconds = match text.trim().parse::<f64>() {
        Ok(seconds) => seconds,
        Err(_) => parse_as(text, &measure::TIME, None).map_err(|error| error.message)?,
    };
    if seconds > 0.0 && seconds.is_finite() {
        Ok(seconds)
    } else {
        Err("the time must be positive and finite".into())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn values_are_readable() {
        assert_eq!(with_unit(2.5e-3, "s"), "2.5 ms");
        assert_eq!(with_unit(1e-3, "s"), "1 ms");
        assert_eq!(with_unit(0.01 * 0.1, "s"), "1 ms");
        assert_eq!(with_unit(-1.23456e-17, "J"), "-12.35 aJ");
        assert_eq!(with_unit(1234.0, "s"), "1.234 ks");
        assert_eq!(with_unit(0.0, "s"), "0 s");
        assert_eq!(with_unit(1e-40, "J"), "1.000e-40 J");
        assert_eq!(duration(3.21), "3.2 s");
        assert_eq!(duration(65.0), "1 min 05 s");
        assert_eq!(duration(3840.0), "1 h 04 min");
        assert_eq!(simulated_time("5 ms"), Ok(5e-3));
        assert_eq!(simulated_time("7"), Ok(7.0));
        assert!(simulated_time("-7").is_err());
        assert!(simulated_time("7 um").is_err());
    }
}
