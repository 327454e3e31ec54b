"""A thick-walled cylinder under pressure: one curved sector turned around is axisymmetric.

Source: Timoshenko and Goodier, Theory of Elasticity, 3rd ed., section 28 (G. Lame), with the
uniform axial strain of generalised plane strain added.

Tolerance: 1e-12 of the field's maximum; both sides evaluate the same closed formula, so only
round-off is left, with coordinates of up to four times the cylinder's radius.
"""

from __future__ import annotations

import numpy as np
import pytest

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
    polar_basis,
    stored,
    tensor,
    turned,
)

INNER, OUTER, LENGTH = 1.0, 2.0, 0.8
P_IN, P_OUT, STRAIN = 90.0, 25.0, 4e-4
YOUNG, NU = 200e3, 0.3
A = (P_IN * INNER**2 - P_OUT * OUTER**2) / (OUTER**2 - INNER**2)
B = (P_IN - P_OUT) * INNER**2 * OUTER**2 / (OUTER**2 - INNER**2)
ROUND_OFF = 1e-12


def polar_stress(r: Floats) -> Floats:
    """(n, 3, 3) stress outwards, around and along: Lame."""
    stress = np.zeros((len(r), 3, 3))
    stress[:, 0, 0] = A - B / r**2
    stress[:, 1, 1] = A + B / r**2
    stress[:, 2, 2] = 2 * NU * A + YOUNG * STRAIN
    return stress


def polar_motion(r: Floats, z: Floats) -> Floats:
    """(n, 3) displacement outwards, around and along."""
    out = (1 + NU) / YOUNG * ((1 - 2 * NU) * A * r + B / r) - NU * STRAIN * r
    return np.stack([out, 0 * r, STRAIN * z], axis=1)


def exact(points: Floats, axis: Floats, point: Floats) -> dict[str, Floats]:
    """All fields at points of the cylinder about an axis."""
    basis = polar_basis(points, axis, point)
    r = np.einsum("na,na->n", points - point, basis[:, 0])
    z = (points - point) @ axis
    stress, u = polar_stress(r), polar_motion(r, z)
    to_global = basis.swapaxes(1, 2)
    return {
        "polar_stress": stored(stress),
        "polar_displacement": u,
        "stress": stored(to_global @ stress @ basis),
        "displacement": np.einsum("nai,ni->na", to_global, u),
    }


def sector(count: int):
    """One of `count` sectors with twisted and swept faces, in its own coordinates."""
    around = 3 if count < 100 else 1
    mesh = quadratic(block(3, around, 2)).mapped(
        lambda u, v, w: (
            (INNER + u * (OUTER - INNER)) * np.cos(2 * np.pi / count * v + 0.5 * u**2 + 0.4 * w),
            (INNER + u * (OUTER - INNER)) * np.sin(2 * np.pi / count * v + 0.5 * u**2 + 0.4 * w),
            LENGTH * w,
        )
    )
    return mesh.points, {25: mesh.cells}


def test_the_oracle_is_an_elastic_field():
    """The oracle itself: pressures at both walls, Hooke's law, and equilibrium in differences."""
    r = np.array([INNER, OUTER])
    assert miss(polar_stress(r)[:, 0, 0], [-P_IN, -P_OUT]) < ROUND_OFF
    r, h = np.linspace(1.1, 1.9, 9), 1e-5
    s = polar_stress(r)
    trace = np.trace(s, axis1=1, axis2=2)
    strain = ((1 + NU) * s - NU * trace[:, None, None] * np.eye(3)) / YOUNG
    z = 0 * r
    slope = (polar_motion(r + h, z)[:, 0] - polar_motion(r - h, z)[:, 0]) / (2 * h)
    assert miss(strain[:, 0, 0], slope) < 1e-7  # central differences: error of order h**2
    assert miss(strain[:, 1, 1], polar_motion(r, z)[:, 0] / r) < ROUND_OFF
    assert miss(strain[:, 2, 2], z + STRAIN) < ROUND_OFF
    rise = (polar_stress(r + h)[:, 0, 0] - polar_stress(r - h)[:, 0, 0]) / (2 * h)
    assert miss(rise, (s[:, 1, 1] - s[:, 0, 0]) / r) < 1e-7


@pytest.mark.parametrize("count", [2, 7, 720])
@pytest.mark.parametrize(
    ("Q", "t"), [(np.eye(3), np.zeros(3)), (SKEW, SHIFT)], ids=["upright", "skew"]
)
def test_sector_turned_around(tmp_path, count, Q, t):
    """Lame: stress and displacement of the whole cylinder, in global and polar components."""
    points, cells = sector(count)
    points = points @ Q.T + t
    axis = Q[:, 2]
    at_nodes = exact(points, axis, t)
    middle = points[cells[25]].mean(axis=1)
    at_cells = exact(middle, axis, t)

    model = Model(tmp_path, points, cells)
    model.field("stress", "symmetric tensor", components=SIX, seam="recovered")
    model.field("displacement", "polar vector")
    model.field("polar_stress", "symmetric tensor", components=SIX, frame="shaft", seam="recovered")
    model.field("polar_displacement", "polar vector", frame="shaft")
    model.field("cell_stress", "symmetric tensor", components=SIX)
    model.values(points=at_nodes, cells={"cell_stress": at_cells["stress"]})
    on_axis = t + turned(Q, np.array([0.0, 0.0, -7.0]))
    model.table(
        cyclic={"sectors": count, "axis": axis, "point": on_axis},
        frames={"shaft": {"type": "cylindrical", "axis": axis, "point": on_axis}},
    )
    whole = model.expand()

    expected = exact(whole.points, axis, t)
    for name, values in expected.items():
        assert miss(whole[name], values) < ROUND_OFF, name
    assert miss(whole["cell_stress"], exact(centres(whole), axis, t)["stress"]) < ROUND_OFF
    # Constant around: the polar values of each sector's node, repeated.
    repeated = at_nodes["polar_stress"][whole["sector_point"]]
    assert miss(whole["polar_stress"], repeated) < ROUND_OFF
    assert whole.n_cells == count * len(cells[25])
    on_seam = (2 * 3 + 1) * (2 * 2 + 1) - 3 * 2  # nodes of a face of 3 x 2 quadratic cells
    assert whole.n_points == count * (len(points) - on_seam)
    assert no_twins(whole, 1e-4)


@pytest.mark.parametrize("count", [7, 720])
def test_frame_and_axis_may_differ(tmp_path, count):
    """Lame about the frame's axis z only: a cylindrical frame about x through another point.

    The frame is not the group's, so components change from sector to sector; the oracle turns
    the global stress into that frame at each node of the whole body.
    """
    points, cells = sector(count)
    axis, origin = np.array([0.0, 0.0, 1.0]), np.zeros(3)
    other, through = np.array([1.0, 0.0, 0.0]), np.array([0.0, 5.0, -4.0])

    def in_frame(x):
        basis = polar_basis(x, other, through)
        fields = exact(x, axis, origin)
        return {
            "s": stored(basis @ tensor(fields["stress"]) @ basis.swapaxes(1, 2)),
            "u": np.einsum("nia,na->ni", basis, fields["displacement"]),
        }

    model = Model(tmp_path, points, cells)
    model.field("s", "symmetric tensor", components=SIX, frame="F", seam="recovered")
    model.field("u", "polar vector", frame="F")
    model.values(points=in_frame(points))
    model.table(
        cyclic={"sectors": count, "axis": "z"},
        frames={"F": {"type": "cylindrical", "axis": "x", "point": through}},
    )
    whole = model.expand()
    expected = in_frame(whole.points)
    assert miss(whole["s"], expected["s"]) < ROUND_OFF
    assert miss(whole["u"], expected["u"]) < ROUND_OFF
