//! Area of a vesicle that relaxes with a fixed amount of lipid: it drifts by as much as the tension stretches it,
//! ΔA/A = Δλ/K_A.
//!
//! # Source
//! Definition of the area-compression modulus; as measured by Evans & Rawicz, Phys. Rev. Lett. 64 (1990) 2094.

mod common;
mod evidence;

use common::{ELLIPSOID, Place, summary};
use evidence::Fallible;
use evidence::record::Record;

const SOURCE: &str = "Evans & Rawicz, Phys. Rev. Lett. 64 (1990) 2094";

#[test]
fn area_drifts_with_the_tension() -> Fallible {
    let place = Place::new(ELLIPSOID)?;
    let mut measured = Vec::new();
    for modulus in [1e-5, 1e-4, 1e-3] {
        let set = format!("membrane.area_compression_modulus=\"{modulus} N/m\"");
        let name = format!("run{modulus}");
        let output = place.run(&name, &["--set", &set]).output()?;
        common::assert_code(&output, 0);
        let run = place.path(&name);
        let series = std::fs::read_to_string(run.join("series.csv"))?;
        let mut lines = series.lines();
        let names: Vec<&str> = lines.next().unwrap_or_default().split(',').collect();
        let first: Vec<&str> = lines.next().unwrap_or_default().split(',').collect();
        let last = summary(&run)?;
        let change = |name: &str| -> Result<[f64; 2], Box<dyn std::error::Error>> {
            let at = names.iter().position(|n| *n == name).ok_or("no such column")?;
            Ok([first[at].parse()?, last["end"][name].as_f64().ok_or("no such number")?])
        };
        let (area, tension) = (change("area_m2")?, change("tension_mean_N_per_m")?);
        let drift = area[1] / area[0] - 1.0;
        println!("K_A = {modulus}: drift {drift:e}, tension {tension:?}");
        measured.push((modulus, drift / ((tension[1] - tension[0]) / modulus)));
    }
    Record::of("area_strain", "ΔA/A over Δλ/K_A", SOURCE, 1.0, "K_A [N/m]", measured, 0.01).check();
    Ok(())
}
