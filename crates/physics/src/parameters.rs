//! What the user knows about the membrane: material constants, constraints, loads, tolerances.
//!
//! Every number is in one coherent system of units (the program uses micrometres, kT and a viscous time, see its
//! set-up; tests use 1). Nothing here is validated twice: [`Parameters::validate`] is called once before a run.

use crate::PhysicsError;
use pellicle_surface::Vec3;
use serde::{Deserialize, Serialize};

/// A material constant that depends on composition φ and coverage θ:
/// value = at_zero + (at_one − at_zero) q(φ) + per_coverage θ, with the smooth step q of
/// [`crate::coupling::smooth_step`] (q' = 0 in both phases).
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Blend {
    /// Value where φ = 0.
    pub at_zero: f64,
    /// Value where φ = 1.
    pub at_one: f64,
    /// Change per unit of coverage.
    pub per_coverage: f64,
}

impl Blend {
    /// The same everywhere.
    pub fn uniform(value: f64) -> Self {
        Self {
            at_zero: value,
            at_one: value,
            per_coverage: 0.0,
        }
    }

    /// Whether the value is the same everywhere.
    pub fn is_uniform(&self) -> bool {
        self.at_zero == self.at_one && self.per_coverage == 0.0
    }

    /// Smallest value over both phases and all coverages.
    pub fn smallest(&self) -> f64 {
        self.at_zero.min(self.at_one) + self.per_coverage.min(0.0)
    }
}

/// How the enclosed volume is set.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub enum VolumeCondition {
    /// Pressure difference inside − outside is given (0: volume free).
    Pressure(f64),
    /// The volume follows a path in time (time, volume), linear between its points, constant outside.
    Fixed(Vec<(f64, f64)>),
    /// Van 't Hoff: p = amount kT / V − outside, with amounts given as energies and the outside as a pressure.
    Osmotic {
        /// Number of impermeable osmolytes inside times kT [energy].
        inside: f64,
        /// Osmotic pressure of the outside [energy/volume].
        outside: f64,
        /// Water flux per area and pressure [velocity/pressure]; `None`: water equilibrates at once.
        permeability: Option<f64>,
    },
}

/// How the amount of lipid is set.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub enum AreaCondition {
    /// The amount of lipid is fixed; tension is a result.
    Lipid,
    /// Lipid is exchanged with a reservoir of this tension [energy/area], through the rim of a patch or
    /// everywhere on a closed or periodic surface.
    Reservoir(f64),
}

/// Two lipid phases: Cahn–Hilliard with a double well.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Phases {
    /// Line tension σ of the flat interface [energy/length].
    pub line_tension: f64,
    /// Half width ε of the profile u = tanh(x/ε) [length].
    pub interface_width: f64,
    /// Where the membrane curves tightly the interface is narrower, at most this share of the smallest radius of
    /// curvature; zero: as wide everywhere. Narrowing happens with adaptation of the mesh.
    pub width_per_radius: f64,
    /// Diffusion constant D within a phase [length²/time]; mobility M = D/W''(±1).
    pub diffusion_constant: f64,
}

/// Where binding happens. The factor multiplies attachment and detachment alike, so detailed balance holds.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub enum BindingRegion {
    /// Everywhere.
    Everywhere,
    /// In proportion to composition φ.
    PhaseOne,
    /// In proportion to 1 − φ.
    PhaseZero,
    /// On a marked piece of membrane that is carried along by the lipids ([`crate::State::marker`]).
    Marked,
}

/// Protein that binds from the bulk and bends the membrane (its curvature is
/// `spontaneous_curvature.per_coverage`).
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Protein {
    /// Attachment rate k_on·c per free site [1/time].
    pub attach_rate: f64,
    /// Detachment rate k_off of an isolated protein on a flat membrane [1/time].
    pub detach_rate: f64,
    /// Membrane area per site a_p.
    pub site_area: f64,
    /// kT [energy].
    pub thermal_energy: f64,
    /// χ in χ/2 θ² [energy/area]; negative: proteins attract.
    pub interaction: f64,
    /// γ_θ in γ_θ/2 |∇θ|² [energy].
    pub gradient_energy: f64,
    /// w in −w φ θ [energy/area]; positive: proteins prefer φ = 1.
    pub phase_preference: f64,
    /// Lateral diffusion constant [length²/time].
    pub diffusion_constant: f64,
    /// Where binding happens.
    pub region: BindingRegion,
}

/// Repulsion of facing membranes, see [`crate::energy::repulsion`].
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Repulsion {
    /// Pressure P₀ at contact [energy/volume].
    pub pressure: f64,
    /// Length λ over which it decays.
    pub decay_length: f64,
}

/// What happens where the membrane meets itself.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
pub enum SelfContact {
    /// The run stops.
    #[default]
    Stop,
    /// The parts repel each other.
    Repel(Repulsion),
}

/// Severing of thin necks.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Fission {
    /// Necks of at most this radius (length round/2π) are severed.
    pub neck_radius: f64,
}

/// How the rim of a framed patch is held.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Rim {
    /// Position and normal are held.
    Clamped,
    /// Position is held, the patch may tilt.
    Hinged,
}

/// What pulls on a load patch.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub enum Pull {
    /// A force along a path in time (time, force), linear between its points.
    Force(Vec<(f64, Vec3)>),
    /// A spring of given stiffness [energy/length²] whose far end moves along a path (time, displacement from
    /// the patch's first place), linear between its points.
    Trap {
        /// Stiffness.
        stiffness: f64,
        /// Path of the far end.
        path: Vec<(f64, Vec3)>,
    },
}

/// A load on a small smooth patch of membrane with weights ∝ A exp(−d²/2r²).
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Load {
    /// Where the patch is centred at the start.
    pub centre: Vec3,
    /// Radius r of the weights.
    pub patch_radius: f64,
    /// What pulls.
    pub pull: Pull,
}

/// Tolerances and limits of the time step.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct StepControl {
    /// Largest share by which a step's energy drop may differ from what it dissipates (plus work).
    pub tolerance: f64,
    /// First step.
    pub first: f64,
    /// Longest step allowed.
    pub longest: f64,
    /// Shortest step: below it the run stops and says why.
    pub shortest: f64,
    /// Largest way of a vertex per step, in units of the local edge length.
    pub travel: f64,
}

/// How the mesh is looked after during a run.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct MeshCare {
    /// Whether edges may be split and collapsed where the shape asks for it (flips and smoothing always happen).
    pub adapt: bool,
    /// Edge length wanted where nothing asks for a finer mesh [length].
    pub edge: f64,
    /// Shortest edge length asked for [length].
    pub shortest: f64,
    /// Edges per radius of curvature 1/|c_max|.
    pub edges_per_radius: f64,
    /// Edges across the width 2ε of a phase interface.
    pub edges_per_interface: f64,
    /// Vertex budget.
    pub most_vertices: usize,
}

/// Everything the physics needs to know.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Parameters {
    /// Bending rigidity κ [energy].
    pub bending_rigidity: Blend,
    /// Gaussian modulus κ_G [energy].
    pub gaussian_modulus: Blend,
    /// Spontaneous curvature C in κ/2 (2H − C)² [1/length].
    pub spontaneous_curvature: Blend,
    /// Surface shear viscosity ζ [energy·time/length²].
    pub shear_viscosity: Blend,
    /// Area-compression modulus K_A [energy/area].
    pub area_compression_modulus: f64,
    /// Friction of the surroundings ξ [energy·time/length⁴].
    pub friction: f64,
    /// Enclosed volume.
    pub volume: VolumeCondition,
    /// Lipid amount.
    pub area: AreaCondition,
    /// Two phases, if any.
    pub phases: Option<Phases>,
    /// Binding protein, if any.
    pub protein: Option<Protein>,
    /// How rims are held, if the surface has any.
    pub rim: Option<Rim>,
    /// Loads.
    pub loads: Vec<Load>,
    /// What happens where the membrane meets itself.
    pub self_contact: SelfContact,
    /// Whether necks are severed; `None`: they are not.
    pub fission: Option<Fission>,
    /// Step control.
    pub step: StepControl,
    /// Mesh care; `None`: the connectivity never changes.
    pub mesh: Option<MeshCare>,
}

impl Parameters {
    /// A bare fluid membrane: κ, ζ and K_A given, no constraint on volume, fixed lipid.
    pub fn bare(bending_rigidity: f64, shear_viscosity: f64, area_compression_modulus: f64) -> Self {
        Self {
            bending_rigidity: Blend::uniform(bending_rigidity),
            gaussian_modulus: Blend::uniform(0.0),
            spontaneous_curvature: Blend::uniform(0.0),
            shear_viscosity: Blend::uniform(shear_viscosity),
            area_compression_modulus,
            friction: 0.0,
            volume: VolumeCondition::Pressure(0.0),
            area: AreaCondition::Lipid,
            phases: None,
            protein: None,
            rim: None,
            loads: Vec::new(),
            self_contact: SelfContact::Stop,
            fission: None,
            step: StepControl {
                tolerance: 0.03,
                first: 1e-4,
                longest: f64::INFINITY,
                shortest: 1e-12,
                travel: 0.2,
            },
            mesh: None,
        }
    }

    /// Check signs and finiteness.
    ///
    /// # Errors
    /// [`PhysicsError::Parameter`] naming the first value that cannot be.
    pub fn validate(&self) -> Result<(), PhysicsError> {
        let refuse = |name: &'static str, value: f64, mend: &'static str| {
            Err(PhysicsError::Parameter { name, value, mend })
        };
        let not_negative = [
            ("bending_rigidity", self.bending_rigidity.smallest()),
            ("friction", self.friction),
        ];
        for (name, value) in not_negative {
            if !(value >= 0.0 && value.is_finite()) {
                return refuse(name, value, "it must be finite and not negative");
            }
        }
        let positive = [
            ("shear_viscosity", self.shear_viscosity.smallest()),
            ("area_compression_modulus", self.area_compression_modulus),
            ("step.tolerance", self.step.tolerance),
            ("step.first", self.step.first),
            ("step.travel", self.step.travel),
        ];
        for (name, value) in positive {
            if !(value > 0.0 && value.is_finite()) {
                return refuse(name, value, "it must be finite and positive");
            }
        }
        if let Some(phases) = &self.phases {
            for (name, value) in [
                ("line_tension", phases.line_tension),
                ("interface_width", phases.interface_width),
                ("composition diffusion_constant", phases.diffusion_constant),
            ] {
                if !(value > 0.0 && value.is_finite()) {
                    return refuse(name, value, "it must be finite and positive");
                }
            }
        }
        if let Some(phases) = &self.phases
            && !(phases.width_per_radius >= 0.0 && phases.width_per_radius.is_finite())
        {
            return refuse("width_per_radius", phases.width_per_radius, "it must be finite and not negative");
        }
        if let Some(protein) = &self.protein {
            for (name, value) in [
                ("attach_rate", protein.attach_rate),
                ("detach_rate", protein.detach_rate),
                ("gradient_energy", protein.gradient_energy),
                ("protein diffusion_constant", protein.diffusion_constant),
            ] {
                if !(value >= 0.0 && value.is_finite()) {
                    return refuse(name, value, "it must be finite and not negative");
                }
            }
            for (name, value) in [
                ("site_area", protein.site_area),
                ("thermal_energy", protein.thermal_energy),
            ] {
                if !(value > 0.0 && value.is_finite()) {
                    return refuse(name, value, "it must be finite and positive");
                }
            }
        }
        let mut lengths = Vec::new();
        if let SelfContact::Repel(repulsion) = &self.self_contact {
            lengths.push(("repulsion pressure", repulsion.pressure));
            lengths.push(("repulsion decay_length", repulsion.decay_length));
        }
        lengths.extend(self.fission.map(|fission| ("fission neck_radius", fission.neck_radius)));
        for (name, value) in lengths {
            if !(value > 0.0 && value.is_finite()) {
                return refuse(name, value, "it must be finite and positive");
            }
        }
        for load in &self.loads {
            if !(load.patch_radius > 0.0 && load.patch_radius.is_finite()) {
                return refuse("patch_radius", load.patch_radius, "it must be finite and positive");
            }
        }
        Ok(())
    }
}

/// Value of a path at a time: linear between its points, constant outside.
pub fn along_path<T>(path: &[(f64, T)], time: f64) -> Option<T>
where
    T: Copy + std::ops::Add<Output = T> + std::ops::Sub<Output = T> + std::ops::Mul<f64, Output = T>,
{
    let (first, last) = (path.first()?, path.last()?);
    if time <= first.0 {
        return Some(first.1);
    }
    if time >= last.0 {
        return Some(last.1);
    }
    let next = path.partition_point(|(t, _)| *t <= time);
    let ((t0, a), (t1, b)) = (path[next - 1], path[next]);
    Some(a + (b - a) * ((time - t0) / (t1 - t0)))
}
