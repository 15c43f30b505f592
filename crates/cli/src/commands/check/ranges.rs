//! Whether material constants are those of lipid bilayers.

use super::numbers::Case;
use crate::run::words::with_unit;
use pellicle_physics::parameters::AreaCondition;

/// Sources as remembered, not looked up again.
const RIGIDITY_SOURCE: &str = "Dimova, Adv. Colloid Interface Sci. 208 (2014) 225; from memory";
const COMPRESSION_SOURCE: &str = "Rawicz et al., Biophys. J. 79 (2000) 328; from memory";
const COMMON: &str = "common range of reports, no single source";

/// Warnings, and remarks that need no action.
#[derive(Debug, Default)]
pub struct Findings {
    /// Values out of the published range.
    pub warnings: Vec<String>,
    /// Values out of it on purpose.
    pub notes: Vec<String>,
}

/// A value and the range it should lie in, in one unit.
struct Range {
    name: &'static str,
    low: f64,
    high: f64,
    source: &'static str,
}

impl Range {
    fn warn(&self, value: f64, show: &dyn Fn(f64) -> String, findings: &mut Findings) {
        // A hair of slack: values have been through other units.
        if value < self.low * (1.0 - 1e-9) || value > self.high * (1.0 + 1e-9) {
            let side = if value < self.low { "below" } else { "above" };
            findings.warnings.push(format!(
                "{} = {} is {side} what is published for lipid bilayers, {} to {} ({})",
                self.name,
                show(value),
                show(self.low),
                show(self.high),
                self.source
            ));
        }
    }
}

/// Compare the constants of a case with published ranges.
pub fn compare(case: &Case<'_>) -> Findings {
    let (parameters, scales) = (&case.setup.parameters, &case.setup.scales);
    let mut findings = Findings::default();
    let both = |at_zero: f64, at_one: f64| {
        let mut values = vec![at_zero];
        if parameters.phases.is_some() && at_one != at_zero {
            values.push(at_one);
        }
        values
    };
    let thermal = |value: f64| format!("{value} kBT", value = (1e3 * value).round() / 1e3);
    let rigidity = Range { name: "bending rigidity", low: 10.0, high: 40.0, source: RIGIDITY_SOURCE };
    for value in both(parameters.bending_rigidity.at_zero, parameters.bending_rigidity.at_one) {
        if value == 0.0 {
            findings.notes.push("without bending rigidity this is a fluid film, no lipid bilayer".into());
            continue;
        }
        rigidity.warn(value * scales.energy / scales.thermal_energy, &thermal, &mut findings);
    }
    let surface = scales.energy * scales.time / (scales.length * scales.length);
    let viscosity = Range { name: "membrane shear viscosity", low: 1e-10, high: 1e-7, source: COMMON };
    for value in both(parameters.shear_viscosity.at_zero, parameters.shear_viscosity.at_one) {
        viscosity.warn(value * surface, &|x| format!("{x:.1e} N s/m"), &mut findings);
    }
    let tension = scales.energy / (scales.length * scales.length);
    let per_length = |value: f64| with_unit(value, "N/m");
    let compression = parameters.area_compression_modulus * tension;
    let range = Range { name: "area compression modulus", low: 0.2, high: 0.3, source: COMPRESSION_SOURCE };
    if compression < range.low {
        // Softer is the program's own choice, and no fault as long as strains stay small.
        findings.notes.push(format!(
            "area compression modulus {} is softer than lipids, {} to {} ({COMPRESSION_SOURCE}); this is of no \
             consequence while tensions stay far below it",
            per_length(compression),
            per_length(range.low),
            per_length(range.high)
        ));
    } else {
        range.warn(compression, &per_length, &mut findings);
    }
    if let AreaCondition::Reservoir(value) = parameters.area
        && value * tension > 5e-3
    {
        findings.warnings.push(format!(
            "the tension {} would tear most lipid bilayers (they rupture at some 5 to 10 mN/m: {COMMON})",
            per_length(value * tension)
        ));
    }
    if let Some(phases) = &parameters.phases {
        let force = scales.energy / scales.length;
        let range = Range { name: "line tension", low: 1e-13, high: 1e-11, source: COMMON };
        range.warn(phases.line_tension * force, &|x| with_unit(x, "N"), &mut findings);
    }
    findings
}
