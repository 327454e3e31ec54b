"""Means and gradients within cells, for the jumps between them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from expander.model import Mesh
from expander.placements import Floats
from expander.resolve import Numbers
from expander.topology import Ints, blocks


@dataclass(frozen=True, eq=False)
class Gradients:
    """Mean gradients within cells, by least squares over their nodes.

    Attributes
    ----------
    count : number of cells.
    parts : by cell type and size: rows of the cells, their nodes (k, s), and the weights
        (k, s, 3) of the nodes' values in the gradient.
    """

    count: int
    parts: tuple[tuple[Ints, Ints, Floats], ...]

    @staticmethod
    def within(mesh: Mesh, cells: Ints) -> Gradients:
        """Of these cells, each once, ascending."""
        parts = []
        for _, numbers, nodes in blocks(mesh, cells) if len(cells) else ():
            x = mesh.points[nodes].astype(float)
            x -= _mean(x)[:, None]
            moment = np.matmul(x.transpose(0, 2, 1), x)
            size = np.trace(moment, axis1=1, axis2=2)
            size[size == 0.0] = 1.0  # a point has no gradient
            moment /= size[:, None, None]
            flat = np.linalg.det(moment) < 1e-12
            inverse = np.empty_like(moment)
            inverse[~flat] = np.linalg.inv(moment[~flat])
            # A shell or a line has no gradient across itself.
            inverse[flat] = np.linalg.pinv(moment[flat], rcond=1e-9, hermitian=True)
            inverse /= size[:, None, None]
            parts.append((np.searchsorted(cells, numbers), nodes, np.matmul(x, inverse)))
        return Gradients(len(cells), tuple(parts))

    def of(self, values: Numbers) -> Numbers:
        """(f, c, 3) derivatives along x, y, z of nodal values (n, c)."""
        out = np.zeros((self.count, values.shape[1], 3), dtype=np.result_type(values, float))
        for rows, nodes, weights in self.parts:
            with np.errstate(invalid="ignore"):  # accepted values that are not finite spread
                v = values[nodes]
                v = v - v[:, :1]  # a constant has no gradient, to the last digit
                out[rows] = np.matmul(v.transpose(0, 2, 1), weights)
        return out


def cell_gradients(mesh: Mesh, cells: Ints, values: Numbers) -> Numbers:
    return Gradients.within(mesh, cells).of(values)


def cell_means(mesh: Mesh, cells: Ints, values: Numbers) -> Numbers:
    """Mean of nodal values (n, c) over the nodes of each cell, (f, c)."""
    out = np.zeros((len(cells), values.shape[1]), dtype=np.result_type(values, float))
    for _, numbers, nodes in blocks(mesh, cells) if len(cells) else ():
        with np.errstate(invalid="ignore"):
            out[np.searchsorted(cells, numbers)] = _mean(values[nodes])
    return out


def _mean(values: Numbers) -> Numbers:
    """Mean over the nodes of each cell, (k, s, ..) to (k, ..): numpy reduces short rows slowly."""
    total = values[:, 0].astype(np.result_type(values, float))
    for column in range(1, values.shape[1]):
        total += values[:, column]
    return np.asarray(total / values.shape[1])
