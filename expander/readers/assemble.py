"""From the arrays of a file to a Model: the checks that every format must pass.

A reader may hand over whatever its library made of a damaged file. Nothing after this
module has to ask again whether node numbers are in range or arrays have the right length.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from expander.errors import InputError, NotYetError
from expander.model import Mesh, Model

AGAIN = "The file is damaged or incomplete: write it again."

# Nodes of each VTK cell type whose number of nodes is fixed.
NODES = {
    1: 1, 3: 2, 5: 3, 8: 4, 9: 4, 10: 4, 11: 8, 12: 8, 13: 6, 14: 5, 15: 10, 16: 12,
    21: 3, 22: 6, 23: 8, 24: 10, 25: 20, 26: 15, 27: 13, 28: 9, 29: 27, 30: 6, 31: 12,
    32: 18, 33: 24, 34: 7, 35: 4, 37: 19,
}  # fmt: skip
# Smallest number of nodes of the types that hold any number of them.
_AT_LEAST = {2: 1, 4: 2, 6: 3, 7: 3, 36: 4, 41: 1, 42: 4} | dict.fromkeys(range(51, 82), 1)

_POLYHEDRON = 42

# Every VTK type by number: fewest and most nodes; (0, 0) where there is no such type.
_FEWEST = np.zeros(256, np.int64)
_MOST = np.zeros(256, np.int64)
for _type, _count in _AT_LEAST.items():
    _FEWEST[_type], _MOST[_type] = _count, np.iinfo(np.int64).max
for _type, _count in NODES.items():
    _FEWEST[_type] = _MOST[_type] = _count


def checked_mesh(
    path: Path,
    points: NDArray[Any],
    connectivity: NDArray[Any],
    offsets: NDArray[Any],
    types: NDArray[Any],
) -> Mesh:
    """A mesh whose numbers can be trusted.

    Parameters
    ----------
    path : the file, for messages.
    points : (n, 3) numbers.
    connectivity : (L,) node numbers from 0.
    offsets : (m + 1,) place of each cell's first node, and the end.
    types : (m,) VTK cell types.
    """
    if len(points) == 0:
        raise InputError(f"{path}: the mesh has no points", "Name a file that holds the mesh.")
    if points.ndim != 2 or points.shape[1] != 3:
        raise InputError(f"{path}: the points have shape {points.shape}, not (n, 3)", AGAIN)
    if len(types) == 0:
        raise InputError(f"{path}: the mesh has no cells", "Name a file that holds the mesh.")
    if points.dtype not in (np.float32, np.float64):
        points = points.astype(np.float64)
    finite = np.isfinite(points).all(axis=1)
    if not finite.all():
        raise InputError(
            f"{path}: point {int(np.argmin(finite))} has a coordinate that is no finite number",
            AGAIN,
        )

    nodes = np.ascontiguousarray(connectivity, dtype=np.int64)
    offsets = np.ascontiguousarray(offsets, dtype=np.int64)
    types = np.ascontiguousarray(types, dtype=np.uint8)
    sizes = np.diff(offsets)
    if len(sizes) != len(types) or offsets[0] != 0 or offsets[-1] != len(nodes):
        raise InputError(
            f"{path}: {len(types)} cell types, {len(offsets)} cell offsets ending at "
            f"{offsets[-1] if len(offsets) else 'nothing'} and {len(nodes)} node numbers "
            "do not fit together",
            AGAIN,
        )
    if sizes.min() < 0:
        raise InputError(f"{path}: cell {int(np.argmax(sizes < 0))} ends before it begins", AGAIN)
    unknown = _MOST[types] == 0
    if unknown.any():
        cell = int(np.argmax(unknown))
        raise InputError(
            f"{path}: cell {cell} has type {types[cell]}, which is no VTK cell type", AGAIN
        )
    if (types == _POLYHEDRON).any():
        raise NotYetError(
            f"{path}: cell {int(np.argmax(types == _POLYHEDRON))} is a polyhedron",
            "Cells given by their faces come later.",
        )
    wrong = (sizes < _FEWEST[types]) | (sizes > _MOST[types])
    if wrong.any():
        cell = int(np.argmax(wrong))
        raise InputError(
            f"{path}: cell {cell} of VTK type {types[cell]} has {sizes[cell]} nodes, "
            f"not {_FEWEST[types[cell]]}",
            AGAIN,
        )
    if nodes.min() < 0 or nodes.max() >= len(points):
        stray = (nodes < 0) | (nodes >= len(points))
        place = int(np.argmax(stray))
        cell = int(np.searchsorted(offsets, place, side="right")) - 1
        raise InputError(
            f"{path}: cell {cell} uses node {nodes[place]}, "
            f"but the nodes are 0 to {len(points) - 1}",
            AGAIN,
        )
    return Mesh(points, nodes, offsets, types)


def checked_arrays(
    path: Path, place: str, count: int, arrays: Iterable[tuple[str, NDArray[np.generic]]]
) -> dict[str, NDArray[np.generic]]:
    """Arrays by name, each ``(count,)`` or ``(count, k)``; k = 1 becomes one dimension.

    Parameters
    ----------
    path : the file, for messages.
    place : "point" or "cell".
    count : number of points or cells of the mesh.
    arrays : names and values as the file has them.
    """
    found: dict[str, NDArray[np.generic]] = {}
    for name, values in arrays:
        if name in found:
            raise InputError(
                f"{path}: two {place} arrays are called '{name}'",
                "Rename one of them where the file is written.",
            )
        if values.ndim == 0 or len(values) != count:
            raise InputError(
                f"{path}: {place} array '{name}' has {len(values) if values.ndim else 1} values "
                f"for {count} {place}s",
                AGAIN,
            )
        if values.ndim > 2:
            values = values.reshape(count, -1)
        found[name] = values[:, 0] if values.ndim == 2 and values.shape[1] == 1 else values
    return found


def model(
    path: Path,
    mesh: Mesh,
    point_arrays: Iterable[tuple[str, NDArray[np.generic]]],
    cell_arrays: Iterable[tuple[str, NDArray[np.generic]]],
    notes: Sequence[str],
) -> Model:
    """The model of one file, its arrays checked against its mesh."""
    return Model(
        mesh,
        checked_arrays(path, "point", mesh.point_count, point_arrays),
        checked_arrays(path, "cell", mesh.cell_count, cell_arrays),
        path,
        tuple(notes),
    )
