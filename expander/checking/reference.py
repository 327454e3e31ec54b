"""What the reference cell alone tells: its facets, shape functions and points of quadrature.

All of it is derived from the table of cell types, where each node is named by the corners whose
mean position it has; no formula is typed for any type.

>>> [rule.vtk_type for rule in facet_rules(26, 15)]
[22, 22, 23, 23, 23]
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from expander.cells import CELL_TYPES, POLYGON, QUADRATIC_POLYGON, Corners
from expander.placements import Floats

_LINEAR = {1: 1, 2: 3, 3: 5, 4: 9}  # VTK type of a facet without mid-side nodes, by corners
_TYPE_OF_NODES = {
    frozenset(frozenset(node) for node in cell.nodes): vtk_id
    for vtk_id, cell in CELL_TYPES.items()
    if cell.dimension < 3
}


@dataclass(frozen=True)
class FacetRule:
    """A facet of a reference cell.

    Attributes
    ----------
    cycle : columns of its corners among the cell's nodes.
    columns : columns of all its nodes, in the order of `vtk_type`.
    """

    cycle: Corners
    columns: Corners
    vtk_type: int


def corner_count(vtk_type: int, size: int) -> int:
    """Number of corners of a cell of this type with `size` nodes."""
    if vtk_type in CELL_TYPES:
        return len(CELL_TYPES[vtk_type].shape.mirrored)
    return size // 2 if vtk_type == QUADRATIC_POLYGON else size


def facet_rule(cycle: Corners, names: tuple[frozenset[int], ...]) -> FacetRule:
    """The facet around these corners; `names` are the corners that name each node of the cell."""
    for turn in range(len(cycle)):  # VTK's quadratic-linear quadrilateral says where it begins
        turned = cycle[turn:] + cycle[:turn]
        place = {corner: i for i, corner in enumerate(turned)}
        found: dict[frozenset[int], int] = {}
        for column, name in enumerate(names):
            if name <= place.keys():
                found.setdefault(frozenset(place[corner] for corner in name), column)
        vtk_type = _TYPE_OF_NODES.get(frozenset(found))
        if vtk_type is not None:
            nodes = CELL_TYPES[vtk_type].nodes
            return FacetRule(turned, tuple(found[frozenset(n)] for n in nodes), vtk_type)
    return FacetRule(cycle, cycle, _LINEAR.get(len(cycle), POLYGON))


@lru_cache(maxsize=256)
def node_names(vtk_type: int, size: int) -> tuple[frozenset[int], ...]:
    if vtk_type in CELL_TYPES:
        return tuple(frozenset(node) for node in CELL_TYPES[vtk_type].nodes)
    n = corner_count(vtk_type, size)
    middles = [frozenset((i, (i + 1) % n)) for i in range(n)] if size > n else []
    return (*(frozenset((i,)) for i in range(n)), *middles)


@lru_cache(maxsize=256)
def facet_rules(vtk_type: int, size: int) -> tuple[FacetRule, ...]:
    """The facets of the reference cell of this type with `size` nodes."""
    cycles: tuple[Corners, ...]
    if vtk_type in CELL_TYPES:
        shape = CELL_TYPES[vtk_type].shape
        cycles = ((), ((0,), (1,)), shape.edges, shape.faces)[shape.dimension]
    else:
        n = corner_count(vtk_type, size)
        cycles = tuple((i, (i + 1) % n) for i in range(n))
    return tuple(facet_rule(cycle, node_names(vtk_type, size)) for cycle in cycles)


@lru_cache(maxsize=32)
def _polynomials(vtk_type: int) -> tuple[NDArray[np.int64], Floats]:
    """Exponents (d, q) of monomials, and their factors (s, q) in each shape function.

    The factors invert the matrix of monomials at the reference positions of the nodes.
    """
    cell = CELL_TYPES[vtk_type]
    names = {frozenset(node) for node in cell.nodes}
    where = reference_nodes(vtk_type)
    centre = frozenset(range(corner_count(vtk_type, 0)))
    powers: list[Corners]
    if cell.dimension == 1:
        powers = [(0,), (1,), *([(2,)] if centre in names else [])]
    else:
        powers = [(0, 0), (1, 0), (0, 1)]
        if len(centre) == 3:
            powers += [(2, 0), (1, 1), (0, 2)] if frozenset((0, 1)) in names else []
            powers += [(2, 1), (1, 2)] if centre in names else []
        else:
            powers += [(1, 1)]
            powers += [(2, 0), (2, 1)] if frozenset((0, 1)) in names else []
            powers += [(0, 2), (1, 2)] if frozenset((1, 2)) in names else []
            powers += [(2, 2)] if centre in names else []
    exponents = np.array(powers, dtype=np.int64).T
    matrix = np.prod(where.T[:, :, None] ** exponents[:, None, :], axis=0)
    # The pseudo-inverse gives both cubic terms of a triangle with a centre node one factor.
    return exponents, np.linalg.pinv(matrix).T


@lru_cache(maxsize=32)
def reference_nodes(vtk_type: int) -> Floats:
    """Parametric positions of the nodes, (s, d), on VTK's reference cell.

    >>> reference_nodes(21).tolist()
    [[0.0], [1.0], [0.5]]
    """
    cell = CELL_TYPES[vtk_type]
    positions: dict[int, list[list[float]]] = {
        1: [[]], 2: [[0.0], [1.0]], 3: [[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]],
        4: [[0.0, 0.0], [1.0, 0.0], [1.0, 1.0], [0.0, 1.0]],
    }  # fmt: skip
    at = np.array(positions[len(cell.shape.mirrored)])
    return np.stack([at[list(node)].mean(axis=0) for node in cell.nodes])


def shape_functions(vtk_type: int, xi: Floats) -> tuple[Floats, Floats]:
    """Shape functions (k, s) and their derivatives (k, s, d) at parametric points `xi`, (k, d).

    For the VTK types of facets but the polygon, which has none.

    >>> shape_functions(9, np.array([[0.5, 0.5]]))[0].round(12).tolist()
    [[0.25, 0.25, 0.25, 0.25]]
    """
    if CELL_TYPES[vtk_type].dimension == 0:
        return np.ones((len(xi), 1)), np.zeros((len(xi), 1, 0))
    exponents, factors = _polynomials(vtk_type)
    ones, zeros = np.ones(len(xi)), np.zeros(len(xi))
    value = [np.stack([ones, x, x * x])[e] for x, e in zip(xi.T, exponents, strict=True)]
    slope = [np.stack([zeros, ones, 2.0 * x])[e] for x, e in zip(xi.T, exponents, strict=True)]
    if len(value) == 1:
        return (factors @ value[0]).T, (factors @ slope[0]).T[:, :, None]
    both = [factors @ (slope[0] * value[1]), factors @ (value[0] * slope[1])]
    return (factors @ (value[0] * value[1])).T, np.stack(both, axis=2).transpose(1, 0, 2)


def quadrature(dimension: int, corners: int) -> Iterator[tuple[Floats, float]]:
    """Points and weights on the reference facet; a triangle is a square with one side collapsed."""
    ticks, weights = np.polynomial.legendre.leggauss(3)
    line = list(zip((ticks + 1.0) / 2.0, weights / 2.0, strict=True))
    if dimension == 1:
        yield from ((np.array([x]), float(w)) for x, w in line)
        return
    for x, wx in line:
        narrow = 1.0 - x if corners == 3 else 1.0
        yield from ((np.array([x, y * narrow]), float(wx * wy * narrow)) for y, wy in line)
