"""Connected pieces of the sector and of the whole body, without building the body.

The graph has a node for every piece of every copy, and an edge wherever two of them share a node
of a seam. It looks the same from every copy, so an edge that is already implied at the modelled
part is implied everywhere; only the few that are not are laid out over all copies.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from expander.groups import Group
from expander.model import Mesh
from expander.seams import Classes
from expander.topology import Ints, pieces


@dataclass(frozen=True, eq=False)
class Piece:
    """A connected piece of the whole body, and how often it stands there.

    Attributes
    ----------
    sector_pieces : numbers of the sector's pieces that it is made of, as in `Pieces.of_node`.
    copies : the copies that take part in it; of several equal pieces, that of the modelled part.
    times : how many pieces like this one the whole body has, as images of each other.
    nodes : number of its nodes in the whole body.
    loose : it touches no other copy, while the whole body has more pieces than this one.
    words : what and where it is, one sentence.
    """

    sector_pieces: tuple[int, ...]
    copies: tuple[int, ...]
    times: int
    nodes: int
    loose: bool
    words: str


@dataclass(frozen=True, eq=False)
class Pieces:
    """Connected pieces before and after the copies are joined at their seams.

    Attributes
    ----------
    in_sector : of the sector. before : of all copies, unjoined. after : of the whole body.
    pieces : those of the whole body, equal ones once, the one with most nodes first.
    loose_nodes : nodes of the sector that belong to no cell; they count as no piece.
    of_node : (n,) the sector's piece of each node, -1 for loose nodes.
    """

    in_sector: int
    before: int
    after: int
    pieces: tuple[Piece, ...]
    loose_nodes: int
    of_node: Ints

    @property
    def loose(self) -> tuple[Piece, ...]:
        return tuple(p for p in self.pieces if p.loose)


def connected(
    mesh: Mesh,
    group: Group,
    classes: Classes,
    labels: NDArray[np.integer] | None = None,
    label_name: str = "part",
) -> Pieces:
    """Pieces of the whole body.

    Parameters
    ----------
    classes : the nodes that copies share (none of them if nothing is merged).
    labels : (m,) a number for each cell, such as its part or material, to name pieces by.
    label_name : what the numbers are called.

    Examples
    --------
    Half of a bar that crosses the plane x = 0, and a bar that stands clear of it:

    >>> from expander.groups import CutPlane, make_group
    >>> from expander.seams import find_seams
    >>> points = np.array([[0, 0, 0], [1, 0, 0], [2, 1, 0], [3, 1, 0]], dtype=float)
    >>> bars = Mesh(points, np.arange(4), np.array([0, 2, 4]), np.array([3, 3], dtype=np.uint8))
    >>> group = make_group([CutPlane("mid", np.array([1.0, 0.0, 0.0]), np.zeros(3))], None)
    >>> found = connected(bars, group, find_seams(bars, group, None).nodes)
    >>> found.before, found.after, [(p.nodes, p.times, p.loose) for p in found.pieces]
    (4, 3, [(3, 1, False), (2, 2, True)])
    """
    raw = np.asarray(pieces(mesh), dtype=np.int64)
    in_cell = np.zeros(mesh.point_count, dtype=bool)
    in_cell[mesh.connectivity] = True
    of_node = np.full(mesh.point_count, -1, dtype=np.int64)
    of_node[in_cell] = np.unique(raw[in_cell], return_inverse=True)[1]
    count = int(of_node.max(initial=-1)) + 1
    links = _links(of_node, classes)
    label = _components(count, group, links)  # (copies, count)
    share = 1.0 / np.bincount(classes.item, minlength=mesh.point_count).clip(1)
    weight = np.bincount(of_node[in_cell], share[in_cell], minlength=count)
    after = int(label.max(initial=-1)) + 1
    found = []
    for p in _first_of_orbits(count, links).tolist():
        copies, members = np.nonzero(label == label[0, p])
        times = len(np.unique(label[:, p]))
        nodes = round(float(weight[members].sum()))
        alone, own = len(members) == 1 and after > 1, np.unique(members)
        words = _words(mesh, of_node, own, labels, label_name)
        words += f": {nodes} nodes in {len(np.unique(copies))} of {len(group)} copies"
        words += f", {times} times" if times > 1 else ""
        words += "; it touches no other copy" if alone else ""
        found.append(Piece(tuple(own.tolist()), tuple(np.unique(copies).tolist()), times, nodes,
                           alone, words))  # fmt: skip
    found.sort(key=lambda piece: -piece.nodes)
    return Pieces(count, count * len(group), after, tuple(found), int((~in_cell).sum()), of_node)


def _links(of_node: Ints, classes: Classes) -> Ints:
    """Distinct (piece, via, piece) that share a node, (k, 3)."""
    own = of_node[classes.item]
    other = of_node[classes.source]
    apart = (own >= 0) & (other >= 0) & ((classes.via != 0) | (own != other))
    return np.unique(np.stack([own, classes.via, other], axis=1)[apart], axis=0)


def _components(count: int, group: Group, links: Ints) -> Ints:
    """Number of the whole body's piece of each copy's piece, (copies, count)."""
    from scipy.sparse import coo_matrix
    from scipy.sparse.csgraph import connected_components

    size = len(group) * count
    label = np.arange(size, dtype=np.int64).reshape(len(group), count)
    every = np.arange(len(group))[:, None]
    while True:
        open_ = label[0, links[:, 0]] != label[links[:, 1], links[:, 2]]
        links = links[open_]
        if not len(links):
            return label
        # One new link per pair of pieces: it at least halves the number of what it can join.
        _, first = np.unique(links[:, [0, 2]], axis=0, return_index=True)
        own, via, other = links[first].T
        rows = label[every, own].ravel()
        columns = label[group.product[:, via], other].ravel()
        ones = np.ones(len(rows), dtype=np.int8)
        total = int(label.max()) + 1
        graph = coo_matrix((ones, (rows, columns)), shape=(total, total))
        joined = np.asarray(connected_components(graph, directed=False)[1], dtype=np.int64)
        label = joined[label]


def _first_of_orbits(count: int, links: Ints) -> Ints:
    """One of the sector's pieces for each kind of piece that the whole body has."""
    from scipy.sparse import coo_matrix
    from scipy.sparse.csgraph import connected_components

    ones = np.ones(len(links), dtype=np.int8)
    graph = coo_matrix((ones, (links[:, 0], links[:, 2])), shape=(count, count))
    return np.unique(connected_components(graph, directed=False)[1], return_index=True)[1]


def _words(
    mesh: Mesh,
    of_node: Ints,
    own: Ints,
    labels: NDArray[np.integer] | None,
    label_name: str,
) -> str:
    """Labels, place and size of these pieces as modelled."""
    points = mesh.points[np.isin(of_node, own)].astype(float)
    low, high = points.min(axis=0), points.max(axis=0)
    middle = ", ".join(f"{c:.4g}" for c in (low + high) / 2.0 + 0.0)
    size = " x ".join(f"{c:.4g}" for c in high - low)
    name = f"a piece around ({middle})"
    if labels is not None:
        cells = np.isin(of_node[mesh.connectivity[mesh.offsets[:-1]]], own)
        names = [str(n) for n in np.unique(labels[cells]).tolist()]
        shown = ", ".join(names[:6]) + (", .." if len(names) > 6 else "")
        name = f"{label_name}{'s' if len(names) > 1 else ''} {shown} around ({middle})"
    return f"{name}, {size} as modelled"
