"""Equilibrium: do loads and reactions of the whole body balance, and are they what was meant.

The commonest error of a half model is a factor of 2: a load in the cut plane belongs to the
modelled part by half only, and what the program listed may be the whole of it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from expander.audit.totals import Numbers, Resultant, of_sector, scale_of, whole
from expander.groups import Group
from expander.placements import Floats

BALANCED = 1e-4  # results in single precision, or printed with six digits, keep this
_ONE_FACTOR = 1e-3  # relative misfit within which two resultants differ by a factor only


@dataclass(frozen=True, eq=False)
class Balance:
    """How well applied loads and reactions balance.

    Attributes
    ----------
    force, moment : (3,) what is left over, about the point of the applied resultant.
    relative : the larger of both, over the scales given.
    ratio : applied load over minus the reactions, where one number says it for all components.
    """

    force: Numbers
    moment: Numbers
    relative: float
    ratio: float | None


def _over(size: float, scale: float) -> float:
    return size / scale if scale > 0.0 else (0.0 if size == 0.0 else np.inf)


def _factor(found: Numbers, expected: Numbers) -> float | None:
    """The real ``k`` with ``found = k expected``, by least squares; None if there is none."""
    length = float(np.vdot(expected, expected).real)
    if length == 0.0:
        return None
    k = float(np.vdot(expected, found).real) / length
    misfit = float(np.linalg.norm(found - k * expected))
    size = max(float(np.linalg.norm(found)), float(np.sqrt(length)))
    return k if misfit <= _ONE_FACTOR * size else None


def balance(
    applied: Resultant, reaction: Resultant, scale_force: float, scale_moment: float
) -> Balance:
    """Equilibrium of the whole body.

    Parameters
    ----------
    applied, reaction : of the **whole body** (`whole`), reactions with the sign of forces on the
        body. Sums over some copies only do not balance.
    scale_force, scale_moment : what the residual is compared with, as from `scale_of` times the
        number of copies.

    Examples
    --------
    >>> up, down = (Resultant(np.array([0.0, 0.0, f]), np.zeros(3), np.zeros(3)) for f in (1, -2))
    >>> found = balance(down, up, 2.0, 1.0)
    >>> found.force.tolist(), found.relative, found.ratio
    ([0.0, 0.0, -1.0], 0.5, 2.0)
    """
    back = reaction.at(applied.about)
    rest = applied + back
    relative = max(
        _over(float(np.linalg.norm(rest.force)), scale_force),
        _over(float(np.linalg.norm(rest.moment)), scale_moment),
    )
    arm = scale_moment / scale_force if min(scale_moment, scale_force) > 0.0 else 1.0
    found = np.concatenate([applied.force, applied.moment / arm])
    expected = -np.concatenate([back.force, back.moment / arm])
    return Balance(rest.force, rest.moment, relative, _factor(found, expected))


@dataclass(frozen=True, eq=False)
class InPlane:
    """The part of the load that sits at seam nodes.

    Attributes
    ----------
    share : its resultant in the whole body.
    fraction : magnitudes of the forces at seam nodes over those of all.
    divided : the balance that dividing them by the number of copies at the node would give.
    balances : whether that balance closes while the load as given does not.
    words : one sentence.
    """

    share: Resultant
    fraction: float
    divided: Balance
    balances: bool
    words: str


def in_plane_share(
    points: NDArray[np.floating],
    forces: Numbers,
    multiplicity: NDArray[np.integer],
    group: Group,
    chi: Numbers,
    reaction: Resultant,
    tolerance: float = BALANCED,
) -> InPlane:
    """Whether loads at seam nodes were given in full, and not as the sector's share.

    Parameters
    ----------
    points, forces : (n, 3), the sector's own values.
    multiplicity : (n,) how many copies (counting a node's partners) share each node; 1 elsewhere.
    chi : (copies,).
    reaction : of the whole body; or minus the resultant that the load should have.
    tolerance : relative to the sum of the force magnitudes.

    Examples
    --------
    >>> from expander.groups import CutPlane, make_group
    >>> mid = make_group([CutPlane("mid", np.array([1.0, 0.0, 0.0]), np.zeros(3))], None)
    >>> down = Resultant(np.array([0.0, 0.0, 6.0]), np.zeros(3), np.zeros(3))
    >>> print(in_plane_share(np.zeros((1, 3)), np.array([[0.0, 0.0, -6.0]]), np.array([2]), mid,
    ...                      np.ones(2), down).words)
    100 % of the load sits at nodes that copies share; halved there it balances: was a load in a \
cut plane given in full, and not by half?
    """
    shared = np.asarray(multiplicity) > 1
    about = reaction.about

    def total(values: Numbers) -> Resultant:
        return whole(of_sector(points, values, None, about), group, chi)

    scales = scale_of(points, forces, None, about)
    scale_force, scale_moment = (len(group) * s for s in scales)
    on_seam = np.where(shared[:, None], forces, 0.0)
    share = total(on_seam)
    given = balance(total(forces), reaction, scale_force, scale_moment)
    less = total(forces / np.asarray(multiplicity)[:, None])
    divided = balance(less, reaction, scale_force, scale_moment)
    fraction = _over(float(np.linalg.norm(on_seam, axis=1).sum()), scales[0])
    balances = given.relative > tolerance >= divided.relative
    words = f"{100 * fraction:.3g} % of the load sits at nodes that copies share"
    if balances:
        loaded = shared & (np.abs(forces) > 0.0).any(axis=1)
        most = int(np.asarray(multiplicity)[loaded].max())
        by, share_words = ("halved", "half") if most == 2 else (f"divided by up to {most}", "share")
        where = "a cut plane" if group.planes else "a seam"
        words += (
            f"; {by} there it balances: was a load in {where} given in full, and not by "
            f"{share_words}?"
        )
    elif given.relative <= tolerance:
        words += "; the load balances as it is given"
    else:
        words += "; divided by the number of copies there it does not balance either"
    return InPlane(share, fraction, divided, balances, words)


@dataclass(frozen=True, eq=False)
class Expected:
    """A total of the whole body against the one that the user expects.

    Attributes
    ----------
    found, expected : (3,). ratio : least-squares factor along the expected direction, if it has
        one. ok : whether they agree. words : one sentence.
    """

    found: Numbers
    expected: Floats
    ratio: float | None
    ok: bool
    words: str


def against_expected(
    found: Numbers,
    expected: ArrayLike,
    tolerance: float,
    group: Group | None = None,
    name: str = "force",
    scale: float = 0.0,
) -> Expected:
    """Compare a total with the expected one, and say what a known factor between them means.

    Parameters
    ----------
    found, expected : (3,) of the whole body.
    tolerance : relative to the length of `expected`, or to `scale` if nothing is expected.
    group : gives the factors N and |G| their meaning.
    name : of what is compared, "force" or "moment".
    scale : sum of magnitudes, for an expected total of zero.

    Examples
    --------
    >>> print(against_expected(np.array([0.0, 0.0, -4.0]), [0, 0, -2], 1e-3).words)
    the whole body has 2 times the force expected: was a load in a cut plane given in full, and \
not by half?
    """
    want = np.asarray(expected, dtype=float)
    length = float(np.linalg.norm(want))
    off = float(np.linalg.norm(found - want))
    ok = bool(off <= tolerance * (length if length > 0.0 else scale))
    ratio = float((want @ found).real) / length**2 if length > 0.0 else None
    shown = f"({', '.join(f'{c:.6g}' for c in np.asarray(found))})"
    wanted = f"({', '.join(f'{c:.6g}' for c in want)})"
    if ok:
        return Expected(found, want, ratio, ok, f"the whole body has the {name} expected, {shown}")
    factor = _factor(found, want)
    if factor is None or factor == 0.0 or not np.any(found):
        words = f"the whole body has the {name} {shown}, expected {wanted}"
        return Expected(found, want, ratio, ok, words)
    words = f"the whole body has {factor:.4g} times the {name} expected"
    hints = _hints(factor, group, tolerance)
    if hints:
        words += f": {', or '.join(hints)}?"
    return Expected(found, want, ratio, ok, words)


def _hints(factor: float, group: Group | None, tolerance: float) -> list[str]:
    """Questions that a known factor suggests, most likely first."""
    copies = 1 if group is None else len(group)
    sectors = 0 if group is None or group.axis is None else group.axis.sectors
    where = "a cut plane" if group is None or group.planes else "the sector's seam"
    known = [
        (-1.0, "is it a reaction, or the direction the other way round"),
        (2.0, f"was a load in {where} given in full, and not by half"),
        (0.5, f"was a load in {where} halved twice"),
    ]
    if sectors > 2:
        known += [
            (sectors, "was a load on the axis given in full, and not by 1/N"),
            (1.0 / sectors, "was a load on the axis divided by N twice"),
        ]
    if copies > 1:
        known += [
            (copies, "was the load of the whole body given to the modelled part"),
            (1.0 / copies, "was the modelled part's load divided by the number of copies, or is "
             "only one copy loaded"),
        ]  # fmt: skip
    near = max(tolerance, _ONE_FACTOR)
    return [words for value, words in known if abs(factor - value) <= near * abs(value)]
