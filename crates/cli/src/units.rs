//! Values with units, as in "20 kBT", "0.5 pN" or "1e-9 N s/m": parsed to SI, with their dimension checked.
//!
//! A unit is a product of factors separated by spaces, `*` or `·`; `/` inverts the factor after it. A factor is a
//! unit with an optional SI prefix and an optional whole power (`um^2`, `µm²`, `s^-1`). No crate for units that was
//! looked at reads such products together with kBT, whose value depends on the scenario's temperature.

pub mod measure;
#[cfg(test)]
mod tests;

use std::fmt;
use std::ops::Range;

/// Boltzmann's constant [J/K] (exact, SI 2019).
pub const BOLTZMANN: f64 = 1.380_649e-23;
/// Avogadro's number [1/mol] (exact, SI 2019).
pub const AVOGADRO: f64 = 6.022_140_76e23;
/// Longest text read as a value.
const LONGEST: usize = 200;

/// Powers of kilogram, metre, second, kelvin and mole.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Dimension {
    /// Power of mass.
    pub mass: i32,
    /// Power of length.
    pub length: i32,
    /// Power of time.
    pub time: i32,
    /// Power of temperature.
    pub temperature: i32,
    /// Power of amount of substance.
    pub amount: i32,
}

const fn dimension(mass: i32, length: i32, time: i32, temperature: i32, amount: i32) -> Dimension {
    Dimension {
        mass,
        length,
        time,
        temperature,
        amount,
    }
}

impl Dimension {
    /// A plain number.
    pub const NONE: Self = dimension(0, 0, 0, 0, 0);

    fn times(self, other: Self, power: i32) -> Self {
        dimension(
            self.mass + power * other.mass,
            self.length + power * other.length,
            self.time + power * other.time,
            self.temperature + power * other.temperature,
            self.amount + power * other.amount,
        )
    }
}

impl fmt::Display for Dimension {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let powers = [
            ("kg", self.mass),
            ("m", self.length),
            ("s", self.time),
            ("K", self.temperature),
            ("mol", self.amount),
        ];
        let mut first = true;
        for (unit, power) in powers.into_iter().filter(|(_, power)| *power != 0) {
            if !first {
                f.write_str(" ")?;
            }
            first = false;
            match power {
                1 => f.write_str(unit)?,
                _ => write!(f, "{unit}^{power}")?,
            }
        }
        if first {
            f.write_str("no unit")?;
        }
        Ok(())
    }
}

/// A kind of quantity that a scenario asks for.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Measure {
    /// Name, as it stands after "a".
    pub name: &'static str,
    /// Dimension.
    pub dimension: Dimension,
    /// SI unit with factor one.
    pub unit: &'static str,
    /// Example of a value.
    pub example: &'static str,
}

/// "a" or "an".
pub fn article(name: &str) -> &'static str {
    if name.starts_with(['a', 'e', 'i', 'o']) {
        "an"
    } else {
        "a"
    }
}

/// What a value of a dimension is called.
pub fn name_of(dimension: Dimension) -> String {
    if dimension == Dimension::NONE {
        return "a plain number".into();
    }
    match measure::ALL.iter().find(|m| m.dimension == dimension) {
        Some(known) => format!("{} {} [{}]", article(known.name), known.name, known.unit),
        None => format!("a value in {dimension}"),
    }
}

/// Why a text is no value of the wanted kind.
#[derive(Clone, Debug, PartialEq)]
pub struct UnitError {
    /// The bytes of the text concerned.
    pub span: Range<usize>,
    /// What is wrong.
    pub message: String,
}

fn refuse<T>(span: Range<usize>, message: impl Into<String>) -> Result<T, UnitError> {
    Err(UnitError {
        span,
        message: message.into(),
    })
}

/// A factor to SI and its dimension. Powers of ten are kept apart and divided by where negative, so that "5 um" is
/// exactly 5e-6.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Unit {
    factor: f64,
    decimals: i32,
    /// Dimension.
    pub dimension: Dimension,
}

impl Unit {
    /// A number of such units in SI.
    pub fn times(&self, number: f64) -> f64 {
        let shift = 10f64.powi(self.decimals.abs());
        if self.decimals < 0 {
            number * self.factor / shift
        } else {
            number * self.factor * shift
        }
    }
}

/// Units that take SI prefixes: name, power of ten to SI, dimension.
const PREFIXABLE: [(&str, i32, Dimension); 12] = [
    ("m", 0, dimension(0, 1, 0, 0, 0)),
    ("g", -3, dimension(1, 0, 0, 0, 0)),
    ("s", 0, dimension(0, 0, 1, 0, 0)),
    ("K", 0, dimension(0, 0, 0, 1, 0)),
    ("mol", 0, dimension(0, 0, 0, 0, 1)),
    ("N", 0, dimension(1, 1, -2, 0, 0)),
    ("J", 0, dimension(1, 2, -2, 0, 0)),
    ("W", 0, dimension(1, 2, -3, 0, 0)),
    ("Pa", 0, dimension(1, -1, -2, 0, 0)),
    ("Hz", 0, dimension(0, 0, -1, 0, 0)),
    ("M", 3, dimension(0, -3, 0, 0, 1)),
    ("L", -3, dimension(0, 3, 0, 0, 0)),
];

/// Units without prefixes.
const PLAIN: [(&str, i32, Dimension); 5] = [
    ("kg", 0, dimension(1, 0, 0, 0, 0)),
    ("bar", 5, dimension(1, -1, -2, 0, 0)),
    ("dyn", -5, dimension(1, 1, -2, 0, 0)),
    ("Å", -10, dimension(0, 1, 0, 0, 0)),
    ("1", 0, Dimension::NONE),
];

const PREFIXES: [(&str, i32); 14] = [
    ("a", -18),
    ("f", -15),
    ("p", -12),
    ("n", -9),
    ("u", -6),
    ("µ", -6),
    ("μ", -6),
    ("m", -3),
    ("c", -2),
    ("d", -1),
    ("k", 3),
    ("M", 6),
    ("G", 9),
    ("T", 12),
];

fn look_up(name: &str, thermal_energy: Option<f64>) -> Result<Unit, String> {
    let special = |factor, dimension| {
        Ok(Unit {
            factor,
            decimals: 0,
            dimension,
        })
    };
    match (name, thermal_energy) {
        ("kBT" | "kT", Some(energy)) => return special(energy, measure::ENERGY.dimension),
        ("kBT" | "kT", None) => {
            return Err("kBT itself depends on the temperature and cannot be used here".into());
        }
        ("min", _) => return special(60.0, measure::TIME.dimension),
        ("h", _) => return special(3600.0, measure::TIME.dimension),
        _ => {}
    }
    let find = |list: &[(&str, i32, Dimension)], name: &str, prefix: i32| {
        list.iter().find(|unit| unit.0 == name).map(|unit| Unit {
            factor: 1.0,
            decimals: unit.1 + prefix,
            dimension: unit.2,
        })
    };
    if let Some(unit) = find(&PLAIN, name, 0).or_else(|| find(&PREFIXABLE, name, 0)) {
        return Ok(unit);
    }
    for (prefix, decimals) in PREFIXES {
        if let Some(unit) = name
            .strip_prefix(prefix)
            .and_then(|rest| find(&PREFIXABLE, rest, decimals))
        {
            return Ok(unit);
        }
    }
    Err(match name {
        "degC" | "°C" | "C" => {
            "degrees Celsius are not read; give kelvin (25 °C is 298.15 K)".into()
        }
        "micron" | "microns" => "write \"um\" for micrometres".into(),
        _ => format!("\"{name}\" is not a unit known here"),
    })
}

/// A parsed value.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Quantity {
    /// Value in SI.
    pub value: f64,
    /// Dimension.
    pub dimension: Dimension,
}

/// Length of the number at the start of a text.
pub fn number_length(text: &str) -> usize {
    let bytes = text.as_bytes();
    let digits = |mut at: usize| {
        while bytes.get(at).is_some_and(u8::is_ascii_digit) {
            at += 1;
        }
        at
    };
    let start = usize::from(matches!(bytes.first(), Some(b'+' | b'-')));
    let mut end = digits(start);
    let mut any = end > start;
    if bytes.get(end) == Some(&b'.') {
        let after = digits(end + 1);
        any |= after > end + 1;
        end = after;
    }
    if !any {
        return 0;
    }
    if matches!(bytes.get(end), Some(b'e' | b'E')) {
        let sign = usize::from(matches!(bytes.get(end + 1), Some(b'+' | b'-')));
        let after = digits(end + 1 + sign);
        if after > end + 1 + sign {
            end = after;
        }
    }
    end
}

/// Parse a value with its unit.
///
/// # Errors
/// [`UnitError`] with the place in the text: no number, not finite, an unknown unit.
pub fn parse(text: &str, thermal_energy: Option<f64>) -> Result<Quantity, UnitError> {
    let whole = 0..text.len();
    if text.len() > LONGEST {
        return refuse(whole, "the text is too long for a value with a unit");
    }
    let start = text.len() - text.trim_start().len();
    let length = number_length(&text[start..]);
    if length == 0 {
        let lower = text.trim().to_lowercase();
        let not_finite = ["nan", "inf", "+inf", "-inf", "-nan", "+nan", "infinity"]
            .iter()
            .any(|word| lower.split_whitespace().next() == Some(*word));
        return refuse(
            whole,
            if not_finite {
                "the number must be finite"
            } else {
                "no number at the start"
            },
        );
    }
    let end = start + length;
    let rest = &text[end..];
    if rest.starts_with(',') {
        return refuse(end..end + 1, "the decimal sign is a point, not a comma");
    }
    let number: f64 = match text[start..end].parse() {
        Ok(number) => number,
        Err(_) => return refuse(start..end, "not a number"),
    };
    if !number.is_finite() {
        return refuse(start..end, "the number must be finite");
    }
    let unit = parse_unit(rest, end, thermal_energy)?;
    let value = unit.times(number);
    if !value.is_finite() || (value == 0.0 && number != 0.0) {
        return refuse(whole, "the value is beyond the range of double precision");
    }
    Ok(Quantity {
        value,
        dimension: unit.dimension,
    })
}

/// Parse a product of units; `offset` is where the text starts in the value, for messages.
///
/// # Errors
/// As [`parse`].
pub fn parse_unit(
    text: &str,
    offset: usize,
    thermal_energy: Option<f64>,
) -> Result<Unit, UnitError> {
    let mut product = Unit {
        factor: 1.0,
        decimals: 0,
        dimension: Dimension::NONE,
    };
    let mut invert = false;
    let mut pending = None;
    let mut rest = text;
    while let Some(first) = rest.chars().next() {
        let at = offset + text.len() - rest.len();
        match first {
            ' ' | '\t' | '\u{a0}' | '\u{202f}' => {
                rest = &rest[first.len_utf8()..];
                continue;
            }
            '*' | '·' | '⋅' | '/' => {
                if pending.is_some() {
                    return refuse(
                        at..at + first.len_utf8(),
                        "a unit is missing before this sign",
                    );
                }
                pending = Some(at..at + first.len_utf8());
                invert = first == '/';
                rest = &rest[first.len_utf8()..];
                continue;
            }
            '(' | ')' => {
                return refuse(
                    at..at + 1,
                    "brackets are not read; write m/s/Pa for m/(s Pa)",
                );
            }
            _ => {}
        }
        let is_name = |c: char| c.is_alphabetic() && c != 'º' || matches!(c, '°' | '_');
        let length = if first == '1' {
            1
        } else {
            rest.find(|c: char| !is_name(c)).unwrap_or(rest.len())
        };
        if length == 0 {
            return refuse(
                at..at + first.len_utf8(),
                format!("\"{first}\" has no place in a unit"),
            );
        }
        let name = &rest[..length];
        let (power, used) = power(&rest[length..]).map_err(|message| UnitError {
            span: at..at + length,
            message,
        })?;
        rest = &rest[length + used..];
        let unit = look_up(name, thermal_energy).map_err(|message| UnitError {
            span: at..at + length,
            message,
        })?;
        let power = if invert { -power } else { power };
        product.factor *= unit.factor.powi(power);
        product.decimals += power * unit.decimals;
        product.dimension = product.dimension.times(unit.dimension, power);
        invert = false;
        pending = None;
    }
    match pending {
        Some(span) => refuse(span, "a unit is missing after this sign"),
        None => Ok(product),
    }
}

/// The power after a unit and the bytes it takes: `^2`, `^-1`, `²`, `⁻¹`, `2`, or nothing.
fn power(text: &str) -> Result<(i32, usize), String> {
    let (digits, used) = if let Some(rest) = text.strip_prefix('^') {
        let length = rest
            .char_indices()
            .find(|(i, c)| !(c.is_ascii_digit() || *i == 0 && matches!(c, '-' | '+' | '−')))
            .map_or(rest.len(), |(i, _)| i);
        (rest[..length].replace('−', "-"), 1 + length)
    } else {
        let raised = |c: char| "⁰¹²³⁴⁵⁶⁷⁸⁹".chars().position(|s| s == c);
        let mut digits = String::new();
        let mut used = 0;
        for c in text.chars() {
            match (raised(c), c) {
                (Some(digit), _) => digits.push_str(&digit.to_string()),
                (None, '⁻') if digits.is_empty() => digits.push('-'),
                _ => break,
            }
            used += c.len_utf8();
        }
        if used == 0 {
            return Ok((1, 0));
        }
        (digits, used)
    };
    match digits.parse::<i32>() {
        Ok(power) if (-9..=9).contains(&power) && power != 0 => Ok((power, used)),
        _ => Err("the power of a unit is a whole number between -9 and 9, as in m^2".into()),
    }
}

/// Parse a value of a given kind to SI. Amounts may be given in moles or as numbers of particles.
///
/// # Errors
/// As [`parse`]; and when the dimension is another one.
pub fn parse_as(
    text: &str,
    measure: &Measure,
    thermal_energy: Option<f64>,
) -> Result<f64, UnitError> {
    let quantity = parse(text, thermal_energy)?;
    if quantity.dimension == measure.dimension {
        return Ok(quantity.value);
    }
    let counted = Dimension {
        amount: 0,
        ..measure.dimension
    };
    if measure.dimension.amount != 0 && quantity.dimension == counted {
        return Ok(quantity.value * AVOGADRO.powi(-measure.dimension.amount));
    }
    refuse(
        0..text.len(),
        if quantity.dimension == Dimension::NONE {
            format!(
                "the unit is missing: expected {} {} [{}]",
                article(measure.name),
                measure.name,
                measure.unit
            )
        } else {
            format!(
                "this is {}, but {} {} [{}] is expected",
                name_of(quantity.dimension),
                article(measure.name),
                measure.name,
                measure.unit
            )
        },
    )
}
