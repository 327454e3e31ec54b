"""Nodal loads on the whole body: read, and brought back to the sector's nodes.

A load at a node that several copies share is the whole body's; each copy takes its share, the same
for all of them, as the expander adds extensive values at a seam.
"""

from __future__ import annotations

import csv
import warnings
import zipfile
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from expander.errors import InputError
from expander.groups import Group
from expander.model import Mesh
from expander.placements import Floats
from expander.quantities import quantity
from expander.readers.paths import require_file
from expander.resolve import acting, product
from expander.seams import Classes, Tolerance
from expander.topology import Ints

# What a node can be loaded with: the quantity, and how its components are called in a table.
LOADS = {
    "force": (quantity("polar vector", 3), ("fx", "fy", "fz")),
    "moment": (quantity("axial vector", 3), ("mx", "my", "mz")),
    "heat flow": (quantity("scalar", 1), ("q",)),
}
_COLUMNS = "x, y, z and fx, fy, fz (with mx, my, mz or without), or x, y, z and q for heat flows"


@dataclass(frozen=True, eq=False)
class WholeLoad:
    """Loads at points of the whole body.

    Attributes
    ----------
    source : the file.
    points : (m, 3), in the model's length unit.
    values : "force" (m, 3), "moment" (m, 3) or "heat flow" (m, 1), in global directions.
    """

    source: Path
    points: Floats
    values: Mapping[str, Floats]


def read_loads(path: Path, arrays: Mapping[str, str] | None = None) -> WholeLoad:
    """Read nodal loads on the whole body; points without any are left out.

    Parameters
    ----------
    path : a .csv with the columns x, y, z and fx, fy, fz (mx, my, mz), or q; a .npz with `points`
        (m, 3) and arrays; or a model file with arrays on its points.
    arrays : names of the arrays for "force", "moment" and "heat flow" in a .npz or a model file;
        "force", "moment" and "heat_flow" by default.

    Raises
    ------
    InputError
        If the file cannot be read, or holds no load or values that are not finite.
    """
    require_file(path)
    if path.suffix.lower() == ".csv":
        if arrays:
            raise InputError(f"{path}: a table has columns, not arrays.",
                             f"Leave out --array; columns are {_COLUMNS}.")  # fmt: skip
        points, values = _from_csv(path)
    elif path.suffix.lower() == ".npz":
        points, values = _from_npz(path, arrays)
    else:
        from expander.readers import read_model

        model = read_model(path)
        points = model.mesh.points.astype(float)
        values = _picked(path, model.point_data, arrays)
    for name, numbers in {"points": points, **values}.items():
        bad = ~np.isfinite(numbers).all(axis=1)
        if bad.any():
            raise InputError(
                f"{path}: {int(bad.sum())} rows of {name} hold values that are not finite; the "
                f"first is row {int(np.argmax(bad))}, counted from 0.",
                "Expected numbers; write 0 where there is no load.",
            )
    loaded = np.any([v.any(axis=1) for v in values.values()], axis=0)
    if not loaded.any():
        raise InputError(f"{path}: no point carries a load.", "Expected values other than 0.")
    kept = {name: v[loaded] for name, v in values.items() if v.any()}
    return WholeLoad(path, points[loaded], kept)


def _from_csv(path: Path) -> tuple[Floats, dict[str, Floats]]:
    try:
        with path.open(encoding="utf-8-sig", newline="") as file:
            head = [name.strip().lower() for name in next(csv.reader(file), [])]
    except (UnicodeDecodeError, csv.Error) as problem:
        raise InputError(f"{path} is no table of text: {problem}.", "Save it as UTF-8.") from None
    known = ["x", "y", "z", *(c for _, names in LOADS.values() for c in names)]
    twice = [n for n in head if head.count(n) > 1]
    unknown = [n for n in head if n not in (*known, "node")]
    groups = [("x", "y", "z"), *(names for _, names in LOADS.values())]
    partial = [g for g in groups if 0 < len(set(g) & set(head)) < len(g)]
    loads = [n for n, (_, names) in LOADS.items() if set(names) <= set(head)]
    if unknown or twice or partial or "x" not in head or not loads:
        what = (
            f"column {unknown[0]!r} is unknown" if unknown
            else f"two columns are called {twice[0]!r}" if twice
            else f"of {', '.join(partial[0])} only "
                 f"{', '.join(n for n in partial[0] if n in head)} are there" if partial
            else "the columns of points or of loads are missing"
        )  # fmt: skip
        raise InputError(f"{path}: {what}.", f"Expected in the first line: {_COLUMNS}.")
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # that there are no rows is said below
            rows = np.loadtxt(path, delimiter=",", skiprows=1, comments=None, ndmin=2,
                              encoding="utf-8-sig")  # fmt: skip
    except ValueError as problem:
        raise InputError(f"{path}: {problem}.", "Write one number per column.") from None
    if rows.shape[1] != len(head) and rows.size:
        raise InputError(f"{path}: rows have {rows.shape[1]} numbers, the first line names "
                         f"{len(head)}.", "Write one number per column.")  # fmt: skip
    if not rows.size:
        raise InputError(f"{path} has no rows below its first line.", "Write the table again.")

    def columns(names: tuple[str, ...]) -> Floats:
        return np.asarray(rows[:, [head.index(n) for n in names]])

    return columns(("x", "y", "z")), {n: columns(LOADS[n][1]) for n in loads}


def _from_npz(path: Path, arrays: Mapping[str, str] | None) -> tuple[Floats, dict[str, Floats]]:
    try:
        with np.load(path, allow_pickle=False) as stored:
            data = {name: np.asarray(stored[name]) for name in stored.files}
    except (OSError, ValueError, EOFError, zipfile.BadZipFile) as problem:
        raise InputError(f"{path} is no complete .npz file of numbers: {problem}.",
                         "Write it with numpy.savez.") from None  # fmt: skip
    points = data.pop("points", np.empty(0))
    if points.ndim != 2 or points.shape[1] != 3 or points.dtype.kind not in "iuf":
        raise InputError(f"{path}: there is no array 'points' of shape (m, 3).",
                         "Store the positions of the loaded nodes as 'points'.")  # fmt: skip
    return points.astype(float), _picked(path, data, arrays, len(points))


def _picked(
    path: Path,
    data: Mapping[str, NDArray[Any]],
    arrays: Mapping[str, str] | None,
    count: int | None = None,
) -> dict[str, Floats]:
    """The arrays that hold loads, each (m, components)."""
    usual = {n: n.replace(" ", "_") for n in LOADS if n.replace(" ", "_") in data}
    names = dict(arrays) if arrays else usual
    if not names:
        raise InputError(
            f"{path}: no array on points is called force, moment or heat_flow.",
            f"Name it: --array force=NAME. Arrays: {', '.join(data) or 'none'}.",
        )
    found = {}
    for load, name in names.items():
        if name not in data:
            raise InputError(f"{path}: there is no array {name!r} on points.",
                             f"Arrays: {', '.join(data) or 'none'}.")  # fmt: skip
        size = LOADS[load][0].size
        values = data[name].reshape(len(data[name]), -1) if data[name].ndim else np.empty((0, 0))
        if values.shape != (len(values) if count is None else count, size) or (
            values.dtype.kind not in "iuf"
        ):
            raise InputError(
                f"{path}: array {name!r} of shape {data[name].shape} is no {load}.",
                f"Expected {size} real number{'s' * (size > 1)} at each point.",
            )
        found[load] = values.astype(float)
    return found


def locate(load: WholeLoad, mesh: Mesh, group: Group, given: float | None) -> tuple[Ints, Ints]:
    """Copy and sector node that stand at each point, (m,) each.

    Each point is brought back with every placement and compared with the sector's nodes; of nodes
    that several copies share the first one found stands for all.

    Parameters
    ----------
    given : the case's seam.tolerance, or None.

    Raises
    ------
    InputError
        For points where no node is, or where nodes of one copy lie on top of each other.
    """
    from scipy.spatial import cKDTree

    tolerance = Tolerance(mesh, given)
    nodes = mesh.points.astype(float)
    tree = cKDTree(nodes)
    low, high = mesh.bounds[0] - tolerance.reach, mesh.bounds[1] + tolerance.reach
    count = len(load.points)
    copy, node = np.zeros(count, dtype=np.int64), np.zeros(count, dtype=np.int64)
    nearest = np.full(count, np.inf)
    for g, placement in enumerate(group.placements):
        open_ = np.flatnonzero(nearest > tolerance.spacing)  # nothing can be nearer than that
        if not len(open_):
            break
        back = placement.inverse().apply(load.points[open_])
        inside = ((back >= low) & (back <= high)).all(axis=1)
        nearby = tree.query(back[inside], distance_upper_bound=tolerance.reach)
        distance, found = np.asarray(nearby[0]), np.asarray(nearby[1])
        rows = open_[inside]
        better = distance < nearest[rows]
        rows = rows[better]
        copy[rows], node[rows], nearest[rows] = g, found[better], distance[better]
    met = np.isfinite(nearest)
    met[met] = nearest[met] <= tolerance.at(node[met])
    if not met.all():
        raise _unmatched(load, mesh, group, np.flatnonzero(~met), tree)
    used = np.unique(node)
    closest = tree.query(nodes[used], k=min(2, len(nodes)))
    distance, two = np.asarray(closest[0]), np.asarray(closest[1])
    if len(nodes) > 1 and (distance[:, 1] <= tolerance.at(used)).any():
        bad = int(np.argmax(distance[:, 1] <= tolerance.at(used)))
        raise InputError(
            f"{load.source}: the load at ({_at(nodes[used[bad]])}) cannot be given to one node: "
            f"nodes {int(two[bad].min())} and {int(two[bad].max())} of the sector lie on top of "
            "each other there.",
            "Load a node beside it, or merge the two in the model.",
        )
    return copy, node


def _unmatched(load: WholeLoad, mesh: Mesh, group: Group, rows: Ints, tree: Any) -> InputError:
    shown = load.points[rows[:3]]
    away = [float(min(tree.query(p.inverse().apply(x[None]))[0][0] for p in group.placements))
            for x in shown]  # fmt: skip
    listed = "; ".join(f"({_at(x)}), {d:.3g} away" for x, d in zip(shown, away, strict=True))
    return InputError(
        f"{load.source}: {len(rows)} of {len(load.points)} loaded points are no nodes of the whole "
        f"body: {listed}{'; ..' * (len(rows) > 3)} from the nearest image of a node.",
        "Expected points that a placement of the group brings back to a node; check the planes and "
        "the axis, the length unit, or give a larger seam.tolerance.",
    )


def _at(point: NDArray[np.floating]) -> str:
    return ", ".join(f"{c:.6g}" for c in point)


def turned_shares(
    load: WholeLoad, copy: Ints, node: Ints, classes: Classes, group: Group, count: int
) -> dict[str, Any]:
    """Each copy's share of the loads in turned components.

    Parameters
    ----------
    copy, node : from `locate`, (m,).
    classes : nodes that several copies share, see `expander.seams`.
    count : n, nodes of the sector.

    Returns
    -------
    For each load a sparse (copies, n * components): ``rho(g)^-1 f(g x) / multiplicity``.
    """
    from scipy.sparse import csr_array

    row, at, there, share = _shares(copy, node, classes, group)
    out = {}
    for name, values in load.values.items():
        q = LOADS[name][0]
        parts = np.empty((len(row), q.size))
        order = np.argsort(at, kind="stable")
        copies, first = np.unique(at[order], return_index=True)
        for g, rows in zip(copies.tolist(), np.split(order, first[1:]), strict=True):
            back = acting(q, group.placements[g].Q.T, 1.0, "load")
            parts[rows] = product(values[row[rows]] * share[rows, None], back)
        column = there[:, None] * q.size + np.arange(q.size)
        line = np.broadcast_to(at[:, None], column.shape)
        shape = (len(group), count * q.size)
        out[name] = csr_array((parts.ravel(), (line.ravel(), column.ravel())), shape=shape)
    return out


def _shares(
    copy: Ints, node: Ints, classes: Classes, group: Group
) -> tuple[Ints, Ints, Ints, Floats]:
    """Point, copy, node and share of every copy that has a node at a point."""
    shared = np.isin(node, classes.items)
    alone, together = np.flatnonzero(~shared), np.flatnonzero(shared)
    begin = np.searchsorted(classes.item, node[together], side="left")
    length = np.searchsorted(classes.item, node[together], side="right") - begin
    inside = np.arange(int(length.sum())) - np.repeat(np.cumsum(length) - length, length)
    entry = np.repeat(begin, length) + inside
    row = np.concatenate([alone, np.repeat(together, length)])
    at = np.concatenate([copy[alone], group.product[np.repeat(copy[together], length),
                                                    classes.via[entry]]])  # fmt: skip
    there = np.concatenate([node[alone], classes.source[entry]])
    share = np.concatenate([np.ones(len(alone)), np.repeat(1.0 / np.maximum(length, 1), length)])
    return row, at, there, share
