"""Sector loads as sums over nodal diameters, parts of any group, and orders of excitation.

Oracles: the defining sums written out, and matrices made by hand: Householder's reflection and
scipy's rotation.
"""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from meshes import direction, somewhere
from scipy.spatial.transform import Rotation

from expander.behaviours import Behaviour, factors
from expander.errors import InputError
from expander.groups import CutPlane, CyclicAxis, Group, make_group
from expander.placements import unit
from expander.quantities import quantity
from expander.waves.fourier import (
    amplitudes,
    carried,
    characters,
    complete,
    energy,
    project,
    sector_loads,
    weights,
)
from expander.waves.orders import meets, orders_exciting, table

ORIGIN = np.zeros(3)

numbers = st.floats(-1e3, 1e3, allow_subnormal=False)


@st.composite
def loads(draw: st.DrawFn) -> np.ndarray:
    """(N, 2, 3) loads of N sectors."""
    N = draw(st.integers(2, 13))
    return draw(arrays(float, (N, 2, 3), elements=numbers))


def size(f: np.ndarray) -> float:
    return 1e-12 * max(np.abs(f).max(), 1e-12)


@given(loads())
def test_amplitudes_are_the_sum_written_out(f: np.ndarray) -> None:
    N = len(f)
    alpha = 2 * np.pi / N
    F = amplitudes(f)
    assert len(F) == N // 2 + 1
    for h in range(N // 2 + 1):
        sums = sum(f[k] * np.exp(-1j * h * k * alpha) for k in range(N)) / N
        np.testing.assert_allclose(F[h], sums, atol=size(f))


@given(loads())
def test_there_and_back_and_energy(f: np.ndarray) -> None:
    """The inverse is the weighted sum of real parts; energy by Parseval's theorem."""
    N = len(f)
    F, w = amplitudes(f), weights(N)
    np.testing.assert_allclose(sector_loads(F, N), f, atol=size(f))
    for k in range(N):
        back = sum(w[h] * (F[h] * np.exp(2j * np.pi * h * k / N)).real for h in range(len(F)))
        np.testing.assert_allclose(back, f[k], atol=size(f))
    np.testing.assert_allclose(energy(F, N), (f**2).sum(), rtol=1e-12, atol=size(f) ** 2)


def test_weights_even_and_odd() -> None:
    """Real numbers of N sectors: 1-2-1 with N/2, 1-2-..-2 without; N in all."""
    assert weights(2).tolist() == [1, 1]
    assert weights(3).tolist() == [1, 2]
    assert weights(6).tolist() == [1, 2, 2, 1]
    assert weights(7).tolist() == [1, 2, 2, 2]


def test_amplitudes_refuse_what_they_cannot_hold() -> None:
    with pytest.raises(InputError, match="both directions"):
        amplitudes(np.array([1.0 + 1j, 2.0, 3.0]))
    with pytest.raises(InputError, match="4 amplitudes are given for 5"):
        sector_loads(np.zeros(4), 5)


# --- parts of any group -------------------------------------------------------------------------

R, P = somewhere()
GROUPS: dict[str, tuple[list, int]] = {
    "half": ([R[0]], 0),
    "quarter": ([R[0], R[1]], 0),
    "eighth": ([R[0], R[1], R[2]], 0),
    "two sectors": ([], 2),
    "five sectors": ([], 5),
    "six sectors": ([], 6),
    "half ring of five": ([R[2]], 5),
    "half ring of four": ([R[2]], 4),
    "half-sectors of two": ([R[0]], 2),
}


def group_of(name: str) -> Group:
    normals, N = GROUPS[name]
    planes = [CutPlane(f"p{i}", unit(n), P) for i, n in enumerate(normals)]
    return make_group(planes, CyclicAxis(N, unit(R[2]), P) if N else None)


def by_hand(name: str) -> list[tuple[np.ndarray, int, tuple[int, ...]]]:
    """Every copy: its matrix, its sector, and how many times each plane made it."""
    normals, N = GROUPS[name]
    found = []
    for k in range(max(N, 1)):
        for times in itertools.product((0, 1), repeat=len(normals)):
            Q = Rotation.from_rotvec(2 * np.pi * k / N * R[2]).as_matrix() if N else np.eye(3)
            for n, t in zip(normals, times, strict=True):
                Q = Q @ (np.eye(3) - 2 * t * np.outer(n, n))
            found.append((Q, k, times))
    return found


def rank_one(Q: np.ndarray, axial: bool) -> np.ndarray:
    return np.linalg.det(Q) * Q if axial else Q


@pytest.mark.parametrize("kind", ["polar vector", "axial vector"])
@pytest.mark.parametrize("name", GROUPS)
@given(seed=st.integers(0, 2**32 - 1))
def test_parts_of_a_load(name: str, kind: str, seed: int) -> None:
    """Each part is a load of its behaviour, all of them make the load, and energies add up."""
    group, q = group_of(name), quantity(kind, 3)
    copies = by_hand(name)
    assert len(copies) == len(group)
    order = [next(c for c in copies if np.abs(c[0] - p.Q).max() < 1e-9) for p in group.placements]
    f = np.random.default_rng(seed).normal(size=(len(group), 2, 3))
    N = GROUPS[name][1]
    total, squares = np.zeros_like(f), 0.0
    found = characters(group)
    assert complete(group, found)
    for c in found:
        part = project(group, c.chi, f, q)
        signs = [-1.0 if w == "antisymmetric" else 1.0 for w in c.behaviour.load.values()]
        image = []
        for Q, k, times in order:
            chi = np.exp(2j * np.pi * c.behaviour.nodal_diameters * k / N) if N else 1.0
            chi *= np.prod([s**t for s, t in zip(signs, times, strict=True)])
            A = rank_one(Q, kind == "axial vector")
            image.append(c.weight * (chi * part @ A.T).real)
        np.testing.assert_allclose(carried(group, c, part, q), image, atol=1e-12)
        total += image
        squares += len(group) * c.weight * (np.abs(part) ** 2).sum()
        again = project(group, c.chi, np.array(image), q)  # nothing is lost, nothing is added
        np.testing.assert_allclose(again, part, atol=1e-12)
    np.testing.assert_allclose(total, f, atol=1e-12)
    np.testing.assert_allclose(squares, (f**2).sum(), rtol=1e-12)


def test_parts_of_a_ring_are_its_amplitudes() -> None:
    """The projection of loads in turned components is the discrete Fourier transform."""
    group, q = group_of("five sectors"), quantity("polar vector", 3)
    turned = np.random.default_rng(3).normal(size=(5, 4, 3))
    stands = np.stack([t @ p.Q.T for t, p in zip(turned, group.placements, strict=True)])
    for c, F in zip(characters(group), amplitudes(turned), strict=True):
        np.testing.assert_allclose(project(group, c.chi, stands, q), F, atol=1e-14)


def test_symmetric_tensor_across_a_plane() -> None:
    """Stored components: xy and zx of the mirrored side change sign in the even part."""
    half = make_group([CutPlane("mid", unit([1, 0, 0]), ORIGIN)], None)
    T = np.array([1.0, 2.0, 3.0, 4.0, 5.0, 6.0])  # xx yy zz xy yz zx
    f = np.stack([T, np.zeros(6)])[:, None]
    even, odd = (project(half, c.chi, f, quantity("symmetric tensor", 6)) for c in characters(half))
    np.testing.assert_array_equal(even[0], T / 2)
    np.testing.assert_array_equal(odd[0], T / 2)
    image = carried(half, characters(half)[0], even, quantity("symmetric tensor", 6))[1, 0]
    np.testing.assert_array_equal(image, T / 2 * [1, 1, 1, -1, 1, -1])


def test_not_every_group_is_complete() -> None:
    """Planes at 60 degrees have 2 characters of degree 1, at 45 degrees 4; half-sectors of six 4:
    the dihedral groups of order 6, 8, 12 (Serre, 5.3)."""

    def named(degrees: float, sectors: int) -> Group:
        a = np.deg2rad(degrees)
        planes = [CutPlane("a", unit([1, 0, 0]), ORIGIN)]
        if degrees:
            planes.append(CutPlane("b", unit([np.cos(a), np.sin(a), 0]), ORIGIN))
        return make_group(planes, CyclicAxis(sectors, direction("z"), ORIGIN) if sectors else None)

    for group, count in ((named(60, 0), 2), (named(45, 0), 4), (named(0, 6), 4), (named(0, 3), 2)):
        found = characters(group)
        assert len(found) == count
        assert not complete(group, found)


def test_invariants_have_no_parts() -> None:
    group = group_of("half")
    with pytest.raises(InputError, match="invariant is not linear"):
        project(group, np.ones(2), np.ones((2, 1, 1)), quantity("invariant", 1))


# --- orders of excitation -----------------------------------------------------------------------


@pytest.mark.parametrize("N", [2, 3, 4, 5, 12, 13])
def test_order_by_sampling(N: int) -> None:
    """The pattern exp(i e theta) sampled at N sectors is exp(+i h k alpha) or exp(-i h k alpha)."""
    k = np.arange(N)
    for met in table(4 * N + 3, N):
        h = met.nodal_diameters
        pattern = np.exp(2j * np.pi * met.order * k / N)
        plus, minus = np.exp(2j * np.pi * h * k / N), np.exp(-2j * np.pi * h * k / N)
        fits = [np.abs(pattern - plus).max() < 1e-9, np.abs(pattern - minus).max() < 1e-9]
        word = {
            (True, False): "with",
            (False, True): "against",
            (True, True): "in step" if h == 0 else "alternating",
        }
        assert met.direction == word[fits[0], fits[1]]
        sign = -1 if met.direction == "against" else 1
        assert met.order == met.multiple * N + sign * h
        assert 2 * h <= N


def test_published_fold() -> None:
    """S. J. Wildheim, J. Appl. Mech. 46 (1979): order mN + h runs with the excitation, mN - h
    against it. For 12 sectors and h = 4 (the rule, not a table of the paper): 4, 8, 16, 20, .."""
    found = orders_exciting(4, 12, 32)
    assert [(m.order, m.direction) for m in found] == [
        (4, "with"), (8, "against"), (16, "with"), (20, "against"), (28, "with"), (32, "against"),
    ]  # fmt: skip
    assert [m.order for m in orders_exciting(0, 12, 30)] == [0, 12, 24]
    assert [m.order for m in orders_exciting(6, 12, 30)] == [6, 18, 30]
    assert [m.order for m in orders_exciting(6, 13, 33)] == [6, 7, 19, 20, 32, 33]


@given(st.integers(2, 40), st.integers(0, 60))
def test_every_order_once(N: int, last: int) -> None:
    """Each order excites one h, and the lists of all h hold every order once."""
    listed = sorted(m.order for h in range(N // 2 + 1) for m in orders_exciting(h, N, last))
    assert listed == list(range(last + 1))
    assert all(m == meets(m.order, N) for h in range(N // 2 + 1)
               for m in orders_exciting(h, N, last))  # fmt: skip


@pytest.mark.parametrize("N", [5, 6])
def test_phase_of_an_order(N: int) -> None:
    """An excitation cos(omega t - e k alpha), toward higher k, is Re(chi exp(+i omega t))."""
    group = make_group([], CyclicAxis(N, direction("z"), ORIGIN))
    for met in table(3 * N, N):
        chi = factors(group, Behaviour({}, met.nodal_diameters, met.phase or "+"))
        for omega_t in (0.0, 0.4, 2.0):
            wave = np.cos(omega_t - met.order * np.arange(N) * 2 * np.pi / N)
            np.testing.assert_allclose((chi * np.exp(1j * omega_t)).real, wave, atol=1e-12)
        assert (met.phase is None) == (met.direction in ("in step", "alternating"))


def test_orders_out_of_range() -> None:
    with pytest.raises(InputError, match="order -1"):
        meets(-1, 5)
    with pytest.raises(InputError, match="not cyclic"):
        meets(1, 1)
    with pytest.raises(InputError, match="no waves of 3"):
        orders_exciting(3, 5, 9)
