"""Peaks over the cycle: the ellipse, the highest point with a mean, principal stresses."""

from __future__ import annotations

import tracemalloc

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from expander.derived import principal_values, von_mises
from expander.errors import InputError
from expander.quantities import quantity
from expander.waves.circle import highest
from expander.waves.peaks import (
    STRESS,
    instant,
    largest_magnitude,
    largest_principal,
    largest_quadratic,
    largest_value,
    largest_von_mises,
    smallest_principal,
    smallest_value,
    standing,
    von_mises_form,
)
from expander.waves.principal import _bound, _Cycle

NUMBERS = st.one_of(
    st.integers(-3, 3).map(float), st.floats(-8.0, 8.0, width=32, allow_subnormal=False)
)
PHASES = st.floats(0.0, 360.0)
ROUND_OFF = 1e-14


def form_of(c: int) -> np.ndarray:
    """Von Mises for six components, else the magnitude."""
    return von_mises_form() if c == 6 else np.eye(c)


def measured(f, phase, mean, form) -> np.ndarray:
    """The measure of the field at a phase, from the definition."""
    now = instant(f, phase, mean)
    return np.sqrt(np.maximum(np.einsum("ni,ij,nj->n", now, form, now), 0.0))


@st.composite
def fields(draw, components=(1, 2, 3, 5, 6), steady=None):
    """Amplitude and mean (None for some) of one to three nodes, degenerate ones among them."""
    n, c = draw(st.integers(1, 3)), draw(st.sampled_from(components))
    f = draw(arrays(float, (n, c), elements=NUMBERS)) + 1j * draw(
        arrays(float, (n, c), elements=NUMBERS)
    )
    with_mean = draw(st.booleans()) if steady is None else steady
    return f, draw(arrays(float, (n, c), elements=NUMBERS)) if with_mean else None


def magnitude_of(f, mean) -> np.ndarray:
    """What round-off is relative to, (n,)."""
    return np.abs(f).max(axis=1) * 8 + (0.0 if mean is None else np.abs(mean).max(axis=1) * 8)


def random_fields(n: int, c: int, seed: int = 0):
    rng = np.random.default_rng(seed)
    f = rng.normal(size=(n, c)) + 1j * rng.normal(size=(n, c))
    return f, rng.normal(size=(n, c)) * 10.0 ** rng.uniform(-3.0, 3.0, (n, 1))


# --- quadratic measures -----------------------------------------------------------------------


@given(fields())
def test_the_value_occurs_at_the_phase(case) -> None:
    f, mean = case
    form = form_of(f.shape[1])
    peak = largest_quadratic(f, mean, form)
    assert ((peak.phase >= 0.0) & (peak.phase < (180.0 if mean is None else 360.0))).all()
    there = measured(f, peak.phase, mean, form)
    # Squares are rounded, so a value near zero is known to the root of round-off of its terms.
    limit = ROUND_OFF * magnitude_of(f, mean) ** 2
    assert (np.abs(there**2 - peak.value**2) <= limit).all()


@given(fields(), PHASES)
def test_no_phase_is_higher(case, phase) -> None:
    f, mean = case
    form = form_of(f.shape[1])
    peak = largest_quadratic(f, mean, form)
    limit = ROUND_OFF * magnitude_of(f, mean) ** 2
    assert (measured(f, phase, mean, form) ** 2 <= peak.value**2 + limit).all()


@given(fields(), PHASES)
def test_a_phase_of_the_amplitude_moves_the_peak_only(case, angle) -> None:
    f, mean = case
    form = form_of(f.shape[1])
    peak = largest_quadratic(f, mean, form)
    turned = largest_quadratic(f * np.exp(1j * np.radians(angle)), mean, form)
    limit = 1e-13 * magnitude_of(f, mean) ** 2
    assert (np.abs(turned.value**2 - peak.value**2) <= limit).all()
    assert (np.abs(measured(f, turned.phase + angle, mean, form) ** 2 - peak.value**2)
            <= limit).all()  # fmt: skip


def test_the_phase_moves_back_by_the_phase_of_the_amplitude() -> None:
    f, mean = random_fields(200, 3)
    before = largest_magnitude(f, mean).phase
    after = largest_magnitude(f * np.exp(0.5j), mean).phase
    assert np.abs((before - after - np.degrees(0.5) + 180.0) % 360.0 - 180.0).max() < 1e-6


@given(fields(), st.sampled_from([1e-60, 2.0**-20, 3.0, 1e60]))
def test_scaling(case, factor) -> None:
    f, mean = case
    form = form_of(f.shape[1])
    peak = largest_quadratic(f, mean, form)
    scaled = largest_quadratic(f * factor, None if mean is None else mean * factor, form)
    limit = ROUND_OFF * magnitude_of(f, mean) ** 2
    assert (np.abs((scaled.value / factor) ** 2 - peak.value**2) <= limit).all()


@pytest.mark.parametrize("steady", [False, True])
@pytest.mark.parametrize("c", [1, 2, 3, 6])
def test_brute_force(c: int, steady: bool) -> None:
    """A scan over 3,600 phases, within its own error: half the largest bend times a half step^2."""
    f, mean = random_fields(150, c, seed=c)
    mean = mean if steady else None
    form = form_of(c)
    peak = largest_quadratic(f, mean, form)
    scan = np.max([measured(f, k / 10.0, mean, form) for k in range(3600)], axis=0) ** 2
    a, b, m = f.real, f.imag, np.zeros_like(f.real) if mean is None else mean
    inner = lambda v, w: np.einsum("ni,ij,nj->n", v, form, w)  # noqa: E731
    bend = 4.0 * np.hypot(0.5 * (inner(a, a) - inner(b, b)), inner(a, b))
    bend += 2.0 * np.hypot(inner(m, a), inner(m, b))
    missed = peak.value**2 - scan
    assert (missed >= -ROUND_OFF * scan).all()
    assert (missed <= 0.5 * bend * (np.pi / 3600) ** 2 + ROUND_OFF * scan).all()


def quartic_peak(D, E, P, Q) -> float:
    """All real candidates: roots in z = exp(i phi) of z^2 p'(phi), on the unit circle or near."""
    c2, c1 = (D - 1j * E), (P - 1j * Q)
    roots = np.roots([c2, c1, 0.0, -np.conj(c1), -np.conj(c2)]) if abs(c2) else np.array([])
    # Double roots leave the circle by the root of round-off; a phase too many does no harm.
    angles = np.concatenate([np.angle(roots), [np.arctan2(Q, P)]])
    return float(np.max(D * np.cos(2 * angles) + E * np.sin(2 * angles)
                        + 2 * (P * np.cos(angles) + Q * np.sin(angles))))  # fmt: skip


@pytest.mark.parametrize("kind", ["any", "spread", "cusp", "circular", "symmetric"])
def test_all_candidates_of_the_quartic(kind: str) -> None:
    rng = np.random.default_rng(7)
    D, E, P, Q = rng.normal(size=(4, 300))
    if kind == "spread":
        D, E, P, Q = (v * 10.0 ** rng.uniform(-12, 0, 300) for v in (D, E, P, Q))
    elif kind == "cusp":  # two maxima merge where the linear term is twice the other, across it
        D, E = np.abs(D), 0.0 * E
        Q = 2.0 * D * (1.0 + 10.0 ** rng.uniform(-16, -1, 300) * rng.choice([-1, 1], 300))
        P = D * 10.0 ** rng.uniform(-18, -1, 300)
    elif kind == "circular":
        D, E = D * 1e-14, E * 1e-14
    elif kind == "symmetric":
        P, E = 0.0 * P, 0.0 * E
    terms = np.abs(D) + np.abs(E) + np.abs(P) + np.abs(Q)
    height, phase = highest(D, E, P, Q, terms)
    expected = np.array([quartic_peak(*row) for row in zip(D, E, P, Q, strict=True)])
    assert np.abs(height - expected).max() <= 1e-13
    t = np.radians(phase)
    back = D * np.cos(2 * t) + E * np.sin(2 * t) + 2 * (P * np.cos(t) + Q * np.sin(t))
    assert np.abs(height - back).max() <= 1e-13


@pytest.mark.parametrize(
    ("f", "mean", "value", "phase"),
    [
        ([0, 0], None, 0.0, 0.0),
        ([0, 0], [0, 0], 0.0, 0.0),
        ([0, 0], [3, 4], 5.0, 0.0),  # the mean alone
        ([1, 1j], None, 1.0, 0.0),  # circular: all the time
        ([1, 1j], [0, 0], 1.0, 0.0),
        ([1, 1j], [0, 2], 3.0, 270.0),  # circular, the mean tells
        ([2, 0], [0, 0], 2.0, 0.0),  # twice, as without a mean
        ([2j, 0], [0, 0], 2.0, 90.0),
        ([2j, 0], None, 2.0, 90.0),
        ([-2, 0], None, 2.0, 0.0),  # at 0 and 180: the first
        ([-2, 0], [0.5, 0], 2.5, 180.0),
        ([2, 0], [0, 1], 5**0.5, 0.0),  # mean across the line: at 0 and 180
        ([2, 1j], [0, 1], (16 / 3) ** 0.5, 199.471221),  # sin phi = -1/3: there and at 340.53
        ([2, 1j], [0, 3], 4.0, 270.0),  # the cusp: two maxima just merged
        ([3 + 4j], [-1], 6.0, 180 - 53.130102),  # a scalar's magnitude, against the mean
    ],
)
def test_degenerate_cases(f, mean, value, phase) -> None:
    peak = largest_magnitude([f], None if mean is None else [mean])
    assert peak.value[0] == pytest.approx(value, rel=1e-15)
    assert peak.phase[0] == pytest.approx(phase, abs=1e-6)


@pytest.mark.parametrize("steady", [None, 0.0, 1e-17])
def test_circular_to_round_off_is_circular(steady) -> None:
    """Then the value lasts all the time, and the phase is 0, not that of the round-off."""
    angles = np.random.default_rng(2).uniform(0.0, 6.0, 200)
    plane = np.linalg.qr(np.random.default_rng(3).normal(size=(3, 3)))[0][:2]
    f = 0.1 * np.exp(1j * angles)[:, None] * (plane[0] + 1j * plane[1])
    peak = largest_magnitude(f, None if steady is None else np.full((200, 3), steady))
    assert peak.value == pytest.approx(0.1, rel=1e-14)
    assert (peak.phase == 0.0).all()


def test_a_phase_just_below_zero_is_zero() -> None:
    """A whole turn is no phase: a hot-spot table would show 360 for what is 0."""
    for f in (1.0 + 1e-18j, 1.0 + 1e-15j):
        assert largest_value([[f]]).phase[0] == 0.0
        assert largest_magnitude([[f, 0.0]]).phase[0] == 0.0
        assert largest_magnitude([[f, 0.0]], [[1.0, 0.0]]).phase[0] == 0.0


def test_two_local_maxima() -> None:
    """Of two maxima that the quartic gives, the higher."""
    f, mean = np.array([[1.0, 0.7j]]), np.array([[0.02, -0.45]])
    degrees = np.arange(360.0)
    values = np.array([measured(f, d, mean, np.eye(2))[0] for d in degrees])
    tops = degrees[(values > np.roll(values, 1)) & (values > np.roll(values, -1))]
    assert len(tops) == 2
    heights = values[tops.astype(int)]
    assert np.ptp(heights) > 0.01
    assert largest_magnitude(f, mean).phase[0] == pytest.approx(tops[heights.argmax()], abs=0.5)


def test_the_phase_without_the_mean_underestimates() -> None:
    """By more than the 17 % that is commonly seen, and by 1 - 1/sqrt(2) = 29.3 % at the most.

    The better of both phases of the ellipse's long axis gives at least ``m^2 + A^2`` squared, the
    peak is at most ``(m + A)^2``.
    """
    f, mean = random_fields(20_000, 3, seed=3)
    mean /= np.linalg.norm(mean, axis=1)[:, None]
    f, mean = np.vstack([f, [[1.0 + 1e-9, 1.0j, 0.0]]]), np.vstack([mean, [[0.0, 1.0, 0.0]]])
    alone = largest_magnitude(f).phase
    there = np.maximum(*(measured(f, alone + turn, mean, np.eye(3)) for turn in (0.0, 180.0)))
    missed = 1.0 - there / largest_magnitude(f, mean).value
    assert 0.17 < missed[:-1].max() < 1.0 - 0.5**0.5
    assert missed[-1] == pytest.approx(1.0 - 0.5**0.5, abs=1e-8)
    assert missed.min() > -ROUND_OFF


@given(fields(components=(3,)), st.integers(0, 1000))
def test_the_magnitude_turns_with_the_body(case, seed) -> None:
    f, mean = case
    Q = np.linalg.qr(np.random.default_rng(seed).normal(size=(3, 3)))[0]
    peak = largest_magnitude(f, mean)
    turned = largest_magnitude(f @ Q.T, None if mean is None else mean @ Q.T)
    assert (np.abs(turned.value - peak.value) <= ROUND_OFF * magnitude_of(f, mean)).all()


@given(fields(components=(6,)), st.integers(0, 1000))
def test_stress_measures_turn_with_the_body(case, seed) -> None:
    f, mean = case
    Q = np.linalg.qr(np.random.default_rng(seed).normal(size=(3, 3)))[0]
    A = quantity("symmetric tensor", 6).matrix(Q)
    turned = f @ A.T, None if mean is None else mean @ A.T
    scale = magnitude_of(f, mean)
    before, after = largest_von_mises(f, mean), largest_von_mises(*turned)
    assert (np.abs(before.value**2 - after.value**2) <= 1e-13 * scale**2).all()
    before, after = largest_principal(f, mean), largest_principal(*turned)
    assert (np.abs(before.value - after.value) <= 1e-6 * scale).all()


def test_von_mises_is_that_of_the_derived_field() -> None:
    f, mean = random_fields(50, 6)
    for q in (quantity("symmetric tensor", 6), quantity("symmetric tensor", 4)):
        g, m = f[:, : q.size], mean[:, : q.size]
        peak = largest_von_mises(g, m, q.spread)
        there = von_mises(q, instant(g, peak.phase, m))[:, 0]
        assert there == pytest.approx(peak.value, rel=1e-13)
    assert STRESS.tolist() == quantity("symmetric tensor", 6).spread.tolist()


def test_von_mises_of_a_hydrostatic_state_is_zero() -> None:
    """A pressure of 1e8 leaves the digits of a small shear."""
    pressure = np.array([[1e8 / 3, 1e8 / 3, 1e8 / 3, 0.0, 0.0, 0.0]])
    assert largest_von_mises(pressure * np.exp(0.3j), pressure).value[0] == 0.0
    shear = np.array([[0.0, 0.0, 0.0, 1e-3, 0.0, 0.0]])
    assert largest_von_mises(pressure * 1j + shear, pressure).value[0] == pytest.approx(
        3**0.5 * 1e-3, rel=1e-14
    )


def test_scalars() -> None:
    """With exp(+i omega t) an amplitude exp(i alpha) peaks at phase -alpha."""
    f, mean = random_fields(100, 1)
    largest, smallest = largest_value(f, mean), smallest_value(f, mean)
    assert instant(f, largest.phase, mean)[:, 0] == pytest.approx(largest.value)
    assert instant(f, smallest.phase, mean)[:, 0] == pytest.approx(smallest.value)
    assert largest.value - smallest.value == pytest.approx(2.0 * np.abs(f[:, 0]))
    either = np.maximum(np.abs(largest.value), np.abs(smallest.value))
    assert largest_magnitude(f, mean).value == pytest.approx(either)
    assert largest_value([[np.exp(0.5j)]]).phase[0] == pytest.approx(360.0 - np.degrees(0.5))
    assert smallest_value([[0.0j]]).phase[0] == 0.0


def test_standing_waves_peak_at_phase_zero() -> None:
    f, mean = random_fields(20, 3)
    peak = largest_magnitude(standing(f))
    assert peak.value == pytest.approx(np.linalg.norm(f.real, axis=1), rel=1e-15)
    assert (peak.phase == 0.0).all()
    with_mean = largest_magnitude(standing(f), mean)
    both = [np.linalg.norm(mean + sign * f.real, axis=1) for sign in (1.0, -1.0)]
    assert with_mean.value == pytest.approx(np.maximum(*both))


# --- the cycle and the copies -----------------------------------------------------------------


def test_the_mean_square_over_the_cycle() -> None:
    """mm + (aa + bb)/2: the amplitude's energy is twice the mean of the alternating field's."""
    f, mean = random_fields(20, 3)
    squares = [(instant(f, 60.0 * k, mean) ** 2).sum(axis=1) for k in range(6)]
    expected = (mean**2).sum(axis=1) + 0.5 * (np.abs(f) ** 2).sum(axis=1)
    assert np.mean(squares, axis=0) == pytest.approx(expected)


@pytest.mark.parametrize(("N", "h"), [(7, 0), (7, 2), (8, 3), (8, 4), (3, 1)])
def test_energy_over_the_copies(N: int, h: int) -> None:
    """N times the sector's for real chi, N/2 times that of the amplitude for 0 < h < N/2."""
    f, _ = random_fields(20, 3)
    chi = np.exp(2j * np.pi * h * np.arange(N) / N)
    over_copies = sum((instant(f * x, 25.0) ** 2).sum(axis=1) for x in chi)
    if h in (0, N / 2):
        assert over_copies == pytest.approx(N * (instant(f, 25.0) ** 2).sum(axis=1))
    else:
        assert over_copies == pytest.approx(N / 2 * (np.abs(f) ** 2).sum(axis=1))


def test_travelling_waves_peak_alike_on_all_copies_standing_waves_do_not() -> None:
    f, mean = random_fields(30, 3)
    chi = np.exp(2j * np.pi * 2 * np.arange(7) / 7)
    travelling = np.array([largest_magnitude(f * x).value for x in chi])
    with_mean = np.array([largest_magnitude(f * x, mean).value for x in chi])
    stands = np.array([largest_magnitude(standing(f * x)).value for x in chi])
    assert np.ptp(travelling, axis=0).max() < 1e-13
    # The mean follows the group, so its turned components are the same on all copies.
    assert (np.ptp(with_mean, axis=0) / with_mean[0]).max() < 1e-13
    assert np.ptp(stands, axis=0).min() > 0.01


# --- principal stresses -----------------------------------------------------------------------


@settings(max_examples=60)
@given(fields(components=(6,)), PHASES)
def test_principal_stress_is_nowhere_higher_than_stated(case, phase) -> None:
    f, mean = case
    q = quantity("symmetric tensor", 6)
    peak, low = largest_principal(f, mean), smallest_principal(f, mean)
    norm = largest_quadratic(f, mean, np.diag([1.0, 1, 1, 2, 2, 2])).value
    limit = ROUND_OFF * magnitude_of(f, mean)
    for found, column, sign in ((peak, 0, 1.0), (low, 2, -1.0)):
        there = principal_values(q, instant(f, found.phase, mean))[:, column]
        assert (np.abs(there - found.value) <= limit).all()
        now = principal_values(q, instant(f, phase, mean))[:, column]
        assert (sign * (now - found.value) <= 1e-6 * norm + limit).all()
        assert ((found.phase >= 0.0) & (found.phase < 360.0)).all()


@pytest.mark.parametrize("steady", [False, True])
def test_principal_stress_by_brute_force(steady: bool) -> None:
    """3,600 phases: they miss half the swing's norm times a half step squared at the most."""
    f, mean = random_fields(300, 6, seed=5)
    mean = mean if steady else None
    q = quantity("symmetric tensor", 6)
    scan = np.array([principal_values(q, instant(f, k / 10.0, mean)) for k in range(3600)])
    norm = largest_quadratic(f, mean, np.diag([1.0, 1, 1, 2, 2, 2])).value
    missed_by_scan = 0.5 * norm * (np.pi / 3600) ** 2
    high, low = largest_principal(f, mean), smallest_principal(f, mean)
    for short in (high.value - scan[:, :, 0].max(axis=0), scan[:, :, 2].min(axis=0) - low.value):
        assert (short >= -1e-6 * norm).all()
        assert (short <= missed_by_scan + ROUND_OFF * norm).all()
        assert np.median(short / norm) > 0.0  # the refinement is better than the scan


def test_a_coarser_tolerance_holds_too() -> None:
    f, mean = random_fields(500, 6, seed=8)
    norm = largest_quadratic(f, mean, np.diag([1.0, 1, 1, 2, 2, 2])).value
    fine = largest_principal(f, mean, tolerance=1e-7).value
    for tolerance in (1e-2, 1e-4, 1e-6):
        coarse = largest_principal(f, mean, tolerance).value
        assert (fine - coarse <= tolerance * norm).all()


@pytest.mark.parametrize("steady", [0.0, 0.5, 30.0])
@pytest.mark.parametrize("close", [1e-1, 1e-3, 1e-5])
def test_principal_directions_that_stay_take_turns(close: float, steady: float) -> None:
    """Three directions with a phase each: the peak is the largest mean_i + |f_i|, exact."""
    rng = np.random.default_rng(4)
    n = 1000
    sizes = 1.0 + close * rng.uniform(-1.0, 1.0, (n, 3))
    amplitudes = sizes * np.exp(1j * rng.uniform(0.0, 2.0 * np.pi, (n, 3)))
    means = steady * (1.0 + close * rng.uniform(-1.0, 1.0, (n, 3)))
    Q = np.linalg.qr(rng.normal(size=(3, 3)))[0]
    A = quantity("symmetric tensor", 6).matrix(Q)
    f, mean = (np.hstack([v, 0.0 * v]) @ A.T for v in (amplitudes, means))
    norm = largest_quadratic(f, mean, np.diag([1.0, 1, 1, 2, 2, 2])).value
    high, low = largest_principal(f, mean), smallest_principal(f, mean)
    for short in (
        (means + sizes).max(axis=1) - high.value,
        low.value - (means - sizes).min(axis=1),
    ):
        assert (short >= -1e-14 * norm).all()
        assert (short <= 1e-6 * norm).all()
        assert np.median(short) <= 1e-9  # what is found is refined beyond the tolerance


@given(st.floats(0.01, 0.5), st.floats(0.0, 1.0), st.floats(-4.0, 4.0), st.floats(-2.0, 2.0))
def test_the_bound_of_an_interval(width, share, start, level) -> None:
    """No curve of the family passes it, and the steepest comes near to it."""
    rho = 2.0
    t = np.linspace(-width, width, 201)
    curve = level + share * rho * np.cos(t - start)
    bound = _bound(curve[:1], curve[-1:], np.array([rho]), width)[0]
    assert curve.max() <= bound + 1e-14
    full = level + rho * np.cos(t - 0.5 * width * np.sin(start))
    bound = _bound(full[:1], full[-1:], np.array([rho]), width)[0]
    assert -1e-14 <= bound - full.max() <= rho * width**4


def test_no_direction_swings_by_more_than_the_norm() -> None:
    f = np.vstack([random_fields(200, 6)[0], [[0.0, 0.0, 0.0, 1.0, 1.0, 1.0]]])
    cycle = _Cycle.of(f, None, np.eye(6))
    for degrees in range(0, 360, 5):
        now = instant(f, float(degrees))
        assert (principal_values(quantity("symmetric tensor", 6), now)[:, 0]
                <= cycle.rho * cycle.scale * (1.0 + 1e-14)).all()  # fmt: skip


def test_the_higher_of_two_maxima_that_differ_little() -> None:
    """Two directions take turns: near 7.5 degrees, between the first looks, the higher one."""
    angle = np.radians(7.5)
    f = np.zeros((1, 6), dtype=complex)
    f[0, 0], f[0, 1] = 1.0 + 1e-5, np.exp(1j * np.pi)  # xx peaks at 0, yy at 180
    turned = largest_principal(f * np.exp(-1j * angle))
    assert turned.value[0] == pytest.approx(1.0 + 1e-5, abs=1e-9)
    assert turned.phase[0] == pytest.approx(7.5, abs=0.01)
    f[0, 0], f[0, 1] = np.exp(-1j * angle) * (1.0 + 1e-5), -1.0  # yy at a first look, and lower
    assert largest_principal(f).value[0] == pytest.approx(1.0 + 1e-5, abs=1e-9)


def test_principal_stress_that_stays_the_same_all_the_time() -> None:
    """A shear that turns with the cycle: +1 and -1 at every phase; memory stays small."""
    f = np.tile([[1.0, -1.0, 0.0, 1.0j, 0.0, 0.0]], (100, 1))
    peak = largest_principal(f)
    assert peak.value == pytest.approx(1.0, abs=1e-12)
    assert smallest_principal(f).value == pytest.approx(-1.0, abs=1e-12)


def test_smallest_is_minus_the_largest_half_a_cycle_later() -> None:
    f, _ = random_fields(100, 6)
    high, low = largest_principal(f), smallest_principal(f)
    assert low.value == pytest.approx(-high.value, rel=1e-6)
    assert np.abs((low.phase - high.phase) % 360.0 - 180.0).max() < 1e-2


def test_principal_stresses_of_plane_storage_include_zero() -> None:
    q = quantity("symmetric tensor", 3)
    f, mean = np.array([[0.5, 0.2j, 0.1]]), np.array([[-4.0, -5.0, 0.0]])
    assert largest_principal(f, mean, spread=q.spread).value[0] == pytest.approx(0.0, abs=1e-15)
    assert smallest_principal(f, mean, spread=q.spread).value[0] < -5.0


def test_principal_stress_of_the_mean_alone() -> None:
    _, mean = random_fields(20, 6)
    mean[0] = 0.0
    peak = largest_principal(np.zeros_like(mean), mean)
    expected = principal_values(quantity("symmetric tensor", 6), mean)[:, 0]
    assert peak.value == pytest.approx(expected, abs=1e-12)
    assert (peak.phase == 0.0).all()


# --- arrays -----------------------------------------------------------------------------------


@pytest.mark.parametrize("steady", [False, True])
@pytest.mark.parametrize("peak_of", [largest_von_mises, largest_principal, smallest_principal])
def test_a_node_does_not_depend_on_its_neighbours(peak_of, steady) -> None:
    """More nodes than are taken at a time, and nodes that are not finite."""
    f, mean = random_fields(5000, 6)
    f[7, 2], mean[4999, 0], f[4100, 5] = np.nan, np.nan, np.inf
    bad = [7, 4100, 4999] if steady else [7, 4100]
    peak = peak_of(f, mean if steady else None)
    some = np.array([0, 6, 7, 8, 4095, 4096, 4100, 4999])
    alone = peak_of(f[some], mean[some] if steady else None)
    assert np.isnan(peak.value[bad]).all()
    assert np.isnan(peak.phase[bad]).all()
    assert np.isfinite(np.delete(peak.value, bad)).all()
    np.testing.assert_allclose(peak.value[some], alone.value, rtol=1e-13)
    np.testing.assert_allclose(peak.phase[some], alone.phase, rtol=1e-4, atol=1e-4)


def test_any_layout_and_precision() -> None:
    f, mean = random_fields(10, 6)
    expected = largest_von_mises(f, mean).value
    assert largest_von_mises(np.asfortranarray(f), mean[::1]).value == pytest.approx(expected)
    wide = np.repeat(f, 2, axis=0)[::2]
    assert largest_von_mises(wide, np.asfortranarray(mean)).value == pytest.approx(expected)
    single = largest_von_mises(f.astype(np.complex64), mean.astype(np.float32)).value
    assert single == pytest.approx(expected, rel=1e-5)
    assert single.dtype == np.float64
    whole = largest_magnitude(np.array([[3, 4]]))
    assert whole.value.tolist() == [5.0]
    for peak in (largest_von_mises(f[:0], mean[:0]), largest_principal(f[:0])):
        assert len(peak) == len(peak.phase) == 0


def test_memory_is_that_of_the_result() -> None:
    f, mean = random_fields(100_000, 6)
    for peak_of in (largest_von_mises, largest_principal):
        tracemalloc.start()
        part = slice(0, 100_000 if peak_of is largest_von_mises else 20_000)
        peak_of(f[part], mean[part])
        used = tracemalloc.get_traced_memory()[1]
        tracemalloc.stop()
        assert used < 40e6  # the fields alone take 14 MB


@pytest.mark.parametrize(
    ("call", "words"),
    [
        (lambda: largest_magnitude(np.ones(3)), "shape (3,)"),
        (lambda: largest_magnitude(np.ones((2, 3)), np.ones((3, 3))), "mean has shape (3, 3)"),
        (lambda: largest_magnitude(np.ones((2, 3)), 1j * np.ones((2, 3))), "complex128"),
        (lambda: largest_magnitude(np.array([["a"]])), "<U1"),
        (lambda: largest_value(np.ones((2, 3))), "3 components"),
        (lambda: largest_von_mises(np.ones((2, 3))), "(6, 6)"),
        (lambda: largest_quadratic(np.ones((2, 2)), None, [[1.0, 0.0], [0.0, -1.0]]), "negative"),
        (lambda: largest_quadratic(np.ones((2, 2)), None, [[1.0, 1.0], [0.0, 1.0]]), "symmetric"),
        (lambda: largest_quadratic(np.ones((2, 2)), None, [[1.0, np.nan], [0.0, 1.0]]), "form"),
        (lambda: largest_principal(np.ones((2, 6)), tolerance=1e-9), "1e-09"),
        (lambda: largest_principal(np.ones((2, 4))), "spread of shape (9, 6)"),
    ],
)
def test_what_does_not_fit_is_refused(call, words: str) -> None:
    with pytest.raises(InputError) as problem:
        call()
    assert words in str(problem.value)
    assert problem.value.remedy


def test_a_form_of_zero_measures_nothing() -> None:
    assert largest_quadratic(np.ones((2, 2)), None, np.zeros((2, 2))).value.tolist() == [0.0, 0.0]
