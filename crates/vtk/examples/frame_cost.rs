//! Time and size of a frame with the usual fields, for each compression and two mesh sizes.
//!
//! `cargo run --release -p pellicle-vtk --example frame_cost [-- FOLDER]`
//!
//! A bumpy torus with 12 scalar and 2 vector point arrays and 3 cell arrays, which is what a
//! full simulation frame holds. The points are shaken a little: on a regular grid, repeated
//! numbers would flatter the compression. Times include the flush to the disk.

use pellicle_vtk::{Array, Compression, Frame, Limits, Precision, read_surface, write_vtu};
use std::error::Error;
use std::path::PathBuf;
use std::time::Instant;

/// Deterministic noise in [−1, 1) for a point number.
fn noise(k: u64) -> f64 {
    let mixed = (k + 1).wrapping_mul(0x9e37_79b9_7f4a_7c15).rotate_left(31);
    let mixed = mixed.wrapping_mul(0xbf58_476d_1ce4_e5b9);
    (mixed >> 11) as f64 / (1u64 << 52) as f64 - 1.0
}

fn torus(n: usize) -> (Vec<[f64; 3]>, Vec<[u32; 3]>) {
    let step = std::f64::consts::TAU / n as f64;
    let points = (0..n * n)
        .map(|k| {
            let u = step * ((k / n) as f64 + 0.2 * noise(2 * k as u64));
            let v = step * ((k % n) as f64 + 0.2 * noise(2 * k as u64 + 1));
            let r = 2.0 + (1.0 + 0.1 * (5.0 * u).sin()) * v.cos();
            [r * u.cos(), r * u.sin(), v.sin()]
        })
        .collect();
    let corner = |i: usize, j: usize| ((i % n) * n + j % n) as u32;
    let triangles = (0..n * n)
        .flat_map(|k| {
            let (i, j) = (k / n, k % n);
            let (a, b) = (corner(i, j), corner(i + 1, j));
            let (c, d) = (corner(i + 1, j + 1), corner(i, j + 1));
            [[a, b, c], [a, c, d]]
        })
        .collect();
    (points, triangles)
}

fn main() -> Result<(), Box<dyn Error>> {
    let folder = std::env::args_os()
        .nth(1)
        .map_or_else(std::env::temp_dir, PathBuf::from);
    let path = folder.join("frame_cost.vtu");
    println!("points  precision  compression  write s  size kB  read s");
    for n in [100, 400] {
        let (points, triangles) = torus(n);
        let waves = |k: usize| -> Vec<f64> {
            let k = k as f64 + 1.0;
            points.iter().map(|p| (k * p[0]).sin() * p[2]).collect()
        };
        let scalars: Vec<Vec<f64>> = (0..12).map(waves).collect();
        let vectors: Vec<Vec<[f64; 3]>> = (1..3)
            .map(|k| {
                points
                    .iter()
                    .map(|p| p.map(|x| (f64::from(k) * x).cos()))
                    .collect()
            })
            .collect();
        let on_cells: Vec<f64> = triangles
            .iter()
            .map(|t| t.iter().map(|&i| points[i as usize][2]).sum::<f64>() / 3.0)
            .collect();
        for precision in [Precision::Single, Precision::Double] {
            let scalar_arrays = scalars.iter().enumerate();
            let vector_arrays = vectors.iter().enumerate();
            let frame = Frame {
                points: &points,
                triangles: &triangles,
                time: Some(0.0),
                point_data: scalar_arrays
                    .map(|(k, values)| Array::scalar(format!("scalar {k}"), values))
                    .chain(vector_arrays.map(|(k, v)| Array::vector(format!("vector {k}"), v)))
                    .collect(),
                cell_data: (0..3)
                    .map(|k| Array::scalar(format!("cell {k}"), &on_cells))
                    .collect(),
                field_data: Vec::new(),
                precision,
            };
            for compression in [Compression::None, Compression::Lz4, Compression::Zlib] {
                // The best of five, as other programs share the machine.
                let mut times = [f64::INFINITY; 2];
                for _ in 0..5 {
                    let start = Instant::now();
                    write_vtu(&path, &frame, compression)?;
                    times[0] = start.elapsed().as_secs_f64().min(times[0]);
                    let start = Instant::now();
                    read_surface(&path, &Limits::default())?;
                    times[1] = start.elapsed().as_secs_f64().min(times[1]);
                }
                println!(
                    "{:>6}  {:<9}  {:<11}  {:>7.3}  {:>7}  {:>6.3}",
                    points.len(),
                    format!("{precision:?}"),
                    format!("{compression:?}"),
                    times[0],
                    std::fs::metadata(&path)?.len() / 1000,
                    times[1],
                );
            }
        }
    }
    std::fs::remove_file(&path)?;
    Ok(())
}
