//! `pellicle measure` on shapes whose area, volume and curvature integrals are known, and on broken meshes.
//!
//! # Source
//! Textbook formulas; the ellipsoid's curvature integrals by Simpson's rule.

mod common;

use common::{Fallible, assert_code, pellicle};
use pellicle_surface::Mesh;
use pellicle_surface::mesh::files::write_ply;
use pellicle_surface::mesh::shapes::{irregular_ellipsoid, irregular_sphere, irregular_torus};
use pellicle_vtk::{Array, Compression, Frame, Limits, read_surface, write_vtu};
use serde_json::Value;
use std::f64::consts::PI;
use std::fs;
use std::path::Path;

const SEED: u64 = 7;

// Relative tolerances on area, volume, bending energy and ∫H at 2,500 vertices; beside them what was measured.
/// Measured: −1.33e-3, −2.46e-3, 6.0e-4, −4.4e-4.
const SPHERE: (f64, f64, f64, f64) = (2e-3, 4e-3, 1.2e-3, 1e-3);
/// Measured: −1.51e-3, −2.92e-3, 9.8e-4, −5.6e-4.
const ELLIPSOID: (f64, f64, f64, f64) = (2.5e-3, 5e-3, 2e-3, 1.2e-3);
/// Measured: −1.14e-3, −3.58e-3, 1.92e-3, −7.9e-4.
const TORUS: (f64, f64, f64, f64) = (2e-3, 6e-3, 4e-3, 1.6e-3);
/// Measured: 5.7e-7.
const BULGE: f64 = 1e-5;
/// Measured: −1.2e-3.
const CIRCLES: f64 = 3e-3;

/// What the program says about a surface, in the file's unit.
fn measured(path: &Path, more: &[&str]) -> Result<Value, Box<dyn std::error::Error>> {
    let output = pellicle().arg("measure").arg(path).arg("--json").args(more).output()?;
    assert_code(&output, 0);
    let list: Value = serde_json::from_slice(&output.stdout)?;
    Ok(list[0].clone())
}

fn write(path: &Path, mesh: &Mesh, composition: Option<&[f64]>) -> Fallible {
    let points: Vec<[f64; 3]> = mesh.positions.iter().map(|x| [x.x, x.y, x.z]).collect();
    let frame = Frame {
        points: &points,
        triangles: &mesh.triangles,
        point_data: composition.map(|values| Array::scalar("composition", values)).into_iter().collect(),
        ..Frame::default()
    };
    Ok(write_vtu(path, &frame, Compression::Zlib)?)
}

/// Relative error of a value by name.
#[track_caller]
fn assert_near(found: &Value, name: &str, exact: f64, tolerance: f64) {
    let value = found[name].as_f64().unwrap_or(f64::NAN);
    let error = value / exact - 1.0;
    println!("{name}: {value} for {exact}, relative error {error:.2e}");
    assert!(error.abs() < tolerance, "{name}: {value} for {exact}, relative error {error:.2e}");
}

#[test]
fn a_sphere() -> Fallible {
    let folder = tempfile::tempdir()?;
    let mut mesh = irregular_sphere(2500, SEED)?;
    for x in &mut mesh.positions {
        *x = 3.0 * *x;
    }
    let path = folder.path().join("sphere.ply");
    write_ply(&path, &mesh, &[])?;
    let found = measured(&path, &[])?;
    assert_near(&found, "area", 36.0 * PI, SPHERE.0);
    assert_near(&found, "volume", 36.0 * PI, SPHERE.1);
    assert_near(&found, "bending_energy_over_kappa", 8.0 * PI, SPHERE.2);
    assert_near(&found, "integrated_mean_curvature", 12.0 * PI, SPHERE.3);
    // Gauss–Bonnet holds on any mesh; rounding only.
    assert_near(&found, "integrated_gaussian_curvature", 4.0 * PI, 1e-10);
    assert_eq!([&found["genus"], &found["rims"], &found["self_intersections"]], [0, 0, 0]);
    assert_eq!(found["neck_radii"], Value::Array(Vec::new()));
    // Nothing but noise of the mesh: the vertices lie on the sphere, the single precision of the file apart.
    let power = &found["spherical_harmonics"]["mean_square_amplitude"];
    for l in 2..=8 {
        assert!(power[l.to_string()].as_f64().is_some_and(|power| power < 1e-12), "l = {l}: {power}");
    }
    let metres = measured(&path, &["--unit", "um"])?;
    assert_near(&metres, "area", 36.0 * PI * 1e-12, SPHERE.0);
    assert_eq!(metres["length_unit"], "m");
    Ok(())
}

/// A sphere bulged by one harmonic: that one, with its amplitude, and no other.
#[test]
fn a_bulged_sphere() -> Fallible {
    let folder = tempfile::tempdir()?;
    let mut mesh = irregular_sphere(2500, SEED)?;
    for x in &mut mesh.positions {
        // Y_30 = √(7/16π) (5z³ − 3z).
        let harmonic = (7.0 / (16.0 * PI)).sqrt() * (5.0 * x.z.powi(3) - 3.0 * x.z);
        *x *= 1.0 + 0.01 * harmonic;
    }
    let path = folder.path().join("bulged.vtu");
    write(&path, &mesh, None)?;
    let found = measured(&path, &[])?;
    let power = &found["spherical_harmonics"]["mean_square_amplitude"];
    assert_near(power, "3", 1e-4 / 7.0, BULGE);
    for l in [2, 4, 5, 6, 7, 8] {
        // Second order of the amplitude, squared: the centre of volume is not the origin any more.
        assert!(power[l.to_string()].as_f64().is_some_and(|power| power < 1e-9), "l = {l}: {power}");
    }
    Ok(())
}

#[test]
fn an_ellipsoid() -> Fallible {
    let folder = tempfile::tempdir()?;
    let mesh = irregular_ellipsoid([1.0, 1.0, 2.0], 2500, SEED)?;
    let path = folder.path().join("ellipsoid.vtu");
    let composition: Vec<f64> =
        mesh.positions.iter().map(|x| 0.5 * (1.0 + ((x.z.abs() - 1.5) / 0.1).tanh())).collect();
    write(&path, &mesh, Some(&composition))?;
    let found = measured(&path, &["--out", &folder.path().join("fields.vtu").to_string_lossy()])?;
    let [area, mean, bending] = prolate(2.0);
    assert_near(&found, "area", area, ELLIPSOID.0);
    assert_near(&found, "volume", 8.0 * PI / 3.0, ELLIPSOID.1);
    assert_near(&found, "bending_energy_over_kappa", bending, ELLIPSOID.2);
    assert_near(&found, "integrated_mean_curvature", mean, ELLIPSOID.3);
    // Both caps, whose rims are circles of radius √(1 − 1.5²/2²).
    assert_eq!(found["phases"]["domains"], 2);
    let circles = 4.0 * PI * (1.0f64 - 0.5625).sqrt();
    assert_near(&found["phases"], "interface_length", circles, CIRCLES);
    let fields = read_surface(&folder.path().join("fields.vtu"), &Limits::default())?;
    for name in ["mean_curvature", "gaussian_curvature", "bending_density_over_kappa", "composition"] {
        assert!(fields.point_array(name).is_some(), "{name}");
    }
    Ok(())
}

/// Area, ∫H and ½∫(2H)² of x² + y² + z²/c² = 1.
fn prolate(c: f64) -> [f64; 3] {
    let n = 2000;
    let mut sums = [0.0; 3];
    for k in 0..=n {
        let t = PI * k as f64 / n as f64;
        let stretch = (t.cos().powi(2) + c * c * t.sin().powi(2)).sqrt();
        // Along the meridian and round the axis.
        let mean = 0.5 * (c / stretch.powi(3) + c / stretch);
        let ring = 2.0 * PI * t.sin() * stretch;
        let weight = if k == 0 || k == n { 1.0 } else { 2.0 + 2.0 * (k % 2) as f64 } * PI / (3.0 * n as f64);
        for (sum, value) in sums.iter_mut().zip([1.0, mean, 2.0 * mean * mean]) {
            *sum += weight * ring * value;
        }
    }
    sums
}

#[test]
fn a_torus() -> Fallible {
    let folder = tempfile::tempdir()?;
    let (ring, tube) = (2f64.sqrt(), 1.0);
    let path = folder.path().join("torus.vtu");
    write(&path, &irregular_torus(ring, tube, 2500, SEED)?, None)?;
    let found = measured(&path, &[])?;
    assert_near(&found, "area", 4.0 * PI * PI * ring * tube, TORUS.0);
    assert_near(&found, "volume", 2.0 * PI * PI * ring * tube * tube, TORUS.1);
    assert_near(&found, "bending_energy_over_kappa", 4.0 * PI * PI, TORUS.2);
    assert_near(&found, "integrated_mean_curvature", 2.0 * PI * PI * ring, TORUS.3);
    assert_eq!([&found["genus"], &found["rims"]], [1, 0]);
    assert!(found["spherical_harmonics"].is_null());
    Ok(())
}

#[test]
fn broken_meshes_are_refused_with_a_reason() -> Fallible {
    let folder = tempfile::tempdir()?;
    let mesh = irregular_sphere(300, SEED)?;
    let write_obj = |name: &str, triangles: &[[u32; 3]]| -> Result<_, std::io::Error> {
        let points = mesh.positions.iter().map(|x| format!("v {} {} {}\n", x.x, x.y, x.z));
        let faces = triangles.iter().map(|t| format!("f {} {} {}\n", t[0] + 1, t[1] + 1, t[2] + 1));
        let path = folder.path().join(name);
        fs::write(&path, points.chain(faces).collect::<String>())?;
        Ok(path)
    };
    let mut flipped = mesh.triangles.clone();
    flipped[5].swap(0, 1);
    let mut doubled = mesh.triangles.clone();
    doubled.push(mesh.triangles[9]);
    for (name, triangles, message) in
        [("flipped.obj", flipped, "same direction"), ("doubled.obj", doubled, "non-manifold edge")]
    {
        let path = write_obj(name, &triangles)?;
        let output = pellicle().arg("measure").arg(&path).output()?;
        assert_code(&output, 2);
        let text = String::from_utf8_lossy(&output.stderr);
        assert!(text.contains(message) && text.contains(name), "{text}");
    }
    let holed = write_obj("holed.obj", &mesh.triangles[1..])?;
    let found = measured(&holed, &[])?;
    assert_eq!([&found["genus"], &found["rims"]], [0, 1]);
    assert!(found["volume"].is_null());
    let missing = pellicle().arg("measure").arg(folder.path().join("none.ply")).output()?;
    assert_code(&missing, 3);
    // One bad file does not keep the others from being measured.
    let both = pellicle().arg("measure").arg(folder.path().join("flipped.obj")).arg(&holed).arg("--csv").output()?;
    assert_code(&both, 2);
    assert_eq!(String::from_utf8_lossy(&both.stdout).lines().count(), 2);
    Ok(())
}
