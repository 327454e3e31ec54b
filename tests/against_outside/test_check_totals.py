"""`seamfold check`: totals, balance, sections and inertia against hand statics and tables.

Sources: a beam on two supports with P at the middle of its span L has reactions P/2, shear P/2 and
moment P a/2 at the distance a from a support (Roark's Formulas for Stress and Strain, table of
beams); rectangular sections sigma = M z/I, tau = V (h^2/4 - z^2)/(2 I) (Roark; Timoshenko and
Goodier, section 21); inertia of solids (tables of any text on mechanics, common practice).
"""

from __future__ import annotations

import numpy as np
import pytest

from demo_cases.solver import (
    CutPlane,
    Fixed,
    Mesh,
    block,
    on_plane,
    point_load,
    quadratic,
    tetrahedra,
)
from tests.against_outside.bodies import SIX, SKEW, Floats, Model, mirrors, miss
from tests.against_outside.checked import Found, Part, X, Y, Z, found_in, sides

SPAN, WIDE, HIGH, P = 6.0, 0.5, 0.8, 40.0
FORCES = ("displacement", "applied_force", "reaction")


def half_beam(share: float, listed: float | None = None, count: int = 8) -> tuple[Part, Floats]:
    """Half a beam, x from 0 to L/2, on a line support at its end, with a load in its plane.

    Parameters
    ----------
    share : of P, given to the modelled half. listed : what the file lists, if something else.
    """
    mesh = quadratic(block(count, 2, 2)).mapped(
        lambda u, v, w: (u * SPAN / 2, (v - 0.5) * WIDE, (w - 0.5) * HIGH)
    )
    x, y, z = mesh.points.T
    line = np.flatnonzero((x > SPAN / 2 - 1e-9) & (z < -HIGH / 2 + 1e-9))
    top = np.flatnonzero((x < 1e-9) & (z > HIGH / 2 - 1e-9))
    pulled = point_load(mesh, top, [0, 0, -P / len(top)])
    part = Part(mesh, share * pulled, [Fixed(line, Z), Fixed(line[np.abs(y[line]) < 1e-9], Y)],
                [CutPlane(X)])  # fmt: skip
    return part, (share if listed is None else listed) * pulled


def beam(tmp_path, share: float, listed: float | None = None, **tables: object) -> Found:
    part, force = half_beam(share, listed)
    model = part.model(tmp_path, FORCES, applied_force=force).table(**tables)
    return found_in(model.write())


def test_half_beam(tmp_path):
    """P/2 on the modelled half is P on the beam; each support carries P/2."""
    found = beam(tmp_path, 0.5, expect={"force": [0, 0, -P], "moment": [0, 0, 0]})
    assert found.verdict == "passed", found.all_findings
    (case,) = found.facts["audit"]["cases"]
    totals = {t["role"]: t for t in case["totals"]}
    assert miss(totals["applied force"]["whole"]["force"], [0, 0, -P]) < 1e-10
    assert miss(totals["applied force"]["sector"]["force"], [0, 0, -P / 2]) < 1e-10
    (support,) = totals["reaction"]["supports"]
    assert miss(support["sector"]["force"], [0, 0, P / 2]) < 1e-8
    assert miss(support["whole"]["force"], [0, 0, P]) < 1e-8
    # About the middle the support at L/2 turns the half by -P/2 L/2 about y.
    assert miss(support["sector"]["moment"], [0, -P / 2 * SPAN / 2, 0]) < 1e-8
    assert case["balance"]["relative"] < 1e-8


def test_load_in_the_plane_not_halved(tmp_path):
    """The whole P on the half is 2 P on the beam: told from what is expected, with the reason."""
    found = beam(tmp_path, 1.0, expect={"force": [0, 0, -P]})
    assert found.verdict == "failed"
    words = found.says("expected", weight="fails")
    assert "2 times the force expected" in words
    assert "in full, and not by half" in words
    assert (
        found.facts["audit"]["cases"][0]["balance"]["relative"] < 1e-8
    )  # what was solved balances


def test_load_halved_twice(tmp_path):
    found = beam(tmp_path, 0.25, expect={"force": [0, 0, -P]})
    assert found.verdict == "failed"
    assert "0.5 times" in found.says("expected", "halved twice", weight="fails")


def test_expected_from_reactions_alone(tmp_path):
    """Without loads in the file minus the reactions stand for them."""
    part, _ = half_beam(1.0)
    model = part.model(tmp_path, ("displacement", "reaction"))
    found = found_in(model.table(expect={"force": [0, 0, -P]}).write())
    assert "2 times the force expected" in found.says("expected", weight="fails")


def test_listed_load_not_the_one_solved(tmp_path):
    """The file lists P in the plane, P/2 was solved: the balance shows 2 and whence it comes."""
    found = beam(tmp_path, 0.5, listed=1.0)
    assert found.verdict == "failed"
    (case,) = found.facts["audit"]["cases"]
    assert case["balance"]["loads_over_reactions"] == pytest.approx(2.0, rel=1e-6)
    assert case["balance"]["relative"] == pytest.approx(0.5, rel=1e-6)  # P left over of 2 P
    words = found.says("balance", weight="fails")
    assert "2 times the reactions" in words
    assert "halved there it balances" in words


def test_missing_loads_can_be_admitted(tmp_path):
    found = beam(tmp_path, 0.5, listed=1.0, expect={"balance": False})
    assert found.verdict == "passed", found.all_findings
    assert found.says("balance", weight="note")


# --- forces across sections -----------------------------------------------------------------------


def stressed(tmp_path, stress, mesh: Mesh, load: str, sections: list[dict]) -> Found:
    """A half beam with a formula's stress at its nodes."""
    model = Model(tmp_path, mesh.points, {mesh.shape.vtk_type: mesh.cells})
    model.field("stress", "symmetric tensor", components=SIX, seam="recovered")
    model.values(points={"stress": stress(*mesh.points.T)})
    model.table(mirror=mirrors(("mid", "x", [0, 0, 0], load)), section=sections)
    return found_in(model.write())


def prism(layers: int) -> Mesh:
    return block(4, 2, layers).mapped(
        lambda u, v, w: (u * SPAN / 2, (v - 0.5) * WIDE, (w - 0.5) * HIGH)
    )


INERTIA = WIDE * HIGH**3 / 12
# A plane may be taken aside by 1e-10 of the body, so that it does not run through nodes; a moment
# that varies along the beam by all of itself within half of it then differs by a few times that.
NUDGE = 1e-9


def columns(xx: Floats, zx: Floats) -> Floats:
    zero = 0 * xx
    return np.stack([xx, zero, zero, zero, zero, zx], axis=1)


def test_section_under_tension_and_bending(tmp_path):
    """N and M of an exact field, on the modelled side and on the mirrored one, whose normals both
    point along x."""
    N, M = 30.0, 7.0
    places = [0.37 * SPAN / 2, -0.37 * SPAN / 2]
    found = stressed(
        tmp_path, lambda x, y, z: columns(N / (WIDE * HIGH) + M * z / INERTIA + 0 * x, 0 * x),
        prism(4), "symmetric", [{"normal": "x", "point": [p, 0, 0]} for p in places],
    )  # fmt: skip
    for section in found.facts["audit"]["sections"]:
        assert section["area"] == pytest.approx(WIDE * HIGH, rel=1e-12)
        assert miss(section["force"], [N, 0, 0]) < 1e-12
        assert miss(section["moment"], [0, M, 0]) < 1e-12  # z sigma_xx turns about +y


@pytest.mark.parametrize("layers", [2, 4, 9])
def test_section_of_a_beam_with_a_central_load(tmp_path, layers):
    """V and M of the table on both sides; linear interpolation of the parabola of shear over n
    layers loses 1/n^2 of it (trapezoidal rule)."""

    def table(x, y, z):
        s = np.sign(x)  # the half 0 <= x <= L/2 only
        moment = P / 2 * (SPAN / 2 - np.abs(x))
        # Sagging: tension below. Equilibrium dM/dx = V with V the force of the part at larger x.
        shear = (HIGH**2 / 4 - z**2) / (2 * INERTIA) * P / 2
        return columns(-moment * z / INERTIA, np.where(s >= 0, shear, -shear))

    a = 0.25 * SPAN
    found = stressed(tmp_path, table, prism(layers), "symmetric",
                     [{"normal": "x", "point": [p, 0, 0]} for p in (a, -a)])  # fmt: skip
    right, left = found.facts["audit"]["sections"]
    kept = 1 - 1 / layers**2
    # The part at larger x pushes up with P/2 right of the load, and down left of it.
    assert miss(right["force"], [0, 0, P / 2 * kept]) < 1e-12
    assert miss(left["force"], [0, 0, -P / 2 * kept]) < 1e-12
    for section in (right, left):
        assert miss(section["moment"], [0, -P / 2 * (SPAN / 2 - a), 0]) < NUDGE


def test_section_through_an_antisymmetric_half(tmp_path):
    """Bending that is odd in x: the moment changes its sign, the shear does not."""
    k = 2.0

    def odd(x, y, z):
        return columns(k * x * z / INERTIA, -k * (HIGH**2 / 4 - z**2) / (2 * INERTIA))

    found = stressed(tmp_path, odd, prism(8), "antisymmetric",
                     [{"normal": "x", "point": [p, 0, 0]} for p in (1.0, -1.0)])  # fmt: skip
    right, left = found.facts["audit"]["sections"]
    assert miss(right["moment"], [0, k, 0]) < NUDGE
    assert miss(left["moment"], [0, -k, 0]) < NUDGE
    for section in (right, left):
        assert miss(section["force"], [0, 0, -k * (1 - 1 / 64)]) < 1e-12


def test_section_of_a_solved_beam(tmp_path):
    """A cell's stress at its centre stands for the cell: the moment of the table at the centres,
    less the 1/n^2 that n layers lose of it; to the per cent of a beam under line loads."""
    part, _ = half_beam(0.5, count=12)
    layers, length = 2, SPAN / 2 / 12
    model = part.model(tmp_path, ("cell_stress",)).table(
        section={"normal": "x", "point": [6.04 * length, 0, 0]}
    )
    (section,) = found_in(model.write()).facts["audit"]["sections"]
    moment = P / 2 * (SPAN / 2 - 6.5 * length)
    assert section["moment"][1] == pytest.approx(-moment * (1 - 1 / layers**2), rel=0.01)


# --- inertia of solids ----------------------------------------------------------------------------


def massive(tmp_path, mesh: Mesh, density: float, **tables: object) -> Found:
    model = Model(tmp_path, mesh.points, {mesh.shape.vtk_type: mesh.cells})
    model.field("density", "scalar", on="cells", follows="body")
    model.values(cells={"density": np.full(len(mesh.cells), density)})
    return found_in(model.table(**tables).write())


@pytest.mark.parametrize("make", [lambda m: m, tetrahedra, quadratic], ids=["8", "4", "20"])
def test_inertia_of_a_cuboid(tmp_path, make):
    """m (b^2 + c^2)/12, from an eighth in a skew system."""
    a, b, c = 1.8, 1.4, 2.2
    mesh = make(block(2, 3, 2)).mapped(lambda u, v, w: (u * a / 2, v * b / 2, w * c / 2))
    mesh = mesh.mapped(lambda *x: (np.stack(x, axis=1) @ SKEW.T).T)
    planes = [(f"p{k}", SKEW[:, k], [0, 0, 0]) for k in range(3)]
    mass = 7.8 * a * b * c
    found = massive(tmp_path, mesh, 7.8, mirror=mirrors(*planes), expect={"mass": mass})
    assert found.verdict == "doubtful", "nothing was compared: the model has no results"
    whole = found.facts["audit"]["mass"]["whole"]
    table = mass / 12 * np.diag([b**2 + c**2, c**2 + a**2, a**2 + b**2])
    assert whole["mass"] == pytest.approx(mass, rel=1e-12)
    assert miss(whole["centre"], np.zeros(3), 1.0) < 1e-12
    assert miss(whole["inertia"], SKEW @ table @ SKEW.T) < 1e-12


@pytest.mark.parametrize("halves", [False, True], ids=["ring", "half of its height"])
def test_inertia_of_a_hollow_cylinder(tmp_path, halves):
    """m (R^2 + r^2)/2 about its axis, m (3 (R^2 + r^2) + H^2)/12 across.

    A parabola over an arc of angle 2 h misses h^4/30 of the area: 1e-5 for h = pi/24.
    """
    r, R, H, N = 0.7, 1.1, 0.9, 24
    z = (lambda w: w * H / 2) if halves else (lambda w: (w - 0.5) * H)
    mesh = quadratic(block(2, 1, 2)).mapped(
        lambda u, v, w: (
            (r + u * (R - r)) * np.cos(2 * np.pi / N * v),
            (r + u * (R - r)) * np.sin(2 * np.pi / N * v),
            z(w),
        )
    )
    planes = {"mirror": mirrors(("mid", "z", [0, 0, 0]))} if halves else {}
    found = massive(tmp_path, mesh, 2.7, cyclic={"sectors": N}, **planes)
    assert found.verdict == "doubtful", "nothing was compared: the model has no results"
    whole = found.facts["audit"]["mass"]["whole"]
    mass = 2.7 * np.pi * (R**2 - r**2) * H
    across = mass * (3 * (R**2 + r**2) + H**2) / 12
    assert whole["mass"] == pytest.approx(mass, rel=2e-5)
    assert miss(whole["inertia"], np.diag([across, across, mass * (R**2 + r**2) / 2])) < 4e-5


def test_mass_in_a_cut_plane_given_in_full(tmp_path):
    """A rib in the plane, modelled in full, is there twice: more mass than expected."""
    mesh = block(2, 2, 2)
    found = massive(tmp_path, mesh, 1.0, mirror=mirrors(("mid", "x", [0, 0, 0])),
                    expect={"mass": 1.0})  # fmt: skip
    assert found.verdict == "failed"
    assert "2 times" in found.says("mass", weight="fails")
    assert on_plane(mesh, X).any()
    assert len(sides(mesh, X)) == 9
