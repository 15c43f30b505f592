//! Line plots as SVG.

use super::colours::of_line;
use super::page::{escape, number};

const WIDTH: f64 = 640.0;
const HEIGHT: f64 = 260.0;
const LEFT: f64 = 78.0;
const RIGHT: f64 = 12.0;
const TOP: f64 = 12.0;
const BOTTOM: f64 = 40.0;
/// More points than this add nothing that could be seen.
const MOST_POINTS: usize = 1200;
/// Dashes, as attributes.
const DASHES: [&str; 5] = [
    "",
    " stroke-dasharray=\"7 3\"",
    " stroke-dasharray=\"2 3\"",
    " stroke-dasharray=\"9 3 2 3\"",
    " stroke-dasharray=\"12 5\"",
];

/// One line of a plot.
pub struct Line {
    /// What it shows.
    pub name: String,
    /// Number of its colour.
    pub colour: usize,
    /// Number of its dashes.
    pub dashes: usize,
    /// Its points.
    pub points: Vec<(f64, f64)>,
}

/// A plot over time; `None` when there is nothing to show.
pub fn plot(title: &str, unit: &str, lines: &[Line]) -> Option<String> {
    let lines: Vec<&Line> = lines.iter().filter(|line| !line.points.is_empty()).collect();
    let points = || lines.iter().flat_map(|line| &line.points);
    points().next()?;
    let range = |of: &dyn Fn(&(f64, f64)) -> f64| {
        points().map(of).fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), x| (low.min(x), high.max(x)))
    };
    let (start, end) = widen(range(&|p| p.0), 0.0);
    let (low, high) = widen(range(&|p| p.1), 0.04);
    let x = |t: f64| LEFT + (t - start) / (end - start) * (WIDTH - LEFT - RIGHT);
    let y = |v: f64| HEIGHT - BOTTOM - (v - low) / (high - low) * (HEIGHT - TOP - BOTTOM);
    let mut body = String::new();
    for t in ticks(start, end) {
        let at = x(t);
        body += &format!(
            "<line class=\"grid\" x1=\"{at:.1}\" y1=\"{TOP}\" x2=\"{at:.1}\" y2=\"{:.1}\"/>\
             <text x=\"{at:.1}\" y=\"{:.1}\" text-anchor=\"middle\">{}</text>",
            HEIGHT - BOTTOM,
            HEIGHT - BOTTOM + 14.0,
            number(t)
        );
    }
    for v in ticks(low, high) {
        let at = y(v);
        body += &format!(
            "<line class=\"grid\" x1=\"{LEFT}\" y1=\"{at:.1}\" x2=\"{:.1}\" y2=\"{at:.1}\"/>\
             <text x=\"{:.1}\" y=\"{:.1}\" text-anchor=\"end\">{}</text>",
            WIDTH - RIGHT,
            LEFT - 5.0,
            at + 4.0,
            number(v)
        );
    }
    for line in &lines {
        let every = line.points.len().div_ceil(MOST_POINTS).max(1);
        let last = line.points.len() - 1;
        let path: Vec<String> = line
            .points
            .iter()
            .enumerate()
            .filter(|(k, _)| k % every == 0 || *k == last)
            .map(|(_, (t, v))| format!("{:.1},{:.1}", x(*t), y(*v)))
            .collect();
        body += &format!(
            "<polyline class=\"line\" stroke=\"{}\"{} points=\"{}\"/>",
            of_line(line.colour),
            DASHES[line.dashes % DASHES.len()],
            path.join(" ")
        );
        if let (1, Some((t, v))) = (line.points.len(), line.points.first()) {
            body += &format!("<circle cx=\"{:.1}\" cy=\"{:.1}\" r=\"3\" fill=\"{}\"/>", x(*t), y(*v), of_line(line.colour));
        }
    }
    let legend: Vec<String> = lines
        .iter()
        .map(|line| {
            format!(
                "<span><svg viewBox=\"0 0 36 8\" width=\"36\" height=\"8\"><line class=\"line\" x1=\"0\" y1=\"4\" x2=\"36\" \
                 y2=\"4\" stroke=\"{}\"{}/></svg> {}</span>",
                of_line(line.colour),
                DASHES[line.dashes % DASHES.len()],
                escape(&line.name)
            )
        })
        .collect();
    let unit = if unit.is_empty() { String::new() } else { format!(" [{}]", escape(unit)) };
    Some(format!(
        "<figure><figcaption>{title}{unit}</figcaption>\
         <svg viewBox=\"0 0 {WIDTH} {HEIGHT}\" width=\"{WIDTH}\" height=\"{HEIGHT}\" role=\"img\" aria-label=\"{title}\">\
         {body}<rect class=\"box\" x=\"{LEFT}\" y=\"{TOP}\" width=\"{:.1}\" height=\"{:.1}\"/>\
         <text x=\"{:.1}\" y=\"{:.1}\" text-anchor=\"middle\">time [s]</text></svg>\
         <div class=\"legend\">{}</div></figure>\n",
        WIDTH - LEFT - RIGHT,
        HEIGHT - TOP - BOTTOM,
        0.5 * (LEFT + WIDTH - RIGHT),
        HEIGHT - 6.0,
        legend.join(" "),
        title = escape(title)
    ))
}

/// A range with room round it, never empty.
fn widen((low, high): (f64, f64), share: f64) -> (f64, f64) {
    let width = high - low;
    // Differences at the level of rounding are not to fill the plot.
    if width > 1e-9 * low.abs().max(high.abs()) {
        (low - share * width, high + share * width)
    } else {
        let room = if low == 0.0 { 1.0 } else { 0.05 * low.abs() };
        (low - room, high + room)
    }
}

/// Round values within a range, about five of them.
fn ticks(low: f64, high: f64) -> Vec<f64> {
    let rough = (high - low) / 5.0;
    let power = 10f64.powf(rough.log10().floor());
    let step = [1.0, 2.0, 5.0, 10.0].into_iter().find(|f| f * power >= rough).unwrap_or(10.0) * power;
    let first = (low / step).ceil() as i64;
    let last = (high / step).floor() as i64;
    (first..=last).take(20).map(|k| k as f64 * step).collect()
}
