"""Surfaces and lines: what of a grid is drawn."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from vtkmodules.util.numpy_support import vtk_to_numpy
from vtkmodules.vtkFiltersCore import vtkFeatureEdges, vtkPolyDataNormals
from vtkmodules.vtkFiltersGeometry import vtkDataSetSurfaceFilter
from vtkmodules.vtkFiltersHybrid import vtkPolyDataSilhouette

from expander.placements import Floats
from viewer.scene import MOVED

if TYPE_CHECKING:
    import pyvista

_FOLD = 38.0  # degrees between two faces from which on their edge is one of the body


@dataclass(frozen=True, eq=False)
class Skin:
    """The outside of a grid, undeformed, and its lines, with the arrays of the grid on all.

    Attributes
    ----------
    faces : polygons, and the grid's own lines and vertices.
    edges : where the body ends or folds.
    wires : the lines of beams and bars.
    borders : (n, 2) points of `faces` between which two copies meet.
    cuts : those of them at which one of the two is the modelled sector.
    """

    faces: pyvista.PolyData
    edges: pyvista.PolyData
    wires: pyvista.PolyData
    borders: NDArray[np.int64]
    cuts: NDArray[np.int64]


def skin_of(grid: pyvista.UnstructuredGrid) -> Skin:
    """The outside of a grid; faces of quadratic cells are split at their mid-side nodes."""
    import pyvista

    surface = vtkDataSetSurfaceFilter()
    surface.SetInputData(grid)
    surface.SetNonlinearSubdivisionLevel(1)
    surface.Update()
    faces = pyvista.wrap(surface.GetOutput())
    feature = vtkFeatureEdges()
    feature.SetInputData(faces)
    feature.SetFeatureAngle(_FOLD)
    feature.BoundaryEdgesOn()
    feature.FeatureEdgesOn()
    feature.NonManifoldEdgesOn()
    feature.ManifoldEdgesOff()
    feature.ColoringOff()
    feature.Update()
    return Skin(faces, pyvista.wrap(feature.GetOutput()), _wires(faces), *_borders(faces))


def _wires(faces: pyvista.PolyData) -> pyvista.PolyData:
    import pyvista

    wires = pyvista.PolyData()
    if faces.GetLines().GetNumberOfCells():
        wires.SetPoints(faces.GetPoints())
        wires.SetLines(faces.GetLines())
        wires.GetPointData().ShallowCopy(faces.GetPointData())
    return wires


def _borders(faces: pyvista.PolyData) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Edges between two faces of different copies, and those between copy 0 and another."""
    polygons = faces.GetPolys()
    none = np.empty((0, 2), dtype=np.int64)
    if polygons.GetNumberOfCells() == 0:
        return none, none
    nodes = vtk_to_numpy(polygons.GetConnectivityArray()).astype(np.int64)
    offsets = vtk_to_numpy(polygons.GetOffsetsArray()).astype(np.int64)
    # Cells of polygonal data count vertices, then lines, then polygons
    before = faces.GetNumberOfCells() - polygons.GetNumberOfCells()
    copy = np.asarray(faces.cell_data["copy"])[before:]
    if len(copy) == 0 or (copy == copy[0]).all():
        return none, none
    following = np.arange(1, len(nodes) + 1)
    following[offsets[1:] - 1] = offsets[:-1]
    ends = np.sort(np.stack([nodes, nodes[following]], axis=1), axis=1)
    owner = np.repeat(copy, np.diff(offsets))
    key = ends[:, 0] * faces.n_points + ends[:, 1]
    order = np.argsort(key, kind="stable")
    key, ends, owner = key[order], ends[order], owner[order]
    meet = (key[1:] == key[:-1]) & (owner[1:] != owner[:-1])
    first = meet & ((owner[1:] == 0) | (owner[:-1] == 0))
    return ends[1:][meet], ends[1:][first]


def silhouette(faces: pyvista.PolyData, towards: Floats) -> pyvista.PolyData:
    """Lines at which smooth faces, undeformed, turn away from the eye."""
    import pyvista

    outline = vtkPolyDataSilhouette()
    outline.SetInputData(faces)
    outline.SetDirectionToSpecifiedVector()
    outline.SetVector(*towards)
    outline.SetEnableFeatureAngle(0)
    outline.BorderEdgesOff()
    outline.Update()
    return pyvista.wrap(outline.GetOutput())


def at(data: pyvista.PolyData, points: Floats) -> pyvista.PolyData:
    """The same cells and arrays with their points elsewhere; `data` stays as it is."""
    import pyvista

    moved = data.copy(deep=False)
    moved.SetPoints(pyvista.vtk_points(points))  # assigning `points` would move those of `data` too
    return moved


def places(data: pyvista.PolyData, factor: float) -> Floats:
    """Deformed positions, (n, 3)."""
    points = np.asarray(data.points, dtype=float)
    if factor == 0.0 or MOVED not in data.point_data:
        return points
    return np.asarray(points + factor * np.asarray(data.point_data[MOVED]))


def smooth(faces: pyvista.PolyData) -> pyvista.PolyData:
    """With normals for an even light, points doubled along the folds."""
    import pyvista

    normals = vtkPolyDataNormals()
    normals.SetInputData(faces)
    normals.SetFeatureAngle(_FOLD)
    normals.SplittingOn()
    normals.ConsistencyOff()
    normals.NonManifoldTraversalOff()
    normals.Update()
    return pyvista.wrap(normals.GetOutput())


def lines(points: Floats, pairs: NDArray[np.int64]) -> pyvista.PolyData:
    """Straight lines between pairs of points."""
    import pyvista

    cells = np.column_stack([np.full(len(pairs), 2), pairs]).ravel()
    return pyvista.PolyData(points, lines=cells)
