"""Shared by the tests of waves: sectors solved with complex seam conditions, whole rings without.

The sector takes u(second face) = exp(i h alpha) R u(first face), eliminated by hand here (D. L.
Thomas, Dynamics of rotationally periodic structures, Int. J. Num. Meth. Eng. 14 (1979) 81-102); the
whole ring is assembled from all of its cells and knows nothing of sectors. Stiffness comes from
`demo_cases.solver`, mass from the same reference shapes and quadrature of scikit-fem, solutions
from scipy.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property
from pathlib import Path

import numpy as np
import pyvista as pv
from numpy.typing import NDArray
from scipy.linalg import eigh
from scipy.sparse import coo_matrix, csc_matrix, csr_matrix, eye, kron
from scipy.sparse.linalg import LinearOperator, eigsh, splu

from demo_cases.solver import (
    CutPlane,
    Cyclic,
    Material,
    Mesh,
    Solution,
    WholeBody,
    block,
    cyclic_pairs,
    join,
    merge_copies,
    moment,
    on_plane,
    placements,
    quadratic,
    stiffness,
)
from tests.against_outside.bodies import SHIFT, SIX, SKEW, Floats, Ints, Model
from tests.against_outside.elastic import rows, word

Complex = NDArray[np.complex128]
PARTS = ("re", "im")

# Two direct solutions of the same equations differ by round-off times the condition of the matrix,
# which is 1e3 to 1e5 for these meshes.
CLOSE = 1e-9

KINDS: dict[str, dict[str, object]] = {
    "displacement": {"kind": "polar vector"},
    "rotation": {"kind": "axial vector", "seam": "recovered"},
    "stress": {"kind": "symmetric tensor", "components": SIX, "seam": "recovered"},
    "strain": {
        "kind": "symmetric tensor",
        "components": SIX,
        "shear": "engineering",
        "seam": "recovered",
    },
    "nodal_force": {"kind": "polar vector", "seam": "sum"},
    "reaction": {"kind": "polar vector", "seam": "sum"},
    "moment_of_force": {"kind": "axial vector", "seam": "sum"},
    "cell_stress": {"kind": "symmetric tensor", "components": SIX},
    "cell_rotation": {"kind": "axial vector"},
    "gradient": {"kind": "tensor"},
}


# --- matrices -------------------------------------------------------------------------------------


def mass(mesh: Mesh, density: float | Floats) -> csr_matrix:
    """Consistent mass matrix (3 n, 3 n); density may be an array over the cells."""
    X, weight = mesh.shape.quadrature
    value, gradient = mesh.shape.basis(X)
    J = np.einsum("mka,kbq->mqab", mesh.points[mesh.cells], gradient)
    dm = np.linalg.det(J) * weight * np.broadcast_to(density, len(mesh.cells))[:, None]
    blocks = np.einsum("mq,kq,lq->mkl", dm, value, value)
    k = mesh.cells.shape[1]
    at = np.repeat(mesh.cells, k, axis=1).ravel(), np.tile(mesh.cells, (1, k)).ravel()
    size = len(mesh.points)
    return csr_matrix(kron(coo_matrix((blocks.ravel(), at), shape=(size, size)), eye(3)))


@dataclass(frozen=True, eq=False)
class Ring:
    """One sector of a ring, and the whole ring.

    Attributes
    ----------
    mesh : the sector.
    axis : its axis and number of sectors.
    held : clamped nodes of the sector, and of every copy.
    planes : cut planes normal to the axis, with their parity.
    material, density : by cell.
    damping : structural damping eta, K (1 + i eta), by cell.
    """

    mesh: Mesh
    axis: Cyclic
    held: Ints = field(default_factory=lambda: np.zeros(0, dtype=np.int64))
    planes: tuple[CutPlane, ...] = ()
    material: Material = field(default_factory=lambda: Material(young=200e3))
    density: float | Floats = 7.8e-9

    def parity(self, parity: int) -> Ring:
        """The same body, its cut planes under another word."""
        return replace(self, planes=tuple(replace(p, parity=parity) for p in self.planes))

    @property
    def N(self) -> int:
        return self.axis.sectors

    @property
    def order(self) -> int:
        """Number of copies."""
        return self.N * 2 ** len(self.planes)

    def copies(self, h: int) -> list[tuple[Floats, Floats, complex]]:
        """(Q, t, chi) of every copy: chi multiplied along as the copies are made."""
        chi = np.exp(2j * np.pi * h / self.N)
        return placements(self.planes, replace(self.axis, parity=chi))  # type: ignore[arg-type]

    @cached_property
    def body(self) -> WholeBody:
        return merge_copies(self.mesh.points, self.mesh.cells, self.copies(0), self.mesh.part)

    @cached_property
    def whole_material(self) -> Material:
        young = np.broadcast_to(self.material.young, len(self.mesh.cells))
        return replace(self.material, young=np.tile(young, self.order))

    @cached_property
    def K(self) -> csr_matrix:
        return stiffness(self.mesh, self.material)

    @cached_property
    def M(self) -> csr_matrix:
        return mass(self.mesh, self.density)

    @cached_property
    def KW(self) -> csr_matrix:
        """Stiffness of the whole ring."""
        return stiffness(self.body.mesh, self.whole_material)

    @cached_property
    def MW(self) -> csr_matrix:
        density = np.broadcast_to(self.density, len(self.mesh.cells))
        return mass(self.body.mesh, np.tile(density, self.order))

    @cached_property
    def whole_held(self) -> Ints:
        """Clamped nodes of the whole ring."""
        return np.unique(self.body.node[:, self.held])

    # --- the sector -------------------------------------------------------------------------------

    def freedom(self, h: int) -> csc_matrix:
        """T, complex (3 n, q): u = T q for every q exactly when supports and seams hold."""
        count = len(self.mesh.points)
        turn = np.exp(2j * np.pi * h / self.N) * self.axis.placement[0]
        first, second = cyclic_pairs(self.mesh, self.axis)
        allowed = np.tile(np.eye(3, dtype=complex), (count, 1, 1))  # projectors; all commute
        for plane in self.planes:
            along = np.outer(plane.unit, plane.unit)
            there = on_plane(self.mesh, plane.unit, plane.point)
            allowed[there] = allowed[there] @ (np.eye(3) - along if plane.parity == 1 else along)
        on_axis = second[first == second]
        u, size, _ = np.linalg.svd(np.eye(3) - turn)
        left = u[:, size < 1e-9]  # I - turn is normal: its null space is that of its adjoint
        allowed[on_axis] = allowed[on_axis] @ (left @ left.conj().T)
        allowed[self.held] = 0.0
        partner = dict(zip(first.tolist(), second.tolist(), strict=True))
        free = np.setdiff1d(np.arange(count), np.setdiff1d(second, on_axis))
        size, direction = np.linalg.eigh(allowed[free])
        parts: list[tuple[int, Complex, int]] = []
        columns = 0
        for n, s, d in zip(free.tolist(), size, direction, strict=True):
            basis = d[:, s > 0.5]
            parts.append((n, basis, columns))
            if partner.get(n, n) != n:
                parts.append((partner[n], turn @ basis, columns))
            columns += basis.shape[1]
        i = [np.repeat(3 * n + np.arange(3), b.shape[1]) for n, b, _ in parts]
        j = [np.tile(c + np.arange(b.shape[1]), 3) for _, b, c in parts]
        values = np.concatenate([b.ravel() for _, b, _ in parts])
        at = np.concatenate(i), np.concatenate(j)
        return csc_matrix((values, at), shape=(3 * count, columns))

    def modes(self, h: int, count: int) -> tuple[Floats, list[Complex]]:
        """Lowest omega^2 and shapes (n, 3) with f^H M f = 1 on the sector."""
        T = self.freedom(h)
        K, M = (csc_matrix(T.conj().T @ A @ T) for A in (self.K, self.M))
        if K.shape[0] < 400:
            square, shapes = eigh(K.toarray(), M.toarray(), subset_by_index=[0, count - 1])
        else:  # shifted below zero, where rigid-body motions leave it regular
            start = np.random.default_rng(1).normal(size=K.shape[0]).astype(complex)
            shift = -1e-7 * K.diagonal().real.max() / M.diagonal().real.max()
            factors = splu(csc_matrix(K - shift * M), permc_spec="MMD_AT_PLUS_A")
            inverse = LinearOperator(K.shape, factors.solve, dtype=complex)
            square, shapes = eigsh(K, count, M, sigma=shift, v0=start, OPinv=inverse)
        order = np.argsort(square)
        return square[order], [(T @ q).reshape(-1, 3) for q in shapes.T[order]]

    def respond(self, h: int, load: Complex, dynamic: csr_matrix) -> Complex:
        """(n, 3) displacement of the sector under its share of the load (n, 3)."""
        T = self.freedom(h)
        q = splu(csc_matrix(T.conj().T @ dynamic @ T)).solve(T.conj().T @ load.ravel())
        return (T @ q).reshape(-1, 3)

    # --- the whole ring ---------------------------------------------------------------------------

    def whole_load(self, h: int, load: Complex) -> Complex:
        """The travelling load: chi(g) Q F of every copy, added at the nodes that copies share."""
        total = np.zeros((len(self.body.mesh.points), 3), dtype=complex)
        for (Q, _, chi), node in zip(self.copies(h), self.body.node, strict=True):
            np.add.at(total, node, chi * load @ Q.T)
        return total

    def respond_whole(self, load: Complex, dynamic: csr_matrix) -> Complex:
        """(nodes, 3) displacement of the whole ring, held by its supports alone."""
        free = np.ones(len(load), dtype=bool)
        free[self.whole_held] = False
        k = np.flatnonzero(np.repeat(free, 3))
        x = np.zeros(load.size, dtype=complex)
        x[k] = splu(csc_matrix(dynamic[k][:, k].astype(complex))).solve(load.ravel()[k])
        return x.reshape(-1, 3)

    def node_of(self, grid: pv.UnstructuredGrid) -> Ints:
        return rows(grid, self.body)[0]

    def on_body(self, grid: pv.UnstructuredGrid, values: NDArray) -> NDArray:
        """Values at the nodes of an expanded body in the order of the assembled one."""
        out = np.empty_like(values)
        out[self.node_of(grid)] = values
        return out

    # --- the case ---------------------------------------------------------------------------------

    def model(self, folder: Path, names: Sequence[str] = ("displacement",)) -> Model:
        """The sector, its planes and axis, and the declaration of complex fields."""
        model = Model(folder, self.mesh.points, {self.mesh.shape.vtk_type: self.mesh.cells})
        for name in names:
            model.field(name, **KINDS[name], real=f"{name}_re", imaginary=f"{name}_im")  # type: ignore[arg-type]
        model.table(
            mirror=[
                {
                    "name": f"p{i}",
                    "normal": p.unit,
                    "point": np.asarray(p.point, dtype=float),
                    "load": word(p.parity),
                }
                for i, p in enumerate(self.planes)
            ]
        )
        return model.table(cyclic=self.cyclic())

    def cyclic(self, h: int | None = None, **words: object) -> dict[str, object]:
        """The table [cyclic]."""
        table = {
            "sectors": self.N,
            "axis": np.asarray(self.axis.axis, dtype=float),
            "point": np.asarray(self.axis.point, dtype=float),
        }
        return {**table, **({} if h is None else {"nodal_diameters": h}), **words}

    def harmonic(
        self, h: int, u: Complex, load: Complex, dynamic: csr_matrix, whole: bool = False
    ) -> dict[str, Complex]:
        """All fields of a response on the sector, or on the whole ring."""
        mesh = self.body.mesh if whole else self.mesh
        material = self.whole_material if whole else self.material
        parts = []
        for half in (u.real, u.imag):
            s = Solution(mesh, material, np.ascontiguousarray(half), np.zeros_like(half))
            parts.append({"rotation": s.rotation, "stress": s.nodal_stress,
                          "strain": s.nodal_strain, "cell_stress": s.cell_stress,
                          "cell_rotation": s.cell_rotation,
                          "gradient": s.cell_gradient.reshape(-1, 9)})  # fmt: skip
        found = {name: parts[0][name] + 1j * parts[1][name] for name in parts[0]}
        reaction = (dynamic @ u.ravel()).reshape(-1, 3) - load
        arm = np.asarray(self.axis.point, dtype=float)
        both = moment(mesh.points, load.real, arm) + 1j * moment(mesh.points, load.imag, arm)
        return {"displacement": u, "nodal_force": load, "reaction": reaction,
                "moment_of_force": both, **found}  # fmt: skip

    @property
    def somewhere(self) -> Ints:
        """Two nodes inside the sector, on no seam."""
        pairs = np.concatenate(cyclic_pairs(self.mesh, self.axis))
        on = np.zeros(len(self.mesh.points), dtype=bool)
        on[pairs] = on[self.held] = True
        for p in self.planes:
            on |= on_plane(self.mesh, p.unit, p.point)
        return np.flatnonzero(~on)[[0, -1]]


def stored(fields: Mapping[str, NDArray]) -> tuple[dict[str, Floats], dict[str, Floats]]:
    """Arrays `X_re` and `X_im` on points and on cells."""
    points: dict[str, Floats] = {}
    cells: dict[str, Floats] = {}
    for name, values in fields.items():
        on = cells if name in ("cell_stress", "cell_rotation", "gradient") else points
        on[f"{name}_re"] = np.ascontiguousarray(values.real)
        on[f"{name}_im"] = np.ascontiguousarray(values.imag)
    return points, cells


def amplitude(grid: pv.UnstructuredGrid, name: str = "displacement") -> Complex:
    """A complex field of an expanded body."""
    return np.asarray(grid[f"{name}_real"]) + 1j * np.asarray(grid[f"{name}_imag"])


def off(found: NDArray, expected: NDArray, scale: float | None = None) -> float:
    """Largest difference over the largest magnitude, of complex fields too."""
    assert found.shape == expected.shape
    assert np.isfinite(found).all()
    size = np.abs(expected).max() if scale is None else scale
    assert size > 0.0
    return float(np.abs(found - expected).max() / size)


# --- bodies ---------------------------------------------------------------------------------------


def wedge(N: int, counts: Sequence[int] = (2, 3, 2), cells=lambda mesh: mesh, plane=None) -> Ring:
    """A sector with curved seams, no two cells alike, clamped at its inner rim, axis in no special
    direction; a cut plane normal to the axis of that parity at its lower side."""
    alpha = 2 * np.pi / N

    def place(u, v, w):
        r, t = 1.0 + u, alpha * v + 0.2 * u * u + 0.1 * w * w
        x = np.stack([r * np.cos(t), r * np.sin(t), 0.6 * w * (1 + 0.2 * u)], axis=1)
        return (x @ SKEW.T + SHIFT).T

    mesh = cells(block(*counts)).mapped(place)
    axis = Cyclic(N, SKEW[:, 2], SHIFT)
    away = (mesh.points - SHIFT) @ SKEW
    radius = np.hypot(away[:, 0], away[:, 1])
    held = np.flatnonzero(radius < radius.min() + 0.02)
    number = np.arange(len(mesh.cells))
    return Ring(
        mesh,
        axis,
        held,
        () if plane is None else (CutPlane(SKEW[:, 2], SHIFT, plane),),
        Material(young=200e3 * (1 + 0.4 * np.sin(7.0 * number))),
        7.8e-9 * (1 + 0.3 * np.cos(5.0 * number)),
    )


def hoop(N: int, inner: float, outer: float, height: float, around: int, material, density) -> Ring:
    """A free ring of straight 20-node hexahedra about z, half of its height above the symmetric
    plane, which leaves motions in the ring's plane."""
    alpha = 2 * np.pi / N

    def place(u, v, w):
        r = inner + (outer - inner) * u
        return r * np.cos(alpha * v), r * np.sin(alpha * v), 0.5 * height * w

    mesh = quadratic(block(1, around, 1).mapped(place))  # thin curved cells would lock
    return Ring(mesh, Cyclic(N), planes=(CutPlane((0, 0, 1)),), material=material, density=density)


def disc(N: int, side: int, radius: float, height: float, material, density) -> Ring:
    """A free circular plate of 20-node hexahedra, half of its height above the antisymmetric
    plane, which leaves bending only. Nodes on the axis are shared by all copies."""
    alpha = 2 * np.pi / N

    def at(r, t):
        return np.array([r * np.cos(t), r * np.sin(t)])[:, None]

    A, B, C = at(0.5 * radius, 0.0), at(0.58 * radius, alpha / 2), at(0.5 * radius, alpha)

    def kite(u, v, w):
        return *(u * (1 - v) * A + u * v * B + (1 - u) * v * C), 0.5 * height * w

    def outer(start, end, begin):
        def place(u, v, w):
            t = begin + alpha / 2 * v
            rim = radius * np.stack([np.cos(t), np.sin(t)])
            return *((1 - u) * ((1 - v) * start + v * end) + u * rim), 0.5 * height * w

        return place

    square = quadratic(block(side, side, 1))
    mesh = join(*(square.mapped(m) for m in (kite, outer(A, B, 0.0), outer(B, C, alpha / 2))))
    plane = CutPlane((0, 0, 1), (0, 0, 0), -1)
    return Ring(mesh, Cyclic(N), planes=(plane,), material=material, density=density)


def waves_around(
    grid: pv.UnstructuredGrid, values: NDArray, radius: float, height: float = 0.0
) -> tuple[Ints, Floats]:
    """Signed wave counts m, strongest first, and magnitudes of exp(i m theta) around z.

    Parameters
    ----------
    values : (n,) complex at the nodes; those on the circle of this radius and height are taken,
        which must stand at equal angles.
    """
    x, y, z = np.asarray(grid.points, dtype=float).T
    on = np.flatnonzero((np.abs(np.hypot(x, y) - radius) < 1e-6 * radius)
                        & (np.abs(z - height) < 1e-6 * radius))  # fmt: skip
    angle = np.arctan2(y[on], x[on]) % (2 * np.pi - 1e-9)
    order = np.argsort(angle)
    count = len(on)
    assert np.allclose(angle[order], 2 * np.pi * np.arange(count) / count, atol=1e-6)
    size = np.abs(np.fft.fft(values[on][order])) / count
    m = np.fft.fftfreq(count, 1.0 / count).round().astype(int)
    strongest = np.argsort(-size, kind="stable")
    return m[strongest], size[strongest]
