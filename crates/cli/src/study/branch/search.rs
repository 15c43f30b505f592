//! Walking along a parameter and bisecting for the value at which the outcome changes.
//!
//! Nothing here knows of runs: a trial is asked for at a share of the way from the first value to the last, so that
//! the logic can be tested on a toy.

/// A trial at one value of the parameter.
pub trait Trial {
    /// Share of the way from the first value to the last.
    fn share(&self) -> f64;
    /// The value, in SI.
    fn value(&self) -> f64;
    /// Class of its outcome.
    fn outcome(&self) -> &str;
}

/// Two neighbouring values with different outcomes.
#[derive(Clone, Debug)]
pub struct Bracket<T> {
    /// The last trial with the outcome before.
    pub held: T,
    /// The first with another.
    pub changed: T,
}

impl<T: Trial> Bracket<T> {
    /// Middle of the bracket.
    pub fn value(&self) -> f64 {
        0.5 * (self.held.value() + self.changed.value())
    }

    /// Half its width.
    pub fn half_width(&self) -> f64 {
        0.5 * (self.held.value() - self.changed.value()).abs()
    }
}

/// How a value is searched for.
#[derive(Clone, Copy, Debug)]
pub struct Search {
    /// Where the walk starts, as a share.
    pub from: f64,
    /// Where it ends.
    pub to: f64,
    /// Steps of the walk until the outcome changes.
    pub steps: usize,
    /// Largest width of the bracket relative to its value.
    pub tolerance: f64,
    /// Whether each trial starts from the end state of the nearest one with the outcome before.
    pub follow: bool,
}

/// Halvings after which a bracket is as narrow as numbers are.
const MOST_HALVINGS: usize = 50;

impl Search {
    /// Search; `start` is the trial at the start where there is one. Returns the bracket, or the last trial where the
    /// outcome never changed.
    ///
    /// # Errors
    /// Those of `ask`.
    pub fn run<T: Trial, E>(
        &self,
        start: Option<T>,
        ask: &mut dyn FnMut(f64, Option<&T>) -> Result<T, E>,
    ) -> Result<Result<Bracket<T>, T>, E> {
        let mut held = match start {
            Some(start) => start,
            None => ask(self.from, None)?,
        };
        let mut changed = None;
        for step in 1..=self.steps {
            let share = match step == self.steps {
                true => self.to,
                false => self.from + (self.to - self.from) * step as f64 / self.steps as f64,
            };
            let trial = ask(share, self.follow.then_some(&held))?;
            if trial.outcome() != held.outcome() {
                changed = Some(trial);
                break;
            }
            held = trial;
        }
        let Some(changed) = changed else { return Ok(Err(held)) };
        let mut bracket = Bracket { held, changed };
        for _ in 0..MOST_HALVINGS {
            if 2.0 * bracket.half_width() <= self.tolerance * bracket.value().abs() {
                break;
            }
            let share = 0.5 * (bracket.held.share() + bracket.changed.share());
            let trial = ask(share, self.follow.then_some(&bracket.held))?;
            if trial.outcome() == bracket.held.outcome() {
                bracket.held = trial;
            } else {
                bracket.changed = trial;
            }
        }
        Ok(Ok(bracket))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::convert::Infallible;

    /// The end of dx/dt = p − x³ + x from some x: a fold at p = ± 2/(3√3) with hysteresis between.
    #[derive(Clone, Debug)]
    struct Toy {
        share: f64,
        x: f64,
    }

    impl Trial for Toy {
        fn share(&self) -> f64 {
            self.share
        }

        fn value(&self) -> f64 {
            2.0 * self.share - 1.0
        }

        fn outcome(&self) -> &str {
            if self.x > 0.0 { "right" } else { "left" }
        }
    }

    fn settle(share: f64, from: Option<&Toy>) -> Result<Toy, Infallible> {
        let parameter = 2.0 * share - 1.0;
        let mut x = from.map_or(-1.0, |trial| trial.x);
        for _ in 0..200_000 {
            x += 0.01 * (parameter - x.powi(3) + x);
        }
        Ok(Toy { share, x })
    }

    #[test]
    fn both_folds_of_a_hysteresis_loop_are_found() {
        let fold = 2.0 / 27f64.sqrt();
        let up = Search { from: 0.0, to: 1.0, steps: 7, tolerance: 1e-3, follow: true };
        let Ok(Ok(found)) = up.run(None, &mut settle) else { panic!("no change") };
        assert!((found.value() - fold).abs() <= found.half_width() + 1e-4, "{}", found.value());
        assert_eq!((found.held.outcome(), found.changed.outcome()), ("left", "right"));
        let down = Search { from: found.changed.share, to: 0.0, ..up };
        let Ok(Ok(back)) = down.run(Some(found.changed), &mut settle) else { panic!("no change") };
        assert!((back.value() + fold).abs() <= back.half_width() + 1e-4, "{}", back.value());
        assert_eq!((back.held.outcome(), back.changed.outcome()), ("right", "left"));
    }

    #[test]
    fn fresh_starts_do_not_follow_a_branch() {
        // From x = −1 the right side is reached beyond the fold only, whichever way one comes.
        let fold = 2.0 / 27f64.sqrt();
        let down = Search { from: 1.0, to: 0.0, steps: 1, tolerance: 1e-3, follow: false };
        let Ok(Ok(found)) = down.run(None, &mut settle) else { panic!("no change") };
        assert!((found.value() - fold).abs() <= found.half_width() + 1e-4, "{}", found.value());
    }

    #[test]
    fn an_outcome_that_never_changes_is_told() {
        let search = Search { from: 0.0, to: 0.3, steps: 3, tolerance: 1e-3, follow: true };
        let Ok(Err(last)) = search.run(None, &mut settle) else { panic!("a change") };
        assert!((last.share - 0.3).abs() < 1e-12);
    }
}
