//! A small run through the program itself, and comparisons of what it wrote.
#![allow(dead_code, reason = "each test file uses its part")]

use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Command, Output};

pub type Fallible = Result<(), Box<dyn std::error::Error>>;

/// A spheroid of about 300 vertices relaxing at fixed volume: some 60 steps, about a second.
pub const ELLIPSOID: &str = r#"
title = "Small ellipsoid"
[surface]
shape = "ellipsoid"
semi_axes = ["2 um", "2 um", "3 um"]
edge_length = "0.5 um"
[membrane]
bending_rigidity = "20 kBT"
shear_viscosity = "1e-9 N s/m"
[volume]
condition = "fixed"
[time]
end = "1.2 ms"
[output]
row_every = "0.05 ms"
frame_every = "0.4 ms"
checkpoint_every = "0.05 s"
"#;

/// A run that has been set up in a temporary directory.
pub struct Place {
    folder: tempfile::TempDir,
    pub scenario: PathBuf,
}

impl Place {
    pub fn new(scenario: &str) -> std::io::Result<Self> {
        let folder = tempfile::tempdir()?;
        let path = folder.path().join("small.toml");
        fs::write(&path, scenario)?;
        Ok(Self { folder, scenario: path })
    }

    pub fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    /// `pellicle run SCENARIO --out NAME --threads 1` and more.
    pub fn run(&self, name: &str, more: &[&str]) -> Command {
        let mut command = pellicle();
        command.arg("run").arg(&self.scenario).arg("--out").arg(self.path(name));
        if !more.contains(&"--threads") {
            command.args(["--threads", "1"]);
        }
        command.args(more);
        command
    }

    /// `pellicle resume NAME --threads 1` and more.
    pub fn resume(&self, name: &str, more: &[&str]) -> Command {
        let mut command = pellicle();
        command.arg("resume").arg(self.path(name)).args(["--threads", "1"]).args(more);
        command
    }

    /// A whole run to compare with.
    pub fn reference(&self, name: &str) -> std::io::Result<PathBuf> {
        let output = self.run(name, &[]).output()?;
        assert_code(&output, 0);
        Ok(self.path(name))
    }
}

pub fn pellicle() -> Command {
    Command::new(env!("CARGO_BIN_EXE_pellicle"))
}

pub fn assert_code(output: &Output, code: i32) {
    let text = |bytes: &[u8]| String::from_utf8_lossy(bytes).into_owned();
    assert_eq!(
        output.status.code(),
        Some(code),
        "{}\n{}",
        text(&output.stdout),
        text(&output.stderr)
    );
    assert!(!text(&output.stderr).contains("mistake of its own"), "{}", text(&output.stderr));
}

pub fn summary(folder: &Path) -> Result<serde_json::Value, Box<dyn std::error::Error>> {
    Ok(serde_json::from_slice(&fs::read(folder.join("summary.json"))?)?)
}

/// Names of the files of two runs that must be the same bytes: all but log, lock, summary and checkpoints.
fn results(folder: &Path) -> std::io::Result<Vec<String>> {
    let mut names: Vec<String> = fs::read_dir(folder)?
        .flatten()
        .map(|entry| entry.file_name().to_string_lossy().into_owned())
        .filter(|name| !matches!(name.as_str(), "run.log" | "run.lock" | "summary.json"))
        .filter(|name| !name.starts_with("checkpoint"))
        .collect();
    names.sort();
    Ok(names)
}

/// Assert that two finished runs are the same to the last bit, timings aside.
pub fn assert_same_run(one: &Path, other: &Path) -> Fallible {
    let names = results(one)?;
    assert_eq!(names, results(other)?);
    for name in names {
        let same = fs::read(one.join(&name))? == fs::read(other.join(&name))?;
        assert!(same, "{name} differs between {} and {}", one.display(), other.display());
    }
    let (a, b) = (summary(one)?, summary(other)?);
    for key in ["stopped_by", "end", "steps", "output"] {
        assert_eq!(a[key], b[key], "{key}");
    }
    assert_eq!(a["provenance"]["state_sha256"], b["provenance"]["state_sha256"]);
    Ok(())
}
