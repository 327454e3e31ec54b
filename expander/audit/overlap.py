"""Overlap: copies of the sector that reach into the sector.

Nodes of the sector's surface, and centres of its cells, are carried to each copy that can touch
the sector; one that lies in a cell of the sector, and deeper under its surface than facets of a
curved seam explain, is in a place that is filled twice. Where mirror planes make the group there
is nothing to look for: a model on one side of each of them tiles space exactly.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from expander.cells import dimensions
from expander.groups import Group
from expander.model import Mesh
from expander.placements import Floats
from expander.seams import _touching
from expander.topology import (
    Faces,
    Ints,
    boundary_faces,
    cell_centres,
    cell_sizes,
    local_edges,
)

MOST_TESTED = 20_000  # points of one image
_MOST_AT_ONCE = 20_000_000  # points of all images that are looked at
_MOST_CENTRES = 4_000
_MOST_FOUND = 32  # copies that are listed: with more, the case is wrong altogether


@dataclass(frozen=True, eq=False)
class Overlap:
    """A copy that reaches into the modelled part.

    Attributes
    ----------
    copy : its number; of a copy and its inverse, which overlap alike, the lower one.
    nodes : number of surface nodes found inside; of those tested, if sampled.
    node : the sector's node whose image lies deepest; -1 if only centres of cells do.
    at : (3,) where that image, or that of the centre, lies.
    depth : how deep under the surface, in the length unit.
    words : one sentence.
    """

    copy: int
    nodes: int
    node: int
    at: Floats
    depth: float
    words: str


@dataclass(frozen=True, eq=False)
class Overlaps:
    """All copies that reach into the modelled part.

    Attributes
    ----------
    found : by copy, at most 32. images : how many images can touch the sector. sampled : "" or a
        sentence that says what part of the surface nodes was tested.
    """

    found: tuple[Overlap, ...]
    images: int
    sampled: str


def overlaps(mesh: Mesh, group: Group, tolerance_of_edge: float = 0.1) -> Overlaps:
    """Copies some of whose material lies inside the sector; for solids only.

    Each pair of copies is like the sector and one copy, so one of ``g`` and ``g^-1`` is reported,
    and both are looked at: a spike has nodes inside its neighbour, which has none inside the spike.

    Parameters
    ----------
    tolerance_of_edge : a point counts as inside if it is deeper than this part of its own shortest
        edge, and of that of the cell it lies in.

    Examples
    --------
    A cube about the axis itself, taken for one of two sectors:

    >>> from expander.groups import CyclicAxis, make_group
    >>> points = np.array([[x, y, z] for z in (0, 1) for x, y in
    ...                    ((-1, -1), (1, -1), (1, 1), (-1, 1))], dtype=float)
    >>> cube = Mesh(points, np.arange(8), np.array([0, 8]), np.array([12], dtype=np.uint8))
    >>> group = make_group([], CyclicAxis(2, np.array([0.0, 0.0, 1.0]), np.zeros(3)))
    >>> [(o.copy, o.nodes, round(o.depth, 6)) for o in overlaps(cube, group).found]
    [(1, 0, 0.5)]
    """
    solid = np.flatnonzero(dimensions(mesh.types) == 3)
    if group.is_reflection_group or not len(solid):
        return Overlaps((), 0, "")
    faces = boundary_faces(mesh)
    surface = np.unique(np.concatenate([f.corners.ravel() for f in faces]))
    mirrors = {g for g, _, _ in group.mirrors}
    pairs = _touching(mesh.points[surface].astype(float), group, 0.0, mirrors)
    images = [(g, k) for g in pairs for k in sorted({g, int(group.inverse[g])})]
    if not images:
        return Overlaps((), 0, "")
    nodes = _evenly(surface, max(MOST_TESTED, _MOST_AT_ONCE // len(images)))
    middles = _evenly(solid, _MOST_CENTRES)
    places = np.concatenate([mesh.points[nodes].astype(float), cell_centres(mesh)[middles]])
    source = np.concatenate([nodes, -1 - middles])  # a cell's centre has the number -1 - cell
    low, high = mesh.points[surface].min(axis=0), mesh.points[surface].max(axis=0)
    inside = _Inside(mesh, solid, faces)
    thinned = len(nodes) < len(surface)
    found: dict[int, list[tuple[Ints, Floats, Floats]]] = {}
    for g, k in images:
        if len(found) == _MOST_FOUND and g not in found:
            break
        moved = group.placements[k].apply(places)
        near = np.flatnonzero(((moved > low) & (moved < high)).all(axis=1))
        if len(near) > MOST_TESTED:
            near, thinned = _evenly(near, MOST_TESTED), True
        if not len(near):
            continue
        here, host = inside.hosts(moved[near])
        near = near[here]
        depth = inside.depths(moved[near])
        deep = depth > tolerance_of_edge * _edges(mesh, source[near], host)
        if deep.any():
            hit = near[deep]
            found.setdefault(g, []).append((source[hit], moved[hit], depth[deep]))
    sampled = (
        f"at most {MOST_TESTED} points of each image were tested, evenly taken from "
        f"{len(surface)} surface nodes and the cells"
        if thinned
        else ""
    )
    return Overlaps(tuple(_overlap(group, g, found[g]) for g in found), len(images), sampled)


def _evenly(items: Ints, most: int) -> Ints:
    if len(items) <= most:
        return items
    return items[np.linspace(0, len(items) - 1, most).astype(np.int64)]


def _edges(mesh: Mesh, source: Ints, host: Ints) -> Floats:
    """The larger of the shortest edges at each point and of the cell of the sector it lies in."""
    corners = mesh.connectivity[mesh.offsets[:-1]]
    own = np.where(source >= 0, source, corners[np.maximum(0, -1 - source)])
    shortest = local_edges(mesh, np.concatenate([own, corners[host]]))
    return np.maximum(shortest[: len(own)], shortest[len(own) :])


def _overlap(group: Group, copy: int, parts: list[tuple[Ints, Floats, Floats]]) -> Overlap:
    source, at, depth = (np.concatenate([p[k] for p in parts]) for k in range(3))
    nodes = np.flatnonzero(source >= 0)
    among = nodes if len(nodes) else np.arange(len(source))
    worst = int(among[np.argmax(depth[among])])
    place = ", ".join(f"{c:.6g}" for c in at[worst] + 0.0)
    what = f"{len(nodes)} of its surface nodes lie" if len(nodes) else "centres of its cells lie"
    words = (
        f"the model, {group.words(copy)}, overlaps the model: {what} inside, up to "
        f"{depth[worst]:.4g} deep, at ({place})"
    )
    node = int(source[worst]) if len(nodes) else -1
    return Overlap(copy, len(nodes), node, at[worst], float(depth[worst]), words)


class _Inside:
    """Which cell of the sector a point lies in, and how deep under the sector's surface.

    Cells tell inside from outside also at sharp edges and where surfaces of tied pieces coincide,
    where the sign of a distance to the surface is not sure.
    """

    def __init__(self, mesh: Mesh, solid: Ints, faces: list[Faces]) -> None:
        self._mesh, self._solid, self._faces = mesh, solid, faces

    @cached_property
    def _points(self) -> Any:
        from vtkmodules.util.numpy_support import numpy_to_vtk
        from vtkmodules.vtkCommonCore import vtkPoints

        points = vtkPoints()
        points.SetData(numpy_to_vtk(self._mesh.points.astype(float)))
        return points

    @cached_property
    def _probe(self) -> Any:
        from vtkmodules.util.numpy_support import numpy_to_vtk
        from vtkmodules.vtkCommonDataModel import vtkStaticCellLocator, vtkUnstructuredGrid
        from vtkmodules.vtkFiltersCore import vtkProbeFilter

        mesh, solid = self._mesh, self._solid
        sizes = cell_sizes(mesh)[solid]
        ends = np.cumsum(sizes)
        entries = np.repeat(mesh.offsets[:-1][solid] - ends + sizes, sizes) + np.arange(ends[-1])
        grid = vtkUnstructuredGrid()
        grid.SetPoints(self._points)
        grid.SetCells(
            numpy_to_vtk(mesh.types[solid], deep=True),
            _cell_array(np.concatenate([[0], ends]), mesh.connectivity[entries]),
        )
        number = numpy_to_vtk(solid, deep=True)
        number.SetName("cell")
        grid.GetCellData().AddArray(number)
        probe = vtkProbeFilter()
        set_locator = getattr(probe, "SetCellLocator", None) or probe.SetCellLocatorPrototype
        set_locator(vtkStaticCellLocator())
        probe.SetSourceData(grid)
        probe.ComputeToleranceOff()
        probe.SetTolerance(0.0)
        return probe

    @cached_property
    def _distance(self) -> Any:
        from vtkmodules.vtkCommonDataModel import vtkPolyData
        from vtkmodules.vtkFiltersCore import vtkImplicitPolyDataDistance

        corners = np.concatenate([f.corners.ravel() for f in self._faces])
        sizes = np.concatenate([np.full(len(f.corners), f.corners.shape[1]) for f in self._faces])
        surface = vtkPolyData()
        surface.SetPoints(self._points)
        surface.SetPolys(_cell_array(np.concatenate([[0], np.cumsum(sizes)]), corners))
        distance = vtkImplicitPolyDataDistance()
        distance.SetInput(surface)
        return distance

    def hosts(self, points: Floats) -> tuple[Ints, Ints]:
        """Which of `points` (k, 3) lie in a cell, and in which cell, each (found,)."""
        from vtkmodules.util.numpy_support import numpy_to_vtk, vtk_to_numpy
        from vtkmodules.vtkCommonCore import vtkPoints
        from vtkmodules.vtkCommonDataModel import vtkPolyData

        asked, places = vtkPolyData(), vtkPoints()
        places.SetData(numpy_to_vtk(points, deep=True))
        asked.SetPoints(places)
        self._probe.SetInputData(asked)
        self._probe.Update()
        answer = self._probe.GetOutput().GetPointData()
        here = np.flatnonzero(vtk_to_numpy(answer.GetArray("vtkValidPointMask")))
        return here, vtk_to_numpy(answer.GetArray("cell"))[here].astype(np.int64)

    def depths(self, points: Floats) -> Floats:
        """Distance to the faces of the surface, (k,)."""
        from vtkmodules.util.numpy_support import numpy_to_vtk, vtk_to_numpy
        from vtkmodules.vtkCommonCore import vtkDoubleArray

        found = vtkDoubleArray()
        if not len(points):
            return np.empty(0)
        self._distance.FunctionValue(numpy_to_vtk(points, deep=True), found)
        return np.asarray(np.abs(vtk_to_numpy(found)))


def _cell_array(offsets: Ints, connectivity: Ints) -> Any:
    from vtkmodules.util.numpy_support import numpy_to_vtkIdTypeArray
    from vtkmodules.vtkCommonDataModel import vtkCellArray

    cells = vtkCellArray()
    cells.SetData(
        numpy_to_vtkIdTypeArray(offsets.astype(np.int64), deep=True),
        numpy_to_vtkIdTypeArray(connectivity.astype(np.int64), deep=True),
    )
    return cells
