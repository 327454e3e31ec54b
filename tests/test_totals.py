"""Resultants, what vanishes by symmetry, supports, balance and expectations."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from meshes import box, case_of, ring, somewhere
from scipy.spatial.transform import Rotation

import expander
from expander.audit.equilibrium import against_expected, balance, in_plane_share
from expander.audit.totals import (
    Resultant,
    carried,
    of_sector,
    per_copy,
    scale_of,
    support_sets,
    vanishing,
    whole,
)
from expander.behaviours import Behaviour, factors
from expander.groups import CutPlane, CyclicAxis, Group, make_group
from expander.placements import Placement, unit
from expander.seams import find_seams

ORIGIN = np.zeros(3)
EXACT = 1e-12


def planes(*normals: object, point: np.ndarray = ORIGIN) -> Group:
    return make_group([CutPlane(f"p{k}", unit(n), point) for k, n in enumerate(normals)], None)


def cyclic(sectors: int, axis: object = (0, 0, 1), point: np.ndarray = ORIGIN) -> Group:
    return make_group([], CyclicAxis(sectors, unit(axis), point))


def waves(sectors: int, h: int) -> np.ndarray:
    """chi of h nodal diameters on sector k: exp(i h k alpha)."""
    return np.exp(2j * np.pi * h * np.arange(sectors) / sectors)


def only(word: str, *names: str) -> Behaviour:
    return Behaviour(dict.fromkeys(names, word))


def close(found: object, expected: object, size: float = 1.0) -> bool:
    return bool(np.abs(np.asarray(found) - np.asarray(expected)).max() <= EXACT * size)


# --- statics by hand ------------------------------------------------------------------------------


def test_half_beam_with_a_load_in_the_middle() -> None:
    """Simply supported beam, span L, load P at the middle: R = P/2 at each end (Roark's Formulas
    for Stress and Strain, table of straight beams, from memory). The half model carries P/2."""
    P, L, height = 12.0, 4.0, 0.3
    points = np.array([[0.0, 0.0, height], [L / 2, 0.0, 0.0]])  # middle, end
    load = np.array([[0.0, 0.0, -P / 2], [0.0, 0.0, 0.0]])
    reaction = np.array([[0.0, 0.0, 0.0], [0.0, 0.0, P / 2]])
    group, chi = planes([1, 0, 0]), np.ones(2)
    about = np.array([-L / 2, 0.7, 0.0])  # beside the other end
    applied = whole(of_sector(points, load, None, about), group, chi)
    back = whole(of_sector(points, reaction, None, about), group, chi)
    assert close(applied.force, [0, 0, -P])
    assert close(applied.moment, [0.7 * P, P * L / 2, 0.0], P * L)  # (x - p) x F by hand
    assert close(back.force, [0, 0, P])
    each = per_copy(of_sector(points, reaction, None, about), group, chi)
    assert [r.force[2] for r in each] == [P / 2, P / 2]
    assert close(each[0].moment, [-0.7 * P / 2, -L * P / 2, 0.0], P * L)
    assert close(each[1].moment, [-0.7 * P / 2, 0.0, 0.0], P * L)
    found = balance(applied, back, P, P * L)
    assert found.relative <= EXACT
    assert found.ratio == pytest.approx(1.0, rel=1e-12)
    # One copy alone does not balance: the other half bends it, P/2 times L/2 at the cut.
    alone = balance(of_sector(points, load, None, about), each[0], P, P * L)
    assert close(alone.force, np.zeros(3), P)
    assert close(alone.moment, [0.0, -P / 2 * L / 2, 0.0], P * L)


def test_antisymmetric_load_makes_a_couple() -> None:
    """P up at x = a and down at x = -a: no force, the couple -2 a P about y about any point."""
    group = planes([1, 0, 0])
    chi = factors(group, only("antisymmetric", "p0"))
    for about in ([0.0, 0.0, 0.0], [3.0, -8.0, 5.0]):
        total = whole(
            of_sector(np.array([[2.0, 0, 0]]), np.array([[0, 0, 5.0]]), None, about), group, chi
        )
        assert close(total.force, np.zeros(3))
        assert close(total.moment, [0.0, -20.0, 0.0], 100)


def test_nodal_moments_are_axial() -> None:
    """A torque about the normal of a symmetric plane doubles, about a line in it it cancels."""
    group, at = planes([1, 0, 0]), np.array([[2.0, 0, 0]])
    none = np.zeros((1, 3))
    total = whole(of_sector(at, none, np.array([[1.0, 2.0, 3.0]]), [0, 0, 0]), group, np.ones(2))
    assert close(total.moment, [2.0, 0.0, 0.0])
    odd = whole(
        of_sector(at, none, np.array([[1.0, 2.0, 3.0]]), [0, 0, 0]), group, np.array([1, -1])
    )
    assert close(odd.moment, [0.0, 4.0, 6.0])


@pytest.mark.parametrize("sectors", [2, 3, 7, 12])
def test_ring_with_radial_and_hoop_forces(sectors: int) -> None:
    """Radial forces cancel; hoop forces F at radius R make the torque N R F about the axis."""
    group, point = cyclic(sectors), np.array([[1.5, 0.0, 0.4]])
    radial = whole(of_sector(point, np.array([[6.0, 0, 0]]), None, [0, 0, 0]), group,
                   np.ones(sectors))  # fmt: skip
    hoop = whole(of_sector(point, np.array([[0, 6.0, 0]]), None, [0.3, 0.2, 9.0]), group,
                 np.ones(sectors))  # fmt: skip
    assert close(radial.force, np.zeros(3), 6 * sectors)
    assert close(radial.moment, np.zeros(3), 6 * sectors)
    assert close(hoop.force, np.zeros(3), 6 * sectors)
    assert close(hoop.moment, [0, 0, sectors * 1.5 * 6.0], 100 * sectors)
    words = vanishing(group, np.ones(sectors), [0, 0, 0]).words
    assert words == "force along x and y, moment about x and y vanish by symmetry"


def test_one_wave_leaves_a_turning_side_force() -> None:
    """h = 1: a radial amplitude F on each of N sectors makes N F / 2 (1, +-i, 0)."""
    N = 8
    total = whole(
        of_sector(np.array([[1.5, 0, 0]]), np.array([[6.0, 0, 0]]), None, [0, 0, 0]),
        cyclic(N), waves(N, 1),
    )  # fmt: skip
    assert close(total.force, [N * 6 / 2, 1j * N * 6 / 2, 0], 6 * N)
    found = vanishing(cyclic(N), waves(N, 1), [0, 0, 0])
    assert found.rank == 2
    assert found.words == "force along z, moment about z vanish by symmetry"


# --- what vanishes --------------------------------------------------------------------------------


def test_rank_is_the_number_of_rigid_motions() -> None:
    """A force and moment are free exactly where a rigid motion is: section 3 of the design, and
    common practice: one plane 3, h = 0 two, h = 1 two, N = 2 with h = 1 four, others none."""
    for parity in (1.0, -1.0):
        assert vanishing(planes([1, 2, 2]), np.array([1.0, parity]), ORIGIN).rank == 3
    assert vanishing(cyclic(5), np.ones(5), ORIGIN).rank == 2
    assert vanishing(cyclic(5), waves(5, 1), ORIGIN).rank == 2
    assert vanishing(cyclic(5), waves(5, 2), ORIGIN).rank == 0
    assert vanishing(cyclic(2), np.array([1.0, -1.0]), ORIGIN).rank == 4
    assert vanishing(planes([1, 0, 0], [0, 1, 0], [0, 0, 1]), np.ones(8), ORIGIN).rank == 0


@pytest.mark.parametrize(
    ("group", "chi", "words"),
    [
        (planes([1, 0, 0]), [1, 1], "force along x, moment about y and z vanish by symmetry"),
        (planes([1, 0, 0]), [1, -1], "force along y and z, moment about x vanish by symmetry"),
        (planes([0, 3, 4]), [1, -1],
         "force along every direction normal to (0, 0.6, 0.8), moment about (0, 0.6, 0.8) vanish "
         "by symmetry"),
        (cyclic(2), [1, -1], "force along z, moment about z vanish by symmetry"),
        (planes([1, 0, 0], [0, 1, 0], [0, 0, 1]), [1] * 8,
         "every force and moment vanishes by symmetry"),
        (planes([1, 0, 0], [0, 1, 0], [0, 0, 1]), "odd",
         "every force and moment vanishes by symmetry"),
        (planes([1, 0, 0], [0, 1, 0]), [1] * 4,
         "force along x and y, every moment vanish by symmetry"),
    ],
)  # fmt: skip
def test_words(group: Group, chi: object, words: str) -> None:
    if chi == "odd":
        chi = factors(group, only("antisymmetric", "p0", "p1", "p2"))
    assert vanishing(group, np.array(chi, dtype=float), ORIGIN).words == words


@given(st.integers(0, 10**6), st.sampled_from(["mirror", "two", "cyclic", "half", "twist"]))
def test_the_whole_is_what_the_projector_leaves(seed: int, kind: str) -> None:
    """Anywhere in space: whole = |G| P sector about a fixed point, and P is a projector."""
    rng = np.random.default_rng(seed)
    R, t = somewhere(seed)
    if kind == "cyclic":
        group, chi = cyclic(7, R[:, 2], t), waves(7, int(rng.integers(7)))
    elif kind in ("half", "twist"):
        plane = R[:, 0] if kind == "half" else R[:, 2]  # through the axis, or normal to it
        group = make_group([CutPlane("p0", plane, t)], CyclicAxis(6, R[:, 2], t))
        chi = factors(group, only("antisymmetric", "p0"))
    else:
        group = planes(*R.T[: 1 if kind == "mirror" else 2], point=t)
        names = [p.name for p in group.planes]
        chi = factors(group, only(str(rng.choice(["symmetric", "antisymmetric"])), *names))
    points, forces, moments = rng.normal(size=(3, 20, 3))
    free = vanishing(group, chi, t + R[:, 2])
    sector = of_sector(points, forces, moments, free.about)
    total = whole(sector, group, chi)
    six = np.concatenate([sector.force, sector.moment])
    expected = len(group) * free.projector @ six
    size = len(group) * 100
    assert close(np.concatenate([total.force, total.moment]), expected, size)
    assert close(free.projector @ free.projector, free.projector)
    for placement in group.placements:
        assert close(placement.apply(free.about[None])[0], free.about, 1000)
    # The point about which moments are summed does not matter.
    other = rng.normal(size=3)
    moved = whole(of_sector(points, forces, moments, other), group, chi)
    assert close(moved.at(free.about).moment, total.moment, 10 * size)


@given(st.integers(0, 10**6))
def test_carried_is_the_resultant_of_carried_forces(seed: int) -> None:
    """Against the plain sum over turned and mirrored nodes, by scipy's rotations."""
    rng = np.random.default_rng(seed)
    R = Rotation.random(rng=rng).as_matrix() @ np.diag([1, 1, rng.choice([-1.0, 1.0])])
    t = rng.normal(size=3)
    points, forces, about = rng.normal(size=(9, 3)), rng.normal(size=(9, 3)), rng.normal(size=3)
    chi = complex(*rng.normal(size=2))
    found = carried(of_sector(points, forces, None, about), Placement(R, t), chi)
    images = chi * forces @ R.T
    assert close(found.force, images.sum(axis=0), 100)
    assert close(found.moment, np.cross(points @ R.T + t - about, images).sum(axis=0), 1000)


# --- against the expanded body --------------------------------------------------------------------

TABLES = {
    "half": ({"mirror": [{"normal": "x"}]}, box((2, 3, 2))),
    "odd quarter": (
        {"mirror": [{"normal": "x", "load": "antisymmetric"}, {"normal": "y"}]},
        box((2, 3, 2)),
    ),
    "pie": ({"cyclic": {"sectors": 5}}, ring(5, inner=0.0)),
    "alternating": ({"cyclic": {"sectors": 2, "nodal_diameters": 1}}, ring(2, lean=0.3)),
}


@pytest.mark.parametrize("name", TABLES)
def test_sums_of_the_expanded_arrays(name: str, tmp_path: Path) -> None:
    """The same totals as the sum over the nodes of the whole body, seams added there."""
    tables, sector = TABLES[name]
    rng = np.random.default_rng(4)
    force, couple = rng.normal(size=(2, len(sector.points), 3))
    fields = {
        "nodal_force": {"kind": "polar vector", "seam": "sum"},
        "nodal_moment": {"kind": "axial vector", "seam": "sum"},
    }
    case = case_of(tmp_path, sector, {**tables, "fields": fields},
                   {"nodal_force": force, "nodal_moment": couple})  # fmt: skip
    body = expander.plan(case).body
    grid = expander.expand(case)
    about = np.array([0.3, -2.0, 1.1])
    total = whole(of_sector(sector.points, force, couple, about), body.group, body.cases[0].chi)
    lever = np.cross(grid.points - about, grid["nodal_force"])
    size = np.abs(grid["nodal_force"]).sum() * 3
    assert close(total.force, grid["nodal_force"].sum(axis=0), size)
    assert close(total.moment, (lever + grid["nodal_moment"]).sum(axis=0), size)
    assert np.abs(total.force).max() + np.abs(total.moment).max() > 0.1  # not all cancelled


# --- supports, balance, expectations --------------------------------------------------------------


def test_support_sets() -> None:
    sector = box((6, 1, 1), size=(6.0, 1.0, 1.0))
    reaction = np.zeros((len(sector.points), 3))
    ends = (sector.points[:, 0] < 0.01, sector.points[:, 0] > 5.99)
    reaction[ends[0] | ends[1], 2] = 1.0
    reaction[ends[1]] *= 1e-3
    reaction[sector.points[:, 0] > 3] += 1e-12  # round-off
    found = support_sets(sector.mesh(), reaction)
    assert [s.name for s in found] == [
        "4 nodes around (0, 0.5, 0.5)",
        "4 nodes around (6, 0.5, 0.5)",
    ]
    assert [s.nodes.tolist() for s in found] == [np.flatnonzero(e).tolist() for e in ends]
    named = support_sets(sector.mesh(), reaction, {"foot": ends[1]})
    assert [s.name for s in named] == ["foot", "4 nodes around (0, 0.5, 0.5)"]
    assert support_sets(sector.mesh(), 0 * reaction) == []


def test_two_supports_that_touch_through_one_cell_are_one() -> None:
    sector = box((2, 1, 1))
    reaction = np.zeros((len(sector.points), 3))
    reaction[sector.points[:, 0] < 0.9] = 1.0
    assert len(support_sets(sector.mesh(), reaction)) == 1


def test_load_listed_in_full_is_found_in_the_plane() -> None:
    """The listed load is P in the plane, but the reactions are those of P/2 on the half."""
    sector = box((4, 1, 1), size=(4.0, 1.0, 1.0))
    group, chi = planes([1, 0, 0]), np.ones(2)
    seams = find_seams(sector.mesh(), group, None).nodes
    multiplicity = np.bincount(seams.item, minlength=len(sector.points)).clip(1)
    force = np.zeros((len(sector.points), 3))
    middle = np.flatnonzero((sector.points[:, 0] == 0) & (sector.points[:, 2] == 0))
    force[middle, 2] = -3.0
    up = Resultant(np.array([0, 0, 6.0]), np.array([3.0, 0, 0]), ORIGIN)
    found = in_plane_share(sector.points, force, multiplicity, group, chi, up)
    assert found.balances
    assert found.fraction == 1.0
    assert "halved there it balances" in found.words
    assert close(found.share.force, [0, 0, -12.0])
    total = whole(of_sector(sector.points, force, None, ORIGIN), group, chi)
    scales = [2 * s for s in scale_of(sector.points, force, None, ORIGIN)]
    assert balance(total, up, *scales).ratio == pytest.approx(2.0, rel=1e-12)
    # Given by half, it balances as it is; and elsewhere halving is no answer.
    right = in_plane_share(sector.points, force / 2, multiplicity, group, chi, up)
    assert not right.balances
    assert "as it is given" in right.words
    moved = np.roll(force, 4, axis=0)
    wrong = in_plane_share(sector.points, moved, multiplicity, group, chi, up)
    assert not wrong.balances
    assert "does not balance either" in wrong.words
    off_seam = whole(of_sector(sector.points, -moved, None, ORIGIN), group, chi)
    none = in_plane_share(sector.points, moved, multiplicity, group, chi, off_seam)
    assert (none.balances, none.fraction) == (False, 0.0)


def test_no_single_factor_no_ratio() -> None:
    a = Resultant(np.array([1.0, 0, 0]), np.array([0.0, 2.0, 0]), ORIGIN)
    b = Resultant(np.array([-1.0, 0, 0]), np.array([0.0, -4.0, 0]), ORIGIN)
    assert balance(a, b, 1.0, 1.0).ratio is None
    assert balance(a, b, 1.0, 1.0).relative == 2.0
    # Resultants about different points are brought to one.
    far = Resultant(-a.force, -a.moment, ORIGIN).at([0.0, 5.0, 5.0])
    assert balance(a, far, 1.0, 1.0).relative < EXACT
    assert balance(a, far, 1.0, 1.0).ratio == pytest.approx(1.0, rel=1e-12)


RING = make_group([], CyclicAxis(12, unit([0, 0, 1]), ORIGIN))


@pytest.mark.parametrize(
    ("factor", "group", "words"),
    [
        (2.0, planes([1, 0, 0]), "2 times the force expected: was a load in a cut plane given in "
         "full, and not by half, or was the load of the whole body given to the modelled part?"),
        (0.5, planes([1, 0, 0], [0, 1, 0]), "0.5 times the force expected: was a load in a cut "
         "plane halved twice?"),
        (12.0, RING, "12 times the force expected: was a load on the axis given in full"),
        (1 / 12, RING, "0.08333 times the force expected: was a load on the axis divided by N"),
        (8.0, planes([1, 0, 0], [0, 1, 0], [0, 0, 1]),
         "8 times the force expected: was the load of the whole body given to the modelled part?"),
        (-1.0, None, "-1 times the force expected: is it a reaction"),
        (1.37, RING, "1.37 times the force expected"),
    ],
)  # fmt: skip
def test_known_factors(factor: float, group: Group | None, words: str) -> None:
    expected = np.array([3.0, -4.0, 12.0])
    found = against_expected(factor * expected, expected, 1e-3, group)
    assert not found.ok
    assert found.ratio == pytest.approx(factor, rel=1e-12)
    assert words in found.words
    assert found.words.endswith("?") == (factor != 1.37)


def test_expected_totals() -> None:
    assert against_expected(np.array([0, 0, 5.0004]), [0, 0, 5], 1e-3).ok
    assert not against_expected(np.array([0, 0, 5.006]), [0, 0, 5], 1e-3).ok
    other = against_expected(np.array([5.0, 0, 0]), [0, 0, 5], 1e-3)
    assert other.ratio == 0.0
    assert "(5, 0, 0), expected (0, 0, 5)" in other.words
    assert against_expected(np.array([0, 0, 1e-9]), [0, 0, 0], 1e-3, scale=1.0).ok
    assert not against_expected(np.array([0, 0, 0.1]), [0, 0, 0], 1e-3, scale=1.0).ok
    assert "moment expected" in against_expected(np.ones(3), [1, 1, 1], 1e-3, name="moment").words
