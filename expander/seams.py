"""Seams: which nodes and cells of different copies are one.

A seam depends on how two placements differ, so it is found once, on the sector: node ``i`` is
shared through ``s`` if ``s x_j = x_i`` for some sector node ``j``. All ``(s, j)`` of a node form
its class; a node in a cut plane has two, a node on the axis as many as there are sectors. In the
whole body node ``i`` of copy ``g`` is node ``j`` of copy ``g s`` for each of them.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from expander.errors import InputError
from expander.groups import Group
from expander.model import Mesh
from expander.placements import Floats, Placement
from expander.topology import (
    Ints,
    boundary_faces,
    boundary_nodes,
    faces_met,
    free_faces,
    local_edges,
    pieces,
)

OF_EDGE = 1e-4
OF_SPACING = 8
MOST_OF_EDGE = 0.1


@dataclass(frozen=True, eq=False)
class Classes:
    """Items of the sector (nodes or cells) that several copies share.

    Entry ``e`` says: item ``item[e]`` is ``placements[via[e]]`` times item ``source[e]``. The
    identity entry (via 0, source = item) of each shared item is among them. Sorted by item.
    """

    item: Ints
    via: Ints
    source: Ints

    @cached_property
    def items(self) -> Ints:
        """The shared items, (s,), ascending."""
        return np.unique(self.item)

    @cached_property
    def starts(self) -> Ints:
        """First entry of each shared item, (s,)."""
        return np.searchsorted(self.item, self.items)

    @cached_property
    def row(self) -> Ints:
        """Position of each entry's item among `items`, (entries,)."""
        return np.searchsorted(self.items, self.item)

    def owners(self, group: Group, copy: int) -> tuple[Ints, Ints]:
        """Copy and source that stand for each shared item of `copy`: the lowest of its class."""
        size = int(self.source.max(initial=0)) + 1
        keys = group.product[copy, self.via] * size + self.source
        least = np.minimum.reduceat(keys, self.starts) if len(keys) else keys
        return least // size, least % size

    def without(self, entries: Ints, group: Group) -> Classes:
        """The classes that remain when the two sides of these entries are kept apart."""
        keep = np.ones(len(self.item), dtype=bool)
        keep[entries] = False
        keep &= self.via != 0
        pairs = np.stack([self.item[keep], self.via[keep], self.source[keep]], axis=1)
        reverse = np.stack([pairs[:, 2], group.inverse[pairs[:, 1]], pairs[:, 0]], axis=1)
        known = {tuple(p) for p in reverse.tolist()}  # a pair stays only if both sides close
        both = np.array([tuple(p) in known for p in pairs.tolist()], dtype=bool)
        pairs = pairs[both] if len(pairs) else pairs
        count = int(max(self.item.max(initial=0), self.source.max(initial=0))) + 1
        none = np.empty(0)
        found = [
            (s, pairs[pairs[:, 1] == s, 0], pairs[pairs[:, 1] == s, 2], none, none)
            for s in np.unique(pairs[:, 1]).tolist()
        ]
        return close_classes(found, group, count)

    @staticmethod
    def none() -> Classes:
        empty = np.empty(0, dtype=np.int64)
        return Classes(empty, empty, empty)


@dataclass(frozen=True, eq=False)
class Seams:
    """All seams of a sector.

    Attributes
    ----------
    nodes : the shared nodes.
    worst_distance, worst_node : largest distance between a node and its partner's image.
    tolerance : (smallest, largest) distance within which nodes were taken for one.
    pairs : number of node pairs found for each placement searched, by copy number.
    near_misses : (node, distance) of nodes that lie close to a partner but outside the tolerance.
    unmatched : copies whose faces lie against the sector's with another mesh: (copy, nodes that
        happen to coincide); they are not merged.
    overlapping : copies some of whose faces lie on faces of the sector from the same side.
    """

    nodes: Classes
    worst_distance: float
    worst_node: int
    tolerance: tuple[float, float]
    pairs: dict[int, int]
    near_misses: tuple[tuple[int, float], ...]
    unmatched: tuple[tuple[int, int], ...] = ()
    overlapping: tuple[int, ...] = ()


class Tolerance:
    """Distance within which two nodes are one, node by node.

    ``max(1e-4 of the local edge, 8 spacings of the coordinates' precision)``, or the user's, and
    never more than a tenth of the local edge.
    """

    def __init__(self, mesh: Mesh, given: float | None) -> None:
        self.mesh = mesh
        self.given = given
        self.size = float(np.linalg.norm(mesh.bounds[1] - mesh.bounds[0]))
        self.spacing = OF_SPACING * mesh.spacing
        # No edge is longer than the model, so no node farther away than this can be on a seam.
        self.reach = given if given is not None else max(OF_EDGE * self.size, self.spacing)

    def at(self, nodes: Ints) -> Floats:
        """Tolerance at `nodes`, (k,)."""
        if self.size == 0.0:  # a single point
            return np.full(len(nodes), self.spacing)
        edge = np.minimum(local_edges(self.mesh, nodes), self.size)
        if self.given is not None:
            tolerance = np.full(len(nodes), self.given)
        else:
            tolerance = np.maximum(OF_EDGE * edge, self.spacing)
        coarse = tolerance > MOST_OF_EDGE * edge
        if coarse.any():
            worst = int(np.argmax(np.where(coarse, tolerance / edge, 0.0)))
            found = (
                f"seam.tolerance = {self.given:.6g} is more than a tenth of the shortest edge "
                f"({edge[worst]:.6g}) at node {nodes[worst]}: different nodes would be merged."
                if self.given is not None
                else f"The coordinates are too coarse to find seams: at node {nodes[worst]} the "
                f"shortest edge is {edge[worst]:.6g}, and 8 spacings of the coordinates' number "
                f"type ({self.mesh.points.dtype}) are {self.spacing:.6g}."
            )
            raise InputError(
                found,
                f"Give a seam.tolerance under {MOST_OF_EDGE * edge[worst]:.3g}."
                if self.given is not None
                else "Write the coordinates in double precision, or move the model to the origin.",
            )
        return tolerance


def find_seams(mesh: Mesh, group: Group, given_tolerance: float | None) -> Seams:
    """Classes of shared nodes: cut planes by distance, turns by nearest neighbours.

    If mirror planes make the whole group, two copies share a node only on mirror planes, and no
    search is needed (Humphreys, Reflection Groups and Coxeter Groups, 1.12); otherwise each other
    placement takes one nearest-neighbour search over boundary nodes near the copy.
    """
    tolerance = Tolerance(mesh, given_tolerance)
    found: list[tuple[int, Ints, Ints, Floats, Floats]] = []
    misses: list[tuple[int, float]] = []
    unmatched: list[tuple[int, int]] = []
    overlapping: list[int] = []
    for g, normal, level in group.mirrors:
        off = np.abs(mesh.points @ normal - level)
        near = np.flatnonzero(off <= tolerance.reach)
        allowed = tolerance.at(near)
        fits = 2.0 * off[near] <= allowed
        on = near[fits]
        found.append((g, on, on, 2.0 * off[on], allowed[fits]))
        misses += _near_misses(mesh, on, off, tolerance)
    if not group.is_reflection_group:
        free = free_faces(mesh)
        boundary, faces = boundary_nodes(mesh, free), boundary_faces(mesh, free)
        mirrors = {g for g, _, _ in group.mirrors}
        piece = None
        for g in _touching(mesh.points[boundary].astype(float), group, tolerance.reach, mirrors):
            placement = group.placements[g]
            i, j, distance = match(mesh.points, boundary, boundary, placement, tolerance.reach)
            allowed = np.minimum(tolerance.at(i), tolerance.at(j))
            fits = distance <= allowed
            i, j, distance, allowed = i[fits], j[fits], distance[fits], allowed[fits]
            if len(np.unique(i)) < len(i) or len(np.unique(j)) < len(j):
                piece = pieces(mesh) if piece is None else piece
                i, j, distance, allowed = _one_to_one(mesh, i, j, distance, allowed, piece)
            whole, met, same = faces_met(mesh, faces, i, j, placement)
            if same:
                overlapping.append(g)
                continue
            nearly = _near_pairs(mesh, boundary, placement, i, j)
            neighbour = group.axis is not None and g in (1, group.axis.sectors - 1)
            lines_only = neighbour and bool(faces) and not whole and bool((i != j).any())
            if whole > met or (lines_only and not nearly):
                unmatched.append((g, len(i)))
                continue
            misses += nearly
            found.append((g, i, j, distance, allowed))
            inverse = int(group.inverse[g])
            if inverse != g:
                found.append((inverse, j, i, distance, allowed))
    classes = close_classes(found, group, mesh.point_count)
    distance = np.concatenate([f[3] for f in found]) if found else np.empty(0)
    node = np.concatenate([f[1] for f in found]) if found else np.empty(0, dtype=np.int64)
    allowed = np.concatenate([f[4] for f in found]) if found else np.empty(0)
    worst = int(np.argmax(distance)) if len(distance) else -1
    return Seams(
        classes,
        float(distance[worst]) if worst >= 0 else 0.0,
        int(node[worst]) if worst >= 0 else -1,
        (float(allowed.min(initial=np.inf)), float(allowed.max(initial=0.0))),
        {f[0]: len(f[1]) for f in found},
        tuple(misses),
        tuple(unmatched),
        tuple(overlapping),
    )


def _near_misses(
    mesh: Mesh, on: Ints, off: Floats, tolerance: Tolerance
) -> list[tuple[int, float]]:
    """Nodes nearer a plane than a tenth of their edge, yet outside the tolerance."""
    edge = local_edges(mesh, on).max() if len(on) else OF_EDGE * 100 * tolerance.size
    off = off.copy()
    off[on] = np.inf
    near = np.flatnonzero(off < MOST_OF_EDGE * min(edge, tolerance.size))
    if not len(near):
        return []
    close = near[off[near] < MOST_OF_EDGE * local_edges(mesh, near)]
    return [(int(n), 2.0 * float(off[n])) for n in close]  # to its image


def _near_pairs(
    mesh: Mesh, boundary: Ints, placement: Placement, i: Ints, j: Ints
) -> list[tuple[int, float]]:
    """Unmatched nodes nearer an unmatched partner than a tenth of their edge, at a seam."""
    if not len(i):
        return []
    reach = MOST_OF_EDGE * float(local_edges(mesh, i).max())
    if not np.isfinite(reach):
        return []
    mine, theirs = np.setdiff1d(boundary, i), np.setdiff1d(boundary, j)
    a, b, distance = match(mesh.points, mine, theirs, placement, reach)
    edge = np.minimum(local_edges(mesh, a), local_edges(mesh, b))
    close = (distance <= MOST_OF_EDGE * edge) & (a != b)
    return [(int(n), float(d)) for n, d in zip(a[close], distance[close], strict=True)]


def _touching(points: Floats, group: Group, reach: float, skip: set[int]) -> list[int]:
    """One of each pair ``s, s^-1`` of placements whose copy may touch the sector."""
    from scipy.spatial import ConvexHull, QhullError

    try:
        hull = points[ConvexHull(points).vertices]
    except QhullError:  # a flat model
        hull = points
    centre = hull.mean(axis=0)
    wanted = []
    for g in range(1, len(group)):
        if g in skip or group.inverse[g] < g:
            continue
        placement = group.placements[g]
        direction = placement.apply(centre[None])[0] - centre
        size = float(np.linalg.norm(direction))
        if size > 0.0:
            direction /= size
            far = (hull @ direction).max()
            near = (placement.apply(hull) @ direction).min()
            if near > far + reach:
                continue  # a plane normal to the line between the centres parts the two
        wanted.append(g)
    return wanted


def match(
    points: NDArray[np.floating], mine: Ints, theirs: Ints, placement: Placement, reach: float
) -> tuple[Ints, Ints, Floats]:
    """All pairs with ``|s x_j - x_i| <= reach``, i of `mine`, j of `theirs`: i, j, distance."""
    from scipy.spatial import cKDTree

    none = np.empty(0, dtype=np.int64)
    if not len(mine) or not len(theirs):
        return none, none, np.empty(0)
    here = points[mine].astype(float)
    there = placement.apply(points[theirs])
    low = np.maximum(here.min(axis=0), there.min(axis=0)) - reach
    high = np.minimum(here.max(axis=0), there.max(axis=0)) + reach
    a = np.flatnonzero(((here >= low) & (here <= high)).all(axis=1))
    b = np.flatnonzero(((there >= low) & (there <= high)).all(axis=1))
    if not len(a) or not len(b):
        return none, none, np.empty(0)
    pairs = cKDTree(here[a]).sparse_distance_matrix(
        cKDTree(there[b]), reach, output_type="coo_matrix"
    )
    return mine[a[pairs.row]], theirs[b[pairs.col]], np.asarray(pairs.data, dtype=float)


def _one_to_one(
    mesh: Mesh, i: Ints, j: Ints, distance: Floats, allowed: Floats, piece: NDArray[np.int32]
) -> tuple[Ints, Ints, Floats, Floats]:
    """Where nodes lie on top of each other (contact, ties), pair those of the same piece."""
    counts_i, counts_j = np.bincount(i), np.bincount(j)
    doubled = (counts_i[i] > 1) | (counts_j[j] > 1)
    keep = ~doubled | (piece[i] == piece[j])
    lost = np.setdiff1d(i, i[keep])
    if len(lost):
        node = int(lost[0])
        at = ", ".join(f"{c:.6g}" for c in mesh.points[node])
        raise InputError(
            f"Node {node} at ({at}) lies on a seam where nodes of several connected pieces lie on "
            "top of each other, none of them of its own piece, so it cannot be told which of them "
            "continues it in the next copy.",
            "Join tied pieces in the model, or expand without stitching (output.merge = false).",
        )
    i, j, distance, allowed = i[keep], j[keep], distance[keep], allowed[keep]
    again = np.flatnonzero(np.bincount(i, minlength=1) > 1)
    if not len(again):
        again = np.flatnonzero(np.bincount(j, minlength=1) > 1)
    if len(again):
        node = int(again[0])
        at = ", ".join(f"{c:.6g}" for c in mesh.points[node])
        raise InputError(
            f"Node {node} at ({at}) lies on a seam together with other nodes of the same connected "
            "piece, so it cannot be told which of them continues in the next copy.",
            "Merge coincident nodes in the model, give a smaller seam.tolerance, or expand "
            "without stitching (output.merge = false).",
        )
    return i, j, distance, allowed


def close_classes(
    found: list[tuple[int, Ints, Ints, Floats, Floats]], group: Group, count: int
) -> Classes:
    """Pairs closed to classes: if s y = x and t z = y then (s t) z = x."""
    parts = [(f[1], np.full(len(f[1]), f[0], dtype=np.int64), f[2]) for f in found if len(f[1])]
    if not parts:
        return Classes.none()
    size = len(group)

    def packed(item: Ints, via: Ints, source: Ints) -> Ints:
        return (item * size + via) * count + source

    touched = _distinct(np.concatenate([p[0] for p in parts]))
    keys = _distinct(
        np.concatenate([packed(*p) for p in parts] + [packed(touched, touched * 0, touched)])
    )
    while True:
        item, via, source = keys // count // size, keys // count % size, keys % count
        start = np.searchsorted(item, source, side="left")
        length = np.searchsorted(item, source, side="right") - start
        new = [keys]
        bounds = np.searchsorted(np.cumsum(length), np.arange(0, int(length.sum()), 4_000_000))
        for low, high in zip(bounds, [*bounds[1:], len(keys)], strict=True):
            reps = length[low:high]
            entry = np.repeat(np.arange(low, high), reps)
            inside = np.arange(int(reps.sum())) - np.repeat(np.cumsum(reps) - reps, reps)
            other = start[entry] + inside
            through = group.product[via[entry], via[other]]
            new.append(_distinct(packed(item[entry], through, source[other])))
        grown = _distinct(np.concatenate(new))
        if len(grown) == len(keys):
            return Classes(item, via, source)
        keys = grown


def _distinct(keys: Ints) -> Ints:
    """As numpy's unique, which hashes and is several times slower than a sort."""
    ranked = np.sort(keys)
    return ranked[np.concatenate([[True], ranked[1:] != ranked[:-1]])] if len(ranked) else ranked
