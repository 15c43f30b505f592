//! Analysis, factorisation and solution at 642, 2,562 and 10,242 vertices, with one and two
//! threads, beside faer's sequential supernodal LDLᵀ of the same matrix.

#[path = "../tests/common/mod.rs"]
mod common;
mod reference;

use std::sync::Arc;

use common::{Mesh, icosphere, random_vector, step_matrix};
use divan::{Bencher, black_box};
use pellicle_sparse::{Analysis, Factor, Pattern};
use reference::Reference;

const LEVELS: [usize; 3] = [3, 4, 5];

fn main() {
    divan::main();
}

fn matrix(level: usize) -> (Mesh, Pattern, Vec<f64>) {
    let mesh = icosphere(level);
    let (pattern, values) = step_matrix(&mesh, 1e5, 1e-3, 1);
    (mesh, pattern, values)
}

fn analysed(level: usize) -> (Arc<Analysis>, Vec<f64>) {
    let (mesh, pattern, values) = matrix(level);
    (Arc::new(Analysis::new(pattern, 4, &mesh.points).expect("the pattern is sound")), values)
}

fn pool(threads: usize) -> rayon::ThreadPool {
    rayon::ThreadPoolBuilder::new().num_threads(threads).build().expect("threads can be started")
}

#[divan::bench(args = LEVELS, sample_count = 10)]
fn analysis(bencher: Bencher, level: usize) {
    let (mesh, pattern, _) = matrix(level);
    bencher.bench_local(|| Analysis::new(black_box(pattern.clone()), 4, &mesh.points));
}

#[divan::bench(args = LEVELS, consts = [1, 2], sample_count = 20)]
fn factorise<const THREADS: usize>(bencher: Bencher, level: usize) {
    let (analysis, values) = analysed(level);
    let mut factor = Factor::new(&analysis);
    let pool = pool(THREADS);
    bencher.bench_local(|| pool.install(|| factor.factorise(black_box(&values))));
}

#[divan::bench(args = LEVELS, sample_count = 20)]
fn factorise_faer(bencher: Bencher, level: usize) {
    let (analysis, values) = analysed(level);
    let mut reference = Reference::new(&analysis);
    bencher.bench_local(|| reference.factorise(black_box(&values)));
}

#[divan::bench(args = LEVELS, consts = [1, 2], sample_count = 40)]
fn solve<const THREADS: usize>(bencher: Bencher, level: usize) {
    let (analysis, values) = analysed(level);
    let mut factor = Factor::new(&analysis);
    factor.factorise(&values).expect("the matrix is quasi-definite");
    let mut x = random_vector(analysis.n(), 2);
    let pool = pool(THREADS);
    bencher.bench_local(|| pool.install(|| factor.solve_in_place(black_box(&mut x))));
}

#[divan::bench(args = LEVELS, sample_count = 40)]
fn solve_faer(bencher: Bencher, level: usize) {
    let (analysis, values) = analysed(level);
    let mut reference = Reference::new(&analysis);
    reference.factorise(&values);
    let mut x = random_vector(analysis.n(), 2);
    bencher.bench_local(|| reference.solve(black_box(&mut x)));
}
