"""The nearest point of a facet, as the weights that its shape functions have there."""

from __future__ import annotations

import numpy as np

from expander.cells import CELL_TYPES, POLYGON
from expander.checking.reference import corner_count, facet_rules, reference_nodes, shape_functions
from expander.placements import Floats

_SLACK = 1e-6  # a foot this far outside, as part of the facet, is inside
_STEPS = 25
_SETTLED = 1e-12
_AFFINE = (3, 5)  # their map is linear: one step is exact


def nearest_on(points: Floats, at: Floats, vtk_type: int) -> Floats:
    """Shape functions at the point of each facet that is nearest to its point.

    Gauss-Newton on the squared distance, which finds the nearest point if the facet is flat or the
    distance small against its radius of curvature. Where the foot of the perpendicular lies
    outside, the facet's edges are searched instead. A polygon is cut into triangles about the mean
    of its corners.

    Parameters
    ----------
    points : (k, 3), one for each facet. at : (k, s, 3) nodes of the facets.

    Returns
    -------
    (k, s), each row of sum 1.

    Examples
    --------
    >>> corners = np.array([[[0.0, 0, 0], [4, 0, 0], [0, 4, 0]]])
    >>> nearest_on(np.array([[1.0, 1.0, 3.0]]), corners, 5).round(12).tolist()
    [[0.5, 0.25, 0.25]]
    >>> nearest_on(np.array([[3.0, -9.0, 0.0]]), corners, 5).round(12).tolist()
    [[0.25, 0.75, 0.0]]
    """
    if vtk_type == POLYGON:
        return _on_polygon(points, at)
    dimension = CELL_TYPES[vtk_type].dimension
    if dimension == 0:
        return np.ones((len(points), 1))
    low, high = (0.0, 1.0) if dimension == 1 else (-0.5, 1.5)  # a face's edges are searched below
    corners = corner_count(vtk_type, at.shape[1])
    start = reference_nodes(vtk_type)[:corners].mean(axis=0)
    xi = np.repeat(start[None], len(points), axis=0)
    step, square = np.zeros_like(xi), np.full(len(points), np.inf)
    active = np.arange(len(points))
    for _ in range(_STEPS):
        trial = np.clip(xi[active] + step[active], low, high)
        value, slope = shape_functions(vtk_type, trial)
        off = points[active] - np.einsum("ks,ksi->ki", value, at[active])
        distance = np.einsum("ki,ki->k", off, off)
        nearer = distance < square[active]
        rows = active[nearer]
        xi[rows], square[rows] = trial[nearer], distance[nearer]
        tangents = np.einsum("ksd,ksi->dki", slope[nearer], at[rows])
        step[rows] = _step(tangents, off[nearer])
        if vtk_type in _AFFINE:
            xi = np.clip(xi + step, low, high)
            break
        step[active[~nearer]] /= 4.0  # a step that leads away was too long
        active = active[np.abs(step[active]).max(axis=1) > _SETTLED]
        if not len(active):
            break
    weights, _ = shape_functions(vtk_type, xi)
    if dimension == 2:
        beyond = xi.sum(axis=1) - 1.0 if corners == 3 else xi.max(axis=1) - 1.0
        outside = np.flatnonzero((beyond > _SLACK) | (xi.min(axis=1) < -_SLACK))
        if len(outside):
            weights[outside] = _on_edges(points[outside], at[outside], vtk_type)
    return weights


def _step(tangents: Floats, off: Floats) -> Floats:
    """Change of the parameters, (k, d), that takes a linear map with these tangents to the foot."""
    along = np.einsum("dki,ki->dk", tangents, off)
    metric = np.einsum("dki,eki->dek", tangents, tangents)
    tiny = np.finfo(float).tiny
    if len(tangents) == 1:
        return np.asarray((along / np.maximum(metric[0], tiny)).T)
    a, b, c = metric[0, 0], metric[0, 1], metric[1, 1]
    # Where a corner is so distorted that the tangents are parallel, the step stays bounded.
    determinant = np.maximum(a * c - b * b, 1e-14 * a * c + tiny)
    step = [c * along[0] - b * along[1], a * along[1] - b * along[0]]
    return np.asarray((np.stack(step) / determinant).T)


def _on_edges(points: Floats, at: Floats, vtk_type: int) -> Floats:
    best, least = np.zeros(at.shape[:2]), np.full(len(points), np.inf)
    for edge in facet_rules(vtk_type, at.shape[1]):
        on_edge = nearest_on(points, at[:, edge.columns], edge.vtk_type)
        weights = np.zeros_like(best)
        weights[:, edge.columns] = on_edge
        _keep_nearer(points, at, weights, best, least)
    return best


def _on_polygon(points: Floats, at: Floats) -> Floats:
    best, least = np.zeros(at.shape[:2]), np.full(len(points), np.inf)
    size = at.shape[1]
    middle = at.mean(axis=1)
    for i in range(size):
        j = (i + 1) % size
        fan = nearest_on(points, np.stack([middle, at[:, i], at[:, j]], axis=1), 5)
        weights = np.repeat(fan[:, :1] / size, size, axis=1)
        weights[:, i] += fan[:, 1]
        weights[:, j] += fan[:, 2]
        _keep_nearer(points, at, weights, best, least)
    return best


def _keep_nearer(points: Floats, at: Floats, weights: Floats, best: Floats, least: Floats) -> None:
    """Enter those of the `weights` that are nearer to the points than the `least` so far."""
    off = points - np.einsum("ks,ksi->ki", weights, at)
    square = np.einsum("ki,ki->k", off, off)
    nearer = square < least
    best[nearer], least[nearer] = weights[nearer], square[nearer]
