"""Roles: which field is the displacement, the stress, the reactions, the density, by its names.

The checks that look at more than one field (equilibrium, mass, rigid-body motions) need to know
what each is for. Data, like the trade words; what was taken for what is printed.
"""

from __future__ import annotations

import re
from collections.abc import Iterable

from expander.fields import Field
from expander.tradewords import normalised

# role: (pattern of names, kind, on, rule at seams)
ROLES: dict[str, tuple[str, str, str, tuple[str, ...]]] = {
    "displacement": (r"(total_)?(displacements?|disp|translations?)(_.+)?|u",
                     "polar vector", "points", ("agree",)),
    "rotation": (r"rotations?(_.+)?", "axial vector", "points", ("agree",)),
    "stress": (r"(.+_)?(stress|stresses)(_.+)?", "symmetric tensor", "", ()),
    "applied force": (r"(applied|external)_.*", "polar vector", "points", ("sum",)),
    "applied moment": (r"(applied|external)_.*", "axial vector", "points", ("sum",)),
    "reaction": (r"reactions?(_.+)?|rf", "polar vector", "points", ("sum",)),
    "reaction moment": (r"reactions?(_.+)?|rm", "axial vector", "points", ("sum",)),
    "other force": (r"(residual|contact|unbalanced|out_of_balance)_.*", "polar vector", "points",
                    ("sum",)),
    "nodal force": (r".*", "polar vector", "points", ("sum",)),
    "nodal moment": (r"(nodal_)?moments?", "axial vector", "points", ("sum",)),
    "density": (r"(mass_)?density", "scalar", "cells", ()),
    "thickness": (r"(.+_)?thickness", "scalar", "cells", ()),
    "lumped mass": (r"(lumped_|nodal_)?mass", "scalar", "points", ("sum",)),
    "part": (r"(part|material|property|section)(_?(id|number|index))?", "label", "cells", ()),
    "set": (r".*", "label", "points", ()),
}  # fmt: skip


def plays(field: Field, role: str) -> bool:
    """Whether a field has a role.

    A field has the first of these that fits: a field called ``reaction_force`` is a reaction and
    no other nodal force.
    """
    for name, (pattern, kind, on, seams) in ROLES.items():
        fits = (
            field.kind == kind
            and on in ("", field.on)
            and (not seams or field.seam in seams)
            and any(re.fullmatch(pattern, normalised(n)) for n in field.names)
        )
        if fits:
            return name == role
    return False


def having(fields: Iterable[Field], role: str) -> list[Field]:
    """The fields with a role, in their order."""
    return [f for f in fields if plays(f, role)]
