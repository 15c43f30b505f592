//! What the program says to faulty studies, word for word.

use std::fs;
use std::process::Command;

const SCENARIO: &str = "[surface]\nshape = \"sphere\"\nradius = \"5 um\"\nedge_length = \"2 um\"\n\
                        [membrane]\nbending_rigidity = \"20 kBT\"\n[time]\nend = \"1 s\"\n";
const HEAD: &str = "scenario = \"base.toml\"\n";
const AXIS: &str = "[[axis]]\nkey = \"membrane.bending_rigidity\"\nvalues = [\"10 kBT\", \"20 kBT\"]\n";

/// Exit code and message of `pellicle scan study.toml --list` in a folder of its own.
fn list(study: &str) -> (i32, String) {
    let folder = tempfile::tempdir().expect("a folder");
    fs::write(folder.path().join("base.toml"), SCENARIO).expect("a file");
    fs::write(folder.path().join("study.toml"), study).expect("a file");
    let output = Command::new(env!("CARGO_BIN_EXE_pellicle"))
        .args(["scan", "study.toml", "--list"])
        .current_dir(folder.path())
        .output()
        .expect("the program");
    (output.status.code().unwrap_or(-1), String::from_utf8_lossy(&output.stderr).into_owned())
}

fn faulty(name: &str, study: &str) {
    let (code, message) = list(study);
    assert!(!message.contains("mistake of its own") && (code == 2 || code == 3), "{name}: exit code {code}\n{message}");
    insta::with_settings!({ omit_expression => true, prepend_module_to_snapshot => false }, {
        insta::assert_snapshot!(format!("study_{name}"), format!("exit code {code}\n{message}"));
    });
}

#[test]
fn the_right_study_is_accepted() {
    let (code, message) = list(&format!("{HEAD}{AXIS}"));
    assert_eq!(code, 0, "{message}");
}

#[test]
fn the_study_as_a_whole() {
    faulty("no_toml", "scenario = base.toml\n");
    faulty("empty", "");
    faulty("unknown_key", &format!("{HEAD}axes = 3\n{AXIS}"));
    faulty("scenario_missing", AXIS);
    faulty("scenario_not_there", &format!("scenario = \"bsae.toml\"\n{AXIS}"));
    faulty("varies_nothing", HEAD);
    faulty("set_unknown_key", &format!("{HEAD}[set]\ntime.edn = \"5 s\"\n{AXIS}"));
    faulty("set_wrong_unit", &format!("{HEAD}[set]\ntime.end = \"5 um\"\n{AXIS}"));
    faulty("memory_without_unit", &format!("{HEAD}{AXIS}[limits]\nmemory = \"8\"\n"));
}

#[test]
fn axes() {
    let axis = |text: &str| format!("{HEAD}[[axis]]\n{text}");
    faulty("axis_without_key", &axis("values = [1, 2]\n"));
    faulty("axis_unknown_key", &axis("key = \"bending_rigidity\"\nvalues = [\"10 kBT\"]\n"));
    faulty("axis_whole_section", &axis("key = \"volume\"\nvalues = [1]\n"));
    faulty("axis_wrong_unit", &axis("key = \"membrane.bending_rigidity\"\nvalues = [\"10 kBT\", \"20 pN\"]\n"));
    faulty("axis_out_of_bounds", &axis("key = \"surface.reduced_volume\"\nfrom = 0.5\nto = 1.5\ncount = 3\n"));
    faulty("axis_without_values", &axis("key = \"membrane.bending_rigidity\"\ncount = 3\n"));
    faulty("axis_values_and_range", &axis("key = \"membrane.bending_rigidity\"\nvalues = [\"1 kBT\"]\ncount = 3\n"));
    faulty("axis_range_of_words", &axis("key = \"surface.shape\"\nfrom = \"sphere\"\nto = \"torus\"\ncount = 2\n"));
    faulty(
        "axis_logarithm_of_zero",
        &axis("key = \"membrane.bending_rigidity\"\nfrom = \"0 J\"\nto = \"9 kBT\"\ncount = 3\nspacing = \"logarithmic\"\n"),
    );
    faulty("axis_range_without_count", &axis("key = \"membrane.bending_rigidity\"\nfrom = \"1 kBT\"\nto = \"9 kBT\"\n"));
    faulty("axis_wrong_number_of_values", &axis("together = [\"surface.radius\", \"surface.edge_length\"]\nvalues = [[\"5 um\"]]\n"));
    faulty("axis_twice", &format!("{HEAD}{AXIS}{AXIS}"));
    faulty("axis_same_value_twice", &axis("key = \"membrane.bending_rigidity\"\nvalues = [\"20 kBT\", \"20.0 kBT\"]\n"));
    faulty("design_without_axes", &format!("{HEAD}{AXIS}[design]\npoints = 8\n"));
    faulty("too_many_runs", &format!("{HEAD}{AXIS}[[axis]]\nkey = \"time.end\"\nfrom = \"1 s\"\nto = \"2 s\"\ncount = 10000\n[repeats]\ncount = 100\n"));
    faulty("seeds_negative", &format!("{HEAD}{AXIS}[repeats]\nseeds = [1, -2]\n"));
}

#[test]
fn outcomes_and_diagram() {
    let outcome = |when: &str| format!("{HEAD}{AXIS}[[outcome]]\nname = \"budded\"\nwhen = '{when}'\n");
    faulty("outcome_unknown_column", &outcome("neck_radios < \"1 um\""));
    faulty("outcome_unit_missing", &outcome("neck_radius < 0.2"));
    faulty("outcome_wrong_unit", &outcome("neck_radius < \"0.2 pN\""));
    faulty("outcome_no_condition", &outcome("domain_count >="));
    faulty("outcome_bracket", &outcome("(domain_count >= 2"));
    faulty("outcome_reserved_name", &format!("{HEAD}{AXIS}[[outcome]]\nname = \"failed\"\n"));
    faulty("outcome_hides_others", &format!("{HEAD}{AXIS}[[outcome]]\nname = \"a\"\n[[outcome]]\nname = \"b\"\n"));
    faulty("diagram_unknown_axis", &format!("{HEAD}{AXIS}[diagram]\nx = \"rigidity\"\n"));
    faulty("diagram_value_not_there", &format!("{HEAD}{AXIS}[diagram]\nat = {{ \"membrane.bending_rigidity\" = \"30 kBT\" }}\n"));
}
