"""Forces, moments, energy and mass of expanded bodies against statics by hand.

Sources: equilibrium of forces and moments; beam tables (Roark's Formulas for Stress and Strain):
a beam on guided ends, or clamped, with P at the middle of its span L deflects by P L^3/(192 E I),
with end and middle moments P L/8.

Tolerance 1e-10 of the largest magnitude, as for solved bodies (see `elastic.SOLVED`), unless a
test says otherwise.
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy.spatial import cKDTree

from demo_cases.solver import (
    CutPlane,
    Cyclic,
    Fixed,
    Material,
    block,
    body_force,
    cyclic_pairs,
    on_plane,
    quadratic,
    solve,
    surface_load,
)
from tests.against_outside.bodies import SHIFT, SKEW, Floats, Model, centres, miss, polar_basis
from tests.against_outside.elastic import SOLVED, Body, declare, fields_of, seam_nodes

X, Y, Z = SKEW.T


def placed(x: Floats) -> Floats:
    return x @ SKEW.T + SHIFT


def in_skew(mesh, mapping):
    mesh = mesh.mapped(mapping)
    return mesh.mapped(lambda *x: placed(np.stack(x, axis=1)).T)


def mass_of(mesh, density: float = 7.8) -> Floats:
    """(n,) nodal masses of the sector alone."""
    return body_force(mesh, (density, 0.0, 0.0))[:, 0].copy()


def expanded(tmp_path, body: Body, load: Floats):
    """The whole body with all fields, nodal mass and cell energy, and the sector's solution."""
    solution = body.solve(load)
    points, cells = fields_of(solution, body.about)
    model = declare(body.model(tmp_path))
    model.field("mass", "scalar", seam="sum", follows="body")
    model.values(points={**points, "mass": mass_of(body.mesh)}, cells=cells)
    return model.expand(), solution


def resultant(grid, name, about) -> tuple[Floats, Floats]:
    """Sum of nodal forces and of their moments about a point."""
    force = grid[name]
    return force.sum(axis=0), np.cross(grid.points - about, force).sum(axis=0)


# --- a block standing on its foot ---------------------------------------------------------------

WIDE, DEEP, HIGH = 0.9, 0.7, 1.1  # of the modelled quarter


def quarter_block(parities=(1, 1)) -> Body:
    mesh = in_skew(block(3, 3, 3), lambda u, v, w: (WIDE * u, DEEP * v, HIGH * w))
    foot = np.flatnonzero(on_plane(mesh, Z, SHIFT))
    planes = [CutPlane(X, SHIFT, parities[0]), CutPlane(Y, SHIFT, parities[1])]
    return Body(mesh, foot, planes, about=SHIFT)


@pytest.mark.parametrize(
    ("parities", "traction", "force", "moment"),
    [
        # Pressure on the top: the whole top 2 WIDE x 2 DEEP pushes down; no moment about the axis.
        ((1, 1), -Z, (0, 0, -4 * WIDE * DEEP), (0, 0, 0)),
        # Shear along x, antisymmetric in the plane x = 0: sums over the top at height HIGH.
        ((-1, 1), X, (4 * WIDE * DEEP, 0, 0), (0, 4 * WIDE * DEEP * HIGH, 0)),
        ((1, -1), Y, (0, 4 * WIDE * DEEP, 0), (-4 * WIDE * DEEP * HIGH, 0, 0)),
        # Pull up on one side, push down on the other: four quarters at the mean arm WIDE / 2.
        ((-1, 1), Z, (0, 0, 0), (0, -4 * WIDE * DEEP * WIDE / 2, 0)),
        # Along x for y > 0, back for y < 0: torque about z, four quarters at the mean arm DEEP / 2.
        ((-1, -1), X, (0, 0, 0), (0, 0, -4 * WIDE * DEEP * DEEP / 2)),
    ],
    ids=["press", "shear x", "shear y", "tilt", "twist"],
)
def test_block_under_traction(tmp_path, parities, traction, force, moment):
    """Quarter of a block: load totals and reactions by hand, in a skew system."""
    body = quarter_block(parities)
    top = on_plane(body.mesh, Z, SHIFT + HIGH * Z)
    whole, _ = expanded(tmp_path, body, surface_load(body.mesh, top, traction))
    found_force, found_moment = resultant(whole, "nodal_force", SHIFT)
    size = 4 * WIDE * DEEP
    assert miss(found_force @ SKEW, force, size) < SOLVED
    assert miss(found_moment @ SKEW, moment, size) < SOLVED
    assert miss(whole["moment_of_force"].sum(axis=0) @ SKEW, moment, size) < SOLVED
    reaction, support_moment = resultant(whole, "reaction", SHIFT)
    assert miss(reaction @ SKEW, -np.array(force), size) < SOLVED
    assert miss(support_moment @ SKEW, -np.array(moment), size) < SOLVED


@pytest.mark.parametrize("parities", [(1, 1), (-1, 1), (-1, -1)], ids=str)
def test_block_mass(tmp_path, parities):
    """Mass of the whole block is density times volume whatever the load words; its centre."""
    body = quarter_block(parities)
    load = body_force(body.mesh, (1.0, 2.0, 3.0))
    whole, _ = expanded(tmp_path, body, load)
    mass = whole["mass"].reshape(-1)
    assert mass.sum() == pytest.approx(7.8 * 4 * WIDE * DEEP * HIGH, rel=1e-12)
    centre = mass @ (whole.points - SHIFT) / mass.sum() @ SKEW
    assert miss(centre, [0, 0, HIGH / 2]) < 1e-12


# --- energy and seam reactions, all groups ------------------------------------------------------


def ring(sectors: int, parity: int, around: int = 2) -> Body:
    mesh = in_skew(
        quadratic(block(2, around, 2)),
        lambda u, v, w: (
            (0.6 + u) * np.cos(2 * np.pi / sectors * v + 0.4 * u * u + 0.3 * w),
            (0.6 + u) * np.sin(2 * np.pi / sectors * v + 0.4 * u * u + 0.3 * w),
            0.9 * w,
        ),
    )
    rim = np.linalg.norm(np.cross(mesh.points - SHIFT, Z), axis=1)
    return Body(
        mesh,
        np.flatnonzero(rim < 0.6 + 1e-9),
        cyclic=Cyclic(sectors, Z, SHIFT, parity),
        about=SHIFT,
    )


def half_sectors(sectors: int, plane: int) -> Body:
    angle = np.pi / sectors
    mesh = in_skew(
        quadratic(block(2, 2, 2)),
        lambda u, v, w: ((0.6 + u) * np.cos(angle * v), (0.6 + u) * np.sin(angle * v), 0.9 * w),
    )
    rim = np.linalg.norm(np.cross(mesh.points - SHIFT, Z), axis=1)
    other = -np.sin(angle) * X + np.cos(angle) * Y
    return Body(
        mesh,
        np.flatnonzero(rim < 0.6 + 1e-9),
        [CutPlane(Y, SHIFT, plane), CutPlane(other, SHIFT, plane)],
        Cyclic(sectors, Z, SHIFT),
        SHIFT,
        halves=True,
    )


BODIES = pytest.mark.parametrize(
    ("body", "count"),
    [(quarter_block((1, -1)), 4), (ring(7, 1), 7), (ring(6, -1), 6), (half_sectors(5, -1), 10)],
    ids=["quarter", "ring", "alternating ring", "half-sectors"],
)


@BODIES
def test_energy_and_reactions(tmp_path, body, count):
    """Energy is |G| times the sector's; reactions of the seam conditions cancel; equilibrium."""
    load = body_force(
        body.mesh,
        lambda x: np.stack([1 + x[..., 1], 2 - x[..., 0] * x[..., 2], np.sin(x[..., 0])], axis=-1),
    )
    whole, solution = expanded(tmp_path, body, load)

    # Half the work of the loads on the whole body; supports and seam conditions do none.
    work = 0.5 * np.sum(whole["nodal_force"] * whole["displacement"])
    assert work == pytest.approx(count * solution.energy, rel=SOLVED)
    per_cell = np.bincount(whole["sector_cell"], minlength=len(body.mesh.cells))
    assert (per_cell == count).all()

    merged = body.whole()
    seam = merged.mesh.points[seam_nodes(merged)]
    held = merged.mesh.points[merged.node[:, body.fixed].ravel()]
    reaction = whole["reaction"]
    near = 1e-6 * body.mesh.edge_length()
    on_seam = cKDTree(seam).query(whole.points)[0] < near
    on_support = cKDTree(held).query(whole.points)[0] < near
    # The sector's own seam reactions are as large as its loads, and the whole body's vanish.
    free = np.setdiff1d(np.arange(len(body.mesh.points)), body.fixed)
    own = np.abs(solution.reaction[free]).max()
    assert own > 0.01 * np.abs(reaction).max()
    assert miss(reaction[on_seam & ~on_support], 0 * reaction[on_seam & ~on_support], own) < SOLVED

    force, moment = resultant(whole, "nodal_force", SHIFT)
    back, moment_back = resultant(whole, "reaction", SHIFT)
    size = np.abs(whole["nodal_force"]).sum()
    assert miss(force + back, np.zeros(3), size) < SOLVED
    assert miss(moment + moment_back, np.zeros(3), size) < SOLVED
    assert miss(whole["moment_of_force"].sum(axis=0), moment, size) < SOLVED


def test_ring_torque_by_hand(tmp_path):
    """A swirl of force per volume f around the axis of a round tube: torque 2 pi f L (b^3-a^3)/3.

    The only error is the shape of a circle in the 20-node mesh: a parabola over the angle t is off
    in area by t^4/180, which is 5e-5 for the swept edges' 0.3 rad and less for the others;
    tolerance 5e-5. Force across the axis and mass are checked too.
    """
    a, b, length, f = 0.6, 1.6, 0.9, 3.0
    body = ring(7, 1, around=6)

    def density(x):
        around = polar_basis(x.reshape(-1, 3), Z, SHIFT)[:, 1].reshape(x.shape)
        return f * around

    whole, solution = expanded(tmp_path, body, body_force(body.mesh, density))
    force, moment = resultant(whole, "nodal_force", SHIFT)
    torque = 2 * np.pi * f * length * (b**3 - a**3) / 3
    assert moment @ Z == pytest.approx(torque, rel=5e-5)
    assert moment @ Z == pytest.approx(
        7 * np.cross(solution.mesh.points - SHIFT, solution.external_force).sum(axis=0) @ Z,
        rel=1e-12,
    )
    assert miss(moment - (moment @ Z) * Z, np.zeros(3), torque) < 1e-12
    assert miss(force, np.zeros(3), torque) < 1e-12
    assert whole["mass"].sum() == pytest.approx(7.8 * np.pi * (b**2 - a**2) * length, rel=5e-5)


def test_first_plus_second_face(tmp_path):
    """Nodal mass on a cyclic seam is the first face's share plus the second's, everywhere alike."""
    body = ring(7, 1)
    whole, _ = expanded(tmp_path, body, body_force(body.mesh, (0.0, 0.0, 1.0)))
    first, second = cyclic_pairs(body.mesh, body.cyclic)
    own = mass_of(body.mesh)
    mass = whole["mass"].reshape(-1)
    for a, b in zip(first, second, strict=True):
        both = own[a] + own[b]
        assert (
            miss(mass[whole["sector_point"] == a], both + 0 * mass[whole["sector_point"] == a])
            < 1e-12
        )
    assert mass.sum() == pytest.approx(7 * own.sum(), rel=1e-12)


# --- Roark's beam -------------------------------------------------------------------------------

P, LONG, SIDE, E = 120.0, 60.0, 1.0, 2e5
INERTIA = SIDE**4 / 12
MIDDLE = P * LONG**3 / (192 * E * INERTIA)


def test_solid_beam_from_an_eighth(tmp_path):
    """Roark: P L^3/(192 E I) with an eighth of a slender clamped beam of 20-node hexahedra.

    Beam along x, load along z: planes x = 0 and y = 0 symmetric, z = 0 antisymmetric. Against the
    beam with shear (Timoshenko, rectangular section, factor 5/6, nu = 0) within 0.2 per cent,
    mesh and local effects of the clamp; shear itself adds 9.6 (side/L)^2 = 0.27 per cent to
    Roark's figure, so that one is met within half a per cent.
    """
    mesh = quadratic(block(15, 1, 2)).mapped(
        lambda u, v, w: (LONG / 2 * u, SIDE / 2 * v, SIDE / 2 * w)
    )
    x = mesh.points[:, 0]
    planes = [CutPlane((1, 0, 0)), CutPlane((0, 1, 0)), CutPlane((0, 0, 1), parity=-1)]
    middle = np.abs(x) < 1e-9
    # P over the whole middle section; a face of the half beam carries P/2, of the eighth P/8.
    load = surface_load(mesh, middle, (0, 0, P / 2 / SIDE**2))
    end = np.flatnonzero(np.abs(x - LONG / 2) < 1e-9)
    solution = solve(mesh, Material(E, 0.0), load, fixed=[Fixed(end)], planes=planes)

    model = Model(tmp_path, mesh.points, {25: mesh.cells})
    model.field("displacement", "polar vector").field("force", "polar vector", seam="sum")
    model.field("reaction", "polar vector", seam="sum")
    model.field("stress", "symmetric tensor", components="xx yy zz xy yz zx", seam="recovered")
    model.values(
        points={
            "displacement": solution.displacement,
            "force": load,
            "reaction": solution.reaction,
            "stress": solution.nodal_stress,
        }
    )
    model.table(mirror=[{"normal": "x"}, {"normal": "y"}, {"normal": "z", "load": "antisymmetric"}])
    whole = model.expand()
    x = whole.points[:, 0]
    deflection = whole["displacement"][np.abs(x) < 1e-9, 2]
    with_shear = MIDDLE + P * LONG / (4 * (5 / 6) * (E / 2) * SIDE**2)
    assert deflection.mean() == pytest.approx(with_shear, rel=2e-3)
    assert deflection.mean() == pytest.approx(MIDDLE, rel=5e-3)

    force, _ = resultant(whole, "force", np.zeros(3))
    assert miss(force, [0, 0, P]) < SOLVED
    for side in (-1, 1):
        at_end = np.abs(x - side * LONG / 2) < 1e-9
        shear = whole["reaction"][at_end].sum(axis=0)
        clamp = np.cross(whole.points - [side * LONG / 2, 0, 0], whole["reaction"])[at_end]
        # Round-off of a slender beam's solution: 1e-16 times its condition of about (L/h)^4.
        assert miss(shear, [0, 0, -P / 2], P) < 1e-8
        assert miss(shear[2], 4 * solution.reaction[end].sum(axis=0)[2]) < 1e-12
        assert clamp.sum(axis=0)[1] == pytest.approx(-side * P * LONG / 8, rel=1e-3)
    # Bending stress M z / I of the moment P L/8 at the middle, from linear recovery on two layers
    # of cells with the load spread over the section: within five per cent.
    top = (np.abs(x) < 1e-9) & (np.abs(whole.points[:, 2] - SIDE / 2) < 1e-9)
    bottom = (np.abs(x) < 1e-9) & (np.abs(whole.points[:, 2] + SIDE / 2) < 1e-9)
    outer = P * LONG / 8 * SIDE / 2 / INERTIA
    assert whole["stress"][top, 0].mean() == pytest.approx(outer, rel=0.05)
    assert whole["stress"][bottom, 0].mean() == pytest.approx(-outer, rel=0.05)


def test_beam_formula_on_lines(tmp_path):
    """Roark's deflection, slope and moment along half a line, guided ends, expanded to the span.

    The half 0 <= x <= L/2 carries P/2 at the middle and P/2 at its end. Rotation about y is
    -w' (axial); forces and moments at nodes add. Exact cubic, tolerance 1e-12.
    """
    s = LONG * np.linspace(0, 0.5, 9)

    def deflection(x):  # against the guided ends; P L^3/(192 E I) in the middle
        a = np.abs(x) / LONG
        return P * LONG**3 / (192 * E * INERTIA) * (1 - 12 * a**2 + 16 * a**3)

    def slope(x):
        a = np.abs(x) / LONG
        return np.sign(x) * P * LONG**2 / (192 * E * INERTIA) * (-24 * a + 48 * a**2)

    zero = 0 * s
    force, moment = np.zeros((9, 3)), np.zeros((9, 3))
    force[0], force[-1] = (0, 0, P / 2), (0, 0, -P / 2)
    moment[-1, 1] = -P * LONG / 8  # of the guide at the end, on the beam
    moment[0, 1] = -P * LONG / 8  # of the cut plane, which cancels
    points = np.stack([s, zero, zero], axis=1)
    lines = np.stack([np.arange(8), np.arange(1, 9)], axis=1)
    model = Model(tmp_path, points, {3: lines})
    model.field("u", "polar vector").field("turn", "axial vector")
    model.field("force", "polar vector", seam="sum").field("moment", "axial vector", seam="sum")
    model.values(
        points={
            "u": np.stack([zero, zero, deflection(s)], axis=1),
            "turn": np.stack([zero, -slope(s), zero], axis=1),
            "force": force,
            "moment": moment,
        }
    )
    model.table(mirror=[{"normal": "x"}])
    whole = model.expand()
    x = whole.points[:, 0]
    assert whole.n_points == 17
    assert whole.n_cells == 16
    assert miss(whole["u"][:, 2], deflection(x)) < 1e-12
    assert miss(whole["turn"][:, 1], -slope(x)) < 1e-12
    assert whole["u"][np.abs(x) < 1e-9, 2].max() == pytest.approx(MIDDLE, rel=1e-12)
    middle = np.abs(x) < 1e-9
    assert miss(whole["force"][middle][0], [0, 0, P]) < 1e-12
    assert miss(whole["moment"][middle][0], np.zeros(3), P * LONG) < 1e-12
    total, about_origin = resultant(whole, "force", np.zeros(3))
    assert miss(total, np.zeros(3), P) < 1e-12
    assert miss(about_origin + whole["moment"].sum(axis=0), np.zeros(3), P * LONG) < 1e-12
    at_ends = whole["moment"][np.abs(np.abs(x) - LONG / 2) < 1e-9, 1]
    assert sorted(at_ends) == pytest.approx([-P * LONG / 8, P * LONG / 8], rel=1e-12)
    assert miss(np.sort(centres(whole)[:, 0]), LONG * (np.arange(16) - 7.5) / 16) < 1e-12
