"""Numbering: where each copy's points and cells stand in the whole body.

Copy after copy, each in the sector's order, less the items that a lower copy has already written.
Copies that leave out the same items share one pattern, so the memory is that of the sector however
many copies there are.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from expander.groups import Group
from expander.model import Mesh
from expander.seams import Classes
from expander.topology import Ints, blocks


@dataclass(frozen=True, eq=False)
class Numbering:
    """Places of points (or cells) in the whole body.

    Attributes
    ----------
    count : items of the sector.
    classes : items shared by several copies.
    copies : numbers of the copies that are built, ascending.
    """

    group: Group
    count: int
    classes: Classes
    copies: tuple[int, ...]

    @cached_property
    def _patterns(self) -> tuple[list[Ints], dict[int, int]]:
        """Left-out positions in `classes.items`, each distinct set once; its number by copy."""
        patterns: list[Ints] = []
        known: dict[bytes, int] = {}
        of_copy: dict[int, int] = {}
        for g in self.copies:
            owner, source = self._owners(g)
            left_out = np.flatnonzero((owner != g) | (source != self.classes.items))
            key = left_out.tobytes()
            if key not in known:
                known[key] = len(patterns)
                patterns.append(left_out)
            of_copy[g] = known[key]
        return patterns, of_copy

    def _owners(self, copy: int) -> tuple[Ints, Ints]:
        """Like `Classes.owners`, among the copies that are built."""
        if len(self.copies) == len(self.group) or not len(self.classes.item):
            return self.classes.owners(self.group, copy)
        size = self.count
        target = self.group.product[copy, self.classes.via]
        built = np.zeros(len(self.group), dtype=bool)
        built[list(self.copies)] = True
        keys = np.where(built[target], target, len(self.group)) * size + self.classes.source
        least = np.minimum.reduceat(keys, self.classes.starts)
        return least // size, least % size

    @cached_property
    def _kept(self) -> list[Ints | None]:
        """Items that are written, for each pattern; None where all are."""
        kept: list[Ints | None] = []
        for left_out in self._patterns[0]:
            mask = np.ones(self.count, dtype=bool)
            mask[self.classes.items[left_out]] = False
            kept.append(np.flatnonzero(mask) if len(left_out) else None)
        return kept

    def kept(self, copy: int) -> Ints | None:
        """The sector's items that `copy` writes, ascending; None if it writes all."""
        return self._kept[self._patterns[1][copy]]

    def written(self, copy: int) -> int:
        """How many items `copy` writes."""
        return self.count - len(self._patterns[0][self._patterns[1][copy]])

    @cached_property
    def first(self) -> dict[int, int]:
        """Number in the whole body of the first item that each copy writes."""
        first, total = {}, 0
        for g in self.copies:
            first[g] = total
            total += self.written(g)
        return first

    @cached_property
    def total(self) -> int:
        """Items of the whole body."""
        return sum(self.written(g) for g in self.copies)

    @property
    def merged(self) -> int:
        """How many items were left out because another copy writes them."""
        return self.count * len(self.copies) - self.total

    def numbers(self, copy: int) -> Ints:
        """Number in the whole body of every item of `copy`, (count,)."""
        numbers = np.arange(self.first[copy], self.first[copy] + self.count)
        left_out = self._patterns[0][self._patterns[1][copy]]
        if not len(left_out):
            return numbers
        numbers -= self._before(copy)
        owner, source = self._owners(copy)
        items = self.classes.items[left_out]
        owner, source = owner[left_out], source[left_out]
        for other in np.unique(owner).tolist():
            theirs = owner == other
            missing = self.classes.items[self._patterns[0][self._patterns[1][other]]]
            rank = source[theirs] - np.searchsorted(missing, source[theirs])
            numbers[items[theirs]] = self.first[other] + rank
        return numbers

    def _before(self, copy: int) -> Ints:
        """How many left-out items come before each item, (count,)."""
        flags = np.zeros(self.count + 1, dtype=np.int64)
        items = self.classes.items[self._patterns[0][self._patterns[1][copy]]]
        flags[items + 1] = 1
        return np.asarray(np.cumsum(flags)[:-1])


def shared_cells(mesh: Mesh, nodes: Classes, group: Group) -> Classes:
    """Classes of cells that coincide with a cell of another copy, such as a web in a cut plane.

    A cell is one with the image of another if their nodes are, whatever their order.
    """
    if not len(nodes.item):
        return Classes.none()
    shared = np.zeros(mesh.point_count, dtype=bool)
    shared[nodes.items] = True
    inside = np.logical_and.reduceat(shared[mesh.connectivity], mesh.offsets[:-1])
    candidates = np.flatnonzero(inside)
    found: list[tuple[Ints, Ints, Ints]] = []
    token = np.random.default_rng(21).integers(0, 2**62, size=mesh.point_count, dtype=np.int64)
    parts = list(blocks(mesh, candidates)) if len(candidates) else []
    keys_by_type = [(t, _ranked(np.sort(token[block], axis=1)), cells) for t, cells, block in parts]
    for s in np.unique(nodes.via).tolist():
        if s == 0:
            continue
        source = np.full(mesh.point_count, -1, dtype=np.int64)
        through = nodes.via == s
        source[nodes.item[through]] = nodes.source[through]
        for (_, cells, block), (_, keys, same_cells) in zip(parts, keys_by_type, strict=True):
            image = source[block]
            whole = np.flatnonzero((image >= 0).all(axis=1))
            if not len(whole):
                continue
            wanted = np.hstack([np.sort(token[image[whole]], axis=1), keys[whole, -1:]])
            pool, where = np.unique(np.vstack([keys, wanted]), axis=0, return_inverse=True)
            where = where.ravel()
            cell_of = np.full(len(pool), -1, dtype=np.int64)
            cell_of[where[: len(keys)]] = same_cells
            partner = cell_of[where[len(keys) :]]
            ok = partner >= 0
            found.append((cells[whole[ok]], np.full(int(ok.sum()), s), partner[ok]))
    if not found or not sum(len(f[0]) for f in found):
        return Classes.none()
    items = np.unique(np.concatenate([f[0] for f in found]))
    found.append((items, np.zeros(len(items), dtype=np.int64), items))
    item, via, source = (np.concatenate([f[k] for f in found]) for k in range(3))
    order = np.lexsort((source, via, item))
    return Classes(item[order], via[order], source[order])


def _ranked(keys: Ints) -> Ints:
    """Rows with one more column: how many equal rows came before, to tell cells on the same nodes
    (two springs side by side) from each other."""
    _, which = np.unique(keys, axis=0, return_inverse=True)
    which = which.ravel()
    order = np.argsort(which, kind="stable")
    sorted_ = which[order]
    first = np.searchsorted(sorted_, sorted_)
    rank = np.empty(len(keys), dtype=np.int64)
    rank[order] = np.arange(len(keys)) - first
    return np.column_stack([keys, rank])
