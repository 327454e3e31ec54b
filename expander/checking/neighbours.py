"""The mesh's own scatter: how much neighbouring cells differ near a seam, but not across it.

Stresses and gradients of finite elements jump from cell to cell, more on a coarse mesh and near a
notch. A jump at a seam says something only beside the jumps around it, so the yardstick of a seam
face is the largest jump between neighbouring cells within a few cells of it, the seam's own faces
left out; faces about parallel to the seam are compared first.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from expander.checking.facets import Facets, facets_of, normals, pairs
from expander.model import Mesh
from expander.placements import Floats
from expander.resolve import Numbers
from expander.topology import Ints, blocks, cells_touching

_REACH = 2  # cells away from the seam that still count as near it
_PARALLEL = 0.5  # cosine
_LINEAR = {1: 1, 2: 3, 3: 5, 4: 9}  # VTK type of a facet by its corners; a polygon otherwise


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

    def yardstick(self, per_cell: Numbers, nodes: Ints) -> tuple[Floats, NDArray[np.bool_]]:
        """Largest jump of a cell quantity near each of `nodes`, (k,), and whether it is sure.

        Parameters
        ----------
        per_cell : (f, c, 3) a quantity of each cell near the seam, to be contracted with the
            normal of the face between two cells: a stress, or the gradient of a field; or (f, c),
            compared as it is.

        Returns
        -------
        NaN where there is no face to compare with. Where the mesh is one cell thick, so that no
        other face is parallel to the seam, faces across it are taken: they say less.
        """
        jumps = []
        for face in self.faces:
            jumps.append(_length(per_cell[face.first], per_cell[face.second], face.normals))
        found = self._near(jumps, nodes, parallel=True)
        alone = np.isnan(found)
        if alone.any():  # no layer of cells beside this one: compare along the seam
            found[alone] = self._near(jumps, nodes[alone], parallel=False)
        return found, ~alone

    def nodal_yardstick(self, nodal: Numbers, per_cell: Numbers, nodes: Ints) -> Floats:
        """Largest difference of nodal values within a cell near each of `nodes`, (k,).

        Nodal means at a seam are one-sided, so both sides may differ by as much as the values
        within a cell.

        Parameters
        ----------
        nodal : (n, c, 3), contracted with the seam's normal, or (n, c), at all nodes.
        per_cell : (f, c, 3) or (f, c) their means over the nodes of each cell.
        """
        value = np.full(self.mesh.point_count, -1.0)
        for _, numbers, block in blocks(self.mesh, self.cells):
            rows = self.rows(numbers)
            most = np.zeros(len(rows))
            for column in block.T:
                most = np.maximum(most, _length(nodal[column], per_cell[rows], self.towards[rows]))
            for column in block.T:
                np.maximum.at(value, column, 2.0 * most)
        return self._spread(value, nodes)

    def _near(self, jumps: list[Floats], nodes: Ints, parallel: bool) -> Floats:
        value = np.full(self.mesh.point_count, -1.0)
        for face, jump in zip(self.faces, jumps, strict=True):
            used = face.parallel | (not parallel)
            for column in face.corners.T:
                np.maximum.at(value, column[used], jump[used])
        return self._spread(value, nodes)

    def _spread(self, value: Floats, nodes: Ints) -> Floats:
        """The largest value within reach of each of `nodes`; NaN where there is none."""
        for _ in range(_REACH):
            wider = value.copy()
            for _, _, block in blocks(self.mesh, self.cells):
                most = value[block].max(axis=1)
                for column in block.T:
                    np.maximum.at(wider, column, most)
            value = wider
        found = value[nodes]
        return np.where(found < 0.0, np.nan, found)


def _length(a: Numbers, b: Numbers, normal: Floats) -> Floats:
    """(p,) length of a - b, contracted with the normal (p, 3) where both are (p, c, 3); a value
    that is not finite was accepted and counted, and is no jump."""
    with np.errstate(invalid="ignore", over="ignore"):
        difference = a - b
        if difference.ndim == 3:
            difference = np.einsum("pci,pi->pc", difference, normal)
        length = np.linalg.norm(difference, axis=1)
    return np.where(np.isfinite(length), length, 0.0)


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
    for _ in range(_REACH):
        cells = cells_touching(mesh, marked)
        for _, _, block in blocks(mesh, cells) if len(cells) else ():
            marked[block] = True
            mean = direction[block].sum(axis=1)
            unset = (direction[block] == 0.0).all(axis=2)
            for column in range(block.shape[1]):  # the direction of the nearest seam, cell by cell
                free = unset[:, column]
                direction[block[free, column]] += mean[free]
    summed = np.zeros((len(cells), 3))
    for _, numbers, block in blocks(mesh, cells) if len(cells) else ():
        summed[np.searchsorted(cells, numbers)] = direction[block].sum(axis=1)
    length = np.linalg.norm(summed, axis=1, keepdims=True)
    normal_near = summed / np.where(length > 0.0, length, 1.0)
    faces = []
    for shared in pairs(mesh, facets_of(mesh, cells)):
        keep = ~on_seam[shared.corners].all(axis=1)
        first, second, corners = shared.first[keep], shared.second[keep], shared.corners[keep]
        count = corners.shape[1]
        normal = normals(mesh, Facets(corners, _LINEAR.get(count, 7), first))
        parallel = _parallel(normal, direction[corners].sum(axis=1))
        faces.append(Between(np.searchsorted(cells, first), np.searchsorted(cells, second), normal,
                             corners, parallel))  # fmt: skip
    return Surroundings(mesh, cells, normal_near, tuple(faces))


def _parallel(normal: Floats, towards: Floats) -> NDArray[np.bool_]:
    length = np.linalg.norm(towards, axis=1)
    cosine = np.abs(np.einsum("pi,pi->p", normal, towards)) / np.where(length > 0.0, length, 1.0)
    return np.asarray(cosine > _PARALLEL)
