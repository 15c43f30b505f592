//! Line plots as SVG.

use super::colours::of_line;
pub use super::colours::BLACK;
use super::page::{escape, number};

const WIDTH: f64 = 460.0;
const HEIGHT: f64 = 250.0;
const LEFT: f64 = 62.0;
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
    /// Number of its colour.
    pub colour: usize,
    /// Number of its dashes.
    pub dashes: usize,
    /// Its width.
    pub width: f64,
    /// Its points.
    pub points: Vec<(f64, f64)>,
}

/// One entry of the legend.
pub struct Sample {
    /// What lines of this look show.
    pub name: String,
    /// Number of the colour.
    pub colour: usize,
    /// Number of the dashes.
    pub dashes: usize,
}

/// What stands at a plot.
pub struct Axes<'a> {
    /// Title.
    pub title: &'a str,
    /// Unit of values.
    pub unit: &'a str,
    /// Unit of times.
    pub time_unit: &'a str,
    /// Time at which the axis ends.
    pub end: f64,
}

/// A plot over time; `None` when there is nothing to show.
pub fn plot(axes: &Axes, lines: &[Line], legend: &[Sample]) -> Option<String> {
    let points = || lines.iter().flat_map(|line| &line.points);
    points().next()?;
    let (low, high) = points().fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), (_, v)| (low.min(*v), high.max(*v)));
    let (start, end) = widen((0.0, axes.end), 0.0);
    let (low, high) = widen((low, high), 0.04);
    let x = |t: f64| LEFT + (t - start) / (end - start) * (WIDTH - LEFT - RIGHT);
    let y = |v: f64| HEIGHT - BOTTOM - (v - low) / (high - low) * (HEIGHT - TOP - BOTTOM);
    let mut body = String::new();
    let (times, step) = ticks(start, end);
    for t in times {
        let at = x(t);
        body += &format!(
            "<line class=\"grid\" x1=\"{at:.1}\" y1=\"{TOP}\" x2=\"{at:.1}\" y2=\"{:.1}\"/>\
             <text x=\"{at:.1}\" y=\"{:.1}\" text-anchor=\"middle\">{}</text>",
            HEIGHT - BOTTOM,
            HEIGHT - BOTTOM + 14.0,
            tick(t, step)
        );
    }
    let (values, step) = ticks(low, high);
    for v in values {
        let at = y(v);
        body += &format!(
            "<line class=\"grid\" x1=\"{LEFT}\" y1=\"{at:.1}\" x2=\"{:.1}\" y2=\"{at:.1}\"/>\
             <text x=\"{:.1}\" y=\"{:.1}\" text-anchor=\"end\">{}</text>",
            WIDTH - RIGHT,
            LEFT - 5.0,
            at + 4.0,
            tick(v, step)
        );
    }
    for line in lines {
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
            "<polyline class=\"line\" style=\"stroke-width:{:.1}\" stroke=\"{}\"{} points=\"{}\"/>",
            line.width,
            of_line(line.colour),
            DASHES[line.dashes % DASHES.len()],
            path.join(" ")
        );
        if let (1, Some((t, v))) = (line.points.len(), line.points.first()) {
            body += &format!("<circle cx=\"{:.1}\" cy=\"{:.1}\" r=\"3\" fill=\"{}\"/>", x(*t), y(*v), of_line(line.colour));
        }
    }
    let legend: String = legend
        .iter()
        .map(|sample| {
            format!(
                "<span><svg viewBox=\"0 0 36 8\" width=\"36\" height=\"8\"><line class=\"line\" x1=\"0\" y1=\"4\" x2=\"36\" \
                 y2=\"4\" stroke=\"{}\"{}/></svg> {}</span> ",
                of_line(sample.colour),
                DASHES[sample.dashes % DASHES.len()],
                escape(&sample.name)
            )
        })
        .collect();
    let title = escape(axes.title);
    let unit = if axes.unit.is_empty() { String::new() } else { format!(" [{}]", escape(axes.unit)) };
    Some(format!(
        "<figure class=\"plot\"><figcaption>{title}{unit}</figcaption>\
         <svg viewBox=\"0 0 {WIDTH} {HEIGHT}\" role=\"img\" aria-label=\"{title}{unit} over time\">\
         {body}<rect class=\"box\" x=\"{LEFT}\" y=\"{TOP}\" width=\"{:.1}\" height=\"{:.1}\"/>\
         <text x=\"{:.1}\" y=\"{:.1}\" text-anchor=\"middle\">time [{}]</text></svg>\
         <div class=\"legend\">{legend}</div></figure>\n",
        WIDTH - LEFT - RIGHT,
        HEIGHT - TOP - BOTTOM,
        0.5 * (LEFT + WIDTH - RIGHT),
        HEIGHT - 6.0,
        escape(axes.time_unit)
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

/// A tick with as many decimals as its step has, so that no two look the same.
fn tick(value: f64, step: f64) -> String {
    let decimals = (-(step * (1.0 + 1e-9)).log10().floor()).max(0.0) as usize;
    if decimals > 6 || value.abs() >= 1e6 { number(value) } else { format!("{value:.decimals$}") }
}

/// Round values within a range, about five of them, and their distance.
fn ticks(low: f64, high: f64) -> (Vec<f64>, f64) {
    let rough = (high - low) / 5.0;
    let power = 10f64.powf(rough.log10().floor());
    let step = [1.0, 2.0, 5.0, 10.0].into_iter().find(|f| f * power >= rough).unwrap_or(10.0) * power;
    let first = (low / step).ceil() as i64;
    let last = (high / step).floor() as i64;
    ((first..=last).take(20).map(|k| k as f64 * step).collect(), step)
}
