//! What is written reads back bit by bit; what cannot be stored is refused before writing.
//! The checks are exact, so there are no tolerances; common practice, no source.

use pellicle_vtk::{
    Array, Compression, FieldText, Frame, Limits, Precision, VtkError, read_surface, write_vtu,
};
use std::fs;

const COMPRESSIONS: [Compression; 3] = [Compression::None, Compression::Lz4, Compression::Zlib];

/// A wavy sheet large enough for several blocks of 256 KiB in every array of doubles.
fn sheet(columns: usize) -> (Vec<[f64; 3]>, Vec<[u32; 3]>) {
    let points = (0..columns * columns)
        .map(|k| {
            let (x, y) = ((k % columns) as f64, (k / columns) as f64);
            [x, y, (0.37 * x).sin() * (0.21 * y).cos()]
        })
        .collect();
    let triangles = (0..(columns - 1) * columns)
        .filter(|k| (k + 1) % columns != 0)
        .flat_map(|k| {
            let (a, b) = (k as u32, (k + columns) as u32);
            [[a, a + 1, b + 1], [a, b + 1, b]]
        })
        .collect();
    (points, triangles)
}

#[test]
fn values_survive_every_compression_and_precision() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("frame.vtu");
    let (points, triangles) = sheet(190);
    let heights: Vec<f64> = points.iter().map(|p| p[2]).collect();
    let numbers: Vec<i64> = (0..points.len() as i64).map(|k| k - 7).collect();
    let quality = vec![0.5; triangles.len()];
    for compression in COMPRESSIONS {
        for precision in [Precision::Single, Precision::Double] {
            let frame = Frame {
                points: &points,
                triangles: &triangles,
                time: Some(1.25e-7),
                point_data: vec![
                    Array::scalar("height [um]", &heights),
                    Array::vector("position & more", &points),
                    Array::integer("number", &numbers),
                ],
                cell_data: vec![Array::scalar("quality", &quality)],
                field_data: vec![FieldText {
                    name: "program".into(),
                    text: "πρόγραμμα 1.0".into(),
                }],
                precision,
            };
            write_vtu(&path, &frame, compression).unwrap();
            let read = read_surface(&path, &Limits::default()).unwrap();

            assert_eq!(read.points, points);
            assert_eq!(read.triangles, triangles);
            assert_eq!(read.time, Some(1.25e-7));
            let stored = |x: f64| match precision {
                Precision::Single => f64::from(x as f32),
                Precision::Double => x,
            };
            let height = read.point_array("height [um]").unwrap();
            assert!(
                height
                    .values
                    .iter()
                    .zip(&heights)
                    .all(|(&a, &b)| a == stored(b))
            );
            let position = read.point_array("position & more").unwrap();
            assert_eq!(position.components, 3);
            let flat = points.as_flattened();
            assert!(
                position
                    .values
                    .iter()
                    .zip(flat)
                    .all(|(&a, &b)| a == stored(b))
            );
            assert_eq!(position.values.len(), flat.len());
            let number = read.point_array("number").unwrap();
            assert!(
                number
                    .values
                    .iter()
                    .zip(&numbers)
                    .all(|(&a, &b)| a == b as f64)
            );
            assert_eq!(read.point_data.len(), 3);
        }
    }
}

#[test]
fn sizes_next_to_a_block_border_survive() {
    // 256 KiB hold 32768 doubles; borders of whole blocks are where the header changes.
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("frame.vtu");
    for count in [1, 32767, 32768, 32769, 65536] {
        let values: Vec<f64> = (0..count).map(f64::from).collect();
        let points = vec![[0.0; 3]; values.len()];
        for compression in COMPRESSIONS {
            let frame = Frame {
                points: &points,
                point_data: vec![Array::scalar("value", &values)],
                precision: Precision::Double,
                ..Frame::default()
            };
            write_vtu(&path, &frame, compression).unwrap();
            let read = read_surface(&path, &Limits::default()).unwrap();
            assert_eq!(read.point_data[0].values, values);
        }
    }
}

#[test]
fn an_empty_frame_survives() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("frame.vtu");
    for compression in COMPRESSIONS {
        write_vtu(&path, &Frame::default(), compression).unwrap();
        let read = read_surface(&path, &Limits::default()).unwrap();
        assert!(read.points.is_empty() && read.triangles.is_empty() && read.time.is_none());
    }
}

#[test]
fn not_a_number_marks_missing_values() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("frame.vtu");
    let values = [f64::NAN, f64::INFINITY, -0.0];
    let points = [[0.0; 3]; 3];
    let frame = Frame {
        points: &points,
        point_data: vec![Array::scalar("value", &values)],
        ..Frame::default()
    };
    write_vtu(&path, &frame, Compression::Zlib).unwrap();
    let read = read_surface(&path, &Limits::default()).unwrap();
    let found: Vec<u64> = read.point_data[0]
        .values
        .iter()
        .map(|x| x.to_bits())
        .collect();
    assert_eq!(found, values.map(f64::to_bits));
}

#[test]
fn refused_frames_leave_the_old_file() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("frame.vtu");
    fs::write(&path, "old").unwrap();
    let points = [[0.0; 3], [1.0, 0.0, 0.0], [0.0, 1.0, 0.0]];
    let bad_points = [[0.0; 3], [f64::NAN, 0.0, 0.0], [0.0, 1.0, 0.0]];
    let (triangles, bad_triangles) = ([[0, 1, 2]], [[0, 1, 3]]);
    let (short, huge) = ([1.0, 2.0], [1.0, 2.0, -1e39]);
    let good = Frame {
        points: &points,
        triangles: &triangles,
        ..Frame::default()
    };
    let with = |array: Array<'static>| Frame {
        point_data: vec![array],
        ..good.clone()
    };
    let short: &'static [f64] = Box::leak(Box::new(short));
    let huge: &'static [f64] = Box::leak(Box::new(huge));
    let text = |name: &str, text: &str| Frame {
        field_data: vec![FieldText {
            name: name.into(),
            text: text.into(),
        }],
        ..good.clone()
    };
    let twice = Frame {
        point_data: vec![Array::scalar("a", huge), Array::scalar("a", huge)],
        precision: Precision::Double,
        ..good.clone()
    };
    type Expected = fn(&VtkError) -> bool;
    let cases: [(Frame<'_>, Expected); 10] = [
        (
            Frame {
                points: &bad_points,
                ..good.clone()
            },
            |e| matches!(e, VtkError::NonFinitePoint { index: 1, .. }),
        ),
        (
            Frame {
                triangles: &bad_triangles,
                ..good.clone()
            },
            |e| {
                matches!(
                    e,
                    VtkError::PointIndex {
                        cell: 0,
                        point: 3,
                        points: 3
                    }
                )
            },
        ),
        (
            Frame {
                time: Some(f64::INFINITY),
                ..good.clone()
            },
            |e| matches!(e, VtkError::NonFiniteTime { .. }),
        ),
        (with(Array::scalar("short", short)), |e| {
            matches!(
                e,
                VtkError::ArrayLength {
                    expected: 3,
                    found: 2,
                    ..
                }
            )
        }),
        (with(Array::scalar("huge", huge)), |e| {
            matches!(e, VtkError::SinglePrecisionRange { index: 2, .. })
        }),
        (with(Array::scalar("", huge)), |e| {
            matches!(e, VtkError::Text { .. })
        }),
        (with(Array::scalar("line\nbreak", huge)), |e| {
            matches!(e, VtkError::Text { .. })
        }),
        (twice, |e| matches!(e, VtkError::Text { .. })),
        (text("note", "a\0b"), |e| matches!(e, VtkError::Text { .. })),
        (text("TimeValue", "now"), |e| {
            matches!(e, VtkError::Text { .. })
        }),
    ];
    for (frame, expected) in cases {
        let error = write_vtu(&path, &frame, Compression::Zlib).unwrap_err();
        let VtkError::InFile { source, .. } = error else {
            panic!("{error}");
        };
        assert!(expected(&source), "{source}");
        assert_eq!(fs::read_to_string(&path).unwrap(), "old");
    }
    assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 1);
}

#[test]
fn a_failed_write_leaves_nothing_behind() {
    let folder = tempfile::tempdir().unwrap();
    // A folder stands where the file should go, so the last step, the move, fails.
    let path = folder.path().join("frame.vtu");
    fs::create_dir(&path).unwrap();
    let error = write_vtu(&path, &Frame::default(), Compression::Zlib).unwrap_err();
    assert!(matches!(error, VtkError::Io { .. }), "{error}");
    assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 1);

    let missing = folder.path().join("nowhere").join("frame.vtu");
    let error = write_vtu(&missing, &Frame::default(), Compression::Zlib).unwrap_err();
    assert!(
        matches!(
            error,
            VtkError::Io {
                action: "create",
                ..
            }
        ),
        "{error}"
    );
}

#[cfg(unix)]
#[test]
fn files_get_the_usual_permissions() {
    use std::os::unix::fs::PermissionsExt as _;
    let folder = tempfile::tempdir().unwrap();
    let (path, plain) = (folder.path().join("frame.vtu"), folder.path().join("plain"));
    write_vtu(&path, &Frame::default(), Compression::Zlib).unwrap();
    fs::write(&plain, "").unwrap();
    let mode = |path| fs::metadata(path).unwrap().permissions().mode();
    assert_eq!(mode(&path), mode(&plain));
}
