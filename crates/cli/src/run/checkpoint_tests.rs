//! Checkpoints come back whole, and no file, however broken or malicious, does harm.

use super::*;
use crate::setup::{Cadence, Scales, StopRules};
use pellicle_physics::Parameters;
use pellicle_physics::parameters::{Load, MeshCare, Phases, Pull};
use pellicle_surface::{Vec3, mesh::shapes};
use proptest::prelude::*;
use std::sync::OnceLock;

/// A checkpoint of a small surface with phases and a load, one step after the start.
fn sample() -> &'static Checkpoint {
    static SAMPLE: OnceLock<Checkpoint> = OnceLock::new();
    SAMPLE.get_or_init(|| {
        let mut parameters = Parameters::bare(1.0, 1.0, 1e4);
        parameters.phases = Some(Phases { line_tension: 1.0, interface_width: 0.5, diffusion_constant: 1.0, width_per_radius: 0.0 });
        parameters.mesh = Some(MeshCare {
            adapt: false,
            edge: 0.6,
            shortest: 0.1,
            edges_per_radius: 4.0,
            edges_per_interface: 3.0,
            most_vertices: 1000,
        });
        let path = vec![(0.0, Vec3::zeros()), (1.0, Vec3::z())];
        parameters.loads.push(Load {
            centre: Vec3::z(),
            patch_radius: 0.5,
            pull: Pull::Trap { stiffness: 1.0, path },
        });
        let mesh = shapes::sphere(1.0, 0.6).expect("a sphere");
        let composition: Vec<f64> = mesh.positions.iter().map(|x| 0.5 + 0.3 * x.x).collect();
        let state = State::at_rest(&parameters, mesh, &composition, &[], &[]).expect("a state");
        let mut simulation = Simulation::new(parameters.clone(), state).expect("a simulation");
        simulation.advance(1e-3).expect("a step");
        let plan = Plan {
            title: "Sample".into(),
            scales: Scales { length: 1e-6, energy: 1e-19, time: 1e-3, thermal_energy: 4e-21 },
            parameters,
            stop: StopRules { time: 1.0, ..StopRules::default() },
            cadence: Cadence { row_every: None, frame_every: None, frame_change: None, checkpoint_seconds: 1.0 },
            seed: 1,
            scenario_sha256: String::new(),
            warnings: String::new(),
            origin: None,
        };
        Checkpoint::of(&plan, &simulation, &Cursor::default(), &Accounts::default())
    })
}

fn sample_file() -> &'static [u8] {
    static FILE: OnceLock<Vec<u8>> = OnceLock::new();
    FILE.get_or_init(|| sample().encode().expect("bytes"))
}

fn sample_content() -> &'static [u8] {
    static CONTENT: OnceLock<Vec<u8>> = OnceLock::new();
    CONTENT.get_or_init(|| postcard::to_stdvec(sample()).expect("bytes"))
}

/// A file with the right sizes and hash around any content: what someone with bad intentions would make.
fn seal(content: &[u8]) -> Vec<u8> {
    let packed = lz4_flex::block::compress(content);
    let mut file = Vec::new();
    file.extend_from_slice(&MAGIC);
    file.extend_from_slice(&FORMAT.to_le_bytes());
    file.extend_from_slice(&(content.len() as u32).to_le_bytes());
    file.extend_from_slice(&(packed.len() as u32).to_le_bytes());
    let hash = hash_of(&file, &packed);
    file.extend_from_slice(&hash);
    file.extend_from_slice(&packed);
    file
}

#[test]
fn a_checkpoint_comes_back_bit_for_bit() {
    let back = Checkpoint::decode(sample_file()).expect("a checkpoint");
    assert_eq!(&back, sample());
    assert_eq!(back.fingerprint(), sample().fingerprint());
    assert_eq!(seal(sample_content()), sample_file());
    let Checkpoint { plan, state, memory, .. } = back;
    Simulation::restore(plan.parameters, state, memory).expect("a simulation");
}

#[test]
fn impossible_sizes_are_refused_before_memory_is_taken() {
    for at in [12, 16] {
        let mut file = sample_file().to_vec();
        file[at..at + 4].copy_from_slice(&u32::MAX.to_le_bytes());
        assert!(matches!(Checkpoint::decode(&file), Err(CheckpointError::Size(_))));
    }
    // A list that claims 2⁶⁰ entries behind an honest hash.
    let mut content = postcard::to_stdvec("0.1.0").expect("bytes");
    content.extend_from_slice(&[0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0xff, 0x0f]);
    assert!(matches!(Checkpoint::decode(&seal(&content)), Err(CheckpointError::Damaged(_))));
}

#[test]
fn another_format_is_named() {
    let mut file = sample_file().to_vec();
    file[8] += 1;
    let message = Checkpoint::decode(&file).expect_err("another format").to_string();
    assert!(message.contains("format is 3"), "{message}");
}

/// One change to some bytes.
#[derive(Clone, Debug)]
enum Damage {
    Flip(usize, u8),
    Cut(usize),
    Insert(usize, Vec<u8>),
    Overwrite(usize, Vec<u8>),
}

fn damage() -> impl Strategy<Value = Damage> {
    prop_oneof![
        (any::<usize>(), 1u8..).prop_map(|(at, bits)| Damage::Flip(at, bits)),
        any::<usize>().prop_map(Damage::Cut),
        (any::<usize>(), prop::collection::vec(any::<u8>(), 1..9)).prop_map(|(at, b)| Damage::Insert(at, b)),
        (any::<usize>(), prop::collection::vec(any::<u8>(), 1..17)).prop_map(|(at, b)| Damage::Overwrite(at, b)),
    ]
}

fn apply(bytes: &mut Vec<u8>, damage: &Damage) {
    let place = |at: usize, length: usize| at % length.max(1);
    let length = bytes.len();
    if length == 0 {
        return;
    }
    match damage {
        Damage::Flip(at, bits) => bytes[place(*at, length)] ^= bits,
        Damage::Cut(at) => bytes.truncate(place(*at, length)),
        Damage::Insert(at, new) => {
            let at = place(*at, length);
            bytes.splice(at..at, new.iter().copied());
        }
        Damage::Overwrite(at, new) => {
            for (k, byte) in new.iter().enumerate() {
                bytes[place(at.wrapping_add(k), length)] = *byte;
            }
        }
    }
}

/// `PELLICLE_MUTATIONS` asks for a longer hunt.
fn cases() -> u32 {
    std::env::var("PELLICLE_MUTATIONS").ok().and_then(|text| text.parse().ok()).unwrap_or(2000)
}

proptest! {
    #![proptest_config(ProptestConfig { cases: cases(), ..ProptestConfig::default() })]

    #[test]
    fn damaged_files_are_refused(damages in prop::collection::vec(damage(), 1..4)) {
        let mut file = sample_file().to_vec();
        for one in &damages {
            apply(&mut file, one);
        }
        prop_assume!(file != sample_file());
        prop_assert!(Checkpoint::decode(&file).is_err());
    }

    /// Content that was changed on purpose may be a checkpoint, but must neither panic nor be believed blindly.
    #[test]
    fn malicious_content_does_no_harm(
        damages in prop::collection::vec(damage(), 1..4),
        in_head in any::<bool>(),
    ) {
        let mut content = sample_content().to_vec();
        for one in &damages {
            // Half of the cases aim at the scenario and the lists' lengths near the start.
            let one = match one {
                Damage::Flip(at, bits) if in_head => Damage::Flip(at % 600, *bits),
                Damage::Overwrite(at, new) if in_head => Damage::Overwrite(at % 600, new.clone()),
                other => other.clone(),
            };
            apply(&mut content, &one);
        }
        if let Ok(checkpoint) = Checkpoint::decode(&seal(&content)) {
            let Checkpoint { plan, state, memory, .. } = checkpoint;
            let _ = Simulation::restore(plan.parameters, state, memory);
        }
    }
}
