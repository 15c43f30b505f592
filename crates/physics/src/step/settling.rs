//! Lipids at ease with the start shape.

use super::advance::Simulation;
use super::mechanics;
use crate::PhysicsError;
use crate::state::State;

/// Rounds of [`Simulation::settle_lipids`].
const SETTLING_ROUNDS: usize = 8;

impl Simulation {
    /// Give the lipids the density that is at ease with the tension of the start shape. Otherwise the first step would
    /// stretch or compress the membrane at once, and the energy of that would spoil the ledger.
    pub(super) fn settle_lipids(&mut self) -> Result<(), PhysicsError> {
        let modulus = self.parameters.area_compression_modulus;
        // Only where they lie as `State::at_rest` put them; who laid them otherwise had a reason.
        let relaxed = 1.0 + self.state.tension.first().copied().unwrap_or(0.0) / modulus;
        let untouched = self
            .state
            .lipid
            .iter()
            .zip(&self.measured.geometry.vertex_area)
            .all(|(m, a)| (m * relaxed - a).abs() <= 1e-6 * a);
        if !untouched {
            return Ok(());
        }
        let (composition, coverage, marker) =
            (self.state.composition(), self.state.coverage(), self.state.marker());
        let area = self.measured.geometry.total_area;
        let mean = |tension: &[f64], areas: &[f64]| -> f64 {
            tension.iter().zip(areas).map(|(t, a)| t * a).sum::<f64>() / area
        };
        for _ in 0..SETTLING_ROUNDS {
            let motion = mechanics::solve(
                &self.parameters,
                &mut self.connectivity,
                &self.state,
                &self.measured,
                self.parameters.step.first,
                &mut self.timings,
            )?;
            let areas = &self.measured.geometry.vertex_area;
            let (new, old) = (mean(&motion.tension, areas), mean(&self.state.tension, areas));
            // Half of K_A at most: a tension beyond that is not one a membrane could bear at the start. A rough mesh
            // has local tensions that say nothing about the membrane.
            let middle = new.clamp(-0.5 * modulus, 0.5 * modulus);
            let local = |t: f64| middle + (t - new).clamp(-0.01 * modulus, 0.01 * modulus);
            let State { lipid, composition_amount, bound_amount, marker_amount, tension, .. } = &mut self.state;
            for ((m, a), (t, solved)) in lipid.iter_mut().zip(areas).zip(tension.iter_mut().zip(&motion.tension)) {
                *t = local(*solved);
                *m = a / (1.0 + *t / modulus);
            }
            for (amount, field) in
                [(composition_amount, &composition), (bound_amount, &coverage), (marker_amount, &marker)]
            {
                for (n, (f, m)) in amount.iter_mut().zip(field.iter().zip(lipid.iter())) {
                    *n = f * m;
                }
            }
            self.state.set_pressures(&motion.pressure);
            self.measure();
            if (new - old).abs() <= 1e-3 * (new.abs() + self.parameters.bending_rigidity.at_zero / area) {
                break;
            }
        }
        Ok(())
    }
}
