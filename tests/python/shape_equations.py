"""Axisymmetric membranes at rest: the shape equations in arc length, solved by collocation (SciPy's solve_bvp).

Shares no code and no discretisation with the program: it is the reference of test_shapes_at_rest.py.

A profile is given by its tangent angle ψ, radius r and height z over arc length s, outward normal (sin ψ, cos ψ) of a
surface seen from its top: r' = cos ψ, z' = −sin ψ. Stationary points of

    F = ∫ κ/2 (2H − C)² dA + ∫ κ_G K dA + Σ A − P V + λ L,    2H = ψ' + sin ψ/r,

follow from a Lagrangian with multipliers γ (for r') and η (for z'), and a tension T that varies where the spontaneous
curvature C or a load density p along z depends on the place. With q = 2H − C:

    ψ' = q + C − sin ψ/r                  q' = −P r cos ψ/2κ + (γ sin ψ + η cos ψ)/κr
    r' = cos ψ                            γ' = κ q (q/2 − sin ψ/r) + T − P r sin ψ
    z' = −sin ψ                           η' = −p r
    a' = r                                T' = κ r q C'(a) + p sin ψ
    w' = r κ q²/2                         b' = r² sin ψ                m' = r p̂ (z − ẑ)

2πa, 2πw and πb are area, bending energy and volume from the top, −2πη is the load so far; m vanishes where a load of
shape p̂ has its mean height at ẑ. Where two pieces meet, ψ, r, z, η are continuous and

    κ₁ q₁ r + κ_G1 sin ψ = κ₂ q₂ r + κ_G2 sin ψ,    γ₂ = γ₁ + λ.

# Sources
Seifert, Berndl & Lipowsky, Phys. Rev. A 44 (1991) 1182 (equations); Jülicher & Lipowsky, Phys. Rev. E 53 (1996) 2670
(junctions); Derényi, Jülicher & Prost, Phys. Rev. Lett. 88 (2002) 238101 (tethers). The form with q, T and η was
derived from the Lagrangian above; test_shape_equations.py holds it to laws that none of these equations contain.
"""

from dataclasses import dataclass, field
from typing import Callable

import numpy as np
from scipy.integrate import solve_bvp

STATE = "psi q gamma eta r z a T w b m".split()
PSI, Q, GAMMA, ETA, R, Z, A, T, W, B, M = range(11)
N = len(STATE)
#: Relative residual of collocation on every interval.
TOLERANCE = 1e-6
#: Radius below which the limits at the axis are taken.
AXIS = 1e-9


@dataclass
class Piece:
    """Material of one piece of the profile; energies in one unit, lengths in one unit."""

    bending_rigidity: float = 1.0
    #: C(a) and C'(a), a = area/2π from the top.
    curvature: Callable[[np.ndarray], np.ndarray] = lambda a: 0 * a
    curvature_slope: Callable[[np.ndarray], np.ndarray] = lambda a: 0 * a
    #: Load along z per area: strength × weight(r, z).
    load_strength: float = 0.0
    load_weight: Callable[[np.ndarray, np.ndarray], np.ndarray] = lambda r, z: 0 * r
    #: Height at which the load is centred.
    load_height: float = 0.0


def slope(piece: Piece, y: np.ndarray, pressure: float) -> np.ndarray:
    """Right-hand side over arc length."""
    psi, q, gamma, eta, r, z, a, tension, *_ = y
    kappa = piece.bending_rigidity
    sine, cosine = np.sin(psi), np.cos(psi)
    curvature = piece.curvature(a)
    weight = piece.load_weight(r, z)
    load = piece.load_strength * weight
    on_axis = r < AXIS
    safe = np.where(on_axis, 1.0, r)
    parallel = np.where(on_axis, 0.5 * (q + curvature), sine / safe)
    turn = np.where(on_axis, 0.0, (gamma * sine + eta * cosine) / safe)
    return np.array([
        q + curvature - parallel,
        (turn - 0.5 * pressure * r * cosine) / kappa,
        kappa * q * (0.5 * q - parallel) + tension - pressure * r * sine,
        -load * r,
        cosine,
        -sine,
        r,
        kappa * r * q * piece.curvature_slope(a) + load * sine,
        0.5 * kappa * r * q * q,
        r * r * sine,
        r * weight * (z - piece.load_height),
    ])


@dataclass
class Shape:
    """A solution: profile and multipliers."""

    profile: list  # per piece: (arc length, states of shape (11, points))
    parameters: np.ndarray
    mesh: np.ndarray = field(repr=False, default=None)
    stacked: np.ndarray = field(repr=False, default=None)

    def end(self, name: str) -> float:
        """A state at the bottom end."""
        return float(self.profile[-1][1][STATE.index(name), -1])

    def start(self, name: str, piece: int = 0) -> float:
        """A state at the upper end of a piece."""
        return float(self.profile[piece][1][STATE.index(name), 0])

    @property
    def contour(self) -> np.ndarray:
        """Radius and height, shape (points, 2)."""
        return np.concatenate([states[[R, Z]].T for _, states in self.profile])


def solve(pieces, conditions, guess, parameters, prepare=None, tolerance=TOLERANCE):
    """Solve for a profile of several pieces.

    `parameters` starts with the arc lengths of the pieces; `prepare(pieces, parameters)` returns the pressure after
    it has set up loads; `conditions(top, bottom, parameters)` gives the residuals from the states at the ends of all
    pieces, arrays of shape (pieces, 11). `guess`: (mesh on 0..1, states of shape (pieces·11, points)).

    Raises RuntimeError where collocation does not converge.
    """
    count = len(pieces)

    def right_hand_side(x, y, p):
        pressure = prepare(pieces, p) if prepare else 0.0
        return np.concatenate([
            p[k] * slope(piece, y[N * k : N * (k + 1)], pressure) for k, piece in enumerate(pieces)
        ])

    def residuals(top, bottom, p):
        return conditions(top.reshape(count, N), bottom.reshape(count, N), p)

    found = solve_bvp(right_hand_side, residuals, guess[0], guess[1], p=parameters, tol=tolerance, max_nodes=20000)
    if not found.success:
        raise RuntimeError(f"shape equations: {found.message}")
    profile = [
        (found.x * found.p[k], found.y[N * k : N * (k + 1)]) for k in range(count)
    ]
    return Shape(profile, found.p, found.x, found.y)


def states(psi, r, s, kappa=1.0, curvature=0.0, tension=0.0):
    """A guess from tangent angle and radius over arc length."""
    from scipy.integrate import cumulative_trapezoid as running

    y = np.zeros((N, len(s)))
    y[PSI], y[R] = psi, r
    y[Z] = -running(np.sin(psi), s, initial=0)
    y[A] = running(r, s, initial=0)
    y[B] = running(r * r * np.sin(psi), s, initial=0)
    parallel = np.sin(psi) / np.maximum(r, 1e-3)
    y[Q] = np.gradient(psi, s) + parallel - curvature
    y[W] = running(0.5 * kappa * r * y[Q] ** 2, s, initial=0)
    y[T] = tension
    return y


def spheroid(reduced_volume, oblate=False, points=200):
    """Upper half of the spheroid of area 4π with a reduced volume: arc length and guess."""
    from scipy.optimize import brentq

    theta = np.linspace(0, np.pi / 2, 4000)

    def half(ratio):
        r, z = np.sin(theta), ratio * np.cos(theta)
        s = np.concatenate([[0], np.cumsum(np.hypot(np.diff(r), np.diff(z)))])
        area = 4 * np.pi * np.trapezoid(r, s)
        volume = 4 * np.pi / 3 * ratio
        return r, z, s, area, volume / (4 * np.pi / 3 * (area / (4 * np.pi)) ** 1.5)

    inside = (0.05, 1.0) if oblate else (1.0, 20.0)
    ratio = brentq(lambda c: half(c)[4] - reduced_volume, *inside)
    r, z, s, area, _ = half(ratio)
    scale = np.sqrt(4 * np.pi / area)
    psi = np.arctan2(-np.gradient(z, s), np.gradient(r, s))
    at = np.linspace(0, s[-1], points)
    return scale * s[-1], states(np.interp(at, s, psi), scale * np.interp(at, s, r), scale * at, tension=-6.0)


def vesicle(reduced_volume, oblate=False):
    """Vesicle with mirror symmetry at area 4π, κ = 1, C = 0. Parameters of the solution: half arc length, pressure P.

    The tension is T, the energy 4π w at the equator (half a vesicle has 2πw).
    """
    length, guess = spheroid(reduced_volume, oblate)

    def conditions(top, bottom, p):
        (top,), (bottom,) = top, bottom
        return np.array([
            top[PSI], top[GAMMA], top[ETA], top[R], top[A], top[W], top[B], top[M],
            bottom[PSI] - np.pi / 2, bottom[GAMMA], bottom[Z], bottom[A] - 1.0,
            bottom[B] - 2 / 3 * reduced_volume,
        ])

    return solve([Piece()], conditions, (np.linspace(0, 1, guess.shape[1]), guess), [length, -12.0],
                 prepare=lambda pieces, p: p[1])


def coated_patch(tension, curvature, curvature_slope, steps=5):
    """Clamped patch of radius 1 with spontaneous curvature C(a), κ = 1, P = 0, tension at the rim.

    The coat is raised in steps from a flat patch. Energy 2πw at the rim; depth z at the top.
    """
    s = np.linspace(0, 1, 200)
    guess = (s, states(0 * s, s, s, tension=tension))
    length = 1.0

    def conditions(top, bottom, p):
        (top,), (bottom,) = top, bottom
        return np.array([
            top[PSI], top[GAMMA], top[ETA], top[R], top[A], top[W], top[B], top[M],
            bottom[PSI], bottom[R] - 1.0, bottom[Z], bottom[T] - tension,
        ])

    for share in np.linspace(0, 1, steps + 1)[1:]:
        piece = Piece(curvature=lambda a: share * curvature(a), curvature_slope=lambda a: share * curvature_slope(a))
        shape = solve([piece], conditions, guess, [length])
        guess, length = (shape.mesh, shape.stacked), shape.parameters[0]
    return shape


def tether(tension, patch_radius, heights):
    """Clamped patch of radius 1 drawn along z by a load that is spread like exp(−d²/2r_p²) round its own mean height.

    κ = 1, P = 0, tension at the rim. Returns one solution per height (rising from small slopes); parameters: arc
    length, largest load per area, height of the tip above the mean of the load. The force is −2πη at the rim; heights
    count from the tip.
    """
    # Denser near the load.
    x = np.linspace(0, 1, 400) ** 2
    # A catenary-like profile, rounded at the radius of the tube.
    core = 1 / (2 * tension)
    depth = heights[0] / np.log(1 / core)
    y = states(2 * depth * x / (x * x + core), x, x, tension=tension)
    y[GAMMA] = tension * x
    guess = (x, y)
    parameters = [1.0, 2 * tension * depth / patch_radius**2, 0.1 * heights[0]]
    piece = Piece()
    shapes = []

    # First by distance from the axis alone: from a poor guess, a load that feels its height may lose the membrane.
    for feels_height, height in [(0.0, heights[0]), *((1.0, height) for height in heights)]:

        def prepare(pieces, p):
            pieces[0].load_strength, pieces[0].load_height = p[1], -p[2]
            pieces[0].load_weight = lambda r, z: np.exp(
                -(r * r + feels_height * (z + p[2]) ** 2) / (2 * patch_radius**2)
            )
            return 0.0

        def conditions(top, bottom, p):
            (top,), (bottom,) = top, bottom
            return np.array([
                *(top[i] for i in (PSI, GAMMA, ETA, R, Z, A, W, B, M)),
                bottom[PSI], bottom[R] - 1.0, bottom[Z] + height + p[2], bottom[T] - tension,
                bottom[M],
            ])

        shape = solve([piece], conditions, guess, parameters, prepare)
        guess, parameters = (shape.mesh, shape.stacked), shape.parameters
        shapes.append(shape)
    return shapes[1:]


def two_domains(share, line_tension, rigidities=(1.0, 1.0), gaussian_step=0.0):
    """Vesicle of area 4π with free volume and two domains; the upper has that share of the area.

    `gaussian_step`: κ_G of the upper domain less that of the lower. Parameters: arc lengths of the domains. Energy
    2πw at the bottom + line tension 2πr at the junction + Gaussian part.
    """
    pieces = [Piece(bending_rigidity=k) for k in rigidities]
    angle = np.arccos(1 - 2 * share)
    x = np.linspace(0, 1, 150)
    halves = []
    for begin, end, kappa in [(0.0, angle, rigidities[0]), (angle, np.pi, rigidities[1])]:
        theta = begin + (end - begin) * x
        y = np.zeros((N, len(x)))
        y[PSI], y[R], y[Z], y[A] = theta, np.sin(theta), np.cos(theta) - 1, 1 - np.cos(theta)
        y[Q], y[W] = 2.0, 2 * kappa * (1 - np.cos(theta))
        halves.append(y)
    guess = (x, np.concatenate(halves))
    parameters = [angle, np.pi - angle]

    for tension in np.linspace(0, line_tension, 5)[1:]:

        def conditions(top, bottom, p):
            upper, lower = bottom[0], top[1]
            joined = [upper[i] - lower[i] for i in (PSI, R, Z, A, ETA, W, B, M)]
            return np.array([
                *(top[0][i] for i in (PSI, GAMMA, ETA, R, Z, A, W, B, M)),
                *joined,
                (rigidities[0] * upper[Q] - rigidities[1] * lower[Q]) * upper[R] + gaussian_step * np.sin(upper[PSI]),
                lower[GAMMA] - upper[GAMMA] - tension,
                upper[A] - 2 * share,
                bottom[1][PSI] - np.pi, bottom[1][R], bottom[1][GAMMA], bottom[1][A] - 2.0,
            ])

        shape = solve(pieces, conditions, guess, parameters)
        guess, parameters = (shape.mesh, shape.stacked), shape.parameters
    return shape
