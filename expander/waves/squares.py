"""A quadratic form as a sum of squares, and the highest value of the sum over the cycle."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.linalg.lapack import dpstrf

from expander.errors import InputError
from expander.placements import Floats
from expander.waves.circle import EPS, highest, highest_second
from expander.waves.cycle import Complexes, by_rows, transformed


def highest_square(
    f: Complexes, mean: Floats | None, rows: Floats, weights: Floats
) -> tuple[Floats, Floats]:
    """The highest sum of weighted squares of rows over the cycle, and its phase."""
    a, b = transformed(f, rows)
    wa = weights[:, None] * a
    aa, ab = (wa * a).sum(axis=0), (wa * b).sum(axis=0)
    bb = weights @ (b * b)
    D, level = 0.5 * (aa - bb), 0.5 * (aa + bb)
    if mean is None:
        height, phase = highest_second(D, -ab, level)
        return level + height, phase
    m = by_rows(rows, mean)
    wm = weights[:, None] * m
    level = level + (wm * m).sum(axis=0)
    height, phase = highest(D, -ab, (wm * a).sum(axis=0), -(wm * b).sum(axis=0), level)
    return np.maximum(level + height, 0.0), phase


def sum_of_squares(form: NDArray[np.float64], size: int) -> tuple[Floats, Floats]:
    """The form as a sum of squares, ``rows^T diag(weights) rows``: (r, c) and (r,).

    Differences are then taken between components, before squaring, so that the von Mises stress of
    a state near to hydrostatic keeps its digits. By Cholesky's factors with pivoting.
    """
    if form.shape != (size, size) or not np.isfinite(form).all():
        raise InputError(
            f"The quadratic form has shape {form.shape} for fields of {size} components.",
            f"Expected finite numbers in the shape ({size}, {size}).",
        )
    scale = np.abs(form).max(initial=0.0)
    if scale == 0.0:
        return np.zeros((1, size)), np.zeros(1)
    upper, pivots, rank, _ = dpstrf(form / scale, tol=size * 8.0 * EPS)
    upper = np.triu(upper)[:rank]
    diagonal = upper.diagonal().copy()
    rows = np.zeros((rank, size))
    rows[:, pivots - 1] = upper / diagonal[:, None]
    weights = scale * diagonal**2
    if np.abs(rows.T @ (weights[:, None] * rows) - form).max() > 1e-12 * scale:
        raise InputError(
            "The quadratic form is not symmetric, or is negative for some values.",
            "Its square root is the measure: v . form v must be positive or zero for every v.",
        )
    return rows, weights
