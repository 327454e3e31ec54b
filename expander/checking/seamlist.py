"""Seams as objects: where the sector meets its copies, node by node and face by face.

A seam belongs to one placement ``s`` (and its inverse): the sector's node ``nodes[r]`` lies where
the copy made by ``s`` has the value ``sum over m of weights[r, m] f(partners[r, m])``. Where nodes
pair there is one partner of weight 1; where meshes differ the partners are the nodes of the face
that lies opposite, with its shape functions as weights. Lines and points where more than two
copies meet, such as the axis, form one seam with a placement of its own in each row.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from expander.checking.facets import (
    Facets,
    areas,
    facet_keys,
    normals,
    outer_facets,
    shares,
    subset,
)
from expander.checking.feet import FACING
from expander.checking.opposite import Against, Opposite, classify, opposite
from expander.groups import Group
from expander.model import Mesh
from expander.placements import Floats, Placement
from expander.seams import OF_EDGE, Tolerance
from expander.sector import Sector
from expander.topology import Ints, cell_sizes, cells_touching, local_edges, tokens

_SAMPLE = 2_000  # faces are enough to tell their usual size
REACH = 1.0  # edges: faces that lie farther apart are not opposite each other


@dataclass(frozen=True, eq=False)
class FacePair:
    """Faces of the sector on a seam and the faces of it whose images meet them, of one size.

    Attributes
    ----------
    facets : (f) faces with their nodes and cells.
    across : (f,) the cell whose image lies on the other side.
    normals : (f, 3) unit vectors out of the sector.
    areas : (f,) area, or length in a plane model or shell.
    shares : (f, s) the part of it that belongs to each node.
    """

    facets: Facets
    across: Ints
    normals: Floats
    areas: Floats
    shares: Floats
    normals_across: Floats

    @property
    def cells(self) -> Ints:
        """(f,) the cell that each face belongs to."""
        return np.asarray(self.facets.cells)

    @property
    def corners(self) -> Ints:
        """(f, c) corner nodes."""
        return np.asarray(self.facets.nodes[:, : self.facets.corners])


@dataclass(frozen=True, eq=False)
class Interpolated:
    """Rows of a seam that are compared by interpolation on faces opposite.

    Attributes
    ----------
    start : row of the seam at which they begin. kept : the points of `opposite` that they are.
    """

    start: int
    kept: Ints
    facets: list[Facets]
    opposite: Opposite


@dataclass(frozen=True, eq=False)
class Seam:
    """Where the sector meets one neighbouring copy, or several along lines.

    Attributes
    ----------
    name : in words.
    kind : "cut plane", "sector faces" (turned neighbours), or "lines and points".
    copy : number of the placement that makes the neighbour; 0 for lines and points.
    nodes, via : (k,) nodes of the sector and the placement that brings what lies there.
    partners, weights : (k, m) nodes whose image lies there, padded with weight 0.
    distance : (k,) between a node and what lies opposite.
    faces : the faces that meet, by size.
    normal : (k, 3) mean unit normal out of the sector; zero where no face meets.
    area : (k,) each node's part of the area that meets.
    interpolated : the rows that do not pair node to node.
    against : areas that match, lie against another mesh, or stand off; None for lines.
    plane : name of the declared cut plane, if it is one.
    """

    name: str
    kind: str
    copy: int
    nodes: Ints
    via: Ints
    partners: Ints
    weights: Floats
    distance: Floats
    faces: tuple[FacePair, ...] = ()
    normal: Floats = field(default_factory=lambda: np.empty((0, 3)))
    area: Floats = field(default_factory=lambda: np.empty(0))
    interpolated: tuple[Interpolated, ...] = ()
    against: Against | None = None
    plane: str | None = None

    @cached_property
    def paired(self) -> NDArray[np.bool_]:
        """(k,) whether a row joins node to node."""
        return np.asarray(self.weights[:, 0] == 1.0)

    @property
    def pairing(self) -> str:
        """How the two sides are compared, in words."""
        if not len(self.nodes):
            return "nothing meets"
        if self.paired.all():
            return "node to node"
        return "node to node and by interpolation" if self.paired.any() else "by interpolation"

    @property
    def measure(self) -> float:
        """Area (length, number) of the faces that meet."""
        return float(sum(f.areas.sum() for f in self.faces))

    @property
    def touches(self) -> bool:
        """Whether anything of the sector meets the copy."""
        return bool(len(self.nodes))


def seams_of(sector: Sector) -> list[Seam]:
    """All seams of a sector: cut planes, faces of turned neighbours, then lines and points."""
    group, mesh, found = sector.group, sector.mesh, sector.seams
    classes = found.nodes
    mirrors = {g for g, _, _ in group.mirrors}
    neighbours = _neighbours(group) | {min(g, int(group.inverse[g])) for g, _ in found.unmatched}
    present = set(np.unique(classes.via).tolist()) - {0}
    candidates = sorted({min(g, int(group.inverse[g])) for g in present}
                        | neighbours)  # fmt: skip
    seams, primary = [], set()
    for g in candidates:
        rows = classes.via == g
        # Faces of other copies may come near along a line or an axis, without lying opposite.
        seam = _face_seam(sector, g, classes.item[rows], classes.source[rows], g in mirrors,
                          g in neighbours)  # fmt: skip
        if seam is not None:
            seams.append(seam)
            primary |= {g, int(group.inverse[g])}
    rest = (classes.via != 0) & ~np.isin(classes.via, sorted(primary))
    rest &= classes.via <= group.inverse[classes.via]
    if rest.any():
        seams.append(_lines(mesh, group, classes.item[rest], classes.via[rest],
                            classes.source[rest]))  # fmt: skip
    return seams


def _neighbours(group: Group) -> set[int]:
    """The copies next to the sector about the axis: their faces may lie close without meeting."""
    if group.axis is None or any(
        abs(float(p.normal @ group.axis.axis)) < 1e-6 for p in group.planes
    ):
        return set()
    return {min(1, group.axis.sectors - 1)}


def _face_seam(sector: Sector, g: int, i: Ints, j: Ints, mirror: bool, near: bool) -> Seam | None:
    """The seam towards the copy `g`, or None if no face meets or, if `near`, comes near."""
    group, mesh = sector.group, sector.mesh
    name, plane = _name(group, g)
    outer = outer_facets(mesh) if near and not mirror else None
    faces = tuple(_meeting(mesh, group, g, i, j, outer))
    paired = _Rows(i, np.full(len(i), g), j[:, None], np.ones((len(i), 1)),
                   _distance(mesh, group, g, i, j))  # fmt: skip
    rows, against, found = [paired], None, []
    if outer is not None:
        against, reach = _against(sector, g, i, j, faces, outer)
        for s, nodes, opposing, taken in (
            (g, against.nodes_here, against.facets_there, i),
            (int(group.inverse[g]), against.nodes_there, against.facets_here, j),
        ):
            nodes = np.setdiff1d(nodes, taken)
            beyond = opposite(mesh.points[nodes].astype(float), mesh, opposing,
                               group.placements[s], reach)  # fmt: skip
            start = sum(len(r.nodes) for r in rows)
            keep = beyond.found
            rows.append(_Rows(nodes[keep], np.full(int(keep.sum()), s), beyond.partners[keep],
                              beyond.weights[keep], beyond.gap[keep]))  # fmt: skip
            found.append(Interpolated(start, np.flatnonzero(keep), opposing, beyond))
    if not faces and (
        against is None or not (against.here.against.size or against.here.apart.size)
    ):
        return None
    wide = max(r.partners.shape[1] for r in rows)
    nodes = np.concatenate([r.nodes for r in rows])
    normal, area = _at_nodes(mesh, faces, nodes)
    return Seam(
        name, "cut plane" if mirror else "sector faces", g, nodes,
        np.concatenate([r.via for r in rows]),
        np.concatenate([_padded(r.partners, wide) for r in rows]),
        np.concatenate([_padded(r.weights, wide) for r in rows]),
        np.concatenate([r.distance for r in rows]),
        faces, normal, area, tuple(found), against, plane,
    )  # fmt: skip


@dataclass(frozen=True, eq=False)
class _Rows:
    nodes: Ints
    via: Ints
    partners: Ints
    weights: Floats
    distance: Floats


def _padded(array: NDArray[np.generic], wide: int) -> NDArray[np.generic]:
    return np.pad(array, ((0, 0), (0, wide - array.shape[1])))


def _distance(mesh: Mesh, group: Group, g: int, i: Ints, j: Ints) -> Floats:
    there = group.placements[g].apply(mesh.points[j])
    return np.asarray(np.linalg.norm(mesh.points[i] - there, axis=1))


def _lines(mesh: Mesh, group: Group, i: Ints, via: Ints, j: Ints) -> Seam:
    distance = np.empty(len(i))
    for s in np.unique(via).tolist():
        rows = np.flatnonzero(via == s)
        distance[rows] = _distance(mesh, group, s, i[rows], j[rows])
    return Seam("lines and points where more copies meet", "lines and points", 0, i, via,
                j[:, None], np.ones((len(i), 1)), distance, (), np.zeros((len(i), 3)),
                np.zeros(len(i)))  # fmt: skip


def _name(group: Group, g: int) -> tuple[str, str | None]:
    """The seam in words, and the declared plane that it is."""
    placement = group.placements[g]
    for plane in group.planes:
        same = np.abs(plane.placement.Q - placement.Q).max() < 1e-9
        if same and placement.mirrored and placement.plane() is not None:
            return f"plane {plane.name!r}", plane.name
    if placement.mirrored:
        return f"implied plane ({group.words(g)})", None
    if group.axis is not None and g == min(1, group.axis.sectors - 1):
        return "between sectors", None
    return f"towards the copy {group.words(g)}", None


def _meeting(
    mesh: Mesh, group: Group, g: int, i: Ints, j: Ints, outer: list[Facets] | None
) -> list[FacePair]:
    """Faces all of whose corners lie on the seam, with those whose images they meet.

    Parameters
    ----------
    outer : all outer facets of the mesh, where they are known.
    """
    partner = np.full(mesh.point_count, -1, dtype=np.int64)
    partner[i] = j
    marked = np.zeros(mesh.point_count, dtype=bool)
    marked[i] = marked[j] = True
    near = cells_touching(mesh, marked)
    # A cell that lies in the seam altogether, as a web in a cut plane, has no face across it.
    # A sector one cell thick has its nodes on both faces, but on neither of them all.
    inside: NDArray[np.bool_] = np.zeros(len(near), dtype=bool)
    for side in (i, j) if len(near) else ():
        side_nodes = np.zeros(mesh.point_count, dtype=bool)
        side_nodes[side] = True
        whole = np.logical_and.reduceat(side_nodes[_connectivity(mesh, near)], _starts(mesh, near))
        inside |= np.asarray(whole)
    if outer is None or inside.any():
        outer = outer_facets(mesh, near[~inside]) if len(near) else []
    token = tokens(mesh.point_count)
    found = []
    for f in outer:
        corners = f.nodes[:, : f.corners]
        on = marked[corners].all(axis=1)
        f, corners = Facets(f.nodes[on], f.vtk_type, f.cells[on]), corners[on]
        if not len(f):
            continue
        out = normals(mesh, f)
        keys = facet_keys(token, corners)
        order = np.argsort(keys, kind="stable")
        here = np.flatnonzero((partner[corners] >= 0).all(axis=1))
        wanted = facet_keys(token, partner[corners[here]])
        there = order[np.minimum(np.searchsorted(keys[order], wanted), len(keys) - 1)]
        facing = np.einsum("fi,fi->f", out[here], out[there] @ group.placements[g].Q.T) < FACING
        if f.dimension < 2:  # shells and beams may fold at a seam by any angle
            facing[:] = True
        hit = (keys[there] == wanted) & facing
        here, there = here[hit], there[hit]
        if len(here):
            mine = Facets(f.nodes[here], f.vtk_type, f.cells[here])
            found.append(
                FacePair(
                    mine,
                    f.cells[there],
                    out[here],
                    areas(mesh, mine),
                    shares(mesh, mine),
                    out[there],
                )
            )
    return found


def _connectivity(mesh: Mesh, cells: Ints) -> Ints:
    sizes = cell_sizes(mesh)[cells]
    inside = np.arange(int(sizes.sum())) - np.repeat(np.cumsum(sizes) - sizes, sizes)
    return np.asarray(mesh.connectivity[np.repeat(mesh.offsets[:-1][cells], sizes) + inside])


def _starts(mesh: Mesh, cells: Ints) -> Ints:
    sizes = cell_sizes(mesh)[cells]
    return np.cumsum(sizes) - sizes


def _at_nodes(mesh: Mesh, faces: tuple[FacePair, ...], nodes: Ints) -> tuple[Floats, Floats]:
    """Mean unit normal and part of the area at each of `nodes`."""
    normal = np.zeros((mesh.point_count, 3))
    area = np.zeros(mesh.point_count)
    for f in faces:
        for column in range(f.facets.nodes.shape[1]):
            at = f.facets.nodes[:, column]
            np.add.at(normal, at, f.normals * f.areas[:, None])
            np.add.at(area, at, f.shares[:, column])
    length = np.linalg.norm(normal[nodes], axis=1, keepdims=True)
    return normal[nodes] / np.where(length > 0.0, length, 1.0), area[nodes]


def _against(
    sector: Sector,
    g: int,
    i: Ints,
    j: Ints,
    faces: tuple[FacePair, ...],
    outer: list[Facets],
) -> tuple[Against, float]:
    """How the faces of turned neighbours meet, where nodes do not pair; and how far was looked."""
    mesh, placement = sector.mesh, sector.group.placements[g]
    partner = np.full(mesh.point_count, -1, dtype=np.int64)
    partner[j] = i
    sample = [f.nodes[:: max(1, len(f) // _SAMPLE), 0] for f in outer]
    edge = local_edges(mesh, np.concatenate(sample)) if sample else np.ones(1)
    usual = float(np.median(edge[np.isfinite(edge)])) if np.isfinite(edge).any() else mesh.size
    tolerance = Tolerance(mesh, sector.case.seam.tolerance)
    touching = max(OF_EDGE * usual, tolerance.spacing, tolerance.given or 0.0)
    reach = REACH * usual
    back = np.full(mesh.point_count, -1, dtype=np.int64)
    back[i] = j
    met = [(f.corners, back[f.corners]) for f in faces]
    near = near_each_other(mesh, outer, placement, [c for pair in met for c in pair], reach)
    return classify(mesh, near, placement, partner, touching, reach), reach


def near_each_other(
    mesh: Mesh, outer: list[Facets], placement: Placement, met: list[Ints], reach: float
) -> list[Facets]:
    """Outer facets near the image of another one by `placement`, without those that meet already.

    Parameters
    ----------
    met : corners (f, c) of the facets that meet node to node, on both sides.
    """
    from scipy.spatial import cKDTree

    token = tokens(mesh.point_count)
    known = np.concatenate([np.zeros(0, dtype=np.uint64), *(facet_keys(token, c) for c in met)])
    left, centres, radii = [], [], []
    for f in outer:
        corners = f.nodes[:, : f.corners]
        free = np.flatnonzero(~np.isin(facet_keys(token, corners), known))
        for kept in subset([f], free):
            p = mesh.points[kept.nodes].astype(float)
            centre = p.mean(axis=1)
            left.append(kept)
            centres.append(centre)
            radii.append(np.linalg.norm(p - centre[:, None], axis=2).max(axis=1))
    if not left:
        return []
    centre, radius = np.concatenate(centres), np.concatenate(radii)
    image = placement.apply(centre)
    most = 2.0 * float(radius.max()) + reach
    keep = np.zeros(len(centre), dtype=bool)
    for a, b in ((centre, image), (image, centre)):
        low, high = b.min(axis=0) - most, b.max(axis=0) + most
        inside = np.flatnonzero(((a >= low) & (a <= high)).all(axis=1))
        distance = cKDTree(b).query(a[inside], distance_upper_bound=most)[0]
        keep[inside[distance <= radius[inside] + float(radius.max()) + reach]] = True
    return subset(left, np.flatnonzero(keep))
