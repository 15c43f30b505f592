//! `run --error-bars` from the outside: files, values that are known, and that nothing is lost when it dies.

mod common;

use common::{ELLIPSOID, Fallible, Place, assert_code, pellicle};
use serde_json::Value;
use std::fs;
use std::path::Path;
use std::time::Duration;

/// The ellipsoid, a tenth as long and finer in space, so that levels are in the asymptotic range.
const SHORT: [&str; 4] = ["--set", "time.end=\"0.2 ms\"", "--set", "output.frame_every=\"1 s\""];

fn bars(folder: &Path) -> Result<Value, Box<dyn std::error::Error>> {
    Ok(serde_json::from_slice(&fs::read(folder.join("error_bars.json"))?)?)
}

fn entry<'a>(bars: &'a Value, name: &str) -> Option<&'a Value> {
    bars["numbers"].as_array()?.iter().find(|entry| entry["quantity"] == name)
}

#[test]
fn every_number_gets_an_error_bar() -> Fallible {
    let place = Place::new(ELLIPSOID)?;
    let more = [&SHORT[..], &["--error-bars"]].concat();
    // Killed on the way, it goes on with the same command.
    let mut child = place.run("out", &more).spawn()?;
    std::thread::sleep(Duration::from_millis(900));
    child.kill()?;
    child.wait()?;
    let output = place.run("out", &more).output()?;
    assert_code(&output, 0);
    let told = String::from_utf8_lossy(&output.stdout).into_owned();
    for part in ["observed orders", "free_energy_J", "error_bars.csv"] {
        assert!(told.contains(part), "{part} is missing from:\n{told}");
    }
    let folder = place.path("out");
    for level in ["mesh-2", "mesh-3", "time-2", "time-3"] {
        assert!(folder.join("levels").join(level).join("summary.json").is_file(), "{level}");
    }
    assert_code(&place.run("again", &more).output()?, 0);
    for name in ["error_bars.csv", "error_bars.json"] {
        assert!(fs::read(folder.join(name))? == fs::read(place.path("again").join(name))?, "{name} differs");
    }
    let bars = bars(&folder)?;
    let number = |name: &str, key: &str| entry(&bars, name).and_then(|entry| entry[key].as_f64());
    // The volume of the ellipsoid is 4π/3 · 12 µm³; inscribed triangles miss it in second order.
    let (volume, error) = (number("volume_m3", "value"), number("volume_m3", "uncertainty"));
    let (volume, error) = (volume.ok_or("a volume")? * 1e18, error.ok_or("an error bar")? * 1e18);
    let exact = 16.0 * std::f64::consts::PI;
    assert!((volume - exact).abs() <= error, "{volume} ± {error} instead of {exact}");
    assert!(error < 0.05 * exact, "± {error}");
    assert!(entry(&bars, "vertex_count").is_none(), "a mesh is no result");
    // The page of the run shows them.
    let page = place.path("page.html");
    assert_code(&pellicle().arg("report").arg(&folder).arg("--out").arg(&page).output()?, 0);
    assert!(fs::read_to_string(page)?.contains("<h3>Error bars</h3>"));
    Ok(())
}

#[test]
fn what_cannot_be_refined_is_told() -> Fallible {
    let place = Place::new(ELLIPSOID)?;
    for (what, part) in [("colour", "mesh, time and interface"), ("interface", "no interface that could be refined")] {
        let output = place.run("out", &[&format!("--error-bars={what}")]).output()?;
        assert_code(&output, 2);
        let told = String::from_utf8_lossy(&output.stderr).into_owned();
        assert!(told.contains(part), "{told}");
        assert!(!place.path("out").join("scenario.toml").exists());
    }
    Ok(())
}
