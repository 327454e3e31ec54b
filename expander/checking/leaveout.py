"""Yardsticks that leave out the cells or nodes they are to judge.

One odd value at a seam differs as much from its neighbours as from the other side, so it would be
its own measure. Where a jump stands out beside those next to it along the seam, the yardstick is
taken again without the cells of that face, or without the values of that node; where a load or a
notch makes the field steep, the cells around say so all the same.
"""

from __future__ import annotations

import numpy as np
from scipy.sparse import csr_array

from expander.checking.neighbours import NEAR, Surroundings, length
from expander.placements import Floats
from expander.resolve import Numbers
from expander.topology import Ints, blocks

TIMES = 3.0  # the largest jump beside it: a jump that much larger may be its own measure
MOST = 2_000  # rows that are looked at again, those with the largest jumps


def standing_out(lengths: Floats, rows: Ints, keys: Ints) -> Ints:
    """Rows whose jump is more than `TIMES` that of every row beside them, at most `MOST`.

    Parameters
    ----------
    lengths : (k,) jumps.
    rows, keys : (e,) pairs of a row and something that it shares with the rows beside it: faces
        share nodes, nodes share faces.

    Examples
    --------
    >>> standing_out(np.array([1.0, 9.0, 1.0]), np.array([0, 1, 1, 2]), np.array([0, 0, 1, 1]))
    array([1])
    """
    order = np.lexsort((-lengths[rows], keys))
    rows, keys = rows[order], keys[order]
    first = np.flatnonzero(np.concatenate([[True], keys[1:] != keys[:-1]])) if len(keys) else keys
    number = np.cumsum(np.concatenate([[False], keys[1:] != keys[:-1]])) if len(keys) else keys
    top = rows[first]
    last = np.append(first[1:], len(keys)) - 1
    second = rows[np.minimum(first + 1, last)]
    alone = first == last
    other = np.where(rows == top[number], second[number], top[number])
    height = np.where((rows == top[number]) & alone[number], 0.0, lengths[other])
    beside = np.zeros(len(lengths))
    np.maximum.at(beside, rows, height)
    found = np.flatnonzero(lengths > TIMES * beside)
    return np.sort(found[np.argsort(-lengths[found], kind="stable")[:MOST]])


def without_cells(around: Surroundings, jumps: list[Floats], corners: Ints, own: Ints) -> Floats:
    """Largest jump near each face between other cells than its own, (k,); NaN if there is none.

    Parameters
    ----------
    jumps : of the faces between cells near the seam, as in `around.faces`.
    corners : (k, c) nodes of the faces of the seam. own : (k, 2) their cells, as rows.
    """
    reached = _nodes_near(around, corners)
    found = np.full(len(corners), np.nan)
    for face, jump in zip(around.faces, jumps, strict=True):
        used = np.flatnonzero(face.parallel)
        touching = _incidence(around.place[face.corners[used]], len(around.nodes))
        pairs = (reached @ touching.T).tocoo()
        row, f = pairs.row, used[pairs.col]
        other = np.ones(len(row), dtype=bool)
        for cells in (face.first, face.second):
            other &= (cells[f][:, None] != own[row]).all(axis=1)
        np.fmax.at(found, row[other], jump[f[other]])
    return found


def without_nodes(around: Surroundings, nodal: Numbers, own: Ints) -> Floats:
    """Largest difference of other nodes' values within a cell near each node, (k,), doubled.

    Parameters
    ----------
    nodal : (m, c) or (m, c, 3) at the nodes of the cells around.
    own : (k, p) the nodes of each row that are left out, the first being where it lies.
    """
    reached = _nodes_near(around, own[:, :1], NEAR - 1)
    found = np.full(len(own), np.nan)
    for _, numbers, nodes in blocks(around.mesh, around.cells):
        pairs = (reached @ _incidence(around.place[nodes], len(around.nodes)).T).tocoo()
        row, cell = pairs.row, pairs.col
        kept = (nodes[cell][:, :, None] != own[row][:, None, :]).all(axis=2)
        rest = np.maximum(kept.sum(axis=1), 1)
        values = nodal[around.place[nodes[cell]]]  # (pairs, size, ..)
        shape = (*kept.shape, *(1,) * (values.ndim - 2))
        with np.errstate(invalid="ignore"):
            values = np.where(kept.reshape(shape), values, 0.0)
            mean = values.sum(axis=1) / rest.reshape(-1, *(1,) * (values.ndim - 2))
        normal = around.towards[around.rows(numbers[cell])]
        most = np.zeros(len(row))
        for column in range(nodes.shape[1]):
            off = length(values[:, column], mean, normal)
            most = np.where(kept[:, column], np.maximum(most, off), most)
        np.fmax.at(found, row, 2.0 * most)
    return found


def _incidence(nodes: Ints, count: int) -> csr_array:
    """(faces or cells, nodes) which has which node."""
    k, size = nodes.shape
    ones = np.ones(k * size, dtype=np.float32)
    return csr_array((ones, (np.repeat(np.arange(k), size), nodes.ravel())), shape=(k, count))


def _nodes_near(around: Surroundings, start: Ints, reach: int = NEAR) -> csr_array:
    """(k, m) nodes within `reach` cells of the nodes `start`, (k, c)."""
    found = _incidence(around.place[start], len(around.nodes))
    cells = around.incidence
    for _ in range(reach):
        found = (found @ cells.T) @ cells
        found.data[:] = 1.0
    return found
