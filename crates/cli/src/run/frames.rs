//! Frames of the surface with its fields, for viewers: `fields.pvd` and `surface_000000.vtu`, …

use super::plan::Plan;
use super::seam::Unwrapped;
use crate::failure::Failure;
use pellicle_physics::Simulation;
use pellicle_physics::diagnostics::fields;
use pellicle_surface::Vec3;
use pellicle_vtk::{
    BackgroundWriter, Compression, FieldText, Limits, OwnedArray, OwnedFrame, OwnedValues, Precision, Series,
    VtkError, frame_file_name,
};
use std::fs;
use std::path::Path;

/// Name of the collection of frames.
pub const COLLECTION_FILE: &str = "fields.pvd";
/// Beginning of the frames' names.
pub const FRAME_STEM: &str = "surface";
/// Frames in memory at a time: the run goes on while one is written.
const WAITING: usize = 2;
const MICROMETRE: f64 = 1e-6;

/// The frames of a run, written beside the computation.
#[derive(Debug)]
pub struct FrameWriter {
    writer: BackgroundWriter,
}

impl FrameWriter {
    /// Start a new series of frames.
    ///
    /// # Errors
    /// [`Failure::Files`].
    pub fn create(folder: &Path) -> Result<Self, Failure> {
        Self::start(Series::create(folder.join(COLLECTION_FILE))?)
    }

    /// Go on with a series, keeping its first `count` frames and deleting the files of later ones.
    ///
    /// # Errors
    /// [`Failure::Files`] when frames that a checkpoint knows are not there.
    pub fn open(folder: &Path, count: u64) -> Result<Self, Failure> {
        let mut series = Series::open(folder.join(COLLECTION_FILE), &Limits::default())?;
        series.truncate(usize::try_from(count).unwrap_or(usize::MAX))?;
        for entry in series.entries() {
            let path = series.frame_path(&entry.file_name);
            if !path.is_file() {
                return Err(Failure::Files(format!(
                    "the frame {} is missing, though {COLLECTION_FILE} lists it; put it back or start again",
                    path.display()
                )));
            }
        }
        // A frame may be on the disk without being listed: the program may have ended between the two.
        for (index, path) in frame_files(folder)? {
            if index >= count {
                fs::remove_file(&path).map_err(|error| Failure::system("delete", &path, &error))?;
            }
        }
        Self::start(series)
    }

    fn start(series: Series) -> Result<Self, Failure> {
        Ok(Self { writer: BackgroundWriter::start(series, Compression::Zlib, WAITING)? })
    }

    /// Hand over a frame of the present state.
    ///
    /// # Errors
    /// [`Failure::Files`] when an earlier one could not be written.
    pub fn push(&self, plan: &Plan, simulation: &Simulation, index: u64) -> Result<(), Failure> {
        let frame = frame_of(plan, simulation, index);
        self.writer.submit(frame).map_err(|rejected| VtkError::from(rejected).into())
    }

    /// Wait until every frame is on the disk.
    ///
    /// # Errors
    /// [`Failure::Files`].
    pub fn flush(&self) -> Result<(), Failure> {
        Ok(self.writer.flush()?)
    }

    /// Write what is left and end.
    ///
    /// # Errors
    /// [`Failure::Files`].
    pub fn finish(self) -> Result<(), Failure> {
        match self.writer.finish() {
            Ok(_) => Ok(()),
            Err(unfinished) => Err(VtkError::from(unfinished).into()),
        }
    }
}

/// The frames' files in a directory, with their numbers.
///
/// # Errors
/// [`Failure::Files`] when the directory cannot be read.
pub fn frame_files(folder: &Path) -> Result<Vec<(u64, std::path::PathBuf)>, Failure> {
    let system = |error| Failure::system("read the directory", folder, &error);
    let mut files = Vec::new();
    for entry in fs::read_dir(folder).map_err(system)? {
        let entry = entry.map_err(system)?;
        let name = entry.file_name();
        let number = name
            .to_str()
            .and_then(|name| name.strip_prefix(FRAME_STEM)?.strip_prefix('_')?.strip_suffix(".vtu"))
            .filter(|digits| digits.len() >= 6 && digits.bytes().all(|b| b.is_ascii_digit()));
        if let Some(index) = number.and_then(|digits| digits.parse().ok()) {
            files.push((index, entry.path()));
        }
    }
    Ok(files)
}

/// The present state as a frame. Coordinates and fields in the units that their names say.
///
/// `chemical_potential` is in kBT per square micrometre.
pub fn frame_of(plan: &Plan, simulation: &Simulation, index: u64) -> OwnedFrame {
    let scales = &plan.scales;
    let micro = scales.length / MICROMETRE;
    let energy = scales.energy / scales.thermal_energy;
    let millitension = 1e3 * scales.energy / (scales.length * scales.length);
    let speed = micro / scales.time;
    let surface = Unwrapped::new(&simulation.state.mesh);
    let seen = fields(simulation);

    let scaled = |values: Vec<f64>, factor: f64| -> Vec<f64> { values.into_iter().map(|v| v * factor).collect() };
    let scalar = |name: &str, values: Vec<f64>, factor: f64| OwnedArray {
        name: name.to_owned(),
        values: OwnedValues::Scalar(surface.spread(scaled(values, factor))),
    };
    let vector = |name: &str, values: Vec<Vec3>, factor: f64| OwnedArray {
        name: name.to_owned(),
        values: OwnedValues::Vector(
            surface.spread(values.into_iter().map(|v| [v.x * factor, v.y * factor, v.z * factor]).collect()),
        ),
    };
    let cell = |name: &str, values: Vec<f64>, factor: f64| OwnedArray {
        name: name.to_owned(),
        values: OwnedValues::Scalar(scaled(values, factor)),
    };

    let mut point_data = vec![
        scalar("mean_curvature [1/um]", seen.mean_curvature, 1.0 / micro),
        scalar("gaussian_curvature [1/um2]", seen.gaussian_curvature, 1.0 / (micro * micro)),
    ];
    for (name, field, factor) in [
        ("composition", seen.composition, 1.0),
        ("coverage", seen.coverage, 1.0),
        ("chemical_potential", seen.chemical_potential, energy / (micro * micro)),
    ] {
        if let Some(values) = field {
            point_data.push(scalar(name, values, factor));
        }
    }
    if simulation.parameters.fission.is_some() {
        let (pieces, piece_of) = (&simulation.state.pieces, &simulation.connectivity.topology.piece);
        let names = piece_of.iter().filter_map(|k| pieces.get(*k as usize)).map(|piece| f64::from(piece.id));
        point_data.push(scalar("piece", names.collect(), 1.0));
    }
    point_data.extend([
        scalar("tension [mN/m]", seen.tension, millitension),
        vector("velocity [um/s]", seen.velocity, speed),
        scalar("speed [um/s]", seen.speed, speed),
        vector("normal", seen.normal, 1.0),
        scalar("bending_density [kBT/um2]", seen.bending_density, energy / (micro * micro)),
        scalar("spontaneous_curvature [1/um]", seen.spontaneous_curvature, 1.0 / micro),
    ]);
    let area_rate = scales.energy / (scales.length * scales.length * scales.time);
    let cell_data = vec![
        cell("shear_rate [1/s]", seen.shear_rate, 1.0 / scales.time),
        cell("dissipation [W/m2]", seen.dissipation, area_rate),
        cell("quality", seen.quality, 1.0),
    ];
    let points = surface.points.iter().map(|p| p.map(|x| x * micro)).collect();
    OwnedFrame {
        file_name: frame_file_name(FRAME_STEM, usize::try_from(index).unwrap_or(usize::MAX)),
        time: simulation.state.time * scales.time,
        points,
        triangles: surface.triangles,
        point_data,
        cell_data,
        field_data: vec![FieldText {
            name: "program".to_owned(),
            text: format!("pellicle {}", env!("CARGO_PKG_VERSION")),
        }],
        precision: Precision::Single,
    }
}
