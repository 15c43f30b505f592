//! `pellicle report`: one page that is whole by itself.

mod common;

use common::{ELLIPSOID, Fallible, Place, assert_code, pellicle};
use std::fs;

/// The tags of a page, opening and closing; a page that is not well-formed is an error.
fn check_tags(page: &str) -> Result<Vec<&str>, String> {
    let mut open: Vec<&str> = Vec::new();
    let mut names = Vec::new();
    let mut rest = page.strip_prefix("<!DOCTYPE html>").ok_or("no document type")?;
    while let Some(start) = rest.find('<') {
        if rest[..start].contains('>') {
            return Err(format!("a stray bracket before {}", &rest[start..rest.len().min(start + 40)]));
        }
        let end = rest[start..].find('>').ok_or("a tag without end")? + start;
        let tag = &rest[start + 1..end];
        if tag.matches('"').count() % 2 == 1 || tag.contains('<') {
            return Err(format!("a broken tag {tag}"));
        }
        let name = tag.trim_matches('/').split_whitespace().next().ok_or("a tag without name")?;
        if tag.starts_with('/') {
            let last = open.pop();
            if last != Some(name) {
                return Err(format!("</{name}> closes {last:?}"));
            }
        } else {
            names.push(name);
            if !tag.ends_with('/') {
                open.push(name);
            }
        }
        rest = &rest[end + 1..];
        if name == "style" && !tag.starts_with('/') {
            // Rules are no markup, and may hold brackets.
            rest = &rest[rest.find("</style>").ok_or("a style without end")?..];
        }
    }
    if open.is_empty() { Ok(names) } else { Err(format!("never closed: {open:?}")) }
}

#[test]
fn a_report_is_whole() -> Fallible {
    let place = Place::new(ELLIPSOID)?;
    let first = place.reference("first <&>")?;
    let output = place.run("second", &["--set", "membrane.bending_rigidity=\"10 kBT\""]).output()?;
    assert_code(&output, 0);
    let out = place.path("report.html");
    let report = pellicle().arg("report").arg(&first).arg(place.path("second")).arg("--out").arg(&out).output()?;
    assert_code(&report, 0);
    let page = fs::read_to_string(&out)?;
    let tags = check_tags(&page)?;
    let count = |name: &str| tags.iter().filter(|tag| **tag == name).count();
    for plot in ["Free energy", "Energies", "Ledger", "Energy balance error", "Area", "Volume", "Reduced volume", "Tension"] {
        assert!(page.contains(&format!("<figcaption>{plot}")), "{plot}");
    }
    for absent in ["Domains", "Mean coverage", "Load force"] {
        assert!(!page.contains(&format!("<figcaption>{absent}")), "{absent}");
    }
    // Both runs overlaid: two lines where a plot has one column.
    let free = page.split("<figcaption>").find(|part| part.starts_with("Free energy")).unwrap_or_default();
    assert_eq!(free.matches("<polyline").count(), 2);
    assert!(count("path") > 1000, "{} triangles", count("path"));
    assert_eq!(count("details"), 2);
    assert!(page.contains("bending_rigidity = &quot;10 kBT&quot;"));
    assert!(page.contains("first &lt;&amp;&gt;"));
    for foreign in ["http:", "https:", "src=", "href=", "url(", "@import", "<script", "NaN", "inf,"] {
        assert!(!page.contains(foreign), "{foreign}");
    }
    Ok(())
}

#[test]
fn a_directory_without_a_run_is_refused() -> Fallible {
    let folder = tempfile::tempdir()?;
    let output = pellicle().arg("report").arg(folder.path()).arg("--out").arg(folder.path().join("x.html")).output()?;
    assert_code(&output, 2);
    assert!(String::from_utf8_lossy(&output.stderr).contains("holds no run"));
    assert!(!folder.path().join("x.html").exists());
    Ok(())
}
