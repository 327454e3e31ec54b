"""Waves around a ring for the demo cases: complex solutions and modes of one sector.

The next sector takes ``u(next face) = exp(i h alpha) Q u(first face)``, ``alpha = 2 pi/N`` (D. L.
Thomas, Dynamics of rotationally periodic structures, International Journal for Numerical Methods
in Engineering 14, 1979). As `demo_cases.solver`, with which it works, it knows nothing of the
expander. A whole body is an array of one sector: leave `cyclic` out.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csc_matrix, csr_matrix, diags_array
from scipy.sparse.linalg import LinearOperator, SuperLU, eigsh, splu

from demo_cases.solver import (
    Cyclic,
    Fixed,
    Floats,
    Material,
    Mesh,
    Solution,
    cyclic_pairs,
    elimination,
)

Complex = NDArray[np.complex128]


def mass(mesh: Mesh, density: float) -> csr_matrix:
    """Consistent mass matrix (3 n, 3 n); unknown 3 i + c is component c of node i."""
    X, weight = mesh.shape.quadrature
    value, gradient = mesh.shape.basis(X)
    J = np.einsum("mka,kbq->mqab", mesh.points[mesh.cells], gradient)
    blocks = density * np.einsum("mq,kq,lq->mkl", np.linalg.det(J) * weight, value, value)
    unknown = 3 * mesh.cells[..., None] + np.arange(3)  # (m, k, 3)
    rows, columns, entries = np.broadcast_arrays(
        unknown[:, :, None], unknown[:, None], blocks[..., None]
    )
    size = 3 * len(mesh.points)
    return csr_matrix((entries.ravel(), (rows.ravel(), columns.ravel())), shape=(size, size))


def wave_elimination(
    mesh: Mesh, fixed: Sequence[Fixed] = (), cyclic: Cyclic | None = None, h: int = 0
) -> csr_matrix:
    """T with u = T q exactly when supports hold and the next sector takes exp(i h alpha) Q.

    Supports hold nodes where they are: prescribed values are refused, and nodes on the axis.
    """
    T, known = elimination(mesh, fixed, cyclic=cyclic)
    if known.any():
        raise ValueError("a wave has supports without prescribed values only")
    if cyclic is None:
        return T
    first, second = cyclic_pairs(mesh, cyclic)
    if (first == second).any():
        raise ValueError("the sector has nodes on its axis")
    turn = np.exp(2j * np.pi * h / cyclic.sectors)
    chi = np.ones(len(mesh.points), dtype=complex if 2 * h % cyclic.sectors else float)
    chi[second] = turn if chi.dtype == complex else turn.real
    return csr_matrix(diags_array(np.repeat(chi, 3)) @ T)


def _factors(matrix: csc_matrix) -> SuperLU:
    return splu(
        matrix,
        permc_spec="MMD_AT_PLUS_A",
        diag_pivot_thresh=0.1,
        options={"SymmetricMode": True},
    )


def respond(stiff: csr_matrix, T: csr_matrix, load: Floats | Complex) -> Floats | Complex:
    """(n, 3) displacement T q that balances a load (n, 3) along every free direction.

    `stiff` is the stiffness, or the dynamic stiffness K (1 + i eta) - omega^2 M. Real if all is.
    """
    back = T.conj().T
    kind = np.result_type(stiff.dtype, T.dtype, load.dtype)
    factors = _factors(csc_matrix(back @ stiff @ T, dtype=kind))
    q = np.zeros(T.shape[1], dtype=kind)
    for _ in range(3):  # the later rounds take off the round-off of the first
        q += factors.solve(back @ (load.ravel() - stiff @ (T @ q)))
    return (T @ q).reshape(-1, 3)


def modes(
    stiff: csr_matrix, heavy: csr_matrix, T: csr_matrix, count: int, near: float = 0.0
) -> tuple[Floats, Complex]:
    """Circular frequencies (count,) and shapes (count, n, 3) of modal mass 1 in `heavy`.

    Those nearest to the circular frequency `near`, rising. Shapes are real where T is.
    """
    back = T.conj().T
    K, M = csc_matrix(back @ stiff @ T), csc_matrix(back @ heavy @ T)
    factors = _factors(csc_matrix(K - near**2 * M))
    inverse = LinearOperator(K.shape, matvec=factors.solve, dtype=K.dtype)
    start = np.cos(np.arange(K.shape[0]))  # the same every time
    square, found = eigsh(K, count, M, sigma=near**2, OPinv=inverse, v0=start, tol=0.0)
    order = np.argsort(square)
    shapes = (T @ found[:, order]).T
    size = np.sqrt(np.einsum("ki,ki->k", shapes.conj(), (heavy @ shapes.T).T).real)
    return np.sqrt(square[order]), (shapes / size[:, None]).reshape(count, -1, 3)


@dataclass(frozen=True)
class Wave:
    """A complex displacement and what is recovered from it, as in `demo_cases.solver.Solution`."""

    mesh: Mesh
    material: Material
    displacement: Floats | Complex

    @cached_property
    def _parts(self) -> tuple[Solution, Solution]:
        rest = np.zeros_like(self.mesh.points)
        real = Solution(self.mesh, self.material, self.displacement.real.copy(), rest)
        return real, replace(real, displacement=self.displacement.imag.copy())

    @property
    def nodal_stress(self) -> Complex:
        """(n, 6) stress, mean of the cells' corner values."""
        real, imaginary = self._parts
        return real.nodal_stress + 1j * imaginary.nodal_stress

    @property
    def internal_force(self) -> Complex:
        """(n, 3) K u: forces that the nodes exert on the cells, without damping and inertia."""
        real, imaginary = self._parts
        return real.internal_force + 1j * imaginary.internal_force


def two_arrays(**fields: NDArray[np.generic]) -> dict[str, Floats]:
    """NAME_real and NAME_imag of each field; the imaginary part of a real one is zero."""
    return {
        f"{name}{end}": np.ascontiguousarray(part)
        for name, values in fields.items()
        for end, part in (("_real", np.real(values)), ("_imag", np.imag(values)))
    }
