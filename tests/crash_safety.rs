//! Whatever ends a run - a kill, Ctrl-C, a full disc, a damaged checkpoint - nothing is lost, doubled or wrong.
#![cfg(unix)]

mod common;

use common::{ELLIPSOID, Fallible, Place, assert_code, assert_same_run, summary};
use std::fs;
use std::path::Path;
use std::process::{Child, Command, Stdio};
use std::time::{Duration, Instant};

fn start(command: &mut Command) -> std::io::Result<Child> {
    command.stdout(Stdio::null()).stderr(Stdio::null()).spawn()
}

/// Wait until a series has so many rows, or the program has ended.
fn wait_for_rows(folder: &Path, rows: usize, child: &mut Child) -> std::io::Result<()> {
    let begun = Instant::now();
    while begun.elapsed() < Duration::from_secs(60) {
        let text = fs::read(folder.join("series.csv")).unwrap_or_default();
        if text.iter().filter(|byte| **byte == b'\n').count() > rows || child.try_wait()?.is_some() {
            return Ok(());
        }
        std::thread::sleep(Duration::from_millis(2));
    }
    Ok(())
}

fn signal(child: &Child, name: &str) -> std::io::Result<()> {
    Command::new("kill").args([name, &child.id().to_string()]).status().map(drop)
}

#[test]
fn killed_runs_go_on_bit_for_bit() -> Fallible {
    let place = Place::new(ELLIPSOID)?;
    let reference = place.reference("reference")?;
    let folder = place.path("killed");
    let mut child = start(&mut place.run("killed", &[]))?;
    for rows in [4, 11, 18] {
        wait_for_rows(&folder, rows, &mut child)?;
        child.kill()?;
        child.wait()?;
        child = start(&mut place.resume("killed", &[]))?;
    }
    assert!(child.wait()?.success());
    assert_eq!(summary(&folder)?["provenance"]["resumed"], 3);
    assert_same_run(&reference, &folder)
}

#[test]
fn interrupted_runs_say_how_to_go_on() -> Fallible {
    let place = Place::new(ELLIPSOID)?;
    let reference = place.reference("reference")?;
    for name in ["-INT", "-TERM"] {
        let out = format!("stopped{name}");
        let mut child = place.run(&out, &[]).stdout(Stdio::piped()).stderr(Stdio::piped()).spawn()?;
        wait_for_rows(&place.path(&out), 8, &mut child)?;
        signal(&child, name)?;
        let output = child.wait_with_output()?;
        assert_code(&output, 130);
        assert!(String::from_utf8(output.stdout)?.contains("Next:  pellicle resume"));
        assert_eq!(summary(&place.path(&out))?["stopped_by"], "interrupted");
        assert_code(&place.resume(&out, &[]).output()?, 0);
        assert_same_run(&reference, &place.path(&out))?;
    }
    Ok(())
}

#[test]
fn a_damaged_checkpoint_falls_back_to_the_one_before() -> Fallible {
    let place = Place::new(ELLIPSOID)?;
    let reference = place.reference("reference")?;
    let folder = place.path("damaged");
    let mut child = start(&mut place.run("damaged", &[]))?;
    wait_for_rows(&folder, 15, &mut child)?;
    child.kill()?;
    child.wait()?;
    assert!(folder.join("checkpoint.previous").exists());
    let mut bytes = fs::read(folder.join("checkpoint"))?;
    let middle = bytes.len() / 2;
    bytes[middle] ^= 1;
    fs::write(folder.join("checkpoint"), &bytes)?;
    let output = place.resume("damaged", &[]).output()?;
    assert_code(&output, 0);
    let told = String::from_utf8(output.stderr)?;
    assert!(told.contains("damaged") && told.contains("the one before it is used"), "{told}");
    assert_same_run(&reference, &folder)?;

    fs::write(folder.join("checkpoint"), "nonsense")?;
    fs::write(folder.join("checkpoint.previous"), "nonsense")?;
    assert_code(&place.resume("damaged", &[]).output()?, 3);
    Ok(())
}

#[test]
fn two_programs_cannot_share_a_directory() -> Fallible {
    let place = Place::new(ELLIPSOID)?;
    let folder = place.path("shared");
    let mut child = start(&mut place.run("shared", &[]))?;
    wait_for_rows(&folder, 5, &mut child)?;
    let second = place.resume("shared", &[]).output()?;
    let third = place.run("shared", &["--force"]).output()?;
    assert!(child.wait()?.success());
    for output in [second, third] {
        assert_code(&output, 3);
        assert!(String::from_utf8(output.stderr)?.contains("another run is at work"));
    }
    Ok(())
}

#[test]
fn a_full_disc_loses_nothing() -> Fallible {
    let place = Place::new(ELLIPSOID)?;
    let reference = place.reference("reference")?;
    // A limit on the size of files (8 blocks of 1 KiB) stands for the disc: the first frame is larger.
    // With 64 blocks only the series is, far into the run: rows every five microseconds.
    for (blocks, more) in [("8", &[] as &[&str]), ("64", &["--set", "output.row_every=5 us"])] {
        let out = format!("full{blocks}");
        let run = place.run(&out, more);
        let mut limited = Command::new("bash");
        limited.args(["-c", "ulimit -f \"$1\"; shift; exec \"$@\"", "limited", blocks]);
        limited.arg(run.get_program()).args(run.get_args());
        let output = limited.output()?;
        assert_code(&output, 3);
        let told = String::from_utf8(output.stderr)?;
        assert!(told.contains("cannot write") && told.contains("raise the limit"), "{told}");
        let series = fs::read(place.path(&out).join("series.csv"))?;
        assert!(series.ends_with(b"\r\n"), "half a row was left");
        if blocks == "64" {
            assert_code(&place.resume(&out, &[]).output()?, 0);
            let whole = fs::read(place.path(&out).join("series.csv"))?;
            assert!(whole.starts_with(&series) && whole.len() > series.len());
        } else {
            let mut again = place.run(&out, &["--force"]);
            assert_code(&again.output()?, 0);
            assert_same_run(&reference, &place.path(&out))?;
        }
    }
    Ok(())
}

#[test]
fn places_that_cannot_be_written_are_named() -> Fallible {
    let place = Place::new(ELLIPSOID)?;
    fs::write(place.path("file"), "")?;
    for (out, code) in [("file/below", 3), ("file", 2)] {
        let output = place.run(out, &[]).output()?;
        assert_code(&output, code);
        let told = String::from_utf8(output.stderr)?;
        assert!(told.contains("file"), "{told}");
    }
    Ok(())
}

#[test]
fn a_series_that_was_cut_is_not_continued() -> Fallible {
    let place = Place::new(ELLIPSOID)?;
    assert_code(&place.run("out", &["--set", "time.end=0.3 ms"]).output()?, 0);
    let path = place.path("out").join("series.csv");
    let text = fs::read(&path)?;
    fs::write(&path, &text[..text.len() - 7])?;
    let output = place.resume("out", &["--until", "0.5 ms"]).output()?;
    assert_code(&output, 3);
    assert!(String::from_utf8(output.stderr)?.contains("series.csv"));
    Ok(())
}
