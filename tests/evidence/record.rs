//! Records of what was measured, one JSON line each, for the table of results.
//!
//! With the environment variable `PELLICLE_RESULTS` set to a directory, every check appends to `records.jsonl`
//! there; without it, checks only print.

use serde_json::json;
use std::fs::OpenOptions;
use std::io::Write;
use std::path::Path;

/// One check: a quantity, where its expected value comes from, what came out at each level of refinement.
pub struct Record<'a> {
    /// Name of the law, as the test file.
    pub law: &'a str,
    /// The quantity and the case.
    pub quantity: &'a str,
    /// Author, journal, year; or how the value was computed.
    pub source: &'a str,
    /// Expected value.
    pub expected: f64,
    /// What the levels are: "vertices", "step", "edges across", ….
    pub level: &'a str,
    /// Level and measured value.
    pub measured: Vec<(f64, f64)>,
    /// Error at each level, relative unless `absolute`.
    pub errors: Vec<f64>,
    /// Whether errors are absolute.
    pub absolute: bool,
    /// Observed order in the edge length or the step.
    pub order: Option<f64>,
    /// The limit on the error at the last level.
    pub limit: f64,
}

impl<'a> Record<'a> {
    /// A record of values with one expected value for all levels and relative errors.
    pub fn of(
        law: &'a str,
        quantity: &'a str,
        source: &'a str,
        expected: f64,
        level: &'a str,
        measured: Vec<(f64, f64)>,
        limit: f64,
    ) -> Self {
        let errors = measured.iter().map(|(_, value)| (value - expected) / expected).collect();
        Self { law, quantity, source, expected, level, measured, errors, absolute: false, order: None, limit }
    }

    /// The same with absolute errors.
    pub fn absolute(mut self) -> Self {
        self.errors = self.measured.iter().map(|(_, value)| value - self.expected).collect();
        self.absolute = true;
        self
    }

    /// The same with the order of convergence observed over its levels of vertex numbers.
    pub fn with_order(mut self) -> Self {
        let vertices: Vec<f64> = self.measured.iter().map(|(level, _)| *level).collect();
        self.order = Some(super::fit::order_in_vertices(&vertices, &self.errors));
        self
    }

    /// The size of the error at the last level.
    pub fn last_error(&self) -> f64 {
        self.errors.last().map_or(f64::NAN, |error| error.abs())
    }

    /// Print and write the record. Call before asserting, so that misses are recorded too.
    pub fn write(&self) {
        let values: Vec<String> = self
            .measured
            .iter()
            .zip(&self.errors)
            .map(|((level, value), error)| format!("{level}: {value:.6} ({error:+.2e})"))
            .collect();
        println!(
            "{}: expected {:.6}; {}{}",
            self.quantity,
            self.expected,
            values.join(", "),
            self.order.map_or(String::new(), |order| format!("; order {order:.2}"))
        );
        let Some(directory) = std::env::var_os("PELLICLE_RESULTS") else {
            return;
        };
        let line = json!({
            "law": self.law,
            "quantity": self.quantity,
            "source": self.source,
            "expected": self.expected,
            "level": self.level,
            "measured": self.measured,
            "errors": self.errors,
            "absolute": self.absolute,
            "order": self.order,
            "limit": self.limit,
            "long": self.measured.last().is_some_and(|(level, _)| self.level == "vertices" && *level > 5000.0),
        });
        let path = Path::new(&directory).join("records.jsonl");
        let file = OpenOptions::new().create(true).append(true).open(&path);
        match file.and_then(|mut file| writeln!(file, "{line}")) {
            Ok(()) => {}
            Err(error) => eprintln!("{}: {error}", path.display()),
        }
    }

    /// Write the record and fail if its last error exceeds the limit.
    #[track_caller]
    pub fn check(&self) {
        self.write();
        self.assert_limit();
    }

    /// Write the record and fail if its last error exceeds the limit or its order drops below `least`.
    #[track_caller]
    pub fn check_with_order(&self, least: f64) {
        self.write();
        self.assert_with_order(least);
    }

    /// Fail if the last error exceeds the limit.
    #[track_caller]
    pub fn assert_limit(&self) {
        assert!(
            self.last_error() <= self.limit,
            "{}: error {:.3e} beyond {:.3e}",
            self.quantity,
            self.last_error(),
            self.limit
        );
    }

    /// Fail if the last error exceeds the limit or the order drops below `least`.
    #[track_caller]
    pub fn assert_with_order(&self, least: f64) {
        self.assert_limit();
        let order = self.order.unwrap_or(f64::NAN);
        assert!(order >= least, "{}: order {order:.2} below {least}", self.quantity);
    }
}
