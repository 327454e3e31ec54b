"""Peaks over the cycle against exact algebra and published results.

Sturm's theorem (sympy, rational numbers) proves that nothing on the cycle is above the value found:
in ``t = tan(phi / 2)`` the square of a measure is a quotient of polynomials, and a level that the
polynomial never reaches is above the peak.
"""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
import sympy as sp

from expander.waves.peaks import (
    instant,
    largest_magnitude,
    largest_principal,
    largest_quadratic,
    largest_von_mises,
    smallest_principal,
    von_mises_form,
)

T = sp.Symbol("t", real=True)
TURN, COS, SIN = 1 + T**2, 1 - T**2, 2 * T  # TURN cos phi = COS, TURN sin phi = SIN


def integers(seed: int, c: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Small whole numbers a, b, m: many are degenerate, all are exact."""
    return tuple(np.random.default_rng(seed).integers(-3, 4, (3, c)))


def whole(row) -> list[sp.Integer]:
    return [sp.Integer(int(v)) for v in row]


def exact_square(a, b, m, form) -> sp.Expr:
    """TURN^2 times the square of the measure."""
    now = sp.Matrix([TURN * z + COS * x - SIN * y for x, y, z in zip(a, b, m, strict=True)])
    return sp.expand((now.T * form * now)[0])


def above_everywhere(polynomial: sp.Expr) -> bool:
    """Positive for every phase, 180 degrees (t at infinity) included."""
    p = sp.Poly(polynomial, T)
    return p.degree() % 2 == 0 and p.LC() > 0 and p.count_roots() == 0


def proved(found: float, polynomial: sp.Expr) -> bool:
    """No phase is above the value found by round-off, and one is above it less round-off."""
    square = sp.Rational(Fraction(found) ** 2)
    margin = sp.Rational(1, 10**14)
    return above_everywhere(square * (1 + margin) * TURN**2 - polynomial) and not above_everywhere(
        square * (1 - margin) * TURN**2 - polynomial
    )


CASES = [
    ((2, 0), (0, 1), (0, 3)),  # the cusp: two maxima merge
    ((2, 0), (0, 1), (0, 1)),  # two maxima of one height
    ((1, 0), (0, 1), (0, 0)),  # circular
    ((1, 0), (0, 1), (2, 1)),
    ((1, 2), (2, 4), (2, -1)),  # on a line, the mean across it
    ((0, 0), (0, 0), (1, 2)),
    ((9, 0), (0, 7), (0, -4)),
]


@pytest.mark.parametrize(("a", "b", "m"), CASES)
def test_magnitude_of_degenerate_cases_is_exact(a, b, m) -> None:
    polynomial = exact_square(whole(a), whole(b), whole(m), sp.eye(2))
    found = largest_magnitude([np.array(a) + 1j * np.array(b)], [m])
    assert proved(found.value[0], polynomial)


@pytest.mark.parametrize("steady", [False, True])
@pytest.mark.parametrize("seed", range(15))
def test_von_mises_is_exact(seed: int, steady: bool) -> None:
    a, b, m = integers(seed, 6)
    form = sp.Matrix(6, 6, lambda i, j: sp.nsimplify(von_mises_form()[i, j].round(12)))
    polynomial = exact_square(whole(a), whole(b), whole(m if steady else 0 * m), form)
    found = largest_von_mises([a + 1j * b], [m] if steady else None)
    assert proved(found.value[0], polynomial)


@pytest.mark.parametrize("seed", range(10))
def test_magnitude_of_vectors_with_a_mean_is_exact(seed: int) -> None:
    a, b, m = integers(100 + seed, 3)
    polynomial = exact_square(whole(a), whole(b), whole(m), sp.eye(3))
    assert proved(largest_magnitude([a + 1j * b], [m]).value[0], polynomial)


@pytest.mark.parametrize("seed", range(5))
def test_any_form_is_exact(seed: int) -> None:
    a, b, m = integers(200 + seed, 3)
    L = np.random.default_rng(seed).integers(-2, 3, (2, 3))  # a form of rank 2 or less
    form = L.T @ L
    polynomial = exact_square(whole(a), whole(b), whole(m), sp.Matrix(form))
    assert proved(largest_quadratic([a + 1j * b], [m], form).value[0], polynomial)


def matrix(row) -> sp.Matrix:
    xx, yy, zz, xy, yz, zx = whole(row)
    return sp.Matrix([[xx, xy, zx], [xy, yy, yz], [zx, yz, zz]])


@pytest.mark.parametrize("steady", [False, True])
@pytest.mark.parametrize("seed", range(8))
def test_principal_stress_is_proved_to_its_tolerance(seed: int, steady: bool) -> None:
    """det(level I - T) is positive over the cycle: with the level above at one phase, above at all.

    That the value occurs is seen from numpy's eigenvalues at the phase returned.
    """
    a, b, m = integers(300 + seed, 6)
    m = m if steady else 0 * m
    f, mean = np.array([a + 1j * b]), [m] if steady else None
    tolerance = 1e-6
    norm = largest_quadratic(f, mean, np.diag([1.0, 1, 1, 2, 2, 2])).value[0]
    for peak, sign in ((largest_principal(f, mean), 1), (smallest_principal(f, mean), -1)):
        level = sp.Rational(Fraction(float(sign * peak.value[0] + tolerance * norm)))
        now = TURN * matrix(m) + COS * matrix(a) - SIN * matrix(b)
        determinant = sp.expand((level * TURN * sp.eye(3) - sign * now).det(method="berkowitz"))
        assert above_everywhere(determinant)
        start = np.array((sign * (matrix(m) + matrix(a))).tolist(), dtype=float)
        assert np.linalg.eigvalsh(start)[-1] < float(level)
        xx, yy, zz, xy, yz, zx = instant(f, peak.phase, mean)[0]
        there = np.linalg.eigvalsh([[xx, xy, zx], [xy, yy, yz], [zx, yz, zz]])
        assert there[0 if sign < 0 else 2] == pytest.approx(peak.value[0], abs=1e-13 * norm)


def test_magnitude_is_the_largest_singular_value() -> None:
    """``a cos - b sin`` is the matrix [a, -b] on a unit vector (Golub and Van Loan, 2.4)."""
    rng = np.random.default_rng(0)
    f = rng.normal(size=(200, 4)) + 1j * rng.normal(size=(200, 4))
    singular = np.linalg.svd(np.stack([f.real, -f.imag], axis=2), compute_uv=False)
    np.testing.assert_allclose(largest_magnitude(f).value, singular[:, 0], rtol=1e-14)


def test_principal_stress_by_the_elliptical_range_theorem() -> None:
    """A plane stress without trace, without mean: the numerical radius of ``C = A - i B``.

    The field of values of a 2 x 2 matrix with eigenvalues l, -l is an ellipse about zero with these
    foci and the minor axis sqrt(tr C*C - 2 |l|^2); its long half axis is the peak. Source: Horn and
    Johnson, Topics in Matrix Analysis, 1.3 (from memory).
    """
    rng = np.random.default_rng(1)
    xx, xy = rng.normal(size=(2, 100)) + 1j * rng.normal(size=(2, 100))
    zero = np.zeros(100)
    f = np.stack([xx, -xx, zero, xy, zero, zero], axis=1)
    C = np.stack([[xx, xy], [xy, -xx]]).transpose(2, 0, 1).conj()
    focus = np.abs(np.linalg.det(C))
    minor = np.sqrt((np.abs(C) ** 2).sum(axis=(1, 2)) - 2.0 * focus)
    expected = np.sqrt(0.25 * minor**2 + focus)
    np.testing.assert_allclose(largest_principal(f).value, expected, rtol=1e-9)


def test_von_mises_of_rotating_bending_with_a_steady_torque() -> None:
    """A shaft: bending stress s cos(omega t), torsion t steady: sqrt(s^2 + 3 t^2) (handbooks)."""
    s, t = 120.0, 45.0
    f, mean = [[s * np.exp(0.7j), 0, 0, 0, 0, 0]], [[0, 0, 0, t, 0, 0]]
    peak = largest_von_mises(f, mean)
    assert peak.value[0] == pytest.approx(np.sqrt(s**2 + 3.0 * t**2), rel=1e-14)
    # At phase -0.7 and half a cycle later: the first.
    assert peak.phase[0] == pytest.approx(180.0 - np.degrees(0.7))
    high = 0.5 * s + np.hypot(0.5 * s, t)  # Mohr's circle
    assert largest_principal(f, mean).value[0] == pytest.approx(high, rel=1e-9)
