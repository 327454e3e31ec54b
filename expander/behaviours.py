"""Load behaviours: the factor chi that the linear response takes from copy to copy.

``chi`` is a character of the group: ``chi(g1 g2) = chi(g1) chi(g2)``. It is +1 or -1 for a
symmetric or antisymmetric cut plane and ``exp(i h k alpha)``, ``alpha = 2 pi/N``, on sector ``k``
of ``N`` for ``h`` nodal diameters; it is real for ``h = 0`` and ``h = N/2``.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from expander.errors import InputError, NotYetError
from expander.groups import Group
from expander.placements import Floats

LOAD_WORDS = ("symmetric", "antisymmetric")

Factors = Floats | NDArray[np.complex128]


@dataclass(frozen=True)
class Behaviour:
    """How one load case behaves.

    Attributes
    ----------
    load : word of each cut plane, "symmetric" or "antisymmetric", by the plane's name.
    nodal_diameters : h, only with a cyclic axis.
    phase : "+" for ``exp(+i h k alpha)``, right-handed about the axis, or "-"; "auto" where it is
        left to the seam, and stands for "+" until that is decided.
    """

    load: Mapping[str, str]
    nodal_diameters: int = 0
    phase: str = "auto"

    def words(self) -> str:
        parts = [f"{name} {word}" for name, word in self.load.items()]
        if self.nodal_diameters:
            plural = "s" * (self.nodal_diameters != 1)
            parts.append(f"{self.nodal_diameters} nodal diameter{plural}")
        return ", ".join(parts) or "the same in every sector"


def factors(group: Group, behaviour: Behaviour) -> Factors:
    """``chi`` of every copy, (copies,): floats of exactly +1 or -1 where all are real.

    Raises
    ------
    InputError
        If the words contradict a relation of the group; it is named.

    Examples
    --------
    >>> from expander.groups import CutPlane, CyclicAxis, make_group
    >>> from expander.placements import unit
    >>> plane = CutPlane("mid", unit([0, 0, 1]), np.zeros(3))
    >>> factors(make_group([plane], None), Behaviour({"mid": "antisymmetric"})).tolist()
    [1.0, -1.0]
    >>> ring = make_group([], CyclicAxis(4, unit([0, 0, 1]), np.zeros(3)))
    >>> factors(ring, Behaviour({}, nodal_diameters=1, phase="-")).tolist()
    [(1+0j), -1j, (-1+0j), 1j]
    """
    sectors = 1 if group.axis is None else group.axis.sectors
    whole = 2 * sectors  # chi is a root of one of this order: count in its steps, without round-off
    steps = [sectors * LOAD_WORDS.index(behaviour.load[p.name]) for p in group.planes]
    if group.axis is not None:
        _check_diameters(sectors, behaviour.nodal_diameters)
        sign = -1 if behaviour.phase == "-" else 1
        steps.append(2 * sign * behaviour.nodal_diameters)
    step = np.array(steps)
    turns = np.zeros(len(group), dtype=np.int64)
    for g in range(1, len(group)):
        turns[g] = (turns[group.parent[g]] + step[group.generator[g]]) % whole
    if ((turns[group.times] - turns[:, None] - step) % whole).any():
        raise _contradiction(group, behaviour)
    if not (turns % sectors).any():
        return np.where(turns == 0, 1.0, -1.0)
    quarter = 4 * turns % whole == 0
    chi = np.asarray(np.exp(2j * np.pi * turns / whole), dtype=np.complex128)
    chi[quarter] = np.round(chi[quarter].real) + 1j * np.round(chi[quarter].imag) + 0.0
    return chi


def _check_diameters(sectors: int, h: int) -> None:
    if not 0 <= h <= sectors // 2:
        raise InputError(
            f"nodal_diameters = {h} is out of range for {sectors} sectors.",
            f"Expected 0 to {sectors // 2}; h and N - h are one pair of waves that run in "
            "opposite directions.",
        )


def is_plain(chi: Factors) -> bool:
    """Whether every copy takes the load as it is."""
    return bool((chi == 1.0).all())


def _contradiction(group: Group, behaviour: Behaviour) -> InputError:
    """Name the relation that the words break."""
    for i, a in enumerate(group.planes):
        for b in group.planes[:i]:
            turn = a.placement @ b.placement
            _, degrees = turn.turning()
            order = round(360.0 / degrees) if degrees > 1e-6 else 1
            if order % 2 and behaviour.load[a.name] != behaviour.load[b.name]:
                return InputError(
                    f"Planes {b.name!r} and {a.name!r} meet at {degrees / 2:.6g} degrees: an odd "
                    f"part ({order}) of 180 degrees, so each is an image of the other and both "
                    f"must be symmetric or both antisymmetric; found {b.name} = "
                    f"{behaviour.load[b.name]!r}, {a.name} = {behaviour.load[a.name]!r}.",
                    f'Give both the same word: load = "{behaviour.load[b.name]}".',
                )
    sectors = group.axis.sectors if group.axis else 0
    h = behaviour.nodal_diameters
    if sectors and h > 0 and 2 * h < sectors:
        through = [
            p.name
            for p in group.planes
            if group.axis is not None and abs(float(p.normal @ group.axis.axis)) < 1e-6
        ]
        if through:
            return NotYetError(
                f"Plane {through[0]!r} goes through the cyclic axis: with 0 < h < N/2 (here "
                f"nodal_diameters = {h}, N = {sectors}) the two parts of a wave mix there, and one "
                "factor for each copy does not say how.",
                "Half-sectors with such waves come with a later version: model a whole sector, or "
                "h = 0" + (f" or {sectors // 2}." if sectors % 2 == 0 else "."),
            )  # fmt: skip
    return InputError(
        "The load words contradict each other: two ways of making the same copy give it different "
        f"signs ({behaviour.words()}"
        + (f"; {sectors} sectors, h = {behaviour.nodal_diameters}" if sectors else "")
        + ").",
        "Planes that are images of each other in the closed group need the same word, and with "
        "an axis the sign of a turn must agree with the planes.",
    )
