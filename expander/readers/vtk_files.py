"""VTK's own files: .vtu, .vtp and the older .vtk, through VTK's readers.

Only the three VTK modules that are needed are imported. What VTK would print is caught
and becomes the reason of the error. A damaged file is stopped before VTK sees it where
VTK would crash, ask for absurd memory or quietly lose arrays (see ``vtk_xml_guard`` and
``vtk_legacy_guard``).
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from vtkmodules.util.numpy_support import vtk_to_numpy
from vtkmodules.vtkCommonCore import vtkLogger, vtkOutputWindow, vtkStringOutputWindow
from vtkmodules.vtkIOLegacy import vtkPolyDataReader, vtkUnstructuredGridReader
from vtkmodules.vtkIOXML import vtkXMLPolyDataReader, vtkXMLUnstructuredGridReader

from expander.errors import InputError
from expander.model import Mesh, Model
from expander.readers import assemble, vtk_xml_guard

Array = NDArray[np.generic]


def read_vtu(path: Path) -> Model:
    """The model in an XML file of an unstructured grid."""
    return _grid_model(path, _xml_output(vtkXMLUnstructuredGridReader(), path, "UnstructuredGrid"))


def read_vtp(path: Path) -> Model:
    """The model in an XML file of polygons, lines and vertices."""
    return _polydata_model(path, _xml_output(vtkXMLPolyDataReader(), path, "PolyData"))


def _xml_output(reader: Any, path: Path, kind: str) -> Any:
    with _silence():
        declared = vtk_xml_guard.check(path, kind)
    output = _output(reader, path, declared)
    return output


def read_legacy(path: Path) -> Model:
    """The model in a legacy file, an unstructured grid or polygonal data."""
    with path.open("rb") as file:
        head = file.read(4096)
    found = re.search(rb"^\s*DATASET\s+(\w+)", head, re.MULTILINE | re.IGNORECASE)
    kind = found[1].decode().upper() if found else "none"
    if kind == "UNSTRUCTURED_GRID":
        return _grid_model(path, _output(_all_arrays(vtkUnstructuredGridReader()), path))
    if kind == "POLYDATA":
        return _polydata_model(path, _output(_all_arrays(vtkPolyDataReader()), path))
    raise InputError(
        f"{path}: the data set is {kind}",
        "Write an unstructured grid (UNSTRUCTURED_GRID) or polygonal data (POLYDATA).",
    )


def _all_arrays(reader: Any) -> Any:
    """A legacy reader that keeps every array, not only the first of each kind."""
    for kind in ("Scalars", "Vectors", "Normals", "Tensors", "ColorScalars", "TCoords", "Fields"):
        getattr(reader, f"ReadAll{kind}On")()
    return reader


@contextmanager
def _silence() -> Iterator[Any]:
    """Catch everything that VTK reports; the text is in ``GetOutput()`` of what is yielded."""
    window, before = vtkStringOutputWindow(), vtkOutputWindow.GetInstance()
    level = vtkLogger.GetCurrentVerbosityCutoff()
    vtkOutputWindow.SetInstance(window)
    vtkLogger.SetStderrVerbosity(vtkLogger.VERBOSITY_OFF)
    try:
        yield window
    finally:
        vtkLogger.SetStderrVerbosity(vtkLogger.ConvertToVerbosity(level))
        vtkOutputWindow.SetInstance(before)


def _output(reader: Any, path: Path, declared: Any=None) -> Any:
    """The data set that a VTK reader makes of the file; any complaint of VTK is an error."""
    with _silence() as window:
        reader.SetFileName(str(path))
        if declared is not None:
            reader.UpdateInformation()
            for section in ("Point", "Cell"):
                for name in declared.texts[section+"Data"]:
                    getattr(reader, f"Get{section}DataArraySelection")().DisableArray(name)
        reader.Update()
        output = reader.GetOutput()
        complaint = window.GetOutput()
    if complaint or reader.GetErrorCode() or output is None:
        raise InputError(f"{path} cannot be read: {_reason(complaint)}", assemble.AGAIN)
    return output


def _reason(complaint: str) -> str:
    """The first sentence of VTK's report, without source lines and addresses."""
    for line in complaint.splitlines():
        text = re.sub(r"^\w+ \(0x[0-9a-f]+\): ", "", line).strip()
        if text and not text.startswith(("ERROR:", "Warning:", "Generic Warning:")):
            return text.rstrip(".")
    return "VTK gives no reason"


def _numpy(array: Any) -> Array:
    """A VTK array as a numpy view (n, k) or (n,); the view keeps the VTK array alive."""
    values: Array = np.asarray(vtk_to_numpy(array))
    return values


def _cells(cells: Any) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Connectivity (L,) and offsets (m + 1,) of a VTK cell array."""
    if cells is None or cells.GetNumberOfCells() == 0:
        return np.zeros(0, np.int64), np.zeros(1, np.int64)
    return (
        _numpy(cells.GetConnectivityArray()).astype(np.int64, copy=False),
        _numpy(cells.GetOffsetsArray()).astype(np.int64, copy=False),
    )


def _points(output: Any) -> Array:
    points = output.GetPoints()
    return np.zeros((0, 3)) if points is None else _numpy(points.GetData()).reshape(-1, 3)


def _grid_model(path: Path, grid: Any) -> Model:
    connectivity, offsets = _cells(grid.GetCells())
    if len(offsets) == 1:
        types: Array = np.zeros(0, np.uint8)
    else:
        try:
            types = _numpy(grid.GetCellTypes())
        except TypeError:  # before VTK 9.6
            types = _numpy(grid.GetCellTypesArray())
    mesh = assemble.checked_mesh(path, _points(grid), connectivity, offsets, types)
    return _model(path, mesh, grid)


def _polydata_model(path: Path, data: Any) -> Model:
    # cell data follow this order: vertices, lines, polygons, strips
    parts = [
        (data.GetVerts(), {1: 1}, 2),
        (data.GetLines(), {2: 3}, 4),
        (data.GetPolys(), {3: 5, 4: 9}, 7),
        (data.GetStrips(), {}, 6),
    ]
    connectivities, ends, types = [], [np.zeros(1, np.int64)], []
    for cells, type_of_size, otherwise in parts:
        connectivity, offsets = _cells(cells)
        sizes = np.diff(offsets)
        kinds = np.full(len(sizes), otherwise, np.uint8)
        for size, kind in type_of_size.items():
            kinds[sizes == size] = kind
        ends.append(offsets[1:] + ends[-1][-1] if len(sizes) else ends[-1][-1:][:0])
        if not len(ends[-1]):
            ends.pop()
        connectivities.append(connectivity)
        types.append(kinds)
    mesh = assemble.checked_mesh(
        path,
        _points(data),
        np.concatenate(connectivities),
        np.concatenate(ends),
        np.concatenate(types),
    )
    return _model(path, mesh, data)


def _model(path: Path, mesh: Mesh, output: Any) -> Model:
    notes: list[str] = []
    points = _arrays(path, "point", output.GetPointData(), notes)
    cells = _arrays(path, "cell", output.GetCellData(), notes)
    return assemble.model(path, mesh, points, cells, notes)


def _arrays(path: Path, place: str, data: Any, notes: list[str]) -> list[tuple[str, Array]]:
    """Name and values of each numeric array of a VTK attribute set; notes on the others."""
    found: list[tuple[str, Array]] = []
    for index in range(data.GetNumberOfArrays()):
        array = data.GetAbstractArray(index)
        name = array.GetName()
        if not name:
            notes.append(f"A {place} array without a name was left out.")
        elif not array.IsA("vtkDataArray"):
            notes.append(f"The {place} array '{name}' holds text and was left out.")
        elif name in ("vtkGhostType", "vtkGhostLevels"):
            if _numpy(array).any():
                raise InputError(
                    f"{path}: the file has ghost {place}s, which the copies would count twice",
                    "Write the sector without ghost cells, as one piece.",
                )
            notes.append(f"The {place} array '{name}' marks nothing and was left out.")
        else:
            found.append((name, _numpy(array)))
    return found
