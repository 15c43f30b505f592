//! Round trips, defaults, and a storm of broken texts.

use super::{load, load_text};
use crate::setup::Setup;
use pellicle_physics::parameters::{BindingRegion, Pull, VolumeCondition};
use proptest::prelude::*;
use std::path::{Path, PathBuf};

/// A small sphere, so that each case takes a moment.
const SPHERE: &str = "
[surface]
shape = \"sphere\"
radius = \"5 um\"
edge_length = \"2 um\"
[membrane]
bending_rigidity = \"20 kBT\"
[time]
end = \"1 s\"
";

fn examples() -> Vec<PathBuf> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("examples");
    let mut found: Vec<PathBuf> = std::fs::read_dir(folder)
        .expect("the examples")
        .filter_map(|entry| Some(entry.ok()?.path()))
        .filter(|path| path.extension().is_some_and(|ending| ending == "toml"))
        .collect();
    found.sort();
    assert!(found.len() >= 7);
    found
}

fn read(text: &str) -> Setup {
    load_text(text, "test.toml", Path::new("."), &[]).unwrap_or_else(|error| panic!("{error}"))
}

fn refused(text: &str) -> String {
    load_text(text, "test.toml", Path::new("."), &[])
        .expect_err("a faulty scenario")
        .to_string()
}

fn assert_round_trip(setup: &Setup) {
    let again = load_text(&setup.resolved, "resolved", Path::new("/nowhere"), &[])
        .unwrap_or_else(|error| panic!("{error}\n{}", setup.resolved));
    assert_eq!(again.parameters, setup.parameters);
    assert_eq!(again.state, setup.state);
    assert_eq!(again.scales, setup.scales);
    assert_eq!(again.stop, setup.stop);
    assert_eq!(again.cadence, setup.cadence);
    assert_eq!(again.title, setup.title);
    assert_eq!(again.seed, setup.seed);
    let bare = |text: &str| -> Vec<String> {
        text.lines()
            .map(|line| line.split(" # ").next().unwrap_or_default().to_string())
            .collect()
    };
    assert_eq!(bare(&again.resolved), bare(&setup.resolved));
}

#[test]
fn examples_load_and_their_resolved_form_is_the_same_run() {
    for path in examples() {
        let setup = load(&path, &[]).unwrap_or_else(|error| panic!("{error}"));
        assert!(
            setup.warnings.is_empty(),
            "{}: {:?}",
            path.display(),
            setup.warnings
        );
        assert_round_trip(&setup);
    }
}

/// Every section at once, with the less common keys.
#[test]
fn full_scenarios_survive_being_resolved() {
    let full = format!(
        "title = \"all \\\"of\\\" it\"\nseed = 9\ntemperature = \"310 K\"\n{SPHERE}
tolerance = 0.05
first_step = \"1e-5 s\"
[lipids]
condition = \"reservoir\"
tension = \"1e-4 mN/m\"
[volume]
condition = \"osmotic\"
inside_concentration = \"10 mM\"
outside_concentration = \"11 mM\"
permeability = \"1e-13 m/s/Pa\"
[composition]
line_tension = \"0.1 pN\"
interface_width = \"2.5 um\"
diffusion_constant = \"1 um^2/s\"
[[composition.domains]]
direction = [0, 0, 1]
area_fraction = 0.2
[[composition.domains]]
centre = [\"5 um\", \"0 um\", \"0 um\"]
radius = \"2 um\"
[composition.domain]
bending_rigidity = \"40 kBT\"
[protein]
on_rate = \"0.1 /uM/s\"
bulk_concentration = \"100 nM\"
detach_rate = \"1 /s\"
site_area = \"50 nm^2\"
curvature = \"1 /um\"
binds = \"on spot\"
start_coverage = 0.1
spot = {{ direction = [1, 1, 0], radius = \"2 um\" }}
[surroundings]
bulk_viscosity = \"1 mPa s\"
screening_length = \"5 um\"
[[load]]
direction = [0, 1, 0]
patch_radius = \"1 um\"
[[load.path]]
time = \"0 s\"
force = [\"0 pN\", \"1 pN\", \"0 pN\"]
[[load]]
centre = [\"0 um\", \"-5 um\", \"0 um\"]
patch_radius = \"1 um\"
trap_stiffness = \"0.01 pN/nm\"
path = [{{ time = \"0 s\", displacement = [\"0 um\", \"0 um\", \"0 um\"] }}, {{ time = \"1 s\", displacement = [\"0 um\", \"-1 um\", \"0 um\"] }}]
[mesh]
adapt = false
[stop]
domain_count = 1
at_rest = 1e-3
neck_radius = \"0.1 um\"
"
    );
    let setup = read(&full);
    assert_round_trip(&setup);
    assert!(matches!(
        setup.parameters.volume,
        VolumeCondition::Osmotic {
            permeability: Some(_),
            ..
        }
    ));
    let protein = setup.parameters.protein.expect("protein");
    assert_eq!(protein.region, BindingRegion::Marked);
    // 0.1 /(µM s) × 100 nM = 0.01 /s; two factors, each rounded once.
    assert!((protein.attach_rate / setup.scales.time / 0.01 - 1.0).abs() < 1e-12);
    assert!(matches!(setup.parameters.loads[1].pull, Pull::Trap { .. }));
    assert_eq!(
        setup.state.marker_amount.len(),
        setup.state.mesh.n_vertices()
    );
}

#[test]
fn every_shape_survives_being_resolved() {
    for surface in [
        "shape = \"ellipsoid\"\nsemi_axes = [\"1 um\", \"2 um\", \"3 um\"]\nedge_length = \"0.5 um\"\nbumps = 0.01",
        "shape = \"ellipsoid\"\nsemi_axes = [\"1 um\", \"2 um\", \"3 um\"]\nedge_length = \"0.5 um\"\nirregular = true",
        "shape = \"prolate\"\nradius = \"1 um\"\nreduced_volume = 0.8\nedge_length = \"0.2 um\"",
        "shape = \"oblate\"\nradius = \"1 um\"\nreduced_volume = 0.8\nedge_length = \"0.2 um\"",
        "shape = \"torus\"\nring_radius = \"3 um\"\ntube_radius = \"1 um\"\nedge_length = \"0.5 um\"",
        "shape = \"tube\"\nradius = \"1 um\"\nlength = \"8 um\"\nedge_length = \"0.4 um\"\nbumps = 0.05\nbump_waves = 2",
        "shape = \"tube\"\nradius = \"1 um\"\nlength = \"8 um\"\nedge_length = \"0.4 um\"\nirregular = true",
        "shape = \"capped tube\"\nradius = \"1 um\"\nlength = \"4 um\"\nedge_length = \"0.4 um\"",
        "shape = \"disc\"\nradius = \"1 um\"\nedge_length = \"0.2 um\"\ncentre_edge_length = \"0.1 um\"\nbumps = 0.01",
    ] {
        let text = format!(
            "[surface]\n{surface}\n[membrane]\nbending_rigidity = \"20 kBT\"\n[time]\nend = \"1 s\""
        );
        assert_round_trip(&read(&text));
    }
}

#[test]
fn units_of_the_solver_make_plain_numbers_of_a_sphere() {
    let setup = read(SPHERE);
    assert_eq!(setup.scales.length, 5e-6);
    assert_eq!(setup.parameters.bending_rigidity.at_zero, 1.0);
    // Products and quotients of a few rounded numbers.
    assert!((setup.parameters.shear_viscosity.at_zero - 1.0).abs() < 1e-14);
    assert!((setup.parameters.area_compression_modulus / 3e4 - 1.0).abs() < 1e-12);
    let VolumeCondition::Fixed(path) = &setup.parameters.volume else {
        panic!("the volume of a closed surface is fixed where nothing is said");
    };
    assert_eq!(path.len(), 1);
}

#[test]
fn the_value_given_for_compression_is_used_as_it_is() {
    let text = SPHERE.replace(
        "\"20 kBT\"",
        "\"20 kBT\"\narea_compression_modulus = \"0.1 N/m\"",
    );
    let setup = read(&text);
    let scales = setup.scales;
    let used = setup.parameters.area_compression_modulus * scales.energy / scales.length.powi(2);
    assert!((used / 0.1 - 1.0).abs() < 1e-12);
}

#[test]
fn a_fluid_film_is_measured_by_its_tension() {
    let text = SPHERE.replace("20 kBT", "0 J")
        + "[lipids]\ncondition = \"reservoir\"\ntension = \"1e-3 mN/m\"";
    let setup = read(&text);
    // Time = viscosity/tension.
    assert!((setup.scales.time / 1e-3 - 1.0).abs() < 1e-12);
    assert_eq!(setup.parameters.bending_rigidity.at_zero, 0.0);
}

#[test]
fn noise_keeps_the_mean_and_its_bounds() {
    let text = SPHERE.to_string()
        + "[composition]\nline_tension = \"0.1 pN\"\ninterface_width = \"3 um\"\ndiffusion_constant = \"1 um^2/s\"\nmean = 0.3\nnoise = 0.1";
    let state = read(&text).state;
    let (amount, lipid): (f64, f64) = (
        state.composition_amount.iter().sum(),
        state.lipid.iter().sum(),
    );
    assert!((amount / lipid - 0.3).abs() < 1e-12);
    let largest = state
        .composition()
        .iter()
        .fold(0.0f64, |m, c| m.max((c - 0.3).abs()));
    assert!((largest - 0.1).abs() < 1e-12);
}

#[test]
fn overrides_replace_values_and_name_themselves_in_faults() {
    let set = |options: &[&str]| {
        let options: Vec<String> = options.iter().map(|o| o.to_string()).collect();
        load_text(SPHERE, "test.toml", Path::new("."), &options)
    };
    let setup = set(&[
        "membrane.bending_rigidity=40 kBT",
        "seed=7",
        "time.end = \"3 s\"",
    ])
    .expect("right overrides");
    assert_eq!(setup.seed, 7);
    assert!((setup.scales.energy / setup.scales.thermal_energy / 40.0 - 1.0).abs() < 1e-12);
    let error = set(&["membrane.bending_rigidity=40 um"]).expect_err("a length");
    assert!(error.to_string().contains("--set"), "{error}");
    assert!(set(&["nonsense"]).is_err());
    assert!(set(&["include=\"x.toml\""]).is_err());
}

#[test]
fn an_including_file_wins_key_by_key() {
    let folder = tempfile::tempdir().expect("a folder");
    let base = folder.path().join("base.toml");
    std::fs::write(&base, SPHERE).expect("a file");
    let text = "include = \"base.toml\"\n[membrane]\nbending_rigidity = \"30 kBT\"\n";
    let setup = load_text(text, "over.toml", folder.path(), &[]).expect("a scenario");
    assert!((setup.scales.energy / setup.scales.thermal_energy / 30.0 - 1.0).abs() < 1e-12);
    assert_eq!(setup.scales.length, 5e-6);
    assert_round_trip(&setup);
    std::fs::write(&base, format!("include = \"base.toml\"\n{SPHERE}")).expect("a file");
    let error = load_text(text, "over.toml", folder.path(), &[]).expect_err("a circle");
    assert!(error.to_string().contains("circle"), "{error}");
}

#[test]
fn all_faults_are_told_together() {
    let message =
        refused("[surface]\nshap = \"sphere\"\n[membrane]\nbending_rigidity = \"20 um\"\n[tyme]\n");
    for part in [
        "surface.shap",
        "did you mean \"shape\"?",
        "membrane.bending_rigidity",
        "expected an energy",
        "did you mean \"time\"?",
        "time.end is missing",
        "test.toml:4:21",
    ] {
        assert!(message.contains(part), "no {part:?} in\n{message}");
    }
}

#[test]
fn the_schema_accepts_the_examples_and_their_resolved_forms() {
    let schema: serde_json::Value = serde_json::from_str(&super::schema()).expect("JSON");
    let validator = jsonschema::validator_for(&schema).expect("a schema");
    let mut texts = vec![];
    for path in examples() {
        texts.push(std::fs::read_to_string(&path).expect("an example"));
        texts.push(load(&path, &[]).expect("an example").resolved);
    }
    for text in texts {
        let table: toml::Table = text.parse().expect("TOML");
        let json = serde_json::to_value(table).expect("JSON");
        let faults: Vec<String> = validator
            .iter_errors(&json)
            .map(|e| e.to_string())
            .collect();
        assert!(faults.is_empty(), "{faults:?}");
    }
    let wrong = serde_json::json!({ "surface": { "shap": "sphere" } });
    assert!(!validator.is_valid(&wrong));
    let wrong = serde_json::json!({ "membrane": { "bending_rigidity": 20 } });
    assert!(!validator.is_valid(&wrong));
}

/// Texts of the examples with meshes so coarse that each case takes a moment.
fn seeds() -> Vec<String> {
    let mut seeds: Vec<String> = examples()
        .iter()
        .filter_map(|path| std::fs::read_to_string(path).ok())
        .map(|text| {
            text.lines()
                .filter(|line| !line.starts_with('#'))
                .map(|line| match line.split(" = ").next() {
                    Some("edge_length") => "edge_length = \"1 um\"",
                    Some("centre_edge_length") => "",
                    _ => line,
                })
                .collect::<Vec<_>>()
                .join("\n")
        })
        .collect();
    seeds.push(SPHERE.into());
    seeds
}

/// Words that mean something here, to break texts with.
const WORDS: &[&str] = &[
    "",
    "\"",
    "[",
    "]",
    "[[",
    "=",
    "\n",
    "{",
    "}",
    "nan",
    "inf",
    "-1",
    "0",
    "1e308",
    "1e-308",
    "99999999999999999999",
    "\"20 kBT\"",
    "\"1 um\"",
    "\"0 um\"",
    "\"-3 s\"",
    "\"1e300 m\"",
    "[surface]\n",
    "[[load]]\n",
    "shape = \"torus\"\n",
    "true",
    "µ",
    "²",
    "\u{0}",
    "\u{7f}",
    "\r\n",
    "\t",
    "'''",
    "\"\"\"",
    "#",
    "a.b.c = 1\n",
    "1979-05-27",
    "\\u0000",
    "0x",
    "[protein]\n",
    "[composition]\n",
    "[frame]\n",
    "include = \".\"\n",
    "e",
    "-",
    "/",
    "^9",
    "\u{202e}",
    "𝒳",
];

#[derive(Clone, Debug)]
enum Change {
    Insert(usize, usize),
    Remove(usize, usize),
    SwapLines(usize, usize),
    Replace(usize, usize, usize),
}

fn change() -> impl Strategy<Value = Change> {
    prop_oneof![
        (any::<usize>(), 0..WORDS.len()).prop_map(|(at, word)| Change::Insert(at, word)),
        (any::<usize>(), 1usize..30).prop_map(|(at, n)| Change::Remove(at, n)),
        (any::<usize>(), any::<usize>()).prop_map(|(a, b)| Change::SwapLines(a, b)),
        (any::<usize>(), 1usize..12, 0..WORDS.len())
            .prop_map(|(at, n, w)| Change::Replace(at, n, w)),
    ]
}

fn apply(text: String, change: &Change) -> String {
    let mut letters: Vec<char> = text.chars().collect();
    let n = letters.len().max(1);
    match *change {
        Change::Insert(at, word) => {
            letters.splice(at % n..at % n, WORDS[word].chars());
        }
        Change::Remove(at, count) => {
            let end = (at % n + count).min(letters.len());
            letters.drain((at % n).min(end)..end);
        }
        Change::Replace(at, count, word) => {
            let end = (at % n + count).min(letters.len());
            letters.splice((at % n).min(end)..end, WORDS[word].chars());
        }
        Change::SwapLines(a, b) => {
            let mut lines: Vec<&str> = text.lines().collect();
            let n = lines.len().max(1);
            if !lines.is_empty() {
                lines.swap(a % n, b % n);
            }
            return lines.join("\n");
        }
    }
    letters.into_iter().collect()
}

/// `PELLICLE_MUTATIONS` asks for a longer hunt.
fn cases() -> u32 {
    std::env::var("PELLICLE_MUTATIONS").ok().and_then(|text| text.parse().ok()).unwrap_or(1500)
}

proptest! {
    #![proptest_config(ProptestConfig { cases: cases(), failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn broken_examples_never_panic(which in any::<usize>(), changes in prop::collection::vec(change(), 1..6)) {
        let seeds = seeds();
        let mut text = seeds[which % seeds.len()].clone();
        for change in &changes {
            text = apply(text, change);
        }
        let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("examples");
        // Whatever the sizes became, the mesh stays small.
        let coarse = ["surface.edge_length=\"1 um\"".to_string()];
        match load_text(&text, "broken.toml", &folder, &coarse) {
            Ok(setup) => prop_assert!(setup.parameters.validate().is_ok()),
            Err(error) => prop_assert!(!error.to_string().is_empty() && !error.render(true).is_empty()),
        }
    }

    #[test]
    fn random_texts_never_panic(text in "\\PC{0,200}", option in "[a-z.]{0,12}=?\\PC{0,20}") {
        let _ = load_text(&text, "random.toml", Path::new("."), std::slice::from_ref(&option)).map_err(|e| e.to_string());
        let _ = load_text(SPHERE, "sphere.toml", Path::new("."), &[option]).map_err(|e| e.to_string());
    }

    #[test]
    fn random_values_never_panic(text in "[-+0-9.eE ]{0,8}[ a-zA-Zµ²^/*·()-]{0,12}") {
        let _ = crate::units::parse(&text, Some(4e-21));
    }
}
