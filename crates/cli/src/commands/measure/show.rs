//! Measures as text, JSON and CSV.

use super::quantities::Measures;
use crate::run::words::with_unit;
use serde_json::{Map, Value, json};

/// How lengths are shown.
#[derive(Clone, Copy, Debug)]
pub struct Lengths {
    /// Whether lengths are in metres; else in the file's unit.
    pub metres: bool,
}

impl Lengths {
    /// A value of length^power.
    fn show(self, value: f64, power: i32) -> String {
        match (self.metres, power) {
            (false, _) => number(value),
            (true, 1) => with_unit(value, "m"),
            (true, -1) => format!("{} /um", number(value * 1e-6)),
            (true, 2) => format!("{} um^2", number(value * 1e12)),
            (true, 3) => format!("{} um^3", number(value * 1e18)),
            (true, _) => number(value),
        }
    }

    /// Name of the unit, for programs.
    fn name(self) -> &'static str {
        if self.metres { "m" } else { "unit of the file" }
    }
}

/// Six digits.
fn number(value: f64) -> String {
    match value.abs() {
        size if size == 0.0 || (1e-3..1e6).contains(&size) => {
            let whole = if size >= 1.0 { size.log10().floor() as usize } else { 0 };
            format!("{value:.*}", 5usize.saturating_sub(whole))
        }
        _ => format!("{value:.5e}"),
    }
}

/// Measures for people.
pub fn text(file: &str, found: &Measures, lengths: Lengths) -> String {
    let mut lines = vec![file.to_owned()];
    let mut line = |name: &str, value: String| lines.push(format!("  {name:<24}{value}"));
    line("vertices, triangles", format!("{}, {}", found.vertices, found.triangles));
    line("pieces, handles, rims", format!("{}, {}, {}", found.pieces, found.genus, found.rims));
    line("area", lengths.show(found.area, 2));
    if let Some(volume) = found.volume {
        line("volume", lengths.show(volume, 3));
    }
    if let Some(reduced) = found.reduced_volume {
        line("reduced volume", format!("{reduced:.5}"));
    }
    line("bending energy / kappa", format!("{} (a sphere: {:.4})", number(found.bending), 8.0 * std::f64::consts::PI));
    line("integral of H", lengths.show(found.integrated_mean_curvature, 1));
    line("integral of K", number(found.integrated_gaussian_curvature));
    if let Some(h) = found.mean_curvature {
        let show = |value: f64| lengths.show(value, -1);
        line("mean curvature H", format!("mean {}, from {} to {}", show(h.mean), show(h.min), show(h.max)));
        line(
            "  quartiles",
            format!("{}, {}, {}", show(h.lower_quartile), show(h.median), show(h.upper_quartile)),
        );
    }
    let necks: Vec<String> = found.necks.iter().map(|radius| lengths.show(*radius, 1)).collect();
    line("necks", if necks.is_empty() { "none".to_owned() } else { format!("radius {}", necks.join(", ")) });
    line("self-intersections", found.intersections.to_string());
    let shape = &found.shape;
    line(
        "edges",
        format!(
            "{} on average, {} to {}",
            lengths.show(shape.mean_edge, 1),
            lengths.show(shape.shortest_edge, 1),
            lengths.show(shape.longest_edge, 1)
        ),
    );
    line(
        "triangles",
        format!(
            "quality {:.3} on average, at least {:.3}; angles {:.1} to {:.1} degrees",
            shape.mean_quality,
            shape.least_quality,
            shape.smallest_angle.to_degrees(),
            shape.largest_angle.to_degrees()
        ),
    );
    if let Some(phases) = &found.phases {
        line(
            "phases",
            format!(
                "mean {:.4}, {} domains, boundary {} (array \"{}\")",
                phases.mean,
                phases.domains,
                lengths.show(phases.interface_length, 1),
                phases.array
            ),
        );
    }
    match &found.spectrum {
        Ok(spectrum) => {
            line("mean radius", lengths.show(spectrum.radius, 1));
            let powers: Vec<String> =
                spectrum.power.iter().enumerate().map(|(k, power)| format!("{}: {power:.3e}", k + 2)).collect();
            line("mean square a_lm, l", powers.join("  "));
        }
        Err(why) => line("spherical harmonics", format!("none: {why}")),
    }
    lines.join("\n")
}

/// Measures for programs.
pub fn json(file: &str, found: &Measures, lengths: Lengths) -> Value {
    let spread = found.mean_curvature.map(|h| {
        json!({
            "mean": h.mean, "min": h.min, "lower_quartile": h.lower_quartile, "median": h.median,
            "upper_quartile": h.upper_quartile, "max": h.max,
        })
    });
    let shape = &found.shape;
    let spectrum = found.spectrum.as_ref().ok().map(|spectrum| {
        let powers: Map<String, Value> =
            spectrum.power.iter().enumerate().map(|(k, power)| ((k + 2).to_string(), json!(power))).collect();
        json!({ "mean_radius": spectrum.radius, "mean_square_amplitude": powers })
    });
    json!({
        "file": file,
        "length_unit": lengths.name(),
        "vertices": found.vertices,
        "triangles": found.triangles,
        "pieces": found.pieces,
        "genus": found.genus,
        "rims": found.rims,
        "area": found.area,
        "volume": found.volume,
        "reduced_volume": found.reduced_volume,
        "bending_energy_over_kappa": found.bending,
        "integrated_mean_curvature": found.integrated_mean_curvature,
        "integrated_gaussian_curvature": found.integrated_gaussian_curvature,
        "mean_curvature": spread,
        "neck_radii": found.necks,
        "self_intersections": found.intersections,
        "first_self_intersection": found.first_intersection,
        "mesh": {
            "shortest_edge": shape.shortest_edge, "mean_edge": shape.mean_edge, "longest_edge": shape.longest_edge,
            "least_quality": shape.least_quality, "mean_quality": shape.mean_quality,
            "smallest_angle_degrees": shape.smallest_angle.to_degrees(),
            "largest_angle_degrees": shape.largest_angle.to_degrees(),
        },
        "phases": found.phases.as_ref().map(|phases| json!({
            "array": phases.array, "mean": phases.mean, "domains": phases.domains,
            "interface_length": phases.interface_length,
        })),
        "spherical_harmonics": spectrum,
        "no_spherical_harmonics_because": found.spectrum.as_ref().err(),
        "doubts": found.doubts,
    })
}

/// A table for spreadsheets: names of nested values are joined by underscores; lists become their first value.
pub fn csv(all: &[Value]) -> Result<String, csv::Error> {
    let rows: Vec<Vec<(String, String)>> = all
        .iter()
        .map(|value| {
            let mut row = Vec::new();
            flatten("", value, &mut row);
            row
        })
        .collect();
    let mut names: Vec<&String> = Vec::new();
    for (name, _) in rows.iter().flatten() {
        if !names.contains(&name) {
            names.push(name);
        }
    }
    let mut writer = csv::Writer::from_writer(Vec::new());
    writer.write_record(&names)?;
    for row in &rows {
        writer.write_record(names.iter().map(|name| {
            row.iter().find(|(other, _)| other == *name).map_or("", |(_, value)| value.as_str())
        }))?;
    }
    let bytes = writer.into_inner().map_err(|error| error.into_error())?;
    Ok(String::from_utf8_lossy(&bytes).trim_end().to_owned())
}

fn flatten(name: &str, value: &Value, row: &mut Vec<(String, String)>) {
    match value {
        Value::Object(inner) => {
            for (key, value) in inner {
                let joined = if name.is_empty() { key.clone() } else { format!("{name}_{key}") };
                flatten(&joined, value, row);
            }
        }
        Value::Array(list) if name == "doubts" => {
            let doubts: Vec<&str> = list.iter().filter_map(Value::as_str).collect();
            row.push((name.to_owned(), doubts.join("; ")));
        }
        Value::Array(list) => flatten(name, list.first().unwrap_or(&Value::Null), row),
        Value::Null => row.push((name.to_owned(), String::new())),
        Value::String(text) => row.push((name.to_owned(), text.clone())),
        other => row.push((name.to_owned(), other.to_string())),
    }
}
