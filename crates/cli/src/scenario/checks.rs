//! What keys ask of each other: what is missing, what contradicts, what has no meaning.

use super::keys;
use super::problem::{Place, Problem};
use super::values::Values;

/// Whether the surface is a patch with a rim.
pub fn is_framed(values: &Values) -> bool {
    values.text("surface.shape") == "disc" || values.has_section("frame")
}

struct Check<'a> {
    values: &'a Values,
    problems: Vec<Problem>,
}

/// All contradictions between the keys of a scenario.
pub fn cross(values: &Values) -> Vec<Problem> {
    let mut check = Check {
        values,
        problems: Vec::new(),
    };
    check.surface();
    check.membrane();
    check.volume();
    check.composition();
    check.protein();
    check.surroundings();
    for (index, load) in values.list("load").iter().enumerate() {
        check.load(load, index);
    }
    check.contact_and_fission();
    check.time();
    check.problems
}

impl Check<'_> {
    fn add(&mut self, place: Option<Place>, message: String, label: &str, mend: String) {
        self.problems
            .push(Problem::new(place, message, label, mend));
    }

    /// A key that must be there, in the whole scenario.
    fn require(&mut self, path: &str, reason: &str) {
        if !self.values.given(path) {
            self.missing(self.values, path, path, reason);
        }
    }

    /// A key that must be there, in an item of a list.
    fn require_in(&mut self, item: &Values, path: &str, shown: &str, reason: &str) {
        if !item.given(path) {
            self.missing(item, path, &format!("{shown}.{path}"), reason);
        }
    }

    fn missing(&mut self, values: &Values, path: &str, shown: &str, reason: &str) {
        let parent = path.rsplit_once('.').map(|(parent, _)| parent);
        let section = parent.and_then(|parent| values.sections.get(parent).cloned());
        let place = section
            .clone()
            .or_else(|| values.place.clone())
            .or(Some(Place::default()));
        let (name, about, example) = keys::find(&values.full(path))
            .map_or((path, "", ""), |key| (key.name, key.about, key.example));
        let example = match example {
            "" => format!("[[{shown}]]"),
            example => format!("{name} = {example}"),
        };
        let within = match (parent, &section) {
            (Some(parent), None) => format!(" in a section [{parent}]"),
            _ => String::new(),
        };
        self.add(
            place,
            format!("{shown} is missing{reason}"),
            "missing here",
            format!("{about}; write for example {example}{within}"),
        );
    }

    /// A key that has no meaning here.
    fn idle(&mut self, path: &str, reason: &str) {
        if self.values.given(path) {
            let mend = "remove it, or change what makes it meaningless".to_string();
            self.add(
                self.values.place(path),
                format!("{path} has no meaning {reason}"),
                "no meaning here",
                mend,
            );
        }
    }

    /// Two keys of which only one may be there.
    fn exclude(&mut self, values: &Values, first: &str, second: &str, prefix: &str) {
        if values.given(first) && values.given(second) {
            self.add(
                values.place(second).or_else(|| values.place(first)),
                format!("{prefix}{first} and {prefix}{second} exclude each other"),
                "one too many",
                format!("remove {prefix}{first} or {prefix}{second}"),
            );
        }
    }

    fn contact_and_fission(&mut self) {
        for path in ["self_contact.pressure", "self_contact.decay_length"] {
            if self.values.text("self_contact.response") == "repel" {
                self.require(path, ": the repulsion needs it");
            } else {
                self.idle(path, "unless self_contact.response = \"repel\"");
            }
        }
        if self.values.has_section("fission") && self.values.given("stop.neck_radius") {
            self.add(
                self.values.place("stop.neck_radius"),
                "stop.neck_radius ends the run at a thin neck, [fission] severs it and goes on".into(),
                "one too many",
                "remove stop.neck_radius or the section [fission]".into(),
            );
        }
    }

    fn surface(&mut self) {
        let values = self.values;
        if !values.has_section("surface") && !values.given("surface.shape") {
            self.missing(values, "surface.shape", "surface.shape", "");
            return;
        }
        self.require("surface.shape", "");
        let shape = values.text("surface.shape");
        let needed: &[&str] = match shape {
            "sphere" | "disc" => &["radius"],
            "ellipsoid" => &["semi_axes"],
            "prolate" | "oblate" => &["radius", "reduced_volume"],
            "torus" => &["ring_radius", "tube_radius"],
            "tube" | "capped tube" => &["radius", "length"],
            "file" => &["file", "unit"],
            _ => return,
        };
        let allowed: &[&str] = match shape {
            "tube" => &["bump_waves"],
            "disc" => &["centre_edge_length"],
            "file" => &["period"],
            _ => &[],
        };
        for name in needed {
            let reason = match (shape, *name) {
                ("tube", "length") => ": a tube needs its period along the axis".to_string(),
                _ => format!(": the shape \"{shape}\" needs it"),
            };
            self.require(&format!("surface.{name}"), &reason);
        }
        let special = [
            "radius",
            "semi_axes",
            "reduced_volume",
            "length",
            "ring_radius",
            "tube_radius",
            "file",
            "unit",
            "period",
            "centre_edge_length",
            "bump_waves",
        ];
        for name in special {
            if !needed.contains(&name) && !allowed.contains(&name) {
                self.idle(
                    &format!("surface.{name}"),
                    &format!("for the shape \"{shape}\""),
                );
            }
        }
        if values.flag("surface.irregular") && matches!(shape, "capped tube" | "disc" | "file") {
            self.idle("surface.irregular", &format!("for the shape \"{shape}\""));
        }
        if values.has_section("frame") && !matches!(shape, "disc" | "file") {
            self.add(
                values.sections.get("frame").cloned(),
                format!("[frame] has no meaning for the shape \"{shape}\", which has no rim"),
                "no rim to hold",
                "remove [frame], or choose shape = \"disc\"".into(),
            );
        }
        if let (Some(ring), Some(tube)) = (
            values.number("surface.ring_radius"),
            values.number("surface.tube_radius"),
        ) && tube >= ring
        {
            self.add(
                values.place("surface.tube_radius"),
                "surface.tube_radius must be below surface.ring_radius".into(),
                "too wide for the ring",
                "a ring torus has a hole; make the tube thinner or the ring wider".into(),
            );
        }
    }

    fn membrane(&mut self) {
        self.require("membrane.bending_rigidity", "");
        match self.values.text("lipids.condition") {
            "reservoir" => self.require("lipids.tension", ": the reservoir needs it"),
            _ => self.idle(
                "lipids.tension",
                "while the amount of lipid is fixed: tension is a result then (condition = \"reservoir\" sets it)",
            ),
        }
    }

    fn volume(&mut self) {
        let values = self.values;
        let condition = values.text("volume.condition");
        let framed = is_framed(values);
        if framed && matches!(condition, "fixed" | "osmotic") {
            self.add(
                values.place("volume.condition"),
                format!("volume.condition = \"{condition}\" needs a closed surface, but this one has a rim"),
                "no enclosed volume",
                "choose \"free\" or \"pressure\" for a framed patch".into(),
            );
        }
        let condition = match condition {
            "" if framed => "free",
            "" => "fixed",
            given => given,
        };
        let own: &[&str] = match condition {
            "fixed" => &["target", "reduced_volume", "ramp"],
            "pressure" => &["pressure"],
            "osmotic" => &[
                "inside_concentration",
                "inside_amount",
                "outside_concentration",
                "permeability",
            ],
            _ => &[],
        };
        let all = [
            "target",
            "reduced_volume",
            "ramp",
            "pressure",
            "inside_concentration",
            "inside_amount",
            "outside_concentration",
            "permeability",
        ];
        for name in all.iter().filter(|name| !own.contains(name)) {
            self.idle(
                &format!("volume.{name}"),
                &format!("with volume.condition = \"{condition}\""),
            );
        }
        match condition {
            "fixed" => {
                self.exclude(values, "volume.target", "volume.reduced_volume", "");
                let target = values.given("volume.target") || values.given("volume.reduced_volume");
                if target {
                    self.require("volume.ramp", ": the volume takes time to change");
                } else {
                    self.idle(
                        "volume.ramp",
                        "without volume.target or volume.reduced_volume",
                    );
                }
            }
            "pressure" => self.require("volume.pressure", ""),
            "osmotic" => {
                self.exclude(
                    values,
                    "volume.inside_concentration",
                    "volume.inside_amount",
                    "",
                );
                if !values.given("volume.inside_amount") {
                    self.require("volume.inside_concentration", " (or volume.inside_amount)");
                }
                self.require("volume.outside_concentration", "");
            }
            _ => {}
        }
    }

    fn composition(&mut self) {
        let values = self.values;
        if !values.has_section("composition") {
            return;
        }
        for name in ["line_tension", "interface_width", "diffusion_constant"] {
            self.require(&format!("composition.{name}"), "");
        }
        self.exclude(values, "composition.mean", "composition.domains", "");
        self.exclude(values, "composition.mean", "composition.point_data", "");
        self.exclude(values, "composition.domains", "composition.point_data", "");
        if values.given("composition.domains") || values.given("composition.point_data") {
            self.idle("composition.noise", "without composition.mean");
        } else if let (Some(mean), Some(noise)) = (
            values.number("composition.mean"),
            values.number("composition.noise"),
        ) && (mean - noise < 0.0 || mean + noise > 1.0)
        {
            self.add(
                values.place("composition.noise"),
                format!(
                    "composition.noise = {noise} around the mean {mean} leaves the bounds 0 and 1"
                ),
                "too large",
                format!("use a noise of at most {}", mean.min(1.0 - mean)),
            );
        }
        if values.given("composition.point_data") && values.text("surface.shape") != "file" {
            self.idle("composition.point_data", "without a mesh file");
        }
        for (index, domain) in values.list("composition.domains").iter().enumerate() {
            let shown = format!("composition.domains[{index}]");
            self.place_of(domain, &shown);
            self.exclude(domain, "radius", "area_fraction", &format!("{shown}."));
            if !domain.given("area_fraction") {
                self.require_in(domain, "radius", &shown, " (or area_fraction)");
            }
        }
    }

    /// Centre or direction: one of them.
    fn place_of(&mut self, item: &Values, shown: &str) {
        self.exclude(item, "centre", "direction", &format!("{shown}."));
        if !item.given("direction") {
            self.require_in(item, "centre", shown, " (or direction)");
        } else if is_framed(self.values) {
            self.add(
                item.place("direction"),
                format!("{shown}.direction has no meaning on a framed patch"),
                "no meaning here",
                "give the point as centre = [\"0 um\", \"0 um\", \"0 um\"]".into(),
            );
        }
    }

    fn protein(&mut self) {
        let values = self.values;
        if !values.has_section("protein") {
            return;
        }
        self.require("protein.site_area", "");
        self.require("protein.detach_rate", "");
        self.exclude(values, "protein.attach_rate", "protein.on_rate", "");
        if values.given("protein.on_rate") {
            self.require("protein.bulk_concentration", ": on_rate needs it");
        } else {
            self.idle("protein.bulk_concentration", "without protein.on_rate");
            self.require(
                "protein.attach_rate",
                " (or on_rate with bulk_concentration)",
            );
        }
        let binds = values.text("protein.binds");
        let composition = values.has_section("composition");
        if !composition && matches!(binds, "in domains" | "outside domains") {
            self.add(
                values.place("protein.binds"),
                format!("protein.binds = \"{binds}\" needs phases, but there is no [composition]"),
                "no domains",
                "add a section [composition], or let protein bind \"everywhere\"".into(),
            );
        }
        if !composition
            && values
                .number("protein.phase_preference")
                .is_some_and(|w| w != 0.0)
        {
            self.idle("protein.phase_preference", "without [composition]");
        }
        let spot = values.has_section("protein.spot");
        if binds == "on spot" {
            let (centre, direction) = ("protein.spot.centre", "protein.spot.direction");
            self.exclude(values, centre, direction, "");
            if !values.given(direction) {
                self.require(centre, " (or protein.spot.direction)");
            } else if is_framed(values) {
                self.idle(direction, "on a framed patch: give protein.spot.centre");
            }
            self.require("protein.spot.radius", "");
        } else if spot {
            self.add(
                values.sections.get("protein.spot").cloned(),
                "[protein.spot] has no meaning unless binds = \"on spot\"".into(),
                "no meaning here",
                "write binds = \"on spot\" in [protein], or remove [protein.spot]".into(),
            );
        }
    }

    fn surroundings(&mut self) {
        let values = self.values;
        let (friction, viscosity, length) = (
            "surroundings.friction",
            "surroundings.bulk_viscosity",
            "surroundings.screening_length",
        );
        self.exclude(values, friction, viscosity, "");
        self.exclude(values, friction, length, "");
        if values.given(viscosity) {
            self.require(length, ": it goes with bulk_viscosity");
        }
        if values.given(length) {
            self.require(viscosity, ": it goes with screening_length");
        }
    }

    fn load(&mut self, load: &Values, index: usize) {
        let shown = format!("load[{index}]");
        self.place_of(load, &shown);
        self.require_in(load, "patch_radius", &shown, "");
        self.require_in(load, "path", &shown, "");
        let trap = load.given("trap_stiffness");
        let mut last: Option<f64> = None;
        for (step, point) in load.list("path").iter().enumerate() {
            let shown = format!("{shown}.path[{step}]");
            self.require_in(point, "time", &shown, "");
            let (wanted, other, mend) = if trap {
                (
                    "displacement",
                    "force",
                    "a trap follows displacements; remove trap_stiffness to give forces",
                )
            } else {
                (
                    "force",
                    "displacement",
                    "displacements need a trap: add trap_stiffness",
                )
            };
            if point.given(other) {
                self.add(
                    point.place(other),
                    format!(
                        "{shown}.{other} has no meaning {} trap_stiffness",
                        if trap { "with" } else { "without" }
                    ),
                    "no meaning here",
                    mend.into(),
                );
            } else {
                self.require_in(point, wanted, &shown, "");
            }
            if let Some(time) = point.number("time") {
                if last.is_some_and(|last| time <= last) {
                    self.add(
                        point.place("time"),
                        format!("{shown}.time does not come after the time before it"),
                        "too early",
                        "put the points of a path in the order of their times, each later than the last".into(),
                    );
                }
                last = Some(time);
            }
        }
        if load.list("path").is_empty() && load.entry("path").is_some() {
            self.add(
                load.place("path"),
                format!("{shown}.path is empty"),
                "empty",
                "add at least one [[load.path]] with time and force or displacement".into(),
            );
        }
    }

    fn time(&mut self) {
        let values = self.values;
        self.require("time.end", "");
        let ordered = [
            ("time.shortest_step", "time.first_step"),
            ("time.first_step", "time.longest_step"),
            ("time.shortest_step", "time.longest_step"),
        ];
        for (short, long) in ordered {
            if let (Some(a), Some(b)) = (values.number(short), values.number(long))
                && a > b
            {
                self.add(
                    values.place(short).or_else(|| values.place(long)),
                    format!("{short} is longer than {long}"),
                    "too long",
                    "steps must grow from shortest_step over first_step to longest_step".into(),
                );
            }
        }
    }
}
