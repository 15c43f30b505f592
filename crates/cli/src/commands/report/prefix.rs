//! Units with the prefix that keeps numbers short.

/// A unit of the SI and the power to which a prefix enters it (2 for areas); `None` for plain numbers.
pub type Unit = Option<(&'static str, i32)>;

const PREFIXES: [(i32, &str); 9] =
    [(-24, "y"), (-21, "z"), (-18, "a"), (-15, "f"), (-12, "p"), (-9, "n"), (-6, "µ"), (-3, "m"), (0, "")];

/// Factor on values, and their unit, so that the largest is between 1 and 1000 (to the power of the prefix).
pub fn prefixed(unit: Unit, largest: f64) -> (f64, String) {
    let Some((unit, power)) = unit else { return (1.0, String::new()) };
    let (exponent, prefix) = PREFIXES
        .into_iter()
        .rev()
        .find(|(exponent, _)| largest >= 10f64.powi(exponent * power) * (1.0 - 1e-9))
        .unwrap_or((0, ""));
    (10f64.powi(-exponent * power), format!("{prefix}{unit}"))
}
