#!/usr/bin/env python3
"""Turn a run directory into a figure: the surface at a few times, side by side, or film frames.

    tools/figure.py RUN [--field composition] [--times 6] [--out figure.png]
    tools/figure.py RUN --film DIR              one picture per frame

Needs the packages of tests/python/requirements.txt (the environment that tools/test makes has them). The colour maps
are perceptually uniform and safe for colour-blind readers.
"""

import argparse
import math
import sys
import xml.etree.ElementTree as ElementTree
from pathlib import Path

import numpy as np
import pyvista

SIGNED = {"mean_curvature [1/um]", "gaussian_curvature [1/um2]", "spontaneous_curvature [1/um]"}


def frames(run: Path) -> list[tuple[float, Path]]:
    """Times [s] and files of a run."""
    collection = run / "fields.pvd"
    if not collection.is_file():
        sys.exit(f"{collection} not found: give the directory that `pellicle run` wrote")
    entries = ElementTree.parse(collection).getroot().iter("DataSet")
    return [(float(e.get("timestep")), run / e.get("file")) for e in entries]


def array_name(mesh: pyvista.DataSet, wanted: str) -> str:
    """Full name of a field given without its unit."""
    for name in list(mesh.point_data) + list(mesh.cell_data):
        if name == wanted or name.split(" [")[0] == wanted:
            return name
    have = ", ".join(sorted({n.split(" [")[0] for n in list(mesh.point_data) + list(mesh.cell_data)}))
    sys.exit(f"the frames have no field {wanted}; they have {have}")


def seconds(time: float) -> str:
    """A time with a fitting unit."""
    if time == 0:
        return "0 s"
    power = min(0, max(-9, 3 * math.floor(math.log10(abs(time)) / 3)))
    unit = {0: "s", -3: "ms", -6: "us", -9: "ns"}[power]
    return f"{time / 10**power:.3g} {unit}"


def view(plotter: pyvista.Plotter, box: np.ndarray, direction: tuple[float, float, float]) -> None:
    """The same parallel projection for every picture."""
    centre = 0.5 * (box[::2] + box[1::2])
    size = float(np.linalg.norm(box[1::2] - box[::2]))
    d = np.array(direction) / np.linalg.norm(direction)
    up = (0, 0, 1) if abs(d[2]) < 0.9 else (0, 1, 0)
    plotter.camera_position = [tuple(centre + 3 * size * d), tuple(centre), up]
    plotter.enable_parallel_projection()
    plotter.camera.parallel_scale = 0.46 * size


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("run", type=Path)
    parser.add_argument("--field", help="field to colour by [default: composition, coverage or mean curvature]")
    parser.add_argument("--times", type=int, default=5, help="number of surfaces side by side")
    parser.add_argument("--from-direction", type=float, nargs=3, default=(1.0, -0.6, 0.35), metavar=("X", "Y", "Z"))
    parser.add_argument("--out", type=Path, default=None)
    parser.add_argument("--film", type=Path, default=None, metavar="DIR")
    parser.add_argument("--edges", action="store_true", help="show the mesh")
    options = parser.parse_args()

    pyvista.OFF_SCREEN = True
    all_frames = frames(options.run)
    meshes = [(time, pyvista.read(path)) for time, path in all_frames]
    first = meshes[0][1]
    field = options.field
    if field is None:
        known = {n.split(" [")[0] for n in first.point_data}
        field = next(n for n in ("composition", "coverage", "mean_curvature") if n in known)
    name = array_name(first, field)
    values = np.concatenate([np.asarray(m[name]).ravel() for _, m in meshes])
    values = values[np.isfinite(values)]
    if field in ("composition", "coverage"):
        limits = (0.0, 1.0)
    else:
        limits = tuple(np.percentile(values, [1, 99]))
        if name in SIGNED:
            largest = max(abs(limits[0]), abs(limits[1]))
            limits = (-largest, largest)
    colours = "coolwarm" if name in SIGNED else "cividis"
    box = np.array([m.bounds for _, m in meshes])
    box = np.array([f(box[:, i]) for i, f in enumerate((np.min, np.max) * 3)])
    look = dict(scalars=name, clim=limits, cmap=colours, smooth_shading=True, split_sharp_edges=False,
                show_edges=options.edges, specular=0.15)

    if options.film is not None:
        options.film.mkdir(parents=True, exist_ok=True)
        for k, (time, mesh) in enumerate(meshes):
            plotter = pyvista.Plotter(off_screen=True, window_size=(1000, 1000))
            plotter.set_background("white")
            plotter.add_mesh(mesh, scalar_bar_args={"title": name, "color": "black"}, **look)
            plotter.add_text(seconds(time), position="upper_left", font_size=14, color="black")
            view(plotter, box, options.from_direction)
            plotter.screenshot(options.film / f"frame_{k:05d}.png")
            plotter.close()
        print(f"{len(meshes)} pictures in {options.film}")
        return

    count = min(options.times, len(meshes))
    chosen = [meshes[round(i * (len(meshes) - 1) / max(1, count - 1))] for i in range(count)]
    plotter = pyvista.Plotter(off_screen=True, shape=(1, count), window_size=(420 * count, 460), border=False)
    for column, (time, mesh) in enumerate(chosen):
        plotter.subplot(0, column)
        plotter.set_background("white")
        last = column == count - 1
        plotter.add_mesh(mesh, show_scalar_bar=last,
                         scalar_bar_args={"title": name, "color": "black", "vertical": False} if last else None, **look)
        plotter.add_text(seconds(time), position="upper_left", font_size=10, color="black")
        view(plotter, box, options.from_direction)
    out = options.out or options.run / "figure.png"
    plotter.screenshot(out)
    print(f"wrote {out}")


if __name__ == "__main__":
    main()
