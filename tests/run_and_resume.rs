//! The program from the outside: what a run writes, how it is taken up again, how it refuses.

mod common;

use common::{ELLIPSOID, Fallible, Place, assert_code, assert_same_run, pellicle, summary};
use pellicle_vtk::{Limits, Series, read_surface};
use std::fs;
use std::path::Path;

/// The columns that others rely on.
const COLUMNS: &str = "time_s,step_s,free_energy_J,bending_energy_J,gaussian_energy_J,phase_energy_J,\
protein_energy_J,stretching_energy_J,repulsion_energy_J,external_work_J,dissipated_J,mesh_energy_J,severing_energy_J,energy_balance_error,area_m2,\
volume_m3,reduced_volume,pressure_Pa,tension_mean_N_per_m,tension_min_N_per_m,tension_max_N_per_m,\
speed_max_m_per_s,composition_mean,composition_total_m2,piece_count,domain_count,interface_length_m,coverage_mean,\
bound_area_m2,neck_radius_m,load_force_N,load_extension_m,foppl_von_karman,scriven_love,vertex_count,quality_min,\
edge_length_mean_m";

/// Two phases on a coarse sphere, each step a row.
const PHASES: &str = r#"
[surface]
shape = "sphere"
radius = "2 um"
edge_length = "0.5 um"
[membrane]
bending_rigidity = "20 kBT"
shear_viscosity = "1e-9 N s/m"
[composition]
line_tension = "0.1 pN"
interface_width = "0.7 um"
diffusion_constant = "1 um^2/s"
mean = 0.3
noise = 0.05
[time]
end = "20 ms"
"#;

struct Table {
    header: Vec<String>,
    rows: Vec<Vec<String>>,
}

impl Table {
    fn read(folder: &Path) -> Result<Self, Box<dyn std::error::Error>> {
        let mut reader = csv::Reader::from_path(folder.join("series.csv"))?;
        let header = reader.headers()?.iter().map(str::to_owned).collect();
        let rows = reader
            .records()
            .map(|record| Ok(record?.iter().map(str::to_owned).collect()))
            .collect::<Result<_, csv::Error>>()?;
        Ok(Self { header, rows })
    }

    fn column(&self, name: &str) -> Vec<Option<f64>> {
        let k = self.header.iter().position(|column| column == name).expect("a column");
        self.rows.iter().map(|row| row[k].parse().ok()).collect()
    }
}

#[test]
fn a_run_writes_all_that_is_promised() -> Fallible {
    let place = Place::new(ELLIPSOID)?;
    let output = place.run("out", &[]).output()?;
    assert_code(&output, 0);
    let told = String::from_utf8(output.stdout)?;
    for part in ["Ended: the simulated time of 1.2 ms was reached", "Found:", "series.csv", "Next:  pellicle resume"] {
        assert!(told.contains(part), "{part} is missing from:\n{told}");
    }
    assert!(output.stderr.is_empty(), "{}", String::from_utf8_lossy(&output.stderr));

    let folder = place.path("out");
    let series = Table::read(&folder)?;
    assert_eq!(series.header.join(","), COLUMNS);
    let times: Vec<f64> = series.column("time_s").into_iter().flatten().collect();
    assert_eq!(times.len(), 25);
    for (k, time) in times.iter().enumerate() {
        // Exact but for the change of units, two roundings.
        assert!((time - 5e-5 * k as f64).abs() <= 4.0 * f64::EPSILON * time, "row {k} at {time:e}");
    }
    for absent in ["phase_energy_J", "protein_energy_J", "domain_count", "load_force_N", "gaussian_energy_J"] {
        assert!(series.column(absent).iter().all(Option::is_none), "{absent} is not empty");
    }
    let energy: Vec<f64> = series.column("free_energy_J").into_iter().flatten().collect();
    // The solver accepts rises by rounding and remapping up to 1e-7 per step.
    assert!(energy.windows(2).all(|pair| pair[1] <= pair[0] * (1.0 + 1e-6)), "the free energy rose");

    let summary = summary(&folder)?;
    assert_eq!(summary["format"], 1);
    assert_eq!(summary["stopped_by"], "time");
    for (k, column) in series.header.iter().enumerate() {
        let cell = series.rows.last().map(|row| row[k].parse::<f64>().ok()).expect("rows");
        assert_eq!(summary["end"][column].as_f64(), cell, "{column}");
    }
    let accepted = summary["steps"]["accepted"].as_u64().expect("a count");
    let bounded: u64 = summary["steps"]["bounded_by"]
        .as_object()
        .expect("counts")
        .values()
        .filter_map(serde_json::Value::as_u64)
        .sum();
    assert_eq!(accepted, bounded, "every step says what bounded it");

    let frames = Series::open(folder.join("fields.pvd"), &Limits::default())?;
    assert_eq!(frames.entries().len(), 4);
    for entry in frames.entries() {
        let surface = read_surface(&frames.frame_path(&entry.file_name), &Limits::default())?;
        assert_eq!(surface.time, Some(entry.time));
        let largest = surface.points.iter().flatten().fold(0.0, |a: f64, b| a.max(b.abs()));
        assert!((1.5..3.5).contains(&largest), "coordinates are in micrometres, not {largest}");
        for name in ["mean_curvature [1/um]", "tension [mN/m]", "velocity [um/s]", "bending_density [kBT/um2]"] {
            assert!(surface.point_array(name).is_some(), "{name}");
        }
        assert!(surface.point_array("composition").is_none());
    }
    // What was run can be run again from what it left.
    let again = pellicle().arg("check").arg(folder.join("scenario.toml")).output()?;
    assert_code(&again, 0);
    for file in ["run.log", "checkpoint"] {
        assert!(folder.join(file).metadata()?.len() > 0, "{file}");
    }
    Ok(())
}

#[test]
fn phases_fill_their_columns_and_fields() -> Fallible {
    let place = Place::new(PHASES)?;
    let folder = place.reference("out")?;
    let series = Table::read(&folder)?;
    for column in ["phase_energy_J", "composition_mean", "domain_count", "interface_length_m"] {
        assert!(series.column(column).iter().all(Option::is_some), "{column} is empty");
    }
    let total: Vec<f64> = series.column("composition_total_m2").into_iter().flatten().collect();
    // Conserved by construction, up to rounding over tens of steps.
    assert!(total.iter().all(|t| (t / total[0] - 1.0).abs() < 1e-11), "composition is not conserved");
    let last = Series::open(folder.join("fields.pvd"), &Limits::default())?;
    let last = last.entries().last().map(|entry| entry.file_name.clone()).expect("a frame");
    let surface = read_surface(&folder.join(last), &Limits::default())?;
    for name in ["composition", "chemical_potential"] {
        assert!(surface.point_array(name).is_some(), "{name}");
    }
    Ok(())
}

#[test]
fn results_do_not_depend_on_the_number_of_threads() -> Fallible {
    for scenario in [ELLIPSOID, PHASES] {
        let place = Place::new(scenario)?;
        let one = place.reference("one")?;
        assert_code(&place.run("two", &["--threads", "2"]).output()?, 0);
        assert_same_run(&one, &place.path("two"))?;
    }
    Ok(())
}

#[test]
fn a_finished_run_can_be_watched_for_longer() -> Fallible {
    let place = Place::new(ELLIPSOID)?;
    assert_code(&place.run("out", &["--set", "time.end=0.6 ms"]).output()?, 0);
    let folder = place.path("out");
    let before = fs::read(folder.join("series.csv"))?;

    let again = place.resume("out", &[]).output()?;
    assert_code(&again, 0);
    assert_eq!(fs::read(folder.join("series.csv"))?, before, "nothing was left to do");

    let late = place.resume("out", &["--until", "0.3 ms"]).output()?;
    assert_code(&late, 2);

    assert_code(&place.resume("out", &["--until", "1 ms"]).output()?, 0);
    let after = fs::read(folder.join("series.csv"))?;
    assert!(after.starts_with(&before) && after.len() > before.len());
    assert_eq!(Table::read(&folder)?.rows.len(), 21);
    // 0, 0.4, the first end at 0.6, 0.8, and the second end at 1 ms.
    assert_eq!(summary(&folder)?["output"]["frames"], 5);
    Ok(())
}

#[test]
fn an_earlier_run_is_not_overwritten_by_mistake() -> Fallible {
    let place = Place::new(ELLIPSOID)?;
    let short = ["--set", "time.end=0.25 ms"];
    assert_code(&place.run("out", &short).output()?, 0);
    let folder = place.path("out");
    fs::write(folder.join("notes.txt"), "mine")?;
    let before = fs::read(folder.join("checkpoint"))?;
    let refused = place.run("out", &short).output()?;
    assert_code(&refused, 2);
    assert!(String::from_utf8(refused.stderr)?.contains("--force"));
    assert_eq!(fs::read(folder.join("checkpoint"))?, before);

    assert_code(&place.run("out", &["--set", "time.end=0.15 ms", "--force"]).output()?, 0);
    assert_eq!(Table::read(&folder)?.rows.len(), 4);
    assert_eq!(fs::read_to_string(folder.join("notes.txt"))?, "mine");
    Ok(())
}

#[test]
fn numerical_trouble_is_told_in_words_and_leaves_whole_files() -> Fallible {
    let place = Place::new(ELLIPSOID)?;
    // First steps far too long for the accuracy, and no room to shorten them.
    let output = place
        .run("out", &["--set", "time.first_step=4 ms", "--set", "time.shortest_step=3 ms", "--set", "time.tolerance=1e-6"])
        .output()?;
    assert_code(&output, 1);
    let told = String::from_utf8(output.stderr)?;
    assert!(told.contains("could not go on at"), "{told}");
    let folder = place.path("out");
    assert_eq!(summary(&folder)?["stopped_by"], "trouble");
    assert!(!Table::read(&folder)?.rows.is_empty());
    Ok(())
}

#[test]
fn progress_for_programs_is_json_lines() -> Fallible {
    let place = Place::new(ELLIPSOID)?;
    let output = place.run("out", &["--progress", "json"]).output()?;
    assert_code(&output, 0);
    let lines: Vec<serde_json::Value> = String::from_utf8(output.stdout)?
        .lines()
        .map(serde_json::from_str)
        .collect::<Result<_, _>>()?;
    assert_eq!(lines.first().map(|line| &line["event"]), Some(&"started".into()));
    assert!(lines.iter().any(|line| line["event"] == "progress" && line["time_s"].is_number()));
    let last = lines.last().expect("lines");
    assert_eq!((&last["event"], &last["exit_code"]), (&"ended".into(), &0.into()));
    Ok(())
}

#[test]
fn mistakes_have_their_exit_codes() -> Fallible {
    let place = Place::new(ELLIPSOID)?;
    let code = |arguments: &[&str]| pellicle().args(arguments).output();
    assert_code(&code(&["--help"])?, 0);
    assert_code(&code(&["completions", "bash"])?, 0);
    assert_code(&code(&["schema"])?, 0);
    assert_code(&code(&["fly"])?, 2);
    assert_code(&code(&["run"])?, 2);
    assert_code(&place.run("out", &["--set", "membrane.bending_rigidity=-1 kBT"]).output()?, 2);
    assert_code(&place.run("out", &["--threads", "0"]).output()?, 2);
    assert!(!place.path("out").exists(), "a run that cannot be leaves nothing behind");
    assert_code(&place.resume("nowhere", &[]).output()?, 2);
    fs::create_dir(place.path("empty"))?;
    assert_code(&place.resume("empty", &[]).output()?, 3);
    assert_eq!(fs::read_dir(place.path("empty"))?.count(), 0);
    assert_code(&place.resume("empty", &["--until", "soon"]).output()?, 2);
    let missing = place.path("missing.toml");
    assert_code(&code(&["check", &missing.to_string_lossy()])?, 3);
    Ok(())
}
