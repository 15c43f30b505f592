//! The reader on files that VTK 9.7 wrote (`tests/data`, made by
//! `tests/python/make_vtk_fixtures.py`), on hand-made files, and on limits. The check against
//! VTK itself over all variants is `tests/python/test_vtk_files.py`. Exact; no tolerances.

use pellicle_vtk::{Limits, ReadSurface, VtkError, parse_surface, read_surface};
use std::fs;
use std::path::{Path, PathBuf};

fn fixtures() -> Vec<PathBuf> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data");
    let mut paths: Vec<PathBuf> = fs::read_dir(folder)
        .unwrap()
        .map(|entry| entry.unwrap().path())
        .collect();
    paths.sort();
    assert_eq!(paths.len(), 15);
    paths
}

fn parse(text: &str) -> Result<ReadSurface, VtkError> {
    parse_surface(text.as_bytes(), &Limits::default())
}

#[test]
fn files_of_vtk_are_read() {
    for path in fixtures() {
        let surface = read_surface(&path, &Limits::default()).unwrap();
        let name = path.display();
        assert_eq!(surface.points.len(), 6, "{name}");
        assert_eq!(surface.points[3], [0.0, -1.0, 0.0], "{name}");
        assert_eq!(surface.triangles.len(), 8, "{name}");
        assert_eq!(surface.triangles[2], [1, 3, 4], "{name}");
        let volume: f64 = surface
            .triangles
            .iter()
            .map(|corners| corners.map(|i| surface.points[i as usize]))
            .map(|[a, b, c]| {
                a[0] * (b[1] * c[2] - b[2] * c[1])
                    + a[1] * (b[2] * c[0] - b[0] * c[2])
                    + a[2] * (b[0] * c[1] - b[1] * c[0])
            })
            .sum();
        // Six times the volume of the octahedron, 4/3: exact, and positive with outward normals.
        assert_eq!(volume, 8.0, "{name}");
        assert_eq!(surface.time, Some(0.5), "{name}");
        let height = surface.point_array("height [um]").unwrap();
        assert_eq!(height.values, [0.0, 0.0, 0.0, 0.0, 1.0, -1.0], "{name}");
        let twice = surface.point_array("twice").unwrap();
        assert_eq!((twice.components, twice.values.len()), (3, 18), "{name}");
        assert_eq!(twice.values[10], -2.0, "{name}");
        let number = surface.point_array("number").unwrap();
        assert_eq!(number.values, [0.0, 1.0, 2.0, 3.0, 4.0, 5.0], "{name}");
        assert_eq!(surface.point_data.len(), 3, "{name}");
        assert!(surface.skipped_arrays.is_empty(), "{name}");
    }
}

#[test]
fn limits_hold_for_every_kind_of_file() {
    let limits = Limits::default();
    for path in fixtures() {
        let bytes = fs::read(&path).unwrap();
        let exact = Limits {
            max_file_bytes: bytes.len() as u64,
            max_points: 6,
            max_cells: 8,
            ..limits
        };
        parse_surface(&bytes, &exact).unwrap();
        for tight in [
            Limits {
                max_file_bytes: exact.max_file_bytes - 1,
                ..exact
            },
            Limits {
                max_points: 5,
                ..exact
            },
            Limits {
                max_cells: 7,
                ..exact
            },
            Limits {
                max_decoded_bytes: 500,
                ..exact
            },
        ] {
            let error = parse_surface(&bytes, &tight).unwrap_err();
            let name = path.display();
            assert!(
                matches!(error, VtkError::LimitExceeded { .. }),
                "{name}: {error}"
            );
        }
        let on_disk = Limits {
            max_file_bytes: 10,
            ..limits
        };
        assert!(read_surface(&path, &on_disk).is_err());
    }
}

#[test]
fn cut_files_are_refused() {
    for path in fixtures() {
        let bytes = fs::read(&path).unwrap();
        // Up to the last array needed; what follows the points and cells may be optional.
        for end in 0..bytes.len() / 4 {
            assert!(
                parse_surface(&bytes[..end], &Limits::default()).is_err(),
                "{} cut at {end}",
                path.display()
            );
        }
    }
}

const HEAD: &str = "# vtk DataFile Version 3.0\ntitle\nASCII\nDATASET POLYDATA\n";
const SQUARE: &str = "POINTS 4 float\n0 0 0 1 0 0 1 1 0 0 1 0\n";

#[test]
fn legacy_files_of_other_programs_are_read() {
    // Old version, Windows line ends, lower-case keywords, a table of colours, colours.
    let text = format!(
        "{HEAD}{SQUARE}POLYGONS 2 9\n3 0 1 2\n4 0 1 2 3\nPOINT_DATA 4\n\
         SCALARS height float\nLOOKUP_TABLE own\n1 2 3 nan\n\
         LOOKUP_TABLE own 2\n0 0 0 1 1 1 1 1\nCOLOR_SCALARS colour 1\n0 0.5 0.5 1\n\
         NORMALS n double\n0 0 1 0 0 1 0 0 1 0 0 1\n"
    );
    for text in [
        text.clone(),
        text.replace('\n', "\r\n"),
        text.replace("POLYGONS", "polygons")
            .replace("SCALARS", "scalars"),
        text.replace("Version 3.0", "Version 1.0"),
    ] {
        let surface = parse(&text).unwrap();
        assert_eq!(surface.points.len(), 4);
        assert_eq!(surface.triangles, [[0, 1, 2], [0, 1, 2], [0, 2, 3]]);
        assert!(surface.point_array("height").unwrap().values[3].is_nan());
        assert_eq!(surface.point_array("colour").unwrap().values[2], 0.5);
        assert_eq!(surface.point_array("n").unwrap().components, 3);
        assert_eq!(surface.point_data.len(), 3);
    }
}

#[test]
fn broken_legacy_files_are_refused() {
    let polygon = "POLYGONS 1 5\n4 0 1 2 3\n";
    for rest in [
        String::new(),
        "POINTS 4 float\n0 0 0 1 0 0 1 1 0 0 1\n".into(),
        "POINTS 4 float\n0 0 0 1 0 0 1 1 0 0 1 inf\n".into(),
        "POINTS 4 quaternion\n0 0 0 1 0 0 1 1 0 0 1 0\n".into(),
        "POINTS -4 float\n".into(),
        format!("{SQUARE}POLYGONS 1 5\n4 0 1 2 4\n"),
        format!("{SQUARE}POLYGONS 1 5\n4 0 1 2 -1\n"),
        format!("{SQUARE}POLYGONS 1 5\n5 0 1 2 3\n"),
        format!("{SQUARE}POLYGONS 2 5\n4 0 1 2 3\n"),
        format!("{SQUARE}POLYGONS 1 3\n2 0 1\n"),
        format!("{SQUARE}LINES 1 3\n2 0 1\n"),
        format!("{SQUARE}{polygon}POINT_DATA 3\nSCALARS s float\nLOOKUP_TABLE default\n1 2 3\n"),
        format!("{SQUARE}{polygon}POINT_DATA 4\nFIELD f 1\ns 1 3 float\n1 2 3\n"),
        format!("{SQUARE}{polygon}POINT_DATA 4\nFIELD f 9\ns 1 4 float\n1 2 3 4\n"),
        format!("{SQUARE}{polygon}WISHES 3\n"),
        format!("{SQUARE}{polygon}SCALARS s float\nLOOKUP_TABLE default\n1 2 3 4\n"),
    ] {
        assert!(parse(&format!("{HEAD}{rest}")).is_err(), "{rest}");
    }
    parse(&format!("{HEAD}{SQUARE}{polygon}")).unwrap();
    for head in [
        HEAD.replace("3.0", "6.0"),
        HEAD.replace("ASCII", "UTF8"),
        HEAD.replace("POLYDATA", "STRUCTURED_GRID"),
        HEAD.replace("DATASET ", ""),
    ] {
        assert!(parse(&format!("{head}{SQUARE}")).is_err(), "{head}");
    }
}

/// A square as VTU; the arguments replace parts of it.
fn square(points: &str, connectivity: &str, offsets: &str, types: &str) -> String {
    format!(
        r#"<VTKFile type="UnstructuredGrid"><UnstructuredGrid>
<Piece NumberOfPoints="4" NumberOfCells="2"><PointData/><Points>
<DataArray type="Float32" NumberOfComponents="3" format="ascii">{points}</DataArray></Points><Cells>
<DataArray type="Int32" Name="connectivity" format="ascii">{connectivity}</DataArray>
<DataArray type="Int32" Name="offsets" format="ascii">{offsets}</DataArray>
<DataArray type="UInt8" Name="types" format="ascii">{types}</DataArray>
</Cells></Piece></UnstructuredGrid></VTKFile>"#
    )
}

#[test]
fn broken_xml_files_are_refused() {
    let points = "0 0 0 1 0 0 1 1 0 0 1 0";
    let good = square(points, "0 1 2 0 2 3", "3 6", "5 5");
    assert_eq!(parse(&good).unwrap().triangles, [[0, 1, 2], [0, 2, 3]]);
    let polygons = square(points, "0 1 2 0 1 2 3", "3 7", "7 9");
    assert_eq!(parse(&polygons).unwrap().triangles.len(), 3);
    for text in [
        square("0 0 0 1 0 0 1 1 0 0 1", "0 1 2 0 2 3", "3 6", "5 5"),
        square("0 0 0 1 0 0 1 1 0 0 1 0 0", "0 1 2 0 2 3", "3 6", "5 5"),
        square("0 0 0 1 0 0 1 1 0 0 1 nan", "0 1 2 0 2 3", "3 6", "5 5"),
        square("0 0 0 1 0 0 1 1 0 0 1 <b/>0", "0 1 2 0 2 3", "3 6", "5 5"),
        square("0 0 0 1 0 0 1 1 0 0 1 &#48;", "0 1 2 0 2 3", "3 6", "5 5"),
        square(points, "0 1 2 0 2 4", "3 6", "5 5"),
        square(points, "0 1 2 0 2 -1", "3 6", "5 5"),
        square(points, "0 1 2 0 2", "3 6", "5 5"),
        square(points, "0 1 2 0 2 3", "6 3", "5 5"),
        square(points, "0 1 2 0 2 3", "3 5", "5 5"),
        square(points, "0 1 2 0 2 3", "3", "5 5"),
        square(points, "0 1 2 0 2 3", "3 6", "5 3"),
        square(points, "0 1 2 0 2 3", "3 6", "5 9"),
        square(points, "0 1 2 0 2 3", "3 6", "5"),
        square(points, "0 1 2 0 2 3", "3 18446744073709551615", "5 5"),
        good.replace("\"4\"", "\"-4\""),
        good.replace("NumberOfPoints=\"4\"", ""),
        good.replace("Name=\"types\"", "Name=\"kinds\""),
        good.replace("Components=\"3\"", "Components=\"0\""),
        good.replace("Components=\"3\"", "Components=\"18446744073709551615\""),
        good.replace("Float32", "Bit"),
        good.replace("\"ascii\"", "\"binary\""),
        good.replace("\"ascii\"", "\"appended\" offset=\"0\""),
        good.replace(
            "</Piece>",
            "</Piece><Piece NumberOfPoints=\"0\" NumberOfCells=\"0\"/>",
        ),
        good.replace(
            "<VTKFile ",
            "<VTKFile compressor=\"vtkOtherDataCompressor\" ",
        ),
        good.replace("<VTKFile ", "<VTKFile byte_order=\"Middle\" "),
        good.replace("<VTKFile ", "<VTKFile header_type=\"UInt16\" "),
        good.replace("VTKFile", "OtherFile"),
        good.replace("</VTKFile>", ""),
        "<VTKFile type=\"PolyData\"/>".into(),
        "<a>".repeat(100_000),
    ] {
        assert!(parse(&text).is_err(), "{text:.400}");
    }
}

#[test]
fn errors_name_the_file_and_the_mend() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("mesh.vtu");
    fs::write(
        &path,
        square("0 0 0 1 0 0 1 1 0 0 1 0", "0 1 2 0 2 3", "3 6", "5 10"),
    )
    .unwrap();
    let message = read_surface(&path, &Limits::default())
        .unwrap_err()
        .to_string();
    assert!(message.contains("mesh.vtu"), "{message}");
    assert!(message.contains("cell 1 is a tetrahedron"), "{message}");
    assert!(message.contains("extract the surface"), "{message}");
    // A folder is no file, and opening a device or pipe might never end.
    assert!(read_surface(folder.path(), &Limits::default()).is_err());
}
