"""Colours: maps that keep their order in grey and for every kind of colour vision.

Pale is nothing, deep is much, in both maps: on white paper the places that matter stand out, and
the form of the body is seen in the rest. Numbers without a sign run from cream over green and blue
to violet, the way of viridis (S. van der Walt and N. Smith) backwards; signed numbers from blue
over pale grey to rust, as vik does (F. Crameri, Scientific colour maps). Both are even steps of
lightness along a path in B. Ottosson's Oklab space. Labels take the palette of M. Okabe and K. Ito.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

Colour = tuple[int, int, int]

INK: Colour = (38, 42, 48)
SOFT_INK: Colour = (104, 110, 118)
PAPER: Colour = (255, 255, 255)
OUTLINE: Colour = (214, 0, 122)  # the modelled sector; a hue that no map below contains
BORDER: Colour = (70, 74, 82)  # between copies
UNDEFORMED: Colour = (140, 146, 154)
MISSING: Colour = (168, 168, 168)
PLAIN: Colour = (176, 190, 204)  # a body without any field

_RISING = "f1f2e2 d0e5b7 a0d6a3 69c29a 35a99c 0c8d9e 166da1 364997 402980 3c0f62 2f0342"
_TWO_SIDED = "011b55 07468b 2f7ab3 6dadd2 b3d7e9 eeede8 eacab0 dd8f5e bf511e 89240c 450d0a"
_LABELS = "0072b2 e69f00 009e73 cc79a7 56b4e9 d55e00 f0e442 7f7f7f"

Table = NDArray[np.uint8]


def _stops(hexes: str) -> NDArray[np.float64]:
    return np.array([list(bytes.fromhex(stop)) for stop in hexes.split()], dtype=float)


def _interpolated(hexes: str, count: int = 256) -> Table:
    stops = _stops(hexes)
    places = np.linspace(0, len(stops) - 1, count)
    columns = [np.interp(places, np.arange(len(stops)), stops[:, c]) for c in range(3)]
    return np.rint(np.stack(columns, axis=1)).astype(np.uint8)


def rising() -> Table:
    """(256, 3): for numbers without a sign."""
    return _interpolated(_RISING)


def two_sided() -> Table:
    """(256, 3): for signed numbers, zero in the middle."""
    return _interpolated(_TWO_SIDED)


def for_labels(count: int) -> Table:
    """(count, 3): one colour for each label; they repeat after eight."""
    stops = _stops(_LABELS).astype(np.uint8)
    return np.asarray(stops[np.arange(count) % len(stops)])


def rounded(value: float) -> float:
    """The nearest of 1, 2 or 5 times a power of ten, on a logarithmic scale.

    >>> rounded(173.0), rounded(0.0034), rounded(8.1)
    (200.0, 0.005, 10.0)
    """
    if not value > 0 or not math.isfinite(value):
        return 0.0
    power = math.floor(math.log10(value))
    choices = [float(f"{m}e{p}") for p in (power, power + 1) for m in (1, 2, 5)]
    return min(choices, key=lambda c: abs(math.log(c / value)))


def ticks(low: float, high: float, wanted: int = 5) -> list[float]:
    """Round numbers from `low` to `high`, about so many.

    >>> ticks(0.0, 212.0)
    [0.0, 50.0, 100.0, 150.0, 200.0]
    """
    step = rounded((high - low) / wanted)
    if step == 0.0:
        return [low]
    first, last = math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9)
    return [float(f"{k * step:.12g}") for k in range(first, last + 1)]


def power_of_ten(largest: float) -> int:
    """The exponent, a multiple of three, that is taken out of the numbers of a scale.

    >>> power_of_ten(212.0), power_of_ten(3.1e8), power_of_ten(2e-6)
    (0, 6, -6)
    """
    if not largest > 0 or not math.isfinite(largest) or 0.1 <= largest < 1e5:
        return 0
    return 3 * math.floor(math.log10(largest) / 3)


def power_words(exponent: int) -> str:
    """``10⁶``; nothing for an exponent of zero.

    >>> power_words(-3)
    '10⁻³'
    """
    return "" if exponent == 0 else "10" + str(exponent).translate(_RAISED)


_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


def number(value: float, digits: int = 3) -> str:
    """A number as it is printed: a real minus sign, no more digits than asked.

    >>> number(-0.5), number(123456.0), number(2.5e-9), number(0.0)
    ('−0.5', '123\\u2009000', '2.5·10⁻⁹', '0')
    """
    if value == 0:
        return "0"
    exponent = math.floor(math.log10(abs(value)))
    if -4 <= exponent < 6:
        rounded_off = float(f"{value:.{digits}g}")
        decimals = max(0, digits - 1 - exponent)
        text = f"{rounded_off:.{decimals}f}"
        if "." in text:
            text = text.rstrip("0").rstrip(".")
        whole, dot, rest = text.partition(".")
        if len(whole.lstrip("-")) > 4:
            whole = f"{int(whole):,}".replace(",", "\u2009")
        text = whole + dot + rest
    else:
        mantissa, _, power = f"{value:.{digits - 1}e}".partition("e")
        mantissa = mantissa.rstrip("0").rstrip(".") if "." in mantissa else mantissa
        text = f"{mantissa}·10{str(int(power)).translate(_RAISED)}"
    return text.replace("-", "−", 1) if value < 0 else text


def count_words(count: int) -> str:
    """A whole number in groups of three digits.

    >>> count_words(1002240)
    '1\u2009002\u2009240'
    """
    return f"{count:,}".replace(",", "\u2009")


def scale_numbers(values: Sequence[float], exponent: int) -> list[str]:
    """Tick labels with one number of decimals.

    >>> scale_numbers([0.0, 0.5, 1.0], 0)
    ['0', '0.5', '1.0']
    """
    reduced = [v / 10.0**exponent for v in values]
    steps = [b - a for a, b in pairwise(reduced)]
    step = min(steps, default=max((abs(r) for r in reduced), default=1.0) or 1.0)
    decimals = max(0, -math.floor(math.log10(step) + 1e-9)) if step > 0 else 0
    return ["0" if r == 0 else f"{r:.{decimals}f}".replace("-", "−") for r in reduced]
