"""VTK's own files: .vtu, .vtp and the older .vtk, through VTK's readers.

Only the few VTK modules that are needed are imported. What VTK would print is caught and
becomes the reason of the error. A damaged file is stopped before VTK sees it where VTK
would crash, ask for absurd memory or quietly lose arrays: see ``vtk_xml_guard`` and
``vtk_legacy_guard``. What VTK hands over is checked again in ``assemble``.
"""

from __future__ import annotations

import os
import re
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from vtkmodules.util.numpy_support import vtk_to_numpy
from vtkmodules.vtkCommonCore import (
    vtkLogger,
    vtkOutputWindow,
    vtkStringOutputWindow,
    vtkUnsignedCharArray,
)
from vtkmodules.vtkIOLegacy import vtkPolyDataReader, vtkUnstructuredGridReader
from vtkmodules.vtkIOXML import vtkXMLPolyDataReader, vtkXMLUnstructuredGridReader

from expander.errors import InputError
from expander.model import Mesh, Model
from expander.readers import assemble, vtk_legacy_guard, vtk_xml_guard
from expander.readers.vtk_declared import Declared

Array = NDArray[np.generic]


def read_vtu(path: Path) -> Model:
    """The model in an XML file of an unstructured grid."""
    with _silence():
        declared = vtk_xml_guard.check(path, "UnstructuredGrid")
    return _grid_model(path, _xml_output(vtkXMLUnstructuredGridReader(), path, declared), declared)


def read_vtp(path: Path) -> Model:
    """The model in an XML file of polygons, lines and vertices."""
    with _silence():
        declared = vtk_xml_guard.check(path, "PolyData")
    return _polydata_model(path, _xml_output(vtkXMLPolyDataReader(), path, declared), declared)


def read_legacy(path: Path) -> Model:
    """The model in a legacy file, an unstructured grid or polygonal data."""
    declared = vtk_legacy_guard.check(path)
    grid = declared.kind == "UNSTRUCTURED_GRID"
    reader = vtkUnstructuredGridReader() if grid else vtkPolyDataReader()
    # without this only the first array of each kind would come
    for kind in ("Scalars", "Vectors", "Normals", "Tensors", "ColorScalars", "TCoords", "Fields"):
        getattr(reader, f"ReadAll{kind}On")()
    output = _output(reader, path)
    return (_grid_model if grid else _polydata_model)(path, output, declared)


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


def _xml_output(reader: Any, path: Path, declared: Declared) -> Any:
    def leave_out_texts() -> None:
        """VTK reads beyond its memory where a text has no end, so it is not to read them."""
        reader.UpdateInformation()
        for place, selection in (
            ("point", reader.GetPointDataArraySelection()),
            ("cell", reader.GetCellDataArraySelection()),
        ):
            for name in declared.texts[place]:
                selection.DisableArray(name)

    return _output(reader, path, leave_out_texts)


def _output(reader: Any, path: Path, prepare: Any = None) -> Any:
    """The data set that a VTK reader makes of the file; any complaint of VTK is an error."""
    with _silence() as window:
        reader.SetFileName(os.fsencode(path))
        if prepare:
            prepare()
        reader.Update()
        output = reader.GetOutput()
        complaint = _without_ranges(_text(window.GetOutput()))
    if complaint or reader.GetErrorCode() or output is None:
        raise InputError(f"{path} cannot be read: {_reason(complaint)}", assemble.AGAIN)
    return output


def _without_ranges(complaint: str) -> str:
    """VTK's report without what it says of value ranges, which it writes beside arrays that hold
    infinity and then cannot read; the values themselves are there."""
    lines = complaint.splitlines()
    other = [k for k, line in enumerate(lines) if line.strip() and "_RANGE" not in line]
    told = [lines[k] for k in other if not lines[k].lstrip().startswith(("ERROR:", "vtk"))]
    if any("_RANGE" in line and "InformationKey" in line for line in lines) and not told:
        return ""
    return complaint


def _text(value: Any) -> str:
    """A string of VTK, which is bytes where it is not UTF-8."""
    return value.decode("utf-8", "replace") if isinstance(value, bytes) else str(value or "")


def _reason(complaint: str) -> str:
    """The first sentence of VTK's report, without source lines and addresses."""
    for line in complaint.splitlines():
        text = re.sub(r"^\w+ \(0x[0-9a-f]+\): ", "", line).strip()
        if text and not text.startswith(("ERROR:", "Warning:", "Generic Warning:")):
            return text.rstrip(".!")
    return "VTK gives no reason"


def _numpy(array: Any) -> Array:
    """A VTK array as a numpy view (n,) or (n, k); the view keeps the VTK array alive."""
    if array.IsA("vtkBitArray"):
        bytewise = vtkUnsignedCharArray()
        bytewise.DeepCopy(array)
        array = bytewise
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


def _grid_model(path: Path, grid: Any, declared: Declared) -> Model:
    connectivity, offsets = _cells(grid.GetCells())
    if len(offsets) == 1:
        types: Array = np.zeros(0, np.uint8)
    else:
        try:
            types = _numpy(grid.GetCellTypes())
        except TypeError:  # before VTK 9.6
            types = _numpy(grid.GetCellTypesArray())
    mesh = assemble.checked_mesh(path, _points(grid), connectivity, offsets, types)
    return _model(path, mesh, grid, declared)


# Cells of polygonal data in the order of their cell data: the types of certain sizes, and
# the type of any other size.
_POLYDATA: Sequence[tuple[str, Mapping[int, int], int]] = (
    ("GetVerts", {1: 1}, 2),
    ("GetLines", {2: 3}, 4),
    ("GetPolys", {3: 5, 4: 9}, 7),
    ("GetStrips", {}, 6),
)


def _polydata_model(path: Path, data: Any, declared: Declared) -> Model:
    connectivities, sizes, types = [], [], []
    for method, type_of_size, otherwise in _POLYDATA:
        connectivity, offsets = _cells(getattr(data, method)())
        size = np.diff(offsets)
        kind = np.full(len(size), otherwise, np.uint8)
        for nodes, vtk_type in type_of_size.items():
            kind[size == nodes] = vtk_type
        connectivities.append(connectivity)
        sizes.append(size)
        types.append(kind)
    offsets = np.concatenate([[0], np.cumsum(np.concatenate(sizes))])
    mesh = assemble.checked_mesh(
        path, _points(data), np.concatenate(connectivities), offsets, np.concatenate(types)
    )
    return _model(path, mesh, data, declared)


def _model(path: Path, mesh: Mesh, output: Any, declared: Declared) -> Model:
    notes = list(declared.notes)
    points = _arrays(path, "point", output.GetPointData(), declared, notes)
    cells = _arrays(path, "cell", output.GetCellData(), declared, notes)
    model = assemble.model(path, mesh, points, cells, notes)
    names = _component_names("points", output.GetPointData())
    return replace(model, component_names=names | _component_names("cells", output.GetCellData()))


def _component_names(on: str, data: Any) -> dict[tuple[str, str], tuple[str, ...]]:
    """Names that the file gives to the components of its arrays, where it names all of them."""
    found = {}
    for index in range(data.GetNumberOfArrays()):
        array = data.GetAbstractArray(index)
        if array.HasAComponentName() and array.GetNumberOfComponents() > 1:
            names = [array.GetComponentName(k) for k in range(array.GetNumberOfComponents())]
            if all(names):
                found[on, _text(array.GetName())] = tuple(_text(n) for n in names)
    return found


def _arrays(
    path: Path, place: str, data: Any, declared: Declared, notes: list[str]
) -> list[tuple[str, Array]]:
    """Name and values of each numeric array of a VTK attribute set; notes on the others."""
    notes += [
        f"The {place} array '{name}' holds text and was left out." for name in declared.texts[place]
    ]
    found: list[tuple[str, Array]] = []
    delivered = set()
    for index in range(data.GetNumberOfArrays()):
        array = data.GetAbstractArray(index)
        name = _text(array.GetName())
        delivered.add(name)
        if not name:
            notes.append(f"A {place} array without a name was left out.")
        elif not array.IsA("vtkDataArray"):
            continue
        elif name in ("vtkGhostType", "vtkGhostLevels"):
            if _numpy(array).any():
                raise InputError(
                    f"{path}: the file has ghost {place}s, which the copies would count twice",
                    "Write the sector without ghost cells, as one piece.",
                )
            notes.append(f"The {place} array '{name}' marks nothing and was left out.")
        else:
            found.append((name, _numpy(array)))
    lost = [name for name in declared.names[place] if name not in delivered]
    if lost:
        raise InputError(f"{path}: the {place} array '{lost[0]}' cannot be read", assemble.AGAIN)
    return found
