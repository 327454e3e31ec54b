"""The foot of a point on the surface of a copy, where faces do not pair node to node.

A point of the sector is dropped on the nearest facet of a copy; the facet's shape functions at the
foot are the weights with which the facet's nodes stand for a node there. The copy is never made:
the point is carried back to the sector instead.

>>> import numpy as np
>>> from expander.checking.facets import outer_facets
>>> mesh = Mesh(
...     np.array([[0.0, 0, 0], [2, 0, 0], [2, 1, 0], [0, 1, 0]]),
...     np.array([0, 1, 2, 3]), np.array([0, 4]), np.array([9], dtype=np.uint8),
... )
>>> up = Placement(np.eye(3), np.array([0.0, 1.0, 0.0]))  # the copy stands on the square
>>> found = opposite(np.array([[0.5, 1.0, 0.0]]), mesh, outer_facets(mesh), up, reach=0.1)
>>> found.partners.tolist(), found.weights.tolist()
([[0, 1]], [[0.75, 0.25]])
>>> interpolate(found, np.array([[8.0], [4.0], [0.0], [0.0]])).tolist()
[[7.0]]
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.spatial import KDTree

from expander.checking.facets import Facets, normals
from expander.checking.nearest import nearest_on
from expander.model import Mesh
from expander.placements import Floats, Placement
from expander.topology import Ints

Bools = NDArray[np.bool_]

FACING = -0.5  # faces whose outward normals have a larger scalar product do not face each other
_FIRST_CANDIDATES = 4
_NO_WEIGHT = 1e-12  # round-off: at a node only that node counts


@dataclass(frozen=True, eq=False)
class Opposite:
    """What lies opposite each of k points.

    Attributes
    ----------
    found : (k,) whether there is a facet within reach.
    partners : (k, m) nodes of the sector, padded with 0.
    weights : (k, m) shape functions at the foot, sum 1, padded with 0; all 0 where not found.
    gap : (k,) distance from the point to the foot; infinite where not found.
    facet : (k,) number of the facet, counted through the blocks; -1 where not found.
    offset : (k, 3) from the foot to the point, turned back to the sector.
    """

    found: Bools
    partners: Ints
    weights: Floats
    gap: Floats
    facet: Ints
    offset: Floats


def opposite(
    points_here: ArrayLike,
    mesh: Mesh,
    facets: list[Facets],
    placement: Placement,
    reach: float,
    facing: Floats | None = None,
) -> Opposite:
    """The nearest point of the copy's facets to each point.

    The foot lies within the facet, or on its rim if the perpendicular misses all facets; then the
    gap counts the distance aside too.

    Parameters
    ----------
    points_here : (k, 3) in the model's length unit.
    facets : facets of the sector whose images by `placement` may lie opposite.
    reach : largest gap.
    facing : (k, 3) unit normals out of the body at the points; then only facets whose image faces
        the point (scalar product of both normals below -0.5) are taken.
    """
    points = placement.inverse().apply(points_here)
    towards = None if facing is None else facing @ placement.Q
    k, width = len(points), max((f.nodes.shape[1] for f in facets), default=1)
    best = Opposite(
        np.zeros(k, dtype=bool),
        np.zeros((k, width), dtype=np.int64),
        np.zeros((k, width)),
        np.full(k, np.nextafter(reach, np.inf)),
        np.full(k, -1, dtype=np.int64),
        np.zeros((k, 3)),
    )
    # Nearer than round-off of the coordinates there is nothing to look for.
    enough = 16.0 * np.finfo(float).eps * max(1e-300, float(np.abs(mesh.bounds).max()))
    start = 0
    for f in facets if k else ():
        out = None if towards is None else normals(mesh, f)
        for group in _of_like_size(mesh, f, start):
            _improve(best, points, group, enough, towards, out)
        start += len(f)
    best.gap[~best.found] = np.inf
    return best


@dataclass(frozen=True, eq=False)
class _Group:
    """Facets of about one size: numbers within and through the blocks, and balls and boxes."""

    rows: Ints
    numbers: Ints
    nodes: Ints
    vtk_type: int
    at: Floats
    centre: Floats
    radius: float
    low: Floats
    high: Floats


def _of_like_size(mesh: Mesh, f: Facets, start: int) -> Iterator[_Group]:
    """Facets whose sizes differ by a factor of four at most, so that one radius serves them all."""
    at = mesh.points[f.nodes].astype(float)
    low, high = at.min(axis=1), at.max(axis=1)
    centre = (low + high) / 2.0
    # A curved facet bulges out of the box of its nodes, by an eighth of its size for an arc.
    half = (high - low) / 2.0
    margin = 0.25 * half.max(axis=1) if f.nodes.shape[1] > f.corners else np.zeros(len(f))
    radius = np.linalg.norm(half, axis=1) + margin
    level = np.floor(np.log2(np.maximum(radius, 1e-300)) / 2.0)
    for value in np.unique(level):
        rows = np.flatnonzero(level == value)
        yield _Group(
            rows, rows + start, f.nodes[rows], f.vtk_type, at[rows], centre[rows],
            float(radius[rows].max()), (low - margin[:, None])[rows],
            (high + margin[:, None])[rows],
        )  # fmt: skip


def _improve(
    best: Opposite,
    points: Floats,
    group: _Group,
    enough: float,
    towards: Floats | None,
    out: Floats | None,
) -> None:
    """Enter what this group has nearer than the best so far.

    Candidates come by the distance of their centres, a few at a time; a point is done when no
    further ball can reach it.
    """
    tree = KDTree(group.centre)
    bound = float(best.gap.max()) + group.radius
    todo = np.flatnonzero(best.gap > enough)
    begin, end = 0, min(_FIRST_CANDIDATES, len(group.rows))
    while len(todo) and begin < end:
        ranks = np.arange(begin + 1, end + 1)
        found = tree.query(points[todo], k=ranks, distance_upper_bound=bound)
        distance, near = np.asarray(found[0]), np.asarray(found[1])
        for d, c in zip(distance.T, near.T, strict=True):
            wanted = np.isfinite(d) & (d - group.radius < best.gap[todo])
            wanted &= best.gap[todo] > enough
            rows, c = todo[wanted], c[wanted]
            p = points[rows]
            outside = np.maximum(np.maximum(group.low[c] - p, p - group.high[c]), 0.0)
            close = np.einsum("ki,ki->k", outside, outside) < best.gap[rows] ** 2
            if towards is not None and out is not None:
                close &= np.einsum("ki,ki->k", out[group.rows[c]], towards[rows]) < FACING
            _enter(best, rows[close], p[close], group, c[close])
        last = distance[:, -1]
        left = np.isfinite(last) & (last - group.radius < best.gap[todo])
        todo = todo[left & (best.gap[todo] > enough)]
        begin, end = end, min(2 * end, len(group.rows))


def _enter(best: Opposite, rows: Ints, points: Floats, group: _Group, c: Ints) -> None:
    if not len(rows):
        return
    weights = nearest_on(points, group.at[c], group.vtk_type)
    weights[np.abs(weights) < _NO_WEIGHT] = 0.0
    weights /= weights.sum(axis=1, keepdims=True)
    offset = points - np.einsum("ks,ksi->ki", weights, group.at[c])
    gap = np.sqrt(np.einsum("ki,ki->k", offset, offset))
    nearer = gap < best.gap[rows]
    rows, c, size = rows[nearer], c[nearer], group.nodes.shape[1]
    best.found[rows] = True
    best.partners[rows] = 0
    best.partners[rows, :size] = group.nodes[c]
    best.weights[rows] = 0.0
    best.weights[rows, :size] = weights[nearer]
    best.gap[rows] = gap[nearer]
    best.facet[rows] = group.numbers[c]
    best.offset[rows] = offset[nearer]


def interpolate(opposite: Opposite, values: NDArray[np.inexact]) -> NDArray[np.inexact]:
    """Nodal `values`, (n, c), at the feet, (k, c), as stored on the sector; NaN where not found.

    A node of weight zero does not count, whatever its value.
    """
    shape = (len(opposite.found), *values.shape[1:])
    total = np.zeros(shape, dtype=np.result_type(values, float))
    for nodes, weights in zip(opposite.partners.T, opposite.weights.T, strict=True):
        used = np.flatnonzero(weights)
        factor = weights[used].reshape(-1, *(1,) * (values.ndim - 1))
        total[used] += factor * values[nodes[used]]
    total[~opposite.found] = np.nan
    return total
