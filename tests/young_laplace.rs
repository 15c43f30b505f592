//! Pressure in a sphere with spontaneous curvature: P = 2σ/R + κC²/R − 2κC/R².
//!
//! # Source
//! Zhong-can & Helfrich, Phys. Rev. Lett. 59 (1987) 2486.

mod evidence;

use evidence::motion::{start, with_reservoir};
use evidence::record::Record;
use evidence::{Fallible, SEED};
use pellicle_physics::parameters::Blend;
use pellicle_surface::mesh::shapes::irregular_sphere;

const SOURCE: &str = "Zhong-can & Helfrich, Phys. Rev. Lett. 59 (1987) 2486";

fn pressure(n: usize, tension: f64, curvature: f64) -> Result<f64, Box<dyn std::error::Error>> {
    let mesh = irregular_sphere(n, SEED)?;
    let mut parameters = with_reservoir(tension, &mesh);
    parameters.spontaneous_curvature = Blend::uniform(curvature);
    let mut s = start(parameters, mesh)?;
    for _ in 0..12 {
        s.advance(f64::INFINITY)?;
    }
    Ok(s.state.pressure)
}

#[test]
fn pressure_in_a_sphere() -> Fallible {
    for (tension, curvature) in [(2.0, 1.3), (2.0, 0.0)] {
        let expected = 2.0 * tension + curvature * curvature - 2.0 * curvature;
        let measured = [162, 642, 2562]
            .iter()
            .map(|&n| Ok((n as f64, pressure(n, tension, curvature)?)))
            .collect::<Result<Vec<_>, Box<dyn std::error::Error>>>()?;
        let quantity = format!("pressure in a sphere, σ = {tension}, C = {curvature}");
        Record::of("young_laplace", &quantity, SOURCE, expected, "vertices", measured, 0.003).with_order().check_with_order(1.6);
    }
    Ok(())
}
