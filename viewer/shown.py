"""What gives the colours: a field, and the measure of it that is one number for each place."""

from __future__ import annotations

import difflib
import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from expander.derived import magnitude, principal_values, von_mises
from expander.errors import InputError
from expander.fields import Field
from expander.frames import Cylindrical
from expander.images import component_names
from expander.placements import Floats
from expander.tradewords import normalised

_MOVES = re.compile(r"(.+_)?(displacements?|disp|u|translations?|shape|mode_shape)(_.+)?")
_MAIN_PRINCIPAL = "largest principal"


@dataclass(frozen=True, eq=False)
class Measure:
    """One number for each point or cell, from the stored components of a field.

    Attributes
    ----------
    name : "magnitude", "von Mises", "xy", ..; empty for a field of a single number.
    values : stored components (n, k) to (n,).
    signed : positive and negative values mean opposite things, so zero is the middle.
    """

    name: str
    values: Callable[[Floats], Floats]
    signed: bool = False


@dataclass(frozen=True, eq=False)
class Shown:
    """A field and the measure of it that is shown."""

    field: Field
    measure: Measure

    def words(self, factor: str = "") -> str:
        """The line above the colour scale; `factor` is a power of ten that was taken out."""
        name = ", ".join(part for part in (self.field.name, self.measure.name) if part)
        unit = " ".join(part for part in (factor, self.field.unit) if part)
        return name + (f" [{unit}]" if unit else "")

    @property
    def is_label(self) -> bool:
        """Whether the values only name something, such as a part."""
        return self.field.kind == "label"


def measures(f: Field) -> list[Measure]:
    """All measures of a field, the one that is shown without being asked for first.

    Components carry the names under which they stand in the output file.
    """
    q = f.quantity
    if q.size == 1:
        return [Measure("", lambda v: v[:, 0], f.kind in ("scalar", "pseudoscalar"))]
    components = [
        Measure(name, lambda v, k=k: v[:, k], f.kind != "label")  # type: ignore[misc]
        for k, name in enumerate(component_names(f))
    ]
    if q.kind.rank == 1:
        return [Measure("magnitude", lambda v: magnitude(q, v)[:, 0]), *components]
    if f.kind != "symmetric tensor":
        return components
    principal = [
        Measure(f"{name} principal", lambda v, k=k: principal_values(q, v)[:, k], True)  # type: ignore[misc]
        for k, name in enumerate(("largest", "middle", "smallest"))
    ]
    mises = [Measure("von Mises", lambda v: von_mises(q, v)[:, 0])] if is_stress(f) else []
    return [*mises, *principal, *components]


def is_stress(f: Field) -> bool:
    """Whether von Mises means something for it."""
    return f.kind == "symmetric tensor" and "stress" in normalised(f.name)


def moving_field(fields: Sequence[Field]) -> Field | None:
    """The field that deforms the body: a polar vector on points called a displacement."""
    fitting = [
        f for f in fields
        if f.kind == "polar vector" and f.on == "points" and f.follows == "load"
        and _MOVES.fullmatch(normalised(f.name))
    ]  # fmt: skip
    # In a local frame only if there is no other: it has to be turned to global first.
    fitting.sort(key=lambda f: isinstance(f.frame, Cylindrical))
    return fitting[0] if fitting else None


def choose(
    fields: Sequence[Field],
    name: str | None = None,
    component: str | None = None,
    left_out: Sequence[str] = (),
) -> Shown | None:
    """The field and measure to show; None only if there are no fields at all.

    Without a name: von Mises of the first stress on points, else the displacement's magnitude,
    else the first field.

    Parameters
    ----------
    left_out : names of fields that the result does not hold because they do not add up.

    Raises
    ------
    InputError
        For an unknown field or component, with those that there are.
    """
    names = [f.name for f in fields]
    if name is not None and name not in names:
        known = f"Fields of this result: {', '.join(names) or 'none'}."
        if name in left_out:
            raise InputError(
                f"Field {name!r} is not in this result: such values do not add up.",
                'Ask for a component of its source, for example --field stress --component "von '
                f'mises". {known}',
            )
        raise InputError(f"There is no field {name!r} to show.", _nearest(name, names) + known)
    if not fields:
        return None
    field = _usual(fields) if name is None else fields[names.index(name)]
    offered = measures(field)
    if component is None:
        return Shown(field, offered[0])
    wanted = _plain(component)
    for measure in offered:
        if _plain(measure.name) == wanted:
            return Shown(field, measure)
    if field.quantity.kind.symmetric:  # yx is xy
        for measure in offered:
            if _plain(measure.name) == wanted[::-1]:
                return Shown(field, measure)
    spelled = [m.name for m in offered if m.name]
    if not spelled:
        raise InputError(
            f"Field {field.name!r} is a single number and has no component {component!r}.",
            "Leave out --component.",
        )
    raise InputError(
        f"Field {field.name!r} has no component {component!r}.",
        _nearest(component, spelled) + f"Expected one of: {', '.join(spelled)}.",
    )


def _usual(fields: Sequence[Field]) -> Field:
    stresses = [f for f in fields if is_stress(f) and f.on == "points"]
    moving = moving_field(fields)
    results = [f for f in fields if f.kind != "label"]
    return next(iter([*stresses, *([moving] if moving else []), *results, *fields]))


def _plain(name: str) -> str:
    """As compared: ``von_mises``, ``Von Mises`` and ``von-mises`` are one name.

    >>> _plain("Von-Mises"), _plain("theta")
    ('vonmises', 't')
    """
    plain = re.sub(r"[\W_]+", "", name.lower())
    return "t" if plain == "theta" else plain


def _nearest(word: str, known: Sequence[str]) -> str:
    close = difflib.get_close_matches(word, known, n=1)
    return f"Did you mean {close[0]!r}? " if close else ""


def finite_range(arrays: Sequence[Floats]) -> tuple[float, float] | None:
    """Smallest and largest finite value of all arrays, None if there is none."""
    found = [a[np.isfinite(a)] for a in arrays]
    found = [a for a in found if a.size]
    if not found:
        return None
    return min(float(a.min()) for a in found), max(float(a.max()) for a in found)
