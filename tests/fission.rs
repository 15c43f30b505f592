//! Thin necks are severed when asked for, and the membrane goes on in pieces: amounts, volumes, names, the ledger.

mod common;

use common::{Fallible, Place, assert_code, summary};
use pellicle_physics::parameters::{Blend, Fission, MeshCare, Phases, VolumeCondition};
use pellicle_physics::{Parameters, Simulation, State};
use pellicle_surface::geometry::Geometry;
use pellicle_surface::mesh::shapes::{capped_tube, tube};
use pellicle_surface::remesh::{RemeshOptions, VertexData, remesh};
use pellicle_surface::{Mesh, Vec3};
use std::f64::consts::PI;

const EDGE: f64 = 0.2;

/// A body squeezed to a waist at z = `at`, in units of its radius 1.
fn waist(mut mesh: Mesh, at: f64) -> Result<Mesh, pellicle_surface::MeshError> {
    for x in &mut mesh.positions {
        let factor = 1.0 - 0.72 * (-(x.z - at).powi(2) / 0.4).exp();
        x.x *= factor;
        x.y *= factor;
    }
    let n = mesh.n_vertices();
    Ok(remesh(&mesh, &VertexData::default(), &vec![EDGE; n], &RemeshOptions::default())?.mesh)
}

fn parameters() -> Parameters {
    let mut p = Parameters::bare(1.0, 1.0, 1e4);
    p.gaussian_modulus = Blend::uniform(-0.7);
    p.phases = Some(Phases { line_tension: 1.0, interface_width: 0.4, diffusion_constant: 0.1, width_per_radius: 0.0 });
    p.fission = Some(Fission { neck_radius: 0.5 });
    p.step.first = 1e-4;
    p.mesh = Some(MeshCare {
        adapt: true,
        edge: EDGE,
        shortest: 0.1,
        edges_per_radius: 3.0,
        edges_per_interface: 3.0,
        most_vertices: 3000,
    });
    p
}

fn start(parameters: Parameters, mesh: Mesh) -> Result<Simulation, pellicle_physics::PhysicsError> {
    let composition: Vec<f64> = mesh.positions.iter().map(|x| 0.5 + 0.45 * (x.z - 0.3).tanh()).collect();
    let state = State::at_rest(&parameters, mesh, &composition, &[], &[])?;
    Simulation::new(parameters, state)
}

/// Sums over each piece.
fn by_piece(simulation: &Simulation, values: &[f64]) -> Vec<f64> {
    let topology = &simulation.connectivity.topology;
    let mut sums = vec![0.0; topology.n_pieces];
    values.iter().zip(&topology.piece).for_each(|(value, piece)| sums[*piece as usize] += value);
    sums
}

/// Steps until a neck is severed; the report's entry and the amounts before.
fn until_severed(simulation: &mut Simulation) -> Result<f64, Box<dyn std::error::Error>> {
    for _ in 0..40 {
        if let Some(severing) = simulation.advance(f64::INFINITY)?.severed.first() {
            return Ok(severing.energy_change);
        }
    }
    Err("no neck was severed".into())
}

#[test]
fn each_piece_keeps_its_lipids_and_its_volume() -> Fallible {
    for (name, volume) in [
        ("fixed", None),
        ("osmotic", Some(VolumeCondition::Osmotic { inside: 50.0, outside: 4.0, permeability: Some(0.01) })),
        ("free", Some(VolumeCondition::Pressure(0.0))),
    ] {
        let mesh = waist(capped_tube(1.0, 3.0, EDGE)?, 0.4)?;
        let held = Geometry::new(&mesh).volume;
        let mut p = parameters();
        p.volume = volume.clone().unwrap_or(VolumeCondition::Fixed(vec![(0.0, held)]));
        let mut simulation = start(p, mesh)?;
        let (lipid, composition): (f64, f64) =
            (simulation.state.lipid.iter().sum(), simulation.state.composition_amount.iter().sum());
        let jump = until_severed(&mut simulation)?;
        let state = &simulation.state;
        let topology = &simulation.connectivity.topology;
        assert_eq!((topology.n_pieces, topology.euler_characteristic(), topology.is_closed()), (2, 4, true), "{name}");
        let names: Vec<_> = state.pieces.iter().map(|piece| (piece.id, piece.parent)).collect();
        let larger = usize::from(by_piece(&simulation, &state.lipid)[1] > by_piece(&simulation, &state.lipid)[0]);
        assert_eq!(names[larger], (0, None), "{name}: the larger part keeps its name");
        assert_eq!(names[1 - larger], (1, Some(0)), "{name}");
        let shares: f64 = state.pieces.iter().map(|piece| piece.share).sum();
        assert!((shares - 1.0).abs() < 1e-12, "{name}: shares {shares}");
        for (what, before, after) in [
            ("lipid", lipid, state.lipid.iter().sum::<f64>()),
            ("composition", composition, state.composition_amount.iter().sum::<f64>()),
        ] {
            assert!((after - before).abs() <= 1e-12 * before, "{name}: {what} {before} became {after}");
        }
        assert_eq!(state.ledger.severing, jump, "{name}");
        // Two closed pieces instead of one: the Gaussian term alone jumps by 4πκ_G.
        assert!((simulation.energies.gaussian + 0.7 * 8.0 * PI).abs() < 1e-9, "{name}: {}", simulation.energies.gaussian);

        let (lipids, compositions) =
            (by_piece(&simulation, &state.lipid), by_piece(&simulation, &state.composition_amount));
        let order: Vec<u32> = state.pieces.iter().map(|piece| piece.id).collect();
        for _ in 0..12 {
            simulation.advance(f64::INFINITY)?;
        }
        let state = &simulation.state;
        let place = |k: usize| state.pieces.iter().position(|piece| piece.id == order[k]).unwrap_or(9);
        for k in 0..2 {
            let (lipid, composition) =
                (by_piece(&simulation, &state.lipid)[place(k)], by_piece(&simulation, &state.composition_amount)[place(k)]);
            assert!((lipid - lipids[k]).abs() <= 1e-12 * lipids[k], "{name}: lipid of piece {k}");
            // Remapping sums over many fluxes.
            assert!((composition - compositions[k]).abs() <= 1e-11 * compositions[k], "{name}: composition of piece {k}");
            if volume.is_none() {
                let (found, wanted) =
                    (simulation.measured.piece_volume[place(k)], held * state.pieces[place(k)].share);
                assert!((found - wanted).abs() < 1e-10 * wanted, "{name}: volume {found}, not {wanted}");
            }
        }
        let balance = simulation.energy_balance_error();
        println!("{name}: jump {jump:.3}, balance {balance:.4}, pressures {:?}",
            state.pieces.iter().map(|piece| piece.pressure).collect::<Vec<_>>());
        assert!(balance.abs() < 0.1, "{name}: balance {balance}");
        if name != "free" {
            assert!(state.pieces[0].pressure != state.pieces[1].pressure, "{name}: each piece has its own pressure");
        }
    }
    Ok(())
}

/// A periodic tube severed once is closed in space, in one piece.
#[test]
fn a_severed_tube_is_one_closed_piece() -> Fallible {
    let mut p = parameters();
    let mesh = waist(tube(1.0, 6.0, EDGE)?, 3.0)?;
    p.volume = VolumeCondition::Fixed(vec![(0.0, Geometry::new(&mesh).volume)]);
    let mut simulation = start(p, mesh)?;
    until_severed(&mut simulation)?;
    let topology = &simulation.connectivity.topology;
    assert_eq!((topology.n_pieces, topology.euler_characteristic()), (1, 2));
    for _ in 0..5 {
        simulation.advance(f64::INFINITY)?;
    }
    let seen = pellicle_physics::diagnostics::Diagnostics::measure(&simulation);
    let reduced = seen.reduced_volume.ok_or("it closes in space now")?;
    assert!((0.3..1.0).contains(&reduced), "{reduced}");
    Ok(())
}

/// A simulation taken up after a severing goes on bit for bit.
#[test]
fn pieces_come_back_bit_for_bit() -> Fallible {
    let mesh = waist(capped_tube(1.0, 3.0, EDGE)?, -0.2)?;
    let mut p = parameters();
    p.volume = VolumeCondition::Fixed(vec![(0.0, Geometry::new(&mesh).volume)]);
    let mut simulation = start(p.clone(), mesh)?;
    until_severed(&mut simulation)?;
    simulation.advance(f64::INFINITY)?;
    let mut again = Simulation::restore(p, simulation.state.clone(), simulation.memory())?;
    for _ in 0..4 {
        simulation.advance(f64::INFINITY)?;
        again.advance(f64::INFINITY)?;
    }
    assert_eq!(simulation.state, again.state);
    assert_eq!(simulation.memory(), again.memory());
    Ok(())
}

/// A run through the program: a domain buds, is shed, and both pieces go on.
#[test]
fn a_vesicle_sheds_its_bud_and_goes_on() -> Fallible {
    let place = Place::new(include_str!("data/bud.toml"))?;
    assert_code(&place.run("bud", &[]).output()?, 0);
    let folder = place.path("bud");
    let told = summary(&folder)?;
    assert_eq!(told["stopped_by"], "time", "{}", told["stopped"]);
    assert_eq!(told["end"]["piece_count"], 2);
    assert_eq!(told["end"]["domain_count"], 1);
    let balance = told["end"]["energy_balance_error"].as_f64().unwrap_or(f64::NAN);
    assert!(balance.abs() < 0.1, "balance {balance}");
    let mut reader = csv::Reader::from_path(folder.join("pieces.csv"))?;
    let header = reader.headers()?.clone();
    let column = |name: &str| header.iter().position(|h| h == name).unwrap_or(usize::MAX);
    let rows: Vec<csv::StringRecord> = reader.records().collect::<Result<_, _>>()?;
    let number = |row: &csv::StringRecord, name: &str| row[column(name)].parse::<f64>().unwrap_or(f64::NAN);
    let of = |id: &str| rows.iter().filter(|row| &row[column("piece")] == id).collect::<Vec<_>>();
    let (mother, bud) = (of("0"), of("1"));
    assert!(bud.len() > 5 && mother.len() > bud.len());
    assert!(bud.iter().all(|row| &row[column("parent")] == "0"));
    let (first, last) = (bud[0], bud[bud.len() - 1]);
    assert!((number(last, "lipid_m2") / number(first, "lipid_m2") - 1.0).abs() < 1e-12);
    // The bud is the domain; with its volume free it rounds up.
    assert!(number(last, "composition_mean") > 0.8);
    assert!(number(last, "reduced_volume") > number(first, "reduced_volume"));
    let apart = |row: &csv::StringRecord| {
        Vec3::new(number(row, "centre_x_m"), number(row, "centre_y_m"), number(row, "centre_z_m"))
    };
    assert!((apart(last) - apart(mother[mother.len() - 1])).norm() > 2e-6);
    Ok(())
}
