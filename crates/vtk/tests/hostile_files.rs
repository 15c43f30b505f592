//! Damaged and hostile files end in an error: no panic, and no memory beyond what the file
//! itself can account for. Random damage with a fixed seed; common practice (mutation fuzzing),
//! no source.

use pellicle_vtk::{Limits, parse_surface};
use rand::{Rng as _, SeedableRng as _};
use rand_chacha::ChaCha8Rng;
use std::alloc::{GlobalAlloc, Layout, System};
use std::cell::Cell;
use std::fs;
use std::path::Path;

/// Counts the memory of each thread.
struct Counting;

thread_local! {
    static USED: Cell<isize> = const { Cell::new(0) };
    static PEAK: Cell<isize> = const { Cell::new(0) };
}

fn count(bytes: isize) {
    let used = USED.get() + bytes;
    USED.set(used);
    PEAK.set(PEAK.get().max(used));
}

// SAFETY: every call is passed on to the system's allocator as it is; the counters allocate
// nothing.
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        count(layout.size() as isize);
        unsafe { System.alloc(layout) }
    }

    unsafe fn alloc_zeroed(&self, layout: Layout) -> *mut u8 {
        count(layout.size() as isize);
        unsafe { System.alloc_zeroed(layout) }
    }

    unsafe fn dealloc(&self, pointer: *mut u8, layout: Layout) {
        count(-(layout.size() as isize));
        unsafe { System.dealloc(pointer, layout) }
    }
}

#[global_allocator]
static ALLOCATOR: Counting = Counting;

/// Parses with the default limits; returns whether it worked, and the memory it took at most.
fn parse(bytes: &[u8]) -> (bool, usize) {
    let before = USED.get();
    PEAK.set(before);
    let outcome = parse_surface(bytes, &Limits::default()).is_ok();
    (outcome, (PEAK.get() - before) as usize)
}

fn fixtures() -> Vec<Vec<u8>> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data");
    let mut paths: Vec<_> = fs::read_dir(folder)
        .unwrap()
        .map(|entry| entry.unwrap().path())
        .collect();
    paths.sort();
    paths.iter().map(|path| fs::read(path).unwrap()).collect()
}

/// Damages a file in one of eight ways.
fn damage(bytes: &mut Vec<u8>, donor: &[u8], random: &mut ChaCha8Rng) {
    const NUMBERS: [&str; 8] = [
        "0",
        "1",
        "-1",
        "4294967295",
        "2000000000",
        "9223372036854775807",
        "18446744073709551615",
        "99999999999999999999999",
    ];
    if bytes.is_empty() {
        return;
    }
    let start = random.random_range(0..bytes.len());
    let end = bytes.len().min(start + random.random_range(1..40));
    match random.random_range(0..8) {
        0 => bytes[start] ^= 1 << random.random_range(0..8),
        1 => random.fill(&mut bytes[start..end]),
        2 => bytes.truncate(start),
        3 => drop(bytes.drain(start..end)),
        4 => {
            let copy = bytes[start..end].to_vec();
            bytes.splice(start..start, copy);
        }
        5 => {
            // A piece of another file, keywords included.
            let from = random.random_range(0..donor.len());
            let to = donor.len().min(from + 60);
            bytes.splice(start..end, donor[from..to].iter().copied());
        }
        _ => {
            // Another number in place of the next one after `start`.
            let Some(from) = bytes[start..].iter().position(u8::is_ascii_digit) else {
                return;
            };
            let from = start + from;
            let length = bytes[from..]
                .iter()
                .take_while(|c| c.is_ascii_digit())
                .count();
            let number = NUMBERS[random.random_range(0..NUMBERS.len())];
            bytes.splice(from..from + length, number.bytes());
        }
    }
}

#[test]
fn random_damage_neither_panics_nor_takes_much_memory() {
    let files = fixtures();
    let mut random = ChaCha8Rng::seed_from_u64(7);
    let mut accepted = 0;
    // `PELLICLE_MUTATIONS` asks for a longer hunt.
    let rounds = std::env::var("PELLICLE_MUTATIONS")
        .ok()
        .and_then(|text| text.parse().ok())
        .unwrap_or(1000);
    for _ in 0..rounds {
        for file in &files {
            let mut bytes = file.clone();
            for _ in 0..random.random_range(1..4) {
                let donor = &files[random.random_range(0..files.len())];
                damage(&mut bytes, donor, &mut random);
            }
            let (worked, peak) = parse(&bytes);
            accepted += usize::from(worked);
            // The files are 1 to 5 kB. LZMA's dictionary is 8 MiB in them; for the rest,
            // zlib's highest ratio (1032) times the file is the largest that can be needed.
            let bound = (16 << 20) + 1032 * bytes.len();
            assert!(
                peak <= bound,
                "{peak} bytes for {}",
                String::from_utf8_lossy(&bytes)
            );
        }
    }
    // Much damage is harmless (attributes not needed, values, names); were all of it refused
    // or accepted, the test would not reach the decoders.
    let cases = rounds * files.len();
    assert!(
        accepted > cases / 50 && accepted < cases * 9 / 10,
        "{accepted} of {cases}"
    );
}

const LEGACY: &str = "# vtk DataFile Version 5.1\nx\nBINARY\nDATASET POLYDATA\n";

#[test]
fn declared_sizes_are_not_believed() {
    let vtu = |head: &str, array: &str| {
        format!(
            r#"<VTKFile type="UnstructuredGrid" header_type="UInt64" {head}><UnstructuredGrid>
            <Piece NumberOfPoints="9000000" NumberOfCells="0"><Points>
            <DataArray type="Float64" NumberOfComponents="3" {array}</DataArray></Points>
            </Piece></UnstructuredGrid></VTKFile>"#
        )
    };
    // One block of 216 000 000 bytes, whose compressed form is 8 zero bytes; and the same size
    // alone, as uncompressed arrays have it.
    let one_block = "AQAAAAAAAAAA5t8MAAAAAAAAAAAAAAAACAAAAAAAAAA=AAAAAAAAAAA=";
    let cases = [
        format!("{LEGACY}POINTS 9000000 double\n"),
        format!("{LEGACY}POINTS 0 double\nPOLYGONS 9000000 20000000\nOFFSETS vtktypeint64\n"),
        format!("{LEGACY}FIELD f 4000000000\na 1 500000000 double\n"),
        format!("{LEGACY}FIELD f 1\na 1 18446744073709551615 string\n"),
        format!("{LEGACY}POINTS 9000000 double\n").replace("BINARY", "ASCII"),
        format!("{LEGACY}FIELD f 1\na 1 500000000 double\n1 2 3").replace("BINARY", "ASCII"),
        vtu("", r#"format="ascii">1 2 3"#),
        vtu("", r#"format="binary">AObfDAAAAAA="#),
        vtu(
            r#"compressor="vtkZLibDataCompressor""#,
            &format!(r#"format="binary">{one_block}"#),
        ),
        vtu(
            r#"compressor="vtkLZ4DataCompressor""#,
            &format!(r#"format="binary">{one_block}"#),
        ),
        vtu(
            r#"compressor="vtkLZMADataCompressor""#,
            &format!(r#"format="binary">{one_block}"#),
        ),
    ];
    for text in cases {
        let (worked, peak) = parse(text.as_bytes());
        assert!(!worked, "{text}");
        // Ten times the largest of these files, which are below 1 kB, and something for buffers.
        assert!(peak < 100_000, "{peak} bytes for {text}");
    }
}

#[test]
fn many_small_things_are_bounded() {
    let open = r#"<VTKFile type="PolyData"><PolyData><Piece NumberOfPoints="0">"#;
    for text in [
        format!("{open}{}", "<DataArray/>".repeat(100_000)),
        format!("{open}{}", "<a>".repeat(100_000)),
        format!("<VTKFile {}>", r#"a="" "#.repeat(100_000)),
    ] {
        let (worked, peak) = parse(text.as_bytes());
        assert!(!worked);
        assert!(peak < 2 << 20, "{peak}");
    }
}
