"""Means and gradients within cells, for the jumps between them."""

from __future__ import annotations

import numpy as np

from expander.model import Mesh
from expander.resolve import Numbers
from expander.topology import Ints, blocks


def cell_gradients(mesh: Mesh, cells: Ints, values: Numbers) -> Numbers:
    """Mean gradient of nodal values within each cell, by least squares over its nodes.

    Parameters
    ----------
    cells : (f,) cell numbers, each once, ascending.
    values : (n, c) at the nodes of the mesh.

    Returns
    -------
    (f, c, 3): derivatives of each component along x, y, z; along a shell or a line only, for
    such cells. Exact for a linear field.

    Examples
    --------
    >>> from expander.model import Mesh
    >>> tetra = Mesh(np.array([[0.0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1]]), np.arange(4),
    ...              np.array([0, 4]), np.array([10], dtype=np.uint8))
    >>> cell_gradients(tetra, np.array([0]), np.array([[1.0], [3.0], [1.0], [1.5]])).tolist()
    [[[2.0, 0.0, 0.5]]]
    """
    out = np.zeros((len(cells), values.shape[1], 3), dtype=np.result_type(values, float))
    for _, numbers, nodes in blocks(mesh, cells) if len(cells) else ():
        rows = np.searchsorted(cells, numbers)
        x = mesh.points[nodes].astype(float)
        x -= x.mean(axis=1, keepdims=True)
        moment = np.einsum("fsi,fsj->fij", x, x)
        size = np.trace(moment, axis1=1, axis2=2)
        size[size == 0.0] = 1.0  # a point has no gradient
        with np.errstate(invalid="ignore"):  # accepted values that are not finite spread
            v = values[nodes]
            v = v - v.mean(axis=1, keepdims=True)
            right = np.einsum("fsi,fsc->fic", x, v) / size[:, None, None]
        flat = np.linalg.det(moment / size[:, None, None]) < 1e-12
        inverse = np.empty_like(moment)
        scaled = moment / size[:, None, None]
        inverse[~flat] = np.linalg.inv(scaled[~flat])
        # A shell or a line has no gradient across itself.
        inverse[flat] = np.linalg.pinv(scaled[flat], rcond=1e-9, hermitian=True)
        with np.errstate(invalid="ignore"):
            out[rows] = np.einsum("fij,fjc->fci", inverse, right)
    return out


def cell_means(mesh: Mesh, cells: Ints, values: Numbers) -> Numbers:
    """Mean of nodal values (n, c) over the nodes of each cell, (f, c)."""
    out = np.zeros((len(cells), values.shape[1]), dtype=np.result_type(values, float))
    for _, numbers, nodes in blocks(mesh, cells) if len(cells) else ():
        with np.errstate(invalid="ignore"):
            out[np.searchsorted(cells, numbers)] = values[nodes].mean(axis=1)
    return out
