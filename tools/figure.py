#!/usr/bin/env python3
"""Turn a run directory into a figure: the surface at a few times, side by side, or film frames.

    tools/figure.py RUN [--field composition] [--times 5] [--out figure.png]
    tools/figure.py RUN --film DIR              one picture per frame

The ending of --out chooses the format (png, pdf, svg ...). Needs the packages of tests/python/requirements.txt (the
environment that tools/test makes has them). The colour maps are perceptually uniform and safe for colour-blind
readers: cividis, and coolwarm round zero for quantities with both signs. Of vectors the length is shown.
"""

import argparse
import math
import sys
import xml.etree.ElementTree as ElementTree
from pathlib import Path

import matplotlib

matplotlib.use("Agg")
import matplotlib.pyplot as plt
import numpy as np
import pyvista
from vtkmodules.vtkCommonCore import vtkLogger

SHARES = ("composition", "coverage")
#: Pixels of one rendering, and inches that it takes.
PIXELS, INCHES = 720, 2.4


def frames(run: Path) -> list[tuple[float, Path]]:
    """Times [s] and files of a run."""
    collection = run / "fields.pvd"
    if not collection.is_file():
        sys.exit(f"{collection} not found: give the directory that `pellicle run` wrote")
    entries = ElementTree.parse(collection).getroot().iter("DataSet")
    return [(float(e.get("timestep")), run / e.get("file")) for e in entries]


def array_name(mesh: pyvista.DataSet, wanted: str) -> str:
    """Full name of a field given without its unit."""
    names = list(mesh.point_data) + list(mesh.cell_data)
    for name in names:
        if name == wanted or name.split(" [")[0] == wanted:
            return name
    sys.exit(f"the frames have no field {wanted}; they have {', '.join(sorted({n.split(' [')[0] for n in names}))}")


def label(name: str) -> str:
    """`mean_curvature [1/um2]` as people write it."""
    return name.replace("_", " ").replace("um2", "µm²").replace("m2]", "m²]").replace("um", "µm")


def prefixed(value: float, unit: str) -> str:
    """A value with a fitting prefix."""
    if value == 0:
        return f"0 {unit}"
    power = min(0, max(-9, 3 * math.floor(math.log10(abs(value)) / 3 + 1e-12)))
    return f"{value / 10**power:.3g} { {0: '', -3: 'm', -6: 'µ', -9: 'n'}[power] }{unit}"


def values_of(mesh: pyvista.DataSet, name: str) -> np.ndarray:
    """Numbers of a field; lengths of vectors."""
    values = np.asarray(mesh[name], float)
    return np.linalg.norm(values, axis=1) if values.ndim > 1 else values


def colours(meshes: list, name: str) -> tuple[str, float, float]:
    """Colour map and its limits, the same for all times."""
    values = np.concatenate([values_of(mesh, name) for mesh in meshes])
    values = values[np.isfinite(values)]
    if name in SHARES:
        return "cividis", 0.0, 1.0
    low, high = np.percentile(values, [1, 99])
    if high - low <= 1e-9 * max(abs(low), abs(high)):
        room = 0.05 * abs(low) or 1.0
        return "cividis", low - room, high + room
    if min(-low, high) > 0.02 * (high - low):
        largest = max(-low, high)
        return "coolwarm", -largest, largest
    return "cividis", low, high


class Camera:
    """One direction and one scale for every picture."""

    def __init__(self, meshes: list, direction):
        bounds = np.array([mesh.bounds for mesh in meshes])
        low, high = bounds[:, ::2].min(axis=0), bounds[:, 1::2].max(axis=0)
        self.centre = 0.5 * (low + high)
        d = np.array(direction, float) / np.linalg.norm(direction)
        self.up = np.array([0.0, 0.0, 1.0] if abs(d[2]) < 0.9 else [0.0, 1.0, 0.0])
        right = np.cross(self.up, d)
        right /= np.linalg.norm(right)
        upward = np.cross(d, right)
        points = np.concatenate([np.asarray(mesh.points) for mesh in meshes]) - self.centre
        #: Half the side of the picture [µm].
        self.half = 1.04 * max(np.abs(points @ right).max(), np.abs(points @ upward).max())
        self.place = self.centre + 10 * self.half * d

    def render(self, mesh, name, cmap, low, high, edges):
        """Picture of a surface, without text."""
        plotter = pyvista.Plotter(off_screen=True, window_size=(PIXELS, PIXELS))
        plotter.set_background("white")
        shown = mesh.copy()
        shown["shown"] = values_of(mesh, name)
        plotter.add_mesh(shown, scalars="shown", clim=(low, high), cmap=cmap, smooth_shading=True, show_edges=edges,
                         split_sharp_edges=False, show_scalar_bar=False, ambient=0.35, diffuse=0.75, specular=0.1)
        plotter.camera_position = [tuple(self.place), tuple(self.centre), tuple(self.up)]
        plotter.enable_parallel_projection()
        plotter.camera.parallel_scale = self.half
        plotter.enable_anti_aliasing("ssaa")
        picture = plotter.screenshot(None, return_img=True)
        plotter.close()
        return picture


def draw(shapes, camera, name, scale, edges, out):
    """Surfaces side by side, with times, a bar of length and a bar of colours."""
    cmap, low, high = scale
    count = len(shapes)
    width = max(count, 1.6) * INCHES
    figure = plt.figure(figsize=(width, INCHES + 0.75))
    whole = INCHES + 0.75
    for k, (time, mesh) in enumerate(shapes):
        left = (0.5 * (width - count * INCHES) + k * INCHES) / width
        axes = figure.add_axes((left, 0.6 / whole, INCHES / width, INCHES / whole))
        axes.imshow(camera.render(mesh, name, cmap, low, high, edges), extent=(-camera.half, camera.half) * 2)
        axes.set_axis_off()
        axes.text(0.04, 0.99, prefixed(time, "s"), transform=axes.transAxes, va="top", fontsize=10)
        if k == 0:
            power = 10 ** math.floor(math.log10(camera.half))
            length = max(f * power for f in (0.5, 1, 2, 5) if f * power <= 0.75 * camera.half)
            start, height = -0.95 * camera.half, -0.95 * camera.half
            axes.plot([start, start + length], [height, height], color="black", lw=2, solid_capstyle="butt")
            axes.text(start, height + 0.03 * camera.half, prefixed(length * 1e-6, "m"), fontsize=8, va="bottom")
    bar = figure.add_axes((0.5 - 0.9 / width * 1.4, 0.48 / whole, 2.52 / width, 0.09 / whole))
    mappable = plt.cm.ScalarMappable(matplotlib.colors.Normalize(low, high), cmap)
    colourbar = figure.colorbar(mappable, cax=bar, orientation="horizontal")
    colourbar.set_label(label(name), fontsize=9, labelpad=1)
    colourbar.ax.tick_params(labelsize=8, length=2)
    colourbar.ax.xaxis.set_major_locator(matplotlib.ticker.MaxNLocator(5))
    colourbar.formatter.set_powerlimits((-2, 4))
    figure.savefig(out, dpi=200, facecolor="white")
    plt.close(figure)


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
    # VTK warns about a missing screen, which nobody needs here.
    vtkLogger.SetStderrVerbosity(vtkLogger.VERBOSITY_ERROR)
    meshes = [(time, pyvista.read(path)) for time, path in frames(options.run)]
    if not meshes:
        sys.exit(f"{options.run} has no frames yet")
    first = meshes[0][1]
    field = options.field
    if field is None:
        known = {n.split(" [")[0] for n in first.point_data}
        field = next(n for n in (*SHARES, "mean_curvature") if n in known)
    name = array_name(first, field)
    surfaces = [mesh for _, mesh in meshes]
    camera = Camera(surfaces, options.from_direction)
    scale = colours(surfaces, name)

    if options.film is not None:
        options.film.mkdir(parents=True, exist_ok=True)
        for k, shape in enumerate(meshes):
            draw([shape], camera, name, scale, options.edges, options.film / f"frame_{k:05d}.png")
        print(f"{len(meshes)} pictures in {options.film}")
        return
    count = max(1, min(options.times, len(meshes)))
    chosen = [meshes[round(i * (len(meshes) - 1) / max(1, count - 1))] for i in range(count)]
    out = options.out or options.run / "figure.png"
    draw(chosen, camera, name, scale, options.edges, out)
    print(f"wrote {out}")


if __name__ == "__main__":
    main()
