"""What both baselines share: reading, merging and writing with VTK, as fast as it goes.

Two ways to merge are offered, because which one is faster depends on the model:

``append``
    ``vtkAppendFilter`` merges while it appends.
``clean``
    ``vtkAppendFilter`` only appends, ``vtkStaticCleanUnstructuredGrid`` merges afterwards.
"""

from __future__ import annotations

import argparse
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from vtkmodules.util.numpy_support import numpy_to_vtk, vtk_to_numpy
from vtkmodules.vtkCommonCore import vtkDoubleArray, vtkPoints, vtkSMPTools
from vtkmodules.vtkCommonDataModel import vtkUnstructuredGrid
from vtkmodules.vtkFiltersCore import vtkAppendFilter, vtkStaticCleanUnstructuredGrid
from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridReader, vtkXMLUnstructuredGridWriter

Floats = NDArray[np.float64]

MERGES = ("append", "clean")
WRITE_BLOCK_BYTES = 2**20  # twice as fast as VTK's default of 32 KB; larger is slower again
STRESS_ORDER = ((0, 0), (1, 1), (2, 2), (0, 1), (1, 2), (2, 0))  # xx yy zz xy yz zx


def common_arguments(description: str) -> argparse.ArgumentParser:
    """Parser with the arguments that both baselines take."""
    parser = argparse.ArgumentParser(description=description)
    parser.add_argument("model", type=Path, help="the modelled part, a .vtu file")
    parser.add_argument("output", type=Path, help="the whole body, a .vtu file")
    parser.add_argument(
        "--tolerance", type=float, default=1e-6, help="distance within which points merge"
    )
    parser.add_argument(
        "--threads",
        choices=("Sequential", "STDThread"),
        default="STDThread",
        help="VTK's back end for threaded filters (packaged VTK takes Sequential by itself)",
    )
    return parser


def use_threads(backend: str) -> None:
    """Let VTK's threaded filters run with this back end."""
    vtkSMPTools.SetBackend(backend)


def read_grid(path: Path) -> vtkUnstructuredGrid:
    """Read a .vtu file."""
    reader = vtkXMLUnstructuredGridReader()
    reader.SetFileName(str(path))
    reader.Update()
    return reader.GetOutput()


def point_values(grid: vtkUnstructuredGrid, name: str) -> Floats:
    """The named point array, not copied."""
    return vtk_to_numpy(grid.GetPointData().GetArray(name))


def set_point_values(grid: vtkUnstructuredGrid, name: str, values: Floats) -> None:
    """Replace the named point array, without a copy of the numbers."""
    array = numpy_to_vtk(values)
    array.SetName(name)
    grid.GetPointData().AddArray(array)


def coordinates(grid: vtkUnstructuredGrid) -> Floats:
    """The grid's points, not copied."""
    return vtk_to_numpy(grid.GetPoints().GetData())


def set_coordinates(grid: vtkUnstructuredGrid, values: Floats) -> None:
    """Replace the grid's points, without a copy of the numbers."""
    array: vtkDoubleArray = numpy_to_vtk(values)
    points = vtkPoints()
    points.SetData(array)
    grid.SetPoints(points)


def stress_matrix(Q: Floats) -> Floats:
    """The 6x6 matrix that turns stored stress components: ``T -> Q T Q^T``."""
    A = np.zeros((6, 6))
    for column, (k, m) in enumerate(STRESS_ORDER):
        unit = np.zeros((3, 3))
        unit[k, m] = unit[m, k] = 1.0
        turned = Q @ unit @ Q.T
        A[:, column] = [turned[place] for place in STRESS_ORDER]
    return A


def merged(parts: list[vtkUnstructuredGrid], how: str, tolerance: float) -> vtkUnstructuredGrid:
    """One grid of all parts, coincident points merged; empties the list to free memory early."""
    append = vtkAppendFilter()
    for part in parts:
        append.AddInputData(part)
    if how == "append":
        append.MergePointsOn()
        append.ToleranceIsAbsoluteOn()
        append.SetTolerance(tolerance)
    append.Update()
    whole = append.GetOutput()
    parts.clear()
    append.RemoveAllInputConnections(0)
    if how == "append":
        return whole

    clean = vtkStaticCleanUnstructuredGrid()
    clean.SetInputData(whole)
    clean.ToleranceIsAbsoluteOn()
    clean.SetAbsoluteTolerance(tolerance)
    clean.Update()
    return clean.GetOutput()


def write_grid(grid: vtkUnstructuredGrid, path: Path) -> None:
    """Write a raw appended .vtu file without compression, the fastest that VTK's writer does."""
    writer = vtkXMLUnstructuredGridWriter()
    writer.SetInputData(grid)
    writer.SetFileName(str(path))
    writer.SetDataModeToAppended()
    writer.EncodeAppendedDataOff()
    writer.SetCompressorTypeToNone()
    writer.SetHeaderTypeToUInt64()
    writer.SetBlockSize(WRITE_BLOCK_BYTES)
    if writer.Write() != 1:
        raise OSError(f"could not write {path}")
