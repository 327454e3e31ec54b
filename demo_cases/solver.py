"""A small linear-elastic solver that computes the demo cases and stands as an oracle in tests.

Reference shapes and quadrature rules come from scikit-fem; elements are isoparametric, in VTK's
node orders. Nothing here is used by the expander or the viewer: a whole body solved with this
module knows nothing of how copies are made there.

Any consistent units will do, for example m, N, Pa or mm, N, MPa. Symmetric tensors are stored
as xx yy zz xy yz zx; engineering strain has gamma = 2 epsilon in its last three places.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cache, cached_property
from pathlib import Path

import numpy as np
import skfem
from numpy.typing import ArrayLike, NDArray
from scipy.sparse import csc_matrix, csr_matrix
from scipy.sparse.csgraph import connected_components
from scipy.sparse.linalg import splu
from scipy.spatial import cKDTree
from scipy.spatial.transform import Rotation
from skfem.quadrature import get_quadrature

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Bools = NDArray[np.bool_]

_TENSOR = ((0, 0), (1, 1), (2, 2), (0, 1), (1, 2), (2, 0))
_LEVI_CIVITA = np.zeros((3, 3, 3))
_LEVI_CIVITA[[0, 1, 2], [1, 2, 0], [2, 0, 1]] = 1.0
_LEVI_CIVITA[[0, 2, 1], [2, 1, 0], [1, 0, 2]] = -1.0


# --- reference shapes ---------------------------------------------------------------------------

_HEX_CORNERS = [
    [0, 0, 0],
    [1, 0, 0],
    [1, 1, 0],
    [0, 1, 0],
    [0, 0, 1],
    [1, 0, 1],
    [1, 1, 1],
    [0, 1, 1],
]
_HEX_EDGES = [
    [0, 1],
    [1, 2],
    [2, 3],
    [3, 0],
    [4, 5],
    [5, 6],
    [6, 7],
    [7, 4],
    [0, 4],
    [1, 5],
    [2, 6],
    [3, 7],
]
_HEX_FACES = [[0, 4, 7, 3], [1, 2, 6, 5], [0, 1, 5, 4], [3, 7, 6, 2], [0, 3, 2, 1], [4, 5, 6, 7]]
_TET_CORNERS = [[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1]]
_TET_EDGES = [[0, 1], [1, 2], [2, 0], [0, 3], [1, 3], [2, 3]]
_TET_FACES = [[0, 1, 3], [1, 2, 3], [2, 0, 3], [0, 2, 1]]


def _rows_of(wanted: Floats, table: Floats) -> Ints:
    """For each wanted point the row of the table that holds it."""
    distance, row = cKDTree(table).query(wanted)
    if distance.max() > 1e-12:
        raise ValueError("reference points do not match")
    return np.asarray(row, dtype=np.int64)


class Shape:
    """A reference cell in VTK's node order.

    Attributes
    ----------
    vtk_type : VTK cell type.
    points : (k, 3) reference coordinates of the nodes.
    edges : (e, 2) corners of each edge; the mid-side nodes follow in this order.
    faces : (f, j) nodes of each face, seen anticlockwise from outside.
    mirrored : node order that turns a mirrored cell the right way out again.
    centre : (3, 1) reference coordinates of the centroid.
    """

    def __init__(
        self,
        vtk_type: int,
        element: skfem.Element,
        face_element: skfem.Element,
        corners: ArrayLike,
        edges: ArrayLike,
        faces: ArrayLike,
        order: int,
    ) -> None:
        corner_points = np.array(corners, dtype=float)
        self.vtk_type = vtk_type
        self.edges = np.array(edges)
        self.points = corner_points
        if len(element.doflocs) > len(corner_points):
            self.points = np.vstack([corner_points, corner_points[self.edges].mean(axis=1)])
        self.centre = corner_points.mean(axis=0)[:, None]
        # Swapping two reference axes maps the reference cell onto itself, inside out.
        self.mirrored = _rows_of(self.points[:, [1, 0, 2]], self.points)
        self._element = element
        self._order = _rows_of(self.points, np.array(element.doflocs))
        self.quadrature = get_quadrature(element.refdom, order)

        self.faces = np.array(faces)
        if len(self.points) > len(corner_points):
            mids = corner_points[np.stack([self.faces, np.roll(self.faces, -1, axis=1)])]
            rows = _rows_of(mids.mean(axis=0).reshape(-1, 3), self.points)
            self.faces = np.hstack([self.faces, rows.reshape(self.faces.shape)])
        self._face_element = face_element
        self.face_quadrature = get_quadrature(face_element.refdom, order)

    def basis(self, X: Floats) -> tuple[Floats, Floats]:
        """Values (k, q) and reference gradients (k, 3, q) of the shape functions at X (3, q)."""
        values, gradients = zip(*(self._element.lbasis(X, j) for j in self._order), strict=True)
        return (
            np.stack([np.broadcast_to(v, X.shape[1:]) for v in values]),
            np.stack([np.broadcast_to(g, X.shape) for g in gradients]),
        )

    def face_basis(self) -> tuple[Floats, Floats]:
        """Values (j, q) and gradients (j, 2, q) on a face at its quadrature points."""
        X = self.face_quadrature[0]
        count = len(self._face_element.doflocs)
        values, gradients = zip(
            *(self._face_element.lbasis(X, j) for j in range(count)), strict=True
        )
        return (
            np.stack([np.broadcast_to(v, X.shape[1:]) for v in values]),
            np.stack([np.broadcast_to(g, X.shape) for g in gradients]),
        )


@cache
def shape_of(nodes_per_cell: int) -> Shape:
    """The reference cell with 8 or 20 (hexahedra), 4 or 10 nodes (tetrahedra)."""
    hexahedron = (_HEX_CORNERS, _HEX_EDGES, _HEX_FACES)
    tetrahedron = (_TET_CORNERS, _TET_EDGES, _TET_FACES)
    if nodes_per_cell == 8:
        return Shape(12, skfem.ElementHex1(), skfem.ElementQuad1(), *hexahedron, 3)
    if nodes_per_cell == 20:
        return Shape(25, skfem.ElementHexS2(), skfem.ElementQuadS2(), *hexahedron, 5)
    if nodes_per_cell == 4:
        return Shape(10, skfem.ElementTetP1(), skfem.ElementTriP1(), *tetrahedron, 2)
    if nodes_per_cell == 10:
        return Shape(24, skfem.ElementTetP2(), skfem.ElementTriP2(), *tetrahedron, 4)
    raise ValueError(f"no cell with {nodes_per_cell} nodes; have 4, 8, 10 and 20")


# --- meshes -------------------------------------------------------------------------------------


@dataclass(frozen=True)
class Mesh:
    """Cells of one kind, told by their number of nodes.

    Attributes
    ----------
    points : (n, 3) coordinates, in the length unit.
    cells : (m, k) node numbers in VTK's order, k = 4, 8, 10 or 20.
    part : (m,) number of the block or part that each cell belongs to.
    """

    points: Floats
    cells: Ints
    part: Ints

    @property
    def shape(self) -> Shape:
        return shape_of(self.cells.shape[1])

    def mapped(self, mapping: Callable[[Floats, Floats, Floats], Sequence[ArrayLike]]) -> Mesh:
        """The mesh with its points moved: x, y, z -> mapping(x, y, z), three arrays."""
        moved = np.stack(np.broadcast_arrays(*mapping(*self.points.T)), axis=1)
        mesh = replace(self, points=np.ascontiguousarray(moved, dtype=float))
        mesh.check()
        return mesh

    def of_part(self, part: int) -> Mesh:
        """The mesh with all of its cells given this part number."""
        return replace(self, part=np.full(len(self.cells), part))

    def keep(self, cells: Bools | Ints) -> Mesh:
        """The chosen cells with the nodes they use."""
        used, cells_new = np.unique(self.cells[cells], return_inverse=True)
        return Mesh(self.points[used], cells_new.reshape(-1, self.cells.shape[1]), self.part[cells])

    def centroids(self) -> Floats:
        """(m, 3) images of the reference centroids."""
        value, _ = self.shape.basis(self.shape.centre)
        return np.einsum("mka,k->ma", self.points[self.cells], value[:, 0])

    def edge_length(self) -> float:
        """The shortest distance between two corners of an edge."""
        ends = self.points[self.cells[:, self.shape.edges]]
        return float(np.linalg.norm(ends[:, :, 0] - ends[:, :, 1], axis=-1).min())

    def check(self) -> None:
        """Refuse cells that are inside out anywhere at a corner or quadrature point."""
        X = np.hstack([self.shape.points.T, self.shape.quadrature[0]])
        worst = _jacobians(self, X)[1].min(axis=1)
        if worst.min() <= 0.0:
            bad = int(np.count_nonzero(worst <= 0.0))
            raise ValueError(f"{bad} of {len(self.cells)} cells are inside out or flat")


def block(u: int | ArrayLike, v: int | ArrayLike, w: int | ArrayLike) -> Mesh:
    """Hexahedra on the unit cube, or on the box between given grid lines.

    Each of u, v, w is a number of equal divisions of [0, 1] or the rising coordinates of the
    grid lines. Curved bodies are made from it with `Mesh.mapped`.
    """
    lines = [
        np.linspace(0.0, 1.0, int(a) + 1) if np.ndim(a) == 0 else np.asarray(a, dtype=float)
        for a in (u, v, w)
    ]
    number = np.arange(np.prod([len(a) for a in lines])).reshape([len(a) for a in lines])
    points = np.stack([a.ravel() for a in np.meshgrid(*lines, indexing="ij")], axis=1)
    corner = [
        number[
            i : number.shape[0] - 1 + i, j : number.shape[1] - 1 + j, k : number.shape[2] - 1 + k
        ].ravel()
        for i, j, k in _HEX_CORNERS
    ]
    cells = np.stack(corner, axis=1).astype(np.int64)
    return Mesh(points, cells, np.zeros(len(cells), dtype=np.int64))


def holed_square(
    centre: ArrayLike,
    half: float,
    radius: float,
    w: ArrayLike,
    side: int,
    layers: int,
    make: Callable[[Mesh], Mesh] = lambda mesh: mesh,
) -> Mesh:
    """Hexahedra of a square in the xy plane with a round hole, between grid lines w in z.

    The square reaches `half` to each side of the centre (x, y); `side` divisions along each of
    its sides, `layers` from the hole outwards. `make` may be `quadratic`, for a smooth hole.
    """
    x, y = np.asarray(centre, dtype=float)

    def quarter(turn: int) -> Mesh:
        def place(u: Floats, v: Floats, z: Floats) -> Sequence[ArrayLike]:
            angle = (v - 0.5) * np.pi / 2
            a = (1 - u) * radius * np.cos(angle) + u * half
            b = (1 - u) * radius * np.sin(angle) + u * half * (2 * v - 1)
            c, s = np.round([np.cos(turn * np.pi / 2), np.sin(turn * np.pi / 2)])
            return x + c * a - s * b, y + s * a + c * b, z

        return make(block(layers, side, w)).mapped(place)

    return join(*(quarter(turn) for turn in range(4)))


def tetrahedra(mesh: Mesh) -> Mesh:
    """Each linear hexahedron cut into six tetrahedra around its diagonal from node 0 to node 6.

    Opposite faces of a hexahedron get parallel diagonals, so the faces of a block still match
    those of its neighbour and of its image on a cyclic seam.
    """
    cuts = np.array(
        [[0, 1, 2, 6], [0, 2, 3, 6], [0, 3, 7, 6], [0, 7, 4, 6], [0, 4, 5, 6], [0, 5, 1, 6]]
    )
    return Mesh(mesh.points, mesh.cells[:, cuts].reshape(-1, 4), np.repeat(mesh.part, len(cuts)))


def quadratic(mesh: Mesh) -> Mesh:
    """Mid-side nodes added halfway along each edge; apply before `Mesh.mapped` to curve them."""
    ends = np.sort(mesh.cells[:, mesh.shape.edges], axis=-1)
    pairs, middle = np.unique(ends.reshape(-1, 2), axis=0, return_inverse=True)
    points = np.vstack([mesh.points, mesh.points[pairs].mean(axis=1)])
    middle = middle.reshape(len(mesh.cells), -1) + len(mesh.points)
    return Mesh(points, np.hstack([mesh.cells, middle]), mesh.part)


def join(*meshes: Mesh, tolerance: float = 1e-6) -> Mesh:
    """One mesh from several, nodes closer than tolerance x shortest edge made one."""
    first = np.cumsum([0, *(len(mesh.points) for mesh in meshes)])
    points = np.vstack([mesh.points for mesh in meshes])
    cells = np.vstack([mesh.cells + start for mesh, start in zip(meshes, first[:-1], strict=True)])
    distance = tolerance * min(mesh.edge_length() for mesh in meshes)
    points, node = _merge(points, distance)
    return Mesh(points, node[cells], np.concatenate([mesh.part for mesh in meshes]))


def _merge(points: Floats, distance: float) -> tuple[Floats, Ints]:
    """Points with near ones made one (the first of each class stays), and old -> new numbers."""
    pairs = cKDTree(points).query_pairs(distance, output_type="ndarray")
    links = csr_matrix(
        (np.ones(len(pairs)), (pairs[:, 0], pairs[:, 1])), shape=(len(points), len(points))
    )
    _, label = connected_components(links, directed=False)
    _, first, node = np.unique(label, return_index=True, return_inverse=True)
    order = np.argsort(first)
    rank = np.empty_like(order)
    rank[order] = np.arange(len(order))
    return points[first[order]], rank[node].astype(np.int64)


def boundary_faces(mesh: Mesh, where: Bools | None = None) -> Ints:
    """(f, j) nodes of the faces that belong to one cell only, seen from outside.

    With `where`, a truth value per node, only the faces all of whose nodes are chosen.
    """
    faces = mesh.cells[:, mesh.shape.faces].reshape(-1, mesh.shape.faces.shape[1])
    _, group, count = np.unique(
        np.sort(faces, axis=1), axis=0, return_inverse=True, return_counts=True
    )
    faces = faces[count[group.ravel()] == 1]
    return faces if where is None else faces[where[faces].all(axis=1)]


# --- integration --------------------------------------------------------------------------------


def _jacobians(mesh: Mesh, X: Floats) -> tuple[Floats, Floats]:
    """dx/dX (m, q, 3, 3) and its determinant (m, q) at reference points X (3, q)."""
    _, gradient = mesh.shape.basis(X)
    J = np.einsum("mka,kbq->mqab", mesh.points[mesh.cells], gradient)
    return J, np.linalg.det(J)


def _gradients(mesh: Mesh, X: Floats) -> tuple[Floats, Floats]:
    """Gradients (m, q, k, 3) of the shape functions in space, and det(dx/dX) (m, q)."""
    J, det = _jacobians(mesh, X)
    _, gradient = mesh.shape.basis(X)
    return np.einsum("kbq,mqba->mqka", gradient, np.linalg.inv(J)), det


def _add_at_nodes(mesh: Mesh, corner_values: Floats) -> Floats:
    """Sum over cells of values (m, k, ...) at their nodes: (n, ...)."""
    flat = corner_values.reshape(mesh.cells.size, -1)
    columns = [np.bincount(mesh.cells.ravel(), column, len(mesh.points)) for column in flat.T]
    return np.stack(columns, axis=1).reshape(len(mesh.points), *corner_values.shape[2:])


def nodal_mean(mesh: Mesh, corner_values: Floats) -> Floats:
    """Mean of corner values (m, k, ...) over the cells at each node, all with equal weight."""
    count = np.bincount(mesh.cells.ravel(), minlength=len(mesh.points))
    total = _add_at_nodes(mesh, corner_values)
    return total / count.reshape(-1, *[1] * (total.ndim - 1))


@dataclass(frozen=True)
class Material:
    """Isotropic and linear; each number may also be an array over the cells.

    Attributes
    ----------
    young : Young's modulus, stress unit.
    poisson : Poisson's ratio.
    expansion : thermal strain per degree.
    """

    young: float | Floats
    poisson: float | Floats = 0.3
    expansion: float | Floats = 0.0

    @property
    def lame(self) -> tuple[float | Floats, float | Floats]:
        """Lame's lambda and the shear modulus."""
        E, nu = self.young, self.poisson
        return E * nu / ((1 + nu) * (1 - 2 * nu)), E / (2 * (1 + nu))

    def stress(self, strain: Floats, temperature: Floats | float = 0.0) -> Floats:
        """Stress (m, q, 3, 3) from the tensor of strain (m, q, 3, 3) of each cell."""
        lam, mu, alpha = (np.reshape(a, (-1, 1, 1, 1)) for a in (*self.lame, self.expansion))
        heat = alpha * np.reshape(temperature, (*np.shape(temperature), 1, 1))
        elastic = strain - heat * np.eye(3)
        trace = np.trace(elastic, axis1=-2, axis2=-1)[..., None, None]
        return lam * trace * np.eye(3) + 2 * mu * elastic


def _products(mesh: Mesh) -> Floats:
    """H[m, k, l, a, b], the integral of (dN_k/dx_a)(dN_l/dx_b) over each cell."""
    X, weight = mesh.shape.quadrature
    gradient, det = _gradients(mesh, X)
    weighted = gradient * (det * weight)[..., None, None]
    m, q, k, _ = gradient.shape
    left = weighted.transpose(0, 2, 3, 1).reshape(m, 3 * k, q)
    right = gradient.reshape(m, q, 3 * k)
    return (left @ right).reshape(m, k, 3, k, 3).transpose(0, 1, 3, 2, 4)


def _assemble(mesh: Mesh, blocks: Floats) -> csr_matrix:
    """Sparse matrix from cell blocks (m, k, l, c, d), rows numbered c-th of node k."""
    c = blocks.shape[-1]
    unknown = (c * mesh.cells[:, :, None] + np.arange(c)).reshape(len(mesh.cells), -1)
    size = unknown.shape[1]
    values = blocks.transpose(0, 1, 3, 2, 4).reshape(len(mesh.cells), size, size)
    rows = np.repeat(unknown, size, axis=1).ravel()
    columns = np.tile(unknown, (1, size)).ravel()
    total = c * len(mesh.points)
    return csr_matrix((values.ravel(), (rows, columns)), shape=(total, total))


def stiffness(mesh: Mesh, material: Material) -> csr_matrix:
    """Stiffness matrix (3 n, 3 n), force per displacement; unknown 3 i + c is component c of i."""
    H = _products(mesh)
    lam, mu = (np.reshape(a, (-1, 1, 1, 1, 1)) for a in material.lame)
    trace = np.trace(H, axis1=-2, axis2=-1)[..., None, None]
    return _assemble(mesh, lam * H + mu * (H.swapaxes(-1, -2) + trace * np.eye(3)))


def volume(mesh: Mesh) -> Floats:
    """(m,) volumes of the cells."""
    X, weight = mesh.shape.quadrature
    return _jacobians(mesh, X)[1] @ weight


# --- loads: extensive nodal forces, each the share of the modelled part only --------------------

VectorField = ArrayLike | Callable[..., ArrayLike]


def body_force(mesh: Mesh, density: VectorField) -> Floats:
    """(n, 3) nodal forces of a force per volume: a vector, or density(x) of points (..., 3)."""
    X, weight = mesh.shape.quadrature
    value, _ = mesh.shape.basis(X)
    dv = _jacobians(mesh, X)[1] * weight
    x = np.einsum("mka,kq->mqa", mesh.points[mesh.cells], value)
    b = np.broadcast_to(density(x) if callable(density) else np.asarray(density), x.shape)
    return _add_at_nodes(mesh, np.einsum("mqa,mq,kq->mka", b, dv, value))


def surface_load(mesh: Mesh, where: Bools, traction: VectorField) -> Floats:
    """(n, 3) nodal forces of a force per area on the boundary faces whose nodes are all chosen.

    `traction` is a vector, or traction(x, normal) of points and outward unit normals (..., 3).
    """
    faces = boundary_faces(mesh, where)
    if not len(faces):
        raise ValueError("no boundary face has all its nodes chosen")
    value, gradient = mesh.shape.face_basis()
    weight = mesh.shape.face_quadrature[1]
    x = np.einsum("fja,jq->fqa", mesh.points[faces], value)
    tangent = np.einsum("fja,jbq->bfqa", mesh.points[faces], gradient)
    area = np.cross(tangent[0], tangent[1])
    size = np.linalg.norm(area, axis=-1, keepdims=True)
    t = traction(x, area / size) if callable(traction) else np.asarray(traction)
    forces = np.einsum("fqa,q,jq->fja", np.broadcast_to(t, x.shape) * size, weight, value)
    flat = forces.reshape(-1, 3)
    return np.stack(
        [np.bincount(faces.ravel(), column, len(mesh.points)) for column in flat.T], axis=1
    )


def pressure_load(mesh: Mesh, where: Bools, pressure: float) -> Floats:
    """(n, 3) nodal forces of a pressure, positive when it pushes on the body."""
    return surface_load(mesh, where, lambda x, normal: -pressure * normal)


def point_load(mesh: Mesh, node: int | Ints, force: ArrayLike) -> Floats:
    """(n, 3) with a force at one node, or the same at each of several."""
    forces = np.zeros_like(mesh.points)
    forces[node] = force
    return forces


def thermal_load(mesh: Mesh, material: Material, temperature: Floats) -> Floats:
    """(n, 3) nodal forces that a free body needs to take its thermal strain."""
    X, weight = mesh.shape.quadrature
    gradient, det = _gradients(mesh, X)
    value, _ = mesh.shape.basis(X)
    at_points = temperature[mesh.cells] @ value
    push = -material.stress(np.zeros((*at_points.shape, 3, 3)), at_points)
    return _add_at_nodes(mesh, np.einsum("mqka,mqab,mq->mkb", gradient, push, det * weight))


# --- seam conditions ----------------------------------------------------------------------------


@dataclass(frozen=True)
class CutPlane:
    """A mirror plane that cuts the body: parity +1 for a symmetric load, -1 antisymmetric."""

    normal: ArrayLike
    point: ArrayLike = (0.0, 0.0, 0.0)
    parity: int = 1

    @property
    def unit(self) -> Floats:
        n = np.asarray(self.normal, dtype=float)
        return n / np.linalg.norm(n)

    @property
    def placement(self) -> tuple[Floats, Floats]:
        n = self.unit
        Q = np.eye(3) - 2 * np.outer(n, n)
        return Q, 2 * n * (n @ np.asarray(self.point, dtype=float))


@dataclass(frozen=True)
class Cyclic:
    """Sector 0 of N about an axis: parity +1 for h = 0, -1 for h = N/2 nodal diameters."""

    sectors: int
    axis: ArrayLike = (0.0, 0.0, 1.0)
    point: ArrayLike = (0.0, 0.0, 0.0)
    parity: int = 1

    @property
    def placement(self) -> tuple[Floats, Floats]:
        a = np.asarray(self.axis, dtype=float)
        p = np.asarray(self.point, dtype=float)
        Q = Rotation.from_rotvec(2 * np.pi / self.sectors * a / np.linalg.norm(a)).as_matrix()
        return Q, p - Q @ p


@dataclass(frozen=True)
class Fixed:
    """A support: displacement along each direction (d, 3) is prescribed, zero by default.

    `values` broadcasts to (number of nodes, d), in the length unit.
    """

    nodes: Ints | Bools
    directions: ArrayLike = ((1.0, 0.0, 0.0), (0.0, 1.0, 0.0), (0.0, 0.0, 1.0))
    values: ArrayLike = 0.0

    def conditions(self) -> tuple[Ints, Floats, Floats]:
        """Node, unit row and right-hand side of each condition a . u = b."""
        nodes = np.asarray(self.nodes)
        if nodes.dtype == bool:
            nodes = np.flatnonzero(nodes)
        nodes = np.atleast_1d(nodes)
        rows = np.atleast_2d(np.asarray(self.directions, dtype=float))
        rows = rows / np.linalg.norm(rows, axis=1, keepdims=True)
        values = np.broadcast_to(self.values, (len(nodes), len(rows)))
        return (
            np.repeat(nodes, len(rows)),
            np.tile(rows, (len(nodes), 1)),
            values.astype(float).ravel(),
        )


def on_plane(mesh: Mesh, normal: ArrayLike, point: ArrayLike = (0.0, 0.0, 0.0)) -> Bools:
    """Which nodes lie in a plane, to a millionth of the shortest edge."""
    plane = CutPlane(normal, point)
    offset = (mesh.points - np.asarray(point)) @ plane.unit
    return np.abs(offset) <= 1e-6 * mesh.edge_length()


def cyclic_pairs(mesh: Mesh, cyclic: Cyclic) -> tuple[Ints, Ints]:
    """Nodes of the first face and, turned onto each by one sector, nodes of the second face.

    A node of the axis is its own partner.
    """
    Q, t = cyclic.placement
    distance, first = cKDTree(mesh.points @ Q.T + t).query(mesh.points)
    second = np.flatnonzero(distance <= 1e-6 * mesh.edge_length())
    first = first[second]
    if cyclic.sectors == 2:
        # Turning by 180 degrees also carries the second face to the first: keep each pair once.
        once = first <= second
        first, second = first[once], second[once]
    if not len(second):
        raise ValueError("no node of the sector meets another after a turn by one sector")
    return first, second


def elimination(
    mesh: Mesh,
    fixed: Sequence[Fixed] = (),
    planes: Sequence[CutPlane] = (),
    cyclic: Cyclic | None = None,
    components: int = 3,
) -> tuple[csr_matrix, Floats]:
    """T and u0 with u = T q + u0 for every q exactly when supports and seam conditions hold.

    Displacements have 3 components; a temperature has 1, and its supports the direction (1,).
    """
    count = len(mesh.points)
    identity = np.eye(components)
    keeper = np.arange(count)
    carry = np.tile(identity, (count, 1, 1))  # u of a node = carry @ u of its keeper
    conditions = [support.conditions() for support in fixed]

    def hold(nodes: Ints, held: Floats) -> None:
        conditions.append(
            (
                np.repeat(nodes, components),
                np.tile(held, (len(nodes), 1)),
                np.zeros(components * len(nodes)),
            )
        )

    for plane in planes:
        along = np.outer(plane.unit, plane.unit) if components == 3 else 0.0 * identity
        hold(
            np.flatnonzero(on_plane(mesh, plane.unit, plane.point)),
            along if plane.parity == 1 else identity - along,
        )
    if cyclic is not None:
        first, second = cyclic_pairs(mesh, cyclic)
        turn = cyclic.parity * (cyclic.placement[0] if components == 3 else identity)
        keeper[second] = first
        carry[second] = turn
        axis = second[first == second]
        carry[axis] = identity
        hold(axis, identity - turn)

    # All conditions on a node and on those it keeps, as one small problem G u = h.
    node = np.concatenate([np.zeros(0, dtype=np.int64), *(c[0] for c in conditions)])
    row = np.concatenate([np.zeros((0, components)), *(c[1] for c in conditions)])
    value = np.concatenate([np.zeros(0), *(c[2] for c in conditions)])
    row = np.einsum("ra,rab->rb", row, carry[node])
    node = keeper[node]
    G = np.zeros((count, components, components))
    h = np.zeros((count, components))
    np.add.at(G, node, row[:, :, None] * row[:, None, :])
    np.add.at(h, node, row * value[:, None])
    size, direction = np.linalg.eigh(G)
    held = size > 1e-9
    inverse = np.where(held, 1.0 / np.where(held, size, 1.0), 0.0)
    known = np.einsum("nai,ni,nbi,nb->na", direction, inverse, direction, h)
    miss = np.abs(np.einsum("ra,ra->r", row, known[node]) - value)
    if miss.max(initial=0.0) > 1e-9 * np.abs(value).max(initial=0.0):
        raise ValueError("supports and seam conditions contradict each other")

    free = ~held & (keeper == np.arange(count))[:, None]
    column = (np.cumsum(free) - 1).reshape(free.shape)
    values = np.einsum("nab,nbi->nai", carry, direction[keeper]) * free[keeper][:, None, :]
    rows = np.broadcast_to(
        np.arange(values[..., 0].size).reshape(count, components, 1), values.shape
    )
    columns = np.broadcast_to(column[keeper][:, None, :], values.shape)
    used = values != 0.0
    T = csr_matrix(
        (values[used], (rows[used], columns[used])), shape=(components * count, int(free.sum()))
    )
    return T, np.einsum("nab,nb->na", carry, known[keeper]).ravel()


def _solve(K: csr_matrix, load: Floats, T: csr_matrix, known: Floats) -> Floats:
    """The u = T q + known that balances the load along every free direction."""
    reduced = csc_matrix(T.T @ K @ T)
    try:
        factors = splu(
            reduced,
            permc_spec="MMD_AT_PLUS_A",
            diag_pivot_thresh=0.0,
            options={"SymmetricMode": True},
        )
    except RuntimeError as error:
        raise ValueError("the supports leave the body free to move") from error
    q = np.zeros(T.shape[1])
    for _ in range(3):  # the later rounds take off the round-off of the first
        q += factors.solve(T.T @ (load - K @ (T @ q + known)))
    return T @ q + known


# --- solutions ----------------------------------------------------------------------------------


@dataclass(frozen=True)
class Solution:
    """Displacement and what is recovered from it, on a sector or on a whole body.

    Nodal values of stress, strain and rotation are means over the cells at the node, all with
    equal weight; forces are the share of the modelled cells (extensive).

    Attributes
    ----------
    mesh, material : the model.
    displacement : (n, 3), length unit.
    external_force : (n, 3) nodal loads, force unit.
    temperature : (n,) change of temperature, degrees, or None.
    """

    mesh: Mesh
    material: Material
    displacement: Floats
    external_force: Floats
    temperature: Floats | None = None

    @cached_property
    def internal_force(self) -> Floats:
        """(n, 3) forces that the nodes exert on the cells: K u, less the thermal load."""
        force = (stiffness(self.mesh, self.material) @ self.displacement.ravel()).reshape(-1, 3)
        if self.temperature is not None:
            force = force - thermal_load(self.mesh, self.material, self.temperature)
        return force

    @property
    def reaction(self) -> Floats:
        """(n, 3) forces of supports and seam conditions on the modelled part."""
        return self.internal_force - self.external_force

    @property
    def energy(self) -> float:
        """Half the work of the nodes on the cells; strain energy if there is no temperature."""
        return 0.5 * float(np.sum(self.internal_force * self.displacement))

    def gradient(self, X: Floats) -> Floats:
        """(m, q, 3, 3) du_a/dx_b of each cell at reference points X (3, q)."""
        shape_gradient, _ = _gradients(self.mesh, X)
        return np.einsum("mqkb,mka->mqab", shape_gradient, self.displacement[self.mesh.cells])

    def _stress(self, X: Floats, gradient: Floats) -> Floats:
        heat: Floats | float = 0.0
        if self.temperature is not None:
            heat = self.temperature[self.mesh.cells] @ self.mesh.shape.basis(X)[0]
        return self.material.stress(0.5 * (gradient + gradient.swapaxes(-1, -2)), heat)

    @cached_property
    def _corners(self) -> Floats:
        return self.gradient(self.mesh.shape.points.T)

    @cached_property
    def _centres(self) -> Floats:
        return self.gradient(self.mesh.shape.centre)

    @property
    def cell_gradient(self) -> Floats:
        """(m, 3, 3) du_a/dx_b at the centroid of each cell."""
        return self._centres[:, 0]

    @property
    def cell_stress(self) -> Floats:
        """(m, 6) stress at the centroid of each cell."""
        return six(self._stress(self.mesh.shape.centre, self._centres))[:, 0]

    @property
    def nodal_stress(self) -> Floats:
        """(n, 6) stress, mean of the cells' corner values."""
        X = self.mesh.shape.points.T
        return nodal_mean(self.mesh, six(self._stress(X, self._corners)))

    @property
    def nodal_von_mises(self) -> Floats:
        """(n,) von Mises stress, mean of the cells' corner values.

        Not the von Mises stress of the mean: that one cannot be completed at a seam from the
        values of one side.
        """
        stress = six(self._stress(self.mesh.shape.points.T, self._corners))
        return nodal_mean(self.mesh, von_mises(stress))

    @property
    def cell_strain(self) -> Floats:
        """(m, 6) engineering strain at the centroid of each cell."""
        return engineering_strain(self._centres)[:, 0]

    @property
    def nodal_strain(self) -> Floats:
        """(n, 6) engineering strain, mean of the cells' corner values."""
        return nodal_mean(self.mesh, engineering_strain(self._corners))

    @property
    def cell_rotation(self) -> Floats:
        """(m, 3) half the curl of the displacement at the centroid of each cell, radians."""
        return half_curl(self._centres)[:, 0]

    @property
    def rotation(self) -> Floats:
        """(n, 3) half the curl of the displacement, mean of the cells' corner values, radians."""
        return nodal_mean(self.mesh, half_curl(self._corners))


def six(tensor: Floats) -> Floats:
    """(..., 3, 3) to (..., 6): xx yy zz xy yz zx."""
    return np.stack([tensor[..., a, b] for a, b in _TENSOR], axis=-1)


def full(stored: Floats) -> Floats:
    """(..., 6) to (..., 3, 3); for engineering strain halve the last three first."""
    xx, yy, zz, xy, yz, zx = np.moveaxis(stored, -1, 0)
    rows = [[xx, xy, zx], [xy, yy, yz], [zx, yz, zz]]
    return np.stack([np.stack(row, axis=-1) for row in rows], axis=-2)


def engineering_strain(gradient: Floats) -> Floats:
    """(..., 6) strain with gamma = 2 epsilon from du_a/dx_b."""
    return six(0.5 * (gradient + gradient.swapaxes(-1, -2))) * [1, 1, 1, 2, 2, 2]


def half_curl(gradient: Floats) -> Floats:
    """(..., 3) small rotation from du_a/dx_b."""
    return 0.5 * np.einsum("abc,...cb->...a", _LEVI_CIVITA, gradient)


def von_mises(stress: Floats) -> Floats:
    """(...) equivalent stress from (..., 6)."""
    xx, yy, zz, xy, yz, zx = np.moveaxis(stress, -1, 0)
    normal = (xx - yy) ** 2 + (yy - zz) ** 2 + (zz - xx) ** 2
    return np.sqrt(0.5 * normal + 3.0 * (xy**2 + yz**2 + zx**2))


def moment(points: Floats, force: Floats, about: ArrayLike) -> Floats:
    """(n, 3) moments (x - p) x f of nodal forces about the point p."""
    return np.cross(points - np.asarray(about, dtype=float), force)


def solve(
    mesh: Mesh,
    material: Material,
    load: Floats | None = None,
    *,
    fixed: Sequence[Fixed] = (),
    planes: Sequence[CutPlane] = (),
    cyclic: Cyclic | None = None,
    temperature: Floats | None = None,
) -> Solution:
    """Displacement of a sector under its seam conditions, or of a whole body without any."""
    force = np.zeros_like(mesh.points) if load is None else load
    T, known = elimination(mesh, fixed, planes, cyclic)
    total = force if temperature is None else force + thermal_load(mesh, material, temperature)
    u = _solve(stiffness(mesh, material), total.ravel(), T, known)
    return Solution(mesh, material, u.reshape(-1, 3), force, temperature)


def solve_temperature(
    mesh: Mesh,
    conductivity: float | Floats,
    heat: Floats | None = None,
    *,
    fixed: Sequence[Fixed] = (),
    planes: Sequence[CutPlane] = (),
    cyclic: Cyclic | None = None,
) -> Floats:
    """(n,) steady temperature; supports have the direction (1,), `heat` is nodal heat flow."""
    H = np.trace(_products(mesh), axis1=-2, axis2=-1)[..., None, None]
    K = _assemble(mesh, H * np.reshape(conductivity, (-1, 1, 1, 1, 1)))
    T, known = elimination(mesh, fixed, planes, cyclic, components=1)
    return _solve(K, np.zeros(len(mesh.points)) if heat is None else heat, T, known)


# --- whole bodies by copying: an oracle for tests -----------------------------------------------


def placements(
    planes: Sequence[CutPlane] = (), cyclic: Cyclic | None = None
) -> list[tuple[Floats, Floats, int]]:
    """(Q, t, chi) of every copy, the identity first: the generators' products, closed."""
    generators = [(*plane.placement, plane.parity) for plane in planes]
    if cyclic is not None:
        generators.append((*cyclic.placement, cyclic.parity))
    copies = [(np.eye(3), np.zeros(3), 1)]
    for Q, t, chi in copies:  # grows while it is read
        for P, s, factor in generators:
            new = (P @ Q, P @ t + s, factor * chi)
            if not any(
                np.allclose(new[0], a[0], atol=1e-9) and np.allclose(new[1], a[1], atol=1e-9)
                for a in copies
            ):
                copies.append(new)
            if len(copies) > 1000:
                raise ValueError("the planes and the axis do not generate a finite group")
    return copies


@dataclass(frozen=True)
class WholeBody:
    """A mesh made of copies.

    Attributes
    ----------
    mesh : whole mesh, the cells of copy 0 first, mirrored cells turned the right way out.
    node : (copies, n) whole node of each node of the sector, by copy.
    cell : (copies, m) whole cell of each cell of the sector, by copy.
    """

    mesh: Mesh
    node: Ints
    cell: Ints


def merge_copies(
    points: Floats,
    cells: Ints,
    copies: Sequence[Sequence[ArrayLike]],
    part: Ints | None = None,
    tolerance: float = 1e-5,
) -> WholeBody:
    """The whole mesh from placements (Q, t, ...), nodes within tolerance x edge made one."""
    sector = Mesh(points, cells, np.zeros(len(cells), dtype=np.int64) if part is None else part)
    moved, orders = [], []
    for Q, t in ((np.asarray(copy[0]), np.asarray(copy[1])) for copy in copies):
        moved.append(points @ Q.T + t)
        mirrored = np.linalg.det(Q) < 0
        orders.append(cells[:, sector.shape.mirrored] if mirrored else cells)
    everything, node = _merge(np.vstack(moved), tolerance * sector.edge_length())
    node = node.reshape(len(copies), -1)
    whole = np.vstack([number[order] for number, order in zip(node, orders, strict=True)])
    mesh = Mesh(everything, whole, np.tile(sector.part, len(copies)))
    return WholeBody(mesh, node, np.arange(len(whole)).reshape(len(copies), -1))


# --- files --------------------------------------------------------------------------------------


def write_vtu(
    path: str | Path,
    mesh: Mesh,
    point_data: Mapping[str, NDArray[np.generic]],
    cell_data: Mapping[str, NDArray[np.generic]],
    bits: int | None = 40,
) -> None:
    """A compressed VTU file, coordinates and results in double precision.

    Results are rounded to 2**-bits of the array's largest magnitude (None keeps all): the noise
    below that compresses badly and differs from machine to machine.
    """
    import pyvista as pv
    from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridWriter

    def tidy(values: NDArray[np.generic]) -> NDArray[np.generic]:
        values = np.ascontiguousarray(values)
        if bits is None or values.dtype.kind != "f" or not values.any():
            return values
        step = 2.0 ** (np.ceil(np.log2(np.abs(values).max())) - bits)
        return np.round(values / step) * step + 0.0  # + 0.0 makes -0 plain 0

    grid = pv.UnstructuredGrid({mesh.shape.vtk_type: mesh.cells}, mesh.points)
    for name, values in point_data.items():
        grid.point_data[name] = tidy(values)
    for name, values in cell_data.items():
        grid.cell_data[name] = tidy(values)
    for attributes in (grid.GetPointData(), grid.GetCellData()):
        attributes.SetActiveScalars(None)
        attributes.SetActiveVectors(None)
    writer = vtkXMLUnstructuredGridWriter()
    writer.SetFileName(str(path))
    writer.SetInputData(grid)
    writer.SetDataModeToAppended()
    writer.EncodeAppendedDataOff()
    writer.SetCompressorTypeToZLib()
    writer.SetCompressionLevel(9)
    if not writer.Write():
        raise OSError(f"could not write {path}")
