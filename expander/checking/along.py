"""Along a seam: its rows in an order that a plot or a table can follow, and what jumps there.

A seam of a plane model or shell is a curve, told by the arc length. A seam that is a surface has no
such order: all its nodes stand over a coordinate or the radius, or those of its outline over the
arc length.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from scipy.sparse import csr_array
from scipy.sparse.csgraph import connected_components, dijkstra

from expander.cells import CELL_TYPES
from expander.checking.continuity import CaseContinuity, Continuity
from expander.checking.facets import Facets
from expander.checking.jumps import Jump, jump_at
from expander.checking.seamlist import Seam
from expander.closing import scale_of
from expander.errors import InputError
from expander.fields import Field
from expander.groups import Group
from expander.model import Mesh
from expander.placements import Floats
from expander.topology import Ints

ORDERS = ("auto", "arc", "radius", "x", "y", "z")


@dataclass(frozen=True, eq=False)
class Line:
    """Rows of a seam in order.

    Attributes
    ----------
    rows : (k,) rows of the seam; -1 stands between pieces that are not joined. A row occurs twice
        where a closed curve begins and ends, and more often where curves meet.
    position : (k,) rising; NaN between pieces.
    label : what the position is, in words.
    connected : whether neighbours in this order are joined by an edge.
    """

    rows: Ints
    position: Floats
    label: str
    connected: bool

    @property
    def piece(self) -> Ints:
        """(k,) number of the piece that each entry belongs to, from 0."""
        return np.cumsum(self.rows < 0)


def along(seam: Seam, mesh: Mesh, group: Group, by: str = "auto") -> Line:
    """The rows of a seam in order.

    Parameters
    ----------
    by : "arc" is the length along the edges of a curve, or along the longest outline of a surface,
        measured straight from node to node (and straight across gaps between pieces, of which
        each begins where the coordinate of largest extent is smallest); "radius" the distance from
        the cyclic axis; "x", "y" and "z" coordinates on the face towards the neighbour. "auto" is
        the arc for curves, the radius for the faces of turned neighbours, the coordinate of
        largest extent for other surfaces, lines and points.

    Raises
    ------
    InputError
        If nothing meets at the seam, or it has no such order.

    Examples
    --------
    Two nodes of a line where copies meet, and the plane that they lie on:

    >>> from expander.groups import CutPlane, make_group
    >>> group = make_group([CutPlane("mid", np.array([1.0, 0, 0]), np.zeros(3))], None)
    >>> points = np.array([[0.0, 3.0, 0.0], [0.0, 1.0, 0.0]])
    >>> mesh = Mesh(points, np.array([0, 1]), np.array([0, 2]), np.array([3], dtype=np.uint8))
    >>> rows, ones = np.array([0, 1]), np.ones((2, 1))
    >>> seam = Seam("line", "lines and points", 0, rows, rows * 0 + 1, rows[:, None], ones,
    ...     np.zeros(2))
    >>> line = along(seam, mesh, group)
    >>> line.rows.tolist(), line.position.tolist(), line.label
    ([1, 0], [1.0, 3.0], 'y')
    """
    if by not in ORDERS:
        raise InputError(f"The order {by!r} along a seam is unknown.",
                         "Expected one of: " + ", ".join(ORDERS) + ".")  # fmt: skip
    if not seam.touches:
        raise InputError(
            f"The seam {seam.name!r} has no nodes that meet: nothing can be shown along it.",
            "Choose another seam, or check the point of the plane and seam.tolerance.",
        )
    where = places(seam, mesh, group)
    faces = row_facets(seam, mesh, group)
    edges = [f for f in faces if f.dimension == 1]
    curve = bool(edges) and max(f.dimension for f in faces) == 1
    if by == "auto":
        if curve and len(np.unique(np.concatenate([f.nodes.ravel() for f in edges]))) == len(where):
            by = "arc"
        elif seam.kind == "sector faces" and group.axis is not None:
            by = "radius"
        else:
            by = "xyz"[int(np.argmax(np.ptp(where, axis=0)))]
    if by == "arc":
        return _by_arc(seam, edges if curve else faces, curve, where)
    if by == "radius":
        if group.axis is None:
            raise InputError(
                f"The seam {seam.name!r} has no order by radius: the case has no cyclic axis.",
                "Choose x, y, z or arc, or auto.",
            )
        arm = np.cross(where - group.axis.point, group.axis.axis)
        position, label = np.linalg.norm(arm, axis=1), "radius from the cyclic axis"
    else:
        position, label = where[:, "xyz".index(by)], by
    order = np.argsort(position, kind="stable")
    return Line(order, position[order], label, False)


def places(seam: Seam, mesh: Mesh, group: Group) -> Floats:
    """(k, 3) where each row stands on the sector's face towards the neighbour: rows that belong to
    the opposite face are brought there."""
    where = mesh.points[seam.nodes].astype(float)
    back = int(group.inverse[seam.copy])
    if seam.copy and back != seam.copy:
        rows = seam.via == back
        where[rows] = group.placements[seam.copy].apply(where[rows])
    return where


def row_facets(seam: Seam, mesh: Mesh, group: Group) -> list[Facets]:
    """Faces of the sector on a seam, their nodes given as rows of the seam.

    Faces that pair come first, then those that lie against another mesh, on both sides. A face
    that has a node without a row is left out.
    """
    sides = [(seam.copy, [f.facets for f in seam.faces])]
    if seam.against is not None:
        sides[0][1].extend(seam.against.facets_here)
        sides.append((int(group.inverse[seam.copy]), seam.against.facets_there))
    found = []
    for via, facets in sides:
        rows = np.flatnonzero(seam.via == via)[::-1]  # of two rows of a node the first counts
        row_of = np.full(mesh.point_count, -1, dtype=np.int64)
        row_of[seam.nodes[rows]] = rows
        for f in facets:
            nodes = row_of[f.nodes]
            known = (nodes >= 0).all(axis=1)
            if known.any():
                found.append(Facets(nodes[known], f.vtk_type, f.cells[known]))
    return found


def _by_arc(seam: Seam, faces: list[Facets], curve: bool, where: Floats) -> Line:
    if curve:
        chains = _chains(np.concatenate([_segments(f, (0, 1)) for f in faces]), where)
        return _joined(chains, where, "distance along the seam")
    outline = _outline([f for f in faces if f.dimension == 2])
    if not len(outline):
        raise InputError(
            f"The seam {seam.name!r} has no edges to go along: no faces meet there.",
            "Choose x, y or z, or auto.",
        )
    longest = max(_chains(outline, where), key=lambda rows: float(_steps(rows, where).sum()))
    return _joined([longest], where, "distance along the longest outline of the seam")


def _segments(facets: Facets, edge: tuple[int, int]) -> Ints:
    """(m, 2) an edge of each facet in straight pieces, from node to node."""
    stops = list(edge)
    if facets.vtk_type in CELL_TYPES:
        names = [frozenset(node) for node in CELL_TYPES[facets.vtk_type].nodes]
        stops[1:1] = [names.index(frozenset(edge))] if frozenset(edge) in names else []
    return np.concatenate([facets.nodes[:, list(two)] for two in pairwise(stops)])


def _outline(faces: list[Facets]) -> Ints:
    """(m, 2) straight pieces of the edges that belong to one face only."""
    edges = [(f, (k, (k + 1) % f.corners)) for f in faces for k in range(f.corners)]
    if not edges:
        return np.empty((0, 2), dtype=np.int64)
    pairs = np.concatenate([np.sort(f.nodes[:, list(edge)], axis=1) for f, edge in edges])
    _, number, count = np.unique(pairs, axis=0, return_inverse=True, return_counts=True)
    single = np.split(count[number.ravel()] == 1, np.cumsum([len(f) for f, _ in edges])[:-1])
    return np.concatenate([
        _segments(Facets(f.nodes[alone], f.vtk_type, f.cells[alone]), edge)
        for (f, edge), alone in zip(edges, single, strict=True)
    ])  # fmt: skip


def _chains(segments: Ints, where: Floats) -> list[Ints]:
    """Rows along each path that the segments (m, 2) make; paths end where others branch off."""
    segments = np.unique(np.sort(segments, axis=1), axis=0)
    owner, ends = np.unique(segments, return_inverse=True)
    ends = ends.reshape(-1, 2)
    degree = np.bincount(ends.ravel())
    ends, owner = _cut(ends, owner, degree != 2)
    labels = _components(ends, len(owner))
    # What has no end is closed; it is cut at one vertex.
    degree = np.bincount(ends.ravel(), minlength=len(owner))
    closed = np.ones(labels.max() + 1, dtype=bool)
    closed[labels[degree != 2]] = False
    _, first = np.unique(labels, return_index=True)
    cut = np.zeros(len(owner), dtype=bool)
    cut[first[closed]] = True
    ends, owner = _cut(ends, owner, cut)
    labels = _components(ends, len(owner))
    degree = np.bincount(ends.ravel(), minlength=len(owner))
    key = where[owner, int(np.argmax(np.ptp(where, axis=0)))]
    tips = np.flatnonzero(degree == 1)
    tips = tips[np.lexsort((tips, key[tips], labels[tips]))]
    starts = tips[np.unique(labels[tips], return_index=True)[1]]
    rank = np.zeros(labels.max() + 1)
    rank[labels[starts]] = np.argsort(np.argsort(key[starts], kind="stable"))
    hops = dijkstra(_graph(ends, len(owner)), directed=False, indices=starts, unweighted=True,
                    min_only=True)  # fmt: skip
    used = np.flatnonzero(degree)
    used = used[np.lexsort((hops[used], rank[labels[used]]))]
    breaks = np.flatnonzero(np.diff(rank[labels[used]])) + 1
    return np.split(owner[used], breaks)


def _cut(ends: Ints, owner: Ints, marked: np.ndarray) -> tuple[Ints, Ints]:
    """Each segment that ends at a marked vertex gets a vertex of its own there."""
    at = marked[ends]
    owner = np.concatenate([owner, owner[ends[at]]])
    ends = ends.copy()
    ends[at] = np.arange(len(owner) - int(at.sum()), len(owner))
    return ends, owner


def _graph(ends: Ints, count: int) -> csr_array:
    return csr_array((np.ones(len(ends)), (ends[:, 0], ends[:, 1])), shape=(count, count))


def _components(ends: Ints, count: int) -> Ints:
    return np.asarray(connected_components(_graph(ends, count), directed=False)[1])


def _steps(rows: Ints, where: Floats) -> Floats:
    return np.asarray(np.linalg.norm(np.diff(where[rows], axis=0), axis=1))


def _joined(chains: list[Ints], where: Floats, label: str) -> Line:
    """Chains one after the other, with a gap between."""
    rows = np.concatenate(chains)
    position = np.concatenate([[0.0], np.cumsum(_steps(rows, where))])
    breaks = np.cumsum([len(c) for c in chains])[:-1]
    return Line(np.insert(rows, breaks, -1), np.insert(position, breaks, np.nan), label, True)


def comparable(continuity: Continuity) -> tuple[Field, ...]:
    """Nodal fields whose two sides can be held against each other; forces that add up cannot."""
    return tuple(
        f for f in continuity.sector.fields
        if f.on == "points" and f.kind != "label" and f.seam != "sum"
    )  # fmt: skip


def field_jump(continuity: Continuity, seam: Seam, field: str, case: str) -> Jump:
    """Both sides of a field of a case at a seam, by their names.

    Raises
    ------
    InputError
        For an unknown case, or a field that has no nodal values to compare.
    """
    sector = continuity.sector
    f, found = _field(continuity, field), case_named(continuity, case)
    values = f.values(found.case.model)
    return jump_at(sector.mesh, sector.group, seam, f, found.case, values, found.chi)


def case_named(continuity: Continuity, case: str) -> CaseContinuity:
    """A case by its name."""
    for found in continuity.cases:
        if found.case.name == case:
            return found
    raise InputError(
        f"There is no case {case!r}.",
        "Expected one of: " + ", ".join(c.case.name for c in continuity.cases) + ".",
    )


def _field(continuity: Continuity, name: str) -> Field:
    names = ", ".join(f.name for f in comparable(continuity)) or "none"
    for f in continuity.sector.fields:
        if f.name == name and f.on == "points" and f.kind != "label":
            return f
    known = any(f.name == name for f in continuity.sector.fields)
    raise InputError(
        f"Field {name!r} has no nodal numbers to compare along a seam."
        if known else f"There is no field {name!r}.",
        f"Fields that can be shown along a seam: {names}.",
    )  # fmt: skip


def scale_of_jump(continuity: Continuity, jump: Jump) -> float:
    """The field's largest value over the body, which jumps are told in parts of."""
    return scale_of(jump.field, jump.case, continuity.sector.cases)


def allowed_jump(continuity: Continuity, jump: Jump) -> float | None:
    """The largest jump that a field which must agree may have; None for others."""
    if jump.field.seam not in ("agree", "lowest copy"):
        return None
    return continuity.sector.case.seam.limit * scale_of_jump(continuity, jump)
