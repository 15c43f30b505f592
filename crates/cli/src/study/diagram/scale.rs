//! An axis of a diagram: its range, its ticks, its label.

use crate::commands::report::page::number;

/// An axis of a diagram.
#[derive(Clone, Debug, PartialEq)]
pub struct Scale {
    /// Name and unit.
    pub label: String,
    /// Ends.
    pub range: (f64, f64),
    /// Places with texts.
    pub ticks: Vec<(f64, String)>,
    /// Places without.
    pub small_ticks: Vec<f64>,
    /// Whether equal ratios are equally long.
    pub logarithmic: bool,
    /// All places where there are points, in order.
    pub stops: Vec<f64>,
}

/// More places than these get round ticks instead of their own.
const MOST_STOPS: usize = 8;
/// The sign of negative numbers.
const MINUS: &str = "−";

impl Scale {
    /// An axis with numbers. `own`: whether few values get ticks of their own.
    pub fn of(name: &str, unit: &str, places: &[Option<f64>], logarithmic: bool, own: bool) -> Self {
        let label = match unit {
            "" => name.to_owned(),
            unit => format!("{name} [{}]", typeset(unit)),
        };
        let mut stops: Vec<f64> = places.iter().flatten().copied().filter(|x| x.is_finite()).collect();
        stops.sort_by(f64::total_cmp);
        stops.dedup_by(|a, b| (*a - *b).abs() <= 1e-9 * b.abs());
        let logarithmic = logarithmic && stops.first().is_some_and(|x| *x > 0.0);
        let mut scale =
            Self { label, range: (0.0, 1.0), ticks: Vec::new(), small_ticks: Vec::new(), logarithmic, stops };
        let (first, last) = match (scale.stops.first(), scale.stops.last()) {
            (Some(first), Some(last)) => (scale.flat(*first), scale.flat(*last)),
            _ => (0.0, 1.0),
        };
        let flat: Vec<f64> = scale.stops.iter().map(|x| scale.flat(*x)).collect();
        // Half of the next gap, so that cells around the outer stops are as wide as those beside them.
        let room = |gap: Option<f64>| match last - first {
            width if width > 0.0 => (0.5 * gap.unwrap_or(0.0)).clamp(0.04 * width, 0.25 * width),
            _ if logarithmic => 0.3,
            _ if first == 0.0 => 1.0,
            _ => 0.1 * first.abs(),
        };
        let low = first - room(flat.windows(2).next().map(|pair| pair[1] - pair[0]));
        let high = last + room(flat.windows(2).last().map(|pair| pair[1] - pair[0]));
        scale.range = (scale.round(low), scale.round(high));
        if logarithmic { scale.logarithmic_ticks() } else { scale.linear_ticks(own) }
        scale
    }

    /// An axis with words.
    pub fn words(name: &str, words: Vec<String>) -> Self {
        let last = words.len().saturating_sub(1) as f64;
        Self {
            label: name.to_owned(),
            range: (-0.5, last + 0.5),
            stops: (0..words.len()).map(|k| k as f64).collect(),
            ticks: words.into_iter().enumerate().map(|(k, word)| (k as f64, word)).collect(),
            small_ticks: Vec::new(),
            logarithmic: false,
        }
    }

    /// A value on the scale on which the axis is even.
    fn flat(&self, x: f64) -> f64 {
        if self.logarithmic { x.log10() } else { x }
    }

    fn round(&self, x: f64) -> f64 {
        if self.logarithmic { 10f64.powf(x) } else { x }
    }

    /// Share of the length of the axis at which a value stands.
    pub fn share(&self, x: f64) -> f64 {
        let (low, high) = (self.flat(self.range.0), self.flat(self.range.1));
        (self.flat(x) - low) / (high - low)
    }

    /// Borders of the cells around the stops, as shares.
    pub fn borders(&self) -> Vec<f64> {
        let shares: Vec<f64> = self.stops.iter().map(|x| self.share(*x)).collect();
        let mut borders = vec![0.0];
        borders.extend(shares.windows(2).map(|pair| 0.5 * (pair[0] + pair[1])));
        borders.push(1.0);
        borders
    }

    fn linear_ticks(&mut self, own: bool) {
        let (low, high) = self.range;
        if own && self.stops.len() <= MOST_STOPS && self.stops.len() > 1 && self.are_apart(0.09) {
            self.ticks = self.stops.iter().map(|x| (*x, printed(*x))).collect();
            return;
        }
        let rough = (high - low) / 6.5;
        let power = 10f64.powf(rough.log10().floor());
        let step = [1.0, 2.0, 5.0, 10.0].into_iter().find(|f| f * power >= rough).unwrap_or(10.0) * power;
        let ticks = (low / step).ceil() as i64..=(high / step).floor() as i64;
        self.ticks = ticks.take(20).map(|k| k as f64 * step).map(|x| (x, printed(x))).collect();
    }

    fn logarithmic_ticks(&mut self) {
        let (low, high) = (self.range.0.log10(), self.range.1.log10());
        // Fewer texts over more decades.
        let digits: &[f64] = match high - low {
            width if width < 1.3 => &[1.0, 2.0, 3.0, 5.0],
            width if width < 2.6 => &[1.0, 2.0, 5.0],
            _ => &[1.0],
        };
        for decade in low.floor() as i32..=high.ceil() as i32 {
            for digit in 1..10 {
                // Decimal digits, not products, so that texts are short.
                let value: f64 = format!("{digit}e{decade}").parse().unwrap_or(f64::NAN);
                if value < self.range.0 || value > self.range.1 {
                    continue;
                }
                if digits.contains(&f64::from(digit)) {
                    self.ticks.push((value, printed(value)));
                } else {
                    self.small_ticks.push(value);
                }
            }
        }
        if self.ticks.len() < 2 {
            self.ticks = self.stops.iter().map(|x| (*x, printed(*x))).collect();
        }
    }

    /// Whether all stops are at least a share of the axis apart.
    fn are_apart(&self, share: f64) -> bool {
        self.stops.windows(2).all(|pair| self.share(pair[1]) - self.share(pair[0]) >= share)
    }
}

/// A number as it is printed: `10⁻⁷` for 1e-7.
fn printed(value: f64) -> String {
    let plain = number(value);
    let Some((digits, power)) = plain.split_once('e') else { return plain.replace('-', MINUS) };
    let power: String = power.chars().filter_map(raised).collect();
    match digits {
        "1" => format!("10{power}"),
        digits => format!("{}·10{power}", digits.replace('-', MINUS)),
    }
}

/// A unit as it is printed: `µm²` for `um^2`.
fn typeset(unit: &str) -> String {
    let mut text = String::new();
    let mut letters = unit.chars().peekable();
    let mut begins = true;
    while let Some(letter) = letters.next() {
        match letter {
            'u' if begins && letters.peek().is_some_and(|next| next.is_alphabetic()) => text.push('µ'),
            '^' => {
                while let Some(power) = letters.peek().and_then(|c| raised(*c)) {
                    text.push(power);
                    letters.next();
                }
            }
            _ => text.push(letter),
        }
        begins = !letter.is_alphanumeric();
    }
    text
}

fn raised(letter: char) -> Option<char> {
    match letter {
        '-' => Some('⁻'),
        digit => "⁰¹²³⁴⁵⁶⁷⁸⁹".chars().nth(digit.to_digit(10)? as usize),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn some(values: &[f64]) -> Vec<Option<f64>> {
        values.iter().copied().map(Some).collect()
    }

    #[test]
    fn cells_lie_round_their_stops() {
        let scale = Scale::of("x", "um^2", &some(&[1.0, 2.0, 3.0, 2.0]), false, true);
        assert_eq!(scale.label, "x [µm²]");
        assert_eq!(scale.range, (0.5, 3.5));
        let borders = scale.borders();
        assert!(borders.iter().zip([0.0, 1.0 / 3.0, 2.0 / 3.0, 1.0]).all(|(a, b)| (a - b).abs() < 1e-12), "{borders:?}");
    }

    #[test]
    fn logarithmic_axes_have_ticks_at_round_values() {
        let scale = Scale::of("x", "pN", &some(&[0.01, 0.1, 1.0]), true, true);
        let texts: Vec<&str> = scale.ticks.iter().map(|(_, text)| text.as_str()).collect();
        assert!(texts.contains(&"0.1") && texts.contains(&"1"));
        assert!((scale.share(0.1) - 0.5).abs() < 1e-12);
    }

    #[test]
    fn powers_are_raised() {
        assert_eq!(printed(1e-7), "10⁻⁷");
        assert_eq!(printed(-2.5e-9), "−2.5·10⁻⁹");
        assert_eq!(printed(0.05), "0.05");
    }

    #[test]
    fn a_single_value_has_room() {
        let scale = Scale::of("x", "", &some(&[2.0]), false, true);
        assert!(scale.range.0 < 2.0 && scale.range.1 > 2.0);
        assert!(Scale::of("x", "", &some(&[0.0]), false, true).range.1 > 0.0);
    }
}
