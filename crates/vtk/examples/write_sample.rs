//! Writes small time series with every compression and precision, for other programs to read.
//!
//! `cargo run -p pellicle-vtk --example write_sample -- FOLDER` makes, for each combination,
//! `FOLDER/{none,lz4,zlib}_{single,double}/fields.pvd` with three frames of a bent sheet. All
//! numbers follow from exact arithmetic, so that a reader can compute and compare them bit by
//! bit: point (i, j) of frame f is (i/8, j/8, (i·j + f)/64), scalar = x + 2y + 4z,
//! vector = (z, x, −y), index = 1000 f + point number, quality = triangle number / 4, time = f/1024.
//! Frame 0 holds no texts, as some readers cannot take any. `FOLDER/{none,lz4,zlib}_empty.vtu`
//! hold nothing at all.

use pellicle_vtk::{
    BackgroundWriter, Compression, FieldText, Frame, OwnedArray, OwnedFrame, OwnedValues,
    Precision, Series, VtkError, frame_file_name, write_vtu,
};
use std::path::{Path, PathBuf};

const COLUMNS: u32 = 9;
const ROWS: u32 = 7;
const FRAMES: usize = 3;

fn frame(index: usize, precision: Precision) -> OwnedFrame {
    let places = (0..ROWS).flat_map(|j| (0..COLUMNS).map(move |i| (i, j)));
    let points: Vec<[f64; 3]> = places
        .map(|(i, j)| {
            let height = f64::from(i * j) + index as f64;
            [f64::from(i) / 8.0, f64::from(j) / 8.0, height / 64.0]
        })
        .collect();
    let squares = (0..ROWS - 1).flat_map(|j| (0..COLUMNS - 1).map(move |i| j * COLUMNS + i));
    let triangles: Vec<[u32; 3]> = squares
        .flat_map(|a| {
            let (b, c, d) = (a + 1, a + COLUMNS, a + COLUMNS + 1);
            [[a, b, d], [a, d, c]]
        })
        .collect();
    let array = |name: &str, values| OwnedArray {
        name: name.into(),
        values,
    };
    let scalar = points.iter().map(|[x, y, z]| x + 2.0 * y + 4.0 * z);
    let vector = points.iter().map(|&[x, y, z]| [z, x, -y]);
    let numbers = (0..points.len()).map(|point| (1000 * index + point) as i64);
    let quality = (0..triangles.len()).map(|triangle| triangle as f64 / 4.0);
    OwnedFrame {
        file_name: frame_file_name("surface", index),
        time: index as f64 / 1024.0,
        point_data: vec![
            array("scalar [1/um]", OwnedValues::Scalar(scalar.collect())),
            array("vector <µm/s>", OwnedValues::Vector(vector.collect())),
            array("index", OwnedValues::Integer(numbers.collect())),
        ],
        cell_data: vec![array("quality", OwnedValues::Scalar(quality.collect()))],
        field_data: if index == 0 { Vec::new() } else { texts() },
        points,
        triangles,
        precision,
    }
}

fn texts() -> Vec<FieldText> {
    let text = |name: &str, text: &str| FieldText {
        name: name.into(),
        text: text.into(),
    };
    vec![
        text("program", "sample 1.0, \"κ\" <in> kBT & more"),
        text("empty", ""),
    ]
}

fn write_series(
    folder: &Path,
    compression: Compression,
    precision: Precision,
) -> Result<(), VtkError> {
    let series = Series::create(folder.join("fields.pvd"))?;
    let writer = BackgroundWriter::start(series, compression, 2)?;
    for index in 0..FRAMES {
        writer.submit(frame(index, precision))?;
    }
    writer.finish()?;
    Ok(())
}

fn main() -> Result<(), Box<dyn std::error::Error>> {
    let folder = std::env::args_os()
        .nth(1)
        .map(PathBuf::from)
        .ok_or("give the folder to write to")?;
    for (compression, first) in [
        (Compression::None, "none"),
        (Compression::Lz4, "lz4"),
        (Compression::Zlib, "zlib"),
    ] {
        for (precision, second) in [(Precision::Single, "single"), (Precision::Double, "double")] {
            let folder = folder.join(format!("{first}_{second}"));
            std::fs::create_dir_all(&folder)?;
            write_series(&folder, compression, precision)?;
        }
        let empty = folder.join(format!("{first}_empty.vtu"));
        write_vtu(&empty, &Frame::default(), compression)?;
    }
    Ok(())
}
