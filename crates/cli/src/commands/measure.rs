//! `pellicle measure`.

mod load;
mod quantities;
mod show;
mod spectrum;

use crate::args;
use crate::failure::Failure;
use crate::run::progress::{complain, say};
use crate::units::{measure as m, parse_as};
use load::{Loaded, load};
use pellicle_surface::remesh::quality;
use pellicle_vtk::{Array, Compression, Frame, Precision, write_vtu};
use quantities::{Measures, measure};
use serde_json::Value;
use show::Lengths;
use std::path::Path;

/// Measure surfaces; returns the exit code. Files that cannot be measured do not keep others from it.
///
/// # Errors
/// [`Failure::Input`] for arguments that do not go together or a file without a surface, [`Failure::Files`] for one
/// that cannot be read or written; with several such files, the last.
pub fn run(arguments: &args::Measure) -> Result<u8, Failure> {
    if arguments.out.is_some() && arguments.files.len() > 1 {
        return Err(Failure::Input("--out takes one surface, but several files are given".into()));
    }
    let scale = match &arguments.unit {
        None => 1.0,
        Some(unit) => length_unit(unit)?,
    };
    let lengths = Lengths { metres: arguments.unit.is_some() };
    let mut trouble: Option<Failure> = None;
    let mut all: Vec<Value> = Vec::new();
    for path in &arguments.files {
        let loaded = match load(path, scale) {
            Ok(loaded) => loaded,
            Err(failure) => {
                if let Some(earlier) = trouble.replace(failure) {
                    complain(format_args!("error: {earlier}"));
                }
                continue;
            }
        };
        let found = measure(&loaded);
        let name = path.to_string_lossy();
        if arguments.json || arguments.csv {
            all.push(show::json(&name, &found, lengths));
        } else {
            say(show::text(&name, &found, lengths));
            for doubt in &found.doubts {
                complain(format_args!("warning: {name}: {doubt}"));
            }
        }
        if let Some(out) = &arguments.out {
            write(out, &loaded, &found)?;
        }
    }
    if arguments.csv && !all.is_empty() {
        let table = show::csv(&all).map_err(|error| Failure::Files(format!("cannot write the table: {error}")))?;
        say(table);
    } else if arguments.json {
        say(Value::Array(all));
    }
    trouble.map_or(Ok(0), Err)
}

/// A unit of length in metres: `um`, `nm`, or a length such as `0.1 um`.
fn length_unit(text: &str) -> Result<f64, Failure> {
    let refuse = |problem: String| Failure::Input(format!("--unit \"{text}\": {problem}"));
    let text = text.trim();
    let whole = if text.starts_with(|c: char| c.is_ascii_digit() || c == '.') {
        text.to_owned()
    } else {
        format!("1 {text}")
    };
    let metres = parse_as(&whole, &m::LENGTH, None).map_err(|error| refuse(error.message))?;
    if metres > 0.0 && metres.is_finite() {
        Ok(metres)
    } else {
        Err(refuse("a unit of length must be positive".into()))
    }
}

/// The surface with its curvature, and the arrays of the file, for viewers.
fn write(path: &Path, loaded: &Loaded, found: &Measures) -> Result<(), Failure> {
    let points: Vec<[f64; 3]> = loaded.mesh.positions.iter().map(|x| [x.x, x.y, x.z]).collect();
    let bending: Vec<f64> = found.mean_curvature_field.iter().map(|h| 2.0 * h * h).collect();
    let shape = quality(&loaded.mesh);
    let mut point_data = vec![
        Array::scalar("mean_curvature", &found.mean_curvature_field),
        Array::scalar("gaussian_curvature", &found.gaussian_curvature_field),
        Array::scalar("bending_density_over_kappa", &bending),
    ];
    let own: Vec<String> = point_data.iter().map(|array| array.name.clone()).collect();
    let others = loaded.fields.iter().filter(|(name, _)| !own.contains(name));
    point_data.extend(others.map(|(name, values)| Array::scalar(name.clone(), values)));
    let frame = Frame {
        points: &points,
        triangles: &loaded.mesh.triangles,
        point_data,
        cell_data: vec![Array::scalar("quality", &shape)],
        precision: Precision::Single,
        ..Frame::default()
    };
    Ok(write_vtu(path, &frame, Compression::Zlib)?)
}
