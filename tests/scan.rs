//! Studies from the outside: what they expand to, that their results do not depend on how they were made, and that
//! nothing is lost when they die.

mod common;

use common::{ELLIPSOID, Fallible, assert_code, pellicle};
use std::collections::BTreeSet;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Command, Output, Stdio};
use std::time::Duration;

/// Four runs of about 300 vertices and some 30 steps, and two that no mesh can be made for.
const STUDY: &str = r#"
title = "Stiff and soft spheroids"
scenario = "small.toml"
[set]
time.end = "0.4 ms"
[[axis]]
key = "membrane.bending_rigidity"
values = ["10 kBT", "20 kBT"]
[[axis]]
key = "surface.edge_length"
values = ["0.5 um", "0.6 um", "9 um"]
[[outcome]]
name = "far from rest"
when = 'stopped_by == "time" and free_energy > "300 kBT"'
[[outcome]]
name = "nearly at rest"
"#;

/// A temporary directory with the base scenario and a study.
struct Bench {
    folder: tempfile::TempDir,
}

impl Bench {
    fn new(study: &str) -> std::io::Result<Self> {
        let bench = Self { folder: tempfile::tempdir()? };
        fs::write(bench.path("small.toml"), ELLIPSOID)?;
        fs::write(bench.path("study.toml"), study)?;
        Ok(bench)
    }

    fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    /// `pellicle scan STUDY --out NAME` and more.
    fn scan(&self, study: &str, name: &str, more: &[&str]) -> Command {
        let mut command = pellicle();
        command.arg("scan").arg(self.path(study)).arg("--out").arg(self.path(name)).args(more);
        command
    }

    /// `--list` as rows of cells, without its head.
    fn list(&self, study: &str) -> Result<Vec<Vec<String>>, Box<dyn std::error::Error>> {
        let output = self.scan(study, "nowhere", &["--list"]).output()?;
        assert_code(&output, 0);
        let text = String::from_utf8(output.stdout)?;
        Ok(text.lines().skip(1).map(|line| line.split('\t').map(str::to_owned).collect()).collect())
    }
}

fn told(output: &Output) -> String {
    String::from_utf8_lossy(&output.stdout).into_owned() + &String::from_utf8_lossy(&output.stderr)
}

/// Assert that two studies left the same bytes beside their runs.
fn assert_same_results(one: &Path, other: &Path) -> Fallible {
    for name in ["table.csv", "table.parquet", "phase_diagram.svg", "phase_diagram.png", "report.html"] {
        assert!(fs::read(one.join(name))? == fs::read(other.join(name))?, "{name} differs");
    }
    Ok(())
}

fn table(folder: &Path) -> Result<(Vec<String>, Vec<Vec<String>>), Box<dyn std::error::Error>> {
    let mut reader = csv::Reader::from_path(folder.join("table.csv"))?;
    let head = reader.headers()?.iter().map(str::to_owned).collect();
    let rows = reader.records().map(|row| Ok(row?.iter().map(str::to_owned).collect())).collect::<Result<_, csv::Error>>()?;
    Ok((head, rows))
}

#[test]
fn names_follow_from_content_alone() -> Fallible {
    let bench = Bench::new(STUDY)?;
    let ids = |name: &str| -> Result<BTreeSet<String>, Box<dyn std::error::Error>> {
        Ok(bench.list(name)?.into_iter().map(|row| row[0].clone()).collect())
    };
    let first = ids("study.toml")?;
    assert_eq!(first.len(), 6);

    // Another file name, title, order of axes and values, unit; what does not change the course of a run.
    let (head, axes) = STUDY.split_once("[[axis]]").ok_or("axes")?;
    let (rigidity, rest) = axes.split_once("[[axis]]").ok_or("axes")?;
    let (edges, outcomes) = rest.split_once("[[outcome]]").ok_or("outcomes")?;
    let other = format!("{head}output.checkpoint_every = \"7 s\"\n[[axis]]{edges}[[axis]]{rigidity}[[outcome]]{outcomes}")
        .replace("Stiff and soft", "Some")
        .replace("\"0.5 um\", \"0.6 um\"", "\"600 nm\", \"500 nm\"");
    fs::write(bench.path("other.toml"), other)?;
    fs::copy(bench.path("small.toml"), bench.path("copy.toml"))?;
    assert_eq!(ids("other.toml")?, first);

    // Anything else makes other runs.
    fs::write(bench.path("later.toml"), STUDY.replace("0.4 ms", "0.5 ms"))?;
    assert!(ids("later.toml")?.is_disjoint(&first));
    fs::write(bench.path("more.toml"), STUDY.replace("\"20 kBT\"]", "\"20 kBT\", \"30 kBT\"]"))?;
    let more = ids("more.toml")?;
    assert!(more.len() == 9 && more.is_superset(&first));
    Ok(())
}

#[test]
fn axes_expand_in_order() -> Fallible {
    let study = r#"
scenario = "small.toml"
[[axis]]
key = "membrane.shear_viscosity"
from = "1e-9 N s/m"
to = "1e-7 N s/m"
count = 3
spacing = "logarithmic"
[[axis]]
together = ["membrane.bending_rigidity", "surface.edge_length"]
values = [["10 kBT", "0.5 um"], ["20 kBT", "0.6 um"]]
[repeats]
seeds = [4, 5]
"#;
    let bench = Bench::new(study)?;
    let rows = bench.list("study.toml")?;
    assert_eq!(rows.len(), 12);
    let cells = |k: usize| rows[k][2..].join(", ");
    assert_eq!(cells(0), "1e-9 N s/m, 10 kBT, 0.5 um, 4");
    assert_eq!(cells(1), "1e-9 N s/m, 10 kBT, 0.5 um, 5");
    assert_eq!(cells(2), "1e-9 N s/m, 20 kBT, 0.6 um, 4");
    assert_eq!(cells(4), "1e-8 N s/m, 10 kBT, 0.5 um, 4");
    assert_eq!(cells(11), "1e-7 N s/m, 20 kBT, 0.6 um, 5");
    Ok(())
}

#[test]
fn designs_fill_their_axes_evenly() -> Fallible {
    let study = r#"
scenario = "small.toml"
[[axis]]
key = "membrane.bending_rigidity"
from = "10 kBT"
to = "40 kBT"
[[axis]]
key = "membrane.shear_viscosity"
from = "1e-9 N s/m"
to = "1e-7 N s/m"
spacing = "logarithmic"
[design]
points = 16
"#;
    let bench = Bench::new(study)?;
    let rows = bench.list("study.toml")?;
    assert_eq!(rows.len(), 16);
    assert_eq!(rows, bench.list("study.toml")?);
    // A Sobol sequence has one of 16 points in each sixteenth of each axis.
    let number = |text: &str| text.split(' ').next().and_then(|number| number.parse::<f64>().ok()).unwrap_or(f64::NAN);
    let slots = |share: &dyn Fn(&[String]) -> f64| rows.iter().map(|row| (16.0 * share(row)) as i64).collect::<BTreeSet<_>>();
    let all: BTreeSet<i64> = (0..16).collect();
    assert_eq!(slots(&|row| (number(&row[2]) - 10.0) / 30.0), all);
    assert_eq!(slots(&|row| (number(&row[3]).log10() + 9.0) / 2.0), all);
    Ok(())
}

#[test]
fn tasks_of_a_cluster_make_the_same_as_one_program() -> Fallible {
    let bench = Bench::new(STUDY)?;
    let whole = bench.scan("study.toml", "whole", &["--parallel", "2"]).output()?;
    assert_code(&whole, 0);
    let words = told(&whole);
    for part in ["2 far from rest, 2 nearly at rest, 2 failed of 6 runs", "Files:"] {
        assert!(words.contains(part), "{part} is missing from:\n{words}");
    }
    let rows = bench.list("study.toml")?;
    for row in rows.iter().rev() {
        let output = bench.scan("study.toml", "tasks", &["--only", &row[0]]).output()?;
        assert_code(&output, 0);
    }
    let output = bench.scan("study.toml", "tasks", &["--gather"]).output()?;
    assert_code(&output, 0);
    assert_same_results(&bench.path("whole"), &bench.path("tasks"))?;

    // Each run is an ordinary one.
    let (head, cells) = table(&bench.path("whole"))?;
    let column = |name: &str| head.iter().position(|column| column == name).expect("a column");
    assert_eq!(cells.len(), 6);
    for row in cells.iter().filter(|row| row[column("outcome")] != "failed") {
        let summary = common::summary(&bench.path("whole").join("runs").join(&row[0]))?;
        for name in ["free_energy_J", "area_m2", "reduced_volume"] {
            assert_eq!(row[column(name)].parse::<f64>().ok(), summary["end"][name].as_f64(), "{name}");
        }
        assert_eq!(row[column("stopped_by")], "time");
    }
    // Values in SI stand beside those given.
    assert_eq!(cells[0][column("surface.edge_length")], "0.5 um");
    assert_eq!(cells[0][column("surface.edge_length_m")], "5e-7");
    Ok(())
}

#[test]
fn failed_runs_are_listed_with_their_reason() -> Fallible {
    let bench = Bench::new(STUDY)?;
    let output = bench.scan("study.toml", "out", &["--quiet"]).output()?;
    assert_code(&output, 0);
    assert!(told(&output).is_empty(), "{}", told(&output));
    let again = bench.scan("study.toml", "out", &["--retry-failed"]).output()?;
    assert_code(&again, 0);
    assert!(told(&again).contains("4 of them done before"), "{}", told(&again));
    assert!(told(&again).contains("failed: r"), "{}", told(&again));
    let (head, cells) = table(&bench.path("out"))?;
    let failure = head.iter().position(|column| column == "failure").ok_or("a column")?;
    let failed: Vec<&String> = cells.iter().map(|row| &row[failure]).filter(|reason| !reason.is_empty()).collect();
    assert_eq!(failed.len(), 2);
    assert!(failed.iter().all(|reason| reason.contains("edge length")), "{failed:?}");
    // No place on this machine, so that tables are the same everywhere.
    assert!(failed.iter().all(|reason| !reason.contains('/')), "{failed:?}");
    Ok(())
}

#[test]
fn runs_that_need_more_memory_than_there_is_are_not_begun() -> Fallible {
    let bench = Bench::new(STUDY)?;
    let output = bench.scan("study.toml", "out", &["--memory", "1 MB"]).output()?;
    assert_code(&output, 3);
    assert!(told(&output).contains("more than the 0.00 GB"), "{}", told(&output));
    // Such failures are those of the machine: with more memory the runs are done.
    let output = bench.scan("study.toml", "out", &["--memory", "2 GB"]).output()?;
    assert_code(&output, 0);
    let undisturbed = bench.scan("study.toml", "other", &[]).output()?;
    assert_code(&undisturbed, 0);
    assert_same_results(&bench.path("out"), &bench.path("other"))
}

#[test]
fn directories_with_other_things_are_left_alone() -> Fallible {
    let bench = Bench::new(STUDY)?;
    fs::create_dir(bench.path("mine"))?;
    fs::write(bench.path("mine/table.csv"), "mine")?;
    for more in [&[][..], &["--gather"], &["--only", "r"]] {
        assert_code(&bench.scan("study.toml", "mine", more).output()?, 2);
    }
    assert_eq!(fs::read_to_string(bench.path("mine/table.csv"))?, "mine");
    Ok(())
}

/// Children of a process, as the system lists them.
#[cfg(target_os = "linux")]
fn children(process: u32) -> Vec<String> {
    // Each thread has its own.
    let tasks = fs::read_dir(format!("/proc/{process}/task")).into_iter().flatten().flatten();
    let texts = tasks.filter_map(|task| fs::read_to_string(task.path().join("children")).ok());
    texts.flat_map(|text| text.split_whitespace().map(str::to_owned).collect::<Vec<_>>()).collect()
}

#[test]
#[cfg(target_os = "linux")]
fn a_study_killed_three_times_ends_as_one_left_alone() -> Fallible {
    // Long enough to be killed on their way.
    let bench = Bench::new(&STUDY.replace("0.4 ms", "1.2 ms"))?;
    assert_code(&bench.scan("study.toml", "whole", &[]).output()?, 0);
    // Alone, so that runs go on without it; with its runs; by Ctrl-C.
    for (k, signal) in ["-KILL", "-KILL", "-INT"].into_iter().enumerate() {
        let mut scan = bench.scan("study.toml", "killed", &["--parallel", "2"]).stdout(Stdio::null()).spawn()?;
        std::thread::sleep(Duration::from_millis(700 + 300 * k as u64));
        let runs = children(scan.id());
        let mut doomed = vec![scan.id().to_string()];
        doomed.extend(runs.into_iter().filter(|_| k == 1));
        Command::new("kill").arg(signal).args(&doomed).stderr(Stdio::null()).status()?;
        let status = scan.wait()?;
        if signal == "-INT" {
            assert!(matches!(status.code(), Some(0 | 130)), "{status}");
        }
    }
    assert_code(&bench.scan("study.toml", "killed", &[]).output()?, 0);
    assert_same_results(&bench.path("whole"), &bench.path("killed"))?;
    for row in bench.list("study.toml")? {
        let (one, other) = (bench.path("whole").join("runs").join(&row[0]), bench.path("killed").join("runs").join(&row[0]));
        if one.join("summary.json").exists() {
            common::assert_same_run(&one, &other)?;
        }
    }
    Ok(())
}
