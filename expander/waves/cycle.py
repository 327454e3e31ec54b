"""One cycle of a harmonic field: ``mean + Re(f exp(+i omega t))``, f the complex amplitude.

With ``a = Re f`` and ``b = Im f`` the field at phase ``phi = omega t`` is
``mean + a cos phi - b sin phi``. Arrays are (n, c): n nodes or cells, c components.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from expander.errors import InputError
from expander.placements import Floats

Complexes = NDArray[np.complex128]
_PIECE = 4096  # nodes at a time: what is computed in between stays in the processor's cache
_BLAS_ALONE = 200_000  # multiplications of one product: no threads below this


@dataclass(frozen=True, eq=False)
class Peak:
    """An extreme over the cycle.

    Attributes
    ----------
    value : (n,) in the unit of the field; NaN where the field is not finite.
    phase : (n,) degrees, ``0 <= phase < 360``: omega t at which it occurs. The first if it occurs
        twice, to round-off; 0 if it lasts all the time.
    """

    value: Floats
    phase: Floats

    def __len__(self) -> int:
        return len(self.value)


def instant(f: ArrayLike, phase_degrees: ArrayLike, mean: ArrayLike | None = None) -> Floats:
    """The field at a phase, (n, c): ``mean + Re(f exp(i phase))``.

    Parameters
    ----------
    f : (n, c) complex amplitude.
    phase_degrees : one phase, or (n,) a phase for each node.
    mean : (n, c) real, or None for zero.

    >>> instant([[1.0 + 2.0j]], 90.0).round(12).tolist()
    [[-2.0]]
    """
    f, mean = checked(f, mean)
    phase = np.radians(np.asarray(phase_degrees, dtype=float))
    phase = phase[:, None] if phase.ndim else phase
    now = f.real * np.cos(phase) - f.imag * np.sin(phase)
    return np.asarray(now if mean is None else now + mean, dtype=float)


def standing(f: ArrayLike) -> Floats:
    """Amplitude ``Re f`` of the standing wave ``Re(f) cos(omega t)``, real, (n, c).

    Its peak is ``|Re f|`` in any norm, at phase 0 (and again at 180); with a mean, take a peak
    with this amplitude. It differs from copy to copy.

    >>> standing([[3.0 - 4.0j]]).tolist()
    [[3.0]]
    """
    return np.array(checked(f, None)[0].real, dtype=float)


def checked(f: ArrayLike, mean: ArrayLike | None) -> tuple[NDArray[Any], NDArray[Any] | None]:
    """Amplitude and mean as arrays of one shape (n, c), in the precision they came in.

    Raises
    ------
    InputError
        Not two-dimensional, of different shapes, not numbers, or a mean with an imaginary part.
    """
    f = np.asarray(f)
    if f.ndim != 2 or f.dtype.kind not in "fciu":
        raise InputError(
            f"The complex amplitude has shape {f.shape} and type {f.dtype}.",
            "Expected numbers in the shape (nodes, components); a scalar field is (nodes, 1).",
        )
    if mean is None:
        return f, None
    mean = np.asarray(mean)
    if mean.shape != f.shape or mean.dtype.kind not in "fiu":
        raise InputError(
            f"The mean has shape {mean.shape} and type {mean.dtype} beside an amplitude of shape "
            f"{f.shape}.",
            "The mean is real and has the shape of the amplitude.",
        )
    return f, mean


def pieces(
    f: NDArray[Any], mean: NDArray[Any] | None
) -> Iterator[tuple[slice, Complexes, Floats | None]]:
    """Runs of nodes with their amplitude and mean in double precision."""
    for start in range(0, len(f), _PIECE):
        part = slice(start, min(start + _PIECE, len(f)))
        steady = None if mean is None else np.asarray(mean[part], dtype=float)
        yield part, np.ascontiguousarray(f[part], dtype=complex), steady


def transformed(f: Complexes, rows: Floats) -> tuple[Floats, Floats]:
    """Real and imaginary part of ``rows @ f.T``, each (r, n)."""
    r, c = rows.shape
    both = np.zeros((2 * r, 2 * c))  # real and imaginary parts lie side by side in memory
    both[:r, 0::2] = rows
    both[r:, 1::2] = rows
    parts = by_rows(both, f.view(float))
    return parts[:r], parts[r:]


def by_rows(rows: Floats, values: Floats) -> Floats:
    """``rows @ values.T``, (r, n), without BLAS starting threads, which slow small products."""
    found = np.empty((len(rows), len(values)))
    step = max(1, _BLAS_ALONE // rows.size)
    for start in range(0, len(values), step):
        some = slice(start, start + step)
        np.matmul(rows, values[some].T, out=found[:, some])
    return found
