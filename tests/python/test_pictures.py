"""The scripts in tools/ that turn a run into pictures work on a small run: not blank, not empty, right number.

ParaView's script runs only where pvbatch is installed (Debian: `apt-get install paraview python3-paraview xvfb`).
"""

import shutil
import subprocess
import sys

import matplotlib.image
import numpy as np
import program
import pytest
from test_report_in_a_browser import SCENARIO

FIELDS = ["mean_curvature", "gaussian_curvature", "composition", "tension", "velocity", "speed", "chemical_potential",
          "normal", "bending_density", "spontaneous_curvature", "shear_rate", "dissipation", "quality"]


@pytest.fixture(scope="module")
def run(tmp_path_factory):
    return program.run(tmp_path_factory.mktemp("pictures"), SCENARIO.format(viscosity="1e-9"))


def call(*command):
    done = subprocess.run([str(part) for part in command], capture_output=True, text=True, timeout=300, check=False)
    assert done.returncode == 0, done.stderr
    return done.stdout


def assert_drawn(path):
    """A white background with something on it, away from all edges."""
    picture = matplotlib.image.imread(path)[..., :3]
    dark = (picture < 0.95).any(axis=-1)
    assert 0.05 < dark.mean() < 0.9, f"{path}: {dark.mean():.3f} of the picture is drawn on"
    assert not dark[0].any() and not dark[:, 0].any() and not dark[:, -1].any()
    assert len(np.unique(picture.reshape(-1, 3), axis=0)) > 50


@pytest.mark.parametrize("field", ["composition", "velocity", "dissipation"])
def test_figure(run, tmp_path, field):
    call(sys.executable, program.ROOT / "tools" / "figure.py", run.folder, "--field", field, "--times", 3, "--out", tmp_path / "f.png")
    assert_drawn(tmp_path / "f.png")


@pytest.mark.long
@pytest.mark.parametrize("field", FIELDS)
def test_figure_of_every_field(run, tmp_path, field):
    call(sys.executable, program.ROOT / "tools" / "figure.py", run.folder, "--field", field, "--times", 2, "--out", tmp_path / "f.png")
    assert_drawn(tmp_path / "f.png")


def test_film(run, tmp_path):
    call(sys.executable, program.ROOT / "tools" / "figure.py", run.folder, "--film", tmp_path / "film")
    pictures = sorted((tmp_path / "film").iterdir())
    assert len(pictures) == len(list(run.frames()))
    sizes = {matplotlib.image.imread(path).shape for path in pictures}
    assert len(sizes) == 1
    # Encoders want even numbers of pixels.
    assert all(side % 2 == 0 for side in sizes.pop()[:2])
    for path in pictures:
        assert_drawn(path)


@pytest.mark.long
@pytest.mark.skipif(not shutil.which("pvbatch"), reason="needs ParaView's pvbatch")
def test_film_of_paraview(run, tmp_path):
    # A busy machine takes a while to open its screen.
    screen = ["xvfb-run", "-a", "-w", "15"] if shutil.which("xvfb-run") else []
    call(*screen, "pvbatch", program.ROOT / "tools" / "paraview_film.py", run.folder, tmp_path / "film")
    pictures = sorted((tmp_path / "film").iterdir())
    assert len(pictures) == len(list(run.frames()))
    assert_drawn(pictures[-1])
