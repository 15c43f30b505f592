"""The program as a user of general-purpose libraries meets it: run a scenario, read everything it wrote.

PyVista reads the frames through VTK's own readers; pandas-free CSV reading is enough for the series. VTK's own area and
volume filters are the reference for ours: they measure the same polyhedron, so only the single precision in which
frames are stored separates the two (1e-6 relative).
"""

import csv
import json
import math
import os
import subprocess
from pathlib import Path

import numpy as np
import pytest
import pyvista

SCENARIO = """
title = "A small vesicle with two phases"
seed = 2

[surface]
shape = "ellipsoid"
semi_axes = ["1 um", "1 um", "1.6 um"]
edge_length = "0.18 um"

[membrane]
bending_rigidity = "20 kBT"
shear_viscosity = "1e-9 N s/m"

[composition]
line_tension = "0.2 pN"
interface_width = "0.36 um"
diffusion_constant = "20 um^2/s"
mean = 0.4
noise = 0.02

[time]
end = "4 ms"

[output]
frame_every = "2 ms"
"""


@pytest.fixture(scope="module")
def run(tmp_path_factory):
    binary = os.environ.get("PELLICLE_BINARY", "target/debug/pellicle")
    if not Path(binary).is_file():
        pytest.skip(f"{binary} has not been built (tools/test builds it)")
    folder = tmp_path_factory.mktemp("run")
    scenario = folder / "vesicle.toml"
    scenario.write_text(SCENARIO)
    out = folder / "out"
    done = subprocess.run(
        [binary, "run", str(scenario), "--out", str(out), "--quiet", "--progress", "none"],
        capture_output=True, text=True, timeout=300,
    )
    assert done.returncode == 0, done.stderr
    return out


def rows(run):
    with open(run / "series.csv", newline="") as file:
        return list(csv.DictReader(file))


def test_every_frame_opens_and_carries_the_promised_fields(run):
    reader = pyvista.get_reader(run / "fields.pvd")
    assert len(reader.time_values) >= 3
    for k in range(len(reader.time_values)):
        reader.set_active_time_point(k)
        mesh = reader.read()[0]
        points = {n.split(" [")[0] for n in mesh.point_data}
        assert {"mean_curvature", "gaussian_curvature", "composition", "tension", "velocity", "speed",
                "chemical_potential", "normal", "bending_density", "spontaneous_curvature"} <= points
        cells = {n.split(" [")[0] for n in mesh.cell_data}
        assert {"shear_rate", "dissipation", "quality"} <= cells
        for name in list(mesh.point_data) + list(mesh.cell_data):
            array = mesh.point_data.get(name, mesh.cell_data.get(name))
            assert np.isfinite(np.asarray(array)).all(), name


def test_area_and_volume_agree_with_vtk(run):
    reader = pyvista.get_reader(run / "fields.pvd")
    series = rows(run)
    times = np.array([float(r["time_s"]) for r in series])
    for k, time in enumerate(reader.time_values):
        reader.set_active_time_point(k)
        surface = reader.read()[0].extract_surface(algorithm="dataset_surface")
        row = series[int(np.argmin(np.abs(times - time)))]
        assert abs(float(row["time_s"]) - time) <= 1e-9 + 1e-6 * time
        assert surface.area * 1e-12 == pytest.approx(float(row["area_m2"]), rel=2e-6)
        assert surface.volume * 1e-18 == pytest.approx(float(row["volume_m3"]), rel=2e-6)


def test_normals_point_outwards_and_gauss_bonnet_holds(run):
    reader = pyvista.get_reader(run / "fields.pvd")
    mesh = reader.read()[0]
    outward = np.einsum("ij,ij->i", mesh.points, mesh["normal"])
    assert (outward > 0).all()
    # do Carmo, Differential Geometry of Curves and Surfaces (1976): the integral of K over a sphere-like surface is 4π.
    # Cell areas of the angle-defect curvature differ from barycentric ones vertex by vertex, hence the few per cent.
    sizes = mesh.compute_cell_sizes(length=False, volume=False)["Area"]
    area = np.zeros(mesh.n_points)
    for c, corner in enumerate(mesh.regular_faces.T if hasattr(mesh, "regular_faces") else mesh.cells.reshape(-1, 4)[:, 1:].T):
        np.add.at(area, corner, sizes / 3.0)
    total = float(np.sum(area * mesh["gaussian_curvature [1/um2]"]))
    assert total == pytest.approx(4 * math.pi, rel=0.03)


def test_the_second_law_and_conservation_on_every_row(run):
    series = rows(run)
    energy = np.array([float(r["free_energy_J"]) for r in series])
    assert (np.diff(energy) <= 0).all()
    assert max(abs(float(r["energy_balance_error"] or 0)) for r in series) < 0.05
    for column, bound in (("composition_total_m2", 1e-10), ("volume_m3", 1e-8)):
        values = np.array([float(r[column]) for r in series])
        assert np.ptp(values) <= bound * abs(values[0]), column
    for column in ("bound_area_m2", "coverage_mean", "load_force_N"):
        assert all(r[column] == "" for r in series), f"{column} must be empty, not zero"


def test_summary_tells_how_it_ended(run):
    summary = json.loads((run / "summary.json").read_text())
    assert summary["format"] == 1
    assert summary["stopped_by"]
    last = rows(run)[-1]
    assert summary["end"]["free_energy_J"] == pytest.approx(float(last["free_energy_J"]), rel=1e-12)
