//! The kinds of quantities that a scenario asks for, by name.

use super::{Dimension, Measure, dimension};

const fn define(
    name: &'static str,
    dimension: Dimension,
    unit: &'static str,
    example: &'static str,
) -> Measure {
    Measure {
        name,
        dimension,
        unit,
        example,
    }
}

/// [m]
pub const LENGTH: Measure = define("length", dimension(0, 1, 0, 0, 0), "m", "10 um");
/// [m²]
pub const AREA: Measure = define("area", dimension(0, 2, 0, 0, 0), "m^2", "50 nm^2");
/// [m³]
pub const VOLUME: Measure = define("volume", dimension(0, 3, 0, 0, 0), "m^3", "500 um^3");
/// [s]
pub const TIME: Measure = define("time", dimension(0, 0, 1, 0, 0), "s", "2 s");
/// [K]
pub const TEMPERATURE: Measure = define("temperature", dimension(0, 0, 0, 1, 0), "K", "298 K");
/// [J]
pub const ENERGY: Measure = define("energy", dimension(1, 2, -2, 0, 0), "J", "20 kBT");
/// [1/m]
pub const CURVATURE: Measure = define("curvature", dimension(0, -1, 0, 0, 0), "/m", "0.5 /um");
/// [N·s/m]
pub const SURFACE_VISCOSITY: Measure = define(
    "surface viscosity",
    dimension(1, 0, -1, 0, 0),
    "N s/m",
    "1e-9 N s/m",
);
/// [N/m]
pub const TENSION: Measure = define(
    "tension (force per length)",
    dimension(1, 0, -2, 0, 0),
    "N/m",
    "0.01 mN/m",
);
/// [N]
pub const FORCE: Measure = define("force", dimension(1, 1, -2, 0, 0), "N", "0.5 pN");
/// [Pa]
pub const PRESSURE: Measure = define("pressure", dimension(1, -1, -2, 0, 0), "Pa", "0.2 Pa");
/// [1/s]
pub const RATE: Measure = define("rate", dimension(0, 0, -1, 0, 0), "/s", "3 /s");
/// [m²/s]
pub const DIFFUSION: Measure = define(
    "diffusion constant",
    dimension(0, 2, -1, 0, 0),
    "m^2/s",
    "1.2 um^2/s",
);
/// [N·s/m³]
pub const FRICTION: Measure = define(
    "friction per area",
    dimension(1, -2, -1, 0, 0),
    "N s/m^3",
    "1e3 N s/m^3",
);
/// [Pa·s]
pub const BULK_VISCOSITY: Measure =
    define("viscosity", dimension(1, -1, -1, 0, 0), "Pa s", "1 mPa s");
/// [mol/m³]
pub const CONCENTRATION: Measure = define(
    "concentration",
    dimension(0, -3, 0, 0, 1),
    "mol/m^3",
    "100 mM",
);
/// [mol]
pub const AMOUNT: Measure = define(
    "amount of substance",
    dimension(0, 0, 0, 0, 1),
    "mol",
    "0.05 fmol",
);
/// [m³/(mol·s)]
pub const ON_RATE: Measure = define(
    "rate per concentration",
    dimension(0, 3, -1, 0, -1),
    "m^3/mol/s",
    "0.1 /uM/s",
);
/// [m/(s·Pa)]
pub const PERMEABILITY: Measure = define(
    "velocity per pressure",
    dimension(-1, 2, 1, 0, 0),
    "m/s/Pa",
    "1e-13 m/s/Pa",
);

/// All of them.
pub const ALL: [Measure; 19] = [
    LENGTH,
    AREA,
    VOLUME,
    TIME,
    TEMPERATURE,
    ENERGY,
    CURVATURE,
    SURFACE_VISCOSITY,
    TENSION,
    FORCE,
    PRESSURE,
    RATE,
    DIFFUSION,
    FRICTION,
    BULK_VISCOSITY,
    CONCENTRATION,
    AMOUNT,
    ON_RATE,
    PERMEABILITY,
];
