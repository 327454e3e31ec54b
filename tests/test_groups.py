"""Groups of copies and load behaviours.

Oracles: plain matrix algebra, scipy's rotations, spglib's tables of space groups, and the degrees
of the finite reflection groups, whose product is the order and whose sum less their number counts
the mirror planes (J. E. Humphreys, Reflection Groups and Coxeter Groups, 3.7 to 3.9).
"""

from __future__ import annotations

import itertools

import numpy as np
import pytest
import spglib
from hypothesis import assume, given
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from expander.behaviours import Behaviour, factors
from expander.errors import InputError, NotYetError
from expander.groups import CutPlane, CyclicAxis, Group, make_group
from expander.placements import Placement, unit

pytestmark = pytest.mark.filterwarnings("ignore::DeprecationWarning:spglib")

ORIGIN = np.zeros(3)
X, Y, Z = np.eye(3)


def plane(name: str, normal, point=ORIGIN) -> CutPlane:
    return CutPlane(name, unit(normal), np.array(point, dtype=float))


def axis(sectors: int, direction=Z, point=ORIGIN) -> CyclicAxis:
    return CyclicAxis(sectors, unit(direction), np.array(point, dtype=float))


def at_angle(degrees: float) -> np.ndarray:
    """Normal of a plane through z that the plane with normal x meets at this angle."""
    return np.array([np.cos(np.deg2rad(degrees)), np.sin(np.deg2rad(degrees)), 0.0])


def four_by_four(placement: Placement) -> np.ndarray:
    matrix = np.eye(4)
    matrix[:3, :3], matrix[:3, 3] = placement.Q, placement.t
    return matrix


def matrices(group: Group) -> np.ndarray:
    return np.stack([four_by_four(p) for p in group.placements])


def number_of(group: Group, Q: np.ndarray) -> int:
    """The copy with this matrix, by search."""
    off = [np.abs(p.Q - Q).max() for p in group.placements]
    assert sorted(off)[0] < 1e-12
    return int(np.argmin(off))


def coxeter_walls(p: int, q: int) -> list[np.ndarray]:
    """Three walls of the chamber of the group [p, q]: angles pi/p, pi/q and a right angle."""
    a = np.array([1.0, 0.0, 0.0])
    b = np.array([-np.cos(np.pi / p), np.sin(np.pi / p), 0.0])
    y = -np.cos(np.pi / q) / b[1]
    return [a, b, np.array([0.0, y, np.sqrt(1.0 - y * y)])]


# Name -> (normals, sectors, copies, mirror planes, mirror planes make every copy). Numbers of
# mirror planes: International Tables for Crystallography A, point groups and their symbols.
SETS: dict[str, tuple[list, int, int, int, bool]] = {
    "half": ([X], 0, 2, 1, True),
    "quarter": ([X, Y], 0, 4, 2, True),
    "eighth": ([X, Y, Z], 0, 8, 3, True),
    "cube chamber": ([Z, [1, -1, 0], [0, 1, -1]], 0, 48, 9, True),
    "tetrahedron chamber": (coxeter_walls(3, 3), 0, 24, 6, True),
    "icosahedron chamber": (coxeter_walls(5, 3), 0, 120, 15, True),
    "two sectors": ([], 2, 2, 0, False),
    "three sectors": ([], 3, 3, 0, False),
    "half sectors, N = 2": ([X], 2, 4, 2, True),
    "half sectors, N = 3": ([Y], 3, 6, 3, True),
    "half sectors, N = 8": ([X], 8, 16, 8, True),
    "half ring, N = 3": ([Z], 3, 6, 1, False),
    "half ring, N = 4": ([Z], 4, 8, 1, False),
    "quarter sectors, N = 5": ([X, Z], 5, 20, 6, True),
    "quarter sectors, N = 6": ([X, Z], 6, 24, 7, True),
    "wedge at 60, N = 3 twice said": ([X, at_angle(60)], 3, 6, 3, True),
} | {f"planes at 180/{m}": ([X, at_angle(180 / m)], 0, 2 * m, m, True) for m in range(2, 13)}


def made(name: str, turned: Rotation | None = None, point=ORIGIN) -> Group:
    """A group of the table, its figure turned and moved to `point`."""
    normals, sectors, *_ = SETS[name]
    R = np.eye(3) if turned is None else turned.as_matrix()
    planes = [plane(f"p{k}", R @ np.asarray(n, float), point) for k, n in enumerate(normals)]
    return make_group(planes, axis(sectors, R @ Z, point) if sectors else None)


# --- the set of copies --------------------------------------------------------------------------


@pytest.mark.parametrize("name", SETS)
def test_orders_and_mirror_planes(name: str) -> None:
    """Humphreys 3.7 to 3.9: degrees A3 2 3 4, B3 2 4 6, H3 2 6 10, I2(m) 2 m; International
    Tables A for the others."""
    group = made(name)
    _, _, copies, mirrors, reflection_group = SETS[name]
    assert len(group) == copies
    assert len(group.mirrors) == mirrors
    assert group.is_reflection_group is reflection_group
    for g, normal, level in group.mirrors:
        values, vectors = np.linalg.eigh(group.placements[g].Q)
        np.testing.assert_allclose(values, [-1, 1, 1], atol=1e-12)
        assert abs(abs(normal @ vectors[:, 0]) - 1) < 1e-12
        assert abs(level) < 1e-12


@st.composite
def anywhere(draw) -> tuple[Rotation, np.ndarray]:
    """Any orientation, any point."""
    quaternion = np.array(draw(st.tuples(*[st.floats(-1, 1)] * 4)))
    assume(np.linalg.norm(quaternion) > 0.1)
    return Rotation.from_quat(quaternion), np.array(draw(st.tuples(*[st.floats(-50, 50)] * 3)))


@given(name=st.sampled_from(sorted(SETS)), where=anywhere())
def test_laws_of_a_group(name: str, where) -> None:
    """Closure, product, inverse, identity: against 4 x 4 matrices (any textbook of algebra)."""
    turned, point = where
    group = made(name, turned, point)
    M = matrices(group)
    size = 1.0 + np.abs(point).max()
    np.testing.assert_array_equal(M[0], np.eye(4))
    assert len(group) == SETS[name][2]
    apart = np.abs(M[:, None, :3, :3] - M[None, :, :3, :3]).max(axis=(2, 3))
    assert apart[~np.eye(len(group), dtype=bool)].min() > 1e-3, "two copies are one"
    off = np.einsum("gij,hjk->ghik", M, M) - M[group.product]
    assert np.abs(off).max() < 1e-11 * size
    np.testing.assert_allclose(M[group.inverse], np.linalg.inv(M), rtol=0, atol=1e-11 * size)
    everything = np.arange(len(group))
    assert (np.sort(group.product, axis=0) == everything[:, None]).all()
    assert (np.sort(group.product, axis=1) == everything[None, :]).all()
    generators = [p.placement for p in group.planes]
    generators += [group.axis.placement] if group.axis else []
    for k, generator in enumerate(generators):
        want = M @ four_by_four(generator)
        assert np.abs(want - M[group.times[:, k]]).max() < 1e-11 * size
    # The figure's own point is the one that every copy leaves in place (N.B. off the origin).
    assert np.abs(M[:, :3, :3] @ point + M[:, :3, 3] - point).max() < 1e-11 * size


@given(name=st.sampled_from(sorted(SETS)), data=st.data())
def test_products_associate(name: str, data) -> None:
    group = made(name)
    a, b, c = (data.draw(st.integers(0, len(group) - 1)) for _ in range(3))
    times = group.product
    assert times[times[a, b], c] == times[a, times[b, c]]


# International short symbol, its axes, and how this program would be told the same group. The
# hexagonal lattice has a along x and b at 120 degrees, as usual in crystallography.
CRYSTALS = {
    "P2/m": ("cubic", [Y], 2, Y),
    "Pmm2": ("cubic", [X, Y], 0, Z),
    "Pmmm": ("cubic", [X, Y, Z], 0, Z),
    "P4": ("cubic", [], 4, Z),
    "P4/m": ("cubic", [Z], 4, Z),
    "P4mm": ("cubic", [X], 4, Z),
    "P4/mmm": ("cubic", [X, Z], 4, Z),
    "Pm-3m": ("cubic", [Z, [1, -1, 0], [0, 1, -1]], 0, Z),
    "P3": ("hexagonal", [], 3, Z),
    "P3m1": ("hexagonal", [X], 3, Z),
    "P31m": ("hexagonal", [Y], 3, Z),
    "P-6": ("hexagonal", [Z], 3, Z),
    "P6/m": ("hexagonal", [Z], 6, Z),
    "P6mm": ("hexagonal", [X], 6, Z),
    "P6/mmm": ("hexagonal", [X, Z], 6, Z),
}
LATTICES = {
    "cubic": np.eye(3),
    "hexagonal": np.array([[1.0, -0.5, 0.0], [0.0, np.sqrt(0.75), 0.0], [0.0, 0.0, 1.3]]),
}


@pytest.fixture(scope="module")
def hall_numbers() -> dict[str, int]:
    found: dict[str, int] = {}
    for hall in range(1, 531):
        found.setdefault(spglib.get_spacegroup_type(hall).international_short, hall)
    return found


@pytest.mark.parametrize("symbol", CRYSTALS)
def test_same_matrices_as_spglib(symbol: str, hall_numbers: dict[str, int]) -> None:
    """spglib's operations of the symmorphic space group, in Cartesian axes."""
    lattice, normals, sectors, direction = CRYSTALS[symbol]
    planes = [plane(f"p{k}", n) for k, n in enumerate(normals)]
    group = make_group(planes, axis(sectors, direction) if sectors else None)
    table = spglib.get_symmetry_from_database(hall_numbers[symbol])
    basis = LATTICES[lattice]
    want = np.array([basis @ W @ np.linalg.inv(basis) for W in table["rotations"]])
    assert len(group) == len(want)
    assert {number_of(group, Q) for Q in want} == set(range(len(group)))


@pytest.mark.parametrize("sectors", [2, 3, 4, 7, 720])
@pytest.mark.parametrize("direction", [X, Z, [1, 2, 3], [-1, 0.5, 0]])
def test_turns_are_those_of_scipy(sectors: int, direction) -> None:
    """scipy's Rotation, right-handed about the axis, about a point off the origin."""
    point = np.array([3.0, -2.0, 0.5])
    group = make_group([], axis(sectors, direction, point))
    assert len(group) == sectors
    x = np.random.default_rng(1).normal(size=(5, 3))
    n = np.array(direction) / np.linalg.norm(direction)
    for k, placement in enumerate(group.placements):
        R = Rotation.from_rotvec(2 * np.pi * k / sectors * n)
        np.testing.assert_allclose(placement.apply(x), R.apply(x - point) + point, atol=2e-14)
        assert placement.det == 1
        assert np.abs(placement.Q @ placement.Q.T - np.eye(3)).max() <= 1e-15
        assert group.inverse[k] == (sectors - k) % sectors
    assert group.product[sectors - 1, 1] == 0
    assert group.mirrors == ()


def test_many_half_sectors_with_a_plane_across() -> None:
    """N = 720 with a plane through the axis: 1440 copies, 720 mirror planes, all through it."""
    point = np.array([100.0, 7.0, -3.0])
    group = make_group([plane("radial", X, point)], axis(720, Z, point))
    assert len(group) == 1440
    assert len(group.mirrors) == 720
    assert group.is_reflection_group
    for _, normal, level in group.mirrors:
        assert abs(normal @ point - level) < 1e-10
        assert abs(normal[2]) == 0.0
    chi = factors(group, Behaviour({"radial": "antisymmetric"}))
    np.testing.assert_array_equal(chi, [p.det for p in group.placements])


@pytest.mark.parametrize("name", ["half", "quarter", "eighth", "cube chamber"])
def test_right_angles_are_exact(name: str) -> None:
    """Mirrors in x, y, z and quarter turns hold nothing but -1, 0 and 1: no round-off at all."""
    group = made(name)
    entries = np.stack([p.Q for p in group.placements])
    if name == "cube chamber":
        entries = np.round(entries, 15)  # the diagonal planes are given by irrational normals
    assert set(np.unique(entries)) <= {-1.0, 0.0, 1.0}
    assert not any(p.t.any() for p in group.placements)


@pytest.mark.parametrize("direction", [X, Y, Z])
def test_quarter_turns_are_exact(direction) -> None:
    group = make_group([plane("across", direction)], axis(4, direction))
    assert set(np.unique([p.Q for p in group.placements])) == {-1.0, 0.0, 1.0}


@given(where=anywhere(), x=st.tuples(*[st.floats(-30, 30)] * 3))
def test_a_mirror_halves_the_way(where, x) -> None:
    """Euclid: the plane bisects the segment from a point to its image, at a right angle."""
    turned, point = where
    n = turned.as_matrix() @ Z
    mirror = Placement.mirror(7.0 * n, point)
    x = np.array(x)
    image = mirror.apply(x[None])[0]
    assert abs(n @ ((x + image) / 2 - point)) < 1e-12 * (1 + np.abs(point).max())
    assert np.linalg.norm(np.cross(image - x, n)) < 1e-12 * (1 + np.abs([*x, *point]).max())
    assert mirror.mirrored
    found = mirror.plane()
    assert found is not None
    assert abs(abs(found[0] @ n) - 1) < 1e-12
    assert abs(found[1] - found[0] @ point) < 1e-12 * (1 + np.abs(point).max())
    assert (mirror @ mirror).turning()[1] < 1e-6


def test_what_is_no_mirror() -> None:
    glide = Placement(np.diag([1.0, 1.0, -1.0]), np.array([0.5, 0.0, 0.0]))
    assert glide.plane() is None
    assert Placement(-np.eye(3), ORIGIN).plane() is None
    assert Placement.turn(Z, 180, ORIGIN).plane() is None


@pytest.mark.parametrize("degrees", [1e-3, 30.0, 90.0, 179.999, 180.0])
@pytest.mark.parametrize("direction", [X, [1, 1, 0], [1, -2, 0.3]])
def test_axis_and_angle_come_back(degrees: float, direction) -> None:
    R = Rotation.from_rotvec(np.deg2rad(degrees) * np.array(direction) / np.linalg.norm(direction))
    found, angle = Placement(R.as_matrix(), ORIGIN).turning()
    assert angle == pytest.approx(degrees, rel=1e-6)
    again = Rotation.from_rotvec(np.deg2rad(angle) * found)
    np.testing.assert_allclose(again.as_matrix(), R.as_matrix(), atol=1e-9)


def test_copies_in_words() -> None:
    group = make_group([plane("mid", Z), plane("left", X)], axis(4))
    words = [group.words(g) for g in range(len(group))]
    assert len(set(words)) == len(group) == 16
    assert words[0] == "as modelled"
    assert words[number_of(group, Rotation.from_euler("z", 90, degrees=True).as_matrix())] == (
        "turned 90 degrees about z"
    )
    assert words[number_of(group, np.diag([1.0, 1.0, -1.0]))] == "mirrored in 'mid'"
    assert words[number_of(group, np.diag([-1.0, 1.0, 1.0]))] == "mirrored in 'left'"


# --- impossible sets ----------------------------------------------------------------------------


def tilted(degrees: float) -> list[float]:
    return [np.cos(np.deg2rad(degrees)), 0.0, np.sin(np.deg2rad(degrees))]


REFUSED = {
    "nothing": ([], None, ["neither a cut plane nor an axis", "[[mirror]]", "[cyclic]"]),
    "parallel": (
        [plane("left", X), plane("right", X, [2.5, 0, 0])],
        None,
        ["'left' and 'right' are parallel, 2.5 apart", "endless row"],
    ),
    "parallel, skew": (
        [plane("low", [1, 1, 1]), plane("high", [-2, -2, -2], [0, 0, 3])],
        None,
        ["'low' and 'high' are parallel", "1.73205 apart"],
    ),
    "twice": (
        [plane("mid", Z, [1, 2, 3]), plane("again", -Z, [-4, 9, 3])],
        None,
        ["'mid' and 'again' are the same plane", "Remove one"],
    ),
    "no part of 180": (
        [plane("a", X), plane("b", at_angle(50.03))],
        None,
        ["'a' and 'b' meet at 50.03", "no whole part of 180", "45"],
    ),
    "three digits of 30 degrees": (
        [plane("a", X), plane("b", [0.866, 0.5, 0.0])],
        None,
        ["'a' and 'b' meet at 30.0007", "nearest: 30", "all its digits"],
    ),
    "beside the axis": (
        [plane("cut", X, [0.25, 0, 0])],
        axis(6),
        ["'cut' is parallel to the cyclic axis but 0.25 away", "through the axis or is normal"],
    ),
    "beside an axis off the origin": (
        [plane("cut", Y, [0, 4, 0])],
        axis(6, Z, [1, 1, 0]),
        ["'cut' is parallel to the cyclic axis but 3 away"],
    ),
    "odd angle to the axis": (
        [plane("slant", tilted(11.3))],
        axis(5),
        ["'slant'", "axis of 5 sectors never close", "meet at 11.3 degrees"],
    ),
    "triangular tube": (
        [plane("a", at_angle(0)), plane("b", at_angle(120)), plane("c", at_angle(240), [-1, 0, 0])],
        None,
        ["'a', 'b', 'c'", "never close"],
    ),
}


@pytest.mark.parametrize("name", REFUSED)
def test_refused_with_its_own_words(name: str) -> None:
    planes, around, words = REFUSED[name]
    with pytest.raises(InputError) as caught:
        make_group(planes, around)
    for word in words:
        assert word in str(caught.value)
    others = [w for n, (_, _, (w, *_)) in REFUSED.items() if n.split(",")[0] != name.split(",")[0]]
    shared = [w for w in others if w in str(caught.value)]
    assert not shared, "two failures share one message"


@pytest.mark.parametrize(
    ("sectors", "planes"),
    [(5000, []), (2049, [plane("mid", Z)]), (4097, [plane("mid", Z)]), (5000, [plane("cut", X)])],
)
def test_too_many_copies_are_refused_as_such(sectors: int, planes) -> None:
    """They do close, there are only more of them than the program holds."""
    with pytest.raises(InputError, match="4096") as caught:
        make_group(planes, axis(sectors))
    assert "never close" not in str(caught.value)


@pytest.mark.parametrize("off", [1e-17, 3e-13])
@pytest.mark.parametrize("point", [[0, 0, 0], [0, 0, 250.0], [40.0, 0, -3.0]])
def test_round_off_in_a_point_is_no_distance(off: float, point) -> None:
    """Points read off a model carry round-off; a plane is not beside the axis for that."""
    noisy = np.add(point, [off, -off, off])
    group = make_group([plane("cut", Y, noisy), plane("mid", Z, point)], axis(5, Z, point))
    assert len(group) == 20


# --- load behaviours ----------------------------------------------------------------------------


def words_of(group: Group):
    """Every way of calling the planes symmetric or antisymmetric."""
    names = [p.name for p in group.planes]
    for words in itertools.product(("symmetric", "antisymmetric"), repeat=len(names)):
        yield dict(zip(names, words, strict=True))


def accepted(group: Group, h: int = 0) -> list[np.ndarray]:
    found = []
    for load in words_of(group):
        try:
            found.append(factors(group, Behaviour(load, h)))
        except NotYetError:
            raise
        except InputError:
            continue
    return found


# One-dimensional real characters: cyclic group 1 or 2, dihedral group 2 (m odd) or 4 (m even)
# (J.-P. Serre, Linear Representations of Finite Groups, 5.1 to 5.3); a direct product with one
# more plane doubles them; Th, Oh and Ih: International Tables or any book of character tables.
CHARACTERS = {
    "half": 2, "quarter": 4, "eighth": 8, "cube chamber": 4, "tetrahedron chamber": 2,
    "icosahedron chamber": 2, "two sectors": 2, "three sectors": 1, "half sectors, N = 2": 4,
    "half sectors, N = 3": 2, "half sectors, N = 8": 4, "half ring, N = 3": 2,
    "half ring, N = 4": 4, "quarter sectors, N = 5": 4, "quarter sectors, N = 6": 8,
    "wedge at 60, N = 3 twice said": 2,
} | {f"planes at 180/{m}": 2 if m % 2 else 4 for m in range(2, 13)}  # fmt: skip


@pytest.mark.parametrize("name", SETS)
def test_characters_of_the_group(name: str) -> None:
    """chi(g1 g2) = chi(g1) chi(g2) for all pairs, and as many of them as the theory knows."""
    group = made(name, Rotation.from_euler("xyz", [0.3, 0.2, 0.1]), [5.0, -3.0, 2.0])
    sectors = group.axis.sectors if group.axis else 1
    diameters = [0] if sectors % 2 else [0, sectors // 2]
    M = matrices(group)
    distinct = set()
    for h in diameters:
        for chi in accepted(group, h):
            assert set(np.unique(chi)) <= {-1.0, 1.0}
            assert chi[0] == 1.0
            np.testing.assert_array_equal(chi[group.product], np.multiply.outer(chi, chi))
            distinct.add(chi.tobytes())
            if group.axis is not None:
                turn = four_by_four(group.axis.placement)
                copy = int(np.argmin(np.abs(M - turn).max(axis=(1, 2))))
                assert chi[copy] == (-1.0 if h else 1.0)
    assert len(distinct) == CHARACTERS[name]


@pytest.mark.parametrize("word", ["symmetric", "antisymmetric"])
@pytest.mark.parametrize("other", ["symmetric", "antisymmetric"])
def test_each_plane_gets_the_sign_of_its_own_word(word: str, other: str) -> None:
    group = made("quarter")
    chi = factors(group, Behaviour({"p0": word, "p1": other}))
    signs = {"symmetric": 1.0, "antisymmetric": -1.0}
    assert chi[number_of(group, np.diag([-1.0, 1, 1]))] == signs[word]
    assert chi[number_of(group, np.diag([1.0, -1, 1]))] == signs[other]
    assert chi[number_of(group, np.diag([-1.0, -1, 1]))] == signs[word] * signs[other]


@pytest.mark.parametrize("m", [3, 5, 7, 9, 11])
def test_odd_part_with_different_words_names_both_planes(m: int) -> None:
    group = make_group([plane("floor", X), plane("wall", at_angle(180 / m))], None)
    with pytest.raises(InputError) as caught:
        factors(group, Behaviour({"floor": "symmetric", "wall": "antisymmetric"}))
    message = str(caught.value)
    assert "'floor'" in message
    assert "'wall'" in message
    assert f"{180 / m:.6g} degrees" in message
    assert "odd part" in message
    assert "antisymmetric" in message


@pytest.mark.parametrize("h", [0, 3])
def test_plane_through_the_axis(h: int) -> None:
    """N = 6: mirror planes of the ring take turns; at h = N/2 neighbours have opposite signs."""
    group = make_group([plane("radial", Y)], axis(6))
    chi = factors(group, Behaviour({"radial": "symmetric"}, h))
    for k in range(6):
        turn = Rotation.from_euler("z", 60 * k, degrees=True).as_matrix()
        half = Rotation.from_euler("z", 30 * k, degrees=True).as_matrix()
        sign = (-1.0) ** k if h else 1.0
        assert chi[number_of(group, turn)] == sign
        assert chi[number_of(group, half @ np.diag([1.0, -1.0, 1.0]) @ half.T)] == sign


@pytest.mark.parametrize(("sectors", "h"), [(2, 1), (4, 2), (12, 6), (720, 360)])
def test_half_of_an_even_number_of_sectors(sectors: int, h: int) -> None:
    chi = factors(make_group([], axis(sectors)), Behaviour({}, h))
    np.testing.assert_array_equal(chi, (-1.0) ** np.arange(sectors))


@pytest.mark.parametrize(
    ("sectors", "h", "allowed"),
    [(2, 2, "0 to 1"), (3, 2, "0 to 1"), (5, 3, "0 to 2"), (8, 5, "0 to 4"), (8, -1, "0 to 4")],
)
def test_nodal_diameters_out_of_range(sectors: int, h: int, allowed: str) -> None:
    with pytest.raises(InputError, match=f"nodal_diameters = {h} is out of range") as caught:
        factors(make_group([], axis(sectors)), Behaviour({}, h))
    assert allowed in str(caught.value)
    assert "opposite directions" in str(caught.value)
    assert not isinstance(caught.value, NotYetError)


@pytest.mark.parametrize(("sectors", "h"), [(3, 1), (5, 2), (8, 1), (8, 3), (720, 359)])
@pytest.mark.parametrize("floor", ["symmetric", "antisymmetric", None])
def test_waves_around_the_ring(sectors: int, h: int, floor: str | None) -> None:
    """chi = exp(+i h k alpha) on sector k, for right-handed turning; the other sign with "-"."""
    planes = [] if floor is None else [plane("floor", Z)]
    words = {} if floor is None else {"floor": floor}
    group = make_group(planes, axis(sectors))
    chi = factors(group, Behaviour(words, h))
    k = np.array([
        round(np.arctan2(p.Q[1, 0], p.Q[0, 0]) / (2 * np.pi / sectors)) for p in group.placements
    ])  # fmt: skip
    sign = np.array([-1.0 if floor == "antisymmetric" and p.mirrored else 1.0
                     for p in group.placements])  # fmt: skip
    np.testing.assert_allclose(chi, sign * np.exp(2j * np.pi * h * k / sectors), atol=1e-13)
    np.testing.assert_allclose(chi[group.product], np.multiply.outer(chi, chi), atol=1e-13)
    other = factors(group, Behaviour(words, h, "-"))
    np.testing.assert_allclose(other, chi.conj(), atol=1e-15)


def test_quarter_phases_are_exact() -> None:
    chi = factors(make_group([], axis(8)), Behaviour({}, 2))
    assert chi.tolist() == [1, 1j, -1, -1j, 1, 1j, -1, -1j]


@pytest.mark.parametrize("sectors", [5, 8])
def test_waves_in_half_sectors_are_not_served_yet(sectors: int) -> None:
    group = make_group([plane("radial", X)], axis(sectors))
    with pytest.raises(NotYetError, match="'radial' goes through the cyclic axis") as caught:
        factors(group, Behaviour({"radial": "symmetric"}, 1))
    assert ("or 4" in caught.value.remedy) == (sectors == 8), "N odd has no N/2"


def test_cyclic_words_that_contradict_the_planes() -> None:
    """Two planes at 180/4 with four sectors: the turn is the product of the two mirrors."""
    group = make_group([plane("a", X), plane("b", at_angle(45))], axis(4))
    assert len(group) == 8
    same, different = ({"a": "symmetric", "b": w} for w in ("symmetric", "antisymmetric"))
    for load, right, wrong in ((same, 0, 2), (different, 2, 0)):
        chi = factors(group, Behaviour(load, right))
        np.testing.assert_array_equal(chi[group.product], np.multiply.outer(chi, chi))
        with pytest.raises(InputError, match="contradict each other") as caught:
            factors(group, Behaviour(load, wrong))
        assert f"h = {wrong}" in str(caught.value)
