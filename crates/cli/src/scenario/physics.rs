//! Units of the solver, computed defaults, and the parameters of the physics in those units.

use super::checks::is_framed;
use super::problem::{Place, Problem};
use super::shape_changes;
use super::surface::{Surface, locate};
use super::values::{Value, Values};
use crate::setup::Scales;
use crate::units::{AVOGADRO, Measure, measure as m};
use pellicle_physics::parameters::{
    AreaCondition, BindingRegion, Blend, Load, MeshCare, Parameters, Phases, Protein, Pull, Rim,
    StepControl, VolumeCondition,
};
use pellicle_surface::{Mesh, Vec3};
use pellicle_surface::geometry::Geometry;
use std::f64::consts::PI;
use toml::Value as Toml;

/// Area-compression modulus of real lipid bilayers [N/m].
const REAL_COMPRESSION: f64 = 0.24;
/// Area-compression modulus × size²/bending rigidity that keeps strains below 1e-3.
const STIFF_ENOUGH: f64 = 3e4;

impl Scales {
    /// Value of one solver unit of a measure in SI. Amounts of substance do not scale.
    pub fn of(&self, measure: &Measure) -> f64 {
        // kg = energy·time²/length².
        let d = measure.dimension;
        self.energy.powi(d.mass)
            * self.length.powi(d.length - 2 * d.mass)
            * self.time.powi(d.time + 2 * d.mass)
    }
}

/// The units that suit a scenario.
///
/// Energy: the bending rigidity of the phase φ = 0, else of φ = 1; a fluid film has tension × size², else kT.
/// Time: shear viscosity × size²/energy, in which bending relaxes a shape as large as the surface.
pub fn scales(values: &Values, size: f64, thermal_energy: f64) -> Scales {
    let positive = |path: &str| values.number(path).filter(|x| *x > 0.0);
    let energy = positive("membrane.bending_rigidity")
        .or_else(|| positive("composition.domain.bending_rigidity"))
        .or_else(|| positive("lipids.tension").map(|tension| tension * size * size))
        .unwrap_or(thermal_energy);
    let viscosity = positive("membrane.shear_viscosity").unwrap_or(1e-9);
    Scales {
        length: size,
        energy,
        time: viscosity * size * size / energy,
        thermal_energy,
    }
}

/// Refuse values that lie so far from the others that products of them would leave double precision.
pub fn proportion(values: &Values, scales: &Scales) -> Result<(), Problem> {
    let sane = |x: f64| x == 0.0 || (1e-60..=1e60).contains(&x.abs());
    for (path, place, measure, value) in values.quantities() {
        // Temperature has done its part in kT.
        if measure.dimension == m::TEMPERATURE.dimension {
            continue;
        }
        let scaled = value / scales.of(&measure);
        if !sane(scaled) {
            return Err(Problem::new(
                place.or(Some(Place::default())),
                format!(
                    "{path} = {value:.3e} {} is out of all proportion to the other values",
                    measure.unit
                ),
                format!("{scaled:.1e} in the units of the solver"),
                "check its unit, and those of the sizes in [surface], membrane.bending_rigidity and membrane.shear_viscosity",
            ));
        }
    }
    Ok(())
}

/// Defaults that do not depend on the mesh.
pub fn fill_plain(values: &mut Values) {
    let text = |values: &mut Values, path: &str, word: &str| {
        values.fill_as(
            path,
            Value::Text(word.into()),
            Toml::String(word.into()),
            "default",
        );
    };
    let framed = is_framed(values);
    text(
        values,
        "volume.condition",
        if framed { "free" } else { "fixed" },
    );
    if framed {
        text(values, "frame.rim", "clamped");
    }
    if values.has_section("composition") {
        let start = ["mean", "domains", "point_data"];
        if !start
            .iter()
            .any(|name| values.given(&format!("composition.{name}")))
        {
            values.fill("composition.mean", 0.5, "default");
        }
        if let Some(mean) = values.number("composition.mean") {
            values.fill(
                "composition.noise",
                mean.min(1.0 - mean).min(0.02),
                "default",
            );
        }
        for name in [
            "bending_rigidity",
            "gaussian_modulus",
            "spontaneous_curvature",
            "shear_viscosity",
        ] {
            let Some(entry) = values.entry(&format!("membrane.{name}")).cloned() else {
                continue;
            };
            if let Some(written) = entry.written {
                let path = format!("composition.domain.{name}");
                values.fill_as(&path, entry.value, written, "default: as in [membrane]");
            }
        }
    }
    if values.number("output.frame_every").is_none() {
        values.fill("output.frame_change", 0.05, "default");
    }
}

/// Defaults that depend on the mesh and the units.
pub fn fill_scaled(values: &mut Values, scales: &Scales, vertices: usize) {
    let of = |values: &Values, path: &str| values.number(path).unwrap_or(0.0);
    let rigidity = scales
        .energy
        .max(of(values, "composition.domain.bending_rigidity"));
    let wanted = (STIFF_ENOUGH * rigidity / (scales.length * scales.length))
        .max(1e3 * of(values, "lipids.tension").abs())
        .max(1e3 * of(values, "composition.line_tension") / scales.length);
    values.fill(
        "membrane.area_compression_modulus",
        wanted.min(REAL_COMPRESSION),
        "default: 3e4 bending rigidity/size^2 or 1e3 tensions, at most 0.24 N/m: softer than lipids, stiff enough for strains below 1e-3",
    );
    let end = of(values, "time.end");
    values.fill(
        "time.longest_step",
        end.max(of(values, "time.first_step")),
        "default: the whole run",
    );
    let longest = of(values, "time.longest_step");
    values.fill(
        "time.first_step",
        (1e-4 * scales.time)
            .min(0.01 * end)
            .min(longest)
            .max(of(values, "time.shortest_step")),
        "default: 1e-4 viscous times, at most a hundredth of the run",
    );
    values.fill(
        "time.shortest_step",
        1e-8 * of(values, "time.first_step"),
        "default: 1e-8 first steps",
    );
    values.fill(
        "mesh.shortest_edge",
        of(values, "surface.edge_length") / 8.0,
        "default: an eighth of surface.edge_length",
    );
    shape_changes::fill(values);
    let budget = 20_000.max(2 * vertices).min(super::surface::MOST_VERTICES) as i64;
    values.fill_as(
        "mesh.most_vertices",
        Value::Whole(budget),
        Toml::Integer(budget),
        "default",
    );
}

/// Reads values in solver units.
struct Scaled<'a> {
    values: &'a Values,
    scales: Scales,
}

impl Scaled<'_> {
    fn get(&self, path: &str, measure: Measure) -> f64 {
        self.values.number(path).unwrap_or(0.0) / self.scales.of(&measure)
    }

    /// `field`: name of the constant in [membrane] and [composition.domain]; `coat`: key of its change by a coat.
    fn blend(&self, field: &str, measure: Measure, coat: Option<&str>) -> Blend {
        let at_zero = self.get(&format!("membrane.{field}"), measure);
        let domain = format!("composition.domain.{field}");
        Blend {
            at_zero,
            at_one: match self.values.entry(&domain) {
                Some(_) => self.get(&domain, measure),
                None => at_zero,
            },
            per_coverage: coat.map_or(0.0, |coat| self.get(coat, measure)),
        }
    }
}

fn vector(item: &Values, path: &str, unit: f64) -> Vec3 {
    Vec3::from(item.vector(path).unwrap_or_default()) / unit
}

/// Parameters in solver units. `start`: the mesh that the run starts from, mostly that of `surface`.
pub fn parameters(
    values: &Values,
    scales: Scales,
    surface: &Surface,
    start: &Mesh,
    warnings: &mut Vec<String>,
) -> Result<Parameters, Problem> {
    let s = Scaled { values, scales };
    let geometry = Geometry::new(start);
    let framed = is_framed(values);
    let parameters = Parameters {
        bending_rigidity: s.blend("bending_rigidity", m::ENERGY, Some("protein.stiffening")),
        gaussian_modulus: s.blend("gaussian_modulus", m::ENERGY, None),
        spontaneous_curvature: s.blend(
            "spontaneous_curvature",
            m::CURVATURE,
            Some("protein.curvature"),
        ),
        shear_viscosity: s.blend(
            "shear_viscosity",
            m::SURFACE_VISCOSITY,
            Some("protein.thickening"),
        ),
        area_compression_modulus: s.get("membrane.area_compression_modulus", m::TENSION),
        friction: if values.given("surroundings.bulk_viscosity") {
            s.get("surroundings.bulk_viscosity", m::BULK_VISCOSITY)
                / s.get("surroundings.screening_length", m::LENGTH)
        } else {
            s.get("surroundings.friction", m::FRICTION)
        },
        volume: volume(&s, &geometry),
        area: match values.text("lipids.condition") {
            "reservoir" => AreaCondition::Reservoir(s.get("lipids.tension", m::TENSION)),
            _ => AreaCondition::Lipid,
        },
        phases: values.has_section("composition").then(|| Phases {
            line_tension: s.get("composition.line_tension", m::FORCE),
            interface_width: s.get("composition.interface_width", m::LENGTH),
            diffusion_constant: s.get("composition.diffusion_constant", m::DIFFUSION),
            width_per_radius: values.number("composition.width_per_radius").unwrap_or(0.0),
        }),
        protein: values.has_section("protein").then(|| protein(&s)),
        rim: framed.then(|| match values.text("frame.rim") {
            "hinged" => Rim::Hinged,
            _ => Rim::Clamped,
        }),
        loads: loads(&s, surface)?,
        self_contact: shape_changes::self_contact(values, &scales),
        fission: shape_changes::fission(values, &scales),
        step: StepControl {
            tolerance: values.number("time.tolerance").unwrap_or(0.03),
            first: s.get("time.first_step", m::TIME),
            longest: s.get("time.longest_step", m::TIME),
            shortest: s.get("time.shortest_step", m::TIME),
            travel: values.number("time.vertex_travel").unwrap_or(0.2),
        },
        mesh: Some(MeshCare {
            adapt: values.flag("mesh.adapt"),
            edge: s.get("surface.edge_length", m::LENGTH),
            shortest: s.get("mesh.shortest_edge", m::LENGTH),
            edges_per_radius: values.number("mesh.edges_per_radius").unwrap_or(3.0),
            edges_per_interface: values.number("mesh.edges_per_interface").unwrap_or(4.0),
            most_vertices: values.whole("mesh.most_vertices").unwrap_or(0).max(0) as usize,
        }),
    };
    if parameters.rim.is_some() && parameters.friction == 0.0 {
        warnings.push(
            "nothing resists normal motion of a flat membrane but its surroundings, and there is no [surroundings]; \
             give for example bulk_viscosity = \"1 mPa s\" and screening_length = \"100 nm\" if the first steps \
             are refused"
                .to_owned(),
        );
    }
    sanity(values, &parameters, &geometry, warnings)?;
    parameters.validate().map_err(|error| {
        Problem::new(
            Some(Place::default()),
            format!("the values of the scenario do not go together: {error}"),
            "",
            "the value is in units of the solver; check the orders of magnitude of what it names",
        )
    })?;
    Ok(parameters)
}

fn volume(s: &Scaled<'_>, geometry: &Geometry) -> VolumeCondition {
    let values = s.values;
    let start = geometry.volume;
    match values.text("volume.condition") {
        "pressure" => VolumeCondition::Pressure(s.get("volume.pressure", m::PRESSURE)),
        "osmotic" => {
            let unit = s.scales.length.powi(3);
            let molar = AVOGADRO * s.scales.thermal_energy / s.scales.energy;
            let amount = values.number("volume.inside_amount").unwrap_or_else(|| {
                values.number("volume.inside_concentration").unwrap_or(0.0) * start * unit
            });
            VolumeCondition::Osmotic {
                inside: amount * molar,
                outside: values.number("volume.outside_concentration").unwrap_or(0.0)
                    * unit
                    * molar,
                permeability: values
                    .given("volume.permeability")
                    .then(|| s.get("volume.permeability", m::PERMEABILITY)),
            }
        }
        "free" => VolumeCondition::Pressure(0.0),
        _ => {
            let sphere = geometry.total_area.powf(1.5) / (6.0 * PI.sqrt());
            let target = match values.number("volume.reduced_volume") {
                Some(reduced) => Some(reduced * sphere),
                None => values
                    .given("volume.target")
                    .then(|| s.get("volume.target", m::VOLUME)),
            };
            VolumeCondition::Fixed(match target {
                Some(target) => vec![(0.0, start), (s.get("volume.ramp", m::TIME), target)],
                None => vec![(0.0, start)],
            })
        }
    }
}

fn protein(s: &Scaled<'_>) -> Protein {
    let values = s.values;
    let attach_rate = match values.number("protein.on_rate") {
        Some(on_rate) => {
            on_rate * values.number("protein.bulk_concentration").unwrap_or(0.0) * s.scales.time
        }
        None => s.get("protein.attach_rate", m::RATE),
    };
    Protein {
        attach_rate,
        detach_rate: s.get("protein.detach_rate", m::RATE),
        site_area: s.get("protein.site_area", m::AREA),
        thermal_energy: s.scales.thermal_energy / s.scales.energy,
        interaction: s.get("protein.interaction", m::TENSION),
        gradient_energy: s.get("protein.gradient_energy", m::ENERGY),
        phase_preference: s.get("protein.phase_preference", m::TENSION),
        diffusion_constant: s.get("protein.diffusion_constant", m::DIFFUSION),
        region: match values.text("protein.binds") {
            "in domains" => BindingRegion::PhaseOne,
            "outside domains" => BindingRegion::PhaseZero,
            "on spot" => BindingRegion::Marked,
            _ => BindingRegion::Everywhere,
        },
    }
}

fn loads(s: &Scaled<'_>, surface: &Surface) -> Result<Vec<Load>, Problem> {
    let unit = |measure| s.scales.of(&measure);
    s.values
        .list("load")
        .iter()
        .enumerate()
        .map(|(index, load)| {
            let patch_radius = load.number("patch_radius").unwrap_or(0.0) / unit(m::LENGTH);
            let centre = locate(
                load,
                "",
                &format!("load[{index}]."),
                2.0 * patch_radius,
                surface,
            )?;
            let path = |key: &str, unit_of_key: f64| {
                load.list("path")
                    .iter()
                    .map(|point| {
                        let time = point.number("time").unwrap_or(0.0) / unit(m::TIME);
                        (time, vector(point, key, unit_of_key))
                    })
                    .collect()
            };
            Ok(Load {
                centre,
                patch_radius,
                pull: match load.number("trap_stiffness") {
                    Some(stiffness) => Pull::Trap {
                        stiffness: stiffness / unit(m::TENSION),
                        path: path("displacement", unit(m::LENGTH)),
                    },
                    None => Pull::Force(path("force", unit(m::FORCE))),
                },
            })
        })
        .collect()
}

/// What cannot be, or should be known, once the numbers stand side by side.
fn sanity(
    values: &Values,
    parameters: &Parameters,
    geometry: &Geometry,
    warnings: &mut Vec<String>,
) -> Result<(), Problem> {
    for (name, blend, coat) in [
        (
            "bending rigidity",
            parameters.bending_rigidity,
            "protein.stiffening",
        ),
        (
            "shear viscosity",
            parameters.shear_viscosity,
            "protein.thickening",
        ),
    ] {
        if blend.smallest() < 0.0 || name == "shear viscosity" && blend.smallest() <= 0.0 {
            return Err(Problem::new(
                values.place(coat),
                format!("{coat} would make the {name} of a full coat negative or zero"),
                "too far down",
                format!("use a {coat} that leaves the {name} positive"),
            ));
        }
    }
    let um = |x: f64| format!("{:.3} um", x * 1e6);
    if let (Some(width), Some(edge)) = (
        values.number("composition.interface_width"),
        values.number("surface.edge_length"),
    ) {
        let finest = values
            .number("surface.centre_edge_length")
            .unwrap_or(edge)
            .min(edge);
        if width < finest {
            return Err(Problem::new(
                values.place("composition.interface_width"),
                format!(
                    "composition.interface_width = {} is shorter than the edges of the mesh ({})",
                    um(width),
                    um(finest)
                ),
                "too narrow for the mesh",
                format!(
                    "use surface.edge_length = \"{}\", or an interface_width of at least {}: an interface of half width w needs edges of w/2",
                    um(0.5 * width),
                    um(2.0 * finest)
                ),
            ));
        }
        if width < 1.5 * finest {
            warnings.push(format!(
                "only {:.1} edges lie across an interface between phases; with less than 3 the line tension is wrong by some per cent",
                2.0 * width / finest
            ));
        }
    }
    if let AreaCondition::Reservoir(tension) = parameters.area {
        let strain = tension / parameters.area_compression_modulus;
        if strain <= -0.5 {
            return Err(Problem::new(
                values.place("lipids.tension"),
                "lipids.tension would compress the lipids by more than half of their area",
                "too low",
                "give a tension above minus half of membrane.area_compression_modulus",
            ));
        }
        if strain.abs() > 0.02 {
            warnings.push(format!(
                "the tension of the reservoir stretches the lipids by {:.1} %",
                100.0 * strain
            ));
        }
    }
    if let VolumeCondition::Fixed(path) = &parameters.volume
        && surface_is_closed_and_single(values)
        && let Some((_, target)) = path.last()
    {
        let sphere = geometry.total_area.powf(1.5) / (6.0 * PI.sqrt());
        if *target > 1.001 * sphere {
            let key = ["volume.target", "volume.reduced_volume"]
                .into_iter()
                .find(|key| values.given(key))
                .unwrap_or("volume.target");
            return Err(Problem::new(
                values.place(key),
                format!("{key} is more than the area of the surface can enclose"),
                "too large",
                "give a reduced volume of at most 1; a sphere encloses most",
            ));
        }
    }
    Ok(())
}

/// Whether the isoperimetric bound holds: not on periodic tubes.
fn surface_is_closed_and_single(values: &Values) -> bool {
    values.text("surface.shape") != "tube" && !values.given("surface.period")
}
