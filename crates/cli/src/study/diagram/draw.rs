//! The phase diagram as SVG: classes by colour and by shape, so that nobody needs to tell colours apart.

use super::scale::Scale;
use super::{Diagram, Mark, Panel};
use crate::commands::report::colours::of_line;
use crate::commands::report::page::escape;
use std::fmt::Write;

/// Sizes in units of the picture, which are points on paper.
const WIDTH_ALONE: f64 = 440.0;
const WIDTH_BESIDE: f64 = 270.0;
/// Height of a panel over its width.
const PROPORTION: f64 = 0.8;
const LEFT: f64 = 70.0;
const BOTTOM: f64 = 54.0;
const GAP: f64 = 26.0;
const TITLE: f64 = 30.0;
const MARGIN: f64 = 12.0;
const MOST_BESIDE: usize = 3;
/// Radius of a mark with room around it.
const RADIUS: f64 = 6.5;
/// Mean width of a letter over the size of the type.
const LETTER: f64 = 0.6;
const SMALL: f64 = 11.0;
const MEDIUM: f64 = 13.0;
const LARGE: f64 = 15.0;

/// A place in the picture and its size.
#[derive(Clone, Copy)]
struct Frame {
    x: f64,
    y: f64,
    width: f64,
    height: f64,
}

/// A diagram as SVG that needs nothing else.
pub fn draw(diagram: &Diagram) -> String {
    let count = diagram.panels.len().max(1);
    let columns = count.min(MOST_BESIDE);
    let rows = count.div_ceil(columns);
    let width = if count == 1 { WIDTH_ALONE } else { WIDTH_BESIDE };
    let height = (PROPORTION * width).round();
    let over = if count == 1 { 0.0 } else { 20.0 };
    let ticks = diagram.y.ticks.iter().map(|(_, text)| text.chars().count()).max().unwrap_or(0) as f64;
    let left = LEFT.max(38.0 + LETTER * SMALL * ticks);
    let legend = legend_width(diagram);
    let step = (width + GAP + 14.0, height + over + BOTTOM + 6.0);
    let panels_width = left + (columns - 1) as f64 * step.0 + width;
    let notes_height = 15.0 * diagram.notes.len() as f64;
    let title_width = LETTER * LARGE * diagram.title.chars().count() as f64 + 2.0 * MARGIN;
    let whole = (
        (panels_width + 18.0 + legend + MARGIN).max(title_width).ceil(),
        (MARGIN + TITLE + rows as f64 * step.1 + notes_height + 4.0).ceil(),
    );
    let mut body = String::new();
    text(&mut body, (left, MARGIN + 15.0), LARGE, "start", &diagram.title);
    for (k, panel) in diagram.panels.iter().enumerate() {
        let (column, row) = (k % columns, k / columns);
        let frame = Frame {
            x: left + column as f64 * step.0,
            y: MARGIN + TITLE + over + row as f64 * step.1,
            width,
            height,
        };
        // Inner labels would only repeat the outer ones.
        let lowest = k + columns >= count;
        draw_panel(&mut body, diagram, panel, frame, column == 0, lowest);
    }
    draw_legend(&mut body, diagram, panels_width + 22.0, MARGIN + TITLE + over);
    for (k, note) in diagram.notes.iter().enumerate() {
        let y = whole.1 - notes_height + 15.0 * k as f64 + 6.0;
        text(&mut body, (left, y), SMALL, "start", note);
    }
    format!(
        "<svg xmlns=\"http://www.w3.org/2000/svg\" viewBox=\"0 0 {0} {1}\" width=\"{0}\" height=\"{1}\" role=\"img\" \
         font-family=\"DejaVu Sans, Verdana, Arial, sans-serif\">\n\
         <title>{2}</title>\n<rect width=\"100%\" height=\"100%\" fill=\"#ffffff\"/>\n{body}</svg>\n",
        whole.0,
        whole.1,
        escape(&diagram.title)
    )
}

fn text(body: &mut String, (x, y): (f64, f64), size: f64, anchor: &str, words: &str) {
    let _ = writeln!(
        body,
        "<text x=\"{x:.1}\" y=\"{y:.1}\" text-anchor=\"{anchor}\" fill=\"#111111\" style=\"font-size:{size}px\">{}</text>",
        escape(words)
    );
}

fn draw_panel(body: &mut String, diagram: &Diagram, panel: &Panel, frame: Frame, leftmost: bool, lowest: bool) {
    let Frame { x, y, width, height } = frame;
    if !panel.title.is_empty() {
        text(body, (x + 0.5 * width, y - 7.0), MEDIUM, "middle", &panel.title);
    }
    let places = gathered(diagram, panel);
    if diagram.has_cells {
        cells(body, diagram, &places, frame);
    }
    axes(body, diagram, frame, leftmost, lowest);
    let room = room(diagram, frame);
    for place in &places {
        let centre = (x + place.x * width, y + (1.0 - place.y) * height);
        draw_marks(body, diagram, &place.classes, centre, room);
    }
    let _ = writeln!(
        body,
        "<rect x=\"{x:.1}\" y=\"{y:.1}\" width=\"{width:.1}\" height=\"{height:.1}\" fill=\"none\" stroke=\"#222222\"/>"
    );
}

/// Points at the same place, with their classes.
struct Place {
    x: f64,
    y: f64,
    classes: Vec<usize>,
}

fn gathered(diagram: &Diagram, panel: &Panel) -> Vec<Place> {
    let mut places: Vec<Place> = Vec::new();
    for (x, y, class) in &panel.points {
        let (x, y) = (diagram.x.share(*x), diagram.y.share(*y));
        let near = |place: &&mut Place| (place.x - x).abs() < 1e-6 && (place.y - y).abs() < 1e-6;
        match places.iter_mut().find(near) {
            Some(place) => place.classes.push(*class),
            None => places.push(Place { x, y, classes: vec![*class] }),
        }
    }
    places
}

/// The cell around each place, in a light shade of what most of its runs came to.
fn cells(body: &mut String, diagram: &Diagram, places: &[Place], frame: Frame) {
    let (right, up) = (diagram.x.borders(), diagram.y.borders());
    let around = |borders: &[f64], share: f64| -> Option<(f64, f64)> {
        borders.windows(2).map(|pair| (pair[0], pair[1])).find(|(low, high)| (*low..*high).contains(&share))
    };
    for place in places {
        let most = place.classes.iter().max_by_key(|class| {
            let count = place.classes.iter().filter(|other| other == class).count();
            (count, usize::MAX - **class)
        });
        let Some(shade) = most.and_then(|class| shade(diagram.mark(*class))) else { continue };
        if let (Some(x), Some(y)) = (around(&right, place.x), around(&up, place.y)) {
            let _ = writeln!(
                body,
                "<rect x=\"{:.2}\" y=\"{:.2}\" width=\"{:.2}\" height=\"{:.2}\" fill=\"{shade}\" fill-opacity=\"0.2\"/>",
                frame.x + x.0 * frame.width,
                frame.y + (1.0 - y.1) * frame.height,
                (x.1 - x.0) * frame.width,
                (y.1 - y.0) * frame.height
            );
        }
    }
}

fn shade(mark: Mark) -> Option<&'static str> {
    match mark {
        Mark::Class(class) => Some(of_line(class)),
        Mark::Other => Some("#777777"),
        Mark::Failed | Mark::Unfinished => None,
    }
}

fn axes(body: &mut String, diagram: &Diagram, frame: Frame, leftmost: bool, lowest: bool) {
    let Frame { x, y, width, height } = frame;
    let low = y + height;
    let mut line = |from: (f64, f64), to: (f64, f64), colour: &str| {
        let _ = writeln!(
            body,
            "<path d=\"M{:.1} {:.1}L{:.1} {:.1}\" stroke=\"{colour}\" stroke-width=\"0.8\"/>",
            from.0, from.1, to.0, to.1
        );
    };
    let right = |scale: &Scale, value: f64| x + scale.share(value) * width;
    let up = |scale: &Scale, value: f64| low - scale.share(value) * height;
    for (value, _) in &diagram.x.ticks {
        let at = right(&diagram.x, *value);
        if !diagram.has_cells {
            line((at, y), (at, low), "#e4e4e4");
        }
        line((at, low), (at, low + 5.0), "#222222");
    }
    for (value, _) in &diagram.y.ticks {
        let at = up(&diagram.y, *value);
        if !diagram.has_cells {
            line((x, at), (x + width, at), "#e4e4e4");
        }
        line((x - 5.0, at), (x, at), "#222222");
    }
    for value in &diagram.x.small_ticks {
        let at = right(&diagram.x, *value);
        line((at, low), (at, low + 3.0), "#222222");
    }
    for value in &diagram.y.small_ticks {
        let at = up(&diagram.y, *value);
        line((x - 3.0, at), (x, at), "#222222");
    }
    for (value, words) in &diagram.x.ticks {
        text(body, (right(&diagram.x, *value), low + 17.0), SMALL, "middle", words);
    }
    for (value, words) in &diagram.y.ticks {
        text(body, (x - 8.0, up(&diagram.y, *value) + 4.0), SMALL, "end", words);
    }
    if lowest {
        text(body, (x + 0.5 * width, low + 38.0), MEDIUM, "middle", &diagram.x.label);
    }
    if leftmost {
        let longest = diagram.y.ticks.iter().map(|(_, words)| words.chars().count()).max().unwrap_or(0) as f64;
        let at = (x - 18.0 - LETTER * SMALL * longest, y + 0.5 * height);
        let _ = writeln!(
            body,
            "<text transform=\"translate({:.1} {:.1}) rotate(-90)\" text-anchor=\"middle\" fill=\"#111111\" \
             style=\"font-size:{MEDIUM}px\">{}</text>",
            at.0,
            at.1,
            escape(&diagram.y.label)
        );
    }
}

/// Radius within which the marks of a place stay.
fn room(diagram: &Diagram, frame: Frame) -> f64 {
    let least = |scale: &Scale, length: f64| {
        let gaps = scale.stops.windows(2).map(|pair| length * (scale.share(pair[1]) - scale.share(pair[0])));
        gaps.fold(f64::INFINITY, f64::min)
    };
    if !diagram.has_cells {
        return RADIUS;
    }
    let gap = least(&diagram.x, frame.width).min(least(&diagram.y, frame.height));
    (0.36 * gap).clamp(4.0, 2.0 * RADIUS)
}

/// The marks of runs at one place: alone in the middle, or on a ring.
fn draw_marks(body: &mut String, diagram: &Diagram, classes: &[usize], centre: (f64, f64), room: f64) {
    let mut classes = classes.to_vec();
    classes.sort_unstable();
    let count = classes.len();
    if let [class] = classes.as_slice() {
        draw_mark(body, diagram.mark(*class), centre, room.min(RADIUS));
        return;
    }
    let slice = std::f64::consts::TAU / count as f64;
    // Two stand side by side, so that both are at the height of their value.
    let first = if count == 2 { std::f64::consts::PI } else { -std::f64::consts::FRAC_PI_2 };
    let half = (0.5 * slice).sin();
    // Neighbours on the ring just do not touch.
    let radius = (room * half / (1.0 + half)).min(0.75 * RADIUS);
    let ring = (radius / half * 1.05).min(room);
    for (k, class) in classes.iter().enumerate() {
        let angle = first + slice * k as f64;
        let at = (centre.0 + ring * angle.cos(), centre.1 + ring * angle.sin());
        draw_mark(body, diagram.mark(*class), at, radius.max(1.2));
    }
}

fn draw_mark(body: &mut String, mark: Mark, (x, y): (f64, f64), radius: f64) {
    let polygon = |corners: &[(f64, f64)], size: f64| -> String {
        let points: Vec<String> = corners
            .iter()
            .map(|(a, b)| format!("{:.2},{:.2}", x + size * radius * a, y + size * radius * b))
            .collect();
        format!("<polygon points=\"{}\"", points.join(" "))
    };
    let circle = |size: f64| format!("<circle cx=\"{x:.2}\" cy=\"{y:.2}\" r=\"{:.2}\"", size * radius);
    // Shapes of about the same area.
    let shape = match mark {
        Mark::Class(class) => {
            let shape = match class % 7 {
                0 => circle(0.92),
                1 => polygon(&[(-1.0, -1.0), (1.0, -1.0), (1.0, 1.0), (-1.0, 1.0)], 0.82),
                2 => polygon(&[(0.0, -1.15), (1.0, 0.75), (-1.0, 0.75)], 1.05),
                3 => polygon(&[(0.0, -1.0), (1.0, 0.0), (0.0, 1.0), (-1.0, 0.0)], 1.15),
                4 => polygon(&[(0.0, 1.15), (1.0, -0.75), (-1.0, -0.75)], 1.05),
                5 => polygon(&[(0.0, -1.0), (0.951, -0.309), (0.588, 0.809), (-0.588, 0.809), (-0.951, -0.309)], 1.1),
                _ => polygon(
                    &[
                        (-0.35, -1.0), (0.35, -1.0), (0.35, -0.35), (1.0, -0.35), (1.0, 0.35), (0.35, 0.35),
                        (0.35, 1.0), (-0.35, 1.0), (-0.35, 0.35), (-1.0, 0.35), (-1.0, -0.35), (-0.35, -0.35),
                    ],
                    1.05,
                ),
            };
            format!("{shape} fill=\"{}\" stroke=\"#ffffff\" stroke-width=\"0.7\"/>", of_line(class))
        }
        Mark::Other => format!("{} fill=\"#ffffff\" stroke=\"#555555\" stroke-width=\"1.6\"/>", circle(0.8)),
        Mark::Unfinished => format!("{} fill=\"#bbbbbb\"/>", circle(0.35)),
        Mark::Failed => {
            let arm = 0.75 * radius;
            format!(
                "<path d=\"M{:.2} {:.2}L{:.2} {:.2}M{:.2} {:.2}L{:.2} {:.2}\" stroke=\"#111111\" stroke-width=\"{:.2}\" \
                 fill=\"none\"/>",
                x - arm, y - arm, x + arm, y + arm, x - arm, y + arm, x + arm, y - arm,
                0.3 * radius
            )
        }
    };
    body.push_str(&shape);
    body.push('\n');
}

fn entries(diagram: &Diagram) -> Vec<(usize, String)> {
    let shown = diagram.classes.iter().enumerate().filter(|(_, (_, count))| *count > 0);
    shown.map(|(class, (name, count))| (class, format!("{name} ({count})"))).collect()
}

fn legend_width(diagram: &Diagram) -> f64 {
    let letters = entries(diagram).iter().map(|(_, words)| words.chars().count()).max().unwrap_or(0) as f64;
    30.0 + LETTER * MEDIUM * letters
}

fn draw_legend(body: &mut String, diagram: &Diagram, x: f64, y: f64) {
    for (k, (class, words)) in entries(diagram).into_iter().enumerate() {
        let middle = y + 10.0 + 22.0 * k as f64;
        draw_mark(body, diagram.mark(class), (x + 7.0, middle), RADIUS);
        text(body, (x + 22.0, middle + 4.5), MEDIUM, "start", &words);
    }
}
