//! A number against a parameter, for both ways, as SVG.

use crate::commands::report::colours::of_line;
use crate::commands::report::page::{escape, number};
use crate::study::diagram::scale::Scale;
use std::fmt::Write;

const WIDTH: f64 = 640.0;
const HEIGHT: f64 = 420.0;
const LEFT: f64 = 96.0;
const RIGHT: f64 = 20.0;
const TOP: f64 = 40.0;
const BOTTOM: f64 = 56.0;
const PREFIXES: [(f64, &str); 8] =
    [(1.0, ""), (1e-3, "m"), (1e-6, "µ"), (1e-9, "n"), (1e-12, "p"), (1e-15, "f"), (1e-18, "a"), (1e-21, "z")];

/// One way along the parameter.
pub struct Line<'a> {
    /// Its name.
    pub name: &'a str,
    /// Parameter and number, in the order of the walk.
    pub points: Vec<(f64, f64)>,
}

/// The picture; axes are given by name and unit, the number in SI.
pub fn picture(title: &str, x: (&str, &str), y: (&str, &str), logarithmic: bool, lines: &[Line<'_>]) -> String {
    let largest = lines.iter().flat_map(|line| &line.points).fold(0.0, |most: f64, point| most.max(point.1.abs()));
    let power = match y.1 {
        "m^2" => 2,
        "m^3" => 3,
        _ => 1,
    };
    let (factor, prefix) = match y.1 {
        "" => (1.0, ""),
        _ => PREFIXES.into_iter().find(|(factor, _)| largest >= factor.powi(power)).unwrap_or(PREFIXES[0]),
    };
    let size = factor.powi(power);
    let of = |take: &dyn Fn(&(f64, f64)) -> f64| -> Vec<Option<f64>> {
        lines.iter().flat_map(|line| &line.points).map(|point| Some(take(point))).collect()
    };
    let right = Scale::of(x.0, x.1, &of(&|point| point.0), logarithmic, true);
    let unit = if y.1.is_empty() { String::new() } else { format!("{prefix}{}", y.1) };
    let up = Scale::of(y.0, &unit, &of(&|point| point.1 / size), false, false);
    let (width, height) = (WIDTH - LEFT - RIGHT, HEIGHT - TOP - BOTTOM);
    let place = |(x, y): (f64, f64)| (LEFT + right.share(x) * width, TOP + (1.0 - up.share(y / size)) * height);
    let low = TOP + height;
    let mut body = String::new();
    let mut text = |x: f64, y: f64, anchor: &str, size: f64, words: &str| {
        let _ = writeln!(
            body,
            "<text x=\"{x:.1}\" y=\"{y:.1}\" text-anchor=\"{anchor}\" fill=\"#111111\" style=\"font-size:{size}px\">{}</text>",
            escape(words)
        );
    };
    text(LEFT, 24.0, "start", 15.0, title);
    text(LEFT + 0.5 * width, HEIGHT - 14.0, "middle", 13.0, &right.label);
    for (value, words) in &right.ticks {
        text(LEFT + right.share(*value) * width, low + 18.0, "middle", 11.0, words);
    }
    for (value, _) in &up.ticks {
        text(LEFT - 8.0, TOP + (1.0 - up.share(*value)) * height + 4.0, "end", 11.0, &number(*value));
    }
    for (k, line) in lines.iter().enumerate() {
        text(LEFT + width - 60.0, TOP + 20.0 + 18.0 * k as f64, "start", 12.0, line.name);
    }
    let _ = writeln!(
        body,
        "<text transform=\"translate(20 {:.1}) rotate(-90)\" text-anchor=\"middle\" fill=\"#111111\" \
         style=\"font-size:13px\">{}</text>",
        TOP + 0.5 * height,
        escape(&up.label)
    );
    for (value, _) in &right.ticks {
        let at = LEFT + right.share(*value) * width;
        let _ = writeln!(body, "<path d=\"M{at:.1} {TOP}V{:.1}\" stroke=\"#e4e4e4\" stroke-width=\"0.8\"/>", low + 5.0);
    }
    for (value, _) in &up.ticks {
        let at = TOP + (1.0 - up.share(*value)) * height;
        let _ = writeln!(
            body,
            "<path d=\"M{:.1} {at:.1}H{:.1}\" stroke=\"#e4e4e4\" stroke-width=\"0.8\"/>",
            LEFT - 5.0,
            LEFT + width
        );
    }
    for (k, line) in lines.iter().enumerate() {
        let colour = of_line(k);
        let places: Vec<(f64, f64)> = line.points.iter().map(|point| place(*point)).collect();
        let path: Vec<String> = places.iter().map(|(x, y)| format!("{x:.1},{y:.1}")).collect();
        let dashes = if k == 0 { "" } else { " stroke-dasharray=\"6 3\"" };
        let _ = writeln!(
            body,
            "<polyline fill=\"none\" stroke=\"{colour}\" stroke-width=\"1.6\"{dashes} points=\"{}\"/>",
            path.join(" ")
        );
        for (x, y) in &places {
            mark(&mut body, k, (*x, *y), colour);
        }
        mark(&mut body, k, (LEFT + width - 74.0, TOP + 16.0 + 18.0 * k as f64), colour);
    }
    let _ = writeln!(
        body,
        "<rect x=\"{LEFT}\" y=\"{TOP}\" width=\"{width:.1}\" height=\"{height:.1}\" fill=\"none\" stroke=\"#222222\"/>"
    );
    format!(
        "<svg xmlns=\"http://www.w3.org/2000/svg\" viewBox=\"0 0 {WIDTH} {HEIGHT}\" width=\"{WIDTH}\" height=\"{HEIGHT}\" \
         role=\"img\" font-family=\"DejaVu Sans, Verdana, Arial, sans-serif\">\n<title>{}</title>\n\
         <rect width=\"100%\" height=\"100%\" fill=\"#ffffff\"/>\n{body}</svg>\n",
        escape(title)
    )
}

/// Triangles pointing up for the way up, down for the way back.
fn mark(body: &mut String, way: usize, (x, y): (f64, f64), colour: &str) {
    let tip = if way == 0 { -4.5 } else { 4.5 };
    let _ = writeln!(
        body,
        "<path d=\"M{x:.1} {:.1}L{:.1} {:.1}L{:.1} {:.1}Z\" fill=\"{colour}\"/>",
        y + tip,
        x - 4.5,
        y - 0.8 * tip,
        x + 4.5,
        y - 0.8 * tip
    );
}
