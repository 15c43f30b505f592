//! Colours that colour-blind readers can tell apart and that print well in grey.

/// Cividis: Nuñez, Anderton & Renslow, PLoS ONE 13 (2018) e0199239; ten of its values, linear in between.
const CIVIDIS: [[f64; 3]; 10] = [
    [0.0, 34.0, 78.0],
    [18.0, 53.0, 112.0],
    [59.0, 73.0, 108.0],
    [87.0, 93.0, 109.0],
    [112.0, 113.0, 115.0],
    [138.0, 134.0, 120.0],
    [165.0, 156.0, 116.0],
    [195.0, 179.0, 105.0],
    [225.0, 204.0, 85.0],
    [254.0, 232.0, 56.0],
];

/// Lines: Okabe & Ito, "Color universal design" (2008).
const LINES: [&str; 7] = ["#0072b2", "#d55e00", "#009e73", "#cc79a7", "#e69f00", "#56b4e9", "#000000"];

/// Number of the colour of what belongs to no run.
pub const BLACK: usize = 6;

/// Colour of a share from 0 to 1, with light from 0 to 1.
pub fn of_share(share: f64, light: f64) -> String {
    let share = if share.is_finite() { share.clamp(0.0, 1.0) } else { 0.5 };
    let place = share * (CIVIDIS.len() - 1) as f64;
    let low = (place as usize).min(CIVIDIS.len() - 2);
    let part = place - low as f64;
    let mix = |k: usize| light * (CIVIDIS[low][k] * (1.0 - part) + CIVIDIS[low + 1][k] * part);
    format!("#{:02x}{:02x}{:02x}", mix(0) as u8, mix(1) as u8, mix(2) as u8)
}

/// Colour of the line of a run.
pub fn of_line(index: usize) -> &'static str {
    LINES[index % LINES.len()]
}

/// A bar that explains the colours of a quantity.
pub fn bar(low: f64, high: f64, name: &str) -> String {
    let steps: String = (0..64)
        .map(|k| format!("<rect x=\"{}\" y=\"0\" width=\"3.2\" height=\"12\" fill=\"{}\"/>", 3 * k, of_share(k as f64 / 63.0, 1.0)))
        .collect();
    format!(
        "<p class=\"legend\">{}: {} <svg viewBox=\"0 0 192 12\" width=\"192\" height=\"12\" role=\"img\" \
         aria-label=\"colours\">{steps}</svg> {}</p>",
        super::page::escape(name),
        super::page::number(low),
        super::page::number(high)
    )
}
