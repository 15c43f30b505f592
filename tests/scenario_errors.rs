//! What the program says to faulty scenarios and meshes, word for word, and its exit codes: 2 for what is wrong in a
//! scenario or mesh, 3 for a file that cannot be read.

use std::fs;
use std::path::Path;
use std::process::Command;

/// A right scenario in three parts that cases replace.
const SURFACE: &str = "[surface]\nshape = \"sphere\"\nradius = \"5 um\"\nedge_length = \"1 um\"\n";
const MEMBRANE: &str = "[membrane]\nbending_rigidity = \"20 kBT\"\n";
const TIME: &str = "[time]\nend = \"1 s\"\n";
const PHASES: &str = "[composition]\nline_tension = \"0.1 pN\"\ninterface_width = \"2 um\"\ndiffusion_constant = \"1 um^2/s\"\n";
const PROTEIN: &str = "[protein]\nattach_rate = \"3 /s\"\ndetach_rate = \"1 /s\"\nsite_area = \"50 nm^2\"\n";
const DISC: &str = "[surface]\nshape = \"disc\"\nradius = \"1 um\"\nedge_length = \"0.2 um\"\n";

/// A tetrahedron in OFF-like lists: points and triangles, counter-clockwise seen from outside.
const POINTS: [[f64; 3]; 4] = [[1.0, 1.0, 1.0], [1.0, -1.0, -1.0], [-1.0, 1.0, -1.0], [-1.0, -1.0, 1.0]];
const FACES: [[usize; 3]; 4] = [[0, 1, 2], [0, 3, 1], [0, 2, 3], [1, 3, 2]];

fn obj(points: &[[f64; 3]], faces: &[[usize; 3]]) -> String {
    let points = points.iter().map(|[x, y, z]| format!("v {x} {y} {z}\n"));
    let faces = faces.iter().map(|[a, b, c]| format!("f {} {} {}\n", a + 1, b + 1, c + 1));
    points.chain(faces).collect()
}

/// Exit code and message of `pellicle check scenario.toml` in a folder of its own.
fn check(files: &[(&str, &[u8])], options: &[&str]) -> (i32, String) {
    let folder = tempfile::tempdir().expect("a folder");
    for (name, bytes) in files {
        fs::write(folder.path().join(name), bytes).expect("a file");
    }
    let output = Command::new(env!("CARGO_BIN_EXE_pellicle"))
        .arg("check")
        .arg("scenario.toml")
        .args(options)
        .current_dir(folder.path())
        .output()
        .expect("the program");
    let text = String::from_utf8_lossy(&output.stderr).into_owned();
    let full = fs::canonicalize(folder.path()).expect("the folder");
    let text = text.replace(&full.display().to_string(), "<folder>");
    (output.status.code().unwrap_or(-1), text)
}

fn snapshot(name: &str, (code, message): (i32, String)) {
    assert!(
        !message.contains("panicked") && (code == 2 || code == 3),
        "{name}: exit code {code}\n{message}"
    );
    insta::with_settings!({ omit_expression => true, prepend_module_to_snapshot => false }, {
        insta::assert_snapshot!(name, format!("exit code {code}\n{message}"));
    });
}

fn faulty(name: &str, scenario: &str) {
    snapshot(name, check(&[("scenario.toml", scenario.as_bytes())], &[]));
}

fn faulty_mesh(name: &str, file: &str, bytes: &[u8], more: &str) {
    let scenario = format!(
        "[surface]\nshape = \"file\"\nfile = \"{file}\"\nunit = \"um\"\n{MEMBRANE}{TIME}{more}"
    );
    snapshot(
        name,
        check(&[("scenario.toml", scenario.as_bytes()), (file, bytes)], &[]),
    );
}

#[test]
fn the_right_scenario_is_accepted() {
    let text = format!("{SURFACE}{MEMBRANE}{TIME}{PHASES}{PROTEIN}");
    let (code, message) = check(&[("scenario.toml", text.as_bytes())], &[]);
    assert_eq!(code, 0, "{message}");
}

#[test]
fn texts_that_are_no_scenario() {
    faulty("no_toml", "[surface\nshape = sphere\n");
    faulty("empty", "");
    faulty("duplicate_key", "seed = 1\nseed = 2\n");
    faulty("deep_nesting", &format!("title = {}", "[".repeat(2000)));
    faulty("unknown_section", &format!("{SURFACE}{MEMBRANE}{TIME}[vollume]\ncondition = \"free\"\n"));
    faulty("section_is_no_table", &format!("surface = \"sphere\"\n{MEMBRANE}{TIME}"));
    snapshot("not_utf8", check(&[("scenario.toml", b"title = \"\xff\"")], &[]));
    snapshot("missing_scenario", check(&[], &[]));
    let huge = vec![b'#'; (10 << 20) + 1];
    snapshot("too_large", check(&[("scenario.toml", &huge)], &[]));
}

#[test]
fn values_that_cannot_be() {
    let membrane = |line: &str| format!("{SURFACE}[membrane]\n{line}\n{TIME}");
    faulty("unknown_key", &membrane("bending_rigidty = \"20 kBT\""));
    faulty("wrong_dimension", &membrane("bending_rigidity = \"20 um\""));
    faulty("unknown_unit", &membrane("bending_rigidity = \"20 kbt\""));
    faulty("unit_missing_in_text", &membrane("bending_rigidity = \"20\""));
    faulty("unit_missing", &membrane("bending_rigidity = 20"));
    faulty("negative_modulus", &membrane("bending_rigidity = \"-20 kBT\""));
    faulty("not_a_number", &membrane("bending_rigidity = \"nan kBT\""));
    faulty("infinite", &membrane("bending_rigidity = \"1e999 kBT\""));
    faulty("decimal_comma", &membrane("bending_rigidity = \"2,5 kBT\""));
    faulty("temperature_zero", &format!("temperature = \"0 K\"\n{SURFACE}{MEMBRANE}{TIME}"));
    faulty("temperature_celsius", &format!("temperature = \"25 degC\"\n{SURFACE}{MEMBRANE}{TIME}"));
    faulty("huge_number", &membrane("bending_rigidity = \"1e300 kBT\"\nshear_viscosity = \"1e-300 N s/m\""));
    faulty("several_faults", "temperature = 298\n[surface]\nshape = \"spere\"\n[membrane]\nbending_rigidity = \"20 s\"\n[time]\nend = \"1 um\"\n");
}

#[test]
fn keys_that_do_not_go_together() {
    let with = |more: &str| format!("{SURFACE}{MEMBRANE}{TIME}{more}");
    faulty("tube_without_period", &format!("[surface]\nshape = \"tube\"\nradius = \"1 um\"\n{MEMBRANE}{TIME}"));
    faulty("key_of_another_shape", &format!("[surface]\nshape = \"sphere\"\nradius = \"1 um\"\nlength = \"3 um\"\n{MEMBRANE}{TIME}"));
    faulty("edge_too_short", &format!("[surface]\nshape = \"sphere\"\nradius = \"50 um\"\nedge_length = \"10 nm\"\n{MEMBRANE}{TIME}"));
    faulty("edge_too_long", &format!("[surface]\nshape = \"sphere\"\nradius = \"1 um\"\nedge_length = \"10 um\"\n{MEMBRANE}{TIME}"));
    faulty("surface_of_astronomical_size", &format!("[surface]\nshape = \"sphere\"\nradius = \"1e6 m\"\n{MEMBRANE}{TIME}"));
    faulty("reservoir_without_tension", &with("[lipids]\ncondition = \"reservoir\"\n"));
    faulty("repulsion_without_pressure", &with("[self_contact]\nresponse = \"repel\"\ndecay_length = \"10 nm\"\n"));
    faulty("repulsion_without_response", &with("[self_contact]\npressure = \"1 kPa\"\n"));
    faulty("fission_and_stop_at_neck", &with("[fission]\nneck_radius = \"50 nm\"\n[stop]\nneck_radius = \"0.1 um\"\n"));
    faulty("volume_and_pressure", &with("[volume]\ncondition = \"fixed\"\nreduced_volume = 0.8\nramp = \"1 s\"\npressure = \"1 Pa\"\n"));
    faulty("volume_without_ramp", &with("[volume]\nreduced_volume = 0.8\n"));
    faulty("volume_beyond_sphere", &with("[volume]\ntarget = \"900 um^3\"\nramp = \"1 s\"\n"));
    faulty("volume_fixed_on_patch", &format!("{DISC}{MEMBRANE}{TIME}[volume]\ncondition = \"fixed\"\n"));
    faulty("domain_without_phases", &with("[composition.domain]\nbending_rigidity = \"40 kBT\"\n"));
    faulty("interface_below_edge", &with(&PHASES.replace("2 um", "0.2 um")));
    faulty("mean_out_of_bounds", &with(&format!("{PHASES}mean = 1.2\n")));
    faulty("noise_out_of_bounds", &with(&format!("{PHASES}mean = 0.1\nnoise = 0.2\n")));
    faulty("protein_without_site_area", &with("[protein]\nattach_rate = \"3 /s\"\ndetach_rate = \"1 /s\"\n"));
    faulty("protein_in_no_domains", &with(&format!("{PROTEIN}binds = \"in domains\"\n")));
    faulty("protein_softens_too_much", &with(&format!("{PROTEIN}stiffening = \"-30 kBT\"\n")));
    faulty("load_off_surface", &with("[[load]]\ncentre = [\"0 um\", \"0 um\", \"50 um\"]\npatch_radius = \"1 um\"\npath = [{ time = \"0 s\", force = [\"0 pN\", \"0 pN\", \"1 pN\"] }]\n"));
    faulty("path_out_of_order", &with("[[load]]\ndirection = [0, 0, 1]\npatch_radius = \"1 um\"\npath = [\n  { time = \"1 s\", force = [\"0 pN\", \"0 pN\", \"1 pN\"] },\n  { time = \"0.5 s\", force = [\"0 pN\", \"0 pN\", \"2 pN\"] },\n]\n"));
    faulty("displacement_without_trap", &with("[[load]]\ndirection = [0, 0, 1]\npatch_radius = \"1 um\"\npath = [{ time = \"0 s\", displacement = [\"0 um\", \"0 um\", \"1 um\"] }]\n"));
    faulty("frame_without_rim", &with("[frame]\nrim = \"clamped\"\n"));
    faulty("steps_out_of_order", &with("first_step = \"1 s\"\nlongest_step = \"1 ms\"\n"));
    faulty("include_missing", &format!("include = \"base.toml\"\n{SURFACE}{MEMBRANE}{TIME}"));
}

#[test]
fn overrides() {
    let text = format!("{SURFACE}{MEMBRANE}{TIME}");
    let set = |name: &str, option: &str| {
        snapshot(name, check(&[("scenario.toml", text.as_bytes())], &["--set", option]));
    };
    set("override_unknown_key", "membrane.bending=20 kBT");
    set("override_wrong_unit", "surface.radius=5 s");
    set("override_without_value", "surface.radius");
}

#[test]
fn meshes() {
    let tetrahedron = obj(&POINTS, &FACES);
    faulty_mesh("mesh_open", "m.obj", obj(&POINTS, &FACES[..3]).as_bytes(), "");
    faulty_mesh("mesh_closed_but_framed", "m.obj", tetrahedron.as_bytes(), "[frame]\nrim = \"clamped\"\n");
    let mut faces = FACES;
    faces[1] = [0, 1, 3];
    faulty_mesh("mesh_flipped_triangle", "m.obj", obj(&POINTS, &faces).as_bytes(), "");
    let mut points = POINTS.to_vec();
    points.push([5.0, 0.0, 0.0]);
    let mut fin = FACES.to_vec();
    fin.push([0, 1, 4]);
    faulty_mesh("mesh_non_manifold_edge", "m.obj", obj(&points, &fin).as_bytes(), "");
    // The middle of an edge as a corner of its own.
    let mut points = POINTS.to_vec();
    points.push([1.0, 0.0, 0.0]);
    let flat = [[0, 4, 2], [4, 1, 2], [0, 3, 1], [0, 2, 3], [1, 3, 2], [0, 1, 4]];
    faulty_mesh("mesh_zero_area", "m.obj", obj(&points, &flat).as_bytes(), "");
    faulty_mesh("mesh_not_finite", "m.obj", tetrahedron.replacen("v 1 1 1", "v nan 1 1", 1).as_bytes(), "");
    faulty_mesh("mesh_index_out_of_range", "m.obj", tetrahedron.replacen("f 1 2 3", "f 1 2 9", 1).as_bytes(), "");
    faulty_mesh("mesh_empty", "m.obj", b"", "");
    faulty_mesh("mesh_truncated", "m.ply", b"ply\nformat ascii 1.0\nelement vertex 3\n", "");
    faulty_mesh("mesh_unknown_format", "m.xyz", b"1 2 3", "");
    faulty_mesh("mesh_no_vtk", "m.vtu", b"<VTKFile>", "");
    faulty_mesh(
        "mesh_two_pieces",
        "m.obj",
        {
            let mut points = POINTS.to_vec();
            points.extend(POINTS.map(|[x, y, z]| [x + 9.0, y, z]));
            let mut faces = FACES.to_vec();
            faces.extend(FACES.map(|face| face.map(|v| v + 4)));
            obj(&points, &faces)
        }
        .as_bytes(),
        "",
    );
    faulty_mesh("mesh_point_data_missing", "m.obj", tetrahedron.as_bytes(), &format!("{}point_data = \"phi\"\n", PHASES.replace("2 um", "5 um")));
    faulty("mesh_missing", &format!("[surface]\nshape = \"file\"\nfile = \"gone.ply\"\nunit = \"um\"\n{MEMBRANE}{TIME}"));
    faulty("mesh_unit_wrong", &format!("[surface]\nshape = \"file\"\nfile = \"gone.ply\"\nunit = \"s\"\n{MEMBRANE}{TIME}"));
}

#[cfg(unix)]
#[test]
fn a_file_without_permission_is_unreadable() {
    use std::os::unix::fs::PermissionsExt;
    let folder = tempfile::tempdir().expect("a folder");
    let path = folder.path().join("scenario.toml");
    fs::write(&path, "").expect("a file");
    fs::set_permissions(&path, fs::Permissions::from_mode(0)).expect("permissions");
    if fs::read(&path).is_ok() {
        // The superuser reads everything.
        return;
    }
    assert_eq!(exit_code(&path), 3);
}

#[test]
fn a_folder_is_no_scenario() {
    let folder = tempfile::tempdir().expect("a folder");
    assert_eq!(exit_code(folder.path()), 3);
}

fn exit_code(path: &Path) -> i32 {
    Command::new(env!("CARGO_BIN_EXE_pellicle"))
        .arg("check")
        .arg(path)
        .output()
        .expect("the program")
        .status
        .code()
        .unwrap_or(-1)
}
