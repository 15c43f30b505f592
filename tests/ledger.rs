//! Second law: what the free energy loses is what is dissipated, and it never rises without work.
//!
//! # Source
//! Onsager's principle, Phys. Rev. 37 (1931) 405; balance over a run: common practice, no source.

mod evidence;

use evidence::motion::{flips_only, start, vesicle};
use evidence::record::Record;
use evidence::{Fallible, SEED};
use pellicle_surface::mesh::shapes::{ellipsoid, irregular_ellipsoid};

fn balance(edge: f64, tolerance: f64) -> Result<(f64, f64), Box<dyn std::error::Error>> {
    let mesh = ellipsoid([1.0, 1.0, 2.0], edge)?;
    let mut parameters = vesicle(&mesh);
    parameters.step.tolerance = tolerance;
    let mut s = start(parameters, mesh)?;
    let mut energy = s.energies.total();
    while s.state.time < 0.3 {
        let report = s.advance(f64::INFINITY)?;
        assert!(report.free_energy <= energy * (1.0 + 1e-9), "rise from {energy} to {}", report.free_energy);
        energy = report.free_energy;
    }
    let n = s.state.mesh.n_vertices();
    println!("{n} vertices, tolerance {tolerance}: {} steps, balance {:+.4}", s.state.ledger.accepted, s.energy_balance_error());
    Ok((n as f64, s.energy_balance_error()))
}

/// Three tolerances of the step: the error falls towards that of the mesh.
#[test]
fn balance_follows_the_tolerance() -> Fallible {
    let errors = [0.06, 0.03, 0.015].iter().map(|t| Ok(balance(0.3, *t)?.1.abs())).collect::<Result<Vec<_>, Box<dyn std::error::Error>>>()?;
    assert!(errors[2] < errors[1] && errors[1] < errors[0], "{errors:?}");
    Ok(())
}

/// Three meshes: what is left is the sliding of the mesh along the surface, which changes the discrete energy a little.
#[test]
fn balance_follows_the_mesh() -> Fallible {
    let measured = [0.4, 0.28, 0.2].iter().map(|h| balance(*h, 0.015)).collect::<Result<Vec<_>, _>>()?;
    Record::of("ledger", "energy balance of a relaxing spheroid", "Onsager, Phys. Rev. 37 (1931) 405", 0.0, "vertices", measured, 0.03)
        .absolute()
        .with_order()
        .check();
    Ok(())
}

/// With flips and smoothing on an irregular mesh, mesh energy is booked apart.
#[test]
fn balance_with_care_of_the_mesh() -> Fallible {
    let mesh = irregular_ellipsoid([1.0, 1.0, 2.0], 500, SEED)?;
    let mut parameters = vesicle(&mesh);
    parameters.mesh = Some(flips_only(&mesh));
    let mut s = start(parameters, mesh)?;
    while s.state.time < 0.3 {
        s.advance(f64::INFINITY)?;
    }
    println!("mesh energy {:+.2e} of {:.4}", s.state.ledger.mesh_energy, s.state.ledger.dissipated);
    Record::of("ledger", "energy balance, irregular mesh with flips", "Onsager, Phys. Rev. 37 (1931) 405", 0.0, "tolerance", vec![(0.03, s.energy_balance_error())], 0.05)
        .absolute()
        .check();
    Ok(())
}
