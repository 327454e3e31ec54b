"""Readers of models and tables.

Oracles: VTK's, meshio's and numpy's own writers make the files; VTK's cell classes say where
the nodes of a cell lie and what its volume is. Node orders of other formats are written by
hand from their manuals: Exodus II (SAND92-2137), MSH (gmsh.info/doc), bulk data, .inp.
"""

from __future__ import annotations

import contextlib
import io
import os
import re
import resource
import struct
import subprocess
import sys
import zipfile
from pathlib import Path
from types import SimpleNamespace

import meshio
import numpy as np
import pytest
import pyvista as pv
from hypothesis import given, settings
from hypothesis import strategies as st
from vtkmodules.util.numpy_support import numpy_to_vtk, vtk_to_numpy
from vtkmodules.vtkCommonCore import (
    vtkBitArray,
    vtkIdList,
    vtkIdTypeArray,
    vtkPoints,
    vtkStringArray,
)
from vtkmodules.vtkCommonDataModel import (
    vtkCellArray,
    vtkGenericCell,
    vtkPolyData,
    vtkPyramid,
    vtkUnstructuredGrid,
)
from vtkmodules.vtkFiltersVerdict import vtkCellSizeFilter
from vtkmodules.vtkIOCore import (
    vtkLZ4DataCompressor,
    vtkLZMADataCompressor,
    vtkZLibDataCompressor,
)
from vtkmodules.vtkIOLegacy import vtkPolyDataWriter, vtkUnstructuredGridWriter
from vtkmodules.vtkIOXML import vtkXMLPolyDataWriter, vtkXMLUnstructuredGridWriter

from expander.errors import InputError, NotYetError
from expander.model import Mesh, Model
from expander.readers import meshio_formats, read_model, readable
from expander.readers.tables import add_table

MODES = ("ascii", "binary", "raw", "base64")
COMPRESSORS = {
    "none": None,
    "zlib": vtkZLibDataCompressor,
    "lz4": vtkLZ4DataCompressor,
    "lzma": vtkLZMADataCompressor,
}


# --- files as VTK writes them ---------------------------------------------------------------


def named(values, name):
    array = numpy_to_vtk(np.ascontiguousarray(values), deep=1)
    array.SetName(name)
    return array


def grid(n: int = 3) -> vtkUnstructuredGrid:
    """n x n x n hexahedra with arrays of several types."""
    a = np.arange(n + 1)
    z, y, x = np.meshgrid(a, a, a, indexing="ij")
    points = np.stack([x, y, z], -1).reshape(-1, 3) + 0.25
    result = vtkUnstructuredGrid()
    places = vtkPoints()
    places.SetData(numpy_to_vtk(points, deep=1))
    result.SetPoints(places)
    result.Allocate(n**3)
    base = np.array([0, 1, n + 2, n + 1])
    corners = np.concatenate([base, base + (n + 1) ** 2])
    for first in (i + (n + 1) * (j + (n + 1) * k) for k in a[:n] for j in a[:n] for i in a[:n]):
        result.InsertNextCell(12, 8, (corners + first).tolist())
    result.GetPointData().AddArray(named(points * 0.1, "u"))
    result.GetPointData().AddArray(named(np.arange(len(points), dtype=np.float32), "T"))
    result.GetCellData().AddArray(named(np.arange(6.0 * n**3).reshape(-1, 6) / 7, "stress"))
    result.GetCellData().AddArray(named(np.arange(n**3, dtype=np.int32), "part"))
    return result


def polydata() -> vtkPolyData:
    def cells(*lists):
        found = vtkCellArray()
        for one in lists:
            found.InsertNextCell(len(one), one)
        return found

    result = vtkPolyData()
    places = vtkPoints()
    places.SetData(numpy_to_vtk(np.random.default_rng(0).random((20, 3)), deep=1))
    result.SetPoints(places)
    result.SetVerts(cells([0], [1, 2, 3]))
    result.SetLines(cells([0, 1], [1, 2, 3, 4]))
    result.SetPolys(cells([0, 1, 2], [3, 4, 5, 6], [7, 8, 9, 10, 11]))
    result.SetStrips(cells([12, 13, 14, 15]))
    result.GetCellData().AddArray(named(np.arange(8), "place"))
    return result


def every_kind(data):
    """All kinds of attribute that a file can have, on points."""
    n = data.GetNumberOfPoints()
    points = data.GetPointData()
    for name, values in (("a text", vtkStringArray()), ("bits", vtkBitArray())):
        values.SetName(name)
        for i in range(n):
            values.InsertNextValue(f"ab {i}" if name == "a text" else i % 3 == 0)
        points.AddArray(values)
    numbers = vtkIdTypeArray()
    numbers.SetName("GlobalNodeIds")
    for i in range(n):
        numbers.InsertNextValue(7 * i)
    points.SetGlobalIds(numbers)
    values = np.arange(9.0 * n).reshape(n, 9) / 4
    points.SetScalars(named(values[:, 0], "a b"))
    points.SetVectors(named(values[:, :3], "vectors"))
    points.SetNormals(named(values[:, 3:6].astype(np.float32), "normals"))
    points.SetTensors(named(values, "tensors"))
    points.SetTCoords(named(values[:, :2], "tcoords"))
    with_names = named(values[:, :3], "components")
    with_names.SetComponentName(0, "X")
    points.AddArray(with_names)
    texts = vtkStringArray()
    texts.SetName("who")
    texts.InsertNextValue("somebody")
    data.GetFieldData().AddArray(texts)
    data.GetFieldData().AddArray(named(np.array([np.nan, 1.0]), "when"))
    return data


def write_xml(data, path, mode="raw", compressor="none", ids=64, header=64, big=False):
    poly = data.IsA("vtkPolyData")
    writer = vtkXMLPolyDataWriter() if poly else vtkXMLUnstructuredGridWriter()
    writer.SetFileName(str(path))
    writer.SetInputData(data)
    {"ascii": writer.SetDataModeToAscii, "binary": writer.SetDataModeToBinary}.get(
        mode, writer.SetDataModeToAppended
    )()
    writer.SetEncodeAppendedData(mode == "base64")
    kind = COMPRESSORS[compressor]
    writer.SetCompressor(kind() if kind else None)
    writer.SetHeaderType(header)
    (writer.SetIdTypeToInt64 if ids == 64 else writer.SetIdTypeToInt32)()
    if big:
        writer.SetByteOrderToBigEndian()
    assert writer.Write()
    return path


def write_legacy(data, path, binary=True, version=51):
    poly = data.IsA("vtkPolyData")
    writer = vtkPolyDataWriter() if poly else vtkUnstructuredGridWriter()
    writer.SetFileName(str(path))
    writer.SetInputData(data)
    (writer.SetFileTypeToBinary if binary else writer.SetFileTypeToASCII)()
    writer.SetFileVersion(version)
    assert writer.Write()
    return path


def same_as_grid(model: Model, rtol: float = 0.0) -> None:
    """The model is ``grid(3)``."""
    a = np.arange(4)
    z, y, x = np.meshgrid(a, a, a, indexing="ij")
    points = np.stack([x, y, z], -1).reshape(-1, 3) + 0.25
    mesh = model.mesh
    assert np.array_equal(mesh.points, points)
    assert mesh.points.dtype == np.float64
    assert (mesh.types == 12).all()
    assert mesh.types.dtype == np.uint8
    assert np.array_equal(mesh.offsets, 8 * np.arange(28))
    assert mesh.offsets.dtype == mesh.connectivity.dtype == np.int64
    assert mesh.connectivity[:8].tolist() == [0, 1, 5, 4, 16, 17, 21, 20]
    assert np.allclose(model.point_data["u"], points * 0.1, rtol=rtol, atol=0)
    assert model.point_data["T"].dtype == np.float32
    assert np.array_equal(model.point_data["T"], np.arange(64))
    stress = np.arange(162.0).reshape(27, 6) / 7
    assert np.allclose(model.cell_data["stress"], stress, rtol=rtol, atol=0)
    assert np.array_equal(model.cell_data["part"], np.arange(27))
    assert model.cell_data["part"].dtype == np.int32


@contextlib.contextmanager
def quiet(capfd):
    """Nothing reaches the terminal, and no absurd memory is used."""
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    capfd.readouterr()
    yield
    out, err = capfd.readouterr()
    assert (out, err) == ("", "")
    assert resource.getrusage(resource.RUSAGE_SELF).ru_maxrss < before + 600_000  # kilobytes


def refused(path: Path, words: str = "", kind=InputError) -> str:
    with pytest.raises(kind) as caught:
        read_model(path)
    text = str(caught.value)
    assert path.name in text
    assert caught.value.remedy
    assert re.search(words, text), text
    return text


# --- finding the reader ---------------------------------------------------------------------


def test_no_library_is_imported_before_a_file_is_read():
    code = (
        "import sys, expander.readers, expander.readers.tables\n"
        "assert not [m for m in sys.modules if m.split('.')[0] in ('vtkmodules', 'meshio')]\n"
    )
    subprocess.run([sys.executable, "-c", code], check=True)


def test_reading_a_vtk_file_imports_no_meshio_and_no_pyvista(tmp_path):
    path = write_xml(grid(), tmp_path / "a.vtu")
    code = (
        "import sys; from pathlib import Path; from expander.readers import read_model\n"
        f"read_model(Path({str(path)!r}))\n"
        "assert not [m for m in sys.modules if m.split('.')[0] in ('pyvista', 'meshio')]\n"
        "assert 'vtkmodules.all' not in sys.modules\n"
    )
    subprocess.run([sys.executable, "-c", code], check=True)


def test_who_reads_what():
    kinds = readable()
    assert [kinds[e] for e in (".vtu", ".vtp", ".vtk")] == ["VTK"] * 3
    for extension in (".inp", ".msh", ".xdmf", ".med", ".e", ".bdf", ".stl", ".vol", ".vol.gz"):
        assert kinds[extension] == "meshio"
    assert ".svg" not in kinds  # can be written only


def test_paths_that_are_no_file(tmp_path):
    refused(tmp_path / "none.vtu", "does not exist")
    refused(tmp_path, "folder")
    (tmp_path / "empty.inp").touch()
    refused(tmp_path / "empty.inp", "empty")
    (tmp_path / "a.docx").write_text("x")
    assert ".vtu" in refused(tmp_path / "a.docx", r"kind '\.docx'")
    (tmp_path / "model").write_text("x")
    refused(tmp_path / "model", "no extension")
    with pytest.raises(InputError):
        read_model(tmp_path / ("x" * 5000 + ".vtu"))


# --- VTK's formats --------------------------------------------------------------------------


@pytest.mark.parametrize("compressor", COMPRESSORS)
@pytest.mark.parametrize("mode", MODES)
@pytest.mark.parametrize(
    ("ids", "header", "big"), [(64, 64, False), (32, 32, False), (64, 32, True)]
)
def test_every_encoding_of_a_grid(tmp_path, capfd, mode, compressor, ids, header, big):
    path = write_xml(grid(), tmp_path / "a.vtu", mode, compressor, ids, header, big)
    with quiet(capfd):
        model = read_model(path)
    same_as_grid(model, rtol=1e-14 if mode == "ascii" else 0)
    assert model.source == path
    assert model.notes == ()


@pytest.mark.parametrize("version", [42, 51])
@pytest.mark.parametrize("binary", [True, False])
def test_legacy_grids(tmp_path, capfd, binary, version):
    path = write_legacy(grid(), tmp_path / "a.VTK", binary, version)
    with quiet(capfd):
        same_as_grid(read_model(path), rtol=0 if binary else 1e-9)


def test_a_grid_saved_by_pyvista(tmp_path):
    sphere = pv.Sphere().delaunay_3d()
    sphere["r"] = np.linalg.norm(sphere.points, axis=1)
    sphere.save(tmp_path / "s.vtu")
    model = read_model(tmp_path / "s.vtu")
    assert model.mesh.points.dtype == np.float32
    assert np.array_equal(model.mesh.points, sphere.points)
    assert np.array_equal(model.mesh.connectivity, sphere.cell_connectivity)
    assert np.array_equal(model.point_data["r"], sphere["r"])


@pytest.mark.parametrize("name", ["p.vtp", "text.vtk", "old.vtk", "p.vtk"])
def test_cells_of_polydata_come_in_the_order_of_their_data(tmp_path, name):
    path = tmp_path / name
    if path.suffix == ".vtp":
        write_xml(polydata(), path)
    else:
        write_legacy(polydata(), path, name != "text.vtk", 42 if name == "old.vtk" else 51)
    model = read_model(path)
    assert model.mesh.types.tolist() == [1, 2, 3, 4, 5, 9, 7, 6]
    assert np.diff(model.mesh.offsets).tolist() == [1, 3, 2, 4, 3, 4, 5, 4]
    assert model.mesh.connectivity[:10].tolist() == [0, 1, 2, 3, 0, 1, 1, 2, 3, 4]
    assert model.cell_data["place"].tolist() == list(range(8))


@pytest.mark.parametrize("data", [grid(2), polydata()], ids=["grid", "polydata"])
@pytest.mark.parametrize("how", [*MODES, "zlib", "legacy", "legacy text", "old", "old text"])
def test_every_kind_of_array(tmp_path, capfd, data, how):
    copy = data.NewInstance()
    copy.DeepCopy(data)
    copy = every_kind(copy)
    if how in (*MODES, "zlib"):
        suffix = ".vtp" if data.IsA("vtkPolyData") else ".vtu"
        mode, compressor = ("raw", "zlib") if how == "zlib" else (how, "none")
        path = write_xml(copy, tmp_path / f"a{suffix}", mode, compressor)
    else:
        path = write_legacy(copy, tmp_path / "a.vtk", "text" not in how, 42 if "old" in how else 51)
    with quiet(capfd):
        model = read_model(path)
    n = model.mesh.point_count
    values = np.arange(9.0 * n).reshape(n, 9) / 4
    found = model.point_data
    assert model.notes == ("The point array 'a text' holds text and was left out.",)
    assert found["bits"].dtype == np.uint8
    assert found["bits"].tolist() == [int(i % 3 == 0) for i in range(n)]
    assert found["GlobalNodeIds"].tolist() == [7 * i for i in range(n)]
    assert np.allclose(found["a b"], values[:, 0])
    assert found["a b"].shape == (n,)
    assert np.allclose(found["vectors"], values[:, :3])
    assert np.allclose(found["normals"], values[:, 3:6])
    assert found["normals"].dtype == np.float32
    assert np.allclose(found["tensors"], values)
    assert np.allclose(found["tcoords"], values[:, :2])
    assert np.allclose(found["components"], values[:, :3])


def test_bits_of_several_components(tmp_path):
    data = grid(1)
    bits = vtkBitArray()
    bits.SetName("bits")
    bits.SetNumberOfComponents(3)
    for i in range(24):
        bits.InsertNextValue(i % 5 == 0)
    data.GetPointData().AddArray(bits)
    model = read_model(write_xml(data, tmp_path / "a.vtu"))
    assert model.point_data["bits"].ravel().tolist() == [int(i % 5 == 0) for i in range(24)]


def test_arrays_stay_alive_after_reading(tmp_path):
    path = write_xml(grid(), tmp_path / "a.vtu")
    models = [read_model(path) for _ in range(5)]
    del path
    for model in models:
        same_as_grid(model)


def test_several_pieces_are_one_mesh(tmp_path):
    piece = re.compile(rb"<Piece .*</Piece>\n", re.DOTALL)
    text = write_xml(grid(), tmp_path / "a.vtu", "ascii").read_bytes()
    path = tmp_path / "b.vtu"
    path.write_bytes(piece.sub(lambda m: m[0] + m[0], text))
    model = read_model(path)
    assert (model.mesh.point_count, model.mesh.cell_count) == (128, 54)
    assert model.mesh.connectivity.max() == 127
    assert np.array_equal(model.cell_data["part"], np.tile(np.arange(27), 2))
    path.write_bytes(piece.sub(lambda m: m[0] + m[0].replace(b'"T"', b'"S"'), text))
    refused(path, "every piece")


def test_ghosts_are_refused(tmp_path):
    data = grid()
    ghosts = np.zeros(27, np.uint8)
    data.GetCellData().AddArray(named(ghosts, "vtkGhostType"))
    model = read_model(write_xml(data, tmp_path / "none.vtu"))
    assert "vtkGhostType" not in model.cell_data
    assert "vtkGhostType" in model.notes[0]
    ghosts[5] = 1
    data.GetCellData().AddArray(named(ghosts, "vtkGhostType"))
    refused(write_xml(data, tmp_path / "some.vtu"), "ghost cells")


def test_meshes_that_are_none(tmp_path):
    refused(write_xml(vtkUnstructuredGrid(), tmp_path / "a.vtu"), "no points")
    refused(write_legacy(vtkPolyData(), tmp_path / "a.vtk"), "no points")
    data = vtkPolyData()
    data.SetPoints(grid().GetPoints())
    refused(write_xml(data, tmp_path / "b.vtp"), "no cells")
    data = grid()
    data.GetPoints().SetPoint(7, np.nan, 0, 0)
    refused(write_xml(data, tmp_path / "c.vtu"), "point 7 ")
    data = grid()
    data.GetCells().ReplaceCellAtId(3, 8, [0, 1, 2, 3, 4, 5, 6, 64])
    refused(write_xml(data, tmp_path / "d.vtu"), "cell 3 uses node 64")


def test_other_data_sets_are_refused_by_name(tmp_path):
    pv.ImageData(dimensions=(3, 3, 3)).save(tmp_path / "image.vtk")
    refused(tmp_path / "image.vtk", "STRUCTURED_POINTS")
    write_xml(polydata(), tmp_path / "p.vtp").rename(tmp_path / "p.vtu")
    refused(tmp_path / "p.vtu", "PolyData")
    write_xml(grid(), tmp_path / "g.vtu").rename(tmp_path / "g.vtp")
    refused(tmp_path / "g.vtp", "UnstructuredGrid")


def test_polyhedra_and_series_come_later(tmp_path):
    data = vtkUnstructuredGrid()
    data.SetPoints(grid(1).GetPoints())
    faces = [[0, 1, 3, 2], [4, 5, 7, 6], [0, 1, 5, 4], [1, 3, 7, 5], [3, 2, 6, 7], [2, 0, 4, 6]]
    stream = vtkIdList()
    for number in (6, *(n for face in faces for n in (4, *face))):
        stream.InsertNextId(number)
    data.InsertNextCell(42, stream)
    refused(write_xml(data, tmp_path / "a.vtu"), "polyhed", NotYetError)
    refused(write_legacy(data, tmp_path / "a.vtk"), "polyhed", NotYetError)

    writer = vtkXMLUnstructuredGridWriter()
    writer.SetFileName(str(tmp_path / "steps.vtu"))
    writer.SetInputData(grid())
    writer.SetNumberOfTimeSteps(2)
    writer.Start()
    writer.WriteNextTime(0.0)
    writer.WriteNextTime(1.0)
    writer.Stop()
    refused(tmp_path / "steps.vtu", "steps", NotYetError)


def test_names_that_are_missing_or_there_twice(tmp_path):
    text = write_xml(grid(), tmp_path / "a.vtu", "ascii").read_text()
    path = tmp_path / "b.vtu"
    path.write_text(text.replace('Name="T"', 'Name="u"'))
    refused(path, "called 'u'")
    path.write_text(text.replace('Name="T"', ""))
    refused(path, "no name")
    path.write_text(text.replace("<?xml", "<!DOCTYPE x [<!ENTITY a 'b'>]><?xml", 1))
    path.write_text("<!DOCTYPE x [<!ENTITY a 'b'>]>" + text.replace('<?xml version="1.0"?>', ""))
    refused(path, "entities")
    text = write_legacy(grid(), tmp_path / "a.vtk", binary=False).read_text()
    path = tmp_path / "b.vtk"
    path.write_text(text.replace("T 1 64", "u 1 64"))
    refused(path, "called 'u'")


def test_legacy_text_by_hand(tmp_path):
    """Line ends are blanks like others, and may be those of another system."""
    text = """# vtk DataFile Version 3.0
by hand
ASCII
DATASET UNSTRUCTURED_GRID POINTS 4 float 0 0 0 1 0 0
0 1 0 0 0 1
CELLS 1 5
4 0 1
2 3 CELL_TYPES
1 10 POINT_DATA 4 SCALARS T int
LOOKUP_TABLE default
1 2 3 4 VECTORS v float 0 0 0 1 1 1 2 2 2 3 3 3
"""
    for name, ends in (("a.vtk", "\n"), ("b.vtk", "\r\n")):
        (tmp_path / name).write_text(text, newline=ends)
        model = read_model(tmp_path / name)
        assert model.mesh.connectivity.tolist() == [0, 1, 2, 3]
        assert model.point_data["T"].tolist() == [1, 2, 3, 4]
        assert model.point_data["v"][3].tolist() == [3, 3, 3]
        assert model.notes == ()


@pytest.mark.parametrize(
    ("name", "options"),
    [("a.vtu", {"binary": False}), ("b.vtu", {"compression": None}),
     ("c.vtu", {"compression": "lzma"}), ("d.vtk", {"file_format": "vtk42"}),
     ("e.vtk", {"file_format": "vtk51", "binary": False})],
)  # fmt: skip
def test_vtk_files_by_another_writer(tmp_path, name, options):
    mesh = meshio_mesh("hexahedron20")
    model = read_model(meshio_write(tmp_path / name, mesh, **options))
    check_cells(model, "hexahedron20")
    assert np.allclose(model.point_data["u"], mesh.point_data["u"], rtol=1e-10)
    assert model.cell_data["part"].tolist() == [4, 5]


@pytest.mark.skipif(sys.platform != "linux", reason="names of files are bytes only here")
@pytest.mark.parametrize("name", ["\u00fc \u0394.vtu", os.fsdecode(b"a\xff.vtu")])
def test_names_of_files_are_any_text(tmp_path, name):
    (tmp_path / name).write_bytes(write_xml(grid(), tmp_path / "a.vtu").read_bytes())
    same_as_grid(read_model(tmp_path / name))


# --- damaged files of VTK's formats ---------------------------------------------------------

FILES = {
    **{mode: (f"{mode}.vtu", lambda p, m=mode: write_xml(grid(), p, m)) for mode in MODES},
    "zlib": ("zlib.vtu", lambda p: write_xml(grid(), p, "raw", "zlib")),
    "binary zlib": ("bz.vtu", lambda p: write_xml(grid(), p, "binary", "zlib")),
    "lz4": ("lz4.vtu", lambda p: write_xml(grid(), p, "base64", "lz4")),
    "polydata": ("p.vtp", lambda p: write_xml(polydata(), p)),
    "legacy": ("l.vtk", lambda p: write_legacy(grid(), p)),
    "legacy text": ("lt.vtk", lambda p: write_legacy(grid(), p, binary=False)),
    "old": ("o.vtk", lambda p: write_legacy(grid(), p, version=42)),
    "old text": ("ot.vtk", lambda p: write_legacy(grid(), p, binary=False, version=42)),
    "old polydata": ("op.vtk", lambda p: write_legacy(polydata(), p, version=42)),
    "every kind": ("e.vtk", lambda p: write_legacy(every_kind(grid(1)), p, binary=False)),
}


@pytest.fixture(scope="module")
def whole_files(tmp_path_factory):
    folder = tmp_path_factory.mktemp("whole")
    return {key: (name, write(folder / name).read_bytes()) for key, (name, write) in FILES.items()}


def read_or_refuse(path: Path) -> Model | None:
    """The model, or None if it was refused as it should be."""
    try:
        return read_model(path)
    except InputError as problem:
        refusal = problem
    assert path.name in str(refusal)
    return None


@pytest.mark.parametrize("percent", [0, 1, 10, 50, 90, 99])
@pytest.mark.parametrize("key", FILES)
def test_files_that_are_cut_short(tmp_path, capfd, whole_files, key, percent):
    name, data = whole_files[key]
    path = tmp_path / name
    path.write_bytes(data[: len(data) * percent // 100])
    with quiet(capfd):
        model = read_or_refuse(path)
    if model is not None:  # cut within its last line of text, which only the user can know
        assert (key, percent) == ("every kind", 99)
        assert "line end" in model.notes[0]


@pytest.mark.parametrize("key", ["raw", "zlib", "ascii", "base64"])
def test_files_cut_anywhere_are_refused_or_whole(tmp_path, whole_files, key):
    """Only the closing tags may be missing."""
    name, data = whole_files[key]
    path = tmp_path / name
    for length in range(len(data) - 1, len(data) - 400, -7):
        path.write_bytes(data[:length])
        model = read_or_refuse(path)
        if model is not None:
            same_as_grid(model)
            assert length > len(data) - 60


WRONG = ["0", "1", "2", "1000000", "2147483648", "1099511627776", "9223372036854775807", "-1", "x"]


@pytest.mark.parametrize("wrong", [*WRONG, "63", "65", "26", "28", ""])
@pytest.mark.parametrize("key", ["ascii", "raw", "zlib", "binary zlib", "base64"])
def test_counts_that_lie(tmp_path, capfd, whole_files, key, wrong):
    name, data = whole_files[key]
    path = tmp_path / name
    attributes = rb'(NumberOf\w+|offset)="(\d+)"'
    with quiet(capfd):
        for match in re.finditer(attributes, data[:5000]):
            if match[2].decode() == wrong:
                continue
            path.write_bytes(data[: match.start(2)] + wrong.encode() + data[match.end(2) :])
            model = read_or_refuse(path)
            # a place of values can be that of other values of the same length
            assert model is None or (match[1] == b"offset" and model.mesh.cell_count == 27)


@pytest.mark.parametrize("wrong", ["Int8", "Float64", "Int64", "String", "Bit", "Foo", ""])
@pytest.mark.parametrize("key", ["ascii", "raw", "zlib"])
def test_number_types_that_lie(tmp_path, capfd, whole_files, key, wrong):
    name, data = whole_files[key]
    path = tmp_path / name
    with quiet(capfd):
        for match in re.finditer(rb'DataArray type="(\w+)"', data[:5000]):
            path.write_bytes(data[: match.start(1)] + wrong.encode() + data[match.end(1) :])
            read_or_refuse(path)


@pytest.mark.parametrize("word", [0, 1, 7, 10**6, 2**31, 2**40, 2**62, 2**63, 2**64 - 1])
@pytest.mark.parametrize("key", ["raw", "zlib"])
def test_sizes_before_the_values_that_lie(tmp_path, capfd, whole_files, key, word):
    name, data = whole_files[key]
    path = tmp_path / name
    start = data.index(b"_", data.index(b"<AppendedData")) + 1
    with quiet(capfd):
        for match in re.finditer(rb' offset="(\d+)"', data[:5000]):
            for k in range(4 if key == "zlib" else 1):
                place = start + int(match[1]) + 8 * k
                path.write_bytes(data[:place] + struct.pack("<Q", word) + data[place + 8 :])
                model = read_or_refuse(path)
                if model is not None:
                    same_as_grid(model)


@pytest.mark.parametrize("last", [0, 215, 217, 10**9, 2**40, 2**62, 2**64 - 1])
def test_an_offset_that_lies(tmp_path, capfd, whole_files, last):
    name, data = whole_files["raw"]
    offsets = struct.pack("<27Q", *range(8, 224, 8))
    path = tmp_path / name
    for place in (26, 25, 0):
        broken = bytearray(offsets)
        broken[8 * place : 8 * place + 8] = struct.pack("<Q", last)
        path.write_bytes(data.replace(offsets, bytes(broken)))
        with quiet(capfd):
            refused(path)


@pytest.mark.parametrize("wrong", WRONG)
@pytest.mark.parametrize("key", ["legacy", "legacy text", "old", "old text", "old polydata"])
def test_legacy_counts_that_lie(tmp_path, capfd, whole_files, key, wrong):
    name, data = whole_files[key]
    path = tmp_path / name
    lines = (
        rb"^(POINTS|CELLS|CELL_TYPES|OFFSETS|POLYGONS|LINES|(?:POINT|CELL)_DATA|FIELD|u |T )[^\n]*"
    )
    with quiet(capfd):
        for line in re.finditer(lines, data, re.MULTILINE):
            for count in re.finditer(rb"(?<= )\d+\b", line[0]):
                begin, end = line.start() + count.start(), line.start() + count.end()
                if count[0].decode() != wrong:
                    path.write_bytes(data[:begin] + wrong.encode() + data[end:])
                    assert read_or_refuse(path) is None


@pytest.mark.parametrize("kind", ["double", "int", "vtktypeint64", "string", "bit", "variant", "?"])
def test_legacy_number_types_that_lie(tmp_path, capfd, whole_files, kind):
    name, data = whole_files["every kind"]
    path = tmp_path / name
    with quiet(capfd):
        for match in re.finditer(rb"\b(double|float|int|vtkIdType|string|bit)\b", data):
            path.write_bytes(data[: match.start()] + kind.encode() + data[match.end() :])
            read_or_refuse(path)


@pytest.mark.parametrize(
    "size", [b"\xff\xff\xff\xff", b"\x7f\xff\xff\xff", b"\0\0\0\0", b"\0\0\0\x09"]
)
def test_legacy_cell_sizes_that_lie(tmp_path, capfd, whole_files, size):
    name, data = whole_files["old"]
    start = data.index(b"\n", data.index(b"CELLS ")) + 1
    path = tmp_path / name
    for cell in (0, 1, 26):
        place = start + 36 * cell
        path.write_bytes(data[:place] + size + data[place + 4 :])
        with quiet(capfd):
            refused(path)


@settings(max_examples=400)
@given(st.data())
def test_bytes_that_were_changed(tmp_path_factory, whole_files, data):
    key = data.draw(st.sampled_from(sorted(FILES)))
    name, whole = whole_files[key]
    broken = bytearray(whole)
    for _ in range(data.draw(st.integers(1, 6))):
        place = data.draw(st.integers(0, len(broken) - 1))
        broken[place] = data.draw(st.integers(0, 255))
    path = tmp_path_factory.mktemp("changed") / name
    path.write_bytes(broken)
    model = read_or_refuse(path)
    if model is not None:
        mesh = model.mesh
        assert 0 <= mesh.connectivity.min() <= mesh.connectivity.max() < mesh.point_count
        assert len(mesh.offsets) == mesh.cell_count + 1
        assert mesh.offsets[-1] == len(mesh.connectivity)
        assert all(len(a) == mesh.point_count for a in model.point_data.values())
        assert all(len(a) == mesh.cell_count for a in model.cell_data.values())


@settings(max_examples=100)
@given(st.sampled_from(["vtu", "vtp", "vtk", "inp", "msh", "bdf"]), st.binary(min_size=1))
def test_random_bytes(tmp_path_factory, extension, data):
    path = tmp_path_factory.mktemp("random") / f"a.{extension}"
    path.write_bytes(data)
    assert read_or_refuse(path) is None


@pytest.mark.parametrize("extension", [".vtu", ".vtp", ".vtk", ".med", ".xdmf", ".inp", ".stl"])
def test_a_picture_is_no_model(tmp_path, capfd, extension):
    picture = b"\x89PNG\r\n\x1a\n\0\0\0\rIHDR" + bytes(range(256)) * 8
    path = tmp_path / f"a{extension}"
    path.write_bytes(picture)
    with quiet(capfd):
        refused(path)


# --- meshio's formats -----------------------------------------------------------------------

VTK_TYPES = {
    "line": 3, "triangle": 5, "quad": 9, "tetra": 10, "hexahedron": 12, "wedge": 13,
    "pyramid": 14, "line3": 21, "triangle6": 22, "quad8": 23, "tetra10": 24, "hexahedron20": 25,
    "wedge15": 26, "pyramid13": 27, "quad9": 28, "hexahedron27": 29, "wedge18": 32,
}  # fmt: skip
LINEAR = ("tetra", "hexahedron", "wedge", "pyramid")
for _name, _dimension in (("wedge15", 3), ("pyramid13", 3)):
    meshio._mesh.topological_dimension.setdefault(_name, _dimension)  # meshio forgets them


def places(kind: str) -> np.ndarray:
    """Where VTK's nodes of a cell lie, on a reference cell that was bent a little."""
    cell = vtkGenericCell.InstantiateCell(VTK_TYPES[kind])
    if hasattr(cell, "Initialize"):
        cell.Initialize()
    x = np.array(cell.GetParametricCoords()[: 3 * cell.GetNumberOfPoints()]).reshape(-1, 3)
    if kind == "pyramid13":  # VTK's parameters squeeze the apex out to a square
        linear, weights = vtkPyramid(), [0.0] * 5
        corners = np.array(linear.GetParametricCoords()).reshape(5, 3)
        for node in x:
            linear.InterpolateFunctions(node.tolist(), weights)
            node[:] = weights @ corners
    u, v, w = x.T
    return x + 0.06 * np.stack([np.sin(2 * v + w), np.cos(u + 2 * w), np.sin(u * v)], 1)


def meshio_mesh(kind: str) -> meshio.Mesh:
    """Two cells of one kind, apart, in VTK's node order."""
    one = places(kind)
    points = np.concatenate([one, one + np.array([3.0, 0.0, 0.0])])
    cells = np.arange(len(points)).reshape(2, -1)
    return meshio.Mesh(
        points, [(kind, cells)], {"u": 0.1 * points, "T": np.arange(len(points)) / 2},
        {"part": [np.array([4.0, 5.0])]},
    )  # fmt: skip


def meshio_write(path, mesh, **options) -> Path:
    with contextlib.redirect_stderr(io.StringIO()), contextlib.redirect_stdout(io.StringIO()):
        meshio.write(path, mesh, **options)
    return path


def volumes(mesh: Mesh) -> np.ndarray:
    data = vtkUnstructuredGrid()
    points = vtkPoints()
    points.SetData(numpy_to_vtk(mesh.points.astype(float), deep=1))
    data.SetPoints(points)
    for cell, kind in enumerate(mesh.types):
        nodes = mesh.connectivity[mesh.offsets[cell] : mesh.offsets[cell + 1]]
        data.InsertNextCell(int(kind), len(nodes), nodes.tolist())
    size = vtkCellSizeFilter()
    size.SetInputData(data)
    size.Update()
    return vtk_to_numpy(size.GetOutput().GetCellData().GetArray("Volume"))


def check_cells(model: Model, kind: str) -> None:
    """Every node is where VTK's order has it, and no solid is inside out."""
    mesh = model.mesh
    assert (mesh.types == VTK_TYPES[kind]).all()
    one = places(kind)
    found = mesh.points[mesh.connectivity].reshape(mesh.cell_count, -1, 3)
    for cell in range(mesh.cell_count):
        assert np.allclose(found[cell], one + np.array([3.0 * cell, 0, 0]), atol=2e-6)
    if kind.startswith(LINEAR):
        assert (volumes(mesh) > 0).all()


QUADRATIC = ("triangle6", "quad8", "tetra10", "hexahedron20", "wedge15", "pyramid13")
TRIPS = [
    *[(".inp", {}, k) for k in VTK_TYPES if not k.startswith(("pyr", "hexahedron27", "wedge18"))],
    *[(".msh", {"file_format": "gmsh"}, k) for k in VTK_TYPES],
    *[(".msh", {"file_format": "gmsh22"}, k) for k in VTK_TYPES],
    *[(".msh", {"file_format": "ansys"}, k) for k in ("tetra", "hexahedron", "wedge", "pyramid")],
    *[(e, {}, k) for e in (".xdmf", ".xmf") for k in VTK_TYPES],
    *[(".med", {}, k) for k in VTK_TYPES if k not in ("quad9", "hexahedron27", "wedge18")],
    *[(e, {}, k) for e in (".vol", ".vol.gz") for k in (*LINEAR, *QUADRATIC)],
    *[(e, {}, "triangle") for e in (".stl", ".ply", ".obj", ".off")],
    *[(".bdf", {}, k) for k in ("triangle", "quad", "quad8", "triangle6")],
    *[(e, {}, k) for e in (".avs", ".mesh", ".su2", ".f3grid") for k in LINEAR],
    (".mdpa", {}, "hexahedron20"),
    (".mdpa", {}, "hexahedron27"),
]  # fmt: skip


@pytest.mark.parametrize(("extension", "options", "kind"), TRIPS)
def test_files_of_meshio(tmp_path, capfd, extension, options, kind):
    path = meshio_write(tmp_path / f"a{extension}", meshio_mesh(kind), **options)
    with quiet(capfd):
        model = read_model(path)
    check_cells(model, kind)
    if "u" in model.point_data:
        assert np.allclose(model.point_data["u"], 0.1 * model.mesh.points)
        assert model.point_data["T"].shape == (model.mesh.point_count,)


def test_values_of_cells_come_with_their_cells(tmp_path):
    mesh = meshio.Mesh(
        np.concatenate([places("hexahedron"), places("tetra") + 3]),
        [("hexahedron", [range(8)]), ("tetra", [range(8, 12)])],
        cell_data={
            "part": [np.array([1]), np.array([2])],
            "s": [np.ones((1, 6)), np.zeros((1, 6))],
        },
        point_sets={"fixed": np.array([0, 3])},
        cell_sets={"part": [np.array([0]), np.array([], int)], "all": [np.array([0])] * 2},
    )
    model = read_model(meshio_write(tmp_path / "a.xdmf", mesh))
    assert model.mesh.types.tolist() == [12, 10]
    assert model.cell_data["part"].tolist() == [1, 2]
    assert model.cell_data["s"][:, 0].tolist() == [1, 0]
    model = read_model(meshio_write(tmp_path / "a.inp", mesh))
    assert model.point_data["fixed"].tolist() == [1, 0, 0, 1] + [0] * 8
    assert model.point_data["fixed"].dtype == np.int8
    assert model.cell_data["part"].tolist() == [1, 0]
    # this format lists a set once for each kind of cell, and meshio keeps the last list only
    assert "all" not in model.cell_data
    assert any("'all'" in note for note in model.notes)


def test_plane_meshes_get_a_third_coordinate(tmp_path):
    square = np.array([[0.0, 0], [1, 0], [1, 1], [0, 1]])
    model = read_model(
        meshio_write(tmp_path / "a.xdmf", meshio.Mesh(square, [("quad", [range(4)])]))
    )
    assert np.array_equal(model.mesh.points, np.column_stack([square, np.zeros(4)]))
    assert "third" in model.notes[0]


@pytest.mark.parametrize("kind", LINEAR)
def test_solids_that_are_inside_out_are_turned(tmp_path, kind):
    mesh = meshio_mesh(kind)
    mesh.points[:, 2] *= -1
    model = read_model(meshio_write(tmp_path / "a.xdmf", mesh))
    assert (volumes(model.mesh) > 0).all()
    assert "inside out" in model.notes[0]


def test_middle_nodes_that_are_nowhere_are_refused(tmp_path):
    mesh = meshio_mesh("tetra10")
    mesh.points[4:10] = mesh.points[0]
    mesh.points[14:] = mesh.points[10]
    refused(meshio_write(tmp_path / "a.xdmf", mesh), "not in the middle")


def test_steps_of_a_series_come_later(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)  # where meshio puts the numbers
    mesh = meshio_mesh("tetra")
    for steps in (1, 2):
        path = tmp_path / f"{steps}.xdmf"
        with meshio.xdmf.TimeSeriesWriter(path) as writer:
            writer.write_points_cells(mesh.points, mesh.cells)
            for step in range(steps):
                writer.write_data(float(step), point_data={"T": mesh.point_data["T"]})
    check_cells(model := read_model(tmp_path / "1.xdmf"), "tetra")
    assert np.array_equal(model.point_data["T"], mesh.point_data["T"])
    refused(tmp_path / "2.xdmf", "2 steps", NotYetError)


def write_lines(path: Path, *lines: str) -> Path:
    path.write_text("\n".join(lines) + "\n")
    return path


def inp(path: Path, kind: str, name: str, extra=()) -> Path:
    """One cell, its nodes as the format has them: VTK's order; numbers from 11 by 2."""
    numbers = [11 + 2 * i for i in range(len(places(kind)))]
    nodes = [
        f"{n}, {x!r}, {y!r}, {z!r}"
        for n, (x, y, z) in zip(numbers, places(kind).tolist(), strict=True)
    ]
    cell = ["7", *map(str, numbers)]
    rows = [", ".join(cell[i : i + 16]) for i in range(0, len(cell), 16)]
    rows = [row + "," * (row is not rows[-1]) for row in rows]
    return write_lines(
        path, "*HEADING", "** made by hand", "*NODE", *nodes, f"*ELEMENT, TYPE={name}, ELSET=E1",
        *rows, *extra,
    )  # fmt: skip


@pytest.mark.parametrize(
    ("kind", "name"),
    [("tetra10", "C3D10"), ("hexahedron20", "C3D20R"), ("wedge15", "C3D15"), ("wedge", "C3D6"),
     ("tetra", "C3D4H")],
)  # fmt: skip
def test_inp_by_hand(tmp_path, kind, name):
    sets = ["*NSET, NSET=N1", "11, 15", "*ELSET, ELSET=E2", "7"]
    model = read_model(inp(tmp_path / "a.inp", kind, name, sets))
    check_cells(model, kind)
    assert model.point_data["node_number"][:3].tolist() == [11, 13, 15]
    assert model.point_data["N1"][:4].tolist() == [1, 0, 1, 0]
    assert [model.cell_data[n].tolist() for n in ("element_number", "E1", "E2")] == [[7], [1], [1]]


@pytest.mark.parametrize(
    ("lines", "words"),
    [
        (["*NODE", "1, 0., 0., 0."], "several lists of nodes"),
        (["*NGEN", "1, 5, 1"], "NGEN"),
        (["*ELGEN", "1, 2, 1"], "ELGEN"),
        (["*INCLUDE, INPUT=b.inp"], "INCLUDE"),
        (["*SYSTEM", "1., 0., 0."], "SYSTEM"),
        (["*INSTANCE, NAME=A, PART=B", "1., 0., 0."], "moved"),
        (["*ELEMENT, TYPE=XYZ9", "1, 11"], "XYZ9"),
        (["*ELEMENT, TYPE=C3D4", "8, 11, 13, 15, 99"], "KeyError"),
        (["*ELEMENT, TYPE=C3D4", "8, 11, 13, 15"], "number of data"),
    ],
)
def test_inp_files_that_would_be_read_wrongly(tmp_path, capfd, lines, words):
    path = inp(tmp_path / "a.inp", "tetra", "C3D4", lines)
    with quiet(capfd):
        refused(path, words)


def test_an_inp_file_without_a_last_line_end(tmp_path):
    path = inp(tmp_path / "a.inp", "tetra", "C3D4")
    path.write_bytes(path.read_bytes().rstrip())
    assert "line end" in read_model(path).notes[0]


# Node orders by the manuals: which of VTK's nodes stands at each place.
VERTICAL_FIRST = {
    "hexahedron20": [*range(12), 16, 17, 18, 19, 12, 13, 14, 15],
    "wedge15": [*range(9), 12, 13, 14, 9, 10, 11],
    "tetra10": list(range(10)),
    "pyramid13": list(range(13)),
}
GMSH = {
    "tetra10": (11, [0, 1, 2, 3, 4, 5, 6, 7, 9, 8]),
    "hexahedron20": (17, [0, 1, 2, 3, 4, 5, 6, 7, 8, 11, 16, 9, 17, 10, 18, 19, 12, 15, 13, 14]),
    "wedge15": (18, [0, 1, 2, 3, 4, 5, 6, 8, 12, 7, 13, 14, 9, 11, 10]),
    "pyramid13": (19, [0, 1, 2, 3, 4, 5, 8, 9, 6, 10, 7, 11, 12]),
    # edges as in the 15 nodes; quadrilaterals 0-1-4-3, 0-2-5-3, 1-2-5-4
    "wedge18": (13, [0, 1, 2, 3, 4, 5, 6, 8, 12, 7, 13, 14, 9, 11, 10, 15, 17, 16]),
}


@pytest.mark.parametrize("kind", VERTICAL_FIRST)
def test_bulk_data_by_hand(tmp_path, kind):
    card = {"h": "CHEXA", "w": "CPENTA", "t": "CTETRA", "p": "CPYRAM"}[kind[0]]
    lines = ["CEND", "BEGIN BULK"]
    lines += [f"GRID,{i + 5},,{x:.6f},{y:.6f},{z:.6f}" for i, (x, y, z) in enumerate(places(kind))]
    nodes = [str(i + 5) for i in VERTICAL_FIRST[kind]]
    fields = [card, "9", "3", *nodes]
    rows = [fields[:9]] + [["+", *fields[i : i + 8]] for i in range(9, len(fields), 8)]
    lines += [",".join([*row, *([""] * (9 - len(row))), "+"]) for row in rows[:-1]]
    lines += [",".join(rows[-1]), "CONM2,90,5,,1.0", "ENDDATA"]
    path = write_lines(tmp_path / "a.bdf", *lines)
    model = read_model(path)
    check_cells(model, kind)
    assert model.point_data["node_number"].tolist() == list(range(5, 5 + len(places(kind))))
    assert model.cell_data["element_number"].tolist() == [9]
    assert model.cell_data["property"].tolist() == [3]
    assert model.notes == ("Cards that are no cells of the mesh were left out: CONM2 (1).",)
    path.write_text(path.read_text().replace("GRID,5,,", "GRID,5,2,"))
    refused(path)


@pytest.mark.parametrize(
    "lines",
    [
        ["CTETRA* 1               1               1               2               ",
         "*       3               4"],
        ["ctetra,1,1,1,2,3,4"],
        ["INCLUDE 'more.bdf'"],
    ],
)  # fmt: skip
def test_cards_of_bulk_data_that_meshio_drops_are_refused(tmp_path, lines):
    grids = [f"GRID,{i + 1},,{x},{y},{z}" for i, (x, y, z) in enumerate(np.eye(4, 3))]
    rows = ["BEGIN BULK", *grids, "CTETRA,2,1,1,2,3,4", *lines, "ENDDATA"]
    refused(write_lines(tmp_path / "a.bdf", *rows), "passes over")


def test_points_in_another_coordinate_system_are_refused(tmp_path):
    grids = [f"GRID,{i + 1},{8 * i},{x},{y},{z}" for i, (x, y, z) in enumerate(np.eye(4, 3))]
    rows = ["BEGIN BULK", *grids, "CTETRA,2,1,1,2,3,4", "ENDDATA"]
    refused(write_lines(tmp_path / "b.bdf", *rows), "coordinate system 24")


def msh22(path: Path, kind: str, data=()) -> Path:
    number, order = GMSH[kind]
    n = len(order)
    nodes = [f"{i + 1} {x!r} {y!r} {z!r}" for i, (x, y, z) in enumerate(places(kind).tolist())]
    cell = " ".join(str(i + 1) for i in order)
    return write_lines(
        path, "$MeshFormat", "2.2 0 8", "$EndMeshFormat", "$Nodes", str(n), *nodes, "$EndNodes",
        "$Elements", "1", f"3 {number} 2 5 6 {cell}", "$EndElements", *data,
    )  # fmt: skip


def msh41(path: Path, kind: str, numbers, data=()) -> Path:
    number, order = GMSH[kind]
    n = len(order)
    rows = [f"{x!r} {y!r} {z!r}" for x, y, z in places(kind).tolist()]
    cell = " ".join(str(numbers[i]) for i in order)
    return write_lines(
        path, "$MeshFormat", "4.1 0 8", "$EndMeshFormat", "$Nodes",
        f"2 {n} {min(numbers)} {max(numbers)}", "3 1 0 2", *map(str, numbers[:2]), *rows[:2],
        f"3 2 0 {n - 2}", *map(str, numbers[2:]), *rows[2:], "$EndNodes", "$Elements", "1 1 4 4",
        f"3 1 {number} 1", f"4 {cell}", "$EndElements", *data,
    )  # fmt: skip


def node_data(numbers, name="T", kind="Node") -> list[str]:
    values = [f"{n} {n / 4}" for n in numbers]
    head = ["1", f'"{name}"', "1", "0.0", "3", "0", "1", str(len(values))]
    return [f"${kind}Data", *head, *values, f"$End{kind}Data"]


@pytest.mark.parametrize("kind", GMSH)
def test_msh_by_hand(tmp_path, kind):
    numbers = list(range(1, len(GMSH[kind][1]) + 1))
    model = read_model(msh22(tmp_path / "a.msh", kind, node_data(numbers)))
    check_cells(model, kind)
    assert model.point_data["T"].tolist() == [n / 4 for n in numbers]
    assert model.point_data["node_number"].tolist() == numbers
    assert model.cell_data["element_number"].tolist() == [3]
    assert model.cell_data["gmsh:physical"].tolist() == [5]
    numbers = numbers[::-1]
    model = read_model(msh41(tmp_path / "b.msh", kind, numbers, node_data(numbers)))
    check_cells(model, kind)
    assert model.point_data["node_number"].tolist() == numbers
    assert model.point_data["T"].tolist() == [n / 4 for n in numbers]
    assert "gmsh:dim_tags" not in model.point_data


def test_msh_values_go_to_the_nodes_that_they_name(tmp_path):
    numbers = list(range(10, 0, -1))
    path = msh41(tmp_path / "a.msh", "tetra10", numbers, node_data(sorted(numbers)))
    refused(path, "another order")
    twice = node_data(numbers) + node_data(numbers)
    refused(msh41(path, "tetra10", numbers, twice), "steps", NotYetError)
    assert read_model(msh41(path, "tetra10", numbers, node_data([4], "s", "Element"))).cell_data[
        "s"
    ]
    refused(msh41(path, "tetra10", numbers, node_data([5], "s", "Element")), "other cells")


def test_exodus_needs_its_library(tmp_path, monkeypatch):
    path = tmp_path / "a.e"
    path.write_bytes(b"CDF\x01" + bytes(100))
    monkeypatch.setitem(sys.modules, "netCDF4", None)
    refused(path, "netCDF4.*not installed")


@pytest.mark.parametrize("kind", ["tetra", "tetra10", "hexahedron20", "hexahedron27"])
def test_exodus_by_hand(tmp_path, kind):
    netcdf = pytest.importorskip("netCDF4")
    order = list(range(len(places(kind))))
    if kind.startswith("hexahedron"):
        order[:20] = VERTICAL_FIRST["hexahedron20"]
    if kind == "hexahedron27":  # centre, bottom, top, left, right, front, back
        order[20:] = [26, 24, 25, 20, 21, 22, 23]
    for steps in (1, 2):
        path = tmp_path / f"{steps}.e"
        with netcdf.Dataset(path, "w") as file:
            for name, size in (("num_nodes", len(order)), ("num_dim", 3), ("one", 1), ("len", 5)):
                file.createDimension(name, size)
            file.createDimension("time_step", None)
            file.createVariable("coord", "f8", ("num_dim", "num_nodes"))[:] = places(kind).T
            cells = file.createVariable("connect1", "i4", ("one", "num_nodes"))
            cells.elem_type = {"tetra": "TET4", "tetra10": "TETRA10"}.get(kind, f"HEX{len(order)}")
            cells[:] = np.array([order]) + 1
            names = file.createVariable("name_nod_var", "S1", ("one", "len"))
            names[0, 0] = b"T"
            values = file.createVariable("vals_nod_var1", "f8", ("time_step", "num_nodes"))
            for step in range(steps):
                values[step] = np.arange(len(order)) + step
            file.createVariable("node_num_map", "i4", ("num_nodes",))[:] = 3 * np.arange(len(order))
    model = read_model(tmp_path / "1.e")
    check_cells(model, kind)
    assert model.point_data["node_number"].tolist() == [3 * i for i in range(len(order))]
    refused(tmp_path / "2.e", "several steps", NotYetError)


@pytest.mark.parametrize("percent", [0, 10, 50, 90, 99])
@pytest.mark.parametrize(
    ("extension", "options"),
    [
        (".inp", {}), (".msh", {"file_format": "gmsh"}), (".msh", {"file_format": "ansys"}),
        (".xdmf", {"data_format": "XML"}), (".med", {}), (".bdf", {}), (".vol", {}),
        (".stl", {}), (".ply", {}), (".obj", {}), (".off", {}), (".tec", {}), (".su2", {}),
        (".avs", {}), (".mesh", {}), (".meshb", {}), (".node", {}), (".f3grid", {}), (".cgns", {}),
    ],
)  # fmt: skip
def test_files_of_meshio_that_are_cut_short(tmp_path, capfd, extension, options, percent):
    kind = "triangle" if extension in (".stl", ".ply", ".obj", ".off", ".bdf") else "tetra"
    path = meshio_write(tmp_path / f"a{extension}", meshio_mesh(kind), **options)
    data = path.read_bytes()
    path.write_bytes(data[: len(data) * percent // 100])
    with quiet(capfd):
        model = read_or_refuse(path)
    # text that does not say how much of it there is can only warn
    if model is not None and percent < 90:
        assert extension in (".inp", ".obj")
        assert "line end" in " ".join(model.notes)


@pytest.fixture
def handed_over(monkeypatch, tmp_path):
    """Read what meshio is made to hand over, whatever the file."""

    def read(**parts) -> Model:
        square = np.array([[0.0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0]])
        mesh = SimpleNamespace(
            points=square, cells=[Cells(type="quad", data=np.array([[0, 1, 2, 3]]))],
            point_data={}, cell_data={}, point_sets={}, cell_sets={},
        )  # fmt: skip
        vars(mesh).update(parts)
        monkeypatch.setattr(meshio_formats, "read", lambda path, formats: mesh)
        (tmp_path / "a.med").write_text("x")
        return read_model(tmp_path / "a.med")

    return read


class Cells(SimpleNamespace):
    def __len__(self) -> int:
        return len(self.data)


TWO = [
    Cells(type="quad", data=np.array([[0, 1, 2, 3]])),
    Cells(type="line", data=np.array([[0, 1]])),
]


@pytest.mark.parametrize(
    ("parts", "words"),
    [
        ({"cells": TWO, "cell_data": {"s": [np.ones(1)]}}, "'s' is not there for every"),
        ({"cells": TWO, "cell_data": {"s": [np.ones(1), None]}}, "'s' is not there for every"),
        ({"cells": TWO, "cell_data": {"s": [np.ones(1), np.ones(2)]}}, "'s' is not there"),
        ({"cells": TWO, "cell_data": {"s": [np.ones(1), np.ones((1, 3))]}}, "in the same form"),
        ({"cells": []}, "no cells"),
        ({"cells": [Cells(type="quad", data=np.zeros((0, 4), int))]}, "no cells"),
        ({"cells": [Cells(type="tetra20", data=np.zeros((1, 20), int))]}, "'tetra20'"),
        ({"cells": [Cells(type="polyhedron8", data=[[[0, 1, 2]]])]}, "'polyhedron8'"),
        ({"cells": [Cells(type="quad", data=[[0.0, 1, 2, 3]])]}, "no whole table"),
        ({"cells": [Cells(type="quad", data=[[0, 1, 2]])]}, "3 nodes, not 4"),
        ({"cells": [Cells(type="quad", data=[[0, 1, 2, -1]])]}, "uses node -1"),
        ({"points": []}, "no points"),
        ({"points": np.array(["a"])}, "not numbers"),
        ({"points": np.zeros((4, 1))}, "shape"),
        ({"point_data": {"T": np.zeros(3)}}, "'T' has 3 values for 4 points"),
        ({"point_data": {"T": np.ma.masked_array([1, 2, 3, 4], [0, 0, 0, 1])}}, "missing whole"),
        ({"point_data": {"T[0] - 0.5": np.zeros(4)}}, "several steps of 'T'"),
    ],
)
def test_meshes_that_do_not_fit_together(handed_over, parts, words):
    with pytest.raises(InputError, match=words) as caught:
        handed_over(**parts)
    assert "a.med" in str(caught.value)


def test_arrays_and_sets_of_every_kind(handed_over):
    model = handed_over(
        point_data={
            "m": np.ma.masked_array([1.0, 2, 3, 4], [0, 0, 1, 0]),
            "text": np.array(list("abcd")),
            "swapped": np.array([1, 2, 3, 4], ">f8"),
            "flag": np.array([True, False, True, False]),
            "wide": np.arange(4, dtype=np.longdouble),
            "matrix": np.arange(36.0).reshape(4, 3, 3),
            "one": np.zeros((4, 1), np.float32),
        },
        point_sets={"m": [1, 2], "far": [9], "none": [], "ragged": [[1], [2, 3]], "real": [0.5]},
        cell_sets={"c": [None], "many": [[0], [0]]},
    )
    found = model.point_data
    assert np.array_equal(found["m"], [1, 2, np.nan, 4], equal_nan=True)
    assert found["swapped"].dtype == found["wide"].dtype == np.dtype(np.float64)
    assert found["flag"].tolist() == [1, 0, 1, 0]
    assert found["matrix"].shape == (4, 9)
    assert found["one"].shape == (4,)
    assert found["m (set)"].tolist() == [0, 1, 1, 0]
    assert found["none"].tolist() == [0, 0, 0, 0]
    assert model.cell_data["c"].tolist() == [0]
    notes = " ".join(model.notes)
    for name in ("text", "far", "ragged", "real", "many"):
        assert name not in {**found, **model.cell_data}
        assert f"'{name}'" in notes
    assert "NaN" in notes


def test_what_meshio_prints_and_its_exits(monkeypatch, tmp_path, capfd):
    path = tmp_path / "a.med"
    path.write_text("x")

    def leave(*_):
        print("bad luck")
        print("worse luck", file=sys.stderr)
        sys.exit(1)

    monkeypatch.setattr(meshio_formats, "read", leave)
    with quiet(capfd):
        refused(path, "bad luck")
    monkeypatch.setattr(meshio_formats, "read", lambda *_: 1 / 0)
    refused(path, "ZeroDivisionError")

    def warn(*_):
        meshio._common.warn("half of it was left out, which is a sentence longer than one line is")
        return meshio_mesh("tetra")

    monkeypatch.setattr(meshio_formats, "read", warn)
    with quiet(capfd):
        model = read_model(path)
    assert model.notes == ("half of it was left out, which is a sentence longer than one line is",)


# --- tables ---------------------------------------------------------------------------------


def small_model(**arrays) -> Model:
    """Five points and two triangles."""
    points = np.array([[0.0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [2, 0, 0]])
    mesh = Mesh(
        points, np.array([0, 1, 2, 0, 2, 3]), np.array([0, 3, 6]), np.array([5, 5], np.uint8)
    )
    on_cells = {k: v for k, v in arrays.items() if len(v) == 2}
    on_points = {k: v for k, v in arrays.items() if len(v) == 5}
    return Model(mesh, on_points, on_cells, Path("model.vtu"))


def table(path: Path, text: str) -> Path:
    path.write_text(text)
    return path


def table_refused(model: Model, path: Path, words: str, **options) -> None:
    with pytest.raises(InputError) as caught:
        add_table(model, path, **options)
    assert path.name in str(caught.value)
    assert caught.value.remedy
    assert re.search(words, str(caught.value)), str(caught.value)


@pytest.mark.parametrize(("first", "said"), [(0, "from 0"), (1, "from 1")])
def test_tables_in_the_order_of_the_model(tmp_path, first, said):
    order = [3, 0, 4, 1, 2]
    rows = "\n".join(f"{i + first}, {i / 8}, {-i}" for i in order)
    path = table(tmp_path / "t.csv", f"Node , UX , UY [mm]\n{rows}\n\n")
    model = add_table(small_model(), path)
    assert list(model.point_data) == ["UX", "UY [mm]"]
    assert np.array_equal(model.point_data["UX"], np.arange(5) / 8)
    assert model.point_data["UX"].dtype == np.float64
    assert said in model.notes[0]
    np.savez(tmp_path / "t.npz", node=np.array(order) + first, u=np.array(order, np.float32))
    model = add_table(model, tmp_path / "t.npz")
    assert model.point_data["u"].tolist() == [0, 1, 2, 3, 4]
    assert model.point_data["u"].dtype == np.float32
    assert len(model.notes) == 2


@pytest.mark.parametrize("name", ["node", "Node_Number", "GlobalNodeIds", "global_ids"])
def test_tables_by_the_numbers_of_the_model(tmp_path, name):
    model = small_model(**{name: np.array([10, 40, 20, 30, 7], np.int32)})
    path = table(tmp_path / "t.csv", "node,T\n7,5\n10,1\n20,3\n30,4\n40,2\n")
    model = add_table(model, path)
    assert model.point_data["T"].tolist() == [1, 2, 3, 4, 5]
    assert f"'{name}'" in model.notes[0]
    table_refused(model, table(path, "node,S\n7,5\n10,1\n20,3\n31,4\n40,2\n"), "node 31 is not")


def test_cell_tables(tmp_path):
    model = small_model(Element_ID=np.array([8, 5]))
    np.savez_compressed(
        tmp_path / "t.npz", cell=np.array([5, 8]), s=np.arange(12.0).reshape(2, 6),
        t=np.array([[1], [2]], ">i2"), b=np.array([True, False]), f=np.asfortranarray(np.eye(2)),
    )  # fmt: skip
    model = add_table(model, tmp_path / "t.npz")
    assert model.cell_data["s"][0].tolist() == [6, 7, 8, 9, 10, 11]
    assert model.cell_data["t"].tolist() == [2, 1]
    assert model.cell_data["t"].dtype == np.int16
    assert model.cell_data["b"].dtype == np.uint8
    assert model.cell_data["f"].tolist() == [[0, 1], [1, 0]]
    assert not model.point_data


def test_numbers_that_are_not_unique_are_no_numbers(tmp_path):
    model = small_model(node=np.array([1, 1, 2, 3, 4]))
    path = table(tmp_path / "t.csv", "node,T\n0,0\n1,1\n2,2\n3,3\n4,4\n")
    assert "from 0" in add_table(model, path).notes[0]


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("node,T\n", "no rows"),
        ("\n", "first column is called ''"),
        ("T,node\n1,2\n", "first column is called 'T'"),
        ("node;T\n1;2\n", "by commas"),
        ("node\n1\n", "no column beside"),
        ("node,T,T\n1,2,3\n", "two columns are called 'T'"),
        ("node,T,\n1,2,3\n", "column 3 has no name"),
        ("node,cell\n1,2\n", "column 'cell'"),
        ("node,T\n1,2\n\n2,hot\n3,4\n", "line 4, column 'T': 'hot'"),
        ("node,T\n1,2\n2,\n", "line 3, column 'T': ''"),
        ("node,T\none,2\n", "line 2, column 'node': 'one'"),
        ("node,T\n1,2\n2,3,4\n", "line 3: 3 columns"),
        ("node,T\n1,2\n2\n", "line 3: 1 columns"),
        ("node,T\n1,2,3\n4,5,6\n", "line 2: 3 columns"),
        ("node,T\n1,2\n2.5,3\n", "line 3: node number 2.5"),
        ("node,T\n1,2\nnan,3\n", "line 3: node number nan"),
        ("node,T\n1,2\n1e300,3\n", "line 3: node number"),
        ("node,T\n1,1\n2,2\n3,3\n4,4\n9,5\n", "line 6: node 9 is not in the model"),
        ("node,T\n0,1\n1,2\n2,3\n3,4\n5,5\n", "line 6: node 5 is not in the model"),
        ("node,T\n-1,1\n1,2\n2,3\n3,4\n5,5\n", "line 2: node -1 is not in the model"),
        ("node,T\n1,1\n2,2\n3,3\n2,4\n5,5\n", "line 5: node 2 is there twice, also in line 3"),
        ("node,old\n1,1\n2,2\n3,3\n4,4\n5,5\n", "already has a node array 'old'"),
        ("node,T\n1,1\n2,2\n5,5\n", "2 of 5 nodes have no row.*number is 3"),
        ("node,T\n2,1\n3,2\n", "cannot be told"),
        ("cell,T\n1,1\n", "without the numbers|1 of 2 cells"),
    ],
)
def test_tables_that_are_refused(tmp_path, capfd, text, words):
    with quiet(capfd):
        table_refused(small_model(old=np.zeros(5)), table(tmp_path / "t.csv", text), words)


def test_missing_rows_become_nan_if_allowed(tmp_path):
    path = table(tmp_path / "t.csv", "node,T\n1,1\n2,2\n5,5\n")
    model = add_table(small_model(), path, allow_missing=True)
    assert np.array_equal(model.point_data["T"], [1, 2, np.nan, np.nan, 5], equal_nan=True)
    assert "2 of 5 nodes" in model.notes[1]
    np.savez(tmp_path / "t.npz", node=[1, 5], part=[1, 2])
    table_refused(small_model(), tmp_path / "t.npz", "whole numbers", allow_missing=True)
    table_refused(small_model(), table(path, "node,T\n2,1\n3,2\n"), "be told", allow_missing=True)


def test_files_that_are_no_tables(tmp_path):
    model = small_model()
    table_refused(model, tmp_path / "none.csv", "does not exist")
    table_refused(model, tmp_path, "folder")
    table_refused(model, table(tmp_path / "e.csv", ""), "empty")
    table_refused(model, table(tmp_path / "t.xlsx", "x"), r"'\.xlsx'")
    (tmp_path / "b.csv").write_bytes(b"node,T\n1,\xff\xfe\n")
    table_refused(model, tmp_path / "b.csv", "UTF-8")
    (tmp_path / "z.csv").write_bytes(bytes(range(256)))
    table_refused(model, tmp_path / "z.csv", "")
    (tmp_path / "bom.csv").write_bytes(b"\xef\xbb\xbfcell,T\r\n1,5\r\n2,6\r\n")
    assert add_table(model, tmp_path / "bom.csv").cell_data["T"].tolist() == [5, 6]


@pytest.mark.parametrize(
    ("arrays", "words"),
    [
        ({"T": np.zeros(5)}, "neither"),
        ({"node": np.arange(5), "cell": np.arange(2)}, "both"),
        ({"node": np.arange(5)}, "no array beside"),
        ({"node": np.arange(5.0), "T": np.zeros(5)}, "float64"),
        ({"node": np.zeros((5, 1), int), "T": np.zeros(5)}, r"\(5, 1\)"),
        ({"node": np.arange(5), "T": np.zeros(4)}, r"'T' has shape \(4,\)"),
        ({"node": np.arange(5), "T": np.zeros((5, 2, 2))}, "'T' has shape"),
        ({"node": np.arange(5), "T": np.zeros(5, complex)}, "complex"),
        ({"node": np.arange(5), "T": np.array(list("abcde"))}, "'T' has type"),
        ({"node": np.arange(5), "T": np.array([{}] * 5, object)}, "'T' has type object"),
        ({"node": np.zeros(0, int), "T": np.zeros(0)}, "shape"),
        (
            {"node": [0, 1, 2, 3, 3], "T": np.zeros(5)},
            "row 5: node 3 is there twice, also in row 4",
        ),
    ],
)
def test_npz_tables_that_are_refused(tmp_path, arrays, words):
    np.savez(tmp_path / "t.npz", **arrays)
    table_refused(small_model(), tmp_path / "t.npz", words)


@pytest.mark.parametrize("percent", [1, 10, 50, 90, 99])
def test_npz_files_that_are_cut_short(tmp_path, percent):
    np.savez(tmp_path / "a.npz", node=np.arange(5), T=np.zeros(5))
    data = (tmp_path / "a.npz").read_bytes()
    (tmp_path / "t.npz").write_bytes(data[: len(data) * percent // 100])
    table_refused(small_model(), tmp_path / "t.npz", "no complete .npz")


@pytest.mark.parametrize("shape", ["(1000000000000,)", "(-5,)", "(5, 1000000000)", "('a',)", "(("])
def test_npz_shapes_that_lie(tmp_path, capfd, shape):
    head = f"{{'descr': '<f8', 'fortran_order': False, 'shape': {shape}, }}".encode()
    head = head.ljust(118) + b"\n"
    with zipfile.ZipFile(tmp_path / "t.npz", "w") as archive:
        archive.writestr(
            "T.npy", b"\x93NUMPY\x01\x00" + struct.pack("<H", len(head)) + head + bytes(40)
        )
        archive.writestr("note.txt", b"hello")
    with quiet(capfd):
        table_refused(small_model(), tmp_path / "t.npz", "'T'")


@settings(max_examples=100)
@given(
    st.permutations(range(5)),
    st.lists(st.integers(-(2**40), 2**40), min_size=5, max_size=5, unique=True),
)
def test_values_go_where_their_numbers_say(tmp_path_factory, order, numbers):
    model = small_model(node=np.array(numbers))
    rows = [f"{numbers[i]},{i}" for i in order]
    path = tmp_path_factory.mktemp("t") / "t.csv"
    path.write_text("\n".join(["node,T", *rows]))
    assert add_table(model, path).point_data["T"].tolist() == [0, 1, 2, 3, 4]
