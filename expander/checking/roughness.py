"""How far a smooth field may be from its interpolation on a facet, judged by the facets around.

The values on two neighbouring facets tell how the field bends. On linear facets their gradients
differ by about ``h f''``, where interpolation misses ``h^2 f'' / 8``: a quarter of the size times
half the difference. On quadratic facets the second derivatives differ by ``h f'''``, where it
misses ``h^3 f''' sqrt(3) / 216`` (remainder of Lagrange's formula with nodes at 0, h/2, h). That
neighbours stand for the unknown derivative is common practice in a posteriori estimates.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from expander.cells import CELL_TYPES
from expander.checking.facets import Facets, facets_of, normals, pairs, unit_rows
from expander.checking.reference import reference_nodes, shape_functions
from expander.model import Mesh
from expander.placements import Floats
from expander.topology import Ints

_SMOOTH = np.cos(np.deg2rad(30.0))  # feature angle, common practice: over it facets do not compare
_LINEAR_FACTOR = 1.0 / 8.0
_QUADRATIC_FACTOR = np.sqrt(3.0) / 216.0
_QUADRATIC = (21, 22, 23, 28, 34)  # mid-side nodes on all edges


def roughness(mesh: Mesh, facets: list[Facets], values: NDArray[np.inexact]) -> Floats:
    """Estimated error of interpolation on each facet, (f,), counted through the blocks.

    For a linear facet ``sqrt(d) D h / 8``: D is the largest difference between its surface
    gradient and that of a facet beside it, h the longest distance of its corners and d its
    dimension. For a quadratic facet the same with second derivatives, ``sqrt(d) D h^2 sqrt(3) /
    216``. Zero for a field linear in space (quadratic on quadratic facets) where the surface is
    flat and the sides straight; for a curved surface it contains the height of the arc over the
    facet. Also zero for a facet with no neighbour within 30 degrees: there nothing is known.

    Parameters
    ----------
    values : (n, c) nodal values; components are taken together by their root of squares.
    """
    count = sum(len(f) for f in facets)
    first, second = _neighbours(mesh, facets)
    size = np.zeros(count)
    gradient = np.zeros((count, values.shape[1], 3), dtype=np.result_type(values, float))
    second_order = np.zeros(count, dtype=bool)
    bend: NDArray[np.inexact] | None = None
    factor, start = np.zeros(count), 0
    for f in facets:
        span = slice(start, start + len(f))
        start += len(f)
        if f.dimension == 0:
            continue
        fit = _Fit(mesh, f)
        size[span] = fit.size
        gradient[span] = fit.slope(values[f.nodes[:, : f.corners]])
        factor[span] = np.sqrt(f.dimension) * _LINEAR_FACTOR * fit.size
        if f.vtk_type in _QUADRATIC:
            if bend is None:
                bend = np.zeros((count, values.shape[1], 3, 3), dtype=gradient.dtype)
            bend[span] = fit.slope(_corner_gradients(mesh, f, values))
            factor[span] = np.sqrt(f.dimension) * _QUADRATIC_FACTOR * fit.size**2
            second_order[span] = True
    worst = np.zeros(count)
    both = second_order[first] & second_order[second]
    _largest(worst, first[~both], second[~both], gradient, second_order)
    if bend is not None:
        _largest(worst, first[both], second[both], bend, ~second_order)
    return np.asarray(worst * factor)


def surface_slopes(mesh: Mesh, facets: list[Facets], values: NDArray[np.inexact]) -> Floats:
    """Mean slope of nodal values (n, c) along each facet, (f, c, 3), counted through the blocks."""
    found = [np.zeros((0, values.shape[1], 3), dtype=np.result_type(values, float))]
    for f in facets:
        if f.dimension == 0:
            found.append(np.zeros((len(f), values.shape[1], 3)))
        else:
            found.append(_Fit(mesh, f).slope(values[f.nodes[:, : f.corners]]))
    return np.concatenate(found)


def _largest(
    worst: Floats, i: Ints, j: Ints, values: NDArray[np.inexact], skip: NDArray[np.bool_]
) -> None:
    """Enter the size of the difference of neighbours i, j, but not where `skip` (f,) says."""
    squares = np.abs(values[i] - values[j]) ** 2
    difference = np.sqrt(squares.sum(axis=tuple(range(1, squares.ndim))))
    for side in (i, j):
        kept = ~skip[side]
        np.maximum.at(worst, side[kept], difference[kept])


def _neighbours(mesh: Mesh, facets: list[Facets]) -> tuple[Ints, Ints]:
    """Numbers of facets beside each other on a smooth surface, of which they are the cells."""
    nodes = [f.nodes.ravel() for f in facets]
    sizes = [np.full(len(f), f.nodes.shape[1]) for f in facets]
    types = [np.full(len(f), f.vtk_type) for f in facets]
    none = np.zeros(0, dtype=np.int64)
    surface = Mesh(
        mesh.points,
        np.concatenate([none, *nodes]),
        np.concatenate([[0], np.cumsum(np.concatenate([none, *sizes]))]).astype(np.int64),
        np.concatenate([none, *types]).astype(np.uint8),
    )
    beside = pairs(surface, facets_of(surface))
    first = np.concatenate([none, *(p.first for p in beside)])
    second = np.concatenate([none, *(p.second for p in beside)])
    out = np.concatenate([np.zeros((0, 3)), *(normals(mesh, f) for f in facets)])
    smooth = np.einsum("ki,ki->k", out[first], out[second]) > _SMOOTH
    return first[smooth], second[smooth]


class _Fit:
    """Slopes of values at the corners of facets along the facets, by least squares."""

    def __init__(self, mesh: Mesh, f: Facets) -> None:
        p = mesh.points[f.nodes[:, : f.corners]].astype(float)
        steps = p[:, :, None] - p[:, None]
        self.size = np.sqrt(np.einsum("kabi,kabi->kab", steps, steps).max(axis=(1, 2)))
        if f.dimension == 1:
            along = unit_rows(p[:, 1] - p[:, 0])
            tangent = np.einsum("ki,kj->kij", along, along)
        else:
            normal = normals(mesh, f)
            tangent = np.eye(3) - np.einsum("ki,kj->kij", normal, normal)
        off_centre = p - p.mean(axis=1, keepdims=True)
        self._arms = np.einsum("kai,kij->kaj", off_centre, tangent)
        moment = np.einsum("kai,kaj->kij", self._arms, self._arms)
        trace = np.einsum("kii->k", moment)
        trace[trace == 0.0] = 1.0  # a facet without extent has no slope
        # Across the facet the moment is made regular; the arms have no part there.
        whole = moment + trace[:, None, None] * (np.eye(3) - tangent)
        whole += 1e-12 * trace[:, None, None] * np.eye(3)
        self._inverse = np.linalg.inv(whole)

    def slope(self, values: NDArray[np.inexact]) -> NDArray[np.inexact]:
        """Of values (k, a, ...) at the corners: (k, ..., 3)."""
        centred = values - values.mean(axis=1, keepdims=True)
        return np.asarray(np.einsum("ka...,kai,kij->k...j", centred, self._arms, self._inverse))


def _corner_gradients(mesh: Mesh, f: Facets, values: NDArray[np.inexact]) -> NDArray[np.inexact]:
    """Surface gradient at each corner of quadratic facets, (k, a, c, 3)."""
    corners = reference_nodes(f.vtk_type)[: f.corners]
    _, slopes = shape_functions(f.vtk_type, corners)
    tangents = np.einsum("asd,ksi->kadi", slopes, mesh.points[f.nodes].astype(float))
    metric = np.einsum("kadi,kaei->kade", tangents, tangents)
    # A hair of the trace keeps a degenerate corner finite.
    hair = np.einsum("kadd->ka", metric)[:, :, None, None] * np.eye(
        CELL_TYPES[f.vtk_type].dimension
    )
    dual = np.linalg.solve(metric + 1e-14 * hair + np.finfo(float).tiny * (hair == 0), tangents)
    parametric = np.einsum("asd,ksc->kadc", slopes, values[f.nodes])
    return np.asarray(np.einsum("kadc,kadi->kaci", parametric, dual))
