"""Runs the program and reads what it wrote."""

import csv
import json
import os
import subprocess
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path

import numpy as np
import pytest
import pyvista

ROOT = Path(__file__).resolve().parents[2]


def binary() -> Path:
    """The program; the test is skipped where it has not been built."""
    path = Path(os.environ.get("PELLICLE_BINARY", ROOT / "target" / "debug" / "pellicle"))
    if not path.is_file():
        pytest.skip(f"{path} has not been built (tools/test builds it)")
    return path


def call(*arguments, timeout=600) -> str:
    """Standard output of a command of the program."""
    command = [str(binary()), *map(str, arguments)]
    done = subprocess.run(command, capture_output=True, text=True, timeout=timeout, check=False)
    assert done.returncode == 0, done.stderr
    return done.stdout


def write_operators(surface, folder: Path) -> dict:
    """Operators of a surface as the Rust side computes them, by name (see crates/surface/examples)."""
    from scipy.io import mmread

    command = ["cargo", "run", "--quiet", "-p", "pellicle-surface", "--example", "write_operators", "--"]
    done = subprocess.run([*command, str(surface), str(folder)], cwd=ROOT, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    found = {path.stem: mmread(path) for path in folder.glob("*.mtx")}
    found["triangles"] = found["triangles"].astype(int)
    for name in ("cell_area", "mean_curvature", "angle_defect"):
        found[name] = found[name].ravel()
    for name in ("stiffness", "lumped_mass", "consistent_mass", "laplace_beltrami"):
        found[name] = found[name].tocsr()
    return found


@dataclass
class Run:
    """A finished run."""

    folder: Path

    @cached_property
    def rows(self) -> list[dict]:
        """Rows of the series; empty cells are NaN."""
        with open(self.folder / "series.csv", newline="") as file:
            return [{k: float(v) if v else np.nan for k, v in row.items()} for row in csv.DictReader(file)]

    @cached_property
    def summary(self) -> dict:
        """summary.json."""
        return json.loads((self.folder / "summary.json").read_text())

    @property
    def end(self) -> dict:
        """The last row."""
        return self.rows[-1]

    def frames(self):
        """Times [s] and surfaces [µm]."""
        reader = pyvista.get_reader(self.folder / "fields.pvd")
        for k, time in enumerate(reader.time_values):
            reader.set_active_time_point(k)
            yield time, reader.read()[0]

    def last_frame(self):
        """The last surface."""
        return list(self.frames())[-1][1]


def run(folder: Path, scenario: str, name: str = "run", timeout=1200) -> Run:
    """Run a scenario on one thread."""
    path = folder / f"{name}.toml"
    path.write_text(scenario)
    out = folder / name
    call("run", path, "--out", out, "--quiet", "--progress", "none", "--threads", "1", timeout=timeout)
    return Run(out)
