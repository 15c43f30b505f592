"""Writes crates/vtk/tests/data: one octahedron in the file variants that take different paths
through the reader. Run again only when the choice of variants changes.

    python tests/python/make_vtk_fixtures.py
"""

from pathlib import Path

import numpy as np
import pyvista as pv
import vtk

FOLDER = Path(__file__).resolve().parents[2] / "crates" / "vtk" / "tests" / "data"

XML = [
    # file, data mode, compressor, byte order, header words
    ("ascii.vtp", "Ascii", "None", "LittleEndian", "UInt32"),
    ("inline.vtu", "Binary", "None", "LittleEndian", "UInt32"),
    ("inline_zlib.vtp", "Binary", "ZLib", "LittleEndian", "UInt32"),
    ("inline_lzma.vtu", "Binary", "LZMA", "BigEndian", "UInt64"),
    ("appended_base64_zlib.vtu", "Appended", "ZLib", "BigEndian", "UInt32"),
    ("appended_raw.vtp", "Appended", "None", "BigEndian", "UInt64"),
    ("appended_raw_lz4.vtu", "Appended", "LZ4", "LittleEndian", "UInt64"),
]


def octahedron():
    points = np.array(
        [[1, 0, 0], [-1, 0, 0], [0, 1, 0], [0, -1, 0], [0, 0, 1], [0, 0, -1]], dtype=float
    )
    faces = [[0, 2, 4], [2, 1, 4], [1, 3, 4], [3, 0, 4], [2, 0, 5], [1, 2, 5], [3, 1, 5], [0, 3, 5]]
    mesh = pv.PolyData.from_regular_faces(points, np.array(faces))
    mesh["height [um]"] = points[:, 2]
    mesh["twice"] = (2 * points).astype(np.float32)
    mesh["number"] = np.arange(6)
    mesh.cell_data["quality"] = np.linspace(0.5, 1, 8)
    mesh.add_field_data(np.array(["made by VTK"]), "provenance")
    mesh.field_data["TimeValue"] = [0.5]
    return mesh


def write():
    FOLDER.mkdir(parents=True, exist_ok=True)
    mesh = octahedron()
    grid = mesh.cast_to_unstructured_grid()
    for name, mode, compressor, order, header in XML:
        is_grid = name.endswith("vtu")
        kind = "UnstructuredGrid" if is_grid else "PolyData"
        writer = getattr(vtk, f"vtkXML{kind}Writer")()
        writer.SetInputData(grid if is_grid else mesh)
        writer.SetFileName(str(FOLDER / name))
        getattr(writer, f"SetDataModeTo{mode}")()
        writer.SetEncodeAppendedData("base64" in name)
        getattr(writer, f"SetCompressorTypeTo{compressor}")()
        getattr(writer, f"SetByteOrderTo{order}")()
        getattr(writer, f"SetHeaderTypeTo{header}")()
        writer.SetBlockSize(64)  # several blocks even in arrays this small
        assert writer.Write() == 1
    for kind, data in [("PolyData", mesh), ("UnstructuredGrid", grid)]:
        for version in [42, 51]:
            for binary in [False, True]:
                writer = getattr(vtk, f"vtk{kind}Writer")()
                text = "binary" if binary else "ascii"
                writer.SetInputData(data)
                writer.SetFileName(str(FOLDER / f"legacy_{version}_{text}_{kind}.vtk"))
                writer.SetFileVersion(version)
                writer.SetFileType(vtk.VTK_BINARY if binary else vtk.VTK_ASCII)
                assert writer.Write() == 1


if __name__ == "__main__":
    write()
