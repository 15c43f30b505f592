//! The collection file and the thread that fills it. Exact checks; common practice, no source.

use pellicle_vtk::{
    BackgroundWriter, Compression, Limits, OwnedArray, OwnedFrame, OwnedValues, Series, VtkError,
    frame_file_name, read_surface,
};
use std::fs;
use std::path::Path;

fn frame(index: usize) -> OwnedFrame {
    let shift = index as f64;
    OwnedFrame {
        file_name: frame_file_name("surface", index),
        time: 1e-3 * shift,
        points: vec![[shift, 0.0, 0.0], [1.0, 0.0, 0.0], [0.0, 1.0, 0.0]],
        triangles: vec![[0, 1, 2]],
        point_data: vec![OwnedArray {
            name: "height".into(),
            values: OwnedValues::Scalar(vec![shift; 3]),
        }],
        ..OwnedFrame::default()
    }
}

fn limits() -> Limits {
    Limits::default()
}

#[test]
fn entries_come_back_and_can_be_cut() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("fields.pvd");
    let mut series = Series::create(&path).unwrap();
    assert!(Series::open(&path, &limits()).unwrap().entries().is_empty());
    // Times that a rounded decimal would not bring back.
    let times = [-0.1, 0.0, 1e-9 / 3.0, 0.1 + 0.2, 1e22];
    for (index, &time) in times.iter().enumerate() {
        series
            .push(time, frame_file_name("sur<face>&", index))
            .unwrap();
    }
    let mut opened = Series::open(&path, &limits()).unwrap();
    assert_eq!(opened.entries(), series.entries());
    assert_eq!(opened.entries()[2].time, times[2]);
    assert_eq!(opened.entries()[2].file_name, "sur<face>&_000002.vtu");

    let removed = opened.truncate(2).unwrap();
    assert_eq!(removed, &series.entries()[2..]);
    let error = opened.truncate(3).unwrap_err();
    assert!(matches!(
        error,
        VtkError::SeriesTooShort {
            wanted: 3,
            present: 2
        }
    ));
    opened.push(0.5, "again.vtu").unwrap();
    let last = Series::open(&path, &limits()).unwrap();
    assert_eq!(last.entries(), opened.entries());
    assert_eq!(last.entries().len(), 3);
}

#[test]
fn wrong_entries_are_refused() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("fields.pvd");
    let mut series = Series::create(&path).unwrap();
    series.push(1.0, "a.vtu").unwrap();
    let before = fs::read(&path).unwrap();
    for time in [1.0, 0.5] {
        let error = series.push(time, "b.vtu").unwrap_err();
        assert!(matches!(error, VtkError::TimeOrder { .. }), "{error}");
    }
    let error = series.push(f64::NAN, "b.vtu").unwrap_err();
    assert!(matches!(error, VtkError::NonFiniteTime { .. }), "{error}");
    for name in [
        "",
        "/etc/b.vtu",
        "../b.vtu",
        "b\n.vtu",
        "frames/../../b.vtu",
    ] {
        let error = series.push(2.0, name).unwrap_err();
        assert!(
            matches!(error, VtkError::FileName { .. }),
            "{name}: {error}"
        );
    }
    assert_eq!(series.entries().len(), 1);
    assert_eq!(fs::read(&path).unwrap(), before);
    series.push(2.0, "frames/b.vtu").unwrap();
}

#[test]
fn a_series_that_cannot_be_stored_stays_as_it_was() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("fields.pvd");
    let mut series = Series::create(&path).unwrap();
    series.push(1.0, "a.vtu").unwrap();
    fs::remove_file(&path).unwrap();
    fs::create_dir(&path).unwrap();
    assert!(matches!(
        series.push(2.0, "b.vtu"),
        Err(VtkError::Io { .. })
    ));
    assert!(matches!(series.truncate(0), Err(VtkError::Io { .. })));
    assert_eq!(series.entries().len(), 1);
}

#[test]
fn broken_collections_are_refused() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("fields.pvd");
    let head = r#"<VTKFile type="Collection"><Collection>"#;
    let tail = "</Collection></VTKFile>";
    let entry = |time: &str, file: &str| format!(r#"<DataSet timestep="{time}" file="{file}"/>"#);
    let cases = [
        String::new(),
        "no XML".into(),
        format!("{head}{}", entry("0", "a.vtu")),
        format!(r#"<VTKFile type="PolyData">{tail}"#),
        format!("{head}{}{tail}", entry("soon", "a.vtu")),
        format!("{head}{}{tail}", entry("NaN", "a.vtu")),
        format!("{head}{}{tail}", entry("0", "../a.vtu")),
        format!(r#"{head}<DataSet timestep="0"/>{tail}"#),
        format!("{head}{0}{0}{tail}", entry("0", "a.vtu")),
        "<a><b></a></b>".into(),
    ];
    for text in cases {
        fs::write(&path, &text).unwrap();
        let error = Series::open(&path, &limits()).unwrap_err();
        assert!(matches!(error, VtkError::InFile { .. }), "{text}: {error}");
    }
    fs::write(&path, [0xff, 0xfe, 0x00]).unwrap();
    assert!(Series::open(&path, &limits()).is_err());
    let missing = Series::open(folder.path().join("none.pvd"), &limits());
    assert!(matches!(missing, Err(VtkError::Io { .. })));
}

fn heights(path: &Path) -> Vec<f64> {
    let surface = read_surface(path, &limits()).unwrap();
    surface.point_array("height").unwrap().values.clone()
}

#[test]
fn the_background_writes_everything_in_order() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("fields.pvd");
    let series = Series::create(&path).unwrap();
    let writer = BackgroundWriter::start(series, Compression::Lz4, 2).unwrap();
    for index in 0..10 {
        writer.submit(frame(index)).unwrap();
        if index == 4 {
            writer.flush().unwrap();
            let stored = Series::open(&path, &limits()).unwrap();
            assert_eq!(stored.entries().len(), 5);
        }
    }
    let series = writer.finish().unwrap();
    assert_eq!(series.entries().len(), 10);
    for (index, entry) in series.entries().iter().enumerate() {
        assert_eq!(entry.time, frame(index).time);
        assert_eq!(
            heights(&series.frame_path(&entry.file_name)),
            [index as f64; 3]
        );
    }
    // Dropped without `finish`, it still empties its queue.
    let writer = BackgroundWriter::start(series, Compression::Lz4, 2).unwrap();
    writer.submit(frame(10)).unwrap();
    drop(writer);
    assert_eq!(Series::open(&path, &limits()).unwrap().entries().len(), 11);
}

#[test]
fn a_failure_comes_back_and_no_frame_is_lost() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("fields.pvd");
    let series = Series::create(&path).unwrap();
    // Frame 2 cannot be written: a folder has its name. (Permissions would not stop root.)
    let obstacle = folder.path().join(frame_file_name("surface", 2));
    fs::create_dir(&obstacle).unwrap();

    let writer = BackgroundWriter::start(series, Compression::Zlib, 2).unwrap();
    let mut given_back = Vec::new();
    for index in 0..6 {
        if let Err(rejected) = writer.submit(frame(index)) {
            let VtkError::Background { file_name, source } = &rejected.error else {
                panic!("{}", rejected.error);
            };
            assert_eq!(file_name, "surface_000002.vtu");
            assert!(matches!(**source, VtkError::Io { .. }));
            given_back.push(rejected.frame);
        }
    }
    // At most two frames fit into the queue, so at the latest frame 4 was rejected.
    assert!(given_back.len() >= 2);
    assert!(matches!(writer.flush(), Err(VtkError::Background { .. })));
    let unfinished = writer.finish().unwrap_err();
    assert!(unfinished.to_string().contains("surface_000002.vtu"));
    let series = unfinished.series.unwrap();
    assert_eq!(series.entries().len(), 2);
    let mut rest = unfinished.unwritten;
    rest.extend(given_back);
    assert_eq!(rest, (2..6).map(frame).collect::<Vec<_>>());

    // With the obstacle gone, the rest goes on as if nothing had happened.
    fs::remove_dir(&obstacle).unwrap();
    let writer = BackgroundWriter::start(series, Compression::Zlib, 2).unwrap();
    for frame in rest {
        writer.submit(frame).unwrap();
    }
    assert_eq!(writer.finish().unwrap().entries().len(), 6);
}

#[test]
fn a_vanished_folder_is_reported() {
    let folder = tempfile::tempdir().unwrap();
    let inner = folder.path().join("run");
    fs::create_dir(&inner).unwrap();
    let series = Series::create(inner.join("fields.pvd")).unwrap();
    fs::remove_dir_all(&inner).unwrap();
    let writer = BackgroundWriter::start(series, Compression::None, 1).unwrap();
    writer.submit(frame(0)).unwrap();
    let unfinished = writer.finish().unwrap_err();
    assert_eq!(unfinished.unwritten, [frame(0)]);
    assert!(matches!(
        VtkError::from(unfinished),
        VtkError::Background { .. }
    ));
}

#[test]
fn a_frame_out_of_order_overwrites_nothing() {
    let folder = tempfile::tempdir().unwrap();
    let series = Series::create(folder.path().join("fields.pvd")).unwrap();
    let writer = BackgroundWriter::start(series, Compression::None, 1).unwrap();
    writer.submit(frame(1)).unwrap();
    let mut late = frame(1);
    late.points[0] = [9.0; 3];
    // The queue takes it; the refusal comes from the thread.
    writer.submit(late).unwrap();
    let unfinished = writer.finish().unwrap_err();
    let series = unfinished.series.unwrap();
    let surface = read_surface(&series.frame_path("surface_000001.vtu"), &limits()).unwrap();
    assert_eq!(surface.points, frame(1).points);
}
