"""Peaks over the cycle of ``mean + Re(f exp(+i omega t))``: magnitude, von Mises, any such measure.

A measure is a quadratic form: ``v . form v`` is its square. Without a mean, with the form's inner
product, a = Re f and b = Im f, the square's peak is ``(aa + bb)/2 + hypot((aa - bb)/2, ab)``, the
semi-major axis of the ellipse that the value runs through. With a mean the square over the cycle is
a trigonometric polynomial of degree 2; `circle.highest` finds its highest point.
Principal stresses, which are not quadratic, are in `principal`.

Squares are formed: values below 1e-150 or above 1e150 are beyond it.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from expander.errors import InputError
from expander.placements import Floats
from expander.waves.circle import in_first_turn
from expander.waves.cycle import Peak, checked, instant, pieces, standing
from expander.waves.principal import STRESS, largest_principal, smallest_principal
from expander.waves.squares import highest_square, sum_of_squares

__all__ = [
    "STRESS",
    "Peak",
    "instant",
    "largest_magnitude",
    "largest_principal",
    "largest_quadratic",
    "largest_value",
    "largest_von_mises",
    "smallest_principal",
    "smallest_value",
    "standing",
    "von_mises_form",
]


def largest_value(f: ArrayLike, mean: ArrayLike | None = None) -> Peak:
    """Largest value of a scalar, ``mean + |f|``; f and mean (n, 1).

    >>> largest_value([[3.0j]], [[1.0]])
    Peak(value=array([4.]), phase=array([270.]))
    """
    return _extreme(f, mean, 1.0)


def smallest_value(f: ArrayLike, mean: ArrayLike | None = None) -> Peak:
    """Smallest value of a scalar, ``mean - |f|``; f and mean (n, 1).

    >>> smallest_value([[3.0j]], [[1.0]])
    Peak(value=array([-2.]), phase=array([90.]))
    """
    return _extreme(f, mean, -1.0)


def largest_magnitude(f: ArrayLike, mean: ArrayLike | None = None) -> Peak:
    """Largest magnitude of a vector of any number of components, or ``|value|`` of a scalar.

    Parameters
    ----------
    f : (n, c) complex amplitude.
    mean : (n, c) real, or None for zero.

    >>> largest_magnitude([[3.0, 2.0j, 0.0]])
    Peak(value=array([3.]), phase=array([0.]))
    >>> largest_magnitude([[3.0, 2.0j, 0.0]], [[0.0, 5.0, 0.0]]).phase
    array([270.])
    """
    f, mean = checked(f, mean)
    return largest_quadratic(f, mean, np.eye(f.shape[1]))


def largest_von_mises(f: ArrayLike, mean: ArrayLike | None = None, spread: Floats = STRESS) -> Peak:
    """Largest von Mises stress over the cycle.

    Parameters
    ----------
    f : (n, c) complex amplitude of the stress, components xx yy zz xy yz zx by default.
    mean : (n, c) real, or None for zero.
    spread : (9, c) stored components to the full tensor row by row, as `Quantity.spread`, for any
        other storage.

    >>> largest_von_mises([[2.0, 0, 0, 1.0j, 0, 0]])
    Peak(value=array([2.]), phase=array([0.]))
    """
    return largest_quadratic(f, mean, von_mises_form(spread))


def von_mises_form(spread: Floats = STRESS) -> Floats:
    """The square of the von Mises stress as a form on stored components, (c, c): 3/2 s : s.

    >>> form = von_mises_form()
    >>> form[:3, :3].round(12).tolist(), form.diagonal()[3:].round(12).tolist()
    ([[1.0, -0.5, -0.5], [-0.5, 1.0, -0.5], [-0.5, -0.5, 1.0]], [3.0, 3.0, 3.0])
    """
    unit = np.eye(3).ravel()
    return np.asarray(1.5 * spread.T @ spread - 0.5 * np.outer(unit @ spread, unit @ spread))


def largest_quadratic(f: ArrayLike, mean: ArrayLike | None, form: ArrayLike) -> Peak:
    """Largest ``sqrt(v . form v)`` of the field v over the cycle.

    Parameters
    ----------
    f : (n, c) complex amplitude.
    mean : (n, c) real, or None for zero.
    form : (c, c) symmetric, no negative eigenvalue: the measure's square.

    Returns
    -------
    Peak
        In the unit that the form gives. Without a mean the value recurs half a cycle later, so
        ``phase < 180``.

    Raises
    ------
    InputError
        Shapes that do not match, or a form that is negative for some v.

    >>> peak = largest_quadratic([[1.0, 1.0j]], [[2.0, 0.0]], [[1.0, 0.0], [0.0, 4.0]])
    >>> peak.value ** 2, peak.phase.round(4)
    (array([9.33333333]), array([48.1897]))
    """
    f, mean = checked(f, mean)
    rows, weights = sum_of_squares(np.asarray(form, dtype=float), f.shape[1])
    value, phase = np.empty(len(f)), np.empty(len(f))
    with np.errstate(invalid="ignore", over="ignore"):
        for part, amplitude, steady in pieces(f, mean):
            square, phase[part] = highest_square(amplitude, steady, rows, weights)
            value[part] = np.sqrt(square)
    phase[np.isnan(value)] = np.nan
    return Peak(value, phase)


def _extreme(f: ArrayLike, mean: ArrayLike | None, sign: float) -> Peak:
    f, mean = checked(f, mean)
    if f.shape[1] != 1:
        raise InputError(
            f"A field of {f.shape[1]} components has no largest or smallest value.",
            "Pass one component, (n, 1), or ask for the largest magnitude.",
        )
    amplitude = np.asarray(f[:, 0], dtype=complex)
    with np.errstate(invalid="ignore"):
        swing = np.hypot(amplitude.real, amplitude.imag)
        phase = in_first_turn(np.degrees(np.arctan2(-sign * amplitude.imag, sign * amplitude.real)))
        value = sign * swing if mean is None else mean[:, 0] + sign * swing
    phase[swing == 0.0] = 0.0
    phase[np.isnan(value)] = np.nan
    return Peak(np.asarray(value, dtype=float), phase)
