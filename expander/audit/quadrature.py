"""Shape functions and quadrature of every cell type.

Shape functions follow from the position of the nodes on the reference cell and the polynomials
that they span: the matrix of these polynomials at the nodes (Vandermonde's) is inverted. On faces
they are those of the neighbours, so cells that share nodes fill space without gaps.

Polygons, and prisms over them, are fans about the mean of their corners. Pyramids take rational
terms, here with ``l = 1 - z``: five nodes ``x y / l``; thirteen nodes G. Bedrosian (Shape functions
and integration formulas for three-dimensional finite element analysis, Int. J. Numer. Methods Eng.
35, 1992), which VTK does not take and which alone fit the faces of quadratic tetrahedra; nineteen
nodes as VTK.

>>> middle = np.zeros((1, 2))
>>> values, slopes = shape_functions(CELL_TYPES[9], middle)
>>> values.tolist()
[[0.25, 0.25, 0.25, 0.25]]
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import lru_cache
from itertools import product

import numpy as np
from scipy.special import roots_jacobi

from expander.cells import (
    CELL_TYPES,
    HEXAHEDRON,
    LINE,
    PYRAMID,
    QUAD,
    QUADRATIC_POLYGON,
    TETRA,
    TRIANGLE,
    WEDGE,
    CellType,
)
from expander.placements import Floats

_SQUARE = [(-1, -1), (1, -1), (1, 1), (-1, 1)]
_HALF_SQUARE = [(0, 0), (1, 0), (0, 1)]

# Corners of the reference cells; prisms over polygons are fans and have none.
CORNERS: dict[str, Floats] = {
    shape.name: np.array(corners, dtype=float)
    for shape, corners in (
        (LINE, [(-1,), (1,)]),
        (TRIANGLE, _HALF_SQUARE),
        (QUAD, _SQUARE),
        (TETRA, [(0, 0, 0), (1, 0, 0), (0, 1, 0), (0, 0, 1)]),
        (HEXAHEDRON, [(*c, z) for z in (-1, 1) for c in _SQUARE]),
        (WEDGE, [(*c, z) for z in (-1, 1) for c in _HALF_SQUARE]),
        (PYRAMID, [*((*c, 0) for c in _SQUARE), (0, 0, 1)]),
    )
}

# A polynomial: factors by exponents of the coordinates and, last, of l, which is 1 - x - y on
# triangles and 1 - z on pyramids.
Exponents = tuple[int, ...]
Polynomial = dict[Exponents, float]


def _monomials(exponents: Iterable[Exponents]) -> list[Polynomial]:
    return [{(*e, 0): 1.0} for e in sorted(set(exponents))]


def _total(dimension: int, degree: int) -> list[Exponents]:
    return [e for e in _each(dimension, degree) if sum(e) <= degree]


def _each(dimension: int, degree: int) -> list[Exponents]:
    return list(product(range(degree + 1), repeat=dimension))


def _serendipity(dimension: int) -> list[Exponents]:
    """Superlinear degree 2 (D. N. Arnold, G. Awanou, The serendipity family, 2011)."""
    return [e for e in _each(dimension, 2) if sum(k for k in e if k > 1) <= 2]


def _times(first: list[Exponents], second: list[Exponents]) -> list[Exponents]:
    return [a + b for a in first for b in second]


def _pyramids() -> dict[int, list[Polynomial]]:
    # r = x / l and s = y / l run from -1 to 1 at every height.
    twisted: list[Polynomial] = [{(1, 1, 0, -1): 1.0}]
    sides: list[Polynomial] = [{(2, 1, 0, -1): 1.0}, {(1, 2, 0, -1): 1.0}]
    linear = _monomials(_total(3, 1)) + twisted
    quadratic = _monomials(_total(3, 2)) + twisted + sides
    faces: list[Polynomial] = [
        {(2, 2, 0, -2): 1.0},
        {(2, 0, 1, 0): 1.0, (2, 2, 1, -2): -1.0},  # r^2 (1 - s^2) z l^2
        {(0, 2, 1, 0): 1.0, (2, 2, 1, -2): -1.0},
        {(1, 0, 1, 1): 1.0, (1, 2, 1, -1): -1.0},  # r (1 - s^2) z l^2
        {(0, 1, 1, 1): 1.0, (2, 1, 1, -1): -1.0},
    ]
    # (1 - r^2) (1 - s^2) z l, zero on every face
    inside: Polynomial = {
        (0, 0, 1, 1): 1.0,
        (2, 0, 1, -1): -1.0,
        (0, 2, 1, -1): -1.0,
        (2, 2, 1, -3): 1.0,
    }
    return {14: linear, 27: quadratic, 37: [*quadratic, *faces, inside]}


_SPANS: dict[int, list[Polynomial]] = {
    3: _monomials(_total(1, 1)),
    5: _monomials(_total(2, 1)),
    9: _monomials(_each(2, 1)),
    10: _monomials(_total(3, 1)),
    12: _monomials(_each(3, 1)),
    13: _monomials(_times(_total(2, 1), _total(1, 1))),
    21: _monomials(_total(1, 2)),
    22: _monomials(_total(2, 2)),
    23: _monomials(_serendipity(2)),
    24: _monomials(_total(3, 2)),
    25: _monomials(_serendipity(3)),
    26: _monomials(
        _times(_total(2, 2), _total(1, 1)) + _times(_total(2, 1), _total(1, 2)),
    ),
    28: _monomials(_each(2, 2)),
    29: _monomials(_each(3, 2)),
    30: _monomials(_times(_total(1, 2), _total(1, 1))),
    31: _monomials(_times(_total(2, 2), _total(1, 1))),
    32: _monomials(_times(_total(2, 2), _total(1, 2))),
    33: _monomials(_times(_serendipity(2), _total(1, 2))),
    34: [*_monomials(_total(2, 2)), {(1, 1, 1): 1.0}],
    **_pyramids(),
}


def reference_nodes(cell: CellType) -> Floats:
    """Positions of the nodes on the reference cell, (nodes, dimension)."""
    corners = CORNERS[cell.shape.name]
    nodes = np.array([corners[list(node)].mean(axis=0) for node in cell.nodes])
    if cell.shape is PYRAMID:  # the centre of a pyramid is not the mean of its corners
        nodes[[len(node) == len(corners) for node in cell.nodes]] = (0.0, 0.0, 0.25)
    return nodes


def _powers(x: Floats, e: Exponents) -> Floats:
    """``x^a y^b z^c l^d`` for x (q, dimension + 1); zero at the apex, where rational terms end."""
    value = np.ones(len(x))
    for column, exponent in enumerate(e):
        if exponent > 0:
            value = value * x[:, column] ** exponent
    if e[-1] < 0:
        value = np.divide(value, x[:, -1] ** -e[-1], out=np.zeros(len(x)), where=x[:, -1] != 0.0)
    return value


def _evaluate(cell: CellType, x: Floats) -> tuple[Floats, Floats]:
    """The spanning polynomials, (q, nodes), and their derivatives, (q, nodes, dimension)."""
    lost = {PYRAMID.name: (0.0, 0.0, 1.0), TRIANGLE.name: (1.0, 1.0)}  # l = 1 - lost . x
    part = np.array(lost.get(cell.shape.name, (0.0,) * cell.dimension))
    full = np.column_stack([x, 1.0 - x @ part])
    values = np.zeros((len(x), len(cell.nodes)))
    slopes = np.zeros((len(x), len(cell.nodes), cell.dimension))
    for k, polynomial in enumerate(_SPANS[cell.vtk_id]):
        for e, factor in polynomial.items():
            values[:, k] += factor * _powers(full, e)
            for column, exponent in enumerate(e):
                if exponent == 0:
                    continue
                lower = tuple(d - (c == column) for c, d in enumerate(e))
                slope = factor * exponent * _powers(full, lower)
                if column < cell.dimension:
                    slopes[:, k, column] += slope
                else:
                    slopes[:, k] -= np.outer(slope, part)
    return values, slopes


@lru_cache(maxsize=64)
def _coefficients(vtk_id: int) -> Floats:
    """(polynomials, nodes): each shape function in terms of the spanning polynomials."""
    cell = CELL_TYPES[vtk_id]
    return np.asarray(np.linalg.inv(_evaluate(cell, reference_nodes(cell))[0]))


def shape_functions(cell: CellType, x: Floats) -> tuple[Floats, Floats]:
    """Shape functions at points of the reference cell (see `CORNERS`).

    Parameters
    ----------
    x : (q, dimension), not the apex of a pyramid.

    Returns
    -------
    Values, (q, nodes), and derivatives by the reference coordinates, (q, nodes, dimension).
    """
    values, slopes = _evaluate(cell, x)
    C = _coefficients(cell.vtk_id)
    return values @ C, np.einsum("qkd,kn->qnd", slopes, C)


@dataclass(frozen=True, eq=False)
class Rule:
    """A quadrature rule of one cell type, with the shape functions at its points.

    Attributes
    ----------
    weights : (q,), which add up to the measure of the reference cell.
    values : (q, nodes) shape functions.
    slopes : (q, nodes, dimension) their derivatives.
    """

    weights: Floats
    values: Floats
    slopes: Floats

    def fan(self, parts: list[Floats]) -> Rule:
        """This rule on every part of a larger cell; each of `parts`, (own nodes, nodes of the
        larger cell), makes the nodes of a part as means of the larger cell's nodes."""
        return Rule(
            np.tile(self.weights, len(parts)),
            np.concatenate([self.values @ p for p in parts]),
            np.concatenate([np.einsum("qkd,kn->qnd", self.slopes, p) for p in parts]),
        )


Points = tuple[Floats, Floats]  # positions (q, dimension) and weights (q,)


def _segment(n: int) -> Points:
    x, w = roots_jacobi(n, 0.0, 0.0)
    return x[:, None], w


def _prism(base: Points, n: int) -> Points:
    z, w = _segment(n)
    x = np.column_stack([np.repeat(base[0], n, axis=0), np.tile(z, (len(base[0]), 1))])
    return x, np.outer(base[1], w).ravel()


def _cone(base: Points, apex: Floats, measure: float, n: int) -> Points:
    """Gauss and Jacobi's rule towards the apex, weighted with the size of the slices."""
    t, w = roots_jacobi(n, float(apex.size - 1), 0.0)
    u = (1.0 + t) / 2.0
    x = base[0][:, None] * (1.0 - u)[:, None] + u[:, None] * apex
    weights = np.outer(base[1], w).ravel()
    return x.reshape(-1, apex.size), weights * (measure / weights.sum())


def gauss(shape: str, n: int) -> Points:
    """Points, (q, dimension), and weights, (q,), on a reference cell, n points each way.

    Exact for polynomials of degree ``2 n - 1`` in each direction. The points go over into
    themselves under the mirror of `cells.Shape`, so a cell and its mirror image are integrated
    alike to round-off, curved ones too.

    >>> round(float(gauss("tetrahedron", 2)[1].sum()), 12)
    0.166666666667
    """
    if shape == LINE.name:
        return _segment(n)
    if shape == TRIANGLE.name:  # a cone over the side opposite to corner 0, which mirroring keeps
        x, w = _segment(n)
        return _cone((np.hstack([1.0 - x, 1.0 + x]) / 2.0, w), np.zeros(2), 1.0 / 2.0, n)
    if shape == QUAD.name:
        return _prism(_segment(n), n)
    if shape == WEDGE.name:
        return _prism(gauss(TRIANGLE.name, n), n)
    if shape == HEXAHEDRON.name:
        return _prism(gauss(QUAD.name, n), n)
    side = TRIANGLE.name if shape == TETRA.name else QUAD.name
    x, w = gauss(side, n)
    measure = 1.0 / 6.0 if shape == TETRA.name else 4.0 / 3.0
    return _cone((np.column_stack([x, np.zeros(len(x))]), w), CORNERS[shape][-1], measure, n)


def _points_each_way(cell: CellType) -> int:
    """Enough for position times position times Jacobian of the cell, curved or not."""
    simplex = cell.shape.name in (LINE.name, TRIANGLE.name, TETRA.name)
    if len(cell.nodes) == len(cell.shape.mirrored):
        return 2 if simplex else 3
    bubbles = {34: 6, 37: 7}  # cubic in the plane; cubic towards the apex
    return bubbles.get(cell.vtk_id, 4 if cell.shape is TETRA else 5)


@lru_cache(maxsize=256)
def rule(vtk_id: int, size: int) -> Rule:
    """The rule for a cell type; `size` is the number of nodes, which polygons need.

    Second moments are exact for all solid cells and for plane cells. Of curved shells and lines,
    whose measure is no polynomial, quadratic ones are integrated with 5 points each way (degree 9).

    >>> rule(12, 8).values.shape
    (27, 8)
    """
    cell = CELL_TYPES.get(vtk_id)
    if cell is None:
        around = np.arange(size)
        if vtk_id == QUADRATIC_POLYGON:  # corners first in the cell, in turn around it
            around = around.reshape(2, -1).T.ravel()
        return rule(5, 3).fan(_triangles(around))
    if cell.shape.name not in CORNERS:
        sides = size // 2
        levels = np.eye(2)
        return rule(13, 6).fan(
            [np.asarray(np.kron(levels, t), dtype=float) for t in _triangles(np.arange(sides))]
        )
    x, weights = gauss(cell.shape.name, _points_each_way(cell))
    return Rule(weights, *shape_functions(cell, x))


def _triangles(around: np.typing.NDArray[np.int64]) -> list[Floats]:
    """The triangles of a fan about the mean of the corners, each (3, size)."""
    size = len(around)
    one = np.eye(size)
    centre = np.full(size, 1.0 / size)
    pairs = zip(around.tolist(), np.roll(around, -1).tolist(), strict=True)
    return [np.stack([centre, one[a], one[b]]) for a, b in pairs]
