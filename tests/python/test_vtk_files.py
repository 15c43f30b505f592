"""The VTK library reads what the program writes, and the program reads what VTK writes.

The numbers of the sample files follow from exact arithmetic (see
crates/vtk/examples/write_sample.rs), so values are compared bit by bit unless a file stores
decimal text. There is no published source for these checks: the reference is the VTK library
itself, in the version pinned in requirements.txt.

    pip install -r tests/python/requirements.txt
    pytest tests/python/test_vtk_files.py

Needs cargo. PELLICLE_SAMPLE_DIR names a folder that write_sample has filled already.
"""

import itertools
import json
import os
import subprocess
from pathlib import Path

import meshio
import numpy as np
import pytest
import pyvista as pv
import vtk
from vtk.util.numpy_support import vtk_to_numpy

ROOT = Path(__file__).resolve().parents[2]
COMPRESSIONS = ["none", "lz4", "zlib"]
PRECISIONS = ["single", "double"]
SAMPLES = [f"{c}_{p}" for c, p in itertools.product(COMPRESSIONS, PRECISIONS)]
FRAMES = 3
FIELD_TEXT = 'sample 1.0, "κ" <in> kBT & more'


def run_example(name, *arguments):
    """Runs a Rust example and returns its standard output."""
    command = ["cargo", "run", "--quiet", "-p", "pellicle-vtk", "--example", name, "--"]
    command += [str(argument) for argument in arguments]
    done = subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    return done.stdout


# ---------------------------------------------------------------- the program's files


@pytest.fixture(scope="module")
def sample_folder(tmp_path_factory):
    given = os.environ.get("PELLICLE_SAMPLE_DIR")
    if given:
        return Path(given)
    folder = tmp_path_factory.mktemp("sample")
    run_example("write_sample", folder)
    return folder


def expected_frame(index):
    """Points, triangles and arrays of a sample frame, computed anew."""
    j, i = (a.ravel() for a in np.mgrid[0:7, 0:9])
    points = np.column_stack([i / 8, j / 8, (i * j + index) / 64])
    x, y, z = points.T
    a = (np.arange(6)[:, None] * 9 + np.arange(8)[None, :]).ravel()
    lower = np.column_stack([a, a + 1, a + 10])
    upper = np.column_stack([a, a + 10, a + 9])
    triangles = np.stack([lower, upper], axis=1).reshape(-1, 3)
    point_data = {
        "scalar [1/um]": x + 2 * y + 4 * z,
        "vector <µm/s>": np.column_stack([z, x, -y]),
        "index": 1000 * index + np.arange(len(points)),
    }
    cell_data = {"quality": np.arange(len(triangles)) / 4}
    return points, triangles, point_data, cell_data


def check_arrays(found, expected, precision):
    assert set(found.keys()) == set(expected)
    floating = np.float32 if precision == "single" else np.float64
    for name, values in expected.items():
        array = np.asarray(found[name])
        wanted = np.int64 if name == "index" else floating
        assert array.dtype == wanted, name
        # Eighths, quarters and 64ths below 100 are exact in single precision as well.
        np.testing.assert_array_equal(array, values)


def read_grid(path):
    """Reads with VTK itself, which must not complain."""
    reader = vtk.vtkXMLUnstructuredGridReader()
    reader.SetFileName(str(path))
    complaints = []
    for event in ["ErrorEvent", "WarningEvent"]:
        reader.AddObserver(event, lambda *details: complaints.append(details))
    reader.Update()
    assert not complaints and reader.GetErrorCode() == 0
    return pv.wrap(reader.GetOutput())


@pytest.mark.parametrize("sample", SAMPLES)
@pytest.mark.parametrize("index", range(FRAMES))
def test_vtk_reads_a_frame(sample_folder, sample, index):
    grid = read_grid(sample_folder / sample / f"surface_{index:06d}.vtu")
    points, triangles, point_data, cell_data = expected_frame(index)
    assert grid.points.dtype == np.float64
    np.testing.assert_array_equal(grid.points, points)
    assert list(grid.cells_dict) == [pv.CellType.TRIANGLE]
    np.testing.assert_array_equal(grid.cells_dict[pv.CellType.TRIANGLE], triangles)
    precision = sample.split("_")[1]
    check_arrays(grid.point_data, point_data, precision)
    check_arrays(grid.cell_data, cell_data, precision)

    fields = grid.GetFieldData()
    time = fields.GetArray("TimeValue")
    np.testing.assert_array_equal(vtk_to_numpy(time), [index / 1024])
    if index > 0:
        assert fields.GetAbstractArray("program").GetValue(0) == FIELD_TEXT
        assert fields.GetAbstractArray("empty").GetValue(0) == ""


@pytest.mark.parametrize("compression", COMPRESSIONS)
def test_vtk_reads_an_empty_frame(sample_folder, compression):
    grid = read_grid(sample_folder / f"{compression}_empty.vtu")
    assert grid.n_points == grid.n_cells == 0


@pytest.mark.parametrize("sample", SAMPLES)
def test_pyvista_reads_the_series(sample_folder, sample):
    reader = pv.get_reader(sample_folder / sample / "fields.pvd")
    assert reader.time_values == [index / 1024 for index in range(FRAMES)]
    for index, time in enumerate(reader.time_values):
        reader.set_active_time_value(time)
        (block,) = reader.read()
        np.testing.assert_array_equal(block.points, expected_frame(index)[0])


@pytest.mark.parametrize("sample", [s for s in SAMPLES if not s.startswith("lz4")])
def test_meshio_reads_a_frame(sample_folder, sample):
    """A reader that shares no code with VTK. It knows no LZ4 and no texts, which VTK's own
    files may hold as well; frame 0 has none."""
    mesh = meshio.read(sample_folder / sample / "surface_000000.vtu")
    points, triangles, point_data, cell_data = expected_frame(0)
    np.testing.assert_array_equal(mesh.points, points)
    np.testing.assert_array_equal(mesh.cells_dict["triangle"], triangles)
    check_arrays(mesh.point_data, point_data, sample.split("_")[1])
    np.testing.assert_array_equal(mesh.cell_data["quality"][0], cell_data["quality"])


# ------------------------------------------------------------------------- VTK's files


def surface():
    """A sphere with the arrays that matter: scalar, vector, whole number, text, and a name
    that legacy files must escape."""
    mesh = pv.Icosphere(nsub=2)
    mesh.clear_data()
    mesh["mean curvature [1/um]"] = np.linspace(-1, 2, mesh.n_points)
    mesh["velocity"] = np.sin(7 * mesh.points).astype(np.float32)
    mesh["number"] = np.arange(mesh.n_points) * 3 - 100
    mesh.cell_data["quality"] = np.linspace(0, 1, mesh.n_cells)
    mesh.add_field_data(np.array(["text of two words", ""]), "provenance")
    mesh.field_data["TimeValue"] = [0.25]
    return mesh


def save_xml(folder, data, kind, mode, compressor, order, header):
    writer = getattr(vtk, f"vtkXML{kind}Writer")()
    name = f"{kind}_{mode}_{compressor}_{order}_{header}"
    path = folder / f"{name}.{writer.GetDefaultFileExtension()}"
    writer.SetInputData(data)
    writer.SetFileName(str(path))
    getattr(writer, f"SetDataModeTo{mode.split('-')[0]}")()
    writer.SetEncodeAppendedData(mode == "Appended-base64")
    getattr(writer, f"SetCompressorTypeTo{compressor}")()
    getattr(writer, f"SetByteOrderTo{order}")()
    getattr(writer, f"SetHeaderTypeTo{header}")()
    writer.SetBlockSize(8192)  # several blocks per array, the last one partly filled
    assert writer.Write() == 1
    return path


def save_legacy(folder, data, kind, version, binary):
    writer = getattr(vtk, f"vtk{kind}Writer")()
    path = folder / f"{kind}_{version}_{'binary' if binary else 'ascii'}.vtk"
    writer.SetInputData(data)
    writer.SetFileName(str(path))
    writer.SetFileVersion(version)
    writer.SetFileType(vtk.VTK_BINARY if binary else vtk.VTK_ASCII)
    assert writer.Write() == 1
    return path


XML_VARIANTS = list(
    itertools.product(
        ["PolyData", "UnstructuredGrid"],
        ["Ascii", "Binary", "Appended-base64", "Appended-raw"],
        ["None", "ZLib", "LZ4", "LZMA"],
        ["LittleEndian", "BigEndian"],
        ["UInt32", "UInt64"],
    )
)
LEGACY_VARIANTS = list(itertools.product(["PolyData", "UnstructuredGrid"], [42, 51], [False, True]))
PYVISTA_FILES = [
    f"pyvista_{text}.{extension}"
    for text, extension in itertools.product(["binary", "ascii"], ["vtp", "vtu", "vtk"])
]


def dump(paths):
    """What the program reads, by file name."""
    lines = run_example("dump_surface", *paths).splitlines()
    records = map(json.loads, lines)
    return {Path(record["file"]).name: record for record in records}


@pytest.fixture(scope="module")
def surfaces_read(tmp_path_factory):
    """Writes the sphere in every way VTK knows, and reads all files in one run."""
    folder = tmp_path_factory.mktemp("vtk")
    mesh = surface()
    data = {"PolyData": mesh, "UnstructuredGrid": mesh.cast_to_unstructured_grid()}
    paths = {v: save_xml(folder, data[v[0]], *v) for v in XML_VARIANTS}
    paths |= {v: save_legacy(folder, data[v[0]], *v) for v in LEGACY_VARIANTS}
    for name in PYVISTA_FILES:
        paths[name] = folder / name
        kind = "UnstructuredGrid" if name.endswith("vtu") else "PolyData"
        data[kind].save(paths[name], binary="binary" in name)
    records = dump(paths.values())
    return {variant: records[path.name] for variant, path in paths.items()}


def check_surface(record, mesh, exact):
    assert "error" not in record, record["error"]
    # VTK prints decimal text with 6 to 17 digits, depending on the type and the format; for
    # Float32 arrays 6 digits were seen, hence half a unit of the 6th.
    tolerance = {} if exact else {"rtol": 5e-6, "atol": 1e-12}
    compare = np.testing.assert_array_equal if exact else np.testing.assert_allclose
    compare(record["points"], mesh.points, **tolerance)
    np.testing.assert_array_equal(record["triangles"], mesh.regular_faces)
    assert set(record["arrays"]) == set(mesh.point_data.keys())
    for name, array in record["arrays"].items():
        values = np.reshape(array["values"], np.shape(mesh.point_data[name]))
        compare(values, mesh.point_data[name], **tolerance)
    assert record["time"] == 0.25


@pytest.mark.parametrize("variant", XML_VARIANTS, ids="-".join)
def test_reads_xml(surfaces_read, variant):
    check_surface(surfaces_read[variant], surface(), exact=variant[1] != "Ascii")


@pytest.mark.parametrize("variant", LEGACY_VARIANTS, ids=lambda v: "-".join(map(str, v)))
def test_reads_legacy(surfaces_read, variant):
    check_surface(surfaces_read[variant], surface(), exact=variant[2])


@pytest.mark.parametrize("name", PYVISTA_FILES)
def test_reads_pyvista_files(surfaces_read, name):
    check_surface(surfaces_read[name], surface(), exact="binary" in name)


@pytest.mark.parametrize("extension", ["vtp", "vtk"])
def test_cuts_polygons_into_fans(tmp_path, extension):
    points = [[0, 0, 0], [1, 0, 0], [2, 1, 0], [1, 2, 0], [0, 2, 0], [3, 0, 0], [3, 2, 0]]
    faces = [5, 0, 1, 2, 3, 4, 4, 1, 5, 6, 2]
    path = tmp_path / f"polygons.{extension}"
    pv.PolyData(np.array(points, float), faces).save(path)
    fans = [[0, 1, 2], [0, 2, 3], [0, 3, 4], [1, 5, 6], [1, 6, 2]]
    assert dump([path])[path.name]["triangles"] == fans


def test_reads_every_kind_of_attribute(tmp_path):
    """Attributes that legacy files store under keywords of their own."""
    mesh = surface()
    data = mesh.GetPointData()
    generator = np.random.default_rng(3)

    def add(name, values, setter):
        array = pv.convert_array(values, name=name)
        getattr(data, setter)(array)

    add("normal", generator.normal(size=(mesh.n_points, 3)), "SetNormals")
    add("stress", generator.normal(size=(mesh.n_points, 9)), "SetTensors")
    add("strain", generator.normal(size=(mesh.n_points, 6)), "SetTensors")
    add("texture", generator.random(size=(mesh.n_points, 2)), "SetTCoords")
    add("force", generator.normal(size=(mesh.n_points, 3)), "SetVectors")
    add("global number", np.arange(mesh.n_points), "SetGlobalIds")
    for binary, kind in itertools.product([False, True], [".vtp", ".vtk"]):
        path = tmp_path / f"attributes_{binary}{kind}"
        mesh.save(path, binary=binary)
        check_surface(dump([path])[path.name], mesh, exact=binary)


def test_lists_text_arrays_it_leaves_out(tmp_path):
    mesh = surface()
    # Lengths on both sides of the steps in the length code of binary legacy files.
    lengths = [0, 1, 63, 64, 16383, 16384, 70000]
    texts = ["x" * lengths[point % len(lengths)] for point in range(mesh.n_points)]
    array = vtk.vtkStringArray()
    array.SetName("label")
    for text in texts:
        array.InsertNextValue(text)
    mesh.GetPointData().AddArray(array)
    paths = [tmp_path / name for name in ["binary.vtp", "binary.vtk", "ascii.vtk"]]
    for path in paths:
        mesh.save(path, binary="binary" in path.name)
    for record in dump(paths).values():
        assert "error" not in record, record["error"]
        assert record["skipped"] == ["label"]
        assert set(record["arrays"]) == {"mean curvature [1/um]", "velocity", "number"}


REFUSED = {
    "lines.vtp": (lambda: pv.Line(), "a line"),
    "lines.vtk": (lambda: pv.Line(), "LINES"),
    "points.vtp": (lambda: pv.PolyData(np.eye(3)), "a vertex"),
    "strips.vtp": (lambda: surface().strip(), "a triangle strip"),
    "solid.vtu": (lambda: surface().delaunay_3d(), "a tetrahedron"),
    "solid.vtk": (lambda: surface().delaunay_3d(), "a tetrahedron"),
    "image.vti": (lambda: pv.ImageData(dimensions=(2, 2, 2)), "ImageData"),
    "image.vtk": (lambda: pv.ImageData(dimensions=(2, 2, 2)), "STRUCTURED_POINTS"),
    "blocks.vtm": (lambda: pv.MultiBlock([surface()]), "vtkMultiBlockDataSet"),
}


def test_refuses_what_is_no_surface(tmp_path):
    for name, (make, _) in REFUSED.items():
        make().save(tmp_path / name)
    records = dump([tmp_path / name for name in REFUSED])
    for name, (_, words) in REFUSED.items():
        assert words in records[name].get("error", ""), (name, records[name])


def test_refuses_several_pieces(tmp_path):
    path = tmp_path / "pieces.vtu"
    writer = vtk.vtkXMLUnstructuredGridWriter()
    writer.SetInputData(surface().cast_to_unstructured_grid())
    writer.SetFileName(str(path))
    writer.SetNumberOfPieces(2)
    assert writer.Write() == 1
    assert "several pieces" in dump([path])[path.name]["error"]


def test_reads_back_the_programs_own_files(sample_folder):
    for sample in SAMPLES:
        path = sample_folder / sample / "surface_000002.vtu"
        record = dump([path])[path.name]
        points, triangles, point_data, _ = expected_frame(2)
        np.testing.assert_array_equal(record["points"], points)
        np.testing.assert_array_equal(record["triangles"], triangles)
        for name, values in point_data.items():
            found = np.reshape(record["arrays"][name]["values"], values.shape)
            np.testing.assert_array_equal(found, values)
        assert record["time"] == 2 / 1024
