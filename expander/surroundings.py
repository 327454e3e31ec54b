"""Where recovered values must not be averaged: between different parts and over folds of shells.

One array holds one value at a node, so such a node keeps the value of the lowest copy there; the
mesh, and every other field, is joined as elsewhere.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from expander.cells import dimensions
from expander.fields import Field
from expander.groups import Group
from expander.model import Mesh, Model
from expander.placements import Floats
from expander.seams import Classes
from expander.topology import Ints, blocks, cell_sizes, cells_touching
from expander.tradewords import normalised

_PART_WORDS = ("part", "material", "property", "section")
_FOLD_COSINE = np.cos(np.deg2rad(30.0))  # feature angle, common practice


def not_averaged(
    mesh: Mesh, model: Model, fields: list[Field], classes: Classes, group: Group
) -> tuple[Ints, list[str]]:
    """Seam nodes whose two sides are different parts or fold, and notes that say so."""
    none = np.empty(0, dtype=np.int64)
    if not len(classes.item) or not any(f.seam == "recovered" and f.on == "points" for f in fields):
        return none, []
    apart, notes = none, []
    for f in fields:
        if f.on != "cells" or f.kind != "label" or not normalised(f.name).startswith(_PART_WORDS):
            continue
        parts = _parts_hash(mesh, f.values(model)[:, 0], classes.items)
        differ = parts[classes.row] != parts[np.searchsorted(classes.items, classes.source)]
        found = np.unique(classes.item[differ])
        if len(found):
            apart = np.union1d(apart, found)
            notes.append(
                f"{len(found)} seam nodes join different values of {f.name!r}: recovered values "
                "are not averaged there, each is that of the lowest copy"
            )
    normals, flat = _shell_normals(mesh, classes.items)
    source = np.searchsorted(classes.items, classes.source)
    Q = np.stack([p.Q for p in group.placements])[classes.via]
    cosine = np.einsum("ei,eij,ej->e", normals[classes.row], Q, normals[source])
    folded = flat[classes.row] & flat[source] & (np.abs(cosine) < _FOLD_COSINE)
    found = np.unique(classes.item[folded])
    if len(found):
        apart = np.union1d(apart, found)
        notes.append(
            f"{len(found)} seam nodes lie on a fold of shells: recovered values are not averaged "
            "there, each is that of the lowest copy"
        )
    return apart, notes


def _parts_hash(mesh: Mesh, part: NDArray[np.generic], nodes: Ints) -> NDArray[np.uint64]:
    """One number for the set of parts at each node, (k,)."""
    numbers, which = np.unique(part, return_inverse=True)
    token = np.random.default_rng(22).integers(0, 2**63, size=len(numbers), dtype=np.uint64)
    marked = np.zeros(mesh.point_count, dtype=bool)
    marked[nodes] = True
    owner = np.repeat(np.arange(mesh.cell_count), cell_sizes(mesh))
    used = marked[mesh.connectivity]
    pairs = np.unique(mesh.connectivity[used] * len(numbers) + which[owner[used]])
    total = np.zeros(mesh.point_count, dtype=np.uint64)
    np.add.at(total, pairs // len(numbers), token[pairs % len(numbers)])
    return total[nodes]


def _shell_normals(mesh: Mesh, nodes: Ints) -> tuple[Floats, NDArray[np.bool_]]:
    """Unit normal of the shells at each node (k, 3), and whether shells alone meet there (k,)."""
    marked = np.zeros(mesh.point_count, dtype=bool)
    marked[nodes] = True
    touching = cells_touching(mesh, marked)
    dims = dimensions(mesh.types)
    normal = np.zeros((mesh.point_count, 3))
    solid = np.zeros(mesh.point_count, dtype=bool)
    shell = np.zeros(mesh.point_count, dtype=bool)
    for _, cells, block in blocks(mesh, touching) if len(touching) else ():
        if dims[cells[0]] == 3:
            solid[block] = True
        elif dims[cells[0]] == 2:
            p = mesh.points[block].astype(float)
            n = np.cross(p[:, 1] - p[:, 0], p[:, 2] - p[:, 0])
            n /= np.maximum(np.linalg.norm(n, axis=1), 1e-300)[:, None]
            for column in range(block.shape[1]):
                nodes_here = block[:, column]
                # Neighbours may be oriented either way: turn each to the first one found.
                known = (np.abs(normal[nodes_here]).sum(axis=1) > 0)[:, None]
                sign = np.where(known, np.sign((normal[nodes_here] * n).sum(axis=1))[:, None], 1.0)
                np.add.at(normal, nodes_here, sign * n)
                shell[nodes_here] = True
    length = np.linalg.norm(normal, axis=1)
    good = shell & ~solid & (length > 1e-12)
    unit_normal = normal / np.maximum(length, 1e-300)[:, None]
    return unit_normal[nodes], good[nodes]
