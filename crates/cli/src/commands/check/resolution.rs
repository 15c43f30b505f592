//! Whether the mesh is fine enough for what it shall show.

use super::numbers::Case;
use pellicle_physics::parameters::BindingRegion;

/// Fewest edges per radius of a load patch: below, its weights depend on where vertices happen to lie.
const EDGES_PER_PATCH: f64 = 1.5;
/// Fewest edges across an interface: below, its line tension is wrong by some per cent.
const EDGES_PER_INTERFACE: f64 = 4.0;
/// Fewest edges per radius of coats and tubes.
const EDGES_PER_RADIUS: f64 = 3.0;

/// Something that the mesh must resolve.
#[derive(Debug)]
pub struct Need {
    /// Name for programs.
    pub key: &'static str,
    /// Name for people.
    pub name: &'static str,
    /// Its length (solver units).
    pub length: f64,
    /// Edges that it needs.
    pub needed: f64,
    /// Edges along it at the start.
    pub at_start: f64,
    /// Edges along it after the mesh has adapted as the scenario allows.
    pub adapted: f64,
}

impl Need {
    /// Whether it is resolved, at least after adapting. Meshes scatter about their mean edge.
    pub fn met(&self) -> bool {
        self.at_start.max(self.adapted) >= 0.9 * self.needed
    }

    /// In words.
    pub fn verdict(&self) -> &'static str {
        if self.at_start >= 0.9 * self.needed {
            "resolved"
        } else if self.met() {
            "coarse at the start; the mesh refines itself"
        } else {
            "too coarse"
        }
    }
}

/// Mean length of the edges at each vertex.
fn local_edges(case: &Case<'_>) -> Vec<f64> {
    let mesh = &case.simulation.state.mesh;
    let topology = &case.simulation.connectivity.topology;
    let (mut sum, mut count) = (vec![0.0; mesh.n_vertices()], vec![0.0; mesh.n_vertices()]);
    for (i, j) in topology.edges() {
        let length = mesh.edge(i, j).norm();
        for v in [i as usize, j as usize] {
            sum[v] += length;
            count[v] += 1.0;
        }
    }
    sum.iter().zip(&count).map(|(sum, count): (&f64, &f64)| sum / count.max(1.0)).collect()
}

/// All that the mesh of a case must resolve.
pub fn needs(case: &Case<'_>) -> Vec<Need> {
    let (parameters, state) = (&case.setup.parameters, &case.simulation.state);
    let edges = local_edges(case);
    let mean = |chosen: &dyn Fn(usize) -> bool| {
        let some: Vec<f64> = (0..edges.len()).filter(|&v| chosen(v)).map(|v| edges[v]).collect();
        match some.len() {
            0 => state.mesh.mean_edge_length(),
            n => some.iter().sum::<f64>() / n as f64,
        }
    };
    let care = parameters.mesh.filter(|care| care.adapt);
    let adapted = |at_start: f64, length: f64, wanted: Option<f64>| match (care, wanted) {
        (Some(care), Some(wanted)) => at_start.max((length / care.shortest).min(wanted)),
        _ => at_start,
    };
    let mut found = Vec::new();
    if let Some(phases) = &parameters.phases {
        let length = 2.0 * phases.interface_width;
        let at_start = length / mean(&|_| true);
        found.push(Need {
            key: "interface",
            name: "boundary of phases",
            length,
            needed: EDGES_PER_INTERFACE,
            at_start,
            adapted: adapted(at_start, length, care.map(|care| care.edges_per_interface)),
        });
    }
    let curvature = case.curvature();
    let per_radius = care.map(|care| care.edges_per_radius);
    if curvature > 0.0 {
        let marked = parameters.protein.as_ref().is_some_and(|p| p.region == BindingRegion::Marked);
        let length = 2.0 / curvature;
        let marker = state.marker();
        let on_spot = |v: usize| !marked || marker.get(v).is_none_or(|mark| *mark > 0.5);
        let at_start = length / mean(&on_spot);
        found.push(Need {
            key: "coat_radius",
            name: "radius of a coat",
            length,
            needed: EDGES_PER_RADIUS,
            at_start,
            adapted: adapted(at_start, length, per_radius),
        });
    }
    for load in &parameters.loads {
        let distance = |v: usize| -> f64 { (state.mesh.positions[v] - load.centre).norm() };
        let near = |v: usize| distance(v) < 2.0 * load.patch_radius;
        let edge = mean(&near);
        let at_start = load.patch_radius / edge;
        found.push(Need {
            key: "load_patch",
            name: "patch of a load",
            length: load.patch_radius,
            needed: EDGES_PER_PATCH,
            at_start,
            adapted: at_start,
        });
        if let Some(length) = case.tube_radius().filter(|radius| *radius < 0.5 * case.size) {
            let at_start = length / edge;
            found.push(Need {
                key: "tube_radius",
                name: "radius of a pulled tube",
                length,
                needed: EDGES_PER_RADIUS,
                at_start,
                adapted: adapted(at_start, length, per_radius),
            });
        }
    }
    found
}
