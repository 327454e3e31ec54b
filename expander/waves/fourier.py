"""Loads of all copies as a sum of load behaviours, and back.

On ``N`` sectors, each sector's load ``f_k`` turned back to sector 0 (turned components):

    F_h = 1/N sum_k f_k exp(-i h k alpha),   f_k = sum_h w_h Re(F_h exp(+i h k alpha)),

``alpha = 2 pi/N``, each ``h = 0 .. N/2`` once, weights ``w`` of 1 for ``h = 0`` and ``N/2`` and 2
between: the discrete Fourier transform of real numbers. For any group of copies the same sum over
its characters ``chi`` is the projection

    P = 1/|G| sum_g conj(chi(g)) rho(g)^-1 f_g

(J.-P. Serre, Linear Representations of Finite Groups, 2.6, for characters of degree 1).
"""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from expander.behaviours import LOAD_WORDS, Behaviour, Factors, factors
from expander.errors import InputError
from expander.groups import Group
from expander.placements import Floats
from expander.quantities import Quantity
from expander.resolve import Numbers, acting, product

Complex = NDArray[np.complex128]


def weights(sectors: int) -> Floats:
    """How often each h = 0 .. N/2 counts, (N//2 + 1,): 1, 2 for 0 < h < N/2, 1 for N/2.

    >>> weights(4).tolist(), weights(5).tolist()
    ([1.0, 2.0, 1.0], [1.0, 2.0, 2.0])
    """
    h = np.arange(sectors // 2 + 1)
    return np.where((h == 0) | (2 * h == sectors), 1.0, 2.0)


def amplitudes(loads: ArrayLike) -> Complex:
    """``F_h`` of real sector loads in turned components: (N, ...) to (N//2 + 1, ...).

    The unit is that of the loads.

    Raises
    ------
    InputError
        For complex loads: their h and -h are independent, so that these are half of them.

    Examples
    --------
    >>> amplitudes([4.0, 0.0, 0.0, 0.0]).tolist()
    [(1+0j), (1+0j), (1+0j)]
    """
    f = np.asarray(loads)
    if np.iscomplexobj(f):
        raise InputError(
            "The sector loads are complex: waves in both directions are independent there.",
            "Give the real part and the imaginary part as two loads.",
        )
    return np.asarray(np.fft.rfft(f.astype(float), axis=0) / len(f))


def sector_loads(found: ArrayLike, sectors: int) -> Floats:
    """``f_k = sum_h w_h Re(F_h exp(+i h k alpha))``: (N//2 + 1, ...) to (N, ...).

    >>> sector_loads([1.0, 1.0, 1.0], 4).tolist()
    [4.0, 0.0, 0.0, 0.0]
    """
    F = np.asarray(found, dtype=complex)
    if len(F) != sectors // 2 + 1:
        raise InputError(
            f"{len(F)} amplitudes are given for {sectors} sectors.",
            f"Expected one for each of h = 0 to {sectors // 2}.",
        )
    return np.asarray(np.fft.irfft(F * sectors, n=sectors, axis=0))


def energy(found: ArrayLike, sectors: int) -> float:
    """``N sum_h w_h |F_h|^2``, which is ``sum_k |f_k|^2`` (Parseval); the loads' unit squared.

    >>> round(energy(amplitudes([1.0, 2.0, 3.0]), 3), 9)
    14.0
    """
    F = np.asarray(found, dtype=complex)
    squares = (np.abs(F) ** 2).reshape(len(F), -1).sum(axis=1)
    return float(sectors * (weights(sectors) @ squares))


@dataclass(frozen=True, eq=False)
class Character:
    """One load behaviour of the group.

    Attributes
    ----------
    name : of the case that it makes, such as "even", "odd_even", "h2", "h2_odd".
    behaviour : its words; "+" is the phase of a complex one.
    chi : (copies,).
    weight : 2 for a complex one, which stands for its conjugate too; 1 otherwise.
    """

    name: str
    behaviour: Behaviour
    chi: Factors
    weight: float


def characters(group: Group) -> tuple[Character, ...]:
    """Every one-dimensional load behaviour of a group: all parities of its planes and all h.

    Their weights add up to the number of copies exactly if every load on the whole body is a sum
    of them (see `complete`).

    Examples
    --------
    >>> from expander.groups import CutPlane, CyclicAxis, make_group
    >>> from expander.placements import unit
    >>> z = CutPlane("mid", unit([0, 0, 1]), np.zeros(3))
    >>> [c.name for c in characters(make_group([z], None))]
    ['even', 'odd']
    >>> ring = make_group([z], CyclicAxis(3, unit([0, 0, 1]), np.zeros(3)))
    >>> [(c.name, c.weight) for c in characters(ring)]
    [('h0_even', 1.0), ('h0_odd', 1.0), ('h1_even', 2.0), ('h1_odd', 2.0)]
    """
    found = []
    last = group.axis.sectors // 2 if group.axis else 0
    for h in range(last + 1):
        for words in itertools.product(LOAD_WORDS, repeat=len(group.planes)):
            load = {p.name: word for p, word in zip(group.planes, words, strict=True)}
            behaviour = Behaviour(load, h, "+")
            try:
                chi = factors(group, behaviour)
            except InputError:
                continue  # these words contradict a relation of the group
            parities = ["even" if word == LOAD_WORDS[0] else "odd" for word in words]
            name = "_".join(([f"h{h}"] if group.axis else []) + parities)
            found.append(Character(name, behaviour, chi, 2.0 if np.iscomplexobj(chi) else 1.0))
    return tuple(found)


def complete(group: Group, found: Sequence[Character]) -> bool:
    """Whether every load is a sum of these behaviours: not where planes meet at 180/m degrees with
    m > 2 or go through the axis of three or more sectors."""
    return sum(c.weight for c in found) == len(group)


def component(chi: Factors, turned: Any) -> Numbers:
    """``1/|G| sum_g conj(chi(g)) t_g`` of loads in turned components.

    Parameters
    ----------
    chi : (copies,).
    turned : (copies, k), an array or a sparse matrix of scipy.

    Returns
    -------
    (k,) real if chi and the loads are.
    """
    return np.asarray(turned.T @ np.conj(chi)) / len(chi)


def turned_back(group: Group, values: Numbers, quantity: Quantity) -> Numbers:
    """``rho(g)^-1 f_g`` of values (copies, n, c) in global components: the same in turned ones."""
    _check_linear(quantity)
    back = [
        product(f, acting(quantity, g.Q.T, 1.0, "load"))
        for g, f in zip(group.placements, values, strict=True)
    ]
    return np.stack(back)


def project(group: Group, chi: Factors, values: Numbers, quantity: Quantity) -> Numbers:
    """The part of a load that takes the factor chi from copy to copy.

    Parameters
    ----------
    chi : (copies,) a one-dimensional character, see `expander.behaviours.factors`.
    values : (copies, n, c) stored components at the image of each node, in global directions.
    quantity : a linear one.

    Returns
    -------
    (n, c) on the sector, in the unit of the values; complex if chi or the values are. `carried`
    takes it to the copies.

    Raises
    ------
    InputError
        If the quantity is not linear.

    Examples
    --------
    A force along y at one of two mirrored nodes is half even and half odd:

    >>> from expander.groups import CutPlane, make_group
    >>> from expander.placements import unit
    >>> from expander.quantities import quantity
    >>> half = make_group([CutPlane("mid", unit([1, 0, 0]), np.zeros(3))], None)
    >>> force = np.array([[[0.0, 3.0, 0.0]], [[0.0, 0.0, 0.0]]])
    >>> [project(half, c.chi, force, quantity("polar vector", 3)).tolist()
    ...  for c in characters(half)]
    [[[0.0, 1.5, 0.0]], [[0.0, 1.5, 0.0]]]
    """
    values = np.asarray(values)
    flat = turned_back(group, values, quantity).reshape(len(group), -1)
    return component(chi, flat).reshape(values.shape[1:])


def carried(group: Group, character: Character, part: Numbers, quantity: Quantity) -> Floats:
    """A part on all copies, (copies, n, c): ``w Re(chi(g) rho(g) P)``.

    The parts of a real load add up to it if the behaviours are complete.
    """
    _check_linear(quantity)
    images = [
        product(part, acting(quantity, g.Q, chi, "load")).real
        for g, chi in zip(group.placements, character.chi.tolist(), strict=True)
    ]
    return np.asarray(character.weight * np.stack(images))


def _check_linear(quantity: Quantity) -> None:
    if not quantity.linear:
        raise InputError(
            f"A {quantity.kind.name} is not linear in the load: it has no parts that add up.",
            "Split forces, moments or heat flows, and compute such values from their results.",
        )
