"""The elliptic membrane of NAFEMS, a quarter solved and expanded, and the whole plate solved.

Source: NAFEMS, The Standard NAFEMS Benchmarks, test LE1: plane stress, inner ellipse
(x/2)^2 + y^2 = 1, outer (x/3.25)^2 + (y/2.75)^2 = 1 metres, thickness 0.1 m, E = 210 GPa,
nu = 0.3, outward pressure 10 MPa on the outer edge; sigma_yy at (2, 0) is 92.7 MPa.
Solved with scikit-fem, quadratic quadrilaterals (9 nodes). Units m, N, MPa.
"""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
import skfem
from scipy.sparse.linalg import spsolve
from scipy.spatial import cKDTree
from skfem.helpers import ddot, dot, eye, sym_grad, trace

from tests.against_outside.bodies import Floats, Ints, Model, miss, quads, rows_of

YOUNG, NU, THICKNESS, PRESSURE = 210e3, 0.3, 0.1, 10.0
TARGET = 92.7
AROUND, ACROSS = 12, 8  # cells of the quarter


def plate(around: int, across: int, angle: float) -> tuple[Floats, Ints]:
    """Plane nodes and 9-node cells from the x axis to an angle; curved edges, finer inwards."""
    grid, cells = quads(across, around, order=2)
    s, a = grid[:, 0] * (0.5 + 0.5 * grid[:, 0]), angle * grid[:, 1]
    points = np.stack([(2.0 + 1.25 * s) * np.cos(a), (1.0 + 1.75 * s) * np.sin(a)], axis=1)
    if angle < 2 * np.pi:
        return points, cells
    last = 2 * around  # grid lines v = 0 and v = 1 are one line
    number = np.arange(len(points))
    number -= np.where(number % (last + 1) == last, last, 0)
    kept, cells = np.unique(number[cells], return_inverse=True)
    return points[kept], cells.reshape(-1, 9)


class Solved:
    """Displacement and recovered stress of a plane-stress plate under the outward pressure."""

    def __init__(self, points: Floats, cells: Ints, held: Ints, component: Ints) -> None:
        self.points, self.cells = points, cells
        mesh = skfem.MeshQuad2(points.T, cells.T)
        element = skfem.ElementVector(skfem.ElementQuad2())
        basis = skfem.Basis(mesh, element, intorder=6)
        lam, mu = YOUNG * NU / (1 - NU**2), YOUNG / (2 * (1 + NU))  # plane stress

        def stress(strain):
            return 2 * mu * strain + lam * eye(trace(strain), 2)

        @skfem.BilinearForm
        def work(u, v, w):
            return THICKNESS * ddot(stress(sym_grad(u)), sym_grad(v))

        @skfem.LinearForm
        def push(v, w):
            return THICKNESS * PRESSURE * dot(w.n, v)

        outer = mesh.facets_satisfying(
            lambda x: (x[0] / 3.25) ** 2 + (x[1] / 2.75) ** 2 > 0.9, boundaries_only=True
        )
        edge = skfem.FacetBasis(mesh, element, facets=outer, intorder=6)
        stiffness, load = work.assemble(basis), push.assemble(edge)
        # Unknown of each node and component, found by place.
        place = cKDTree(basis.doflocs[:, ::2].T).query(points)[1]
        unknown = 2 * place[:, None] + np.arange(2)
        fixed = unknown[held, component]
        free = np.setdiff1d(np.arange(basis.N), fixed)
        u = np.zeros(basis.N)
        u[free] = spsolve(stiffness[free][:, free], load[free])
        for _ in range(2):  # takes the round-off of the factorisation off
            u[free] += spsolve(stiffness[free][:, free], (load - stiffness @ u)[free])
        self.displacement = u[unknown]
        self.force = load[unknown]
        # Corner values of stress at the nine nodes of each cell, then the mean at each node.
        corners = np.array([[0, 1, 1, 0, 0.5, 1, 0.5, 0, 0.5], [0, 0, 1, 1, 0, 0.5, 1, 0.5, 0.5]])
        at_nodes = skfem.Basis(mesh, element, quadrature=(corners, np.ones(9)))
        gradient = at_nodes.interpolate(u).grad
        values = stress(0.5 * (gradient + gradient.swapaxes(0, 1)))  # (2, 2, cells, 9)
        parts = np.stack([values[0, 0], values[1, 1], values[0, 1]], axis=-1)
        count = np.bincount(cells.ravel(), minlength=len(points))
        self.stress = (
            np.stack(
                [np.bincount(cells.ravel(), parts[..., c].ravel(), len(points)) for c in range(3)],
                axis=1,
            )
            / count[:, None]
        )
        self.cell_stress = parts[:, 8]

    def at(self, x: float, y: float) -> int:
        return int(np.linalg.norm(self.points - [x, y], axis=1).argmin())


@cache
def quarter() -> Solved:
    points, cells = plate(AROUND, ACROSS, np.pi / 2)
    on_x = np.flatnonzero(np.abs(points[:, 1]) < 1e-9)
    on_y = np.flatnonzero(np.abs(points[:, 0]) < 1e-9)
    return Solved(
        points, cells, np.concatenate([on_x, on_y]), np.repeat([1, 0], [len(on_x), len(on_y)])
    )


@cache
def whole_plate() -> Solved:
    """No symmetry condition: three held unknowns, only against motion as a rigid body."""
    points, cells = plate(4 * AROUND, ACROSS, 2 * np.pi)
    near = [int(np.linalg.norm(points - p, axis=1).argmin()) for p in [(2, 0), (-2, 0), (0, 1)]]
    return Solved(points, cells, np.array(near), np.array([1, 1, 0]))


def test_the_solver_reaches_the_benchmark():
    """LE1: sigma_yy at (2, 0) within half a per cent of 92.7 MPa on 12 x 8 cells."""
    model = quarter()
    assert model.stress[model.at(2, 0), 1] == pytest.approx(TARGET, rel=0.005)


@pytest.mark.parametrize(
    ("order", "columns"), [("xx yy xy", [0, 1, 2]), ("xx yy zz xy", [0, 1, None, 2])]
)
def test_quarter_expanded_equals_the_whole_plate(tmp_path, order, columns):
    """LE1: displacement, stress and nodal force of the expanded quarter against the whole plate.

    Tolerance 1e-10 of the maximum: both are exact solutions of the same discrete equations, so
    only the round-off of two direct solutions is left (condition about 1e5).
    """
    model, oracle = quarter(), whole_plate()

    def widen(stress):
        return np.stack(
            [np.zeros(len(stress)) if c is None else stress[:, c] for c in columns], axis=1
        )

    flat = np.column_stack([model.points, np.zeros(len(model.points))])
    body = Model(tmp_path, flat, {28: model.cells})
    body.field("displacement", "polar vector")
    body.field("stress", "symmetric tensor", components=order, seam="recovered")
    body.field("cell_stress", "symmetric tensor", components=order)
    body.field("force", "polar vector", seam="sum")
    body.values(
        points={
            "displacement": model.displacement,
            "stress": widen(model.stress),
            "force": model.force,
        },
        cells={"cell_stress": widen(model.cell_stress)},
    )
    body.table(mirror=[{"normal": "x"}, {"normal": "y"}])
    whole = body.expand()

    row = rows_of(whole.points[:, :2], oracle.points, 1e-9)
    assert miss(whole["displacement"], oracle.displacement[row]) < 1e-10
    assert miss(whole["stress"], widen(oracle.stress)[row]) < 1e-10
    assert miss(whole["force"], oracle.force[row]) < 1e-10
    middle = whole.points[whole.cells_dict[28][:, 8], :2]
    cell = rows_of(middle, oracle.points[oracle.cells[:, 8]], 1e-9)
    assert miss(whole["cell_stress"], widen(oracle.cell_stress)[cell]) < 1e-10

    yy = order.split().index("yy")
    right = np.linalg.norm(whole.points - [2, 0, 0], axis=1).argmin()
    left = np.linalg.norm(whole.points - [-2, 0, 0], axis=1).argmin()
    assert whole["stress"][left, yy] == pytest.approx(whole["stress"][right, yy], rel=1e-14)
    assert whole["stress"][right, yy] == pytest.approx(TARGET, rel=0.005)
    assert whole["stress"][right, yy] == pytest.approx(oracle.stress[oracle.at(2, 0), 1], rel=1e-10)
