//! Composition, coverage and marked region at the start.

use super::problem::Problem;
use super::surface::{Surface, locate};
use super::values::Values;
use pellicle_physics::parameters::{BindingRegion, Parameters};
use pellicle_surface::geometry::Geometry;
use pellicle_surface::{Mesh, Vec3};
use rand::{Rng, SeedableRng};
use rand_chacha::ChaCha8Rng;

/// Values at the vertices; empty where there is no such field.
#[derive(Debug, Default)]
pub struct Fields {
    /// φ.
    pub composition: Vec<f64>,
    /// θ.
    pub coverage: Vec<f64>,
    /// Marker of the region that binds.
    pub marker: Vec<f64>,
}

/// All fields at the start.
pub fn build(
    values: &Values,
    parameters: &Parameters,
    surface: &Surface,
) -> Result<Fields, Problem> {
    let mut fields = Fields::default();
    let geometry = Geometry::new(&surface.mesh);
    if let Some(phases) = &parameters.phases {
        fields.composition = composition(values, phases.interface_width, surface, &geometry)?;
    }
    let Some(protein) = &parameters.protein else {
        return Ok(fields);
    };
    let n = surface.mesh.n_vertices();
    let region: Vec<f64> = match protein.region {
        BindingRegion::Marked => {
            let radius = values.number("protein.spot.radius").unwrap_or(0.0) / surface.size;
            let centre = locate(values, "protein.spot.", "protein.spot.", radius, surface)?;
            // Where nothing is said, a rim as narrow as the mesh can carry.
            let wanted = values.number("protein.spot.rim_width").map(|width| width / surface.size);
            let width = wanted.unwrap_or_else(|| surface.mesh.mean_edge_length());
            let spot = disc(&surface.mesh, centre, radius, width);
            fields.marker.clone_from(&spot);
            spot
        }
        BindingRegion::PhaseOne => fields.composition.clone(),
        BindingRegion::PhaseZero => fields.composition.iter().map(|phi| 1.0 - phi).collect(),
        BindingRegion::Everywhere => vec![1.0; n],
    };
    let start = values.number("protein.start_coverage").unwrap_or(0.0);
    fields.coverage = region.iter().map(|g| start * g).collect();
    Ok(fields)
}

/// 1 within `radius` of a point, 0 outside, with the profile of an interface.
fn disc(mesh: &Mesh, centre: Vec3, radius: f64, width: f64) -> Vec<f64> {
    mesh.positions
        .iter()
        .map(|x| {
            let d = mesh.nearest_image(x - centre).norm();
            0.5 * (1.0 + ((radius - d) / width).tanh())
        })
        .collect()
}

fn composition(
    values: &Values,
    width: f64,
    surface: &Surface,
    geometry: &Geometry,
) -> Result<Vec<f64>, Problem> {
    let n = surface.mesh.n_vertices();
    if values.given("composition.point_data") {
        return point_data(values, surface);
    }
    let domains = values.list("composition.domains");
    if values.entry("composition.domains").is_some() {
        let mut field = vec![0.0f64; n];
        for (index, domain) in domains.iter().enumerate() {
            let shown = format!("composition.domains[{index}].");
            let given = domain.number("radius").map(|radius| radius / surface.size);
            let centre = locate(domain, "", &shown, given.unwrap_or(0.0), surface)?;
            let radius = given.unwrap_or_else(|| {
                let share = domain.number("area_fraction").unwrap_or(0.0);
                radius_of_share(&surface.mesh, geometry, centre, share)
            });
            for (old, new) in field
                .iter_mut()
                .zip(disc(&surface.mesh, centre, radius, width))
            {
                *old = old.max(new);
            }
        }
        return Ok(field);
    }
    let mean = values.number("composition.mean").unwrap_or(0.5);
    let noise = values.number("composition.noise").unwrap_or(0.0);
    let seed = values.whole("seed").unwrap_or(0) as u64;
    let mut random = ChaCha8Rng::seed_from_u64(seed);
    // Bumps use the first stream of this seed.
    random.set_stream(1);
    let mut field: Vec<f64> = (0..n).map(|_| random.random_range(-1.0..=1.0)).collect();
    let weighted: f64 = field
        .iter()
        .zip(&geometry.vertex_area)
        .map(|(f, a)| f * a)
        .sum();
    let average = weighted / geometry.total_area;
    let largest = field
        .iter()
        .fold(f64::MIN_POSITIVE, |most, f| most.max((f - average).abs()));
    for f in &mut field {
        *f = (mean + noise * (*f - average) / largest).clamp(0.0, 1.0);
    }
    Ok(field)
}

/// Distance from a point within which a share of the area lies.
fn radius_of_share(mesh: &Mesh, geometry: &Geometry, centre: Vec3, share: f64) -> f64 {
    let mut by_distance: Vec<(f64, f64)> = mesh
        .positions
        .iter()
        .zip(&geometry.vertex_area)
        .map(|(x, a)| (mesh.nearest_image(x - centre).norm(), *a))
        .collect();
    by_distance.sort_by(|a, b| a.0.total_cmp(&b.0));
    let mut left = share * geometry.total_area;
    let mut before = 0.0;
    for (distance, area) in by_distance {
        if area >= left {
            return before + (distance - before) * (left / area);
        }
        left -= area;
        before = distance;
    }
    // The whole surface.
    2.0 * before
}

fn point_data(values: &Values, surface: &Surface) -> Result<Vec<f64>, Problem> {
    let name = values.text("composition.point_data");
    let place = values.place("composition.point_data");
    let Some(field) = surface.point_data.get(name) else {
        let known: Vec<&str> = surface.point_data.keys().map(String::as_str).collect();
        let known = if known.is_empty() {
            "the file has no numbers at its points".to_string()
        } else {
            format!("the file has: {}", known.join(", "))
        };
        return Err(Problem::new(
            place,
            format!("composition.point_data = \"{name}\" is not in the mesh file"),
            "not found",
            known,
        ));
    };
    if field.len() != surface.mesh.n_vertices() {
        return Err(Problem::new(
            place,
            format!(
                "composition.point_data has {} numbers for {} points",
                field.len(),
                surface.mesh.n_vertices()
            ),
            "wrong length",
            "write one number for each point of the mesh",
        ));
    }
    match field.iter().position(|phi| !(0.0..=1.0).contains(phi)) {
        None => Ok(field.clone()),
        Some(vertex) => Err(Problem::new(
            place,
            format!(
                "composition.point_data is {} at point {vertex}, outside 0 to 1",
                field[vertex]
            ),
            "out of bounds",
            "a composition is the local share of one phase, from 0 to 1",
        )),
    }
}
