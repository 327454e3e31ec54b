"""Force and moment carried across a plane through the whole body, found on the sector.

The copy made by ``g`` is cut by the plane where the sector is cut by the plane brought back by
``g^-1``. There the traction ``sigma n`` is integrated, and the resultant carried to the copy: the
force as a polar vector, the moment about a carried point as an axial vector, both times ``chi``::

    F(copy) = chi(g) Q F        M(copy, about g p) = chi(g) det(Q) Q M(sector, about p)

A plane may pass through nodes and faces, such as those in a cut plane: before it is brought back
it is moved against its normal by a small fraction of the body's size (1e-10, or some spacings of
the coordinates), so faces in it belong to the cells on the side that the normal points away from,
once each, whichever copies they are on.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from expander.audit.mass import area_vectors, per_cell
from expander.cells import dimensions
from expander.errors import InputError
from expander.groups import Group
from expander.model import Mesh
from expander.placements import Floats, unit
from expander.quantities import quantity
from expander.topology import Ints

_SHIFT = 1e-10  # of the body's size
_SHIFT_SPACINGS = 32.0

Numbers = NDArray[Any]  # float64 or complex128


@dataclass(frozen=True, eq=False)
class Section:
    """What a plane through the whole body carries.

    Attributes
    ----------
    force : (3,) exerted by the side towards the normal on the other side; complex if chi or the
        stress is.
    moment : (3,) of these tractions about `about`, or about the centroid.
    centroid : (3,) of the cut area. area : of the cut.
    copies : numbers of the copies that the plane cuts.
    """

    force: Numbers
    moment: Numbers
    centroid: Floats
    area: float
    copies: tuple[int, ...]


@dataclass(frozen=True, eq=False)
class _Cut:
    """Integrals over the plane's cut through the sector; moments are about the plane's point."""

    area: float
    first: Floats
    force: Numbers
    moment: Numbers


def across(
    mesh: Mesh,
    group: Group,
    chi: ArrayLike,
    stress: ArrayLike,
    on: str,
    normal: ArrayLike,
    point: ArrayLike,
    about: ArrayLike | None = None,
    thickness: ArrayLike = 1.0,
    shift: float | None = None,
) -> Section:
    """Force and moment across a plane through the whole body.

    Solid cells are cut into triangles, over which the traction is integrated exactly, linear
    between nodes (cells with mid-side nodes in parts between their nodes) or constant in each
    cell. 2D cells of plane models and shells are cut into lines and carry their membrane stress
    times the thickness; the bending moments of shells themselves, and beams, are not included.

    Parameters
    ----------
    mesh : the sector.
    chi : (copies,) factors of the load case, see `behaviours.factors`; complex ones as well.
    stress : (n, 6) or (m, 6) of the sector, xx yy zz xy yz zx in global directions.
    on : "points" or "cells", where `stress` is.
    normal, point : (3,) each, of the plane.
    about : (3,) point for the moment; the centroid of the cut if None.
    thickness : of 2D cells, a number or one per cell, (m,).
    shift : how far the plane is moved against its normal, see the module. For a plane in a cut
        plane off which nodes lie by more than the default, give more than they do.

    Raises
    ------
    InputError
        If the plane does not meet the body, or an array does not fit.

    Examples
    --------
    Half of a unit cube, pulled along x; its image is mirrored at x = 0.

    >>> from expander.groups import CutPlane, make_group
    >>> corners = [[x, y, z] for z in (0, 1) for x, y in ((0, 0), (1, 0), (1, 1), (0, 1))]
    >>> cells = np.arange(8), np.array([0, 8]), np.array([12], dtype=np.uint8)
    >>> half = Mesh(np.array(corners, dtype=float), *cells)
    >>> group = make_group([CutPlane("mid", unit([1, 0, 0]), np.zeros(3))], None)
    >>> pulled = [[5, 0, 0, 0, 0, 0]]
    >>> s = across(half, group, [1, 1], pulled, "cells", [1, 0, 0], [0, 0, 0])
    >>> s.force.round(9).tolist(), round(s.area, 9), s.copies
    ([5.0, 0.0, 0.0], 1.0, (1,))
    """
    t = per_cell(mesh, thickness, "thickness")
    factors, sigma = _checked(mesh, group, chi, stress, on)
    n = unit(normal)
    p = np.asarray(point, dtype=float) - (_shift(mesh, group) if shift is None else shift) * n
    cell_sides = _Sides(mesh)
    area, first = 0.0, np.zeros(3)
    kind = np.result_type(sigma, factors)
    force, moment = np.zeros(3, dtype=kind), np.zeros(3, dtype=kind)
    copies: list[int] = []
    for copy, g in enumerate(group.placements):
        back = g.inverse()
        own_normal, own_point = back.Q @ n, back.apply(p)
        crossed = cell_sides.crossed(own_normal, own_point)
        if not len(crossed):
            continue
        cut = _integrated(mesh, crossed, sigma, on, t, own_normal, own_point)
        if cut.area == 0.0:
            continue
        copies.append(copy)
        area += cut.area
        first += g.Q @ cut.first
        force += factors[copy] * (g.Q @ cut.force)
        moment += factors[copy] * g.det * (g.Q @ cut.moment)
    if not copies:
        raise _missed(mesh, group, n, np.asarray(point, dtype=float))
    centroid = p + first / area
    where = centroid if about is None else np.asarray(about, dtype=float)
    return Section(force, moment + np.cross(p - where, force), centroid, area, tuple(copies))


def _shift(mesh: Mesh, group: Group) -> float:
    reach = np.abs(mesh.bounds).max() + max(float(np.abs(g.t).max()) for g in group.placements)
    spacing = max(mesh.spacing, float(np.spacing(reach)))
    return max(_SHIFT * mesh.size, _SHIFT_SPACINGS * spacing)


def _checked(
    mesh: Mesh, group: Group, chi: ArrayLike, stress: ArrayLike, on: str
) -> tuple[Numbers, Numbers]:
    factors, sigma = np.asarray(chi), np.asarray(stress)
    if on not in ("points", "cells"):
        raise InputError(f"on = {on!r} is unknown.", 'Expected "points" or "cells".')
    count = mesh.point_count if on == "points" else mesh.cell_count
    if sigma.shape != (count, 6):
        raise InputError(
            f"stress has shape {sigma.shape}, but the sector has {count} {on}.",
            f"Expected ({count}, 6): xx yy zz xy yz zx in global directions.",
        )
    if factors.shape != (len(group),):
        raise InputError(
            f"chi has shape {factors.shape}, but there are {len(group)} copies.",
            f"Expected ({len(group)},), a factor for each copy.",
        )
    return (a.astype(np.result_type(a, float), copy=False) for a in (factors, sigma))  # type: ignore[return-value]


class _Sides:
    """Which cells a plane cuts."""

    def __init__(self, mesh: Mesh) -> None:
        self.mesh = mesh
        self.points = mesh.points.astype(float, copy=False)
        self.corners = np.stack(np.meshgrid(*mesh.bounds.T, indexing="ij"), axis=-1).reshape(-1, 3)
        self.wanted = dimensions(mesh.types) >= 2

    def crossed(self, normal: Floats, point: Floats) -> Ints:
        """Solid and 2D cells with nodes on both sides."""
        box = (self.corners - point) @ normal
        if box.min() >= 0.0 or box.max() < 0.0:
            return np.empty(0, dtype=np.int64)
        ahead = (self.points @ normal >= point @ normal)[self.mesh.connectivity]
        starts = self.mesh.offsets[:-1]
        both = np.logical_or.reduceat(ahead, starts) & ~np.logical_and.reduceat(ahead, starts)
        return np.flatnonzero(both & self.wanted)


def _integrated(
    mesh: Mesh,
    cells: Ints,
    sigma: Numbers,
    on: str,
    thickness: Floats,
    normal: Floats,
    point: Floats,
) -> _Cut:
    """Integrate the tractions ``sigma n`` over the cut of the plane with these cells."""
    area, first = 0.0, np.zeros(3)
    force, moment = np.zeros(3, dtype=sigma.dtype), np.zeros(3, dtype=sigma.dtype)
    for dimension in (3, 2):
        some = cells[dimensions(mesh.types[cells]) == dimension]
        if dimension == 2 and len(thickness) > 1:
            some = some[thickness[some] != 0.0]
        if not len(some):
            continue
        x, own, values = _sliced(mesh, some, sigma, on, normal, point)
        measure = _measure(x)
        if dimension == 2:
            t = thickness if len(thickness) == 1 else thickness[some]
            measure = measure * (t * _slant(mesh, some, normal))[own]
        corners = x.shape[1]
        arm = x - point
        traction = _tensors(values) @ normal
        area += float(measure.sum())
        first += measure @ arm.mean(axis=1)
        force += measure @ traction.mean(axis=1)
        # exact for linear factors: the mean of a product over a segment or a triangle
        ends = np.cross(arm, traction).sum(axis=1)
        total = np.cross(arm.sum(axis=1), traction.sum(axis=1))
        moment += measure @ (ends + total) / (corners * (corners + 1))
    return _Cut(area, first, force, moment)


def _measure(x: Floats) -> Floats:
    """Length of segments or area of triangles, from their ends (k, 2 or 3, 3)."""
    sides = x[:, 1:] - x[:, :1]
    if sides.shape[1] == 1:
        return np.asarray(np.linalg.norm(sides[:, 0], axis=1))
    return np.asarray(np.linalg.norm(np.cross(sides[:, 0], sides[:, 1]), axis=1) / 2.0)


def _slant(mesh: Mesh, cells: Ints, normal: Floats) -> Floats:
    """How much longer a slanting cut through the thickness of each 2D cell is, (k,)."""
    vectors = area_vectors(_apart(mesh, cells)[0])
    along = vectors @ normal / np.linalg.norm(vectors, axis=1)
    return np.asarray(1.0 / np.sqrt(np.maximum(1.0 - along**2, 1e-12)))


def _tensors(values: Numbers) -> Numbers:
    """Stored components (..., 6) as (..., 3, 3)."""
    spread = quantity("symmetric tensor", 6).spread
    return (values @ spread.T).reshape(*values.shape[:-1], 3, 3)


def _apart(mesh: Mesh, cells: Ints) -> tuple[Mesh, Ints]:
    """Some cells as a mesh in which no two share a point, and the mesh's number of each point."""
    sizes = np.diff(mesh.offsets)[cells]
    ends = np.cumsum(sizes)
    places = np.repeat(mesh.offsets[cells] - (ends - sizes), sizes) + np.arange(ends[-1])
    nodes = mesh.connectivity[places]
    offsets = np.concatenate([[0], ends])
    return Mesh(mesh.points[nodes], np.arange(ends[-1]), offsets, mesh.types[cells]), nodes


def _sliced(
    mesh: Mesh, cells: Ints, sigma: Numbers, on: str, normal: Floats, point: Floats
) -> tuple[Floats, Ints, Numbers]:
    """Simplices of the cut: ends (k, 2 or 3, 3), positions of their cells in `cells` (k,), and
    stress at their ends (k, 2 or 3, 6)."""
    from vtkmodules.util.numpy_support import numpy_to_vtk, vtk_to_numpy
    from vtkmodules.vtkCommonDataModel import vtkNonMergingPointLocator, vtkPlane
    from vtkmodules.vtkFiltersCore import vtkCutter

    # Cells with points of their own: then values that jump between cells are values at points,
    # the number of the cell among them, which not all cell types of VTK hand on.
    part, nodes = _apart(mesh, cells)
    owner = np.repeat(np.arange(len(cells)), np.diff(part.offsets))
    values = sigma[nodes] if on == "points" else sigma[cells[owner]]
    columns = np.column_stack([owner, values.real, values.imag])
    array = numpy_to_vtk(np.ascontiguousarray(columns), deep=True)
    array.SetName("values")
    # about the plane's point, so that nothing is lost far from the origin
    grid = _grid(replace(part, points=part.points.astype(float) - point))
    grid.GetPointData().AddArray(array)
    plane = vtkPlane()
    plane.SetOrigin(0.0, 0.0, 0.0)
    plane.SetNormal(*normal.tolist())
    cutter = vtkCutter()
    cutter.SetInputData(grid)
    cutter.SetCutFunction(plane)
    cutter.SetLocator(vtkNonMergingPointLocator())
    cutter.Update()
    found = cutter.GetOutput()
    corners = 3 if dimensions(part.types[:1])[0] == 3 else 2
    simplices = found.GetPolys() if corners == 3 else found.GetLines()
    if not simplices.GetNumberOfCells():
        return np.empty((0, corners, 3)), np.empty(0, dtype=np.int64), np.empty((0, corners, 6))
    ends = vtk_to_numpy(simplices.GetConnectivityArray()).reshape(-1, corners)
    x = vtk_to_numpy(found.GetPoints().GetData()).astype(float) + point
    rows = vtk_to_numpy(found.GetPointData().GetArray("values"))[ends]
    own = np.rint(rows[:, 0, 0]).astype(np.int64)
    real, imaginary = rows[..., 1:7], rows[..., 7:]
    return x[ends], own, real + 1j * imaginary if np.iscomplexobj(sigma) else real


def _grid(mesh: Mesh) -> Any:
    from vtkmodules.util.numpy_support import numpy_to_vtk, numpy_to_vtkIdTypeArray
    from vtkmodules.vtkCommonCore import vtkPoints
    from vtkmodules.vtkCommonDataModel import vtkCellArray, vtkUnstructuredGrid

    points = vtkPoints()
    points.SetData(numpy_to_vtk(np.ascontiguousarray(mesh.points), deep=True))
    cells = vtkCellArray()
    cells.SetData(
        numpy_to_vtkIdTypeArray(mesh.offsets, deep=True),
        numpy_to_vtkIdTypeArray(mesh.connectivity, deep=True),
    )
    grid = vtkUnstructuredGrid()
    grid.SetPoints(points)
    grid.SetCells(numpy_to_vtk(mesh.types, deep=True), cells)
    return grid


def _missed(mesh: Mesh, group: Group, n: Floats, point: Floats) -> InputError:
    if not (dimensions(mesh.types) >= 2).any():
        return InputError(
            "The model has no solid or 2D cells that a plane could cut.",
            "Forces in beams are results of their own, not stresses to be integrated.",
        )
    low, high = np.inf, -np.inf
    for g in group.placements:
        along = mesh.points.astype(float) @ (g.Q.T @ n) + g.t @ n
        low, high = min(low, float(along.min())), max(high, float(along.max()))
    return InputError(
        f"The plane at {point @ n:.6g} along its normal does not cut the body, which reaches from "
        f"{low:.6g} to {high:.6g} there.",
        "Move its point between these; in the body's first face along the normal nothing lies "
        "behind the plane, so there the normal has to be turned round.",
    )
