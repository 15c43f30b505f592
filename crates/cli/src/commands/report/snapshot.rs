//! Shapes along time, drawn as SVG: parallel projection, far triangles first.

use super::colours::{bar, of_share};
use super::data::Run;
use super::page::{escape, number};
use super::prefix::prefixed;
use crate::failure::Failure;
use pellicle_surface::{Topology, Vec3};
use pellicle_vtk::{Limits, ReadSurface, read_surface};

/// Shapes drawn per run.
const MOST_SHAPES: usize = 6;
/// Width and height of a drawing.
const SIDE: f64 = 210.0;
/// Arrays to colour by, the first that there is.
const FIELDS: [&str; 3] = ["composition", "coverage", "mean_curvature [1/um]"];

struct Shape {
    time: f64,
    surface: ReadSurface,
}

/// Drawings of a run, from its first frame to its last.
///
/// # Errors
/// [`Failure::Files`] for frames that cannot be read.
pub fn snapshots(run: &Run) -> Result<String, Failure> {
    let shapes = chosen(run.frames.len())
        .into_iter()
        .map(|k| {
            let (time, path) = &run.frames[k];
            Ok(Shape { time: *time, surface: read_surface(path, &Limits::default())? })
        })
        .collect::<Result<Vec<_>, Failure>>()?;
    let Some(last) = shapes.last() else { return Ok("<p>This run has no frames.</p>".into()) };
    let field = FIELDS.into_iter().find(|name| last.surface.point_array(name).is_some());
    let range = field.map(|name| colour_range(&shapes, name));
    let (factor, unit) = prefixed(Some(("s", 1)), last.time);
    // One direction and one scale for all, so that they can be compared.
    let (right, up, ahead) = view(last);
    let half = shapes.iter().map(|shape| half_width(shape, &right, &up)).fold(0.0, f64::max).max(f64::MIN_POSITIVE);
    let drawings: String = shapes
        .iter()
        .map(|shape| {
            let time = format!("{} {}", number(factor * shape.time), escape(&unit));
            let triangles = draw(shape, [&right, &up, &ahead], half, field.zip(range));
            format!(
                "<figure class=\"shape\"><svg viewBox=\"0 0 {SIDE} {SIDE}\" role=\"img\" aria-label=\"shape at {time}\">\
                 {triangles}</svg><figcaption>{time}</figcaption></figure>"
            )
        })
        .collect();
    let legend = match field.zip(range) {
        Some((name, (low, high))) => bar(low, high, &name.replace('_', " ").replace("/um", "/µm")),
        None => String::new(),
    };
    Ok(format!(
        "<div class=\"shapes\">{drawings}</div>{legend}<p class=\"small\">All at one scale: a drawing is {} µm wide.</p>\n",
        escape(&number(2.0 * half))
    ))
}

/// Frames to draw: first, last, and evenly between.
fn chosen(count: usize) -> Vec<usize> {
    let shown = count.min(MOST_SHAPES);
    (0..shown).map(|k| if shown == 1 { 0 } else { k * (count - 1) / (shown - 1) }).collect()
}

/// 0 to 1 for shares, else from the 2nd to the 98th percentile of all shapes.
fn colour_range(shapes: &[Shape], name: &str) -> (f64, f64) {
    let mut values: Vec<f64> = shapes
        .iter()
        .filter_map(|shape| shape.surface.point_array(name))
        .flat_map(|array| array.values.iter().copied().filter(|x| x.is_finite()))
        .collect();
    values.sort_by(f64::total_cmp);
    let at = |share: f64| values.get((share * values.len().saturating_sub(1) as f64) as usize).copied().unwrap_or(0.0);
    if name == "composition" {
        return (0.0, 1.0);
    }
    let (low, high) = if name == "coverage" { (0.0, at(1.0)) } else { (at(0.02), at(0.98)) };
    if high - low > 1e-9 * high.abs().max(low.abs()) { (low, high) } else { (low - 0.5, high + 0.5) }
}

fn points(shape: &Shape) -> impl Iterator<Item = Vec3> + '_ {
    shape.surface.points.iter().map(|x| Vec3::from(*x))
}

fn middle(shape: &Shape) -> Vec3 {
    let (low, high) = points(shape).fold(
        (Vec3::repeat(f64::INFINITY), Vec3::repeat(f64::NEG_INFINITY)),
        |(low, high), x| (low.inf(&x), high.sup(&x)),
    );
    0.5 * (low + high)
}

fn closed(shape: &Shape) -> bool {
    let surface = &shape.surface;
    Topology::new(surface.points.len(), &surface.triangles).is_ok_and(|topology| topology.is_closed())
}

/// Right, up and towards the reader: z, or the longest side of a closed shape's box, upright, seen a little from
/// above.
fn view(shape: &Shape) -> (Vec3, Vec3, Vec3) {
    let middle = middle(shape);
    let size = points(shape).fold(Vec3::zeros(), |size, x| size.sup(&(x - middle).abs()));
    // Tubes run along z, and frames lie across it.
    let upright = if closed(shape) { size.imax() } else { 2 };
    let mut axis = Vec3::zeros();
    axis[upright] = 1.0;
    let mut side = Vec3::zeros();
    side[(upright + 1) % 3] = 1.0;
    let other = axis.cross(&side);
    let (turn, tilt) = (0.5f64, 0.3f64);
    let right = turn.cos() * side + turn.sin() * other;
    let back = turn.cos() * other - turn.sin() * side;
    let ahead = tilt.sin() * axis - tilt.cos() * back;
    let up = tilt.cos() * axis + tilt.sin() * back;
    (right, up, ahead)
}

fn half_width(shape: &Shape, right: &Vec3, up: &Vec3) -> f64 {
    let middle = middle(shape);
    points(shape).map(|x| (x - middle).dot(right).abs().max((x - middle).dot(up).abs())).fold(0.0, f64::max)
}

fn draw(shape: &Shape, axes: [&Vec3; 3], half: f64, field: Option<(&str, (f64, f64))>) -> String {
    let [right, up, ahead] = axes;
    let middle = middle(shape);
    let scale = 0.48 * SIDE / half;
    let seen: Vec<[f64; 3]> = points(shape)
        .map(|x| x - middle)
        .map(|x| [0.5 * SIDE + scale * x.dot(right), 0.5 * SIDE - scale * x.dot(up), x.dot(ahead)])
        .collect();
    let values = field.and_then(|(name, range)| Some((&shape.surface.point_array(name)?.values, range)));
    let places: Vec<Vec3> = points(shape).collect();
    // The far side of a closed surface is hidden by the near one.
    let closed = closed(shape);
    let mut order: Vec<(f64, [u32; 3])> = shape
        .surface
        .triangles
        .iter()
        .map(|corners| (corners.iter().map(|v| seen[*v as usize][2]).sum(), *corners))
        .collect();
    order.sort_by(|a, b| a.0.total_cmp(&b.0));
    let mut text = String::new();
    for (_, corners) in order {
        let [a, b, c] = corners.map(|v| places[v as usize]);
        let normal = (b - a).cross(&(c - a));
        let facing = if normal.norm() > 0.0 { normal.normalize().dot(ahead) } else { 0.0 };
        if closed && facing < 0.0 {
            continue;
        }
        let share = values.map_or(0.6, |(values, (low, high))| {
            let mean = corners.iter().filter_map(|v| values.get(*v as usize)).sum::<f64>() / 3.0;
            (mean - low) / (high - low)
        });
        let colour = of_share(share, 0.55 + 0.45 * facing.abs());
        let path: Vec<String> =
            corners.iter().map(|v| format!("{:.1},{:.1}", seen[*v as usize][0], seen[*v as usize][1])).collect();
        // The line hides the seams between neighbours.
        text += &format!("<path d=\"M{}z\" fill=\"{colour}\" stroke=\"{colour}\"/>", path.join(" "));
    }
    text
}
