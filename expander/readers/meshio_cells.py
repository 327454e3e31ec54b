"""meshio's cells as VTK's: their types, and the order of their nodes.

Formats order the nodes on edges and faces each in its own way, and not every reader of
meshio undoes it. The order is therefore taken from the geometry: a node belongs to the edge
or face whose middle it is nearest to, judged over all cells of a block.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from expander.cells import CELL_TYPES, CellType
from expander.errors import InputError

# meshio's name -> VTK's number
_TYPES = {
    "vertex": 1, "line": 3, "triangle": 5, "polygon": 7, "pixel": 8, "quad": 9, "tetra": 10,
    "tetra4": 10, "hexahedron": 12, "wedge": 13, "pyramid": 14, "penta_prism": 15, "hexa_prism": 16,
    "line3": 21, "triangle6": 22, "quad8": 23, "tetra10": 24, "hexahedron20": 25,
    "wedge15": 26, "pyramid13": 27, "quad9": 28, "hexahedron27": 29, "quad6": 30,
    "wedge12": 31, "wedge18": 32, "hexahedron24": 33, "triangle7": 34, "line4": 35,
}  # fmt: skip
_MOST_CELLS = 20_000  # as many are looked at to find an order; they are spread over the block
_FAR = 0.5  # of the mean distance of two neighbouring corners


@dataclass(frozen=True)
class Block:
    """Cells of one type: meshio's name of it, and node numbers (m, k)."""

    type: str
    nodes: Any


def vtk_cells(
    path: Path, points: NDArray[Any], blocks: Sequence[Block], notes: list[str]
) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.uint8]]:
    """Connectivity, offsets and types of all blocks, in their order.

    Parameters
    ----------
    path : the file, for messages.
    points : (n, 3) coordinates.
    blocks : cells of one type each.
    notes : what was put right is added here.
    """
    connectivity = [np.zeros(0, np.int64)]
    sizes = [np.zeros(0, np.int64)]
    types = [np.zeros(0, np.uint8)]
    for block in blocks:
        if len(block.nodes) == 0:
            continue
        if block.type not in _TYPES:
            raise InputError(
                f"{path}: cells of type '{block.type}' cannot be read",
                "Write linear or quadratic cells.",
            )
        vtk_type = _TYPES[block.type]
        nodes = np.asarray(block.nodes)
        if nodes.ndim != 2 or nodes.dtype.kind not in "iu":
            raise InputError(
                f"{path}: the node numbers of the '{block.type}' cells are no whole table",
                "The file is damaged or incomplete: write it again.",
            )
        nodes = nodes.astype(np.int64)
        cell = CELL_TYPES.get(vtk_type)
        inside = nodes.min() >= 0 and nodes.max() < len(points)  # if not, it is refused later
        if cell and inside and nodes.shape[1] == len(cell.nodes):
            nodes = _ordered(path, points, nodes, cell, notes)
        connectivity.append(nodes.ravel())
        sizes.append(np.full(len(nodes), nodes.shape[1], np.int64))
        types.append(np.full(len(nodes), vtk_type, np.uint8))
    offsets = np.concatenate([[0], np.cumsum(np.concatenate(sizes))])
    return np.concatenate(connectivity), offsets, np.concatenate(types)


def _ordered(
    path: Path, points: NDArray[Any], nodes: NDArray[np.int64], cell: CellType, notes: list[str]
) -> NDArray[np.int64]:
    """Node numbers (m, k) in VTK's order and, for solids, not inside out."""
    order = _middle_order(points, nodes[:: max(1, len(nodes) // _MOST_CELLS)], cell)
    if order is None:
        raise InputError(
            f"{path}: nodes of the {cell.name} cells are not in the middle of edges or faces",
            "Write the file again, or without nodes on edges and faces.",
        )
    if not np.array_equal(order, np.arange(len(order))):
        notes.append(
            f"The nodes on edges and faces of the {len(nodes)} {cell.name} cells were put in "
            "VTK's order by their places."
        )
        nodes = nodes[:, order]
    if cell.dimension == 3:
        negative = _volumes(points, nodes, cell) < 0
        if negative.all():
            notes.append(
                f"The {len(nodes)} {cell.name} cells were inside out by VTK's rule; their node "
                "order was reversed."
            )
            return nodes[:, list(cell.mirrored)]
        if negative.any():
            notes.append(f"{int(negative.sum())} of {len(nodes)} {cell.name} cells are inside out.")
    return nodes


def _middle_order(
    points: NDArray[Any], nodes: NDArray[np.int64], cell: CellType
) -> NDArray[np.intp] | None:
    """Which node of the file is VTK's node 0, 1, ..; None if it cannot be told."""
    corners = sum(len(of) == 1 for of in cell.nodes)
    order = np.arange(len(cell.nodes))
    if corners == len(cell.nodes):
        return order
    places = points[nodes].astype(np.float64)
    if corners == 2:  # some formats list the middle of a line between its ends
        rest = ((1, 2), (0, 2), (0, 1))
        off = [np.abs(places[:, k] - places[:, rest[k]].mean(axis=1)).sum() for k in range(3)]
        middle = int(np.argmin(off))
        return np.array([*rest[middle], middle])
    targets = np.stack([places[:, list(of)].mean(axis=1) for of in cell.nodes[corners:]], axis=1)
    edges = np.array(cell.shape.edges)
    sides = places[:, edges[:, 1]] - places[:, edges[:, 0]]
    length = np.linalg.norm(sides, axis=2).mean(axis=1)
    whole = length > 0
    if not whole.any():
        return order
    # distance of each node from each middle, over the cells, in lengths of an edge
    away = np.array(
        [
            [
                (np.linalg.norm(places[whole, corners + a] - targets[whole, b], axis=1)
                 / length[whole]).mean()
                for a in range(targets.shape[1])
            ]
            for b in range(targets.shape[1])
        ]
    )  # fmt: skip
    nearest = away.argmin(axis=1)
    as_is = np.diag(away)
    best = away[np.arange(len(away)), nearest]
    one_to_one = len(np.unique(nearest)) == len(nearest)
    if one_to_one and best.max() < _FAR and best.sum() < 0.5 * as_is.sum():
        order[corners:] = corners + nearest
        return order
    return order if as_is.max() < _FAR else None


def _volumes(points: NDArray[Any], nodes: NDArray[np.int64], cell: CellType) -> NDArray[Any]:
    """Six times the signed volume of each solid's corners, to first order."""
    corners = sum(len(of) == 1 for of in cell.nodes)
    place = points[nodes[:, :corners]].astype(np.float64)
    # the base of every solid is its first corners; the rest lies above it
    base = {4: 3, 5: 4, 6: 3}.get(corners, corners // 2)
    middle = place[:, :base].mean(axis=1, keepdims=True)
    spokes = place[:, :base] - middle
    area = np.cross(spokes, np.roll(spokes, -1, axis=1)).sum(axis=1)
    above = place[:, base:].mean(axis=1) - middle[:, 0]
    volumes: NDArray[Any] = np.einsum("ij,ij->i", area, above)
    return volumes
