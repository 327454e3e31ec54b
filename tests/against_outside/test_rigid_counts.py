"""Rigid-body motions that a load leaves free, against tables and against stiffness matrices.

Sources:

- Character tables of the point groups (F. A. Cotton, Chemical Applications of Group Theory,
  appendix; the rows from memory). Their columns of functions say which translations (x, y, z) and
  rotations (Rx, Ry, Rz) behave as each row; S and A on a cut plane are the characters +1 and -1 of
  that reflection, h the number of the row E_h.
- Rigid-body motions left by cut planes: common practice in structural analysis.
- Paired modes: with h = 1 whole-body motion across the axis is free, and with no other h > 0
  (D. L. Thomas, Journal of Sound and Vibration 66 (1979) 585-597).
- Finite elements: the stiffness matrix of a sector with its seam conditions has one zero
  eigenvalue for each motion that nothing holds. Its matrices come from `demo_cases.solver`, the
  conditions from the nodes that plain isometries bring together.
"""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from scipy.linalg import eigvalsh, null_space
from scipy.spatial import cKDTree

from demo_cases import solver
from expander.audit.rigid import displacement, free_motions, holding, share
from tests.meshes import box, ring, somewhere
from tests.rigid_cases import BODIES, Case, X, Y, Z, at_angle

SIX = ("x", "y", "z", "Rx", "Ry", "Rz")


def rows(point_group, *planes, sectors=0):
    """(name, signs of the planes, h, functions) of the rows of a table."""
    normals, table = planes[:-1], planes[-1]
    return [
        pytest.param(list(normals), sectors, signs, h, functions, id=f"{point_group} {row}")
        for row, signs, h, functions in table
    ]


def cyclic(N):
    """C_N: A, then B for even N, then E_1, E_2, .."""
    found = [("A", (), 0, "z Rz")]
    if N % 2 == 0:
        found.append(("B", (), N // 2, "x y Rx Ry" if N == 2 else ""))
    found += [(f"E{h}", (), h, "x y Rx Ry" if h == 1 else "") for h in range(1, (N + 1) // 2)]
    return rows(f"C{N}", found, sectors=N)


TABLES = [
    *rows("Cs", Z, [("A'", (1,), 0, "x y Rz"), ("A''", (-1,), 0, "z Rx Ry")]),
    # The plane xz has the normal y.
    *rows("C2v", Y, X, [
        ("A1", (1, 1), 0, "z"), ("A2", (-1, -1), 0, "Rz"),
        ("B1", (1, -1), 0, "x Ry"), ("B2", (-1, 1), 0, "y Rx"),
    ]),
    *rows("D2h", Z, Y, X, [
        ("Ag", (1, 1, 1), 0, ""), ("B1g", (1, -1, -1), 0, "Rz"),
        ("B2g", (-1, 1, -1), 0, "Ry"), ("B3g", (-1, -1, 1), 0, "Rx"),
        ("Au", (-1, -1, -1), 0, ""), ("B1u", (-1, 1, 1), 0, "z"),
        ("B2u", (1, -1, 1), 0, "y"), ("B3u", (1, 1, -1), 0, "x"),
    ]),
    *rows("C3v", X, at_angle(60), [("A1", (1, 1), 0, "z"), ("A2", (-1, -1), 0, "Rz")]),
    *rows("C4v", X, at_angle(45), [
        ("A1", (1, 1), 0, "z"), ("A2", (-1, -1), 0, "Rz"),
        ("B1", (1, -1), 0, ""), ("B2", (-1, 1), 0, ""),
    ]),
    *rows("C6v", X, at_angle(30), [
        ("A1", (1, 1), 0, "z"), ("A2", (-1, -1), 0, "Rz"),
        ("B1", (-1, 1), 0, ""), ("B2", (1, -1), 0, ""),
    ]),
    *itertools.chain.from_iterable(cyclic(N) for N in (2, 3, 4, 5, 6, 7, 8)),
    *rows("C2h", Z, [
        ("Ag", (1,), 0, "Rz"), ("Bg", (-1,), 1, "Rx Ry"),
        ("Au", (-1,), 0, "z"), ("Bu", (1,), 1, "x y"),
    ], sectors=2),
    *rows("C3h", Z, [
        ("A'", (1,), 0, "Rz"), ("E'", (1,), 1, "x y"),
        ("A''", (-1,), 0, "z"), ("E''", (-1,), 1, "Rx Ry"),
    ], sectors=3),
    *rows("C4h", Z, [
        ("Ag", (1,), 0, "Rz"), ("Bg", (1,), 2, ""), ("Eg", (-1,), 1, "Rx Ry"),
        ("Au", (-1,), 0, "z"), ("Bu", (-1,), 2, ""), ("Eu", (1,), 1, "x y"),
    ], sectors=4),
    *rows("C6h", Z, [
        ("Ag", (1,), 0, "Rz"), ("Bg", (-1,), 3, ""), ("E1g", (-1,), 1, "Rx Ry"),
        ("E2g", (1,), 2, ""), ("Au", (-1,), 0, "z"), ("Bu", (1,), 3, ""),
        ("E1u", (1,), 1, "x y"), ("E2u", (-1,), 2, ""),
    ], sectors=6),
]  # fmt: skip


@pytest.mark.parametrize(("normals", "sectors", "signs", "h", "functions"), TABLES)
def test_character_tables(normals, sectors, signs, h, functions):
    motions = free_motions(*Case(normals, signs, sectors, h).build())
    names = functions.split()
    pairs = 2 if 0 < h < sectors / 2 else 1  # of an E row each of its two characters takes one
    assert motions.count == len(names) // pairs
    used = np.abs(motions.basis).max(axis=0, initial=0.0) > 1e-12
    assert {n for n, u in zip(SIX, used, strict=True) if u} == set(names)


@pytest.mark.parametrize(
    ("case", "count"),
    [
        (Case([X, Y], (1, 1)), 1),
        (Case([X, Y], (1, -1)), 2),
        (Case([X, Y], (-1, 1)), 2),
        (Case([X, Y], (-1, -1)), 1),
        (Case([X], (1,)), 3),
        (Case([X], (-1,)), 3),
        (Case([], (), 2, 1), 4),
        *((Case([], (), N, 0), 2) for N in range(2, 13)),
        *((Case([], (), N, 1), 2) for N in range(3, 13)),
        *((Case([], (), N, h), 0) for N in range(3, 13) for h in range(2, N // 2 + 1)),
    ],
)
def test_counts_of_common_practice(case, count):
    motions = free_motions(*case.build(*somewhere(4)))
    assert motions.count == count
    assert motions.complex == (0 < case.h < case.sectors / 2)


@pytest.mark.parametrize(("signs", "count"), [((1, 1), 0), ((1,), 1), ((-1,), 2), ((-1, -1), 1)])
def test_counts_of_plane_models(signs, count):
    """An antisymmetric quarter turns in its plane: from the same formula."""
    R, t = somewhere(4)
    group, chi = Case([X, Y][: len(signs)], signs).build(R, t)
    assert free_motions(group, chi, R @ Z, near=t).count == count


# --- finite elements ----------------------------------------------------------------------------

HELD = {
    "half S": (box((1, 2, 2)), Case([X], (1,))),
    "eighth SSS": (box((1, 1, 1)), Case([X, Y, Z], (1, 1, 1))),
    "eighth ASA": (box((1, 1, 1)), Case([X, Y, Z], (-1, 1, -1))),
    "wedge of 60 degrees SS": (
        ring(3, (1, 2, 1), part=0.5),
        Case([Y, np.array([-np.sin(np.pi / 3), 0.5, 0.0])], (1, 1)),
    ),
    "two sectors h = 0": (ring(2, (1, 4, 1)), Case([], (), 2, 0)),
    "three sectors h = 1": (ring(3, (1, 2, 1), lean=0.1), Case([], (), 3, 1)),
    "four sectors h = 2": (ring(4, (1, 2, 1)), Case([], (), 4, 2)),
    "six sectors h = 2": (ring(6, (1, 2, 1)), Case([], (), 6, 2)),
    "six sectors h = 1, z A": (ring(6, (1, 2, 1)), Case([Z], (-1,), 6, 1)),
} | {name: body for name, body in BODIES.items() if "pie" not in name}


def seam_conditions(points, group, chi) -> np.ndarray:
    """Rows of u_i - chi(s) Q u_j = 0, wherever the placement s brings node j to node i."""
    tree, n, rows = cKDTree(points), len(points), []
    for c, p in zip(chi, group.placements, strict=True):
        found = tree.query_ball_point(p.apply(points), 1e-8)
        for j, nodes in enumerate(found):
            for i in nodes:
                row = np.zeros((3, 3 * n), dtype=chi.dtype)
                row[:, 3 * i : 3 * i + 3] += np.eye(3)
                row[:, 3 * j : 3 * j + 3] -= c * p.Q
                rows.append(row)
    return np.concatenate(rows)


def solver_mesh(sector) -> solver.Mesh:
    cells = np.array([nodes for _, nodes in sector.cells])
    return solver.Mesh(sector.points, cells, np.zeros(len(cells), dtype=np.int64))


@pytest.mark.parametrize("name", HELD)
def test_zero_eigenvalues_of_the_sector(name):
    R, t = somewhere(6)
    sector, case = HELD[name]
    group, chi = case.build(R, t)
    mesh = solver_mesh(sector.moved(R, t))
    K = solver.stiffness(mesh, solver.Material(1.0, 0.3)).toarray()
    conditions = seam_conditions(mesh.points, group, chi)
    T = null_space(conditions)
    stiff = eigvalsh(T.conj().T @ K @ T)
    motions = free_motions(group, chi, near=mesh.points.mean(axis=0))
    k = motions.count
    assert np.abs(stiff[:k]).max(initial=0.0) < 1e-12 * stiff[-1]
    assert stiff[k] > 1e-5 * stiff[-1]
    # The motions satisfy all conditions and cost no energy: so they are these eigenvectors.
    fields = displacement(motions, mesh.points).reshape(k, len(K))
    assert np.abs(conditions @ fields.T).max(initial=0.0) < 1e-12
    assert np.abs(K @ fields.T).max(initial=0.0) < 1e-12


@pytest.mark.parametrize("pull", [0.0, 1.0])
def test_reaction_of_a_support_that_only_holds_the_free_motion(pull):
    """A quarter pulled at top and foot and pressed on its side, held at one node along z.

    Statics: the support takes the force along z that the loads leave over, here none or, with
    `pull` on top, that of the quarter; the rest of the seam's reactions do no work along z.
    """
    R, t = somewhere(9)
    mesh = solver_mesh(box((2, 2, 3)).moved(R, t))
    up = (mesh.points - t) @ R[:, 2]
    ends = [np.abs(up - up.max()) < 1e-9, np.abs(up - up.min()) < 1e-9]
    load = solver.surface_load(mesh, ends[0], (1.0 + pull) * R[:, 2])
    load += solver.surface_load(mesh, ends[1], -R[:, 2])
    aside = (mesh.points - t) @ R[:, 0]
    load += solver.surface_load(mesh, np.abs(aside - aside.max()) < 1e-9, -R[:, 0])
    group, chi = Case([X, Y], (1, 1)).build(R, t)
    solution = solver.solve(
        mesh,
        solver.Material(1.0, 0.3),
        load,
        fixed=[solver.Fixed(np.array([4]), R[:, 2])],
        planes=[solver.CutPlane(R[:, k], t) for k in (0, 1)],
    )
    motions = free_motions(group, chi, near=t)
    work = holding(motions, mesh.points, solution.reaction)
    total = holding(motions, mesh.points, solution.reaction + load)
    assert total == pytest.approx(0.0, abs=1e-9)  # supports and loads balance in a free motion
    if pull:
        force = (solution.reaction @ motions.basis[0, :3]).sum()
        area = 1.0  # of the quarter's top
        assert abs(force) == pytest.approx(pull * area, rel=1e-9)
        assert abs(work[0]) > 0.1
    else:
        assert abs(work[0]) < 1e-9
        # Where the support was set does not matter to what remains of the displacement.
        other = solution.displacement + 3.0 * displacement(motions, mesh.points)[0]
        a, b = (share(motions, mesh.points, u)[1] for u in (solution.displacement, other))
        assert b - a == pytest.approx([3.0])
