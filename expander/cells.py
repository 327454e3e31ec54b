"""Cell types: their corners, mid-side nodes, faces, and the node order of their mirror image.

A mirror turns every cell inside out. The image is right again when its nodes are listed in the
order of a reflection of the reference cell, so one corner permutation per shape says it all: a
mid-side, face or centre node is named by the corners whose mean it is, and goes where they go.
Node orders are those of VTK (docs.vtk.org, VTK file formats and cell types).

>>> CELL_TYPES[10].name, CELL_TYPES[10].mirrored
('tetrahedron', (0, 2, 1, 3))
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from expander.errors import NotYetError

Corners = tuple[int, ...]


@dataclass(frozen=True)
class Shape:
    """What all cells of one outline share.

    Attributes
    ----------
    dimension : 0 to 3.
    mirrored : corner ``i`` of the image cell is corner ``mirrored[i]`` of the cell.
    edges : pairs of corners. faces : corner cycles, solids only, normals not ordered.
    """

    name: str
    dimension: int
    mirrored: Corners
    edges: tuple[Corners, ...] = ()
    faces: tuple[Corners, ...] = ()


def _prism(name: str, sides: int, mirrored_base: Corners) -> Shape:
    around = [(i, (i + 1) % sides) for i in range(sides)]
    top = [(a + sides, b + sides) for a, b in around]
    up = [(i, i + sides) for i in range(sides)]
    faces = [(*range(sides),), (*range(sides, 2 * sides),)]
    faces += [(a, b, b + sides, a + sides) for a, b in around]
    mirrored = (*mirrored_base, *(i + sides for i in mirrored_base))
    return Shape(name, 3, mirrored, (*around, *top, *up), tuple(faces))


# A line keeps its order: its direction is the body's, not the space's.
VERTEX = Shape("vertex", 0, (0,))
LINE = Shape("line", 1, (0, 1), ((0, 1),))
TRIANGLE = Shape("triangle", 2, (0, 2, 1), ((0, 1), (1, 2), (2, 0)))
QUAD = Shape("quadrilateral", 2, (1, 0, 3, 2), ((0, 1), (1, 2), (2, 3), (3, 0)))
TETRA = Shape(
    "tetrahedron", 3, (0, 2, 1, 3),
    ((0, 1), (1, 2), (2, 0), (0, 3), (1, 3), (2, 3)),
    ((0, 1, 3), (1, 2, 3), (2, 0, 3), (0, 2, 1)),
)  # fmt: skip
HEXAHEDRON = _prism("hexahedron", 4, (1, 0, 3, 2))
WEDGE = _prism("wedge", 3, (0, 2, 1))
PENTAGONAL_PRISM = _prism("pentagonal prism", 5, (0, 4, 3, 2, 1))
HEXAGONAL_PRISM = _prism("hexagonal prism", 6, (0, 5, 4, 3, 2, 1))
PYRAMID = Shape(
    "pyramid", 3, (1, 0, 3, 2, 4),
    ((0, 1), (1, 2), (2, 3), (3, 0), (0, 4), (1, 4), (2, 4), (3, 4)),
    ((0, 1, 2, 3), (0, 1, 4), (1, 2, 4), (2, 3, 4), (3, 0, 4)),
)  # fmt: skip


@dataclass(frozen=True)
class CellType:
    """One VTK cell type with a fixed number of nodes.

    Attributes
    ----------
    nodes : for each node, the corners whose mean position it has on the reference cell.
    """

    vtk_id: int
    name: str
    shape: Shape
    nodes: tuple[Corners, ...]

    @cached_property
    def mirrored(self) -> tuple[int, ...]:
        """Node ``i`` of the image cell is node ``mirrored[i]`` of the cell."""
        where = {frozenset(corners): i for i, corners in enumerate(self.nodes)}
        return tuple(where[frozenset(self.shape.mirrored[c] for c in node)] for node in self.nodes)

    @property
    def dimension(self) -> int:
        return self.shape.dimension


def _type(vtk_id: int, name: str, shape: Shape, *more: tuple[Corners, ...]) -> CellType:
    corners = tuple((i,) for i in range(len(shape.mirrored)))
    return CellType(vtk_id, name, shape, corners + tuple(node for group in more for node in group))


_hex_edges = HEXAHEDRON.edges
_hex_sides = ((0, 4, 7, 3), (1, 2, 6, 5), (0, 1, 5, 4), (3, 7, 6, 2))
_hex_faces = (*_hex_sides, (0, 3, 2, 1), (4, 5, 6, 7))
_hex_centre = (tuple(range(8)),)
_wedge_sides = ((0, 1, 4, 3), (1, 2, 5, 4), (2, 0, 3, 5))

CELL_TYPES: dict[int, CellType] = {
    cell.vtk_id: cell
    for cell in (
        _type(1, "vertex", VERTEX),
        _type(3, "line", LINE),
        _type(5, "triangle", TRIANGLE),
        _type(9, "quadrilateral", QUAD),
        _type(10, "tetrahedron", TETRA),
        _type(12, "hexahedron", HEXAHEDRON),
        _type(13, "wedge", WEDGE),
        _type(14, "pyramid", PYRAMID),
        _type(15, "pentagonal prism", PENTAGONAL_PRISM),
        _type(16, "hexagonal prism", HEXAGONAL_PRISM),
        _type(21, "quadratic line", LINE, LINE.edges),
        _type(22, "quadratic triangle", TRIANGLE, TRIANGLE.edges),
        _type(23, "quadratic quadrilateral", QUAD, QUAD.edges),
        _type(24, "quadratic tetrahedron", TETRA, TETRA.edges),
        _type(25, "quadratic hexahedron", HEXAHEDRON, _hex_edges),
        _type(26, "quadratic wedge", WEDGE, WEDGE.edges),
        _type(27, "quadratic pyramid", PYRAMID, PYRAMID.edges),
        _type(28, "biquadratic quadrilateral", QUAD, QUAD.edges, ((0, 1, 2, 3),)),
        _type(29, "triquadratic hexahedron", HEXAHEDRON, _hex_edges, _hex_faces, _hex_centre),
        _type(30, "quadratic-linear quadrilateral", QUAD, ((0, 1), (2, 3))),
        _type(31, "quadratic-linear wedge", WEDGE, WEDGE.edges[:6]),
        _type(32, "biquadratic-quadratic wedge", WEDGE, WEDGE.edges, _wedge_sides),
        _type(33, "biquadratic-quadratic hexahedron", HEXAHEDRON, _hex_edges, _hex_sides),
        _type(34, "biquadratic triangle", TRIANGLE, TRIANGLE.edges, ((0, 1, 2),)),
        _type(
            37, "triquadratic pyramid", PYRAMID, PYRAMID.edges,
            ((0, 1, 2, 3), (0, 1, 4), (1, 2, 4), (2, 3, 4), (3, 0, 4), (0, 1, 2, 3, 4)),
        ),
    )
}  # fmt: skip

POLYGON, QUADRATIC_POLYGON = 7, 36
POLYGONS = {POLYGON: "polygon", QUADRATIC_POLYGON: "quadratic polygon"}

# Names for a refusal; what each number means is VTK's list of cell types.
_REFUSED = {
    0: "empty cell", 2: "poly-vertex", 4: "poly-line", 6: "triangle strip", 8: "pixel",
    11: "voxel", 35: "cubic line", 41: "convex point set", 42: "polyhedron",
    51: "parametric curve", 68: "Lagrange curve", 69: "Lagrange triangle",
    70: "Lagrange quadrilateral", 71: "Lagrange tetrahedron", 72: "Lagrange hexahedron",
    73: "Lagrange wedge", 74: "Lagrange pyramid", 75: "Bezier curve", 76: "Bezier triangle",
    77: "Bezier quadrilateral", 78: "Bezier tetrahedron", 79: "Bezier hexahedron",
    80: "Bezier wedge", 81: "Bezier pyramid",
}  # fmt: skip


def cell_name(vtk_id: int) -> str:
    """The cell type in words, also for types that are refused."""
    if vtk_id in CELL_TYPES:
        return CELL_TYPES[vtk_id].name
    return POLYGONS.get(vtk_id) or _REFUSED.get(vtk_id, f"VTK cell type {vtk_id}")


def require_known(types: NDArray[np.uint8], source: str) -> tuple[int, ...]:
    """The distinct cell types of a mesh, each of them known here.

    Raises
    ------
    NotYetError
        Naming the first type that cannot be mirrored yet, and a cell that has it.
    """
    present = np.flatnonzero(np.bincount(types, minlength=1))
    for vtk_id in present.tolist():
        if vtk_id not in CELL_TYPES and vtk_id not in POLYGONS:
            cell = int(np.argmax(types == vtk_id))
            raise NotYetError(
                f"{source}: cell {cell} is a {cell_name(vtk_id)} (VTK cell type {vtk_id}), "
                "which this version does not expand yet.",
                "Expected linear or quadratic VTK cells, polygons, lines or vertices; convert the "
                "cells, or leave them out of the file.",
            )
    return tuple(present.tolist())


def dimensions(types: NDArray[np.uint8]) -> NDArray[np.int8]:
    """Topological dimension of each cell, (m,)."""
    table = np.full(256, 2, dtype=np.int8)
    for vtk_id, cell in CELL_TYPES.items():
        table[vtk_id] = cell.dimension
    return table[types]
