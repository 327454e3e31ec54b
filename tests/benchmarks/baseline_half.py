"""Baseline: a whole body from a half model with a cut plane x = 0, with VTK alone.

Reads the half, reflects it, appends both with coincident points merged, and writes a raw VTU
file.  It is what an able user would write by hand, and it is measured as a whole process::

    python baseline_half.py HALF.vtu WHOLE.vtu

``--reflect filter`` lets ``vtkReflectionFilter`` reflect cells and arrays; it turns vectors and
6-component symmetric tensors rightly but returns single-precision points, which are replaced by
points in double precision.  ``--reflect numpy`` flips signs and node orders by numpy.
"""

from __future__ import annotations

import numpy as np
from vtk_ways import (
    MERGES,
    common_arguments,
    coordinates,
    merged,
    point_values,
    read_grid,
    set_coordinates,
    set_point_values,
    use_threads,
    write_grid,
)
from vtkmodules.util.numpy_support import numpy_to_vtk, vtk_to_numpy
from vtkmodules.vtkCommonDataModel import VTK_HEXAHEDRON, vtkCellArray, vtkUnstructuredGrid
from vtkmodules.vtkFiltersGeneral import vtkReflectionFilter

VECTOR_SIGNS = np.array([-1.0, 1.0, 1.0])
STRESS_SIGNS = np.array([1.0, 1.0, 1.0, -1.0, 1.0, -1.0])  # xx yy zz xy yz zx
MIRRORED_HEXAHEDRON = [1, 0, 3, 2, 5, 4, 7, 6]


def reflected_by_filter(half: vtkUnstructuredGrid) -> vtkUnstructuredGrid:
    """The image by VTK's reflection filter, its points in double precision."""
    reflection = vtkReflectionFilter()
    reflection.SetInputData(half)
    reflection.SetPlaneToX()
    reflection.SetCenter(0.0)
    reflection.FlipAllInputArraysOn()
    reflection.CopyInputOff()
    reflection.Update()
    image = reflection.GetOutput()
    set_coordinates(image, coordinates(half) * VECTOR_SIGNS)
    return image


def reflected_by_numpy(half: vtkUnstructuredGrid) -> vtkUnstructuredGrid:
    """The image by numpy; offsets and temperature are shared with the half."""
    image = vtkUnstructuredGrid()
    image.ShallowCopy(half)
    set_coordinates(image, coordinates(half) * VECTOR_SIGNS)
    set_point_values(image, "displacement", point_values(half, "displacement") * VECTOR_SIGNS)
    set_point_values(image, "stress", point_values(half, "stress") * STRESS_SIGNS)
    nodes = vtk_to_numpy(half.GetCells().GetConnectivityArray()).reshape(-1, 8)
    cells = vtkCellArray()
    mirrored = np.ascontiguousarray(nodes[:, MIRRORED_HEXAHEDRON]).ravel()
    cells.SetData(half.GetCells().GetOffsetsArray(), numpy_to_vtk(mirrored))
    image.SetCells(VTK_HEXAHEDRON, cells)
    return image


REFLECTIONS = {"filter": reflected_by_filter, "numpy": reflected_by_numpy}


def main() -> None:
    """Read, reflect, merge, write."""
    parser = common_arguments("Whole body from a half model with VTK.")
    parser.add_argument("--reflect", choices=tuple(REFLECTIONS), default="filter")
    parser.add_argument("--merge", choices=MERGES, default="append")
    options = parser.parse_args()
    use_threads(options.threads)
    half = read_grid(options.model)
    parts = [half, REFLECTIONS[options.reflect](half)]
    write_grid(merged(parts, options.merge, options.tolerance), options.output)


if __name__ == "__main__":
    main()
