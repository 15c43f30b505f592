//! Dimensionless numbers of a case, and what follows from them in words.

use crate::run::words::with_unit;
use crate::setup::Setup;
use pellicle_physics::Simulation;
use pellicle_physics::diagnostics::size;
use pellicle_physics::parameters::{AreaCondition, VolumeCondition};
use std::f64::consts::PI;

/// A dimensionless number and what it means for the case.
#[derive(Debug)]
pub struct Number {
    /// Name for programs.
    pub key: &'static str,
    /// Name for people.
    pub name: &'static str,
    /// How it is formed.
    pub formula: &'static str,
    /// Its value.
    pub value: f64,
    /// What matters, and what may be dropped.
    pub verdict: String,
}

/// What the numbers are made of, in solver units; means over the surface at the start.
pub struct Case<'a> {
    /// The scenario.
    pub setup: &'a Setup,
    /// Its start.
    pub simulation: &'a Simulation,
    /// Viscosity of the liquid [Pa s], where the scenario names it.
    pub bulk_viscosity: Option<f64>,
    /// Size L.
    pub size: f64,
    /// Bending rigidity κ.
    pub rigidity: f64,
    /// Surface shear viscosity ζ.
    pub viscosity: f64,
    /// Tension: the reservoir's, else the mean at the start.
    pub tension: f64,
}

impl<'a> Case<'a> {
    /// Gather what the numbers are made of.
    pub fn new(setup: &'a Setup, simulation: &'a Simulation, bulk_viscosity: Option<f64>) -> Self {
        let measured = &simulation.measured;
        let weights = &measured.geometry.vertex_area;
        let mean = |values: &[f64]| {
            let sum: f64 = values.iter().zip(weights).map(|(value, weight)| value * weight).sum();
            sum / weights.iter().sum::<f64>()
        };
        Self {
            setup,
            simulation,
            bulk_viscosity,
            size: size(simulation),
            rigidity: mean(&measured.material.bending_rigidity),
            viscosity: mean(&measured.material.shear_viscosity),
            tension: match setup.parameters.area {
                AreaCondition::Reservoir(tension) => tension,
                AreaCondition::Lipid => mean(&simulation.membrane_tension()),
            },
        }
    }

    /// A length for people.
    pub fn length(&self, value: f64) -> String {
        with_unit(value * self.setup.scales.length, "m")
    }

    /// A time for people.
    pub fn time(&self, value: f64) -> String {
        with_unit(value * self.setup.scales.time, "s")
    }

    /// Largest spontaneous curvature anywhere, in magnitude; a coat counts as full.
    pub fn curvature(&self) -> f64 {
        let blend = self.setup.parameters.spontaneous_curvature;
        [blend.at_zero, blend.at_one]
            .into_iter()
            .flat_map(|bare| [bare, bare + blend.per_coverage])
            .map(f64::abs)
            .fold(0.0, f64::max)
    }

    /// Radius √(κ/2τ) of a tube pulled out of a membrane under tension; `None` without tension or rigidity.
    pub fn tube_radius(&self) -> Option<f64> {
        (self.tension > 0.0 && self.rigidity > 0.0).then(|| (self.rigidity / (2.0 * self.tension)).sqrt())
    }
}

/// The first verdict whose bound the value does not exceed, else the last.
fn graded(value: f64, verdicts: &[(f64, &str)], beyond: &str) -> String {
    verdicts.iter().find(|(bound, _)| value <= *bound).map_or(beyond, |(_, verdict)| verdict).to_owned()
}

/// All numbers that a case has.
pub fn numbers(case: &Case<'_>) -> Vec<Number> {
    let mut found = Vec::new();
    mechanics(case, &mut found);
    shape(case, &mut found);
    phases(case, &mut found);
    protein(case, &mut found);
    surroundings(case, &mut found);
    found
}

fn mechanics(case: &Case<'_>, found: &mut Vec<Number>) {
    let (size, rigidity, tension) = (case.size, case.rigidity, case.tension);
    if rigidity > 0.0 {
        let value = tension.abs() * size * size / rigidity;
        let mut verdict = graded(
            value,
            &[
                (1.0, "bending rules; tension may be dropped at the size of the surface"),
                (100.0, "bending and tension both matter"),
            ],
            "tension rules; bending matters only within its length of rims, necks, loads and coats",
        );
        if tension != 0.0 && value > 1.0 {
            verdict += &format!(" (length sqrt(kappa/tension) = {})", case.length((rigidity / tension.abs()).sqrt()));
        }
        if matches!(case.setup.parameters.area, AreaCondition::Lipid) {
            verdict += "; at the start: with a fixed amount of lipid, tension is a result";
        }
        found.push(Number {
            key: "foppl_von_karman",
            name: "Föppl–von Kármán number",
            formula: "tension L^2 / kappa",
            value,
            verdict,
        });
        let relaxation = case.viscosity * size * size / rigidity;
        let value = case.setup.stop.time / relaxation;
        let verdict = graded(
            value,
            &[
                (0.1, "too short for the whole shape to relax; only details move"),
                (10.0, "about as long as a shape takes to relax"),
            ],
            "long enough for the shape to follow slower processes close to rest",
        );
        found.push(Number {
            key: "duration",
            name: "duration",
            formula: "end kappa / (zeta L^2)",
            value,
            verdict: format!("{verdict} (viscous time {})", case.time(relaxation)),
        });
    }
    let value = tension.abs() / case.setup.parameters.area_compression_modulus;
    let verdict = graded(
        value,
        &[(1e-3, "lipids keep their area; stretching may be dropped")],
        "lipids stretch noticeably under this tension",
    );
    found.push(Number { key: "strain", name: "stretching", formula: "tension / K_A", value, verdict });
}

fn shape(case: &Case<'_>, found: &mut Vec<Number>) {
    let (simulation, geometry) = (case.simulation, &case.simulation.measured.geometry);
    let closed = simulation.connectivity.topology.is_closed() && simulation.state.mesh.period.is_none();
    if closed {
        let sphere = geometry.total_area.powf(1.5) / (6.0 * PI.sqrt());
        let target = match &case.setup.parameters.volume {
            VolumeCondition::Fixed(path) => path.last().map(|(_, volume)| volume / sphere),
            _ => None,
        };
        let value = target.unwrap_or(geometry.volume / sphere);
        // Branches of lowest bending energy without spontaneous curvature: Seifert, Berndl & Lipowsky, Phys. Rev. A
        // 44 (1991) 1182; from memory.
        let mut verdict = graded(
            value,
            &[
                (0.592, "a cup (stomatocyte) has least bending energy"),
                (0.652, "a disc (oblate) has least bending energy"),
                (0.98, "a rod (prolate) has least bending energy"),
            ],
            "nearly a sphere: little excess area to fluctuate or bud with",
        );
        if value <= 0.98 {
            verdict += ", without phases or coat";
        }
        match case.setup.parameters.volume {
            VolumeCondition::Fixed(_) => verdict += "; volume at the end",
            _ => verdict += "; at the start, as the volume is not fixed",
        }
        found.push(Number {
            key: "reduced_volume",
            name: "reduced volume",
            formula: "6 sqrt(pi) V / A^(3/2)",
            value,
            verdict,
        });
    }
    let curvature = case.curvature();
    if curvature > 0.0 {
        let value = curvature * case.size;
        let mut verdict = graded(
            value,
            &[(0.5, "spontaneous curvature is weak: it may be dropped unless energies are compared")],
            "spontaneous curvature matters",
        );
        verdict += &format!("; it prefers spheres of radius {}", case.length(2.0 / curvature));
        // A flat coat costs κC²/2 per area; tension must be below to let it bud.
        let against = case.tension / (0.5 * case.rigidity * curvature * curvature);
        if against.is_finite() && case.tension > 0.0 {
            verdict += &format!(
                ", and tension is {against:.2} of kappa C0^2/2: {}",
                if against < 1.0 { "buds can close" } else { "it keeps them flat" }
            );
        }
        found.push(Number { key: "coat", name: "coat number", formula: "C0 L", value, verdict });
    }
}

fn phases(case: &Case<'_>, found: &mut Vec<Number>) {
    let Some(phases) = &case.setup.parameters.phases else { return };
    let (size, rigidity) = (case.size, case.rigidity);
    if rigidity > 0.0 {
        let value = phases.line_tension * size / rigidity;
        let verdict = graded(
            value,
            &[
                (0.5, "boundaries hardly bend the membrane: the shape may be held fixed"),
                (4.0, "domains bulge; none is large enough to bud"),
            ],
            "large domains bud",
        );
        // Energy of a spherical cap of fixed area without tension: 2πκy² + 2πrσ√(1 − y²/4), y = r × curvature.
        let length = rigidity / phases.line_tension;
        found.push(Number {
            key: "line_tension",
            name: "line-tension number",
            formula: "line tension L / kappa",
            value,
            verdict: format!(
                "{verdict}; without tension a bud has less energy beyond a domain radius of {}, no barrier beyond {}",
                case.length(4.0 * length),
                case.length(8.0 * length)
            ),
        });
    }
    let value = phases.interface_width / size;
    let verdict = graded(
        value,
        &[
            (0.05, "boundaries are thin: results hardly depend on their width"),
            (0.15, "boundaries are thin beside the surface, not beside small domains"),
        ],
        "boundaries are as wide as domains: line tension is only nominal, use a smaller interface_width",
    );
    found.push(Number { key: "cahn", name: "Cahn number", formula: "interface width / L", value, verdict });
    transport(case, "composition", phases.diffusion_constant, phases.line_tension, found);
}

/// Diffusion of composition or protein against the flow that bending or line tension drives.
fn transport(case: &Case<'_>, what: &str, diffusion: f64, line_tension: f64, found: &mut Vec<Number>) {
    if !(diffusion > 0.0 && case.rigidity > 0.0) {
        return;
    }
    let of_protein = what == "protein";
    let value = diffusion * case.viscosity / case.rigidity;
    let verdict = graded(
        value,
        &[(0.1, "diffuses slowly beside bending"), (10.0, "diffuses about as fast as bending relaxes")],
        "diffuses fast: the shape lags behind it",
    );
    found.push(Number {
        key: if of_protein { "protein_diffusion" } else { "diffusion" },
        name: if of_protein { "diffusion number, protein" } else { "diffusion number" },
        formula: "D zeta / kappa",
        value,
        verdict: format!("{what} {verdict}"),
    });
    let drive = (case.rigidity / case.size).max(line_tension);
    let value = drive * case.size / (case.viscosity * diffusion);
    let verdict = graded(
        value,
        &[(0.1, "flow may be dropped from transport"), (10.0, "flow and diffusion both carry it")],
        "flow carries it; diffusion matters only at boundaries",
    );
    found.push(Number {
        key: if of_protein { "protein_peclet" } else { "peclet" },
        name: if of_protein { "Péclet number, protein" } else { "Péclet number" },
        formula: "max(kappa/L, line tension) L / (zeta D)",
        value,
        verdict: format!("{verdict} ({what})"),
    });
}

fn protein(case: &Case<'_>, found: &mut Vec<Number>) {
    let Some(protein) = &case.setup.parameters.protein else { return };
    let rate = protein.attach_rate + protein.detach_rate;
    if rate > 0.0 && protein.diffusion_constant > 0.0 {
        let value = rate * case.size * case.size / protein.diffusion_constant;
        let verdict = graded(
            value,
            &[
                (0.1, "diffusion evens coverage out before binding changes it"),
                (10.0, "binding and diffusion both shape coverage"),
            ],
            "binding sets coverage on the spot; diffusion only smooths its edges",
        );
        let smooth = (protein.diffusion_constant / rate).sqrt();
        found.push(Number {
            key: "damkoehler",
            name: "Damköhler number",
            formula: "(attach + detach) L^2 / D",
            value,
            verdict: format!("{verdict} (over {})", case.length(smooth)),
        });
    }
    transport(case, "protein", protein.diffusion_constant, 0.0, found);
}

fn surroundings(case: &Case<'_>, found: &mut Vec<Number>) {
    let scales = &case.setup.scales;
    if let Some(bulk) = case.bulk_viscosity.filter(|bulk| *bulk > 0.0) {
        let viscosity = case.viscosity * scales.energy * scales.time / (scales.length * scales.length);
        let reach = viscosity / (2.0 * bulk) / scales.length;
        let value = case.size / reach;
        let verdict = graded(
            value,
            &[
                (0.1, "the membrane's own viscosity rules; the liquid may be dropped"),
                (10.0, "membrane and liquid both resist"),
            ],
            "the liquid resists more than the membrane: friction per area is a crude model of it",
        );
        found.push(Number {
            key: "saffman_delbruck",
            name: "size in Saffman–Delbrück lengths",
            formula: "L / (zeta / 2 eta)",
            value,
            verdict: format!("{verdict} (zeta/2eta = {})", case.length(reach)),
        });
    }
    let friction = case.setup.parameters.friction;
    if friction > 0.0 {
        let reach = (case.viscosity / friction).sqrt();
        let value = case.size / reach;
        let verdict = graded(
            value,
            &[(0.1, "friction of the surroundings may be dropped"), (10.0, "friction and membrane viscosity both matter")],
            "friction rules; membrane viscosity matters only over short lengths",
        );
        found.push(Number {
            key: "friction",
            name: "size in friction lengths",
            formula: "L / sqrt(zeta / friction)",
            value,
            verdict: format!("{verdict} (length {})", case.length(reach)),
        });
    }
}
