//! `pellicle check --json`: dimensionless numbers, resolution and warnings against the scenario's own values.
//!
//! # Source
//! Definitions, worked out from the values of the scenario; limits: rounding.

mod common;

use common::{Fallible, Place, assert_code, pellicle};
use serde_json::Value;

const SCENARIO: &str = r#"
[surface]
shape = "sphere"
radius = "2 um"
edge_length = "0.25 um"
[membrane]
bending_rigidity = "20 kBT"
shear_viscosity = "1e-9 N s/m"
[lipids]
condition = "reservoir"
tension = "2e-3 mN/m"
[composition]
line_tension = "0.2 pN"
interface_width = "0.4 um"
diffusion_constant = "1 um^2/s"
[protein]
attach_rate = "3 /s"
detach_rate = "1 /s"
site_area = "50 nm^2"
curvature = "0.01 /nm"
diffusion_constant = "0.5 um^2/s"
[surroundings]
bulk_viscosity = "1 mPa s"
screening_length = "5 um"
[time]
end = "20 ms"
"#;

/// kBT at 298 K.
const THERMAL: f64 = 1.380649e-23 * 298.0;

fn check(more: &[&str]) -> Result<Value, Box<dyn std::error::Error>> {
    let place = Place::new(SCENARIO)?;
    let output = pellicle().arg("check").arg(&place.scenario).arg("--json").args(more).output()?;
    assert_code(&output, 0);
    assert!(output.stderr.is_empty(), "warnings belong into the object");
    Ok(serde_json::from_slice(&output.stdout)?)
}

fn warned(report: &Value, words: &str) -> bool {
    let list = report["warnings"].as_array();
    list.is_some_and(|list| list.iter().any(|text| text.as_str().is_some_and(|text| text.contains(words))))
}

#[test]
fn numbers_follow_from_the_scenario() -> Fallible {
    let report = check(&[])?;
    let size = report["size_m"].as_f64().ok_or("a size")?;
    assert!((size / 2e-6 - 1.0).abs() < 0.01, "{size}");
    let kappa = 20.0 * THERMAL;
    // A coat of curvature c on a bare membrane of none; friction is viscosity over screening length.
    let friction = 1e-3 / 5e-6;
    for (name, exact) in [
        ("foppl_von_karman", 2e-6 * size * size / kappa),
        ("duration", 20e-3 * kappa / (1e-9 * size * size)),
        ("line_tension", 2e-13 * size / kappa),
        ("cahn", 0.4e-6 / size),
        ("diffusion", 1e-12 * 1e-9 / kappa),
        ("peclet", (2e-13f64).max(kappa / size) * size / (1e-9 * 1e-12)),
        ("protein_diffusion", 0.5e-12 * 1e-9 / kappa),
        ("damkoehler", 4.0 * size * size / 0.5e-12),
        ("coat", 1e7 * size),
        ("saffman_delbruck", size / (1e-9 / 2e-3)),
        ("friction", size / (1e-9f64 / friction).sqrt()),
    ] {
        let numbers = report["numbers"].as_array().ok_or("numbers")?;
        let found = numbers.iter().find(|number| number["name"] == name).ok_or(name)?;
        let value = found["value"].as_f64().ok_or(name)?;
        assert!((value / exact - 1.0).abs() < 1e-6, "{name}: {value} for {exact}");
        assert!(found["verdict"].as_str().is_some_and(|verdict| !verdict.is_empty()), "{name}");
    }
    let needs = report["resolution"].as_array().ok_or("resolution")?;
    let interface = needs.iter().find(|need| need["name"] == "interface").ok_or("an interface")?;
    let edge = report["edge_length_m"].as_f64().ok_or("an edge")?;
    let edges = interface["edges_at_start"].as_f64().ok_or("edges")?;
    // Mean over vertices against mean over edges.
    assert!((edges / (0.8e-6 / edge) - 1.0).abs() < 0.02, "{edges}");
    let cost = &report["cost"][0];
    assert_eq!(cost["vertices"], report["vertices"]);
    assert!(cost["memory_bytes"].as_f64() > Some(0.0) && cost["seconds_per_step"].as_f64() > Some(0.0));
    assert!(!warned(&report, "published"), "{:?}", report["warnings"]);
    Ok(())
}

#[test]
fn values_that_no_bilayer_has_are_named() -> Fallible {
    for (change, words) in [
        ("membrane.bending_rigidity=\"100 kBT\"", "bending rigidity = 100 kBT is above"),
        ("membrane.shear_viscosity=\"1e-6 N s/m\"", "shear viscosity = 1.0e-6 N s/m is above"),
        ("membrane.area_compression_modulus=\"1 N/m\"", "area compression modulus = 1 N/m is above"),
        ("composition.line_tension=\"0.05 pN\"", "line tension = 50 fN is below"),
    ] {
        let report = check(&["--set", change])?;
        assert!(warned(&report, words), "{change}: {:?}", report["warnings"]);
    }
    Ok(())
}
