"""The whole body in memory, as a pyvista grid for scripts."""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING, Any

import numpy as np

from expander.bodyarrays import BodyArray
from expander.writers.vtu import FieldData

if TYPE_CHECKING:
    import pyvista


def build_grid(arrays: Iterable[BodyArray], field_data: FieldData) -> pyvista.UnstructuredGrid:
    """All arrays of one result, block after block, into one `pyvista.UnstructuredGrid`."""
    import pyvista
    from vtkmodules.util.numpy_support import numpy_to_vtk, numpy_to_vtkIdTypeArray
    from vtkmodules.vtkCommonCore import vtkStringArray
    from vtkmodules.vtkCommonDataModel import vtkCellArray

    whole: dict[tuple[str, str], Any] = {}
    listed = list(arrays)
    for array in listed:
        values = np.empty((array.rows, array.width), dtype=array.dtype)
        for copy, row, rows in array.pieces(array.nbytes + 1):
            block = np.asarray(array.block(copy, rows)).reshape(-1, array.width)
            values[row : row + len(block)] = block
        array.release()
        whole[array.section, array.name] = values if array.components else values[:, 0]
    offsets = np.concatenate([[0], whole["offsets", "offsets"]]).astype(np.int64)
    connectivity = whole["connectivity", "connectivity"].astype(np.int64)
    cells = vtkCellArray()
    cells.SetData(
        numpy_to_vtkIdTypeArray(offsets, deep=True),
        numpy_to_vtkIdTypeArray(connectivity, deep=True),
    )
    grid = pyvista.UnstructuredGrid()
    grid.points = whole["coordinates", "Points"]
    grid.SetCells(numpy_to_vtk(whole["types", "types"], deep=True), cells)
    for array in listed:
        if array.section in ("points", "cells"):
            data = grid.point_data if array.section == "points" else grid.cell_data
            data[array.name] = whole[array.section, array.name]
            vtk_array = (
                grid.GetPointData() if array.section == "points" else grid.GetCellData()
            ).GetAbstractArray(array.name)
            for k, component in enumerate(array.components):
                vtk_array.SetComponentName(k, component)
    for name, value in field_data.items():
        if isinstance(value, np.ndarray):
            grid.field_data[name] = value
            continue
        words = vtkStringArray()  # pyvista's own strings hold ASCII only
        words.SetName(name)
        for text in value:
            words.InsertNextValue(text.encode("utf-8", "replace").decode())
        grid.GetFieldData().AddArray(words)
    return grid
