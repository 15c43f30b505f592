//! Times this crate against faer's sequential supernodal factorisation of the same matrix with the
//! same ordering, alternating repeats in one run, and prints medians and their ratios.
//!
//! With an argument, matrices are also written there in Matrix Market format, for
//! `tools/peer_linear_algebra.py`; `factorise LEVEL THREADS` prints bare seconds for it, of one
//! factorisation and one solution per line of input.

#[path = "../tests/common/mod.rs"]
mod common;
#[path = "../benches/reference/mod.rs"]
mod reference;

use std::path::PathBuf;
use std::sync::Arc;
use std::time::Instant;

use common::{icosphere, random_vector, step_matrix};
use pellicle_sparse::{Analysis, Factor, write_matrix_market};
use rayon::{ThreadPool, ThreadPoolBuilder};
use reference::Reference;

fn seconds(work: impl FnOnce()) -> f64 {
    let start = Instant::now();
    work();
    start.elapsed().as_secs_f64()
}

fn median(mut times: Vec<f64>) -> f64 {
    times.sort_by(f64::total_cmp);
    times[times.len() / 2]
}

fn pool(threads: usize) -> ThreadPool {
    ThreadPoolBuilder::new().num_threads(threads).build().expect("threads can be started")
}

/// Times one factorisation and one solution for every line read, so that the caller can alternate.
fn serve(level: usize, threads: usize) {
    let mesh = icosphere(level);
    let (pattern, values) = step_matrix(&mesh, 1e5, 1e-3, 1);
    let analysis = Arc::new(Analysis::new(pattern, 4, &mesh.points).expect("the pattern is sound"));
    let mut factor = Factor::new(&analysis);
    let pool = pool(threads);
    for _ in std::io::stdin().lines() {
        let mut x = random_vector(analysis.n(), 2);
        let (a, b) = pool.install(|| {
            let a = seconds(|| factor.factorise(&values).expect("the matrix is quasi-definite"));
            (a, seconds(|| factor.solve_in_place(&mut x)))
        });
        println!("{a} {b}");
        // One line back for every line in, at once.
        let _ = std::io::Write::flush(&mut std::io::stdout());
    }
}

fn main() {
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    if let [word, level, threads] = &arguments[..]
        && word == "factorise"
        && let (Ok(level), Ok(threads)) = (level.parse(), threads.parse())
    {
        return serve(level, threads);
    }
    let folder = arguments.first().map(PathBuf::from);
    let pools = [pool(1), pool(2)];
    println!("vertices  analysis  faer factor/solve  ours 1 thread  ours 2 threads  ratio 1, 2: factor | solve");
    for (level, repeats) in [(3, 41), (4, 21), (5, 9)] {
        let mesh = icosphere(level);
        let (pattern, values) = step_matrix(&mesh, 1e5, 1e-3, 1);
        if let Some(folder) = &folder {
            let path = folder.join(format!("step_{level}.mtx"));
            write_matrix_market(&path, &pattern, &values).expect("the folder can be written");
        }
        let mut analysed = None;
        let analysis_time = median(
            (0..3)
                .map(|_| {
                    seconds(|| analysed = Analysis::new(pattern.clone(), 4, &mesh.points).ok())
                })
                .collect(),
        );
        let analysis = Arc::new(analysed.expect("the pattern is sound"));
        let mut reference = Reference::new(&analysis);
        let mut factors = [Factor::new(&analysis), Factor::new(&analysis)];
        let mut times = vec![Vec::new(); 6];
        for _ in 0..=repeats {
            let mut x = random_vector(analysis.n(), 2);
            times[0].push(seconds(|| reference.factorise(&values)));
            times[1].push(seconds(|| reference.solve(&mut x)));
            for (k, (pool, factor)) in pools.iter().zip(&mut factors).enumerate() {
                let mut x = random_vector(analysis.n(), 2);
                pool.install(|| {
                    times[2 + 2 * k].push(seconds(|| factor.factorise(&values).expect("sound")));
                    times[3 + 2 * k].push(seconds(|| factor.solve_in_place(&mut x)));
                });
            }
        }
        // The first repeat touches fresh memory.
        let [f, s, f1, s1, f2, s2] =
            std::array::from_fn(|k| median(times[k][1..].to_vec()));
        println!(
            "{:8}  {analysis_time:.4}  {f:.4}/{s:.5}  {f1:.4}/{s1:.5}  {f2:.4}/{s2:.5}  {:.2}, {:.2} | {:.2}, {:.2}",
            mesh.points.len(), f1 / f, f2 / f, s1 / s, s2 / s
        );
    }
}
