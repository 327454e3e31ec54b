"""Closing: do the two sides of a seam agree, before they are merged?"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from expander.errors import CheckFailed
from expander.fields import Field
from expander.groups import Group
from expander.model import Mesh
from expander.resolve import Resolved
from expander.seams import Classes

if TYPE_CHECKING:
    from expander.loadcases import LoadCase


@dataclass(frozen=True)
class Opening:
    """A field that does not close at some nodes, in one case.

    Attributes
    ----------
    entries : entries of the classes of shared nodes whose sides differ by more than the limit.
    nodes : the nodes of these entries.
    worst : largest jump, as part of the field's largest value.
    """

    field: str
    case: str
    entries: tuple[int, ...]
    nodes: tuple[int, ...]
    worst: float


# A case whose values are this small beside those of the other cases is round-off.
_ROUND_OFF = 1e-10


def check_closing(
    mesh: Mesh,
    group: Group,
    fields: list[Field],
    cases: tuple[LoadCase, ...],
    classes: Classes,
    resolved: dict[tuple[str, int], Resolved],
    limit: float,
    keep_apart: bool,
) -> list[Opening]:
    """Fields that must agree at a seam but do not.

    Parameters
    ----------
    limit : largest jump that counts as closed, as part of the field's largest value in the case.

    Raises
    ------
    CheckFailed
        With the worst node and both values, unless `keep_apart`; also then if the opposite load
        word closes the seam, since that is a wrong word and no crack.
    """
    openings = []
    for k, case in enumerate(cases):
        for f in fields:
            if f.on != "points" or f.seam != "agree" or f.quantity.kind.name == "label":
                continue
            found = resolved[f.name, k]
            if not len(found.jumps):
                continue
            # A component bounds the length from below, and costs less than all lengths.
            values = f.values(case.model)
            real = values.real if np.iscomplexobj(values) else values
            bound = float(np.fmax.reduce(real, axis=None, initial=0.0))
            if np.isfinite(bound) and float(found.jumps.max()) <= limit * bound:
                continue
            largest = scale_of(f, case, cases)
            open_ = found.jumps > limit * largest
            if not open_.any():
                continue
            worst = int(np.argmax(found.jumps))
            opposite = _opposite_closes(f, found, open_, limit * largest)
            if not keep_apart or opposite:
                raise _open(mesh, group, f, case, classes, found, worst, largest, limit,
                            int(open_.sum()), opposite,
                            _others_close(fields, f, k, case, resolved, limit))  # fmt: skip
            entries = np.flatnonzero(found.apart > limit * largest)
            openings.append(
                Opening(f.name, case.name, tuple(entries.tolist()),
                        tuple(np.unique(classes.item[entries]).tolist()),
                        float(found.jumps[worst]) / largest)
            )  # fmt: skip
    return openings


def scale_of(field: Field, case: LoadCase, cases: tuple[LoadCase, ...]) -> float:
    """The field's largest value in a case; in all cases, where the one holds nothing but round-off
    beside the others."""
    own = largest_value(field.values(case.model))
    rest = (largest_value(field.values(c.model)) for c in cases if c is not case)
    others = max(rest, default=0.0)
    return others if own <= _ROUND_OFF * others else own


def _others_close(
    fields: list[Field],
    this: Field,
    k: int,
    case: LoadCase,
    resolved: dict[tuple[str, int], Resolved],
    limit: float,
) -> bool:
    """Whether some other field that is not zero at the seam closes with the declared load words."""
    for f in fields:
        if f is this or f.on != "points" or f.seam != "agree" or f.follows != "load":
            continue
        found, largest = resolved[f.name, k], largest_value(f.values(case.model))
        there = float(np.linalg.norm(np.nan_to_num(found.own), axis=1).max(initial=0.0))
        if there > limit * largest and float(found.jumps.max(initial=0.0)) <= limit * largest:
            return True
    return False


# Nodal means at seams commonly differ by 10 to 20 % of the peak; more than this is no mesh effect.
_LARGE = 0.5


def averaged_notes(
    fields: list[Field],
    cases: tuple[LoadCase, ...],
    classes: Classes,
    resolved: dict[tuple[str, int], Resolved],
) -> list[str]:
    """Recovered values whose sides differ so much that averaging may hide a mistake."""
    notes = []
    for k, case in enumerate(cases):
        for f in fields:
            found = resolved.get((f.name, k))
            if f.on != "points" or f.seam != "recovered" or found is None or not len(found.jumps):
                continue
            largest = largest_value(f.values(case.model))
            worst = int(np.argmax(found.jumps))
            if largest > 0.0 and float(found.jumps[worst]) > _LARGE * largest:
                notes.append(
                    f"{f.name!r} in case {case.name!r}: the two sides of the seam differ by up to "
                    f"{100 * found.jumps[worst] / largest:.3g} % of its largest value (node "
                    f"{classes.items[worst]}) and were averaged; check kind, components and load "
                    "word"
                )
    return notes


def _opposite_closes(f: Field, found: Resolved, open_: np.ndarray, allowed: float) -> bool:
    """Whether the seam closes with the opposite sign wherever it is open."""
    if f.follows != "load" or not f.quantity.linear:
        return False
    gap = np.linalg.norm(np.nan_to_num(found.own + found.other_side), axis=1)
    return bool((gap[open_] <= allowed).all())


def largest_value(values: NDArray[np.generic]) -> float:
    """Largest length of a value that is finite, over rows of components (n, c)."""
    squares = np.zeros(len(values))
    with np.errstate(over="ignore", invalid="ignore"):
        for column in values.T:  # column by column: numpy reduces short rows slowly
            parts = (column.real, column.imag) if np.iscomplexobj(column) else (column,)
            for part in parts:
                squares += part.astype(float) ** 2
    return float(np.sqrt(squares[np.isfinite(squares)].max(initial=0.0)))


def _open(
    mesh: Mesh,
    group: Group,
    f: Field,
    case: LoadCase,
    classes: Classes,
    found: Resolved,
    worst: int,
    largest: float,
    limit: float,
    count: int,
    opposite: bool,
    others_close: bool,
) -> CheckFailed:
    node = int(classes.items[worst])
    copy = int(found.through[worst])
    at = ", ".join(f"{c:.6g}" for c in mesh.points[node])
    hint = ""
    if opposite and others_close:
        hint = (
            " Other fields close with the declared load words, and this one would with the "
            "opposite sign: its kind looks wrong (polar against axial vector)."
        )
    elif opposite:
        hint = " With the opposite sign it closes: " + _other_word(group, case, copy)
    return CheckFailed(
        f"Field {f.name!r} does not close along the seam of the copy {group.words(copy)} "
        f"(case {case.name!r}, {case.behaviour.words()}): at node {node} ({at}) the model has "
        f"{_numbers(found.own[worst])}, the copy {_numbers(found.other_side[worst])}: "
        f"{100 * found.jumps[worst] / largest:.3g} % of the field's largest value {largest:.6g}, "
        f"limit {100 * limit:.3g} %; {count} of {len(classes.items)} seam nodes are open.",
        "Check the load word of the plane, the support on the seam, kind and components of the "
        f"field.{hint} If the values were recovered from elements, write seam = \"recovered\"; if "
        "they add up (forces), seam = \"sum\"; a field that is zero but for round-off can be left "
        "out, or seam.limit raised; to keep open nodes apart, seam.open = "
        "\"keep apart\" under [seam].",
    )  # fmt: skip


def _other_word(group: Group, case: LoadCase, copy: int) -> str:
    if case.complex_factors:
        return "seamfold check tells the number of nodal diameters that fits."
    odd = case.chi[copy].real < 0
    if group.axis is not None and not group.placements[copy].mirrored:
        h = 0 if odd else group.axis.sectors // 2
        return f"the load of this case looks like nodal_diameters = {h}."
    word = "symmetric" if odd else "antisymmetric"
    return f'the load of this case looks {word} there, change the load word to "{word}".'


def _numbers(values: np.ndarray) -> str:
    return "(" + ", ".join(f"{v:.6g}" for v in values) + ")"
