//! Values of all kinds, exact powers of ten, faults with their places.

use super::*;

const THERMAL: f64 = BOLTZMANN * 298.0;

#[test]
fn values_of_all_kinds_are_read() {
    let cases = [
        ("20 kBT", measure::ENERGY, 20.0 * THERMAL),
        ("0.5 pN", measure::FORCE, 0.5e-12),
        ("10 um", measure::LENGTH, 1e-5),
        ("10 µm", measure::LENGTH, 1e-5),
        ("10μm", measure::LENGTH, 1e-5),
        ("1e-9 N s/m", measure::SURFACE_VISCOSITY, 1e-9),
        ("1e-9 N·s·m^-1", measure::SURFACE_VISCOSITY, 1e-9),
        ("3 /s", measure::RATE, 3.0),
        ("3 1/s", measure::RATE, 3.0),
        ("3 s⁻¹", measure::RATE, 3.0),
        ("1.2 um^2/s", measure::DIFFUSION, 1.2e-12),
        ("1.2 µm²/s", measure::DIFFUSION, 1.2e-12),
        ("100 mM", measure::CONCENTRATION, 100.0),
        ("2 min", measure::TIME, 120.0),
        (".5 kBT/nm^2", measure::TENSION, 0.5 * THERMAL * 1e18),
        ("0.1 /uM/s", measure::ON_RATE, 100.0),
        ("6.02214076e23 /m^3", measure::CONCENTRATION, 1.0),
        ("1 bar", measure::PRESSURE, 1e5),
        ("1 mPa*s", measure::BULK_VISCOSITY, 1e-3),
    ];
    for (text, kind, expected) in cases {
        let value = parse_as(text, &kind, Some(THERMAL)).expect(text);
        // Powers of ten are exact; kBT and division round a few times.
        assert!((value / expected - 1.0).abs() < 1e-14, "{text}: {value:e}");
    }
}

#[test]
fn canonical_units_have_factor_one_and_examples_fit() {
    for kind in measure::ALL {
        let value = parse_as(&format!("0.1 {}", kind.unit), &kind, None).expect(kind.unit);
        assert_eq!(value, 0.1, "{}", kind.unit);
        parse_as(kind.example, &kind, Some(THERMAL)).expect(kind.example);
    }
}

#[test]
fn faults_are_named_with_their_place() {
    let cases = [
        ("10 foo", 3..6, "not a unit"),
        ("ten um", 0..6, "no number"),
        ("1,5 um", 1..2, "comma"),
        ("nan um", 0..6, "finite"),
        ("1e999 um", 0..5, "finite"),
        ("10 s", 0..4, "a time [s]"),
        ("10", 0..2, "unit is missing"),
        ("10 um^x", 3..5, "power"),
        ("10 um//s", 6..7, "missing before"),
        ("10 um /", 6..7, "missing after"),
        ("25 degC", 3..7, "kelvin"),
        ("10 (um)", 3..4, "brackets"),
        ("1 um^9 m^99", 7..8, "power"),
    ];
    for (text, span, part) in cases {
        let error = parse_as(text, &measure::LENGTH, None).expect_err(text);
        assert_eq!(error.span, span, "{text}: {}", error.message);
        assert!(error.message.contains(part), "{text}: {}", error.message);
    }
}
