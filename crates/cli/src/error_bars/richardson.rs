//! Richardson extrapolation over three levels, with the grid-convergence index as uncertainty.
//!
//! # Source
//! Roache, J. Fluids Eng. 116 (1994) 405: the index and its safety factors 1.25 (three levels) and 3 (order assumed).
//! Refinement ratios that differ: Celik, Ghia, Roache & Freitas, J. Fluids Eng. 130 (2008) 078001. Limits on the order
//! that is used: Oberkampf & Roy, Verification and Validation in Scientific Computing (2010), ch. 8.6 (from memory).

use serde::Serialize;

/// Safety factor where three levels agree on the order.
const SAFETY_OBSERVED: f64 = 1.25;
/// Safety factor where the order is assumed.
const SAFETY_ASSUMED: f64 = 3.0;
/// Share by which the observed order may differ from the expected one within the asymptotic range.
const ORDER_LATITUDE: f64 = 0.35;
/// The same, for the ratio of the two indices, which is 1 in the asymptotic range.
const RATIO_LATITUDE: f64 = 0.25;
/// Least order that is used.
const LEAST_ORDER: f64 = 0.5;
/// Largest order that is looked for.
const MOST_ORDER: f64 = 20.0;
/// Levels closer together than this ratio say nothing about the order.
const LEAST_RATIO: f64 = 1.1;
/// Differences below this share of the values are rounding.
const ROUNDING: f64 = 1e-10;

/// A number at one level.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Level {
    /// What is refined, in any unit: edge length, step, width.
    pub size: f64,
    /// The number.
    pub value: f64,
    /// Half width of the bracket in which it was found, 0 for a number that was measured.
    pub bracket: f64,
}

/// What the levels say.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Verdict {
    /// The levels fall in line: the number is extrapolated.
    Asymptotic,
    /// The levels agree, to rounding or within their brackets.
    Settled,
    /// The levels go up and down.
    Oscillating,
    /// Differences grow with refinement.
    Diverging,
    /// The levels converge, but not with the order they should.
    OtherOrder,
    /// The differences are so large that the indices of the two pairs do not belong together.
    TooCoarse,
    /// The levels are hardly different or out of order.
    SameSize,
}

/// A number with its uncertainty.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Estimate {
    /// The extrapolated number in the asymptotic range, else that of the finest level.
    pub value: f64,
    /// Half width of the band in which the limit is expected.
    pub uncertainty: f64,
    /// Observed order of convergence.
    pub observed_order: Option<f64>,
    /// Order that the uncertainty was computed with.
    pub order: f64,
    /// Safety factor.
    pub safety_factor: f64,
    /// Index of the coarse pair over that of the fine pair, brought to the same level: 1 in the asymptotic range.
    pub index_ratio: Option<f64>,
    /// What the levels say.
    pub verdict: Verdict,
}

impl Verdict {
    /// A plain warning, where one is due.
    pub fn warning(self) -> Option<&'static str> {
        match self {
            Self::Asymptotic | Self::Settled => None,
            Self::Oscillating => Some("the levels go up and down: not in the asymptotic range, order assumed"),
            Self::Diverging => Some("the differences grow with refinement: not converged"),
            Self::OtherOrder => Some("the order is far from the expected one: not in the asymptotic range"),
            Self::TooCoarse => Some("the levels lie far apart: too coarse for the asymptotic range"),
            Self::SameSize => Some("the levels are hardly finer than each other: no order can be seen"),
        }
    }
}

/// Order p of errors proportional to size^p: (s₃^p − s₂^p)/(s₂^p − s₁^p) = `coarse`/`fine`, of sizes s₁ < s₂ < s₃ with
/// the ratios s₂/s₁ and s₃/s₂. `None` where no positive order does it.
pub fn observed_order(fine_ratio: f64, coarse_ratio: f64, fine: f64, coarse: f64) -> Option<f64> {
    let wanted = coarse / fine;
    let quotient = |p: f64| fine_ratio.powf(p) * (coarse_ratio.powf(p) - 1.0) / (fine_ratio.powf(p) - 1.0);
    // It grows with p, from the ratio of the logarithms on.
    let (mut low, mut high) = (1e-6, MOST_ORDER);
    if !wanted.is_finite() || wanted <= quotient(low) {
        return None;
    }
    if wanted >= quotient(high) {
        return Some(high);
    }
    while high - low > 1e-12 * high {
        let middle = 0.5 * (low + high);
        if quotient(middle) < wanted {
            low = middle;
        } else {
            high = middle;
        }
    }
    Some(0.5 * (low + high))
}

/// The limit of three levels, finest first; `expected` is the order of the method.
pub fn estimate([fine, middle, coarse]: [Level; 3], expected: f64) -> Estimate {
    let (r21, r32) = (middle.size / fine.size, coarse.size / middle.size);
    let (e21, e32) = (middle.value - fine.value, coarse.value - middle.value);
    let spread = e21.abs().max(e32.abs()).max((e21 + e32).abs());
    let scale = fine.value.abs().max(middle.value.abs()).max(coarse.value.abs());
    let brackets = fine.bracket.max(middle.bracket).max(coarse.bracket);
    let plain = |verdict, uncertainty, order, safety_factor| Estimate {
        value: fine.value,
        uncertainty: uncertainty + brackets,
        observed_order: None,
        order,
        safety_factor,
        index_ratio: None,
        verdict,
    };
    if spread <= (ROUNDING * scale).max(2.0 * brackets) {
        return plain(Verdict::Settled, spread, expected, 1.0);
    }
    if !(r21 >= LEAST_RATIO && r32 >= LEAST_RATIO) {
        return plain(Verdict::SameSize, SAFETY_ASSUMED * spread, expected, SAFETY_ASSUMED);
    }
    let index = |ratio: f64, difference: f64, order: f64| difference.abs() / (ratio.powf(order) - 1.0);
    let guess = |order: f64| (SAFETY_ASSUMED * index(r21, e21, order)).max(spread);
    if e21 * e32 < 0.0 || e21 == 0.0 || e32 == 0.0 {
        return plain(Verdict::Oscillating, guess(expected), expected, SAFETY_ASSUMED);
    }
    let Some(observed) = observed_order(r21, r32, e21, e32) else {
        return plain(Verdict::Diverging, guess(LEAST_ORDER), LEAST_ORDER, SAFETY_ASSUMED);
    };
    let relative = |difference: f64, value: f64| if value == 0.0 { f64::INFINITY } else { (difference / value).abs() };
    let ratio = index(r32, relative(e32, middle.value), observed)
        / (r21.powf(observed) * index(r21, relative(e21, fine.value), observed));
    let index_ratio = Some(ratio).filter(|ratio| ratio.is_finite());
    let verdict = if (observed - expected).abs() > ORDER_LATITUDE * expected {
        Verdict::OtherOrder
    } else if index_ratio.is_none_or(|ratio| (ratio - 1.0).abs() > RATIO_LATITUDE) {
        Verdict::TooCoarse
    } else {
        Verdict::Asymptotic
    };
    if verdict != Verdict::Asymptotic {
        let order = observed.clamp(LEAST_ORDER.min(expected), expected);
        let uncertainty = SAFETY_ASSUMED * index(r21, e21, order);
        let estimate = plain(verdict, uncertainty, order, SAFETY_ASSUMED);
        return Estimate { observed_order: Some(observed), index_ratio, ..estimate };
    }
    let growth = r21.powf(observed);
    // What the brackets of both levels can do to the extrapolated number.
    let brackets = (growth * fine.bracket + middle.bracket) / (growth - 1.0);
    Estimate {
        value: fine.value - e21 / (growth - 1.0),
        uncertainty: SAFETY_OBSERVED * index(r21, e21, observed) + brackets,
        observed_order: Some(observed),
        order: observed,
        safety_factor: SAFETY_OBSERVED,
        index_ratio,
        verdict,
    }
}

/// One number from several independent refinements with the same finest level: shifts and uncertainties add up.
pub fn combined(finest: f64, estimates: &[Estimate]) -> (f64, f64) {
    estimates.iter().fold((finest, 0.0), |(value, uncertainty), estimate| {
        (value + estimate.value - finest, uncertainty + estimate.uncertainty)
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn levels(sizes: [f64; 3], values: [f64; 3]) -> [Level; 3] {
        std::array::from_fn(|k| Level { size: sizes[k], value: values[k], bracket: 0.0 })
    }

    fn close(found: f64, wanted: f64, tolerance: f64) {
        assert!((found - wanted).abs() <= tolerance, "{found} instead of {wanted}");
    }

    /// Examples of Celik et al. (2008), table 1 (from memory): cells N, values φ → order p, extrapolated value, index.
    #[test]
    fn worked_examples_of_the_journal() {
        // Reattachment length: N = 18000, 8000, 4500.
        let sizes = [18000f64, 8000.0, 4500.0].map(|n| n.powf(-0.5));
        let found = estimate(levels(sizes, [6.063, 5.972, 5.863]), 2.0);
        let order = found.observed_order.expect("an order");
        close(order, 1.53, 0.01);
        assert_eq!(found.verdict, Verdict::Asymptotic);
        close(found.value, 6.1685, 1e-3);
        close(found.uncertainty / 6.063, 0.022, 5e-4);
        // Velocity: N = 18000, 4500, 980; converges with order 0.75, which a second-order method should not.
        let sizes = [18000f64, 4500.0, 980.0].map(|n| n.powf(-0.5));
        let values = [10.7880, 10.7250, 10.6050];
        let found = estimate(levels(sizes, values), 2.0);
        close(found.observed_order.expect("an order"), 0.75, 0.01);
        assert_eq!(found.verdict, Verdict::OtherOrder);
        let at_its_order = estimate(levels(sizes, values), 0.75);
        close(at_its_order.value, 10.8801, 2e-3);
        close(at_its_order.uncertainty / 10.7880, 0.011, 5e-4);
        assert!(found.uncertainty > 2.0 * at_its_order.uncertainty, "the guess is the more cautious");
        // Velocity: oscillating.
        let found = estimate(levels(sizes, [6.0042, 5.9624, 6.0909]), 2.0);
        assert_eq!(found.verdict, Verdict::Oscillating);
        assert!(found.uncertainty / 6.0042 > 0.005);
    }

    /// Pressure recovery in an inlet on grids 1, 2, 4: the worked example of Roache's procedure in the NPARC Alliance's
    /// tutorial (from memory).
    #[test]
    fn worked_example_of_the_inlet() {
        let found = estimate(levels([1.0, 2.0, 4.0], [0.97050, 0.96854, 0.96178]), 2.0);
        close(found.observed_order.expect("an order"), 1.786170, 1e-4);
        close(found.value, 0.97130, 1e-5);
        close(found.uncertainty / 0.97050, 0.00103083, 1e-6);
        // Stated there as 0.997980, the other way up.
        close(1.0 / found.index_ratio.expect("a ratio"), 0.997980, 1e-4);
    }

    #[test]
    fn an_exact_power_is_recovered_at_any_ratios() {
        for order in [0.7, 1.0, 1.5, 2.0, 3.1] {
            let sizes = [0.1, 0.137, 0.211];
            let found = estimate(levels(sizes, sizes.map(|s: f64| 5.0 + 0.9 * s.powf(order))), order);
            close(found.observed_order.expect("an order"), order, 1e-6);
            close(found.value, 5.0, 1e-9);
            assert_eq!(found.verdict, Verdict::Asymptotic);
        }
    }

    #[test]
    fn every_way_to_miss_the_asymptotic_range_is_told() {
        let sizes = [1.0, 2.0, 4.0];
        let verdict = |values: [f64; 3]| estimate(levels(sizes, values), 2.0).verdict;
        assert_eq!(verdict([1.0, 1.0, 1.0]), Verdict::Settled);
        assert_eq!(verdict([1.0, 1.1, 1.05]), Verdict::Oscillating);
        assert_eq!(verdict([1.0, 1.2, 1.3]), Verdict::Diverging);
        assert_eq!(verdict([1.0, 1.1, 1.25]), Verdict::OtherOrder);
        assert_eq!(verdict([1.0, 1.8, 5.0]), Verdict::TooCoarse);
        assert_eq!(estimate(levels([1.0, 1.05, 1.1], [1.0, 1.1, 1.2]), 2.0).verdict, Verdict::SameSize);
        assert_eq!(estimate(levels([1.0, 0.9, 0.8], [1.0, 1.1, 1.2]), 2.0).verdict, Verdict::SameSize);
    }

    #[test]
    fn brackets_widen_the_band() {
        let mut wide = levels([1.0, 2.0, 4.0], [1.01, 1.04, 1.16]);
        let narrow = estimate(wide, 2.0);
        wide.iter_mut().for_each(|level| level.bracket = 0.003);
        let wide = estimate(wide, 2.0);
        close(narrow.value, 1.0, 1e-12);
        // (4 × 0.003 + 0.003)/(4 − 1).
        close(wide.uncertainty - narrow.uncertainty, 0.005, 1e-12);
        let blurred = levels([1.0, 2.0, 4.0], [1.01, 1.013, 1.008]).map(|level| Level { bracket: 0.01, ..level });
        assert_eq!(estimate(blurred, 2.0).verdict, Verdict::Settled);
    }

    #[test]
    fn independent_refinements_add_up() {
        let mesh = estimate(levels([1.0, 2.0, 4.0], [1.01, 1.04, 1.16]), 2.0);
        let step = estimate(levels([1.0, 2.0, 4.0], [1.01, 1.0, 0.98]), 1.0);
        let (value, uncertainty) = combined(1.01, &[mesh, step]);
        close(value, 1.01 - 0.01 + 0.01, 1e-12);
        close(uncertainty, mesh.uncertainty + step.uncertainty, 1e-15);
    }
}
