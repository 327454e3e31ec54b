"""What can be told from the cells alone: local edge lengths, boundary nodes, connected pieces.

All of it works on whole blocks of cells of one type; nothing loops over cells or nodes.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from weakref import WeakKeyDictionary

import numpy as np
from numpy.typing import NDArray

from expander.cells import CELL_TYPES, dimensions
from expander.model import Mesh
from expander.placements import Floats, Placement

Ints = NDArray[np.int64]


def cell_sizes(mesh: Mesh) -> Ints:
    """Number of nodes of each cell, (m,)."""
    return np.diff(mesh.offsets)


def cell_centres(mesh: Mesh) -> Floats:
    """Mean position of the nodes of each cell, (m, 3)."""
    sums = np.add.reduceat(mesh.points[mesh.connectivity].astype(float), mesh.offsets[:-1], axis=0)
    return np.asarray(sums / cell_sizes(mesh)[:, None])


def blocks(mesh: Mesh, cells: Ints | None = None) -> Iterator[tuple[int, Ints, Ints]]:
    """Cells of one type and size at a time: type, cell numbers (k,), nodes (k, size)."""
    if mesh.uniform is not None:  # the usual case, no sorting
        vtk_id, size = mesh.uniform
        nodes = mesh.connectivity.reshape(-1, size)
        if cells is None:
            yield vtk_id, np.arange(mesh.cell_count), nodes
        elif len(cells):
            yield vtk_id, cells, nodes[cells]
        return
    types = mesh.types if cells is None else mesh.types[cells]
    sizes = cell_sizes(mesh) if cells is None else cell_sizes(mesh)[cells]
    if len(types) and (types == types[0]).all() and (sizes == sizes[0]).all():
        keys, which = np.array([types[0] + 256 * sizes[0]]), None  # of a part of the mesh
    else:
        keys, which = np.unique(types.astype(np.int64) + 256 * sizes, return_inverse=True)
    for number, key in enumerate(keys.tolist()):
        picked = np.arange(len(types)) if which is None else np.flatnonzero(which == number)
        numbers = picked if cells is None else cells[picked]
        vtk_id, size = key % 256, key // 256
        nodes = mesh.connectivity[mesh.offsets[numbers][:, None] + np.arange(size)]
        yield vtk_id, numbers, nodes


def _edges(vtk_id: int, size: int) -> Ints:
    """Pairs of corner columns, (e, 2)."""
    if vtk_id in CELL_TYPES:
        return np.array(CELL_TYPES[vtk_id].shape.edges, dtype=np.int64).reshape(-1, 2)
    corners = size // 2 if vtk_id == 36 else size
    around = np.arange(corners)
    return np.stack([around, (around + 1) % corners], axis=1)


def cells_touching(mesh: Mesh, marked: NDArray[np.bool_]) -> Ints:
    """Cells with at least one marked node; `marked` is (n,)."""
    hit = marked[mesh.connectivity]
    if not hit.any():
        return np.empty(0, dtype=np.int64)
    positions = np.flatnonzero(hit)
    if mesh.uniform is not None:
        cells = positions // mesh.uniform[1]
    else:
        cells = np.searchsorted(mesh.offsets, positions, side="right") - 1  # ascending
    return np.asarray(cells[np.concatenate([[True], cells[1:] != cells[:-1]])])


def local_edges(mesh: Mesh, nodes: Ints) -> Floats:
    """Shortest straight edge of the cells at each of `nodes`, (k,); infinite where none has one."""
    marked = np.zeros(mesh.point_count, dtype=bool)
    marked[nodes] = True
    shortest = np.full(mesh.point_count, np.inf)
    for vtk_id, _, block in blocks(mesh, cells_touching(mesh, marked)):
        pairs = _edges(vtk_id, block.shape[1])
        if not len(pairs):
            continue
        points = mesh.points[block].astype(float)
        steps = points[:, pairs[:, 0]] - points[:, pairs[:, 1]]
        length = np.sqrt(np.einsum("cei,cei->ce", steps, steps))
        length[length == 0.0] = np.inf  # a collapsed edge says nothing about the mesh's size
        least = length.min(axis=1)
        for column in range(block.shape[1]):
            np.minimum.at(shortest, block[:, column], least)
    return shortest[nodes]


@dataclass(frozen=True, eq=False)
class FreeFaces:
    """Faces that belong to one solid cell only, of cells of one type and at one place of the cell.

    Attributes
    ----------
    cells : (k, size) nodes of the cells. numbers : (k,) of the cells.
    face : columns of the corners of the face. on_face : columns of all its nodes.
    corners : number of corners of the cell.
    """

    cells: Ints
    numbers: Ints
    face: tuple[int, ...]
    on_face: tuple[int, ...]
    corners: int


def free_faces(mesh: Mesh) -> list[FreeFaces]:
    """Faces that belong to one solid cell only.

    A face is known by the sum of random numbers given to its corners: one sort of 64-bit keys,
    instead of sorting rows of node numbers. Two different faces share a key with a probability
    of about (number of faces)^2 / 2^64. The last answers are kept while their mesh is.
    """
    known = _FREE.get(mesh)
    if known is None:
        known = _FREE[mesh] = _free_faces(mesh)
    return known


_FREE: WeakKeyDictionary[Mesh, list[FreeFaces]] = WeakKeyDictionary()


def _free_faces(mesh: Mesh) -> list[FreeFaces]:
    token = tokens(mesh.point_count)
    lots, keys = [], []
    for vtk_id, numbers, nodes in blocks(mesh):
        kind = CELL_TYPES.get(vtk_id)
        if kind is None or kind.dimension < 3:
            continue
        corners = len(kind.shape.mirrored)
        column = [token[nodes[:, c]] for c in range(corners)]
        for face in kind.shape.faces:
            key = column[face[0]] + column[face[1]]
            for c in face[2:]:
                key += column[c]
            keys.append(key)
            on_face = tuple(i for i, c in enumerate(kind.nodes) if set(c) <= set(face))
            lots.append((nodes, numbers, tuple(face), on_face, corners))
    if not keys:
        return []
    single = singles(np.concatenate(keys))
    found = []
    for (nodes, numbers, face, on_face, corners), key in zip(lots, keys, strict=True):
        free = np.flatnonzero(among(key, single))
        found.append(FreeFaces(nodes[free], numbers[free], face, on_face, corners))
    return found


def singles(keys: NDArray[np.uint64]) -> NDArray[np.uint64]:
    """The keys that occur once, sorted."""
    ranked = np.sort(keys)
    new = np.concatenate([[True], ranked[1:] != ranked[:-1], [True]])
    return np.asarray(ranked[new[1:] & new[:-1]])


def among(keys: NDArray[np.uint64], some: NDArray[np.uint64]) -> NDArray[np.bool_]:
    """Which of many `keys` are among `some` few, sorted ones."""
    bits = min(26, max(8, 4 + len(some).bit_length()))
    shift = np.uint64(64 - bits)
    table = np.zeros(2**bits, dtype=bool)  # most keys are told from their first bits
    table[some >> shift] = True
    hit: NDArray[np.bool_] = table[keys >> shift]
    rows = np.flatnonzero(hit)
    place = np.minimum(np.searchsorted(some, keys[rows]), max(0, len(some) - 1))
    hit[rows] = some[place] == keys[rows]
    return hit


def boundary_nodes(mesh: Mesh, free: list[FreeFaces] | None = None) -> Ints:
    """Nodes on faces of one solid cell only, all nodes of other cells, and loose nodes, sorted."""
    marked = np.ones(mesh.point_count, dtype=bool)
    marked[mesh.connectivity] = False
    for vtk_id, _, nodes in blocks(mesh):
        kind = CELL_TYPES.get(vtk_id)
        if kind is None or kind.dimension < 3:
            marked[nodes] = True
    for f in free_faces(mesh) if free is None else free:
        marked[f.cells[:, f.on_face]] = True
    return np.flatnonzero(marked)


@dataclass(frozen=True, eq=False)
class Faces:
    """Faces of one size that belong to one solid cell only.

    Attributes
    ----------
    corners : (k, 3) or (k, 4) nodes.
    inside : (k, 3) the mean of the cell's corners, a point on the material's side of the face.
    """

    corners: Ints
    inside: Floats


def boundary_faces(mesh: Mesh, free: list[FreeFaces] | None = None) -> list[Faces]:
    """Faces that belong to one solid cell only, by size."""
    found: dict[int, list[tuple[Ints, Floats]]] = {}
    for f in free_faces(mesh) if free is None else free:
        inside = mesh.points[f.cells[:, : f.corners]].astype(float).mean(axis=1)
        found.setdefault(len(f.face), []).append((f.cells[:, f.face], inside))
    return [
        Faces(np.concatenate([c for c, _ in parts]), np.concatenate([i for _, i in parts]))
        for parts in found.values()
    ]


def tokens(count: int) -> NDArray[np.uint64]:
    """A random number for each node, the same on every run, to know sets of nodes by their sum.

    Two different sets have the same sum with a probability of about (number of sets)^2 / 2^64.
    """
    return np.random.default_rng(20).integers(0, 2**64, size=count, dtype=np.uint64)


def faces_met(
    mesh: Mesh, faces: list[Faces], i: Ints, j: Ints, g: Placement
) -> tuple[int, int, int]:
    """How faces of the copy made by `g` meet those of the sector, when node ``j`` of the copy is
    node ``i`` of the sector.

    Returns
    -------
    The number of faces all of whose corners are among `j`; how many of them meet a face of the
    sector; and at how many of these the material of both lies on the same side, as it does where
    copies overlap.
    """
    token = tokens(mesh.point_count)
    partner = np.full(mesh.point_count, -1, dtype=np.int64)
    partner[j] = i
    whole = met = same = 0
    for f in faces:
        images = partner[f.corners]
        theirs = np.flatnonzero((images >= 0).all(axis=1))
        whole += len(theirs)
        mine = token[f.corners].sum(axis=1, dtype=np.uint64)
        order = np.argsort(mine)
        wanted = token[images[theirs]].sum(axis=1, dtype=np.uint64)
        place = np.minimum(np.searchsorted(mine[order], wanted), max(0, len(mine) - 1))
        hit = mine[order][place] == wanted if len(mine) else np.zeros(len(wanted), dtype=bool)
        here, there = order[place[hit]], theirs[hit]
        met += len(here)
        p = mesh.points[f.corners[here]].astype(float)
        normal = np.cross(p[:, 1] - p[:, 0], p[:, 2] - p[:, 0])
        own = f.inside[here] - p.mean(axis=1)
        copied = g.apply(f.inside[there]) - p.mean(axis=1)
        side = np.einsum("fi,fi->f", own, normal) * np.einsum("fi,fi->f", copied, normal)
        # A quadrilateral may be more warped than its cell is thick: there both tests must agree.
        along = np.einsum("fi,fi->f", own, copied) if p.shape[1] > 3 else side
        same += int(((side > 0) & (along > 0)).sum())
    return whole, met, same


def pieces(mesh: Mesh) -> NDArray[np.int32]:
    """Number of the connected piece that each node belongs to, (n,)."""
    from scipy.sparse import coo_matrix
    from scipy.sparse.csgraph import connected_components

    first = np.repeat(mesh.connectivity[mesh.offsets[:-1]], cell_sizes(mesh))
    ones = np.ones(len(first), dtype=np.int8)
    n = mesh.point_count
    graph = coo_matrix((ones, (first, mesh.connectivity)), shape=(n, n))
    return np.asarray(connected_components(graph, directed=False)[1], dtype=np.int32)


def cells_at_nodes(mesh: Mesh, nodes: Ints) -> Ints:
    """Number of cells at each of `nodes`, (k,), counting only those of the highest dimension there.

    These are the cells whose stress a nodal mean of recovered values is taken over: a vertex or a
    beam on a solid does not count.
    """
    marked = np.zeros(mesh.point_count, dtype=bool)
    marked[nodes] = True
    touching = cells_touching(mesh, marked)
    counts = np.zeros((4, mesh.point_count), dtype=np.int64)
    if len(touching):
        sizes = cell_sizes(mesh)[touching]
        rows = np.repeat(dimensions(mesh.types)[touching], sizes)
        total = int(sizes.sum())
        inside = np.arange(total) - np.repeat(np.cumsum(sizes) - sizes, sizes)
        columns = mesh.connectivity[np.repeat(mesh.offsets[:-1][touching], sizes) + inside]
        np.add.at(counts, (rows, columns), 1)
    counts = counts[:, nodes]
    highest = 3 - np.argmax(counts[::-1] > 0, axis=0)
    return np.asarray(np.maximum(1, counts[highest, np.arange(len(nodes))]))
