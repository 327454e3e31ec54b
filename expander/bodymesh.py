"""The mesh of the whole body: connectivity, offsets and types of each copy."""

from __future__ import annotations

from threading import Lock

import numpy as np
from numpy.typing import NDArray

from expander.body import WholeBody
from expander.cells import CELL_TYPES, POLYGON
from expander.model import Mesh
from expander.topology import Ints, blocks

_RECENT = 3  # copies whose numbers are kept


class BodyMesh:
    """Connectivity, offsets and types of the copies."""

    def __init__(self, body: WholeBody) -> None:
        self.body = body
        self.points = body.point_numbering
        self.cells = body.cell_numbering
        self._sectors: dict[tuple[bool, int], tuple[Ints, Ints, NDArray[np.uint8]]] = {}
        self._numbers: dict[int, Ints] = {}
        self._lock = Lock()
        self.first: dict[int, int] = {}
        self.length = 0
        for g in body.copies:
            self.first[g] = self.length
            self.length += len(self.sector(g)[0])
        fits = max(self.points.total, self.length) < 2**31
        self.index = np.dtype(np.int32 if fits else np.int64)

    def sector(self, copy: int) -> tuple[Ints, Ints, NDArray[np.uint8]]:
        """Connectivity in sector numbers, ends and types of the cells that `copy` writes."""
        mirrored = self.body.group.placements[copy].mirrored
        kept = self.cells.kept(copy)
        key = (mirrored, -1 if kept is None else id(kept))
        with self._lock:
            if key not in self._sectors:
                self._sectors[key] = self._make(mirrored, kept)
            return self._sectors[key]

    def _make(self, mirrored: bool, kept: Ints | None) -> tuple[Ints, Ints, NDArray[np.uint8]]:
        mesh = self.body.mesh
        connectivity = mirrored_connectivity(mesh) if mirrored else mesh.connectivity
        if kept is None:
            return connectivity, mesh.offsets[1:], mesh.types
        sizes = np.diff(mesh.offsets)
        mask = np.zeros(mesh.cell_count, dtype=bool)
        mask[kept] = True
        return connectivity[np.repeat(mask, sizes)], np.cumsum(sizes[kept]), mesh.types[kept]

    def _numbers_of(self, copy: int) -> Ints:
        """Numbers of the copy's points; the last few are kept, for pieces of the same copy."""
        with self._lock:
            if copy not in self._numbers:
                while len(self._numbers) >= _RECENT:
                    del self._numbers[next(iter(self._numbers))]
                self._numbers[copy] = self.points.numbers(copy).astype(self.index)
            return self._numbers[copy]

    def connectivity(self, copy: int, rows: slice) -> NDArray[np.generic]:
        return np.take(self._numbers_of(copy), self.sector(copy)[0][rows])

    def offsets(self, copy: int, rows: slice) -> NDArray[np.generic]:
        return (self.sector(copy)[1][rows] + self.first[copy]).astype(self.index)

    def types(self, copy: int, rows: slice) -> NDArray[np.generic]:
        return self.sector(copy)[2][rows]

    def release(self) -> None:
        self._numbers.clear()


def mirrored_connectivity(mesh: Mesh) -> Ints:
    """The sector's connectivity with every cell in the node order of its mirror image."""
    out = np.empty_like(mesh.connectivity)
    for vtk_id, cells, nodes in blocks(mesh):
        if vtk_id in CELL_TYPES:
            order = np.array(CELL_TYPES[vtk_id].mirrored)
        else:
            order = mirrored_polygon(vtk_id, nodes.shape[1])
        if len(cells) == mesh.cell_count:
            return np.ascontiguousarray(nodes[:, order]).ravel()
        out[mesh.offsets[cells][:, None] + np.arange(nodes.shape[1])] = nodes[:, order]
    return out


def mirrored_polygon(vtk_id: int, size: int) -> Ints:
    """Node order of a mirrored polygon; a quadratic one lists its corners, then mid-side nodes.

    >>> mirrored_polygon(7, 5).tolist(), mirrored_polygon(36, 6).tolist()
    ([0, 4, 3, 2, 1], [0, 2, 1, 5, 4, 3])
    """
    if vtk_id == POLYGON:
        return (-np.arange(size)) % size
    corners = size // 2
    # mid-side node i lies between corners i and i + 1
    return np.concatenate([(-np.arange(corners)) % corners, np.arange(size - 1, corners - 1, -1)])
