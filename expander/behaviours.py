"""Load behaviours: the factor chi that the linear response takes from copy to copy.

``chi`` is a character of the group: ``chi(g1 g2) = chi(g1) chi(g2)``. It is +1 or -1 for a
symmetric or antisymmetric cut plane and ``exp(i h k alpha)`` on sector ``k`` for ``h`` nodal
diameters; here ``h = 0`` and ``h = N/2``, where it is real.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from expander.errors import InputError, NotYetError
from expander.groups import Group
from expander.placements import Floats

LOAD_SIGNS = {"symmetric": 1.0, "antisymmetric": -1.0}


@dataclass(frozen=True)
class Behaviour:
    """How one load case behaves.

    Attributes
    ----------
    load : word of each cut plane, "symmetric" or "antisymmetric", by the plane's name.
    nodal_diameters : h, only with a cyclic axis.
    """

    load: Mapping[str, str]
    nodal_diameters: int = 0

    def words(self) -> str:
        parts = [f"{name} {word}" for name, word in self.load.items()]
        if self.nodal_diameters:
            parts.append(f"{self.nodal_diameters} nodal diameters")
        return ", ".join(parts) or "the same in every sector"


def factors(group: Group, behaviour: Behaviour) -> Floats:
    """``chi`` of every copy, (copies,), each exactly +1 or -1.

    Raises
    ------
    InputError
        If the words contradict a relation of the group; it is named.
    NotYetError
        For ``0 < h < N/2``, where chi is complex.

    Examples
    --------
    >>> from expander.groups import CutPlane, make_group
    >>> from expander.placements import unit
    >>> plane = CutPlane("mid", unit([0, 0, 1]), np.zeros(3))
    >>> factors(make_group([plane], None), Behaviour({"mid": "antisymmetric"})).tolist()
    [1.0, -1.0]
    """
    signs = [LOAD_SIGNS[behaviour.load[p.name]] for p in group.planes]
    if group.axis is not None:
        signs.append(_turn_factor(group.axis.sectors, behaviour.nodal_diameters))
    per_generator = np.array(signs)
    chi = np.ones(len(group))
    for g in range(1, len(group)):
        chi[g] = chi[group.parent[g]] * per_generator[group.generator[g]]
    if not np.array_equal(chi[group.times], chi[:, None] * per_generator):
        raise _contradiction(group, behaviour)
    return chi


def _turn_factor(sectors: int, h: int) -> float:
    if not 0 <= h <= sectors // 2:
        raise InputError(
            f"nodal_diameters = {h} is out of range for {sectors} sectors.",
            f"Expected 0 to {sectors // 2}; h and N - h are one pair of waves that run in "
            "opposite directions.",
        )
    if h == 0:
        return 1.0
    if 2 * h == sectors:
        return -1.0
    half = f" and {sectors // 2}" if sectors % 2 == 0 else ""
    raise NotYetError(
        f"nodal_diameters = {h} with {sectors} sectors needs complex results (a phase of "
        f"{360.0 * h / sectors:.6g} degrees from sector to sector), which this version does not "
        "expand yet.",
        f"This version expands nodal_diameters = 0{half} for {sectors} sectors.",
    )


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
    return InputError(
        "The load words contradict each other: two ways of making the same copy give it different "
        f"signs ({behaviour.words()}"
        + (f"; {sectors} sectors, h = {behaviour.nodal_diameters}" if sectors else "")
        + ").",
        "Planes that are images of each other in the closed group need the same word, and with "
        "an axis the sign of a turn must agree with the planes.",
    )
