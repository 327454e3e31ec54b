"""Volume, mass, centre and moments of inertia: of the sector, carried around, and of the copies.

The sector's properties times what the group makes of them (`of_whole`) must be what is found on
the copies themselves (`integrated`), which also shows cells that a mirror left inside out.

Mass per unit is the density for solids and density times thickness for 2D cells. Lines count,
with the density as mass per length, only in a mesh of lines and vertices alone; vertices have no
mass. Offsets of shells are not known here: their mass lies in the nodes' surface.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import ArrayLike, NDArray

from expander.audit.quadrature import Rule, rule
from expander.body import WholeBody
from expander.bodymesh import BodyMesh
from expander.cells import dimensions
from expander.errors import InputError
from expander.images import arrays_of
from expander.model import Mesh
from expander.placements import Floats, Placement
from expander.topology import Ints, blocks

# Products of matrices stay below the size at which BLAS starts threads, which wait for each other
# when the processors are busy; what a block needs also stays in the cache.
_PRODUCT = 250_000


@dataclass(frozen=True, eq=False)
class Properties:
    """Mass properties, in the model's units.

    Attributes
    ----------
    volume, area, length : of solid, 2D and 1D cells.
    mass : of all cells that have one; see the module.
    centre : (3,) centre of mass; nan without mass.
    inertia : (3, 3) about the centre, the integral of ``rho (|r|^2 I - r r^T)``: products of
        inertia stand with their minus sign.
    inverted : solid cells whose Jacobian is not positive at some quadrature point, ascending.
        Their volume counts with its sign.
    """

    volume: float
    area: float
    length: float
    mass: float
    centre: Floats
    inertia: Floats
    inverted: Ints = field(default_factory=lambda: np.empty(0, dtype=np.int64))


@dataclass
class _Sums:
    """Integrals over cells; moments are about a point chosen near the body."""

    measure: Floats = field(default_factory=lambda: np.zeros(4))  # by dimension
    moments: Floats = field(default_factory=lambda: np.zeros((4, 4)))  # of (1, x, y, z)
    inverted: list[Ints] = field(default_factory=list)

    def add(self, x: Floats, mass: Floats) -> None:
        """Masses, (...), at positions with a one in front, (4, ...)."""
        flat = x.reshape(4, -1)
        self.moments += (flat * mass.ravel()) @ flat.T

    def about(self, origin: Floats) -> Properties:
        centre, inertia = np.full(3, np.nan), np.zeros((3, 3))
        mass, first = float(self.moments[0, 0]), self.moments[0, 1:]
        if mass != 0.0:
            mean = first / mass
            centre = origin + mean
            central = self.moments[1:, 1:] - np.outer(first, mean)
            inertia = np.trace(central) * np.eye(3) - central
        found = np.concatenate([np.empty(0, dtype=np.int64), *self.inverted])
        _, length, area, volume = self.measure.tolist()
        return Properties(volume, area, length, mass, centre, inertia, np.sort(found))


def properties(mesh: Mesh, density: ArrayLike = 1.0, thickness: ArrayLike = 1.0) -> Properties:
    """Mass properties of a mesh.

    Parameters
    ----------
    density : a number, or one per cell, (m,).
    thickness : of 2D cells, a number, or one per cell, (m,).

    Raises
    ------
    InputError
        If there is neither one number nor one for each cell.

    Examples
    --------
    >>> corners = np.array([[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1]], dtype=float)
    >>> mesh = Mesh(corners, np.arange(4), np.array([0, 4]), np.array([10], dtype=np.uint8))
    >>> p = properties(mesh, density=6.0)
    >>> round(p.mass, 12), p.centre.round(12).tolist()
    (1.0, [0.25, 0.25, 0.25])
    """
    rho, t = per_cell(mesh, density, "density"), per_cell(mesh, thickness, "thickness")
    origin = mesh.bounds.mean(axis=0)
    sums = _Sums()
    _integrate(sums, mesh, origin, rho, t, np.ones(1), 0)
    return sums.about(origin)


def per_cell(mesh: Mesh, given: ArrayLike, what: str) -> Floats:
    """A number for each cell, (m,), or one for all, (1,)."""
    values = np.asarray(given, dtype=float)
    if values.ndim == 0 or values.shape == (mesh.cell_count,):
        return values.reshape(-1)
    raise InputError(
        f"{what} has shape {values.shape}, but the mesh has {mesh.cell_count} cells.",
        f"Give one number, or one for each cell of the modelled part: ({mesh.cell_count},).",
    )


def nodal(points: ArrayLike, mass: ArrayLike) -> Properties:
    """Properties of lumped nodal masses.

    Parameters
    ----------
    points : (n, 3). mass : (n,); of a sector its own share, half of a node's mass in a cut plane.

    >>> nodal([[0, 0, 0], [2, 0, 0]], [1, 1]).inertia.diagonal().tolist()
    [0.0, 2.0, 2.0]
    """
    x, m = np.asarray(points, dtype=float), np.asarray(mass, dtype=float)
    if x.ndim != 2 or x.shape[1] != 3 or m.shape != x.shape[:1]:
        raise InputError(
            f"Nodal masses of shape {m.shape} do not fit points of shape {x.shape}.",
            "Expected points (n, 3) and masses (n,).",
        )
    origin = (x.min(axis=0) + x.max(axis=0)) / 2.0 if len(x) else np.zeros(3)
    sums = _Sums()
    sums.add(np.vstack([np.ones(len(x)), (x - origin).T]), m)
    return sums.about(origin)


def of_whole(p: Properties, placements: Sequence[Placement]) -> Properties:
    """The properties of the copies together, carried from those of the sector.

    A mass on copy ``g`` lies at ``g x``; inertia turns with ``Q`` and adds up about the common
    centre by the parallel-axis theorem. `inverted` are the sector's cells.

    >>> one = nodal([[3, 0, 0]], [2])
    >>> both = of_whole(one, [Placement.identity(), Placement.mirror([1, 0, 0], [1, 0, 0])])
    >>> both.mass, both.centre.tolist(), both.inertia.diagonal().tolist()
    (4.0, [1.0, 0.0, 0.0], [0.0, 16.0, 16.0])
    """
    n = len(placements)
    centres = np.array([g.apply(p.centre) for g in placements])
    centre = centres.mean(axis=0)
    r = centres - centre
    carried = sum((g.Q @ p.inertia @ g.Q.T for g in placements), np.zeros((3, 3)))
    if p.mass != 0.0:
        carried = carried + p.mass * ((r * r).sum() * np.eye(3) - r.T @ r)
    return Properties(
        n * p.volume, n * p.area, n * p.length, n * p.mass, centre, carried, p.inverted
    )


def integrated(body: WholeBody, density: ArrayLike = 1.0, thickness: ArrayLike = 1.0) -> Properties:
    """Mass properties found on the copies' own cells, copy by copy.

    Parameters
    ----------
    density, thickness : a number, or one per cell of the sector, (m,). A cell in a cut plane,
        which copies share and which is kept once, counts as often as there are copies that share
        it: its thickness is that of the modelled half.

    Returns
    -------
    Properties of the copies that are built, with the node order and coordinates that are written
    (at merged nodes the copy's own image). `inverted` are cells of the whole body.
    """
    mesh = body.mesh
    rho, t = per_cell(mesh, density, "density"), per_cell(mesh, thickness, "thickness")
    origin = np.mean([body.group.placements[g].apply(mesh.bounds.mean(axis=0))
                      for g in body.copies], axis=0)  # fmt: skip
    sums = _Sums()
    for copy, image, kept in _copies(body):
        own = slice(None) if kept is None else kept
        shared = _sharing(body, copy)
        _integrate(
            sums,
            image,
            origin,
            rho if len(rho) == 1 else rho[own],
            t if len(t) == 1 else t[own],
            shared if len(shared) == 1 else shared[own],
            body.cell_numbering.first[copy],
        )
    return sums.about(origin)


def _copies(body: WholeBody) -> Iterator[tuple[int, Mesh, Ints | None]]:
    """Each copy as a mesh of its own, in the sector's point numbers, and the cells it keeps."""
    written = BodyMesh(body)
    coordinates = next(arrays_of(body, body.results[0]))
    assert coordinates.section == "coordinates"
    numbering = body.point_numbering
    for copy in body.copies:
        kept = numbering.kept(copy)
        rows = coordinates.block(copy, slice(0, numbering.written(copy)))
        x = body.group.placements[copy].apply(body.mesh.points).astype(body.mesh.points.dtype)
        x[slice(None) if kept is None else kept] = rows  # the others are merged
        connectivity, ends, types = written.sector(copy)
        offsets = np.concatenate([[0], ends])
        yield copy, Mesh(x, connectivity, offsets, types), body.cell_numbering.kept(copy)


def _sharing(body: WholeBody, copy: int) -> Floats:
    """How many cells of built copies each cell of the copy stands for, (m,), or (1,) if one."""
    classes = body.cells
    if not len(classes.item):
        return np.ones(1)
    built = np.zeros(len(body.group), dtype=np.int64)
    built[list(body.copies)] = 1
    count = np.ones(body.mesh.cell_count)
    target = body.group.product[copy, classes.via]
    count[classes.items] = np.add.reduceat(built[target], classes.starts)
    return count


def _integrate(
    sums: _Sums,
    mesh: Mesh,
    origin: Floats,
    density: Floats,
    thickness: Floats,
    times: Floats,
    first_cell: int,
) -> None:
    """Add the cells of a mesh; `density`, `thickness` and `times` are (m,) or (1,)."""
    points = np.subtract(mesh.points, origin, dtype=float).T.copy()
    highest = int(dimensions(mesh.types).max(initial=0))
    for vtk_id, cells, nodes in blocks(mesh):
        dimension = int(dimensions(mesh.types[cells[:1]])[0])
        if dimension == 0:
            continue
        r = rule(vtk_id, nodes.shape[1])
        values = r.values.T.copy()
        heavy = dimension >= 2 or highest == 1
        step = _step(r)
        for start in range(0, len(cells), step):
            part = slice(start, start + step)
            some = cells[part]
            x = points[:, nodes[part]]  # (3, cells, nodes)
            size = _measure(r, x)
            if dimension == 3:
                sums.inverted.append(some[size.min(axis=1) <= 0.0] + first_cell)
            size *= r.weights
            size *= _of(times, some)
            sums.measure[dimension] += size.sum()
            if heavy:
                size *= _of(density, some)
                if dimension == 2:
                    size *= _of(thickness, some)
                homogeneous = np.ones((4, *size.shape))
                np.matmul(x, values, out=homogeneous[1:])
                sums.add(homogeneous, size)


def _step(r: Rule) -> int:
    """How many cells to take at once."""
    q, nodes = r.values.shape
    return max(1, _PRODUCT // (int(q) * max(int(nodes), 16)))


def _of(values: Floats, cells: Ints) -> Floats:
    """(cells, 1), or (1, 1) if there is one number for all."""
    return (values if len(values) == 1 else values[cells])[:, None]


def _slopes(r: Rule, x: Floats) -> Floats:
    """Derivatives of positions of cells with nodes x (3, cells, nodes): (3, d, cells, q)."""
    return np.asarray(x[:, None] @ r.slopes.transpose(2, 1, 0).copy())


def _measure(r: Rule, x: Floats) -> Floats:
    """Volume, area or length per reference measure, (cells, q), signed for solids."""
    J = _slopes(r, x)
    if J.shape[1] == 1:
        return np.asarray(np.sqrt((J[:, 0] ** 2).sum(axis=0)))
    if J.shape[1] == 3:
        return _triple(J)
    across = _across(J)
    # Where the fan of a polygon that is not convex folds back, its triangles count negative.
    whole = np.einsum("ick,k->ic", across, r.weights)
    side = np.einsum("ick,ic->ck", across, whole)
    return np.asarray(np.copysign(np.sqrt((across**2).sum(axis=0)), side))


def _triple(J: Floats) -> Floats:
    """Determinants of J (3, 3, ...), row by row in place: half the time is memory traffic."""
    total: Floats = np.zeros(J.shape[2:])
    part, minor = np.empty_like(total), np.empty_like(total)
    for i in range(3):
        np.multiply(J[i - 2, 0], J[i - 1, 1], out=minor)
        minor -= np.multiply(J[i - 1, 0], J[i - 2, 1], out=part)
        total += np.multiply(minor, J[i, 2], out=minor)
    return total


def _across(J: Floats) -> Floats:
    """Cross products of the two columns of J (3, 2, ...), (3, ...)."""
    a, b = J[:, 0], J[:, 1]
    return np.asarray(np.stack([a[i - 2] * b[i - 1] - a[i - 1] * b[i - 2] for i in range(3)]))


def area_vectors(mesh: Mesh) -> NDArray[np.float64]:
    """Normal times area of each 2D cell, (m, 3); zero for other cells."""
    out = np.zeros((mesh.cell_count, 3))
    for vtk_id, cells, nodes in blocks(mesh):
        if dimensions(mesh.types[cells[:1]])[0] == 2:
            r = rule(vtk_id, nodes.shape[1])
            step = _step(r)
            for start in range(0, len(cells), step):
                part = slice(start, start + step)
                x = mesh.points[nodes[part]].astype(float).transpose(2, 0, 1).copy()
                J = _slopes(r, x)
                out[cells[part]] = np.einsum("ick,k->ci", _across(J), r.weights)
    return out
