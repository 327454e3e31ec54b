"""Facets: the pieces of a cell's boundary, one dimension lower than the cell.

A facet is a face of a solid, an edge of a plane or shell cell, or an end of a line. It keeps its
mid-side and centre nodes in VTK's order, so it is itself a cell of a VTK type and has that type's
shape functions. Facets of two cells are one facet where they have the same corners.

>>> import numpy as np
>>> square = Mesh(
...     np.array([[0.0, 0, 0], [2, 0, 0], [2, 1, 0], [0, 1, 0]]),
...     np.array([0, 1, 2, 3]), np.array([0, 4]), np.array([9], dtype=np.uint8),
... )
>>> (edges,) = outer_facets(square)
>>> edges.nodes.tolist(), areas(square, edges).round(9).tolist()
([[0, 1], [1, 2], [2, 3], [3, 0]], [2.0, 1.0, 2.0, 1.0])
>>> normals(square, edges)[0].tolist()
[0.0, -1.0, 0.0]
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from expander.cells import CELL_TYPES, POLYGON, Corners, dimensions
from expander.checking.reference import (
    FacetRule,
    corner_count,
    facet_rule,
    facet_rules,
    node_names,
    quadrature,
    shape_functions,
)
from expander.model import Mesh
from expander.placements import Floats
from expander.topology import Ints, among, blocks, free_faces, singles, tokens


@dataclass(frozen=True, eq=False)
class Facets:
    """Facets of one VTK type and size.

    Attributes
    ----------
    nodes : (k, s), corners first, in the order of the VTK type.
    vtk_type : 1, 3, 5, 7, 9, 21, 22, 23, 28, 30 or 34.
    cells : (k,) the cell that each belongs to.
    """

    nodes: Ints
    vtk_type: int
    cells: Ints

    def __len__(self) -> int:
        return len(self.cells)

    @property
    def corners(self) -> int:
        """Number of corners of each facet."""
        return corner_count(self.vtk_type, self.nodes.shape[1])

    @property
    def dimension(self) -> int:
        """2 for a face, 1 for an edge, 0 for an end."""
        return 2 if self.vtk_type == POLYGON else CELL_TYPES[self.vtk_type].dimension


@dataclass(frozen=True, eq=False)
class Shared:
    """Facets with the same number of corners that two cells have in common.

    Attributes
    ----------
    first, second : (k,) cells. corners : (k, c) nodes.
    normals : (k, 3) unit normals, to either side.
    """

    first: Ints
    second: Ints
    corners: Ints
    normals: Floats


def facet_keys(token: NDArray[np.uint64], corners: Ints) -> NDArray[np.uint64]:
    """Sum of the tokens of the corners of each facet, (k,); `corners` is (k, c)."""
    return np.asarray(token[corners].sum(axis=1, dtype=np.uint64))


@dataclass(frozen=True, eq=False)
class _Lot:
    """Cells (k,) of one type, their nodes (k, size), and the facets to take of each."""

    dimension: int
    cells: Ints
    nodes: Ints
    rules: tuple[FacetRule, ...]

    def keys(self, token: NDArray[np.uint64]) -> NDArray[np.uint64]:
        """(number of rules, k)"""
        used = sorted({c for rule in self.rules for c in rule.cycle})
        column = {c: token[self.nodes[:, c]] for c in used}
        keys = np.zeros((len(self.rules), len(self.cells)), dtype=np.uint64)
        for key, rule in zip(keys, self.rules, strict=True):
            for c in rule.cycle:
                key += column[c]
        return keys


def _lots(mesh: Mesh, cells: Ints | None) -> Iterator[_Lot]:
    """Cells by type; those with collapsed edges by what is left of each of their facets."""
    for vtk_type, numbers, nodes in blocks(mesh, cells):
        rules = facet_rules(vtk_type, nodes.shape[1])
        dimension = int(dimensions(np.array([vtk_type], dtype=np.uint8))[0])
        if dimension < 2:
            yield _Lot(dimension, numbers, nodes, rules)
            continue
        collapsed = np.zeros(len(nodes), dtype=bool)
        for a, b in {tuple(sorted(p)) for rule in rules for p in _around(rule.cycle)}:
            collapsed |= nodes[:, a] == nodes[:, b]
        if not collapsed.any():
            yield _Lot(dimension, numbers, nodes, rules)
            continue
        yield _Lot(dimension, numbers[~collapsed], nodes[~collapsed], rules)
        names = node_names(vtk_type, nodes.shape[1])
        for rule in rules:
            yield from _reduced(dimension, numbers[collapsed], nodes[collapsed], rule, names)


def _around(cycle: Corners) -> list[Corners]:
    return list(zip(cycle, cycle[1:] + cycle[:1], strict=True))


def _reduced(
    dimension: int, cells: Ints, nodes: Ints, rule: FacetRule, names: tuple[frozenset[int], ...]
) -> Iterator[_Lot]:
    """One facet of cells with collapsed edges, without the corners that repeat their neighbour."""
    same = np.stack([nodes[:, a] == nodes[:, b] for a, b in _around(rule.cycle)], axis=1)
    for pattern in np.unique(same, axis=0):
        repeats = np.roll(pattern, 1)  # corner i repeats the one before it
        left = tuple(c for c, again in zip(rule.cycle, repeats, strict=True) if not again)
        if len(left) < dimension:
            continue  # nothing is left of the facet
        picked = (same == pattern).all(axis=1)
        if len(left) == len(rule.cycle):
            yield _Lot(dimension, cells[picked], nodes[picked], (rule,))
            continue
        instead, kept = {}, left[-1]
        for corner, again in zip(rule.cycle, repeats, strict=True):
            kept = kept if again else corner
            instead[corner] = kept
        merged = tuple(frozenset(instead.get(c, c) for c in name) for name in names)
        yield _Lot(dimension, cells[picked], nodes[picked], (facet_rule(left, merged),))


def _joined(parts: list[tuple[FacetRule, Ints, Ints]]) -> list[Facets]:
    """Facets of each type and size in one block: rule, nodes of the cells, cells."""
    found: dict[tuple[int, int], list[tuple[Ints, Ints]]] = {}
    for rule, nodes, cells in parts:
        if len(cells):
            key = (rule.vtk_type, len(rule.columns))
            found.setdefault(key, []).append((nodes[:, rule.columns], cells))
    return [
        Facets(np.concatenate([n for n, _ in group]), key[0], np.concatenate([c for _, c in group]))
        for key, group in sorted(found.items())
    ]


def facets_of(mesh: Mesh, cells: Ints | None = None) -> list[Facets]:
    """All facets of the given `cells` (all cells if None), once for each cell, by type.

    What collapses to less than a facet, as at a hexahedron given as a wedge, is left out.
    """
    lots = _lots(mesh, cells)
    return _joined([(rule, lot.nodes, lot.cells) for lot in lots for rule in lot.rules])


def _of_like_solids(mesh: Mesh) -> list[Facets] | None:
    """The outer facets of a mesh of one type of solids, none of them collapsed: its free faces."""
    if mesh.uniform is None or mesh.uniform[0] not in CELL_TYPES:
        return None
    vtk_type, size = mesh.uniform
    rules = facet_rules(vtk_type, size)
    nodes = mesh.connectivity.reshape(-1, size)
    if CELL_TYPES[vtk_type].dimension < 3 or any(
        (nodes[:, a] == nodes[:, b]).any() for a, b in CELL_TYPES[vtk_type].shape.edges
    ):
        return None
    by_corners = {frozenset(rule.cycle): rule for rule in rules}
    return _joined([(by_corners[frozenset(f.face)], f.cells, f.numbers) for f in free_faces(mesh)])


def outer_facets(mesh: Mesh, cells: Ints | None = None) -> list[Facets]:
    """Facets of the given `cells` (all cells if None) that belong to one cell only, by type.

    A facet whose corners all belong to cells of a higher dimension is not an outer one: the edge
    of a shell that stands on a solid is joined to it, and so is the end of a beam on a shell.
    """
    if cells is None:
        of_solids = _of_like_solids(mesh)
        if of_solids is not None:
            return of_solids
    token = tokens(mesh.point_count)
    lots = list(_lots(mesh, cells))
    covered = np.zeros(mesh.point_count, dtype=bool)
    parts = []
    for dimension in (3, 2, 1):
        mine = [lot for lot in lots if lot.dimension == dimension and lot.rules]
        if not mine:
            continue
        keys = [lot.keys(token) for lot in mine]
        single = singles(np.concatenate([key.ravel() for key in keys]))
        for lot, key in zip(mine, keys, strict=True):
            for rule, values in zip(lot.rules, key, strict=True):
                rows = np.flatnonzero(among(values, single))
                nodes = lot.nodes[rows]
                free = ~covered[nodes[:, rule.cycle]].all(axis=1)
                parts.append((rule, nodes[free], lot.cells[rows[free]]))
        for lot in mine:
            covered[lot.nodes] = True
    return _joined(parts)


def pairs(mesh: Mesh, facets: list[Facets]) -> list[Shared]:
    """Facets that two cells share, by number of corners; `facets` as of `facets_of`.

    Where n cells share a facet, as shells do at a T-joint, n - 1 pairs join them.
    """
    token = tokens(mesh.point_count)
    found = []
    for count in sorted({f.corners for f in facets}):
        alike = [f for f in facets if f.corners == count]
        keys = np.concatenate([facet_keys(token, f.nodes[:, :count]) for f in alike])
        order = np.argsort(keys)
        same = np.flatnonzero(keys[order][1:] == keys[order][:-1])
        i, j = np.sort([order[same], order[same + 1]], axis=0)
        by_first = np.argsort(i, kind="stable")
        i, j = i[by_first], j[by_first]
        if len(i):
            cells = np.concatenate([f.cells for f in alike])
            corners = np.concatenate([f.nodes[:, :count] for f in alike])[i]
            out = _across(mesh, subset(alike, i))
            found.append(Shared(cells[i], cells[j], corners, out))
    return found


def subset(facets: list[Facets], rows: Ints) -> list[Facets]:
    """Those of the facets whose numbers, counted through the blocks, are in `rows`, ascending."""
    picked, start = [], 0
    for f in facets:
        mine = rows[(rows >= start) & (rows < start + len(f))] - start
        picked.append(Facets(f.nodes[mine], f.vtk_type, f.cells[mine]))
        start += len(f)
    return [f for f in picked if len(f)]


def corner_means(mesh: Mesh, cells: Ints) -> Floats:
    """Mean of the corners of each of `cells`, (k, 3)."""
    own, which = np.unique(cells, return_inverse=True)
    means = np.zeros((len(own), 3))
    for vtk_type, numbers, nodes in blocks(mesh, own) if len(own) else ():
        corners = nodes[:, : corner_count(vtk_type, nodes.shape[1])]
        total = sum(mesh.points[corners[:, c]].astype(float) for c in range(corners.shape[1]))
        means[np.searchsorted(own, numbers)] = total / corners.shape[1]
    return means[which]


def normals(mesh: Mesh, facets: Facets) -> Floats:
    """Unit normal of each facet, out of its cell, (k, 3); zero where a facet has no extent.

    A face has the normal of the polygon of its corners, the edge of a shell the direction in the
    plane of the edge and the cell's centre, and the end of a line the line's direction.
    """
    p = mesh.points[facets.nodes[:, : facets.corners]].astype(float)
    out = p.mean(axis=1) - corner_means(mesh, facets.cells)
    if facets.dimension == 2:
        spokes = p - p[:, :1]
        vector = np.cross(spokes[:, 1:-1], spokes[:, 2:]).sum(axis=1)
        vector *= np.where(np.einsum("ki,ki->k", vector, out) < 0.0, -1.0, 1.0)[:, None]
    elif facets.dimension == 1:
        along = unit_rows(p[:, 1] - p[:, 0])
        vector = out - np.einsum("ki,ki->k", out, along)[:, None] * along
    else:
        vector = out
    return unit_rows(vector)


def unit_rows(vectors: Floats) -> Floats:
    length = np.sqrt(np.einsum("ki,ki->k", vectors, vectors))[:, None]
    return np.asarray(np.divide(vectors, length, out=np.zeros_like(vectors), where=length > 0.0))


def areas(mesh: Mesh, facets: Facets) -> Floats:
    """Area of each face, length of each edge, or 1 for an end, (k,).

    Integrated over the shape functions, three Gauss points a direction; a polygon is cut into
    triangles about the mean of its corners.
    """
    if facets.dimension == 0:
        return np.ones(len(facets))
    p = mesh.points[facets.nodes].astype(float)
    if facets.vtk_type == POLYGON:
        spokes = p - p.mean(axis=1, keepdims=True)
        doubled = np.linalg.norm(np.cross(spokes, np.roll(spokes, -1, axis=1)), axis=2)
        return np.asarray(doubled.sum(axis=1) / 2.0)
    total = np.zeros(len(facets))
    for xi, weight in quadrature(facets.dimension, facets.corners):
        _, slopes = shape_functions(facets.vtk_type, xi[None])
        tangents = np.einsum("sd,ksi->dki", slopes[0], p)
        patch = tangents[0] if facets.dimension == 1 else np.cross(tangents[0], tangents[1])
        total += weight * np.sqrt(np.einsum("ki,ki->k", patch, patch))
    return total


def shares(mesh: Mesh, facets: Facets) -> Floats:
    """Part of each facet's area that belongs to each of its nodes, (k, s).

    Equal parts for the corners, nothing for mid-side nodes: a weight for sums over nodes, not the
    integral of the shape functions.
    """
    parts = np.zeros(facets.nodes.shape)
    parts[:, : facets.corners] = (areas(mesh, facets) / facets.corners)[:, None]
    return parts


def _across(mesh: Mesh, facets: list[Facets]) -> Floats:
    """Unit normals without regard to the side: of faces from their corners alone."""
    found = []
    for f in facets:
        if f.dimension != 2:
            found.append(normals(mesh, f))
            continue
        p = [mesh.points[f.nodes[:, c]].astype(float) for c in range(f.corners)]
        total = np.zeros((len(f), 3))
        for a, b in pairwise(p[1:]):
            total += _cross(a - p[0], b - p[0])
        found.append(unit_rows(total))
    return np.concatenate(found)


def _cross(a: Floats, b: Floats) -> Floats:
    out = np.empty_like(a)
    for i in range(3):
        j, k = (i + 1) % 3, (i + 2) % 3
        out[:, i] = a[:, j] * b[:, k] - a[:, k] * b[:, j]
    return out
