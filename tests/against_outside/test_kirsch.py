"""An infinite plate with a round hole: a quarter's analytic field expanded to the whole plate.

Source: Timoshenko and Goodier, Theory of Elasticity, 3rd ed., section 35 (G. Kirsch 1898):
stress; M. H. Sadd, Elasticity, section 8.4: displacement. Plane stress.

Tolerance: 1e-12 of the field's maximum. Both sides evaluate the same closed formula, the quarter
at its own nodes and the oracle at the nodes of the whole body, so only round-off is left: about
1e-16 times a few dozen operations, times 10 for the skew system's coordinates of size 10.
"""

from __future__ import annotations

import numpy as np
import pytest
import sympy

from demo_cases.solver import block, quadratic
from tests.against_outside.bodies import (
    SHIFT,
    SIX,
    SKEW,
    Floats,
    Model,
    centres,
    miss,
    no_twins,
    quads,
    stored,
    tensor,
    turned,
)

A, S = 1.5, 80.0  # radius of the hole; remote tension
YOUNG, POISSON = 70e3, 0.33
G = YOUNG / (2 * (1 + POISSON))
KAPPA = (3 - POISSON) / (1 + POISSON)
ROUND_OFF = 1e-12


def in_plane(rr, tt, rt, theta) -> Floats:
    """(n, 3, 3) stress in x, y, z from polar components."""
    c, s = np.cos(theta), np.sin(theta)
    stress = np.zeros((*np.shape(theta), 3, 3))
    stress[..., 0, 0] = rr * c**2 + tt * s**2 - 2 * rt * s * c
    stress[..., 1, 1] = rr * s**2 + tt * c**2 + 2 * rt * s * c
    stress[..., 0, 1] = stress[..., 1, 0] = (rr - tt) * s * c + rt * (c**2 - s**2)
    return stress


def tension(points: Floats, angle: float = 0.0) -> Floats:
    """(n, 3, 3) stress under a remote tension S at an angle to x."""
    r, theta = np.hypot(points[:, 0], points[:, 1]), np.arctan2(points[:, 1], points[:, 0])
    q, c, s = (A / r) ** 2, np.cos(2 * (theta - angle)), np.sin(2 * (theta - angle))
    rr = S / 2 * (1 - q) + S / 2 * (1 - 4 * q + 3 * q**2) * c
    tt = S / 2 * (1 + q) - S / 2 * (1 + 3 * q**2) * c
    rt = -S / 2 * (1 + 2 * q - 3 * q**2) * s
    return in_plane(rr, tt, rt, theta)


def shear(points: Floats, tau: float) -> Floats:
    """(n, 3, 3) stress under a remote shear stress tau_xy: tension at 45 less that at -45."""
    r, theta = np.hypot(points[:, 0], points[:, 1]), np.arctan2(points[:, 1], points[:, 0])
    q, c, s = (A / r) ** 2, np.cos(2 * theta), np.sin(2 * theta)
    return in_plane(
        tau * (1 - 4 * q + 3 * q**2) * s,
        -tau * (1 + 3 * q**2) * s,
        tau * (1 + 2 * q - 3 * q**2) * c,
        theta,
    )


def polar_motion(r, theta, angle, cos, sin):
    """Displacement outwards and around (Sadd, example 8.7), with cos and sin of the caller."""
    c, s = cos(2 * (theta - angle)), sin(2 * (theta - angle))
    f = S * A / (8 * G)
    out = f * (
        r / A * (KAPPA - 1 + 2 * c) + 2 * A / r * (1 + (KAPPA + 1) * c) - 2 * A**3 / r**3 * c
    )
    around = f * (-2 * r / A - 2 * A / r * (KAPPA - 1) - 2 * A**3 / r**3) * s
    return out, around


def motion(points: Floats, angle: float = 0.0) -> Floats:
    """(n, 3) displacement; plane stress thins the plate, u_z = -nu (xx + yy) z / E."""
    r, theta = np.hypot(points[:, 0], points[:, 1]), np.arctan2(points[:, 1], points[:, 0])
    out, around = polar_motion(r, theta, angle, np.cos, np.sin)
    c, s = np.cos(theta), np.sin(theta)
    thin = -POISSON / YOUNG * np.trace(tension(points, angle), axis1=1, axis2=2) * points[:, 2]
    return np.stack([out * c - around * s, out * s + around * c, thin], axis=1)


def turn_about_z(points: Floats, angle: float = 0.0) -> Floats:
    """(n,) half the curl of the in-plane displacement, differentiated by hand.

    r u_theta contains -2 r^2/A - 2 A (kappa - 1) - 2 A^3/r^2, whose r-derivative is
    -4 r/A + 4 A^3/r^3; the theta-derivative of u_r is -2 sin(2 theta) times its cosine terms.
    """
    r, theta = np.hypot(points[:, 0], points[:, 1]), np.arctan2(points[:, 1], points[:, 0])
    s, f = np.sin(2 * (theta - angle)), S * A / (8 * G)
    first = f * (-4 * r / A + 4 * A**3 / r**3) * s
    second = -2 * f * (2 * r / A + 2 * A / r * (KAPPA + 1) - 2 * A**3 / r**3) * s
    return 0.5 / r * (first - second)


def quarter(solid: bool = True):
    """Nodes and cells of the quarter ring x, y >= 0: 20-node hexahedra, or flat 4-node ones."""
    if solid:
        mesh = quadratic(block(3, 6, 2)).mapped(
            lambda u, v, w: (
                (A + 3 * u**1.5) * np.cos(np.pi / 2 * v),
                (A + 3 * u**1.5) * np.sin(np.pi / 2 * v),
                0.4 * w,
            )
        )
        return mesh.points, {25: mesh.cells}
    grid, cells = quads(6, 12)
    r, theta = A + 3 * grid[:, 0], np.pi / 2 * grid[:, 1]
    return np.stack([r * np.cos(theta), r * np.sin(theta), 0 * r], axis=1), {9: cells}


def centres_of(points: Floats, cells) -> Floats:
    (nodes,) = cells.values()
    return points[nodes].mean(axis=1)


def test_the_displacement_belongs_to_the_stress():
    """The oracle itself: Hooke's law turns Sadd's displacement into Kirsch's stress, exactly."""
    r, t = sympy.symbols("r theta", positive=True)
    out, around = polar_motion(r, t, 0, sympy.cos, sympy.sin)
    e_rr = sympy.diff(out, r)
    e_tt = (sympy.diff(around, t) + out) / r
    g_rt = sympy.diff(out, t) / r + sympy.diff(around, r) - around / r
    turn = (sympy.diff(r * around, r) - sympy.diff(out, t)) / (2 * r)
    evaluate = sympy.lambdify(
        (r, t),
        [
            YOUNG / (1 - POISSON**2) * (e_rr + POISSON * e_tt),
            YOUNG / (1 - POISSON**2) * (e_tt + POISSON * e_rr),
            G * g_rt,
            turn,
        ],
    )
    points, _ = quarter(solid=False)
    radius, theta = np.hypot(points[:, 0], points[:, 1]), np.arctan2(points[:, 1], points[:, 0])
    rr, tt, rt, half_curl = evaluate(radius, theta)
    assert miss(in_plane(rr, tt, rt, theta), tension(points)) < ROUND_OFF
    assert miss(half_curl, turn_about_z(points)) < ROUND_OFF


def test_shear_is_half_the_tension_at_an_angle():
    """The oracle itself: a tension at an angle is a biaxial tension plus a shear."""
    points, _ = quarter(solid=False)
    beta = np.radians(28.0)
    parts = (
        np.cos(beta) ** 2 * tension(points)
        + np.sin(beta) ** 2 * tension(points, np.pi / 2)
        + shear(points, S * np.sin(beta) * np.cos(beta))
    )
    assert miss(parts, tension(points, beta)) < ROUND_OFF


def solid_model(tmp_path, Q, t):
    points, cells = quarter()
    middle = centres_of(points, cells)
    placed = points @ Q.T + t
    model = Model(tmp_path, placed, cells)
    model.field("stress", "symmetric tensor", components=SIX, on="points", seam="recovered")
    model.field("cell_stress", "symmetric tensor", components=SIX)
    model.field("displacement", "polar vector")
    model.field("rotation", "axial vector")
    model.table(
        mirror=[
            {"name": "across", "normal": Q[:, 0], "point": t + Q @ [0, 1.7, 0.3]},
            {"name": "along", "normal": -Q[:, 1], "point": t + Q @ [-2.2, 0, 5.0]},
        ]
    )
    zero = np.zeros(len(points))

    def values(stress, u, w):
        return {
            "points": {
                "stress": stored(turned(Q, stress(points))),
                "displacement": turned(Q, u(points)),
                "rotation": turned(Q, np.stack([zero, zero, w(points)], axis=1)),
            },
            "cells": {"cell_stress": stored(turned(Q, stress(middle)))},
        }

    return model, values


def whole_plate(grid, Q, t, angle=0.0):
    """Misses of the four fields against the analytic ones at the nodes of the whole body."""
    points, middle = (grid.points - t) @ Q, (centres(grid) - t) @ Q
    zero = np.zeros(len(points))
    spin = np.stack([zero, zero, turn_about_z(points, angle)], axis=1)
    return {
        "stress": miss(grid["stress"], stored(turned(Q, tension(points, angle)))),
        "cell_stress": miss(grid["cell_stress"], stored(turned(Q, tension(middle, angle)))),
        "displacement": miss(grid["displacement"], turned(Q, motion(points, angle))),
        "rotation": miss(grid["rotation"], turned(Q, spin)),
    }


def even(field, beta):
    """Tensions along x and y that make the symmetric part of a tension at the angle beta."""
    return lambda points: (
        np.cos(beta) ** 2 * field(points, 0.0) + np.sin(beta) ** 2 * field(points, np.pi / 2)
    )


def odd(field):
    """A unit remote shear: a tension at 45 degrees less one at -45, over S."""
    return lambda points: (field(points, np.pi / 4) - field(points, -np.pi / 4)) / S


PLACED = pytest.mark.parametrize(
    ("Q", "t"), [(np.eye(3), np.zeros(3)), (SKEW, SHIFT)], ids=["upright", "skew"]
)


@PLACED
def test_tension_along_a_plane(tmp_path, Q, t):
    """Kirsch: all fields on the whole plate at 1e-12; 3S and -S at the hole."""
    model, values = solid_model(tmp_path, Q, t)
    model.values(**values(tension, motion, turn_about_z))
    whole = model.expand()
    for name, error in whole_plate(whole, Q, t).items():
        assert error < ROUND_OFF, name
    assert whole.n_cells == 4 * 36
    assert no_twins(whole, 1e-3)

    points = (whole.points - t) @ Q
    stress = turned(Q.T, tensor(whole["stress"]))
    at_hole = np.abs(np.hypot(points[:, 0], points[:, 1]) - A) < 1e-9
    top = at_hole & (np.abs(points[:, 0]) < 1e-9)
    side = at_hole & (np.abs(points[:, 1]) < 1e-9)
    assert top.sum() == side.sum() == 2 * 5  # above and below; five levels through the plate
    assert miss(stress[top, 0, 0], np.full(10, 3 * S)) < ROUND_OFF
    assert miss(stress[side, 1, 1], np.full(10, -S)) < ROUND_OFF


@PLACED
@pytest.mark.parametrize("degrees", [28.0, 50.0, -70.0])
def test_tension_at_an_angle_is_a_sum(tmp_path, Q, t, degrees):
    """Kirsch turned by an angle from a symmetric and an antisymmetric case, at 1e-12."""
    beta = np.radians(degrees)
    model, values = solid_model(tmp_path, Q, t)

    model.values(
        "even", **values(even(tension, beta), even(motion, beta), even(turn_about_z, beta))
    )
    model.values("odd", **values(lambda x: shear(x, 1.0), odd(motion), odd(turn_about_z)))
    both = {"across": "antisymmetric", "along": "antisymmetric"}
    model.table(
        case=[{"name": "even"}, {"name": "odd", "load": both}],
        sum=[{"name": "tilted", "terms": {"even": 1.0, "odd": S * np.sin(beta) * np.cos(beta)}}],
    )
    whole = model.expand("tilted")
    for name, error in whole_plate(whole, Q, t, beta).items():
        assert error < ROUND_OFF, name


@pytest.mark.parametrize(("order", "shape"), [("xx yy xy", 3), ("yy xx xy", 3), ("xx yy zz xy", 4)])
def test_plane_storage(tmp_path, order, shape):
    """Kirsch in a plane model: 3 and 4 stored components, 2-component vectors, rotation rz."""
    beta = np.radians(28.0)
    points, cells = quarter(solid=False)
    middle = centres_of(points, cells)
    model = Model(tmp_path, points, cells)
    model.field("stress", "symmetric tensor", components=order, on="points", seam="recovered")
    model.field("cell_stress", "symmetric tensor", components=order)
    model.field("displacement", "polar vector")
    model.field("rz", "axial vector", components="z")
    model.field("u", "polar vector", arrays=["ux", "uy"])
    model.table(
        mirror=[{"name": "across", "normal": "x"}, {"name": "along", "normal": "y"}],
        case=[
            {"name": "pull"},
            {"name": "slide", "load": {"across": "antisymmetric", "along": "antisymmetric"}},
        ],
        sum=[{"name": "tilted", "terms": {"pull": 1.0, "slide": S * np.sin(beta) * np.cos(beta)}}],
    )
    for name, part in {"pull": lambda field: even(field, beta), "slide": odd}.items():
        u = part(motion)(points)
        model.values(
            name,
            points={
                "stress": stored(part(tension)(points), order),
                "displacement": u[:, :2].copy(),
                "rz": part(turn_about_z)(points),
                "ux": u[:, 0].copy(),
                "uy": u[:, 1].copy(),
            },
            cells={"cell_stress": stored(part(tension)(middle), order)},
        )
    whole = model.expand("tilted")
    x = whole.points
    assert whole["stress"].shape == (len(x), shape)
    assert miss(whole["stress"], stored(tension(x, beta), order)) < ROUND_OFF
    assert miss(whole["cell_stress"], stored(tension(centres(whole), beta), order)) < ROUND_OFF
    assert miss(whole["displacement"], motion(x, beta)[:, :2]) < ROUND_OFF
    assert miss(whole["rz"].reshape(-1), turn_about_z(x, beta)) < ROUND_OFF
    assert miss(whole["u"], motion(x, beta)[:, :2]) < ROUND_OFF
