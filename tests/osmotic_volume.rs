//! Volume of a flaccid vesicle in a bath of osmolytes: where it settles, and how fast water passes the membrane.
//!
//! With N osmolytes inside and concentration c outside, a membrane too soft to bear a pressure of RT c ends at
//! V∞ = N/c (Boyle and van 't Hoff). Through a membrane of area A and permeability L, dV/dt = −L A RT c (1 − V∞/V), so
//! V/V∞ + ln(V/V∞ − 1) falls linearly in time, by L A RT c/V∞ per time.
//!
//! # Source
//! van 't Hoff, Z. phys. Chem. 1 (1887) 481; flux law: Kedem & Katchalsky, Biochim. Biophys. Acta 27 (1958) 229 (from
//! memory). R = 8.314462618 J/(mol K) (CODATA 2018).

mod common;
mod evidence;

use common::{Place, summary};
use evidence::Fallible;
use evidence::record::Record;
use std::path::Path;

const SOURCE: &str = "van 't Hoff, Z. phys. Chem. 1 (1887) 481; Kedem & Katchalsky, Biochim. Biophys. Acta 27 (1958) 229";
const THERMAL: f64 = 8.314462618 * 298.15;
/// Concentrations [mol/m³] and permeability [m/s/Pa], as in the scenario.
const INSIDE: f64 = 100.0;
const OUTSIDE: f64 = 102.0;
const PERMEABILITY: f64 = 1e-8;

fn scenario(end: &str, tolerance: f64) -> String {
    format!(
        r#"
title = "Prolate in a bath"
temperature = "298.15 K"
[surface]
shape = "ellipsoid"
semi_axes = ["1 um", "1 um", "1.6 um"]
edge_length = "0.3 um"
[membrane]
bending_rigidity = "20 kBT"
shear_viscosity = "1e-9 N s/m"
[volume]
condition = "osmotic"
inside_concentration = "100 mM"
outside_concentration = "102 mM"
permeability = "1e-8 m/s/Pa"
[time]
end = "{end}"
tolerance = {tolerance}
[output]
row_every = "0.1 ms"
"#
    )
}

/// A value of a column of `series.csv` by its row.
fn column(folder: &Path, name: &str, row: usize) -> Result<f64, Box<dyn std::error::Error>> {
    let text = std::fs::read_to_string(folder.join("series.csv"))?;
    let mut lines = text.lines();
    let at = lines.next().and_then(|head| head.split(',').position(|title| title == name));
    let cell = at.and_then(|k| lines.nth(row)?.split(',').nth(k)).ok_or("no such cell")?;
    Ok(cell.parse()?)
}

/// At three tolerances of the step: both laws from the same runs.
#[test]
fn where_and_how_fast_the_volume_settles() -> Fallible {
    let (mut rates, mut ratios) = (Vec::new(), Vec::new());
    let mut expected = 0.0;
    for tolerance in [0.08, 0.04, 0.02] {
        let place = Place::new(&scenario("2 ms", tolerance))?;
        let run = place.reference("run")?;
        let first = column(&run, "volume_m3", 0)?;
        let settled = first * INSIDE / OUTSIDE;
        let measure = |volume: f64| volume / settled + (volume / settled - 1.0).ln();
        let rate = (measure(first) - measure(column(&run, "volume_m3", 1)?)) / column(&run, "time_s", 1)?;
        expected = PERMEABILITY * column(&run, "area_m2", 1)? * THERMAL * OUTSIDE / settled;
        rates.push((tolerance, rate));
        let end = summary(&run)?;
        ratios.push((tolerance, end["end"]["volume_m3"].as_f64().unwrap_or(f64::NAN) / first));
        println!("{} steps, pressure {} Pa", end["steps"]["accepted"], end["end"]["pressure_Pa"]);
    }
    Record::of("osmotic_volume", "V∞/V₀ at 100 mM inside, 102 mM outside", SOURCE, INSIDE / OUTSIDE, "tolerance", ratios, 1e-5)
        .check();
    Record::of("osmotic_volume", "fall of V/V∞ + ln(V/V∞ − 1) per time [1/s]", SOURCE, expected, "tolerance", rates, 0.01)
        .check();
    Ok(())
}
