//! Second law: what the free energy loses is what is dissipated, and it never rises without work.
//!
//! # Source
//! Onsager's principle, Phys. Rev. 37 (1931) 405; balance over a run: common practice, no source.

mod evidence;

use evidence::motion::{flips_only, start, vesicle};
use evidence::record::Record;
use evidence::{Fallible, SEED};
use pellicle_surface::mesh::shapes::{ellipsoid, irregular_ellipsoid};

/// The run's own balance at three tolerances of the step: the error falls with the tolerance.
#[test]
fn energy_lost_is_energy_dissipated() -> Fallible {
    let mut measured = Vec::new();
    for tolerance in [0.06, 0.03, 0.015] {
        let mesh = ellipsoid([1.0, 1.0, 2.0], 0.3)?;
        let mut parameters = vesicle(&mesh);
        parameters.step.tolerance = tolerance;
        let mut s = start(parameters, mesh)?;
        let mut energy = s.energies.total();
        while s.state.time < 0.3 {
            let report = s.advance(f64::INFINITY)?;
            assert!(report.free_energy <= energy * (1.0 + 1e-9), "rise from {energy} to {}", report.free_energy);
            energy = report.free_energy;
        }
        println!("tolerance {tolerance}: {} steps, balance {:+.4}", s.state.ledger.accepted, s.energy_balance_error());
        measured.push((tolerance, s.energy_balance_error()));
    }
    let record = Record::of("ledger", "energy balance of a relaxing spheroid", "Onsager, Phys. Rev. 37 (1931) 405", 0.0, "tolerance", measured, 0.02).absolute();
    record.check();
    let errors: Vec<f64> = record.errors.iter().map(|e| e.abs()).collect();
    assert!(errors[2] < errors[0], "the balance does not improve with the tolerance: {errors:?}");
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
