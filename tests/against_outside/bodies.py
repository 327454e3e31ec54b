"""Shared by the tests here: sector files, case files, and comparison with a known whole body.

Nothing here knows how copies are made. A test writes a sector with known values, has it
expanded, and compares with values that come from elsewhere: a formula, a solver, magpylib.
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from pathlib import Path

import numpy as np
import pyvista as pv
from numpy.typing import ArrayLike, NDArray
from scipy.spatial import cKDTree
from scipy.spatial.transform import Rotation

import expander

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

SIX = "xx yy zz xy yz zx"
_PAIRS = {"xx": (0, 0), "yy": (1, 1), "zz": (2, 2), "xy": (0, 1), "yz": (1, 2), "zx": (2, 0)}

# A coordinate system that is aligned with nothing, for planes and axes off the origin.
SKEW = Rotation.from_rotvec([-0.6, 1.0, 0.8]).as_matrix()
SHIFT = np.array([3.1, -2.3, 1.7])


# --- storage ------------------------------------------------------------------------------------


def stored(tensor: Floats, order: str = SIX, shear: float = 1.0) -> Floats:
    """(..., 3, 3) to stored components; shear = 2 for engineering shear strain."""
    parts = []
    for name in order.split():
        a, b = _PAIRS[name]
        parts.append(tensor[..., a, b] * (1.0 if a == b else shear))
    return np.stack(parts, axis=-1)


def tensor(values: Floats, order: str = SIX, shear: float = 1.0) -> Floats:
    """Stored components to (..., 3, 3); components that are not stored are 0."""
    full = np.zeros((*values.shape[:-1], 3, 3))
    for column, name in enumerate(order.split()):
        a, b = _PAIRS[name]
        full[..., a, b] = full[..., b, a] = values[..., column] / (1.0 if a == b else shear)
    return full


def turned(Q: Floats, values: Floats) -> Floats:
    """Vectors (..., 3) or tensors (..., 3, 3) in coordinates turned by Q."""
    if values.ndim >= 2 and values.shape[-2:] == (3, 3):
        return Q @ values @ Q.T
    return values @ Q.T


def polar_basis(points: Floats, axis: ArrayLike, point: ArrayLike) -> Floats:
    """(n, 3, 3) unit vectors outwards, around and along an axis, one per row."""
    a = np.asarray(axis, dtype=float)
    a = a / np.linalg.norm(a)
    away = points - np.asarray(point, dtype=float)
    away = away - np.outer(away @ a, a)
    out = away / np.linalg.norm(away, axis=1, keepdims=True)
    return np.stack([out, np.cross(a, out), np.broadcast_to(a, out.shape)], axis=1)


def mirror(normal: ArrayLike, point: ArrayLike) -> tuple[Floats, Floats]:
    """Q and t of the reflection x -> Q x + t in a plane."""
    n = np.asarray(normal, dtype=float)
    n = n / np.linalg.norm(n)
    return np.eye(3) - 2 * np.outer(n, n), 2 * n * (n @ np.asarray(point, dtype=float))


def turn(angle: float, axis: ArrayLike, point: ArrayLike) -> tuple[Floats, Floats]:
    """Q and t of the rotation x -> Q x + t about an axis."""
    a = np.asarray(axis, dtype=float)
    Q = Rotation.from_rotvec(angle * a / np.linalg.norm(a)).as_matrix()
    p = np.asarray(point, dtype=float)
    return Q, p - Q @ p


# --- meshes -------------------------------------------------------------------------------------


def quads(nu: int, nv: int, order: int = 1) -> tuple[Floats, Ints]:
    """Grid points (n, 2) of the unit square and its quadrilaterals with 4 or 9 nodes, as VTK's."""
    u, v = np.meshgrid(
        np.linspace(0, 1, order * nu + 1), np.linspace(0, 1, order * nv + 1), indexing="ij"
    )
    number = np.arange(u.size).reshape(u.shape)
    i, j = (
        a.ravel() for a in np.meshgrid(order * np.arange(nu), order * np.arange(nv), indexing="ij")
    )
    steps = (
        [(0, 0), (1, 0), (1, 1), (0, 1)]
        if order == 1
        else [(0, 0), (2, 0), (2, 2), (0, 2), (1, 0), (2, 1), (1, 2), (0, 1), (1, 1)]
    )
    cells = np.stack([number[i + a, j + b] for a, b in steps], axis=1)
    return np.stack([u.ravel(), v.ravel()], axis=1), cells


def centres(grid: pv.UnstructuredGrid) -> Floats:
    """(m, 3) mean of the nodes of each cell, for meshes of one cell type."""
    (nodes,) = grid.cells_dict.values()
    return grid.points[nodes].mean(axis=1)


# --- files --------------------------------------------------------------------------------------


def _toml(value: object) -> str:
    if isinstance(value, Mapping):
        return "{" + ", ".join(f"{json.dumps(k)} = {_toml(v)}" for k, v in value.items()) + "}"
    if isinstance(value, np.ndarray):
        return _toml(value.tolist())
    if isinstance(value, (list, tuple)):
        return "[" + ", ".join(_toml(v) for v in value) + "]"
    if isinstance(value, bool | np.bool_):
        return "true" if value else "false"
    if isinstance(value, str):
        return json.dumps(value)
    if isinstance(value, int | np.integer):
        return str(int(value))
    return repr(float(value))  # type: ignore[arg-type]


def write_sector(
    path: Path,
    points: Floats,
    cells: Mapping[int, Ints],
    point_data: Mapping[str, NDArray[np.generic]] | None = None,
    cell_data: Mapping[str, NDArray[np.generic]] | None = None,
) -> None:
    """A VTU file; cells by VTK type number, coordinates in the precision of `points`."""
    grid = pv.UnstructuredGrid(dict(cells), points)
    for name, values in (point_data or {}).items():
        grid.point_data[name] = values
    for name, values in (cell_data or {}).items():
        grid.cell_data[name] = values
    for attributes in (grid.GetPointData(), grid.GetCellData()):
        attributes.SetActiveScalars(None)
        attributes.SetActiveVectors(None)
    grid.save(path)


def write_case(path: Path, case: Mapping[str, object]) -> Path:
    """A case file from its tables."""
    path.write_text("".join(f"{key} = {_toml(value)}\n" for key, value in case.items()))
    return path


class Model:
    """A sector with its results, ready to be expanded from a folder.

    Fields are added with their values and the lines of their table in the case file; a second
    load case is added with `case`. `expand` writes everything and returns the whole body.
    """

    def __init__(self, folder: Path, points: Floats, cells: Mapping[int, Ints]) -> None:
        self.folder = folder
        self.points = points
        self.cells = cells
        self.fields: dict[str, Mapping[str, object]] = {}
        self.data: dict[str, tuple[dict, dict]] = {}
        self.tables: dict[str, object] = {"output": {"file": "whole.vtu"}}

    def field(self, name: str, kind: str, **words: object) -> Model:
        """Declare a field."""
        self.fields[name] = {"kind": kind, **words}
        return self

    def values(
        self,
        case: str = "result",
        *,
        points: Mapping[str, NDArray] | None = None,
        cells: Mapping[str, NDArray] | None = None,
    ) -> Model:
        """The arrays of a load case."""
        self.data[case] = (dict(points or {}), dict(cells or {}))
        return self

    def table(self, **tables: object) -> Model:
        """Further tables of the case file: mirror, cyclic, frames, case, sum, .."""
        self.tables.update(tables)
        return self

    def write(self, name: str = "case.toml") -> Path:
        """Write the sector files and the case file."""
        for case, (point_data, cell_data) in (self.data or {"result": ({}, {})}).items():
            write_sector(
                self.folder / f"{case}.vtu", self.points, self.cells, point_data, cell_data
            )
        model: dict[str, object] = {"linear": True}
        tables = dict(self.tables)
        if "case" in tables:
            tables["case"] = [{"file": f"{case['name']}.vtu", **case} for case in tables["case"]]  # type: ignore[attr-defined]
        else:
            model["file"] = "result.vtu"
        model.update(tables.pop("model", {}))  # type: ignore[call-overload]
        return write_case(self.folder / name, {"model": model, **tables, "fields": self.fields})

    def expand(self, result: str | None = None) -> pv.UnstructuredGrid:
        """The whole body."""
        return expander.expand(self.write(), result)


# --- comparison ---------------------------------------------------------------------------------


def miss(found: ArrayLike, expected: ArrayLike, scale: float | None = None) -> float:
    """Largest difference over the field's largest magnitude."""
    found, expected = np.asarray(found, dtype=float), np.asarray(expected, dtype=float)
    assert found.shape == expected.shape
    assert np.isfinite(found).all()
    size = np.abs(expected).max() if scale is None else scale
    assert size > 0.0
    return float(np.abs(found - expected).max() / size)


def rows_of(points: Floats, others: Floats, tolerance: float) -> Ints:
    """For each point the row of the same one among the others: one to one, or it fails."""
    assert len(points) == len(others)
    distance, row = cKDTree(others).query(points)
    assert distance.max() <= tolerance
    assert len(np.unique(row)) == len(row)
    return row


def no_twins(grid: pv.UnstructuredGrid, distance: float) -> bool:
    """No two nodes are closer than the distance."""
    return not cKDTree(grid.points).query_pairs(distance)


def mirrors(*planes: Sequence[object]) -> list[dict[str, object]]:
    """Tables of cut planes from (name, normal, point, load)."""
    return [dict(zip(("name", "normal", "point", "load"), plane, strict=False)) for plane in planes]
