"""The highest point of a trigonometric polynomial of degree 2 over one turn, for many at once.

``p(phi) = D cos 2 phi + E sin 2 phi + 2 (P cos phi + Q sin phi)``, with ``u = (cos phi, sin phi)``,
is ``u.H u + 2 g.u`` on the unit circle. Its stationary points are the roots of a quartic: up to
four, and two of them may be maxima. The highest is found without comparing them:

Turned by half the angle of ``(D, E)`` to the principal axes of ``H``, p becomes
``r cos 2 theta + 2 (x cos theta + y sin theta)`` with ``r = hypot(D, E)``, and mirrored in the axes
``x, y >= 0``, so that the highest point lies in the first quadrant. There
``p' / (sin theta cos theta) = -4 r - 2 x / cos theta + 2 y / sin theta`` falls steadily, so that
the quadrant holds one stationary point only. It is ``u = (x / d, y / (d + 2 r))``, ``d`` the
largest root of ``|u|^2 = 1``, which is the quartic again. ``1 / |u| - 1`` rises with d and is
concave: Newton's iteration from below climbs to the root and never passes it.

Source: the trust-region subproblem in two dimensions; J. J. More and D. C. Sorensen, Computing a
trust region step, SIAM J. Sci. Stat. Comput. 4 (1983) 553-572 (from memory).
"""

from __future__ import annotations

import numpy as np

from expander.placements import Floats

EPS = float(np.finfo(float).eps)
_SAME = 8.0 * EPS  # relative to their terms: sums of squares this close are equal to round-off
_CLOSED = 4.0 * EPS  # of |u| - 1: the point found is exact for x and y changed by as much
_FLOOR = 1e-30  # of x, relative to p: keeps d from zero, far below round-off
_TINY = 1e-300
_STEPS = 60  # seven were the most that a million cases, degenerate ones among them, took
_SNAP = 1e-9  # degrees; this near a peak the value differs from it by 1e-22


def in_first_turn(degrees: Floats, period: float = 360.0) -> Floats:
    """Phases with ``0 <= phase < period``; what lies below it by round-off is zero.

    >>> in_first_turn(np.array([-90.0, -1e-14, 360.0])).tolist()
    [270.0, 0.0, 0.0]
    """
    turned = np.mod(degrees, period)
    return np.where(turned >= period - _SNAP, 0.0, turned)


def highest(D: Floats, E: Floats, P: Floats, Q: Floats, terms: Floats) -> tuple[Floats, Floats]:
    """Where ``D cos 2 phi + E sin 2 phi + 2 (P cos phi + Q sin phi)`` is highest, and how high.

    Parameters
    ----------
    D, E, P, Q : (n,) coefficients.
    terms : (n,) magnitude of the terms they were computed from, to which round-off is relative.

    Returns
    -------
    height, phase : (n,), (n,) in degrees, ``0 <= phase < 360``. The first phase if two are equally
        high to round-off, 0 if all are.

    >>> one = np.ones(1)
    >>> [part.round(12).tolist() for part in highest(one, 0 * one, 0 * one, 3 * one, one)]
    [[5.0], [90.0]]
    """
    same = _SAME * terms
    c, s, r = _principal_axes(D, E, same)
    along, across = c * P + s * Q, c * Q - s * P
    two = np.abs(along) <= same  # theta and 180 - theta are equally high
    x, y = np.where(two, 0.0, np.abs(along)), np.abs(across)
    p, q = _in_quadrant(x, y, 2.0 * r)
    height = r * (p * p - q * q) + 2.0 * (x * p + y * q)

    p, q = np.copysign(p, along), np.copysign(q, across)
    phase = in_first_turn(np.degrees(np.arctan2(s * p + c * q, c * p - s * q)))
    if two.any():
        c, s, p, q = c[two], s[two], -p[two], q[two]
        other = in_first_turn(np.degrees(np.arctan2(s * p + c * q, c * p - s * q)))
        all_same = (r[two] == 0.0) & (y[two] <= same[two])
        phase[two] = np.where(all_same, 0.0, np.minimum(phase[two], other))
    return height, phase


def highest_second(D: Floats, E: Floats, terms: Floats) -> tuple[Floats, Floats]:
    """`highest` with P = Q = 0, which repeats after half a turn: ``0 <= phase < 180``.

    >>> [float(part[0]) for part in highest_second(np.zeros(1), np.ones(1), np.ones(1))]
    [1.0, 45.0]
    """
    r = np.sqrt(D * D + E * E)
    phase = in_first_turn(np.degrees(0.5 * np.arctan2(E, D)), 180.0)
    return r, np.where(r > _SAME * terms, phase, 0.0)


def _principal_axes(D: Floats, E: Floats, same: Floats) -> tuple[Floats, Floats, Floats]:
    """Cosine and sine of half the angle of (D, E), and its length; none where it is round-off."""
    r = np.sqrt(D * D + E * E)
    r = np.where(r > same, r, 0.0)
    safe = np.where(r == 0.0, 1.0, r)
    large = np.where(r == 0.0, 1.0, np.sqrt(0.5 * (safe + np.abs(D)) / safe))
    small = np.where(r == 0.0, 0.0, 0.5 * np.abs(E) / (safe * large))
    ahead = D >= 0.0
    c, s = np.where(ahead, large, small), np.where(ahead, small, large)
    return c, np.copysign(s, E), r


def _in_quadrant(x: Floats, y: Floats, K: Floats) -> tuple[Floats, Floats]:
    """The unit vector ``(x / d, y / (d + K))``, for x, y, K >= 0 and the largest such d."""
    scale = x + y + K
    scale = 1.0 / np.where(scale == 0.0, 1.0, scale)
    x, y, K = np.maximum(x * scale, _FLOOR), y * scale, K * scale
    # Lower bounds of d: |u| > 1 at each. The last is within a small factor of d even at the cusp
    # x = 0, y = K, where two maxima merge: d d (d + K - y) >= x x max(K, y) / 2.
    A = 0.25 * x * x * np.maximum(K, y)
    d = np.minimum(np.cbrt(A), np.sqrt(A / np.maximum(K - y, _TINY)))
    d = np.maximum(d, np.maximum(x, np.sqrt(x * x + y * y) - K))
    for _ in range(_STEPS):
        e = d + K
        p, q = x / d, y / e
        pp, qq = p * p, q * q
        square = pp + qq
        length = np.sqrt(square)
        beyond = length - 1.0
        if not (beyond > _CLOSED).any():
            break
        d += square * beyond / (pp / d + qq / e)
    return p / length, q / length
