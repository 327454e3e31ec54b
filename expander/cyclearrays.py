"""Peaks over the cycle as arrays of the whole body.

What is asked for does not change when a value is turned or mirrored, so it is found on the sector's
components: the amplitude on the copy ``g`` is ``chi(g) f`` for one wave, and a sum of several whose
phases shift against each other. A factor common to all shifts only the moment of the peak.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from threading import Lock
from typing import Any

import numpy as np
from numpy.typing import NDArray

from expander.bodyarrays import Block, BodyArray
from expander.derived import derived_fields
from expander.fields import Field
from expander.numbering import Numbering
from expander.waves.peaks import (
    Peak,
    largest_magnitude,
    largest_principal,
    largest_von_mises,
    smallest_principal,
)

Numbers = NDArray[Any]
_MOST_KEPT = 4


@dataclass(frozen=True, eq=False)
class Cycle:
    """A harmonic field on the copies.

    Attributes
    ----------
    values : of a copy: (n, c) amplitude of the sum of all terms, relative to the first one's chi.
    pattern : of a copy: what `values` depends on. lead : of a copy: chi of the first term.
    mean, mean_lead : the same of what is added and does not change in time; None without.
    standing : only the real part moves, as ``Re(f) cos(omega t)``.
    turned_back : the field in time is that of the conjugate amplitude with ``exp(+i omega t)``.
    """

    values: Callable[[int], Numbers]
    pattern: Callable[[int], tuple[complex, ...]]
    lead: Callable[[int], complex]
    mean: Callable[[int], Numbers] | None
    mean_lead: Callable[[int], complex] | None
    standing: bool
    turned_back: bool

    def key(self, copy: int) -> tuple[Any, ...]:
        """What the peaks of a copy depend on, but for the moment when they come."""
        still = 0.0 if self.mean_lead is None else self.mean_lead(copy).real
        return (self.pattern(copy), still, self.lead(copy) if self.standing else None)

    def amplitude(self, copy: int) -> Numbers:
        """(n, c) amplitude with ``exp(+i omega t)``, without the first term's chi if that only
        shifts the moment."""
        f = self.values(copy)
        if self.standing:
            return np.asarray((f * self.lead(copy)).real + 0j)
        return np.conj(f) if self.turned_back else f

    def constant(self, copy: int) -> Numbers | None:
        """(n, c) what is added to it on this copy."""
        if self.mean is None or self.mean_lead is None:
            return None
        return np.asarray(self.mean(copy).real * self.mean_lead(copy).real)

    def shift(self, copy: int) -> float:
        """Degrees by which the moments of this copy are later than those of `amplitude`."""
        if self.standing:
            return 0.0
        angle = float(np.rad2deg(np.angle(self.lead(copy))))
        return angle if self.turned_back else -angle


Measure = Callable[[Numbers, Numbers | None], Peak]


def _measures(f: Field, wanted: Sequence[str]) -> Iterator[tuple[str, Measure]]:
    """Name of the array and the measure, for what is asked for and makes sense for the field."""
    spread = f.quantity.spread
    there = {e.name for e in derived_fields(f, wanted)}
    if f"{f.name}_von_mises" in there:
        yield f"{f.name}_von_mises_peak", lambda a, m: largest_von_mises(a, m, spread)
    if f"{f.name}_principal" in there:
        yield (
            f"{f.name}_largest_principal_peak",
            lambda a, m: largest_principal(a, m, spread=spread),
        )
        yield (
            f"{f.name}_smallest_principal_peak",
            lambda a, m: smallest_principal(a, m, spread=spread),
        )
    if f"{f.name}_magnitude" in there:
        yield (
            f"{f.name}_magnitude_peak",
            lambda a, m: largest_magnitude(a @ spread.T, None if m is None else m @ spread.T),
        )


def peak_arrays(
    f: Field,
    wanted: Sequence[str],
    cycle: Cycle,
    numbering: Numbering,
    dtype: np.dtype[np.generic],
    kept: Callable[[Numbers, int, slice], Numbers],
) -> Iterator[BodyArray]:
    """The peak over the cycle and its moment, in degrees of omega t, for each measure.

    Parameters
    ----------
    wanted : words of ``output.peaks``.
    kept : picks the rows of a copy that it writes.
    """
    for name, measure in _measures(f, wanted):
        known = _Kept(cycle, measure)

        def value(copy: int, rows: slice, known: _Kept = known) -> Block:
            return kept(known.peak(copy).value, copy, rows).astype(dtype)

        def moment(copy: int, rows: slice, known: _Kept = known) -> Block:
            phase = kept(known.peak(copy).phase, copy, rows)
            return np.asarray((phase + cycle.shift(copy)) % 360.0).astype(dtype)

        for suffix, block in (("", value), ("_phase", moment)):
            yield BodyArray(name + suffix, f.on, dtype, (), numbering.first, numbering.total,
                            block, known.release)  # fmt: skip


class _Kept:
    """The peaks of a few kinds of copies."""

    def __init__(self, cycle: Cycle, measure: Measure) -> None:
        self.cycle, self.measure = cycle, measure
        self._known: dict[tuple[Any, ...], Peak] = {}
        self._lock = Lock()

    def peak(self, copy: int) -> Peak:
        key = self.cycle.key(copy)
        with self._lock:
            if key not in self._known:
                while len(self._known) >= _MOST_KEPT:
                    del self._known[next(iter(self._known))]
                amplitude, constant = self.cycle.amplitude(copy), self.cycle.constant(copy)
                self._known[key] = self.measure(amplitude, constant)
            return self._known[key]

    def release(self) -> None:
        self._known.clear()
