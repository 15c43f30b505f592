//! Orders of convergence, slopes, extrapolation.

/// Slope of the least-squares line through (x, y).
pub fn slope(x: &[f64], y: &[f64]) -> f64 {
    let n = x.len() as f64;
    let (mx, my) = (x.iter().sum::<f64>() / n, y.iter().sum::<f64>() / n);
    let above: f64 = x.iter().zip(y).map(|(x, y)| (x - mx) * (y - my)).sum();
    above / x.iter().map(|x| (x - mx) * (x - mx)).sum::<f64>()
}

/// Order p of errors ∝ hᵖ with h ∝ 1/√vertices.
pub fn order_in_vertices(vertices: &[f64], errors: &[f64]) -> f64 {
    let edge: Vec<f64> = vertices.iter().map(|n| -0.5 * n.ln()).collect();
    let size: Vec<f64> = errors.iter().map(|e| e.abs().max(1e-300).ln()).collect();
    slope(&edge, &size)
}

/// Order p of errors ∝ hᵖ.
pub fn order_in_size(sizes: &[f64], errors: &[f64]) -> f64 {
    let x: Vec<f64> = sizes.iter().map(|h| h.ln()).collect();
    let y: Vec<f64> = errors.iter().map(|e| e.abs().max(1e-300).ln()).collect();
    slope(&x, &y)
}

/// Value at h = 0 of values a + b hᵖ at two sizes.
pub fn extrapolate(fine: (f64, f64), coarse: (f64, f64), power: f64) -> f64 {
    let (p, q) = (fine.0.powf(power), coarse.0.powf(power));
    (fine.1 * q - coarse.1 * p) / (q - p)
}

/// Integral of f from a to b by Simpson's rule with 2n intervals.
pub fn simpson(f: impl Fn(f64) -> f64, a: f64, b: f64, n: usize) -> f64 {
    let h = (b - a) / (2 * n) as f64;
    let inner: f64 = (1..2 * n).map(|i| f(a + h * i as f64) * if i % 2 == 1 { 4.0 } else { 2.0 }).sum();
    (f(a) + inner + f(b)) * h / 3.0
}
