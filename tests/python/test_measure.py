"""`pellicle measure` on a minimal surface with two rims, and on real data: tissues from the scan of a frog and models
with faults, which ship inside the PyVista package."""

import json
import subprocess

import numpy as np
import program
import pytest
import pyvista
import trimesh
from pyvista import examples
from scipy.spatial import Delaunay


def catenoid(count: int, reach: float, seed: int = 7) -> pyvista.PolyData:
    """(cosh u cos φ, cosh u sin φ, u), |u| ≤ reach, on an irregular mesh.

    The map from the (u, φ) plane is conformal: random points there, relaxed to the means of their neighbours, give
    well-shaped triangles on the surface. Rims are evenly spaced.
    """
    random = np.random.default_rng(seed)
    edge = np.sqrt(2 * reach * 2 * np.pi / (0.866 * count))
    around = round(2 * np.pi / edge)
    rim = np.arange(around) * 2 * np.pi / around
    inner = count - 2 * around
    u = np.concatenate([random.uniform(-reach + edge / 2, reach - edge / 2, inner), np.full(around, -reach), np.full(around, reach)])
    phi = np.concatenate([random.uniform(0, 2 * np.pi, inner), rim, rim])
    for round_ in range(12):
        # Copies on both sides make the strip periodic in φ.
        strip = np.concatenate([np.column_stack([u, phi + turn]) for turn in (0, -2 * np.pi, 2 * np.pi)])
        triangles = Delaunay(strip).simplices
        if round_ == 11:
            break
        edges = np.concatenate([triangles[:, [0, 1]], triangles[:, [1, 2]], triangles[:, [2, 0]]])
        sums, degree = np.zeros_like(strip), np.zeros(len(strip))
        np.add.at(sums, edges[:, 0], strip[edges[:, 1]])
        np.add.at(degree, edges[:, 0], 1)
        mean = sums[:inner] / degree[:inner, None]
        u[:inner], phi[:inner] = mean[:, 0], mean[:, 1] % (2 * np.pi)
    middle = strip[triangles].mean(axis=1)[:, 1]
    triangles = triangles[(middle >= 0) & (middle < 2 * np.pi)] % count
    points = np.column_stack([np.cosh(u) * np.cos(phi), np.cosh(u) * np.sin(phi), u])
    a, b, c = (points[triangles[:, k]] for k in range(3))
    outward = np.einsum("ij,ij->i", np.cross(b - a, c - a), (a + b + c) * [1, 1, 0]) > 0
    triangles[~outward] = triangles[~outward][:, ::-1]
    return pyvista.PolyData.from_regular_faces(points, triangles)


def measured(path, *more) -> dict:
    return json.loads(program.call("measure", path, "--json", *more))[0]


def test_catenoid(tmp_path):
    """Minimal: H = 0 everywhere; area 2π(u + sinh u cosh u) for |u| ≤ reach; textbook (do Carmo 1976, §3.5)."""
    reach = 1.0
    found = {}
    for count in (2500, 10000):
        path = tmp_path / f"catenoid_{count}.ply"
        catenoid(count, reach).save(path)
        found[count] = measured(path)
    exact = 2 * np.pi * (reach + np.sinh(reach) * np.cosh(reach))
    # ∫ (c₁² + c₂²)/2 = ∫ sech⁴u dA: what bending would cost if the two curvatures did not cancel.
    scale = 2 * np.pi * 2 * np.tanh(reach)
    errors = {
        n: (f["area"] / exact - 1, f["integrated_mean_curvature"], f["bending_energy_over_kappa"] / scale)
        for n, f in found.items()
    }
    print(f"area, ∫H, bending energy/∫(c₁² + c₂²)/2: {errors}")
    fine = found[10000]
    assert fine["vertices"] == 10000 and (fine["genus"], fine["rims"], fine["volume"]) == (0, 2, None)
    assert fine["self_intersections"] == 0
    area, mean, bending = errors[10000]
    # Measured: −3.5e-5, 0.130, 1.6e-2; at 2,500 vertices −1.5e-4, 0.254, 2.3e-2. The last two are not of second order:
    # vertices on rims see only half of their surroundings, and the mesh has not relaxed on the surface itself.
    assert abs(area) < 1e-4 and abs(mean) < 0.2 and bending < 0.025
    assert abs(mean) < 0.6 * abs(errors[2500][1]) and bending < errors[2500][2]


@pytest.mark.parametrize("label", [2, 24], ids=["brain", "smaller"])
def test_a_scanned_tissue(tmp_path, label):
    """Marching cubes over the slices of a frog: stair-steps and slivers, as they come from a microscope."""
    scan = examples.load_frog_tissues()
    scan["tissue"] = (np.asarray(scan.active_scalars) == label).astype(np.float32)
    surface = scan.contour([0.5], scalars="tissue").triangulate().clean().connectivity("largest")
    surface = surface.extract_surface(algorithm="dataset_surface").clean()
    path = tmp_path / "tissue.vtp"
    surface.save(path)
    found = measured(path)
    other = trimesh.Trimesh(surface.points, surface.regular_faces, process=False)
    assert found["vertices"] == surface.n_points and found["rims"] == 0
    assert found["area"] == pytest.approx(other.area, rel=1e-6)
    assert found["area"] == pytest.approx(surface.area, rel=1e-6)
    assert abs(found["volume"]) == pytest.approx(abs(other.volume), rel=1e-5)
    assert 2 - 2 * found["genus"] == other.euler_number
    # Gauss–Bonnet, whatever the mesh is like.
    assert found["integrated_gaussian_curvature"] == pytest.approx(2 * np.pi * other.euler_number, abs=1e-6)
    print(f"label {label}: {found['vertices']} vertices, genus {found['genus']}")


def test_models_with_faults(tmp_path):
    """What cannot be measured is named; what can, but is doubtful, is said."""
    command = [str(program.binary()), "measure"]
    plane = subprocess.run([*command, examples.planefile], capture_output=True, text=True, check=False)
    assert plane.returncode == 2 and "shared by 3 triangles" in plane.stderr
    ant = subprocess.run([*command, examples.antfile], capture_output=True, text=True, check=False)
    assert ant.returncode == 0
    for words in ("passes through itself", "separate pieces", "sliver"):
        assert words in ant.stderr, words
    assert measured(examples.antfile)["area"] == pytest.approx(trimesh.load(examples.antfile).area, rel=1e-6)
