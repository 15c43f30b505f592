"""The solver of the shape equations is a reference for the program: it is itself held to laws and published values."""

import numpy as np
import pytest
import shape_equations as se


@pytest.mark.parametrize("reduced_volume, oblate", [(0.9, False), (0.8, False), (0.9, True)])
def test_scale_invariance(reduced_volume, oblate):
    """2ΣA = 3PV: bending energy at C = 0 knows no length (elementary). None of the equations solved says so."""
    shape = se.vesicle(reduced_volume, oblate)
    area, volume = 4 * np.pi, reduced_volume * 4 * np.pi / 3
    tension, pressure = shape.start("T"), shape.parameters[1]
    assert 2 * tension * area == pytest.approx(3 * pressure * volume, rel=1e-7)


def test_pressure_is_the_slope_of_the_energy():
    """dW = P dV at fixed area."""
    step = 0.002
    energy = [4 * np.pi * se.vesicle(0.85 + k * step).end("w") for k in (-1, 1)]
    slope = (energy[1] - energy[0]) / (2 * step * 4 * np.pi / 3)
    # Central difference: its error is of second order in the step; measured 2e-5.
    assert slope == pytest.approx(se.vesicle(0.85).parameters[1], rel=1e-4)


def test_near_the_sphere():
    """Σ tends to −6κ/R² and P to −12κ/R³, where the sphere loses stability against l = 2 (Helfrich, Z. Naturforsch. C
    28 (1973) 693)."""
    gaps = []
    for reduced_volume in (0.98, 0.995):
        shape = se.vesicle(reduced_volume)
        gaps.append([shape.start("T") + 6, shape.parameters[1] + 12])
    gaps = np.abs(gaps)
    # Linear in the amplitude, which is the root of 1 − ν.
    assert (gaps[1] < 0.6 * gaps[0]).all() and (gaps[1] < [0.3, 0.3]).all()


def test_line_tension_is_conjugate_to_the_junction():
    """dF/dλ = 2πr: F is stationary against everything else (Hellmann–Feynman)."""
    step = 0.02

    def free(line_tension):
        shape = se.two_domains(0.25, line_tension)
        return 2 * np.pi * (shape.end("w") + line_tension * shape.start("r", 1))

    slope = (free(1 + step) - free(1 - step)) / (2 * step)
    # Second order in the step; measured 2e-7.
    assert slope == pytest.approx(2 * np.pi * se.two_domains(0.25, 1).start("r", 1), rel=2e-6)


def test_work_of_a_tether():
    """dF/dh = f for a load that hardly varies (its weights follow the shape): F = W + σA between two heights."""
    shapes = se.tether(50.0, 0.02, [0.1, 0.195, 0.2, 0.205])

    def free(shape):
        return 2 * np.pi * (shape.end("w") + 50.0 * shape.end("a"))

    slope = (free(shapes[3]) - free(shapes[1])) / 0.01
    # The load's spread, 0.02, changes with height: measured 2e-4.
    assert slope == pytest.approx(-2 * np.pi * shapes[2].end("eta"), rel=1e-3)


def test_tether_overshoot():
    """f_max/f₀ = 1.13 for a point force (Derényi, Jülicher & Prost, Phys. Rev. Lett. 88 (2002) 238101)."""
    shapes = se.tether(200.0, 0.003, [0.05, 0.1, 0.2, 0.3, 0.36, 0.38, 0.4])
    force = [-shape.end("eta") / np.sqrt(2 * 200.0) for shape in shapes]
    assert max(force) == pytest.approx(1.13, abs=0.005)
