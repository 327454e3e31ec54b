"""The mesh's own scatter: how much neighbouring cells differ near a seam, but not across it.

Stresses and gradients of finite elements jump from cell to cell, more on a coarse mesh and near a
notch. A jump at a seam says something only beside the jumps around it, so the yardstick of a seam
face is the largest jump between neighbouring cells within a few cells of it, the seam's own faces
left out; faces about parallel to the seam are compared first.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from expander.checking.facets import facets_of, pairs
from expander.model import Mesh
from expander.placements import Floats
from expander.resolve import Numbers
from expander.topology import Ints, blocks, cells_touching

NEAR = 2  # layers of cells that still count as near the seam
_PARALLEL = 0.5  # cosine


@dataclass(frozen=True, eq=False)
class Between:
    """Faces between cells near a seam, with the same number of corners.

    Attributes
    ----------
    first, second : (p,) rows of the cells on both sides among those near the seam.
    normals : (p, 3) unit normals. corners : (p, c) nodes.
    parallel : (p,) whether the face is about parallel to the seam.
    """

    first: Ints
    second: Ints
    normals: Floats
    corners: Ints
    parallel: NDArray[np.bool_]


@dataclass(frozen=True, eq=False)
class Surroundings:
    """Cells near a seam and the faces between them.

    Attributes
    ----------
    cells : (f,) numbers of the cells, ascending.
    towards : (f, 3) unit normal of the seam near each cell; zero if unknown.
    faces : the faces between them, without those that lie in the seam.
    """

    mesh: Mesh
    cells: Ints
    towards: Floats
    faces: tuple[Between, ...]

    def rows(self, cells: Ints) -> Ints:
        """Rows of these cells, which must be near the seam."""
        return np.searchsorted(self.cells, cells)

    def jumps(self, per_cell: Numbers) -> list[Floats]:
        """Jumps of a cell quantity across each of `faces`.

        Parameters
        ----------
        per_cell : (f, c, 3) a quantity of each cell near the seam, to be contracted with the
            normal of the face between two cells: a stress, or the gradient of a field; or (f, c),
            compared as it is.
        """
        return [length(per_cell[f.first], per_cell[f.second], f.normals) for f in self.faces]

    def yardstick(self, jumps: list[Floats], nodes: Ints) -> tuple[Floats, NDArray[np.bool_]]:
        """Largest of the `jumps` near each of `nodes`, (k,), and whether it is sure.

        NaN where there is no face to compare with. Where the mesh is one cell thick, so that no
        other face is parallel to the seam, faces across it are taken: they say less.
        """
        found = self._near(jumps, nodes, [f.parallel for f in self.faces])
        alone = np.isnan(found)
        if alone.any():  # no layer of cells beside this one: compare along the seam
            found[alone] = self._near(jumps, nodes[alone], None)
        return found, ~alone

    @cached_property
    def nodes(self) -> Ints:
        """The nodes of the cells, ascending."""
        marked = np.zeros(self.mesh.point_count, dtype=bool)
        for _, _, block in blocks(self.mesh, self.cells) if len(self.cells) else ():
            marked[block] = True
        return np.flatnonzero(marked)

    @cached_property
    def place(self) -> Ints:
        """(n,) row of each node of the mesh among `nodes`."""
        row = np.zeros(self.mesh.point_count, dtype=np.int64)
        row[self.nodes] = np.arange(len(self.nodes))
        return row

    @cached_property
    def cell_blocks(self) -> tuple[tuple[Ints, Ints], ...]:
        """Cells of one type at a time: their rows (k,) and, for each of their nodes, a row of
        `nodes`, (size, k)."""
        if not len(self.cells):
            return ()
        return tuple(
            (self.rows(numbers), np.ascontiguousarray(self.place[block].T))
            for _, numbers, block in blocks(self.mesh, self.cells)
        )

    @cached_property
    def incidence(self) -> csr_array:
        """(f, m) which cell has which of `nodes`."""
        rows = [np.tile(rows, len(columns)) for rows, columns in self.cell_blocks]
        columns = [columns.ravel() for _, columns in self.cell_blocks]
        row, column = np.concatenate(rows), np.concatenate(columns)
        ones = np.ones(len(row), dtype=np.float32)
        return csr_array((ones, (row, column)), shape=(len(self.cells), len(self.nodes)))

    def means(self, nodal: Numbers) -> Numbers:
        """Mean over the nodes of each cell, (f, ..), of values at `nodes`, (m, ..)."""
        out = np.zeros((len(self.cells), *nodal.shape[1:]), dtype=np.result_type(nodal, float))
        for rows, columns in self.cell_blocks:
            with np.errstate(invalid="ignore"):
                for column in columns:
                    out[rows] += nodal[column]
                out[rows] /= len(columns)
        return out

    def nodal_yardstick(self, nodal: Numbers, per_cell: Numbers, nodes: Ints) -> Floats:
        """Largest difference of nodal values within a cell near each of `nodes`, (k,), doubled.

        Nodal means at a seam are one-sided, so both sides may differ by as much as the values
        within a cell.

        Parameters
        ----------
        nodal : (m, c, 3), contracted with the seam's normal, or (m, c), at `nodes` of the cells.
        per_cell : (f, c, 3) or (f, c) their means over the nodes of each cell.
        """
        value = np.full(len(self.nodes), -1.0)
        for rows, columns in self.cell_blocks:
            means, towards = per_cell[rows], self.towards[rows]
            most = np.zeros(len(rows))
            for column in columns:
                most = np.maximum(most, length(nodal[column], means, towards))
            for column in columns:
                np.maximum.at(value, column, 2.0 * most)
        return self._spread(value, nodes)

    def _near(
        self, jumps: list[Floats], nodes: Ints, used: list[NDArray[np.bool_]] | None
    ) -> Floats:
        value = np.full(len(self.nodes), -1.0)
        for k, (face, jump) in enumerate(zip(self.faces, jumps, strict=True)):
            taken = slice(None) if used is None else used[k]
            for column in self.place[face.corners[taken].T]:
                np.maximum.at(value, column, jump[taken])
        return self._spread(value, nodes)

    def _spread(self, value: Floats, nodes: Ints) -> Floats:
        """The largest value within reach of each of `nodes`; NaN where there is none."""
        for _ in range(NEAR):
            wider = value.copy()
            for _, columns in self.cell_blocks:
                most = value[columns[0]]
                for column in columns[1:]:
                    np.maximum(most, value[column], out=most)
                for column in columns:
                    np.maximum.at(wider, column, most)
            value = wider
        found = value[self.place[nodes]]
        return np.where(found < 0.0, np.nan, found)


def length(a: Numbers, b: Numbers, normal: Floats) -> Floats:
    """(p,) length of a - b, contracted with the normal (p, 3) where both are (p, c, 3); a value
    that is not finite was accepted and counted, and is no jump."""
    with np.errstate(invalid="ignore", over="ignore"):
        difference = a - b
        if difference.ndim == 3:
            difference = np.einsum("pci,pi->pc", difference, normal)
        found = np.sqrt(np.einsum("pc,pc->p", difference, difference.conj()).real)
    return np.where(np.isfinite(found), found, 0.0)


def surroundings(mesh: Mesh, nodes: Ints, towards: Floats) -> Surroundings:
    """The cells within a few cells of a seam and the faces between them.

    Parameters
    ----------
    nodes : (k,) nodes of the seam. towards : (k, 3) normal of the seam there, zero if unknown.
    """
    on_seam = np.zeros(mesh.point_count, dtype=bool)
    on_seam[nodes] = True
    marked = on_seam.copy()
    direction = np.zeros((mesh.point_count, 3))
    direction[nodes] = towards
    cells = np.empty(0, dtype=np.int64)
    for _ in range(NEAR):
        cells = cells_touching(mesh, marked)
        for _, _, block in blocks(mesh, cells) if len(cells) else ():
            marked[block] = True
            mean = _summed(direction, block)
            x, y, z = direction.T
            unset = ((x == 0.0) & (y == 0.0) & (z == 0.0))[block]
            for column in range(block.shape[1]):  # the direction of the nearest seam, cell by cell
                free = unset[:, column]
                direction[block[free, column]] += mean[free]
    summed = np.zeros((len(cells), 3))
    for _, numbers, block in blocks(mesh, cells) if len(cells) else ():
        summed[np.searchsorted(cells, numbers)] = _summed(direction, block)
    size = np.linalg.norm(summed, axis=1, keepdims=True)
    normal_near = summed / np.where(size > 0.0, size, 1.0)
    faces = []
    for shared in pairs(mesh, facets_of(mesh, cells)):
        keep = ~on_seam[shared.corners].all(axis=1)
        first, second, corners = shared.first[keep], shared.second[keep], shared.corners[keep]
        normal = shared.normals[keep]
        parallel = _parallel(normal, direction[corners].sum(axis=1))
        faces.append(Between(np.searchsorted(cells, first), np.searchsorted(cells, second), normal,
                             corners, parallel))  # fmt: skip
    return Surroundings(mesh, cells, normal_near, tuple(faces))


def _parallel(normal: Floats, towards: Floats) -> NDArray[np.bool_]:
    size = np.linalg.norm(towards, axis=1)
    cosine = np.abs(np.einsum("pi,pi->p", normal, towards)) / np.where(size > 0.0, size, 1.0)
    return np.asarray(cosine > _PARALLEL)


def _summed(values: Floats, block: Ints) -> Floats:
    """Sum of nodal values over the nodes of each cell, column by column."""
    total = values[block[:, 0]]
    for column in block.T[1:]:
        total += values[column]
    return total
