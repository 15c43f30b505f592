//! Readers: small hand-written files, malformed ones, mutated bytes.

use pellicle_surface::mesh::check::{Requirement, check};
use pellicle_surface::mesh::files::{Format, ReadMesh, ReadOptions, read, read_bytes, write_ply};
use pellicle_surface::mesh::shapes::sphere;
use pellicle_surface::{Mesh, MeshError, Vec3};
use proptest::prelude::*;

/// Unit tetrahedron, outward.
const TETRAHEDRON_PLY: &str = "ply\nformat ascii 1.0\ncomment by hand\nelement vertex 4\nproperty double x\n\
property double y\nproperty double z\nproperty float share\nelement face 4\nproperty list uchar int vertex_indices\n\
end_header\n0 0 0 0.5\n1 0 0 0.25\n0 1 0 0.125\n0 0 1 1\n3 0 2 1\n3 0 1 3\n3 0 3 2\n3 1 2 3\n";

const TETRAHEDRON_OBJ: &str = "# by hand\nmtllib none.mtl\no first\nv 0 0 0\nv 1 0 0 # a corner\nv 0 1 0\nv 0 0 1\n\
vt 0 0\nvn 0 0 1\ng low\nusemtl red\nf 1/1/1 3/1/1 2/1/1\ng side\nf 1//1 2//1 4//1\nf -4 -1 -2\nf 2 3 4\n";

const TETRAHEDRON: [[[f32; 3]; 3]; 4] = {
    let [o, x, y, z] = [
        [0.0, 0.0, 0.0],
        [1.0, 0.0, 0.0],
        [0.0, 1.0, 0.0],
        [0.0, 0.0, 1.0],
    ];
    [[o, y, x], [o, x, z], [o, z, y], [x, y, z]]
};

fn stl_ascii() -> String {
    let mut text = String::from("solid\n");
    for corners in TETRAHEDRON {
        text += "  facet normal 0 0 0\n    outer loop\n";
        for [x, y, z] in corners {
            // −0 is the same place as 0.
            let x = if x == 0.0 {
                "-0.0".into()
            } else {
                format!("{x}")
            };
            text += &format!("      vertex {x} {y} {z}\n");
        }
        text += "    endloop\n  endfacet\n";
    }
    text + "endsolid\n"
}

fn stl_binary(header: &str) -> Vec<u8> {
    let mut bytes = vec![b' '; 80];
    bytes[..header.len()].copy_from_slice(header.as_bytes());
    bytes.extend((TETRAHEDRON.len() as u32).to_le_bytes());
    for corners in TETRAHEDRON {
        bytes.extend([0; 12]);
        bytes.extend(corners.iter().flatten().flat_map(|x| x.to_le_bytes()));
        bytes.extend([0; 2]);
    }
    bytes
}

fn ply_binary(big_endian: bool) -> Vec<u8> {
    let kind = if big_endian { "big" } else { "little" };
    let mut bytes = format!(
        "ply\nformat binary_{kind}_endian 1.0\nelement vertex 4\nproperty float x\nproperty float y\nproperty float z\n\
         element face 4\nproperty uchar colour\nproperty list uchar uint vertex_index\nend_header\n"
    )
    .into_bytes();
    let real = |x: f32| {
        if big_endian {
            x.to_be_bytes()
        } else {
            x.to_le_bytes()
        }
    };
    let whole = |x: u32| {
        if big_endian {
            x.to_be_bytes()
        } else {
            x.to_le_bytes()
        }
    };
    for p in [
        [0.0, 0.0, 0.0],
        [1.0, 0.0, 0.0],
        [0.0, 1.0, 0.0],
        [0.0, 0.0, 1.0f32],
    ] {
        bytes.extend(p.into_iter().flat_map(real));
    }
    for corners in [[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3u32]] {
        bytes.extend([7, 3]);
        bytes.extend(corners.into_iter().flat_map(whole));
    }
    bytes
}

fn parse(bytes: &[u8], format: Format) -> Result<ReadMesh, MeshError> {
    read_bytes(bytes, format, "test", &ReadOptions::default())
}

/// The volume of the unit tetrahedron is 1/6 and its outward orientation must survive.
fn assert_tetrahedron(read: Result<ReadMesh, MeshError>, what: &str) -> ReadMesh {
    let read = read.unwrap_or_else(|error| panic!("{what}: {error}"));
    let mut mesh = read.mesh.clone();
    assert_eq!((mesh.n_vertices(), mesh.n_triangles()), (4, 4), "{what}");
    let report = check(&mut mesh, Requirement::Closed).unwrap();
    assert!(!report.turned_outward, "{what}");
    assert!((report.volume.unwrap() - 1.0 / 6.0).abs() < 1e-15, "{what}");
    read
}

#[test]
fn all_kinds_of_files_are_read() {
    let with_data = assert_tetrahedron(parse(TETRAHEDRON_PLY.as_bytes(), Format::Ply), "PLY");
    assert_eq!(with_data.point_data["share"], [0.5, 0.25, 0.125, 1.0]);
    assert_eq!(with_data.point_data.len(), 1);
    assert_tetrahedron(parse(&ply_binary(false), Format::Ply), "little-endian PLY");
    assert_tetrahedron(parse(&ply_binary(true), Format::Ply), "big-endian PLY");
    let dos = TETRAHEDRON_PLY.replace('\n', "\r\n");
    assert_tetrahedron(parse(dos.as_bytes(), Format::Ply), "PLY with DOS line ends");
    assert_tetrahedron(parse(TETRAHEDRON_OBJ.as_bytes(), Format::Obj), "OBJ");
    assert_tetrahedron(parse(stl_ascii().as_bytes(), Format::Stl), "STL");
    let named = stl_ascii()
        .replace("solid\n", "solid Two Words\n")
        .to_uppercase();
    assert_tetrahedron(parse(named.as_bytes(), Format::Stl), "named STL");
    assert_tetrahedron(
        parse(&stl_binary("made by hand"), Format::Stl),
        "binary STL",
    );
    assert_tetrahedron(
        parse(&stl_binary("solid"), Format::Stl),
        "binary STL that starts with solid",
    );
}

#[test]
fn polygons_become_fans() {
    let square = "ply\nformat ascii 1.0\nelement vertex 5\nproperty float x\nproperty float y\nproperty float z\n\
        element face 1\nproperty list uchar int vertex_indices\nend_header\n0 0 0\n1 0 0\n1 1 0\n0.5 1.5 0\n0 1 0\n5 0 1 2 3 4\n";
    let read = parse(square.as_bytes(), Format::Ply).unwrap();
    assert_eq!(read.mesh.triangles, [[0, 1, 2], [0, 2, 3], [0, 3, 4]]);
    let read = parse(
        b"v 0 0 0\nv 1 0 0\nv 1 1 0\nv 0 1 0\nf 1 2 3 4\n",
        Format::Obj,
    )
    .unwrap();
    assert_eq!(read.mesh.triangles, [[0, 1, 2], [0, 2, 3]]);
}

#[test]
fn scale_applies_to_coordinates_only() {
    let options = ReadOptions {
        scale: 2.0,
        ..ReadOptions::default()
    };
    let read = read_bytes(TETRAHEDRON_PLY.as_bytes(), Format::Ply, "test", &options).unwrap();
    assert_eq!(read.mesh.positions[1], Vec3::new(2.0, 0.0, 0.0));
    assert_eq!(read.point_data["share"][3], 1.0);
    for scale in [0.0, -1.0, f64::NAN, f64::INFINITY] {
        let options = ReadOptions {
            scale,
            ..ReadOptions::default()
        };
        let refused = read_bytes(TETRAHEDRON_PLY.as_bytes(), Format::Ply, "test", &options);
        assert!(matches!(
            refused,
            Err(MeshError::Impossible {
                quantity: "scale",
                ..
            })
        ));
    }
}

/// The message of a file that must not be read.
fn refusal(bytes: &[u8], format: Format) -> String {
    match parse(bytes, format) {
        Err(error) => error.to_string(),
        Ok(read) => panic!("read as {:?}", read.mesh),
    }
}

#[test]
fn malformed_files_are_refused_with_a_reason() {
    let ply = |from: &str, to: &str| {
        assert!(TETRAHEDRON_PLY.contains(from));
        refusal(
            TETRAHEDRON_PLY.replacen(from, to, 1).as_bytes(),
            Format::Ply,
        )
    };
    assert!(refusal(b"", Format::Ply).contains("not a PLY header"));
    assert!(refusal(b"ply\nformat ascii 1.0\n", Format::Ply).contains("header"));
    assert!(ply("vertex 4", "vertex 4000000000").contains("promises 4000000000"));
    assert!(ply("vertex 4", "vertex 18446744073709551615").contains("promises"));
    assert!(ply("face 4", "face 5").contains("face"));
    assert!(ply("double y", "double w").contains("lack"));
    assert!(ply("3 0 2 1", "4000000000 0 2 1").contains("list"));
    assert!(ply("3 0 2 1", "3 0 2 4").contains("there are only 4 vertices"));
    assert!(ply("3 0 2 1", "3 0 2 -1").contains("vertex_indices"));
    assert!(ply("3 0 2 1", "2 0 2").contains("needs three"));
    assert!(ply("1 0 0 0.25", "1 nan 0 0.25").contains("nan"));
    assert!(
        ply("1 0 0 0.25", "1 1e999 0 0.25")
            .contains("vertex 1 has a coordinate that is not a finite")
    );
    assert!(ply("1 0 0 0.25", "1 0 0").contains("element"));
    // A list length that no file can hold, in binary.
    let mut bytes = ply_binary(false);
    let length = bytes.len();
    bytes.truncate(length - 1);
    assert!(refusal(&bytes, Format::Ply).contains("end of file"));

    assert!(refusal(b"", Format::Obj).contains("no faces"));
    assert!(refusal(&[0xff, 0xfe, 0], Format::Obj).contains("not text"));
    assert!(
        refusal(b"v 0 0 0\nv 1 0 0\nv 0 1 0\nf 1 2 4\n", Format::Obj).contains("out of bounds")
    );
    assert!(
        refusal(b"v 0 0 0\nv 1 0 0\nv 0 1 0\nf 1 2 0\n", Format::Obj).contains("out of bounds")
    );
    assert!(refusal(b"v 0 0 0\nv 1 0 0\nf 1 2\n", Format::Obj).contains("line 3"));
    assert!(refusal(b"v 0 0\nv 1 0 0\nv 1 1 0\nf 1 2 3\n", Format::Obj).contains("position"));
    assert!(refusal(b"v 0 0 0\nv 1 0 0\nv 1 1 0\nf 1 2 \\\n3\n", Format::Obj).contains("line 4"));
    assert!(refusal(b"v 0 0 0\nv 1e999 0 0\nv 1 1 0\nf 1 2 3\n", Format::Obj).contains("finite"));

    assert!(refusal(b"", Format::Stl).contains("too short"));
    assert!(refusal(b"solid\nendsolid\n", Format::Stl).contains("empty"));
    let binary = stl_binary("made by hand");
    assert!(refusal(&binary[..200], Format::Stl).contains("cut off"));
    let mut hostile = binary.clone();
    hostile[80..84].copy_from_slice(&u32::MAX.to_le_bytes());
    assert!(refusal(&hostile, Format::Stl).contains("4294967295 triangles"));
    let cut = stl_ascii().replace("endloop\n  endfacet\nendsolid", "");
    assert!(refusal(cut.as_bytes(), Format::Stl).contains("endloop"));
}

#[test]
fn limits_hold() {
    let few = ReadOptions {
        max_vertices: 3,
        ..ReadOptions::default()
    };
    let short = ReadOptions {
        max_bytes: 100,
        ..ReadOptions::default()
    };
    for (bytes, format) in seeds() {
        let message = |options| match read_bytes(&bytes, format, "test", options) {
            Err(error) => error.to_string(),
            Ok(_) => panic!("{format:?} was read"),
        };
        assert!(message(&few).contains("limit of 3"));
        assert!(message(&short).contains("limit of 100 bytes"));
    }
}

#[test]
fn written_ply_files_come_back() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("sphere.PLY");
    let mesh = sphere(1.0, 0.3).unwrap();
    write_ply(&path, &mesh, &["a sphere"]).unwrap();
    let back: Mesh = read(&path, &ReadOptions::default()).unwrap().mesh;
    assert_eq!(back.triangles, mesh.triangles);
    for (a, b) in back.positions.iter().zip(&mesh.positions) {
        // Rounding to single precision: 2⁻²⁴ of coordinates up to 1.
        assert!((a - b).amax() < 6e-8);
    }
    let short = ReadOptions {
        max_bytes: 1000,
        ..ReadOptions::default()
    };
    assert!(matches!(read(&path, &short), Err(MeshError::File { .. })));
    assert!(matches!(
        read(folder.path().join("none.ply"), &short),
        Err(MeshError::File { .. })
    ));
    assert!(matches!(
        read(folder.path().join("none.xyz"), &short),
        Err(MeshError::File { .. })
    ));
    assert!(write_ply(folder.path().join("no/such/folder.ply"), &mesh, &[]).is_err());
}

/// A good file of each kind.
fn seeds() -> Vec<(Vec<u8>, Format)> {
    vec![
        (TETRAHEDRON_PLY.into(), Format::Ply),
        (ply_binary(false), Format::Ply),
        (ply_binary(true), Format::Ply),
        (TETRAHEDRON_OBJ.into(), Format::Obj),
        (stl_ascii().into(), Format::Stl),
        (stl_binary("made by hand"), Format::Stl),
    ]
}

/// One change of a file.
#[derive(Clone, Debug)]
enum Change {
    Set(prop::sample::Index, u8),
    Flip(prop::sample::Index, u8),
    Delete(prop::sample::Index, usize),
    Insert(prop::sample::Index, Vec<u8>),
    Repeat(prop::sample::Index, usize),
    Cut(prop::sample::Index),
}

fn change() -> impl Strategy<Value = Change> {
    let place = any::<prop::sample::Index>;
    // Pieces that mean something to one of the parsers.
    let words = prop::sample::select(vec![
        "-1",
        "9",
        "99999999999999999999",
        "1e999",
        "nan",
        "/",
        "//",
        "\n",
        " ",
        "#",
        "list",
        "property list uchar int q\n",
        "element face 9\n",
        "element vertex 2\n",
        "f 1 2 3\n",
        "v 1 1 1\n",
        "f -9223372036854775808 1 2\n",
        "vertex",
        "endfacet\n",
        "solid ",
        "end_header\n",
        "\u{e9}",
        "\\",
    ]);
    prop_oneof![
        (place(), any::<u8>()).prop_map(|(i, byte)| Change::Set(i, byte)),
        (place(), 0..8u8).prop_map(|(i, bit)| Change::Flip(i, bit)),
        (place(), 1..20usize).prop_map(|(i, n)| Change::Delete(i, n)),
        (place(), words).prop_map(|(i, word)| Change::Insert(i, word.into())),
        (place(), 1..40usize).prop_map(|(i, n)| Change::Repeat(i, n)),
        place().prop_map(Change::Cut),
    ]
}

fn apply(bytes: &mut Vec<u8>, change: Change) {
    if bytes.is_empty() {
        return;
    }
    let n = bytes.len();
    match change {
        Change::Set(i, byte) => bytes[i.index(n)] = byte,
        Change::Flip(i, bit) => bytes[i.index(n)] ^= 1 << bit,
        Change::Delete(i, many) => {
            let i = i.index(n);
            bytes.drain(i..(i + many).min(n));
        }
        Change::Insert(i, word) => {
            let i = i.index(n);
            bytes.splice(i..i, word);
        }
        Change::Repeat(i, many) => {
            let i = i.index(n);
            let piece = bytes[i..(i + many).min(n)].to_vec();
            bytes.splice(i..i, piece);
        }
        Change::Cut(i) => bytes.truncate(i.index(n)),
    }
}

/// `PELLICLE_MUTATIONS` asks for a longer hunt.
fn cases() -> u32 {
    std::env::var("PELLICLE_MUTATIONS").ok().and_then(|text| text.parse().ok()).unwrap_or(5000)
}

proptest! {
    // Every case changes all six good files in the same way: 5000 or more for each reader.
    #![proptest_config(ProptestConfig::with_cases(cases()))]

    /// Whatever happens to its bytes, each kind of file gives a mesh with valid indices and finite coordinates, or an
    /// error; never a panic that escapes, never memory beyond the size of the file.
    #[test]
    fn mutated_files_never_break_a_reader(changes in prop::collection::vec(change(), 1..6)) {
        for (good, format) in seeds() {
            let mut bytes = good;
            for change in &changes {
                apply(&mut bytes, change.clone());
            }
            if let Ok(read) = parse(&bytes, format) {
                let n = read.mesh.n_vertices();
                prop_assert!(n > 0 && n <= bytes.len());
                prop_assert!(read.mesh.positions.iter().all(|p| p.iter().all(|x| x.is_finite())));
                prop_assert!(read.mesh.triangles.iter().flatten().all(|&v| (v as usize) < n));
                prop_assert!(read.point_data.values().all(|values| values.len() == n));
                // The check says what else is wrong, without a panic.
                let mut mesh = read.mesh;
                let _ = check(&mut mesh, Requirement::Closed);
            }
        }
    }
}
