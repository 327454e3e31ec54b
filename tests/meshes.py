"""Small sector meshes for tests, built node by node, and cases on them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pyvista
from scipy.spatial.transform import Rotation
from vtkmodules.util.numpy_support import vtk_to_numpy

from expander.casefile import CaseFile, validate_case
from expander.model import Mesh

VERTEX, LINE, TRIANGLE, POLYGON, QUAD, TETRA, HEXAHEDRON, WEDGE = 1, 3, 5, 7, 9, 10, 12, 13


@dataclass(frozen=True, eq=False)
class Sector:
    """Points (n, 3) and cells, each a VTK type and its nodes."""

    points: np.ndarray
    cells: list[tuple[int, list[int]]]

    @property
    def types(self) -> np.ndarray:
        return np.array([t for t, _ in self.cells], dtype=np.uint8)

    @property
    def connectivity(self) -> np.ndarray:
        return np.array([n for _, nodes in self.cells for n in nodes], dtype=np.int64)

    @property
    def offsets(self) -> np.ndarray:
        return np.cumsum([0] + [len(nodes) for _, nodes in self.cells]).astype(np.int64)

    def mesh(self) -> Mesh:
        return Mesh(self.points, self.connectivity, self.offsets, self.types)

    def grid(self) -> pyvista.UnstructuredGrid:
        flat = [n for _, nodes in self.cells for n in (len(nodes), *nodes)]
        return pyvista.UnstructuredGrid(np.array(flat), self.types, self.points)

    def moved(self, R: np.ndarray, t: Sequence[float] = (0.0, 0.0, 0.0)) -> Sector:
        """Every point x at R x + t."""
        return replace(self, points=self.points @ np.asarray(R).T + np.asarray(t, dtype=float))

    def as_type(self, dtype: type) -> Sector:
        return replace(self, points=self.points.astype(dtype))

    def plus(self, cells: Sequence[tuple[int, Sequence[int]]]) -> Sector:
        """More cells on the same points."""
        return replace(self, cells=self.cells + [(t, list(n)) for t, n in cells])

    def beside(self, other: Sector) -> Sector:
        """Both in one mesh, not joined."""
        n = len(self.points)
        more = [(t, [k + n for k in nodes]) for t, nodes in other.cells]
        return Sector(np.concatenate([self.points, other.points]), self.cells + more)

    def cells_at_nodes(self) -> np.ndarray:
        """Number of cells at each node, (n,)."""
        return np.bincount(self.connectivity, minlength=len(self.points))


def box(
    counts: Sequence[int],
    size: Sequence[float] = (1.0, 1.0, 1.0),
    corner: Sequence[float] = (0.0, 0.0, 0.0),
) -> Sector:
    """A block of hexahedra from `corner`, with edges a little uneven."""
    ticks = [
        c + s * (np.arange(n + 1) / n + 0.1 / n * np.sin(np.pi * np.arange(n + 1) / n))
        for n, s, c in zip(counts, size, corner, strict=True)
    ]
    nx, ny, nz = counts
    number = np.arange((nx + 1) * (ny + 1) * (nz + 1)).reshape(nx + 1, ny + 1, nz + 1)
    points = np.stack([a.ravel() for a in np.meshgrid(*ticks, indexing="ij")], axis=1)
    around = ((0, 0), (1, 0), (1, 1), (0, 1))
    cells = [
        (HEXAHEDRON, [int(number[i + a, j + b, k + c]) for c in (0, 1) for a, b in around])
        for i in range(nx)
        for j in range(ny)
        for k in range(nz)
    ]
    return Sector(points, cells)


def ring(
    sectors: int,
    counts: Sequence[int] = (2, 3, 2),
    inner: float = 1.0,
    outer: float = 2.0,
    height: float = 0.8,
    lean: float = 0.0,
    part: float = 1.0,
) -> Sector:
    """A sector of a ring about z from angle zero, of hexahedra; a solid pie if `inner` is 0.

    Parameters
    ----------
    counts : cells in radial, hoop and axial direction.
    lean : the seams are curved by this many radians over the radius and the height.
    part : of the sector's angle that is modelled (1/2 for half-sectors).
    """
    nr, nt, nz = counts
    angle = 2.0 * np.pi / sectors * part
    radii = inner + (outer - inner) * (np.arange(nr + 1) / nr) ** 1.2
    number = -np.ones((nr + 1, nt + 1, nz + 1), dtype=int)
    points: list[list[float]] = []
    for i, r in enumerate(radii):
        for k in range(nz + 1):
            z = height * k / nz
            for j in range(nt + 1):
                if r == 0.0 and j:
                    number[i, j, k] = number[i, 0, k]
                    continue
                theta = angle * j / nt + lean * (np.sin(3.0 * r) + z * z)
                number[i, j, k] = len(points)
                points.append([r * np.cos(theta), r * np.sin(theta), z])
    cells: list[tuple[int, list[int]]] = []
    for i in range(nr):
        for j in range(nt):
            for k in range(nz):
                base = [number[i, j], number[i + 1, j], number[i + 1, j + 1], number[i, j + 1]]
                if number[i, j, k] == number[i, j + 1, k]:
                    base = base[:3]
                nodes = [int(column[k + c]) for c in (0, 1) for column in base]
                cells.append((WEDGE if len(base) == 3 else HEXAHEDRON, nodes))
    return Sector(np.array(points), cells)


_EDGES = {
    HEXAHEDRON: ((0, 1), (1, 2), (2, 3), (3, 0), (4, 5), (5, 6), (6, 7), (7, 4), (0, 4), (1, 5),
                 (2, 6), (3, 7)),
    WEDGE: ((0, 1), (1, 2), (2, 0), (3, 4), (4, 5), (5, 3), (0, 3), (1, 4), (2, 5)),
    TETRA: ((0, 1), (1, 2), (2, 0), (0, 3), (1, 3), (2, 3)),
}  # fmt: skip


def quadratic(sector: Sector) -> Sector:
    """The same cells with a node in the middle of each edge (VTK types 24, 25, 26)."""
    points = [*sector.points]
    middle: dict[frozenset[int], int] = {}
    cells = []
    for vtk_id, nodes in sector.cells:
        more = []
        for a, b in _EDGES[vtk_id]:
            pair = frozenset((nodes[a], nodes[b]))
            if pair not in middle:
                middle[pair] = len(points)
                points.append((sector.points[nodes[a]] + sector.points[nodes[b]]) / 2.0)
            more.append(middle[pair])
        cells.append(({TETRA: 24, HEXAHEDRON: 25, WEDGE: 26}[vtk_id], nodes + more))
    return Sector(np.array(points), cells)


def tetrahedra(sector: Sector) -> Sector:
    """Each hexahedron cut into six tetrahedra along its diagonal from node 0 to node 6."""
    ways = ((1, 2), (2, 3), (3, 7), (7, 4), (4, 5), (5, 1))
    return Sector(
        sector.points,
        [(TETRA, [n[0], n[a], n[b], n[6]]) for _, n in sector.cells for a, b in ways],
    )


def collapsed(sector: Sector) -> Sector:
    """Wedges as hexahedra in which two nodes are one, as older programs write them."""
    order = (0, 1, 2, 0, 3, 4, 5, 3)
    return Sector(
        sector.points,
        [(HEXAHEDRON, [n[k] for k in order]) if t == WEDGE else (t, n) for t, n in sector.cells],
    )


def somewhere(seed: int = 5) -> tuple[np.ndarray, np.ndarray]:
    """A rotation that maps no axis to an axis, and a point off the origin."""
    rng = np.random.default_rng(seed)
    return Rotation.random(rng=rng).as_matrix(), rng.uniform(-9.0, 9.0, size=3)


def copies_of(tables: Mapping[str, Any]) -> tuple[np.ndarray, np.ndarray]:
    """All copies by plain multiplication of 4 x 4 matrices, and the factor of the load on each.

    The oracle for the program's own group: Householder's reflection, scipy's rotation, and the
    signs of the generators multiplied along.
    """
    makers: list[tuple[np.ndarray, float]] = []
    for mirror in tables.get("mirror", []):
        n = direction(mirror["normal"])
        M = np.eye(4)
        M[:3, :3] -= 2.0 * np.outer(n, n)
        M[:3, 3] = 2.0 * n * (n @ np.array(mirror.get("point", [0, 0, 0])))
        makers.append((M, -1.0 if mirror.get("load") == "antisymmetric" else 1.0))
    if "cyclic" in tables:
        axis = tables["cyclic"]
        N, h = axis["sectors"], axis.get("nodal_diameters", 0)
        p = np.array(axis.get("point", [0, 0, 0]))
        M = np.eye(4)
        turn = Rotation.from_rotvec(2 * np.pi / N * direction(axis.get("axis", "z")))
        M[:3, :3] = turn.as_matrix()
        M[:3, 3] = p - turn.apply(p)
        makers.append((M, float(np.cos(2 * np.pi * h / N).round())))
    found = [(np.eye(4), 1.0)]
    stacked = np.eye(4)[None]
    for M, chi in found:  # grows while it is walked
        for G, sign in makers:
            new = M @ G
            if np.abs(stacked[:, :3, :3] - new[:3, :3]).max(axis=(1, 2)).min() > 1e-6:
                found.append((new, chi * sign))
                stacked = np.concatenate([stacked, new[None]])
    return stacked, np.array([chi for _, chi in found])


def direction(word: str | Sequence[float]) -> np.ndarray:
    """Unit vector of "x", "y", "z" or three numbers."""
    v = np.eye(3)["xyz".index(word)] if isinstance(word, str) else np.array(word, dtype=float)
    return v / np.linalg.norm(v)


def placed(tables: Mapping[str, Any], R: np.ndarray, t: np.ndarray) -> dict[str, Any]:
    """The same planes and axis for a model moved by x -> R x + t."""
    out: dict[str, Any] = dict(tables)
    out["mirror"] = [
        {**m, "normal": (R @ direction(m["normal"])).tolist(), "point": t.tolist()}
        for m in tables.get("mirror", [])
    ]
    if "cyclic" in tables:
        axis = R @ direction(tables["cyclic"].get("axis", "z"))
        out["cyclic"] = {**tables["cyclic"], "axis": axis.tolist(), "point": t.tolist()}
    return out


def cell_nodes(grid: pyvista.UnstructuredGrid) -> list[np.ndarray]:
    """Node numbers of each cell of a grid."""
    cells = grid.GetCells()
    offsets, flat = (
        vtk_to_numpy(a) for a in (cells.GetOffsetsArray(), cells.GetConnectivityArray())
    )
    return np.split(flat, offsets[1:-1])


def centres(points: np.ndarray, nodes: Sequence[Sequence[int]]) -> np.ndarray:
    """Mean position of the nodes of each cell, (m, 3)."""
    return np.array([points[list(n)].mean(axis=0) for n in nodes])


def case_of(
    folder: Path,
    sector: Sector,
    tables: Mapping[str, Any],
    point_data: Mapping[str, np.ndarray] | None = None,
    cell_data: Mapping[str, np.ndarray] | None = None,
    name: str = "sector",
) -> CaseFile:
    """A case on this sector, its file written to `folder`."""
    grid = sector.grid()
    for key, array in (point_data or {}).items():
        grid.point_data[key] = array
    for key, array in (cell_data or {}).items():
        grid.cell_data[key] = array
    file = folder / f"{name}.vtu"
    grid.save(file)
    raw = {key: value for key, value in tables.items() if key != "model"}
    model = {"file": file.name, **tables.get("model", {})}
    return validate_case({"model": model, **raw}, folder)
