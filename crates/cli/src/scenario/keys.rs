//! The one list of all keys of a scenario: what the parser accepts, what the schema says, what is written back.

use crate::units::{Measure, measure as m};

/// Bounds of a number (in SI where it has a unit).
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Range {
    /// Any finite number.
    Any,
    /// Above zero.
    Positive,
    /// Zero or above.
    NotNegative,
    /// Within bounds, ends included.
    Within(f64, f64),
    /// Above the first bound, up to the second.
    AboveUpTo(f64, f64),
}

impl Range {
    /// Whether a number is allowed.
    pub fn holds(self, x: f64) -> bool {
        match self {
            Range::Any => x.is_finite(),
            Range::Positive => x > 0.0 && x.is_finite(),
            Range::NotNegative => x >= 0.0 && x.is_finite(),
            Range::Within(low, high) => (low..=high).contains(&x),
            Range::AboveUpTo(low, high) => x > low && x <= high,
        }
    }

    /// In words, after "must be".
    pub fn words(self) -> String {
        match self {
            Range::Any => "finite".into(),
            Range::Positive => "above zero".into(),
            Range::NotNegative => "zero or above".into(),
            Range::Within(low, high) => format!("between {low} and {high}"),
            Range::AboveUpTo(low, high) => format!("above {low} and at most {high}"),
        }
    }
}

/// What a key takes.
#[derive(Clone, Copy, Debug)]
pub enum Kind {
    /// A text with number and unit.
    Quantity(Measure, Range),
    /// Three texts with number and unit.
    Vector(Measure),
    /// Three numbers that are not all zero.
    Direction,
    /// A plain number.
    Number(Range),
    /// A whole number within bounds.
    Whole(i64, i64),
    /// True or false.
    Flag,
    /// One of some words.
    Choice(&'static [&'static str]),
    /// Any text.
    Text,
    /// Path of a file, relative to the scenario.
    Path,
    /// A unit of length.
    LengthUnit,
    /// A table.
    Section(&'static [Key]),
    /// A list of tables.
    Sections(&'static [Key]),
    /// Anything; who asks for it looks at it.
    Loose,
}

/// One key.
#[derive(Clone, Copy, Debug)]
pub struct Key {
    /// Name.
    pub name: &'static str,
    /// What it takes.
    pub kind: Kind,
    /// Value where it is left out, as TOML; only where it does not depend on other keys.
    pub default: Option<&'static str>,
    /// Example, as TOML.
    pub example: &'static str,
    /// What it means.
    pub about: &'static str,
}

/// A key without default.
pub const fn key(name: &'static str, kind: Kind, example: &'static str, about: &'static str) -> Key {
    Key {
        name,
        kind,
        default: None,
        example,
        about,
    }
}

impl Key {
    /// With a default, as TOML.
    pub const fn or(mut self, default: &'static str) -> Self {
        self.default = Some(default);
        self
    }
}

/// A table.
pub const fn section(name: &'static str, keys: &'static [Key], about: &'static str) -> Key {
    key(name, Kind::Section(keys), "", about)
}

use Kind::{Choice, Direction, Flag, LengthUnit, Number, Path, Quantity, Sections, Text, Vector, Whole};
use Range::{AboveUpTo, Any, NotNegative, Positive, Within};

/// Shapes of [surface].
pub const SHAPES: &[&str] = &[
    "sphere",
    "ellipsoid",
    "prolate",
    "oblate",
    "torus",
    "tube",
    "capped tube",
    "disc",
    "file",
];

const ANY_POINT: &str = "[\"0 um\", \"0 um\", \"5 um\"]";

/// Keys outside of any section, and the sections.
pub const ROOT: &[Key] = &[
    key("title", Text, "\"Budding of a two-phase vesicle\"", "one line that says what the scenario is about").or("\"untitled\""),
    key("temperature", Quantity(m::TEMPERATURE, Positive), "\"298 K\"", "temperature; sets kBT").or("\"298 K\""),
    key("seed", Whole(0, i64::MAX), "1", "seed of all randomness: bumps, irregular meshes, noise").or("1"),
    key("include", Path, "\"base.toml\"", "another scenario whose keys are used where this one is silent"),
    key("start_from", Path, "\"other-run\"", "directory of a run whose end state this one starts from; [surface] then only sets scales and edge lengths"),
    section("surface", SURFACE, "shape of the membrane at the start and its mesh"),
    section("membrane", MEMBRANE, "material of the membrane; where composition is given, of the phase with composition 0"),
    section("lipids", LIPIDS, "how the amount of lipid is set"),
    section("volume", VOLUME, "how the enclosed volume is set"),
    section("composition", COMPOSITION, "two lipid phases"),
    section("protein", PROTEIN, "protein that binds from the bulk and bends the membrane"),
    section("surroundings", SURROUNDINGS, "drag of what surrounds the membrane"),
    section("frame", FRAME, "how the rim of a patch is held"),
    key("load", Sections(LOAD), "", "force or trap that pulls on a small patch of membrane"),
    section("self_contact", SELF_CONTACT, "what happens where the membrane meets itself"),
    section("fission", FISSION, "thin necks are severed and the run goes on in pieces; left out: a thin neck ends the run"),
    section("time", TIME, "end of the run and limits of the time step"),
    section("mesh", MESH, "how the mesh is looked after during the run"),
    section("output", OUTPUT, "how often what is written"),
    section("stop", STOP, "what ends the run before its time"),
];

const SURFACE: &[Key] = &[
    key("shape", Choice(SHAPES), "\"sphere\"", "kind of surface"),
    key("radius", Quantity(m::LENGTH, Positive), "\"5 um\"", "radius of a sphere, tube, capped tube or disc; for prolate and oblate, of the sphere of equal area"),
    key("semi_axes", Vector(m::LENGTH), "[\"3 um\", \"3 um\", \"9 um\"]", "semi-axes of an ellipsoid along x, y, z"),
    key("reduced_volume", Number(AboveUpTo(0.0, 1.0)), "0.8", "reduced volume of a prolate or oblate spheroid"),
    key("length", Quantity(m::LENGTH, Positive), "\"20 um\"", "period of a tube along z; length of a capped tube between its caps"),
    key("ring_radius", Quantity(m::LENGTH, Positive), "\"5 um\"", "radius of the centre line of a torus"),
    key("tube_radius", Quantity(m::LENGTH, Positive), "\"2 um\"", "radius of the tube of a torus"),
    key("file", Path, "\"cell.ply\"", "mesh file (PLY, OBJ, STL, VTK, VTU, VTP)"),
    key("unit", LengthUnit, "\"um\"", "unit of length in the mesh file"),
    key("period", Quantity(m::LENGTH, Positive), "\"20 um\"", "period along z, if the mesh of a file is a piece of an endless tube"),
    key("edge_length", Quantity(m::LENGTH, Positive), "\"0.4 um\"", "edge length of the mesh; left out: about 2,600 vertices, or as in the file"),
    key("centre_edge_length", Quantity(m::LENGTH, Positive), "\"0.1 um\"", "edge length at the centre of a disc, growing outwards to edge_length"),
    key("irregular", Flag, "true", "whether to make an irregular mesh (sphere, ellipsoid, prolate, oblate, torus, tube)").or("false"),
    key("bumps", Number(Within(0.0, 0.5)), "0.02", "largest height of smooth random bumps, as a share of the size of the surface").or("0.0"),
    key("bump_waves", Whole(1, 1000), "3", "tube: a single wave instead of random bumps, so many times along the period"),
];

const MEMBRANE: &[Key] = &[
    key("bending_rigidity", Quantity(m::ENERGY, NotNegative), "\"20 kBT\"", "bending rigidity; \"0 J\" for a fluid film"),
    key("gaussian_modulus", Quantity(m::ENERGY, Any), "\"-18 kBT\"", "Gaussian modulus").or("\"0 J\""),
    key("spontaneous_curvature", Quantity(m::CURVATURE, Any), "\"0.1 /um\"", "spontaneous curvature C in bending_rigidity/2 (2H - C)^2").or("\"0 /m\""),
    key("shear_viscosity", Quantity(m::SURFACE_VISCOSITY, Positive), "\"1e-9 N s/m\"", "surface shear viscosity").or("\"1e-9 N s/m\""),
    key("area_compression_modulus", Quantity(m::TENSION, Positive), "\"0.24 N/m\"", "area-compression modulus; left out: softened to what keeps strains small without noise, at most 0.24 N/m"),
];

const LIPIDS: &[Key] = &[
    key("condition", Choice(&["fixed", "reservoir"]), "\"reservoir\"", "whether the amount of lipid is fixed or exchanged with a reservoir").or("\"fixed\""),
    key("tension", Quantity(m::TENSION, Any), "\"0.01 mN/m\"", "tension of the reservoir"),
];

const VOLUME: &[Key] = &[
    key("condition", Choice(&["fixed", "pressure", "osmotic", "free"]), "\"fixed\"", "how the volume is set; left out: fixed, or free for a framed patch"),
    key("target", Quantity(m::VOLUME, Positive), "\"400 um^3\"", "fixed: volume to reach; left out: the volume at the start"),
    key("reduced_volume", Number(AboveUpTo(0.0, 1.0)), "0.8", "fixed: reduced volume to reach, counted with the area at the start"),
    key("ramp", Quantity(m::TIME, Positive), "\"2 s\"", "fixed: time in which the target is reached"),
    key("pressure", Quantity(m::PRESSURE, Any), "\"0.2 Pa\"", "pressure: inside minus outside"),
    key("inside_concentration", Quantity(m::CONCENTRATION, NotNegative), "\"100 mM\"", "osmotic: concentration of what cannot pass the membrane, inside, at the start"),
    key("inside_amount", Quantity(m::AMOUNT, NotNegative), "\"0.05 fmol\"", "osmotic: its amount inside, instead of the concentration"),
    key("outside_concentration", Quantity(m::CONCENTRATION, NotNegative), "\"110 mM\"", "osmotic: concentration outside; pressure = (inside - outside) R T (van 't Hoff)"),
    key("permeability", Quantity(m::PERMEABILITY, Positive), "\"1e-13 m/s/Pa\"", "osmotic: flux of water per pressure; left out: water equilibrates at once"),
];

const COMPOSITION: &[Key] = &[
    key("line_tension", Quantity(m::FORCE, Positive), "\"0.5 pN\"", "line tension of the interface between the phases"),
    key("interface_width", Quantity(m::LENGTH, Positive), "\"0.6 um\"", "half width of the interface: composition follows tanh(x/width)"),
    key("width_per_radius", Number(Within(0.0, 1.0)), "0.3", "where the membrane curves tightly the interface is narrowed to this share of the smallest radius of curvature, the edges with it; 0: as wide everywhere").or("0.0"),
    key("diffusion_constant", Quantity(m::DIFFUSION, Positive), "\"1 um^2/s\"", "diffusion constant within a phase"),
    key("mean", Number(Within(0.0, 1.0)), "0.3", "start: mean composition"),
    key("noise", Number(Within(0.0, 0.5)), "0.02", "start: largest deviation of random noise"),
    key("point_data", Text, "\"composition\"", "start: numbers of that name at the points of the mesh file"),
    key("domains", Sections(DOMAINS), "", "start: round domains of composition 1 in a sea of 0"),
    section("domain", DOMAIN, "material where composition is 1; left out: as in [membrane]"),
];

const DOMAINS: &[Key] = &[
    key("centre", Vector(m::LENGTH), ANY_POINT, "point on the membrane"),
    key("direction", Direction, "[0, 0, 1]", "direction from the middle of the surface, instead of a point"),
    key("radius", Quantity(m::LENGTH, Positive), "\"2 um\"", "radius of the domain"),
    key("area_fraction", Number(AboveUpTo(0.0, 1.0)), "0.2", "share of the surface, instead of a radius"),
];

const DOMAIN: &[Key] = &[
    key("bending_rigidity", Quantity(m::ENERGY, NotNegative), "\"40 kBT\"", "bending rigidity"),
    key("gaussian_modulus", Quantity(m::ENERGY, Any), "\"-36 kBT\"", "Gaussian modulus"),
    key("spontaneous_curvature", Quantity(m::CURVATURE, Any), "\"0.1 /um\"", "spontaneous curvature"),
    key("shear_viscosity", Quantity(m::SURFACE_VISCOSITY, Positive), "\"5e-9 N s/m\"", "surface shear viscosity"),
];

const PROTEIN: &[Key] = &[
    key("attach_rate", Quantity(m::RATE, NotNegative), "\"3 /s\"", "attachments per free site and time"),
    key("on_rate", Quantity(m::ON_RATE, NotNegative), "\"0.1 /uM/s\"", "attachments per free site, time and concentration, instead of attach_rate"),
    key("bulk_concentration", Quantity(m::CONCENTRATION, NotNegative), "\"100 nM\"", "concentration in the bulk, with on_rate"),
    key("detach_rate", Quantity(m::RATE, NotNegative), "\"1 /s\"", "detachments per bound protein and time on a flat membrane"),
    key("site_area", Quantity(m::AREA, Positive), "\"50 nm^2\"", "membrane area per site"),
    key("curvature", Quantity(m::CURVATURE, Any), "\"2 /um\"", "spontaneous curvature of a full coat").or("\"0 /m\""),
    key("stiffening", Quantity(m::ENERGY, Any), "\"10 kBT\"", "change of the bending rigidity by a full coat").or("\"0 J\""),
    key("thickening", Quantity(m::SURFACE_VISCOSITY, Any), "\"1e-9 N s/m\"", "change of the shear viscosity by a full coat").or("\"0 N s/m\""),
    key("interaction", Quantity(m::TENSION, Any), "\"-0.01 kBT/nm^2\"", "x in x/2 coverage^2; negative: bound proteins attract each other").or("\"0 N/m\""),
    key("gradient_energy", Quantity(m::ENERGY, NotNegative), "\"1 kBT\"", "g in g/2 |gradient of coverage|^2").or("\"0 J\""),
    key("phase_preference", Quantity(m::TENSION, Any), "\"0.01 kBT/nm^2\"", "energy per area gained where composition is 1").or("\"0 N/m\""),
    key("diffusion_constant", Quantity(m::DIFFUSION, NotNegative), "\"0.5 um^2/s\"", "lateral diffusion constant").or("\"0 m^2/s\""),
    key("binds", Choice(&["everywhere", "in domains", "outside domains", "on spot"]), "\"everywhere\"", "where binding happens").or("\"everywhere\""),
    section("spot", SPOT, "round piece of membrane that binds, carried along by the lipids"),
    key("start_coverage", Number(Within(0.0, 1.0)), "0.1", "share of occupied sites at the start, where binding happens").or("0.0"),
];

const SPOT: &[Key] = &[
    key("centre", Vector(m::LENGTH), ANY_POINT, "point on the membrane"),
    key("direction", Direction, "[0, 0, 1]", "direction from the middle of the surface, instead of a point"),
    key("radius", Quantity(m::LENGTH, Positive), "\"1 um\"", "radius of the spot"),
    key("rim_width", Quantity(m::LENGTH, Positive), "\"0.1 um\"", "half width of its rim, which follows tanh(distance/width); left out: the mean edge length"),
];

const SURROUNDINGS: &[Key] = &[
    key("friction", Quantity(m::FRICTION, NotNegative), "\"1e3 N s/m^3\"", "friction per area and velocity"),
    key("bulk_viscosity", Quantity(m::BULK_VISCOSITY, Positive), "\"1 mPa s\"", "viscosity of the liquid, with screening_length: friction = viscosity/length"),
    key("screening_length", Quantity(m::LENGTH, Positive), "\"5 um\"", "length over which the flow of the liquid decays"),
];

const FRAME: &[Key] = &[
    key("rim", Choice(&["clamped", "hinged"]), "\"clamped\"", "clamped: position and slope held; hinged: position held").or("\"clamped\""),
];

const LOAD: &[Key] = &[
    key("centre", Vector(m::LENGTH), ANY_POINT, "point on the membrane"),
    key("direction", Direction, "[0, 0, 1]", "direction from the middle of the surface, instead of a point"),
    key("patch_radius", Quantity(m::LENGTH, Positive), "\"0.2 um\"", "radius of the patch that is pulled"),
    key("trap_stiffness", Quantity(m::TENSION, Positive), "\"0.05 pN/nm\"", "stiffness of the trap, with displacements"),
    key("path", Sections(PATH), "", "points in time of the trap's displacement or of the force, linear in between"),
];

const PATH: &[Key] = &[
    key("time", Quantity(m::TIME, NotNegative), "\"0 s\"", "time"),
    key("displacement", Vector(m::LENGTH), "[\"0 um\", \"0 um\", \"3 um\"]", "way of the trap from where the patch started"),
    key("force", Vector(m::FORCE), "[\"0 pN\", \"0 pN\", \"10 pN\"]", "force"),
];

const SELF_CONTACT: &[Key] = &[
    key("response", Choice(&["stop", "repel"]), "\"repel\"", "stop: the run ends; repel: facing parts keep apart by a pressure that decays with their distance").or("\"stop\""),
    key("pressure", Quantity(m::PRESSURE, Positive), "\"1 kPa\"", "repel: pressure P in P exp(-distance/decay_length); between lipid bilayers in water about 0.1 to 1 GPa"),
    key("decay_length", Quantity(m::LENGTH, Positive), "\"10 nm\"", "repel: length over which the pressure decays; between lipid bilayers in water 0.1 to 0.3 nm, on a mesh not less than the sag of its triangles"),
];

const FISSION: &[Key] = &[
    key("neck_radius", Quantity(m::LENGTH, Positive), "\"20 nm\"", "necks of at most this radius are severed; left out: 5 nm or two mesh.shortest_edge, whichever is more"),
];

const TIME: &[Key] = &[
    key("end", Quantity(m::TIME, Positive), "\"10 s\"", "simulated time"),
    key("tolerance", Number(AboveUpTo(0.0, 0.5)), "0.03", "largest share by which the energy drop of a step may differ from what it dissipates").or("0.03"),
    key("first_step", Quantity(m::TIME, Positive), "\"1 ms\"", "first step; left out: 1e-4 viscous times, at most a hundredth of the run"),
    key("longest_step", Quantity(m::TIME, Positive), "\"0.5 s\"", "longest step; left out: the whole run"),
    key("shortest_step", Quantity(m::TIME, Positive), "\"1 ns\"", "step below which the run gives up; left out: 1e-8 first steps"),
    key("vertex_travel", Number(AboveUpTo(0.0, 0.5)), "0.2", "largest way of a vertex per step, in edge lengths").or("0.2"),
];

const MESH: &[Key] = &[
    key("adapt", Flag, "true", "whether edges are split and collapsed where the shape asks for it").or("true"),
    key("shortest_edge", Quantity(m::LENGTH, Positive), "\"0.05 um\"", "shortest edge asked for; left out: an eighth of surface.edge_length"),
    key("edges_per_radius", Number(AboveUpTo(0.0, 100.0)), "3.0", "edges per radius of curvature").or("3.0"),
    key("edges_per_interface", Number(AboveUpTo(0.0, 100.0)), "4.0", "edges across the full width of an interface between phases").or("4.0"),
    key("most_vertices", Whole(12, 2_000_000), "20000", "largest number of vertices; left out: 20,000, or twice those of a larger start mesh"),
];

const OUTPUT: &[Key] = &[
    key("row_every", Quantity(m::TIME, Positive), "\"0.1 s\"", "simulated time between rows of the series; left out: every step"),
    key("frame_every", Quantity(m::TIME, Positive), "\"1 s\"", "simulated time between frames"),
    key("frame_change", Number(AboveUpTo(0.0, 1.0)), "0.05", "a frame whenever energy or shape changed by this share; 0.05 if frame_every is left out"),
    key("checkpoint_every", Quantity(m::TIME, Positive), "\"60 s\"", "wall time between checkpoints").or("\"60 s\""),
];

const STOP: &[Key] = &[
    key("neck_radius", Quantity(m::LENGTH, Positive), "\"0.2 um\"", "end when the narrowest neck is below; left out, without [fission]: 5 nm or two mesh.shortest_edge, whichever is more"),
    key("domain_count", Whole(1, 1_000_000), "1", "end when so few domains are left, once there were more"),
    key("at_rest", Number(AboveUpTo(0.0, 1.0)), "1e-3", "end when 100 x the energy that as long a time again would release / all energy released so far stays below").or("1e-3"),
];

/// The key at a dotted path; items of lists are left out (`load.path.time`).
pub fn find(path: &str) -> Option<&'static Key> {
    find_in(ROOT, path)
}

/// As [`find`], in another list of keys.
pub fn find_in(root: &'static [Key], path: &str) -> Option<&'static Key> {
    let mut keys = root;
    let mut found = None;
    for part in path.split('.') {
        let key = keys.iter().find(|key| key.name == part)?;
        found = Some(key);
        keys = match key.kind {
            Kind::Section(keys) | Kind::Sections(keys) => keys,
            _ => &[],
        };
    }
    found
}
