"""Film frames or one picture of a run with ParaView, without a screen.

    pvbatch tools/paraview_film.py RUN OUT [--field mean_curvature] [--last]

RUN is a run directory; OUT receives frame_00000.png and so on, with a colour bar and the time. `--last` draws the last
frame alone. For an interactive session open RUN/fields.pvd in ParaView itself. Where pvbatch finds no screen, run it
under `xvfb-run -a`.
"""

import argparse
import os
import sys

from paraview.simple import (
    AnnotateTimeFilter,
    ColorBy,
    CreateView,
    GetColorTransferFunction,
    GetScalarBar,
    PVDReader,
    Render,
    ResetCamera,
    SaveScreenshot,
    Show,
)

# Cividis (Nuñez, Anderton & Renslow, PLoS ONE 13 (2018) e0199239): perceptually uniform, safe for colour-blind readers.
CIVIDIS = [
    (0, 34, 78), (18, 53, 112), (59, 73, 108), (87, 93, 109), (112, 113, 115),
    (138, 134, 120), (165, 156, 116), (195, 179, 105), (225, 204, 85), (254, 232, 56),
]


def full_name(reader, wanted):
    """Whether a field belongs to points or cells, and its name with the unit."""
    for kind, data in (("POINTS", reader.PointData), ("CELLS", reader.CellData)):
        for index in range(data.GetNumberOfArrays()):
            name = data.GetArray(index).GetName()
            if wanted in (name, name.split(" [")[0]):
                return kind, name
    sys.exit(f"the frames have no field {wanted}")


def limits(reader, times, kind, name):
    """Range of a field over all times; 0 to 1 for shares."""
    if name in ("composition", "coverage"):
        return 0.0, 1.0
    low, high = float("inf"), float("-inf")
    for time in times:
        reader.UpdatePipeline(time)
        data = reader.PointData if kind == "POINTS" else reader.CellData
        array = data[name]
        component = -1 if array.GetNumberOfComponents() > 1 else 0
        this_low, this_high = array.GetRange(component)
        low, high = min(low, this_low), max(high, this_high)
    return (low, high) if high > low else (low - 0.5, high + 0.5)


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("run")
    parser.add_argument("out")
    parser.add_argument("--field", help="field to colour by [default: composition, else mean_curvature]")
    parser.add_argument("--last", action="store_true", help="the last frame alone")
    options = parser.parse_args()

    collection = os.path.join(options.run, "fields.pvd")
    if not os.path.isfile(collection):
        sys.exit(f"{collection} not found: give the directory that `pellicle run` wrote")
    os.makedirs(options.out, exist_ok=True)
    reader = PVDReader(FileName=collection)
    times = list(reader.TimestepValues)
    reader.UpdatePipeline(times[-1])
    names = [reader.PointData.GetArray(k).GetName() for k in range(reader.PointData.GetNumberOfArrays())]
    kind, name = full_name(reader, options.field or ("composition" if "composition" in names else "mean_curvature"))

    view = CreateView("RenderView")
    view.ViewSize = [1000, 1000]
    view.UseColorPaletteForBackground = 0
    view.Background = [1, 1, 1]
    view.OrientationAxesVisibility = 0
    view.CameraParallelProjection = 1
    shown = Show(reader, view)
    ColorBy(shown, (kind, name))
    low, high = limits(reader, times, kind, name)
    table = GetColorTransferFunction(name)
    table.RGBPoints = [
        number
        for k, (red, green, blue) in enumerate(CIVIDIS)
        for number in (low + (high - low) * k / (len(CIVIDIS) - 1), red / 255, green / 255, blue / 255)
    ]
    bar = GetScalarBar(table, view)
    bar.Title, bar.ComponentTitle = name.replace("_", " "), ""
    bar.TitleColor = bar.LabelColor = [0, 0, 0]
    bar.WindowLocation = "Lower Center"
    bar.Orientation = "Horizontal"
    shown.SetScalarBarVisibility(view, True)
    label = AnnotateTimeFilter(reader)
    label.Format = "{time:.4g} s"
    text = Show(label, view)
    text.Color = [0, 0, 0]
    text.FontSize = 24

    view.ViewTime = times[-1]
    view.CameraPosition, view.CameraFocalPoint, view.CameraViewUp = [1, -0.6, 0.35], [0, 0, 0], [0, 0, 1]
    ResetCamera(view)
    for k, time in enumerate(times[-1:] if options.last else times):
        view.ViewTime = time
        Render(view)
        SaveScreenshot(os.path.join(options.out, f"frame_{k:05d}.png"), view)
    print(f"{1 if options.last else len(times)} pictures in {options.out}")


if __name__ == "__main__":
    main()
