"""Trade words: what an array is when only its name tells. Data, in the order of decision.

A name is compared in lower case, with words joined by underscores. What was decided this way is
printed and recorded. 'Moment' alone decides nothing: a shell's (Mx, My, Mxy) is no axial vector.
"""

from __future__ import annotations

import re
from dataclasses import dataclass


@dataclass(frozen=True)
class TradeWord:
    """A pattern of names and what it means.

    Attributes
    ----------
    sizes : numbers of components for which the name decides.
    seam, follows : as in the case file.
    on : "points" where the word means something else on cells, such as a section's resultant.
    """

    pattern: str
    kind: str
    sizes: tuple[int, ...] = (1,)
    seam: str = "agree"
    follows: str = "load"
    on: str = ""


_FORCE = "nodal|internal|external|applied|reaction|contact|residual"

TRADE_WORDS = (
    # Before their parts: the names below contain the words further down.
    TradeWord(r"(.+_)?magnitude(_.+)?|mag_.+|.+_mag", "invariant", seam="recovered"),
    TradeWord(r"(signed_.+|.+_signed)", "scalar", seam="recovered"),
    TradeWord(
        r"(.+_)?(von_?mises|mises|tresca|equivalent_(stress|strain|plastic_strain)"
        r"|octahedral_shear)(_.+)?",
        "invariant", seam="recovered",
    ),
    TradeWord(r"(.+_)?energy(_density)?", "invariant", seam="recovered"),
    TradeWord(
        r"(.+_)?principal_(stress|stresses|strain|strains|values?)|principals?"
        r"|(stress|strain)_principals?",
        "principal values", (3,), seam="recovered",
    ),
    TradeWord(
        r"(?!.*(direction|axis|axes|vector|normal|angle))(.+_)?principal(_.+)?",
        "invariant", (1,), seam="recovered",
    ),
    # Primary fields
    TradeWord(r"(total_)?displacements?|disp|u|translations?", "polar vector", (2, 3)),
    TradeWord(r"rotations?|angular_(displacement|velocity|acceleration)s?", "axial vector", (1, 3)),
    TradeWord(r"velocity|velocities|accelerations?", "polar vector", (2, 3)),
    TradeWord(r"temperatures?|electric_potential|voltage|pressure|pore_pressure", "scalar"),
    # Extensive nodal quantities
    TradeWord(
        rf"(({_FORCE})_)?(forces?)|({_FORCE})_(forces?|loads?)|reactions?",
        "polar vector", (2, 3), seam="sum", on="points",
    ),
    TradeWord(
        r"(nodal|applied|reaction|contact|residual)_moments?(_of_force)?|moments?_of_force",
        "axial vector", (1, 3), seam="sum", on="points",
    ),
    TradeWord(r"(.+_)?heat_flow", "scalar", seam="sum"),
    TradeWord(r"(lumped_|nodal_)?mass", "scalar", seam="sum", follows="body"),
    # Recovered from elements
    TradeWord(
        r"(?!couple_)(.+_)?(stress|stresses|strain|strains)", "symmetric tensor", (3, 4, 6, 9),
        seam="recovered",
    ),
    TradeWord(r"(.+_)?(heat_flux|temperature_gradient)", "polar vector", (2, 3), seam="recovered"),
    TradeWord(r"curl|vorticity|magnetic_flux_density", "axial vector", (1, 3), seam="recovered"),
    TradeWord(r"displacement_gradient", "tensor", (4, 9), seam="recovered"),
    # Carried with the body
    TradeWord(r"(.+_)?thickness|density", "scalar", follows="body"),
    TradeWord(r"(.+_)?normals?", "polar vector", (2, 3), follows="body"),
    TradeWord(
        r"(part|material|property|section|region|set|component|block|layer)(_?(id|number|index))?",
        "label", follows="body",
    ),
)  # fmt: skip

# Odd in the response though not linear: no rule copies one of them under an antisymmetric load.
STRESS_ODD = re.compile(
    r"(.+_)?(principal|signed|interaction|failure_index|reserve_factor"
    r"|tsai_wu|hoffman|triaxiality)(_.+)?"
)
# Not linear in the response, whatever its kind: F is one plus a gradient.
NOT_LINEAR = re.compile(r"(.+_)?(deformation_gradient|stretch)(_.+)?")


_ROTATION = re.compile(r"(u|d|dof)?_?(rot(_?[xyz123])?|(r|th|theta|phi)_?[xyz123])")
_CYLINDRICAL = re.compile(r"(r|t|th|theta|z){1,2}")
_COMPONENT = re.compile(
    r"(u|v|a|d|f|rf|rm|r|ur|rot|s|e|le|ee|pe|n|m|q|b|sig|sigma|eps|epsilon|gamma|tau|stress|strain"
    r"|disp|displacement|velocity|acceleration|force|reaction|moment|rotation|heat_flux)_?"
    r"([xyz]{1,2}|[123]{1,2})"
)
_INDEX = {"1": "x", "2": "y", "3": "z", "x": "x", "y": "y", "z": "z"}


def names_a_rotation(component: str) -> bool:
    """Whether a component's name is that of a rotation.

    >>> [names_a_rotation(name) for name in ("UX", "ROTZ", "rz", "Z")]
    [False, True, True, False]
    """
    return bool(_ROTATION.fullmatch(component.lower()))


def names_cylindrical(components: tuple[str, ...]) -> bool:
    """Whether components are named after the directions of a cylindrical frame.

    >>> names_cylindrical(("rr", "tt", "zz", "rt", "tz", "zr")), names_cylindrical(("x", "y", "z"))
    (True, False)
    """
    plain = [c.lower().replace("_", "") for c in components]
    fits = all(_CYLINDRICAL.fullmatch(c) for c in plain)
    return bool(plain) and fits and any(set(c) - {"z"} for c in plain)


def component_of(name: str) -> str | None:
    """What an array of a single number seems to be one component of; None if nothing.

    >>> component_of("UX"), component_of("S12"), component_of("temperature")
    ('u', 's', None)
    """
    found = _COMPONENT.fullmatch(normalised(name))
    return found[1] if found else None


def component_order(names: tuple[str, ...], rank: int, cylindrical: bool = False) -> str | None:
    """Stored order of a vector or tensor from the names of its components in a file.

    >>> component_order(("S11", "S22", "S33", "S12", "S23", "S13"), 2)
    'xx yy zz xy yz xz'
    >>> component_order(("SX", "SY", "SZ", "SXY", "SXZ", "SYZ"), 2)
    'xx yy zz xy xz yz'
    >>> component_order(("rr", "tt", "zz", "rz"), 2, cylindrical=True)
    'xx yy zz xz'
    """
    letters = "rtz" if cylindrical else "xyz"
    to_xyz = {**dict(zip(letters, "xyz", strict=True)), **dict(zip("123", "xyz", strict=True))}
    found = []
    for name in names:
        plain = name.lower().replace("theta", "t").replace("_", "").replace(" ", "")
        end = re.search(rf"([{letters}123]+)$", plain)
        index = end[1][-rank:] if end else ""
        if rank == 2 and len(index) == 1:
            index *= 2  # a normal component, named once
        found.append("".join(to_xyz[letter] for letter in index))
    whole = all(len(f) == rank for f in found) and len({*found}) == len(found)
    return " ".join(found) if rank and whole else None


def normalised(name: str) -> str:
    """The name as it is compared.

    >>> normalised("NodalForce [N]")
    'nodal_force'
    """
    name = re.sub(r"[\[(].*?[\])]", "", name)
    name = re.sub(r"(?<=[a-z])(?=[A-Z])", "_", name)
    return re.sub(r"[^a-z0-9]+", "_", name.lower()).strip("_")


def trade_word(name: str, size: int, on: str = "points") -> TradeWord | None:
    """The first trade word that fits a name, a number of components and a place.

    >>> trade_word("Reaction Force", 3).seam
    'sum'
    >>> trade_word("moment", 3) is None
    True
    """
    plain = normalised(name)
    for word in TRADE_WORDS:
        if size in word.sizes and re.fullmatch(word.pattern, plain) and word.on in ("", on):
            return word
    return None


_LABELS = re.compile(
    r"(.+_)?(ids?|numbers?|index|label|tag|part|material|property|section|region|set|component"
    r"|block|layer|physical|geometrical|ref)"
)


def label_word(name: str) -> bool:
    """Whether an integer array is by its name a number of something.

    >>> label_word("node_id"), label_word("gmsh:physical"), label_word("temperature")
    (True, True, False)
    """
    return bool(_LABELS.fullmatch(normalised(name)))


def not_linear(name: str) -> bool:
    """Whether the name is that of a measure that is neither odd nor even in the response."""
    return bool(NOT_LINEAR.fullmatch(normalised(name)))


def stress_odd(name: str) -> bool:
    """Whether the name is that of a lone measure that is odd in the stress but not linear."""
    return bool(STRESS_ODD.fullmatch(normalised(name)))
