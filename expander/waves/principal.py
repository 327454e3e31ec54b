"""Largest and smallest principal stress over the cycle, within a stated tolerance.

The largest principal value of ``M + A cos phi - B sin phi`` is the largest over unit vectors n of
``n.M n + r cos(phi - phi_n)``, where ``r = hypot(n.A n, n.B n)`` is at most ``rho``, the largest
norm of the alternating part. Every such curve bends down by rho at most. So between two phases a
distance 2 h apart, where the principal value is g0 and g1, it is nowhere above the parabola of
bend rho through them, whose top is

    (g0 + g1) / 2 + rho h^2 / 2 + (g1 - g0)^2 / (8 rho h^2)

or one of the ends. Intervals whose bound is above the best value found by more than the tolerance
are halved until none is left: the peak is then known to be within the tolerance, however many
local maxima there are. A node takes some fifty eigenvalues; one whose principal value hardly
changes over the cycle takes ``pi / sqrt(2 tolerance)``, a few thousand.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from expander.errors import InputError
from expander.placements import Floats
from expander.waves.circle import in_first_turn
from expander.waves.cycle import Complexes, Peak, by_rows, checked, pieces, transformed
from expander.waves.squares import highest_square

Ints = NDArray[np.intp]

# Stored xx yy zz xy yz zx to the full tensor, row by row.
STRESS = np.eye(6)[[0, 3, 5, 3, 1, 4, 5, 4, 2]]
_PAIRS = ((0, 0), (4, 4), (8, 8), (1, 3), (5, 7), (2, 6))  # xx yy zz xy yz zx in the full tensor
_FROBENIUS = np.array([1.0, 1.0, 1.0, 2.0, 2.0, 2.0])

_SQUARE = np.array([[0, 3, 5], [3, 1, 4], [5, 4, 2]])
_LOOKS = np.radians(np.arange(24) * 15.0)  # phases looked at for every node
_PARABOLAS = np.radians([7.5, 0.5, 0.02])  # steps of the refinement of a maximum
_BATCH = 1 << 16  # intervals at a time
_FORMULA = 2e-8  # error of `largest_root`, of the norm; 1e-8 was the worst of 27 million
_EQUAL = 1e-12  # relative: sampled peaks this close are equal, and the first is taken
_TINY = 1e-300


def largest_principal(
    f: ArrayLike,
    mean: ArrayLike | None = None,
    tolerance: float = 1e-6,
    spread: Floats = STRESS,
) -> Peak:
    """Largest principal stress over the cycle.

    Parameters
    ----------
    f : (n, c) complex amplitude of the stress, components xx yy zz xy yz zx by default.
    mean : (n, c) real, or None for zero.
    tolerance : the peak is nowhere higher than the value returned by more than this, relative to
        the node's largest norm (root of the sum of all nine squares) over the cycle; from 1e-7.
    spread : (9, c) stored components to the full tensor row by row, as `Quantity.spread`. What a
        plane storage leaves out is zero, and one of the principal stresses.

    Returns
    -------
    Peak
        ``value`` is the principal stress at ``phase`` to round-off. Of several phases within the
        tolerance, one.

    Raises
    ------
    InputError
        Shapes that do not match, or a tolerance out of range.

    >>> peak = largest_principal([[1.0, -1.0, 0, 2.0j, 0, 0]])
    >>> peak.value.round(9), peak.phase.round(3)
    (array([2.]), array([90.]))
    """
    f, mean = checked(f, mean)
    if not 1e-7 <= tolerance < 1.0:
        raise InputError(
            f"A tolerance of {tolerance} for principal stresses over the cycle.",
            "Expected a number from 1e-7 to 1, relative to the largest norm of the tensor.",
        )
    full = np.asarray(spread, dtype=float)
    if full.shape != (9, f.shape[1]):
        raise InputError(
            f"A stress of {f.shape[1]} components with a spread of shape {full.shape}.",
            f"Expected (9, {f.shape[1]}): stored components to the full tensor, row by row.",
        )
    rows = np.array([0.5 * (full[i] + full[j]) for i, j in _PAIRS])
    value, phase = np.full(len(f), np.nan), np.full(len(f), np.nan)
    for part, amplitude, steady in pieces(f, mean):
        finite = np.isfinite(amplitude).all(axis=1)
        if steady is not None:
            finite &= np.isfinite(steady).all(axis=1)
            steady = steady[finite]
        found = np.arange(len(f))[part][finite]
        value[found], phase[found] = _peaks(amplitude[finite], steady, rows, tolerance)
    return Peak(value, phase)


def smallest_principal(
    f: ArrayLike,
    mean: ArrayLike | None = None,
    tolerance: float = 1e-6,
    spread: Floats = STRESS,
) -> Peak:
    """Smallest principal stress over the cycle, as `largest_principal`.

    Without a mean it is minus the largest, half a cycle later.

    >>> smallest_principal([[-1.0, 0, 0, 0, 0, 0]], [[3.0, 4.0, 5.0, 0, 0, 0]]).value.round(9)
    array([2.])
    """
    f, mean = checked(f, mean)
    peak = largest_principal(-f, None if mean is None else -mean, tolerance, spread)
    return Peak(-peak.value, peak.phase)


def _peaks(
    f: Complexes, mean: Floats | None, rows: Floats, tolerance: float
) -> tuple[Floats, Floats]:
    """Value and phase in degrees for a piece of nodes, all finite."""
    cycle = _Cycle.of(f, mean, rows)
    every = np.arange(len(f))
    samples = np.array([cycle.largest(every, angle) for angle in _LOOKS])
    first = np.argmax(samples >= samples.max(axis=0) - _EQUAL, axis=0)
    best, phase = cycle.refined(every, samples[first, every], _LOOKS[first])
    changed, best, phase = _search(cycle, samples, best, phase, tolerance - 2.0 * _FORMULA)
    best[changed], phase[changed] = cycle.refined(changed, best[changed], phase[changed])
    phase = in_first_turn(np.degrees(phase))
    return cycle.scale * cycle.eigenvalue(np.radians(phase)), phase


@dataclass(frozen=True, eq=False)
class _Cycle:
    """Tensors over the cycle, as multiples of their largest norm.

    Attributes
    ----------
    a, b, m : (6, n) real and imaginary part of the amplitude, and mean: xx yy zz xy yz zx.
    rho : (n,) largest norm of the alternating part.
    scale : (n,) largest norm, which the rest is divided by.
    """

    a: Floats
    b: Floats
    m: Floats | None
    rho: Floats
    scale: Floats

    @classmethod
    def of(cls, f: Complexes, mean: Floats | None, rows: Floats) -> _Cycle:
        a, b = transformed(f, rows)
        m = None if mean is None else by_rows(rows, mean)
        swing = np.sqrt(highest_square(f, None, rows, _FROBENIUS)[0])
        scale = swing if mean is None else np.sqrt(highest_square(f, mean, rows, _FROBENIUS)[0])
        by = np.where(scale > 0.0, scale, 1.0)
        return cls(a / by, b / by, None if m is None else m / by, swing / by, by)

    def tensors(self, nodes: Ints, phase: Floats | np.float64) -> Floats:
        """(6, k) at a phase in radians, for nodes (k,)."""
        T = self.a[:, nodes] * np.cos(phase) - self.b[:, nodes] * np.sin(phase)
        return T if self.m is None else T + self.m[:, nodes]

    def largest(self, nodes: Ints, phase: Floats | np.float64) -> Floats:
        """Largest principal value to `_FORMULA`, (k,)."""
        return largest_root(*self.tensors(nodes, phase))

    def eigenvalue(self, phase: Floats) -> Floats:
        """Largest principal value of every node at its phase, to round-off."""
        T = self.tensors(np.arange(len(phase)), phase)
        return np.asarray(np.linalg.eigvalsh(T[_SQUARE].transpose(2, 0, 1))[:, -1])

    def refined(self, nodes: Ints, best: Floats, phase: Floats) -> tuple[Floats, Floats]:
        """Values and phases moved to the top of the parabola through three phases, if higher."""
        for step in _PARABOLAS:
            before, after = self.largest(nodes, phase - step), self.largest(nodes, phase + step)
            bend = 2.0 * best - before - after
            move = 0.5 * step * (after - before) / np.maximum(bend, _TINY)
            there = phase + np.clip(move, -step, step)
            value = self.largest(nodes, there)
            higher = value > best
            best, phase = np.where(higher, value, best), np.where(higher, there, phase)
        return best, phase


def _search(
    cycle: _Cycle, samples: Floats, best: Floats, phase: Floats, tolerance: float
) -> tuple[Ints, Floats, Floats]:
    """Nodes whose best value was not the peak, and the best values and phases of all nodes."""
    best, phase, start = best.copy(), phase.copy(), best
    width = np.pi / len(samples)  # half of an interval
    nodes = np.tile(np.arange(len(best)), len(samples))
    middle = np.repeat(_LOOKS + width, len(best))
    waiting = [(width, nodes, middle, samples.ravel(), np.roll(samples, -1, axis=0).ravel())]
    while waiting:  # the finest first: few wait, however many have to be looked at
        width, nodes, middle, left, right = waiting.pop()
        open_ = _bound(left, right, cycle.rho[nodes], width) > best[nodes] + tolerance
        nodes, middle, left, right = nodes[open_], middle[open_], left[open_], right[open_]
        if len(nodes) > _BATCH:
            for part in np.array_split(np.arange(len(nodes)), -(-len(nodes) // _BATCH)):
                waiting.append((width, nodes[part], middle[part], left[part], right[part]))
            continue
        if not len(nodes):
            continue
        value = cycle.largest(nodes, middle)
        higher = np.flatnonzero(value > best[nodes])
        higher = higher[np.argsort(value[higher], kind="stable")]  # a node's last is its highest
        best[nodes[higher]], phase[nodes[higher]] = value[higher], middle[higher]
        width = 0.5 * width
        nodes, middle = np.tile(nodes, 2), np.concatenate([middle - width, middle + width])
        left, right = np.concatenate([left, value]), np.concatenate([value, right])
        waiting.append((width, nodes, middle, left, right))
    return np.flatnonzero(best > start), best, phase


def _bound(left: Floats, right: Floats, rho: Floats, width: float) -> Floats:
    """What no curve of bend rho or less passes between its ends, ``2 width`` apart."""
    rise, bend = np.abs(right - left), rho * width * width
    top = 0.5 * (left + right + bend) + rise * rise / np.maximum(8.0 * bend, _TINY)
    return np.where(rise < 2.0 * bend, top, np.maximum(left, right))


def largest_root(xx: Floats, yy: Floats, zz: Floats, xy: Floats, yz: Floats, zx: Floats) -> Floats:
    """Largest eigenvalue of symmetric tensors, (n,), in closed form.

    Right to 2e-8 of the tensor's norm where the two largest are equal, else near to round-off.

    Source: O. K. Smith, Eigenvalues of a symmetric 3 x 3 matrix, Comm. ACM 4 (1961) 168.

    >>> largest_root(*np.array([[1.0], [1.0], [0.0], [2.0], [0.0], [0.0]])).round(9).tolist()
    [3.0]
    """
    third = (xx + yy + zz) / 3.0
    x, y, z = xx - third, yy - third, zz - third
    xy2, yz2, zx2 = xy * xy, yz * yz, zx * zx
    p2 = ((x * x + y * y + z * z) * 0.5 + xy2 + yz2 + zx2) / 3.0
    p = np.sqrt(p2)
    determinant = x * (y * z - yz2) - y * zx2 - z * xy2 + 2.0 * xy * yz * zx
    cosine = np.clip(0.5 * determinant / np.maximum(p2 * p, _TINY), -1.0, 1.0)
    return np.asarray(third + 2.0 * p * np.cos(np.arccos(cosine) / 3.0))
