//! What a step asks of the allocator once everything has its size: nothing stays, and what comes and goes is bounded.

use pellicle_physics::parameters::{Parameters, Phases, VolumeCondition};
use pellicle_physics::{Simulation, State};
use pellicle_surface::geometry::Geometry;
use pellicle_surface::mesh::shapes;
use std::alloc::{GlobalAlloc, Layout, System};
use std::sync::atomic::{AtomicI64, AtomicU64, Ordering::Relaxed};

/// Counts what passes through the system's allocator.
struct Counting;

static LIVE: AtomicI64 = AtomicI64::new(0);
static MOST: AtomicI64 = AtomicI64::new(0);
static CALLS: AtomicU64 = AtomicU64::new(0);

fn note(bytes: i64) {
    let live = LIVE.fetch_add(bytes, Relaxed) + bytes;
    MOST.fetch_max(live, Relaxed);
}

// SAFETY: every call is handed to the system's allocator unchanged; only counters are kept beside it.
unsafe impl GlobalAlloc for Counting {
    unsafe fn alloc(&self, layout: Layout) -> *mut u8 {
        CALLS.fetch_add(1, Relaxed);
        note(layout.size() as i64);
        unsafe { System.alloc(layout) }
    }

    unsafe fn dealloc(&self, pointer: *mut u8, layout: Layout) {
        note(-(layout.size() as i64));
        unsafe { System.dealloc(pointer, layout) }
    }
}

#[global_allocator]
static ALLOCATOR: Counting = Counting;

#[test]
fn steps_keep_no_memory_and_borrow_little() -> Result<(), Box<dyn std::error::Error>> {
    let mut mesh = shapes::sphere(1.0, 0.15)?;
    shapes::perturb(&mut mesh, 0.05, 1)?;
    let n = mesh.n_vertices();
    let mut p = Parameters::bare(1.0, 1.0, 3e4);
    p.mesh = None;
    p.volume = VolumeCondition::Fixed(vec![(0.0, Geometry::new(&mesh).volume)]);
    p.phases = Some(Phases { line_tension: 4.0, interface_width: 0.3, diffusion_constant: 1.0, width_per_radius: 0.0 });
    let composition: Vec<f64> = mesh.positions.iter().map(|x| 0.5 + 0.4 * (3.0 * x.z).tanh()).collect();
    let state = State::at_rest(&p, mesh, &composition, &[], &[])?;
    let mut simulation = Simulation::new(p, state)?;
    let pool = rayon::ThreadPoolBuilder::new().num_threads(1).build()?;
    pool.install(|| -> Result<(), pellicle_physics::PhysicsError> {
        for _ in 0..30 {
            simulation.advance(f64::INFINITY)?;
        }
        let standing = LIVE.load(Relaxed);
        let (mut kept, mut borrowed, mut calls) = (0, 0, 0);
        for _ in 0..10 {
            let (live, count) = (LIVE.load(Relaxed), CALLS.load(Relaxed));
            MOST.store(live, Relaxed);
            simulation.advance(f64::INFINITY)?;
            kept = kept.max(LIVE.load(Relaxed) - standing);
            borrowed = borrowed.max(MOST.load(Relaxed) - live);
            calls = calls.max(CALLS.load(Relaxed) - count);
        }
        let per_vertex = borrowed as f64 / n as f64;
        println!("{n} vertices, {standing} bytes stand, {kept} kept, {per_vertex:.0} per vertex borrowed, {calls} calls");
        // A longer Krylov basis or a snapshot of the state may still come in: 64 bytes per vertex for each vector pair.
        assert!(kept as f64 <= 256.0 * n as f64, "a step keeps {kept} bytes");
        // Measured: nothing kept, 1095 bytes per vertex borrowed in 120 calls: copies of the state for refused steps,
        // fields, forces, the right-hand side.
        assert!(per_vertex <= 1600.0, "a step borrows {per_vertex:.0} bytes per vertex");
        assert!(calls <= 240, "a step calls the allocator {calls} times");
        Ok(())
    })?;
    Ok(())
}
